package main

import (
	"errors"
	"fmt"
	"strconv"
	"text/tabwriter"
	"time"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/attach"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/share"
)

// patientEraseCmd erases a patient's owner at the owner's request.
type patientEraseCmd struct {
	Patient  string `arg:"" help:"Id or name of the patient whose owner asks for it."`
	Reason   string `required:"" help:"Who asked, and how; it is kept."`
	Backups  string `help:"Folder with backups: say which of them still hold the owner's data." placeholder:"DIR"`
	Examiner string `help:"Who erases."`
	sheetFlag
}

func (c *patientEraseCmd) Run(e *env) error {
	erase := func(s *storage.Store, f *attach.Files) error {
		r, err := e.patient(s, c.Patient)
		if err != nil {
			return err
		}
		who, err := e.examiner(s, c.Examiner)
		if err != nil {
			return err
		}
		return f.Erase(e.ctx, who, r.Patient.ID, c.Reason)
	}
	done := func(held []holdingJSON) error {
		if e.c.JSON {
			return e.printJSON(map[string]any{"erased": true, "still_holding": held})
		}
		e.say("%s", words.T("The owner's contact data, photos and clips of this patient are erased here; each other device does the same at its next exchange. The animal's record stays."))
		e.sayHolding(held)
		return nil
	}
	if c.Backups == "" {
		return e.change(func(s *storage.Store) error {
			f, err := attach.Open(e.ctx, s, nil)
			if err == nil {
				err = erase(s, f)
			}
			if err != nil {
				return err
			}
			return done([]holdingJSON{})
		})
	}
	return e.shared(c.sheetFlag, func(sh *share.Share) error {
		if err := erase(sh.Store, sh.Files.(*attach.Files)); err != nil {
			return err
		}
		held, err := e.holding(sh, c.Backups)
		if err != nil {
			return err
		}
		return done(held)
	})
}

// apartListCmd lists what removed devices made beyond what counts of them.
type apartListCmd struct{}

type apartJSON struct {
	Number   int       `json:"number"`
	Device   string    `json:"device"`
	Examiner string    `json:"examiner"`
	At       time.Time `json:"time"`
	Patient  exam.ID   `json:"patient,omitzero"`
	Name     string    `json:"name,omitempty"` // of the patient, where it is known here
	Kind     string    `json:"kind"`
	Field    string    `json:"field"`
	Value    string    `json:"value"`
}

// apart returns the changes in quarantine, and what is said of them.
func (e *env) apart(sh *share.Share) ([]change.Change, []apartJSON, error) {
	list, err := sh.Quarantined(e.ctx)
	if err != nil {
		return nil, nil, err
	}
	names := map[exam.ID]string{}
	out := []apartJSON{}
	for i, c := range list {
		if _, ok := names[c.Patient]; !ok && !c.Patient.IsZero() {
			r, err := sh.Patient(c.Patient)
			if err != nil && !errors.Is(err, storage.ErrNotFound) {
				return nil, nil, err
			}
			names[c.Patient] = r.Patient.Name
		}
		out = append(out, apartJSON{i + 1, sh.List.NameOf(c.Stream.Device), c.Examiner, c.Time.Time(), c.Patient, names[c.Patient], kindWord(c.Kind), c.Field, sh.Words(c)})
	}
	return list, out, nil
}

func (c *apartListCmd) Run(e *env) error {
	return e.shared(sheetFlag{}, func(sh *share.Share) error {
		_, out, err := e.apart(sh)
		if err != nil {
			return err
		}
		if e.c.JSON {
			return e.printJSON(map[string]any{"entries": out})
		}
		if len(out) == 0 {
			e.say("%s", words.T("Nothing is kept apart."))
			return nil
		}
		w := tabwriter.NewWriter(e.out, 0, 4, 2, ' ', 0)
		for _, x := range out {
			value := x.Value
			if value == "" {
				value = words.T("(cleared)")
			}
			fmt.Fprintf(w, "%d\t%s\t%s\t%s\t%s\t%s\t%s\n", x.Number, x.At.Format("2006-01-02 15:04:05"), x.Device, x.Examiner, x.Name, x.Field, clip(value, 60))
		}
		return w.Flush()
	})
}

// apartAdmitCmd takes changes out of quarantine into the record.
type apartAdmitCmd struct {
	Numbers  []string `arg:"" help:"Numbers as apart list prints them, or: all."`
	Reason   string   `required:"" help:"Why they may count, such as: asked the colleague."`
	Examiner string   `help:"Who admits them."`
}

func (c *apartAdmitCmd) Run(e *env) error {
	return e.shared(sheetFlag{}, func(sh *share.Share) error {
		list, _, err := e.apart(sh)
		if err != nil {
			return err
		}
		who, err := e.examiner(sh.Store, c.Examiner)
		if err != nil {
			return err
		}
		chosen := map[int]bool{}
		for _, word := range c.Numbers {
			if word == "all" && len(c.Numbers) == 1 {
				for i := range list {
					chosen[i] = true
				}
				continue
			}
			n, err := strconv.Atoi(word)
			if err != nil || n < 1 || n > len(list) {
				return usage("%s", words.N(len(list), "there is no entry %[2]q: %[1]d is kept apart, see apart list", "there is no entry %[2]q: %[1]d are kept apart, see apart list", len(list), word))
			}
			chosen[n-1] = true
		}
		n := 0
		for i, x := range list { // in the order in which they were made: a later one replaces an earlier one of its field
			if !chosen[i] {
				continue
			}
			if _, err := sh.Apply(e.ctx, who, storage.Admit(x, c.Reason)); err != nil {
				return fmt.Errorf("%s: %w", words.N(n, "%d entry was admitted, the next one was not", "%d entries were admitted, the next one was not", n), err)
			}
			n++
		}
		if e.c.JSON {
			return e.printJSON(map[string]any{"admitted": n})
		}
		e.say("%s", words.N(n, "%d entry counts now, here and on each other device from its next exchange on.", "%d entries count now, here and on each other device from its next exchange on.", n))
		return nil
	})
}
