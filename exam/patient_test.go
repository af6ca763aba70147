package exam

import (
	"math"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
)

var noon = time.Date(2026, 3, 9, 12, 0, 0, 0, time.FixedZone("", 3600))

func TestPatientValidate(t *testing.T) {
	good := Patient{Name: "Juno", Species: Dog, Born: "2019-05", Problems: []Problem{{Diagnosis: "disc extrusion", Level: "T12-T13"}}, Precautions: []PrecautionOn{{Code: "implant"}}}
	require.NoError(t, good.Validate())
	for name, change := range map[string]func(*Patient){
		"name": func(p *Patient) { p.Name = " " }, "long name": func(p *Patient) { p.Name = strings.Repeat("é", 200) }, "species": func(p *Patient) { p.Species = 0 },
		"born": func(p *Patient) { p.Born = "2019-02-30" }, "days": func(p *Patient) { p.RecheckDays = -1 }, "diagnosis": func(p *Patient) { p.Problems = []Problem{{}} },
		"level": func(p *Patient) { p.Problems = []Problem{{Diagnosis: "x", Level: "Z1"}} }, "precaution": func(p *Patient) { p.Precautions = []PrecautionOn{{Code: "?"}} },
		"precaution site": func(p *Patient) { p.Precautions = []PrecautionOn{{Code: "implant", Site: "moon"}} }, "precaution date": func(p *Patient) { p.Precautions = []PrecautionOn{{Code: "rest-until", Until: "soon"}} },
	} {
		p := good
		change(&p)
		err := p.Validate()
		require.Error(t, err, name)
		var in *Invalid
		require.ErrorAs(t, err, &in)
	}
	y, ok := good.AgeYears(noon)
	require.True(t, ok)
	require.InDelta(t, 6.8, y, 0.1)
	_, ok = Patient{}.AgeYears(noon)
	require.False(t, ok)
	require.True(t, Contact{}.Empty())
}

func TestDates(t *testing.T) {
	for _, ok := range []string{"", "2019", "2019-05", "2019-05-07"} {
		_, err := ParseDate(ok)
		require.NoError(t, err)
	}
	for _, bad := range []string{"19", "2019-13", "2019-02-30", "2019-5-7", "1800", "x"} {
		_, err := ParseDate(bad)
		require.Error(t, err, bad)
	}
	require.True(t, Date("2026-03-08").Before("2026-03-09"))
	require.False(t, Date("2026-03").Before("2026-03-09"), "they overlap")
	require.True(t, Date("2025").Before("2026-03-09"))
	require.False(t, Date("").Before("2026"))
	require.Equal(t, Date("2026-03-09"), DayOf(noon))
	_, ok := Date("").DaysBefore(noon)
	require.False(t, ok)
	_, ok = Date("bad").Time()
	require.False(t, ok)
	id, err := ParseID("01936c1e-5d2a-7c41-9a40-6f1f2b7c9d10")
	require.NoError(t, err)
	b, _ := id.MarshalText()
	var back ID
	require.NoError(t, back.UnmarshalText(b))
	require.Equal(t, id, back)
	for _, bad := range []string{"", "01936c1e5d2a7c419a406f1f2b7c9d10", "0193zc1e-5d2a-7c41-9a40-6f1f2b7c9d10"} {
		_, err := ParseID(bad)
		require.Error(t, err)
	}
}

func TestProblemAndWeightAt(t *testing.T) {
	p := Patient{Problems: []Problem{
		{Diagnosis: "old", Onset: "2024-01", Resolved: "2024-06"}, {Diagnosis: "first", Onset: "2026-01-05"}, {Diagnosis: "second", Onset: "2026-02-05"},
		{Diagnosis: "later", Onset: "2026-05-01"}, {Diagnosis: "undated"},
	}, Weights: []WeightPoint{{noon.AddDate(0, -1, 0), 9}, {noon.AddDate(0, 0, -1), 9.4}, {noon.AddDate(0, 1, 0), 10}}}
	pr, ok := p.ProblemAt(noon)
	require.True(t, ok)
	require.Equal(t, "second", pr.Diagnosis)
	pr, _ = p.ProblemAt(noon.AddDate(-2, 1, 0))
	require.Equal(t, "old", pr.Diagnosis)
	kg, ok := p.WeightAt(noon)
	require.True(t, ok)
	require.Equal(t, 9.4, kg)
	_, ok = Patient{}.WeightAt(noon)
	require.False(t, ok)
	_, ok = Patient{}.ProblemAt(noon)
	require.False(t, ok)
}

func TestVisitValidate(t *testing.T) {
	good := Visit{Examined: noon, Examiner: "A", Aid: "sling", Surface: "grip", Session: "before",
		Findings: []Finding{{Item: Patellar, Site: PelvicLeft, Result: Graded(2)}}, Measures: []Measured{{Measure: Weight, Value: 9}}}
	require.NoError(t, good.Validate(Dog))
	for name, change := range map[string]func(*Visit){
		"time": func(v *Visit) { v.Examined = time.Time{} }, "examiner": func(v *Visit) { v.Examiner = "" }, "aid": func(v *Visit) { v.Aid = "x" },
		"surface": func(v *Visit) { v.Surface = "x" }, "session": func(v *Visit) { v.Session = "x" }, "finding": func(v *Visit) { v.Findings = []Finding{{}} },
		"measure": func(v *Visit) { v.Measures = []Measured{{}} },
	} {
		v := good
		change(&v)
		require.Error(t, v.Validate(Dog), name)
	}
}

func TestMeasuredValidate(t *testing.T) {
	for name, m := range map[string]Measured{
		"none": {}, "site": {Measure: ThighGirth, Value: 30}, "site where none": {Measure: Weight, Site: Left, Value: 9}, "nan": {Measure: Weight, Value: math.NaN()},
		"range": {Measure: Weight, Value: 5000}, "whole": {Measure: HeartRate, Value: 90.5}, "place": {Measure: ThighGirth, Site: Left, Value: 30, At: 101},
		"motion": {Measure: RangeOfMotion, Site: Left, Joint: Stifle, Motion: "twist", Value: 30}, "no motion": {Measure: RangeOfMotion, Site: Left, Joint: Stifle, Value: 30},
		"no joint": {Measure: RangeOfMotion, Site: Left, Motion: "flexion", Value: 30}, "best end": {Measure: ScaleFrankel, Value: 3, BestEnd: math.Inf(1)},
	} {
		require.Error(t, m.Validate(), name)
	}
	ok := Measured{Measure: RangeOfMotion, Site: Left, Joint: Stifle, Motion: "flexion", Value: 42}
	require.NoError(t, ok.Validate())
	require.Equal(t, "range-of-motion/left/stifle/flexion", ok.Key())
	require.Equal(t, "thigh-girth/left/70", Measured{Measure: ThighGirth, Site: Left, At: 70, Value: 30}.Key())
	v := Visit{Measures: []Measured{ok}}
	_, found := v.Measured(RangeOfMotion, Right)
	require.False(t, found)
}

func TestLikeForLike(t *testing.T) {
	a := Visit{Aid: "sling", Surface: "grip", Session: "before"}
	b := a
	same, differ := LikeForLike(a, b)
	require.True(t, same)
	require.Empty(t, differ)
	b.Aid, b.Surface, b.Session, b.Sedation = "none", "", "after", SedationMild
	b.Doses = []DoseGiven{{Medicine: "Gabapentin", Hours: 4}}
	same, differ = LikeForLike(a, b)
	require.False(t, same)
	require.Equal(t, []string{"sedation", "aid", "session", "medicines"}, differ, "a surface nobody noted is no difference")
}

func TestDueOn(t *testing.T) {
	p := Patient{}
	last := Visit{Examined: noon.AddDate(0, 0, -9)}
	d := DueOn(p, &last, noon)
	require.Equal(t, Due{Date: "2026-03-07", Days: -2}, d)
	require.True(t, d.Overdue())
	last.NextVisit = "2026-03-12"
	require.Equal(t, Due{Date: "2026-03-12", Days: 3}, DueOn(p, &last, noon))
	p.RecheckDays, last.NextVisit = 14, ""
	require.Equal(t, 5, DueOn(p, &last, noon).Days)
	require.Equal(t, 0, DueOn(p, nil, noon).Days)
	// 23:30 in the evening: the day is that of the recorded offset
	late := time.Date(2026, 3, 9, 23, 30, 0, 0, time.FixedZone("", -8*3600))
	require.Equal(t, Date("2026-03-09"), DueOn(p, nil, late).Date)
	for _, s := range []Status{Discharged, Died} {
		p.Status = s
		require.True(t, DueOn(p, &last, noon).Never)
		require.False(t, DueOn(p, &last, noon).Overdue())
	}
}

func TestCompareVisits(t *testing.T) {
	f := func(i Item, s Site, g int8) Finding { return Finding{Item: i, Site: s, Result: Graded(g)} }
	a := Visit{Findings: []Finding{f(Patellar, PelvicLeft, 0), f(Patellar, PelvicRight, 2), f(Hopping, PelvicLeft, 1), f(Hopping, PelvicRight, 2),
		f(Tone, PelvicLeft, 1), f(Gag, Midline, 2), f(Ataxia, PelvicLeft, 2), {Item: Ataxia, Site: PelvicRight, Result: Untested(Pain)}, f(Stance, PelvicLeft, 0)}}
	b := Visit{Findings: []Finding{f(Patellar, PelvicLeft, 1), f(Patellar, PelvicRight, 1), f(Hopping, PelvicRight, 2),
		f(Tone, PelvicLeft, 3), f(Menace, Left, 2), f(Menace, Right, 0), f(Ataxia, PelvicLeft, 2), {Item: Stance, Site: PelvicLeft, Result: Untested(Pain)}}}
	got := map[string]ChangeKind{}
	cs := CompareVisits(a, b)
	last := ChangeKind(0)
	for _, c := range cs {
		got[c.Key.String()] = c.Kind
		require.GreaterOrEqual(t, c.Kind, last, "first what was abnormal and not looked at")
		last = c.Kind
		require.NotEmpty(t, c.Kind.String())
	}
	require.Equal(t, map[string]ChangeKind{
		"patellar/pelvic-left": TurnedBetter, "patellar/pelvic-right": TurnedWorse, "hopping/pelvic-left": MissedAbnormal, "hopping/pelvic-right": StillNormal,
		"tone/pelvic-left": TurnedDifferent, "gag/midline": NoLongerTested, "ataxia/pelvic-left": StillAbnormal, "ataxia/pelvic-right": NeverTested,
		"menace/left": FirstNormal, "menace/right": FirstAbnormal, "stance/pelvic-left": MissedAbnormal,
	}, got)
	require.Equal(t, 2, CountChanges(cs)[MissedAbnormal])

	// A reflex that comes back in the first ten days says returned (Hodshon-2018).
	p := Patient{Problems: []Problem{{Diagnosis: "disc", Onset: "2026-03-04"}}}
	for _, c := range cs {
		if c.Key == (Key{Item: Patellar, Site: PelvicLeft}) {
			require.True(t, Returned(c, p, noon))
			require.False(t, Returned(c, p, noon.AddDate(0, 0, 10)))
			require.False(t, Returned(c, Patient{}, noon))
		}
		if c.Kind == TurnedWorse {
			require.False(t, Returned(c, p, noon))
		}
	}
}

func TestFeeling(t *testing.T) {
	f := func(i Item, s Site, d Digit, g int8) Finding {
		return Finding{Item: i, Site: s, Digit: d, Result: Graded(g)}
	}
	v := Visit{Findings: []Finding{f(DeepPain, PelvicLeft, Medial, 0), f(DeepPain, PelvicLeft, Lateral, 1), f(SuperficialPain, PelvicRight, AnyDigit, 1),
		f(DeepPain, TailBase, AnyDigit, 0), f(SuperficialPain, TailBase, AnyDigit, 2), f(SuperficialPain, ThoracicLeft, AnyDigit, 0), f(SuperficialPain, ThoracicRight, AnyDigit, 3)}}
	require.Equal(t, Felt{Known: true, Grade: 1}, Feeling(v, PelvicLeft), "one digit that answers is an answer")
	require.Equal(t, Felt{Known: true, Grade: 1, Implied: true}, Feeling(v, PelvicRight))
	require.Equal(t, Felt{Known: true, Grade: 1, Implied: true}, Feeling(v, TailBase), "felt on the surface is felt deeply")
	require.Equal(t, Felt{}, Feeling(v, ThoracicLeft), "an absent surface says nothing of the depth")
	require.Equal(t, Felt{Known: true, Grade: 2, Implied: true}, Feeling(v, ThoracicRight))
}
