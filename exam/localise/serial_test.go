package localise

import (
	"math"
	"testing"

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
			if len(ll) != len(sites)*GridSize || len(Grid()) != GridSize {
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
				prior[slot/severities*GridSize+slot%severities+1] += p
			}
			byKind := map[string]float64{}
			total := 0.0
			for i, site := range sites {
				for k := 1; k < GridSize; k++ {
					w := prior[i*GridSize+k] * math.Exp(ll[i*GridSize+k])
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
		for step := range GridSize {
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
				want = Grid()[step]
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
