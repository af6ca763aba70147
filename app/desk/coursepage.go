package desk

import (
	"bytes"
	"context"
	"image/png"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"sync/atomic"
	"time"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/container"
	"gonum.org/v1/plot/vg"
	vgdraw "gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgsvg"

	"cordwalk.example/cordwalk/app/chart"
	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam/progress"
)

// coursePage answers: is it getting better, and where?
type coursePage struct {
	win    *window
	file   File
	course *view.Course
	root   *fyne.Container
	body   *mark.Scroll
	weeks  int // 0: all
	back   int // weeks between the right end and the last visit
	at     int // visit shown on the body drawing
	stop   chan struct{}
	plain  *view.Course     // the share of normal in what was tested
	model  *view.Course     // the serial model's; nil until it is worked out, or where there is none
	result *progress.Result // what the model says
	said   string           // why there is no model
	gone   atomic.Bool      // another page has come
	strip  *chartHost
	fn     *chartHost
	limbs  *chartHost
	meas   *chartHost
	animal *mark.LimbCross
	day    *mark.Text
	zooms  []*mark.Button
	chosen bool   // somebody chose the segments
	rows   [2]int // the segments shown: the first and the one behind the last; zero: all
}

func newCoursePage(w *window) *coursePage {
	p := &coursePage{win: w, file: w.file}
	p.plain = view.NewCourse(p.file.Patient, p.file.Visits, view.PlainScores(p.file.Patient.Species, p.file.Visits), false).In(w.app.practice.Units())
	p.course = p.plain
	p.at = len(p.course.Visits) - 1
	p.root = container.NewStack()
	p.build()
	p.analyse()
	return p
}

// analyse works the course out by the serial model, off the drawing goroutine; until then the
// plain scores are shown.
func (p *coursePage) analyse() {
	if len(p.file.Visits) == 0 {
		return
	}
	patient, visits, now := p.file.Patient, p.file.Visits, p.win.app.now()
	a := p.win.app
	a.work(func(context.Context) (func(), error) {
		a.heavy.Lock()
		defer a.heavy.Unlock()
		if p.gone.Load() {
			return nil, nil
		}
		c, r, err := view.ModelCourse(patient, visits, progress.Options{Now: now})
		if err != nil {
			return nil, err
		}
		return func() {
			if p.gone.Load() {
				a.rest() // what it loaded came after the page had let go of it
				return
			}
			p.result = &r
			if len(r.Segments) > 0 {
				p.model = c.In(a.practice.Units())
				p.course = c
			}
			p.build()
		}, nil
	}, func(err error) {
		if !p.gone.Load() {
			p.said = words.T("The course could not be worked out: %s", err.Error())
			p.build()
		}
	})
}

// switchTo shows the model's function, or the plain share of normal in what was tested.
func (p *coursePage) switchTo(c *view.Course) {
	if c != nil && c != p.course {
		p.course = c
		p.build()
	}
}

func (p *coursePage) content() fyne.CanvasObject { return p.root }
func (p *coursePage) shown()                     { p.win.win.Canvas().Unfocus() }

// left lets go of the model and the pictures: the toolkit keeps the widgets of a page for a while.
func (p *coursePage) left() {
	p.halt()
	p.gone.Store(true)
	p.model, p.result, p.course = nil, nil, p.plain
	p.releaseCharts()
	progress.Forget(p.file.Patient.Species)
}

func (p *coursePage) releaseCharts() {
	for _, h := range []*chartHost{p.strip, p.fn, p.limbs, p.meas} {
		if h != nil {
			h.release()
		}
	}
}

func (p *coursePage) help() []view.KeyHelp {
	return []view.KeyHelp{
		{Keys: "+ −", Does: words.T("nearer in time, farther")},
		{Keys: words.T("Left, Right"), Does: words.T("earlier, later")},
		{Keys: "0", Does: words.T("the whole course")},
		{Keys: "m", Does: words.T("the whole series, or each visit by itself")},
		{Keys: "f", Does: words.T("published scales and plain statistics")},
		{Keys: "c", Does: words.T("copy the picture of the course")},
		{Keys: "s", Does: words.T("save the picture of the course")},
		{Keys: words.T("space"), Does: words.T("play the visits on the drawing")},
		{Keys: "[ ]", Does: words.T("the visit before, the visit after")},
	}
}

func (p *coursePage) build() {
	if len(p.course.Visits) == 0 {
		p.put(mark.Pad(look.Unit*3, look.Unit*3, mark.Column(look.Unit*2, mark.Title(words.T("Course")).AtLeast(80),
			mark.NewPara(words.T("There is no visit yet. Each exam adds a column here.")),
			mark.Left(mark.NewButton(words.T("Start exam"), "exam", func() { p.win.to(view.ScreenExam) }).As(mark.Main)))))
		return
	}
	p.releaseCharts()
	zoom := func(word string, weeks int) *mark.Button {
		b := mark.NewButton(word, "", func() { p.weeks, p.back = weeks, 0; p.span() })
		p.zooms = append(p.zooms, b)
		return b
	}
	p.zooms = nil
	var kinds []fyne.CanvasObject
	if p.model != nil {
		series := mark.NewButton(words.T("Whole series"), "", func() { p.switchTo(p.model) }).WithTip(words.T("Function as all visits together make it likely. Key m"))
		each := mark.NewButton(words.T("Each visit"), "", func() { p.switchTo(p.plain) }).WithTip(words.T("The share of normal in what was tested that day. Key m"))
		series.Chosen, each.Chosen = p.course == p.model, p.course == p.plain
		kinds = append(kinds, series, each)
	}
	bar := mark.Bar(look.Unit, mark.Title(words.T("Course")).AtLeast(80), append(kinds,
		zoom(words.T("All"), 0), zoom(words.T("12 weeks"), 12), zoom(words.T("4 weeks"), 4),
		mark.NewButton("", "left", func() { p.pan(1) }).WithTip(words.T("Earlier")),
		mark.NewButton("", "right", func() { p.pan(-1) }).WithTip(words.T("Later")),
		mark.NewButton(words.T("Figures"), "grid", p.figures).WithTip(words.T("Published scales and plain statistics. Key f")),
		mark.NewButton(words.T("Copy picture"), "", p.copyCourse).WithTip(words.T("Key c")),
		mark.NewButton(words.T("Save picture"), "save", p.askSave).WithTip(words.T("Key s")))...)
	choose := p.regions()
	p.strip = newChartHost(p.course.Strip, fyne.NewSize(400, p.stripHeight()))
	p.strip.hover = func(x, y, w, h vg.Length, st chart.Style) string {
		strip, ok := p.strip.chart.(chart.Strip)
		if !ok {
			return ""
		}
		hit, ok := strip.Hit(w, h, x, y, st)
		if !ok {
			return ""
		}
		if hit.Event >= 0 {
			return hoverWords(p.course.HoverEvent(hit.Event))
		}
		return hoverWords(p.course.HoverSegment(hit.Row+p.rows[0], hit.Visit, hit.Side))
	}
	p.limbs = newChartHost(p.course.Limbs, fyne.NewSize(400, 330*max(1, look.Scale())))
	p.limbs.hover = func(x, y, w, h vg.Length, st chart.Style) string {
		hit, ok := p.course.Limbs.Hit(w, h, x, y, st)
		if !ok {
			return ""
		}
		if hit.Event >= 0 {
			return hoverWords(p.course.HoverEvent(hit.Event))
		}
		return hoverWords(p.course.HoverLimb(hit.Series, hit.Visit))
	}
	title := words.T("Segments: the share of normal in what was tested")
	how := words.T("Each segment has a line for its left and its right half. The shade is the mean health of the tested findings whose arc runs through it; where too little was tested it is left empty.")
	if p.course == p.model {
		title = words.T("Segments: function as the whole series shows it")
		how = words.T("Each segment has a line for its left and its right half. The shade is the function that all visits together make likely; a thin line is uncertain.")
	}
	lines := append(p.verdict(), mark.Bar(look.Unit, mark.Heading(title).AtLeast(80), mark.Sized(230, look.Target, choose)), mark.NewPara(how).In(look.InkSoft), p.strip)
	if n := len(p.course.Function.Limbs); n > 0 {
		fn := p.course.Function
		p.fn = newChartHost(fn, fyne.NewSize(400, (float32(n)*74+50)*max(1, look.Scale())))
		p.fn.hover = func(x, y, w, h vg.Length, st chart.Style) string {
			hit, ok := p.course.Function.Hit(w, h, x, y, st)
			if !ok || hit.Series < 0 || hit.Series >= len(fn.Limbs) {
				return ""
			}
			s := fn.Limbs[hit.Series]
			if hit.Visit >= 0 && hit.Visit < len(s.Values) && s.Values[hit.Visit].Known {
				v := s.Values[hit.Visit]
				return words.T("%s, %s\nfunction %d %% (%d to %d)", s.Label, view.Day(p.course.Visits[hit.Visit].Examined), int(v.Value+0.5), int(v.Low+0.5), int(v.High+0.5))
			}
			if hit.Forecast >= 0 && hit.Forecast < len(s.Forecast) {
				f := s.Forecast[hit.Forecast]
				return words.T("%s, expected on %s\nfunction %d %% (%d to %d)", s.Label, view.Day(f.At), int(f.Value+0.5), int(f.Low+0.5), int(f.High+0.5))
			}
			return ""
		}
		lines = append(lines, mark.Heading(words.T("Function with its band, and what is expected")).AtLeast(80), p.fn)
	}
	lines = append(lines, mark.Heading(words.T("Limbs: voluntary movement as graded")).AtLeast(80), p.limbs)
	if n := len(p.course.Measure.Series); n > 0 {
		p.meas = newChartHost(p.course.Measure, fyne.NewSize(400, (float32(n)*84+50)*max(1, look.Scale())))
		p.meas.hover = func(x, y, w, h vg.Length, st chart.Style) string {
			hit, ok := p.course.Measure.Hit(w, h, x, y, st)
			if !ok || hit.Visit < 0 || hit.Series < 0 || hit.Series >= len(p.course.Measure.Series) {
				return ""
			}
			s := p.course.Measure.Series[hit.Series]
			if hit.Visit >= len(s.Values) || !s.Values[hit.Visit].Known {
				return ""
			}
			return s.Label + ", " + view.Day(p.course.Visits[hit.Visit].Examined) + "\n" + strings.TrimSpace(plainNumber(s.Values[hit.Visit].Value)+" "+s.Unit)
		}
		lines = append(lines, mark.Heading(words.T("Measures")).AtLeast(80), p.meas)
	}
	p.body = mark.NewScroll(mark.Column(look.Unit, lines...))
	p.animal = mark.NewBody(view.CrossOf(p.course.Visits[p.at]), p.file.Patient.Species, 300)
	p.day = mark.Bold("").Centred().AtLeast(60)
	play := mark.NewButton(words.T("Play"), "play", p.play)
	side := mark.Column(look.Unit, center(p.animal), p.day,
		mark.Row(look.Unit, []float32{1, 0, 1}, mark.NewButton("", "left", func() { p.step(-1) }), play, mark.NewButton("", "right", func() { p.step(1) })),
		mark.Space(1, look.Unit))
	for _, g := range p.file.Patient.Goals {
		line := words.T("Goal: %s", g.Words)
		if p.result != nil {
			for _, c := range p.result.Goals {
				if c.Goal != g.ID.String() && c.Words != g.Words {
					continue
				}
				if c.Probability != nil {
					line = words.T("%s. Reached in time: %s, %s", line, percent(*c.Probability), chanceWord(*c.Probability))
				} else if c.Why != "" {
					line += ". " + said(c.Why)
				}
				break
			}
		}
		side.Add(mark.NewPara(line))
	}
	for _, m := range p.file.Missing {
		side.Add(cautionLine(said(m)))
	}
	split := mark.RowTop(look.Unit*2, []float32{1, 0}, p.body, mark.Sized(196, 10, mark.NewScroll(side)))
	p.put(mark.Pad(look.Unit*1.5, look.Unit*2, mark.ColumnGrow(look.Unit, 1, bar, split)))
	p.span()
	p.step(0)
}

// regions chooses which stretch of the cord the strip shows.
func (p *coursePage) regions() fyne.CanvasObject {
	at := func(name string) int {
		for i, r := range p.course.Strip.Rows {
			if r.Label == name {
				return i
			}
		}
		return -1
	}
	shown := []string{words.T("All segments")}
	values := []string{"0/0"}
	if a, b := affected(p.course.Strip.Rows); b > 0 {
		shown, values = append(shown, words.T("Affected, %s to %s", p.course.Strip.Rows[a].Label, p.course.Strip.Rows[b-1].Label)), append(values, strconv.Itoa(a)+"/"+strconv.Itoa(b))
		if !p.chosen {
			p.rows = [2]int{a, b}
		}
	} else if !p.chosen {
		p.rows = [2]int{}
	}
	for _, r := range [][3]string{{words.T("Neck, C1 to C5"), "C1", "C5"}, {words.T("Thoracic limbs, C6 to T2"), "C6", "T2"}, {words.T("Trunk, T3 to L3"), "T3", "L3"},
		{words.T("Pelvic limbs, L4 to S1"), "L4", "S1"}, {words.T("Bladder and tail, S1 to Cd5"), "S1", "Cd5"}} {
		if a, b := at(r[1]), at(r[2]); a >= 0 && b >= a {
			shown, values = append(shown, r[0]), append(values, strconv.Itoa(a)+"/"+strconv.Itoa(b+1))
		}
	}
	now := strconv.Itoa(p.rows[0]) + "/" + strconv.Itoa(p.rows[1])
	return mark.Choice(shown, values, now, func(s string) {
		p.chosen = true
		a, b, _ := strings.Cut(s, "/")
		p.rows[0], _ = strconv.Atoi(a)
		p.rows[1], _ = strconv.Atoi(b)
		p.span()
	})
}

// stripHeight gives few segments broad rows and all of them room on one screen.
func (p *coursePage) stripHeight() float32 {
	n := len(p.course.Strip.Rows)
	if p.rows[1] > 0 {
		n = p.rows[1] - p.rows[0]
	}
	return min(460, 130+float32(n)*24) * max(1, look.Scale())
}

// affected returns the stretch of the cord that was ever below nine tenths of its function, with two
// segments on either side; zero where that is nothing or nearly everything.
func affected(rows []chart.StripRow) (from, behind int) {
	const full, beside = 90, 2
	first, last := -1, -1
	for i, r := range rows {
		for _, side := range [][]chart.Value{r.Left, r.Right} {
			for _, v := range side {
				if v.Known && v.Value < full {
					if first < 0 {
						first = i
					}
					last = i
				}
			}
		}
	}
	if first < 0 {
		return 0, 0
	}
	from, behind = max(0, first-beside), min(len(rows), last+1+beside)
	if behind-from > len(rows)*3/4 {
		return 0, 0
	}
	return from, behind
}

// put shows what was built.
func (p *coursePage) put(o fyne.CanvasObject) {
	before := p.root.Objects
	p.root.Objects = []fyne.CanvasObject{o}
	p.root.Refresh()
	for _, b := range before {
		p.win.freed(b)
	}
}

// verdict is what the course says in words: the sentence with its probability, and what must be
// known to read it.
func (p *coursePage) verdict() []fyne.CanvasObject {
	var out []fyne.CanvasObject
	switch r := p.result; {
	case r == nil && p.said == "":
		out = append(out, mark.NewPara(words.T("Working out the course…")).In(look.InkSoft))
	case r == nil:
		out = append(out, cautionLine(p.said))
	default:
		if s := view.Sentence(*r); s != "" {
			out = append(out, mark.NewPara(s).As(look.Head).Strong())
		} else {
			out = append(out, mark.NewPara(words.T("One visit says where the animal stands; the next one says where it goes.")))
		}
		if r.Plateau != nil && r.Plateau.Named {
			out = append(out, mark.NewPara(sentence(said(r.Plateau.Words))))
		}
		if r.Relapse != nil && r.Relapse.Probability > 0.5 {
			out = append(out, cautionLine(sentence(said(r.Relapse.Words))))
		}
		for _, n := range r.Notes {
			out = append(out, mark.NewPara(said(n)).In(look.InkSoft).As(look.Small))
		}
	}
	return out
}

// percent writes a probability; near its ends it says so and not 0 or 100.
func percent(p float64) string {
	switch n := int(p*100 + 0.5); {
	case n >= 100:
		return words.T("more than %d %%", 99)
	case n <= 0:
		return words.T("less than %d %%", 1)
	default:
		return words.T("%d %%", n)
	}
}

// sentence begins with a capital letter and ends with a full stop.
func sentence(s string) string {
	r := []rune(strings.TrimSuffix(s, "."))
	if len(r) == 0 {
		return ""
	}
	return strings.ToUpper(string(r[0])) + string(r[1:]) + "."
}

// chanceWord says a probability in a word.
func chanceWord(p float64) string {
	switch {
	case p >= 0.8:
		return words.T("likely")
	case p <= 0.2:
		return words.T("unlikely")
	}
	return words.T("not clear")
}

func hoverWords(h view.Hover) string {
	return strings.Join(append([]string{h.Title}, h.Lines...), "\n")
}

func (p *coursePage) typedRune(r rune) bool {
	switch r {
	case '+', '=':
		switch {
		case p.weeks == 0:
			p.weeks = 12
		case p.weeks > 2:
			p.weeks = max(2, p.weeks/2)
		}
		p.span()
	case '-', '−':
		if p.weeks > 0 {
			p.weeks *= 2
		}
		if p.weeks > 104 {
			p.weeks = 0
		}
		p.span()
	case '0':
		p.weeks, p.back = 0, 0
		p.span()
	case ' ':
		p.play()
	case 'f':
		p.figures()
	case 'c':
		p.copyCourse()
	case 's':
		p.askSave()
	case 'm':
		if p.course == p.model {
			p.switchTo(p.plain)
		} else {
			p.switchTo(p.model)
		}
	case '[':
		p.step(-1)
	case ']':
		p.step(1)
	default:
		return false
	}
	return true
}

func (p *coursePage) typedKey(k fyne.KeyName) bool {
	if p.body == nil {
		return false
	}
	switch k {
	case fyne.KeyLeft:
		p.pan(1)
	case fyne.KeyRight:
		p.pan(-1)
	case fyne.KeyDown:
		p.body.By(80)
	case fyne.KeyUp:
		p.body.By(-80)
	case fyne.KeyPageDown:
		p.body.By(400)
	case fyne.KeyPageUp:
		p.body.By(-400)
	default:
		return false
	}
	return true
}

func (p *coursePage) pan(d int) {
	if p.weeks == 0 {
		return
	}
	p.back = max(0, p.back+d*max(1, p.weeks/4))
	p.span()
}

// span shows a stretch of time on every chart.
func (p *coursePage) span() {
	if len(p.course.Visits) == 0 {
		return
	}
	s := p.course.Span
	if p.weeks > 0 {
		end := p.course.Visits[len(p.course.Visits)-1].Examined.AddDate(0, 0, 2-7*p.back)
		s.From, s.To = end.AddDate(0, 0, -7*p.weeks), end
	}
	strip, limbs, meas := p.course.Strip, p.course.Limbs, p.course.Measure
	strip.Span, limbs.Span, meas.Span = s, s, s
	if p.rows[1] > 0 && p.rows[1] <= len(strip.Rows) {
		strip.Rows = strip.Rows[p.rows[0]:p.rows[1]]
	}
	p.strip.least.Height = p.stripHeight()
	p.strip.set(strip)
	p.body.Reflow()
	p.limbs.set(limbs)
	if p.fn != nil && len(p.course.Function.Limbs) > 0 {
		fn := p.course.Function
		if p.weeks > 0 {
			fn.Span = s
		}
		p.fn.set(fn)
	}
	if p.meas != nil {
		p.meas.set(meas)
	}
	for i, b := range p.zooms {
		b.SetChosen([]int{0, 12, 4}[i] == p.weeks)
	}
}

// step shows another visit on the drawing.
func (p *coursePage) step(d int) {
	p.at = max(0, min(len(p.course.Visits)-1, p.at+d))
	v := p.course.Visits[p.at]
	p.animal.Set(view.CrossOf(v))
	p.day.Set(view.Day(v.Examined))
}

// play shows the visits one after another on the drawing.
func (p *coursePage) play() {
	if p.stop != nil {
		p.halt()
		return
	}
	stop := make(chan struct{})
	p.stop = stop
	p.at = 0
	p.step(0)
	go func() {
		tick := time.NewTicker(700 * time.Millisecond)
		defer tick.Stop()
		for {
			select {
			case <-stop:
				return
			case <-p.win.app.ctx.Done():
				return
			case <-tick.C:
				p.win.app.onUI(func() {
					if p.stop != stop {
						return
					}
					if p.at+1 >= len(p.course.Visits) {
						p.halt()
						return
					}
					p.step(1)
				})
			}
		}
	}()
}

func (p *coursePage) halt() {
	if p.stop != nil {
		close(p.stop)
		p.stop = nil
	}
}

// askSave asks where a picture of the course goes: PNG, SVG or PDF by its ending.
func (p *coursePage) askSave() {
	name := fileWord(p.file.Patient.Name) + "-course.png"
	told := p.win.exported(name)
	p.win.askFile(words.T("Save the picture of the course"), name, words.T("The ending says how: .png, .svg or .pdf"), func(path string) error {
		if err := saveCourse(path, p.course.Strip, p.course.Limbs); err != nil {
			return err
		}
		return told(context.Background())
	})
}

// saveCourse writes the strip and the limbs, one above the other, as ink on white paper.
func saveCourse(path string, strip chart.Strip, limbs chart.Limbs) error {
	ext := strings.ToLower(filepath.Ext(path))
	if ext == ".pdf" {
		return savePDF(path, courseWide, courseHigh, courseChart(strip, limbs), chart.Screen(chart.Print()))
	}
	b, err := coursePicture(strip, limbs, ext == ".svg")
	if err != nil {
		return err
	}
	return os.WriteFile(path, b, 0o600)
}

// courseWide and courseHigh are the size of a picture of the course, in points.
const courseWide, courseHigh = 1000, 940

func courseChart(strip chart.Strip, limbs chart.Limbs) stackedCharts {
	return stackedCharts{strip, limbs, 380}
}

// coursePicture is the picture of a course as SVG or PNG.
func coursePicture(strip chart.Strip, limbs chart.Limbs, svg bool) ([]byte, error) {
	st, both := chart.Screen(chart.Print()), courseChart(strip, limbs)
	var b bytes.Buffer
	if svg {
		c := vgsvg.New(courseWide, courseHigh)
		both.Draw(vgdraw.New(c), st)
		_, err := c.WriteTo(&b)
		return b.Bytes(), err
	}
	err := png.Encode(&b, renderChart(both, st, courseWide*2, courseHigh*2, 2))
	return b.Bytes(), err
}

// copyCourse puts the picture of the course on the clipboard.
func (p *coursePage) copyCourse() {
	strip, limbs := p.course.Strip, p.course.Limbs
	p.win.copyPicture(func(svg bool) ([]byte, error) { return coursePicture(strip, limbs, svg) })
}

// stackedCharts draws one chart above another.
type stackedCharts struct {
	upper, lower drawable
	low          vg.Length
}

// Draw draws both.
func (s stackedCharts) Draw(c vgdraw.Canvas, st chart.Style) {
	up, down := c, c
	up.Rectangle.Min.Y += s.low
	down.Rectangle.Max.Y = down.Rectangle.Min.Y + s.low
	s.upper.Draw(up, st)
	s.lower.Draw(down, st)
}

// fileWord makes a name fit for a file.
func fileWord(name string) string {
	var b strings.Builder
	for _, r := range strings.ToLower(name) {
		switch {
		case r >= 'a' && r <= 'z', r >= '0' && r <= '9':
			b.WriteRune(r)
		case b.Len() > 0 && !strings.HasSuffix(b.String(), "-"):
			b.WriteByte('-')
		}
	}
	s := strings.Trim(b.String(), "-")
	if s == "" {
		s = "animal"
	}
	return s
}

// askFile asks for the place of a file and writes it off the drawing goroutine.
func (w *window) askFile(title, name, hint string, write func(path string) error) {
	dir, err := os.UserHomeDir()
	if err == nil {
		if d := filepath.Join(dir, "Documents"); isDir(d) {
			dir = d
		}
	}
	f := mark.NewField(filepath.Join(dir, name), nil)
	wrong := mark.NewPara("").In(look.Worse)
	do := func() {
		path := strings.TrimSpace(f.Text)
		if path == "" {
			return
		}
		w.app.work(func(context.Context) (func(), error) {
			return func() { w.hideSheet(); w.foot.say(words.T("Saved as %s", path)) }, write(path)
		}, func(err error) { wrong.Set(words.T("It could not be written: %s", err.Error())) })
	}
	f.OnSubmitted = func(string) { do() }
	w.showSheet(title, mark.Column(look.Unit, mark.NewLabelled(words.T("File"), f), mark.NewPara(hint).In(look.InkSoft), wrong), 640,
		mark.NewButton(words.T("Save"), "save", do).As(mark.Main))
	w.win.Canvas().Focus(f)
}

func isDir(path string) bool {
	s, err := os.Stat(path)
	return err == nil && s.IsDir()
}
