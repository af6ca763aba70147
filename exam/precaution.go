package exam

import "strings"

// Precaution is a coded reason to leave tests or positions alone.
type Precaution uint8

// The precautions.
const (
	NoPrecaution Precaution = iota
	UnstableSpine
	UnstableNeck
	Implant
	Fracture
	NonWeightBearing
	Breathless
	Bites
	Seizures
	RestUntil
	OpenWound
	Pregnant
	Pacemaker
	Tumour
	precautionCount
)

var precautionNames = [precautionCount]string{"", "unstable-spine", "unstable-neck", "implant", "fracture",
	"non-weight-bearing", "breathless", "bites", "seizures", "rest-until", "open-wound", "pregnant", "pacemaker", "tumour"}

// Precautions lists every precaution.
func Precautions() []Precaution {
	out := make([]Precaution, 0, precautionCount-1)
	for p := NoPrecaution + 1; p < precautionCount; p++ {
		out = append(out, p)
	}
	return out
}

// String returns the precaution's code.
func (p Precaution) String() string {
	if p < precautionCount {
		return precautionNames[p]
	}
	return "unknown"
}

// ParsePrecaution is the inverse of String.
func ParsePrecaution(word string) (Precaution, error) {
	for i, n := range precautionNames {
		if i > 0 && n == word {
			return Precaution(i), nil
		}
	}
	return 0, &Invalid{"precaution", word, strings.Join(precautionNames[1:], ", ")}
}

// PrecautionOn is a precaution that holds for a patient, at a site where it has one.
type PrecautionOn struct {
	ID    ID     `json:"id"`
	Code  string `json:"code"`
	Site  string `json:"site,omitempty"`
	Since Date   `json:"since,omitempty"`
	Until Date   `json:"until,omitempty"`
	Note  string `json:"note,omitempty"`
}

// Validate checks the code, the site and the dates.
func (p PrecautionOn) Validate() error {
	if _, err := ParsePrecaution(p.Code); err != nil {
		return err
	}
	if p.Site != "" {
		if _, err := ParseSite(p.Site); err != nil {
			return err
		}
	}
	for _, d := range []Date{p.Since, p.Until} {
		if _, err := ParseDate(string(d)); err != nil {
			return err
		}
	}
	return nil
}

// HoldsOn reports whether the precaution is in force on that day; without dates it always is.
// The day it ends still counts.
func (p PrecautionOn) HoldsOn(day Date) bool {
	return !day.Before(p.Since) && !p.Until.Before(day)
}
