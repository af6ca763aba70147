package progress

import (
	"math"
	"slices"
	"sync"

	"gonum.org/v1/gonum/interp"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
	"cordwalk.example/cordwalk/exam/localise"
)

// body is what the localisation model says of a species, laid out for courses. It is made
// once and only read.
type body struct {
	m       *localise.Model
	sites   []localise.Site
	prior   []float64
	targets []Target
	region  []int
	shares  [][]Share
	near    [][]int
	all     []int
	watch   []int         // one place for each part of the body: is something new there?
	class   map[int][]int // places by class
	reader  *reader
	clock   *clock
}

// localised is the Space of one animal.
type localised struct {
	*body
	patient exam.Patient
	weigher *localise.Weigher
	steps   []float64
	fit     interp.FritschButland
}

var bodies sync.Map // exam.Species → func() (*body, error)

func bodyOf(s exam.Species) (*body, error) {
	f, _ := bodies.LoadOrStore(s, sync.OnceValues(func() (*body, error) { return newBody(s) }))
	return f.(func() (*body, error))()
}

// For returns the model of an animal's course. The error is a *localise.Unsupported for a
// species whose cord is not on record in the detail that localisation needs.
func For(p exam.Patient) (*Model, error) {
	b, err := bodyOf(p.Species)
	if err != nil {
		return nil, err
	}
	rates := DefaultRates()
	space := &localised{body: b, patient: p, weigher: b.m.Weigher()}
	return &Model{space: space, rates: rates, clock: b.clock, reader: b.reader.share(), daily: rates.daily(), first: rates.start(),
		minMass: leastMass, minState: leastState, most: mostPlaces}, nil
}

func newBody(s exam.Species) (*body, error) {
	m, err := localise.ModelOf(s)
	if err != nil {
		return nil, err
	}
	b := &body{m: m, sites: m.Sites(), class: map[int][]int{}, clock: newClock(DefaultRates())}
	segments := anatomy.Segments(s)
	for _, seg := range segments {
		for _, side := range []exam.Site{exam.Left, exam.Right} {
			b.targets = append(b.targets, Target{SegmentTarget, seg.String(), side})
		}
	}
	limbs := len(b.targets)
	for _, l := range exam.Limbs() {
		b.targets = append(b.targets, Target{LimbTarget, l.String(), exam.NoSite})
	}
	regions := map[localise.Region]int{}
	for _, site := range b.sites {
		if site.Region != localise.NoRegion {
			regions[site.Region] = 0
		}
	}
	for r := localise.C1C5; r <= localise.NoRegion; r++ {
		if _, ok := regions[r]; ok {
			regions[r] = len(b.targets) - limbs - len(exam.Limbs())
			b.targets = append(b.targets, Target{RegionTarget, r.String(), exam.NoSite})
		}
	}
	total := 0.0
	for i, site := range b.sites {
		b.all = append(b.all, i)
		b.prior = append(b.prior, site.Prior)
		total += site.Prior
		r, ok := regions[site.Region]
		if !ok {
			r = -1
		}
		b.region = append(b.region, r)
		b.class[site.Class] = append(b.class[site.Class], i)
		b.shares = append(b.shares, b.segmentShares(i, len(segments)))
		if r >= 0 {
			sh := Share{Target: limbs + len(exam.Limbs()) + r}
			for k := range Levels {
				sh.Damage[k] = float64(k) * spacing
			}
			b.shares[i] = append(b.shares[i], sh)
		}
	}
	for i := range b.prior {
		b.prior[i] /= total
	}
	if err := b.limbShares(s, limbs); err != nil {
		return nil, err
	}
	b.neighbours(s)
	b.watched()
	b.reader = newReader(&localised{body: b})
	return b, nil
}

// segmentShares spreads the damage of the grid's steps evenly onto the levels.
func (b *body) segmentShares(site, segments int) []Share {
	var out []Share
	grid := localise.Grid()
	steps := make([][][2]float64, len(grid))
	for k := range grid {
		steps[k] = b.m.SiteDamage(site, k)
	}
	for seg := range segments {
		for side := range 2 {
			if steps[len(grid)-1][seg][side] <= 0 {
				continue
			}
			at := make([]float64, len(grid))
			for k := range grid {
				at[k] = steps[k][seg][side]
			}
			out = append(out, Share{Target: 2*seg + side, Damage: spread(grid, at)})
		}
	}
	return out
}

// spread interpolates a rising function of severity from the grid of localisation onto the levels.
func spread(grid, at []float64) (out [Levels]float64) {
	k := 0
	for l := range Levels {
		s := math.Min(1, float64(l)*spacing)
		for k+2 < len(grid) && s > grid[k+1] {
			k++
		}
		w := (s - grid[k]) / (grid[k+1] - grid[k])
		out[l] = at[k] + float64(w*(at[k+1]-at[k]))
		if l > 0 {
			out[l] = math.Max(out[l], out[l-1])
		}
	}
	return out
}

// limbShares asks the localisation model how each place at each severity shows in the voluntary
// movement of each limb: the loss of the expected grade, from that of a sound animal (0) to the
// least that any place causes (1).
func (b *body) limbShares(s exam.Species, first int) error {
	w := b.m.Weigher()
	n := localise.GridSize
	in := exam.VoluntaryMotor.Info()
	expected := make([][]float64, 4)
	least := math.Inf(1)
	var ll []float64
	var err error
	for l, limb := range exam.Limbs() {
		expected[l] = make([]float64, len(b.sites)*n)
		mass := make([]float64, len(b.sites)*n)
		for g := in.First; g <= exam.VoluntaryMotor.Last(); g++ {
			x := localise.Exam{Species: s, OnsetDays: 60, Findings: []exam.Finding{{Item: exam.VoluntaryMotor, Site: limb, Result: exam.Graded(g)}}}
			if ll, err = w.LogLikelihoods(x, b.all, ll); err != nil {
				return err
			}
			for i, v := range ll {
				p := exp(v)
				mass[i] += p
				expected[l][i] += p * float64(g)
			}
		}
		for i := range mass {
			expected[l][i] /= mass[i]
			least = math.Min(least, expected[l][i])
		}
	}
	grid := localise.Grid()
	for i := range b.sites {
		for l := range expected {
			at := expected[l][i*n : (i+1)*n]
			loss := make([]float64, n)
			for k := range loss {
				loss[k] = math.Max(0, (at[0]-at[k])/(at[0]-least))
				if k > 0 {
					loss[k] = math.Max(loss[k], loss[k-1])
				}
			}
			if loss[n-1] > 0.02 {
				b.shares[i] = append(b.shares[i], Share{Target: first + l, Damage: spread(grid, loss)})
			}
		}
	}
	return nil
}

// neighbours lets a lesion of the cord grow by one segment at either end.
func (b *body) neighbours(species exam.Species) {
	type span struct {
		from, to anatomy.Segment
		side     localise.Side
	}
	index := map[span]int{}
	for i, s := range b.sites {
		if s.Kind == localise.Cord {
			index[span{s.From, s.To, s.Side}] = i
		}
	}
	b.near = make([][]int, len(b.sites))
	for i, s := range b.sites {
		if s.Kind != localise.Cord {
			continue
		}
		from, to := anatomy.Index(species, s.From), anatomy.Index(species, s.To)
		for _, next := range [][2]int{{from - 1, to}, {from, to + 1}} {
			if next[0] < 0 {
				continue
			}
			if k, ok := index[span{anatomy.At(species, next[0]), anatomy.At(species, next[1]), s.Side}]; ok && k != i {
				b.near[i] = append(b.near[i], k)
			}
		}
	}
}

// watched picks the likeliest place of each class that is not rare: a new lesion shows there first.
func (b *body) watched() {
	for _, places := range b.class {
		best, sum := places[0], 0.0
		for _, p := range places {
			sum += b.prior[p]
			if b.prior[p] > b.prior[best] {
				best = p
			}
		}
		if sum >= 0.0015 {
			b.watch = append(b.watch, best)
		}
	}
	slices.Sort(b.watch)
}

func (s *localised) Targets() []Target         { return s.targets }
func (s *localised) Sites() int                { return len(s.sites) }
func (s *localised) Prior(site int) float64    { return s.prior[site] }
func (s *localised) Region(site int) int       { return s.region[site] }
func (s *localised) Shares(site int) []Share   { return s.shares[site] }
func (s *localised) Neighbours(site int) []int { return s.near[site] }

// Candidates returns every place at the first visits. Later it is one place for each part of the
// body, and every place of the classes that explain this exam about as well as the best does.
func (s *localised) Candidates(v exam.Visit, wide bool) []int {
	if wide {
		return s.all
	}
	const close = 6.0 // e⁶ = 400 : 1
	n := localise.GridSize
	ll, err := s.weigher.LogLikelihoods(localise.OfVisit(s.patient, v), s.watch, s.steps)
	s.steps = ll
	if err != nil {
		return s.watch
	}
	top := slices.Max(ll)
	out := slices.Clone(s.watch)
	for i, w := range s.watch {
		if slices.Max(ll[i*n:(i+1)*n]) > top-close {
			out = append(out, s.class[s.sites[w].Class]...)
		}
	}
	slices.Sort(out)
	return slices.Compact(out)
}

// LogLikelihoods asks the localisation model at its own steps of severity and interpolates: a
// monotone cubic (Fritsch and Butland), which makes no new peaks.
func (s *localised) LogLikelihoods(v exam.Visit, sites []int, dst []float64) {
	n := localise.GridSize
	ll, err := s.weigher.LogLikelihoods(localise.OfVisit(s.patient, v), sites, s.steps)
	s.steps = ll
	if err != nil {
		clear(dst)
		return
	}
	grid := localise.Grid()
	for i := range sites {
		out := dst[i*Levels : (i+1)*Levels]
		if s.fit.Fit(grid, ll[i*n:(i+1)*n]) != nil {
			clear(out)
			continue
		}
		for k := range out {
			out[k] = s.fit.Predict(math.Min(1, float64(k)*spacing))
		}
	}
}

// AtLeast asks the localisation model for the grades of one item at one site.
func (s *localised) AtLeast(item exam.Item, at exam.Site, target int8, sites []int) []float64 {
	n := localise.GridSize
	in := item.Info()
	out := make([]float64, len(sites)*Levels)
	good, all := make([]float64, len(sites)*n), make([]float64, len(sites)*n)
	x := localise.OfVisit(s.patient, exam.Visit{})
	near := func(g int8) int8 { return max(g-in.Normal, in.Normal-g) }
	for k := range in.Grades {
		g := in.First + int8(k)
		x.Findings = []exam.Finding{{Item: item, Site: at, Result: exam.Graded(g)}}
		ll, err := s.weigher.LogLikelihoods(x, sites, s.steps)
		s.steps = ll
		if err != nil {
			return out
		}
		for i, v := range ll {
			p := exp(v)
			all[i] += p
			if near(g) <= near(target) {
				good[i] += p
			}
		}
	}
	grid := localise.Grid()
	for i := range sites {
		share := make([]float64, n)
		for k := range share {
			share[k] = 1 - good[i*n+k]/all[i*n+k] // rises with severity
		}
		for l, v := range spread(grid, share) {
			out[i*Levels+l] = 1 - v
		}
	}
	return out
}
