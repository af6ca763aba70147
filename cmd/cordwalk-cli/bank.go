package main

import (
	"errors"
	"fmt"
	"os"
	"strings"

	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// practiceShowCmd shows what holds for all patients.
type practiceShowCmd struct {
	Language string `help:"Language whose sentences are shown; that of the sheets where not said." placeholder:"TAG"`
}

type whoJSON struct {
	Name     string `json:"name"`
	Initials string `json:"initials,omitempty"`
	PIN      bool   `json:"pin"` // a PIN is asked for
}

type phraseJSON struct {
	Key      string `json:"key"`
	English  string `json:"english"`
	Standard string `json:"standard"`
	Own      string `json:"own,omitempty"`
}

// sheetLanguage is the language of what is written for owners.
func (e *env) sheetLanguage(pr exam.Practice, said string) string {
	for _, l := range []string{said, e.c.Lang, pr.Language} {
		if l != "" {
			return l
		}
	}
	return "en"
}

func (c *practiceShowCmd) Run(e *env) error {
	return e.with(func(s *storage.Store) error {
		pr, err := s.Practice()
		if err != nil {
			return err
		}
		lang := e.sheetLanguage(pr, c.Language)
		list := sheet.Phrases(pr, lang)
		if e.c.JSON {
			out := struct {
				Name       string       `json:"name"`
				Contact    exam.Contact `json:"contact"`
				OutOfHours exam.Contact `json:"out_of_hours"`
				Zone       string       `json:"zone"`
				Language   string       `json:"language"`
				Paper      string       `json:"paper"`
				Pounds     bool         `json:"pounds"`
				Inches     bool         `json:"inches"`
				Examiners  []whoJSON    `json:"examiners"`
				LogoBytes  int          `json:"logo_bytes"`
				Phrases    []phraseJSON `json:"phrases"`
			}{pr.Name, pr.Contact, pr.OutOfHours, pr.Zone, pr.Language, pr.Paper, pr.Pounds, pr.Inches, []whoJSON{}, len(pr.Logo), []phraseJSON{}}
			for _, x := range pr.Examiners {
				out.Examiners = append(out.Examiners, whoJSON{x.Name, x.Initials, x.PINHash != ""})
			}
			for _, p := range list {
				out.Phrases = append(out.Phrases, phraseJSON(p))
			}
			return e.printJSON(out)
		}
		line := func(label string, parts ...string) {
			var said []string
			for _, p := range parts {
				if p = strings.TrimSpace(p); p != "" {
					said = append(said, p)
				}
			}
			if len(said) > 0 {
				e.say("%s: %s", label, strings.Join(said, ", "))
			}
		}
		e.say("%s", pr.Name)
		line(words.T("Contact"), pr.Contact.Phone, pr.Contact.Email, pr.Contact.Address)
		line(words.T("Nights and Sundays"), pr.OutOfHours.Name, pr.OutOfHours.Phone)
		line(words.T("Language"), pr.Language)
		line(words.T("Paper"), pr.Paper)
		units := pr.Units()
		line(words.T("Units"), units.Unit(exam.Weight), units.Unit(exam.ThighGirth))
		for _, x := range pr.Examiners {
			pin := ""
			if x.PINHash != "" {
				pin = words.T("with a PIN")
			}
			line(words.T("Examiner"), x.Name, x.Initials, pin)
		}
		if n := len(pr.Logo); n > 0 {
			line(words.T("Logo"), words.T("%d KiB", max(1, n>>10)))
		}
		e.say("%s", words.T("Sentences on the owner's sheet (%s), by their names; * marks the practice's own:", lang))
		for _, p := range list {
			mark, text := " ", p.Standard
			if p.Own != "" {
				mark, text = "*", p.Own
			}
			e.say("%s %-12s %s", mark, p.Key, text)
		}
		return nil
	})
}

// practiceSetCmd changes what holds for all patients.
type practiceSetCmd struct {
	Name       *string           `help:"Name of the practice."`
	Phone      *string           `help:"Telephone."`
	Email      *string           `help:"E-mail address."`
	Address    *string           `help:"Address."`
	NightName  *string           `help:"Whom to call at night and on Sundays."`
	NightPhone *string           `help:"Telephone at night and on Sundays."`
	SheetsIn   *string           `name:"sheets-in" help:"Language of the sheets." placeholder:"TAG"`
	Paper      string            `help:"Paper of the sheets." enum:",A4,Letter" default:""`
	Weights    string            `help:"Unit that weights are shown and taken in: kg or lb." enum:",kg,lb" default:""`
	Girths     string            `help:"Unit that girths are shown and taken in: cm or in." enum:",cm,in" default:""`
	Logo       string            `help:"PNG or JPEG for the heading of papers, at most 256 KiB." placeholder:"FILE"`
	NoLogo     bool              `help:"Take the logo away."`
	Phrase     map[string]string `help:"A sentence in the practice's own words, by its name; without words the standard text comes back." placeholder:"KEY=WORDS" mapsep:"none"`
	Language   string            `help:"Language of the sentences that are set; that of the sheets where not said." placeholder:"TAG"`
	Examiner   string            `help:"Who changes it."`
}

func (c *practiceSetCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		who, err := e.examiner(s, c.Examiner)
		if err != nil {
			return err
		}
		before, err := s.Practice()
		if err != nil {
			return err
		}
		after := before
		for _, x := range []struct {
			said *string
			to   *string
		}{{c.Name, &after.Name}, {c.Phone, &after.Contact.Phone}, {c.Email, &after.Contact.Email}, {c.Address, &after.Contact.Address},
			{c.NightName, &after.OutOfHours.Name}, {c.NightPhone, &after.OutOfHours.Phone}, {c.SheetsIn, &after.Language}} {
			if x.said != nil {
				*x.to = strings.TrimSpace(*x.said)
			}
		}
		if after.Name == "" {
			return usage("%s", words.T("a practice needs a name"))
		}
		if c.Paper != "" {
			after.Paper = c.Paper
		}
		if c.Weights != "" {
			after.Pounds = c.Weights == "lb"
		}
		if c.Girths != "" {
			after.Inches = c.Girths == "in"
		}
		switch {
		case c.NoLogo:
			after.Logo = nil
		case c.Logo != "":
			data, err := os.ReadFile(c.Logo)
			if err != nil {
				return err
			}
			if err := sheet.CheckLogo(data); err != nil {
				return err
			}
			after.Logo = data
		}
		lang := e.sheetLanguage(after, c.Language)
		for key, own := range c.Phrase {
			if after, err = sheet.SetPhrase(after, key, lang, own); err != nil {
				return usage("%s", err.Error())
			}
		}
		edits := storage.PracticeEdits(before, after)
		if len(edits) == 0 {
			return fmt.Errorf("%w", errors.New(words.T("nothing was said to change; see practice set --help")))
		}
		if _, err := s.Apply(e.ctx, who, edits...); err != nil {
			return err
		}
		e.say("%s", words.T("Kept."))
		return nil
	})
}
