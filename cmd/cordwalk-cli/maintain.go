package main

import (
	"fmt"
	"text/tabwriter"
	"time"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/share"
)

// historyCmd prints every change of a patient.
type historyCmd struct {
	Patient string `arg:"" optional:"" help:"Id or name of the patient, or id of a visit; the practice's own record where not said."`
	Field   string `help:"Only this field, such as finding/patellar/pelvic-left."`
}

type entryJSON struct {
	Record   exam.ID   `json:"record"`
	Kind     string    `json:"kind"`
	Field    string    `json:"field"`
	Value    string    `json:"value"`
	Before   string    `json:"before"`
	Examiner string    `json:"examiner"`
	Device   string    `json:"device"`
	At       time.Time `json:"time"`
	How      string    `json:"how"`
	Reason   string    `json:"reason,omitempty"`
	Current  bool      `json:"current"`
	Late     bool      `json:"late,omitempty"`
}

func kindWord(k storage.Kind) string {
	switch k {
	case change.KindPractice:
		return "practice"
	case change.KindPatient:
		return "patient"
	case change.KindVisit:
		return "visit"
	case change.KindEdge:
		return "joined"
	}
	return "other"
}

func (c *historyCmd) Run(e *env) error {
	return e.with(func(s *storage.Store) error {
		var id exam.ID
		if c.Patient != "" {
			var err error
			if id, err = exam.ParseID(c.Patient); err == nil {
				_, err = s.Visit(id)
			}
			if err != nil {
				r, err := e.patient(s, c.Patient)
				if err != nil {
					return err
				}
				id = r.Patient.ID
			}
		}
		list, err := s.History(id)
		if err != nil {
			return err
		}
		out := []entryJSON{}
		for _, x := range list {
			if c.Field != "" && x.Field != c.Field {
				continue
			}
			out = append(out, entryJSON{x.Record, kindWord(x.Kind), x.Field, x.Value, x.Before, x.Examiner, x.Device, x.At, x.How, x.Reason, x.Current, x.Late})
		}
		if e.c.JSON {
			return e.printJSON(struct {
				Entries []entryJSON `json:"entries"`
			}{out})
		}
		e.protection(s)
		w := tabwriter.NewWriter(e.out, 0, 4, 2, ' ', 0)
		for _, x := range out {
			was := ""
			if x.Before != "" {
				was = words.T("was %s", x.Before)
			}
			value := x.Value
			if value == "" {
				value = words.T("(cleared)")
			}
			how := x.How
			if x.Reason != "" {
				how += ": " + x.Reason
			}
			fmt.Fprintf(w, "%s\t%s\t%s\t%s\t%s\t%s\t%s\n", x.At.Format("2006-01-02 15:04:05"), x.Examiner, x.Device, x.Field, clip(value, 60), clip(was, 60), how)
		}
		return w.Flush()
	})
}

// checkCmd reads every byte and reports what is wrong.
type checkCmd struct{}

type problemJSON struct {
	File   string `json:"file"`
	Offset int64  `json:"offset"` // -1: the whole file
	Length int64  `json:"length,omitempty"`
	What   string `json:"what"`
	Minor  bool   `json:"minor,omitempty"` // nothing that was called saved is lost
}

func (c *checkCmd) Run(e *env) error {
	dir, err := e.storeDir()
	if err != nil {
		return err
	}
	u, err := e.unlock(true)
	if err != nil {
		return err
	}
	problems, err := storage.Check(e.ctx, dir, e.options(u), share.Check)
	if err != nil {
		return err
	}
	wrong := 0
	for _, p := range problems {
		if !p.Minor {
			wrong++
		}
	}
	if e.c.JSON {
		out := struct {
			OK       bool          `json:"ok"`
			Problems []problemJSON `json:"problems"`
		}{wrong == 0, []problemJSON{}}
		for _, p := range problems {
			out.Problems = append(out.Problems, problemJSON(p))
		}
		if err := e.printJSON(out); err != nil {
			return err
		}
	} else {
		for _, p := range problems {
			e.say("%s", p)
		}
		switch {
		case len(problems) == 0:
			e.say("%s", words.T("Nothing is wrong."))
		case wrong == 0:
			e.say("%s", words.T("Nothing that was called saved is lost; nothing need be done."))
		}
	}
	if wrong > 0 {
		return errSaidNo
	}
	return nil
}

// rebuildCmd makes the index anew.
type rebuildCmd struct{}

func (c *rebuildCmd) Run(e *env) error {
	dir, err := e.storeDir()
	if err != nil {
		return err
	}
	u, err := e.unlock(true)
	if err != nil {
		return err
	}
	if err := storage.Rebuild(e.ctx, dir, e.options(u)); err != nil {
		return err
	}
	e.say("%s", words.T("The index was built anew from the journal."))
	return nil
}
