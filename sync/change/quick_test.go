package change

import (
	"bytes"
	"math/rand/v2"
	"reflect"
	"testing"
	"time"

	"cordwalk.example/cordwalk/exam"
)

// both decodes with and without the shortcut; they must agree.
func both(t testing.TB, data []byte) bool {
	t.Helper()
	s := Stream{Incarnation{1}, Site{2}}
	q, ok := quickBatch(data, s, 5, nil)
	b, err := slowBatch(data, s, 5, Minor)
	if !ok {
		return false
	}
	if err != nil {
		t.Fatalf("the shortcut takes what is refused (%v): %x", err, data)
	}
	if !reflect.DeepEqual(q, b) {
		t.Fatalf("the shortcut reads something else:\n%+v\n%+v", q, b)
	}
	return true
}

func randomBatch(r *rand.Rand) Batch {
	id := func() (x ID) {
		for i := range x {
			x[i] = byte(r.IntN(256))
		}
		return x
	}
	ids := func(n int) (xs []ID) {
		for range n {
			xs = append(xs, id())
		}
		if len(xs) > 1 && xs[0].Compare(xs[1]) > 0 {
			xs[0], xs[1] = xs[1], xs[0]
		}
		return xs
	}
	text := func() string {
		return []string{"", "a", "finding/patellar/pelvic-left", string(bytes.Repeat([]byte("é"), 90))}[r.IntN(4)]
	}
	b := Batch{Examiner: text()}
	for range 1 + r.IntN(3) {
		c := Change{ID: id(), Time: HLC(r.Uint64() >> r.IntN(64)), Kind: Kind(1 + r.IntN(300)), Field: "f" + text(), Reason: text(), Before: r.Uint64() >> r.IntN(64),
			Act: Act(r.IntN(3)), Supersedes: ids(r.IntN(3)), Seen: ids(r.IntN(3))}
		if r.IntN(2) == 0 {
			c.Patient, c.Record = exam.ID(id()), exam.ID(id())
		}
		if n := r.IntN(400); n > 100 {
			c.Value = bytes.Repeat([]byte{7}, n)
		}
		if c.Act.AfterClosing() && c.Reason == "" {
			c.Reason = "typo"
		}
		b.Changes = append(b.Changes, c)
	}
	return b
}

func TestShortcutDecodesTheSame(t *testing.T) {
	seed := uint64(time.Now().UnixNano())
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 3))
	for range 2000 {
		b := randomBatch(r)
		b.First = 5
		data, err := EncodeBatch(b)
		if err != nil {
			t.Fatal(err)
		}
		if !both(t, data) {
			t.Fatalf("the shortcut does not take a usual batch: %x", data)
		}
		for range 20 { // and never takes what is malformed
			d := bytes.Clone(data)
			d[r.IntN(len(d))] ^= 1 << r.IntN(8)
			both(t, d)
			both(t, data[:r.IntN(len(data))])
		}
	}
}

func FuzzShortcut(f *testing.F) {
	r := rand.New(rand.NewPCG(1, 3))
	for range 20 {
		b := randomBatch(r)
		b.First = 5
		data, err := EncodeBatch(b)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(data)
	}
	f.Fuzz(func(t *testing.T, data []byte) { both(t, data) })
}
