package stat

import (
	"math"

	"gonum.org/v1/gonum/mathext"
)

// RunLengths holds P(run length = r | values so far): Rows[i][r] after i values. A change
// follows each value with the stated probability, so length 0 says that a new run begins
// with the next value (Adams and MacKay 2007).
type RunLengths struct{ Rows [][]float64 }

// NormalPrior is the normal–inverse-gamma prior of a run's mean and variance.
type NormalPrior struct{ Mu, Kappa, Alpha, Beta float64 }

// ChangePointNormal runs the change-point recursion on measured values. hazard is the
// probability of a change after each value, between 0 and 1 exclusive.
func ChangePointNormal(x []float64, hazard float64, prior NormalPrior) RunLengths {
	runs := []NormalPrior{prior}
	return recursion(len(x), hazard, func(i int) []float64 {
		v := x[i]
		out := make([]float64, len(runs))
		next := make([]NormalPrior, len(runs)+1)
		next[0] = prior
		for r, p := range runs {
			scale2 := p.Beta * (p.Kappa + 1) / (p.Alpha * p.Kappa)
			out[r] = logStudent(v, p.Mu, scale2, 2*p.Alpha)
			d := v - p.Mu
			next[r+1] = NormalPrior{
				Mu:    (p.Kappa*p.Mu + v) / (p.Kappa + 1),
				Kappa: p.Kappa + 1,
				Alpha: p.Alpha + 0.5,
				Beta:  p.Beta + p.Kappa*d*d/(2*(p.Kappa+1)),
			}
		}
		runs = next
		return out
	})
}

func logStudent(x, mu, scale2, df float64) float64 {
	d := x - mu
	return -mathext.Lbeta(df/2, 0.5) - 0.5*math.Log(df*scale2) - (df+1)/2*math.Log1p(d*d/(df*scale2))
}

// ChangePointGrades runs the recursion on grades 0 … len(alpha)−1 with a Dirichlet prior.
// A grade off the scale counts as not tested: it tells nothing.
func ChangePointGrades(y []int, hazard float64, alpha []float64) RunLengths {
	total := 0.0
	for _, a := range alpha {
		total += a
	}
	runs := [][]float64{make([]float64, len(alpha))}
	return recursion(len(y), hazard, func(i int) []float64 {
		g := y[i]
		out := make([]float64, len(runs))
		next := make([][]float64, len(runs)+1)
		next[0] = make([]float64, len(alpha))
		for r, counts := range runs {
			n := 0.0
			for _, c := range counts {
				n += c
			}
			next[r+1] = append([]float64(nil), counts...)
			if g >= 0 && g < len(alpha) {
				out[r] = math.Log((counts[g] + alpha[g]) / (n + total))
				next[r+1][g]++
			}
		}
		runs = next
		return out
	})
}

// recursion grows the run lengths; predict returns the log predictive of each run for
// value i and takes the value in.
func recursion(n int, hazard float64, predict func(i int) []float64) RunLengths {
	rows := [][]float64{{1}}
	if !(hazard > 0 && hazard < 1) {
		return RunLengths{rows}
	}
	logs := []float64{0}
	stay, change := math.Log1p(-hazard), math.Log(hazard)
	for i := range n {
		p := predict(i)
		next := make([]float64, len(logs)+1)
		for r := range logs {
			next[r+1] = logs[r] + p[r] + stay
			p[r] += logs[r]
		}
		next[0] = LogSumExp(p) + change
		all := LogSumExp(next)
		row := make([]float64, len(next))
		for r := range next {
			next[r] -= all
			row[r] = math.Exp(next[r])
		}
		rows = append(rows, row)
		logs = next
	}
	return RunLengths{rows}
}
