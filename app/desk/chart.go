package desk

import (
	"image"
	"image/color"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/driver/desktop"
	"fyne.io/fyne/v2/widget"
	"gonum.org/v1/plot/vg"
	vgdraw "gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"

	"cordwalk.example/cordwalk/app/chart"
	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
)

// drawable is a chart of app/chart.
type drawable interface {
	Draw(c vgdraw.Canvas, st chart.Style)
}

// chartHost shows a chart. The picture is kept until the chart, the size, the screen's scale or
// the theme changes. One unit of the screen is one point of the chart.
type chartHost struct {
	widget.BaseWidget
	chart  drawable
	least  fyne.Size
	hover  func(x, y, w, h vg.Length, st chart.Style) string // what lies there, in words
	raster *canvas.Raster
	rim    *canvas.Rectangle
	spot   *canvas.Circle // around the mark that the keys are on
	at     fyne.Position  // where that is
	words  string         // what it says

	version int
	kept    image.Image
	key     chartKey
}

// chartKey is what a kept picture depends on.
type chartKey struct {
	version, w, h int
	scale         float32
	mode          look.Mode
}

func newChartHost(c drawable, least fyne.Size) *chartHost {
	h := &chartHost{chart: c, least: least}
	h.ExtendBaseWidget(h)
	return h
}

// set shows another chart.
func (h *chartHost) set(c drawable) {
	h.chart = c
	h.version++
	if h.words != "" {
		h.words = ""
		h.spot.Hide()
		mark.HideTip(h)
	}
	h.Refresh()
}

// release lets go of the chart and its picture.
func (h *chartHost) release() { h.chart, h.kept = nil, nil }

func (h *chartHost) MinSize() fyne.Size { h.ExtendBaseWidget(h); return h.least }

func (h *chartHost) CreateRenderer() fyne.WidgetRenderer {
	h.raster = canvas.NewRaster(h.draw)
	h.rim, h.spot = canvas.NewRectangle(nil), canvas.NewCircle(nil)
	h.rim.Hide()
	h.spot.Hide()
	return &hostRenderer{h}
}

type hostRenderer struct{ h *chartHost }

func (r *hostRenderer) Destroy()           {}
func (r *hostRenderer) MinSize() fyne.Size { return r.h.least }
func (r *hostRenderer) Objects() []fyne.CanvasObject {
	return []fyne.CanvasObject{r.h.raster, r.h.spot, r.h.rim}
}
func (r *hostRenderer) Layout(s fyne.Size) {
	r.h.raster.Resize(s)
	r.h.rim.Resize(s)
}
func (r *hostRenderer) Refresh() {
	h := r.h
	h.rim.StrokeColor, h.rim.StrokeWidth, h.rim.CornerRadius = look.C(look.Focus), 3, 4
	h.spot.StrokeColor, h.spot.StrokeWidth = look.C(look.Focus), 2.5
	h.raster.Refresh()
	h.spot.Refresh()
	h.rim.Refresh()
}

func (h *chartHost) draw(w, ht int) image.Image {
	s := h.Size()
	if h.chart == nil || w < 4 || ht < 4 || s.Width < 4 {
		return image.NewRGBA(image.Rect(0, 0, 1, 1))
	}
	k := chartKey{h.version, w, ht, look.Scale(), look.Resolved()}
	if h.kept != nil && h.key == k {
		return h.kept
	}
	h.kept, h.key = renderChart(h.chart, chartStyle(), w, ht, float64(w)/float64(s.Width)), k
	return h.kept
}

// renderChart draws a chart into a picture of w × h pixels, scale pixels to a point.
func renderChart(c drawable, st chart.Style, w, h int, scale float64) image.Image {
	points := vg.Length(1 / scale)
	cv := vgimg.NewWith(vgimg.UseWH(vg.Length(w)*points, vg.Length(h)*points), vgimg.UseDPI(max(1, int(72*scale+0.5))), vgimg.UseBackgroundColor(st.Palette.Paper))
	c.Draw(vgdraw.New(cv), st)
	return cv.Image()
}

// chartStyle is the charts' style in the theme in use.
func chartStyle() chart.Style {
	c := func(n fyne.ThemeColorName) color.NRGBA {
		r, g, b, _ := look.C(n).RGBA()
		return nrgba(r, g, b, 255)
	}
	lo, hi := look.F(0), look.F(1)
	return chart.Style{Text: vg.Length(look.Px(look.Small)), Palette: chart.Palette{
		Paper: c(look.Paper), Ink: c(look.Ink), Soft: c(look.InkSoft), Line: c(look.Line), Faint: c(look.Sunk),
		Low: lo, High: hi, Risk: c(look.Ink), Better: c(look.Better), Worse: c(look.Worse), Call: c(look.Call),
		Band: c(look.Line), Goal: c(look.Focus),
	}}
}

var (
	_ desktop.Hoverable = (*chartHost)(nil)
	_ desktop.Mouseable = (*chartHost)(nil)
	_ fyne.Tappable     = (*chartHost)(nil)
	_ fyne.Focusable    = (*chartHost)(nil)
	_ fyne.Disableable  = (*chartHost)(nil)
)

// says is what lies at a place, in words.
func (h *chartHost) says(at fyne.Position) string {
	if h.hover == nil || h.chart == nil {
		return ""
	}
	s := h.Size()
	return h.hover(vg.Length(at.X), vg.Length(at.Y), vg.Length(s.Width), vg.Length(s.Height), chartStyle())
}

// MouseIn explains what the pointer rests on.
func (h *chartHost) MouseIn(e *desktop.MouseEvent) { h.MouseMoved(e) }

// MouseMoved explains what the pointer rests on.
func (h *chartHost) MouseMoved(e *desktop.MouseEvent) {
	words := h.says(e.Position)
	if words == "" {
		mark.HideTip(h)
		return
	}
	mark.ShowTip(h, words, e.AbsolutePosition)
}

// MouseOut ends the explanation.
func (h *chartHost) MouseOut() { mark.HideTip(h) }

// MouseDown begins a press.
func (h *chartHost) MouseDown(e *desktop.MouseEvent) { mark.Press(h, e.AbsolutePosition) }

// MouseUp does nothing: Tapped follows.
func (h *chartHost) MouseUp(*desktop.MouseEvent) {}

// Tapped explains the place at once, for screens without a pointer.
func (h *chartHost) Tapped(e *fyne.PointEvent) {
	origin := fyne.CurrentApp().Driver().AbsolutePositionForObject(h)
	mark.ExplainAt(h, h.says(e.AbsolutePosition.Subtract(origin)), e.AbsolutePosition)
}

// A chart whose marks explain themselves takes the keys: the arrows go from mark to mark.

// Disabled reports whether the chart has nothing to explain, and so takes no keys.
func (h *chartHost) Disabled() bool { return h.hover == nil }

// Enable does nothing: what is explained is said by hover.
func (h *chartHost) Enable() {}

// Disable does nothing: what is explained is said by hover.
func (h *chartHost) Disable() {}

// FocusGained draws the ring.
func (h *chartHost) FocusGained() { h.ring(true) }

// FocusLost takes it away, and the explanation.
func (h *chartHost) FocusLost() {
	h.ring(false)
	h.spot.Hide()
	h.words = ""
	mark.HideTip(h)
}

func (h *chartHost) ring(on bool) {
	h.rim.Hidden = !on
	h.rim.Refresh()
}

// TypedRune leaves letters to the page.
func (h *chartHost) TypedRune(r rune) { mark.PassRune(h, r) }

// TypedShortcut leaves shortcuts to the window.
func (h *chartHost) TypedShortcut(s fyne.Shortcut) { mark.PassShortcut(h, s) }

// TypedKey goes from mark to mark; Escape gives the keys back to the page.
func (h *chartHost) TypedKey(e *fyne.KeyEvent) {
	switch e.Name {
	case fyne.KeyRight:
		h.walk(1, 0)
	case fyne.KeyLeft:
		h.walk(-1, 0)
	case fyne.KeyDown:
		h.walk(0, 1)
	case fyne.KeyUp:
		h.walk(0, -1)
	case fyne.KeyEscape:
		if c := fyne.CurrentApp().Driver().CanvasForObject(h); c != nil {
			c.Unfocus()
		}
	default:
		mark.PassKey(h, e)
	}
}

// walk looks for the next mark in a direction and explains it. Where nothing lies straight ahead it looks
// to both sides, further out with each turn.
func (h *chartHost) walk(dx, dy float32) {
	const step, beside = 4, 8
	s := h.Size()
	from := h.at
	if h.words == "" { // nothing was explained yet: begin at the nearer end
		from = fyne.NewPos(s.Width/2, s.Height/2)
		if dx != 0 {
			from.X = s.Width * (1 - dx) / 2
		} else {
			from.Y = s.Height * (1 - dy) / 2
		}
	}
	across := s.Height
	if dy != 0 {
		across = s.Width
	}
	for off := float32(0); off <= across; off += beside {
		for _, side := range []float32{off, -off} {
			at := from.AddXY(dy*side, dx*side)
			for {
				at = at.AddXY(dx*step, dy*step)
				if at.X < 0 || at.Y < 0 || at.X > s.Width || at.Y > s.Height {
					break
				}
				if w := h.says(at); w != "" && w != h.words {
					h.explain(at, w)
					return
				}
			}
			if off == 0 {
				break
			}
		}
	}
}

func (h *chartHost) explain(at fyne.Position, words string) {
	const r = 9
	h.at, h.words = at, words
	h.spot.StrokeColor, h.spot.StrokeWidth = look.C(look.Focus), 2.5
	h.spot.Move(at.SubtractXY(r, r))
	h.spot.Resize(fyne.NewSize(2*r, 2*r))
	h.spot.Show()
	h.spot.Refresh()
	mark.ExplainAt(h, words, fyne.CurrentApp().Driver().AbsolutePositionForObject(h).Add(at))
}
