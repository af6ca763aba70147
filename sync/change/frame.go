package change

import (
	"bytes"
	"crypto/cipher"
	"crypto/rand"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"errors"
	"fmt"
	"hash/crc32"

	"golang.org/x/crypto/chacha20poly1305"
)

// The version of the format that this program writes. See DEVELOPERS.md for what a newer minor
// or major version means to a reader.
const (
	Major = 1
	Minor = 0
)

// HeaderSize is the length of a frame's header in bytes.
const HeaderSize = 104

// Overhead is what sealing adds to a batch: the nonce and the tag.
const Overhead = chacha20poly1305.NonceSizeX + chacha20poly1305.Overhead

// MaxFrame is the length of the longest frame.
const MaxFrame = HeaderSize + MaxBody

// Magic begins every frame; a reader finds its way back to it after damage.
var Magic = [8]byte{0xc7, 'C', 'W', 'f', '\r', '\n', 0x1a, '\n'}

// SuiteXChaCha20Poly1305 is the only way of sealing that this version knows.
const SuiteXChaCha20Poly1305 = 1

var castagnoli = crc32.MakeTable(crc32.Castagnoli)

func crc(b []byte) uint32 { return crc32.Checksum(b, castagnoli) }

// Hash is a SHA-256: of a frame, it covers the frame before it as well and so all of the
// stream up to here.
type Hash [32]byte

// String returns 64 hexadecimal digits.
func (h Hash) String() string { return hex.EncodeToString(h[:]) }

// IsZero reports whether this is the hash before the first frame.
func (h Hash) IsZero() bool { return h == Hash{} }

// Header stands before each sealed batch in clear: all that a mailbox can learn.
type Header struct {
	Major, Minor uint8
	Suite        uint16
	Epoch        uint32 // of the practice key
	Stream       Stream
	First, Last  uint64 // sequence numbers of the batch
	Length       uint32 // bytes of nonce, sealed batch and tag
	Prev         Hash   // of the stream's frame before this one; zero before the first
}

// append writes the header with its checksum.
func (h Header) append(b []byte) []byte {
	start := len(b)
	b = append(b, Magic[:]...)
	b = append(b, h.Major, h.Minor)
	b = binary.BigEndian.AppendUint16(b, h.Suite)
	b = binary.BigEndian.AppendUint32(b, h.Epoch)
	b = append(b, h.Stream.Device[:]...)
	b = append(b, h.Stream.Site[:]...)
	b = binary.BigEndian.AppendUint64(b, h.First)
	b = binary.BigEndian.AppendUint64(b, h.Last)
	b = binary.BigEndian.AppendUint32(b, h.Length)
	b = append(b, h.Prev[:]...)
	return binary.BigEndian.AppendUint32(b, crc(b[start:]))
}

// ParseHeader reads the header at the beginning of b. A header of a newer major version is
// returned with its fields, which every version has in the same places.
func ParseHeader(b []byte) (Header, error) {
	if len(b) < HeaderSize {
		return Header{}, fmt.Errorf("frame header: %w after %d bytes", ErrCut, len(b))
	}
	if !bytes.Equal(b[:8], Magic[:]) {
		return Header{}, fmt.Errorf("%w: here begins no frame", ErrMalformed)
	}
	if crc(b[:HeaderSize-4]) != binary.BigEndian.Uint32(b[HeaderSize-4:]) {
		return Header{}, fmt.Errorf("%w: the checksum of a frame's header does not fit", ErrMalformed)
	}
	h := Header{
		Major:  b[8],
		Minor:  b[9],
		Suite:  binary.BigEndian.Uint16(b[10:]),
		Epoch:  binary.BigEndian.Uint32(b[12:]),
		Stream: Stream{Incarnation(b[16:32]), Site(b[32:48])},
		First:  binary.BigEndian.Uint64(b[48:]),
		Last:   binary.BigEndian.Uint64(b[56:]),
		Length: binary.BigEndian.Uint32(b[64:]),
		Prev:   Hash(b[68:100]),
	}
	if err := h.check(); err != nil {
		return Header{}, err
	}
	return h, nil
}

// check reports what no header may say.
func (h Header) check() error {
	switch {
	case h.Major == 0:
		return fmt.Errorf("%w: a frame of version 0", ErrMalformed)
	case h.Length > MaxBody || h.Length < Overhead:
		return fmt.Errorf("%w: a frame's body has %d bytes, allowed are %d to %d", ErrMalformed, h.Length, Overhead, MaxBody)
	case h.First == 0 || h.Last < h.First || h.Last-h.First >= MaxChanges:
		return fmt.Errorf("%w: a frame says it holds changes %d to %d", ErrMalformed, h.First, h.Last)
	case (h.First == 1) != h.Prev.IsZero():
		return fmt.Errorf("%w: a frame that begins at %d names %s as the frame before it", ErrMalformed, h.First, h.Prev)
	}
	return nil
}

// Size returns the length of the whole frame in bytes.
func (h Header) Size() int { return HeaderSize + int(h.Length) }

// Frame is a sealed batch with its header, as it stands in a journal.
type Frame struct {
	Header
	Raw []byte // the whole frame
}

// Hash returns the chain hash up to and including this frame.
func (f Frame) Hash() Hash { return sha256.Sum256(f.Raw) }

// ParseFrame reads the frame at the beginning of b. The frame shares b's memory. The error is
// ErrCut where b ends too early. Nothing is said about the body: only Open can tell.
func ParseFrame(b []byte) (Frame, error) {
	h, err := ParseHeader(b)
	if err != nil {
		return Frame{}, err
	}
	if len(b) < h.Size() {
		return Frame{}, fmt.Errorf("frame %d of stream %s: %w after %d of %d bytes", h.First, h.Stream, ErrCut, len(b), h.Size())
	}
	return Frame{Header: h, Raw: b[:h.Size():h.Size()]}, nil
}

// Keys finds the cipher of an epoch; it returns false for an epoch whose key is not at hand.
type Keys interface {
	Frames(epoch uint32) (cipher.AEAD, bool)
}

// NewAEAD returns the cipher of frames for a key of 32 bytes.
func NewAEAD(key []byte) (cipher.AEAD, error) { return chacha20poly1305.NewX(key) }

// Seal makes the frame that follows the frame of hash prev (zero for the first). What was
// sealed is opened again and compared before it is returned, so that broken memory does not
// reach the disk.
func Seal(b Batch, prev Hash, epoch uint32, keys Keys) (Frame, error) {
	return seal(b, prev, epoch, keys, rand.Read)
}

func seal(b Batch, prev Hash, epoch uint32, keys Keys, random func([]byte) (int, error)) (Frame, error) {
	plain, err := EncodeBatch(b)
	if err != nil {
		return Frame{}, err
	}
	if len(plain)+Overhead > MaxBody {
		return Frame{}, fmt.Errorf("%w: a batch of %d bytes, allowed are %d", ErrMalformed, len(plain), MaxBody-Overhead)
	}
	aead, ok := keys.Frames(epoch)
	if !ok {
		return Frame{}, fmt.Errorf("sealing a batch: %w (epoch %d)", ErrNoKey, epoch)
	}
	h := Header{Major: Major, Minor: Minor, Suite: SuiteXChaCha20Poly1305, Epoch: epoch, Stream: b.Stream, First: b.First, Last: b.Last(), Length: uint32(len(plain) + Overhead), Prev: prev}
	if len(b.Extra) > 0 || hasExtra(b.Changes) {
		h.Minor = Minor + 1
	}
	if (h.First == 1) != prev.IsZero() {
		return Frame{}, fmt.Errorf("%w: a frame that begins at %d cannot follow %s", ErrMalformed, h.First, prev)
	}
	raw := h.append(make([]byte, 0, h.Size()))
	var nonce [chacha20poly1305.NonceSizeX]byte
	if _, err := random(nonce[:]); err != nil {
		return Frame{}, fmt.Errorf("sealing a batch: %w", err)
	}
	raw = append(raw, nonce[:]...)
	raw = aead.Seal(raw, nonce[:], plain, raw[:HeaderSize])
	f, err := ParseFrame(raw)
	if err != nil {
		return Frame{}, err
	}
	again, err := unseal(nil, f, aead)
	if err != nil || !bytes.Equal(again, plain) {
		return Frame{}, errors.New("a batch did not open again right after it was sealed: this computer's memory or this program is faulty; nothing was written")
	}
	return f, nil
}

func hasExtra(cs []Change) bool {
	for _, c := range cs {
		if len(c.Extra) > 0 {
			return true
		}
	}
	return false
}

func unseal(dst []byte, f Frame, aead cipher.AEAD) ([]byte, error) {
	body := f.Raw[HeaderSize:]
	nonce, sealed := body[:chacha20poly1305.NonceSizeX], body[chacha20poly1305.NonceSizeX:]
	return aead.Open(dst, nonce, sealed, f.Raw[:HeaderSize])
}

// Open unseals and decodes a frame. The error is ErrNewer for a newer major version or another
// way of sealing, ErrNoKey where the epoch's key is missing, ErrSealed where the body does not
// open, ErrMalformed where it opens but breaks the format.
func Open(f Frame, keys Keys) (Batch, error) { return open(f, keys, nil) }

func open(f Frame, keys Keys, o *Opener) (Batch, error) {
	where := func(err error) error {
		return fmt.Errorf("frame %d–%d of stream %s: %w", f.First, f.Last, f.Stream, err)
	}
	if f.Major > Major || f.Suite != SuiteXChaCha20Poly1305 {
		return Batch{}, where(ErrNewer)
	}
	aead, ok := keys.Frames(f.Epoch)
	if !ok {
		return Batch{}, where(fmt.Errorf("%w (%d)", ErrNoKey, f.Epoch))
	}
	plain, err := unseal(o.bytes(len(f.Raw)), f, aead)
	if err != nil {
		return Batch{}, where(ErrSealed)
	}
	o.keep(plain)
	b, ok := quickBatch(plain, f.Stream, f.First, o)
	if !ok {
		if b, err = slowBatch(plain, f.Stream, f.First, f.Minor); err != nil {
			return Batch{}, where(err)
		}
	}
	if b.Last() != f.Last {
		return Batch{}, where(fmt.Errorf("%w: it holds %d changes", ErrMalformed, len(b.Changes)))
	}
	return b, nil
}

// Nonce returns the nonce of the frame's body.
func (f Frame) Nonce() []byte {
	return f.Raw[HeaderSize : HeaderSize+chacha20poly1305.NonceSizeX]
}

// Unseal opens a frame's body without decoding it, into the room of dst, which may be nil.
// Errors are those of Open.
func Unseal(dst []byte, f Frame, keys Keys) ([]byte, error) {
	if f.Major > Major || f.Suite != SuiteXChaCha20Poly1305 {
		return nil, ErrNewer
	}
	aead, ok := keys.Frames(f.Epoch)
	if !ok {
		return nil, ErrNoKey
	}
	body := f.Raw[HeaderSize:]
	plain, err := aead.Open(dst[:0], body[:chacha20poly1305.NonceSizeX], body[chacha20poly1305.NonceSizeX:], f.Raw[:HeaderSize])
	if err != nil {
		return nil, ErrSealed
	}
	return plain, nil
}

// Reseal makes, behind dst, the very frame that was unsealed to plain: the same header fields,
// nonce and key give the same bytes. h.Length is worked out. It returns the longer dst and
// the frame, which shares its memory.
func Reseal(dst []byte, h Header, nonce, plain []byte, keys Keys) ([]byte, Frame, error) {
	aead, ok := keys.Frames(h.Epoch)
	if !ok {
		return dst, Frame{}, ErrNoKey
	}
	if len(nonce) != chacha20poly1305.NonceSizeX || len(plain)+Overhead > MaxBody {
		return dst, Frame{}, fmt.Errorf("%w: a batch of %d bytes", ErrMalformed, len(plain))
	}
	h.Length = uint32(len(plain) + Overhead)
	if err := h.check(); err != nil {
		return dst, Frame{}, err
	}
	start := len(dst)
	dst = h.append(dst)
	dst = append(dst, nonce...)
	dst = aead.Seal(dst, nonce, plain, dst[start:start+HeaderSize])
	return dst, Frame{Header: h, Raw: dst[start:len(dst):len(dst)]}, nil
}
