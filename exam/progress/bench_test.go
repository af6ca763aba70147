package progress

import (
	"math"
	"math/rand/v2"
	"slices"
	"time"

	"cordwalk.example/cordwalk/exam"
)

// bench is a plain space for tests: twenty-two places on a simple cord, real items of the
// vocabulary, each answering by an ordinal logit. Exams can be drawn from it, so that what the
// chain says can be checked against what was true.
type bench struct {
	sites   []benchSite
	targets []Target
	cells   []exam.Key
	steps   []int8        // direction away from normal: −1 or +1
	log     [][][]float64 // [site][cell][level*maxSteps+distance]
	index   map[exam.Key]int
}

type benchSite struct {
	name   string
	region int
	limb   [4]float64 // share of the severity that reaches each limb
	shares []Share
	near   []int
}

const maxSteps = 5

// benchThresholds: share of damage at which half of the animals are one, two … grades off.
var benchThresholds = [][]float64{{0.5}, {0.3, 0.65}, {0.22, 0.45, 0.72}, {0.16, 0.38, 0.6, 0.85}}

func newBench() *bench {
	b := &bench{index: map[exam.Key]int{}}
	regions := []string{"C1-C5", "C6-T2", "T3-L3", "L4-S3"}
	for _, seg := range []string{"C3", "C7", "T12", "L2", "L4", "L6", "S1"} {
		for _, side := range []exam.Site{exam.Left, exam.Right} {
			b.targets = append(b.targets, Target{SegmentTarget, seg, side})
		}
	}
	limbs := len(b.targets)
	for _, l := range exam.Limbs() {
		b.targets = append(b.targets, Target{LimbTarget, l.String(), exam.NoSite})
	}
	reg := len(b.targets)
	for _, r := range regions {
		b.targets = append(b.targets, Target{RegionTarget, r, exam.NoSite})
	}
	for i, p := range []struct {
		region     int
		fore, hind float64
	}{{0, 0.8, 1}, {1, 1, 0.8}, {2, 0, 1}, {2, 0, 0.95}, {3, 0, 0.9}, {3, 0, 0.8}, {3, 0, 0.6}} {
		for s, share := range [][2]float64{{1, 1}, {1, 0.25}, {0.25, 1}} {
			site := benchSite{name: b.targets[2*i].Name + [...]string{"", " left", " right"}[s], region: p.region,
				limb: [4]float64{p.fore * share[0], p.fore * share[1], p.hind * share[0], p.hind * share[1]}}
			add := func(t int, f float64) {
				if f == 0 {
					return
				}
				sh := Share{Target: t}
				for k := range Levels {
					sh.Damage[k] = f * float64(k) * spacing
				}
				site.shares = append(site.shares, sh)
			}
			add(2*i, share[0])
			add(2*i+1, share[1])
			for l, f := range site.limb {
				add(limbs+l, f)
			}
			add(reg+p.region, 1)
			b.sites = append(b.sites, site)
		}
	}
	b.sites = append(b.sites, benchSite{name: "none", region: -1})
	for _, item := range exam.Items() {
		in := item.Info()
		if item.Has(exam.Unordered) || in.Normal < 0 || item == exam.CutaneousTrunci || item == exam.Wound {
			continue
		}
		for _, s := range in.Sites {
			k := exam.Key{Item: item, Site: s}
			b.index[k] = len(b.cells)
			b.cells = append(b.cells, k)
			step := int8(-1)
			if item.Last()-in.Normal > in.Normal-in.First {
				step = 1
			}
			b.steps = append(b.steps, step)
		}
	}
	b.log = make([][][]float64, len(b.sites))
	for s := range b.sites {
		b.log[s] = make([][]float64, len(b.cells))
		for c := range b.cells {
			t := make([]float64, Levels*maxSteps)
			for k := range Levels {
				for d, p := range b.chances(s, c, float64(k)*spacing) {
					t[k*maxSteps+d] = math.Log(p)
				}
			}
			b.log[s][c] = t
		}
	}
	return b
}

// load says how much of a lesion's severity bears on a cell: by limb and side, and less for some items.
func (b *bench) load(site, cell int) float64 {
	k := b.cells[cell]
	l := b.sites[site].limb
	f := 0.0
	switch k.Site {
	case exam.ThoracicLeft, exam.ThoracicRight, exam.PelvicLeft, exam.PelvicRight:
		f = l[k.Site-exam.ThoracicLeft]
	case exam.Left:
		f = (l[0] + l[2]) / 2
	case exam.Right:
		f = (l[1] + l[3]) / 2
	default:
		f = (l[0] + l[1] + l[2] + l[3]) / 4
	}
	// Items differ in what they tell of each region, as reflexes do.
	if r := b.sites[site].region; r >= 0 && (int(k.Item)*7+r*5)%4 == 0 {
		f *= 0.3
	}
	return f
}

// chances returns the probability of each distance from the normal grade.
func (b *bench) chances(site, cell int, severity float64) []float64 {
	in := b.cells[cell].Item.Info()
	far := int(in.Normal - in.First)
	if b.steps[cell] > 0 {
		far = int(b.cells[cell].Item.Last() - in.Normal)
	}
	x := b.load(site, cell) * severity
	beyond := []float64{1}
	for _, t := range benchThresholds[far-1] {
		beyond = append(beyond, 1/(1+math.Exp(-9*(x-t))))
	}
	p := make([]float64, far+1)
	for d := range p {
		p[d] = beyond[d]
		if d < far {
			p[d] -= beyond[d+1]
		}
		p[d] = 0.94*p[d] + 0.06/float64(far+1)
	}
	return p
}

func (b *bench) Targets() []Target         { return b.targets }
func (b *bench) Sites() int                { return len(b.sites) }
func (b *bench) Prior(int) float64         { return 1 / float64(len(b.sites)) }
func (b *bench) Region(site int) int       { return b.sites[site].region }
func (b *bench) Shares(site int) []Share   { return b.sites[site].shares }
func (b *bench) Neighbours(site int) []int { return b.sites[site].near }

func (b *bench) Candidates(exam.Visit, []int, bool) []int {
	all := make([]int, len(b.sites))
	for i := range all {
		all[i] = i
	}
	return all
}

func (b *bench) LogLikelihoods(v exam.Visit, sites []int, dst []float64) {
	clear(dst)
	for _, f := range v.Findings {
		c, ok := b.index[f.Key()]
		g, tested := f.Result.Grade()
		if !ok || !tested {
			continue
		}
		d := int(g-f.Item.Info().Normal) * int(b.steps[c])
		if d < 0 {
			continue
		}
		for i, s := range sites {
			t := b.log[s][c]
			for k := range Levels {
				dst[i*Levels+k] += t[k*maxSteps+d]
			}
		}
	}
}

// draw makes the exam of an animal with a lesion of that severity at a place.
func (b *bench) draw(r *rand.Rand, site int, severity float64, at time.Time, n int) exam.Visit {
	v := exam.Visit{Examined: at, Examiner: "A. Brook"}
	for _, c := range r.Perm(len(b.cells))[:n] {
		u, d := r.Float64(), 0
		p := b.chances(site, c, severity)
		for d < len(p)-1 && u >= p[d] {
			u -= p[d]
			d++
		}
		k := b.cells[c]
		v.Findings = append(v.Findings, exam.Finding{Item: k.Item, Site: k.Site, Result: exam.Graded(k.Item.Info().Normal + int8(d)*b.steps[c])})
	}
	exam.SortFindings(v.Findings)
	return v
}

func (b *bench) site(name string) int {
	return slices.IndexFunc(b.sites, func(s benchSite) bool { return s.name == name })
}

// start of every simulated course.
var day0 = time.Date(2026, 1, 5, 10, 0, 0, 0, time.UTC)

func week(w float64) time.Time { return day0.Add(time.Duration(w * 7 * 24 * float64(time.Hour))) }
