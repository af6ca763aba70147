package sheet

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
	"time"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"cordwalk.example/cordwalk/app/chart"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
	"cordwalk.example/cordwalk/exam/localise"
	"cordwalk.example/cordwalk/exam/progress/repeat"
	"cordwalk.example/cordwalk/exam/scale"
)

// ErrNoAlert means that a referral letter was asked for and nothing is urgent.
var ErrNoAlert = errors.New("no alert is open")

// CourseCharts is the course as the serial model sees it, for the clinical papers. Without
// it they show the plain segment score.
type CourseCharts struct {
	Sentence string // the change since the last visit and its probability, in English
	Strip    chart.Strip
}

// grade writes a finding as its grade, with a level where there is one; a dash for «not tested».
func gradeText(f exam.Finding, ok bool) string {
	g, tested := f.Result.Grade()
	if !ok || !tested {
		return "–"
	}
	s := strconv.Itoa(int(g))
	if f.Level != 0 {
		s += " " + f.Level.String()
	}
	return s
}

// itemTitle is the item's name as a clinician reads it.
func itemTitle(lang string, i exam.Item) string {
	return words.OfIn(lang, upperFirst(strings.ReplaceAll(i.String(), "-", " ")))
}

// gridRow is one line of the grid: an item, and its cells at three visits.
type gridRow struct {
	label string
	cells []gridCell
	rank  int // 0 abnormal today, or abnormal before and not tested today; 1 abnormal before; 2 never abnormal
}

type gridCell struct {
	site              string
	first, last, now  string
	nowBad, different bool // abnormal today; abnormal on any of the days
}

// grid lists every cell that any of the three visits tested, item by item.
func grid(lang string, first, last, now exam.Visit) []gridRow {
	keys := map[exam.Key]bool{}
	for _, v := range []exam.Visit{first, last, now} {
		for _, f := range v.Findings {
			keys[f.Key()] = true
		}
	}
	var rows []gridRow
	for _, item := range exam.Items() {
		var row gridRow
		row.label, row.rank = itemTitle(lang, item), 2
		for _, site := range item.Info().Sites {
			var here []exam.Key
			for k := range keys {
				if k.Item == item && k.Site == site {
					here = append(here, k)
				}
			}
			slices.SortFunc(here, func(a, b exam.Key) int { return strings.Compare(a.String(), b.String()) })
			for _, k := range here {
				a, okA := first.Find(k)
				b, okB := last.Find(k)
				c, okC := now.Find(k)
				cell := gridCell{site: siteShort(lang, k), first: gradeText(a, okA), last: gradeText(b, okB), now: gradeText(c, okC)}
				cell.nowBad = okC && c.Abnormal()
				before := okA && a.Abnormal() || okB && b.Abnormal()
				cell.different = before || cell.nowBad
				switch {
				case cell.nowBad, before && !c.Result.Tested():
					row.rank = 0
				case before:
					row.rank = min(row.rank, 1)
				}
				row.cells = append(row.cells, cell)
			}
		}
		if len(row.cells) > 0 {
			rows = append(rows, row)
		}
	}
	slices.SortStableFunc(rows, func(a, b gridRow) int { return a.rank - b.rank })
	return rows
}

// step stands between the grades of two visits, with thin spaces so that a dash stays one.
const step = "\u2009›\u2009"

// siteShort is a site in a few letters.
func siteShort(lang string, k exam.Key) string {
	var s string
	switch k.Site {
	case exam.ThoracicLeft:
		s = words.In(lang, "TL")
	case exam.ThoracicRight:
		s = words.In(lang, "TR")
	case exam.PelvicLeft:
		s = words.In(lang, "PL")
	case exam.PelvicRight:
		s = words.In(lang, "PR")
	case exam.Left:
		s = words.In(lang, "L")
	case exam.Right:
		s = words.In(lang, "R")
	case exam.Midline:
		s = ""
	default:
		s = words.OfIn(lang, strings.ReplaceAll(k.Site.String(), "-", " "))
	}
	if k.Digit != exam.AnyDigit {
		s += " " + words.OfIn(lang, k.Digit.String())
	}
	if k.Joint != exam.NoJoint {
		s += " " + words.OfIn(lang, k.Joint.String())
	}
	return strings.TrimSpace(s)
}

// clinical is what the clinical papers are made of.
type clinical struct {
	in          Input
	first, prev exam.Visit
	now         exam.Visit
	result      *localise.Result // nil where the species has no model
	why         string           // why there is no result
	course      *CourseCharts
}

// check refuses a clinical paper where there is nothing to report.
func (in Input) checkClinical() error {
	if len(in.Visits) == 0 {
		return fmt.Errorf("%s has no visit yet: record one first: %w", in.Patient.Name, ErrNoVisit)
	}
	return nil
}

func newClinical(in Input, course *CourseCharts) (*clinical, error) {
	if err := in.checkClinical(); err != nil {
		return nil, err
	}
	c := &clinical{in: in, now: in.last(), first: in.Visits[0], course: course}
	c.prev = c.first
	if n := len(in.Visits); n > 1 {
		c.prev = in.Visits[n-2]
	}
	e, err := localise.New(in.Patient.Species)
	if err == nil {
		var r *localise.Result
		if r, err = e.Compute(localise.OfVisit(in.Patient, c.now)); err == nil {
			c.result = r
		}
	}
	if err != nil {
		c.why = words.In(in.lang(), "For this species nothing is on record from which a site could be worked out.")
	}
	return c, nil
}

// Clinical makes the clinical summary for the veterinarian: two pages at most. Course may be nil.
func Clinical(in Input, course *CourseCharts) (Document, error) {
	c, err := newClinical(in, course)
	if err != nil {
		return Document{}, err
	}
	lang := in.lang()
	title := words.In(lang, "Clinical summary of %s", in.Patient.Name)
	day := dayWords(lang, c.now.Examined)
	doc := newDoc(in.letter(), lang, title, title+", "+day, in.Practice.Name, in.At)
	w, h := doc.GetPageSize()
	var prose []string
	p := &page{doc: doc, pal: chart.Print(), lang: lang, w: w, h: h, margin: 36, prose: &prose, lost: map[string]bool{}}
	if in.Options.Grey {
		p.pal = chart.Grey()
	}
	full := false
	for _, part := range []func(*page, float64){c.pageOne, c.pageTwo} {
		doc.AddPage()
		// Text shrinks until the page holds it; pages cut their own lists at the smallest size.
		size := 9.6
		for ; size > 6.8; size -= 0.2 {
			p.dry, p.size, p.y = true, size, p.margin*0.8
			part(p, h)
			if p.y <= h-p.margin*0.9 {
				break
			}
		}
		p.dry, p.size, p.y = false, size, p.margin*0.8
		part(p, h)
		full = full || p.y > h-p.margin*0.8
		c.footer(p, doc.PageNo())
	}
	out := Document{Pages: doc.PageCount(), Name: fileName(in.Patient.Name, c.now.Examined, "summary", "pdf"), Subject: title + ", " + day, Kind: KindSummary, Lang: lang, Prose: prose, Summary: c.inShort(), Noted: check(in, c.now.Home).noted}
	if full {
		out.Warnings = append(out.Warnings, tooLong())
	}
	if len(p.lost) > 0 {
		out.Warnings = append(out.Warnings, lostLetters(p.lost))
	}
	out.PDF, err = output(doc)
	return out, err
}

// tooLong says that a page holds more than it should even in the smallest letters.
func tooLong() string {
	return words.T("the end of a page did not fit: shorten problems, precautions, medicines or notes, and print it again")
}

// inShort is what the record of a paper that was sent says of it: what is urgent, the likely
// site and the course.
func (c *clinical) inShort() string {
	lang := c.in.lang()
	var out []string
	for _, n := range sortedNotices(c.in.Notices) {
		out = append(out, upperFirst(urgencyWord(lang, n.Urgency))+colon(lang)+n.Words)
	}
	if c.result != nil {
		out = append(out, upperFirst(Say(lang, c.result.Summary))+".")
	}
	if c.course != nil {
		out = append(out, Say(lang, c.course.Sentence))
	}
	return strings.Join(out, " ")
}

// sortedNotices returns the notices, the most urgent first.
func sortedNotices(list []Notice) []Notice {
	list = slices.Clone(list)
	slices.SortStableFunc(list, func(a, b Notice) int { return int(a.Urgency) - int(b.Urgency) })
	return list
}

// footer says who made the paper, when, and what it is not.
func (c *clinical) footer(p *page, number int) {
	x, w := p.margin, p.w-2*p.margin
	y := p.h - p.margin*0.55
	left := words.In(p.lang, "Supports and does not replace the examination by a licensed veterinarian.")
	right := words.In(p.lang, "%[1]s, printed %[2]s, page %[3]d of 2", c.in.Patient.Name, c.in.At.Format("2006-01-02 15:04 -07:00"), number)
	p.put(x, y, left, 6.8, false, p.pal.Soft)
	p.right(x+w, y, chart.Fit(right, vg.Length(w-width(left, 6.8, false)-10), 6.8, false), 6.8, false, p.pal.Soft)
}

// title writes the practice, the paper's name and the mark of the demo practice.
func (c *clinical) title(p *page, what string) {
	in := c.in
	x, w := p.margin, p.w-2*p.margin
	contact := in.Practice.Contact
	p.para(x, w*0.7, in.Practice.Name, p.size*1.2, true, p.pal.Ink, 1)
	var parts []string
	for _, s := range []string{contact.Address, unbroken(contact.Phone), contact.Email} {
		if s = strings.TrimSpace(s); s != "" {
			parts = append(parts, s)
		}
	}
	p.para(x, w, strings.Join(parts, "  ·  "), p.size*0.9, false, p.pal.Soft, 1)
	if in.Patient.Demo || in.Practice.Demo {
		s := in.text(textDemo)
		bw := width(s, p.size, true) + 10
		p.box(x+w-bw, p.margin*0.8, bw, p.size*1.7, nil, &p.pal.Ink, 1)
		p.put(x+w-bw+5, p.margin*0.8+p.size*1.2, s, p.size, true, p.pal.Ink)
	}
	p.rule(x, w)
	p.para(x, w, what, p.size*1.6, true, p.pal.Ink, 1)
}

// signalment says species, breed, sex, age and weight.
func (c *clinical) signalment() string {
	pt, lang := c.in.Patient, c.in.lang()
	parts := []string{words.OfIn(lang, pt.Species.String())}
	if pt.Breed != "" {
		parts = append(parts, pt.Breed)
	}
	sex := words.OfIn(lang, pt.Sex.String())
	if pt.Sex == exam.SexUnknown {
		sex = words.In(lang, "sex not known")
	}
	if pt.Neutered {
		sex += ", " + words.In(lang, "neutered")
	}
	parts = append(parts, sex)
	if y, ok := pt.AgeYears(c.now.Examined); ok {
		parts = append(parts, words.In(lang, "%s years", decimal(lang, y, 1)))
	}
	if kg := c.kg(); kg > 0 {
		if c.in.Practice.Pounds {
			parts = append(parts, decimal(lang, kg*2.20462, 1)+" lb") // 1 lb = 0.45359237 kg
		} else {
			parts = append(parts, decimal(lang, kg, 1)+" kg")
		}
	}
	return upperFirst(strings.Join(parts, ", "))
}

// kg is the latest weight on file, 0 where there is none.
func (c *clinical) kg() float64 {
	for i := len(c.in.Visits) - 1; i >= 0; i-- {
		if m, ok := c.in.Visits[i].Measured(exam.Weight, exam.NoSite); ok {
			return m.Value
		}
	}
	if n := len(c.in.Patient.Weights); n > 0 {
		return c.in.Patient.Weights[n-1].Kg
	}
	return 0
}

// line writes «label: text», the label in bold, wrapped.
func (p *page) line(x, w float64, label, s string, most int) {
	if strings.TrimSpace(s) == "" {
		return
	}
	label += colon(p.lang)
	p.note(label + s)
	lw := width(label, p.size, true)
	lines := wrap(p.clean(s), w-lw, p.size, false, most)
	for i, l := range lines {
		p.y += lead(p.size)
		if i == 0 {
			p.put(x, p.y-p.size*0.3, label, p.size, true, p.pal.Ink)
		}
		p.put(x+lw, p.y-p.size*0.3, l, p.size, false, p.pal.Ink)
	}
}

func (c *clinical) problems() string {
	lang := c.in.lang()
	var out []string
	for _, pr := range c.in.Patient.Problems {
		s := pr.Diagnosis
		if pr.Level != "" {
			s += " " + pr.Level
		}
		if pr.Side != "" {
			s += ", " + words.OfIn(lang, pr.Side)
		}
		for _, d := range []struct {
			what string
			on   exam.Date
		}{
			{words.In(lang, "onset"), pr.Onset}, {words.In(lang, "surgery"), pr.Surgery}, {words.In(lang, "resolved"), pr.Resolved},
		} {
			if d.on != "" {
				s += ", " + d.what + " " + string(d.on)
			}
		}
		out = append(out, s)
	}
	return strings.Join(out, "; ")
}

func (c *clinical) precautions() string {
	var out []string
	for _, x := range c.in.Patient.Precautions {
		s := words.OfIn(c.in.lang(), strings.ReplaceAll(x.Code, "-", " "))
		if x.Site != "" {
			s += ", " + words.OfIn(c.in.lang(), strings.ReplaceAll(x.Site, "-", " "))
		}
		if x.Until != "" {
			s = words.In(c.in.lang(), "%[1]s until %[2]s", s, string(x.Until))
		}
		if x.Note != "" {
			s += " (" + x.Note + ")"
		}
		out = append(out, s)
	}
	return strings.Join(out, "; ")
}

func (c *clinical) medicines() string {
	var out []string
	today := string(exam.DayOf(c.now.Examined))
	for _, m := range c.in.Patient.Medicines {
		if m.Stop != "" && string(m.Stop) < today {
			continue
		}
		s := m.Name
		if m.Dose != "" {
			s += " " + m.Dose
		}
		out = append(out, s)
	}
	for _, d := range c.now.Doses {
		out = append(out, words.In(c.in.lang(), "%[1]s given %[2]s h before", d.Medicine, decimal(c.in.lang(), d.Hours, -1)))
	}
	return strings.Join(out, "; ")
}

func (c *clinical) conditions() string {
	var out []string
	add := func(label, word string) {
		if word != "" {
			out = append(out, words.OfIn(c.in.lang(), label)+" "+words.OfIn(c.in.lang(), word))
		}
	}
	add("sedation", c.now.Sedation.String())
	add("aid", c.now.Aid)
	add("surface", c.now.Surface)
	add("session", c.now.Session)
	if len(c.in.Visits) > 1 {
		if same, differ := exam.LikeForLike(c.prev, c.now); !same {
			for i := range differ {
				differ[i] = words.OfIn(c.in.lang(), differ[i])
			}
			out = append(out, words.In(c.in.lang(), "not like for like with the last visit: %s", strings.Join(differ, ", ")))
		}
	}
	return strings.Join(out, "; ")
}

func urgencyWord(lang string, u Urgency) string {
	switch u {
	case Now:
		return words.In(lang, "now")
	case Today:
		return words.In(lang, "today")
	}
	return words.In(lang, "next working day")
}

// alerts lists what is urgent, with who was told.
func (c *clinical) alerts(p *page, x, w float64) {
	in := c.in
	if len(in.Notices) == 0 {
		return
	}
	list := sortedNotices(in.Notices)
	p.heading(x, w, words.In(p.lang, "Alerts"))
	for i, n := range list {
		if i == 6 {
			p.para(x, w, in.text(textMore, len(list)-6), p.size, true, p.pal.Ink, 1)
			break
		}
		s := upperFirst(urgencyWord(p.lang, n.Urgency)) + colon(p.lang) + n.Words
		if !n.Since.IsZero() && n.Since.Before(c.now.Examined) {
			s += " (" + words.In(p.lang, "since %s", dayWords(p.lang, n.Since)) + ")"
		}
		if n.Told != "" {
			s += " – " + words.In(p.lang, "told: %s", n.Told)
		} else {
			s += " – " + words.In(p.lang, "nobody told yet")
		}
		p.note(s)
		p.para(x, w, s, p.size, n.Told == "", p.pal.Call, 6)
	}
}

// likely says the likely site with its probability, what speaks for and against, and what to test next.
func (c *clinical) likely(p *page, x, w float64) {
	p.heading(x, w, words.In(p.lang, "Likely site (from today's exam, no diagnosis)"))
	if c.result == nil {
		p.para(x, w, c.why, p.size, false, p.pal.Ink, 2)
		return
	}
	r := c.result
	site := upperFirst(Say(p.lang, r.Summary))
	p.note(site)
	p.para(x, w, site, p.size*1.1, true, p.pal.Ink, 2)
	var regions []string
	for i, g := range r.Regions {
		if i < 4 && g.Probability >= 0.02 {
			regions = append(regions, fmt.Sprintf("%s %.0f %%", Say(p.lang, g.Region), g.Probability*100))
		}
	}
	var kinds []string
	for i, k := range r.Kinds {
		if i < 3 && k.Probability >= 0.02 {
			kinds = append(kinds, fmt.Sprintf("%s %.0f %%", Say(p.lang, k.Kind), k.Probability*100))
		}
	}
	p.line(x, w, words.In(p.lang, "Regions"), strings.Join(regions, ", ")+"; "+strings.Join(kinds, ", "), 2)
	var pro, con []string
	for _, e := range r.Evidence {
		s := c.evidence(e)
		switch {
		case e.Decibans > 0.5 && len(pro) < 4:
			pro = append(pro, s)
		case e.Decibans < -0.5 && len(con) < 3:
			con = append(con, s)
		}
	}
	p.line(x, w, words.In(p.lang, "Speaks for it"), strings.Join(pro, "; "), 3)
	p.line(x, w, words.In(p.lang, "Speaks against it"), strings.Join(con, "; "), 3)
	var next []string
	for i, n := range r.Next {
		if i < 3 {
			item, _ := exam.ParseItem(n.Item)
			site, _ := exam.ParseSite(n.Site)
			next = append(next, strings.TrimSpace(itemTitle(p.lang, item)+" "+siteShort(p.lang, exam.Key{Site: site})))
		}
	}
	p.line(x, w, words.In(p.lang, "Would tell most"), strings.Join(next, "; "), 1)
	for i, s := range r.Warnings {
		if i < 3 {
			s = Say(p.lang, s)
			p.note(s)
			p.para(x, w, "• "+s, p.size*0.95, false, p.pal.Ink, 2)
		}
	}
	cord := chart.CordOf(c.in.Patient.Species, c.kg(), r, p.lang)
	cord.Lying = true
	h := 68.0
	st := chart.Style{Palette: p.pal, Text: 7, Lang: p.lang}
	p.draw(x, p.y+4, w, h, func(dc draw.Canvas) { cord.Draw(dc, st) })
	p.y += h + 4
	p.para(x, w, words.In(p.lang, "Shade: probability that the half segment is damaged, from the exam alone or with the level on file."), p.size*0.82, false, p.pal.Soft, 1)
}

func (c *clinical) evidence(e localise.Evidence) string {
	item, _ := exam.ParseItem(e.Item)
	site, _ := exam.ParseSite(e.Site)
	word := item.GradeWord(int8(e.Grade))
	s := strings.TrimSpace(itemTitle(c.in.lang(), item) + " " + siteShort(c.in.lang(), exam.Key{Site: site}))
	s += " " + words.OfIn(c.in.lang(), word)
	if e.Level != "" {
		s += " " + e.Level
	}
	return fmt.Sprintf("%s (%+.0f dB)", s, e.Decibans)
}

// strip is the course of every segment: the model's where it was given, else the plain score.
func (c *clinical) strip() chart.Strip {
	if c.course != nil {
		s := c.course.Strip
		s.Events = c.events()
		return s
	}
	s := chart.Strip{}
	for i, v := range c.in.Visits {
		cv := chart.Visit{At: v.Examined}
		if i > 0 {
			same, _ := exam.LikeForLike(c.in.Visits[i-1], v)
			cv.Unlike = !same
		}
		s.Visits = append(s.Visits, cv)
		for k, x := range anatomy.Score(c.in.Patient.Species, v) {
			row := k / 2
			if i == 0 && k%2 == 0 {
				s.Rows = append(s.Rows, chart.StripRow{Label: x.Segment.String(), Major: x.Segment.Number() == 1})
			}
			val := chart.Value{Known: x.Known, Value: x.Score, Count: x.Findings}
			if x.Side == exam.Left {
				s.Rows[row].Left = append(s.Rows[row].Left, val)
			} else {
				s.Rows[row].Right = append(s.Rows[row].Right, val)
			}
		}
	}
	s.Events = c.events()
	return s
}

// events are what happened to the animal, in the paper's language, oldest first.
func (c *clinical) events() []chart.Event {
	lang, p := c.in.lang(), c.in.Patient
	var out []chart.Event
	add := func(d exam.Date, word string) {
		if t, ok := d.Time(); ok {
			out = append(out, chart.Event{At: time.Date(t.Year(), t.Month(), t.Day(), 12, 0, 0, 0, c.now.Examined.Location()), Word: word})
		}
	}
	for _, pr := range p.Problems {
		add(pr.Onset, words.In(lang, "onset"))
		add(pr.Surgery, words.In(lang, "surgery"))
		add(pr.Resolved, words.In(lang, "resolved"))
	}
	for _, m := range p.Medicines {
		add(m.Start, m.Name)
		add(m.Stop, words.In(lang, "%s stopped", m.Name))
	}
	slices.SortStableFunc(out, func(a, b chart.Event) int { return a.At.Compare(b.At) })
	return out
}

func (c *clinical) pageOne(p *page, h float64) {
	in := c.in
	x, w := p.margin, p.w-2*p.margin
	c.title(p, words.In(p.lang, "Clinical summary of %s", in.Patient.Name))
	p.para(x, w, words.In(p.lang, "Examined %[1]s by %[2]s, visit %[3]d since %[4]s", c.now.Examined.Format("2006-01-02 15:04 -07:00"), c.now.Examiner, len(in.Visits), dayWords(p.lang, c.first.Examined)), p.size, false, p.pal.Soft, 1)
	p.line(x, w, words.In(p.lang, "Animal"), c.signalment(), 2)
	p.line(x, w, words.In(p.lang, "Owner"), in.Patient.Owner.Name, 1)
	p.line(x, w, words.In(p.lang, "Referred by"), strings.Trim(in.Patient.Referral.By+"; "+in.Patient.Referral.Limits, "; "), 1)
	p.line(x, w, words.In(p.lang, "Problems"), c.problems(), 3)
	p.line(x, w, words.In(p.lang, "Precautions"), c.precautions(), 2)
	p.line(x, w, words.In(p.lang, "Medicines"), c.medicines(), 2)
	p.line(x, w, words.In(p.lang, "Conditions of the exam"), c.conditions(), 3)
	c.alerts(p, x, w)
	c.likely(p, x, w)
	p.heading(x, w, words.In(p.lang, "Course of function by segment"))
	st := chart.Style{Palette: p.pal, Text: 7, Lang: p.lang}
	strip := c.strip()
	strip.Legend = true
	sentence := words.In(p.lang, "Plain segment score: mean health of the tested findings whose arc includes the segment.")
	if c.course != nil {
		sentence = Say(p.lang, c.course.Sentence)
	}
	p.note(sentence)
	p.para(x, w, sentence, p.size, false, p.pal.Ink, 2)
	// The charts share what is left of the page, never less than is readable.
	limbs := c.limbs()
	var more []time.Time
	for _, e := range strip.Events {
		more = append(more, e.At)
	}
	span := chart.SpanOf(strip.Visits, more...)
	span.Left, span.Right = 88, 4
	for _, l := range limbs.Limbs { // room for the longest label
		span.Left = max(span.Left, min(chart.Width(l.Label, 7, false)+16, vg.Length(w*0.3)))
	}
	strip.Span, limbs.Span = span, span
	rest := h - p.margin*0.95 - p.y
	lh := math.Max(84, math.Min(130, rest*0.36))
	sh := math.Max(150, rest-lh-8)
	p.draw(x, p.y+3, w, sh, func(dc draw.Canvas) { strip.Draw(dc, st) })
	p.y += sh + 6
	p.draw(x, p.y, w, lh, func(dc draw.Canvas) { limbs.Draw(dc, st) })
	p.y += lh
}

// limbs is voluntary movement of the four limbs over the visits.
func (c *clinical) limbs() chart.Limbs {
	l := chart.Limbs{}
	for i, v := range c.in.Visits {
		cv := chart.Visit{At: v.Examined}
		if i > 0 {
			same, _ := exam.LikeForLike(c.in.Visits[i-1], v)
			cv.Unlike = !same
		}
		l.Visits = append(l.Visits, cv)
	}
	for _, s := range exam.Limbs() {
		grades := make([]int8, len(c.in.Visits))
		for i, v := range c.in.Visits {
			grades[i] = -1
			if g, ok := v.Grade(exam.VoluntaryMotor, s); ok {
				grades[i] = g
			}
		}
		l.Limbs = append(l.Limbs, chart.GradeSeries(words.In(c.in.lang(), "Voluntary motor %s", siteShort(c.in.lang(), exam.Key{Site: s})), exam.VoluntaryMotor.Last(), grades))
	}
	return l
}

func (c *clinical) pageTwo(p *page, h float64) {
	in := c.in
	x, w := p.margin, p.w-2*p.margin
	head := words.In(p.lang, "Findings: first visit %[1]s › last visit %[2]s › today %[3]s", c.first.Examined.Format("2006-01-02"), c.prev.Examined.Format("2006-01-02"), c.now.Examined.Format("2006-01-02"))
	three := len(in.Visits) > 2
	switch {
	case len(in.Visits) == 2:
		head = words.In(p.lang, "Findings: last visit %[1]s › today %[2]s", c.prev.Examined.Format("2006-01-02"), c.now.Examined.Format("2006-01-02"))
	case len(in.Visits) == 1:
		head = words.In(p.lang, "Findings of the first visit, %s", c.now.Examined.Format("2006-01-02"))
	}
	p.heading(x, w, head)
	rows := grid(p.lang, c.first, c.prev, c.now)
	c.gridTable(p, x, w, rows, three, len(in.Visits) > 1, h)
	p.para(x, w, words.In(p.lang, "Bold: abnormal today. – not tested. TL, TR thoracic limbs; PL, PR pelvic limbs. Grades as in the exam vocabulary."), p.size*0.85, false, p.pal.Soft, 2)
	c.scales(p, x, w)
	c.measures(p, x, w)
	c.treatments(p, x, w)
	p.heading(x, w, words.In(p.lang, "Plan"))
	next := in.text(textNoNext)
	if c.now.NextVisit != "" {
		next = dateWords(p.lang, c.now.NextVisit)
	}
	p.line(x, w, words.In(p.lang, "Next visit"), next, 1)
	var goals []string
	for _, g := range in.Patient.Goals {
		s := g.Words
		if g.Reached != "" {
			s = in.text(textGoalReached, s)
		} else if g.By != "" {
			s = in.text(textGoalBy, s, string(g.By))
		}
		goals = append(goals, s)
	}
	p.line(x, w, in.text(textGoals), strings.Join(goals, "; "), 2)
	report := []string{c.now.Report.Words, c.now.Report.Falls, c.now.Report.Urine, c.now.Report.Appetite}
	if c.now.Report.ExercisesSet > 0 {
		report = append(report, words.In(p.lang, "home exercises done %[1]d of %[2]d", c.now.Report.ExercisesDone, c.now.Report.ExercisesSet))
	}
	p.line(x, w, words.In(p.lang, "Owner's report"), strings.Join(slices.DeleteFunc(report, func(s string) bool { return s == "" }), "; "), 2)
	p.line(x, w, words.In(p.lang, "Note"), c.now.Note, 3)
	p.line(x, w, words.In(p.lang, "Photos and clips"), c.attachments(), 3)
	closed := words.In(p.lang, "visit still open")
	if c.now.State == exam.Closed {
		closed = words.In(p.lang, "visit closed %s", c.now.ClosedAt.Format("2006-01-02 15:04 -07:00"))
	}
	p.line(x, w, words.In(p.lang, "Examiner"), c.now.Examiner+", "+closed, 1)
	for i, a := range c.now.Amendments {
		if i < 2 {
			p.line(x, w, words.In(p.lang, "Amended"), fmt.Sprintf("%s: %s (%s, %s)", a.Field, a.Reason, a.Examiner, a.At.Format("2006-01-02")), 1)
		}
	}
}

// attachments lists the photos and clips on file, the newest visit's first; they stay in the
// practice and are shown on request.
func (c *clinical) attachments() string {
	lang := c.in.lang()
	var out []string
	for i := len(c.in.Visits) - 1; i >= 0; i-- {
		v := c.in.Visits[i]
		for _, a := range v.Attachments {
			s := words.In(lang, "clip")
			if a.Photo() {
				s = words.In(lang, "photo")
			}
			s += " " + v.Examined.Format("2006-01-02")
			if a.Note != "" {
				s += " (" + a.Note + ")"
			}
			out = append(out, s)
		}
	}
	return strings.Join(out, "; ")
}

// gridTable writes the findings in two columns, the changed and abnormal ones first.
func (c *clinical) gridTable(p *page, x, w float64, rows []gridRow, three, two bool, h float64) {
	size := p.size * 0.88
	colW := (w - 14) / 2
	labelW := colW * 0.36
	for _, r := range rows {
		labelW = math.Max(labelW, math.Min(width(r.label, size, false)+4, colW*0.5))
	}
	line := lead(size)
	type laid struct {
		row   gridRow
		lines [][]gridCell
	}
	show := func(g gridCell) string {
		s := g.now
		if two {
			s = g.last + step + g.now
		}
		if three {
			s = g.first + step + s
		}
		if g.site != "" {
			s = g.site + " " + s
		}
		return s
	}
	var all []laid
	total := 0
	for _, r := range rows {
		l := laid{row: r}
		used := 0.0
		var cur []gridCell
		for _, cell := range r.cells {
			cw := width(show(cell), size, true) + size*0.9
			if used+cw > colW-labelW && len(cur) > 0 {
				l.lines = append(l.lines, cur)
				cur, used = nil, 0
			}
			cur = append(cur, cell)
			used += cw
		}
		l.lines = append(l.lines, cur)
		all = append(all, l)
		total += len(l.lines)
	}
	// What has no room is counted: the rest of the page needs about two fifths of it.
	most := int(math.Max(10, (h*0.60-p.y)/line)) * 2
	left := 0
	for total > most && len(all) > 0 {
		total -= len(all[len(all)-1].lines)
		all = all[:len(all)-1]
		left++
	}
	per := (total + 1) / 2
	top, bottom := p.y, p.y
	cx, n := x, 0
	for _, l := range all {
		if n >= per && cx == x {
			bottom = math.Max(bottom, p.y)
			cx, p.y = x+colW+14, top
		}
		for k, cells := range l.lines {
			p.y += line
			n++
			y := p.y - size*0.3
			if k == 0 {
				// A label that is too long for its column is written smaller.
				small := size * math.Min(1, math.Max(0.75, (labelW-3)/width(l.row.label, size, false)))
				p.put(cx, y, chart.Fit(l.row.label, vg.Length(labelW-3), vg.Length(small), false), small, false, p.pal.Ink)
			}
			at := cx + labelW
			for _, cell := range cells {
				s := show(cell)
				col := p.pal.Soft
				if cell.nowBad || cell.different {
					col = p.pal.Ink
				}
				p.put(at, y, s, size, cell.nowBad, col)
				at += width(s, size, true) + size*0.9
			}
		}
	}
	p.y = math.Max(bottom, p.y)
	if left > 0 {
		p.para(x, w, c.in.text(textMore, left), size, false, p.pal.Soft, 1)
	}
}

// table writes rows of cells; the first column takes what the others leave.
func (p *page) table(x, w float64, head []string, rows [][]string, most int, more func(int) string) {
	size := p.size * 0.9
	cols := len(head)
	widths := make([]float64, cols)
	for _, r := range append([][]string{head}, rows...) {
		for i := 1; i < cols; i++ {
			widths[i] = math.Max(widths[i], math.Min(width(p.clean(r[i]), size, true)+14, w*0.34))
		}
	}
	rest := w
	for _, cw := range widths[1:] {
		rest -= cw
	}
	widths[0] = math.Max(rest, w*0.28)
	// What is too long for its column goes on to the next line.
	put := func(r []string, bold bool) {
		top, bottom, at := p.y, p.y, x
		for i, s := range r {
			p.y = top
			p.para(at, widths[i]-4, s, size, bold, p.pal.Ink, 3)
			bottom = math.Max(bottom, p.y)
			at += widths[i]
		}
		p.y = math.Max(bottom, top+lead(size))
	}
	put(head, true)
	for i, r := range rows {
		if i == most {
			p.para(x, w, more(len(rows)-most), size, false, p.pal.Soft, 1)
			break
		}
		put(r, false)
	}
}

func directionWord(lang string, d exam.Direction) string {
	switch d {
	case exam.Better:
		return words.In(lang, "better")
	case exam.Worse:
		return words.In(lang, "worse")
	case exam.Same:
		return words.In(lang, "no change shown")
	case exam.Different:
		return words.In(lang, "different")
	}
	return "–"
}

// scales lists the published scores today against the last and the first visit.
func (c *clinical) scales(p *page, x, w float64) {
	now := scale.All(c.now)
	if len(now) == 0 {
		return
	}
	p.heading(x, w, words.In(p.lang, "Scales"))
	at := func(v exam.Visit, s scale.Value) (scale.Value, bool) {
		for _, y := range scale.All(v) {
			if y.Scale == s.Scale && y.Site == s.Site && y.Variant == s.Variant {
				return y, true
			}
		}
		return scale.Value{}, false
	}
	var rows [][]string
	for _, s := range now {
		switch s.Scale {
		case scale.FrankelB, scale.FrankelC, scale.FrankelD, scale.TexasLimb:
			continue // the same findings in other numbers
		}
		name := words.OfIn(p.lang, s.Scale.Info().Name)
		if s.Site != exam.NoSite {
			name += " " + siteShort(p.lang, exam.Key{Site: s.Site})
		}
		if s.Variant != "" {
			name += " (" + Say(p.lang, s.Variant) + ")"
		}
		first, last, change := "–", "–", "–"
		if y, ok := at(c.first, s); ok && len(c.in.Visits) > 1 {
			first = Say(p.lang, y.String())
		}
		if y, ok := at(c.prev, s); ok && len(c.in.Visits) > 1 {
			last, change = Say(p.lang, y.String()), directionWord(p.lang, scale.Change(y, s))
		}
		rows = append(rows, []string{name, first, last, Say(p.lang, s.String()), change})
	}
	p.table(x, w, []string{words.In(p.lang, "Scale"), words.In(p.lang, "first"), words.In(p.lang, "last"), words.In(p.lang, "today"), words.In(p.lang, "change")}, rows, 10,
		func(n int) string { return c.in.text(textMore, n) })
}

// measures lists today's measures against the last and the first, with whether the change
// since the last is beyond the noise of the measure.
func (c *clinical) measures(p *page, x, w float64) {
	if len(c.now.Measures) == 0 {
		return
	}
	p.heading(x, w, words.In(p.lang, "Measures"))
	find := func(v exam.Visit, key string) (exam.Measured, bool) {
		for _, m := range v.Measures {
			if m.Key() == key {
				return m, true
			}
		}
		return exam.Measured{}, false
	}
	num := func(m exam.Measured, ok bool) string {
		if !ok || len(c.in.Visits) == 1 {
			return "–"
		}
		return figure(p.lang, m.Value)
	}
	var rows [][]string
	for _, m := range c.now.Measures {
		name := words.OfIn(p.lang, upperFirst(strings.ReplaceAll(m.Measure.String(), "-", " ")))
		for _, s := range []string{siteShort(p.lang, exam.Key{Site: m.Site}), words.OfIn(p.lang, m.Joint.String()), words.OfIn(p.lang, m.Motion)} {
			if s != "" {
				name += " " + s
			}
		}
		if unit := m.Measure.Info().Unit; unit != "1" {
			name += ", " + unit
		}
		a, okA := find(c.first, m.Key())
		b, okB := find(c.prev, m.Key())
		verdict := "–"
		if okB && len(c.in.Visits) > 1 {
			verdict = c.verdict(b, m)
		}
		rows = append(rows, []string{name, num(a, okA), num(b, okB), figure(p.lang, m.Value), verdict})
	}
	p.table(x, w, []string{words.In(p.lang, "Measure"), words.In(p.lang, "first"), words.In(p.lang, "last"), words.In(p.lang, "today"), words.In(p.lang, "change")}, rows, 10,
		func(n int) string { return c.in.text(textMore, n) })
}

// verdict says whether two readings differ beyond the published noise of the measure.
func (c *clinical) verdict(before, now exam.Measured) string {
	q := repeat.Quantity{Measure: now.Measure}
	noise, ok := repeat.Published(q, c.prev.Examiner == c.now.Examiner)
	if !ok {
		if _, ok := repeat.Published(q, true); ok {
			return words.In(c.in.lang(), "other examiner: not compared")
		}
		return "–" // no figure for the noise of this measure
	}
	return words.OfIn(c.in.lang(), noise.Judge(now.Value-before.Value).String())
}

// treatments lists what was done today and what goes home.
func (c *clinical) treatments(p *page, x, w float64) {
	lang := p.lang
	var given []string
	for _, t := range c.now.Treatments {
		name := strings.ReplaceAll(t.Kind, "-", " ")
		if k, ok := exam.TreatmentByKey(t.Kind); ok {
			name = words.OfIn(lang, k.Name)
		}
		if t.Site != "" {
			name += " " + words.OfIn(lang, strings.ReplaceAll(t.Site, "-", " "))
		}
		if t.Minutes > 0 {
			name += " " + words.In(lang, "%s min", decimal(lang, t.Minutes, -1))
		}
		if t.Params != "" {
			name += " (" + t.Params + ")"
		}
		if t.Override != "" {
			name += " – " + words.In(lang, "against a contraindication: %s", t.Override)
		}
		given = append(given, name)
	}
	var home []string
	for _, h := range c.now.Home {
		name, amount, _, _ := plainExercise(c.in, h)
		s := name
		if h.Times > 0 {
			s += " " + words.In(lang, "%d× a day", h.Times)
		}
		if amount != "" {
			s += ", " + amount
		}
		if h.Override != "" {
			s += " – " + words.In(lang, "against a contraindication: %s", h.Override)
		}
		home = append(home, s)
	}
	if len(given)+len(home) == 0 {
		return
	}
	p.heading(x, w, words.In(lang, "Treatment"))
	p.line(x, w, words.In(lang, "Given today"), strings.Join(given, "; "), 4)
	p.line(x, w, words.In(lang, "Home programme"), strings.Join(home, "; "), 4)
}

// Letter makes the referral letter: one page for the treating veterinarian about what an
// alert saw, since when, and how urgent it is. Without an alert it returns ErrNoAlert.
func Letter(in Input) (Document, error) {
	c, err := newClinical(in, nil)
	if err != nil {
		return Document{}, err
	}
	if len(in.Notices) == 0 {
		return Document{}, fmt.Errorf("%s: use the clinical summary instead: %w", in.Patient.Name, ErrNoAlert)
	}
	lang := in.lang()
	title := words.In(lang, "Referral of %s", in.Patient.Name)
	day := dayWords(lang, c.now.Examined)
	doc := newDoc(in.letter(), lang, title, title+", "+day, in.Practice.Name, in.At)
	doc.AddPage()
	w, h := doc.GetPageSize()
	var prose []string
	p := &page{doc: doc, pal: chart.Print(), lang: lang, w: w, h: h, margin: 50, prose: &prose, lost: map[string]bool{}}
	if in.Options.Grey {
		p.pal = chart.Grey()
	}
	size := 11.0
	for ; size > 8; size -= 0.25 {
		p.dry, p.size = true, size
		c.letter(p)
		if p.y <= h-p.margin {
			break
		}
	}
	p.dry, p.size = false, size
	c.letter(p)
	full := p.y > h-p.margin*0.8
	out := Document{Pages: doc.PageCount(), Name: fileName(in.Patient.Name, c.now.Examined, "letter", "pdf"), Subject: title + ", " + day, Kind: KindLetter, Lang: lang, Prose: prose, Summary: c.inShort()}
	if full {
		out.Warnings = append(out.Warnings, tooLong())
	}
	if len(p.lost) > 0 {
		out.Warnings = append(out.Warnings, lostLetters(p.lost))
	}
	out.PDF, err = output(doc)
	return out, err
}

func (c *clinical) letter(p *page) {
	in, lang := c.in, p.lang
	x, w := p.margin, p.w-2*p.margin
	p.y = p.margin * 0.8
	list := sortedNotices(in.Notices)
	c.title(p, words.In(lang, "Referral of %s", in.Patient.Name))
	p.y += p.size * 0.5
	to := in.Patient.Veterinarian
	p.line(x, w, words.In(lang, "To"), strings.Trim(to.Name+", "+to.Phone, ", "), 2)
	p.line(x, w, words.In(lang, "From"), c.now.Examiner+", "+in.Practice.Name, 2)
	p.line(x, w, words.In(lang, "Date"), c.in.At.Format("2006-01-02 15:04 -07:00"), 1)
	p.line(x, w, words.In(lang, "Animal"), in.Patient.Name+colon(lang)+c.signalment(), 2)
	p.line(x, w, words.In(lang, "Owner"), strings.Trim(in.Patient.Owner.Name+", "+in.Patient.Owner.Phone, ", "), 1)
	p.line(x, w, words.In(lang, "Problems"), c.problems(), 3)
	p.y += p.size * 0.6
	urgency := words.In(lang, "How urgent: please see %[1]s %[2]s.", in.Patient.Name, urgencyWord(lang, list[0].Urgency))
	if list[0].Urgency == NextWorkingDay {
		urgency = words.In(lang, "How urgent: please see %s on the next working day.", in.Patient.Name)
	}
	p.note(urgency)
	top := p.y
	p.y += p.size * 0.35
	p.para(x+8, w-16, urgency, p.size*1.2, true, p.pal.Call, 2)
	p.y += p.size * 0.45
	p.box(x, top, w, p.y-top, nil, &p.pal.Call, 1.6)
	p.heading(x, w, words.In(lang, "What was seen, and since when"))
	for i, n := range list {
		if i == 6 {
			p.para(x, w, in.text(textMore, len(list)-6), p.size, true, p.pal.Ink, 1)
			break
		}
		s := n.Words
		if !n.Since.IsZero() && n.Since.Before(c.now.Examined) {
			s = words.In(lang, "%[1]s Compared with %[2]s.", s, dayWords(lang, n.Since))
		}
		s += " " + words.In(lang, "Urgency: %s.", urgencyWord(lang, n.Urgency))
		if n.Told != "" {
			s += " " + words.In(lang, "Told: %s.", n.Told)
		}
		p.note(s)
		p.para(x, w, "• "+s, p.size, false, p.pal.Ink, 10)
		p.y += p.size * 0.2
	}
	again := len(in.Visits) > 1
	if again {
		p.heading(x, w, words.In(lang, "Main findings, last visit %[1]s › today %[2]s", c.prev.Examined.Format("2006-01-02"), c.now.Examined.Format("2006-01-02")))
	} else {
		p.heading(x, w, words.In(lang, "Findings of the first visit, %s", c.now.Examined.Format("2006-01-02")))
	}
	rows := grid(lang, c.first, c.prev, c.now)
	shown := 0
	for _, r := range rows {
		if r.rank == 2 || shown == 14 {
			continue
		}
		var cells []string
		for _, g := range r.cells {
			grade := g.now
			if again {
				grade = g.last + step + g.now
			}
			cells = append(cells, strings.TrimSpace(g.site+" "+grade))
		}
		p.line(x, w, r.label, strings.Join(cells, ", "), 4)
		shown++
	}
	p.heading(x, w, words.In(lang, "Likely site (from today's exam, no diagnosis)"))
	if c.result != nil {
		site := upperFirst(Say(lang, c.result.Summary))
		p.note(site)
		p.para(x, w, site, p.size, true, p.pal.Ink, 2)
	} else {
		p.para(x, w, c.why, p.size, false, p.pal.Ink, 2)
	}
	p.line(x, w, words.In(lang, "Precautions"), c.precautions(), 2)
	p.line(x, w, words.In(lang, "Medicines"), c.medicines(), 2)
	p.line(x, w, words.In(lang, "Conditions of the exam"), c.conditions(), 4)
	p.y += p.size
	if len(in.urgent()) > 0 {
		s := words.In(lang, "Exercises are stopped until you agree to go on.")
		p.note(s)
		p.para(x, w, s, p.size, false, p.pal.Ink, 2)
	}
	s := words.In(lang, "This letter reports findings and no diagnosis. Please call %s with questions.", unbroken(in.Practice.Contact.Phone))
	p.note(s)
	p.para(x, w, s, p.size, false, p.pal.Ink, 2)
	p.y += p.size * 2.2
	p.para(x, w, c.now.Examiner, p.size, true, p.pal.Ink, 1)
}
