package chart

import (
	"bytes"
	"crypto/sha256"
	"fmt"
	"image"
	"image/color"
	"image/png"
	"math"

	"codeberg.org/go-pdf/fpdf"
	xfont "golang.org/x/image/font"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"cordwalk.example/cordwalk/assets/fonts"
)

// pdfFamily is the name under which the typeface is registered in a PDF.
const pdfFamily = "noto"

// AddFonts registers the charts' typeface in a PDF. Only the glyphs that are used end up in
// the file. It is called once for each document, before anything is written.
func AddFonts(doc *fpdf.Fpdf) {
	doc.AddUTF8FontFromBytes(pdfFamily, "", fonts.Regular)
	doc.AddUTF8FontFromBytes(pdfFamily, "B", fonts.Bold)
}

// PDF is a vg.Canvas over a rectangle of an open fpdf page. Its origin is the rectangle's
// lower left corner; lengths are points whatever the document's unit is. Text is real
// text in the typeface of AddFonts.
type PDF struct {
	doc  *fpdf.Fpdf
	now  pdfState
	past []pdfState
}

type pdfState struct {
	m     matrix
	col   color.Color
	width vg.Length
	dash  []vg.Length
	off   vg.Length
}

// matrix is an affine map from canvas points to page points, y down:
// x' = a·x + c·y + e, y' = b·x + d·y + f.
type matrix struct{ a, b, c, d, e, f float64 }

func (m matrix) times(n matrix) matrix {
	return matrix{
		m.a*n.a + m.c*n.b, m.b*n.a + m.d*n.b,
		m.a*n.c + m.c*n.d, m.b*n.c + m.d*n.d,
		m.a*n.e + m.c*n.f + m.e, m.b*n.e + m.d*n.f + m.f,
	}
}

// OnPDF returns a canvas over the rectangle of the current page whose upper left corner is
// x, y and whose size is w by h, all in points from the page's upper left corner.
func OnPDF(doc *fpdf.Fpdf, x, y, w, h vg.Length) draw.Canvas {
	p := &PDF{doc: doc}
	p.now = pdfState{m: matrix{1, 0, 0, -1, x.Points(), (y + h).Points()}, col: color.Black, width: 1}
	p.apply()
	return draw.NewCanvas(p, w, h)
}

func (p *PDF) unit(points float64) float64 { return p.doc.PointConvert(points) }

func (p *PDF) point(q vg.Point) (x, y float64) {
	m := p.now.m
	px, py := q.X.Points(), q.Y.Points()
	return p.unit(m.a*px + m.c*py + m.e), p.unit(m.b*px + m.d*py + m.f)
}

// scale is the mean stretch of the current map, for widths and text sizes.
func (p *PDF) scale() float64 {
	m := p.now.m
	return math.Sqrt(math.Abs(m.a*m.d - m.b*m.c))
}

func (p *PDF) apply() {
	p.SetColor(p.now.col)
	p.SetLineWidth(p.now.width)
	p.SetLineDash(p.now.dash, p.now.off)
}

// SetLineWidth implements vg.Canvas.
func (p *PDF) SetLineWidth(w vg.Length) {
	p.now.width = w
	p.doc.SetLineWidth(p.unit(w.Points() * p.scale()))
}

// SetLineDash implements vg.Canvas.
func (p *PDF) SetLineDash(pattern []vg.Length, offset vg.Length) {
	p.now.dash, p.now.off = pattern, offset
	dash := make([]float64, len(pattern))
	for i, d := range pattern {
		dash[i] = p.unit(d.Points() * p.scale())
	}
	p.doc.SetDashPattern(dash, p.unit(offset.Points()*p.scale()))
}

// SetColor implements vg.Canvas. Transparency is kept.
func (p *PDF) SetColor(c color.Color) {
	if c == nil {
		c = color.Black
	}
	p.now.col = c
	n := color.NRGBAModel.Convert(c).(color.NRGBA)
	r, g, b := int(n.R), int(n.G), int(n.B)
	p.doc.SetFillColor(r, g, b)
	p.doc.SetDrawColor(r, g, b)
	p.doc.SetTextColor(r, g, b)
	if a, _ := p.doc.GetAlpha(); n.A != 255 || a != 1 {
		p.doc.SetAlpha(float64(n.A)/255, "Normal")
	}
}

// Rotate implements vg.Canvas.
func (p *PDF) Rotate(rad float64) {
	sin, cos := math.Sincos(rad)
	p.now.m = p.now.m.times(matrix{cos, sin, -sin, cos, 0, 0})
}

// Translate implements vg.Canvas.
func (p *PDF) Translate(pt vg.Point) {
	p.now.m = p.now.m.times(matrix{1, 0, 0, 1, pt.X.Points(), pt.Y.Points()})
}

// Scale implements vg.Canvas.
func (p *PDF) Scale(x, y float64) { p.now.m = p.now.m.times(matrix{x, 0, 0, y, 0, 0}) }

// Push implements vg.Canvas.
func (p *PDF) Push() { p.past = append(p.past, p.now) }

// Pop implements vg.Canvas.
func (p *PDF) Pop() {
	if n := len(p.past); n > 0 {
		p.now, p.past = p.past[n-1], p.past[:n-1]
		p.apply()
	}
}

// Stroke implements vg.Canvas.
func (p *PDF) Stroke(path vg.Path) {
	if p.now.width > 0 {
		p.path(path, "D")
	}
}

// Fill implements vg.Canvas.
func (p *PDF) Fill(path vg.Path) { p.path(path, "F") }

func (p *PDF) path(path vg.Path, how string) {
	started := false
	var at vg.Point
	for _, c := range path {
		switch c.Type {
		case vg.MoveComp:
			p.doc.MoveTo(p.point(c.Pos))
			at, started = c.Pos, true
		case vg.LineComp:
			p.doc.LineTo(p.point(c.Pos))
			at = c.Pos
		case vg.CurveComp:
			x, y := p.point(c.Pos)
			c1, c2 := c.Control[0], c.Control[len(c.Control)-1]
			if len(c.Control) == 1 { // a quadratic curve as a cubic one
				q := c.Control[0]
				c1 = vg.Point{X: at.X + (q.X-at.X)*2/3, Y: at.Y + (q.Y-at.Y)*2/3}
				c2 = vg.Point{X: c.Pos.X + (q.X-c.Pos.X)*2/3, Y: c.Pos.Y + (q.Y-c.Pos.Y)*2/3}
			}
			x1, y1 := p.point(c1)
			x2, y2 := p.point(c2)
			p.doc.CurveBezierCubicTo(x1, y1, x2, y2, x, y)
			at = c.Pos
		case vg.ArcComp:
			at = p.arc(c, started)
			started = true
		case vg.CloseComp:
			p.doc.ClosePath()
		}
	}
	p.doc.DrawPath(how)
}

// arc draws an arc as Bézier curves of at most a quarter turn and returns where it ends.
func (p *PDF) arc(c vg.PathComp, started bool) vg.Point {
	on := func(a float64) vg.Point {
		return vg.Point{X: c.Pos.X + c.Radius*vg.Length(math.Cos(a)), Y: c.Pos.Y + c.Radius*vg.Length(math.Sin(a))}
	}
	begin := on(c.Start)
	if started {
		p.doc.LineTo(p.point(begin))
	} else {
		p.doc.MoveTo(p.point(begin))
	}
	n := int(math.Max(1, math.Ceil(math.Abs(c.Angle)/(math.Pi/2))))
	step := c.Angle / float64(n)
	k := vg.Length(4.0/3*math.Tan(step/4)) * c.Radius
	for i := range n {
		a0, a1 := c.Start+float64(i)*step, c.Start+float64(i+1)*step
		q0, q1 := on(a0), on(a1)
		x1, y1 := p.point(vg.Point{X: q0.X - k*vg.Length(math.Sin(a0)), Y: q0.Y + k*vg.Length(math.Cos(a0))})
		x2, y2 := p.point(vg.Point{X: q1.X + k*vg.Length(math.Sin(a1)), Y: q1.Y - k*vg.Length(math.Cos(a1))})
		x, y := p.point(q1)
		p.doc.CurveBezierCubicTo(x1, y1, x2, y2, x, y)
	}
	return on(c.Start + c.Angle)
}

// FillString implements vg.Canvas. The face's weight chooses between the two registered fonts.
func (p *PDF) FillString(face font.Face, pt vg.Point, text string) {
	if face.Font.Size == 0 || text == "" {
		return
	}
	style := ""
	if face.Font.Weight >= xfont.WeightSemiBold {
		style = "B"
	}
	p.doc.SetFont(pdfFamily, style, face.Font.Size.Points()*p.scale())
	x, y := p.point(pt)
	// The angle of the text's own x axis on the page, counter-clockwise.
	if turn := -math.Atan2(p.now.m.b, p.now.m.a) * 180 / math.Pi; math.Abs(turn) > 1e-6 {
		p.doc.TransformBegin()
		p.doc.TransformRotate(turn, x, y)
		p.doc.Text(x, y, text)
		p.doc.TransformEnd()
		return
	}
	p.doc.Text(x, y, text)
}

// DrawImage implements vg.Canvas.
func (p *PDF) DrawImage(rect vg.Rectangle, img image.Image) {
	var buf bytes.Buffer
	if err := png.Encode(&buf, img); err != nil {
		p.doc.SetError(fmt.Errorf("drawing a picture: %w", err))
		return
	}
	name := fmt.Sprintf("picture-%x", sha256.Sum256(buf.Bytes())) // one copy however often it is drawn
	x, y := p.point(vg.Point{X: rect.Min.X, Y: rect.Max.Y})
	size := rect.Size()
	opts := fpdf.ImageOptions{ImageType: "png"}
	p.doc.RegisterImageOptionsReader(name, opts, &buf)
	p.doc.ImageOptions(name, x, y, p.unit(size.X.Points()*p.scale()), p.unit(size.Y.Points()*p.scale()), false, opts, 0, "")
}
