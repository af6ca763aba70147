package desk

import (
	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/exam"
)

// alertsOf returns the alerts that a visit raises, the most urgent first.
func alertsOf(File, exam.Visit) []alertLine { return nil }

// noticesOf returns the open alerts of the last visit for the sheet.
func noticesOf(File) []sheet.Notice { return nil }

// alertTitle says a rule in words.
func alertTitle(rule string) string { return rule }
