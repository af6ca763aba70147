package localise

import (
	"math"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
)

// vertebraOver returns the index of the vertebra that the middle of a segment lies in, in an
// animal of medium weight. Package anatomy's places are rounded to a thousandth first, so
// that no last bit can move a border.
func vertebraOver(s exam.Species, seg int) int {
	from, to, err := anatomy.Place(s, 20, anatomy.At(s, seg))
	if err != nil {
		panic(err)
	}
	return int(math.Floor(math.Round(float64(500*(from+to))) / 1000))
}

// beginOf returns the first whole place of the column, in vertebrae, at or caudal to where a
// segment begins.
func beginOf(s exam.Species, seg int) int {
	from, _, err := anatomy.Place(s, 20, anatomy.At(s, seg))
	if err != nil {
		panic(err)
	}
	return int(math.Ceil(math.Round(float64(1000*from)) / 1000))
}

// painRange holds the first and last vertebra under each place of palpation. The table is
// that of package anatomy; dog and cat share it.
var painRange = func() (out [painPlaces][2]int) {
	for i, site := range painSites {
		first, last := anatomy.SpineRange(exam.Dog, site)
		out[i] = [2]int{exam.VertebraIndex(exam.Dog, first), exam.VertebraIndex(exam.Dog, last)}
	}
	return out
}()
