package storage

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"slices"
	"sort"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/merge"
)

// record is one record with every version that each of its fields ever had. Records are not
// changed once made: with returns a new one that shares what stays.
type record struct {
	kind    Kind
	patient exam.ID
	id      exam.ID
	fields  []field // by name
}

type field struct {
	name     string
	versions []change.Change // in the order of merge.Apply
}

// recordKey names a record.
type recordKey struct {
	kind    Kind
	patient exam.ID
	id      exam.ID
}

func (r *record) key() recordKey { return recordKey{r.kind, r.patient, r.id} }

func (r *record) find(name string) (int, bool) {
	i := sort.Search(len(r.fields), func(i int) bool { return r.fields[i].name >= name })
	return i, i < len(r.fields) && r.fields[i].name == name
}

func (r *record) versions(name string) []change.Change {
	if i, ok := r.find(name); ok {
		return r.fields[i].versions
	}
	return nil
}

// with returns the record with a change merged in, the same record if it was there already.
func (r *record) with(c change.Change) *record {
	i, ok := r.find(c.Field)
	var have []change.Change
	if ok {
		have = r.fields[i].versions
	}
	after := merge.Apply(have, c)
	if len(after) == len(have) {
		return r
	}
	out := &record{kind: r.kind, patient: r.patient, id: r.id, fields: make([]field, 0, len(r.fields)+1)}
	out.fields = append(out.fields, r.fields[:i]...)
	out.fields = append(out.fields, field{c.Field, after})
	if ok {
		i++
	}
	out.fields = append(out.fields, r.fields[i:]...)
	return out
}

func (r *record) closing() merge.Closing {
	if r.kind != KindVisit {
		return merge.Closing{}
	}
	return merge.ClosingOf(r.versions(fieldClosed))
}

// closingFor returns the closing that rules a field.
func (r *record) closingFor(name string) merge.Closing {
	if name == fieldClosed {
		return merge.Closing{}
	}
	return r.closing()
}

// heads returns the ids that a closing made now must name as seen.
func (r *record) heads() []change.ID {
	var hs []merge.Version
	for _, f := range r.fields {
		if f.name != fieldClosed {
			hs = append(hs, merge.Heads(f.versions)...)
		}
	}
	return merge.IDs(hs)
}

// A record's encoding in the index: tables of the streams and examiners, then the fields. It
// is this device's own and has the version of the index; it is never sent anywhere.

type tables struct {
	streams   []change.Stream
	examiners []string
}

func indexOf[T comparable](list *[]T, x T) uint64 {
	for i, y := range *list {
		if y == x {
			return uint64(i)
		}
	}
	*list = append(*list, x)
	return uint64(len(*list) - 1)
}

func appendBytes[T ~string | ~[]byte](b []byte, x T) []byte {
	return append(binary.AppendUvarint(b, uint64(len(x))), x...)
}

// bits of a stored version: what follows.
const (
	hasSupersedes = 1 << iota
	hasAct
	hasReason
	hasSeen
	hasBefore
	hasExtra
)

func (r *record) encode() []byte {
	var t tables
	body := make([]byte, 0, 128*len(r.fields)+64)
	var base change.HLC
	for _, f := range r.fields {
		for _, v := range f.versions {
			if base == 0 || v.Time < base {
				base = v.Time
			}
		}
	}
	body = binary.AppendUvarint(body, uint64(len(r.fields)))
	for _, f := range r.fields {
		body = appendBytes(body, f.name)
		body = binary.AppendUvarint(body, uint64(len(f.versions)))
		for _, v := range f.versions {
			body = appendVersion(body, v, base, &t)
		}
	}
	out := make([]byte, 0, len(body)+96)
	out = binary.AppendUvarint(out, uint64(r.kind))
	out = append(out, r.patient[:]...)
	out = append(out, r.id[:]...)
	out = binary.AppendUvarint(out, uint64(len(t.streams)))
	for _, s := range t.streams {
		out = append(out, s.Device[:]...)
		out = append(out, s.Site[:]...)
	}
	out = binary.AppendUvarint(out, uint64(len(t.examiners)))
	for _, e := range t.examiners {
		out = appendBytes(out, e)
	}
	out = binary.AppendUvarint(out, uint64(base))
	return append(out, body...)
}

func appendVersion(b []byte, v change.Change, base change.HLC, t *tables) []byte {
	var flags byte
	set := func(on bool, bit byte) {
		if on {
			flags |= bit
		}
	}
	set(len(v.Supersedes) > 0, hasSupersedes)
	set(v.Act != 0, hasAct)
	set(v.Reason != "", hasReason)
	set(len(v.Seen) > 0, hasSeen)
	set(v.Before != 0, hasBefore)
	set(len(v.Extra) > 0, hasExtra)
	b = append(b, flags)
	b = append(b, v.ID[:]...)
	b = binary.AppendUvarint(b, uint64(v.Time-base))
	b = binary.AppendUvarint(b, indexOf(&t.streams, v.Stream))
	b = binary.AppendUvarint(b, v.Seq)
	b = binary.AppendUvarint(b, indexOf(&t.examiners, v.Examiner))
	b = appendBytes(b, v.Value)
	ids := func(list []change.ID) {
		b = binary.AppendUvarint(b, uint64(len(list)))
		for _, id := range list {
			b = append(b, id[:]...)
		}
	}
	if flags&hasSupersedes != 0 {
		ids(v.Supersedes)
	}
	if flags&hasAct != 0 {
		b = append(b, byte(v.Act))
	}
	if flags&hasReason != 0 {
		b = appendBytes(b, v.Reason)
	}
	if flags&hasSeen != 0 {
		ids(v.Seen)
	}
	if flags&hasBefore != 0 {
		b = binary.AppendUvarint(b, v.Before)
	}
	if flags&hasExtra != 0 {
		b = appendBytes(b, v.Extra)
	}
	return b
}

var errRecord = errors.New("a record of the index does not follow its form")

// reader reads the encoding; after the first error everything it returns is zero.
type reader struct {
	b   []byte
	bad bool
}

func (r *reader) uvarint() uint64 {
	if len(r.b) > 0 && r.b[0] < 0x80 {
		n := uint64(r.b[0])
		r.b = r.b[1:]
		return n
	}
	n, k := binary.Uvarint(r.b)
	if k <= 0 {
		r.bad, r.b = true, nil
		return 0
	}
	r.b = r.b[k:]
	return n
}

func (r *reader) take(n uint64) []byte {
	if n > uint64(len(r.b)) {
		r.bad, r.b = true, nil
		return nil
	}
	x := r.b[:n:n]
	r.b = r.b[n:]
	return x
}

func (r *reader) bytes() []byte { return r.take(r.uvarint()) }

func (r *reader) id() (id [16]byte) {
	if x := r.take(16); x != nil {
		id = [16]byte(x)
	}
	return id
}

// count reads the number of things that follow, each of at least size bytes.
func (r *reader) count(size int) int {
	n := r.uvarint()
	if n > uint64(len(r.b)/size) {
		r.bad, r.b = true, nil
		return 0
	}
	return int(n)
}

func (r *reader) ids() []change.ID {
	n := r.count(16)
	if n == 0 {
		return nil
	}
	out := make([]change.ID, n)
	for i := range out {
		out[i] = r.id()
	}
	return out
}

// head is what stands before a record's fields.
type head struct {
	kind    Kind
	patient exam.ID
	id      exam.ID
	tables  tables
	base    change.HLC
}

func (r *reader) head() (h head) {
	h.kind = Kind(r.uvarint())
	h.patient, h.id = r.id(), r.id()
	h.tables.streams = make([]change.Stream, r.count(32))
	for i := range h.tables.streams {
		h.tables.streams[i] = change.Stream{Device: r.id(), Site: r.id()}
	}
	h.tables.examiners = make([]string, r.count(1))
	for i := range h.tables.examiners {
		h.tables.examiners[i] = string(r.bytes())
	}
	h.base = change.HLC(r.uvarint())
	return h
}

// decodeRecord reads what encode wrote. The record keeps no memory of b.
func decodeRecord(b []byte) (*record, error) {
	r := &reader{b: bytes.Clone(b)} // the values of the versions are slices of this copy
	h := r.head()
	rec := &record{kind: h.kind, patient: h.patient, id: h.id, fields: make([]field, r.count(2))}
	one := make([]change.Change, len(rec.fields)) // most fields have one version
	for i := range rec.fields {
		f := &rec.fields[i]
		f.name = string(r.bytes())
		n := r.count(20)
		if n == 1 {
			f.versions = one[i : i+1 : i+1]
		} else {
			f.versions = make([]change.Change, n)
		}
		for k := range f.versions {
			r.version(&f.versions[k], &h)
			f.versions[k].Field = f.name
		}
	}
	if r.bad || len(r.b) > 0 {
		return nil, errRecord
	}
	if !slices.IsSortedFunc(rec.fields, func(a, b field) int { return bytes.Compare([]byte(a.name), []byte(b.name)) }) {
		return nil, errRecord
	}
	return rec, nil
}

func (r *reader) version(v *change.Change, h *head) {
	var flags byte
	if x := r.take(1); x != nil {
		flags = x[0]
	}
	v.Kind, v.Patient, v.Record = h.kind, h.patient, h.id
	v.ID = r.id()
	v.Time = h.base + change.HLC(r.uvarint())
	if i := r.uvarint(); i < uint64(len(h.tables.streams)) {
		v.Stream = h.tables.streams[i]
	} else {
		r.bad = true
	}
	v.Seq = r.uvarint()
	if i := r.uvarint(); i < uint64(len(h.tables.examiners)) {
		v.Examiner = h.tables.examiners[i]
	} else {
		r.bad = true
	}
	if x := r.bytes(); len(x) > 0 {
		v.Value = x
	}
	if flags&hasSupersedes != 0 {
		v.Supersedes = r.ids()
	}
	if flags&hasAct != 0 {
		if x := r.take(1); x != nil {
			v.Act = change.Act(x[0])
		}
	}
	if flags&hasReason != 0 {
		v.Reason = string(r.bytes())
	}
	if flags&hasSeen != 0 {
		v.Seen = r.ids()
	}
	if flags&hasBefore != 0 {
		v.Before = r.uvarint()
	}
	if flags&hasExtra != 0 {
		v.Extra = r.bytes()
	}
}

// newRecord returns an empty record.
func newRecord(k recordKey) *record {
	return &record{kind: k.kind, patient: k.patient, id: k.id}
}

// keyOf returns the record that a change belongs to.
func keyOf(c change.Change) recordKey { return recordKey{c.Kind, c.Patient, c.Record} }

func (k recordKey) String() string { return fmt.Sprintf("record %s of kind %d", k.id, k.kind) }

func edgeEdits(a, b exam.ID, value []byte) []Edit {
	if a == b {
		return nil
	}
	patient, k := merge.EdgeKey(a, b)
	return []Edit{{Patient: patient, Record: k.Record, Kind: KindEdge, Field: k.Field, Value: value}}
}
