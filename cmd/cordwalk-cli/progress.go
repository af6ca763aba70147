package main

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"

	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/alert"
	"cordwalk.example/cordwalk/exam/progress"
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
		return e.progressOf(p, visits, progress.Options{}, since, warnings)
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
		cases, err := e.histories(s)
		if err != nil {
			return err
		}
		return e.progressOf(r.Patient, r.Visits, progress.Options{Practice: view.Repeatability(cases)}, since, gaps(r))
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

// progressOf prints the course of an animal.
func (e *env) progressOf(p exam.Patient, visits []exam.Visit, o progress.Options, since exam.Date, warnings []string) error {
	if t, ok := since.Time(); ok {
		o.Since = time.Date(t.Year(), t.Month(), t.Day(), 0, 0, 0, 0, visits[len(visits)-1].Examined.Location())
	}
	res, err := progress.Analyse(progress.Series{Patient: p, Visits: visits}, o)
	if err != nil {
		return err
	}
	alerts := view.AlertsOf(p, visits)
	for _, a := range alerts {
		if !a.Answered {
			res.Alerts = append(res.Alerts, progress.Alert{Rule: a.Rule, Seen: a.Seen, Urgency: a.Urgency, Words: a.Words, Source: a.Source})
		}
	}
	if res.Change != nil {
		first := visits[0]
		for _, v := range visits {
			if v.Examined.Equal(res.Change.Since) {
				first = v
			}
		}
		if f, ok := alert.Decline(res.Change.Worse, first, visits[len(visits)-1]); ok && f.Open() {
			res.Alerts = append(res.Alerts, progress.Alert{Rule: f.Rule, Seen: f.Seen, Urgency: f.Urgency.String(), Words: f.Words(), Source: f.Source})
		}
	}
	res.Notes = append(res.Notes, warnings...)
	if e.c.JSON {
		return e.printLarge(res)
	}
	for _, n := range res.Notes {
		e.say("%s", words.T("Note: %s", sheet.Say("", n)))
	}
	for _, a := range res.Alerts {
		e.say("%s %s", view.UrgencyWords(a.Urgency), sheet.Say("", a.Words))
	}
	if s := view.Sentence(res); s != "" {
		e.say("%s", s)
	}
	for _, l := range res.Limbs {
		if l.Change != nil {
			e.say("  %s", sheet.Say("", l.Change.Words))
		}
	}
	if res.Plateau != nil && res.Plateau.Named {
		e.say("%s", sheet.Say("", res.Plateau.Words))
	}
	if res.Relapse != nil && res.Relapse.Probability > 0.5 {
		e.say("%s", sheet.Say("", res.Relapse.Words))
	}
	for _, g := range res.Goals {
		chance := sheet.Say("", g.Why)
		if g.Probability != nil {
			chance = percent(*g.Probability)
		}
		if r := g.Reading; r != nil {
			chance = words.T("%[1]s (a straight line through the values says %[2]s to %[3]s)", chance, figure(r.Low), figure(r.High))
		}
		e.say("  %s", words.T("Goal %q, by %s: %s", g.Words, view.DateWords(exam.Date(g.By)), chance))
	}
	if n := len(res.Whole.Forecast); n > 0 {
		f := res.Whole.Forecast[n-1]
		e.say("%s", words.T("Forecast for %s: function %.0f %% (%.0f to %.0f)", view.Day(f.On), f.Function, f.Low, f.High))
	}
	e.say("")
	e.functionTable(res)
	e.say("")
	e.scoreTable(p, visits)
	for _, s := range res.Scales {
		if len(s.Points) == 0 {
			continue
		}
		last, name := s.Points[len(s.Points)-1], words.Of(s.Name)
		if site, err := exam.ParseSite(s.Site); err == nil && site != exam.NoSite {
			name += ", " + view.SiteName(site)
		}
		missing := make([]string, len(last.Missing))
		for i, m := range last.Missing {
			missing[i] = sheet.Say("", m)
		}
		switch {
		case last.Value != nil:
			e.say("%s", words.T("%s: %s", name, figure(*last.Value)))
		case last.Low != nil && last.High != nil:
			e.say("%s", words.T("%s: %s to %s, missing: %s", name, figure(*last.Low), figure(*last.High), strings.Join(missing, ", ")))
		}
	}
	e.say("%s", words.T("This supports and never replaces the veterinarian."))
	return nil
}

// figure writes a number with at most two decimals, in the language in use.
func figure(x float64) string {
	return words.Decimal("", strconv.FormatFloat(math.Round(100*x)/100, 'f', -1, 64))
}

// functionTable prints the model's function of the limbs over the visits, with today's band.
func (e *env) functionTable(r progress.Result) {
	if len(r.Limbs) == 0 {
		return
	}
	e.say("%s", words.T("Function of the limbs by the model in percent, today's with its 90-percent band:"))
	for _, l := range r.Limbs {
		name := l.Limb
		if site, err := exam.ParseSite(l.Limb); err == nil {
			name = view.SiteName(site)
		}
		var b strings.Builder
		for _, pt := range l.Points {
			b.WriteString(bars(pt.Function))
		}
		last := l.Points[len(l.Points)-1]
		e.say("  %-15s %s  %3.0f (%.0f–%.0f)", name, b.String(), last.Function, last.Low, last.High)
	}
}
