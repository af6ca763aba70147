package view

import (
	"strings"
	"testing"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/stim"
)

// exact is a test whose points lie on Weiss' law with a rheobase of 4 mA and a chronaxie of c ms.
func exact(c float64, law string) stim.Test {
	t := stim.Test{ID: exam.ID{15: 1}, Muscle: "quadriceps", Site: "pelvic-left", Law: law}
	for i, w := range StimWidths {
		t.Readings = append(t.Readings, stim.Reading{Width: w, Currents: []float64{4 * (1 + c/w) * (1 + 0.004*float64(i%3-1))}})
	}
	return t
}

func TestAStrengthTestIsSaidWithItsLawAndChange(t *testing.T) {
	old := exact(0.3, "weiss-log")
	rec, err := old.Record()
	if err != nil {
		t.Fatal(err)
	}
	before := []exam.Visit{{ID: exam.ID{15: 2}, Examined: time.Date(2026, 3, 2, 10, 0, 0, 0, time.UTC), Stim: []exam.StimRecord{rec}}}
	r := NewStimResult(exact(0.6, "weiss-log"), before)
	if !r.Fitted || !strings.HasPrefix(r.Chronaxie, "Chronaxie 0.59") && !strings.HasPrefix(r.Chronaxie, "Chronaxie 0.60") || !strings.Contains(r.Chronaxie, "Weiss") {
		t.Errorf("fitted %v, %q", r.Fitted, r.Chronaxie)
	}
	if r.Label != "nerve-like" {
		t.Errorf("a chronaxie of 0.6 ms is called %q", r.Label)
	}
	if !strings.HasPrefix(r.Change, "Chronaxie longer than on 2 Mar 2026") {
		t.Errorf("the change reads %q", r.Change)
	}
	if other := NewStimResult(exact(0.6, "lapicque"), before); !strings.HasPrefix(other.Change, "Not comparable") {
		t.Errorf("two laws are compared: %q", other.Change)
	}
	if same := NewStimResult(exact(0.3, "weiss-log"), before); !strings.HasPrefix(same.Change, "Chronaxie not clearly other") {
		t.Errorf("the same test again reads %q", same.Change)
	}
	few := stim.Test{Muscle: "x", Site: "pelvic-left", Readings: []stim.Reading{{Width: 1, Currents: []float64{3}}}}
	if r := NewStimResult(few, nil); r.Fitted || len(r.Cautions) != 1 {
		t.Errorf("one point: %+v", r)
	}
}

func TestABadPointIsNamed(t *testing.T) {
	x := exact(0.4, "weiss-log")
	x.Readings[4].Currents[0] *= 2
	r := NewStimResult(x, nil)
	if !r.Chart.Points[4].Bad || !strings.Contains(strings.Join(r.Cautions, " "), "The point at 3 ms does not fit") {
		t.Errorf("the point that is twice too high is not named: %v", r.Cautions)
	}
}

func TestCurrentsAreReadAsTyped(t *testing.T) {
	got, err := ParseCurrents("12 12,5;13")
	if err != nil || CurrentsWords(got) != "12 12.5 13" {
		t.Errorf("%v, %v", got, err)
	}
	for _, bad := range []string{"-3", "twelve", "0"} {
		if _, err := ParseCurrents(bad); err == nil {
			t.Errorf("%q is taken", bad)
		}
	}
}

func TestNoSessionBeforeTheQuestions(t *testing.T) {
	if ok, _ := StimAllowed(stim.Consent{}, false); ok {
		t.Error("a session is allowed though nobody asked")
	}
	c := stim.Consent{Answers: map[string]bool{}}
	for _, q := range stim.Questions() {
		c.Answers[q.Key] = false
	}
	if ok, why := StimAllowed(c, true); !ok {
		t.Errorf("all answered with no: %s", why)
	}
	c.Answers["skin"] = true
	if ok, _ := StimAllowed(c, true); ok {
		t.Error("a yes without a reason is let through")
	}
	c.Reasons = map[string]string{"skin": "healed, the surgeon agrees"}
	if ok, why := StimAllowed(c, true); !ok {
		t.Errorf("a yes with its reason: %s", why)
	}
	c.Answers["pacemaker"] = true
	if ok, why := StimAllowed(c, true); ok || !strings.Contains(why, "pacemaker") {
		t.Errorf("a pacemaker: %v, %s", ok, why)
	}
}

func TestRemarksNameTheirSource(t *testing.T) {
	got := SessionRemarks(stim.Session{Aim: "strengthen", Site: "pelvic-left", Frequency: 80, Pulse: 200, SkinAfter: "sore"})
	if len(got) != 2 || got[0] != "Frequency 80 Hz: the literature says 25 to 50 (CSMR-NMES citing Millis 1997; ramp from memory; minutes common practice)" {
		t.Errorf("%q", got)
	}
}
