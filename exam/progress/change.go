package progress

import (
	"math"
	"slices"
	"time"
)

// Margin is the change of function, in percent points, that an owner and a therapist would
// notice: below it a change counts as «same». Judgement: two thirds of a step of the modified
// Frankel scale (100/6 = 17 points), whose one-step changes between raters are noise (OGL-2020).
const Margin = 10.0

// Change says what became of something between two visits. The three probabilities add up to 1.
type Change struct {
	From, To            time.Time
	Better, Same, Worse float64
	Before, After       float64 // expected function in percent at both, as known now
}

// Leading returns the most probable direction with its probability: +1 better, 0 same, −1 worse.
func (c Change) Leading() (direction int, probability float64) {
	switch {
	case c.Better > c.Same && c.Better >= c.Worse:
		return 1, c.Better
	case c.Worse > c.Same:
		return -1, c.Worse
	}
	return 0, c.Same
}

// sure reports whether a change is better or worse with more than 90 % probability.
func (c Change) sure() bool { return c.Better > 0.9 || c.Worse > 0.9 }

// soft is the share of a difference in percent points that counts as beyond the margin: the
// grid's cells are 5 points wide, so a difference right at the margin counts half.
func soft(difference float64) float64 {
	return math.Max(0, math.Min(1, (difference-Margin)/(100*spacing)+0.5))
}

// pairs is the joint belief over the severities at two visits.
type pairs struct {
	sites []int
	joint [][]float64 // for each site Levels × Levels: level at the first, level at the second
	a, b  belief      // what is left of each visit's belief: paths with a new lesion or growth between
	left  float64
}

// follow carries the belief of one visit, severity by severity, along one place to a later visit.
type follow struct {
	site   int
	rows   [][]float64 // joint with the levels that share the row
	levels [][]int
	shares [Levels]float64 // of each level within its row
}

// following is how far the belief of one visit has been carried. It is kept, so that a new visit
// costs one step.
type following struct {
	from, to int
	node     *node // of from: the course may have been read afresh
	places   []*follow
	before   *following // as it was one visit earlier, for when the last visit is taken back
}

// clone copies what carrying on would change.
func (f *following) clone() *following {
	out := &following{from: f.from, to: f.to, node: f.node, before: f.before}
	for _, p := range f.places {
		q := *p
		q.rows, q.levels = make([][]float64, len(p.rows)), slices.Clone(p.levels)
		for i, row := range p.rows {
			q.rows[i] = slices.Clone(row)
		}
		out.places = append(out.places, &q)
	}
	return out
}

// backTo drops what has been carried to visits that are no more.
func (f *following) backTo(n int) *following {
	for f != nil && f.to >= n {
		f = f.before
	}
	return f
}

// keepFollowing is how many visits' beliefs are kept on their way: the first visit's, the best one's.
const keepFollowing = 4

// leastFollowed is the belief below which a place is not followed on its own.
const leastFollowed = 1e-4

// followTo carries the belief of visit a to visit b.
func (c *Course) followTo(a, b int, mass []float64) *following {
	last := c.nodes[b]
	var f *following
	for i, old := range c.kept {
		if old.from == a && old.to <= b && old.node == c.nodes[a] {
			f = old
			c.kept = slices.Delete(c.kept, i, i+1)
			break
		}
	}
	if f != nil {
		// A place that has become likely since must have been followed from the start.
		missing := 0.0
		for i, s := range last.sites {
			if mass[i] >= leastFollowed && c.nodes[a].index(s) >= 0 && !slices.ContainsFunc(f.places, func(p *follow) bool { return p.site == s }) {
				missing += mass[i]
			}
		}
		if missing > 0.01 {
			f = nil
		}
	}
	if f == nil {
		f = &following{from: a, to: a, node: c.nodes[a]}
		first := c.nodes[a]
		for i, s := range last.sites {
			at0 := first.index(s)
			if mass[i] < leastFollowed || at0 < 0 {
				continue
			}
			p := &follow{site: s}
			for k := range Levels {
				p.shares[k] = 1
				row := make([]float64, states)
				from, to := k*int(paceCount), (k+1)*int(paceCount)
				held := 0.0
				for j := from; j < to; j++ {
					row[j] = first.alpha[at(at0)+j]
					held += row[j]
				}
				if held > 0 {
					p.rows, p.levels = append(p.rows, row), append(p.levels, []int{k})
				}
			}
			f.places = append(f.places, p)
		}
	}
	move := make([]float64, states)
	for t := f.to + 1; t <= b; t++ {
		if t == b {
			f.before, f.to = nil, t-1
			f.before = f.clone()
		}
		n := c.nodes[t]
		kept := f.places[:0]
		for _, p := range f.places {
			pos := n.index(p.site)
			if pos < 0 {
				continue
			}
			kept = append(kept, p)
			stay := 1.0
			if n.step != nil && n.step.grow > 0 && len(c.model.space.Neighbours(p.site)) > 0 {
				stay = 1 - n.step.grow
			}
			alpha := n.alpha[at(pos):at(pos+1)]
			for _, row := range p.rows {
				n.step.forward(move, row)
				c.steps++
				for k := range Levels {
					l := n.like[pos*Levels+k] * stay / n.scale
					for q := range int(paceCount) {
						x := k*int(paceCount) + q
						if alpha[x] == 0 {
							row[x] = 0 // dropped there
							continue
						}
						row[x] = float64(move[x] * l)
					}
				}
			}
			if t%4 == 0 && len(p.rows) > 1 {
				p.merge()
			}
		}
		f.places = kept
	}
	f.to = b
	c.kept = append(c.kept, f)
	if len(c.kept) > keepFollowing {
		c.kept = slices.Delete(c.kept, 0, 1)
	}
	return f
}

// joint is the belief over the severities at visits a and b together.
func (c *Course) joint(a, b int) pairs {
	c.smooth()
	out := pairs{a: c.smoothedBelief(a), b: c.smoothedBelief(b), left: 1}
	first, last := c.nodes[a], c.nodes[b]
	mass := make([]float64, len(last.sites))
	for i := range last.sites {
		for _, v := range out.b.level[i*Levels : (i+1)*Levels] {
			mass[i] += v
		}
	}
	for _, p := range c.followTo(a, b, mass).places {
		i, from := last.index(p.site), first.index(p.site)
		j := make([]float64, Levels*Levels)
		for r, row := range p.rows {
			var end [Levels]float64
			for k := range Levels {
				for q := range int(paceCount) {
					x := k*int(paceCount) + q
					end[k] += float64(row[x] * last.beta[at(i)+x])
				}
			}
			for _, ka := range p.levels[r] {
				for k, v := range end {
					j[ka*Levels+k] += float64(v * p.shares[ka])
				}
			}
		}
		out.sites, out.joint = append(out.sites, p.site), append(out.joint, j)
		for ka := range Levels {
			for kb := range Levels {
				v := j[ka*Levels+kb]
				out.left -= v
				out.a.level[from*Levels+ka] = math.Max(0, out.a.level[from*Levels+ka]-v)
				out.b.level[i*Levels+kb] = math.Max(0, out.b.level[i*Levels+kb]-v)
			}
		}
	}
	out.left = math.Max(0, out.left)
	return out
}

// forgotten is how nearly proportional rows must be for the chain to count as having forgotten
// where it was.
const forgotten = 1e-7

// merge joins rows that differ only by a factor.
func (p *follow) merge() {
	total := make([]float64, len(p.rows))
	whole, heavy := 0.0, 0
	for r, row := range p.rows {
		for _, v := range row {
			total[r] += v
		}
		whole += total[r]
		if total[r] > total[heavy] {
			heavy = r
		}
	}
	if !(whole > 0) {
		return
	}
	var rows [][]float64
	var levels [][]int
	one, joined, sum := make([]float64, states), []int(nil), 0.0
	var in []int
	for r, row := range p.rows {
		near := total[r] > 0
		for x := range row {
			if !near || math.Abs(row[x]/total[r]-p.rows[heavy][x]/total[heavy]) > forgotten {
				near = false
				break
			}
		}
		switch {
		case near:
			in = append(in, r)
			sum += total[r]
		case total[r] > 1e-12*whole:
			rows, levels = append(rows, row), append(levels, p.levels[r])
		}
	}
	for _, r := range in {
		for x, v := range p.rows[r] {
			one[x] += v
		}
		for _, k := range p.levels[r] {
			p.shares[k] *= total[r] / sum
			joined = append(joined, k)
		}
	}
	p.rows, p.levels = append(rows, one), append(levels, joined)
}

// changeOf classifies the joint belief by the function of one target; target −1 is the whole animal.
func (c *Course) changeOf(p pairs, target int) Change {
	r := c.model.reader
	value := func(site, level int) float64 {
		if target < 0 {
			return 100 * (1 - r.whole[site].damage[level])
		}
		for i := range r.sites[site] {
			if r.sites[site][i].target == target {
				return 100 * (1 - r.sites[site][i].damage[level])
			}
		}
		return 100
	}
	var out Change
	count := func(before, after, mass float64) {
		better, worse := soft(after-before), soft(before-after)
		out.Better += mass * better
		out.Worse += mass * worse
		out.Same += mass * (1 - better - worse)
		out.Before += mass * before
		out.After += mass * after
	}
	for i, s := range p.sites {
		var v [Levels]float64
		for k := range v {
			v[k] = value(s, k)
		}
		for ka := range Levels {
			for kb := range Levels {
				if m := p.joint[i][ka*Levels+kb]; m > 0 {
					count(v[ka], v[kb], m)
				}
			}
		}
	}
	if p.left > 1e-9 {
		// A lesion arose or grew between the two visits: what was before says no more of what came after.
		spread := func(b belief) []float64 {
			out := make([]float64, bins+1)
			total := 0.0
			for i, s := range b.sites {
				for k := range Levels {
					if m := b.level[i*Levels+k]; m > 0 {
						out[int(math.Round(value(s, k)/100*bins))] += m
						total += m
					}
				}
			}
			for i := range out {
				out[i] /= math.Max(total, 1e-300)
			}
			return out
		}
		before, after := spread(p.a), spread(p.b)
		for i, x := range before {
			for j, y := range after {
				if x*y > 0 {
					count(100*float64(i)/bins, 100*float64(j)/bins, p.left*x*y)
				}
			}
		}
	}
	total := out.Better + out.Same + out.Worse
	out.Better, out.Same, out.Worse = out.Better/total, out.Same/total, out.Worse/total
	out.Before, out.After = out.Before/total, out.After/total
	return out
}

// Change returns what became of the whole animal between two visits, from earlier to later, as
// known now.
func (c *Course) Change(from, to int) Change { return c.ChangeOf(from, to, -1) }

// ChangeOf is Change for one target of the model's space; −1 is the whole animal.
func (c *Course) ChangeOf(from, to, target int) Change {
	if from > to {
		from, to = to, from
	}
	out := c.changeOf(c.joint(from, to), target)
	out.From, out.To = c.nodes[from].visit.Examined, c.nodes[to].visit.Examined
	return out
}
