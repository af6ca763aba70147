package desk

import (
	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/driver/desktop"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
)

// pressable is something of any look that is pressed like a button, by pointer and by key.
type pressable struct {
	widget.BaseWidget
	inner fyne.CanvasObject
	tip   string
	tap   func()
	rim   *canvas.Rectangle
}

func newPressable(inner fyne.CanvasObject, tip string, tap func()) *pressable {
	p := &pressable{inner: inner, tip: tip, tap: tap, rim: canvas.NewRectangle(nil)}
	p.rim.Hide()
	p.ExtendBaseWidget(p)
	return p
}

func (p *pressable) CreateRenderer() fyne.WidgetRenderer { return &pressableRenderer{p} }

// HeightFor returns the height at a width, a finger's at least.
func (p *pressable) HeightFor(width float32) float32 {
	return max(look.Target, mark.HeightFor(p.inner, width))
}

func (p *pressable) focus(on bool) {
	p.rim.FillColor, p.rim.StrokeColor, p.rim.StrokeWidth, p.rim.CornerRadius = nil, look.C(look.Focus), 3, 4
	p.rim.Hidden = !on
	p.rim.Refresh()
}

// MouseDown begins a press.
func (p *pressable) MouseDown(e *desktop.MouseEvent) { mark.Press(p, e.AbsolutePosition) }

// MouseUp does nothing: Tapped follows.
func (p *pressable) MouseUp(*desktop.MouseEvent) {}

// Tapped runs the callback; a long press explains what it is.
func (p *pressable) Tapped(e *fyne.PointEvent) {
	if mark.Held(p, p.tip, e) {
		return
	}
	mark.HideTip(p)
	p.tap()
}
func (p *pressable) FocusGained()                   { p.focus(true) }
func (p *pressable) FocusLost()                     { p.focus(false) }
func (p *pressable) Cursor() desktop.Cursor         { return desktop.PointerCursor }
func (p *pressable) MouseMoved(*desktop.MouseEvent) {}
func (p *pressable) MouseOut()                      { mark.HideTip(p) }
func (p *pressable) MouseIn(e *desktop.MouseEvent) {
	if p.tip != "" {
		mark.ShowTip(p, p.tip, e.AbsolutePosition)
	}
}

func (p *pressable) TypedRune(r rune) {
	if r != ' ' {
		mark.PassRune(p, r)
	}
}

func (p *pressable) TypedKey(e *fyne.KeyEvent) {
	switch e.Name {
	case fyne.KeySpace, fyne.KeyReturn, fyne.KeyEnter:
		p.tap()
	default:
		mark.PassKey(p, e)
	}
}

// TypedShortcut leaves shortcuts to the window.
func (p *pressable) TypedShortcut(s fyne.Shortcut) { mark.PassShortcut(p, s) }

type pressableRenderer struct{ p *pressable }

func (r *pressableRenderer) Destroy() {}
func (r *pressableRenderer) MinSize() fyne.Size {
	return r.p.inner.MinSize().Max(fyne.NewSize(look.Target, look.Target))
}
func (r *pressableRenderer) Objects() []fyne.CanvasObject {
	return []fyne.CanvasObject{r.p.inner, r.p.rim}
}
func (r *pressableRenderer) Layout(s fyne.Size) {
	// What is lower than a finger stands in the middle of a target that is not.
	h := s.Height
	if low := mark.HeightFor(r.p.inner, s.Width); low < look.Target {
		h = min(h, low)
	}
	r.p.inner.Move(fyne.NewPos(0, (s.Height-h)/2))
	r.p.inner.Resize(fyne.NewSize(s.Width, h))
	r.p.rim.Resize(s)
}
func (r *pressableRenderer) Refresh() {
	r.p.inner.Refresh()
	r.p.rim.Refresh()
}
