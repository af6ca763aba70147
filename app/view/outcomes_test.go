package view

import (
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
)

// animal is seen on the days given; from walks on it walks (-1: never).
func animal(n byte, problem string, present Presenting, walks int, status exam.Status, seen ...int) CaseHistory {
	p := exam.Patient{ID: id(n), Name: "x", Species: exam.Dog, Problems: []exam.Problem{{Diagnosis: problem, Onset: exam.DayOf(day0.AddDate(0, 0, -3))}}, Status: status}
	c := CaseHistory{Patient: p}
	for i, d := range seen {
		v := exam.Visit{ID: id(n + byte(i)), Patient: p.ID, Examined: day0.AddDate(0, 0, d)}
		g := int8(0)
		if walks >= 0 && d >= walks {
			g = 2
		}
		v.Findings = append(v.Findings, finding(exam.Ambulation, exam.Midline, g))
		motor := int8(0)
		if present == PresentMoving {
			motor = 1
		}
		for _, l := range []exam.Site{exam.PelvicLeft, exam.PelvicRight} {
			v.Findings = append(v.Findings, finding(exam.VoluntaryMotor, l, motor))
			switch present {
			case PresentFeeling:
				v.Findings = append(v.Findings, finding(exam.SuperficialPain, l, 1))
			case PresentNotFelt:
				v.Findings = append(v.Findings, finding(exam.SuperficialPain, l, 0), finding(exam.DeepPain, l, 0))
			}
		}
		c.Visits = append(c.Visits, v)
	}
	if status == exam.Died {
		c.Patient.StatusSince = exam.DayOf(day0.AddDate(0, 0, seen[len(seen)-1]+4))
	}
	return c
}

func TestPresentingGrades(t *testing.T) {
	for _, p := range []Presenting{PresentMoving, PresentFeeling, PresentNotFelt} {
		require.Equal(t, p, PresentingOf(animal(1, "x", p, -1, exam.Active, 0).Visits[0]))
	}
	require.Equal(t, PresentWalking, PresentingOf(animal(1, "x", PresentMoving, 0, exam.Active, 0).Visits[0]))
	require.Equal(t, PresentUnknown, PresentingOf(exam.Visit{}))
	v := animal(1, "x", PresentNotFelt, -1, exam.Active, 0).Visits[0]
	v.Findings = append(v.Findings, finding(exam.DeepPain, exam.TailBase, 1))
	require.Equal(t, PresentFeeling, PresentingOf(v), "one answer anywhere is an answer")
	require.Equal(t, PresentUnknown, PresentingOf(animal(1, "x", PresentUnknown, -1, exam.Active, 0).Visits[0]), "no movement and feeling not tested")
}

func TestOutcomesCountCensoredAndDead(t *testing.T) {
	list := Outcomes([]CaseHistory{
		animal(10, "disc extrusion", PresentMoving, 7, exam.Active, 0, 7, 14),
		animal(20, "Disc extrusion", PresentMoving, 14, exam.Active, 0, 7, 14),
		animal(30, "disc extrusion", PresentMoving, -1, exam.Active, 0, 10),   // lost to follow-up on day 10
		animal(40, "disc extrusion", PresentMoving, -1, exam.Died, 0, 7),      // died on day 11
		animal(50, "disc extrusion", PresentNotFelt, -1, exam.Active, 0, 28),  // another group
		animal(60, "disc extrusion", PresentMoving, 0, exam.Active, 0, 7, 14), // walked from the start
		{Patient: exam.Patient{ID: id(99)}},                                   // never seen
	})
	require.Len(t, list, 2)
	o := list[0]
	require.Equal(t, 4, o.Animals)
	require.Equal(t, []int{2, 1, 1}, []int{o.Walked, o.Died, o.Lost})
	// By hand: day 7: 4 at risk, 1 walks, S = 3/4; day 10 and day 11 leave; day 14: 1 at risk, 1 walks, S = 0.
	require.Len(t, o.Curve.Steps, 2)
	require.InDelta(t, 0.75, o.Curve.Steps[0].Survival, 1e-12)
	require.InDelta(t, 0, o.Curve.Steps[1].Survival, 1e-12)
	m, ok := o.Median()
	require.True(t, ok)
	require.Equal(t, 14.0, m)
	// Beside death: day 7: 1/4; day 11: 2 at risk, 1 dies, S = 3/8; day 14: 3/8 walk: 1/4 + 3/8.
	require.InDelta(t, 0.625, o.Walking[len(o.Walking)-1].Share, 1e-12)
	require.InDelta(t, 0.375, o.Dying[len(o.Dying)-1].Share, 1e-12)
	require.Equal(t, []int{4, 4, 1, 0, 0, 0, 0}, o.AtRisk)
	require.NotEmpty(t, o.Published)
	share, _, _, ok := o.ShareBy(10)
	require.True(t, ok)
	require.InDelta(t, 0.25, share, 1e-12)
	require.Contains(t, o.Words(), "Too few animals")
	_, ok = list[1].Median()
	require.False(t, ok)
}
