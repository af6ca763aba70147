package progress

import (
	"syscall"
	"testing"
	"time"

	"cordwalk.example/cordwalk/exam"
)

// wholeCourse adds every visit and reads everything: what a screen needs.
func wholeCourse(b *testing.B, m *Model, visits []exam.Visit) *Course {
	c := NewCourse(m)
	for _, v := range visits {
		if err := c.Add(v); err != nil {
			b.Fatal(err)
		}
	}
	readAll(c)
	return c
}

func readAll(c *Course) {
	for i := range c.Len() {
		c.filtered(i)
		c.smoothed(i)
	}
	c.Change(0, c.Len()-1)
}

// cpu is the processor time used so far: on a busy machine it says more than the clock.
func cpu() time.Duration {
	var u syscall.Rusage
	if syscall.Getrusage(syscall.RUSAGE_SELF, &u) != nil {
		return 0
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}

func benchmarkWhole(b *testing.B, n int) {
	visits := dogYears(n, allCells(140))
	m, err := For(dog)
	if err != nil {
		b.Fatal(err)
	}
	var c *Course
	start := cpu()
	for b.Loop() {
		c = wholeCourse(b, m, visits)
	}
	b.ReportMetric(float64((cpu()-start).Microseconds())/1000/float64(b.N), "cpu-ms/op")
	b.ReportMetric(float64(c.Steps())/float64(n), "messages/visit")
}

func BenchmarkWhole52(b *testing.B)  { benchmarkWhole(b, 52) }
func BenchmarkWhole520(b *testing.B) { benchmarkWhole(b, 520) }

// BenchmarkToday adds one visit to a course of 520 and reads everything again; beside it the
// time of computing all of it afresh, as a ratio.
func BenchmarkToday520(b *testing.B) {
	visits := dogYears(521, allCells(140))
	m, err := For(dog)
	if err != nil {
		b.Fatal(err)
	}
	c := wholeCourse(b, m, visits[:520])
	before := c.Steps()
	c2 := *c
	start := cpu()
	for b.Loop() {
		c2 = *c
		c2.nodes = c.nodes[:520:520]
		saved := saveLate(c)
		if err := c2.Add(visits[520]); err != nil {
			b.Fatal(err)
		}
		readAll(&c2)
		restore(c, saved)
	}
	b.ReportMetric(float64((cpu()-start).Microseconds())/1000/float64(b.N), "cpu-ms/op")
	b.ReportMetric(float64(before)/float64(max(1, c2.Steps()-before)), "whole/today-messages")
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
