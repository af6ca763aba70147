package desk

import (
	"bytes"
	"context"
	"encoding/xml"
	"errors"
	"image"
	"image/color"
	"image/jpeg"
	"image/png"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/storage"
	"fyne.io/fyne/v2/test"

	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/stim"
	records "cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/attach"
	"cordwalk.example/cordwalk/sync/share"
)

// fern is a patient of a practice with two devices.
var fern = exam.Patient{ID: exam.ID{15: 9}, Name: "Fern", Species: exam.Dog}

// inviting is another device with a practice, its patient Fern and an invitation in a folder.
func inviting(t *testing.T) (sh *share.Share, stick, code string) {
	t.Helper()
	ctx := context.Background()
	stick = t.TempDir()
	k := &Keeper{}
	r, err := k.Create(filepath.Join(t.TempDir(), "first"), nil, exam.Practice{Name: "Hillside", Examiners: []exam.Examiner{{Name: "Ada"}}}, "Ada")
	if err != nil {
		t.Fatal(err)
	}
	s := r.(stored).Store()
	t.Cleanup(func() {
		if err := r.Close(); err != nil {
			t.Error(err)
		}
	})
	if err := r.SavePatient(ctx, "Ada", exam.Patient{}, fern); err != nil {
		t.Fatal(err)
	}
	if sh, _, err = share.Open(ctx, s, share.Options{}); err != nil {
		t.Fatal(err)
	}
	if _, err = sh.Folder(ctx, stick, nil); err != nil {
		t.Fatal(err)
	}
	if code, err = sh.Invite(ctx, "Ada", stick, time.Hour); err != nil {
		t.Fatal(err)
	}
	return sh, stick, code
}

// joined starts the program without a practice, joins the one that invites, and shows its caseload.
func joined(t *testing.T) (*stage, *share.Share, string) {
	t.Helper()
	ctx := context.Background()
	first, stick, code := inviting(t)
	s := newStage(t, view.Settings{})
	s.app.now = time.Now
	dir := filepath.Join(t.TempDir(), "joined")
	s.app.Start(dir)
	w := s.win()
	w.win.Resize(fyne.NewSize(1366, 768))
	w.bare(newJoinPage(w, dir))
	p := w.page.(*joinPage)
	p.ask()
	if _, err := os.Stat(dir); err == nil || p.stop != nil {
		t.Error("something was asked without its answers")
	}
	p.folder, p.code, p.device, p.open = stick, code, "tablet", true
	p.ask()
	s.until("the check words", func() bool { return len(p.check.Objects) == 3 })
	asked, refused, err := first.Requests(ctx, stick)
	if err != nil || len(refused) > 0 || len(asked) != 1 {
		t.Fatalf("%d ask, %v refused, %v", len(asked), refused, err)
	}
	if err := first.Admit(ctx, "Ada", stick, asked[0]); err != nil {
		t.Fatal(err)
	}
	if _, err := first.Folder(ctx, stick, nil); err != nil {
		t.Fatal(err)
	}
	s.until("the caseload", func() bool {
		c, ok := w.page.(*caseloadPage)
		return ok && c.cases.Total() == 1
	})
	return s, first, stick
}

func TestJoinAPracticeAtTheFirstStart(t *testing.T) {
	s, _, _ := joined(t)
	if s.app.practice.Name != "Hillside" || s.app.examiner != "Ada" {
		t.Errorf("joined %q as %q", s.app.practice.Name, s.app.examiner)
	}
	if s.id("Fern") != fern.ID {
		t.Error("Fern did not come along")
	}
}

// Two devices grade one cell differently before they meet: both values stand beside each other, and the one
// picked holds.
func TestChooseBetweenTwoValues(t *testing.T) {
	s, first, stick := joined(t)
	ctx := context.Background()
	w := s.win()
	own := s.app.records.(stored).Store()
	v := exam.Visit{ID: records.NewID(), Patient: fern.ID, Examined: time.Now().UTC().Truncate(time.Second), Examiner: "Ada", Protocol: exam.Weekly}
	cell := exam.Key{Item: exam.Patellar, Site: exam.PelvicLeft}
	apply := func(st *records.Store, who string, edits ...records.Edit) {
		t.Helper()
		if _, err := st.Apply(ctx, who, edits...); err != nil {
			t.Fatal(err)
		}
	}
	meet := func() {
		t.Helper()
		mine, _, err := share.Open(ctx, own, share.Options{})
		if err != nil {
			t.Fatal(err)
		}
		for _, x := range []*share.Share{first, mine, first, mine} {
			if _, err := x.Folder(ctx, stick, nil); err != nil {
				t.Fatal(err)
			}
			x.Settle()
		}
	}
	apply(first.Store, "Ada", records.VisitEdits(exam.Visit{}, v)...)
	meet()
	apply(first.Store, "Ada", records.FindingEdit(fern.ID, v.ID, exam.Finding{Item: cell.Item, Site: cell.Site, Result: exam.Graded(1)}))
	apply(own, "Bo", records.FindingEdit(fern.ID, v.ID, exam.Finding{Item: cell.Item, Site: cell.Site, Result: exam.Graded(3)}))
	meet()

	w.goTo(view.Route{Screen: view.ScreenDevices})
	s.until("the animal on Devices", func() bool { d, ok := w.page.(*devicesPage); return ok && len(d.open) == 1 })
	if d := w.page.(*devicesPage); d.open[0].name != "Fern" || d.open[0].n != 1 {
		t.Errorf("%+v", d.open)
	}
	s.show(view.ScreenCourse, fern.ID)
	if len(w.file.Conflict) != 1 {
		t.Fatalf("the strip knows of %d", len(w.file.Conflict))
	}
	if !shows(w.strip.box, "1 value to choose") {
		t.Error("the strip does not show that there is something to choose")
	}
	s.show(view.ScreenChoices, fern.ID)
	p := w.page.(*choicesPage)
	s.until("the two values", func() bool { return len(p.list) == 1 && len(p.list[0].Options) == 2 })
	pick := -1
	for i, o := range p.list[0].Options {
		if strings.HasPrefix(o.Words, "3 ") && strings.HasPrefix(o.Who, "Bo") {
			pick = i
		}
	}
	if pick < 0 {
		t.Fatalf("%+v", p.list[0].Options)
	}
	p.pick(p.list[0], pick)
	s.until("nothing left to choose", func() bool { return len(p.list) == 0 && !p.busy })
	got, err := own.Visit(v.ID)
	if err != nil {
		t.Fatal(err)
	}
	if g, ok := got.Grade(cell.Item, cell.Site); !ok || g != 3 {
		t.Errorf("grade %d, %v", g, ok)
	}
	if len(w.file.Conflict) != 0 {
		t.Error("the strip still asks")
	}
	// The history holds all three, the one that was not picked among them.
	s.show(view.ScreenHistory, fern.ID)
	h := w.page.(*historyPage)
	s.until("the history", func() bool { return h.list != nil })
	s.keys("patellar")
	if n := len(h.list.Lines()); n != 3 {
		t.Errorf("%d changes of the reflex", n)
	}
}

// jpegFile writes a photo whose Exif data hold a place.
func jpegFile(t *testing.T, name string) {
	t.Helper()
	p := image.NewRGBA(image.Rect(0, 0, 64, 48))
	for i := range 64 * 48 {
		p.Set(i%64, i/64, color.RGBA{uint8(i), 90, 120, 255})
	}
	var b bytes.Buffer
	if err := jpeg.Encode(&b, p, nil); err != nil {
		t.Fatal(err)
	}
	place := "Exif\x00\x00GPS 48.2082"
	out := append([]byte{0xff, 0xd8, 0xff, 0xe1, 0, byte(len(place) + 2)}, place...)
	if err := os.WriteFile(name, append(out, b.Bytes()[2:]...), 0o600); err != nil {
		t.Fatal(err)
	}
}

func TestPhotosAreKeptWithAVisit(t *testing.T) {
	s := newStage(t, view.Settings{Protocol: exam.FullSpinal})
	w := s.demo()
	id := s.id("Bramble")
	s.show(view.ScreenExam, id)
	p := s.exam()
	dir := t.TempDir()
	good, bad := filepath.Join(dir, "gait.jpg"), filepath.Join(dir, "letter.jpg")
	jpegFile(t, good)
	if err := os.WriteFile(bad, []byte("no photo"), 0o600); err != nil {
		t.Fatal(err)
	}
	p.dropped([]fyne.URI{storage.NewFileURI(good), storage.NewFileURI(bad)})
	s.until("the photo in the visit", func() bool { return len(p.sheet.Visit().Attachments) == 1 })
	if w.foot.err == nil || !strings.Contains(w.foot.text.Words, "letter.jpg") {
		t.Errorf("of the file that is no photo is said %q", w.foot.text.Words)
	}
	x := p.sheet.Visit().Attachments[0]
	s.settle()
	f, err := s.app.records.File(id)
	if err != nil {
		t.Fatal(err)
	}
	v, ok := f.visit(p.sheet.Visit().ID)
	if !ok || len(v.Attachments) != 1 || v.Attachments[0] != x || x.Format != "jpeg" {
		t.Fatalf("the store has %+v, the visit %+v", v.Attachments, x)
	}
	// What is on the disk is sealed, and what is read back has lost the place.
	sealed, err := os.ReadFile(filepath.Join(s.app.records.Place(), "files", x.Name))
	if err != nil || bytes.Contains(sealed, []byte("JFIF")) || bytes.HasPrefix(sealed, []byte{0xff, 0xd8}) {
		t.Errorf("the photo lies open on the disk: %v", err)
	}
	r, err := s.app.attachment(context.Background(), v.Patient, x)
	if err != nil {
		t.Fatal(err)
	}
	var plain bytes.Buffer
	if _, err := plain.ReadFrom(r); err != nil {
		t.Fatal(err)
	}
	if err := r.Close(); err != nil {
		t.Fatal(err)
	}
	if int64(plain.Len()) != x.Size || bytes.Contains(plain.Bytes(), []byte("48.2082")) {
		t.Errorf("%d bytes of %d, or the place is still in it", plain.Len(), x.Size)
	}
	if small, note := s.app.thumb(context.Background(), v.Patient, x); small == nil {
		t.Errorf("no small picture: %s", note)
	}
	away := x
	away.Name = strings.Repeat("0", 32) + ".att"
	if _, note := s.app.thumb(context.Background(), v.Patient, away); !strings.HasPrefix(note, "not here yet") {
		t.Errorf("a file that has not come is shown as %q", note)
	}
	p.undo(false)
	if n := len(p.sheet.Visit().Attachments); n != 0 {
		t.Errorf("%d photos after undo", n)
	}
}

func TestAPhotoComesWithTheRecords(t *testing.T) {
	s, first, stick := joined(t)
	ctx := context.Background()
	name := filepath.Join(t.TempDir(), "gait.jpg")
	jpegFile(t, name)
	x, err := s.app.keepFile(ctx, fern.ID, name)
	if err != nil {
		t.Fatal(err)
	}
	d := &devicesPage{win: s.win(), store: s.app.records.(stored).Store()}
	mine, _, err := d.openShare(ctx)
	if err != nil {
		t.Fatal(err)
	}
	files, err := attach.Open(ctx, first.Store, nil)
	if err != nil {
		t.Fatal(err)
	}
	first.Files = files
	for _, sh := range []*share.Share{mine, first, mine, first} {
		if _, err := sh.Folder(ctx, stick, nil); err != nil {
			t.Fatal(err)
		}
	}
	r, err := files.Read(fern.ID, x.Name)
	if err != nil {
		t.Fatal(err)
	}
	var got bytes.Buffer
	if _, err := got.ReadFrom(r); err != nil || int64(got.Len()) != x.Size {
		t.Errorf("%d bytes of %d came, %v", got.Len(), x.Size, err)
	}
	if err := r.Close(); err != nil {
		t.Fatal(err)
	}
}

func TestStimulationAsksFirst(t *testing.T) {
	s := newStage(t, view.Settings{Protocol: exam.FullSpinal})
	s.demo()
	s.show(view.ScreenExam, s.id("Bramble"))
	p := s.exam()
	p.choose(tabStim)
	c, asked := stim.ConsentIn([]exam.Visit{p.sheet.Visit()})
	if ok, _ := view.StimAllowed(c, asked); ok {
		t.Fatal("a session is allowed at once")
	}
	all := stim.Consent{Answers: map[string]bool{}, Examiner: "A"}
	for _, q := range stim.Questions() {
		all.Answers[q.Key] = false
	}
	answers, err := all.Record(s.app.records.NewID())
	if err != nil {
		t.Fatal(err)
	}
	p.putStim(answers, false)
	test := stim.Test{ID: s.app.records.NewID(), Muscle: "quadriceps", Site: "pelvic-left", Law: "weiss"}
	for _, w := range view.StimWidths {
		test.Readings = append(test.Readings, stim.Reading{Width: w, Currents: []float64{4 * (1 + 0.4/w)}})
	}
	r, err := test.Record()
	if err != nil {
		t.Fatal(err)
	}
	p.putStim(r, false)
	p.choose(tabStim)
	s.settle()
	f, err := s.app.records.File(p.sheet.Visit().Patient)
	if err != nil {
		t.Fatal(err)
	}
	v, _ := f.visit(p.sheet.Visit().ID)
	if len(v.Stim) != 2 {
		t.Fatalf("the store has %d records", len(v.Stim))
	}
	c, asked = stim.ConsentIn([]exam.Visit{v})
	if ok, why := view.StimAllowed(c, asked); !ok {
		t.Error(why)
	}
	back, err := stim.ReadTest(v.Stim[1])
	if err != nil || back.Law != "weiss" {
		t.Errorf("%+v, %v", back, err)
	}
	p.undo(false)
	if n := len(p.sheet.Visit().Stim); n != 1 {
		t.Errorf("%d records after undo", n)
	}
}

func TestWeightsInPoundsOnTheScreens(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	id := s.id("Bramble")
	s.app.practice.Pounds = true
	s.show(view.ScreenCourse, id)
	if sig := view.StripOf(w.file.Patient, s.app.now(), s.app.practice.Units()).Signalment; !strings.HasSuffix(sig, " lb") {
		t.Errorf("the strip says %q", sig)
	}
	drawn := false
	for i, x := range w.page.(*coursePage).plain.Measure.Series {
		if strings.Contains(w.page.(*coursePage).plain.MeasureKeys[i], exam.Weight.String()) {
			drawn = true
			if x.Unit != "lb" {
				t.Errorf("the course draws weights in %s", x.Unit)
			}
		}
	}
	if !drawn {
		t.Error("the course draws no weights")
	}
	s.show(view.ScreenExam, id)
	if u := s.exam().sheet.UnitOf(exam.Weight); u != "lb" {
		t.Errorf("the exam takes weights in %s", u)
	}
}

// shows reports whether a text stands anywhere on a part of a screen.
func shows(o fyne.CanvasObject, text string) bool {
	switch x := o.(type) {
	case *mark.Text:
		return x.Words == text
	case *fyne.Container:
		return slices.ContainsFunc(x.Objects, func(o fyne.CanvasObject) bool { return shows(o, text) })
	case fyne.Widget:
		return slices.ContainsFunc(test.WidgetRenderer(x).Objects(), func(o fyne.CanvasObject) bool { return shows(o, text) })
	}
	return false
}

// The picture of the course goes to the session's clipboard program, and without one to the clipboard as text.
func TestThePictureOfTheCourseIsCopied(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	s.show(view.ScreenCourse, s.id("Bramble"))
	bin := t.TempDir()
	t.Setenv("PATH", bin)
	t.Setenv("WAYLAND_DISPLAY", "")
	t.Setenv("DISPLAY", ":7")
	s.keys("c")
	s.until("the text on the clipboard", func() bool { return strings.Contains(w.foot.text.Words, "SVG") })
	var top struct{ XMLName xml.Name }
	if err := xml.Unmarshal([]byte(s.app.fyne.Clipboard().Content()), &top); err != nil || top.XMLName.Local != "svg" {
		t.Errorf("the clipboard holds <%s>, %v", top.XMLName.Local, err)
	}
	out := filepath.Join(bin, "got")
	script := "#!/bin/sh\necho \"$@\" > " + out + ".args\n/bin/cat > " + out + "\n"
	if err := os.WriteFile(filepath.Join(bin, "xclip"), []byte(script), 0o700); err != nil {
		t.Fatal(err)
	}
	s.keys("c")
	s.until("the picture on the clipboard", func() bool { return w.foot.text.Words == "The picture is on the clipboard." })
	b, err := os.ReadFile(out)
	if err != nil {
		t.Fatal(err)
	}
	if img, err := png.Decode(bytes.NewReader(b)); err != nil || img.Bounds().Dx() != 2*courseWide {
		t.Errorf("no picture was handed on: %v", err)
	}
	if args, err := os.ReadFile(out + ".args"); err != nil || !strings.Contains(string(args), "image/png") {
		t.Errorf("it was called with %s, %v", args, err)
	}
	if err := os.WriteFile(filepath.Join(bin, "xclip"), []byte("#!/bin/sh\nexit 1\n"), 0o700); err != nil {
		t.Fatal(err)
	}
	s.keys("c")
	s.until("the failure said", func() bool { return w.foot.err != nil })
}

// After an import was looked at, photos are still taken when they are dropped; what the other pages cannot use is left.
func TestDropsGoToThePageThatIsShown(t *testing.T) {
	s := newStage(t, view.Settings{Protocol: exam.FullSpinal})
	w := s.demo()
	screens(s)["import"]()
	if _, ok := w.page.(dropTaker); !ok {
		t.Error("the import takes no table that is dropped")
	}
	id := s.id("Juno")
	s.show(view.ScreenExam, id)
	name := filepath.Join(t.TempDir(), "gait.jpg")
	jpegFile(t, name)
	w.dropped([]fyne.URI{storage.NewFileURI(name)})
	s.until("the photo in the visit", func() bool { return len(s.exam().sheet.Visit().Attachments) == 1 })
	s.show(view.ScreenCourse, id)
	w.dropped([]fyne.URI{storage.NewFileURI(name)})
	s.settle()
}

// A clip is drawn by what is known of it, and a copy for the player lies in a folder of this user's alone until the
// program ends.
func TestClipsAreDescribedAndPlayed(t *testing.T) {
	s := newStage(t, view.Settings{Protocol: exam.FullSpinal})
	w := s.demo()
	t.Setenv("TMPDIR", t.TempDir())
	id := s.id("Juno")
	s.show(view.ScreenExam, id)
	p := s.exam()
	name := filepath.Join(t.TempDir(), "gait.mp4")
	if err := os.WriteFile(name, []byte(mp4), 0o600); err != nil {
		t.Fatal(err)
	}
	p.addPhotos([]string{name})
	s.until("the clip in the visit", func() bool { return len(p.sheet.Visit().Attachments) == 1 })
	s.idle()
	v := p.sheet.Visit()
	if img, words := s.app.thumb(context.Background(), id, v.Attachments[0]); img != nil || !strings.HasSuffix(words, ", 0:18") {
		t.Errorf("the clip is %q", words)
	}
	w.play(v, 0)
	s.idle()
	if len(s.app.unsealed.dirs) != 1 {
		t.Fatalf("%d folders with copies", len(s.app.unsealed.dirs))
	}
	dir := s.app.unsealed.dirs[0]
	if info, err := os.Stat(dir); err != nil || info.Mode().Perm() != 0o700 {
		t.Errorf("the folder is %v, %v", info, err)
	}
	if err := s.app.unsealed.remove(); err != nil {
		t.Fatal(err)
	}
	if _, err := os.Stat(dir); !errors.Is(err, fs.ErrNotExist) {
		t.Errorf("the copy stays: %v", err)
	}
}

// mp4 is a clip of 18 s without pictures, as ISO/IEC 14496-12 lays it out: a file type box, and a movie box with a
// movie header of version 0 that counts 600 to a second.
var mp4 = "\x00\x00\x00\x10ftypisom\x00\x00\x00\x00" + "\x00\x00\x00\x74moov" + "\x00\x00\x00\x6cmvhd" +
	strings.Repeat("\x00", 12) + "\x00\x00\x02\x58" + "\x00\x00\x2a\x30" + strings.Repeat("\x00", 80)
