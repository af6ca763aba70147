package view

import (
	"strings"
	"time"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// Choice is a field with several values, of which a person picks one.
type Choice struct {
	Field    string // the field's name in words
	Where    string // the visit's day, or the patient
	Why      string // what happened, in one sentence
	Options  []Option
	Closed   bool // the visit is closed: picking needs a reason
	Conflict storage.Conflict
}

// Option is one of the values.
type Option struct {
	Words string // the value
	Who   string // who entered it, when, on which device
	Note  string // why it does not count yet; empty where it does
}

// NewChoices lists what is to be chosen in a patient's record.
func NewChoices(r storage.Record, u exam.Units) []Choice {
	visits := map[exam.ID]exam.Visit{}
	for _, v := range r.Visits {
		visits[v.ID] = v
	}
	out := make([]Choice, 0, len(r.Conflicts))
	for _, c := range r.Conflicts {
		x := Choice{Field: FieldTitle(c.Field), Where: words.T("Patient"), Conflict: c}
		if v, ok := visits[c.Record]; ok {
			x.Where = words.T("Visit of %s", Day(v.Examined))
			x.Closed = v.State == exam.Closed && c.Field != "closed"
		}
		late, doubt, current := 0, 0, 0
		for _, v := range c.Values {
			o := Option{Words: FieldWords(c.Field, v.Raw, v.Words, u), Who: entryWho(v.Examiner, v.Device, v.At)}
			switch {
			case v.Late:
				late++
				o.Note = words.T("It arrived after the visit was closed and does not count until it is accepted.")
			case v.Doubtful:
				doubt++
				o.Note = words.T("An entry is missing that may have replaced it; it does not count until it is confirmed.")
			default:
				current++
			}
			x.Options = append(x.Options, o)
		}
		switch {
		case doubt > 0:
			x.Why = words.T("An entry was lost that may have changed this. Confirm what holds.")
		case late > 0 && current <= 1:
			x.Why = words.T("A value arrived after the visit was closed.")
		default:
			x.Why = words.T("Entered on two devices that had not met.")
		}
		out = append(out, x)
	}
	return out
}

func entryWho(who, device string, at time.Time) string {
	var parts []string
	for _, s := range []string{who, Day(at.Local()) + " " + at.Local().Format("15:04"), device} {
		if strings.TrimSpace(s) != "" {
			parts = append(parts, s)
		}
	}
	return strings.Join(parts, ", ")
}
