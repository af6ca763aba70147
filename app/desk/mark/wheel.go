package mark

import (
	"weak"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/look"
)

// panes are the scrolls there are, so that a field can pass the wheel on to the one it lies in. The
// toolkit gives the wheel to the innermost thing that scrolls, which is the line of text itself.
var panes []weak.Pointer[Scroll]

func enlist(s *Scroll) {
	live := panes[:0]
	for _, p := range panes {
		if p.Value() != nil {
			live = append(live, p)
		}
	}
	panes = append(live, weak.Make(s))
}

// paneAt returns the smallest scroll of a canvas under a point.
func paneAt(c fyne.Canvas, at fyne.Position) *Scroll {
	var found *Scroll
	d := fyne.CurrentApp().Driver()
	for _, p := range panes {
		s := p.Value()
		if s == nil || !s.Visible() || d.CanvasForObject(s) != c {
			continue
		}
		from, size := d.AbsolutePositionForObject(s), s.Size()
		if at.X < from.X || at.Y < from.Y || at.X > from.X+size.Width || at.Y > from.Y+size.Height {
			continue
		}
		if found == nil || size.Width*size.Height < found.Size().Width*found.Size().Height {
			found = s
		}
	}
	return found
}

// wheel lies over a line of text, takes nothing but the wheel, and gives it to the pane around it.
type wheel struct {
	widget.BaseWidget
	field *Field
}

func newWheel(f *Field) *wheel {
	w := &wheel{field: f}
	w.ExtendBaseWidget(w)
	return w
}

// CreateRenderer draws nothing.
func (w *wheel) CreateRenderer() fyne.WidgetRenderer {
	return widget.NewSimpleRenderer(canvas.NewRectangle(with(look.C(look.Paper), 0)))
}

// Scrolled moves the pane that the field lies in.
func (w *wheel) Scrolled(e *fyne.ScrollEvent) {
	d := fyne.CurrentApp().Driver()
	middle := d.AbsolutePositionForObject(w.field).AddXY(w.field.Size().Width/2, w.field.Size().Height/2)
	if s := paneAt(d.CanvasForObject(w.field), middle); s != nil {
		s.scroll.Scrolled(e)
	}
}

// CreateRenderer lays the wheel over a field of one line; a field of several lines scrolls itself.
func (f *Field) CreateRenderer() fyne.WidgetRenderer {
	r := f.Entry.CreateRenderer()
	if f.MultiLine {
		return r
	}
	return &fieldRenderer{r, newWheel(f)}
}

type fieldRenderer struct {
	fyne.WidgetRenderer
	wheel *wheel
}

func (r *fieldRenderer) Objects() []fyne.CanvasObject {
	return append(append([]fyne.CanvasObject(nil), r.WidgetRenderer.Objects()...), r.wheel)
}

func (r *fieldRenderer) Layout(s fyne.Size) {
	r.WidgetRenderer.Layout(s)
	r.wheel.Resize(s)
}
