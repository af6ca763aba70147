package view

import (
	"slices"
	"time"

	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/exam"
)

// SheetInput gathers what a paper is made from: the visits up to the one it is about, oldest
// first, and the alerts that stand at it.
func SheetInput(pr exam.Practice, p exam.Patient, visits []exam.Visit, at time.Time, o sheet.Options) sheet.Input {
	if p.OutOfHours.Empty() {
		p.OutOfHours = pr.OutOfHours
	}
	if o.Lang == "" {
		o.Lang = pr.Language
	}
	if o.Lang == "" {
		o.Lang = "en"
	}
	if o.Phrases == nil {
		o.Phrases = sheet.OwnPhrases(pr, o.Lang)
	}
	if o.Logo == nil {
		o.Logo = pr.Logo
	}
	in := sheet.Input{Practice: pr, Patient: p, Visits: slices.Clone(visits), At: at, Options: o}
	for _, a := range AlertsIn(o.Lang, p, visits) {
		n := sheet.Notice{Urgency: sheet.NextWorkingDay, Plain: a.Plain, Words: a.Brief, Since: a.Since, Told: a.Told}
		switch a.Urgency {
		case "now":
			n.Urgency = sheet.Now
		case "today":
			n.Urgency = sheet.Today
		}
		in.Notices = append(in.Notices, n)
	}
	return in
}
