//go:build unix

package main

import (
	"bufio"
	"encoding/csv"
	"errors"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
)

// unshared is the memory of a process that belongs to it alone, in kB, 0 where the system does
// not tell.
func unshared(pid int) int64 {
	data, err := os.ReadFile("/proc/" + strconv.Itoa(pid) + "/status")
	if err != nil {
		return 0
	}
	_, rest, _ := strings.Cut(string(data), "RssAnon:")
	fields := strings.Fields(rest)
	if len(fields) == 0 {
		return 0
	}
	n, _ := strconv.ParseInt(fields[0], 10, 64)
	return n
}

// BenchmarkExportCSV measures the findings of a practice as CSV by the command, from its start to
// its end, against the standard csv writer with the same rows, which come from the file that the
// command wrote; by the processors' time, which a busy machine does not bend (asked for: at least
// half the rate), and the command's memory (asked for: under 200 MiB). The practice has 1,000
// patients with 10 visits, and the 20,000 of the reference store where CORDWALK_SOAK is set.
func BenchmarkExportCSV(b *testing.B) {
	size := storagetest.ReferenceSize
	if os.Getenv("CORDWALK_SOAK") == "" {
		size = size.Scaled(20)
	}
	dir := b.TempDir()
	program, store, key, out := filepath.Join(dir, "cordwalk-cli"), filepath.Join(dir, "practice"), filepath.Join(dir, "key"), filepath.Join(dir, "findings.csv")
	if said, err := exec.Command("go", "build", "-o", program, ".").CombinedOutput(); err != nil {
		b.Fatalf("building the command: %v\n%s", err, said)
	}
	if _, err := storagetest.Reference(store, size, 1, storage.Options{Unlock: storage.Unlock{KeyFile: key}}); err != nil {
		b.Fatal(err)
	}
	var ours, theirs time.Duration
	var rows, peak int64
	for b.Loop() {
		c := exec.Command(program, "--store", store, "--key-file", key, "export", "csv", "-o", out)
		if err := c.Start(); err != nil {
			b.Fatal(err)
		}
		var watched atomic.Int64
		ended := make(chan struct{})
		go func() {
			for {
				select {
				case <-ended:
					return
				case <-time.After(20 * time.Millisecond):
					watched.Store(max(watched.Load(), unshared(c.Process.Pid)))
				}
			}
		}()
		err := c.Wait()
		close(ended)
		if err != nil {
			b.Fatal(err)
		}
		ours += c.ProcessState.UserTime() + c.ProcessState.SystemTime()
		peak = max(peak, watched.Load())
		n, took := standardCSV(b, out, filepath.Join(dir, "standard.csv"))
		rows, theirs = n, theirs+took
	}
	b.ReportMetric(0, "ns/op")
	b.ReportMetric(float64(rows), "rows")
	b.ReportMetric(ours.Seconds()/float64(b.N), "s-ours")
	b.ReportMetric(theirs.Seconds()/float64(b.N), "s-standard")
	b.ReportMetric(theirs.Seconds()/ours.Seconds(), "×standard-rate")
	b.ReportMetric(float64(peak)/1024, "MiB")
}

// standardCSV writes the rows of a file again by the standard csv writer, and returns how many
// they are and the time that writing took.
func standardCSV(b *testing.B, from, to string) (rows int64, took time.Duration) {
	b.Helper()
	in, err := os.Open(from)
	if err != nil {
		b.Fatal(err)
	}
	defer in.Close()
	out, err := os.Create(to)
	if err != nil {
		b.Fatal(err)
	}
	defer out.Close()
	r, w := csv.NewReader(bufio.NewReaderSize(in, 1<<20)), csv.NewWriter(out)
	w.UseCRLF = true
	for chunk := make([][]string, 0, 4096); ; chunk = chunk[:0] {
		for len(chunk) < cap(chunk) {
			row, err := r.Read()
			if errors.Is(err, io.EOF) {
				break
			}
			if err != nil {
				b.Fatal(err)
			}
			chunk = append(chunk, row)
		}
		if len(chunk) == 0 {
			return rows, took
		}
		rows += int64(len(chunk))
		begun := processorTime()
		if err := w.WriteAll(chunk); err != nil {
			b.Fatal(err)
		}
		took += processorTime() - begun
	}
}

// processorTime is the time that the processors gave to this process.
func processorTime() time.Duration {
	var u syscall.Rusage
	if syscall.Getrusage(syscall.RUSAGE_SELF, &u) != nil {
		return 0
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}
