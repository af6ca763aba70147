package chart

import (
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/localise"
)

// TestCordStandsAtItsTrueLevel: as in the anatomy reference (B1, CL-73), the segments L4–S3
// of a middle-sized dog lie within the vertebrae L3–L5, and T13 lies at T13.
func TestCordStandsAtItsTrueLevel(t *testing.T) {
	m := CordOf(exam.Dog, 20, nil, "en")
	place := map[string][2]float64{}
	for _, v := range m.Vertebrae {
		place["v"+v.Name] = [2]float64{v.From, v.To}
	}
	for _, s := range m.Segments {
		assert.False(t, s.Known)
		place["s"+s.Name] = [2]float64{s.From, s.To}
	}
	require.Contains(t, place, "sL4")
	assert.GreaterOrEqual(t, place["sL4"][0], place["vL3"][0])
	assert.LessOrEqual(t, place["sS3"][1], place["vL5"][1]+0.02)
	mid := (place["sT13"][0] + place["sT13"][1]) / 2
	assert.True(t, mid > place["vT12"][0] && mid < place["vL1"][1])
	for i := 1; i < len(m.Segments); i++ {
		assert.GreaterOrEqual(t, m.Segments[i].From, m.Segments[i-1].From)
	}
	assert.Len(t, m.Brackets, 2)
}

func TestCordTakesTheEnginesProbabilities(t *testing.T) {
	r := &localise.Result{Segments: []localise.SegmentDamage{{Segment: "L4", Side: "left", Damaged: 0.7}, {Segment: "L4", Side: "right", Damaged: 0.2}}}
	m := CordOf(exam.Dog, 10, r, "")
	found := false
	for _, s := range m.Segments {
		if s.Name == "L4" {
			found = true
			assert.Equal(t, 0.7, s.Left)
			assert.Equal(t, 0.2, s.Right)
			assert.True(t, s.Known)
		}
	}
	assert.True(t, found)
	assert.Empty(t, CordOf(exam.Horse, 500, nil, "").Brackets, "no data of the horse's cord in the column")
}
