package view

import (
	"os"
	"path/filepath"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"cordwalk.example/cordwalk/app/chart"
	"cordwalk.example/cordwalk/exam"
)

func TestCompareOrdersByWhatMatters(t *testing.T) {
	before := exam.Visit{ID: id(1), Examined: day0, Examiner: "A. Moor", Surface: "grip", Aid: "sling", Findings: []exam.Finding{
		finding(exam.Hopping, exam.PelvicLeft, 0), // not looked at today
		finding(exam.Patellar, exam.PelvicLeft, 1),
		finding(exam.Patellar, exam.PelvicRight, 1),
		finding(exam.VoluntaryMotor, exam.PelvicLeft, 3),
		finding(exam.VoluntaryMotor, exam.PelvicRight, 1),
		finding(exam.Tone, exam.PelvicLeft, 2),
		finding(exam.Tone, exam.PelvicRight, 1),
		finding(exam.BladderOutflow, exam.Midline, 1),
		finding(exam.Menace, exam.Left, 2),
	}, Measures: []exam.Measured{{Measure: exam.ThighGirth, Site: exam.Left, At: 70, Value: 13}, {Measure: exam.Weight, Value: 9}}}
	after := exam.Visit{ID: id(2), Examined: day0.AddDate(0, 0, 7), Examiner: "T. Lindqvist", Surface: "slick", Findings: []exam.Finding{
		finding(exam.Patellar, exam.PelvicLeft, 3),       // normal was crossed
		finding(exam.Patellar, exam.PelvicRight, 2),      // better
		finding(exam.VoluntaryMotor, exam.PelvicLeft, 1), // worse by two
		finding(exam.VoluntaryMotor, exam.PelvicRight, 2),
		finding(exam.Tone, exam.PelvicLeft, 2),
		finding(exam.Tone, exam.PelvicRight, 1),
		finding(exam.BladderOutflow, exam.Midline, 2), // another kind
		{Item: exam.Hopping, Site: exam.PelvicLeft, Result: exam.Untested(exam.Pain)},
		finding(exam.PawPlacement, exam.PelvicLeft, 0), // not tested then
	}, Measures: []exam.Measured{{Measure: exam.ThighGirth, Site: exam.Left, At: 70, Value: 12}, {Measure: exam.Weight, Value: 9.4}}}
	c := NewCompare(dog(), before, after)
	var got []string
	for _, r := range c.Rows {
		got = append(got, r.Section.String()+" "+r.Key.String())
	}
	require.Equal(t, []string{
		"not-looked-at hopping/pelvic-left",
		"worse voluntary-motor/pelvic-left",
		"better voluntary-motor/pelvic-right", "better patellar/pelvic-right",
		"different patellar/pelvic-left", "different bladder-outflow/midline",
		"new paw-placement/pelvic-left",
		"same tone/pelvic-right",
		"normal tone/pelvic-left",
		"once menace/left",
	}, got)
	require.Equal(t, "not tested (pain)", c.Rows[0].AfterWords)
	require.False(t, c.Rows[1].Mark.Hollow, "two steps are more than noise")
	require.True(t, c.Rows[2].Mark.Hollow)
	require.Equal(t, Ring, c.Rows[4].Mark.Shape)
	require.Equal(t, []string{"surface: grip then, slick now"}, c.Unlike, "an aid that was not said is no difference")
	require.Equal(t, "2 better, 1 worse, 2 different since 2 Mar 2026; 1 was abnormal and is not looked at today.", c.Words)
	require.Equal(t, "another examiner: not comparable", c.Measures[0].Unlike)
	require.Equal(t, "−1", c.Measures[0].ChangeWords)
	require.Empty(t, c.Measures[1].Unlike)
	require.Equal(t, "+0.4", c.Measures[1].ChangeWords)
}

func TestReturnedWithinTenDays(t *testing.T) {
	p := dog()
	p.Problems = []exam.Problem{{Diagnosis: "infarct", Onset: exam.DayOf(day0.AddDate(0, 0, -2))}}
	a := exam.Visit{ID: id(1), Examined: day0, Findings: []exam.Finding{finding(exam.Patellar, exam.PelvicLeft, 0)}}
	b := exam.Visit{ID: id(2), Examined: day0.AddDate(0, 0, 3), Findings: []exam.Finding{finding(exam.Patellar, exam.PelvicLeft, 2)}}
	require.Equal(t, "returned", NewCompare(p, a, b).Rows[0].Mark.Word)
	b.Examined = day0.AddDate(0, 0, 30)
	require.Equal(t, "better", NewCompare(p, a, b).Rows[0].Mark.Word)
}

// TestCompareMirrors: swapping the visits swaps better and worse, and nothing is lost.
func TestCompareMirrors(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		visit := func(n byte, name string) exam.Visit {
			v := exam.Visit{ID: id(n), Examined: day0.AddDate(0, 0, int(n))}
			for _, i := range exam.Items() {
				for _, s := range i.Info().Sites {
					g := rapid.Int8Range(i.Info().First-1, i.Last()).Draw(rt, name)
					if g >= i.Info().First {
						v.Findings = append(v.Findings, finding(i, s, g))
					}
				}
			}
			return v
		}
		a, b := visit(1, "a"), visit(2, "b")
		ab, ba := NewCompare(dog(), a, b), NewCompare(dog(), b, a)
		require.Equal(rt, len(ab.Rows), len(ba.Rows))
		require.Equal(rt, ab.Count(GotBetter), ba.Count(GotWorse))
		require.Equal(rt, ab.Count(GotWorse), ba.Count(GotBetter))
		require.Equal(rt, ab.Count(IsDifferent), ba.Count(IsDifferent))
		require.Equal(rt, ab.Count(NotLookedAt), ba.Count(NewlyTested))
	})
}

func TestCourseShowsEventsGoalsAndWhatLiesBehindAPoint(t *testing.T) {
	p := dog()
	p.Problems = []exam.Problem{{Diagnosis: "disc", Onset: "2026-02-20", Surgery: "2026-02-21"}}
	p.Medicines = []exam.Medicine{{Name: "gabapentin", Start: "2026-02-22", Stop: "2026-03-20"}}
	p.Goals = []exam.Goal{{Words: "bears weight", Item: "voluntary-motor", Site: "pelvic-left", Target: 3, By: "2026-05-01"}}
	visits := []exam.Visit{
		{ID: id(2), Examined: day0.AddDate(0, 0, 7), Surface: "slick", Findings: []exam.Finding{finding(exam.Patellar, exam.PelvicLeft, 2), finding(exam.VoluntaryMotor, exam.PelvicLeft, 2)},
			Measures: []exam.Measured{{Measure: exam.Weight, Value: 9}}},
		{ID: id(1), Examined: day0, Surface: "grip", Findings: []exam.Finding{finding(exam.Patellar, exam.PelvicLeft, 0), finding(exam.VoluntaryMotor, exam.PelvicLeft, 1),
			{Item: exam.VoluntaryMotor, Site: exam.PelvicRight, Result: exam.Untested(exam.Pain)}}, Measures: []exam.Measured{{Measure: exam.Weight, Value: 9.2}}},
	}
	sorted := []exam.Visit{visits[1], visits[0]}
	c := NewCourse(p, visits, PlainScores(p.Species, sorted), false)
	require.Equal(t, id(1), c.Visits[0].ID, "oldest first")
	var events []string
	for _, e := range c.Events {
		events = append(events, e.Word)
	}
	require.Equal(t, []string{"onset", "surgery", "gabapentin", "gabapentin stopped"}, events)
	require.True(t, c.Strip.Visits[1].Unlike)
	require.Equal(t, "not like for like: surface", c.Strip.Visits[1].Note)
	row := -1
	for i, r := range c.Strip.Rows {
		if r.Label == "L5" {
			row = i
		}
	}
	require.Equal(t, chart.Value{Known: true, Value: 0, Count: 1}, c.Strip.Rows[row].Left[0])
	require.Equal(t, chart.Value{Known: true, Value: 100, Count: 1}, c.Strip.Rows[row].Left[1])
	require.False(t, c.Strip.Rows[row].Right[0].Known)
	h := c.HoverSegment(row, 0, exam.Left)
	require.Equal(t, "L5 left, 2 Mar 2026", h.Title)
	require.Equal(t, []string{"score 0 % from 1 finding", "Patellar reflex, left pelvic: 0 absent"}, h.Lines)
	require.Equal(t, []string{"too little tested to say"}, c.HoverSegment(row, 0, exam.Right).Lines)
	require.Len(t, c.Limbs.Limbs[ColumnPelvicLeft].Goals, 1)
	require.True(t, c.Limbs.Limbs[ColumnPelvicRight].Untested[0])
	require.Equal(t, []string{"weight/"}, c.MeasureKeys)
	require.Contains(t, c.HoverLimb(ColumnPelvicLeft, 1).Lines, "Voluntary movement: 2 bears weight but gives way or must be helped")
	require.Equal(t, "surgery", c.HoverEvent(1).Title)
	require.Empty(t, c.HoverSegment(99, 0, exam.Left).Title)
}

func TestPatientForm(t *testing.T) {
	f := NewPatientForm(exam.Patient{})
	require.True(t, f.New())
	_, bad := f.Patient()
	require.Contains(t, bad, "name")
	f.Name, f.Species, f.Born, f.RecheckDays = " Fig ", "cat", "2019-05", "14"
	f.Problems = []exam.Problem{{ID: id(3)}, {ID: id(4), Diagnosis: "disc extrusion", Level: "T12-T13", Onset: "2026-02-11"}}
	f.Goals = []exam.Goal{{ID: id(5), Words: "walks alone", Item: "ambulation", Site: "midline", Target: 2}}
	p, bad := f.Patient()
	require.Empty(t, bad)
	require.Equal(t, "Fig", p.Name)
	require.Len(t, p.Problems, 1, "an empty line is no problem")
	require.Equal(t, 14, p.RecheckDays)
	again := NewPatientForm(p)
	same, bad := again.Patient()
	require.Empty(t, bad)
	require.Equal(t, p, same, "reading a form that nobody touched changes nothing")
	for field, spoil := range map[string]func(*PatientForm){
		"species":      func(f *PatientForm) { f.Species = "fish" },
		"born":         func(f *PatientForm) { f.Born = "2019-13" },
		"recheck-days": func(f *PatientForm) { f.RecheckDays = "0" },
		"problem-0":    func(f *PatientForm) { f.Problems = []exam.Problem{{Diagnosis: "disc", Level: "T19"}} },
		"precaution-0": func(f *PatientForm) { f.Precautions = []exam.PrecautionOn{{Code: "wobbly"}} },
		"goal-0": func(f *PatientForm) {
			f.Goals = []exam.Goal{{Words: "x", Item: "patellar", Site: "pelvic-left", Target: 9}}
		},
		"medicine-0": func(f *PatientForm) { f.Medicines = []exam.Medicine{{Dose: "1"}} },
	} {
		g := NewPatientForm(p)
		spoil(g)
		got, bad := g.Patient()
		require.Contains(t, bad, field)
		require.Zero(t, got.ID)
		require.Equal(t, "Fig", g.Name, "nothing of the form is lost")
	}
	require.Len(t, f.Missing(), 2)
}

func TestFirstRunAsksThreeThings(t *testing.T) {
	f := NewFirstRun("/home/x/cordwalk")
	_, bad := f.Check("Europe/Berlin")
	require.Len(t, bad, 3)
	f.Practice, f.Examiner, f.Passphrase = "Mill Lane", "Ada Moor", "three long words"
	_, bad = f.Check("Europe/Berlin")
	require.Equal(t, Problems{"again": "The two passphrases differ."}, bad)
	f.Again = f.Passphrase
	p, bad := f.Check("Europe/Berlin")
	require.Empty(t, bad)
	require.Equal(t, "AM", p.Examiners[0].Initials)
	require.Equal(t, "Europe/Berlin", p.Zone)
}

func TestRoutesAreValues(t *testing.T) {
	for s := ScreenCaseload; s < screenCount; s++ {
		for _, r := range []Route{{Screen: s}, {Screen: s, Patient: id(1)}, {Screen: s, Patient: id(1), Visit: id(2), Other: id(3)}, {Screen: s, Other: id(3)}} {
			got, err := ParseRoute(r.String())
			require.NoError(t, err)
			require.Equal(t, r, got)
		}
	}
	for _, bad := range []string{"", "nowhere", "exam/xyz", "exam/-/-/-/-"} {
		_, err := ParseRoute(bad)
		require.Error(t, err, bad)
	}
	var tr Trail
	a, b, c := Route{Screen: ScreenCaseload}, Route{Screen: ScreenExam, Patient: id(1)}, Route{Screen: ScreenCourse, Patient: id(1)}
	tr.Go(a)
	tr.Go(b)
	tr.Go(b)
	tr.Go(c)
	r, ok := tr.Back()
	require.True(t, ok)
	require.Equal(t, b, r)
	r, ok = tr.Back()
	require.True(t, ok)
	require.Equal(t, a, r)
	_, ok = tr.Back()
	require.False(t, ok)
	r, _ = tr.Forward()
	require.Equal(t, b, r)
	tr.Go(a)
	_, ok = tr.Forward()
	require.False(t, ok)
	for range 3 * trailMax {
		tr.Go(b)
		tr.Go(c)
	}
	require.LessOrEqual(t, len(tr.list), trailMax)
	require.Equal(t, c, tr.Here())
}

func TestSettingsSurviveDamage(t *testing.T) {
	path := filepath.Join(t.TempDir(), "config", "settings.json")
	s, err := LoadSettings(path)
	require.NoError(t, err)
	require.Zero(t, s.Width)
	s.Width, s.Height, s.TextScale, s.Route = 1366, 768, 120, Route{Screen: ScreenExam, Patient: id(1)}.String()
	k := exam.Key{Item: exam.Patellar, Site: exam.PelvicLeft}
	s.KeepResume(id(1), k)
	for n := range 2 * resumeMax {
		s.KeepResume(exam.ID{14: byte(n >> 8), 15: byte(n)}, k)
	}
	require.LessOrEqual(t, len(s.Resume), resumeMax)
	s.KeepResume(id(1), k)
	require.NoError(t, s.Save(path))
	got, err := LoadSettings(path)
	require.NoError(t, err)
	require.Equal(t, s, got)
	require.Equal(t, k, got.ResumeAt(id(1)))
	got.KeepResume(id(1), exam.Key{})
	require.Zero(t, got.ResumeAt(id(1)))
	left, err := filepath.Glob(filepath.Join(filepath.Dir(path), "*.tmp"))
	require.NoError(t, err)
	require.Empty(t, left)
	require.NoError(t, os.WriteFile(path, []byte("{damaged"), 0o600))
	got, err = LoadSettings(path)
	require.Error(t, err)
	require.Zero(t, got.Width, "a damaged file starts anew")
}

func TestStripAboveEveryScreen(t *testing.T) {
	p := dog()
	p.Sex, p.Neutered, p.Born, p.Demo = exam.Female, true, "2020-03", true
	p.Problems = []exam.Problem{{Diagnosis: "disc extrusion", Level: "T12-T13", Side: "left"}, {Diagnosis: "old", Resolved: "2025-01-01"}}
	p.Precautions = []exam.PrecautionOn{{Code: "rest-until", Until: "2026-04-01", Note: "crate"}, {Code: "bites"}, {Code: "rest-until", Until: "2026-01-01"}}
	p.Referral = exam.Referral{By: "Dr A", Until: "2026-02-01"}
	s := StripOf(p, day0, exam.Units{})
	require.Equal(t, "Dachshund, female, neutered, 5 years", s.Signalment)
	require.Equal(t, "disc extrusion T12-T13, left", s.Problem)
	require.Equal(t, []string{"rest until 1 Apr 2026 (crate)", "bites"}, s.Precautions, "what has run out is not shown")
	require.Equal(t, "the referral ended on 1 Feb 2026", s.Limits)
	require.True(t, s.Demo)
}

// TestBeads: full is the item's normal grade, whatever its number; more than normal has a bar.
func TestBeads(t *testing.T) {
	for _, i := range exam.Items() {
		n := i.Info().Normal
		for g := i.Info().First; g <= i.Last(); g++ {
			f := finding(i, i.Info().Sites[0], g)
			b := BeadOf(f)
			require.True(t, b.Tested)
			if f.Normal() {
				require.Equal(t, 1.0, b.Fill, "%v %d", i, g)
			} else if n >= 0 && !b.Kind {
				require.Less(t, b.Fill, 1.0, "%v %d", i, g)
			}
			if i.TwoSided() {
				require.Equal(t, min(2, max(0, int(g-n))), b.Bars, "%v %d", i, g)
			} else {
				require.Zero(t, b.Bars)
			}
		}
		require.False(t, BeadOf(exam.Finding{Item: i}).Tested)
	}
}

func TestDates(t *testing.T) {
	require.Equal(t, "2 Mar 2026", Day(day0))
	require.Equal(t, "May 2019", DateWords("2019-05"))
	require.Equal(t, "2019", DateWords("2019"))
	require.Empty(t, DateWords(""))
	late := time.Date(2026, 3, 2, 23, 30, 0, 0, time.FixedZone("", 3600))
	require.Equal(t, 1, DaysBetween(late, late.Add(time.Hour)), "calendar days, not spans of 24 hours")
}
