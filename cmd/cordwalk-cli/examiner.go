package main

import (
	"errors"
	"slices"
	"strings"

	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// practiceExaminerCmd adds an examiner or changes one.
type practiceExaminerCmd struct {
	Name     string  `arg:"" help:"Name or initials of an examiner, or the name of a new one."`
	Rename   string  `help:"Another name." placeholder:"NAME"`
	Initials *string `help:"Initials."`
	SetPIN   bool    `name:"set-pin" help:"Set a PIN of 4 to 12 digits; it is asked for when somebody switches to this name. Attribution, not protection."`
	NewPINFd int     `name:"new-pin-fd" help:"Read the PIN that is set from this file descriptor." default:"-1" placeholder:"N"`
	NoPIN    bool    `name:"no-pin" help:"Take the PIN away."`
	Remove   bool    `help:"Take the examiner off the list; what was recorded keeps the name."`
	Examiner string  `help:"Who changes it."`
}

func (c *practiceExaminerCmd) Run(e *env) error {
	if c.NoPIN && (c.SetPIN || c.NewPINFd >= 0) || c.Remove && (c.SetPIN || c.NewPINFd >= 0 || c.NoPIN || c.Rename != "" || c.Initials != nil) {
		return usage("%s", words.T("these options do not go together; see practice examiner --help"))
	}
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
		after.Examiners = slices.Clone(before.Examiners)
		x, known := view.FindExaminer(before, c.Name)
		if !known {
			x = exam.Examiner{ID: storage.NewID(), Name: strings.TrimSpace(c.Name), Initials: view.Initials(c.Name)}
		}
		if x.Name == "" {
			return usage("%s", words.T("an examiner needs a name"))
		}
		i := slices.IndexFunc(after.Examiners, func(y exam.Examiner) bool { return y.ID == x.ID })
		switch {
		case c.Remove && !known:
			return errors.New(words.T("nobody is called %[1]s here; the practice's examiners are %[2]s", c.Name, examinerNames(before)))
		case c.Remove && len(after.Examiners) == 1:
			return errors.New(words.T("At least one examiner is needed; every finding carries a name."))
		case c.Remove:
			after.Examiners = slices.Delete(after.Examiners, i, i+1)
		default:
			if err := c.alter(e, &x); err != nil {
				return err
			}
			if i < 0 {
				after.Examiners = append(after.Examiners, x)
			} else {
				after.Examiners[i] = x
			}
		}
		edits := storage.PracticeEdits(before, after)
		if len(edits) == 0 {
			return errors.New(words.T("nothing was said to change; see practice examiner --help"))
		}
		if _, err := s.Apply(e.ctx, who, edits...); err != nil {
			return err
		}
		e.say("%s", words.T("Kept."))
		return nil
	})
}

func (c *practiceExaminerCmd) alter(e *env, x *exam.Examiner) error {
	if n := strings.TrimSpace(c.Rename); n != "" {
		x.Name = n
	}
	if c.Initials != nil {
		x.Initials = strings.TrimSpace(*c.Initials)
	}
	if c.NoPIN {
		x.PINHash = ""
	}
	if !c.SetPIN && c.NewPINFd < 0 {
		return nil
	}
	pin, err := e.readPIN(c.NewPINFd, words.T("New PIN of %s: ", x.Name))
	if err != nil {
		return err
	}
	x.PINHash, err = view.HashPIN(pin)
	return err
}
