package outcome

import (
	"fmt"
	"math"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/stat"
)

var day0 = time.Date(2026, 1, 5, 10, 0, 0, 0, time.UTC)

func visit(day int, ambulation int8, more ...exam.Finding) exam.Visit {
	v := exam.Visit{Examined: day0.AddDate(0, 0, day), Examiner: "A. Brook"}
	v.Findings = append(v.Findings, exam.Finding{Item: exam.Ambulation, Site: exam.Midline, Result: exam.Graded(ambulation)})
	v.Findings = append(v.Findings, more...)
	return v
}

func f(i exam.Item, s exam.Site, g int8) exam.Finding {
	return exam.Finding{Item: i, Site: s, Result: exam.Graded(g)}
}

func motor(g int8) []exam.Finding {
	return []exam.Finding{f(exam.VoluntaryMotor, exam.PelvicLeft, g), f(exam.VoluntaryMotor, exam.PelvicRight, g)}
}

func deep(g int8) []exam.Finding {
	return []exam.Finding{f(exam.DeepPain, exam.PelvicLeft, g), f(exam.DeepPain, exam.PelvicRight, g), f(exam.DeepPain, exam.TailBase, g)}
}

// Lewis2020's definitions: ten steps unaided is walking; absent deep pain needs both limbs and the tail.
func TestGradeOf(t *testing.T) {
	all := func(fs ...[]exam.Finding) (out []exam.Finding) {
		for _, x := range fs {
			out = append(out, x...)
		}
		return
	}
	for _, tt := range []struct {
		name string
		v    exam.Visit
		want Grade
	}{
		{"walks", visit(0, 2), Walking},
		{"moves", visit(0, 1, motor(1)...), Paretic},
		{"moves on one side", visit(0, 0, f(exam.VoluntaryMotor, exam.PelvicLeft, 0), f(exam.VoluntaryMotor, exam.PelvicRight, 1)), Paretic},
		{"plegic, felt", visit(0, 0, all(motor(0), deep(1))...), PlegicFelt},
		{"plegic, felt on the surface", visit(0, 0, append(motor(0), f(exam.SuperficialPain, exam.PelvicLeft, 1))...), PlegicFelt},
		{"plegic, felt at the tail only", visit(0, 0, append(motor(0), f(exam.DeepPain, exam.PelvicLeft, 0), f(exam.DeepPain, exam.PelvicRight, 0), f(exam.DeepPain, exam.TailBase, 1))...), PlegicFelt},
		{"plegic, not felt", visit(0, 0, all(motor(0), deep(0))...), PlegicNotFelt},
		{"plegic, tail not tested", visit(0, 0, all(motor(0), deep(0)[:2])...), PlegicUnknown},
		{"one limb not tested", visit(0, 0, motor(0)[:1]...), GradeUnknown},
		{"nothing", exam.Visit{}, GradeUnknown},
	} {
		require.Equal(t, tt.want, GradeOf(tt.v), tt.name)
	}
}

func TestProblemOf(t *testing.T) {
	for _, tt := range []struct {
		diagnosis, level string
		want             Problem
	}{
		{"disc extrusion", "T12-T13", ThoracolumbarDisc},
		{"Disc extrusion", "L3", ThoracolumbarDisc},
		{"cervical disc disease", "C3-C4", CervicalDisc},
		{"disc extrusion", "", OtherProblem},
		{"fibrocartilaginous embolism", "C6-C7", Infarct},
		{"acute non-compressive disc extrusion", "T13-L1", Infarct},
		{"degenerative myelopathy, suspected", "", DegenerativeMyelopathy},
		{"degenerative lumbosacral stenosis", "L7-S1", Lumbosacral},
		{"brachial plexus injury", "", PlexusInjury},
		{"polyradiculoneuritis", "", Polyradiculoneuritis},
		{"laryngeal paralysis", "", OtherProblem},
	} {
		require.Equal(t, tt.want, ProblemOf(exam.Problem{Diagnosis: tt.diagnosis, Level: tt.level}, exam.Dog), tt.diagnosis+" "+tt.level)
	}
}

func animal(n int, status exam.Status, since exam.Date, visits ...exam.Visit) Animal {
	return Animal{Patient: exam.Patient{ID: exam.ID{byte(n)}, Species: exam.Dog, Status: status, StatusSince: since,
		Problems: []exam.Problem{{Diagnosis: "disc extrusion", Level: "T12-T13", Onset: "2026-01-01", Surgery: "2026-01-03"}}}, Visits: visits}
}

func TestOutcomeOfAPractice(t *testing.T) {
	felt := append(motor(0), deep(1)...)
	groups := Of([]Animal{
		animal(1, exam.Active, "", visit(0, 0, felt...), visit(7, 1), visit(14, 2), visit(21, 1)), // walked by 14
		animal(2, exam.Active, "", visit(0, 0, felt...), visit(10, 0)),                            // still watched
		animal(3, exam.Died, "2026-01-25", visit(0, 0, felt...), visit(7, 0)),                     // died on day 20
		animal(4, exam.Discharged, "2026-03-01", visit(0, 0, felt...), visit(30, 2)),              // walked by 30
		animal(5, exam.Active, "", visit(0, 2), visit(7, 2)),                                      // walked from the start
		animal(6, exam.Active, "", visit(0, 1, motor(2)...), visit(7, 2)),                         // another grade
		animal(7, exam.Active, ""),
	})
	require.Len(t, groups, 2)
	g := groups[0]
	require.Equal(t, ThoracolumbarDisc, g.Problem)
	require.Equal(t, PlegicFelt, g.Grade)
	require.Len(t, g.Cases, 4)
	require.Equal(t, 2, g.Walked)
	require.Equal(t, 1, g.Died)
	require.InDelta(t, 46.0/24, g.Delay, 0.01) // surgery on 3 January, noon, to 5 January, 10 o'clock
	// By hand: 3 at risk on day 14, one walks (2/3); 1 at risk on day 30, it walks (0).
	require.InDelta(t, 2./3, g.Curve.At(14), 1e-12)
	require.Equal(t, 30.0, g.Median)
	require.Equal(t, []int{4, 3, 1, 0}, g.AtRisk([]float64{1, 11, 25, 31}))
	// With death competing: 1/3 by day 14; then one of two dies, so that half of 2/3 remain for day 30.
	last := g.Walking[len(g.Walking)-1]
	require.InDelta(t, 1./3+1./3, last.Share, 1e-12)
	require.InDelta(t, 1./3, g.Death[len(g.Death)-1].Share, 1e-12)
	require.NotEmpty(t, g.Published)
	for _, c := range g.Cases {
		if c.End == Walked && c.Days == 14 {
			require.Equal(t, 7.0, c.NotYet)
		}
	}
	require.False(t, math.IsNaN(Differ(groups).P))
}

// The table against the percentages and Wilson intervals that progression.md section 2 prints.
func TestPublishedFigures(t *testing.T) {
	for _, tt := range []struct {
		source    string
		percent   float64
		low, high float64
	}{
		{"Davis2002, abstract", 96, 90, 98}, {"Laitinen2005", 41, 28, 56}, {"Feb2023", 61, 45, 75}, {"Gomes2024, abstract", 61, 52, 69},
		{"Castel2019", 48, 41, 56}, {"Gouveia2024, abstract", 73, 52, 87},
	} {
		found := false
		for _, x := range figures {
			if x.Source != tt.source {
				continue
			}
			found = true
			i := stat.Wilson(x.Walked, x.Of)
			require.Equal(t, []string{fmt.Sprintf("%.0f", tt.percent), fmt.Sprintf("%.0f", tt.low), fmt.Sprintf("%.0f", tt.high)},
				[]string{fmt.Sprintf("%.0f", x.Percent), fmt.Sprintf("%.0f", 100*i.Low), fmt.Sprintf("%.0f", 100*i.High)}, tt.source)
		}
		require.True(t, found, tt.source)
	}
	for _, x := range figures {
		require.NotEmpty(t, x.Source)
		require.NotEmpty(t, x.Management)
		require.NotEqual(t, OtherProblem, x.Problem)
	}
	require.Empty(t, Published(DegenerativeMyelopathy, Paretic))
	for _, x := range Published(ThoracolumbarDisc, Paretic) {
		require.NotEqual(t, PlegicNotFelt, x.Grade)
	}
}

func TestPlace(t *testing.T) {
	elliott := printed(ThoracolumbarDisc, Paretic, "surgery", 100, "Elliott2020").mean(7.6, 4.4)
	require.Equal(t, WithinMost, elliott.Place(12))
	require.Equal(t, Later, elliott.Place(17))
	acp := times(Polyradiculoneuritis, "supportive", 14, "Hirschvogel2012").median(75.5, 5, 220)
	require.Equal(t, Earlier, acp.Place(4))
	require.Equal(t, NotSaid, counted(ThoracolumbarDisc, PlegicNotFelt, "surgery", 19, 46, 0, "Laitinen2005").Place(20))
}
