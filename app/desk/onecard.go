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

// oneCard shows a single test on the whole of the left side, for tablets and new staff: how it
// is done in one line, what each grade looks like, buttons of 96 px. It shows the same sheet
// as the grid and hands it the same keys.
type oneCard struct {
	widget.BaseWidget
	page    *examPage
	box     *fyne.Container
	scroll  *mark.Scroll
	focused bool
	rim     *mark.Ground
}

func newOneCard(p *examPage) *oneCard {
	c := &oneCard{page: p, box: mark.Column(look.Unit * 2), rim: mark.NewGround(look.Paper)}
	c.scroll = mark.NewScroll(mark.Pad(look.Unit*2, look.Unit*2, c.box))
	c.scroll.OnSwipe = func(dir int) { p.pressed(p.sheet.Press(view.Key{Name: "Tab", Shift: dir < 0})) }
	c.ExtendBaseWidget(c)
	return c
}

func (c *oneCard) CreateRenderer() fyne.WidgetRenderer {
	return widget.NewSimpleRenderer(&fyne.Container{Layout: stackLayout{}, Objects: []fyne.CanvasObject{c.rim, c.scroll}})
}

type stackLayout struct{}

func (stackLayout) MinSize([]fyne.CanvasObject) fyne.Size { return fyne.NewSize(320, 200) }
func (stackLayout) Layout(o []fyne.CanvasObject, s fyne.Size) {
	for _, x := range o {
		x.Move(fyne.NewPos(0, 0))
		x.Resize(s)
	}
}

// update draws the test in focus.
func (c *oneCard) update() {
	s := c.page.sheet
	if s == nil {
		return
	}
	focus := s.FocusIndex()
	if focus < 0 {
		c.box.Objects = []fyne.CanvasObject{mark.Heading(words.T("This protocol asks nothing."))}
		c.scroll.Reflow()
		return
	}
	cell := s.Cells()[focus]
	step, _ := s.Step()
	done := func(err error) {
		o := view.Outcome{Handled: true, Err: err}
		if err != nil {
			o.Words = err.Error()
		}
		c.page.pressed(o)
	}
	lines := []fyne.CanvasObject{
		mark.Soft(step.Position.Words()).AtLeast(80),
		mark.NewPara(cell.Name()).As(look.Title).Strong(),
	}
	if how := exam.HowTo(cell.Key.Item); how != "" && !cell.IsMeasure() {
		lines = append(lines, mark.NewPara(words.Of(how)))
	}
	if cell.Key.Item == exam.DeepPain {
		lines = append(lines, mark.NewPara(words.T("A limb that withdraws is not a limb that feels: look for a turn, a cry or a bite.")).Strong())
	}
	mode, _ := s.Mode()
	plain := !cell.IsMeasure() && mode == view.Grading && (cell.Barred == "" || cell.Override != "") && (!s.Closed() || isAmending(s))
	if plain {
		var buttons []fyne.CanvasObject
		for _, g := range s.Grades(focus) {
			grade := g.Grade
			b := mark.NewGrade(g.Bead, strconv.Itoa(int(grade)), g.Word, func() { done(s.Grade(focus, grade)) })
			b.Large = true
			b.SetChosen(g.Chosen)
			buttons = append(buttons, b)
		}
		lines = append(lines, mark.Wrapped(look.Unit*1.5, buttons...))
		more := []fyne.CanvasObject{mark.NewButton(words.T("not tested"), "", func() { s.Press(view.Rune('x')); done(nil) })}
		if cell.HasLast && !s.Blind() {
			more = append(more,
				mark.NewButton(words.T("same as last visit"), "", func() { done(s.SameAsLast()) }),
				mark.NewButton(words.T("peek at last visit"), "eye", func() { c.page.pressed(s.Peek()) }))
		}
		lines = append(lines, mark.Wrapped(look.Unit, more...))
	} else {
		lines = append(lines, editorBody(s, focus, done)[1:]...)
	}
	if s.ShowLast(focus) {
		last := mark.Row(look.Unit, []float32{0, 1}, mark.NewBead(view.BeadOf(cell.Last), 24), mark.NewPara(words.T("Last time: %s", view.GradeWords(cell.Last))))
		lines = append(lines, last)
	}
	why := cell.Why
	if cell.NotAsked != "" && !cell.Entered {
		why = words.T("Not asked: %s", cell.NotAsked)
	}
	if why != "" {
		lines = append(lines, mark.NewPara(why).In(look.InkSoft))
	}
	lines = append(lines, mark.Row(look.Unit, []float32{0, 1, 0},
		mark.NewButton(words.T("Back"), "left", func() { c.page.pressed(s.Press(view.Key{Name: "Tab", Shift: true})) }),
		mark.Space(1, 1),
		mark.NewButton(words.T("Next"), "right", func() { c.page.pressed(s.Press(view.Named("Tab"))) })))
	c.box.Objects = lines
	c.box.Refresh()
	c.scroll.Reflow()
}

var (
	_ fyne.Focusable    = (*oneCard)(nil)
	_ fyne.Tabbable     = (*oneCard)(nil)
	_ fyne.Shortcutable = (*oneCard)(nil)
)

// FocusGained draws the ring.
func (c *oneCard) FocusGained() { c.focused = true; c.ring() }

// FocusLost takes it away.
func (c *oneCard) FocusLost() { c.focused = false; c.ring() }

func (c *oneCard) ring() {
	c.rim.Edge = c.focused
	c.rim.Refresh()
}

// AcceptsTab keeps Tab for the walk.
func (c *oneCard) AcceptsTab() bool { return true }

// TypedRune hands a letter to the sheet; what the sheet does not know goes to the page.
func (c *oneCard) TypedRune(r rune) { c.page.typed(view.Key{Rune: r, Shift: shiftDown()}) }

// TypedKey hands a named key to the sheet.
func (c *oneCard) TypedKey(e *fyne.KeyEvent) {
	if e.Name == fyne.KeyF1 {
		c.page.win.showHelp()
		return
	}
	if name, ok := keyNames[e.Name]; ok {
		c.page.typed(view.Key{Name: name, Shift: shiftDown()})
	}
}

// TypedShortcut takes undo and redo.
func (c *oneCard) TypedShortcut(s fyne.Shortcut) { c.page.shortcut(c, s) }
