package localise

// Kind is a class of explanation for an exam.
type Kind uint8

// The kinds, from the cord outward.
const (
	Cord        Kind = iota // a lesion of the cord
	PainOnly                // a painful disc, root, joint or meninges without loss of function
	Root                    // a spinal nerve or its root
	Plexus                  // several roots torn: plexus avulsion, or a lesion across a plexus
	CaudaEquina             // several roots within the canal, caudal to the cord
	Nerve                   // one named nerve
	Generalised             // lower motor neuron disease of the whole animal: nerve, junction, muscle
	Brain                   // forebrain, brainstem, cerebellum, vestibular
	Ischaemic               // a clot in the aorta or its branches
	Joint                   // painful or unstable joints
	Tendon                  // a torn tendon, a failed ligament
	Systemic                // drug, heart, metabolism
	NoLesion                // nothing wrong
	Two                     // two lesions at different sites
	kindCount
)

var kindNames = [kindCount]string{"cord", "pain", "root", "plexus", "cauda-equina", "nerve", "generalised", "brain",
	"ischaemic", "joint", "tendon", "systemic", "none", "two-sites"}

var kindWords = [kindCount]string{"cord", "pain only", "spinal nerve or root", "plexus", "cauda equina", "nerve",
	"lower motor neurons everywhere", "brain", "blood supply", "joints", "tendon or ligament", "drug, heart or metabolism",
	"nothing found", "two lesions"}

// String returns the kind's name in results.
func (k Kind) String() string {
	if k < kindCount {
		return kindNames[k]
	}
	return "unknown"
}

// Words returns the kind in plain English.
func (k Kind) Words() string {
	if k < kindCount {
		return kindWords[k]
	}
	return "unknown"
}

// Region is one of the eight regions that a lesion is localised to.
type Region uint8

// The regions. A lesion of roots, plexus or cauda equina, and a source of pain, counts to
// the region of its segments; a single named nerve and lost blood supply to Peripheral;
// joints, tendons, drugs and nothing found to NoRegion.
const (
	C1C5 Region = iota
	C6T2
	T3L3
	L4S3
	Peripheral
	GeneralisedRegion
	BrainRegion
	NoRegion
	regionCount
)

var regionNames = [regionCount]string{"C1-C5", "C6-T2", "T3-L3", "L4-S3", "peripheral", "generalised", "brain", "none"}

// String returns the region's name in results.
func (r Region) String() string {
	if r < regionCount {
		return regionNames[r]
	}
	return "unknown"
}

// Side says on which side a lesion lies, or which side is worse.
type Side uint8

// The sides. Even is both sides alike, or no side at all.
const (
	Even Side = iota
	LeftOnly
	RightOnly
	LeftWorse
	RightWorse
	sideCount
)

var sideNames = [sideCount]string{"both", "left", "right", "left-worse", "right-worse"}

// String returns the side's name in results.
func (s Side) String() string {
	if s < sideCount {
		return sideNames[s]
	}
	return "unknown"
}

// main folds left-worse into left and right-worse into right.
func (s Side) main() Side {
	switch s {
	case LeftWorse:
		return LeftOnly
	case RightWorse:
		return RightOnly
	}
	return s
}

// shares returns how much of the severity reaches the left and the right half. The lesser
// half of a lesion that is worse on one side takes 0.5 of a slight lesion and 0.9 of a
// complete one: severe lesions reach both halves (judgement).
func (s Side) shares(severity float64) [2]float64 {
	lesser := 0.4 + float64(0.5*severity)
	switch s {
	case LeftOnly:
		return [2]float64{1, 0}
	case RightOnly:
		return [2]float64{0, 1}
	case LeftWorse:
		return [2]float64{1, lesser}
	case RightWorse:
		return [2]float64{lesser, 1}
	}
	return [2]float64{1, 1}
}
