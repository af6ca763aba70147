package exam

import (
	"fmt"
	"slices"
	"strings"
	"time"
)

// Condition is something about an animal that speaks against a treatment or an exercise.
type Condition uint8

// The conditions.
const (
	NoCondition      Condition = iota
	OpenSkin                   // an open sore at the site, or an open wound anywhere
	WoundNotHealed             // surgery less than 14 days ago
	BowelLeak                  // does not hold its stools
	FoulUrine                  // bloody, foul or cloudy urine
	UrineLeaks                 // leaks all the time
	NumbSkin                   // the skin at the site does not feel normally, or nobody knows in a limb without movement
	ShortOfBreath              // laboured or fast breathing, or the precaution
	Chokes                     // gag or swallowing reduced, regurgitation
	Fever                      // 39.5 °C or more
	NoPulse                    // femoral pulse absent or paw cold
	SeverePain                 // severe pain of spine, joint or limb
	Dull                       // not alert
	FitsKnown                  // a seizure since last visit, or the precaution
	HasPacemaker               //
	HasTumour                  //
	IsPregnant                 //
	SpineUnstable              //
	NeckUnstable               //
	HasFracture                // at the site, or anywhere for loading
	NoWeightAllowed            // a limb that must not bear weight
	MustRest                   // strict rest until a date
	HasImplant                 // metal at the site, or anywhere where no site is said
	CannotStandAlone           // not ambulatory
	WeakNeckOrTrunk            // cannot lift the head
	SkinIrritated              // reddened or wet skin at the site
	Growing                    // under a year of age
	MayBite                    //
	TenseBladder               // large and tense
	conditionCount
)

var conditionWords = [conditionCount]string{"", "open skin or wound", "surgery less than 14 days ago", "does not hold its stools",
	"bloody, foul or cloudy urine", "leaks urine all the time", "numb skin", "short of breath", "trouble swallowing",
	"fever", "cold limb or no pulse", "severe pain", "not fully alert", "seizures", "pacemaker", "tumour", "pregnant",
	"unstable spine", "unstable neck", "fracture", "no weight on the limb", "strict rest", "implant", "does not walk alone",
	"cannot lift its head", "reddened or wet skin", "under a year old", "bites", "large, tense bladder"}

// String returns the condition in words.
func (c Condition) String() string {
	if c < conditionCount {
		return conditionWords[c]
	}
	return "unknown"
}

// Conditions lists every condition.
func Conditions() []Condition {
	out := make([]Condition, 0, conditionCount-1)
	for c := NoCondition + 1; c < conditionCount; c++ {
		out = append(out, c)
	}
	return out
}

// Kind of treatment given in a session.
type TreatmentKind struct {
	Key    string
	Name   string
	Params string      // what is worth writing down, as a hint in the field
	Stop   []Condition // not to be done
	Ask    []Condition // only after thought, with a reason
	Source string
}

// groups of conditions that several rows share.
var (
	loadStop = []Condition{SpineUnstable, HasFracture, NoWeightAllowed, MustRest, SeverePain, Fever}
	loadAsk  = []Condition{ShortOfBreath, WoundNotHealed, Dull, NeckUnstable, NoPulse}
	current  = []Condition{HasPacemaker, FitsKnown, HasTumour, OpenSkin}
)

// Electrical rows: CSMR-NMES and NMES-summary name heart, pacemaker, seizures, infected tissue and
// pregnancy, and as cautions dull feeling and broken skin; neoplasia and thrombosis from memory. The rest
// of the table is common practice.
var treatmentKinds = []TreatmentKind{
	{"underwater-treadmill", "Underwater treadmill", "speed, depth of water, °C, rounds", append([]Condition{OpenSkin, BowelLeak, Chokes, FitsKnown}, append(slices.Clone(loadStop), ShortOfBreath, WoundNotHealed)...),
		[]Condition{FoulUrine, UrineLeaks, WeakNeckOrTrunk, Dull, NoPulse, NeckUnstable, IsPregnant, MayBite}, "common practice"},
	{"swimming", "Swimming", "°C, rounds, jacket", append([]Condition{OpenSkin, BowelLeak, Chokes, FitsKnown, WeakNeckOrTrunk, NeckUnstable}, append(slices.Clone(loadStop), ShortOfBreath, WoundNotHealed)...),
		[]Condition{FoulUrine, UrineLeaks, Dull, NoPulse, IsPregnant, MayBite}, "common practice"},
	{"treadmill", "Land treadmill", "speed, slope, rounds", loadStop, append([]Condition{CannotStandAlone, FitsKnown, IsPregnant}, loadAsk...), "common practice"},
	{"gait-training", "Gait training in sling or harness", "aid, distance, steps", loadStop, loadAsk, "common practice"},
	{"assisted-standing", "Assisted standing", "aid, minutes, repeats", []Condition{SpineUnstable, HasFracture, NoWeightAllowed}, []Condition{SeverePain, Fever, ShortOfBreath, MustRest, NeckUnstable}, "common practice"},
	{"weight-shifting", "Weight shifting", "direction, repeats", []Condition{SpineUnstable, HasFracture, NoWeightAllowed}, []Condition{SeverePain, MustRest, CannotStandAlone, NeckUnstable, WoundNotHealed}, "common practice"},
	{"balance", "Balance board or cushion", "board, minutes", append([]Condition{NeckUnstable}, loadStop...), []Condition{CannotStandAlone, FitsKnown, Dull, WoundNotHealed, ShortOfBreath}, "common practice"},
	{"poles", "Walking over poles", "height, number, rounds", append([]Condition{NeckUnstable, CannotStandAlone}, loadStop...), []Condition{ShortOfBreath, Dull, WoundNotHealed}, "common practice"},
	{"steps-and-slopes", "Steps and slopes", "height, rounds", append([]Condition{NeckUnstable, CannotStandAlone}, loadStop...), []Condition{ShortOfBreath, Dull, WoundNotHealed}, "common practice"},
	{"passive-movement", "Passive movement", "joints, repeats", []Condition{HasFracture}, []Condition{SpineUnstable, NeckUnstable, SeverePain, NumbSkin, NoPulse, MayBite}, "common practice"},
	{"stretching", "Stretching", "muscle, seconds, repeats", []Condition{HasFracture, SpineUnstable}, []Condition{SeverePain, NumbSkin, HasImplant, NoPulse, NeckUnstable, MayBite}, "common practice"},
	{"joint-mobilisation", "Joint mobilisation", "joint, grade", []Condition{HasFracture, SpineUnstable, NeckUnstable, HasTumour}, []Condition{SeverePain, HasImplant, Growing, WoundNotHealed, MayBite}, "common practice"},
	{"flexor-stimulation", "Withdrawal exercise", "limb, repeats", []Condition{HasFracture, OpenSkin}, []Condition{SpineUnstable, SeverePain, MayBite}, "common practice"},
	{"massage", "Massage", "muscles, minutes", []Condition{HasFracture, OpenSkin}, []Condition{HasTumour, Fever, NoPulse, SeverePain, SpineUnstable, MayBite}, "common practice; over tumour from memory"},
	{"heat", "Heat", "kind, °C, minutes", []Condition{NumbSkin, OpenSkin, NoPulse, HasTumour}, []Condition{WoundNotHealed, Fever, SkinIrritated, HasImplant, IsPregnant, Dull}, "common practice"},
	{"cold", "Cold", "kind, minutes", []Condition{NumbSkin, NoPulse}, []Condition{OpenSkin, SkinIrritated, Dull}, "common practice"},
	{"laser", "Laser (photobiomodulation)", "W, J/cm², points", []Condition{HasTumour, IsPregnant}, []Condition{OpenSkin, Growing, NumbSkin, FitsKnown}, "common practice"},
	{"ultrasound", "Therapeutic ultrasound", "MHz, W/cm², duty", []Condition{HasTumour, IsPregnant, HasPacemaker, NumbSkin, OpenSkin, HasFracture}, []Condition{Growing, HasImplant, NoPulse, WoundNotHealed}, "common practice"},
	{"nmes", "Muscle stimulation (NMES)", "Hz, µs, mA, on:off, ramp", append([]Condition{IsPregnant}, current...), []Condition{NumbSkin, SkinIrritated, HasFracture, NoPulse, SpineUnstable, WoundNotHealed, NeckUnstable, Fever, MayBite}, "CSMR-NMES, NMES-summary; tumour, thrombosis and fresh fracture from memory"},
	{"tens", "Pain relief by current (TENS)", "Hz, µs, mA", append([]Condition{IsPregnant}, current...), []Condition{NumbSkin, SkinIrritated, NoPulse, Fever, MayBite}, "CSMR-NMES, NMES-summary"},
	{"magnetic-field", "Pulsed magnetic field", "Hz, mT, minutes", []Condition{HasPacemaker, IsPregnant}, []Condition{HasTumour, FitsKnown}, "common practice"},
	{"shockwave", "Shock wave", "mJ/mm², pulses", []Condition{HasTumour, IsPregnant, SpineUnstable, Growing, NumbSkin, OpenSkin, HasPacemaker}, []Condition{HasImplant, HasFracture, SeverePain}, "common practice"},
	{"acupuncture", "Acupuncture (by a veterinarian)", "points, minutes", nil, []Condition{IsPregnant, HasTumour, OpenSkin, Fever, MayBite}, "common practice"},
	{"electroacupuncture", "Electroacupuncture (by a veterinarian)", "points, Hz, minutes", append([]Condition{IsPregnant}, current...), []Condition{Fever, MayBite, NeckUnstable}, "CSMR-NMES, NMES-summary, by analogy"},
	{"chest-physiotherapy", "Chest physiotherapy", "position, minutes", []Condition{SpineUnstable, HasFracture}, []Condition{ShortOfBreath, Chokes, NeckUnstable, WoundNotHealed}, "common practice"},
	{"bladder-expression", "Emptying the bladder", "ease, amount, colour", []Condition{TenseBladder}, []Condition{FoulUrine, IsPregnant, SpineUnstable, HasFracture}, "common practice; never force: Retention-book"},
	{"positioning", "Turning and bedding", "positions, hours", nil, []Condition{SpineUnstable, NeckUnstable, ShortOfBreath}, "common practice"},
}

// ExerciseKind is one exercise an owner can do at home.
type ExerciseKind struct {
	Key    string
	Name   string // everyday words
	How    string // everyday words, short sentences
	Amount string
	Stop   string // what to stop for
	Never  []Condition
	Ask    []Condition
	Source string
}

var exerciseKinds = []ExerciseKind{
	{"leg-cycling", "Bend and stretch the legs", "With your pet on its side, move one leg in slow circles, as if it rode a bike. Hold the leg above and below the joint.", "10 slow circles for each leg", "Stop if it cries, pulls away or stiffens.", []Condition{HasFracture, SpineUnstable}, []Condition{SeverePain, NeckUnstable, MayBite}, "common practice"},
	{"toe-tickle", "Tickle the paws", "Tickle between the toes with a soft brush until the leg bends.", "5 times for each paw", "Stop if the skin is red or sore.", []Condition{OpenSkin, HasFracture}, []Condition{SpineUnstable, MayBite}, "common practice"},
	{"gentle-rubbing", "Rub the muscles", "Stroke each leg from the paw up to the body with a flat, warm hand.", "3 minutes for each leg", "Stop if it is sore to touch.", []Condition{HasFracture, OpenSkin}, []Condition{HasTumour, NoPulse, SeverePain, MayBite}, "common practice"},
	{"help-to-stand", "Help to stand", "Lift your pet on to its feet on a mat that grips. Put the paws flat under the body. Hold it up with a sling or your hands.", "1 to 2 minutes, 3 rounds", "Stop if it tires, pants or slips.", []Condition{SpineUnstable, HasFracture, NoWeightAllowed}, []Condition{MustRest, ShortOfBreath, SeverePain, Fever, NeckUnstable}, "common practice"},
	{"gentle-push", "Gentle push from side to side", "While it stands on a mat that grips, push the hips softly to one side and then the other, so that it must hold itself.", "10 pushes to each side", "Stop if it falls or tires.", []Condition{SpineUnstable, HasFracture, NoWeightAllowed, CannotStandAlone}, []Condition{MustRest, SeverePain, NeckUnstable, WoundNotHealed}, "common practice"},
	{"sit-to-stand", "Sit and stand", "Ask it to sit straight and to stand up again for a treat.", "5 times", "Stop if it sits down crooked or cries.", []Condition{SpineUnstable, HasFracture, NoWeightAllowed, CannotStandAlone, MustRest}, []Condition{SeverePain, WoundNotHealed, Fever, NeckUnstable}, "common practice"},
	{"slow-walk", "Slow walk on a lead", "Walk as slowly as you can on a short lead, so that each paw is set down. Stay on grass or a floor that grips.", "5 minutes", "Stop if a paw turns over or it tires.", []Condition{SpineUnstable, HasFracture, NoWeightAllowed, CannotStandAlone, MustRest}, []Condition{ShortOfBreath, SeverePain, Fever, WoundNotHealed, NeckUnstable}, "common practice"},
	{"sling-walk", "Walk in the sling", "Hold up the hind end with the sling, just enough to keep it level. Let it take each step by itself.", "5 minutes", "Stop if the paws drag and get sore.", []Condition{SpineUnstable, HasFracture, NoWeightAllowed}, []Condition{MustRest, ShortOfBreath, OpenSkin, SeverePain, Fever, NeckUnstable}, "common practice"},
	{"figure-eight", "Walk in a figure eight", "Walk slowly round two cones or pots in a figure eight.", "5 rounds", "Stop if it crosses its legs or falls.", []Condition{SpineUnstable, NeckUnstable, HasFracture, NoWeightAllowed, CannotStandAlone, MustRest}, []Condition{ShortOfBreath, SeverePain, Fever, WoundNotHealed}, "common practice"},
	{"low-poles", "Step over low poles", "Lay broom sticks flat on the ground, one step apart. Walk over them slowly.", "5 rounds", "Stop if it trips or hops.", []Condition{SpineUnstable, NeckUnstable, HasFracture, NoWeightAllowed, CannotStandAlone, MustRest}, []Condition{ShortOfBreath, SeverePain, Fever, WoundNotHealed}, "common practice"},
	{"treat-stretch", "Turn the head for a treat", "While it stands or lies, hold a treat at the shoulder, then at the hip, so that it bends to each side.", "5 times to each side", "Stop if it cries or looks stiff.", []Condition{NeckUnstable, SpineUnstable}, []Condition{SeverePain, Chokes, WoundNotHealed}, "common practice"},
	{"warm-pack", "Warm pack", "Wrap a warm pack in a towel. Test it on your own wrist first. Lay it on the muscle.", "10 minutes", "Stop if the skin is hot or red.", []Condition{NumbSkin, OpenSkin, NoPulse, HasTumour}, []Condition{WoundNotHealed, Fever, SkinIrritated, Dull, IsPregnant}, "common practice"},
	{"cool-pack", "Cool pack", "Wrap a cool pack in a damp towel. Lay it on the sore place.", "10 minutes", "Stop if it shivers or the skin is white.", []Condition{NumbSkin, NoPulse}, []Condition{OpenSkin, SkinIrritated, Dull}, "common practice"},
	{"turning", "Turn it over", "Turn your pet to its other side on a thick, dry bed.", "every 4 hours", "Call us if the skin is red or sore.", nil, []Condition{SpineUnstable, NeckUnstable, ShortOfBreath}, "common practice"},
	{"skin-check", "Look at the skin", "Look at elbows, hips, heels and under the tail. Wash and dry where urine wets the coat.", "twice a day", "Call us if the skin is red, wet or sore.", nil, nil, "common practice"},
	{"bladder-care", "Empty the bladder", "Press on the belly only the way you were shown. Write down how much comes.", "every 6 to 8 hours", "Call your veterinarian if nothing comes, if it hurts, or if there is blood.", []Condition{TenseBladder}, []Condition{FoulUrine, IsPregnant, SpineUnstable, HasFracture}, "common practice"},
	{"paw-brushing", "Brush the paw on the floor", "While it stands, turn the paw over and set it back flat. Do this slowly.", "10 times for each paw", "Stop if the top of the paw is sore.", []Condition{SpineUnstable, HasFracture, NoWeightAllowed, OpenSkin}, []Condition{MustRest, CannotStandAlone, MayBite, SeverePain}, "common practice"},
}

// TreatmentKinds lists the kinds of treatment, in the order shown.
func TreatmentKinds() []TreatmentKind { return slices.Clone(treatmentKinds) }

// ExerciseKinds lists the home exercises, in the order shown.
func ExerciseKinds() []ExerciseKind { return slices.Clone(exerciseKinds) }

// TreatmentByKey returns a kind of treatment, and false for an unknown key.
func TreatmentByKey(key string) (TreatmentKind, bool) {
	for _, k := range treatmentKinds {
		if k.Key == key {
			return k, true
		}
	}
	return TreatmentKind{}, false
}

// ExerciseByKey returns a home exercise, and false for an unknown key.
func ExerciseByKey(key string) (ExerciseKind, bool) {
	for _, k := range exerciseKinds {
		if k.Key == key {
			return k, true
		}
	}
	return ExerciseKind{}, false
}

// Objection is a reason against a treatment or an exercise.
type Objection struct {
	Condition Condition
	Stop      bool   // not to be done; else only after thought
	Why       string // what was seen, where and when
	Source    string
	Seen      SeenCell // the finding behind it, zero where it comes from the file
}

// SeenCell is the finding behind an objection.
type SeenCell struct {
	Item  Item // zero: no finding
	Site  Site
	Grade int8
	Day   Date // of the visit
}

// CheckTreatment returns what speaks against a treatment, stops first: from the precautions in force on
// the day of today's visit, and from the findings of today or, where something was not tested today, of the
// latest earlier visit that tested it. Empty means that nothing on record speaks against it. A treatment
// that is not in the table is checked as if every condition asked for thought.
func CheckTreatment(p Patient, t Treatment, today Visit, earlier ...Visit) []Objection {
	k, ok := TreatmentByKey(t.Kind)
	if !ok {
		k = TreatmentKind{Ask: Conditions(), Source: "common practice"}
	}
	site, _ := ParseSite(t.Site)
	return object(conditionsOf(p, site, today, earlier), k.Stop, k.Ask, k.Source)
}

// CheckExercise is CheckTreatment for an exercise at home.
func CheckExercise(p Patient, e HomeExercise, today Visit, earlier ...Visit) []Objection {
	k, ok := ExerciseByKey(e.Kind)
	if !ok {
		k = ExerciseKind{Ask: Conditions(), Source: "common practice"}
	}
	return object(conditionsOf(p, NoSite, today, earlier), k.Never, k.Ask, k.Source)
}

func object(met map[Condition]reason, stop, ask []Condition, source string) []Objection {
	var out []Objection
	for _, part := range []struct {
		list []Condition
		stop bool
	}{{stop, true}, {ask, false}} {
		for _, c := range Conditions() {
			if why, ok := met[c]; ok && slices.Contains(part.list, c) && (part.stop || !slices.Contains(stop, c)) {
				out = append(out, Objection{Condition: c, Stop: part.stop, Why: c.String() + ": " + why.words, Source: source, Seen: why.seen})
			}
		}
	}
	return out
}

// reason is why a condition holds.
type reason struct {
	words string
	seen  SeenCell
}

// freshSurgeryDays is how long a wound counts as not healed (common practice: stitches stay 10–14 days).
const freshSurgeryDays = 14

// FeverCelsius is the rectal temperature from which an animal has fever; no published cut-off was found: common practice.
const FeverCelsius = 39.5

// conditionsOf finds which conditions hold, each with what was seen.
func conditionsOf(p Patient, site Site, today Visit, earlier []Visit) map[Condition]reason {
	met := map[Condition]reason{}
	visits := slices.Clone(earlier)
	slices.SortStableFunc(visits, func(a, b Visit) int { return b.Examined.Compare(a.Examined) })
	visits = append([]Visit{today}, visits...)
	say := func(c Condition, format string, args ...any) {
		if _, ok := met[c]; !ok {
			met[c] = reason{words: fmt.Sprintf(format, args...)}
		}
	}
	day := func(t time.Time) string {
		if t.IsZero() {
			return "today"
		}
		return string(DayOf(t))
	}
	// latest returns the last known grade of an item at a site.
	latest := func(i Item, s Site) (int8, time.Time, bool) {
		for _, v := range visits {
			if g, ok := v.Grade(i, s); ok {
				return g, v.Examined, true
			}
		}
		return 0, time.Time{}, false
	}
	found := func(c Condition, i Item, s Site, g int8, when time.Time) {
		if _, ok := met[c]; !ok {
			met[c] = reason{describe(i, s, g) + ", " + day(when), SeenCell{i, s, g, DayOf(when)}}
		}
	}
	atMost := func(c Condition, i Item, s Site, limit int8) {
		if g, when, ok := latest(i, s); ok && g <= limit {
			found(c, i, s, g, when)
		}
	}
	atLeast := func(c Condition, i Item, s Site, limit int8) {
		if g, when, ok := latest(i, s); ok && g >= limit {
			found(c, i, s, g, when)
		}
	}
	// touches reports whether a finding at s concerns a treatment at the site; one without a site concerns all.
	touches := func(s Site) bool {
		return site == NoSite || site == Midline || s == NoSite || s == site ||
			site == Left && s.Side() == Left || site == Right && s.Side() == Right
	}
	bars := Bars(p.Precautions, DayOf(today.Examined))
	for code, c := range map[Precaution]Condition{UnstableSpine: SpineUnstable, UnstableNeck: NeckUnstable, Implant: HasImplant, Fracture: HasFracture,
		NonWeightBearing: NoWeightAllowed, Breathless: ShortOfBreath, Bites: MayBite, Seizures: FitsKnown, RestUntil: MustRest,
		OpenWound: OpenSkin, Pregnant: IsPregnant, Pacemaker: HasPacemaker, Tumour: HasTumour} {
		for _, on := range bars.on {
			if got, _ := ParsePrecaution(on.Code); got == code {
				at, _ := ParseSite(on.Site)
				if code == Implant && !touches(at) {
					continue
				}
				say(c, "%s", on.Words())
			}
		}
	}
	for _, s := range skinSites {
		g, when, ok := latest(Skin, s)
		if ok && g == 0 && touches(s) {
			found(OpenSkin, Skin, s, g, when)
		}
		if ok && g == 1 && touches(s) {
			found(SkinIrritated, Skin, s, g, when)
		}
	}
	atMost(OpenSkin, Wound, Midline, 0)
	for _, pr := range p.Problems {
		if d, ok := pr.Surgery.DaysBefore(today.Examined); ok && d >= -0.5 && d < freshSurgeryDays && pr.Resolved == "" {
			say(WoundNotHealed, "surgery on %s", pr.Surgery)
		}
	}
	atMost(BowelLeak, FaecalContinence, Midline, 1)
	atMost(FoulUrine, UrineLook, Midline, 1)
	atLeast(UrineLeaks, UrineLeak, Midline, 2)
	if g, when, ok := latest(BladderOutflow, Midline); ok && g == 0 {
		found(UrineLeaks, BladderOutflow, Midline, g, when)
	}
	atMost(TenseBladder, BladderFill, Midline, 0)
	for _, s := range painSites {
		if !touches(s) {
			continue
		}
		atMost(NumbSkin, SuperficialPain, s, 1)
		if g, when, ok := latest(VoluntaryMotor, s); ok && g == 0 {
			if _, _, known := latest(SuperficialPain, s); !known {
				say(NumbSkin, "no movement in the %s (%s) and feeling not tested", strings.ReplaceAll(s.String(), "-", " "), day(when))
			}
		}
	}
	for _, z := range []struct {
		item   Item
		pelvic bool
	}{{SensationRadial, false}, {SensationUlnar, false}, {SensationMusculocutaneous, false}, {SensationAxillary, false},
		{SensationSaphenous, true}, {SensationFibular, true}, {SensationTibial, true}, {SensationPudendal, true}} {
		for _, side := range pairedSites {
			limb := ThoracicLeft
			if z.pelvic {
				limb = PelvicLeft
			}
			if side == Right {
				limb = limb.Mirror()
			}
			if z.item == SensationPudendal {
				limb = Perineum
			}
			if touches(limb) {
				atMost(NumbSkin, z.item, side, 1)
			}
		}
	}
	atMost(ShortOfBreath, Breathing, Midline, 1)
	atMost(ShortOfBreath, Gums, Midline, 0)
	atMost(Chokes, Gag, Midline, 1)
	atMost(Chokes, Swallowing, Midline, 1)
	atLeast(Chokes, Regurgitation, Midline, 1)
	for _, v := range visits {
		if m, ok := v.Measured(Temperature, NoSite); ok {
			if m.Value >= FeverCelsius {
				say(Fever, "%.1f °C, %s", m.Value, day(v.Examined))
			}
			break
		}
	}
	for _, s := range pairedSites {
		if g, when, ok := latest(FemoralPulse, s); ok && g == 0 && (touches(s) || site.IsPelvic() && site.Side() == s) {
			found(NoPulse, FemoralPulse, s, g, when)
		}
	}
	for _, s := range limbSites {
		if touches(s) {
			atMost(NoPulse, PawWarmth, s, 0)
		}
		atLeast(SeverePain, JointPain, s, 3)
		atLeast(SeverePain, LimbPain, s, 3)
	}
	for _, s := range spineSites {
		atLeast(SeverePain, SpinalPain, s, 3)
	}
	atMost(Dull, Mentation, Midline, 2)
	atLeast(FitsKnown, SeizureSinceLast, Midline, 1)
	atMost(CannotStandAlone, Ambulation, Midline, 1)
	atMost(WeakNeckOrTrunk, NeckCarriage, Midline, 0)
	if years, ok := p.AgeYears(today.Examined); ok && years < 1 && years > -0.1 {
		say(Growing, "born %s", p.Born)
	}
	return met
}

// describe says a finding in a few words: «skin at trunk: open sore».
func describe(i Item, s Site, grade int8) string {
	name := strings.ReplaceAll(i.String(), "-", " ")
	if s != Midline && s != NoSite {
		name += " at " + strings.ReplaceAll(s.String(), "-", " ")
	}
	return name + ": " + i.GradeWord(grade)
}
