package sheet

import (
	"bytes"
	"fmt"
	"image/color"
	"math"
	"strings"
	"sync"
	"time"
	"unicode"
	"unicode/utf8"

	"codeberg.org/go-pdf/fpdf"
	"golang.org/x/image/font/sfnt"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"cordwalk.example/cordwalk/app/chart"
)

// page is a pen that goes down a page: it writes where it stands and moves on, or, when
// dry, only moves on. Lengths are points from the upper left corner.
type page struct {
	doc    *fpdf.Fpdf
	pal    chart.Palette
	lang   string
	w, h   float64
	margin float64
	size   float64 // of running text
	y      float64
	dry    bool
	prose  *[]string
	lost   map[string]bool // letters the typeface lacks

	cleaned map[string]string // what clean made of a text: pages are laid out many times
}

// newDoc opens a document with fixed dates and sorted objects, so that the same input gives
// the same bytes.
func newDoc(letter bool, lang, title, subject, author string, at time.Time) *fpdf.Fpdf {
	size := "A4"
	if letter {
		size = "Letter"
	}
	doc := fpdf.New("P", "pt", size, "")
	doc.SetAutoPageBreak(false, 0)
	doc.SetMargins(0, 0, 0)
	doc.SetCatalogSort(true)
	stamp := at.UTC().Truncate(time.Second)
	doc.SetCreationDate(stamp)
	doc.SetModificationDate(stamp)
	doc.SetProducer("Cordwalk", true)
	doc.SetCreator("Cordwalk", true)
	doc.SetTitle(title, true)
	doc.SetSubject(subject, true)
	doc.SetAuthor(author, true)
	doc.SetLang(lang)
	chart.AddFonts(doc)
	return doc
}

func output(doc *fpdf.Fpdf) ([]byte, error) {
	var buf bytes.Buffer
	if err := doc.Output(&buf); err != nil {
		return nil, fmt.Errorf("making the PDF: %w", err)
	}
	return buf.Bytes(), nil
}

// width of a text at a size, in points.
func width(s string, size float64, bold bool) float64 {
	return chart.Width(s, vg.Length(size), bold).Points()
}

func (p *page) colour(c color.NRGBA) {
	p.doc.SetTextColor(int(c.R), int(c.G), int(c.B))
	p.doc.SetFillColor(int(c.R), int(c.G), int(c.B))
	p.doc.SetDrawColor(int(c.R), int(c.G), int(c.B))
}

// put writes one line with its baseline at y.
func (p *page) put(x, y float64, s string, size float64, bold bool, c color.NRGBA) {
	if p.dry || s == "" {
		return
	}
	style := ""
	if bold {
		style = "B"
	}
	p.doc.SetFont("noto", style, size)
	p.colour(c)
	p.doc.Text(x, y, p.clean(s))
}

// right writes one line that ends at x.
func (p *page) right(x, y float64, s string, size float64, bold bool, c color.NRGBA) {
	p.put(x-width(p.clean(s), size, bold), y, s, size, bold, c)
}

// note keeps a printed line for Document.Prose.
func (p *page) note(s string) {
	if !p.dry && p.prose != nil && strings.TrimSpace(s) != "" {
		*p.prose = append(*p.prose, s)
	}
}

// lead is the distance between lines of a size.
func lead(size float64) float64 { return size * 1.32 }

// para writes wrapped text at x in width w, at most most lines (0: all), and moves down.
func (p *page) para(x, w float64, s string, size float64, bold bool, c color.NRGBA, most int) {
	for _, line := range wrap(p.clean(s), w, size, bold, most) {
		p.y += lead(size)
		p.put(x, p.y-size*0.3, line, size, bold, c)
	}
}

// tall returns how high para would be.
func (p *page) tall(w float64, s string, size float64, bold bool, most int) float64 {
	return lead(size) * float64(len(wrap(p.clean(s), w, size, bold, most)))
}

// wrap breaks a text into lines of at most w points; words longer than a line are broken.
// With most > 0 the last line ends in an ellipsis where text was left out.
func wrap(s string, w, size float64, bold bool, most int) []string {
	var out []string
	space := width(" ", size, bold)
	line, used := "", 0.0
	flush := func() {
		if line != "" {
			out = append(out, line)
			line, used = "", 0
		}
	}
	for _, part := range strings.Split(s, "\n") {
		for _, word := range strings.Split(part, " ") { // a no-break space breaks nothing
			if word == "" {
				continue
			}
			if most > 0 && len(out) > most {
				break // what follows is not shown
			}
			ww := width(word, size, bold)
			if line != "" && used+space+ww <= w {
				line, used = line+" "+word, used+space+ww
				continue
			}
			flush()
			for ww > w {
				// Widths add up, so the longest beginning that fits is found in one go.
				cut, at := 0, 0.0
				for i, r := range word {
					at += width(string(r), size, bold)
					if at > w {
						break
					}
					cut = i + utf8.RuneLen(r)
				}
				if cut == 0 {
					break // not even one letter fits
				}
				out = append(out, word[:cut])
				word = word[cut:]
				ww = width(word, size, bold)
			}
			line, used = word, ww
		}
		flush()
	}
	if most > 0 && len(out) > most {
		out = out[:most]
		last := out[most-1]
		out[most-1] = chart.Fit(last+" …", vg.Length(w), vg.Length(size), bold)
		if !strings.HasSuffix(out[most-1], "…") {
			out[most-1] = chart.Fit(last, vg.Length(w)-chart.Width("…", vg.Length(size), bold), vg.Length(size), bold) + "…"
		}
	}
	return out
}

// rule draws a thin line across and moves down.
func (p *page) rule(x, w float64) {
	p.y += 3
	if !p.dry {
		p.colour(p.pal.Line)
		p.doc.SetLineWidth(0.6)
		p.doc.Line(x, p.y, x+w, p.y)
	}
	p.y += 3
}

// heading writes a section's heading with a rule under it: what is too long for one line a little
// smaller, or else on two.
func (p *page) heading(x, w float64, s string) {
	size := p.size * 1.15
	size *= math.Min(1, math.Max(0.85, w/math.Max(width(p.clean(s), size, true), 1)))
	p.y += lead(size) * 0.12
	for _, line := range wrap(p.clean(s), w+0.1, size, true, 2) {
		p.y += lead(size)
		p.put(x, p.y-size*0.35, line, size, true, p.pal.Ink)
	}
	if !p.dry {
		p.colour(p.pal.Line)
		p.doc.SetLineWidth(0.6)
		p.doc.Line(x, p.y, x+w, p.y)
	}
	p.y += p.size * 0.15
}

// box draws a rectangle; a nil colour leaves that part out.
func (p *page) box(x, y, w, h float64, fill, edge *color.NRGBA, line float64) {
	if p.dry {
		return
	}
	if fill != nil {
		p.colour(*fill)
		p.doc.Rect(x, y, w, h, "F")
	}
	if edge != nil {
		p.colour(*edge)
		p.doc.SetLineWidth(line)
		p.doc.SetDashPattern(nil, 0)
		p.doc.Rect(x, y, w, h, "D")
	}
}

// draw lends a part of the page to a chart.
func (p *page) draw(x, y, w, h float64, f func(draw.Canvas)) {
	if p.dry || w <= 0 || h <= 0 {
		return
	}
	f(chart.OnPDF(p.doc, vg.Length(x), vg.Length(y), vg.Length(w), vg.Length(h)))
	p.doc.SetDashPattern(nil, 0)
}

var glyphs = struct {
	sync.Mutex
	known map[rune]bool
	buf   sfnt.Buffer
}{known: map[rune]bool{}}

// printable reports whether the typeface has the letter. The library writes letters of the
// basic plane only.
func printable(r rune) bool {
	if r > 0xFFFF {
		return false
	}
	glyphs.Lock()
	defer glyphs.Unlock()
	if ok, known := glyphs.known[r]; known {
		return ok
	}
	face := chart.Face(10, false)
	i, err := face.Face.GlyphIndex(&glyphs.buf, r)
	glyphs.known[r] = err == nil && i != 0
	return glyphs.known[r]
}

// clean makes a text fit to be written on one line: controls become spaces, letters that
// the typeface lacks become a question mark and are remembered.
func (p *page) clean(s string) string {
	if out, ok := p.cleaned[s]; ok {
		return out
	}
	out := p.cleanOnce(strings.ToValidUTF8(s, "?"))
	if p.cleaned == nil {
		p.cleaned = map[string]string{}
	}
	p.cleaned[s] = out
	return out
}

func (p *page) cleanOnce(s string) string {
	ok := true
	for _, r := range s {
		if r != '\n' && (unicode.IsControl(r) || !printable(r)) {
			ok = false
			break
		}
	}
	if ok {
		return s
	}
	return strings.Map(func(r rune) rune {
		switch {
		case r == '\n':
			return r
		case unicode.IsControl(r):
			return ' '
		case unicode.Is(unicode.Mn, r), unicode.Is(unicode.Cf, r), r == 0xFE0F:
			if printable(r) {
				return r
			}
			return -1
		case !printable(r):
			if p.lost != nil {
				p.lost[string(r)] = true
			}
			return '?'
		}
		return r
	}, s)
}
