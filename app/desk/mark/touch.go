package mark

import (
	"math"
	"time"

	"fyne.io/fyne/v2"
)

// A finger has no pointer that rests and no wheel: it drags a page, swipes over it, and presses long to be
// told what something is.

// longPress is how long a control is pressed to be explained instead of used (common practice).
const longPress = 600 * time.Millisecond

// jitter is how far a finger may slip on a control and still press it, in px (common practice). The toolkit
// takes two pixels for a drag.
const jitter = 12

// swipeLength is how far a finger goes sideways to turn to the next thing, in px.
const swipeLength = 80

// pressed is the control that a button or a finger went down on last. There is one pointer.
var pressed struct {
	on fyne.Tappable
	at time.Time
	up fyne.Position // where on the window
}

// Press is told by a control that it is pressed; Tapped follows if it is let go there.
func Press(o fyne.Tappable, at fyne.Position) {
	Used()
	pressed.on, pressed.at, pressed.up = o, time.Now(), at
}

// Held reports whether the press that ends now was a long one, which explains the control and does not use
// it: then the words are shown. A control without words is used all the same.
func Held(o fyne.Tappable, words string, e *fyne.PointEvent) bool {
	if e == nil || pressed.on != o {
		return false
	}
	long := time.Since(pressed.at) >= longPress
	pressed.on = nil
	if !long || words == "" {
		return false
	}
	if c, ok := o.(fyne.CanvasObject); ok {
		ExplainAt(c, words, e.AbsolutePosition)
	}
	return true
}

// Dragged moves the page with the finger.
func (s *Scroll) Dragged(e *fyne.DragEvent) {
	if !s.dragging {
		s.dragging, s.drag, s.stood = true, fyne.Delta{}, s.Offset()
		s.began = e.AbsolutePosition.SubtractXY(e.Dragged.DX, e.Dragged.DY)
	}
	s.drag.DX += e.Dragged.DX
	s.drag.DY += e.Dragged.DY
	if math.Abs(float64(s.drag.DY)) > jitter {
		s.By(s.stood - s.drag.DY - s.Offset())
	}
}

// DragEnd ends a drag: one of a few pixels was a press, a long one sideways a swipe.
func (s *Scroll) DragEnd() {
	d := s.drag
	s.dragging = false
	wide, high := math.Abs(float64(d.DX)), math.Abs(float64(d.DY))
	switch {
	case max(wide, high) <= jitter:
		o := pressed.on
		if o != nil && math.Hypot(float64(s.began.X-pressed.up.X), float64(s.began.Y-pressed.up.Y)) <= jitter {
			o.Tapped(&fyne.PointEvent{AbsolutePosition: pressed.up})
		}
	case s.OnSwipe != nil && wide > swipeLength && wide > 2*high:
		if d.DX < 0 {
			s.OnSwipe(1)
		} else {
			s.OnSwipe(-1)
		}
	}
	pressed.on = nil
}

var _ fyne.Draggable = (*Scroll)(nil)
