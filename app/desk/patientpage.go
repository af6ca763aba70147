package desk

import (
	"context"
	"reflect"
	"strconv"
	"strings"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// patientPage is the page of one animal: a new one, or one to be edited.
type patientPage struct {
	win      *window
	before   exam.Patient
	form     *view.PatientForm
	fields   map[string]*mark.Labelled
	first    *mark.Field
	lists    *fyne.Container
	body     *mark.Scroll
	miss     *fyne.Container
	root     fyne.CanvasObject
	done     bool
	after    func() // what comes once the page is kept, instead of another screen
	restored bool   // the page was left with something typed on it, which is here again
}

func newPatientPage(w *window, before exam.Patient) *patientPage {
	p := &patientPage{win: w, before: before, form: view.NewPatientForm(before), fields: map[string]*mark.Labelled{}}
	if d := w.app.drafts[before.ID]; d != nil {
		p.form, p.restored = d, true
	}
	p.build()
	return p
}

func (p *patientPage) content() fyne.CanvasObject { return p.root }

func (p *patientPage) shown() {
	p.win.win.Canvas().Focus(p.first)
	if p.restored {
		p.win.foot.say(words.T("What was typed here before is here again; it is not kept yet."))
	}
}

// left remembers what was typed and not kept, so that no other screen costs it.
func (p *patientPage) left() {
	delete(p.win.app.drafts, p.before.ID)
	if p.unkept() {
		p.win.app.drafts[p.before.ID] = p.form
	}
}

func (p *patientPage) help() []view.KeyHelp {
	return []view.KeyHelp{
		{Keys: "Tab", Does: words.T("the next field")},
		{Keys: "Enter", Does: words.T("keep the page")},
		{Keys: "Escape", Does: words.T("go back without keeping")},
	}
}

func (p *patientPage) typedKey(k fyne.KeyName) bool {
	if k == fyne.KeyEscape {
		p.back()
		return true
	}
	return false
}

func (p *patientPage) back() {
	p.done = true
	if p.before.ID.IsZero() {
		p.win.goTo(view.Route{Screen: view.ScreenCaseload})
		return
	}
	if r, ok := p.win.trail.Back(); ok {
		p.win.open(r)
		return
	}
	p.win.goTo(view.Route{Screen: view.ScreenCaseload})
}

func (p *patientPage) field(key, name, value, hint string, set func(string)) *mark.Labelled {
	f := mark.NewField(value, set).Hint(hint)
	f.OnSubmitted = func(string) { p.keep() }
	l := mark.NewLabelled(name, f)
	p.fields[key] = l
	if p.first == nil {
		p.first = f
	}
	return l
}

func (p *patientPage) build() {
	f := p.form
	species, sexes, statuses := []string{}, []string{"female", "male", "unknown"}, []string{"active", "discharged", "died"}
	for _, s := range exam.AllSpecies() {
		species = append(species, s.String())
	}
	name := p.field("name", words.T("Name"), f.Name, "", func(s string) { f.Name = s })
	sp := mark.NewLabelled(words.T("Species"), mark.Choice(translated(species), species, f.Species, func(s string) { f.Species = s }))
	p.fields["species"] = sp
	title := words.T("New patient")
	if !f.New() {
		title = p.before.Name
	}
	p.lists = mark.Column(look.Unit * 3)
	p.drawLists()
	p.miss = mark.Column(4)
	p.missing()
	animal := section(words.T("The animal"),
		mark.RowTop(look.Unit*2, []float32{2, 1, 1.5}, name, sp, p.field("breed", words.T("Breed"), f.Breed, "", func(s string) { f.Breed = s })),
		mark.RowTop(look.Unit*2, []float32{1, 1, 1, 1},
			mark.NewLabelled(words.T("Sex"), mark.Choice(translated(sexes), sexes, f.Sex, func(s string) { f.Sex = s })),
			mark.NewLabelled(words.T("Neutered"), mark.Tick(words.T("yes"), f.Neutered, func(on bool) { f.Neutered = on })),
			p.field("born", words.T("Born"), f.Born, words.T("2019-05-07, 2019-05 or 2019"), func(s string) { f.Born = s }),
			p.field("recheck-days", words.T("Days between visits"), f.RecheckDays, "7", func(s string) { f.RecheckDays = s })))
	people := section(words.T("People"),
		mark.RowTop(look.Unit*2, []float32{1, 1, 1}, p.field("owner", words.T("Owner"), f.OwnerName, "", func(s string) { f.OwnerName = s }),
			p.field("owner-phone", words.T("Owner's telephone"), f.OwnerPhone, "", func(s string) { f.OwnerPhone = s }),
			p.field("owner-email", words.T("Owner's e-mail"), f.OwnerEmail, "", func(s string) { f.OwnerEmail = s })),
		mark.RowTop(look.Unit*2, []float32{1, 1, 1}, p.field("vet", words.T("Treating veterinarian"), f.VetName, "", func(s string) { f.VetName = s }),
			p.field("vet-phone", words.T("Veterinarian's telephone"), f.VetPhone, words.T("needed for the sheet"), func(s string) { f.VetPhone = s; p.missing() }),
			p.field("vet-email", words.T("Veterinarian's e-mail"), f.VetEmail, "", func(s string) { f.VetEmail = s })),
		mark.RowTop(look.Unit*2, []float32{1, 1, 1}, p.field("night", words.T("At night and on Sundays"), f.NightName, "", func(s string) { f.NightName = s }),
			p.field("night-phone", words.T("Telephone at night"), f.NightPhone, "", func(s string) { f.NightPhone = s; p.missing() }), mark.Space(1, 1)),
		mark.RowTop(look.Unit*2, []float32{1, 1, 1}, p.field("referred-by", words.T("Referred by"), f.ReferredBy, "", func(s string) { f.ReferredBy = s }),
			p.field("referred-until", words.T("Referral holds until"), f.ReferredUntil, "2026-12-31", func(s string) { f.ReferredUntil = s }),
			p.field("referral-limits", words.T("Limits of the referral"), f.ReferralLimits, "", func(s string) { f.ReferralLimits = s })))
	if !f.New() && !p.before.Owner.Empty() {
		people.(*fyne.Container).Add(mark.Left(mark.NewButton(words.T("The owner asks to be erased"), "close", func() { p.win.askErase(p.before) }).As(mark.Quiet)))
	}
	note := mark.NewArea(f.Note, 3, func(s string) { f.Note = s })
	rest := section(words.T("Status and note"),
		mark.RowTop(look.Unit*2, []float32{1, 1, 1},
			mark.NewLabelled(words.T("Status"), mark.Choice(translated(statuses), statuses, f.Status, func(s string) { f.Status = s })),
			p.field("status-since", words.T("Since"), f.StatusSince, "2026-03-02", func(s string) { f.StatusSince = s }), mark.Space(1, 1)),
		mark.NewLabelled(words.T("Note"), note))
	p.body = mark.NewScroll(mark.AtMost(980, mark.Column(look.Unit*3, animal, p.lists, people, rest)))
	keep := mark.NewButton(words.T("Keep"), "tick", p.keep).As(mark.Main)
	exam1 := mark.NewButton(words.T("Keep and start exam"), "exam", func() { p.keepThen(view.ScreenExam) })
	cancel := mark.NewButton(words.T("Back without keeping"), "", p.back).As(mark.Quiet)
	buttons := []fyne.CanvasObject{cancel, exam1, keep}
	if !f.New() {
		buttons = append([]fyne.CanvasObject{mark.NewButton(words.T("History"), "", func() {
			p.win.goTo(view.Route{Screen: view.ScreenHistory, Patient: p.before.ID})
		}).As(mark.Quiet).WithTip("Ctrl+H")}, buttons...)
	}
	p.root = mark.Pad(look.Unit*1.5, look.Unit*2, mark.ColumnGrow(look.Unit, 2,
		mark.Bar(look.Unit, mark.Title(title).AtLeast(100), buttons...), p.miss, p.body))
}

func (p *patientPage) missing() {
	if p.miss == nil {
		return
	}
	p.miss.Objects = nil
	for _, m := range p.form.Missing() {
		p.miss.Add(cautionLine(m))
	}
	p.miss.Refresh()
	if p.body != nil {
		p.body.Reflow()
	}
}

// drawLists draws problems, precautions, goals and medicines, each with a line to add one.
func (p *patientPage) drawLists() {
	f := p.form
	id := p.win.app.records.NewID
	remove := func(do func()) fyne.CanvasObject {
		return mark.NewButton("", "close", func() { do(); p.drawLists() }).As(mark.Quiet).WithTip(words.T("Remove"))
	}
	small := func(value, hint string, set func(string)) fyne.CanvasObject {
		return mark.NewField(value, set).Hint(hint)
	}
	row := func(key string, weights []float32, cells ...fyne.CanvasObject) fyne.CanvasObject {
		l := mark.NewLabelled("", mark.Row(look.Unit, weights, cells...))
		p.fields[key] = l
		return l
	}
	var problems []fyne.CanvasObject
	for i := range f.Problems {
		x := &f.Problems[i]
		at := i
		problems = append(problems, row("problem-"+strconv.Itoa(i), []float32{3, 1.2, 1.2, 1.4, 1.4, 0},
			small(x.Diagnosis, words.T("diagnosis"), func(s string) { x.Diagnosis = s }),
			small(x.Level, "T12-T13", func(s string) { x.Level = strings.TrimSpace(s) }),
			mark.Choice([]string{words.T("no side"), words.T("left"), words.T("right")}, []string{"", "left", "right"}, x.Side, func(s string) { x.Side = s }),
			small(string(x.Onset), words.T("onset"), func(s string) { x.Onset = exam.Date(strings.TrimSpace(s)) }),
			small(string(x.Surgery), words.T("surgery"), func(s string) { x.Surgery = exam.Date(strings.TrimSpace(s)) }),
			remove(func() { f.Problems = append(f.Problems[:at:at], f.Problems[at+1:]...) })))
	}
	var codes []string
	for _, c := range exam.Precautions() {
		codes = append(codes, c.String())
	}
	shown := make([]string, len(codes))
	for i, c := range codes {
		shown[i] = view.PrecautionWords(exam.PrecautionOn{Code: c})
	}
	var cautions []fyne.CanvasObject
	for i := range f.Precautions {
		x := &f.Precautions[i]
		at := i
		cautions = append(cautions, row("precaution-"+strconv.Itoa(i), []float32{2, 1.4, 1.4, 3, 0},
			mark.Choice(shown, codes, x.Code, func(s string) { x.Code = s }),
			mark.Choice(append([]string{words.T("no place")}, siteNames()...), append([]string{""}, siteWords()...), x.Site, func(s string) { x.Site = s }),
			small(string(x.Until), words.T("until"), func(s string) { x.Until = exam.Date(strings.TrimSpace(s)) }),
			small(x.Note, words.T("note"), func(s string) { x.Note = s }),
			remove(func() { f.Precautions = append(f.Precautions[:at:at], f.Precautions[at+1:]...) })))
	}
	var goals []fyne.CanvasObject
	gShown, gValues := goalChoices()
	for i := range f.Goals {
		x := &f.Goals[i]
		at := i
		now := x.Measure
		if x.Item != "" {
			now = x.Item + "/" + x.Site
		}
		goals = append(goals, row("goal-"+strconv.Itoa(i), []float32{3, 2.4, 1, 1.4, 0},
			small(x.Words, words.T("walks ten steps alone"), func(s string) { x.Words = s }),
			mark.Choice(gShown, gValues, now, func(s string) {
				x.Measure, x.Item, x.Site = s, "", ""
				if item, site, two := strings.Cut(s, "/"); two {
					x.Measure, x.Item, x.Site = "", item, site
				}
			}),
			small(plainNumber(x.Target), words.T("target"), func(s string) {
				if n, err := strconv.ParseFloat(strings.ReplaceAll(strings.TrimSpace(s), ",", "."), 64); err == nil {
					x.Target = n
				}
			}),
			small(string(x.By), words.T("by"), func(s string) { x.By = exam.Date(strings.TrimSpace(s)) }),
			remove(func() { f.Goals = append(f.Goals[:at:at], f.Goals[at+1:]...) })))
	}
	var medicines []fyne.CanvasObject
	for i := range f.Medicines {
		x := &f.Medicines[i]
		at := i
		medicines = append(medicines, row("medicine-"+strconv.Itoa(i), []float32{2.4, 2, 1.4, 1.4, 0},
			small(x.Name, words.T("name"), func(s string) { x.Name = s }), small(x.Dose, words.T("dose, as prescribed"), func(s string) { x.Dose = s }),
			small(string(x.Start), words.T("start"), func(s string) { x.Start = exam.Date(strings.TrimSpace(s)) }),
			small(string(x.Stop), words.T("stop"), func(s string) { x.Stop = exam.Date(strings.TrimSpace(s)) }),
			remove(func() { f.Medicines = append(f.Medicines[:at:at], f.Medicines[at+1:]...) })))
	}
	group := func(title, add string, lines []fyne.CanvasObject, more func()) fyne.CanvasObject {
		b := mark.NewButton(add, "add", func() { more(); p.drawLists() })
		return mark.Column(look.Unit/2, append(append([]fyne.CanvasObject{mark.Bar(look.Unit, mark.Heading(title).AtLeast(60), b), mark.Rule()}, lines...), mark.Space(1, 1))...)
	}
	p.lists.Objects = []fyne.CanvasObject{
		group(words.T("Problems"), words.T("Add a problem"), problems, func() { f.Problems = append(f.Problems, exam.Problem{ID: id()}) }),
		group(words.T("Precautions"), words.T("Add a precaution"), cautions, func() { f.Precautions = append(f.Precautions, exam.PrecautionOn{ID: id()}) }),
		group(words.T("Goals"), words.T("Add a goal"), goals, func() { f.Goals = append(f.Goals, exam.Goal{ID: id()}) }),
		group(words.T("Medicines"), words.T("Add a medicine"), medicines, func() { f.Medicines = append(f.Medicines, exam.Medicine{ID: id()}) }),
	}
	p.lists.Refresh()
	if p.body != nil {
		p.body.Reflow()
	}
}

// siteWords are the places a precaution can name.
func siteWords() []string {
	var out []string
	for s := exam.ThoracicLeft; s <= exam.Sacrocaudal; s++ {
		if s != exam.Midline && s != exam.Left && s != exam.Right {
			out = append(out, s.String())
		}
	}
	return out
}

func siteNames() []string {
	var out []string
	for _, w := range siteWords() {
		s, _ := exam.ParseSite(w)
		out = append(out, view.SiteName(s))
	}
	return out
}

// goalChoices are the tests and measures that a goal can be reached by.
func goalChoices() (shown, values []string) {
	for _, m := range []exam.Measure{exam.WalkDistance, exam.StandTime, exam.TaskStandFromLying, exam.TaskStanding, exam.TaskWalking, exam.TaskStairs, exam.Weight, exam.PainOnMovement} {
		shown, values = append(shown, view.MeasureName(m)), append(values, m.String())
	}
	for _, k := range []exam.Key{{Item: exam.Ambulation, Site: exam.Midline}, {Item: exam.VoluntaryUrination, Site: exam.Midline}} {
		shown, values = append(shown, view.CellName(k)), append(values, k.String())
	}
	for _, l := range exam.Limbs() {
		for _, i := range []exam.Item{exam.VoluntaryMotor, exam.PawPlacement} {
			k := exam.Key{Item: i, Site: l}
			shown, values = append(shown, view.CellName(k)), append(values, k.String())
		}
	}
	return shown, values
}

// unkept reports whether something was typed that is not kept yet.
func (p *patientPage) unkept() bool {
	return !p.done && !reflect.DeepEqual(p.form, view.NewPatientForm(p.before))
}

// keepAnd keeps the page and then goes on.
func (p *patientPage) keepAnd(do func()) {
	p.after = do
	p.keep()
}

func (p *patientPage) forget() { p.done = true }

func (p *patientPage) keep() { p.keepThen(view.ScreenCourse) }

// keepThen writes the page and goes on to a screen of the animal.
func (p *patientPage) keepThen(next view.Screen) {
	if p.done {
		return
	}
	after, bad := p.form.Patient()
	for key, f := range p.fields {
		f.Wrong(bad[key])
	}
	if bad.Any() {
		p.body.Reflow()
		var list []string
		for key, w := range bad {
			if p.fields[key] == nil {
				list = append(list, w)
			}
		}
		p.win.foot.fail(words.T("Mend what is marked first; nothing typed is lost. %s", strings.Join(list, " ")), nil)
		return
	}
	a := p.win.app
	before := p.before
	isNew := before.ID.IsZero()
	if isNew {
		after.ID = a.records.NewID()
		after.Demo = a.practice.Demo
	}
	p.done = true
	records, examiner := a.records, a.examiner
	a.work(func(ctx context.Context) (func(), error) {
		if err := records.SavePatient(ctx, examiner, before, after); err != nil {
			return nil, err
		}
		return func() {
			a.lastPatient = after.ID
			if p.after != nil {
				p.after()
				return
			}
			if isNew && next == view.ScreenCourse {
				p.win.goTo(view.Route{Screen: view.ScreenCaseload})
				p.win.foot.say(words.T("%s is in the caseload. Enter starts the first exam.", after.Name))
				return
			}
			p.win.goTo(view.Route{Screen: next, Patient: after.ID})
		}, nil
	}, func(err error) {
		p.done = false
		p.win.fail(words.T("The page could not be kept; nothing typed is lost."), err)
	})
}
