package progress

import (
	"fmt"
	"hash/maphash"
	"maps"
	"math"
	"slices"
	"strconv"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
	"cordwalk.example/cordwalk/exam/progress/repeat"
	"cordwalk.example/cordwalk/exam/scale"
)

// ForecastWeeks is how far a forecast looks ahead.
const ForecastWeeks = 12

// Series is the exams of one animal.
type Series struct {
	Patient exam.Patient
	Visits  []exam.Visit // in any order
}

// SeriesOf makes a series of exam files of one animal. What the files say of the animal is taken
// from the latest one that says it. The error names the first file that does not fit.
func SeriesOf(files []exam.File) (Series, error) {
	var s Series
	files = slices.Clone(files)
	slices.SortStableFunc(files, func(a, b exam.File) int { return a.Examined.Compare(b.Examined) })
	for i, f := range files {
		if f.Examined.IsZero() {
			return Series{}, &exam.Invalid{Field: "exam " + strconv.Itoa(i+1) + " of the series: examined", Value: "", Allowed: "a time such as 2026-03-02T10:15:00+01:00"}
		}
		if f.Species != files[0].Species {
			return Series{}, &exam.Invalid{Field: "exam of " + f.Examined.Format(time.RFC3339) + ": species", Value: f.Species.String(), Allowed: files[0].Species.String() + ", as in the other exams of the series"}
		}
		a := f.Animal()
		if len(a.Problems) == 0 {
			a.Problems = s.Patient.Problems
		}
		if a.Born == "" {
			a.Born = s.Patient.Born
		}
		a.Weights = append(s.Patient.Weights, a.Weights...)
		s.Patient = a
		s.Visits = append(s.Visits, f.Visit(exam.ID{}))
	}
	return s, nil
}

// Options of an analysis. The zero Options will do.
type Options struct {
	Since    time.Time       // compare with the first visit at or after this time; zero: with the first visit
	Practice repeat.Practice // the practice's own repeatability
	Now      time.Time       // forecasts run from here where it is later than the last visit; zero: from the last visit

	// Continue is the course of an earlier result. Where the series adds visits to it, or changes
	// its last ones, what is past is not computed again; else it is left alone. It moves on
	// with the new result.
	Continue *Course
}

// Result is everything that a course says, ready to be printed as JSON. Probabilities are 0 to 1,
// functions 0 (lost) to 100 (sound).
type Result struct {
	Segments []SegmentCourse `json:"segments"`
	Change   *ChangeResult   `json:"change"` // null for a single visit
	Plateau  *Plateau        `json:"plateau"`
	Relapse  *Relapse        `json:"relapse"`
	Whole    LimbCourse      `json:"whole"`
	Limbs    []LimbCourse    `json:"limbs"`
	Regions  []RegionCourse  `json:"regions"`
	Goals    []GoalChance    `json:"goals"`
	Scales   []ScaleCourse   `json:"scales"`
	Plain    []Plain         `json:"plain"`
	Symmetry []Symmetric     `json:"symmetry"`
	Alerts   []Alert         `json:"alerts"` // filled by whoever owns the red flags
	Notes    []string        `json:"notes"`  // what must be known to read the result

	course *Course
}

// Point is the function of something at one visit.
type Point struct {
	Examined time.Time `json:"examined"`
	Function float64   `json:"function"` // expected, as known now
	Low      float64   `json:"low"`      // 90 % band
	High     float64   `json:"high"`
	Filtered float64   `json:"filtered"` // expected, as known then
	Score    *float64  `json:"score"`    // plain segment score of that visit; null where too little was tested
	Findings int       `json:"findings"` // behind the score

	FilteredLow  float64 `json:"-"`
	FilteredHigh float64 `json:"-"`
}

// Ahead is a forecast.
type Ahead struct {
	On       time.Time `json:"on"`
	Function float64   `json:"function"`
	Low      float64   `json:"low"`
	High     float64   `json:"high"`
}

// SegmentCourse is the function of one half segment over the visits.
type SegmentCourse struct {
	Segment  string  `json:"segment"`
	Side     string  `json:"side"`
	Points   []Point `json:"points"`
	Forecast []Ahead `json:"forecast"`
}

// LimbCourse is the voluntary movement of one limb, or of the whole animal, over the visits.
type LimbCourse struct {
	Limb     string        `json:"limb"`
	Points   []Point       `json:"points"`
	Forecast []Ahead       `json:"forecast"`
	Change   *ChangeResult `json:"change"`
}

// RegionCourse is how probable it is at each visit that the lesion lies in a region.
type RegionCourse struct {
	Region string        `json:"region"`
	Points []RegionPoint `json:"points"`
}

// RegionPoint is one region at one visit.
type RegionPoint struct {
	Examined    time.Time `json:"examined"`
	Probability float64   `json:"probability"` // as known now
	Filtered    float64   `json:"filtered"`    // as known then
}

// ChangeResult is a change with its words.
type ChangeResult struct {
	Since  time.Time `json:"since"`
	Better float64   `json:"better"`
	Same   float64   `json:"same"`
	Worse  float64   `json:"worse"`
	Margin float64   `json:"margin"` // a change of less than this, in percent points, counts as same
	Words  string    `json:"words"`

	Verdict Verdict `json:"-"`
}

// Plateau says whether the course has come to rest.
type Plateau struct {
	Probability float64    `json:"probability"` // that function now changes by less than the rate
	Rate        float64    `json:"rate_per_week"`
	Named       bool       `json:"named"` // the probability is high enough to say so
	Since       *time.Time `json:"since"` // where it is named: the visit from which it has probably held
	Words       string     `json:"words"`
}

// PlateauNamed is the probability from which a plateau is named. On simulated courses a true one is
// then named within four visits of its start in more than 80 %, and a false one less than
// once in twenty years of weekly visits.
const PlateauNamed = 0.78

// Relapse says whether the animal has lost what it had gained.
type Relapse struct {
	Probability float64   `json:"probability"` // that function now is lower by more than the margin
	Since       time.Time `json:"since"`       // than at this visit, the best so far
	Words       string    `json:"words"`
}

// ScaleCourse is one published scale over the visits.
type ScaleCourse struct {
	Scale   string       `json:"scale"`
	Name    string       `json:"name"`
	Site    string       `json:"site,omitempty"`
	Variant string       `json:"variant"`
	Best    float64      `json:"best"`
	Points  []ScalePoint `json:"points"`
	MDC95   *float64     `json:"mdc95"`
	Source  string       `json:"source"`
}

// ScalePoint is one score. Value is null where only a range of levels is certain.
type ScalePoint struct {
	Examined time.Time `json:"examined"`
	Value    *float64  `json:"value"`
	Low      *float64  `json:"low"` // null where it cannot be scored
	High     *float64  `json:"high"`
	Missing  []string  `json:"missing"`
	Problem  string    `json:"problem,omitempty"`
}

// Alert is a red flag in a result; package alert owns the rules.
type Alert struct {
	Rule    string `json:"rule"`
	Seen    string `json:"seen"`
	Urgency string `json:"urgency"` // "now", "today" or "soon"
	Words   string `json:"words"`
	Source  string `json:"source"`
}

// Analyse reads a whole series. An animal of a species that the localisation model does not cover
// gets scales and plain statistics, with a note; so does one whose exams hold nothing. The
// error says which visit is out of order or impossible.
func Analyse(s Series, o Options) (Result, error) {
	visits := slices.Clone(s.Visits)
	slices.SortStableFunc(visits, func(a, b exam.Visit) int { return a.Examined.Compare(b.Examined) })
	if o.Continue.backTo(o.Continue.agrees(s.Patient, visits)) {
		return carryOn(o.Continue, s.Patient, visits, o)
	}
	m, err := For(s.Patient)
	if err != nil {
		r := plainResult(visits, o)
		r.Scales = scalesOf(visits, o.Practice, func(i int) []scale.Value { return scale.All(visits[i]) })
		r.Goals = goalsOf(s.Patient, nil, r.Plain, time.Time{})
		r.Notes = append(r.Notes, err.Error())
		return r, nil
	}
	c := NewCourse(m)
	c.patient = s.Patient
	return carryOn(c, s.Patient, visits, o)
}

// carryOn adds the visits that a course does not hold yet.
func carryOn(c *Course, p exam.Patient, visits []exam.Visit, o Options) (Result, error) {
	for _, v := range visits[c.Len():] {
		if err := c.Add(v); err != nil {
			return Result{}, err
		}
		c.nodes[len(c.nodes)-1].print = printOf(v)
	}
	return c.Result(p, o), nil
}

var printSeed = maphash.MakeSeed()

// printOf tells whether what was found at a visit is what it was when the course took it in: the
// lists are shared with the caller, who may have changed them since.
func printOf(v exam.Visit) uint64 {
	var h maphash.Hash
	h.SetSeed(printSeed)
	for _, f := range v.Findings {
		maphash.WriteComparable(&h, f)
	}
	h.WriteByte('/')
	for _, m := range v.Measures {
		maphash.WriteComparable(&h, m)
	}
	return h.Sum64()
}

// agrees returns how many of a course's visits are an animal's first visits, as they stand now.
func (c *Course) agrees(p exam.Patient, visits []exam.Visit) int {
	if c == nil || c.patient.Species != p.Species || c.patient.Born != p.Born || c.patient.Breed != p.Breed || !slices.Equal(c.patient.Problems, p.Problems) {
		return 0
	}
	for i, n := range c.nodes {
		if i == len(visits) {
			return i
		}
		a, b := n.visit, visits[i]
		if a.ID != b.ID || !a.Examined.Equal(b.Examined) || a.Examiner != b.Examiner || a.RepeatOf != b.RepeatOf || a.Sedation != b.Sedation || n.print != printOf(b) {
			return i
		}
	}
	return len(c.nodes)
}

// backTo takes the visits after the first n out of the course again. It reports false, and leaves
// the course alone, where that is all of them or more than a few.
func (c *Course) backTo(n int) bool {
	if n == 0 || len(c.nodes)-n > backMost {
		return false
	}
	if n == len(c.nodes) {
		return true
	}
	clear(c.nodes[n:])
	c.nodes = c.nodes[:n]
	// What the visit that is now the last one learnt from later ones is void; smooth goes
	// back from it as far as that matters.
	c.nodes[n-1].beta, c.nodes[n-1].smoothed = nil, nil
	c.chains = chains{}
	for _, n := range c.nodes {
		_, _, next := c.chains.leans(n.visit)
		maps.Copy(c.chains, next)
	}
	for i, f := range c.kept {
		c.kept[i] = f.backTo(n)
	}
	c.kept = slices.DeleteFunc(c.kept, func(f *following) bool { return f == nil })
	return true
}

// plainResult is what needs no model.
func plainResult(visits []exam.Visit, o Options) Result {
	return Result{
		Segments: []SegmentCourse{}, Limbs: []LimbCourse{}, Regions: []RegionCourse{}, Goals: []GoalChance{}, Alerts: []Alert{}, Notes: []string{},
		Whole: LimbCourse{Limb: "whole animal", Points: []Point{}, Forecast: []Ahead{}},
		Plain: orEmpty(plainOf(visits, o.Practice)), Symmetry: orEmpty(symmetryOf(visits)),
	}
}

func orEmpty[T any](s []T) []T {
	if s == nil {
		return []T{}
	}
	return s
}

// Course returns the model behind the result, nil where there is none.
func (r *Result) Course() *Course { return r.course }

// Result reads everything off the course.
func (c *Course) Result(p exam.Patient, o Options) Result {
	visits := make([]exam.Visit, len(c.nodes))
	for i, n := range c.nodes {
		visits[i] = n.visit
	}
	r := plainResult(visits, o)
	r.Scales = scalesOf(visits, o.Practice, func(i int) []scale.Value {
		if c.nodes[i].scales == nil {
			c.nodes[i].scales = orEmpty(scale.All(visits[i]))
		}
		return c.nodes[i].scales
	})
	r.course = c
	if len(c.nodes) == 0 {
		return r
	}
	var shown []int // blind repeats inform the model and are no points of their own
	for i, n := range c.nodes {
		if n.visit.RepeatOf.IsZero() {
			shown = append(shown, i)
		}
	}
	if len(shown) == 0 {
		shown = []int{len(c.nodes) - 1}
	}
	targets := c.model.space.Targets()
	scores := make([][]anatomy.SegmentScore, len(c.nodes))
	for _, i := range shown {
		scores[i] = c.scores(i, p.Species)
	}
	ahead := c.ahead(o.Now)
	segment := 0
	limb := map[string]int{}
	for t, target := range targets {
		switch target.Kind {
		case SegmentTarget:
			s := SegmentCourse{Segment: target.Name, Side: target.Side.String(), Points: make([]Point, 0, len(shown)), Forecast: make([]Ahead, 0, len(ahead))}
			for _, i := range shown {
				pt := c.point(i, t)
				if sc := scores[i]; segment < len(sc) {
					pt.Findings = sc[segment].Findings
					if sc[segment].Known {
						pt.Score = finite(sc[segment].Score)
					}
				}
				s.Points = append(s.Points, pt)
			}
			for _, a := range ahead {
				s.Forecast = append(s.Forecast, a.of(a.reading.targets[t]))
			}
			r.Segments = append(r.Segments, s)
			segment++
		case LimbTarget:
			limb[target.Name] = t
			l := LimbCourse{Limb: target.Name, Points: make([]Point, 0, len(shown)), Forecast: make([]Ahead, 0, len(ahead))}
			for _, i := range shown {
				l.Points = append(l.Points, c.point(i, t))
			}
			for _, a := range ahead {
				l.Forecast = append(l.Forecast, a.of(a.reading.targets[t]))
			}
			r.Limbs = append(r.Limbs, l)
		case RegionTarget:
			k := len(r.Regions)
			reg := RegionCourse{Region: target.Name, Points: make([]RegionPoint, 0, len(shown))}
			for _, i := range shown {
				reg.Points = append(reg.Points, RegionPoint{c.nodes[i].visit.Examined, round(c.smoothed(i).region[k], 6), round(c.filtered(i).region[k], 6)})
			}
			r.Regions = append(r.Regions, reg)
		}
	}
	for _, i := range shown {
		r.Whole.Points = append(r.Whole.Points, c.pointOf(i, c.smoothed(i).whole, c.filtered(i).whole))
	}
	for _, a := range ahead {
		r.Whole.Forecast = append(r.Whole.Forecast, a.of(a.reading.whole))
	}

	last := shown[len(shown)-1]
	from := shown[0]
	if !o.Since.IsZero() {
		for _, i := range shown {
			if !c.nodes[i].visit.Examined.Before(o.Since) || exam.DayOf(c.nodes[i].visit.Examined) == exam.DayOf(o.Since) {
				from = i
				break
			}
		}
	}
	if from < last {
		both := c.joint(from, last)
		change := func(what string, target int) *ChangeResult {
			ch := c.changeOf(both, target)
			ch.From, ch.To = c.nodes[from].visit.Examined, c.nodes[last].visit.Examined
			return changeResult(what, ch)
		}
		r.Change = change("whole animal", -1)
		r.Whole.Change = r.Change
		for i := range r.Limbs {
			r.Limbs[i].Change = change(r.Limbs[i].Limb, limb[r.Limbs[i].Limb])
		}
		r.Relapse = c.relapse(shown)
	}
	r.Plateau = c.plateau(shown)
	r.Goals = goalsOf(p, c, r.Plain, c.nodes[len(c.nodes)-1].visit.Examined)
	if len(shown) < 3 {
		r.Notes = append(r.Notes, "fewer than three visits: forecasts rest mostly on what is usual")
	}
	return r
}

// round keeps the digits that mean something, so that files stay short and stable.
func round(v float64, digits int) float64 {
	f := [...]float64{1, 10, 100, 1e3, 1e4, 1e5, 1e6}[digits]
	return math.Round(v*f) / f
}

func (c *Course) pointOf(i int, now, then Band) Point {
	return Point{Examined: c.nodes[i].visit.Examined, Function: round(now.Function, 3), Low: round(now.Low, 3), High: round(now.High, 3),
		Filtered: round(then.Function, 3), FilteredLow: then.Low, FilteredHigh: then.High}
}

func (c *Course) point(i, target int) Point {
	return c.pointOf(i, c.smoothed(i).targets[target], c.filtered(i).targets[target])
}

// scores keeps the plain segment score of a visit.
func (c *Course) scores(i int, s exam.Species) []anatomy.SegmentScore {
	n := c.nodes[i]
	if n.scores == nil {
		n.scores = anatomy.Score(s, n.visit)
	}
	return n.scores
}

// outlook is a reading of a time to come.
type outlook struct {
	on      time.Time
	reading *reading
}

func (o outlook) of(b Band) Ahead {
	return Ahead{o.on, round(b.Function, 3), round(b.Low, 3), round(b.High, 3)}
}

// ahead looks ahead week by week, from the last visit or from now where that is later.
func (c *Course) ahead(now time.Time) []outlook {
	last := c.nodes[len(c.nodes)-1].visit.Examined
	if now.After(last) && now.Sub(last) < 365*24*time.Hour {
		last = now
	}
	var out []outlook
	for w := 1; w <= ForecastWeeks; w++ {
		on := last.AddDate(0, 0, 7*w)
		out = append(out, outlook{on, c.model.reader.read(c.beliefAt(on))})
	}
	return out
}

func changeResult(what string, c Change) *ChangeResult {
	r := &ChangeResult{Since: c.From, Better: round(c.Better, 4), Same: round(c.Same, 4), Worse: round(c.Worse, 4), Margin: Margin, Verdict: verdictOf(what, c)}
	day := c.From.Format("2 January 2006")
	v := r.Verdict
	switch {
	case !v.Sure && v.Probability < 0.6:
		r.Words = fmt.Sprintf("%s: cannot tell yet whether it has changed since %s", what, day)
	case v.Direction == exam.Same:
		r.Words = fmt.Sprintf("%s: about the same as on %s, %s", what, day, percent(v.Probability))
	default:
		r.Words = fmt.Sprintf("%s: %s since %s, %s", what, v.Word, day, percent(v.Probability))
	}
	return r
}

// percent prints a probability without claiming certainty.
func percent(p float64) string {
	switch {
	case p > 0.99:
		return "more than 99 %"
	case p < 0.01:
		return "less than 1 %"
	}
	return fmt.Sprintf("%.0f %%", 100*p)
}

func (c *Course) plateau(shown []int) *Plateau {
	last := shown[len(shown)-1]
	p := &Plateau{Probability: round(c.filtered(last).slow, 4), Rate: PlateauRate}
	p.Named = len(shown) >= 3 && c.filtered(last).slow >= PlateauNamed
	if !p.Named {
		p.Words = "no plateau can be named"
		return p
	}
	since := last
	for k := len(shown) - 1; k >= 0 && c.smoothed(shown[k]).slow >= 0.5; k-- {
		since = shown[k]
	}
	at := c.nodes[since].visit.Examined
	p.Since = &at
	p.Words = fmt.Sprintf("changes by less than %g points a week since about %s, %s", PlateauRate, at.Format("2 January 2006"), percent(p.Probability))
	return p
}

// relapse compares the last visit with the best one before it.
func (c *Course) relapse(shown []int) *Relapse {
	last := shown[len(shown)-1]
	best := shown[0]
	for _, i := range shown[:len(shown)-1] {
		if c.smoothed(i).whole.Function > c.smoothed(best).whole.Function {
			best = i
		}
	}
	ch := c.Change(best, last)
	r := &Relapse{Probability: round(ch.Worse, 4), Since: ch.From}
	day := ch.From.Format("2 January 2006")
	if ch.Worse > 0.9 {
		r.Words = fmt.Sprintf("worse than at its best on %s, %s", day, percent(ch.Worse))
	} else if ch.Worse > 0.5 {
		r.Words = fmt.Sprintf("may be worse than at its best on %s, %s", day, percent(ch.Worse))
	} else {
		r.Words = "no relapse seen"
	}
	return r
}

// scalesOf gathers the published scales of the visits; all returns those of one visit.
func scalesOf(visits []exam.Visit, own repeat.Practice, all func(i int) []scale.Value) []ScaleCourse {
	type key struct {
		scale   scale.Scale
		site    exam.Site
		variant string
	}
	out := []ScaleCourse{}
	index := map[key]int{}
	for n, v := range visits {
		if !v.RepeatOf.IsZero() {
			continue
		}
		for _, x := range all(n) {
			k := key{x.Scale, x.Site, x.Variant}
			i, ok := index[k]
			if !ok {
				i = len(out)
				index[k] = i
				in := x.Scale.Info()
				s := ScaleCourse{Scale: in.Key, Name: in.Name, Site: x.Site.String(), Variant: x.Variant, Best: x.Best, Source: in.Source}
				if n, ok := own.Noise(repeat.Quantity{Scale: noiseName(x.Scale)}, false); ok {
					s.MDC95 = finite(n.MDC95)
				}
				out = append(out, s)
			}
			pt := ScalePoint{Examined: v.Examined, Missing: orEmpty(x.Missing), Problem: x.Problem}
			if level, ok := x.Known(); ok {
				pt.Value = finite(level)
			}
			if len(x.Levels) > 0 {
				pt.Low, pt.High = finite(x.Low), finite(x.High)
			}
			out[i].Points = append(out[i].Points, pt)
		}
	}
	slices.SortStableFunc(out, func(a, b ScaleCourse) int {
		sa, _ := scale.Parse(a.Scale)
		sb, _ := scale.Parse(b.Scale)
		return int(sa) - int(sb)
	})
	return out
}

// Scores returns a visit's certain scores by the names under which package repeat knows them: what
// repeat.Learn asks for.
func Scores(v exam.Visit) map[string]float64 {
	out := map[string]float64{}
	for _, x := range scale.All(v) {
		if level, ok := x.Known(); ok && x.Site == exam.NoSite {
			out[x.Scale.String()] = level
		}
	}
	return out
}

// noiseName is the name under which package repeat knows a scale.
func noiseName(s scale.Scale) string {
	switch s {
	case scale.Frankel, scale.FrankelAllLimbs, scale.FrankelB, scale.FrankelC, scale.FrankelD, scale.FrankelEntered:
		return repeat.Frankel
	case scale.OpenField, scale.OpenFieldEntered:
		return repeat.OpenField
	case scale.TexasPelvic:
		return repeat.Texas
	case scale.Functional:
		return repeat.FINFUN
	case scale.Ashworth, scale.AshworthEntered:
		return repeat.Ashworth
	}
	return s.String()
}
