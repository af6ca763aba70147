package progress

import (
	"math"
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

// joint follows the belief of visit a, severity by severity, through to visit b.
func (c *Course) joint(a, b int) pairs {
	const least = 1e-6
	c.smooth()
	out := pairs{a: c.smoothedBelief(a), b: c.smoothedBelief(b), left: 1}
	first, last := c.nodes[a], c.nodes[b]
	move := make([]float64, states)
	for i, s := range last.sites {
		mass := 0.0
		for _, v := range out.b.level[i*Levels : (i+1)*Levels] {
			mass += v
		}
		from := first.index(s)
		if mass < least || from < 0 {
			continue
		}
		var rows [][]float64 // rows[k]: joint with level k at visit a, nil where next to nothing
		var levels [][]int   // which levels share a row
		for k := range Levels {
			if out.a.level[from*Levels+k] < least*1e-2 {
				continue
			}
			row := make([]float64, states)
			copy(row[k*int(paceCount):(k+1)*int(paceCount)], first.alpha[at(from)+k*int(paceCount):at(from)+(k+1)*int(paceCount)])
			rows, levels = append(rows, row), append(levels, []int{k})
		}
		shares := make([]float64, Levels) // of each level within its row
		for k := range shares {
			shares[k] = 1
		}
		alive := true
		for t := a + 1; t <= b && alive; t++ {
			n := c.nodes[t]
			pos := n.index(s)
			if pos < 0 {
				alive = false
				break
			}
			stay := 1.0
			if n.step != nil && n.step.grow > 0 && len(c.model.space.Neighbours(s)) > 0 {
				stay = 1 - n.step.grow
			}
			for _, row := range rows {
				n.step.forward(move, row)
				c.steps++
				for k := range Levels {
					l := n.like[pos*Levels+k] * stay / n.scale
					for q := range int(paceCount) {
						row[k*int(paceCount)+q] = float64(move[k*int(paceCount)+q] * l)
					}
				}
			}
			if (t-a)%6 == 0 && len(rows) > 1 {
				rows, levels = merge(rows, levels, shares)
			}
		}
		if !alive {
			continue
		}
		j := make([]float64, Levels*Levels)
		for r, row := range rows {
			for _, ka := range levels[r] {
				for k := range Levels {
					for q := range int(paceCount) {
						x := k*int(paceCount) + q
						j[ka*Levels+k] += float64(row[x] * last.beta[at(i)+x] * shares[ka])
					}
				}
			}
		}
		out.sites, out.joint = append(out.sites, s), append(out.joint, j)
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

// merge joins rows once they differ only by a factor: the chain has forgotten where it was.
func merge(rows [][]float64, levels [][]int, shares []float64) ([][]float64, [][]int) {
	total := make([]float64, len(rows))
	for r, row := range rows {
		for _, v := range row {
			total[r] += v
		}
	}
	whole := 0.0
	for r := range rows {
		if !(total[r] > 0) {
			return rows, levels
		}
		whole += total[r]
		for x := range rows[r] {
			if math.Abs(rows[r][x]/total[r]-rows[0][x]/total[0]) > 1e-10 {
				return rows, levels
			}
		}
	}
	one := make([]float64, len(rows[0]))
	var all []int
	for r, row := range rows {
		for x, v := range row {
			one[x] += v
		}
		for _, k := range levels[r] {
			shares[k] *= total[r] / whole
			all = append(all, k)
		}
	}
	return [][]float64{one}, [][]int{all}
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
