package desk

import (
	"strings"
	"testing"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/test"

	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/exam"
)

// on lists what of a kind stands on the sheet that is laid over the page.
func on[T fyne.CanvasObject](w *window) []T {
	var out []T
	var walk func(o fyne.CanvasObject)
	walk = func(o fyne.CanvasObject) {
		if x, ok := o.(T); ok {
			out = append(out, x)
		}
		switch x := o.(type) {
		case *fyne.Container:
			for _, c := range x.Objects {
				walk(c)
			}
		case fyne.Widget:
			for _, c := range test.WidgetRenderer(x).Objects() {
				walk(c)
			}
		}
	}
	walk(w.layer)
	return out
}

// A second examiner takes over in mid-exam with a key, a number and the PIN; a wrong PIN says so and
// stops nobody from recording.
func TestExaminersSwitchByKeyAndPIN(t *testing.T) {
	s := newStage(t, view.Settings{Protocol: exam.FullSpinal})
	w := s.demo()
	if len(s.app.practice.Examiners) < 2 {
		t.Fatal("the demo has one examiner only")
	}
	one, two := s.app.practice.Examiners[0], s.app.practice.Examiners[1]
	s.show(view.ScreenSettings, s.id("Bramble"))
	p := w.page.(*settingsPage)
	p.pins[two.ID] = "47"
	p.keep()
	s.settle()
	if !strings.Contains(p.said.Words, "4 to 12 digits") {
		t.Errorf("a PIN of two digits: %q", p.said.Words)
	}
	p.pins[two.ID] = "4711"
	p.keep()
	s.until("the PIN kept", func() bool { return s.app.practice.Examiners[1].PINHash != "" })
	kept, err := s.app.records.Practice()
	if err != nil {
		t.Fatal(err)
	}
	if e, _ := view.FindExaminer(kept, two.Name); view.PINFits(e, "4711") != nil || strings.Contains(e.PINHash, "4711") {
		t.Errorf("the store keeps %+v", e)
	}

	s.show(view.ScreenExam, s.id("Bramble"))
	s.keys("3")
	ctrlU := func() { w.showExaminers() }
	ctrlU()
	s.keys("2")
	s.keys("1234")
	s.key(fyne.KeyReturn)
	var said string
	s.until("the wrong PIN said", func() bool {
		for _, x := range on[*mark.Para](w) {
			if strings.Contains(x.Words, "not the PIN") {
				said = x.Words
			}
		}
		return said != ""
	})
	if !strings.Contains(said, one.Name) || !strings.Contains(said, two.Name) || s.app.examiner != one.Name {
		t.Errorf("%q, and %s examines", said, s.app.examiner)
	}
	// Recording goes on under the name that it had.
	w.hideSheet()
	s.keys("1")
	// By touch: the button in the strip, the name, the digits, Switch.
	ctrlU()
	for _, b := range on[*mark.Button](w) {
		if strings.Contains(b.Words, two.Name) {
			b.OnTap()
			break
		}
	}
	for _, d := range "4711" {
		for _, b := range on[*mark.Button](w) {
			if b.Words == string(d) {
				b.OnTap()
				break
			}
		}
	}
	for _, b := range on[*mark.Button](w) {
		if b.Words == "Switch" {
			b.OnTap()
		}
	}
	s.until("the switch", func() bool { return s.app.examiner == two.Name })
	if len(w.layer.Objects) > 0 {
		t.Error("the sheet still covers the exam")
	}
	s.keys("2")
	s.settle()
	f, err := s.app.records.File(s.id("Bramble"))
	if err != nil {
		t.Fatal(err)
	}
	v, ok := f.open()
	if !ok || len(v.Findings) < 3 {
		t.Fatalf("the exam holds %d findings", len(v.Findings))
	}
	if s.app.settings.Examiner != two.Name {
		t.Error("the switch is not remembered")
	}
}

// An examiner who is renamed goes on under the new name.
func TestARenamedExaminerGoesOn(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	s.show(view.ScreenSettings, s.id("Bramble"))
	p := w.page.(*settingsPage)
	p.after.Examiners[0].Name = "A. Moor-Hale"
	p.keep()
	s.until("the name kept", func() bool { return s.app.practice.Examiners[0].Name == "A. Moor-Hale" })
	if s.app.examiner != "A. Moor-Hale" {
		t.Errorf("%s examines", s.app.examiner)
	}
}
