package progress

import (
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/progress/repeat"
)

// measuredWeekly is a series of one measure's values, week by week.
func measuredWeekly(s exam.Species, m exam.Measure, values ...float64) Series {
	out := Series{Patient: exam.Patient{Name: "Bramble", Species: s}}
	for i, v := range values {
		out.Visits = append(out.Visits, exam.Visit{Examined: week(float64(i)), Examiner: "A. Brook", Measures: []exam.Measured{{Measure: m, Value: v}}})
	}
	return out
}

func goalOn(t *testing.T, s Series, g exam.Goal) GoalChance {
	s.Patient.Goals = []exam.Goal{g}
	r, err := Analyse(s, Options{})
	require.NoError(t, err)
	require.Len(t, r.Goals, 1)
	return r.Goals[0]
}

// A goal on a measure: a straight line through the values, in every species.
func TestGoalsOnMeasures(t *testing.T) {
	for _, s := range []exam.Species{exam.Dog, exam.Rabbit} {
		rising := measuredWeekly(s, exam.WalkDistance, 20, 32, 38, 52, 58)
		by := func(w float64) exam.Date { return exam.DayOf(week(w)) }
		sure := goalOn(t, rising, exam.Goal{Words: "walks 60 m", Measure: "walk-distance", Target: 60, By: by(7)})
		require.NotNil(t, sure.Probability)
		require.Greater(t, *sure.Probability, 0.95)
		require.Equal(t, 1, *sure.Weeks)
		hopeless := goalOn(t, rising, exam.Goal{Words: "walks 200 m", Measure: "walk-distance", Target: 200, By: by(7)})
		require.Less(t, *hopeless.Probability, 0.01)
		// The line at seven weeks (worked by hand: slope 9.6 a week, 40 m in the middle) and its interval.
		middle := goalOn(t, rising, exam.Goal{Words: "walks 87 m", Measure: "walk-distance", Target: 87.4, By: by(7)})
		require.InDelta(t, 40+9.6*(6.94-2), middle.Reading.Value, 0.7) // «by» is a day, not an hour
		require.InDelta(t, 0.5, *middle.Probability, 0.1)
		require.Less(t, middle.Reading.Low, middle.Reading.Value)

		// A measure that should fall.
		falling := goalOn(t, measuredWeekly(s, exam.PainOnMovement, 8, 7, 6, 4, 4), exam.Goal{Words: "moves without pain", Measure: "pain-on-movement", Target: 1, By: by(7)})
		require.Greater(t, *falling.Probability, 0.5)

		for why, gc := range map[string]GoalChance{
			"this has not been measured yet":                                        goalOn(t, rising, exam.Goal{Words: "stands a minute", Measure: "stand-time", Target: 60}),
			"too few values to look ahead: four over at least two weeks are needed": goalOn(t, measuredWeekly(s, exam.WalkDistance, 20, 30, 40), exam.Goal{Words: "walks", Measure: "walk-distance", Target: 60}),
			"its date lies further ahead than the values so far reach back":         goalOn(t, rising, exam.Goal{Words: "walks", Measure: "walk-distance", Target: 60, By: by(9.5)}),
		} {
			require.Nil(t, gc.Probability)
			require.Equal(t, why, gc.Why)
		}
	}
}

// «Reached with so much» must be so as often, where readings scatter about a straight line.
func TestGoalsOnMeasuresAreCalibrated(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 7))
	var said, was [5]float64
	var n [5]int
	for range 4000 {
		from, slope := between(r, 20, 40), between(r, 4, 8)
		var values []float64
		for w := range 6 {
			values = append(values, from+slope*float64(w)+4*r.NormFloat64())
		}
		s := measuredWeekly(exam.Rabbit, exam.StandTime, values...)
		target := from + slope*8 + between(r, -25, 25)
		s.Patient.Goals = []exam.Goal{{Words: "stands", Measure: "stand-time", Target: target, By: exam.DayOf(week(8))}}
		gc := goalsOf(s.Patient, nil, plainOf(s.Visits, repeat.Practice{}), week(5))[0]
		bin := min(4, int(*gc.Probability*5))
		said[bin] += *gc.Probability
		n[bin]++
		at := gc.Reading.On.Sub(day0).Hours() / 24 / 7
		if from+slope*at+4*r.NormFloat64() >= target {
			was[bin]++
		}
	}
	for b := range n {
		require.Greater(t, n[b], 100)
		t.Logf("said %.2f, was so in %.2f of %d", said[b]/float64(n[b]), was[b]/float64(n[b]), n[b])
		require.InDelta(t, said[b]/float64(n[b]), was[b]/float64(n[b]), 0.06)
	}
}
