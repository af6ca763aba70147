package desk

import (
	"strings"

	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// alertLine is one alert of the visit as the screen shows it.
type alertLine struct {
	Rule     string
	Title    string // how soon, and what it is
	Why      string
	Answered string // who was told, empty where nobody was
	Must     bool   // has to be answered before the visit can be closed
}

// alertsOf returns the alerts that a visit raises with those before it, the most urgent first.
func alertsOf(p exam.Patient, others []exam.Visit, today exam.Visit) []alertLine {
	visits := make([]exam.Visit, 0, len(others)+1)
	for _, v := range others {
		if v.ID != today.ID && !v.Examined.After(today.Examined) {
			visits = append(visits, v)
		}
	}
	var out []alertLine
	for _, a := range view.AlertsOf(p, append(visits, today)) {
		l := alertLine{Rule: a.Rule, Title: words.T("%s: %s", urgencyWords(a.Urgency), a.Title), Why: a.Words, Must: a.Urgency == "now"}
		if a.Answered {
			l.Answered = words.T("told: %s", a.Told)
		}
		out = append(out, l)
	}
	return out
}

// alertTitle says a rule in words.
func alertTitle(rule string) string { return words.Of(strings.ReplaceAll(rule, "-", " ")) }
