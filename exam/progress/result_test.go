package progress

import (
	"encoding/json"
	"math/rand/v2"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/localise"
)

// recoveringDog is twelve weekly exams of a dog whose left pelvic limb gets better.
func recoveringDog() Series {
	r := rand.New(rand.NewPCG(8, 8))
	a := newAnimal(cordAt("T13", "L1", localise.LeftWorse), motorCells())
	s := Series{Patient: dog}
	s.Patient.Goals = []exam.Goal{{Words: "walks ten steps alone", Item: "ambulation", Site: "midline", Target: 2, By: "2026-04-20"}}
	for i := range 12 {
		v := a.draw(r, 0.9-0.06*float64(i), week(float64(i)))
		v.Measures = []exam.Measured{{Measure: exam.ThighGirth, Site: exam.Left, At: 70, Value: 30 + 0.4*float64(i)}, {Measure: exam.ThighGirth, Site: exam.Right, At: 70, Value: 33}}
		s.Visits = append(s.Visits, v)
	}
	return s
}

func TestAnalyse(t *testing.T) {
	s := recoveringDog()
	r, err := Analyse(s, Options{})
	require.NoError(t, err)
	raw, err := json.Marshal(r)
	require.NoError(t, err)
	var back map[string]any
	require.NoError(t, json.Unmarshal(raw, &back))
	for _, name := range []string{"segments", "change", "plateau", "limbs", "regions", "scales", "plain", "alerts", "relapse", "goals"} {
		require.Contains(t, back, name)
	}
	require.Len(t, r.Segments, 72)
	for _, seg := range r.Segments {
		require.Len(t, seg.Points, 12)
		require.Len(t, seg.Forecast, ForecastWeeks)
		for _, p := range seg.Points {
			require.LessOrEqual(t, p.Low, p.Function+1e-6)
			require.GreaterOrEqual(t, p.High, p.Function-1e-6)
		}
	}
	first := back["segments"].([]any)[0].(map[string]any)["points"].([]any)[0].(map[string]any)
	for _, name := range []string{"examined", "function", "low", "high", "filtered", "score", "findings"} {
		require.Contains(t, first, name)
	}
	// The dog got better, and the model says so, of the limbs that were ill only.
	require.Greater(t, r.Change.Better, 0.95)
	require.InDelta(t, 1, r.Change.Better+r.Change.Same+r.Change.Worse, 1e-3)
	require.Contains(t, r.Change.Words, "better since 5 January 2026")
	byLimb := map[string]*ChangeResult{}
	for _, l := range r.Limbs {
		byLimb[l.Limb] = l.Change
	}
	require.Greater(t, byLimb["pelvic-left"].Better, 0.9)
	require.Greater(t, byLimb["thoracic-left"].Same, 0.9)
	var t3l3 RegionCourse
	for _, reg := range r.Regions {
		if reg.Region == "T3-L3" {
			t3l3 = reg
		}
	}
	last := t3l3.Points[11]
	require.Greater(t, last.Probability, 0.8, "the place sharpens")
	require.GreaterOrEqual(t, last.Filtered, t3l3.Points[0].Filtered)
	require.Less(t, r.Relapse.Probability, 0.1)
	require.Len(t, r.Goals, 1)
	require.Greater(t, *r.Goals[0].Probability, 0.5)
	// Plain statistics stand beside it.
	require.Equal(t, "thigh-girth", r.Plain[0].Measure)
	require.Equal(t, 66, r.Plain[0].MannKendall.S)
	require.InDelta(t, 0.4, r.Plain[0].TheilSen.PerWeek, 1e-9)
	require.Equal(t, "likely a real change", r.Plain[0].Verdict)
	require.Len(t, r.Symmetry, 12)
	require.NotEmpty(t, r.Scales)
	// Since a later date.
	later, err := Analyse(s, Options{Since: week(8)})
	require.NoError(t, err)
	require.Equal(t, week(8), later.Change.Since)
}

// A species without a map of its cord still has its plain statistics.
func TestAnalyseHorse(t *testing.T) {
	s := Series{Patient: exam.Patient{Species: exam.Horse}, Visits: []exam.Visit{
		{Examined: week(0), Examiner: "A", Measures: []exam.Measured{{Measure: exam.Weight, Value: 500}}},
		{Examined: week(1), Examiner: "A", Measures: []exam.Measured{{Measure: exam.Weight, Value: 501}}},
	}}
	r, err := Analyse(s, Options{})
	require.NoError(t, err)
	require.Empty(t, r.Segments)
	require.Len(t, r.Plain, 1)
	require.Nil(t, r.Plain[0].MDC95)
	require.Len(t, r.Notes, 1)
	_, err = json.Marshal(r)
	require.NoError(t, err)
}

func TestAnalyseLittle(t *testing.T) {
	for _, visits := range [][]exam.Visit{nil, {{Examined: week(0), Examiner: "A"}}, {{Examined: week(0)}, {Examined: week(0)}, {Examined: week(30)}}} {
		r, err := Analyse(Series{Patient: dog, Visits: visits}, Options{Now: week(40)})
		require.NoError(t, err)
		_, err = json.Marshal(r)
		require.NoError(t, err)
		if len(visits) < 2 {
			require.Nil(t, r.Change)
		}
	}
}

func TestSeriesOf(t *testing.T) {
	f := exam.File{Species: exam.Dog, Examined: week(1), Examiner: "A", Born: "2019", Onset: "2026-01-01", WeightKg: 9}
	g := f
	g.Examined, g.Born, g.Onset, g.WeightKg = week(2), "", "", 10
	s, err := SeriesOf([]exam.File{g, f})
	require.NoError(t, err)
	require.Equal(t, exam.Date("2019"), s.Patient.Born)
	require.Len(t, s.Patient.Problems, 1)
	require.Len(t, s.Patient.Weights, 2)
	require.True(t, s.Visits[0].Examined.Before(s.Visits[1].Examined))
	h := g
	h.Species = exam.Cat
	_, err = SeriesOf([]exam.File{f, h})
	require.ErrorContains(t, err, "species")
	h = f
	h.Examined = time.Time{}
	_, err = SeriesOf([]exam.File{h})
	require.ErrorContains(t, err, "examined")
}

func TestCountBetween(t *testing.T) {
	f := func(i exam.Item, s exam.Site, g int8) exam.Finding {
		return exam.Finding{Item: i, Site: s, Result: exam.Graded(g)}
	}
	a := exam.Visit{Examined: week(0), Findings: []exam.Finding{f(exam.PawPlacement, exam.PelvicLeft, 0), f(exam.Hopping, exam.PelvicLeft, 0), f(exam.Ataxia, exam.PelvicLeft, 2),
		f(exam.Tone, exam.PelvicLeft, 3), f(exam.Withdrawal, exam.PelvicLeft, 1), f(exam.AnalTone, exam.Midline, 2)}}
	b := exam.Visit{Examined: week(6), Findings: []exam.Finding{f(exam.PawPlacement, exam.PelvicLeft, 1), f(exam.Hopping, exam.PelvicLeft, 1), f(exam.Ataxia, exam.PelvicLeft, 1),
		f(exam.Tone, exam.PelvicLeft, 1), f(exam.Patellar, exam.PelvicLeft, 2)}}
	c := CountBetween(dog, a, b)
	require.Equal(t, Counts{Better: 3, Different: 1, NewlyTested: 1, NoLongerTested: 2, MissedAbnormal: 1, P: 0.25}, c)
	require.Equal(t, exam.Better, c.Direction())
	require.Equal(t, exam.Worse, CountBetween(dog, b, a).Direction())
	require.Equal(t, exam.NotComparable, CountBetween(dog, exam.Visit{}, a).Direction())
	require.Equal(t, exam.Same, CountBetween(dog, a, a).Direction())
}
