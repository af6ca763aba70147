package localise

import (
	"math"
	"math/bits"
)

// The engine must give the same bits on every machine. Its own exponential and logarithm
// are polynomials with a fixed order of operations; every product that is added to
// something passes through an explicit float64 conversion, which forbids fused
// multiply–add (Go specification, floating-point operators); and everything that is
// summed over hypotheses is summed as whole numbers, so that order does not matter.

const (
	ln2     = 0.693147180559945309417232121458176568
	ln2High = 6.93147180369123816490e-01 // upper 33 bits of ln 2, so that k × ln2High is exact
	ln2Low  = 1.90821492927058770002e-10
	log2E   = 1.44269504088896340735992468100189214

	// logScale is the unit of stored log-likelihoods: 2⁻⁴⁴ nat. The sum of about a hundred
	// of them, each under a thousand nats, fits into 63 bits.
	logScale = 1 << 44
	// weightBits is the unit of unnormalised posterior weights: the best hypothesis weighs
	// 2⁴⁶, and up to 2¹⁷ hypotheses can be added in 64 bits.
	weightBits = 46
)

var expFactorials = func() (f [14]float64) {
	f[0] = 1
	for i := 1; i < len(f); i++ {
		f[i] = float64(f[i-1] / float64(i))
	}
	return f
}()

// exp returns eˣ, with the same bits everywhere. Relative error below 1e-15.
func exp(x float64) float64 {
	switch {
	case x > 700:
		x = 700
	case x < -700:
		return 0
	}
	k := math.Floor(float64(x*log2E) + 0.5)
	r := float64(x-float64(k*ln2High)) - float64(k*ln2Low)
	s := expFactorials[13]
	for i := 12; i >= 0; i-- {
		s = float64(s*r) + expFactorials[i]
	}
	return math.Ldexp(s, int(k))
}

// logOf returns the natural logarithm of x > 0, with the same bits everywhere; for x ≤ 0
// it returns -700, which is as good as impossible.
func logOf(x float64) float64 {
	if x <= 0 {
		return -700
	}
	b := math.Float64bits(x)
	e := int(b>>52) - 1022
	m := math.Float64frombits(b&(1<<52-1) | 1022<<52)
	if e == -1022 || e > 1024 { // below the normal numbers, or none at all
		m, e = math.Frexp(x)
	}
	if m < math.Sqrt2/2 {
		m += m
		e--
	}
	s := (m - 1) / (m + 1)
	z := float64(s * s)
	t := 1.0 / 21
	t = float64(t*z) + 1.0/19
	t = float64(t*z) + 1.0/17
	t = float64(t*z) + 1.0/15
	t = float64(t*z) + 1.0/13
	t = float64(t*z) + 1.0/11
	t = float64(t*z) + 1.0/9
	t = float64(t*z) + 1.0/7
	t = float64(t*z) + 1.0/5
	t = float64(t*z) + 1.0/3
	t = float64(t*z) + 1
	k := float64(e)
	return float64(k*ln2High) + (float64(2*float64(s*t)) + float64(k*ln2Low))
}

// toLog turns nats into stored units.
func toLog(nats float64) int64 { return int64(math.Round(float64(nats * logScale))) }

// fromLog turns stored units into nats.
func fromLog(l int64) float64 { return float64(float64(l) / logScale) }

// logistic returns 1/(1+e⁻ˣ).
func logistic(x float64) float64 {
	if x >= 0 {
		return 1 / (1 + exp(-x))
	}
	e := exp(x)
	return e / (1 + e)
}

// pow2 holds 2^(-i/256) as 0.64 fixed point; entry 0 would be 1 and is handled apart.
var pow2 = func() (t [256]uint64) {
	for i := 1; i < 256; i++ {
		// exp gives 53 bits; that is enough for weights of 46.
		t[i] = uint64(math.Ldexp(exp(-ln2*float64(i)/256), 63)) << 1
	}
	t[0] = math.MaxUint64
	return t
}()

// weight returns 2^weightBits × e^(d) for a stored log difference d ≤ 0, by whole numbers only.
func weight(d int64) uint64 {
	const cut = 32 * logScale // e⁻³² is below the unit
	t := uint64(-d)
	if t >= cut {
		return 0
	}
	// y = t × log2(e) in units of 2⁻⁴⁴, then split: whole powers of two, 1/256 steps, rest.
	const log2EFixed = 0xB8AA3B295C17F0BC // log2(e)/2 as 0.64 fixed point
	hi, lo := bits.Mul64(t, log2EFixed)
	// hi:lo is t×log2(e)/2 × 2⁶⁴ in units of 2⁻⁴⁴; ×2 puts the point right.
	y := hi<<1 | lo>>63
	fine := lo << 1 // the next 64 bits of y, below 2⁻⁴⁴
	n := uint(y >> 44)
	step := y >> 36 & 0xFF
	rest := (y&(1<<36-1))<<28 | fine>>36 // 0.64 fixed point of the remainder × 256
	// a = rest × ln2 / 256, as 0.64 fixed point
	const ln2Fixed = 0xB17217F7D1CF79AB // ln 2 as 0.64 fixed point
	a, _ := bits.Mul64(rest, ln2Fixed)
	a >>= 8
	a2, _ := bits.Mul64(a, a)
	a3, _ := bits.Mul64(a2, a)
	a4, _ := bits.Mul64(a3, a)
	q := math.MaxUint64 - a + a2/2 - a3/6 + a4/24
	p, _ := bits.Mul64(pow2[step], q)
	return p >> (64 - weightBits + n)
}
