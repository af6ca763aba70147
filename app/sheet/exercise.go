package sheet

import (
	"fmt"
	"strings"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// plainExercise returns an exercise's name, how much, how it is done and what to stop for,
// in the paper's language; the therapist's own words come before the table's.
func plainExercise(in Input, h exam.HomeExercise) (name, amount, how, stop string) {
	lang := in.lang()
	name = upperFirst(strings.ReplaceAll(h.Kind, "-", " "))
	if k, ok := exam.ExerciseByKey(h.Kind); ok {
		name, amount, how, stop = words.OfIn(lang, k.Name), words.OfIn(lang, k.Amount), words.OfIn(lang, k.How), words.OfIn(lang, k.Stop)
	}
	if h.Amount != "" {
		amount = h.Amount
	}
	if h.How != "" {
		how = h.How
	}
	if h.StopFor != "" {
		stop = in.text(textStop, h.StopFor)
	}
	return name, amount, how, stop
}

// allowed drops the exercises that speak against what is known of the animal today, unless
// the therapist gave a reason, and says which were left off and why.
func allowed(in Input, list []exam.HomeExercise) (keep []exam.HomeExercise, left []string) {
	last, earlier := in.last(), in.Visits[:len(in.Visits)-1]
	for _, h := range list {
		ok := true
		for _, o := range exam.CheckExercise(in.Patient, h, last, earlier...) {
			if o.Stop && strings.TrimSpace(h.Override) == "" {
				name, _, _, _ := plainExercise(in, h)
				left = append(left, fmt.Sprintf("%s is left off the home plan: %s; give a reason to keep it", name, o.Why))
				ok = false
				break
			}
		}
		if ok {
			keep = append(keep, h)
		}
	}
	return keep, left
}
