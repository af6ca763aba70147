package main

import (
	"errors"
	"time"

	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/audit"
)

// paperFlags are common to everything that is printed.
type paperFlags struct {
	Patient  string `arg:"" help:"Id or name of the patient."`
	Output   string `short:"o" required:"" help:"File to write; - is standard output." placeholder:"FILE.pdf"`
	Mail     bool   `help:"Write a draft e-mail with the paper in it, for a mail program to open; nothing is sent."`
	To       string `help:"Address in the draft e-mail; the owner's or the veterinarian's where not said." placeholder:"ADDRESS"`
	Examiner string `help:"Who hands the paper over."`
	Visit    string `help:"Up to this visit; the last where not said." placeholder:"VISIT"`
	Paper    string `help:"A4 or Letter; the practice's where not said." enum:",A4,Letter" default:""`
	Large    bool   `help:"Large print."`
	Grey     bool   `help:"For a printer without colours."`
}

// input gathers what a paper is made from.
func (c *paperFlags) input(e *env, s *storage.Store) (sheet.Input, error) {
	r, err := e.patient(s, c.Patient)
	if err != nil {
		return sheet.Input{}, err
	}
	pr, err := s.Practice()
	if err != nil {
		return sheet.Input{}, err
	}
	visits := r.Visits
	if c.Visit != "" {
		v, err := e.visit(s, c.Visit)
		if err != nil {
			return sheet.Input{}, err
		}
		var upto []exam.Visit
		for _, x := range visits {
			if !x.Examined.After(v.Examined) {
				upto = append(upto, x)
			}
		}
		visits = upto
	}
	return view.SheetInput(pr, r.Patient, visits, time.Now(), sheet.Options{Lang: e.c.Lang, Paper: c.Paper, Large: c.Large, Grey: c.Grey}), nil
}

// finish writes a paper, keeps with the patient that it was written, and says where.
func (c *paperFlags) finish(e *env, s *storage.Store, in sheet.Input, d sheet.Document) error {
	who, err := e.examiner(s, c.Examiner)
	if err != nil {
		return err
	}
	if c.Mail {
		m, err := sheet.Mail(in, d, c.To)
		if err != nil {
			return err
		}
		if err := e.writeFile(c.Output, m); err != nil {
			return err
		}
	} else if err := e.writeFile(c.Output, d.PDF); err != nil {
		return err
	}
	if _, err := s.Apply(e.ctx, who, sheet.SentEdits(in.Patient, in.Visits[len(in.Visits)-1].ID, d, who, time.Now())...); err != nil {
		return err
	}
	if err := e.audited(s, audit.Printed, in.Patient.Name+": "+d.Name); err != nil {
		return err
	}
	for _, w := range d.Warnings {
		e.warn(w)
	}
	if c.Output == "-" {
		return nil
	}
	if e.c.JSON {
		return e.printJSON(struct {
			File     string   `json:"file"`
			Pages    int      `json:"pages"`
			Bytes    int      `json:"bytes"`
			Warnings []string `json:"warnings"`
		}{c.Output, d.Pages, len(d.PDF), some(d.Warnings)})
	}
	e.say("%s", words.N(d.Pages, "%s written, %d page", "%s written, %d pages", c.Output, d.Pages))
	return nil
}

// sheetCmd writes the owner's progress sheet.
type sheetCmd struct {
	paperFlags
	NoChart bool   `help:"Leave the course chart out."`
	Words   string `help:"Replaces the sentences that say how the animal is doing." placeholder:"TEXT" xor:"words"`
	Again   bool   `help:"Takes the words that were sent last about this visit." xor:"words"`
}

func (c *sheetCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		in, err := c.input(e, s)
		if err != nil {
			return err
		}
		in.Options.NoChart, in.Options.Summary = c.NoChart, c.Words
		if c.Again {
			if len(in.Visits) > 0 {
				in.Options.Summary = sheet.LastWords(in.Patient, in.Visits[len(in.Visits)-1].ID, in.Options.Lang)
			}
			if in.Options.Summary == "" {
				return errors.New(words.T("no words of the therapist were sent about this visit yet: give them with --words"))
			}
		}
		if in, err = sheet.WithTrends(in); err != nil {
			return err
		}
		d, err := sheet.Owner(in)
		if err != nil {
			return err
		}
		return c.finish(e, s, in, d)
	})
}

// summaryCmd writes the clinical summary.
type summaryCmd struct{ paperFlags }

func (c *summaryCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		in, err := c.input(e, s)
		if err != nil {
			return err
		}
		course, err := view.ClinicalCourse(in.Patient, in.Visits)
		if err != nil {
			return err
		}
		d, err := sheet.Clinical(in, course)
		if err != nil {
			return err
		}
		return c.finish(e, s, in, d)
	})
}

// letterCmd writes a referral letter.
type letterCmd struct{ paperFlags }

func (c *letterCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		in, err := c.input(e, s)
		if err != nil {
			return err
		}
		d, err := sheet.Letter(in)
		if err != nil {
			return err
		}
		return c.finish(e, s, in, d)
	})
}

// sentJSON is a paper that was handed over.
type sentJSON struct {
	Visit    exam.ID `json:"visit"`
	At       string  `json:"at"`
	Kind     string  `json:"kind"`
	Examiner string  `json:"examiner,omitempty"`
	Language string  `json:"language,omitempty"`
	Summary  string  `json:"summary,omitempty"`
	Reworded bool    `json:"reworded,omitempty"`
	Hash     string  `json:"sha256,omitempty"`
	Note     string  `json:"note,omitempty"`
}

func sentLines(p exam.Patient) []sentJSON {
	out := []sentJSON{}
	for _, x := range p.Sent {
		out = append(out, sentJSON{x.Visit, x.At.Format(time.RFC3339), x.Kind, x.Examiner, x.Language, x.Summary, x.Reworded, x.Hash, x.Note})
	}
	return out
}
