// Package sharetest makes practices of several devices for tests.
package sharetest

import (
	"context"
	"path/filepath"
	"testing"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/carry"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/member"
	"cordwalk.example/cordwalk/sync/share"
)

const examiner = "R. Okafor"

func must(t testing.TB, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

// Found makes the first device of a practice. It is closed and checked when the test ends.
func Found(t testing.TB) *share.Share {
	t.Helper()
	s := storagetest.Open(t)
	sh, _, err := share.Open(context.Background(), s, share.Options{})
	must(t, err)
	return sh
}

// Join lets another device in, in two trips of a stick.
func Join(t testing.TB, by *share.Share, name string) *share.Share {
	t.Helper()
	ctx := context.Background()
	stick := t.TempDir()
	_, err := by.Folder(ctx, stick, nil)
	must(t, err)
	code, err := by.Invite(ctx, examiner, stick, time.Hour)
	must(t, err)
	letters, err := carry.Letters(disk.OS(), stick, ".invite")
	must(t, err)
	own, err := key.NewDevice()
	must(t, err)
	inc := change.NewIncarnation()
	j, err := member.Ask(letters[0].Data, code, own, name, inc)
	must(t, err)
	must(t, carry.LeaveLetter(disk.OS(), stick, carry.Letter{Practice: j.Practice(), Name: j.FileName(), Data: j.File()}))
	asked, _, err := by.Requests(ctx, stick)
	must(t, err)
	must(t, by.Admit(ctx, examiner, stick, asked[0]))
	_, err = by.Folder(ctx, stick, nil)
	must(t, err)
	dir := filepath.Join(t.TempDir(), "joined")
	sh, err := share.Join(ctx, dir, stick, j, inc, storagetest.Options(), share.Options{})
	must(t, err)
	t.Cleanup(func() {
		if err := sh.Close(); err != nil {
			t.Errorf("closing the practice of %s: %v", name, err)
		}
		storagetest.Check(t, dir)
	})
	return sh
}

// Add records a new patient.
func Add(t testing.TB, s *share.Share, name string) exam.ID {
	t.Helper()
	p := exam.Patient{ID: storage.NewID(), Name: name, Species: exam.Dog}
	_, err := s.Apply(context.Background(), examiner, storage.PatientEdits(exam.Patient{ID: p.ID}, p)...)
	must(t, err)
	return p.ID
}

// Names returns the names of all patients with how often each is there.
func Names(t testing.TB, s *share.Share) map[string]int {
	t.Helper()
	s.Settle()
	cs, err := s.Caseload(context.Background())
	must(t, err)
	out := map[string]int{}
	for _, c := range cs {
		out[c.Name]++
	}
	return out
}
