package main

import (
	"bytes"
	"context"
	"errors"
	"io"
	"os"
	"path/filepath"
	"testing"

	"cordwalk.example/cordwalk/app/sheet"
)

// TestCancelledExportLeavesNothing: an export that is cancelled half-way leaves neither a file nor
// a piece of one, and one that was there stays as it was.
func TestCancelledExportLeavesNothing(t *testing.T) {
	dir := t.TempDir()
	name := filepath.Join(dir, "findings.csv")
	half := func() error {
		ctx, cancel := context.WithCancel(context.Background())
		defer cancel()
		return writeWhole(name, func(w io.Writer) error {
			_, err := sheet.CSV(ctx, w, sheet.FindingsTable, sheet.TableOptions{Progress: func(done int) {
				if done == 3 {
					cancel()
				}
			}, Animals: func(yield func(sheet.Animal, error) bool) {
				for range 100 {
					if !yield(sheet.Animal{}, nil) {
						return
					}
				}
			}})
			return err
		})
	}
	if err := half(); !errors.Is(err, context.Canceled) {
		t.Fatalf("a cancelled export ends with %v", err)
	}
	if left, err := os.ReadDir(dir); err != nil || len(left) != 0 {
		t.Errorf("there is left: %v, %v", left, err)
	}
	if err := os.WriteFile(name, []byte("before"), 0o600); err != nil {
		t.Fatal(err)
	}
	if err := half(); !errors.Is(err, context.Canceled) {
		t.Fatalf("a cancelled export ends with %v", err)
	}
	if data, err := os.ReadFile(name); err != nil || !bytes.Equal(data, []byte("before")) {
		t.Errorf("the file that was there is %q, %v", data, err)
	}
}
