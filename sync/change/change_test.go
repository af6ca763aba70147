package change_test

import (
	"bytes"
	"crypto/cipher"
	"crypto/sha256"
	"errors"
	"io"
	"math/rand/v2"
	"testing"
	"testing/iotest"
	"time"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
)

// keys is a set of frame keys by epoch, each made from the epoch's number.
type keys []uint32

func (k keys) Frames(epoch uint32) (cipher.AEAD, bool) {
	for _, e := range k {
		if e == epoch {
			sum := sha256.Sum256([]byte{byte(e)})
			a, err := change.NewAEAD(sum[:])
			return a, err == nil
		}
	}
	return nil, false
}

// keyring has one epoch and keeps its cipher, as the program's keys do.
var keyring = func() change.Keys {
	a, _ := keys{1}.Frames(1)
	return fixed{a}
}()

type fixed struct{ aead cipher.AEAD }

func (f fixed) Frames(epoch uint32) (cipher.AEAD, bool) { return f.aead, epoch == 1 }

var stream = change.Stream{Device: change.Incarnation{1, 2, 3}, Site: change.Site{4, 5, 6}}

func genID() *rapid.Generator[change.ID] {
	return rapid.Custom(func(t *rapid.T) change.ID {
		id := change.ID(rapid.SliceOfN(rapid.Byte(), 16, 16).Draw(t, "id"))
		id[0] |= 1
		return id
	})
}

func genIDs(t *rapid.T, name string, not change.ID) []change.ID {
	var out []change.ID
	for _, id := range rapid.SliceOfNDistinct(genID(), 0, 5, rapid.ID[change.ID]).Draw(t, name) {
		if id != not {
			out = append(out, id)
		}
	}
	for i := range out {
		for j := i; j > 0 && out[j].Compare(out[j-1]) < 0; j-- {
			out[j], out[j-1] = out[j-1], out[j]
		}
	}
	return out
}

func genBatch() *rapid.Generator[change.Batch] {
	return rapid.Custom(func(t *rapid.T) change.Batch {
		b := change.Batch{Stream: stream, First: rapid.Uint64Range(1, 1<<62).Draw(t, "first"), Examiner: rapid.StringN(0, 40, 200).Draw(t, "examiner")}
		for i := range rapid.IntRange(1, 6).Draw(t, "changes") {
			c := change.Change{
				Stream: stream, Seq: b.First + uint64(i), Examiner: b.Examiner,
				ID: genID().Draw(t, "id"), Time: change.HLC(rapid.Uint64().Draw(t, "time")),
				Kind: change.Kind(rapid.Uint16Range(1, 65535).Draw(t, "kind")), Field: rapid.StringN(1, 30, 100).Draw(t, "field"),
				Patient: exam.ID(genID().Draw(t, "patient")), Record: exam.ID(genID().Draw(t, "record")),
				Act: change.Act(rapid.Uint8().Draw(t, "act")), Reason: rapid.StringN(1, 30, 100).Draw(t, "reason"),
				Before: rapid.Uint64().Draw(t, "before"),
			}
			if v := rapid.SliceOfN(rapid.Byte(), 0, 300).Draw(t, "value"); len(v) > 0 {
				c.Value = v
			}
			c.Supersedes = genIDs(t, "supersedes", c.ID)
			c.Seen = genIDs(t, "seen", change.ID{})
			b.Changes = append(b.Changes, c)
		}
		return b
	})
}

func TestBatchRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := genBatch().Draw(t, "batch")
		data, err := change.EncodeBatch(b)
		require.NoError(t, err)
		got, err := change.DecodeBatch(data, b.Stream, b.First, change.Minor)
		require.NoError(t, err)
		require.Equal(t, b, got)
		for _, c := range b.Changes {
			data, err := change.Marshal(c)
			require.NoError(t, err)
			got, err := change.Unmarshal(data)
			require.NoError(t, err)
			require.Equal(t, c, got)
		}
	})
}

func TestFrameRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := genBatch().Draw(t, "batch")
		var prev change.Hash
		if b.First > 1 {
			prev = change.Hash{1}
		}
		f, err := change.Seal(b, prev, 7, keys{7})
		require.NoError(t, err)
		again, err := change.ParseFrame(append(bytes.Clone(f.Raw), "more"...))
		require.NoError(t, err)
		require.Equal(t, f, again)
		got, err := change.Open(again, keys{7})
		require.NoError(t, err)
		require.Equal(t, b, got)

		_, err = change.Open(f, keys{8})
		require.ErrorIs(t, err, change.ErrNoKey)

		// Any flipped bit is noticed: in the header by its checksum, in the body by the seal.
		at := rapid.IntRange(0, len(f.Raw)*8-1).Draw(t, "bit")
		bad := bytes.Clone(f.Raw)
		bad[at/8] ^= 1 << (at % 8)
		if f, err := change.ParseFrame(bad); err == nil {
			_, err = change.Open(f, keys{7})
			require.ErrorIs(t, err, change.ErrSealed)
		} else {
			require.ErrorIs(t, err, change.ErrMalformed)
		}
		// So is every cut.
		_, err = change.ParseFrame(f.Raw[:rapid.IntRange(0, len(f.Raw)-1).Draw(t, "cut")])
		require.ErrorIs(t, err, change.ErrCut)
	})
}

// TestOpenerOpensTheSame: batches of one Opener stand side by side until Reset, and what its memory held
// before does not show.
func TestOpenerOpensTheSame(t *testing.T) {
	var o change.Opener
	rapid.Check(t, func(t *rapid.T) {
		o.Reset()
		var want, got []change.Batch
		for range rapid.IntRange(1, 20).Draw(t, "frames") {
			batch := genBatch().Draw(t, "batch")
			var prev change.Hash
			if batch.First > 1 {
				prev = change.Hash{1}
			}
			f, err := change.Seal(batch, prev, 7, keys{7})
			require.NoError(t, err)
			b, err := change.Open(f, keys{7})
			require.NoError(t, err)
			want = append(want, b)
			_, err = o.Open(f, keys{8})
			require.ErrorIs(t, err, change.ErrNoKey)
			b, err = o.Open(f, keys{7})
			require.NoError(t, err)
			got = append(got, b)
		}
		require.Equal(t, want, got)
	})
}

// journal makes n chained frames of one change each.
func journal(t testing.TB, n int) (frames []change.Frame, data []byte) {
	var prev change.Hash
	for i := range n {
		b := change.Batch{Stream: stream, First: uint64(i + 1), Examiner: "R. Okafor", Changes: []change.Change{{
			ID: change.NewID(), Time: change.HLCAt(time.Now()), Kind: change.KindVisit, Field: "note", Value: bytes.Repeat([]byte{0x41}, i%50+1),
		}}}
		f, err := change.Seal(b, prev, 1, keys{1})
		require.NoError(t, err)
		prev = f.Hash()
		frames, data = append(frames, f), append(data, f.Raw...)
	}
	return frames, data
}

func scan(t testing.TB, r io.Reader) (frames []change.Frame, damaged int64) {
	s := change.NewScanner(r, 0)
	var at int64
	for {
		p, err := s.Next()
		if errors.Is(err, io.EOF) {
			return frames, damaged
		}
		require.NoError(t, err)
		require.Equal(t, at, p.Offset, "pieces must join")
		require.Positive(t, p.Length)
		at += p.Length
		switch {
		case p.Damage == nil:
			require.EqualValues(t, p.Length, len(p.Frame.Raw))
			frames = append(frames, p.Frame)
		case !p.Blank:
			damaged += p.Length
		}
	}
}

func TestScanFindsAll(t *testing.T) {
	frames, data := journal(t, 200)
	blank := append(bytes.Clone(data), make([]byte, 200_000)...)
	for name, r := range map[string]io.Reader{
		"whole": bytes.NewReader(data), "preallocated": bytes.NewReader(blank), "bytewise": iotest.OneByteReader(bytes.NewReader(data)),
		"error with data": iotest.DataErrReader(bytes.NewReader(data)),
	} {
		t.Run(name, func(t *testing.T) {
			got, damaged := scan(t, r)
			require.Zero(t, damaged)
			require.Equal(t, frames, got)
		})
	}
}

// One fault costs at most the frame it hits, and the one behind it where a cut reaches into it.
func TestScanAfterFaults(t *testing.T) {
	seed := rand.Uint64()
	t.Logf("seed %d", seed)
	rng := rand.New(rand.NewPCG(seed, 1))
	frames, data := journal(t, 60)
	rounds := 300
	for range rounds {
		bad := bytes.Clone(data)
		lost := 1
		switch rng.IntN(4) {
		case 0: // a bit flips
			at := rng.IntN(len(bad))
			bad[at] ^= 1 << rng.IntN(8)
		case 1: // bytes are missing, at most a frame's header
			at := rng.IntN(len(bad) - 50)
			bad = append(bad[:at], bad[at+1+rng.IntN(50):]...)
			lost = 2
		case 2: // bytes were put in
			at := rng.IntN(len(bad))
			junk := make([]byte, 1+rng.IntN(300))
			for i := range junk {
				junk[i] = byte(rng.Uint32())
			}
			bad = append(bad[:at:at], append(junk, bad[at:]...)...)
		case 3: // the end is cut
			at := rng.IntN(len(bad))
			bad = bad[:at]
			lost = len(frames)
		}
		got, _ := scan(t, bytes.NewReader(bad))
		good := map[change.Hash]bool{}
		for _, f := range got {
			if _, err := change.Open(f, keys{1}); err == nil {
				good[f.Hash()] = true
			}
		}
		missing := 0
		for i, f := range frames {
			if !good[f.Hash()] {
				missing++
				if lost == len(frames) {
					// after a cut, everything before it must be there
					end := 0
					for _, g := range frames[:i+1] {
						end += len(g.Raw)
					}
					require.Greater(t, end, len(bad), "frame %d lies before the cut", i)
				}
			}
		}
		require.LessOrEqual(t, missing, lost)
		require.LessOrEqual(t, len(good), len(frames))
	}
}

func TestReaderErrorIsReported(t *testing.T) {
	_, data := journal(t, 3)
	s := change.NewScanner(io.MultiReader(bytes.NewReader(data), iotest.ErrReader(errors.New("the stick was pulled"))), 0)
	var err error
	for err == nil {
		_, err = s.Next()
	}
	require.EqualError(t, err, "the stick was pulled")
}

func TestValidate(t *testing.T) {
	good := change.Change{ID: change.NewID(), Kind: change.KindVisit, Field: "note"}
	require.NoError(t, good.Validate())
	for name, spoil := range map[string]func(*change.Change){
		"no id":            func(c *change.Change) { c.ID = change.ID{} },
		"no kind":          func(c *change.Change) { c.Kind = 0 },
		"no field":         func(c *change.Change) { c.Field = "" },
		"long field":       func(c *change.Change) { c.Field = string(make([]byte, change.MaxField+1)) },
		"not UTF-8":        func(c *change.Change) { c.Field = "\xff" },
		"long value":       func(c *change.Change) { c.Value = make([]byte, change.MaxValue+1) },
		"no reason":        func(c *change.Change) { c.Act = change.Amend },
		"unordered":        func(c *change.Change) { c.Supersedes = []change.ID{{2}, {1}} },
		"twice":            func(c *change.Change) { c.Seen = []change.ID{{2}, {2}} },
		"supersedes self":  func(c *change.Change) { c.Supersedes = []change.ID{c.ID} },
		"too many to list": func(c *change.Change) { c.Supersedes = make([]change.ID, change.MaxSupersedes+1) },
	} {
		t.Run(name, func(t *testing.T) {
			c := good
			spoil(&c)
			require.ErrorIs(t, c.Validate(), change.ErrMalformed)
			_, err := change.EncodeBatch(change.Batch{Stream: stream, First: 1, Changes: []change.Change{c}})
			require.ErrorIs(t, err, change.ErrMalformed)
		})
	}
}

func TestClockNeverFallsOrRepeats(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		now := time.Date(2026, 3, 2, 10, 0, 0, 0, time.UTC)
		c := change.NewClock(func() time.Time { return now }, 0)
		var last change.HLC
		for range rapid.IntRange(1, 60).Draw(t, "steps") {
			switch rapid.IntRange(0, 2).Draw(t, "step") {
			case 0:
				got := c.Tick()
				if got <= last {
					t.Fatalf("%s after %s", got, last)
				}
				last = got
			case 1:
				now = now.Add(time.Duration(rapid.Int64Range(-int64(900*24*time.Hour), int64(900*24*time.Hour)).Draw(t, "jump")))
			case 2:
				other := change.HLCAt(now.Add(time.Duration(rapid.Int64Range(-int64(72*time.Hour), int64(72*time.Hour)).Draw(t, "other"))))
				adopted := c.Observe(other)
				if adopted == other.Ahead(now) {
					t.Fatalf("%s seen at %s: adopted %v", other, now, adopted)
				}
				if adopted && c.Tick() <= other {
					t.Fatal("an adopted reading must be passed")
				}
				last = c.Last()
			}
		}
	})
}

func TestClockDoesNotGoOnFromAFarFuture(t *testing.T) {
	now := time.Date(2026, 3, 2, 10, 0, 0, 0, time.UTC)
	at := func() time.Time { return now }
	require.Less(t, change.NewClock(at, change.HLCAt(now.Add(48*time.Hour))).Tick().Time(), now.Add(time.Hour))
	near := change.HLCAt(now.Add(23 * time.Hour))
	require.Equal(t, near+1, change.NewClock(at, near).Tick())
}
