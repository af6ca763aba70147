package exam

import (
	"slices"
	"strings"
)

// Position is where the animal is while it is tested.
type Position uint8

// The positions.
const (
	HandsOff   Position = iota // free, watched
	Standing                   // standing, or held up on its feet
	LyingRight                 // lying on its right: the left limbs are uppermost
	LyingLeft
	Sternal // lying on its chest
	Held    // in the arms
)

var positionNames = [...]string{"hands off", "standing", "lying on its right", "lying on its left", "lying on its chest", "held in the arms"}

// String returns the position in words.
func (p Position) String() string {
	if int(p) < len(positionNames) {
		return positionNames[p]
	}
	return "unknown"
}

// barRule says what one precaution bars. All of it is common practice; the reasons say why.
type barRule struct {
	words     string // the precaution as screens show it
	why       string // why its tests are barred
	items     []Item // barred wherever they are tested
	limbItems []Item // barred at the precaution's site, at every site where it has none
	measures  []Measure
	positions []Position
}

// walking and carrying are groups of items that several precautions bar.
var (
	walking  = []Item{Ambulation, ReflexWalking, Hopping, ExtensorThrust, Wheelbarrow}
	carrying = []Item{Hopping, ExtensorThrust, Wheelbarrow, TactilePlacing}
	loading  = []Item{PawPlacement, Hopping, ExtensorThrust, Wheelbarrow, TactilePlacing}
	mouth    = []Item{Gag, JawTone, Tongue}
	outdoors = []Measure{WalkDistance, WalkTime, StandTime, StepsScored, StepsWeightBearing, StepsWithMistake, TaskStartWalking,
		TaskWalking, TaskTrotting, TaskTurning, TaskStairs}
	tasks = []Measure{TaskStandFromLying, TaskSitting, TaskStandFromSitting, TaskStanding, TaskPositioning}
)

var barRules = [precautionCount]barRule{
	UnstableSpine: {words: "unstable spine", why: "walking, lifting or bending may move the spine",
		items:    slices.Concat(walking, loading, []Item{SpinalPain, LumbosacralExtension, TailLift, Ataxia, Stride, Knuckling}),
		measures: slices.Concat(outdoors, tasks), positions: []Position{Standing, Held, Sternal}},
	UnstableNeck: {words: "unstable neck", why: "head and neck must not be moved",
		items:    slices.Concat(walking, carrying, []Item{EyeFollow, NeckCarriage, Gag, JawTone}),
		measures: outdoors, positions: []Position{Held}},
	Implant: {words: "implant", why: "pressing or bending at an implant hurts and proves nothing",
		items: []Item{LumbosacralExtension}},
	Fracture: {words: "fracture", why: "the limb must not be loaded or bent",
		limbItems: slices.Concat(loading, []Item{Tone, JointPain, LimbPain, Lameness}),
		items:     []Item{Wheelbarrow, ExtensorThrust}, measures: append([]Measure{RangeOfMotion, WeightBearing}, outdoors...)},
	NonWeightBearing: {words: "no weight on the limb", why: "the limb must not be loaded",
		limbItems: loading, measures: append([]Measure{WeightBearing}, outdoors...)},
	Breathless: {words: "short of breath", why: "effort and lying on the side make breathing harder",
		items:    slices.Concat(carrying, []Item{Gag}),
		measures: outdoors, positions: []Position{LyingRight, LyingLeft, Held}},
	Bites: {words: "bites", why: "hands stay away from the mouth",
		items: slices.Concat(mouth, []Item{Corneal, FacialSensation}), positions: []Position{Held}},
	Seizures: {words: "seizures", why: "it may fall from hands or table",
		items: []Item{TactilePlacing, ExtensorThrust}, positions: []Position{Held}},
	RestUntil: {words: "strict rest", why: "rest was ordered",
		items: slices.Concat(carrying), measures: outdoors},
	OpenWound: {words: "open wound", why: "the wound is not pressed on"},
	Pregnant:  {words: "pregnant", why: "no pressure on the belly"},
	Pacemaker: {words: "pacemaker", why: "no electrical current"},
	Tumour:    {words: "tumour", why: "nothing that may feed or spread it"},
}

// Words returns the precaution as screens show it: «rest until 2026-04-01: cage» .
func (p PrecautionOn) Words() string {
	code, err := ParsePrecaution(p.Code)
	if err != nil {
		return p.Code
	}
	s := barRules[code].words
	if p.Site != "" {
		s += ", " + strings.ReplaceAll(p.Site, "-", " ")
	}
	if p.Until != "" {
		s += " until " + string(p.Until)
	}
	if p.Note != "" {
		s += " (" + p.Note + ")"
	}
	return s
}

// BarList answers which cells and positions the precautions in force bar. The zero BarList bars nothing.
type BarList struct{ on []PrecautionOn }

// Bars gathers the precautions that are in force on a day.
func Bars(ps []PrecautionOn, on Date) BarList {
	var b BarList
	for _, p := range ps {
		if p.HoldsOn(on) && p.Validate() == nil {
			b.on = append(b.on, p)
		}
	}
	return b
}

// In reports whether a precaution is in force, and returns it.
func (b BarList) In(code Precaution) (PrecautionOn, bool) {
	for _, p := range b.on {
		if c, _ := ParsePrecaution(p.Code); c == code {
			return p, true
		}
	}
	return PrecautionOn{}, false
}

// Why returns why a cell is barred: the precaution in words and the reason, or "" where it is not.
func (b BarList) Why(k Key) string {
	for _, p := range b.on {
		code, _ := ParsePrecaution(p.Code)
		rule := barRules[code]
		site, _ := ParseSite(p.Site)
		hit := slices.Contains(rule.items, k.Item) ||
			slices.Contains(rule.limbItems, k.Item) && (site == NoSite || site == k.Site || !site.IsLimb())
		switch {
		// These two bar a test only at the place they name; without a place, at any.
		case code == Implant && k.Item == SpinalPain:
			hit = site == NoSite || site == k.Site || site == Trunk
		case code == OpenWound && k.Item == SpinalPain:
			hit = site == k.Site || site == Trunk
		case code == Implant && k.Item == LumbosacralExtension:
			hit = site == NoSite || site == Lumbosacral || site == Lumbar
		case code == Pregnant && k.Item == BladderFill:
			hit = true
		case code == UnstableNeck && k.Item == SpinalPain:
			hit = k.Site == Cervical || k.Site == CranialThoracic
		}
		if hit {
			return p.Words() + ": " + rule.why
		}
	}
	return ""
}

// WhyMeasure is Why for a measure at a site.
func (b BarList) WhyMeasure(m Measure, at Site) string {
	for _, p := range b.on {
		code, _ := ParsePrecaution(p.Code)
		site, _ := ParseSite(p.Site)
		if slices.Contains(barRules[code].measures, m) &&
			(site == NoSite || at == NoSite || at == Midline || !site.IsLimb() || site == at || m == RangeOfMotion && site.Side() == at) {
			return p.Words() + ": " + barRules[code].why
		}
	}
	return ""
}

// WhyPosition is Why for a position.
func (b BarList) WhyPosition(pos Position) string {
	for _, p := range b.on {
		code, _ := ParsePrecaution(p.Code)
		site, _ := ParseSite(p.Site)
		under := code == Fracture && site.IsLimb() && // a broken limb is not lain upon
			(pos == LyingLeft && site.Side() == Left || pos == LyingRight && site.Side() == Right)
		if under || slices.Contains(barRules[code].positions, pos) {
			return p.Words() + ": " + barRules[code].why
		}
	}
	return ""
}

// Words returns the precautions in force, in words.
func (b BarList) Words() []string {
	var out []string
	for _, p := range b.on {
		out = append(out, p.Words())
	}
	return out
}
