package view

import (
	"strings"

	"cordwalk.example/cordwalk/assets/words"
)

// keyNames are the names of keys as they are engraved, which differ from country to country.
var keyNames = []string{"Ctrl", "Alt", "Shift", "Enter", "Escape", "Tab", "Delete", "Page Up", "Page Down"}

// KeyWords says keys as the keyboards of the language name them: Ctrl+F is Strg+F in German. Keys
// are joined with "+" and parted with ", ".
func KeyWords(keys string) string {
	list := strings.Split(keys, ", ")
	for i, k := range list {
		parts := strings.Split(k, "+")
		for j, p := range parts {
			parts[j] = words.Of(p)
		}
		list[i] = strings.Join(parts, "+")
	}
	return strings.Join(list, ", ")
}

// Labelled sets a label before what it labels, with the language's own colon.
func Labelled(label, what string) string { return words.T("%s: %s", label, what) }

// LowerFirst writes a word for the middle of a sentence. German writes its nouns large there too.
func LowerFirst(s string) string {
	if words.Language() == "de" {
		return s
	}
	for i, r := range s {
		return strings.ToLower(string(r)) + s[i+len(string(r)):]
	}
	return s
}
