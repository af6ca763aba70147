package sheet

import (
	"bytes"
	"context"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/change"
)

// someStore holds two animals of the demo practice, with a correction and an amendment.
func someStore(t testing.TB) *storage.Store {
	t.Helper()
	ctx := context.Background()
	s := storagetest.Open(t)
	p := demoPractice()
	before, err := s.Practice()
	require.NoError(t, err)
	_, err = s.Apply(ctx, "A. Moor", storage.PracticeEdits(before, p.Practice)...)
	require.NoError(t, err)
	for _, c := range p.Cases[:2] {
		_, err = s.Apply(ctx, "A. Moor", storage.PatientEdits(exam.Patient{}, c.Patient)...)
		require.NoError(t, err)
		for _, v := range c.Visits[:3] {
			_, err = s.Apply(ctx, v.Examiner, storage.VisitEdits(exam.Visit{}, v)...)
			require.NoError(t, err)
		}
	}
	a := p.Cases[0]
	renamed := a.Patient
	renamed.Note = "shy of men"
	_, err = s.Apply(ctx, "T. Lindqvist", storage.PatientEdits(a.Patient, renamed)...)
	require.NoError(t, err)
	v := a.Visits[0]
	_, err = s.Apply(ctx, "A. Moor", storage.AmendEdits(v, "read from the film", storage.FindingEdit(v.Patient, v.ID, exam.Finding{Item: exam.Patellar, Site: exam.PelvicLeft, Result: exam.Graded(3)}))...)
	require.NoError(t, err)
	return s
}

func exportOf(t testing.TB, s *storage.Store, history bool, ids ...exam.ID) []byte {
	t.Helper()
	r, err := ReadRecords(context.Background(), s, at(0), history, ids...)
	require.NoError(t, err)
	var buf bytes.Buffer
	require.NoError(t, EncodeRecords(&buf, r))
	return buf.Bytes()
}

// TestExportImportExport: records with their ids, history and conflicts leave one store, go
// into an empty one and leave it again as the same bytes.
func TestExportImportExport(t *testing.T) {
	ctx := context.Background()
	from := someStore(t)
	first := exportOf(t, from, true)
	records, warnings, err := DecodeRecords(bytes.NewReader(first))
	require.NoError(t, err)
	require.Empty(t, warnings)
	// Another device changed the same field at the same time: a conflict that must travel.
	var base change.Change
	for _, c := range records.Changes {
		if c.Kind == change.KindPatient && c.Field == "breed" {
			base = c
		}
	}
	require.False(t, base.ID.IsZero())
	rival := base
	rival.ID, rival.Time, rival.Supersedes = change.NewID(), base.Time+1, nil
	rival.Stream.Device[0] ^= 0xFF
	rival.Value = append([]byte(nil), base.Value...)
	rival.Value[len(rival.Value)-1] ^= 1
	records.Changes = append(records.Changes, rival)

	middle := storagetest.Open(t)
	added, err := AddRecords(ctx, middle, "A. Moor", records, nil)
	require.NoError(t, err)
	assert.True(t, added.History)
	assert.Len(t, added.Warnings, 1, "the file's list of animals is from before the rival entry")
	assert.Equal(t, len(records.Changes), added.Changes)
	got, err := middle.Patient(base.Patient)
	require.NoError(t, err)
	require.Len(t, got.Conflicts, 1, "the conflict is shown")
	assert.Empty(t, got.Missing, "nothing is said to be missing")
	want, err := from.History(base.Patient)
	require.NoError(t, err)
	have, err := middle.History(base.Patient)
	require.NoError(t, err)
	require.Len(t, have, len(want)+1)
	for i, e := range want {
		found := false
		for _, h := range have {
			found = found || h.Field == e.Field && h.Value == e.Value && h.Examiner == e.Examiner && h.At.Equal(e.At) && h.Reason == e.Reason
		}
		assert.True(t, found, "entry %d of the history: %+v", i, e)
	}

	second := exportOf(t, middle, true)
	again, _, err := DecodeRecords(bytes.NewReader(second))
	require.NoError(t, err)
	last := storagetest.Open(t)
	added, err = AddRecords(ctx, last, "A. Moor", again, nil)
	require.NoError(t, err)
	assert.Empty(t, added.Warnings)
	assert.Equal(t, string(second), string(exportOf(t, last, true)), "export, import, export: the same bytes")
}

// TestErasedOwnersStayErased: contact data that were erased at the owner's request do not
// leave, nor come back by an import.
func TestErasedOwnersStayErased(t *testing.T) {
	ctx := context.Background()
	s := someStore(t)
	p := demoPractice().Cases[0].Patient
	require.NoError(t, s.EraseOwner(ctx, "A. Moor", p.ID, "asked by letter"))
	data := exportOf(t, s, true)
	assert.NotContains(t, string(data), p.Owner.Name)
	r, _, err := DecodeRecords(bytes.NewReader(data))
	require.NoError(t, err)
	assert.NotContains(t, r.OwnerKeys, p.ID)
	other := storagetest.Open(t)
	_, err = AddRecords(ctx, other, "A. Moor", r, nil)
	require.NoError(t, err)
	got, err := other.Patient(p.ID)
	require.NoError(t, err)
	assert.True(t, got.Patient.Owner.Empty())
	assert.Equal(t, string(data), string(exportOf(t, other, true)))
}

// TestImportIntoAStoreWithAnimals adds what is new and leaves what is there alone.
func TestImportIntoAStoreWithAnimals(t *testing.T) {
	ctx := context.Background()
	s := someStore(t)
	p := demoPractice()
	before := exportOf(t, s, false)
	r := Records{Animals: []Animal{{p.Cases[0].Patient, p.Cases[0].Visits[:5]}, {p.Cases[2].Patient, p.Cases[2].Visits[:2]}}}
	r.Animals[0].Patient.Breed = "something else"
	steps := 0
	added, err := AddRecords(ctx, s, "A. Moor", r, func(done, total int) { steps++; assert.Equal(t, 9, total) })
	require.NoError(t, err)
	assert.Equal(t, 9, steps)
	assert.Equal(t, []int{1, 4, 3}, []int{added.Patients, added.Visits, added.Known})
	got, err := s.Patient(p.Cases[0].Patient.ID)
	require.NoError(t, err)
	assert.Equal(t, p.Cases[0].Patient.Breed, got.Patient.Breed, "a known animal keeps its data")
	require.Len(t, got.Visits, 5)
	diff := cmp.Diff(p.Cases[0].Visits[4].Findings, got.Visits[4].Findings, sameRecords)
	assert.Empty(t, diff)
	again, err := AddRecords(ctx, s, "A. Moor", r, nil)
	require.NoError(t, err)
	assert.Equal(t, []int{0, 0, 7}, []int{again.Patients, again.Visits, again.Known}, "twice is once")
	r.Animals[0].Patient.Species = exam.Cat
	_, err = AddRecords(ctx, s, "A. Moor", r, nil)
	assert.ErrorContains(t, err, "is a dog here and a cat in the file")
	assert.NotEqual(t, string(before), string(exportOf(t, s, false)))
}

// TestExportOfOneAnimal holds nothing of the others.
func TestExportOfOneAnimal(t *testing.T) {
	s := someStore(t)
	p := demoPractice()
	data := exportOf(t, s, true, p.Cases[0].Patient.ID)
	assert.Contains(t, string(data), p.Cases[0].Patient.Name)
	assert.NotContains(t, string(data), p.Cases[1].Patient.ID.String())
	_, err := ReadRecords(context.Background(), s, at(0), true, exam.ID{9})
	assert.ErrorIs(t, err, storage.ErrNotFound)
}

// TestFHIRFromAStore: what a store holds goes out as a valid bundle and into another store.
func TestFHIRFromAStore(t *testing.T) {
	ctx := context.Background()
	s := someStore(t)
	r, err := ReadRecords(ctx, s, at(0), false)
	require.NoError(t, err)
	var buf bytes.Buffer
	require.NoError(t, EncodeFHIR(&buf, r, nil))
	require.NoError(t, validFHIR(buf.Bytes()))
	in, _, err := DecodeFHIR(bytes.NewReader(buf.Bytes()))
	require.NoError(t, err)
	other := storagetest.Open(t)
	added, err := AddRecords(ctx, other, "A. Moor", in, nil)
	require.NoError(t, err)
	assert.Equal(t, 2, added.Patients)
	assert.Equal(t, 6, added.Visits)
	back, err := ReadRecords(ctx, other, at(0), false)
	require.NoError(t, err)
	for i := range r.Animals {
		for k := range r.Animals[i].Visits {
			r.Animals[i].Visits[k].Amendments = nil // become entries of their own
		}
	}
	for i := range back.Animals {
		for k := range back.Animals[i].Visits {
			back.Animals[i].Visits[k].Amendments = nil
		}
	}
	assert.Empty(t, cmp.Diff(r.Animals, back.Animals, sameRecords))
}
