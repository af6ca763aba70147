package stat

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// The data set cars of R (Ezekiel 1930) and what predict(lm(dist ~ speed), interval = "prediction") says of
// it, as R's documentation and textbooks print it.
func TestLineAgainstR(t *testing.T) {
	speed := []float64{4, 4, 7, 7, 8, 9, 10, 10, 10, 11, 11, 12, 12, 12, 12, 13, 13, 13, 13, 14, 14, 14, 14, 15, 15, 15, 16, 16, 17, 17, 17, 18, 18, 18, 18, 19, 19, 19, 20, 20, 20, 20, 20, 22, 23, 24, 24, 24, 24, 25}
	dist := []float64{2, 10, 4, 22, 16, 10, 18, 26, 34, 17, 28, 14, 20, 24, 28, 26, 34, 34, 46, 26, 36, 60, 80, 20, 26, 54, 32, 40, 32, 40, 50, 42, 56, 76, 84, 36, 46, 68, 32, 48, 52, 56, 64, 66, 54, 70, 92, 93, 120, 85}
	l, ok := FitLine(speed, dist)
	require.True(t, ok)
	require.InDelta(t, -17.5791, l.Intercept, 5e-5)
	require.InDelta(t, 3.9324, l.Slope, 5e-5)
	require.InDelta(t, 15.38, l.SD, 5e-3)
	for _, want := range [][4]float64{{12, 29.60981, -1.749529, 60.96915}, {19, 57.13667, 25.761756, 88.51159}, {24, 76.79872, 44.752478, 108.84495}} {
		d := l.Ahead(want[0], l.SD)
		require.InDelta(t, want[1], d.Mu, 5e-6)
		require.InDelta(t, want[2], d.Quantile(0.025), 5e-5)
		require.InDelta(t, want[3], d.Quantile(0.975), 5e-5)
	}
}

func TestLineOfTooLittle(t *testing.T) {
	for _, xy := range [][2][]float64{{{1, 2}, {1, 2}}, {{1, 1, 1}, {1, 2, 3}}, {{1, 2, 3}, {1, 2}}, {{1, 2, math.NaN()}, {1, 2, 3}}} {
		_, ok := FitLine(xy[0], xy[1])
		require.False(t, ok)
	}
}

// On straight lines with noise the 90 % interval of the next reading holds 90 % of them.
func TestLineCovers(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 1))
	const n = 20000
	for _, points := range []int{4, 7} {
		in := 0
		for range n {
			x, y := make([]float64, points), make([]float64, points)
			for i := range x {
				x[i] = float64(i) + 0.3*r.Float64()
				y[i] = 3 + 0.7*x[i] + 1.5*r.NormFloat64()
			}
			l, _ := FitLine(x, y)
			at := float64(points) + 1
			d := l.Ahead(at, l.SD)
			next := 3 + 0.7*at + 1.5*r.NormFloat64()
			if next >= d.Quantile(0.05) && next <= d.Quantile(0.95) {
				in++
			}
		}
		require.InDelta(t, 0.9, float64(in)/n, 0.009, "%d points; four standard errors", points)
	}
}
