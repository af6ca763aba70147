package sheet

import (
	"strings"
	"unicode"

	"cordwalk.example/cordwalk/assets/words"
)

// Ease is how easily a text reads.
type Ease struct {
	Score     float64 // about 0 (hard) to 100 (easy); 60 and more is plain language
	Measure   string  // the published measure
	Sentences int
	Words     int
	Syllables int
}

// Reading returns the reading ease of lines of text in a language, and false where no
// published measure is known for it. A line without an end mark is a sentence of its own;
// figures and lone marks are no words.
//
// Measures: English, Flesch (J Appl Psychol 1948;32:221–33); German, Amstad (Wie verständlich
// sind unsere Zeitungen?, thesis, Zürich 1978): 180 − words a sentence − 58.5 × syllables a word;
// French, Kandel & Moles (Cahiers Études Radio-Télévision 1958;19:253–74): 207, 1.015 and 73.6;
// Spanish, Fernández Huerta (Consigna 1959;214:29–32): 206.84, 1.02 and 60, with the mean number of
// words a sentence as Law corrected it in 2011 (legible.es/blog/lecturabilidad-fernandez-huerta);
// Dutch, Douma (De leesbaarheid van landbouwbladen, Wageningen 1960): 206.84, 0.93 and 77. The
// constants agree with leichtlesbar.ch (German), legible.es (Spanish), the R package koRpus and the
// table in github.com/Yoast/YoastSEO.js/issues/267 (all); titles and pages of the French and the
// Dutch source are from memory.
func Reading(lang string, lines []string) (Ease, bool) {
	base, _, _ := strings.Cut(strings.ToLower(lang), "-")
	var e Ease
	count, ok := map[string]func(string) int{"en": syllablesEnglish, "": syllablesEnglish, "de": vowelGroups, "fr": vowelGroupsFrench, "es": vowelGroupsSpanish, "nl": vowelGroups}[base]
	if !ok {
		return e, false
	}
	for _, line := range lines {
		inSentence := false
		for _, word := range strings.Fields(line) {
			bare := strings.TrimFunc(word, func(r rune) bool { return !unicode.IsLetter(r) && !unicode.IsDigit(r) })
			if strings.ContainsFunc(bare, unicode.IsLetter) {
				inSentence = true
				for _, part := range strings.FieldsFunc(bare, func(r rune) bool { return r == '-' || r == '/' || r == '–' }) {
					if strings.ContainsFunc(part, unicode.IsLetter) {
						e.Words++
						e.Syllables += max(1, count(strings.ToLower(part)))
					}
				}
			}
			if inSentence && strings.HasSuffix(strings.TrimRight(word, `"'»”’)`), ".") || strings.HasSuffix(word, "?") || strings.HasSuffix(word, "!") || strings.HasSuffix(word, ":") || strings.HasSuffix(word, ";") {
				if inSentence {
					e.Sentences++
				}
				inSentence = false
			}
		}
		if inSentence {
			e.Sentences++
		}
	}
	if e.Words == 0 || e.Sentences == 0 {
		return e, false
	}
	wordsEach, syllablesEach := float64(e.Words)/float64(e.Sentences), float64(e.Syllables)/float64(e.Words)
	switch base {
	case "de":
		e.Measure, e.Score = "Amstad", 180-wordsEach-58.5*syllablesEach
	case "fr":
		e.Measure, e.Score = "Kandel–Moles", 207-1.015*wordsEach-73.6*syllablesEach
	case "es":
		e.Measure, e.Score = "Fernández Huerta", 206.84-1.02*wordsEach-60*syllablesEach
	case "nl":
		e.Measure, e.Score = "Douma", 206.84-0.93*wordsEach-77*syllablesEach
	default:
		e.Measure, e.Score = "Flesch", 206.835-1.015*wordsEach-84.6*syllablesEach
	}
	return e, true
}

// EaseWords says how easily lines of text read, in the language in use; empty where no published
// measure is known for their language. The steps are those of Flesch's table: 60 and more is plain
// language, below 50 is difficult.
func EaseWords(lang string, lines []string) string {
	e, ok := Reading(lang, lines)
	switch {
	case !ok:
		return ""
	case e.Score >= 60:
		return words.T("reads easily")
	case e.Score >= 50:
		return words.T("a little hard to read: try shorter words")
	}
	return words.T("hard to read: use shorter words and sentences")
}

// endings that add no syllable of their own in English.
var silentEndings = []string{"e", "es", "ed"}

// syllablesEnglish counts the groups of vowels, without a silent e at the end.
func syllablesEnglish(w string) int {
	w = strings.Map(func(r rune) rune {
		if r == '\'' || r == '’' {
			return -1
		}
		return r
	}, w)
	n := 0
	before := false
	vowel := func(i int) bool { return strings.ContainsRune("aeiouy", rune(w[i])) }
	for i := range len(w) {
		v := vowel(i)
		switch {
		case v && !before:
			n++
		case v && before:
			// Two vowels that are spoken apart: -ia-, -io (not in -tion), -eo-, -ua-, -iu-, and the
			// -yi- of "trying".
			pair := w[i-1 : i+1]
			switch pair {
			case "ia", "eo", "yi", "iu", "ya", "ao":
				glide := pair == "ia" && i >= 2 && ((w[i-2] == 'c' || w[i-2] == 't') && strings.HasSuffix(w, "l") || w[i-2] == 'l' && strings.HasSuffix(w, "ian"))
				if !glide {
					n++
				}
			case "ei":
				if strings.HasSuffix(w, "eing") {
					n++
				}
			case "io":
				if i >= 2 && !strings.ContainsRune("tsc", rune(w[i-2])) {
					n++
				}
			case "ea":
				if strings.HasSuffix(w, "eature") && i < 3 || strings.HasPrefix(w, "area") && i == 3 || strings.HasPrefix(w, "crea") && strings.HasPrefix(w[3:], "ati") {
					n++
				}
			}
		}
		before = v
	}
	for _, end := range silentEndings {
		stem, ok := strings.CutSuffix(w, end)
		if !ok || stem == "" || n < 2 {
			continue
		}
		last := stem[len(stem)-1]
		if strings.ContainsRune("aeiouy", rune(last)) {
			break // the e belongs to a group that is counted already
		}
		switch end {
		case "e":
			if last != 'l' || len(stem) < 2 || strings.ContainsRune("aeiouy", rune(stem[len(stem)-2])) {
				n--
			}
		case "es":
			if !strings.ContainsRune("sxzcg", rune(last)) && !strings.HasSuffix(stem, "ch") && !strings.HasSuffix(stem, "sh") && !(last == 'l' && len(stem) > 1 && !strings.ContainsRune("aeiouy", rune(stem[len(stem)-2]))) {
				n--
			}
		case "ed":
			if last != 't' && last != 'd' {
				n--
			}
		}
		break
	}
	// A silent e inside a compound ("something", "homework") and before -ly, -ful, -ment, -less.
	for _, mid := range []string{"eful", "ement", "eless", "ely", "ething", "etime", "ework"} {
		if i := strings.Index(w, mid); i > 1 && !strings.ContainsRune("aeiouy", rune(w[i-1])) && n > 1 {
			n--
			break
		}
	}
	return max(n, 1)
}

// vowelGroups counts groups of vowels, the rule for languages that speak every vowel group.
func vowelGroups(w string) int {
	n := 0
	before := false
	for _, r := range w {
		v := strings.ContainsRune("aeiouyäöüáéíóúàèìòùâêîôûëïœæåø", r)
		if v && !before {
			n++
		}
		before = v
	}
	return n
}

// vowelGroupsSpanish parts the vowels of a hiatus: an accented i or u beside another vowel
// (dí-a, ba-úl), and a, e, o side by side (le-er, o-í-do).
func vowelGroupsSpanish(w string) int {
	n := 0
	var before rune
	for _, r := range w {
		strong := strings.ContainsRune("aeoáéóíú", r)
		vowel := strong || strings.ContainsRune("iuüy", r)
		if vowel && (before == 0 || strong && strings.ContainsRune("aeoáéóíú", before)) {
			n++
		}
		if before = 0; vowel {
			before = r
		}
	}
	// A u that is not spoken after g and q stands with its vowel, so it counts no syllable more.
	return n
}

// vowelGroupsFrench leaves a silent e at the end out.
func vowelGroupsFrench(w string) int {
	n := vowelGroups(w)
	for _, end := range []string{"ent", "es", "e"} {
		if stem, ok := strings.CutSuffix(w, end); ok && stem != "" && n > 1 && !strings.ContainsRune("aeiouyéèê", rune(stem[len(stem)-1])) && end != "ent" {
			return n - 1
		}
	}
	return n
}
