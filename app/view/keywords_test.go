package view

import (
	"testing"

	"cordwalk.example/cordwalk/assets/words"
)

// As the keys are engraved on keyboards of DIN 2137, AZERTY and the Spanish layout.
func TestKeysAreNamedAsOnTheKeyboard(t *testing.T) {
	t.Cleanup(func() { _ = words.Use("en") })
	for _, tt := range []struct{ tag, keys, want string }{
		{"en", "Ctrl+F", "Ctrl+F"}, {"de", "Ctrl+F", "Strg+F"}, {"de", "Shift+Tab, Escape", "Umschalt+Tab, Esc"},
		{"fr", "Enter", "Entrée"}, {"fr", "Escape", "Échap"}, {"es", "Enter", "Intro"}, {"es", "Shift+Tab", "Mayús+Tab"}, {"de", "Ctrl+,", "Strg+,"},
	} {
		_ = words.Use(tt.tag)
		if got := KeyWords(tt.keys); got != tt.want {
			t.Errorf("%s: %q is %q, want %q", tt.tag, tt.keys, got, tt.want)
		}
	}
}

func TestNounsStayLargeInGerman(t *testing.T) {
	t.Cleanup(func() { _ = words.Use("en") })
	for tag, want := range map[string]string{"de": "Über Nacht", "fr": "über Nacht", "en": "über Nacht"} {
		_ = words.Use(tag)
		if got := LowerFirst("Über Nacht"); got != want {
			t.Errorf("%s: %q", tag, got)
		}
	}
}
