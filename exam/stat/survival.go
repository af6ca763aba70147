package stat

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"
)

// Censored is the cause of an observation that ended before anything happened.
const Censored = 0

// Spell is one animal's time until something happened or watching stopped. A milestone
// first seen at a visit happened between two visits: say «seen by day x».
type Spell struct {
	Time  float64 // from the start, in any unit, at least 0
	Cause int     // Censored, or which kind of event: 1, 2, …
}

// Limits names how the interval of a survival curve is made. The three differ: name the type.
type Limits uint8

// The interval types, as R's survfit names them.
const (
	LimitsPlain Limits = iota
	LimitsLog
	LimitsLogLog
)

// Step is a survival curve at one event time.
type Step struct {
	Time      float64
	AtRisk    int
	Events    int
	Survival  float64
	SE        float64 // Greenwood's standard error; NaN at survival 0
	Low, High float64 // 95 % limits; NaN at survival 0
}

// Curve is a Kaplan–Meier estimate: the share for whom nothing has happened yet.
type Curve struct {
	N, Events int
	Steps     []Step
	All       []Spell // sorted by time; numbers at risk are read from it
}

// KaplanMeier estimates the curve. Any cause but Censored is the event. Spells with a NaN
// or negative time are left out.
func KaplanMeier(spells []Spell, limits Limits) Curve {
	s := sorted(spells)
	c := Curve{N: len(s), All: s}
	surv, sum := 1.0, 0.0
	for i := 0; i < len(s); {
		j, d := i, 0
		for j < len(s) && s[j].Time == s[i].Time {
			if s[j].Cause != Censored {
				d++
			}
			j++
		}
		n := len(s) - i
		if d > 0 {
			c.Events += d
			surv *= 1 - float64(d)/float64(n)
			if d == n {
				surv = 0
			}
			sum += float64(d) / (float64(n) * float64(n-d))
			st := Step{s[i].Time, n, d, surv, surv * math.Sqrt(sum), nan, nan}
			if surv > 0 {
				st.Low, st.High = limitsOf(surv, math.Sqrt(sum), limits)
			} else {
				st.SE = nan
			}
			c.Steps = append(c.Steps, st)
		}
		i = j
	}
	return c
}

func sorted(spells []Spell) []Spell {
	s := make([]Spell, 0, len(spells))
	for _, x := range spells {
		if x.Time >= 0 {
			s = append(s, x)
		}
	}
	slices.SortStableFunc(s, func(a, b Spell) int { return sign(a.Time - b.Time) })
	return s
}

func limitsOf(surv, se float64, l Limits) (low, high float64) {
	switch l {
	case LimitsLog:
		return surv * math.Exp(-z95*se), math.Min(1, surv*math.Exp(z95*se))
	case LimitsLogLog:
		ln := math.Log(surv)
		return math.Exp(-math.Exp(math.Log(-ln) - z95*se/ln)), math.Exp(-math.Exp(math.Log(-ln) + z95*se/ln))
	}
	return math.Max(0, surv-z95*surv*se), math.Min(1, surv+z95*surv*se)
}

// AtRisk returns how many animals were still watched, with nothing happened, just before t.
func (c Curve) AtRisk(t float64) int {
	i, _ := slices.BinarySearchFunc(c.All, t, func(s Spell, t float64) int { return sign(s.Time - t) })
	return len(c.All) - i
}

// At returns the share for whom nothing has happened up to and including t.
func (c Curve) At(t float64) float64 {
	v := 1.0
	for _, s := range c.Steps {
		if s.Time > t {
			break
		}
		v = s.Survival
	}
	return v
}

// Quantile returns the time by which the share p has had the event, with its limits; NaN where
// the curve (or its limit) does not come down so far. Where the curve is level at exactly 1 − p
// it is the middle of that stretch, as in R.
func (c Curve) Quantile(p float64) (t, low, high float64) {
	at := func(value func(Step) float64) float64 {
		const near = 1.5e-8 // R's tolerance: √ of the machine epsilon
		first, level := nan, nan
		for _, s := range c.Steps {
			v := value(s)
			if math.IsNaN(v) || v >= 1-p+near {
				continue
			}
			if math.IsNaN(first) {
				first, level = s.Time, v
				if math.Abs(v-(1-p)) >= near {
					return first
				}
			} else if v < level {
				return (first + s.Time) / 2
			}
		}
		return first
	}
	return at(func(s Step) float64 { return s.Survival }), at(func(s Step) float64 { return s.Low }), at(func(s Step) float64 { return s.High })
}

// LogRankTest compares the curves of groups.
type LogRankTest struct {
	Observed, Expected []float64 // events of each group
	Variance           float64   // of the first group's difference
	ChiSquare          float64
	DF                 int
	P                  float64
}

// LogRank tests whether groups differ in their time to the event. rho 0 is the log-rank test,
// 1 the Peto–Peto form that weighs early events more. ChiSquare and P are NaN for fewer than
// two groups with spells or no events.
func LogRank(groups [][]Spell, rho float64) LogRankTest {
	g := len(groups)
	t := LogRankTest{make([]float64, g), make([]float64, g), nan, nan, g - 1, nan}
	var pooled []Spell
	for _, s := range groups {
		pooled = append(pooled, s...)
	}
	pool := KaplanMeier(pooled, LimitsPlain)
	if g < 2 || pool.Events == 0 {
		return t
	}
	diff := make([]float64, g)
	cov := mat.NewSymDense(g, nil)
	byGroup := make([]Curve, g)
	for i, s := range groups {
		byGroup[i] = KaplanMeier(s, LimitsPlain)
	}
	before := 1.0
	next := make([]int, g)
	for _, st := range pool.Steps {
		w := math.Pow(before, rho)
		before = st.Survival
		n, d := float64(st.AtRisk), float64(st.Events)
		risk := make([]float64, g)
		for i := range groups {
			risk[i] = float64(byGroup[i].AtRisk(st.Time))
			own := 0.0
			if k := next[i]; k < len(byGroup[i].Steps) && byGroup[i].Steps[k].Time == st.Time {
				own = float64(byGroup[i].Steps[k].Events)
				next[i]++
			}
			t.Observed[i] += w * own
			t.Expected[i] += w * d * risk[i] / n
			diff[i] += w * (own - d*risk[i]/n)
		}
		if n > 1 {
			f := w * w * d * (n - d) / (n - 1)
			for i := range groups {
				for j := i; j < g; j++ {
					v := -risk[i] * risk[j] / (n * n)
					if i == j {
						v += risk[i] / n
					}
					cov.SetSym(i, j, cov.At(i, j)+f*v)
				}
			}
		}
	}
	t.Variance = cov.At(0, 0)
	// One group follows from the others: leave the last out.
	var chol mat.Cholesky
	if !chol.Factorize(cov.SliceSym(0, g-1)) {
		return t
	}
	u := mat.NewVecDense(g-1, diff[:g-1])
	var x mat.VecDense
	if chol.SolveVecTo(&x, u) != nil {
		return t
	}
	t.ChiSquare = mat.Dot(u, &x)
	t.P = distuv.ChiSquared{K: float64(t.DF)}.Survival(t.ChiSquare)
	return t
}

// Incidence is the share to whom one cause has happened, beside the other causes.
type Incidence struct {
	Time      float64
	Share     float64
	SE        float64
	Low, High float64 // 95 % limits on the log(−log) scale; NaN at a share of 0
}

// AalenJohansen estimates the cumulative incidence of one cause while the others compete (a
// dead animal can no longer learn to walk). Where nothing competes it equals 1 − Kaplan–Meier.
// The variance is Greenwood's for the multi-state estimate (Aalen and Johansen 1978): the
// multinomial variance of the hazards at each time, carried forward to the share.
func AalenJohansen(spells []Spell, cause int) []Incidence {
	s := sorted(spells)
	type event struct{ n, own, other, before, after, share float64 }
	var events []event
	var out []Incidence
	surv, share := 1.0, 0.0
	for i := 0; i < len(s); {
		j, own, other := i, 0.0, 0.0
		for j < len(s) && s[j].Time == s[i].Time {
			switch {
			case s[j].Cause == Censored:
			case s[j].Cause == cause:
				own++
			default:
				other++
			}
			j++
		}
		n := float64(len(s) - i)
		if own+other > 0 {
			before := surv
			share += surv * own / n
			surv *= 1 - (own+other)/n
			events = append(events, event{n, own / n, other / n, before, surv, share})
			v := 0.0
			for _, e := range events {
				later := 0.0 // the share that befalls those still free of any event after e
				if e.after > 0 {
					later = (share - e.share) / e.after
				}
				g1, g2 := e.before*(1-later), -e.before*later
				mean := g1*e.own + g2*e.other
				v += (g1*g1*e.own + g2*g2*e.other - mean*mean) / e.n
			}
			r := Incidence{s[i].Time, share, math.Sqrt(math.Max(0, v)), nan, nan}
			if share > 0 && share < 1 {
				k := z95 * r.SE / (share * -math.Log(share))
				r.Low, r.High = math.Pow(share, math.Exp(k)), math.Pow(share, math.Exp(-k))
			}
			out = append(out, r)
		}
		i = j
	}
	return out
}
