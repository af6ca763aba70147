package progress

import (
	"math"
	"slices"
	"sync"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
	"cordwalk.example/cordwalk/exam/localise"
)

// body is what the localisation model says of a species, laid out for courses. It is made
// once and only read.
type body struct {
	species exam.Species
	m       *localise.Model // of those sites only
	sites   []localise.Site // those that a course is weighed at
	prior   []float64
	targets []Target
	region  []int
	shares  [][]Share
	near    [][]int
	all     []int
	watch   []int         // one place for each part of the body: is something new there?
	class   map[int][]int // places by class
	goals   sync.Map      // goalKey → []float64: chance by place and level

	cells    sync.Map // exam.Key → []float64: see wholeness
	marginal sync.Mutex
	maker    *localise.Weigher // for tables, under the mutex once the body is made
	reader   *reader
	clock    *clock
}

// localised is the Space of one animal.
type localised struct {
	*body
	patient exam.Patient
	weigher *localise.Weigher
	steps   []float64

	tested, wholeOf []exam.Key
	whole           []float64 // wholeness of wholeOf
}

// goalKey names a table of AtLeast.
type goalKey struct {
	item   exam.Item
	at     exam.Site
	target int8
}

var bodies sync.Map // exam.Species → func() (*body, error)

func bodyOf(s exam.Species) (*body, error) {
	f, _ := bodies.LoadOrStore(s, sync.OnceValues(func() (*body, error) { return newBody(s) }))
	return f.(func() (*body, error))()
}

// Forget lets go of what is kept for all courses of a species, tens of megabytes. Models at work keep
// theirs; the next call of For makes it anew, which takes some hundredths of a second while
// localise still has the species' tables.
func Forget(s exam.Species) { bodies.Delete(s) }

// For returns the model of an animal's course. The error is a *localise.Unsupported for a
// species whose cord is not on record in the detail that localisation needs.
func For(p exam.Patient) (*Model, error) {
	b, err := bodyOf(p.Species)
	if err != nil {
		return nil, err
	}
	rates := DefaultRates()
	space := &localised{body: b, patient: p, weigher: b.maker.Another()}
	m := newModel(space, rates)
	m.clock, m.reader = b.clock, b.reader.share()
	return m, nil
}

func newBody(s exam.Species) (*body, error) {
	all, err := localise.SitesOf(s)
	if err != nil {
		return nil, err
	}
	b := &body{species: s, clock: newClock(DefaultRates())}
	if b.m, err = localise.ForCourses(s, b.choose(all)); err != nil {
		return nil, err
	}
	for i := range b.sites {
		b.all = append(b.all, i)
	}
	b.maker = b.m.Weigher(b.all)
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
		total += b.prior[i]
		r, ok := regions[site.Region]
		if !ok {
			r = -1
		}
		b.region = append(b.region, r)
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
	b.neighbours()
	b.watched()
	b.reader = newReader(&localised{body: b})
	return b, nil
}

// segmentShares spreads the damage of the grid's steps evenly onto the levels.
func (b *body) segmentShares(site, segments int) []Share {
	var out []Share
	grid := localise.CourseGrid()
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
	w := b.maker.Another()
	n := len(knotSteps)
	in := exam.VoluntaryMotor.Info()
	expected := make([][]float64, 4)
	least := math.Inf(1)
	var ll []float64
	var err error
	for l, limb := range exam.Limbs() {
		expected[l] = make([]float64, len(b.sites)*n)
		mass := make([]float64, len(b.sites)*n)
		for g := in.First; g <= exam.VoluntaryMotor.Last(); g++ {
			x := localise.Exam{Species: s, OnsetDays: settledDays, Findings: []exam.Finding{{Item: exam.VoluntaryMotor, Site: limb, Result: exam.Graded(g)}}}
			if ll, err = w.LogLikelihoods(x, ll); err != nil {
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
	grid := localise.CourseGrid()
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

// neighbours lets a lesion of the cord grow: one of two segments reaches one segment further
// cranially or caudally, or becomes a long one around its place.
func (b *body) neighbours() {
	type span struct {
		from, length int
		side         localise.Side
	}
	index := map[span]int{}
	of := func(s localise.Site) span {
		from := anatomy.Index(b.species, s.From)
		return span{from, anatomy.Index(b.species, s.To) - from + 1, s.Side}
	}
	for i, s := range b.sites {
		if s.Kind == localise.Cord {
			index[of(s)] = i
		}
	}
	b.near = make([][]int, len(b.sites))
	for i, s := range b.sites {
		if s.Kind != localise.Cord {
			continue
		}
		at := of(s)
		next := []span{{at.from - 1, at.length, at.side}, {at.from + 1, at.length, at.side}}
		if at.length == cordLengths[0] {
			next = append(next, span{(at.from - 3) &^ 1, cordLengths[1], at.side})
		}
		for _, n := range next {
			if k, ok := index[n]; ok {
				b.near[i] = append(b.near[i], k)
			}
		}
		slices.Sort(b.near[i])
	}
}

// watched picks the likeliest place of each class that is not rare, and of every stretch of the cord:
// a new lesion shows there first.
func (b *body) watched() {
	b.class = map[int][]int{}
	for i, s := range b.sites {
		b.class[s.Class] = append(b.class[s.Class], i)
	}
	for _, places := range b.class {
		best, sum := places[0], 0.0
		for _, p := range places {
			sum += b.prior[p]
			if b.prior[p] > b.prior[best] {
				best = p
			}
		}
		cord := b.sites[best].Kind == localise.Cord && b.sites[best].From.Region() != exam.RegionCd
		if sum >= 0.005 || cord {
			b.watch = append(b.watch, best)
		}
	}
	slices.Sort(b.watch)
}

// cordLengths are the lengths in segments of the lesions of the cord that courses are weighed
// at. Exams seldom tell one, two and four segments apart, so two stand for all of them; a
// long lesion stands for diffuse disease.
var cordLengths = [...]int{2, 8}

// choose picks the places that a course is weighed at: for lesions of the cord two lengths, and
// else whatever the exams of weeks can tell apart. What is left out gives its prior to
// what is kept of its class.
func (b *body) choose(sites []localise.Site) (chosen []int) {
	species := b.species
	kept, all := map[int]float64{}, map[int]float64{}
	for i, s := range sites {
		all[s.Class] += s.Prior
		keep := true
		switch s.Kind {
		case localise.Cord:
			keep = slices.Contains(cordLengths[:], anatomy.Index(species, s.To)-anatomy.Index(species, s.From)+1)
		case localise.Root, localise.Nerve:
			keep = s.Side != localise.Even && s.Prior >= 0.0003
		case localise.PainOnly:
			keep = s.Side == localise.Even
		case localise.CaudaEquina:
			keep = s.Side == localise.Even || s.Side == localise.LeftWorse || s.Side == localise.RightWorse
		}
		if keep {
			kept[s.Class] += s.Prior
			b.sites, chosen = append(b.sites, s), append(chosen, i)
		}
	}
	for _, s := range b.sites {
		b.prior = append(b.prior, s.Prior*all[s.Class]/kept[s.Class])
	}
	return chosen
}

func (s *localised) Targets() []Target         { return s.targets }
func (s *localised) Sites() int                { return len(s.sites) }
func (s *localised) Prior(site int) float64    { return s.prior[site] }
func (s *localised) Region(site int) int       { return s.region[site] }
func (s *localised) Shares(site int) []Share   { return s.shares[site] }
func (s *localised) Neighbours(site int) []int { return s.near[site] }

// Candidates returns every place where much may be new. Else it is one place for each part of the
// body, and every place of a part that has no place among the carried and explains this exam better
// than theirs do.
func (s *localised) Candidates(v exam.Visit, carried []int, wide bool) []int {
	if wide {
		return s.all
	}
	const clearly = 1.0 // e = 2.7 : 1
	n := len(knotSteps)
	ll, err := s.weigher.Some(localise.OfVisit(s.patient, v), s.watch, s.steps)
	s.steps = ll
	if err != nil {
		return s.watch
	}
	open := map[int]bool{}
	for _, c := range carried {
		open[s.sites[c].Class] = true
	}
	// Step 0, the sound animal, is the same everywhere.
	explained := math.Inf(-1)
	for i, w := range s.watch {
		if open[s.sites[w].Class] {
			explained = math.Max(explained, slices.Max(ll[i*n+1:(i+1)*n]))
		}
	}
	out := slices.Clone(s.watch)
	for i, w := range s.watch {
		if !open[s.sites[w].Class] && slices.Max(ll[i*n+1:(i+1)*n]) > explained+clearly {
			out = append(out, s.class[s.sites[w].Class]...)
		}
	}
	slices.Sort(out)
	return slices.Compact(out)
}

// LogLikelihoods asks the localisation model at its own steps of severity and interpolates.
func (s *localised) LogLikelihoods(v exam.Visit, sites []int, dst []float64) {
	n := len(knotSteps)
	ll, err := s.weigher.Some(localise.OfVisit(s.patient, v), sites, s.steps)
	s.steps = ll
	if err != nil {
		clear(dst)
		return
	}
	best := math.Inf(-1)
	for _, l := range ll {
		best = math.Max(best, l)
	}
	whole := s.wholeness(v)
	for i, site := range sites {
		out := dst[i*Levels : (i+1)*Levels]
		interpolate(ll[i*n:(i+1)*n], whole[site*Levels:(site+1)*Levels], out, best-hopeless)
	}
}

// hopeless is how far below the best place, in nats, a place need not be worked out: e⁻⁶⁰.
const hopeless = 60

// knotSteps are the severities at which the localisation model is asked.
var knotSteps = localise.CourseGrid()

// knot is where a level lies between two steps of the localisation's grid.
type knot struct {
	step   int
	weight float64 // of the next step
}

var knots = func() (out [Levels]knot) {
	grid := knotSteps
	k := 0
	for l := range Levels {
		x := math.Min(1, float64(l)*spacing)
		for k+2 < len(grid) && x > grid[k+1]+1e-9 {
			k++
		}
		weight := (x - grid[k]) / (grid[k+1] - grid[k])
		out[l] = knot{k, math.Max(0, math.Min(1, math.Round(weight*1e9)/1e9))}
	}
	return out
}()

// interpolate spreads log-likelihoods from the steps of localisation onto the levels, linearly, less
// what such a mixture of logarithms falls short of a probability. A place that lies
// below the floor at every step is set to the floor.
func interpolate(at, whole, out []float64, floor float64) {
	top := at[0]
	for _, v := range at {
		top = math.Max(top, v)
	}
	if top < floor {
		for l := range out {
			out[l] = floor
		}
		return
	}
	for l := range out {
		k := &knots[l]
		out[l] = float64((1-k.weight)*at[k.step]) + float64(k.weight*at[k.step+1]) - whole[l]
	}
}

// wholeness adds up, for every place and level, how far the interpolated probabilities of the
// tested cells fall short of 1, as logarithms. Between two steps a grade's logarithm lies on the
// line between theirs, and the grades' probabilities then add up to less than 1; without this
// the levels between the steps would seem unlikely whatever was seen.
func (s *localised) wholeness(v exam.Visit) []float64 {
	s.tested = s.tested[:0]
	for _, f := range v.Findings {
		if f.Result.Tested() {
			s.tested = append(s.tested, f.Key())
		}
	}
	if s.whole != nil && slices.Equal(s.tested, s.wholeOf) {
		return s.whole
	}
	if s.whole == nil {
		s.whole = make([]float64, len(s.sites)*Levels)
	}
	clear(s.whole)
	for _, k := range s.tested {
		for i, z := range s.body.wholeness(k) {
			s.whole[i] += float64(hangTogether * z)
		}
	}
	s.wholeOf = append(s.wholeOf[:0], s.tested...)
	return s.whole
}

// hangTogether: tests of one arc err together, so that all of them fall less short of 1 than
// the cells by themselves do. Half is a mean; between steps of a tenth it decides little, where it decided how
// bands held between steps of a quarter.
const hangTogether = 0.5

// wholeness works one cell out, once for every animal.
func (b *body) wholeness(key exam.Key) []float64 {
	if z, ok := b.cells.Load(key); ok {
		return z.([]float64)
	}
	b.marginal.Lock()
	p, cats := b.maker.Marginal(key)
	b.marginal.Unlock()
	out := make([]float64, 0, len(b.sites)*Levels)
	n := len(knotSteps)
	if p != nil {
		ln := make([]float64, len(p))
		for i, v := range p {
			ln[i] = math.Log(math.Max(v, 1e-12))
		}
		out = out[:cap(out)]
		for i := range b.sites {
			for l := range Levels {
				k := &knots[l]
				if k.weight == 0 || k.weight == 1 {
					continue
				}
				from, to := ln[(i*n+k.step)*cats:(i*n+k.step+1)*cats], ln[(i*n+k.step+1)*cats:(i*n+k.step+2)*cats]
				sum := 0.0
				for g := range from {
					sum += exp(float64((1-k.weight)*from[g]) + float64(k.weight*to[g]))
				}
				out[i*Levels+l] = math.Round(math.Log(sum)*(1<<30)) / (1 << 30)
			}
		}
	}
	z, _ := b.cells.LoadOrStore(key, out)
	return z.([]float64)
}

// AtLeast asks the localisation model for the grades of one item at one site.
func (s *localised) AtLeast(item exam.Item, at exam.Site, target int8, sites []int) []float64 {
	key := goalKey{item, at, target}
	table, ok := s.goals.Load(key)
	if !ok {
		table, _ = s.goals.LoadOrStore(key, s.atLeast(key))
	}
	all := table.([]float64)
	out := make([]float64, 0, len(sites)*Levels)
	for _, site := range sites {
		out = append(out, all[site*Levels:(site+1)*Levels]...)
	}
	return out
}

func (b *body) atLeast(key goalKey) []float64 {
	n := len(knotSteps)
	in := key.item.Info()
	near := func(g int8) int8 { return max(g-in.Normal, in.Normal-g) }
	good, all := make([]float64, len(b.sites)*n), make([]float64, len(b.sites)*n)
	w := b.maker.Another()
	for k := range in.Grades {
		g := in.First + int8(k)
		ll, err := w.LogLikelihoods(localise.Exam{Species: b.species, OnsetDays: settledDays, Findings: []exam.Finding{{Item: key.item, Site: key.at, Result: exam.Graded(g)}}}, nil)
		if err != nil {
			break
		}
		for i, v := range ll {
			p := exp(v)
			all[i] += p
			if near(g) <= near(key.target) {
				good[i] += p
			}
		}
	}
	out := make([]float64, len(b.sites)*Levels)
	grid := localise.CourseGrid()
	for i := range b.sites {
		share := make([]float64, n)
		for k := range share {
			share[k] = 1 - good[i*n+k]/math.Max(all[i*n+k], 1e-300) // rises with severity
		}
		for l, v := range spread(grid, share) {
			out[i*Levels+l] = 1 - v
		}
	}
	return out
}

// settledDays after the onset, what is peculiar to the first week is over.
const settledDays = 60
