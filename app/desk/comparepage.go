package desk

import (
	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// comparePage answers: what changed between these two days?
type comparePage struct {
	win           *window
	file          File
	before, after exam.ID
	root          *fyne.Container
	body          *mark.Scroll
	head          *fyne.Container
	open          map[view.Section]bool
	maps          mapsBeside
}

func newComparePage(w *window, r view.Route) *comparePage {
	p := &comparePage{win: w, file: w.file, before: r.Other, after: r.Visit, head: mark.Column(look.Unit), open: map[view.Section]bool{}}
	for s := view.NotLookedAt; s <= view.StayedSame; s++ {
		p.open[s] = true
	}
	p.maps.page = p
	n := len(p.file.Visits)
	if _, ok := p.file.visit(p.after); !ok && n > 0 {
		p.after = p.file.Visits[n-1].ID
	}
	if _, ok := p.file.visit(p.before); !ok && n > 1 {
		p.before = p.file.Visits[n-2].ID
	}
	p.body = mark.NewScroll(mark.Column(0))
	p.root = mark.Pad(look.Unit*1.5, look.Unit*2, mark.ColumnGrow(look.Unit, 1, p.head, p.body))
	p.build()
	return p
}

func (p *comparePage) content() fyne.CanvasObject { return p.root }
func (p *comparePage) shown()                     { p.win.win.Canvas().Unfocus() }
func (p *comparePage) left()                      { p.maps.close() }

// days returns the two visits, the earlier first.
func (p *comparePage) days() [2]exam.Visit {
	a, _ := p.file.visit(p.before)
	b, _ := p.file.visit(p.after)
	return [2]exam.Visit{a, b}
}

func (p *comparePage) help() []view.KeyHelp {
	return []view.KeyHelp{
		{Keys: "f", Does: words.T("the first visit against the last")},
		{Keys: "l", Does: words.T("the last two visits")},
		{Keys: "[ ]", Does: words.T("an earlier or later visit at the left")},
		{Keys: "a", Does: words.T("show all rows, or only those that changed")},
		{Keys: "m", Does: words.T("open or close the cord map")},
	}
}

func (p *comparePage) typedRune(r rune) bool {
	n := len(p.file.Visits)
	if n < 2 {
		return false
	}
	switch r {
	case 'f':
		p.set(p.file.Visits[0].ID, p.file.Visits[n-1].ID)
	case 'l':
		p.set(p.file.Visits[n-2].ID, p.file.Visits[n-1].ID)
	case '[', ']':
		d := 1
		if r == '[' {
			d = -1
		}
		for i, v := range p.file.Visits {
			if v.ID == p.before && i+d >= 0 && i+d < n && p.file.Visits[i+d].ID != p.after {
				p.set(p.file.Visits[i+d].ID, p.after)
				break
			}
		}
	case 'a':
		on := !p.open[view.StayedNormal]
		for s := view.StayedNormal; s <= view.OnlyOnce; s++ {
			p.open[s] = on
		}
		p.build()
	case 'm':
		p.maps.toggle()
	default:
		return false
	}
	return true
}

func (p *comparePage) typedKey(k fyne.KeyName) bool {
	switch k {
	case fyne.KeyDown:
		p.body.By(80)
	case fyne.KeyUp:
		p.body.By(-80)
	case fyne.KeyPageDown, fyne.KeySpace:
		p.body.By(400)
	case fyne.KeyPageUp:
		p.body.By(-400)
	default:
		return false
	}
	return true
}

func (p *comparePage) set(before, after exam.ID) {
	p.before, p.after = before, after
	if a, ok := p.file.visit(before); ok {
		if b, ok2 := p.file.visit(after); ok2 && a.Examined.After(b.Examined) {
			p.before, p.after = after, before
		}
	}
	p.build()
}

func (p *comparePage) build() {
	a, okA := p.file.visit(p.before)
	b, okB := p.file.visit(p.after)
	if !okA || !okB || p.before == p.after {
		p.head.Objects = []fyne.CanvasObject{mark.Title(words.T("Compare")).AtLeast(80)}
		p.head.Refresh()
		say := words.T("There is one visit so far; with the second one, this screen says what changed.")
		if len(p.file.Visits) == 0 {
			say = words.T("There is no visit yet. The first exam is the baseline for all that follow.")
		}
		p.body.SetContent(mark.Column(look.Unit*2, mark.NewPara(say), mark.Left(mark.NewButton(words.T("Start exam"), "exam", func() { p.win.to(view.ScreenExam) }).As(mark.Main))))
		return
	}
	c := view.NewCompare(p.file.Patient, a, b)
	shown, ids := []string{}, []string{}
	for i := len(p.file.Visits) - 1; i >= 0; i-- {
		v := p.file.Visits[i]
		word := words.T("%s, visit %d", view.Day(v.Examined), i+1)
		if v.State == exam.Open {
			word = words.T("%s, visit %d, not closed", view.Day(v.Examined), i+1)
		}
		shown, ids = append(shown, word), append(ids, v.ID.String())
	}
	pick := func(now exam.ID, set func(exam.ID)) fyne.CanvasObject {
		return mark.Choice(shown, ids, now.String(), func(s string) {
			if id, err := exam.ParseID(s); err == nil && id != now {
				set(id)
			}
		})
	}
	first := mark.NewButton(words.T("First and last"), "", func() { p.typedRune('f') }).WithTip(words.T("Key f"))
	last := mark.NewButton(words.T("Last two"), "", func() { p.typedRune('l') }).WithTip(words.T("Key l"))
	picks := mark.Column(look.Unit, mark.Row(look.Unit, []float32{1, 0, 1}, pick(p.before, func(id exam.ID) { p.set(id, p.after) }), mark.NewChange(c.Overall, 24),
		pick(p.after, func(id exam.ID) { p.set(p.before, id) })), mark.Wrapped(look.Unit, last, first))
	if look.Scale() <= 1.3 {
		picks = mark.Row(look.Unit, []float32{1, 0, 0}, picks.Objects[0], last, first)
	}
	sentence := mark.NewPara(c.Words).As(look.Head).Strong()
	text := []fyne.CanvasObject{sentence}
	if c.Overall.Word != "" {
		text = append(text, mark.NewPara(words.T("The animal as a whole: %s. %d days lie between.", c.Overall.Word, int(c.Days+0.5))))
	}
	for _, u := range c.Unlike {
		text = append(text, cautionLine(words.T("Not like for like: %s", u)))
	}
	for _, m := range p.file.Missing {
		text = append(text, cautionLine(said(m)))
	}
	bodies := mark.Row(look.Unit*2, []float32{0, 0, 1}, mark.NewBody(c.BeforeCross, p.file.Patient.Species, 150), mark.NewBody(c.AfterCross, p.file.Patient.Species, 150), mark.Column(look.Unit, text...))
	p.head.Objects = []fyne.CanvasObject{picks, bodies}
	p.head.Refresh()
	var rows []fyne.CanvasObject
	if pictures := newPhotosBeside(p.win, a, b); pictures != nil {
		rows = append(rows, pictures)
	}
	section := view.Section(255)
	for _, r := range c.Rows {
		if r.Section != section {
			section = r.Section
			rows = append(rows, p.sectionHead(c, section))
		}
		if p.open[section] {
			rows = append(rows, newCompareLine(r))
		}
	}
	if len(c.Measures) > 0 {
		rows = append(rows, mark.Pad(look.Unit, 0, mark.Heading(words.T("Measures")).AtLeast(60)), mark.Rule())
		for _, m := range c.Measures {
			rows = append(rows, measureLine(m, p.win.app.practice.Units()))
		}
	}
	rows = append(rows, p.maps.section(a, b))
	p.body.SetContent(mark.Column(0, rows...))
	p.root.Refresh()
}

func cautionLine(s string) fyne.CanvasObject {
	return mark.Row(6, []float32{0, 1}, iconImage("caution", look.Worse, 18), mark.NewPara(s))
}

func (p *comparePage) sectionHead(c *view.Compare, s view.Section) fyne.CanvasObject {
	shape := view.NoShape
	switch s {
	case view.GotWorse:
		shape = view.WedgeDown
	case view.GotBetter:
		shape = view.WedgeUp
	case view.IsDifferent:
		shape = view.Ring
	case view.StayedSame, view.StayedNormal:
		shape = view.Line
	}
	icon := "up"
	if !p.open[s] {
		icon = "down"
	}
	b := mark.NewButton(words.T("%s (%d)", s.Words(), c.Count(s)), icon, func() { p.open[s] = !p.open[s]; p.build() }).As(mark.Quiet)
	b.Side = true
	line := mark.Row(look.Unit, []float32{0, 1}, mark.NewChange(view.ChangeMark{Shape: shape}, 22), b)
	return mark.Column(0, mark.Space(1, look.Unit), line, mark.Rule())
}

// newCompareLine is one cell on the two days.
func newCompareLine(r view.CompareRow) fyne.CanvasObject {
	day := func(b view.Bead, w string, had bool) fyne.CanvasObject {
		if !had {
			b, w = view.Bead{}, words.T("not tested")
		}
		return mark.Row(look.Unit, []float32{0, 1}, mark.NewBead(b, 18), mark.NewPara(w))
	}
	word := mark.NewPara(r.Mark.Word).In(mark.ChangeToken(r.Mark.Shape))
	if r.Mark.Shape == view.NoShape {
		word.Token = look.InkSoft
	}
	var end fyne.CanvasObject = word
	if r.Weak != "" {
		end = mark.Column(0, word, mark.NewPara(r.Weak).In(look.InkSoft).As(look.Small))
	}
	line := mark.Row(look.Unit*1.5, []float32{1.3, 1.2, 1.2, 0, 0.9}, mark.NewPara(r.Name),
		day(r.BeforeBead, r.BeforeWords, r.HadBefore), day(r.AfterBead, r.AfterWords, r.HasAfter), mark.NewChange(r.Mark, 20), end)
	return mark.Column(0, mark.Pad(5, look.Unit/2, line), mark.Rule())
}

func measureLine(m view.MeasureRow, u exam.Units) fyne.CanvasObject {
	value := func(x exam.Measured, had bool) fyne.CanvasObject {
		if !had {
			return mark.NewPara(words.T("not measured")).In(look.InkSoft)
		}
		return mark.NewPara(view.MeasuredWords(x, u))
	}
	note := m.ChangeIn(u)
	if m.Unlike != "" {
		note = m.Unlike
	}
	line := mark.Row(look.Unit*1.5, []float32{1.3, 1.2, 1.2, 0, 0.9}, mark.NewPara(m.Name), value(m.Before, m.HadBefore), value(m.After, m.HasAfter), mark.Space(20, 1), mark.NewPara(note))
	return mark.Column(0, mark.Pad(5, look.Unit/2, line), mark.Rule())
}
