package repeat

import (
	"fmt"
	"math"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/stat"
)

// Names of the scales in Quantity.Scale: the keys of package scale.
const (
	Frankel   = "frankel"
	OpenField = "open-field"
	Texas     = "texas-pelvic"
	FINFUN    = "functional"
	Ashworth  = "ashworth"
)

func ownSource(r Row) string {
	who := "two examiners"
	if r.SameExaminer {
		who = "one examiner twice"
	}
	return fmt.Sprintf("this practice: %d pairs of %d animals, %s", r.Pairs, r.Animals, who)
}

// evenSD is the standard deviation of a scale of whole steps used evenly from end to end:
// the widest realistic spread, hence the most cautious SEM.
func evenSD(steps int) float64 { return math.Sqrt((float64(steps)*float64(steps) - 1) / 12) }

// scaleNoise: no SEM or MDC was published for any of these scales; each is derived as
// SD·√(1 − ICC) with the SD of a scale used evenly, the ICC as published.
func scaleNoise(steps int, icc, claim float64, source string) Noise {
	sem := stat.SEM(evenSD(steps), icc)
	n := Noise{SEM: sem, MDC95: stat.MDC95(sem), Source: source}
	n.Steps = math.Ceil(n.MDC95)
	if claim > 0 {
		n.Steps = claim
	}
	return n
}

// Published returns the noise of a quantity as published or derived from published figures.
// False where none is known: the practice's own repeat exams can supply it. Two examiners'
// girths and joint angles are never compared.
func Published(q Quantity, sameExaminer bool) (Noise, bool) {
	switch q.Measure {
	case exam.ThighGirth, exam.BrachiumGirth, exam.AntebrachiumGirth, exam.CrusGirth:
		if !sameExaminer {
			return Noise{}, false // between observers 4.8 (2.6) cm: not comparable
		}
		n := Noise{SEM: 1, Floor: 1, Source: "derived from Bascunan-2016: at least 1 cm within one observer; 1.96·√2·1 = 2.8 cm"}
		n.MDC95 = stat.MDC95(n.SEM)
		return n, true
	case exam.RangeOfMotion:
		if !sameExaminer {
			return Noise{}, false
		}
		// Under 6° never, 6–9° possible, over 9° likely: 3° as the SD of a reading gives 8.3°.
		return Noise{SEM: 3, MDC95: 9, Floor: 6, Source: "derived from Jaegger-2002: readings vary by 3° (median); 1.96·√2·3 = 8.3°, rounded up"}, true
	case exam.WeightBearing:
		// The pelvic left–right difference of 21 sound dogs has SD 2.7 % of body weight; half of it
		// falls on each limb. The spread between dogs is taken as noise, so the value is cautious.
		sem := 2.7 / 2
		return Noise{SEM: sem, MDC95: stat.MDC95(sem), Source: "derived from Hyyt-2012: SD 2.7 % of the left–right difference in sound dogs, half for each limb"}, true
	case exam.ScaleFrankel:
		q = Quantity{Scale: Frankel}
	case exam.ScaleOpenField:
		q = Quantity{Scale: OpenField}
	case exam.ScaleTexas:
		q = Quantity{Scale: Texas}
	case exam.ScaleAshworth:
		q = Quantity{Scale: Ashworth}
	}
	switch q.Scale {
	case OpenField:
		return scaleNoise(15, 0.96, 0, "derived from OGL-2020: ICC 0.96, SD of a scale used evenly"), true
	case Texas:
		return scaleNoise(21, 0.96, 0, "derived from OGL-2020: ICC 0.96, SD of a scale used evenly; pelvic pair"), true
	case Frankel:
		if sameExaminer {
			return scaleNoise(6, 0.85, 1, "judgement after OGL-2020 (ICC 0.85): one grade for the same rater"), true
		}
		return scaleNoise(6, 0.85, 2, "derived from OGL-2020: ICC 0.85, SD of a scale used evenly"), true
	case FINFUN:
		if sameExaminer {
			return scaleNoise(45, 0.994, 0, "derived from FINFUN-2018: within raters 0.994, SD of a scale used evenly"), true
		}
		return scaleNoise(45, 0.919, 0, "derived from FINFUN-2018: between raters 0.919, SD of a scale used evenly"), true
	case Ashworth:
		return scaleNoise(6, 0.36, 0, "derived from MASrel: test and retest 0.36 at the low end, SD of a scale used evenly"), true
	}
	if q.Item != exam.NoItem && !q.Item.Has(exam.Unordered) {
		return itemNoise(q.Item)
	}
	return Noise{}, false
}

// itemNoise: a reading is off with probability e, then by one grade. A difference of one
// grade then comes from noise in 2e(1 − e) of pairs and of two grades in about e²: one step
// is weak evidence, two steps are more than noise. A yes–no sign never counts alone.
func itemNoise(i exam.Item) (Noise, bool) {
	in := i.Info()
	if in.Normal < 0 || len(in.Grades) < 2 {
		return Noise{}, false
	}
	e, source := ReadingError(i)
	n := Noise{SEM: math.Sqrt(e), Floor: 1, Steps: 2, Source: source}
	n.MDC95 = stat.MDC95(n.SEM)
	return n, true
}

// StepShareMargin returns the smallest difference, in percent points, between two shares of
// counted steps that chance exceeds in 1 of 20 comparisons, near 50 % and n steps a visit
// (binomial; steps of one walk depend on each other, so it is a lower bound). NaN for n < 1.
func StepShareMargin(n int) float64 {
	if n < 1 {
		return math.NaN()
	}
	return 100 * stat.MDC95(math.Sqrt(0.25/float64(n)))
}
