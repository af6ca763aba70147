// Package words holds the texts that people read, in their languages. English text
// is its own key: words.T("Saved here") is "Saved here" until another language is
// chosen that has a translation for it.
package words

import (
	"fmt"
	"sync/atomic"
)

// catalogue maps English text to text of one language.
type catalogue struct {
	tag   string
	texts map[string]string
}

var current atomic.Pointer[catalogue]

// T returns the text in the language in use, with args filled in as by fmt.Sprintf.
// The text must be a constant: a test collects every call.
func T(text string, args ...any) string { return In("", text, args...) }

// In is T in a stated language; the empty tag is the language in use.
func In(tag, text string, args ...any) string {
	if c := lookup(tag); c != nil {
		if t, ok := c.texts[text]; ok {
			text = t
		}
	}
	if len(args) == 0 {
		return text
	}
	return fmt.Sprintf(text, args...)
}

// N chooses between singular and plural of a text by n, as the language does. The
// texts take args as T does; n is not added to them.
func N(n int, one, other string, args ...any) string {
	if n == 1 {
		return T(one, args...)
	}
	return T(other, args...)
}

func lookup(tag string) *catalogue {
	c := current.Load()
	if tag == "" || (c != nil && c.tag == tag) {
		return c
	}
	return nil
}
