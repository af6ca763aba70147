package sheet

import (
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

// checked is a home programme held against what is known of the animal today.
type checked struct {
	keep     []exam.HomeExercise // what may stand on the sheet
	warnings []string            // what was left off or needs thought, in the language in use
	noted    []string            // what was objected to and confirmed with a reason, in the language in use
}

// check drops the exercises that must not be done, unless the therapist gave a reason; says
// which were left off and why; and says what needs thought. A reason confirms both.
func check(in Input, list []exam.HomeExercise) (out checked) {
	last, earlier := in.last(), in.Visits[:len(in.Visits)-1]
	for _, h := range list {
		var stop, ask []string
		for _, o := range exam.CheckExercise(in.Patient, h, last, earlier...) {
			if o.Stop {
				stop = append(stop, ObjectionWords("", o))
			} else {
				ask = append(ask, ObjectionWords("", o))
			}
		}
		name := ExerciseName("", h.Kind)
		reason := strings.TrimSpace(h.Override)
		switch {
		case len(stop)+len(ask) == 0:
		case reason != "":
			out.noted = append(out.noted, words.T("%[1]s in spite of %[2]s: %[3]s", name, strings.Join(append(stop, ask...), "; "), reason))
		case len(stop) > 0:
			out.warnings = append(out.warnings, words.T("%[1]s is left off the home plan: %[2]s; give a reason to keep it", name, stop[0]))
			continue
		default:
			out.warnings = append(out.warnings, words.T("%[1]s needs thought: %[2]s; give a reason to confirm it", name, strings.Join(ask, "; ")))
		}
		out.keep = append(out.keep, h)
	}
	return out
}

// ExerciseName is the name of an exercise in a language; the empty tag is the language in use.
func ExerciseName(lang, kind string) string {
	if k, ok := exam.ExerciseByKey(kind); ok {
		return words.OfIn(lang, k.Name)
	}
	return upperFirst(strings.ReplaceAll(kind, "-", " "))
}

// ObjectionWords says what speaks against a treatment or an exercise, in a language; the
// empty tag is the language in use.
func ObjectionWords(lang string, o exam.Objection) string {
	what := words.OfIn(lang, o.Condition.String())
	if o.Seen.Item == 0 {
		return what
	}
	return words.In(lang, "%[1]s (%[2]s, %[3]s)", what, cellWords(lang, o.Seen.Item, o.Seen.Site, o.Seen.Grade), string(o.Seen.Day))
}

// cellWords says a graded cell: «Skin, trunk: open sore».
func cellWords(lang string, i exam.Item, s exam.Site, grade int8) string {
	name := itemTitle(lang, i)
	if s != exam.Midline && s != exam.NoSite {
		name += ", " + siteWords(lang, s)
	}
	return name + colon(lang) + words.OfIn(lang, i.GradeWord(grade))
}

// siteWords is a site in full.
func siteWords(lang string, s exam.Site) string {
	return words.OfIn(lang, strings.ReplaceAll(s.String(), "-", " "))
}
