package view

import (
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
)

var day0 = time.Date(2026, 3, 2, 10, 0, 0, 0, time.UTC)

func id(n byte) exam.ID { return exam.ID{15: n, 6: 0x70, 8: 0x80} }

func dog() exam.Patient {
	return exam.Patient{ID: id(1), Name: "Bramble", Species: exam.Dog, Breed: "Dachshund"}
}

// allItems is every item of the vocabulary but the special ones a full spinal exam leaves out.
func spinalItems() []exam.Item {
	return []exam.Item{exam.Mentation, exam.Breathing, exam.Ambulation, exam.VoluntaryMotor, exam.Ataxia, exam.Knuckling, exam.Lameness,
		exam.PawPlacement, exam.Hopping, exam.MassQuadriceps, exam.MassHamstrings, exam.MassEpaxial, exam.Menace, exam.Horner, exam.Gag,
		exam.Skin, exam.Wound, exam.Tone, exam.Biceps, exam.Patellar, exam.CranialTibial, exam.Withdrawal, exam.Perineal,
		exam.TailTone, exam.AnalTone, exam.CutaneousTrunci, exam.SpinalPain, exam.LumbosacralExtension, exam.VoluntaryUrination,
		exam.BladderFill, exam.SuperficialPain, exam.DeepPain}
}

func sheet(t *testing.T, change func(*ExamInput)) (*ExamSheet, *[]Batch) {
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

func TestDigitGradesAndGoesOn(t *testing.T) {
	s, saved := sheet(t, nil)
	c, _ := s.Cell()
	require.Equal(t, exam.Mentation, c.Key.Item)
	require.True(t, s.Press(Rune('2')).Handled)
	g, ok := s.Visit().Grade(exam.Mentation, exam.Midline)
	require.True(t, ok)
	require.EqualValues(t, 2, g)
	require.Len(t, *saved, 1)
	c, _ = s.Cell()
	require.Equal(t, exam.Breathing, c.Key.Item)
	out := s.Press(Rune('7'))
	require.Error(t, out.Err)
	require.Contains(t, out.Words, "0 (laboured)")
	require.Len(t, *saved, 1, "a refused key writes nothing")
}
