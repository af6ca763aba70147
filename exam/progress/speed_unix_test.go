//go:build unix

package progress

import (
	"maps"
	"syscall"
	"testing"
	"time"
)

// cpu is the processor time used so far: on a busy machine it says more than the clock.
func cpu() time.Duration {
	var u syscall.Rusage
	if syscall.Getrusage(syscall.RUSAGE_SELF, &u) != nil {
		return 0
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}

func peakMiB() float64 {
	var u syscall.Rusage
	if syscall.Getrusage(syscall.RUSAGE_SELF, &u) != nil {
		return 0
	}
	return float64(u.Maxrss) / 1024
}

// The whole analysis: every visit of 140 findings added, every point of every segment, limb and
// region read, change, plateau, relapse, forecast, scales and plain statistics.
func benchmarkWhole(b *testing.B, n int) {
	s := Series{Patient: dog, Visits: dogYears(n, allCells(140))}
	if _, err := Analyse(s, Options{}); err != nil { // the species' tables are made once
		b.Fatal(err)
	}
	var steps int64
	start := cpu()
	for b.Loop() {
		r, err := Analyse(s, Options{})
		if err != nil {
			b.Fatal(err)
		}
		steps = r.Course().Steps()
	}
	b.ReportMetric(float64((cpu()-start).Microseconds())/1000/float64(b.N), "cpu-ms/op")
	b.ReportMetric(float64(steps)/float64(n), "messages/visit")
	b.ReportMetric(peakMiB(), "peak-MiB")
}

func BenchmarkWhole52(b *testing.B)  { benchmarkWhole(b, 52) }
func BenchmarkWhole520(b *testing.B) { benchmarkWhole(b, 520) }

// BenchmarkToday520 adds one visit to a course of 520 and reads everything again; beside it the
// messages of computing all of it afresh, and the time, as ratios.
func BenchmarkToday520(b *testing.B) {
	visits := dogYears(521, allCells(140))
	m, err := For(dog)
	if err != nil {
		b.Fatal(err)
	}
	whole := cpu()
	c := NewCourse(m)
	for _, v := range visits[:520] {
		if err := c.Add(v); err != nil {
			b.Fatal(err)
		}
	}
	c.Result(dog, Options{})
	whole = cpu() - whole
	before := c.Steps()
	today := *c
	start := cpu()
	for b.Loop() {
		saved := saveLate(c)
		today = *c
		today.nodes = c.nodes[:520:520]
		today.kept, today.chains, today.scratch = cloneKept(c.kept), maps.Clone(c.chains), [3][]float64{}
		if err := today.Add(visits[520]); err != nil {
			b.Fatal(err)
		}
		today.Result(dog, Options{})
		restore(c, saved)
	}
	each := float64((cpu() - start).Microseconds()) / float64(b.N)
	b.ReportMetric(each/1000, "cpu-ms/op")
	b.ReportMetric(float64(before)/float64(max(1, today.Steps()-before)), "whole/today-messages")
	b.ReportMetric(float64(whole.Microseconds())/each, "whole/today-time")
}

// saveLate keeps what adding a visit changes in the nodes, so that it can be added again and again.
func saveLate(c *Course) []node {
	out := make([]node, len(c.nodes))
	for i, n := range c.nodes {
		out[i] = *n
	}
	return out
}

func restore(c *Course, saved []node) {
	for i := range saved {
		*c.nodes[i] = saved[i]
	}
}

func cloneKept(kept []*following) []*following {
	var out []*following
	for _, f := range kept {
		out = append(out, f.clone())
	}
	return out
}
