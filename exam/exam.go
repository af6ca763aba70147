// Package exam holds what a neurological examination says about an animal:
// findings on fixed scales, the visit around them, the patient they belong to,
// and the rules that say which values are allowed.
//
// It does no input or output and knows no clock; callers pass times in. It
// imports nothing of this project.
//
// A finding that nobody entered is «not tested». It is never counted as normal.
package exam

import "fmt"

// Invalid is the error for a value that the vocabulary does not allow. It names
// the place (item, site, field), the value that was met and what is allowed there,
// so that it can be shown beside the field it belongs to.
type Invalid struct {
	Field   string // where: "finding patellar at pelvic-left", "weight"
	Value   string // what was met, as the person wrote it
	Allowed string // what may stand there, as a clause: "0 to 4", "dog, cat, horse or rabbit"
}

func (e *Invalid) Error() string {
	return fmt.Sprintf("%s: %q is not allowed; use %s", e.Field, e.Value, e.Allowed)
}

// Species is an animal species with its own segment counts.
type Species uint8

// The species known to Cordwalk. The zero Species is unknown and never valid.
const (
	Dog Species = iota + 1
	Cat
	Horse
	Rabbit
)

var speciesNames = [...]string{Dog: "dog", Cat: "cat", Horse: "horse", Rabbit: "rabbit"}

// AllSpecies lists every species, in the order shown to people.
func AllSpecies() []Species { return []Species{Dog, Cat, Horse, Rabbit} }

// String returns the species' word, or "unknown".
func (s Species) String() string {
	if int(s) < len(speciesNames) && speciesNames[s] != "" {
		return speciesNames[s]
	}
	return "unknown"
}

// ParseSpecies is the inverse of String. It refuses unknown words.
func ParseSpecies(word string) (Species, error) {
	for i, n := range speciesNames {
		if n != "" && n == word {
			return Species(i), nil
		}
	}
	return 0, &Invalid{"species", word, "dog, cat, horse or rabbit"}
}

// Sex of an animal.
type Sex uint8

// The sexes; the zero Sex is not known.
const (
	SexUnknown Sex = iota
	Female
	Male
)

// String returns the sex's word.
func (s Sex) String() string {
	switch s {
	case Female:
		return "female"
	case Male:
		return "male"
	}
	return "unknown"
}

// ParseSex is the inverse of String; the empty word is SexUnknown.
func ParseSex(word string) (Sex, error) {
	switch word {
	case "", "unknown":
		return SexUnknown, nil
	case "female":
		return Female, nil
	case "male":
		return Male, nil
	}
	return 0, &Invalid{"sex", word, "female, male or unknown"}
}
