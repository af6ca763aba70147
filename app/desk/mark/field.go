package mark

import (
	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/driver/desktop"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/look"
)

// Field is a line to write in. Keys it has no use for (help, the screens' shortcuts, up and
// down) reach the window.
type Field struct {
	widget.Entry
	hint                   string // the whole of what PlaceHolder may show shortened
	OnUp, OnDown, OnEscape func()
	OnLeave                func() // the keys go elsewhere
}

// NewField returns a field with words in it.
func NewField(words string, changed func(string)) *Field {
	f := &Field{}
	f.Text = words
	f.OnChanged = changed
	f.ExtendBaseWidget(f)
	return f
}

// NewArea returns a field of several lines.
func NewArea(words string, lines int, changed func(string)) *Field {
	f := &Field{}
	f.MultiLine = true
	f.Wrapping = fyne.TextWrapWord
	f.Text = words
	f.OnChanged = changed
	f.SetMinRowsVisible(lines)
	f.ExtendBaseWidget(f)
	return f
}

// Hint shows words in soft ink while the field is empty.
func (f *Field) Hint(words string) *Field {
	f.hint, f.PlaceHolder = words, words
	return f
}

// Resize shortens the hint to the room there is.
func (f *Field) Resize(s fyne.Size) {
	if f.hint != "" && !f.MultiLine {
		room := s.Width - 3*look.Unit
		if f.Password {
			room -= 44
		}
		f.PlaceHolder, _ = Fit(f.hint, room, look.Px(look.Body), fyne.TextStyle{})
	}
	f.Entry.Resize(s)
}

// MinSize is at least the target's height.
func (f *Field) MinSize() fyne.Size {
	m := f.Entry.MinSize()
	return fyne.NewSize(max(m.Width, 80), max(m.Height, look.Target))
}

// TypedKey passes on what a line has no use for.
func (f *Field) TypedKey(e *fyne.KeyEvent) {
	call := func(do func()) bool {
		if do != nil {
			do()
			return true
		}
		return false
	}
	switch e.Name {
	case fyne.KeyUp:
		if call(f.OnUp) {
			return
		}
	case fyne.KeyDown:
		if call(f.OnDown) {
			return
		}
	case fyne.KeyEscape:
		if call(f.OnEscape) {
			return
		}
		passKey(f, e)
		return
	case fyne.KeyF1:
		passKey(f, e)
		return
	}
	f.Entry.TypedKey(e)
}

// FocusLost tells that the field is left.
func (f *Field) FocusLost() {
	f.Entry.FocusLost()
	if f.OnLeave != nil {
		f.OnLeave()
	}
}

// TypedShortcut passes on the screens' shortcuts.
func (f *Field) TypedShortcut(s fyne.Shortcut) {
	if _, own := s.(*desktop.CustomShortcut); own {
		PassShortcut(f, s)
		return
	}
	f.Entry.TypedShortcut(s)
}

// PassShortcut gives a shortcut to the window.
func PassShortcut(o fyne.CanvasObject, s fyne.Shortcut) {
	if c, ok := fyne.CurrentApp().Driver().CanvasForObject(o).(fyne.Shortcutable); ok {
		c.TypedShortcut(s)
	}
}

// PassKey gives a key to the window.
func PassKey(o fyne.CanvasObject, e *fyne.KeyEvent) { passKey(o, e) }

// PassRune gives a letter to the window.
func PassRune(o fyne.CanvasObject, r rune) { passRune(o, r) }

// Check is a box to tick with words beside it, as high as a target.
type Check struct{ widget.Check }

// Tick returns a box to tick.
func Tick(words string, on bool, changed func(bool)) *Check {
	c := &Check{}
	c.Text, c.Checked, c.OnChanged = words, on, changed
	c.ExtendBaseWidget(c)
	return c
}

// MinSize is at least the target's in both directions.
func (c *Check) MinSize() fyne.Size {
	return c.Check.MinSize().Max(fyne.NewSize(look.Target, look.Target))
}

// MouseDown begins a press.
func (c *Check) MouseDown(e *desktop.MouseEvent) { Press(c, e.AbsolutePosition) }

// MouseUp does nothing: Tapped follows.
func (c *Check) MouseUp(*desktop.MouseEvent) {}

// Slide is a slider as high as a target.
type Slide struct{ widget.Slider }

// NewSlide returns a slider between two values.
func NewSlide(least, most float64) *Slide {
	s := &Slide{}
	s.Min, s.Max, s.Step = least, most, 1
	s.ExtendBaseWidget(s)
	return s
}

// MinSize is at least the target's height.
func (s *Slide) MinSize() fyne.Size {
	return s.Slider.MinSize().Max(fyne.NewSize(look.Target, look.Target))
}

// Pick is a list to choose one word from, with the outline of a field.
type Pick struct {
	widget.Select
	rim     *canvas.Rectangle
	focused bool
}

// Choice returns a list to choose from: the words shown, and what each stands for.
func Choice(shown, values []string, value string, changed func(string)) *Pick {
	s := &Pick{}
	s.Options = shown
	for i, v := range values {
		if v == value && i < len(shown) {
			s.Selected = shown[i]
		}
	}
	s.ExtendBaseWidget(s)
	s.OnChanged = func(string) {
		if i := s.SelectedIndex(); i >= 0 && i < len(values) {
			changed(values[i])
		}
	}
	return s
}

// MinSize is at least the target's height.
func (s *Pick) MinSize() fyne.Size {
	m := s.Select.MinSize()
	return fyne.NewSize(min(m.Width, 160), max(m.Height, look.Target))
}

// MouseDown begins a press.
func (s *Pick) MouseDown(e *desktop.MouseEvent) { Press(s, e.AbsolutePosition) }

// MouseUp does nothing: Tapped follows.
func (s *Pick) MouseUp(*desktop.MouseEvent) {}

// CreateRenderer draws the outline over the list's own drawing.
func (s *Pick) CreateRenderer() fyne.WidgetRenderer {
	s.rim = canvas.NewRectangle(with(look.C(look.Paper), 0))
	s.rim.CornerRadius = 4
	r := &pickRenderer{s.Select.CreateRenderer(), s}
	r.rim()
	return r
}

type pickRenderer struct {
	fyne.WidgetRenderer
	s *Pick
}

func (r *pickRenderer) Objects() []fyne.CanvasObject {
	return append(append([]fyne.CanvasObject(nil), r.WidgetRenderer.Objects()...), r.s.rim)
}

func (r *pickRenderer) Layout(s fyne.Size) {
	r.WidgetRenderer.Layout(s)
	r.s.rim.Resize(s)
}

func (r *pickRenderer) Refresh() {
	r.WidgetRenderer.Refresh()
	r.rim()
}

func (r *pickRenderer) rim() {
	r.s.rim.StrokeColor, r.s.rim.StrokeWidth = look.C(look.Edge), 2
	if r.s.focused {
		r.s.rim.StrokeColor, r.s.rim.StrokeWidth = look.C(look.Focus), 3
	}
	canvas.Refresh(r.s.rim)
}

// FocusGained draws the focus ring.
func (s *Pick) FocusGained() { s.focused = true; s.Select.FocusGained() }

// FocusLost takes it away.
func (s *Pick) FocusLost() { s.focused = false; s.Select.FocusLost() }

// Labelled puts a field under its name, with a line for what is wrong below.
type Labelled struct {
	widget.BaseWidget
	box   *fyne.Container
	wrong *Para
}

// NewLabelled returns a labelled field.
func NewLabelled(name string, field fyne.CanvasObject) *Labelled {
	l := &Labelled{wrong: NewPara("").In(look.Worse)}
	l.wrong.Hide()
	l.box = Column(2, newText(name, look.Small, look.InkSoft, false).AtLeast(60), field, l.wrong)
	l.ExtendBaseWidget(l)
	return l
}

// Wrong shows what is wrong; the empty words take it away.
func (l *Labelled) Wrong(words string) {
	if words == "" {
		l.wrong.Hide()
	} else {
		l.wrong.Words = words
		l.wrong.Show()
	}
	l.wrong.Refresh()
	l.box.Refresh()
	l.Refresh()
}

// HeightFor returns the height at a width.
func (l *Labelled) HeightFor(width float32) float32 { return HeightFor(l.box, width) }

// CreateRenderer shows the label, the field and what is wrong.
func (l *Labelled) CreateRenderer() fyne.WidgetRenderer { return widget.NewSimpleRenderer(l.box) }
