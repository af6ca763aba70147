package words

import (
	"slices"
	"testing"
)

func TestLanguages(t *testing.T) {
	if got := Tags(); got[0] != "en" || !slices.Contains(got, "de") || !slices.Contains(got, "es") || !slices.Contains(got, "fr") {
		t.Fatalf("languages %v", got)
	}
	for _, tag := range Tags() {
		if tag == "en" {
			continue
		}
		if _, err := read(tag); err != nil {
			t.Errorf("%s: %v", tag, err)
		}
		if In(tag, "Saved here") == "Saved here" {
			t.Errorf("%s: «Saved here» is still English", tag)
		}
	}
}

func TestUseChangesAndFallsBack(t *testing.T) {
	defer func() { _ = Use("en") }()
	if err := Use("de-AT"); err != nil {
		t.Fatal(err)
	}
	if Language() != "de" || T("Undo") != "Rückgängig" || Of("dog") != "Hund" {
		t.Errorf("%q %q %q", Language(), T("Undo"), Of("dog"))
	}
	if got := T("a text that nobody translated"); got != "a text that nobody translated" {
		t.Errorf("an unknown text became %q", got)
	}
	if In("en", "Undo") != "Undo" || OfIn("es", "cat") != "gato" {
		t.Error("a stated language does not hold")
	}
	if err := Use("tlh"); err == nil {
		t.Error("a language without texts was taken")
	}
	if Language() != "en" || T("Undo") != "Undo" {
		t.Error("English does not come back")
	}
}

// TestPlurals follows the rules of the CLDR: in French none and one are singular, in German,
// Spanish and English one alone.
func TestPlurals(t *testing.T) {
	for _, tt := range []struct {
		tag  string
		n    int
		want string
	}{
		{"en", 0, "0 days"}, {"en", 1, "1 day"}, {"en", 2, "2 days"},
		{"de", 0, "0 Tage"}, {"de", 1, "1 Tag"}, {"de", 2, "2 Tage"},
		{"es", 0, "0 días"}, {"es", 1, "1 día"}, {"es", 5, "5 días"},
		{"fr", 0, "0 jour"}, {"fr", 1, "1 jour"}, {"fr", 2, "2 jours"},
	} {
		if got := NIn(tt.tag, tt.n, "%d day", "%d days", tt.n); got != tt.want {
			t.Errorf("%s %d: %q, want %q", tt.tag, tt.n, got, tt.want)
		}
	}
}
