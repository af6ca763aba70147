// Package chart draws the pictures of a course of recovery: the strip of segments over
// time, lines for limbs and measures, the cord map, the animal seen from above, and the
// small marks that stand beside them. Each chart is drawn by one function onto a
// vg.Canvas, so that the screen, a PDF page and an SVG file show the same thing.
//
// The charts take plain numbers and words. They know nothing of storage, make no
// judgement of their own, and never invent what is missing: an unknown value is left
// empty. Colour always repeats what a shape, a place or a word says.
package chart

import (
	"image/color"
	"math"
	"strings"
	"sync"
	"time"
	"unicode/utf8"

	xfont "golang.org/x/image/font"
	"golang.org/x/image/font/opentype"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"cordwalk.example/cordwalk/assets/fonts"
	"cordwalk.example/cordwalk/assets/words"
)

// Palette holds the colours of a chart by what they mean.
type Palette struct {
	Paper color.NRGBA // behind everything
	Ink   color.NRGBA // text and marks
	Soft  color.NRGBA // secondary text
	Line  color.NRGBA // rules and frames
	Faint color.NRGBA // areas that only separate
	Low   color.NRGBA // the scale of function at 0
	High  color.NRGBA // the scale of function at 100
	Risk  color.NRGBA // the scale of probability at 1; at 0 it is Paper

	Better color.NRGBA
	Worse  color.NRGBA
	Call   color.NRGBA // «call the veterinarian», used for nothing else
	Band   color.NRGBA // what is uncertain
	Goal   color.NRGBA
}

func rgb(hex uint32) color.NRGBA {
	return color.NRGBA{R: uint8(hex >> 16), G: uint8(hex >> 8), B: uint8(hex), A: 255}
}

// Light is ink on warm paper, for the screen by day.
func Light() Palette {
	return Palette{Paper: rgb(0xFBF8F1), Ink: rgb(0x24282B), Soft: rgb(0x5A6166), Line: rgb(0xC9C3B5), Faint: rgb(0xF1EDE2),
		Low: rgb(0xD7E3E4), High: rgb(0x11505E), Risk: rgb(0x3A3340),
		Better: rgb(0x1D5FA6), Worse: rgb(0xB04A00), Call: rgb(0xA3123B), Band: rgb(0xDDE4E2), Goal: rgb(0x5B4A8A)}
}

// Dark is pale ink on dark paper, for the screen by night.
func Dark() Palette {
	return Palette{Paper: rgb(0x1B1E20), Ink: rgb(0xECE7DC), Soft: rgb(0xA9AEAD), Line: rgb(0x454B4E), Faint: rgb(0x24282A),
		Low: rgb(0x2C3D42), High: rgb(0x9BDCE6), Risk: rgb(0xE6DDEE),
		Better: rgb(0x7DB4F0), Worse: rgb(0xF0964A), Call: rgb(0xFF7C97), Band: rgb(0x2F383B), Goal: rgb(0xB9A8EE)}
}

// Print is for white paper and a colour printer.
func Print() Palette {
	p := Light()
	p.Paper, p.Faint, p.Line = rgb(0xFFFFFF), rgb(0xF3F3F1), rgb(0xB9B9B4)
	return p
}

// Grey is for white paper and a printer without colours: every pair that Print tells
// apart by hue is told apart by lightness or by shape.
func Grey() Palette {
	return Palette{Paper: rgb(0xFFFFFF), Ink: rgb(0x161616), Soft: rgb(0x555555), Line: rgb(0xB0B0B0), Faint: rgb(0xF3F3F3),
		Low: rgb(0xE2E2E2), High: rgb(0x333333), Risk: rgb(0x222222),
		Better: rgb(0x161616), Worse: rgb(0x161616), Call: rgb(0x161616), Band: rgb(0xE4E4E4), Goal: rgb(0x6A6A6A)}
}

// Style is how a chart is drawn: colours, text size and language.
type Style struct {
	Palette Palette
	Text    vg.Length // size of labels; 0 means 13 points
	Lang    string    // BCP 47 tag of the charts' own words; empty means the language in use
	// Day writes a day on a time axis; nil means day and month in the chart's language.
	Day func(time.Time) string
}

// Screen returns the style of a screen chart: labels of 13 points, the smallest size
// that the screens allow.
func Screen(p Palette) Style { return Style{Palette: p, Text: 13} }

// Paper returns the style of a chart on paper: labels of 8 points, about the size of a
// newspaper's captions.
func Paper(p Palette) Style { return Style{Palette: p, Text: 8} }

func (s Style) size() vg.Length {
	if s.Text <= 0 {
		return 13
	}
	return s.Text
}

// Months are the short names of the months, for the axes.
func (s Style) month(m time.Month) string {
	switch m {
	case time.January:
		return words.In(s.Lang, "Jan")
	case time.February:
		return words.In(s.Lang, "Feb")
	case time.March:
		return words.In(s.Lang, "Mar")
	case time.April:
		return words.In(s.Lang, "Apr")
	case time.May:
		return words.In(s.Lang, "May")
	case time.June:
		return words.In(s.Lang, "Jun")
	case time.July:
		return words.In(s.Lang, "Jul")
	case time.August:
		return words.In(s.Lang, "Aug")
	case time.September:
		return words.In(s.Lang, "Sep")
	case time.October:
		return words.In(s.Lang, "Oct")
	case time.November:
		return words.In(s.Lang, "Nov")
	}
	return words.In(s.Lang, "Dec")
}

func (s Style) day(t time.Time) string {
	if s.Day != nil {
		return s.Day(t)
	}
	return words.In(s.Lang, "%[1]d %[2]s", t.Day(), s.month(t.Month()))
}

// mix returns the colour a share t of the way from a to b; t is held to 0–1.
func mix(a, b color.NRGBA, t float64) color.NRGBA {
	if math.IsNaN(t) || t < 0 {
		t = 0
	}
	if t > 1 {
		t = 1
	}
	at := func(x, y uint8) uint8 { return uint8(math.Round(float64(x) + (float64(y)-float64(x))*t)) }
	return color.NRGBA{at(a.R, b.R), at(a.G, b.G), at(a.B, b.B), 255}
}

// Shade returns the colour of a function value, 0 to 100.
func (p Palette) Shade(value float64) color.NRGBA { return mix(p.Low, p.High, value/100) }

// RiskShade returns the colour of a probability of damage, 0 to 1.
func (p Palette) RiskShade(probability float64) color.NRGBA { return mix(p.Paper, p.Risk, probability) }

// luminance is the relative luminance of WCAG 2.1 (W3C Recommendation 2018).
func luminance(c color.NRGBA) float64 {
	lin := func(v uint8) float64 {
		x := float64(v) / 255
		if x <= 0.03928 {
			return x / 12.92
		}
		return math.Pow((x+0.055)/1.055, 2.4)
	}
	return 0.2126*lin(c.R) + 0.7152*lin(c.G) + 0.0722*lin(c.B)
}

// Contrast returns the contrast ratio of two colours, 1 to 21 (WCAG 2.1, W3C 2018).
func Contrast(a, b color.NRGBA) float64 {
	x, y := luminance(a), luminance(b)
	if x < y {
		x, y = y, x
	}
	return (x + 0.05) / (y + 0.05)
}

// Typeface is the name of the charts' typeface.
const Typeface = "Noto Sans"

var parseFonts = sync.OnceValues(func() (regular, bold *opentype.Font) {
	var err error
	if regular, err = opentype.Parse(fonts.Regular); err != nil {
		panic("chart: the embedded regular font cannot be read: " + err.Error())
	}
	if bold, err = opentype.Parse(fonts.Bold); err != nil {
		panic("chart: the embedded bold font cannot be read: " + err.Error())
	}
	return regular, bold
})

// Face returns the charts' typeface at a size.
func Face(size vg.Length, bold bool) font.Face {
	r, b := parseFonts()
	if bold {
		return font.Face{Font: font.Font{Typeface: Typeface, Weight: xfont.WeightBold, Size: size}, Face: b}
	}
	return font.Face{Font: font.Font{Typeface: Typeface, Size: size}, Face: r}
}

// advances caches glyph widths in font units: text is measured far more often than drawn.
var advances struct {
	sync.Mutex
	regular, bold map[rune]vg.Length
}

// Width returns how wide a text is at a size.
func Width(text string, size vg.Length, bold bool) vg.Length {
	advances.Lock()
	defer advances.Unlock()
	if advances.regular == nil {
		advances.regular, advances.bold = make(map[rune]vg.Length, 256), make(map[rune]vg.Length, 256)
	}
	known := advances.regular
	if bold {
		known = advances.bold
	}
	var w vg.Length
	for _, r := range text {
		a, ok := known[r]
		if !ok {
			face := Face(1000, bold)
			a = face.Width(string(r))
			known[r] = a
		}
		w += a
	}
	return w * size / 1000
}

// Fit shortens a text to a width, with an ellipsis where letters were left out. It
// returns the empty text where not even the ellipsis fits.
func Fit(text string, width, size vg.Length, bold bool) string {
	if Width(text, size, bold) <= width {
		return text
	}
	room := width - Width("…", size, bold)
	if room < 0 {
		return ""
	}
	for len(text) > 0 && Width(text, size, bold) > room {
		_, n := utf8.DecodeLastRuneInString(text)
		text = text[:len(text)-n]
	}
	return strings.TrimRight(text, " ") + "…"
}

// pen draws with a style.
type pen struct {
	draw.Canvas
	st Style
}

func newPen(c draw.Canvas, st Style) pen { return pen{c, st} }

// capHeight is the height of Noto Sans capitals in em (its OS/2 table: 714 of 1000).
const capHeight = 0.714

// text draws one line with its baseline at y; ax 0 puts x at its left end, 0.5 at its
// middle, 1 at its right end.
func (p pen) text(x, y vg.Length, s string, size vg.Length, bold bool, col color.NRGBA, ax float64) {
	if s == "" || size <= 0 {
		return
	}
	if ax != 0 {
		x -= Width(s, size, bold) * vg.Length(ax)
	}
	p.SetColor(col)
	p.FillString(Face(size, bold), vg.Point{X: x, Y: y}, s)
}

// middle draws one line whose capitals are centred on y.
func (p pen) middle(x, y vg.Length, s string, size vg.Length, bold bool, col color.NRGBA, ax float64) {
	p.text(x, y-size*capHeight/2, s, size, bold, col, ax)
}

func (p pen) rect(r vg.Rectangle, fill color.NRGBA) {
	if r.Max.X <= r.Min.X || r.Max.Y <= r.Min.Y {
		return
	}
	p.SetColor(fill)
	p.Fill(boxPath(r))
}

func boxPath(r vg.Rectangle) vg.Path {
	var q vg.Path
	q.Move(r.Min)
	q.Line(vg.Point{X: r.Max.X, Y: r.Min.Y})
	q.Line(r.Max)
	q.Line(vg.Point{X: r.Min.X, Y: r.Max.Y})
	q.Close()
	return q
}

func (p pen) frame(r vg.Rectangle, width vg.Length, col color.NRGBA, dash ...vg.Length) {
	p.strokePath(boxPath(r), width, col, dash...)
}

func (p pen) strokePath(q vg.Path, width vg.Length, col color.NRGBA, dash ...vg.Length) {
	p.SetColor(col)
	p.SetLineWidth(width)
	p.SetLineDash(dash, 0)
	p.Stroke(q)
	if len(dash) > 0 {
		p.SetLineDash(nil, 0)
	}
}

func (p pen) fillPath(q vg.Path, col color.NRGBA) {
	p.SetColor(col)
	p.Fill(q)
}

func (p pen) line(x0, y0, x1, y1, width vg.Length, col color.NRGBA, dash ...vg.Length) {
	var q vg.Path
	q.Move(vg.Point{X: x0, Y: y0})
	q.Line(vg.Point{X: x1, Y: y1})
	p.strokePath(q, width, col, dash...)
}

// circlePath approximates a circle by four Bézier curves: one path element that every
// canvas draws alike, arcs included (the constant is 4/3·(√2−1), common practice).
func circlePath(at vg.Point, r vg.Length) vg.Path {
	const k = 0.5522847498307936
	pt := func(x, y vg.Length) vg.Point { return vg.Point{X: at.X + x*r, Y: at.Y + y*r} }
	var q vg.Path
	q.Move(pt(1, 0))
	q.CubeTo(pt(1, k), pt(k, 1), pt(0, 1))
	q.CubeTo(pt(-k, 1), pt(-1, k), pt(-1, 0))
	q.CubeTo(pt(-1, -k), pt(-k, -1), pt(0, -1))
	q.CubeTo(pt(k, -1), pt(1, -k), pt(1, 0))
	q.Close()
	return q
}

// rectOf returns the rectangle between two corners.
func rectOf(x0, y0, x1, y1 vg.Length) vg.Rectangle {
	return vg.Rectangle{Min: vg.Point{X: x0, Y: y0}, Max: vg.Point{X: x1, Y: y1}}
}

func inside(r vg.Rectangle, p vg.Point) bool {
	return p.X >= r.Min.X && p.X < r.Max.X && p.Y >= r.Min.Y && p.Y < r.Max.Y
}

// area returns the drawing area of a chart of that size with its corner at the origin.
func area(w, h vg.Length) vg.Rectangle { return rectOf(0, 0, w, h) }
