package storage

import "cordwalk.example/cordwalk/exam/alert"

// alerts returns what the last visit of a record raises, and what earlier visits of the two
// weeks before it raised and nobody has answered; most urgent first.
func alerts(r Record) []SummaryAlert {
	if len(r.Visits) == 0 {
		return nil
	}
	flags := alert.Raised(r.Patient, r.Visits, r.Visits[len(r.Visits)-1].Examined)
	out := make([]SummaryAlert, 0, len(flags))
	for _, f := range flags {
		out = append(out, SummaryAlert{Rule: f.Rule, Urgency: f.Urgency.String(), Answered: !f.Open()})
	}
	return out
}
