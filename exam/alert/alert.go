// Package alert holds the red flags: rules that say «contact the veterinarian», over the visits
// of one patient.
//
// A flag never waits for statistics: one exam is enough. What was abnormal and is not tested today
// is not silence but «cannot rule out». Each flag says what was seen, between which dates, who
// examined, why it matters, what to do and how soon, with its source. A flag can be
// answered (who was told, by whom, when) and is kept; nothing here removes one.
package alert

import (
	"cmp"
	"fmt"
	"iter"
	"slices"
	"strings"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/scale"
)

// Urgency says how soon the veterinarian must hear of it.
type Urgency uint8

// The urgencies. Levels are common practice unless a rule names a source.
const (
	Soon  Urgency = iota // next working day
	Today                // the same day
	Now                  // before the animal leaves the room
)

// String returns the word that files and the command line use.
func (u Urgency) String() string { return [...]string{"soon", "today", "now"}[u%3] }

// Flag is one red flag raised by one visit.
type Flag struct {
	Rule          string // key of the rule; an answer names it
	Number        int    // number of the flag in the published list; 22 and on are this program's own
	Urgency       Urgency
	Visit         exam.ID // the visit that raised it
	Seen          string  // what was seen: «deep-pain at pelvic-left: absent (before: normal)»
	From          time.Time
	To            time.Time // between which visits; From is zero where nothing earlier is compared
	FromExaminer  string
	ToExaminer    string
	Why           string
	Do            string
	Source        string
	CannotRuleOut bool                  // abnormal before, not tested now
	Answered      *exam.Acknowledgement // nil while nobody has answered it
}

// Open reports whether the flag still waits for an answer.
func (f Flag) Open() bool { return f.Answered == nil }

// Words says the flag in one short paragraph.
func (f Flag) Words() string {
	var b strings.Builder
	if f.CannotRuleOut {
		b.WriteString("Cannot rule out: ")
	}
	b.WriteString(f.Seen)
	switch {
	case f.From.IsZero() || f.From.Equal(f.To):
		fmt.Fprintf(&b, ", seen %s", exam.DayOf(f.To))
	default:
		fmt.Fprintf(&b, ", between %s and %s", exam.DayOf(f.From), exam.DayOf(f.To))
	}
	if f.ToExaminer != "" {
		fmt.Fprintf(&b, " (%s)", f.ToExaminer)
	}
	fmt.Fprintf(&b, ". %s %s", f.Why, f.Do)
	return b.String()
}

// Rule describes one rule.
type Rule struct {
	Key     string
	Number  int
	Name    string
	Items   []exam.Item    // items that can raise it
	Measure []exam.Measure // measures that can raise it
	Why     string
	Source  string
	find    func(c *scene) []hit
	// open decides whether a cell of Items that was abnormal when last tested and is not tested today
	// leaves the rule open; nil where the rule has no «cannot rule out».
	open func(c *scene, k exam.Key) bool
}

// hit is one thing that a rule saw.
type hit struct {
	seen    string
	from    int // index into scene.earlier, -1 for none
	urgency Urgency
}

// scene is what the rules look at: today's visit against the earlier ones.
type scene struct {
	p       exam.Patient
	today   exam.Visit
	earlier []exam.Visit // oldest first, blind repeats left out
	tracks  *tracks      // of earlier and of later visits
	skip    int          // index of the visit that today's repeats, -1 for none
	series  *series
	brief   bool // that a flag is raised is wanted, not what to say of it
}

// tracks holds, for each cell of item and site, the visits in which it was tested, oldest first.
type tracks struct {
	points []point
	ends   [slots]int32 // of the cell's points
}

// slot is a cell's place in tracks; sites are fewer than 32.
func slot(i exam.Item, s exam.Site) int { return int(i)<<5 | int(s)&31 }

const slots = exam.ItemCount << 5

type point struct {
	visit int32 // index into the series without blind repeats
	grade int8
}

// of returns a cell's points.
func (t *tracks) of(at int) []point {
	from := int32(0)
	if at > 0 {
		from = t.ends[at-1]
	}
	return t.points[from:t.ends[at]]
}

// trackOf indexes a series once, so that each rule finds the last known grade without a search
// through every visit. Of several digits or joints of one cell the grade furthest from normal counts.
func trackOf(vs []exam.Visit) *tracks {
	t := &tracks{}
	var last [slots]int32 // the visit that tested a cell last, counted from 1
	each := func(do func(at int, k int32, f *exam.Finding, g int8)) {
		clear(last[:])
		for k := range vs {
			for n := range vs[k].Findings {
				f := &vs[k].Findings[n]
				if g, ok := f.Result.Grade(); ok && int(f.Item) < exam.ItemCount {
					at := slot(f.Item, f.Site)
					do(at, int32(k), f, g)
					last[at] = int32(k) + 1
				}
			}
		}
	}
	each(func(at int, k int32, _ *exam.Finding, _ int8) {
		if last[at] != k+1 {
			t.ends[at]++
		}
	})
	sum := int32(0)
	for at, n := range t.ends { // from here on where the next point of the cell goes
		t.ends[at] = sum
		sum += n
	}
	t.points = make([]point, sum)
	each(func(at int, k int32, f *exam.Finding, g int8) {
		if last[at] == k+1 {
			t.points[t.ends[at]-1].grade, _ = vs[k].Grade(f.Item, f.Site)
			return
		}
		t.points[t.ends[at]] = point{k, g}
		t.ends[at]++
	})
	return t
}

// last returns the last known grade of an item at a site before today, and in which visit.
func (c *scene) last(i exam.Item, s exam.Site) (grade int8, visit int, ok bool) {
	ps := c.tracks.of(slot(i, s))
	at, _ := slices.BinarySearchFunc(ps, int32(len(c.earlier)), func(p point, n int32) int { return cmp.Compare(p.visit, n) })
	for at--; at >= 0; at-- {
		if k := int(ps[at].visit); k != c.skip {
			return ps[at].grade, k, true
		}
	}
	return 0, -1, false
}

// before walks back through the earlier visits, the latest first, past the one that today's repeats.
func (c *scene) before() iter.Seq[int] {
	return func(yield func(int) bool) {
		for k := len(c.earlier) - 1; k >= 0; k-- {
			if k != c.skip && !yield(k) {
				return
			}
		}
	}
}

// latest returns the index of the visit before today's, -1 where there is none.
func (c *scene) latest() int {
	for k := range c.before() {
		return k
	}
	return -1
}

// grade returns today's grade.
func (c *scene) grade(i exam.Item, s exam.Site) (int8, bool) {
	if !c.today.RepeatOf.IsZero() { // not in the tracks
		return c.today.Grade(i, s)
	}
	ps := c.tracks.of(slot(i, s))
	at, ok := slices.BinarySearchFunc(ps, int32(len(c.earlier)), func(p point, n int32) int { return cmp.Compare(p.visit, n) })
	if !ok {
		return 0, false
	}
	return ps[at].grade, true
}

// span returns the levels that today's score may have.
func (c *scene) span(sc scale.Scale) (x span) {
	if c.today.RepeatOf.IsZero() {
		return c.series.span(sc, len(c.earlier))
	}
	x.low, x.high, x.ok = scale.Range(sc, c.today, exam.NoSite)
	return x
}

// known returns today's grade or, where the item was not tested today, the last known one.
func (c *scene) known(i exam.Item, s exam.Site) (int8, bool) {
	if g, ok := c.grade(i, s); ok {
		return g, true
	}
	g, _, ok := c.last(i, s)
	return g, ok
}

// abnormal reports whether a grade is not the item's normal one.
func abnormal(i exam.Item, s exam.Site, g int8) bool {
	return exam.Finding{Item: i, Site: s, Result: exam.Graded(g)}.Abnormal()
}

// isNew reports whether an abnormal finding of today was not there before: there is an earlier visit, and
// the last known grade was normal or nobody tested it.
func (c *scene) isNew(i exam.Item, s exam.Site) (visit int, yes bool) {
	latest := c.latest()
	if latest < 0 {
		return -1, false
	}
	g, k, ok := c.last(i, s)
	if !ok {
		return latest, true
	}
	return k, !abnormal(i, s, g)
}

// say names a finding of today with what it was before.
func (c *scene) say(i exam.Item, s exam.Site) string {
	if c.brief {
		return ""
	}
	name := i.String()
	if s != exam.Midline {
		name += " at " + s.String()
	}
	g, _ := c.grade(i, s)
	out := name + ": " + i.GradeWord(g)
	if b, _, ok := c.last(i, s); ok {
		out += " (before: " + i.GradeWord(b) + ")"
	} else if c.latest() >= 0 {
		out += " (before: not tested)"
	}
	return out
}

// plegic reports whether a limb has no movement today, or, where today's is not graded, had none last.
func (c *scene) plegic(limbs ...exam.Site) bool {
	for _, l := range limbs {
		if g, ok := c.known(exam.VoluntaryMotor, l); ok && g == 0 {
			return true
		}
	}
	return false
}

// problem returns the problem on file at today's visit.
func (c *scene) problem() (exam.Problem, bool) { return c.p.ProblemAt(c.today.Examined) }

// daysSince returns the days from the later of onset and surgery to today's visit.
func (c *scene) daysSince() (float64, bool) {
	pr, ok := c.problem()
	if !ok {
		return 0, false
	}
	best, found := 0.0, false
	for _, d := range []exam.Date{pr.Onset, pr.Surgery} {
		if n, ok := d.DaysBefore(c.today.Examined); ok && n > -1 && (!found || n < best) {
			best, found = n, true
		}
	}
	return best, found
}

// level reports whether the problem on file lies within a stretch of the column.
func (c *scene) level(in func(v exam.Vertebra) bool) bool {
	pr, ok := c.problem()
	if !ok {
		return false
	}
	from, _, err := exam.ParseLevelRange(pr.Level, c.p.Species)
	return err == nil && in(from)
}

// Scan returns the open and answered flags of the latest visit, and those flags of earlier visits of
// the last two weeks that nobody has answered in a visit that is not closed; most urgent first. now
// bounds those two weeks. Visits may come in any order; a blind repeat of an exam is not compared
// with the exam it repeats.
func Scan(p exam.Patient, visits []exam.Visit, now time.Time) []Flag {
	return newSeries(p, visits).latest(now)
}

// Raised is Scan for lists of many animals: the same flags, without what was seen, since when and what to do.
func Raised(p exam.Patient, visits []exam.Visit, now time.Time) []Flag {
	r := newSeries(p, visits)
	r.brief = true
	return r.latest(now)
}

func (r *series) latest(now time.Time) []Flag {
	if len(r.all) == 0 {
		return nil
	}
	out := r.scan(len(r.all) - 1)
	for k := len(r.all) - 2; k >= 0; k-- {
		if now.Sub(r.all[k].Examined) > 14*24*time.Hour {
			break
		}
		if r.all[k].State == exam.Closed {
			continue
		}
		for _, f := range r.scan(k) {
			same := slices.ContainsFunc(out, func(x Flag) bool { return x.Rule == f.Rule && !x.CannotRuleOut })
			if f.Open() && f.Urgency >= Today && !same {
				out = append(out, f)
			}
		}
	}
	sortFlags(out)
	return out
}

// History returns the flags of every visit, the oldest visit first.
func History(p exam.Patient, visits []exam.Visit) []Flag {
	r := newSeries(p, visits)
	var out []Flag
	for k := range r.all {
		fs := r.scan(k)
		sortFlags(fs)
		out = append(out, fs...)
	}
	return out
}

// Worst returns the most urgent open flag's urgency, and false where no flag is open.
func Worst(flags []Flag) (Urgency, bool) {
	worst, any := Soon, false
	for _, f := range flags {
		if f.Open() {
			worst, any = max(worst, f.Urgency), true
		}
	}
	return worst, any
}

// MayClose reports whether a visit may be closed: no «now» flag that it raised is unanswered. The
// flags that stand in the way are returned.
func MayClose(flags []Flag, visit exam.ID) (bool, []Flag) {
	var open []Flag
	for _, f := range flags {
		if f.Visit == visit && f.Open() && f.Urgency == Now {
			open = append(open, f)
		}
	}
	return len(open) == 0, open
}

// series is the visits of a patient, oldest first, with their index.
type series struct {
	p      exam.Patient
	all    []exam.Visit
	plain  []exam.Visit // without blind repeats: what later visits are compared with
	upTo   []int        // upTo[k] is how many of plain lie before all[k]
	tracks *tracks
	brief  bool // see scene
	ranges map[ranged]span
}

// ranged names a score of a visit; span is the levels it may have.
type ranged struct {
	scale scale.Scale
	visit int // index into series.plain
}

type span struct {
	low, high float64
	ok        bool
}

// span returns a score of a visit of the series, worked out once.
func (r *series) span(sc scale.Scale, k int) span {
	x, ok := r.ranges[ranged{sc, k}]
	if !ok {
		x.low, x.high, x.ok = scale.Range(sc, r.plain[k], exam.NoSite)
		r.ranges[ranged{sc, k}] = x
	}
	return x
}

func newSeries(p exam.Patient, visits []exam.Visit) *series {
	r := &series{p: p, all: slices.Clone(visits), ranges: map[ranged]span{}}
	slices.SortStableFunc(r.all, func(a, b exam.Visit) int { return a.Examined.Compare(b.Examined) })
	for _, v := range r.all {
		r.upTo = append(r.upTo, len(r.plain))
		if v.RepeatOf.IsZero() {
			r.plain = append(r.plain, v)
		}
	}
	r.tracks = trackOf(r.plain)
	return r
}

func sortFlags(fs []Flag) {
	slices.SortStableFunc(fs, func(a, b Flag) int {
		open := func(f Flag) int {
			if f.Open() {
				return 0
			}
			return 1
		}
		return cmp.Or(cmp.Compare(open(a), open(b)), cmp.Compare(b.Urgency, a.Urgency), b.To.Compare(a.To), cmp.Compare(a.Number, b.Number))
	})
}

// scan runs every rule on visit k against those before it.
func (r *series) scan(k int) []Flag {
	c := &scene{p: r.p, today: r.all[k], earlier: r.plain[:r.upTo[k]], tracks: r.tracks, skip: -1, series: r, brief: r.brief}
	if again := r.all[k].RepeatOf; !again.IsZero() {
		c.skip = slices.IndexFunc(c.earlier, func(v exam.Visit) bool { return v.ID == again })
	}
	var out []Flag
	for _, r := range rules {
		hits := r.find(c)
		cannot := false
		if len(hits) == 0 {
			hits, cannot = c.untested(r)
		}
		if len(hits) == 0 {
			continue
		}
		f := Flag{Rule: r.Key, Number: r.Number, Visit: c.today.ID, To: c.today.Examined, ToExaminer: c.today.Examiner,
			Why: r.Why, Source: r.Source, CannotRuleOut: cannot}
		var seen []string
		from := -1
		for _, h := range hits {
			if !c.brief {
				seen = append(seen, h.seen)
			}
			f.Urgency = max(f.Urgency, h.urgency)
			from = max(from, h.from)
		}
		if !c.brief {
			f.Seen = strings.Join(seen, "; ")
		}
		if from >= 0 {
			f.From, f.FromExaminer = c.earlier[from].Examined, c.earlier[from].Examiner
		}
		if !c.brief {
			f.Do = toDo(f)
		}
		for i := range c.today.Answers {
			if a := c.today.Answers[i]; a.Rule == r.Key {
				f.Answered = &a
			}
		}
		out = append(out, f)
	}
	return out
}

func toDo(f Flag) string {
	if f.CannotRuleOut {
		return "Test it today, or tell the veterinarian that it was not tested."
	}
	switch f.Urgency {
	case Now:
		return "Call the veterinarian before the animal leaves the room."
	case Today:
		return "Call the veterinarian today."
	}
	return "Tell the veterinarian on the next working day."
}

// untested finds the cells of a rule that were abnormal when last tested and were not tested today.
func (c *scene) untested(r Rule) ([]hit, bool) {
	if r.open == nil || c.latest() < 0 {
		return nil, false
	}
	var out []hit
	for _, i := range r.Items {
		for _, s := range i.Info().Sites {
			if _, ok := c.grade(i, s); ok {
				continue
			}
			g, k, ok := c.last(i, s)
			if !ok || !r.open(c, exam.Key{Item: i, Site: s}) {
				continue
			}
			f := exam.Finding{Item: i, Site: s, Result: exam.Graded(g)}
			for _, x := range c.earlier[k].Findings { // a level may make it normal
				if x.Item == i && x.Site == s {
					f.Level = x.Level
				}
			}
			if !f.Abnormal() {
				continue
			}
			if c.brief {
				return []hit{{"", k, Soon}}, true // one is enough
			}
			name := i.String()
			if s != exam.Midline {
				name += " at " + s.String()
			}
			out = append(out, hit{name + " was " + i.GradeWord(g) + " and is not tested today", k, Soon})
		}
	}
	return out, len(out) > 0
}

// Rules lists every rule with the items and measures that can raise it, in the order of their numbers.
func Rules() []Rule {
	return slices.Clone(rules)
}

// Decline makes the flag for a decline that the serial model sees: the probability that the
// animal as a whole is worse than at an earlier visit. It is raised from 90 % on, a choice; the flags of
// the findings themselves never wait for it.
func Decline(worse float64, since, last exam.Visit) (Flag, bool) {
	if !(worse >= 0.9) || worse > 1 {
		return Flag{}, false
	}
	f := Flag{Rule: "decline", Number: 23, Urgency: Today, Visit: last.ID, From: since.Examined, To: last.Examined,
		FromExaminer: since.Examiner, ToExaminer: last.Examiner,
		Seen:   fmt.Sprintf("the exams together say worse, with %.0f %%", 100*worse),
		Why:    "A decline that no single test shows is a decline all the same.",
		Source: "serial model of this program; threshold a choice"}
	f.Do = toDo(f)
	for i := range last.Answers {
		if a := last.Answers[i]; a.Rule == f.Rule {
			f.Answered = &a
		}
	}
	return f, true
}
