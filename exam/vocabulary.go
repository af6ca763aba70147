package exam

// The vocabulary: every item that an exam can hold, where it is tested, its grades
// in words, and which grade is normal. The grades are common practice of the veterinary
// neurological examination; muscle-condition follows the WSAVA muscle condition score.

// Item is one test or observation of the examination. The zero Item is none.
type Item uint8

// The items, in the order of the vocabulary.
const (
	NoItem Item = iota
	Mentation
	Behaviour
	SeizureSinceLast
	Breathing
	Gums
	Appetite
	Voice
	Cough
	Regurgitation
	SelfTrauma
	Wound
	Skin
	Fatigue
	MuscleCondition
	Ambulation
	VoluntaryMotor
	ReflexWalking
	Ataxia
	AtaxiaProprioceptive
	AtaxiaVestibular
	AtaxiaCerebellar
	Stride
	Hypermetria
	Knuckling
	GroundClearance
	Lameness
	RootSignature
	Stance
	NeckCarriage
	HeadTilt
	HeadTurn
	Circling
	Tremor
	SchiffSherrington
	PawPlacement
	Hopping
	TactilePlacing
	ExtensorThrust
	Wheelbarrow
	Menace
	PupillaryLight
	Palpebral
	FacialSensation
	Corneal
	Vision
	EyeFollow
	PupilSize
	FaceDroop
	Strabismus
	Nystagmus
	NystagmusFastPhase
	NystagmusDirection
	Horner
	Gag
	JawTone
	Tongue
	Swallowing
	Withdrawal
	WithdrawalShoulder
	WithdrawalElbow
	WithdrawalCarpus
	WithdrawalHip
	WithdrawalStifle
	WithdrawalHock
	WithdrawalDigits
	Biceps
	Triceps
	ExtensorCarpi
	Patellar
	CranialTibial
	Gastrocnemius
	CrossedExtensor
	Perineal
	CutaneousTrunci
	CutaneousTrunciTwitch
	Tone
	TailTone
	TailMovement
	AnalTone
	PhantomScratching
	MassTemporalis
	MassMasseter
	MassSupraspinatus
	MassInfraspinatus
	MassBiceps
	MassTriceps
	MassExtensorCarpi
	MassForearmFlexors
	MassQuadriceps
	MassHamstrings
	MassGluteals
	MassCranialTibial
	MassGastrocnemius
	MassEpaxial
	SuperficialPain
	DeepPain
	SensationRadial
	SensationUlnar
	SensationMusculocutaneous
	SensationAxillary
	SensationSaphenous
	SensationFibular
	SensationTibial
	SensationPudendal
	SpinalPain
	LumbosacralExtension
	TailLift
	JointPain
	JointSwelling
	LimbPain
	StifleInstability
	FemoralPulse
	PawWarmth
	VoluntaryUrination
	BladderFill
	BladderOutflow
	UrineLeak
	UrineLook
	FaecalContinence
	Defaecation
	itemCount
)

// ItemCount is the number of items, counting NoItem: every Item is below it.
const ItemCount = int(itemCount)

var itemTable = [itemCount]ItemInfo{
	Mentation:                 {"mentation", GroupWhole, midlineSites, []string{"coma", "stupor", "obtunded", "alert"}, 0, 3, 0},
	Behaviour:                 {"behaviour", GroupWhole, midlineSites, []string{"disoriented", "normal"}, 0, 1, 0},
	SeizureSinceLast:          {"seizure-since-last", GroupWhole, midlineSites, []string{"no", "yes"}, 0, 0, 0},
	Breathing:                 {"breathing", GroupWhole, midlineSites, []string{"laboured", "fast or shallow", "normal"}, 0, 2, NoBulk},
	Gums:                      {"gums", GroupWhole, midlineSites, []string{"blue", "pale", "pink"}, 0, 2, 0},
	Appetite:                  {"appetite", GroupWhole, midlineSites, []string{"none", "reduced", "normal"}, 0, 2, 0},
	Voice:                     {"voice", GroupWhole, midlineSites, []string{"none", "weak or hoarse", "normal"}, 0, 2, 0},
	Cough:                     {"cough", GroupWhole, midlineSites, []string{"no", "yes"}, 0, 0, 0},
	Regurgitation:             {"regurgitation", GroupWhole, midlineSites, []string{"no", "yes"}, 0, 0, 0},
	SelfTrauma:                {"self-trauma", GroupWhole, midlineSites, []string{"no", "yes"}, 0, 0, 0},
	Wound:                     {"wound", GroupWhole, midlineSites, []string{"open or discharging", "swollen", "sound", "no wound"}, 0, 2, NoBulk},
	Skin:                      {"skin", GroupWhole, skinSites, []string{"open sore", "reddened or wet", "sound"}, 0, 2, NoBulk},
	Fatigue:                   {"fatigue", GroupWhole, midlineSites, []string{"none", "after minutes", "after a few steps"}, 0, 0, 0},
	MuscleCondition:           {"muscle-condition", GroupWhole, midlineSites, []string{"normal", "mild loss", "moderate loss", "severe loss"}, 0, 0, 0},
	Ambulation:                {"ambulation", GroupGait, midlineSites, []string{"no useful steps even when held up", "steps only when held up", "ten or more steps in a row, unaided, without falling"}, 0, 2, 0},
	VoluntaryMotor:            {"voluntary-motor", GroupGait, limbSites, []string{"plegia", "moves but bears no weight", "bears weight but gives way or must be helped", "bears weight unaided, visibly weak", "normal"}, 0, 4, 0},
	ReflexWalking:             {"reflex-walking", GroupGait, midlineSites, []string{"no", "yes"}, 0, 0, 0},
	Ataxia:                    {"ataxia", GroupGait, limbSites, []string{"none", "mild", "moderate", "severe"}, 0, 0, 0},
	AtaxiaProprioceptive:      {"ataxia-proprioceptive", GroupGait, midlineSites, []string{"no", "yes"}, 0, 0, 0},
	AtaxiaVestibular:          {"ataxia-vestibular", GroupGait, midlineSites, []string{"no", "yes"}, 0, 0, 0},
	AtaxiaCerebellar:          {"ataxia-cerebellar", GroupGait, midlineSites, []string{"no", "yes"}, 0, 0, 0},
	Stride:                    {"stride", GroupGait, limbSites, []string{"short", "normal", "long"}, 0, 1, 0},
	Hypermetria:               {"hypermetria", GroupGait, limbSites, []string{"no", "yes"}, 0, 0, 0},
	Knuckling:                 {"knuckling", GroupGait, limbSites, []string{"always", "often", "scuffs now and then", "never"}, 0, 3, 0},
	GroundClearance:           {"ground-clearance", GroupGait, limbSites, []string{"never", "now and then", "in most swings", "not needed: bears weight"}, 0, 3, 0},
	Lameness:                  {"lameness", GroupGait, limbSites, []string{"none", "mild", "moderate", "severe", "non-weight-bearing"}, 0, 0, 0},
	RootSignature:             {"root-signature", GroupGait, limbSites, []string{"no", "yes"}, 0, 0, 0},
	Stance:                    {"stance", GroupGait, limbSites, []string{"sunk", "partly sunk", "normal"}, 0, 2, 0},
	NeckCarriage:              {"neck-carriage", GroupGait, midlineSites, []string{"cannot lift", "low or guarded", "normal"}, 0, 2, 0},
	HeadTilt:                  {"head-tilt", GroupGait, pairedSites, []string{"no", "yes"}, 0, 0, 0},
	HeadTurn:                  {"head-turn", GroupGait, pairedSites, []string{"no", "yes"}, 0, 0, 0},
	Circling:                  {"circling", GroupGait, pairedSites, []string{"no", "yes"}, 0, 0, 0},
	Tremor:                    {"tremor", GroupGait, midlineSites, []string{"none", "at rest", "on intended movement"}, 0, 0, 0},
	SchiffSherrington:         {"schiff-sherrington", GroupGait, midlineSites, []string{"absent", "present"}, 0, 0, 0},
	PawPlacement:              {"paw-placement", GroupPostural, limbSites, []string{"absent", "delayed", "normal"}, 0, 2, 0},
	Hopping:                   {"hopping", GroupPostural, limbSites, []string{"absent", "delayed", "normal"}, 0, 2, 0},
	TactilePlacing:            {"tactile-placing", GroupPostural, limbSites, []string{"absent", "delayed", "normal"}, 0, 2, 0},
	ExtensorThrust:            {"extensor-thrust", GroupPostural, pelvicSites, []string{"absent", "delayed", "normal"}, 0, 2, 0},
	Wheelbarrow:               {"wheelbarrow", GroupPostural, thoracicSites, []string{"absent", "delayed", "normal"}, 0, 2, 0},
	Menace:                    {"menace", GroupCranial, pairedSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	PupillaryLight:            {"pupillary-light", GroupCranial, pairedSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	Palpebral:                 {"palpebral", GroupCranial, pairedSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	FacialSensation:           {"facial-sensation", GroupCranial, pairedSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	Corneal:                   {"corneal", GroupCranial, pairedSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	Vision:                    {"vision", GroupCranial, pairedSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	EyeFollow:                 {"eye-follow", GroupCranial, pairedSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	PupilSize:                 {"pupil-size", GroupCranial, pairedSites, []string{"small", "normal", "wide"}, 0, 1, 0},
	FaceDroop:                 {"face-droop", GroupCranial, pairedSites, []string{"none", "partial", "complete"}, 0, 0, 0},
	Strabismus:                {"strabismus", GroupCranial, pairedSites, []string{"none", "positional", "resting"}, 0, 0, 0},
	Nystagmus:                 {"nystagmus", GroupCranial, midlineSites, []string{"none", "positional", "resting"}, 0, 0, 0},
	NystagmusFastPhase:        {"nystagmus-fast-phase", GroupCranial, pairedSites, []string{"no", "yes"}, 0, 0, 0},
	NystagmusDirection:        {"nystagmus-direction", GroupCranial, midlineSites, []string{"horizontal", "rotary", "vertical", "changes with position"}, 1, -1, Unordered},
	Horner:                    {"horner", GroupCranial, pairedSites, []string{"absent", "partial", "complete"}, 0, 0, 0},
	Gag:                       {"gag", GroupCranial, midlineSites, []string{"absent", "reduced", "normal"}, 0, 2, NoBulk},
	JawTone:                   {"jaw-tone", GroupCranial, midlineSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	Tongue:                    {"tongue", GroupCranial, midlineSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	Swallowing:                {"swallowing", GroupCranial, midlineSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	Withdrawal:                {"withdrawal", GroupReflex, limbSites, []string{"absent", "reduced", "normal"}, 0, 2, TakesDigit},
	WithdrawalShoulder:        {"withdrawal-shoulder", GroupReflex, thoracicSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	WithdrawalElbow:           {"withdrawal-elbow", GroupReflex, thoracicSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	WithdrawalCarpus:          {"withdrawal-carpus", GroupReflex, thoracicSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	WithdrawalHip:             {"withdrawal-hip", GroupReflex, pelvicSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	WithdrawalStifle:          {"withdrawal-stifle", GroupReflex, pelvicSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	WithdrawalHock:            {"withdrawal-hock", GroupReflex, pelvicSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	WithdrawalDigits:          {"withdrawal-digits", GroupReflex, pelvicSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	Biceps:                    {"biceps", GroupReflex, thoracicSites, []string{"not obtained", "reduced", "normal", "exaggerated", "clonus"}, 0, 2, 0},
	Triceps:                   {"triceps", GroupReflex, thoracicSites, []string{"not obtained", "reduced", "normal", "exaggerated", "clonus"}, 0, 2, 0},
	ExtensorCarpi:             {"extensor-carpi", GroupReflex, thoracicSites, []string{"not obtained", "reduced", "normal", "exaggerated", "clonus"}, 0, 2, 0},
	Patellar:                  {"patellar", GroupReflex, pelvicSites, []string{"absent", "reduced", "normal", "exaggerated", "clonus"}, 0, 2, 0},
	CranialTibial:             {"cranial-tibial", GroupReflex, pelvicSites, []string{"not obtained", "reduced", "normal", "exaggerated", "clonus"}, 0, 2, 0},
	Gastrocnemius:             {"gastrocnemius", GroupReflex, pelvicSites, []string{"not obtained", "reduced", "normal", "exaggerated", "clonus"}, 0, 2, 0},
	CrossedExtensor:           {"crossed-extensor", GroupReflex, limbSites, []string{"absent", "present"}, 0, 0, 0},
	Perineal:                  {"perineal", GroupReflex, pairedSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	CutaneousTrunci:           {"cutaneous-trunci", GroupReflex, pairedSites, []string{"absent throughout", "lost caudal to the level", "normal"}, 0, 2, TakesLevel | NoBulk},
	CutaneousTrunciTwitch:     {"cutaneous-trunci-twitch", GroupReflex, pairedSites, []string{"absent", "reduced", "normal"}, 0, 2, NoBulk},
	Tone:                      {"tone", GroupReflex, limbSites, []string{"flaccid", "reduced", "normal", "increased", "rigid"}, 0, 2, 0},
	TailTone:                  {"tail-tone", GroupReflex, midlineSites, []string{"flaccid", "reduced", "normal"}, 0, 2, 0},
	TailMovement:              {"tail-movement", GroupReflex, midlineSites, []string{"none on purpose", "on purpose"}, 0, 1, 0},
	AnalTone:                  {"anal-tone", GroupReflex, midlineSites, []string{"absent", "reduced", "normal"}, 0, 2, 0},
	PhantomScratching:         {"phantom-scratching", GroupReflex, pairedSites, []string{"no", "yes"}, 0, 0, 0},
	MassTemporalis:            {"mass-temporalis", GroupMass, pairedSites, []string{"severe loss", "moderate loss", "mild loss", "normal"}, 0, 3, 0},
	MassMasseter:              {"mass-masseter", GroupMass, pairedSites, []string{"severe loss", "moderate loss", "mild loss", "normal"}, 0, 3, 0},
	MassSupraspinatus:         {"mass-supraspinatus", GroupMass, pairedSites, []string{"severe loss", "moderate loss", "mild loss", "normal"}, 0, 3, 0},
	MassInfraspinatus:         {"mass-infraspinatus", GroupMass, pairedSites, []string{"severe loss", "moderate loss", "mild loss", "normal"}, 0, 3, 0},
	MassBiceps:                {"mass-biceps", GroupMass, pairedSites, []string{"severe loss", "moderate loss", "mild loss", "normal"}, 0, 3, 0},
	MassTriceps:               {"mass-triceps", GroupMass, pairedSites, []string{"severe loss", "moderate loss", "mild loss", "normal"}, 0, 3, 0},
	MassExtensorCarpi:         {"mass-extensor-carpi", GroupMass, pairedSites, []string{"severe loss", "moderate loss", "mild loss", "normal"}, 0, 3, 0},
	MassForearmFlexors:        {"mass-forearm-flexors", GroupMass, pairedSites, []string{"severe loss", "moderate loss", "mild loss", "normal"}, 0, 3, 0},
	MassQuadriceps:            {"mass-quadriceps", GroupMass, pairedSites, []string{"severe loss", "moderate loss", "mild loss", "normal"}, 0, 3, 0},
	MassHamstrings:            {"mass-hamstrings", GroupMass, pairedSites, []string{"severe loss", "moderate loss", "mild loss", "normal"}, 0, 3, 0},
	MassGluteals:              {"mass-gluteals", GroupMass, pairedSites, []string{"severe loss", "moderate loss", "mild loss", "normal"}, 0, 3, 0},
	MassCranialTibial:         {"mass-cranial-tibial", GroupMass, pairedSites, []string{"severe loss", "moderate loss", "mild loss", "normal"}, 0, 3, 0},
	MassGastrocnemius:         {"mass-gastrocnemius", GroupMass, pairedSites, []string{"severe loss", "moderate loss", "mild loss", "normal"}, 0, 3, 0},
	MassEpaxial:               {"mass-epaxial", GroupMass, pairedSites, []string{"severe loss", "moderate loss", "mild loss", "normal"}, 0, 3, TakesLevel},
	SuperficialPain:           {"superficial-pain", GroupSensation, painSites, []string{"absent", "reduced", "normal", "exaggerated"}, 0, 2, TakesDigit | NoBulk | Noxious},
	DeepPain:                  {"deep-pain", GroupSensation, painSites, []string{"absent", "reduced", "normal"}, 0, 2, TakesDigit | NoBulk | Noxious},
	SensationRadial:           {"sensation-radial", GroupSensation, pairedSites, []string{"absent", "reduced", "normal", "exaggerated"}, 0, 2, NoBulk | Noxious},
	SensationUlnar:            {"sensation-ulnar", GroupSensation, pairedSites, []string{"absent", "reduced", "normal", "exaggerated"}, 0, 2, NoBulk | Noxious},
	SensationMusculocutaneous: {"sensation-musculocutaneous", GroupSensation, pairedSites, []string{"absent", "reduced", "normal", "exaggerated"}, 0, 2, NoBulk | Noxious},
	SensationAxillary:         {"sensation-axillary", GroupSensation, pairedSites, []string{"absent", "reduced", "normal", "exaggerated"}, 0, 2, NoBulk | Noxious},
	SensationSaphenous:        {"sensation-saphenous", GroupSensation, pairedSites, []string{"absent", "reduced", "normal", "exaggerated"}, 0, 2, NoBulk | Noxious},
	SensationFibular:          {"sensation-fibular", GroupSensation, pairedSites, []string{"absent", "reduced", "normal", "exaggerated"}, 0, 2, NoBulk | Noxious},
	SensationTibial:           {"sensation-tibial", GroupSensation, pairedSites, []string{"absent", "reduced", "normal", "exaggerated"}, 0, 2, NoBulk | Noxious},
	SensationPudendal:         {"sensation-pudendal", GroupSensation, pairedSites, []string{"absent", "reduced", "normal", "exaggerated"}, 0, 2, NoBulk | Noxious},
	SpinalPain:                {"spinal-pain", GroupSensation, spineSites, []string{"none", "mild", "moderate", "severe"}, 0, 0, TakesLevel | TakesSide | NoBulk | Noxious},
	LumbosacralExtension:      {"lumbosacral-extension", GroupSensation, midlineSites, []string{"none", "mild", "moderate", "severe"}, 0, 0, Noxious},
	TailLift:                  {"tail-lift", GroupSensation, midlineSites, []string{"none", "mild", "moderate", "severe"}, 0, 0, Noxious},
	JointPain:                 {"joint-pain", GroupSensation, limbSites, []string{"none", "mild", "moderate", "severe"}, 0, 0, TakesJoint | Noxious},
	JointSwelling:             {"joint-swelling", GroupSensation, limbSites, []string{"none", "mild", "moderate", "severe"}, 0, 0, TakesJoint},
	LimbPain:                  {"limb-pain", GroupSensation, limbSites, []string{"none", "mild", "moderate", "severe"}, 0, 0, Noxious},
	StifleInstability:         {"stifle-instability", GroupSensation, pairedSites, []string{"no", "yes"}, 0, 0, 0},
	FemoralPulse:              {"femoral-pulse", GroupSensation, pairedSites, []string{"absent", "weak", "normal"}, 0, 2, 0},
	PawWarmth:                 {"paw-warmth", GroupSensation, limbSites, []string{"cold", "cool", "normal"}, 0, 2, 0},
	VoluntaryUrination:        {"voluntary-urination", GroupBladder, midlineSites, []string{"absent", "incomplete", "normal"}, 0, 2, NoBulk},
	BladderFill:               {"bladder-fill", GroupBladder, midlineSites, []string{"large and tense", "large and soft", "small"}, 0, 2, NoBulk},
	BladderOutflow:            {"bladder-outflow", GroupBladder, midlineSites, []string{"leaks", "hard to express", "easy to express", "empties unaided"}, 0, 3, Unordered | NoBulk},
	UrineLeak:                 {"urine-leak", GroupBladder, midlineSites, []string{"none", "when moving or asleep", "constant"}, 0, 0, NoBulk},
	UrineLook:                 {"urine-look", GroupBladder, midlineSites, []string{"bloody or foul", "cloudy", "normal"}, 0, 2, NoBulk},
	FaecalContinence:          {"faecal-continence", GroupBladder, midlineSites, []string{"absent", "reduced", "normal"}, 0, 2, NoBulk},
	Defaecation:               {"defaecation", GroupBladder, midlineSites, []string{"none", "constipated", "normal"}, 0, 2, NoBulk},
}
