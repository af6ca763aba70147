package storage

import (
	"bytes"
	"cmp"
	"errors"
	"strings"
	"time"

	"cordwalk.example/cordwalk/exam"
)

func compareRows(a, b Summary) int {
	return cmp.Or(strings.Compare(a.Name, b.Name), bytes.Compare(a.ID[:], b.ID[:]))
}

type wireRow struct {
	ID          exam.ID        `cbor:"1,keyasint"`
	Name        string         `cbor:"2,keyasint"`
	Species     uint8          `cbor:"3,keyasint"`
	Breed       string         `cbor:"4,keyasint"`
	Owner       string         `cbor:"5,keyasint"`
	Problem     string         `cbor:"6,keyasint"`
	Status      uint8          `cbor:"7,keyasint"`
	Demo        bool           `cbor:"8,keyasint"`
	Visits      int            `cbor:"9,keyasint"`
	First       *wireExamined  `cbor:"10,keyasint,omitempty"`
	Last        *wireExamined  `cbor:"11,keyasint,omitempty"`
	LastVisit   exam.ID        `cbor:"12,keyasint"`
	OpenVisit   exam.ID        `cbor:"13,keyasint"`
	NextVisit   string         `cbor:"14,keyasint"`
	RecheckDays int            `cbor:"15,keyasint"`
	Motor       [4]int8        `cbor:"16,keyasint"`
	Lameness    [4]int8        `cbor:"17,keyasint"`
	TailTone    int8           `cbor:"18,keyasint"`
	Direction   uint8          `cbor:"19,keyasint"`
	Alerts      []SummaryAlert `cbor:"20,keyasint"`
}

func encodeRows(rows []Summary) []byte {
	ws := make([]wireRow, len(rows))
	for i, r := range rows {
		ws[i] = wireRow{r.ID, r.Name, uint8(r.Species), r.Breed, r.Owner, r.Problem, uint8(r.Status), r.Demo, r.Visits,
			timePointer(r.First), timePointer(r.Last), r.LastVisit, r.OpenVisit, string(r.NextVisit), r.RecheckDays,
			r.Motor, r.Lameness, r.TailTone, uint8(r.Direction), r.Alerts}
	}
	b, err := valueEnc.Marshal(ws)
	if err != nil {
		panic("storage: the rows have no encoding: " + err.Error()) // a mistake in wireRow
	}
	return b
}

func timePointer(t time.Time) *wireExamined {
	if t.IsZero() {
		return nil
	}
	w := wireTime(t, "")
	return &w
}

func decodeRows(b []byte) ([]Summary, error) {
	var ws []wireRow
	if err := indexDec.Unmarshal(b, &ws); err != nil {
		return nil, errors.Join(errRecord, err)
	}
	rows := make([]Summary, len(ws))
	for i, w := range ws {
		rows[i] = Summary{ID: w.ID, Name: w.Name, Species: exam.Species(w.Species), Breed: w.Breed, Owner: w.Owner, Problem: w.Problem,
			Status: exam.Status(w.Status), Demo: w.Demo, Visits: w.Visits, LastVisit: w.LastVisit, OpenVisit: w.OpenVisit,
			NextVisit: exam.Date(w.NextVisit), RecheckDays: w.RecheckDays, Motor: w.Motor, Lameness: w.Lameness, TailTone: w.TailTone,
			Direction: exam.Direction(w.Direction), Alerts: w.Alerts}
		if w.First != nil {
			rows[i].First = w.First.time()
		}
		if w.Last != nil {
			rows[i].Last = w.Last.time()
		}
	}
	return rows, nil
}
