package localise

import (
	"fmt"
	"runtime"
	"slices"
	"sync"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
)

// Model holds the tables of one species. It is read only and shared by all engines.
type Model struct {
	species exam.Species
	p       *Params
	lay     *layout
	sp      *space

	hyps     int
	sound    int      // the hypothesis of nothing wrong
	prior    []int64  // stored log prior of each hypothesis
	siteOf   []uint16 // index into sp.sites
	damage   []uint16 // index into damages
	acute    []bool   // lies in the first week
	timed    []bool   // has a time at all
	severity []uint8

	damages []damage
	classes []class
	sets    []rowSet
	setOf   []int // row set of each cell
	groups  []group
	// For serial.go.
	once, slotOnce sync.Once
	serial         []Site
	serialOf       []int
	slot           []int32

	segmentName  []string
	vertebraName []string
}

// damage is what a site at one severity does to segments, for the sums of the result.
type damage struct {
	site  uint16
	parts []segmentDamage
}

// segmentDamage: cell is segment*2+side, units are 1/1024.
type segmentDamage struct {
	cell  uint16
	units uint16
}

// class gathers sites for the list of sites and for what to test next: region × place × side.
type class struct {
	region Region
	second Region // of a pair, else the same
	kind   Kind
	side   Side
	place  string
	words  string
}

// rowSet holds the distinct answers of an item: probabilities by row, category and point.
type rowSet struct {
	item   exam.Item
	cats   int
	p      []float64 // row*cats*points
	margin []float64 // row*cats: summed over the points
}

// group is a set of cells that share a deviation.
type group struct {
	cells []int      // indices into layout.cells
	rows  [][]uint16 // for each of cells: row by signature
	sigs  int
	pairs []pair   // signature × class, those that occur
	of    []uint16 // pair of each hypothesis
}

type pair struct {
	sig   uint16
	class uint16
}

// models holds the tables that were made and not forgotten: exam.Species → func() (*Model, error).
var models sync.Map

// Unsupported is the error for a species that the engine has no anatomy for.
type Unsupported struct{ Species exam.Species }

func (e *Unsupported) Error() string {
	return fmt.Sprintf("localisation covers dog and cat only: the nerves and reflex arcs of the %s are not on record in the detail it needs", e.Species)
}

// ModelOf returns the tables of a species, made at the first call and shared from then on.
// The error is an *Unsupported for other species than dog and cat.
func ModelOf(s exam.Species) (*Model, error) {
	if s != exam.Dog && s != exam.Cat {
		return nil, &Unsupported{s}
	}
	f, _ := models.LoadOrStore(s, sync.OnceValues(func() (*Model, error) { return newModel(s, nil) }))
	return f.(func() (*Model, error))()
}

// Forget lets go of a species' tables, tens of megabytes, for a program that runs all day. Engines
// at work keep theirs; the next call of ModelOf makes them anew, which takes about half a second.
func Forget(s exam.Species) { models.Delete(s) }

// newModel builds the tables from the parameters; nil means the species' own.
func newModel(s exam.Species, p *Params) (*Model, error) {
	if s != exam.Dog && s != exam.Cat {
		return nil, &Unsupported{s}
	}
	if p == nil {
		p = defaults(s)
	}
	m := plainModel(s, p, newSpace(s, p))
	m.tabulate()
	return m, nil
}

// plainModel is a model over a space without its tables.
func plainModel(s exam.Species, p *Params, sp *space) *Model {
	m := &Model{species: s, p: p, lay: newLayout(), sp: sp}
	for _, seg := range anatomy.Segments(s) {
		m.segmentName = append(m.segmentName, seg.String())
	}
	for _, v := range exam.Vertebrae(s) {
		m.vertebraName = append(m.vertebraName, v.String())
	}
	m.classify()
	return m
}

// Hypotheses returns how many hypotheses the model holds.
func (m *Model) Hypotheses() int { return m.hyps }

// Bytes returns the size of the model's tables, without Go's own overhead.
func (m *Model) Bytes() int {
	n := m.hyps * (8 + 2 + 2 + 1 + 1 + 1)
	for i := range m.sets {
		n += 8 * (len(m.sets[i].p) + len(m.sets[i].margin))
	}
	for i := range m.groups {
		g := &m.groups[i]
		n += 2*len(g.of) + 4*len(g.pairs)
		for _, r := range g.rows {
			n += 2 * len(r)
		}
	}
	for i := range m.damages {
		n += 4 * len(m.damages[i].parts)
	}
	return n
}

// cordPlaces groups cord centres (in half segments) into the places that answers name.
var cordPlaces = []struct {
	to2  int // centre from+to up to here
	name string
}{{2, "C1-C2"}, {8, "C3-C5"}, {12, "C6-C7"}, {19, "C8-T2"}, {32, "T3-T9"}, {42, "T10-L1"}, {46, "L2-L3"},
	{50, "L4-L5"}, {56, "L6-S1"}, {60, "S1-S3"}, {99, "Cd1-Cd5"}}

// rootPlaces does the same for roots.
var rootPlaces = []struct {
	to   int
	name string
}{{1, "C1-C2"}, {4, "C3-C5"}, {6, "C6-C7"}, {9, "C8-T2"}, {16, "T3-T9"}, {21, "T10-L1"}, {23, "L2-L3"},
	{25, "L4-L5"}, {28, "L6-S1"}, {30, "S2-S3"}, {99, "Cd1-Cd5"}}

// classify puts every site into a class.
func (m *Model) classify() {
	index := map[class]uint16{}
	for _, t := range m.sp.sites {
		c := class{region: t.region, second: t.region, kind: t.kind, side: t.side.main()}
		switch t.kind {
		case Cord:
			for _, p := range cordPlaces {
				if t.from+t.to <= p.to2 {
					c.place = p.name
					break
				}
			}
			// A long lesion counts to the region of its centre, its place must agree.
		case Root:
			for _, p := range rootPlaces {
				if t.from <= p.to {
					c.place = p.name
					break
				}
			}
		case PainOnly:
			for i, r := range painRange {
				if t.vertebra >= r[0] && t.vertebra <= r[1] {
					c.place = painSites[i].String()
				}
			}
		case Plexus:
			c.place = map[[2]int]string{{5, 6}: "brachial plexus, cranial (C6-C7)", {7, 9}: "brachial plexus, caudal (C8-T2)", {5, 9}: "brachial plexus, complete (C6-T2)"}[[2]int{t.from, t.to}]
		case CaudaEquina:
			c.place = anatomy.At(m.species, t.from).String() + "-Cd5"
		case Nerve:
			c.place = t.nerve.name()
			c.side = t.side
		case NoLesion, Systemic:
			c.place = t.kind.Words()
		case Ischaemic:
			c.place = "pelvic limbs"
		case Two:
			c.second = t.second.region
			c.side = Even
			c.place = t.region.String() + " and " + t.second.region.String()
		default:
			c.place = partWords[t.part]
		}
		c.words = classWords(&c)
		i, ok := index[c]
		if !ok {
			i = uint16(len(m.classes))
			index[c] = i
			m.classes = append(m.classes, c)
		}
		t.class = i
	}
}

// classWords puts a class into plain English.
func classWords(c *class) string {
	side := map[Side]string{LeftOnly: ", left", RightOnly: ", right"}[c.side]
	if side == "" && c.kind != NoLesion && c.kind != Systemic && c.kind != Generalised && c.kind != Two && c.kind != PainOnly {
		side = ", both sides"
	}
	switch c.kind {
	case Cord, Root:
		return dash(c.place) + side + ": " + c.kind.Words()
	case PainOnly:
		words := c.place + " pain" + side + ", no loss of function"
		if c.place == "cervical" { // the level of a sore neck is not clear from palpation
			words += " (at " + dash(c.region.String()) + ")"
		}
		return words
	case CaudaEquina:
		return dash(c.place) + side + ": roots of the cauda equina"
	case Nerve:
		return c.place + " nerve" + side
	case Generalised:
		return "generalised: " + c.place
	case Ischaemic:
		return "blood supply of the " + c.place + side
	case Two:
		return "two lesions: " + dash(c.place)
	case NoLesion:
		return "nothing found"
	case Systemic:
		return c.place
	}
	return dash(c.place) + side
}

// dash prints a range of segments with an en dash.
func dash(s string) string {
	out := []rune(s)
	for i, r := range out {
		if r == '-' && i > 0 && i+1 < len(out) && out[i-1] >= '0' && out[i-1] <= '9' && out[i+1] >= 'A' && out[i+1] <= 'Z' {
			out[i] = '–'
		}
	}
	return string(out)
}

// tabulate walks the space and shares equal answers. Groups that share row sets (the two sides
// of one item) are tabulated by one goroutine in the order of the space, so the tables are the
// same however many goroutines there are.
func (m *Model) tabulate() {
	cells := m.lay.cells
	m.setOf = make([]int, len(cells))
	setIndex := map[[2]int]int{}
	for i := range cells {
		c := &cells[i]
		k := [2]int{int(c.item), c.girdle}
		s, ok := setIndex[k]
		if !ok {
			s = len(m.sets)
			setIndex[k] = s
			m.sets = append(m.sets, rowSet{item: c.item, cats: c.cats})
		}
		m.setOf[i] = s
	}
	m.groups = make([]group, len(m.lay.groups))
	for i := range cells {
		g := &m.groups[cells[i].group]
		g.cells = append(g.cells, i)
		g.rows = append(g.rows, nil)
	}
	m.list()
	var wait sync.WaitGroup
	for _, part := range m.shares(min(runtime.GOMAXPROCS(0), 4)) {
		wait.Go(func() { m.tabulateGroups(part) })
	}
	wait.Wait()
	for i := range m.groups {
		if len(m.groups[i].pairs) > 1<<16 || m.groups[i].sigs > 1<<16 {
			panic("localise: too many distinct answers in group " + m.lay.groups[i])
		}
	}
}

// shares deals the groups out to n goroutines, those that share a row set together.
func (m *Model) shares(n int) [][]int {
	owner := make([]int, len(m.groups))
	for i := range owner {
		owner[i] = i
	}
	var root func(i int) int
	root = func(i int) int {
		if owner[i] != i {
			owner[i] = root(owner[i])
		}
		return owner[i]
	}
	firstOf := map[int]int{}
	for ci, set := range m.setOf {
		g := m.lay.cells[ci].group
		if first, ok := firstOf[set]; ok {
			owner[root(g)] = root(first)
		} else {
			firstOf[set] = g
		}
	}
	cost := map[int]int{}
	for g := range m.groups {
		cost[root(g)] += len(m.groups[g].cells) + 2
	}
	load := make([]int, n)
	to := map[int]int{}
	out := make([][]int, n)
	for g := range m.groups {
		r := root(g)
		w, ok := to[r]
		if !ok {
			for i := range load {
				if load[i] < load[w] {
					w = i
				}
			}
			to[r] = w
			load[w] += cost[r]
		}
		out[w] = append(out[w], g)
	}
	return out
}

// list fills what is kept of each hypothesis by itself.
func (m *Model) list() {
	n := 0
	m.sp.each(func(*hypothesis) { n++ })
	m.prior, m.siteOf, m.damage = make([]int64, 0, n), make([]uint16, 0, n), make([]uint16, 0, n)
	m.acute, m.timed, m.severity = make([]bool, 0, n), make([]bool, 0, n), make([]uint8, 0, n)
	damages := map[[3]int]uint16{}
	m.sp.each(func(h *hypothesis) {
		if h.site.kind == NoLesion {
			m.sound = m.hyps
		}
		m.prior = append(m.prior, toLog(logOf(h.prior)))
		m.siteOf = append(m.siteOf, uint16(h.index))
		m.acute = append(m.acute, h.acute)
		m.timed = append(m.timed, h.site.timed())
		m.severity = append(m.severity, uint8(h.severity))
		k := [3]int{h.index, h.severity, h.second}
		d, ok := damages[k]
		if !ok {
			d = uint16(len(m.damages))
			damages[k] = d
			m.damages = append(m.damages, m.damageOf(h))
		}
		m.damage = append(m.damage, d)
		m.hyps++
	})
}

func (m *Model) tabulateGroups(part []int) {
	cells := m.lay.cells
	// What a row answers is worked out once all rows are known, so that the tables are made at
	// their size: grown by doubling they would take three times the memory for a while.
	finders := make([]*finder, len(m.sets))
	keys := make([][]rowKey, len(m.sets))
	sigs, pairs := make([]*intern, len(m.groups)), make([]*intern, len(m.groups))
	for _, gi := range part {
		sigs[gi], pairs[gi] = newIntern(), newIntern()
		m.groups[gi].of = make([]uint16, 0, m.hyps)
		for _, ci := range m.groups[gi].cells {
			if finders[m.setOf[ci]] == nil {
				finders[m.setOf[ci]] = newFinder()
			}
		}
	}
	var b, other body
	var st state
	var key rowKey
	var scratch [64]uint16
	last := make([]struct {
		hash uint64
		pair pair
		of   uint16
		warm bool
	}, len(m.groups))
	m.sp.each(func(h *hypothesis) {
		m.sp.build(h, &b, &other)
		st.derive(&b, &m.sp.arcs[h.variant], m.p)
		for _, gi := range part {
			g := &m.groups[gi]
			hash := uint64(14695981039346656037)
			for k, ci := range g.cells {
				c := &cells[ci]
				c.row(m.sp, c, &st, &key)
				set := m.setOf[ci]
				row, ok := finders[set].find(key)
				if !ok {
					n := len(keys[set])
					if n >= 1<<16 {
						panic("localise: too many distinct answers of " + c.item.String())
					}
					row = uint16(n)
					finders[set].put(key, row)
					keys[set] = append(keys[set], key)
				}
				scratch[k] = row
				hash = (hash ^ uint64(row)) * 1099511628211
				hash ^= hash >> 29
			}
			lt := &last[gi]
			if lt.warm && lt.hash == hash && lt.pair.class == h.site.class {
				same := true
				for k := range g.cells {
					if g.rows[k][lt.pair.sig] != scratch[k] {
						same = false
						break
					}
				}
				if same {
					g.of = append(g.of, lt.of)
					continue
				}
			}
			// The signature: the rows of all cells of the group.
			sig, found := sigs[gi].find(hash, func(s uint16) bool {
				for k := range g.cells {
					if g.rows[k][s] != scratch[k] {
						return false
					}
				}
				return true
			})
			if !found {
				g.sigs++
				for k := range g.cells {
					g.rows[k] = append(g.rows[k], scratch[k])
				}
			}
			pi, found := pairs[gi].find(uint64(sig)<<16|uint64(h.site.class), func(p uint16) bool {
				return g.pairs[p] == pair{sig, h.site.class}
			})
			if !found {
				g.pairs = append(g.pairs, pair{sig, h.site.class})
			}
			g.of = append(g.of, pi)
			lt.hash, lt.pair, lt.of, lt.warm = hash, pair{sig, h.site.class}, pi, true
		}
	})
	clear(finders)
	clear(sigs)
	clear(pairs)
	for _, gi := range part { // what grew by doubling is cut to size
		g := &m.groups[gi]
		g.pairs = slices.Clone(g.pairs)
		for k, ci := range g.cells {
			g.rows[k] = slices.Clone(g.rows[k])
			if set := m.setOf[ci]; m.sets[set].p == nil {
				m.answers(&m.sets[set], &cells[ci], keys[set])
				keys[set] = nil
			}
		}
	}
}

// answers fills a row set from the keys of its rows.
func (m *Model) answers(set *rowSet, c *cell, keys []rowKey) {
	var out [32][points]float64
	_, qw := m.p.quadrature()
	set.p, set.margin = make([]float64, 0, len(keys)*set.cats*points), make([]float64, 0, len(keys)*set.cats)
	for _, key := range keys {
		m.p.rowOf(m.species, c, key, out[:set.cats])
		for cat := range set.cats {
			sum := 0.0
			for q := range points {
				set.p = append(set.p, out[cat][q])
				sum += float64(qw[q] * out[cat][q])
			}
			set.margin = append(set.margin, sum)
		}
	}
}

// timed tells whether the first week and later are told apart for the site.
func (t *site) timed() bool {
	switch t.kind {
	case NoLesion, PainOnly, Tendon, Systemic, Joint, Two:
		return false
	}
	return true
}

// damageOf lists what a hypothesis does to the segments: cord damage, or the loss of their roots.
func (m *Model) damageOf(h *hypothesis) damage {
	var units [maxSegments][2]float64
	put := func(t *site, sev float64) {
		if t.from < 0 || t.kind == PainOnly || t.kind == Nerve {
			return
		}
		share := t.side.shares(sev)
		for s := t.from; s <= t.to; s++ {
			for side := range 2 {
				units[s][side] = both(units[s][side], float64(sev*share[side]))
			}
		}
	}
	put(h.site, m.sp.steps[h.severity])
	if h.site.second != nil {
		put(h.site.second, m.sp.steps[h.second])
	}
	d := damage{site: uint16(h.index)}
	for s := range m.sp.segments {
		for side := range 2 {
			if u := uint16(float64(units[s][side]*1024) + 0.5); u > 0 {
				d.parts = append(d.parts, segmentDamage{uint16(s*2 + side), u})
			}
		}
	}
	return d
}

// finder is a small hash table from row keys to rows: the space asks for tens of millions of them.
type finder struct {
	keys []rowKey
	rows []uint16
	used []bool
	n    int
	last rowKey
	row  uint16
	warm bool
}

func newFinder() *finder {
	return &finder{keys: make([]rowKey, 64), rows: make([]uint16, 64), used: make([]bool, 64)}
}

func (f *finder) slot(k rowKey) int {
	h := uint64(uint32(k[0]))*0x9E3779B97F4A7C15 ^ uint64(uint32(k[1]))*0xC2B2AE3D27D4EB4F ^ uint64(uint32(k[2]))*0x165667B19E3779F9
	h ^= h >> 32
	mask := uint64(len(f.keys) - 1)
	for i := h & mask; ; i = (i + 1) & mask {
		if !f.used[i] || f.keys[i] == k {
			return int(i)
		}
	}
}

func (f *finder) find(k rowKey) (uint16, bool) {
	if f.warm && f.last == k {
		return f.row, true
	}
	i := f.slot(k)
	if !f.used[i] {
		return 0, false
	}
	f.last, f.row, f.warm = k, f.rows[i], true
	return f.rows[i], true
}

func (f *finder) put(k rowKey, row uint16) {
	if 2*f.n >= len(f.keys) {
		old := *f
		f.keys, f.rows, f.used = make([]rowKey, 2*len(old.keys)), make([]uint16, 2*len(old.keys)), make([]bool, 2*len(old.keys))
		for i, u := range old.used {
			if u {
				j := f.slot(old.keys[i])
				f.keys[j], f.rows[j], f.used[j] = old.keys[i], old.rows[i], true
			}
		}
	}
	i := f.slot(k)
	f.keys[i], f.rows[i], f.used[i] = k, row, true
	f.n++
	f.last, f.row, f.warm = k, row, true
}

// intern numbers distinct things by a hash of them.
type intern struct {
	hash []uint64
	at   []int32 // number + 1, 0 free
	n    int
}

func newIntern() *intern { return &intern{hash: make([]uint64, 256), at: make([]int32, 256)} }

// find returns the number of the thing with that hash for which same holds, and true; or the
// next free number, which is now its own, and false.
func (t *intern) find(hash uint64, same func(uint16) bool) (uint16, bool) {
	if 2*t.n >= len(t.at) {
		old := *t
		t.hash, t.at = make([]uint64, 2*len(old.at)), make([]int32, 2*len(old.at))
		for i, a := range old.at {
			if a > 0 {
				j := t.free(old.hash[i])
				t.hash[j], t.at[j] = old.hash[i], a
			}
		}
	}
	mask := uint64(len(t.at) - 1)
	i := mix(hash) & mask
	for ; t.at[i] > 0; i = (i + 1) & mask {
		if t.hash[i] == hash && same(uint16(t.at[i]-1)) {
			return uint16(t.at[i] - 1), true
		}
	}
	t.n++
	t.hash[i], t.at[i] = hash, int32(t.n)
	return uint16(t.n - 1), false
}

func (t *intern) free(hash uint64) uint64 {
	mask := uint64(len(t.at) - 1)
	i := mix(hash) & mask
	for t.at[i] > 0 {
		i = (i + 1) & mask
	}
	return i
}

func mix(h uint64) uint64 {
	h *= 0x9E3779B97F4A7C15
	return h ^ h>>29
}
