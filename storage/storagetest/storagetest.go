// Package storagetest opens stores for tests and checks them when the test ends.
package storagetest

import (
	"context"
	"path/filepath"
	"testing"

	"cordwalk.example/cordwalk/storage"
)

// Options are those that Open uses: no protection.
func Options() storage.Options {
	return storage.Options{Unlock: storage.Unlock{KeyInStore: true}, Program: "test"}
}

// Open makes an empty practice in a folder of the test. When the test ends the store is closed,
// if the test has not done so, and everything in it is checked.
func Open(t testing.TB) *storage.Store {
	t.Helper()
	s, _ := OpenDir(t)
	return s
}

// OpenDir is Open and tells the folder as well.
func OpenDir(t testing.TB) (*storage.Store, string) {
	t.Helper()
	dir := filepath.Join(t.TempDir(), "practice")
	s, err := storage.Create(dir, Options())
	if err != nil {
		t.Fatalf("making a practice: %v", err)
	}
	t.Cleanup(func() {
		if err := s.Close(); err != nil {
			t.Errorf("closing the practice: %v", err)
		}
		Check(t, dir)
	})
	return s, dir
}

// Check reports everything that is wrong in a store as errors of the test.
func Check(t testing.TB, dir string) {
	t.Helper()
	ps, err := storage.Check(context.Background(), dir, Options())
	if err != nil {
		t.Errorf("checking the practice: %v", err)
	}
	for _, p := range ps {
		if !p.Minor {
			t.Errorf("checking the practice: %v", p)
		}
	}
}
