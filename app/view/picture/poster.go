package picture

import (
	"encoding/binary"
	"errors"
	"image"
	"io"
	"math"
	"slices"
	"time"
)

// Clip is what can be said of a clip without playing it.
type Clip struct {
	Length time.Duration // 0 where the file does not say
	Codec  string        // the four letters of its picture track (avc1, hvc1, jpeg …), or the name that WebM gives; may be empty
	First  image.Image   // its first frame; nil where it cannot be decoded here
}

// mostFrame bounds the bytes of one frame that is decoded.
const mostFrame = 32 << 20

// Describe reads a clip's length and codec and, where its frames are JPEG pictures (Motion JPEG, as some
// cameras write it), its first frame, no larger than w × h pixels. Frames of other codecs are not decoded: that
// needs a decoder as large as this program. The error is ErrBroken or one of reading.
func Describe(r io.ReaderAt, size int64, w, h int) (Clip, error) {
	head := make([]byte, min(size, 64))
	if _, err := r.ReadAt(head, 0); err != nil && !errors.Is(err, io.EOF) {
		return Clip{}, err
	}
	switch Format(head) {
	case "mp4", "mov":
		return describeBoxes(&boxes{r, nil, mostBoxes}, size, w, h)
	case "webm":
		return describeElements(r, size), nil
	}
	return Clip{}, ErrFormat
}

// number reads a big-endian number of 4 or 8 bytes.
func (b *boxes) number(at int64, n int) (uint64, error) {
	var raw [8]byte
	if _, err := b.r.ReadAt(raw[8-n:], at); err != nil {
		return 0, ErrBroken
	}
	return binary.BigEndian.Uint64(raw[:]), nil
}

// describeBoxes reads the movie header for the length (ISO/IEC 14496-12, 8.2.2) and the tables of the first
// picture track for its codec and its first sample (8.5, 8.7).
func describeBoxes(b *boxes, size int64, w, h int) (Clip, error) {
	var c Clip
	moov, moovEnd, ok, err := b.find(0, size, "moov")
	if err != nil || !ok {
		return c, ErrBroken
	}
	if at, end, ok, err := b.find(moov, moovEnd, "mvhd"); err == nil && ok && end-at >= 20 {
		version, err1 := b.number(at, 4)
		scaleAt, n := at+12, 4
		if version>>24 == 1 {
			scaleAt, n = at+20, 8
		}
		scale, err2 := b.number(scaleAt, 4)
		length, err3 := b.number(scaleAt+4, n)
		if errors.Join(err1, err2, err3) == nil && scale > 0 {
			c.Length = duration(float64(length) / float64(scale))
		}
	}
	done := errors.New("found")
	err = b.each(moov, moovEnd, func(kind string, _, body, end int64) error {
		if kind != "trak" {
			return nil
		}
		at, _, ok, err := b.find(body, end, "mdia", "hdlr")
		if err != nil || !ok {
			return err
		}
		var handler [12]byte
		if _, err := b.r.ReadAt(handler[:], at); err != nil {
			return ErrBroken
		}
		if string(handler[8:]) != "vide" {
			return nil
		}
		stbl, stblEnd, ok, err := b.find(body, end, "mdia", "minf", "stbl")
		if err != nil || !ok {
			return err
		}
		at, stsdEnd, ok, err := b.find(stbl, stblEnd, "stsd")
		if err != nil || !ok || stsdEnd-at < 16 {
			return err
		}
		var codec [4]byte
		if _, err := b.r.ReadAt(codec[:], at+12); err != nil {
			return ErrBroken
		}
		c.Codec = string(codec[:])
		if slices.Contains([]string{"jpeg", "mjpa", "mjpg", "MJPG"}, c.Codec) {
			c.First = b.firstFrame(stbl, stblEnd, size, w, h)
		}
		return done
	})
	if err != nil && !errors.Is(err, done) {
		return c, err
	}
	return c, nil
}

// firstFrame decodes the first sample of a track of JPEG pictures; nil where it cannot.
func (b *boxes) firstFrame(stbl, end, size int64, w, h int) image.Image {
	at, ok := int64(0), false
	if body, _, found, err := b.find(stbl, end, "stco"); err == nil && found {
		x, err := b.number(body+8, 4)
		at, ok = int64(x), err == nil
	} else if body, _, found, err := b.find(stbl, end, "co64"); err == nil && found {
		x, err := b.number(body+8, 8)
		at, ok = int64(min(x, math.MaxInt64)), err == nil
	}
	body, _, found, err := b.find(stbl, end, "stsz")
	if !ok || err != nil || !found {
		return nil
	}
	// One size for all samples, or a table of them.
	n, err := b.number(body+4, 4)
	if err == nil && n == 0 {
		n, err = b.number(body+12, 4)
	}
	if err != nil || n == 0 || n > mostFrame || at < 0 || at > size-int64(n) {
		return nil
	}
	data := make([]byte, n)
	if _, err := b.r.ReadAt(data, at); err != nil {
		return nil
	}
	p, err := Thumb(data, w, h)
	if err != nil {
		return nil
	}
	return p
}

// describeElements reads the length and the codec of a WebM file (RFC 9559: Info with TimestampScale and
// Duration; Tracks with CodecID).
func describeElements(r io.ReaderAt, size int64) Clip {
	var c Clip
	scale, length := 1e6, 0.0
	left := mostBoxes
	var walk func(from, to int64, depth int)
	walk = func(from, to int64, depth int) {
		for at := from; at < to && depth < 5; {
			if left--; left < 0 {
				return
			}
			id, n, ok := vint(r, at, to, true)
			if !ok {
				return
			}
			long, m, ok := vint(r, at+n, to, false)
			if !ok {
				return
			}
			body := at + n + m
			end := to // a length that is not known runs to the end of what holds it
			if long < uint64(to-body) {
				end = body + int64(long)
			}
			value := func() []byte {
				b := make([]byte, min(end-body, 64))
				if _, err := r.ReadAt(b, body); err != nil {
					return nil
				}
				return b
			}
			switch id {
			case 0x18538067, 0x1549A966, 0x1654AE6B, 0xAE: // Segment, Info, Tracks, TrackEntry
				walk(body, end, depth+1)
			case 0x1F43B675: // the first cluster: what describes the clip stands before it
				return
			case 0x2AD7B1:
				x := uint64(0)
				for _, v := range value() {
					x = x<<8 | uint64(v)
				}
				scale = float64(x)
			case 0x4489:
				switch b := value(); len(b) {
				case 4:
					length = float64(math.Float32frombits(binary.BigEndian.Uint32(b)))
				case 8:
					length = math.Float64frombits(binary.BigEndian.Uint64(b))
				}
			case 0x86:
				if id := string(value()); c.Codec == "" && len(id) > 2 && id[:2] == "V_" {
					c.Codec = id
				}
			}
			at = end
		}
	}
	walk(0, size, 0)
	c.Length = duration(length * scale / 1e9)
	return c
}

// duration is a length in seconds; 0 for what no clip of 200 MB lasts.
func duration(s float64) time.Duration {
	if !(s > 0) || s > 24*3600 {
		return 0
	}
	return time.Duration(s * float64(time.Second))
}
