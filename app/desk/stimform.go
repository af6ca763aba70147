package desk

import (
	"slices"
	"strconv"
	"strings"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/stim"
)

// earlier are the patient's visits before the one shown, in the order of time.
func (p *examPage) earlier() []exam.Visit {
	now := p.sheet.Visit()
	return slices.DeleteFunc(slices.Clone(p.file.Visits), func(v exam.Visit) bool { return v.ID == now.ID || v.Examined.After(now.Examined) })
}

// putStim writes a record of stimulation of this visit, or takes it out.
func (p *examPage) putStim(r exam.StimRecord, gone bool) {
	p.edit(func(v *exam.Visit) {
		at := slices.IndexFunc(v.Stim, func(x exam.StimRecord) bool { return x.ID == r.ID })
		switch {
		case gone && at >= 0:
			v.Stim = slices.Delete(v.Stim, at, at+1)
		case at >= 0:
			v.Stim[at] = r
		case !gone:
			v.Stim = append(v.Stim, r)
		}
	})
}

// stimField is a field whose text is kept when it is left; what cannot be taken is said beside it.
func (p *examPage) stimField(name, value, hint string, keep func(text string) error) *mark.Labelled {
	f := mark.NewField(value, nil).Hint(hint)
	l := mark.NewLabelled(name, f)
	last := value
	store := func() {
		if f.Text == last {
			return
		}
		if err := keep(strings.TrimSpace(f.Text)); err != nil {
			l.Wrong(err.Error())
		} else {
			last = f.Text
			l.Wrong("")
		}
		if p.reflow != nil {
			p.reflow()
		}
	}
	f.OnLeave = store
	f.OnSubmitted = func(string) { store(); p.win.win.Canvas().FocusNext() }
	p.pending = append(p.pending, store)
	return l
}

// newStimForm is the part of a visit with strength–duration tests and the log of stimulation.
func newStimForm(p *examPage) fyne.CanvasObject {
	v := p.sheet.Visit()
	consent, asked := stim.ConsentIn(append(p.earlier(), v))
	var tests, sessions []fyne.CanvasObject
	for _, r := range v.Stim {
		switch r.Kind {
		case stim.KindTest:
			if t, err := stim.ReadTest(r); err == nil {
				tests = append(tests, p.stimTest(t), mark.Rule())
			} else {
				tests = append(tests, cautionLine(err.Error()))
			}
		case stim.KindSession:
			if s, err := stim.ReadSession(r); err == nil {
				sessions = append(sessions, p.stimSession(s), mark.Rule())
			} else {
				sessions = append(sessions, cautionLine(err.Error()))
			}
		}
	}
	addTest := mark.NewButton(words.T("Add a test"), "add", func() {
		t := stim.Test{ID: p.win.app.records.NewID(), Muscle: words.T("quadriceps"), Site: exam.PelvicLeft.String(), Law: stim.Weiss.String(), Examiner: p.win.app.examiner}
		for _, w := range view.StimWidths {
			t.Readings = append(t.Readings, stim.Reading{Width: w})
		}
		if r, err := t.Record(); err == nil {
			p.putStim(r, false)
			p.choose(tabStim)
		}
	})
	addSession := mark.NewButton(words.T("Add a session"), "add", func() {
		s := stim.Session{ID: p.win.app.records.NewID(), Aim: "strengthen", Site: exam.PelvicLeft.String()}
		if last, ok := p.lastSession(); ok {
			last.ID, last.SkinBefore, last.SkinAfter, last.Confirmed, last.Note = s.ID, "", "", "", ""
			s = last
		}
		if r, err := s.Record(); err == nil {
			p.putStim(r, false)
			p.choose(tabStim)
		}
	})
	log := []fyne.CanvasObject{}
	if ok, why := view.StimAllowed(consent, asked); ok {
		log = append(log, mark.Left(addSession))
	} else {
		log = append(log, cautionLine(why))
	}
	form := mark.NewScroll(mark.Pad(look.Unit, look.Unit, mark.Column(look.Unit*3,
		section(words.T("Strength–duration test"), append([]fyne.CanvasObject{
			mark.NewPara(words.T("The weakest current that makes the muscle twitch, at several pulse widths. Repeat each threshold; one electrode, one place, clipped or not as last time.")).In(look.InkSoft),
			mark.Left(addTest)}, tests...)...),
		section(words.T("Before the first session"), p.stimQuestions(consent, asked)...),
		section(words.T("Stimulation log"), append([]fyne.CanvasObject{
			mark.NewPara(words.T("Ranges are guidance from the literature. Current and indication are chosen by whoever is licensed to.")).In(look.InkSoft)},
			append(log, sessions...)...)...))))
	p.reflow = form.Reflow
	return form
}

func (p *examPage) lastSession() (stim.Session, bool) {
	for _, v := range slices.Backward(p.earlier()) {
		for _, r := range slices.Backward(v.Stim) {
			if s, err := stim.ReadSession(r); err == nil {
				return s, true
			}
		}
	}
	return stim.Session{}, false
}

// stimQuestions asks what speaks against stimulation, or says what was answered.
func (p *examPage) stimQuestions(c stim.Consent, asked bool) []fyne.CanvasObject {
	v := p.sheet.Visit()
	mine := slices.IndexFunc(v.Stim, func(r exam.StimRecord) bool { return r.Kind == stim.KindConsent })
	begin := func() {
		r, err := stim.Consent{Answers: map[string]bool{}, Examiner: p.win.app.examiner, At: exam.DayOf(v.Examined)}.Record(p.win.app.records.NewID())
		if err == nil {
			p.putStim(r, false)
			p.choose(tabStim)
		}
	}
	if mine < 0 {
		if !asked {
			return []fyne.CanvasObject{mark.NewPara(words.T("Nobody has asked yet what speaks against stimulation.")), mark.Left(mark.NewButton(words.T("Ask the questions"), "help", begin).As(mark.Main))}
		}
		lines := []fyne.CanvasObject{mark.NewPara(words.T("Asked on %s by %s.", view.DateWords(c.At), c.Examiner))}
		for _, q := range stim.Questions() {
			if c.Answers[q.Key] {
				say := words.T("yes: %s", words.Of(q.Words))
				if why := c.Reasons[q.Key]; why != "" {
					say = words.T("%s (%s)", say, why)
				}
				lines = append(lines, cautionLine(say))
			}
		}
		return append(lines, mark.Left(mark.NewButton(words.T("Ask again"), "help", begin)))
	}
	rec := v.Stim[mine]
	store := func() {
		if r, err := c.Record(rec.ID); err == nil {
			p.putStim(r, false)
		}
	}
	if c.Reasons == nil {
		c.Reasons = map[string]string{}
	}
	if c.Answers == nil {
		c.Answers = map[string]bool{}
	}
	var lines []fyne.CanvasObject
	for _, x := range stim.Questions() {
		q := x
		now := ""
		if yes, ok := c.Answers[q.Key]; ok {
			now = map[bool]string{true: "yes", false: "no"}[yes]
		}
		row := mark.Row(look.Unit*2, []float32{3, 1}, mark.NewPara(words.Of(q.Words)),
			mark.Choice([]string{words.T("not answered"), words.T("no"), words.T("yes")}, []string{"", "no", "yes"}, now, func(s string) {
				if s == "" {
					delete(c.Answers, q.Key)
				} else {
					c.Answers[q.Key] = s == "yes"
				}
				store()
				p.choose(tabStim)
			}))
		lines = append(lines, row)
		if now == "yes" {
			if q.Stop {
				lines = append(lines, cautionLine(words.T("This forbids stimulation. Source: %s.", q.Source)))
			} else {
				lines = append(lines, p.stimField(words.T("Why it is done all the same"), c.Reasons[q.Key], "", func(s string) error {
					c.Reasons[q.Key] = s
					store()
					return nil
				}))
			}
		}
	}
	none := mark.NewButton(words.T("All the others: no"), "tick", func() {
		for _, q := range stim.Questions() {
			if _, ok := c.Answers[q.Key]; !ok {
				c.Answers[q.Key] = false
			}
		}
		store()
		p.choose(tabStim)
	})
	return append(lines, mark.Left(none))
}

// stimSites are the places that a test or a session names.
func stimSites() (shown, values []string) {
	for _, s := range exam.Limbs() {
		shown, values = append(shown, view.SiteName(s)), append(values, s.String())
	}
	for _, s := range []exam.Site{exam.Left, exam.Right, exam.Cervical, exam.Thoracolumbar, exam.Lumbar, exam.Lumbosacral, exam.TailBase} {
		shown, values = append(shown, view.SiteName(s)), append(values, s.String())
	}
	return shown, values
}

// stimTest is one test: its thresholds, its curve and what it says.
func (p *examPage) stimTest(t stim.Test) fyne.CanvasObject {
	say := mark.Column(look.Unit / 2)
	host := newChartHost(nil, fyne.NewSize(300, 230*max(1, look.Scale()*0.8)))
	earlier := p.earlier()
	show := func() {
		r := view.NewStimResult(t, earlier)
		say.Objects = nil
		if r.Chronaxie != "" {
			say.Add(mark.NewPara(r.Chronaxie).Strong())
			say.Add(mark.NewPara(words.T("The chronaxie looks %s.", r.Label)))
			say.Add(mark.NewPara(r.Rheobase))
			say.Add(mark.NewPara(r.Fit).In(look.InkSoft))
		}
		if r.Change != "" {
			say.Add(mark.NewPara(r.Change))
		}
		for _, c := range r.Cautions {
			say.Add(cautionLine(c))
		}
		say.Refresh()
		host.set(r.Chart)
	}
	keep := func() error {
		if err := t.Validate(); err != nil {
			return err
		}
		r, err := t.Record()
		if err == nil {
			p.putStim(r, false)
			show()
		}
		return err
	}
	word := func(name, value, hint string, set func(string)) fyne.CanvasObject {
		return p.stimField(name, value, hint, func(s string) error { set(s); return keep() })
	}
	sites, keys := stimSites()
	laws, lawKeys := []string{}, []string{}
	for _, l := range stim.Laws() {
		laws, lawKeys = append(laws, view.LawName(l)), append(lawKeys, l.String())
	}
	remove := mark.NewButton("", "close", func() {
		p.putStim(exam.StimRecord{ID: t.ID}, true)
		p.choose(tabStim)
	}).As(mark.Quiet).WithTip(words.T("Remove"))
	var cells []fyne.CanvasObject
	for i := range t.Readings {
		k := i
		cells = append(cells, p.stimField(words.T("%s ms", plainNumber(t.Readings[i].Width)), view.CurrentsWords(t.Readings[i].Currents), words.T("mA"), func(s string) error {
			list, err := view.ParseCurrents(s)
			if err != nil {
				return err
			}
			t.Readings[k].Currents = list
			return keep()
		}))
	}
	another := p.stimField(words.T("Another width, ms"), "", "0.5", func(s string) error {
		if s == "" {
			return nil
		}
		w, err := strconv.ParseFloat(strings.ReplaceAll(s, ",", "."), 64)
		if err != nil || !(w > 0) {
			return &exam.Invalid{Field: words.T("pulse width"), Value: s, Allowed: words.T("more than 0 ms")}
		}
		if slices.ContainsFunc(t.Readings, func(r stim.Reading) bool { return r.Width == w }) {
			return nil
		}
		t.Readings = append(t.Readings, stim.Reading{Width: w})
		slices.SortFunc(t.Readings, func(a, b stim.Reading) int {
			if a.Width < b.Width {
				return -1
			}
			return 1
		})
		if err := keep(); err != nil {
			return err
		}
		p.win.app.onUI(func() {
			if p.tab == tabStim {
				p.choose(tabStim)
			}
		})
		return nil
	})
	cells = append(cells, another)
	columns := 5
	if look.Scale() > 1.3 {
		columns = 3
	}
	var table []fyne.CanvasObject
	for i := 0; i < len(cells); i += columns {
		row, weights := cells[i:min(i+columns, len(cells)):min(i+columns, len(cells))], []float32{}
		for len(row) < columns {
			row = append(row, mark.Space(1, 1))
		}
		for range row {
			weights = append(weights, 1)
		}
		table = append(table, mark.RowTop(look.Unit, weights, row...))
	}
	show()
	return mark.Column(look.Unit,
		mark.RowTop(look.Unit, []float32{2, 2, 2, 0},
			word(words.T("Muscle"), t.Muscle, "", func(s string) { t.Muscle = s }),
			mark.NewLabelled(words.T("Place"), mark.Choice(sites, keys, t.Site, func(s string) { t.Site = s; _ = keep() })),
			mark.NewLabelled(words.T("Law"), mark.Choice(laws, lawKeys, t.Law, func(s string) { t.Law = s; _ = keep() })), remove),
		mark.RowTop(look.Unit, []float32{1, 1}, word(words.T("Electrode"), t.Electrode, words.T("size and kind"), func(s string) { t.Electrode = s }),
			word(words.T("Point on the muscle"), t.Point, "", func(s string) { t.Point = s })),
		mark.Wrapped(look.Unit, mark.Tick(words.T("Clipped"), t.Clipped, func(on bool) { t.Clipped = on; _ = keep() }),
			mark.Tick(words.T("Constant voltage"), t.Voltage, func(on bool) { t.Voltage = on; _ = keep() })),
		mark.NewPara(words.T("Thresholds in mA; repeats with a space between them")).In(look.InkSoft),
		mark.Column(look.Unit, table...),
		mark.RowTop(look.Unit*2, []float32{1, 1}, say, host),
		word(words.T("Note"), t.Note, "", func(s string) { t.Note = s }))
}

// stimSession is one entry of the log, with what speaks against it and what lies outside the ranges.
func (p *examPage) stimSession(s stim.Session) fyne.CanvasObject {
	remarks := mark.Column(look.Unit / 2)
	earlier := p.earlier()
	show := func() {
		remarks.Objects = nil
		for _, r := range view.SessionRemarks(s) {
			remarks.Add(cautionLine(r))
		}
		for _, o := range stim.Check(p.file.Patient, s, p.sheet.Visit(), earlier...) {
			say := words.T("Think first: %s", words.Of(o.Why))
			if o.Stop {
				say = words.T("Do not: %s", words.Of(o.Why))
			}
			remarks.Add(cautionLine(say))
		}
		remarks.Refresh()
	}
	keep := func() error {
		if err := s.Validate(); err != nil {
			return err
		}
		r, err := s.Record()
		if err == nil {
			p.putStim(r, false)
			show()
		}
		return err
	}
	word := func(name, value string, set func(string)) fyne.CanvasObject {
		return p.stimField(name, value, "", func(x string) error { set(x); return keep() })
	}
	figure := func(name string, v *float64) fyne.CanvasObject {
		text := ""
		if *v != 0 {
			text = plainNumber(*v)
		}
		return p.stimField(name, text, "", func(x string) error {
			was := *v
			if *v = 0; x != "" {
				n, err := strconv.ParseFloat(strings.ReplaceAll(x, ",", "."), 64)
				if err != nil {
					*v = was
					return &exam.Invalid{Field: name, Value: x, Allowed: words.T("a number")}
				}
				*v = n
			}
			err := keep()
			if err != nil {
				*v = was
			}
			return err
		})
	}
	aims, aimKeys := []string{}, []string{}
	for _, a := range stim.Aims() {
		aims, aimKeys = append(aims, words.Of(a.Name)), append(aimKeys, a.Key)
	}
	sites, keys := stimSites()
	pick := func(list []string, now string, set func(string)) fyne.CanvasObject {
		return wordChoice(list, now, func(x string) { set(x); _ = keep() })
	}
	remove := mark.NewButton("", "close", func() {
		p.putStim(exam.StimRecord{ID: s.ID}, true)
		p.choose(tabStim)
	}).As(mark.Quiet).WithTip(words.T("Remove"))
	figures := []fyne.CanvasObject{figure(words.T("Frequency, Hz"), &s.Frequency), figure(words.T("Pulse width, µs"), &s.Pulse), figure(words.T("Amplitude, mA"), &s.Amplitude),
		figure(words.T("On, s"), &s.On), figure(words.T("Off, s"), &s.Off), figure(words.T("Ramp, s"), &s.Ramp), figure(words.T("Minutes"), &s.Minutes)}
	half := mark.Column(look.Unit, mark.RowTop(look.Unit, []float32{1, 1, 1, 1}, figures[0], figures[1], figures[2], figures[6]),
		mark.RowTop(look.Unit, []float32{1, 1, 1, 1}, figures[3], figures[4], figures[5], mark.Space(1, 1)))
	if look.Scale() > 1.3 {
		half = mark.Column(look.Unit, mark.RowTop(look.Unit, []float32{1, 1}, figures[0], figures[1]), mark.RowTop(look.Unit, []float32{1, 1}, figures[2], figures[6]),
			mark.RowTop(look.Unit, []float32{1, 1, 1}, figures[3], figures[4], figures[5]))
	}
	note := ""
	if a, ok := stim.AimByKey(s.Aim); ok {
		note = words.T("%s. Source: %s.", words.Of(a.Note), a.Source)
	}
	show()
	return mark.Column(look.Unit,
		mark.RowTop(look.Unit, []float32{2, 1.3, 1.3, 0}, mark.NewLabelled(words.T("Aim"), mark.Choice(aims, aimKeys, s.Aim, func(x string) {
			s.Aim = x
			if keep() == nil {
				p.choose(tabStim)
			}
		})), mark.NewLabelled(words.T("Place"), mark.Choice(sites, keys, s.Site, func(x string) { s.Site = x; _ = keep() })),
			word(words.T("Muscle"), s.Muscle, func(x string) { s.Muscle = x }), remove),
		mark.NewPara(note).In(look.InkSoft),
		half,
		pair(word(words.T("Electrodes"), s.Electrodes, func(x string) { s.Electrodes = x }),
			mark.NewLabelled(words.T("Waveform"), pick(stim.WaveformWords(), s.Waveform, func(x string) { s.Waveform = x }))),
		pair(mark.NewLabelled(words.T("Skin before"), pick(stim.SkinWords(), s.SkinBefore, func(x string) { s.SkinBefore = x })),
			mark.NewLabelled(words.T("Skin after"), pick(stim.SkinWords(), s.SkinAfter, func(x string) { s.SkinAfter = x }))),
		remarks,
		pair(word(words.T("Why it is done all the same"), s.Confirmed, func(x string) { s.Confirmed = x }), word(words.T("Note"), s.Note, func(x string) { s.Note = x })))
}
