// Package view holds the view-models of the screens: what each screen shows and what
// each key does, as plain Go that a test or the command line can drive. It draws
// nothing and imports no window library; the desktop draws what these types say.
//
// A view-model belongs to one goroutine, the one that draws. Work that takes time
// runs elsewhere on copies, and its result comes back through the function given as
// OnUI. A late result is dropped.
package view

import (
	"math"
	"strconv"
	"strings"
	"time"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// OnUI runs a function on the goroutine that draws. Tests pass Now.
type OnUI func(func())

// Now is the OnUI of tests and of the command line: it runs the function at once.
func Now(f func()) { f() }

// Day returns a date as people read it, such as "2 Mar 2026".
func Day(t time.Time) string {
	if t.IsZero() {
		return ""
	}
	return words.T("%[1]d %[2]s %[3]d", t.Day(), words.Of(months[t.Month()-1]), t.Year())
}

// ShortDay returns a date without its year, such as "2 Mar".
func ShortDay(t time.Time) string {
	if t.IsZero() {
		return ""
	}
	return words.T("%[1]d %[2]s", t.Day(), words.Of(months[t.Month()-1]))
}

// months are the short names of the months, January first.
var months = [12]string{"Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec"}

// DateWords returns a calendar date of the vocabulary as people read it; a month or a
// year stays a month or a year. The empty Date is the empty text.
func DateWords(d exam.Date) string {
	t, ok := d.Time()
	switch {
	case !ok:
		return string(d)
	case len(d) == 4:
		return string(d)
	case len(d) == 7:
		return words.Of(months[t.Month()-1]) + " " + strconv.Itoa(t.Year())
	}
	return Day(t)
}

// DecimalSign is what the language in use sets before decimals.
func DecimalSign() string { return words.Decimal("", "0.5")[1:2] }

// Plain writes a number without needless digits, with the language's decimal sign, as it is typed.
func Plain(x float64) string {
	return words.Decimal("", strconv.FormatFloat(x, 'f', -1, 64))
}

// number writes a value with at most one decimal and no needless zero, with the decimal sign of
// the language in use.
func number(x float64) string {
	return Plain(math.Round(x*10) / 10)
}

// joinWords joins with commas, the last with «and».
func joinWords(list []string) string {
	switch len(list) {
	case 0:
		return ""
	case 1:
		return list[0]
	}
	return words.T("%s and %s", strings.Join(list[:len(list)-1], ", "), list[len(list)-1])
}

// capital returns the text with its first letter in upper case.
func capital(s string) string {
	for i, r := range s {
		return strings.ToUpper(string(r)) + s[i+len(string(r)):]
	}
	return s
}
