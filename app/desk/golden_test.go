package desk

import (
	"bytes"
	"flag"
	"fmt"
	"image"
	"image/color"
	"image/draw"
	"image/png"
	"os"
	"path/filepath"
	"slices"
	"testing"
	"time"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
)

var update = flag.Bool("update", false, "write the pictures in testdata anew; look at them before they are kept")

// placed is a store that says of itself what no machine changes.
type placed struct{ *kept }

func (placed) Place() string  { return "/home/practice/.local/share/cordwalk/demo" }
func (placed) Device() string { return "desk" }

// shape is a size of window and of text.
type shape struct {
	name    string
	w, h    float32
	percent int
}

// Every screen looks as it was looked at: light and dark, on a small and a large screen and with text twice as
// large, and once in high contrast with everything that makes it hard: German, the smallest window, large text.
func TestScreensLookAsTheyWereLookedAt(t *testing.T) {
	usual := []shape{{"1366x768", 1366, 768, 100}, {"1920x1080", 1920, 1080, 100}, {"200-percent", 1366, 768, 200}}
	hard := []shape{{"de-1100x700-200-percent", 1100, 700, 200}}
	for _, c := range []struct {
		mode   look.Mode
		lang   string
		shapes []shape
	}{{look.Light, "en", usual}, {look.Dark, "en", usual}, {look.Contrast, "en", usual[:1]}, {look.Contrast, "de", hard}} {
		t.Run(string(c.mode)+"_"+c.lang, func(t *testing.T) {
			if err := words.Use(c.lang); err != nil {
				t.Fatal(err)
			}
			t.Cleanup(func() { _ = words.Use("en") })
			looks(t, c.mode, c.shapes)
		})
	}
}

func looks(t *testing.T, mode look.Mode, shapes []shape) {
	const home = "/home/practice/.local/share/cordwalk/"
	for _, c := range shapes {
		bare := newStage(t, view.Settings{Theme: string(mode), TextScale: c.percent})
		bare.app.Start(home + "practice")
		w := bare.win()
		w.win.Resize(fyne.NewSize(c.w, c.h))
		for _, x := range []struct {
			name string
			page page
		}{{"first", w.page}, {"join", joinFilled(t, w, home+"practice")}, {"unlock", newUnlockPage(w, home+"practice")}} {
			if x.name != "first" && !often(mode, c) {
				continue
			}
			w.bare(x.page)
			w.win.Canvas().Unfocus()
			compareScreen(t, bare, x.name, string(mode), c.name)
		}
	}
	s := newStage(t, view.Settings{Theme: string(mode)})
	w := s.demo()
	s.app.records = placed{s.app.records.(*kept)}
	all := screens(s)
	begun := s.id("Hector")
	history := all["history"]
	all["history"] = func() { // written on a device that is named alike everywhere
		history()
		entries, err := s.app.records.(stored).Store().History(w.file.Patient.ID)
		if err != nil {
			t.Fatal(err)
		}
		for i := range entries {
			entries[i].Device = "desk"
		}
		p := w.page.(*historyPage)
		p.list = view.NewHistory(entries, w.file.Visits, time.UTC, s.app.practice.Units())
		p.build()
	}
	all["exam"] = func() { s.show(view.ScreenExam, begun) }
	all["one"] = func() { s.app.settings.OneByOne = true; s.show(view.ScreenExam, begun) }
	all["help"] = func() { s.show(view.ScreenExam, begun); w.showHelp() }
	for _, c := range shapes {
		s.look(mode, c.percent)
		w.win.Resize(fyne.NewSize(c.w, c.h))
		s.app.lastPatient = begun
		for _, name := range []string{"caseload", "exam", "one", "compare", "course", "sheet", "devices", "settings", "help",
			"history", "choices", "import", "outcomes", "stim", "photos", "figures"} {
			if !often(mode, c) && slices.Contains(rare, name) {
				continue
			}
			s.app.settings.OneByOne = false
			all[name]()
			s.settle()
			w.win.Canvas().Unfocus()
			compareScreen(t, s, name, string(mode), c.name)
			w.hideSheet()
		}
	}
}

// rare are the screens that are pictured in the dark at one size only: what they are made of is pictured at every size
// in others, and each picture costs half a second of a test run.
var rare = []string{"history", "choices", "import", "outcomes", "stim", "photos", "figures"}

func often(mode look.Mode, c shape) bool { return mode != look.Dark || c.name == "1366x768" }

// joinFilled is the page for joining a practice while it waits for the answer.
func joinFilled(t *testing.T, w *window, dir string) *joinPage {
	p := newJoinPage(w, dir)
	host := p.device
	first(t, p.content(), func(f *mark.Field) bool { return f.Text == host }).SetText("tablet")
	p.check.Objects = []fyne.CanvasObject{mark.NewPara(words.T("Check words")).In(look.InkSoft), mark.NewPara("lantern river seven moss").As(look.Title).Strong()}
	p.said.In(look.Ink).Set(words.T("Waiting for the answer in the folder. This window must stay open."))
	return p
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
	img, err := png.Decode(bytes.NewReader(b))
	if err != nil {
		t.Fatalf("%s: %v", path, err)
	}
	want, ok := img.(*image.Paletted)
	if !ok {
		t.Fatalf("%s is no picture that this test wrote", path)
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
	full := image.NewRGBA(b)
	draw.Draw(full, b, img, b.Min, draw.Src)
	// A colour by its five upper bits in each channel.
	coarse := func(i int) int {
		return int(full.Pix[i]>>3)<<10 | int(full.Pix[i+1]>>3)<<5 | int(full.Pix[i+2]>>3)
	}
	count := make([]int, 1<<15)
	for i := 0; i < len(full.Pix); i += 4 {
		count[coarse(i)]++
	}
	var all []int
	for c, n := range count {
		if n > 0 {
			all = append(all, c)
		}
	}
	slices.SortFunc(all, func(p, q int) int {
		if d := count[q] - count[p]; d != 0 {
			return d
		}
		return p - q
	})
	of := func(c int) color.RGBA {
		return color.RGBA{uint8(c >> 10 << 3), uint8(c >> 5 & 31 << 3), uint8(c & 31 << 3), 255}
	}
	// A colour near one that is kept adds nothing that an eye would miss.
	var pal color.Palette
	for _, x := range all {
		if len(pal) == 32 {
			break
		}
		c := of(x)
		near := false
		for _, k := range pal {
			o := k.(color.RGBA)
			near = near || max(apart(o.R, c.R), apart(o.G, c.G), apart(o.B, c.B)) < 12
		}
		if !near {
			pal = append(pal, c)
		}
	}
	index := make([]uint8, 1<<15)
	for _, c := range all {
		index[c] = uint8(pal.Index(of(c)))
	}
	out := image.NewPaletted(image.Rect(0, 0, b.Dx(), b.Dy()), pal)
	for i := range out.Pix {
		out.Pix[i] = index[coarse(4*i)]
	}
	return out
}

func apart(a, b uint8) int { return max(int(a)-int(b), int(b)-int(a)) }

// differs returns the share of pixels whose colours are further apart than a quarter of the range in any
// channel, or 1 where the sizes differ. Edges may move by a fraction of a pixel between processors; a mark
// or a word that moved or went missing shows.
func differs(got, want *image.Paletted) float64 {
	if got.Bounds() != want.Bounds() {
		return 1
	}
	far := make([][]bool, len(got.Palette))
	for i, c := range got.Palette {
		far[i] = make([]bool, len(want.Palette))
		r1, g1, b1, _ := c.RGBA()
		for j, d := range want.Palette {
			r2, g2, b2, _ := d.RGBA()
			far[i][j] = max(apart(uint8(r1>>8), uint8(r2>>8)), apart(uint8(g1>>8), uint8(g2>>8)), apart(uint8(b1>>8), uint8(b2>>8))) > 64
		}
	}
	n := 0
	for i, c := range got.Pix {
		if far[c][want.Pix[i]] {
			n++
		}
	}
	return float64(n) / float64(len(got.Pix))
}
