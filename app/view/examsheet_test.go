package view

import (
	"errors"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"cordwalk.example/cordwalk/exam"
)

var day0 = time.Date(2026, 3, 2, 10, 0, 0, 0, time.UTC)

func id(n byte) exam.ID { return exam.ID{15: n, 6: 0x70, 8: 0x80} }

func dog() exam.Patient {
	return exam.Patient{ID: id(1), Name: "Bramble", Species: exam.Dog, Breed: "Dachshund"}
}

// spinalItems is a protocol long enough to have every kind of cell in it.
func spinalItems() []exam.Item {
	return []exam.Item{exam.Mentation, exam.Breathing, exam.Ambulation, exam.VoluntaryMotor, exam.Ataxia, exam.Knuckling, exam.Lameness,
		exam.PawPlacement, exam.Hopping, exam.MassQuadriceps, exam.MassHamstrings, exam.MassEpaxial, exam.Menace, exam.Horner, exam.Gag,
		exam.Skin, exam.Wound, exam.Tone, exam.Biceps, exam.Patellar, exam.CranialTibial, exam.Withdrawal, exam.Perineal,
		exam.TailTone, exam.AnalTone, exam.CutaneousTrunci, exam.SpinalPain, exam.LumbosacralExtension, exam.VoluntaryUrination,
		exam.BladderFill, exam.SuperficialPain, exam.DeepPain}
}

func newSheet(t testing.TB, change func(*ExamInput)) (*ExamSheet, *[]Batch) {
	t.Helper()
	var saved []Batch
	in := ExamInput{Patient: dog(), Items: spinalItems(),
		Visit: exam.Visit{ID: id(9), Patient: id(1), Examined: day0, Examiner: "A. Moor"},
		Save:  func(b Batch) { saved = append(saved, b) }, Now: func() time.Time { return day0.Add(time.Hour) }}
	if change != nil {
		change(&in)
	}
	s, err := NewExamSheet(in)
	require.NoError(t, err)
	return s, &saved
}

// at moves the focus to a cell.
func at(t testing.TB, s *ExamSheet, i exam.Item, site exam.Site) {
	t.Helper()
	require.NoError(t, s.FocusKey(exam.Key{Item: i, Site: site}))
}

func press(s *ExamSheet, keys string) Outcome {
	var out Outcome
	for _, r := range keys {
		out = s.Press(Rune(r))
	}
	return out
}

func grade(s *ExamSheet, i exam.Item, site exam.Site) int8 {
	g, ok := s.Visit().Grade(i, site)
	if !ok {
		return -1
	}
	return g
}

func finding(i exam.Item, site exam.Site, g int8) exam.Finding {
	return exam.Finding{Item: i, Site: site, Result: exam.Graded(g)}
}

// earlier gives the sheet a visit a week before.
func earlier(fs ...exam.Finding) func(*ExamInput) {
	return func(in *ExamInput) {
		in.Earlier = []exam.Visit{{ID: id(8), Patient: id(1), Examined: day0.AddDate(0, 0, -7), Examiner: "A. Moor", Findings: fs}}
	}
}

func TestDigitGradesAndGoesOn(t *testing.T) {
	s, saved := newSheet(t, nil)
	c, _ := s.Cell()
	require.Equal(t, exam.Mentation, c.Key.Item)
	require.True(t, press(s, "2").Handled)
	require.EqualValues(t, 2, grade(s, exam.Mentation, exam.Midline))
	require.Len(t, *saved, 1)
	c, _ = s.Cell()
	require.Equal(t, exam.Breathing, c.Key.Item)
	out := press(s, "7")
	require.Error(t, out.Err)
	require.Contains(t, out.Words, "0 (laboured)")
	require.Len(t, *saved, 1, "a refused key writes nothing")
}

func TestWalkGoesByPosition(t *testing.T) {
	s, _ := newSheet(t, nil)
	var order []Position
	var sides []exam.Site
	for _, st := range s.steps {
		if st.Again {
			continue
		}
		if len(order) == 0 || order[len(order)-1] != st.Position {
			order = append(order, st.Position)
		}
		if st.Position == OnRight || st.Position == OnLeft {
			sides = append(sides, s.cells[st.Cell].Site.Side())
		}
	}
	require.Equal(t, []Position{HandsOff, Standing, OnRight, OnLeft, Trunk, Spine, LastPain}, order)
	for i, side := range sides {
		if side == exam.Right {
			for _, later := range sides[i:] {
				require.Equal(t, exam.Right, later, "the left cells are done before the animal is turned")
			}
			break
		}
	}
	require.Equal(t, exam.DeepPain, s.cells[s.steps[len(s.steps)-1].Cell].Key.Item, "deep pain comes last")
	rows := map[exam.Item]int{}
	for _, r := range s.Rows() {
		rows[r.Item]++
	}
	for i, n := range rows {
		require.Equal(t, 1, n, "%v stands once", i)
	}
}

func TestSpineBeginsAtThePainlessEnd(t *testing.T) {
	first := func(s *ExamSheet) exam.Site {
		for _, st := range s.steps {
			if s.cells[st.Cell].Key.Item == exam.SpinalPain {
				return s.cells[st.Cell].Site
			}
		}
		return exam.NoSite
	}
	s, _ := newSheet(t, earlier(finding(exam.SpinalPain, exam.Cervical, 2)))
	require.Equal(t, exam.Sacrocaudal, first(s))
	s, _ = newSheet(t, earlier(finding(exam.SpinalPain, exam.Lumbosacral, 2)))
	require.Equal(t, exam.Cervical, first(s))
	s, _ = newSheet(t, func(in *ExamInput) { in.Patient.Problems = []exam.Problem{{Diagnosis: "disc", Level: "C3-C4"}} })
	require.Equal(t, exam.Sacrocaudal, first(s))
}

func TestHeldAndSternalPositions(t *testing.T) {
	s, _ := newSheet(t, func(in *ExamInput) { in.Posture = Held })
	for _, st := range s.steps {
		require.NotEqual(t, OnRight, st.Position)
		require.NotEqual(t, OnLeft, st.Position)
	}
	at(t, s, exam.Patellar, exam.PelvicRight)
	s.SetPosture(Sternal)
	c, _ := s.Cell()
	require.Equal(t, exam.Key{Item: exam.Patellar, Site: exam.PelvicRight}, c.Key, "the focus stays where it was")
	st, _ := s.Step()
	require.Equal(t, OnChest, st.Position)
}

func TestReflexAbsentUppermostIsOfferedUndermost(t *testing.T) {
	s, _ := newSheet(t, nil)
	at(t, s, exam.Patellar, exam.PelvicLeft)
	before := s.Progress().Total
	press(s, "0")
	require.Equal(t, before+1, s.Progress().Total, "one more stop")
	for k := range s.steps {
		if s.active(k) && s.steps[k].Again {
			require.Equal(t, OnLeft, s.steps[k].Position)
			s.FocusStep(k)
		}
	}
	press(s, "2")
	f, ok := s.Visit().Find(exam.Key{Item: exam.Patellar, Site: exam.PelvicLeft})
	require.True(t, ok)
	require.Equal(t, exam.Graded(2), f.Result)
	require.Equal(t, Undermost, f.Note)
	require.Equal(t, before, s.Progress().Total)
	at(t, s, exam.Patellar, exam.PelvicRight)
	press(s, "0")
	n := 0
	for k := range s.steps {
		if s.open(k) && s.steps[k].Again {
			n++
			s.FocusStep(k)
		}
	}
	require.Equal(t, 1, n)
	press(s, "0")
	for k := range s.steps {
		require.False(t, s.open(k) && s.steps[k].Again, "asked again once only")
	}
}

// TestBulkNeverFills tries each item that the vocabulary keeps from the bulk keys
// (vocabulary: superficial-pain, deep-pain, sensation, spinal-pain, cutaneous-trunci, gag,
// breathing, skin, wound, bladder and bowel).
func TestBulkNeverFills(t *testing.T) {
	excluded := []exam.Item{exam.SuperficialPain, exam.DeepPain, exam.SpinalPain, exam.CutaneousTrunci, exam.Gag, exam.Breathing,
		exam.Skin, exam.Wound, exam.SensationRadial, exam.SensationUlnar, exam.SensationMusculocutaneous, exam.SensationAxillary,
		exam.SensationSaphenous, exam.SensationFibular, exam.SensationTibial, exam.SensationPudendal, exam.VoluntaryUrination,
		exam.BladderFill, exam.BladderOutflow, exam.UrineLeak, exam.UrineLook, exam.FaecalContinence, exam.Defaecation}
	for _, i := range excluded {
		t.Run(i.String(), func(t *testing.T) {
			for _, key := range "rg" {
				fs := []exam.Finding{}
				for _, site := range i.Info().Sites {
					fs = append(fs, finding(i, site, i.Info().Normal))
				}
				s, _ := newSheet(t, func(in *ExamInput) {
					in.Items = append(exam.Items()[:0:0], exam.Items()...)
					earlier(fs...)(in)
				})
				// Every stop of the walk presses the bulk key: none may reach the item.
				for k := range s.steps {
					s.FocusStep(k)
					press(s, string(key))
				}
				for _, f := range s.Visit().Findings {
					require.NotEqual(t, i, f.Item)
				}
				// Nor may it be copied.
				at(t, s, i, i.Info().Sites[0])
				require.Error(t, press(s, "s").Err)
				require.Equal(t, int8(-1), grade(s, i, i.Info().Sites[0]))
			}
		})
	}
}

func TestRestOfLimbIsOneLook(t *testing.T) {
	s, saved := newSheet(t, nil)
	at(t, s, exam.Tone, exam.PelvicLeft)
	press(s, "1")
	c, _ := s.Cell()
	require.Equal(t, exam.PelvicLeft, c.Site, "one limb is finished before the next")
	n := len(*saved)
	out := press(s, "r")
	require.Equal(t, 3, out.Filled, "patellar, cranial tibial, withdrawal")
	require.Equal(t, "3 tests filled normal", out.Words)
	require.Len(t, *saved, n+1, "one action, one write")
	require.EqualValues(t, 1, grade(s, exam.Tone, exam.PelvicLeft), "what is graded stays")
	block := ""
	for _, f := range s.Visit().Findings {
		if f.How != exam.RestNormal {
			continue
		}
		require.Equal(t, exam.PelvicLeft, f.Site)
		require.NotEmpty(t, f.Block)
		if block != "" {
			require.Equal(t, block, f.Block)
		}
		block = f.Block
	}
	at(t, s, exam.Tone, exam.ThoracicLeft)
	press(s, "r")
	f, _ := s.Visit().Find(exam.Key{Item: exam.Biceps, Site: exam.ThoracicLeft})
	require.NotEqual(t, block, f.Block, "another fill is another look")
	require.True(t, s.Undo())
	require.Equal(t, int8(-1), grade(s, exam.Biceps, exam.ThoracicLeft))
	require.EqualValues(t, 2, grade(s, exam.Patellar, exam.PelvicLeft))
}

func TestSameAsLastCopiesAndSaysSo(t *testing.T) {
	s, _ := newSheet(t, earlier(finding(exam.Patellar, exam.PelvicLeft, 3)))
	at(t, s, exam.Patellar, exam.PelvicLeft)
	press(s, "s")
	f, _ := s.Visit().Find(exam.Key{Item: exam.Patellar, Site: exam.PelvicLeft})
	require.Equal(t, exam.Graded(3), f.Result)
	require.Equal(t, exam.SameAsLast, f.How)
	require.True(t, f.Seen)
	at(t, s, exam.Patellar, exam.PelvicRight)
	require.ErrorContains(t, press(s, "s").Err, "not tested last time")
}

func TestPeekIsStored(t *testing.T) {
	s, _ := newSheet(t, earlier(finding(exam.Patellar, exam.PelvicLeft, 3), finding(exam.Patellar, exam.PelvicRight, 3)))
	at(t, s, exam.Patellar, exam.PelvicLeft)
	require.False(t, s.ShowLast(s.FocusIndex()), "the last grade bends the next one")
	out := press(s, "p")
	require.Equal(t, "Last time: 3 exaggerated", out.Words)
	require.True(t, s.ShowLast(s.FocusIndex()))
	press(s, "2")
	f, _ := s.Visit().Find(exam.Key{Item: exam.Patellar, Site: exam.PelvicLeft})
	require.True(t, f.Seen)
	at(t, s, exam.Patellar, exam.PelvicRight)
	i := s.FocusIndex()
	press(s, "2")
	f, _ = s.Visit().Find(exam.Key{Item: exam.Patellar, Site: exam.PelvicRight})
	require.False(t, f.Seen)
	require.True(t, s.ShowLast(i), "it appears once today's grade is given")
}

func TestBlindRepeatHidesEarlierGrades(t *testing.T) {
	s, _ := newSheet(t, func(in *ExamInput) {
		earlier(finding(exam.Patellar, exam.PelvicLeft, 3))(in)
		in.Visit.RepeatOf = id(7)
	})
	at(t, s, exam.Patellar, exam.PelvicLeft)
	i := s.FocusIndex()
	require.Error(t, press(s, "p").Err)
	require.Error(t, press(s, "s").Err)
	press(s, "2")
	require.False(t, s.ShowLast(i))
	_, ok := s.Last()
	require.False(t, ok)
}

func TestNotTestedTakesAReason(t *testing.T) {
	s, _ := newSheet(t, nil)
	at(t, s, exam.Hopping, exam.PelvicLeft)
	press(s, "xp")
	f, ok := s.Visit().Find(exam.Key{Item: exam.Hopping, Site: exam.PelvicLeft})
	require.True(t, ok)
	require.Equal(t, exam.Untested(exam.Pain), f.Result)
	at(t, s, exam.Hopping, exam.PelvicRight)
	press(s, "xw")
	press(s, "too tired")
	s.Press(Named("Enter"))
	f, _ = s.Visit().Find(exam.Key{Item: exam.Hopping, Site: exam.PelvicRight})
	require.Equal(t, exam.Untested(exam.OtherReason), f.Result)
	require.Equal(t, "too tired", f.Note)
	at(t, s, exam.Hopping, exam.ThoracicRight)
	press(s, "x")
	s.Press(Named("Escape"))
	_, ok = s.Visit().Find(exam.Key{Item: exam.Hopping, Site: exam.ThoracicRight})
	require.False(t, ok)
}

func TestCutaneousTrunciAsksForTheVertebra(t *testing.T) {
	for name, c := range map[string]struct {
		keys  []Key
		level string
	}{
		"typed":   {[]Key{Rune('t'), Rune('1'), Rune('2')}, "T12"},
		"short":   {[]Key{Rune('l'), Rune('4')}, "L4"},
		"one":     {[]Key{Rune('T'), Rune('1'), Named("Enter")}, "T1"},
		"arrows":  {[]Key{Named("Right"), Named("Right"), Named("Enter")}, "L2"},
		"default": {[]Key{Named("Enter")}, "T13"},
	} {
		t.Run(name, func(t *testing.T) {
			s, _ := newSheet(t, nil)
			at(t, s, exam.CutaneousTrunci, exam.Left)
			press(s, "1")
			m, _ := s.Mode()
			require.Equal(t, Levelling, m)
			for _, k := range c.keys {
				s.Press(k)
			}
			f, _ := s.Visit().Find(exam.Key{Item: exam.CutaneousTrunci, Site: exam.Left})
			require.Equal(t, c.level, f.Level.String())
			now, _ := s.Cell()
			require.Equal(t, exam.Key{Item: exam.CutaneousTrunci, Site: exam.Right}, now.Key, "and goes on")
		})
	}
}

func TestDeepPainRules(t *testing.T) {
	s, _ := newSheet(t, nil)
	cell := func(site exam.Site) Cell { return s.cells[s.index[exam.Key{Item: exam.DeepPain, Site: site}]] }
	at(t, s, exam.VoluntaryMotor, exam.PelvicLeft)
	press(s, "0")
	at(t, s, exam.VoluntaryMotor, exam.PelvicRight)
	press(s, "1")
	require.Empty(t, cell(exam.PelvicLeft).NotAsked)
	require.NotEmpty(t, cell(exam.PelvicLeft).Why, "due where there is no movement and the surface is not tested")
	require.Equal(t, "the limb moves on purpose", cell(exam.PelvicRight).NotAsked)
	at(t, s, exam.SuperficialPain, exam.PelvicLeft)
	press(s, "0")
	require.NotEmpty(t, cell(exam.PelvicLeft).Why)
	at(t, s, exam.SuperficialPain, exam.PelvicLeft)
	press(s, "1")
	require.Equal(t, "implied: the surface is felt", cell(exam.PelvicLeft).NotAsked)
	for k := range s.steps {
		if c := s.cells[s.steps[k].Cell]; c.Key.Item == exam.DeepPain && c.Site.IsLimb() {
			require.False(t, s.active(k))
		}
	}
}

func TestBarredCellsNeedAReason(t *testing.T) {
	s, saved := newSheet(t, func(in *ExamInput) {
		in.Barred = func(k exam.Key) string {
			if k.Item == exam.Hopping {
				return "unstable spine"
			}
			return ""
		}
	})
	for k, st := range s.steps {
		if s.cells[st.Cell].Key.Item == exam.Hopping {
			require.False(t, s.active(k), "never asked")
		}
	}
	require.Equal(t, 4, s.FillBarred())
	require.Len(t, *saved, 1)
	f, _ := s.Visit().Find(exam.Key{Item: exam.Hopping, Site: exam.PelvicLeft})
	require.Equal(t, exam.Untested(exam.NotSafe), f.Result)
	at(t, s, exam.Hopping, exam.PelvicLeft)
	require.ErrorContains(t, press(s, "2").Err, "unstable spine")
	require.Error(t, s.OverrideBar(s.FocusIndex(), " "))
	require.NoError(t, s.OverrideBar(s.FocusIndex(), "surgeon agreed by telephone"))
	require.NoError(t, press(s, "2").Err)
	f, _ = s.Visit().Find(exam.Key{Item: exam.Hopping, Site: exam.PelvicLeft})
	require.Equal(t, "surgeon agreed by telephone", f.Note)
}

func TestMeasuresTakeNumbers(t *testing.T) {
	s, _ := newSheet(t, func(in *ExamInput) { in.Measures = []exam.Measure{exam.Weight, exam.Temperature} })
	c, _ := s.Cell()
	require.Equal(t, exam.Weight, c.Measure)
	press(s, "9,4")
	s.Press(Named("Enter"))
	m, ok := s.Visit().Measured(exam.Weight, exam.NoSite)
	require.True(t, ok)
	require.Equal(t, 9.4, m.Value)
	c, _ = s.Cell()
	require.Equal(t, exam.Temperature, c.Measure)
	press(s, "385")
	out := s.Press(Named("Enter"))
	require.ErrorContains(t, out.Err, "25 to 45 °C")
	mode, text := s.Mode()
	require.Equal(t, Typing, mode)
	require.Equal(t, "385", text, "what was typed stays")
	s.Press(Named("Escape"))
	require.True(t, s.Undo())
	_, ok = s.Visit().Measured(exam.Weight, exam.NoSite)
	require.False(t, ok)
}

func TestClosingEndsUndoAndAmendmentsNeedAReason(t *testing.T) {
	s, saved := newSheet(t, nil)
	press(s, "22")
	require.Error(t, s.Close([]string{"Deep pain is lost"}))
	require.False(t, s.Closed())
	require.NoError(t, s.Close(nil))
	require.True(t, s.Closed())
	require.False(t, s.Undo())
	n := len(*saved)
	require.Error(t, press(s, "2").Err)
	require.Error(t, press(s, "r").Err)
	require.Len(t, *saved, n)
	require.NoError(t, s.Amend("typing slip"))
	at(t, s, exam.Mentation, exam.Midline)
	require.NoError(t, press(s, "3").Err)
	require.Equal(t, "typing slip", (*saved)[n].Reason)
	require.Error(t, s.Close(nil))
}

func TestResumeAtTheSameCell(t *testing.T) {
	s, _ := newSheet(t, nil)
	press(s, "322")
	was, _ := s.Cell()
	half := s.Visit()
	s2, _ := newSheet(t, func(in *ExamInput) { in.Visit = half })
	is, _ := s2.Cell()
	require.Equal(t, was.Key, is.Key)
	k := exam.Key{Item: exam.Patellar, Site: exam.PelvicRight}
	s3, _ := newSheet(t, func(in *ExamInput) { in.Visit, in.Resume = half, k })
	is, _ = s3.Cell()
	require.Equal(t, k, is.Key)
}

// TestUndoRedoAreExact walks random keys, then takes all back and does all again: every
// state on the way is met again, and the batches saved lead to the same visit.
func TestUndoRedoAreExact(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		fs := []exam.Finding{finding(exam.Patellar, exam.PelvicLeft, 3), finding(exam.Tone, exam.PelvicRight, 1), finding(exam.Hopping, exam.PelvicRight, 0)}
		s, saved := newSheet(t, earlier(fs...))
		stored := map[exam.Key]exam.Finding{}
		keys := rapid.SliceOfN(rapid.SampledFrom([]Key{Rune('0'), Rune('1'), Rune('2'), Rune('3'), Rune('n'), Rune('s'), Rune('x'), Rune('p'),
			Rune('r'), Rune('g'), Rune('['), Rune('<'), Named("Down"), Named("Right"), Named("Tab"), Named("Backspace"), Named("Enter"), Rune('u')}), 1, 60).Draw(rt, "keys")
		for _, k := range keys {
			s.Press(k)
		}
		var states []exam.Visit
		for {
			states = append(states, s.Visit())
			if !s.Undo() {
				break
			}
		}
		if len(s.Visit().Findings) != 0 {
			rt.Fatalf("all taken back, and %d findings are left", len(s.Visit().Findings))
		}
		for i := len(states) - 2; i >= 0; i-- {
			if !s.Redo() {
				rt.Fatalf("redo ended after %d of %d", len(states)-1-i, len(states)-1)
			}
			require.Equal(rt, states[i].Findings, s.Visit().Findings)
		}
		for _, b := range *saved {
			for _, c := range b.Cells {
				if c.Has {
					stored[c.Key] = c.After
				} else {
					delete(stored, c.Key)
				}
			}
		}
		require.Len(rt, s.Visit().Findings, len(stored))
		for _, f := range s.Visit().Findings {
			require.Equal(rt, stored[f.Key()], f)
			require.NoError(rt, f.Validate(exam.Dog))
		}
	})
}

func TestAnotherAnimalsVisitIsRefused(t *testing.T) {
	_, err := NewExamSheet(ExamInput{Patient: dog(), Visit: exam.Visit{Patient: id(2)}})
	require.Error(t, err)
	require.False(t, errors.Is(err, ErrSaverClosed))
}
