package desk

import (
	"context"
	"time"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/container"
	"fyne.io/fyne/v2/driver/desktop"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// page is one screen as it stands in a window.
type page interface {
	content() fyne.CanvasObject
	shown() // it is on the screen now: take the keys
	left()  // another page comes
}

// Optional abilities of a page.
type (
	runeTaker interface{ typedRune(r rune) bool }
	keyTaker  interface{ typedKey(name fyne.KeyName) bool }
	helper    interface{ help() []view.KeyHelp }
	undoer    interface{ undo(redo bool) }
	closer    interface{ close() }
	unkept    interface {
		unkept() bool      // something was typed that is not kept yet
		keepAnd(do func()) // keep it, then go on
		forget()           // let it go
	}
	footWriter interface{ foot() fyne.CanvasObject }
	dropTaker  interface{ dropped(files []fyne.URI) }
)

// window is one window of the program: the rail, the strip, a page, the line below.
type window struct {
	app   *App
	win   fyne.Window
	trail view.Trail
	page  page
	file  File // of the patient shown; zero where the page has none

	rail      *rail
	strip     *strip
	foot      *foot
	center    *fyne.Container
	tips      *mark.Tips
	layer     *fyne.Container // help and other sheets laid over the page
	layerRune func(rune)      // what letters do on the sheet; nil for nothing
	opening   bool            // the foot says that a page is being opened
	turn      int             // number of the newest load; older ones are dropped
}

func newWindow(a *App) *window {
	w := &window{app: a}
	w.win = a.fyne.NewWindow("Cordwalk")
	w.win.SetPadded(false)
	w.rail = newRail(w)
	w.strip = newStrip(w)
	w.foot = newFoot(w)
	w.center = container.NewStack()
	w.layer = container.NewStack()
	tips, tipLayer := mark.NewTips(w.win.Canvas())
	w.tips = tips
	// The system makes the window while the fonts are read; nothing is measured before both are there.
	w.win.Resize(a.windowSize())
	w.win.Show()
	a.fonts.Wait()
	w.win.SetContent(container.NewStack(mark.NewGround(look.Paper), &fyne.Container{Layout: windowLayout{w}, Objects: []fyne.CanvasObject{w.rail, w.strip, w.center, w.foot}}, w.layer, tipLayer))
	w.win.SetCloseIntercept(w.close)
	w.keys()
	w.win.SetOnDropped(func(_ fyne.Position, files []fyne.URI) { w.dropped(files) })
	return w
}

// dropped hands files that were dragged into the window to the page shown.
func (w *window) dropped(files []fyne.URI) {
	if p, ok := w.page.(dropTaker); ok {
		p.dropped(files)
	}
}

// windowLayout sets the rail at the left, the strip above, the foot below, the page between.
type windowLayout struct{ w *window }

func (l windowLayout) MinSize([]fyne.CanvasObject) fyne.Size { return fyne.NewSize(1100, 700) }
func (l windowLayout) Layout(o []fyne.CanvasObject, s fyne.Size) {
	w := l.w
	rail, top, foot := float32(0), float32(0), float32(0)
	if w.rail.Visible() {
		rail = w.rail.MinSize().Width
		w.rail.Resize(fyne.NewSize(rail, s.Height))
		w.rail.Move(fyne.NewPos(0, 0))
	}
	if w.strip.Visible() {
		top = w.strip.HeightFor(s.Width - rail)
		w.strip.Move(fyne.NewPos(rail, 0))
		w.strip.Resize(fyne.NewSize(s.Width-rail, top))
	}
	if w.foot.Visible() {
		foot = w.foot.MinSize().Height
		w.foot.Move(fyne.NewPos(rail, s.Height-foot))
		w.foot.Resize(fyne.NewSize(s.Width-rail, foot))
	}
	w.center.Move(fyne.NewPos(rail, top))
	w.center.Resize(fyne.NewSize(s.Width-rail, s.Height-top-foot))
}

// show puts a page into the window.
func (w *window) show(p page) {
	if w.page != nil {
		w.page.left()
	}
	if w.opening { // of a page that somebody no longer waits for
		w.opening = false
		w.foot.say("")
	}
	w.page = p
	w.win.SetTitle(w.title())
	before := w.center.Objects
	w.center.Objects = []fyne.CanvasObject{p.content()}
	w.center.Refresh()
	for _, o := range before {
		if o != p.content() {
			w.freed(o)
		}
	}
	w.app.rest()
	w.strip.update()
	w.rail.update()
	w.foot.update()
	w.layout()
	p.shown()
}

// layout gives rail, strip, page and foot their places anew.
func (w *window) layout() {
	if root := w.root(); root != nil {
		root.Layout.Layout(root.Objects, root.Size())
	}
}

// title names the window by what it shows: the screen, and the animal.
func (w *window) title() string {
	if w.app.records == nil {
		return "Cordwalk"
	}
	s := screenTitle(w.here().Screen)
	if w.here().Screen == view.ScreenPatient {
		s = words.T("Patient")
	}
	if n := w.file.Patient.Name; n != "" {
		s = words.T("%s: %s", s, n)
	}
	return words.T("%s – Cordwalk", s)
}

func (w *window) root() *fyne.Container {
	if stack, ok := w.win.Content().(*fyne.Container); ok && len(stack.Objects) > 1 {
		if c, ok := stack.Objects[1].(*fyne.Container); ok {
			return c
		}
	}
	return nil
}

// goTo shows a route; it loads what the page needs off the drawing goroutine.
func (w *window) goTo(r view.Route) {
	w.trail.Go(r)
	w.open(r)
}

func (w *window) open(r view.Route) {
	w.turn++
	turn := w.turn
	switch r.Screen {
	case view.ScreenSettings:
		w.file = File{}
		w.show(newSettingsPage(w))
		return
	case view.ScreenPhrases:
		w.file = File{}
		w.show(newPhrasePage(w))
		return
	case view.ScreenDevices:
		w.file = File{}
		w.show(newDevicesPage(w))
		return
	case view.ScreenOutcomes:
		w.file = File{}
		w.show(newOutcomesPage(w))
		return
	case view.ScreenPatient:
		if r.Patient.IsZero() {
			w.file = File{}
			w.show(newPatientPage(w, exam.Patient{}))
			return
		}
	case view.ScreenCaseload:
		w.file = File{}
		w.show(newCaseloadPage(w))
		return
	}
	if r.Patient.IsZero() {
		w.goTo(view.Route{Screen: view.ScreenCaseload})
		return
	}
	w.foot.say(words.T("Opening…"))
	w.opening = true
	w.app.work(func(ctx context.Context) (func(), error) {
		// What was entered a moment ago must be on the page that comes.
		if err := w.app.saver.Flush(ctx); err != nil {
			return nil, err
		}
		f, err := w.app.records.File(r.Patient)
		return func() {
			if turn == w.turn {
				w.file = f
				w.app.shows(f.Patient.Species)
				w.openFile(r)
			}
		}, err
	}, func(err error) {
		if turn == w.turn {
			w.opening = false
			w.fail(words.T("The file of this animal cannot be opened."), err)
		}
	})
}

// openFile shows a page of the patient whose file is loaded.
func (w *window) openFile(r view.Route) {
	switch r.Screen {
	case view.ScreenPatient:
		w.show(newPatientPage(w, w.file.Patient))
	case view.ScreenExam:
		w.show(newExamPage(w, r.Visit))
	case view.ScreenCompare:
		w.show(newComparePage(w, r))
	case view.ScreenCourse:
		w.show(newCoursePage(w))
	case view.ScreenSheet:
		w.show(newSheetPage(w))
	case view.ScreenChoices:
		w.show(newChoicesPage(w))
	case view.ScreenHistory:
		w.show(newHistoryPage(w))
	default:
		w.goTo(view.Route{Screen: view.ScreenCaseload})
	}
}

// here is the route shown.
func (w *window) here() view.Route { return w.trail.Here() }

// to shows another screen of the same patient.
func (w *window) to(s view.Screen) {
	w.goTo(view.Route{Screen: s, Patient: w.patient()})
}

// patient is the animal shown, or the one shown last.
func (w *window) patient() exam.ID {
	if id := w.here().Patient; !id.IsZero() {
		return id
	}
	return w.app.lastPatient
}

// fail says an error in one sentence, with the details a click away.
func (w *window) fail(sentence string, err error) { w.foot.fail(sentence, err) }

// keys binds the keys of the whole program.
func (w *window) keys() {
	c := w.win.Canvas()
	ctrl := func(k fyne.KeyName, do func()) {
		c.AddShortcut(&desktop.CustomShortcut{KeyName: k, Modifier: fyne.KeyModifierControl}, func(fyne.Shortcut) {
			if w.app.records != nil {
				do()
			}
		})
	}
	for i, s := range view.Rail() {
		screen := s
		ctrl(fyne.KeyName(rune('1'+i)), func() { w.rail.choose(screen) })
	}
	ctrl(fyne.KeyN, func() { w.goTo(view.Route{Screen: view.ScreenPatient}) })
	ctrl(fyne.KeyF, func() { w.goTo(view.Route{Screen: view.ScreenCaseload}) })
	ctrl(fyne.KeyE, func() {
		if id := w.patient(); !id.IsZero() {
			w.goTo(view.Route{Screen: view.ScreenPatient, Patient: id})
		}
	})
	ctrl(fyne.KeyH, func() {
		if id := w.patient(); !id.IsZero() {
			w.goTo(view.Route{Screen: view.ScreenHistory, Patient: id})
		}
	})
	ctrl(fyne.KeyComma, func() { w.goTo(view.Route{Screen: view.ScreenSettings}) })
	ctrl(fyne.KeyU, w.showExaminers)
	ctrl(fyne.KeyT, func() { w.app.another(w.here()) })
	c.AddShortcut(&desktop.CustomShortcut{KeyName: fyne.KeyQ, Modifier: fyne.KeyModifierControl}, func(fyne.Shortcut) { w.close() })
	for _, enter := range []fyne.KeyName{fyne.KeyReturn, fyne.KeyEnter} {
		ctrl(enter, func() {
			if p, ok := w.page.(closer); ok {
				p.close()
			}
		})
	}
	step := func(k fyne.KeyName, move func() (view.Route, bool)) {
		c.AddShortcut(&desktop.CustomShortcut{KeyName: k, Modifier: fyne.KeyModifierAlt}, func(fyne.Shortcut) {
			if r, ok := move(); ok {
				w.open(r)
			}
		})
	}
	step(fyne.KeyLeft, w.trail.Back)
	step(fyne.KeyRight, w.trail.Forward)
	c.AddShortcut(&fyne.ShortcutUndo{}, func(fyne.Shortcut) { w.undo(false) })
	c.AddShortcut(&fyne.ShortcutRedo{}, func(fyne.Shortcut) { w.undo(true) })
	c.SetOnTypedKey(w.typedKey)
	c.SetOnTypedRune(w.typedRune)
}

func (w *window) undo(redo bool) {
	if u, ok := w.page.(undoer); ok {
		u.undo(redo)
	}
}

func (w *window) typedKey(e *fyne.KeyEvent) {
	mark.Used()
	if len(w.layer.Objects) > 0 {
		if e.Name == fyne.KeyEscape || e.Name == fyne.KeyF1 || e.Name == fyne.KeyReturn {
			w.hideSheet()
		}
		return
	}
	if e.Name == fyne.KeyF1 {
		w.showHelp()
		return
	}
	if k, ok := w.page.(keyTaker); ok {
		k.typedKey(e.Name)
	}
}

func (w *window) typedRune(r rune) {
	mark.Used()
	if len(w.layer.Objects) > 0 {
		if w.layerRune != nil {
			w.layerRune(r)
		}
		return
	}
	if k, ok := w.page.(runeTaker); ok && k.typedRune(r) {
		return
	}
	if r == '?' {
		w.showHelp()
	}
}

// close waits for what is not yet saved, then closes the window; the last one ends the program.
func (w *window) close() {
	if u, ok := w.page.(unkept); ok && u.unkept() && len(w.layer.Objects) == 0 {
		w.askKeep(u)
		return
	}
	w.app.rememberWindow(w)
	if w.page != nil {
		w.page.left()
	}
	if w.app.saver == nil || w.app.saver.State().Waiting() == 0 || len(w.app.windows) > 1 {
		w.app.closed(w)
		return
	}
	w.foot.say(words.T("Saving what was entered last…"))
	w.app.work(func(ctx context.Context) (func(), error) {
		wait, end := context.WithTimeout(ctx, closeWait)
		defer end()
		return func() { w.app.closed(w) }, w.app.saver.Flush(wait)
	}, func(err error) {
		w.askLoss(err)
	})
}

// closeWait is how long closing waits for the disk before it asks.
const closeWait = 10 * time.Second

// passShortcut gives a shortcut that a widget has no use for to the window.
func passShortcut(o fyne.CanvasObject, s fyne.Shortcut) { mark.PassShortcut(o, s) }
