package picture

import (
	"encoding/binary"
	"errors"
	"io"
	"slices"
)

// patched reads a file with some places written over.
type patched struct {
	r    io.Reader
	at   int64
	over []patch
}

// patch is bytes at a place, or, where there are none, zeros.
type patch struct {
	at, end int64
	bytes   []byte
}

func (p *patched) write(at int64, b []byte) {
	p.over = append(p.over, patch{at, at + int64(len(b)), b})
}
func (p *patched) zero(at, end int64) { p.over = append(p.over, patch{at, end, nil}) }
func (p *patched) settle() {
	slices.SortStableFunc(p.over, func(a, b patch) int { return int(min(1, max(-1, a.at-b.at))) })
}

func (p *patched) Read(b []byte) (int, error) {
	n, err := p.r.Read(b)
	from, to := p.at, p.at+int64(n)
	for _, x := range p.over {
		if x.at >= to {
			break
		}
		for i := max(x.at, from); i < min(x.end, to); i++ {
			b[i-from] = 0
			if x.bytes != nil {
				b[i-from] = x.bytes[i-x.at]
			}
		}
	}
	p.at = to
	return n, err
}

// mostBoxes bounds the boxes that are looked at in one file.
const mostBoxes = 100_000

type boxes struct {
	r    io.ReaderAt
	p    *patched
	left int
}

// wipeBoxes empties what describes an MP4 or MOV file without moving anything in it: boxes of user data
// and metadata become free space, and so do tracks of metadata with their samples, in which cameras
// write where they were (ISO/IEC 14496-12; QuickTime File Format).
func wipeBoxes(r io.ReaderAt, size int64, p *patched) error {
	b := &boxes{r, p, mostBoxes}
	return b.walk(0, size, "")
}

// each calls f with every box between two places.
func (b *boxes) each(from, to int64, f func(kind string, at, body, end int64) error) error {
	var h [16]byte
	for at := from; at < to; {
		if b.left--; b.left < 0 || to-at < 8 {
			return ErrBroken
		}
		if _, err := b.r.ReadAt(h[:8], at); err != nil {
			return ErrBroken
		}
		n, body := int64(binary.BigEndian.Uint32(h[:])), at+8
		switch n {
		case 0:
			n = to - at
		case 1:
			if _, err := b.r.ReadAt(h[8:], at+8); err != nil {
				return ErrBroken
			}
			n, body = int64(binary.BigEndian.Uint64(h[8:])), at+16
		}
		if n < body-at || n > to-at {
			return ErrBroken
		}
		if err := f(string(h[4:8]), at, body, at+n); err != nil {
			return err
		}
		at += n
	}
	return nil
}

func (b *boxes) free(at, body, end int64) {
	b.p.write(at+4, []byte("free"))
	b.p.zero(body, end)
}

func (b *boxes) walk(from, to int64, in string) error {
	return b.each(from, to, func(kind string, at, body, end int64) error {
		switch kind {
		case "udta", "uuid":
			b.free(at, body, end)
		case "meta":
			if in != "mdia" && in != "minf" {
				b.free(at, body, end)
			}
		case "moov", "moof", "traf", "mdia", "minf", "edts":
			return b.walk(body, end, kind)
		case "trak":
			meta, err := b.handler(body, end)
			if err != nil {
				return err
			}
			if meta {
				if err := b.samples(body, end); err != nil {
					return err
				}
				b.free(at, body, end)
				return nil
			}
			return b.walk(body, end, kind)
		}
		return nil
	})
}

// find returns the first box along a path.
func (b *boxes) find(from, to int64, path ...string) (body, end int64, ok bool, err error) {
	body, end = from, to
	for _, want := range path {
		found := false
		var nb, ne int64
		if err = b.each(body, end, func(kind string, _, bo, en int64) error {
			if !found && kind == want {
				nb, ne, found = bo, en, true
			}
			return nil
		}); err != nil || !found {
			return 0, 0, false, err
		}
		body, end = nb, ne
	}
	return body, end, true, nil
}

// handler reports whether a track is one of metadata.
func (b *boxes) handler(from, to int64) (bool, error) {
	body, end, ok, err := b.find(from, to, "mdia", "hdlr")
	if err != nil || !ok {
		return false, err
	}
	var k [12]byte
	if end-body < 12 {
		return false, ErrBroken
	}
	if _, err := b.r.ReadAt(k[:], body); err != nil {
		return false, ErrBroken
	}
	return string(k[8:]) == "meta", nil
}

// table reads a table of 32-bit numbers behind version, flags and a head of numbers.
func (b *boxes) table(from, to int64) ([]uint32, error) {
	n := to - from - 4
	if n < 0 || n > 64<<20 {
		return nil, ErrBroken
	}
	raw := make([]byte, n)
	if _, err := b.r.ReadAt(raw, from+4); err != nil {
		return nil, ErrBroken
	}
	out := make([]uint32, n/4)
	for i := range out {
		out[i] = binary.BigEndian.Uint32(raw[4*i:])
	}
	return out, nil
}

// samples writes zeros over the samples of a track: stsz gives their sizes, stsc how many stand in each
// chunk, stco or co64 where the chunks are.
func (b *boxes) samples(from, to int64) error {
	read := func(kind string) ([]uint32, error) {
		body, end, ok, err := b.find(from, to, "mdia", "minf", "stbl", kind)
		if err != nil || !ok {
			return nil, err
		}
		return b.table(body, end)
	}
	sizes, err1 := read("stsz")
	runs, err2 := read("stsc")
	near, err3 := read("stco")
	far, err4 := read("co64")
	if err := errors.Join(err1, err2, err3, err4); err != nil {
		return ErrBroken
	}
	var chunks []int64
	if len(near) > 0 {
		for _, o := range near[1:] {
			chunks = append(chunks, int64(o))
		}
	} else if len(far) > 0 {
		for i := 1; i+1 < len(far); i += 2 {
			chunks = append(chunks, int64(uint64(far[i])<<32|uint64(far[i+1])))
		}
	}
	if len(chunks) == 0 || len(sizes) < 2 || len(runs) < 4 {
		return nil // a track without samples of its own, as in a file of fragments
	}
	sample := 0
	size := func() int64 {
		defer func() { sample++ }()
		if sizes[0] > 0 {
			return int64(sizes[0])
		}
		if 2+sample < len(sizes) {
			return int64(sizes[2+sample])
		}
		return 0
	}
	run := 1
	for c, at := range chunks {
		for run+3 < len(runs) && int(runs[run+3]) <= c+1 {
			run += 3
		}
		n := int64(0)
		for range min(runs[run+1], 1<<20) {
			n += size()
		}
		b.p.zero(at, at+n)
	}
	return nil
}

// wipeTags turns the Tags and Attachments of a WebM file into void space (RFC 8794, RFC 9559).
func wipeTags(r io.ReaderAt, size int64, p *patched) error {
	const (
		segment, cluster, tags, attachments = 0x18538067, 0x1f43b675, 0x1254c367, 0x1941a469
		title, date, info                   = 0x7ba9, 0x4461, 0x1549a966
	)
	for at, left := int64(0), mostBoxes*10; at < size; {
		if left--; left < 0 {
			return ErrBroken
		}
		id, idLen, ok := vint(r, at, size, true)
		if !ok {
			return ErrBroken
		}
		n, nLen, ok := vint(r, at+idLen, size, false)
		if !ok {
			return ErrBroken
		}
		body := at + idLen + nLen
		unknown := n == 1<<(7*nLen)-1
		switch id {
		case segment, info:
			at = body
			continue
		case cluster:
			if unknown {
				at = body
				continue
			}
		}
		if unknown || n > uint64(size-body) {
			return ErrBroken
		}
		end := body + int64(n)
		switch id {
		case tags, attachments, title, date:
			void(p, at, end)
		}
		at = end
	}
	return nil
}

// void makes an element of the same length that says nothing.
func void(p *patched, at, end int64) {
	total := end - at
	switch {
	case total >= 9:
		h := make([]byte, 9)
		binary.BigEndian.PutUint64(h[1:], uint64(total-9))
		h[0], h[1] = 0xec, 0x01
		p.write(at, h)
		p.zero(at+9, end)
	case total >= 2:
		p.write(at, []byte{0xec, 0x80 | byte(total-2)})
		p.zero(at+2, end)
	}
}

// vint reads a number of variable length; an id keeps its leading mark.
func vint(r io.ReaderAt, at, size int64, id bool) (v uint64, n int64, ok bool) {
	var b [8]byte
	k, err := r.ReadAt(b[:min(8, max(0, size-at))], at)
	if err != nil && !errors.Is(err, io.EOF) || k == 0 || b[0] == 0 {
		return 0, 0, false
	}
	n = 1
	for m := byte(0x80); b[0]&m == 0; m >>= 1 {
		n++
	}
	if int64(k) < n || id && n > 4 {
		return 0, 0, false
	}
	v = uint64(b[0])
	if !id {
		v &= 1<<(8-n) - 1
	}
	for _, x := range b[1:n] {
		v = v<<8 | uint64(x)
	}
	return v, n, true
}
