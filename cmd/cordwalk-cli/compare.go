package main

import (
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

// compareCmd compares two visits.
type compareCmd struct {
	Patient string `arg:"" help:"Id or name of the patient."`
	From    string `help:"The earlier visit: its id, or first; the one before the later where not said." placeholder:"VISIT"`
	To      string `help:"The later visit; the last where not said." placeholder:"VISIT"`
	All     bool   `help:"Print what stayed normal too."`
}

type compareJSON struct {
	Patient  exam.ID         `json:"patient"`
	Before   visitRef        `json:"before"`
	After    visitRef        `json:"after"`
	Days     float64         `json:"days"`
	Unlike   []string        `json:"unlike"`
	Words    string          `json:"words"`
	Overall  string          `json:"overall"`
	Counts   map[string]int  `json:"counts"`
	Changes  []changeJSON    `json:"changes"`
	Measures []measureChange `json:"measures"`
	Missing  []string        `json:"missing"`
}

type visitRef struct {
	Visit    exam.ID   `json:"visit"`
	Examined time.Time `json:"examined"`
	Examiner string    `json:"examiner"`
}

type changeJSON struct {
	Section string `json:"section"` // not-looked-at, worse, better, different, new, same, normal or once
	Item    string `json:"item"`
	Site    string `json:"site"`
	Digit   string `json:"digit,omitempty"`
	Joint   string `json:"joint,omitempty"`
	Before  *int8  `json:"before"` // null: not tested
	After   *int8  `json:"after"`
	Change  string `json:"change"`
	Small   bool   `json:"small,omitempty"` // one step: may be exam noise
	Weak    string `json:"weak,omitempty"`
	Words   string `json:"words"`
}

type measureChange struct {
	Measure string   `json:"measure"`
	Site    string   `json:"site,omitempty"`
	Unit    string   `json:"unit"`
	Before  *float64 `json:"before"`
	After   *float64 `json:"after"`
	Change  *float64 `json:"change,omitempty"`
	Unlike  string   `json:"unlike,omitempty"`
}

// pick finds the two visits to compare.
func (c *compareCmd) pick(r storage.Record) (before, after exam.Visit, err error) {
	if len(r.Visits) < 2 {
		return before, after, fmt.Errorf("%s", words.N(len(r.Visits), "%s has %d visit; two are needed to compare", "%s has %d visits; two are needed to compare", r.Patient.Name, len(r.Visits)))
	}
	find := func(word string) (int, error) {
		i := slices.IndexFunc(r.Visits, func(v exam.Visit) bool { return v.ID.String() == strings.ToLower(word) })
		if i < 0 {
			return 0, fmt.Errorf("%s", words.T("%s has no visit %s", r.Patient.Name, word))
		}
		return i, nil
	}
	j := len(r.Visits) - 1
	if c.To != "" && c.To != "last" {
		if j, err = find(c.To); err != nil {
			return before, after, err
		}
	}
	i := j - 1
	switch c.From {
	case "":
	case "first":
		i = 0
	default:
		if i, err = find(c.From); err != nil {
			return before, after, err
		}
	}
	if i < 0 || i == j {
		return before, after, fmt.Errorf("%s", words.T("these are not two visits, the earlier one first"))
	}
	if i > j {
		i, j = j, i
	}
	return r.Visits[i], r.Visits[j], nil
}

func (c *compareCmd) Run(e *env) error {
	return e.with(func(s *storage.Store) error {
		r, err := e.patient(s, c.Patient)
		if err != nil {
			return err
		}
		before, after, err := c.pick(r)
		if err != nil {
			return err
		}
		return e.compare(s, r, before, after, c.All)
	})
}

func (e *env) compare(s *storage.Store, r storage.Record, before, after exam.Visit, all bool) error {
	cmp := view.NewCompare(r.Patient, before, after)
	if e.c.JSON {
		out := compareJSON{Patient: r.Patient.ID, Before: visitRef{before.ID, before.Examined, before.Examiner},
			After: visitRef{after.ID, after.Examined, after.Examiner}, Days: cmp.Days, Unlike: some(cmp.Unlike), Words: cmp.Words,
			Overall: cmp.Overall.Direction.String(), Counts: map[string]int{}, Changes: []changeJSON{}, Measures: []measureChange{}, Missing: gaps(r)}
		for sec := view.NotLookedAt; sec <= view.OnlyOnce; sec++ {
			out.Counts[sec.String()] = cmp.Count(sec)
		}
		grade := func(f exam.Finding) *int8 {
			if g, ok := f.Result.Grade(); ok {
				return &g
			}
			return nil
		}
		for _, x := range cmp.Rows {
			out.Changes = append(out.Changes, changeJSON{Section: x.Section.String(), Item: x.Key.Item.String(), Site: x.Key.Site.String(),
				Digit: x.Key.Digit.String(), Joint: x.Key.Joint.String(), Before: grade(x.Before), After: grade(x.After),
				Change: x.Mark.Direction.String(), Small: x.Mark.Hollow, Weak: x.Weak, Words: x.Name + ": " + x.BeforeWords + " → " + x.AfterWords})
		}
		for _, m := range cmp.Measures {
			j := measureChange{Measure: m.After.Measure.String(), Site: m.After.Site.String(), Unit: m.Unit, Unlike: m.Unlike}
			if !m.HasAfter {
				j.Measure, j.Site = m.Before.Measure.String(), m.Before.Site.String()
			}
			if m.HadBefore {
				j.Before = &m.Before.Value
			}
			if m.HasAfter {
				j.After = &m.After.Value
			}
			if m.HadBefore && m.HasAfter {
				j.Change = &m.Change
			}
			out.Measures = append(out.Measures, j)
		}
		return e.printJSON(out)
	}
	e.protection(s)
	e.say("%s: %s → %s (%s)", r.Patient.Name, shortDay(before.Examined), shortDay(after.Examined),
		words.N(int(cmp.Days+0.5), "%d day", "%d days", int(cmp.Days+0.5)))
	e.say("%s", cmp.Words)
	if len(cmp.Unlike) > 0 {
		e.say("%s", words.T("Not like for like: %s", strings.Join(cmp.Unlike, "; ")))
	}
	for _, g := range gaps(r) {
		e.say("%s", g)
	}
	w := tabwriter.NewWriter(e.out, 0, 4, 2, ' ', 0)
	section := view.Section(255)
	for _, x := range cmp.Rows {
		if (x.Section == view.StayedNormal || x.Section == view.OnlyOnce) && !all {
			continue
		}
		if x.Section != section {
			section = x.Section
			fmt.Fprintf(w, "\n%s\n", section.Words())
		}
		note := x.Mark.Word
		if x.Mark.Hollow {
			note += ", " + words.T("one step: may be exam noise")
		}
		if x.Weak != "" {
			note += ", " + x.Weak
		}
		fmt.Fprintf(w, "  %s %s\t%s\t→ %s\t%s\n", sign(x.Mark), x.Name, x.BeforeWords, x.AfterWords, note)
	}
	if len(cmp.Measures) > 0 {
		fmt.Fprintf(w, "\n%s\n", words.T("Measures"))
		units := e.units(s)
		value := func(has bool, m exam.Measured) string {
			if !has {
				return words.T("not measured")
			}
			return view.MeasuredWords(m, units)
		}
		for _, m := range cmp.Measures {
			fmt.Fprintf(w, "    %s\t%s\t→ %s\t%s\n", m.Name, value(m.HadBefore, m.Before), value(m.HasAfter, m.After), strings.Trim(m.ChangeIn(units)+" "+m.Unlike, " "))
		}
	}
	return w.Flush()
}

// sign is the change mark in one letter.
func sign(m view.ChangeMark) string {
	switch m.Shape {
	case view.WedgeUp:
		return "▲"
	case view.WedgeDown:
		return "▼"
	case view.Line:
		return "–"
	case view.Ring:
		return "○"
	}
	return "?"
}
