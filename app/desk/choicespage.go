package desk

import (
	"context"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// choicesPage shows fields with several values, side by side with who wrote them; picking one is a change.
type choicesPage struct {
	win   *window
	store *storage.Store
	of    exam.ID
	list  []view.Choice
	read  bool
	busy  bool
	body  *mark.Scroll
	root  fyne.CanvasObject
}

func newChoicesPage(w *window) *choicesPage {
	p := &choicesPage{win: w, of: w.file.Patient.ID, body: mark.NewScroll(mark.Column(0))}
	if s, ok := w.app.records.(stored); ok {
		p.store = s.Store()
	}
	back := mark.NewButton(words.T("Back"), "", func() {
		if r, ok := w.trail.Back(); ok {
			w.open(r)
		}
	}).As(mark.Quiet)
	p.root = mark.Pad(look.Unit*1.5, look.Unit*2, mark.ColumnGrow(look.Unit*2, 1, mark.Bar(look.Unit, mark.Title(words.T("Choose a value")).AtLeast(80), back), p.body))
	p.load()
	return p
}

func (p *choicesPage) content() fyne.CanvasObject { return p.root }
func (p *choicesPage) shown()                     { p.win.win.Canvas().Unfocus() }
func (p *choicesPage) left()                      {}

func (p *choicesPage) typedKey(k fyne.KeyName) bool { return scrollKey(p.body, k) }

// scrollKey moves a page by the keys that move a page.
func scrollKey(s *mark.Scroll, k fyne.KeyName) bool {
	switch k {
	case fyne.KeyDown:
		s.By(80)
	case fyne.KeyUp:
		s.By(-80)
	case fyne.KeyPageDown, fyne.KeySpace:
		s.By(400)
	case fyne.KeyPageUp:
		s.By(-400)
	default:
		return false
	}
	return true
}

// load reads what is to be chosen.
func (p *choicesPage) load() {
	if p.store == nil {
		p.read = true
		p.build()
		return
	}
	of, units := p.of, p.win.app.practice.Units()
	p.win.app.work(func(context.Context) (func(), error) {
		r, err := p.store.Patient(of)
		if err != nil {
			return nil, err
		}
		list := view.NewChoices(r, units)
		return func() { p.list, p.read = list, true; p.build() }, nil
	}, func(err error) { p.win.fail(words.T("The file of this animal cannot be opened."), err) })
}

func (p *choicesPage) build() {
	var parts []fyne.CanvasObject
	for _, c := range p.list {
		parts = append(parts, p.one(c))
	}
	if len(parts) == 0 && p.read {
		parts = append(parts, mark.NewPara(words.T("There is nothing to choose: every entry of this animal has one value.")))
	}
	p.body.SetContent(mark.Column(look.Unit*3, parts...))
}

// one is a field with its values beside each other.
func (p *choicesPage) one(c view.Choice) fyne.CanvasObject {
	var cards []fyne.CanvasObject
	for i, o := range c.Options {
		k := i
		lines := []fyne.CanvasObject{mark.NewPara(o.Words).As(look.Head).Strong(), mark.NewPara(o.Who).In(look.InkSoft)}
		if o.Note != "" {
			lines = append(lines, cautionLine(o.Note))
		}
		b := mark.NewButton(words.T("This one holds"), "tick", func() { p.pick(c, k) })
		lines = append(lines, mark.Left(b))
		cards = append(cards, mark.On(look.Sunk, true, mark.Pad(look.Unit*1.5, look.Unit*1.5, mark.Column(look.Unit, lines...))))
	}
	weights := make([]float32, len(cards))
	for i := range weights {
		weights[i] = 1
	}
	var side fyne.CanvasObject = mark.RowTop(look.Unit*2, weights, cards...)
	if len(cards) > 3 || look.Scale() > 1.5 {
		side = mark.Column(look.Unit, cards...)
	}
	return mark.Column(look.Unit, mark.NewPara(words.T("%s: %s", c.Where, c.Field)).As(look.Head).Strong(), mark.NewPara(c.Why).In(look.InkSoft), side)
}

// pick writes the choice; in a closed visit it asks why first.
func (p *choicesPage) pick(c view.Choice, k int) {
	if !c.Closed {
		p.resolve(c, k, "")
		return
	}
	p.win.ask(asking{
		title: words.T("Choose in a closed visit"),
		about: mark.NewPara(words.T("%s: %s", c.Field, c.Options[k].Words)).Strong(),
		hint:  words.T("Why the visit is changed after closing"), missing: words.T("An amendment needs a reason."),
		width: 560, does: words.T("Keep"), icon: "tick",
		then: func(why string) { p.resolve(c, k, why) },
	})
}

func (p *choicesPage) resolve(c view.Choice, k int, why string) {
	if p.busy {
		return
	}
	p.busy = true
	a := p.win.app
	who, of := a.examiner, p.of
	a.work(func(ctx context.Context) (func(), error) {
		if _, err := p.store.Resolve(ctx, who, c.Conflict, k, why); err != nil {
			return nil, err
		}
		f, err := a.records.File(of)
		return func() {
			p.busy = false
			if p.win.page == page(p) {
				p.win.file = f
				p.win.strip.update()
				p.win.layout()
				p.win.foot.say(words.T("Kept: %s. The other value stays in the history.", c.Field))
			}
			p.load()
		}, err
	}, func(err error) { p.busy = false; p.win.fail(words.T("The choice could not be kept."), err) })
}
