package desk

import (
	"context"
	"errors"
	"strconv"
	"strings"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// initials of the examiner at work, for the strip.
func (a *App) initials() string {
	for _, e := range a.practice.Examiners {
		if e.Name == a.examiner && e.Initials != "" {
			return e.Initials
		}
	}
	return view.Initials(a.examiner)
}

// setExaminer makes somebody the examiner on every window and remembers it.
func (a *App) setExaminer(name string) {
	a.examiner, a.settings.Examiner = name, name
	a.keepSettings()
	for _, w := range a.windows {
		w.strip.update()
		w.layout()
	}
}

// showExaminers lists who may examine; a press, or the number beside a name, switches.
func (w *window) showExaminers() {
	a := w.app
	if a.records == nil {
		return
	}
	var lines []fyne.CanvasObject
	var first fyne.Focusable
	list := a.practice.Examiners
	for i, e := range list {
		icon, name := "person", strings.TrimSpace(e.Initials+"  "+e.Name)
		if i < 9 {
			name = strconv.Itoa(i+1) + "  " + name
		}
		if e.PINHash != "" {
			icon = "lock"
		}
		b := mark.NewButton(name, icon, func() { w.switchTo(e) })
		b.Side = true
		b.Chosen = e.Name == a.examiner
		if first == nil || b.Chosen {
			first = b
		}
		lines = append(lines, b)
	}
	hint := words.T("Every finding carries the name of who examines. A lock stands for a PIN, which is asked for here and nowhere else.")
	lines = append(lines, mark.NewPara(hint).In(look.InkSoft))
	w.showSheet(words.T("Who examines?"), mark.Column(look.Unit, lines...), 480,
		mark.NewButton(words.T("Examiners and PINs"), "settings", func() { w.hideSheet(); w.goTo(view.Route{Screen: view.ScreenSettings}) }))
	w.layerRune = func(r rune) {
		if i := int(r - '1'); i >= 0 && i < len(list) && i < 9 {
			w.switchTo(list[i])
		}
	}
	if first != nil {
		w.win.Canvas().Focus(first)
	}
}

// switchTo makes somebody the examiner, after asking for the PIN where there is one. Until it fits, the
// examiner stays who it was, and everything can be recorded.
func (w *window) switchTo(e exam.Examiner) {
	a := w.app
	done := func() {
		w.hideSheet()
		a.setExaminer(e.Name)
		w.foot.say(words.T("%s examines now.", e.Name))
	}
	if e.PINHash == "" || e.Name == a.examiner {
		done()
		return
	}
	wrong := mark.NewPara(" ").In(look.Worse)
	field := mark.NewField("", nil)
	field.Password = true
	busy := false
	try := func() {
		if busy {
			return
		}
		busy = true
		pin := field.Text
		a.work(func(context.Context) (func(), error) { return done, view.PINFits(e, pin) }, func(err error) {
			busy = false
			field.SetText("")
			if !errors.Is(err, view.ErrNotTheirPIN) {
				wrong.Set(sentence(err.Error()))
				return
			}
			wrong.Set(words.T("This is not the PIN of %[1]s; %[2]s still examines.", e.Name, a.examiner))
		})
	}
	field.OnSubmitted = func(string) { try() }
	field.OnEscape = w.hideSheet
	var pad []fyne.CanvasObject
	for _, r := range "1234567890" {
		pad = append(pad, mark.NewButton(string(r), "", func() { field.SetText(field.Text + string(r)) }))
	}
	pad = append(pad, mark.NewButton("", "close", func() { field.SetText("") }).WithTip(words.T("Clear")))
	w.showSheet(words.T("Who examines?"), mark.Column(look.Unit, mark.NewLabelled(words.T("PIN of %s", e.Name), field), mark.Wrapped(look.Unit/2, pad...), wrong), 480,
		mark.NewButton(words.T("Switch"), "tick", try).As(mark.Main))
	w.win.Canvas().Focus(field)
}

// renamed goes on under the examiner's new name where the practice's record was changed, or under the
// first one where the examiner at work is no longer on it.
func (a *App) renamed(before exam.Practice) {
	name := ""
	for _, old := range before.Examiners {
		for _, e := range a.practice.Examiners {
			if old.Name == a.examiner && e.ID == old.ID {
				name = e.Name
			}
		}
	}
	if name == "" && len(a.practice.Examiners) > 0 {
		name = a.practice.Examiners[0].Name
	}
	a.setExaminer(name)
}
