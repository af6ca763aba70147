package segment_test

import (
	"bytes"
	"errors"
	"io"
	"math/rand/v2"
	"testing"
	"testing/iotest"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/segment"
)

var (
	bag    = must(key.NewBag(exam.ID{1}))
	stream = change.Stream{Device: change.Incarnation{1}, Site: change.Site{2}}
)

func must[T any](v T, err error) T {
	if err != nil {
		panic(err)
	}
	return v
}

// frames makes n chained frames that look like findings.
func frames(t testing.TB, ring *key.Ring, n int) []change.Frame {
	var prev change.Hash
	var out []change.Frame
	next := uint64(1)
	for i := range n {
		b := change.Batch{Stream: stream, First: next, Examiner: "R. Okafor"}
		for range 1 + i%3/2 {
			b.Changes = append(b.Changes, change.Change{
				ID: change.NewID(), Time: change.HLC(i+1) << 16, Kind: change.KindVisit, Patient: exam.ID{3, byte(i >> 8)}, Record: exam.ID{4, byte(i >> 4)},
				Field: "finding/patellar pelvic-left", Value: []byte{0xa1, 0x01, byte(i)}, Supersedes: []change.ID{change.NewID()},
			})
		}
		f, err := change.Seal(b, prev, ring.Current(), ring)
		require.NoError(t, err)
		prev, next = f.Hash(), b.Last()+1
		out = append(out, f)
	}
	return out
}

func build(t testing.TB, ring *key.Ring, fs []change.Frame) ([]byte, [32]byte) {
	b := segment.NewBuilder(ring)
	for _, f := range fs {
		require.NoError(t, b.Add(f))
	}
	var w bytes.Buffer
	h, name, err := b.Finish(&w, segment.Sign(b.Head(), bag.Device))
	require.NoError(t, err)
	require.EqualValues(t, len(fs), h.Frames)
	require.Equal(t, name[:], w.Bytes()[w.Len()-32:])
	return w.Bytes(), name
}

func read(r io.Reader, ring *key.Ring) (out []change.Frame, err error) {
	rd, err := segment.NewReader(r, ring)
	if err != nil {
		return nil, err
	}
	for {
		b, err := rd.Next()
		if errors.Is(err, io.EOF) {
			return out, nil
		}
		if err != nil {
			return out, err
		}
		out = append(out, b.Frames...)
		if !bytes.Equal(b.Raw, joined(b.Frames)) {
			return out, errors.New("a block's bytes are not its frames")
		}
	}
}

func joined(fs []change.Frame) []byte {
	var b []byte
	for _, f := range fs {
		b = append(b, f.Raw...)
	}
	return b
}

func TestFramesComeBackByteForByte(t *testing.T) {
	for _, n := range []int{1, 2, 100, 9000} {
		fs := frames(t, bag.Ring, n)
		data, name := build(t, bag.Ring, fs)
		got, err := read(bytes.NewReader(data), bag.Ring)
		require.NoError(t, err)
		require.Equal(t, fs, got)
		t.Logf("%d frames of %d bytes: segment of %d", n, len(joined(fs)), len(data))
		if n >= 100 {
			require.Less(t, len(data), len(joined(fs))*2/3, "many frames are compressed")
		}
		if n == 100 {
			got, err := read(iotest.OneByteReader(bytes.NewReader(data)), bag.Ring)
			require.NoError(t, err)
			require.Len(t, got, n)
			again, err := segment.NewReader(bytes.NewReader(data), bag.Ring)
			require.NoError(t, err)
			for err == nil {
				_, err = again.Next()
			}
			require.Equal(t, name, again.Name())
		}
	}
}

func TestUnknownFramesTravelAsTheyAre(t *testing.T) {
	other := bag.Ring.Next()
	fs := frames(t, other, 20) // sealed in epoch 2
	data, _ := build(t, bag.Ring, fs)
	got, err := read(bytes.NewReader(data), bag.Ring)
	require.NoError(t, err)
	require.Equal(t, fs, got)
	for _, f := range got {
		_, err := change.Open(f, bag.Ring)
		require.ErrorIs(t, err, change.ErrNoKey)
		_, err = change.Open(f, other)
		require.NoError(t, err)
	}
}

func TestFramesMustFollow(t *testing.T) {
	fs := frames(t, bag.Ring, 5)
	b := segment.NewBuilder(bag.Ring)
	require.NoError(t, b.Add(fs[1]))
	require.ErrorIs(t, b.Add(fs[3]), change.ErrMalformed)
	require.NoError(t, b.Add(fs[2]))
	_, _, err := b.Finish(io.Discard, segment.Sign(segment.Head{Stream: stream, Last: 9}, bag.Device))
	require.Error(t, err)
}

func TestEveryFlippedByteAndEveryCutIsNoticed(t *testing.T) {
	fs := frames(t, bag.Ring, 30)
	data, _ := build(t, bag.Ring, fs)
	for at := range data {
		bad := bytes.Clone(data)
		bad[at] ^= 1 << (at % 8)
		got, err := read(bytes.NewReader(bad), bag.Ring)
		require.Error(t, err, "byte %d", at)
		for i, f := range got { // whatever came before the error is true
			require.Equal(t, fs[i], f)
		}
		_, err = read(bytes.NewReader(data[:at]), bag.Ring)
		require.ErrorIs(t, err, segment.ErrIncomplete, "cut at %d", at)
	}
	_, err := read(bytes.NewReader(append(bytes.Clone(data), 0)), bag.Ring)
	require.ErrorIs(t, err, change.ErrMalformed)
}

func TestForeignSegmentsAreTold(t *testing.T) {
	data, _ := build(t, bag.Ring, frames(t, bag.Ring, 3))
	foreign := must(key.NewBag(exam.ID{2}))
	_, err := read(bytes.NewReader(data), foreign.Ring)
	require.ErrorIs(t, err, change.ErrSealed)

	later := bag.Ring.Next()
	only, err := key.NewRing(later.Epochs()[1])
	require.NoError(t, err)
	_, err = read(bytes.NewReader(data), only)
	require.ErrorIs(t, err, change.ErrNoKey)

	s := segment.Sign(segment.Head{Stream: stream, Last: 3}, bag.Device)
	require.NoError(t, s.Check())
	s.Last = 4
	require.ErrorIs(t, s.Check(), segment.ErrUnsigned)
	s = segment.Sign(segment.Head{Stream: stream, Last: 3}, bag.Device)
	again, err := segment.ParseSigned(segment.AppendSigned(nil, s))
	require.NoError(t, err)
	require.Equal(t, s, again)
}

// Random bytes inside a sealed block stand for a hostile member: it has the key and can seal
// anything.
func TestHostileBlocksAreRefused(t *testing.T) {
	seed := rand.Uint64()
	t.Logf("seed %d", seed)
	rng := rand.New(rand.NewPCG(seed, 1))
	fs := frames(t, bag.Ring, 3)
	for range 2000 {
		entries := make([]byte, rng.IntN(200))
		for i := range entries {
			entries[i] = byte(rng.Uint32())
		}
		if len(entries) > 0 {
			entries[0] = byte(rng.IntN(3))
		}
		data := segment.BuildRaw(bag, fs, entries)
		got, err := read(bytes.NewReader(data), bag.Ring)
		require.Error(t, err)
		require.LessOrEqual(t, len(got), 1)
	}
	bomb := segment.BuildRaw(bag, fs, make([]byte, 512<<20))
	require.Less(t, len(bomb), 1<<20)
	_, err := read(bytes.NewReader(bomb), bag.Ring)
	require.ErrorIs(t, err, change.ErrMalformed)
}

func FuzzReader(f *testing.F) {
	ring := must(key.NewRing(key.Epoch{Number: 1, Secret: key.Secret{5}}))
	for _, n := range []int{1, 5} {
		data, _ := build(f, ring, frames(f, ring, n))
		f.Add(data)
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		_, _ = read(bytes.NewReader(data), ring)
	})
}

// FuzzEntries looks at what is inside a sealed block.
func FuzzEntries(f *testing.F) {
	fs := frames(f, bag.Ring, 3)
	f.Add([]byte{})
	f.Add(append([]byte{0, 0x80, 0x02}, fs[0].Raw...))
	f.Fuzz(func(t *testing.T, entries []byte) {
		got, _ := read(bytes.NewReader(segment.BuildRaw(bag, fs, entries)), bag.Ring)
		last := change.Hash{}
		for _, g := range got {
			if g.Prev != last {
				t.Fatal("frames that do not follow each other")
			}
			last = g.Hash()
		}
	})
}

func BenchmarkRead(b *testing.B) {
	fs := frames(b, bag.Ring, 20_000)
	data, _ := build(b, bag.Ring, fs)
	b.SetBytes(int64(len(joined(fs))))
	for b.Loop() {
		if _, err := read(bytes.NewReader(data), bag.Ring); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/20_000, "ns/frame")
}

func BenchmarkBuild(b *testing.B) {
	fs := frames(b, bag.Ring, 20_000)
	b.SetBytes(int64(len(joined(fs))))
	for b.Loop() {
		build(b, bag.Ring, fs)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/20_000, "ns/frame")
}
