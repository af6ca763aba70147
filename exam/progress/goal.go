package progress

import (
	"math"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/stat"
)

// GoalChance is the probability that a goal is reached by its date.
type GoalChance struct {
	Goal        string   `json:"goal"`
	Words       string   `json:"words"`
	By          string   `json:"by"`
	Probability *float64 `json:"probability"` // by its date, or within the forecast; null where the model cannot tell
	Why         string   `json:"why,omitempty"`

	// ByWeek is the probability of having reached the goal 0, 1, … ForecastWeeks weeks after the
	// last visit; Weeks is the first of them with an even chance, null where there is none.
	ByWeek []float64 `json:"by_week,omitempty"`
	Weeks  *int      `json:"weeks"`

	// Reading is what a goal's measure is expected to read at its date, with the range that holds the
	// reading with 90 % probability; null for goals on items, and where nothing can be said.
	Reading *Reading `json:"reading,omitempty"`
}

// Reading is a measure's value at a time to come, in its unit.
type Reading struct {
	On    time.Time `json:"on"`
	Value float64   `json:"value"`
	Low   float64   `json:"low"`
	High  float64   `json:"high"`
}

// Grader is what a space can add: how grades follow from places and severities. Without it
// goals on items have no probability.
type Grader interface {
	// AtLeast returns, for each of the places and each level, the probability that the item at
	// the site is graded as well as the target or better.
	AtLeast(item exam.Item, at exam.Site, target int8, sites []int) []float64
}

// reachedAt is the chance of showing the target grade from which a severity counts as having
// reached a goal.
const reachedAt = 0.5

// goalsOf looks ahead to each goal that is not reached yet. c is nil for a species without a model: goals on
// measures are looked at all the same.
func goalsOf(p exam.Patient, c *Course, rows []Plain, last time.Time) []GoalChance {
	out := []GoalChance{}
	for _, g := range p.Goals {
		if g.Reached != "" {
			continue
		}
		gc := GoalChance{Goal: g.ID.String(), Words: g.Words, By: string(g.By)}
		switch {
		case g.Item == "":
			gc.ofMeasure(g, rows)
		case c == nil || len(c.nodes) == 0:
			gc.Why = "the model cannot tell this item"
		default:
			gc.ofItem(g, c, last)
		}
		out = append(out, gc)
	}
	return out
}

// ofItem asks the model. A goal on an item counts as reached once the severity has come down to where
// the target grade is more likely than not; a goal without a date, or with one beyond the
// forecast, is looked at over the forecast's twelve weeks.
func (gc *GoalChance) ofItem(g exam.Goal, c *Course, last time.Time) {
	item, err := exam.ParseItem(g.Item)
	site, err2 := exam.ParseSite(g.Site)
	grader, ok := c.model.space.(Grader)
	switch {
	case err != nil || err2 != nil:
		gc.Why = "the goal names no item and site of the exam"
		return
	case !ok:
		gc.Why = "the model cannot tell this item"
		return
	}
	target := int8(math.Round(g.Target))
	for w := range ForecastWeeks + 1 {
		p := round(c.reach(grader, item, site, target, last.AddDate(0, 0, 7*w)), 4)
		gc.ByWeek = append(gc.ByWeek, p)
		if p >= 0.5 && gc.Weeks == nil {
			gc.Weeks = &w
		}
	}
	gc.Probability = finite(gc.ByWeek[ForecastWeeks])
	if t, ok := g.By.Time(); ok && t.Before(last.AddDate(0, 0, 7*ForecastWeeks)) {
		gc.Probability = finite(round(c.reach(grader, item, site, target, t), 4))
	}
}

// Goals on measures rest on a straight line through the last values, and no more: recovery bends, so
// a line is followed no further ahead than the time that its values span, and never beyond the
// forecast. Fewer than four values, or less than two weeks, bear no line (judgement: with
// three a single reading decides).
const (
	lineValues = 8
	leastLine  = 4
	leastSpan  = 2 // weeks
)

// ofMeasure gives the probability that a reading at the goal's date is as good as the target: a
// straight line by least squares through the last values, Student's t about it, and readings
// that scatter by what is left over, or by the published or own repeatability where that is more. A goal without a date, or with
// one beyond what the line is followed to, is looked at as far as that goes, and no further.
func (gc *GoalChance) ofMeasure(g exam.Goal, rows []Plain) {
	var row *Plain
	for i := range rows {
		r := &rows[i]
		if r.Measure != g.Measure || g.Site != "" && r.Site != g.Site {
			continue
		}
		if row == nil || r.Values[len(r.Values)-1].Examined.After(row.Values[len(row.Values)-1].Examined) {
			row = r
		}
	}
	if row == nil {
		gc.Why = "this has not been measured yet"
		return
	}
	values := row.Values[max(0, len(row.Values)-lineValues):]
	last := values[len(values)-1].Examined
	x, y := make([]float64, len(values)), make([]float64, len(values))
	for i, v := range values {
		x[i], y[i] = -last.Sub(v.Examined).Hours()/24/7, v.Value
	}
	span := -x[0]
	line, ok := stat.FitLine(x, y)
	if !ok || len(values) < leastLine || span < leastSpan {
		gc.Why = "too few values to look ahead: four over at least two weeks are needed"
		return
	}
	reach := math.Min(ForecastWeeks, span)
	weeks := reach
	if by, ok := g.By.Time(); ok {
		weeks = math.Max(0, by.Sub(last).Hours()/24/7)
		if weeks > reach {
			gc.Why = "its date lies further ahead than the values so far reach back"
			return
		}
	}
	m, _ := exam.ParseMeasure(g.Measure)
	in := m.Info()
	// What noise alone does to a reading; a level also counts as reached half a step before.
	sd, step := line.SD, 0.0
	if row.SEM != nil {
		sd = math.Max(sd, *row.SEM)
	}
	if in.Whole {
		step, sd = 0.5, math.Max(sd, math.Sqrt(1./12))
	}
	rises := g.Target >= y[0]
	chance := func(w float64) float64 {
		if !(sd > 0) {
			v := line.Intercept + float64(line.Slope*w)
			if rises && v >= g.Target || !rises && v <= g.Target {
				return 1
			}
			return 0
		}
		d := line.Ahead(w, sd)
		if rises {
			return d.Survival(g.Target - step)
		}
		return d.CDF(g.Target + step)
	}
	for w := 0; float64(w) <= reach; w++ {
		p := round(chance(float64(w)), 4)
		gc.ByWeek = append(gc.ByWeek, p)
		if p >= 0.5 && gc.Weeks == nil {
			gc.Weeks = &w
		}
	}
	gc.Probability = finite(round(chance(weeks), 4))
	v := line.Intercept + float64(line.Slope*weeks)
	low, high := v, v
	if sd > 0 {
		d := line.Ahead(weeks, sd)
		low, high = d.Quantile(0.05), d.Quantile(0.95)
	}
	inside := func(v float64) float64 { return round(math.Max(in.Min, math.Min(in.Max, v)), 3) }
	gc.Reading = &Reading{last.Add(time.Duration(weeks * 7 * 24 * float64(time.Hour))), inside(v), inside(low), inside(high)}
}

// Reach returns the probability that the item at a site reaches a grade by a date, counting a goal as
// reached when the grade is more likely than not; NaN where the model's space cannot tell.
func (c *Course) Reach(item exam.Item, at exam.Site, target int8, by time.Time) float64 {
	g, ok := c.model.space.(Grader)
	if !ok || len(c.nodes) == 0 {
		return math.NaN()
	}
	return c.reach(g, item, at, target, by)
}

// reach runs the chain ahead week by week and takes out what has arrived.
func (c *Course) reach(g Grader, item exam.Item, site exam.Site, target int8, by time.Time) float64 {
	n := c.nodes[len(c.nodes)-1]
	chance := g.AtLeast(item, site, target, n.sites)
	alpha := append([]float64(nil), n.alpha...)
	arrived := 0.0
	take := func() {
		for i := range n.sites {
			for k := range Levels {
				if chance[i*Levels+k] < reachedAt {
					continue
				}
				for q := range int(paceCount) {
					arrived += alpha[at(i)+k*int(paceCount)+q]
					alpha[at(i)+k*int(paceCount)+q] = 0
				}
			}
		}
	}
	take()
	left := units(n.visit.Examined, by)
	moved := make([]float64, states)
	for left > 0 {
		step := min(left, 28)
		t := c.model.after(step)
		left -= step
		for i := range n.sites {
			t.forward(moved, alpha[at(i):at(i+1)])
			copy(alpha[at(i):at(i+1)], moved)
		}
		take()
	}
	return math.Min(1, arrived)
}
