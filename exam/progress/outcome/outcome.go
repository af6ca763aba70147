// Package outcome looks at a whole practice: how long animals took until they walked, by problem
// and presenting grade, beside what has been published. Animals still on their way, moved
// away or discharged count as censored; death counts as a competing event.
//
// The clock starts at the first visit in this practice, for what came before was not watched.
// A milestone first seen at a visit happened between two visits: the days are «seen by day».
package outcome

import (
	"cmp"
	"math"
	"slices"
	"strings"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/stat"
)

// Grade is how an animal presents at the first visit.
type Grade uint8

// The grades. The last two gather several and stand only in published figures.
const (
	GradeUnknown   Grade = iota
	Walking              // ten steps unaided
	Paretic              // moves, does not walk unaided
	PlegicFelt           // does not move, deep pain felt
	PlegicNotFelt        // does not move, deep pain absent in both pelvic limbs and at the tail base
	PlegicUnknown        // does not move, deep pain not tested enough to tell
	NotWalkingFelt       // paretic or plegic, deep pain felt
	AnyNotWalking
)

// String returns the grade in words.
func (g Grade) String() string {
	return [...]string{"not known", "walks", "moves, does not walk", "no movement, deep pain felt", "no movement, deep pain not felt",
		"no movement, deep pain not tested", "does not walk, deep pain felt", "does not walk"}[g%8]
}

// GradeOf grades a visit by its walking and the pelvic limbs. Felt on the surface means felt deeply.
func GradeOf(v exam.Visit) Grade {
	walks, known := v.Grade(exam.Ambulation, exam.Midline)
	if known && walks >= 2 {
		return Walking
	}
	moves, tested := int8(-1), 0
	for _, limb := range []exam.Site{exam.PelvicLeft, exam.PelvicRight} {
		if g, ok := v.Grade(exam.VoluntaryMotor, limb); ok {
			moves = max(moves, g)
			tested++
		}
	}
	switch {
	case moves > 0 && known:
		return Paretic
	case moves > 0, moves < 0, tested < 2:
		return GradeUnknown
	}
	absent := 0
	for _, at := range []exam.Site{exam.PelvicLeft, exam.PelvicRight, exam.TailBase} {
		if s, ok := v.Grade(exam.SuperficialPain, at); ok && s >= 1 {
			return PlegicFelt
		}
		if d, ok := v.Grade(exam.DeepPain, at); ok {
			if d >= 1 {
				return PlegicFelt
			}
			absent++
		}
	}
	if absent == 3 {
		return PlegicNotFelt
	}
	return PlegicUnknown
}

// Problem is a class of diagnoses that outcomes are counted by.
type Problem uint8

// The problems.
const (
	OtherProblem Problem = iota
	ThoracolumbarDisc
	CervicalDisc
	Infarct // fibrocartilaginous embolism and non-compressive extrusion
	DegenerativeMyelopathy
	Lumbosacral
	PlexusInjury
	Polyradiculoneuritis
)

// String returns the problem in words.
func (p Problem) String() string {
	return [...]string{"other", "thoracolumbar disc extrusion", "cervical disc disease", "infarct or non-compressive extrusion", "degenerative myelopathy",
		"lumbosacral disease", "brachial plexus injury", "polyradiculoneuritis"}[p%8]
}

// ProblemOf puts a diagnosis as people write it into a class, by its words and its level.
func ProblemOf(p exam.Problem, s exam.Species) Problem {
	d := strings.ToLower(p.Diagnosis)
	has := func(words ...string) bool {
		for _, w := range words {
			if strings.Contains(d, w) {
				return true
			}
		}
		return false
	}
	region := exam.Region(0)
	if from, _, err := exam.ParseLevelRange(p.Level, s); err == nil {
		region = from.Region()
	}
	switch {
	case has("infarct", "embol", "fce", "non-compressive", "annpe", "contusive"):
		return Infarct
	case has("degenerative myelopathy"):
		return DegenerativeMyelopathy
	case has("lumbosacral", "cauda equina"):
		return Lumbosacral
	case has("plexus"):
		return PlexusInjury
	case has("polyradiculo", "coonhound"):
		return Polyradiculoneuritis
	case has("disc", "disk", "ivde", "ivdd", "extrusion"):
		if region == exam.RegionC || has("cervical") {
			return CervicalDisc
		}
		if region == exam.RegionT || region == exam.RegionL || has("thoracolumbar") {
			return ThoracolumbarDisc
		}
	}
	return OtherProblem
}

// Animal is one patient with its visits.
type Animal struct {
	Patient exam.Patient
	Visits  []exam.Visit
}

// End is how the watch over an animal ended.
type End uint8

// The ends; their values are the causes of stat.Spell.
const (
	StillWatched End = stat.Censored // on its way, discharged before it walked, or lost
	Walked       End = 1
	Dead         End = 2
)

// Case is one animal that did not walk at its first visit.
type Case struct {
	Patient exam.ID
	Problem Problem
	Grade   Grade
	End     End
	Days    float64 // from the first visit until it was seen walking, died or was last seen
	NotYet  float64 // the last day on which it was seen and did not walk; NaN where there is none
	Delay   float64 // days from surgery, or else from onset, to the first visit; NaN where not known
}

// CaseOf follows one animal; false where it walked at the first visit, or never had its walking graded.
func CaseOf(a Animal) (Case, bool) {
	visits := slices.Clone(a.Visits)
	slices.SortStableFunc(visits, func(x, y exam.Visit) int { return x.Examined.Compare(y.Examined) })
	if len(visits) == 0 {
		return Case{}, false
	}
	first := visits[0]
	c := Case{Patient: a.Patient.ID, Grade: GradeOf(first), NotYet: 0, Delay: math.NaN()}
	if c.Grade == Walking || c.Grade == GradeUnknown {
		return Case{}, false
	}
	if p, ok := a.Patient.ProblemAt(first.Examined); ok {
		c.Problem = ProblemOf(p, a.Patient.Species)
		if d, ok := p.Surgery.DaysBefore(first.Examined); ok && d >= 0 {
			c.Delay = d
		} else if d, ok := p.Onset.DaysBefore(first.Examined); ok && d >= 0 {
			c.Delay = d
		}
	}
	day := func(v exam.Visit) float64 { return v.Examined.Sub(first.Examined).Hours() / 24 }
	for _, v := range visits {
		g, ok := v.Grade(exam.Ambulation, exam.Midline)
		if !ok {
			continue
		}
		if g >= 2 {
			c.End, c.Days = Walked, day(v)
			return c, true
		}
		c.NotYet = day(v)
	}
	c.Days = day(visits[len(visits)-1])
	if a.Patient.Status == exam.Died {
		c.End = Dead
		if t, ok := a.Patient.StatusSince.Time(); ok {
			c.Days = max(c.Days, t.Sub(first.Examined).Hours()/24)
		}
	}
	return c, true
}

// Group is the outcome of the animals with one problem and grade.
type Group struct {
	Problem   Problem
	Grade     Grade
	Cases     []Case
	Walked    int
	Died      int
	Curve     stat.Curve       // of not yet walking; death counts as censored: what Kaplan–Meier can say
	Walking   []stat.Incidence // share that walks, with death competing
	Death     []stat.Incidence
	Median    float64 // days by which half walk, by the curve; NaN where fewer do
	MedianLow float64
	MedianUp  float64
	Delay     float64 // median of the known delays; NaN where none is known
	Published []Figure
}

// AtRisk returns how many of the group were still watched and not walking before each of the days.
func (g Group) AtRisk(days []float64) []int {
	out := make([]int, len(days))
	for i, d := range days {
		out[i] = g.Curve.AtRisk(d)
	}
	return out
}

// Of groups the cases of a practice by problem and grade, largest group first.
func Of(animals []Animal) []Group {
	type key struct {
		p Problem
		g Grade
	}
	by := map[key]*Group{}
	for _, a := range animals {
		c, ok := CaseOf(a)
		if !ok {
			continue
		}
		k := key{c.Problem, c.Grade}
		if by[k] == nil {
			by[k] = &Group{Problem: c.Problem, Grade: c.Grade, Published: Published(c.Problem, c.Grade)}
		}
		by[k].Cases = append(by[k].Cases, c)
	}
	var out []Group
	for _, g := range by {
		g.work()
		out = append(out, *g)
	}
	slices.SortFunc(out, func(a, b Group) int {
		return cmp.Or(len(b.Cases)-len(a.Cases), int(a.Problem)-int(b.Problem), int(a.Grade)-int(b.Grade))
	})
	return out
}

func (g *Group) work() {
	spells := make([]stat.Spell, len(g.Cases))
	watched := make([]stat.Spell, len(g.Cases))
	var delays []float64
	for i, c := range g.Cases {
		spells[i] = stat.Spell{Time: c.Days, Cause: int(c.End)}
		watched[i] = spells[i]
		switch c.End {
		case Walked:
			g.Walked++
		case Dead:
			g.Died++
			watched[i].Cause = stat.Censored
		}
		if !math.IsNaN(c.Delay) {
			delays = append(delays, c.Delay)
		}
	}
	g.Curve = stat.KaplanMeier(watched, stat.LimitsLogLog)
	g.Walking = stat.AalenJohansen(spells, int(Walked))
	g.Death = stat.AalenJohansen(spells, int(Dead))
	g.Median, g.MedianLow, g.MedianUp = g.Curve.Quantile(0.5)
	g.Delay = stat.Median(delays)
}

// Differ tests whether groups differ in the time to walking (log-rank).
func Differ(groups []Group) stat.LogRankTest {
	spells := make([][]stat.Spell, len(groups))
	for i, g := range groups {
		spells[i] = g.Curve.All
	}
	return stat.LogRank(spells, 0)
}
