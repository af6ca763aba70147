package merge_test

import (
	"bytes"
	"fmt"
	"maps"
	"math/rand/v2"
	"os"
	"slices"
	"testing"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/merge"
)

// The model is a store of registers with version vectors, a different way to the same answer:
// a write's vv is the join of the vectors of all writes its writer knew in that field, plus
// one dot of its own; a write is current if no other vv covers its dot. It shares no code
// with the package.

type vv map[int]int // writer → dots

func (v vv) covers(d dot) bool { return v[d.writer] >= d.n }

func (v vv) join(w vv) {
	for k, n := range w {
		v[k] = max(v[k], n)
	}
}

type dot struct{ writer, n int }

type modelWrite struct {
	dot   dot
	past  vv // includes dot
	value string
	after bool // its writer knew of the closing
	// seenBy holds, for a closing, what was seen of each field.
	seenBy map[merge.Key]vv
}

// device of the simulation. A device that is restored becomes another writer.
type device struct {
	writer  int
	streams [2]change.Stream
	next    [2]uint64
	prev    [2]change.Hash
	clock   *change.Clock
	have    [2]map[change.ID]bool // changes known, by site
	got     map[change.Stream]int // frames taken of each stream
	state   [2]*merge.State
}

type history struct {
	rng     *rand.Rand
	keys    change.Keys
	devices []*device
	frames  map[change.Stream][]change.Frame
	site    map[change.Stream]int
	model   map[change.ID]modelWrite
	key     map[change.ID]merge.Key
	counts  map[merge.Key]map[int]int // dots given, by field and writer
	writers int
	now     time.Time
	values  int
}

var sites = [2]change.Site{{0xa}, {0xb}}

func newHistory(rng *rand.Rand, keys change.Keys) *history {
	h := &history{rng: rng, keys: keys, frames: map[change.Stream][]change.Frame{}, site: map[change.Stream]int{}, model: map[change.ID]modelWrite{}, key: map[change.ID]merge.Key{},
		counts: map[merge.Key]map[int]int{}, now: time.Date(2026, 3, 2, 9, 0, 0, 0, time.UTC)}
	for range 2 + rng.IntN(4) {
		d := &device{got: map[change.Stream]int{}}
		for s := range d.state {
			d.state[s], d.have[s] = &merge.State{}, map[change.ID]bool{}
		}
		h.incarnate(d)
		h.devices = append(h.devices, d)
	}
	return h
}

// incarnate makes d a new writer with streams of its own.
func (h *history) incarnate(d *device) {
	h.writers++
	d.writer = h.writers
	skew := time.Duration(h.rng.IntN(5)-2) * 400 * 24 * time.Hour // clocks take no part, so they may be wrong
	d.clock = change.NewClock(func() time.Time { return h.now.Add(skew) }, 0)
	inc := change.Incarnation{byte(h.writers >> 8), byte(h.writers), 1}
	for s := range sites {
		d.streams[s] = change.Stream{Device: inc, Site: sites[s]}
		h.site[d.streams[s]] = s
		d.next[s], d.prev[s] = 1, change.Hash{}
	}
}

func (h *history) id() change.ID {
	h.values++
	// Ids in no order that says anything about time.
	id := change.ID{6: 0x70, 8: 0x80, 14: byte(h.values >> 8), 15: byte(h.values)}
	id[0] = byte(h.rng.Uint32())
	return id
}

// write makes a batch of one device at one site, seals it, and notes it in the model.
func (h *history) write(d *device, site int, cs ...change.Change) {
	b := change.Batch{Stream: d.streams[site], First: d.next[site], Examiner: fmt.Sprint("writer ", d.writer), Changes: cs}
	for i := range b.Changes {
		c := &b.Changes[i]
		c.ID, c.Time = h.id(), d.clock.Tick()
		k := merge.KeyOf(*c)
		w := modelWrite{past: vv{}, value: string(c.Value), after: c.Act.AfterClosing()}
		for id := range d.have[site] {
			if h.key[id] == k {
				w.past.join(h.model[id].past)
			}
			if c.Field == change.FieldClosed && h.key[id].Record == c.Record && h.key[id].Field != change.FieldClosed {
				if w.seenBy == nil {
					w.seenBy = map[merge.Key]vv{}
				}
				o := h.key[id]
				if w.seenBy[o] == nil {
					w.seenBy[o] = vv{}
				}
				w.seenBy[o].join(h.model[id].past)
			}
		}
		if h.counts[k] == nil {
			h.counts[k] = map[int]int{}
		}
		h.counts[k][d.writer]++
		w.dot = dot{d.writer, h.counts[k][d.writer]}
		w.past[d.writer] = w.dot.n
		h.model[c.ID], h.key[c.ID] = w, k
	}
	f, err := change.Seal(b, d.prev[site], 1, h.keys)
	if err != nil {
		panic(err)
	}
	h.frames[b.Stream] = append(h.frames[b.Stream], f)
	d.next[site], d.prev[site] = b.Last()+1, f.Hash()
	h.deliver(d, f)
	d.got[b.Stream] = len(h.frames[b.Stream])
}

// deliver opens a frame at a device and merges it.
func (h *history) deliver(d *device, f change.Frame) {
	b, err := change.Open(f, h.keys)
	if err != nil {
		panic(err)
	}
	site := h.site[f.Stream]
	d.state[site].Add(b.Changes...)
	for _, c := range b.Changes {
		d.have[site][c.ID] = true
		d.clock.Observe(c.Time)
	}
}

var visits = [2]exam.ID{{0x10}, {0x11}}

func (h *history) step() {
	d := h.devices[h.rng.IntN(len(h.devices))]
	site := h.rng.IntN(len(sites))
	s := d.state[site]
	h.now = h.now.Add(time.Duration(h.rng.IntN(3600)) * time.Second)
	visit := visits[h.rng.IntN(len(visits))]
	k := merge.Key{Kind: change.KindVisit, Record: visit, Field: []string{"note", "finding/tone pelvic-left"}[h.rng.IntN(2)]}
	f := s.Field(k)
	c := change.Change{Kind: k.Kind, Patient: exam.ID{1}, Record: k.Record, Field: k.Field, Supersedes: f.Supersede()}
	value := func() []byte { return fmt.Appendf(nil, "v%d", h.rng.IntN(6)) } // a few, so that some agree
	closed := s.Closing(k).Closed
	switch n := h.rng.IntN(100); {
	case n < 30: // an entry or a correction; after closing an amendment
		c.Value = value()
		if h.rng.IntN(8) == 0 {
			c.Value = nil
		}
		if closed {
			c.Act, c.Reason = change.Amend, "measured again"
		}
		h.write(d, site, c)
	case n < 36: // a block of two fields in one batch
		if closed {
			return
		}
		o := c
		o.Field = "note 2"
		o.Supersedes = s.Field(merge.KeyOf(o)).Supersede()
		c.Value, o.Value = value(), value()
		h.write(d, site, c, o)
	case n < 42: // pick or accept
		if len(f.Current)+len(f.Late) < 2 {
			return
		}
		all := append(slices.Clone(f.Current), f.Late...)
		c.Value, c.Act = all[h.rng.IntN(len(all))].Value, change.Pick
		if closed {
			c.Act, c.Reason = change.Accept, "the owner confirmed it"
		}
		h.write(d, site, c)
	case n < 45: // close
		if closed {
			return
		}
		ck := merge.Key{Kind: change.KindVisit, Record: visit, Field: change.FieldClosed}
		h.write(d, site, change.Change{Kind: ck.Kind, Patient: exam.ID{1}, Record: visit, Field: ck.Field, Value: []byte{0xf5}, Seen: s.SeenBy(visit)})
	case n < 53: // join or part two of four patients
		a, b := exam.ID{byte(1 + h.rng.IntN(4))}, exam.ID{byte(1 + h.rng.IntN(4))}
		if a == b {
			return
		}
		patient, ek := merge.EdgeKey(a, b)
		e := change.Change{Kind: ek.Kind, Patient: patient, Record: ek.Record, Field: ek.Field, Supersedes: s.Field(ek).Supersede()}
		if h.rng.IntN(3) > 0 {
			e.Value = []byte{0xf5}
		}
		h.write(d, site, e)
	case n < 56: // a restore from a backup: the device forgets, and becomes another writer
		*d = device{got: map[change.Stream]int{}}
		for s := range d.state {
			d.state[s], d.have[s] = &merge.State{}, map[change.ID]bool{}
		}
		h.incarnate(d)
		h.exchange(d, 3)
	default:
		h.exchange(d, 1+h.rng.IntN(4))
	}
}

// exchange takes up to n rounds of frames from some streams: the next few of each, some of them
// again, in any order within what was copied.
func (h *history) exchange(d *device, n int) {
	streams := slices.SortedFunc(maps.Keys(h.frames), change.Stream.Compare)
	for range n {
		if len(streams) == 0 {
			return
		}
		s := streams[h.rng.IntN(len(streams))]
		all := h.frames[s]
		to := min(len(all), d.got[s]+h.rng.IntN(6))
		batch := slices.Clone(all[max(0, d.got[s]-h.rng.IntN(3)):to])
		h.rng.Shuffle(len(batch), func(i, j int) { batch[i], batch[j] = batch[j], batch[i] })
		for _, f := range batch {
			h.deliver(d, f)
		}
		d.got[s] = max(to, d.got[s])
	}
}

// expected works out a field's state from the model alone.
func (h *history) expected(have map[change.ID]bool, k merge.Key) (current, late []change.ID) {
	var ws []change.ID
	closed := false
	seen := vv{}
	for id := range have {
		o := h.key[id]
		if o == k {
			ws = append(ws, id)
		}
		if k.Kind == change.KindVisit && k.Field != change.FieldClosed && o.Kind == k.Kind && o.Record == k.Record && o.Field == change.FieldClosed {
			closed = true
			seen.join(h.model[id].seenBy[k])
		}
	}
	counts := func(id change.ID) bool {
		w := h.model[id]
		return !closed || w.after || seen.covers(w.dot)
	}
	for _, id := range ws {
		w := h.model[id]
		replaced, settled := false, false
		for _, o := range ws {
			v := h.model[o]
			if o != id && v.past.covers(w.dot) {
				replaced = replaced || counts(o) == counts(id)
				settled = settled || v.after
			}
		}
		switch {
		case counts(id) && !replaced:
			current = append(current, id)
		case !counts(id) && !replaced && !settled:
			late = append(late, id)
		}
	}
	slices.SortFunc(current, change.ID.Compare)
	slices.SortFunc(late, change.ID.Compare)
	return current, late
}

// check compares a device's state of every field with the model.
func (h *history) check(d *device, complete bool) error {
	for s := range sites {
		for _, k := range d.state[s].Keys() {
			f := d.state[s].Field(k)
			if f.Lost {
				if complete {
					return fmt.Errorf("%v: something is lost although all has arrived", k)
				}
				continue // the model knows more than the device can
			}
			current, late := h.expected(d.have[s], k)
			if !slices.Equal(current, merge.IDs(f.Current)) || !slices.Equal(late, merge.IDs(f.Late)) {
				if !complete {
					// A change on the way between two others may be missing without this field
					// naming it; then only a full exchange decides.
					continue
				}
				return fmt.Errorf("%v: current %v, model %v; late %v, model %v", k, merge.IDs(f.Current), current, merge.IDs(f.Late), late)
			}
			values := map[string]bool{}
			for _, id := range current {
				values[h.model[id].value] = true
			}
			if f.Conflict() != (len(values) > 1) {
				return fmt.Errorf("%v: conflict %v with values %v", k, f.Conflict(), values)
			}
		}
	}
	return nil
}

// connected works out by flooding which patients are one animal.
func connected(s *merge.State, from exam.ID) exam.ID {
	best, todo, done := from, []exam.ID{from}, map[exam.ID]bool{}
	for len(todo) > 0 {
		at := todo[0]
		todo = todo[1:]
		if done[at] {
			continue
		}
		done[at] = true
		if bytes.Compare(at[:], best[:]) < 0 {
			best = at
		}
		for _, k := range s.Keys() {
			a, b, ok := merge.EdgeEnds(k)
			joined := false
			for _, v := range s.Field(k).Current {
				joined = joined || len(v.Value) > 0
			}
			if ok && joined && (a == at || b == at) {
				todo = append(todo, a, b)
			}
		}
	}
	return best
}

// Random histories of 2 to 5 devices at two sites, with partitions, repeats, reorderings, restores,
// closings, amendments, joins and partings and clocks years apart: in the end every device has
// the same state, byte for byte, no value is lost, and conflicts and late arrivals are exactly
// those of the model.
func TestHistoriesConvergeToTheModel(t *testing.T) {
	n := 500
	if os.Getenv("CORDWALK_SOAK") == "1" {
		n = 10_000
	}
	seed := rand.Uint64()
	t.Logf("seed %d, %d histories", seed, n)
	ring, err := key.NewRing(key.Epoch{Number: 1, Secret: key.NewSecret()})
	if err != nil {
		t.Fatal(err)
	}
	conflicts, lates, writes := 0, 0, 0
	for i := range n {
		h := newHistory(rand.New(rand.NewPCG(seed, uint64(i))), ring)
		for range 20 + h.rng.IntN(80) {
			h.step()
			if h.rng.IntN(10) == 0 {
				if err := h.check(h.devices[h.rng.IntN(len(h.devices))], false); err != nil {
					t.Fatalf("history %d of seed %d: %v", i, seed, err)
				}
			}
		}
		// Everything is exchanged in a random order, with repeats.
		for _, d := range h.devices {
			var all []change.Frame
			for _, fs := range h.frames {
				all = append(all, fs...)
			}
			slices.SortFunc(all, func(a, b change.Frame) int { return bytes.Compare(a.Raw, b.Raw) })
			h.rng.Shuffle(len(all), func(i, j int) { all[i], all[j] = all[j], all[i] })
			for _, f := range all {
				h.deliver(d, f)
			}
		}
		first := h.devices[0]
		for _, d := range h.devices {
			if err := h.check(d, true); err != nil {
				t.Fatalf("history %d of seed %d: %v", i, seed, err)
			}
			total := 0
			for s := range sites {
				if d.state[s].Hash() != first.state[s].Hash() {
					t.Fatalf("history %d of seed %d: two devices differ at site %d", i, seed, s)
				}
				for _, k := range d.state[s].Keys() {
					f, g := d.state[s].Field(k), first.state[s].Field(k)
					total += len(d.state[s].Versions(k))
					if d == first {
						if f.Conflict() {
							conflicts++
						}
						lates += len(f.Late)
					}
					if fmt.Sprint(f) != fmt.Sprint(g) {
						t.Fatalf("history %d of seed %d: %v differs", i, seed, k)
					}
				}
				for id, root := range d.state[s].Components() {
					if want := connected(d.state[s], id); root != want {
						t.Fatalf("history %d of seed %d: %s is shown under %s, not %s", i, seed, id, root, want)
					}
				}
			}
			if total != len(h.model) {
				t.Fatalf("history %d of seed %d: %d of %d values are there", i, seed, total, len(h.model))
			}
		}
		writes += len(h.model)
	}
	t.Logf("%d writes, %d conflicts, %d late arrivals", writes, conflicts, lates)
	if conflicts == 0 || lates == 0 {
		t.Error("the histories had no conflict or no late arrival: they test too little")
	}
}

// Merging states is commutative, associative and idempotent.
func TestMergeLaws(t *testing.T) {
	seed := rand.Uint64()
	t.Logf("seed %d", seed)
	ring, err := key.NewRing(key.Epoch{Number: 1, Secret: key.NewSecret()})
	if err != nil {
		t.Fatal(err)
	}
	merged := func(ss ...*merge.State) *merge.State {
		out := &merge.State{}
		for _, s := range ss {
			out.Merge(s)
		}
		return out
	}
	for i := range 100 {
		h := newHistory(rand.New(rand.NewPCG(seed, uint64(i))), ring)
		for range 60 {
			h.step()
		}
		a, b, c := h.devices[0].state[0], h.devices[1].state[0], h.devices[len(h.devices)-1].state[0]
		for name, pair := range map[string][2]*merge.State{
			"commutative": {merged(a, b), merged(b, a)},
			"associative": {merged(merged(a, b), c), merged(a, merged(b, c))},
			"idempotent":  {merged(a, a), a},
			"absorbing":   {merged(a, b, a), merged(a, b)},
		} {
			if pair[0].Hash() != pair[1].Hash() {
				t.Fatalf("round %d: merging is not %s", i, name)
			}
		}
		// The hash kept up field by field is that of the whole.
		sum := merge.Sum{}
		for _, k := range a.Keys() {
			sum = sum.Add(merge.FieldHash(k, a.Versions(k)))
		}
		if sum != a.Hash() {
			t.Fatal("the running hash is not the sum of the fields' hashes")
		}
	}
}
