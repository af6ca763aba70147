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
	"cordwalk.example/cordwalk/exam/localise"
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
// 0.5, for recovery does not run on rails (judgement).
func fitsAndStarts(r *rand.Rand) func(float64) float64 {
	g := distuv.Gamma{Alpha: 1 / (0.5 * 0.5), Beta: 1 / (0.5 * 0.5), Src: r}
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

// long skips what takes minutes under the race detector.
func long(t *testing.T) {
	if testing.Short() && !soak() {
		t.Skip("simulated courses are run without -short")
	}
}

// seedOf returns a fresh seed, or the one in CORDWALK_SEED, and prints it.
func seedOf(t *testing.T) uint64 {
	seed := uint64(time.Now().UnixNano())
	if s := os.Getenv("CORDWALK_SEED"); s != "" {
		_, err := fmt.Sscan(s, &seed)
		require.NoError(t, err)
	}
	t.Logf("seed %d (CORDWALK_SEED)", seed)
	return seed
}

// within is the tolerance of a share: tight for the full count, wider for a twentieth, whose
// courses are few and whose visits depend on each other.
func within(tight, wide float64) float64 {
	if soak() {
		return tight
	}
	return wide
}

// subject is something that exams can be drawn from.
type subject struct {
	model *Model
	draw  func(r *rand.Rand, severity float64, at time.Time) exam.Visit
	limbs []Share         // true damage of segments and limbs
	worst [Levels]float64 // true damage of the whole animal, by level
}

// examined is one simulated course: the visits and what was true.
type examined struct {
	weeks  []float64
	smooth func(float64) float64 // severity without good and bad days
	visits []exam.Visit
}

func follow1(r *rand.Rand, s shape, x subject, visits int) examined {
	var out examined
	course, _ := s.draw(r)
	pace, day := fitsAndStarts(r), goodAndBadDays(r)
	out.smooth = func(w float64) float64 { return course(pace(w)) }
	w := 0.0
	for range visits {
		shown := math.Max(0, math.Min(1, out.smooth(w)+day(w)))
		out.weeks, out.visits = append(out.weeks, w), append(out.visits, x.draw(r, shown, week(w)))
		w += between(r, 0.7, 1.3)
		if r.IntN(8) == 0 {
			w++
		}
	}
	return out
}

// benchSubject is an animal of the test space with a lesion at a random place.
func benchSubject(b *bench, m *Model, r *rand.Rand, findings int) subject {
	site := r.IntN(len(b.sites) - 1)
	return subject{model: m, limbs: b.sites[site].shares, worst: m.reader.whole[site].damage, draw: func(r *rand.Rand, severity float64, at time.Time) exam.Visit {
		return b.draw(r, site, severity, at, findings)
	}}
}

// verdicts counts, for probabilities said, how often it was so.
type verdicts [11]struct {
	said float64
	tally
}

func (v *verdicts) add(p float64, was bool) {
	bin := min(9, int(p*10))
	if p > 0.97 {
		bin = 10
	}
	v[bin].said += p
	v[bin].add(was)
}

// function is the true function of the whole animal at a severity.
func (x subject) function(severity float64) float64 { return 100 * (1 - damageAt(x.worst, severity)) }

func damageAt(damage [Levels]float64, severity float64) float64 {
	l := severity / spacing
	k := min(int(l), Levels-2)
	return damage[k] + (l-float64(k))*(damage[k+1]-damage[k])
}

func (v *verdicts) log(t *testing.T) {
	for _, x := range v {
		if x.all > 0 {
			t.Logf("  said %5.1f %%, was so in %v", 100*x.said/float64(x.all), x.tally)
		}
	}
}

func moved(s subject, x examined, from, to int) int {
	d := s.function(x.smooth(x.weeks[to])) - s.function(x.smooth(x.weeks[from]))
	switch {
	case d > Margin:
		return 1
	case d < -Margin:
		return -1
	}
	return 0
}

// calibrate runs courses of every shape and counts what held.
func calibrate(t *testing.T, r *rand.Rand, n int, tolerance float64, make func() subject) {
	var filtered, smoothed, limbs, parts, middle, ahead tally
	byShape := map[string]*tally{}
	var said verdicts
	var sureSaid float64
	var sure tally
	for _, s := range shapes {
		byShape[s.name] = &tally{}
		for range n {
			subject := make()
			x := follow1(r, s, subject, 20)
			m := subject.model
			c := NewCourse(m)
			for k, v := range x.visits {
				require.NoError(t, c.Add(v))
				filtered.add(inside(c.filtered(k).whole, subject.function(x.smooth(x.weeks[k]))))
				if k == 6 || k == 13 {
					for _, weeks := range []float64{4, 8, 12} {
						w := x.weeks[k] + weeks
						ahead.add(inside(m.reader.read(c.beliefAt(week(w))).whole, subject.function(x.smooth(w))))
					}
				}
			}
			for k, w := range x.weeks {
				truth := x.smooth(w)
				now := c.smoothed(k)
				in := inside(now.whole, subject.function(truth))
				smoothed.add(in)
				byShape[s.name].add(in)
				damage := map[int]float64{}
				for _, share := range subject.limbs {
					damage[share.Target] = damageAt(share.Damage, truth)
				}
				for target, about := range m.space.Targets() {
					if about.Kind == RegionTarget {
						continue
					}
					in := inside(now.targets[target], 100*(1-damage[target]))
					parts.add(in)
					if about.Kind == LimbTarget && damage[target] > 0.02 {
						limbs.add(in)
					}
				}
				if k > 0 {
					mid := (x.weeks[k-1] + w) / 2
					middle.add(inside(m.reader.read(c.beliefAt(week(mid))).whole, subject.function(x.smooth(mid))))
				}
			}
			last := len(x.visits) - 1
			for _, from := range []int{0, 5, 10, 15, 18} {
				ch := c.Change(from, last)
				was := moved(subject, x, from, last)
				for d, p := range map[int]float64{1: ch.Better, 0: ch.Same, -1: ch.Worse} {
					said.add(p, was == d)
					if d != 0 && p > 0.88 && p < 0.98 {
						sureSaid += p
						sure.add(was == d)
					}
				}
			}
		}
	}
	t.Logf("90 %% bands: filtered %v, smoothed %v, limbs that are ill %v, all limbs and half segments %v, between visits %v, forecasts of 4, 8 and 12 weeks %v", filtered, smoothed, limbs, parts, middle, ahead)
	for _, s := range shapes {
		t.Logf("  %-17s %v", s.name, *byShape[s.name])
	}
	said.log(t)
	t.Logf("«better» or «worse» said with %.1f %%: right in %v", 100*sureSaid/float64(sure.all), sure)
	for name, tl := range map[string]tally{"filtered": filtered, "smoothed": smoothed, "between visits": middle, "forecast": ahead} {
		require.InDelta(t, 0.9, tl.share(), tolerance, name)
	}
	require.InDelta(t, 0.9, limbs.share(), 1.5*tolerance, "limbs that are ill")
	require.Greater(t, parts.share(), 0.9-tolerance, "most half segments are sound and known to be")
	require.InDelta(t, sureSaid/float64(sure.all), sure.share(), within(0.03, 0.10), "a change said with so much probability")
}

// What is said with 90 % must hold in 90 %, and «better» with 94 % must be right in 94 %.
func TestCalibration(t *testing.T) {
	long(t)
	r := rand.New(rand.NewPCG(seedOf(t), 1))
	b := newBench()
	m := NewModel(b, DefaultRates())
	calibrate(t, r, courses(1000), within(0.025, 0.05), func() subject { return benchSubject(b, m, r, 40) })
}

// dogs makes dogs with a lesion of the cord, at a place drawn by how often it is hit.
func dogs(t *testing.T, r *rand.Rand) func() subject {
	m, err := For(dog)
	require.NoError(t, err)
	space := m.space.(*localised)
	cells := motorCells()
	return func() subject {
		site := -1
		for site < 0 || space.sites[site].Kind != localise.Cord || space.sites[site].From.Region() == exam.RegionCd {
			u := r.Float64()
			for site = 0; site < len(space.prior)-1; site++ {
				if u -= space.prior[site]; u < 0 {
					break
				}
			}
		}
		a := &animal{space.m.Drawer(site, cells)}
		x := subject{model: m, draw: a.draw, worst: space.reader.whole[site].damage}
		for _, s := range space.shares[site] {
			if space.targets[s.Target].Kind != RegionTarget {
				x.limbs = append(x.limbs, s)
			}
		}
		return x
	}
}

// The same on dogs, through the localisation model.
func TestCalibrationOfDogs(t *testing.T) {
	long(t)
	r := rand.New(rand.NewPCG(seedOf(t), 2))
	calibrate(t, r, courses(400), within(0.04, 0.08), dogs(t, r))
}

// A plateau is named soon after it begins, and seldom where there is none. It has begun when the
// true course moves by less than half the stated rate; naming one is false while it
// moves by more than twice that rate, both in the week before and in the week after.
func TestPlateauIsNamed(t *testing.T) {
	long(t)
	r := rand.New(rand.NewPCG(seedOf(t), 3))
	b := newBench()
	m := NewModel(b, DefaultRates())
	var named tally
	falseAlarms, visits := 0, 0
	for _, s := range shapes {
		for range courses(1000) {
			x := follow1(r, s, benchSubject(b, m, r, 50), 26)
			c := NewCourse(m)
			begun, found, before := -1, false, false
			var says []bool
			for k, v := range x.visits {
				require.NoError(t, c.Add(v))
				says = append(says, k >= 2 && c.filtered(k).slow >= PlateauNamed)
			}
			for k, w := range x.weeks {
				visits++
				rate := 100 * math.Abs(x.smooth(w+1)-x.smooth(w))
				if w >= 1 {
					rate = math.Min(rate, 100*math.Abs(x.smooth(w)-x.smooth(w-1)))
				}
				switch {
				case rate >= 2*PlateauRate:
					begun = -1
					if says[k] && !before {
						falseAlarms++
					}
				case rate < PlateauRate/2 && begun < 0:
					begun = k
				}
				before = says[k]
			}
			if begun < 3 || begun+4 >= len(says) {
				continue
			}
			for k := begun; k <= begun+4; k++ {
				found = found || says[k]
			}
			named.add(found)
		}
	}
	perYear := 52 * float64(falseAlarms) / float64(visits)
	t.Logf("named within four visits: %v; false alarms: %.3f per year of weekly visits (%d in %d visits)", named, perYear, falseAlarms, visits)
	require.Greater(t, named.share(), within(0.80, 0.70))
	require.Less(t, perYear, within(0.05, 0.10))
}

// Noise only: nothing changes over twelve weekly exams. The model may call a change in one of twenty
// series; reading the change of the raw total calls one nearly always.
func TestNoiseOnly(t *testing.T) {
	long(t)
	r := rand.New(rand.NewPCG(seedOf(t), 4))
	b := newBench()
	m := NewModel(b, DefaultRates())
	run := func(name string, n int, make func() subject) {
		var model, total, counted tally
		for range n {
			x := make()
			severity := between(r, 0.15, 0.95)
			c := NewCourse(x.model)
			for k := range 12 {
				require.NoError(t, c.Add(x.draw(r, severity, week(float64(k)))))
			}
			model.add(c.Change(0, 11).sure())
			first, last := c.Visit(0), c.Visit(11)
			total.add(rawTotal(first) != rawTotal(last))
			counts := CountBetween(dog, first, last)
			counted.add(counts.P < 0.05)
		}
		t.Logf("%s: the model calls a change in %v; the raw total differs in %v; the sign test of changed cells is below 0.05 in %v", name, model, total, counted)
		require.LessOrEqual(t, model.share(), within(0.05, 0.08), name)
	}
	run("test space", courses(1000), func() subject { return benchSubject(b, m, r, 50) })
	run("dogs", courses(1000), dogs(t, r))
}

// rawTotal is what a naive reading adds up: the steps away from normal over all cells.
func rawTotal(v exam.Visit) float64 {
	sum := 0.0
	for _, f := range v.Findings {
		if h, ok := f.Health(); ok {
			sum += 1 - h
		}
	}
	return math.Round(sum * 1e6)
}
