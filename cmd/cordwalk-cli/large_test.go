package main

import (
	"bytes"
	"encoding/json"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/progress"
)

func TestLargeIsTheSameJSON(t *testing.T) {
	dog := exam.Patient{Name: "Bramble", Species: exam.Dog, Born: "2019", Problems: []exam.Problem{{Diagnosis: "disc <extrusion>", Onset: "2026-01-01"}}}
	var visits []exam.Visit
	for i := range 4 {
		visits = append(visits, exam.Visit{Examined: time.Date(2026, 1, 5+7*i, 10, 0, 0, 0, time.UTC), Examiner: "A. Brook", Findings: []exam.Finding{
			{Item: exam.VoluntaryMotor, Site: exam.PelvicLeft, Result: exam.Graded(int8(i / 2))},
			{Item: exam.Patellar, Site: exam.PelvicLeft, Result: exam.Graded(2)},
		}})
	}
	for n := range 5 {
		r, err := progress.Analyse(progress.Series{Patient: dog, Visits: visits[:n]}, progress.Options{})
		require.NoError(t, err)
		r.Notes = append(r.Notes, "a < b & c")
		var whole, pieces bytes.Buffer
		enc := json.NewEncoder(&whole)
		enc.SetEscapeHTML(false)
		enc.SetIndent("", "  ")
		require.NoError(t, enc.Encode(r))
		require.NoError(t, writePieces(&pieces, r))
		require.Equal(t, whole.String(), pieces.String(), "%d visits", n)
	}
}
