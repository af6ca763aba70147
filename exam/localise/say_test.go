package localise

import (
	"strings"
	"testing"

	"cordwalk.example/cordwalk/exam"
)

// say reads findings in shorthand: «item site-grade site-grade; item …». Sites: tl tr pl pr
// are limbs, l r sides, m the midline; t both thoracic limbs, p both pelvic limbs, a all four,
// b both sides; others by name. «l1@T13» adds a level, «pl1#lateral» a digit.
func say(t testing.TB, s exam.Species, text string) Exam {
	t.Helper()
	x := Exam{Species: s}
	short := map[string][]exam.Site{
		"tl": {exam.ThoracicLeft}, "tr": {exam.ThoracicRight}, "pl": {exam.PelvicLeft}, "pr": {exam.PelvicRight},
		"l": {exam.Left}, "r": {exam.Right}, "m": {exam.Midline}, "b": {exam.Left, exam.Right},
		"t": {exam.ThoracicLeft, exam.ThoracicRight}, "p": {exam.PelvicLeft, exam.PelvicRight},
		"a": {exam.ThoracicLeft, exam.ThoracicRight, exam.PelvicLeft, exam.PelvicRight},
	}
	for _, part := range strings.Split(text, ";") {
		words := strings.Fields(part)
		if len(words) == 0 {
			continue
		}
		item, err := exam.ParseItem(words[0])
		if err != nil {
			t.Fatal(err)
		}
		for _, w := range words[1:] {
			f := exam.Finding{Item: item}
			if a, level, ok := strings.Cut(w, "@"); ok {
				w = a
				if f.Level, err = exam.ParseVertebra(level, s); err != nil {
					t.Fatal(err)
				}
			}
			if a, digit, ok := strings.Cut(w, "#"); ok {
				w = a
				if f.Digit, err = exam.ParseDigit(digit); err != nil {
					if f.Joint, err = exam.ParseJoint(digit); err != nil {
						t.Fatal(err)
					}
				}
			}
			f.Result = exam.Graded(int8(w[len(w)-1] - '0'))
			name := w[:len(w)-1]
			sites := short[name]
			if sites == nil {
				site, err := exam.ParseSite(name)
				if err != nil {
					t.Fatal(err)
				}
				sites = []exam.Site{site}
			}
			for _, site := range sites {
				f.Site = site
				if err := f.Validate(s); err != nil {
					t.Fatal(err)
				}
				x.Findings = append(x.Findings, f)
			}
		}
	}
	return x
}

// sound is the rest of an exam: head, mind and spine without findings.
const (
	soundHead  = "; mentation m3; menace b2; palpebral b2; facial-sensation b2; pupillary-light b2; head-tilt b0; nystagmus m0; horner b0; gag m2"
	soundFront = "; voluntary-motor t4; ataxia t0; paw-placement t2; hopping t2; withdrawal t2; tone t2"
	soundHind  = "; voluntary-motor p4; ataxia p0; paw-placement p2; hopping p2; withdrawal p2; patellar p2; tone p2"
	soundSpine = "; spinal-pain cervical0 cranial-thoracic0 thoracolumbar0 lumbar0 lumbosacral0"
	soundTail  = "; perineal b2; anal-tone m2; tail-tone m2"
	soundTrunk = "; cutaneous-trunci b2"
)

var engines = map[exam.Species]*Engine{}

func engineFor(t testing.TB, s exam.Species) *Engine {
	t.Helper()
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

func compute(t testing.TB, x Exam) *Result {
	t.Helper()
	r, err := engineFor(t, x.Species).Compute(x)
	if err != nil {
		t.Fatal(err)
	}
	return r.Clone()
}

// leading prints the first entries of an answer.
func leading(r *Result) string {
	var b strings.Builder
	for i, x := range r.Regions {
		if i < 3 {
			b.WriteString(x.Region + " " + decimal(x.Probability) + ", ")
		}
	}
	for i, x := range r.Sites {
		if i < 4 {
			b.WriteString("| " + x.Words + " " + decimal(x.Probability) + " ")
		}
	}
	return b.String()
}

func decimal(p float64) string { return percent(int(p*100 + 0.5)) }
