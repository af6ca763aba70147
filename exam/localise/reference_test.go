package localise

import (
	"math"
	"math/rand/v2"
	"sort"
	"testing"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
)

// The slow reference: the stated space enumerated and summed anew, with package math, floats
// and maps by segment name. It shares with the engine the numbers (Params, the weights of
// nerves, the grid), the anatomy, and the table of which losses each item answers to
// (state.latent); enumeration, damage, losses of arcs and paths, grades, quadrature, mixture
// of blocks, context, label and sums are its own.

// refLesion is one lesion at its severity.
type refLesion struct {
	kind     Kind
	from, to string // segments
	side     Side
	part     part
	nerve    nerveID
	severity float64
	vertebra int
	first    int // index of from
	last     int
}

// refHypothesis is one point of the space.
type refHypothesis struct {
	lesions []refLesion
	regions []Region // one, or two of a pair
	balance string   // "both", "white", "grey"
	central bool
	acute   bool
	timed   bool
	shift   int // of the plexus
	company bool
	prior   float64
}

type reference struct {
	species exam.Species
	p       *Params
	names   []string
	place   []float64 // middle of each segment along the column
	begin   []float64
	arcs    map[int][arcCount]refArc
	space   []refHypothesis
}

type refArc struct {
	weight map[string]float64
	girdle int
	cut    []nerveShare
}

func newReference(t testing.TB, s exam.Species, p *Params) *reference {
	r := &reference{species: s, p: p, arcs: map[int][arcCount]refArc{}}
	for _, seg := range anatomy.Segments(s) {
		from, to, err := anatomy.Place(s, 20, seg)
		if err != nil {
			t.Fatal(err)
		}
		r.names = append(r.names, seg.String())
		r.place = append(r.place, (from+to)/2)
		r.begin = append(r.begin, from)
	}
	for _, shift := range []int{-1, 0, 1} {
		var arcs [arcCount]refArc
		for id := range arcs {
			plan := arcPlans[id]
			a := refArc{weight: map[string]float64{}, girdle: plan.girdle, cut: plan.cut}
			add := func(ws []anatomy.Weight, by int) {
				sum := 0.0
				moved := map[string]float64{}
				for _, w := range ws {
					i := anatomy.Index(s, w.Segment) + by
					if i < 0 || i >= len(r.names) {
						continue
					}
					moved[r.names[i]] += w.Weight
					sum += w.Weight
				}
				for k, w := range moved {
					a.weight[k] += w / sum
				}
			}
			switch {
			case arcID(id) == arcHorner:
				add([]anatomy.Weight{{Segment: anatomy.NewSegment(exam.RegionT, 1), Weight: 1}, {Segment: anatomy.NewSegment(exam.RegionT, 2), Weight: 1},
					{Segment: anatomy.NewSegment(exam.RegionT, 3), Weight: 1}}, 0)
			case plan.muscle != 0:
				row, _, err := anatomy.ArcFor(s, plan.muscle, plan.muscle.Info().Sites[0])
				if err != nil {
					t.Fatal(err)
				}
				by := shift
				if row.Counted {
					by = 0
				}
				add(row.Segments, by)
			case plan.nerve != 0:
				info, err := anatomy.InfoOf(s, plan.nerve)
				if err != nil {
					t.Fatal(err)
				}
				by := shift
				if info.Counted || info.Plexus == anatomy.CaudalPlexus {
					by = 0
				}
				add(info.Roots, by)
			}
			arcs[id] = a
		}
		for id, parts := range map[arcID][]arcID{arcFrontSense: {arcRadialSkin, arcUlnarSkin, arcMusculoSkin}, arcHindSense: {arcSaphenousSkin, arcFibularSkin, arcTibialSkin}} {
			for _, part := range parts {
				for k, w := range arcs[part].weight {
					arcs[id].weight[k] += w / 3
				}
			}
		}
		r.arcs[shift] = arcs
	}
	r.enumerate(t)
	return r
}

// plexusShifts returns the plexus variants that matter to a lesion.
func (r *reference) plexusShifts(t testing.TB, l refLesion) map[int]float64 {
	plexus := anatomy.Plexus(0)
	if l.first >= 0 && l.kind != PainOnly {
		switch {
		case l.last >= 4 && l.first <= 10:
			plexus = anatomy.Brachial
		case l.last >= 22 && l.first <= 31:
			plexus = anatomy.Lumbosacral
		}
	}
	if plexus == 0 {
		return map[int]float64{0: 1}
	}
	vs, err := anatomy.Variants(r.species, plexus)
	if err != nil {
		t.Fatal(err)
	}
	out := map[int]float64{}
	for _, v := range vs {
		out[v.Shift] = v.Frequency
	}
	return out
}

func refRegion(seg float64) Region {
	switch {
	case seg < 4.75: // half way between C5 (index 4) and C6 counts to C6
		if seg >= 4.5 {
			return C6T2
		}
		return C1C5
	case seg <= 9.5:
		return C6T2
	case seg < 23.5:
		return T3L3
	}
	return L4S3
}

func (r *reference) enumerate(t testing.TB) {
	p := r.p
	type weighed struct {
		lesion refLesion
		region Region
		weight float64
	}
	var single []weighed
	seg := func(i int) string { return r.names[i] }
	put := func(l refLesion, region Region, w float64) { single = append(single, weighed{l, region, w}) }
	all := []Side{Even, LeftOnly, RightOnly, LeftWorse, RightWorse}
	plain := all[:3]
	n := len(r.names)
	for k, length := range []int{1, 2, 3, 4, 8} {
		for a := 0; a+length <= n; a++ {
			if length == 8 && a%2 == 1 {
				continue
			}
			b := a + length - 1
			mid := float64(a+b) / 2
			w := p.Extent[k]
			if mid >= 24 {
				w = p.ExtentLow[k]
			}
			if length == 8 {
				w *= 2
			}
			switch {
			case mid > 30:
				w *= 0.25
			case r.species == exam.Dog && mid >= 18 && mid <= 22:
				w *= 2.5
			}
			for i, side := range all {
				put(refLesion{kind: Cord, from: seg(a), to: seg(b), first: a, last: b, side: side, vertebra: int(r.place[(a+b)/2])}, refRegion(mid), w*p.Sides[i])
			}
		}
	}
	vs := exam.Vertebrae(r.species)
	for v, name := range vs {
		if v == 0 || v > 32 || name.Region() == exam.RegionS && name.Number() == 2 {
			continue
		}
		at := 0
		for i := range r.names {
			if i > 0 && math.Ceil(math.Round(r.begin[i]*1000)/1000) <= float64(v+1) {
				at = i
			}
		}
		w := 1.0
		switch {
		case v == 1 || v == 4 || v == 5:
			w = 1.6
		case v >= 8 && v <= 15:
			w = 0.4
		case v == 26:
			w = 3
		case v >= 17 && v <= 22:
			w = 2
		case v > 26:
			w = 0.4
		}
		for i, side := range plain {
			put(refLesion{kind: PainOnly, from: seg(at), to: seg(at), first: at, last: at, side: side, vertebra: v}, refRegion(float64(at)), w*[]float64{0.5, 0.25, 0.25}[i])
		}
	}
	for a := 1; a < n; a++ {
		w := 1.0
		if a >= 11 && a <= 22 {
			w = 0.5
		}
		for i, side := range plain {
			put(refLesion{kind: Root, from: seg(a), to: seg(a), first: a, last: a, side: side, vertebra: int(r.place[a])}, refRegion(float64(a)), w*[]float64{0.2, 0.4, 0.4}[i])
		}
	}
	for _, x := range []struct {
		a, b int
		w    float64
	}{{5, 6, 0.15}, {7, 9, 0.47}, {5, 9, 0.38}} {
		for i, side := range plain {
			put(refLesion{kind: Plexus, from: seg(x.a), to: seg(x.b), first: x.a, last: x.b, side: side, vertebra: int(r.place[(x.a+x.b)/2])}, C6T2, x.w*[]float64{0.12, 1, 1}[i])
		}
	}
	for i, w := range []float64{0.08, 0.22, 0.22, 0.13, 0.1, 0.25} { // L6 to Cd1
		for k, side := range all {
			put(refLesion{kind: CaudaEquina, from: seg(26 + i), to: seg(n - 1), first: 26 + i, last: n - 1, side: side, vertebra: int(r.place[(26+i+n-1)/2])}, L4S3, w*[]float64{0.5, 0.08, 0.08, 0.17, 0.17}[k])
		}
	}
	none := refLesion{first: -1, last: -1, vertebra: -1}
	with := func(k Kind, side Side, pt part) refLesion { l := none; l.kind, l.side, l.part = k, side, pt; return l }
	for id := nerveID(1); id < nerveCount; id++ {
		for i, side := range plain {
			l := with(Nerve, side, noPart)
			l.nerve = id
			w := nerveWeight(id)
			if id == nerveSympathetic {
				w = p.Sympathetic
			}
			put(l, Peripheral, w*[]float64{0.15, 1, 1}[i])
		}
	}
	for pt, w := range map[part]float64{partNerves: 0.3, partLongest: 0.15, partJunction: 0.22, partToxin: 0.13, partMuscle: 0.2} {
		put(with(Generalised, Even, pt), GeneralisedRegion, w)
	}
	for pt, w := range map[part]float64{partForebrain: 0.3, partBrainstem: 0.1, partCerebellum: 0.12, partVestibularCentral: 0.2, partVestibularPeripheral: 0.3} {
		for i, side := range plain {
			if pt == partVestibularCentral && side == Even {
				continue
			}
			put(with(Brain, side, pt), BrainRegion, w*[]float64{0.2, 0.4, 0.4}[i])
		}
	}
	for _, side := range plain {
		put(with(Joint, side, partStifle), NoRegion, 0.4)
		put(with(Joint, side, partHip), NoRegion, 0.3)
		put(with(Joint, side, partShoulder), NoRegion, 0.3)
		put(with(Tendon, side, partCalcanean), NoRegion, 0.8)
		put(with(Tendon, side, partCarpal), NoRegion, 0.2)
		put(with(Ischaemic, side, noPart), Peripheral, 1)
	}
	put(with(Systemic, Even, noPart), NoRegion, 1)
	put(with(NoLesion, Even, noPart), NoRegion, 1)

	sums := map[[2]int]float64{}
	for _, x := range single {
		sums[[2]int{int(x.region), int(x.lesion.kind)}] += x.weight
	}
	mass := 0.0
	for k := range sums {
		mass += p.Mass[k[0]][k[1]]
	}
	for _, x := range single {
		w := x.weight / sums[[2]int{int(x.region), int(x.lesion.kind)}] * p.Mass[x.region][x.lesion.kind] / mass * (1 - p.Pair)
		r.expand(t, x.lesion, x.region, w)
	}
	// Pairs.
	var cords []refLesion
	for _, c := range [][2]int{{1, 2}, {5, 6}, {7, 8}, {12, 13}, {19, 20}, {24, 25}, {26, 28}, {28, 30}} {
		for _, side := range plain {
			cords = append(cords, refLesion{kind: Cord, from: seg(c[0]), to: seg(c[1]), first: c[0], last: c[1], side: side, vertebra: int(r.place[(c[0]+c[1])/2])})
		}
	}
	type partner struct {
		lesion refLesion
		region Region
		weight float64
	}
	var beside []partner
	for _, side := range plain {
		ce := refLesion{kind: CaudaEquina, from: "L7", to: seg(n - 1), first: 27, last: n - 1, side: side, vertebra: -1}
		beside = append(beside, partner{with(Joint, side, partStifle), NoRegion, 2}, partner{ce, L4S3, 2},
			partner{with(Brain, side, partForebrain), BrainRegion, 1}, partner{with(Brain, side, partVestibularPeripheral), BrainRegion, 1})
	}
	beside = append(beside, partner{with(Generalised, Even, partLongest), GeneralisedRegion, 1})
	type two struct {
		a, b   refLesion
		rb     Region
		weight float64
	}
	var twos []two
	sum := 0.0
	for i, a := range cords {
		for _, b := range cords[i+1:] {
			if a.first != b.first {
				twos = append(twos, two{a, b, refRegion(float64(b.first+b.last) / 2), 1})
				sum++
			}
		}
		for _, b := range beside {
			if a.side != Even && b.region == BrainRegion && b.lesion.side == Even {
				continue
			}
			twos = append(twos, two{a, b.lesion, b.region, b.weight})
			sum += b.weight
		}
	}
	for _, x := range twos {
		for _, sa := range []float64{Severities[0], Severities[2], Severities[4]} {
			for _, sb := range []float64{Severities[0], Severities[2], Severities[4]} {
				a, b := x.a, x.b
				a.severity, b.severity = sa, sb
				r.space = append(r.space, refHypothesis{lesions: []refLesion{a, b}, regions: []Region{refRegion(float64(a.first+a.last) / 2), x.rb},
					balance: "both", prior: x.weight / sum * p.Pair / 9})
			}
		}
	}
}

// expand adds a single lesion at every severity and choice.
func (r *reference) expand(t testing.TB, l refLesion, region Region, w float64) {
	p := r.p
	shifts := r.plexusShifts(t, l)
	balances := map[string]float64{"both": 1}
	centrals := map[bool]float64{false: 1}
	times := map[bool]float64{true: p.Acute, false: 1 - p.Acute}
	timed := true
	company := 0.0
	severity := map[bool][]float64{}
	both := func(v ...float64) { severity[true], severity[false] = v, v }
	switch l.kind {
	case Cord:
		severity[false], severity[true] = p.Severity[0][:], p.Severity[1][:]
		if region == C1C5 || region == C6T2 {
			severity[false], severity[true] = p.SeverityNeck[0][:], p.SeverityNeck[1][:]
		}
		balances = map[string]float64{"both": 0.5, "white": 0.5}
		if l.last >= 4 && l.first <= 10 || l.last >= 22 && l.first <= 31 {
			balances = map[string]float64{"both": p.Balance[0], "white": p.Balance[1], "grey": p.Balance[2]}
		}
		if l.first <= 9 && l.side != LeftOnly && l.side != RightOnly {
			centrals = map[bool]float64{false: 1 - p.Central, true: p.Central}
		}
		if l.first >= 10 && l.first < 24 {
			company = p.Shock
		}
	case NoLesion:
		both(1, 0, 0, 0, 0)
		timed = false
	case PainOnly, Joint, Tendon, Systemic:
		both(0.15, 0.25, 0.3, 0.2, 0.1)
		timed = false
		if l.kind == PainOnly {
			switch {
			case l.first == 1 || l.first == 2:
				company = 0.08
			case l.first == 3 || l.first == 4:
				company = 0.18
			case l.first >= 5 && l.first <= 9:
				company = 0.35
			case l.first >= 24:
				company = 0.3
			}
		}
	case Generalised:
		both(0.15, 0.28, 0.3, 0.17, 0.1)
		company = 0.4
	case Nerve:
		both(0.09, 0.19, 0.27, 0.25, 0.2)
	case Brain:
		both(0.15, 0.2, 0.25, 0.22, 0.18)
		if l.part == partVestibularPeripheral {
			company = 0.3
		}
	default:
		both(0.12, 0.2, 0.26, 0.22, 0.2)
	}
	if !timed {
		times = map[bool]float64{false: 1}
	}
	for i, sev := range Severities {
		for acute, wt := range times {
			if severity[acute][i] == 0 {
				continue
			}
			companies := map[bool]float64{false: 1 - company, true: company}
			if l.kind == Cord && !(acute && sev >= 0.8) || company == 0 {
				companies = map[bool]float64{false: 1}
			}
			for bal, wb := range balances {
				for central, wc := range centrals {
					for shift, wv := range shifts {
						for co, wco := range companies {
							m := l
							m.severity = sev
							r.space = append(r.space, refHypothesis{lesions: []refLesion{m}, regions: []Region{region}, balance: bal, central: central, acute: acute,
								timed: timed, shift: shift, company: co, prior: w * severity[acute][i] * wt * wb * wc * wv * wco})
						}
					}
				}
			}
		}
	}
}

func or(a, b float64) float64 { return a + b - a*b }

// damage fills a body for one hypothesis.
func (r *reference) damage(h *refHypothesis) *body {
	b := &body{first: maxSegments, ctAt: -1, acute: h.acute}
	p := r.p
	for which, l := range h.lesions {
		sev := l.severity
		lesser := 0.4 + 0.5*sev
		share := map[Side][2]float64{Even: {1, 1}, LeftOnly: {1, 0}, RightOnly: {0, 1}, LeftWorse: {1, lesser}, RightWorse: {lesser, 1}}[l.side]
		limb, reaches := -1, false
		if l.first >= 0 {
			mid := (l.first + l.last) / 2
			switch {
			case mid >= 1 && mid <= 9:
				limb, reaches = 0, true
			case mid >= 24 && (mid <= 28 || l.kind == PainOnly && l.vertebra <= 26):
				limb, reaches = 2, true
			}
		}
		var own body // pain of this lesion
		ache := func(strength float64) {
			lo, hi := int(r.place[l.first]), int(r.place[l.last])
			switch l.kind {
			case PainOnly:
				lo, hi = l.vertebra, l.vertebra
			case CaudaEquina:
				lo = min(lo, 26)
				hi = 27
				if l.first >= 29 {
					hi = 29
				}
			}
			for i, site := range painSites {
				a, z := anatomy.SpineRange(r.species, site)
				first, last := exam.VertebraIndex(r.species, a), exam.VertebraIndex(r.species, z)
				near := 1.0
				if hi < first {
					near = math.Max(0, 0.6-0.15*float64(first-hi))
				}
				if lo > last {
					near = math.Max(0, 0.6-0.15*float64(lo-last))
				}
				own.pain[i] = strength * near
			}
			own.lsStress = 1.05 * own.pain[painLumbosacral]
			own.tailPain = math.Max(0.6*own.pain[painLumbosacral], 0.8*own.pain[painSacrocaudal])
		}
		for side := range 2 {
			s := share[side]
			tl, pl := side, 2+side
			switch l.kind {
			case Cord:
				grey, white := sev, sev
				if h.balance == "white" {
					grey *= p.WhiteGrey
				}
				if h.balance == "grey" {
					white *= p.GreyWhite
				}
				for k := l.first; k <= l.last; k++ {
					b.grey[k][side] = or(b.grey[k][side], grey*s)
				}
				b.tracts[which].from, b.tracts[which].to = l.first, l.last
				b.tracts[which].loss[side] = white * s
				b.tracts[which].girth = [2]float64{p.FrontShare, 1}
				if h.central {
					b.tracts[which].girth = [2]float64{1, p.CentralHind}
				}
				if reaches {
					own.rootPain[limb+side] = p.CordRoot * s
				}
			case PainOnly:
				if reaches && h.company {
					own.rootPain[limb+side] = (0.5 + 0.4*sev) * s
				}
				own.weak[tl], own.weak[pl] = 0.05*sev, 0.05*sev
			case Root, Plexus, CaudaEquina:
				for k := l.first; k <= l.last; k++ {
					b.root[k][side] = or(b.root[k][side], sev*s)
				}
				if reaches {
					own.rootPain[limb+side] = (0.35 + 0.2*sev) * s
				}
			case Nerve:
				own.nerve[l.nerve][side] = sev * s
				g := -1
				switch {
				case l.nerve == nerveRadialLow || l.nerve >= nerveID(anatomy.Suprascapular) && l.nerve <= nerveID(anatomy.Ulnar):
					g = 0
				case l.nerve >= nerveID(anatomy.Femoral) && l.nerve <= nerveID(anatomy.Tibial):
					g = 2
				}
				if g >= 0 {
					own.limbPain[g+side], own.rootPain[g+side] = 0.4*s, 0.15*s
				}
			case Generalised:
				for _, x := range [2]int{tl, pl} {
					front := x == tl
					pick := func(f, o float64) float64 {
						if front {
							return f * sev
						}
						return o * sev
					}
					switch l.part {
					case partNerves:
						own.diffuse[x], own.sensory[x] = pick(0.85, 1), 0.15*sev
					case partLongest:
						own.distal[x] = pick(0.35, 1)
						own.sensory[x], own.weak[x] = 0.25*own.distal[x], 0.25*own.distal[x]
					case partJunction:
						own.weak[x], own.diffuse[x] = sev, 0.12*sev
					case partToxin:
						own.weak[x], own.diffuse[x] = 0.6*sev, 0.85*sev
					case partMuscle:
						own.weak[x], own.diffuse[x] = 0.75*sev, 0.1*sev
					}
				}
			case Brain:
				v := sev * s
				switch l.part {
				case partForebrain:
					own.fore[side] = v
				case partBrainstem:
					own.stem[side] = v
				case partCerebellum:
					own.cereb[side] = v
				case partVestibularCentral:
					own.vestC[side] = v
				case partVestibularPeripheral:
					own.vestP[side] = v
					if h.company {
						own.nerve[nerveFacial][side], own.midEar[side] = 0.6*v, 0.6*v
					}
				}
			case Ischaemic:
				own.clot[side] = sev * s
				own.weak[pl], own.distal[pl], own.sensory[pl], own.limbPain[pl] = 0.9*sev*s, 0.9*sev*s, 0.75*sev*s, 0.8*sev*s
			case Joint:
				v := sev * s
				switch l.part {
				case partStifle:
					own.stifle[side], own.joint[pl], own.weak[pl] = v, 0.3*v, 0.25*v
				case partHip:
					own.joint[pl], own.weak[pl] = v, 0.25*v
				case partShoulder:
					own.joint[tl], own.weak[tl] = v, 0.15*v
				}
			case Tendon:
				v, x := sev*s, tl
				if l.part == partCalcanean {
					x = pl
				}
				own.tendon[x], own.limbPain[x], own.weak[x] = v, 0.3*v, 0.15*v
			case Systemic:
				own.weak[tl], own.weak[pl] = 0.45*sev, 0.45*sev
			}
		}
		pick := func(v float64) float64 {
			if h.company {
				return v * sev
			}
			return 0
		}
		switch l.kind {
		case Cord:
			strength := p.PainLater
			if h.acute {
				strength = p.PainAcute
			}
			ache(strength)
			b.cord = true
			b.nt = which + 1
			b.origin = math.Max(b.origin, (b.tracts[which].loss[0]+b.tracts[which].loss[1])/2)
			if b.ctAt < 0 {
				b.ctAt = l.vertebra
			}
			if h.company {
				b.shock = 1
			}
		case PainOnly:
			ache(0.3 + 0.7*sev)
		case Root:
			ache(0.5)
		case Plexus:
			ache(0.3)
		case CaudaEquina:
			ache(0.5)
			own.lsStress, own.tailPain = p.Stenosis, 0.5
		case Generalised:
			switch l.part {
			case partNerves:
				own.larynx, own.wasting, own.cranial = 0.5*sev, 0.6*sev, pick(0.8)
			case partLongest:
				own.larynx = 0.3 * sev
				if h.company {
					own.larynx = 0.9 * sev
				}
			case partJunction:
				own.tiring, own.larynx, own.cranial = 0.4+0.5*sev, 0.4*sev, pick(0.8)
			case partToxin:
				own.tiring, own.larynx, own.cranial = 0.4*sev, 0.7*sev, pick(0.9)
			case partMuscle:
				own.tiring, own.wasting, own.myalgia, own.cranial = 0.7*sev, 0.9*sev, 0.6*sev, pick(0.4)
			}
		case Brain:
			own.pain[painCervical] = 0.08 * sev
		case Systemic:
			own.systemic, own.tiring = sev, 0.7*sev
		}
		mix := func(x, y []float64) {
			for i := range x {
				x[i] = or(x[i], y[i])
			}
		}
		for n := range b.nerve {
			mix(b.nerve[n][:], own.nerve[n][:])
		}
		mix(b.pain[:], own.pain[:])
		for _, x := range [][2][]float64{{b.rootPain[:], own.rootPain[:]}, {b.limbPain[:], own.limbPain[:]}, {b.joint[:], own.joint[:]}, {b.stifle[:], own.stifle[:]},
			{b.tendon[:], own.tendon[:]}, {b.clot[:], own.clot[:]}, {b.weak[:], own.weak[:]}, {b.diffuse[:], own.diffuse[:]}, {b.distal[:], own.distal[:]},
			{b.sensory[:], own.sensory[:]}, {b.fore[:], own.fore[:]}, {b.stem[:], own.stem[:]}, {b.cereb[:], own.cereb[:]}, {b.vestC[:], own.vestC[:]},
			{b.vestP[:], own.vestP[:]}, {b.midEar[:], own.midEar[:]}} {
			mix(x[0], x[1])
		}
		b.lsStress, b.tailPain = or(b.lsStress, own.lsStress), or(b.tailPain, own.tailPain)
		b.cranial, b.larynx, b.tiring = or(b.cranial, own.cranial), or(b.larynx, own.larynx), or(b.tiring, own.tiring)
		b.wasting, b.myalgia, b.systemic = or(b.wasting, own.wasting), or(b.myalgia, own.myalgia), or(b.systemic, own.systemic)
	}
	b.first, b.last = 0, len(r.names)
	return b
}

// losses fills the state of a body: what is lost of each arc, limb and path.
func (r *reference) losses(b *body, shift int) *state {
	st := &state{body: b, p: r.p}
	arcs := r.arcs[shift]
	hit := func(a *refArc, side, girdle int) (lost, above float64) {
		lost = 0
		for i, name := range r.names {
			lost += a.weight[name] * or(b.grey[i][side], b.root[i][side])
		}
		keep := 1 - lost
		for _, n := range a.cut {
			keep *= 1 - n.share*b.nerve[n.nerve][side]
		}
		return 1 - keep, r.control(b, a, side, girdle)
	}
	for id := range arcs {
		for side := range 2 {
			st.arcLoss[id][side], st.arcUp[id][side] = hit(&arcs[id], side, arcs[id].girdle)
		}
	}
	front := map[arcID]float64{arcShoulder: 0.15, arcBiceps: 0.15, arcTriceps: 0.4, arcExtensor: 0.15, arcForearm: 0.15}
	hind := map[arcID]float64{arcQuadriceps: 0.4, arcHip: 0.1, arcHamstring: 0.15, arcGluteal: 0.1, arcTibialis: 0.1, arcGastroc: 0.15}
	for l := range 4 {
		g, side := l/2, l%2
		sense, motors := arcFrontSense, front
		if g == 1 {
			sense, motors = arcHindSense, hind
		}
		for id, w := range motors {
			st.lower[l] += w * st.arcLoss[id][side]
			st.up[l] += w * st.arcUp[id][side]
		}
		st.lower[l] = or(or(st.lower[l], b.diffuse[l]), 0.35*b.distal[l])
		st.path[l] = r.control(b, &arcs[sense], side, g)
		st.sense[l] = or(st.arcLoss[sense][side], b.sensory[l])
		st.motor[l] = or(or(st.up[l], st.lower[l]), b.weak[l])
	}
	for l := range 4 {
		least := math.Min(st.path[l/2*2], st.path[l/2*2+1])
		st.light[l] = or(0.75*least+0.25*st.path[l], st.sense[l])
		st.deep[l] = or(0.9*least+0.1*st.path[l], st.sense[l]*st.sense[l])
	}
	st.upLow = [2]float64{st.arcUp[arcPudendal][0], st.arcUp[arcPudendal][1]}
	st.upTail = 0.6*math.Min(st.upLow[0], st.upLow[1]) + 0.4*(st.upLow[0]+st.upLow[1])/2
	return st
}

// control is the loss of a path from above: of each cord lesion, what it takes from the share
// of the arc that lies caudal to its first segment.
func (r *reference) control(b *body, a *refArc, side, girdle int) float64 {
	free := 1.0
	for i := range b.nt {
		share := 0.0
		for k := b.tracts[i].from + 1; k < len(r.names); k++ {
			share += a.weight[r.names[k]]
		}
		free *= 1 - b.tracts[i].loss[side]*b.tracts[i].girth[girdle]*share
	}
	return 1 - free
}

// grades returns the chance of each category of a cell at a deviation.
func (r *reference) grades(c *cell, st *state, u float64) []float64 {
	snap := func(x float64) float64 { return math.Round(x*quantum) / quantum }
	sigma := func(x float64) float64 { return 1 / (1 + math.Exp(-x)) }
	var key rowKey
	switch c.item {
	case exam.CutaneousTrunci, exam.BladderFill, exam.BladderOutflow, exam.Tremor, exam.NystagmusDirection:
		// Items of kinds, not steps: their tables are shared with the engine, at the point of the deviation.
		c.row(&space{species: r.species, p: r.p}, c, st, &key)
		out := make([][points]float64, c.cats)
		r.p.rowOf(r.species, c, key, out)
		devs, _ := r.p.quadrature()
		p := make([]float64, c.cats)
		for q, d := range devs {
			if d == u {
				for g := range p {
					p[g] = out[g][q]
				}
			}
		}
		return p
	}
	y := snap(st.latent(c))
	resp := r.p.respond[c.item]
	slip := resp.slip
	if slip == 0 {
		slip = r.p.Slip
	}
	switch {
	case c.girdle == thoracic && (c.item == exam.Withdrawal || c.item == exam.WithdrawalShoulder || c.item == exam.WithdrawalElbow || c.item == exam.WithdrawalCarpus):
		slip = r.p.SlipFrail
	}
	normal := int(c.item.Info().Normal - c.item.Info().First)
	p := make([]float64, c.cats)
	// Chances of lying at least j grades from normal, made into chances of each grade.
	side := func(th []float64, v, dev float64, step int, room float64) float64 {
		tail := make([]float64, len(th)+1)
		for j := len(th); j >= 1; j-- {
			tail[j-1] = math.Max(sigma(resp.slope*(v-th[j-1])+dev), tail[j])
			tail[j-1] = math.Min(tail[j-1], room)
			p[normal+step*j] = tail[j-1] - tail[j]
		}
		return tail[0]
	}
	room := 1.0
	if len(resp.down) > 0 {
		room -= side(resp.down, y, u, -1, 1)
		room -= side(resp.up, -y, -u, 1, math.Max(room, 0))
	} else {
		room -= side(resp.up, y, u, 1, 1)
	}
	p[normal] = math.Max(room, 0)
	miss := []float64{0, slip, 0.3 * slip, 0.08 * slip, 0.03 * slip, 0.03 * slip}
	out := make([]float64, c.cats)
	for g := range out {
		for k := range p {
			if k == g {
				stay := 1.0
				for other := range p {
					if other != g {
						stay -= miss[max(other-g, g-other)]
					}
				}
				out[g] += stay * p[g]
			} else {
				out[g] += miss[max(k-g, g-k)] * p[k]
			}
		}
	}
	return out
}

// TestReference compares the engine with the reference on random exams, half of them drawn
// from the model, half of any content.
func TestReference(t *testing.T) {
	for _, s := range []exam.Species{exam.Dog, exam.Cat} {
		n := soak(6, 100)
		if s == exam.Cat {
			n = soak(4, 100)
		}
		e := engineFor(t, s)
		m := e.m
		ref := newReference(t, s, defaults(s))
		if len(ref.space) != m.hyps {
			t.Fatalf("%s: the reference has %d hypotheses, the engine %d", s, len(ref.space), m.hyps)
		}
		const seed = 2026
		rng := rand.New(rand.NewPCG(seed, uint64(s)))
		sim := newSimulator(m, rng)
		type refExam struct {
			x            Exam
			cells        []int
			cats         []int
			bulk         []bool
			ctx          []context
			byGroup      map[int][]int
			full, looked []float64
			anyBulk      bool
		}
		var exams []*refExam
		for i := range n {
			var x Exam
			if i%2 == 0 {
				x = sim.exam(sim.hypothesis(), 0.1)
			} else {
				x = Exam{Species: s}
				for range rng.IntN(25) {
					c := &m.lay.cells[rng.IntN(len(m.lay.cells))]
					x.Findings = append(x.Findings, exam.Finding{Item: c.item, Site: c.site, Digit: c.digit, Joint: c.joint,
						Result: exam.Graded(c.item.Info().First + int8(rng.IntN(len(c.item.Info().Grades))))})
				}
			}
			for k := range x.Findings {
				if exam.BulkFills(x.Findings[k].Item) && i%3 == 0 && rng.IntN(3) == 0 {
					x.Findings[k].Block = "a"
				}
			}
			if i%4 == 1 {
				x.AgeYears, x.OnsetDays, x.Sedation = 12, 20*rng.Float64()+0.1, exam.Sedation(rng.IntN(4))
			}
			if i%5 == 2 {
				x.Diagnosis, x.Level = "disc extrusion", "T12-T13"
			}
			re := &refExam{x: x, byGroup: map[int][]int{}}
			// Of two findings of a cell the one with the lower category stands; of a tendon reflex
			// absent once and present once, the one that is present.
			best := map[int]int{}
			isBulk := map[int]bool{}
			for _, f := range x.Findings {
				ci := mustFind(m.lay, f.Key())
				g, _ := f.Result.Grade()
				cat := int(g - f.Item.Info().First)
				if f.Item == exam.CutaneousTrunci {
					cat = trunciCategory(s, f)
				}
				old, seen := best[ci]
				if seen && exam.TendonReflex(f.Item) && (old == 0 || cat == 0) && old+cat > 0 {
					if old == 0 {
						best[ci], isBulk[ci] = cat, f.Block != ""
					}
					continue
				}
				switch {
				case !seen || cat < old:
					best[ci], isBulk[ci] = cat, f.Block != ""
				case cat == old && f.Block == "":
					isBulk[ci] = false
				}
			}
			var order []int
			for ci := range best {
				order = append(order, ci)
			}
			sort.Ints(order)
			for _, ci := range order {
				ctx, _ := m.bend(&x, &m.lay.cells[ci])
				re.byGroup[m.lay.cells[ci].group] = append(re.byGroup[m.lay.cells[ci].group], len(re.cells))
				re.cells = append(re.cells, ci)
				re.cats = append(re.cats, best[ci])
				re.bulk = append(re.bulk, isBulk[ci])
				re.ctx = append(re.ctx, ctx)
				re.anyBulk = re.anyBulk || isBulk[ci]
			}
			exams = append(exams, re)
		}
		devs, qw := ref.p.quadrature()
		for hi := range ref.space {
			h := &ref.space[hi]
			st := ref.losses(ref.damage(h), h.shift)
			memo := map[int][][]float64{} // cell → grades at each point
			for _, re := range exams {
				full, looked := math.Log(h.prior), math.Log(h.prior)
				for _, members := range re.byGroup {
					a, b := 0.0, 0.0
					for q := range devs {
						x, y := qw[q], qw[q]
						for _, k := range members {
							ci := re.cells[k]
							g := memo[ci]
							if g == nil {
								for _, u := range devs {
									g = append(g, ref.grades(&m.lay.cells[ci], st, u))
								}
								memo[ci] = g
							}
							p := re.ctx[k].keep*g[q][re.cats[k]] + re.ctx[k].add[min(re.cats[k], 7)]
							x *= p
							if !re.bulk[k] {
								y *= p
							}
						}
						a += x
						b += y
					}
					full += math.Log(a)
					looked += math.Log(b)
				}
				re.full = append(re.full, full)
				re.looked = append(re.looked, looked)
			}
		}
		worst := 0.0
		healthy := 0
		for hi := range ref.space {
			if ref.space[hi].lesions[0].kind == NoLesion {
				healthy = hi
			}
		}
		for i, re := range exams {
			got, err := e.Compute(re.x)
			if err != nil {
				t.Fatal(err)
			}
			label := ref.label(m, &re.x)
			total := 0.0
			top := math.Inf(-1)
			value := func(hi int, labelled bool) float64 {
				h := &ref.space[hi]
				v := re.full[hi]
				if re.anyBulk {
					// Not looked at: the block shows what it shows of a sound animal.
					v = math.Log(0.9*math.Exp(re.full[hi]-top) + 0.1*math.Exp(re.looked[hi]-top+re.full[healthy]-re.looked[healthy]))
				} else {
					v -= top
				}
				if labelled && label != nil {
					v += label(h)
				}
				if h.timed && re.x.OnsetDays > 0 {
					early := 0.999
					switch d := re.x.OnsetDays; {
					case d >= 10:
						early = 0.001
					case d > 5:
						early = 0.999 - 0.998*(d-5)/5
					}
					if h.acute {
						v += math.Log(early / ref.p.Acute)
					} else {
						v += math.Log((1 - early) / (1 - ref.p.Acute))
					}
				}
				return math.Exp(v)
			}
			for hi := range ref.space {
				top = math.Max(top, math.Max(re.full[hi], re.looked[hi]))
			}
			var regions, alone [regionCount]float64
			totalAlone := 0.0
			var expected [2 * maxSegments]float64
			for hi := range ref.space {
				h := &ref.space[hi]
				w := value(hi, true)
				total += w
				for _, r := range h.regions {
					regions[r] += w / float64(len(h.regions))
				}
				v := value(hi, false)
				totalAlone += v
				for _, r := range h.regions {
					alone[r] += v / float64(len(h.regions))
				}
				var units [2 * maxSegments]float64
				for _, l := range h.lesions {
					if l.first < 0 || l.kind == PainOnly {
						continue
					}
					lesser := 0.4 + 0.5*l.severity
					share := map[Side][2]float64{Even: {1, 1}, LeftOnly: {1, 0}, RightOnly: {0, 1}, LeftWorse: {1, lesser}, RightWorse: {lesser, 1}}[l.side]
					for k := l.first; k <= l.last; k++ {
						for side := range 2 {
							units[2*k+side] = or(units[2*k+side], l.severity*share[side])
						}
					}
				}
				for c, u := range units {
					expected[c] += w * math.Floor(u*1024+0.5) / 1024
				}
			}
			check := func(what string, want, have float64) {
				d := math.Abs(want - have)
				worst = math.Max(worst, d)
				if d > 1e-9 {
					t.Errorf("%s, exam %d: %s is %.12f, the reference says %.12f", s, i, what, have, want)
				}
			}
			for r := range regions {
				check(Region(r).String(), regions[r]/total, got.Region(Region(r).String()))
				if got.Alone != nil {
					for _, x := range got.Alone.Regions {
						if x.Region == Region(r).String() {
							check("alone "+x.Region, alone[r]/totalAlone, x.Probability)
						}
					}
				}
			}
			if (got.Alone != nil) != (label != nil) {
				t.Errorf("%s, exam %d: the exam alone is there %v, a label %v", s, i, got.Alone != nil, label != nil)
			}
			for c, x := range got.Segments {
				check(x.Segment+" "+x.Side, expected[c]/total, x.Damage)
			}
		}
		t.Logf("%s: %d hypotheses, %d exams, seed %d: largest difference %.2g", s, len(ref.space), n, seed, worst)
	}
}

// label works out the mixture of the plain prior and that of the label, for the one label
// of this test: a disc extrusion at T12–T13.
func (r *reference) label(m *Model, x *Exam) func(h *refHypothesis) float64 {
	if x.Diagnosis == "" && x.Level == "" {
		return nil
	}
	near := map[string]float64{}
	v, _ := exam.ParseVertebra("T12", r.species)
	ws, _ := anatomy.SegmentsAtDisc(r.species, x.WeightKg, v)
	best := 0.0
	for _, w := range ws {
		near[w.Segment.String()] = w.Weight
	}
	near["T12"] = math.Max(near["T12"], 0.5) // the root that leaves at T12–T13
	for _, w := range near {
		best = math.Max(best, w)
	}
	match := func(l refLesion) float64 {
		switch l.kind {
		case Cord, PainOnly, Root, CaudaEquina:
		default:
			return 0
		}
		w := 0.0
		for k := l.first; k <= l.last; k++ {
			w = math.Max(w, near[r.names[k]]/best)
		}
		if n := l.last - l.first + 1; l.kind == Cord && n > 2 {
			w *= 2 / float64(n)
		}
		return w
	}
	sum := 0.0
	for i := range r.space {
		if h := &r.space[i]; len(h.lesions) == 1 {
			sum += h.prior * match(h.lesions[0])
		}
	}
	return func(h *refHypothesis) float64 {
		w := 0.0
		if len(h.lesions) == 1 {
			w = match(h.lesions[0])
		}
		return math.Round(math.Log(0.25+0.75*w/sum)*1024) / 1024
	}
}
