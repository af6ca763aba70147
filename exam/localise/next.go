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
	ci, ok := e.m.lay.find(exam.Key{Item: i, Site: s})
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

// beginNext notes which cells may be suggested.
func (e *Engine) beginNext() {
	for ci := range e.open {
		e.open[ci] = e.candidate(ci)
	}
	e.rank = e.rank[:0]
	e.gentle = false
}

// worth weighs the untested cells of a group.
func (e *Engine) worth(g *group, seen bool) {
	m := e.m
	// What weighs less than a millionth of all moves no information that anybody could read.
	least := e.total >> 20
	kept := e.livePairs[:0]
	for _, p := range e.livePairs {
		p.full += p.looked
		if p.full > least {
			kept = append(kept, p)
		}
	}
	e.livePairs = kept
	clear(e.sigKnown[:g.sigs])
	e.liveSigs = e.liveSigs[:0]
	for i := range kept {
		if s := kept[i].sig; !e.sigKnown[s] {
			e.sigKnown[s] = true
			e.liveSigs = append(e.liveSigs, s)
		}
	}
	if seen {
		e.spread(g)
	}
	for k, ci := range g.cells {
		if !e.open[ci] {
			continue
		}
		c := &m.lay.cells[ci]
		secs, hurts := effort(c)
		b := e.information(g, k, ci, seen)
		if !c.item.Has(exam.Noxious) && b >= gentleWorth {
			e.gentle = true
		}
		cost := float64(secs) + 10
		if hurts {
			cost += hurtSeconds
		}
		e.rank = append(e.rank, rankedTest{ci, b, b / cost, secs, hurts, false})
	}
}

// endNext ranks what was weighed.
func (e *Engine) endNext() {
	m := e.m
	slices.SortStableFunc(e.rank, func(a, b rankedTest) int { return cmp.Or(cmp.Compare(b.worth, a.worth), cmp.Compare(a.cell, b.cell)) })
	e.res.Next = e.res.Next[:0]
	// Deep pain that is due stands first: it is owed, not suggested.
	for _, limb := range [4]exam.Site{exam.ThoracicLeft, exam.ThoracicRight, exam.PelvicLeft, exam.PelvicRight} {
		ci, _ := m.lay.find(exam.Key{Item: exam.DeepPain, Site: limb})
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
		if r.bits < leastWorth || c.item == exam.DeepPain || e.gentle && c.item.Has(exam.Noxious) {
			continue
		}
		e.res.Next = append(e.res.Next, NextTest{c.item.String(), c.site.String(), r.bits, r.secs, r.hurts, false})
	}
}

// spread writes, for each live signature of a group with findings, the weights of the
// quadrature points given those findings into e.point.
func (e *Engine) spread(g *group) {
	_, qw := e.m.p.quadrature()
	for _, s := range e.liveSigs {
		acc := qw
		for k, ci := range g.cells {
			if e.obs[ci] < 0 {
				continue
			}
			p := e.likelihood(g, k, ci, int(s))
			for q := range acc {
				acc[q] = float64(acc[q] * p[q])
			}
		}
		sum := total(&acc)
		for q := range acc {
			e.point[int(s)*points+q] = acc[q] / sum
		}
	}
}

// information returns the mutual information between a cell's grade and the class, in bits.
// Every sum is one of whole numbers.
func (e *Engine) information(g *group, k, ci int, seen bool) float64 {
	m := e.m
	c := &m.lay.cells[ci]
	set := &m.sets[m.setOf[ci]]
	cats := c.cats
	pred := e.pred[:g.sigs*cats]
	rows := g.rows[k]
	for _, s := range e.liveSigs {
		row := int(rows[s])
		at := pred[int(s)*cats : int(s)*cats+cats]
		for cat := range at {
			v := set.margin[row*cats+cat]
			if seen {
				p := set.p[(row*cats+cat)*points : (row*cats+cat)*points+points]
				w := e.point[int(s)*points : int(s)*points+points]
				v = float64(w[0]*p[0]) + float64(w[1]*p[1]) + float64(w[2]*p[2]) + float64(w[3]*p[3]) + float64(w[4]*p[4])
			}
			if e.bent[ci] {
				v = float64(e.ctx[ci].keep*v) + e.ctx[ci].add[cat]
			}
			at[cat] = uint64(float64(v * (1 << 62)))
		}
		if c.item == exam.CutaneousTrunci {
			at[trunciSomewhere] = 0 // the levels stand for it
		}
	}
	table := e.table[:len(m.classes)*cats]
	clear(table)
	for i := range e.livePairs {
		p := &e.livePairs[i]
		row := table[int(p.class)*cats : int(p.class)*cats+cats]
		at := pred[int(p.sig)*cats:][:len(row)]
		for cat, v := range at {
			h, _ := bits.Mul64(p.full, v)
			row[cat] += h
		}
	}
	// I = log N − Σ column·log column/N − Σ row·log row/N + Σ cell·log cell/N, logarithms to base 2.
	var byCat [trunciCats]uint64
	var plus, minus sum128
	var all uint64
	for cl := range m.classes {
		var sum uint64
		for cat, w := range table[cl*cats : cl*cats+cats] {
			if w > 0 {
				sum += w
				byCat[cat] += w
				plus.add(w, log2Fixed(w))
			}
		}
		if sum > 0 {
			all += sum
			minus.add(sum, log2Fixed(sum))
		}
	}
	if all == 0 {
		return 0
	}
	for _, w := range byCat[:cats] {
		if w > 0 {
			minus.add(w, log2Fixed(w))
		}
	}
	plus.add(all, log2Fixed(all))
	gain := (plus.float() - minus.float()) / float64(all) / (1 << log2Bits)
	return math.Round(float64(max(gain, 0)*1e6)) / 1e6
}

const log2Bits = 40

// log2Table holds log2(1 + i/4096) in units of 2⁻⁴⁰.
var log2Table = func() (t [4097]uint64) {
	for i := range t {
		t[i] = uint64(math.Round(float64(logOf(1+float64(float64(i)/4096)) / ln2 * (1 << log2Bits))))
	}
	return t
}()

// log2Fixed returns log2(w) for w > 0 in units of 2⁻⁴⁰, by whole numbers, to about 1e-8.
func log2Fixed(w uint64) uint64 {
	n := bits.Len64(w) - 1
	frac := w << (63 - n) << 1 // the bits after the leading one
	i := frac >> 52
	rest := frac << 12 >> 32 // the next 32 bits
	a, b := log2Table[i], log2Table[i+1]
	return uint64(n)<<log2Bits + a + (b-a)*rest>>32
}
