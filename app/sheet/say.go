package sheet

import (
	"fmt"
	"regexp"
	"slices"
	"strings"
	"sync"
	"time"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// The engines say what they find in English sentences made of parts. Say puts such a
// sentence into another language: it knows the forms of those sentences, says each form in
// the language, and the parts by themselves. What it does not know stays English, which a
// test on every animal of the demo practice would show.

// form is one form of sentence. Its pattern finds the parts, the text puts them together
// again and stands in the catalogue.
type form struct {
	pattern func() *regexp.Regexp // made when first asked for: the program starts without them
	text    string
}

func forms(list ...[2]string) []form {
	out := make([]form, len(list))
	for i, f := range list {
		out[i] = form{sync.OnceValue(func() *regexp.Regexp { return regexp.MustCompile("^" + f[0] + "$") }), f[1]}
	}
	return out
}

const (
	vocab = `([\w-]+)` // an item or a site of the vocabulary
	day   = `(\d{1,2} [A-Z][a-z]+ \d{4}|\d{4}-\d{2}-\d{2})`
	part  = `(.+?)`
	rest  = `(.+)`
)

// sentences are tried in order, the more particular ones first.
var sentences = forms(
	// red flags
	[2]string{rest + ", more than 48 h after the onset of an infarct", "%[1]s, more than 48 h after the onset of an infarct"},
	[2]string{rest + ", in a disease that does not hurt", "%[1]s, in a disease that does not hurt"},
	[2]string{rest + ", a step in a disease that creeps", "%[1]s, a step in a disease that creeps"},
	[2]string{rest + ", another limb than the injured one", "%[1]s, another limb than the injured one"},
	[2]string{rest + `, with ([\d.]+) °C`, "%[1]s, with %[2]s °C"},
	[2]string{vocab + " at " + vocab + " was " + part + " and is not tested today", "%[1]s, %[2]s: last %[3]s, not tested today"},
	[2]string{vocab + " was " + part + " and is not tested today", "%[1]s: last %[2]s, not tested today"},
	[2]string{vocab + " at " + vocab + ": border " + part + ` \(before: ` + part + `\)`, "%[1]s, %[2]s: border %[3]s (before: %[4]s)"},
	[2]string{vocab + " at " + vocab + ": " + part + ` \(before: ` + part + `\)(, .+)?`, "%[1]s, %[2]s: %[3]s (before: %[4]s)%[5]s"},
	[2]string{vocab + " at " + vocab + ": " + part + ` \(not known before\)`, "%[1]s, %[2]s: %[3]s (not known before)"},
	[2]string{vocab + " at " + vocab + ": " + rest, "%[1]s, %[2]s: %[3]s"},
	[2]string{`coma scale ([\d.]+) \(before: ([\d.]+)\)`, "coma scale %[1]s (before: %[2]s)"},
	[2]string{part + ": " + part + ` \(before: ` + part + `\)(, .+)?`, "%[1]s: %[2]s (before: %[3]s)%[4]s"},
	[2]string{"deep pain absent in both pelvic limbs since " + day, "deep pain absent in both pelvic limbs since %[1]s"},
	[2]string{`no urine for ([\d.]+) h`, "no urine for %[1]s h"},
	[2]string{`temperature ([\d.]+) °C`, "temperature %[1]s °C"},
	[2]string{"bladder " + part + " and leaking", "bladder %[1]s and leaking"},
	[2]string{`(\d+) findings of gait and posture worse than on ` + day + ", after gains since " + day, "%[1]s findings of gait and posture worse than on %[2]s, after gains since %[3]s"},
	[2]string{part + ", implied", "%[1]s, implied"},
	// the likely site
	[2]string{"not enough to say: not tested are " + rest, "not enough to say: not tested are %[1]s"},
	[2]string{"the exam alone points to " + part + ", with the file to " + part + ": look again at what differs", "the exam alone points to %[1]s, with the file to %[2]s: look again at what differs"},
	[2]string{"these contradict each other: " + part + ` and ([\w-]+ at .+)`, "these contradict each other: %[1]s and %[2]s"},
	[2]string{"these point apart: " + part + ` and ([\w-]+ at .+)`, "these point apart: %[1]s and %[2]s"},
	[2]string{vocab + " at " + vocab + " " + rest, "%[1]s, %[2]s: %[3]s"},
	[2]string{"blood supply of the " + rest, "blood supply of the %[1]s"},
	[2]string{"two lesions: " + part + " and " + rest, "two lesions: %[1]s and %[2]s"},
	// the course
	[2]string{rest + ": cannot tell yet whether it has changed since " + day, "%[1]s: cannot tell yet whether it has changed since %[2]s"},
	[2]string{rest + ": about the same as on " + day + ", " + rest, "%[1]s: about the same as on %[2]s, %[3]s"},
	[2]string{rest + ": " + part + " since " + day + ", " + rest, "%[1]s: %[2]s since %[3]s, %[4]s"},
	[2]string{"changes by less than " + part + " points a week since about " + day + ", " + rest, "changes by less than %[1]s points a week since about %[2]s, %[3]s"},
	[2]string{"worse than at its best on " + day + ", " + rest, "worse than at its best on %[1]s, %[2]s"},
	[2]string{"may be worse than at its best on " + day + ", " + rest, "may be worse than at its best on %[1]s, %[2]s"},
	[2]string{`more than (\d+ %)`, "more than %[1]s"},
	[2]string{`less than (\d+ %)`, "less than %[1]s"},
)

// pieces are tried on what no sentence holds: a place with its side, a sore place, a nerve.
var pieces = forms(
	[2]string{`\(at ` + part + `\)`, "(at %[1]s)"},
	[2]string{part + " nerve", "%[1]s nerve"},
	[2]string{part + " pain", "%[1]s pain"},
)

// sayTerms are words of the engines that stand in no other table.
var sayTerms = []string{
	"cord", "cord or roots", "pain only", "spinal nerve or root", "plexus", "cauda equina", "nerve", "lower motor neurons everywhere", "brain", "blood supply", "joints",
	"tendon or ligament", "drug, heart or metabolism", "nothing found", "two lesions", "two-sites", "pain", "root", "cauda-equina", "generalised", "ischaemic", "joint", "tendon", "systemic", "none",
	"peripheral", "roots of the cauda equina", "no loss of function", "both sides", "not enough to say", "not enough to say: the findings leave several regions open",
	"the exam fits no explanation well: the best one does not predict these findings; check them, or think of two lesions",
	"gait (movement of each limb)", "postural reactions", "reflexes of the thoracic limbs", "reflexes of the pelvic limbs", "perineal reflex and tail", "palpation of the spine", "head and cranial nerves",
	"brachial plexus", "cranial", "caudal", "complete", "pelvic limbs", "forebrain", "brainstem", "cerebellum", "central vestibular", "peripheral vestibular", "nerves of all limbs", "longest nerves first",
	"junction", "reflexes kept", "reflexes lost", "muscle", "stifle", "joints of the pelvic limb", "joints of the thoracic limb", "calcanean tendon", "carpal support",
	"trigeminal", "facial", "oculomotor", "optic", "vagus or recurrent laryngeal", "hypoglossal", "sympathetic trunk", "below the elbow's extensors",
	"whole animal", "ranks 0–5 for 0", "all limbs", "one limb", "four limbs", "stronger", "weaker", "better", "worse", "about the same", "no plateau can be named", "no relapse seen",
	"fewer than three visits: forecasts rest mostly on what is usual", "the model cannot tell this item", "the goal names no item and site of the exam", "this has not been measured yet",
	"too few values to look ahead: four over at least two weeks are needed", "its date lies further ahead than the values so far reach back",
	"not tested", "not known before", "absent throughout", "not scored", "a seizure since last visit",
	"Test it today, or tell the veterinarian that it was not tested.", "Call the veterinarian before the animal leaves the room.", "Call the veterinarian today.", "Tell the veterinarian on the next working day.",
}

// sayKeys lists every text of this file for the catalogue.
func sayKeys() []string {
	out := slices.Clone(sayTerms)
	for _, f := range slices.Concat(sentences, pieces) {
		out = append(out, f.text)
	}
	return out
}

// Say puts what an engine says in English into a language, and the keys of items and places into
// words in English too; the empty tag is the language in use.
func Say(lang, english string) string {
	if english == "" {
		return ""
	}
	return decimalPoint.ReplaceAllStringFunc(say(lang, english, 0), func(s string) string { return words.Decimal(lang, s) })
}

// decimalPoint is a number with a decimal point.
var decimalPoint = regexp.MustCompile(`\d+\.\d+`)

const deepest = 6

func say(lang, s string, depth int) string {
	if t, ok := sayWord(lang, s); ok || depth > deepest {
		return t
	}
	fill := func(f form) (string, bool) {
		m := f.pattern().FindStringSubmatch(s)
		if m == nil {
			return "", false
		}
		args := make([]any, len(m)-1)
		for i, x := range m[1:] {
			if tail, cut := strings.CutPrefix(x, ", "); cut {
				args[i] = ", " + say(lang, tail, depth+1)
			} else {
				args[i] = say(lang, x, depth+1)
			}
		}
		return fmt.Sprintf(words.OfIn(lang, f.text), args...), true
	}
	if bare, ok := strings.CutSuffix(s, "."); ok && depth == 0 {
		return say(lang, bare, 1) + "."
	}
	if first, rest, ok := strings.Cut(s, "; "); ok && !strings.HasPrefix(s, "not enough") {
		return say(lang, first, depth) + "; " + say(lang, rest, depth)
	}
	for _, f := range sentences {
		if t, ok := fill(f); ok {
			return t
		}
	}
	for _, sep := range []string{"; ", ": ", ", "} {
		if first, rest, ok := strings.Cut(s, sep); ok {
			if sep == ": " {
				sep = colon(lang)
			}
			return say(lang, first, depth+1) + sep + say(lang, rest, depth+1)
		}
	}
	if first, tail, ok := strings.Cut(s, " ("); ok && strings.HasSuffix(tail, ")") {
		inner := strings.TrimSuffix(tail, ")")
		if t, ok := pieceAt(lang, "("+inner+")", depth); ok {
			return say(lang, first, depth+1) + " " + t
		}
		return say(lang, first, depth+1) + " (" + say(lang, inner, depth+1) + ")"
	}
	for _, f := range pieces {
		if t, ok := fill(f); ok {
			return t
		}
	}
	return s
}

func pieceAt(lang, s string, depth int) (string, bool) {
	m := pieces[0].pattern().FindStringSubmatch(s)
	if m == nil {
		return "", false
	}
	return fmt.Sprintf(words.OfIn(lang, pieces[0].text), say(lang, m[1], depth+1)), true
}

// sayWord says a part that is a word of the vocabulary, a day or a text of the catalogue.
func sayWord(lang, s string) (string, bool) {
	if t := words.OfIn(lang, s); t != s {
		return t, true
	}
	if i, err := exam.ParseItem(s); err == nil {
		return itemTitle(lang, i), true
	}
	if x, err := exam.ParseSite(s); err == nil {
		return siteWords(lang, x), true
	}
	for _, layout := range []string{"2 January 2006", "2006-01-02"} {
		if t, err := time.Parse(layout, s); err == nil {
			return dayWords(lang, t), true
		}
	}
	if low := strings.ToLower(s[:min(1, len(s))]) + s[min(1, len(s)):]; low != s {
		if t := words.OfIn(lang, low); t != low {
			return upperFirst(t), true
		}
	}
	return s, false
}
