package stat

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"
)

// Slope is the Theil–Sen slope of y on x with its interval.
type Slope struct {
	Slope          float64
	Intercept      float64 // median(y) − slope × median(x)
	InterceptJoint float64 // median(y − slope × x)
	Low, High      float64 // the exact interval where there is one, else the normal one
	Exact          bool
	Coverage       float64 // of the exact interval, for untied y; NaN where there is none
	LowNormal      float64
	HighNormal     float64
	LowRank        int // of the exact limits among the sorted slopes, from 1; 0 where there are none
	HighRank       int
	Pairs          int // pairs of different x
}

// TheilSen returns the median of the slopes of all pairs with different x, with an interval
// of the given confidence (0.95, say): exact by Hollander and Wolfe's rule where the x are all
// different and there are few enough points, else by the normal approximation (Sen 1968).
// Low and High are infinite where so few points allow no such interval. Everything is NaN
// for fewer than two different x, unequal lengths or NaN values.
func TheilSen(x, y []float64, confidence float64) Slope {
	s := Slope{nan, nan, nan, nan, nan, false, nan, nan, nan, 0, 0, 0}
	if len(x) != len(y) || anyNaN(x, y) || !(confidence > 0 && confidence < 1) {
		return s
	}
	var slopes []float64
	distinct := true
	for i := range x {
		for j := range x {
			if x[j] > x[i] {
				slopes = append(slopes, (y[j]-y[i])/(x[j]-x[i]))
			} else if i != j && x[i] == x[j] {
				distinct = false
			}
		}
	}
	if len(slopes) == 0 {
		return s
	}
	slices.Sort(slopes)
	s.Pairs = len(slopes)
	s.Slope = median(slopes)
	s.Intercept = Median(y) - s.Slope*Median(x)
	rest := make([]float64, len(y))
	for i := range y {
		rest[i] = y[i] - s.Slope*x[i]
	}
	s.InterceptJoint = Median(rest)

	n := float64(len(y))
	v := n * (n - 1) * (2*n + 5)
	for _, sizes := range [][]int{tieSizes(x), tieSizes(y)} {
		for _, k := range sizes {
			k := float64(k)
			v -= k * (k - 1) * (2*k + 5)
		}
	}
	z := -distuv.UnitNormal.Quantile((1 - confidence) / 2)
	half := z * math.Sqrt(math.Max(0, v/18))
	nt := float64(len(slopes))
	upper := min(int(math.RoundToEven((nt+half)/2)), len(slopes)-1)
	lower := max(int(math.RoundToEven((nt-half)/2))-1, 0)
	s.LowNormal, s.HighNormal = slopes[lower], slopes[upper]
	s.Low, s.High = s.LowNormal, s.HighNormal
	if !distinct || len(x) > ExactVisits {
		return s
	}
	// The smallest C such that |S| ≥ C happens with probability at most 1 − confidence; the
	// limits are the slopes of rank (pairs − C)/2 + 1 from either end counted as below.
	null := NewNull(ones(len(x)))
	for m := (len(slopes)); m >= 1; m-- {
		c := len(slopes) - 2*m + 2 // |S| from c on lies outside when the limits have rank m
		if c < 1 {
			continue
		}
		if out := null.TwoSided(c); out <= 1-confidence+1e-12 {
			s.LowRank, s.HighRank = m, len(slopes)-m+1
			s.Low, s.High = slopes[m-1], slopes[len(slopes)-m]
			s.Coverage, s.Exact = 1-out, true
			return s
		}
	}
	s.Low, s.High = math.Inf(-1), math.Inf(1)
	return s
}

func ones(n int) []int {
	o := make([]int, n)
	for i := range o {
		o[i] = 1
	}
	return o
}

// Median returns the middle value, the mean of the two middle values for an even count,
// and NaN for no values.
func Median(x []float64) float64 {
	s := slices.Clone(x)
	slices.Sort(s)
	return median(s)
}

func median(sorted []float64) float64 {
	n := len(sorted)
	if n == 0 {
		return nan
	}
	if n%2 == 1 {
		return sorted[n/2]
	}
	return (sorted[n/2-1] + sorted[n/2]) / 2
}
