package stat

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
	"gonum.org/v1/gonum/mat"
	gstat "gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// Cusum is a two-sided tabular CUSUM.
type Cusum struct {
	Upper, Lower []float64
	Signal       int // index of the first value beyond h, or −1
}

// CUSUM sums what lies beyond target ± k; a sum above h signals. Charts of this kind need
// about ten values to catch a shift of one standard deviation, so they suit daily home
// measures and long-term patients, after a stable baseline of five values.
func CUSUM(x []float64, target, k, h float64) Cusum {
	c := Cusum{make([]float64, len(x)), make([]float64, len(x)), -1}
	up, down := 0.0, 0.0
	for i, v := range x {
		up = math.Max(0, up+v-target-k)
		down = math.Max(0, down-v+target-k)
		c.Upper[i], c.Lower[i] = up, down
		if c.Signal < 0 && (up > h || down > h) {
			c.Signal = i
		}
	}
	return c
}

// Smoothed is an exponentially weighted moving average with its limits.
type Smoothed struct {
	Value     []float64 // Value[0] is the start; Value[i+1] follows x[i]
	HalfWidth []float64 // of the limits around the start, for each x
	Limit     float64   // the half width they approach
}

// EWMA returns the moving average z = λx + (1−λ)z from a start, with limits of L standard
// deviations around the start.
func EWMA(x []float64, lambda, start, sigma, l float64) Smoothed {
	s := Smoothed{Value: []float64{start}, Limit: l * sigma * math.Sqrt(lambda/(2-lambda))}
	z := start
	for i, v := range x {
		z = lambda*v + (1-lambda)*z
		s.Value = append(s.Value, z)
		s.HalfWidth = append(s.HalfWidth, s.Limit*math.Sqrt(1-math.Pow(1-lambda, 2*float64(i+1))))
	}
	return s
}

// Individuals is a chart of single values with limits from the moving range.
type Individuals struct {
	Mean, MovingRange float64
	Sigma             float64 // MovingRange / 1.128
	Low, High         float64 // Mean ± 2.66 MovingRange
}

// IndividualsChart returns the limits of single values, NaN for fewer than two.
func IndividualsChart(x []float64) Individuals {
	if len(x) < 2 {
		return Individuals{nan, nan, nan, nan, nan}
	}
	sum := 0.0
	for i := 1; i < len(x); i++ {
		sum += math.Abs(x[i] - x[i-1])
	}
	c := Individuals{Mean: gstat.Mean(x, nil), MovingRange: sum / float64(len(x)-1)}
	c.Sigma = c.MovingRange / 1.128
	c.Low, c.High = c.Mean-2.66*c.MovingRange, c.Mean+2.66*c.MovingRange
	return c
}

// CusumRunLength returns after how many values a CUSUM with k and h in standard deviations
// signals on average when the mean has moved by shift, starting at zero; one-sided (upper)
// or two-sided. The integral equation (Page 1954) is solved on Gauss–Legendre points.
func CusumRunLength(k, h, shift float64, twoSided bool) float64 {
	one := func(shift float64) float64 {
		if !(h > 0) || !(k >= 0) {
			return nan
		}
		const n = 60
		x, w := make([]float64, n), make([]float64, n)
		quad.Legendre{}.FixedLocations(x, w, 0, h)
		// L(z) = 1 + L(0)Φ(k−z−μ) + ∫₀ʰ L(u)φ(u+k−z−μ)du, unknowns L(0), L(x₁)…
		a, b := mat.NewDense(n+1, n+1, nil), mat.NewVecDense(n+1, nil)
		z := append([]float64{0}, x...)
		for i := range z {
			a.Set(i, i, 1)
			a.Set(i, 0, a.At(i, 0)-distuv.UnitNormal.CDF(k-z[i]-shift))
			for j := range x {
				a.Set(i, j+1, a.At(i, j+1)-w[j]*distuv.UnitNormal.Prob(x[j]+k-z[i]-shift))
			}
			b.SetVec(i, 1)
		}
		return solveFirst(a, b)
	}
	if !twoSided {
		return one(shift)
	}
	return 1 / (1/one(shift) + 1/one(-shift)) // Kemp 1962
}

// EwmaRunLength is the run length of an EWMA with steady limits ± l (in its own standard
// deviations) when the mean has moved by shift, starting at the target.
func EwmaRunLength(lambda, l, shift float64) float64 {
	if !(lambda > 0 && lambda <= 1) || !(l > 0) {
		return nan
	}
	const n = 60
	c := l * math.Sqrt(lambda/(2-lambda))
	x, w := make([]float64, n), make([]float64, n)
	quad.Legendre{}.FixedLocations(x, w, -c, c)
	z := append([]float64{0}, x...)
	a, b := mat.NewDense(n+1, n+1, nil), mat.NewVecDense(n+1, nil)
	for i := range z {
		a.Set(i, i, 1)
		for j := range x {
			f := distuv.UnitNormal.Prob((x[j]-(1-lambda)*z[i])/lambda-shift) / lambda
			a.Set(i, j+1, a.At(i, j+1)-w[j]*f)
		}
		b.SetVec(i, 1)
	}
	return solveFirst(a, b)
}

func solveFirst(a mat.Matrix, b mat.Vector) float64 {
	var v mat.VecDense
	if err := v.SolveVec(a, b); err != nil {
		return nan
	}
	return v.AtVec(0)
}
