package sheet

import (
	"strings"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// plainExercise returns an exercise's name, how it is done and what to stop for, in the
// paper's language; the therapist's own words come before the table's.
func plainExercise(in Input, h exam.HomeExercise) (name, how, stop string) {
	name = upperFirst(words.OfIn(in.lang(), strings.ReplaceAll(h.Kind, "-", " ")))
	return name, h.How, h.StopFor
}
