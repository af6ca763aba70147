package localise

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
)

// The likelihoods of sites and severities, weighed by their priors, add up to the engine's own
// posterior of the kinds.
func TestSerialAgreesWithPosterior(t *testing.T) {
	for _, text := range []string{paraplegic, "paw-placement pl1; patellar pl0 pr2; mass-quadriceps l1 r3", ""} {
		for _, s := range []exam.Species{exam.Dog, exam.Cat} {
			x := say(t, s, text)
			if text != "" {
				x.OnsetDays = 3
				x.Findings[0].Block = "a"
			}
			e := engineFor(t, s)
			m := e.m
			ll, err := e.SiteLogLikelihoods(x, nil)
			if err != nil {
				t.Fatal(err)
			}
			sites := m.Sites()
			if len(ll) != len(sites)*(severities+1) || m.gridSize() != severities+1 {
				t.Fatalf("%d values for %d sites", len(ll), len(sites))
			}
			// The prior of each site and step, from the hypotheses.
			prior := make([]float64, len(ll))
			e.prepareSerial()
			early := x.timing(m.p.Acute)
			for h := range m.hyps {
				slot := int(m.slot[h])
				if slot < 0 || slot == len(sites)*severities {
					continue
				}
				p := math.Exp(fromLog(m.prior[h]))
				if m.timed[h] {
					if m.acute[h] {
						p *= early / m.p.Acute
					} else {
						p *= (1 - early) / (1 - m.p.Acute)
					}
				}
				prior[slot/severities*(severities+1)+slot%severities+1] += p
			}
			byKind := map[string]float64{}
			total := 0.0
			for i, site := range sites {
				for k := 1; k < (severities + 1); k++ {
					w := prior[i*(severities+1)+k] * math.Exp(ll[i*(severities+1)+k])
					byKind[site.Kind.String()] += w
					total += w
				}
			}
			r, err := e.Posterior(x)
			if err != nil {
				t.Fatal(err)
			}
			single := 1 - r.Kind("none") - r.Kind("two-sites")
			for kind, w := range byKind {
				if got, want := w/total, r.Kind(kind)/single; math.Abs(got-want) > 1e-8 {
					t.Errorf("%s, %q: %s has %.10f by its sites, %.10f in the posterior", s, text, kind, got, want)
				}
			}
		}
	}
}

func TestSitesAndDamage(t *testing.T) {
	m := engineFor(t, exam.Dog).m
	sites := m.Sites()
	sum := 0.0
	for i, s := range sites {
		sum += s.Prior
		for step := range severities + 1 {
			d := m.SiteDamage(i, step)
			if len(d) != 36 {
				t.Fatalf("damage of %d segments", len(d))
			}
			most := 0.0
			for _, x := range d {
				most = math.Max(most, math.Max(x[0], x[1]))
			}
			want := 0.0
			if s.From != 0 && s.Kind != PainOnly && step > 0 {
				want = Severities[step-1]
			}
			if math.Abs(most-want) > 1e-12 {
				t.Errorf("%s at step %d damages at most %.3f, want %.3f", s.Words, step, most, want)
			}
		}
		if s.Words == "" || s.Place == "" {
			t.Errorf("site %d has no words", i)
		}
	}
	none := defaults(exam.Dog)
	if left := 1 - sum; left < none.Pair || left > none.Pair+0.06 {
		t.Errorf("sites hold %.3f of the prior", sum)
	}
}

// The model of courses says the same as the model of exams where both try a severity, to what of a
// prior depends on the severities beside it.
func TestForCourses(t *testing.T) {
	plain := engineFor(t, exam.Dog).m
	all := plain.Sites()
	chosen := []int{3, 120, 700, len(all) - 1}
	fine, err := ForCourses(exam.Dog, chosen)
	require.NoError(t, err)
	require.Len(t, fine.Sites(), len(chosen))
	a, b := plain.Weigher(chosen), fine.Weigher([]int{0, 1, 2, 3})
	for i, x := range []Exam{
		{Species: exam.Dog, OnsetDays: 60, Findings: []exam.Finding{{Item: exam.Patellar, Site: exam.PelvicLeft, Result: exam.Graded(1)}, {Item: exam.VoluntaryMotor, Site: exam.PelvicRight, Result: exam.Graded(2)}}},
		{Species: exam.Dog, OnsetDays: 3, Findings: []exam.Finding{{Item: exam.Withdrawal, Site: exam.PelvicLeft, Result: exam.Graded(0)}, {Item: exam.Tone, Site: exam.PelvicLeft, Result: exam.Graded(1), How: exam.RestNormal}}},
		{Species: exam.Dog, OnsetDays: 200, AgeYears: 13, Findings: []exam.Finding{{Item: exam.DeepPain, Site: exam.PelvicLeft, Result: exam.Graded(0)}, {Item: exam.CutaneousTrunci, Site: exam.Left, Result: exam.Graded(0)}}},
	} {
		want, err := a.LogLikelihoods(x, nil)
		require.NoError(t, err)
		got, err := b.LogLikelihoods(x, nil)
		require.NoError(t, err)
		for s, site := range chosen {
			require.Equal(t, all[site], fine.Sites()[s])
			for _, k := range [][2]int{{0, 0}, {1, 2}, {2, 4}, {5, 10}} { // 0, 0.2, 0.4 and 1
				require.InDelta(t, want[s*(severities+1)+k[0]], got[s*11+k[1]], 1e-9, "exam %d, %s, step %d", i, all[site].Words, k[0])
			}
		}
	}
}

// What is drawn has the probabilities that the model gives it, for one cell and for two of one arc.
func TestDrawer(t *testing.T) {
	all, err := SitesOf(exam.Dog)
	require.NoError(t, err)
	place := slices.IndexFunc(all, func(s Site) bool { return s.Kind == Cord && s.From.String() == "L4" && s.Side == LeftWorse })
	m, err := ForCourses(exam.Dog, []int{place})
	require.NoError(t, err)
	cells := []exam.Key{{Item: exam.Patellar, Site: exam.PelvicLeft}, {Item: exam.VoluntaryMotor, Site: exam.PelvicLeft}, {Item: exam.Knuckling, Site: exam.PelvicLeft}}
	r := rand.New(rand.NewPCG(3, 3))
	d := m.Drawer(0, cells)
	w := m.Weigher([]int{0})
	const n = 20000
	counts := map[[3]int8]int{}
	for range n {
		fs := d.Draw(r, 0.6)
		require.Len(t, fs, 3)
		var g [3]int8
		for i, k := range cells {
			at := slices.IndexFunc(fs, func(f exam.Finding) bool { return f.Key() == k })
			g[i], _ = fs[at].Result.Grade()
		}
		counts[g]++
	}
	chi, free := 0.0, -1
	for a := range int8(5) {
		for b := range int8(5) {
			for c := range int8(4) {
				x := Exam{Species: exam.Dog, OnsetDays: 400}
				for i, g := range []int8{a, b, c} {
					x.Findings = append(x.Findings, exam.Finding{Item: cells[i].Item, Site: cells[i].Site, Result: exam.Graded(g)})
				}
				ll, err := w.LogLikelihoods(x, nil)
				require.NoError(t, err)
				if want := n * math.Exp(ll[6]); want >= 5 {
					d := float64(counts[[3]int8{a, b, c}]) - want
					chi += d * d / want
					free++
				}
			}
		}
	}
	require.Greater(t, free, 10)
	require.Less(t, chi, float64(free)+5*math.Sqrt(2*float64(free)), "chi-square of %d degrees of freedom", free)
}
