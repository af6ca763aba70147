package anatomy

import "cordwalk.example/cordwalk/exam"

// Kind tells what a row of the arc table is.
type Kind uint8

// The kinds of arcs.
const (
	Reflex    Kind = iota + 1
	Myotome        // the bulk or posture of muscles
	SkinZone       // the skin that one nerve serves alone
	Sphincter      // anus, bladder, tail
	LongPath       // a test that needs the arc and also the cord above it
)

// Trust in an item as evidence about the segments of its arc (anatomy.md F1; the numbers are a choice).
const (
	Good     = 1.0
	Poor     = 0.2
	NotTrust = 0.0
)

// Arc says which segments an item tests, by which way, and how far it is trusted.
type Arc struct {
	Item     exam.Item
	Kind     Kind
	Segments []Weight
	Medial   []Weight // what a pinch of the medial digit tests, where that differs
	Counted  bool     // Segments are shares counted in animals
	Afferent []Nerve
	Efferent []Nerve
	Effector string
	Trust    float64
	Evidence string // "counted", "range only", "main stated" …
	Source   string
	pelvic   *Arc // where the item is tested on both girdles: the pelvic limb's row
}

// n is a short list of nerves.
func n(ns ...Nerve) []Nerve { return ns }

// Counted myotomes of the crus. Derived from TA-GM-14 (14 dogs): a root counts 1 for each dog
// in which it was among those with most fibres and ½ where it carried some, over 14.
// Gastrocnemius: L5 0+4, L6 2+11, L7 14+0, S1 10+2. Cranial tibial: L5 1+0, L6 12+1, L7 2+6
// (L6 and L7 together «in most»: taken as 8).
var (
	gastrocnemiusRoots = roots("L5=0.14 L6=0.54 L7=1 S1=0.79")
	cranialTibialRoots = roots("L5=0.07 L6=0.89 L7=0.36")
)

// arcTable is the dog's; catArcs says what differs in the cat. Sources as in the nerve table.
var arcTable = map[exam.Item]Arc{
	// Reflexes (F1).
	exam.Withdrawal: {Kind: Reflex, Segments: roots("C6 C7 C8 T1 (T2)"), Afferent: n(Radial, Ulnar, Median),
		Efferent: n(Musculocutaneous, Axillary, Median, Ulnar, Radial), Effector: "all flexors", Trust: Poor,
		Source: "SAIM-58.4; weak localiser: Forterre-2008",
		pelvic: &Arc{Kind: Reflex, Segments: roots("L6 L7 S1 (S2)"), Medial: roots("L4 L5 L6"), Afferent: n(Fibular, Tibial, Saphenous),
			Efferent: n(Sciatic, Femoral), Effector: "flexors of hip, stifle, hock and digits", Trust: Good,
			Source: "SAIM-58.4, CSAIM-767, CL-88, Tufts"}},
	exam.WithdrawalShoulder: {Kind: Reflex, Segments: roots("(C6) C7* C8"), Afferent: n(Radial, Ulnar, Median), Efferent: n(Axillary),
		Effector: "flexors of the shoulder", Trust: Poor, Source: "axillary nerve, from memory; trust Forterre-2008"},
	exam.WithdrawalElbow: {Kind: Reflex, Segments: roots("C6 C7* C8"), Afferent: n(Radial, Ulnar, Median), Efferent: n(Musculocutaneous),
		Effector: "biceps, brachialis", Trust: Poor, Source: "musculocutaneous nerve: Illinois; trust Forterre-2008"},
	exam.WithdrawalCarpus: {Kind: Reflex, Segments: roots("(C7) C8* T1* (T2)"), Afferent: n(Radial, Ulnar, Median), Efferent: n(Median, Ulnar),
		Effector: "flexors of carpus and digits", Trust: Poor, Source: "median and ulnar nerves, from memory; trust Forterre-2008"},
	exam.WithdrawalHip: {Kind: Reflex, Segments: roots("L4 L5* L6"), Afferent: n(Saphenous, Fibular, Tibial), Efferent: n(Femoral),
		Effector: "iliopsoas", Trust: Good, Source: "SAIM-58.4, CSAIM-767: no hip flexion means L4–L6 too"},
	exam.WithdrawalStifle: {Kind: Reflex, Segments: roots("L6 L7* S1 (S2)"), Afferent: n(Fibular, Tibial), Efferent: n(Sciatic),
		Effector: "hamstrings", Trust: Good, Source: "CSAIM-767, CL-88"},
	exam.WithdrawalHock: {Kind: Reflex, Segments: roots("L6* L7* S1"), Afferent: n(Fibular, Tibial), Efferent: n(Fibular),
		Effector: "cranial tibial and other flexors of the hock", Trust: Good, Source: "CSAIM-767: the hock that does not flex is sciatic, L6–S1; Tufts"},
	exam.WithdrawalDigits: {Kind: Reflex, Segments: roots("(L6) L7* S1* (S2)"), Afferent: n(Fibular, Tibial), Efferent: n(Tibial),
		Effector: "digital flexors", Trust: Good, Source: "CSAIM-767; tibial nerve from memory"},
	exam.Biceps: {Kind: Reflex, Segments: roots("C6 C7* C8"), Afferent: n(Musculocutaneous), Efferent: n(Musculocutaneous),
		Effector: "biceps", Trust: Poor, Source: "Illinois; hard to obtain in sound animals"},
	exam.Triceps: {Kind: Reflex, Segments: roots("C7 C8 T1 (T2)"), Afferent: n(Radial), Efferent: n(Radial),
		Effector: "triceps", Trust: Poor, Source: "Illinois, LAN-34; absence is no evidence"},
	exam.ExtensorCarpi: {Kind: Reflex, Segments: roots("C7 C8 T1"), Afferent: n(Radial), Efferent: n(Radial),
		Effector: "extensor carpi radialis", Trust: Poor, Source: "JVIM-2024 (obtained consistently); persisted after plexus block in cats: Barbosa-2014"},
	exam.Patellar: {Kind: Reflex, Segments: roots("L4 L5* L6"), Afferent: n(Femoral), Efferent: n(Femoral),
		Effector: "quadriceps", Trust: Good, Source: "SAIM-58.4, vettimes; the best tendon reflex"},
	exam.CranialTibial: {Kind: Reflex, Segments: roots("L6 L7 (S1)"), Afferent: n(Fibular), Efferent: n(Fibular),
		Effector: "cranial tibial muscle", Trust: NotTrust, Source: "SAIM-58.4; no true reflex: it persisted under epidural block, UFRPE-CT, Barbosa-2014"},
	exam.Gastrocnemius: {Kind: Reflex, Segments: roots("L7 S1 (L6)"), Afferent: n(Tibial), Efferent: n(Tibial),
		Effector: "gastrocnemius", Trust: Poor, Source: "from memory; inconsistent: dvm360-DLSS"},
	exam.Perineal: {Kind: Reflex, Segments: roots("L7=0.05 S1=0.25 S2=0.8 S3=0.8"), Counted: true, Afferent: n(Pudendal), Efferent: n(Pudendal, CaudalNerves),
		Effector: "anal sphincter, tail", Trust: Good, Evidence: "counted, 20 sides", Source: "SAIM-58.4, CSAIM-767, Illinois; shares Gomez-2015"},
	exam.CutaneousTrunci: {Kind: Reflex, Segments: roots("C8* T1*"), Efferent: n(LateralThoracic),
		Effector: "cutaneous trunci; the afferent lies at the pinched level", Trust: Good, Source: "CL-89, CL-78; global absence means little"},
	exam.CutaneousTrunciTwitch: {Kind: Reflex, Segments: roots("C8* T1*"), Efferent: n(LateralThoracic),
		Effector: "cutaneous trunci of the side that answers", Trust: Good, Source: "CL-89, CL-78"},
	exam.TailTone: {Kind: Sphincter, Segments: roots("Cd1-Cd5 (S3)"), Afferent: n(CaudalNerves), Efferent: n(CaudalNerves),
		Effector: "tail muscles", Trust: Good, Evidence: "range only", Source: "from memory"},
	exam.AnalTone: {Kind: Sphincter, Segments: roots("L7=0.05 S1=0.25 S2=0.8 S3=0.8"), Counted: true, Afferent: n(Pudendal), Efferent: n(Pudendal),
		Effector: "anal sphincter", Trust: Good, Evidence: "counted, 20 sides", Source: "Gomez-2015"},
	exam.Horner: {Kind: Reflex, Segments: roots("T1-T3"), Effector: "sympathetic path to the eye", Trust: Poor,
		Source: "vet-advisor-Horner, Zwueste-2019; alone it hardly localises"},

	// Tone needs the arc and what descends to it.
	exam.Tone: {Kind: LongPath, Segments: roots("C6 C7 C8 T1 (T2)"), Effector: "muscles of the limb", Trust: Poor, Source: "CSAIM-849; segments of the enlargement",
		pelvic: &Arc{Kind: LongPath, Segments: roots("L4-S1"), Effector: "muscles of the limb", Trust: Poor, Source: "CSAIM-849; segments of the enlargement"}},

	// Muscle mass and posture (D).
	exam.MassSupraspinatus:  {Kind: Myotome, Segments: roots("C6* C7"), Efferent: n(Suprascapular), Trust: Good, Evidence: "range only", Source: "horse-TL, Budras-bovine; cat shoulder pools mid-C5 to T2: Horner-1993"},
	exam.MassInfraspinatus:  {Kind: Myotome, Segments: roots("C6* C7"), Efferent: n(Suprascapular), Trust: Good, Evidence: "range only", Source: "horse-TL, Budras-bovine; cat shoulder pools mid-C5 to T2: Horner-1993"},
	exam.MassBiceps:         {Kind: Myotome, Segments: roots("C6 C7* C8"), Efferent: n(Musculocutaneous), Trust: Good, Evidence: "range; C7 stated", Source: "Illinois"},
	exam.MassTriceps:        {Kind: Myotome, Segments: roots("C7 C8* T1 (T2)"), Efferent: n(Radial), Trust: Good, Evidence: "range only", Source: "Illinois, LAN-34; main from memory"},
	exam.MassExtensorCarpi:  {Kind: Myotome, Segments: roots("C6 C7* C8"), Efferent: n(Radial), Trust: Good, Evidence: "cat pool located", Source: "Fritz-1986-I (cat); dog C7–T1 from memory"},
	exam.MassForearmFlexors: {Kind: Myotome, Segments: roots("(C7) C8 T1 (T2)"), Efferent: n(Median, Ulnar), Trust: Good, Evidence: "pools located", Source: "dog-HRP-1986"},
	exam.MassQuadriceps:     {Kind: Myotome, Segments: roots("L4 L5* L6"), Efferent: n(Femoral), Trust: Good, Evidence: "range; L5 stated", Source: "CL-409"},
	exam.MassHamstrings:     {Kind: Myotome, Segments: roots("L6 L7* S1 (S2)"), Efferent: n(Sciatic), Trust: Good, Evidence: "range only", Source: "CSAIM-767; main from memory"},
	exam.MassGluteals:       {Kind: Myotome, Segments: roots("L6 L7* S1 (S2)"), Efferent: n(CranialGluteal, CaudalGluteal), Trust: Good, Evidence: "range only", Source: "NCSU-lab6; main from memory"},
	exam.MassCranialTibial:  {Kind: Myotome, Segments: cranialTibialRoots, Counted: true, Efferent: n(Fibular), Trust: Good, Evidence: "counted, 14 dogs", Source: "TA-GM-14, shares derived"},
	exam.MassGastrocnemius:  {Kind: Myotome, Segments: gastrocnemiusRoots, Counted: true, Efferent: n(Tibial), Trust: Good, Evidence: "counted, 14 dogs", Source: "TA-GM-14, shares derived"},
	exam.Stance: {Kind: Myotome, Segments: roots("C8 T1*"), Efferent: n(Median, Ulnar), Effector: "flexors of carpus and digits", Trust: Poor, Evidence: "range only",
		Source: "from memory; failing carpal ligaments look alike",
		pelvic: &Arc{Kind: Myotome, Segments: roots("(L6) L7* S1*"), Efferent: n(Tibial, Sciatic), Effector: "gastrocnemius", Trust: Poor, Evidence: "as mass-gastrocnemius",
			Source: "from memory; a torn calcanean tendon looks alike; Dayer-2017"}},

	// Skin zones (C1, C2).
	exam.SensationAxillary:         {Kind: SkinZone, Segments: roots("(C6) C7* C8"), Afferent: n(Axillary), Effector: "lateral brachium", Trust: Good, Source: "CL-91; roots from memory"},
	exam.SensationMusculocutaneous: {Kind: SkinZone, Segments: roots("C6 C7* C8"), Afferent: n(Musculocutaneous), Effector: "medial antebrachium", Trust: Good, Source: "CL-91, Illinois"},
	exam.SensationRadial:           {Kind: SkinZone, Segments: roots("(C6) C7 C8* T1 (T2)"), Afferent: n(Radial), Effector: "dorsum of the paw", Trust: Good, Source: "CL-91, Illinois, LAN-34"},
	exam.SensationUlnar:            {Kind: SkinZone, Segments: roots("C8* T1* (T2)"), Afferent: n(Ulnar), Effector: "5th digit, lateral and caudal antebrachium", Trust: Good, Source: "CL-91; roots teaching notes"},
	exam.SensationSaphenous:        {Kind: SkinZone, Segments: roots("L4 L5* L6"), Afferent: n(Saphenous), Effector: "medial stifle, tarsus and 2nd digit", Trust: Good, Source: "CL-91, CSAIM-767"},
	exam.SensationFibular:          {Kind: SkinZone, Segments: roots("L6* L7* (S1)"), Afferent: n(Fibular), Effector: "dorsum of the hind paw", Trust: Good, Source: "CL-91, CL-415"},
	exam.SensationTibial:           {Kind: SkinZone, Segments: roots("(L6) L7* S1* (S2)"), Afferent: n(Tibial), Effector: "plantar paw", Trust: Good, Source: "CL-91; roots from memory"},
	exam.SensationPudendal:         {Kind: SkinZone, Segments: roots("L7=0.05 S1=0.25 S2=0.8 S3=0.8"), Counted: true, Afferent: n(Pudendal), Effector: "perineum", Trust: Good, Evidence: "counted, 20 sides", Source: "Gomez-2015"},

	// Tests of the whole way: the arc is needed, and so is the cord above it.
	exam.PawPlacement:   longLimb("a placed paw, felt and put right"),
	exam.Hopping:        longLimb("a hop that follows the body"),
	exam.TactilePlacing: longLimb("a step on touch"),
	exam.Knuckling:      longLimb("a paw that lands on its pads"),
	exam.ExtensorThrust: {Kind: LongPath, Segments: roots("L4-S1"), Effector: "a step back on landing", Trust: Poor, Source: "CSAIM-849; segments common practice"},
	exam.Wheelbarrow:    {Kind: LongPath, Segments: roots("C6 C7 C8 T1 (T2)"), Effector: "steps of the thoracic limbs", Trust: Poor, Source: "CSAIM-849; segments common practice"},
	exam.SuperficialPain: {Kind: LongPath, Segments: roots("C7 C8 T1"), Medial: roots("C6 C7 C8"), Effector: "a conscious answer", Trust: Poor, Source: "CL-91, CSAIM-767; digit zones",
		pelvic: &Arc{Kind: LongPath, Segments: roots("L6 L7* S1"), Medial: roots("L4 L5* L6"), Effector: "a conscious answer", Trust: Poor, Source: "CSAIM-767: medial digit saphenous L4–L6, lateral fibular and tibial L6–S1"}},
	exam.DeepPain: {Kind: LongPath, Segments: roots("C7 C8 T1"), Medial: roots("C6 C7 C8"), Effector: "a conscious answer", Trust: NotTrust, Source: "SAIM-1080: only a severe bilateral lesion abolishes it",
		pelvic: &Arc{Kind: LongPath, Segments: roots("L6 L7* S1"), Medial: roots("L4 L5* L6"), Effector: "a conscious answer", Trust: NotTrust, Source: "SAIM-1080: only a severe bilateral lesion abolishes it"}},
	exam.TailMovement:       {Kind: LongPath, Segments: roots("Cd1-Cd5 (S3)"), Efferent: n(CaudalNerves), Effector: "tail", Trust: Poor, Source: "from memory"},
	exam.VoluntaryUrination: {Kind: LongPath, Segments: roots("L7=0.27 S1=0.64 S2=0.91 S3=0.64 Cd1=0.09"), Counted: true, Efferent: n(Pelvic, Pudendal, Hypogastric), Effector: "bladder", Trust: Poor, Source: "Gomez-2015, SAIM-1082"},
	exam.BladderOutflow:     {Kind: LongPath, Segments: roots("L7=0.05 S1=0.25 S2=0.8 S3=0.8"), Counted: true, Efferent: n(Pudendal, Pelvic, Hypogastric), Effector: "urethral sphincter", Trust: Poor, Source: "Gomez-2015, SAIM-1082; Couper-2020: weak by itself"},
	exam.UrineLeak:          {Kind: LongPath, Segments: roots("L7=0.05 S1=0.25 S2=0.8 S3=0.8"), Counted: true, Efferent: n(Pudendal), Effector: "urethral sphincter", Trust: Poor, Source: "Gomez-2015, SAIM-1082"},
	exam.FaecalContinence:   {Kind: LongPath, Segments: roots("L7=0.05 S1=0.25 S2=0.8 S3=0.8"), Counted: true, Efferent: n(Pudendal), Effector: "anal sphincter", Trust: Poor, Source: "Gomez-2015, SAIM-1082"},
}

// longLimb is the row of a postural test. The last part of its way is the foot's: radial
// nerve in front (knuckling when it is lost), fibular and tibial behind.
func longLimb(effector string) Arc {
	return Arc{Kind: LongPath, Segments: roots("(C6) C7 C8* T1 (T2)"), Efferent: n(Radial), Effector: effector, Trust: Poor,
		Source: "CSAIM-849; foot: radial nerve, Illinois, LAN-34",
		pelvic: &Arc{Kind: LongPath, Segments: roots("L6* L7* S1"), Efferent: n(Fibular, Tibial), Effector: effector, Trust: Poor,
			Source: "CSAIM-849; foot: fibular and tibial nerves, CL-415"}}
}

// catArcs holds the rows that differ in the cat.
var catArcs = map[exam.Item]Arc{
	exam.ExtensorCarpi:      {Segments: roots("C6* C7*"), Source: "cat motor pool C6–C7: Fritz-1986-I; persisted after plexus block: Barbosa-2014"},
	exam.MassExtensorCarpi:  {Segments: roots("C6* C7*"), Source: "motor pool C6–C7 only: Fritz-1986-I (cat)"},
	exam.MassForearmFlexors: {Segments: roots("(C7) C8* T1*"), Source: "ulnar pool caudal C7 to caudal T1: Fritz-1986-II (cat)"},
	exam.MassGastrocnemius:  {Segments: roots("(L6) L7* S1*"), Source: "soleus L7–S1 by ventral root: FHL-1984; L6 from BNAU-cat"},
	exam.WithdrawalDigits:   {Segments: roots("L6* L7* (S1)"), Source: "flexor hallucis longus L6–L7 by ventral root: FHL-1984"},
	exam.SensationFibular:   {Segments: roots("(L4) (L5) L6* L7 S1 (S2)"), Source: "BNAU-cat"},
	exam.SensationTibial:    {Segments: roots("(L4) (L5) L6* L7 S1 (S2)"), Source: "BNAU-cat"},
	exam.CutaneousTrunci:    {Segments: roots("C8* T1*"), Source: "as the dog; absent in 4 of 10 sound cats: Tsai-cats"},
}

// ArcFor returns the row of an item at a site in a species, and false where the item tests no
// segment in particular. The error is a *NoData for a species without reflex arcs on record.
func ArcFor(s exam.Species, item exam.Item, site exam.Site) (Arc, bool, error) {
	if s != exam.Dog && s != exam.Cat {
		return Arc{}, false, &NoData{s, "reflex arcs"}
	}
	a, ok := arcTable[item]
	if !ok || !item.At(site) {
		return Arc{}, false, nil
	}
	switch site {
	case exam.TailBase:
		a = Arc{Kind: LongPath, Segments: roots("S3 Cd1*"), Effector: "a conscious answer", Trust: a.Trust, Source: "caudal nerves, from memory"}
	case exam.TailTip:
		a = Arc{Kind: LongPath, Segments: roots("Cd3-Cd5"), Effector: "a conscious answer", Trust: a.Trust, Source: "caudal nerves, from memory"}
	case exam.Perineum:
		a = Arc{Kind: LongPath, Segments: roots("L7=0.05 S1=0.25 S2=0.8 S3=0.8"), Counted: true, Effector: "a conscious answer", Trust: a.Trust, Source: "Gomez-2015"}
	default:
		if site.IsPelvic() && a.pelvic != nil {
			a = *a.pelvic
		}
	}
	a.Item, a.pelvic = item, nil
	if s == exam.Cat {
		if c, ok := catArcs[item]; ok {
			a.Segments, a.Source, a.Counted = c.Segments, c.Source, false
		} else {
			a.Segments = withoutT2(a.Segments)
			a.Source += "; dog, no cat count found"
		}
		if item == exam.CutaneousTrunci {
			a.Trust = Poor // Tsai-cats: a clinician obtained it in 60 % of sound cats
		}
	}
	return a, true, nil
}

// withoutT2 drops T2, which the domestic cat's brachial plexus does not take in (from memory),
// from a row of the enlargement; rows of the sympathetic path (T1–T3) stay as they are.
func withoutT2(ws []Weight) []Weight {
	if Share(ws, NewSegment(exam.RegionT, 3)) > 0 {
		return ws
	}
	out := make([]Weight, 0, len(ws))
	for _, w := range ws {
		if w.Segment != NewSegment(exam.RegionT, 2) {
			out = append(out, w)
		}
	}
	return out
}

// ArcOf returns the segments that an item at a site tests, nil where it tests none in
// particular or where nothing is on record for the species. For a finding with a
// digit or a level use ArcOfFinding.
func ArcOf(s exam.Species, item exam.Item, site exam.Site) []Weight {
	a, ok, err := ArcFor(s, item, site)
	if err != nil || !ok {
		return nil
	}
	return a.Segments
}

// ArcOfFinding is ArcOf for one finding: a pinch of the medial digit tests the saphenous
// nerve's segments behind (CSAIM-767), and wasting of the back muscles at a level tests
// the segment of that level's dorsal ramus, ±1 (from memory).
func ArcOfFinding(s exam.Species, f exam.Finding) []Weight {
	if f.Item == exam.MassEpaxial {
		if f.Level == 0 || (s != exam.Dog && s != exam.Cat) {
			return nil
		}
		seg := NewSegment(f.Level.Region(), f.Level.Number())
		i := Index(s, seg)
		if i < 0 {
			return nil
		}
		out := make([]Weight, 0, 3)
		for d := -1; d <= 1; d++ {
			if x := At(s, i+d); x != 0 {
				w := Contributing
				if d == 0 {
					w = Main
				}
				out = append(out, Weight{x, w})
			}
		}
		return out
	}
	a, ok, err := ArcFor(s, f.Item, f.Site)
	if err != nil || !ok {
		return nil
	}
	if f.Digit == exam.Medial && a.Medial != nil {
		return a.Medial
	}
	return a.Segments
}

// Trust returns how far an item is trusted as evidence about the segments of its arc, 0 to 1,
// in the dog. Withdrawal is the pelvic limb's; on a thoracic limb use ArcFor.
func Trust(item exam.Item) float64 {
	if item == exam.MassEpaxial {
		return Good
	}
	a, ok := arcTable[item]
	if !ok {
		return NotTrust
	}
	if a.pelvic != nil {
		return a.pelvic.Trust
	}
	return a.Trust
}

// trustAt is Trust for a species and a site.
func trustAt(s exam.Species, item exam.Item, site exam.Site) float64 {
	if item == exam.MassEpaxial {
		return Good
	}
	a, ok, err := ArcFor(s, item, site)
	if err != nil || !ok {
		return NotTrust
	}
	return a.Trust
}

// Arcs lists the rows of the arc table in a species, in vocabulary order, a limb item that is
// tested on both girdles twice: thoracic, then pelvic. The error is a *NoData.
func Arcs(s exam.Species) ([]Arc, error) {
	if s != exam.Dog && s != exam.Cat {
		return nil, &NoData{s, "reflex arcs"}
	}
	var out []Arc
	for _, item := range exam.Items() {
		for _, site := range []exam.Site{exam.ThoracicLeft, exam.PelvicLeft, exam.Left, exam.Midline} {
			if a, ok, _ := ArcFor(s, item, site); ok {
				out = append(out, a)
			}
		}
	}
	return out, nil
}
