package sheet

import (
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// The sentences and scores are those that public descriptions of the Flesch measure print:
// "the cat sat on the mat" 116, the sentence about a reading passage 69, the Australian
// platypus 37.5 (13 words, 24 syllables).
func TestFleschAgainstPrintedExamples(t *testing.T) {
	for _, tt := range []struct {
		text      string
		words     int
		syllables int
		score     float64
	}{
		{"The cat sat on the mat.", 6, 6, 116.145},
		{"This sentence, taken as a reading passage unto itself, is being used to prove a point.", 16, 23, 69},
		{"The Australian platypus is seemingly a hybrid of a mammal and reptilian creature.", 13, 24, 37.5},
	} {
		e, ok := Reading("en", []string{tt.text})
		require.True(t, ok)
		assert.Equal(t, tt.words, e.Words, tt.text)
		assert.Equal(t, tt.syllables, e.Syllables, tt.text)
		assert.InDelta(t, tt.score, e.Score, 0.1, tt.text)
	}
}

// Syllables as dictionaries hyphenate the words (common practice).
func TestSyllables(t *testing.T) {
	for word, want := range map[string]int{
		"veterinarian": 6, "exercise": 3, "telephone": 3, "medicine": 3, "walk": 1, "better": 2, "weaker": 2,
		"tested": 2, "leg": 1, "little": 2, "table": 2, "stiff": 1, "breathing": 2, "urine": 2, "hours": 1,
		"bowel": 2, "paws": 1, "stairs": 1, "muscle": 2, "muscles": 2, "minutes": 2, "times": 1, "places": 2,
		"before": 2, "something": 2, "painkillers": 3, "prescribed": 2, "area": 3, "trying": 2, "seizure": 2,
		"front": 1, "agrees": 2, "police": 2, "progress": 2, "balance": 2, "moves": 1, "raised": 1, "slowly": 2,
	} {
		assert.Equal(t, want, syllablesEnglish(word), word)
	}
}

// TestSyllablesOfOtherLanguages: syllables as dictionaries part the words (common practice).
func TestSyllablesOfOtherLanguages(t *testing.T) {
	for lang, list := range map[string]map[string]int{
		"es": {"perro": 2, "día": 2, "veterinario": 5, "leer": 2, "cuello": 2, "trasera": 3, "izquierda": 3, "respira": 3, "oído": 3, "médico": 3, "que": 1, "cuidado": 3},
		"de": {"hund": 1, "bewegung": 3, "tierarzt": 2, "heute": 2, "übung": 2, "schmerz": 1, "hinterbein": 3, "besser": 2, "medikament": 4},
		"fr": {"chien": 1, "patte": 1, "mieux": 1, "marche": 1, "vétérinaire": 4, "exercice": 3, "les": 1, "douleur": 2, "arrière": 2, "gauche": 1},
	} {
		count := map[string]func(string) int{"es": vowelGroupsSpanish, "de": vowelGroups, "fr": vowelGroupsFrench}[lang]
		for w, want := range list {
			assert.Equal(t, want, max(1, count(w)), "%s: %s", lang, w)
		}
	}
}

// TestOtherLanguagesUseTheirOwnMeasure works the published formulas out by hand for one sentence
// each: words a sentence, syllables a word, and what the constants make of them.
func TestOtherLanguagesUseTheirOwnMeasure(t *testing.T) {
	for _, tt := range []struct {
		lang, text, measure string
		score               float64
	}{
		{"de", "Der Hund geht heute besser.", "Amstad", 180 - 5 - 58.5*7/5},
		{"fr", "Le chien marche mieux.", "Kandel–Moles", 207 - 1.015*4 - 73.6*4/4},
		{"es", "El perro anda mejor.", "Fernández Huerta", 206.84 - 1.02*4 - 60*7.0/4},
		{"nl", "De hond loopt beter.", "Douma", 206.84 - 0.93*4 - 77*5.0/4},
	} {
		e, ok := Reading(tt.lang, []string{tt.text})
		require.True(t, ok, tt.lang)
		assert.InDelta(t, tt.score, e.Score, 1e-9, tt.lang)
		assert.Equal(t, tt.measure, e.Measure)
	}
	_, ok := Reading("ja", []string{"歩く"})
	assert.False(t, ok)
}
