package localise

// An arc is a set of spinal nerves, with weights, and the named nerves that carry them:
// the graph between cord and muscle or skin.
type arcID uint8

// The arcs. Muscles and motor arms first, then skin zones, then the rest.
const (
	arcShoulder   arcID = iota // supraspinatus, infraspinatus: suprascapular
	arcDeltoid                 // shoulder flexion: axillary
	arcBiceps                  // elbow flexion: musculocutaneous
	arcTriceps                 // triceps: radial, above the elbow
	arcExtensor                // extensor carpi radialis: radial, to the forearm
	arcForearm                 // carpal and digital flexors: median, ulnar
	arcQuadriceps              // femoral
	arcHip                     // hip flexors: femoral and lumbar branches
	arcHamstring               // sciatic
	arcGluteal                 // cranial and caudal gluteal
	arcTibialis                // cranial tibial muscle: fibular
	arcGastroc                 // gastrocnemius: tibial
	arcPlantar                 // digital flexors behind: tibial
	arcPudendal                // anal and urethral sphincters, perineum
	arcPelvic                  // detrusor
	arcTail                    // caudal nerves
	arcTrunci                  // lateral thoracic nerve to cutaneous trunci
	arcHorner                  // T1–T3 to the eye
	arcPhrenic
	arcRadialSkin
	arcUlnarSkin
	arcMusculoSkin
	arcAxillarySkin
	arcSaphenousSkin
	arcFibularSkin
	arcTibialSkin
	arcPudendalSkin
	arcTailSkin
	arcFrontSense // all sensation of a thoracic limb
	arcHindSense  // all sensation of a pelvic limb
	arcCount
)

// arc holds the weights of one arc for one species and plexus variant.
type arc struct {
	weight [maxSegments]float64 // share of each spinal nerve; sums to 1
	from   [maxSegments + 1]float64
	lo, hi int // segments with weight
	girdle int
	nerves []nerveShare
}

// nerveShare says how much of an arc is lost when a named nerve is cut.
type nerveShare struct {
	nerve nerveID
	share float64
}

// caudal returns the share of the arc's weight at or caudal to a segment.
func (a *arc) caudal(seg int) float64 {
	if seg < 0 {
		seg = 0
	}
	if seg > maxSegments {
		return 0
	}
	return a.from[seg]
}

// state is what a hypothesis does to every arc and limb: the L, U, A and P that findings
// are made of.
type state struct {
	*body
	p *Params

	arcLoss [arcCount][2]float64 // L: share of the arc that is lost
	arcUp   [arcCount][2]float64 // U: loss of descending control of the arc
	up      [4]float64           // U of the limb
	path    [4]float64           // A: ascending path in the cord
	sense   [4]float64           // share of the limb's sensory nerves and roots that is lost
	lower   [4]float64           // L of the limb's motion
	motor   [4]float64           // loss of motion on purpose
	deep    [4]float64           // loss of deep pain
	light   [4]float64           // loss of superficial pain
	upTail  float64              // U of tail and bladder: needs both sides
	upLow   [2]float64           // U of the sacral segments by side
}

// armsWeights: what moves a limb. Judgement, from memory: the extensors carry the weight.
var frontMotor = [...]struct {
	arc    arcID
	weight float64
}{{arcShoulder, 0.15}, {arcBiceps, 0.15}, {arcTriceps, 0.4}, {arcExtensor, 0.15}, {arcForearm, 0.15}}

var hindMotor = [...]struct {
	arc    arcID
	weight float64
}{{arcQuadriceps, 0.4}, {arcHip, 0.1}, {arcHamstring, 0.15}, {arcGluteal, 0.1}, {arcTibialis, 0.1}, {arcGastroc, 0.15}}

// derive fills st from b by the arcs of one plexus variant.
func (st *state) derive(b *body, arcs *[arcCount]arc, p *Params) {
	*st = state{body: b, p: p}
	for id := range arcs {
		a := &arcs[id]
		for side := range 2 {
			keep := 1.0
			if b.first < a.hi && b.last > a.lo {
				lost := 0.0
				for s := max(a.lo, b.first); s < min(a.hi, b.last); s++ {
					if a.weight[s] > 0 {
						lost += float64(a.weight[s] * both(b.grey[s][side], b.root[s][side]))
					}
				}
				keep = 1 - lost
			}
			for _, n := range a.nerves {
				keep = float64(keep * (1 - float64(n.share*b.nerve[n.nerve][side])))
			}
			st.arcLoss[id][side] = 1 - keep
			free := 1.0
			for i := range b.nt {
				t := &b.tracts[i]
				reach := float64(t.loss[side] * t.girth[a.girdle])
				free = float64(free * (1 - float64(reach*a.caudal(t.from+1))))
			}
			st.arcUp[id][side] = 1 - free
		}
	}
	for g := range 2 {
		for side := range 2 {
			l := g*2 + side
			sense, motors := arcFrontSense, frontMotor[:]
			if g == pelvic {
				sense, motors = arcHindSense, hindMotor[:]
			}
			lower, up := 0.0, 0.0
			for _, m := range motors {
				lower += float64(m.weight * st.arcLoss[m.arc][side])
				up += float64(m.weight * st.arcUp[m.arc][side])
			}
			st.lower[l] = both(both(lower, b.diffuse[l]), float64(0.35*b.distal[l]))
			st.up[l] = up
			free := 1.0
			for i := range b.nt {
				t := &b.tracts[i]
				reach := float64(t.loss[side] * t.girth[g])
				free = float64(free * (1 - float64(reach*arcs[sense].caudal(t.from+1))))
			}
			st.path[l] = 1 - free
			st.sense[l] = both(st.arcLoss[sense][side], b.sensory[l])
			st.motor[l] = both(both(up, st.lower[l]), b.weak[l])
		}
	}
	st.nociception()
	st.low(arcs)
}

// nociception fills the loss of superficial and deep pain. Pain runs in paths of both sides, so
// deep pain goes only when both are nearly gone; superficial pain leans on both as well
// (SAIM-1080; the split between own and other side is from memory).
func (st *state) nociception() {
	for g := range 2 {
		l, r := g*2+left, g*2+right
		least := min(st.path[l], st.path[r])
		for side := range 2 {
			k := g*2 + side
			own := st.path[k]
			cordLight := float64(0.75*least) + float64(0.25*own)
			cordDeep := float64(0.9*least) + float64(0.1*own)
			st.light[k] = both(cordLight, st.sense[k])
			st.deep[k] = both(cordDeep, deepOfSense(st.sense[k]))
		}
	}
}

// deepOfSense: deep pain of a limb survives while any of its nerves does.
func deepOfSense(s float64) float64 { return float64(s * s) }

func (st *state) low(arcs *[arcCount]arc) {
	for side := range 2 {
		st.upLow[side] = st.arcUp[arcPudendal][side]
	}
	least := min(st.upLow[left], st.upLow[right])
	mean := float64(0.5 * (st.upLow[left] + st.upLow[right]))
	st.upTail = float64(0.6*least) + float64(0.4*mean)
}

func clip(x, lo, hi float64) float64 { return max(lo, min(hi, x)) }

// mean returns the mean of both sides of an arc's loss.
func (st *state) mean(id arcID) float64 {
	return float64(0.5 * (st.arcLoss[id][left] + st.arcLoss[id][right]))
}
