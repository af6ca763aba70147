package demo

import (
	"math/rand/v2"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
)

// half is the damage of one segment on one side, each 0 (none) to 1 (nothing works).
type half struct {
	grey  float64 // motor neurons and their reflex arcs
	root  float64 // roots, plexus or nerve: as grey, and what is felt goes too
	down  float64 // descending motor path through this segment
	up    float64 // ascending path of position
	touch float64 // superficial pain path
	deep  float64 // deep pain path
}

// body is the true state of an animal on a day: what a perfect examiner would know. It is
// a crude stand-in for an animal (a choice of this program, not a model of disease), rich
// enough that damage in one place gives the signs of anatomy.md G.
type body struct {
	species  exam.Species
	segments []anatomy.Segment
	cord     [2][]half // left, right
	pain     map[exam.Site]float64
	mass     map[exam.Key]float64 // bulk of muscles, 0 to 1; it follows the damage slowly
}

func newBody(s exam.Species) *body {
	b := &body{species: s, segments: anatomy.Segments(s), pain: map[exam.Site]float64{}, mass: map[exam.Key]float64{}}
	for side := range b.cord {
		b.cord[side] = make([]half, len(b.segments))
	}
	return b
}

// lesion is damage over a run of segments, as a share of full damage on each side.
type lesion struct {
	from, to    string
	left, right half
}

// set puts lesions into the body, scaled by a severity for each.
func (b *body) set(lesions []lesion, severity []float64) {
	for side := range b.cord {
		clear(b.cord[side])
	}
	for i, l := range lesions {
		from, to := b.at(l.from), b.at(l.to)
		for k := from; k <= to; k++ {
			for side, h := range [2]half{l.left, l.right} {
				c := &b.cord[side][k]
				s := severity[i]
				c.grey = both(c.grey, s*h.grey)
				c.root = both(c.root, s*h.root)
				c.down = both(c.down, s*h.down)
				c.up = both(c.up, s*h.up)
				c.touch = both(c.touch, s*h.touch)
				c.deep = both(c.deep, s*h.deep)
			}
		}
	}
}

func (b *body) at(name string) int {
	seg, err := anatomy.ParseSegment(name, b.species)
	if err != nil {
		panic("demo: a course names no segment of the species: " + name)
	}
	return anatomy.Index(b.species, seg)
}

// both is the loss that two independent losses leave.
func both(x, y float64) float64 { return 1 - float64((1-x)*(1-y)) }

func sideIndex(s exam.Site) int {
	if s.Side() == exam.Right {
		return 1
	}
	return 0
}

// lost returns the share of an item's arc that is lost at a site; felt counts only what
// carries sensation (roots, not motor neurons).
func (b *body) lost(i exam.Item, site exam.Site, felt bool) float64 {
	ws := anatomy.ArcOf(b.species, i, site)
	sum, total := 0.0, 0.0
	for _, w := range ws {
		k := anatomy.Index(b.species, w.Segment)
		if k < 0 {
			continue
		}
		var l float64
		one := func(side int) float64 {
			h := b.cord[side][k]
			if felt {
				return h.root
			}
			return both(h.grey, h.root)
		}
		if site.Side() == exam.Midline {
			l = (one(0) + one(1)) / 2
		} else {
			l = one(sideIndex(site))
		}
		sum += float64(w.Weight * l)
		total += w.Weight
	}
	if total == 0 {
		return 0
	}
	return sum / total
}

// above returns the loss of a path on a side between the brain and the first segment of
// a limb or of the tail: the worst place rules (paths are lines, not sums).
func (b *body) above(side int, until string, path func(half) float64) float64 {
	worst := 0.0
	for k := 0; k < b.at(until); k++ {
		worst = max(worst, path(b.cord[side][k]))
	}
	return worst
}

func girdle(site exam.Site) string {
	if site.IsThoracic() {
		return "C6"
	}
	return "L4"
}

func (b *body) down(site exam.Site) float64 {
	return b.above(sideIndex(site), girdle(site), func(h half) float64 { return h.down })
}

func (b *body) up(site exam.Site) float64 {
	return b.above(sideIndex(site), girdle(site), func(h half) float64 { return h.up })
}

// limbLoss is the loss of a limb's own motor supply: tone's arc, the whole enlargement.
func (b *body) limbLoss(site exam.Site) float64 { return b.lost(exam.Tone, site, false) }

// strength of a limb, 0 to 1.
func (b *body) strength(site exam.Site) float64 {
	return float64((1 - b.down(site)) * (1 - b.limbLoss(site)))
}

// settle lets muscles follow for a number of days: towards what their nerve leaves them,
// in weeks, and a little towards disuse (common practice: loss is seen from the first to
// second week on, and comes back more slowly).
func (b *body) settle(days int) {
	for _, i := range masses(b.species) {
		for _, site := range []exam.Site{exam.Left, exam.Right} {
			k := exam.Key{Item: i, Site: site}
			if _, ok := b.mass[k]; !ok {
				b.mass[k] = 1
			}
			limb := limbOf(i, site)
			target := 1 - float64(0.95*b.lost(i, site, false)) - float64(0.2*(1-b.strength(limb)))
			rate := 0.06
			if target > b.mass[k] {
				rate = 0.02
			}
			for range days {
				b.mass[k] += float64(rate * (target - b.mass[k]))
			}
		}
	}
}

// masses are the muscles examined.
func masses(exam.Species) []exam.Item {
	return []exam.Item{exam.MassSupraspinatus, exam.MassBiceps, exam.MassTriceps, exam.MassForearmFlexors,
		exam.MassQuadriceps, exam.MassHamstrings, exam.MassGluteals, exam.MassCranialTibial, exam.MassGastrocnemius}
}

func limbOf(i exam.Item, side exam.Site) exam.Site {
	thoracic := i < exam.MassQuadriceps
	switch {
	case thoracic && side == exam.Left:
		return exam.ThoracicLeft
	case thoracic:
		return exam.ThoracicRight
	case side == exam.Left:
		return exam.PelvicLeft
	}
	return exam.PelvicRight
}

// reader turns true states into grades the way an examiner does: on the item's scale,
// with a share of scatter around the edge between two grades and now and then a slip.
type reader struct{ rng *rand.Rand }

// Scatter of one reading in grades, and the share of plain slips (progression.md: two
// raters agree on about 88 % of gait scores and 96 % of reflexes; a choice in that range).
const (
	scatter = 0.16
	slips   = 0.006
)

// bell is a value around 0 with a standard deviation of 1: the sum of twelve even ones, so
// that every machine computes the same bits.
func (r reader) bell() float64 {
	x := -6.0
	for range 12 {
		x += r.rng.Float64()
	}
	return x
}

// grade reads a latent value on the item's scale.
func (r reader) grade(i exam.Item, latent float64) int8 {
	x := latent + float64(scatter*r.bell())
	in := i.Info()
	g := in.First
	for k := in.First + 1; k <= i.Last(); k++ {
		if x >= float64(k)-0.5 {
			g = k
		}
	}
	if r.rng.Float64() < slips {
		if g < i.Last() && (g == in.First || r.rng.IntN(2) == 0) {
			g++
		} else if g > in.First {
			g--
		}
	}
	return g
}

// steps maps a share onto grades by cut points: the latent value lies midway between the
// grades where the share meets a cut.
func steps(x float64, cuts ...float64) float64 {
	low := 0.0
	for k, c := range cuts {
		if x < c {
			return float64(k) - 0.5 + (x-low)/(c-low)
		}
		low = c
	}
	return float64(len(cuts)) - 0.5 + float64(0.5*min(1, (x-low)/(1-low+1e-9))) + 0.1
}

// latent returns the value on the item's scale that a perfect examiner would read between
// the lines, and false where the item says nothing in this state.
func (b *body) latent(i exam.Item, site exam.Site) (float64, bool) {
	switch i {
	case exam.VoluntaryMotor:
		return steps(b.strength(site), 0.07, 0.35, 0.66, 0.93), true
	case exam.Ambulation:
		weak := min(b.pair(exam.ThoracicLeft, exam.ThoracicRight), b.pair(exam.PelvicLeft, exam.PelvicRight))
		return steps(weak, 0.12, 0.42), true
	case exam.Ataxia:
		if b.strength(site) < 0.1 {
			return 0, false
		}
		return steps(b.up(site), 0.12, 0.38, 0.7), true
	case exam.PawPlacement, exam.TactilePlacing:
		loss := max(b.up(site), b.lost(i, site, true), float64(0.7*b.lost(i, site, false)), float64(0.9*b.down(site)))
		return steps(1-loss, 0.35, 0.8), true
	case exam.Hopping, exam.ExtensorThrust, exam.Wheelbarrow:
		loss := max(b.up(site), b.lost(i, site, true), float64(0.8*b.lost(i, site, false)), b.down(site))
		return steps(1-loss, 0.3, 0.82), true
	case exam.Knuckling:
		if b.strength(site) < 0.3 {
			return 0, false
		}
		loss := max(float64(0.9*b.up(site)), b.lost(exam.PawPlacement, site, false), b.lost(exam.PawPlacement, site, true))
		return steps(1-loss, 0.25, 0.55, 0.82), true
	case exam.Stance:
		return steps(1-b.lost(i, site, false), 0.35, 0.75), true
	case exam.Lameness:
		l := b.limbLoss(site)
		if site.IsPelvic() {
			l = max(l, float64(0.45*b.pain[exam.Lumbosacral]/3))
		} else {
			l = max(l, float64(0.4*b.pain[exam.Cervical]/3))
		}
		return steps(l, 0.15, 0.32, 0.55, 0.85), true
	case exam.Tone:
		l, u := b.limbLoss(site), b.down(site)
		return 2 + float64(1.1*u*(1-l)) - float64(2.2*l), true
	case exam.Biceps, exam.Triceps, exam.ExtensorCarpi, exam.Gastrocnemius, exam.CranialTibial, exam.Patellar:
		l, u := b.lost(i, site, false), b.down(site)
		x := 2 + float64(1.15*u*(1-l)) - float64(2.5*l)
		if i == exam.Patellar {
			// The antagonists of the quadriceps are lost: the reflex looks brisk (anatomy.md F5).
			x += float64(0.7 * b.lost(exam.WithdrawalStifle, site, false) * (1 - l))
		}
		if i == exam.Biceps || i == exam.Triceps {
			x -= 0.12 // hard to obtain in sound animals too (anatomy.md F1)
		}
		return x, true
	case exam.Withdrawal, exam.WithdrawalHip, exam.WithdrawalStifle, exam.WithdrawalHock, exam.WithdrawalDigits,
		exam.WithdrawalShoulder, exam.WithdrawalElbow, exam.WithdrawalCarpus:
		return 2 - float64(2.3*both(b.lost(i, site, false), float64(0.6*b.lost(i, site, true)))), true
	case exam.Perineal, exam.AnalTone:
		return 2 - float64(2.3*b.lost(i, site, false)), true
	case exam.TailTone:
		return 2 - float64(2.3*b.lost(i, site, false)), true
	case exam.TailMovement:
		u := (b.above(0, "Cd1", downPath) + b.above(1, "Cd1", downPath)) / 2
		return 1 - float64(1.2*max(b.lost(exam.TailTone, exam.Midline, false), u-0.3)), true
	case exam.SuperficialPain:
		path := b.above(sideIndex(site), feltAt(site), func(h half) float64 { return h.touch })
		return 2 - float64(2.3*max(path, b.lost(exam.SuperficialPain, site, true))), true
	case exam.DeepPain:
		l := b.above(0, feltAt(site), func(h half) float64 { return h.deep })
		r := b.above(1, feltAt(site), func(h half) float64 { return h.deep })
		return 2 - float64(2.3*max(min(l, r), b.lost(exam.SuperficialPain, site, true))), true
	case exam.SensationRadial, exam.SensationUlnar, exam.SensationMusculocutaneous, exam.SensationAxillary,
		exam.SensationSaphenous, exam.SensationFibular, exam.SensationTibial, exam.SensationPudendal:
		until := "L4"
		if i <= exam.SensationAxillary {
			until = "C6"
		}
		path := b.above(sideIndex(site), until, func(h half) float64 { return h.touch })
		return 2 - float64(2.3*max(path, b.lost(i, site, true))), true
	case exam.SpinalPain:
		return b.pain[site], true
	case exam.LumbosacralExtension, exam.TailLift:
		p := b.pain[exam.Lumbosacral]
		if i == exam.TailLift {
			p = max(float64(0.8*p), b.pain[exam.Sacrocaudal])
		}
		return p, true
	case exam.NeckCarriage:
		return 2 - float64(0.6*b.pain[exam.Cervical]), true
	case exam.VoluntaryUrination:
		u := (b.above(0, "S1", downPath) + b.above(1, "S1", downPath)) / 2
		return steps(1-max(float64(0.95*u), b.lost(i, site, false)), 0.25, 0.7), true
	case exam.BladderFill:
		u := (b.above(0, "S1", downPath) + b.above(1, "S1", downPath)) / 2
		l := b.lost(exam.VoluntaryUrination, site, false)
		switch {
		case l > 0.4:
			return 1, true
		case u > 0.6:
			return 0.2, true
		}
		return 2, true
	case exam.UrineLeak:
		return steps(b.lost(i, site, false), 0.4, 0.8), true
	case exam.FaecalContinence:
		return 2 - float64(2.2*b.lost(i, site, false)), true
	case exam.Horner:
		k := b.at("T1")
		loss := max(b.cord[sideIndex(site)][k].grey, b.cord[sideIndex(site)][k].root)
		return steps(loss, 0.35, 0.75), true
	}
	if m, ok := b.mass[exam.Key{Item: i, Site: site}]; ok {
		return steps(m, 0.42, 0.68, 0.87), true
	}
	return float64(i.Info().Normal), i.Info().Normal >= 0
}

func downPath(h half) float64 { return h.down }

// feltAt names the first segment of the arc at which a place is felt.
func feltAt(site exam.Site) string {
	switch {
	case site.IsThoracic():
		return "C6"
	case site.IsPelvic():
		return "L4"
	case site == exam.Perineum:
		return "S1"
	}
	return "S3"
}

// pair is the strength of two limbs that carry an end of the animal: a sound one helps a
// weak one.
func (b *body) pair(l, r exam.Site) float64 {
	x, y := b.strength(l), b.strength(r)
	return float64(0.65*max(x, y)) + float64(0.35*min(x, y))
}

// trunci returns the cutaneous trunci of a side: its grade and level.
func (b *body) trunci(side exam.Site, r reader) (int8, exam.Vertebra) {
	k := sideIndex(side)
	if loss := b.lost(exam.CutaneousTrunci, side, false); loss > 0.6 {
		return 0, 0
	}
	for s := b.at("T3"); s <= b.at("L3"); s++ {
		if h := b.cord[k][s]; max(h.touch, h.up) > 0.55 {
			// The cut-off lies two or three vertebrae caudal to the lesion (GQ-2012).
			seg := b.segments[s]
			v := exam.NewVertebra(seg.Region(), seg.Number())
			at := exam.VertebraIndex(b.species, v) + 2 + r.rng.IntN(2)
			list := exam.Vertebrae(b.species)
			if at < len(list) {
				return 1, list[at]
			}
		}
	}
	return 2, 0
}
