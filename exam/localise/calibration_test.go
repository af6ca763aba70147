package localise

import (
	"math"
	"math/rand/v2"
	"os"
	"sort"
	"testing"
	"time"

	"cordwalk.example/cordwalk/exam"
)

// soak reports whether the long counts are asked for, and how many times the short ones they are.
func soak(short, long int) int {
	if os.Getenv("CORDWALK_SOAK") == "1" {
		return long
	}
	return short
}

// simulator draws animals from the model: a hypothesis from the prior, then findings.
type simulator struct {
	m          *Model
	rng        *rand.Rand
	cumulative []float64
	weight     [points]float64
}

func newSimulator(m *Model, rng *rand.Rand) *simulator {
	s := &simulator{m: m, rng: rng, cumulative: make([]float64, m.hyps)}
	sum := 0.0
	for h := range s.cumulative {
		sum += math.Exp(fromLog(m.prior[h]))
		s.cumulative[h] = sum
	}
	_, s.weight = m.p.quadrature()
	return s
}

func (s *simulator) hypothesis() int {
	u := s.rng.Float64() * s.cumulative[len(s.cumulative)-1]
	return sort.SearchFloat64s(s.cumulative, u)
}

// exam draws findings of hypothesis h; each cell is tested with chance tested.
func (s *simulator) exam(h int, tested float64) Exam {
	m := s.m
	x := Exam{Species: m.species}
	vs := exam.Vertebrae(m.species)
	for gi := range m.groups {
		g := &m.groups[gi]
		sig := int(g.pairs[g.of[h]].sig)
		q, u := 0, s.rng.Float64()*(s.weight[0]+s.weight[1]+s.weight[2]+s.weight[3]+s.weight[4])
		for q < points-1 && u >= s.weight[q] {
			u -= s.weight[q]
			q++
		}
		for k, ci := range g.cells {
			c := &m.lay.cells[ci]
			if c.digit != exam.AnyDigit || c.joint != exam.NoJoint || s.rng.Float64() >= tested {
				continue
			}
			set := &m.sets[m.setOf[ci]]
			row := int(g.rows[k][sig])
			v, cat := s.rng.Float64(), 0
			for i := range set.cats {
				if c.item == exam.CutaneousTrunci && i == trunciSomewhere {
					continue
				}
				p := set.p[(row*set.cats+i)*points+q]
				cat = i
				if v < p {
					break
				}
				v -= p
			}
			f := exam.Finding{Item: c.item, Site: c.site}
			if c.item == exam.CutaneousTrunci {
				switch {
				case cat >= trunciLevels:
					f.Result, f.Level = exam.Graded(1), vs[vertT1+cat-trunciLevels]
				case cat == trunciNormal:
					f.Result = exam.Graded(2)
				default:
					f.Result = exam.Graded(0)
				}
			} else {
				f.Result = exam.Graded(int8(cat) + c.item.Info().First)
			}
			x.Findings = append(x.Findings, f)
		}
	}
	return x
}

// TestCalibration simulates animals from the model: the sites that together hold 50, 80 and 95 %
// must hold the true one that often, within sampling error; and a region said with a
// probability must be true that often.
func TestCalibration(t *testing.T) {
	seed := uint64(time.Now().UnixNano())
	t.Logf("seed %d", seed)
	for _, sp := range []exam.Species{exam.Dog, exam.Cat} {
		e := engineFor(t, sp)
		m := e.m
		rng := rand.New(rand.NewPCG(seed, uint64(sp)))
		s := newSimulator(m, rng)
		n := soak(400, 8000)
		levels := [3]float64{0.5, 0.8, 0.95}
		var covered [3]int
		const bins = 10
		var said, was [bins]float64
		var count [bins]int
		right := 0
		for range n {
			h := s.hypothesis()
			x := s.exam(h, 0.05+0.4*rng.Float64())
			r, err := e.Posterior(x)
			if err != nil {
				t.Fatal(err)
			}
			class := int(m.sp.sites[m.siteOf[h]].class)
			// Randomised sets: the class that crosses the level is in with the chance that
			// makes the level exact.
			before := 0.0
			for _, c := range e.classes {
				p := e.share(c.sum)
				if c.class == class {
					for i, l := range levels {
						switch {
						case before+p <= l:
							covered[i]++
						case before < l && rng.Float64() < (l-before)/p:
							covered[i]++
						}
					}
					break
				}
				before += p
			}
			cl := &m.classes[class]
			if r.Regions[0].Region == cl.region.String() {
				right++
			}
			for _, x := range r.Regions {
				b := min(int(x.Probability*bins), bins-1)
				said[b] += x.Probability
				count[b]++
				if x.Region == cl.region.String() {
					was[b] += 0.5
				}
				if x.Region == cl.second.String() {
					was[b] += 0.5
				}
			}
		}
		for i, l := range levels {
			got := float64(covered[i]) / float64(n)
			se := math.Sqrt(l * (1 - l) / float64(n))
			t.Logf("%s: sets of %.0f %% hold the true site in %.1f %% of %d", sp, 100*l, 100*got, n)
			if math.Abs(got-l) > 3.5*se {
				t.Errorf("%s: sets of %.0f %% hold the true site in %.1f %% (±%.1f)", sp, 100*l, 100*got, 100*se)
			}
		}
		ece := 0.0
		for b := range bins {
			if count[b] > 0 {
				ece += math.Abs(said[b]-was[b]) / float64(8*n)
			}
		}
		t.Logf("%s: region right in %.1f %%, expected calibration error %.3f", sp, 100*float64(right)/float64(n), ece)
		if ece > 0.03 {
			t.Errorf("%s: expected calibration error %.3f", sp, ece)
		}
	}
}
