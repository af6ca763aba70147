package chart

import (
	"image/color"
	"math"
	"strconv"
	"time"

	"gonum.org/v1/plot/vg"
)

// Visit is one column of a course: when it was and whether it is like the others.
type Visit struct {
	At     time.Time
	Unlike bool   // not like for like with the visit before: surface, aid, drugs, session
	Note   string // why, or what else a hover should say
}

// Event is something that happened: a surgery, a new medicine, a problem.
type Event struct {
	At   time.Time
	Word string // one or two words, in the reader's language
}

// Goal is a line to reach.
type Goal struct {
	Value float64
	By    time.Time // zero: no day was set
	Word  string
}

// Value is what is known of one quantity at one visit.
type Value struct {
	Known     bool    // there is a value
	Value     float64 // on the chart's scale
	Banded    bool    // Low and High hold the ends of its band
	Low, High float64
	Count     int    // findings behind it
	Mark      string // the figure as people write it, such as "3" or "12.5"; empty: none is drawn
}

// Forecast is a value ahead of the last visit with its band.
type Forecast struct {
	At               time.Time
	Value, Low, High float64
}

// Span is the stretch of time a chart shows, and the room left and right of it. Charts
// drawn one above the other with one Span share their time axis. The zero Span is worked
// out from what the chart holds.
type Span struct {
	From, To    time.Time
	Left, Right vg.Length // 0: as the chart's own labels need
}

// SpanOf returns the stretch of time that covers all visits, events, goals and forecasts,
// with a little air.
func SpanOf(visits []Visit, more ...time.Time) Span {
	var s Span
	add := func(t time.Time) {
		if t.IsZero() {
			return
		}
		if s.From.IsZero() || t.Before(s.From) {
			s.From = t
		}
		if t.After(s.To) {
			s.To = t
		}
	}
	for _, v := range visits {
		add(v.At)
	}
	for _, t := range more {
		add(t)
	}
	pad := s.To.Sub(s.From) / 40
	if pad < 36*time.Hour {
		pad = 36 * time.Hour
	}
	if !s.From.IsZero() {
		s.From, s.To = s.From.Add(-pad), s.To.Add(pad)
	}
	return s
}

// scaleX places instants between two points of the paper.
type scaleX struct {
	from, to time.Time
	x0, x1   vg.Length
}

func (s scaleX) at(t time.Time) vg.Length {
	d := s.to.Sub(s.from).Seconds()
	if d <= 0 {
		return (s.x0 + s.x1) / 2
	}
	return s.x0 + (s.x1-s.x0)*vg.Length(t.Sub(s.from).Seconds()/d)
}

// tick is one label of a time axis.
type tick struct {
	at    time.Time
	label string
}

// ticks chooses days, weeks, months or years so that the labels have room.
func (s scaleX) ticks(st Style) []tick {
	room := s.x1 - s.x0
	if room <= 0 || !s.to.After(s.from) {
		return nil
	}
	size := st.size()
	wide := Width(st.day(time.Date(2026, 12, 28, 0, 0, 0, 0, time.UTC)), size, false) + size
	days := s.to.Sub(s.from).Hours() / 24
	most := math.Max(1, float64(room/wide))
	zone := s.from.Location()
	start := time.Date(s.from.Year(), s.from.Month(), s.from.Day(), 0, 0, 0, 0, zone)
	var out []tick
	for _, step := range []int{1, 2, 7, 14, 28} {
		if days/float64(step) > most || (step == 28 && days > 200) {
			continue
		}
		at := start
		if step >= 7 {
			for at.Weekday() != time.Monday {
				at = at.AddDate(0, 0, 1)
			}
		}
		for ; !at.After(s.to); at = at.AddDate(0, 0, step) {
			if !at.Before(s.from) {
				out = append(out, tick{at, st.day(at)})
			}
		}
		return out
	}
	month := time.Date(s.from.Year(), s.from.Month(), 1, 0, 0, 0, 0, zone)
	for _, step := range []int{1, 2, 3, 6, 12, 24, 60, 120} {
		if days/(30.44*float64(step)) > most {
			continue
		}
		at := month
		for int(at.Month()-1)%min(step, 12) != 0 {
			at = at.AddDate(0, 1, 0)
		}
		for ; !at.After(s.to); at = at.AddDate(0, step, 0) {
			if at.Before(s.from) {
				continue
			}
			label := st.month(at.Month())
			if at.Month() == time.January || step >= 12 {
				label = strconv.Itoa(at.Year())
			}
			out = append(out, tick{at, label})
		}
		return out
	}
	return out
}

// axis draws the labels under a plot whose bottom is at y, and faint lines up to top.
func (p pen) axis(s scaleX, y, top vg.Length) {
	size := p.st.size()
	p.line(s.x0, y, s.x1, y, 0.6, p.st.Palette.Line)
	last := vg.Length(math.Inf(-1))
	for _, t := range s.ticks(p.st) {
		x := s.at(t.at)
		w := Width(t.label, size, false)
		p.line(x, y, x, y-size*0.3, 0.6, p.st.Palette.Line)
		left := min(max(x-w/2, s.x0), s.x1-w)
		if left < last+size*0.4 {
			continue
		}
		if top > y {
			p.line(x, y, x, top, 0.3, p.st.Palette.Faint)
		}
		p.text(left, y-size*1.25, t.label, size, false, p.st.Palette.Soft, 0)
		last = left + w
	}
}

// axisHeight is the room that axis needs under a plot.
func (s Style) axisHeight() vg.Length { return s.size() * 1.7 }

// eventRows is how many lines of event words stand above a plot at most.
const eventRows = 2

// placedEvent is an event with the place of its word.
type placedEvent struct {
	index int
	x     vg.Length
	row   int // -1: there was no room for the word
	left  vg.Length
	word  string
}

// placeEvents lays the words of events out in at most eventRows lines, in time order; an
// event whose word finds no room keeps its line.
func placeEvents(events []Event, s scaleX, st Style) (placed []placedEvent, rows int) {
	size := st.size()
	ends := [eventRows]vg.Length{vg.Length(math.Inf(-1)), vg.Length(math.Inf(-1))}
	// crosses reports whether another event's line would run through a word.
	crosses := func(from, to vg.Length, but int) bool {
		for i, e := range events {
			if x := s.at(e.At); i != but && x > from-1 && x < to+1 && math.Abs(float64(x-s.at(events[but].At))) > 1 {
				return true
			}
		}
		return false
	}
	for i, e := range events {
		x := s.at(e.At)
		if x < s.x0-0.5 || x > s.x1+0.5 {
			continue
		}
		pe := placedEvent{index: i, x: x, row: -1}
		word := Fit(e.Word, (s.x1-s.x0)*0.45, size, false)
		w := Width(word, size, false)
		left := x + size*0.25
		if left+w > s.x1 || crosses(left, left+w, i) && !crosses(x-size*0.25-w, x-size*0.25, i) {
			left = x - size*0.25 - w
		}
		for r := range ends {
			if r == 0 && left < s.x0 && st.Lang != "" {
				continue // on paper, where rows are low, the first line beside the axis belongs to their labels
			}
			if word != "" && left >= ends[r]+size*0.5 && left >= s.x0-w {
				pe.row, pe.left, pe.word = r, left, word
				ends[r] = left + w
				rows = max(rows, r+1)
				break
			}
		}
		placed = append(placed, pe)
	}
	return placed, rows
}

// eventHeight is the room that the words of events need above a plot.
func (s Style) eventHeight(rows int) vg.Length { return vg.Length(rows) * s.size() * 1.25 }

// drawEvents draws thin verticals from bottom to top and their words above top.
func (p pen) drawEvents(placed []placedEvent, bottom, top vg.Length) {
	size := p.st.size()
	for _, e := range placed {
		up := top
		if e.row >= 0 {
			up = top + size*1.25*vg.Length(e.row) + size
		}
		p.line(e.x, bottom, e.x, up, 0.7, p.st.Palette.Soft)
		if e.row >= 0 {
			p.text(e.left, top+size*1.25*vg.Length(e.row)+size*0.3, e.word, size, false, p.st.Palette.Ink, 0)
		}
	}
}

// columns returns the stretch of the axis that each visit's column fills: half way to its
// neighbours, but never further than a little over half the usual distance, so that a long
// silence stays an empty place.
func columns(visits []Visit, s scaleX) [][2]vg.Length {
	n := len(visits)
	xs := make([]vg.Length, n)
	for i, v := range visits {
		xs[i] = s.at(v.At)
	}
	usual := (s.x1 - s.x0) / 6
	if n > 1 {
		gaps := make([]vg.Length, 0, n-1)
		for i := 1; i < n; i++ {
			gaps = append(gaps, xs[i]-xs[i-1])
		}
		usual = median(gaps)
	}
	reach := max(usual*0.6, 1)
	out := make([][2]vg.Length, n)
	for i, x := range xs {
		left, right := x-reach, x+reach
		if i > 0 {
			left = max(left, (xs[i-1]+x)/2)
		}
		if i < n-1 {
			right = min(right, (x+xs[i+1])/2)
		}
		out[i] = [2]vg.Length{max(left, s.x0), min(right, s.x1)}
	}
	return out
}

func median(v []vg.Length) vg.Length {
	s := append([]vg.Length(nil), v...)
	for i := 1; i < len(s); i++ {
		for j := i; j > 0 && s[j] < s[j-1]; j-- {
			s[j], s[j-1] = s[j-1], s[j]
		}
	}
	return s[len(s)/2]
}

// unlikeMark draws the small mark of a visit that is not like the others: two slanted strokes.
func (p pen) unlikeMark(x, y vg.Length, col color.NRGBA) {
	s := p.st.size() * 0.18
	p.line(x-s*1.6, y-s, x-s*0.2, y+s, 0.7, col)
	p.line(x+s*0.2, y-s, x+s*1.6, y+s, 0.7, col)
}
