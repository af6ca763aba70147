package progress

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
	"cordwalk.example/cordwalk/exam/scale"
)

// A place is carried to the next visit while it holds at least leastMass of the belief, and from
// the first visits, when little is known, at least wideMass. What is dropped is less than a
// thousandth together, and can come back as a new lesion.
const (
	leastMass  = 1e-5
	wideVisits = 3
	wideMass   = 1e-7
	lookAround = 32 // every so many visits every place is weighed again
)

// backMost is how many of its last visits a course can take back.
const backMost = 3

// leastState is the belief below which a single state of a place counts as impossible.
const leastState = 1e-13

// The pass over the past stops where a new visit moves next to no belief: at most settled. What
// was not brought up to date is added up, and once it may exceed owedMost the next pass goes
// back to the first visit. A moved belief of 3e-4 changes a function by at most 0.03 points.
const (
	settled  = 2e-5
	owedMost = 3e-4
)

// Model is the model of a course for one species and animal: the places and the rates. It keeps
// transition matrices; one Model may serve many courses, one at a time.
type Model struct {
	space  Space
	rates  Rates
	clock  *clock
	reader *reader
	daily  [Levels][Levels]float64
	reach  int          // levels beyond which a good or bad day does not carry
	calm   [states]bool // states that change by less than the plateau's rate
	first  []float64    // distribution over the states where a lesion is met first

	minMass, minState float64
}

// NewModel returns a model over the places of space.
func NewModel(space Space, rates Rates) *Model {
	m := newModel(space, rates)
	m.clock, m.reader = newClock(rates), newReader(space)
	return m
}

func newModel(space Space, rates Rates) *Model {
	m := &Model{space: space, rates: rates, daily: rates.daily(), first: rates.start(), minMass: leastMass, minState: leastState}
	for k := range Levels {
		for q := range paceCount {
			m.calm[k*int(paceCount)+int(q)] = math.Abs(rates.speed(k, q))*100 < PlateauRate
		}
		for j := range Levels {
			if m.daily[k][j] > 1e-12 {
				m.reach = max(m.reach, j-k, k-j)
			}
		}
	}
	return m
}

func (m *Model) after(units int64) *transition { return m.clock.after(units, m.rates.GrowPerYear) }

// node is one visit with its messages. alpha and beta hold the states of the carried places.
type node struct {
	visit exam.Visit
	print uint64      // see printOf
	step  *transition // from the visit before; nil for the first and for no time between
	sites []int       // carried places, ascending
	alpha []float64   // P(place, state | exams so far), adding up to 1
	like  []float64   // likelihood of this exam for each carried place and level
	day   []float64   // ln likelihood of all exams of this day, before good and bad days are summed out
	wide  bool        // one of the first visits
	when  int64       // units since the first visit
	beta  []float64   // later evidence for each place and state; Σ alpha·beta = 1
	scale float64     // what alpha was divided by
	logP  float64     // ln P(this exam | earlier exams), up to the constant of LogLikelihoods

	scores             []anatomy.SegmentScore
	scales             []scale.Value
	filtered, smoothed *reading // what they say of the targets, once asked for
}

// at returns where the states of the i-th carried place begin.
func at(i int) int { return i * states }

// index returns the position of a place among the carried ones, or −1.
func (n *node) index(site int) int {
	if i, ok := slices.BinarySearch(n.sites, site); ok {
		return i
	}
	return -1
}

// Course is the exams of one animal and what they say together. Add visits in order of time.
// A Course is for one goroutine.
type Course struct {
	model   *Model
	nodes   []*node
	patient exam.Patient // whose course it is, where it was made by Analyse
	chains  chains       // how the readings of the last visits lean
	scratch [3][]float64
	kept    []*following
	owed    float64 // belief that later visits may have moved in visits that were left alone
	steps   int64   // places × steps computed so far, for the figures
}

// NewCourse returns an empty course.
func NewCourse(m *Model) *Course { return &Course{model: m} }

// Len returns the number of visits.
func (c *Course) Len() int { return len(c.nodes) }

// Visit returns the i-th visit.
func (c *Course) Visit(i int) exam.Visit { return c.nodes[i].visit }

// Steps returns how many messages of a place have been passed so far, forward and backward.
func (c *Course) Steps() int64 { return c.steps }

// LogLikelihood returns the evidence of all exams, up to a constant that does not depend on the model's rates.
func (c *Course) LogLikelihood() float64 {
	sum := 0.0
	for _, n := range c.nodes {
		sum += n.logP
	}
	return sum
}

// Add takes in the next visit. Only what its exam changes is computed again. The error says that it
// lies before the last one, or that the space has no likelihood for it.
func (c *Course) Add(v exam.Visit) error {
	m := c.model
	n := &node{visit: v, wide: len(c.nodes) < wideVisits}
	var last *node
	var carried []int
	if len(c.nodes) > 0 {
		carried = c.nodes[len(c.nodes)-1].sites
	}
	sites := m.space.Candidates(v, carried, n.wide || len(c.nodes)%lookAround == 0)
	if len(c.nodes) > 0 {
		last = c.nodes[len(c.nodes)-1]
		if v.Examined.Before(last.visit.Examined) {
			return fmt.Errorf("the visit of %s lies before the last one of %s; add visits in order of time",
				v.Examined.Format(time.RFC3339), last.visit.Examined.Format(time.RFC3339))
		}
		n.when = units(c.nodes[0].visit.Examined, v.Examined)
		n.step = m.after(n.when - last.when)
		sites = m.reachable(last, n.step, sites)
	}
	log := sized(&c.scratch[0], len(sites)*Levels)
	read := logLikelihoods(m.space, c.chains, v, sites, log)
	like, best := m.overDays(last, v, sites, log, sized(&c.scratch[1], len(log)))
	if math.IsInf(best, 0) || math.IsNaN(best) {
		return fmt.Errorf("the exam of %s is impossible at every place: the model returned %v", v.Examined.Format(time.RFC3339), best)
	}
	prior := sized(&c.scratch[2], len(sites)*states)
	c.predict(last, n.step, sites, prior)
	total := weigh(prior, like)
	if !(total > 0) {
		// Two exams within hours that exclude each other: the later one starts anew.
		c.predict(nil, nil, sites, prior)
		total = weigh(prior, like)
	}
	n.logP = best + math.Log(total)
	m.keep(n, sites, prior, like, log, total)
	if i := len(c.nodes) - backMost - 1; i >= 0 {
		c.nodes[i].day = nil // only a further exam of the same day asks for it
	}
	if c.chains == nil {
		c.chains = chains{}
	}
	for k, l := range read {
		c.chains[k] = l
	}
	c.nodes = append(c.nodes, n)
	return nil
}

// sized returns a slice of that length, zeroed, in memory that is used again.
func sized(s *[]float64, n int) []float64 {
	if cap(*s) < n {
		*s = make([]float64, n)
	}
	out := (*s)[:n]
	clear(out)
	return out
}

// weigh multiplies the belief in states by the likelihood of their levels and returns its sum.
func weigh(belief, like []float64) float64 {
	total := 0.0
	for k, l := range like {
		for q := range int(paceCount) {
			belief[k*int(paceCount)+q] *= l
			total += belief[k*int(paceCount)+q]
		}
	}
	return total
}

// overDays sums good and bad days out of an exam's log-likelihoods; ln of the scale is returned.
// Exams of one day share the day: the second says what it adds to the first, and log becomes
// the sum of both.
func (m *Model) overDays(last *node, v exam.Visit, sites []int, log, like []float64) (_ []float64, scale float64) {
	sum := func(log []float64, best float64, out []float64) {
		var e [Levels]float64
		any := false
		for k := range e {
			if d := log[k] - best; d > -50 {
				e[k], any = exp(d), true
			}
		}
		if !any {
			clear(out) // less than e⁻⁵⁰ of the best
			return
		}
		for k := range out {
			row := &m.daily[k]
			t := 0.0
			for j := max(0, k-m.reach); j <= min(Levels-1, k+m.reach); j++ {
				t += float64(row[j] * e[j])
			}
			out[k] = t
		}
	}
	sameDay := last != nil && exam.DayOf(last.visit.Examined) == exam.DayOf(v.Examined)
	before := 0.0
	if sameDay {
		before = slices.Max(last.day)
		for i, s := range sites {
			if k := last.index(s); k >= 0 {
				for l := range Levels {
					log[i*Levels+l] += last.day[k*Levels+l]
				}
			} else {
				for l := range Levels {
					log[i*Levels+l] += before
				}
			}
		}
	}
	best := slices.Max(log)
	if math.IsInf(best, 0) || math.IsNaN(best) {
		return nil, best
	}
	var once [Levels]float64
	for i, s := range sites {
		out := like[i*Levels : (i+1)*Levels]
		sum(log[i*Levels:(i+1)*Levels], best, out)
		if !sameDay {
			continue
		}
		if k := last.index(s); k >= 0 {
			sum(last.day[k*Levels:(k+1)*Levels], before, once[:])
			for l := range out {
				if once[l] > 0 {
					out[l] /= once[l]
				}
			}
		}
	}
	return like, best - before
}

// reachable returns the places to weigh: the exam's own candidates, those carried so far, and
// those that the carried ones may grow into.
func (m *Model) reachable(last *node, step *transition, sites []int) []int {
	sites = append(slices.Clone(sites), last.sites...)
	if step != nil && step.grow > 0 {
		for _, s := range last.sites {
			sites = append(sites, m.space.Neighbours(s)...)
		}
	}
	slices.Sort(sites)
	return slices.Compact(sites)
}

// predict puts the belief before an exam over the given places into out, which holds zeros or
// whatever is to be overwritten.
func (c *Course) predict(last *node, step *transition, sites []int, out []float64) {
	m := c.model
	clear(out)
	if last == nil {
		for i, s := range sites {
			w := m.space.Prior(s)
			for j, f := range m.first {
				out[at(i)+j] = float64(w * f)
			}
		}
		return
	}
	m.spread(last.sites, last.alpha, step, sites, out)
	c.steps += int64(len(last.sites))
	if step != nil {
		for i, s := range sites {
			w := m.space.Prior(s)
			for j, f := range step.fresh {
				out[at(i)+j] += float64(w * f)
			}
		}
	}
}

// spread moves belief over a stretch without new lesions, growth included.
func (m *Model) spread(from []int, alpha []float64, step *transition, to []int, out []float64) {
	moved := make([]float64, states)
	for i, s := range from {
		step.forward(moved, alpha[at(i):at(i+1)])
		stay := 1.0
		if step != nil && step.grow > 0 {
			if next := m.space.Neighbours(s); len(next) > 0 {
				stay = 1 - step.grow
				share := step.grow / float64(len(next))
				for _, r := range next {
					if k, ok := slices.BinarySearch(to, r); ok {
						for j, v := range moved {
							out[at(k)+j] += float64(share * v)
						}
					}
				}
			}
		}
		if k, ok := slices.BinarySearch(to, s); ok {
			for j, v := range moved {
				out[at(k)+j] += float64(stay * v)
			}
		}
	}
}

// keep stores the belief after an exam, without the places that hold next to nothing.
func (m *Model) keep(n *node, sites []int, belief, like, day []float64, total float64) {
	type held struct {
		i    int
		mass float64
	}
	all := make([]held, len(sites))
	for i := range sites {
		all[i].i = i
		for _, v := range belief[at(i):at(i+1)] {
			all[i].mass += v
		}
	}
	slices.SortFunc(all, func(a, b held) int { return cmp.Or(cmp.Compare(b.mass, a.mass), a.i-b.i) })
	least := m.minMass
	if n.wide {
		least = min(least, wideMass)
	}
	cut := 0
	for cut < len(all) && (cut == 0 || all[cut].mass >= least*total) {
		cut++
	}
	all = all[:cut]
	slices.SortFunc(all, func(a, b held) int { return a.i - b.i })
	sum := 0.0
	for _, h := range all {
		sum += h.mass
	}
	n.scale = sum
	n.sites, n.alpha = make([]int, 0, len(all)), make([]float64, 0, len(all)*states)
	n.like, n.day = make([]float64, 0, len(all)*Levels), make([]float64, 0, len(all)*Levels)
	for _, h := range all {
		n.sites = append(n.sites, sites[h.i])
		for _, v := range belief[at(h.i):at(h.i+1)] {
			v /= sum
			if v < m.minState {
				v = 0
			}
			n.alpha = append(n.alpha, v)
		}
		n.like = append(n.like, like[h.i*Levels:(h.i+1)*Levels]...)
		n.day = append(n.day, day[h.i*Levels:(h.i+1)*Levels]...)
	}
}

// smooth brings the messages from later visits up to date. It goes back from the last visit and
// stops where nothing changes any more.
func (c *Course) smooth() {
	last := len(c.nodes) - 1
	if last < 0 || c.nodes[last].beta != nil {
		return
	}
	n := c.nodes[last]
	n.beta = make([]float64, len(n.alpha))
	for i := range n.beta {
		n.beta[i] = 1
	}
	n.smoothed = nil
	for i := last - 1; i >= 0; i-- {
		n := c.nodes[i]
		beta := c.model.backward(n.sites, c.nodes[i+1], c.nodes[i+1].step)
		c.steps += int64(len(c.nodes[i+1].sites))
		total := 0.0
		for j, a := range n.alpha {
			total += float64(a * beta[j])
		}
		for j := range beta {
			if total > 0 {
				beta[j] /= total
			} else {
				beta[j] = 1 // the next exam started anew
			}
		}
		if n.beta != nil {
			moved := 0.0
			for j, a := range n.alpha {
				moved += float64(a * math.Abs(beta[j]-n.beta[j]))
			}
			if moved < settled && c.owed+moved < owedMost {
				c.owed += moved
				return
			}
		}
		n.beta, n.smoothed = beta, nil
	}
	c.owed = 0
}

// backward returns the later evidence for places at a time some stretch before the visit of next.
func (m *Model) backward(sites []int, next *node, step *transition) []float64 {
	// What each carried place of the next visit says: its exam and everything later.
	z := make([]float64, len(next.sites)*states)
	arise := 0.0
	for i, s := range next.sites {
		w := m.space.Prior(s)
		fresh := 0.0
		for k := range Levels {
			l := next.like[i*Levels+k]
			for q := range int(paceCount) {
				j := k*int(paceCount) + q
				if next.alpha[at(i)+j] == 0 {
					continue // dropped there: no path leads through it
				}
				v := float64(l * next.beta[at(i)+j])
				z[at(i)+j] = v
				if step != nil {
					fresh += float64(step.fresh[j] * v)
				}
			}
		}
		arise += float64(w * fresh)
	}
	out := make([]float64, len(sites)*states)
	mixed := make([]float64, states)
	for i, s := range sites {
		k := next.index(s)
		clear(mixed)
		stay := 1.0
		some := false
		if step != nil && step.grow > 0 {
			if near := m.space.Neighbours(s); len(near) > 0 {
				stay = 1 - step.grow
				share := step.grow / float64(len(near))
				for _, r := range near {
					if q := next.index(r); q >= 0 {
						some = true
						for j := range mixed {
							mixed[j] += float64(share * z[at(q)+j])
						}
					}
				}
			}
		}
		if k >= 0 {
			some = true
			for j := range mixed {
				mixed[j] += float64(stay * z[at(k)+j])
			}
		}
		if some {
			step.backward(out[at(i):at(i+1)], mixed)
		}
		for j := range states {
			out[at(i)+j] += arise
		}
	}
	return out
}

// belief is a distribution over places and severities.
type belief struct {
	sites []int
	level []float64 // Levels for each place
	pace  [paceCount]float64
	slow  float64 // probability that the severity changes by less than the plateau's rate
}

// collect sums the paces out of a distribution over states, which need not add up to 1. Where
// later is given, each state is weighed by it.
func (m *Model) collect(sites []int, p, later []float64) belief {
	b := belief{sites: sites, level: make([]float64, len(sites)*Levels)}
	total := 0.0
	for i := range sites {
		for k := range Levels {
			for q := range paceCount {
				j := k*int(paceCount) + int(q)
				v := p[at(i)+j]
				if later != nil {
					v = float64(v * later[at(i)+j])
				}
				b.level[i*Levels+k] += v
				b.pace[q] += v
				if m.calm[j] {
					b.slow += v
				}
				total += v
			}
		}
	}
	if total > 0 {
		for i := range b.level {
			b.level[i] /= total
		}
		for i := range b.pace {
			b.pace[i] /= total
		}
		b.slow /= total
	}
	return b
}

// PlateauRate is the rate of change, in points of function per week, below which a course
// counts as a plateau: less than a noticeable change (Margin) in four weeks.
const PlateauRate = Margin / 4

// filteredBelief is what was known with the i-th visit, smoothedBelief what is known of it now.
func (c *Course) filteredBelief(i int) belief {
	n := c.nodes[i]
	return c.model.collect(n.sites, n.alpha, nil)
}

func (c *Course) smoothedBelief(i int) belief {
	c.smooth()
	n := c.nodes[i]
	return c.model.collect(n.sites, n.alpha, n.beta)
}

// beliefAt is what is known now of any time: between visits, or after the last one (a forecast).
// A time before the first visit gives the first visit.
func (c *Course) beliefAt(t time.Time) belief {
	i, exact := slices.BinarySearchFunc(c.nodes, t, func(n *node, t time.Time) int { return n.visit.Examined.Compare(t) })
	if exact {
		for i+1 < len(c.nodes) && c.nodes[i+1].visit.Examined.Equal(t) {
			i++
		}
		return c.smoothedBelief(i)
	}
	if i == 0 {
		return c.smoothedBelief(0)
	}
	m, before := c.model, c.nodes[i-1]
	now := units(c.nodes[0].visit.Examined, t)
	step := m.after(now - before.when)
	if i == len(c.nodes) {
		// New lesions may arise anywhere.
		sites := make([]int, m.space.Sites())
		for s := range sites {
			sites[s] = s
		}
		belief := make([]float64, len(sites)*states)
		c.predict(before, step, sites, belief)
		return m.collect(sites, belief, nil)
	}
	c.smooth()
	next := c.nodes[i]
	sites := m.reachable(before, step, next.sites)
	alpha := make([]float64, len(sites)*states)
	c.predict(before, step, sites, alpha)
	beta := m.backward(sites, next, m.after(next.when-now))
	for j := range alpha {
		alpha[j] *= beta[j]
	}
	return m.collect(sites, alpha, nil)
}
