// Package desk is the desktop program: its windows and screens. It draws what the
// view-models of app/view say and hands them the keys; it holds no rules of the trade.
//
// Everything here runs on the drawing goroutine, except what is given to App.work.
package desk

import (
	"context"
	"errors"
	"fmt"
	"runtime/debug"
	"sync"
	"sync/atomic"
	"time"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/theme"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/icons"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// App is the running program.
type App struct {
	fyne     fyne.App
	settings view.Settings
	path     string // of the settings
	now      func() time.Time
	opener   Opener

	records  Records
	practice exam.Practice
	saver    *view.Saver
	examiner string
	draws    bool      // Run was called: the garbage collector is the program's own
	shared   time.Time // of the last exchange since the program was started

	windows     []*window
	lastPatient exam.ID
	caseload    *view.Caseload // the newest, shown at once while a newer one is read
	fresh       bool           // the caseload was read with the store and not shown yet

	drafts map[exam.ID]*view.PatientForm // pages of animals that were left with something typed on them

	album    album          // the photos and clips beside the store
	keep     keeping        // backups made by themselves
	idle     idling         // the lock of a screen that nobody uses
	engines  engines        // of all exams: each would hold much scratch memory
	resting  *time.Timer    // see rest
	unsealed unsealed       // copies of clips for the system's player
	fonts    sync.WaitGroup // the reading of the fonts at the start
	heavy    sync.Mutex     // long work on one course or paper at a time: each needs much memory

	onUI   view.OnUI // runs on the drawing goroutine; tests pass their own
	ctx    context.Context
	cancel context.CancelFunc
	busy   sync.WaitGroup
}

// Opener opens and makes stores. It is given by the program's entry, so that this package
// knows no files.
type Opener interface {
	// Exists reports whether a store lies in the folder, and whether a passphrase opens it.
	Exists(dir string) (exists, locked bool)
	// Open opens the store; progress may be called from any goroutine.
	Open(dir string, passphrase []byte, progress func(what string, done, total int64), notice func(string)) (Records, error)
	// Create makes a store with a practice; an empty passphrase leaves the key in the store.
	Create(dir string, passphrase []byte, p exam.Practice, examiner string) (Records, error)
	// Demo makes the demo practice in a folder and opens it.
	Demo(dir string, progress func(what string, done, total int64)) (Records, error)
	// DefaultDir is where a practice lies unless somebody says otherwise, and DemoDir where the demo lies.
	DefaultDir() string
	DemoDir() string
}

// New returns the program over a Fyne app.
func New(f fyne.App, o Opener, settings view.Settings, settingsPath string, now func() time.Time) *App {
	if now == nil {
		now = time.Now
	}
	ctx, cancel := context.WithCancel(context.Background())
	a := &App{fyne: f, opener: o, settings: settings, path: settingsPath, now: now, onUI: fyne.Do, drafts: map[exam.ID]*view.PatientForm{}, ctx: ctx, cancel: cancel}
	f.SetIcon(fyne.NewStaticResource("cordwalk.png", icons.App))
	a.theme()
	return a
}

func (a *App) theme() {
	scale := float32(a.settings.TextScale) / 100
	if scale == 0 {
		scale = 1
	}
	mode := look.Mode(a.settings.Theme)
	a.fyne.Settings().SetTheme(look.New(mode, scale))
}

// Start opens the first window: the store named, the one opened last, or the first start.
func (a *App) Start(dir string) {
	a.readFonts()
	if dir == "" {
		dir = a.settings.Store
	}
	if dir == "" {
		dir = a.opener.DefaultDir()
	}
	exists, locked := a.opener.Exists(dir)
	if locked && a.inSession(dir) {
		locked = false
	}
	var x *reading
	if exists && !locked {
		x = a.begin(a.opening(dir, nil)) // while the window is made
	}
	w := newWindow(a)
	a.windows = append(a.windows, w)
	switch {
	case !exists:
		w.bare(newFirstRunPage(w, dir))
	case locked:
		w.bare(newUnlockPage(w, dir))
	default:
		select { // nearly always: no other page is drawn for the moment that is left
		case <-x.done:
			if x.err == nil {
				a.useRead(w, x, dir)
				return
			}
		case <-time.After(glance):
		}
		a.followOpening(w, dir, x)
	}
}

// glance is how long a page may stay without an answer before it says what it waits for.
const glance = 100 * time.Millisecond

// StartDemo opens the first window on the demo practice, made in the folder if it is not there;
// the empty folder is the usual place of the demo.
func (a *App) StartDemo(dir string) {
	a.readFonts()
	if dir == "" {
		dir = a.opener.DemoDir()
	}
	w := newWindow(a)
	a.windows = append(a.windows, w)
	a.demo(w, dir, func(err error) { w.bare(newFailedPage(w, dir, err)) })
}

// readFonts has the toolkit read the fonts of the usual text on a goroutine of its own. Nothing
// else may measure text until it is done.
func (a *App) readFonts() {
	a.fonts.Go(func() {
		for _, bold := range []bool{false, true} {
			fyne.MeasureText("Cordwalk", theme.TextSize(), fyne.TextStyle{Bold: bold})
		}
	})
}

// demo makes or opens the demo practice off the drawing goroutine.
func (a *App) demo(w *window, dir string, failed func(error)) {
	a.follow(w, dir, words.T("Making the demo practice"), a.begin(func(progress told, _ func(string)) (Records, error) {
		return a.opener.Demo(dir, progress)
	}), failed)
}

// Run draws until the last window is closed.
func (a *App) Run() {
	a.draws = true
	debug.SetGCPercent(starting)
	a.fyne.Run()
}

// reading is a store that is being opened off the drawing goroutine.
type reading struct {
	done chan struct{}
	page atomic.Pointer[openingPage] // that shows how far it is, nil while there is none

	records  Records
	practice exam.Practice
	cases    *view.Caseload // nil where it could not be read
	err      error
}

// begin begins to open a store off the drawing goroutine. open is told where to say how far it is, and what people
// should know.
func (a *App) begin(open func(progress told, say func(string)) (Records, error)) *reading {
	x := &reading{done: make(chan struct{})}
	a.busy.Go(func() {
		defer close(x.done)
		progress := func(what string, done, total int64) {
			if p := x.page.Load(); p != nil {
				p.progress(what, done, total)
			}
		}
		say := func(s string) {
			a.onUI(func() {
				if len(a.windows) > 0 {
					a.windows[0].foot.say(s)
				}
			})
		}
		if x.records, x.err = open(progress, say); x.err != nil {
			return
		}
		if x.practice, x.err = x.records.Practice(); x.err != nil {
			x.err = errors.Join(x.err, x.records.Close())
			return
		}
		x.cases, _ = readCaseload(a.ctx, x.records, a.now()) // what fails is read again, and told, by the page
	})
	return x
}

// follow shows a store's caseload once the store is open, and until then how far it is.
func (a *App) follow(w *window, dir, title string, x *reading, failed func(error)) {
	p := newOpeningPage(a, title)
	x.page.Store(p)
	w.bare(p)
	a.work(func(context.Context) (func(), error) {
		<-x.done
		return func() { a.useRead(w, x, dir) }, x.err
	}, failed)
}

// opening opens a store that exists.
func (a *App) opening(dir string, passphrase []byte) func(told, func(string)) (Records, error) {
	return func(progress told, say func(string)) (Records, error) {
		return a.opener.Open(dir, passphrase, progress, say)
	}
}

// open opens a store that exists and shows the caseload.
func (a *App) open(w *window, dir string, passphrase []byte) {
	a.followOpening(w, dir, a.begin(a.opening(dir, passphrase)))
}

func (a *App) followOpening(w *window, dir string, x *reading) {
	a.follow(w, dir, words.T("Opening the practice in %s", dir), x, func(err error) {
		_, locked := a.opener.Exists(dir)
		if locked {
			u := newUnlockPage(w, dir)
			w.bare(u)
			u.wrong(err)
			return
		}
		w.bare(newFailedPage(w, dir, err))
	})
}

// useRead goes on with a store whose caseload was read with it.
func (a *App) useRead(w *window, x *reading, dir string) {
	a.caseload, a.fresh = x.cases, x.cases != nil
	a.use(w, x.records, x.practice, dir)
}

// use goes on with an open store.
func (a *App) use(w *window, r Records, p exam.Practice, dir string) {
	a.records, a.practice = r, p
	a.settings.Store = dir
	a.examiner = ""
	for _, e := range p.Examiners {
		if e.Name == a.settings.Examiner {
			a.examiner = e.Name
		}
	}
	if a.examiner == "" && len(p.Examiners) > 0 {
		a.examiner = p.Examiners[0].Name
	}
	a.saver = view.NewSaver(a.onUI, func(s view.SaveState) {
		for _, w := range a.windows {
			w.saved(s)
		}
	})
	a.keepSettings()
	w.dressed()
	if route, err := view.ParseRoute(a.settings.Route); err == nil {
		a.lastPatient = route.Patient
	}
	w.goTo(view.Route{Screen: view.ScreenCaseload})
	a.keepSafe()
	a.watch()
}

// inSession reports whether a practice opens by itself in its user's unlocked session.
func (a *App) inSession(dir string) bool {
	o, ok := a.opener.(interface{ InSession(dir string) bool })
	return ok && o.InSession(dir)
}

// work runs something slow on its own goroutine and hands what it returns back to the
// drawing goroutine; an error goes to failed.
func (a *App) work(do func(ctx context.Context) (func(), error), failed func(error)) {
	a.busy.Add(1)
	go func() {
		defer a.busy.Done()
		then, err := do(a.ctx)
		a.onUI(func() {
			if err != nil {
				failed(err)
				return
			}
			if then != nil {
				then()
			}
		})
	}()
}

// save queues one write; errors of the disk are shown where the screen says saved.
func (a *App) save(w *window, write view.Write) {
	if _, err := a.saver.Queue(write); err != nil {
		w.fail(words.T("This entry was not taken."), err)
	}
}

// another opens a second window on a route.
func (a *App) another(r view.Route) {
	if a.records == nil {
		return
	}
	w := newWindow(a)
	a.windows = append(a.windows, w)
	w.dressed()
	w.goTo(r)
}

// closed lets go of a window; the last one ends the program.
func (a *App) closed(w *window) {
	for i, x := range a.windows {
		if x == w {
			a.windows = append(a.windows[:i], a.windows[i+1:]...)
			break
		}
	}
	if len(a.windows) == 0 {
		a.keepSettings()
		if a.saver != nil {
			ctx, end := context.WithTimeout(context.Background(), closeWait)
			_ = a.saver.Close(ctx)
			end()
		}
		a.cancel()
	}
	mark.ForgetTips(w.win.Canvas())
	w.win.SetCloseIntercept(nil)
	w.win.Close()
}

// Done waits for work under way and closes the store; it is called after the windows are gone.
func (a *App) Done() error {
	a.cancel()
	if a.resting != nil {
		a.resting.Stop()
	}
	if a.idle.timer != nil {
		a.idle.timer.Stop()
	}
	a.busy.Wait()
	a.endKeeping()
	if err := a.unsealed.remove(); err != nil {
		return err
	}
	if a.records == nil {
		return nil
	}
	if err := a.records.Close(); err != nil {
		return fmt.Errorf("%s: %w", words.T("closing the practice"), err)
	}
	return nil
}

func (a *App) windowSize() fyne.Size {
	if a.settings.Width >= 600 && a.settings.Height >= 400 {
		return fyne.NewSize(float32(a.settings.Width), float32(a.settings.Height))
	}
	return fyne.NewSize(1280, 720)
}

func (a *App) rememberWindow(w *window) {
	s := w.win.Canvas().Size()
	a.settings.Width, a.settings.Height = int(s.Width), int(s.Height)
	a.settings.Route = w.here().String()
	a.keepSettings()
}

// keepSettings writes the settings; a failure is told, nothing of the record depends on it.
func (a *App) keepSettings() {
	if a.path == "" {
		return
	}
	if err := a.settings.Save(a.path); err != nil && len(a.windows) > 0 {
		a.windows[0].fail(words.T("The settings could not be kept."), err)
	}
}
