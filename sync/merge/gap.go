package merge

import (
	"fmt"
	"slices"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
)

// Gap is a stretch of a stream that is missing or unreadable although something after it is
// there. What it may touch is shown as «an entry is missing».
type Gap struct {
	Stream      change.Stream
	First, Last uint64
}

// String names stream and numbers.
func (g Gap) String() string {
	return fmt.Sprintf("changes %d–%d of stream %s", g.First, g.Last, g.Stream)
}

// Span is what is there of a stream: a run of sequence numbers without holes.
type Span struct{ First, Last uint64 }

// AddSpan adds a run of numbers to spans, which are in rising order and do not touch, and
// returns them so again. It does not change its argument.
func AddSpan(spans []Span, s Span) []Span {
	out := make([]Span, 0, len(spans)+1)
	for i, t := range spans {
		switch {
		case t.Last != ^uint64(0) && t.Last+1 < s.First:
			out = append(out, t)
		case s.Last != ^uint64(0) && s.Last+1 < t.First:
			out = append(out, s)
			return append(out, spans[i:]...)
		default:
			s = Span{min(s.First, t.First), max(s.Last, t.Last)}
		}
	}
	return append(out, s)
}

// Gaps returns the holes before, between and (up to head, the last number known to exist)
// after spans.
func Gaps(stream change.Stream, spans []Span, head uint64) []Gap {
	var gs []Gap
	next := uint64(1)
	for _, s := range spans {
		if s.First > next {
			gs = append(gs, Gap{stream, next, s.First - 1})
		}
		next = s.Last + 1
	}
	if head >= next && next != 0 {
		gs = append(gs, Gap{stream, next, head})
	}
	return gs
}

// MayTouch reports whether changes in the gap may belong to the patient, given that patient's
// known changes of the gap's stream in rising order of sequence. A writer names in each
// change the stream's previous change to the same patient; so the first known change after the
// gap tells whether there is one inside it. Without such a change nothing can be said, and the
// answer is yes.
func (g Gap) MayTouch(known []change.Change) bool {
	i, _ := slices.BinarySearchFunc(known, g.Last+1, func(c change.Change, seq uint64) int {
		switch {
		case c.Seq < seq:
			return -1
		case c.Seq > seq:
			return 1
		}
		return 0
	})
	if i == len(known) {
		return true
	}
	prev, ok := known[i].Previous()
	return !ok || prev >= g.First
}

// Patient is a helper for display: the smallest id of the component that id belongs to, id
// itself if it is in none.
func Patient(components map[exam.ID]exam.ID, id exam.ID) exam.ID {
	if r, ok := components[id]; ok {
		return r
	}
	return id
}
