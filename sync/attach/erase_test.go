package attach_test

import (
	"bytes"
	"os"
	"path/filepath"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/attach"
	"cordwalk.example/cordwalk/sync/audit"
	"cordwalk.example/cordwalk/sync/backup"
	"cordwalk.example/cordwalk/sync/share"
	"cordwalk.example/cordwalk/sync/share/sharetest"
)

// An owner asks to be erased at one device. After one exchange of each nothing of it can be read at the other one, in the
// folder between them or in either journal; the backup made before says that it still holds it.
func TestErasedHereIsGoneThereAtTheNextContact(t *testing.T) {
	stick, backups := t.TempDir(), t.TempDir()
	a := sharetest.Found(t)
	b := sharetest.Join(t, a, "b")
	fa, fb := open(t, a), open(t, b)
	meet := func(shs ...*share.Share) {
		t.Helper()
		for _, sh := range shs {
			_, err := sh.Folder(ctx, stick, nil)
			require.NoError(t, err)
			sh.Settle()
		}
	}
	p := exam.Patient{ID: storage.NewID(), Name: "Bramble", Species: exam.Dog, Owner: exam.Contact{Name: "Ada Fennel", Phone: "0117 496"}}
	_, err := a.Apply(ctx, "R. Okafor", storage.PatientEdits(exam.Patient{ID: p.ID}, p)...)
	require.NoError(t, err)
	photo, err := fa.Add(ctx, p.ID, bytes.NewReader(content(70_000)))
	require.NoError(t, err)
	meet(a, b, a)
	r, err := b.Patient(p.ID)
	require.NoError(t, err)
	require.Equal(t, p.Owner, r.Patient.Owner, "the key of the contact data came with the exchange")
	_, err = read(fb, p.ID, photo)
	require.NoError(t, err)
	to, ids, err := b.BackupKeys()
	require.NoError(t, err)
	before, err := backup.Make(ctx, b.Store, backups, to, ids, backup.Options{Now: func() time.Time { return time.Now().Add(-time.Hour) }})
	require.NoError(t, err)

	require.NoError(t, fa.Erase(ctx, "R. Okafor", p.ID, "asked by letter"))
	meet(a, b)
	for name, sh := range map[string]*share.Share{"here": a, "there": b} {
		r, err := sh.Patient(p.ID)
		require.NoError(t, err)
		require.True(t, r.Patient.Owner.Empty(), name)
		require.Equal(t, "Bramble", r.Patient.Name, "the animal's record stays")
		rows, err := sh.Caseload(ctx)
		require.NoError(t, err)
		require.Empty(t, rows[0].Owner, name)
		h, err := sh.History(p.ID)
		require.NoError(t, err)
		for _, e := range h {
			require.NotContains(t, e.Value+e.Before, "Fennel", name)
		}
		keys, err := os.ReadFile(filepath.Join(sh.Dir(), storage.OwnersFile))
		require.NoError(t, err)
		require.Empty(t, keys, name)
		for _, dir := range []string{"files", "owners"} {
			es, err := os.ReadDir(filepath.Join(sh.Dir(), dir))
			require.NoError(t, err)
			require.Empty(t, es, name)
		}
		entries, err := audit.Read(ctx, sh.Store, time.Time{})
		require.NoError(t, err)
		var did []audit.Did
		for _, e := range entries {
			did = append(did, e.Did)
		}
		require.Contains(t, did, audit.Erased, name)
	}
	_, err = read(fb, p.ID, photo)
	require.ErrorIs(t, err, attach.ErrErased)
	es, err := os.ReadDir(filepath.Join(stick, "cordwalk-"+a.Bag().Practice.String(), "files"))
	require.NoError(t, err)
	require.Empty(t, es, "the folder between them holds nothing of it either")
	held, err := backup.Erased(ctx, b.Store, backups, ids, backup.Options{})
	require.NoError(t, err)
	require.Len(t, held, 1)
	require.Equal(t, before, held[0].File)
	require.Equal(t, []exam.ID{p.ID}, held[0].Owners)

	// A stick with an old copy of the key and the photo brings nothing back.
	require.NoError(t, os.MkdirAll(filepath.Join(stick, "cordwalk-"+a.Bag().Practice.String(), "files"), 0o700))
	old := filepath.Join(t.TempDir(), "restored")
	_, err = backup.Extract(ctx, before, ids, old, backup.Options{})
	require.NoError(t, err)
	for _, pattern := range []string{"files/*.att", "owners/*.owner"} {
		names, err := filepath.Glob(filepath.Join(old, pattern))
		require.NoError(t, err)
		require.Len(t, names, 1)
		data, err := os.ReadFile(names[0])
		require.NoError(t, err)
		require.NoError(t, os.WriteFile(filepath.Join(stick, "cordwalk-"+a.Bag().Practice.String(), "files", filepath.Base(names[0])), data, 0o600))
	}
	meet(b, a)
	r, err = b.Patient(p.ID)
	require.NoError(t, err)
	require.True(t, r.Patient.Owner.Empty())
	_, err = read(fb, p.ID, photo)
	require.ErrorIs(t, err, attach.ErrErased)
}
