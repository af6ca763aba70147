package main

import (
	"errors"
	"fmt"
	"slices"
	"strings"
	"text/tabwriter"
	"time"

	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// examMax bounds an exam file.
const examMax = 8 << 20

// readExam reads an exam file, or standard input for -, and passes its warnings on.
func (e *env) readExam(file string) (exam.File, error) {
	data, err := e.readInput(file, examMax)
	if err != nil {
		return exam.File{}, err
	}
	f, warnings, err := exam.DecodeFile(data)
	if err != nil {
		return exam.File{}, fmt.Errorf("%s: %w", file, err)
	}
	for _, w := range warnings {
		e.warn(file + ": " + w)
	}
	return f, nil
}

// examAddCmd records an exam from a file.
type examAddCmd struct {
	Patient  string `arg:"" help:"Id or name of the patient."`
	File     string `arg:"" help:"Exam file; - is standard input."`
	Protocol string `help:"Protocol that was walked, such as full-spinal or weekly." placeholder:"KEY"`
	Close    bool   `help:"Close the visit; refused while an alert asks for the veterinarian now."`
}

func (c *examAddCmd) Run(e *env) error {
	f, err := e.readExam(c.File)
	if err != nil {
		return err
	}
	if f.Examined.IsZero() {
		return fmt.Errorf("%s: %w", c.File, &exam.Invalid{Field: "examined", Allowed: words.T("a time such as 2026-03-02T10:15:00+01:00")})
	}
	if strings.TrimSpace(f.Examiner) == "" {
		return fmt.Errorf("%s: %w", c.File, &exam.Invalid{Field: "examiner", Allowed: words.T("the examiner's name")})
	}
	return e.change(func(s *storage.Store) error {
		r, err := e.patient(s, c.Patient)
		if err != nil {
			return err
		}
		return c.record(e, s, r, f)
	})
}

func (c *examAddCmd) record(e *env, s *storage.Store, r storage.Record, f exam.File) error {
	if f.Species != r.Patient.Species {
		return fmt.Errorf("%s", words.T("%s: the exam is of a %s, and %s is a %s", c.File, view.SpeciesName(f.Species), r.Patient.Name, view.SpeciesName(r.Patient.Species)))
	}
	if r.Patient.Status == exam.Died {
		return fmt.Errorf("%s", words.T("%s has died; no exam can be recorded.", r.Patient.Name))
	}
	if !f.ID.IsZero() {
		old, err := s.Visit(f.ID)
		switch {
		case err == nil && !slices.Contains(append(r.Joined, r.Patient.ID), old.Patient):
			return fmt.Errorf("%s", words.T("%s: a visit with the id %s belongs to another patient", c.File, f.ID))
		case err == nil:
			return e.added("visit", old.ID, false)
		case !errors.Is(err, storage.ErrNotFound):
			return err
		}
	} else {
		f.ID = storage.NewID()
	}
	pr, err := s.Practice()
	if err != nil {
		return err
	}
	v := f.Visit(r.Patient.ID)
	v.Zone, v.Protocol = pr.Zone, c.Protocol
	if v.Protocol != "" {
		if _, ok := exam.FindProtocol(pr, v.Protocol); !ok {
			return fmt.Errorf("%s", words.T("there is no protocol %q", v.Protocol))
		}
	}
	if err := v.Validate(r.Patient.Species); err != nil {
		return fmt.Errorf("%s: %w", c.File, err)
	}
	if c.Close {
		if err := mayClose(r, v); err != nil {
			return err
		}
		v.State, v.ClosedAt = exam.Closed, time.Now()
	}
	if _, err := s.Apply(e.ctx, v.Examiner, storage.VisitEdits(exam.Visit{}, v)...); err != nil {
		return err
	}
	for _, a := range view.AlertsOf(r.Patient, withVisit(r.Visits, v)) {
		if !a.Answered {
			e.warn(a.Line())
		}
	}
	return e.added("visit", v.ID, true)
}

// withVisit returns the visits with v in its place, in order of time.
func withVisit(visits []exam.Visit, v exam.Visit) []exam.Visit {
	out := slices.DeleteFunc(slices.Clone(visits), func(x exam.Visit) bool { return x.ID == v.ID })
	out = append(out, v)
	slices.SortStableFunc(out, func(a, b exam.Visit) int { return a.Examined.Compare(b.Examined) })
	return out
}

// mayClose refuses while an alert of the visit asks for the veterinarian now and nobody was told.
func mayClose(r storage.Record, v exam.Visit) error {
	list := withVisit(r.Visits, v)
	for _, a := range view.AlertsOf(r.Patient, list[:slices.IndexFunc(list, func(x exam.Visit) bool { return x.ID == v.ID })+1]) {
		if a.Urgency == "now" && !a.Answered {
			return fmt.Errorf("%s", words.T("the visit stays open: %s Say who was told with: exam answer %s %s --told NAME", a.Line(), v.ID, a.Rule))
		}
	}
	return nil
}

// examShowCmd shows a visit.
type examShowCmd struct {
	Visit string `arg:"" help:"Id of the visit."`
	File  bool   `help:"Print it as an exam file."`
}

// visitJSON is a visit in JSON: what an exam file holds, and what stands around it.
type visitJSON struct {
	visitLine
	Patient    exam.ID                `json:"patient"`
	ClosedAt   *time.Time             `json:"closed_at,omitempty"`
	Sedation   string                 `json:"sedation"`
	Aid        string                 `json:"aid,omitempty"`
	Surface    string                 `json:"surface,omitempty"`
	Session    string                 `json:"session,omitempty"`
	Results    []findingJSON          `json:"findings_list"`
	Values     []measuredJSON         `json:"measures_list"`
	Treatments []exam.Treatment       `json:"treatments"`
	Home       []exam.HomeExercise    `json:"home"`
	Report     exam.OwnerReport       `json:"report"`
	Note       string                 `json:"note,omitempty"`
	NextVisit  exam.Date              `json:"next_visit,omitempty"`
	Amendments []exam.Amendment       `json:"amendments"`
	Answers    []exam.Acknowledgement `json:"answers"`
	Alerts     []view.Alert           `json:"alerts"`
}

// findingJSON is one finding in JSON.
type findingJSON struct {
	Item      string  `json:"item"`
	Site      string  `json:"site"`
	Digit     string  `json:"digit,omitempty"`
	Joint     string  `json:"joint,omitempty"`
	Grade     *int8   `json:"grade,omitempty"`
	NotTested *string `json:"not_tested,omitempty"`
	Level     string  `json:"level,omitempty"`
	Side      string  `json:"side,omitempty"`
	How       string  `json:"how,omitempty"`
	Seen      bool    `json:"seen,omitempty"`
	Block     string  `json:"block,omitempty"`
	Note      string  `json:"note,omitempty"`
	Words     string  `json:"words,omitempty"`
	Normal    bool    `json:"normal"`
}

func findingOf(f exam.Finding) findingJSON {
	j := findingJSON{Item: f.Item.String(), Site: f.Site.String(), Digit: f.Digit.String(), Joint: f.Joint.String(), Level: f.Level.String(),
		Side: f.Side.String(), Seen: f.Seen, Block: f.Block, Note: f.Note, Words: view.GradeWords(f), Normal: f.Normal()}
	if g, ok := f.Result.Grade(); ok {
		j.Grade = &g
	} else {
		r := f.Result.Reason().String()
		j.NotTested = &r
	}
	if f.How != exam.Examined {
		j.How = f.How.String()
	}
	return j
}

type measuredJSON struct {
	Measure string  `json:"measure"`
	Site    string  `json:"site,omitempty"`
	Joint   string  `json:"joint,omitempty"`
	Motion  string  `json:"motion,omitempty"`
	Value   float64 `json:"value"`
	Unit    string  `json:"unit"`
	At      float64 `json:"at,omitempty"`
}

func measuredOf(m exam.Measured) measuredJSON {
	return measuredJSON{Measure: m.Measure.String(), Site: m.Site.String(), Joint: m.Joint.String(), Motion: m.Motion, Value: m.Value,
		Unit: m.Measure.Info().Unit, At: m.At}
}

func (c *examShowCmd) Run(e *env) error {
	return e.with(func(s *storage.Store) error {
		v, err := e.visit(s, c.Visit)
		if err != nil {
			return err
		}
		r, err := s.Patient(v.Patient)
		if err != nil {
			return err
		}
		e.looked(s, v.Patient)
		if c.File {
			data, err := exam.EncodeFile(exam.FileOf(r.Patient, v))
			if err != nil {
				return err
			}
			_, err = e.out.Write(data)
			return err
		}
		upto := slices.DeleteFunc(slices.Clone(r.Visits), func(x exam.Visit) bool { return x.Examined.After(v.Examined) })
		alerts := view.AlertsOf(r.Patient, upto)
		if e.c.JSON {
			out := visitJSON{visitLine: visitLineOf(v), Patient: v.Patient, Sedation: v.Sedation.String(), Aid: v.Aid, Surface: v.Surface,
				Session: v.Session, Results: []findingJSON{}, Values: []measuredJSON{}, Treatments: some(v.Treatments), Home: some(v.Home),
				Report: v.Report, Note: v.Note, NextVisit: v.NextVisit, Amendments: some(v.Amendments), Answers: some(v.Answers), Alerts: some(alerts)}
			if v.State == exam.Closed {
				out.ClosedAt = &v.ClosedAt
			}
			for _, f := range v.Findings {
				out.Results = append(out.Results, findingOf(f))
			}
			for _, m := range v.Measures {
				out.Values = append(out.Values, measuredOf(m))
			}
			return e.printJSON(out)
		}
		e.protection(s)
		state := words.T("open")
		if v.State == exam.Closed {
			state = words.T("closed %s", v.ClosedAt.Format("2006-01-02 15:04"))
		}
		e.say("%s · %s · %s · %s", r.Patient.Name, v.Examined.Format("2006-01-02 15:04 -07:00"), v.Examiner, state)
		e.say("%s", conditions(v))
		for _, a := range alerts {
			e.say("%s", a.Line())
		}
		group := exam.Group(0)
		w := tabwriter.NewWriter(e.out, 0, 4, 2, ' ', 0)
		for _, f := range v.Findings {
			if g := f.Item.Info().Group; g != group {
				group = g
				fmt.Fprintf(w, "\n%s\n", words.Of(g.String()))
			}
			mark := ""
			if f.Abnormal() {
				mark = "*"
			}
			how := ""
			switch f.How {
			case exam.SameAsLast:
				how = words.T("copied from last visit")
			case exam.RestNormal:
				how = words.T("filled in a block")
			}
			fmt.Fprintf(w, "%s\t%s\t%s\t%s\n", mark, view.CellName(f.Key()), view.GradeWords(f), how)
		}
		if len(v.Measures) > 0 {
			units := e.units(s)
			fmt.Fprintf(w, "\n%s\n", words.T("Measures"))
			for _, m := range v.Measures {
				site := ""
				if m.Site != exam.NoSite && m.Site != exam.Midline {
					site = ", " + view.SiteName(m.Site)
				}
				fmt.Fprintf(w, "\t%s%s\t%s\t\n", view.MeasureName(m.Measure), site, view.MeasuredWords(m, units))
			}
		}
		if err := w.Flush(); err != nil {
			return err
		}
		if v.Note != "" {
			e.say("\n%s", v.Note)
		}
		return nil
	})
}

// conditions says under what a visit was examined.
func conditions(v exam.Visit) string {
	parts := []string{words.T("sedation: %s", words.Of(v.Sedation.String()))}
	if v.Aid != "" {
		parts = append(parts, words.T("aid: %s", words.Of(v.Aid)))
	}
	if v.Surface != "" {
		parts = append(parts, words.T("surface: %s", words.Of(v.Surface)))
	}
	if v.Session != "" {
		parts = append(parts, words.T("session: %s", words.Of(v.Session)))
	}
	return strings.Join(parts, ", ")
}

// examCloseCmd closes a visit.
type examCloseCmd struct {
	Visit    string `arg:"" help:"Id of the visit."`
	Examiner string `help:"Who closes it; the visit's examiner where not said."`
}

func (c *examCloseCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		v, err := e.visit(s, c.Visit)
		if err != nil {
			return err
		}
		if v.State == exam.Closed {
			return fmt.Errorf("%s", words.T("this visit is already closed"))
		}
		r, err := s.Patient(v.Patient)
		if err != nil {
			return err
		}
		if err := mayClose(r, v); err != nil {
			return err
		}
		who, err := e.examinerOr(s, c.Examiner, v.Examiner)
		if err != nil {
			return err
		}
		if _, err := s.Apply(e.ctx, who, storage.CloseEdit(v.Patient, v.ID, time.Now())); err != nil {
			return err
		}
		e.say("%s", words.T("Closed."))
		return nil
	})
}

// examAmendCmd changes findings after closing.
type examAmendCmd struct {
	Visit    string `arg:"" help:"Id of the visit."`
	File     string `arg:"" help:"Exam file with the findings and measures to change; - is standard input."`
	Reason   string `required:"" help:"Why the closed visit is changed."`
	Examiner string `help:"Who amends; the visit's examiner where not said."`
}

func (c *examAmendCmd) Run(e *env) error {
	f, err := e.readExam(c.File)
	if err != nil {
		return err
	}
	if strings.TrimSpace(c.Reason) == "" {
		return usage("%s", words.T("give a reason to amend a closed visit"))
	}
	return e.change(func(s *storage.Store) error {
		v, err := e.visit(s, c.Visit)
		if err != nil {
			return err
		}
		if v.State != exam.Closed {
			return fmt.Errorf("%s", words.T("this visit is still open; it needs no amendment"))
		}
		r, err := s.Patient(v.Patient)
		if err != nil {
			return err
		}
		var edits []storage.Edit
		for _, x := range f.Findings {
			if err := x.Validate(r.Patient.Species); err != nil {
				return fmt.Errorf("%s: %w", c.File, err)
			}
			if old, ok := v.Find(x.Key()); !ok || old != x {
				edits = append(edits, storage.FindingEdit(v.Patient, v.ID, x))
			}
		}
		for _, m := range f.Measures {
			edits = append(edits, storage.MeasureEdit(v.Patient, v.ID, m))
		}
		if len(edits) == 0 {
			e.say("%s", words.T("Nothing differs; nothing was changed."))
			return nil
		}
		who, err := e.examinerOr(s, c.Examiner, v.Examiner)
		if err != nil {
			return err
		}
		if _, err := s.Apply(e.ctx, who, storage.AmendEdits(v, c.Reason, edits...)...); err != nil {
			return err
		}
		e.say("%s", words.N(len(edits), "%d entry amended", "%d entries amended", len(edits)))
		return nil
	})
}

// examAnswerCmd answers an alert.
type examAnswerCmd struct {
	Visit    string `arg:"" help:"Id of the visit."`
	Rule     string `arg:"" help:"Rule of the alert, as exam show prints it."`
	Told     string `required:"" help:"Who was told."`
	Note     string `help:"What was agreed."`
	Examiner string `help:"Who told them; the visit's examiner where not said."`
}

func (c *examAnswerCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		v, err := e.visit(s, c.Visit)
		if err != nil {
			return err
		}
		r, err := s.Patient(v.Patient)
		if err != nil {
			return err
		}
		upto := slices.DeleteFunc(slices.Clone(r.Visits), func(x exam.Visit) bool { return x.Examined.After(v.Examined) })
		alerts := view.AlertsOf(r.Patient, upto)
		if !slices.ContainsFunc(alerts, func(a view.Alert) bool { return a.Rule == c.Rule }) {
			names := []string{}
			for _, a := range alerts {
				names = append(names, a.Rule)
			}
			if len(names) == 0 {
				return fmt.Errorf("%s", words.T("this visit raises no alert"))
			}
			return fmt.Errorf("%s", words.T("this visit raises no alert %q; it raises %s", c.Rule, strings.Join(names, ", ")))
		}
		who, err := e.examinerOr(s, c.Examiner, v.Examiner)
		if err != nil {
			return err
		}
		after := v
		after.Answers = append(slices.Clone(v.Answers), exam.Acknowledgement{Rule: c.Rule, Told: c.Told, Note: c.Note, Examiner: who, At: time.Now()})
		edits := storage.VisitEdits(v, after)
		if v.State == exam.Closed {
			edits = storage.AmendEdits(v, words.T("alert answered"), edits...)
		}
		if _, err := s.Apply(e.ctx, who, edits...); err != nil {
			return err
		}
		e.say("%s", words.T("Kept: %s was told.", c.Told))
		return nil
	})
}

// examWalkCmd lists what is asked today.
type examWalkCmd struct {
	Patient  string `arg:"" help:"Id or name of the patient."`
	Protocol string `help:"Protocol." default:"full-spinal" placeholder:"KEY"`
}

type stepJSON struct {
	Item     string `json:"item,omitempty"`
	Measure  string `json:"measure,omitempty"`
	Site     string `json:"site,omitempty"`
	Position string `json:"position"`
	Asked    bool   `json:"asked"`
	Barred   bool   `json:"barred,omitempty"`
	Why      string `json:"why,omitempty"`
	Due      bool   `json:"due,omitempty"`
}

func (c *examWalkCmd) Run(e *env) error {
	return e.with(func(s *storage.Store) error {
		r, err := e.patient(s, c.Patient)
		if err != nil {
			return err
		}
		pr, err := s.Practice()
		if err != nil {
			return err
		}
		protocol, ok := exam.FindProtocol(pr, c.Protocol)
		if !ok {
			return fmt.Errorf("%s", words.T("there is no protocol %q", c.Protocol))
		}
		today := exam.Visit{Patient: r.Patient.ID, Examined: time.Now()}
		var last *exam.Visit
		if n := len(r.Visits); n > 0 {
			last = &r.Visits[n-1]
		}
		steps := exam.Walk(r.Patient.Species, protocol, r.Patient, last, today)
		if e.c.JSON {
			out := struct {
				Protocol string     `json:"protocol"`
				Steps    []stepJSON `json:"steps"`
			}{protocol.Key, []stepJSON{}}
			for _, st := range steps {
				out.Steps = append(out.Steps, stepJSON{Item: st.Key.Item.String(), Measure: st.Measure.String(), Site: st.Key.Site.String(),
					Position: st.Position.String(), Asked: st.Asked, Barred: st.Barred, Why: st.Why, Due: st.Due})
			}
			return e.printJSON(out)
		}
		e.protection(s)
		pos, stage := exam.Position(255), exam.Stage(255)
		for _, st := range steps {
			if !st.Asked && !st.Barred {
				continue
			}
			if st.Position != pos || st.Stage != stage {
				pos, stage = st.Position, st.Stage
				e.say("\n%s (%s)", words.Of(stage.String()), words.Of(pos.String()))
			}
			name := view.CellName(st.Key)
			if st.Measure != exam.NoMeasure {
				name = view.MeasureName(st.Measure)
			}
			line := "  " + name
			if st.Barred {
				line += " — " + words.T("not safe: %s", st.Why)
			} else if st.Why != "" {
				line += " — " + words.Of(st.Why)
			}
			e.say("%s", line)
		}
		return nil
	})
}
