// Package stat holds the plain statistics that stand beside the model of a course:
// trend tests, slopes with intervals, agreement between examiners, change against
// measurement noise, control charts, change points, hidden Markov chains, and the
// time until something happens in a group of animals.
//
// Everything here can be checked by hand or against another library; the tests do so
// with reference values computed by R, SciPy and others. Where a value is undefined
// (a correlation with a constant, a share of nothing) the answer is NaN and never a
// plausible number; no function panics on what it is given.
//
// Weekly exams of one animal depend on each other, which makes every trend p-value
// too small: show it as the strength of a pattern, not as proof.
package stat

import "math"

// z95 is the two-sided 95 % point of the normal distribution.
const z95 = 1.959963984540054

// z90 is the two-sided 90 % point of the normal distribution.
const z90 = 1.6448536269514722

// nan is the answer where a value is undefined.
var nan = math.NaN()

func sign(x float64) int {
	switch {
	case x > 0:
		return 1
	case x < 0:
		return -1
	}
	return 0
}

func anyNaN(xs ...[]float64) bool {
	for _, x := range xs {
		for _, v := range x {
			if math.IsNaN(v) {
				return true
			}
		}
	}
	return false
}
