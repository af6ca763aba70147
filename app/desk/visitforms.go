package desk

import (
	"math"
	"strconv"
	"strings"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// edit changes the visit around the exam and says what went wrong.
func (p *examPage) edit(do func(*exam.Visit)) {
	if err := p.sheet.EditHead(do); err != nil {
		p.win.foot.fail(err.Error(), nil)
	}
}

// later keeps what is typed until the field is left or a moment has passed, so that a line of
// text is one entry and not one for each letter.
func (p *examPage) typedText(value string, lines int, keep func(v *exam.Visit, text string)) *mark.Field {
	var f *mark.Field
	if lines > 1 {
		f = mark.NewArea(value, lines, nil)
	} else {
		f = mark.NewField(value, nil)
	}
	last := value
	store := func() {
		if f.Text != last {
			last = f.Text
			text := last
			p.edit(func(v *exam.Visit) { keep(v, text) })
		}
	}
	f.OnLeave = store
	f.OnSubmitted = func(string) { store() }
	p.pending = append(p.pending, store)
	return f
}

func wordChoice(list []string, value string, set func(string)) fyne.CanvasObject {
	shown, values := []string{words.T("not said")}, []string{""}
	for _, w := range list {
		shown, values = append(shown, words.Of(w)), append(values, w)
	}
	return mark.Choice(shown, values, value, set)
}

func section(title string, lines ...fyne.CanvasObject) fyne.CanvasObject {
	return mark.Column(look.Unit, append([]fyne.CanvasObject{mark.Heading(title).AtLeast(80), mark.Rule()}, lines...)...)
}

func pair(a, b fyne.CanvasObject) fyne.CanvasObject {
	return mark.RowTop(look.Unit*2, []float32{1, 1}, a, b)
}

// newVisitForm is the visit around the exam: conditions, owner's report, medicines, note.
func newVisitForm(p *examPage) fyne.CanvasObject {
	v := p.sheet.Visit()
	sedations := []string{}
	for s := exam.SedationNone; s <= exam.SedationDeep; s++ {
		sedations = append(sedations, s.String())
	}
	sed := mark.Choice(translated(sedations), sedations, v.Sedation.String(), func(w string) {
		s, err := exam.ParseSedation(w)
		if err == nil {
			p.edit(func(v *exam.Visit) { v.Sedation = s })
		}
	})
	conditions := section(words.T("Conditions"),
		mark.NewPara(words.T("Visits that are not like for like are marked on every chart.")).In(look.InkSoft),
		pair(mark.NewLabelled(words.T("Sedation"), sed),
			mark.NewLabelled(words.T("Aid"), wordChoice(exam.AidWords(), v.Aid, func(w string) { p.edit(func(v *exam.Visit) { v.Aid = w }) }))),
		pair(mark.NewLabelled(words.T("Surface"), wordChoice(exam.SurfaceWords(), v.Surface, func(w string) { p.edit(func(v *exam.Visit) { v.Surface = w }) })),
			mark.NewLabelled(words.T("Before or after the session"), wordChoice(exam.SessionWords(), v.Session, func(w string) { p.edit(func(v *exam.Visit) { v.Session = w }) }))))
	r := v.Report
	number := func(n int) string {
		if n == 0 {
			return ""
		}
		return strconv.Itoa(n)
	}
	report := section(words.T("Owner's report"),
		pair(mark.NewLabelled(words.T("Falls"), p.typedText(r.Falls, 1, func(v *exam.Visit, t string) { v.Report.Falls = t })),
			mark.NewLabelled(words.T("Urine"), p.typedText(r.Urine, 1, func(v *exam.Visit, t string) { v.Report.Urine = t }))),
		pair(mark.NewLabelled(words.T("Appetite"), p.typedText(r.Appetite, 1, func(v *exam.Visit, t string) { v.Report.Appetite = t })),
			pair(mark.NewLabelled(words.T("Exercises done"), p.typedText(number(r.ExercisesDone), 1, func(v *exam.Visit, t string) { v.Report.ExercisesDone, _ = strconv.Atoi(strings.TrimSpace(t)) })),
				mark.NewLabelled(words.T("of those set"), p.typedText(number(r.ExercisesSet), 1, func(v *exam.Visit, t string) { v.Report.ExercisesSet, _ = strconv.Atoi(strings.TrimSpace(t)) })))),
		mark.NewLabelled(words.T("In the owner's words"), p.typedText(r.Words, 3, func(v *exam.Visit, t string) { v.Report.Words = t })))
	var doses []fyne.CanvasObject
	for _, m := range p.file.Patient.Medicines {
		if m.Stop != "" {
			if d, ok := m.Stop.DaysBefore(v.Examined); ok && d > 1 {
				continue
			}
		}
		name, hours := m.Name, ""
		for _, d := range v.Doses {
			if d.Medicine == name {
				hours = plainNumber(d.Hours)
			}
		}
		doses = append(doses, mark.NewLabelled(words.T("%s: hours since the last dose", name), p.typedText(hours, 1, func(v *exam.Visit, t string) { setDose(v, name, t) })))
	}
	if len(doses) == 0 {
		doses = []fyne.CanvasObject{mark.NewPara(words.T("No medicines on file. They are entered on the patient's page.")).In(look.InkSoft)}
	}
	next := mark.NewLabelled(words.T("Next visit"), p.typedDate(string(v.NextVisit)))
	note := section(words.T("Note and next visit"), p.noteField(v.Note), next)
	return mark.NewScroll(mark.Pad(look.Unit, look.Unit, mark.Column(look.Unit*3, conditions, report, section(words.T("Medicines"), doses...), note)))
}

func (p *examPage) noteField(value string) fyne.CanvasObject {
	return mark.NewLabelled(words.T("Note"), p.typedText(value, 4, func(v *exam.Visit, t string) { v.Note = t }))
}

func (p *examPage) typedDate(value string) *mark.Field {
	return p.typedText(value, 1, func(v *exam.Visit, t string) {
		d, err := exam.ParseDate(strings.TrimSpace(t))
		if err != nil {
			p.win.foot.fail(err.Error(), nil)
			return
		}
		v.NextVisit = d
	}).Hint("2026-03-09")
}

func setDose(v *exam.Visit, name, text string) {
	var out []exam.DoseGiven
	for _, d := range v.Doses {
		if d.Medicine != name {
			out = append(out, d)
		}
	}
	if h, err := strconv.ParseFloat(strings.ReplaceAll(strings.TrimSpace(text), ",", "."), 64); err == nil && h >= 0 {
		out = append(out, exam.DoseGiven{Medicine: name, Hours: h})
	}
	v.Doses = out
}

func translated(list []string) []string {
	out := make([]string, len(list))
	for i, w := range list {
		out[i] = words.Of(w)
	}
	return out
}

// quickMeasures are the measures that stand in the form by themselves; others are added by name.
var quickMeasures = []exam.Measure{exam.Weight, exam.Temperature, exam.RespiratoryRate, exam.HeartRate, exam.BodyCondition,
	exam.PainAtRest, exam.PainOnMovement, exam.StandTime, exam.WalkDistance, exam.WalkTime, exam.ResidualVolume, exam.HoursSinceUrination}

// newMeasuresForm holds the measured values, with girths by side and the functional tasks.
func newMeasuresForm(p *examPage) fyne.CanvasObject {
	v := p.sheet.Visit()
	last, hasLast := p.sheet.Last()
	field := func(m exam.Measure, site exam.Site) fyne.CanvasObject {
		return p.measureField(m, site, v, last, hasLast)
	}
	rowsOf := func(list []exam.Measure, site exam.Site) []fyne.CanvasObject {
		var out []fyne.CanvasObject
		for i := 0; i < len(list); i += 2 {
			a := field(list[i], site)
			var b fyne.CanvasObject = mark.Space(1, 1)
			if i+1 < len(list) {
				b = field(list[i+1], site)
			}
			out = append(out, pair(a, b))
		}
		return out
	}
	general := section(words.T("Measures"), rowsOf(quickMeasures, exam.NoSite)...)
	girth := section(words.T("Girth: one examiner, one place, one position"),
		pair(field(exam.ThighGirth, exam.Left), field(exam.ThighGirth, exam.Right)),
		pair(field(exam.BrachiumGirth, exam.Left), field(exam.BrachiumGirth, exam.Right)))
	var limbs []fyne.CanvasObject
	limbs = append(limbs, newTimerRow(p))
	for _, m := range []exam.Measure{exam.StepsScored, exam.StepsWeightBearing, exam.StepsWithMistake} {
		limbs = append(limbs, pair(field(m, exam.PelvicLeft), field(m, exam.PelvicRight)))
	}
	var tasks []exam.Measure
	for m := exam.TaskLying; m <= exam.TaskStairs; m++ {
		tasks = append(tasks, m)
	}
	return mark.NewScroll(mark.Pad(look.Unit, look.Unit, mark.Column(look.Unit*3, general, girth,
		section(words.T("Steps and times"), limbs...),
		section(words.T("Functional tasks, 0 cannot to 4 normal (FINFUN-2018)"), rowsOf(tasks, exam.NoSite)...))))
}

func (p *examPage) measureField(m exam.Measure, site exam.Site, v, last exam.Visit, hasLast bool) fyne.CanvasObject {
	in := m.Info()
	name := view.MeasureName(m)
	if site != exam.NoSite {
		name += ", " + view.SiteName(site)
	}
	if in.Unit != "1" {
		name += ", " + p.sheet.UnitOf(m)
	}
	units := p.sheet.Units()
	value := ""
	found, has := v.Measured(m, site)
	if has {
		value = plainNumber(found.Value)
		if units.Unit(m) != in.Unit {
			value = plainNumber(math.Round(units.Shown(m, found.Value)*100) / 100)
		}
	}
	f := mark.NewField(value, nil)
	if hasLast {
		if x, ok := last.Measured(m, site); ok {
			f.Hint(words.T("last time %s", p.sheet.ValueWords(x)))
		}
	}
	l := mark.NewLabelled(name, f)
	was := value
	keep := func() {
		text := strings.TrimSpace(f.Text)
		if text == was {
			return
		}
		x := exam.Measured{Measure: m, Site: site}
		if has {
			x = found
		}
		if text == "" {
			if err := p.sheet.ClearMeasured(x.Key()); err != nil {
				l.Wrong(err.Error())
				return
			}
			was = text
			l.Wrong("")
			return
		}
		n, err := strconv.ParseFloat(strings.ReplaceAll(text, ",", "."), 64)
		if err != nil {
			l.Wrong(words.T("Use a number."))
			return
		}
		x.Value = units.Kept(m, n)
		if err := p.sheet.PutMeasured(x); err != nil {
			l.Wrong(err.Error())
			return
		}
		found, has, was = x, true, text
		l.Wrong("")
		p.grid.update()
	}
	f.OnLeave = keep
	f.OnSubmitted = func(string) { keep(); p.win.win.Canvas().FocusNext() }
	p.pending = append(p.pending, keep)
	return l
}

// newTreatmentsForm lists what was done in the session, with what speaks against it.
func newTreatmentsForm(p *examPage) fyne.CanvasObject {
	v := p.sheet.Visit()
	kinds := exam.TreatmentKinds()
	names, keys := make([]string, len(kinds)), make([]string, len(kinds))
	for i, k := range kinds {
		names[i], keys[i] = words.Of(k.Name), k.Key
	}
	var lines []fyne.CanvasObject
	for _, t := range v.Treatments {
		lines = append(lines, p.treatmentLine(t))
	}
	if len(lines) == 0 {
		lines = append(lines, mark.NewPara(words.T("Nothing entered yet.")).In(look.InkSoft))
	}
	add := mark.Choice(names, keys, "", func(key string) {
		id := p.win.app.records.NewID()
		p.edit(func(v *exam.Visit) { v.Treatments = append(v.Treatments, exam.Treatment{ID: id, Kind: key}) })
		p.choose(tabTreatments)
	})
	add.PlaceHolder = words.T("Add a treatment")
	return mark.NewScroll(mark.Pad(look.Unit, look.Unit, mark.Column(look.Unit*2, append([]fyne.CanvasObject{mark.Heading(words.T("Treatments of this session")), mark.Rule()}, append(lines, add)...)...)))
}

func (p *examPage) treatmentLine(t exam.Treatment) fyne.CanvasObject {
	k, _ := exam.TreatmentByKey(t.Kind)
	at := func(v *exam.Visit) *exam.Treatment {
		for j := range v.Treatments {
			if v.Treatments[j].ID == t.ID {
				return &v.Treatments[j]
			}
		}
		return &exam.Treatment{}
	}
	minutes := ""
	if t.Minutes > 0 {
		minutes = plainNumber(t.Minutes)
	}
	remove := mark.NewButton("", "close", func() {
		p.edit(func(v *exam.Visit) {
			var out []exam.Treatment
			for _, x := range v.Treatments {
				if x.ID != t.ID {
					out = append(out, x)
				}
			}
			v.Treatments = out
		})
		p.choose(tabTreatments)
	}).As(mark.Quiet).WithTip(words.T("Remove"))
	rows := []fyne.CanvasObject{
		mark.Row(look.Unit, []float32{1, 0}, mark.Bold(words.Of(k.Name)).AtLeast(80), remove),
		mark.RowTop(look.Unit, []float32{3, 1},
			mark.NewLabelled(words.T("Parameters: %s", words.Of(k.Params)), p.typedText(t.Params, 1, func(v *exam.Visit, s string) { at(v).Params = s })),
			mark.NewLabelled(words.T("Minutes"), p.typedText(minutes, 1, func(v *exam.Visit, s string) {
				n, err := strconv.ParseFloat(strings.ReplaceAll(s, ",", "."), 64)
				if err == nil && n >= 0 {
					at(v).Minutes = n
				}
			}))),
	}
	rows = append(rows, p.objections(exam.CheckTreatment(p.file.Patient, t, p.sheet.Visit(), p.file.Visits...), t.Override,
		func(v *exam.Visit, s string) { at(v).Override = s })...)
	return mark.Column(look.Unit, append(rows, mark.Rule())...)
}

// objections shows what speaks against something, and takes the reason for doing it all the same.
func (p *examPage) objections(list []exam.Objection, override string, keep func(*exam.Visit, string)) []fyne.CanvasObject {
	if len(list) == 0 {
		return nil
	}
	var out []fyne.CanvasObject
	for _, o := range list {
		say := words.T("Think first: %s", words.Of(o.Why))
		if o.Stop {
			say = words.T("Do not: %s", words.Of(o.Why))
		}
		para := mark.NewPara(say)
		if o.Stop {
			para.Strong().In(look.Worse)
		}
		out = append(out, para)
	}
	if list[0].Stop {
		out = append(out, mark.NewLabelled(words.T("Why it is done all the same"), p.typedText(override, 1, keep)))
	}
	return out
}

// newHomeForm is the home programme.
func newHomeForm(p *examPage) fyne.CanvasObject {
	v := p.sheet.Visit()
	kinds := exam.ExerciseKinds()
	names, keys := make([]string, len(kinds)), make([]string, len(kinds))
	for i, k := range kinds {
		names[i], keys[i] = words.Of(k.Name), k.Key
	}
	var lines []fyne.CanvasObject
	for _, e := range v.Home {
		lines = append(lines, p.exerciseLine(e))
	}
	if len(lines) == 0 {
		lines = append(lines, mark.NewPara(words.T("No exercises yet. They stand on the owner's sheet with boxes to tick.")).In(look.InkSoft))
		if last, ok := p.sheet.Last(); ok && len(last.Home) > 0 {
			lines = append(lines, mark.Left(mark.NewButton(words.T("Take over last visit's programme"), "", func() {
				p.edit(func(v *exam.Visit) {
					for _, e := range last.Home {
						e.ID = p.win.app.records.NewID()
						v.Home = append(v.Home, e)
					}
				})
				p.choose(tabHome)
			})))
		}
	}
	add := mark.Choice(names, keys, "", func(key string) {
		id := p.win.app.records.NewID()
		p.edit(func(v *exam.Visit) {
			v.Home = append(v.Home, exam.HomeExercise{ID: id, Kind: key, Times: 2, DaysWeek: 7})
		})
		p.choose(tabHome)
	})
	add.PlaceHolder = words.T("Add an exercise")
	return mark.NewScroll(mark.Pad(look.Unit, look.Unit, mark.Column(look.Unit*2, append([]fyne.CanvasObject{mark.Heading(words.T("Home programme")), mark.Rule()}, append(lines, add)...)...)))
}

func (p *examPage) exerciseLine(e exam.HomeExercise) fyne.CanvasObject {
	k, _ := exam.ExerciseByKey(e.Kind)
	at := func(v *exam.Visit) *exam.HomeExercise {
		for j := range v.Home {
			if v.Home[j].ID == e.ID {
				return &v.Home[j]
			}
		}
		return &exam.HomeExercise{}
	}
	remove := mark.NewButton("", "close", func() {
		p.edit(func(v *exam.Visit) {
			var out []exam.HomeExercise
			for _, x := range v.Home {
				if x.ID != e.ID {
					out = append(out, x)
				}
			}
			v.Home = out
		})
		p.choose(tabHome)
	}).As(mark.Quiet).WithTip(words.T("Remove"))
	how := e.How
	hint := words.Of(k.How)
	amount := e.Amount
	howField := p.typedText(how, 1, func(v *exam.Visit, s string) { at(v).How = s }).Hint(hint)
	amountField := p.typedText(amount, 1, func(v *exam.Visit, s string) { at(v).Amount = s }).Hint(words.Of(k.Amount))
	count := func(n int) string {
		if n == 0 {
			return ""
		}
		return strconv.Itoa(n)
	}
	whole := func(s string, most int) (int, bool) {
		n, err := strconv.Atoi(strings.TrimSpace(s))
		return n, err == nil && n >= 0 && n <= most
	}
	rows := []fyne.CanvasObject{
		mark.Row(look.Unit, []float32{1, 0}, mark.Bold(words.Of(k.Name)).AtLeast(80), remove),
		mark.NewPara(hint).In(look.InkSoft),
		mark.RowTop(look.Unit, []float32{2, 1, 1},
			mark.NewLabelled(words.T("How much"), amountField),
			mark.NewLabelled(words.T("Times a day"), p.typedText(count(e.Times), 1, func(v *exam.Visit, s string) {
				if n, ok := whole(s, 24); ok {
					at(v).Times = n
				}
			})),
			mark.NewLabelled(words.T("Days a week"), p.typedText(count(e.DaysWeek), 1, func(v *exam.Visit, s string) {
				if n, ok := whole(s, 7); ok {
					at(v).DaysWeek = n
				}
			}))),
		mark.NewLabelled(words.T("In other words"), howField),
	}
	rows = append(rows, p.objections(exam.CheckExercise(p.file.Patient, e, p.sheet.Visit(), p.file.Visits...), e.Override,
		func(v *exam.Visit, s string) { at(v).Override = s })...)
	return mark.Column(look.Unit, append(rows, mark.Rule())...)
}

// explain says why an alert matters, what to do, and on what grounds.
func (p *examPage) explain(a alertLine) {
	p.win.showSheet(words.T("Why, and what to do"), mark.Column(look.Unit, mark.NewPara(a.Title).Strong().In(look.Call), mark.NewPara(a.Seen), mark.NewPara(a.Why),
		mark.NewPara(words.T("Source: %s", a.Source)).In(look.InkSoft).As(look.Small)), 640)
}

// answer asks who was told of an alert.
func (p *examPage) answer(a alertLine) {
	told := mark.NewField(p.file.Patient.Veterinarian.Name, nil)
	note := mark.NewArea("", 3, nil)
	var phones []fyne.CanvasObject
	for _, c := range []exam.Contact{p.file.Patient.Veterinarian, p.file.Patient.OutOfHours, p.win.app.practice.OutOfHours} {
		if c.Phone != "" {
			phones = append(phones, mark.NewPara(c.Name+"  "+c.Phone).Strong())
		}
	}
	if len(phones) == 0 {
		phones = append(phones, mark.NewPara(words.T("No telephone of a veterinarian is on file; it is entered on the patient's page.")).In(look.Worse))
	}
	wrong := mark.NewPara("").In(look.Worse)
	do := func() {
		if strings.TrimSpace(told.Text) == "" {
			wrong.Set(words.T("Say who was told."))
			return
		}
		now := p.win.app.now()
		examiner := p.win.app.examiner
		p.edit(func(v *exam.Visit) {
			v.Answers = append(v.Answers, exam.Acknowledgement{Rule: a.Rule, Told: strings.TrimSpace(told.Text), Note: strings.TrimSpace(note.Text), Examiner: examiner, At: now})
		})
		p.win.hideSheet()
	}
	told.OnSubmitted = func(string) { do() }
	body := []fyne.CanvasObject{mark.NewPara(a.Title).Strong().In(look.Call), mark.NewPara(a.Seen), mark.NewPara(a.Why)}
	body = append(body, phones...)
	body = append(body, mark.NewLabelled(words.T("Who was told"), told), mark.NewLabelled(words.T("What was agreed"), note), wrong)
	p.win.showSheet(words.T("Call the veterinarian"), mark.Column(look.Unit, body...), 600, mark.NewButton(words.T("Keep"), "tick", do).As(mark.Main))
	p.win.win.Canvas().Focus(told)
}
