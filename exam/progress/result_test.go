package progress

import (
	"encoding/json"
	"math"
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
	require.Len(t, r.Goals[0].ByWeek, ForecastWeeks+1)
	for w := 1; w <= ForecastWeeks; w++ {
		require.GreaterOrEqual(t, r.Goals[0].ByWeek[w], r.Goals[0].ByWeek[w-1], "what has been reached stays reached")
	}
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

// A dog that lost what it had gained, and one that has come to rest.
func TestRelapseAndPlateau(t *testing.T) {
	r := rand.New(rand.NewPCG(31, 1))
	a := newAnimal(cordAt("T13", "L1", localise.Even), motorCells())
	var back, rest Series
	back.Patient, rest.Patient = dog, dog
	for i := range 14 {
		s := 0.9 - 0.1*float64(min(i, 7))
		rest.Visits = append(rest.Visits, a.draw(r, s, week(float64(i))))
		if i >= 12 {
			s = 0.85
		}
		back.Visits = append(back.Visits, a.draw(r, s, week(float64(i))))
	}
	x, err := Analyse(back, Options{})
	require.NoError(t, err)
	require.Greater(t, x.Relapse.Probability, 0.9)
	require.Contains(t, x.Relapse.Words, "worse than at its best")
	require.False(t, x.Plateau.Named, "two exams after a relapse are no plateau")
	y, err := Analyse(rest, Options{})
	require.NoError(t, err)
	require.Less(t, y.Relapse.Probability, 0.25, "the best of fourteen exams is always a little better than the last")
	require.True(t, y.Plateau.Named, y.Plateau.Words)
	require.NotNil(t, y.Plateau.Since)
	require.False(t, y.Plateau.Since.Before(week(4)))
	require.Contains(t, y.Plateau.Words, "2.5 points a week")
}

// The same series gives the same result whatever order its visits come in, and whether they come
// one by one or all at once.
func TestOrderAndStepsDoNotMatter(t *testing.T) {
	s := recoveringDog()
	whole, err := Analyse(s, Options{})
	require.NoError(t, err)
	m, err := For(s.Patient)
	require.NoError(t, err)
	c := NewCourse(m)
	var steps Result
	for _, v := range s.Visits {
		require.NoError(t, c.Add(v))
		steps = c.Result(s.Patient, Options{})
	}
	mixed := Series{Patient: s.Patient}
	for _, i := range rand.New(rand.NewPCG(1, 1)).Perm(len(s.Visits)) {
		mixed.Visits = append(mixed.Visits, s.Visits[i])
	}
	other, err := Analyse(mixed, Options{})
	require.NoError(t, err)
	bytes := func(r Result) string {
		raw, err := json.Marshal(r)
		require.NoError(t, err)
		return string(raw)
	}
	require.Equal(t, bytes(whole), bytes(other))
	for i := range whole.Segments {
		for k := range whole.Segments[i].Points {
			require.InDelta(t, whole.Segments[i].Points[k].Function, steps.Segments[i].Points[k].Function, 0.05)
		}
	}
	require.InDelta(t, whole.Change.Better, steps.Change.Better, 0.01)
}

// What the localisation model is laid out as.
func TestBody(t *testing.T) {
	for _, species := range []exam.Species{exam.Dog, exam.Cat} {
		b, err := bodyOf(species)
		require.NoError(t, err)
		sum := 0.0
		for i := range b.sites {
			sum += b.prior[i]
			for _, s := range b.shares[i] {
				require.Equal(t, 0.0, s.Damage[0], "%s: severity 0 damages nothing", b.sites[i].Words)
				for k := 1; k < Levels; k++ {
					require.GreaterOrEqual(t, s.Damage[k], s.Damage[k-1])
				}
				require.LessOrEqual(t, s.Damage[Levels-1], 1.0)
			}
			require.IsIncreasing(t, append([]int{-1}, b.near[i]...))
		}
		require.InDelta(t, 1, sum, 1e-9)
	}
	// A complete lesion of the cord in front of the pelvic limbs takes both, and spares the others.
	b, _ := bodyOf(exam.Dog)
	for i, s := range b.sites {
		if !cordAt("T13", "L1", localise.Even)(s) {
			continue
		}
		limbs := map[string]float64{}
		for _, share := range b.shares[i] {
			if b.targets[share.Target].Kind == LimbTarget {
				limbs[b.targets[share.Target].Name] = share.Damage[Levels-1]
			}
		}
		require.Greater(t, limbs["pelvic-left"], 0.9)
		require.Greater(t, limbs["pelvic-right"], 0.9)
		require.Less(t, limbs["thoracic-left"], 0.1)
	}
}

// At the localisation's own steps nothing is interpolated; between them what is added makes a cell whole.
func TestInterpolation(t *testing.T) {
	at := []float64{-9, -4, -2, -1, -3, -8, -5, -6, -7, -8, -10}
	var flat, out [Levels]float64
	interpolate(at, flat[:], out[:], math.Inf(-1))
	for k, s := range localise.CourseGrid() {
		require.InDelta(t, at[k], out[int(math.Round(s/spacing))], 1e-9)
	}
	b, err := bodyOf(exam.Dog)
	require.NoError(t, err)
	for _, z := range b.wholeness(exam.Key{Item: exam.VoluntaryMotor, Site: exam.PelvicLeft}) {
		require.LessOrEqual(t, z, 1e-9)
		require.Greater(t, z, -0.5)
	}
}

// A course is continued where the series only grows, and begun afresh where the past has changed.
func TestContinue(t *testing.T) {
	s := recoveringDog()
	all := s.Visits
	s.Visits = all[:11]
	before, err := Analyse(s, Options{})
	require.NoError(t, err)
	steps := before.Course().Steps()
	s.Visits = all
	after, err := Analyse(s, Options{Continue: before.Course()})
	require.NoError(t, err)
	require.Same(t, before.Course(), after.Course())
	fresh, err := Analyse(s, Options{})
	require.NoError(t, err)
	require.Less(t, after.Course().Steps()-steps, fresh.Course().Steps())
	require.InDelta(t, fresh.Change.Better, after.Change.Better, 0.01)
	for i := range fresh.Limbs {
		require.InDelta(t, fresh.Limbs[i].Points[5].Function, after.Limbs[i].Points[5].Function, 0.05)
	}
	// A grade of today's visit was changed: it alone is weighed again, and the answer is that of a fresh course.
	today := append([]exam.Visit(nil), all...)
	i := len(all) - 1
	today[i].Findings = append([]exam.Finding(nil), all[i].Findings...)
	for k, f := range today[i].Findings {
		if f.Item == exam.VoluntaryMotor || f.Item == exam.PawPlacement {
			today[i].Findings[k].Result = exam.Graded(f.Item.Info().First)
		}
	}
	s.Visits = today
	steps = after.Course().Steps()
	edited, err := Analyse(s, Options{Continue: after.Course()})
	require.NoError(t, err)
	require.Same(t, after.Course(), edited.Course())
	fresh, err = Analyse(s, Options{})
	require.NoError(t, err)
	require.Less(t, edited.Course().Steps()-steps, fresh.Course().Steps())
	require.InDelta(t, fresh.Change.Better, edited.Change.Better, 0.01)
	for l := range fresh.Limbs {
		for k := range fresh.Limbs[l].Points {
			require.InDelta(t, fresh.Limbs[l].Points[k].Function, edited.Limbs[l].Points[k].Function, 0.05, "%d", k)
			require.InDelta(t, fresh.Limbs[l].Points[k].Filtered, edited.Limbs[l].Points[k].Filtered, 0.05, "%d", k)
		}
	}
	// The last visit was taken out.
	s.Visits = today[:i]
	fewer, err := Analyse(s, Options{Continue: after.Course()})
	require.NoError(t, err)
	require.Same(t, after.Course(), fewer.Course())
	fresh, err = Analyse(s, Options{})
	require.NoError(t, err)
	for k := range fresh.Whole.Points {
		require.InDelta(t, fresh.Whole.Points[k].Function, fewer.Whole.Points[k].Function, 0.05, "%d", k)
	}
	s.Visits = all
	after, err = Analyse(s, Options{Continue: after.Course()})
	require.NoError(t, err)
	// A grade of an earlier visit was corrected, in the very list that the course was given.
	changed := append([]exam.Visit(nil), all...)
	g, _ := changed[3].Findings[0].Result.Grade()
	changed[3].Findings[0].Result = exam.Graded(1 - min(g, 1))
	s.Visits = changed
	other, err := Analyse(s, Options{Continue: after.Course()})
	require.NoError(t, err)
	require.NotSame(t, after.Course(), other.Course())
}
