package backup_test

import (
	"errors"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk/disktest"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/attach"
	"cordwalk.example/cordwalk/sync/backup"
)

// The n-th file operation of a backup fails, for every n, once and for good: an error is told, no file that is called a
// backup is not one, and the next backup succeeds.
func TestEveryOperationOfABackupFails(t *testing.T) {
	to, ids := keys(t)
	s := storagetest.Open(t)
	add(t, s, "Bramble")
	at := time.Date(2026, 3, 2, 8, 0, 0, 0, time.UTC)
	for _, forever := range []bool{false, true} {
		for n := 1; ; n++ {
			folder := t.TempDir()
			d := disktest.New()
			d.FailAt(n, syscall.EIO, forever)
			file, err := backup.Make(ctx, s, folder, to, ids, backup.Options{FS: d, Now: func() time.Time { return at }})
			if d.Failures() == 0 {
				require.NoError(t, err)
				require.Greater(t, n, 10)
				break
			}
			if err != nil {
				require.ErrorIs(t, err, syscall.EIO, "operation %d", n)
				require.Empty(t, file)
			}
			es, derr := os.ReadDir(folder)
			require.NoError(t, derr)
			for _, e := range es {
				if strings.HasSuffix(e.Name(), ".backup.age") {
					_, verr := backup.Verify(ctx, filepath.Join(folder, e.Name()), ids, backup.Options{})
					require.NoError(t, verr, "operation %d", n)
				}
			}
			file, err = backup.Make(ctx, s, folder, to, ids, backup.Options{Now: func() time.Time { return at.Add(time.Hour) }})
			require.NoError(t, err, "operation %d", n)
			_, err = backup.Verify(ctx, file, ids, backup.Options{})
			require.NoError(t, err)
			require.NoError(t, backup.Tidy(ctx, folder, ids, backup.Options{}))
		}
	}
}

// The same for a restore: the folder has its name only when it is a whole store with a name of its own to write
// under, and the next restore succeeds.
func TestEveryOperationOfARestoreFails(t *testing.T) {
	to, ids := keys(t)
	folder := t.TempDir()
	s := storagetest.Open(t)
	add(t, s, "Bramble")
	file, err := backup.Make(ctx, s, folder, to, ids, backup.Options{})
	require.NoError(t, err)
	step := 5 // in short runs every fifth operation, from any of the first five
	if os.Getenv("CORDWALK_SOAK") == "1" {
		step = 1
	}
	first := 1 + rand.IntN(step)
	t.Logf("operations %d, %d, …", first, first+step)
	for _, forever := range []bool{false, true} {
		for n := first; ; n += step {
			dir := filepath.Join(t.TempDir(), "restored")
			d := disktest.New()
			d.FailAt(n, syscall.EIO, forever)
			so := storagetest.Options()
			so.Files = d
			_, err := backup.Restore(ctx, file, ids, dir, so, backup.Options{FS: d})
			if d.Failures() == 0 {
				require.NoError(t, err)
				require.Greater(t, n, 30)
				break
			}
			if _, serr := os.Stat(dir); errors.Is(serr, os.ErrNotExist) {
				require.Error(t, err, "operation %d", n)
				_, err = backup.Restore(ctx, file, ids, dir, storagetest.Options(), backup.Options{})
				require.NoError(t, err, "operation %d", n)
			}
			r, err := storage.Open(dir, storagetest.Options())
			require.NoError(t, err, "operation %d", n)
			require.True(t, names(t, r)["Bramble"])
			require.NotEqual(t, s.Incarnation(), r.Incarnation(), "operation %d", n)
			require.NoError(t, r.Close())
		}
	}
}

func TestDue(t *testing.T) {
	zone := time.FixedZone("", 2*3600)
	now := time.Date(2026, 3, 2, 0, 30, 0, 0, zone)
	name := func(at time.Time) string { return backup.Name(at) }
	for _, tt := range []struct {
		what  string
		names []string
		due   bool
	}{
		{"nothing there", nil, true},
		{"other files", []string{"holiday.jpg"}, true},
		{"one of an hour ago, yesterday here", []string{name(now.Add(-time.Hour))}, true},
		{"one of today", []string{name(now.Add(-time.Minute))}, false},
		{"one of later today, from a clock that was ahead", []string{name(now.Add(time.Hour))}, false},
		{"one of next year", []string{name(now.AddDate(1, 0, 0))}, true},
	} {
		require.Equal(t, tt.due, backup.Due(tt.names, now), tt.what)
	}
}

// Twenty days of a program that is started twice a day: one backup a day is made, and no more stay than are to be kept.
func TestScheduled(t *testing.T) {
	to, ids := keys(t)
	folder := t.TempDir()
	s := storagetest.Open(t)
	at := time.Date(2026, 3, 2, 8, 0, 0, 0, time.UTC)
	made := 0
	for range 20 {
		for range 2 {
			file, err := backup.Scheduled(ctx, s, folder, to, ids, backup.Options{Now: func() time.Time { return at }})
			require.NoError(t, err)
			if file != "" {
				made++
			}
			at = at.Add(3 * time.Hour)
		}
		at = at.Add(18 * time.Hour)
	}
	require.Equal(t, 20, made)
	es, err := os.ReadDir(folder)
	require.NoError(t, err)
	require.LessOrEqual(t, len(es), 7+5+12)
	require.GreaterOrEqual(t, len(es), 7)
}

// An owner's data are erased on request: the backups that were made before still hold the key, and say so.
func TestBackupsSayWhichErasedOwnersTheyHold(t *testing.T) {
	to, ids := keys(t)
	folder := t.TempDir()
	s := storagetest.Open(t)
	at := time.Date(2026, 3, 2, 8, 0, 0, 0, time.UTC)
	now := func() backup.Options {
		at = at.Add(time.Hour)
		return backup.Options{Now: func() time.Time { return at }}
	}
	p := exam.Patient{ID: storage.NewID(), Name: "Bramble", Species: exam.Dog, Owner: exam.Contact{Name: "N. Ashworth", Phone: "1"}}
	_, err := s.Apply(ctx, "R. Okafor", storage.PatientEdits(exam.Patient{ID: p.ID}, p)...)
	require.NoError(t, err)
	files, err := attach.Open(ctx, s, nil)
	require.NoError(t, err)
	other := storage.NewID() // only has an attachment
	_, err = files.Add(ctx, other, strings.NewReader("a photograph"))
	require.NoError(t, err)
	before, err := backup.Make(ctx, s, folder, to, ids, now())
	require.NoError(t, err)
	held, err := backup.Erased(ctx, s, folder, ids, backup.Options{})
	require.NoError(t, err)
	require.Empty(t, held, "nothing was erased yet")
	require.NoError(t, s.EraseOwner(ctx, "R. Okafor", p.ID, "asked for by telephone"))
	require.NoError(t, s.EraseOwner(ctx, "R. Okafor", other, "asked for by telephone"))
	require.NoError(t, files.Obey(ctx))
	_, err = backup.Make(ctx, s, folder, to, ids, now())
	require.NoError(t, err)
	held, err = backup.Erased(ctx, s, folder, ids, backup.Options{})
	require.NoError(t, err)
	require.Len(t, held, 1)
	require.Equal(t, before, held[0].File)
	require.ElementsMatch(t, []exam.ID{p.ID, other}, held[0].Owners)
	require.NoError(t, os.Truncate(before, 50))
	held, err = backup.Erased(ctx, s, folder, ids, backup.Options{})
	require.ErrorContains(t, err, "cannot be told")
	require.Empty(t, held)
}
