package view

import (
	"fmt"
	"math"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/progress"
	"cordwalk.example/cordwalk/exam/progress/repeat"
	"cordwalk.example/cordwalk/exam/scale"
)

// Repeatability is what the practice's own repeat exams say of how far two readings of an
// unchanged animal lie apart.
func Repeatability(cases []CaseHistory) repeat.Practice {
	var pairs []repeat.Pair
	for _, c := range cases {
		pairs = append(pairs, repeat.RepeatPairs(c.Visits)...)
	}
	return repeat.Learn(pairs, progress.Scores)
}

// RepeatRow is one quantity that the practice has read twice, in words.
type RepeatRow struct {
	Quantity string // the name of the item, measure or scale
	Who      string // one examiner twice, or two examiners
	Pairs    string // how many pairs of how many animals
	Agree    string // weighted kappa, ICC; empty where there are too few pairs
	Noise    string // SEM and MDC95
	Used     string // in use, or how many more pairs it takes
}

// RepeatRows says what the practice has measured, for the page that shows it.
func RepeatRows(p repeat.Practice) []RepeatRow {
	var out []RepeatRow
	for _, r := range p.Rows() {
		x := RepeatRow{Quantity: quantityName(r.Quantity), Who: words.T("two examiners")}
		if r.SameExaminer {
			x.Who = words.T("one examiner")
		}
		x.Pairs = words.T("%s of %s", words.N(r.Pairs, "%d pair", "%d pairs", r.Pairs), words.N(r.Animals, "%d animal", "%d animals", r.Animals))
		number := func(v float64) string { return words.Decimal("", fmt.Sprintf("%.2f", v)) }
		if k := r.Kappa.Kappa; r.Quantity.Item != exam.NoItem && finite(k) {
			x.Agree = words.T("weighted kappa %s, the same grade in %s", number(k), words.T("%d %%", int(100*r.Exact+0.5)))
		} else if finite(r.ICC) {
			x.Agree = words.T("ICC %s", number(r.ICC))
			if finite(r.ICCLow) && finite(r.ICCHigh) {
				x.Agree = words.T("ICC %s (%s to %s)", number(r.ICC), number(r.ICCLow), number(r.ICCHigh))
			}
		}
		if finite(r.Repeats.SEM) && finite(r.Repeats.MDC95) {
			x.Noise = words.T("SEM %s, MDC95 %s", number(r.Repeats.SEM), number(r.Repeats.MDC95))
		}
		switch {
		case r.Used:
			x.Used = words.T("in use")
		case r.Needed > 0:
			x.Used = words.N(r.Needed, "%d more pair until it is used", "%d more pairs until it is used", r.Needed)
		case r.Animals < repeat.EnoughAnimals:
			n := repeat.EnoughAnimals - r.Animals
			x.Used = words.N(n, "%d more animal until it is used", "%d more animals until it is used", n)
		default:
			x.Used = words.T("not used: the readings never differed")
		}
		out = append(out, x)
	}
	return out
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

// quantityName is the name of what was read twice.
func quantityName(q repeat.Quantity) string {
	switch {
	case q.Item != exam.NoItem:
		return ItemName(q.Item)
	case q.Measure != exam.NoMeasure:
		return MeasureName(q.Measure)
	}
	if s, err := scale.Parse(q.Scale); err == nil {
		return words.Of(s.Info().Name)
	}
	return q.Scale
}
