package main

import (
	"context"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"cordwalk.example/cordwalk/app/view/demo"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/localise"
)

// BenchmarkLocaliseFolder localises a folder of exams by the command and by the library
// alone, and reports the ratio per exam. The demo practice's exams stand in for a practice's.
func BenchmarkLocaliseFolder(b *testing.B) {
	dir := b.TempDir()
	var exams []localise.Exam
	for _, c := range demo.New(demo.Seed, demo.LastDay).Cases {
		for _, v := range c.Visits {
			f := exam.FileOf(c.Patient, v)
			data, err := exam.EncodeFile(f)
			if err != nil {
				b.Fatal(err)
			}
			if err := os.WriteFile(filepath.Join(dir, fmt.Sprintf("%04d.json", len(exams))), data, 0o600); err != nil {
				b.Fatal(err)
			}
			exams = append(exams, localise.OfFile(f))
		}
	}
	engines := map[exam.Species]*localise.Engine{}
	for _, s := range []exam.Species{exam.Dog, exam.Cat} {
		e, err := localise.New(s)
		if err != nil {
			b.Fatal(err)
		}
		engines[s] = e
	}
	var command, library time.Duration
	for b.Loop() {
		start := time.Now()
		if code := run(context.Background(), []string{"localise", dir}, strings.NewReader(""), io.Discard, io.Discard); code != 0 {
			b.Fatal(code)
		}
		command += time.Since(start)
		start = time.Now()
		for _, x := range exams {
			if _, err := engines[x.Species].Compute(x); err != nil {
				b.Fatal(err)
			}
		}
		library += time.Since(start)
	}
	n := float64(b.N * len(exams))
	b.ReportMetric(float64(command.Microseconds())/n/1000, "ms/exam")
	b.ReportMetric(float64(library.Microseconds())/n/1000, "ms/exam-library")
	b.ReportMetric(float64(command)/float64(library), "command/library")
}
