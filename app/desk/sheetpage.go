package desk

import (
	"context"
	"image"
	"net/url"
	"os"
	"path/filepath"
	"strings"
	"sync/atomic"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"gonum.org/v1/plot/vg"

	"codeberg.org/go-pdf/fpdf"

	"cordwalk.example/cordwalk/app/chart"
	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/desk/paper"
	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/audit"
)

// sheetPage answers: what do I hand over?
type sheetPage struct {
	win     *window
	file    File
	options sheet.Options
	kind    paperKind
	kinds   []*mark.Button
	title   *mark.Text
	about   *mark.Para
	doc     sheet.Document
	turn    int
	newest  atomic.Int64 // turn, for the goroutine that writes
	later   bool         // saving was asked for before the paper was made
	refused error        // why there is no sheet

	root     fyne.CanvasObject
	summary  *mark.Field // the therapist's own sentences
	reword   *mark.Button
	reads    *mark.Para // how easily they read
	ours     string     // the program's own sentences
	preview  *mark.Scroll
	pictures []*canvas.Image
	notes    *fyne.Container
	save     *mark.Button
	print    *mark.Button
	mail     *mark.Button
	in       sheet.Input // what the paper was made from
}

func newSheetPage(w *window) *sheetPage {
	p := &sheetPage{win: w, file: w.file, notes: mark.Column(look.Unit), title: mark.Title("").AtLeast(80), about: mark.NewPara("").In(look.InkSoft)}
	choose := mark.Row(0, nil)
	for k, n := range []string{words.T("Owner"), words.T("Clinical"), words.T("Letter")} {
		kind := paperKind(k)
		b := mark.NewButton(n, "", func() { p.kind = kind; p.make() })
		p.kinds = append(p.kinds, b)
		choose.Add(b)
	}
	p.preview = mark.NewScroll(mark.Column(0))
	tick := func(word string, set func(bool)) fyne.CanvasObject {
		return mark.Tick(word, false, func(on bool) { set(on); p.make() })
	}
	p.save = mark.NewButton(words.T("Save as PDF"), "save", p.askSave).As(mark.Main)
	p.print = mark.NewButton(words.T("Open and print"), "print", p.open)
	p.mail = mark.NewButton(words.T("Write an e-mail"), "", p.write)
	p.options.Summary = p.lastWords()
	p.summary = mark.NewArea(p.options.Summary, 5, func(string) { p.judge() }).Hint(words.T("Instead of the sentences on the sheet"))
	p.summary.OnLeave = p.reworded
	p.reads = mark.NewPara("").As(look.Small).In(look.InkSoft)
	p.reword = mark.NewButton("", "", p.turned)
	p.judge()
	side := mark.Column(look.Unit,
		mark.Wrapped(4, choose.Objects...), p.title, p.about,
		p.save, p.print, p.mail, mark.Space(1, look.Unit),
		tick(words.T("Large print"), func(on bool) { p.options.Large = on }),
		tick(words.T("For a printer without colours"), func(on bool) { p.options.Grey = on }),
		tick(words.T("Leave the course chart out"), func(on bool) { p.options.NoChart = on }),
		pair(mark.NewLabelled(words.T("Paper"), mark.Choice([]string{"A4", "Letter"}, []string{"A4", "Letter"}, w.app.practice.Paper, func(s string) { p.options.Paper = s; p.make() })),
			mark.NewLabelled(words.T("Language"), mark.Choice(languageNames(words.Tags()), words.Tags(), p.language(), p.speak))),
		mark.NewLabelled(words.T("How it is doing, in your words"), mark.Column(4, p.summary, p.reads, mark.Left(p.reword))),
		p.notes)
	p.root = mark.Pad(look.Unit*1.5, look.Unit*2, mark.RowTop(look.Unit*2, []float32{1, 0}, mark.On(look.Sunk, false, p.preview), mark.Sized(320, 10, mark.NewScroll(side))))
	p.make()
	return p
}

// judge says how easily the therapist's own sentences read.
func (p *sheetPage) judge() {
	own := strings.TrimSpace(p.summary.Text)
	p.reword.SetWords(words.T("Reword the sheet's sentences"))
	said := ""
	if own != "" {
		p.reword.SetWords(words.T("Back to the sheet's sentences"))
		if ease := sheet.EaseWords(p.language(), strings.Split(own, "\n")); ease != "" {
			said = sentence(ease)
		}
	}
	if p.reads.Words != said {
		p.reads.Set(said)
	}
}

// language is that of the paper.
func (p *sheetPage) language() string {
	for _, l := range []string{p.options.Lang, p.win.app.practice.Language} {
		if l != "" {
			return l
		}
	}
	return "en"
}

// lastWords are the therapist's own sentences that were sent about this visit, to be sent again
// or reworded.
func (p *sheetPage) lastWords() string {
	n := len(p.file.Visits)
	if n == 0 {
		return ""
	}
	return sheet.LastWords(p.file.Patient, p.file.Visits[n-1].ID, p.language())
}

// speak writes the paper in another language; own sentences of the first are no use in it.
func (p *sheetPage) speak(tag string) {
	p.options.Lang, p.ours = tag, ""
	p.options.Summary = p.lastWords()
	p.summary.SetText(p.options.Summary)
	p.judge()
	p.make()
}

// reworded makes the paper anew with the therapist's own sentences.
func (p *sheetPage) reworded() {
	if p.options.Summary != p.summary.Text {
		p.options.Summary = p.summary.Text
		p.make()
	}
}

// turned goes back to the sheet's own sentences, or offers them to be reworded.
func (p *sheetPage) turned() {
	if strings.TrimSpace(p.summary.Text) != "" {
		p.summary.SetText("")
		p.reworded()
		return
	}
	p.summary.SetText(p.ours)
	p.win.win.Canvas().Focus(p.summary)
}

func (p *sheetPage) content() fyne.CanvasObject { return p.root }
func (p *sheetPage) shown()                     { p.win.win.Canvas().Unfocus() }

// left lets go of the pages' pictures.
func (p *sheetPage) left() {
	p.turn++
	p.newest.Store(int64(p.turn))
	p.doc = sheet.Document{}
	p.dropPictures()
	p.preview.SetContent(mark.Space(1, 1))
}

func (p *sheetPage) dropPictures() {
	for _, i := range p.pictures {
		p.win.freed(i)
		i.Image = nil
	}
	p.pictures = nil
}

func (p *sheetPage) help() []view.KeyHelp {
	return []view.KeyHelp{
		{Keys: "s", Does: words.T("save as PDF")},
		{Keys: "p", Does: words.T("open with the system's program, to print")},
		{Keys: "e", Does: words.T("write an e-mail")},
		{Keys: words.T("Up, Down"), Does: words.T("scroll the page")},
	}
}

func (p *sheetPage) typedRune(r rune) bool {
	switch r {
	case 's':
		p.askSave()
	case 'p':
		p.open()
	case 'e':
		p.write()
	default:
		return false
	}
	return true
}

func (p *sheetPage) typedKey(k fyne.KeyName) bool {
	switch k {
	case fyne.KeyDown:
		p.preview.By(80)
	case fyne.KeyUp:
		p.preview.By(-80)
	default:
		return false
	}
	return true
}

// paperKind is which paper is handed over.
type paperKind uint8

const (
	ownersSheet paperKind = iota
	clinicalSummary
	referralLetter
)

// words are the paper's title and what it is for.
func (k paperKind) words() (title, about string) {
	switch k {
	case clinicalSummary:
		return words.T("Clinical summary"), words.T("For the veterinarian: every day's grades, how sure each change is, the likely site and the course.")
	case referralLetter:
		return words.T("Referral letter"), words.T("One page for the treating veterinarian: what an alert saw, since when, and how soon it must be looked at.")
	}
	return words.T("Owner's sheet"), words.T("One page in everyday words: how the animal is doing, what to do at home, and when to call the veterinarian.")
}

// write makes the paper.
func (k paperKind) write(in sheet.Input) (sheet.Document, error) {
	switch k {
	case clinicalSummary:
		course, err := view.ClinicalCourse(in.Patient, in.Visits)
		if err != nil {
			return sheet.Document{}, err
		}
		return sheet.Clinical(in, course)
	case referralLetter:
		return sheet.Letter(in)
	}
	in, err := sheet.WithTrends(in)
	if err != nil {
		return sheet.Document{}, err
	}
	return sheet.Owner(in)
}

// make writes the sheet and its preview off the drawing goroutine.
func (p *sheetPage) make() {
	p.turn++
	turn := p.turn
	p.newest.Store(int64(turn))
	a := p.win.app
	for k, b := range p.kinds {
		b.SetChosen(paperKind(k) == p.kind)
	}
	p.title.Words, p.about.Words = p.kind.words()
	p.title.Refresh()
	p.about.Refresh()
	p.doc = sheet.Document{}
	p.refused = nil
	kind := p.kind
	in := view.SheetInput(a.practice, p.file.Patient, p.file.Visits, a.now(), p.options)
	p.save.Disable()
	p.print.Disable()
	p.mail.Disable()
	p.in = in
	a.work(func(context.Context) (func(), error) {
		a.heavy.Lock()
		defer a.heavy.Unlock()
		if p.newest.Load() != int64(turn) {
			return nil, nil // another paper is wanted, or none
		}
		doc, err := kind.write(in)
		if err != nil {
			return nil, err
		}
		pages, err := paper.Pages(doc.PDF, 1.9)
		if err != nil {
			return nil, err
		}
		return func() {
			if turn == p.turn {
				p.show(doc, pages)
			}
		}, nil
	}, func(err error) {
		if turn == p.turn {
			p.refuse(err)
		}
	})
}

func (p *sheetPage) show(doc sheet.Document, pages []image.Image) {
	p.doc, p.refused = doc, nil
	if doc.Kind == sheet.KindSheet && !doc.Reworded {
		p.ours = doc.Summary
	}
	p.save.Enable()
	p.print.Enable()
	p.mail.Enable()
	var out []fyne.CanvasObject
	p.dropPictures()
	for _, page := range pages {
		img, o := newSheetImage(page)
		p.pictures = append(p.pictures, img)
		out = append(out, o)
	}
	p.preview.SetContent(mark.Pad(look.Unit*2, look.Unit*2, mark.Column(look.Unit*2, out...)))
	p.notes.Objects = nil
	for _, w := range doc.Warnings {
		p.notes.Add(cautionLine(said(w)))
	}
	p.notes.Refresh()
	if p.later {
		p.later = false
		p.askSave()
	}
}

func (p *sheetPage) refuse(err error) {
	p.refused = err
	edit := mark.NewButton(words.T("Edit the patient's page"), "edit", func() { p.win.to(view.ScreenPatient) })
	p.preview.SetContent(mark.Pad(look.Unit*3, look.Unit*3, mark.Column(look.Unit*2, mark.Heading(words.T("This paper cannot be made yet")).AtLeast(80), mark.NewPara(err.Error()), mark.Left(edit))))
}

func (p *sheetPage) askSave() {
	if len(p.doc.PDF) == 0 {
		p.later = p.refused == nil // still being made: asked once it is there
		return
	}
	doc, keep := p.doc, p.sent()
	title, _ := p.kind.words()
	p.win.askFile(words.T("Save as PDF: %s", title), doc.Name, words.T("The sheet is not protected once it has left the practice's store."), func(path string) error {
		if err := disk.Replace(disk.OS(), path, doc.PDF); err != nil {
			return err
		}
		return keep(context.Background())
	})
}

// sent returns what keeps with the patient that the paper was handed over.
func (p *sheetPage) sent() func(context.Context) error {
	a, doc, in, at := p.win.app, p.doc, p.in, p.win.app.now()
	records, who := a.records, a.examiner
	return func(ctx context.Context) error {
		done, err := audit.Edit(audit.Printed, in.Patient.Name+": "+doc.Name)
		if err != nil {
			return err
		}
		_, err = records.Apply(ctx, who, append(sheet.SentEdits(in.Patient, in.Visits[len(in.Visits)-1].ID, doc, who, at), done)...)
		return err
	}
}

// exported returns what writes into the audit that something left the store.
func (w *window) exported(what string) func(context.Context) error {
	records, who := w.app.records, w.app.examiner
	return func(ctx context.Context) error {
		done, err := audit.Edit(audit.Exported, what)
		if err != nil {
			return err
		}
		_, err = records.Apply(ctx, who, done)
		return err
	}
}

// write opens a draft e-mail with the paper in the system's mail program; nothing is sent.
func (p *sheetPage) write() {
	if len(p.doc.PDF) == 0 {
		return
	}
	a, in, doc, keep := p.win.app, p.in, p.doc, p.sent()
	a.work(func(ctx context.Context) (func(), error) {
		m, err := newDraft(in, doc)
		if err != nil {
			return nil, err
		}
		how, err := m.open(ctx, a.fyne.OpenURL)
		return func() { p.handed(keep, how) }, err
	}, func(err error) {
		p.win.fail(words.T("This system has no program that opens drafts of e-mails; save the sheet and attach it."), err)
	})
}

// handed keeps that a paper was handed over.
func (p *sheetPage) handed(keep func(context.Context) error, done string) {
	p.win.app.work(func(ctx context.Context) (func(), error) { return nil, keep(ctx) },
		func(err error) { p.win.fail(words.T("That the paper was handed over could not be kept."), err) })
	p.win.foot.say(done)
}

// open hands the sheet to the system's own program, which prints it.
func (p *sheetPage) open() {
	if len(p.doc.PDF) == 0 {
		return
	}
	p.hand(p.doc.PDF, p.doc.Name, words.T("Opened with the system's program for PDF files"), words.T("This system has no program that opens PDF files; save the sheet instead."))
}

// hand writes a file where only this user can read it, opens it with the system's program
// and keeps that it was handed over.
func (p *sheetPage) hand(data []byte, name, done, none string) {
	keep := p.sent()
	p.win.app.work(func(context.Context) (func(), error) {
		dir, err := os.MkdirTemp("", "cordwalk-sheet-")
		if err != nil {
			return nil, err
		}
		path := filepath.Join(dir, name)
		if err := os.WriteFile(path, data, 0o600); err != nil {
			return nil, err
		}
		return func() {
			u := &url.URL{Scheme: "file", Path: filepath.ToSlash(path)}
			if err := p.win.app.fyne.OpenURL(u); err != nil {
				p.win.fail(none, err)
				return
			}
			p.handed(keep, done)
		}, nil
	}, func(err error) { p.win.fail(words.T("The sheet could not be handed over."), err) })
}

// newSheetImage is a page of paper as wide as there is room.
func newSheetImage(page image.Image) (*canvas.Image, fyne.CanvasObject) {
	img := canvas.NewImageFromImage(page)
	img.FillMode = canvas.ImageFillContain
	img.ScaleMode = canvas.ImageScaleSmooth
	b := page.Bounds()
	return img, &fyne.Container{Layout: &pageLayout{float32(b.Dy()) / float32(max(1, b.Dx()))}, Objects: []fyne.CanvasObject{img}}
}

// pageLayout keeps the page's proportion, at most 900 px wide.
type pageLayout struct{ ratio float32 }

func (l *pageLayout) width(w float32) float32 { return min(w, 900) }

func (l *pageLayout) HeightFor(width float32) float32 { return l.width(width) * l.ratio }
func (l *pageLayout) MinSize([]fyne.CanvasObject) fyne.Size {
	return fyne.NewSize(200, 200*l.ratio)
}
func (l *pageLayout) Layout(o []fyne.CanvasObject, s fyne.Size) {
	w := l.width(s.Width)
	o[0].Move(fyne.NewPos((s.Width-w)/2, 0))
	o[0].Resize(fyne.NewSize(w, w*l.ratio))
}

// savePDF writes a chart as a PDF page of its own.
func savePDF(path string, w, h float64, c drawable, st chart.Style) error {
	doc := fpdf.NewCustom(&fpdf.InitType{UnitStr: "pt", Size: fpdf.SizeType{Wd: w, Ht: h}})
	chart.AddFonts(doc)
	doc.AddPage()
	c.Draw(chart.OnPDF(doc, 0, 0, vg.Length(w), vg.Length(h)), st)
	return doc.OutputFileAndClose(path)
}
