package localise

import (
	"cmp"
	"math/bits"
	"slices"

	"cordwalk.example/cordwalk/exam"
)

// Engine weighs exams of one species. It keeps its scratch memory and the last exam, so that
// one changed finding costs little and the steady state allocates nothing. An Engine is for one
// goroutine at a time; any number of engines share the species' Model.
type Engine struct {
	m *Model
	x Exam // the last exam; Findings is the caller's slice

	obs, was    []int16 // category of each cell, -1 not tested
	upTo, wasTo []int16 // last category where only presence is known, else obs
	bulk        []bool  // filled in a block
	wasBulk     []bool
	found       []found // what the cell's finding was, for the evidence
	ctx         []context
	bent        []bool
	ctxOf       habits

	state        []groupState
	full         []int64 // sum of the groups' log-likelihoods
	looked       []int64 // the same without cells filled in a block
	blocks       int     // cells filled in a block
	label        []int64
	labelled     bool
	base         []int64 // log prior with the days since the onset
	baseDays     float64
	logs         []int64
	labelOf      [2]string
	labelKg      float64
	barred       []bool
	barredBy     []exam.PrecautionOn
	barredOn     exam.Date
	weightFull   []uint64
	weightLooked []uint64
	live         []uint32
	liveFull     []uint64
	liveLook     []uint64
	livePairs    []livePair
	liveSigs     []uint16
	sigKnown     []bool
	ratioFull    []uint64
	ratioLook    []uint64
	open         []bool
	gentle       bool
	total        uint64

	damageSum []uint64
	classSum  []uint64
	histFull  []uint64
	histLook  []uint64

	res         Result
	alone       Alone
	classes     []rankedClass
	table       []uint64
	rank        []rankedTest
	notes       map[uint64]string
	pred        []uint64
	point       []float64
	serialMax   []int64
	serialSum   []uint64
	serialPrior []float64
	neckRisk    bool
}

type found struct {
	grade int8
	level exam.Vertebra
}

// groupState is a group's part of the log-likelihood for each signature.
type groupState struct {
	full, looked []int64
	dirty        bool
	delta        []int64 // by pair
}

// New returns an engine for a species. The error is an *Unsupported for others than dog and cat.
func New(s exam.Species) (*Engine, error) {
	m, err := ModelOf(s)
	if err != nil {
		return nil, err
	}
	return m.Engine(), nil
}

// Engine returns a new engine on the model's tables.
func (m *Model) Engine() *Engine {
	n := len(m.lay.cells)
	e := &Engine{
		m: m, obs: make([]int16, n), was: make([]int16, n), upTo: make([]int16, n), wasTo: make([]int16, n), bulk: make([]bool, n), wasBulk: make([]bool, n),
		found: make([]found, n), ctx: make([]context, n), bent: make([]bool, n), barred: make([]bool, n),
		state: make([]groupState, len(m.groups)), full: make([]int64, m.hyps), looked: make([]int64, m.hyps),
		label: make([]int64, len(m.sp.sites)), logs: make([]int64, m.hyps), weightFull: make([]uint64, m.hyps), weightLooked: make([]uint64, m.hyps),
		live: make([]uint32, 0, m.hyps), damageSum: make([]uint64, len(m.damages)), classSum: make([]uint64, len(m.classes)),
		notes: map[uint64]string{},
	}
	most, sigs, ratios := 0, 0, 0
	for i := range m.groups {
		g := &m.groups[i]
		most, sigs, ratios = max(most, len(g.pairs)), max(sigs, g.sigs), max(ratios, g.sigs*len(g.cells))
		e.state[i] = groupState{full: make([]int64, g.sigs), looked: make([]int64, g.sigs), delta: make([]int64, len(g.pairs))}
	}
	e.histFull, e.histLook = make([]uint64, most), make([]uint64, most)
	e.ratioFull, e.ratioLook = make([]uint64, ratios), make([]uint64, ratios)
	e.sigKnown = make([]bool, sigs)
	e.livePairs = make([]livePair, 0, most)
	e.liveSigs = make([]uint16, 0, sigs)
	e.liveFull, e.liveLook = make([]uint64, 0, m.hyps), make([]uint64, 0, m.hyps)
	e.open = make([]bool, n)
	for i := range n {
		e.obs[i], e.was[i], e.upTo[i], e.wasTo[i] = -1, -1, -1, -1
		e.ctx[i].keep = 1
	}
	e.x.Species = m.species
	e.table = make([]uint64, len(m.classes)*trunciCats)
	e.pred = make([]uint64, sigs*trunciCats)
	e.point = make([]float64, sigs*points)
	e.classes = make([]rankedClass, 0, len(m.classes))
	e.res.Regions = make([]RegionProbability, regionCount)
	e.res.Kinds = make([]KindProbability, kindCount)
	e.res.Sites = make([]SiteProbability, 0, maxSites)
	e.alone.Regions = make([]RegionProbability, regionCount)
	e.alone.Kinds = make([]KindProbability, kindCount)
	e.alone.Sites = make([]SiteProbability, 0, maxSites)
	e.res.Segments = make([]SegmentDamage, 0, 2*maxSegments)
	e.res.Evidence = make([]Evidence, 0, n)
	e.res.Next = make([]NextTest, 0, maxNext)
	e.res.Warnings = make([]string, 0, 16)
	e.rank = make([]rankedTest, 0, n)
	return e
}

// Model returns the tables that the engine works on.
func (e *Engine) Model() *Model { return e.m }

// Compute weighs an exam and returns the whole answer. An exam of another species than the
// engine's is refused. The result holds until the next call.
func (e *Engine) Compute(x Exam) (*Result, error) {
	if x.Species != e.m.species {
		return nil, &exam.Invalid{Field: "species", Value: x.Species.String(), Allowed: e.m.species.String() + " for this engine"}
	}
	e.set(x)
	return e.answer(), nil
}

// Posterior is Compute without evidence, next tests and warnings, which come back empty.
func (e *Engine) Posterior(x Exam) (*Result, error) {
	if x.Species != e.m.species {
		return nil, &exam.Invalid{Field: "species", Value: x.Species.String(), Allowed: e.m.species.String() + " for this engine"}
	}
	e.set(x)
	e.posterior()
	e.res.Evidence, e.res.Next, e.res.Warnings = e.res.Evidence[:0], e.res.Next[:0], e.res.Warnings[:0]
	return &e.res, nil
}

// Update changes one cell of the last exam to the finding and returns the whole answer. A
// finding that is not tested empties the cell.
func (e *Engine) Update(f exam.Finding) *Result {
	e.Change(f)
	return e.answer()
}

// Change is Update without the answer: for several cells that change at once, or where
// only Leading is wanted.
func (e *Engine) Change(f exam.Finding) {
	i, ok := e.m.lay.find(f.Key())
	if !ok {
		return
	}
	e.clear(i)
	e.put(f)
	e.markDirty()
	e.refresh()
}

// Leading weighs the last exam and returns its posterior alone, as Posterior does.
func (e *Engine) Leading() *Result {
	e.posterior()
	e.res.Evidence, e.res.Next, e.res.Warnings = e.res.Evidence[:0], e.res.Next[:0], e.res.Warnings[:0]
	return &e.res
}

func (e *Engine) answer() *Result {
	e.posterior()
	e.analyse()
	e.warn()
	return &e.res
}

func (e *Engine) clear(i int) {
	e.obs[i], e.upTo[i], e.bulk[i], e.found[i] = -1, -1, false, found{}
}

// put enters a finding. Of two findings of one cell the lower category stays, whatever their
// order; but a tendon reflex that was absent once and present once counts as present: it may be
// missing in the uppermost limb only (neuropetvet).
func (e *Engine) put(f exam.Finding) {
	i, ok := e.m.lay.find(f.Key())
	if !ok {
		return
	}
	g, tested := f.Result.Grade()
	if !tested {
		return
	}
	c := &e.m.lay.cells[i]
	cat := int16(g - c.low)
	if c.item == exam.CutaneousTrunci {
		cat = int16(trunciCategory(e.m.species, f))
	}
	if cat < 0 || int(cat) >= c.cats {
		return
	}
	bulk := f.How == exam.RestNormal || f.Block != ""
	if was := e.obs[i]; was >= 0 {
		again := exam.TendonReflex(c.item) && (cat == 0) != (was == 0)
		switch {
		case again && cat == 0, !again && cat > was:
			return
		case cat == was:
			bulk = bulk && e.bulk[i]
		}
	}
	e.obs[i], e.upTo[i], e.bulk[i], e.found[i] = cat, cat, bulk, found{g, f.Level}
}

// widen makes the grade in a cell stand for every grade as far from normal or further, and
// for every lesser one on the same side of normal: only that it is ill is known.
func (e *Engine) widen(k exam.Key) {
	i, ok := e.m.lay.find(k)
	if !ok || e.obs[i] < 0 || e.m.lay.cells[i].item == exam.CutaneousTrunci {
		return
	}
	in := k.Item.Info()
	normal := int16(in.Normal - in.First)
	switch {
	case in.Normal < 0 || in.Traits&exam.Unordered != 0 || e.obs[i] == normal:
	case e.obs[i] < normal:
		e.obs[i], e.upTo[i] = 0, normal-1
	default:
		e.obs[i], e.upTo[i] = normal+1, int16(e.m.lay.cells[i].cats-1)
	}
}

// set enters a whole exam.
func (e *Engine) set(x Exam) {
	for i := range e.obs {
		e.clear(i)
	}
	for _, f := range x.Findings {
		e.put(f)
	}
	for _, k := range x.presence {
		e.widen(k)
	}
	// What is known of the animal bends the answers of some cells.
	if of := x.habits(); of != e.ctxOf {
		for i := range e.m.lay.cells {
			ctx, bent := e.m.bend(&x, &e.m.lay.cells[i])
			if bent || e.bent[i] {
				e.ctx[i], e.bent[i] = ctx, bent
				if e.was[i] >= 0 {
					e.state[e.m.lay.cells[i].group].dirty = true
				}
			}
		}
		e.ctxOf = of
	}
	if l := [2]string{x.Diagnosis, x.Level}; l != e.labelOf || x.WeightKg != e.labelKg {
		e.labelled = e.m.label(&x, e.label)
		e.labelOf, e.labelKg = l, x.WeightKg
		e.neckRisk = unstableNeck(&x)
	}
	if !slices.Equal(x.Precautions, e.barredBy) || x.Day != e.barredOn {
		bars := exam.Bars(x.Precautions, x.Day)
		for i := range e.barred {
			e.barred[i] = bars.Why(e.m.lay.cells[i].key()) != ""
		}
		e.barredBy, e.barredOn = slices.Clone(x.Precautions), x.Day
	}
	e.x = x
	e.markDirty()
	e.refresh()
}

func (e *Engine) markDirty() {
	e.blocks = 0
	for i := range e.obs {
		if e.obs[i] != e.was[i] || e.upTo[i] != e.wasTo[i] || e.bulk[i] != e.wasBulk[i] {
			e.state[e.m.lay.cells[i].group].dirty = true
			e.was[i], e.wasTo[i], e.wasBulk[i] = e.obs[i], e.upTo[i], e.bulk[i]
		}
		if e.bulk[i] {
			e.blocks++
		}
	}
}

// refresh brings the sums up to date with the groups that changed. Sums are whole numbers:
// what was added and taken away leaves no trace, whatever the order.
func (e *Engine) refresh() {
	_, qw := e.m.p.quadrature()
	for gi := range e.state {
		s := &e.state[gi]
		if !s.dirty {
			continue
		}
		s.dirty = false
		g := &e.m.groups[gi]
		anyBulk := false
		for _, ci := range g.cells {
			if e.obs[ci] >= 0 && e.bulk[ci] {
				anyBulk = true
			}
		}
		e.groupLog(g, &qw, e.pred[:g.sigs], false)
		e.apply(g, s, s.full, e.pred[:g.sigs], e.full)
		if anyBulk {
			e.groupLog(g, &qw, e.pred[:g.sigs], true)
		}
		e.apply(g, s, s.looked, e.pred[:g.sigs], e.looked)
	}
}

// apply replaces a group's old logs by new ones in the sums of all hypotheses.
func (e *Engine) apply(g *group, s *groupState, old []int64, fresh []uint64, sums []int64) {
	changed := false
	for i := range old {
		if old[i] != int64(fresh[i]) {
			changed = true
			break
		}
	}
	if !changed {
		return
	}
	for i, p := range g.pairs {
		s.delta[i] = int64(fresh[p.sig]) - old[p.sig]
	}
	for i := range old {
		old[i] = int64(fresh[i])
	}
	of, delta := g.of, s.delta
	for h := range sums {
		sums[h] += delta[of[h]]
	}
}

// groupLog writes the log-likelihood of the group's findings for each signature.
func (e *Engine) groupLog(g *group, qw *[points]float64, out []uint64, skipBulk bool) {
	var rows [64][]uint16
	var tables [64][]float64
	var stride, offset [64]int
	var keep, add [64]float64
	var more [64]int
	n := 0
	for k, ci := range g.cells {
		if e.obs[ci] < 0 || skipBulk && e.bulk[ci] {
			continue
		}
		set := &e.m.sets[e.m.setOf[ci]]
		rows[n], tables[n] = g.rows[k], set.p
		stride[n], offset[n] = set.cats*points, int(e.obs[ci])*points
		keep[n], add[n] = 1, 0
		if e.bent[ci] {
			keep[n], add[n] = e.ctx[ci].keep, e.ctx[ci].sum(e.obs[ci], e.upTo[ci])
		}
		more[n] = int(e.upTo[ci] - e.obs[ci])
		n++
	}
	if n == 0 {
		clear(out)
		return
	}
	for s := range out {
		acc := *qw
		for k := range n {
			at := int(rows[k][s])*stride[k] + offset[k]
			p := tables[k][at : at+points : at+points]
			if more[k] > 0 {
				var sum [points]float64
				for j := range (more[k] + 1) * points {
					sum[j%points] += tables[k][at+j]
				}
				p = sum[:]
			}
			if keep[k] == 1 {
				for q := range acc {
					acc[q] = float64(acc[q] * p[q])
				}
			} else {
				for q := range acc {
					acc[q] = float64(acc[q] * (float64(keep[k]*p[q]) + add[k]))
				}
			}
		}
		sum := acc[0] + acc[1] + acc[2] + acc[3] + acc[4]
		out[s] = uint64(toLog(logOf(sum)))
	}
}

// blockLogs returns what a hypothesis's sums are raised by where cells were filled in a block:
// the chance that the block was looked at; and the chance that it was not, times what the
// block shows of a sound animal. A fill without looking shows normal grades whatever the
// lesion, and is no likelier for being long. Both are 0 where nothing was filled in a block.
func (e *Engine) blockLogs() (lookedAt, careless int64) {
	if e.blocks == 0 {
		return 0, 0
	}
	p, sound := e.m.p, e.m.sound
	return toLog(logOf(1 - p.Careless)), toLog(logOf(p.Careless)) + e.full[sound] - e.looked[sound]
}

// weigh turns log sums into weights and adds them up by damage. With the label or without.
func (e *Engine) weigh(labelled bool) {
	m := e.m
	e.timePriors()
	lookedAt, careless := e.blockLogs()
	// First the sums, and the best of them.
	best := int64(-1 << 62)
	logs, full := e.logs[:m.hyps], e.full[:m.hyps]
	for h, p := range e.base[:m.hyps] {
		v := p + full[h] + lookedAt
		logs[h] = v
		best = max(best, v)
	}
	if labelled {
		best = -1 << 62
		for h, site := range m.siteOf {
			v := logs[h] + e.label[site]
			logs[h] = v
			best = max(best, v)
		}
	}
	if e.blocks > 0 {
		for h, l := range logs {
			best = max(best, l-lookedAt-full[h]+e.looked[h]+careless)
		}
	}
	clear(e.damageSum)
	e.total = 0
	for h, l := range logs {
		w := weight(l - best)
		e.weightFull[h] = w
		if e.blocks > 0 {
			v := weight(l - lookedAt - full[h] + e.looked[h] + careless - best)
			e.weightLooked[h] = v
			w += v
		}
		if w != 0 {
			e.damageSum[m.damage[h]] += w
			e.total += w
		}
	}
}

// timePriors keeps the log priors with what the days since the onset say of the first week.
func (e *Engine) timePriors() {
	if e.base != nil && e.baseDays == e.x.OnsetDays {
		return
	}
	m := e.m
	var early, late int64
	if e.x.OnsetDays > 0 {
		t := e.x.timing(m.p.Acute)
		early = toLog(logOf(t / m.p.Acute))
		late = toLog(logOf((1 - t) / (1 - m.p.Acute)))
	}
	if e.base == nil {
		e.base = make([]int64, m.hyps)
	}
	for h, p := range m.prior {
		if m.timed[h] {
			if m.acute[h] {
				p += early
			} else {
				p += late
			}
		}
		e.base[h] = p
	}
	e.baseDays = e.x.OnsetDays
}

// gatherLive lists the hypotheses that evidence and next tests are worked out from: each at
// least a millionth of the whole. What is left out is under a hundredth even where nothing is tested.
func (e *Engine) gatherLive() {
	e.live, e.liveFull, e.liveLook = e.live[:0], e.liveFull[:0], e.liveLook[:0]
	least := e.total >> 20
	for h, w := range e.weightFull {
		var l uint64
		if e.blocks > 0 {
			l = e.weightLooked[h]
		}
		if w+l <= least {
			continue
		}
		e.live = append(e.live, uint32(h))
		e.liveFull = append(e.liveFull, w)
		if e.blocks > 0 {
			e.liveLook = append(e.liveLook, l)
		}
	}
}

const (
	maxSites = 40
	maxNext  = 12
)

type rankedClass struct {
	class int
	sum   uint64
}

// posterior fills the parts of the result that are sums over hypotheses.
func (e *Engine) posterior() {
	e.res.Species = e.m.species.String()
	e.res.Alone = nil
	if e.labelled {
		e.weigh(false)
		e.sums(e.alone.Regions, e.alone.Kinds, &e.alone.Sites)
		e.res.Alone = &e.alone
	}
	e.weigh(e.labelled)
	e.sums(e.res.Regions, e.res.Kinds, &e.res.Sites)
	e.segments()
	e.summary()
}

func (e *Engine) share(w uint64) float64 { return float64(w) / float64(e.total) }

// sums adds up regions, kinds and classes, and sorts them.
func (e *Engine) sums(regions []RegionProbability, kinds []KindProbability, sites *[]SiteProbability) {
	m := e.m
	clear(e.classSum)
	for d, w := range e.damageSum {
		if w > 0 {
			e.classSum[m.sp.sites[m.damages[d].site].class] += w
		}
	}
	var byRegion [regionCount]uint64
	var byKind [kindCount]uint64
	e.classes = e.classes[:0]
	for i, w := range e.classSum {
		if w == 0 {
			continue
		}
		c := &m.classes[i]
		half := w / 2
		byRegion[c.region] += w - half
		byRegion[c.second] += half
		byKind[c.kind] += w
		e.classes = append(e.classes, rankedClass{i, w})
	}
	for r := range byRegion {
		regions[r] = RegionProbability{Region(r).String(), e.share(byRegion[r])}
	}
	for k := range byKind {
		kinds[k] = KindProbability{Kind(k).String(), e.share(byKind[k])}
	}
	slices.SortStableFunc(regions, func(a, b RegionProbability) int { return cmp.Compare(b.Probability, a.Probability) })
	slices.SortStableFunc(kinds, func(a, b KindProbability) int { return cmp.Compare(b.Probability, a.Probability) })
	slices.SortStableFunc(e.classes, func(a, b rankedClass) int { return cmp.Compare(b.sum, a.sum) })
	*sites = (*sites)[:0]
	for _, r := range e.classes {
		p := e.share(r.sum)
		if len(*sites) == maxSites || p < 0.001 {
			break
		}
		c := &m.classes[r.class]
		*sites = append(*sites, SiteProbability{c.kind.String(), c.place, c.side.String(), p, c.words})
	}
}

// segments sums the damage of each half segment. Products of weights and damage are kept in
// 128 bits: the sum is exact, so left and right mirror exactly.
func (e *Engine) segments() {
	m := e.m
	var hi, lo, hurt [2 * maxSegments]uint64
	for d, w := range e.damageSum {
		if w == 0 {
			continue
		}
		for _, p := range m.damages[d].parts {
			h, l := bits.Mul64(w, uint64(p.units))
			var carry uint64
			lo[p.cell], carry = bits.Add64(lo[p.cell], l, 0)
			hi[p.cell], _ = bits.Add64(hi[p.cell], h, carry)
			if p.units > 102 {
				hurt[p.cell] += w
			}
		}
	}
	e.res.Segments = e.res.Segments[:0]
	for s := range m.sp.segments {
		for side := range 2 {
			c := s*2 + side
			sum := hi[c]<<54 | lo[c]>>10 // divided by 1024
			e.res.Segments = append(e.res.Segments, SegmentDamage{m.segmentName[s], sideWord(side), e.share(hurt[c]), e.share(sum)})
		}
	}
}
