package view_test

import (
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/app/view/demo"
	"cordwalk.example/cordwalk/exam"
)

// expert types an exam whose true findings are known, by keyboard alone, and counts the
// presses. It uses the block key where everything that the key would fill is normal.
func expert(t *testing.T, s *view.ExamSheet, truth func(exam.Key) (int8, exam.Vertebra)) (presses, findings int) {
	t.Helper()
	press := func(k view.Key) view.Outcome {
		presses++
		out := s.Press(k)
		require.NoError(t, out.Err, "%v", k)
		return out
	}
	for range 2000 {
		st, ok := s.Step()
		require.True(t, ok)
		c := s.Cells()[st.Cell]
		if c.Done() && !st.Again {
			break
		}
		if c.IsMeasure() {
			t.Fatal("the full spinal exam has no measures")
		}
		if all, n := blockIsNormal(s, st.Cell, truth); all && n >= 3 {
			press(view.Rune('r'))
			continue
		}
		g, level := truth(c.Key)
		press(view.Rune('0' + rune(g)))
		if m, _ := s.Mode(); m == view.Levelling {
			for _, r := range level.String() {
				if m, _ := s.Mode(); m == view.Levelling {
					press(view.Rune(r))
				}
			}
			if m, _ := s.Mode(); m == view.Levelling {
				press(view.Named("Enter"))
			}
		}
	}
	for _, f := range s.Visit().Findings {
		if f.Result.Tested() {
			findings++
			g, level := truth(f.Key())
			now, _ := f.Result.Grade()
			require.Equal(t, g, now, "%v", f.Key())
			require.Equal(t, level, f.Level)
		}
	}
	p := s.Progress()
	require.Equal(t, p.Total, p.Done, "the walk is complete")
	return presses, findings
}

// blockIsNormal says whether all that the block key would fill from a cell is normal.
func blockIsNormal(s *view.ExamSheet, cell int, truth func(exam.Key) (int8, exam.Vertebra)) (bool, int) {
	before := s.Visit()
	if err := s.FocusCell(cell); err != nil {
		return false, 0
	}
	out := s.RestNormal(false)
	n := out.Filled
	good := true
	for _, f := range s.Visit().Findings {
		if _, had := before.Find(f.Key()); had {
			continue
		}
		if g, _ := truth(f.Key()); g != f.Item.Info().Normal {
			good = false
		}
	}
	if n > 0 {
		s.Undo()
	}
	_ = s.FocusCell(cell)
	return good, n
}

func fullSpinal(t *testing.T, p exam.Patient) *view.ExamSheet {
	t.Helper()
	at := time.Date(2026, 3, 2, 10, 0, 0, 0, time.UTC)
	in, err := view.ExamOf(exam.Practice{}, p, exam.Visit{ID: exam.ID{1}, Patient: p.ID, Examined: at, Examiner: "A. Moor", Protocol: exam.FullSpinal}, nil)
	require.NoError(t, err)
	s, err := view.NewExamSheet(in)
	require.NoError(t, err)
	return s
}

// TestKeyPressesOfAFullExam: at most 1.3 key presses a finding for the standard full exam
// of a dog. At five keys a second a normal dog takes under 20 s of typing, an ill one under 60.
func TestKeyPressesOfAFullExam(t *testing.T) {
	dog := exam.Patient{ID: exam.ID{2}, Name: "Fig", Species: exam.Dog}
	normal := func(k exam.Key) (int8, exam.Vertebra) { return k.Item.Info().Normal, 0 }
	presses, findings := expert(t, fullSpinal(t, dog), normal)
	t.Logf("normal dog: %d presses for %d findings, %.2f each, %.0f s at five keys a second", presses, findings, float64(presses)/float64(findings), float64(presses)/5)
	require.LessOrEqual(t, float64(presses)/float64(findings), 1.3)
	require.Less(t, float64(presses)/5, 20.0)

	for _, c := range demo.New(demo.Seed, demo.LastDay).Cases {
		if c.Patient.Species != exam.Dog {
			continue
		}
		// The true grades of a full exam: the visit's own, and normal where it has none.
		v := c.Visits[0]
		truth := func(k exam.Key) (int8, exam.Vertebra) {
			if f, ok := v.Find(k); ok {
				if g, ok := f.Result.Grade(); ok {
					return g, f.Level
				}
			}
			return k.Item.Info().Normal, 0
		}
		p := dog
		presses, findings := expert(t, fullSpinal(t, p), truth)
		t.Logf("%s: %d presses for %d findings, %.2f each, %.0f s", c.Patient.Name, presses, findings, float64(presses)/float64(findings), float64(presses)/5)
		require.LessOrEqual(t, float64(presses)/float64(findings), 1.3, c.Patient.Name)
		require.Less(t, float64(presses)/5, 60.0)
	}
}
