package view

import (
	"strings"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/alert"
	"cordwalk.example/cordwalk/exam/scale"
)

// itemTitles are the names of items on screens, where the vocabulary's word with its
// hyphens opened is not good enough.
var itemTitles = map[exam.Item]string{
	exam.SeizureSinceLast:          "Seizure since last visit",
	exam.SelfTrauma:                "Self-trauma",
	exam.MuscleCondition:           "Muscle condition",
	exam.Ambulation:                "Walking",
	exam.VoluntaryMotor:            "Voluntary movement",
	exam.ReflexWalking:             "Steps by reflex",
	exam.AtaxiaProprioceptive:      "Ataxia, proprioceptive",
	exam.AtaxiaVestibular:          "Ataxia, vestibular",
	exam.AtaxiaCerebellar:          "Ataxia, cerebellar",
	exam.SchiffSherrington:         "Schiff–Sherrington posture",
	exam.PupillaryLight:            "Pupillary light reflex",
	exam.EyeFollow:                 "Eyes follow head",
	exam.NystagmusFastPhase:        "Nystagmus, fast phase",
	exam.NystagmusDirection:        "Nystagmus, direction",
	exam.Horner:                    "Horner's signs",
	exam.WithdrawalShoulder:        "Withdrawal, shoulder",
	exam.WithdrawalElbow:           "Withdrawal, elbow",
	exam.WithdrawalCarpus:          "Withdrawal, carpus",
	exam.WithdrawalHip:             "Withdrawal, hip",
	exam.WithdrawalStifle:          "Withdrawal, stifle",
	exam.WithdrawalHock:            "Withdrawal, hock",
	exam.WithdrawalDigits:          "Withdrawal, digits",
	exam.Biceps:                    "Biceps reflex",
	exam.Triceps:                   "Triceps reflex",
	exam.ExtensorCarpi:             "Extensor carpi reflex",
	exam.Patellar:                  "Patellar reflex",
	exam.CranialTibial:             "Cranial tibial reflex",
	exam.Gastrocnemius:             "Gastrocnemius reflex",
	exam.Perineal:                  "Perineal reflex",
	exam.CutaneousTrunci:           "Cutaneous trunci",
	exam.CutaneousTrunciTwitch:     "Cutaneous trunci, side of the twitch",
	exam.TailMovement:              "Tail movement",
	exam.MassTemporalis:            "Mass, temporalis",
	exam.MassMasseter:              "Mass, masseter",
	exam.MassSupraspinatus:         "Mass, supraspinatus",
	exam.MassInfraspinatus:         "Mass, infraspinatus",
	exam.MassBiceps:                "Mass, biceps",
	exam.MassTriceps:               "Mass, triceps",
	exam.MassExtensorCarpi:         "Mass, extensor carpi",
	exam.MassForearmFlexors:        "Mass, forearm flexors",
	exam.MassQuadriceps:            "Mass, quadriceps",
	exam.MassHamstrings:            "Mass, hamstrings",
	exam.MassGluteals:              "Mass, gluteals",
	exam.MassCranialTibial:         "Mass, cranial tibial",
	exam.MassGastrocnemius:         "Mass, gastrocnemius",
	exam.MassEpaxial:               "Mass, epaxial",
	exam.SensationRadial:           "Sensation, radial",
	exam.SensationUlnar:            "Sensation, ulnar",
	exam.SensationMusculocutaneous: "Sensation, musculocutaneous",
	exam.SensationAxillary:         "Sensation, axillary",
	exam.SensationSaphenous:        "Sensation, saphenous",
	exam.SensationFibular:          "Sensation, fibular",
	exam.SensationTibial:           "Sensation, tibial",
	exam.SensationPudendal:         "Sensation, pudendal",
	exam.LumbosacralExtension:      "Pain on lumbosacral extension",
	exam.TailLift:                  "Pain on lifting the tail",
	exam.StifleInstability:         "Stifle instability",
	exam.FemoralPulse:              "Femoral pulse",
	exam.VoluntaryUrination:        "Urination on purpose",
	exam.BladderFill:               "Bladder after voiding",
	exam.BladderOutflow:            "Bladder outflow",
	exam.UrineLeak:                 "Urine leak",
	exam.UrineLook:                 "Look of the urine",
	exam.FaecalContinence:          "Faecal continence",
}

// itemKey returns the English name of an item on screens.
func itemKey(i exam.Item) string {
	if t, ok := itemTitles[i]; ok {
		return t
	}
	return capital(strings.ReplaceAll(i.String(), "-", " "))
}

// ItemName returns the item's name on screens, in the language in use.
func ItemName(i exam.Item) string { return words.Of(itemKey(i)) }

// siteTitles are the names of sites on screens.
var siteTitles = map[exam.Site]string{
	exam.ThoracicLeft: "left thoracic", exam.ThoracicRight: "right thoracic",
	exam.PelvicLeft: "left pelvic", exam.PelvicRight: "right pelvic",
	exam.Left: "left", exam.Right: "right", exam.Midline: "midline", exam.Perineum: "perineum",
	exam.Trunk: "trunk", exam.TailBase: "tail base", exam.TailTip: "tail tip",
	exam.Cervical: "cervical", exam.CranialThoracic: "cranial thoracic", exam.MidThoracic: "mid thoracic",
	exam.Thoracolumbar: "thoracolumbar", exam.Lumbar: "lumbar", exam.Lumbosacral: "lumbosacral",
	exam.Sacrocaudal: "sacrocaudal",
}

// SiteName returns the site's name on screens, in the language in use; empty for no site.
func SiteName(s exam.Site) string { return words.Of(siteTitles[s]) }

// CellName names a cell in full: "Patellar reflex, left pelvic".
func CellName(k exam.Key) string {
	s := ItemName(k.Item)
	if k.Site != exam.Midline && k.Site != exam.NoSite {
		s += ", " + SiteName(k.Site)
	}
	if k.Digit != exam.AnyDigit {
		s += ", " + words.Of(k.Digit.String()+" digit")
	}
	if k.Joint != exam.NoJoint {
		s += ", " + words.Of(k.Joint.String())
	}
	return s
}

// precautionTitles are the precautions as said on screens.
var precautionTitles = map[exam.Precaution]string{
	exam.UnstableSpine: "unstable spine", exam.UnstableNeck: "unstable neck", exam.Implant: "implant",
	exam.Fracture: "fracture", exam.NonWeightBearing: "no weight on the limb", exam.Breathless: "breathless",
	exam.Bites: "bites", exam.Seizures: "seizures", exam.RestUntil: "rest", exam.OpenWound: "open wound",
	exam.Pregnant: "pregnant", exam.Pacemaker: "pacemaker", exam.Tumour: "tumour",
}

// PrecautionWords says a precaution as it stands in the strip above every screen of the patient.
func PrecautionWords(p exam.PrecautionOn) string {
	code, err := exam.ParsePrecaution(p.Code)
	s := p.Code
	if err == nil {
		s = words.Of(precautionTitles[code])
	}
	if site, err := exam.ParseSite(p.Site); err == nil {
		s += ", " + SiteName(site)
	} else if p.Site != "" {
		s += ", " + p.Site
	}
	if p.Until != "" {
		s = words.T("%s until %s", s, DateWords(p.Until))
	}
	if p.Note != "" {
		s += " (" + p.Note + ")"
	}
	return s
}

// SpeciesName returns the species in the language in use.
func SpeciesName(s exam.Species) string { return words.Of(s.String()) }

// Terms lists every word of the vocabulary that reaches people through words.Of, in
// English, for the catalogue of texts.
func Terms() []string {
	var out []string
	for _, i := range exam.Items() {
		out = append(out, itemKey(i))
		out = append(out, i.Info().Grades...)
	}
	for _, t := range siteTitles {
		out = append(out, t)
	}
	for _, t := range precautionTitles {
		out = append(out, t)
	}
	for r := exam.Pain; r <= exam.OtherReason; r++ {
		out = append(out, r.String())
	}
	for _, s := range exam.AllSpecies() {
		out = append(out, s.String())
	}
	for g := exam.GroupWhole; g <= exam.GroupBladder; g++ {
		out = append(out, g.String())
	}
	for j := exam.Shoulder; j <= exam.Digits; j++ {
		out = append(out, j.String())
	}
	for _, m := range exam.Measures() {
		out = append(out, measureKey(m))
	}
	for _, r := range alert.Rules() {
		out = append(out, r.Name, r.Why)
	}
	for _, s := range plainAlerts {
		out = append(out, s)
	}
	out = append(out, "We saw something that your veterinarian must know of.", "now", "today", "soon")
	for _, i := range exam.Items() {
		out = append(out, exam.HowTo(i))
	}
	for st := exam.StageHandsOff; st <= exam.StagePain; st++ {
		out = append(out, st.String())
	}
	for p := exam.HandsOff; p <= exam.Held; p++ {
		out = append(out, p.String())
	}
	for _, c := range exam.Conditions() {
		out = append(out, c.String())
	}
	for _, k := range exam.TreatmentKinds() {
		out = append(out, k.Name, k.Params)
	}
	out = append(out, months[:]...)
	out = append(out, outcomeTerms()...)
	out = append(out, positionTitles[:]...)
	out = append(out, sectionTitles[:]...)
	out = append(out, fieldTerms()...)
	out = append(out, stimTerms()...)
	out = append(out, "medial digit", "lateral digit", "female", "male", "unknown", "active", "discharged", "died",
		"sedation", "aid", "surface", "session", "medicines", "none", "mild", "moderate", "deep")
	for _, p := range exam.Protocols() {
		out = append(out, p.Name)
	}
	for _, s := range scale.Scales() {
		out = append(out, s.Info().Variant)
	}
	for _, t := range importTitles {
		out = append(out, t)
	}
	out = append(out, keyNames...)
	out = append(out, Undermost)
	out = append(out, exam.AidWords()...)
	out = append(out, exam.SurfaceWords()...)
	out = append(out, exam.SessionWords()...)
	return out
}

// measureTitles are the names of measures on screens where the vocabulary's word is not good enough.
var measureTitles = map[exam.Measure]string{
	exam.HoursSinceUrination: "Hours since urination", exam.RangeOfMotion: "Range of motion",
	exam.WeightBearing: "Weight borne", exam.ClonusTime: "Clonus", exam.SpasmTime: "Spasm",
	exam.ScaleMRC: "MRC strength", exam.ScaleMGCS: "Modified Glasgow coma scale", exam.ScaleSpasticity: "Canine spasticity scale",
	exam.ScaleCBBB: "Canine Basso–Beattie–Bresnahan scale", exam.ScaleFrankel: "Modified Frankel score",
	exam.ScaleOpenField: "Open-field score", exam.ScaleTexas: "Texas spinal cord injury score",
	exam.ScaleAshworth: "Modified Ashworth scale",
}

func measureKey(m exam.Measure) string {
	if t, ok := measureTitles[m]; ok {
		return t
	}
	return capital(strings.ReplaceAll(strings.TrimPrefix(m.String(), "task-"), "-", " "))
}

// MeasureName returns the measure's name on screens, in the language in use.
func MeasureName(m exam.Measure) string { return words.Of(measureKey(m)) }
