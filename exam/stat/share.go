package stat

import (
	"math"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/combin"
)

// Interval is a range with a stated confidence.
type Interval struct{ Low, High float64 }

// Wilson returns the 95 % score interval of a share of x in n (Wilson 1927); NaN for n < 1
// or x outside 0 to n.
func Wilson(x, n int) Interval {
	if n < 1 || x < 0 || x > n {
		return Interval{nan, nan}
	}
	p, nf := float64(x)/float64(n), float64(n)
	z2 := z95 * z95
	mid := (p + z2/(2*nf)) / (1 + z2/nf)
	half := z95 / (1 + z2/nf) * math.Sqrt(p*(1-p)/nf+z2/(4*nf*nf))
	i := Interval{mid - half, mid + half}
	if x == 0 {
		i.Low = 0
	}
	if x == n {
		i.High = 1
	}
	return i
}

// ClopperPearson returns the 95 % interval of a share that covers at least 95 % whatever
// the truth; NaN as Wilson.
func ClopperPearson(x, n int) Interval {
	if n < 1 || x < 0 || x > n {
		return Interval{nan, nan}
	}
	i := Interval{0, 1}
	if x > 0 {
		i.Low = betaQuantile(float64(x), float64(n-x+1), 0.025)
	}
	if x < n {
		i.High = betaQuantile(float64(x+1), float64(n-x), 0.975)
	}
	return i
}

// betaQuantile polishes gonum's inverse by Newton steps: its own stopping rule leaves ten digits.
func betaQuantile(a, b, p float64) float64 {
	x := mathext.InvRegIncBeta(a, b, p)
	for range 4 {
		density := math.Exp((a-1)*math.Log(x) + (b-1)*math.Log1p(-x) - mathext.Lbeta(a, b))
		next := x - (mathext.RegIncBeta(a, b, x)-p)/density
		if !(next > 0 && next < 1) {
			break
		}
		x = next
	}
	return x
}

// SignTest returns the probability of a split at least as uneven as better : worse if both
// were equally likely, two-sided and for «better». Items of one exam depend on each
// other, so it describes and does not prove. Both are 1 for 0 : 0, NaN for negative counts.
func SignTest(better, worse int) (twoSided, greater float64) {
	if better < 0 || worse < 0 || better+worse > 10000 {
		return nan, nan
	}
	n := better + worse
	tail := func(from int) float64 {
		sum := 0.0
		for k := n; k >= from; k-- {
			if n <= 60 { // whole numbers, exact
				sum += math.Ldexp(float64(combin.Binomial(n, k)), -n)
				continue
			}
			sum += math.Exp(combin.LogGeneralizedBinomial(float64(n), float64(k)) - float64(n)*math.Ln2)
		}
		return math.Min(1, sum)
	}
	return math.Min(1, 2*tail(max(better, worse))), tail(better)
}

// Symmetry compares left and right of one measure.
type Symmetry struct {
	Index   float64 // 200·(L − R)/(L + R) %, Robinson's form: 0 equal, ±200 all on one side
	Deficit float64 // 100·(1 − smaller/larger) %
	Ratio   float64 // L/R
}

// Compare returns the symmetry of two values; each form is NaN where its denominator is 0.
// The two percentages differ: never mix them on one chart.
func Compare(left, right float64) Symmetry {
	s := Symmetry{nan, nan, nan}
	if left+right != 0 {
		s.Index = 200 * (left - right) / (left + right)
	}
	if larger := math.Max(left, right); larger != 0 {
		s.Deficit = 100 * (1 - math.Min(left, right)/larger)
	}
	if right != 0 {
		s.Ratio = left / right
	}
	return s
}
