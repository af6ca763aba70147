package storage

// alerts returns what the last visit of a record raises.
func alerts(Record) []SummaryAlert { return nil }
