package storage_test

import (
	"context"
	"os"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
)

var ctx = context.Background()

func at(s string) time.Time {
	t, err := time.Parse(time.RFC3339, s)
	if err != nil {
		panic(err)
	}
	return t
}

func samplePatient() exam.Patient {
	return exam.Patient{
		ID: storage.NewID(), Name: "Bramble", Species: exam.Dog, Breed: "dachshund", Sex: exam.Male, Neutered: true, Born: "2019-05",
		Owner: exam.Contact{Name: "Ada Fennel", Phone: "555 0101"}, Veterinarian: exam.Contact{Name: "Dr Moss", Phone: "555 0102"},
		Referral: exam.Referral{By: "Dr Moss", Until: "2026-12-31", Limits: "no stairs"}, RecheckDays: 7,
		Problems:    []exam.Problem{{ID: storage.NewID(), Diagnosis: "disc extrusion", Level: "T12-T13", Onset: "2026-02-11", Surgery: "2026-02-12"}},
		Precautions: []exam.PrecautionOn{{ID: storage.NewID(), Code: "implant", Since: "2026-02-12"}},
		Goals:       []exam.Goal{{ID: storage.NewID(), Words: "walks ten steps alone", Item: "ambulation", Site: "midline", Target: 2, By: "2026-06-01"}},
		Medicines:   []exam.Medicine{{ID: storage.NewID(), Name: "gabapentin", Dose: "10 mg/kg", Start: "2026-02-12"}},
		Note:        "shy",
	}
}

func sampleVisit(p exam.ID) exam.Visit {
	return exam.Visit{
		ID: storage.NewID(), Patient: p, Examined: at("2026-03-02T10:15:00+01:00"), Zone: "Europe/Paris", Examiner: "R. Okafor", Protocol: "full",
		Sedation: exam.SedationMild, Aid: "sling", Surface: "grip", Session: "before",
		Doses: []exam.DoseGiven{{Medicine: "gabapentin", Hours: 3.5}},
		Findings: []exam.Finding{
			{Item: exam.VoluntaryMotor, Site: exam.PelvicLeft, Result: exam.Graded(1)},
			{Item: exam.Hopping, Site: exam.PelvicRight, Result: exam.Untested(exam.Pain)},
			{Item: exam.Withdrawal, Site: exam.PelvicLeft, Digit: exam.Lateral, Result: exam.Graded(1), How: exam.SameAsLast, Seen: true, Block: "b1", Note: "slow"},
			{Item: exam.Patellar, Site: exam.PelvicLeft, Result: exam.Graded(2), How: exam.RestNormal},
			{Item: exam.CutaneousTrunci, Site: exam.Left, Result: exam.Graded(1), Level: exam.NewVertebra(exam.RegionT, 13)},
		},
		Measures:    []exam.Measured{{Measure: exam.Weight, Value: 9.4}, {Measure: exam.ThighGirth, Site: exam.Left, Value: 34.5, At: 70, Clipped: true}},
		Treatments:  []exam.Treatment{{ID: storage.NewID(), Kind: "underwater-treadmill", Params: "1.2 m/s", Minutes: 10}},
		Attachments: []exam.Attachment{{ID: storage.NewID(), Name: "0011.att", Format: "jpeg", Size: 123456, Note: "standing, from behind"}},
		Stim:        []exam.StimRecord{{ID: storage.NewID(), Kind: "test", Data: `{"muscle":"quadriceps","site":"pelvic-left","readings":null}`}},
		Home:        []exam.HomeExercise{{ID: storage.NewID(), Kind: "sit-to-stand", Times: 3, DaysWeek: 7}},
		Report:      exam.OwnerReport{Falls: "two", ExercisesDone: 5, ExercisesSet: 7},
		Note:        "good day", NextVisit: "2026-03-09",
	}
}

func TestWhatWasSavedReadsBack(t *testing.T) {
	s, dir := storagetest.OpenDir(t)
	p := samplePatient()
	v := sampleVisit(p.ID)
	r, err := s.Apply(ctx, "R. Okafor", append(storage.PatientEdits(exam.Patient{}, p), storage.VisitEdits(exam.Visit{}, v)...)...)
	require.NoError(t, err)
	require.Equal(t, uint64(1), r.First)
	want := p
	want.Weights = []exam.WeightPoint{{At: v.Examined, Kg: 9.4}}
	look := func() {
		t.Helper()
		got, err := s.Patient(p.ID)
		require.NoError(t, err)
		require.Equal(t, want.Name, got.Patient.Name)
		require.True(t, want.Weights[0].At.Equal(got.Patient.Weights[0].At))
		got.Patient.Weights, want.Weights = nil, nil
		require.Equal(t, want, got.Patient)
		want.Weights = []exam.WeightPoint{{At: v.Examined, Kg: 9.4}}
		require.Len(t, got.Visits, 1)
		gv := got.Visits[0]
		require.Equal(t, v.Examined.Format(time.RFC3339), gv.Examined.Format(time.RFC3339))
		gv.Examined = v.Examined
		require.Equal(t, v, gv)
		one, err := s.Visit(v.ID)
		require.NoError(t, err)
		one.Examined = v.Examined
		require.Equal(t, v, one)
		rows, err := s.Caseload(ctx)
		require.NoError(t, err)
		require.Len(t, rows, 1)
		require.Equal(t, "Bramble", rows[0].Name)
		require.Equal(t, [4]int8{-1, -1, 1, -1}, rows[0].Motor)
		require.Equal(t, v.ID, rows[0].OpenVisit)
		h, err := s.History(p.ID)
		require.NoError(t, err)
		require.Len(t, h, int(r.Last))
	}
	look()
	require.NoError(t, s.Close())
	s, err = storage.Open(dir, storagetest.Options())
	require.NoError(t, err)
	look()
	require.NoError(t, s.Close())
	require.NoError(t, os.Remove(dir+"/index.db"))
	s, err = storage.Open(dir, storagetest.Options())
	require.NoError(t, err)
	look()
	require.NoError(t, s.Close())
}
