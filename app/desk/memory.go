package desk

import (
	"context"
	"runtime/debug"
	"sync"
	"time"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/localise"
	"cordwalk.example/cordwalk/exam/progress"
)

// The program stands open all day beside others, so what a page needed goes with the page: its
// textures at once (the toolkit would keep them for a minute), the scratch of the engines, the
// tables of a species that no window shows, and at the next pause the memory itself.

// Garbage is collected rarely until the first pause, so that the program starts without waiting for it, and
// often from then on: pictures and the engines' scratch come and go in large pieces, and collecting
// them early costs little. Percentages as debug.SetGCPercent takes them; a choice, measured.
const (
	starting = 400
	running  = 50
)

// pause is how long nobody changes the page before memory is handed back to the system.
const pause = 2 * time.Second

// engines keeps one localisation engine for the species in use while an exam is open, and lets
// one question at it at a time.
type engines struct {
	mu     sync.Mutex
	engine *localise.Engine
	of     exam.Species
	users  int
}

// hold is called by every page that asks; letGo once it has closed.
func (e *engines) hold() {
	e.mu.Lock()
	defer e.mu.Unlock()
	e.users++
}

func (e *engines) letGo() {
	e.mu.Lock()
	defer e.mu.Unlock()
	if e.users--; e.users <= 0 {
		e.engine = nil
	}
}

// compute weighs an exam. The error is a *localise.Unsupported for a species without a model.
func (e *engines) compute(x localise.Exam) (*localise.Result, error) {
	e.mu.Lock()
	defer e.mu.Unlock()
	if e.engine == nil || e.of != x.Species {
		made, err := localise.New(x.Species)
		if err != nil {
			return nil, err
		}
		e.engine, e.of = made, x.Species
	}
	r, err := e.engine.Compute(x)
	if err != nil {
		return nil, err
	}
	return r.Clone(), nil
}

// shows is told of the animal that a window has opened: the tables of another species go, unless
// another window shows one.
func (a *App) shows(s exam.Species) {
	used := map[exam.Species]bool{s: true}
	for _, w := range a.windows {
		if !w.file.Patient.ID.IsZero() {
			used[w.file.Patient.Species] = true
		}
	}
	for _, x := range []exam.Species{exam.Dog, exam.Cat} {
		if !used[x] {
			progress.Forget(x)
			localise.Forget(x)
		}
	}
}

// freed lets go of the textures of what has left the window.
func (w *window) freed(o fyne.CanvasObject) {
	if o != nil {
		w.win.Canvas().Refresh(o)
	}
}

// rest hands memory back to the system once nobody has changed the page for a while.
func (a *App) rest() {
	if a.resting != nil {
		a.resting.Stop()
	}
	collect := a.draws
	a.resting = time.AfterFunc(pause, func() {
		if collect {
			debug.SetGCPercent(running)
		}
		a.onUI(a.prune)
		handBack(a.ctx)
	})
}

// prune lets go of what a course that was left early has loaded since.
func (a *App) prune() {
	used := map[exam.Species]bool{}
	for _, w := range a.windows {
		if p, ok := w.page.(*coursePage); ok {
			used[p.file.Patient.Species] = true
		}
	}
	for _, s := range []exam.Species{exam.Dog, exam.Cat} {
		if !used[s] {
			progress.Forget(s)
		}
	}
}

// handing keeps two windows from handing back at once.
var handing sync.Mutex

func handBack(ctx context.Context) {
	if ctx.Err() != nil || !handing.TryLock() {
		return
	}
	defer handing.Unlock()
	debug.FreeOSMemory()
}
