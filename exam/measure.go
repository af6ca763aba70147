package exam

import (
	"math"
	"strconv"
	"strings"
)

// Measure is a kind of measured value with one fixed unit. The zero Measure is none.
type Measure uint8

// MeasureInfo describes a measure: its name and unit in exam files, the sites it takes
// (empty: none), and the range that is believed. Ranges are wide on purpose: they
// catch slips of the key, they are no reference ranges (common practice).
type MeasureInfo struct {
	Name     string
	Unit     string
	Sites    []Site
	Min, Max float64
	Whole    bool // whole numbers only
}

// The measures, in the order of the vocabulary.
const (
	NoMeasure Measure = iota
	Weight
	Temperature
	RespiratoryRate
	HeartRate
	BodyCondition
	HoursSinceUrination
	ResidualVolume
	ThighGirth
	BrachiumGirth
	AntebrachiumGirth
	CrusGirth
	RangeOfMotion
	WeightBearing
	StandTime
	WalkDistance
	WalkTime
	StepsScored
	StepsWeightBearing
	StepsWithMistake
	JointsMoving
	ClonusTime
	SpasmTime
	PainAtRest
	PainOnMovement
	TaskLying
	TaskStandFromLying
	TaskSitting
	TaskStandFromSitting
	TaskStanding
	TaskPositioning
	TaskStartWalking
	TaskWalking
	TaskTrotting
	TaskTurning
	TaskStairs
	ScaleMRC
	ScaleMGCS
	ScaleSpasticity
	ScaleCBBB
	ScaleFrankel
	ScaleOpenField
	ScaleTexas
	ScaleAshworth
	measureCount
)

// The functional tasks are those of the Finnish neurological function testing battery for
// dogs (FINFUN-2018), each 0 cannot to 4 normal.
var measureTable = [measureCount]MeasureInfo{
	Weight:               {"weight", "kg", nil, 0.05, 1200, false},
	Temperature:          {"temperature", "°C", nil, 25, 45, false},
	RespiratoryRate:      {"respiratory-rate", "/min", nil, 1, 300, true},
	HeartRate:            {"heart-rate", "/min", nil, 10, 400, true},
	BodyCondition:        {"body-condition", "1", nil, 1, 9, true},
	HoursSinceUrination:  {"hours-since-urination", "h", nil, 0, 240, false},
	ResidualVolume:       {"residual-volume", "mL/kg", nil, 0, 100, false},
	ThighGirth:           {"thigh-girth", "cm", pairedSites, 1, 150, false},
	BrachiumGirth:        {"brachium-girth", "cm", pairedSites, 1, 150, false},
	AntebrachiumGirth:    {"antebrachium-girth", "cm", pairedSites, 1, 100, false},
	CrusGirth:            {"crus-girth", "cm", pairedSites, 1, 100, false},
	RangeOfMotion:        {"range-of-motion", "°", pairedSites, 0, 260, false},
	WeightBearing:        {"weight-bearing", "%", limbSites, 0, 100, false},
	StandTime:            {"stand-time", "s", nil, 0, 7200, false},
	WalkDistance:         {"walk-distance", "m", nil, 0, 20000, false},
	WalkTime:             {"walk-time", "s", nil, 0, 36000, false},
	StepsScored:          {"steps-scored", "1", limbSites, 0, 2000, true},
	StepsWeightBearing:   {"steps-weight-bearing", "1", limbSites, 0, 2000, true},
	StepsWithMistake:     {"steps-with-mistake", "1", limbSites, 0, 2000, true},
	JointsMoving:         {"joints-moving", "1", limbSites, 0, 3, true},
	ClonusTime:           {"clonus", "s", limbSites, 0, 600, false},
	SpasmTime:            {"spasm", "s", limbSites, 0, 600, false},
	PainAtRest:           {"pain-at-rest", "1", nil, 0, 10, true},
	PainOnMovement:       {"pain-on-movement", "1", nil, 0, 10, true},
	TaskLying:            {"task-lying", "1", nil, 0, 4, true},
	TaskStandFromLying:   {"task-stand-from-lying", "1", nil, 0, 4, true},
	TaskSitting:          {"task-sitting", "1", nil, 0, 4, true},
	TaskStandFromSitting: {"task-stand-from-sitting", "1", nil, 0, 4, true},
	TaskStanding:         {"task-standing", "1", nil, 0, 4, true},
	TaskPositioning:      {"task-positioning", "1", nil, 0, 4, true},
	TaskStartWalking:     {"task-start-walking", "1", nil, 0, 4, true},
	TaskWalking:          {"task-walking", "1", nil, 0, 4, true},
	TaskTrotting:         {"task-trotting", "1", nil, 0, 4, true},
	TaskTurning:          {"task-turning", "1", nil, 0, 4, true},
	TaskStairs:           {"task-stairs", "1", nil, 0, 4, true},
	ScaleMRC:             {"scale-mrc", "1", limbSites, 0, 5, true},
	ScaleMGCS:            {"scale-mgcs", "1", nil, 3, 18, true},
	ScaleSpasticity:      {"scale-spasticity", "1", nil, 0, 18, true},
	ScaleCBBB:            {"scale-cbbb", "1", nil, 0, 19, true},
	ScaleFrankel:         {"scale-frankel", "1", nil, 0, 6, true},
	ScaleOpenField:       {"scale-open-field", "1", nil, 0, 14, true},
	ScaleTexas:           {"scale-texas", "1", nil, 0, 40, true},
	ScaleAshworth:        {"scale-ashworth", "1", limbSites, 0, 5, true},
}

// Measures lists every measure in the order of the vocabulary.
func Measures() []Measure {
	out := make([]Measure, 0, measureCount-1)
	for m := NoMeasure + 1; m < measureCount; m++ {
		out = append(out, m)
	}
	return out
}

// Info returns the measure's description. The slices in it are shared: do not change them.
func (m Measure) Info() MeasureInfo {
	if m < measureCount {
		return measureTable[m]
	}
	return MeasureInfo{}
}

// String returns the measure's name in exam files.
func (m Measure) String() string { return m.Info().Name }

// ParseMeasure is the inverse of String. It refuses unknown words.
func ParseMeasure(word string) (Measure, error) {
	for m := NoMeasure + 1; m < measureCount; m++ {
		if measureTable[m].Name == word {
			return m, nil
		}
	}
	return NoMeasure, &Invalid{"measure", word, "a measure of the vocabulary, such as weight or thigh-girth"}
}

// Measured is one measured value with how it was taken. Readings are compared only
// within one examiner, method, site and place.
type Measured struct {
	Measure  Measure
	Site     Site
	Joint    Joint   // range of motion
	Motion   string  // range of motion: "flexion" or "extension"
	Value    float64 // in the measure's unit
	At       float64 // girth: distance along the bone in %, 0 where not said
	Position string  // how the animal lay or stood
	Clipped  bool    // the coat was clipped
	EndFeel  string  // range of motion: "soft", "firm", "hard", "empty"
	Variant  string  // scales: which version of the scale
	BestEnd  float64 // scales: the value that is best
	Note     string
}

// Key returns the cell that the value fills: measure, site, joint, motion and place.
func (m Measured) Key() string {
	parts := []string{m.Measure.String(), m.Site.String()}
	if m.Joint != NoJoint {
		parts = append(parts, m.Joint.String())
	}
	if m.Motion != "" {
		parts = append(parts, m.Motion)
	}
	if m.At != 0 {
		parts = append(parts, strconv.FormatFloat(m.At, 'g', -1, 64))
	}
	return strings.Join(parts, "/")
}

// Validate checks the value against the measure's site, range and wholeness.
func (m Measured) Validate() error {
	in := m.Measure.Info()
	if in.Name == "" {
		return &Invalid{"measure", strconv.Itoa(int(m.Measure)), "a measure of the vocabulary"}
	}
	if len(in.Sites) > 0 {
		ok := false
		names := make([]string, len(in.Sites))
		for i, s := range in.Sites {
			ok = ok || s == m.Site
			names[i] = s.String()
		}
		if !ok {
			return &Invalid{"site of " + in.Name, m.Site.String(), strings.Join(names, ", ")}
		}
	} else if m.Site != NoSite && m.Site != Midline {
		return &Invalid{"site of " + in.Name, m.Site.String(), "no site: this measure takes none"}
	}
	value := strconv.FormatFloat(m.Value, 'g', -1, 64)
	allowed := strconv.FormatFloat(in.Min, 'g', -1, 64) + " to " + strconv.FormatFloat(in.Max, 'g', -1, 64) + " " + in.Unit
	if math.IsNaN(m.Value) || m.Value < in.Min || m.Value > in.Max {
		return &Invalid{"value of " + in.Name, value, allowed}
	}
	if in.Whole && m.Value != math.Trunc(m.Value) {
		return &Invalid{"value of " + in.Name, value, "a whole number, " + allowed}
	}
	if math.IsNaN(m.At) || m.At < 0 || m.At > 100 {
		return &Invalid{"place of " + in.Name, strconv.FormatFloat(m.At, 'g', -1, 64), "0 to 100 % along the bone"}
	}
	switch m.Motion {
	case "", "flexion", "extension":
	default:
		return &Invalid{"motion of " + in.Name, m.Motion, "flexion or extension"}
	}
	if m.Measure == RangeOfMotion && m.Joint == NoJoint {
		return &Invalid{"joint of " + in.Name, "", "shoulder, elbow, carpus, hip, stifle, hock or digits"}
	}
	if m.Measure == RangeOfMotion && m.Motion == "" {
		return &Invalid{"motion of " + in.Name, "", "flexion or extension"}
	}
	if math.IsNaN(m.BestEnd) || math.IsInf(m.BestEnd, 0) {
		return &Invalid{"best end of " + in.Name, strconv.FormatFloat(m.BestEnd, 'g', -1, 64), "a number"}
	}
	return nil
}
