package localise

import (
	"math"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
)

// cell is one place of an exam that can hold a grade: an item at a site, with digit or joint.
type cell struct {
	item   exam.Item
	site   exam.Site
	digit  exam.Digit
	joint  exam.Joint
	girdle int // thoracic or pelvic; pelvic for what lies caudal
	side   int // left or right; left for the midline
	place  int // palpation place of spinal pain
	group  int
	low    int8 // the lowest grade
	cats   int  // categories: grades in order, for cutaneous trunci also the level
	row    func(sp *space, c *cell, st *state, out *rowKey)
}

func (c *cell) key() exam.Key {
	return exam.Key{Item: c.item, Site: c.site, Digit: c.digit, Joint: c.joint}
}

// rowKey tells apart the answers that cells can give: ordinal items by one latent value,
// others by up to three.
type rowKey [3]int32

// quantum is the step of latent values: equal values must be told apart from values that
// differ by rounding only.
const quantum = 1 << 28

// value is the inverse of quantise.
func value(k int32) float64 { return float64(float64(k) / quantum) }

func quantise(x float64) int32 { return int32(math.Round(float64(x * quantum))) }

// Categories of the cutaneous trunci: absent, lost caudal to a level that was not said,
// normal, then lost caudal to each vertebra from T1 to L4.
const (
	trunciAbsent = iota
	trunciSomewhere
	trunciNormal
	trunciLevels
	trunciCats = trunciLevels + vertL1 + 4 - vertT1
)

// trunciCategory maps a finding onto a category. A level at or caudal to L5 is normal.
func trunciCategory(s exam.Species, f exam.Finding) int {
	g, _ := f.Result.Grade()
	switch {
	case f.Normal():
		return trunciNormal
	case g == 0:
		return trunciAbsent
	case f.Level == 0:
		return trunciSomewhere
	}
	v := max(exam.VertebraIndex(s, f.Level), vertT1)
	return trunciLevels + v - vertT1
}

// layout lists the cells and groups of a model.
type layout struct {
	cells  []cell
	groups []string
	first  [256][64]int16 // by item and site: the first of its cells, −1 where there is none
}

// find returns the cell of a key. The cells of an item and site lie together.
func (l *layout) find(k exam.Key) (int, bool) {
	if int(k.Site) >= len(l.first[0]) {
		return 0, false
	}
	i := int(l.first[k.Item][k.Site])
	if i < 0 {
		return 0, false
	}
	for ; i < len(l.cells); i++ {
		c := &l.cells[i]
		if c.item != k.Item || c.site != k.Site {
			break
		}
		if c.digit == k.Digit && c.joint == k.Joint {
			return i, true
		}
	}
	return 0, false
}

// groupOf names the group of a cell. Cells of one group are tests of one arc on one limb
// (or of one thing on one side): they share a deviation.
func groupOf(c *cell) string {
	at := c.site.String()
	switch c.item {
	case exam.PawPlacement, exam.Hopping, exam.TactilePlacing, exam.ExtensorThrust, exam.Wheelbarrow, exam.Knuckling,
		exam.Ataxia, exam.Hypermetria:
		return "placing " + at
	case exam.VoluntaryMotor, exam.GroundClearance, exam.Stride:
		return "moving " + at
	case exam.Lameness, exam.RootSignature, exam.LimbPain, exam.JointPain, exam.JointSwelling:
		return "lame " + at
	case exam.Withdrawal, exam.WithdrawalShoulder, exam.WithdrawalElbow, exam.WithdrawalCarpus, exam.Biceps,
		exam.MassBiceps, exam.SensationMusculocutaneous, exam.SensationAxillary:
		if c.girdle == thoracic {
			return "flexors " + sideWord(c.side)
		}
		if c.digit == exam.Medial {
			return "femoral " + sideWord(c.side)
		}
		return "sciatic " + sideWord(c.side)
	case exam.Triceps, exam.ExtensorCarpi, exam.MassTriceps, exam.MassExtensorCarpi, exam.SensationRadial:
		return "radial " + sideWord(c.side)
	case exam.MassSupraspinatus, exam.MassInfraspinatus:
		return "shoulder " + sideWord(c.side)
	case exam.MassForearmFlexors, exam.SensationUlnar:
		return "forepaw " + sideWord(c.side)
	case exam.Stance:
		if c.girdle == thoracic {
			return "forepaw " + sideWord(c.side)
		}
		return "sciatic " + sideWord(c.side)
	case exam.Patellar, exam.MassQuadriceps, exam.WithdrawalHip, exam.SensationSaphenous:
		return "femoral " + sideWord(c.side)
	case exam.WithdrawalStifle, exam.WithdrawalHock, exam.WithdrawalDigits, exam.CranialTibial, exam.Gastrocnemius,
		exam.MassHamstrings, exam.MassGluteals, exam.MassCranialTibial, exam.MassGastrocnemius, exam.SensationFibular, exam.SensationTibial:
		return "sciatic " + sideWord(c.side)
	case exam.Tone, exam.CrossedExtensor:
		return "tone " + at
	case exam.SuperficialPain, exam.DeepPain:
		switch c.site {
		case exam.TailBase, exam.TailTip:
			return "tail feeling"
		}
		return "feeling " + at
	case exam.CutaneousTrunci, exam.CutaneousTrunciTwitch:
		return "trunci " + at
	case exam.Horner, exam.PupilSize:
		return "sympathetic " + at
	case exam.Menace, exam.Vision:
		return "sight " + at
	case exam.Palpebral, exam.FaceDroop:
		return "face " + at
	case exam.FacialSensation, exam.Corneal, exam.MassTemporalis, exam.MassMasseter:
		return "trigeminal " + at
	case exam.HeadTilt, exam.Strabismus, exam.EyeFollow, exam.NystagmusFastPhase:
		return "vestibular " + at
	case exam.HeadTurn, exam.Circling:
		return "turning " + at
	case exam.Perineal, exam.SensationPudendal:
		return "perineal " + at
	case exam.FemoralPulse, exam.PawWarmth:
		return "blood " + map[bool]string{true: "front ", false: "behind "}[c.girdle == thoracic] + sideWord(c.side)
	case exam.Mentation, exam.Behaviour:
		return "mind"
	case exam.Breathing, exam.Gums:
		return "breath"
	case exam.Voice, exam.Gag, exam.Swallowing:
		return "throat"
	case exam.AtaxiaProprioceptive, exam.AtaxiaVestibular, exam.AtaxiaCerebellar:
		return "kind of ataxia"
	case exam.Nystagmus, exam.NystagmusDirection:
		return "nystagmus"
	case exam.TailTone, exam.TailMovement:
		return "tail"
	case exam.VoluntaryUrination, exam.BladderFill, exam.BladderOutflow, exam.UrineLeak:
		return "bladder"
	case exam.FaecalContinence, exam.Defaecation:
		return "bowel"
	case exam.SpinalPain:
		return "spine"
	case exam.LumbosacralExtension, exam.TailLift:
		return "lumbosacral"
	}
	return c.item.String() + " " + at
}

func sideWord(side int) string { return [...]string{"left", "right"}[side] }

// silent items say nothing about the site of a lesion.
func silent(i exam.Item) bool {
	switch i {
	case exam.Appetite, exam.Cough, exam.SelfTrauma, exam.Wound, exam.Skin, exam.UrineLook:
		return true
	}
	return false
}

// pelvicItem tells of items of a side whether they are the pelvic limb's.
func pelvicItem(i exam.Item) bool {
	switch i {
	case exam.MassQuadriceps, exam.MassHamstrings, exam.MassGluteals, exam.MassCranialTibial, exam.MassGastrocnemius,
		exam.SensationSaphenous, exam.SensationFibular, exam.SensationTibial, exam.SensationPudendal, exam.Perineal,
		exam.StifleInstability, exam.FemoralPulse:
		return true
	}
	return false
}

func newLayout() *layout {
	lay := &layout{}
	for i := range lay.first {
		for j := range lay.first[i] {
			lay.first[i][j] = -1
		}
	}
	groups := map[string]int{}
	for _, item := range exam.Items() {
		if silent(item) {
			continue
		}
		in := item.Info()
		for _, site := range in.Sites {
			digits := []exam.Digit{exam.AnyDigit}
			if item.Has(exam.TakesDigit) && site.IsLimb() {
				digits = append(digits, exam.Medial, exam.Lateral)
			}
			joints := []exam.Joint{exam.NoJoint}
			if item.Has(exam.TakesJoint) {
				joints = append(joints, exam.Shoulder, exam.Elbow, exam.Carpus, exam.Digits)
				if site.IsPelvic() {
					joints = []exam.Joint{exam.NoJoint, exam.Hip, exam.Stifle, exam.Hock, exam.Digits}
				}
			}
			for _, d := range digits {
				for _, j := range joints {
					c := cell{item: item, site: site, digit: d, joint: j, low: in.First, cats: len(in.Grades), row: ordinalRow}
					if site.Side() == exam.Right {
						c.side = right
					}
					if site.IsPelvic() || site == exam.Perineum || site == exam.TailBase || site == exam.TailTip || !site.IsLimb() && pelvicItem(item) {
						c.girdle = pelvic
					}
					for i, s := range painSites {
						if s == site {
							c.place = i
						}
					}
					switch item {
					case exam.CutaneousTrunci:
						c.cats, c.row = trunciCats, trunciRow
					case exam.BladderFill, exam.BladderOutflow:
						c.row = bladderRow
					case exam.Tremor:
						c.row = tremorRow
					case exam.NystagmusDirection:
						c.row = directionRow
					}
					name := groupOf(&c)
					g, ok := groups[name]
					if !ok {
						g = len(lay.groups)
						groups[name] = g
						lay.groups = append(lay.groups, name)
					}
					c.group = g
					if lay.first[item][site] < 0 {
						lay.first[item][site] = int16(len(lay.cells))
					}
					lay.cells = append(lay.cells, c)
				}
			}
		}
	}
	return lay
}

// Quadrature of the deviation that tests of one arc share: a blunder one way, the usual
// three points of Gauss–Hermite, a blunder the other way.
const points = 5

// quadrature returns the deviations in logits and their weights.
func (p *Params) quadrature() (dev, weight [points]float64) {
	const blunder = 14 // logits: beyond every threshold, so that everything is read as lost, or as sound
	s := float64(p.ArcSpread * 1.7320508075688772)
	b := p.ArcBlunder
	dev = [points]float64{-blunder, -s, 0, s, blunder}
	rest := 1 - float64(1.5*b)
	// Reading a sound arc as lost and a lost arc as sound are not alike: the second needs a
	// movement seen that was not there. Half as likely: judgement.
	weight = [points]float64{float64(0.5 * b), float64(rest / 6), float64(rest * 2 / 3), float64(rest / 6), b}
	return dev, weight
}

func ordinalRow(_ *space, c *cell, st *state, out *rowKey) {
	*out = rowKey{quantise(st.latent(c))}
}

// rowOf returns the probability of each category at each quadrature point.
func (p *Params) rowOf(s exam.Species, c *cell, k rowKey, out [][points]float64) {
	switch c.item {
	case exam.CutaneousTrunci:
		trunciProbabilities(s, k, out)
	case exam.BladderFill, exam.BladderOutflow:
		p.bladder(c.item, k, out)
	case exam.Tremor:
		tremorProbabilities(k, out)
	case exam.NystagmusDirection:
		directionProbabilities(k, out)
	default:
		p.ordinal(c, value(k[0]), out)
		return
	}
}

// ordinal is the ordinal logit: the chance of being at least j grades below (above) normal
// is logistic(slope × (value − threshold j)), moved by the shared deviation.
func (p *Params) ordinal(c *cell, y float64, out [][points]float64) {
	r := &p.respond[c.item]
	n := c.cats
	normal := int(c.item.Info().Normal - c.item.Info().First)
	slip := r.slip
	if slip == 0 {
		slip = p.Slip
	}
	if c.girdle == thoracic && (c.item == exam.Withdrawal || c.item >= exam.WithdrawalShoulder && c.item <= exam.WithdrawalCarpus) {
		slip = p.SlipFrail
	}
	miss := [6]float64{0, slip, float64(0.3 * slip), float64(0.08 * slip), float64(0.03 * slip), float64(0.03 * slip)}
	devs, _ := p.quadrature()
	upOnly := len(r.down) == 0
	for q, u := range devs {
		// v is the value on the side below normal, w on the side above.
		v, w := y, -y
		uv, uw := u, -u
		if upOnly {
			w, uw = y, u
		}
		var at [6]float64 // at[g]: probability of grade g
		beyond := 1.0     // what is left for the normal grade
		prev := 0.0
		for j := len(r.down); j >= 1; j-- {
			t := logistic(float64(r.slope*(v-r.down[j-1])) + uv)
			t = max(t, prev)
			at[normal-j] = t - prev
			prev = t
		}
		beyond -= prev
		prev = 0
		for j := len(r.up); j >= 1; j-- {
			t := logistic(float64(r.slope*(w-r.up[j-1])) + uw)
			t = min(max(t, prev), max(beyond, 0))
			at[normal+j] = t - prev
			prev = t
		}
		at[normal] = max(beyond-prev, 0)
		// Plain mistakes: the grade next to the true one, seldom one further off.
		for g := range n {
			kept := at[g]
			for t := range n {
				if d := max(t-g, g-t); d > 0 {
					kept += float64(miss[d] * (at[t] - at[g]))
				}
			}
			out[g][q] = kept
		}
	}
}

// trunciRow: the pinched side's efferent loss, the chance of a cut-off, and the vertebra of the lesion.
func trunciRow(sp *space, c *cell, st *state, out *rowKey) {
	other := 1 - c.side
	absent := both(float64(0.9*st.arcLoss[arcTrunci][c.side]), float64(0.3*st.diffuse[limbTL+c.side]))
	absent = both(absent, float64(0.2*st.up[limbTL+c.side]))
	cut := 0.0
	at := int32(-1)
	if st.nt > 0 && st.tracts[0].to >= segT3-1 && st.ctAt >= vertT1 {
		t := &st.tracts[0]
		s := float64(0.7*t.loss[c.side]) + float64(0.3*t.loss[other])
		grey := float64(0.35 * st.grey[(t.from+t.to)/2][c.side])
		s = max(s, grey)
		// TrunciWalk at a walking severity of 0.3, TrunciLame from 0.65 on, nothing at none.
		p := sp.p
		switch {
		case s <= 0.3:
			cut = float64(p.TrunciWalk * float64(s/0.3))
		case s < 0.65:
			cut = p.TrunciWalk + float64((p.TrunciLame-p.TrunciWalk)*float64((s-0.3)/0.35))
		default:
			cut = p.TrunciLame
		}
		at = int32(st.ctAt)
	}
	*out = rowKey{quantise(absent), quantise(cut), at}
}

func trunciProbabilities(s exam.Species, k rowKey, out [][points]float64) {
	const levels = trunciCats - trunciLevels
	absent, cut := value(k[0]), value(k[1])
	// MC-2011: elicited in all of 155 dogs, a cut-off cranial to L5 in 1.3 %; Tsai-cats: a
	// clinician obtained it in 60 % of sound cats.
	missed, false1 := 0.03, 0.013
	if s == exam.Cat {
		missed = 0.4
	}
	absent = both(absent, missed)
	var p [trunciCats]float64
	present := 1 - absent
	for i := range levels {
		p[trunciLevels+i] = float64(float64(present*float64(1-cut)) * float64(false1/levels))
	}
	p[trunciNormal] = float64(float64(present*(1-cut)) * (1 - false1))
	if cut > 0 {
		offsets := anatomy.TrunciOffset()
		for o, w := range offsets {
			for slip, ws := range [3]float64{0.05, 0.9, 0.05} { // MC-2011: within a vertebra between observers
				mass := float64(float64(present*cut) * float64(w*ws))
				v := int(k[2]) + o + slip - 1
				switch i := v - vertT1; {
				case i >= levels:
					p[trunciNormal] += mass
				case i < 0:
					p[trunciLevels] += mass
				default:
					p[trunciLevels+i] += mass
				}
			}
		}
	}
	const floor = 0.03 // for absent and normal; shared among the levels
	scale := 1 - 3*floor
	p[trunciAbsent] = floor + float64(scale*absent)
	p[trunciNormal] = floor + float64(scale*p[trunciNormal])
	sum := 0.0
	for i := range levels {
		p[trunciLevels+i] = floor/levels + float64(scale*p[trunciLevels+i])
		sum += p[trunciLevels+i]
	}
	p[trunciSomewhere] = sum
	for c := range out {
		for q := range points {
			out[c][q] = p[c]
		}
	}
}

// bladderRow: control from above, and the sacral arc.
func bladderRow(_ *space, c *cell, st *state, out *rowKey) {
	low := both(st.mean(arcPelvic), float64(0.5*st.mean(arcPudendal)))
	*out = rowKey{quantise(st.upTail), quantise(low)}
}

func (p *Params) bladder(item exam.Item, k rowKey, out [][points]float64) {
	u, l := value(k[0]), value(k[1])
	devs, _ := p.quadrature()
	sum := u + l + 0.02
	for q, dev := range devs {
		full := logistic(float64(7*(both(float64(0.9*u), l)-0.5)) + dev)
		const floor = 0.03
		if item == exam.BladderFill {
			// Couper-2020: in sacral lesions the bladder is tense as often as soft.
			tense := (float64(0.85*u) + float64(0.5*l) + 0.01) / sum
			scale := 1 - 3*floor
			out[0][q] = floor + float64(scale*float64(full*tense))
			out[1][q] = floor + float64(scale*float64(full*(1-tense)))
			out[2][q] = floor + float64(scale*(1-full))
			continue
		}
		hard := (float64(0.75*u) + float64(0.3*l) + 0.005) / sum
		easy := (float64(0.17*u) + float64(0.35*l) + 0.01) / sum
		leaks := (float64(0.08*u) + float64(0.35*l) + 0.005) / sum
		scale := 1 - 4*floor
		out[0][q] = floor + float64(scale*float64(full*leaks))
		out[1][q] = floor + float64(scale*float64(full*hard))
		out[2][q] = floor + float64(scale*float64(full*easy))
		out[3][q] = floor + float64(scale*(1-full))
	}
}

func tremorRow(_ *space, _ *cell, st *state, out *rowKey) {
	*out = rowKey{quantise(max(st.cereb[left], st.cereb[right])),
		quantise(max(st.weak[limbPL], st.weak[limbPR], st.weak[limbTL], st.weak[limbTR]))}
}

func tremorProbabilities(k rowKey, out [][points]float64) {
	c, w := value(k[0]), value(k[1])
	intent, rest := float64(0.6*c), float64(0.12*w)
	for q := range points {
		out[2][q] = 0.03 + float64(0.91*intent)
		out[1][q] = 0.03 + float64(0.91*float64(rest*(1-intent)))
		out[0][q] = 1 - out[1][q] - out[2][q]
	}
}

func directionRow(_ *space, _ *cell, st *state, out *rowKey) {
	*out = rowKey{quantise(max(st.vestP[left], st.vestP[right])),
		quantise(both(max(st.vestC[left], st.vestC[right]), float64(0.6*max(st.stem[left], st.stem[right], st.cereb[left], st.cereb[right]))))}
}

// directionProbabilities: horizontal and rotary in peripheral disease; any, vertical and changing
// in central disease (anatomy.md G3, from memory; sizes judgement).
func directionProbabilities(k rowKey, out [][points]float64) {
	p, c := value(k[0]), value(k[1])
	peripheral := [4]float64{0.6, 0.32, 0.04, 0.04}
	central := [4]float64{0.32, 0.2, 0.24, 0.24}
	neither := [4]float64{0.5, 0.2, 0.15, 0.15}
	sum := p + c + 0.05
	for g := range 4 {
		v := (float64(p*peripheral[g]) + float64(c*central[g]) + float64(0.05*neither[g])) / sum
		for q := range points {
			out[g][q] = v
		}
	}
}
