package storage_test

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk/disktest"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

func TestOwnerIsErasedOnRequest(t *testing.T) {
	s, dir := storagetest.OpenDir(t)
	p, q := samplePatient(), samplePatient()
	q.Owner.Name = "Someone Else"
	apply(t, s, storage.PatientEdits(exam.Patient{}, p)...)
	apply(t, s, storage.PatientEdits(exam.Patient{}, q)...)
	journal := func() string {
		es, err := os.ReadDir(filepath.Join(dir, "journal"))
		require.NoError(t, err)
		return filepath.Join(dir, "journal", es[0].Name())
	}
	require.FileExists(t, journal())
	require.Zero(t, apply(t, s, storage.PatientEdits(exam.Patient{ID: p.ID}, exam.Patient{ID: p.ID, Owner: p.Owner})...), "the same contact says nothing new")
	require.NoError(t, s.EraseOwner(ctx, "R. Okafor", p.ID, "asked by letter"))
	look := func() {
		t.Helper()
		r, err := s.Patient(p.ID)
		require.NoError(t, err)
		require.True(t, r.Patient.Owner.Empty())
		require.Equal(t, p.Name, r.Patient.Name, "the animal's record stays")
		h, err := s.History(p.ID)
		require.NoError(t, err)
		told := false
		of, err := s.Fields(storage.Kind(change.KindOwner), exam.ID{}, exam.ID{})
		require.NoError(t, err)
		require.Contains(t, of, "erased/"+p.ID.String(), "an entry says that it was erased")
		for _, e := range h {
			require.NotContains(t, e.Value+e.Before, p.Owner.Name)
			require.NotContains(t, e.Value+e.Before, p.Owner.Phone)
			told = told || (e.Field == "owner" && e.Value == "")
		}
		require.True(t, told, "the history of the animal shows that the field was emptied")
		rows, err := s.Caseload(ctx)
		require.NoError(t, err)
		for _, row := range rows {
			require.NotEqual(t, p.Owner.Name, row.Owner)
			if row.ID == q.ID {
				require.Equal(t, "Someone Else", row.Owner)
			}
		}
		r, err = s.Patient(q.ID)
		require.NoError(t, err)
		require.Equal(t, q.Owner, r.Patient.Owner, "another owner is not touched")
	}
	look()
	_, err := s.Apply(ctx, "A", storage.PatientEdits(exam.Patient{ID: p.ID}, exam.Patient{ID: p.ID, Owner: p.Owner})...)
	require.ErrorIs(t, err, storage.ErrErased)
	require.NoError(t, s.Flush())
	look()
	require.NoError(t, s.Close())
	require.NoError(t, storage.Rebuild(ctx, dir, storagetest.Options()))
	s, err = storage.Open(dir, storagetest.Options())
	require.NoError(t, err)
	look()
	require.NoError(t, s.Close())
	b, err := os.ReadFile(filepath.Join(dir, "owners.keys"))
	require.NoError(t, err)
	require.Equal(t, 128, len(b), "one key is left")
}

func TestOwnerKeyTravels(t *testing.T) {
	s := storagetest.Open(t)
	p := samplePatient()
	apply(t, s, storage.PatientEdits(exam.Patient{}, p)...)
	sealed, ok, err := s.OwnerKey(p.ID)
	require.NoError(t, err)
	require.True(t, ok)
	require.NoError(t, s.AddOwnerKey(p.ID, sealed))
	_, ok, err = s.OwnerKey(storage.NewID())
	require.NoError(t, err)
	require.False(t, ok)
	// Two devices made a key each while they were apart: both are kept.
	other := s.Bag().Ring.SealOwnerKey(p.ID, key.NewSecret())
	require.NoError(t, s.AddOwnerKey(p.ID, other))
	n := 0
	turn, err := s.OwnerKeys(ctx, 0, func(owner exam.ID, _ key.OwnerKey) error {
		require.Equal(t, p.ID, owner)
		n++
		return nil
	})
	require.NoError(t, err)
	require.Equal(t, 2, n)
	_, err = s.OwnerKeys(ctx, turn, func(exam.ID, key.OwnerKey) error { t.Error("nothing is new"); return nil })
	require.NoError(t, err)
	r, err := s.Patient(p.ID)
	require.NoError(t, err)
	require.Equal(t, p.Owner, r.Patient.Owner)
	sealed[20] ^= 1
	require.Error(t, s.AddOwnerKey(p.ID, sealed))
	require.NoError(t, s.EraseOwner(ctx, "A", p.ID, ""))
	_, ok, err = s.OwnerKey(p.ID)
	require.NoError(t, err)
	require.False(t, ok)
}

// A damaged key file costs contact data only, is named by place, and never ends in another
// owner's data being shown.
func TestDamagedOwnerKeys(t *testing.T) {
	rng := seeded(t)
	master := filepath.Join(t.TempDir(), "p")
	s, err := storage.Create(master, storagetest.Options())
	require.NoError(t, err)
	var ps []exam.Patient
	for i := range 4 {
		p := samplePatient()
		p.Owner.Name = strings.Repeat("x", i+1)
		apply(t, s, storage.PatientEdits(exam.Patient{}, p)...)
		ps = append(ps, p)
	}
	require.NoError(t, s.Close())
	n := flips()
	t.Logf("%d times", n)
	for range n {
		dir := copyDir(t, master)
		name := filepath.Join(dir, "owners.keys")
		b, err := os.ReadFile(name)
		require.NoError(t, err)
		at := rng.IntN(len(b))
		if rng.IntN(3) == 0 {
			b = b[:at]
		} else {
			b[at] ^= 1 << rng.IntN(8)
		}
		require.NoError(t, os.WriteFile(name, b, 0o600))
		if rng.IntN(2) == 0 {
			require.NoError(t, os.Remove(filepath.Join(dir, "index.db")))
		}
		found, err := storage.Check(ctx, dir, storagetest.Options())
		require.NoError(t, err)
		if at%128 != 0 || len(b) == 4*128 {
			require.NotEmpty(t, found)
			require.Equal(t, "owners.keys", found[0].File)
		}
		s, err := storage.Open(dir, storagetest.Options())
		require.NoError(t, err)
		lost := 0
		for _, p := range ps {
			r, err := s.Patient(p.ID)
			require.NoError(t, err)
			require.Equal(t, p.Name, r.Patient.Name)
			if r.Patient.Owner.Empty() {
				lost++
			} else {
				require.Equal(t, p.Owner, r.Patient.Owner)
			}
		}
		require.LessOrEqual(t, lost, 4)
		p := samplePatient()
		apply(t, s, storage.PatientEdits(exam.Patient{}, p)...)
		r, err := s.Patient(p.ID)
		require.NoError(t, err)
		require.Equal(t, p.Owner, r.Patient.Owner)
		require.NoError(t, s.Close())
		require.NoError(t, os.RemoveAll(dir))
	}
}

// The key of a new owner's data is on the disk before the entry that needs it, whatever operation fails.
func TestEveryOperationOfANewOwnerFails(t *testing.T) {
	master, _, _ := small(t)
	for n := 1; ; n++ {
		dir := copyDir(t, master)
		d := disktest.New()
		s, err := storage.Open(dir, on(d))
		require.NoError(t, err)
		p := samplePatient()
		es := storage.PatientEdits(exam.Patient{}, p)
		before := d.Ops()
		d.FailAt(n, disktest.ErrBroken, true)
		if _, err = s.Apply(ctx, "A", es...); err != nil {
			require.ErrorIs(t, err, disktest.ErrBroken)
			d.FailAt(0, nil, false)
			apply(t, s, es...)
		}
		done := d.Ops()-before < n
		d.FailAt(0, nil, false)
		require.NoError(t, s.Close())
		s, err = storage.Open(dir, storagetest.Options())
		require.NoError(t, err)
		r, err := s.Patient(p.ID)
		require.NoError(t, err)
		require.Equal(t, p.Owner, r.Patient.Owner, "operation %d", n)
		require.NoError(t, s.Close())
		storagetest.Check(t, dir)
		if done {
			return
		}
	}
}

// The index is damaged under an open store: it is built anew, and nobody notices but by the notice.
func TestIndexIsDamagedWhileOpen(t *testing.T) {
	if checked {
		t.Skip("see checked")
	}
	for _, what := range []string{"read", "write"} {
		t.Run(what, func(t *testing.T) {
			dir, patient, visit := small(t)
			var said []string
			o := storagetest.Options()
			o.Notice = func(w string) { said = append(said, w) }
			s, err := storage.Open(dir, o)
			require.NoError(t, err)
			f, err := os.OpenFile(filepath.Join(dir, "index.db"), os.O_RDWR, 0)
			require.NoError(t, err)
			size, err := f.Seek(0, 2)
			require.NoError(t, err)
			for at := int64(8192); at < size; at += 1024 { // all but the two meta pages
				_, err = f.WriteAt([]byte{0xff, 0xff, 0xff}, at+100)
				require.NoError(t, err)
			}
			require.NoError(t, f.Close())
			if what == "write" {
				apply(t, s, storage.FindingEdit(patient, visit, finding(cells[0], 2, "7")))
			}
			r, err := s.Patient(patient)
			require.NoError(t, err)
			require.Len(t, r.Visits, 1)
			require.Contains(t, strings.Join(said, "\n"), "set aside")
			apply(t, s, storage.FindingEdit(patient, visit, finding(cells[1], 2, "8")))
			require.NoError(t, s.Close())
			storagetest.Check(t, dir)
			s, err = storage.Open(dir, o)
			require.NoError(t, err)
			v, err := s.Visit(visit)
			require.NoError(t, err)
			require.Equal(t, 8, notes(v)[cells[1]])
			require.NoError(t, s.Close())
		})
	}
}
