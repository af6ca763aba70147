package view

import (
	"slices"
	"strings"
	"time"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// HistoryLine is one change in words.
type HistoryLine struct {
	At     time.Time
	Day    string // heading that it stands under
	Clock  string
	Who    string // examiner and device
	Where  string // the visit's day, or the patient
	Field  string
	Before string // empty where there was nothing
	After  string
	How    string // entered, amended … with its reason
	State  string // "replaced since", "not accepted", or empty where it counts

	key string // of the field in its record
}

// History is every change of a patient, newest first, by day, with a search.
type History struct {
	all   []HistoryLine
	shown []HistoryLine
	query string
	field string // only this one
}

// NewHistory says the changes of a patient in words.
func NewHistory(entries []storage.Entry, visits []exam.Visit, zone *time.Location, u exam.Units) *History {
	if zone == nil {
		zone = time.Local
	}
	days := map[exam.ID]string{}
	for _, v := range visits {
		days[v.ID] = words.T("Visit of %s", Day(v.Examined))
	}
	h := &History{}
	for _, e := range slices.Backward(entries) {
		at := e.At.In(zone)
		l := HistoryLine{At: at, Day: Day(at), Clock: at.Format("15:04"), Who: strings.Trim(e.Examiner+", "+e.Device, ", "), Where: words.T("Patient"),
			Field: FieldTitle(e.Field), After: FieldWords(e.Field, e.Raw, e.Value, u), How: e.How, key: e.Record.String() + "/" + e.Field}
		if t, ok := actTitles[e.How]; ok {
			l.How = words.Of(t)
		}
		if e.Reason != "" {
			l.How = words.T("%s: %s", l.How, e.Reason)
		}
		if d, ok := days[e.Record]; ok {
			l.Where = d
		}
		var before []string
		for _, raw := range e.Replaced {
			if w := FieldWords(e.Field, raw, e.Before, u); !slices.Contains(before, w) {
				before = append(before, w)
			}
		}
		l.Before = strings.Join(before, " | ")
		switch {
		case e.Late:
			l.State = words.T("not accepted")
		case !e.Current:
			l.State = words.T("replaced since")
		}
		h.all = append(h.all, l)
	}
	h.shown = h.all
	return h
}

// Lines are the changes shown.
func (h *History) Lines() []HistoryLine { return h.shown }

// Total is how many changes there are.
func (h *History) Total() int { return len(h.all) }

// Search shows only changes with every word of the query in their field, visit, value or examiner.
func (h *History) Search(query string) { h.query = query; h.filter() }

// Of shows only the changes of the field of a line shown; a second time, all again. It reports whether one field is shown.
func (h *History) Of(line int) bool {
	if h.field != "" || line < 0 || line >= len(h.shown) {
		h.field = ""
	} else {
		h.field = h.shown[line].key
	}
	h.filter()
	return h.field != ""
}

// One reports whether the changes of one field alone are shown.
func (h *History) One() bool { return h.field != "" }

func (h *History) filter() {
	parts := strings.Fields(strings.ToLower(h.query))
	h.shown = nil
	for _, l := range h.all {
		if h.field != "" && l.key != h.field {
			continue
		}
		text := strings.ToLower(strings.Join([]string{l.Field, l.Where, l.Before, l.After, l.Who, l.How, l.Day}, " "))
		if !slices.ContainsFunc(parts, func(p string) bool { return !strings.Contains(text, p) }) {
			h.shown = append(h.shown, l)
		}
	}
}
