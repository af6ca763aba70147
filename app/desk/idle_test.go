package desk

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/exam"
)

// protected starts the program on a practice with a passphrase.
func protected(t *testing.T) *stage {
	t.Helper()
	s := newStage(t, view.Settings{})
	s.app.Start(filepath.Join(t.TempDir(), "practice"))
	r, err := s.app.opener.Create(filepath.Join(t.TempDir(), "practice"), []byte("three long words"), exam.Practice{Name: "Mill Lane", Examiners: []exam.Examiner{{Name: "A. Moor"}}}, "A. Moor")
	if err != nil {
		t.Fatal(err)
	}
	p, err := r.Practice()
	if err != nil {
		t.Fatal(err)
	}
	s.app.use(s.win(), r, p, r.Place())
	s.settle()
	return s
}

// The screen of a practice that nobody uses is locked: what was typed stands behind it, a wrong passphrase
// opens nothing, and the right one shows everything as it was.
func TestLockOnIdle(t *testing.T) {
	s := protected(t)
	a := s.app
	start := time.Now()
	mark.Used()
	a.lockIfIdle(start.Add(view.LockUsual*time.Minute - time.Second))
	if a.idle.win != nil {
		t.Fatal("locked too early")
	}
	s.win().goTo(view.Route{Screen: view.ScreenPatient})
	s.settle()
	p := s.win().page.(*patientPage)
	s.keys("Bramble")
	later := start.Add(time.Hour)
	a.lockIfIdle(later) // another page, and something was typed: that is use
	if a.idle.win != nil {
		t.Fatal("typing in a field does not count as use")
	}
	a.lockIfIdle(later.Add(view.LockUsual * time.Minute))
	if a.idle.win == nil {
		t.Fatal("not locked")
	}
	a.lock() // a second time: nothing
	a.closeLocked()
	if a.idle.win == nil || len(a.windows) == 0 {
		t.Fatal("closing the locked screen lost what was typed")
	}
	for _, word := range []string{"", "three short words"} {
		a.idle.page.pass.SetText(word)
		a.idle.page.open()
		s.until("the answer", func() bool { return a.idle.page != nil && !a.idle.page.busy })
		if a.idle.win == nil {
			t.Fatalf("%q opened it", word)
		}
	}
	a.idle.page.pass.SetText("three long words")
	a.idle.page.open()
	s.until("the practice open again", func() bool { return a.idle.win == nil })
	if s.win().page != p || !p.unkept() {
		t.Error("the page is not as it was left")
	}
	p.forget()
	// An unprotected practice, and somebody who chose it, are never locked.
	a.settings.LockAfter = -1
	a.lockIfIdle(later.Add(24 * time.Hour))
	if a.idle.win != nil {
		t.Error("locked although never was chosen")
	}
}

// Backups are made by themselves, once a day, and a failure is told once and holds up nothing.
func TestBackupsAreMadeByThemselves(t *testing.T) {
	s := protected(t)
	a := s.app
	folder := t.TempDir()
	a.settings.Backups = folder
	if a.backUp(false) {
		t.Fatal("a backup was begun without a recovery key")
	}
	sh, recovery, err := a.album.share(a.ctx, a.records.(stored).Store())
	if err != nil || recovery == nil {
		t.Fatal(recovery, err)
	}
	again, _, err := a.album.share(a.ctx, a.records.(stored).Store())
	if err != nil || again != sh {
		t.Fatal("the list of devices is opened twice", err)
	}
	made := func() int {
		es, err := os.ReadDir(folder)
		if err != nil {
			t.Fatal(err)
		}
		return len(es)
	}
	idle := func() bool { a.keep.mu.Lock(); defer a.keep.mu.Unlock(); return !a.keep.running }
	for range 3 {
		a.backUpSometime()
		s.until("the backup", func() bool { return idle() && a.keep.said != "" })
	}
	if made() != 1 {
		t.Fatalf("%d backups of one day", made())
	}
	a.settings.ByHand = true
	if a.backUp(false) {
		t.Error("a backup was begun although they are made by hand")
	}
	a.settings.ByHand = false
	a.settings.Backups = filepath.Join(folder, "gone")
	a.backUp(false)
	s.until("the failure", func() bool { return idle() && a.keep.failed })
	if !strings.Contains(a.keep.said, "was not made") {
		t.Errorf("it says %q", a.keep.said)
	}
	s.win().goTo(view.Route{Screen: view.ScreenDevices})
	s.until("the devices", func() bool { p, ok := s.win().page.(*devicesPage); return ok && p.work == nil && len(p.seen) == 1 })
}
