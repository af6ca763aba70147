package main

import (
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
)

// BenchmarkStartToCaseload measures, in one run and in turns, how long the program takes from its
// start until the window that shows the caseload of a sealed store has its name, with the key at
// hand, against an empty window in the same theme. The store has 2,000 patients, and the 20,000 of
// the reference store where CORDWALK_SOAK is set.
func BenchmarkStartToCaseload(b *testing.B) {
	s := newScreen(b)
	empty := filepath.Join(b.TempDir(), "empty")
	if out, err := exec.Command("go", "build", "-tags", "no_emoji,migrated_fynedo", "-o", empty, "./testdata/empty").CombinedOutput(); err != nil {
		b.Fatalf("building the empty window: %v\n%s", err, out)
	}
	size := storagetest.ReferenceSize
	if os.Getenv("CORDWALK_SOAK") == "" {
		size.Patients /= 10
	}
	dir, key := filepath.Join(b.TempDir(), "practice"), filepath.Join(b.TempDir(), "key")
	if _, err := storagetest.Reference(dir, size, 1, storage.Options{Unlock: storage.Unlock{KeyFile: key}}); err != nil {
		b.Fatal(err)
	}
	start := func(title string, name string, args ...string) time.Duration {
		c := exec.Command(name, args...)
		c.Env = s.env
		begun := time.Now()
		if err := c.Start(); err != nil {
			b.Fatal(err)
		}
		for time.Since(begun) < 30*time.Second {
			look := exec.Command("xdotool", "search", "--onlyvisible", "--name", "^"+title)
			look.Env = s.env
			if out, _ := look.Output(); strings.TrimSpace(string(out)) != "" {
				break
			}
			time.Sleep(3 * time.Millisecond)
		}
		took := time.Since(begun)
		if title != "Empty" { // closed as people close it: after a kill the next start would first try the index
			s.do("search", "--onlyvisible", "--name", "^"+title, "windowfocus", "--sync", "key", "ctrl+q")
			end := time.AfterFunc(10*time.Second, func() { b.Error("the program did not close"); _ = c.Process.Kill() })
			defer end.Stop()
		} else {
			_ = c.Process.Kill()
		}
		_ = c.Wait()
		return took
	}
	var empties, caseloads []time.Duration
	for b.Loop() {
		empties = append(empties, start("Empty", empty))
		caseloads = append(caseloads, start("Caseload", s.binary, "--store", dir, "--key-file", key))
	}
	slices.Sort(empties)
	slices.Sort(caseloads)
	e, c := empties[len(empties)/2], caseloads[len(caseloads)/2]
	b.ReportMetric(c.Seconds()*1000, "ms-caseload")
	b.ReportMetric(e.Seconds()*1000, "ms-empty")
	b.ReportMetric(c.Seconds()/e.Seconds(), "×empty")
}
