package chart

import (
	"math"

	"cordwalk.example/cordwalk/assets/drawing"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
	"cordwalk.example/cordwalk/exam/localise"
)

// CordOf lays the probabilities of damage over the column of a species at a weight in kg
// (0: of middle size). Segments stand at their true level in the column. With r nil the map
// has no probabilities. Lang is the language of its words, empty for the one in use.
func CordOf(s exam.Species, kg float64, r *localise.Result, lang string) CordMap {
	var m CordMap
	column := drawing.Column(s)
	for _, b := range column {
		m.Vertebrae = append(m.Vertebrae, CordBlock{Name: b.Vertebra.String(), Major: b.Vertebra.Number() == 1, From: b.Start, To: b.End})
	}
	along := func(vertebrae float64) float64 {
		i := int(math.Floor(vertebrae))
		switch {
		case i < 0:
			return 0
		case i >= len(column):
			return 1
		}
		return column[i].Start + (column[i].End-column[i].Start)*(vertebrae-float64(i))
	}
	index := map[string]int{}
	for _, seg := range anatomy.Segments(s) {
		from, to, err := anatomy.Place(s, kg, seg)
		if err != nil {
			continue // no data for the species: the map shows the column alone
		}
		index[seg.String()] = len(m.Segments)
		m.Segments = append(m.Segments, CordSegment{Name: seg.String(), From: along(from), To: along(to)})
	}
	if r != nil {
		for _, d := range r.Segments {
			i, ok := index[d.Segment]
			if !ok {
				continue
			}
			m.Segments[i].Known = true
			if d.Side == exam.Left.String() {
				m.Segments[i].Left = d.Damaged
			} else {
				m.Segments[i].Right = d.Damaged
			}
		}
	}
	bracket := func(label, first, last string) {
		i, ok := index[first]
		j, ok2 := index[last]
		if ok && ok2 {
			m.Brackets = append(m.Brackets, CordBracket{Label: label, From: m.Segments[i].From, To: m.Segments[j].To})
		}
	}
	// The enlargements as the segments that feed the plexuses (UMN-cord).
	bracket(words.In(lang, "cervical enlargement"), "C6", "T2")
	bracket(words.In(lang, "lumbar enlargement"), "L4", "S3")
	return m
}
