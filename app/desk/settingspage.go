package desk

import (
	"context"
	"maps"
	"slices"
	"strconv"
	"strings"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// settingsPage holds how the program looks here, and what holds for the whole practice.
type settingsPage struct {
	win   *window
	after exam.Practice
	root  fyne.CanvasObject
	lists *fyne.Container
	body  *mark.Scroll
	said  *mark.Para
	pins  map[exam.ID]string // new PINs of examiners, as typed
}

func newSettingsPage(w *window) *settingsPage {
	p := &settingsPage{win: w, after: w.app.practice, pins: map[exam.ID]string{}}
	p.after.Examiners = slices.Clone(p.after.Examiners)
	p.build()
	return p
}

func (p *settingsPage) content() fyne.CanvasObject { return p.root }
func (p *settingsPage) shown()                     { p.win.win.Canvas().Unfocus() }
func (p *settingsPage) left()                      { p.win.app.keepSettings() }

func (p *settingsPage) build() {
	a := p.win.app
	modes := []string{"", string(look.Light), string(look.Dark), string(look.Contrast)}
	names := []string{words.T("as the system"), words.T("light"), words.T("dark"), words.T("high contrast")}
	theme := mark.Choice(names, modes, a.settings.Theme, func(m string) { a.settings.Theme = m; p.repaint() })
	scale := a.settings.TextScale
	if scale == 0 {
		scale = 100
	}
	shown := mark.Line(words.T("%d %%", scale))
	slider := mark.NewSlide(80, 200)
	slider.Step = 10
	slider.Value = float64(scale)
	slider.OnChanged = func(x float64) { shown.Set(words.T("%d %%", int(x))) }
	slider.OnChangeEnded = func(x float64) { a.settings.TextScale = int(x); p.repaint() }
	sizes := mark.Row(4, nil)
	for _, n := range []int{80, 100, 125, 150, 200} {
		v := n
		b := mark.NewButton(words.T("%d %%", n), "", func() { a.settings.TextScale = v; p.repaint() })
		b.Chosen = n == scale
		sizes.Add(b)
	}
	langs := words.Tags()
	lang := mark.Choice(languageNames(langs), langs, words.Language(), func(s string) {
		a.settings.Language = s
		if err := words.Use(s); err != nil {
			p.win.fail(words.T("This language cannot be used."), err)
			return
		}
		a.keepSettings()
		p.win.redress()
	})
	here := section(words.T("On this computer"),
		pair(mark.NewLabelled(words.T("Colours"), theme), mark.NewLabelled(words.T("Language"), lang)),
		mark.NewLabelled(words.T("Size of the text"), mark.Column(4, mark.Row(look.Unit, []float32{1, 0}, slider, shown), sizes)))
	field := func(name, value string, set func(string)) fyne.CanvasObject {
		return mark.NewLabelled(name, mark.NewField(value, set))
	}
	pr := &p.after
	sheetsIn := pr.Language
	if sheetsIn == "" {
		sheetsIn = "en"
	}
	practice := section(words.T("The practice"),
		pair(field(words.T("Name"), pr.Name, func(s string) { pr.Name = s }), field(words.T("Telephone"), pr.Contact.Phone, func(s string) { pr.Contact.Phone = s })),
		pair(field(words.T("E-mail"), pr.Contact.Email, func(s string) { pr.Contact.Email = s }), field(words.T("Address"), pr.Contact.Address, func(s string) { pr.Contact.Address = s })),
		pair(field(words.T("Veterinarian at night and on Sundays"), pr.OutOfHours.Name, func(s string) { pr.OutOfHours.Name = s }),
			field(words.T("Telephone at night"), pr.OutOfHours.Phone, func(s string) { pr.OutOfHours.Phone = s })),
		mark.RowTop(look.Unit*2, []float32{1, 1, 1, 1},
			mark.NewLabelled(words.T("Paper of the sheets"), mark.Choice([]string{"A4", "Letter"}, []string{"A4", "Letter"}, pr.Paper, func(s string) { pr.Paper = s })),
			mark.NewLabelled(words.T("Language of the sheets"), mark.Choice(languageNames(langs), langs, sheetsIn, func(s string) { pr.Language = s })),
			mark.NewLabelled(words.T("Weights"), mark.Choice([]string{"kg", "lb"}, []string{"kg", "lb"}, map[bool]string{false: "kg", true: "lb"}[pr.Pounds], func(s string) { pr.Pounds = s == "lb" })),
			mark.NewLabelled(words.T("Girths"), mark.Choice([]string{"cm", "in"}, []string{"cm", "in"}, map[bool]string{false: "cm", true: "in"}[pr.Inches], func(s string) { pr.Inches = s == "in" }))))
	p.lists = mark.Column(look.Unit * 3)
	p.drawLists()
	p.said = mark.NewPara("").In(look.Worse)
	keep := mark.NewButton(words.T("Keep the practice's settings"), "tick", p.keep).As(mark.Main)
	p.body = mark.NewScroll(mark.AtMost(900, mark.Column(look.Unit*3, here, practice, p.lists, p.said, mark.Left(keep), mark.Space(1, look.Unit))))
	p.root = mark.Pad(look.Unit*1.5, look.Unit*2, mark.ColumnGrow(look.Unit, 1, mark.Bar(look.Unit, mark.Title(words.T("Settings")).AtLeast(100),
		mark.NewButton(words.T("Words and logo of the sheets"), "sheet", func() { p.win.goTo(view.Route{Screen: view.ScreenPhrases}) })), p.body))
}

// repaint shows the new colours and sizes on every window.
func (p *settingsPage) repaint() {
	a := p.win.app
	a.theme()
	a.keepSettings()
	for _, w := range a.windows {
		w.redress()
	}
}

// redress builds rail, strip and page anew, for another size of text or another language.
func (w *window) redress() {
	w.rail.words()
	w.foot.update()
	w.open(w.here())
}

// person is the line of one examiner: name, initials, PIN.
func (p *settingsPage) person(x *exam.Examiner) fyne.CanvasObject {
	pin := mark.NewField(p.pins[x.ID], func(s string) { p.pins[x.ID] = s }).Hint(words.T("PIN, if wanted"))
	pin.Password = true
	last := fyne.CanvasObject(mark.Space(1, 1))
	if x.PINHash != "" {
		pin.Hint(words.T("another PIN"))
		last = mark.NewButton(words.T("Remove the PIN"), "open-lock", func() {
			x.PINHash = ""
			delete(p.pins, x.ID)
			p.drawLists()
		})
	}
	return mark.Row(look.Unit, []float32{2, 0.8, 1.2, 1.4},
		mark.NewField(x.Name, func(s string) { x.Name = s }).Hint(words.T("name")),
		mark.NewField(x.Initials, func(s string) { x.Initials = s }).Hint(words.T("initials")), pin, last)
}

// drawLists draws the examiners and the practice's own protocols.
func (p *settingsPage) drawLists() {
	pr := &p.after
	id := p.win.app.records.NewID
	var people []fyne.CanvasObject
	for i := range pr.Examiners {
		people = append(people, p.person(&pr.Examiners[i]))
	}
	people = append(people, mark.NewPara(words.T("A PIN is asked for when somebody switches to that name, so that findings do not go under another's by mistake. It protects nothing: a forgotten one is removed here.")).In(look.InkSoft))
	addPerson := mark.NewButton(words.T("Add an examiner"), "add", func() {
		pr.Examiners = append(append([]exam.Examiner(nil), pr.Examiners...), exam.Examiner{ID: id()})
		p.drawLists()
	})
	var own []fyne.CanvasObject
	for i := range pr.Protocols {
		x := &pr.Protocols[i]
		at := i
		own = append(own, mark.Column(4, mark.Row(look.Unit, []float32{1, 0}, mark.NewField(x.Name, func(s string) { x.Name = s }).Hint(words.T("name of the protocol")),
			mark.NewButton("", "close", func() {
				pr.Protocols = append(pr.Protocols[:at:at], pr.Protocols[at+1:]...)
				p.drawLists()
			}).As(mark.Quiet).WithTip(words.T("Remove"))), p.protocolItems(x)))
	}
	addProtocol := mark.NewButton(words.T("Add a protocol"), "add", func() {
		n := len(pr.Protocols) + 1
		pr.Protocols = append(append([]exam.Protocol(nil), pr.Protocols...), exam.Protocol{Key: "own-" + strconv.Itoa(n), Name: words.T("Own protocol %d", n), Items: exam.Protocols()[1].Items})
		p.drawLists()
	})
	head := func(title string, b fyne.CanvasObject) fyne.CanvasObject {
		return mark.Bar(look.Unit, mark.Heading(title).AtLeast(60), b)
	}
	if len(own) == 0 {
		own = append(own, mark.NewPara(words.T("Full spinal exam, weekly recheck and thoracic limb come with the program. A protocol of your own holds the tests you choose.")).In(look.InkSoft))
	}
	p.lists.Objects = []fyne.CanvasObject{
		mark.Column(look.Unit, append([]fyne.CanvasObject{head(words.T("Examiners"), addPerson), mark.Rule()}, people...)...),
		mark.Column(look.Unit, append([]fyne.CanvasObject{head(words.T("Protocols of the practice"), addProtocol), mark.Rule()}, own...)...),
	}
	p.lists.Refresh()
	if p.body != nil {
		p.body.Reflow()
	}
}

// protocolItems lets tests be taken in and out of a protocol.
func (p *settingsPage) protocolItems(x *exam.Protocol) fyne.CanvasObject {
	has := map[string]bool{}
	for _, w := range x.Items {
		has[w] = true
	}
	var out []fyne.CanvasObject
	for _, w := range x.Items {
		word := w
		name := word
		if i, err := exam.ParseItem(word); err == nil {
			name = view.ItemName(i)
		} else if m, err := exam.ParseMeasure(word); err == nil {
			name = view.MeasureName(m)
		}
		out = append(out, mark.NewButton(name, "close", func() {
			var rest []string
			for _, y := range x.Items {
				if y != word {
					rest = append(rest, y)
				}
			}
			x.Items = rest
			p.drawLists()
		}))
	}
	var names, keys []string
	for _, i := range exam.Items() {
		if !has[i.String()] {
			names, keys = append(names, view.ItemName(i)), append(keys, i.String())
		}
	}
	for _, m := range exam.Measures() {
		if !has[m.String()] {
			names, keys = append(names, view.MeasureName(m)), append(keys, m.String())
		}
	}
	add := mark.Choice(names, keys, "", func(k string) {
		x.Items = append(append([]string(nil), x.Items...), k)
		p.drawLists()
	})
	add.PlaceHolder = words.T("Add a test")
	out = append(out, mark.Sized(220, look.Target, add))
	return mark.Wrapped(4, out...)
}

func (p *settingsPage) keep() {
	a := p.win.app
	after := p.after
	after.Name = strings.TrimSpace(after.Name)
	after.Contact.Name = after.Name
	var people []exam.Examiner
	for _, e := range after.Examiners {
		e.Name = strings.TrimSpace(e.Name)
		if e.Name == "" {
			continue
		}
		if e.Initials == "" {
			e.Initials = view.Initials(e.Name)
		}
		people = append(people, e)
	}
	after.Examiners = people
	switch {
	case after.Name == "":
		p.said.Set(words.T("The practice needs a name; it stands on every sheet."))
		return
	case len(people) == 0:
		p.said.Set(words.T("At least one examiner is needed; every finding carries a name."))
		return
	}
	for _, x := range after.Protocols {
		if err := x.Validate(); err != nil {
			p.said.Set(err.Error())
			return
		}
	}
	for _, e := range people {
		if pin := p.pins[e.ID]; pin != "" && view.CheckPIN(pin) != nil {
			p.said.Set(words.T("%s: %s", e.Name, view.CheckPIN(pin).Error()))
			return
		}
	}
	before, records, examiner := a.practice, a.records, a.examiner
	pins := maps.Clone(p.pins)
	a.work(func(ctx context.Context) (func(), error) {
		for i, e := range after.Examiners {
			if pin := pins[e.ID]; pin != "" {
				hash, err := view.HashPIN(pin)
				if err != nil {
					return nil, err
				}
				after.Examiners[i].PINHash = hash
			}
		}
		if err := records.SavePractice(ctx, examiner, before, after); err != nil {
			return nil, err
		}
		return func() {
			a.practice = after
			p.after = after
			p.after.Examiners = slices.Clone(after.Examiners)
			clear(p.pins)
			p.said.Set("")
			p.drawLists()
			a.renamed(before)
			p.win.foot.say(words.T("The practice's settings are kept."))
		}, nil
	}, func(err error) { p.win.fail(words.T("The practice's settings could not be kept."), err) })
}

// languageNames are the languages as their speakers call them.
func languageNames(tags []string) []string {
	names := map[string]string{"en": "English", "de": "Deutsch", "es": "Español", "fr": "Français"}
	out := make([]string, len(tags))
	for i, t := range tags {
		out[i] = t
		if n, ok := names[t]; ok {
			out[i] = n
		}
	}
	return out
}
