package localise

import (
	"testing"
	"time"

	"cordwalk.example/cordwalk/exam"
)

// fullExam is an exam of every cell, all normal but for a T3–L3 picture.
func fullExam(s exam.Species) Exam {
	x := Exam{Species: s}
	lay := newLayout()
	for i := range lay.cells {
		c := &lay.cells[i]
		in := c.item.Info()
		g := in.Normal
		if g < 0 {
			g = in.First
		}
		f := exam.Finding{Item: c.item, Site: c.site, Digit: c.digit, Joint: c.joint}
		if c.site.IsPelvic() {
			switch c.item {
			case exam.VoluntaryMotor, exam.PawPlacement, exam.Hopping:
				g = 1
			case exam.Ataxia:
				g = 2
			}
		}
		if c.item == exam.Ambulation {
			g = 1
		}
		f.Result = exam.Graded(g)
		x.Findings = append(x.Findings, f)
	}
	return x
}

func benchEngine(b *testing.B, s exam.Species) *Engine {
	b.Helper()
	e, err := New(s)
	if err != nil {
		b.Fatal(err)
	}
	return e
}

// BenchmarkPosteriorOneChange is the posterior of a full exam after one changed finding.
func BenchmarkPosteriorOneChange(b *testing.B) {
	e := benchEngine(b, exam.Dog)
	x := fullExam(exam.Dog)
	if _, err := e.Compute(x); err != nil {
		b.Fatal(err)
	}
	f := exam.Finding{Item: exam.Patellar, Site: exam.PelvicLeft}
	b.ReportAllocs()
	for i := 0; b.Loop(); i++ {
		f.Result = exam.Graded(int8(2 + i%2))
		e.Change(f)
		e.Leading()
	}
}

// BenchmarkAnswerOneChange is the same with evidence, next tests and warnings.
func BenchmarkAnswerOneChange(b *testing.B) {
	e := benchEngine(b, exam.Dog)
	if _, err := e.Compute(fullExam(exam.Dog)); err != nil {
		b.Fatal(err)
	}
	f := exam.Finding{Item: exam.Patellar, Site: exam.PelvicLeft}
	b.ReportAllocs()
	for i := 0; b.Loop(); i++ {
		f.Result = exam.Graded(int8(2 + i%2))
		e.Update(f)
	}
}

// BenchmarkAnswerEmpty is the whole answer while hardly anything is tested, which leaves most
// hypotheses alive and most tests to be weighed.
func BenchmarkAnswerEmpty(b *testing.B) {
	e := benchEngine(b, exam.Dog)
	x := Exam{Species: exam.Dog}
	if _, err := e.Compute(x); err != nil {
		b.Fatal(err)
	}
	f := exam.Finding{Item: exam.Patellar, Site: exam.PelvicLeft}
	b.ReportAllocs()
	for i := 0; b.Loop(); i++ {
		f.Result = exam.Graded(int8(2 + i%2))
		e.Update(f)
	}
}

// BenchmarkAnswerTypical is the whole answer with about forty findings, after one change.
func BenchmarkAnswerTypical(b *testing.B) {
	e := benchEngine(b, exam.Dog)
	x := fullExam(exam.Dog)
	kept := x.Findings[:0]
	for _, f := range x.Findings {
		switch f.Item {
		case exam.VoluntaryMotor, exam.PawPlacement, exam.Hopping, exam.Ataxia, exam.Withdrawal, exam.Patellar, exam.Ambulation,
			exam.Perineal, exam.SpinalPain, exam.Mentation, exam.Menace:
			if f.Digit == exam.AnyDigit {
				kept = append(kept, f)
			}
		}
	}
	x.Findings = kept
	if _, err := e.Compute(x); err != nil {
		b.Fatal(err)
	}
	f := exam.Finding{Item: exam.Patellar, Site: exam.PelvicLeft}
	b.ReportAllocs()
	for i := 0; b.Loop(); i++ {
		f.Result = exam.Graded(int8(2 + i%2))
		e.Update(f)
	}
}

func BenchmarkModel(b *testing.B) {
	for b.Loop() {
		if _, err := newModel(exam.Dog, nil); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkSerial(b *testing.B) {
	e := benchEngine(b, exam.Dog)
	x := fullExam(exam.Dog)
	var dst []float64
	b.ReportAllocs()
	for b.Loop() {
		dst, _ = e.SiteLogLikelihoods(x, dst)
	}
}

// BenchmarkRatio is the posterior of one exam after one changed finding, and how many times
// longer the slow reference takes for the same exam.
func BenchmarkRatio(b *testing.B) {
	e := benchEngine(b, exam.Dog)
	x := Exam{Species: exam.Dog}
	for _, f := range fullExam(exam.Dog).Findings {
		if f.Item == exam.VoluntaryMotor || f.Item == exam.PawPlacement || f.Item == exam.Patellar || f.Item == exam.Withdrawal && f.Digit == exam.AnyDigit {
			x.Findings = append(x.Findings, f)
		}
	}
	ref := newReference(b, exam.Dog, defaults(exam.Dog))
	devs, qw := ref.p.quadrature()
	start := time.Now()
	sum := 0.0
	for hi := range ref.space {
		h := &ref.space[hi]
		st := ref.losses(ref.damage(h), h.shift)
		like := h.prior
		byGroup := map[int][]exam.Finding{}
		for _, f := range x.Findings {
			g := e.m.lay.cells[mustFind(e.m.lay, f.Key())].group
			byGroup[g] = append(byGroup[g], f)
		}
		for _, fs := range byGroup {
			part := 0.0
			for q, u := range devs {
				p := qw[q]
				for _, f := range fs {
					g, _ := f.Result.Grade()
					p *= ref.grades(&e.m.lay.cells[mustFind(e.m.lay, f.Key())], st, u)[g-f.Item.Info().First]
				}
				part += p
			}
			like *= part
		}
		sum += like
	}
	slow := time.Since(start)
	if _, err := e.Compute(x); err != nil {
		b.Fatal(err)
	}
	f := exam.Finding{Item: exam.Patellar, Site: exam.PelvicLeft}
	b.ReportAllocs()
	for i := 0; b.Loop(); i++ {
		f.Result = exam.Graded(int8(2 + i%2))
		e.Change(f)
		e.Leading()
	}
	fast := float64(b.Elapsed().Nanoseconds()) / float64(b.N)
	b.ReportMetric(float64(slow.Nanoseconds())/fast, "×reference")
	_ = sum
}
