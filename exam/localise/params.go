package localise

import (
	"slices"

	"cordwalk.example/cordwalk/exam"
)

// This file holds every parameter of the model. Beside each stands its source: a publication's
// key, «from memory» (standard textbooks), «common practice», «judgement» (a choice of this
// project), or «fitted» (set by the fitting program against the published frequencies; its
// report is testdata/fit.txt). Damage, thresholds and gains are on one scale, 0 sound to 1 lost.

// Severities is the grid of severities that every lesion is tried at. The five steps stand
// for walking with mild signs, walking badly, moving but not walking, paralysed with deep
// pain kept, and complete (judgement; they follow the gait grades of the Frankel scale).
var Severities = [severities]float64{0.2, 0.4, 0.65, 0.85, 1}

const severities = 5

// response says how a latent value becomes a grade: the logit of being at least so far from
// normal is slope × (value − threshold). down counts grades below the normal one, up above.
type response struct {
	slope float64
	down  []float64
	up    []float64
	slip  float64 // chance of a plain mistake by one grade; 0 means the general one
}

// Params is one set of the model's parameters.
type Params struct {
	// Reading errors.
	// A plain mistake takes the next grade with chance Slip, the one after it with 0.3 of
	// that, then 0.08: a normal test reads ill in about 0.04 (JVIM-2024: two examiners agree in
	// at least 92 %, so e ≈ 0.04). It is the floor of the grade next to normal; further off the split is judgement.
	Slip       float64
	SlipFrail  float64 // thoracic withdrawal: judgement on JVIM-2024 (it agreed less)
	Careless   float64 // chance that a block filled by one key was not looked at: judgement
	ArcSpread  float64 // spread of the deviation that tests of one arc share, in logits: judgement
	ArcBlunder float64 // chance that a whole arc is read one way wrongly: judgement; «ten tests of one arc weigh little more than two»

	// Cord.
	FrontShare      float64 // share of white-matter loss that shows in the thoracic limbs, peripheral lesions: pelvic limbs worse (CSAIM-849); size judgement
	CentralHind     float64 // share that shows in the pelvic limbs, central lesions (HNPE-2023: thoracic worse); size judgement
	WhiteGrey       float64 // grey damage of a lesion mostly of white matter, as a share of its severity: judgement
	GreyWhite       float64 // white damage of a lesion mostly of grey matter: judgement
	Shock           float64 // chance of spinal shock, acute and severe T3–L3: fitted to Hodshon-2018 (26 % of paraplegic dogs) and Full-2016 (6.5 % of all)
	ShockWithdrawal float64 // what shock takes from the pelvic withdrawal: fitted to Hodshon-2018
	ShockPatellar   float64 // the same for the patellar reflex: fitted to Hodshon-2018 (2 of the 9)
	SunkHock        float64 // how far the loss of the fibular field sinks the hock: Dayer-2017, DellApa (cats yes, dogs rarely)
	Voiding         float64 // how much more voiding depends on the pelvic nerve than its share: fitted to Couper-2020
	Stenosis        float64 // pain on lumbosacral extension, cauda equina: fitted to DS-1999
	FrontUMN        float64 // value that a loss of descending control adds to the thoracic withdrawal: fitted to Forterre-2008
	FrontFlexion    float64 // how much more the thoracic withdrawal loses than its arcs' mean: flexion needs every root; fitted to Forterre-2008
	Knee            float64 // the same for the patellar reflex: seed table (reduced in 0.85 of L4–L6), judgement
	Pseudo          float64 // how much lost sciatic antagonists raise the patellar reflex: seed table of likelihoods.md (0.3), judgement
	ReflexUp        float64 // how much lost descending control raises a reflex: seed table (patellar exaggerated 0.3), judgement
	Disuse          float64 // wasting by disuse at full loss of motion, after the first week: from memory
	EarlyMass       float64 // share of neurogenic wasting that shows in the first week: vet-advisor-BPI, cynologist (5–10 days)
	PainAcute       float64 // pain over an acute cord lesion: HNPE-2025 (85 % of disc extrusions), DPN-Br (74 %)
	PainLater       float64 // pain over an older lesion: judgement between disc disease and degenerative myelopathy
	CordRoot        float64 // pain that a cord lesion carries into a limb: fitted to Dachs-2024
	Sympathetic     float64 // weight of the sympathetic trunk among the nerves: fitted to Horner-img (an isolated Horner has a cause in 3 %)
	TrunciWalk      float64 // chance of a cutaneous trunci cut-off while walking: seed table 0.5, judgement
	TrunciLame      float64 // the same when not walking: GQ-2012 (80 % over all)
	Posture         float64 // chance of Schiff–Sherrington posture, acute severe T3–L3: not found; judgement
	ReflexSteps     float64 // chance of stepping by reflex, chronic complete T3–L3: judgement

	// Share of the animals, by region and kind (likelihoods.md 9.3 flattened, for the animals of
	// a rehabilitation practice come already diagnosed; pain only: Dachs-2024, BrCerv).
	Mass [regionCount][kindCount]float64
	Pair float64 // two lesions: judgement

	Extent       [5]float64             // 1, 2, 3, 4 and longer: judgement
	ExtentLow    [5]float64             // the same from L4 on, where three segments lie in one vertebra (CL-73): judgement
	Sides        [sideCount]float64     // even, left, right, left-worse, right-worse: HNPE-2023, lateralised in about half
	SeverityNeck [2][severities]float64 // the same for lesions of C1–T2, where complete ones are seldom survived (from memory): fitted to BrCerv, HNPE-2025
	Severity     [2][severities]float64 // later than the first week, and within it: fitted to BrCerv, HNPE-2025, McKee-2010, Mari-2019
	Balance      [3]float64             // grey and white alike, mostly white, mostly grey: judgement
	Central      float64                // central cord among cervical lesions: HNPE-2023 and -2025, 16–35 %
	Acute        float64                // within the first week, where the onset is not known: judgement

	respond [exam.ItemCount]response
}

// thoracicFrom is the first segment of T3–L3, shockTo the last: indices that hold for dog and cat.
const (
	segC6 = 5
	segT3 = 10
	segL4 = 24
)

// defaults returns the parameters of a species.
func defaults(s exam.Species) *Params {
	p := &Params{
		Slip: 0.03, SlipFrail: 0.051, Careless: 0.1, ArcSpread: 1.0, ArcBlunder: 0.005,
		FrontShare: 0.8, CentralHind: 0.55, WhiteGrey: 0.51, GreyWhite: 0.3,
		Shock: 0.185, ShockWithdrawal: 0.47, ShockPatellar: 0.123, SunkHock: 0.1, Voiding: 2.507, Stenosis: 0.79, CordRoot: 0.116, Sympathetic: 3.044, FrontUMN: 0.255, FrontFlexion: 1.551, Knee: 1.35, Pseudo: 0.5, ReflexUp: 0.5,
		Disuse: 0.3, EarlyMass: 0.1, PainAcute: 0.49, PainLater: 0.42,
		TrunciWalk: 0.549, TrunciLame: 0.905, Posture: 0.3, ReflexSteps: 0.3,
		Pair:   0.03,
		Extent: [5]float64{0.26, 0.3, 0.2, 0.12, 0.12}, ExtentLow: [5]float64{0.15, 0.23, 0.28, 0.22, 0.12}, Sides: [sideCount]float64{0.482, 0.259 / 3, 0.259 / 3, 0.518 / 3, 0.518 / 3},
		SeverityNeck: [2][severities]float64{{0.346, 0.335, 0.199, 0.08, 0.04}, {0.154, 0.209, 0.397, 0.17, 0.07}},
		Severity:     [2][severities]float64{{0.276, 0.276, 0.229, 0.13, 0.089}, {0.148, 0.188, 0.244, 0.242, 0.178}}, Balance: [3]float64{0.52, 0.29, 0.19},
		Central: 0.254, Acute: 0.4,
		respond: responses(),
	}
	m := &p.Mass
	m[C1C5][Cord], m[C1C5][PainOnly], m[C1C5][Root] = 0.075, 0.052, 0.006
	m[C6T2][Cord], m[C6T2][PainOnly], m[C6T2][Root], m[C6T2][Plexus] = 0.059, 0.031, 0.025, 0.025
	m[T3L3][Cord], m[T3L3][PainOnly], m[T3L3][Root] = 0.235, 0.035, 0.005
	m[L4S3][Cord], m[L4S3][PainOnly], m[L4S3][Root], m[L4S3][CaudaEquina] = 0.07, 0.03, 0.025, 0.05
	m[Peripheral][Nerve], m[Peripheral][Ischaemic] = 0.122, 0.012
	m[GeneralisedRegion][Generalised] = 0.05
	m[BrainRegion][Brain] = 0.085
	m[NoRegion][Joint], m[NoRegion][Tendon], m[NoRegion][Systemic], m[NoRegion][NoLesion] = 0.04, 0.008, 0.012, 0.035
	if s == exam.Cat {
		p.SunkHock = 0.806
		// Cats against dogs: ischaemia at the cervicothoracic enlargement (Mella-2020, MH-2010), disc
		// disease most often at L4–L5 (MH-2010), sacrocaudal luxation a common injury (Couper-2020),
		// and a clot in the aorta a cat's disease (from memory). The sizes are judgement.
		m[C1C5][Cord], m[C1C5][PainOnly] = 0.07, 0.02
		m[C6T2][Cord], m[T3L3][Cord], m[L4S3][Cord], m[L4S3][CaudaEquina] = 0.085, 0.155, 0.11, 0.085
		m[Peripheral][Ischaemic] = 0.04
	}
	return p
}

// responses is the table of how each item answers. Thresholds are fitted where a published
// frequency bears on them (fit.txt), else judgement: the value at which half of the animals
// show that grade. Slopes are judgement: about ±0.15 of damage between one in five and four in five.
func responses() (t [exam.ItemCount]response) {
	set := func(r response, items ...exam.Item) {
		for _, i := range items {
			t[i] = r
			t[i].down, t[i].up = slices.Clone(r.down), slices.Clone(r.up) // of its own: items are fitted one by one
		}
	}
	one := func(slope float64, down ...float64) response { return response{slope: slope, down: down} }
	up := func(slope float64, ups ...float64) response { return response{slope: slope, up: ups} }

	// Gait and posture.
	set(one(16, 0.17, 0.38, 0.55, 0.77), exam.VoluntaryMotor)
	set(one(12, 0.494, 0.75), exam.Ambulation)
	set(up(14, 0.25, 0.5, 0.8), exam.Ataxia)
	set(up(8, 0.4), exam.AtaxiaProprioceptive, exam.AtaxiaVestibular, exam.AtaxiaCerebellar)
	set(response{slope: 8, down: []float64{0.4}, up: []float64{0.55}}, exam.Stride)
	set(up(8, 0.4), exam.Hypermetria)
	set(one(9, 0.25, 0.5, 0.75), exam.Knuckling)
	set(one(10, 0.5, 0.65, 0.85), exam.GroundClearance)
	set(up(10, 0.34, 0.5, 0.68, 0.9), exam.Lameness)
	set(up(8, 0.539), exam.RootSignature)
	set(one(9, 0.388, 0.65), exam.Stance)
	set(one(7, 0.45, 0.8), exam.NeckCarriage)
	set(response{slope: 13, up: []float64{0.4}, slip: 0.006}, exam.HeadTilt, exam.HeadTurn, exam.Circling) // hardly seen where there is none: judgement
	set(up(8, 0.5), exam.SchiffSherrington, exam.ReflexWalking)

	// Postural reactions.
	set(one(15, 0.223, 0.6), exam.PawPlacement)
	set(one(15, 0.23, 0.6), exam.Hopping, exam.TactilePlacing, exam.ExtensorThrust, exam.Wheelbarrow)

	// Whole animal.
	set(one(8, 0.45, 0.75, 0.95), exam.Mentation)
	set(one(8, 0.5), exam.Behaviour)
	set(up(8, 0.6), exam.SeizureSinceLast)
	set(one(8, 0.6, 0.9), exam.Breathing)
	set(one(8, 0.6, 0.9), exam.Gums)
	set(one(8, 0.45, 0.8), exam.Voice)
	set(up(8, 0.6), exam.Regurgitation)
	set(up(8, 0.4, 0.7), exam.Fatigue)
	set(up(8, 0.3, 0.55, 0.8), exam.MuscleCondition)

	// Head.
	set(one(10, 0.32, 0.55), exam.Menace)
	set(response{slope: 10, down: []float64{0.35, 0.6}, slip: 0.02}, exam.PupillaryLight, exam.Palpebral, exam.FacialSensation,
		exam.Corneal, exam.Vision, exam.EyeFollow, exam.Gag, exam.JawTone, exam.Tongue, exam.Swallowing)
	set(response{slope: 8, down: []float64{0.45}, up: []float64{0.45}}, exam.PupilSize)
	set(response{slope: 10, up: []float64{0.35, 0.65}, slip: 0.02}, exam.FaceDroop)
	set(response{slope: 13, up: []float64{0.4, 0.7}, slip: 0.006}, exam.Strabismus, exam.Nystagmus)
	set(up(8, 0.5), exam.NystagmusFastPhase)
	set(response{slope: 14, up: []float64{0.468, 0.66}, slip: 0.003}, exam.Horner)

	// Reflexes and tone.
	set(one(14, 0.32, 0.65), exam.Withdrawal, exam.WithdrawalShoulder, exam.WithdrawalElbow, exam.WithdrawalCarpus,
		exam.WithdrawalHip, exam.WithdrawalStifle, exam.WithdrawalDigits)
	set(one(14, 0.356, 0.65), exam.WithdrawalHock)
	set(response{slope: 9, down: []float64{0.33, 0.6}, up: []float64{0.55, 0.9}}, exam.Patellar)
	set(response{slope: 5, down: []float64{0.3, 0.5}, up: []float64{0.7, 1.1}, slip: 0.08}, exam.Biceps, exam.Triceps, exam.Gastrocnemius)
	set(response{slope: 6, down: []float64{0.35, 0.65}, up: []float64{0.65, 1.05}, slip: 0.05}, exam.ExtensorCarpi)
	set(response{slope: 3, down: []float64{0.5, 0.9}, up: []float64{1, 1.5}, slip: 0.052}, exam.CranialTibial) // UFRPE-CT: persists under epidural block
	set(up(8, 0.62), exam.CrossedExtensor)
	set(one(14, 0.31, 0.62), exam.Perineal)
	set(one(12, 0.527, 0.666), exam.AnalTone)
	set(one(8, 0.35, 0.7), exam.CutaneousTrunciTwitch)
	set(response{slope: 9, down: []float64{0.33, 0.7}, up: []float64{0.4, 0.85}}, exam.Tone)
	set(one(10, 0.28, 0.478), exam.TailTone)
	set(one(9, 0.5), exam.TailMovement)
	set(up(8, 0.6), exam.PhantomScratching)

	// Muscle mass: falls steeply and late.
	for i := exam.MassTemporalis; i <= exam.MassEpaxial; i++ {
		set(one(12, 0.27, 0.5, 0.75), i)
	}

	// Sensation and pain.
	set(response{slope: 10, down: []float64{0.6, 0.727}, up: []float64{0.5}}, exam.SuperficialPain)
	set(one(36, 0.93, 0.968), exam.DeepPain)
	for i := exam.SensationRadial; i <= exam.SensationPudendal; i++ {
		set(response{slope: 10, down: []float64{0.59, 0.8}, up: []float64{0.5}}, i)
	}
	t[exam.SensationFibular].down[0], t[exam.SensationTibial].down[0] = 0.633, 0.619
	set(up(10, 0.333, 0.47, 0.7), exam.SpinalPain)
	set(up(10, 0.326, 0.47, 0.7), exam.LumbosacralExtension)
	set(up(10, 0.331, 0.47, 0.7), exam.TailLift)
	set(up(7, 0.35, 0.55, 0.8), exam.JointPain, exam.JointSwelling, exam.LimbPain)
	set(up(8, 0.5), exam.StifleInstability)
	set(one(9, 0.4, 0.65), exam.FemoralPulse, exam.PawWarmth)

	// Bladder and bowel.
	set(one(9, 0.581, 0.601), exam.VoluntaryUrination)
	set(up(7, 0.45, 0.8), exam.UrineLeak)
	set(one(8, 0.415, 0.75), exam.FaecalContinence)
	set(one(7, 0.771, 0.88), exam.Defaecation)
	return t
}
