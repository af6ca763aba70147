package view

import (
	"errors"
	"slices"
	"strconv"
	"strings"
	"time"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// Problems of a form: what is wrong, by the field it stands beside.
type Problems map[string]string

// Any reports whether something is wrong.
func (p Problems) Any() bool { return len(p) > 0 }

// PatientForm is the page of one animal, as text that is being typed.
type PatientForm struct {
	Name, Breed, Born, Note     string
	Species                     string // a species' word
	Sex                         string // female, male or unknown
	Neutered                    bool
	OwnerName, OwnerPhone       string
	OwnerEmail, OwnerAddress    string
	VetName, VetPhone, VetEmail string
	NightName, NightPhone       string // whom to call at night and on Sundays
	ReferredBy, ReferredUntil   string
	ReferralLimits              string
	Status, StatusSince         string
	RecheckDays                 string
	Problems                    []exam.Problem
	Precautions                 []exam.PrecautionOn
	Goals                       []exam.Goal
	Medicines                   []exam.Medicine

	before exam.Patient
}

// NewPatientForm opens the page of an animal; the zero Patient is a new one.
func NewPatientForm(p exam.Patient) *PatientForm {
	f := &PatientForm{
		Name: p.Name, Breed: p.Breed, Born: string(p.Born), Note: p.Note,
		Sex: p.Sex.String(), Neutered: p.Neutered,
		OwnerName: p.Owner.Name, OwnerPhone: p.Owner.Phone, OwnerEmail: p.Owner.Email, OwnerAddress: p.Owner.Address,
		VetName: p.Veterinarian.Name, VetPhone: p.Veterinarian.Phone, VetEmail: p.Veterinarian.Email,
		NightName: p.OutOfHours.Name, NightPhone: p.OutOfHours.Phone,
		ReferredBy: p.Referral.By, ReferredUntil: string(p.Referral.Until), ReferralLimits: p.Referral.Limits,
		Status: p.Status.String(), StatusSince: string(p.StatusSince),
		Problems: slices.Clone(p.Problems), Precautions: slices.Clone(p.Precautions),
		Goals: slices.Clone(p.Goals), Medicines: slices.Clone(p.Medicines),
		before: p,
	}
	if p.Species != 0 {
		f.Species = p.Species.String()
	} else {
		f.Species = exam.Dog.String()
	}
	if p.RecheckDays != 0 {
		f.RecheckDays = strconv.Itoa(p.RecheckDays)
	}
	return f
}

// New reports whether the form makes a new animal.
func (f *PatientForm) New() bool { return f.before.ID.IsZero() }

// Patient reads the form. The problems name the fields that must be mended first; the
// patient is then the zero Patient. Nothing of the form is lost.
func (f *PatientForm) Patient() (exam.Patient, Problems) {
	bad := Problems{}
	note := func(field string, err error) {
		if err != nil {
			bad[field] = why(err)
		}
	}
	date := func(field, text string) exam.Date {
		d, err := exam.ParseDate(strings.TrimSpace(text))
		note(field, err)
		return d
	}
	p := f.before
	trim := strings.TrimSpace
	p.Name, p.Breed, p.Note = trim(f.Name), trim(f.Breed), trim(f.Note)
	var err error
	p.Species, err = exam.ParseSpecies(f.Species)
	note("species", err)
	p.Sex, err = exam.ParseSex(f.Sex)
	note("sex", err)
	p.Neutered = f.Neutered
	p.Born = date("born", f.Born)
	p.Owner = exam.Contact{Name: trim(f.OwnerName), Phone: trim(f.OwnerPhone), Email: trim(f.OwnerEmail), Address: trim(f.OwnerAddress)}
	p.Veterinarian.Name, p.Veterinarian.Phone, p.Veterinarian.Email = trim(f.VetName), trim(f.VetPhone), trim(f.VetEmail)
	p.OutOfHours.Name, p.OutOfHours.Phone = trim(f.NightName), trim(f.NightPhone)
	p.Referral = exam.Referral{By: trim(f.ReferredBy), Until: date("referred-until", f.ReferredUntil), Limits: trim(f.ReferralLimits)}
	p.Status, err = exam.ParseStatus(f.Status)
	note("status", err)
	p.StatusSince = date("status-since", f.StatusSince)
	p.RecheckDays = 0
	if t := trim(f.RecheckDays); t != "" {
		n, err := strconv.Atoi(t)
		if err != nil || n < 1 || n > 366 {
			bad["recheck-days"] = why(&exam.Invalid{Field: words.T("days between visits"), Value: t, Allowed: words.T("%[1]s to %[2]s", "1", "366")})
		} else {
			p.RecheckDays = n
		}
	}
	p.Problems = slices.DeleteFunc(slices.Clone(f.Problems), func(x exam.Problem) bool {
		return x == exam.Problem{ID: x.ID}
	})
	for i, x := range p.Problems {
		at := "problem-" + strconv.Itoa(i)
		for _, d := range []exam.Date{x.Onset, x.Surgery, x.Resolved} {
			_, err := exam.ParseDate(string(d))
			note(at, err)
		}
		if trim(x.Diagnosis) == "" {
			bad[at] = words.T("Name the problem, or clear the line.")
		}
		if x.Level != "" && p.Species != 0 {
			_, _, err := exam.ParseLevelRange(x.Level, p.Species)
			note(at, err)
		}
	}
	p.Precautions = slices.DeleteFunc(slices.Clone(f.Precautions), func(x exam.PrecautionOn) bool { return x.Code == "" })
	for i, x := range p.Precautions {
		_, err := exam.ParsePrecaution(x.Code)
		note("precaution-"+strconv.Itoa(i), err)
		_, err = exam.ParseDate(string(x.Until))
		note("precaution-"+strconv.Itoa(i), err)
	}
	p.Goals = slices.DeleteFunc(slices.Clone(f.Goals), func(x exam.Goal) bool { return x == exam.Goal{ID: x.ID} })
	for i, g := range p.Goals {
		note("goal-"+strconv.Itoa(i), checkGoal(g))
	}
	p.Medicines = slices.DeleteFunc(slices.Clone(f.Medicines), func(x exam.Medicine) bool { return x == exam.Medicine{ID: x.ID} })
	for i, m := range p.Medicines {
		if trim(m.Name) == "" {
			bad["medicine-"+strconv.Itoa(i)] = words.T("Name the medicine, or clear the line.")
		}
	}
	if trim(f.Name) == "" {
		bad["name"] = words.T("The animal needs a name.")
	}
	if !bad.Any() {
		if err := p.Validate(); err != nil {
			field := "name"
			var inv *exam.Invalid
			if errors.As(err, &inv) {
				field = inv.Field
			}
			bad[field] = why(err)
		}
	}
	if bad.Any() {
		return exam.Patient{}, bad
	}
	return p, nil
}

// checkGoal says what is wrong with a goal, nil where nothing is.
func checkGoal(g exam.Goal) error {
	switch {
	case strings.TrimSpace(g.Words) == "":
		return errors.New(words.T("Say the goal in words, such as: walks ten steps alone."))
	case (g.Measure == "") == (g.Item == ""):
		return errors.New(words.T("A goal is reached by one test or one measure: choose which."))
	}
	if g.Measure != "" {
		m, err := exam.ParseMeasure(g.Measure)
		if err != nil {
			return err
		}
		in := m.Info()
		if g.Target < in.Min || g.Target > in.Max {
			return &exam.Invalid{Field: "target", Value: number(g.Target), Allowed: strings.TrimSuffix(words.T("%[1]s to %[2]s", number(in.Min), number(in.Max))+" "+in.Unit, " 1")}
		}
	} else {
		i, err := exam.ParseItem(g.Item)
		if err != nil {
			return err
		}
		if i.GradeWord(int8(g.Target)) == "" || g.Target != float64(int8(g.Target)) {
			return &exam.Invalid{Field: "target", Value: number(g.Target), Allowed: words.T("a grade of %s", ItemName(i))}
		}
		site, err := exam.ParseSite(g.Site)
		if err != nil {
			return err
		}
		if !i.At(site) {
			return &exam.Invalid{Field: words.T("site of the goal"), Value: g.Site, Allowed: words.T("a site of %s", ItemName(i))}
		}
	}
	_, err := exam.ParseDate(string(g.By))
	return err
}

// why says an error in one sentence, without the field that it stands beside.
func why(err error) string {
	var inv *exam.Invalid
	if errors.As(err, &inv) {
		return words.T("Use %s.", words.Of(inv.Allowed))
	}
	return err.Error()
}

// Missing lists what is not wrong but will be missed, in words: a sheet needs the
// veterinarian's telephone.
func (f *PatientForm) Missing() []string {
	var out []string
	if strings.TrimSpace(f.VetPhone) == "" {
		out = append(out, words.T("Without the treating veterinarian's telephone no sheet can be made."))
	}
	if strings.TrimSpace(f.NightPhone) == "" {
		out = append(out, words.T("Nobody to call at night is named."))
	}
	if strings.TrimSpace(f.Born) == "" {
		out = append(out, words.T("Without the age, an absent patellar reflex in an old dog may mislead."))
	}
	return out
}

// FirstRun is the first start: three questions.
type FirstRun struct {
	Practice string
	Examiner string
	Folder   string // where the data lies
	Phone    string // of the practice, for the sheets
	Region   string // ISO 3166 code of the country that the system is set to; it proposes paper and units
	// Passphrase protects the data; empty with Unprotected set leaves the key in the store.
	Passphrase, Again string
	Unprotected       bool
}

// NewFirstRun proposes a folder.
func NewFirstRun(folder string) *FirstRun { return &FirstRun{Folder: folder} }

// Practice record of the answers, and what must be mended first.
func (f *FirstRun) Check(zone string) (exam.Practice, Problems) {
	bad := Problems{}
	if strings.TrimSpace(f.Practice) == "" {
		bad["practice"] = words.T("The practice needs a name; it stands on every sheet.")
	}
	if strings.TrimSpace(f.Examiner) == "" {
		bad["examiner"] = words.T("Say who examines; every finding carries the name.")
	}
	if strings.TrimSpace(f.Folder) == "" {
		bad["folder"] = words.T("Choose a folder for the data.")
	}
	if !f.Unprotected {
		switch {
		case f.Passphrase == "":
			bad["passphrase"] = words.T("Choose a passphrase, or say that the data may lie unprotected.")
		case len([]rune(f.Passphrase)) < 8:
			bad["passphrase"] = words.T("A passphrase has at least 8 letters; several words are easier to keep.")
		case f.Passphrase != f.Again:
			bad["again"] = words.T("The two passphrases differ.")
		}
	}
	if bad.Any() {
		return exam.Practice{}, bad
	}
	if zone == "" || zone == "Local" {
		zone = "UTC"
	}
	paper, us := "A4", f.Region == "US"
	if slices.Contains(letterRegions, f.Region) {
		paper = "Letter"
	}
	return exam.Practice{Name: strings.TrimSpace(f.Practice), Zone: zone, Language: words.Language(), Paper: paper, Pounds: us, Inches: us,
		Contact:   exam.Contact{Name: strings.TrimSpace(f.Practice), Phone: strings.TrimSpace(f.Phone)},
		Examiners: []exam.Examiner{{Name: strings.TrimSpace(f.Examiner), Initials: Initials(f.Examiner)}}}, nil
}

// letterRegions are the countries that print on Letter (CLDR, supplemental data, paperSize).
var letterRegions = []string{"BZ", "CA", "CL", "CO", "CR", "GT", "MX", "NI", "PA", "PH", "PR", "SV", "US", "VE"}

// Initials returns the first letters of a name, at most three.
func Initials(name string) string {
	var out []rune
	for _, w := range strings.Fields(name) {
		if len(out) < 3 {
			out = append(out, []rune(strings.ToUpper(w))[0])
		}
	}
	return string(out)
}

// Strip is what stands above every screen of a patient.
type Strip struct {
	Name, Species, Signalment string
	Problem                   string
	Precautions               []string
	Date                      string
	Demo                      bool
	Limits                    string // the referral's limits, and whether it has run out
}

// StripOf returns the strip of a patient at a time, with its weight in the units that the practice reads.
func StripOf(p exam.Patient, now time.Time, u exam.Units) Strip {
	s := Strip{Name: p.Name, Species: SpeciesName(p.Species), Date: Day(now), Demo: p.Demo}
	var sig []string
	if p.Breed != "" {
		sig = append(sig, p.Breed)
	} else {
		sig = append(sig, s.Species)
	}
	if p.Sex != exam.SexUnknown {
		w := words.Of(p.Sex.String())
		if p.Neutered {
			w = words.T("%s, neutered", w)
		}
		sig = append(sig, w)
	}
	if y, ok := p.AgeYears(now); ok {
		if y < 1 {
			m := max(0, int(y*12))
			sig = append(sig, words.N(m, "%d month", "%d months", m))
		} else {
			sig = append(sig, words.N(int(y), "%d year", "%d years", int(y)))
		}
	}
	if n := len(p.Weights); n > 0 {
		sig = append(sig, WeightWords(p.Weights[n-1].Kg, u))
	}
	s.Signalment = strings.Join(sig, ", ")
	var probs []string
	for _, pr := range p.Problems {
		if pr.Resolved == "" {
			probs = append(probs, ProblemWords(pr))
		}
	}
	s.Problem = strings.Join(probs, "; ")
	for _, c := range p.Precautions {
		if until, ok := c.Until.Time(); ok && DaysBetween(until, now) > 0 {
			continue
		}
		s.Precautions = append(s.Precautions, PrecautionWords(c))
	}
	if until, ok := p.Referral.Until.Time(); ok && DaysBetween(until, now) > 0 {
		s.Limits = words.T("the referral ended on %s", DateWords(p.Referral.Until))
	} else if p.Referral.Limits != "" {
		s.Limits = p.Referral.Limits
	}
	return s
}

// ProblemWords says a problem in one line.
func ProblemWords(p exam.Problem) string {
	s := p.Diagnosis
	if p.Level != "" {
		s += " " + p.Level
	}
	if p.Side != "" {
		s += ", " + words.Of(p.Side)
	}
	return s
}
