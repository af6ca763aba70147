package desk

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/container"
	"fyne.io/fyne/v2/test"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/stim"
)

// box is a rectangle on the window.
type box struct{ x0, y0, x1, y1 float32 }

func (b box) cut(c box) box {
	return box{max(b.x0, c.x0), max(b.y0, c.y0), min(b.x1, c.x1), min(b.y1, c.y1)}
}
func (b box) empty() bool { return b.x1 <= b.x0 || b.y1 <= b.y0 }

// seen is a text as it stands on the window.
type seen struct {
	words string
	at    box // of the letters
	clip  box // of what scrolls around them
	entry bool
	pane  fyne.CanvasObject // the scroll it lies in
}

// texts walks the tree of what is drawn and returns every text.
func texts(root fyne.CanvasObject, size fyne.Size) []seen {
	var out []seen
	var walk func(o fyne.CanvasObject, at fyne.Position, clip box, entry bool, pane fyne.CanvasObject)
	walk = func(o fyne.CanvasObject, at fyne.Position, clip box, entry bool, pane fyne.CanvasObject) {
		if o == nil || !o.Visible() {
			return
		}
		at = at.Add(o.Position())
		s := o.Size()
		switch x := o.(type) {
		case *canvas.Text:
			if x.Text == "" {
				return
			}
			m := x.MinSize()
			left := at.X
			switch x.Alignment {
			case fyne.TextAlignCenter:
				left += (s.Width - m.Width) / 2
			case fyne.TextAlignTrailing:
				left += s.Width - m.Width
			}
			out = append(out, seen{x.Text, box{left, at.Y, left + m.Width, at.Y + m.Height}, clip, entry, pane})
		case *fyne.Container:
			for _, c := range x.Objects {
				walk(c, at, clip, entry, pane)
			}
		case fyne.Widget:
			if _, ok := x.(*mark.Field); ok {
				entry = true
			}
			if _, ok := x.(*widget.Entry); ok {
				entry = true
			}
			if sc, ok := x.(*container.Scroll); ok {
				clip = clip.cut(box{at.X, at.Y, at.X + s.Width, at.Y + s.Height})
				if sc.Content != nil {
					pane = sc
				}
			}
			for _, c := range test.WidgetRenderer(x).Objects() {
				walk(c, at, clip, entry, pane)
			}
		}
	}
	walk(root, fyne.NewPos(0, 0), box{0, 0, size.Width, size.Height}, false, nil)
	return out
}

// faults says which texts are cut off at a side or lie over one another. What scrolls may leave
// its pane above and below; what is typed into a field may be longer than the field.
func faults(root fyne.CanvasObject, size fyne.Size) []string {
	var out []string
	list := texts(root, size)
	const slack = 1.5
	for _, t := range list {
		if t.entry {
			continue
		}
		if t.at.y1 <= t.clip.y0 || t.at.y0 >= t.clip.y1 {
			continue // scrolled away
		}
		if t.at.x0 < t.clip.x0-slack || t.at.x1 > t.clip.x1+slack {
			out = append(out, fmt.Sprintf("%q runs from %.0f to %.0f, but is seen from %.0f to %.0f", t.words, t.at.x0, t.at.x1, t.clip.x0, t.clip.x1))
		}
		if t.pane == nil && (t.at.y0 < t.clip.y0-slack || t.at.y1 > t.clip.y1+slack) {
			out = append(out, fmt.Sprintf("%q stands at %.0f to %.0f, outside %.0f to %.0f", t.words, t.at.y0, t.at.y1, t.clip.y0, t.clip.y1))
		}
	}
	for i, a := range list {
		av := a.at.cut(a.clip)
		if a.entry || av.empty() {
			continue
		}
		for _, b := range list[i+1:] {
			bv := b.at.cut(b.clip)
			if b.entry || bv.empty() {
				continue
			}
			o := av.cut(bv)
			// The box of a line holds the room for accents and descenders; letters meet only where more than a fifth is shared.
			high := min(av.y1-av.y0, bv.y1-bv.y0) * 0.2
			if o.x1-o.x0 > 2 && o.y1-o.y0 > max(3, high) {
				out = append(out, fmt.Sprintf("%q lies over %q", a.words, b.words))
			}
		}
	}
	return out
}

func TestFaultsAreFound(t *testing.T) {
	test.NewTempApp(t).Settings().SetTheme(look.New(look.Light, 1))
	long := mark.Line("a line that is far too long for the room it is given here")
	long.Resize(fyne.NewSize(900, 24))
	clash := container.NewWithoutLayout(mark.Line("one"), mark.Line("two"))
	for _, o := range clash.Objects {
		o.Resize(fyne.NewSize(60, 24))
	}
	for name, o := range map[string]fyne.CanvasObject{"cut off": container.NewWithoutLayout(long), "overlap": clash} {
		w := test.NewTempWindow(t, o)
		w.Resize(fyne.NewSize(200, 100))
		if len(faults(o, fyne.NewSize(200, 100))) == 0 {
			t.Errorf("%s: nothing was found", name)
		}
	}
}

// table is a table of patients as practices keep them: one good row, one that is there already, one bad.
const table = "Name;Species;Breed;Owner;Phone;Born;Diagnosis\nPip;dog;Beagle;Ann Bell;01632 960 301;2020-05;disc extrusion\nBramble;dog;Dachshund;Ida Fenn;;2020-11;\n;cat;;;;;\n"

// screens are all screens of the program with what is done on them before they are looked at.
func screens(s *stage) map[string]func() {
	bramble, juno, hector := s.id("Bramble"), s.id("Juno"), s.id("Hector")
	return map[string]func(){
		"caseload": func() { s.show(view.ScreenCaseload, bramble) },
		"search": func() {
			s.show(view.ScreenCaseload, bramble)
			s.keys("nobody at all")
		},
		"exam":  func() { s.show(view.ScreenExam, bramble); s.keys("m") },
		"alert": func() { s.show(view.ScreenExam, hector) },
		"visit": func() { s.show(view.ScreenExam, bramble); s.exam().choose(tabVisit) },
		"measures": func() {
			s.show(view.ScreenExam, bramble)
			s.exam().choose(tabMeasures)
		},
		"treatments": func() { s.show(view.ScreenExam, bramble); s.exam().choose(tabTreatments) },
		"home":       func() { s.show(view.ScreenExam, bramble); s.exam().choose(tabHome) },
		"one": func() {
			s.show(view.ScreenExam, bramble)
			s.app.settings.OneByOne = true
			s.exam().choose(tabExam)
		},
		"compare": func() { s.show(view.ScreenCompare, bramble) },
		"course": func() {
			s.show(view.ScreenCourse, bramble)
			s.until("the course worked out", func() bool { return s.win().page.(*coursePage).result != nil })
		},
		"sheet":   func() { s.show(view.ScreenSheet, bramble) },
		"devices": func() { s.show(view.ScreenDevices, bramble) },
		"import": func() {
			s.show(view.ScreenCaseload, bramble)
			w := s.win()
			p := newImportPage(w)
			w.show(p)
			path := filepath.Join(s.t.TempDir(), "a.csv")
			if err := os.WriteFile(path, []byte(table), 0o600); err != nil {
				s.t.Fatal(err)
			}
			p.file.SetText(path)
			p.read()
			s.until("the table read", func() bool { return p.plan != nil })
			p.file.SetText("/home/practice/Documents/patients.csv")
		},
		"outcomes": func() {
			s.show(view.ScreenOutcomes, bramble)
			s.idle()
		},
		"figures": func() {
			s.show(view.ScreenCourse, bramble)
			s.until("the course worked out", func() bool { return s.win().page.(*coursePage).result != nil })
			s.keys("f")
		},
		"photos": func() { s.photos(juno) },
		"stim":   func() { s.stimulation(juno) },
		"history": func() {
			s.show(view.ScreenHistory, bramble)
			s.idle()
		},
		"choices": func() {
			s.show(view.ScreenChoices, bramble)
			p := s.win().page.(*choicesPage)
			s.until("the choices read", func() bool { return p.read })
			p.list = twoChoices()
			p.build()
		},
		"settings": func() { s.show(view.ScreenSettings, bramble) },
		"patient":  func() { s.show(view.ScreenPatient, bramble) },
		"help":     func() { s.show(view.ScreenExam, bramble); s.win().showHelp() },
	}
}

// twoChoices are a reflex that two devices graded differently, and a note in a closed visit with three values.
func twoChoices() []view.Choice {
	who := "Ada, 24 Nov 2026 10:05, tablet"
	return []view.Choice{
		{Field: "Patellar reflex, left pelvic", Where: "Visit of 24 Nov 2026", Why: "Two devices wrote different things before they met.", Options: []view.Option{
			{Words: "1 reduced", Who: who}, {Words: "3 exaggerated", Who: "Bo, 24 Nov 2026 10:07, desk"}}},
		{Field: "Plan for next time", Where: "Visit of 17 Nov 2026", Closed: true, Why: "An entry arrived after the visit was closed.", Options: []view.Option{
			{Words: "Walk on the treadmill for five minutes a day, with a sling under the belly", Who: who},
			{Words: "Rest for a week, then begin with the sling", Who: "Bo, 24 Nov 2026 10:07, desk", Note: "It arrived after the visit was closed and does not count until it is accepted."},
			{Words: "Rest", Who: "Bo, 24 Nov 2026 10:09, the tablet in the second treatment room"}}},
	}
}

// photos opens a visit with a photo, a clip, and a photo that has not come yet.
func (s *stage) photos(id exam.ID) {
	s.t.Helper()
	s.show(view.ScreenExam, id)
	p := s.exam()
	if len(p.sheet.Visit().Attachments) == 0 {
		name := filepath.Join(s.t.TempDir(), "gait.jpg")
		jpegFile(s.t, name)
		x, err := s.app.keepFile(context.Background(), id, name)
		if err != nil {
			s.t.Fatal(err)
		}
		x.Note = "walking, from behind, with the sling under the belly and the left hind paw knuckling"
		away := exam.Attachment{ID: s.app.records.NewID(), Name: strings.Repeat("0", 32) + ".att", Format: "png", Size: 2_400_000}
		p.edit(func(v *exam.Visit) { v.Attachments = append(v.Attachments, x, away) })
	}
	p.choose(tabPhotos)
	s.idle()
}

// stimulation opens a visit with its questions answered, a test and a session.
func (s *stage) stimulation(id exam.ID) {
	s.t.Helper()
	s.show(view.ScreenExam, id)
	p := s.exam()
	if len(p.sheet.Visit().Stim) == 0 {
		all := stim.Consent{Answers: map[string]bool{}, Examiner: "A. Moor"}
		for _, q := range stim.Questions() {
			all.Answers[q.Key] = false
		}
		test := stim.Test{ID: s.app.records.NewID(), Muscle: "quadriceps", Site: "pelvic-left", Law: "weiss"}
		for _, w := range view.StimWidths {
			test.Readings = append(test.Readings, stim.Reading{Width: w, Currents: []float64{4 * (1 + 0.4/w)}})
		}
		answers, err := all.Record(s.app.records.NewID())
		if err != nil {
			s.t.Fatal(err)
		}
		readings, err := test.Record()
		if err != nil {
			s.t.Fatal(err)
		}
		log, err := stim.Session{ID: s.app.records.NewID(), Aim: "strengthen", Site: "pelvic-left"}.Record()
		if err != nil {
			s.t.Fatal(err)
		}
		for _, r := range []exam.StimRecord{answers, readings, log} {
			p.putStim(r, false)
		}
	}
	p.choose(tabStim)
}

func (s *stage) exam() *examPage {
	s.t.Helper()
	p, ok := s.win().page.(*examPage)
	if !ok {
		s.t.Fatalf("the page is %T, not the exam", s.win().page)
	}
	return p
}

// No text is cut off or lies over another: every screen, at the sizes and scales that are promised.
func TestNoTextIsCutOffOnAnyScreen(t *testing.T) {
	for _, c := range []struct {
		w, h    float32
		mode    look.Mode
		percent int
		lang    string
	}{
		{1366, 768, look.Light, 100, "en"}, {1920, 1080, look.Dark, 100, "en"}, {1100, 700, look.Contrast, 80, "en"},
		{1366, 768, look.Light, 150, "en"}, {1920, 1080, look.Light, 200, "en"}, {1100, 700, look.Dark, 200, "en"},
		{1100, 700, look.Contrast, 200, "de"}, {1366, 768, look.Light, 100, "es"}, {1366, 768, look.Light, 100, "fr"},
	} {
		t.Run(fmt.Sprintf("%.0fx%.0f_%s_%d_%s", c.w, c.h, c.mode, c.percent, c.lang), func(t *testing.T) {
			if !slices.Contains(words.Tags(), c.lang) {
				t.Logf("no texts in %s yet: the screens are looked at in English", c.lang)
			} else if err := words.Use(c.lang); err != nil {
				t.Fatal(err)
			}
			t.Cleanup(func() { _ = words.Use("en") })
			s := newStage(t, view.Settings{Theme: string(c.mode), TextScale: c.percent})
			w := s.demo()
			w.win.Resize(fyne.NewSize(c.w, c.h))
			for name, open := range screens(s) {
				s.app.settings.OneByOne = false
				open()
				s.settle()
				root := w.win.Content()
				if len(w.layer.Objects) > 0 {
					root = w.layer // what lies below a sheet is meant to be covered
				}
				for _, f := range faults(root, w.win.Canvas().Size()) {
					t.Errorf("%s: %s", name, f)
				}
				w.hideSheet()
			}
		})
	}
}

// The first start and the unlocking screen, too.
func TestNoTextIsCutOffBeforeAPracticeIsOpen(t *testing.T) {
	for _, percent := range []int{80, 100, 200} {
		s := newStage(t, view.Settings{TextScale: percent})
		s.app.Start("")
		w := s.win()
		w.win.Resize(fyne.NewSize(1100, 700))
		for _, f := range faults(w.win.Content(), w.win.Canvas().Size()) {
			t.Errorf("first start at %d %%: %s", percent, f)
		}
		w.bare(newUnlockPage(w, "/somewhere/practice"))
		for _, f := range faults(w.win.Content(), w.win.Canvas().Size()) {
			t.Errorf("unlocking at %d %%: %s", percent, f)
		}
		w.bare(joinFilled(t, w, "/somewhere/practice"))
		for _, f := range faults(w.win.Content(), w.win.Canvas().Size()) {
			t.Errorf("joining at %d %%: %s", percent, f)
		}
	}
}
