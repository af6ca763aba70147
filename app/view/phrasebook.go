package view

import (
	"slices"

	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// PhraseBook is the practice's own wording of the owner's sheet, and its logo, as they are
// changed on a screen: one change at a time, each of which can be taken back.
type PhraseBook struct {
	practice exam.Practice
	lang     string
	past     []exam.Practice
	future   []exam.Practice
}

// NewPhraseBook opens the book in a language; the empty tag is that of the practice's sheets.
func NewPhraseBook(pr exam.Practice, lang string) *PhraseBook {
	b := &PhraseBook{practice: pr}
	b.SetLang(lang)
	return b
}

// Practice is the practice as it is now.
func (b *PhraseBook) Practice() exam.Practice { return b.practice }

// Lang is the language of the wordings shown.
func (b *PhraseBook) Lang() string { return b.lang }

// SetLang shows the wordings of another language.
func (b *PhraseBook) SetLang(lang string) {
	for _, l := range []string{lang, b.practice.Language, "en"} {
		if l != "" {
			b.lang = l
			return
		}
	}
}

// PhraseLine is one sentence of the book. Places stand as words in angle quotes.
type PhraseLine struct {
	Key      string
	Standard string // the program's own words
	Own      string // the practice's; empty where it has none
}

// Lines lists the sentences in the order of the sheet.
func (b *PhraseBook) Lines() []PhraseLine {
	var out []PhraseLine
	for _, p := range sheet.Phrases(b.practice, b.lang) {
		out = append(out, PhraseLine{p.Key, sheet.Marked(p.Key, p.Standard), sheet.Marked(p.Key, p.Own)})
	}
	return out
}

// Sample says how a wording would stand on the sheet of an invented animal and how easily it
// reads. The empty wording is the standard one. The error says what is wrong with it.
func (b *PhraseBook) Sample(key, own string) (string, error) {
	if own == "" {
		for _, l := range b.Lines() {
			if l.Key == key {
				own = l.Standard
			}
		}
	}
	text, err := sheet.Unmarked(key, own)
	if err != nil {
		return "", err
	}
	example := sheet.Example(b.lang, key, text)
	if ease := sheet.EaseWords(b.lang, []string{example}); ease != "" {
		return words.T("On the sheet: %[1]s (%[2]s)", example, ease), nil
	}
	return words.T("On the sheet: %s", example), nil
}

// Reword puts a sentence into the practice's own words; empty words go back to the standard
// ones. It reports whether anything changed.
func (b *PhraseBook) Reword(key, own string) (bool, error) {
	for _, l := range b.Lines() {
		if l.Key == key && l.Own == own {
			return false, nil
		}
	}
	if own != "" {
		text, err := sheet.Unmarked(key, own)
		if err != nil {
			return false, err
		}
		own = text
	}
	after, err := sheet.SetPhrase(b.practice, key, b.lang, own)
	if err != nil {
		return false, err
	}
	b.change(after)
	return true, nil
}

// SetLogo takes a picture for the heading of papers; nil takes the logo away.
func (b *PhraseBook) SetLogo(data []byte) error {
	if data != nil {
		if err := sheet.CheckLogo(data); err != nil {
			return err
		}
	}
	after := b.practice
	after.Logo = slices.Clone(data)
	b.change(after)
	return nil
}

// WriteIn sets the language that sheets are written in unless another is chosen for one.
func (b *PhraseBook) WriteIn(lang string) {
	after := b.practice
	after.Language = lang
	b.change(after)
}

func (b *PhraseBook) change(after exam.Practice) {
	b.past, b.future = append(b.past, b.practice), nil
	b.practice = after
}

// Undo takes the last change back, or does it again, and reports whether there was one.
func (b *PhraseBook) Undo(redo bool) bool {
	from, to := &b.past, &b.future
	if redo {
		from, to = to, from
	}
	n := len(*from)
	if n == 0 {
		return false
	}
	*to = append(*to, b.practice)
	b.practice, *from = (*from)[n-1], (*from)[:n-1]
	return true
}
