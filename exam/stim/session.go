package stim

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"cordwalk.example/cordwalk/exam"
)

func number(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }

// Reading is the threshold at one pulse width, as often as it was taken.
type Reading struct {
	Width    float64   `json:"width_ms"`
	Currents []float64 `json:"currents_ma"`
}

// Test is one strength–duration test of a muscle.
type Test struct {
	ID        exam.ID   `json:"id"`
	Muscle    string    `json:"muscle"` // name of the muscle, as the therapist writes it
	Site      string    `json:"site"`   // limb or side
	Readings  []Reading `json:"readings"`
	Law       string    `json:"law,omitempty"`       // the law its chronaxie was shown with
	Electrode string    `json:"electrode,omitempty"` // size and kind of the cathode
	Point     string    `json:"point,omitempty"`     // where on the muscle
	Clipped   bool      `json:"clipped,omitempty"`
	Voltage   bool      `json:"voltage,omitempty"` // constant voltage: chronaxie comes out 30–40 % shorter (Chronaxie-calc, secondary)
	Examiner  string    `json:"examiner,omitempty"`
	Note      string    `json:"note,omitempty"`
}

// Points returns the mean threshold at each pulse width.
func (t Test) Points() []Point {
	var out []Point
	for _, r := range t.Readings {
		if len(r.Currents) == 0 {
			continue
		}
		sum := 0.0
		for _, c := range r.Currents {
			sum += c
		}
		out = append(out, Point{r.Width, sum / float64(len(r.Currents))})
	}
	return out
}

// Validate checks site, law and that every reading is positive and finite.
func (t Test) Validate() error {
	if strings.TrimSpace(t.Muscle) == "" {
		return &exam.Invalid{Field: "muscle", Value: t.Muscle, Allowed: "the name of a muscle"}
	}
	if _, err := exam.ParseSite(t.Site); err != nil {
		return err
	}
	if t.Law != "" {
		if _, err := ParseLaw(t.Law); err != nil {
			return err
		}
	}
	for _, r := range t.Readings {
		if !(r.Width > 0) || math.IsInf(r.Width, 0) {
			return &exam.Invalid{Field: "pulse width", Value: number(r.Width), Allowed: "more than 0 ms"}
		}
		for _, c := range r.Currents {
			if !(c > 0) || math.IsInf(c, 0) {
				return &exam.Invalid{Field: "current at " + number(r.Width) + " ms", Value: number(c), Allowed: "more than 0 mA"}
			}
		}
	}
	return nil
}

// Aim is what a session of stimulation is for.
type Aim struct {
	Key    string
	Name   string
	Kind   string // the treatment it counts as: a key of the treatment table
	Source string
	// Guidance from the literature; 0 to 0 where none was found.
	FrequencyLow, FrequencyHigh float64 // Hz
	PulseLow, PulseHigh         float64 // µs
	RatioLow, RatioHigh         float64 // rest over work: 3 for 1:3
	RampLow, RampHigh           float64 // s
	MinutesLow, MinutesHigh     float64
	WeekLow, WeekHigh           float64 // sessions a week
	Note                        string
}

// Aims lists the aims with their ranges.
func Aims() []Aim {
	return []Aim{
		{Key: "strengthen", Name: "Strengthen a muscle that has its nerve", Kind: "nmes", FrequencyLow: 25, FrequencyHigh: 50, PulseLow: 100, PulseHigh: 400,
			RatioLow: 3, RatioHigh: 5, RampLow: 2, RampHigh: 4, MinutesLow: 10, MinutesHigh: 20, WeekLow: 3, WeekHigh: 7,
			Note: "strong, visible contraction; longer rest for a weaker muscle", Source: "CSMR-NMES citing Millis 1997; ramp from memory; minutes common practice"},
		{Key: "acute", Name: "Early after loss of use", Kind: "nmes", FrequencyLow: 25, FrequencyHigh: 50, PulseLow: 100, PulseHigh: 400,
			RatioLow: 3, RatioHigh: 5, RampLow: 2, RampHigh: 4, MinutesLow: 15, MinutesHigh: 15, WeekLow: 7, WeekHigh: 14, Note: "once or twice a day", Source: "Levine2014 through NMES-summary"},
		{Key: "chronic", Name: "Long-standing weakness", Kind: "nmes", FrequencyLow: 25, FrequencyHigh: 50, PulseLow: 100, PulseHigh: 400,
			RatioLow: 3, RatioHigh: 5, RampLow: 2, RampHigh: 4, MinutesLow: 30, MinutesHigh: 30, WeekLow: 2, WeekHigh: 3, Note: "about five weeks", Source: "Levine2014 through NMES-summary"},
		{Key: "pain", Name: "Relieve pain (TENS)", Kind: "tens", FrequencyLow: 30, FrequencyHigh: 150, PulseLow: 50, PulseHigh: 100,
			Note: "felt, no contraction", Source: "CSMR-NMES citing Nolan 2005"},
		{Key: "denervated", Name: "Muscle that has lost its nerve", Kind: "nmes", PulseLow: 10_000, PulseHigh: 300_000,
			Note: "long pulses, low rate; specialist use", Source: "Pieber2015 (people)"},
	}
}

// AimByKey returns an aim, and false for an unknown key.
func AimByKey(key string) (Aim, bool) {
	for _, a := range Aims() {
		if a.Key == key {
			return a, true
		}
	}
	return Aim{}, false
}

// Session is one entry of the stimulation log.
type Session struct {
	ID         exam.ID `json:"id"`
	Aim        string  `json:"aim"`
	Site       string  `json:"site"`   // limb, side or part of the spine
	Muscle     string  `json:"muscle"` // as the therapist writes it
	Electrodes string  `json:"electrodes,omitempty"`
	Waveform   string  `json:"waveform,omitempty"`
	Frequency  float64 `json:"frequency_hz,omitempty"`
	Pulse      float64 `json:"pulse_us,omitempty"`
	On         float64 `json:"on_s,omitempty"`
	Off        float64 `json:"off_s,omitempty"`
	Ramp       float64 `json:"ramp_s,omitempty"`
	Minutes    float64 `json:"minutes,omitempty"`
	Amplitude  float64 `json:"amplitude_ma,omitempty"`
	SkinBefore string  `json:"skin_before,omitempty"`
	SkinAfter  string  `json:"skin_after,omitempty"`
	Confirmed  string  `json:"confirmed,omitempty"` // why it was done although something speaks against it
	Note       string  `json:"note,omitempty"`
}

// SkinWords lists what the skin under the electrodes may look like.
func SkinWords() []string { return []string{"sound", "pink for minutes", "red for an hour", "sore"} }

// WaveformWords lists the waveforms.
func WaveformWords() []string {
	return []string{"biphasic symmetric", "biphasic asymmetric", "monophasic", "triangular", "Russian"}
}

// Validate checks aim, site and that no figure is negative or beyond what any stimulator gives.
func (s Session) Validate() error {
	if _, ok := AimByKey(s.Aim); !ok {
		return &exam.Invalid{Field: "aim", Value: s.Aim, Allowed: "strengthen, acute, chronic, pain or denervated"}
	}
	if _, err := exam.ParseSite(s.Site); err != nil {
		return err
	}
	for _, x := range []struct {
		name  string
		value float64
		most  float64
		unit  string
	}{{"frequency", s.Frequency, 10_000, "Hz"}, {"pulse width", s.Pulse, 1_000_000, "µs"}, {"on time", s.On, 600, "s"}, {"off time", s.Off, 600, "s"},
		{"ramp", s.Ramp, 60, "s"}, {"duration", s.Minutes, 240, "min"}, {"amplitude", s.Amplitude, 500, "mA"}} {
		if !(x.value >= 0 && x.value <= x.most) {
			return &exam.Invalid{Field: x.name, Value: number(x.value), Allowed: "0 to " + number(x.most) + " " + x.unit}
		}
	}
	for _, skin := range []string{s.SkinBefore, s.SkinAfter} {
		if skin != "" && !slices.Contains(SkinWords(), skin) {
			return &exam.Invalid{Field: "skin under the electrodes", Value: skin, Allowed: strings.Join(SkinWords(), ", ")}
		}
	}
	return nil
}

// Remark is a figure of a session that lies outside the range of its aim.
type Remark struct {
	Name      string // "frequency", …
	Value     float64
	Low, High float64
	Unit      string
	Source    string
}

// Outside compares a session with the ranges of its aim. A figure that is 0 is «not said». The ranges are
// guidance; none forbids.
func (s Session) Outside() []Remark {
	a, ok := AimByKey(s.Aim)
	if !ok {
		return nil
	}
	var out []Remark
	check := func(name string, v, low, high float64, unit string) {
		if v > 0 && high > 0 && (v < low || v > high) {
			out = append(out, Remark{name, v, low, high, unit, a.Source})
		}
	}
	check("frequency", s.Frequency, a.FrequencyLow, a.FrequencyHigh, "Hz")
	check("pulse width", s.Pulse, a.PulseLow, a.PulseHigh, "µs")
	check("ramp", s.Ramp, a.RampLow, a.RampHigh, "s")
	check("duration", s.Minutes, a.MinutesLow, a.MinutesHigh, "min")
	if s.On > 0 && s.Off > 0 {
		check("rest for each second of work", s.Off/s.On, a.RatioLow, a.RatioHigh, "s")
	}
	return out
}

// soreSkin is what is said of skin that a session left sore.
const soreSkin = "the skin is sore after the session: rest it, larger electrodes or more gel, and tell the veterinarian if it is not gone tomorrow"

// SkinRemark says what to do about the skin after the session; empty where there is nothing to say.
func (s Session) SkinRemark() string {
	if s.SkinAfter == "sore" {
		return soreSkin
	}
	return ""
}

// Remarks says in English what Outside and SkinRemark find.
func (s Session) Remarks() []string {
	var out []string
	for _, r := range s.Outside() {
		out = append(out, fmt.Sprintf("%s %s %s: the literature says %s to %s %s (%s)", r.Name, number(r.Value), r.Unit, number(r.Low), number(r.High), r.Unit, r.Source))
	}
	if w := s.SkinRemark(); w != "" {
		out = append(out, w)
	}
	return out
}

// Terms lists the texts of this package that people read, for the catalogue.
func Terms() []string {
	out := append(SkinWords(), WaveformWords()...)
	for _, a := range Aims() {
		out = append(out, a.Name, a.Note)
	}
	for _, q := range Questions() {
		out = append(out, q.Words)
	}
	for l := Uncertain; l <= MuscleLike; l++ {
		out = append(out, l.String())
	}
	return append(out, "frequency", "pulse width", "ramp", "duration", "rest for each second of work", soreSkin, fewWidths, narrowWidths, wideCharge, notFalling,
		"keep current away from the heart", "keep current away from the front of the neck")
}

// Question is asked before the first session of an animal.
type Question struct {
	Key    string
	Words  string
	Stop   bool // a yes forbids stimulation; else it needs thought and a reason
	Source string
}

// Questions lists what is asked before the first session.
func Questions() []Question {
	const nmes = "CSMR-NMES, NMES-summary"
	return []Question{
		{"pacemaker", "Does it carry a pacemaker?", true, nmes},
		{"seizures", "Has it ever had a seizure?", true, nmes},
		{"pregnant", "Is it pregnant?", true, "NMES-summary: trunk; any site common practice"},
		{"tumour", "Is a tumour known or suspected at or near the place?", true, "from memory"},
		{"infection", "Is the tissue there infected?", true, nmes},
		{"heart", "Would current pass over the heart?", true, nmes},
		{"neck", "Would current pass over the front of the neck?", true, "from memory: carotid sinus"},
		{"thrombosis", "Is a clot known or suspected?", true, "from memory"},
		{"fracture", "Is there a fresh fracture there?", true, "from memory"},
		{"skin", "Is the skin there broken or irritated?", false, nmes},
		{"numb", "Is feeling there reduced, or not tested?", false, nmes},
		{"bone", "Is the bone there weak?", false, "CSMR-NMES"},
		{"fresh-surgery", "Was it operated there in the last two weeks, or is the spine unstable, without the surgeon's consent?", false, "common practice"},
		{"nervous", "Is it nervous or in pain when touched there?", false, "common practice"},
	}
}

// Consent is the answers to Questions before the first session.
type Consent struct {
	Answers  map[string]bool   `json:"answers"`           // question key → yes
	Reasons  map[string]string `json:"reasons,omitempty"` // question key → why it is done all the same
	Examiner string            `json:"examiner"`
	At       exam.Date         `json:"at"`
}

// Missing returns the questions that have no answer yet, or a yes that needs a reason and has none.
func (c Consent) Missing() []Question {
	var out []Question
	for _, q := range Questions() {
		yes, answered := c.Answers[q.Key]
		if !answered || yes && !q.Stop && strings.TrimSpace(c.Reasons[q.Key]) == "" {
			out = append(out, q)
		}
	}
	return out
}

// Forbidden returns the questions whose yes forbids stimulation.
func (c Consent) Forbidden() []Question {
	var out []Question
	for _, q := range Questions() {
		if q.Stop && c.Answers[q.Key] {
			out = append(out, q)
		}
	}
	return out
}

// Check returns what speaks against a session: what the treatment table finds in precautions and
// findings (numb or broken skin at the site, seizures …), and the places themselves, the heart and the
// front of the neck. Empty means that nothing on record speaks against it. Stops forbid; the rest needs a
// confirmed reason.
func Check(p exam.Patient, s Session, today exam.Visit, earlier ...exam.Visit) []exam.Objection {
	kind := "nmes"
	if a, ok := AimByKey(s.Aim); ok {
		kind = a.Kind
	}
	out := exam.CheckTreatment(p, exam.Treatment{Kind: kind, Site: s.Site}, today, earlier...)
	place := func(why string, stop bool, source string) {
		out = append(out, exam.Objection{Stop: stop, Why: why, Source: source})
	}
	switch site, _ := exam.ParseSite(s.Site); site {
	case exam.CranialThoracic, exam.Trunk:
		place("keep current away from the heart", false, "CSMR-NMES, NMES-summary")
	case exam.Cervical:
		place("keep current away from the front of the neck", false, "from memory: carotid sinus")
	}
	slices.SortStableFunc(out, func(a, b exam.Objection) int {
		if a.Stop != b.Stop {
			if a.Stop {
				return -1
			}
			return 1
		}
		return 0
	})
	return out
}
