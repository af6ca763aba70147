package main

import (
	"fmt"
	"strings"
	"time"

	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// progressCmd shows the course of an animal.
type progressCmd struct {
	Patient string `arg:"" optional:"" help:"Id or name of the patient."`
	Series  string `help:"File with a JSON list of exams of one animal instead; - is standard input." placeholder:"FILE"`
	Since   string `help:"Compare the last visit with the one at or after this day; the first where not said." placeholder:"DATE"`
}

// seriesMax bounds a file of exams.
const seriesMax = 64 << 20

func (c *progressCmd) Run(e *env) error {
	since, err := exam.ParseDate(c.Since)
	if err != nil {
		return usage("--since: %s", err)
	}
	switch {
	case (c.Patient == "") == (c.Series == ""):
		return usage("%s", words.T("name a patient, or a file with --series FILE"))
	case c.Series != "":
		data, err := e.readInput(c.Series, seriesMax)
		if err != nil {
			return err
		}
		files, warnings, err := exam.DecodeSeries(data)
		if err != nil {
			return fmt.Errorf("%s: %w", c.Series, err)
		}
		for _, w := range warnings {
			e.warn(c.Series + ": " + w)
		}
		if len(files) == 0 {
			return fmt.Errorf("%s", words.T("%s holds no exam", c.Series))
		}
		p, visits := view.OfSeries(files)
		return e.progressOf(p, visits, since, warnings)
	}
	return e.with(func(s *storage.Store) error {
		r, err := e.patient(s, c.Patient)
		if err != nil {
			return err
		}
		if len(r.Visits) == 0 {
			return fmt.Errorf("%s", words.T("%s has no visit yet", r.Patient.Name))
		}
		if !e.c.JSON {
			e.protection(s)
		}
		return e.progressOf(r.Patient, r.Visits, since, gaps(r))
	})
}

// bars draws a value of 0 to 100 in one sign.
func bars(v float64) string {
	signs := []rune("▁▂▃▄▅▆▇█")
	i := int(v / 100 * float64(len(signs)))
	return string(signs[max(0, min(i, len(signs)-1))])
}

// scoreTable prints the plain segment score: a row for each segment with a value, a column
// for each visit, left and right.
func (e *env) scoreTable(p exam.Patient, visits []exam.Visit) {
	scores := view.PlainScores(p.Species, visits)
	n := len(visits)
	cols := make([][]view.SegmentValue, n)
	for i := range visits {
		cols[i] = scores(i)
	}
	if n == 0 || len(cols[0]) == 0 {
		e.say("%s", words.T("There are no reflex arcs on record for a %s, so no segment scores.", view.SpeciesName(p.Species)))
		return
	}
	e.say("%s", words.T("Segment score, %s to %s (left, right; 100 is normal, · is too little tested):", shortDay(visits[0].Examined), shortDay(visits[n-1].Examined)))
	for k := range cols[0] {
		known := false
		var left, right strings.Builder
		for i := range cols {
			for _, side := range []struct {
				b *strings.Builder
				v view.SegmentValue
			}{{&left, cols[i][k]}, {&right, cols[i][k]}} {
				v := side.v.Left
				if side.b == &right {
					v = side.v.Right
				}
				if v.Known {
					known = true
					side.b.WriteString(bars(v.Value))
				} else {
					side.b.WriteString("·")
				}
			}
		}
		if !known {
			continue
		}
		last := func(pick func(view.SegmentValue) (bool, float64)) string {
			for i := n - 1; i >= 0; i-- {
				if ok, v := pick(cols[i][k]); ok {
					return fmt.Sprintf("%3.0f", v)
				}
			}
			return "  –"
		}
		e.say("  %-4s %s %s   %s %s", cols[0][k].Segment, left.String(), last(func(s view.SegmentValue) (bool, float64) { return s.Left.Known, s.Left.Value }),
			right.String(), last(func(s view.SegmentValue) (bool, float64) { return s.Right.Known, s.Right.Value }))
	}
}

// progressJSON is the course in JSON.
type progressJSON struct {
	Segments []segmentJSON `json:"segments"`
	Alerts   []view.Alert  `json:"alerts"`
	Warnings []string      `json:"warnings"`
}

type segmentJSON struct {
	Segment string      `json:"segment"`
	Side    string      `json:"side"`
	Points  []pointJSON `json:"points"`
}

type pointJSON struct {
	Examined time.Time `json:"examined"`
	Score    *float64  `json:"score"` // the plain segment score; null: too little tested
	Findings int       `json:"findings"`
}

// progressOf prints the course of an animal.
func (e *env) progressOf(p exam.Patient, visits []exam.Visit, since exam.Date, warnings []string) error {
	alerts := view.AlertsOf(p, visits)
	if !e.c.JSON {
		for _, w := range warnings {
			e.say("%s", w)
		}
		for _, a := range alerts {
			e.say("%s", a.Line())
		}
		e.scoreTable(p, visits)
		return nil
	}
	out := progressJSON{Segments: []segmentJSON{}, Alerts: some(alerts), Warnings: some(warnings)}
	scores := view.PlainScores(p.Species, visits)
	for i, v := range visits {
		for k, row := range scores(i) {
			for s, side := range []string{"left", "right"} {
				at := 2*k + s
				if i == 0 {
					out.Segments = append(out.Segments, segmentJSON{Segment: row.Segment, Side: side})
				}
				val := row.Left
				if s == 1 {
					val = row.Right
				}
				pt := pointJSON{Examined: v.Examined, Findings: val.Count}
				if val.Known {
					pt.Score = &val.Value
				}
				out.Segments[at].Points = append(out.Segments[at].Points, pt)
			}
		}
	}
	return e.printJSON(out)
}
