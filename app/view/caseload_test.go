package view

import (
	"fmt"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
)

func names(c *Caseload) []string {
	var out []string
	for _, r := range c.Rows() {
		out = append(out, r.Summary.Name)
	}
	return out
}

func someCases() []Summary {
	back := func(days int) time.Time { return day0.AddDate(0, 0, -days) }
	return []Summary{
		{ID: id(1), Name: "Zorro", Owner: "Ida Fenn", Breed: "Beagle", Visits: 3, Last: back(2)},
		{ID: id(2), Name: "Mäxchen", Owner: "Otto Brandt", Breed: "Dachshund", Problem: "disc extrusion T12-T13", Visits: 3, Last: back(10)},
		{ID: id(3), Name: "Fig", Owner: "Nell Rowan", Breed: "Domestic shorthair", Visits: 3, Last: back(7)},
		{ID: id(4), Name: "Poppy", Owner: "Max Lindqvist", Breed: "Boxer", Visits: 4, Last: back(1), Alerts: []SummaryAlert{{Rule: "deep-pain", Urgency: "now"}}},
		{ID: id(5), Name: "Oak", Owner: "Ana Silva", Breed: "Boxer", Visits: 4, Last: back(90), Status: exam.Discharged, Alerts: []SummaryAlert{{Rule: "x", Urgency: "now"}}},
		{ID: id(6), Name: "New", Owner: "Bo Hale"},
		{ID: id(7), Name: "Rye", Owner: "Cy Hale", Visits: 2, Last: back(1), NextVisit: exam.DayOf(back(3)), RecheckDays: 14},
		{ID: id(8), Name: "Elm", Owner: "Di Hale", Visits: 2, Last: back(5), NextVisit: exam.DayOf(back(1)), RecheckDays: 14},
	}
}

func TestCaseloadSortsByWhatNeedsAttention(t *testing.T) {
	c := NewCaseload(someCases(), day0)
	require.Equal(t, []string{"Poppy", "Mäxchen", "Elm", "Fig", "New", "Zorro", "Rye", "Oak"}, names(c))
	require.Equal(t, "3 days overdue", c.Row(1).DueWords)
	require.Equal(t, "1 day overdue", c.Row(2).DueWords)
	require.Equal(t, "due today", c.Row(3).DueWords)
	require.Equal(t, "due in 5 days", c.Row(5).DueWords)
	require.Equal(t, "due in 13 days", c.Row(6).DueWords, "a date that lies before the last visit is spent")
	require.Equal(t, "discharged", c.Row(7).DueWords)
	c.HideInactive(true)
	require.Equal(t, 7, c.Len())
	c.OnlyToday(true)
	require.Equal(t, []string{"Poppy", "Mäxchen", "Elm", "Fig", "New"}, names(c))
}

func TestCaseloadSearch(t *testing.T) {
	c := NewCaseload(someCases(), day0)
	c.Search("max")
	require.Equal(t, []string{"Mäxchen", "Poppy"}, names(c), "an accent does not hide a name, and the animal comes before its owner")
	require.Equal(t, []Match{{FieldName, []int{0, 1, 2}}}, c.Row(0).Matches)
	require.Equal(t, []Match{{FieldOwner, []int{0, 1, 2}}}, c.Row(1).Matches)
	c.Search("T12")
	require.Equal(t, []string{"Mäxchen"}, names(c))
	c.Search("dchshnd")
	require.Equal(t, []string{"Mäxchen"}, names(c), "dropped letters are forgiven")
	c.Search("hale")
	require.Equal(t, 3, c.Len())
	c.Search("nothing like it")
	require.Zero(t, c.Len())
	c.Search("")
	require.Equal(t, 8, c.Len())
}

func BenchmarkSearch20000(b *testing.B) {
	var list []Summary
	for i := range 20000 {
		list = append(list, Summary{Name: fmt.Sprintf("Animal %d", i), Owner: fmt.Sprintf("Owner %d Street", i), Breed: "Crossbreed", Problem: "disc extrusion T12-T13", Visits: 1, Last: day0})
	}
	c := NewCaseload(list, day0)
	for n := 0; b.Loop(); n++ {
		c.Search("owner 1234"[:7+n%4]) // as it is typed
	}
}
