package change

import (
	"encoding/binary"
	"unicode/utf8"
)

// Journals are read by the million frames. quickBatch reads the one allowed encoding of a batch
// without fields of newer versions, directly, and refuses everything else, so that there is
// nothing to encode again for comparison. What it refuses goes the way of DecodeBatch that
// can say why. A fuzz test holds the two together.

// quick reads deterministic CBOR; after the first deviation bad is set and all it returns is zero.
type quick struct {
	b   []byte
	bad bool
	o   *Opener
}

// head reads the head of an item of a major type, in its shortest form only.
func (q *quick) head(major byte) uint64 {
	if q.bad || len(q.b) == 0 || q.b[0]&0xe0 != major {
		q.bad = true
		return 0
	}
	info := q.b[0] & 0x1f
	var n, least uint64
	size := 0
	switch info {
	case 24:
		size, least = 1, 24
	case 25:
		size, least = 2, 1<<8
	case 26:
		size, least = 4, 1<<16
	case 27:
		size, least = 8, 1<<32
	default:
		if info > 27 {
			q.bad = true
			return 0
		}
		q.b = q.b[1:]
		return uint64(info)
	}
	if len(q.b) < 1+size {
		q.bad = true
		return 0
	}
	switch p := q.b[1:]; size {
	case 1:
		n = uint64(p[0])
	case 2:
		n = uint64(binary.BigEndian.Uint16(p))
	case 4:
		n = uint64(binary.BigEndian.Uint32(p))
	case 8:
		n = binary.BigEndian.Uint64(p)
	}
	if n < least {
		q.bad = true
		return 0
	}
	q.b = q.b[1+size:]
	return n
}

func (q *quick) string(major byte) []byte {
	n := q.head(major)
	if q.bad || n > uint64(len(q.b)) {
		q.bad = true
		return nil
	}
	x := q.b[:n:n]
	q.b = q.b[n:]
	return x
}

// text reads a text that must not be empty.
func (q *quick) text() string {
	x := q.string(0x60)
	if len(x) == 0 || !utf8.Valid(x) {
		q.bad = true
		return ""
	}
	return q.o.name(x)
}

func (q *quick) id() (id ID) {
	if x := q.string(0x40); len(x) == len(id) {
		return ID(x)
	}
	q.bad = true
	return id
}

func (q *quick) ids() []ID {
	n := q.head(0x80)
	if q.bad || n == 0 || n > uint64(len(q.b)/17) {
		q.bad = true
		return nil
	}
	out := make([]ID, n)
	for i := range out {
		out[i] = q.id()
	}
	return out
}

// positive reads a number from 1 to most.
func (q *quick) positive(most uint64) uint64 {
	n := q.head(0)
	if n == 0 || n > most {
		q.bad = true
	}
	return n
}

// quickBatch is DecodeBatch for the usual case; false means that it has to be asked. The values
// are slices of data, which must not be changed afterwards.
func quickBatch(data []byte, s Stream, first uint64, o *Opener) (Batch, bool) {
	q := &quick{b: data, o: o}
	b := Batch{Stream: s, First: first}
	pairs := q.head(0xa0)
	if pairs == 2 && q.head(0) == 1 {
		b.Examiner = q.text()
		pairs--
	}
	if q.bad || pairs != 1 || q.head(0) != 2 {
		return Batch{}, false
	}
	n := q.head(0x80)
	if q.bad || n == 0 || n > MaxChanges || n > uint64(len(q.b)) {
		return Batch{}, false
	}
	b.Changes = o.changes(int(n))
	for i := range b.Changes {
		c := &b.Changes[i]
		q.change(c)
		c.Stream, c.Seq, c.Examiner = s, first+uint64(i), b.Examiner
	}
	if q.bad || len(q.b) > 0 || b.Validate() != nil {
		return Batch{}, false
	}
	return b, true
}

func (q *quick) change(c *Change) {
	const always = 1<<1 | 1<<2 | 1<<3 | 1<<6 // the fields that every change has
	pairs := q.head(0xa0)
	had, last := 0, uint64(0)
	for ; pairs > 0 && !q.bad; pairs-- {
		key := q.head(0)
		if key <= last || key > lastChangeKey {
			q.bad = true
			return
		}
		last = key
		had |= 1 << key
		switch key {
		case 1:
			c.ID = q.id()
		case 2:
			c.Time = HLC(q.head(0))
		case 3:
			n := q.head(0)
			c.Kind = Kind(n)
			q.bad = q.bad || n > 0xffff
		case 4:
			c.Patient = [16]byte(q.id())
			q.bad = q.bad || c.Patient.IsZero()
		case 5:
			c.Record = [16]byte(q.id())
			q.bad = q.bad || c.Record.IsZero()
		case 6:
			c.Field = q.text()
		case 7:
			c.Value = q.string(0x40)
			q.bad = q.bad || len(c.Value) == 0
		case 8:
			c.Supersedes = q.ids()
		case 9:
			c.Act = Act(q.positive(0xff))
		case 10:
			c.Reason = q.text()
		case 11:
			c.Seen = q.ids()
		case 12:
			c.Before = q.positive(^uint64(0))
		}
	}
	if had&always != always {
		q.bad = true
	}
}
