package localise

import (
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"sort"
	"testing"

	"cordwalk.example/cordwalk/exam"
	"pgregory.net/rapid"
)

// drawExam draws an exam of any content: cells, grades, levels, how they were filled, and what
// is known of the animal.
func drawExam(t *rapid.T, s exam.Species) Exam {
	lay := modelOf(t, s).lay
	x := Exam{Species: s}
	n := rapid.IntRange(0, 40).Draw(t, "findings")
	vs := exam.Vertebrae(s)
	for range n {
		c := &lay.cells[rapid.IntRange(0, len(lay.cells)-1).Draw(t, "cell")]
		in := c.item.Info()
		f := exam.Finding{Item: c.item, Site: c.site, Digit: c.digit, Joint: c.joint,
			Result: exam.Graded(int8(rapid.IntRange(int(in.First), int(c.item.Last())).Draw(t, "grade")))}
		if c.item == exam.CutaneousTrunci && rapid.Bool().Draw(t, "level") {
			f.Level = vs[rapid.IntRange(5, 27).Draw(t, "vertebra")]
		}
		if rapid.IntRange(0, 9).Draw(t, "how") == 0 && exam.BulkFills(c.item) {
			f.How, f.Block = exam.RestNormal, "a"
		}
		x.Findings = append(x.Findings, f)
	}
	if rapid.Bool().Draw(t, "known") {
		x.AgeYears = rapid.Float64Range(0, 16).Draw(t, "age")
		x.OnsetDays = rapid.Float64Range(0, 300).Draw(t, "onset")
		x.Sedation = exam.Sedation(rapid.IntRange(0, 3).Draw(t, "sedation"))
		x.WeightKg = rapid.Float64Range(0, 60).Draw(t, "weight")
	}
	if rapid.IntRange(0, 3).Draw(t, "label") == 0 {
		x.Diagnosis, x.Level = "disc extrusion", rapid.SampledFrom([]string{"", "C3-C4", "T12-T13", "L4", "L7-S1"}).Draw(t, "level on file")
	}
	return x
}

func modelOf(t interface{ Fatal(...any) }, s exam.Species) *Model {
	m, err := ModelOf(s)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

func rapidEngine(t *rapid.T, s exam.Species) *Engine {
	e := engines[s]
	if e == nil {
		var err error
		if e, err = New(s); err != nil {
			t.Fatal(err)
		}
		engines[s] = e
	}
	return e
}

func mirrored(x Exam) Exam {
	fs := make([]exam.Finding, len(x.Findings))
	for i, f := range x.Findings {
		f.Site = f.Site.Mirror()
		f.Side = f.Side.Mirror()
		fs[i] = f
	}
	x.Findings = fs
	return x
}

// flatten turns a result into a map, with left and right exchanged where asked.
func flatten(r *Result, e *Engine, mirror bool) map[string]float64 {
	side := func(s string) string {
		if !mirror {
			return s
		}
		switch s {
		case "left":
			return "right"
		case "right":
			return "left"
		}
		return s
	}
	site := func(s string) string {
		if x, err := exam.ParseSite(s); err == nil && mirror {
			return x.Mirror().String()
		}
		return s
	}
	out := map[string]float64{}
	for _, x := range r.Regions {
		out["region "+x.Region] = x.Probability
	}
	for _, x := range r.Kinds {
		out["kind "+x.Kind] = x.Probability
	}
	for i, w := range e.classSum { // every place, not only those that are listed
		c := &e.m.classes[i]
		out[fmt.Sprint("site ", c.kind, c.place, side(c.side.String()), c.region, c.second)] = e.share(w)
	}
	for _, x := range r.Segments {
		out["damaged "+x.Segment+side(x.Side)] = x.Damaged
		out["damage "+x.Segment+side(x.Side)] = x.Damage
	}
	for _, x := range r.Evidence {
		out[fmt.Sprint("evidence ", x.Item, site(x.Site), x.Digit, x.Joint, x.Grade, x.Level)] = x.Decibans
	}
	for _, x := range e.rank {
		c := &e.m.lay.cells[x.cell]
		out[fmt.Sprint("next ", c.item, site(c.site.String()), c.digit)] = x.bits
	}
	return out
}

func differ(a, b map[string]float64) string {
	var keys []string
	for k := range a {
		keys = append(keys, k)
	}
	for k := range b {
		if _, ok := a[k]; !ok {
			keys = append(keys, k)
		}
	}
	sort.Strings(keys)
	for _, k := range keys {
		x, okA := a[k]
		y, okB := b[k]
		if okA != okB || math.Float64bits(x) != math.Float64bits(y) {
			return fmt.Sprintf("%s: %v and %v", k, x, y)
		}
	}
	return ""
}

func bothSpecies(t *testing.T, check func(t *rapid.T, s exam.Species)) {
	for _, s := range []exam.Species{exam.Dog, exam.Cat} {
		t.Run(s.String(), func(t *testing.T) { rapid.Check(t, func(rt *rapid.T) { check(rt, s) }) })
	}
}

// Mirroring left and right mirrors the answer, bit for bit.
func TestMirror(t *testing.T) {
	bothSpecies(t, func(t *rapid.T, s exam.Species) {
		x := drawExam(t, s)
		// Two findings of one cell are told apart by grade only: keep one.
		seen := map[exam.Key]bool{}
		kept := x.Findings[:0]
		for _, f := range x.Findings {
			if !seen[f.Key()] {
				seen[f.Key()] = true
				kept = append(kept, f)
			}
		}
		x.Findings = kept
		e := rapidEngine(t, s)
		r, err := e.Compute(x)
		if err != nil {
			t.Fatal(err)
		}
		a := flatten(r, e, true)
		r, err = e.Compute(mirrored(x))
		if err != nil {
			t.Fatal(err)
		}
		if d := differ(a, flatten(r, e, false)); d != "" {
			t.Fatal(d)
		}
	})
}

// Findings that were not tested change nothing; the order of findings does not matter; a new
// engine gives the same bits; regions and kinds sum to 1.
func TestSameAnswer(t *testing.T) {
	bothSpecies(t, func(t *rapid.T, s exam.Species) {
		x := drawExam(t, s)
		e := rapidEngine(t, s)
		r, err := e.Compute(x)
		if err != nil {
			t.Fatal(err)
		}
		want := r.Clone()
		sum := 0.0
		for _, p := range r.Regions {
			sum += p.Probability
			if p.Probability < 0 || p.Probability > 1 || math.IsNaN(p.Probability) {
				t.Fatalf("%s has probability %v", p.Region, p.Probability)
			}
		}
		kinds := 0.0
		for _, p := range r.Kinds {
			kinds += p.Probability
		}
		if math.Abs(sum-1) > 1e-12 || math.Abs(kinds-1) > 1e-12 {
			t.Fatalf("regions sum to 1 %+.3g, kinds to 1 %+.3g", sum-1, kinds-1)
		}
		if len(r.Regions) != 8 {
			t.Fatalf("%d regions", len(r.Regions))
		}
		y := x
		y.Findings = append([]exam.Finding(nil), x.Findings...)
		have := map[exam.Key]bool{}
		for _, f := range y.Findings {
			have[f.Key()] = true
		}
		lay := e.m.lay
		for range 5 {
			c := &lay.cells[rapid.IntRange(0, len(lay.cells)-1).Draw(t, "untested")]
			y.Findings = append(y.Findings, exam.Finding{Item: c.item, Site: c.site, Digit: c.digit, Joint: c.joint, Result: exam.Untested(exam.Pain)})
		}
		rng := rand.New(rand.NewPCG(uint64(len(y.Findings)), 7))
		rng.Shuffle(len(y.Findings), func(i, j int) { y.Findings[i], y.Findings[j] = y.Findings[j], y.Findings[i] })
		if _, err := e.Compute(Exam{Species: s}); err != nil { // something else in between
			t.Fatal(err)
		}
		got, err := e.Compute(y)
		if err != nil {
			t.Fatal(err)
		}
		if g := got.Clone(); !reflect.DeepEqual(g, want) {
			t.Fatalf("another answer after untested findings and another order:\n%+v\n%+v", want.Regions, g.Regions)
		}
	})
}

// One changed finding gives what the whole exam gives anew.
func TestUpdateIsCompute(t *testing.T) {
	bothSpecies(t, func(t *rapid.T, s exam.Species) {
		x := drawExam(t, s)
		e := rapidEngine(t, s)
		if _, err := e.Compute(x); err != nil {
			t.Fatal(err)
		}
		c := &e.m.lay.cells[rapid.IntRange(0, len(e.m.lay.cells)-1).Draw(t, "cell")]
		f := exam.Finding{Item: c.item, Site: c.site, Digit: c.digit, Joint: c.joint}
		if rapid.Bool().Draw(t, "tested") {
			in := c.item.Info()
			f.Result = exam.Graded(int8(rapid.IntRange(int(in.First), int(c.item.Last())).Draw(t, "new grade")))
		}
		got := e.Update(f).Clone()
		y := x
		y.Findings = nil
		for _, g := range x.Findings {
			if g.Key() != f.Key() {
				y.Findings = append(y.Findings, g)
			}
		}
		y.Findings = append(y.Findings, f)
		want, err := e.Compute(y)
		if err != nil {
			t.Fatal(err)
		}
		if w := want.Clone(); !reflect.DeepEqual(w, got) {
			t.Fatalf("update and compute differ: %v, %v", got.Regions, w.Regions)
		}
	})
}

func TestOtherSpeciesAreRefused(t *testing.T) {
	for _, s := range []exam.Species{exam.Horse, exam.Rabbit, 0} {
		if _, err := New(s); err == nil {
			t.Errorf("%s was not refused", s)
		} else {
			t.Log(err)
		}
	}
	e := engineFor(t, exam.Dog)
	if _, err := e.Compute(Exam{Species: exam.Cat}); err == nil {
		t.Error("a cat's exam was weighed by the dog's engine")
	}
}
