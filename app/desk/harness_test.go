package desk

import (
	"os"
	"path/filepath"
	"sync"
	"testing"
	"time"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/test"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

func TestMain(m *testing.M) {
	storage.ChildMain()
	os.Exit(m.Run())
}

// today is the day of the tests: the demo practice's newest visits lie a few days before it.
var today = time.Date(2026, 11, 28, 10, 0, 0, 0, time.UTC)

// stage runs the program on the toolkit's test driver. What other goroutines want drawn is
// queued and run by the test, as the one drawing goroutine would.
type stage struct {
	t     *testing.T
	app   *App
	mu    sync.Mutex
	queue []func()
}

// newStage starts the program on an empty data folder.
func newStage(t *testing.T, settings view.Settings) *stage {
	t.Helper()
	home := t.TempDir()
	t.Setenv("XDG_DATA_HOME", home)
	t.Setenv("HOME", home)
	f := test.NewTempApp(t)
	s := &stage{t: t}
	now := func() time.Time { return today }
	s.app = New(f, &Keeper{Now: now}, settings, filepath.Join(home, "settings.json"), now)
	s.app.onUI = func(do func()) {
		s.mu.Lock()
		s.queue = append(s.queue, do)
		s.mu.Unlock()
	}
	t.Cleanup(func() {
		for len(s.app.windows) > 0 {
			s.app.closed(s.app.windows[0])
		}
		if err := s.app.Done(); err != nil {
			t.Error(err)
		}
	})
	return s
}

// run does what is queued.
func (s *stage) run() {
	for {
		s.mu.Lock()
		list := s.queue
		s.queue = nil
		s.mu.Unlock()
		if len(list) == 0 {
			return
		}
		for _, do := range list {
			do()
		}
	}
}

// until waits for something to become true, doing what is queued.
func (s *stage) until(what string, ok func() bool) {
	s.t.Helper()
	for end := time.Now().Add(2 * time.Minute); time.Now().Before(end); time.Sleep(2 * time.Millisecond) {
		s.run()
		if ok() {
			s.run()
			return
		}
	}
	s.t.Fatalf("waited in vain: %s", what)
}

// win is the first window.
func (s *stage) win() *window { return s.app.windows[0] }

// demo opens the demo practice and its caseload.
func (s *stage) demo() *window {
	s.t.Helper()
	s.app.StartDemo("")
	w := s.win()
	w.win.Resize(fyne.NewSize(1366, 768))
	s.until("the caseload of the demo", func() bool {
		p, ok := w.page.(*caseloadPage)
		return ok && p.cases.Total() > 5
	})
	return w
}

// id returns an animal of the demo by its name.
func (s *stage) id(name string) exam.ID {
	s.t.Helper()
	for _, r := range s.app.caseload.Rows() {
		if r.Summary.Name == name {
			return r.Summary.ID
		}
	}
	s.t.Fatalf("the demo has no %s", name)
	return exam.ID{}
}

// show goes to a screen of an animal and waits for it.
func (s *stage) show(sc view.Screen, id exam.ID) {
	s.t.Helper()
	w := s.win()
	before := w.page
	w.goTo(view.Route{Screen: sc, Patient: id})
	s.until("the screen "+sc.String(), func() bool { return w.page != before })
	s.settle()
}

// settle waits until nothing is under way.
func (s *stage) settle() {
	s.t.Helper()
	s.until("nothing under way", func() bool {
		if p, ok := s.win().page.(*examPage); ok && p.side != nil {
			p.side.ask.Wait()
			p.side.flags.Wait()
		}
		if p, ok := s.win().page.(*sheetPage); ok && len(p.doc.PDF) == 0 && p.refused == nil {
			return false
		}
		return s.app.saver == nil || s.app.saver.State().Waiting() == 0
	})
}

// idle waits for everything that was given to the background.
func (s *stage) idle() {
	s.t.Helper()
	done := make(chan struct{})
	go func() { s.app.busy.Wait(); close(done) }()
	s.until("the background idle", func() bool {
		select {
		case <-done:
			return true
		default:
			return false
		}
	})
}

// keys types runes at whatever has the focus.
func (s *stage) keys(text string) {
	c := s.win().win.Canvas()
	for _, r := range text {
		if f := c.Focused(); f != nil {
			f.TypedRune(r)
		} else if c.OnTypedRune() != nil {
			c.OnTypedRune()(r)
		}
		s.run()
	}
}

// key presses a named key.
func (s *stage) key(names ...fyne.KeyName) {
	c := s.win().win.Canvas()
	for _, n := range names {
		e := &fyne.KeyEvent{Name: n}
		if f := c.Focused(); f != nil {
			if tab, ok := f.(fyne.Tabbable); n == fyne.KeyTab && !(ok && tab.AcceptsTab()) {
				c.FocusNext()
			} else {
				f.TypedKey(e)
			}
		} else if c.OnTypedKey() != nil {
			c.OnTypedKey()(e)
		}
		s.run()
	}
}

// look puts on a theme and a size of text.
func (s *stage) look(mode look.Mode, percent int) {
	s.app.settings.Theme, s.app.settings.TextScale = string(mode), percent
	s.app.theme()
	for _, w := range s.app.windows {
		w.redress()
	}
	s.settle()
}
