package stat

import (
	"math"

	gstat "gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// Weights turns two categories (from 0) into how far they disagree, 0 for agreement.
type Weights func(i, j int) float64

// Unweighted counts every disagreement alike (Cohen 1960).
func Unweighted(i, j int) float64 {
	if i == j {
		return 0
	}
	return 1
}

// Linear counts a disagreement by the steps between the grades.
func Linear(i, j int) float64 { return math.Abs(float64(i - j)) }

// Quadratic counts a disagreement by the square of the steps (Fleiss and Cohen 1973).
func Quadratic(i, j int) float64 { return float64((i - j) * (i - j)) }

// Agreement is a kappa with its uncertainty.
type Agreement struct {
	Kappa     float64
	SE        float64 // asymptotic standard error
	SEZero    float64 // the same under kappa = 0
	Z         float64 // kappa / SEZero
	Low, High float64 // 95 % limits, kappa ± 1.96 SE
	N         float64 // pairs of readings
	Exact     float64 // share of pairs that agree exactly
}

// Kappa returns Cohen's weighted kappa of a square table of counts: rows are one reading's
// grades, columns the other's. It is NaN where all readings fall in one cell, the table is
// empty or not square, or a count is negative. Standard errors are those of Fleiss, Cohen
// and Everitt 1969.
func Kappa(table [][]float64, w Weights) Agreement {
	bad := Agreement{nan, nan, nan, nan, nan, nan, 0, nan}
	k := len(table)
	n := 0.0
	for _, row := range table {
		if len(row) != k {
			return bad
		}
		for _, c := range row {
			if !(c >= 0) {
				return bad
			}
			n += c
		}
	}
	if n == 0 {
		return bad
	}
	rows, cols := make([]float64, k), make([]float64, k)
	a := bad
	a.N, a.Exact = n, 0
	for i := range table {
		a.Exact += table[i][i] / n
		for j := range table {
			rows[i] += table[i][j] / n
			cols[j] += table[i][j] / n
		}
	}
	observed, expected := 0.0, 0.0
	for i := range table {
		for j := range table {
			observed += w(i, j) * table[i][j] / n
			expected += w(i, j) * rows[i] * cols[j]
		}
	}
	if expected == 0 {
		return a
	}
	a.Kappa = 1 - observed/expected

	// Mean disagreement of a row grade against the columns' readings, and of a column grade.
	rowMean, colMean := make([]float64, k), make([]float64, k)
	for i := range table {
		for j := range table {
			rowMean[i] += w(i, j) * cols[j]
			colMean[j] += w(i, j) * rows[i]
		}
	}
	// In disagreement weights v = 1 − w the published formula becomes the one below.
	sum, sumZero := 0.0, 0.0
	for i := range table {
		for j := range table {
			m := rowMean[i] + colMean[j]
			d := expected*w(i, j) - observed*m
			sum += table[i][j] / n * d * d
			z := w(i, j) - m
			sumZero += rows[i] * cols[j] * z * z
		}
	}
	e2 := expected * expected
	theta := observed * expected
	a.SE = math.Sqrt(math.Max(0, (sum-theta*theta)/(n*e2*e2)))
	a.SEZero = math.Sqrt(math.Max(0, (sumZero-e2)/(n*e2)))
	a.Z = a.Kappa / a.SEZero
	a.Low, a.High = a.Kappa-z95*a.SE, a.Kappa+z95*a.SE
	return a
}

// Coefficient is one intraclass correlation with its test and limits.
type Coefficient struct {
	Form      string // "ICC(1,1)" … "ICC(3,k)"
	Value     float64
	F         float64
	DF1, DF2  float64
	P         float64
	Low, High float64 // 95 % limits
}

// Reliability is what a table of animals × examiners says about the noise of a measure.
type Reliability struct {
	MSB, MSJ, MSE, MSW float64 // mean squares: animals, examiners, rest, within animals
	Forms              [6]Coefficient
	SEMAgreement       float64 // standard error of measurement, changing examiners
	SEMConsistency     float64 // the same examiner
	MDC95Agreement     float64
	MDC95Consistency   float64
}

// ICC returns the six intraclass correlations of Shrout and Fleiss 1979 for a table with
// animals in rows and examiners (or repeats) in columns, without gaps. ok is false for
// fewer than two rows or columns, ragged rows or NaN. Serial exams by changing examiners
// need ICC(2,1), the second form.
func ICC(table [][]float64) (r Reliability, ok bool) {
	n := len(table)
	if n < 2 || len(table[0]) < 2 {
		return r, false
	}
	k := len(table[0])
	grand := 0.0
	cols := make([]float64, k)
	rows := make([]float64, n)
	for i, row := range table {
		if len(row) != k || anyNaN(row) {
			return r, false
		}
		rows[i] = gstat.Mean(row, nil)
		grand += rows[i] / float64(n)
		for j, x := range row {
			cols[j] += x / float64(n)
		}
	}
	ssb, ssj, sse, ssw := 0.0, 0.0, 0.0, 0.0
	for i, row := range table {
		ssb += float64(k) * (rows[i] - grand) * (rows[i] - grand)
		for j, x := range row {
			d := x - rows[i] - cols[j] + grand
			sse += d * d
			ssw += (x - rows[i]) * (x - rows[i])
		}
	}
	for j := range cols {
		ssj += float64(n) * (cols[j] - grand) * (cols[j] - grand)
	}
	nf, kf := float64(n), float64(k)
	r.MSB, r.MSJ = ssb/(nf-1), ssj/(kf-1)
	r.MSE, r.MSW = sse/((nf-1)*(kf-1)), ssw/(nf*(kf-1))
	r.SEMConsistency = math.Sqrt(r.MSE)
	r.SEMAgreement = math.Sqrt(math.Max(0, r.MSE+(r.MSJ-r.MSE)/nf))
	r.MDC95Agreement, r.MDC95Consistency = MDC95(r.SEMAgreement), MDC95(r.SEMConsistency)

	icc2 := (r.MSB - r.MSE) / (r.MSB + (kf-1)*r.MSE + kf*(r.MSJ-r.MSE)/nf)
	df1, dfw, dfe := nf-1, nf*(kf-1), (nf-1)*(kf-1)
	fw, fe := r.MSB/r.MSW, r.MSB/r.MSE
	one := func(form string, v, f, d1, d2, lo, hi float64) Coefficient {
		return Coefficient{form, v, f, d1, d2, distuv.F{D1: d1, D2: d2}.Survival(f), lo, hi}
	}
	q := func(d1, d2 float64) float64 { return distuv.F{D1: d1, D2: d2}.Quantile(0.975) }
	l1, u1 := fw/q(df1, dfw), fw*q(dfw, df1)
	l3, u3 := fe/q(df1, dfe), fe*q(dfe, df1)
	// Limits of ICC(2,1): Shrout and Fleiss 1979, with Satterthwaite's degrees of freedom.
	fj := r.MSJ / r.MSE
	b := nf*(1+(kf-1)*icc2) - kf*icc2
	v := (kf - 1) * (nf - 1) * math.Pow(kf*icc2*fj+b, 2) / ((nf-1)*kf*kf*icc2*icc2*fj*fj + b*b)
	fu, fl := q(df1, v), q(v, df1)
	c := kf*r.MSJ + (kf*nf-kf-nf)*r.MSE
	l2 := nf * (r.MSB - fu*r.MSE) / (fu*c + nf*r.MSB)
	u2 := nf * (fl*r.MSB - r.MSE) / (c + nf*fl*r.MSB)
	r.Forms = [6]Coefficient{
		one("ICC(1,1)", (r.MSB-r.MSW)/(r.MSB+(kf-1)*r.MSW), fw, df1, dfw, (l1-1)/(l1+kf-1), (u1-1)/(u1+kf-1)),
		one("ICC(2,1)", icc2, fe, df1, dfe, l2, u2),
		one("ICC(3,1)", (r.MSB-r.MSE)/(r.MSB+(kf-1)*r.MSE), fe, df1, dfe, (l3-1)/(l3+kf-1), (u3-1)/(u3+kf-1)),
		one("ICC(1,k)", (r.MSB-r.MSW)/r.MSB, fw, df1, dfw, 1-1/l1, 1-1/u1),
		one("ICC(2,k)", (r.MSB-r.MSE)/(r.MSB+(r.MSJ-r.MSE)/nf), fe, df1, dfe, l2*kf/(1+l2*(kf-1)), u2*kf/(1+u2*(kf-1))),
		one("ICC(3,k)", (r.MSB-r.MSE)/r.MSB, fe, df1, dfe, 1-1/l3, 1-1/u3),
	}
	return r, true
}

// SEM returns the standard error of measurement of a measure with that standard deviation
// between animals and that reliability (an ICC or kappa, 0 to 1); NaN outside.
func SEM(sd, reliability float64) float64 {
	if !(sd >= 0) || !(reliability >= 0 && reliability <= 1) {
		return nan
	}
	return sd * math.Sqrt(1-reliability)
}

// MDC95 returns the smallest difference of two readings that noise alone exceeds in fewer
// than one of twenty comparisons: 1.96·√2·SEM, with 1.96 unrounded.
func MDC95(sem float64) float64 { return z95 * math.Sqrt2 * sem }

// MDC90 is MDC95 for one of ten comparisons.
func MDC90(sem float64) float64 { return z90 * math.Sqrt2 * sem }

// ReliableChange returns Jacobson and Truax' index: the change in units of the standard
// deviation of a difference, √2·SEM (the √2 of the correction of 1986). Beyond ±1.96
// the change is larger than noise explains. NaN for a SEM that is not positive.
func ReliableChange(before, after, sem float64) float64 {
	if !(sem > 0) {
		return nan
	}
	return (after - before) / (math.Sqrt2 * sem)
}

// Repeats is what two readings of each of several animals say about the noise.
type Repeats struct {
	N         int
	Mean      float64 // mean difference, second minus first
	SD        float64 // of the differences
	SEM       float64 // SD/√2
	MDC95     float64
	Low, High float64 // limits of agreement: mean ± 1.96 SD
}

// TestRetest compares paired readings. Everything but N is NaN for fewer than two pairs,
// unequal lengths or NaN values.
func TestRetest(first, second []float64) Repeats {
	r := Repeats{len(first), nan, nan, nan, nan, nan, nan}
	if len(first) != len(second) || len(first) < 2 || anyNaN(first, second) {
		return r
	}
	d := make([]float64, len(first))
	for i := range d {
		d[i] = second[i] - first[i]
	}
	r.Mean, r.SD = gstat.MeanStdDev(d, nil)
	r.SEM = r.SD / math.Sqrt2
	r.MDC95 = MDC95(r.SEM)
	r.Low, r.High = r.Mean-z95*r.SD, r.Mean+z95*r.SD
	return r
}
