package desk

import (
	"bytes"
	"flag"
	"fmt"
	"image"
	"image/color"
	"image/png"
	"os"
	"path/filepath"
	"slices"
	"testing"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/view"
)

var update = flag.Bool("update", false, "write the pictures in testdata anew; look at them before they are kept")

// placed is a store that says of itself what no machine changes.
type placed struct{ *kept }

func (placed) Place() string  { return "/home/practice/.local/share/cordwalk/demo" }
func (placed) Device() string { return "desk" }

// The main screens look as they were looked at, in light and dark, on a small and a large screen
// and with text twice as large.
func TestScreensLookAsTheyWereLookedAt(t *testing.T) {
	shapes := []struct {
		name    string
		w, h    float32
		percent int
	}{{"1366x768", 1366, 768, 100}, {"1920x1080", 1920, 1080, 100}, {"200-percent", 1366, 768, 200}}
	for _, mode := range []look.Mode{look.Light, look.Dark} {
		for _, c := range shapes {
			first := newStage(t, view.Settings{Theme: string(mode), TextScale: c.percent})
			first.app.Start("/home/practice/.local/share/cordwalk/practice")
			first.win().win.Resize(fyne.NewSize(c.w, c.h))
			first.win().win.Canvas().Unfocus()
			compareScreen(t, first, "first", string(mode), c.name)
		}
		s := newStage(t, view.Settings{Theme: string(mode)})
		w := s.demo()
		s.app.records = placed{s.app.records.(*kept)}
		begun, long := s.id("Hector"), s.id("Bramble")
		for _, c := range shapes {
			s.look(mode, c.percent)
			w.win.Resize(fyne.NewSize(c.w, c.h))
			s.app.lastPatient = begun
			for _, x := range []struct {
				name string
				open func()
			}{
				{"caseload", func() { s.show(view.ScreenCaseload, begun); w.win.Canvas().Unfocus() }},
				{"exam", func() { s.show(view.ScreenExam, begun) }},
				{"one", func() { s.app.settings.OneByOne = true; s.show(view.ScreenExam, begun) }},
				{"compare", func() { s.show(view.ScreenCompare, long) }},
				{"course", func() {
					s.show(view.ScreenCourse, long)
					s.until("the course worked out", func() bool { return w.page.(*coursePage).result != nil })
				}},
				{"sheet", func() { s.show(view.ScreenSheet, long) }},
				{"devices", func() { s.show(view.ScreenDevices, long) }},
				{"settings", func() { s.show(view.ScreenSettings, long) }},
				{"help", func() { s.show(view.ScreenExam, begun); w.showHelp() }},
			} {
				s.app.settings.OneByOne = false
				x.open()
				s.settle()
				compareScreen(t, s, x.name, string(mode), c.name)
				w.hideSheet()
			}
		}
	}
}

// compareScreen compares what the window shows with the picture in testdata.
func compareScreen(t *testing.T, s *stage, screen, mode, shape string) {
	t.Helper()
	got := fewColours(s.win().win.Canvas().Capture())
	name := fmt.Sprintf("%s-%s-%s.png", screen, mode, shape)
	path := filepath.Join("testdata", "screens", name)
	if *update {
		writePicture(t, path, got)
		return
	}
	b, err := os.ReadFile(path)
	if err != nil {
		t.Error(err)
		return
	}
	want, err := png.Decode(bytes.NewReader(b))
	if err != nil {
		t.Fatalf("%s: %v", path, err)
	}
	if off := differs(got, want); off > 0.002 {
		failed := filepath.Join("testdata", "failed", name)
		writePicture(t, failed, got)
		t.Errorf("%.2f %% of the picture differs from %s; the new one is %s", off*100, path, failed)
	}
}

func writePicture(t *testing.T, path string, img image.Image) {
	t.Helper()
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		t.Fatal(err)
	}
	var b bytes.Buffer
	if err := (&png.Encoder{CompressionLevel: png.BestCompression}).Encode(&b, img); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(path, b.Bytes(), 0o644); err != nil {
		t.Fatal(err)
	}
}

// fewColours draws a picture with its 32 commonest colours, which makes a small file.
func fewColours(img image.Image) *image.Paletted {
	b := img.Bounds()
	count := map[color.RGBA]int{}
	at := func(x, y int) color.RGBA {
		r, g, bl, _ := img.At(x, y).RGBA()
		return color.RGBA{uint8(r>>8) &^ 7, uint8(g>>8) &^ 7, uint8(bl>>8) &^ 7, 255}
	}
	for y := b.Min.Y; y < b.Max.Y; y++ {
		for x := b.Min.X; x < b.Max.X; x++ {
			count[at(x, y)]++
		}
	}
	all := make([]color.RGBA, 0, len(count))
	for c := range count {
		all = append(all, c)
	}
	slices.SortFunc(all, func(p, q color.RGBA) int {
		if d := count[q] - count[p]; d != 0 {
			return d
		}
		return int(p.R)<<16 + int(p.G)<<8 + int(p.B) - int(q.R)<<16 - int(q.G)<<8 - int(q.B)
	})
	// A colour near one that is kept adds nothing that an eye would miss.
	var pal color.Palette
	for _, c := range all {
		if len(pal) == 32 {
			break
		}
		near := false
		for _, k := range pal {
			o := k.(color.RGBA)
			near = near || max(apart(o.R, c.R), apart(o.G, c.G), apart(o.B, c.B)) < 12
		}
		if !near {
			pal = append(pal, c)
		}
	}
	index := map[color.RGBA]uint8{}
	out := image.NewPaletted(image.Rect(0, 0, b.Dx(), b.Dy()), pal)
	for y := range b.Dy() {
		for x := range b.Dx() {
			c := at(b.Min.X+x, b.Min.Y+y)
			i, known := index[c]
			if !known {
				i = uint8(pal.Index(c))
				index[c] = i
			}
			out.Pix[y*out.Stride+x] = i
		}
	}
	return out
}

func apart(a, b uint8) int { return max(int(a)-int(b), int(b)-int(a)) }

// differs returns the share of pixels whose colours are further apart than a quarter of the range in any
// channel, or 1 where the sizes differ. Edges may move by a fraction of a pixel between processors; a mark
// or a word that moved or went missing shows.
func differs(got, want image.Image) float64 {
	b := got.Bounds()
	if b != want.Bounds() {
		return 1
	}
	n := 0
	for y := b.Min.Y; y < b.Max.Y; y++ {
		for x := b.Min.X; x < b.Max.X; x++ {
			r1, g1, b1, _ := got.At(x, y).RGBA()
			r2, g2, b2, _ := want.At(x, y).RGBA()
			if max(apart(uint8(r1>>8), uint8(r2>>8)), apart(uint8(g1>>8), uint8(g2>>8)), apart(uint8(b1>>8), uint8(b2>>8))) > 64 {
				n++
			}
		}
	}
	return float64(n) / float64(b.Dx()*b.Dy())
}
