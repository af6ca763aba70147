package stat

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/mat"
)

// Generator is the rate matrix of a Markov chain in continuous time: off the diagonal the
// rates per day, each row adding up to 0.
type Generator struct{ q *mat.Dense }

// NewGenerator checks that rows add up to zero and rates are not negative.
func NewGenerator(rows [][]float64) (Generator, error) {
	n := len(rows)
	if n == 0 {
		return Generator{}, fmt.Errorf("a generator needs at least one state")
	}
	q := mat.NewDense(n, n, nil)
	for i, row := range rows {
		if len(row) != n {
			return Generator{}, fmt.Errorf("row %d of the generator has %d entries, want %d", i, len(row), n)
		}
		sum, scale := 0.0, 0.0
		for j, r := range row {
			if math.IsNaN(r) || math.IsInf(r, 0) || (i != j && r < 0) {
				return Generator{}, fmt.Errorf("rate %v from state %d to %d must be finite and at least 0", r, i, j)
			}
			sum += r
			scale = math.Max(scale, math.Abs(r))
			q.Set(i, j, r)
		}
		if math.Abs(sum) > 1e-9*math.Max(1, scale) {
			return Generator{}, fmt.Errorf("row %d of the generator adds up to %g, want 0", i, sum)
		}
	}
	return Generator{q}, nil
}

// States returns the number of states.
func (g Generator) States() int { n, _ := g.q.Dims(); return n }

// After returns the transition probabilities over some days, exp(Q·days); the unit matrix
// for days ≤ 0. Rounding below zero is cut off and rows are scaled to 1.
func (g Generator) After(days float64) *mat.Dense {
	n := g.States()
	p := mat.NewDense(n, n, nil)
	if !(days > 0) {
		for i := range n {
			p.Set(i, i, 1)
		}
		return p
	}
	var scaled mat.Dense
	scaled.Scale(days, g.q)
	p.Exp(&scaled)
	for i := range n {
		row := p.RawRowView(i)
		for j := range row {
			row[j] = math.Max(0, row[j])
		}
		floats.Scale(1/floats.Sum(row), row)
	}
	return p
}

// Smoothing is the answer of the forward–backward pass. States are counted from 0.
type Smoothing struct {
	Predicted, Filtered, Smoothed [][]float64 // for each visit: before it, with it, with all visits
	Scaling                       []float64   // P(reading | earlier readings)
	LogLikelihood                 float64
}

// Chain is a hidden Markov chain: where it starts and how it moves from each visit to the next.
type Chain struct {
	Initial     []float64
	Transitions []*mat.Dense // Transitions[i]: from visit i to visit i+1
}

// Smooth runs forward–backward with scaling. likelihood[i][s] is P(what was read at visit i |
// state s): a column of the error matrix, the sum of columns for a reading that is an interval,
// all ones where the item was not tested. The error says which input does not fit.
func (c Chain) Smooth(likelihood [][]float64) (Smoothing, error) {
	n, k := len(likelihood), len(c.Initial)
	if n == 0 {
		return Smoothing{}, nil
	}
	if len(c.Transitions) != n-1 {
		return Smoothing{}, fmt.Errorf("%d visits need %d transitions, got %d", n, n-1, len(c.Transitions))
	}
	var s Smoothing
	prior := append([]float64(nil), c.Initial...)
	for i, l := range likelihood {
		if len(l) != k {
			return Smoothing{}, fmt.Errorf("visit %d has likelihoods of %d states, want %d", i, len(l), k)
		}
		if i > 0 {
			if r, cols := c.Transitions[i-1].Dims(); r != k || cols != k {
				return Smoothing{}, fmt.Errorf("transition %d is %d×%d, want %d×%d", i-1, r, cols, k, k)
			}
			next := mat.NewVecDense(k, nil)
			next.MulVec(c.Transitions[i-1].T(), mat.NewVecDense(k, s.Filtered[i-1]))
			prior = next.RawVector().Data
		}
		f := make([]float64, k)
		floats.MulTo(f, prior, l)
		scale := floats.Sum(f)
		if !(scale > 0) || math.IsInf(scale, 0) {
			return Smoothing{}, fmt.Errorf("the reading of visit %d is impossible in every state", i)
		}
		floats.Scale(1/scale, f)
		s.Predicted, s.Filtered = append(s.Predicted, prior), append(s.Filtered, f)
		s.Scaling = append(s.Scaling, scale)
		s.LogLikelihood += math.Log(scale)
	}
	s.Smoothed = make([][]float64, n)
	beta := make([]float64, k)
	for j := range beta {
		beta[j] = 1
	}
	for i := n - 1; i >= 0; i-- {
		if i < n-1 {
			t := make([]float64, k)
			floats.MulTo(t, beta, likelihood[i+1])
			back := mat.NewVecDense(k, nil)
			back.MulVec(c.Transitions[i], mat.NewVecDense(k, t))
			beta = back.RawVector().Data
			floats.Scale(1/s.Scaling[i+1], beta)
		}
		s.Smoothed[i] = make([]float64, k)
		floats.MulTo(s.Smoothed[i], s.Filtered[i], beta)
		floats.Scale(1/floats.Sum(s.Smoothed[i]), s.Smoothed[i])
	}
	return s, nil
}

// Viterbi returns the single most likely path of states with its log probability (joint with
// the readings), or nil where no path is possible.
func (c Chain) Viterbi(likelihood [][]float64) (path []int, logProbability float64) {
	n, k := len(likelihood), len(c.Initial)
	if n == 0 || len(c.Transitions) != n-1 {
		return nil, math.Inf(-1)
	}
	best := make([]float64, k)
	for s := range best {
		best[s] = math.Log(c.Initial[s]) + math.Log(likelihood[0][s])
	}
	from := make([][]int, n)
	for i := 1; i < n; i++ {
		next := make([]float64, k)
		from[i] = make([]int, k)
		for s := range next {
			next[s] = math.Inf(-1)
			for r := range best {
				if v := best[r] + math.Log(c.Transitions[i-1].At(r, s)); v > next[s] {
					next[s], from[i][s] = v, r
				}
			}
			next[s] += math.Log(likelihood[i][s])
		}
		best = next
	}
	last := floats.MaxIdx(best)
	if math.IsInf(best[last], -1) {
		return nil, math.Inf(-1)
	}
	path = make([]int, n)
	path[n-1] = last
	for i := n - 1; i > 0; i-- {
		path[i-1] = from[i][path[i]]
	}
	return path, best[last]
}
