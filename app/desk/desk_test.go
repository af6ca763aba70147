package desk

import (
	"context"
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/test"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/exam"
)

// slow is a store on a disk that takes its time, or refuses.
type slow struct {
	Records
	wait  time.Duration
	fails atomic.Bool
	saved atomic.Int64
}

var errDisk = errors.New("the disk does not answer")

func (s *slow) hold() error {
	time.Sleep(s.wait)
	if s.fails.Load() {
		return errDisk
	}
	s.saved.Add(1)
	return nil
}

func (s *slow) SaveVisit(ctx context.Context, who string, a, b exam.Visit) error {
	if err := s.hold(); err != nil {
		return err
	}
	return s.Records.SaveVisit(ctx, who, a, b)
}

func (s *slow) SaveBatch(ctx context.Context, who string, b view.Batch) error {
	if err := s.hold(); err != nil {
		return err
	}
	return s.Records.SaveBatch(ctx, who, b)
}

func TestFirstStartByTabAlone(t *testing.T) {
	s := newStage(t, view.Settings{})
	dir := filepath.Join(t.TempDir(), "deep", "practice")
	s.app.Start(dir)
	w := s.win()
	w.win.Resize(fyne.NewSize(1366, 768))
	p, ok := w.page.(*firstRunPage)
	if !ok {
		t.Fatalf("the first page is %T", w.page)
	}
	// Nothing filled in: what is missing stands beside its field, and nothing was made.
	p.start()
	if p.fields["practice"].HeightFor(400) <= p.fields["phone"].HeightFor(400) {
		t.Error("nothing is said beside the practice's name")
	}
	if _, err := os.Stat(dir); err == nil {
		t.Error("a practice was made without its answers")
	}
	s.keys("Hillside")
	s.key(fyne.KeyTab, fyne.KeyTab)
	s.keys("R. Okafor")
	s.key(fyne.KeyTab, fyne.KeyTab)
	s.keys("three lame foxes")
	s.key(fyne.KeyTab)
	s.keys("three lame foxes")
	s.key(fyne.KeyTab, fyne.KeyTab, fyne.KeyReturn)
	s.until("the caseload", func() bool { _, ok := w.page.(*caseloadPage); return ok })
	if !s.app.records.Protected() {
		t.Error("the practice is not protected")
	}
	if s.app.practice.Name != "Hillside" || s.app.examiner != "R. Okafor" {
		t.Errorf("the practice is %q, the examiner %q", s.app.practice.Name, s.app.examiner)
	}
	if exists, locked := s.app.opener.Exists(dir); !exists || !locked {
		t.Errorf("exists %v, locked %v", exists, locked)
	}
}

func TestAWrongPassphraseIsSaidBesideTheField(t *testing.T) {
	s := newStage(t, view.Settings{})
	dir := filepath.Join(t.TempDir(), "practice")
	k := s.app.opener.(*Keeper)
	r, err := k.Create(dir, []byte("three lame foxes"), exam.Practice{Name: "Hillside", Examiners: []exam.Examiner{{Name: "R. Okafor"}}}, "R. Okafor")
	if err != nil {
		t.Fatal(err)
	}
	if err := r.Close(); err != nil {
		t.Fatal(err)
	}
	s.app.Start(dir)
	w := s.win()
	u, ok := w.page.(*unlockPage)
	if !ok {
		t.Fatalf("the first page is %T", w.page)
	}
	before := u.box.HeightFor(600)
	s.keys("four lame foxes")
	s.key(fyne.KeyReturn)
	s.until("the page again", func() bool { u2, ok := w.page.(*unlockPage); return ok && u2 != u })
	if w.page.(*unlockPage).box.HeightFor(600) <= before {
		t.Error("nothing is said beside the field")
	}
	s.keys("three lame foxes")
	s.key(fyne.KeyReturn)
	s.until("the caseload", func() bool { _, ok := w.page.(*caseloadPage); return ok })
}

func TestSearchFindsAndEnterStartsTheExam(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	p := w.page.(*caseloadPage)
	s.keys("wren")
	if p.cases.Len() != 1 || p.cases.Row(0).Summary.Name != "Wren" {
		t.Fatalf("%d animals found", p.cases.Len())
	}
	s.key(fyne.KeyEscape)
	if p.cases.Len() < 5 {
		t.Errorf("after Escape %d animals are shown", p.cases.Len())
	}
	s.keys("bramble")
	s.key(fyne.KeyReturn)
	s.until("the exam", func() bool { _, ok := w.page.(*examPage); return ok })
	if got := s.exam().sheet.Patient().Name; got != "Bramble" {
		t.Errorf("the exam is of %s", got)
	}
	if w.win.Canvas().Focused() != fyne.Focusable(s.exam().grid) {
		t.Error("the keys do not go to the grid")
	}
}

// From the start of the program to the first grade of a known animal in at most four actions: its
// name (typing counts as one), Enter, and the grade.
func TestThreeActionsToTheFirstGrade(t *testing.T) {
	s := newStage(t, view.Settings{Protocol: exam.FullSpinal})
	w := s.demo()
	s.keys("mika")
	s.key(fyne.KeyReturn)
	s.until("the exam", func() bool { _, ok := w.page.(*examPage); return ok })
	s.keys("3")
	if n := len(s.exam().sheet.Visit().Findings); n == 0 {
		t.Error("no grade after three actions")
	}
}

func TestKeysNeverWaitForASlowDisk(t *testing.T) {
	s := newStage(t, view.Settings{Protocol: exam.FullSpinal})
	s.demo()
	disk := &slow{Records: s.app.records, wait: 300 * time.Millisecond}
	s.app.records = disk
	s.show(view.ScreenExam, s.id("Bramble"))
	keyed := len(s.exam().sheet.Visit().Findings)
	s.keys("3122232")
	if n := len(s.exam().sheet.Visit().Findings) - keyed; n != 7 {
		t.Fatalf("7 keys gave %d findings", n)
	}
	if disk.saved.Load() > 6 {
		t.Error("the keys waited for the disk")
	}
	s.settle()
	if got := s.win().strip.save.text.Words; got != "Saved here" {
		t.Errorf("the strip says %q", got)
	}
	f, err := disk.File(s.id("Bramble"))
	if err != nil {
		t.Fatal(err)
	}
	v, ok := f.open()
	if !ok {
		t.Fatal("the exam is not in the store")
	}
	if g, ok := v.Grade(exam.Mentation, exam.Midline); !ok || g != 3 {
		t.Errorf("the store has mentation %d, %v", g, ok)
	}
}

func TestAFailingDiskIsSaidAndNothingIsLost(t *testing.T) {
	s := newStage(t, view.Settings{Protocol: exam.FullSpinal})
	w := s.demo()
	disk := &slow{Records: s.app.records}
	disk.fails.Store(true)
	s.app.records = disk
	id := s.id("Otis")
	w.goTo(view.Route{Screen: view.ScreenExam, Patient: id})
	s.until("the exam", func() bool { _, ok := w.page.(*examPage); return ok })
	s.keys("31")
	s.until("the strip to say what is not saved", func() bool { return strings.Contains(w.strip.save.text.Words, "not yet saved") })
	s.until("the line below to say why", func() bool { return w.foot.err != nil })
	if !errors.Is(w.foot.err, errDisk) {
		t.Errorf("the details are %v", w.foot.err)
	}
	disk.fails.Store(false)
	s.app.saver.Retry()
	s.settle()
	f, err := disk.File(id)
	if err != nil {
		t.Fatal(err)
	}
	if v, _ := f.open(); len(v.Findings) < 2 {
		t.Errorf("after the disk came back %d findings are there", len(v.Findings))
	}
}

func TestClosingWaitsForWhatIsNotSaved(t *testing.T) {
	s := newStage(t, view.Settings{Protocol: exam.FullSpinal})
	w := s.demo()
	disk := &slow{Records: s.app.records, wait: 40 * time.Millisecond}
	s.app.records = disk
	s.show(view.ScreenExam, s.id("Tansy"))
	s.keys("312")
	w.close()
	s.until("the window gone", func() bool { return len(s.app.windows) == 0 })
	if n := s.app.saver.State().Waiting(); n != 0 {
		t.Errorf("closed with %d entries not saved", n)
	}
}

func TestGridAndCardShowTheSameExam(t *testing.T) {
	s := newStage(t, view.Settings{Protocol: exam.FullSpinal})
	s.demo()
	s.show(view.ScreenExam, s.id("Bramble"))
	s.keys("31")
	s.keys("o")
	p := s.exam()
	if s.win().win.Canvas().Focused() != fyne.Focusable(p.card) {
		t.Fatal("the keys do not go to the card")
	}
	s.keys("2")
	s.keys("o")
	n := 0
	for _, r := range p.grid.rows {
		for _, c := range r.cells {
			if c.face.text != "" && !c.face.soft {
				n++
			}
		}
	}
	if n < 3 {
		t.Errorf("the grid shows %d grades, three were keyed", n)
	}
	s.keys("u")
	if got := p.sheet.CanRedo(); !got {
		t.Error("undo has nothing to redo")
	}
}

// One key redraws the cells that it changed and no other: two for a grade (the cell and the one in focus next).
func TestAKeyRedrawsOnlyWhatItChanged(t *testing.T) {
	s := newStage(t, view.Settings{Protocol: exam.FullSpinal})
	s.demo()
	s.show(view.ScreenExam, s.id("Bramble"))
	p := s.exam()
	faces := func() map[int]cellFace {
		out := map[int]cellFace{}
		for _, r := range p.grid.rows {
			for _, c := range r.cells {
				out[c.index] = c.face
			}
		}
		return out
	}
	before := faces()
	s.keys("3")
	changed := 0
	for i, f := range faces() {
		if f != before[i] {
			changed++
		}
	}
	if changed == 0 || changed > 3 {
		t.Errorf("one key changed %d cells", changed)
	}
}

func TestAVisitWithAnUnansweredAlertStaysOpenUntilSomebodyWasTold(t *testing.T) {
	s := newStage(t, view.Settings{Protocol: exam.FullSpinal})
	s.demo()
	s.show(view.ScreenExam, s.id("Bramble"))
	p := s.exam()
	// Breathing laboured: the veterinarian must hear of it before the animal leaves.
	if err := p.sheet.FocusKey(exam.Key{Item: exam.Breathing, Site: exam.Midline}); err != nil {
		t.Fatal(err)
	}
	s.keys("0")
	s.settle()
	s.until("the alert", func() bool { return len(p.side.unanswered()) > 0 })
	p.close()
	if p.sheet.Closed() {
		t.Fatal("the visit was closed over an unanswered alert")
	}
	for _, a := range p.side.found {
		if a.Must {
			p.edit(func(v *exam.Visit) {
				v.Answers = append(v.Answers, exam.Acknowledgement{Rule: a.Rule, Told: "Dr Hale", Examiner: "A. Moor", At: today})
			})
		}
	}
	s.settle()
	s.until("the alert answered", func() bool { return len(p.side.unanswered()) == 0 })
	p.close()
	if !p.sheet.Closed() {
		t.Errorf("the visit stays open: %s", s.win().foot.text.Words)
	}
	s.settle()
	// After closing only amendments with a reason.
	s.keys("1")
	if !strings.Contains(s.win().foot.text.Words, "closed") {
		t.Errorf("a key after closing says %q", s.win().foot.text.Words)
	}
}

// Closing looks for alerts itself, however soon after the key that raises one it comes, and an alert does not wait for
// the likely site to be worked out.
func TestClosingAtOnceDoesNotSlipPastAnAlert(t *testing.T) {
	s := newStage(t, view.Settings{Protocol: exam.FullSpinal})
	s.demo()
	s.show(view.ScreenExam, s.id("Bramble"))
	p := s.exam()
	s.app.engines.mu.Lock() // an engine that takes long
	if err := p.sheet.FocusKey(exam.Key{Item: exam.Breathing, Site: exam.Midline}); err != nil {
		t.Fatal(err)
	}
	p.sheet.Press(view.Rune('0'))
	p.close()
	if p.sheet.Closed() {
		t.Error("the visit was closed before its alert had been looked for")
	}
	s.until("the alert", func() bool { return slices.ContainsFunc(p.side.found, func(a alertLine) bool { return a.Must }) })
	s.app.engines.mu.Unlock()
	s.settle()
}

func TestAnExamThatWasOnlyOpenedLeavesNoVisit(t *testing.T) {
	s := newStage(t, view.Settings{})
	s.demo()
	id := s.id("Wren")
	f, err := s.app.records.File(id)
	if err != nil {
		t.Fatal(err)
	}
	n := len(f.Visits)
	s.show(view.ScreenExam, id)
	s.show(view.ScreenCaseload, id)
	f, err = s.app.records.File(id)
	if err != nil || len(f.Visits) != n {
		t.Errorf("%d visits before, %d after, %v", n, len(f.Visits), err)
	}
}

func TestPrecautionsAreFilledAndStandInWords(t *testing.T) {
	s := newStage(t, view.Settings{})
	s.demo()
	id := s.app.records.NewID()
	p := exam.Patient{ID: id, Name: "Nelly", Species: exam.Dog, Precautions: []exam.PrecautionOn{{ID: s.app.records.NewID(), Code: "unstable-spine"}}}
	if err := s.app.records.SavePatient(context.Background(), "A. Moor", exam.Patient{}, p); err != nil {
		t.Fatal(err)
	}
	s.show(view.ScreenExam, id)
	found := false
	for _, x := range texts(s.win().win.Content(), s.win().win.Canvas().Size()) {
		found = found || strings.Contains(x.words, "unstable spine")
	}
	if !found {
		t.Error("the precaution does not stand above the exam")
	}
	barred := 0
	for _, c := range s.exam().sheet.Cells() {
		if c.Barred != "" {
			barred++
		}
	}
	if barred == 0 {
		t.Error("an unstable spine bars nothing")
	}
}

func TestNewPatientKeepsWhatWasTypedUntilItIsMended(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	w.goTo(view.Route{Screen: view.ScreenPatient})
	p := w.page.(*patientPage)
	p.form.Breed, p.form.Born = "Beagle", "last spring"
	p.keep()
	if _, ok := w.page.(*patientPage); !ok || p.form.Breed != "Beagle" {
		t.Fatal("the page is gone")
	}
	p.form.Name, p.form.Born = "Pip", "2021-04"
	p.keep()
	s.until("the caseload", func() bool { _, ok := w.page.(*caseloadPage); return ok })
	s.until("Pip in it", func() bool {
		for _, r := range s.app.caseload.Rows() {
			if r.Summary.Name == "Pip" {
				return true
			}
		}
		return false
	})
}

func TestTwoWindowsShowTwoAnimals(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	s.show(view.ScreenCourse, s.id("Bramble"))
	s.app.another(view.Route{Screen: view.ScreenCourse, Patient: s.id("Mika")})
	s.until("the second window", func() bool { return len(s.app.windows) == 2 && s.app.windows[1].file.Patient.Name == "Mika" })
	if w.file.Patient.Name != "Bramble" {
		t.Errorf("the first window shows %s", w.file.Patient.Name)
	}
	s.app.windows[1].close()
	s.until("one window", func() bool { return len(s.app.windows) == 1 })
}

func TestThemeAndSizeAreKept(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	s.show(view.ScreenSettings, exam.ID{})
	s.look(look.Dark, 150)
	s.app.rememberWindow(w)
	got, err := view.LoadSettings(s.app.path)
	if err != nil || got.Theme != "dark" || got.TextScale != 150 || got.Width == 0 {
		t.Errorf("kept: %+v, %v", got, err)
	}
	if look.Resolved() != look.Dark || look.Scale() != 1.5 {
		t.Errorf("shown: %s at %v", look.Resolved(), look.Scale())
	}
}

// A caseload of 20,000 animals draws only the rows in view.
func TestALargeCaseloadDrawsOnlyWhatIsSeen(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	list := make([]view.Summary, 20000)
	for i := range list {
		list[i] = view.Summary{ID: s.app.records.NewID(), Name: "Animal", Species: exam.Dog, Visits: 2, Last: today, TailTone: -1, Motor: [4]int8{4, 4, 2, 1}}
	}
	p := w.page.(*caseloadPage)
	p.cases = view.NewCaseload(list, today)
	p.refresh()
	lines := 0
	for _, x := range texts(w.win.Content(), w.win.Canvas().Size()) {
		if x.words == "Animal" {
			lines++
		}
	}
	if lines < 5 || lines > 40 {
		t.Errorf("%d of 20,000 animals are drawn", lines)
	}
	for range 5 {
		s.key(fyne.KeyDown)
	}
	if p.at() != 5 {
		t.Errorf("after five keys the choice is at %d", p.at())
	}
}

func TestSheetIsSavedAndRefusedInWords(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	s.show(view.ScreenSheet, s.id("Bramble"))
	p := w.page.(*sheetPage)
	if len(p.doc.PDF) == 0 {
		t.Fatalf("no sheet: %v", p.refused)
	}
	path := filepath.Join(t.TempDir(), "a.pdf")
	p.askSave()
	s.keys("")
	if f, ok := w.win.Canvas().Focused().(interface{ SetText(string) }); ok {
		f.SetText(path)
	} else {
		t.Fatalf("the keys go to %T", w.win.Canvas().Focused())
	}
	s.key(fyne.KeyReturn)
	s.until("the file", func() bool { _, err := os.Stat(path); return err == nil })

	id := s.app.records.NewID()
	if err := s.app.records.SavePatient(context.Background(), "A. Moor", exam.Patient{}, exam.Patient{ID: id, Name: "Nelly", Species: exam.Dog}); err != nil {
		t.Fatal(err)
	}
	s.show(view.ScreenSheet, id)
	if r := w.page.(*sheetPage).refused; r == nil || strings.Count(r.Error(), "\n") > 0 {
		t.Errorf("without a telephone the page says %v", r)
	}
}

func TestPicturesOfTheCourseAreSaved(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	s.show(view.ScreenCourse, s.id("Bramble"))
	p := w.page.(*coursePage)
	for ext, head := range map[string]string{".png": "\x89PNG", ".svg": "<?xml", ".pdf": "%PDF-"} {
		path := filepath.Join(t.TempDir(), "course"+ext)
		if err := saveCourse(path, p.course.Strip, p.course.Limbs); err != nil {
			t.Errorf("%s: %v", ext, err)
			continue
		}
		b, err := os.ReadFile(path)
		if err != nil || !strings.HasPrefix(string(b), head) {
			t.Errorf("%s begins with %.8q, %v", ext, b, err)
		}
	}
}

func TestHelpOpensAndClosesByKey(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	s.show(view.ScreenExam, s.id("Bramble"))
	s.keys("?")
	if len(w.layer.Objects) == 0 {
		t.Fatal("the help is not there")
	}
	s.key(fyne.KeyEscape)
	if len(w.layer.Objects) != 0 {
		t.Error("the help stays")
	}
	if w.win.Canvas().Focused() != fyne.Focusable(s.exam().grid) {
		t.Error("the keys do not go back to the grid")
	}
}

// Every screen can be left and reached by Tab: the focus visits something and never gets stuck.
func TestTabGoesRoundOnEveryScreen(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	for _, sc := range []view.Screen{view.ScreenCaseload, view.ScreenCompare, view.ScreenCourse, view.ScreenSheet, view.ScreenDevices, view.ScreenSettings, view.ScreenPatient} {
		s.show(sc, s.id("Bramble"))
		seen := map[fyne.Focusable]bool{}
		for range 200 {
			w.win.Canvas().FocusNext()
			f := w.win.Canvas().Focused()
			if f == nil {
				continue
			}
			if seen[f] {
				break
			}
			seen[f] = true
		}
		if len(seen) < 8 {
			t.Errorf("%s: Tab reaches %d places", sc, len(seen))
		}
	}
}

func BenchmarkKeyToCell(b *testing.B) {
	f := test.NewApp()
	f.Settings().SetTheme(look.New(look.Light, 1))
	now := func() time.Time { return today }
	p := exam.Patient{ID: exam.ID{1}, Name: "Rex", Species: exam.Dog}
	v := view.StartVisit(exam.ID{2}, p, "A. Moor", exam.FullSpinal, "UTC", today)
	in, err := view.ExamOf(exam.Practice{}, p, v, nil)
	if err != nil {
		b.Fatal(err)
	}
	in.Now = now
	sheet, err := view.NewExamSheet(in)
	if err != nil {
		b.Fatal(err)
	}
	g := newExamGrid(sheet)
	w := test.NewWindow(g)
	defer w.Close()
	w.Resize(fyne.NewSize(850, 600))
	b.ResetTimer()
	for i := range b.N {
		sheet.Press(view.Rune(rune('0' + i%3)))
		g.update()
	}
}

func TestSharingBeginsWithARecoveryKeyAndExchangesByAFolder(t *testing.T) {
	s := newStage(t, view.Settings{})
	dir := filepath.Join(t.TempDir(), "practice")
	k := s.app.opener.(*Keeper)
	k.Config = t.TempDir()
	r, err := k.Create(dir, nil, exam.Practice{Name: "Hillside", Examiners: []exam.Examiner{{Name: "R. Okafor"}}}, "R. Okafor")
	if err != nil {
		t.Fatal(err)
	}
	if err := r.Close(); err != nil {
		t.Fatal(err)
	}
	s.app.Start(dir)
	w := s.win()
	w.win.Resize(fyne.NewSize(1366, 768))
	s.until("the caseload", func() bool { _, ok := w.page.(*caseloadPage); return ok })
	s.show(view.ScreenDevices, exam.ID{})
	p := w.page.(*devicesPage)
	has := func(words string) bool {
		for _, x := range texts(w.win.Content(), w.win.Canvas().Size()) {
			if strings.Contains(x.words, words) {
				return true
			}
		}
		return false
	}
	if !has("Begin to share") {
		t.Fatal("the page does not offer to begin")
	}
	press := func(words string) {
		t.Helper()
		var walk func(o fyne.CanvasObject) bool
		walk = func(o fyne.CanvasObject) bool {
			if b, ok := o.(interface {
				fyne.Tappable
				fyne.Widget
			}); ok {
				for _, x := range texts(b, fyne.NewSize(2000, 2000)) {
					if x.words == words {
						b.Tapped(nil)
						return true
					}
				}
			}
			var inner []fyne.CanvasObject
			switch x := o.(type) {
			case *fyne.Container:
				inner = x.Objects
			case fyne.Widget:
				inner = test.WidgetRenderer(x).Objects()
			}
			for _, c := range inner {
				if walk(c) {
					return true
				}
			}
			return false
		}
		if !walk(p.root) {
			t.Fatalf("there is no button %q", words)
		}
	}
	press("Begin to share and back up")
	s.until("the practice founded", func() bool { return p.share != nil && p.work == nil })
	home, _ := os.UserHomeDir()
	sheet, err := os.ReadFile(filepath.Join(home, "cordwalk-recovery.txt"))
	if err != nil || !strings.Contains(string(sheet), "AGE-SECRET-KEY-") {
		t.Errorf("the recovery sheet holds %d bytes, %v", len(sheet), err)
	}
	folder := t.TempDir()
	s.app.settings.Exchange, s.app.settings.Backups = folder, t.TempDir()
	press("Exchange now")
	s.until("the exchange", func() bool { return !s.app.shared.IsZero() })
	if es, err := os.ReadDir(folder); err != nil || len(es) == 0 {
		t.Errorf("the folder holds %d entries, %v", len(es), err)
	}
	if !has("shared 10:00") {
		t.Error("the strip does not say that the practice is shared")
	}
	press("Invite a device")
	s.until("the code", func() bool { return p.code != "" && p.work == nil })
	press("Back up now")
	s.until("the backup", func() bool { return strings.Contains(s.app.keep.said, "read back") })
	if es, err := os.ReadDir(s.app.settings.Backups); err != nil || len(es) == 0 {
		t.Errorf("the backup folder holds %d entries, %v", len(es), err)
	}
	for _, f := range faults(w.win.Content(), w.win.Canvas().Size()) {
		t.Error(f)
	}
}

func TestAnImportIsLookedAtWrittenAndTakenBackAsOne(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	before := s.app.caseload.Total()
	screens(s)["import"]()
	p := w.page.(*importPage)
	if take, duplicates, problems := p.plan.Counts(); take != 1 || duplicates != 1 || problems != 1 {
		t.Fatalf("%d to take, %d there already, %d with problems", take, duplicates, problems)
	}
	count := func() int {
		list, err := s.app.records.Caseload(context.Background())
		if err != nil {
			t.Fatal(err)
		}
		return view.NewCaseload(list, today).Total()
	}
	if n := count(); n != before {
		t.Fatalf("looking at the table changed the caseload from %d to %d", before, n)
	}
	p.apply()
	s.until("the import", func() bool { return p.done != nil })
	if n := count(); n != before+1 {
		t.Errorf("after the import %d animals, want %d", n, before+1)
	}
	w.undo(false)
	s.until("the undo", func() bool { return p.done == nil && !p.busy })
	if n := count(); n != before {
		t.Errorf("after the undo %d animals, want %d", n, before)
	}
}

func TestClosingAsksForAPageThatIsNotKept(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	w.goTo(view.Route{Screen: view.ScreenPatient})
	p := w.page.(*patientPage)
	s.keys("Pip")
	w.close()
	if len(w.layer.Objects) == 0 || len(s.app.windows) != 1 {
		t.Fatal("the window was closed over a page that is not kept")
	}
	s.key(fyne.KeyReturn) // keep and close
	s.until("the window gone", func() bool { return len(s.app.windows) == 0 })
	if !p.done {
		t.Error("the page was not kept")
	}
	list, err := s.app.records.Caseload(context.Background())
	found := false
	for _, x := range list {
		found = found || x.Name == "Pip"
	}
	if err != nil || !found {
		t.Errorf("Pip is not in the store, %v", err)
	}
}

// What was typed on a page comes back after another screen was looked at.
func TestADraftSurvivesAnotherScreen(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	w.goTo(view.Route{Screen: view.ScreenPatient})
	s.keys("Pip")
	s.show(view.ScreenCaseload, exam.ID{})
	w.goTo(view.Route{Screen: view.ScreenPatient})
	if got := w.page.(*patientPage).form.Name; got != "Pip" {
		t.Errorf("the page holds %q", got)
	}
}
