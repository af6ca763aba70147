package view

import (
	"strings"
	"testing"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// The avoirdupois pound is 0.45359237 kg, the foot 30.48 cm exactly (international yard and pound agreement of 1959).
func TestWeightsInPounds(t *testing.T) {
	us := exam.Units{Pounds: true, Inches: true}
	if got := WeightWords(10, us); got != "22 lb" {
		t.Errorf("10 kg is %s", got)
	}
	if got := WeightWords(0.45359237, us); got != "1 lb" {
		t.Errorf("a pound is %s", got)
	}
	if got := MeasuredWords(exam.Measured{Measure: exam.ThighGirth, Value: 30.48}, us); got != "12 in" {
		t.Errorf("a girth is %s", got)
	}
	p := exam.Patient{Name: "Fern", Species: exam.Dog, Weights: []exam.WeightPoint{{Kg: 10}}}
	if s := StripOf(p, day0, us); !strings.HasSuffix(s.Signalment, "22 lb") {
		t.Errorf("the strip says %q", s.Signalment)
	}
}

// A weight typed in pounds is kept in kilograms.
func TestAWeightTypedInPounds(t *testing.T) {
	in := ExamInput{Patient: exam.Patient{ID: exam.ID{15: 1}, Species: exam.Dog}, Visit: exam.Visit{ID: exam.ID{15: 2}, Patient: exam.ID{15: 1}, Examined: day0, Examiner: "A"},
		Items: []exam.Item{exam.Mentation}, Measures: []exam.Measure{exam.Weight}, Units: exam.Units{Pounds: true}}
	s, err := NewExamSheet(in)
	if err != nil {
		t.Fatal(err)
	}
	for i, c := range s.Cells() {
		if c.IsMeasure() {
			if err := s.FocusCell(i); err != nil {
				t.Fatal(err)
			}
		}
	}
	for _, r := range "22.046" {
		s.Press(Key{Rune: r})
	}
	if o := s.Press(Named("Enter")); o.Err != nil {
		t.Fatal(o.Err)
	}
	m, ok := s.Visit().Measured(exam.Weight, exam.NoSite)
	if !ok || m.Value < 9.99 || m.Value > 10.01 {
		t.Errorf("22.046 lb is kept as %v kg", m.Value)
	}
	if got := s.ValueWords(m); got != "22 lb" {
		t.Errorf("it is shown as %s", got)
	}
}

func TestFieldsAreNamedAsOnTheScreens(t *testing.T) {
	for field, want := range map[string]string{
		"finding/patellar/pelvic-left": CellName(exam.Key{Item: exam.Patellar, Site: exam.PelvicLeft}),
		"measure/weight":               MeasureName(exam.Weight),
		"name":                         "Name",
		"problem/0196-x":               "Problem",
		"attachment/0196-x":            "Photo or clip",
		"unheard/of":                   "unheard/of",
	} {
		if got := FieldTitle(field); got != want {
			t.Errorf("%s is called %q, want %q", field, got, want)
		}
	}
}

var (
	seen  = time.Date(2026, 3, 2, 10, 0, 0, 0, time.UTC)
	visit = exam.Visit{ID: exam.ID{15: 2}, Patient: exam.ID{15: 1}, Examined: seen, Examiner: "A"}
	cell  = exam.Key{Item: exam.Patellar, Site: exam.PelvicLeft}
)

func raw(grade int8) []byte {
	return storage.FindingEdit(visit.Patient, visit.ID, exam.Finding{Item: cell.Item, Site: cell.Site, Result: exam.Graded(grade)}).Value
}

func TestValuesToChooseSayWhoAndWhy(t *testing.T) {
	closed := visit
	closed.State, closed.ClosedAt = exam.Closed, seen
	conflict := func(vs ...storage.Value) storage.Record {
		return storage.Record{Visits: []exam.Visit{closed}, Conflicts: []storage.Conflict{{Patient: visit.Patient, Record: visit.ID, Kind: storage.KindVisit, Field: "finding/" + cell.String(), Values: vs}}}
	}
	two := NewChoices(conflict(storage.Value{Raw: raw(1), Examiner: "Ada", Device: "laptop", At: seen}, storage.Value{Raw: raw(2), Examiner: "Bo", Device: "device 0a1b", At: seen}), exam.Units{})
	if len(two) != 1 || len(two[0].Options) != 2 {
		t.Fatalf("%+v", two)
	}
	c := two[0]
	if c.Where != "Visit of 2 Mar 2026" || !c.Closed || c.Why != "Entered on two devices that had not met." {
		t.Errorf("%q, closed %v, %q", c.Where, c.Closed, c.Why)
	}
	want := GradeWords(exam.Finding{Item: cell.Item, Site: cell.Site, Result: exam.Graded(1)})
	if o := c.Options[0]; o.Words != want || !strings.HasPrefix(o.Who, "Ada, 2 Mar 2026") || !strings.HasSuffix(o.Who, "laptop") || o.Note != "" {
		t.Errorf("%+v, want the words %q", o, want)
	}
	late := NewChoices(conflict(storage.Value{Raw: raw(1)}, storage.Value{Raw: raw(2), Late: true}), exam.Units{})[0]
	if late.Why != "A value arrived after the visit was closed." || late.Options[1].Note == "" || late.Options[0].Note != "" {
		t.Errorf("%+v", late)
	}
	doubt := NewChoices(conflict(storage.Value{Raw: raw(1), Doubtful: true}), exam.Units{})[0]
	if !strings.HasPrefix(doubt.Why, "An entry was lost") || doubt.Options[0].Note == "" {
		t.Errorf("%+v", doubt)
	}
	gone := NewChoices(conflict(storage.Value{Raw: raw(1)}, storage.Value{}), exam.Units{})[0]
	if gone.Options[1].Words != "cleared" {
		t.Errorf("a cleared value reads %q", gone.Options[1].Words)
	}
}

func TestHistorySaysWhatReplacedWhat(t *testing.T) {
	f := "finding/" + cell.String()
	h := NewHistory([]storage.Entry{
		{Record: visit.Patient, Field: "name", Raw: []byte{1}, Value: "Fern", Examiner: "Ada", Device: "laptop", At: seen, How: "edit", Current: true},
		{Record: visit.ID, Field: f, Raw: raw(1), Examiner: "Ada", Device: "laptop", At: seen.Add(time.Minute), How: "edit"},
		{Record: visit.ID, Field: f, Raw: raw(2), Replaced: [][]byte{raw(1)}, Examiner: "Bo", Device: "tablet", At: seen.Add(24 * time.Hour), How: "amend", Reason: "misread", Current: true},
	}, []exam.Visit{visit}, time.UTC, exam.Units{})
	l := h.Lines()
	if h.Total() != 3 || l[0].Who != "Bo, tablet" || l[0].How != "amended after closing: misread" || l[0].Day != "3 Mar 2026" || l[0].Clock != "10:00" {
		t.Errorf("%+v", l[0])
	}
	if l[0].Before != l[1].After || l[0].Before == "" || l[1].State != "replaced since" || l[0].State != "" {
		t.Errorf("before %q, then %q; %q", l[0].Before, l[1].After, l[1].State)
	}
	h.Search("patellar bo")
	if len(h.Lines()) != 1 {
		t.Errorf("%d lines with both words", len(h.Lines()))
	}
	h.Search("")
	if !h.Of(0) || len(h.Lines()) != 2 {
		t.Errorf("%d lines of one field", len(h.Lines()))
	}
	if h.Of(0) || len(h.Lines()) != 3 {
		t.Errorf("%d lines after all again", len(h.Lines()))
	}
}

// A line of a list that is changed in place is a change like any other: it must reach the store and undo.
func TestAnEditInPlaceIsSaved(t *testing.T) {
	v := exam.Visit{ID: exam.ID{15: 2}, Patient: exam.ID{15: 1}, Examined: day0, Examiner: "A",
		Treatments:  []exam.Treatment{{ID: exam.ID{15: 3}, Kind: "massage"}},
		Home:        []exam.HomeExercise{{ID: exam.ID{15: 4}, Kind: "walk"}},
		Attachments: []exam.Attachment{{ID: exam.ID{15: 5}, Name: "a.att", Format: "png", Size: 1}},
		Stim:        []exam.StimRecord{{ID: exam.ID{15: 6}, Kind: "test", Data: "{}"}}}
	var saved []Batch
	s, err := NewExamSheet(ExamInput{Patient: exam.Patient{ID: exam.ID{15: 1}, Species: exam.Dog}, Visit: v, Items: []exam.Item{exam.Mentation}, Save: func(b Batch) { saved = append(saved, b) }})
	if err != nil {
		t.Fatal(err)
	}
	for i, edit := range []func(*exam.Visit){
		func(v *exam.Visit) { v.Treatments[0].Minutes = 10 },
		func(v *exam.Visit) { v.Home[0].Times = 3 },
		func(v *exam.Visit) { v.Attachments[0].Note = "from behind" },
		func(v *exam.Visit) { v.Stim[0].Data = `{"muscle":"x"}` },
	} {
		if err := s.EditHead(edit); err != nil {
			t.Fatal(err)
		}
		if n := len(saved[i].Edits()); n != 1 {
			t.Errorf("edit %d gives the store %d changes", i, n)
		}
	}
	s.Press(Key{Rune: 'z', Ctrl: true})
	if got := s.Visit().Stim[0].Data; got != "{}" {
		t.Errorf("undo leaves %s", got)
	}
}
