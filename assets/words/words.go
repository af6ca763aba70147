// Package words holds the texts that people read, in their languages. English text
// is its own key: words.T("Saved here") is "Saved here" until another language is
// chosen that has a translation for it.
//
// T and N take constant texts, which a test collects into the catalogue. Of takes
// words that stand in tables (item names, grades, precautions); the tables are
// collected by the same test.
package words

import (
	"embed"
	"encoding/json"
	"fmt"
	"path"
	"slices"
	"strings"
	"sync"
	"sync/atomic"

	"github.com/nicksnyder/go-i18n/v2/i18n"
	"golang.org/x/text/language"
)

//go:embed lang
var files embed.FS

// catalogue holds the texts of one language. Plural forms are chosen by the rules of
// the Unicode CLDR, as go-i18n carries them.
type catalogue struct {
	tag     string
	texts   map[string]string
	plurals *i18n.Localizer
}

// file is the form of a translations file: texts by their English text, plurals by
// their English plural text with one form for each CLDR category.
type file struct {
	Texts   map[string]string            `json:"texts"`
	Plurals map[string]map[string]string `json:"plurals"`
}

var (
	current atomic.Pointer[catalogue]
	loaded  sync.Map // tag → *catalogue, nil where there is none
)

// Tags lists the languages there are texts for, as BCP 47 tags, English first.
func Tags() []string {
	out := []string{"en"}
	entries, err := files.ReadDir("lang")
	if err != nil {
		return out
	}
	for _, e := range entries {
		if tag, ok := strings.CutSuffix(e.Name(), ".json"); ok && tag != "en" {
			out = append(out, tag)
		}
	}
	return out
}

// Use chooses the language of T, N and Of by a BCP 47 tag such as "de" or "de-AT".
// A language without texts leaves English in use and is returned as an error.
func Use(tag string) error {
	c := load(tag)
	if c == nil {
		current.Store(nil)
		if base(tag) == "en" || tag == "" {
			return nil
		}
		return fmt.Errorf("there are no texts in the language %q; use one of %s", tag, strings.Join(Tags(), ", "))
	}
	current.Store(c)
	return nil
}

// Language returns the tag of the language in use.
func Language() string {
	if c := current.Load(); c != nil {
		return c.tag
	}
	return "en"
}

// T returns the text in the language in use, with args filled in as by fmt.Sprintf.
// The text must be a constant: a test collects every call.
func T(text string, args ...any) string { return In("", text, args...) }

// In is T in a stated language; the empty tag is the language in use. The text must
// be a constant.
func In(tag, text string, args ...any) string {
	text = find(tag, text)
	if len(args) == 0 {
		return text
	}
	return fmt.Sprintf(text, args...)
}

// Of returns a word that stands in a table of the program, such as a grade or an
// item, in the language in use. A word without translation is returned as it is.
func Of(word string) string { return find("", word) }

// OfIn is Of in a stated language.
func OfIn(tag, word string) string { return find(tag, word) }

// N chooses between singular and plural of a text by n, as the language does. The
// texts are constants and take args as T does; n is not added to them.
func N(n int, one, other string, args ...any) string { return NIn("", n, one, other, args...) }

// NIn is N in a stated language; the empty tag is the language in use.
func NIn(tag string, n int, one, other string, args ...any) string {
	text := other
	if n == 1 || n == -1 {
		text = one
	}
	if c := lookup(tag); c != nil && c.plurals != nil {
		if t, err := c.plurals.Localize(&i18n.LocalizeConfig{MessageID: other, PluralCount: n}); err == nil && t != "" {
			text = t
		}
	}
	if len(args) == 0 {
		return text
	}
	return fmt.Sprintf(text, args...)
}

// Decimal writes a number that stands in its English form with the decimal sign of a language: the
// point in English, the comma in every other language there are texts for (CLDR). The empty tag is the
// language in use.
func Decimal(tag, number string) string {
	if lookup(tag) == nil {
		return number
	}
	return strings.Replace(number, ".", ",", 1)
}

func find(tag, text string) string {
	if c := lookup(tag); c != nil {
		if t, ok := c.texts[text]; ok && t != "" {
			return t
		}
	}
	return text
}

func lookup(tag string) *catalogue {
	if tag == "" {
		return current.Load()
	}
	return load(tag)
}

func base(tag string) string {
	b, _, _ := strings.Cut(strings.ReplaceAll(tag, "_", "-"), "-")
	return strings.ToLower(b)
}

// load returns the catalogue of the tag's language, nil where there is none or it is English.
func load(tag string) *catalogue {
	b := base(tag)
	if b == "" || b == "en" || !slices.Contains(Tags(), b) {
		return nil
	}
	if c, ok := loaded.Load(b); ok {
		return c.(*catalogue)
	}
	c, err := read(b)
	if err != nil {
		c = nil
	}
	got, _ := loaded.LoadOrStore(b, c)
	return got.(*catalogue)
}

// read parses the embedded file of a language.
func read(tag string) (*catalogue, error) {
	data, err := files.ReadFile(path.Join("lang", tag+".json"))
	if err != nil {
		return nil, err
	}
	var f file
	if err := json.Unmarshal(data, &f); err != nil {
		return nil, fmt.Errorf("texts of %s: %w", tag, err)
	}
	t, err := language.Parse(tag)
	if err != nil {
		return nil, fmt.Errorf("texts of %s: %w", tag, err)
	}
	bundle := i18n.NewBundle(t)
	for other, forms := range f.Plurals {
		m := &i18n.Message{ID: other, Other: forms["other"], One: forms["one"], Few: forms["few"],
			Many: forms["many"], Two: forms["two"], Zero: forms["zero"]}
		if err := bundle.AddMessages(t, m); err != nil {
			return nil, fmt.Errorf("texts of %s: %q: %w", tag, other, err)
		}
	}
	return &catalogue{tag: tag, texts: f.Texts, plurals: i18n.NewLocalizer(bundle, tag)}, nil
}
