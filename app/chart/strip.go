package chart

import (
	"math"
	"time"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// StripRow is one segment of the cord: its values at each visit, left and right.
type StripRow struct {
	Label       string
	Major       bool    // begins a region: labelled first when there is little room
	Left, Right []Value // one for each visit; shorter slices end in unknown values
}

// Strip shows the function of every segment at every visit: segments are rows, cranial at
// the top, the left half above the right half; visits are columns, true to the days; the
// shade is the value from 0 to 100. What is not known is left empty. A value with a wide
// band is drawn as a thinner bar.
type Strip struct {
	Visits []Visit
	Rows   []StripRow
	Events []Event
	Span   Span
	Model  bool // the values are a model's: one without a band is left out
	Legend bool // says under the chart what the shades mean
	// Focus marks a place as Hit returns it; nil marks none.
	Focus *StripHit
}

// StripHit is a place on a strip.
type StripHit struct {
	Row   int       // index into Rows
	Visit int       // index into Visits
	Side  exam.Site // exam.Left or exam.Right
	Event int       // index into Events, -1 where the place is no event's line
}

type stripPlan struct {
	x      scaleX
	plot   vg.Rectangle
	rowH   vg.Length
	cols   [][2]vg.Length
	events []placedEvent
}

func (s Strip) plan(r vg.Rectangle, st Style) stripPlan {
	size := st.size()
	span := s.Span
	if span.From.IsZero() || !span.To.After(span.From) {
		var more []time.Time
		for _, e := range s.Events {
			more = append(more, e.At)
		}
		own := SpanOf(s.Visits, more...)
		span.From, span.To = own.From, own.To
	}
	if span.Left == 0 {
		for _, row := range s.Rows {
			span.Left = max(span.Left, Width(row.Label, size, true))
		}
		span.Left += size * 1.8 // room for the letters L and R
	}
	if span.Right == 0 {
		span.Right = size * 0.5
	}
	var p stripPlan
	p.x = scaleX{span.From, span.To, r.Min.X + span.Left, r.Max.X - span.Right}
	if p.x.x1 < p.x.x0 {
		p.x.x1 = p.x.x0
	}
	var rows int
	p.events, rows = placeEvents(s.Events, p.x, st)
	bottom := r.Min.Y + st.axisHeight()
	if s.Legend {
		bottom += size * 1.7
	}
	top := r.Max.Y - st.eventHeight(rows) - size*0.2
	p.plot = rectOf(p.x.x0, bottom, p.x.x1, max(top, bottom))
	if n := len(s.Rows); n > 0 {
		p.rowH = (p.plot.Max.Y - p.plot.Min.Y) / vg.Length(n)
	}
	p.cols = columns(s.Visits, p.x)
	return p
}

// lane returns the place of one side of one row.
func (p stripPlan) lane(row int, side exam.Site) (bottom, top vg.Length) {
	t := p.plot.Max.Y - vg.Length(row)*p.rowH
	gap := min(p.rowH*0.08, 1)
	half := (p.rowH - gap) / 2
	if side == exam.Right {
		return t - p.rowH + gap, t - half
	}
	return t - half, t
}

func valueAt(v []Value, i int) Value {
	if i < len(v) {
		return v[i]
	}
	return Value{}
}

// Draw draws the strip over the whole canvas.
func (s Strip) Draw(c draw.Canvas, st Style) {
	p := newPen(c, st)
	size := st.size()
	pal := st.Palette
	pl := s.plan(c.Rectangle, st)
	p.rect(pl.plot, pal.Faint)
	for row, r := range s.Rows {
		for _, side := range []exam.Site{exam.Left, exam.Right} {
			bottom, top := pl.lane(row, side)
			values := r.Left
			if side == exam.Right {
				values = r.Right
			}
			for i := range s.Visits {
				v := valueAt(values, i)
				if !v.Known || math.IsNaN(v.Value) || (s.Model && !v.Banded) {
					continue
				}
				h := top - bottom
				if v.Banded {
					// A pale ground keeps a thin bar apart from an empty place.
					p.rect(rectOf(pl.cols[i][0], bottom, pl.cols[i][1], top), mix(pal.Paper, pal.Shade(v.Value), 0.35))
					h *= vg.Length(1 - 0.65*min(max((v.High-v.Low)/100, 0), 1))
				}
				mid := (top + bottom) / 2
				p.rect(rectOf(pl.cols[i][0], mid-h/2, pl.cols[i][1], mid+h/2), pal.Shade(v.Value))
			}
		}
	}
	// Rules between the rows, stronger where a region begins.
	labelled := labelRows(s.Rows, pl.rowH, size)
	for row, r := range s.Rows {
		y := pl.plot.Max.Y - vg.Length(row)*pl.rowH
		switch {
		case row == 0:
		case r.Major:
			p.line(pl.plot.Min.X, y, pl.plot.Max.X, y, 0.9, pal.Soft)
		case pl.rowH >= size*0.6:
			p.line(pl.plot.Min.X, y, pl.plot.Max.X, y, 0.5, pal.Paper)
		}
		if labelled[row] {
			mid := y - pl.rowH/2
			lr := pl.rowH >= size*1.9 // room for L and R beside the row
			x := pl.plot.Min.X - size*0.5
			if lr {
				small := size * 0.8
				bl, tl := pl.lane(row, exam.Left)
				br, tr := pl.lane(row, exam.Right)
				p.middle(x, (bl+tl)/2, words.In(st.Lang, "L"), small, false, pal.Soft, 1)
				p.middle(x, (br+tr)/2, words.In(st.Lang, "R"), small, false, pal.Soft, 1)
				x -= size
			}
			p.middle(x, mid, r.Label, size, r.Major, pal.Ink, 1)
		}
	}
	p.axis(pl.x, pl.plot.Min.Y, 0)
	for _, v := range s.Visits {
		x := pl.x.at(v.At)
		p.line(x, pl.plot.Min.Y, x, pl.plot.Min.Y-size*0.3, 1.2, pal.Ink)
		if v.Unlike {
			p.unlikeMark(x, pl.plot.Min.Y, pal.Ink)
		}
	}
	p.drawEvents(pl.events, pl.plot.Min.Y, pl.plot.Max.Y)
	if f := s.Focus; f != nil && f.Visit >= 0 && f.Visit < len(s.Visits) && f.Row >= 0 && f.Row < len(s.Rows) {
		bottom, top := pl.lane(f.Row, f.Side)
		p.frame(rectOf(pl.cols[f.Visit][0], bottom, pl.cols[f.Visit][1], top), 1.6, pal.Ink)
	}
	if s.Legend {
		s.legend(p, c.Rectangle)
	}
}

// labelRows chooses the rows that get a label, so that no two touch: those that begin a
// region first, then the others from the top.
func labelRows(rows []StripRow, rowH, size vg.Length) []bool {
	out := make([]bool, len(rows))
	if rowH <= 0 {
		return out
	}
	apart := int(math.Ceil(float64(size * 1.1 / rowH)))
	free := func(i int) bool {
		for j := max(0, i-apart+1); j < min(len(rows), i+apart); j++ {
			if out[j] {
				return false
			}
		}
		return true
	}
	for _, major := range []bool{true, false} {
		for i, r := range rows {
			if r.Major == major && free(i) {
				out[i] = true
			}
		}
	}
	return out
}

func (s Strip) legend(p pen, r vg.Rectangle) {
	size := p.st.size()
	pal := p.st.Palette
	y := r.Min.Y + size*0.55
	x := p.st.legendScale(p, r.Min.X, y)
	for _, part := range []struct {
		draw func(x vg.Length)
		word string
		on   bool
	}{
		{func(x vg.Length) { p.rect(rectOf(x, y-size*0.15, x+size*1.4, y+size*0.15), pal.Shade(60)) }, words.In(p.st.Lang, "thin: uncertain"), s.Model},
		{func(x vg.Length) {
			p.rect(rectOf(x, y-size*0.4, x+size*1.4, y+size*0.4), pal.Faint)
			p.frame(rectOf(x, y-size*0.4, x+size*1.4, y+size*0.4), 0.5, pal.Line)
		}, words.In(p.st.Lang, "empty: not enough to say"), true},
		{func(x vg.Length) { p.unlikeMark(x+size*0.7, y, pal.Ink) }, words.In(p.st.Lang, "not like for like"), s.unlike()},
	} {
		if !part.on || x+size*2+Width(part.word, size, false) > r.Max.X {
			continue
		}
		part.draw(x)
		p.middle(x+size*1.8, y, part.word, size, false, pal.Soft, 0)
		x += size*3 + Width(part.word, size, false)
	}
}

func (s Strip) unlike() bool {
	for _, v := range s.Visits {
		if v.Unlike {
			return true
		}
	}
	return false
}

// legendScale draws the scale of function and returns where the next part may begin.
func (s Style) legendScale(p pen, x, y vg.Length) vg.Length {
	size := s.size()
	none, full := words.In(s.Lang, "no function"), words.In(s.Lang, "full function")
	p.middle(x, y, none, size, false, s.Palette.Soft, 0)
	x += Width(none, size, false) + size*0.4
	for i := range 5 {
		p.rect(rectOf(x, y-size*0.4, x+size, y+size*0.4), s.Palette.Shade(float64(i)*25))
		x += size
	}
	x += size * 0.4
	p.middle(x, y, full, size, false, s.Palette.Soft, 0)
	return x + Width(full, size, false) + size*1.4
}

// Hit returns what lies at a point of a strip drawn w by h points large, x to the right and
// y down from the upper left corner, and false where there is nothing.
func (s Strip) Hit(w, h, x, y vg.Length, st Style) (StripHit, bool) {
	r := area(w, h)
	pl := s.plan(r, st)
	pt := vg.Point{X: x, Y: h - y}
	for _, e := range pl.events {
		if e.row >= 0 {
			bottom := pl.plot.Max.Y + st.size()*1.25*vg.Length(e.row)
			if inside(rectOf(e.left, bottom, e.left+Width(e.word, st.size(), false), bottom+st.size()*1.25), pt) {
				return StripHit{Row: -1, Visit: -1, Event: e.index}, true
			}
		}
	}
	if !inside(pl.plot, pt) || pl.rowH <= 0 {
		return StripHit{}, false
	}
	row := min(int((pl.plot.Max.Y-pt.Y)/pl.rowH), len(s.Rows)-1)
	side := exam.Left
	if bottom, _ := pl.lane(row, exam.Left); pt.Y < bottom {
		side = exam.Right
	}
	for i, col := range pl.cols {
		if pt.X >= col[0] && pt.X < col[1] {
			return StripHit{Row: row, Visit: i, Side: side, Event: -1}, true
		}
	}
	return StripHit{}, false
}
