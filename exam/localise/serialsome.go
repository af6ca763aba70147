package localise

import (
	"sync"

	"cordwalk.example/cordwalk/exam"
)

// A course of hundreds of visits is soon certain of most sites: weighing only those that are
// still open costs a fraction of weighing all. What is computed is the same.

// Weigher weighs the exams of a course at chosen sites. It is for one goroutine at a time.
type Weigher struct {
	e    *Engine // its own: nothing else may use it
	t    *someTable
	logs []sigLogs // by group
	used []int     // groups with a tested cell
	full []int64   // of the hypotheses of one site
	lk   []int64
}

// someTable holds what is fixed: hypotheses of site i of Model.Sites are first[i] … last[i]−1.
type someTable struct {
	first, last []int32
	prior       [][GridSize]float64 // of site and step, where the onset is not known
}

var someTables sync.Map // *Model → *someTable

// Weigher returns a new weigher on the model's tables.
func (m *Model) Weigher() *Weigher {
	e := m.Engine()
	return &Weigher{e: e, t: m.some(), logs: make([]sigLogs, len(m.groups))}
}

func (m *Model) some() *someTable {
	if t, ok := someTables.Load(m); ok {
		return t.(*someTable)
	}
	sites := m.Sites()
	t := &someTable{first: make([]int32, len(sites)), last: make([]int32, len(sites)), prior: make([][GridSize]float64, len(sites))}
	of := make([]int, len(m.sp.sites))
	for i := range of {
		of[i] = -1
	}
	for k, i := range m.serialOf {
		of[i] = k
		t.first[k] = -1
	}
	sound := 0.0
	for h := range m.hyps {
		site := int(m.siteOf[h])
		p := exp(fromLog(m.prior[h]))
		if m.sp.sites[site].kind == NoLesion {
			sound += p
		}
		if k := of[site]; k >= 0 {
			if t.first[k] < 0 {
				t.first[k] = int32(h)
			}
			t.last[k] = int32(h) + 1
			t.prior[k][int(m.severity[h])+1] += p
		}
	}
	for k := range t.prior {
		t.prior[k][0] = sound
	}
	got, _ := someTables.LoadOrStore(m, t)
	return got.(*someTable)
}

// LogLikelihoods is Engine.SiteLogLikelihoods for the given sites of Model.Sites alone:
// dst[i*GridSize+step] belongs to sites[i].
func (s *Weigher) LogLikelihoods(x Exam, sites []int, dst []float64) ([]float64, error) {
	e := s.e
	if x.Species != e.m.species {
		return nil, &exam.Invalid{Field: "species", Value: x.Species.String(), Allowed: e.m.species.String() + " for this engine"}
	}
	m, t := e.m, s.t
	if need := len(sites) * GridSize; cap(dst) < need {
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
	// What each tested group needs to answer for a signature; the logarithms are taken when a
	// hypothesis first asks for them, and kept while the group's findings stay the same.
	_, qw := m.p.quadrature()
	s.used = s.used[:0]
	blocks := false
	for gi := range m.groups {
		g, l := &m.groups[gi], &s.logs[gi]
		tested, same := false, len(l.obs) == len(g.cells)
		for k, ci := range g.cells {
			tested = tested || e.obs[ci] >= 0
			blocks = blocks || e.obs[ci] >= 0 && e.bulk[ci]
			same = same && l.obs[k] == e.obs[ci] && l.bulk[k] == e.bulk[ci] && !e.bent[ci] && !l.bent
		}
		if !tested {
			continue
		}
		s.used = append(s.used, gi)
		if !same {
			l.reset(e, g)
		}
	}
	var early, late int64
	onset := x.OnsetDays > 0
	if onset {
		k := x.timing(m.p.Acute)
		early = toLog(logOf(k / m.p.Acute))
		late = toLog(logOf((1 - k) / (1 - m.p.Acute)))
	}
	lookedAt, careless := toLog(logOf(1-m.p.Careless)), toLog(logOf(m.p.Careless))
	sums := func(from, to int32, step func(h int32) int, out []float64, prior *[GridSize]float64) {
		n := int(to - from)
		if cap(s.full) < n {
			s.full, s.lk = make([]int64, n), make([]int64, n)
		}
		full, looked := s.full[:n], s.lk[:n]
		for i := range full {
			h := from + int32(i)
			l := m.prior[h]
			if onset && m.timed[h] {
				if m.acute[h] {
					l += early
				} else {
					l += late
				}
			}
			full[i] = l
		}
		copy(looked, full)
		var mass [GridSize]float64
		if onset {
			for i, l := range full {
				mass[step(from+int32(i))] += exp(fromLog(l))
			}
		} else {
			mass = *prior
		}
		for _, gi := range s.used {
			g, l := &m.groups[gi], &s.logs[gi]
			for i, p := range g.of[from:to] {
				sig := g.pairs[p].sig
				if !l.known[sig] {
					l.learn(int(sig), &qw)
				}
				full[i] += l.full[sig]
				looked[i] += l.look[sig]
			}
		}
		var best [GridSize]int64
		var total [GridSize]uint64
		for k := range best {
			best[k] = -1 << 62
		}
		if blocks {
			for i := range full {
				full[i] += lookedAt
				looked[i] += careless
			}
		}
		for i, l := range full {
			k := step(from + int32(i))
			best[k] = max(best[k], l)
			if blocks {
				best[k] = max(best[k], looked[i])
			}
		}
		for i, l := range full {
			k := step(from + int32(i))
			total[k] += weight(l - best[k])
			if blocks {
				total[k] += weight(looked[i] - best[k])
			}
		}
		const unit = float64(1 << weightBits)
		for k := range out {
			if total[k] > 0 {
				out[k] = fromLog(best[k]) + logOf(float64(total[k])/unit) - logOf(mass[k])
			}
		}
	}
	sound := 0.0
	for h := range m.hyps {
		if m.sp.sites[m.siteOf[h]].kind == NoLesion {
			var out [1]float64
			var prior [GridSize]float64
			prior[0] = exp(fromLog(m.prior[h]))
			sums(int32(h), int32(h)+1, func(int32) int { return 0 }, out[:], &prior)
			sound = out[0]
			break
		}
	}
	for i, site := range sites {
		out := dst[i*GridSize : (i+1)*GridSize]
		sums(t.first[site], t.last[site], func(h int32) int { return int(m.severity[h]) + 1 }, out, &t.prior[site])
		out[0] = sound
	}
	return dst, nil
}

// sigLogs answers for the signatures of one group, as far as they were asked for.
type sigLogs struct {
	obs   []int16 // of the group's cells
	bulk  []bool
	bent  bool
	parts []sigPart
	known []bool
	full  []int64
	look  []int64
}

// sigPart is one tested cell of a group.
type sigPart struct {
	rows           []uint16
	table          []float64
	stride, offset int
	more           int // further categories that the finding may stand for
	keep, add      float64
	bulk           bool
}

// reset takes in the group's findings and forgets the answers.
func (l *sigLogs) reset(e *Engine, g *group) {
	if l.known == nil {
		l.known, l.full, l.look = make([]bool, g.sigs), make([]int64, g.sigs), make([]int64, g.sigs)
		l.obs, l.bulk = make([]int16, len(g.cells)), make([]bool, len(g.cells))
	}
	clear(l.known)
	l.parts, l.bent = l.parts[:0], false
	for k, ci := range g.cells {
		l.obs[k], l.bulk[k] = e.obs[ci], e.bulk[ci]
		if e.obs[ci] < 0 {
			continue
		}
		set := &e.m.sets[e.m.setOf[ci]]
		p := sigPart{rows: g.rows[k], table: set.p, stride: set.cats * points, offset: int(e.obs[ci]) * points,
			more: int(e.upTo[ci] - e.obs[ci]), keep: 1, bulk: e.bulk[ci]}
		if e.bent[ci] {
			l.bent = true
			p.keep, p.add = e.ctx[ci].keep, e.ctx[ci].sum(e.obs[ci], e.upTo[ci])
		}
		l.parts = append(l.parts, p)
	}
}

// learn works a signature's logarithms out, as Engine.groupLog does for all.
func (l *sigLogs) learn(sig int, qw *[points]float64) {
	full, look := *qw, *qw
	for k := range l.parts {
		c := &l.parts[k]
		at := int(c.rows[sig])*c.stride + c.offset
		var p [points]float64
		copy(p[:], c.table[at:at+points])
		for j := points; j < (c.more+1)*points; j++ {
			p[j%points] += c.table[at+j]
		}
		for q := range p {
			v := p[q]
			if c.keep != 1 {
				v = float64(c.keep*v) + c.add
			}
			full[q] = float64(full[q] * v)
			if !c.bulk {
				look[q] = float64(look[q] * v)
			}
		}
	}
	l.known[sig] = true
	l.full[sig] = toLog(logOf(full[0] + full[1] + full[2] + full[3] + full[4]))
	l.look[sig] = toLog(logOf(look[0] + look[1] + look[2] + look[3] + look[4]))
}

// bendFor brings what age and sedation do to the answers up to date.
func (e *Engine) bendFor(x *Exam) {
	if x.AgeYears == e.ctxAge && x.Sedation == e.ctxSedated {
		return
	}
	for i := range e.m.lay.cells {
		ctx, bent := e.m.bend(x, &e.m.lay.cells[i])
		if bent || e.bent[i] {
			e.ctx[i], e.bent[i] = ctx, bent
			if e.was[i] >= 0 {
				e.state[e.m.lay.cells[i].group].dirty = true
			}
		}
	}
	e.ctxAge, e.ctxSedated = x.AgeYears, x.Sedation
}
