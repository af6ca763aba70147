package desk

import (
	"bytes"
	"context"
	"errors"
	"image"
	"image/color"
	"io"
	"os"
	"reflect"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// phrasePage answers: what do our sheets say, in our own words and under which logo?
type phrasePage struct {
	win    *window
	book   *view.PhraseBook
	kept   exam.Practice // what the store has
	saving bool
	lines  []*phraseLine
	logo   *fyne.Container
	speech *fyne.Container // the languages
	body   *mark.Scroll
	undoer *mark.Button
	root   fyne.CanvasObject
}

func newPhrasePage(w *window) *phrasePage {
	p := &phrasePage{win: w, book: view.NewPhraseBook(w.app.practice, ""), kept: w.app.practice}
	back := mark.NewButton(words.T("Settings"), "left", func() { w.goTo(view.Route{Screen: view.ScreenSettings}) }).As(mark.Quiet)
	p.undoer = mark.NewButton(words.T("Undo"), "undo", func() { p.undo(false) }).WithTip(words.T("Ctrl+Z. Ctrl+Shift+Z does it again."))
	p.logo, p.speech = mark.Column(look.Unit), mark.Column(0)
	column := mark.Column(look.Unit*2,
		section(words.T("Logo"), p.logo),
		mark.Column(look.Unit, mark.Heading(words.T("Sentences")).AtLeast(60), mark.Rule(),
			mark.NewPara(words.T("What you leave empty stands in the standard words. Words in quotes such as ‹animal› are filled in on each sheet.")).In(look.InkSoft),
			p.speech))
	for _, l := range p.book.Lines() {
		x := newPhraseLine(p, l.Key)
		p.lines = append(p.lines, x)
		column.Add(x.root)
	}
	column.Add(mark.Space(1, look.Unit))
	p.body = mark.NewScroll(mark.AtMost(900, column))
	p.root = mark.Pad(look.Unit*1.5, look.Unit*2, mark.ColumnGrow(look.Unit, 1, mark.Bar(look.Unit, mark.Title(words.T("Words and logo of the sheets")).AtLeast(120), back, p.undoer), p.body))
	p.fill()
	return p
}

func (p *phrasePage) content() fyne.CanvasObject { return p.root }
func (p *phrasePage) shown()                     { p.win.win.Canvas().Unfocus() }

// left keeps what was typed and not yet left.
func (p *phrasePage) left() {
	for _, l := range p.lines {
		l.keep()
	}
}

func (p *phrasePage) help() []view.KeyHelp {
	return []view.KeyHelp{
		{Keys: "Tab", Does: words.T("next sentence")},
		{Keys: "Ctrl+Z", Does: words.T("undo")},
		{Keys: words.T("Up, Down"), Does: words.T("scroll the page")},
	}
}

func (p *phrasePage) typedKey(k fyne.KeyName) bool {
	switch k {
	case fyne.KeyDown:
		p.body.By(80)
	case fyne.KeyUp:
		p.body.By(-80)
	default:
		return false
	}
	return true
}

// undo takes the last change back, or does it again.
func (p *phrasePage) undo(redo bool) {
	if !p.book.Undo(redo) {
		p.win.foot.say(words.T("There is nothing to undo."))
		return
	}
	p.fill()
	p.save()
}

// fill shows the book as it is.
func (p *phrasePage) fill() {
	for i, l := range p.book.Lines() {
		p.lines[i].set(l)
	}
	tags := words.Tags()
	write := mark.Choice(languageNames(tags), tags, p.book.Practice().Language, func(tag string) {
		p.book.WriteIn(tag)
		p.book.SetLang(tag)
		p.fill()
		p.save()
	})
	show := mark.Choice(languageNames(tags), tags, p.book.Lang(), func(tag string) { p.book.SetLang(tag); p.fill() })
	p.speech.Objects = []fyne.CanvasObject{pair(mark.NewLabelled(words.T("Sheets are written in"), write), mark.NewLabelled(words.T("Sentences shown in"), show))}
	p.speech.Refresh()
	p.drawLogo()
	p.body.Reflow()
}

func (p *phrasePage) drawLogo() {
	choose := mark.NewButton(words.T("Choose a picture"), "add", p.pickLogo)
	data := p.book.Practice().Logo
	if len(data) == 0 {
		p.logo.Objects = []fyne.CanvasObject{mark.NewPara(words.T("A PNG or JPEG of at most %d KiB stands at the top right of the owner's sheet. Choose it, or drag it here.", exam.MaxLogo>>10)).In(look.InkSoft), mark.Left(choose)}
		p.logo.Refresh()
		return
	}
	var shown fyne.CanvasObject
	if img, _, err := image.Decode(bytes.NewReader(data)); err == nil {
		i := canvas.NewImageFromImage(img)
		i.FillMode, i.ScaleMode = canvas.ImageFillContain, canvas.ImageScaleSmooth
		// On paper it is at most 130 by 38 points; here twice as large, on paper's white.
		shown = mark.Left(mark.Sized(260, 76, &fyne.Container{Layout: stackLayout{}, Objects: []fyne.CanvasObject{canvas.NewRectangle(color.White), i}}))
	} else {
		shown = mark.NewPara(words.T("The picture cannot be shown: choose another one.")).In(look.Worse)
	}
	remove := mark.NewButton(words.T("Remove the logo"), "close", func() { p.setLogo(nil) })
	choose.SetWords(words.T("Choose another picture"))
	p.logo.Objects = []fyne.CanvasObject{shown, mark.Wrapped(look.Unit, choose, remove)}
	p.logo.Refresh()
}

func (p *phrasePage) pickLogo() {
	p.win.pickFile(words.T("The file cannot be opened."), []string{".png", ".PNG", ".jpg", ".jpeg", ".JPG", ".JPEG"}, p.takeLogo).Show()
}

// dropped takes a picture that was dragged into the window.
func (p *phrasePage) dropped(files []fyne.URI) {
	for _, f := range files {
		if f.Scheme() == "file" {
			p.takeLogo(f.Path())
			return
		}
	}
}

// takeLogo reads a picture, no more of it than a logo may have.
func (p *phrasePage) takeLogo(name string) {
	p.win.app.work(func(context.Context) (func(), error) {
		f, err := os.Open(name)
		if err != nil {
			return nil, err
		}
		data, err := io.ReadAll(io.LimitReader(f, 64<<20))
		if err = errors.Join(err, f.Close()); err != nil {
			return nil, err
		}
		return func() { p.setLogo(data) }, nil
	}, func(err error) { p.win.fail(words.T("The file cannot be opened."), err) })
}

func (p *phrasePage) setLogo(data []byte) {
	if err := p.book.SetLogo(data); err != nil {
		p.win.fail(sentence(err.Error()), nil)
		return
	}
	p.drawLogo()
	p.body.Reflow()
	p.save()
}

// save writes what the book holds now; a change that comes while it writes is written after it.
func (p *phrasePage) save() {
	if p.saving {
		return
	}
	p.saving = true
	a := p.win.app
	before, after, records, who := p.kept, p.book.Practice(), a.records, a.examiner
	a.work(func(ctx context.Context) (func(), error) {
		if err := records.SavePractice(ctx, who, before, after); err != nil {
			return nil, err
		}
		return func() {
			p.saving, p.kept = false, after
			a.practice.Phrases, a.practice.Logo, a.practice.Language = after.Phrases, after.Logo, after.Language
			p.win.foot.say(words.T("Kept. Ctrl+Z takes it back."))
			if now := p.book.Practice(); !reflect.DeepEqual(now, after) {
				p.save()
			}
		}, nil
	}, func(err error) {
		p.saving = false
		p.win.fail(words.T("The practice's settings could not be kept."), err)
	})
}

// phraseLine is one sentence: the standard words, the practice's own, how they read.
type phraseLine struct {
	page     *phrasePage
	key      string
	standard *mark.Para
	own      *mark.Field
	about    *mark.Para
	turn     *mark.Button
	root     fyne.CanvasObject
	line     view.PhraseLine
}

func newPhraseLine(p *phrasePage, key string) *phraseLine {
	l := &phraseLine{page: p, key: key, standard: mark.NewPara(""), about: mark.NewPara("").As(look.Small)}
	l.own = mark.NewArea("", 2, func(string) { l.judge() })
	l.own.OnLeave = l.keep
	l.turn = mark.NewButton("", "", l.turned)
	l.root = mark.Column(4, l.standard, mark.RowTop(look.Unit, []float32{1, 0}, l.own, mark.Sized(150, look.Target, l.turn)), l.about)
	return l
}

// set shows a line of the book.
func (l *phraseLine) set(x view.PhraseLine) {
	l.line = x
	l.standard.Set(x.Standard)
	l.own.Hint(words.T("Own words"))
	if l.own.Text != x.Own {
		l.own.SetText(x.Own)
	}
	l.judge()
}

// judge says how the words would stand on the sheet, or what is wrong with them.
func (l *phraseLine) judge() {
	l.turn.SetWords(words.T("Reword"))
	if l.own.Text != "" {
		l.turn.SetWords(words.T("Standard words"))
	}
	said, err := l.page.book.Sample(l.key, l.own.Text)
	l.about.Token = look.InkSoft
	if err != nil {
		said, l.about.Token = sentence(err.Error()), look.Worse
	}
	if l.about.Words != said {
		l.about.Set(said)
		if l.page.body != nil {
			l.page.body.Reflow()
		}
	}
}

// turned goes back to the standard words, or offers them to be reworded.
func (l *phraseLine) turned() {
	if l.own.Text == "" {
		l.own.SetText(l.line.Standard)
		l.page.win.win.Canvas().Focus(l.own)
		return
	}
	l.own.SetText("")
	l.keep()
}

// keep writes the words that were typed; what cannot stand on a sheet stays on the screen only.
func (l *phraseLine) keep() {
	own := l.own.Text
	if own == l.line.Standard {
		own = ""
	}
	changed, err := l.page.book.Reword(l.key, own)
	if err != nil || !changed {
		return
	}
	for _, x := range l.page.book.Lines() {
		if x.Key == l.key {
			l.set(x)
		}
	}
	l.page.save()
}
