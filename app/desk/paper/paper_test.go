package paper

import (
	"bytes"
	"errors"
	"image"
	"image/png"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
	"time"

	"codeberg.org/go-pdf/fpdf"

	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/app/view/demo"
	"cordwalk.example/cordwalk/assets/fonts"
)

// coarse returns a picture's brightness on a coarse grid, 0 to 1: what an eye sees of a page from afar.
func coarse(img image.Image, cols, rows int) []float64 {
	out := make([]float64, cols*rows)
	n := make([]float64, cols*rows)
	b := img.Bounds()
	for y := b.Min.Y; y < b.Max.Y; y++ {
		for x := b.Min.X; x < b.Max.X; x++ {
			r, g, bl, _ := img.At(x, y).RGBA()
			i := (y-b.Min.Y)*rows/b.Dy()*cols + (x-b.Min.X)*cols/b.Dx()
			out[i] += (float64(r) + float64(g) + float64(bl)) / 3 / 65535
			n[i]++
		}
	}
	for i := range out {
		out[i] /= n[i]
	}
	return out
}

// The preview shows what poppler shows: the owner's sheet of every demo animal, compared place by place.
func TestPreviewAgainstPoppler(t *testing.T) {
	if _, err := exec.LookPath("pdftoppm"); err != nil {
		t.Fatal("pdftoppm is missing; this test needs it: apt-get install poppler-utils")
	}
	at := time.Date(2026, 11, 28, 9, 0, 0, 0, time.UTC)
	p := demo.New(demo.Seed, at)
	seen := 0
	for _, c := range p.Cases {
		d, err := sheet.Owner(sheet.Input{Practice: p.Practice, Patient: c.Patient, Visits: c.Visits, At: at})
		if err != nil {
			continue // discharged animals have no sheet
		}
		seen++
		dir := t.TempDir()
		file := filepath.Join(dir, "a.pdf")
		if err := os.WriteFile(file, d.PDF, 0o600); err != nil {
			t.Fatal(err)
		}
		if out, err := exec.Command("pdftoppm", "-r", "72", "-png", "-singlefile", file, filepath.Join(dir, "a")).CombinedOutput(); err != nil {
			t.Fatalf("%v %s", err, out)
		}
		raw, err := os.ReadFile(filepath.Join(dir, "a.png"))
		if err != nil {
			t.Fatal(err)
		}
		theirs, err := png.Decode(bytes.NewReader(raw))
		if err != nil {
			t.Fatal(err)
		}
		pages, err := Pages(d.PDF, 1)
		if err != nil || len(pages) != 1 {
			t.Fatalf("%s: %d pages, %v", c.Patient.Name, len(pages), err)
		}
		a, b := coarse(pages[0], 60, 84), coarse(theirs, 60, 84)
		worst, sum := 0.0, 0.0
		for i := range a {
			worst = math.Max(worst, math.Abs(a[i]-b[i]))
			sum += math.Abs(a[i] - b[i])
		}
		if mean := sum / float64(len(a)); worst > 0.2 || mean > 0.02 {
			t.Errorf("%s: the preview differs from poppler's by %.3f at worst and %.4f in the mean", c.Patient.Name, worst, mean)
		}
	}
	if seen < 5 {
		t.Errorf("only %d sheets were compared", seen)
	}
}

func TestLettersKeepTheirHoles(t *testing.T) {
	doc := fpdf.NewCustom(&fpdf.InitType{UnitStr: "pt", Size: fpdf.SizeType{Wd: 100, Ht: 100}})
	doc.AddUTF8FontFromBytes("noto", "", fonts.Regular)
	doc.AddPage()
	doc.SetFont("noto", "", 90)
	doc.Text(15, 85, "O")
	var b bytes.Buffer
	if err := doc.Output(&b); err != nil {
		t.Fatal(err)
	}
	pages, err := Pages(b.Bytes(), 2)
	if err != nil {
		t.Fatal(err)
	}
	img := pages[0]
	dark := 0
	for y := range img.Bounds().Dy() {
		for x := range img.Bounds().Dx() {
			if r, _, _, _ := img.At(x, y).RGBA(); r < 0x8000 {
				dark++
			}
		}
	}
	if dark < 500 || dark > 12000 {
		t.Errorf("the O covers %d of 40000 pixels", dark)
	}
	if r, _, _, _ := img.At(100, 106).RGBA(); r < 0xf000 {
		t.Error("the inside of the O is painted")
	}
}

func TestForeignBytesAreRefusedOrDrawnInPart(t *testing.T) {
	for _, b := range [][]byte{nil, []byte("hello"), []byte("%PDF-1.3\n"), []byte("%PDF-1.3\n1 0 obj\n<</Type /Page /Contents 9 0 R>>\nendobj")} {
		if _, err := Pages(b, 1); err != nil && !errors.Is(err, ErrForeign) {
			t.Errorf("%q: %v", b, err)
		}
	}
	at := time.Date(2026, 11, 28, 9, 0, 0, 0, time.UTC)
	p := demo.New(demo.Seed, at)
	d, err := sheet.Owner(sheet.Input{Practice: p.Practice, Patient: p.Cases[0].Patient, Visits: p.Cases[0].Visits, At: at})
	if err != nil {
		t.Fatal(err)
	}
	for i := 0; i < len(d.PDF); i += 977 { // a cut or changed file never ends in a panic
		_, _ = Pages(d.PDF[:i], 0.2)
		b := bytes.Clone(d.PDF)
		b[i] ^= 0x55
		_, _ = Pages(b, 0.2)
	}
}

func FuzzScan(f *testing.F) {
	f.Add([]byte("1 0 0 1 5 5 cm [(a\\)b) 3 <0041>] TJ /F1 9 Tf 1 2 m 3 4 l S"))
	f.Fuzz(func(_ *testing.T, b []byte) {
		s := scanner{b: b}
		for range len(b) + 1 {
			if _, ok := s.next(); !ok {
				return
			}
		}
	})
}
