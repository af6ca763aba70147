package desk

import (
	"context"
	"errors"
	"slices"
	"strconv"
	"strings"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/widget"
	"gonum.org/v1/plot/vg"

	"cordwalk.example/cordwalk/app/chart"
	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
	"cordwalk.example/cordwalk/exam/localise"
)

// sideQuestion is today's visit as entered so far.
type sideQuestion struct{ visit exam.Visit }

// sideAnswer is what it means: the likely site, or why there is none.
type sideAnswer struct {
	result *localise.Result
	err    error
}

// examSide is the right part of the exam: alerts, the cord map, the likely site with what
// speaks for and against it, and the next test.
type examSide struct {
	widget.BaseWidget
	page *examPage

	alerts *fyne.Container
	head   *mark.Button
	host   *chartHost
	note   *mark.Para
	likely *mark.Para
	pro    *mark.Para
	con    *mark.Para
	nextB  *mark.Button
	warn   *mark.Para
	box    *fyne.Container
	lines  *fyne.Container
	scroll *mark.Scroll

	ask    *view.Newest[sideQuestion, sideAnswer]
	flags  *view.Newest[sideQuestion, []alertLine] // beside it: a red flag waits for nothing
	result *localise.Result
	found  []alertLine
	failed error
	opened bool // somebody asked for the map
	shut   bool // somebody closed it again
	ended  bool
	kg     float64
}

func newExamSide(p *examPage) *examSide {
	s := &examSide{page: p, alerts: mark.Column(look.Unit), likely: mark.NewPara("").Strong(), pro: mark.NewPara(""), con: mark.NewPara(""), warn: mark.NewPara("").In(look.InkSoft).As(look.Small)}
	s.head = mark.NewButton(words.T("Cord map"), "down", s.toggle).As(mark.Quiet).WithTip(words.T("Key m"))
	s.head.Side = true
	s.host = newChartHost(nil, fyne.NewSize(200, 260))
	s.host.hover = s.hover
	s.note = mark.NewPara("").In(look.InkSoft)
	s.nextB = mark.NewButton("", "right", p.goNext)
	s.nextB.Side = true
	s.lines = mark.Column(6, s.likely, s.pro, s.con, s.nextB, s.warn)
	s.box = mark.ColumnGrow(look.Unit, 3, s.alerts, s.head, s.note, s.host, s.lines)
	s.scroll = mark.NewScroll(s.box)
	for _, w := range p.file.Patient.Weights {
		s.kg = w.Kg
	}
	if m, ok := p.sheet.Visit().Measured(exam.Weight, exam.NoSite); ok {
		s.kg = m.Value
	}
	patient, others, engines := p.file.Patient, p.file.Visits, &p.win.app.engines
	engines.hold()
	s.ask = view.NewNewest(p.win.app.onUI, func(_ context.Context, q sideQuestion) (sideAnswer, error) {
		var out sideAnswer
		out.result, out.err = engines.compute(localise.OfVisit(patient, q.visit))
		return out, nil
	}, s.answered)
	s.flags = view.NewNewest(p.win.app.onUI, func(_ context.Context, q sideQuestion) ([]alertLine, error) {
		return alertsOf(patient, others, q.visit), nil
	}, func(found []alertLine, _ error) {
		s.found = found
		s.showAlerts()
		s.scroll.Reflow()
	})
	s.ExtendBaseWidget(s)
	return s
}

func (s *examSide) CreateRenderer() fyne.WidgetRenderer {
	return widget.NewSimpleRenderer(mark.Pad(look.Unit, look.Unit*2, s.scroll))
}

// close ends the reckoning and lets go of what it holds: the toolkit keeps the widgets of a page
// that was left for a while.
func (s *examSide) close() {
	if s.ended {
		return
	}
	s.ended = true
	engines := &s.page.win.app.engines
	go func() {
		s.flags.Close()
		s.ask.Close()
		engines.letGo()
	}()
	s.host.release()
	s.result = nil
}

func (s *examSide) open() bool {
	return !s.shut && (s.opened || s.page.sheet.MapOpen() || s.page.sheet.Closed())
}

// toggle opens or closes the map on request.
func (s *examSide) toggle() {
	if s.open() {
		s.shut, s.opened = true, false
	} else {
		s.shut, s.opened = false, true
	}
	s.update()
}

// update asks for the likely site of what is entered now.
func (s *examSide) update() {
	sheet := s.page.sheet
	q := sideQuestion{sheet.Visit()}
	s.flags.Ask(q)
	s.ask.Ask(q)
	s.show()
}

func (s *examSide) answered(a sideAnswer, _ error) {
	s.result, s.failed = a.result, a.err
	s.show()
}

func (s *examSide) show() {
	open := s.open()
	s.head.IconName = "down"
	if open {
		s.head.IconName = "up"
	}
	s.head.Refresh()
	s.showAlerts()
	if !open {
		s.host.Hide()
		s.lines.Hide()
		s.note.Words = words.T("Closed until half of the walk is done: a map seen early bends what is found late. Key m opens it.")
		s.note.Show()
		s.scroll.Reflow()
		return
	}
	s.lines.Show()
	r := s.result
	if r == nil {
		s.host.Hide()
		s.note.Show()
		var no *localise.Unsupported
		switch {
		case errors.As(s.failed, &no):
			s.note.Words = words.T("There are no published data to localise in this species.")
		case s.failed != nil:
			s.note.Words = s.failed.Error()
		default:
			s.note.Words = words.T("Working out the likely site…")
		}
		s.likely.Words, s.pro.Words, s.con.Words, s.warn.Words = "", "", "", ""
		s.nextB.Hide()
		s.scroll.Reflow()
		return
	}
	s.note.Hide()
	s.host.Show()
	s.host.set(chart.CordOf(s.page.file.Patient.Species, s.kg, r, ""))
	s.likely.Words = said(r.Summary)
	if r.Enough && len(r.Sites) > 0 {
		s.likely.Words = words.T("%s: %s", said(r.Summary), chanceWord(r.Sites[0].Probability))
	}
	s.pro.Words, s.con.Words = "", ""
	if f, ok := strongest(r, 1); ok {
		s.pro.Words = words.T("For: %s", f)
	}
	if f, ok := strongest(r, -1); ok {
		s.con.Words = words.T("Against: %s", f)
	}
	s.warn.Words = ""
	for _, w := range r.Warnings {
		if s.warn.Words != "" {
			s.warn.Words += "\n"
		}
		s.warn.Words += said(w)
	}
	s.nextB.Hide()
	if k, ok := s.next(); ok {
		s.nextB.Words = words.T("Next: %s", view.CellName(k))
		s.nextB.Tip = words.T("The test that would tell most. Key Enter")
		s.nextB.Show()
	}
	s.scroll.Reflow()
	s.Refresh()
}

// strongest returns the finding that speaks most for (sign 1) or against (sign -1) the leading site.
func strongest(r *localise.Result, sign float64) (string, bool) {
	best := localise.Evidence{}
	for _, e := range r.Evidence {
		if e.Decibans*sign > best.Decibans*sign && e.Decibans*sign > 0.5 {
			best = e
		}
	}
	if best.Item == "" {
		return "", false
	}
	return evidenceWords(best), true
}

func evidenceWords(e localise.Evidence) string {
	f := exam.Finding{Result: exam.Graded(int8(e.Grade))}
	f.Item, _ = exam.ParseItem(e.Item)
	f.Site, _ = exam.ParseSite(e.Site)
	f.Digit, _ = exam.ParseDigit(e.Digit)
	f.Joint, _ = exam.ParseJoint(e.Joint)
	f.Level, _ = exam.ParseVertebra(e.Level, 0)
	return view.Labelled(view.CellName(f.Key()), view.GradeWords(f))
}

// next returns the cell of the test that would tell most.
func (s *examSide) next() (exam.Key, bool) {
	if s.result == nil {
		return exam.Key{}, false
	}
	for _, n := range s.result.Next {
		i, err1 := exam.ParseItem(n.Item)
		site, err2 := exam.ParseSite(n.Site)
		if err1 == nil && err2 == nil {
			return exam.Key{Item: i, Site: site}, true
		}
	}
	return exam.Key{}, false
}

// showAlerts shows what asks for the veterinarian, at once and where it belongs. What was
// abnormal before and is not tested yet stands in one line while the walk goes on.
func (s *examSide) showAlerts() {
	var out []fyne.CanvasObject
	var still []string
	for _, a := range s.found {
		alert := a
		if alert.Unlooked && alert.Answered == "" && !s.page.sheet.Closed() {
			if !slices.Contains(still, view.LowerFirst(alert.Name)) {
				still = append(still, view.LowerFirst(alert.Name))
			}
			continue
		}
		out = append(out, alertBox(alert, func() { s.page.answer(alert) }, func() { s.page.explain(alert) }))
	}
	if len(still) > 0 {
		out = append(out, newPressable(cautionLine(words.T("Still to rule out: %s", strings.Join(still, ", "))), "", s.explainStill))
	}
	s.alerts.Objects = out
	if len(out) == 0 {
		s.alerts.Hide()
	} else {
		s.alerts.Show()
	}
	s.alerts.Refresh()
}

// explainStill lists what was abnormal before and is not tested yet.
func (s *examSide) explainStill() {
	var lines []fyne.CanvasObject
	for _, a := range s.found {
		alert := a
		if alert.Unlooked && alert.Answered == "" {
			lines = append(lines, alertBox(alert, func() { s.page.answer(alert) }, func() { s.page.explain(alert) }))
		}
	}
	s.page.win.showSheet(words.T("Still to rule out"), mark.Column(look.Unit, lines...), 700)
}

// unanswered lists the alerts that must be answered before the visit can be closed. They are looked for anew: the
// visit may be closed sooner after a key than the answer to that key comes.
func (s *examSide) unanswered() []string {
	var out []string
	for _, a := range alertsOf(s.page.file.Patient, s.page.file.Visits, s.page.sheet.Visit()) {
		if a.Must && a.Answered == "" {
			out = append(out, a.Title)
		}
	}
	return out
}

// hover explains a place of the map: the segment, what it serves, what was found there.
func (s *examSide) hover(x, y, w, h vg.Length, st chart.Style) string {
	m, ok := s.host.chart.(chart.CordMap)
	if !ok || s.result == nil {
		return ""
	}
	hit, ok := m.Hit(w, h, x, y, st)
	if !ok {
		return ""
	}
	if hit.Segment < 0 {
		if hit.Vertebra >= 0 {
			return words.T("Vertebra %s", m.Vertebrae[hit.Vertebra].Name)
		}
		return ""
	}
	seg := m.Segments[hit.Segment]
	p := seg.Left
	if hit.Side == exam.Right {
		p = seg.Right
	}
	out := words.T("Segment %s, %s: damaged with a probability of %s %%", seg.Name, view.SiteName(hit.Side), strconv.Itoa(int(p*100+0.5)))
	id, err := anatomy.ParseSegment(seg.Name, s.page.file.Patient.Species)
	if err != nil {
		return out
	}
	n := 0
	sp := s.page.file.Patient.Species
	for _, f := range s.page.sheet.Visit().Findings {
		side := f.Site.Side()
		if !f.Result.Tested() || n >= 8 || side != hit.Side && side != exam.Midline {
			continue
		}
		for _, wgt := range anatomy.ArcOfFinding(sp, f) {
			if wgt.Segment == id && wgt.Weight > 0.2 {
				out += "\n" + view.Labelled(view.CellName(f.Key()), view.GradeWords(f))
				n++
				break
			}
		}
	}
	if n == 0 {
		out += "\n" + words.T("nothing tested here that it serves")
	}
	return out
}
