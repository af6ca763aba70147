package localise

import (
	"sync"

	"cordwalk.example/cordwalk/exam"
)

// A course of hundreds of visits is soon certain of most sites: weighing only those that are
// still open costs a fraction of weighing all. What is computed is the same.

// Weigher weighs the exams of a course at chosen sites. It is for one goroutine at a time.
type Weigher struct {
	e     *Engine // its own: nothing else may use it
	t     *someTable
	group [][]int64 // by group: log-likelihood of each pair of signature and class
	look  [][]int64 // the same without cells filled in a block
	sigs  []uint64
	used  []int   // groups with a tested cell
	full  []int64 // of the hypotheses of one site
	lk    []int64
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
	return &Weigher{e: e, t: m.some(), group: make([][]int64, len(m.groups)), look: make([][]int64, len(m.groups)), sigs: make([]uint64, len(e.pred))}
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
	// Each tested group's log-likelihood, by pair of signature and class.
	_, qw := m.p.quadrature()
	s.used = s.used[:0]
	blocks := false
	for gi := range m.groups {
		g := &m.groups[gi]
		tested, bulk := false, false
		for _, ci := range g.cells {
			tested = tested || e.obs[ci] >= 0
			bulk = bulk || e.obs[ci] >= 0 && e.bulk[ci]
		}
		if !tested {
			continue
		}
		s.used = append(s.used, gi)
		if s.group[gi] == nil {
			s.group[gi], s.look[gi] = make([]int64, len(g.pairs)), make([]int64, len(g.pairs))
		}
		logs := s.sigs[:g.sigs]
		e.groupLog(g, &qw, logs, false)
		for p := range g.pairs {
			s.group[gi][p] = int64(logs[g.pairs[p].sig])
		}
		if bulk {
			blocks = true
			e.groupLog(g, &qw, logs, true)
		}
		for p := range g.pairs {
			s.look[gi][p] = int64(logs[g.pairs[p].sig])
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
			of, logs := m.groups[gi].of[from:to], s.group[gi]
			for i, p := range of {
				full[i] += logs[p]
			}
			if blocks {
				for i, p := range of {
					looked[i] += s.look[gi][p]
				}
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
