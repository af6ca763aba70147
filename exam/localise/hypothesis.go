package localise

import (
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
)

// part tells sites of one kind apart that are no range of segments.
type part uint8

const (
	noPart part = iota
	partForebrain
	partBrainstem
	partCerebellum
	partVestibularCentral
	partVestibularPeripheral
	partNerves    // neuropathy of all limbs
	partLongest   // length-dependent neuropathy
	partJunction  // junction, reflexes kept (myasthenia)
	partToxin     // junction, reflexes lost (botulism, tick)
	partMuscle    // muscle disease
	partStifle    // torn cruciate ligament
	partHip       // other painful joints behind
	partShoulder  // painful joints in front
	partCalcanean // torn calcanean tendon
	partCarpal    // failed carpal support
)

var partWords = map[part]string{partForebrain: "forebrain", partBrainstem: "brainstem", partCerebellum: "cerebellum",
	partVestibularCentral: "central vestibular", partVestibularPeripheral: "peripheral vestibular",
	partNerves: "nerves of all limbs", partLongest: "longest nerves first", partJunction: "junction, reflexes kept",
	partToxin: "junction, reflexes lost", partMuscle: "muscle", partStifle: "stifle", partHip: "joints of the pelvic limb",
	partShoulder: "joints of the thoracic limb", partCalcanean: "calcanean tendon", partCarpal: "carpal support"}

// site is one lesion hypothesis without its severity and without what is summed out:
// a kind at a place on a side.
type site struct {
	kind     Kind
	from, to int // segments, -1 where the kind has none
	side     Side
	part     part
	nerve    nerveID
	region   Region
	class    uint16
	extent   int // 0 to 4: index into Params.Extent; cord only
	vertebra int // index of the vertebra at fault; -1 where none
	weight   float64
	second   *site // of a pair
}

// hypothesis is one point of the space: a site with a severity and the choices that are summed out.
type hypothesis struct {
	site     *site
	index    int // of the site
	severity int
	second   int  // severity of the second lesion of a pair
	balance  int  // 0 grey and white alike, 1 mostly white, 2 mostly grey
	central  bool // cord: thoracic limbs worse
	acute    bool
	variant  int // of the plexus: 0 median, 1 prefixed, 2 postfixed
	company  bool
	prior    float64
}

// space enumerates the hypotheses of a species.
type space struct {
	species  exam.Species
	p        *Params
	segments int
	vertebra []int // vertebra index that each segment lies in
	begins   []int // place where each segment begins, rounded up to a whole vertebra
	variants [2][3]float64
	arcs     [3][arcCount]arc
	sites    []*site
	steps    []float64 // the severities that every lesion is tried at: Severities, or CourseSeverities
}

func newSpace(s exam.Species, p *Params) *space {
	sp := &space{species: s, p: p, segments: len(anatomy.Segments(s)), steps: Severities[:]}
	sp.vertebra = make([]int, sp.segments)
	for i := range sp.vertebra {
		sp.vertebra[i] = vertebraOver(s, i)
		sp.begins = append(sp.begins, beginOf(s, i))
	}
	for g, plexus := range [2]anatomy.Plexus{anatomy.Brachial, anatomy.Lumbosacral} {
		vs, err := anatomy.Variants(s, plexus)
		if err != nil {
			panic(err)
		}
		for _, v := range vs {
			switch {
			case v.Shift < 0:
				sp.variants[g][1] = v.Frequency
			case v.Shift > 0:
				sp.variants[g][2] = v.Frequency
			default:
				sp.variants[g][0] = v.Frequency
			}
		}
	}
	for v, shift := range [3]int{0, -1, 1} {
		sp.arcs[v] = buildArcs(s, [2]int{shift, shift})
	}
	sp.enumerate()
	return sp
}

// regionAt returns the region of a segment; the tail counts to L4–S3.
func regionAt(seg int) Region {
	switch {
	case seg < segC6:
		return C1C5
	case seg < segT3:
		return C6T2
	case seg < segL4:
		return T3L3
	}
	return L4S3
}

// regionOf returns the region of a lesion by its centre. A lesion centred on the border of an
// enlargement counts to the enlargement, whose signs it shows.
func regionOf(from, to int) Region {
	a, b := regionAt((from+to)/2), regionAt((from+to+1)/2)
	if b == C6T2 || b == L4S3 {
		return b
	}
	return a
}

func (sp *space) add(t site) *site {
	t.vertebra = -1
	if t.from >= 0 && t.kind != Nerve {
		t.vertebra = sp.vertebra[(t.from+t.to)/2]
	}
	n := t
	sp.sites = append(sp.sites, &n)
	return &n
}

// longExtent is the length of a diffuse lesion in segments: judgement.
const longExtent = 8

// discWeight: how often a place is hit, beside its neighbours. Small dogs: about 90 % of
// thoracolumbar discs within three spaces of the junction (clinic page, low grade); flattened
// to a factor of two and a half, for other causes fall anywhere.
func discWeight(s exam.Species, centre2 int) float64 {
	if centre2 > 2*30 {
		return 0.25 // the tail's segments: hardly a place of cord disease
	}
	if s == exam.Dog && centre2 >= 2*18 && centre2 <= 2*22 {
		return 2.5
	}
	return 1
}

// painWeight: how often a level is the painful one. Discs of the neck, the thoracolumbar
// junction and the lumbosacral joint; hardly the ribs' and the tail's levels. Judgement.
func painWeight(v int) float64 {
	switch {
	case v == 1 || v == 4 || v == 5: // C2–C3 (Hakozaki-2015: 32 % in small dogs), C5–C7 (Bonelli-2021)
		return 1.6
	case v >= vertT1+1 && v <= vertT1+8:
		return 0.4
	case v == vertL7:
		return 3
	case v >= vertT1+10 && v <= vertL1+2:
		return 2
	case v > vertL7:
		return 0.4
	}
	return 1
}

// segmentOver returns the segment that lies at a place of the column, the last one caudal of the cord.
func (sp *space) segmentOver(v int) int {
	for s := sp.segments - 1; s > 0; s-- {
		if sp.begins[s] <= v {
			return s
		}
	}
	return 0
}

func (sp *space) enumerate() {
	all := [...]Side{Even, LeftOnly, RightOnly, LeftWorse, RightWorse}
	plain := [...]Side{Even, LeftOnly, RightOnly}
	p := sp.p
	for extent := range 5 {
		length, step := extent+1, 1
		if extent == 4 {
			length, step = longExtent, 2
		}
		for from := 0; from+length <= sp.segments; from += step {
			to := from + length - 1
			share := p.Extent[extent]
			if from+to >= 2*segL4 {
				share = p.ExtentLow[extent]
			}
			for _, side := range all {
				sp.add(site{kind: Cord, from: from, to: to, side: side, extent: extent, region: regionOf(from, to),
					weight: float64(float64(share*p.Sides[side]) * discWeight(sp.species, from+to) * float64(step))})
			}
		}
	}
	// Sources of pain lie at the level caudal to a vertebra, from C2 to Cd3, not at segments:
	// caudal of L6 there is hardly any cord. They count to the region of the segments there.
	for v := 1; v <= vertCd1+2; v++ {
		if v > vertS1 && v < vertCd1-1 {
			continue // within the sacrum
		}
		seg := sp.segmentOver(v + 1)
		for _, side := range plain {
			w := 0.5
			if side != Even {
				w = 0.25
			}
			t := sp.add(site{kind: PainOnly, from: seg, to: seg, side: side, region: regionAt(seg), weight: float64(w * painWeight(v))})
			t.vertebra = v
		}
	}
	for seg := 1; seg < sp.segments; seg++ {
		for _, side := range plain {
			w := 0.4
			if side == Even {
				w = 0.2
			}
			if seg >= 11 && seg <= 22 { // intercostal and flank roots are nearly silent
				w = float64(w * 0.5)
			}
			sp.add(site{kind: Root, from: seg, to: seg, side: side, region: regionAt(seg), weight: w})
		}
	}
	for _, torn := range [...]struct {
		from, to int
		weight   float64
	}{{5, 6, 0.15}, {7, 9, 0.47}, {5, 9, 0.38}} { // cranial, caudal, complete: caudal commonest, cranial rare (cynologist, vet-advisor-BPI)
		for _, side := range plain {
			w := torn.weight
			if side == Even {
				w = float64(w * 0.12) // both sides: neuritis rather than avulsion
			}
			sp.add(site{kind: Plexus, from: torn.from, to: torn.to, side: side, region: C6T2, weight: w})
		}
	}
	for from := segL4 + 2; from <= 31; from++ {
		weight := [...]float64{0.08, 0.22, 0.22, 0.13, 0.1, 0.25}[from-segL4-2]
		for _, side := range all {
			sp.add(site{kind: CaudaEquina, from: from, to: sp.segments - 1, side: side, region: L4S3,
				weight: float64(weight * [...]float64{0.5, 0.08, 0.08, 0.17, 0.17}[side])})
		}
	}
	for n := nerveID(1); n < nerveCount; n++ {
		for _, side := range plain {
			w := nerveWeight(n)
			if n == nerveSympathetic {
				w = p.Sympathetic
			}
			if side == Even {
				w = float64(w * 0.15)
			}
			sp.add(site{kind: Nerve, from: -1, to: -1, side: side, nerve: n, region: Peripheral, weight: w})
		}
	}
	for _, g := range [...]struct {
		part   part
		weight float64
	}{{partNerves, 0.3}, {partLongest, 0.15}, {partJunction, 0.22}, {partToxin, 0.13}, {partMuscle, 0.2}} {
		sp.add(site{kind: Generalised, from: -1, to: -1, part: g.part, region: GeneralisedRegion, weight: g.weight})
	}
	for _, g := range [...]struct {
		part  part
		sides []Side
		w     float64
	}{{partForebrain, plain[:], 0.3}, {partBrainstem, plain[:], 0.1}, {partCerebellum, plain[:], 0.12},
		{partVestibularCentral, plain[1:], 0.2}, {partVestibularPeripheral, plain[:], 0.3}} {
		for _, side := range g.sides {
			w := float64(g.w * 0.4)
			if side == Even {
				w = float64(g.w * 0.2)
			}
			sp.add(site{kind: Brain, from: -1, to: -1, side: side, part: g.part, region: BrainRegion, weight: w})
		}
	}
	for _, g := range [...]struct {
		kind Kind
		part part
		w    float64
	}{{Joint, partStifle, 0.4}, {Joint, partHip, 0.3}, {Joint, partShoulder, 0.3}, {Tendon, partCalcanean, 0.8}, {Tendon, partCarpal, 0.2}, {Ischaemic, noPart, 1}} {
		for _, side := range plain {
			region := NoRegion
			if g.kind == Ischaemic {
				region = Peripheral
			}
			sp.add(site{kind: g.kind, from: -1, to: -1, side: side, part: g.part, region: region, weight: float64(g.w / 3)})
		}
	}
	sp.add(site{kind: Systemic, from: -1, to: -1, region: NoRegion, weight: 1})
	sp.add(site{kind: NoLesion, from: -1, to: -1, region: NoRegion, weight: 1})

	// Scale weights to the stated shares of region and kind.
	var sum [regionCount][kindCount]float64
	for _, t := range sp.sites {
		sum[t.region][t.kind] += t.weight
	}
	total := 0.0
	for r := range p.Mass {
		for k := range p.Mass[r] {
			if sum[r][k] > 0 {
				total += p.Mass[r][k]
			}
		}
	}
	for _, t := range sp.sites {
		t.weight = float64(float64(t.weight/sum[t.region][t.kind])*float64(p.Mass[t.region][t.kind]/total)) * (1 - p.Pair)
	}
	sp.pairs()
}

// nerveWeight: how often a nerve is the one, beside the others. Sciatic injuries: fibular
// 37 %, common trunk 47 %, tibial 16 % (DellApa, dogs); the rest judgement. Silent nerves
// keep a small weight: a lesion nobody would be examined for.
func nerveWeight(n nerveID) float64 {
	switch n {
	case of(anatomy.Sciatic):
		return 0.47
	case of(anatomy.Fibular):
		return 0.37
	case of(anatomy.Tibial):
		return 0.16
	case of(anatomy.Radial), nerveRadialLow, of(anatomy.Femoral):
		return 0.3
	case of(anatomy.Suprascapular), of(anatomy.Median), of(anatomy.Ulnar), of(anatomy.Musculocutaneous):
		return 0.2
	case nerveFacial:
		return 0.7
	case nerveTrigeminal:
		return 0.7
	case nerveVagus:
		return 0.2
	case nerveOptic, nerveOculomotor, of(anatomy.Pudendal):
		return 0.1
	case of(anatomy.CaudalNerves):
		return 0.05
	}
	return 0.015
}

// coarse sites that pairs are made of. Cord places are stood for by one range each.
var coarseCord = [...][2]int{{1, 2}, {5, 6}, {7, 8}, {12, 13}, {19, 20}, {24, 25}, {26, 28}, {28, 30}}

// pairSeverities are the three severities of a member of a pair, as indices of the grid.
var pairSeverities = [...]int{0, 2, 4}

// pairs adds the sites of two lesions: cord with cord, and cord with what commonly stands
// beside it. At most 5,000 hypotheses.
func (sp *space) pairs() {
	plain := [...]Side{Even, LeftOnly, RightOnly}
	var cords [][]*site
	for _, c := range coarseCord {
		var row []*site
		for _, side := range plain {
			row = append(row, &site{kind: Cord, from: c[0], to: c[1], side: side, extent: 1, region: regionOf(c[0], c[1]), vertebra: sp.vertebra[(c[0]+c[1])/2]})
		}
		cords = append(cords, row)
	}
	var pairs []*site
	join := func(a, b *site, w float64) {
		n := *a
		n.second, n.weight, n.kind = b, w, Two
		pairs = append(pairs, &n)
	}
	for i := range cords {
		for j := i + 1; j < len(cords); j++ {
			for _, a := range cords[i] {
				for _, b := range cords[j] {
					join(a, b, 1)
				}
			}
		}
	}
	var beside []*site
	for _, side := range plain {
		beside = append(beside,
			&site{kind: Joint, from: -1, to: -1, side: side, part: partStifle, region: NoRegion, vertebra: -1, weight: 2},
			&site{kind: CaudaEquina, from: 27, to: sp.segments - 1, side: side, region: L4S3, vertebra: -1, weight: 2},
			&site{kind: Brain, from: -1, to: -1, side: side, part: partForebrain, region: BrainRegion, vertebra: -1, weight: 1},
			&site{kind: Brain, from: -1, to: -1, side: side, part: partVestibularPeripheral, region: BrainRegion, vertebra: -1, weight: 1})
	}
	beside = append(beside, &site{kind: Generalised, from: -1, to: -1, part: partLongest, region: GeneralisedRegion, vertebra: -1, weight: 1})
	for i := range cords {
		for _, a := range cords[i] {
			for _, b := range beside {
				if a.side != Even && b.kind == Brain && b.side == Even {
					continue
				}
				join(a, b, b.weight)
			}
		}
	}
	sum := 0.0
	for _, t := range pairs {
		sum += t.weight
	}
	for _, t := range pairs {
		t.weight = float64(t.weight/sum) * sp.p.Pair
	}
	sp.sites = append(sp.sites, pairs...)
}

// touchesPlexus tells whether the variants of a plexus matter to the site, and which.
func (t *site) touchesPlexus() (girdle int, ok bool) {
	if t.from < 0 || t.kind == PainOnly || t.kind == Two {
		return 0, false
	}
	if t.to >= 4 && t.from <= 10 {
		return thoracic, true
	}
	if t.to >= 22 && t.from <= 31 {
		return pelvic, true
	}
	return 0, false
}

// each calls yield for every hypothesis in a fixed order. The pointer is reused.
func (sp *space) each(yield func(h *hypothesis)) {
	p := sp.p
	for i, t := range sp.sites {
		h := hypothesis{site: t, index: i}
		balances, centrals := [3]float64{1, 0, 0}, [2]float64{1, 0}
		acutes := [2]float64{1 - p.Acute, p.Acute}
		variants := [3]float64{1, 0, 0}
		companies := [2]float64{1, 0}
		severityOf := func(acute int) [severities]float64 { return p.Severity[acute] }
		same := func(v ...float64) {
			severityOf = func(int) [severities]float64 { return [severities]float64(v) }
		}
		if g, ok := t.touchesPlexus(); ok {
			variants = sp.variants[g]
		}
		switch t.kind {
		case Cord:
			balances = p.Balance
			if t.region <= C6T2 {
				severityOf = func(acute int) [severities]float64 { return p.SeverityNeck[acute] }
			}
			if _, ok := t.touchesPlexus(); !ok {
				balances = [3]float64{0.5, 0.5, 0}
			}
			if t.from >= segT3 && t.from < segL4 {
				companies = [2]float64{1 - p.Shock, p.Shock}
			}
			if t.from <= 9 && (t.side == Even || t.side == LeftWorse || t.side == RightWorse) {
				centrals = [2]float64{1 - p.Central, p.Central}
			}
		case NoLesion:
			same(1, 0, 0, 0, 0)
			acutes = [2]float64{1, 0}
		case PainOnly, Tendon, Systemic, Joint:
			acutes = [2]float64{1, 0}
			same(0.15, 0.25, 0.3, 0.2, 0.1)
			companies = [2]float64{1, 0}
			if t.kind == PainOnly {
				companies = [2]float64{1 - rootSignatureShare(t), rootSignatureShare(t)}
			}
		case Generalised, Nerve, Root, CaudaEquina, Plexus, Ischaemic:
			same(0.12, 0.2, 0.26, 0.22, 0.2)
			if t.kind == Nerve {
				same(0.09, 0.19, 0.27, 0.25, 0.2)
			}
			if t.kind == Generalised {
				same(0.15, 0.28, 0.3, 0.17, 0.1)
				companies = [2]float64{0.6, 0.4}
			}
		case Brain:
			same(0.15, 0.2, 0.25, 0.22, 0.18)
			if t.part == partVestibularPeripheral {
				companies = [2]float64{0.7, 0.3}
			}
		case Two:
			acutes = [2]float64{1, 0}
		}
		if t.kind == Two {
			for _, a := range pairSeverities {
				for _, b := range pairSeverities {
					h.severity, h.second = a, b
					h.prior = t.weight / 9
					yield(&h)
				}
			}
			continue
		}
		for s, severity := range sp.steps {
			like := likeSeverity(severity)
			for bal, wb := range balances {
				for c, wc := range centrals {
					for ac, wa := range acutes {
						for v, wv := range variants {
							for co, wco := range companies {
								if t.kind == Cord && companies[1] > 0 { // spinal shock: acute and severe only
									switch {
									case ac == 1 && severity >= 0.8:
									case co == 0:
										wco = 1
									default:
										continue
									}
								}
								w := float64(float64(float64(severityOf(ac)[like]*wb)*float64(wc*wa)) * float64(wv*wco))
								if w == 0 {
									continue
								}
								h.severity, h.balance, h.central, h.acute = s, bal, c == 1, ac == 1
								h.variant, h.company, h.prior = v, co == 1, float64(w*t.weight)
								yield(&h)
							}
						}
					}
				}
			}
		}
	}
}

// likeSeverity returns the step of Severities that says how likely a severity is: the first that is
// not below it.
func likeSeverity(severity float64) int {
	for k, s := range Severities {
		if severity <= s {
			return k
		}
	}
	return severities - 1
}

// rootSignatureShare: how often a source of pain alone carries a root signature. C2–C5 discs
// 0.15 on average, C6–T2 discs 0.30 (seed table on Schachar-2024 and Dachs-2024); lumbosacral 0.3, from memory.
func rootSignatureShare(t *site) float64 {
	switch {
	case t.from >= 1 && t.from <= 2: // Farlat-2024: none with C2–C3
		return 0.08
	case t.from > 2 && t.from < segC6:
		return 0.18
	case t.from >= segC6 && t.from < segT3:
		return 0.35
	case t.from >= segL4:
		return 0.3
	}
	return 0
}

// build fills b with the damage of every element of the graph under the hypothesis.
func (sp *space) build(h *hypothesis, b *body, other *body) {
	b.reset()
	b.acute = h.acute
	sp.put(b, h.site, h, sp.steps[h.severity])
	if h.site.second != nil {
		other.reset()
		sp.put(other, h.site.second, h, sp.steps[h.second])
		b.join(other)
	}
}

func (sp *space) put(b *body, t *site, h *hypothesis, sev float64) {
	p := sp.p
	share := t.side.shares(sev)
	kind := t.kind
	if kind == Two {
		kind = Cord
	}
	switch kind {
	case Cord:
		grey, white := sev, sev
		switch h.balance {
		case 1:
			grey = float64(sev * p.WhiteGrey)
		case 2:
			white = float64(sev * p.GreyWhite)
		}
		for seg := t.from; seg <= t.to; seg++ {
			for side := range 2 {
				b.hurt(seg, side, float64(grey*share[side]), 0)
			}
		}
		tr := tract{from: t.from, to: t.to, girth: [2]float64{p.FrontShare, 1}}
		if h.central {
			tr.girth = [2]float64{1, p.CentralHind}
		}
		for side := range 2 {
			tr.loss[side] = float64(white * share[side])
		}
		b.tracts[b.nt] = tr
		b.nt++
		b.cord = true
		if h.company {
			b.shock = 1
		}
		b.origin = max(b.origin, float64(float64(0.5*(tr.loss[left]+tr.loss[right]))))
		b.ctAt = t.vertebra
		hurts := p.PainLater
		if h.acute {
			hurts = p.PainAcute
		}
		sp.ache(b, t, hurts)
		if reach, limb := rootReach(t); reach {
			for side := range 2 {
				// A disc under the plexus carries pain into the limb now and then.
				b.rootPain[limb*2+side] = float64(p.CordRoot * share[side])
			}
		}
	case PainOnly:
		sp.ache(b, t, 0.3+float64(0.7*sev))
		if reach, limb := rootReach(t); reach && h.company {
			for side := range 2 {
				b.rootPain[limb*2+side] = float64((0.5 + float64(0.4*sev)) * share[side])
			}
		}
		// A guarded animal moves a little worse: judgement.
		for l := range 4 {
			b.weak[l] = float64(0.05 * sev)
		}
	case Root, Plexus, CaudaEquina:
		for seg := t.from; seg <= t.to; seg++ {
			for side := range 2 {
				b.hurt(seg, side, 0, float64(sev*share[side]))
			}
		}
		hurts := 0.5
		if t.kind == Plexus {
			hurts = 0.3
		}
		sp.ache(b, t, hurts)
		if reach, limb := rootReach(t); reach {
			for side := range 2 {
				b.rootPain[limb*2+side] = float64(float64(0.35+float64(0.2*sev)) * share[side])
			}
		}
		if t.kind == CaudaEquina {
			b.lsStress = p.Stenosis
			b.tailPain = 0.5
		}
	case Nerve:
		for side := range 2 {
			b.nerve[t.nerve][side] = float64(sev * share[side])
			g, limb := nerveLimb(t.nerve)
			if limb {
				b.limbPain[g*2+side] = float64(0.4 * share[side])
				b.rootPain[g*2+side] = float64(0.15 * share[side]) // DellApa: root signature in 13 %
			}
		}
	case Generalised:
		sp.putGeneralised(b, t.part, sev, h)
	case Brain:
		sp.putBrain(b, t, sev, share, h)
	case Ischaemic:
		for side := range 2 {
			l := limbPL + side
			b.clot[side] = float64(sev * share[side])
			b.weak[l] = float64(0.9 * b.clot[side])
			b.distal[l] = float64(0.9 * b.clot[side])
			b.sensory[l] = float64(0.75 * b.clot[side])
			b.limbPain[l] = float64(0.8 * b.clot[side])
		}
	case Joint:
		for side := range 2 {
			v := float64(sev * share[side])
			switch t.part {
			case partStifle:
				b.stifle[side] = v
				b.joint[limbPL+side] = float64(0.3 * v)
				b.weak[limbPL+side] = float64(0.25 * v)
			case partHip:
				b.joint[limbPL+side] = v
				b.weak[limbPL+side] = float64(0.25 * v)
			case partShoulder:
				b.joint[limbTL+side] = v
				b.weak[limbTL+side] = float64(0.15 * v)
			}
		}
	case Tendon:
		for side := range 2 {
			v := float64(sev * share[side])
			l := limbTL + side
			if t.part == partCalcanean {
				l = limbPL + side
			}
			b.tendon[l] = v
			b.limbPain[l] = float64(0.3 * v)
			b.weak[l] = float64(0.15 * v)
		}
	case Systemic:
		b.systemic = sev
		for l := range 4 {
			b.weak[l] = float64(0.45 * sev)
		}
		b.tiring = float64(0.7 * sev)
	}
}

func (sp *space) putGeneralised(b *body, which part, sev float64, h *hypothesis) {
	for l := range 4 {
		front := l < limbPL
		switch which {
		case partNerves:
			b.diffuse[l] = sev
			if front {
				b.diffuse[l] = float64(0.85 * sev)
			}
			b.sensory[l] = float64(0.15 * sev)
		case partLongest:
			b.distal[l] = sev
			if front {
				b.distal[l] = float64(0.35 * sev)
			}
			b.sensory[l] = float64(0.25 * b.distal[l])
			b.weak[l] = float64(0.25 * b.distal[l])
		case partJunction:
			b.weak[l] = sev
			b.diffuse[l] = float64(0.12 * sev)
		case partToxin:
			b.weak[l] = float64(0.6 * sev)
			b.diffuse[l] = float64(0.85 * sev)
		case partMuscle:
			b.weak[l] = float64(0.75 * sev)
			b.diffuse[l] = float64(0.1 * sev)
		}
	}
	switch which {
	case partNerves:
		b.larynx = float64(0.5 * sev)
		b.wasting = float64(0.6 * sev)
		if h.company {
			b.cranial = float64(0.8 * sev)
		}
	case partLongest:
		b.larynx = float64(0.3 * sev)
		if h.company {
			b.larynx = float64(0.9 * sev)
		}
	case partJunction:
		b.tiring = 0.4 + float64(0.5*sev)
		b.larynx = float64(0.4 * sev)
		if h.company {
			b.cranial = float64(0.8 * sev)
		}
	case partToxin:
		b.tiring = float64(0.4 * sev)
		b.larynx = float64(0.7 * sev)
		if h.company {
			b.cranial = float64(0.9 * sev)
		}
	case partMuscle:
		b.tiring = float64(0.7 * sev)
		b.wasting = float64(0.9 * sev)
		b.myalgia = float64(0.6 * sev)
		if h.company {
			b.cranial = float64(0.4 * sev)
		}
	}
}

func (sp *space) putBrain(b *body, t *site, sev float64, share [2]float64, h *hypothesis) {
	for side := range 2 {
		v := float64(sev * share[side])
		switch t.part {
		case partForebrain:
			b.fore[side] = v
		case partBrainstem:
			b.stem[side] = v
		case partCerebellum:
			b.cereb[side] = v
		case partVestibularCentral:
			b.vestC[side] = v
		case partVestibularPeripheral:
			b.vestP[side] = v
			if h.company { // middle ear: facial nerve and sympathetic fibres pass there
				b.nerve[nerveFacial][side] = float64(0.6 * v)
				b.midEar[side] = float64(0.6 * v)
			}
		}
	}
	b.pain[painCervical] = float64(0.08 * sev) // deStrobel: 2.2 % of sore necks
}

// ache spreads a source of pain over the places where it may be palpated: fully at its own
// place, less at those near by (judgement; pain is hard to place to a segment).
func (sp *space) ache(b *body, t *site, strength float64) {
	lo, hi := sp.vertebra[t.from], sp.vertebra[t.to]
	if t.kind == PainOnly {
		lo, hi = t.vertebra, t.vertebra
	}
	if t.kind == CaudaEquina {
		lo = min(lo, vertL7)
		hi = max(vertL7+1, lo)
		if t.from >= 29 {
			hi = vertL7 + 3
		}
	}
	for i, r := range painRange {
		gap := 0
		switch {
		case hi < r[0]:
			gap = r[0] - hi
		case lo > r[1]:
			gap = lo - r[1]
		}
		near := 1.0
		if gap > 0 {
			near = max(0, 0.6-float64(0.15*float64(gap)))
		}
		b.pain[i] = both(b.pain[i], float64(strength*near))
	}
	b.lsStress = max(b.lsStress, float64(1.05*b.pain[painLumbosacral]))
	b.tailPain = max(b.tailPain, max(float64(0.6*b.pain[painLumbosacral]), float64(0.8*b.pain[painSacrocaudal])))
}

// Vertebrae by index for dog and cat: C1 is 0, T1 7, L1 20, S1 27, Cd1 30.
const (
	vertT1  = 7
	vertL1  = 20
	vertL7  = 26
	vertS1  = 27
	vertCd1 = 30
)

// rootReach tells whether pain from the site's segments is carried into a limb, and which girdle.
func rootReach(t *site) (bool, int) {
	mid := (t.from + t.to) / 2
	switch {
	case mid >= 1 && mid < segT3:
		return true, thoracic
	case mid >= segL4 && (mid <= 28 || t.kind == PainOnly && t.vertebra <= vertL7):
		return true, pelvic
	}
	return false, 0
}

// nerveLimb returns the girdle of a named nerve, and false for nerves of the head, trunk and tail.
func nerveLimb(n nerveID) (int, bool) {
	switch {
	case n == nerveRadialLow || n >= of(anatomy.Suprascapular) && n <= of(anatomy.Ulnar):
		return thoracic, true
	case n >= of(anatomy.Femoral) && n <= of(anatomy.Tibial):
		return pelvic, true
	}
	return 0, false
}
