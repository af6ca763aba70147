package storage

import (
	"errors"
	"io/fs"
	"path/filepath"
	"testing"
)

func TestPeekSaysWhetherAPracticeIsProtected(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "practice")
	if _, err := Peek(dir, Options{}); !errors.Is(err, fs.ErrNotExist) {
		t.Errorf("an empty place: %v", err)
	}
	for name, u := range map[string]Unlock{"open": {KeyInStore: true}, "locked": {Passphrase: []byte("seven lame foxes")}} {
		dir := filepath.Join(t.TempDir(), name)
		s, err := Create(dir, Options{Unlock: u})
		if err != nil {
			t.Fatal(err)
		}
		got, err := Peek(dir, Options{})
		if err != nil || got.Protected != s.Protected() || got.Device != s.Device() {
			t.Errorf("%s: %+v, %v", name, got, err)
		}
		if err := s.Close(); err != nil {
			t.Fatal(err)
		}
	}
}
