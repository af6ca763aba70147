package stat

import (
	"math"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// Line is a straight line through points by least squares, with what its readings scatter about it.
type Line struct {
	Intercept, Slope float64
	SD               float64 // of one reading about the line, n − 2 degrees of freedom
	n                int
	meanX, sxx       float64
}

// FitLine fits a straight line. It reports false for fewer than three points, all at one x, of unequal
// lengths or NaN.
func FitLine(x, y []float64) (Line, bool) {
	if len(x) != len(y) || len(x) < 3 || anyNaN(x, y) {
		return Line{}, false
	}
	l := Line{n: len(x), meanX: stat.Mean(x, nil)}
	for _, v := range x {
		l.sxx += float64((v - l.meanX) * (v - l.meanX))
	}
	if !(l.sxx > 0) {
		return Line{}, false
	}
	l.Intercept, l.Slope = stat.LinearRegression(x, y, nil, false)
	rest := make([]float64, len(y))
	for i := range y {
		rest[i] = y[i] - l.Intercept - float64(l.Slope*x[i])
	}
	l.SD = floats.Norm(rest, 2) / math.Sqrt(float64(l.n-2))
	return l, true
}

// Ahead returns the predictive distribution of one more reading at x: Student's t with n − 2 degrees
// of freedom about the line (R's predict.lm with interval = "prediction"). sd is the standard
// deviation of a reading; Line.SD where nothing better is known.
func (l Line) Ahead(x, sd float64) distuv.StudentsT {
	d := x - l.meanX
	return distuv.StudentsT{Mu: l.Intercept + float64(l.Slope*x), Sigma: sd * math.Sqrt(1+1/float64(l.n)+float64(d*d)/l.sxx), Nu: float64(l.n - 2)}
}
