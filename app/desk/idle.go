package desk

import (
	"context"
	"errors"
	"slices"
	"time"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/assets/words"
)

// locker is what locking a screen needs beyond Opener.
type locker interface {
	// Fits reports, by a nil error, whether a passphrase opens the practice in a folder, which may be open.
	Fits(dir string, passphrase []byte) error
	// ByPassphrase reports whether a passphrase opens it at all.
	ByPassphrase(dir string) bool
}

// idleLook is how often the program looks whether somebody still uses it.
const idleLook = 5 * time.Second

// idling locks the screen of a protected practice that nobody uses. The practice stays open behind it, so that nothing
// that was typed is lost and what is being saved, exchanged or backed up goes on; nothing of it is shown, and no key
// reaches it, until the passphrase is given.
type idling struct {
	timer  *time.Timer
	win    fyne.Window // asks for the passphrase while the others are hidden; nil while nothing is locked
	page   *lockedPage
	queued uint64 // writes, at the last look: to write is to use
	at     []any  // where the keys went, at the last look
	active time.Time
}

// watch begins to look whether somebody uses the program; it is called when a practice was opened.
func (a *App) watch() {
	mark.Used()
	if a.idle.timer != nil {
		a.idle.timer.Stop()
	}
	a.idle.timer = time.AfterFunc(idleLook, func() { a.onUI(a.lookForUse) })
}

func (a *App) lookForUse() {
	if a.ctx.Err() != nil {
		return
	}
	a.idle.timer.Reset(idleLook)
	a.lockIfIdle(time.Now())
}

// lockIfIdle locks the screen where nobody used the program for as long as was chosen.
func (a *App) lockIfIdle(now time.Time) {
	if n := a.saver.State().Queued; n != a.idle.queued {
		a.idle.queued, a.idle.active = n, now
	}
	// A field takes its keys itself: what stands in it has changed, or another one has the keys.
	var at []any
	for _, w := range a.windows {
		f := w.win.Canvas().Focused()
		at = append(at, w.page, f)
		if field, ok := f.(*mark.Field); ok {
			at = append(at, field.Text, field.CursorColumn, field.CursorRow)
		}
	}
	if !slices.Equal(at, a.idle.at) {
		a.idle.at, a.idle.active = at, now
	}
	last := mark.LastUse()
	if a.idle.active.After(last) {
		last = a.idle.active
	}
	if limit := a.settings.Idle(); limit > 0 && now.Sub(last) >= limit {
		a.lock()
	}
}

// lockable reports whether a passphrase could open the screen again.
func (a *App) lockable() bool {
	l, ok := a.opener.(locker)
	return ok && a.records != nil && a.records.Protected() && l.ByPassphrase(a.records.Place())
}

// lock hides every window and asks for the passphrase.
func (a *App) lock() {
	if a.idle.win != nil || !a.lockable() {
		return
	}
	a.keepSettings()
	win := a.fyne.NewWindow(words.T("%s – Cordwalk", words.T("This practice is locked")))
	win.SetPadded(false)
	p := newLockedPage(a)
	win.SetContent(&fyne.Container{Layout: stackFill{}, Objects: []fyne.CanvasObject{mark.NewGround(look.Paper), p.root}})
	win.Resize(fyne.NewSize(900, 520))
	win.SetCloseIntercept(a.closeLocked)
	a.idle.win, a.idle.page = win, p
	win.Show()
	for _, w := range a.windows {
		w.win.Hide()
	}
	win.Canvas().Focus(p.pass)
}

// unlock shows everything again as it was.
func (a *App) unlock() {
	win := a.idle.win
	if win == nil {
		return
	}
	a.idle.win, a.idle.page = nil, nil
	mark.Used()
	for _, w := range a.windows {
		w.win.Show()
	}
	win.SetCloseIntercept(nil)
	win.Close()
}

// closeLocked ends the program from its locked screen, unless something typed would be lost.
func (a *App) closeLocked() {
	for _, w := range a.windows {
		if u, ok := w.page.(unkept); ok && u.unkept() || a.saver.State().Waiting() > 0 {
			a.idle.page.box.Wrong(words.T("Something typed is not kept yet. Open the practice to keep it."))
			return
		}
	}
	win := a.idle.win
	a.idle.win, a.idle.page = nil, nil
	for _, w := range slices.Clone(a.windows) {
		a.closed(w)
	}
	win.SetCloseIntercept(nil)
	win.Close()
}

// lockedPage asks for the passphrase of the practice that is open behind it.
type lockedPage struct {
	app  *App
	pass *mark.Field
	box  *mark.Labelled
	root fyne.CanvasObject
	busy bool
}

func newLockedPage(a *App) *lockedPage {
	p := &lockedPage{app: a, pass: mark.NewField("", nil)}
	p.pass.Password = true
	p.pass.OnSubmitted = func(string) { p.open() }
	p.box = mark.NewLabelled(words.T("Passphrase"), p.pass)
	p.root = bareFrame(words.T("This practice is locked"),
		mark.NewPara(words.T("Nobody used it for a while. Everything stands as it was left.")).In(look.InkSoft), p.box,
		mark.Left(mark.NewButton(words.T("Open"), "open-lock", p.open).As(mark.Main)))
	return p
}

func (p *lockedPage) open() {
	if p.busy {
		return
	}
	p.busy = true
	p.box.Wrong("")
	a, dir, pass := p.app, p.app.records.Place(), []byte(p.pass.Text)
	a.work(func(context.Context) (func(), error) {
		return a.unlock, a.opener.(locker).Fits(dir, pass)
	}, func(err error) {
		p.busy = false
		p.pass.SetText("")
		if errors.Is(err, context.Canceled) {
			return
		}
		p.box.Wrong(sentence(err.Error()))
	})
}
