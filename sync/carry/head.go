package carry

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"strconv"
	"strings"

	"github.com/fxamacker/cbor/v2"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/segment"
)

// Head is what one device says about itself in a folder: all that another device must read to
// know whether there is anything new. It is signed and in clear; it names streams, numbers,
// sizes and hashes, nothing else.
type Head struct {
	Practice exam.ID            `cbor:"1,keyasint"`
	Device   change.Incarnation `cbor:"2,keyasint"`
	Counter  uint64             `cbor:"3,keyasint"` // rises with each head that the device leaves here
	Time     change.HLC         `cbor:"4,keyasint"` // of the device's clock
	Streams  []Reach            `cbor:"5,keyasint"` // what the device holds, by stream, rising
	Segments []Ref              `cbor:"6,keyasint"` // what it has put into this folder and still lies there
	Sums     []segment.Sum      `cbor:"7,keyasint,omitempty"`
	Bad      [][32]byte         `cbor:"8,keyasint,omitempty"` // names of segments that lie here damaged, rising: whoever has them whole leaves them again
}

// Reach says how far a device holds a stream.
type Reach struct {
	Device change.Incarnation `cbor:"1,keyasint"`
	Site   change.Site        `cbor:"2,keyasint"`
	Last   uint64             `cbor:"3,keyasint"`
	Hash   change.Hash        `cbor:"4,keyasint"`
}

// Stream returns the stream.
func (r Reach) Stream() change.Stream { return change.Stream{Device: r.Device, Site: r.Site} }

// Ref describes a segment. Its file is named after it.
type Ref struct {
	Device change.Incarnation `cbor:"1,keyasint"`
	Site   change.Site        `cbor:"2,keyasint"`
	First  uint64             `cbor:"3,keyasint"`
	Last   uint64             `cbor:"4,keyasint"`
	Prev   change.Hash        `cbor:"5,keyasint"` // chain hash before it
	Hash   change.Hash        `cbor:"6,keyasint"` // chain hash that it reaches
	Size   int64              `cbor:"7,keyasint"`
	Name   [32]byte           `cbor:"8,keyasint"` // its trailing hash
}

// Stream returns the stream.
func (r Ref) Stream() change.Stream { return change.Stream{Device: r.Device, Site: r.Site} }

// File returns the segment's file name.
func (r Ref) File() string {
	s := r.Stream()
	sum := sha256.Sum256(append(s.Device[:], s.Site[:]...))
	return fmt.Sprintf("%x-%016x-%016x-%x.seg", sum[:6], r.First, r.Last, r.Name[:8])
}

// FileRef names an attachment's file by its HMAC name and size.
type FileRef struct {
	Name string
	Size int64
}

const (
	headMagic   = "cordwalk head 1\n"
	headPurpose = "folder head"
	maxHead     = 8 << 20
)

var (
	enc = must(cbor.CoreDetEncOptions().EncMode())
	dec = must(cbor.DecOptions{
		DupMapKey: cbor.DupMapKeyEnforcedAPF, IndefLength: cbor.IndefLengthForbidden, TagsMd: cbor.TagsForbidden,
		MaxNestedLevels: 8, MaxArrayElements: 1 << 16, MaxMapPairs: 64, ExtraReturnErrors: cbor.ExtraDecErrorUnknownField,
	}.DecMode())
)

func must[T any](v T, err error) T {
	if err != nil {
		panic(err) // a mistake in the options above, found by any test
	}
	return v
}

// Encode returns the head's file: magic, verifier, signature, length, CBOR.
func (h Head) Encode(d key.Device) ([]byte, error) {
	body, err := enc.Marshal(h)
	if err != nil {
		return nil, err
	}
	sig := d.Sign(headPurpose, body)
	v := d.Verifier()
	b := append([]byte(headMagic), v[:]...)
	b = append(b, sig[:]...)
	b = binary.BigEndian.AppendUint32(b, uint32(len(body)))
	return append(b, body...), nil
}

// ParseHead reads a head file and checks its signature. Whether the signer is the device that the
// head names is for the member list to say.
func ParseHead(data []byte) (Head, key.Verifier, error) {
	var v key.Verifier
	var sig key.Signature
	const fixed = len(headMagic) + len(v) + len(sig) + 4
	if len(data) < fixed {
		return Head{}, v, fmt.Errorf("a device's head: %w", segment.ErrIncomplete)
	}
	if string(data[:len(headMagic)]) != headMagic {
		if strings.HasPrefix(string(data), "cordwalk head ") {
			return Head{}, v, fmt.Errorf("a device's head: %w", change.ErrNewer)
		}
		return Head{}, v, fmt.Errorf("a device's head: %w", change.ErrMalformed)
	}
	copy(v[:], data[len(headMagic):])
	copy(sig[:], data[len(headMagic)+len(v):])
	n := binary.BigEndian.Uint32(data[fixed-4:])
	body := data[fixed:]
	if uint64(len(body)) < uint64(n) {
		return Head{}, v, fmt.Errorf("a device's head: %w", segment.ErrIncomplete)
	}
	if uint64(len(body)) > uint64(n) {
		return Head{}, v, fmt.Errorf("a device's head: %w: it goes on behind its end", change.ErrMalformed)
	}
	if !v.Verify(headPurpose, body, sig) {
		return Head{}, v, fmt.Errorf("a device's head: %w", segment.ErrUnsigned)
	}
	var h Head
	if err := dec.Unmarshal(body, &h); err != nil {
		return Head{}, v, fmt.Errorf("a device's head: %w: %s", change.ErrMalformed, err)
	}
	if again, err := enc.Marshal(h); err != nil || !bytes.Equal(again, body) {
		return Head{}, v, fmt.Errorf("a device's head: %w: it is not in its one allowed encoding", change.ErrMalformed)
	}
	for _, r := range h.Segments {
		if r.First == 0 || r.Last < r.First || r.Size < segment.HeaderSize || r.Size > segment.MaxSize {
			return Head{}, v, fmt.Errorf("a device's head: %w: it names a segment from %d to %d of %d bytes", change.ErrMalformed, r.First, r.Last, r.Size)
		}
	}
	return h, v, nil
}

// headFile names a device's head file.
func headFile(d change.Incarnation, counter uint64) string {
	return fmt.Sprintf("%s-%016x.head", d, counter)
}

// parseHeadFile is the inverse of headFile.
func parseHeadFile(name string) (d change.Incarnation, counter uint64, ok bool) {
	base, ok := strings.CutSuffix(name, ".head")
	if !ok || len(base) != 32+1+16 || base[32] != '-' {
		return d, 0, false
	}
	b, err := hex.DecodeString(base[:32])
	if err != nil {
		return d, 0, false
	}
	n, err := strconv.ParseUint(base[33:], 16, 64)
	if err != nil {
		return d, 0, false
	}
	d = change.Incarnation(b)
	return d, n, headFile(d, n) == name
}

// goodFileName reports whether a name is that of an attachment or an owner's key: 32 hexadecimal digits and
// ".att" or ".owner".
func goodFileName(name string) bool {
	base, ok := strings.CutSuffix(name, ".att")
	if !ok {
		base, ok = strings.CutSuffix(name, ".owner")
	}
	return ok && len(base) == 32 && strings.Trim(base, "0123456789abcdef") == ""
}
