package desk

import (
	"math"
	"strings"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/progress"
)

// figures shows what stands beside the model: the published scales, and the plain statistics of
// every measure, each with its source.
func (p *coursePage) figures() {
	if p.result == nil {
		p.win.foot.say(words.T("Working out the course…"))
		return
	}
	r := *p.result
	lines := []fyne.CanvasObject{mark.Heading(words.T("Published scales")).AtLeast(60), mark.Rule()}
	shown := 0
	for _, s := range r.Scales {
		if o := scaleLine(s); o != nil {
			lines = append(lines, o, mark.Rule())
			shown++
		}
	}
	if shown == 0 {
		lines = append(lines, mark.NewPara(words.T("No scale can be worked out from what was tested.")).In(look.InkSoft))
	}
	lines = append(lines, mark.Space(1, look.Unit), mark.Heading(words.T("Measures")).AtLeast(60), mark.Rule())
	if len(r.Plain) == 0 {
		lines = append(lines, mark.NewPara(words.T("Nothing was measured twice.")).In(look.InkSoft))
	}
	for _, m := range r.Plain {
		lines = append(lines, measureFigures(m), mark.Rule())
	}
	p.win.showSheet(words.T("Figures"), mark.Column(look.Unit, lines...), 900)
}

func figureRow(name, value, note, source string) fyne.CanvasObject {
	right := mark.Column(2, mark.NewPara(value))
	if note != "" {
		right.Add(mark.NewPara(note).In(look.InkSoft))
	}
	if source != "" {
		right.Add(mark.NewPara(words.T("Source: %s", source)).In(look.InkSoft).As(look.Small))
	}
	return mark.RowTop(look.Unit*2, []float32{1, 2}, mark.NewPara(name).Strong(), right)
}

func rounded(x float64) string { return plainNumber(math.Round(x*100) / 100) }

// scaleLine says a scale's first and last score; nil where none of its points can be scored.
func scaleLine(s progress.ScaleCourse) fyne.CanvasObject {
	score := func(pt progress.ScalePoint) string {
		switch {
		case pt.Value != nil:
			return rounded(*pt.Value)
		case pt.Low != nil && pt.High != nil:
			return words.T("%s to %s", rounded(*pt.Low), rounded(*pt.High))
		}
		return ""
	}
	var first, last *progress.ScalePoint
	for i := range s.Points {
		if score(s.Points[i]) == "" {
			continue
		}
		if first == nil {
			first = &s.Points[i]
		}
		last = &s.Points[i]
	}
	if last == nil {
		return nil
	}
	value := words.T("%s on %s (best: %s)", score(*last), view.Day(last.Examined), rounded(s.Best))
	if first != last {
		value += "; " + words.T("%s on %s", score(*first), view.Day(first.Examined))
	}
	note := ""
	if len(last.Missing) > 0 {
		note = words.T("not tested: %s", strings.Join(last.Missing, ", "))
	}
	if s.MDC95 != nil {
		if note != "" {
			note += "; "
		}
		note += words.T("a change of less than %s may be noise", rounded(*s.MDC95))
	}
	name := words.Of(s.Name)
	if site, err := exam.ParseSite(s.Site); err == nil {
		name += ", " + view.SiteName(site)
	}
	if s.Variant != "" {
		name += " (" + words.Of(s.Variant) + ")"
	}
	return figureRow(name, value, note, s.Source)
}

// measureFigures says a measure's change, its trend and its slope.
func measureFigures(m progress.Plain) fyne.CanvasObject {
	kind, _ := exam.ParseMeasure(m.Measure)
	name := view.MeasureName(kind)
	if site, err := exam.ParseSite(m.Site); err == nil {
		name += ", " + view.SiteName(site)
	}
	if m.Examiner != "" {
		name += " (" + m.Examiner + ")"
	}
	unit := m.Unit
	if unit == "1" {
		unit = ""
	}
	n := len(m.Values)
	value := ""
	if n > 0 {
		value = strings.TrimSpace(words.T("%s %s on %s", rounded(m.Values[n-1].Value), unit, view.Day(m.Values[n-1].Examined)))
	}
	if m.Change != nil {
		value += "; " + words.T("change since %s: %s", view.Day(m.Values[0].Examined), rounded(*m.Change))
	}
	if m.Verdict != "" {
		value += " (" + words.Of(m.Verdict) + ")"
	}
	var notes []string
	if m.TheilSen != nil {
		s := words.T("slope %s a week", rounded(m.TheilSen.PerWeek))
		if m.TheilSen.Low != nil && m.TheilSen.High != nil {
			s = words.T("slope %s a week (%s to %s)", rounded(m.TheilSen.PerWeek), rounded(*m.TheilSen.Low), rounded(*m.TheilSen.High))
		}
		notes = append(notes, s)
	}
	if t := m.MannKendall; t != nil {
		if t.Enough {
			notes = append(notes, words.T("trend: p = %s (Mann–Kendall)", rounded(t.P)))
		} else {
			notes = append(notes, words.T("too few visits for a trend"))
		}
	}
	if m.MDC95 != nil {
		notes = append(notes, words.T("a change of less than %s may be noise", rounded(*m.MDC95)))
	}
	return figureRow(name, value, strings.Join(notes, "; "), m.Source)
}
