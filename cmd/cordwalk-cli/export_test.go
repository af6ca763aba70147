package main

import (
	"bytes"
	"context"
	"errors"
	"io"
	"os"
	"path/filepath"
	"regexp"
	"strings"
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

// TestRecordsGoRoundByTheCommand: what one practice exports and another imports is exported again as
// the same bytes, with ids, history and times, but for the moment it was made.
func TestRecordsGoRoundByTheCommand(t *testing.T) {
	dir := t.TempDir()
	do := func(args ...string) {
		t.Helper()
		var said bytes.Buffer
		if code := run(context.Background(), args, strings.NewReader(""), io.Discard, &said); code != 0 {
			t.Fatalf("%q ends with %d: %s", args, code, said.String())
		}
	}
	file := func(name string) string { return filepath.Join(dir, name) }
	do("--store", file("s"), "demo")
	do("--store", file("s"), "export", "json", "-o", file("first.json"))
	do("--store", file("t"), "--no-passphrase", "import", file("first.json"))
	do("--store", file("t"), "export", "json", "-o", file("second.json"))
	read := func(name string) string {
		data, err := os.ReadFile(file(name))
		if err != nil {
			t.Fatal(err)
		}
		return regexp.MustCompile(`(?m)^ "made": .*$`).ReplaceAllString(string(data), "")
	}
	first, second := read("first.json"), read("second.json")
	if first != second {
		at := 0
		for at < min(len(first), len(second)) && first[at] == second[at] {
			at++
		}
		t.Errorf("the files differ at byte %d: …%.80s…, …%.80s…", at, first[at:], second[at:])
	}
	if !strings.Contains(first, `"changes": [`) {
		t.Error("the history is missing")
	}
}
