package backup_test

import (
	"archive/tar"
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"
	"time"

	"filippo.io/age"
	"github.com/klauspost/compress/zstd"
	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/backup"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/share"
)

var ctx = context.Background()

func keys(t testing.TB) ([]age.Recipient, []age.Identity) {
	id, err := age.GenerateX25519Identity()
	require.NoError(t, err)
	return []age.Recipient{id.Recipient()}, []age.Identity{id}
}

func add(t testing.TB, s *storage.Store, name string) {
	p := exam.Patient{ID: storage.NewID(), Name: name, Species: exam.Dog}
	_, err := s.Apply(ctx, "R. Okafor", storage.PatientEdits(exam.Patient{ID: p.ID}, p)...)
	require.NoError(t, err)
}

func names(t testing.TB, s *storage.Store) map[string]bool {
	cs, err := s.Caseload(ctx)
	require.NoError(t, err)
	out := map[string]bool{}
	for _, c := range cs {
		out[c.Name] = true
	}
	return out
}

func TestBackupIsRestoredAndRejoins(t *testing.T) {
	to, ids := keys(t)
	folder, stick := t.TempDir(), t.TempDir()
	s, _ := storagetest.OpenDir(t)
	sh, _, err := share.Open(ctx, s, share.Options{})
	require.NoError(t, err)
	for i := range 20 {
		add(t, s, fmt.Sprint("before ", i))
	}
	file, err := backup.Make(ctx, s, folder, to, ids, backup.Options{})
	require.NoError(t, err)
	add(t, s, "after")
	_, err = sh.Folder(ctx, stick, nil)
	require.NoError(t, err)

	dir := filepath.Join(t.TempDir(), "restored")
	c, err := backup.Restore(ctx, file, ids, dir, storagetest.Options(), backup.Options{})
	require.NoError(t, err)
	require.Equal(t, s.Bag().Practice.String(), c.Practice)
	storagetest.Check(t, dir)
	r, err := storage.Open(dir, storagetest.Options())
	require.NoError(t, err)
	defer r.Close()
	require.Len(t, names(t, r), 20)
	require.NotEqual(t, s.Incarnation(), r.Incarnation(), "no number may be used again")
	rs, recovery, err := share.Open(ctx, r, share.Options{})
	require.NoError(t, err)
	require.Nil(t, recovery)
	add(t, r, "on the restored one")
	for range 2 {
		rep, err := rs.Folder(ctx, stick, nil)
		require.NoError(t, err)
		require.Empty(t, rep.Forks)
		_, err = sh.Folder(ctx, stick, nil)
		require.NoError(t, err)
	}
	require.Equal(t, names(t, s), names(t, r))
	require.Len(t, names(t, r), 22)
}

func TestNothingIsLeftAfterAFailure(t *testing.T) {
	to, _ := keys(t)
	_, others := keys(t)
	s := storagetest.Open(t)
	folder := t.TempDir()
	_, err := backup.Make(ctx, s, folder, to, others, backup.Options{})
	require.ErrorContains(t, err, "reading it back")
	es, err := os.ReadDir(folder)
	require.NoError(t, err)
	require.Empty(t, es)
	cancelled, cancel := context.WithCancel(ctx)
	cancel()
	to, ids := keys(t)
	_, err = backup.Make(cancelled, s, folder, to, ids, backup.Options{})
	require.ErrorIs(t, err, context.Canceled)
	es, _ = os.ReadDir(folder)
	require.Empty(t, es)
}

func TestDamagedBackupsAreRefusedAndRestoreNothing(t *testing.T) {
	to, ids := keys(t)
	folder := t.TempDir()
	s := storagetest.Open(t)
	add(t, s, "Bramble")
	file, err := backup.Make(ctx, s, folder, to, ids, backup.Options{})
	require.NoError(t, err)
	whole, err := os.ReadFile(file)
	require.NoError(t, err)
	seed := rand.Uint64()
	t.Logf("seed %d, %d bytes", seed, len(whole))
	rng := rand.New(rand.NewPCG(seed, 1))
	n := 200
	if os.Getenv("CORDWALK_SOAK") == "1" {
		n = 10_000
	}
	bad := filepath.Join(t.TempDir(), "bad.age")
	dir := filepath.Join(t.TempDir(), "restored")
	for i := range n {
		b := bytes.Clone(whole)
		if i%4 == 0 {
			b = b[:rng.IntN(len(b))]
		} else {
			b[rng.IntN(len(b))] ^= 1 << rng.IntN(8)
		}
		require.NoError(t, os.WriteFile(bad, b, 0o600))
		_, err := backup.Verify(ctx, bad, ids, backup.Options{})
		require.Error(t, err)
		if i%20 == 0 {
			_, err = backup.Extract(ctx, bad, ids, dir, backup.Options{})
			require.Error(t, err)
			_, err = os.Stat(dir)
			require.ErrorIs(t, err, fs.ErrNotExist)
			_, err = os.Stat(dir + ".new")
			require.ErrorIs(t, err, fs.ErrNotExist)
		}
	}
	_, wrong := keys(t)
	_, err = backup.Verify(ctx, file, wrong, backup.Options{})
	require.ErrorIs(t, err, change.ErrSealed)
}

// Whoever has the recipient can seal anything: names with tricks in them restore nothing.
func TestHostileArchives(t *testing.T) {
	to, ids := keys(t)
	build := func(name string, typ byte, size int64, content io.Reader) string {
		file := filepath.Join(t.TempDir(), "hostile.age")
		f, err := os.Create(file)
		require.NoError(t, err)
		w, err := age.Encrypt(f, to...)
		require.NoError(t, err)
		z, err := zstd.NewWriter(w)
		require.NoError(t, err)
		a := tar.NewWriter(z)
		require.NoError(t, a.WriteHeader(&tar.Header{Name: name, Typeflag: typ, Size: size, Linkname: "/etc/passwd", Mode: 0o600}))
		if content != nil {
			_, err = io.Copy(a, content)
			require.NoError(t, err)
		}
		require.NoError(t, errors.Join(a.Close(), z.Close(), w.Close(), f.Close()))
		return file
	}
	base := t.TempDir()
	for _, tt := range []struct {
		name string
		typ  byte
	}{{"../evil", tar.TypeReg}, {"/evil", tar.TypeReg}, {"a/../../evil", tar.TypeReg}, {"a/b/c", tar.TypeReg}, {"x\\..\\evil", tar.TypeReg}, {"link", tar.TypeSymlink}, {"hard", tar.TypeLink}, {"dir", tar.TypeDir}, {"UPPER", tar.TypeReg}, {".hidden", tar.TypeReg}, {"", tar.TypeReg}} {
		file := build(tt.name, tt.typ, 0, nil)
		dir := filepath.Join(base, "restored")
		_, err := backup.Extract(ctx, file, ids, dir, backup.Options{})
		require.ErrorIs(t, err, change.ErrMalformed, tt.name)
		es, err := os.ReadDir(base)
		require.NoError(t, err)
		require.Empty(t, es)
	}
	// A list of files of a gibibyte is not read into memory.
	_, err := backup.Verify(ctx, build("manifest.json", tar.TypeReg, 1<<30, io.LimitReader(zeros{}, 1<<30)), ids, backup.Options{})
	require.ErrorIs(t, err, change.ErrMalformed)
}

type zeros struct{}

func (zeros) Read(b []byte) (int, error) { clear(b); return len(b), nil }

// The passphrase is forgotten and every device is lost: the backup, sealed to the recovery sheet, and the
// sheet are enough.
func TestRecoverySheetOpensABackup(t *testing.T) {
	folder := t.TempDir()
	so := storagetest.Options()
	so.Unlock = storage.Unlock{Passphrase: []byte("forgotten")}
	dir := filepath.Join(t.TempDir(), "practice")
	s, err := storage.Create(dir, so)
	require.NoError(t, err)
	_, sheet, err := share.Open(ctx, s, share.Options{})
	require.NoError(t, err)
	add(t, s, "Bramble")
	file, err := backup.Make(ctx, s, folder, []age.Recipient{sheet.Recipient()}, []age.Identity{sheet}, backup.Options{})
	require.NoError(t, err)
	require.NoError(t, s.Close())

	dir2 := filepath.Join(t.TempDir(), "new")
	so.Unlock = storage.Unlock{Passphrase: []byte("new one")}
	_, err = backup.Extract(ctx, file, []age.Identity{sheet}, dir2, backup.Options{})
	require.NoError(t, err)
	require.NoError(t, share.Recover(dir2, so, sheet, "new laptop", share.Options{}))
	r, err := storage.Open(dir2, so)
	require.NoError(t, err)
	defer r.Close()
	require.True(t, names(t, r)["Bramble"])
	sh, _, err := share.Open(ctx, r, share.Options{})
	require.NoError(t, err)
	require.True(t, sh.Member())
	require.Len(t, sh.List.Devices(), 2)
	_, err = key.NewRing(sh.Bag().Ring.Epochs()...)
	require.NoError(t, err)
}

func TestExpired(t *testing.T) {
	start := time.Date(2026, 1, 1, 22, 0, 0, 0, time.UTC)
	var names []string
	for d := range 500 {
		names = append(names, backup.Name(start.AddDate(0, 0, d)), backup.Name(start.AddDate(0, 0, d).Add(time.Hour)))
	}
	names = append(names, "holiday.jpg", "cordwalk-x.backup.age")
	gone := backup.Expired(names)
	require.NotContains(t, gone, "holiday.jpg")
	left := len(names) - 2 - len(gone)
	require.LessOrEqual(t, left, 7+5+12)
	require.GreaterOrEqual(t, left, 12+5)
	require.NotContains(t, gone, backup.Name(start.AddDate(0, 0, 499).Add(time.Hour)), "the newest stays")
	require.Equal(t, []string{backup.Name(start.AddDate(0, 0, 499))}, backup.Expired(names[len(names)-4:]), "the earlier one of the same day")
}

func TestTidyKeepsAllWhenTheNewestIsDamaged(t *testing.T) {
	to, ids := keys(t)
	folder := t.TempDir()
	s := storagetest.Open(t)
	at := time.Date(2026, 3, 2, 8, 0, 0, 0, time.UTC)
	var last string
	for i := range 3 {
		o := backup.Options{Now: func() time.Time { return at.Add(time.Duration(i) * time.Hour) }}
		var err error
		last, err = backup.Make(ctx, s, folder, to, ids, o)
		require.NoError(t, err)
	}
	require.NoError(t, os.Truncate(last, 100))
	require.ErrorContains(t, backup.Tidy(ctx, folder, ids, backup.Options{}), "no older one was removed")
	es, _ := os.ReadDir(folder)
	require.Len(t, es, 3)
	require.NoError(t, os.Remove(last))
	require.NoError(t, backup.Tidy(ctx, folder, ids, backup.Options{}))
	es, _ = os.ReadDir(folder)
	require.Len(t, es, 1)
}
