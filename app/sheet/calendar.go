package sheet

import (
	"bufio"
	"fmt"
	"io"
	"iter"
	"strings"
	"time"
	"unicode/utf8"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// Calendar writes the next visits of all active animals as iCalendar (RFC 5545): one event of
// a whole day each, and returns how many it wrote. Dates that are only a month or a year are
// left out. A later export of the same visit replaces the earlier event, since its UID is the visit's.
func Calendar(w io.Writer, animals iter.Seq2[Animal, error], made time.Time, lang string) (int, error) {
	out := bufio.NewWriter(w)
	line := func(s string) { foldLine(out, s) }
	line("BEGIN:VCALENDAR")
	line("VERSION:2.0")
	line("PRODID:-//Cordwalk//next visits//EN")
	line("CALSCALE:GREGORIAN")
	line("METHOD:PUBLISH")
	n := 0
	for a, err := range animals {
		if err != nil {
			return n, fmt.Errorf("writing the calendar: %w", err)
		}
		if a.Patient.Status != exam.Active || len(a.Visits) == 0 {
			continue
		}
		v := a.Visits[len(a.Visits)-1]
		day, err := time.Parse("2006-01-02", string(v.NextVisit))
		if err != nil {
			continue
		}
		what := words.In(lang, "Visit: %s", a.Patient.Name)
		if a.Patient.Owner.Name != "" {
			what += " (" + a.Patient.Owner.Name + ")"
		}
		line("BEGIN:VEVENT")
		line("UID:" + v.ID.String() + "@cordwalk.example")
		line("DTSTAMP:" + made.UTC().Format("20060102T150405Z"))
		line("DTSTART;VALUE=DATE:" + day.Format("20060102"))
		line("DTEND;VALUE=DATE:" + day.AddDate(0, 0, 1).Format("20060102"))
		line("SUMMARY:" + escapeText(what))
		about := upperFirst(words.OfIn(lang, a.Patient.Species.String()))
		if a.Patient.Breed != "" {
			about += ", " + a.Patient.Breed
		}
		if a.Patient.Demo {
			about += "\n" + words.OfIn(lang, textDemo)
		}
		line("DESCRIPTION:" + escapeText(about))
		line("TRANSP:TRANSPARENT")
		line("END:VEVENT")
		n++
	}
	line("END:VCALENDAR")
	if err := out.Flush(); err != nil {
		return n, fmt.Errorf("writing the calendar: %w", err)
	}
	return n, nil
}

// escapeText escapes a text value (RFC 5545, 3.3.11).
func escapeText(s string) string {
	s = strings.NewReplacer(`\`, `\\`, ";", `\;`, ",", `\,`, "\r\n", `\n`, "\n", `\n`, "\r", `\n`).Replace(s)
	return strings.Map(func(r rune) rune {
		if r < ' ' && r != '\t' {
			return -1
		}
		return r
	}, s)
}

// foldLine writes a content line, folded so that no line has more than 75 bytes without its
// end (RFC 5545, 3.1); no letter is torn apart.
func foldLine(w *bufio.Writer, s string) {
	room := 75
	for len(s) > room {
		cut := room
		for cut > 0 && !utf8.RuneStart(s[cut]) {
			cut--
		}
		w.WriteString(s[:cut])
		w.WriteString("\r\n ")
		s, room = s[cut:], 74
	}
	w.WriteString(s)
	w.WriteString("\r\n")
}
