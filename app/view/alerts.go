package view

import (
	"strings"
	"time"

	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/alert"
)

// Alert is a red flag in words.
type Alert struct {
	Rule     string    `json:"rule"`
	Seen     string    `json:"seen"`
	Urgency  string    `json:"urgency"` // "now", "today" or "soon"
	Title    string    `json:"title"`
	Words    string    `json:"words"` // what was seen, why it matters, what to do
	Brief    string    `json:"-"`     // what was seen and why it matters, for a paper that says days, urgency and who was told itself
	Plain    string    `json:"plain"` // for the owner
	Source   string    `json:"source"`
	Visit    exam.ID   `json:"visit"` // the visit that raised it
	Since    time.Time `json:"since"` // the visit it is compared with, else the visit that raised it
	Answered bool      `json:"answered"`
	Told     string    `json:"told,omitempty"`
}

// Line says the alert in one line.
func (a Alert) Line() string { return UrgencyWords(a.Urgency) + " " + a.Title + ". " + a.Words }

// UrgencyWords says how soon the veterinarian must hear of it.
func UrgencyWords(urgency string) string {
	switch urgency {
	case "now":
		return words.T("Call the veterinarian now:")
	case "today":
		return words.T("Call the veterinarian today:")
	}
	return words.T("Tell the veterinarian on the next working day:")
}

// AlertsOf returns what the last of the visits raises, and what those of the two weeks
// before it raised and nobody has answered; most urgent first.
func AlertsOf(p exam.Patient, visits []exam.Visit) []Alert { return AlertsIn("", p, visits) }

// AlertsIn is AlertsOf in a stated language; the empty tag is the language in use.
func AlertsIn(lang string, p exam.Patient, visits []exam.Visit) []Alert {
	var last time.Time
	for _, v := range visits {
		if v.Examined.After(last) {
			last = v.Examined
		}
	}
	var out []Alert
	for _, f := range alert.Scan(p, visits, last) {
		a := Alert{Rule: f.Rule, Seen: sheet.Say(lang, f.Seen), Urgency: f.Urgency.String(), Title: alertTitle(lang, f.Rule), Words: alertWords(lang, f),
			Brief: alertBrief(lang, f), Plain: plainAlert(lang, f), Source: f.Source, Visit: f.Visit, Since: f.From, Answered: !f.Open()}
		if a.Since.IsZero() {
			a.Since = f.To
		}
		if f.Answered != nil {
			a.Told = f.Answered.Told
		}
		out = append(out, a)
	}
	return out
}

// AlertTitle returns the name of an alert rule.
func AlertTitle(rule string) string { return alertTitle("", rule) }

func alertTitle(lang, rule string) string {
	for _, r := range alert.Rules() {
		if r.Key == rule {
			return words.OfIn(lang, r.Name)
		}
	}
	if rule == "decline" {
		return words.In(lang, "Decline over several exams")
	}
	return words.OfIn(lang, capital(strings.ReplaceAll(rule, "-", " ")))
}

// plainAlerts say each rule to the owner, in everyday words.
var plainAlerts = map[string]string{
	"deep-pain-lost":  "Your pet no longer feels a firm pinch of the paw.",
	"trunci-rises":    "The numb part of the back has moved up towards the head.",
	"reflexes-lost":   "The legs have become limp.",
	"ascending":       "The weakness is moving up to the front legs.",
	"breathing":       "Your pet does not breathe as it should.",
	"drop":            "Your pet has become much weaker since last time.",
	"spinal-pain":     "The back or neck hurts.",
	"relapse":         "Your pet was getting better and is now weaker again.",
	"urine-held":      "The bladder does not empty.",
	"incontinence":    "Your pet has begun to lose urine or stools.",
	"urine-infected":  "The urine looks bloody, cloudy or smells bad.",
	"fever":           "Your pet is hot, dull or does not eat.",
	"aspiration":      "Your pet coughs or has trouble with swallowing.",
	"skin":            "The skin is sore.",
	"wound":           "The wound is swollen or open.",
	"brain":           "Your pet is not as awake as it should be, or had a fit.",
	"self-trauma":     "Your pet chews or licks itself sore.",
	"no-pulse":        "A leg is cold and has no pulse.",
	"not-as-expected": "Your pet does not get better as we hoped.",
	"no-return":       "Feeling in the paws has not come back in two weeks.",
	"after-neck":      "The front legs are weaker since the neck was treated.",
	"overflow":        "The bladder is too full and leaks.",
	"decline":         "Over the last visits your pet has become weaker.",
}

// alertWords says a flag in one short paragraph: what was seen, between which days and by
// whom, why it matters and what to do.
func alertWords(lang string, f alert.Flag) string {
	seen := alertSeen(lang, f)
	to := string(exam.DayOf(f.To))
	if f.From.IsZero() || f.From.Equal(f.To) {
		seen = words.In(lang, "%[1]s, seen %[2]s", seen, to)
	} else {
		seen = words.In(lang, "%[1]s, between %[2]s and %[3]s", seen, string(exam.DayOf(f.From)), to)
	}
	if f.ToExaminer != "" {
		seen += " (" + f.ToExaminer + ")"
	}
	return seen + ". " + words.OfIn(lang, f.Why) + " " + words.OfIn(lang, f.Do)
}

func alertSeen(lang string, f alert.Flag) string {
	seen := sheet.Say(lang, f.Seen)
	if f.CannotRuleOut {
		return words.In(lang, "Cannot rule out: %s", seen)
	}
	return seen
}

// alertBrief is alertWords without the days and what to do.
func alertBrief(lang string, f alert.Flag) string {
	return capital(alertSeen(lang, f)) + ". " + words.OfIn(lang, f.Why)
}

func plainAlert(lang string, f alert.Flag) string {
	s, ok := plainAlerts[f.Rule]
	if !ok {
		s = "We saw something that your veterinarian must know of."
	}
	s = words.OfIn(lang, s)
	if f.CannotRuleOut {
		s += " " + words.In(lang, "We could not test this today.")
	}
	return s
}
