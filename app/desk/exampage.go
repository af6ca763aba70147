package desk

import (
	"context"
	"slices"
	"strconv"
	"strings"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/container"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// examPage answers: what is the next thing to test, and what did it show?
type examPage struct {
	win      *window
	file     File
	sheet    *view.ExamSheet
	saved    exam.Visit // the visit's head as it stands in the store; zero: not written yet
	protocol string

	grid    *examGrid
	card    *oneCard
	side    *examSide
	left1   *fyne.Container // grid, card or one of the forms of the visit
	tabs    []*mark.Button
	parts   *mark.Pick        // instead of the tabs where text is large
	how     fyne.CanvasObject // then the form for protocol and position
	one     *mark.Button
	tab     int
	bar     *fyne.Container
	where   *mark.Text
	walk    *walkBar
	root    fyne.CanvasObject
	undoB   *mark.Button
	closed  *mark.Button
	reflow  func()   // gives the form shown its height anew; may be nil
	pending []func() // what was typed and not yet kept
}

// The parts of a visit, in the order of the tabs.
const (
	tabExam = iota
	tabVisit
	tabMeasures
	tabTreatments
	tabHome
	tabPhotos
	tabStim
	tabHow // protocol and position, where text is too large for them to stand beside the others
)

func newExamPage(w *window, visit exam.ID) *examPage {
	p := &examPage{win: w, file: w.file}
	a := w.app
	v, known := w.file.visit(visit)
	if !known {
		v, known = w.file.open()
	}
	if known {
		p.saved = v
	} else {
		key := a.settings.Protocol
		if len(w.file.Visits) == 0 || key == "" {
			key = exam.Weekly
			if len(w.file.Visits) == 0 {
				key = exam.FullSpinal
			}
		}
		v = view.StartVisit(a.records.NewID(), w.file.Patient, a.examiner, key, a.practice.Zone, a.now())
	}
	p.build(v)
	return p
}

// build makes the page for a visit as it stands.
func (p *examPage) build(v exam.Visit) {
	a := p.win.app
	p.protocol = v.Protocol
	in, err := view.ExamOf(a.practice, p.file.Patient, v, p.file.Visits)
	if word, chosen := a.settings.Posture[p.file.Patient.ID.String()]; chosen {
		in.Posture = view.ParsePosture(word)
	}
	in.Resume, in.Save, in.Changed, in.Now = a.settings.ResumeAt(v.ID), p.save, p.changed, a.now
	var sheet *view.ExamSheet
	if err == nil {
		sheet, err = view.NewExamSheet(in)
	}
	if err != nil {
		p.root = mark.Pad(look.Unit*3, look.Unit*3, mark.NewPara(err.Error()))
		return
	}
	p.sheet = sheet
	p.grid = newExamGrid(sheet)
	p.grid.Pressed = p.pressed
	p.grid.Key = p.typed
	p.grid.Focus = func() { p.win.win.Canvas().Focus(p.grid) }
	p.grid.Shortcut = func(s fyne.Shortcut) { p.shortcut(p.grid, s) }
	p.card = newOneCard(p)
	p.side = newExamSide(p)
	p.left1 = container.NewStack()
	names := []string{words.T("Exam"), words.T("Visit"), words.T("Measures"), words.T("Treatments"), words.T("Home"), words.T("Photos"), words.T("Stimulation")}
	var tabs []fyne.CanvasObject
	p.tabs = nil
	for i, n := range names {
		k := i
		b := mark.NewButton(n, "", func() { p.choose(k) }).As(mark.Quiet)
		p.tabs = append(p.tabs, b)
		tabs = append(tabs, b)
	}
	one := mark.NewButton(words.T("One test"), "card", func() {
		a.settings.OneByOne = !a.settings.OneByOne
		p.choose(tabExam)
	}).As(mark.Quiet).WithTip(words.T("One test at a time, or the grid. Key o"))
	protocols, keys := []string{}, []string{}
	for _, list := range [][]exam.Protocol{exam.Protocols(), a.practice.Protocols} {
		for _, x := range list {
			protocols, keys = append(protocols, words.Of(x.Name)), append(keys, x.Key)
		}
	}
	proSel := mark.Choice(protocols, keys, p.protocol, p.setProtocol)
	posSel := mark.Choice([]string{words.T("Lying on its side"), words.T("Lying on its chest"), words.T("Held in the arms")},
		[]string{"lying", "sternal", "held"}, in.Posture.String(), p.setPosture)
	one.Chosen = a.settings.OneByOne
	p.one = one
	p.bar = mark.Row(4, []float32{1}, mark.Wrapped(0, tabs...), one)
	p.parts = nil
	if look.Scale() > 1.3 { // the buttons would take three lines from the grid
		shown := append(slices.Clone(names), words.T("Protocol and position"))
		keys := make([]string, len(shown))
		for i := range shown {
			keys[i] = strconv.Itoa(i)
		}
		p.parts = mark.Choice(shown, keys, "0", func(s string) {
			if k, err := strconv.Atoi(s); err == nil && k != p.tab {
				p.choose(k)
			}
		})
		p.bar = mark.Row(look.Unit, []float32{1, 0}, p.parts, one)
	}
	var second fyne.CanvasObject = mark.Row(look.Unit, []float32{1, 1, 1}, p.visitPick(v), proSel, posSel)
	p.how = nil
	if p.parts != nil {
		second = p.visitPick(v)
		p.how = mark.Pad(look.Unit, look.Unit, mark.Column(look.Unit*2,
			mark.NewLabelled(words.T("Protocol"), proSel), mark.NewLabelled(words.T("Position"), posSel)))
	}
	p.where = mark.Line("")
	p.walk = newWalkBar()
	p.undoB = mark.NewButton(words.T("Undo"), "undo", func() { p.undo(false) }).As(mark.Quiet).WithTip("u, Ctrl+Z")
	p.closed = mark.NewButton(words.T("Close visit"), "tick", p.close)
	left := mark.ColumnGrow(look.Unit, 2, p.bar, second, p.left1)
	p.root = &fyne.Container{Layout: examLayout{}, Objects: []fyne.CanvasObject{mark.Pad(look.Unit, look.Unit*2, left), mark.NewGround(look.Line), p.side}}
	p.choose(tabExam)
	p.changed()
	if p.saved.ID.IsZero() {
		sheet.FillBarred()
	}
}

// visitPick names the visit shown and offers the earlier ones, to be read or amended.
func (p *examPage) visitPick(v exam.Visit) fyne.CanvasObject {
	shown, ids := []string{}, []string{}
	known := false
	for i := len(p.file.Visits) - 1; i >= 0; i-- {
		x := p.file.Visits[i]
		word := view.Day(x.Examined)
		if x.State == exam.Open {
			word = words.T("%s, not closed", word)
		}
		shown, ids = append(shown, word), append(ids, x.ID.String())
		known = known || x.ID == v.ID
	}
	if !known {
		shown, ids = append([]string{words.T("Today, new")}, shown...), append([]string{v.ID.String()}, ids...)
	} else if _, open := p.file.open(); !open {
		shown, ids = append([]string{words.T("A new visit")}, shown...), append([]string{""}, ids...)
	}
	if n := len(p.file.Visits); n > 0 {
		last := p.file.Visits[n-1]
		if exam.DayOf(last.Examined) == exam.DayOf(p.win.app.now()) && last.State == exam.Closed && last.RepeatOf.IsZero() && v.RepeatOf.IsZero() {
			shown, ids = append(shown, words.T("Repeat today's exam, blind")), append(ids, "repeat")
		}
	}
	return mark.Choice(shown, ids, v.ID.String(), func(s string) {
		if s == v.ID.String() {
			return
		}
		if s == "repeat" {
			p.repeat()
			return
		}
		id, err := exam.ParseID(s)
		if err != nil {
			id = exam.ID{}
		}
		p.win.goTo(view.Route{Screen: view.ScreenExam, Patient: p.file.Patient.ID, Visit: id})
	})
}

// repeat begins an exam of the same animal on the same day whose earlier grades stay hidden: it
// measures how well two exams of this practice agree.
func (p *examPage) repeat() {
	a := p.win.app
	of := p.file.Visits[len(p.file.Visits)-1]
	v := view.StartVisit(a.records.NewID(), p.file.Patient, a.examiner, of.Protocol, a.practice.Zone, a.now())
	v.RepeatOf = of.ID
	p.keepTyped()
	p.side.close()
	p.saved = exam.Visit{}
	p.build(v)
	p.win.show(p)
	p.win.foot.say(words.T("A repeat exam: grade what you find; the earlier grades are hidden."))
}

// examLayout gives the grid 62 % and the map 38 % of the width.
type examLayout struct{}

func (examLayout) MinSize(o []fyne.CanvasObject) fyne.Size { return fyne.NewSize(800, 400) }
func (examLayout) Layout(o []fyne.CanvasObject, s fyne.Size) {
	left := s.Width * 0.62
	o[0].Move(fyne.NewPos(0, 0))
	o[0].Resize(fyne.NewSize(left, s.Height))
	o[1].Move(fyne.NewPos(left, 0))
	o[1].Resize(fyne.NewSize(1, s.Height))
	o[2].Move(fyne.NewPos(left+1, 0))
	o[2].Resize(fyne.NewSize(s.Width-left-1, s.Height))
}

func (p *examPage) content() fyne.CanvasObject { return p.root }

func (p *examPage) shown() {
	if p.sheet == nil {
		return
	}
	c := p.win.win.Canvas()
	if f := c.Focused(); p.tab != tabExam && (f == fyne.Focusable(p.grid) || f == fyne.Focusable(p.card)) {
		c.Unfocus() // no key may grade a cell that is not on the screen
	}
	if p.tab == tabExam {
		if p.win.app.settings.OneByOne {
			p.win.win.Canvas().Focus(p.card)
		} else {
			p.win.win.Canvas().Focus(p.grid)
		}
	}
}

func (p *examPage) left() {
	if p.sheet == nil {
		return
	}
	p.keepTyped()
	p.side.close()
	a := p.win.app
	if c, ok := p.sheet.Cell(); ok && !c.IsMeasure() && !p.saved.ID.IsZero() {
		a.settings.KeepResume(p.sheet.Visit().ID, c.Key)
	}
	a.settings.Protocol = p.protocol
	a.keepSettings()
}

func (p *examPage) help() []view.KeyHelp {
	return append(view.ExamKeys(),
		view.KeyHelp{Keys: "o", Does: words.T("one test at a time, or the grid")},
		view.KeyHelp{Keys: "m", Does: words.T("open or close the cord map")},
		view.KeyHelp{Keys: words.T("Ctrl+Enter"), Does: words.T("close the visit")},
		view.KeyHelp{Keys: "Escape", Does: words.T("give the keys to the buttons beside the grid")})
}

// foot is what stands at the right of the line below: how far the walk is, undo, closing.
func (p *examPage) foot() fyne.CanvasObject {
	if p.sheet == nil {
		return mark.Space(1, 1)
	}
	if look.Scale() > 1.3 {
		return mark.Row(look.Unit, nil, p.where, p.undoB, p.closed)
	}
	return mark.Row(look.Unit, nil, p.where, mark.Sized(120, 8, p.walk), p.undoB, p.closed)
}

// save hands one action to the writer. The visit's head goes first where it is not written yet.
func (p *examPage) save(b view.Batch) {
	a := p.win.app
	examiner := a.examiner
	records := a.records
	if p.saved.ID.IsZero() {
		head := p.sheet.Visit()
		head.Findings, head.Measures = nil, nil
		if b.Head {
			head = b.Before
		}
		p.saved = head
		before := exam.Visit{ID: head.ID, Patient: head.Patient}
		a.save(p.win, func(ctx context.Context) error { return records.SaveVisit(ctx, examiner, before, head) })
	}
	a.save(p.win, func(ctx context.Context) error { return records.SaveBatch(ctx, examiner, b) })
}

// changed redraws what depends on the exam; it runs after every action.
func (p *examPage) changed() {
	if p.grid == nil || p.side == nil {
		return
	}
	pr := p.sheet.Progress()
	p.where.Words = pr.Words
	if look.Scale() > 1.3 {
		p.where.Words = words.T("%d of %d", pr.Done, pr.Total)
	}
	p.where.Refresh()
	p.walk.set(float64(pr.Done) / float64(max(1, pr.Total)))
	if p.sheet.CanUndo() {
		p.undoB.Enable()
	} else {
		p.undoB.Disable()
	}
	if p.sheet.Closed() {
		p.closed.SetWords(words.T("Amend"))
	} else {
		p.closed.SetWords(words.T("Close visit"))
	}
	p.side.update()
	if p.win.page == page(p) {
		p.win.foot.box.Refresh()
	}
}

// pressed says what a key did.
func (p *examPage) pressed(o view.Outcome) {
	p.grid.update()
	p.card.update()
	switch {
	case o.Err != nil:
		p.win.foot.fail(o.Err.Error(), nil)
	case o.Handled:
		p.win.foot.say(o.Words)
	}
}

// typed hands a key to the sheet; what the sheet does not know is the page's own.
func (p *examPage) typed(k view.Key) {
	mark.Used()
	mode, _ := p.sheet.Mode()
	if mode == view.Grading && k.Name == "" && p.typedRune(k.Rune) {
		return
	}
	if c, ok := p.sheet.Cell(); ok && c.IsMeasure() && mode == view.Typing && k.Name == "" && !strings.ContainsRune("0123456789.,-", k.Rune) {
		return // a number is being typed
	}
	out := p.sheet.Press(k)
	p.pressed(out)
	if out.Handled {
		return
	}
	switch {
	case k.Rune == '?':
		p.win.showHelp()
	case k.Name == "Enter":
		p.goNext()
	case k.Name == "Escape":
		p.win.win.Canvas().FocusNext()
	}
}

// shortcut takes undo and redo from where the keys are; the rest belongs to the window.
func (p *examPage) shortcut(from fyne.CanvasObject, s fyne.Shortcut) {
	switch s.ShortcutName() {
	case (&fyne.ShortcutUndo{}).ShortcutName():
		p.undo(shiftDown())
	case (&fyne.ShortcutRedo{}).ShortcutName():
		p.undo(true)
	default:
		passShortcut(from, s)
	}
}

func (p *examPage) undo(redo bool) {
	k := view.Key{Rune: 'z', Ctrl: true}
	if redo {
		k.Rune = 'y'
	}
	p.pressed(p.sheet.Press(k))
}

func (p *examPage) typedRune(r rune) bool {
	switch r {
	case 'o':
		p.win.app.settings.OneByOne = !p.win.app.settings.OneByOne
		p.choose(tabExam)
	case 'm':
		p.side.toggle()
	default:
		return false
	}
	return true
}

// keepTyped keeps what was typed into fields and not left yet.
func (p *examPage) keepTyped() {
	list := p.pending
	p.pending = nil
	for _, keep := range list {
		keep()
	}
}

// choose shows a part of the visit.
func (p *examPage) choose(tab int) {
	p.keepTyped()
	p.tab = tab
	for i, b := range p.tabs {
		b.SetChosen(i == tab)
	}
	if p.parts != nil && p.parts.SelectedIndex() != tab {
		p.parts.SetSelectedIndex(tab)
	}
	p.one.SetChosen(p.win.app.settings.OneByOne)
	var o fyne.CanvasObject
	switch tab {
	case tabVisit:
		o = newVisitForm(p)
	case tabMeasures:
		o = newMeasuresForm(p)
	case tabTreatments:
		o = newTreatmentsForm(p)
	case tabHome:
		o = newHomeForm(p)
	case tabPhotos:
		o = newPhotosForm(p)
	case tabStim:
		o = newStimForm(p)
	case tabHow:
		o = mark.NewScroll(p.how)
	default:
		if p.win.app.settings.OneByOne {
			p.card.update()
			o = p.card
		} else {
			p.grid.update()
			o = p.grid
		}
	}
	p.left1.Objects = []fyne.CanvasObject{o}
	p.left1.Refresh()
	if p.win.page == page(p) {
		p.shown()
	}
}

// setProtocol walks another protocol; what was entered stays.
func (p *examPage) setProtocol(key string) {
	if key == p.protocol || p.sheet.Closed() {
		return
	}
	v := p.sheet.Visit()
	v.Protocol = key
	if !p.saved.ID.IsZero() {
		if err := p.sheet.EditHead(func(h *exam.Visit) { h.Protocol = key }); err != nil {
			p.win.foot.fail(err.Error(), nil)
			return
		}
	}
	p.win.app.settings.Protocol = key
	p.side.close()
	p.build(v)
	p.win.show(p)
}

func (p *examPage) setPosture(word string) {
	a := p.win.app
	if a.settings.Posture == nil {
		a.settings.Posture = map[string]string{}
	}
	a.settings.Posture[p.file.Patient.ID.String()] = word
	p.sheet.SetPosture(view.ParsePosture(word))
	p.grid.build()
	p.shown()
}

// goNext moves to the test that would tell most.
func (p *examPage) goNext() {
	if k, ok := p.side.next(); ok {
		if err := p.sheet.FocusKey(k); err != nil {
			p.win.foot.fail(err.Error(), nil)
			return
		}
		p.pressed(view.Outcome{Handled: true, Words: words.T("The test that would tell most: %s", view.CellName(k))})
	}
}

// close closes the visit, or opens a closed one for amendments.
func (p *examPage) close() {
	if p.sheet.Closed() {
		p.askAmend()
		return
	}
	if err := p.sheet.Close(p.side.unanswered()); err != nil {
		p.win.foot.fail(err.Error(), nil)
		return
	}
	p.grid.update()
	p.win.foot.say(words.T("The visit is closed. Later changes need a reason."))
	p.changed()
}

func (p *examPage) askAmend() {
	reason := mark.NewField("", nil).Hint(words.T("Why the visit is changed after closing"))
	wrong := mark.NewPara("").In(look.Worse)
	do := func() {
		if reason.Text == "" {
			wrong.Set(words.T("An amendment needs a reason."))
			return
		}
		if err := p.sheet.Amend(reason.Text); err != nil {
			wrong.Set(err.Error())
			return
		}
		p.win.hideSheet()
		p.grid.update()
		p.win.foot.say(words.T("Every change now carries the reason: %s", reason.Text))
	}
	reason.OnSubmitted = func(string) { do() }
	p.win.showSheet(words.T("Amend a closed visit"), mark.Column(look.Unit, mark.NewPara(words.T("The visit stays closed; each change is kept with its reason, who made it and when.")), reason, wrong), 560,
		mark.NewButton(words.T("Amend"), "edit", do).As(mark.Main))
	p.win.win.Canvas().Focus(reason)
}

// walkBar shows how far the walk is.
type walkBar struct {
	widget.BaseWidget
	share float64
	bed   *mark.Ground
	bar   *mark.Ground
}

func newWalkBar() *walkBar {
	b := &walkBar{bed: mark.NewGround(look.Line), bar: mark.NewGround(look.Fill)}
	b.bed.Round, b.bar.Round = 4, 4
	b.ExtendBaseWidget(b)
	return b
}

func (b *walkBar) set(share float64) {
	b.share = share
	b.Refresh()
}

func (b *walkBar) CreateRenderer() fyne.WidgetRenderer { return &walkRenderer{b} }

type walkRenderer struct{ b *walkBar }

func (r *walkRenderer) Destroy()                     {}
func (r *walkRenderer) MinSize() fyne.Size           { return fyne.NewSize(60, 8) }
func (r *walkRenderer) Objects() []fyne.CanvasObject { return []fyne.CanvasObject{r.b.bed, r.b.bar} }
func (r *walkRenderer) Layout(s fyne.Size) {
	r.b.bed.Resize(s)
	r.b.bar.Resize(fyne.NewSize(s.Width*float32(r.b.share), s.Height))
}
func (r *walkRenderer) Refresh() {
	r.Layout(r.b.BaseWidget.Size())
	r.b.bed.Refresh()
	r.b.bar.Refresh()
}
