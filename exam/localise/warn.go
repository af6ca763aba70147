package localise

import (
	"math"
	"strings"

	"cordwalk.example/cordwalk/exam"
)

// coreGroups are what an exam must hold before it can be expected to localise.
var coreGroups = []struct {
	words string
	items []exam.Item
}{
	{"gait (movement of each limb)", []exam.Item{exam.VoluntaryMotor, exam.Ambulation, exam.Ataxia, exam.Lameness}},
	{"postural reactions", []exam.Item{exam.PawPlacement, exam.Hopping, exam.TactilePlacing}},
	{"reflexes of the thoracic limbs", []exam.Item{exam.Withdrawal, exam.WithdrawalElbow, exam.ExtensorCarpi, exam.Triceps, exam.Biceps}},
	{"reflexes of the pelvic limbs", []exam.Item{exam.Patellar, exam.Withdrawal, exam.WithdrawalHock}},
	{"perineal reflex and tail", []exam.Item{exam.Perineal, exam.TailTone, exam.AnalTone}},
	{"palpation of the spine", []exam.Item{exam.SpinalPain}},
	{"head and cranial nerves", []exam.Item{exam.Mentation, exam.Menace, exam.HeadTilt, exam.Palpebral}},
}

// leastAnswer is the probability from which the leading region counts as an answer: judgement.
const leastAnswer = 0.5

// summary says the leading answer in words.
func (e *Engine) summary() {
	lead := e.res.Regions[0]
	e.res.Enough = lead.Probability >= leastAnswer && e.tested() >= 3
	if !e.res.Enough {
		e.res.Summary = "not enough to say"
		return
	}
	if len(e.res.Sites) == 0 {
		e.res.Summary = lead.Region
		return
	}
	// «L6–S1, left: cord or roots, 83 %»: cord and roots of one place and side are hard to
	// tell apart and are said together.
	top := e.classes[0]
	c := &e.m.classes[top.class]
	sum, together := top.sum, 0
	if c.kind == Cord || c.kind == Root {
		for _, r := range e.classes[1:] {
			o := &e.m.classes[r.class]
			if o.kind != c.kind && (o.kind == Cord || o.kind == Root) && o.region == c.region && o.side == c.side && o.place == c.place {
				if float64(r.sum) > 0.1*float64(top.sum) {
					together = 1
					sum += r.sum
				}
			}
		}
	}
	pct := int(math.Round(float64(e.share(sum) * 100)))
	e.res.Summary = e.note(1, top.class*2+together, pct, func() string {
		words := c.words
		if together == 1 {
			place, _, _ := strings.Cut(words, ": ")
			words = place + ": cord or roots"
		}
		return words + ", " + percent(pct)
	})
}

func percent(p int) string {
	switch {
	case p < 10:
		return string(rune('0'+p)) + " %"
	case p < 100:
		return string(rune('0'+p/10)) + string(rune('0'+p%10)) + " %"
	}
	return "100 %"
}

func (e *Engine) tested() int {
	n := 0
	for _, o := range e.obs {
		if o >= 0 {
			n++
		}
	}
	return n
}

// note keeps sentences that were made once, so that the steady state makes none.
func (e *Engine) note(kind, a, b int, make func() string) string {
	k := uint64(kind)<<56 | uint64(uint32(a)&0xFFFFFFF)<<28 | uint64(uint32(b)&0xFFFFFFF)
	s, ok := e.notes[k]
	if !ok {
		if len(e.notes) > 4096 {
			clear(e.notes)
		}
		s = make()
		e.notes[k] = s
	}
	return s
}

// impossible pairs of findings: both cannot hold, whatever the lesion.
var contradictions = []struct {
	a    exam.Item
	inA  func(g int8) bool
	b    exam.Item
	inB  func(g int8) bool
	site func(a, b exam.Site) bool
}{
	{exam.SuperficialPain, func(g int8) bool { return g >= 1 }, exam.DeepPain, func(g int8) bool { return g == 0 }, sameSite},
	{exam.Ambulation, func(g int8) bool { return g == 2 }, exam.VoluntaryMotor, func(g int8) bool { return g == 0 }, nil},
	{exam.VoluntaryMotor, func(g int8) bool { return g >= 3 }, exam.DeepPain, func(g int8) bool { return g == 0 }, sameSite},
	{exam.Ambulation, func(g int8) bool { return g == 0 }, exam.Knuckling, func(g int8) bool { return g == 3 }, nil},
	{exam.PawPlacement, func(g int8) bool { return g == 2 }, exam.Knuckling, func(g int8) bool { return g == 0 }, sameSite},
	{exam.Withdrawal, func(g int8) bool { return g == 2 }, exam.Tone, func(g int8) bool { return g == 0 }, sameSite},
	{exam.Mentation, func(g int8) bool { return g == 0 }, exam.VoluntaryMotor, func(g int8) bool { return g == 4 }, nil},
}

func sameSite(a, b exam.Site) bool { return a == b }

// contradictionBits: a finding counts against the leader from so many decibans on: judgement.
const contradictionDecibans = 8

// misfit is how many standard deviations the best explanation's likelihood may lie below what
// it predicts for itself before the exam is said to fit nothing: judgement.
const misfit = 3.2

func (e *Engine) warn() {
	m := e.m
	w := e.res.Warnings[:0]
	n := e.tested()
	if !e.res.Enough {
		mask := 0
		for i, core := range coreGroups {
			if !e.hasCore(i, core.items) {
				mask |= 1 << i
			}
		}
		w = append(w, e.note(2, mask, n, func() string {
			var missing []string
			for i, core := range coreGroups {
				if mask>>i&1 == 1 {
					missing = append(missing, core.words)
				}
			}
			if len(missing) == 0 {
				return "not enough to say: the findings leave several regions open"
			}
			return "not enough to say: not tested are " + strings.Join(missing, "; ")
		}))
	}
	if a := e.res.Alone; a != nil && a.Regions[0].Region != e.res.Regions[0].Region {
		x, y := regionByName(a.Regions[0].Region), regionByName(e.res.Regions[0].Region)
		w = append(w, e.note(3, int(x), int(y), func() string {
			return "the exam alone points to " + x.String() + ", with the file to " + y.String() + ": look again at what differs"
		}))
	}
	for i := range contradictions {
		c := &contradictions[i]
		for _, sa := range c.a.Info().Sites {
			ga, ok := e.grade(c.a, sa)
			if !ok || !c.inA(ga) {
				continue
			}
			for _, sb := range c.b.Info().Sites {
				gb, ok := e.grade(c.b, sb)
				if !ok || !c.inB(gb) || c.site != nil && !c.site(sa, sb) || len(w) >= 8 {
					continue
				}
				w = append(w, e.note(4, i<<8|int(sa), int(sb)<<8|int(ga)<<4|int(gb), func() string {
					return "these contradict each other: " + phrase(c.a, sa, ga) + " and " + phrase(c.b, sb, gb)
				}))
			}
		}
	}
	if n >= 4 {
		if z := e.fit(); z < -misfit {
			w = append(w, "the exam fits no explanation well: the best one does not predict these findings; check them, or think of two lesions")
		}
	}
	// The strongest finding for the leader and the strongest against it.
	var up, down *Evidence
	for i := range e.res.Evidence {
		x := &e.res.Evidence[i]
		if x.Decibans >= contradictionDecibans && up == nil {
			up = x
		}
		if x.Decibans <= -contradictionDecibans && down == nil {
			down = x
		}
	}
	if up != nil && down != nil && e.res.Regions[0].Probability < 0.9 {
		a, _ := exam.ParseItem(up.Item)
		b, _ := exam.ParseItem(down.Item)
		sa, _ := exam.ParseSite(up.Site)
		sb, _ := exam.ParseSite(down.Site)
		ga, gb := int8(up.Grade), int8(down.Grade)
		w = append(w, e.note(5, int(a)<<8|int(sa), int(b)<<12|int(sb)<<4|int(ga)<<2|int(gb), func() string {
			return "these point apart: " + phrase(a, sa, ga) + " and " + phrase(b, sb, gb)
		}))
	}
	_ = m
	e.res.Warnings = w
}

func phrase(i exam.Item, s exam.Site, g int8) string {
	return i.String() + " at " + s.String() + " " + i.GradeWord(g)
}

func (e *Engine) hasCore(which int, items []exam.Item) bool {
	for _, i := range items {
		for _, s := range i.Info().Sites {
			if which == 2 && s.IsPelvic() || which == 3 && s.IsThoracic() {
				continue
			}
			if _, ok := e.grade(i, s); ok {
				return true
			}
		}
	}
	return false
}

// fit returns how the best hypothesis's likelihood stands to what it expects of its own
// findings, in standard deviations.
func (e *Engine) fit() float64 {
	m := e.m
	best, top := -1, uint64(0)
	for _, h := range e.live {
		if e.weightFull[h] > top {
			best, top = int(h), e.weightFull[h]
		}
	}
	if best < 0 {
		return 0
	}
	got, mean, variance := 0.0, 0.0, 0.0
	for gi := range m.groups {
		g := &m.groups[gi]
		sig := -1
		for k, ci := range g.cells {
			if e.obs[ci] < 0 {
				continue
			}
			if sig < 0 {
				sig = int(g.pairs[g.of[best]].sig)
			}
			set := &m.sets[m.setOf[ci]]
			row := int(g.rows[k][sig])
			a, b := 0.0, 0.0
			for cat := range set.cats {
				if set.item == exam.CutaneousTrunci && cat == trunciSomewhere {
					continue
				}
				p := set.margin[row*set.cats+cat]
				l := logOf(p)
				a += float64(p * l)
				b += float64(float64(p*l) * l)
				if cat == int(e.obs[ci]) {
					got += l
				}
			}
			mean += a
			variance += max(b-float64(a*a), 0)
		}
	}
	if variance <= 0 {
		return 0
	}
	// Findings of one arc err together: the spread is half as large again (judgement).
	return (got - mean) / float64(1.5*math.Sqrt(variance))
}
