// Package sheet makes what leaves the practice: the owner's progress sheet, the clinical
// summary and the referral letter as PDF, and the record as JSON, CSV, XLSX, FHIR and
// iCalendar. It computes on what it is given: times come in as arguments, and the same
// input gives the same bytes.
//
// The owner's sheet is written in everyday words and holds no likely site, no cord map and
// no percentages. It supports the veterinarian's care and never replaces it: it does not
// exist without the telephone number of the treating veterinarian.
package sheet

import (
	"errors"
	"fmt"
	"strconv"
	"strings"
	"time"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// Errors that say why no sheet is made. What is returned wraps one of them and names the
// animal and the remedy.
var (
	ErrNoPhone  = errors.New("no sheet without a telephone number")
	ErrInactive = errors.New("no sheet for an animal that is not under treatment")
	ErrNoVisit  = errors.New("no sheet without a visit")
)

// Urgency of an alert on paper.
type Urgency uint8

// The urgencies, the most urgent first.
const (
	Now Urgency = iota + 1
	Today
	NextWorkingDay
)

// Notice is an open alert as it stands on paper.
type Notice struct {
	Urgency Urgency
	Plain   string // what was seen, in everyday words
	Words   string // what was seen, in the trade's terms
	Since   time.Time
	Told    string // who was told, empty where nobody was
}

// Trend is what the serial model says of a change: how probably something is better, the
// same or worse than at an earlier visit. The three add up to 1.
type Trend struct {
	Since               time.Time
	Better, Same, Worse float64
}

// sureTrend is how probable a trend must be before a sheet states it.
const sureTrend = 0.9

// Input is what the sheets are made from.
type Input struct {
	Practice exam.Practice
	Patient  exam.Patient
	Visits   []exam.Visit // oldest first; the last one is the sheet's
	Notices  []Notice     // alerts of the last visit that are not answered, and for the clinical papers the answered ones too
	Whole    *Trend       // the whole animal since the first visit; nil: not worked out. See WithTrends
	Limbs    [4]*Trend    // each limb since the last visit, in exam.Limbs order; nil: not worked out
	At       time.Time    // when the paper is made
	Options  Options
}

// Options say how a paper looks.
type Options struct {
	Lang    string            // BCP 47 tag; empty means the practice's language
	Paper   string            // "A4" or "Letter"; empty means the practice's, or A4
	NoChart bool              // leave the course chart out
	Large   bool              // large print
	Grey    bool              // for a printer without colours
	Summary string            // replaces the sentences that say how the animal is doing
	Phrases map[string]string // the practice's own wording by the phrase's short name; see OwnPhrases
	Logo    []byte            // PNG or JPEG, shown in the heading; nil for none
}

// Document is a finished paper.
type Document struct {
	PDF      []byte
	Pages    int
	Name     string   // a file name such as bruno-2026-03-02-owner.pdf
	Subject  string   // one line for an e-mail
	Prose    []string // the sentences and lines as printed, without names, addresses and numbers of telephones
	Kind     string   // "sheet", "summary" or "letter"
	Lang     string   // BCP 47 tag of the paper
	Summary  string   // the sentences that say how the animal is doing, for the record of what was sent
	Reworded bool     // they are the therapist's own
	Noted    []string // what was objected to and confirmed with a reason, one sentence each
	Warnings []string // what was left off, could not be written or needs thought, one sentence each, in the language in use
}

// lang returns the language of the paper.
func (in Input) lang() string {
	if in.Options.Lang != "" {
		return in.Options.Lang
	}
	if in.Practice.Language != "" {
		return in.Practice.Language
	}
	return "en"
}

func (in Input) letter() bool {
	p := in.Options.Paper
	if p == "" {
		p = in.Practice.Paper
	}
	return strings.EqualFold(p, "letter")
}

// check refuses what must not have a paper for the owner.
func (in Input) check() error {
	name := in.Patient.Name
	switch in.Patient.Status {
	case exam.Discharged:
		return fmt.Errorf("%s is discharged: set the status to active to print a sheet: %w", name, ErrInactive)
	case exam.Died:
		return fmt.Errorf("%s has died: %w", name, ErrInactive)
	}
	if len(in.Visits) == 0 {
		return fmt.Errorf("%s has no visit yet: record one first: %w", name, ErrNoVisit)
	}
	if !hasDigits(in.Patient.Veterinarian.Phone) {
		return fmt.Errorf("the treating veterinarian of %s has no telephone number: enter it under the animal's contacts: %w", name, ErrNoPhone)
	}
	return nil
}

func hasDigits(s string) bool {
	n := 0
	for _, r := range s {
		if r >= '0' && r <= '9' {
			n++
		}
	}
	return n >= 3
}

// last returns the visit of the sheet.
func (in Input) last() exam.Visit { return in.Visits[len(in.Visits)-1] }

// urgent returns the notices that cannot wait for the next working day.
func (in Input) urgent() []Notice {
	var out []Notice
	for _, u := range []Urgency{Now, Today} {
		for _, n := range in.Notices {
			if n.Urgency == u && n.Told == "" {
				out = append(out, n)
			}
		}
	}
	return out
}

// outOfHours returns whom to call at night: the animal's own contact or the practice's.
func (in Input) outOfHours() exam.Contact {
	if hasDigits(in.Patient.OutOfHours.Phone) {
		return in.Patient.OutOfHours
	}
	return in.Practice.OutOfHours
}

// fileName makes a name of the form [a-z0-9._-]{1,80}.
func fileName(animal string, day time.Time, kind, ext string) string {
	var b strings.Builder
	for _, r := range strings.ToLower(animal) {
		switch {
		case r >= 'a' && r <= 'z', r >= '0' && r <= '9':
			b.WriteRune(r)
		case b.Len() > 0 && !strings.HasSuffix(b.String(), "-"):
			b.WriteByte('-')
		}
		if b.Len() >= 40 {
			break
		}
	}
	name := strings.Trim(b.String(), "-")
	if name == "" {
		name = "animal"
	}
	return name + "-" + day.Format("2006-01-02") + "-" + kind + "." + ext
}

// month returns the name of a month in full.
func month(lang string, m time.Month) string {
	switch m {
	case time.January:
		return words.In(lang, "January")
	case time.February:
		return words.In(lang, "February")
	case time.March:
		return words.In(lang, "March")
	case time.April:
		return words.In(lang, "April")
	case time.May:
		return words.In(lang, "May (month)")
	case time.June:
		return words.In(lang, "June")
	case time.July:
		return words.In(lang, "July")
	case time.August:
		return words.In(lang, "August")
	case time.September:
		return words.In(lang, "September")
	case time.October:
		return words.In(lang, "October")
	case time.November:
		return words.In(lang, "November")
	}
	return words.In(lang, "December")
}

// weekday returns the short name of a day of the week.
func weekday(lang string, d time.Weekday) string {
	switch d {
	case time.Monday:
		return words.In(lang, "Mon")
	case time.Tuesday:
		return words.In(lang, "Tue")
	case time.Wednesday:
		return words.In(lang, "Wed")
	case time.Thursday:
		return words.In(lang, "Thu")
	case time.Friday:
		return words.In(lang, "Fri")
	case time.Saturday:
		return words.In(lang, "Sat")
	}
	return words.In(lang, "Sun")
}

// colon joins a label and what follows as the language does: French sets a space before it.
func colon(lang string) string {
	if baseTag(lang) == "fr" {
		return "\u00a0: "
	}
	return ": "
}

// dayWords writes a day as people say it: 2 March 2026.
func dayWords(lang string, t time.Time) string {
	return words.In(lang, "%[1]s %[2]s %[3]d", dayOfMonth(lang, t.Day()), strings.TrimSuffix(month(lang, t.Month()), " (month)"), t.Year())
}

// dayOfMonth writes a day of a month as it is said in full: French counts the first as an ordinal.
func dayOfMonth(lang string, day int) string {
	if day == 1 && baseTag(lang) == "fr" {
		return "1er"
	}
	return strconv.Itoa(day)
}

// decimal writes a number with at most places decimals, or with as many as it has where places
// is negative, and with the decimal sign of the language.
func decimal(lang string, x float64, places int) string {
	return words.Decimal(lang, strconv.FormatFloat(x, 'f', places, 64))
}

// figure writes a measured value with the five digits that count.
func figure(lang string, x float64) string {
	return words.Decimal(lang, strconv.FormatFloat(x, 'g', 5, 64))
}

// dateWords writes a date that may lack its day or month.
func dateWords(lang string, d exam.Date) string {
	t, ok := d.Time()
	switch {
	case !ok:
		return string(d)
	case len(d) == len("2006-01-02"):
		return dayWords(lang, t)
	case len(d) == len("2006-01"):
		return words.In(lang, "%[1]s %[2]d", strings.TrimSuffix(month(lang, t.Month()), " (month)"), t.Year())
	}
	return string(d)
}
