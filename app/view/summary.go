package view

import (
	"time"

	"cordwalk.example/cordwalk/exam"
)

// SummaryAlert is an alert as the caseload needs it.
type SummaryAlert struct {
	Rule     string
	Urgency  string // "now", "today" or "soon"
	Answered bool
}

// Summary is what the caseload shows of one patient.
type Summary struct {
	ID                    exam.ID
	Name                  string
	Species               exam.Species
	Breed, Owner, Problem string
	Status                exam.Status
	Demo                  bool
	Visits                int
	First, Last           time.Time
	LastVisit             exam.ID
	OpenVisit             exam.ID
	NextVisit             exam.Date
	RecheckDays           int
	Motor, Lameness       [4]int8 // exam.Limbs order, -1 where not tested
	TailTone              int8
	Direction             exam.Direction // last visit against the one before
	Alerts                []SummaryAlert
}
