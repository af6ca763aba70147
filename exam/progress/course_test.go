package progress

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/stat"
)

// exact is a model that drops nothing, over two places that may grow into each other.
func exact(growth bool) (*bench, *Model) {
	b := newBench()
	b.sites = b.sites[:2]
	if growth {
		b.sites[0].near, b.sites[1].near = []int{1}, []int{0}
	}
	r := DefaultRates()
	r.NewPerYear, r.GrowPerYear = 2, 3 // large, so that a mistake would show
	m := NewModel(b, r)
	m.minMass, m.minState = 0, 0
	return b, m
}

// dense is the same chain written out over all places × states.
func dense(m *Model, b *bench, stretch int64) *mat.Dense {
	n := b.Sites() * states
	p := mat.NewDense(n, n, nil)
	t := m.after(stretch)
	for s := range b.Sites() {
		for i := range states {
			row := s*states + i
			if t == nil {
				p.Set(row, row, 1)
				continue
			}
			stay := 1.0
			if len(b.sites[s].near) > 0 {
				stay = 1 - t.grow
			}
			for j := range states {
				v := t.rows[i*states+j]
				p.Set(row, s*states+j, p.At(row, s*states+j)+v*stay)
				for _, r := range b.sites[s].near {
					p.Set(row, r*states+j, p.At(row, r*states+j)+v*t.grow/float64(len(b.sites[s].near)))
				}
				for r := range b.Sites() {
					p.Set(row, r*states+j, p.At(row, r*states+j)+t.fresh[j]*b.Prior(r))
				}
			}
		}
	}
	return p
}

// likelihoods of an exam, good and bad days summed out.
func likelihoods(m *Model, b *bench, v exam.Visit) []float64 {
	sites := b.Candidates(v, nil, true)
	log := make([]float64, len(sites)*Levels)
	b.LogLikelihoods(v, sites, log)
	out := make([]float64, len(sites)*states)
	for i := range sites {
		for j := range states {
			for shown, w := range m.daily[j/int(paceCount)] {
				out[i*states+j] += w * math.Exp(log[i*Levels+shown])
			}
		}
	}
	return out
}

func initial(m *Model, b *bench) []float64 {
	var out []float64
	for s := range b.Sites() {
		for _, f := range m.first {
			out = append(out, f*b.Prior(s))
		}
	}
	return out
}

func someVisits(b *bench, r *rand.Rand, n int) []exam.Visit {
	var out []exam.Visit
	w := 0.0
	for range n {
		out = append(out, b.draw(r, r.IntN(2), r.Float64(), week(w), 4))
		w += []float64{0.2, 0.3, 1, 1, 2.7, 9}[r.IntN(6)]
	}
	return out
}

// The transitions of a stretch are those of the generator, and stretches compose.
func TestStretches(t *testing.T) {
	r := DefaultRates()
	rows := make([][]float64, states)
	q := r.generator()
	for i := range rows {
		rows[i] = q.RawRowView(i)
	}
	g, err := stat.NewGenerator(rows)
	require.NoError(t, err, "the rates must form a generator")
	c := newClock(r)
	for _, n := range []int64{1, 4, 28, 29, 400, 1500} {
		p := g.After(float64(n) / 4)
		got := c.after(n, 0)
		keep := math.Exp(-r.NewPerYear / 365.25 * float64(n) / 4)
		worst, sum := 0.0, 0.0
		for i := range states {
			for j := range states {
				worst = math.Max(worst, math.Abs(got.rows[i*states+j]-keep*p.At(i, j)))
			}
		}
		for _, v := range got.fresh {
			sum += v
		}
		require.Less(t, worst, 1e-9, "%d quarters of a day", n)
		require.InDelta(t, 1-keep, sum, 1e-9)
	}
}

// Forward–backward over places, severities and paces against the dense chain of package stat,
// which is itself held to R's msm.
func TestAgainstDenseChain(t *testing.T) {
	for _, growth := range []bool{false, true} {
		b, m := exact(growth)
		for seed := range uint64(4) {
			r := rand.New(rand.NewPCG(seed, 2))
			visits := someVisits(b, r, 6)
			c := NewCourse(m)
			chain := stat.Chain{Initial: initial(m, b)}
			var like [][]float64
			for i, v := range visits {
				require.NoError(t, c.Add(v))
				like = append(like, likelihoods(m, b, v))
				if i > 0 {
					chain.Transitions = append(chain.Transitions, dense(m, b, units(visits[0].Examined, v.Examined)-units(visits[0].Examined, visits[i-1].Examined)))
				}
			}
			want, err := chain.Smooth(like)
			require.NoError(t, err)
			require.InDelta(t, want.LogLikelihood, c.LogLikelihood(), 1e-9)
			c.smooth()
			for i, n := range c.nodes {
				require.Equal(t, []int{0, 1}, n.sites)
				for j := range n.alpha {
					require.InDelta(t, want.Filtered[i][j], n.alpha[j], 1e-10)
					require.InDelta(t, want.Smoothed[i][j], n.alpha[j]*n.beta[j], 1e-10)
				}
			}
		}
	}
}

// The same against the sum over every path, for three visits: likelihood, smoothed belief and
// the joint belief of first and last.
func TestAgainstAllPaths(t *testing.T) {
	b, m := exact(false)
	r := rand.New(rand.NewPCG(11, 3))
	visits := someVisits(b, r, 3)
	visits[1].Examined, visits[2].Examined = week(1), week(3.5)
	c := NewCourse(m)
	var like [][]float64
	for _, v := range visits {
		require.NoError(t, c.Add(v))
		like = append(like, likelihoods(m, b, v))
	}
	p1 := dense(m, b, units(visits[0].Examined, visits[1].Examined))
	p2 := dense(m, b, units(visits[1].Examined, visits[2].Examined))
	first := initial(m, b)
	n := len(first)
	total := 0.0
	middle := make([]float64, n)
	better, worse, same := 0.0, 0.0, 0.0
	for x := range n {
		for y := range n {
			xy := first[x] * like[0][x] * p1.At(x, y) * like[1][y]
			for z := range n {
				w := xy * p2.At(y, z) * like[2][z]
				total += w
				middle[y] += w
				d := 100 * spacing * float64(x%states/int(paceCount)-z%states/int(paceCount))
				better += w * soft(d)
				worse += w * soft(-d)
				same += w * (1 - soft(d) - soft(-d))
			}
		}
	}
	require.InDelta(t, math.Log(total), c.LogLikelihood(), 1e-9)
	c.smooth()
	for j := range middle {
		require.InDelta(t, middle[j]/total, c.nodes[1].alpha[j]*c.nodes[1].beta[j], 1e-10)
	}
	// With a new lesion between, what was before and after are taken as independent: a little off.
	got := c.Change(0, 2)
	require.InDelta(t, better/total, got.Better, 0.01)
	require.InDelta(t, worse/total, got.Worse, 0.01)
	require.InDelta(t, same/total, got.Same, 0.01)
}

// Without new lesions the joint belief is exact.
func TestChangeAgainstAllPaths(t *testing.T) {
	b, _ := exact(false)
	rates := DefaultRates()
	rates.NewPerYear = 0
	m := NewModel(b, rates)
	m.minMass, m.minState = 0, 0
	r := rand.New(rand.NewPCG(12, 3))
	visits := someVisits(b, r, 3)
	visits[1].Examined, visits[2].Examined = week(2), week(3)
	c := NewCourse(m)
	var like [][]float64
	for _, v := range visits {
		require.NoError(t, c.Add(v))
		like = append(like, likelihoods(m, b, v))
	}
	p1, p2 := dense(m, b, 14*4), dense(m, b, 7*4)
	first := initial(m, b)
	total, better := 0.0, 0.0
	for x := range first {
		for y := range first {
			xy := first[x] * like[0][x] * p1.At(x, y) * like[1][y]
			if xy == 0 {
				continue
			}
			for z := range first {
				w := xy * p2.At(y, z) * like[2][z]
				total += w
				better += w * soft(100*spacing*float64(x%states/int(paceCount)-z%states/int(paceCount)))
			}
		}
	}
	require.InDelta(t, better/total, c.Change(0, 2).Better, 1e-6)
}

// A visit cut in two at one instant, or an empty visit put between, changes nothing.
func TestSplitVisits(t *testing.T) {
	b, m := exact(true)
	r := rand.New(rand.NewPCG(5, 5))
	visits := someVisits(b, r, 5)
	whole := NewCourse(m)
	for _, v := range visits {
		require.NoError(t, whole.Add(v))
	}
	split := NewCourse(m)
	for i, v := range visits {
		one, two := v, v
		cut := 1 + i%(len(v.Findings)-1)
		one.Findings, two.Findings = v.Findings[:cut], v.Findings[cut:]
		require.NoError(t, split.Add(one))
		require.NoError(t, split.Add(two))
	}
	require.InDelta(t, whole.LogLikelihood(), split.LogLikelihood(), 1e-9)
	for i := range visits {
		require.InDeltaSlice(t, whole.smoothedBelief(i).level, split.smoothedBelief(2*i+1).level, 1e-9)
	}
	require.InDelta(t, whole.Change(0, 4).Better, split.Change(1, 9).Better, 1e-6)

	// Without growth (summed to first order in a stretch) an empty visit is nothing at all.
	_, m = exact(false)
	plain, gaps := NewCourse(m), NewCourse(m)
	for i, v := range visits {
		require.NoError(t, plain.Add(v))
		require.NoError(t, gaps.Add(v))
		if i+1 < len(visits) {
			empty := exam.Visit{Examined: v.Examined.Add((visits[i+1].Examined.Sub(v.Examined) / 3).Truncate(unit))}
			if empty.Examined.After(v.Examined) {
				require.NoError(t, gaps.Add(empty))
			} else {
				require.NoError(t, gaps.Add(exam.Visit{Examined: v.Examined}))
			}
		}
	}
	require.InDelta(t, plain.LogLikelihood(), gaps.LogLikelihood(), 1e-8)
	for i := range visits {
		require.InDeltaSlice(t, plain.smoothedBelief(i).level, gaps.smoothedBelief(2*i).level, 1e-8)
	}
	// Between visits the model says the same as at an empty visit there.
	mid := gaps.nodes[1].visit.Examined
	require.InDeltaSlice(t, gaps.smoothedBelief(1).level, plain.beliefAt(mid).level, 1e-8)
}

// What was dropped and where the pass over the past stopped does not show.
func TestDroppingAndStoppingAreHarmless(t *testing.T) {
	b := newBench()
	full := NewModel(b, DefaultRates())
	full.minMass, full.minState = 0, 0
	lean := NewModel(b, DefaultRates())
	r := rand.New(rand.NewPCG(9, 9))
	all, some := NewCourse(full), NewCourse(lean)
	site := b.site("L4 left")
	for i := range 30 {
		s := 0.8 - 0.02*float64(i)
		if i > 20 { // a new lesion elsewhere
			site, s = b.site("C7 right"), 0.7
		}
		v := b.draw(r, site, s, week(float64(i)), 20)
		require.NoError(t, all.Add(v))
		require.NoError(t, some.Add(v))
		some.smooth() // so that the pass stops early each time
	}
	require.InDelta(t, all.LogLikelihood(), some.LogLikelihood(), 1e-3)
	for i := range 30 {
		x, y := all.smoothed(i), some.smoothed(i)
		require.InDelta(t, x.whole.Function, y.whole.Function, 0.03)
		for k := range x.targets {
			require.InDelta(t, x.targets[k].Function, y.targets[k].Function, 0.03)
			require.InDelta(t, x.targets[k].Low, y.targets[k].Low, 0.1)
		}
	}
	// And the new lesion is found.
	last := some.smoothed(29)
	require.Greater(t, last.region[1], 0.99)
	require.Greater(t, some.smoothed(10).region[3], 0.99)
}

func TestVisitsMustComeInOrder(t *testing.T) {
	b, m := exact(false)
	c := NewCourse(m)
	r := rand.New(rand.NewPCG(1, 1))
	require.NoError(t, c.Add(b.draw(r, 0, 0.5, week(2), 5)))
	require.ErrorContains(t, c.Add(b.draw(r, 0, 0.5, week(1), 5)), "lies before the last one")
	require.Equal(t, 1, c.Len())
}

// n readings that share an error of correlation r weigh n/(1 + (n − 1)r): never more than 1/r.
func TestNewInformation(t *testing.T) {
	for _, r := range []float64{copies.Seen, copies.Copied} {
		sum := 0.0
		for n := 1; n <= 50; n++ {
			step := newInformation(n, r)
			require.Greater(t, step, 0.0)
			sum += step
			require.InDelta(t, float64(n)/(1+float64(n-1)*r), sum, 1e-12)
		}
		require.Less(t, sum, 1/r)
	}
}

// A grade copied by key for weeks tells little that is new; one given with sight of the last
// grade tells less than a free one; a changed grade counts in full however it came to be.
func TestCopiedReadingsShareTheirError(t *testing.T) {
	b := newBench()
	m := NewModel(b, DefaultRates())
	r := rand.New(rand.NewPCG(21, 1))
	first := b.draw(r, b.site("T12"), 0.5, week(0), 30)
	certain := func(how exam.How, seen bool) float64 {
		c := NewCourse(m)
		require.NoError(t, c.Add(first))
		for w := 1; w <= 8; w++ {
			v := first
			v.Examined = week(float64(w))
			v.Findings = append([]exam.Finding(nil), first.Findings...)
			for i := range v.Findings {
				v.Findings[i].How, v.Findings[i].Seen = how, seen
			}
			require.NoError(t, c.Add(v))
		}
		band := c.filtered(8).whole
		return band.High - band.Low
	}
	fresh, looked, copies := certain(exam.Examined, false), certain(exam.Examined, true), certain(exam.SameAsLast, false)
	require.Less(t, fresh, looked)
	require.Less(t, looked, copies)

	// Changed grades are new whatever was seen.
	_, _, c := chains{}.leans(first)
	changed := first
	changed.Findings = append([]exam.Finding(nil), first.Findings...)
	for i := range changed.Findings {
		f := &changed.Findings[i]
		g, _ := f.Result.Grade()
		if g == f.Item.Info().First {
			f.Result = exam.Graded(g + 1)
		} else {
			f.Result = exam.Graded(g - 1)
		}
		f.Seen = true
	}
	sorted, _, _ := c.leans(changed)
	require.Len(t, sorted[free], len(first.Findings))
}
