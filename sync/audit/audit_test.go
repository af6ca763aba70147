package audit_test

import (
	"context"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/audit"
)

func TestAuditTellsWhoDidWhat(t *testing.T) {
	ctx := context.Background()
	s := storagetest.Open(t)
	apply := func(who string, edits ...storage.Edit) {
		_, err := s.Apply(ctx, who, edits...)
		require.NoError(t, err)
	}
	a, b := exam.Patient{ID: storage.NewID(), Name: "Bramble", Species: exam.Dog}, exam.Patient{ID: storage.NewID(), Name: "Brambel", Species: exam.Dog}
	apply("R. Okafor", storage.PatientEdits(exam.Patient{ID: a.ID}, a)...)
	apply("T. Lind", storage.PatientEdits(exam.Patient{ID: b.ID}, b)...)
	v := exam.Visit{ID: storage.NewID(), Patient: a.ID, Note: "first", Examined: time.Now()}
	apply("R. Okafor", storage.VisitEdits(exam.Visit{ID: v.ID, Patient: a.ID}, v)...)
	corrected := v
	corrected.Note = "corrected"
	apply("R. Okafor", storage.VisitEdits(v, corrected)...)
	apply("R. Okafor", storage.CloseEdit(a.ID, v.ID, time.Now()))
	closed, err := s.Visit(v.ID)
	require.NoError(t, err)
	later := closed
	later.Note = "later"
	apply("T. Lind", storage.AmendEdits(closed, "the owner remembered", storage.VisitEdits(closed, later)...)...)
	apply("T. Lind", storage.JoinEdit(a.ID, b.ID)...)
	apply("T. Lind", storage.PartEdit(a.ID, b.ID)...)
	require.NoError(t, audit.Write(ctx, s, "R. Okafor", audit.Exported, "all patients as a spreadsheet"))

	es, err := audit.Read(ctx, s, time.Time{})
	require.NoError(t, err)
	var got []string
	for _, e := range es {
		got = append(got, e.Examiner+" "+string(e.Did)+" "+e.What)
	}
	require.Equal(t, []string{
		"R. Okafor made patient", "T. Lind made patient", "R. Okafor made visit", "R. Okafor closed a visit ", "T. Lind amended note",
		"T. Lind joined two patients ", "T. Lind parted two patients ", "R. Okafor exported all patients as a spreadsheet",
	}, got)
	require.Equal(t, "the owner remembered", es[4].Reason)
	require.Equal(t, v.ID, es[4].Record)

	es, err = audit.Read(ctx, s, time.Now().Add(time.Hour))
	require.NoError(t, err)
	require.Empty(t, es)
}
