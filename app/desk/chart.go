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
	tap    func(x, y, w, h vg.Length, st chart.Style)
	raster *canvas.Raster

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
	h.Refresh()
}

// release lets go of the chart and its picture.
func (h *chartHost) release() { h.chart, h.kept = nil, nil }

func (h *chartHost) MinSize() fyne.Size { h.ExtendBaseWidget(h); return h.least }

func (h *chartHost) CreateRenderer() fyne.WidgetRenderer {
	h.raster = canvas.NewRaster(h.draw)
	return widget.NewSimpleRenderer(h.raster)
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
	_ fyne.Tappable     = (*chartHost)(nil)
)

func (h *chartHost) MouseIn(e *desktop.MouseEvent) { h.MouseMoved(e) }
func (h *chartHost) MouseMoved(e *desktop.MouseEvent) {
	if h.hover == nil {
		return
	}
	s := h.Size()
	words := h.hover(vg.Length(e.Position.X), vg.Length(e.Position.Y), vg.Length(s.Width), vg.Length(s.Height), chartStyle())
	if words == "" {
		mark.HideTip(h)
		return
	}
	mark.ShowTip(h, words, e.AbsolutePosition)
}
func (h *chartHost) MouseOut() { mark.HideTip(h) }

// Tapped explains the place at once, for screens without a pointer.
func (h *chartHost) Tapped(e *fyne.PointEvent) {
	s := h.Size()
	if h.tap != nil {
		h.tap(vg.Length(e.Position.X), vg.Length(e.Position.Y), vg.Length(s.Width), vg.Length(s.Height), chartStyle())
		return
	}
	if h.hover != nil {
		mark.ShowTip(h, h.hover(vg.Length(e.Position.X), vg.Length(e.Position.Y), vg.Length(s.Width), vg.Length(s.Height), chartStyle()), e.AbsolutePosition)
	}
}
