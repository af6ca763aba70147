package localise

import (
	"encoding/json"
	"strings"
	"testing"
	"time"

	"cordwalk.example/cordwalk/exam"
)

const paraplegic = "ambulation m0; voluntary-motor t4 p0; paw-placement t2 p0; withdrawal a2; patellar p3; spinal-pain cervical0 thoracolumbar2 lumbar0; perineal b2"

func TestFileMovesThePriorButDoesNotDrownTheExam(t *testing.T) {
	// The level on file narrows T3–L3; a label against the exam is overruled and said so.
	x := say(t, exam.Dog, paraplegic)
	plain := compute(t, x)
	x.Diagnosis, x.Level = "disc extrusion", "T12-T13"
	r := compute(t, x)
	if r.Alone == nil {
		t.Fatal("no answer of the exam alone beside that with the file")
	}
	at := func(r *Result, seg string) float64 {
		for _, s := range r.Segments {
			if s.Segment == seg && s.Side == "left" {
				return s.Damage
			}
		}
		return 0
	}
	if at(r, "T13") <= at(plain, "T13") || at(r, "T5") >= at(plain, "T5") {
		t.Errorf("the level on file does not narrow the lesion: T13 %.2f and %.2f, T5 %.2f and %.2f", at(plain, "T13"), at(r, "T13"), at(plain, "T5"), at(r, "T5"))
	}
	if got, want := r.Alone.Regions[0], plain.Regions[0]; got != want {
		t.Errorf("the exam alone says %v beside a file, %v without", got, want)
	}
	x.Level = "C3-C4"
	wrong := compute(t, x)
	if wrong.Regions[0].Region != "T3-L3" {
		t.Errorf("a label at C3–C4 drowns a paraplegic exam: %s", leading(wrong))
	}
	// Little was tested and the file says otherwise: the leaders differ, and the answer warns.
	y := say(t, exam.Dog, "paw-placement p1; ataxia p1")
	y.Diagnosis, y.Level = "disc extrusion", "C5-C6"
	z := compute(t, y)
	if z.Alone.Regions[0].Region != z.Regions[0].Region && !warned(z, "the exam alone points to") {
		t.Errorf("leaders differ (%v, %v) without a warning: %v", z.Alone.Regions[0], z.Regions[0], z.Warnings)
	}
}

func warned(r *Result, part string) bool {
	for _, w := range r.Warnings {
		if strings.Contains(w, part) {
			return true
		}
	}
	return false
}

func TestNotEnoughToSay(t *testing.T) {
	r := compute(t, Exam{Species: exam.Dog})
	if r.Enough || r.Summary != "not enough to say" || !warned(r, "not tested are gait") {
		t.Errorf("an empty exam: %q, %v", r.Summary, r.Warnings)
	}
	r = compute(t, say(t, exam.Dog, "paw-placement pl1"))
	if r.Enough || !warned(r, "postural") == false && warned(r, "postural reactions") {
		t.Errorf("one finding: %q, %v", r.Summary, r.Warnings)
	}
	// Fewer findings, flatter answer: drop each second finding of a clear exam.
	full := say(t, exam.Dog, paraplegic)
	part := full
	part.Findings = nil
	for i, f := range full.Findings {
		if i%2 == 0 {
			part.Findings = append(part.Findings, f)
		}
	}
	a, b := compute(t, full), compute(t, part)
	if b.Region("T3-L3") > a.Region("T3-L3")+0.02 {
		t.Errorf("with half of the findings T3–L3 is surer: %.3f, with all %.3f", b.Region("T3-L3"), a.Region("T3-L3"))
	}
}

func TestContradictionsAreNamed(t *testing.T) {
	r := compute(t, say(t, exam.Dog, paraplegic+"; superficial-pain pl2; deep-pain pl0"))
	if !warned(r, "contradict each other: superficial-pain at pelvic-left normal and deep-pain at pelvic-left absent") {
		t.Errorf("warnings: %v", r.Warnings)
	}
	// Findings no single or double lesion gives.
	r = compute(t, say(t, exam.Dog, "voluntary-motor tl0 tr4 pl4 pr0; paw-placement tl2 tr0 pl0 pr2; patellar pl0 pr2; withdrawal tl2 tr0 pl2 pr0; perineal l0 r2; tail-tone m2; anal-tone m2; menace l2 r2; withdrawal-hock pl2 pr2; tone tl0 tr3 pl3 pr0; ambulation m2; mentation m3"))
	if !warned(r, "fits no explanation well") {
		t.Errorf("an impossible exam is not said to fit nothing: %v; %s", r.Warnings, leading(r))
	}
	ok := compute(t, say(t, exam.Dog, paraplegic))
	if warned(ok, "fits no explanation") || warned(ok, "contradict") {
		t.Errorf("a textbook exam is doubted: %v", ok.Warnings)
	}
}

func TestEvidenceIsLeaveOneOut(t *testing.T) {
	// Decibans are the odds of leader over runner-up with the finding against without it.
	x := say(t, exam.Dog, "voluntary-motor t4 p2; paw-placement t2 p1; withdrawal p2; patellar pl1 pr2; spinal-pain lumbar1 thoracolumbar0")
	r := compute(t, x)
	lead, second := r.Regions[0].Region, r.Regions[1].Region
	for i := range x.Findings {
		y := x
		y.Findings = append(append([]exam.Finding(nil), x.Findings[:i]...), x.Findings[i+1:]...)
		without := compute(t, y)
		want := 10 * (log10(r.Region(lead)/r.Region(second)) - log10(without.Region(lead)/without.Region(second)))
		f := x.Findings[i]
		for _, e := range r.Evidence {
			if e.Item == f.Item.String() && e.Site == f.Site.String() && abs(e.Decibans-want) > 0.1 {
				t.Errorf("%s at %s: %.2f decibans, leaving it out moves the odds by %.2f", e.Item, e.Site, e.Decibans, want)
			}
		}
	}
	if len(r.Evidence) != len(x.Findings) {
		t.Errorf("%d pieces of evidence for %d findings", len(r.Evidence), len(x.Findings))
	}
}

func log10(x float64) float64 { return logOf(x) / 2.302585092994046 }

func abs(x float64) float64 { return max(x, -x) }

func TestNextTests(t *testing.T) {
	has := func(r *Result, item, site string) (NextTest, bool) {
		for _, n := range r.Next {
			if n.Item == item && (site == "" || n.Site == site) {
				return n, true
			}
		}
		return NextTest{}, false
	}
	// A plegic limb whose feeling is not known: deep pain is due, first.
	r := compute(t, say(t, exam.Dog, paraplegic))
	if n, ok := has(r, "deep-pain", "pelvic-left"); !ok || !n.Due || r.Next[0].Item != "deep-pain" {
		t.Errorf("deep pain is not due in a plegic limb: %+v", r.Next)
	}
	// Felt on the surface: no deep pain asked.
	r = compute(t, say(t, exam.Dog, paraplegic+"; superficial-pain p2"))
	if n, ok := has(r, "deep-pain", ""); ok {
		t.Errorf("deep pain is asked where the surface is felt: %+v", n)
	}
	// A limb that moves on purpose: never.
	r = compute(t, say(t, exam.Dog, "voluntary-motor t4 p2; paw-placement p0"))
	if n, ok := has(r, "deep-pain", ""); ok {
		t.Errorf("deep pain is asked in a limb that moves: %+v", n)
	}
	// Never a noxious test while a gentler one is informative.
	for _, n := range r.Next {
		item, _ := exam.ParseItem(n.Item)
		if item.Has(exam.Noxious) {
			t.Errorf("noxious %s is suggested while gentle tests are informative", n.Item)
		}
		if n.Bits <= 0 || n.Seconds <= 0 {
			t.Errorf("%+v", n)
		}
	}
	// What is barred is never suggested.
	x := say(t, exam.Dog, "voluntary-motor t3 p3; ataxia a1")
	free := compute(t, x)
	x.Precautions = []exam.PrecautionOn{{Code: exam.UnstableNeck.String()}, {Code: exam.UnstableSpine.String()}}
	barred := exam.Bars(x.Precautions, "")
	r = compute(t, x)
	for _, n := range r.Next {
		item, _ := exam.ParseItem(n.Item)
		site, _ := exam.ParseSite(n.Site)
		if why := barred.Why(exam.Key{Item: item, Site: site}); why != "" {
			t.Errorf("%s at %s is suggested though barred: %s", n.Item, n.Site, why)
		}
	}
	if _, ok := has(free, "hopping", ""); !ok {
		t.Logf("free of precautions the list is %+v", free.Next)
	}
	// A neck of which the file says it is unstable is not moved or pressed.
	y := say(t, exam.Dog, "voluntary-motor a3; ataxia a1; paw-placement a1")
	y.Diagnosis = "atlantoaxial subluxation"
	r = compute(t, y)
	for _, item := range []string{"wheelbarrow", "eye-follow"} {
		if n, ok := has(r, item, ""); ok {
			t.Errorf("neck moved where it may be unstable: %+v", n)
		}
	}
	if n, ok := has(r, "spinal-pain", "cervical"); ok {
		t.Errorf("neck pressed where it may be unstable: %+v", n)
	}
}

func TestBlockIsOneLook(t *testing.T) {
	// Twenty normal cells filled by one key weigh at most what Careless lets one look weigh.
	base := "voluntary-motor p1; paw-placement p0; ataxia p2"
	rest := "; withdrawal t2 p2; patellar p2; tone a2; perineal b2; biceps t2; triceps t2; extensor-carpi t2; voluntary-motor t4; paw-placement t2; hopping t2; withdrawal-hock p2; withdrawal-hip p2; mass-quadriceps b3; mass-hamstrings b3"
	plain := compute(t, say(t, exam.Dog, base))
	looked := compute(t, say(t, exam.Dog, base+rest))
	x := say(t, exam.Dog, base+rest)
	n := len(say(t, exam.Dog, base).Findings)
	for i := n; i < len(x.Findings); i++ {
		x.Findings[i].How, x.Findings[i].Block = exam.RestNormal, "rest"
	}
	block := compute(t, x)
	odds := func(r *Result) float64 { return r.Region("L4-S3") / r.Region("T3-L3") }
	t.Logf("odds of L4–S3 over T3–L3: nothing more %.3f, one block %.3f, each looked at %.4f", odds(plain), odds(block), odds(looked))
	if odds(block) <= odds(looked) {
		t.Errorf("a block weighs as much as looking")
	}
	if fall := odds(plain) / odds(block); fall > 1/defaults(exam.Dog).Careless+0.5 {
		t.Errorf("one block moves the odds by %.1f", fall)
	}
}

func TestTenTestsOfOneArcWeighLittleMoreThanTwo(t *testing.T) {
	base := "voluntary-motor t4 p4; paw-placement a2; spinal-pain lumbar0 thoracolumbar0 cervical0"
	arc := []string{"withdrawal-hock pl0", "withdrawal-digits pl0", "withdrawal-stifle pl0", "mass-cranial-tibial l0", "mass-hamstrings l0",
		"sensation-fibular l0", "sensation-tibial l0", "stance pl0", "mass-gastrocnemius l0", "withdrawal pl0"}
	m := engineFor(t, exam.Dog).m
	cut := -1 // the sciatic nerve, left, complete, older than a week
	h := 0
	m.sp.each(func(x *hypothesis) {
		if x.site.kind == Nerve && x.site.nerve.name() == "sciatic" && x.site.side == LeftOnly && x.severity == severities-1 && !x.acute {
			cut = h
		}
		h++
	})
	// Decibans of the cut nerve against a sound animal.
	weigh := func(n int) float64 {
		e := engineFor(t, exam.Dog)
		e.set(say(t, exam.Dog, base+"; "+strings.Join(arc[:n], "; ")))
		return 10 / 2.302585 * fromLog(e.full[cut]-e.full[m.sound])
	}
	zero := weigh(0)
	one, two, ten := weigh(1)-zero, weigh(2)-zero, weigh(10)-zero
	t.Logf("decibans of a cut nerve against a sound animal: one test %.1f, two %.1f, ten %.1f", one, two, ten)
	if ten > 1.5*two || two < one {
		t.Errorf("ten tests of one arc weigh %.1f decibans, two %.1f, one %.1f", ten, two, one)
	}
}

func TestResultAsJSON(t *testing.T) {
	x := say(t, exam.Dog, paraplegic)
	x.Diagnosis, x.Level = "disc extrusion", "T12-T13"
	data, err := json.Marshal(compute(t, x))
	if err != nil {
		t.Fatal(err)
	}
	var m map[string]json.RawMessage
	if err := json.Unmarshal(data, &m); err != nil {
		t.Fatal(err)
	}
	for _, field := range []string{"species", "regions", "kinds", "sites", "segments", "evidence", "next", "warnings", "alone"} {
		if len(m[field]) < 2 {
			t.Errorf("no %q in the result", field)
		}
	}
	// Lists are never null.
	data, err = json.Marshal(compute(t, Exam{Species: exam.Cat}))
	if err != nil {
		t.Fatal(err)
	}
	if strings.Contains(string(data), "null") {
		t.Errorf("null in %s", data)
	}
}

func TestOfFile(t *testing.T) {
	at := time.Date(2026, 3, 2, 10, 0, 0, 0, time.UTC)
	x := OfFile(exam.File{Species: exam.Dog, Examined: at, WeightKg: 9, Born: "2016-03-02", Onset: "2026-02-28", Surgery: "2026-03-01",
		Problem: exam.FileProblem{Diagnosis: "disc extrusion", Level: "T12-T13"}, Sedation: exam.SedationMild,
		Precautions: []exam.PrecautionOn{{Code: "unstable-spine"}}})
	if x.Species != exam.Dog || x.WeightKg != 9 || abs(x.AgeYears-10) > 0.1 || x.OnsetDays < 1 || x.OnsetDays > 3 || !x.Operated ||
		x.Level != "T12-T13" || x.Sedation != exam.SedationMild || len(x.Precautions) != 1 || x.Day != "2026-03-02" {
		t.Errorf("%+v", x)
	}
}

func TestSteadyStateAllocatesNothing(t *testing.T) {
	e, err := New(exam.Dog)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := e.Compute(say(t, exam.Dog, paraplegic)); err != nil {
		t.Fatal(err)
	}
	f := exam.Finding{Item: exam.Patellar, Site: exam.PelvicLeft}
	i := 0
	step := func() {
		f.Result = exam.Graded(int8(2 + i%2))
		e.Update(f)
		i++
	}
	step()
	step()
	if n := testing.AllocsPerRun(20, step); n != 0 {
		t.Errorf("%v allocations for one changed finding", n)
	}
}

func TestSizeIsStated(t *testing.T) {
	for _, s := range []exam.Species{exam.Dog, exam.Cat} {
		m := engineFor(t, s).Model()
		pairs := 0
		for h := range m.hyps {
			if m.sp.sites[m.siteOf[h]].kind == Two {
				pairs++
			}
		}
		t.Logf("%s: %d hypotheses (%d of them pairs) at %d sites in %d classes, %.1f MB of tables", s, m.Hypotheses(), pairs, len(m.sp.sites), len(m.classes), float64(m.Bytes())/1e6)
		if pairs == 0 || pairs > 5000 {
			t.Errorf("%s: %d pairs", s, pairs)
		}
		if len(m.classes) > 300 {
			t.Errorf("%s: %d classes", s, len(m.classes))
		}
		sum := 0.0
		for h := range m.hyps {
			sum += exp(fromLog(m.prior[h]))
		}
		if abs(sum-1) > 1e-9 {
			t.Errorf("%s: priors sum to 1 %+.3g", s, sum-1)
		}
	}
}
