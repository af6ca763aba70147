// Package still keeps the toolkit from moving anything by itself.
package still

import (
	"runtime"

	"fyne.io/fyne/v2"
)

// App makes a Fyne app that moves nothing by itself: no blinking caret, no fading button. An
// idle window then draws nothing, where the caret alone would draw the whole of it many times a
// second. On macOS the toolkit needs its own app behind this, and it is returned as it is.
func App(a fyne.App) fyne.App {
	if runtime.GOOS == "darwin" {
		return a
	}
	s := stillApp{a, stillSettings{a.Settings()}}
	fyne.SetCurrentApp(s)
	return s
}

type stillApp struct {
	fyne.App
	settings stillSettings
}

func (s stillApp) Settings() fyne.Settings { return s.settings }

type stillSettings struct{ fyne.Settings }

func (stillSettings) ShowAnimations() bool { return false }
