package anatomy

import (
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
)

func graded(item exam.Item, grade int8, sites ...exam.Site) (out []exam.Finding) {
	for _, s := range sites {
		out = append(out, exam.Finding{Item: item, Site: s, Result: exam.Graded(grade)})
	}
	return out
}

func visitOf(parts ...[]exam.Finding) exam.Visit {
	var v exam.Visit
	for _, p := range parts {
		v.Findings = append(v.Findings, p...)
	}
	return v
}

func scoreAt(t *testing.T, v exam.Visit, s exam.Species, seg string, side exam.Site) SegmentScore {
	t.Helper()
	want, err := ParseSegment(seg, s)
	require.NoError(t, err)
	for _, x := range Score(s, v) {
		if x.Segment == want && x.Side == side {
			return x
		}
	}
	t.Fatalf("no score for %s", seg)
	return SegmentScore{}
}

const (
	pl, pr = exam.PelvicLeft, exam.PelvicRight
	le, ri = exam.Left, exam.Right
	mid    = exam.Midline
)

// lumbosacral is a dog with sound thighs and patellar reflexes, absent paw placement, weak
// withdrawal at the hock, wasted lower limbs, a normal tail and continence (common practice:
// L4–L6 serve the thigh, L6/L7–S1 the sciatic nerve and the foot, S2–S3 continence).
func lumbosacral() exam.Visit {
	return visitOf(
		graded(exam.Patellar, 2, pl, pr), graded(exam.MassQuadriceps, 3, le, ri),
		graded(exam.PawPlacement, 0, pl, pr), graded(exam.WithdrawalHock, 1, pl, pr),
		graded(exam.MassCranialTibial, 1, le, ri), graded(exam.MassGastrocnemius, 1, le, ri),
		graded(exam.TailTone, 2, mid), graded(exam.TailMovement, 1, mid), graded(exam.AnalTone, 2, mid),
		graded(exam.Perineal, 2, le, ri), graded(exam.VoluntaryUrination, 2, mid), graded(exam.FaecalContinence, 2, mid),
	)
}

func TestScoreOfLumbosacralDog(t *testing.T) {
	v := lumbosacral()
	for _, side := range []exam.Site{le, ri} {
		for _, seg := range []string{"L7", "S1"} {
			s := scoreAt(t, v, exam.Dog, seg, side)
			require.True(t, s.Known)
			require.Less(t, s.Score, 60.0, "%s %s", seg, side)
		}
		for _, seg := range []string{"L4", "L5", "S2", "S3"} {
			s := scoreAt(t, v, exam.Dog, seg, side)
			require.True(t, s.Known)
			require.Greater(t, s.Score, 90.0, "%s %s", seg, side)
		}
	}
	require.False(t, scoreAt(t, v, exam.Dog, "C7", le).Known, "nothing tested there: empty, not 100")
	require.False(t, scoreAt(t, v, exam.Dog, "T13", le).Known)
	// a cat with the same exam points the same way
	require.Less(t, scoreAt(t, v, exam.Cat, "L7", le).Score, 60.0)
	require.Greater(t, scoreAt(t, v, exam.Cat, "L4", le).Score, 90.0)
}

func TestScoreKeepsSidesApart(t *testing.T) {
	v := visitOf(graded(exam.Patellar, 0, pl), graded(exam.Patellar, 2, pr))
	require.Equal(t, 0.0, scoreAt(t, v, exam.Dog, "L5", le).Score)
	require.Equal(t, 100.0, scoreAt(t, v, exam.Dog, "L5", ri).Score)
	require.Equal(t, 1, scoreAt(t, v, exam.Dog, "L5", le).Findings)
}

func TestScoreCountsBriskAsIntact(t *testing.T) {
	for _, g := range []int8{2, 3, 4} {
		require.Equal(t, 100.0, scoreAt(t, visitOf(graded(exam.Patellar, g, pl)), exam.Dog, "L5", le).Score)
	}
	require.Equal(t, 50.0, scoreAt(t, visitOf(graded(exam.Patellar, 1, pl)), exam.Dog, "L5", le).Score)
	require.Equal(t, 100.0, scoreAt(t, visitOf(graded(exam.SensationSaphenous, 3, le)), exam.Dog, "L5", le).Score)
}

func TestScoreMinimumAndTrust(t *testing.T) {
	require.False(t, scoreAt(t, visitOf(graded(exam.Gastrocnemius, 0, pl)), exam.Dog, "L7", le).Known, "one poor reflex is not enough")
	require.Zero(t, scoreAt(t, visitOf(graded(exam.CranialTibial, 0, pl)), exam.Dog, "L6", le).Findings, "no true reflex")
	require.Zero(t, scoreAt(t, visitOf([]exam.Finding{{Item: exam.Patellar, Site: pl, Result: exam.Untested(exam.Pain)}}), exam.Dog, "L5", le).Findings)
	// the untrusted test moves a trusted one little
	v := visitOf(graded(exam.MassGastrocnemius, 3, le), graded(exam.Gastrocnemius, 0, pl))
	require.Greater(t, scoreAt(t, v, exam.Dog, "L7", le).Score, 80.0)
}

func TestScoreOfTrunci(t *testing.T) {
	cut := func(level exam.Vertebra, grade int8, sites ...exam.Site) exam.Visit {
		var v exam.Visit
		for _, s := range sites {
			v.Findings = append(v.Findings, exam.Finding{Item: exam.CutaneousTrunci, Site: s, Level: level, Result: exam.Graded(grade)})
		}
		return v
	}
	v := cut(exam.NewVertebra(exam.RegionL, 1), 1, le, ri)
	for _, seg := range []string{"T4", "T7"} {
		require.InDelta(t, 100, scoreAt(t, v, exam.Dog, seg, le).Score, 1e-9, "skin cranial to the cut-off answers")
	}
	for _, seg := range []string{"T11", "T12", "T13"} {
		s := scoreAt(t, v, exam.Dog, seg, le)
		require.Positive(t, s.Findings)
		require.Equal(t, 0.0, s.Score)
	}
	require.Zero(t, scoreAt(t, v, exam.Dog, "L3", le).Findings, "nothing is known caudal to the lesion")
	require.Equal(t, 100.0, scoreAt(t, v, exam.Dog, "C8", le).Score, "the motor side works")

	normal := cut(exam.NewVertebra(exam.RegionL, 5), 1, le) // the normal border (MC-2011)
	require.Equal(t, 100.0, scoreAt(t, normal, exam.Dog, "T13", le).Score)

	one := visitOf(cut(0, 0, le).Findings, cut(0, 2, ri).Findings) // lost on one side throughout: plexus
	require.Equal(t, 0.0, scoreAt(t, one, exam.Dog, "C8", le).Score)
	require.True(t, scoreAt(t, one, exam.Dog, "C8", le).Known)
	require.Equal(t, 100.0, scoreAt(t, one, exam.Dog, "C8", ri).Score)
	require.False(t, scoreAt(t, cut(0, 0, le, ri), exam.Dog, "C8", le).Known, "absent on both sides means little")
	require.True(t, scoreAt(t, cut(0, 1, le), exam.Dog, "C8", le).Known, "a level nobody noted still shows the motor side")
}

func BenchmarkScore(b *testing.B) {
	v := lumbosacral()
	for b.Loop() {
		Score(exam.Dog, v)
	}
}
