package stat

import (
	"math"

	"gonum.org/v1/gonum/floats"
)

// LogSumExp returns ln Σ exp(x) without overflow: −Inf for no values, NaN where any value
// is NaN, +Inf where any is +Inf. gonum's function panics on no values and loses a NaN
// beside −Inf, hence the guards.
func LogSumExp(x []float64) float64 {
	if len(x) == 0 {
		return math.Inf(-1)
	}
	if anyNaN(x) {
		return nan
	}
	m := floats.Max(x)
	if math.IsInf(m, 0) {
		return m
	}
	return floats.LogSumExp(x)
}
