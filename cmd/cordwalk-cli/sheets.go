package main

import (
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
	Patient string `arg:"" help:"Id or name of the patient."`
	Output  string `short:"o" required:"" help:"File to write; - is standard output." placeholder:"FILE.pdf"`
	Visit   string `help:"Up to this visit; the last where not said." placeholder:"VISIT"`
	Paper   string `help:"A4 or Letter; the practice's where not said." enum:",A4,Letter" default:""`
	Large   bool   `help:"Large print."`
	Grey    bool   `help:"For a printer without colours."`
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

// finish writes a paper and says where.
func (c *paperFlags) finish(e *env, d sheet.Document) error {
	if err := e.writeFile(c.Output, d.PDF); err != nil {
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
	Words   string `help:"Replaces the sentences that say how the animal is doing." placeholder:"TEXT"`
}

func (c *sheetCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		in, err := c.input(e, s)
		if err != nil {
			return err
		}
		in.Options.NoChart, in.Options.Summary = c.NoChart, c.Words
		if in, err = sheet.WithTrends(in); err != nil {
			return err
		}
		d, err := sheet.Owner(in)
		if err != nil {
			return err
		}
		if err := c.finish(e, d); err != nil {
			return err
		}
		return e.audited(s, audit.Printed, in.Patient.Name+": "+d.Name)
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
		if err := c.finish(e, d); err != nil {
			return err
		}
		return e.audited(s, audit.Printed, in.Patient.Name+": "+d.Name)
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
		if err := c.finish(e, d); err != nil {
			return err
		}
		return e.audited(s, audit.Printed, in.Patient.Name+": "+d.Name)
	})
}
