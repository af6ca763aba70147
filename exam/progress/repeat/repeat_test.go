package repeat

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"cordwalk.example/cordwalk/exam"
	"github.com/stretchr/testify/require"
)

func id(n int) exam.ID { return exam.ID{byte(n), byte(n >> 8), 1} }

var noon = time.Date(2026, 3, 2, 12, 0, 0, 0, time.UTC)

func visit(n int, patient int, at time.Time, examiner string, fs ...exam.Finding) exam.Visit {
	return exam.Visit{ID: id(n), Patient: id(1000 + patient), Examined: at, Examiner: examiner, Findings: fs}
}

func patellar(g int8) exam.Finding {
	return exam.Finding{Item: exam.Patellar, Site: exam.PelvicLeft, Result: exam.Graded(g)}
}

func TestRepeatPairs(t *testing.T) {
	first := visit(1, 1, noon, "A. Brook")
	repeats := func(n int, patient int, at time.Time, by string) exam.Visit {
		v := visit(n, patient, at, by)
		v.RepeatOf = id(1)
		return v
	}
	slick := repeats(7, 1, noon.Add(time.Hour), "B. Lind")
	slick.Surface = "slick"
	gripped := first
	gripped.Surface = "grip"
	pairs := RepeatPairs([]exam.Visit{gripped,
		repeats(2, 1, noon.Add(time.Hour), "B. Lind"),
		repeats(3, 1, noon.Add(2*time.Hour), "a.  brook"),
		repeats(4, 1, noon.Add(24*time.Hour), "B. Lind"), // another day
		repeats(5, 2, noon.Add(time.Hour), "B. Lind"),    // another animal
		visit(6, 1, noon.Add(time.Hour), "B. Lind"),      // no repeat
		slick, // another floor
	})
	require.Len(t, pairs, 2)
	require.False(t, pairs[0].SameExaminer)
	require.True(t, pairs[1].SameExaminer)
}

// The figures that the design's reference tables print.
func TestPublishedFigures(t *testing.T) {
	for _, tt := range []struct {
		q          Quantity
		same       bool
		mdc, steps float64
	}{
		{Quantity{Scale: OpenField}, false, 2.4, 3}, // likelihoods 11.2: 2.4 points, 3 or more
		{Quantity{Scale: Texas}, false, 3.4, 4},
		{Quantity{Scale: Frankel}, false, 1.8, 2},
		{Quantity{Scale: Frankel}, true, 1.8, 1},
		{Quantity{Measure: exam.ThighGirth}, true, 2.8, 0}, // progression 6.1
		{Quantity{Measure: exam.ScaleOpenField}, false, 2.4, 3},
	} {
		n, ok := Published(tt.q, tt.same)
		require.True(t, ok, tt.q)
		require.InDelta(t, tt.mdc, n.MDC95, 0.05, tt.q)
		require.Equal(t, tt.steps, n.Steps, tt.q)
		require.NotEmpty(t, n.Source)
	}
	_, ok := Published(Quantity{Measure: exam.ThighGirth}, false)
	require.False(t, ok, "two examiners' girths are not compared")
	_, ok = Published(Quantity{Measure: exam.HeartRate}, true)
	require.False(t, ok, "nothing is known of the heart rate")
	// progression 1.8: smaller than 31, 20 or 14 points with 20, 50 or 100 steps.
	require.InDelta(t, 31, StepShareMargin(20), 0.5)
	require.InDelta(t, 20, StepShareMargin(50), 0.5)
	require.InDelta(t, 14, StepShareMargin(100), 0.5)
	// Every item of the vocabulary with grades that are steps has a figure and a source.
	for _, i := range exam.Items() {
		n, ok := Published(Quantity{Item: i}, true)
		if i.Has(exam.Unordered) || i.Info().Normal < 0 {
			require.False(t, ok, i)
			continue
		}
		require.True(t, ok, i)
		require.NotEmpty(t, n.Source, i)
		require.Greater(t, n.SEM, 0.0, i)
	}
}

func TestJudge(t *testing.T) {
	girth, _ := Published(Quantity{Measure: exam.ThighGirth}, true)
	for d, want := range map[float64]Verdict{0.9: Within, -1.5: Possible, 2.7: Possible, 2.9: Likely, math.NaN(): Unknown} {
		require.Equal(t, want, girth.Judge(d), d)
	}
	angle, _ := Published(Quantity{Measure: exam.RangeOfMotion}, true)
	for d, want := range map[float64]Verdict{5: Within, 6: Possible, 9: Possible, 9.5: Likely} {
		require.Equal(t, want, angle.Judge(d), d)
	}
	require.Equal(t, Unknown, Noise{}.Judge(3))
}

// The practice's own figure takes over at EnoughPairs and not before, and equals what the
// pairs were made with.
func TestOwnFiguresTakeOver(t *testing.T) {
	const seed = 7
	r := rand.New(rand.NewPCG(seed, 1))
	q := Quantity{Measure: exam.ThighGirth}
	var visits []exam.Visit
	add := func(i int) {
		true36 := 36 + r.NormFloat64()*3
		for k := range 2 {
			v := visit(2*i+k+1, i%7, noon.Add(time.Duration(i)*24*time.Hour+time.Duration(k)*time.Hour), "A. Brook")
			v.Measures = []exam.Measured{{Measure: exam.ThighGirth, Site: exam.Left, Value: true36 + r.NormFloat64()*0.4, At: 70}}
			if k == 1 {
				v.RepeatOf = visits[len(visits)-1].ID
			}
			visits = append(visits, v)
		}
	}
	for i := range EnoughPairs - 1 {
		add(i)
	}
	p := Learn(RepeatPairs(visits), nil)
	require.Equal(t, 1, p.Rows()[0].Needed)
	n, ok := p.Noise(q, true)
	require.True(t, ok)
	require.False(t, n.Own)
	for i := EnoughPairs - 1; i < 400; i++ {
		add(i)
	}
	p = Learn(RepeatPairs(visits), nil)
	n, ok = p.Noise(q, true)
	require.True(t, ok)
	require.True(t, n.Own)
	require.InDelta(t, 0.4, n.SEM, 0.04, "seed %d", seed)
	require.Contains(t, n.Source, "400 pairs of 7 animals, one examiner twice")
	row := p.Rows()[0]
	require.Greater(t, row.ICC, 0.96)
	_, ok = p.Noise(q, false)
	require.False(t, ok, "one examiner's repeats say nothing of two examiners")
}

func TestGradesOfRepeats(t *testing.T) {
	var visits []exam.Visit
	n := 0
	add := func(a, b exam.Finding) {
		first := visit(n+1, n/2%6, noon.Add(time.Duration(n)*24*time.Hour), "A. Brook", a)
		second := visit(n+2, n/2%6, noon.Add(time.Duration(n)*24*time.Hour+time.Hour), "B. Lind", b)
		second.RepeatOf = first.ID
		visits = append(visits, first, second)
		n += 2
	}
	for range 8 {
		add(patellar(2), patellar(2))
		add(patellar(1), patellar(1))
	}
	for range 4 {
		add(patellar(2), patellar(1))
	}
	seen := patellar(0)
	seen.Seen = true
	add(patellar(2), seen) // looked at the other grade: no evidence
	add(patellar(2), exam.Finding{Item: exam.Patellar, Site: exam.PelvicLeft, Result: exam.Untested(exam.Pain)})
	p := Learn(RepeatPairs(visits), func(v exam.Visit) map[string]float64 {
		g, _ := v.Grade(exam.Patellar, exam.PelvicLeft)
		return map[string]float64{Frankel: float64(g)}
	})
	row := p.Rows()[0]
	require.Equal(t, 20, row.Pairs)
	require.InDelta(t, 0.8, row.Exact, 1e-12)
	// By hand: 16 of 20 agree; chance agreement 0.6·0.4 + 0.4·0.6 = 0.48; (0.8 − 0.48)/0.52.
	require.InDelta(t, 0.32/0.52, row.Kappa.Kappa, 1e-12)
	noise, ok := p.Noise(Quantity{Item: exam.Patellar}, false)
	require.True(t, ok)
	require.True(t, noise.Own)
	require.Equal(t, "frankel", p.Rows()[1].Quantity.String())
	require.Equal(t, 22, p.Rows()[1].Pairs)
	for _, r := range p.Rows() {
		require.NotContains(t, fmt.Sprint(r.Repeats.SEM), "NaN")
	}
}
