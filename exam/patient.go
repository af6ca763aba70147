package exam

import (
	"strings"
	"time"
)

// Contact is a person or practice with the ways to reach them. An owner's contact data
// are sealed apart from the rest of the record.
type Contact struct {
	Name    string `json:"name,omitempty"`
	Phone   string `json:"phone,omitempty"`
	Email   string `json:"email,omitempty"`
	Address string `json:"address,omitempty"`
}

// Empty reports whether nothing is known of the contact.
func (c Contact) Empty() bool { return c == Contact{} }

// Referral says who sent the animal, until when the referral holds and what it limits.
type Referral struct {
	By     string `json:"by,omitempty"`
	Until  Date   `json:"until,omitempty"`
	Limits string `json:"limits,omitempty"`
}

// Problem is a diagnosis on file, with its vertebral level where one is known.
// Level is as people write it: "T12-T13", "L1", or empty.
type Problem struct {
	ID        ID     `json:"id"`
	Diagnosis string `json:"diagnosis"`
	Level     string `json:"level,omitempty"`
	Side      string `json:"side,omitempty"` // "left", "right" or empty
	Onset     Date   `json:"onset,omitempty"`
	Surgery   Date   `json:"surgery,omitempty"`
	Resolved  Date   `json:"resolved,omitempty"`
	Note      string `json:"note,omitempty"`
}

// Goal is something to reach: what is measured, the target and by when.
// Exactly one of Measure and Item is set; the empty one is "".
type Goal struct {
	ID      ID      `json:"id"`
	Words   string  `json:"words"` // in the therapist's words: "walks ten steps alone"
	Measure string  `json:"measure,omitempty"`
	Item    string  `json:"item,omitempty"`
	Site    string  `json:"site,omitempty"`
	Target  float64 `json:"target"`
	By      Date    `json:"by,omitempty"`
	Reached Date    `json:"reached,omitempty"`
}

// Medicine is a drug with its course. Hours since the last dose belong to the visit.
type Medicine struct {
	ID    ID     `json:"id"`
	Name  string `json:"name"`
	Dose  string `json:"dose,omitempty"`
	Start Date   `json:"start,omitempty"`
	Stop  Date   `json:"stop,omitempty"`
}

// WeightPoint is one weighing in kg.
type WeightPoint struct {
	At time.Time `json:"at"`
	Kg float64   `json:"kg"`
}

// Status of a patient.
type Status uint8

// The statuses. A discharged or dead patient is never due and gets no sheet.
const (
	Active Status = iota
	Discharged
	Died
)

// String returns the status's word.
func (s Status) String() string { return [...]string{"active", "discharged", "died"}[s%3] }

// ParseStatus is the inverse of String; the empty word is Active.
func ParseStatus(word string) (Status, error) {
	switch word {
	case "", "active":
		return Active, nil
	case "discharged":
		return Discharged, nil
	case "died":
		return Died, nil
	}
	return 0, &Invalid{"status", word, "active, discharged or died"}
}

// Patient is one animal and what is true of it between visits.
type Patient struct {
	ID           ID
	Name         string
	Species      Species
	Breed        string
	Sex          Sex
	Neutered     bool
	Born         Date
	Owner        Contact
	Veterinarian Contact // the treating veterinarian
	OutOfHours   Contact // whom to call at night and on Sundays
	Referral     Referral
	Status       Status
	StatusSince  Date
	RecheckDays  int // days between visits; 0 means the practice's default of 7
	Problems     []Problem
	Precautions  []PrecautionOn
	Goals        []Goal
	Medicines    []Medicine
	Sent         []Sent        // papers that were written to be sent, oldest first
	Weights      []WeightPoint // of all visits, oldest first; derived from the visits' measures
	Note         string
	Demo         bool // belongs to the demo practice
}

// Validate checks what must hold before a patient can be kept.
func (p Patient) Validate() error {
	if strings.TrimSpace(p.Name) == "" {
		return &Invalid{"name", p.Name, "a name of at least one letter"}
	}
	if len(p.Name) > 200 {
		return &Invalid{"name", short(p.Name), "at most 200 letters"}
	}
	if p.Species.String() == "unknown" {
		return &Invalid{"species", "", "dog, cat, horse or rabbit"}
	}
	if _, err := ParseDate(string(p.Born)); err != nil {
		return &Invalid{"born", string(p.Born), "a day such as 2019-05-07, a month 2019-05 or a year 2019"}
	}
	if p.RecheckDays < 0 || p.RecheckDays > 366 {
		return &Invalid{"days between visits", "", "0 to 366"}
	}
	for _, pr := range p.Problems {
		if strings.TrimSpace(pr.Diagnosis) == "" {
			return &Invalid{"diagnosis", pr.Diagnosis, "at least one word"}
		}
		if pr.Level != "" {
			if _, _, err := ParseLevelRange(pr.Level, p.Species); err != nil {
				return err
			}
		}
	}
	for _, on := range p.Precautions {
		if err := on.Validate(); err != nil {
			return err
		}
	}
	return nil
}

// ParseLevelRange reads a vertebral level such as "T13" or "T12-T13"; a single vertebra is both ends.
func ParseLevelRange(word string, s Species) (from, to Vertebra, err error) {
	a, b, two := strings.Cut(word, "-")
	if from, err = ParseVertebra(strings.TrimSpace(a), s); err != nil {
		return 0, 0, err
	}
	if !two {
		return from, from, nil
	}
	if to, err = ParseVertebra(strings.TrimSpace(b), s); err != nil {
		return 0, 0, err
	}
	if to < from {
		return 0, 0, &Invalid{"level", word, "the cranial vertebra first, such as T12-T13"}
	}
	return from, to, nil
}

// AgeYears returns the age at t in years, and false if the birth is not known.
func (p Patient) AgeYears(t time.Time) (float64, bool) {
	d, ok := p.Born.DaysBefore(t)
	return d / 365.25, ok
}

// ProblemAt returns the problem that stood open at t, the one with the latest onset
// (or surgery, where no onset is known) where there are several, and false where there is none.
// A problem without dates is open at any time.
func (p Patient) ProblemAt(t time.Time) (Problem, bool) {
	var best Problem
	found := false
	day := DayOf(t)
	start := func(pr Problem) Date {
		if pr.Onset != "" {
			return pr.Onset
		}
		return pr.Surgery
	}
	for _, pr := range p.Problems {
		if pr.Resolved != "" && pr.Resolved.Before(day) || start(pr) != "" && day.Before(start(pr)) {
			continue
		}
		if !found || start(best).Before(start(pr)) || start(best) == "" && start(pr) != "" {
			best, found = pr, true
		}
	}
	return best, found
}

// WeightAt returns the weight in kg last taken at or before t, and false where there is none.
func (p Patient) WeightAt(t time.Time) (float64, bool) {
	var best WeightPoint
	for _, w := range p.Weights {
		if !w.At.After(t) && (best.Kg == 0 || w.At.After(best.At)) {
			best = w
		}
	}
	return best.Kg, best.Kg > 0
}
