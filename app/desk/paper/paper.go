// Package paper draws the pages of the PDF files that this program makes, for the preview on
// the screen. It reads what the program's own writer writes (text in the one typeface with
// two-byte codes, lines, fills, curves, pictures) and nothing else: a file of another origin
// may come out incomplete.
package paper

import (
	"bytes"
	"compress/zlib"
	"errors"
	"fmt"
	"image"
	"image/color"
	"io"
	"regexp"
	"strconv"
	"sync"

	"golang.org/x/image/font"
	"golang.org/x/image/font/sfnt"
	"golang.org/x/image/math/fixed"

	"cordwalk.example/cordwalk/app/desk/ink"
	"cordwalk.example/cordwalk/assets/fonts"
)

// ErrForeign means that the bytes are no PDF file as this program writes them.
var ErrForeign = errors.New("this is no PDF file of this program")

var (
	objectStart = regexp.MustCompile(`(?m)^(\d+) 0 obj\b`)
	mediaBox    = regexp.MustCompile(`/MediaBox\s*\[\s*([\d.]+)\s+([\d.]+)\s+([\d.]+)\s+([\d.]+)\s*\]`)
	contents    = regexp.MustCompile(`/Contents\s+(\d+) 0 R`)
	length      = regexp.MustCompile(`/Length\s+(\d+)`)
	resource    = regexp.MustCompile(`/(\w+)\s+(\d+) 0 R`)
	pageMark    = regexp.MustCompile(`/Type\s*/Page\b`)
)

// object is one object of the file: its dictionary and its stream, unpacked.
type object struct {
	head   []byte
	stream []byte
}

// mostStream bounds an unpacked stream, so that a damaged file cannot fill the memory.
const mostStream = 64 << 20

func objects(pdf []byte) (map[int]object, []int) {
	out := map[int]object{}
	var order []int
	at := 0
	for at < len(pdf) {
		m := objectStart.FindSubmatchIndex(pdf[at:])
		if m == nil {
			break
		}
		n, _ := strconv.Atoi(string(pdf[at+m[2] : at+m[3]]))
		from := at + m[1]
		end := bytes.Index(pdf[from:], []byte("endobj"))
		if end < 0 {
			break
		}
		body := pdf[from : from+end]
		o := object{head: body}
		if s := bytes.Index(body, []byte("stream")); s >= 0 {
			o.head = body[:s]
			start := from + s + len("stream")
			for start < len(pdf) && (pdf[start] == '\r' || pdf[start] == '\n') {
				start++
			}
			if l := length.FindSubmatch(o.head); l != nil {
				size, _ := strconv.Atoi(string(l[1]))
				if size >= 0 && start+size <= len(pdf) {
					o.stream = pdf[start : start+size]
					if e := bytes.Index(pdf[start+size:], []byte("endobj")); e >= 0 {
						end = start + size + e - from
					}
				}
			}
			if bytes.Contains(o.head, []byte("/FlateDecode")) {
				if r, err := zlib.NewReader(bytes.NewReader(o.stream)); err == nil {
					b, err := io.ReadAll(io.LimitReader(r, mostStream))
					if err == nil {
						o.stream = b
					}
				}
			}
		}
		out[n] = o
		order = append(order, n)
		at = from + end + len("endobj")
	}
	return out, order
}

// Pages draws every page on white, scale pixels to a point.
func Pages(pdf []byte, scale float64) ([]image.Image, error) {
	if !bytes.HasPrefix(pdf, []byte("%PDF-")) {
		return nil, ErrForeign
	}
	objs, order := objects(pdf)
	bold := map[string]bool{}
	pictures := map[string]image.Image{}
	box := [2]float64{595.28, 841.89}
	for _, n := range order {
		o := objs[n]
		if m := mediaBox.FindSubmatch(o.head); m != nil && bytes.Contains(o.head, []byte("/Type /Pages")) {
			w, _ := strconv.ParseFloat(string(m[3]), 64)
			h, _ := strconv.ParseFloat(string(m[4]), 64)
			box = [2]float64{w, h}
		}
		if !bytes.Contains(o.head, []byte("/Font <<")) && !bytes.Contains(o.head, []byte("/XObject")) {
			continue
		}
		for _, m := range resource.FindAllSubmatch(o.head, -1) {
			k, _ := strconv.Atoi(string(m[2]))
			t := objs[k]
			if bytes.Contains(t.head, []byte("/Type0")) || bytes.Contains(t.head, []byte("/BaseFont")) {
				bold[string(m[1])] = bytes.Contains(t.head, []byte("B\n")) || bytes.Contains(t.head, []byte("Bold"))
			}
			if bytes.Contains(t.head, []byte("/Subtype /Image")) {
				if img, err := picture(t); err == nil {
					pictures[string(m[1])] = img
				}
			}
		}
	}
	var out []image.Image
	for _, n := range order {
		o := objs[n]
		if !pageMark.Match(o.head) {
			continue
		}
		c := contents.FindSubmatch(o.head)
		if c == nil {
			continue
		}
		size := box
		if m := mediaBox.FindSubmatch(o.head); m != nil {
			w, _ := strconv.ParseFloat(string(m[3]), 64)
			h, _ := strconv.ParseFloat(string(m[4]), 64)
			size = [2]float64{w, h}
		}
		k, _ := strconv.Atoi(string(c[1]))
		if size[0] < 1 || size[1] < 1 || size[0]*size[1]*scale*scale > 1e8 {
			return nil, fmt.Errorf("%w: a page of %g × %g points", ErrForeign, size[0], size[1])
		}
		p := &painter{pen: ink.New(int(size[0]*scale+0.5), int(size[1]*scale+0.5), scale), height: size[1], bold: bold, pictures: pictures}
		p.pen.Fill(color.White, ink.Rect(0, 0, size[0], size[1]))
		p.run(objs[k].stream)
		out = append(out, p.pen.Picture())
	}
	if len(out) == 0 {
		return nil, ErrForeign
	}
	return out, nil
}

// matrix is the PDF's [a b c d e f].
type matrix [6]float64

// times returns the matrix that does m first and then n.
func (m matrix) times(n matrix) matrix {
	return matrix{
		m[0]*n[0] + m[1]*n[2], m[0]*n[1] + m[1]*n[3],
		m[2]*n[0] + m[3]*n[2], m[2]*n[1] + m[3]*n[3],
		m[4]*n[0] + m[5]*n[2] + n[4], m[4]*n[1] + m[5]*n[3] + n[5],
	}
}

type state struct {
	m            matrix
	fill, stroke color.NRGBA
	width        float64
	dash         []float64
}

// painter runs one page's drawing commands.
type painter struct {
	pen      *ink.Pen
	height   float64
	bold     map[string]bool
	pictures map[string]image.Image

	now   state
	past  []state
	lines [][]ink.Point // the path under construction, in page points with y down
	shut  []bool
	last  [2]float64

	text, line matrix
	size       float64
	strong     bool
}

// at maps a point of the current coordinates to the page.
func (p *painter) at(x, y float64) ink.Point {
	m := p.now.m
	return ink.Point{X: m[0]*x + m[2]*y + m[4], Y: p.height - (m[1]*x + m[3]*y + m[5])}
}

func (p *painter) run(code []byte) {
	p.now = state{m: matrix{1, 0, 0, 1, 0, 0}, fill: color.NRGBA{A: 255}, stroke: color.NRGBA{A: 255}, width: 1}
	var args []token
	s := scanner{b: code}
	for {
		t, ok := s.next()
		if !ok {
			return
		}
		if t.kind != command {
			if len(args) < 4096 {
				args = append(args, t)
			}
			continue
		}
		p.do(t.word, args)
		args = args[:0]
	}
}

func num(args []token, i int) float64 {
	if i < 0 || i >= len(args) {
		return 0
	}
	return args[i].number
}

func grey(x float64) color.NRGBA { return rgb(x, x, x) }

func rgb(r, g, b float64) color.NRGBA {
	c := func(x float64) uint8 { return uint8(min(1, max(0, x))*255 + 0.5) }
	return color.NRGBA{c(r), c(g), c(b), 255}
}

func (p *painter) do(op string, a []token) {
	switch op {
	case "q":
		if len(p.past) < 256 {
			p.past = append(p.past, p.now)
		}
	case "Q":
		if n := len(p.past); n > 0 {
			p.now, p.past = p.past[n-1], p.past[:n-1]
		}
	case "cm":
		p.now.m = matrix{num(a, 0), num(a, 1), num(a, 2), num(a, 3), num(a, 4), num(a, 5)}.times(p.now.m)
	case "w":
		p.now.width = num(a, 0)
	case "d":
		p.now.dash = nil
		if len(a) > 0 && a[0].kind == list {
			sum := 0.0
			for _, x := range a[0].items {
				sum += x
			}
			if sum > 0 {
				p.now.dash = a[0].items
			}
		}
	case "g":
		p.now.fill = grey(num(a, 0))
	case "G":
		p.now.stroke = grey(num(a, 0))
	case "rg":
		p.now.fill = rgb(num(a, 0), num(a, 1), num(a, 2))
	case "RG":
		p.now.stroke = rgb(num(a, 0), num(a, 1), num(a, 2))
	case "m":
		p.lines = append(p.lines, []ink.Point{p.at(num(a, 0), num(a, 1))})
		p.shut = append(p.shut, false)
		p.last = [2]float64{num(a, 0), num(a, 1)}
	case "l":
		p.add(p.at(num(a, 0), num(a, 1)))
		p.last = [2]float64{num(a, 0), num(a, 1)}
	case "c", "v", "y":
		x0, y0 := p.last[0], p.last[1]
		var x1, y1, x2, y2, x3, y3 float64
		switch op {
		case "c":
			x1, y1, x2, y2, x3, y3 = num(a, 0), num(a, 1), num(a, 2), num(a, 3), num(a, 4), num(a, 5)
		case "v":
			x1, y1, x2, y2, x3, y3 = x0, y0, num(a, 0), num(a, 1), num(a, 2), num(a, 3)
		default:
			x1, y1, x3, y3 = num(a, 0), num(a, 1), num(a, 2), num(a, 3)
			x2, y2 = x3, y3
		}
		const steps = 12
		for k := 1; k <= steps; k++ {
			t := float64(k) / steps
			u := 1 - t
			p.add(p.at(u*u*u*x0+3*u*u*t*x1+3*u*t*t*x2+t*t*t*x3, u*u*u*y0+3*u*u*t*y1+3*u*t*t*y2+t*t*t*y3))
		}
		p.last = [2]float64{x3, y3}
	case "re":
		x, y, w, h := num(a, 0), num(a, 1), num(a, 2), num(a, 3)
		p.lines = append(p.lines, []ink.Point{p.at(x, y), p.at(x+w, y), p.at(x+w, y+h), p.at(x, y+h)})
		p.shut = append(p.shut, true)
		p.last = [2]float64{x, y}
	case "h":
		if n := len(p.shut); n > 0 {
			p.shut[n-1] = true
		}
	case "S", "s":
		if op == "s" && len(p.shut) > 0 {
			p.shut[len(p.shut)-1] = true
		}
		p.strokeAll()
		p.clear()
	case "f", "F", "f*":
		p.pen.FillTurned(p.now.fill, p.lines...)
		p.clear()
	case "B", "b", "B*", "b*":
		p.pen.FillTurned(p.now.fill, p.lines...)
		if op[0] == 'b' && len(p.shut) > 0 {
			p.shut[len(p.shut)-1] = true
		}
		p.strokeAll()
		p.clear()
	case "n":
		p.clear()
	case "BT":
		p.text = matrix{1, 0, 0, 1, 0, 0}
		p.line = p.text
	case "Tf":
		if len(a) >= 2 {
			p.strong, p.size = p.bold[a[0].word], a[1].number
		}
	case "Td":
		p.line = matrix{1, 0, 0, 1, num(a, 0), num(a, 1)}.times(p.line)
		p.text = p.line
	case "Tm":
		p.line = matrix{num(a, 0), num(a, 1), num(a, 2), num(a, 3), num(a, 4), num(a, 5)}
		p.text = p.line
	case "Tj":
		if len(a) > 0 {
			p.show(a[0].bytes)
		}
	case "TJ":
		if len(a) > 0 {
			for _, part := range a[0].parts {
				p.show(part)
			}
		}
	case "Do":
		if len(a) > 0 {
			if img := p.pictures[a[0].word]; img != nil {
				p.place(img)
			}
		}
	}
}

func (p *painter) add(q ink.Point) {
	if n := len(p.lines); n > 0 {
		p.lines[n-1] = append(p.lines[n-1], q)
	}
}

func (p *painter) clear() { p.lines, p.shut = nil, nil }

func (p *painter) strokeAll() {
	scale := p.now.m[0]*p.now.m[3] - p.now.m[1]*p.now.m[2]
	if scale < 0 {
		scale = -scale
	}
	w := p.now.width
	if scale > 0 && scale != 1 {
		w *= sqrt(scale)
	}
	w = max(w, 0.35)
	for i, l := range p.lines {
		if len(p.now.dash) > 0 {
			gap := p.now.dash[0]
			if len(p.now.dash) > 1 {
				gap = p.now.dash[1]
			}
			p.pen.Dashes(p.now.stroke, w, max(0.1, p.now.dash[0]), max(0.1, gap), p.shut[i], l...)
			continue
		}
		p.pen.Stroke(p.now.stroke, w, p.shut[i], l...)
	}
}

// place draws a picture into the unit square of the current coordinates.
func (p *painter) place(img image.Image) {
	b := img.Bounds()
	dst := p.pen.Picture()
	lo, hi := p.at(0, 1), p.at(1, 0)
	s := p.pen.Scale()
	x0, y0, x1, y1 := int(lo.X*s), int(lo.Y*s), int(hi.X*s+0.5), int(hi.Y*s+0.5)
	if x1 <= x0 || y1 <= y0 {
		return
	}
	for y := max(0, y0); y < y1 && y < dst.Bounds().Dy(); y++ {
		for x := max(0, x0); x < x1 && x < dst.Bounds().Dx(); x++ {
			dst.Set(x, y, img.At(b.Min.X+(x-x0)*b.Dx()/(x1-x0), b.Min.Y+(y-y0)*b.Dy()/(y1-y0)))
		}
	}
}

// face is a parsed font with the outlines it was asked for.
type face struct {
	font   *sfnt.Font
	buf    sfnt.Buffer
	glyphs map[rune]glyph
}

type glyph struct {
	outlines [][]ink.Point // in em, y down
	advance  float64       // in em
}

var (
	facesMu sync.Mutex
	faces   [2]*face
)

func faceOf(strong bool) (*face, error) {
	i, data := 0, fonts.Regular
	if strong {
		i, data = 1, fonts.Bold
	}
	if faces[i] == nil {
		f, err := sfnt.Parse(data)
		if err != nil {
			return nil, err
		}
		faces[i] = &face{font: f, glyphs: map[rune]glyph{}}
	}
	return faces[i], nil
}

func (f *face) glyph(r rune) glyph {
	if g, ok := f.glyphs[r]; ok {
		return g
	}
	const em = 1024
	var g glyph
	id, err := f.font.GlyphIndex(&f.buf, r)
	if err == nil {
		ppem := fixed.I(em)
		if adv, err := f.font.GlyphAdvance(&f.buf, id, ppem, font.HintingNone); err == nil {
			g.advance = float64(adv) / 64 / em
		}
		if segs, err := f.font.LoadGlyph(&f.buf, id, ppem, nil); err == nil {
			g.outlines = outlines(segs, em)
		}
	}
	f.glyphs[r] = g
	return g
}

func outlines(segs sfnt.Segments, em float64) [][]ink.Point {
	var out [][]ink.Point
	pt := func(q fixed.Point26_6) ink.Point {
		return ink.Point{X: float64(q.X) / 64 / em, Y: float64(q.Y) / 64 / em}
	}
	for _, s := range segs {
		if s.Op == sfnt.SegmentOpMoveTo {
			out = append(out, []ink.Point{pt(s.Args[0])})
			continue
		}
		if len(out) == 0 {
			continue
		}
		line := out[len(out)-1]
		a := line[len(line)-1]
		switch s.Op {
		case sfnt.SegmentOpLineTo:
			line = append(line, pt(s.Args[0]))
		case sfnt.SegmentOpQuadTo:
			b, c := pt(s.Args[0]), pt(s.Args[1])
			for k := 1; k <= 6; k++ {
				t := float64(k) / 6
				u := 1 - t
				line = append(line, ink.Point{X: u*u*a.X + 2*u*t*b.X + t*t*c.X, Y: u*u*a.Y + 2*u*t*b.Y + t*t*c.Y})
			}
		case sfnt.SegmentOpCubeTo:
			b, c, d := pt(s.Args[0]), pt(s.Args[1]), pt(s.Args[2])
			for k := 1; k <= 8; k++ {
				t := float64(k) / 8
				u := 1 - t
				line = append(line, ink.Point{X: u*u*u*a.X + 3*u*u*t*b.X + 3*u*t*t*c.X + t*t*t*d.X, Y: u*u*u*a.Y + 3*u*u*t*b.Y + 3*u*t*t*c.Y + t*t*t*d.Y})
			}
		}
		out[len(out)-1] = line
	}
	return out
}

// show draws a string of two-byte codes, which are Unicode, and moves on.
func (p *painter) show(codes []byte) {
	facesMu.Lock()
	defer facesMu.Unlock()
	f, err := faceOf(p.strong)
	if err != nil {
		return
	}
	for i := 0; i+1 < len(codes); i += 2 {
		g := f.glyph(rune(codes[i])<<8 | rune(codes[i+1]))
		m := matrix{p.size, 0, 0, p.size, 0, 0}.times(p.text).times(p.now.m)
		shape := make([][]ink.Point, len(g.outlines))
		for k, o := range g.outlines {
			shape[k] = make([]ink.Point, len(o))
			for j, q := range o {
				x, y := q.X, -q.Y
				shape[k][j] = ink.Point{X: m[0]*x + m[2]*y + m[4], Y: p.height - (m[1]*x + m[3]*y + m[5])}
			}
		}
		p.pen.FillTurned(p.now.fill, shape...)
		p.text = matrix{1, 0, 0, 1, g.advance * p.size, 0}.times(p.text)
	}
}
