package stat

import (
	"math"
	"math/big"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"
)

// ExactVisits is the longest series for which Mann–Kendall is counted exactly; beyond
// it the normal approximation with continuity correction agrees to three digits.
const ExactVisits = 30

// SignificantVisits is the shortest series that can reach a two-sided p below 0.05
// (with no two values equal): Kendall 1938, counted in SmallestP.
const SignificantVisits = 5

// Trend is the Mann–Kendall test of a series against its order in time.
type Trend struct {
	N           int     // values
	S           int     // pairs that rise minus pairs that fall
	VarS        float64 // variance of S with no trend, corrected for ties
	TauB        float64 // Kendall's tau-b with time, −1 to 1; NaN for a constant series
	P           float64 // two-sided: P(|S| at least as large) with no trend
	PGreater    float64 // one-sided, for a rise
	PLess       float64 // one-sided, for a fall
	Exact       bool    // counted exactly; else normal with continuity correction
	PNormal     float64 // two-sided normal approximation with continuity correction
	PNormalRaw  float64 // the same without continuity correction: for comparison only
	Z           float64 // with continuity correction
	ZRaw        float64 // without
	CanBeCalled bool    // some order of these values would have reached p < 0.05
}

// MannKendall tests a series, oldest value first, for a trend. Ties are handled
// exactly: p is the share of the distinct orders of these very values with |S| at
// least as large. A constant or empty series has P 1. Values that are NaN make P NaN.
func MannKendall(x []float64) Trend {
	t := Trend{N: len(x)}
	if anyNaN(x) {
		t.TauB, t.P, t.PGreater, t.PLess, t.PNormal, t.PNormalRaw = nan, nan, nan, nan, nan, nan
		return t
	}
	for i := range x {
		for j := i + 1; j < len(x); j++ {
			t.S += sign(x[j] - x[i])
		}
	}
	n := float64(len(x))
	ties := tieSizes(x)
	v, tied := n*(n-1)*(2*n+5), 0.0
	for _, k := range ties {
		k := float64(k)
		v -= k * (k - 1) * (2*k + 5)
		tied += k * (k - 1) / 2
	}
	t.VarS = v / 18
	pairs := n * (n - 1) / 2
	t.TauB = nan
	if pairs > tied {
		t.TauB = float64(t.S) / math.Sqrt(pairs*(pairs-tied))
	}
	t.PNormal, t.PNormalRaw = 1, 1
	if t.VarS > 0 {
		t.Z = float64(t.S-sign(float64(t.S))) / math.Sqrt(t.VarS)
		t.ZRaw = float64(t.S) / math.Sqrt(t.VarS)
		t.PNormal = 2 * distuv.UnitNormal.Survival(math.Abs(t.Z))
		t.PNormalRaw = 2 * distuv.UnitNormal.Survival(math.Abs(t.ZRaw))
	}
	if t.N > ExactVisits {
		t.P = math.Min(1, t.PNormal)
		t.PGreater = distuv.UnitNormal.Survival(float64(t.S-1) / math.Sqrt(t.VarS))
		t.PLess = distuv.UnitNormal.CDF(float64(t.S+1) / math.Sqrt(t.VarS))
		if t.VarS == 0 {
			t.PGreater, t.PLess = 1, 1
		}
		t.CanBeCalled = len(ties) > 1
		return t
	}
	null := NewNull(ties)
	t.Exact = true
	t.P, t.PGreater, t.PLess = null.TwoSided(t.S), null.AtLeast(t.S), null.AtLeast(-t.S)
	t.CanBeCalled = null.SmallestP() < 0.05
	return t
}

// tieSizes returns how often each distinct value occurs.
func tieSizes(x []float64) []int {
	s := slices.Clone(x)
	slices.Sort(s)
	var sizes []int
	for i := range s {
		if i == 0 || s[i] != s[i-1] {
			sizes = append(sizes, 0)
		}
		sizes[len(sizes)-1]++
	}
	return sizes
}

// Null is the exact distribution of Kendall's S with no trend, for a series whose equal
// values have given group sizes. The counts are whole numbers.
type Null struct {
	untied int        // pairs of unequal values: the largest S
	counts []*big.Int // counts[k]: orders with S = untied − 2k
	total  *big.Int
}

// NewNull counts the distinct orders of a series by S. ties holds the size of each group
// of equal values (1 for a value that occurs once). The counts are the coefficients of the
// Gaussian multinomial [n]!/∏[t]! (Kendall, Rank Correlation Methods, from memory).
func NewNull(ties []int) Null {
	n, untied := 0, 0
	for _, t := range ties {
		untied += n * max(t, 0)
		n += max(t, 0)
	}
	c := make([]*big.Int, untied+1)
	for k := range c {
		c[k] = new(big.Int)
	}
	c[0].SetInt64(1)
	times := func(m int) { // times (1 − q^m)
		for k := untied; k >= m; k-- {
			c[k].Sub(c[k], c[k-m])
		}
	}
	over := func(m int) { // divided by (1 − q^m), exact as a power series
		for k := m; k <= untied; k++ {
			c[k].Add(c[k], c[k-m])
		}
	}
	m := 0
	for _, t := range ties {
		for j := 1; j <= t; j++ {
			m++
			if m != j { // the two factors cancel
				times(m)
				over(j)
			}
		}
	}
	total := new(big.Int)
	for _, v := range c {
		total.Add(total, v)
	}
	return Null{untied, c, total}
}

// Orders returns the number of distinct orders of the series.
func (d Null) Orders() *big.Int { return new(big.Int).Set(d.total) }

// Count returns in how many orders S takes the value s.
func (d Null) Count(s int) *big.Int {
	if (d.untied-s)%2 != 0 || s > d.untied || s < -d.untied {
		return new(big.Int)
	}
	return new(big.Int).Set(d.counts[(d.untied-s)/2])
}

// AtLeast returns P(S ≥ s).
func (d Null) AtLeast(s int) float64 { return d.share(d.atLeast(s)) }

// TwoSided returns P(|S| ≥ |s|), 1 for s = 0.
func (d Null) TwoSided(s int) float64 {
	if s < 0 {
		s = -s
	}
	if s == 0 {
		return 1
	}
	return d.share(new(big.Int).Lsh(d.atLeast(s), 1))
}

// SmallestP returns the smallest two-sided p that any order of the series reaches.
func (d Null) SmallestP() float64 { return d.TwoSided(d.untied) }

func (d Null) atLeast(s int) *big.Int {
	sum := new(big.Int)
	for k := 0; k < len(d.counts) && d.untied-2*k >= s; k++ {
		sum.Add(sum, d.counts[k])
	}
	return sum
}

func (d Null) share(part *big.Int) float64 {
	f, _ := new(big.Rat).SetFrac(part, d.total).Float64()
	return math.Min(1, f)
}

// Tau is the rank correlation of two columns.
type Tau struct {
	B        float64 // Kendall's tau-b
	C        float64 // Stuart's tau-c
	SomersYX float64 // Somers' D of y given x
	P        float64 // two-sided, normal approximation with the variance for ties on both sides
}

// Kendall returns the rank correlation of x and y, ties on either side allowed. All values
// are NaN where one side is constant, the lengths differ or there are fewer than two pairs.
// gonum's stat.Kendall counts ties as agreement and must not be used on grades.
func Kendall(x, y []float64) Tau {
	t := Tau{nan, nan, nan, nan}
	if len(x) != len(y) || len(x) < 2 || anyNaN(x, y) {
		return t
	}
	s := 0
	for i := range x {
		for j := i + 1; j < len(x); j++ {
			s += sign(x[j]-x[i]) * sign(y[j]-y[i])
		}
	}
	tx, ty := tieSizes(x), tieSizes(y)
	if len(tx) == 1 || len(ty) == 1 {
		return t
	}
	n := float64(len(x))
	sums := func(sizes []int) (pairs, cube, five float64) {
		for _, k := range sizes {
			k := float64(k)
			pairs += k * (k - 1) / 2
			cube += k * (k - 1) * (k - 2)
			five += k * (k - 1) * (2*k + 5)
		}
		return
	}
	xp, x0, x1 := sums(tx)
	yp, y0, y1 := sums(ty)
	all := n * (n - 1) / 2
	t.B = float64(s) / math.Sqrt(all-xp) / math.Sqrt(all-yp)
	m := float64(min(len(tx), len(ty)))
	t.C = 2 * float64(s) / (n * n * (m - 1) / m)
	t.SomersYX = float64(s) / (all - xp)
	v := (2*all*(2*n+5) - x1 - y1) / 18
	v += 2 * xp * yp / (2 * all)
	if n > 2 {
		v += x0 * y0 / (9 * 2 * all * (n - 2))
	}
	t.P = 2 * distuv.UnitNormal.Survival(math.Abs(float64(s))/math.Sqrt(v))
	return t
}

// PageTrend is Page's test for an ordered rise over columns.
type PageTrend struct {
	L       float64 // Σ column × rank sum
	PExact  float64 // P(L at least as large) with every order within a row equally likely; ties in a row are ignored
	PNormal float64
}

// PageL returns Page's L from the columns' rank sums, in order.
func PageL(rankSums []float64) float64 {
	l := 0.0
	for j, r := range rankSums {
		l += float64(j+1) * r
	}
	return l
}

// Page tests whether values rise over the columns, the same way in every row (animals in
// rows, ordered visits in columns). It is for a practice's audit, not for one patient.
// Where a row has ties its ranks are averaged and the exact p is approximate. NaN values
// come back for ragged, empty or very wide tables (more than 8 columns have no exact p).
func Page(table [][]float64) PageTrend {
	p := PageTrend{nan, nan, nan}
	m := len(table)
	if m == 0 || len(table[0]) < 2 {
		return p
	}
	k := len(table[0])
	sums := make([]float64, k)
	for _, row := range table {
		if len(row) != k || anyNaN(row) {
			return p
		}
		for j, r := range Ranks(row) {
			sums[j] += r
		}
	}
	p.L = PageL(sums)
	mf, kf := float64(m), float64(k)
	mean := mf * kf * (kf + 1) * (kf + 1) / 4
	sd := math.Sqrt(mf * kf * kf * (kf + 1) * (kf*kf - 1) / 144)
	p.PNormal = distuv.UnitNormal.Survival((p.L - mean) / sd)
	if k > 8 {
		return p
	}
	// One row's L is Σ j·rank over the permutations of the ranks; rows add up.
	var row []float64
	lowest, highest := math.MaxInt, 0
	perm := make([]int, k)
	for i := range perm {
		perm[i] = i + 1
	}
	counts := map[int]float64{}
	all := 0.0
	permutations(perm, func(q []int) {
		l := 0
		for j, r := range q {
			l += (j + 1) * r
		}
		lowest, highest = min(lowest, l), max(highest, l)
		counts[l]++
		all++
	})
	row = make([]float64, highest-lowest+1)
	for l, c := range counts {
		row[l-lowest] = c / all
	}
	dist := []float64{1}
	for range m {
		next := make([]float64, len(dist)+len(row)-1)
		for i, a := range dist {
			for j, b := range row {
				next[i+j] += a * b
			}
		}
		dist = next
	}
	p.PExact = 0
	// With ties L may be half; the whole number below is used, as SciPy does.
	for i := len(dist) - 1; i >= 0 && i+m*lowest >= int(math.Floor(p.L)); i-- {
		p.PExact += dist[i]
	}
	return p
}

func permutations(a []int, f func([]int)) {
	var walk func(int)
	walk = func(i int) {
		if i == len(a) {
			f(a)
			return
		}
		for j := i; j < len(a); j++ {
			a[i], a[j] = a[j], a[i]
			walk(i + 1)
			a[i], a[j] = a[j], a[i]
		}
	}
	walk(0)
}

// Ranks returns the ranks of the values from 1; equal values share the mean rank.
func Ranks(x []float64) []float64 {
	order := make([]int, len(x))
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int { return sign(x[a] - x[b]) })
	ranks := make([]float64, len(x))
	for i := 0; i < len(order); {
		j := i
		for j < len(order) && x[order[j]] == x[order[i]] {
			j++
		}
		for k := i; k < j; k++ {
			ranks[order[k]] = float64(i+j+1) / 2
		}
		i = j
	}
	return ranks
}
