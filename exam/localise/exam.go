package localise

import (
	"math"
	"strings"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
)

// Exam is what the engine weighs: the findings and what is known of the animal. Zero values
// mean «not known».
type Exam struct {
	Species     exam.Species
	Findings    []exam.Finding
	Breed       string // as on file
	WeightKg    float64
	AgeYears    float64
	OnsetDays   float64 // days from the onset to the exam; use a small positive number for the same day
	Operated    bool    // a surgery is on file
	Diagnosis   string  // the problem on file, in words
	Level       string  // its vertebral level, such as T12-T13
	Sedation    exam.Sedation
	Precautions []exam.PrecautionOn
	Day         exam.Date // of the exam: precautions that end before it bar nothing

	presence []exam.Key // cells of which only presence is known, not the degree
}

// OfFile returns the exam of an exam file.
func OfFile(f exam.File) Exam {
	x := Exam{Species: f.Species, Findings: f.Findings, Breed: f.Breed, WeightKg: f.WeightKg, Operated: f.Surgery != "",
		Diagnosis: f.Problem.Diagnosis, Level: f.Problem.Level, Sedation: f.Sedation, Precautions: f.Precautions}
	if !f.Examined.IsZero() {
		x.Day = exam.DayOf(f.Examined)
		if d, ok := f.Born.DaysBefore(f.Examined); ok && d > 0 {
			x.AgeYears = d / 365.25
		}
		if d, ok := f.Onset.DaysBefore(f.Examined); ok {
			x.OnsetDays = max(d, 0.1)
		}
	}
	return x
}

// OfVisit returns the exam of a patient's visit, with the first problem that was not resolved.
func OfVisit(p exam.Patient, v exam.Visit) Exam {
	return OfFile(exam.FileOf(p, v))
}

// timing returns the chance that the exam falls into the first week, p where it is not known.
// Between five and ten days the answer runs over, as atrophy and spinal shock do.
func (x *Exam) timing(p float64) float64 {
	switch d := x.OnsetDays; {
	case d <= 0:
		return p
	case d <= 5:
		return 0.999
	case d >= 10:
		return 0.001
	default:
		return 0.999 - float64(0.998*float64((d-5)/5))
	}
}

// says reports whether the file holds anything that bears on the site.
func (x *Exam) says() bool { return x.Level != "" || x.Diagnosis != "" }

// labelWeight is the share of the prior that goes by the label; the rest stays as if there
// were none, so that the exam can overrule it. Judgement.
const labelWeight = 0.75

// diagnosisKinds: words of diagnoses and the kinds they name, common practice.
var diagnosisKinds = []struct {
	word  string
	kinds []Kind
	part  []part
}{
	{"myasthenia", []Kind{Generalised}, []part{partJunction}},
	{"botulism", []Kind{Generalised}, []part{partToxin}},
	{"tick paralysis", []Kind{Generalised}, []part{partToxin}},
	{"polyradiculoneuritis", []Kind{Generalised}, []part{partNerves}},
	{"polyneuropathy", []Kind{Generalised}, []part{partNerves, partLongest}},
	{"neuropathy", []Kind{Generalised, Nerve}, []part{partNerves, partLongest, noPart}},
	{"myositis", []Kind{Generalised}, []part{partMuscle}},
	{"myopathy", []Kind{Generalised}, []part{partMuscle}},
	{"avulsion", []Kind{Plexus, Root}, nil},
	{"plexus", []Kind{Plexus, Root}, nil},
	{"cauda equina", []Kind{CaudaEquina, Root}, nil},
	{"lumbosacral", []Kind{CaudaEquina, Root, PainOnly}, nil},
	{"vestibular", []Kind{Brain}, []part{partVestibularCentral, partVestibularPeripheral}},
	{"cerebell", []Kind{Brain}, []part{partCerebellum}},
	{"epilep", []Kind{Brain}, []part{partForebrain}},
	{"enceph", []Kind{Brain}, nil},
	{"brain", []Kind{Brain}, nil},
	{"cruciate", []Kind{Joint}, []part{partStifle}},
	{"thrombo", []Kind{Ischaemic}, nil},
	{"calcanean", []Kind{Tendon}, []part{partCalcanean}},
	{"achilles", []Kind{Tendon}, []part{partCalcanean}},
	{"disc", []Kind{Cord, PainOnly, Root, CaudaEquina}, nil},
	{"ivd", []Kind{Cord, PainOnly, Root, CaudaEquina}, nil},
	{"extrusion", []Kind{Cord, PainOnly, Root, CaudaEquina}, nil},
	{"fce", []Kind{Cord}, nil},
	{"embol", []Kind{Cord}, nil},
	{"myelopathy", []Kind{Cord}, nil},
	{"wobbler", []Kind{Cord, PainOnly}, nil},
	{"spondylomyelopathy", []Kind{Cord, PainOnly}, nil},
	{"fracture", []Kind{Cord, CaudaEquina, Root, PainOnly}, nil},
	{"luxation", []Kind{Cord, CaudaEquina, Root, PainOnly}, nil},
	{"sciatic", []Kind{Nerve}, nil},
	{"radial", []Kind{Nerve}, nil},
	{"femoral nerve", []Kind{Nerve}, nil},
	{"facial", []Kind{Nerve}, nil},
}

// label returns, for each site, by how many nats the file moves its prior. Levels go through
// the vertebra → segment table by weight; a level without a diagnosis speaks of cord, roots
// and pain alike. The sums stay normalised.
func (m *Model) label(x *Exam, out []int64) bool {
	for i := range out {
		out[i] = 0
	}
	if !x.says() {
		return false
	}
	word := strings.ToLower(x.Diagnosis)
	var kinds []Kind
	var parts []part
	named := false
	for _, d := range diagnosisKinds {
		if word != "" && strings.Contains(word, d.word) {
			kinds, parts, named = d.kinds, d.part, true
			break
		}
	}
	var near [maxSegments]float64
	placed := x.Level != "" && m.segmentsAt(x, &near)
	if !named && !placed {
		return false
	}
	match := func(t *site) float64 {
		w := 1.0
		if named {
			w = 0
			for _, k := range kinds {
				if t.kind == k {
					w = 1
				}
			}
			if w > 0 && len(parts) > 0 {
				w = 0
				for _, p := range parts {
					if t.part == p {
						w = 1
					}
				}
			}
		} else if t.from < 0 || t.kind == Two {
			w = 0
		}
		if placed && w > 0 {
			if t.from < 0 || t.kind == Two {
				return 0
			}
			best := 0.0
			for s := t.from; s <= t.to; s++ {
				best = max(best, near[s])
			}
			if n := t.to - t.from + 1; n > 2 && t.kind == Cord {
				best = float64(best * 2 / float64(n)) // a long lesion is a weak match for one level
			}
			w = float64(w * best)
		}
		return w
	}
	// The prior of the label alone, over the sites, then mixed with the plain one.
	sum := 0.0
	for _, t := range m.sp.sites {
		sum += float64(t.weight * match(t))
	}
	if sum <= 0 {
		return false
	}
	for i, t := range m.sp.sites {
		ratio := (1 - labelWeight) + float64(labelWeight*float64(match(t)/sum))
		// A thousandth of a nat is fine enough, and swallows any last bit of package anatomy's normal distribution.
		out[i] = int64(math.Round(float64(logOf(ratio)*1024))) * (logScale / 1024)
	}
	return true
}

// segmentsAt fills near with how well each segment fits the level on file, best 1.
func (m *Model) segmentsAt(x *Exam, near *[maxSegments]float64) bool {
	from, to, err := exam.ParseLevelRange(x.Level, m.species)
	if err != nil {
		return false
	}
	add := func(ws []anatomy.Weight, err error) {
		if err != nil {
			return
		}
		for _, w := range ws {
			if i := anatomy.Index(m.species, w.Segment); i >= 0 {
				near[i] = max(near[i], w.Weight)
			}
		}
	}
	all := exam.Vertebrae(m.species)
	a, b := exam.VertebraIndex(m.species, from), exam.VertebraIndex(m.species, to)
	if a == b {
		add(anatomy.SegmentAtVertebra(m.species, x.WeightKg, from))
	}
	for v := a; v < b; v++ {
		add(anatomy.SegmentsAtDisc(m.species, x.WeightKg, all[v]))
		if root := anatomy.RootAtDisc(m.species, all[v]); root != 0 { // the root that leaves there
			if i := anatomy.Index(m.species, root); i >= 0 {
				near[i] = max(near[i], 0.5)
			}
		}
	}
	best := 0.0
	for _, w := range near {
		best = max(best, w)
	}
	if best <= 0 {
		return false
	}
	for i := range near {
		near[i] /= best
	}
	return true
}

// context is how what is known of the animal bends a cell's answers: each probability p
// becomes keep × p + add.
type context struct {
	keep float64
	add  [8]float64
}

// sum adds up what the context adds to a range of categories.
func (c *context) sum(from, to int16) float64 {
	s := c.add[from]
	for g := from + 1; g <= to; g++ {
		s += c.add[g]
	}
	return s
}

// bend returns the context of a cell, and false where nothing bends it.
func (m *Model) bend(x *Exam, c *cell) (ctx context, bent bool) {
	ctx.keep = 1
	mix := func(share float64, to ...float64) {
		ctx.keep = float64(ctx.keep * (1 - share))
		for g := range ctx.add {
			ctx.add[g] = float64(ctx.add[g] * (1 - share))
			if g < len(to) {
				ctx.add[g] += float64(share * to[g])
			}
		}
		bent = true
	}
	old := x.AgeYears >= 10
	switch c.item {
	case exam.Patellar:
		if old {
			// Levine-2002: absent in at least one limb in 4 of 14 dogs from ten years on, 2 of
			// 72 before; 0.16 for each limb beyond the general error.
			mix(0.16, 0.7, 0.3)
		}
		if x.Sedation >= exam.SedationMild {
			// sedation-2021: the swing grew from 9.6° to 24.4° (medetomidine and butorphanol).
			mix(0.3, 0, 0, 0.3, 0.7)
		}
	case exam.Withdrawal, exam.WithdrawalHock, exam.WithdrawalDigits:
		if c.girdle == pelvic && c.digit != exam.Medial && x.oldProtrusion() {
			// LaRosa-2023: 91.3 % of 80 French bulldogs with a disc extrusion further forward had a
			// lumbosacral protrusion too, and 15.1 % of these a withdrawal reduced or absent that
			// it may explain: 0.14 in all. That most are reduced, not absent, is judgement.
			mix(0.14, 0.2, 0.8)
		}
	case exam.Menace:
		if x.AgeYears > 0 && x.AgeYears < 0.25 {
			mix(0.7, 0.8, 0.15, 0.05) // not learned before about twelve weeks: from memory
		}
	case exam.CrossedExtensor:
		if x.AgeYears > 0 && x.AgeYears < 0.1 {
			mix(0.6, 0.2, 0.8) // normal in the first weeks: LAN-34
		}
	case exam.Vision:
		if x.AgeYears > 0 && x.AgeYears < 0.08 {
			mix(0.8, 0.8, 0.2)
		}
	}
	// Sedation dulls what needs a wakeful animal: judgement; withdrawal angles did not change
	// (sedation-2021), nor do reflexes in themselves.
	if d := x.Sedation; d >= exam.SedationMild {
		share := [...]float64{0, 0.25, 0.5, 0.75}[d]
		switch c.item {
		case exam.Mentation:
			mix(share, 0.02, 0.18, 0.7, 0.1)
		case exam.PawPlacement, exam.Hopping, exam.TactilePlacing, exam.ExtensorThrust, exam.Wheelbarrow, exam.Menace:
			mix(share, 0.3, 0.5, 0.2)
		case exam.Ambulation:
			mix(float64(0.7*share), 0.1, 0.4, 0.5)
		case exam.VoluntaryMotor:
			mix(float64(0.7*share), 0.02, 0.13, 0.25, 0.35, 0.25)
		case exam.Ataxia:
			mix(float64(0.8*share), 0.2, 0.4, 0.3, 0.1)
		case exam.Tone:
			mix(float64(0.6*share), 0.1, 0.5, 0.4)
		case exam.SuperficialPain:
			mix(float64(0.6*share), 0.15, 0.5, 0.35)
		case exam.DeepPain:
			mix(float64(0.4*share), 0.1, 0.5, 0.4)
		case exam.SpinalPain, exam.LumbosacralExtension, exam.TailLift, exam.JointPain, exam.LimbPain:
			mix(float64(0.6*share), 0.75, 0.2, 0.05)
		case exam.Palpebral, exam.Corneal, exam.AnalTone, exam.Gag, exam.JawTone:
			mix(float64(0.4*share), 0.05, 0.55, 0.4)
		}
	}
	return ctx, bent
}

// oldProtrusion reports whether an old protrusion at the lumbosacral joint is usual in animals of
// its kind: in French bulldogs, by the names of the breed in the program's languages and its
// short name (common practice). Puppies have none yet: judgement.
func (x *Exam) oldProtrusion() bool {
	if x.Breed == "" || x.Species != exam.Dog || x.AgeYears > 0 && x.AgeYears < 1 {
		return false
	}
	name := strings.ToLower(x.Breed)
	for _, n := range [...]string{"french bull", "frenchie", "bouledogue fran", "französische bull", "bulldog francés", "bulldog frances"} {
		if strings.Contains(name, n) {
			return true
		}
	}
	return false
}

// habits is what is known of an animal that bends the answers of some cells.
type habits struct {
	age        float64
	sedated    exam.Sedation
	protrusion bool
}

func (x *Exam) habits() habits { return habits{x.AgeYears, x.Sedation, x.oldProtrusion()} }

// unstableNeck reports whether the file names an instability, luxation or fracture of the
// neck, or of a place it does not say.
func unstableNeck(x *Exam) bool {
	word := strings.ToLower(x.Diagnosis)
	for _, w := range [...]string{"atlantoaxial", "instab", "luxation", "fracture"} {
		if !strings.Contains(word, w) {
			continue
		}
		from, _, err := exam.ParseLevelRange(x.Level, x.Species)
		return w == "atlantoaxial" || err != nil || from.Region() == exam.RegionC
	}
	return false
}
