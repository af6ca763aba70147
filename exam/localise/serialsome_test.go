package localise

import (
	"math"
	"testing"

	"cordwalk.example/cordwalk/exam"
	"github.com/stretchr/testify/require"
)

// Weighing some sites gives what weighing all gives, whatever was weighed before.
func TestWeigherAgreesWithEngine(t *testing.T) {
	m, err := ModelOf(exam.Dog)
	require.NoError(t, err)
	sites := []int{0, 3, 17, 400, len(m.Sites()) - 1}
	e, w := m.Engine(), m.Weigher(sites)
	f := func(item exam.Item, site exam.Site, grade int8, how exam.How) exam.Finding {
		return exam.Finding{Item: item, Site: site, Result: exam.Graded(grade), How: how}
	}
	for i, x := range []Exam{
		{Species: exam.Dog, Findings: []exam.Finding{f(exam.Patellar, exam.PelvicLeft, 0, exam.Examined), f(exam.VoluntaryMotor, exam.PelvicLeft, 1, exam.Examined)}},
		{Species: exam.Dog, OnsetDays: 3, AgeYears: 12, Findings: []exam.Finding{f(exam.Withdrawal, exam.PelvicLeft, 1, exam.Examined), f(exam.Hopping, exam.PelvicRight, 0, exam.RestNormal), f(exam.Patellar, exam.PelvicRight, 2, exam.RestNormal)}},
		{Species: exam.Dog, Sedation: exam.SedationModerate, Findings: []exam.Finding{f(exam.Menace, exam.Left, 0, exam.Examined)}},
		{Species: exam.Dog},
		{Species: exam.Dog, OnsetDays: 200, Findings: []exam.Finding{f(exam.Patellar, exam.PelvicLeft, 0, exam.Examined)}},
		{Species: exam.Dog, OnsetDays: 2, Findings: []exam.Finding{f(exam.Patellar, exam.PelvicLeft, 1, exam.Examined), f(exam.Patellar, exam.PelvicRight, 2, exam.RestNormal)}},
		{Species: exam.Dog, Findings: []exam.Finding{f(exam.Patellar, exam.PelvicLeft, 0, exam.Examined), f(exam.Patellar, exam.PelvicRight, 2, exam.RestNormal)}},
		{Species: exam.Dog, OnsetDays: 100, Findings: []exam.Finding{f(exam.CutaneousTrunci, exam.Left, 0, exam.Examined)}},
	} {
		all, err := e.SiteLogLikelihoods(x, nil)
		require.NoError(t, err)
		near := 1e-9
		if x.OnsetDays >= 10 { // the first week, one in a thousand, is left out
			near = 0.05
		}
		// Some sites lag behind: their sums must catch up.
		which := []int{i % len(sites), (i + 2) % len(sites)}
		few, err := w.Some(x, which, nil)
		require.NoError(t, err)
		for k, s := range which {
			for g := range severities + 1 {
				require.InDelta(t, all[sites[s]*(severities+1)+g], few[k*(severities+1)+g], near, "exam %d, site %d alone", i, s)
			}
		}
		if i%3 == 1 {
			continue
		}
		some, err := w.LogLikelihoods(x, nil)
		require.NoError(t, err)
		for k, s := range sites {
			for g := range severities + 1 {
				want, got := all[s*(severities+1)+g], some[k*(severities+1)+g]
				require.False(t, math.IsNaN(got))
				require.InDelta(t, want, got, near, "exam %d, site %d, step %d", i, s, g)
			}
		}
	}
	_, err = w.LogLikelihoods(Exam{Species: exam.Cat}, nil)
	require.Error(t, err)
}

// A cell by itself has the probability that an exam of that one finding has.
func TestMarginal(t *testing.T) {
	m, err := ModelOf(exam.Dog)
	require.NoError(t, err)
	sites := []int{5, 250, 900}
	w := m.Weigher(sites)
	k := exam.Key{Item: exam.Patellar, Site: exam.PelvicLeft}
	p, cats := w.Marginal(k)
	require.Equal(t, 5, cats)
	for g := range cats {
		ll, err := w.LogLikelihoods(Exam{Species: exam.Dog, OnsetDays: 400, Findings: []exam.Finding{{Item: k.Item, Site: k.Site, Result: exam.Graded(int8(g))}}}, nil)
		require.NoError(t, err)
		for i := range ll {
			require.InDelta(t, math.Exp(ll[i]), p[i*cats+g], 1e-3)
		}
	}
	none, _ := w.Marginal(exam.Key{})
	require.Nil(t, none)
}
