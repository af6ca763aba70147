// Package segment is the form in which frames leave a device: a run of one stream's frames,
// compressed together, sealed in blocks, with the chain head signed by the device that wrote
// them.
//
// A segment does not hold the frames' own ciphertext, which cannot be compressed. It holds
// what they seal and their nonces; the reader seals again and gets the same frames, byte for
// byte, which the chain hash proves. Frames that the writer could not open (of a newer version,
// or of an epoch whose key it lacks) travel as they are.
//
// A segment is complete only if its trailing hash fits. Nothing in it is believed before the
// signature, the hashes and the seals are checked. DEVELOPERS.md holds the specification.
package segment

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"errors"
	"fmt"
	"hash"
	"hash/crc32"
	"io"
	"sync"

	"github.com/klauspost/compress/zstd"

	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// Magic begins every segment.
var Magic = [8]byte{0xc7, 'C', 'W', 's', '\r', '\n', 0x1a, '\n'}

// Sizes and limits.
const (
	HeaderSize = 248
	TailSize   = 4 + 32
	MaxSize    = 64 << 20             // bytes of a segment
	MaxRaw     = 128 << 20            // bytes of the frames in it
	blockRaw   = 512 << 10            // a block is closed at this many bytes of entries
	maxBlock   = blockRaw + maxEntry  // bytes of a block's entries
	maxEntry   = change.MaxFrame + 64 // bytes of one entry
	maxSealed  = maxBlock + maxBlock/64 + 1<<10
	Major      = 1
)

// The ways of packing.
const packZstd = 1

// ErrUnsigned means that the signature does not fit, or that it is not one of the device to which
// the stream belongs.
var ErrUnsigned = errors.New("not signed by the device that it names")

// ErrIncomplete means that the segment ends early or its trailing hash does not fit: it was
// copied in part, or is being copied now.
var ErrIncomplete = errors.New("incomplete")

// Head is a place in a stream: the last frame's last number and its chain hash.
type Head struct {
	Stream change.Stream
	Last   uint64
	Hash   change.Hash
}

// message is what the signature of a head covers.
func (h Head) message() []byte {
	b := append([]byte{}, h.Stream.Device[:]...)
	b = append(b, h.Stream.Site[:]...)
	b = binary.BigEndian.AppendUint64(b, h.Last)
	return append(b, h.Hash[:]...)
}

// Signed is a head signed by the device that wrote the stream.
type Signed struct {
	Head
	Verifier  key.Verifier
	Signature key.Signature
}

const purpose = "chain head"

// Sign signs a head of the device's own stream.
func Sign(h Head, d key.Device) Signed {
	return Signed{h, d.Verifier(), d.Sign(purpose, h.message())}
}

// Check verifies the signature. Whether the verifier may sign for the stream is for the member
// list to say.
func (s Signed) Check() error {
	if !s.Verifier.Verify(purpose, s.message(), s.Signature) {
		return fmt.Errorf("chain head %d of stream %s: %w", s.Last, s.Stream, ErrUnsigned)
	}
	return nil
}

// SignedSize is the length of an encoded signed head.
const SignedSize = 32 + 8 + 32 + 32 + 64

// AppendSigned encodes a signed head behind b.
func AppendSigned(b []byte, s Signed) []byte {
	b = append(b, s.message()...)
	b = append(b, s.Verifier[:]...)
	return append(b, s.Signature[:]...)
}

// ParseSigned decodes and checks a signed head.
func ParseSigned(b []byte) (Signed, error) {
	if len(b) != SignedSize {
		return Signed{}, fmt.Errorf("a signed chain head of %d bytes: %w", len(b), change.ErrMalformed)
	}
	s := Signed{Head: Head{change.Stream{Device: change.Incarnation(b[:16]), Site: change.Site(b[16:32])}, binary.BigEndian.Uint64(b[32:]), change.Hash(b[40:72])}, Verifier: key.Verifier(b[72:104]), Signature: key.Signature(b[104:])}
	return s, s.Check()
}

// Header stands at the beginning of a segment in clear.
type Header struct {
	Epoch  uint32 // of the key that seals the blocks
	First  uint64 // of the first frame
	Frames uint32
	Prev   change.Hash // chain hash before the first frame
	Signed             // the head that the last frame reaches
}

func crc(b []byte) uint32 { return crc32.Checksum(b, crc32.MakeTable(crc32.Castagnoli)) }

func (h Header) append(b []byte) []byte {
	start := len(b)
	b = append(b, Magic[:]...)
	b = append(b, Major, 0, 0, packZstd)
	b = binary.BigEndian.AppendUint32(b, h.Epoch)
	b = binary.BigEndian.AppendUint64(b, h.First)
	b = binary.BigEndian.AppendUint32(b, h.Frames)
	b = append(b, h.Prev[:]...)
	b = append(b, make([]byte, 16)...)
	b = AppendSigned(b, h.Signed)
	return binary.BigEndian.AppendUint32(b, crc(b[start:]))
}

// ParseHeader reads the header at the beginning of b and checks its signature.
func ParseHeader(b []byte) (Header, error) {
	if len(b) < HeaderSize {
		return Header{}, fmt.Errorf("segment header: %w after %d bytes", ErrIncomplete, len(b))
	}
	b = b[:HeaderSize]
	switch {
	case !bytes.Equal(b[:8], Magic[:]):
		return Header{}, fmt.Errorf("%w: this is no segment", change.ErrMalformed)
	case crc(b[:HeaderSize-4]) != binary.BigEndian.Uint32(b[HeaderSize-4:]):
		return Header{}, fmt.Errorf("%w: the checksum of a segment's header does not fit", change.ErrMalformed)
	case b[8] != Major || b[11] != packZstd:
		return Header{}, fmt.Errorf("segment: %w", change.ErrNewer)
	}
	h := Header{
		Epoch:  binary.BigEndian.Uint32(b[12:]),
		First:  binary.BigEndian.Uint64(b[16:]),
		Frames: binary.BigEndian.Uint32(b[24:]),
		Prev:   change.Hash(b[28:60]),
	}
	var err error
	if h.Signed, err = ParseSigned(b[76 : HeaderSize-4]); err != nil {
		return Header{}, err
	}
	if h.First == 0 || h.Last < h.First || h.Frames == 0 || uint64(h.Frames) > h.Last-h.First+1 || (h.First == 1) != h.Prev.IsZero() || !bytes.Equal(h.append(nil), b) {
		return Header{}, fmt.Errorf("%w: a segment says it holds %d frames with the numbers %d to %d", change.ErrMalformed, h.Frames, h.First, h.Last)
	}
	return h, nil
}

// The kinds of entry in a block.
const (
	entryRaw    = 0 // uvarint length, the frame
	entryOpened = 1 // uvarint epoch, minor version, uvarint number of changes, nonce, uvarint length, batch
)

// Small blocks are those of a hub: there the time counts and not the last byte.
const smallBlock = 128 << 10

var encoders, quickEncoders = encodersOf(zstd.SpeedDefault), encodersOf(zstd.SpeedFastest)

func encodersOf(level zstd.EncoderLevel) *sync.Pool {
	return &sync.Pool{New: func() any {
		e, err := zstd.NewWriter(nil, zstd.WithEncoderConcurrency(1), zstd.WithEncoderLevel(level), zstd.WithEncoderCRC(false))
		if err != nil {
			panic(err) // the options are constants
		}
		return e
	}}
}

// buffers keeps the memory that builders work in.
var buffers = sync.Pool{New: func() any { return new(buffer) }}

type buffer struct{ block, opened, packed []byte }

var decoders = sync.Pool{New: func() any {
	d, err := zstd.NewReader(nil, zstd.WithDecoderConcurrency(1), zstd.WithDecoderMaxMemory(maxBlock), zstd.WithDecoderMaxWindow(8<<20))
	if err != nil {
		panic(err) // the options are constants
	}
	return d
}}

// Builder puts a segment together. Add frames in the order of their stream, then call Finish.
type Builder struct {
	ring    *key.Ring
	seal    key.Secret
	h       Header
	started bool
	last    uint64
	head    change.Hash
	*buffer // block holds entries that are not sealed yet
	blocks  [][]byte
	size    int
	raw     int
}

// NewBuilder begins a segment that is sealed with the ring's newest epoch.
func NewBuilder(ring *key.Ring) *Builder {
	epoch := ring.Current()
	s, _ := ring.Secret(epoch)
	buf := buffers.Get().(*buffer)
	buf.block = buf.block[:0]
	return &Builder{ring: ring, seal: s.Derive("segments"), h: Header{Epoch: epoch}, buffer: buf}
}

// Raw returns the bytes of the frames added so far.
func (b *Builder) Raw() int { return b.raw }

// Size returns about how many bytes the segment has so far.
func (b *Builder) Size() int { return HeaderSize + b.size + len(b.block) + TailSize }

// Frames returns how many frames were added.
func (b *Builder) Frames() int { return int(b.h.Frames) }

// Head returns the place that the frames added so far reach.
func (b *Builder) Head() Head { return Head{b.h.Stream, b.last, b.head} }

// Full reports whether a frame of n bytes might not fit any more.
func (b *Builder) Full(n int) bool {
	return b.Size()+n+1<<10 > MaxSize-maxBlock/64 || b.raw+n > MaxRaw
}

// Add adds the stream's next frame, which must follow the one before it.
func (b *Builder) Add(f change.Frame) error {
	if !b.started {
		b.h.Stream, b.h.First, b.h.Prev = f.Stream, f.First, f.Prev
		b.started, b.last, b.head = true, f.First-1, f.Prev
	}
	if f.Stream != b.h.Stream || f.First != b.last+1 || f.Prev != b.head {
		return fmt.Errorf("%w: frame %d of stream %s does not follow %d of %s", change.ErrMalformed, f.First, f.Stream, b.last, b.h.Stream)
	}
	if b.Full(len(f.Raw)) {
		return errors.New("a segment is full: begin another one")
	}
	plain, err := change.Unseal(b.opened, f, b.ring)
	switch {
	case err == nil:
		b.opened = plain
		b.block = append(b.block, entryOpened)
		b.block = binary.AppendUvarint(b.block, uint64(f.Epoch))
		b.block = append(b.block, f.Minor)
		b.block = binary.AppendUvarint(b.block, f.Last-f.First+1)
		b.block = append(b.block, f.Nonce()...)
		b.block = binary.AppendUvarint(b.block, uint64(len(plain)))
		b.block = append(b.block, plain...)
	case errors.Is(err, change.ErrNewer), errors.Is(err, change.ErrNoKey):
		b.block = append(b.block, entryRaw)
		b.block = binary.AppendUvarint(b.block, uint64(len(f.Raw)))
		b.block = append(b.block, f.Raw...)
	default:
		return fmt.Errorf("frame %d of stream %s: %w", f.First, f.Stream, err)
	}
	b.last, b.head = f.Last, f.Hash()
	b.h.Frames++
	b.raw += len(f.Raw)
	if len(b.block) >= blockRaw {
		b.close()
	}
	return nil
}

// close seals the block that was filled.
func (b *Builder) close() {
	if len(b.block) == 0 {
		return
	}
	pool := encoders
	if len(b.block) < smallBlock {
		pool = quickEncoders
	}
	e := pool.Get().(*zstd.Encoder)
	b.packed = e.EncodeAll(b.block, b.packed[:0])
	pool.Put(e)
	// The header is not known yet, so a block is tied to its stream, its place and what comes
	// before it; the trailing hash and the chain hash tie the rest.
	sealed := b.seal.Seal(b.packed, blockContext(b.h.Stream, b.h.First, len(b.blocks)))
	b.blocks = append(b.blocks, sealed)
	b.size += 4 + len(sealed)
	b.block = b.block[:0]
}

func blockContext(s change.Stream, first uint64, n int) []byte {
	c := append([]byte("cordwalk 1 segment block\x00"), s.Device[:]...)
	c = append(c, s.Site[:]...)
	c = binary.BigEndian.AppendUint64(c, first)
	return binary.BigEndian.AppendUint32(c, uint32(n))
}

// Finish writes the segment. signed must be the head that Head returns, signed by the stream's
// device. It returns the trailing hash, which names the segment for ever.
func (b *Builder) Finish(w io.Writer, signed Signed) (Header, [32]byte, error) {
	if !b.started {
		return Header{}, [32]byte{}, errors.New("a segment without frames")
	}
	if signed.Head != b.Head() {
		return Header{}, [32]byte{}, fmt.Errorf("the frames end at %d, the signature is for %d", b.last, signed.Last)
	}
	b.close()
	b.h.Signed = signed
	sum := sha256.New()
	out := io.MultiWriter(w, sum)
	if _, err := out.Write(b.h.append(nil)); err != nil {
		return Header{}, [32]byte{}, err
	}
	for _, s := range b.blocks {
		if _, err := out.Write(binary.BigEndian.AppendUint32(nil, uint32(len(s)))); err != nil {
			return Header{}, [32]byte{}, err
		}
		if _, err := out.Write(s); err != nil {
			return Header{}, [32]byte{}, err
		}
	}
	if _, err := out.Write(make([]byte, 4)); err != nil {
		return Header{}, [32]byte{}, err
	}
	name := [32]byte(sum.Sum(nil))
	_, err := w.Write(name[:])
	buffers.Put(b.buffer)
	b.buffer = &buffer{}
	return b.h, name, err
}

// Block is some consecutive frames of a segment.
type Block struct {
	Raw    []byte // the frames, one behind the other, as a journal keeps them
	Frames []change.Frame
	Plain  [][]byte      // of each frame the encoded batch, nil where it could not be opened
	Hashes []change.Hash // of each frame the chain hash

	entries []byte // where Plain lies
}

// rooms keeps the memory of blocks that were given back: a long segment needs that of a few blocks only.
var rooms sync.Pool

// Recycle gives the memory of a block back. Nothing of the block may be used any more.
func Recycle(b Block) {
	if cap(b.entries) > 0 && cap(b.Raw) <= 4*blockRaw {
		clear(b.Frames)
		clear(b.Plain)
		rooms.Put(&Block{b.Raw[:0], b.Frames[:0], b.Plain[:0], b.Hashes[:0], b.entries[:0]})
	}
}

func room() Block {
	if b, ok := rooms.Get().(*Block); ok {
		return *b
	}
	return Block{}
}

// Reader reads a segment block by block.
type Reader struct {
	Header
	r      io.Reader
	sum    hash.Hash
	ring   *key.Ring
	seal   key.Secret
	n      int // blocks
	frames uint32
	last   uint64
	head   change.Hash
	raw    int
	taken  int
	done   bool
	name   [32]byte
	sealed []byte    // the block that was read last
	ahead  chan read // see Ahead
	stop   chan struct{}
}

type read struct {
	b   Block
	err error
}

// NewReader reads and checks the header. The error is change.ErrNoKey where the epoch's key is
// missing, ErrIncomplete, ErrUnsigned, change.ErrNewer or change.ErrMalformed otherwise.
func NewReader(r io.Reader, ring *key.Ring) (*Reader, error) {
	head := make([]byte, HeaderSize)
	if n, err := io.ReadFull(r, head); err != nil {
		return nil, short(err, n)
	}
	h, err := ParseHeader(head)
	if err != nil {
		return nil, err
	}
	s, ok := ring.Secret(h.Epoch)
	if !ok {
		return nil, fmt.Errorf("segment of stream %s: %w (%d)", h.Stream, change.ErrNoKey, h.Epoch)
	}
	rd := &Reader{Header: h, r: r, sum: sha256.New(), ring: ring, seal: s.Derive("segments"), last: h.First - 1, head: h.Prev, taken: HeaderSize}
	rd.sum.Write(head)
	return rd, nil
}

func short(err error, n int) error {
	if errors.Is(err, io.EOF) || errors.Is(err, io.ErrUnexpectedEOF) {
		return fmt.Errorf("segment: %w after %d bytes", ErrIncomplete, n)
	}
	return err
}

// Next returns the next block; its memory is the caller's, who may hand it to Recycle. The error io.EOF means that the
// segment was complete and everything in it fits together; what was returned before any other
// error must be thrown away, or may be kept as far as it follows what the caller holds.
func (r *Reader) Next() (Block, error) {
	if r.ahead != nil {
		x, ok := <-r.ahead
		if !ok {
			return Block{}, io.EOF
		}
		return x.b, x.err
	}
	return r.next()
}

// Ahead begins to read the whole segment in the background, so that several can be opened at once. Call Stop
// if Next is not called to the end.
func (r *Reader) Ahead() {
	ahead, stop := make(chan read, 16), make(chan struct{})
	r.ahead, r.stop = ahead, stop
	go func() {
		defer close(ahead)
		for {
			b, err := r.next()
			select {
			case ahead <- read{b, err}:
			case <-stop:
				return
			}
			if err != nil {
				return
			}
		}
	}()
}

// Stop ends reading ahead.
func (r *Reader) Stop() {
	if r.stop != nil {
		close(r.stop)
		for range r.ahead {
		}
		r.ahead, r.stop = nil, nil
	}
}

func (r *Reader) next() (Block, error) {
	if r.done {
		return Block{}, io.EOF
	}
	var n [4]byte
	if _, err := io.ReadFull(r.r, n[:]); err != nil {
		return Block{}, short(err, r.taken)
	}
	r.sum.Write(n[:])
	size := int(binary.BigEndian.Uint32(n[:]))
	if size == 0 {
		return Block{}, r.finish()
	}
	if size > maxSealed || r.taken+size > MaxSize {
		return Block{}, fmt.Errorf("%w: a block of %d bytes", change.ErrMalformed, size)
	}
	if cap(r.sealed) < size {
		r.sealed = make([]byte, size)
	}
	sealed := r.sealed[:size]
	if n, err := io.ReadFull(r.r, sealed); err != nil {
		return Block{}, short(err, r.taken+n)
	}
	r.sum.Write(sealed)
	r.taken += 4 + size
	packed, err := r.seal.Open(sealed, blockContext(r.Stream, r.First, r.n))
	if err != nil {
		return Block{}, fmt.Errorf("block %d of a segment of stream %s: %w", r.n, r.Stream, err)
	}
	r.n++
	b := room()
	d := decoders.Get().(*zstd.Decoder)
	b.entries, err = d.DecodeAll(packed, b.entries)
	decoders.Put(d)
	if err != nil {
		return Block{}, fmt.Errorf("%w: a block does not unpack: %s", change.ErrMalformed, err)
	}
	return r.unpack(b)
}

func (r *Reader) finish() error {
	var got [32]byte
	want := [32]byte(r.sum.Sum(nil))
	if _, err := io.ReadFull(r.r, got[:]); err != nil {
		return short(err, r.taken)
	}
	if got != want {
		return fmt.Errorf("segment of stream %s: %w: its trailing hash does not fit", r.Stream, ErrIncomplete)
	}
	if n, err := io.ReadFull(r.r, make([]byte, 1)); n > 0 || !errors.Is(err, io.EOF) {
		return fmt.Errorf("%w: a segment goes on behind its end", change.ErrMalformed)
	}
	if r.frames != r.Frames || r.last != r.Last || r.head != r.Hash {
		return fmt.Errorf("%w: a segment of stream %s does not reach the head it names", change.ErrMalformed, r.Stream)
	}
	r.done, r.name = true, want
	return io.EOF
}

// Name returns the trailing hash once Next has returned io.EOF.
func (r *Reader) Name() [32]byte { return r.name }

// unpack makes frames of the entries of a block.
func (r *Reader) unpack(b Block) (Block, error) {
	entries := b.entries
	bad := func(what string) (Block, error) {
		return Block{}, fmt.Errorf("%w: segment of stream %s behind %d: %s", change.ErrMalformed, r.Stream, r.last, what)
	}
	if need := len(entries) + len(entries)/2; cap(b.Raw) < need {
		b.Raw = make([]byte, 0, need)
	}
	number := func() (uint64, bool) {
		v, n := binary.Uvarint(entries)
		if n <= 0 || n > 1 && entries[n-1] == 0 {
			return 0, false
		}
		entries = entries[n:]
		return v, true
	}
	for len(entries) > 0 {
		kind := entries[0]
		entries = entries[1:]
		var f change.Frame
		var plain []byte
		var err error
		switch kind {
		case entryRaw:
			n, ok := number()
			if !ok || n > change.MaxFrame || n > uint64(len(entries)) {
				return bad("a frame's length is wrong")
			}
			if f, err = change.ParseFrame(entries[:n]); err != nil || len(f.Raw) != int(n) {
				return bad("a frame is not whole")
			}
			b.Raw = append(b.Raw, f.Raw...)
			entries = entries[n:]
		case entryOpened:
			epoch, ok := number()
			if !ok || epoch > 1<<32-1 || len(entries) == 0 {
				return bad("an epoch is wrong")
			}
			minor := entries[0]
			entries = entries[1:]
			count, ok := number()
			if !ok || count == 0 || count > change.MaxChanges || len(entries) < 24 {
				return bad("a number of changes is wrong")
			}
			nonce := entries[:24]
			entries = entries[24:]
			n, ok := number()
			if !ok || n > uint64(len(entries)) {
				return bad("a batch's length is wrong")
			}
			plain = entries[:n:n]
			entries = entries[n:]
			h := change.Header{Major: change.Major, Minor: minor, Suite: change.SuiteXChaCha20Poly1305, Epoch: uint32(epoch), Stream: r.Stream, First: r.last + 1, Last: r.last + count, Prev: r.head}
			if b.Raw, f, err = change.Reseal(b.Raw, h, nonce, plain, r.ring); err != nil {
				return Block{}, fmt.Errorf("segment of stream %s behind %d: %w", r.Stream, r.last, err)
			}
		default:
			return bad("an entry of an unknown kind")
		}
		if f.Stream != r.Stream || f.First != r.last+1 || f.Prev != r.head || f.Last > r.Last {
			return bad("a frame does not follow the one before it")
		}
		r.last, r.head = f.Last, f.Hash()
		b.Hashes = append(b.Hashes, r.head)
		if r.frames++; r.frames > r.Frames {
			return bad("there are more frames than the header says")
		}
		if r.raw += len(f.Raw); r.raw > MaxRaw {
			return bad("its frames are too many bytes")
		}
		b.Frames = append(b.Frames, f)
		b.Plain = append(b.Plain, plain)
	}
	at := 0
	for i := range b.Frames { // growing may have moved the memory
		end := at + b.Frames[i].Size()
		b.Frames[i].Raw = b.Raw[at:end:end]
		at = end
	}
	return b, nil
}
