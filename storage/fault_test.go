package storage_test

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk/disktest"
	"cordwalk.example/cordwalk/storage/storagetest"
)

// copyDir copies a closed store.
func copyDir(t testing.TB, from string) string {
	t.Helper()
	to := filepath.Join(t.TempDir(), "copy")
	require.NoError(t, os.CopyFS(to, os.DirFS(from)))
	return to
}

// small makes a closed store with one patient and one visit of a few findings.
func small(t testing.TB) (dir string, patient, visit exam.ID) {
	t.Helper()
	dir = filepath.Join(t.TempDir(), "practice")
	s, err := storage.Create(dir, storagetest.Options())
	require.NoError(t, err)
	p := samplePatient()
	v := sampleVisit(p.ID)
	_, err = s.Apply(ctx, "A", append(storage.PatientEdits(exam.Patient{}, p), storage.VisitEdits(exam.Visit{}, v)...)...)
	require.NoError(t, err)
	require.NoError(t, s.Close())
	return dir, p.ID, v.ID
}

// notes reads the number in the note of each cell.
func notes(v exam.Visit) map[exam.Key]int {
	m := map[exam.Key]int{}
	for _, f := range v.Findings {
		var n int
		if _, err := fmt.Sscan(f.Note, &n); err == nil {
			m[f.Key()] = n
		}
	}
	return m
}

// session opens a store, records findings, mends the disk where a save fails and saves again,
// and closes. It returns what was called saved, and whether the disk failed at all.
func session(t *testing.T, dir string, d *disktest.Disk, patient, visit exam.ID) map[exam.Key]int {
	t.Helper()
	saved := map[exam.Key]int{}
	s, err := storage.Open(dir, on(d))
	if err != nil {
		require.ErrorIs(t, err, disktest.ErrBroken)
		d.FailAt(0, nil, false)
		s, err = storage.Open(dir, on(d))
		require.NoError(t, err, "after the disk was mended")
	}
	for i := 1; i <= 8; i++ {
		k := cells[i%len(cells)]
		e := storage.FindingEdit(patient, visit, finding(k, int8(i%3), fmt.Sprintf("%d %0*d", i, 60*i, 0)))
		if _, err := s.Apply(ctx, "A", e); err != nil {
			require.ErrorIs(t, err, disktest.ErrBroken)
			v, verr := s.Visit(visit)
			if verr == nil {
				require.Less(t, notes(v)[k], i, "what was not saved is not shown as saved")
			}
			d.FailAt(0, nil, false)
			_, err = s.Apply(ctx, "A", e)
			require.NoError(t, err, "after the disk was mended")
		}
		saved[k] = i
		if i == 4 {
			_ = s.Flush() // the index may fail: it is tried again
		}
	}
	if err := s.Close(); err != nil {
		require.ErrorIs(t, err, disktest.ErrBroken)
	}
	return saved
}

func expectSaved(t *testing.T, dir string, patient, visit exam.ID, saved map[exam.Key]int) {
	t.Helper()
	s, err := storage.Open(dir, on(disktest.New()))
	require.NoError(t, err)
	r, err := s.Patient(patient)
	require.NoError(t, err)
	require.Empty(t, r.Conflicts)
	require.Empty(t, r.Missing)
	got := notes(r.Visits[0])
	for k, n := range saved {
		require.Equal(t, n, got[k], k.String())
	}
	require.NoError(t, s.Close())
	storagetest.Check(t, dir)
}

// The n-th operation of the disk fails, for every n, once and from then on.
func TestEveryOperationFails(t *testing.T) {
	master, patient, visit := small(t)
	for _, forever := range []bool{false, true} {
		for _, empty := range []bool{false, true} { // with an index, and with the index to be built
			last := 0
			for n := 1; ; n++ {
				dir := copyDir(t, master)
				if empty {
					require.NoError(t, os.Remove(filepath.Join(dir, "index.db")))
				}
				d := disktest.New()
				d.FailAt(n, disktest.ErrBroken, forever)
				saved := session(t, dir, d, patient, visit)
				d.FailAt(0, nil, false)
				if t.Failed() {
					t.Fatalf("operation %d failing, forever %v, without index %v", n, forever, empty)
				}
				expectSaved(t, dir, patient, visit, saved)
				if t.Failed() {
					t.Fatalf("operation %d failing, forever %v, without index %v", n, forever, empty)
				}
				require.NoError(t, os.RemoveAll(dir))
				if d.Ops() < n {
					last = n
					break
				}
			}
			t.Logf("%d operations, forever %v, without index %v", last-1, forever, empty)
			require.Greater(t, last, 20)
		}
	}
}

func TestEveryOperationOfCreateFails(t *testing.T) {
	for n := 1; ; n++ {
		dir := filepath.Join(t.TempDir(), "a", "b")
		d := disktest.New()
		d.FailAt(n, disktest.ErrBroken, true)
		s, err := storage.Create(dir, on(d))
		if err != nil {
			require.ErrorIs(t, err, disktest.ErrBroken, "operation %d", n)
			d.FailAt(0, nil, false)
			if s, err = storage.Create(dir, on(d)); errors.Is(err, os.ErrExist) {
				s, err = storage.Open(dir, on(d)) // it was made, only the answer got lost
			}
			require.NoError(t, err, "operation %d", n)
		}
		done := d.Ops() < n
		d.FailAt(0, nil, false)
		require.NoError(t, s.Close())
		storagetest.Check(t, dir)
		if done {
			return
		}
	}
}

func TestEveryOperationOfRebuildFails(t *testing.T) {
	master, patient, visit := small(t)
	for n := 1; ; n++ {
		dir := copyDir(t, master)
		d := disktest.New()
		d.FailAt(n, disktest.ErrBroken, n%2 == 0)
		err := storage.Rebuild(ctx, dir, on(d))
		done := d.Ops() < n
		if !done {
			if err != nil {
				require.ErrorIs(t, err, disktest.ErrBroken, "operation %d", n)
			}
		} else {
			require.NoError(t, err)
		}
		expectSaved(t, dir, patient, visit, nil)
		require.False(t, t.Failed(), "operation %d", n)
		require.NoError(t, os.RemoveAll(dir))
		if done {
			t.Logf("%d operations", n-1)
			return
		}
	}
}

func TestFullDisk(t *testing.T) {
	dir, patient, visit := small(t)
	d := disktest.New()
	s, err := storage.Open(dir, on(d))
	require.NoError(t, err)
	// Fill the room that is made ready, then the disk.
	d.Room(0)
	saved, note := map[exam.Key]int{}, strings.Repeat("x", 60000)
	full := false
	var i int
	for i = 1; i < 100; i++ {
		k := cells[i%len(cells)]
		_, err := s.Apply(ctx, "A", storage.FindingEdit(patient, visit, finding(k, 1, fmt.Sprint(i, " ", note))))
		if err != nil {
			require.ErrorIs(t, err, disktest.ErrFull)
			require.Contains(t, err.Error(), "the disk is full")
			full = true
			break
		}
		saved[k] = i
	}
	require.True(t, full, "the disk never filled")
	_, err = s.Apply(ctx, "A", storage.FindingEdit(patient, visit, finding(cells[0], 1, fmt.Sprint(i+1))))
	require.ErrorIs(t, err, disktest.ErrFull)
	r, err := s.Visit(visit)
	require.NoError(t, err)
	for k, n := range saved {
		require.Equal(t, n, notes(r)[k])
	}
	d.Room(-1)
	k := cells[0]
	_, err = s.Apply(ctx, "A", storage.FindingEdit(patient, visit, finding(k, 1, fmt.Sprint(i+2))))
	require.NoError(t, err)
	require.NoError(t, s.Close())
	s, err = storage.Open(dir, storagetest.Options())
	require.NoError(t, err)
	r, err = s.Visit(visit)
	require.NoError(t, err)
	require.Equal(t, i+2, notes(r)[k])
	require.NoError(t, s.Close())
	storagetest.Check(t, dir)
}

// Nothing is called saved before the sync of the journal has returned, and a slow disk does
// not keep anybody from reading.
func TestSavedMeansSynced(t *testing.T) {
	dir, patient, visit := small(t)
	d := disktest.New()
	var syncs atomic.Int64
	d.Synced = func(name string) {
		if strings.HasSuffix(name, ".seg") {
			syncs.Add(1)
		}
	}
	require.NoError(t, d.Record(dir))
	s, err := storage.Open(dir, on(d))
	require.NoError(t, err)
	for i := range 20 {
		before := syncs.Load()
		_, err := s.Apply(ctx, "A", storage.FindingEdit(patient, visit, finding(cells[i%len(cells)], 1, fmt.Sprint(i))))
		require.NoError(t, err)
		require.Equal(t, before+1, syncs.Load(), "one sync for each action, before it is called saved")
		// Whatever the disk may forget now, it is not this.
		n := 0
		require.NoError(t, d.Crashes(d.Events(), 4, seeded(t), func(c disktest.Crash) error {
			n++
			at := filepath.Join(t.TempDir(), "x")
			if err := c.Write(at); err != nil {
				return err
			}
			z, err := storage.Open(at, storagetest.Options())
			if err != nil {
				return err
			}
			defer z.Close()
			v, err := z.Visit(visit)
			require.NoError(t, err)
			require.Equal(t, i, notes(v)[cells[i%len(cells)]])
			return nil
		}))
		require.Equal(t, 1, n, "nothing is left to chance")
	}
	d.Slow(50 * time.Millisecond)
	done := make(chan error)
	go func() {
		_, err := s.Apply(ctx, "A", storage.FindingEdit(patient, visit, finding(cells[0], 2, "slow")))
		done <- err
	}()
	time.Sleep(10 * time.Millisecond)
	_, err = s.Visit(visit)
	require.NoError(t, err)
	select {
	case <-done:
		t.Error("the slow disk was not waited for")
	default:
	}
	require.NoError(t, <-done)
	require.NoError(t, s.Close())
}
