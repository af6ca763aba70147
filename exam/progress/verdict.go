package progress

import (
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/stat"
)

// Counts is what changed between two visits, cell by cell: grades of unlike items are counted
// and never added up.
type Counts struct {
	Better, Worse, Different, Same int
	NewlyTested, NoLongerTested    int
	MissedAbnormal                 int     // abnormal before, not looked at now: cannot rule out a change
	P                              float64 // two-sided sign test of better against worse; items of one exam depend on each other, so it describes
}

// CountBetween compares two visits, the earlier first. A reflex that came back after spinal
// shock counts as different, not as better.
func CountBetween(p exam.Patient, earlier, later exam.Visit) Counts {
	var c Counts
	for _, x := range exam.CompareVisits(earlier, later) {
		switch x.Kind {
		case exam.TurnedBetter:
			if exam.Returned(x, p, later.Examined) {
				c.Different++
			} else {
				c.Better++
			}
		case exam.TurnedWorse:
			c.Worse++
		case exam.TurnedDifferent:
			c.Different++
		case exam.StillAbnormal, exam.StillNormal:
			c.Same++
		case exam.FirstAbnormal, exam.FirstNormal:
			c.NewlyTested++
		case exam.NoLongerTested:
			c.NoLongerTested++
		case exam.MissedAbnormal:
			c.NoLongerTested++
			c.MissedAbnormal++
		}
	}
	c.P, _ = stat.SignTest(c.Better, c.Worse)
	return c
}

// Direction is the plain verdict on two visits: better, worse or different where the counted
// cells lean clearly one way (the sign test below 0.1), both ways where they do not, else
// the same.
func (c Counts) Direction() exam.Direction {
	switch {
	case c.Better+c.Worse+c.Different+c.Same == 0:
		return exam.NotComparable
	case c.Better > c.Worse && c.P < 0.1:
		return exam.Better
	case c.Worse > c.Better && c.P < 0.1:
		return exam.Worse
	case c.Better == 0 && c.Worse == 0 && c.Different == 0:
		return exam.Same
	case c.Better > 0 && c.Worse == 0:
		return exam.Better
	case c.Worse > 0 && c.Better == 0:
		return exam.Worse
	}
	return exam.Different
}

// Verdict is the parts of a sentence such as «Left pelvic limb: better since 3 March, 94 %».
type Verdict struct {
	What        string         `json:"what"` // "whole animal" or a limb's name
	Direction   exam.Direction `json:"-"`
	Word        string         `json:"direction"`   // "better", "same", "worse"
	Since       time.Time      `json:"since"`       // the earlier visit
	Probability float64        `json:"probability"` // of that direction
	Sure        bool           `json:"sure"`        // more than 90 %; below, say «cannot tell yet»
}

func verdictOf(what string, c Change) Verdict {
	v := Verdict{What: what, Since: c.From}
	d, p := c.Leading()
	v.Probability = p
	switch d {
	case 1:
		v.Direction = exam.Better
	case -1:
		v.Direction = exam.Worse
	default:
		v.Direction = exam.Same
	}
	v.Word = v.Direction.String()
	v.Sure = p > 0.9
	return v
}
