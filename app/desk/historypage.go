package desk

import (
	"context"
	"time"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
)

// historyMost is how many changes are drawn at once; the search reaches the others.
const historyMost = 150

// historyPage shows who changed what of a patient, and when.
type historyPage struct {
	win   *window
	list  *view.History
	most  int
	find  *mark.Field
	found *mark.Para
	all   *mark.Button
	body  *mark.Scroll
	root  fyne.CanvasObject
}

func newHistoryPage(w *window) *historyPage {
	p := &historyPage{win: w, most: historyMost, body: mark.NewScroll(mark.Column(0)), found: mark.NewPara("").In(look.InkSoft)}
	p.find = mark.NewField("", func(s string) {
		if p.list != nil {
			p.most = historyMost
			p.list.Search(s)
			p.build()
		}
	}).Hint(words.T("Search: a test, a day, a person"))
	p.find.OnEscape = func() { p.find.SetText(""); w.win.Canvas().Unfocus() }
	p.all = mark.NewButton(words.T("All entries"), "", func() { p.list.Of(-1); p.build() })
	p.all.Hide()
	p.root = mark.Pad(look.Unit*1.5, look.Unit*2, mark.ColumnGrow(look.Unit, 2,
		mark.Bar(look.Unit, mark.Title(words.T("History")).AtLeast(80), p.all), mark.Row(look.Unit*2, []float32{1, 1}, p.find, p.found), p.body))
	s, ok := w.app.records.(stored)
	if !ok {
		return p
	}
	id, visits := w.file.Patient.ID, w.file.Visits
	zone, err := time.LoadLocation(w.app.practice.Zone)
	if err != nil {
		zone = time.Local
	}
	units := w.app.practice.Units()
	w.app.work(func(context.Context) (func(), error) {
		entries, err := s.Store().History(id)
		if err != nil {
			return nil, err
		}
		list := view.NewHistory(entries, visits, zone, units)
		return func() { p.list = list; p.list.Search(p.find.Text); p.build() }, nil
	}, func(err error) { w.fail(words.T("The history cannot be read."), err) })
	return p
}

func (p *historyPage) content() fyne.CanvasObject   { return p.root }
func (p *historyPage) shown()                       { p.win.win.Canvas().Focus(p.find) }
func (p *historyPage) left()                        {}
func (p *historyPage) typedKey(k fyne.KeyName) bool { return scrollKey(p.body, k) }
func (p *historyPage) help() []view.KeyHelp {
	return []view.KeyHelp{
		{Keys: "Tab", Does: words.T("to the entries")},
		{Keys: "Enter", Does: words.T("only what was entered for this one, or all again")},
		{Keys: "Escape", Does: words.T("forget the search")},
	}
}

func (p *historyPage) build() {
	lines := p.list.Lines()
	p.found.Set(words.N(len(lines), "%d entry", "%d entries", len(lines)))
	p.all.Hidden = !p.list.One()
	p.all.Refresh()
	var rows []fyne.CanvasObject
	day := ""
	for i, l := range lines {
		if i == p.most {
			rows = append(rows, mark.Left(mark.NewButton(words.T("Show more"), "", func() { p.most += historyMost; p.build() })))
			break
		}
		if l.Day != day {
			day = l.Day
			rows = append(rows, mark.Pad(look.Unit, 0, mark.Heading(day).AtLeast(60)), mark.Rule())
		}
		at := i
		rows = append(rows, newPressable(historyLine(l), words.T("Only what was entered for this one, or all again"), func() {
			p.most = historyMost
			p.list.Of(at)
			p.build()
		}), mark.Rule())
	}
	p.body.SetContent(mark.Column(0, rows...))
}

func historyLine(l view.HistoryLine) fyne.CanvasObject {
	what := []fyne.CanvasObject{mark.NewPara(l.After)}
	if l.Before != "" {
		what = append(what, mark.NewPara(words.T("before: %s", l.Before)).In(look.InkSoft).As(look.Small))
	}
	how := l.How
	if l.State != "" {
		how = words.T("%s; %s", how, l.State)
	}
	return mark.Pad(look.Unit, look.Unit/2, mark.RowTop(look.Unit*1.5, []float32{0, 1.5, 2, 1.6},
		mark.Column(0, mark.Line(l.Clock)),
		mark.Column(0, mark.NewPara(l.Field), mark.NewPara(l.Where).In(look.InkSoft).As(look.Small)),
		mark.Column(0, what...),
		mark.Column(0, mark.NewPara(l.Who), mark.NewPara(how).In(look.InkSoft).As(look.Small))))
}
