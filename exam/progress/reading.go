package progress

import "math"

// Band is a function in percent, 0 lost to 100 sound, with the range that holds it with 90 % probability.
type Band struct {
	Function  float64
	Low, High float64
}

// reading is what a belief says of every target.
type reading struct {
	targets []Band
	whole   Band
	region  []float64 // probability that the lesion lies there, by RegionTarget order
	pace    [paceCount]float64
	slow    float64
}

// leastRead is the belief below which a place is left out of a reading: it could move a
// function by 0.003 points.
const leastRead = 3e-5

// bins of the damage axis on which bands are read.
const bins = 200

// profile is what one place damages, prepared for reading: each level as a range of damage.
type profile struct {
	target int
	damage [Levels]float64
	lo, hi [Levels]float64 // a level stands for a part of a step to either side; the ends are points
}

// How much of a step of the grid a level stands for, to either side. A quarter where the
// likelihood is exact at every level: the masses of neighbouring levels say the rest, and whole
// steps would make bands too wide (93 % held on simulated courses, 91 % with quarters). Half, the whole
// step, where it is interpolated between the localisation's steps: long steady courses come to rest on one
// level, and its quarter held the truth too seldom (on the same courses 3 points less than halves).
const (
	quarterStep = 0.25
	halfStep    = 0.5
)

func newProfile(target int, damage [Levels]float64, step float64) profile {
	p := profile{target: target, damage: damage}
	for k := range Levels {
		p.lo[k], p.hi[k] = damage[k], damage[k]
		if k > 0 && k < Levels-1 {
			p.lo[k], p.hi[k] = damage[k]-float64(step*(damage[k]-damage[k-1])), damage[k]+float64(step*(damage[k+1]-damage[k]))
		}
	}
	return p
}

// map of damage onto readings.
type reader struct {
	targets int
	sites   [][]profile // by place
	whole   []profile   // the worst damage of each place
	region  []int
	regions int

	used  []bool // scratch: which targets have been touched
	bins  [][bins]float64
	point []float64 // mass at damage 0
	touch []float64 // mass of places that touch the target
	sum   []float64
}

func newReader(s Space, step float64) *reader {
	r := &reader{}
	targets := s.Targets()
	r.targets = len(targets)
	for _, t := range targets {
		if t.Kind == RegionTarget {
			r.regions++
		}
	}
	for i := range s.Sites() {
		var worst [Levels]float64
		var list []profile
		for _, share := range s.Shares(i) {
			list = append(list, newProfile(share.Target, share.Damage, step))
			for k, d := range share.Damage {
				worst[k] = math.Max(worst[k], d)
			}
		}
		r.sites = append(r.sites, list)
		r.whole = append(r.whole, newProfile(r.targets, worst, step))
		r.region = append(r.region, s.Region(i))
	}
	return r.share()
}

// share returns a reader with the same tables and scratch memory of its own.
func (r *reader) share() *reader {
	c := *r
	n := r.targets + 1
	c.used, c.bins, c.point, c.touch, c.sum = make([]bool, n), make([][bins]float64, n), make([]float64, n), make([]float64, n), make([]float64, n)
	return &c
}

func (r *reader) add(p *profile, level []float64) {
	t := p.target
	if !r.used[t] {
		r.used[t] = true
		r.bins[t] = [bins]float64{}
		r.point[t], r.touch[t], r.sum[t] = 0, 0, 0
	}
	b := &r.bins[t]
	for k, mass := range level {
		if mass == 0 {
			continue
		}
		r.touch[t] += mass
		lo, hi := p.lo[k], p.hi[k]
		r.sum[t] += float64(mass * (lo + hi) / 2)
		if hi <= 0 {
			r.point[t] += mass
			continue
		}
		from, to := lo*bins, hi*bins
		first, last := min(int(from), bins-1), min(int(to), bins-1)
		if first == last || to-from < 1e-9 {
			b[first] += mass
			continue
		}
		density := mass / (to - from)
		b[first] += float64(density * (float64(first+1) - from))
		for i := first + 1; i < last; i++ {
			b[i] += density
		}
		b[last] += float64(density * (to - float64(last)))
	}
}

// band reads the band of a target off its bins.
func (r *reader) band(t int) Band {
	if !r.used[t] {
		return Band{100, 100, 100}
	}
	r.used[t] = false
	sound := r.point[t] + math.Max(0, 1-r.touch[t])
	quantile := func(q float64) float64 {
		run := sound
		if run >= q {
			return 0
		}
		for i, v := range r.bins[t] {
			if run+v >= q {
				return (float64(i) + (q-run)/v) / bins
			}
			run += v
		}
		return 1
	}
	// A mean that a few unlikely places pull out of the band widens it.
	mean := 100 * (1 - r.sum[t])
	return Band{mean, math.Min(mean, 100*(1-quantile(0.95))), math.Max(mean, 100*(1-quantile(0.05)))}
}

func (r *reader) read(b belief) *reading {
	out := &reading{targets: make([]Band, r.targets), region: make([]float64, r.regions), pace: b.pace, slow: b.slow}
	for i, s := range b.sites {
		level := b.level[i*Levels : (i+1)*Levels]
		mass := 0.0
		for _, v := range level {
			mass += v
		}
		if g := r.region[s]; g >= 0 && g < len(out.region) {
			out.region[g] += mass
		}
		if mass < leastRead {
			continue
		}
		for k := range r.sites[s] {
			r.add(&r.sites[s][k], level)
		}
		r.add(&r.whole[s], level)
	}
	for t := range out.targets {
		out.targets[t] = r.band(t)
	}
	out.whole = r.band(r.targets)
	return out
}

// filtered and smoothed readings of a visit are kept until a later visit changes them.
func (c *Course) filtered(i int) *reading {
	n := c.nodes[i]
	if n.filtered == nil {
		n.filtered = c.model.reader.read(c.filteredBelief(i))
	}
	return n.filtered
}

func (c *Course) smoothed(i int) *reading {
	c.smooth()
	n := c.nodes[i]
	if n.smoothed == nil {
		n.smoothed = c.model.reader.read(c.smoothedBelief(i))
	}
	return n.smoothed
}
