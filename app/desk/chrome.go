package desk

import (
	"strings"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/driver/desktop"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
)

// rail is the list of screens at the left: an icon and a word each.
type rail struct {
	widget.BaseWidget
	win   *window
	items []*railItem
}

// screenTitles are the words of the rail.
func screenTitle(s view.Screen) string {
	switch s {
	case view.ScreenExam:
		return words.T("Exam")
	case view.ScreenCompare:
		return words.T("Compare")
	case view.ScreenCourse:
		return words.T("Course")
	case view.ScreenSheet:
		return words.T("Sheet")
	case view.ScreenDevices:
		return words.T("Devices")
	case view.ScreenSettings:
		return words.T("Settings")
	case view.ScreenPhrases:
		return words.T("Words and logo of the sheets")
	case view.ScreenOutcomes:
		return words.T("Outcomes")
	case view.ScreenChoices:
		return words.T("Choose a value")
	case view.ScreenHistory:
		return words.T("History")
	}
	return words.T("Caseload")
}

func newRail(w *window) *rail {
	r := &rail{win: w}
	for _, s := range view.Rail() {
		r.items = append(r.items, newRailItem(r, s, s.String(), screenTitle(s)))
	}
	settings := newRailItem(r, view.ScreenSettings, "settings", screenTitle(view.ScreenSettings))
	help := newRailItem(r, view.ScreenFirstRun, "help", words.T("Help"))
	r.items = append(r.items, settings, help)
	r.ExtendBaseWidget(r)
	return r
}

// choose shows a screen, of the patient shown where the screen needs one.
func (r *rail) choose(s view.Screen) {
	w := r.win
	switch s {
	case view.ScreenFirstRun:
		w.showHelp()
		return
	case view.ScreenCaseload, view.ScreenDevices, view.ScreenSettings:
		w.goTo(view.Route{Screen: s})
		return
	}
	if w.patient().IsZero() {
		w.foot.say(words.T("Choose an animal in the caseload first."))
		return
	}
	w.to(s)
}

func (r *rail) update() {
	here := r.win.here().Screen
	none := r.win.patient().IsZero()
	for _, i := range r.items {
		i.chosen = i.screen == here
		i.off = none && (i.screen == view.ScreenExam || i.screen == view.ScreenCompare || i.screen == view.ScreenCourse || i.screen == view.ScreenSheet)
		i.Refresh()
	}
}

// words takes the words of the language in use anew.
func (r *rail) words() {
	for _, i := range r.items {
		i.word = screenTitle(i.screen)
		if i.screen == view.ScreenFirstRun {
			i.word = words.T("Help")
		}
		i.text.Text = i.word
	}
	r.update()
}

func (r *rail) MinSize() fyne.Size {
	r.ExtendBaseWidget(r)
	w := float32(72)
	for _, i := range r.items {
		w = max(w, i.MinSize().Width)
	}
	return fyne.NewSize(w, 100)
}

func (r *rail) CreateRenderer() fyne.WidgetRenderer {
	objects := []fyne.CanvasObject{mark.NewGround(look.Sunk)}
	for _, i := range r.items {
		objects = append(objects, i)
	}
	return widget.NewSimpleRenderer(&fyne.Container{Layout: railLayout{r}, Objects: objects})
}

type railLayout struct{ r *rail }

func (l railLayout) MinSize([]fyne.CanvasObject) fyne.Size { return l.r.MinSize() }
func (l railLayout) Layout(o []fyne.CanvasObject, s fyne.Size) {
	o[0].Resize(s)
	h := min(l.r.items[0].MinSize().Height, (s.Height-2*look.Unit)/float32(len(l.r.items)))
	y := look.Unit
	for i, it := range l.r.items {
		if i == len(l.r.items)-2 {
			y = max(y, s.Height-2*h-look.Unit)
		}
		it.Move(fyne.NewPos(0, y))
		it.Resize(fyne.NewSize(s.Width, h))
		y += h
	}
}

// railItem is one screen of the rail.
type railItem struct {
	widget.BaseWidget
	rail          *rail
	screen        view.Screen
	iconName      string
	word          string
	chosen, off   bool
	hover, focus  bool
	bed, bar, rim *canvas.Rectangle
	icon          *canvas.Image
	text          *canvas.Text
}

func newRailItem(r *rail, s view.Screen, icon, word string) *railItem {
	i := &railItem{rail: r, screen: s, iconName: icon, word: word}
	i.ExtendBaseWidget(i)
	return i
}

func (i *railItem) MinSize() fyne.Size {
	i.ExtendBaseWidget(i)
	m := fyne.MeasureText(i.word, look.Px(look.Small), fyne.TextStyle{Bold: true})
	return fyne.NewSize(m.Width+look.Unit*1.5, max(64, 28*look.Scale()+m.Height+look.Unit*2))
}

func (i *railItem) CreateRenderer() fyne.WidgetRenderer {
	i.bed, i.bar, i.rim = canvas.NewRectangle(nil), canvas.NewRectangle(nil), canvas.NewRectangle(nil)
	i.icon = &canvas.Image{FillMode: canvas.ImageFillContain}
	i.text = canvas.NewText(i.word, nil)
	r := &railItemRenderer{i}
	r.Refresh()
	return r
}

type railItemRenderer struct{ i *railItem }

func (r *railItemRenderer) Destroy()           {}
func (r *railItemRenderer) MinSize() fyne.Size { return r.i.MinSize() }
func (r *railItemRenderer) Objects() []fyne.CanvasObject {
	return []fyne.CanvasObject{r.i.bed, r.i.bar, r.i.icon, r.i.text, r.i.rim}
}

func (r *railItemRenderer) Layout(s fyne.Size) {
	i := r.i
	i.bed.Resize(s)
	i.rim.Move(fyne.NewPos(2, 2))
	i.rim.Resize(fyne.NewSize(s.Width-4, s.Height-4))
	i.bar.Resize(fyne.NewSize(4, s.Height))
	side := 24 * look.Scale()
	m := i.text.MinSize()
	top := (s.Height - side - m.Height - 2) / 2
	i.icon.Move(fyne.NewPos((s.Width-side)/2, top))
	i.icon.Resize(fyne.NewSize(side, side))
	i.text.Move(fyne.NewPos((s.Width-m.Width)/2, top+side+2))
	i.text.Resize(m)
}

func (r *railItemRenderer) Refresh() {
	i := r.i
	ink := look.Ink
	if i.off {
		ink = look.InkSoft
	}
	i.bed.FillColor = look.C(look.Sunk)
	if i.chosen {
		i.bed.FillColor = look.C(look.Paper)
	} else if i.hover && !i.off {
		i.bed.FillColor = look.C(look.Over)
	}
	i.bar.FillColor = look.C(look.Ink)
	i.bar.Hidden = !i.chosen
	i.rim.Hidden = !i.focus
	i.rim.StrokeColor, i.rim.StrokeWidth, i.rim.CornerRadius = look.C(look.Focus), 3, 4
	i.icon.Resource = look.Icon(i.iconName, ink)
	i.text.TextSize, i.text.Color, i.text.TextStyle = look.Px(look.Small), look.C(ink), fyne.TextStyle{Bold: i.chosen}
	r.Layout(i.BaseWidget.Size())
	for _, o := range r.Objects() {
		o.Refresh()
	}
}

func (i *railItem) Tapped(*fyne.PointEvent) { i.rail.choose(i.screen) }
func (i *railItem) FocusGained()            { i.focus = true; i.Refresh() }
func (i *railItem) FocusLost()              { i.focus = false; i.Refresh() }
func (i *railItem) TypedRune(r rune) {
	if r != ' ' {
		mark.PassRune(i, r)
	}
}

func (i *railItem) TypedKey(e *fyne.KeyEvent) {
	switch e.Name {
	case fyne.KeySpace, fyne.KeyReturn, fyne.KeyEnter:
		i.Tapped(nil)
	default:
		mark.PassKey(i, e)
	}
}

func (i *railItem) Cursor() desktop.Cursor { return desktop.PointerCursor }
func (i *railItem) MouseIn(e *desktop.MouseEvent) {
	i.hover = true
	i.Refresh()
	for k, s := range view.Rail() {
		if s == i.screen {
			mark.ShowTip(i, words.T("Ctrl+%d", k+1), e.AbsolutePosition)
		}
	}
}
func (i *railItem) MouseMoved(*desktop.MouseEvent) {}
func (i *railItem) MouseOut()                      { i.hover = false; i.Refresh(); mark.HideTip(i) }

// strip is what stands above every screen: the animal, its problem, its precautions in words,
// the day, whether everything is saved and shared.
type strip struct {
	widget.BaseWidget
	win   *window
	box   *fyne.Container
	outer *fyne.Container
	save  *savedMark
}

func newStrip(w *window) *strip {
	s := &strip{win: w, save: newSavedMark()}
	s.box = mark.Column(0)
	s.outer = mark.Column(0, mark.Pad(look.Unit, look.Unit*2, s.box), mark.Rule())
	s.ExtendBaseWidget(s)
	return s
}

func (s *strip) CreateRenderer() fyne.WidgetRenderer { return widget.NewSimpleRenderer(s.outer) }

// HeightFor returns the height of the strip at a width.
func (s *strip) HeightFor(width float32) float32 { return mark.HeightFor(s.outer, width) }

// badge is a word in a frame: DEMO, NOT PROTECTED.
func badge(word, tip string) fyne.CanvasObject {
	return newTipped(mark.On(look.Sunk, true, mark.Pad(1, look.Unit, mark.Note(word).In(look.Ink))), tip)
}

// update writes the strip anew.
func (s *strip) update() {
	w, a := s.win, s.win.app
	if a.records == nil {
		return
	}
	var badges []fyne.CanvasObject
	f := w.file
	st := view.StripOf(f.Patient, a.now(), a.practice.Units())
	if st.Demo || a.practice.Demo {
		badges = append(badges, badge(words.T("DEMO"), words.T("Invented animals, made to look around. Nothing here is a real patient.")))
	}
	if !a.records.Protected() {
		badges = append(badges, badge(words.T("not protected"), words.T("The key lies beside the data: whoever has this folder can read it.")))
	}
	if !a.shared.IsZero() {
		badges = append(badges, badge(words.T("shared %s", a.shared.Format("15:04")), words.T("Exchanged with the other devices at that time.")))
	}
	if n := len(f.Conflict); n > 0 {
		say := words.N(n, "%d value to choose", "%d values to choose", n)
		badges = append(badges, newPressable(mark.On(look.FocusBed, true, mark.Pad(1, look.Unit, mark.Note(say).In(look.Ink))),
			words.T("Two devices wrote different things. Both are kept until a person chooses."),
			func() { w.goTo(view.Route{Screen: view.ScreenChoices, Patient: f.Patient.ID}) }))
	}
	large := look.Scale() > 1.3
	rightBox := mark.Column(2, alignRight(mark.Line(st.Date)), alignRight(append(badges, s.save)...))
	if large {
		rightBox = mark.Column(2, alignRight(mark.Line(st.Date)), alignRight(s.save))
		for _, b := range badges {
			rightBox.Add(alignRight(b))
		}
	}
	who := mark.NewButton(a.initials(), "person", w.showExaminers).WithTip(words.T("%s examines. Press to switch (Ctrl+U).", a.examiner))
	if f.Patient.ID.IsZero() {
		name := a.practice.Name
		if name == "" {
			name = words.T("Practice without a name")
		}
		left := mark.Column(0, mark.NewPara(name).As(look.Head).Strong(), mark.NewPara(words.T("examining: %s", a.examiner)).In(look.InkSoft))
		s.box.Objects = []fyne.CanvasObject{mark.Row(look.Unit*2, []float32{1, 0, 0}, left, rightBox, who)}
		s.box.Refresh()
		s.Refresh()
		return
	}
	problem := st.Problem
	if problem == "" {
		problem = words.T("no problem on file")
	}
	list := append([]string(nil), st.Precautions...)
	if st.Limits != "" {
		list = append(list, st.Limits)
	}
	// Precautions are never shortened: they take as many lines as they need.
	var caution fyne.CanvasObject = mark.NewPara(words.T("no precautions")).In(look.InkSoft)
	if len(list) > 0 {
		caution = mark.Row(6, []float32{0, 1}, iconImage("caution", look.Worse, 20), mark.NewPara(strings.Join(list, " · ")).Strong())
	}
	name := mark.Heading(st.Name).AtLeast(80)
	left := mark.Column(0, mark.Row(look.Unit*1.5, []float32{0, 1}, fitted(name, 420), mark.Soft(st.Signalment).AtLeast(60)))
	if large {
		left.Add(mark.NewPara(problem))
		left.Add(caution)
	} else {
		left.Add(mark.RowTop(look.Unit*2, []float32{1, 1.2}, mark.Column(0, mark.Line(problem).AtLeast(100)), caution))
	}
	s.box.Objects = []fyne.CanvasObject{mark.Row(look.Unit*1.5, []float32{0, 1, 0, 0}, mark.NewSpecies(f.Patient.Species, 52*max(1, look.Scale()*0.8)), left, rightBox, who)}
	s.box.Refresh()
	s.Refresh()
}

func alignRight(o ...fyne.CanvasObject) fyne.CanvasObject {
	all := append([]fyne.CanvasObject{mark.Space(0, 1)}, o...)
	return mark.Row(look.Unit, []float32{1}, all...)
}

// fitted lets a line be as wide as its words up to a width.
func fitted(t *mark.Text, most float32) fyne.CanvasObject {
	w := fyne.MeasureText(t.Words, look.Px(t.Type), fyne.TextStyle{Bold: t.Bold}).Width
	return mark.Sized(min(w, most*look.Scale())+1, 1, t)
}

// savedMark says whether everything is saved here.
type savedMark struct {
	widget.BaseWidget
	icon  *canvas.Image
	text  *mark.Text
	state view.SaveState
}

func newSavedMark() *savedMark {
	m := &savedMark{text: mark.Line(words.T("Saved here")), icon: &canvas.Image{FillMode: canvas.ImageFillContain}}
	m.ExtendBaseWidget(m)
	return m
}

func (m *savedMark) set(s view.SaveState) {
	m.state = s
	w := words.T("Saved here")
	if n := s.Waiting(); n > 0 {
		w = words.N(n, "%d not yet saved", "%d not yet saved", n)
	}
	m.text.Token = look.Ink
	if s.Err != nil {
		m.text.Token = look.Worse
	}
	m.text.Words = w
	m.Refresh()
}

func (m *savedMark) CreateRenderer() fyne.WidgetRenderer {
	side := 18 * look.Scale()
	m.icon.SetMinSize(fyne.NewSize(side, side))
	box := mark.Row(4, nil, m.icon, m.text)
	return &savedRenderer{widget.NewSimpleRenderer(box), m, box}
}

type savedRenderer struct {
	fyne.WidgetRenderer
	m   *savedMark
	box *fyne.Container
}

func (r *savedRenderer) Refresh() {
	icon := "tick"
	if r.m.state.Waiting() > 0 {
		icon = "save"
	}
	side := 18 * look.Scale()
	r.m.icon.SetMinSize(fyne.NewSize(side, side))
	r.m.icon.Resource = look.Icon(icon, r.m.text.Token)
	r.m.icon.Refresh()
	r.m.text.Refresh()
	r.box.Refresh()
}

// foot is the line below the page: what happened last, and what the page says of itself.
type foot struct {
	widget.BaseWidget
	win   *window
	text  *mark.Text
	icon  *canvas.Image
	more  *mark.Button
	right *fyne.Container
	box   *fyne.Container
	err   error
}

func newFoot(w *window) *foot {
	f := &foot{win: w, text: mark.Soft("").AtLeast(60), icon: &canvas.Image{FillMode: canvas.ImageFillContain}}
	f.icon.SetMinSize(fyne.NewSize(18, 18))
	f.icon.Hide()
	f.more = mark.NewButton(words.T("Details"), "", func() { w.showDetails(f.text.Words, f.err) }).As(mark.Quiet)
	f.more.Hide()
	f.right = mark.Row(look.Unit, nil)
	f.box = mark.Row(look.Unit, []float32{0, 1, 0, 0}, f.icon, f.text, f.more, f.right)
	f.ExtendBaseWidget(f)
	return f
}

func (f *foot) MinSize() fyne.Size {
	f.ExtendBaseWidget(f)
	return fyne.NewSize(100, max(look.Target, f.box.MinSize().Height)+look.Unit+1)
}

func (f *foot) CreateRenderer() fyne.WidgetRenderer {
	return widget.NewSimpleRenderer(mark.ColumnGrow(0, 1, mark.Rule(), mark.Pad(look.Unit/2, look.Unit*2, f.box)))
}

// say writes what happened.
func (f *foot) say(s string) {
	f.err = nil
	f.icon.Hide()
	f.more.Hide()
	f.text.Token, f.text.Words = look.Ink, s
	f.text.Refresh()
	f.box.Refresh()
}

// fail writes what went wrong, with the details a press away.
func (f *foot) fail(sentence string, err error) {
	f.err = err
	f.text.Token, f.text.Words = look.Worse, sentence
	f.icon.Resource = look.Icon("caution", look.Worse)
	f.icon.Show()
	f.icon.Refresh()
	if err != nil {
		f.more.Show()
	}
	f.text.Refresh()
	f.box.Refresh()
}

// update asks the page what stands at the right of the line.
func (f *foot) update() {
	f.right.Objects = nil
	if p, ok := f.win.page.(footWriter); ok {
		f.right.Objects = []fyne.CanvasObject{p.foot()}
	}
	f.right.Refresh()
	f.box.Refresh()
	f.Refresh()
}

// saved shows the state of the writer.
func (w *window) saved(s view.SaveState) {
	w.strip.save.set(s)
	w.strip.box.Refresh()
	if s.Err != nil {
		w.foot.fail(words.N(s.Waiting(), "%d entry is not yet saved; it is tried again until the disk takes it.", "%d entries are not yet saved; they are tried again until the disk takes them.", s.Waiting()), s.Err)
	}
	if s.Refused != nil {
		w.foot.fail(words.T("An entry was refused."), s.Refused)
	}
}

// bare shows a page without rail, strip and foot: first start, unlocking.
func (w *window) bare(p page) {
	w.rail.Hide()
	w.strip.Hide()
	w.foot.Hide()
	w.show(p)
}

// dressed brings rail, strip and foot back.
func (w *window) dressed() {
	w.rail.Show()
	w.strip.Show()
	w.foot.Show()
	w.strip.save.set(w.app.saver.State())
}

// tipped shows a tip over something that takes no clicks.
type tipped struct {
	widget.BaseWidget
	inner fyne.CanvasObject
	tip   string
}

func newTipped(o fyne.CanvasObject, tip string) *tipped {
	t := &tipped{inner: o, tip: tip}
	t.ExtendBaseWidget(t)
	return t
}

func (t *tipped) CreateRenderer() fyne.WidgetRenderer { return widget.NewSimpleRenderer(t.inner) }
func (t *tipped) MouseIn(e *desktop.MouseEvent)       { mark.ShowTip(t, t.tip, e.AbsolutePosition) }
func (t *tipped) MouseMoved(*desktop.MouseEvent)      {}
func (t *tipped) MouseOut()                           { mark.HideTip(t) }

// iconImage is an icon of a side in px that follows the theme.
func iconImage(name string, token fyne.ThemeColorName, side float32) fyne.CanvasObject {
	i := canvas.NewImageFromResource(look.Icon(name, token))
	i.FillMode = canvas.ImageFillContain
	i.SetMinSize(fyne.NewSize(side*look.Scale(), side*look.Scale()))
	return i
}
