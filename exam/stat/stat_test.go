package stat

import (
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

func TestAalenJohansenAgainstR(t *testing.T) {
	raw, err := os.ReadFile(filepath.Join("testdata", "aalen-johansen.json"))
	require.NoError(t, err)
	var file struct {
		Time  []float64
		Cause []int
		Rows  [][]float64
	}
	require.NoError(t, json.Unmarshal(raw, &file))
	var spells []Spell
	for i := range file.Time {
		spells = append(spells, Spell{file.Time[i], file.Cause[i]})
	}
	one, two := AalenJohansen(spells, 1), AalenJohansen(spells, 2)
	require.Len(t, one, len(file.Rows))
	for i, row := range file.Rows {
		for j, got := range []float64{one[i].Time, one[i].Share, one[i].SE, one[i].Low, one[i].High, two[i].Share, two[i].SE} {
			same(t, "column", row[j], got)
		}
	}
}

// With one cause only, the cumulative incidence is what Kaplan–Meier leaves.
func TestAalenJohansenWithoutCompetitionIsKaplanMeier(t *testing.T) {
	rapid.Check(t, func(r *rapid.T) {
		var spells []Spell
		for range rapid.IntRange(1, 30).Draw(r, "n") {
			spells = append(spells, Spell{float64(rapid.IntRange(0, 12).Draw(r, "time")), rapid.IntRange(0, 1).Draw(r, "cause")})
		}
		km := KaplanMeier(spells, LimitsPlain)
		for i, a := range AalenJohansen(spells, 1) {
			if math.Abs(a.Share-(1-km.Steps[i].Survival)) > 1e-12 {
				r.Fatalf("at %v: %v, want %v", a.Time, a.Share, 1-km.Steps[i].Survival)
			}
			if km.Steps[i].Survival > 0 && math.Abs(a.SE-km.Steps[i].SE) > 1e-9 {
				r.Fatalf("standard error at %v: %v, want Greenwood's %v", a.Time, a.SE, km.Steps[i].SE)
			}
		}
	})
}

// The exact distribution against listing every order of the values.
func TestMannKendallAgainstListingAllOrders(t *testing.T) {
	rapid.Check(t, func(r *rapid.T) {
		n := rapid.IntRange(1, 7).Draw(r, "n")
		x := make([]float64, n)
		order := make([]int, n)
		for i := range x {
			x[i], order[i] = float64(rapid.IntRange(0, 3).Draw(r, "grade")), i
		}
		want := MannKendall(x)
		atLeast, rise, all := 0, 0, 0
		permutations(order, func(p []int) {
			s := 0
			for i := range p {
				for j := i + 1; j < n; j++ {
					s += sign(x[p[j]] - x[p[i]])
				}
			}
			all++
			if s*s >= want.S*want.S {
				atLeast++
			}
			if s >= want.S {
				rise++
			}
		})
		if p := float64(atLeast) / float64(all); math.Abs(p-want.P) > 1e-12 {
			r.Fatalf("%v: two-sided p %v, listing gives %v", x, want.P, p)
		}
		if p := float64(rise) / float64(all); math.Abs(p-want.PGreater) > 1e-12 {
			r.Fatalf("%v: one-sided p %v, listing gives %v", x, want.PGreater, p)
		}
	})
}

func TestFewVisitsCannotReachFivePercent(t *testing.T) {
	for n := 1; n < SignificantVisits; n++ {
		require.GreaterOrEqual(t, NewNull(ones(n)).SmallestP(), 0.05, "%d visits", n)
	}
	require.Less(t, NewNull(ones(SignificantVisits)).SmallestP(), 0.05)
	require.False(t, MannKendall([]float64{1, 1, 2, 2, 3}).CanBeCalled) // smallest p 0.067
	require.True(t, MannKendall([]float64{1, 2, 3, 4, 5}).CanBeCalled)
}

// Beyond ExactVisits the approximation takes over: at the border the two agree.
func TestApproximationMeetsExact(t *testing.T) {
	x := make([]float64, ExactVisits)
	for i := range x {
		x[i] = float64((i*7)%11) + float64(i)/8
	}
	r := MannKendall(x)
	require.True(t, r.Exact)
	require.InDelta(t, r.P, r.PNormal, 0.002)
	require.False(t, MannKendall(append(x, 4)).Exact)
}

// Forward–backward against the sum over every path of states.
func TestSmoothingAgainstAllPaths(t *testing.T) {
	rapid.Check(t, func(r *rapid.T) {
		k, n := rapid.IntRange(2, 3).Draw(r, "states"), rapid.IntRange(1, 5).Draw(r, "visits")
		row := func(label string) []float64 {
			v, sum := make([]float64, k), 0.0
			for i := range v {
				v[i] = rapid.Float64Range(0.01, 1).Draw(r, label)
				sum += v[i]
			}
			for i := range v {
				v[i] /= sum
			}
			return v
		}
		c := Chain{Initial: row("initial")}
		for range n - 1 {
			p := mat.NewDense(k, k, nil)
			for i := range k {
				p.SetRow(i, row("transition"))
			}
			c.Transitions = append(c.Transitions, p)
		}
		var l [][]float64
		for range n {
			v := make([]float64, k)
			for i := range v {
				v[i] = rapid.Float64Range(0.001, 1).Draw(r, "likelihood")
			}
			l = append(l, v)
		}
		s, err := c.Smooth(l)
		require.NoError(r, err)
		total, at := 0.0, make([][]float64, n)
		for i := range at {
			at[i] = make([]float64, k)
		}
		best, path := 0.0, make([]int, n)
		var walk func(i int, p float64)
		walk = func(i int, p float64) {
			if i == n {
				total += p
				best = max(best, p)
				for j, s := range path {
					at[j][s] += p
				}
				return
			}
			for s := range k {
				step := c.Initial[s]
				if i > 0 {
					step = c.Transitions[i-1].At(path[i-1], s)
				}
				path[i] = s
				walk(i+1, p*step*l[i][s])
			}
		}
		walk(0, 1)
		require.InDelta(r, math.Log(total), s.LogLikelihood, 1e-10)
		for i := range at {
			for j := range at[i] {
				require.InDelta(r, at[i][j]/total, s.Smoothed[i][j], 1e-10)
			}
		}
		_, lp := c.Viterbi(l)
		require.InDelta(r, math.Log(best), lp, 1e-10)
	})
}

// Whatever comes in, nothing panics, and what is undefined is NaN.
func TestUndefinedIsNaN(t *testing.T) {
	nanIn := []float64{1, math.NaN(), 3}
	isNaN := func(name string, v float64) { t.Helper(); require.True(t, math.IsNaN(v), "%s = %v", name, v) }
	isNaN("trend", MannKendall(nanIn).P)
	require.Equal(t, 1.0, MannKendall(nil).P)
	isNaN("tau", Kendall(nanIn, nanIn).B)
	isNaN("slope of one visit", TheilSen([]float64{1}, []float64{2}, 0.95).Slope)
	isNaN("slope of two equal days", TheilSen([]float64{1, 1}, []float64{2, 3}, 0.95).Slope)
	two := TheilSen([]float64{0, 7}, []float64{2, 3}, 0.95)
	require.True(t, math.IsInf(two.Low, -1) && math.IsInf(two.High, 1), "two visits give no interval")
	isNaN("kappa of one cell", Kappa([][]float64{{5, 0}, {0, 0}}, Linear).Kappa)
	isNaN("kappa of nothing", Kappa(nil, Linear).Kappa)
	_, ok := ICC([][]float64{{1, 2}})
	require.False(t, ok)
	isNaN("repeats", TestRetest([]float64{1}, []float64{2}).SEM)
	isNaN("share", Wilson(3, 2).Low)
	isNaN("share", ClopperPearson(0, 0).Low)
	isNaN("median", Median(nil))
	isNaN("page", Page([][]float64{{1, 2}, {1}}).L)
	isNaN("individuals", IndividualsChart([]float64{1}).Mean)
	isNaN("log-rank of one group", LogRank([][]Spell{{{1, 1}}}, 0).P)
	isNaN("change", ReliableChange(1, 2, 0))
	require.Empty(t, KaplanMeier(nil, LimitsLog).Steps)
	require.Len(t, ChangePointGrades([]int{0, 9, 1}, 0.1, []float64{1, 1}).Rows, 4)
	_, err := NewGenerator([][]float64{{-1, 2}, {0, 0}})
	require.ErrorContains(t, err, "adds up to")
	g, err := NewGenerator([][]float64{{-1, 1}, {0, 0}})
	require.NoError(t, err)
	_, err = Chain{Initial: []float64{1, 0}, Transitions: []*mat.Dense{g.After(1)}}.Smooth([][]float64{{0, 1}, {1, 1}})
	require.ErrorContains(t, err, "impossible")
}

// A goldenless invariant of a curve: numbers at risk and the median of a plain case.
func TestCurveByHand(t *testing.T) {
	c := KaplanMeier([]Spell{{2, 1}, {3, Censored}, {5, 1}, {5, 1}, {9, Censored}}, LimitsLogLog)
	require.Equal(t, 5, c.AtRisk(0))
	require.Equal(t, 3, c.AtRisk(4))
	require.InDelta(t, 0.8, c.At(2), 1e-12)
	require.InDelta(t, 0.8/3, c.At(8), 1e-12)
	m, _, _ := c.Quantile(0.5)
	require.Equal(t, 5.0, m)
}
