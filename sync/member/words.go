package member

import (
	"encoding/binary"
	"fmt"
	"strings"
)

// Codes are written as proquints (Wilkerson 2009, arXiv:0901.4016): words of five letters that can
// be said aloud in many languages, each standing for 16 bits. Words that are read aloud need no list of words.

const (
	consonants = "bdfghjklmnprstvz"
	vowels     = "aiou"
)

// toWords writes bytes, two a word.
func toWords(b []byte) string {
	var words []string
	for ; len(b) >= 2; b = b[2:] {
		n := binary.BigEndian.Uint16(b)
		words = append(words, string([]byte{
			consonants[n>>12&15], vowels[n>>10&3], consonants[n>>6&15], vowels[n>>4&3], consonants[n&15],
		}))
	}
	return strings.Join(words, "-")
}

// fromWords is the inverse of toWords. It takes capitals, and anything but letters between words.
func fromWords(text string) ([]byte, error) {
	var out []byte
	for _, w := range strings.FieldsFunc(strings.ToLower(text), func(r rune) bool { return r < 'a' || r > 'z' }) {
		if len(w) != 5 {
			return nil, fmt.Errorf("%.20q is no word of a code: each has five letters", w)
		}
		var n uint16
		for i, c := range []byte(w) {
			set, bits := consonants, 4
			if i%2 == 1 {
				set, bits = vowels, 2
			}
			at := strings.IndexByte(set, c)
			if at < 0 {
				return nil, fmt.Errorf("%q is no word of a code: look at its letter %d", w, i+1)
			}
			n = n<<bits | uint16(at)
		}
		out = binary.BigEndian.AppendUint16(out, n)
	}
	return out, nil
}
