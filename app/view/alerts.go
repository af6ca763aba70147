package view

import (
	"time"

	"cordwalk.example/cordwalk/exam"
)

// Alert is a red flag that the last of a row of visits raises, in words.
type Alert struct {
	Rule     string    `json:"rule"`
	Urgency  string    `json:"urgency"` // "now", "today" or "soon"
	Title    string    `json:"title"`
	Seen     string    `json:"seen"`  // what was seen
	Since    time.Time `json:"since"` // between which day and the last visit
	Words    string    `json:"words"` // what was seen, why it matters, what to do
	Plain    string    `json:"plain"` // for the owner
	Source   string    `json:"source"`
	Answered bool      `json:"answered"`
	Told     string    `json:"told,omitempty"`
}

// Line says the alert in one line.
func (a Alert) Line() string { return a.Title + ": " + a.Words }

// AlertsOf returns what the last of the visits (oldest first) raises, most urgent first.
func AlertsOf(p exam.Patient, visits []exam.Visit) []Alert { return nil }
