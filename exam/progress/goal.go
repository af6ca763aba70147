package progress

import (
	"math"
	"time"

	"cordwalk.example/cordwalk/exam"
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

// goals looks ahead to each goal's date. A goal on an item counts as reached once the severity has
// come down to where the target grade is more likely than not; a goal without a date, or
// with one beyond the forecast, is looked at over the forecast's twelve weeks.
func (c *Course) goals(p exam.Patient) []GoalChance {
	out := []GoalChance{}
	for _, g := range p.Goals {
		if g.Reached != "" {
			continue
		}
		gc := GoalChance{Goal: g.ID.String(), Words: g.Words, By: string(g.By)}
		item, err := exam.ParseItem(g.Item)
		site, err2 := exam.ParseSite(g.Site)
		grader, ok := c.model.space.(Grader)
		switch {
		case g.Item == "":
			gc.Why = "goals on measures are followed on their own chart"
		case err != nil || err2 != nil:
			gc.Why = "the goal names no item and site of the exam"
		case !ok:
			gc.Why = "the model cannot tell this item"
		default:
			target := int8(math.Round(g.Target))
			last := c.nodes[len(c.nodes)-1].visit.Examined
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
		out = append(out, gc)
	}
	return out
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
