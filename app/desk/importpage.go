package desk

import (
	"context"
	"os"
	"strings"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
)

// importPage takes animals over from a table: the columns are matched, every row is looked at,
// nothing is written until it is confirmed, and one undo takes all of it back.
type importPage struct {
	win    *window
	file   *mark.Field
	plan   *view.ImportPlan
	done   *view.Imported
	root   fyne.CanvasObject
	said   *mark.Para
	cols   *fyne.Container
	list   *widget.List
	parts  *fyne.Container
	scroll *mark.Scroll // where text is large; nil otherwise
	start  *mark.Button
	back   *mark.Button
	busy   bool
}

func newImportPage(w *window) *importPage {
	p := &importPage{win: w, said: mark.NewPara(""), cols: mark.Wrapped(look.Unit * 1.5)}
	p.file = mark.NewField("", nil).Hint(words.T("A CSV or XLSX file; it can also be dropped on this window"))
	p.file.OnSubmitted = func(string) { p.read() }
	read := mark.NewButton(words.T("Look at it"), "eye", p.read)
	browse := mark.NewButton(words.T("Choose a file"), "search", p.choose)
	p.start = mark.NewButton(words.T("Import"), "tick", p.apply).As(mark.Main)
	p.back = mark.NewButton(words.T("Take the whole import back"), "undo", func() { p.undo(false) })
	p.list = widget.NewList(func() int {
		if p.plan == nil {
			return 0
		}
		return len(p.plan.Rows)
	}, func() fyne.CanvasObject { return newImportLine(p) }, func(i widget.ListItemID, o fyne.CanvasObject) {
		if p.plan != nil && i < len(p.plan.Rows) {
			o.(*importLine).set(i)
		}
	})
	p.list.HideSeparators = true
	list := fyne.CanvasObject(p.list)
	large := look.Scale() > 1.3
	if large { // then the columns alone may fill the window
		list = mark.Sized(1, 480, p.list)
	}
	p.parts = mark.ColumnGrow(look.Unit, 4,
		mark.Bar(look.Unit, mark.Title(words.T("Import patients")).AtLeast(100), p.back, p.start),
		mark.Row(look.Unit, []float32{1, 0, 0}, p.file, browse, read),
		p.said, p.cols, list)
	p.root = mark.Pad(look.Unit*1.5, look.Unit*2, p.parts)
	if large {
		p.scroll = mark.NewScroll(p.root)
		p.root = p.scroll
	}
	p.draw()
	return p
}

func (p *importPage) content() fyne.CanvasObject { return p.root }

func (p *importPage) shown() { p.win.win.Canvas().Focus(p.file) }
func (p *importPage) left()  {}

// dropped reads a table that was dragged into the window.
func (p *importPage) dropped(files []fyne.URI) {
	if len(files) > 0 {
		p.file.SetText(files[0].Path())
		p.read()
	}
}

// choose asks for the file.
func (p *importPage) choose() {
	d := p.win.pickFile(words.T("This file cannot be read as a table of patients."), []string{".csv", ".tsv", ".txt", ".xlsx", ".CSV", ".XLSX"}, func(path string) {
		p.file.SetText(path)
		p.read()
	})
	d.SetTitleText(words.T("Import patients"))
	d.SetConfirmText(words.T("Look at it"))
	d.SetDismissText(words.T("back"))
	s := p.win.win.Canvas().Size()
	d.Resize(fyne.NewSize(s.Width-64, s.Height-64))
	d.Show()
}

func (p *importPage) help() []view.KeyHelp {
	return []view.KeyHelp{{Keys: "Enter", Does: words.T("look at the file")}, {Keys: "Ctrl+Z", Does: words.T("take the whole import back")}}
}

func (p *importPage) read() {
	path := strings.TrimSpace(p.file.Text)
	if path == "" || p.busy {
		return
	}
	p.busy = true
	records := p.win.app.records
	p.win.app.work(func(ctx context.Context) (func(), error) {
		data, err := os.ReadFile(path)
		if err != nil {
			return nil, err
		}
		table, err := view.ReadTable(data)
		if err != nil {
			return nil, err
		}
		there, err := records.Caseload(ctx)
		if err != nil {
			return nil, err
		}
		plan := view.NewImportPlan(table, there)
		return func() { p.busy, p.plan, p.done = false, plan, nil; p.draw() }, nil
	}, func(err error) {
		p.busy = false
		p.win.fail(words.T("This file cannot be read as a table of patients."), err)
	})
}

// draw shows the columns with what they hold, the rows, and what the import would do.
func (p *importPage) draw() {
	p.cols.Objects = nil
	p.back.Hide()
	p.start.Hide()
	switch {
	case p.plan == nil:
		p.said.In(look.InkSoft).Set(words.T("The first row holds the headings. What each column means is guessed from them and can be changed; nothing is written until you say so."))
	case p.done != nil:
		n := len(p.done.Patients)
		p.said.In(look.Ink).Set(words.N(n, "%d animal was added.", "%d animals were added.", n))
		p.back.Show()
	default:
		p.said.In(look.Ink).Set(p.plan.Words())
		take, _, _ := p.plan.Counts()
		p.start.SetWords(words.N(take, "Import %d animal", "Import %d animals", take))
		p.start.Show()
		if take == 0 {
			p.start.Disable()
		} else {
			p.start.Enable()
		}
		shown, values := []string{words.T("left out")}, []string{""}
		for _, f := range view.ImportFields() {
			shown, values = append(shown, f.Title()), append(values, string(f))
		}
		for i, h := range p.plan.Table.Headings {
			column, now := i, ""
			if i < len(p.plan.Columns) {
				now = string(p.plan.Columns[i])
			}
			pick := mark.Choice(shown, values, now, func(f string) { p.plan.SetColumn(column, view.ImportField(f)); p.draw() })
			p.cols.Add(mark.Sized(170, 1, mark.NewLabelled(h, pick)))
		}
	}
	p.cols.Refresh()
	p.list.Refresh()
	p.parts.Refresh()
	if p.scroll != nil {
		p.scroll.Reflow()
	}
}

func (p *importPage) apply() {
	if p.busy || p.plan == nil || p.done != nil {
		return
	}
	p.busy = true
	a, plan := p.win.app, p.plan
	records, who := a.records, a.examiner
	a.work(func(ctx context.Context) (func(), error) {
		done, err := plan.Apply(ctx, records, who, records.NewID, func(done, total int) {
			a.onUI(func() { p.win.foot.say(words.T("%d of %d", done, total)) })
		})
		return func() {
			p.busy, p.done = false, &done
			p.draw()
			p.win.foot.say(p.said.Words)
		}, err
	}, func(err error) {
		p.busy = false
		p.win.fail(words.T("Nothing was imported: what had been written was taken back."), err)
	})
}

// undo takes the whole import back.
func (p *importPage) undo(redo bool) {
	if redo || p.busy || p.done == nil {
		return
	}
	p.busy = true
	a, done := p.win.app, *p.done
	records, who := a.records, a.examiner
	a.work(func(ctx context.Context) (func(), error) {
		return func() {
			p.busy, p.done = false, nil
			p.draw()
			p.win.foot.say(words.T("The import was taken back."))
		}, done.Undo(ctx, records, who)
	}, func(err error) {
		p.busy = false
		p.win.fail(words.T("The import could not be taken back."), err)
	})
}

// importLine is one row of the table as it would become an animal.
type importLine struct {
	widget.BaseWidget
	page *importPage
	row  int
	take *mark.Check
	text *mark.Text
	note *mark.Text
	box  *fyne.Container
}

func newImportLine(p *importPage) *importLine {
	l := &importLine{page: p, text: mark.Line("").AtLeast(60), note: mark.Line("").AtLeast(60)}
	l.take = mark.Tick("", false, nil)
	l.box = mark.Row(look.Unit, []float32{0, 1.2, 1}, l.take, l.text, l.note)
	l.ExtendBaseWidget(l)
	return l
}

func (l *importLine) CreateRenderer() fyne.WidgetRenderer {
	return widget.NewSimpleRenderer(mark.Column(0, l.box, mark.Rule()))
}

func (l *importLine) set(i int) {
	l.row = i
	r := l.page.plan.Rows[i]
	p := r.Patient
	parts := []string{p.Name}
	if p.Species != 0 {
		parts = append(parts, view.SpeciesName(p.Species))
	}
	for _, s := range []string{p.Breed, p.Owner.Name} {
		if s != "" {
			parts = append(parts, s)
		}
	}
	l.text.Words = words.T("%d  %s", r.Line, strings.Join(parts, " · "))
	l.note.Words, l.note.Token = "", look.Ink
	switch {
	case r.Problems.Any():
		l.note.Words, l.note.Token = r.Told(), look.Worse
	case r.Duplicate != "":
		l.note.Words = words.T("perhaps there already: %s", r.Duplicate)
	}
	l.take.OnChanged = nil
	l.take.SetChecked(r.Take && !r.Problems.Any())
	if r.Problems.Any() || l.page.done != nil {
		l.take.Disable()
	} else {
		l.take.Enable()
	}
	l.take.OnChanged = func(on bool) { l.page.plan.TakeRow(l.row, on); l.page.draw() }
	l.text.Refresh()
	l.note.Refresh()
}
