package view

import (
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/progress"
)

// modelVisits are weekly visits of a dog that gets better behind.
func modelVisits(n int) []exam.Visit {
	var out []exam.Visit
	for i := range n {
		g := int8(min(3, i/6))
		v := exam.Visit{ID: id(byte(i + 1)), Examined: day0.Add(time.Duration(i) * 7 * 24 * time.Hour), Examiner: "A. Moor"}
		for _, l := range []exam.Site{exam.PelvicLeft, exam.PelvicRight} {
			v.Findings = append(v.Findings, finding(exam.VoluntaryMotor, l, g), finding(exam.Patellar, l, 2), finding(exam.Withdrawal, l, 2))
		}
		exam.SortFindings(v.Findings)
		out = append(out, v)
	}
	return out
}

// TestTodayDoesNotComputeThePast counts the messages that the model passes.
func TestTodayDoesNotComputeThePast(t *testing.T) {
	defer ForgetCourse()
	p, visits := dog(), modelVisits(41)
	read := func() progress.Result {
		_, r, err := ModelCourse(p, visits, progress.Options{})
		require.NoError(t, err)
		return r
	}
	steps := func() int64 { return lastCourse.course.Steps() }
	all := visits

	ForgetCourse()
	fresh := read()
	whole := steps()

	ForgetCourse()
	visits = all[:40]
	read()
	before := steps()
	visits = all
	added := read()
	require.Less(t, steps()-before, whole/3, "today's visit is added")
	require.InDelta(t, fresh.Change.Better, added.Change.Better, 0.01)

	before = steps()
	again := read()
	require.Equal(t, added.Whole.Points, again.Whole.Points)
	require.Less(t, steps()-before, whole/10, "nothing is new")

	before = steps()
	visits = append([]exam.Visit(nil), all...)
	visits[40].Findings = append([]exam.Finding(nil), all[40].Findings...)
	visits[40].Findings[0].Result = exam.Graded(1)
	read()
	require.Less(t, steps()-before, whole/2, "today's visit is changed")

	before = steps()
	visits[2].Findings = append([]exam.Finding(nil), all[2].Findings...)
	visits[2].Findings[0].Result = exam.Graded(2)
	read()
	require.Greater(t, steps(), whole/2, "the past is changed: the count begins anew")
	require.Less(t, steps(), before)

	p.ID = id(99)
	r := read()
	require.Equal(t, p.ID, lastCourse.of, "another animal's course takes its place")
	require.NotNil(t, r.Change)
}
