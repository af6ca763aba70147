package mark

import (
	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/driver/desktop"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/ink"
	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/view"
)

// Grade is one grade to choose: its bead, its number, its word. Keys go to the grid, so it
// takes no focus of its own.
type Grade struct {
	widget.BaseWidget
	State  view.Bead
	Number string
	Words  string
	Large  bool // 96 px high, for one test at a time
	OnTap  func()

	chosen, hover bool
	bed           *canvas.Rectangle
	bead          *canvas.Raster
	number, word  *canvas.Text
}

// NewGrade returns a grade button.
func NewGrade(state view.Bead, number, word string, tap func()) *Grade {
	g := &Grade{State: state, Number: number, Words: word, OnTap: tap}
	g.ExtendBaseWidget(g)
	return g
}

// SetChosen marks the grade given today.
func (g *Grade) SetChosen(on bool) { g.chosen = on; g.Refresh() }

func (g *Grade) side() float32 {
	if g.Large {
		return 36 * look.Scale()
	}
	return 20 * look.Scale()
}

// MinSize holds the bead, the number and the word.
func (g *Grade) MinSize() fyne.Size {
	g.ExtendBaseWidget(g)
	n := fyne.MeasureText(g.Number, g.numberSize(), fyne.TextStyle{Bold: true})
	w := fyne.MeasureText(g.Words, g.wordSize(), fyne.TextStyle{})
	if g.Large {
		return fyne.NewSize(max(140, look.Unit*4+g.side()+look.Unit+max(n.Width, w.Width)), max(96, n.Height+w.Height+look.Unit*2))
	}
	return fyne.NewSize(look.Unit*3+g.side()+8+n.Width+8+w.Width, max(look.Target, w.Height+look.Unit*1.5))
}

func (g *Grade) numberSize() float32 {
	if g.Large {
		return look.Px(look.Title)
	}
	return look.Px(look.Body)
}

func (g *Grade) wordSize() float32 {
	if g.Large {
		return look.Px(look.Head)
	}
	return look.Px(look.Body)
}

// CreateRenderer draws the button.
func (g *Grade) CreateRenderer() fyne.WidgetRenderer {
	g.bed = canvas.NewRectangle(look.C(look.Raised))
	g.bed.CornerRadius = 4
	g.number, g.word = canvas.NewText(g.Number, nil), canvas.NewText(g.Words, nil)
	g.bead = picture(func() fyne.Size { return g.bead.Size() }, func(p *ink.Pen, w, h float64) {
		DrawBead(p, g.State, ink.Point{X: w / 2, Y: h - w/2}, w/2-1, true)
	})
	r := &gradeRenderer{g}
	r.Refresh()
	return r
}

type gradeRenderer struct{ g *Grade }

func (r *gradeRenderer) Destroy()           {}
func (r *gradeRenderer) MinSize() fyne.Size { return r.g.MinSize() }
func (r *gradeRenderer) Objects() []fyne.CanvasObject {
	return []fyne.CanvasObject{r.g.bed, r.g.bead, r.g.number, r.g.word}
}

func (r *gradeRenderer) Layout(s fyne.Size) {
	g := r.g
	g.bed.Resize(s)
	d := g.side()
	pad := look.Unit * 1.5
	g.bead.Resize(fyne.NewSize(d, d*1.3))
	g.bead.Move(fyne.NewPos(pad, s.Height/2-d*0.8))
	n, w := g.number.MinSize(), g.word.MinSize()
	x := pad + d + look.Unit
	if g.Large {
		top := (s.Height - n.Height - w.Height) / 2
		g.number.Move(fyne.NewPos(x, top))
		g.word.Move(fyne.NewPos(x, top+n.Height))
	} else {
		g.number.Move(fyne.NewPos(x, (s.Height-n.Height)/2))
		g.word.Move(fyne.NewPos(x+n.Width+look.Unit, (s.Height-w.Height)/2))
	}
	g.number.Resize(n)
	g.word.Resize(w)
}

func (r *gradeRenderer) Refresh() {
	g := r.g
	g.bed.FillColor, g.bed.StrokeColor, g.bed.StrokeWidth = look.C(look.Raised), look.C(look.Edge), 1
	if g.hover {
		g.bed.FillColor = look.C(look.Over)
	}
	if g.chosen {
		g.bed.StrokeColor, g.bed.StrokeWidth = look.C(look.Focus), 3
	}
	g.number.TextSize, g.number.TextStyle, g.number.Color = g.numberSize(), fyne.TextStyle{Bold: true}, look.C(look.Ink)
	g.word.TextSize, g.word.Color = g.wordSize(), look.C(look.Ink)
	r.Layout(g.BaseWidget.Size())
	for _, o := range r.Objects() {
		canvas.Refresh(o)
	}
}

// MouseDown begins a press.
func (g *Grade) MouseDown(e *desktop.MouseEvent) { Press(g, e.AbsolutePosition) }

// MouseUp does nothing: Tapped follows.
func (g *Grade) MouseUp(*desktop.MouseEvent) {}

// Tapped gives the grade.
func (g *Grade) Tapped(*fyne.PointEvent) {
	if g.OnTap != nil {
		g.OnTap()
	}
}

var _ desktop.Hoverable = (*Grade)(nil)

// Cursor shows that the grade can be pressed.
func (g *Grade) Cursor() desktop.Cursor { return desktop.PointerCursor }

// MouseIn marks the button.
func (g *Grade) MouseIn(*desktop.MouseEvent) { g.hover = true; g.Refresh() }

// MouseMoved does nothing.
func (g *Grade) MouseMoved(*desktop.MouseEvent) {}

// MouseOut unmarks it.
func (g *Grade) MouseOut() { g.hover = false; g.Refresh() }

// Typed is a field that shows what the screen's keys have typed, with a caret at its end.
type Typed struct {
	widget.BaseWidget
	words, unit string
}

// NewTyped returns such a field.
func NewTyped(words, unit string) *Typed {
	t := &Typed{words: words, unit: unit}
	t.ExtendBaseWidget(t)
	return t
}

// CreateRenderer draws the field.
func (t *Typed) CreateRenderer() fyne.WidgetRenderer {
	caret := NewGround(look.Focus)
	line := Row(3, []float32{0, 0, 1}, Bold(t.words), Sized(2, look.Px(look.Body)*1.2, caret), Soft(t.unit))
	return widget.NewSimpleRenderer(On(look.Raised, true, Pad(4, look.Unit, line)))
}
