package extract_test

import (
	"bytes"
	"context"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/extract"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/segment"
)

func anybody(key.Verifier) bool { return true }

func TestExtractShowsThePatientElsewhere(t *testing.T) {
	ctx := context.Background()
	s := storagetest.Open(t)
	p := exam.Patient{ID: storage.NewID(), Name: "Bramble", Species: exam.Dog, Breed: "collie"}
	_, err := s.Apply(ctx, "R. Okafor", storage.PatientEdits(exam.Patient{ID: p.ID}, p)...)
	require.NoError(t, err)
	v := exam.Visit{ID: storage.NewID(), Patient: p.ID, Note: "slow on stairs", Examined: time.Date(2026, 3, 2, 10, 0, 0, 0, time.UTC)}
	_, err = s.Apply(ctx, "R. Okafor", storage.VisitEdits(exam.Visit{ID: v.ID, Patient: p.ID}, v)...)
	require.NoError(t, err)
	data, err := extract.Make(s, p.ID, time.Now())
	require.NoError(t, err)
	require.False(t, bytes.Contains(data, []byte("Bramble")), "it is sealed")

	x, err := extract.Read(data, s.Bag(), anybody)
	require.NoError(t, err)
	// Another site's device of the practice shows it and keeps nothing.
	other, err := storage.CreateJoined(t.TempDir(), storagetest.Options(), s.Bag(), change.NewSite(), change.NewIncarnation())
	require.NoError(t, err)
	defer other.Close()
	want, err := s.Patient(p.ID)
	require.NoError(t, err)
	got, err := other.Show(x.Changes)
	require.NoError(t, err)
	require.Equal(t, want.Patient.Name, got.Patient.Name)
	require.Equal(t, want.Visits, got.Visits)
	_, err = other.Patient(p.ID)
	require.ErrorIs(t, err, storage.ErrNotFound)

	_, err = extract.Read(data, s.Bag(), func(key.Verifier) bool { return false })
	require.ErrorIs(t, err, segment.ErrUnsigned)
	stranger, err := key.NewBag(s.Bag().Practice)
	require.NoError(t, err)
	_, err = extract.Read(data, stranger, anybody)
	require.Error(t, err)
	for at := range data {
		bad := bytes.Clone(data)
		bad[at] ^= 1 << (at % 8)
		_, err := extract.Read(bad, s.Bag(), anybody)
		require.Error(t, err, "byte %d", at)
		_, err = extract.Read(data[:at], s.Bag(), anybody)
		require.Error(t, err)
	}
	_, err = extract.Make(s, storage.NewID(), time.Now())
	require.ErrorIs(t, err, storage.ErrNotFound)
}

func FuzzRead(f *testing.F) {
	s := storagetest.Open(f)
	p := exam.Patient{ID: storage.NewID(), Name: "Bramble", Species: exam.Dog}
	_, err := s.Apply(context.Background(), "R. Okafor", storage.PatientEdits(exam.Patient{ID: p.ID}, p)...)
	require.NoError(f, err)
	data, err := extract.Make(s, p.ID, time.Now())
	require.NoError(f, err)
	f.Add(data)
	f.Fuzz(func(t *testing.T, b []byte) {
		if _, err := extract.Read(b, s.Bag(), anybody); err == nil && !bytes.Equal(b, data) {
			t.Fatal("an extract that nobody made was read")
		}
	})
}
