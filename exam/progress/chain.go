package progress

import (
	"math"
	"sync"
	"time"

	"gonum.org/v1/gonum/mat"
)

// Pace is how the severity of a lesion moves.
type Pace uint8

// The paces.
const (
	RecoveringFast Pace = iota
	RecoveringSlowly
	Steady
	Worsening
	paceCount
)

// String returns the pace in words.
func (p Pace) String() string {
	return [...]string{"recovering fast", "recovering slowly", "steady", "getting worse"}[p%paceCount]
}

// Levels is the number of steps of the severity grid, from 0 (sound) to 1 (complete).
const Levels = 21

// states of one place: severity level × pace, state = level × paceCount + pace.
const states = Levels * int(paceCount)

// spacing of the severity grid.
const spacing = 1.0 / (Levels - 1)

// Rates are the parameters of how a lesion moves. No transition rates of neurological
// grades in dogs or cats are published (progression.md 7.7); these are judgements held to
// published courses, as each line says, and checked by simulation for calibration.
type Rates struct {
	FastWeeks     float64 // time constant of fast recovery. Davis-2002, Elliott-2020: walking after 1–3 weeks; so 3
	SlowWeeks     float64 // time constant of slow recovery. Khan-2024, Olby-2001: weeks to three months; so 12
	LeastRecovery float64 // recovery does not slow below the pace at this severity, until it stops: judgement
	WorsePerWeek  float64 // severity per week when getting worse. Kathmann-2006, DM-book: walking is lost in 6–12 months; so 0.02
	WobbleDays    float64 // days after which a steady severity has moved by 5 %, up or down: judgement
	FastEnds      float64 // per week: fast recovery turns slow
	FastStops     float64 // per week: fast recovery stops
	SlowStops     float64 // per week: slow recovery stops
	SteadyGains   float64 // per week: a steady animal begins to recover
	SteadyLoses   float64 // per week: a steady animal begins to get worse
	WorseStops    float64 // per week: getting worse ends
	WorseTurns    float64 // per week: getting worse turns into recovery
	RecoveryTurns float64 // per week: recovery turns into getting worse
	JumpPerYear   float64 // sudden worsening. Sedlacek-2022: 5 % at 1 year; PVB-164: 28 %; Argent-2022: 27 % within 2 years; so 0.15
	NewPerYear    float64 // a lesion at another place. Aikawa-2012: 10 % recurring signs and 2.3 % operated in 45 months; so 0.03
	GrowPerYear   float64 // the lesion grows by a segment. Castel-2019: 2 % of extrusions become myelomalacia; DM over months: judgement 0.05

	DayPoints float64 // standard deviation of good and bad days, in points of function: judgement, no figure found

	Start [paceCount]float64 // share of each pace at the first visit: judgement, rehabilitation patients mostly recover
}

// DefaultRates returns the rates in use.
func DefaultRates() Rates {
	return Rates{
		FastWeeks: 3, SlowWeeks: 12, LeastRecovery: 0.1, WorsePerWeek: 0.02, WobbleDays: 1000,
		FastEnds: 0.15, FastStops: 0.1, SlowStops: 0.08, SteadyGains: 0.015, SteadyLoses: 0.008,
		WorseStops: 0.05, WorseTurns: 0.02, RecoveryTurns: 0.01,
		JumpPerYear: 0.15, NewPerYear: 0.03, GrowPerYear: 0.05, DayPoints: 2.2,
		Start: [paceCount]float64{0.3, 0.3, 0.25, 0.15},
	}
}

// speed returns the mean change of severity per week in a state; below zero is recovery.
func (r Rates) speed(level int, p Pace) float64 {
	s := float64(level) * spacing
	switch {
	case p == RecoveringFast && level > 0:
		return -math.Max(s, r.LeastRecovery) / r.FastWeeks
	case p == RecoveringSlowly && level > 0:
		return -math.Max(s, r.LeastRecovery) / r.SlowWeeks
	case p == Worsening && level < Levels-1:
		return r.WorsePerWeek
	}
	return 0
}

// generator returns the rates per day between the states of one place.
func (r Rates) generator() *mat.Dense {
	q := mat.NewDense(states, states, nil)
	add := func(from, to int, perDay float64) {
		if from != to && perDay > 0 {
			q.Set(from, to, q.At(from, to)+perDay)
			q.Set(from, from, q.At(from, from)-perDay)
		}
	}
	at := func(level int, p Pace) int { return level*int(paceCount) + int(p) }
	turn := [paceCount][paceCount]float64{
		RecoveringFast:   {RecoveringSlowly: r.FastEnds, Steady: r.FastStops, Worsening: r.RecoveryTurns},
		RecoveringSlowly: {Steady: r.SlowStops, Worsening: r.RecoveryTurns},
		Steady:           {RecoveringSlowly: r.SteadyGains, Worsening: r.SteadyLoses},
		Worsening:        {Steady: r.WorseStops, RecoveringSlowly: r.WorseTurns},
	}
	for k := range Levels {
		for p := range paceCount {
			from := at(k, p)
			drift := r.speed(k, p) / 7 / spacing
			if drift < 0 {
				add(from, at(k-1, p), -drift)
			} else if drift > 0 {
				add(from, at(k+1, p), drift)
			}
			wobble := 0.5 / r.WobbleDays * 0.05 * 0.05 / spacing / spacing
			if k > 0 {
				add(from, at(k-1, p), wobble)
			}
			if k < Levels-1 {
				add(from, at(k+1, p), wobble)
			}
			for next, perWeek := range turn[p] {
				add(from, at(k, Pace(next)), perWeek/7)
			}
			// A jump lands on any worse level alike, and what follows is as at a first visit.
			if worse := Levels - 1 - k; worse > 0 {
				for to := k + 1; to < Levels; to++ {
					for next := range paceCount {
						add(from, at(to, next), r.JumpPerYear/365.25/float64(worse)*r.Start[next])
					}
				}
			}
		}
	}
	return q
}

// start returns the distribution over the states of a place where a lesion is met first:
// every severity alike, the paces by their share.
func (r Rates) start() []float64 {
	out := make([]float64, states)
	for k := range Levels {
		for p := range int(paceCount) {
			out[k*int(paceCount)+p] = r.Start[p] / Levels
		}
	}
	return out
}

// unit is the grain of time: stretches are counted in quarters of a day from the first
// visit on, so that the rounding never adds up and courses share their transition matrices.
const unit = 6 * time.Hour

// clock gives transition matrices for stretches of whole units. A stretch is the product of
// its powers of two, so that a course of irregular visits needs one matrix exponential.
// It is safe for concurrent use.
type clock struct {
	mu      sync.Mutex
	q       *mat.Dense
	powers  []*mat.Dense          // powers[j]: 2ʲ units
	stretch map[int64]*transition // by units
}

// transition says how a place's states move over a stretch of time in which no lesion
// arises elsewhere, and how a lesion that arises in it stands at its end.
type transition struct {
	rows  [states * states]float64 // rows[i*states+j] = P(i → j, no new lesion)
	cols  [states * states]float64 // cols[j*states+i], the same
	fresh [states]float64          // P(new lesion, j at the end)
	grow  float64                  // P(the lesion grows by a segment)
}

// newClock extends the generator by one state from which new lesions arise, so that their
// time of onset within a stretch is summed exactly too.
func newClock(r Rates) *clock {
	hazard := r.NewPerYear / 365.25
	q := mat.NewDense(states+1, states+1, nil)
	g := r.generator()
	first := r.start()
	for i := range states {
		for j := range states {
			q.Set(i, j, g.At(i, j))
		}
		q.Set(i, i, q.At(i, i)-hazard)
		q.Set(states, i, hazard*first[i])
	}
	return &clock{q: q, stretch: map[int64]*transition{}}
}

// units returns the whole units from one time to another.
func units(from, to time.Time) int64 { return int64(math.Round(float64(to.Sub(from)) / float64(unit))) }

func days(units int64) float64 { return float64(units) * unit.Hours() / 24 }

// keepStretches bounds the memory of a clock: 115 kB each.
const keepStretches = 400

// after returns the transition over some units, nil for none.
func (c *clock) after(n int64, growPerYear float64) *transition {
	if n <= 0 {
		return nil
	}
	c.mu.Lock()
	defer c.mu.Unlock()
	if t, ok := c.stretch[n]; ok {
		return t
	}
	var p *mat.Dense
	for j := 0; n>>j > 0; j++ {
		if len(c.powers) == j {
			var power mat.Dense
			if j == 0 {
				var scaled mat.Dense
				scaled.Scale(days(1), c.q)
				power.Exp(&scaled)
			} else {
				power.Mul(c.powers[j-1], c.powers[j-1])
			}
			c.powers = append(c.powers, &power)
		}
		if n>>j&1 == 0 {
			continue
		}
		if p == nil {
			p = c.powers[j]
		} else {
			var next mat.Dense
			next.Mul(p, c.powers[j])
			p = &next
		}
	}
	t := &transition{grow: 1 - exp(-growPerYear*days(n)/365.25)}
	for j := range states {
		t.fresh[j] = quantum(p.At(states, j))
	}
	stay := 1.0
	for _, v := range t.fresh {
		stay -= v
	}
	for i := range states {
		sum := 0.0
		for j := range states {
			v := quantum(p.At(i, j))
			t.rows[i*states+j] = v
			sum += v
		}
		for j := range states {
			v := t.rows[i*states+j] * stay / sum
			t.rows[i*states+j], t.cols[j*states+i] = v, v
		}
	}
	if len(c.stretch) >= keepStretches {
		clear(c.stretch)
	}
	c.stretch[n] = t
	return t
}

// quantum rounds a probability to whole multiples of 2⁻⁴⁶: what the matrix kernels of
// different processors round differently is rounded away, so that a course reads the same everywhere.
func quantum(v float64) float64 { return math.Max(0, math.Round(v*(1<<46))) / (1 << 46) }

// daily spreads a likelihood over good and bad days: kernel[k][j] is the chance that an animal
// whose lesion stands at level k shows level j today. Nothing and everything do not vary.
func (r Rates) daily() [Levels][Levels]float64 {
	var kernel [Levels][Levels]float64
	for k := range Levels {
		if k == 0 || k == Levels-1 || !(r.DayPoints > 0) {
			kernel[k][k] = 1
			continue
		}
		sum := 0.0
		for j := range Levels {
			z := float64(j-k) * spacing * 100 / r.DayPoints
			kernel[k][j] = exp(-z * z / 2)
			sum += kernel[k][j]
		}
		for j := range Levels {
			kernel[k][j] /= sum
		}
	}
	return kernel
}

// forward puts from × t into dst.
func (t *transition) forward(dst, from []float64) {
	if t == nil {
		copy(dst, from)
		return
	}
	combine(dst, from, &t.rows)
}

// backward puts t × to into dst.
func (t *transition) backward(dst, to []float64) {
	if t == nil {
		copy(dst, to)
		return
	}
	combine(dst, to, &t.cols)
}

// combine puts Σ by[i] × the i-th line of lines into dst. It takes four lines at a time and adds
// them one after the other, so that the sums are the same as line by line.
func combine(dst, by []float64, lines *[states * states]float64) {
	var at [states]int
	n := 0
	for i, v := range by[:states] {
		if v != 0 {
			at[n] = i
			n++
		}
	}
	d := (*[states]float64)(dst)
	*d = [states]float64{}
	line := func(k int) (float64, *[states]float64) {
		i := at[k]
		return by[i], (*[states]float64)(lines[i*states:])
	}
	k := 0
	for ; k+4 <= n; k += 4 {
		a0, l0 := line(k)
		a1, l1 := line(k + 1)
		a2, l2 := line(k + 2)
		a3, l3 := line(k + 3)
		for j := range d {
			v := d[j] + float64(a0*l0[j])
			v += float64(a1 * l1[j])
			v += float64(a2 * l2[j])
			d[j] = v + float64(a3*l3[j])
		}
	}
	for ; k < n; k++ {
		a, l := line(k)
		for j := range d {
			d[j] += float64(a * l[j])
		}
	}
}
