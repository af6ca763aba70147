package exam

import "strings"

// card is how an item is done, in one line; what it is called in everyday words; and what it
// costs. All of it is common practice; seconds are for one site, hands free and animal in place.
type card struct {
	how     string
	plain   string
	seconds float64
	hurts   bool // hurts, or is meant to find what hurts
}

var cards = [itemCount]card{
	Mentation:                 {"Watch the animal from the door, before touching it.", "How awake it is", 10, false},
	Behaviour:                 {"Ask the owner, and watch how it meets people and the room.", "How it behaves", 15, false},
	SeizureSinceLast:          {"Ask the owner: any fit, twitching of the face, lost time.", "Fits", 10, false},
	Breathing:                 {"Watch chest and belly for half a minute, at rest, hands off.", "Breathing", 30, false},
	Gums:                      {"Lift the lip, look at the gum in daylight.", "Colour of the gums", 5, false},
	Appetite:                  {"Ask the owner how much of the usual meal is eaten.", "Appetite", 10, false},
	Voice:                     {"Ask the owner, or listen: bark, miaow or neigh against before.", "Voice", 10, false},
	Cough:                     {"Ask the owner, and listen while it drinks.", "Cough", 10, false},
	Regurgitation:             {"Ask the owner: food that comes back without heaving.", "Food that comes back up", 10, false},
	SelfTrauma:                {"Look for licked, chewed or bitten skin, toes first.", "Chewing or licking itself sore", 15, false},
	Wound:                     {"Look at and around the wound; smell it; do not press.", "The wound", 15, false},
	Skin:                      {"Part the coat over bony points and where urine wets it; press redness once: does it blanch?", "Skin", 20, false},
	Fatigue:                   {"Walk it until it slows or sits; say when.", "How fast it tires", 120, false},
	MuscleCondition:           {"Feel along spine, shoulder blades, skull and pelvis.", "Muscle all over the body", 20, false},
	Ambulation:                {"On a floor with grip, without a sling: count steps in a row. Hold it up if it cannot.", "Walking", 60, false},
	VoluntaryMotor:            {"Watch each limb in gait or held up; call it by its name or show food. Reflex kicks do not count.", "Strength", 30, false},
	ReflexWalking:             {"Held up on a treadmill or floor: steps that come though deep pain is absent.", "Steps without feeling", 60, false},
	Ataxia:                    {"Walk and turn it: swaying, crossing, feet put down anywhere.", "Wobbliness", 30, false},
	AtaxiaProprioceptive:      {"Long, late, crossing steps; the paw lands on its back.", "Unsteady from not feeling the feet", 10, false},
	AtaxiaVestibular:          {"Leans, drifts or falls to one side.", "Loss of balance", 10, false},
	AtaxiaCerebellar:          {"Steps too high and too far, without weakness.", "Steps too high and too far", 10, false},
	Stride:                    {"Watch from the side at a walk, against the other limb.", "Length of step", 15, false},
	Hypermetria:               {"Watch from the side: lifted higher than needed.", "Steps lifted too high", 15, false},
	Knuckling:                 {"Watch and listen at a walk; look at worn nails.", "Paw turning over", 20, false},
	GroundClearance:           {"Held up at a walk: how often does the paw leave the floor?", "Paw leaving the floor", 30, false},
	Lameness:                  {"Walk and trot on a hard floor, towards you and away.", "Limp", 30, false},
	RootSignature:             {"Watch it stand: the limb held up or rested for pain.", "Limb held up for pain", 10, false},
	Stance:                    {"Standing: how far hock or carpus has sunk towards the floor.", "Ankle or wrist that sinks", 10, false},
	NeckCarriage:              {"Watch how it carries and turns its head for food. Do not bend the neck.", "How the head is carried", 10, false},
	HeadTilt:                  {"From the front: which ear is lower?", "Head tilt", 5, false},
	HeadTurn:                  {"From above: which way is the whole head turned?", "Head turned", 5, false},
	Circling:                  {"Let it walk free: which way does it circle?", "Circling", 20, false},
	Tremor:                    {"Watch at rest, then reaching for food.", "Trembling", 15, false},
	SchiffSherrington:         {"Lying on its side: stiff, stretched thoracic limbs that still work.", "Stiff front legs", 10, false},
	PawPlacement:              {"Hold the body's weight, turn the paw on to its back, let go: how soon is it put right?", "Putting the paw right", 8, false},
	Hopping:                   {"Hold up the other limbs, move the body sideways over this one.", "Hopping", 10, false},
	TactilePlacing:            {"Lifted, eyes covered: touch the paw to the table's edge.", "Placing the paw on touch", 12, false},
	ExtensorThrust:            {"Lifted under the chest, lower it until the hind feet touch: does it step back?", "Stepping back on landing", 12, false},
	Wheelbarrow:               {"Lift the hindquarters, walk it forwards on its thoracic limbs.", "Walking on the front legs", 15, false},
	Menace:                    {"A flat hand towards one eye, no draught, the other covered.", "Blink at a hand", 6, false},
	PupillaryLight:            {"Bright light into one eye, look at that pupil, then at the other.", "Pupils in light", 8, false},
	Palpebral:                 {"Touch the inner, then the outer corner of the lids.", "Blink at a touch", 5, false},
	FacialSensation:           {"Touch the nostril's lining with a closed instrument; eyes covered.", "Feeling in the face", 8, false},
	Corneal:                   {"Touch the cornea with a damp wisp; watch for blink and withdrawn globe.", "Feeling in the eye", 8, false},
	Vision:                    {"Drop cotton wool in silence, and walk it round obstacles.", "Sight", 20, false},
	EyeFollow:                 {"Turn the head slowly left and right: quick phases follow the turn.", "Eyes that follow a turn", 10, false},
	PupilSize:                 {"In dim light, from an arm's length, both together.", "Size of the pupils", 5, false},
	FaceDroop:                 {"From the front: lip, lid, ear and dribble.", "Drooping face", 5, false},
	Strabismus:                {"At rest, then with the nose lifted, unless the neck must not move.", "Squint", 6, false},
	Nystagmus:                 {"At rest, then in other positions, unless the neck must not move.", "Eyes that flick", 10, false},
	NystagmusFastPhase:        {"Which way is the quick flick?", "Way the eyes flick", 6, false},
	NystagmusDirection:        {"Which way do the eyes beat?", "How the eyes flick", 6, false},
	Horner:                    {"Small pupil, drooping lid, third lid up, sunken eye: how many?", "Small pupil and drooping lid", 8, false},
	Gag:                       {"Press the throat from outside first; no finger in a mouth that bites.", "Gag", 8, false},
	JawTone:                   {"Open the jaw gently against its own hold.", "Strength of the jaw", 6, false},
	Tongue:                    {"Watch it lick something off the nose; look for wasting.", "Tongue", 10, false},
	Swallowing:                {"Watch it swallow water, then food.", "Swallowing", 20, false},
	Withdrawal:                {"Lying on its side, pinch the web between toes, gently first. Flexing is not feeling.", "Pulling the leg away", 8, true},
	WithdrawalShoulder:        {"As withdrawal; watch the shoulder flex.", "Bending the shoulder", 6, true},
	WithdrawalElbow:           {"As withdrawal; watch the elbow flex.", "Bending the elbow", 6, true},
	WithdrawalCarpus:          {"As withdrawal; watch carpus and toes flex.", "Bending the wrist", 6, true},
	WithdrawalHip:             {"As withdrawal; watch the hip flex, on a medial and on a lateral pinch.", "Bending the hip", 6, true},
	WithdrawalStifle:          {"As withdrawal; watch the stifle flex.", "Bending the knee", 6, true},
	WithdrawalHock:            {"As withdrawal; watch the hock flex: the sciatic part.", "Bending the ankle", 6, true},
	WithdrawalDigits:          {"As withdrawal; watch the toes flex.", "Bending the toes", 6, true},
	Biceps:                    {"Limb drawn back a little, finger on the tendon inside the elbow, tap the finger.", "Elbow reflex", 10, false},
	Triceps:                   {"Elbow flexed, tap the tendon just above the olecranon.", "Triceps reflex", 10, false},
	ExtensorCarpi:             {"Limb held under the elbow, carpus loose, tap the muscle just below the elbow.", "Wrist reflex", 8, false},
	Patellar:                  {"On its side, stifle half flexed and loose, one brisk tap on the patellar ligament.", "Knee jerk", 8, false},
	CranialTibial:             {"Tap the muscle just below the stifle, hock loose.", "Shin reflex", 8, false},
	Gastrocnemius:             {"Hock slightly flexed, tap the tendon above the heel.", "Ankle reflex", 8, false},
	CrossedExtensor:           {"While one limb withdraws, watch the other: does it stretch? On its side only.", "Other leg stretching", 4, false},
	Perineal:                  {"Touch, then lightly pinch beside the anus: wink and tail down.", "Wink under the tail", 6, true},
	CutaneousTrunci:           {"From L6 forwards, pinch the skin beside the spine, one vertebra at a time; note where the twitch begins.", "Skin twitch", 25, true},
	CutaneousTrunciTwitch:     {"While pinching: on which side does the skin twitch?", "Side of the skin twitch", 6, true},
	Tone:                      {"On its side, bend and stretch the loose limb slowly, then quickly.", "Stiffness or looseness", 10, false},
	TailTone:                  {"Lift the tail and feel its hold; not where it is hurt.", "Strength of the tail", 5, false},
	TailMovement:              {"Speak kindly or show food: a wag that answers. A twitch in the bath does not count.", "Wagging", 10, false},
	AnalTone:                  {"Look at the anus: closed or gaping; touch it with a gloved finger.", "Hold of the back passage", 6, false},
	PhantomScratching:         {"Ask the owner, and watch for scratching in the air at one side.", "Scratching at the air", 10, false},
	MassTemporalis:            {"Feel both sides of the skull together.", "Muscle on the skull", 5, false},
	MassMasseter:              {"Feel both cheeks together.", "Cheek muscle", 5, false},
	MassSupraspinatus:         {"Feel the hollow in front of the spine of the shoulder blade.", "Muscle on the shoulder blade", 5, false},
	MassInfraspinatus:         {"Feel the hollow behind the spine of the shoulder blade.", "Muscle behind the shoulder blade", 5, false},
	MassBiceps:                {"Feel the front of the upper arm, both sides together.", "Front of the upper arm", 5, false},
	MassTriceps:               {"Feel the back of the upper arm, both sides together.", "Back of the upper arm", 5, false},
	MassExtensorCarpi:         {"Feel the front of the forearm just below the elbow.", "Front of the forearm", 5, false},
	MassForearmFlexors:        {"Feel the back of the forearm.", "Back of the forearm", 5, false},
	MassQuadriceps:            {"Feel the front of both thighs together, weight even.", "Front of the thigh", 5, false},
	MassHamstrings:            {"Feel the back of both thighs together.", "Back of the thigh", 5, false},
	MassGluteals:              {"Feel over both hips together.", "Hip muscle", 5, false},
	MassCranialTibial:         {"Feel the front of the lower limb, outside the shin.", "Front of the lower leg", 5, false},
	MassGastrocnemius:         {"Feel the calf above the heel tendon.", "Calf muscle", 5, false},
	MassEpaxial:               {"Run the fingers beside the spine; note the vertebra where it is thin.", "Muscle along the back", 10, false},
	SuperficialPain:           {"Pinch a fold of skin lightly, small steps up; look for a turn or a cry.", "Feeling on the skin", 10, true},
	DeepPain:                  {"Pinch a toe's bone, gently first, harder only if nothing comes. Look for a turn, a cry or a bite: a limb that withdraws is not a limb that feels.", "Deep feeling", 15, true},
	SensationRadial:           {"Pinch the skin on top of the paw.", "Feeling on top of the paw", 8, true},
	SensationUlnar:            {"Pinch the outer toe and the back of the forearm.", "Feeling on the outer toe", 8, true},
	SensationMusculocutaneous: {"Pinch the inside of the forearm.", "Feeling inside the forearm", 8, true},
	SensationAxillary:         {"Pinch the outside of the upper arm.", "Feeling outside the upper arm", 8, true},
	SensationSaphenous:        {"Pinch the inside of the stifle and the inner toe.", "Feeling inside the leg", 8, true},
	SensationFibular:          {"Pinch the skin on top of the hind paw.", "Feeling on top of the hind paw", 8, true},
	SensationTibial:           {"Pinch the skin between the pads of the hind paw.", "Feeling under the hind paw", 8, true},
	SensationPudendal:         {"Pinch the skin beside the anus.", "Feeling under the tail", 8, true},
	SpinalPain:                {"One hand on the belly, press beside the spine from the painless end; stop at the first flinch.", "Back or neck pain", 10, true},
	LumbosacralExtension:      {"Press on the rump while both hind limbs are drawn back; stop at the first flinch.", "Pain low in the back", 10, true},
	TailLift:                  {"Lift the tail upwards slowly; stop at the first flinch.", "Pain on lifting the tail", 5, true},
	JointPain:                 {"Bend and stretch each joint through its range; watch the face.", "Sore joint", 10, true},
	JointSwelling:             {"Feel both joints of a pair together.", "Swollen joint", 8, false},
	LimbPain:                  {"Press along bones and muscles, the sore place last.", "Sore leg", 20, true},
	StifleInstability:         {"Drawer and tibial thrust, muscles loose; never in a painful, tense animal.", "Loose knee", 15, true},
	FemoralPulse:              {"Fingers inside both thighs, both together.", "Pulse in the thigh", 8, false},
	PawWarmth:                 {"The back of the hand on each paw; look at the nail beds.", "Warm paws", 5, false},
	VoluntaryUrination:        {"Ask the owner, and watch it outside: posture, stream, on purpose.", "Passing water", 60, false},
	BladderFill:               {"After it has been out: feel the belly gently from both sides.", "Bladder", 12, false},
	BladderOutflow:            {"Does it leak, hold against gentle pressure, or empty? Never force a tense bladder.", "Emptying the bladder", 20, false},
	UrineLeak:                 {"Ask the owner; look at the coat and the bed.", "Leaking urine", 8, false},
	UrineLook:                 {"Look at and smell a fresh sample.", "Look of the urine", 10, false},
	FaecalContinence:          {"Ask the owner: does it know, and does it hold?", "Holding stools", 10, false},
	Defaecation:               {"Ask the owner: when last, how hard.", "Passing stools", 10, false},
}

// HowTo returns in one line how an item is tested, empty for NoItem. Common practice.
func HowTo(i Item) string {
	if i < itemCount {
		return cards[i].how
	}
	return ""
}

// Effort returns the seconds one test of an item takes with the animal in place, and whether it
// hurts or may hurt. Turning the animal is not in it: see TurnSeconds. Common practice.
func Effort(i Item) (seconds float64, hurts bool) {
	if i < itemCount {
		return cards[i].seconds, cards[i].hurts
	}
	return 0, false
}

// TurnSeconds is what bringing the animal from one position to another costs. Common practice.
func TurnSeconds(from, to Position) float64 {
	switch {
	case from == to:
		return 0
	case to == HandsOff:
		return 20
	case to == Standing || to == Sternal:
		return 15
	}
	return 30
}

// plainSites are places in everyday words, for the owner.
var plainSites = [siteCount]string{
	ThoracicLeft: "left front leg", ThoracicRight: "right front leg", PelvicLeft: "left hind leg", PelvicRight: "right hind leg",
	Left: "left side", Right: "right side", Perineum: "under the tail", Trunk: "body", TailBase: "base of the tail", TailTip: "tip of the tail",
	Cervical: "neck", CranialThoracic: "upper back", MidThoracic: "middle of the back", Thoracolumbar: "back, behind the ribs",
	Lumbar: "lower back", Lumbosacral: "lower back, at the hips", Sacrocaudal: "rump and tail",
}

// PlainItem returns the item in everyday words, for the owner's sheet: «Knee jerk».
func PlainItem(i Item) string {
	if i < itemCount {
		return cards[i].plain
	}
	return ""
}

// PlainSite returns the site in everyday words: «left hind leg», empty for the midline.
func PlainSite(s Site) string {
	if s < siteCount {
		return plainSites[s]
	}
	return ""
}

// PlainWords returns item and site in everyday words: «Strength of the left hind leg». Items with
// their own words take the site after a comma. The words are English; to translate, put PlainItem
// and PlainSite together in the sheet's language.
func PlainWords(i Item, s Site) string {
	item, site := PlainItem(i), PlainSite(s)
	if site == "" || item == "" {
		return item
	}
	if i == VoluntaryMotor || i == Tone {
		return item + " of the " + site
	}
	return item + ", " + strings.TrimPrefix(site, "the ")
}
