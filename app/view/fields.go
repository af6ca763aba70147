package view

import (
	"strings"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// fieldTitles are the fields of a record as people call them.
var fieldTitles = map[string]string{
	"name": "Name", "species": "Species", "breed": "Breed", "sex": "Sex", "neutered": "Neutered", "born": "Born", "owner": "Owner",
	"veterinarian": "Treating veterinarian", "out-of-hours": "At night and on Sundays", "referral": "Referral", "status": "Status",
	"recheck-days": "Days between visits", "note": "Note", "demo": "Demo", "examined": "Time of the exam", "examiner": "Examiner",
	"protocol": "Protocol", "closed": "Closing of the visit", "repeat-of": "Repeat of a visit", "sedation": "Sedation", "aid": "Aid",
	"surface": "Surface", "session": "Before or after the session", "doses": "Hours since medicines", "report": "Owner's report", "next-visit": "Next visit",
}

// listTitles are the fields that stand in lists, by what their names begin with.
var listTitles = map[string]string{
	"problem": "Problem", "precaution": "Precaution", "goal": "Goal", "medicine": "Medicine", "sent": "Paper that was sent",
	"treatment": "Treatment", "home": "Home exercise", "answer": "Answer to an alert", "attachment": "Photo or clip", "stim": "Stimulation",
	"same-as": "One animal with another record",
}

// actTitles say how a change came about.
var actTitles = map[string]string{
	"edit": "entered", "amend": "amended after closing", "accept": "accepted after closing", "pick": "chosen between values", "undo": "taken back",
}

func fieldTerms() (out []string) {
	for _, m := range []map[string]string{fieldTitles, listTitles, actTitles} {
		for _, t := range m {
			out = append(out, t)
		}
	}
	return out
}

// FieldTitle names a field of a record in the language in use: a cell by its test and site, a measure by its
// name, the rest by what the screens call it.
func FieldTitle(field string) string {
	head, rest, list := strings.Cut(field, "/")
	if !list {
		if t, ok := fieldTitles[field]; ok {
			return words.Of(t)
		}
		return field
	}
	switch head {
	case "finding":
		if k, err := exam.ParseKey(rest); err == nil {
			return CellName(k)
		}
	case "measure":
		name, place, _ := strings.Cut(rest, "/")
		if m, err := exam.ParseMeasure(name); err == nil {
			site, _, _ := strings.Cut(place, "/")
			if s, err := exam.ParseSite(site); err == nil && s != exam.Midline && s != exam.NoSite {
				return MeasureName(m) + ", " + SiteName(s)
			}
			return MeasureName(m)
		}
	}
	if t, ok := listTitles[head]; ok {
		return words.Of(t)
	}
	return field
}

// FieldWords says a value of a field in the language in use. Findings and measures are said as on the other
// screens; plain is what the store says of all others. The empty value reads «cleared».
func FieldWords(field string, raw []byte, plain string, u exam.Units) string {
	if len(raw) == 0 {
		return words.T("cleared")
	}
	v, err := storage.VisitField(field, raw)
	switch {
	case err != nil:
	case len(v.Findings) > 0:
		f := v.Findings[0]
		s := GradeWords(f)
		if f.Note != "" {
			s += ", " + f.Note
		}
		return s
	case field == "examined":
		return Day(v.Examined) + " " + v.Examined.Format("15:04")
	case field == "closed":
		return Day(v.ClosedAt) + " " + v.ClosedAt.Format("15:04")
	case field == "next-visit":
		return DateWords(v.NextVisit)
	case len(v.Measures) > 0:
		return MeasuredWords(v.Measures[0], u)
	}
	return words.Of(plain)
}

// MeasuredWords says a measured value with its unit, in the units that the practice reads.
func MeasuredWords(m exam.Measured, u exam.Units) string {
	s := number(u.Shown(m.Measure, m.Value))
	if unit := u.Unit(m.Measure); unit != "1" {
		s += " " + unit
	}
	return s
}

// ChangeIn says the change of a measure in the units that the practice reads.
func (r MeasureRow) ChangeIn(u exam.Units) string {
	if r.ChangeWords == "" {
		return ""
	}
	return signed(u.Shown(r.After.Measure, r.Change))
}

// UnitOf is the unit that a measure is shown and typed in.
func (s *ExamSheet) UnitOf(m exam.Measure) string { return s.in.Units.Unit(m) }

// Units are the units that the sheet shows and takes.
func (s *ExamSheet) Units() exam.Units { return s.in.Units }

// ValueWords says a measured value in the unit that it is shown in.
func (s *ExamSheet) ValueWords(m exam.Measured) string { return MeasuredWords(m, s.in.Units) }

// WeightWords says a weight with its unit, in pounds where they are wanted.
func WeightWords(kg float64, u exam.Units) string {
	return MeasuredWords(exam.Measured{Measure: exam.Weight, Value: kg}, u)
}
