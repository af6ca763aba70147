package localise

import "cordwalk.example/cordwalk/exam"

// Sides of the body as array indices. A limb is girdle*2 + side.
const (
	left  = 0
	right = 1

	thoracic = 0
	pelvic   = 1
)

// The four limbs.
const (
	limbTL = thoracic*2 + left
	limbTR = thoracic*2 + right
	limbPL = pelvic*2 + left
	limbPR = pelvic*2 + right
)

// maxSegments bounds the cord segments of a species that the engine knows (dog and cat: 36).
const maxSegments = 36

// Places where spinal pain is looked for, in the order of the vocabulary.
const (
	painCervical = iota
	painCranialThoracic
	painMidThoracic
	painThoracolumbar
	painLumbar
	painLumbosacral
	painSacrocaudal
	painPlaces
)

var painSites = [painPlaces]exam.Site{exam.Cervical, exam.CranialThoracic, exam.MidThoracic,
	exam.Thoracolumbar, exam.Lumbar, exam.Lumbosacral, exam.Sacrocaudal}

// tract is the loss of white matter in one cord lesion: it cuts descending control of
// everything caudal to segment from, and the ascending paths that enter at or caudal to it.
type tract struct {
	from  int
	to    int
	loss  [2]float64 // by side, 0 to 1
	girth [2]float64 // share of the loss that reaches the paths of the thoracic and of the pelvic limbs
}

// body is the graph with the damage of every element under one hypothesis. Damage runs
// from 0 (sound) to 1 (lost). The zero body is a sound animal.
type body struct {
	grey   [maxSegments][2]float64 // motor neurons and interneurons
	root   [maxSegments][2]float64 // dorsal and ventral root and spinal nerve
	first  int                     // cranial-most segment with grey or root damage
	last   int                     // one past the caudal-most
	nerve  [nerveCount][2]float64
	tracts [2]tract
	nt     int

	pain     [painPlaces]float64 // pain sources under each palpated place
	lsStress float64             // pain on extending the lumbosacral joint
	tailPain float64             // pain on lifting the tail
	rootPain [4]float64          // root signature: pain carried into the limb
	limbPain [4]float64          // muscle or soft tissue of the limb
	joint    [4]float64          // painful joints of the limb other than the stifle
	stifle   [2]float64          // torn cruciate ligament
	tendon   [4]float64          // torn tendon: calcanean behind, carpal support in front
	clot     [2]float64          // lost blood flow to the pelvic limb

	weak     [4]float64 // loss of power without loss of the reflex arc
	diffuse  [4]float64 // loss of every lower motor neuron of the limb
	distal   [4]float64 // loss of the longest nerves of the limb
	sensory  [4]float64 // loss of the limb's sensory nerves
	cranial  float64    // cranial lower motor neurons of both sides
	larynx   float64
	tiring   float64 // power that fades with use
	wasting  float64 // muscle lost everywhere
	myalgia  float64
	systemic float64 // drug, heart, metabolism

	fore   [2]float64 // by side of the lesion
	stem   [2]float64
	cereb  [2]float64
	vestC  [2]float64
	vestP  [2]float64
	midEar [2]float64 // sympathetic fibres in the middle ear

	shock  float64 // spinal shock of the pelvic limbs
	ctAt   int     // vertebra over the point of greatest damage, -1 for none
	acute  bool    // within the first week
	cord   bool    // has a cord lesion (for posture and stepping by reflex)
	origin float64 // greatest white matter loss of both sides, for shock and posture
}

// reset makes b the sound body again.
func (b *body) reset() { *b = body{first: maxSegments, ctAt: -1} }

// both returns what remains lost when two independent losses meet.
func both(a, b float64) float64 { return 1 - float64((1-a)*(1-b)) }

func (b *body) hurt(seg, side int, grey, root float64) {
	b.grey[seg][side] = both(b.grey[seg][side], grey)
	b.root[seg][side] = both(b.root[seg][side], root)
	b.first = min(b.first, seg)
	b.last = max(b.last, seg+1)
}

// join adds the damage of c to b: the two lesions of a pair.
func (b *body) join(c *body) {
	for s := c.first; s < c.last; s++ {
		for side := range 2 {
			b.hurt(s, side, c.grey[s][side], c.root[s][side])
		}
	}
	for n := range b.nerve {
		for side := range 2 {
			b.nerve[n][side] = both(b.nerve[n][side], c.nerve[n][side])
		}
	}
	for i := range c.nt {
		if b.nt < len(b.tracts) {
			b.tracts[b.nt] = c.tracts[i]
			b.nt++
		}
	}
	merge := func(x, y []float64) {
		for i := range x {
			x[i] = both(x[i], y[i])
		}
	}
	merge(b.pain[:], c.pain[:])
	b.lsStress, b.tailPain = both(b.lsStress, c.lsStress), both(b.tailPain, c.tailPain)
	for _, p := range [][2][]float64{
		{b.rootPain[:], c.rootPain[:]}, {b.limbPain[:], c.limbPain[:]}, {b.joint[:], c.joint[:]},
		{b.stifle[:], c.stifle[:]}, {b.tendon[:], c.tendon[:]}, {b.clot[:], c.clot[:]},
		{b.weak[:], c.weak[:]}, {b.diffuse[:], c.diffuse[:]}, {b.distal[:], c.distal[:]},
		{b.sensory[:], c.sensory[:]}, {b.fore[:], c.fore[:]}, {b.stem[:], c.stem[:]},
		{b.cereb[:], c.cereb[:]}, {b.vestC[:], c.vestC[:]}, {b.vestP[:], c.vestP[:]}, {b.midEar[:], c.midEar[:]},
	} {
		merge(p[0], p[1])
	}
	b.cranial, b.larynx = both(b.cranial, c.cranial), both(b.larynx, c.larynx)
	b.tiring, b.wasting = both(b.tiring, c.tiring), both(b.wasting, c.wasting)
	b.myalgia, b.systemic = both(b.myalgia, c.myalgia), both(b.systemic, c.systemic)
	if b.ctAt < 0 {
		b.ctAt = c.ctAt
	}
	b.cord = b.cord || c.cord
	b.shock = max(b.shock, c.shock)
	b.origin = max(b.origin, c.origin)
}
