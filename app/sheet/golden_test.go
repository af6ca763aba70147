package sheet

import (
	"bytes"
	"flag"
	"image/color"
	"image/png"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"codeberg.org/go-pdf/fpdf"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/app/chart"
)

var update = flag.Bool("update", false, "write the golden pages in testdata anew")

// rendered draws a page of a PDF with poppler at 50 dots an inch.
func rendered(t testing.TB, pdf []byte) []byte {
	t.Helper()
	dir := t.TempDir()
	path := filepath.Join(dir, "p.pdf")
	require.NoError(t, os.WriteFile(path, pdf, 0o644))
	out, err := exec.Command("pdftoppm", "-png", "-gray", "-r", "50", "-singlefile", path, filepath.Join(dir, "p")).CombinedOutput()
	require.NoError(t, err, string(out))
	data, err := os.ReadFile(filepath.Join(dir, "p.png"))
	require.NoError(t, err)
	return data
}

// TestGoldenPages compares whole pages, as they were looked at, with a tolerance for how
// letters' edges fall, and their text exactly. The papers hold no text of other packages' tables.
func TestGoldenPages(t *testing.T) {
	for name, opt := range map[string]Options{"relapse": {Paper: "Letter"}, "first-visit": {Paper: "A4", Large: true}, "recovery": {Paper: "A4"}, "going-down": {Paper: "A4", Grey: true}} {
		t.Run(name, func(t *testing.T) {
			in := patients()[name]
			in.Options = opt
			in.Visits[len(in.Visits)-1].Home = nil
			doc, err := Owner(in)
			require.NoError(t, err)
			gotPage, gotText := rendered(t, doc.PDF), textOf(t, doc.PDF)
			pagePath, textPath := filepath.Join("testdata", "golden", name+".png"), filepath.Join("testdata", "golden", name+".txt")
			if *update {
				require.NoError(t, os.MkdirAll(filepath.Dir(pagePath), 0o755))
				require.NoError(t, os.WriteFile(pagePath, gotPage, 0o644))
				require.NoError(t, os.WriteFile(textPath, []byte(gotText+"\n"), 0o644))
				return
			}
			wantText, err := os.ReadFile(textPath)
			require.NoError(t, err)
			assert.Equal(t, strings.TrimSpace(string(wantText)), gotText)
			wantPage, err := os.ReadFile(pagePath)
			require.NoError(t, err)
			a, err := png.Decode(bytes.NewReader(gotPage))
			require.NoError(t, err)
			b, err := png.Decode(bytes.NewReader(wantPage))
			require.NoError(t, err)
			require.Equal(t, b.Bounds(), a.Bounds())
			off, r := 0, a.Bounds()
			for y := r.Min.Y; y < r.Max.Y; y++ {
				for x := r.Min.X; x < r.Max.X; x++ {
					p, q := color.GrayModel.Convert(a.At(x, y)).(color.Gray), color.GrayModel.Convert(b.At(x, y)).(color.Gray)
					if d := int(p.Y) - int(q.Y); d > 70 || d < -70 {
						off++
					}
				}
			}
			assert.Less(t, float64(off)/float64(r.Dx()*r.Dy()), 0.002, "share of the page that differs")
		})
	}
}

// barePDF is a page with one line in the same two fonts by the same library.
func barePDF(tb testing.TB) []byte {
	doc := fpdf.New("P", "pt", "A4", "")
	doc.SetCreationDate(at(0))
	doc.SetModificationDate(at(0))
	chart.AddFonts(doc)
	doc.AddPage()
	doc.SetFont("noto", "", 11)
	doc.Text(50, 60, "How Bruno is doing")
	doc.SetFont("noto", "B", 11)
	doc.Text(50, 80, "How Bruno is doing")
	var buf bytes.Buffer
	require.NoError(tb, doc.Output(&buf))
	return buf.Bytes()
}

// BenchmarkOwnerSheet reports an owner's sheet against a bare PDF of one page by the same
// library with the same fonts (asked for: at most 5×) and in milliseconds.
func BenchmarkOwnerSheet(b *testing.B) {
	in := patients()["recovery"]
	var own, bare time.Duration
	for b.Loop() {
		start := time.Now()
		_, err := Owner(in)
		require.NoError(b, err)
		own += time.Since(start)
		start = time.Now()
		barePDF(b)
		bare += time.Since(start)
	}
	b.ReportMetric(own.Seconds()/bare.Seconds(), "×bare")
	b.ReportMetric(own.Seconds()*1000/float64(b.N), "ms/sheet")
}

// BenchmarkClinicalSummary is the same for the two pages of the clinical summary.
func BenchmarkClinicalSummary(b *testing.B) {
	in := demoInputs()["Bramble"]
	for b.Loop() {
		_, err := Clinical(in, nil)
		require.NoError(b, err)
	}
}
