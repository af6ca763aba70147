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
	edge   [Levels][parts + 1]float64 // between the parts of each level's step; the ends of the grid are points
}

// parts are the pieces of a level's step of the grid that its belief is spread over.
const parts = 4

func newProfile(target int, damage [Levels]float64) profile {
	p := profile{target: target, damage: damage}
	for k := range Levels {
		for j := range p.edge[k] {
			x := float64(j)/parts - 0.5 // in steps from the level
			d := damage[k]
			switch {
			case k == 0 || k == Levels-1:
			case x < 0:
				d += float64(x * (damage[k] - damage[k-1]))
			default:
				d += float64(x * (damage[k+1] - damage[k]))
			}
			p.edge[k][j] = d
		}
	}
	return p
}

// spreadIn spreads the belief in each level over its step of the grid. A parabola through the logarithms of the belief
// in the level and in its two neighbours says how: so a belief like a normal distribution that is narrower
// than the grid is read as narrow as it is, and at its place between two levels.
func spreadIn(level []float64) (w [Levels][parts]float64) {
	for k, mass := range level {
		if mass == 0 || k == 0 || k == Levels-1 {
			continue
		}
		const least = 1e-12
		lower, upper := math.Log(math.Max(level[k-1]/mass, least)), math.Log(math.Max(level[k+1]/mass, least))
		lean, bend := (upper-lower)/2, (upper+lower)/2
		sum := 0.0
		for j := range parts {
			x := (float64(j)+0.5)/parts - 0.5
			w[k][j] = exp(math.Round(float64(lean*x+bend*x*x)*(1<<30)) / (1 << 30))
			sum += w[k][j]
		}
		for j := range parts {
			w[k][j] *= mass / sum
		}
	}
	return w
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

func newReader(s Space) *reader {
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
			list = append(list, newProfile(share.Target, share.Damage))
			for k, d := range share.Damage {
				worst[k] = math.Max(worst[k], d)
			}
		}
		r.sites = append(r.sites, list)
		r.whole = append(r.whole, newProfile(r.targets, worst))
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

func (r *reader) add(p *profile, level []float64, spread *[Levels][parts]float64) {
	t := p.target
	if !r.used[t] {
		r.used[t] = true
		r.bins[t] = [bins]float64{}
		r.point[t], r.touch[t], r.sum[t] = 0, 0, 0
	}
	for k, mass := range level {
		if mass == 0 {
			continue
		}
		r.touch[t] += mass
		edge := &p.edge[k]
		if k == 0 || k == Levels-1 {
			r.put(t, mass, edge[0], edge[0])
			continue
		}
		for j, m := range spread[k] {
			r.put(t, m, edge[j], edge[j+1])
		}
	}
}

// put adds belief in a range of damage.
func (r *reader) put(t int, mass, lo, hi float64) {
	r.sum[t] += float64(mass * (lo + hi) / 2)
	if hi <= 0 {
		r.point[t] += mass
		return
	}
	b := &r.bins[t]
	from, to := lo*bins, hi*bins
	first, last := min(int(from), bins-1), min(int(to), bins-1)
	if first == last || to-from < 1e-9 {
		b[first] += mass
		return
	}
	density := mass / (to - from)
	b[first] += float64(density * (float64(first+1) - from))
	for i := first + 1; i < last; i++ {
		b[i] += density
	}
	b[last] += float64(density * (to - float64(last)))
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
		spread := spreadIn(level)
		for k := range r.sites[s] {
			r.add(&r.sites[s][k], level, &spread)
		}
		r.add(&r.whole[s], level, &spread)
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
