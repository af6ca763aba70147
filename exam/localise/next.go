package localise

import (
	"cmp"
	"math"
	"math/bits"
	"slices"

	"cordwalk.example/cordwalk/exam"
)

// What to test next. A test's worth is the expected fall in entropy over classes (region ×
// place × side), in bits. It is set against the seconds the test takes, turning the animal
// included, and against the discomfort.

const (
	hurtSeconds = 60   // what a test that hurts costs, in seconds of a painless one: judgement
	gentleWorth = 0.05 // bits from which a painless test is «still informative»: judgement
	leastWorth  = 0.01 // bits below which a test is not worth naming: judgement
)

type rankedTest struct {
	cell  int
	bits  float64
	worth float64
	secs  int
	hurts bool
	due   bool
}

// candidate tells whether an untested cell may be suggested at all, precautions aside.
func (e *Engine) candidate(ci int) bool {
	c := &e.m.lay.cells[ci]
	if e.obs[ci] >= 0 || e.barred[ci] || c.joint != exam.NoJoint {
		return false
	}
	if c.digit != exam.AnyDigit && !(c.item == exam.Withdrawal && c.girdle == pelvic) {
		return false
	}
	switch c.item {
	case exam.DeepPain:
		if !c.site.IsLimb() {
			return false
		}
		// Never in a limb that moves on purpose; before its movement is graded neither.
		if g, ok := e.grade(exam.VoluntaryMotor, c.site); !ok || g > 0 {
			return false
		}
		if g, ok := e.grade(exam.SuperficialPain, c.site); ok && g > 0 {
			return false // felt on the surface is felt deeply
		}
	case exam.NystagmusDirection, exam.NystagmusFastPhase:
		if g, ok := e.grade(exam.Nystagmus, exam.Midline); !ok || g == 0 {
			return false
		}
	case exam.ReflexWalking:
		g, ok := e.grade(exam.DeepPain, exam.PelvicLeft)
		h, ok2 := e.grade(exam.DeepPain, exam.PelvicRight)
		if !ok || !ok2 || g > 0 || h > 0 {
			return false
		}
	case exam.GroundClearance:
		if g, ok := e.grade(exam.VoluntaryMotor, c.site); !ok || g != 1 {
			return false
		}
	case exam.AtaxiaProprioceptive, exam.AtaxiaVestibular, exam.AtaxiaCerebellar:
		seen := false
		for _, l := range [4]exam.Site{exam.ThoracicLeft, exam.ThoracicRight, exam.PelvicLeft, exam.PelvicRight} {
			if g, ok := e.grade(exam.Ataxia, l); ok && g > 0 {
				seen = true
			}
		}
		return seen
	case exam.SpinalPain, exam.EyeFollow, exam.Wheelbarrow:
		// Neck movement and pressure only where no instability is suspected.
		if e.neckAtRisk() && (c.item != exam.SpinalPain || c.site == exam.Cervical) {
			return false
		}
	}
	return true
}

// neckAtRisk: the file names an instability, luxation or fracture of the neck.
func (e *Engine) neckAtRisk() bool {
	return e.neckRisk
}

// grade returns the grade of an item at a site (any digit) in the exam at hand.
func (e *Engine) grade(i exam.Item, s exam.Site) (int8, bool) {
	ci, ok := e.m.lay.byKey[exam.Key{Item: i, Site: s}]
	if !ok || e.obs[ci] < 0 {
		return 0, false
	}
	return e.found[ci].grade, true
}

// effort returns what a test costs in seconds. The animal lies on its side for tone and
// reflexes: a test of the other side costs a turn (common practice, exam.TurnSeconds).
func effort(c *cell) (seconds int, hurts bool) {
	s, hurts := exam.Effort(c.item)
	switch c.item.Info().Group {
	case exam.GroupReflex:
		if c.site.IsLimb() {
			s += exam.TurnSeconds(exam.Standing, exam.LyingLeft) / 2
		}
	}
	return int(s), hurts
}

// next ranks the untested cells.
func (e *Engine) next() {
	m := e.m
	e.rank = e.rank[:0]
	gentle := false
	for gi := range m.groups {
		g := &m.groups[gi]
		any := false
		for _, ci := range g.cells {
			if e.candidate(ci) {
				any = true
				break
			}
		}
		if !any {
			continue
		}
		full, looked := e.histogram(g)
		if e.blocks > 0 {
			for i := range full {
				full[i] += looked[i]
			}
		}
		seen := false
		for _, ci := range g.cells {
			if e.obs[ci] >= 0 {
				seen = true
			}
		}
		mass := e.sigMass[:g.sigs]
		clear(mass)
		for i, p := range g.pairs {
			mass[p.sig] += full[i]
		}
		if seen {
			e.spread(g, mass)
		}
		for k, ci := range g.cells {
			if !e.candidate(ci) {
				continue
			}
			c := &m.lay.cells[ci]
			secs, hurts := effort(c)
			b := e.information(g, k, ci, full, mass, seen)
			noxious := c.item.Has(exam.Noxious)
			if !noxious && b >= gentleWorth {
				gentle = true
			}
			cost := float64(secs) + 10
			if hurts {
				cost += hurtSeconds
			}
			e.rank = append(e.rank, rankedTest{ci, b, b / cost, secs, hurts, false})
		}
	}
	slices.SortStableFunc(e.rank, func(a, b rankedTest) int { return cmp.Or(cmp.Compare(b.worth, a.worth), cmp.Compare(a.cell, b.cell)) })
	e.res.Next = e.res.Next[:0]
	// Deep pain that is due stands first: it is owed, not suggested.
	for _, limb := range [4]exam.Site{exam.ThoracicLeft, exam.ThoracicRight, exam.PelvicLeft, exam.PelvicRight} {
		ci := m.lay.byKey[exam.Key{Item: exam.DeepPain, Site: limb}]
		if e.obs[ci] >= 0 || e.barred[ci] {
			continue
		}
		if g, ok := e.grade(exam.VoluntaryMotor, limb); !ok || g > 0 {
			continue
		}
		if g, ok := e.grade(exam.SuperficialPain, limb); ok && g > 0 {
			continue
		}
		b := 0.0
		for _, r := range e.rank {
			if r.cell == ci {
				b = r.bits
			}
		}
		secs, hurts := effort(&m.lay.cells[ci])
		e.res.Next = append(e.res.Next, NextTest{exam.DeepPain.String(), limb.String(), b, secs, hurts, true})
	}
	for _, r := range e.rank {
		c := &m.lay.cells[r.cell]
		if len(e.res.Next) >= maxNext {
			break
		}
		if r.bits < leastWorth || c.item == exam.DeepPain || gentle && c.item.Has(exam.Noxious) {
			continue
		}
		e.res.Next = append(e.res.Next, NextTest{c.item.String(), c.site.String(), r.bits, r.secs, r.hurts, false})
	}
}

// spread writes, for each live signature of a group with findings, the weights of the
// quadrature points given those findings into e.points.
func (e *Engine) spread(g *group, mass []uint64) {
	_, qw := e.m.p.quadrature()
	for s, w := range mass {
		if w == 0 {
			continue
		}
		acc := qw
		for k, ci := range g.cells {
			if e.obs[ci] < 0 {
				continue
			}
			p := e.likelihood(g, k, ci, s)
			for q := range acc {
				acc[q] = float64(acc[q] * p[q])
			}
		}
		sum := total(&acc)
		for q := range acc {
			e.point[s*points+q] = acc[q] / sum
		}
	}
}

// information returns the mutual information between a cell's grade and the class, in bits.
func (e *Engine) information(g *group, k, ci int, full, mass []uint64, seen bool) float64 {
	m := e.m
	c := &m.lay.cells[ci]
	set := &m.sets[m.setOf[ci]]
	cats := c.cats
	pred := e.pred[:g.sigs*cats]
	for s, w := range mass {
		if w == 0 {
			continue
		}
		row := int(g.rows[k][s])
		for cat := range cats {
			v := set.margin[row*cats+cat]
			if seen {
				p := set.p[(row*cats+cat)*points:]
				v = 0
				for q := range points {
					v += float64(e.point[s*points+q] * p[q])
				}
			}
			if e.bent[ci] {
				v = float64(e.ctx[ci].keep*v) + e.ctx[ci].add[cat]
			}
			if c.item == exam.CutaneousTrunci && cat == trunciSomewhere {
				v = 0 // the levels stand for it
			}
			pred[s*cats+cat] = uint64(math.Round(float64(v * (1 << 62))))
		}
	}
	table := e.table[:len(m.classes)*cats]
	clear(table)
	for i, p := range g.pairs {
		w := full[i]
		if w == 0 {
			continue
		}
		row, at := table[int(p.class)*cats:], int(p.sig)*cats
		for cat := range cats {
			h, _ := bits.Mul64(w, pred[at+cat])
			row[cat] += h
		}
	}
	var byCat [trunciCats]uint64
	var all uint64
	for cl := range m.classes {
		for cat := range cats {
			byCat[cat] += table[cl*cats+cat]
		}
	}
	for cat := range cats {
		all += byCat[cat]
	}
	if all == 0 {
		return 0
	}
	// I = H(cat) − H(cat | class); every term is rounded to a whole number before it is summed.
	const unit = 1 << 50
	entropy := func(w, of uint64) int64 {
		if w == 0 || w == of {
			return 0
		}
		p := float64(w) / float64(of)
		return int64(math.Round(float64(float64(-p*logOf(p)) * unit)))
	}
	var before, after int64
	for cat := range cats {
		before += entropy(byCat[cat], all)
	}
	for cl := range m.classes {
		var sum uint64
		for cat := range cats {
			sum += table[cl*cats+cat]
		}
		if sum < all>>24 {
			continue
		}
		var h int64
		for cat := range cats {
			h += entropy(table[cl*cats+cat], sum)
		}
		after += int64(math.Round(float64(float64(h) * (float64(sum) / float64(all)))))
	}
	gain := float64(before-after) / unit / ln2
	return math.Round(float64(max(gain, 0)*1e9)) / 1e9
}
