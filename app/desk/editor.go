package desk

import (
	"strconv"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// gridEditor is the open part of the grid: the cell in focus, large, with its grades as buttons.
type gridEditor struct {
	widget.BaseWidget
	grid *examGrid
	box  *fyne.Container
	bed  *mark.Ground
	face editorFace
}

// editorFace is what the editor shows; equal faces need no rebuilding.
type editorFace struct {
	cell   int
	mode   view.Mode
	text   string
	chosen string
	barred string
	override,
	closed,
	amending bool
	again bool
	why   string
}

func newGridEditor(g *examGrid) *gridEditor {
	e := &gridEditor{grid: g, box: mark.Column(look.Unit), bed: mark.NewGround(look.FocusBed), face: editorFace{cell: -2}}
	e.bed.Round = 4
	e.ExtendBaseWidget(e)
	return e
}

// HeightFor returns the height of the open part at a width.
func (e *gridEditor) HeightFor(width float32) float32 {
	if e.face.cell < 0 {
		return 0
	}
	return mark.HeightFor(e.box, width-2*look.Unit) + 2*look.Unit
}

func (e *gridEditor) CreateRenderer() fyne.WidgetRenderer {
	return widget.NewSimpleRenderer(&fyne.Container{Layout: editorLayout{e}, Objects: []fyne.CanvasObject{e.bed, e.box}})
}

type editorLayout struct{ e *gridEditor }

func (l editorLayout) MinSize([]fyne.CanvasObject) fyne.Size { return fyne.Size{} }
func (l editorLayout) Layout(o []fyne.CanvasObject, s fyne.Size) {
	o[0].Move(fyne.NewPos(2, 0))
	o[0].Resize(fyne.NewSize(max(0, s.Width-4), max(0, s.Height-2)))
	o[1].Move(fyne.NewPos(look.Unit, look.Unit))
	o[1].Resize(fyne.NewSize(max(0, s.Width-2*look.Unit), max(0, s.Height-2*look.Unit)))
}

// update rebuilds the open part where it changed and says whether its size may have.
func (e *gridEditor) update(focus int) bool {
	s := e.grid.sheet
	f := editorFace{cell: focus, closed: s.Closed()}
	_, f.amending = s.Amending()
	if focus >= 0 {
		c := s.Cells()[focus]
		f.mode, f.text = s.Mode()
		f.barred, f.override = c.Barred, c.Override != ""
		f.why = c.Why + c.NotAsked
		if !c.IsMeasure() && c.Entered {
			f.chosen = view.GradeWords(c.Today)
		}
		if st, ok := s.Step(); ok {
			f.again = st.Again
		}
	}
	if f == e.face {
		return false
	}
	e.face = f
	e.box.Objects = editorBody(s, focus, e.grid.done)
	e.box.Refresh()
	return true
}

// editorBody is what the open part holds: the cell's name, and the buttons its mode needs.
// The same body serves the grid and the one-at-a-time card.
func editorBody(s *view.ExamSheet, focus int, done func(error)) []fyne.CanvasObject {
	if focus < 0 {
		return nil
	}
	c := s.Cells()[focus]
	name := mark.NewPara(c.Name()).Strong()
	side := mark.NewPara("").In(look.InkSoft)
	switch {
	case c.Barred != "" && c.Override == "":
		side.Set(words.T("not safe: %s", c.Barred))
	case c.NotAsked != "" && !c.Entered:
		side.Set(words.T("not asked: %s", c.NotAsked))
	case c.Why != "":
		side.Set(c.Why)
	}
	if st, ok := s.Step(); ok && st.Again {
		side.Set(words.T("absent uppermost: test it again undermost"))
	}
	head := mark.Column(2, name)
	if side.Words != "" {
		head.Add(side)
	}
	mode, text := s.Mode()
	switch {
	case s.Closed() && !isAmending(s):
		return []fyne.CanvasObject{head, mark.NewPara(words.T("This visit is closed. Give a reason to amend it.")).In(look.InkSoft)}
	case mode == view.Reasoning:
		return []fyne.CanvasObject{head, reasonButtons(s, done)}
	case mode == view.Levelling:
		return []fyne.CanvasObject{head, levelButtons(s, text, done)}
	case mode == view.Typing || c.IsMeasure():
		return []fyne.CanvasObject{head, typedLine(s, c, text, done)}
	case c.Barred != "" && c.Override == "":
		return []fyne.CanvasObject{head, overrideLine(s, focus, done)}
	}
	var buttons []fyne.CanvasObject
	for _, g := range s.Grades(focus) {
		grade := g.Grade
		b := mark.NewGrade(g.Bead, strconv.Itoa(int(grade)), g.Word, func() { done(s.Grade(focus, grade)) })
		b.SetChosen(g.Chosen)
		buttons = append(buttons, b)
	}
	none := mark.NewButton(words.T("not tested"), "", func() { s.Press(view.Rune('x')); done(nil) }).WithTip(words.T("Key x"))
	buttons = append(buttons, none)
	if c.HasLast && !s.Blind() {
		buttons = append(buttons, mark.NewButton(words.T("same"), "", func() { done(s.SameAsLast()) }).WithTip(words.T("As last visit. Key s")))
	}
	if c.Key.Item.Has(exam.TakesLevel) && c.Entered && c.Today.Result.Tested() {
		buttons = append(buttons, mark.NewButton(words.T("vertebra"), "", func() { s.Press(view.Rune('l')); done(nil) }).WithTip(words.T("Key l")))
	}
	if c.Key.Item.Has(exam.TakesDigit) && c.Site.IsLimb() {
		buttons = append(buttons,
			mark.NewButton(words.T("medial digit"), "", func() { done(s.FocusDigit(exam.Medial)) }).WithTip(words.T("Key [")),
			mark.NewButton(words.T("lateral digit"), "", func() { done(s.FocusDigit(exam.Lateral)) }).WithTip(words.T("Key ]")))
	}
	return []fyne.CanvasObject{head, mark.Wrapped(look.Unit, buttons...)}
}

func isAmending(s *view.ExamSheet) bool { _, ok := s.Amending(); return ok }

func reasonButtons(s *view.ExamSheet, done func(error)) fyne.CanvasObject {
	var out []fyne.CanvasObject
	add := func(key rune, word string) {
		out = append(out, mark.NewButton(string(key)+"  "+word, "", func() { o := s.Press(view.Rune(key)); done(o.Err) }))
	}
	add('p', words.Of(exam.Pain.String()))
	add('t', words.Of(exam.Temperament.String()))
	add('s', words.Of(exam.SedationReason.String()))
	add('n', words.Of(exam.NotSafe.String()))
	add('o', words.Of(exam.OwnerDeclined.String()))
	add('w', words.T("in words"))
	out = append(out,
		mark.NewButton(words.T("no reason"), "", func() { o := s.Press(view.Named("Enter")); done(o.Err) }).WithTip(words.T("Key Enter")),
		mark.NewButton(words.T("back"), "", func() { s.Press(view.Named("Escape")); done(nil) }).As(mark.Quiet).WithTip(words.T("Key Escape")))
	return mark.Wrapped(look.Unit, out...)
}

// levelButtons offers the vertebrae around the proposed one.
func levelButtons(s *view.ExamSheet, proposed string, done func(error)) fyne.CanvasObject {
	sp := s.Patient().Species
	at := exam.NewVertebra(exam.RegionT, 13)
	if v, err := exam.ParseVertebra(proposed, sp); err == nil {
		at = v
	}
	list := exam.Vertebrae(sp)
	i := max(0, exam.VertebraIndex(sp, at))
	from := max(0, min(i-4, len(list)-9))
	var out []fyne.CanvasObject
	out = append(out, mark.Line(words.T("Vertebra:")))
	for _, v := range list[from:min(len(list), from+9)] {
		b := mark.NewButton(v.String(), "", func() { done(s.SetLevel(v)) })
		b.Chosen = v == at
		out = append(out, b)
	}
	hint := mark.NewPara(words.T("Type it (T13), or use the arrows; Enter takes it, Escape leaves it out. %s", proposed)).In(look.InkSoft).As(look.Small)
	return mark.Column(4, mark.Wrapped(4, out...), hint)
}

// typedLine shows a number or a reason as it is typed.
func typedLine(s *view.ExamSheet, c view.Cell, text string, done func(error)) fyne.CanvasObject {
	unit := ""
	hint := words.T("Why was it not tested? Enter keeps it.")
	if c.IsMeasure() {
		unit = s.UnitOf(c.Measure)
		if unit == "1" {
			unit = ""
		}
		hint = words.T("Type the value; Enter keeps it.")
		if c.HasLast {
			hint = words.T("Last time: %s. Type the value; Enter keeps it.", s.ValueWords(c.LastVal))
		}
		if text == "" && c.Entered {
			text = s.ValueWords(c.Value)
			unit = ""
		}
	}
	field := mark.NewTyped(text, unit)
	ok := mark.NewButton(words.T("Keep"), "", func() { o := s.Press(view.Named("Enter")); done(o.Err) })
	keys := []fyne.CanvasObject{mark.Sized(100, look.Target, field), ok}
	if c.IsMeasure() {
		for _, k := range "1234567890." {
			key, face := k, string(k)
			if key == '.' {
				face = view.DecimalSign()
			}
			keys = append(keys, mark.NewButton(face, "", func() { o := s.Press(view.Rune(key)); done(o.Err) }))
		}
	}
	return mark.Column(4, mark.Wrapped(4, keys...), mark.NewPara(hint).In(look.InkSoft).As(look.Small))
}

func overrideLine(s *view.ExamSheet, cell int, done func(error)) fyne.CanvasObject {
	reason := widget.NewEntry()
	reason.SetPlaceHolder(words.T("Why it is done all the same"))
	test := mark.NewButton(words.T("Test it all the same"), "", func() { done(s.OverrideBar(cell, reason.Text)) })
	reason.OnSubmitted = func(t string) { done(s.OverrideBar(cell, t)) }
	return mark.Row(look.Unit, []float32{1}, reason, test)
}
