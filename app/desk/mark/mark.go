// Package mark holds the signs and controls that Cordwalk's screens are made of: the bead,
// the limb cross, the wedge of a change, grade buttons, the cord map, lines of text that end
// in an ellipsis instead of being cut, and tips. They say what the user wants through
// callbacks and decide nothing.
package mark

import (
	"image"
	"image/color"
	"math"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/ink"
	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/drawing"
	"cordwalk.example/cordwalk/exam"
)

// picture is a raster whose drawing is given in the toolkit's own units.
func picture(size func() fyne.Size, draw func(p *ink.Pen, w, h float64)) *canvas.Raster {
	return canvas.NewRaster(func(w, h int) image.Image {
		s := size()
		if s.Width <= 0 || s.Height <= 0 || w <= 0 || h <= 0 {
			return image.NewRGBA(image.Rect(0, 0, 1, 1))
		}
		pen := ink.New(w, h, float64(w)/float64(s.Width))
		draw(pen, float64(s.Width), float64(s.Height))
		return pen.Picture()
	})
}

func with(c color.Color, alpha uint8) color.NRGBA {
	r, g, b, _ := c.RGBA()
	return color.NRGBA{uint8(r >> 8), uint8(g >> 8), uint8(b >> 8), alpha}
}

// Bead is the mark of one finding.
type Bead struct {
	widget.BaseWidget
	State view.Bead
	Dia   float32 // diameter in px
	pic   *canvas.Raster
}

// NewBead returns a bead of a diameter.
func NewBead(state view.Bead, diameter float32) *Bead {
	b := &Bead{State: state, Dia: diameter}
	b.ExtendBaseWidget(b)
	return b
}

// Set changes what the bead shows.
func (b *Bead) Set(state view.Bead) {
	if b.State != state {
		b.State = state
		b.Refresh()
	}
}

// MinSize is the bead's diameter with the room for its bars.
func (b *Bead) MinSize() fyne.Size {
	b.ExtendBaseWidget(b)
	return fyne.NewSize(b.Dia, b.Dia*1.3)
}

// CreateRenderer draws the bead.
func (b *Bead) CreateRenderer() fyne.WidgetRenderer {
	b.pic = picture(b.Size, func(p *ink.Pen, w, h float64) {
		d := math.Min(w, h/1.3)
		DrawBead(p, b.State, ink.Point{X: w / 2, Y: h - d/2}, d/2-1, true)
	})
	return widget.NewSimpleRenderer(b.pic)
}

// DrawBead draws a bead around a point: the circle is filled from below up to the health's
// share of its height.
func DrawBead(p *ink.Pen, s view.Bead, at ink.Point, r float64, bars bool) {
	line := math.Max(1.2, r/6)
	edge := look.C(look.Ink)
	if !s.Tested {
		p.Dashes(look.C(look.InkSoft), line*0.85, r*0.5, r*0.42, true, ink.Circle(at, r-line/2)...)
		return
	}
	if s.Kind {
		p.Fill(look.C(look.Raised), ink.Circle(at, r-line/2))
		p.Stroke(edge, line, true, ink.Circle(at, r-line/2)...)
		p.Stroke(edge, line*0.8, true, ink.Circle(at, (r-line/2)*0.5)...)
		return
	}
	p.Fill(look.C(look.Raised), ink.Circle(at, r-line/2))
	if s.Fill > 0 {
		p.Fill(edge, level(at, r-line/2, math.Min(1, s.Fill)))
	}
	p.Stroke(edge, line, true, ink.Circle(at, r-line/2)...)
	if bars {
		for i := range s.Bars {
			y := at.Y - r - line - float64(i)*line*1.9
			p.Stroke(edge, line, false, ink.Point{X: at.X - r*0.8, Y: y}, ink.Point{X: at.X + r*0.8, Y: y})
		}
	}
}

// level returns the lower part of a circle up to a share of its height.
func level(at ink.Point, r, share float64) []ink.Point {
	if share >= 1 {
		return ink.Circle(at, r)
	}
	half := math.Acos(1 - 2*share)
	pts := ink.Arc(at, r, math.Pi/2-half, math.Pi/2+half, 40)
	return append(pts, ink.Point{X: at.X + r*math.Cos(math.Pi/2+half), Y: at.Y + r*math.Sin(math.Pi/2+half)})
}

// LimbCross is the whole animal in one mark, or, with a species, on its drawing.
type LimbCross struct {
	widget.BaseWidget
	State   view.LimbCross
	Side    float32
	Species exam.Species // 0: the bare cross
}

// NewLimbCross returns a cross in a square of a side in px.
func NewLimbCross(state view.LimbCross, side float32) *LimbCross {
	c := &LimbCross{State: state, Side: side}
	c.ExtendBaseWidget(c)
	return c
}

// NewBody returns the cross on the animal's drawing, of a height in px.
func NewBody(state view.LimbCross, species exam.Species, height float32) *LimbCross {
	c := &LimbCross{State: state, Side: height, Species: species}
	c.ExtendBaseWidget(c)
	return c
}

// Set changes what the cross shows.
func (c *LimbCross) Set(state view.LimbCross) {
	if c.State != state {
		c.State = state
		c.Refresh()
	}
}

// MinSize is the side; a body is half as wide as high.
func (c *LimbCross) MinSize() fyne.Size {
	c.ExtendBaseWidget(c)
	if c.Species != 0 {
		return fyne.NewSize(c.Side/2, c.Side)
	}
	return fyne.NewSize(c.Side, c.Side)
}

// CreateRenderer draws the cross.
func (c *LimbCross) CreateRenderer() fyne.WidgetRenderer {
	return widget.NewSimpleRenderer(picture(c.Size, func(p *ink.Pen, w, h float64) {
		if c.Species != 0 {
			drawBody(p, c.State, c.Species, w, h)
			return
		}
		side := math.Min(w, h)
		x, y := (w-side)/2, (h-side)/2
		at := func(q drawing.Point) ink.Point { return ink.Point{X: x + q.X*side, Y: y + q.Y*side} }
		soft := look.C(look.InkSoft)
		line := math.Max(1, side/36)
		// the body: head up, a line for the back, the girdles across
		p.Stroke(soft, line, false, at(drawing.Point{X: 0.5, Y: 0.17}), at(drawing.Point{X: 0.5, Y: 0.85}))
		p.Stroke(soft, line, false, at(drawing.Point{X: 0.24, Y: 0.27}), at(drawing.Point{X: 0.76, Y: 0.27}))
		p.Stroke(soft, line, false, at(drawing.Point{X: 0.24, Y: 0.73}), at(drawing.Point{X: 0.76, Y: 0.73}))
		p.Fill(look.C(look.Paper), ink.Circle(at(drawing.Point{X: 0.5, Y: 0.09}), side*0.085))
		p.Stroke(soft, line, true, ink.Circle(at(drawing.Point{X: 0.5, Y: 0.09}), side*0.085)...)
		drawLimbs(p, c.State, side*0.155, side*0.06, func(i int) ink.Point { return at(drawing.LimbPlaces()[i]) })
	}))
}

func drawLimbs(p *ink.Pen, s view.LimbCross, r, tail float64, place func(int) ink.Point) {
	for i := range s.Limb {
		q := place(i)
		DrawBead(p, s.Limb[i], q, r, false)
		if s.Notch[i] {
			// the notch of a lame limb: a bite out of the lower outer edge
			dx := r * 0.8
			if i%2 == 0 {
				dx = -dx
			}
			bite := ink.Circle(ink.Point{X: q.X + dx, Y: q.Y + r*0.8}, r*0.42)
			p.Fill(look.C(look.Paper), bite)
			p.Stroke(look.C(look.Ink), math.Max(1.1, r/6), true, bite...)
		}
	}
	q := place(4)
	switch {
	case !s.Tail.Tested:
		p.Stroke(look.C(look.InkSoft), math.Max(1, tail/3), true, ink.Circle(q, tail*0.8)...)
	default:
		DrawBead(p, s.Tail, q, tail*1.15, false)
	}
}

func drawBody(p *ink.Pen, s view.LimbCross, sp exam.Species, w, h float64) {
	f := drawing.FromAbove(sp)
	index := map[string]int{}
	for i, l := range exam.Limbs() {
		index[l.String()] = i
	}
	width := math.Max(0.9, h/200)
	p.Figure(f, 0, 0, w, h, func(region string) color.Color {
		b := view.Bead{}
		if i, ok := index[region]; ok {
			b = s.Limb[i]
		} else if region == "tail" {
			b = s.Tail
		} else {
			return look.C(look.Raised)
		}
		if !b.Tested {
			return look.C(look.Raised)
		}
		return look.F(b.Fill)
	}, look.C(look.Ink), width)
	if h < 90 {
		return
	}
	at := ink.Fit(f, 0, 0, w, h)
	r := math.Min(w/100, h/200) * 8
	drawLimbs(p, s, r, r*0.5, func(i int) ink.Point {
		name := "tail"
		if i < 4 {
			name = exam.Limbs()[i].String()
		}
		c, _ := f.Centre(name)
		return at(c)
	})
}

// Change is the mark of a change.
type Change struct {
	widget.BaseWidget
	State view.ChangeMark
	Side  float32
}

// NewChange returns a change mark in a square of a side in px.
func NewChange(state view.ChangeMark, side float32) *Change {
	c := &Change{State: state, Side: side}
	c.ExtendBaseWidget(c)
	return c
}

// Set changes what the mark shows.
func (c *Change) Set(state view.ChangeMark) {
	if c.State != state {
		c.State = state
		c.Refresh()
	}
}

// MinSize is the side.
func (c *Change) MinSize() fyne.Size { c.ExtendBaseWidget(c); return fyne.NewSize(c.Side, c.Side) }

// CreateRenderer draws the mark.
func (c *Change) CreateRenderer() fyne.WidgetRenderer {
	return widget.NewSimpleRenderer(picture(c.Size, func(p *ink.Pen, w, h float64) {
		s := math.Min(w, h)
		DrawChange(p, c.State, ink.Point{X: w / 2, Y: h / 2}, s*0.38)
	}))
}

// ChangeToken is the colour that goes with a change's shape.
func ChangeToken(s view.Shape) fyne.ThemeColorName {
	switch s {
	case view.WedgeUp:
		return look.Better
	case view.WedgeDown:
		return look.Worse
	}
	return look.Ink
}

// DrawChange draws a change mark around a point.
func DrawChange(p *ink.Pen, s view.ChangeMark, at ink.Point, r float64) {
	c := look.C(ChangeToken(s.Shape))
	line := math.Max(1.4, r/4)
	wedge := func(up float64) {
		o := []ink.Point{{X: at.X, Y: at.Y - up*r}, {X: at.X + r*0.9, Y: at.Y + up*r*0.7}, {X: at.X - r*0.9, Y: at.Y + up*r*0.7}}
		if !s.Hollow {
			p.Fill(c, o)
		}
		p.Stroke(c, line, true, o...)
	}
	switch s.Shape {
	case view.WedgeUp:
		wedge(1)
	case view.WedgeDown:
		wedge(-1)
	case view.Line:
		p.Stroke(look.C(look.InkSoft), line, false, ink.Point{X: at.X - r*0.8, Y: at.Y}, ink.Point{X: at.X + r*0.8, Y: at.Y})
	case view.Ring:
		p.Stroke(c, line, true, ink.Circle(at, r*0.8)...)
	}
}

// Species is the small drawing of the animal in lists and the strip.
type Species struct {
	widget.BaseWidget
	Of     exam.Species
	Height float32
}

// NewSpecies returns the drawing at a height in px.
func NewSpecies(of exam.Species, height float32) *Species {
	s := &Species{Of: of, Height: height}
	s.ExtendBaseWidget(s)
	return s
}

// MinSize is half as wide as high.
func (s *Species) MinSize() fyne.Size {
	s.ExtendBaseWidget(s)
	return fyne.NewSize(s.Height/2+4, s.Height)
}

// CreateRenderer draws the animal.
func (s *Species) CreateRenderer() fyne.WidgetRenderer {
	return widget.NewSimpleRenderer(picture(s.Size, func(p *ink.Pen, w, h float64) {
		p.Figure(drawing.FromAbove(s.Of), 0, 1, w, h-2, func(string) color.Color { return look.C(look.Raised) }, look.C(look.Ink), math.Max(0.9, h/90))
	}))
}
