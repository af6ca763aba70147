package progress

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/stat/distuv"

	"cordwalk.example/cordwalk/exam"
)

// soak reports whether the large counts are to be run; without it one twentieth is.
func soak() bool { return os.Getenv("CORDWALK_SOAK") == "1" }

func courses(full int) int {
	if soak() {
		return full
	}
	return full / 20
}

// A shape is a true course: severity over weeks, with the week from which it holds still
// (infinite where it does not).
type shape struct {
	name string
	draw func(r *rand.Rand) (severity func(week float64) float64, still float64)
}

func between(r *rand.Rand, lo, hi float64) float64 { return lo + (hi-lo)*r.Float64() }

// settle is an exponential approach; it counts as still once it changes by less than a point a week.
func settle(from, to, tau float64) (func(float64) float64, float64) {
	still := tau * math.Log(math.Abs(from-to)/tau*100/PlateauRate)
	return func(w float64) float64 { return to + (from-to)*math.Exp(-w/tau) }, math.Max(0, still)
}

// shapes are the courses of the demo practice: quick and slow recovery, a steady climb that stops
// short, no change, slow decline, and a relapse.
var shapes = []shape{
	{"quick recovery", func(r *rand.Rand) (func(float64) float64, float64) {
		return settle(between(r, 0.6, 1), between(r, 0, 0.3), between(r, 2, 5))
	}},
	{"slow recovery", func(r *rand.Rand) (func(float64) float64, float64) {
		return settle(between(r, 0.5, 1), between(r, 0, 0.4), between(r, 8, 16))
	}},
	{"climb that stops", func(r *rand.Rand) (func(float64) float64, float64) {
		from, rate, stop := between(r, 0.6, 1), between(r, 0.025, 0.06), between(r, 5, 10)
		return func(w float64) float64 { return math.Max(0, from-rate*math.Min(w, stop)) }, math.Min(stop, from/rate)
	}},
	{"no change", func(r *rand.Rand) (func(float64) float64, float64) {
		s := between(r, 0.1, 0.9)
		return func(float64) float64 { return s }, 0
	}},
	{"slow decline", func(r *rand.Rand) (func(float64) float64, float64) {
		from, rate := between(r, 0.1, 0.5), between(r, 0.012, 0.03)
		return func(w float64) float64 { return math.Min(1, from+rate*w) }, math.Inf(1)
	}},
	{"relapse", func(r *rand.Rand) (func(float64) float64, float64) {
		first, _ := settle(between(r, 0.6, 1), between(r, 0, 0.2), between(r, 2, 5))
		when, by := between(r, 6, 18), between(r, 0.3, 0.6)
		second, still := settle(math.Min(1, first(when)+by), between(r, 0.1, 0.3), between(r, 3, 8))
		return func(w float64) float64 {
			if w < when {
				return first(w)
			}
			return second(w - when)
		}, when + still
	}},
}

// simulated is one course as examined: the visits and what was true at each.
type simulated struct {
	site   int
	weeks  []float64
	truth  func(float64) float64
	smooth func(float64) float64 // without good and bad days
	still  float64
	visits []exam.Visit
}

func simulate(b *bench, r *rand.Rand, s shape, visits, findings int) simulated {
	out := simulated{site: r.IntN(len(b.sites) - 1)}
	out.truth, out.still = s.draw(r)
	pace, smooth := fitsAndStarts(r), out.truth
	out.smooth = func(w float64) float64 { return smooth(pace(w)) }
	day := goodAndBadDays(r)
	out.truth = func(w float64) float64 { return math.Max(0, math.Min(1, out.smooth(w)+day(w))) }
	w := 0.0
	for range visits {
		out.weeks = append(out.weeks, w)
		out.visits = append(out.visits, b.draw(r, out.site, out.truth(w), week(w), findings))
		w += between(r, 0.7, 1.3)
		if r.IntN(8) == 0 {
			w++
		}
	}
	return out
}

// goodAndBadDays adds what every therapist knows: an animal is not the same each day. The
// standard deviation is 2.5 points, independent from day to day beyond a few days (judgement).
func goodAndBadDays(r *rand.Rand) func(float64) float64 {
	amount := map[int]float64{}
	return func(w float64) float64 {
		d := int(math.Floor(w * 7))
		if _, ok := amount[d]; !ok {
			amount[d] = 0.025 * r.NormFloat64()
		}
		return amount[d]
	}
}

// fitsAndStarts bends time: each week's progress is a gamma variate of mean 1 and standard deviation
// 0.4, for recovery does not run on rails (judgement).
func fitsAndStarts(r *rand.Rand) func(float64) float64 {
	g := distuv.Gamma{Alpha: 1 / (0.4 * 0.4), Beta: 1 / (0.4 * 0.4), Src: r}
	at := []float64{0}
	return func(w float64) float64 {
		i := int(w)
		for len(at) < i+2 {
			at = append(at, at[len(at)-1]+g.Rand())
		}
		return at[i] + (w-float64(i))*(at[i+1]-at[i])
	}
}

type tally struct{ in, all int }

func (t *tally) add(in bool) {
	t.all++
	if in {
		t.in++
	}
}

func (t tally) share() float64 { return float64(t.in) / math.Max(1, float64(t.all)) }

func (t tally) String() string { return fmt.Sprintf("%.1f %% of %d", 100*t.share(), t.all) }

func inside(b Band, truth float64) bool { return truth >= b.Low-1e-9 && truth <= b.High+1e-9 }

// Calibration on simulated courses: what is said with 90 % must hold in 90 %.
func TestCalibration(t *testing.T) {
	seed := uint64(time.Now().UnixNano())
	if s := os.Getenv("CORDWALK_SEED"); s != "" {
		fmt.Sscan(s, &seed)
	}
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	b := newBench()
	m := NewModel(b, DefaultRates())
	var filtered, smoothed, limbs, between [7]tally
	forecast := map[int]*tally{4: {}, 8: {}, 12: {}}
	width, fwidth := 0.0, map[int]float64{}
	var reliability [11]struct {
		said float64
		tally
	}
	for i, s := range shapes {
		for range courses(1000) {
			sim := simulate(b, r, s, 20, 40)
			c := NewCourse(m)
			for k, v := range sim.visits {
				require.NoError(t, c.Add(v))
				truth := 100 * (1 - sim.smooth(sim.weeks[k]))
				whole := c.filtered(k).whole
				filtered[i].add(inside(whole, truth))
				filtered[6].add(inside(whole, truth))
				if k == 6 || k == 13 {
					for weeks, tl := range forecast {
						w := sim.weeks[k] + float64(weeks)
						band := m.reader.read(c.beliefAt(week(w))).whole
						tl.add(inside(band, 100*(1-sim.smooth(w))))
						fwidth[weeks] += band.High - band.Low
					}
				}
			}
			for k := range sim.visits {
				truth := sim.smooth(sim.weeks[k])
				sm := c.smoothed(k)
				smoothed[i].add(inside(sm.whole, 100*(1-truth)))
				smoothed[6].add(inside(sm.whole, 100*(1-truth)))
				width += sm.whole.High - sm.whole.Low
				for l := range 4 {
					f := 100 * (1 - truth*b.sites[sim.site].limb[l])
					limbs[6].add(inside(sm.targets[14+l], f))
				}
				if k > 0 {
					w := (sim.weeks[k-1] + sim.weeks[k]) / 2
					between[6].add(inside(m.reader.read(c.beliefAt(week(w))).whole, 100*(1-sim.smooth(w))))
				}
			}
			last := len(sim.visits) - 1
			for _, from := range []int{0, 5, 10, 15, 18} {
				ch := c.Change(from, last)
				moved := 100 * (sim.smooth(sim.weeks[from]) - sim.smooth(sim.weeks[last]))
				// What moved by nearly the margin is neither: half counts each way.
				for d, p := range map[int]float64{1: ch.Better, 0: ch.Same, -1: ch.Worse} {
					bin := int(p * 10)
					if p > 0.9 {
						bin = 9
						if p > 0.97 {
							bin = 10
						}
					}
					was := 0
					if moved > Margin {
						was = 1
					} else if moved < -Margin {
						was = -1
					}
					reliability[bin].said += p
					reliability[bin].add(was == d)
				}
			}
		}
	}
	for i, s := range shapes {
		t.Logf("%-18s filtered %v, smoothed %v", s.name, filtered[i], smoothed[i])
	}
	t.Logf("all: filtered %v, smoothed %v, limbs %v, between %v; mean width %.1f", filtered[6], smoothed[6], limbs[6], between[6], width/float64(smoothed[6].all))
	for weeks, tl := range forecast {
		t.Logf("forecast %d weeks: %v, width %.1f", weeks, *tl, fwidth[weeks]/float64(tl.all))
	}
	for i, x := range reliability {
		if x.all > 0 {
			t.Logf("bin %d: said %.1f %%, was %v", i, 100*x.said/float64(x.all), x.tally)
		}
	}
}
