package view

import (
	"cmp"
	"slices"
	"strings"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/stat"
)

// Presenting is how an animal could walk and feel at its first visit.
type Presenting uint8

// The presenting grades; an animal that walks at first has nothing to wait for.
const (
	PresentUnknown Presenting = iota // walking or feeling was not tested
	PresentWalking                   // takes ten steps unaided
	PresentMoving                    // does not walk, moves a limb on purpose
	PresentFeeling                   // no movement, deep pain felt
	PresentNotFelt                   // no movement, deep pain absent in both limbs and at the tail base where tested
	presentingCount
)

var presentingTitles = [presentingCount]string{"not fully tested", "walking", "not walking, moves", "no movement, deep pain felt", "no movement, deep pain absent"}

// Words says the grade.
func (p Presenting) Words() string { return words.Of(presentingTitles[p%presentingCount]) }

// String returns a stable word.
func (p Presenting) String() string {
	return [...]string{"unknown", "walking", "moving", "plegic-felt", "plegic-not-felt"}[p%presentingCount]
}

// PresentingOf grades a visit. Absent deep pain needs both pelvic limbs (progression.md
// 1.0: Lewis2020 asks for the tail base too, which is taken where it was tested).
func PresentingOf(v exam.Visit) Presenting {
	if g, ok := v.Grade(exam.Ambulation, exam.Midline); ok && g == 2 {
		return PresentWalking
	} else if !ok {
		return PresentUnknown
	}
	known, moves := false, false
	for _, l := range []exam.Site{exam.PelvicLeft, exam.PelvicRight} {
		if g, ok := v.Grade(exam.VoluntaryMotor, l); ok {
			known = true
			moves = moves || g > 0
		}
	}
	switch {
	case !known:
		return PresentUnknown
	case moves:
		return PresentMoving
	}
	felt, lost := false, 0
	for _, s := range []exam.Site{exam.PelvicLeft, exam.PelvicRight, exam.TailBase} {
		f := exam.Feeling(v, s)
		if f.Known && f.Grade > 0 {
			felt = true
		}
		if f.Known && f.Grade == 0 && s.IsPelvic() {
			lost++
		}
	}
	switch {
	case felt:
		return PresentFeeling
	case lost == 2:
		return PresentNotFelt
	}
	return PresentUnknown
}

// The causes that end a spell.
const (
	causeWalks = 1
	causeDied  = 2
)

// Published is a published figure to stand beside a practice's own.
type Published struct {
	Words  string
	Share  float64 // of animals that walked, 0 where only a time is published
	N      int     // animals; 0 where the paper's abstract does not say
	Days   float64 // typical days to walking, 0 where not published
	Source string
}

// publishedWalking is what case series say of walking again after a disc extrusion
// (progression.md 2.1). Definitions and selection differ: no prediction for one animal.
var publishedWalking = map[Presenting][]Published{
	PresentMoving: {
		{"not walking or no movement, deep pain felt, operated", 107. / 112, 112, 12.9, "Davis2002, abstract: within 3 months, mean days"},
		{"not walking or no movement, deep pain felt, not operated, under 15 kg", 49. / 51, 51, 11, "Khan2024: by 12 weeks, median days"},
	},
	PresentFeeling: {
		{"not walking or no movement, deep pain felt, operated", 107. / 112, 112, 12.9, "Davis2002, abstract: within 3 months, mean days"},
		{"no movement, deep pain felt, not operated", 0.62, 0, 0, "Langerhuus2017, abstract: mean of case series"},
	},
	PresentNotFelt: {
		{"deep pain absent, operated, rehabilitation", 55. / 94, 94, 0, "Martins2021: within 3 months, uncontrolled"},
		{"deep pain absent over 96 h, operated", 22. / 36, 36, 30, "Feb2023: median days"},
		{"deep pain absent, not operated", 10. / 21, 21, 25, "Khan2024: median days"},
	},
}

// OutcomeGroup is one group of a practice's animals: a problem and a presenting grade.
type OutcomeGroup struct {
	Problem    string
	Presenting Presenting
	Animals    int
	Walked     int
	Died       int
	Lost       int              // still not walking when last seen: censored
	Curve      stat.Curve       // share not walking yet; deaths and last visits end the watching
	Walking    []stat.Incidence // share walking, beside death as a competing event
	Dying      []stat.Incidence
	AtRisk     []int // animals still watched at each of OutcomeDays
	Published  []Published
}

// OutcomeDays are the days at which the numbers at risk are shown.
var OutcomeDays = []float64{0, 7, 14, 28, 42, 84, 168}

// CaseHistory is one animal for the outcomes.
type CaseHistory struct {
	Patient exam.Patient
	Visits  []exam.Visit
}

// Outcomes works out, for each problem and presenting grade, the time from the first visit
// until an animal was first seen to walk. An animal that was never seen to walk is censored
// at its last visit; death is an event that competes. Animals that walked at the first
// visit are left out. Milestones are met between two visits: the curve says «seen by day x».
func Outcomes(cases []CaseHistory) []OutcomeGroup {
	type key struct {
		problem string
		present Presenting
	}
	spells := map[key][]stat.Spell{}
	names := map[string]string{}
	for _, c := range cases {
		visits := sortedVisits(c.Visits)
		if len(visits) == 0 {
			continue
		}
		first := visits[0]
		grade := PresentingOf(first)
		if grade == PresentWalking {
			continue
		}
		sp := stat.Spell{Time: days(first, visits[len(visits)-1])}
		for _, v := range visits[1:] {
			if g, ok := v.Grade(exam.Ambulation, exam.Midline); ok && g == 2 {
				sp = stat.Spell{Time: days(first, v), Cause: causeWalks}
				break
			}
		}
		if sp.Cause == stat.Censored && c.Patient.Status == exam.Died {
			if t, ok := c.Patient.StatusSince.DaysBefore(first.Examined); ok && -t >= 0 {
				sp.Time = max(sp.Time, -t)
			}
			sp.Cause = causeDied
		}
		name := mainProblem(c.Patient, first)
		k := key{strings.ToLower(name), grade}
		if _, ok := names[k.problem]; !ok {
			names[k.problem] = name
		}
		spells[k] = append(spells[k], sp)
	}
	var out []OutcomeGroup
	for k, list := range spells {
		o := OutcomeGroup{Problem: names[k.problem], Presenting: k.present, Animals: len(list)}
		walking := make([]stat.Spell, len(list))
		for i, s := range list {
			walking[i] = s
			switch s.Cause {
			case causeWalks:
				o.Walked++
			case causeDied:
				o.Died++
				walking[i].Cause = stat.Censored
			default:
				o.Lost++
			}
		}
		o.Curve = stat.KaplanMeier(walking, stat.LimitsLogLog)
		o.Walking = stat.AalenJohansen(list, causeWalks)
		o.Dying = stat.AalenJohansen(list, causeDied)
		for _, d := range OutcomeDays {
			n := 0
			for _, s := range list {
				if s.Time >= d {
					n++
				}
			}
			o.AtRisk = append(o.AtRisk, n)
		}
		if strings.Contains(k.problem, "disc extrusion") {
			o.Published = publishedWalking[k.present]
		}
		out = append(out, o)
	}
	slices.SortFunc(out, func(a, b OutcomeGroup) int {
		return cmp.Or(cmp.Compare(b.Animals, a.Animals), strings.Compare(a.Problem, b.Problem), cmp.Compare(a.Presenting, b.Presenting))
	})
	return out
}

func days(a, b exam.Visit) float64 { return b.Examined.Sub(a.Examined).Hours() / 24 }

// mainProblem is the problem that an animal was first seen for.
func mainProblem(p exam.Patient, v exam.Visit) string {
	if pr, ok := p.ProblemAt(v.Examined); ok {
		return pr.Diagnosis
	}
	if len(p.Problems) > 0 {
		return p.Problems[0].Diagnosis
	}
	return words.T("no problem on file")
}

// Median returns the day by which half of the animals were seen to walk by the
// Kaplan–Meier curve, and false where the curve does not come down that far.
func (o OutcomeGroup) Median() (float64, bool) {
	for _, s := range o.Curve.Steps {
		if s.Survival <= 0.5 {
			return s.Time, true
		}
	}
	return 0, false
}

// ShareBy returns the share of animals seen to walk by a day, with its 95 % limits, by the
// Kaplan–Meier curve; false before the first event.
func (o OutcomeGroup) ShareBy(day float64) (share, low, high float64, ok bool) {
	for _, s := range o.Curve.Steps {
		if s.Time > day {
			break
		}
		share, low, high, ok = 1-s.Survival, 1-s.High, 1-s.Low, true
	}
	return share, low, high, ok
}

// Words says the group in one or two sentences, with the caution that few animals deserve.
func (o OutcomeGroup) Words() string {
	s := words.N(o.Animals, "%d animal", "%d animals", o.Animals) + ", " +
		words.T("%d seen to walk, %d died, %d not walking when last seen", o.Walked, o.Died, o.Lost) + "."
	if m, ok := o.Median(); ok {
		s += " " + words.T("Half walked by day %.0f.", m)
	}
	if o.Animals < fewAnimals {
		s += " " + words.T("Too few animals to compare with published figures.")
	}
	return s
}

// fewAnimals is the number below which a practice's own figures are not set against
// published ones (a choice: at 10 the 95 % interval of a share is still 60 points wide).
const fewAnimals = 10

// outcomeTerms are the words of this file that stand in tables.
func outcomeTerms() []string {
	out := append([]string(nil), presentingTitles[:]...)
	for _, list := range publishedWalking {
		for _, p := range list {
			out = append(out, p.Words)
		}
	}
	return out
}
