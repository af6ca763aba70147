// Command empty opens a window with nothing in it, in the program's theme: what the toolkit alone takes.
package main

import (
	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/app"
	"fyne.io/fyne/v2/canvas"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/still"
)

func main() {
	a := still.App(app.NewWithID("example.cordwalk.empty"))
	a.Settings().SetTheme(look.New(look.Light, 1))
	w := a.NewWindow("Starting")
	// Like the caseload, it has its name once the drawing loop runs, not when the frame is mapped.
	a.Lifecycle().SetOnStarted(func() { fyne.Do(func() { w.SetTitle("Empty – Cordwalk") }) })
	w.SetContent(canvas.NewRectangle(look.C(look.Paper)))
	w.Resize(fyne.NewSize(1280, 720))
	w.ShowAndRun()
}
