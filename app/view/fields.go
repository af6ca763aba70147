package view

import (
	"fmt"
	"slices"
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
	if p, err := storage.PatientField(field, raw); err == nil {
		if s := patientField(p, field); s != "" {
			return s
		}
	}
	v, err := storage.VisitField(field, raw)
	switch {
	case err != nil:
	case len(v.Findings) > 0:
		f := v.Findings[0]
		s := GradeWords(f)
		if f.Note != "" {
			s += ", " + words.Of(f.Note)
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
	default:
		if s := visitField(v, field); s != "" {
			return s
		}
	}
	return words.Of(plain)
}

// patientField says a field of a patient in the language in use; empty for one that is said as it was written.
func patientField(p exam.Patient, field string) string {
	on := func(text string, d exam.Date) string {
		if d == "" {
			return ""
		}
		return fmt.Sprintf(text, DateWords(d))
	}
	switch {
	case len(p.Problems) > 0:
		x := p.Problems[0]
		return listed(ProblemWords(x), on(words.T("since %s"), x.Onset), on(words.T("operated on %s"), x.Surgery), on(words.T("resolved on %s"), x.Resolved), x.Note)
	case len(p.Precautions) > 0:
		return PrecautionWords(p.Precautions[0])
	case len(p.Goals) > 0:
		g := p.Goals[0]
		target := ""
		if m, err := exam.ParseMeasure(g.Measure); err == nil {
			target = MeasureName(m)
		} else if i, err := exam.ParseItem(g.Item); err == nil {
			target = ItemName(i)
		}
		if s, err := exam.ParseSite(g.Site); err == nil && s != exam.NoSite {
			target += ", " + SiteName(s)
		}
		return listed(g.Words, Labelled(target, number(g.Target)), on(words.T("by %s"), g.By), on(words.T("reached on %s"), g.Reached))
	case len(p.Medicines) > 0:
		m := p.Medicines[0]
		return listed(m.Name, m.Dose, on(words.T("from %s"), m.Start), on(words.T("until %s"), m.Stop))
	}
	switch field {
	case "species":
		return SpeciesName(p.Species)
	case "sex":
		return words.Of(p.Sex.String())
	case "neutered":
		return yesNo(p.Neutered)
	case "demo":
		return yesNo(p.Demo)
	case "born":
		return DateWords(p.Born)
	case "referral":
		return listed(p.Referral.By, on(words.T("until %s"), p.Referral.Until), p.Referral.Limits)
	case "status":
		return listed(words.Of(p.Status.String()), on(words.T("since %s"), p.StatusSince))
	}
	return ""
}

// visitField says a field of a visit that is neither a finding nor a measure.
func visitField(v exam.Visit, field string) string {
	switch {
	case len(v.Treatments) > 0:
		t := v.Treatments[0]
		name, minutes := t.Kind, ""
		if k, ok := exam.TreatmentByKey(t.Kind); ok {
			name = words.Of(k.Name)
		}
		if t.Minutes > 0 {
			minutes = words.T("%s min", number(t.Minutes))
		}
		return listed(name, t.Params, minutes, t.Override)
	case len(v.Home) > 0:
		h := v.Home[0]
		name, times := h.Kind, ""
		if k, ok := exam.ExerciseByKey(h.Kind); ok {
			name = words.Of(k.Name)
		}
		if h.Times > 0 {
			times = words.N(h.Times, "%d time a day", "%d times a day", h.Times)
		}
		return listed(name, times, h.Amount, h.How, h.StopFor, h.Override)
	case len(v.Attachments) > 0:
		return listed(AttachmentWords(v.Attachments[0]), v.Attachments[0].Note)
	case len(v.Answers) > 0:
		a := v.Answers[0]
		return listed(AlertTitle(a.Rule), words.T("told: %s", a.Told), a.Note)
	}
	switch field {
	case "protocol":
		if p, ok := exam.FindProtocol(exam.Practice{}, v.Protocol); ok {
			return words.Of(p.Name)
		}
	case "doses":
		var parts []string
		for _, d := range v.Doses {
			parts = append(parts, words.T("%[1]s %[2]s h before", d.Medicine, number(d.Hours)))
		}
		return strings.Join(parts, ", ")
	case "report":
		r := v.Report
		done := ""
		if r.ExercisesSet != 0 || r.ExercisesDone != 0 {
			done = words.T("%[1]d of %[2]d exercises done", r.ExercisesDone, r.ExercisesSet)
		}
		return listed(r.Falls, r.Urine, r.Appetite, done, r.Words)
	}
	return ""
}

func yesNo(on bool) string {
	if on {
		return words.T("yes")
	}
	return words.T("no")
}

// listed joins what is not empty with commas.
func listed(parts ...string) string {
	return strings.Join(slices.DeleteFunc(parts, func(s string) bool { return strings.TrimSpace(s) == "" }), ", ")
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
