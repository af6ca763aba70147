package sheet

import (
	"bytes"
	"errors"
	"fmt"
	"image"
	_ "image/jpeg" // logos
	_ "image/png"  // logos
	"math"
	"slices"
	"strings"
	"time"

	"codeberg.org/go-pdf/fpdf"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"cordwalk.example/cordwalk/app/chart"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// fit is one way to make everything go on one page. The ways are tried in order: first with
// a smaller chart and drawing, then with smaller text, last with lists cut to «and n more».
type fit struct {
	size        float64 // of running text, points
	chart, body float64 // heights, points
	exercises   int     // most lines of the home plan, 0: all
	terse       bool    // the home plan without how and when to stop
	dense       bool    // goals on one line, how an exercise is done below its boxes, a smaller margin below
	how         int     // most lines of text of each exercise, 0: all
	goals       int     // most goals, 0: all
	summary     int     // most lines of the summary, 0: all
	noticeLines int     // most lines of each alert, 0: all
	mostNotices int     // most alerts, 0: all
}

// fits lists the ways for normal or large print, most comfortable first. Running text is
// never smaller than 8.4 points, or 11 in large print.
func fits(large bool, exercises int) []fit {
	sizes := []float64{12, 11.2, 10.4, 10, 9.6, 9.2, 8.8, 8.4}
	if large {
		sizes = []float64{14, 13.5, 13, 12.5, 12, 11.5, 11}
	}
	var out []fit
	for i, s := range sizes {
		for _, c := range [][2]float64{{150, 190}, {125, 170}, {104, 150}, {84, 132}} {
			// Large text before a large chart, but no small chart while there is text to spare.
			if c[0] >= 104 || i >= 2 || large {
				out = append(out, fit{size: s, chart: c[0], body: c[1]})
			}
		}
	}
	small := sizes[len(sizes)-1]
	tight := []fit{
		{how: 3, goals: 4, summary: 6, noticeLines: 4, mostNotices: 4, chart: 78, body: 120},
		{how: 2, goals: 3, summary: 5, noticeLines: 3, mostNotices: 3, chart: 72, body: 112},
		{how: 1, goals: 2, summary: 4, noticeLines: 2, mostNotices: 3, chart: 66, body: 104},
		// Without the chart there is room for the instructions again.
		{goals: 3, summary: 6, noticeLines: 3, mostNotices: 4, body: 112},
		{how: 3, goals: 2, summary: 5, noticeLines: 2, mostNotices: 3, body: 104},
		{how: 2, goals: 2, summary: 4, noticeLines: 2, mostNotices: 3, body: 104},
		{how: 1, goals: 2, summary: 4, noticeLines: 2, mostNotices: 3, body: 104},
	}
	for _, f := range tight {
		f.size = small
		out = append(out, f)
	}
	for _, f := range tight[3:] {
		f.size, f.dense, f.goals, f.how = small, true, 0, 0
		out = append(out, f)
	}
	for _, s := range sizes { // names and boxes alone, as large as they go
		out = append(out, fit{size: s, how: 1, goals: 1, summary: 3, noticeLines: 2, mostNotices: 2, body: 96, terse: true})
	}
	last := out[len(out)-1]
	for n := min(exercises, 24) - 1; n >= 1; n-- {
		last.exercises = n
		out = append(out, last)
	}
	last.exercises, last.noticeLines = 1, 1
	return append(out, last)
}

// Owner makes the owner's progress sheet: one page, always.
func Owner(in Input) (Document, error) {
	if err := in.check(); err != nil {
		return Document{}, err
	}
	lang := in.lang()
	last := in.last()
	day := dayWords(lang, last.Examined)
	title := in.text(textTitle, in.Patient.Name)
	o := owner{in: in, day: day, changes: changes(in.Visits), urgent: in.urgent()}
	o.plan(last)
	o.summary = o.sentences()
	doc := newDoc(in.letter(), lang, title, title+", "+day, in.Practice.Name, in.At)
	doc.AddPage()
	w, h := doc.GetPageSize()
	var prose []string
	p := &page{doc: doc, pal: chart.Print(), lang: lang, w: w, h: h, margin: 36, prose: &prose, lost: map[string]bool{}}
	if in.Options.Grey {
		p.pal = chart.Grey()
	}
	ways := fits(in.Options.Large, len(o.home))
	chosen := ways[len(ways)-1]
	for _, f := range ways {
		p.dry = true
		if o.write(p, f) <= f.end(h, p.margin) {
			chosen = f
			break
		}
	}
	p.dry = false
	prose = nil
	if used := o.write(p, chosen); used > h-4 {
		return Document{}, fmt.Errorf("the sheet of %s does not fit on one page: shorten the home plan or the summary", in.Patient.Name)
	}
	out := Document{Pages: doc.PageCount(), Name: fileName(in.Patient.Name, last.Examined, "owner", "pdf"), Subject: title + ", " + day,
		Kind: KindSheet, Lang: lang, Prose: prose, Summary: strings.Join(o.summary, " "), Reworded: strings.TrimSpace(in.Options.Summary) != "", Noted: o.noted}
	out.Warnings = append(out.Warnings, o.warnings...)
	if n := chosen.exercises; n > 0 && n < len(o.home) {
		out.Warnings = append(out.Warnings, words.T("%[1]d of %[2]d exercises did not fit on the page: print the rest apart, or leave out large print", len(o.home)-n, len(o.home)))
	}
	if chosen.terse && len(o.home) > 0 && len(o.urgent) == 0 {
		out.Warnings = append(out.Warnings, words.T("how each exercise is done did not fit on the page: explain it, or print fewer exercises"))
	}
	if len(p.lost) > 0 {
		out.Warnings = append(out.Warnings, lostLetters(p.lost))
	}
	var err error
	out.PDF, err = output(doc)
	return out, err
}

func lostLetters(lost map[string]bool) string {
	letters := make([]string, 0, len(lost))
	for l := range lost {
		letters = append(letters, l)
	}
	slices.Sort(letters)
	return words.T("these letters cannot be printed and stand as a question mark: %s", strings.Join(letters, " "))
}

// exercise is one line of the home plan as printed.
type exercise struct {
	name, often, how, stop string
	times                  int
	own                    bool // how it is done is the therapist's own text
}

type owner struct {
	in       Input
	day      string
	changes  []outcome
	urgent   []Notice
	home     []exercise
	summary  []string
	warnings []string
	noted    []string
}

// plan makes the lines of the home plan.
func (o *owner) plan(last exam.Visit) {
	in := o.in
	plan := check(in, last.Home)
	o.warnings = append(o.warnings, plan.warnings...)
	o.noted = plan.noted
	for _, h := range plan.keep {
		e := exercise{times: min(max(h.Times, 1), 6), own: h.How != ""}
		var amount string
		e.name, amount, e.how, e.stop = plainExercise(in, h)
		often := in.text(textOnce)
		if h.Times > 1 {
			often = in.text(textTimes, h.Times)
		}
		if h.DaysWeek > 0 && h.DaysWeek < 7 {
			often += ", " + in.text(textDays, h.DaysWeek)
		}
		if amount != "" {
			often += ", " + amount
		}
		e.often = often
		o.home = append(o.home, e)
	}
}

// wholeSentences leaves out the last sentences of a text that has too many lines, so that
// what stands is whole; a text of the therapist's own is left as it is. Where not even the
// first sentence fits, nothing of it is said.
func wholeSentences(text string, own bool, most int, lines func(string) int) string {
	if own || most <= 0 {
		return text
	}
	for text != "" && lines(text) > most {
		i := strings.LastIndex(strings.TrimRight(text, ". "), ". ")
		if i < 0 {
			return ""
		}
		text = text[:i+1]
	}
	return text
}

// list joins the names of topics with commas, in the paper's language; legs that are named
// together are said together.
func (o *owner) list(keys []string) string {
	has := func(list ...string) bool {
		for _, k := range list {
			if !slices.Contains(keys, k) {
				return false
			}
		}
		return true
	}
	put := func(word string, instead ...string) {
		if has(instead...) {
			i := slices.Index(keys, instead[0])
			keys = slices.Insert(slices.Clone(keys), i, word)
			keys = slices.DeleteFunc(keys, func(k string) bool { return slices.Contains(instead, k) })
		}
	}
	put(wordAllLegs, wordLeftFore, wordRghtFore, wordLeftHind, wordRghtHind)
	put(wordForeLegs, wordLeftFore, wordRghtFore)
	put(wordHindLegs, wordLeftHind, wordRghtHind)
	names := make([]string, len(keys))
	for i, k := range keys {
		names[i] = o.in.text(k)
	}
	return strings.Join(names, ", ")
}

// sentences says in two to four plain sentences how the animal is doing. It claims no more
// than was seen: what fell comes first, what was not tested is said.
func (o *owner) sentences() []string {
	in := o.in
	if s := strings.TrimSpace(in.Options.Summary); s != "" {
		return []string{s}
	}
	if len(o.urgent) > 0 {
		return nil
	}
	var out []string
	name := in.Patient.Name
	last := in.last()
	if g, ok := last.Grade(exam.Ambulation, exam.Midline); ok {
		out = append(out, in.text([]string{phraseNoSteps, phraseWalksHeld, phraseWalksAlone}[min(max(g, 0), 2)], name))
	}
	if len(in.Visits) == 1 {
		return append(out, in.text(phraseFirst))
	}
	var better, maybe, worse, missed []string
	var since time.Time
	unlike := false
	for _, c := range o.changes {
		word := c.topic.word
		switch {
		case !c.tested:
			missed = append(missed, word)
		case c.dir == exam.Better && o.unsure(c):
			maybe = append(maybe, word)
		case c.dir == exam.Better:
			better = append(better, word)
		case c.dir == exam.Worse:
			worse = append(worse, word)
		}
		if c.tested && c.known && c.since.After(since) {
			since = c.since
		}
		unlike = unlike || (c.unlike && (c.dir == exam.Better || c.dir == exam.Worse))
	}
	when := dayWords(in.lang(), since)
	if len(worse) > 0 {
		out = append(out, in.text(phraseWeaker, when, o.list(worse)))
	}
	if len(better) > 0 {
		out = append(out, in.text(phraseBetter, when, o.list(better)))
	}
	if len(maybe) > 0 {
		out = append(out, in.text(phraseMaybe, when, o.list(maybe)))
	}
	if len(worse)+len(better)+len(maybe) == 0 && !since.IsZero() {
		out = append(out, in.text(phraseSame, when))
	}
	if unlike {
		out = append(out, in.text(phraseUnlike))
	}
	if t := in.Whole; t != nil && len(in.Visits) > 2 {
		switch from := dayWords(in.lang(), t.Since); {
		case t.Better > sureTrend:
			out = append(out, in.text(phraseGained, from, name))
		case t.Worse > sureTrend:
			out = append(out, in.text(phraseLost, from, name))
		case t.Same > sureTrend:
			out = append(out, in.text(phraseKept, from, name))
		default:
			out = append(out, in.text(phraseUnsure))
		}
	}
	if len(missed) > 0 {
		out = append(out, in.text(phraseMissed, o.list(missed)))
	}
	if len(worse) == 0 && len(o.home) > 0 {
		out = append(out, in.text(phraseKeepOn))
	}
	return out
}

// unsure reports whether the serial model takes a limb's better grade for exam noise rather
// than for a change.
func (o *owner) unsure(c outcome) bool {
	for i, l := range exam.Limbs() {
		if c.topic.limb == l && o.in.Limbs[i] != nil {
			return o.in.Limbs[i].Better < 0.5
		}
	}
	return false
}

// write lays the sheet out and returns the height that was used.
func (o *owner) write(p *page, f fit) float64 {
	p.size = f.size
	p.y = p.margin * 0.8
	o.head(p)
	if len(o.urgent) > 0 {
		o.urgentBox(p, f)
	}
	o.picture(p, f)
	if len(o.urgent) == 0 {
		o.course(p, f)
		o.goals(p, f)
	}
	o.homePlan(p, f)
	o.callBox(p)
	o.foot(p)
	return p.y
}

// end is how far down the page a way may write.
func (f fit) end(h, margin float64) float64 {
	if f.dense {
		return h - margin*0.55
	}
	return h - margin*0.8
}

func (o *owner) inner(p *page) (x, w float64) { return p.margin, p.w - 2*p.margin }

// head writes the practice, the animal and the day.
func (o *owner) head(p *page) {
	in := o.in
	x, w := o.inner(p)
	top := p.y
	right := x + w
	if img := o.logo(p); img != nil {
		lw, lh := img.w, img.h
		if !p.dry {
			p.doc.ImageOptions(img.name, right-lw, top, lw, lh, false, fpdf.ImageOptions{ImageType: img.kind}, 0, "")
		}
		right -= lw + 10
	}
	p.y = top
	p.para(x, right-x, in.Practice.Name, p.size*1.3, true, p.pal.Ink, 2)
	c := in.Practice.Contact
	var contact []string
	for _, part := range []string{c.Address, unbroken(c.Phone), c.Email} {
		if part = strings.TrimSpace(part); part != "" {
			contact = append(contact, part)
		}
	}
	p.para(x, right-x, strings.Join(contact, "  ·  "), p.size*0.9, false, p.pal.Soft, 2)
	if in.Options.Logo != nil {
		p.y = math.Max(p.y, top+38)
	}
	p.rule(x, w)
	right = x + w
	if in.Patient.Demo || in.Practice.Demo {
		s := in.text(textDemo)
		bw := width(s, p.size*0.95, true) + p.size*1.2
		p.box(right-bw, p.y+p.size*0.3, bw, p.size*1.7, nil, &p.pal.Ink, 1)
		p.put(right-bw+p.size*0.6, p.y+p.size*1.5, s, p.size*0.95, true, p.pal.Ink)
		right -= bw + 10
	}
	p.para(x, right-x, in.text(textTitle, in.Patient.Name), p.size*1.75, true, p.pal.Ink, 2)
	line := upperFirst(words.OfIn(p.lang, in.Patient.Species.String()))
	if in.Patient.Breed != "" {
		line += ", " + in.Patient.Breed
	}
	seen := in.text(textSeen, o.day)
	if last := in.last(); last.Examiner != "" {
		seen = in.text(textSeenBy, o.day, last.Examiner)
	}
	p.para(x, w, line+"  ·  "+seen, p.size, false, p.pal.Soft, 2)
	for _, pr := range in.Patient.Precautions {
		if pr.Code == exam.RestUntil.String() && pr.Until != "" && string(pr.Until) >= string(exam.DayOf(in.last().Examined)) {
			s := in.text(textRest, dateWords(p.lang, pr.Until))
			p.note(s)
			p.para(x, w, s, p.size*1.05, true, p.pal.Ink, 1)
		}
	}
	p.y += p.size * 0.2
}

// unbroken keeps a telephone number on one line.
func unbroken(s string) string { return strings.Join(strings.Fields(s), "\u00a0") }

// CheckLogo returns an error if a picture cannot stand in the heading of a paper.
func CheckLogo(data []byte) error {
	if len(data) > exam.MaxLogo {
		return errors.New(words.T("the logo has %d KiB; at most %d are kept: save it smaller", len(data)>>10, exam.MaxLogo>>10))
	}
	cfg, _, err := image.DecodeConfig(bytes.NewReader(data))
	if err != nil {
		return errors.New(words.T("the logo is neither a PNG nor a JPEG picture"))
	}
	if cfg.Width < 1 || cfg.Height < 1 || cfg.Width > 4000 || cfg.Height > 4000 {
		return errors.New(words.T("the logo is %d by %d dots; up to 4000 by 4000 are taken", cfg.Width, cfg.Height))
	}
	if _, _, err := image.Decode(bytes.NewReader(data)); err != nil {
		return errors.New(words.T("the logo cannot be read to its end: save it again as PNG"))
	}
	return nil
}

type logo struct {
	name, kind string
	w, h       float64
}

// logo registers the practice's logo once and returns its size on paper, at most 38 points
// high and 130 wide. A logo that cannot be read is left out with a warning.
func (o *owner) logo(p *page) *logo {
	data := o.in.Options.Logo
	if data == nil {
		return nil
	}
	cfg, kind, err := image.DecodeConfig(bytes.NewReader(data))
	if err != nil || cfg.Width == 0 || cfg.Height == 0 {
		o.warnings = append(o.warnings, words.T("the logo is left out: it is neither a PNG nor a JPEG picture"))
		o.in.Options.Logo = nil
		return nil
	}
	l := logo{name: "logo", kind: kind}
	scale := math.Min(38/float64(cfg.Height), 130/float64(cfg.Width))
	l.w, l.h = float64(cfg.Width)*scale, float64(cfg.Height)*scale
	if !p.dry {
		p.doc.RegisterImageOptionsReader(l.name, fpdf.ImageOptions{ImageType: kind}, bytes.NewReader(data))
	}
	return &l
}

// urgentBox stands first: what was seen, whom to call, and no exercises.
func (o *owner) urgentBox(p *page, f fit) {
	in := o.in
	x, w := o.inner(p)
	pad := p.size * 0.7
	top := p.y + p.size*0.5
	dry := p.dry
	for _, pass := range []bool{true, false} { // measure, then draw
		if !pass && dry {
			continue
		}
		p.dry = pass || dry
		p.y = top + pad*0.6
		head := in.text(textTodayBox)
		if o.urgent[0].Urgency == Now {
			head = in.text(textNowBox)
		}
		p.note(head)
		phone := in.Patient.Veterinarian
		p.para(x+pad, w-2*pad, head+colon(p.lang)+phoneLine(phone), p.size*1.35, true, p.pal.Call, 2)
		shown := o.urgent
		if f.mostNotices > 0 && len(shown) > f.mostNotices {
			shown = shown[:f.mostNotices]
		}
		for _, n := range shown {
			p.note(n.Plain)
			p.para(x+pad, w-2*pad, n.Plain, p.size*1.05, false, p.pal.Ink, f.noticeLines)
		}
		if left := len(o.urgent) - len(shown); left > 0 {
			p.para(x+pad, w-2*pad, in.text(textMore, left), p.size, false, p.pal.Ink, 1)
		}
		p.note(in.text(textUntilAgrees))
		p.para(x+pad, w-2*pad, in.text(textUntilAgrees), p.size*1.2, true, p.pal.Ink, 2)
		p.y += pad * 0.6
		if pass && !dry {
			p.dry = false
			p.box(x, top, w, p.y-top, nil, &p.pal.Call, 2)
		}
	}
	p.dry = dry
	p.y += p.size * 0.3
}

func phoneLine(c exam.Contact) string {
	if c.Name == "" {
		return unbroken(c.Phone)
	}
	return c.Name + ", " + unbroken(c.Phone)
}

// picture writes the drawing of the animal beside what was seen.
func (o *owner) picture(p *page, f fit) {
	in := o.in
	x, w := o.inner(p)
	top := p.y
	bw := w * 0.46
	if in.Options.Large {
		bw = w * 0.52
	}
	f.body = math.Max(f.body, p.size*10.5) // the words of front and back legs must not touch
	body := chart.Body{Species: in.Patient.Species}
	for i, l := range exam.Limbs() {
		limb := chart.BodyLimb{Name: in.text([4]string{wordLeftFore, wordRghtFore, wordLeftHind, wordRghtHind}[i]), Word: in.text(wordNoTest)}
		for _, c := range o.changes {
			if c.topic.limb != l {
				continue
			}
			limb.ShowBeads = c.known && c.tested
			limb.Then, limb.Now = chart.BeadOf(c.then), chart.BeadOf(c.now)
			switch {
			case !c.tested:
			case !c.known:
				limb.Mark, limb.Word = chart.MarkPlain, in.text(wordFirst)
			case c.dir == exam.Better:
				limb.Mark, limb.Word, limb.Hollow = chart.MarkBetter, in.text(wordBetter), o.unsure(c)
			case c.dir == exam.Worse:
				limb.Mark, limb.Word = chart.MarkWorse, in.text(wordWeaker)
			default:
				limb.Mark, limb.Word = chart.MarkSame, in.text(wordSame)
			}
		}
		body.Limbs[i] = limb
	}
	p.heading(x, bw-10, in.text(textLegs))
	st := chart.Style{Palette: p.pal, Text: vg.Length(p.size * 0.9), Lang: p.lang}
	bodyTop := p.y + p.size*0.2
	f.body = body.Tall(vg.Length(bw-10), vg.Length(f.body), st).Points()
	p.draw(x, bodyTop, bw-10, f.body, func(c draw.Canvas) { body.Draw(c, st) })
	bottom := bodyTop + f.body
	p.y = bottom
	p.para(x, bw-10, in.text(textLegend), p.size*0.82, false, p.pal.Soft, 2)
	p.note(in.text(textLegend))
	bottom = p.y

	p.y = top
	rx, rw := x+bw, w-bw
	if len(o.summary) > 0 {
		p.heading(rx, rw, in.text(textShort))
		for _, s := range o.summary {
			p.note(s)
		}
		p.para(rx, rw, strings.Join(o.summary, " "), p.size*1.05, false, p.pal.Ink, o.mostSummary(f))
	}
	seen := func(x, w float64) {
		p.heading(x, w, in.text(textChanges))
		o.seen(p, x, w, f)
	}
	// What was seen stands under the summary, or below the drawing where that takes less of the page.
	short, dry := p.y, p.dry
	p.dry = true
	seen(rx, rw)
	beside := math.Max(p.y, bottom)
	p.y = math.Max(short, bottom)
	seen(x, w)
	below := p.y
	p.dry, p.y = dry, short
	if below < beside {
		p.y = math.Max(short, bottom)
		seen(x, w)
		return
	}
	seen(rx, rw)
	p.y = math.Max(p.y, bottom)
}

// mostSummary is the most lines of the sentences: what the program says itself is never cut,
// unless the animal's name alone takes lines.
func (o *owner) mostSummary(f fit) int {
	if strings.TrimSpace(o.in.Options.Summary) == "" && len(o.in.Patient.Name) <= 40 {
		return 0
	}
	return f.summary
}

// seen lists what is worse, better, the same and not tested, each under its mark.
func (o *owner) seen(p *page, x, w float64, f fit) {
	in := o.in
	type group struct {
		mark  chart.Mark
		head  string
		names []string
		rank  int
	}
	var groups []group
	add := func(rank int, mark chart.Mark, head, name string) {
		for i := range groups {
			if groups[i].head == head {
				groups[i].names = append(groups[i].names, name)
				return
			}
		}
		groups = append(groups, group{mark, head, []string{name}, rank})
	}
	for _, c := range o.changes {
		name := c.topic.word
		when := dayWords(p.lang, c.since)
		switch {
		case !c.tested:
			add(3, chart.MarkNone, in.text(textNotTested), name)
		case !c.known:
			add(4, chart.MarkPlain, in.text(textFirstTest), name)
		case c.dir == exam.Worse && c.topic.strength():
			add(0, chart.MarkWorse, in.text(textTellLimb, when), name)
		case c.dir == exam.Worse:
			add(0, chart.MarkWorse, in.text(textTellOther, when), name)
		case c.dir == exam.Better:
			add(1, chart.MarkBetter, in.text(textBetterThan, when), name)
		default:
			add(2, chart.MarkSame, in.text(textSameAs, when), name)
		}
	}
	slices.SortStableFunc(groups, func(a, b group) int { return a.rank - b.rank })
	st := chart.Style{Palette: p.pal, Text: vg.Length(p.size), Lang: p.lang}
	indent := p.size * 1.4
	for _, g := range groups {
		line := upperFirst(o.list(g.names)) + colon(p.lang) + g.head + "."
		p.note(line)
		y := p.y + lead(p.size)/2
		p.draw(x, y-p.size*0.6, p.size*1.2, p.size*1.2, func(c draw.Canvas) {
			chart.Wedge(c, st, vg.Point{X: vg.Length(p.size * 0.6), Y: vg.Length(p.size * 0.6)}, vg.Length(p.size*0.36), g.mark, false)
		})
		p.para(x+indent, w-indent, line, p.size, g.rank == 0, p.pal.Ink, 0)
		p.y += p.size * 0.15
	}
}

func upperFirst(s string) string {
	for i, r := range s {
		return strings.ToUpper(string(r)) + s[i+len(string(r)):]
	}
	return s
}

// course draws walking and the legs that were ever weak over the visits.
func (o *owner) course(p *page, f fit) {
	in := o.in
	if in.Options.NoChart || len(in.Visits) < 2 || f.chart <= 0 {
		return
	}
	l := ownerCourse(in)
	if len(l.Limbs) == 0 {
		return
	}
	x, w := o.inner(p)
	p.heading(x, w, in.text(textCourse))
	lane := 2.7
	if f.how > 0 {
		lane = 2.1
	}
	h := math.Max(f.chart, p.size*(lane*float64(len(l.Limbs))+2.6))
	st := chart.Style{Palette: p.pal, Text: vg.Length(p.size * 0.85), Lang: p.lang}
	p.draw(x, p.y+2, w, h, func(c draw.Canvas) { l.Draw(c, st) })
	p.y += h + 4
}

// ownerCourse is the course as an owner can read it: walking, and each leg that was ever
// weak; all four where none was.
func ownerCourse(in Input) chart.Limbs {
	var l chart.Limbs
	for i, v := range in.Visits {
		cv := chart.Visit{At: v.Examined}
		if i > 0 {
			same, _ := exam.LikeForLike(in.Visits[i-1], v)
			cv.Unlike = !same
		}
		l.Visits = append(l.Visits, cv)
	}
	series := func(label string, item exam.Item, site exam.Site) (chart.Series, bool, bool) {
		info := item.Info()
		grades := make([]int8, len(in.Visits))
		any, weak := false, false
		for i, v := range in.Visits {
			grades[i] = -1
			if g, ok := v.Grade(item, site); ok {
				grades[i], any = g, true
				weak = weak || g < info.Normal
			}
		}
		s := chart.GradeSeries(label, item.Last(), grades)
		for i := range s.Values {
			s.Values[i].Mark = ""
		}
		for _, g := range in.Patient.Goals {
			if g.Item == item.String() && (g.Site == site.String() || g.Site == "") && g.Reached == "" {
				goal := chart.Goal{Value: g.Target}
				if t, ok := g.By.Time(); ok {
					goal.By = t
				}
				s.Goals = append(s.Goals, goal)
			}
		}
		return s, any, weak
	}
	if s, any, weak := series(upperFirst(in.text(wordWalking)), exam.Ambulation, exam.Midline); any && weak {
		s.LowWord, s.HighWord = in.text(wordCannot), in.text(wordAlone)
		l.Limbs = append(l.Limbs, s)
	}
	var all, weakOnes []chart.Series
	for i, site := range exam.Limbs() {
		s, any, weak := series(upperFirst(in.text([4]string{wordLeftFore, wordRghtFore, wordLeftHind, wordRghtHind}[i])), exam.VoluntaryMotor, site)
		s.LowWord, s.HighWord = in.text(wordNoMove), in.text(wordStrong)
		if any {
			all = append(all, s)
		}
		if weak {
			weakOnes = append(weakOnes, s)
		}
	}
	if len(weakOnes) > 0 {
		all = weakOnes
	}
	l.Limbs = append(l.Limbs, all...)
	first, last := in.Visits[0].Examined, in.last().Examined
	for _, pr := range in.Patient.Problems {
		for _, e := range []struct {
			d exam.Date
			w string
		}{{pr.Onset, wordOnset}, {pr.Surgery, wordSurgery}} {
			if t, ok := e.d.Time(); ok && t.After(first.AddDate(0, 0, -60)) && t.Before(last.AddDate(0, 0, 1)) {
				l.Events = append(l.Events, chart.Event{At: t, Word: in.text(e.w)})
			}
		}
	}
	slices.SortStableFunc(l.Events, func(a, b chart.Event) int { return a.At.Compare(b.At) })
	return l
}

// goals writes goals on the left and the next visit on the right.
func (o *owner) goals(p *page, f fit) {
	in := o.in
	x, w := o.inner(p)
	top := p.y
	var lines []string
	for _, g := range in.Patient.Goals {
		s := g.Words
		if s == "" {
			continue
		}
		switch {
		case g.Reached != "":
			s = in.text(textGoalReached, s)
		case g.By != "":
			s = in.text(textGoalBy, s, dateWords(p.lang, g.By))
		}
		lines = append(lines, s)
	}
	if len(lines) == 0 {
		return
	}
	p.y = top
	if f.dense {
		p.y += p.size * 0.3
		p.line(x, w, in.text(textGoals), strings.Join(lines, "; "), 0)
		return
	}
	p.heading(x, w, in.text(textGoals))
	shown := lines
	if f.goals > 0 && len(shown) > f.goals {
		shown = shown[:f.goals]
	}
	col, cols := w, 1
	if len(shown) > 1 {
		col, cols = w/2, 2
	}
	for i := 0; i < len(shown); i += cols {
		row := p.y
		bottom := row
		for k := range cols {
			if i+k >= len(shown) {
				break
			}
			p.y = row
			gx := x + float64(k)*col
			p.note(shown[i+k])
			p.box(gx+1, p.y+p.size*0.38, p.size*0.62, p.size*0.62, nil, &p.pal.Soft, 0.8)
			p.para(gx+p.size*1.1, col-p.size*1.6, shown[i+k], p.size, false, p.pal.Ink, 2)
			bottom = math.Max(bottom, p.y)
		}
		p.y = bottom
	}
	if left := len(lines) - len(shown); left > 0 {
		p.para(x+p.size*1.1, w, in.text(textMore, left), p.size, false, p.pal.Soft, 1)
	}
}

// homePlan writes the exercises with a box for each time on each day of the week, and the
// next visit.
func (o *owner) homePlan(p *page, f fit) {
	in := o.in
	x, w := o.inner(p)
	next := in.text(textNoNext)
	if d := in.last().NextVisit; d != "" {
		next = dateWords(p.lang, d)
		if t, ok := d.Time(); ok && len(d) == len("2006-01-02") {
			next = weekday(p.lang, t.Weekday()) + " " + next
		}
	}
	defer func() {
		p.y += p.size * 0.35
		s := in.text(textNextVisit) + colon(p.lang)
		p.y += lead(p.size * 1.1)
		p.put(x, p.y-p.size*0.3, s, p.size*1.1, true, p.pal.Ink)
		p.put(x+width(s, p.size*1.1, true), p.y-p.size*0.3, next, p.size*1.1, false, p.pal.Ink)
		p.note(s + next + ".")
	}()
	p.heading(x, w, in.text(textHome))
	if len(o.urgent) > 0 {
		s := in.text(textUntilAgrees)
		p.para(x, w, s, p.size*1.1, true, p.pal.Ink, 2)
		return
	}
	if len(o.home) == 0 {
		s := in.text(phraseNoHome)
		p.note(s)
		p.para(x, w, s, p.size, false, p.pal.Ink, 2)
		return
	}
	shown := o.home
	if f.exercises > 0 && len(shown) > f.exercises {
		shown = shown[:f.exercises]
	}
	day := p.size * 2.5
	textW := w - 7*day - 8
	// The days' heads, on the heading's line.
	for d := range 7 {
		name := weekday(p.lang, time.Weekday((d+1)%7))
		cx := x + textW + 8 + (float64(d)+0.5)*day
		p.put(cx-width(name, p.size*0.85, true)/2, p.y-p.size*0.55, name, p.size*0.85, true, p.pal.Soft)
	}
	hx := x + width(in.text(textHome), p.size*1.15, true) + p.size
	if tick := in.text(textTick); width(tick, p.size*0.85, false) < x+textW-hx {
		p.put(hx, p.y-p.size*0.55, tick, p.size*0.85, false, p.pal.Soft)
		p.note(tick)
	}
	for i, e := range shown {
		row := p.y
		p.y += p.size * 0.1
		head := e.name + " – " + e.often
		p.note(head)
		most := 0
		if f.how > 0 {
			most = max(f.how, 2)
		}
		p.para(x, textW, head, p.size, true, p.pal.Ink, most)
		if e.how != "" && !f.terse && !f.dense {
			how := wholeSentences(e.how, e.own, f.how, func(s string) int { return len(wrap(p.clean(s), textW, p.size*0.93, false, 0)) })
			p.note(how)
			p.para(x, textW, how, p.size*0.93, false, p.pal.Ink, f.how)
		}
		if e.stop != "" && !f.terse && !f.dense {
			p.note(e.stop)
			p.para(x, textW, e.stop, p.size*0.93, false, p.pal.Ink, 0)
		}
		side := p.size * 0.85
		perRow := 2
		if e.times == 1 {
			perRow = 1
		}
		for d := range 7 {
			cx := x + textW + 8 + (float64(d)+0.5)*day
			for k := range e.times {
				bx := cx - (float64(min(perRow, e.times))*side*1.2-side*0.2)/2 + float64(k%perRow)*side*1.2
				by := row + p.size*0.35 + float64(k/perRow)*side*1.25
				p.box(bx, by, side, side, nil, &p.pal.Ink, 0.7)
			}
		}
		p.y = math.Max(p.y, row+p.size*0.35+float64((e.times+perRow-1)/perRow)*side*1.25)
		if below := strings.Join(nonEmpty(e.how, e.stop), " "); below != "" && f.dense {
			p.note(below)
			p.para(x, w, below, p.size*0.93, false, p.pal.Ink, 0)
		}
		p.y += p.size * 0.15
		if i < len(shown)-1 && !p.dry {
			p.colour(p.pal.Line)
			p.doc.SetLineWidth(0.3)
			p.doc.Line(x, p.y, x+w, p.y)
		}
	}
	if left := len(o.home) - len(shown); left > 0 {
		p.para(x, w, in.text(textMore, left), p.size, true, p.pal.Ink, 1)
	}
}

// callBox writes what must not wait and whom to call.
func (o *owner) callBox(p *page) {
	in := o.in
	x, w := o.inner(p)
	pad := p.size * 0.6
	top := p.y + p.size*0.55
	dry := p.dry
	for _, pass := range []bool{true, false} {
		if !pass && dry {
			continue
		}
		p.dry = pass || dry
		p.y = top + pad*0.4
		p.note(in.text(textCall) + strings.TrimSpace(colon(p.lang)))
		p.para(x+pad, w-2*pad, strings.TrimRight(in.text(textCall)+colon(p.lang), " "), p.size*1.12, true, p.pal.Call, 1)
		col := (w - 2*pad) / 2
		row := p.y
		bottom := row
		size := p.size * 0.93
		half := o.splitSigns(p, col-size*1.4, size)
		for c := range 2 {
			p.y = row
			for i, sign := range callSigns {
				if (i >= half) != (c == 1) {
					continue
				}
				s := in.text(sign)
				p.note(upperFirst(s) + ".")
				cx := x + pad + float64(c)*col
				p.put(cx, p.y+lead(size)-size*0.3, "•", size, false, p.pal.Call)
				p.para(cx+size*0.8, col-size*1.4, s, size, false, p.pal.Ink, 0)
			}
			bottom = math.Max(bottom, p.y)
		}
		p.y = bottom + p.size*0.2
		for _, c := range []struct {
			label string
			who   exam.Contact
		}{{in.text(textPhoneVet), in.Patient.Veterinarian}, {in.text(textPhoneNight), in.outOfHours()}} {
			if !hasDigits(c.who.Phone) {
				continue
			}
			size := p.size * 1.12
			p.y += lead(size)
			y := p.y - size*0.3
			label := c.label + colon(p.lang)
			p.put(x+pad, y, label, size, false, p.pal.Ink)
			tx := x + pad + width(label, size, false)
			phone := c.who.Phone
			pw := width(phone, size, true)
			p.put(tx, y, phone, size, true, p.pal.Ink)
			if name := c.who.Name; name != "" {
				// The name stands behind the number, or below it where it is long.
				room := x + w - pad - (tx + pw + size)
				if width(p.clean(name), p.size, false) <= room {
					p.put(tx+pw+size*0.7, y, name, p.size, false, p.pal.Soft)
				} else {
					p.para(x+pad+size, w-2*pad-size, name, p.size, false, p.pal.Soft, 2)
				}
			}
		}
		p.y += pad * 0.5
		if pass && !dry {
			p.dry = false
			p.box(x, top, w, p.y-top, &p.pal.Faint, &p.pal.Call, 1.2)
		}
	}
	p.dry = dry
	p.y += p.size * 0.3
}

// splitSigns returns how many signs stand in the left column so that both are equally tall.
func (o *owner) splitSigns(p *page, w, size float64) int {
	var tall []float64
	total := 0.0
	for _, s := range callSigns {
		h := p.tall(w, o.in.text(s), size, false, 0)
		tall, total = append(tall, h), total+h
	}
	best, at, sum := math.Inf(1), 0, 0.0
	for i, h := range tall {
		sum += h
		if t := math.Max(sum, total-sum); t < best {
			best, at = t, i+1
		}
	}
	return at
}

// foot writes the two cautions.
func (o *owner) foot(p *page) {
	in := o.in
	x, w := o.inner(p)
	p.note(in.text(textMedicine))
	p.note(in.text(textSupport))
	p.para(x, w, in.text(textMedicine), p.size, true, p.pal.Ink, 2)
	p.para(x, w, in.text(textSupport), p.size*0.93, false, p.pal.Soft, 2)
}
