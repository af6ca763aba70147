package desk

import (
	"context"
	"fmt"
	"strings"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/lang"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// bareFrame is how the pages without a rail stand: in the middle, with the two animals beside the name.
func bareFrame(title string, lines ...fyne.CanvasObject) fyne.CanvasObject {
	head := mark.Row(look.Unit*2, []float32{1, 0, 0},
		mark.Title(title).AtLeast(100), mark.NewSpecies(exam.Dog, 72), mark.NewSpecies(exam.Cat, 72))
	body := append([]fyne.CanvasObject{head, mark.Rule()}, lines...)
	return mark.NewScroll(mark.Pad(look.Unit*2, look.Unit*4, mark.AtMost(720, mark.Column(look.Unit*1.5, body...))))
}

// firstRunPage asks the three questions of the first start, or opens the demo practice.
type firstRunPage struct {
	win    *window
	form   *view.FirstRun
	fields map[string]*mark.Labelled
	first  *mark.Field
	root   fyne.CanvasObject
	busy   bool
	said   *mark.Para
}

func newFirstRunPage(w *window, dir string) *firstRunPage {
	p := &firstRunPage{win: w, form: view.NewFirstRun(dir), fields: map[string]*mark.Labelled{}}
	if _, region, ok := strings.Cut(lang.SystemLocale().LanguageString(), "-"); ok {
		p.form.Region = region
	}
	field := func(key, name, value, hint string, set func(string)) *mark.Field {
		f := mark.NewField(value, set).Hint(hint)
		p.fields[key] = mark.NewLabelled(name, f)
		return f
	}
	p.first = field("practice", words.T("1. What is the practice called?"), "", words.T("Name of the practice; it stands on every sheet"), func(s string) { p.form.Practice = s })
	field("phone", words.T("Telephone of the practice"), "", words.T("For the sheet; can come later"), func(s string) { p.form.Phone = s })
	field("examiner", words.T("2. Who examines?"), "", words.T("Your name; more people can be added later"), func(s string) { p.form.Examiner = s })
	field("folder", words.T("3. Where do the data live?"), dir, words.T("A folder on this computer"), func(s string) { p.form.Folder = s })
	pass := field("passphrase", words.T("Passphrase"), "", words.T("Several words, easy to keep"), func(s string) { p.form.Passphrase = s })
	again := field("again", words.T("Passphrase again"), "", "", func(s string) { p.form.Again = s })
	pass.Password, again.Password = true, true
	none := mark.Tick(words.T("Leave the data unprotected on this computer"), false, func(on bool) {
		p.form.Unprotected = on
		if on {
			pass.Disable()
			again.Disable()
		} else {
			pass.Enable()
			again.Enable()
		}
	})
	p.said = mark.NewPara("").In(look.Worse)
	start := mark.NewButton(words.T("Start my practice"), "tick", p.start).As(mark.Main)
	demo := mark.NewButton(words.T("Open the demo practice"), "eye", p.demo)
	join := mark.NewButton(words.T("Join a practice"), "devices", func() { w.bare(newJoinPage(w, dir)) })
	p.root = bareFrame(words.T("Welcome to Cordwalk"),
		mark.NewPara(words.T("A weekly neurological exam, kept safe on this computer and compared with the one before. Three questions, then the caseload.")),
		mark.RowTop(look.Unit*2, []float32{1.4, 1}, p.fields["practice"], p.fields["phone"]),
		p.fields["examiner"],
		p.fields["folder"],
		mark.RowTop(look.Unit*2, []float32{1, 1}, p.fields["passphrase"], p.fields["again"]),
		none,
		mark.NewPara(words.T("Without the passphrase nobody can read the data, and nobody can bring them back: keep it where you will find it.")).In(look.InkSoft),
		p.said,
		mark.Row(look.Unit, []float32{0, 1, 0, 0}, start, mark.Space(1, 1), join, demo),
		mark.NewPara(words.T("The demo practice is invented, lies in a folder of its own and is marked as demo on every screen.")).In(look.InkSoft),
		mark.NewPara(words.T("Cordwalk supports and never replaces a licensed veterinarian.")).In(look.InkSoft))
	return p
}

func (p *firstRunPage) content() fyne.CanvasObject { return p.root }
func (p *firstRunPage) shown()                     { p.win.win.Canvas().Focus(p.first) }
func (p *firstRunPage) left()                      {}

func (p *firstRunPage) start() {
	if p.busy {
		return
	}
	a := p.win.app
	practice, bad := p.form.Check(zoneName(a.now().Location()))
	for key, f := range p.fields {
		f.Wrong(bad[key])
	}
	if bad.Any() {
		return
	}
	p.busy = true
	p.said.In(look.Ink).Set(words.T("Making the practice…"))
	form := *p.form
	a.work(func(context.Context) (func(), error) {
		pass := []byte(form.Passphrase)
		if form.Unprotected {
			pass = nil
		}
		r, err := a.opener.Create(strings.TrimSpace(form.Folder), pass, practice, strings.TrimSpace(form.Examiner))
		if err != nil {
			return nil, err
		}
		return func() {
			a.settings.Examiner = strings.TrimSpace(form.Examiner)
			a.use(p.win, r, practice, strings.TrimSpace(form.Folder))
		}, nil
	}, p.failed)
}

func (p *firstRunPage) demo() {
	if p.busy {
		return
	}
	p.busy = true
	a := p.win.app
	a.demo(p.win, a.opener.DemoDir(), func(err error) { p.win.bare(p); p.failed(err) })
}

func (p *firstRunPage) failed(err error) {
	p.busy = false
	p.said.In(look.Worse).Set(sentence(err.Error()))
}

// unlockPage asks for the passphrase of a store.
type unlockPage struct {
	win  *window
	dir  string
	pass *mark.Field
	box  *mark.Labelled
	root fyne.CanvasObject
}

func newUnlockPage(w *window, dir string) *unlockPage {
	p := &unlockPage{win: w, dir: dir, pass: mark.NewField("", nil)}
	p.pass.Password = true
	p.pass.OnSubmitted = func(string) { p.open() }
	p.box = mark.NewLabelled(words.T("Passphrase"), p.pass)
	p.root = bareFrame(words.T("This practice is locked"),
		mark.NewPara(words.T("Its data lie in %s.", dir)).In(look.InkSoft),
		p.box,
		mark.Row(look.Unit, []float32{0, 1, 0}, mark.NewButton(words.T("Open"), "open-lock", p.open).As(mark.Main), mark.Space(1, 1),
			mark.NewButton(words.T("Another practice"), "", func() { w.bare(newFirstRunPage(w, w.app.opener.DefaultDir())) })))
	return p
}

func (p *unlockPage) content() fyne.CanvasObject { return p.root }
func (p *unlockPage) shown()                     { p.win.win.Canvas().Focus(p.pass) }
func (p *unlockPage) left()                      {}
func (p *unlockPage) open()                      { p.win.app.open(p.win, p.dir, []byte(p.pass.Text)) }
func (p *unlockPage) wrong(err error)            { p.box.Wrong(sentence(err.Error())) }

// openingPage shows that something long is under way.
type openingPage struct {
	app  *App
	root fyne.CanvasObject
	bar  *widget.ProgressBar
	what *mark.Para
}

func newOpeningPage(a *App, title string) *openingPage {
	p := &openingPage{app: a, bar: widget.NewProgressBar(), what: mark.NewPara(" ").In(look.InkSoft)}
	p.bar.Hide()
	p.root = bareFrame(title, p.what, p.bar)
	return p
}

func (p *openingPage) content() fyne.CanvasObject { return p.root }
func (p *openingPage) shown()                     {}
func (p *openingPage) left()                      {}

// progress may be called from any goroutine.
func (p *openingPage) progress(what string, done, total int64) {
	p.app.onUI(func() {
		if total > 0 {
			p.bar.Show()
			p.bar.SetValue(float64(done) / float64(total))
			what = fmt.Sprintf("%s %d / %d", what, done, total)
		}
		p.what.Set(what)
	})
}

// failedPage says why a practice cannot be opened, and what can be done.
type failedPage struct{ root fyne.CanvasObject }

func newFailedPage(w *window, dir string, err error) *failedPage {
	again := mark.NewButton(words.T("Try again"), "", func() { w.app.open(w, dir, nil) }).As(mark.Main)
	other := mark.NewButton(words.T("Another practice"), "", func() { w.bare(newFirstRunPage(w, w.app.opener.DefaultDir())) })
	return &failedPage{bareFrame(words.T("The practice cannot be opened"),
		mark.NewPara(sentence(err.Error())), mark.NewPara(words.T("Its data lie in %s; nothing in there was changed.", dir)).In(look.InkSoft),
		mark.Row(look.Unit, []float32{0, 1, 0}, again, mark.Space(1, 1), other))}
}

func (p *failedPage) content() fyne.CanvasObject { return p.root }
func (p *failedPage) shown()                     {}
func (p *failedPage) left()                      {}
