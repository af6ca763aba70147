// Package scale computes published scores from the findings and measures of a visit, for
// comparison with papers and colleagues.
//
// What was not tested is not normal: a score whose inputs are incomplete is a set of possible
// levels, with the missing inputs named. A change is claimed only when two sets do not overlap.
// Scores that need what the exam does not hold can be entered by hand; every value carries its
// variant and which end is best, since several scales run both ways under one name.
package scale

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/stat"
)

// Scale is a published score in one variant.
type Scale uint8

// The scales.
const (
	NoScale          Scale = iota
	Frankel                // modified Frankel, variant A, pelvic limbs
	FrankelAllLimbs        // the same ladder on all four limbs, for cervical cases
	FrankelB               // variant B, 0–5
	FrankelC               // variant C, 1–5, 1 is best
	FrankelD               // variant D, I–V, as C
	OpenField              // Olby 2001
	TexasLimb              // Texas spinal cord injury score of one limb
	TexasPelvic            // of the pelvic limbs
	Texas                  // of all four limbs
	Ashworth               // modified Ashworth, one limb
	WeightSteps            // share of steps that bear weight, one pelvic limb
	Stepping               // stepping score
	Functional             // Finnish neurological function testing battery
	MRC                    // by hand
	Coma                   // modified Glasgow coma scale, by hand
	Spasticity             // canine spasticity scale, by hand
	Basso                  // Basso-type scale for dogs, by hand
	FrankelEntered         // by hand, with its variant
	OpenFieldEntered       // by hand
	TexasEntered           // by hand
	AshworthEntered        // by hand
	scaleCount
)

// Info describes a scale.
type Info struct {
	Key         string
	Name        string
	Variant     string
	Min, Max    float64
	Best        float64 // the best end
	Sites       []exam.Site
	Hand        bool         // entered by hand, never computed
	Measure     exam.Measure // by hand: the measure that holds it
	Levels      []string     // Levels[i] says in words what level Min+i means; empty for totals
	Reliability string       // what is published of its repeatability
	Source      string
	Licence     string // why it may be used
}

var frankelLevels = []string{"no movement, neither surface nor depth felt", "no movement, depth felt only", "no movement, surface and depth felt",
	"moves, does not walk", "walks, ataxic or weak", "gait normal, spinal pain", "normal"}

const journal = "journal method; no licence or fee known (from memory)"

var pelvic = []exam.Site{exam.PelvicLeft, exam.PelvicRight}

var infos = [scaleCount]Info{
	Frankel: {Key: "frankel", Name: "Modified Frankel", Variant: "A, 0–6, pelvic limbs", Max: 6, Best: 6, Levels: frankelLevels,
		Reliability: "two raters agreed in 88 %, weighted kappa 0.93 (Levine2009, abstract)", Source: "Frankel-T1", Licence: journal},
	FrankelAllLimbs: {Key: "frankel-all-limbs", Name: "Modified Frankel, all limbs", Variant: "A, 0–6, all limbs", Max: 6, Best: 6, Levels: frankelLevels,
		Reliability: "as the pelvic limbs'; four limbs: common practice", Source: "Frankel-T1; four limbs: common practice", Licence: journal},
	FrankelB: {Key: "frankel-b", Name: "Modified Frankel", Variant: "B, 0–5", Max: 5, Best: 5, Levels: append(slices.Clone(frankelLevels[:5]), "pain only, or no deficit"),
		Reliability: "weighted kappa 0.93 (Levine2009, abstract)", Source: "Levine2009, layout from memory; Elliott2020", Licence: journal},
	FrankelC: {Key: "frankel-c", Name: "Modified Frankel", Variant: "C, 1–5, 1 is best", Min: 1, Max: 5, Best: 1,
		Levels:      []string{"pain only", "walks, weak", "does not walk, moves", "no movement, depth felt", "no movement, depth not felt"},
		Reliability: "none found for this variant", Source: "Langerhuus2017; 1–2 from memory", Licence: journal},
	FrankelD: {Key: "frankel-d", Name: "Modified Frankel", Variant: "D, I–V, I is best", Min: 1, Max: 5, Best: 1,
		Levels:      []string{"pain only", "walks, with deficits", "does not walk, moves", "no movement, depth felt", "no movement, depth not felt"},
		Reliability: "none found for this variant", Source: "Ingram2013", Licence: journal},
	OpenField: {Key: "open-field", Name: "Open-field score", Variant: "0–14", Max: 14, Best: 14,
		Levels: []string{"no movement, no deep pain", "no movement, deep pain felt", "no movement, tail moved on purpose",
			"slight swing without weight, one joint", "swing without weight, more than one joint, in less than half of the steps",
			"swing without weight, more than one joint, in at least half of the steps", "bears weight in less than 10 % of the steps",
			"bears weight in 10–50 %", "bears weight in more than 50 %", "always bears weight, weak, mistakes in more than 90 %",
			"always bears weight, weak, mistakes in 50–90 %", "always bears weight, weak, mistakes in less than 50 %",
			"strength normal, ataxic, mistakes in more than 50 %", "strength normal, ataxic, mistakes in less than 50 %", "normal gait"},
		Reliability: "more reliable than a visual analogue scale (Olby2001, abstract; coefficients not seen)",
		Source:      "Olby2001; levels 0–11 OFS-page, 12–14 from memory", Licence: journal},
	TexasLimb: {Key: "texas-limb", Name: "Texas spinal cord injury score", Variant: "one limb, 0–10", Max: 10, Best: 10, Sites: exam.Limbs(),
		Reliability: "weighted kappa of the parts 0.72–0.94 (Levine2009, abstract)", Source: "Levine2009, sub-levels from memory", Licence: journal},
	TexasPelvic: {Key: "texas-pelvic", Name: "Texas spinal cord injury score", Variant: "pelvic limbs, 0–20", Max: 20, Best: 20,
		Reliability: "rank correlation between raters 0.99 (Levine2009, abstract)", Source: "Levine2009, sub-levels from memory", Licence: journal},
	Texas: {Key: "texas", Name: "Texas spinal cord injury score", Variant: "four limbs, 0–40", Max: 40, Best: 40,
		Reliability: "rank correlation between raters 0.99 (Levine2009, abstract)", Source: "Levine2009, sub-levels from memory", Licence: journal},
	Ashworth: {Key: "ashworth", Name: "Modified Ashworth", Variant: "ranks 0–5 for 0, 1, 1+, 2, 3, 4", Max: 5, Best: 0, Sites: exam.Limbs(), Levels: ashworthLevels,
		Reliability: "children: ICC 0.61–0.87 between raters, 0.36–0.83 on repeat (MASrel)", Source: "MAS-page, Bohannon1987", Licence: journal},
	WeightSteps: {Key: "weight-steps", Name: "Steps that bear weight", Variant: "%, one pelvic limb", Max: 100, Best: 100, Sites: pelvic,
		Reliability: "Wilson interval of the counted steps; at least 50 steps", Source: "OFS-page; interval Wilson 1927", Licence: journal},
	Stepping: {Key: "stepping", Name: "Stepping score", Variant: "%, pelvic against thoracic steps", Max: 100, Best: 100,
		Reliability: "three observers, high agreement (Olby2014)", Source: "Olby2014", Licence: "open access, Creative Commons attribution (from memory)"},
	Functional: {Key: "functional", Name: "Finnish neurological function testing battery", Variant: "11 tasks, 0–44", Max: 44, Best: 44,
		Reliability: "within rater 0.994–0.999, between raters 0.919–0.993 (FINFUN2018)", Source: "FINFUN2018", Licence: "open access, Creative Commons attribution (from memory)"},
	MRC: {Key: "mrc", Name: "Muscle strength (MRC)", Variant: "0–5, by hand", Max: 5, Best: 5, Sites: exam.Limbs(), Hand: true, Measure: exam.ScaleMRC,
		Levels:      []string{"no contraction", "flicker", "moves with gravity eliminated", "moves against gravity", "moves against some resistance", "normal"},
		Reliability: "no validation in dogs or cats was found", Source: "MRC1976, MRC-page", Licence: "Medical Research Council, with acknowledgement (from memory)"},
	Coma: {Key: "coma", Name: "Modified Glasgow coma scale", Variant: "3–18, by hand", Min: 3, Max: 18, Best: 18, Hand: true, Measure: exam.ScaleMGCS,
		Reliability: "none found; any fall is a red flag", Source: "Platt2001", Licence: journal},
	Spasticity: {Key: "spasticity", Name: "Canine spasticity scale", Variant: "0–18, by hand", Max: 18, Best: 0, Hand: true, Measure: exam.ScaleSpasticity,
		Reliability: "repeatable between raters, 20 dogs (Lewis2017, abstract)", Source: "Lewis2017", Licence: journal},
	Basso: {Key: "basso", Name: "Basso-type scale for dogs", Variant: "0–19, by hand", Max: 19, Best: 19, Hand: true, Measure: exam.ScaleCBBB,
		Reliability: "r = 0.94 with the open-field score (Song2016, abstract)", Source: "Song2016", Licence: "total only: terms of the descriptors not known"},
	FrankelEntered: {Key: "frankel-entered", Name: "Modified Frankel, entered by hand", Variant: "as entered", Max: 6, Best: 6, Hand: true, Measure: exam.ScaleFrankel,
		Reliability: "two raters agreed in 88 % (Levine2009, abstract)", Source: "Frankel-T1", Licence: journal},
	OpenFieldEntered: {Key: "open-field-entered", Name: "Open-field score, entered by hand", Variant: "as entered", Max: 14, Best: 14, Hand: true, Measure: exam.ScaleOpenField,
		Reliability: "more reliable than a visual analogue scale (Olby2001, abstract)", Source: "Olby2001", Licence: journal},
	TexasEntered: {Key: "texas-entered", Name: "Texas score, entered by hand", Variant: "as entered", Max: 40, Best: 40, Hand: true, Measure: exam.ScaleTexas,
		Reliability: "rank correlation between raters 0.99 (Levine2009, abstract)", Source: "Levine2009", Licence: journal},
	AshworthEntered: {Key: "ashworth-entered", Name: "Modified Ashworth, entered by hand", Variant: "ranks 0–5", Max: 5, Best: 0, Sites: exam.Limbs(), Hand: true, Measure: exam.ScaleAshworth,
		Levels: ashworthLevels, Reliability: "children: ICC 0.61–0.87 between raters (MASrel)", Source: "MAS-page, Bohannon1987", Licence: journal},
}

var ashworthLevels = []string{"no increase", "1: slight catch, or resistance at the end", "1+: catch, then slight resistance through less than half",
	"2: marked through most of the range, moves easily", "3: considerable, passive movement hard", "4: rigid"}

// Scales lists every scale.
func Scales() []Scale {
	out := make([]Scale, 0, scaleCount-1)
	for s := NoScale + 1; s < scaleCount; s++ {
		out = append(out, s)
	}
	return out
}

// Info returns the scale's description; the zero Info for no scale.
func (s Scale) Info() Info {
	if s < scaleCount {
		return infos[s]
	}
	return Info{}
}

// String returns the scale's key.
func (s Scale) String() string { return s.Info().Key }

// Parse is the inverse of String.
func Parse(key string) (Scale, error) {
	for s := NoScale + 1; s < scaleCount; s++ {
		if infos[s].Key == key {
			return s, nil
		}
	}
	return NoScale, &exam.Invalid{Field: "scale", Value: key, Allowed: "a scale such as frankel or open-field"}
}

// Value is a score of one visit.
type Value struct {
	Scale   Scale
	Site    exam.Site // of scales that belong to one limb
	Variant string
	Best    float64
	Levels  []float64 // the possible levels, ascending; one where it is certain; none where it cannot be scored
	Low     float64   // smallest and largest possible level (or the 95 % interval of a share)
	High    float64
	Missing []string // what would make it more certain, such as «deep-pain at tail-base»
	Problem string   // why it cannot be scored, in a sentence; empty where it can
	Entered bool     // by hand

	brief bool // only the levels are wanted, not what is missing
}

// Known returns the level and true where it is certain.
func (v Value) Known() (float64, bool) {
	if len(v.Levels) == 1 {
		return v.Levels[0], true
	}
	return 0, false
}

// String returns the level, or the range of levels: «4», «0–2», «not scored».
func (v Value) String() string {
	switch {
	case len(v.Levels) == 0:
		return "not scored"
	case v.Low == v.High || len(v.Levels) == 1:
		return fmt.Sprintf("%g", v.Levels[0])
	}
	return fmt.Sprintf("%g–%g", v.Low, v.High)
}

// Words says a certain level in words, empty for totals and ranges.
func (v Value) Words() string {
	level, ok := v.Known()
	in := v.Scale.Info()
	if i := int(level - in.Min); ok && i >= 0 && i < len(in.Levels) {
		return in.Levels[i]
	}
	return ""
}

// All returns every scale that the visit has something to say to, in the order of Scales,
// limb by limb where a scale belongs to limbs.
func All(v exam.Visit) []Value {
	var out []Value
	for _, s := range Scales() {
		sites := s.Info().Sites
		if len(sites) == 0 {
			sites = []exam.Site{exam.NoSite}
		}
		for _, site := range sites {
			if x, ok := Compute(s, v, site); ok {
				out = append(out, x)
			}
		}
	}
	return out
}

// Compute scores a visit on one scale, at a limb where the scale belongs to limbs. It returns
// false where nothing that the scale looks at was tested.
func Compute(s Scale, v exam.Visit, site exam.Site) (Value, bool) {
	return compute(Value{Scale: s, Site: site}, v)
}

// Range is Compute without the answer to what is missing, several times as fast: the lowest and
// the highest level that the visit may have, and false where it cannot be scored.
func Range(s Scale, v exam.Visit, site exam.Site) (low, high float64, ok bool) {
	x, ok := compute(Value{Scale: s, Site: site, brief: true}, v)
	return x.Low, x.High, ok && len(x.Levels) > 0
}

func compute(x Value, v exam.Visit) (Value, bool) {
	s, site := x.Scale, x.Site
	in := s.Info()
	x.Variant, x.Best = in.Variant, in.Best
	if len(in.Sites) > 0 && !slices.Contains(in.Sites, site) || len(in.Sites) == 0 && site != exam.NoSite {
		return Value{}, false
	}
	switch s {
	case Frankel, FrankelAllLimbs, FrankelB, FrankelC, FrankelD:
		return frankel(s, v, x)
	case OpenField:
		return openField(v, x)
	case TexasLimb:
		return texas(v, x, site)
	case TexasPelvic:
		return texas(v, x, pelvic...)
	case Texas:
		return texas(v, x, exam.Limbs()...)
	case Ashworth:
		return ashworth(v, x, site)
	case WeightSteps:
		return weightSteps(v, x, site)
	case Stepping:
		return stepping(v, x)
	case Functional:
		return functional(v, x)
	}
	if !in.Hand {
		return Value{}, false
	}
	m, ok := v.Measured(in.Measure, site)
	if !ok {
		return Value{}, false
	}
	x.Entered, x.Levels, x.Low, x.High = true, []float64{m.Value}, m.Value, m.Value
	if m.Variant != "" {
		x.Variant, x.Best = m.Variant, m.BestEnd
	}
	return x, true
}

// Change compares two values of one scale, variant and limb, the earlier first. It claims Better or
// Worse only when no level is possible at both times; Same is «no change shown». It is
// NotComparable across scales, variants, limbs or where one of them cannot be scored.
func Change(earlier, later Value) exam.Direction {
	if earlier.Scale != later.Scale || earlier.Variant != later.Variant || earlier.Site != later.Site || earlier.Best != later.Best ||
		len(earlier.Levels) == 0 || len(later.Levels) == 0 {
		return exam.NotComparable
	}
	up := later.Low > earlier.High
	down := later.High < earlier.Low
	bestIsHigh := later.Best > later.Scale.Info().Min
	switch {
	case up && bestIsHigh, down && !bestIsHigh:
		return exam.Better
	case up, down:
		return exam.Worse
	}
	return exam.Same
}

// question is one input of a score that may take several values as far as the exam tells.
type question struct {
	options []int
	missing []string // the items that would answer it
}

// certain is a question with one answer.
func certain(x int) question { return question{options: []int{x}} }

// ladder gathers the levels that may result from the answers that are possible, and which open
// questions matter. level asks for the answers it needs, by their place in qs.
func ladder(x Value, qs []question, level func(ask func(k int) int) (l float64, ok bool)) Value {
	ways(qs, func(ask func(k int) int) bool {
		if l, ok := level(ask); ok && !slices.Contains(x.Levels, l) {
			x.Levels = append(x.Levels, l)
		}
		return true
	})
	slices.Sort(x.Levels)
	if len(x.Levels) == 0 {
		return x
	}
	x.Low, x.High = x.Levels[0], x.Levels[len(x.Levels)-1]
	if len(x.Levels) == 1 || x.brief {
		return x
	}
	for k, q := range qs {
		if len(q.options) < 2 {
			continue
		}
		matters := false // whether another answer to it alone gives another level
		given := 0
		ways(qs, func(ask func(k int) int) bool {
			with := func(j int) int {
				if j == k {
					return given
				}
				return ask(j)
			}
			given = q.options[0]
			first, had := level(with)
			for _, given = range q.options[1:] {
				l, ok := level(with)
				matters = matters || l != first || ok != had
			}
			return !matters
		})
		if matters {
			for _, m := range q.missing {
				if !slices.Contains(x.Missing, m) {
					x.Missing = append(x.Missing, m)
				}
			}
		}
	}
	return x
}

// ways calls each once for every way through the open questions, until it returns false. It branches only at the questions that
// are asked: a score of ten questions asks three or four of them on its way to a level.
func ways(qs []question, each func(ask func(k int) int) bool) {
	var asked [16]struct{ question, option int } // the way taken; no score has more questions
	n, at := 0, 0
	ask := func(k int) int {
		if len(qs[k].options) == 1 {
			return qs[k].options[0]
		}
		for i := range at { // asked before on this way
			if asked[i].question == k {
				return qs[k].options[asked[i].option]
			}
		}
		if at == n {
			asked[n].question, asked[n].option = k, 0
			n++
		}
		at++
		return qs[k].options[asked[at-1].option]
	}
	for {
		at = 0
		if !each(ask) {
			return
		}
		for n > 0 && asked[n-1].option+1 == len(qs[asked[n-1].question].options) {
			n--
		}
		if n == 0 {
			return
		}
		asked[n-1].option++
	}
}

func at(i exam.Item, s exam.Site) string {
	if s == exam.Midline {
		return i.String()
	}
	return i.String() + " at " + s.String()
}

// feelSites are the places that decide on deep pain negative: both pelvic limbs and the tail base (Lewis2020).
func feelSites(limbs []exam.Site) []exam.Site {
	return append(slices.Clone(limbs), exam.TailBase)
}

// feeling asks whether depth or surface is felt anywhere: one answer is enough, absence needs all sites.
func feeling(v exam.Visit, item exam.Item, sites []exam.Site) (q question, tested bool) {
	var open []string
	yes := false
	for _, s := range sites {
		known, felt := false, false
		if item == exam.DeepPain {
			f := exam.Feeling(v, s)
			known, felt = f.Known, f.Grade >= 1
		} else if g, ok := bestGrade(v, item, s); ok {
			known, felt = true, g >= 1
		}
		tested = tested || known
		if !known {
			open = append(open, at(item, s))
		}
		yes = yes || felt
	}
	switch {
	case yes:
		return certain(1), true
	case len(open) == 0:
		return certain(0), true
	}
	return question{[]int{0, 1}, open}, tested
}

// bestGrade is the highest grade over digits: one answer is an answer.
func bestGrade(v exam.Visit, i exam.Item, s exam.Site) (int8, bool) {
	grade, ok := int8(-1), false
	for _, f := range v.Findings {
		if g, tested := f.Result.Grade(); tested && f.Item == i && f.Site == s {
			grade, ok = max(grade, g), true
		}
	}
	return grade, ok
}

// frankel scores the ladder of variant A and converts it.
func frankel(s Scale, v exam.Visit, x Value) (Value, bool) {
	limbs := pelvic
	if s == FrankelAllLimbs {
		limbs = exam.Limbs()
	}
	tested := false
	// 0 moves: any limb moves on purpose
	moves := question{options: []int{0, 1}}
	allKnown := true
	for _, l := range limbs {
		g, ok := v.Grade(exam.VoluntaryMotor, l)
		if !ok {
			allKnown = false
			moves.missing = append(moves.missing, at(exam.VoluntaryMotor, l))
			continue
		}
		tested = true
		if g > 0 {
			moves = certain(1)
			break
		}
	}
	if allKnown && len(moves.options) > 1 {
		moves = certain(0)
	}
	deep, t1 := feeling(v, exam.DeepPain, feelSites(limbs))
	surface, t2 := feeling(v, exam.SuperficialPain, feelSites(limbs))
	walks := question{[]int{0, 1}, []string{exam.Ambulation.String()}}
	if g, ok := v.Grade(exam.Ambulation, exam.Midline); ok {
		tested = true
		walks = certain(0)
		if g == 2 {
			walks = certain(1)
		}
	}
	// gait normal: voluntary motor 4, ataxia 0 and paw placement 2 in every limb of the ladder
	normal := question{options: []int{0, 1}}
	for _, l := range limbs {
		for _, n := range []struct {
			item exam.Item
			want int8
		}{{exam.VoluntaryMotor, 4}, {exam.Ataxia, 0}, {exam.PawPlacement, 2}} {
			g, ok := v.Grade(n.item, l)
			tested = tested || ok
			switch {
			case !ok:
				normal.missing = append(normal.missing, at(n.item, l))
			case g != n.want:
				normal.options = []int{0}
			}
		}
	}
	if len(normal.options) == 1 {
		normal = certain(0)
	} else if len(normal.missing) == 0 {
		normal = certain(1)
	}
	pain := question{options: []int{0, 1}}
	for _, site := range exam.SpinalPain.Info().Sites {
		g, ok := v.Grade(exam.SpinalPain, site)
		if !ok {
			pain.missing = append(pain.missing, at(exam.SpinalPain, site))
		} else if g > 0 {
			pain = certain(1)
			break
		}
	}
	if len(pain.options) > 1 && len(pain.missing) == 0 {
		pain = certain(0)
	}
	if !tested && !t1 && !t2 {
		return Value{}, false
	}
	// Depth absent where the surface is felt contradicts itself: test again, do not score.
	for _, site := range feelSites(limbs) {
		d, okD := bestGrade(v, exam.DeepPain, site)
		u, okU := bestGrade(v, exam.SuperficialPain, site)
		if okD && okU && d == 0 && u >= 1 && slices.Contains(moves.options, 0) {
			x.Problem = "deep-pain is absent where superficial-pain is felt, at " + site.String() + ": test both again"
			return x, true
		}
	}
	x = ladder(x, []question{moves, deep, surface, walks, normal, pain}, func(ask func(int) int) (float64, bool) {
		const moves, deep, surface, walks, normal, pain = 0, 1, 2, 3, 4, 5
		level := 0.0
		switch is := func(k int) bool { return ask(k) == 1 }; {
		case !is(moves) && is(surface):
			level = 2 // felt on the surface is felt deeply
		case !is(moves) && is(deep):
			level = 1
		case !is(moves):
			level = 0
		case !is(walks):
			level = 3
		case !is(normal):
			level = 4
		case is(pain):
			level = 5
		default:
			level = 6
		}
		return convertFrankel(s, level)
	})
	if len(x.Levels) == 0 {
		x.Problem = "nothing is wrong: this variant has no level for it"
	}
	return x, true
}

// convertFrankel turns a level of variant A into the scale's variant, false where that has none.
func convertFrankel(s Scale, a float64) (float64, bool) {
	switch s {
	case FrankelB:
		return min(a, 5), true
	case FrankelC, FrankelD:
		c := [...]float64{5, 4, 4, 3, 2, 1, 0}[int(a)]
		return c, c > 0
	}
	return a, true
}

// shares of steps, as classes.
const (
	none     = iota // 0
	under10         // more than 0, under 10 %
	to50            // 10–50 %
	over50          // over 50 %, not all
	allSteps        // 100 %
)

func weightClass(share float64) int {
	switch {
	case share <= 0:
		return none
	case share < 0.1:
		return under10
	case share <= 0.5:
		return to50
	case share < 1:
		return over50
	}
	return allSteps
}

// count returns two counts of steps as a share, and false where they are not both there or do not fit.
func count(v exam.Visit, part exam.Measure, site exam.Site) (share float64, of int, ok bool) {
	n, ok1 := v.Measured(exam.StepsScored, site)
	k, ok2 := v.Measured(part, site)
	if !ok1 || !ok2 || n.Value < 1 || k.Value > n.Value {
		return 0, 0, false
	}
	return k.Value / n.Value, int(n.Value), true
}

// openField scores Olby's ladder. Movement is that of the better pelvic limb; strength and ataxia are
// normal only where both limbs' are. In how many steps a limb that bears no weight is swung is read
// from ground-clearance (in most swings: at least half; else less), a choice.
func openField(v exam.Visit, x Value) (Value, bool) {
	tested := false
	moves := question{options: []int{0, 1}}
	strong := question{options: []int{0, 1}}
	ataxic := question{options: []int{0, 1}}
	allMotor, allStrong, allAtaxia := true, true, true
	var bear []question // of each limb
	for _, l := range pelvic {
		g, ok := v.Grade(exam.VoluntaryMotor, l)
		tested = tested || ok
		if !ok {
			allMotor, allStrong = false, false
			moves.missing = append(moves.missing, at(exam.VoluntaryMotor, l))
			strong.missing = append(strong.missing, at(exam.VoluntaryMotor, l))
		} else {
			if g > 0 {
				moves.options = []int{1}
			}
			if g < 4 {
				strong.options = []int{0}
			}
		}
		if a, ok := v.Grade(exam.Ataxia, l); !ok {
			allAtaxia = false
			ataxic.missing = append(ataxic.missing, at(exam.Ataxia, l))
		} else if a > 0 {
			ataxic.options = []int{1}
		}
		share, _, counted := count(v, exam.StepsWeightBearing, l)
		steps := []string{exam.StepsScored.String() + " and " + exam.StepsWeightBearing.String() + " at " + l.String()}
		switch {
		case ok && g <= 1:
			bear = append(bear, certain(none)) // bears no weight, by its grade
		case counted:
			bear = append(bear, certain(weightClass(share)))
		case ok && g == 4:
			bear = append(bear, certain(allSteps))
		case ok:
			bear = append(bear, question{[]int{under10, to50, over50, allSteps}, steps})
		default:
			bear = append(bear, question{[]int{none, under10, to50, over50, allSteps}, append([]string{at(exam.VoluntaryMotor, l)}, steps...)})
		}
	}
	settle := func(q *question, all bool, otherwise int) {
		if len(q.options) == 1 {
			q.missing = nil
		} else if all {
			*q = certain(otherwise)
		}
	}
	settle(&moves, allMotor, 0)
	settle(&strong, allStrong, 1)
	settle(&ataxic, allAtaxia, 0)
	deep, t1 := feeling(v, exam.DeepPain, feelSites(pelvic))
	tail := question{[]int{0, 1}, []string{exam.TailMovement.String()}}
	if g, ok := v.Grade(exam.TailMovement, exam.Midline); ok {
		tail = certain(int(g))
	}
	joints := question{[]int{1, 2}, []string{exam.JointsMoving.String() + " of a pelvic limb"}}
	swing := question{[]int{0, 1}, []string{exam.GroundClearance.String() + " of a pelvic limb"}}
	mistakes := question{[]int{0, 1, 2}, []string{exam.StepsScored.String() + " and " + exam.StepsWithMistake.String() + " of a pelvic limb"}}
	bestMistakes := math.Inf(1)
	most := -1.0
	swings := int8(-1)
	for _, l := range pelvic {
		if m, ok := v.Measured(exam.JointsMoving, l); ok {
			most = max(most, m.Value)
		}
		if g, ok := v.Grade(exam.GroundClearance, l); ok && g <= 2 {
			swings = max(swings, g)
		}
		if share, _, ok := count(v, exam.StepsWithMistake, l); ok {
			bestMistakes = min(bestMistakes, share)
		}
	}
	if most >= 1 {
		joints = certain(min(int(most), 2))
	}
	if swings >= 0 {
		swing = certain(0)
		if swings == 2 {
			swing = certain(1)
		}
	}
	if !math.IsInf(bestMistakes, 1) {
		switch {
		case bestMistakes > 0.9:
			mistakes = certain(2)
		case bestMistakes >= 0.5:
			mistakes = certain(1)
		default:
			mistakes = certain(0)
		}
	}
	if !tested && !t1 {
		return Value{}, false
	}
	x = ladder(x, []question{moves, strong, ataxic, bear[0], bear[1], deep, tail, joints, swing, mistakes}, func(ask func(int) int) (float64, bool) {
		const moves, strong, ataxic, left, right, deep, tail, joints, swing, mistakes = 0, 1, 2, 3, 4, 5, 6, 7, 8, 9
		if ask(moves) == 0 {
			switch {
			case ask(tail) == 1:
				return 2, true
			case ask(deep) == 1:
				return 1, true
			}
			return 0, true
		}
		switch bears := max(ask(left), ask(right)); {
		case bears == none && ask(joints) < 2:
			return 3, true
		case bears == none:
			return 4 + float64(ask(swing)), true
		case bears < allSteps:
			return 5 + float64(bears), true // 6, 7, 8
		case ask(strong) == 0:
			return 11 - float64(ask(mistakes)), true
		case ask(ataxic) == 1 && ask(mistakes) >= 1:
			return 12, true
		case ask(ataxic) == 1:
			return 13, true
		}
		return 14, true
	})
	return x, true
}

// texas adds up the limbs: gait 0–6, positioning 0–2, nociception 0–2 each. A limb of normal strength
// is graded by its ataxia although the animal does not walk: the thoracic limbs of a paraplegic animal.
func texas(v exam.Visit, x Value, limbs ...exam.Site) (Value, bool) {
	tested := false
	sets := [][]float64{}
	for _, l := range limbs {
		one, ok := texasLimb(v, l)
		tested = tested || ok
		sets = append(sets, one.Levels)
		x.Missing = append(x.Missing, one.Missing...)
	}
	if !tested {
		return Value{}, false
	}
	sums := []float64{0}
	for _, s := range sets {
		var next []float64
		for _, a := range sums {
			for _, b := range s {
				if !slices.Contains(next, a+b) {
					next = append(next, a+b)
				}
			}
		}
		sums = next
	}
	slices.Sort(sums)
	x.Missing = dedupe(x.Missing)
	x.Levels, x.Low, x.High = sums, sums[0], sums[len(sums)-1]
	return x, true
}

func dedupe(in []string) (out []string) {
	for _, s := range in {
		if !slices.Contains(out, s) {
			out = append(out, s)
		}
	}
	return out
}

func texasLimb(v exam.Visit, l exam.Site) (Value, bool) {
	tested := false
	ask := func(i exam.Item, s exam.Site, last int) question {
		g, ok := v.Grade(i, s)
		if ok {
			tested = true
			return certain(int(g))
		}
		q := question{missing: []string{at(i, s)}}
		for k := 0; k <= last; k++ {
			q.options = append(q.options, k)
		}
		return q
	}
	motor := ask(exam.VoluntaryMotor, l, 4)
	walks := ask(exam.Ambulation, exam.Midline, 2)
	ataxia := ask(exam.Ataxia, l, 3)
	clears := ask(exam.GroundClearance, l, 3)
	paw := ask(exam.PawPlacement, l, 2)
	deep, t1 := feeling(v, exam.DeepPain, []exam.Site{l})
	surface, t2 := feeling(v, exam.SuperficialPain, []exam.Site{l})
	x := ladder(Value{}, []question{motor, walks, ataxia, clears, paw, deep, surface}, func(ask func(int) int) (float64, bool) {
		const motor, walks, ataxia, clears, paw, deep, surface = 0, 1, 2, 3, 4, 5, 6
		gait := 0
		switch strength := ask(motor); {
		case strength == 0:
		case strength == 1 && ask(walks) < 2:
			gait = min(ask(clears), 2) + 1 // paw clears the ground: never 1, now and then 2, in most swings 3
		case strength < 4 && ask(walks) < 2:
			gait = 3 // it bears weight, and the animal does not walk alone
		default:
			// the worse of paresis (grade 3 is mild) and ataxia
			worst := max(ask(ataxia), 4-strength)
			switch {
			case worst >= 2:
				gait = 4
			case worst == 1:
				gait = 5
			default:
				gait = 6
			}
		}
		feels := 0
		switch {
		case ask(surface) == 1:
			feels = 2
		case ask(deep) == 1:
			feels = 1
		}
		return float64(gait + ask(paw) + feels), true
	})
	return x, tested || t1 || t2
}

// ashworth reads tone: it rates an increase only.
func ashworth(v exam.Visit, x Value, l exam.Site) (Value, bool) {
	g, ok := v.Grade(exam.Tone, l)
	if !ok {
		return Value{}, false
	}
	switch {
	case g < 2:
		x.Problem = "tone is below normal: this scale rates an increase only"
		return x, true
	case g == 2:
		x.Levels = []float64{0}
	case g == 3:
		x.Levels = []float64{1, 2, 3, 4}
		x.Missing = []string{exam.ScaleAshworth.String() + " at " + l.String() + ", by hand"}
	default:
		x.Levels = []float64{5}
	}
	x.Low, x.High = x.Levels[0], x.Levels[len(x.Levels)-1]
	return x, true
}

// weightSteps is the share of steps that bear weight, with its 95 % Wilson interval as the range.
func weightSteps(v exam.Visit, x Value, l exam.Site) (Value, bool) {
	share, n, ok := count(v, exam.StepsWeightBearing, l)
	if !ok {
		return Value{}, false
	}
	i := stat.Wilson(int(math.Round(share*float64(n))), n)
	x.Levels, x.Low, x.High = []float64{100 * share}, 100*i.Low, 100*i.High
	if n < 50 {
		x.Missing = []string{fmt.Sprintf("more steps: %d counted, 50 wanted", n)}
	}
	return x, true
}

// stepping is pelvic-limb steps per 100 thoracic-limb steps; a step of a pelvic limb is one that bears weight.
func stepping(v exam.Visit, x Value) (Value, bool) {
	var hind, fore float64
	var missing []string
	for _, l := range pelvic {
		m, ok := v.Measured(exam.StepsWeightBearing, l)
		if !ok {
			missing = append(missing, exam.StepsWeightBearing.String()+" at "+l.String())
		}
		hind += m.Value
	}
	for _, l := range []exam.Site{exam.ThoracicLeft, exam.ThoracicRight} {
		m, ok := v.Measured(exam.StepsScored, l)
		if !ok {
			missing = append(missing, exam.StepsScored.String()+" at "+l.String())
		}
		fore += m.Value
	}
	if len(missing) == 4 {
		return Value{}, false
	}
	if len(missing) > 0 || fore == 0 {
		x.Problem, x.Missing = "steps of all four limbs are needed: "+strings.Join(missing, ", "), missing
		if len(missing) == 0 {
			x.Problem = "no steps of the thoracic limbs were counted"
		}
		return x, true
	}
	s := min(100*hind/fore, 100)
	x.Levels, x.Low, x.High = []float64{s}, s, s
	return x, true
}

// functional adds up the tasks; a task not done may be anything from 0 to 4.
func functional(v exam.Visit, x Value) (Value, bool) {
	sum, open := 0.0, 0
	for m := exam.TaskLying; m <= exam.TaskStairs; m++ {
		if t, ok := v.Measured(m, exam.NoSite); ok {
			sum += t.Value
		} else {
			open++
			x.Missing = append(x.Missing, m.String())
		}
	}
	if open == int(exam.TaskStairs-exam.TaskLying)+1 {
		return Value{}, false
	}
	for k := 0; k <= 4*open; k++ {
		x.Levels = append(x.Levels, sum+float64(k))
	}
	x.Low, x.High = sum, sum+4*float64(open)
	return x, true
}
