package view

import "cordwalk.example/cordwalk/storage"

// Summary is what the store says of one patient for the caseload.
type Summary = storage.Summary

// SummaryAlert is an alert as the caseload needs it.
type SummaryAlert = storage.SummaryAlert
