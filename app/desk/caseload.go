package desk

import (
	"context"
	"time"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// caseloadPage answers: who needs me, and why?
type caseloadPage struct {
	win    *window
	cases  *view.Caseload
	search *mark.Field
	list   *caseList
	count  *mark.Text
	today  *mark.Button
	gone   *mark.Button
	detail *fyne.Container
	empty  *fyne.Container
	root   fyne.CanvasObject
	chosen exam.ID
	only   bool
	hide   bool
	busy   bool // the caseload is being read
	later  bool // Enter was pressed before it was there
}

func newCaseloadPage(w *window) *caseloadPage {
	p := &caseloadPage{win: w, cases: w.app.caseload, chosen: w.app.lastPatient, hide: true}
	if p.cases == nil {
		p.cases = view.NewCaseload(nil, w.app.now())
	}
	p.build()
	if !w.app.fresh { // else it was read a moment ago, with the store
		p.load()
	}
	w.app.fresh = false
	return p
}

func readCaseload(ctx context.Context, r Records, now time.Time) (*view.Caseload, error) {
	list, err := r.Caseload(ctx)
	if err != nil {
		return nil, err
	}
	return view.NewCaseload(list, now), nil
}

func (p *caseloadPage) build() {
	w := p.win
	p.search = mark.NewField("", func(q string) { p.cases.Search(q); p.choose(0); p.refresh() }).Hint(words.T("Search by name, owner, breed or problem"))
	p.search.OnDown = func() { p.move(1) }
	p.search.OnUp = func() { p.move(-1) }
	p.search.OnEscape = func() { p.search.SetText("") }
	p.search.OnSubmitted = func(string) { p.start() }
	p.count = mark.Soft("").AtLeast(80)
	p.today = mark.NewButton(words.T("Today"), "today", func() { p.filter(!p.only) }).WithTip(words.T("Only animals with an alert, an unfinished exam, overdue or due today"))
	p.gone = mark.NewButton(words.T("Discharged"), "", func() { p.hide = !p.hide; p.gone.SetChosen(!p.hide); p.cases.HideInactive(p.hide); p.refresh() }).WithTip(words.T("Show discharged and dead animals too"))
	add := mark.NewButton(words.T("New patient"), "add", func() { w.goTo(view.Route{Screen: view.ScreenPatient}) })
	p.list = newCaseList(p)
	p.detail = mark.Column(look.Unit)
	p.empty = mark.Column(look.Unit * 2)
	outcomes := mark.NewButton(words.T("Outcomes"), "course", func() { w.goTo(view.Route{Screen: view.ScreenOutcomes}) }).WithTip(words.T("Outcomes of the practice: time to walking"))
	table := mark.NewButton(words.T("Import"), "grid", func() {
		w.file = File{}
		w.show(newImportPage(w))
	}).WithTip(words.T("Import patients from a table"))
	head := mark.Row(look.Unit, []float32{1, 0}, p.search, add)
	filters := mark.Bar(look.Unit, p.count, p.today, p.gone, outcomes, table)
	body := &fyne.Container{Layout: caseBody{p}, Objects: []fyne.CanvasObject{newCaseHead(), p.list, p.empty, mark.NewGround(look.Line), mark.NewScroll(mark.Pad(0, look.Unit*2, p.detail))}}
	p.root = mark.Pad(look.Unit*1.5, look.Unit*2, mark.ColumnGrow(look.Unit, 2, head, filters, body))
	p.cases.Search("")
	p.cases.OnlyToday(false)
	p.cases.HideInactive(true)
	p.refresh()
}

// caseBody sets the list at the left and what is known of the chosen animal at the right.
type caseBody struct{ p *caseloadPage }

func (l caseBody) MinSize([]fyne.CanvasObject) fyne.Size { return fyne.NewSize(600, 200) }
func (l caseBody) Layout(o []fyne.CanvasObject, s fyne.Size) {
	side := max(250, min(s.Width*0.27, 320*max(1, look.Scale()*0.85)))
	left := s.Width - side - look.Unit*2
	alone := s.Width < 800*look.Scale() // no room for both: the list alone
	o[3].(*mark.Ground).Hidden, o[4].(*mark.Scroll).Hidden = alone, alone
	if alone {
		left = s.Width
	}
	head := o[0].MinSize().Height
	o[0].Move(fyne.NewPos(0, 0))
	o[0].Resize(fyne.NewSize(left, head))
	o[1].Move(fyne.NewPos(0, head))
	o[1].Resize(fyne.NewSize(left, s.Height-head))
	o[2].Move(fyne.NewPos(0, head+look.Unit*3))
	o[2].Resize(fyne.NewSize(left, s.Height-head-look.Unit*3))
	o[3].Move(fyne.NewPos(left+look.Unit, 0))
	o[3].Resize(fyne.NewSize(1, s.Height))
	o[4].Move(fyne.NewPos(left+look.Unit*1.5, 0))
	o[4].Resize(fyne.NewSize(side, s.Height))
}

func (p *caseloadPage) content() fyne.CanvasObject { return p.root }
func (p *caseloadPage) shown()                     { p.win.win.Canvas().Focus(p.search) }
func (p *caseloadPage) left()                      {}

func (p *caseloadPage) help() []view.KeyHelp {
	return []view.KeyHelp{
		{Keys: words.T("letters"), Does: words.T("search by name, owner, breed or problem")},
		{Keys: words.T("Up, Down"), Does: words.T("choose an animal")},
		{Keys: "Enter", Does: words.T("start its exam, or go on with the unfinished one")},
		{Keys: "Escape", Does: words.T("clear the search")},
	}
}

// load reads the caseload off the drawing goroutine.
func (p *caseloadPage) load() {
	a := p.win.app
	p.busy = true
	a.work(func(ctx context.Context) (func(), error) {
		if err := a.saver.Flush(ctx); err != nil {
			return nil, err
		}
		c, err := readCaseload(ctx, a.records, a.now())
		if err != nil {
			return nil, err
		}
		return func() {
			a.caseload = c
			p.busy = false
			if p.win.page != page(p) {
				return
			}
			c.OnlyToday(p.only)
			c.HideInactive(p.hide)
			c.Search(p.search.Text)
			p.cases = c
			p.refresh()
			if p.later {
				p.later = false
				p.start()
			}
		}, nil
	}, func(err error) { p.win.fail(words.T("The caseload cannot be read."), err) })
}

func (p *caseloadPage) filter(only bool) {
	p.only = only
	p.today.SetChosen(only)
	p.cases.OnlyToday(only)
	p.refresh()
}

// at returns the row of the chosen animal, -1 where none is chosen.
func (p *caseloadPage) at() int {
	for i := range p.cases.Len() {
		if p.cases.ID(i) == p.chosen {
			return i
		}
	}
	return -1
}

func (p *caseloadPage) choose(i int) {
	if i >= 0 && i < p.cases.Len() {
		p.chosen = p.cases.ID(i)
		p.win.app.lastPatient = p.chosen
		p.win.rail.update()
	}
}

func (p *caseloadPage) move(d int) {
	p.choose(max(0, min(p.cases.Len()-1, p.at()+d)))
	p.refresh()
}

// start begins the exam of the chosen animal, or goes on with the unfinished one.
func (p *caseloadPage) start() {
	if p.busy && p.win.app.caseload == nil {
		p.later = true
		return
	}
	i := p.at()
	if i < 0 {
		if p.cases.Len() == 0 {
			return
		}
		p.choose(0)
		i = 0
	}
	p.win.goTo(view.Route{Screen: view.ScreenExam, Patient: p.cases.ID(i)})
}

// refresh draws list, count and detail anew.
func (p *caseloadPage) refresh() {
	if p.at() < 0 && p.cases.Len() > 0 {
		p.chosen = p.cases.ID(0)
	}
	if p.win.app.lastPatient != p.chosen {
		p.win.app.lastPatient = p.chosen
		p.win.rail.update()
	}
	p.count.Set(p.cases.Words())
	p.list.Refresh()
	if i := p.at(); i >= 0 {
		p.list.ScrollTo(i)
	}
	p.empty.Objects = nil
	if p.cases.Len() == 0 {
		text, hint := words.T("No patients yet."), words.T("Ctrl+N makes the first one.")
		switch {
		case p.cases.Query() != "":
			text, hint = words.T("No animal fits “%s”.", p.cases.Query()), words.T("Escape clears the search.")
		case p.cases.Total() > 0:
			text, hint = words.T("Nobody needs you today."), words.T("All patients are one press of Today away.")
		}
		p.empty.Objects = []fyne.CanvasObject{mark.Heading(text).Centred().AtLeast(80), mark.Soft(hint).Centred().AtLeast(80)}
	}
	p.empty.Refresh()
	p.detailOf()
}

func (p *caseloadPage) detailOf() {
	p.detail.Objects = nil
	i := p.at()
	if i >= 0 {
		p.detail.Objects = p.detailLines(p.cases.Row(i))
	}
	p.detail.Refresh()
}

func (p *caseloadPage) detailLines(r view.CaseRow) []fyne.CanvasObject {
	w, s := p.win, r.Summary
	route := func(sc view.Screen) func() {
		return func() { w.goTo(view.Route{Screen: sc, Patient: s.ID}) }
	}
	start := words.T("Start exam")
	if !s.OpenVisit.IsZero() {
		start = words.T("Go on with the exam")
	}
	out := []fyne.CanvasObject{
		center(mark.NewBody(r.Cross, s.Species, 150)),
		mark.Heading(s.Name).Centred().AtLeast(80),
		mark.NewButton(start, "exam", route(view.ScreenExam)).As(mark.Main),
	}
	if s.Problem != "" {
		out = append(out, mark.NewPara(s.Problem))
	}
	const most = 2 // more would push what can be done out of sight
	shown, hidden := 0, 0
	for _, a := range s.Alerts {
		if a.Answered {
			continue
		}
		if shown++; shown > most {
			hidden++
			continue
		}
		icon := canvas.NewImageFromResource(look.Icon("phone", look.Call))
		icon.FillMode = canvas.ImageFillContain
		icon.SetMinSize(fyne.NewSize(20, 20))
		line := mark.NewPara(view.UrgencyWords(a.Urgency) + " " + view.AlertTitle(a.Rule)).In(look.Call)
		out = append(out, mark.On(look.CallBed, false, mark.Pad(look.Unit, look.Unit, mark.Row(look.Unit, []float32{0, 1}, icon, line))))
	}
	if hidden > 0 {
		out = append(out, mark.NewPara(words.N(hidden, "and %d more alert", "and %d more alerts", hidden)).In(look.Call))
	}
	out = append(out, mark.Row(6, []float32{0, 1}, mark.NewChange(r.Change, 20), mark.NewPara(changeWords(r))))
	out = append(out, mark.NewPara(words.T("Last visit: %s", r.LastWords)).In(look.InkSoft), mark.NewPara(r.DueWords).In(dueToken(r)))
	out = append(out, mark.Space(1, look.Unit),
		mark.RowTop(look.Unit, []float32{1, 1}, sideButton(words.T("Compare"), "compare", route(view.ScreenCompare)), sideButton(words.T("Course"), "course", route(view.ScreenCourse))),
		mark.RowTop(look.Unit, []float32{1, 1}, sideButton(words.T("Sheet"), "sheet", route(view.ScreenSheet)), sideButton(words.T("Edit"), "edit", route(view.ScreenPatient))))
	return out
}

func sideButton(word, icon string, tap func()) fyne.CanvasObject {
	return mark.NewButton(word, icon, tap)
}

func changeWords(r view.CaseRow) string {
	if r.Summary.Visits < 2 {
		return words.T("nothing to compare yet")
	}
	return words.T("%s since the visit before", r.Change.Word)
}

func dueToken(r view.CaseRow) fyne.ThemeColorName {
	if r.Attention == view.Overdue {
		return look.Worse
	}
	return look.Ink
}

// caseList is the list of animals. It draws only the rows in view.
type caseList struct {
	widget.List
	page *caseloadPage
}

func newCaseList(p *caseloadPage) *caseList {
	l := &caseList{page: p}
	l.Length = func() int { return p.cases.Len() }
	l.CreateItem = func() fyne.CanvasObject { return newCaseLine(p) }
	l.UpdateItem = func(i widget.ListItemID, o fyne.CanvasObject) {
		if i < p.cases.Len() {
			o.(*caseLine).set(p.cases.Row(i))
		}
	}
	l.HideSeparators = true
	l.ExtendBaseWidget(l)
	return l
}

// TypedKey moves the choice and starts the exam.
func (l *caseList) TypedKey(e *fyne.KeyEvent) {
	switch e.Name {
	case fyne.KeyDown:
		l.page.move(1)
	case fyne.KeyUp:
		l.page.move(-1)
	case fyne.KeyPageDown:
		l.page.move(10)
	case fyne.KeyPageUp:
		l.page.move(-10)
	case fyne.KeyReturn, fyne.KeyEnter:
		l.page.start()
	default:
		mark.PassKey(l, e)
	}
}

// stackedCase reports whether a line is too short for a column of problems; then the problem
// stands below the animal.
func stackedCase(width float32) bool { return width < 660*look.Scale() }

// caseColumns are the widths of a line: the cross, the animal, its problem, when, how, alert.
func caseColumns(width float32) (x, w [6]float32) {
	s := max(1, look.Scale()*0.9)
	fixed := [6]float32{52, 0, 0, 0, 116 * s, 98 * s}
	share := [6]float32{0, 0.34, 0.33, 0.33, 0, 0}
	if stackedCase(width) {
		share = [6]float32{0, 0.6, 0, 0.4, 0, 0}
	}
	if width < 640*s {
		fixed[4], fixed[5] = 40, 44
	}
	free := width - fixed[0] - fixed[4] - fixed[5] - 6*look.Unit
	at := look.Unit / 2
	for i := range x {
		w[i] = fixed[i] + share[i]*free
		x[i] = at
		at += w[i] + look.Unit
	}
	return x, w
}

// caseHead is the line of headings above the list.
type caseHead struct {
	widget.BaseWidget
	texts []*mark.Text
}

func newCaseHead() *caseHead {
	h := &caseHead{}
	for _, s := range []string{"", words.T("Animal"), words.T("Problem"), words.T("Due, last visit"), words.T("Since then"), words.T("Alert")} {
		h.texts = append(h.texts, mark.Note(s).AtLeast(10))
	}
	h.ExtendBaseWidget(h)
	return h
}

func (h *caseHead) CreateRenderer() fyne.WidgetRenderer {
	o := []fyne.CanvasObject{mark.NewGround(look.Edge)}
	for _, t := range h.texts {
		o = append(o, t)
	}
	return widget.NewSimpleRenderer(&fyne.Container{Layout: caseHeadLayout{h}, Objects: o})
}

type caseHeadLayout struct{ h *caseHead }

func (l caseHeadLayout) MinSize([]fyne.CanvasObject) fyne.Size {
	return fyne.NewSize(100, l.h.texts[1].MinSize().Height+7)
}

func (l caseHeadLayout) Layout(o []fyne.CanvasObject, s fyne.Size) {
	x, w := caseColumns(s.Width)
	o[0].Move(fyne.NewPos(0, s.Height-1))
	o[0].Resize(fyne.NewSize(s.Width, 1))
	for i, t := range l.h.texts {
		t.Hidden = w[i] < 60
		t.Move(fyne.NewPos(x[i], 0))
		t.Resize(fyne.NewSize(w[i], s.Height-4))
	}
}

// caseLine is one animal of the caseload.
type caseLine struct {
	widget.BaseWidget
	page    *caseloadPage
	id      exam.ID
	problem string
	bed     *mark.Ground
	bar     *mark.Ground
	cross   *mark.LimbCross
	name    *mark.Text
	sub     *mark.Text
	prob    *mark.Text
	more    *mark.Text // the problem's second line
	due     *mark.Text
	last    *mark.Text
	change  *mark.Change
	word    *mark.Text
	phone   *canvas.Image
	alert   *mark.Text
	rule    *mark.Ground
}

func newCaseLine(p *caseloadPage) *caseLine {
	l := &caseLine{page: p, bed: mark.NewGround(look.Paper), bar: mark.NewGround(look.Focus), cross: mark.NewLimbCross(view.LimbCross{}, 40),
		name: mark.Bold("").AtLeast(20), sub: mark.Note("").AtLeast(20), prob: mark.Line("").AtLeast(20), more: mark.Line("").AtLeast(20),
		due: mark.Line("").AtLeast(20), last: mark.Note("").AtLeast(20), change: mark.NewChange(view.ChangeMark{}, 20), word: mark.Line("").AtLeast(10),
		phone: &canvas.Image{FillMode: canvas.ImageFillContain}, alert: mark.Bold("").In(look.Call).AtLeast(10), rule: mark.NewGround(look.Line)}
	l.ExtendBaseWidget(l)
	return l
}

func (l *caseLine) MinSize() fyne.Size {
	l.ExtendBaseWidget(l)
	h := l.name.MinSize().Height + l.sub.MinSize().Height + look.Unit*1.5
	if look.Scale() > 1.15 {
		h += l.prob.MinSize().Height
	}
	return fyne.NewSize(400, max(56, h))
}

func (l *caseLine) set(r view.CaseRow) {
	s := r.Summary
	l.id = s.ID
	l.cross.Set(r.Cross)
	l.name.Words = s.Name
	sub := s.Breed
	if sub == "" {
		sub = view.SpeciesName(s.Species)
	}
	if s.Owner != "" {
		sub += " · " + s.Owner
	}
	l.sub.Words = sub
	l.problem = s.Problem
	l.due.Words, l.due.Bold, l.due.Token = r.DueWords, r.Attention <= view.DueToday, dueToken(r)
	l.last.Words = r.LastWords
	l.change.Set(r.Change)
	l.word.Words, l.word.Token = r.Change.Word, mark.ChangeToken(r.Change.Shape)
	if s.Visits < 2 {
		l.change.Set(view.ChangeMark{})
		l.word.Words = ""
	}
	l.alert.Words = ""
	if len(r.Alerts) > 0 {
		l.alert.Words = r.Alerts[0]
		if len(r.Alerts) > 1 {
			l.alert.Words = words.T("%s +%d", r.Alerts[0], len(r.Alerts)-1)
		}
	}
	chosen := s.ID == l.page.chosen
	l.bed.Token = look.Paper
	if chosen {
		l.bed.Token = look.FocusBed
	}
	l.bar.Hidden = !chosen
	l.Refresh()
}

func (l *caseLine) CreateRenderer() fyne.WidgetRenderer {
	o := []fyne.CanvasObject{l.bed, l.rule, l.bar, l.cross, l.name, l.sub, l.prob, l.more, l.due, l.last, l.change, l.word, l.phone, l.alert}
	return &caseLineRenderer{l, o}
}

type caseLineRenderer struct {
	l *caseLine
	o []fyne.CanvasObject
}

func (r *caseLineRenderer) Destroy()                     {}
func (r *caseLineRenderer) MinSize() fyne.Size           { return r.l.MinSize() }
func (r *caseLineRenderer) Objects() []fyne.CanvasObject { return r.o }
func (r *caseLineRenderer) Layout(s fyne.Size) {
	l := r.l
	x, w := caseColumns(s.Width)
	l.bed.Resize(s)
	l.bar.Resize(fyne.NewSize(4, s.Height))
	l.rule.Move(fyne.NewPos(0, s.Height-1))
	l.rule.Resize(fyne.NewSize(s.Width, 1))
	put := func(o fyne.CanvasObject, x, y, w, h float32) {
		o.Move(fyne.NewPos(x, y))
		o.Resize(fyne.NewSize(max(0, w), h))
	}
	side := min(44, s.Height-12)
	put(l.cross, x[0]+(w[0]-side)/2, (s.Height-side)/2, side, side)
	two := func(a, b *mark.Text, x, w float32) {
		ha, hb := a.MinSize().Height, b.MinSize().Height
		if b.Words == "" {
			hb = 0
		}
		top := (s.Height - ha - hb) / 2
		put(a, x, top, w, ha)
		put(b, x, top+ha, w, hb)
	}
	was := [2]string{l.prob.Words, l.more.Words}
	l.prob.Words, l.more.Words = l.problem, ""
	if ph := l.prob.MinSize().Height; stackedCase(s.Width) && l.MinSize().Height > 56+ph/2 {
		ha, hb := l.name.MinSize().Height, l.sub.MinSize().Height
		top := (s.Height - ha - hb - ph) / 2
		put(l.name, x[1], top, w[1], ha)
		put(l.sub, x[1], top+ha, w[1], hb)
		put(l.prob, x[1], top+ha+hb, w[1], ph)
	} else {
		two(l.name, l.sub, x[1], w[1])
		l.prob.Words, l.more.Words = twoLines(l.problem, w[2])
		two(l.prob, l.more, x[2], w[2])
	}
	if was != [2]string{l.prob.Words, l.more.Words} {
		l.prob.Refresh()
		l.more.Refresh()
	}
	two(l.due, l.last, x[3], w[3])
	put(l.change, x[4], (s.Height-20)/2, 20, 20)
	h := l.word.MinSize().Height
	put(l.word, x[4]+26, (s.Height-h)/2, w[4]-26, h)
	if l.word.Hidden = w[4] < 60; l.word.Hidden {
		put(l.change, x[4]+(w[4]-20)/2, (s.Height-20)/2, 20, 20)
	}
	l.phone.Hidden = l.alert.Words == ""
	put(l.phone, x[5], (s.Height-20)/2, 20, 20)
	h = l.alert.MinSize().Height
	put(l.alert, x[5]+26, (s.Height-h)/2, w[5]-26, h)
	l.alert.Hidden = w[5] < 60
}

// twoLines breaks a text at the last space that fits into a width; the second line may be too long.
func twoLines(s string, width float32) (first, second string) {
	fits := func(s string) bool { return fyne.MeasureText(s, look.Px(look.Body), fyne.TextStyle{}).Width <= width }
	if fits(s) {
		return s, ""
	}
	for i := len(s) - 1; i > 0; i-- {
		if s[i] == ' ' && fits(s[:i]) {
			return s[:i], s[i+1:]
		}
	}
	return s, ""
}

func (r *caseLineRenderer) Refresh() {
	r.l.phone.Resource = look.Icon("phone", look.Call)
	r.Layout(r.l.BaseWidget.Size())
	for _, o := range r.o {
		o.Refresh()
	}
}

// Tapped chooses the animal.
func (l *caseLine) Tapped(*fyne.PointEvent) {
	l.page.chosen = l.id
	l.page.win.app.lastPatient = l.id
	l.page.win.rail.update()
	l.page.refresh()
	l.page.win.win.Canvas().Focus(l.page.search)
}

// DoubleTapped starts its exam.
func (l *caseLine) DoubleTapped(*fyne.PointEvent) {
	l.page.chosen = l.id
	l.page.start()
}
