// Package stim holds the strength–duration test of a muscle and the log of electrical
// stimulation.
//
// The test: the weakest current that just makes the muscle twitch, at several pulse widths. A law
// fitted to the points gives the rheobase (the current that suffices however long the pulse) and
// the chronaxie (the pulse width at which twice the rheobase is needed). A nerve answers to short
// pulses, a muscle without its nerve only to long ones. Two laws are in use and give
// different chronaxies from the same points: a fit carries its law, and fits of two
// laws are never compared.
//
// Ranges and contraindications here are guidance from the literature. The choice of current
// and indication belongs to licensed practice.
package stim

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"

	"cordwalk.example/cordwalk/exam"
)

// Law is a strength–duration law with the way it is fitted.
type Law uint8

// The laws. I is current, t pulse width, R rheobase, c chronaxie.
const (
	NoLaw       Law = iota
	Weiss           // I = R(1 + c/t), least squares of current on 1/t
	WeissLog        // the same law, least squares of the logarithm of current: relative errors
	WeissCharge     // the same law as charge I·t = R(t + c), least squares of charge on t; ruled by the long pulses
	Lapicque        // I = R / (1 − 2^(−t/c)), least squares of current
	LapicqueLog     // the same law, least squares of the logarithm of current
	lawCount
)

var lawNames = [lawCount]string{"", "weiss", "weiss-log", "weiss-charge", "lapicque", "lapicque-log"}

// Laws lists the laws. Weiss is the first choice.
func Laws() []Law { return []Law{Weiss, WeissLog, WeissCharge, Lapicque, LapicqueLog} }

// String returns the law's key.
func (l Law) String() string {
	if l < lawCount {
		return lawNames[l]
	}
	return "unknown"
}

// ParseLaw is the inverse of String.
func ParseLaw(word string) (Law, error) {
	for l := Weiss; l < lawCount; l++ {
		if lawNames[l] == word {
			return l, nil
		}
	}
	return NoLaw, &exam.Invalid{Field: "law", Value: word, Allowed: "weiss, weiss-log, weiss-charge, lapicque or lapicque-log"}
}

// Source names where the law comes from.
func (l Law) Source() string {
	switch l {
	case Weiss, WeissLog, WeissCharge:
		return "Geddes2004"
	case Lapicque, LapicqueLog:
		return "Lapicque's exponential, from memory"
	}
	return ""
}

// Current returns the threshold current in mA that the law gives at a pulse width in ms for a
// rheobase in mA and a chronaxie in ms.
func (l Law) Current(rheobase, chronaxie, width float64) float64 {
	h, _ := l.shape(chronaxie, width)
	return rheobase * h
}

// shape is the current over the rheobase, and its derivative by the chronaxie.
func (l Law) shape(c, t float64) (h, dh float64) {
	if l == Lapicque || l == LapicqueLog {
		a := t * math.Ln2 / c
		h = -1 / math.Expm1(-a)
		return h, a / c * h * h * math.Exp(-a)
	}
	return 1 + c/t, 1 / t
}

// Point is one threshold: a pulse width in ms and the weakest current in mA that makes the muscle twitch.
type Point struct {
	Width   float64 `json:"width_ms"`
	Current float64 `json:"current_ma"`
}

// Interval is a value with its 95 % interval; the ends are NaN where they cannot be computed.
type Interval struct {
	Value, Low, High float64
	SE               float64 // standard error
}

// Fit is a law fitted to the points of one test.
type Fit struct {
	Law        Law
	Rheobase   Interval  // mA
	Chronaxie  Interval  // ms
	Covariance float64   // of rheobase and chronaxie
	RSS        float64   // residual sum of squares, on the scale that was fitted
	R2         float64   // share of the variance explained, on that scale
	Residuals  []float64 // of current, in mA, in the order of Points
	Points     []Point   // that were fitted, by pulse width
	Bad        []int     // indexes of Points that do not fit the others
	Warnings   []string  // what the test lacks
	Chargeable bool      // the law's chronaxie is positive: the curve has the form it should have
}

// The advice on a test (progression.md 5.2): five widths over a factor of 100.
const (
	wantedWidths = 5
	wantedSpread = 100
)

// The warnings of a fit, but for the one that names a pulse width.
const (
	fewWidths    = "fewer than five pulse widths: the curve is uncertain"
	narrowWidths = "pulse widths spread over less than a factor of 100"
	wideCharge   = "a charge line over so wide a range is ruled by the long pulses: prefer the law fitted to currents"
	notFalling   = "the points do not fall with pulse width as a curve should: repeat the test"
)

// Do fits a law to the points of a test. Widths and currents must be positive and finite and of at least three
// different widths; else the error says which point is wrong. Repeats at one width are points of their
// own. A point that is far off is kept in the fit and named in Bad.
func Do(points []Point, law Law) (Fit, error) {
	f := Fit{Law: law, Points: slices.Clone(points)}
	if law <= NoLaw || law >= lawCount {
		return f, &exam.Invalid{Field: "law", Value: law.String(), Allowed: "weiss, weiss-log, weiss-charge, lapicque or lapicque-log"}
	}
	slices.SortStableFunc(f.Points, func(a, b Point) int {
		switch {
		case a.Width < b.Width:
			return -1
		case a.Width > b.Width:
			return 1
		}
		return 0
	})
	widths := 0
	for i, p := range f.Points {
		if !(p.Width >= 1e-4 && p.Width <= 1e4) {
			return f, &exam.Invalid{Field: "pulse width", Value: number(p.Width), Allowed: "0.0001 to 10000 ms"}
		}
		if !(p.Current >= 1e-4 && p.Current <= 1e4) {
			return f, &exam.Invalid{Field: "current at " + number(p.Width) + " ms", Value: number(p.Current), Allowed: "0.0001 to 10000 mA"}
		}
		if i == 0 || p.Width != f.Points[i-1].Width {
			widths++
		}
	}
	if widths < 3 {
		return f, &exam.Invalid{Field: "strength–duration test", Value: number(float64(widths)) + " pulse widths", Allowed: "at least three different pulse widths"}
	}
	if widths < wantedWidths {
		f.Warnings = append(f.Warnings, fewWidths)
	}
	if f.Points[len(f.Points)-1].Width < wantedSpread*f.Points[0].Width {
		f.Warnings = append(f.Warnings, narrowWidths)
	}
	if law == WeissCharge && f.Points[len(f.Points)-1].Width > 50*f.Points[0].Width {
		f.Warnings = append(f.Warnings, wideCharge)
	}
	f.solve()
	f.findBad()
	for i := 1; i < len(f.Points); i++ {
		if a, b := f.Points[i-1], f.Points[i]; b.Width > a.Width && b.Current > 1.1*a.Current {
			f.Warnings = append(f.Warnings, "a longer pulse needed more current ("+number(b.Width)+" ms): repeat that point")
		}
	}
	if !f.Chargeable {
		f.Warnings = append(f.Warnings, notFalling)
	}
	return f, nil
}

// solve finds the least squares and the standard errors.
func (f *Fit) solve() {
	n := len(f.Points)
	var r, c float64
	if f.Law == Weiss || f.Law == WeissCharge {
		r, c = f.line()
	} else {
		r, c = f.profile()
	}
	f.Rheobase.Value, f.Chronaxie.Value = r, c
	f.Chargeable = r > 0 && c > 0 && !math.IsInf(c, 0)
	var tss, mean float64
	y := make([]float64, n)
	for i, p := range f.Points {
		y[i] = f.observed(p)
		mean += y[i] / float64(n)
	}
	var jrr, jrc, jcc float64
	f.RSS = 0
	f.Residuals = make([]float64, n)
	for i, p := range f.Points {
		fitted, dr, dc := f.model(p, r, c)
		e := y[i] - fitted
		f.RSS += e * e
		tss += (y[i] - mean) * (y[i] - mean)
		jrr += dr * dr
		jrc += dr * dc
		jcc += dc * dc
		f.Residuals[i] = p.Current - f.Law.Current(r, c, p.Width)
	}
	f.R2 = 1 - f.RSS/tss
	f.Rheobase.SE, f.Chronaxie.SE = math.NaN(), math.NaN()
	if det := jrr*jcc - jrc*jrc; n > 2 && det > 0 {
		s2 := f.RSS / float64(n-2)
		f.Rheobase.SE, f.Chronaxie.SE = math.Sqrt(s2*jcc/det), math.Sqrt(s2*jrr/det)
		f.Covariance = -s2 * jrc / det
	}
	t := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: float64(max(n-2, 1))}.Quantile(0.975)
	f.Rheobase = around(f.Rheobase, t)
	f.Chronaxie = around(f.Chronaxie, t)
}

// around sets the interval on the logarithmic scale, so that it stays positive; of a value that is
// not positive there is none.
func around(i Interval, t float64) Interval {
	i.Low, i.High = math.NaN(), math.NaN()
	if i.Value > 0 && !math.IsNaN(i.SE) {
		k := math.Exp(t * i.SE / i.Value)
		i.Low, i.High = i.Value/k, i.Value*k
	}
	return i
}

// observed is the quantity whose squares are least.
func (f *Fit) observed(p Point) float64 {
	switch f.Law {
	case WeissLog, LapicqueLog:
		return math.Log(p.Current)
	case WeissCharge:
		return p.Current * p.Width
	}
	return p.Current
}

// model returns the fitted quantity and its derivatives by rheobase and chronaxie.
func (f *Fit) model(p Point, r, c float64) (y, dr, dc float64) {
	h, dh := f.Law.shape(c, p.Width)
	switch f.Law {
	case WeissLog, LapicqueLog:
		return math.Log(r * h), 1 / r, dh / h
	case WeissCharge:
		return r * h * p.Width, h * p.Width, r * dh * p.Width
	}
	return r * h, h, r * dh
}

// line solves the two laws that are straight lines: current on 1/t, charge on t.
func (f *Fit) line() (r, c float64) {
	n := float64(len(f.Points))
	var mx, my float64
	x, y := make([]float64, len(f.Points)), make([]float64, len(f.Points))
	for i, p := range f.Points {
		x[i], y[i] = 1/p.Width, p.Current
		if f.Law == WeissCharge {
			x[i], y[i] = p.Width, p.Current*p.Width
		}
		mx += x[i] / n
		my += y[i] / n
	}
	var sxy, sxx float64
	for i := range x {
		sxy += (x[i] - mx) * (y[i] - my)
		sxx += (x[i] - mx) * (x[i] - mx)
	}
	slope := sxy / sxx
	intercept := my - slope*mx
	if f.Law == WeissCharge {
		return slope, intercept / slope
	}
	return intercept, slope / intercept
}

// profile solves the other laws: for a given chronaxie the best rheobase is known, so that the sum of
// squares depends on the chronaxie alone; its minimum is where its slope, which is exact here, crosses zero. All
// crossings on a fine grid from a thousandth of the shortest to a thousandfold of the longest width
// are found, and the lowest taken.
func (f *Fit) profile() (r, c float64) {
	lo := math.Log(f.Points[0].Width) - math.Log(1000)
	hi := math.Log(f.Points[len(f.Points)-1].Width) + math.Log(1000)
	const steps = 600
	best := math.Inf(1)
	at := func(k int) float64 { return lo + (hi-lo)*float64(k)/steps }
	take := func(lc float64) {
		if s, _ := f.slope(lc); s < best {
			best = s
			c = math.Exp(lc)
		}
	}
	take(lo)
	take(hi)
	_, last := f.slope(at(0))
	for k := 1; k <= steps; k++ {
		_, d := f.slope(at(k))
		if last < 0 && d >= 0 {
			a, b := at(k-1), at(k)
			for range 200 {
				m := (a + b) / 2
				if m <= a || m >= b {
					break
				}
				if _, d := f.slope(m); d < 0 {
					a = m
				} else {
					b = m
				}
			}
			take((a + b) / 2)
		}
		last = d
	}
	return f.bestRheobase(c), c
}

// bestRheobase is the least-squares rheobase for a given chronaxie.
func (f *Fit) bestRheobase(c float64) float64 {
	var num, den float64
	for _, p := range f.Points {
		h, _ := f.Law.shape(c, p.Width)
		if f.Law == WeissLog || f.Law == LapicqueLog {
			num += math.Log(p.Current / h)
			den++
		} else {
			num += p.Current * h
			den += h * h
		}
	}
	if f.Law == WeissLog || f.Law == LapicqueLog {
		return math.Exp(num / den)
	}
	return num / den
}

// slope returns the profile's sum of squares and its derivative by the logarithm of the chronaxie
// (with the best rheobase the derivative by the rheobase is zero, so that only the direct part is left).
func (f *Fit) slope(logC float64) (s, ds float64) {
	c := math.Exp(logC)
	r := f.bestRheobase(c)
	for _, p := range f.Points {
		y, _, dc := f.model(p, r, c)
		e := f.observed(p) - y
		s += e * e
		ds -= 2 * e * dc * c
	}
	return s, ds
}

// findBad names points that the others do not expect: left out in turn, a point is bad where it lies more
// than four standard deviations of the others' relative errors away (never less than 10 %, the scatter of
// a careful reading: both a choice). At least five points are needed to tell.
func (f *Fit) findBad() {
	if len(f.Points) < 5 {
		return
	}
	log := WeissLog
	if f.Law == Lapicque || f.Law == LapicqueLog {
		log = LapicqueLog
	}
	for i, p := range f.Points {
		rest := Fit{Law: log, Points: slices.Delete(slices.Clone(f.Points), i, i+1)}
		r, c := rest.profile()
		var ss float64
		for _, q := range rest.Points {
			e := math.Log(q.Current / log.Current(r, c, q.Width))
			ss += e * e
		}
		sd := math.Sqrt(ss / float64(max(len(rest.Points)-2, 1)))
		if e := math.Abs(math.Log(p.Current / log.Current(r, c, p.Width))); e > math.Max(4*sd, math.Log(1.1)) {
			f.Bad = append(f.Bad, i)
		}
	}
}

// Label is a cautious word for a chronaxie.
type Label uint8

// The labels. Below 1 ms nerves answer, above 10 ms muscle fibres alone do (SD-page; the upper border
// from memory of denervated human muscle). No dog or cat values were found.
const (
	Uncertain Label = iota
	NerveLike
	MuscleLike
)

// String returns the label's words.
func (l Label) String() string {
	return [...]string{"mixed or uncertain", "nerve-like", "muscle-like"}[l%3]
}

// Label returns a word only where the whole 95 % interval of the chronaxie allows it.
func (f Fit) Label() Label {
	switch c := f.Chronaxie; {
	case !f.Chargeable:
		return Uncertain
	case c.High < 1:
		return NerveLike
	case c.Low > 10:
		return MuscleLike
	}
	return Uncertain
}

// Change compares the chronaxie of an earlier test with a later one of the same muscle and law. The
// ratio is later over earlier with its 95 % interval; a change is claimed only where that interval
// leaves out 1. The last value is false where the two cannot be compared: other laws, or a fit without an interval.
func Change(earlier, later Fit) (ratio Interval, changed, ok bool) {
	a, b := earlier.Chronaxie, later.Chronaxie
	if earlier.Law != later.Law || !earlier.Chargeable || !later.Chargeable || math.IsNaN(a.Low) || math.IsNaN(b.Low) {
		return Interval{Value: math.NaN(), Low: math.NaN(), High: math.NaN(), SE: math.NaN()}, false, false
	}
	ratio.Value = b.Value / a.Value
	// half-widths on the logarithmic scale add as squares
	half := math.Hypot(math.Log(a.High/a.Value), math.Log(b.High/b.Value))
	ratio.Low, ratio.High = ratio.Value*math.Exp(-half), ratio.Value*math.Exp(half)
	ratio.SE = ratio.Value * math.Hypot(a.SE/a.Value, b.SE/b.Value)
	return ratio, ratio.Low > 1 || ratio.High < 1, true
}
