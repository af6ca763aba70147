package desk

import (
	"bytes"
	"context"
	"errors"
	"image"
	"image/png"
	"net/url"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
	"time"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/storage"

	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/audit"
)

// handedOver lists what the audit says was printed or exported.
func (s *stage) handedOver() (out []string) {
	s.t.Helper()
	k, ok := s.app.records.(*kept)
	if !ok {
		s.t.Fatalf("the records are %T", s.app.records)
	}
	list, err := audit.Read(context.Background(), k.s, time.Time{})
	if err != nil {
		s.t.Fatal(err)
	}
	for _, e := range list {
		if e.Did == audit.Printed || e.Did == audit.Exported {
			out = append(out, string(e.Did)+" "+e.What+" by "+e.Examiner)
		}
	}
	return out
}

// TestPhrasesAndLogoOfThePractice: a sentence in the practice's own words and its logo are kept as
// they are made, stand on the next sheet, and go back by undo.
func TestPhrasesAndLogoOfThePractice(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	w.goTo(view.Route{Screen: view.ScreenPhrases})
	p := w.page.(*phrasePage)
	var line *phraseLine
	for _, l := range p.lines {
		if l.key == "keep-on" {
			line = l
		}
	}
	stored := func() exam.Practice {
		pr, err := s.app.records.Practice()
		if err != nil {
			t.Fatal(err)
		}
		return pr
	}
	own := "Well done. Go on like this."
	w.win.Canvas().Focus(line.own)
	s.keys(own)
	if !strings.Contains(line.about.Words, own) || !strings.Contains(line.about.Words, "reads easily") {
		t.Errorf("of the wording is said %q", line.about.Words)
	}
	w.win.Canvas().Unfocus()
	s.until("the wording in the store", func() bool { return sheet.OwnPhrases(stored(), "en")["keep-on"] == own })

	// A wording that lost a place is refused in words and not kept.
	weaker := p.lines[4]
	w.win.Canvas().Focus(weaker.own)
	s.keys("Weaker: ‹parts›.")
	w.win.Canvas().Unfocus()
	if !strings.Contains(weaker.about.Words, "‹day›") || sheet.OwnPhrases(p.book.Practice(), "en")["weaker"] != "" {
		t.Errorf("a wording without its day: %q", weaker.about.Words)
	}
	weaker.own.SetText("")

	var logo bytes.Buffer
	if err := png.Encode(&logo, image.NewGray(image.Rect(0, 0, 60, 20))); err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	good, bad := filepath.Join(dir, "logo.png"), filepath.Join(dir, "letter.png")
	if err := errors.Join(os.WriteFile(good, logo.Bytes(), 0o600), os.WriteFile(bad, []byte("no picture"), 0o600)); err != nil {
		t.Fatal(err)
	}
	p.dropped([]fyne.URI{storage.NewFileURI(bad)})
	s.until("the refusal", func() bool { return strings.Contains(w.foot.text.Words, "neither a PNG nor a JPEG") })
	p.dropped([]fyne.URI{storage.NewFileURI(good)})
	s.until("the logo in the store", func() bool { return bytes.Equal(stored().Logo, logo.Bytes()) })

	s.show(view.ScreenSheet, s.id("Bramble"))
	if !strings.Contains(w.page.(*sheetPage).doc.Summary, own) {
		t.Errorf("the sheet says %q", w.page.(*sheetPage).doc.Summary)
	}
	w.goTo(view.Route{Screen: view.ScreenPhrases})
	p = w.page.(*phrasePage)
	p.setLogo(nil)
	s.until("no logo in the store", func() bool { return len(stored().Logo) == 0 })
	p.undo(false)
	s.until("the logo back", func() bool { return bytes.Equal(stored().Logo, logo.Bytes()) })
	for _, l := range p.lines {
		if l.key == "keep-on" {
			l.turned() // back to the standard words
		}
	}
	s.until("the standard words", func() bool { return len(stored().Phrases) == 0 })
	p.undo(false)
	s.until("the own words back", func() bool { return sheet.OwnPhrases(stored(), "en")["keep-on"] == own })
}

// TestHandingOverIsInTheAudit: what the desktop saves, prints or mails is written down as the
// command line writes it, and the words that were sent come again.
func TestHandingOverIsInTheAudit(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	s.show(view.ScreenSheet, s.id("Bramble"))
	p := w.page.(*sheetPage)
	p.summary.SetText("She is doing well.")
	p.reworded()
	s.settle()
	if err := p.sent()(context.Background()); err != nil {
		t.Fatal(err)
	}
	if err := w.exported("bramble-course.png")(context.Background()); err != nil {
		t.Fatal(err)
	}
	want := []string{"printed Bramble: " + p.doc.Name + " by " + s.app.examiner, "exported bramble-course.png by " + s.app.examiner}
	if got := s.handedOver(); strings.Join(got, "\n") != strings.Join(want, "\n") {
		t.Errorf("the audit says %q, want %q", got, want)
	}
	s.show(view.ScreenSheet, s.id("Bramble"))
	again := w.page.(*sheetPage)
	if again.summary.Text != "She is doing well." || again.doc.Summary != "She is doing well." {
		t.Errorf("the words that were sent: %q on the screen, %q on the sheet", again.summary.Text, again.doc.Summary)
	}
	again.turned() // back to the sheet's own sentences
	s.settle()
	if again.doc.Reworded || again.ours == "" {
		t.Errorf("the sheet's own sentences: %q", again.doc.Summary)
	}
	again.turned()
	if again.summary.Text != again.ours {
		t.Errorf("to be reworded: %q, want %q", again.summary.Text, again.ours)
	}
}

// TestTheMailProgramIsOpened: by the composer of the freedesktop systems with the paper attached;
// else with a draft; else with an address, and the place of the paper is said.
func TestTheMailProgramIsOpened(t *testing.T) {
	dir := t.TempDir()
	t.Setenv("TMPDIR", dir)
	m := draft{to: "-mara@example.org", subject: "How Bruno is doing", text: "Dear Mara,\n", pdf: filepath.Join(dir, "bruno.pdf"), eml: filepath.Join(dir, "bruno.eml"), mailto: "mailto:mara@example.org?subject=x"}
	var opened []string
	take := func(refuse string) func(*url.URL) error {
		return func(u *url.URL) error {
			opened = append(opened, u.Scheme)
			if u.Scheme == refuse || refuse == "all" {
				return errors.New("no program")
			}
			return nil
		}
	}
	t.Setenv("PATH", t.TempDir()) // no composer
	said, err := m.open(context.Background(), take(""))
	if err != nil || !strings.Contains(said, "draft") {
		t.Errorf("%q, %v", said, err)
	}
	said, err = m.open(context.Background(), take("file"))
	if err != nil || !strings.Contains(said, m.pdf) {
		t.Errorf("%q, %v", said, err)
	}
	if _, err = m.open(context.Background(), take("all")); err == nil {
		t.Error("no program, and no error")
	}
	if got := strings.Join(opened, " "); got != "file file mailto file mailto" {
		t.Errorf("opened: %s", got)
	}
	if runtime.GOOS != "linux" {
		return
	}
	bin := t.TempDir()
	t.Setenv("PATH", bin+":/usr/bin:/bin")
	for _, code := range []string{"0", "3"} {
		log := filepath.Join(bin, "said"+code)
		if err := os.WriteFile(filepath.Join(bin, composer), []byte("#!/bin/sh\nprintf '%s|' \"$@\" > "+log+"\nexit "+code+"\n"), 0o700); err != nil {
			t.Fatal(err)
		}
		opened = nil
		if _, err := m.open(context.Background(), take("")); err != nil {
			t.Fatal(err)
		}
		got, err := os.ReadFile(log)
		if err != nil || string(got) != "--utf8|--subject|How Bruno is doing|--body|Dear Mara,\n|--attach|"+m.pdf+"|mailto:-mara@example.org|" {
			t.Errorf("the composer was told %q, %v", got, err)
		}
		if (len(opened) == 0) != (code == "0") {
			t.Errorf("the composer ended with %s, then opened: %q", code, opened)
		}
	}
}
