package localise

import (
	"bytes"
	"cmp"
	"slices"

	"cordwalk.example/cordwalk/exam"
)

// A course of hundreds of visits weighs the same sites again and again, and from one week to
// the next most findings stay as they were. A Weigher keeps its sums from exam to exam and
// changes only what changed. What it computes is what Engine.SiteLogLikelihoods computes, but that
// a share of the first week below leastShare is left out.

// keepPatterns is how many patterns of findings a group remembers its answers for.
const keepPatterns = 12

// leastShare is the share below which the first week is left out: from ten days after the onset it is one
// in a thousand (see timing), and would take half the time.
const leastShare = 0.002

// Weigher weighs the exams of a course at chosen sites. It is for one goroutine at a time.
type Weigher struct {
	*chosen
	e      *Engine // its own, for entering findings only
	groups []weighed

	full     []int64 // sums by hypothesis
	extra    []int64 // what a sum gains without the cells filled in a block
	lateAt   []int   // by site: the exam that the sums of later weeks stand at
	acuteAt  []int   // by site: the same for the first week
	exam     int     // exams entered so far that differ from the one before
	blocks   bool
	changed  []int // groups that the last exam changed
	occupied []int // groups with a tested cell
	key      []byte
	weights  [points]float64 // of the quadrature
}

// chosen is the part of a model's tables that concerns some sites. It is only read.
//
// Hypotheses of the chosen sites lie site by site, the sound animal last; within a site those
// of later weeks come first, by severity, then those of the first week, by severity.
type chosen struct {
	sites []int     // of Model.Sites
	steps int       // of severity
	prior []int64   // by hypothesis
	from  []int32   // by site and slot: hypotheses from[s*slots+k] … from[s*slots+k+1]−1
	mass  []float64 // by site and slot: their prior
	timed []bool    // by site
	told  []told    // by group
}

// told is how far the chosen hypotheses tell the signatures of a group apart.
type told struct {
	sig []uint16 // signatures in use
	of  []uint16 // by hypothesis: index into sig
}

// slots of a site: the severities in later weeks, then those in the first.
func (c *chosen) slots() int { return 2 * c.steps }

// weighed is one group of cells, as an exam and the one before answered it.
type weighed struct {
	*told
	now, last *answers // of this exam and of the one before
	known     map[string]*answers
	key       []byte  // of now
	deltas    []delta // by signature
}

// delta is what a signature's answer changed by with the exam of that number.
type delta struct {
	exam int
	by   int64
}

// answers is the log-likelihood of a pattern of findings for each signature in use, worked out
// when first asked for.
type answers struct {
	full  []int64
	extra []int64 // nil where no cell is filled in a block
	cells []testedCell
}

// unknown marks an answer that nobody has asked for.
const unknown = -1 << 63

// testedCell is one tested cell of a group.
type testedCell struct {
	rows           []uint16
	table          []float64
	stride, offset int
	more           int // further categories that the finding may stand for
	keep, add      float64
	bulk           bool
	plain          bool // one category, answers not bent, no cell of the group filled in a block
}

// Weigher returns a weigher for some of Model.Sites.
func (m *Model) Weigher(sites []int) *Weigher {
	w := &chosen{sites: slices.Clone(sites), steps: m.steps(), told: make([]told, len(m.groups))}
	all := m.Sites()
	index := make([]int, len(m.sp.sites)) // of a site among the chosen, −1 where it is not wanted
	for i := range index {
		index[i] = -1
	}
	for i, s := range sites {
		if s >= 0 && s < len(all) {
			index[m.serialOf[s]] = i
		}
	}
	n, slots := len(sites)+1, w.slots()
	w.mass, w.timed = make([]float64, n*slots), make([]bool, n)
	type entry struct {
		h    int32
		slot int
	}
	var list []entry
	for h := range m.hyps {
		site, severity := int(m.siteOf[h]), int(m.severity[h])
		at := index[site]
		if m.sp.sites[site].kind == NoLesion {
			at = n - 1
		} else if at < 0 {
			continue
		}
		slot := at*slots + severity
		if m.timed[h] {
			w.timed[at] = true
			if m.acute[h] {
				slot += w.steps
			}
		}
		list = append(list, entry{int32(h), slot})
		w.mass[slot] += exp(fromLog(m.prior[h]))
	}
	slices.SortStableFunc(list, func(a, b entry) int { return cmp.Or(a.slot-b.slot, int(a.h-b.h)) })
	w.from = make([]int32, n*slots+1)
	for _, x := range list {
		w.prior = append(w.prior, m.prior[x.h])
		w.from[x.slot+1]++
	}
	for s := range n * slots {
		w.from[s+1] += w.from[s]
	}
	for gi := range m.groups {
		g, x := &m.groups[gi], &w.told[gi]
		in := make([]int32, g.sigs)
		for i := range in {
			in[i] = -1
		}
		x.of = make([]uint16, len(list))
		for i, l := range list {
			s := g.pairs[g.of[l.h]].sig
			if in[s] < 0 {
				in[s] = int32(len(x.sig))
				x.sig = append(x.sig, s)
			}
			x.of[i] = uint16(in[s])
		}
		x.sig = slices.Clone(x.sig)
	}
	return w.weigher(m.reader())
}

// Another returns a weigher for the same sites, which shares the tables of this one.
func (w *Weigher) Another() *Weigher { return w.weigher(w.e.m.reader()) }

func (c *chosen) weigher(e *Engine) *Weigher {
	w := &Weigher{chosen: c, e: e}
	_, w.weights = e.m.p.quadrature()
	n := len(c.timed)
	w.full, w.extra = make([]int64, len(c.prior)), make([]int64, len(c.prior))
	w.lateAt, w.acuteAt = make([]int, n), make([]int, n)
	w.groups = make([]weighed, len(c.told))
	for gi := range w.groups {
		x := &w.groups[gi]
		x.told = &c.told[gi]
		x.known = map[string]*answers{}
		x.now = &answers{full: make([]int64, len(x.sig))}
		x.deltas = make([]delta, len(x.sig))
	}
	w.exam = 2 // no site stands at it, nor at the one before
	return w
}

// reader returns an engine that takes findings in and computes nothing: it has no sums.
func (m *Model) reader() *Engine {
	n := len(m.lay.cells)
	e := &Engine{m: m, obs: make([]int16, n), upTo: make([]int16, n), bulk: make([]bool, n), found: make([]found, n), ctx: make([]context, n), bent: make([]bool, n)}
	for i := range n {
		e.obs[i], e.upTo[i] = -1, -1
		e.ctx[i].keep = 1
	}
	e.x.Species = m.species
	return e
}

// LogLikelihoods is Engine.SiteLogLikelihoods for the weigher's sites: dst[i*(steps+1)+step]
// belongs to the i-th of them.
func (w *Weigher) LogLikelihoods(x Exam, dst []float64) ([]float64, error) {
	all := make([]int, len(w.sites))
	for i := range all {
		all[i] = i
	}
	return w.Some(x, all, dst)
}

// Some is LogLikelihoods for some of the weigher's sites, named by their position among them:
// dst[i*(steps+1)+step] belongs to which[i].
func (w *Weigher) Some(x Exam, which []int, dst []float64) ([]float64, error) {
	e := w.e
	if x.Species != e.m.species {
		return nil, &exam.Invalid{Field: "species", Value: x.Species.String(), Allowed: e.m.species.String() + " for this engine"}
	}
	m := e.m
	size, slots := w.steps+1, w.slots()
	if need := len(which) * size; cap(dst) < need {
		dst = make([]float64, need)
	} else {
		dst = dst[:need]
	}
	for i := range e.obs {
		e.clear(i)
	}
	for _, f := range x.Findings {
		e.put(f)
	}
	e.bendFor(&x)
	w.enter()

	acute := m.p.Acute
	if x.OnsetDays > 0 {
		acute = x.timing(m.p.Acute)
	}
	withAcute := acute > leastShare
	late, early := (1-acute)/(1-m.p.Acute), acute/m.p.Acute
	lateLog, earlyLog := toLog(logOf(late)), toLog(logOf(early))
	lookedAt, careless := toLog(logOf(1-m.p.Careless)), toLog(logOf(m.p.Careless))
	value := func(site, severity int) float64 {
		const none = -1 << 62
		slot := site*slots + severity
		mass, shift := w.mass[slot], int64(0)
		if w.timed[site] {
			mass *= late
			shift = lateLog
		}
		if withAcute {
			mass += float64(w.mass[slot+w.steps] * early)
		}
		best, total := int64(none), uint64(0)
		for pass := range 2 {
			for part := range 2 {
				s, shift := slot, shift
				if part == 1 {
					if !withAcute {
						break
					}
					s, shift = slot+w.steps, earlyLog
				}
				for i := w.from[s]; i < w.from[s+1]; i++ {
					l := w.prior[i] + w.full[i] + shift
					if !w.blocks {
						if pass == 0 {
							best = max(best, l)
						} else {
							total += weight(l - best)
						}
						continue
					}
					looked, not := l+lookedAt, l+w.extra[i]+careless
					if pass == 0 {
						best = max(best, looked, not)
					} else {
						total += weight(looked-best) + weight(not-best)
					}
				}
			}
		}
		if total == 0 || mass <= 0 {
			return -700
		}
		const unit = float64(1 << weightBits)
		return fromLog(best) + logOf(float64(total)/unit) - logOf(mass)
	}
	w.bring(len(w.sites), withAcute)
	if w.blocks { // a fill that was not looked at shows what a sound animal shows
		careless -= w.extra[w.from[len(w.sites)*slots]]
	}
	sound := value(len(w.sites), 0)
	for i, s := range which {
		w.bring(s, withAcute)
		dst[i*size] = sound
		for k := range w.steps {
			dst[i*size+k+1] = value(s, k)
		}
	}
	return dst, nil
}

// enter takes the engine's findings in, group by group.
func (w *Weigher) enter() {
	e := w.e
	w.blocks = false
	w.occupied = w.occupied[:0]
	first := true
	for gi := range w.groups {
		g, x := &e.m.groups[gi], &w.groups[gi]
		key := w.key[:0]
		bent, tested := false, false
		for _, ci := range g.cells {
			b := byte(e.obs[ci]+1) << 1
			if e.obs[ci] >= 0 {
				tested = true
				bent = bent || e.bent[ci]
				if e.bulk[ci] {
					b |= 1
					w.blocks = true
				}
			}
			key = append(key, b, byte(e.upTo[ci]-e.obs[ci]))
		}
		w.key = key
		if tested {
			w.occupied = append(w.occupied, gi)
		}
		if !bent && bytes.Equal(key, x.key) {
			continue
		}
		next, ok := x.known[string(key)]
		if !ok || bent {
			next = w.answer(gi)
			if !bent {
				if len(x.known) >= keepPatterns {
					clear(x.known)
				}
				x.known[string(key)] = next
			}
		}
		x.key = append(x.key[:0], key...)
		if bent {
			x.key = x.key[:0] // the same findings may be bent otherwise next time
		}
		if next != x.now {
			if first { // the same findings again are the same exam
				first = false
				w.exam++
				w.changed = w.changed[:0]
			}
			x.last, x.now = x.now, next
			w.changed = append(w.changed, gi)
		}
	}
}

// bring brings a site's sums up to this exam: by what changed where they stood at the exam
// before, afresh where they did not.
func (w *Weigher) bring(site int, withAcute bool) {
	one := func(at *int, from, to int32) {
		switch *at {
		case w.exam:
			return
		case w.exam - 1:
			for _, gi := range w.changed {
				x := &w.groups[gi]
				of := x.of[from:to]
				sums := w.full[from:to][:len(of)]
				for i, k := range of {
					d := &x.deltas[k]
					if d.exam != w.exam {
						*d = delta{w.exam, x.now.at(w, gi, k) - x.last.at(w, gi, k)}
					}
					sums[i] += d.by
				}
				if x.now.extra != nil || x.last.extra != nil {
					for i := from; i < to; i++ {
						k := x.of[i]
						if x.now.extra != nil {
							w.extra[i] += x.now.extra[k]
						}
						if x.last.extra != nil {
							w.extra[i] -= x.last.extra[k]
						}
					}
				}
			}
		default:
			clear(w.full[from:to])
			clear(w.extra[from:to])
			for _, gi := range w.occupied {
				x := &w.groups[gi]
				of, full := x.of[from:to], x.now.full
				sums := w.full[from:to][:len(of)]
				for i, k := range of {
					v := full[k]
					if v == unknown {
						v = x.now.at(w, gi, k)
					}
					sums[i] += v
				}
				if x.now.extra != nil {
					for i := from; i < to; i++ {
						w.extra[i] += x.now.extra[x.of[i]]
					}
				}
			}
		}
		*at = w.exam
	}
	f, slots := w.from[site*w.slots():], w.slots()
	one(&w.lateAt[site], f[0], f[w.steps])
	if withAcute {
		one(&w.acuteAt[site], f[w.steps], f[slots])
	}
}

// answer prepares a group's answers to the engine's findings.
func (w *Weigher) answer(gi int) *answers {
	e := w.e
	g, x := &e.m.groups[gi], &w.groups[gi]
	a := &answers{full: make([]int64, len(x.sig))}
	for k, ci := range g.cells {
		if e.obs[ci] < 0 {
			continue
		}
		set := &e.m.sets[e.m.setOf[ci]]
		c := testedCell{rows: g.rows[k], table: set.p, stride: set.cats * points, offset: int(e.obs[ci]) * points,
			more: int(e.upTo[ci] - e.obs[ci]), keep: 1, bulk: e.bulk[ci]}
		if e.bent[ci] {
			c.keep, c.add = e.ctx[ci].keep, e.ctx[ci].sum(e.obs[ci], e.upTo[ci])
		}
		if c.bulk && a.extra == nil {
			a.extra = make([]int64, len(x.sig))
		}
		a.cells = append(a.cells, c)
	}
	for i := range a.cells {
		c := &a.cells[i]
		c.plain = c.more == 0 && c.keep == 1 && a.extra == nil
	}
	if len(a.cells) > 0 {
		for i := range a.full {
			a.full[i] = unknown
		}
	}
	return a
}

func (a *answers) at(w *Weigher, gi int, k uint16) int64 {
	if a.full[k] == unknown {
		a.learn(w, gi, k)
	}
	return a.full[k]
}

// learn works one signature out, as Engine.groupLog does for all.
func (a *answers) learn(w *Weigher, gi int, k uint16) {
	full := w.weights
	look := full
	sig := w.groups[gi].sig[k]
	for i := range a.cells {
		c := &a.cells[i]
		at := int(c.rows[sig])*c.stride + c.offset
		if c.plain {
			p := (*[points]float64)(c.table[at:])
			full[0] *= p[0]
			full[1] *= p[1]
			full[2] *= p[2]
			full[3] *= p[3]
			full[4] *= p[4]
			continue
		}
		p := [points]float64(c.table[at : at+points])
		for j := points; j < (c.more+1)*points; j++ {
			p[j%points] += c.table[at+j]
		}
		if c.keep != 1 {
			for q := range p {
				p[q] = float64(c.keep*p[q]) + c.add
			}
		}
		for q := range p {
			full[q] = float64(full[q] * p[q])
		}
		if a.extra != nil && !c.bulk {
			for q := range p {
				look[q] = float64(look[q] * p[q])
			}
		}
	}
	a.full[k] = toLog(logOf(full[0] + full[1] + full[2] + full[3] + full[4]))
	if a.extra != nil {
		a.extra[k] = toLog(logOf(look[0]+look[1]+look[2]+look[3]+look[4])) - a.full[k]
	}
}

// Marginal returns the probability of each category of one cell by itself, at each of the
// weigher's sites and steps of its grid, in later weeks and without what age and sedation do:
// out[(i*(steps+1)+step)*categories+category]. It is nil for a cell that the model does not hold.
func (w *Weigher) Marginal(k exam.Key) (out []float64, categories int) {
	m := w.e.m
	ci, ok := m.lay.find(k)
	if !ok {
		return nil, 0
	}
	c := &m.lay.cells[ci]
	g, x := &m.groups[c.group], &w.groups[c.group]
	pos := slices.Index(g.cells, ci)
	set := &m.sets[m.setOf[ci]]
	cats, size, slots := set.cats, w.steps+1, w.slots()
	slot := func(s int, p []float64) {
		total := 0.0
		for i := w.from[s]; i < w.from[s+1]; i++ {
			weight := exp(fromLog(w.prior[i]))
			row := int(g.rows[pos][x.sig[x.of[i]]]) * cats
			for j := range p {
				p[j] += float64(weight * set.margin[row+j])
			}
			total += weight
		}
		for j := range p {
			if total > 0 {
				p[j] /= total
			} else {
				p[j] = 1 / float64(cats)
			}
		}
	}
	sound := make([]float64, cats)
	slot(len(w.sites)*slots, sound)
	out = make([]float64, len(w.sites)*size*cats)
	for i := range w.sites {
		copy(out[i*size*cats:], sound)
		for v := range w.steps {
			at := (i*size + v + 1) * cats
			slot(i*slots+v, out[at:at+cats])
		}
	}
	return out, cats
}

// bendFor brings what age and sedation do to the answers up to date.
func (e *Engine) bendFor(x *Exam) {
	of := x.habits()
	if of == e.ctxOf {
		return
	}
	for i := range e.m.lay.cells {
		ctx, bent := e.m.bend(x, &e.m.lay.cells[i])
		if bent || e.bent[i] {
			e.ctx[i], e.bent[i] = ctx, bent
		}
	}
	e.ctxOf = of
}
