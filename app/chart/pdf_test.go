package chart

import (
	"bytes"
	"image"
	"image/color"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"codeberg.org/go-pdf/fpdf"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/recorder"
)

// pdfOf draws each chart on a page of its own.
func pdfOf(t testing.TB, unit string) []byte {
	t.Helper()
	doc := fpdf.New("P", unit, "A4", "")
	doc.SetCatalogSort(true)
	doc.SetCreationDate(time.Date(2026, 3, 2, 0, 0, 0, 0, time.UTC))
	doc.SetModificationDate(time.Date(2026, 3, 2, 0, 0, 0, 0, time.UTC))
	AddFonts(doc)
	for _, d := range gallery() {
		doc.AddPage()
		d.draw(OnPDF(doc, 40, 60, d.w*0.7, d.h*0.7), Paper(Print()))
	}
	var buf bytes.Buffer
	require.NoError(t, doc.Output(&buf))
	return buf.Bytes()
}

// TestPDFKeepsTheTextAndTheBytes: poppler finds every text a recorder saw, both fonts are
// embedded as subsets, and the same charts give the same bytes, whatever the document's unit.
func TestPDFKeepsTheTextAndTheBytes(t *testing.T) {
	a := pdfOf(t, "pt")
	assert.Equal(t, a, pdfOf(t, "pt"))
	path := filepath.Join(t.TempDir(), "charts.pdf")
	require.NoError(t, os.WriteFile(path, a, 0o644))
	text, err := exec.Command("pdftotext", "-layout", path, "-").Output()
	require.NoError(t, err, "pdftotext of poppler-utils is needed")
	for _, d := range gallery() {
		c := recorder.Canvas{}
		d.draw(areaCanvas(&c, d.w*0.7, d.h*0.7), Paper(Print()))
		for _, act := range c.Actions {
			if s, ok := act.(*recorder.FillString); ok && len(s.String) > 4 {
				for _, word := range strings.Fields(s.String) {
					assert.Contains(t, string(text), word, d.name)
				}
			}
		}
	}
	fontsOut, err := exec.Command("pdffonts", path).Output()
	require.NoError(t, err)
	for _, line := range strings.Split(strings.TrimSpace(string(fontsOut)), "\n")[2:] {
		// The columns behind the name: embedded, named as a subset, with a map to Unicode. The
		// library cuts the fonts without renaming them, so the size is what tells a subset.
		assert.Regexp(t, `Identity-H +yes (yes|no) +yes`, line)
	}
	assert.Less(t, len(a), 250_000, "two whole fonts would be 900,000 bytes")
}

// TestPDFPlacesPointsAsAsked follows transforms of the canvas to the page: y runs up on the
// canvas and down on the page, and every call may be nested.
func TestPDFPlacesPointsAsAsked(t *testing.T) {
	doc := fpdf.New("P", "mm", "A4", "")
	AddFonts(doc)
	doc.AddPage()
	c := OnPDF(doc, 72, 144, 200, 100)
	p := c.Canvas.(*PDF)
	at := func(x, y vg.Length) (float64, float64) {
		px, py := p.point(vg.Point{X: x, Y: y})
		return doc.UnitToPointConvert(px), doc.UnitToPointConvert(py)
	}
	x, y := at(0, 0)
	assert.InDelta(t, 72, x, 1e-9)
	assert.InDelta(t, 244, y, 1e-9)
	p.Push()
	p.Translate(vg.Point{X: 10, Y: 20})
	p.Rotate(math.Pi / 2)
	p.Scale(2, 2)
	x, y = at(5, 0) // ten to the right, turned up
	assert.InDelta(t, 82, x, 1e-9)
	assert.InDelta(t, 214, y, 1e-9)
	assert.InDelta(t, 2, p.scale(), 1e-12)
	p.FillString(Face(10, true), vg.Point{}, "turned")
	p.Pop()
	x, y = at(0, 0)
	assert.InDelta(t, 72, x, 1e-9)
	assert.InDelta(t, 244, y, 1e-9)
	var arc vg.Path
	arc.Arc(vg.Point{X: 50, Y: 50}, 20, 0, math.Pi*1.5)
	arc.Close()
	p.Fill(arc)
	var quad vg.Path
	quad.Move(vg.Point{})
	quad.QuadTo(vg.Point{X: 5, Y: 5}, vg.Point{X: 10})
	p.SetColor(color.NRGBA{R: 200, A: 128})
	p.Stroke(quad)
	p.SetColor(nil)
	p.DrawImage(rectOf(0, 0, 10, 10), image.NewGray(image.Rect(0, 0, 4, 4)))
	require.NoError(t, doc.Error())
}

// BenchmarkChartPicture and BenchmarkChartPDF report what drawing one strip costs.
func BenchmarkChartPicture(b *testing.B) {
	d := gallery()[0]
	for b.Loop() {
		picture(b, d, Screen(Light()))
	}
}

func BenchmarkChartPDF(b *testing.B) {
	doc := fpdf.New("P", "pt", "A4", "")
	AddFonts(doc)
	doc.AddPage()
	s := testStrip()
	for b.Loop() {
		s.Draw(OnPDF(doc, 40, 60, 500, 300), Paper(Print()))
	}
}
