package view

import (
	"cmp"
	"slices"
	"time"

	"cordwalk.example/cordwalk/app/chart"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
)

// SegmentValue is the function of one segment's two halves at one visit.
type SegmentValue struct {
	Segment     string
	Major       bool // begins a region
	Left, Right chart.Value
	LeftKeys    []exam.Key // the findings behind it
	RightKeys   []exam.Key
}

// Scores gives the value of every segment at a visit, cranial to caudal. It is given by
// whoever owns the rule: the plain segment score, or the serial model.
type Scores func(visit int) []SegmentValue

// CourseEvent is something that happened, with the day it did.
type CourseEvent struct {
	At   time.Time
	Kind string // "onset", "surgery", "resolved", "medicine", "medicine-stop", "status"
	Word string
}

// Course is the screen of recovery over time.
type Course struct {
	Patient exam.Patient
	Visits  []exam.Visit // oldest first
	Events  []CourseEvent
	Span    chart.Span
	Strip   chart.Strip
	Limbs   chart.Limbs
	Measure chart.Measures
	// Function is the limbs' and the whole animal's function by the serial model, with bands and
	// forecast; empty where the course is the plain one.
	Function chart.Limbs
	// MeasureKeys names the measures of Measure.Series, in order.
	MeasureKeys []string
	segments    [][]SegmentValue // by visit
}

// NewCourse lays out the course of a patient. model says that the scores are a model's,
// whose values are shown with their bands only.
func NewCourse(p exam.Patient, visits []exam.Visit, scores Scores, model bool) *Course {
	c := &Course{Patient: p, Visits: sortedVisits(visits)}
	cols := make([]chart.Visit, len(c.Visits))
	for i, v := range c.Visits {
		cols[i] = chart.Visit{At: v.Examined}
		if i > 0 {
			if same, differ := exam.LikeForLike(c.Visits[i-1], v); !same {
				cols[i].Unlike = true
				list := make([]string, len(differ))
				for k, d := range differ {
					list[k] = words.Of(d)
				}
				cols[i].Note = words.T("not like for like: %s", joinWords(list))
			}
		}
	}
	c.Events = eventsOf(p, c.Visits)
	events := make([]chart.Event, len(c.Events))
	more := make([]time.Time, 0, len(c.Events))
	for i, e := range c.Events {
		events[i] = chart.Event{At: e.At, Word: e.Word}
		more = append(more, e.At)
	}
	goals := goalsOf(p)
	for _, g := range goals {
		more = append(more, g.goal.By)
	}
	c.Span = chart.SpanOf(cols, more...)

	c.Strip = chart.Strip{Visits: cols, Events: events, Span: c.Span, Model: model, Legend: true}
	if scores != nil {
		for i := range c.Visits {
			row := scores(i)
			c.segments = append(c.segments, row)
			for k, s := range row {
				if i == 0 {
					c.Strip.Rows = append(c.Strip.Rows, chart.StripRow{Label: s.Segment, Major: s.Major})
				}
				if k < len(c.Strip.Rows) {
					c.Strip.Rows[k].Left = append(c.Strip.Rows[k].Left, s.Left)
					c.Strip.Rows[k].Right = append(c.Strip.Rows[k].Right, s.Right)
				}
			}
		}
	}

	c.Limbs = chart.Limbs{Visits: cols, Events: events, Span: c.Span}
	for _, l := range exam.Limbs() {
		grades := make([]int8, len(c.Visits))
		untested := make([]bool, len(c.Visits))
		for i, v := range c.Visits {
			grades[i] = -1
			if g, ok := v.Grade(exam.VoluntaryMotor, l); ok {
				grades[i] = g
			} else if _, asked := v.Find(exam.Key{Item: exam.VoluntaryMotor, Site: l}); asked {
				untested[i] = true
			}
		}
		s := chart.GradeSeries(capital(SiteName(l)), exam.VoluntaryMotor.Last(), grades)
		s.Untested = untested
		for _, g := range goals {
			if g.item == exam.VoluntaryMotor && g.site == l {
				s.Goals = append(s.Goals, g.goal)
			}
		}
		c.Limbs.Limbs = append(c.Limbs.Limbs, s)
	}
	c.measures(cols, events, goals)
	return c
}

// sortedVisits returns the visits oldest first.
func sortedVisits(visits []exam.Visit) []exam.Visit {
	out := slices.Clone(visits)
	slices.SortStableFunc(out, func(a, b exam.Visit) int { return a.Examined.Compare(b.Examined) })
	return out
}

type goalAt struct {
	item    exam.Item
	measure exam.Measure
	site    exam.Site
	goal    chart.Goal
}

func goalsOf(p exam.Patient) []goalAt {
	var out []goalAt
	for _, g := range p.Goals {
		at := goalAt{goal: chart.Goal{Value: g.Target, Word: g.Words}}
		if t, ok := g.By.Time(); ok {
			at.goal.By = t
		}
		at.item, _ = exam.ParseItem(g.Item)
		at.measure, _ = exam.ParseMeasure(g.Measure)
		at.site, _ = exam.ParseSite(g.Site)
		out = append(out, at)
	}
	return out
}

// measures adds a line for every measured value that was taken at two visits or has a goal.
func (c *Course) measures(cols []chart.Visit, events []chart.Event, goals []goalAt) {
	c.Measure = chart.Measures{Visits: cols, Events: events, Span: c.Span}
	type line struct {
		first exam.Measured
		n     int
	}
	lines := map[string]*line{}
	var keys []string
	for _, v := range c.Visits {
		for _, m := range v.Measures {
			k := m.Key()
			if lines[k] == nil {
				lines[k] = &line{first: m}
				keys = append(keys, k)
			}
			lines[k].n++
		}
	}
	slices.SortStableFunc(keys, func(a, b string) int {
		x, y := lines[a].first, lines[b].first
		return cmp.Or(cmp.Compare(x.Measure, y.Measure), cmp.Compare(x.Site, y.Site), cmp.Compare(a, b))
	})
	for _, k := range keys {
		l := lines[k]
		var lineGoals []chart.Goal
		for _, g := range goals {
			if g.measure == l.first.Measure && g.measure != exam.NoMeasure && (g.site == l.first.Site || g.site == exam.NoSite) {
				lineGoals = append(lineGoals, g.goal)
			}
		}
		if l.n < 2 && lineGoals == nil {
			continue
		}
		s := chart.Series{Label: MeasureName(l.first.Measure), Unit: l.first.Measure.Info().Unit, Goals: lineGoals}
		if s.Unit == "1" {
			s.Unit = ""
		}
		if l.first.Site != exam.NoSite && l.first.Site != exam.Midline {
			s.Label += ", " + SiteName(l.first.Site)
		}
		for _, v := range c.Visits {
			val := chart.Value{}
			for _, m := range v.Measures {
				if m.Key() == k {
					val = chart.Value{Known: true, Value: m.Value, Count: 1, Mark: number(m.Value)}
				}
			}
			s.Values = append(s.Values, val)
		}
		c.Measure.Series = append(c.Measure.Series, s)
		c.MeasureKeys = append(c.MeasureKeys, k)
	}
}

// In shows the measures in the units that a practice reads.
func (c *Course) In(u exam.Units) *Course {
	for i := range c.Measure.Series {
		s := &c.Measure.Series[i]
		m, ok := c.measureOf(c.MeasureKeys[i])
		if !ok || u.Unit(m) == m.Info().Unit {
			continue
		}
		s.Unit = u.Unit(m)
		for k := range s.Values {
			if v := &s.Values[k]; v.Known {
				v.Value = u.Shown(m, v.Value)
				v.Mark = number(v.Value)
			}
		}
		for k := range s.Goals {
			s.Goals[k].Value = u.Shown(m, s.Goals[k].Value)
		}
	}
	return c
}

// measureOf returns the measure that a key of a series belongs to.
func (c *Course) measureOf(key string) (exam.Measure, bool) {
	for _, v := range c.Visits {
		for _, m := range v.Measures {
			if m.Key() == key {
				return m.Measure, true
			}
		}
	}
	return exam.NoMeasure, false
}

// eventsOf lists what happened to the animal, oldest first. A date of a month or a year
// stands in its middle.
func eventsOf(p exam.Patient, visits []exam.Visit) []CourseEvent {
	var out []CourseEvent
	zone := time.UTC
	if len(visits) > 0 {
		zone = visits[len(visits)-1].Examined.Location()
	}
	add := func(d exam.Date, kind, word string) {
		t, ok := d.Time()
		if !ok {
			return
		}
		out = append(out, CourseEvent{At: time.Date(t.Year(), t.Month(), t.Day(), 12, 0, 0, 0, zone), Kind: kind, Word: word})
	}
	for _, pr := range p.Problems {
		add(pr.Onset, "onset", words.T("onset"))
		add(pr.Surgery, "surgery", words.T("surgery"))
		add(pr.Resolved, "resolved", words.T("resolved"))
	}
	for _, m := range p.Medicines {
		add(m.Start, "medicine", m.Name)
		add(m.Stop, "medicine-stop", words.T("%s stopped", m.Name))
	}
	if p.Status != exam.Active {
		add(p.StatusSince, "status", words.Of(p.Status.String()))
	}
	slices.SortStableFunc(out, func(a, b CourseEvent) int { return a.At.Compare(b.At) })
	return out
}

// Hover is what stands behind a point.
type Hover struct {
	Title string
	Lines []string
}

// HoverSegment explains a point of the strip: the segment, its value and the findings behind it.
func (c *Course) HoverSegment(row, visit int, side exam.Site) Hover {
	if visit < 0 || visit >= len(c.segments) || row < 0 || row >= len(c.segments[visit]) {
		return Hover{}
	}
	s := c.segments[visit][row]
	v, keys := s.Left, s.LeftKeys
	if side == exam.Right {
		v, keys = s.Right, s.RightKeys
	}
	h := Hover{Title: words.T("%s %s, %s", s.Segment, SiteName(side), Day(c.Visits[visit].Examined))}
	switch {
	case !v.Known:
		h.Lines = append(h.Lines, words.T("too little tested to say"))
	case v.Banded:
		h.Lines = append(h.Lines, words.T("function %s %% (%s to %s)", number(v.Value), number(v.Low), number(v.High)))
	default:
		h.Lines = append(h.Lines, words.N(v.Count, "score %s %% from %d finding", "score %s %% from %d findings", number(v.Value), v.Count))
	}
	for _, k := range keys {
		if f, ok := c.Visits[visit].Find(k); ok {
			h.Lines = append(h.Lines, CellName(k)+": "+GradeWords(f))
		}
	}
	if n := c.Strip.Visits[visit].Note; n != "" {
		h.Lines = append(h.Lines, n)
	}
	return h
}

// HoverLimb explains a point of a limb's line: every finding on the limb at that visit.
func (c *Course) HoverLimb(limb, visit int) Hover {
	if visit < 0 || visit >= len(c.Visits) || limb < 0 || limb > 3 {
		return Hover{}
	}
	site := exam.Limbs()[limb]
	h := Hover{Title: words.T("%s, %s", capital(SiteName(site)), Day(c.Visits[visit].Examined))}
	for _, f := range c.Visits[visit].Findings {
		if f.Site == site {
			h.Lines = append(h.Lines, ItemName(f.Item)+": "+GradeWords(f))
		}
	}
	if len(h.Lines) == 0 {
		h.Lines = append(h.Lines, words.T("nothing tested"))
	}
	return h
}

// HoverEvent explains an event's line.
func (c *Course) HoverEvent(i int) Hover {
	if i < 0 || i >= len(c.Events) {
		return Hover{}
	}
	return Hover{Title: c.Events[i].Word, Lines: []string{Day(c.Events[i].At)}}
}

// PlainScores is the segment score of each visit, from the findings alone: it stands beside
// the model's value as the figure that anybody can check.
func PlainScores(species exam.Species, visits []exam.Visit) Scores {
	return func(i int) []SegmentValue {
		list := anatomy.Score(species, visits[i])
		out := make([]SegmentValue, 0, len(list)/2)
		region := exam.Region(0)
		for k := 0; k+1 < len(list); k += 2 {
			l, r := list[k], list[k+1]
			out = append(out, SegmentValue{Segment: l.Segment.String(), Major: l.Segment.Region() != region,
				Left: plainValue(l), Right: plainValue(r),
				LeftKeys: keysBehind(species, visits[i], l.Segment, exam.Left), RightKeys: keysBehind(species, visits[i], r.Segment, exam.Right)})
			region = l.Segment.Region()
		}
		return out
	}
}

func plainValue(s anatomy.SegmentScore) chart.Value {
	return chart.Value{Known: s.Known, Value: s.Score, Count: s.Findings}
}

// keysBehind lists the tested findings whose arc includes a segment on a side.
func keysBehind(species exam.Species, v exam.Visit, seg anatomy.Segment, side exam.Site) []exam.Key {
	var out []exam.Key
	for _, f := range v.Findings {
		if own := f.Site.Side(); !f.Result.Tested() || own != side && own != exam.Midline {
			continue
		}
		for _, w := range anatomy.ArcOfFinding(species, f) {
			if w.Segment == seg && w.Weight > 0 {
				out = append(out, f.Key())
				break
			}
		}
	}
	return out
}

// OfSeries makes an animal and its visits out of exam files, which are in order of time.
// What is known of the animal is taken from the last file that says it.
func OfSeries(files []exam.File) (exam.Patient, []exam.Visit) {
	var p exam.Patient
	visits := make([]exam.Visit, len(files))
	for i, f := range files {
		a := f.Animal()
		if i == 0 {
			p = a
		}
		if a.Born != "" {
			p.Born = a.Born
		}
		if a.Breed != "" {
			p.Breed = a.Breed
		}
		if len(a.Problems) > 0 {
			p.Problems = a.Problems
		}
		if i > 0 {
			p.Weights = append(p.Weights, a.Weights...)
		}
		p.Precautions = a.Precautions
		visits[i] = f.Visit(exam.ID{})
		if visits[i].ID.IsZero() {
			visits[i].ID[15], visits[i].ID[14] = byte(i+1), byte((i+1)>>8)
		}
	}
	return p, visits
}
