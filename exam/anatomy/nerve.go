package anatomy

import "cordwalk.example/cordwalk/exam"

// Nerve is one named peripheral nerve.
type Nerve uint8

// The nerves: thoracic limb, then pelvic limb and pelvis.
const (
	NoNerve Nerve = iota
	Suprascapular
	Subscapular
	Axillary
	Musculocutaneous
	Radial
	Median
	Ulnar
	Thoracodorsal
	LateralThoracic
	LongThoracic
	CranialPectoral
	CaudalPectoral
	Phrenic
	LateralCutaneousFemoral
	Genitofemoral
	Femoral
	Saphenous
	Obturator
	CranialGluteal
	CaudalGluteal
	Sciatic
	Fibular
	Tibial
	CaudalCutaneousFemoral
	Pudendal
	Pelvic
	Hypogastric
	CaudalNerves
	nerveCount
)

// Plexus tells which bundle of roots a nerve comes from.
type Plexus uint8

// The plexuses.
const (
	Brachial Plexus = iota + 1
	Lumbosacral
	CaudalPlexus // nerves of the tail
)

// String returns the plexus's name.
func (p Plexus) String() string {
	return [...]string{"", "brachial plexus", "lumbosacral plexus", "caudal nerves"}[p%4]
}

// NerveInfo is what is known of a nerve in one species.
type NerveInfo struct {
	Nerve   Nerve
	Name    string
	Plexus  Plexus
	Roots   []Weight // the spinal nerves it is formed from
	Counted bool     // Roots are shares counted in animals, variants included: do not shift them again
	Muscles string   // muscles it serves
	Skin    string   // its autonomous zone of skin, empty where it has none that is tested
	Loss    string   // what its loss looks like
	Source  string
}

// nerveTable is the dog's; catRoots, horseRoots and rabbitRoots say what differs.
var nerveTable = [nerveCount]NerveInfo{
	Suprascapular: {Name: "suprascapular", Plexus: Brachial, Roots: roots("C6* C7"), Muscles: "supraspinatus, infraspinatus",
		Loss: "spinatus atrophy, prominent scapular spine, little gait change", Source: "range horse-TL and Budras-bovine (horse, cattle); dog and main from memory"},
	Subscapular: {Name: "subscapular", Plexus: Brachial, Roots: roots("C6 C7"), Muscles: "subscapularis",
		Loss: "usually silent", Source: "from memory"},
	Axillary: {Name: "axillary", Plexus: Brachial, Roots: roots("(C6) C7* C8"), Muscles: "deltoideus, teres major and minor, caudal subscapularis",
		Skin: "lateral brachium", Loss: "weaker shoulder flexion, usually silent", Source: "from memory"},
	Musculocutaneous: {Name: "musculocutaneous", Plexus: Brachial, Roots: roots("C6 C7* C8"), Muscles: "coracobrachialis, biceps, brachialis",
		Skin: "medial antebrachium", Loss: "the elbow cannot flex, biceps reflex lost", Source: "biceps mainly C7: Illinois; range from memory"},
	Radial: {Name: "radial", Plexus: Brachial, Roots: roots("(C6) C7 C8* T1 (T2)"),
		Muscles: "triceps, tensor fasciae antebrachii, anconeus; extensor carpi radialis, digital extensors, ulnaris lateralis, supinator",
		Skin:    "dorsal paw, cranial and lateral antebrachium", Loss: "high: the elbow drops, no weight; low: knuckling only", Source: "triceps C7–T2: Illinois; C7–T1: LAN-34; main from memory"},
	Median: {Name: "median", Plexus: Brachial, Roots: roots("(C7) C8* T1* (T2)"), Muscles: "flexor carpi radialis, pronator teres, most digital flexors",
		Skin: "palmar paw, medial", Loss: "slight carpal hyperextension", Source: "range C8–T1/2 teaching notes; main from memory"},
	Ulnar: {Name: "ulnar", Plexus: Brachial, Roots: roots("C8* T1* (T2)"), Muscles: "flexor carpi ulnaris, part of the deep flexor, interossei",
		Skin: "caudal antebrachium, lateral (5th) digit", Loss: "slight carpal hyperextension", Source: "range C8–T1/2 teaching notes; main from memory"},
	Thoracodorsal: {Name: "thoracodorsal", Plexus: Brachial, Roots: roots("(C7) C8*"), Muscles: "latissimus dorsi",
		Loss: "silent", Source: "student notes, low grade; agrees with memory"},
	LateralThoracic: {Name: "lateral thoracic", Plexus: Brachial, Roots: roots("C8* T1*"), Muscles: "cutaneous trunci",
		Loss: "the cutaneous trunci does not move on that side", Source: "CL-89, MC-2011-intro"},
	LongThoracic: {Name: "long thoracic", Plexus: Brachial, Roots: roots("C7*"), Muscles: "serratus ventralis",
		Loss: "raised scapula", Source: "student notes, low grade"},
	CranialPectoral: {Name: "cranial pectoral", Plexus: Brachial, Roots: roots("C6-C8"), Muscles: "superficial pectorals",
		Loss: "silent", Source: "student notes, low grade"},
	CaudalPectoral: {Name: "caudal pectoral", Plexus: Brachial, Roots: roots("C8-T2"), Muscles: "deep pectorals",
		Loss: "silent", Source: "student notes, low grade"},
	Phrenic: {Name: "phrenic", Plexus: Brachial, Roots: roots("C5-C7"), Muscles: "diaphragm",
		Loss: "paradoxical breathing", Source: "from memory"},
	LateralCutaneousFemoral: {Name: "lateral cutaneous femoral", Plexus: Lumbosacral, Roots: roots("L3 L4* (L5)"), Muscles: "psoas",
		Skin: "craniolateral thigh", Loss: "none", Source: "from memory"},
	Genitofemoral: {Name: "genitofemoral", Plexus: Lumbosacral, Roots: roots("L3=0.33 L4=1"), Counted: true, Muscles: "cremaster",
		Skin: "inguinal, medial thigh", Loss: "none", Source: "Gomez-2015: L3 and L4 in the median type (33 % of 12 sides), L4 alone in the postfixed"},
	Femoral: {Name: "femoral", Plexus: Lumbosacral, Roots: roots("L4 L5* L6"), Muscles: "iliopsoas, quadriceps, sartorius",
		Skin: "through the saphenous nerve", Loss: "the limb collapses, no weight; patellar reflex lost", Source: "CL-409; Malakli-2023 (5 dogs)"},
	Saphenous: {Name: "saphenous", Plexus: Lumbosacral, Roots: roots("L4 L5* L6"),
		Skin: "medial stifle and tarsus, medial (2nd) digit", Loss: "numb medial limb", Source: "CL-91, CSAIM-767; roots as the femoral nerve"},
	Obturator: {Name: "obturator", Plexus: Lumbosacral, Roots: roots("(L4) L5* L6*"), Muscles: "adductor, gracilis, pectineus, external obturator",
		Loss: "limbs slide apart on a smooth floor", Source: "Malakli-2023 (5 dogs); L4–L6 from memory"},
	CranialGluteal: {Name: "cranial gluteal", Plexus: Lumbosacral, Roots: roots("L6 L7* S1"), Muscles: "middle and deep gluteal, tensor fasciae latae",
		Loss: "gluteal atrophy, mild", Source: "NCSU-lab6"},
	CaudalGluteal: {Name: "caudal gluteal", Plexus: Lumbosacral, Roots: roots("L7* S1 S2"), Muscles: "superficial gluteal",
		Loss: "silent", Source: "NCSU-lab6"},
	Sciatic: {Name: "sciatic", Plexus: Lumbosacral, Roots: roots("L6 L7* S1 (S2)"), Muscles: "biceps femoris, semitendinosus, semimembranosus, then its branches",
		Skin: "caudal distal thigh, caudal tarsus", Loss: "the hip flexes, hock and digits do not; the hock drops", Source: "CSAIM-767; Malakli-2023"},
	Fibular: {Name: "common fibular", Plexus: Lumbosacral, Roots: roots("L6* L7* (S1)"), Muscles: "cranial tibial, digital extensors, fibularis",
		Skin: "dorsum of the hind paw, cranial crus", Loss: "knuckling, straight hock, weak hock flexion", Source: "signs CL-415; origin from memory, beside TA-GM-14"},
	Tibial: {Name: "tibial", Plexus: Lumbosacral, Roots: roots("(L6) L7* S1* (S2)"), Muscles: "gastrocnemius, digital flexors, popliteus",
		Skin: "plantar paw", Loss: "dropped hock", Source: "from memory, beside TA-GM-14"},
	CaudalCutaneousFemoral: {Name: "caudal cutaneous femoral", Plexus: Lumbosacral, Roots: roots("(L7) S1* S2*"),
		Skin: "caudal thigh, perineum", Loss: "none", Source: "from memory"},
	Pudendal: {Name: "pudendal", Plexus: Lumbosacral, Roots: roots("L7=0.05 S1=0.25 S2=0.8 S3=0.8"), Counted: true, Muscles: "external anal and urethral sphincters, perineal muscles",
		Skin: "perineum", Loss: "perineal reflex and anal tone lost", Source: "Gomez-2015, counted on 20 sides: L7 1, S1 5, S2 16, S3 16"},
	Pelvic: {Name: "pelvic", Plexus: Lumbosacral, Roots: roots("L7=0.27 S1=0.64 S2=0.91 S3=0.64 Cd1=0.09"), Counted: true, Muscles: "detrusor, colon (parasympathetic)",
		Loss: "flaccid bladder", Source: "Gomez-2015, counted on 22 sides: L7 6, S1 14, S2 20, S3 14, Cd1 2"},
	Hypogastric: {Name: "hypogastric", Plexus: Lumbosacral, Roots: roots("L1-L4"), Muscles: "internal urethral sphincter; relaxes the detrusor (sympathetic)",
		Loss: "none", Source: "dvm360-mict"},
	CaudalNerves: {Name: "caudal nerves", Plexus: CaudalPlexus, Roots: roots("Cd1-Cd5"), Muscles: "tail",
		Skin: "tail", Loss: "limp, numb tail", Source: "from memory"},
}

// rootsOf one species that differ from the dog's.
type rootsOf struct {
	roots   []Weight
	counted bool
	source  string
}

// Where the cat differs. The brachial plexus of the domestic cat is C6–T1 (from memory): no C5, no T2.
var catRoots = map[Nerve]rootsOf{
	Sciatic:        {roots("(L4) (L5) L6* L7 S1 (S2)"), false, "BNAU-cat: fibres from L4 to S2, most from L6"},
	Fibular:        {roots("(L4) (L5) L6* L7 S1 (S2)"), false, "BNAU-cat: fibres from L4 to S2, most from L6"},
	Tibial:         {roots("(L4) (L5) L6* L7 S1 (S2)"), false, "BNAU-cat: fibres from L4 to S2, most from L6; soleus L7–S1 by ventral root: FHL-1984"},
	Hypogastric:    {roots("L2-L5"), false, "teaching notes"},
	Radial:         {roots("(C6) C7 C8* T1"), false, "as the dog; plexus C6–T1 in the cat, from memory"},
	Median:         {roots("(C7) C8* T1*"), false, "as the dog; plexus C6–T1 in the cat, from memory"},
	Ulnar:          {roots("(C7) C8* T1*"), false, "Fritz-1986-II: caudal C7 to caudal T1"},
	CaudalPectoral: {roots("C8 T1"), false, "as the dog; plexus C6–T1 in the cat, from memory"},
}

// What is published for the horse: the range only, hence no main segment.
var horseRoots = map[Nerve]rootsOf{
	Suprascapular:    {roots("C6 C7"), false, "horse-TL"},
	Musculocutaneous: {roots("C7 C8"), false, "horse-TL"},
}

// What is published for the rabbit: Nascimento-2019, 30 sides; L6+L7 63.3 %, L5+L6 13.4 %,
// L7 13.4 %, L7+S1 6.6 %, L6+L7+S1 3.3 %. The shares below add up those that hold a root.
var rabbitRoots = map[Nerve]rootsOf{
	Obturator: {roots("L5=0.134 L6=0.8 L7=0.866 S1=0.099"), true, "Nascimento-2019, counted on 30 sides"},
}

// Nerves lists every nerve, thoracic limb first.
func Nerves() []Nerve {
	out := make([]Nerve, 0, nerveCount-1)
	for n := NoNerve + 1; n < nerveCount; n++ {
		out = append(out, n)
	}
	return out
}

// String returns the nerve's name.
func (n Nerve) String() string {
	if n > NoNerve && n < nerveCount {
		return nerveTable[n].Name
	}
	return ""
}

// InfoOf returns what is known of a nerve in a species. The error is a *NoData where nothing is.
func InfoOf(s exam.Species, n Nerve) (NerveInfo, error) {
	if n <= NoNerve || n >= nerveCount {
		return NerveInfo{}, &NoData{s, "such nerves"}
	}
	info := nerveTable[n]
	info.Nerve = n
	var special map[Nerve]rootsOf
	switch s {
	case exam.Dog:
		return info, nil
	case exam.Cat:
		special = catRoots
		if _, ok := special[n]; !ok {
			info.Source += "; dog, no cat count found"
			return info, nil
		}
	case exam.Horse:
		special = horseRoots
	case exam.Rabbit:
		special = rabbitRoots
	}
	r, ok := special[n]
	if !ok {
		return NerveInfo{}, &NoData{s, "roots of the " + info.Name + " nerve"}
	}
	info.Roots, info.Counted, info.Source = r.roots, r.counted, r.source
	return info, nil
}

// rootsFor returns the roots of a nerve in a species, nil where there are none on record.
func rootsFor(s exam.Species, n Nerve) []Weight {
	info, err := InfoOf(s, n)
	if err != nil {
		return nil
	}
	return info.Roots
}

// Variant is one way a plexus is formed: every root moved by Shift segments.
type Variant struct {
	Name      string
	Shift     int     // segments, caudal is positive
	Frequency float64 // share of sides
	Source    string
}

// Variants returns how often a plexus is prefixed, median and postfixed. Frequencies add up
// to 1. For the cat no count was found: it has the median form alone.
//
// Brachial: pooled from Allam 1952 (58 limbs, from memory: C6–T1 34, C5–T1 12, C6–T2 10, C5–T2
// 2, the last taken half and half) and Lambertini-2023 (36 plexuses, all C6–T1). Lumbosacral:
// Gomez-2015 (22 sides; mixed classes shared equally between their parts).
func Variants(s exam.Species, p Plexus) ([]Variant, error) {
	switch {
	case s == exam.Cat && (p == Brachial || p == Lumbosacral):
		return []Variant{{"median", 0, 1, "no count of plexus variants in cats was found"}}, nil
	case s == exam.Dog && p == Brachial:
		const src = "derived: Allam 1952 (from memory) and Lambertini-2023 pooled, 94 limbs"
		return []Variant{{"prefixed", -1, 13.0 / 94, src}, {"median", 0, 70.0 / 94, src}, {"postfixed", 1, 11.0 / 94, src}}, nil
	case s == exam.Dog && p == Lumbosacral:
		const src = "derived: Gomez-2015, 22 sides"
		// Pure pre 4.5, median 9, post 18.1; pre–post 36.6, median–post 22.7, all three 9 %.
		pre, mid, post := 4.5+36.6/2+9.0/3, 9+22.7/2+9.0/3, 18.1+36.6/2+22.7/2+9.0/3
		sum := pre + mid + post
		return []Variant{{"prefixed", -1, pre / sum, src}, {"median", 0, mid / sum, src}, {"postfixed", 1, post / sum, src}}, nil
	}
	return nil, &NoData{s, "plexus variants"}
}
