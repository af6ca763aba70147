package desk

import (
	"errors"
	"strings"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/dialog"
	"fyne.io/fyne/v2/storage"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
)

// plainNumber writes a number as it is typed in the language in use.
func plainNumber(x float64) string { return view.Plain(x) }

// showSheet lays a sheet over the page. Escape or its button takes it away.
func (w *window) showSheet(title string, body fyne.CanvasObject, width float32, buttons ...fyne.CanvasObject) {
	w.layerRune = nil
	veil := canvas.NewRectangle(look.C(look.Sunk))
	r, g, b, _ := look.C(look.Sunk).RGBA()
	veil.FillColor = nrgba(r, g, b, 200)
	done := mark.NewButton(words.T("Close"), "close", w.hideSheet)
	row := append([]fyne.CanvasObject{mark.Space(0, 0)}, buttons...)
	row = append(row, done)
	scroll := mark.NewScroll(body)
	card := mark.On(look.Paper, true, mark.Pad(look.Unit*3, look.Unit*3, mark.ColumnGrow(look.Unit*2, 1,
		mark.Title(title).AtLeast(100), scroll, mark.Row(look.Unit, []float32{1}, row...))))
	w.layer.Objects = []fyne.CanvasObject{newCatcher(veil, w.hideSheet), &fyne.Container{Layout: &sheetLayout{width, body}, Objects: []fyne.CanvasObject{card}}}
	w.layer.Refresh()
	w.win.SetTitle(words.T("%s – Cordwalk", title))
	w.win.Canvas().Unfocus()
	w.win.Canvas().Focus(done)
}

// hideSheet takes the sheet away and gives the keys back to the page.
func (w *window) hideSheet() {
	if len(w.layer.Objects) == 0 {
		return
	}
	w.layer.Objects, w.layerRune = nil, nil
	w.layer.Refresh()
	w.win.SetTitle(w.title())
	w.win.Canvas().Unfocus()
	if w.page != nil {
		w.page.shown()
	}
}

// sheetLayout sets a sheet in the middle, as high as its body asks for.
type sheetLayout struct {
	width float32
	body  fyne.CanvasObject
}

func (l *sheetLayout) MinSize([]fyne.CanvasObject) fyne.Size { return fyne.Size{} }
func (l *sheetLayout) Layout(o []fyne.CanvasObject, s fyne.Size) {
	w := min(l.width*look.Scale(), s.Width-4*look.Unit)
	h := mark.HeightFor(l.body, w-6*look.Unit-10) + 2*look.Target + look.Px(look.Title)*1.5 + 8*look.Unit
	h = min(h, s.Height-4*look.Unit)
	o[0].Move(fyne.NewPos((s.Width-w)/2, (s.Height-h)/2))
	o[0].Resize(fyne.NewSize(w, h))
}

// showDetails shows what lies behind an error sentence.
func (w *window) showDetails(sentence string, err error) {
	var lines []fyne.CanvasObject
	lines = append(lines, mark.NewPara(sentence).Strong())
	if err != nil {
		for e := err; e != nil; e = errors.Unwrap(e) {
			lines = append(lines, mark.NewPara(e.Error()).In(look.InkSoft))
			break
		}
	}
	w.showSheet(words.T("What happened"), mark.Column(look.Unit, lines...), 640)
}

// askLoss asks what to do when the disk does not take the last entries.
func (w *window) askLoss(err error) {
	n := w.app.saver.State().Waiting()
	body := mark.NewPara(words.N(n, "%d entry could not be written to the disk. Closing now would lose it.", "%d entries could not be written to the disk. Closing now would lose them.", n) + " " + err.Error())
	lose := mark.NewButton(words.T("Close and lose them"), "", func() { w.app.closed(w) })
	again := mark.NewButton(words.T("Try again"), "", func() { w.hideSheet(); w.app.saver.Retry(); w.close() }).As(mark.Main)
	w.showSheet(words.T("Not yet saved"), body, 560, lose, again)
}

// askKeep asks what becomes of a page that is not kept yet when its window is closed.
func (w *window) askKeep(u unkept) {
	lose := mark.NewButton(words.T("Close without keeping"), "", func() { u.forget(); w.hideSheet(); w.close() })
	keep := mark.NewButton(words.T("Keep and close"), "tick", func() { w.hideSheet(); u.keepAnd(w.close) }).As(mark.Main)
	w.showSheet(words.T("Not kept yet"), mark.NewPara(words.T("What was typed on this page is not kept yet.")), 520, lose, keep)
	w.win.Canvas().Focus(keep)
}

// globalKeys are the keys that work on every screen.
func globalKeys() []view.KeyHelp {
	return []view.KeyHelp{
		{Keys: "F1, ?", Does: words.T("this sheet of keys")},
		{Keys: words.T("Ctrl+1 to Ctrl+6"), Does: words.T("caseload, exam, compare, course, sheet, devices")},
		{Keys: "Ctrl+F", Does: words.T("search in the caseload")},
		{Keys: "Ctrl+N", Does: words.T("new patient")},
		{Keys: "Ctrl+E", Does: words.T("edit this patient")},
		{Keys: "Ctrl+H", Does: words.T("who changed what of this patient, and when")},
		{Keys: "Ctrl+U", Does: words.T("switch the examiner")},
		{Keys: "Ctrl+T", Does: words.T("this screen again in a second window")},
		{Keys: "Ctrl+,", Does: words.T("settings")},
		{Keys: words.T("Alt+Left, Alt+Right"), Does: words.T("back and forward")},
		{Keys: words.T("Up, Down, Page Up, Page Down, space"), Does: words.T("move the page, where these keys do nothing else")},
		{Keys: words.T("Tab, then arrows"), Does: words.T("to a chart, and from mark to mark on it: each explains itself")},
		{Keys: words.T("a long press"), Does: words.T("explains a cell or a button")},
		{Keys: "Ctrl+Q", Does: words.T("close the window")},
	}
}

// showHelp shows the keys of the page and of the program.
func (w *window) showHelp() {
	var left []fyne.CanvasObject
	if p, ok := w.page.(helper); ok {
		left = append(left, mark.Heading(words.T("On this screen")))
		left = append(left, keyLines(p.help())...)
	}
	right := append([]fyne.CanvasObject{mark.Heading(words.T("Everywhere"))}, keyLines(globalKeys())...)
	right = append(right, mark.Space(1, look.Unit), mark.Heading(words.T("Marks")))
	right = append(right, legend()...)
	var body fyne.CanvasObject = mark.Column(4, right...)
	if len(left) > 0 {
		body = mark.RowTop(look.Unit*4, []float32{1, 1}, mark.Column(4, left...), mark.Column(4, right...))
	}
	caution := mark.NewPara(words.T("Cordwalk supports and never replaces a licensed veterinarian. What it says defers to them and to local rules.")).In(look.InkSoft)
	w.showSheet(words.T("Keys"), mark.Column(look.Unit*2, body, caution), 980)
}

func keyLines(list []view.KeyHelp) []fyne.CanvasObject {
	out := make([]fyne.CanvasObject, len(list))
	for i, k := range list {
		out[i] = mark.RowTop(look.Unit*1.5, []float32{1, 2.4}, mark.NewPara(view.KeyWords(k.Keys)).Strong(), mark.NewPara(k.Does))
	}
	return out
}

// legend explains the marks in their own shapes.
func legend() []fyne.CanvasObject {
	line := func(o fyne.CanvasObject, text string) fyne.CanvasObject {
		return mark.Row(look.Unit*1.5, []float32{0, 1}, mark.Sized(44, 28, center(o)), mark.NewPara(text))
	}
	bead := func(b view.Bead) fyne.CanvasObject { return mark.NewBead(b, 18) }
	ch := func(s view.Shape, hollow bool) fyne.CanvasObject {
		return mark.NewChange(view.ChangeMark{Shape: s, Hollow: hollow}, 20)
	}
	return []fyne.CanvasObject{
		line(bead(view.Bead{Tested: true, Fill: 1}), words.T("normal: the circle is full")),
		line(bead(view.Bead{Tested: true, Fill: 0.5}), words.T("the emptier, the further from normal")),
		line(bead(view.Bead{Tested: true, Fill: 0.5, Bars: 1}), words.T("a bar: more than normal; two bars: clonus")),
		line(bead(view.Bead{}), words.T("dashed: not tested")),
		line(ch(view.WedgeUp, false), words.T("better: nearer to normal")),
		line(ch(view.WedgeDown, false), words.T("worse: further from normal")),
		line(ch(view.WedgeUp, true), words.T("hollow: within what two exams differ by")),
		line(ch(view.Line, false), words.T("same")),
		line(ch(view.Ring, false), words.T("different: normal was crossed, or another kind")),
	}
}

func center(o fyne.CanvasObject) fyne.CanvasObject {
	return &fyne.Container{Layout: centred{}, Objects: []fyne.CanvasObject{o}}
}

type centred struct{}

func (centred) MinSize(o []fyne.CanvasObject) fyne.Size { return o[0].MinSize() }
func (centred) Layout(o []fyne.CanvasObject, s fyne.Size) {
	m := o[0].MinSize()
	m = fyne.NewSize(min(m.Width, s.Width), min(m.Height, s.Height))
	o[0].Move(fyne.NewPos((s.Width-m.Width)/2, (s.Height-m.Height)/2))
	o[0].Resize(m)
}

// asking is a question for a reason, without which nothing is done.
type asking struct {
	title   string
	about   fyne.CanvasObject // what would be done, and what follows from it
	hint    string            // an example of a reason
	missing string            // said where none is given
	width   float32
	does    string // words and icon of the button that does it
	icon    string
	then    func(why string)
}

// ask shows the question, with the reason under the caret.
func (w *window) ask(q asking) {
	reason := mark.NewField("", nil).Hint(q.hint)
	wrong := mark.NewPara("").In(look.Worse)
	do := func() {
		why := strings.TrimSpace(reason.Text)
		if why == "" {
			wrong.Set(q.missing)
			return
		}
		w.hideSheet()
		q.then(why)
	}
	reason.OnSubmitted = func(string) { do() }
	w.showSheet(q.title, mark.Column(look.Unit, q.about, reason, wrong), q.width, mark.NewButton(q.does, q.icon, do).As(mark.Main))
	w.win.Canvas().Focus(reason)
}

// pickFile returns the toolkit's dialog for a file of some kinds, named by the ends of their names. failed
// is said where the file cannot be opened.
func (w *window) pickFile(failed string, kinds []string, take func(path string)) *dialog.FileDialog {
	d := dialog.NewFileOpen(func(in fyne.URIReadCloser, err error) {
		if err == nil && in == nil {
			return // nothing was chosen
		}
		path := ""
		if err == nil {
			path = in.URI().Path()
			err = in.Close()
		}
		if err != nil {
			w.fail(failed, err)
			return
		}
		take(path)
	}, w.win)
	d.SetFilter(storage.NewExtensionFileFilter(kinds))
	return d
}
