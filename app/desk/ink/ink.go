// Package ink draws filled and stroked shapes into pictures: what the marks of Cordwalk
// (beads, limb crosses, the cord map) are made of where the toolkit has no shape for them.
// It knows no widgets and no theme; colours and sizes are given.
package ink

import (
	"image"
	"image/color"
	"image/draw"
	"math"

	"golang.org/x/image/vector"

	"cordwalk.example/cordwalk/assets/drawing"
)

// Pen draws into one picture. Coordinates are in units of the caller, Scale pixels each.
type Pen struct {
	img   *image.RGBA
	scale float64
}

// New returns a pen over an empty, transparent picture of w × h pixels.
func New(w, h int, scale float64) *Pen {
	return &Pen{image.NewRGBA(image.Rect(0, 0, max(1, w), max(1, h))), scale}
}

// Picture returns what was drawn.
func (p *Pen) Picture() *image.RGBA { return p.img }

// Scale returns how many pixels one unit of the caller is.
func (p *Pen) Scale() float64 { return p.scale }

// Point is a place in the caller's units.
type Point = drawing.Point

// Fill fills a closed outline.
func (p *Pen) Fill(c color.Color, outlines ...[]Point) {
	z := p.raster()
	for _, o := range outlines {
		p.trace(z, o)
	}
	p.paint(z, c)
}

// FillTurned fills outlines as they turn: an inner outline that turns the other way is a hole,
// as in letters.
func (p *Pen) FillTurned(c color.Color, outlines ...[]Point) {
	z := p.raster()
	for _, o := range outlines {
		out := make([]Point, len(o))
		for i, q := range o {
			out[i] = Point{X: q.X * p.scale, Y: q.Y * p.scale}
		}
		z.outlines = append(z.outlines, out)
	}
	p.paint(z, c)
}

// Stroke draws a line of a width in the caller's units along the points, with round joins and ends.
func (p *Pen) Stroke(c color.Color, width float64, closed bool, points ...Point) {
	z := p.raster()
	p.line(z, width, closed, points)
	p.paint(z, c)
}

// Dashes draws a dashed line: dash and gap in the caller's units.
func (p *Pen) Dashes(c color.Color, width, dash, gap float64, closed bool, points ...Point) {
	if closed && len(points) > 0 {
		points = append(append([]Point(nil), points...), points[0])
	}
	z := p.raster()
	on, left := true, dash
	piece := []Point{}
	if len(points) > 0 {
		piece = append(piece, points[0])
	}
	for i := 1; i < len(points); i++ {
		a, b := points[i-1], points[i]
		l := math.Hypot(b.X-a.X, b.Y-a.Y)
		for l > 1e-9 {
			step := math.Min(l, left)
			a = Point{X: a.X + (b.X-a.X)*step/l, Y: a.Y + (b.Y-a.Y)*step/l}
			l -= step
			left -= step
			if on {
				piece = append(piece, a)
			}
			if left <= 1e-9 {
				if on {
					p.line(z, width, false, piece)
				}
				on = !on
				left = gap
				if on {
					left = dash
					piece = []Point{a}
				}
			}
		}
	}
	if on {
		p.line(z, width, false, piece)
	}
	p.paint(z, c)
}

// Circle returns the outline of a circle.
func Circle(at Point, r float64) []Point { return Arc(at, r, 0, 2*math.Pi, 48) }

// Arc returns points along a circle from angle a to b (radians, clockwise from the right).
func Arc(at Point, r, a, b float64, steps int) []Point {
	out := make([]Point, steps)
	for i := range out {
		t := a + (b-a)*float64(i)/float64(steps)
		out[i] = Point{X: at.X + r*math.Cos(t), Y: at.Y + r*math.Sin(t)}
	}
	return out
}

// Rect returns the outline of a rectangle.
func Rect(x, y, w, h float64) []Point {
	return []Point{{X: x, Y: y}, {X: x + w, Y: y}, {X: x + w, Y: y + h}, {X: x, Y: y + h}}
}

// RoundRect returns the outline of a rectangle with rounded corners.
func RoundRect(x, y, w, h, r float64) []Point {
	r = math.Min(r, math.Min(w, h)/2)
	var out []Point
	for _, q := range []struct{ x, y, a float64 }{{x + w - r, y + r, -math.Pi / 2}, {x + w - r, y + h - r, 0}, {x + r, y + h - r, math.Pi / 2}, {x + r, y + r, math.Pi}} {
		out = append(out, Arc(Point{X: q.x, Y: q.y}, r, q.a, q.a+math.Pi/2, 8)...)
		out = append(out, Point{X: q.x + r*math.Cos(q.a+math.Pi/2), Y: q.y + r*math.Sin(q.a+math.Pi/2)})
	}
	return out
}

// Figure draws a drawing into a box, kept in proportion and centred; fill gives the colour of
// each region (nil: not filled), line the colour and width of the outlines.
func (p *Pen) Figure(f drawing.Figure, x, y, w, h float64, fill func(region string) color.Color, line color.Color, width float64) {
	at := Fit(f, x, y, w, h)
	for _, r := range f.Regions {
		for _, path := range r.Paths {
			pts := make([]Point, len(path.Points))
			for i, q := range path.Points {
				pts[i] = at(q)
			}
			if c := fill(r.Name); c != nil {
				p.Fill(c, pts)
			}
			p.Stroke(line, width, path.Closed, pts...)
		}
	}
	for _, path := range f.Details {
		pts := make([]Point, len(path.Points))
		for i, q := range path.Points {
			pts[i] = at(q)
		}
		p.Stroke(line, width*0.7, path.Closed, pts...)
	}
}

// Fit returns the map from a figure's units into a box, kept in proportion and centred.
func Fit(f drawing.Figure, x, y, w, h float64) func(Point) Point {
	s := math.Min(w/f.Width, h/f.Height)
	dx, dy := x+(w-f.Width*s)/2, y+(h-f.Height*s)/2
	return func(q Point) Point { return Point{X: dx + q.X*s, Y: dy + q.Y*s} }
}

// shape gathers outlines in pixels until they are painted.
type shape struct{ outlines [][]Point }

func (p *Pen) raster() *shape { return &shape{} }

// paint covers the shape with a colour. The rasteriser is only as large as the shape: a map of
// hundreds of small shapes would otherwise touch the whole picture for each.
func (p *Pen) paint(z *shape, c color.Color) {
	lo, hi := Point{X: math.Inf(1), Y: math.Inf(1)}, Point{X: math.Inf(-1), Y: math.Inf(-1)}
	for _, o := range z.outlines {
		for _, q := range o {
			lo.X, lo.Y = math.Min(lo.X, q.X), math.Min(lo.Y, q.Y)
			hi.X, hi.Y = math.Max(hi.X, q.X), math.Max(hi.Y, q.Y)
		}
	}
	if !(lo.X < hi.X) || math.IsInf(hi.X, 1) {
		return
	}
	box := image.Rect(int(math.Floor(lo.X)), int(math.Floor(lo.Y)), int(math.Ceil(hi.X))+1, int(math.Ceil(hi.Y))+1)
	seen := box.Intersect(p.img.Bounds())
	if seen.Empty() {
		return
	}
	// Shapes that hang over the edge are cut to it; the part outside is kept only to the left
	// and above, where the accumulation of areas starts.
	r := vector.NewRasterizer(seen.Dx(), seen.Dy())
	for _, o := range z.outlines {
		for i, q := range o {
			x, y := float32(q.X-float64(seen.Min.X)), float32(q.Y-float64(seen.Min.Y))
			if i == 0 {
				r.MoveTo(x, y)
			} else {
				r.LineTo(x, y)
			}
		}
		r.ClosePath()
	}
	r.DrawOp = draw.Over
	r.Draw(p.img, seen, image.NewUniform(c), image.Point{})
}

// trace adds a closed outline, always in the same turning sense so that overlaps never cancel.
func (p *Pen) trace(z *shape, o []Point) {
	if len(o) < 3 {
		return
	}
	area := 0.0
	for i, j := 0, len(o)-1; i < len(o); j, i = i, i+1 {
		area += o[j].X*o[i].Y - o[i].X*o[j].Y
	}
	out := make([]Point, len(o))
	for i, q := range o {
		if area < 0 {
			out[len(o)-1-i] = Point{X: q.X * p.scale, Y: q.Y * p.scale}
		} else {
			out[i] = Point{X: q.X * p.scale, Y: q.Y * p.scale}
		}
	}
	z.outlines = append(z.outlines, out)
}

func (p *Pen) line(z *shape, width float64, closed bool, pts []Point) {
	if len(pts) == 0 {
		return
	}
	half := width / 2
	n := len(pts) - 1
	if closed {
		n++
	}
	for i := 0; i < n; i++ {
		a, b := pts[i], pts[(i+1)%len(pts)]
		l := math.Hypot(b.X-a.X, b.Y-a.Y)
		if l < 1e-9 {
			continue
		}
		dx, dy := (b.Y-a.Y)/l*half, -(b.X-a.X)/l*half
		p.trace(z, []Point{{X: a.X + dx, Y: a.Y + dy}, {X: b.X + dx, Y: b.Y + dy}, {X: b.X - dx, Y: b.Y - dy}, {X: a.X - dx, Y: a.Y - dy}})
	}
	if width*p.scale < 1.2 {
		return
	}
	for _, q := range pts {
		p.trace(z, Arc(q, half, 0, 2*math.Pi, 12))
	}
}
