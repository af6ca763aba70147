package chart

import (
	"math"
	"time"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"cordwalk.example/cordwalk/assets/words"
)

// Series is one line of a chart with a scale of its own.
type Series struct {
	Label    string
	Unit     string  // stands behind the label; empty for grades
	Min, Max float64 // ends of the scale, Min < Max; both 0: as the values need
	Values   []Value // one for each visit; shorter slices end in unknown values
	Untested []bool  // visits at which the item was asked for and not tested: a dashed bead
	Model    bool    // the values are a model's: one without a band is left out
	Step     bool    // whole grades: numbers stand at the beads
	Goals    []Goal
	Forecast []Forecast // after the last visit, drawn paler behind a break
	LowWord  string     // stands at the lower end of the scale instead of its figure
	HighWord string     // stands at the upper end of the scale instead of its figure
	Noise    float64    // half-width of what is not a real change about the first value; 0: none
}

// Limbs shows the four limbs in exam.Limbs order, and whatever else is added, one above the
// other over one time axis, with a bead at each visit as full as the grade is high.
type Limbs struct {
	Visits []Visit
	Limbs  []Series
	Events []Event
	Span   Span
	Focus  *LaneHit
}

// Measures shows measures and scales, each with its unit, one above the other over one time axis.
type Measures struct {
	Visits []Visit
	Series []Series
	Events []Event
	Span   Span
	Focus  *LaneHit
}

// LaneHit is a place on a chart of lines.
type LaneHit struct {
	Series   int // index of the series
	Visit    int // index of the nearest visit, -1 on a forecast or an event
	Forecast int // index into the series' forecast, -1 elsewhere
	Event    int // index into the events, -1 elsewhere
}

// Draw draws the limbs over the whole canvas.
func (l Limbs) Draw(c draw.Canvas, st Style) {
	lanes{l.Visits, l.Limbs, l.Events, l.Span, l.Focus, true}.draw(c, st)
}

// Hit is as Strip.Hit.
func (l Limbs) Hit(w, h, x, y vg.Length, st Style) (LaneHit, bool) {
	return lanes{l.Visits, l.Limbs, l.Events, l.Span, nil, true}.hit(w, h, x, y, st)
}

// Draw draws the measures over the whole canvas.
func (m Measures) Draw(c draw.Canvas, st Style) {
	lanes{m.Visits, m.Series, m.Events, m.Span, m.Focus, false}.draw(c, st)
}

// Hit is as Strip.Hit.
func (m Measures) Hit(w, h, x, y vg.Length, st Style) (LaneHit, bool) {
	return lanes{m.Visits, m.Series, m.Events, m.Span, nil, false}.hit(w, h, x, y, st)
}

type lanes struct {
	visits []Visit
	series []Series
	events []Event
	span   Span
	focus  *LaneHit
	beads  bool
}

type lanePlan struct {
	x      scaleX
	plot   vg.Rectangle
	laneH  vg.Length
	events []placedEvent
	r      vg.Length // radius of a bead
}

func (l lanes) plan(r vg.Rectangle, st Style) lanePlan {
	size := st.size()
	span := l.span
	if span.From.IsZero() || !span.To.After(span.From) {
		var more []time.Time
		for _, e := range l.events {
			more = append(more, e.At)
		}
		for _, s := range l.series {
			for _, g := range s.Goals {
				more = append(more, g.By)
			}
			for _, f := range s.Forecast {
				more = append(more, f.At)
			}
		}
		own := SpanOf(l.visits, more...)
		span.From, span.To = own.From, own.To
	}
	if span.Left == 0 {
		for _, s := range l.series {
			span.Left = max(span.Left, Width(s.Label, size, false)+Width(s.Unit, size, false)+size*0.5)
		}
		span.Left = min(span.Left+l.endWidth(size), (r.Max.X-r.Min.X)*0.45)
	}
	if span.Right == 0 {
		span.Right = size * 0.5
	}
	var p lanePlan
	p.x = scaleX{span.From, span.To, r.Min.X + span.Left, r.Max.X - span.Right}
	if p.x.x1 < p.x.x0 {
		p.x.x1 = p.x.x0
	}
	var rows int
	p.events, rows = placeEvents(l.events, p.x, st)
	bottom := r.Min.Y + st.axisHeight()
	top := r.Max.Y - st.eventHeight(rows) - size*0.2
	p.plot = rectOf(p.x.x0, bottom, p.x.x1, max(top, bottom))
	if n := len(l.series); n > 0 {
		p.laneH = (p.plot.Max.Y - p.plot.Min.Y) / vg.Length(n)
	}
	p.r = min(size*0.42, p.laneH*0.16)
	return p
}

// endWidth is the room that the ends of the scales need left of the plot.
func (l lanes) endWidth(size vg.Length) vg.Length {
	w := size * 2
	for _, s := range l.series {
		w = max(w, Width(s.LowWord, size*0.85, false)+size*0.9, Width(s.HighWord, size*0.85, false)+size*0.9)
	}
	return w
}

// scaleY places values in a lane.
type scaleY struct {
	min, max float64
	y0, y1   vg.Length
}

func (s scaleY) at(v float64) vg.Length {
	if s.max <= s.min {
		return (s.y0 + s.y1) / 2
	}
	t := (v - s.min) / (s.max - s.min)
	return s.y0 + (s.y1-s.y0)*vg.Length(min(max(t, 0), 1))
}

// ends returns the ends of the series' scale: its own, or round ones about the values, goals
// and forecasts.
func (s Series) ends() (lo, hi float64) {
	if s.Min != 0 || s.Max != 0 {
		return s.Min, s.Max
	}
	lo, hi = math.Inf(1), math.Inf(-1)
	add := func(v float64) {
		if !math.IsNaN(v) && !math.IsInf(v, 0) {
			lo, hi = math.Min(lo, v), math.Max(hi, v)
		}
	}
	for _, v := range s.Values {
		if v.Known {
			add(v.Value)
			if v.Banded {
				add(v.Low)
				add(v.High)
			}
		}
	}
	for _, g := range s.Goals {
		add(g.Value)
	}
	for _, f := range s.Forecast {
		add(f.Low)
		add(f.High)
	}
	if lo > hi {
		return 0, 1
	}
	if lo == hi {
		d := math.Max(math.Abs(lo)*0.1, 0.5)
		return lo - d, hi + d
	}
	step := math.Pow(10, math.Floor(math.Log10(hi-lo)))
	return math.Floor(lo/step) * step, math.Ceil(hi/step) * step
}

func (p lanePlan) lane(i int, s Series) scaleY {
	top := p.plot.Max.Y - vg.Length(i)*p.laneH
	lo, hi := s.ends()
	air := min(p.r*1.9+p.laneH*0.06, p.laneH*0.3)
	return scaleY{lo, hi, top - p.laneH + air, top - air}
}

func (l lanes) draw(c draw.Canvas, st Style) {
	p := newPen(c, st)
	pl := l.plan(c.Rectangle, st)
	pal := st.Palette
	size := st.size()
	for i, s := range l.series {
		y := pl.lane(i, s)
		top := pl.plot.Max.Y - vg.Length(i)*pl.laneH
		if i%2 == 0 {
			p.rect(rectOf(pl.plot.Min.X, top-pl.laneH, pl.plot.Max.X, top), pal.Faint)
		}
		p.laneLabels(c.Rectangle.Min.X, pl, y, s, top, l.endWidth(size))
	}
	p.axis(pl.x, pl.plot.Min.Y, 0)
	for i, s := range l.series {
		l.drawSeries(p, pl, i, s)
	}
	for _, v := range l.visits {
		x := pl.x.at(v.At)
		p.line(x, pl.plot.Min.Y, x, pl.plot.Min.Y-size*0.3, 1.2, pal.Ink)
		if v.Unlike {
			p.unlikeMark(x, pl.plot.Min.Y, pal.Ink)
		}
	}
	p.drawEvents(pl.events, pl.plot.Min.Y, pl.plot.Max.Y)
	if f := l.focus; f != nil && f.Series >= 0 && f.Series < len(l.series) && f.Visit >= 0 && f.Visit < len(l.visits) {
		s := l.series[f.Series]
		if v := valueAt(s.Values, f.Visit); v.Known {
			at := vg.Point{X: pl.x.at(l.visits[f.Visit].At), Y: pl.lane(f.Series, s).at(v.Value)}
			p.strokePath(circlePath(at, pl.r*1.8), 1.6, pal.Ink)
		}
	}
}

// laneLabels writes the name of a lane and the ends of its scale.
func (p pen) laneLabels(x0 vg.Length, pl lanePlan, y scaleY, s Series, top, ends vg.Length) {
	size, pal := p.st.size(), p.st.Palette
	room := pl.plot.Min.X - x0 - ends
	label := Fit(s.Label, room, size, false)
	mid := top - pl.laneH/2
	if s.Unit != "" && pl.laneH > size*2.4 {
		p.middle(x0, mid+size*0.6, label, size, false, pal.Ink, 0)
		p.middle(x0, mid-size*0.6, s.Unit, size, false, pal.Soft, 0)
	} else {
		if s.Unit != "" {
			label = Fit(s.Label+" "+s.Unit, room, size, false)
		}
		p.middle(x0, mid, label, size, false, pal.Ink, 0)
	}
	for _, e := range []struct {
		v    float64
		word string
	}{{y.min, s.LowWord}, {y.max, s.HighWord}} {
		p.line(pl.plot.Min.X, y.at(e.v), pl.plot.Max.X, y.at(e.v), 0.4, pal.Line)
		if y.y1-y.y0 > size {
			if e.word == "" {
				e.word = p.st.number(e.v)
			}
			p.middle(pl.plot.Min.X-size*0.4, y.at(e.v), e.word, size*0.85, false, pal.Soft, 1)
		}
	}
}

// drawSeries draws bands, line, beads, goals and forecast of one series.
func (l lanes) drawSeries(p pen, pl lanePlan, i int, s Series) {
	pal, size := p.st.Palette, p.st.size()
	y := pl.lane(i, s)
	shown := func(k int) (Value, bool) {
		v := valueAt(s.Values, k)
		return v, v.Known && !math.IsNaN(v.Value) && (v.Banded || !s.Model)
	}
	// What does not count as a change, about the first value.
	if s.Noise > 0 {
		for k := range l.visits {
			if v, ok := shown(k); ok {
				p.rect(rectOf(pl.x.at(l.visits[k].At), y.at(v.Value-s.Noise), pl.plot.Max.X, y.at(v.Value+s.Noise)), pal.Band)
				break
			}
		}
	}
	// Bands: one area for each run of banded visits.
	var upper, lower []vg.Point
	flush := func() {
		if len(upper) == 1 { // a single visit has a band too
			x := upper[0].X
			p.rect(rectOf(x-pl.r*0.6, lower[0].Y, x+pl.r*0.6, upper[0].Y), pal.Band)
		} else if len(upper) > 1 {
			var q vg.Path
			q.Move(upper[0])
			for _, pt := range upper[1:] {
				q.Line(pt)
			}
			for k := len(lower) - 1; k >= 0; k-- {
				q.Line(lower[k])
			}
			q.Close()
			p.fillPath(q, pal.Band)
		}
		upper, lower = nil, nil
	}
	for k := range l.visits {
		v, ok := shown(k)
		if !ok {
			continue
		}
		if !v.Banded {
			flush()
			continue
		}
		x := pl.x.at(l.visits[k].At)
		upper, lower = append(upper, vg.Point{X: x, Y: y.at(v.High)}), append(lower, vg.Point{X: x, Y: y.at(v.Low)})
	}
	flush()
	// Goals.
	for _, g := range s.Goals {
		gy := y.at(g.Value)
		x1 := pl.plot.Max.X
		if !g.By.IsZero() {
			x1 = min(pl.x.at(g.By), x1)
		}
		p.line(pl.plot.Min.X, gy, x1, gy, 0.9, pal.Goal, size*0.5, size*0.3)
		var q vg.Path // a small flag at the day it is due
		q.Move(vg.Point{X: x1, Y: gy})
		q.Line(vg.Point{X: x1, Y: gy + size*0.55})
		q.Line(vg.Point{X: x1 - size*0.6, Y: gy + size*0.28})
		q.Close()
		p.fillPath(q, pal.Goal)
		if g.Word != "" {
			word := Fit(g.Word, (x1-pl.plot.Min.X)*0.6, size*0.9, false)
			p.text(pl.plot.Min.X+size*0.3, gy+size*0.2, word, size*0.9, false, pal.Goal, 0) // early values seldom lie near a goal
		}
	}
	// Forecast: paler, behind a break.
	if n := len(s.Forecast); n > 0 && len(l.visits) > 0 {
		last := pl.x.at(l.visits[len(l.visits)-1].At)
		var up, down, mid []vg.Point
		for _, f := range s.Forecast {
			x := pl.x.at(f.At)
			up, down, mid = append(up, vg.Point{X: x, Y: y.at(f.High)}), append(down, vg.Point{X: x, Y: y.at(f.Low)}), append(mid, vg.Point{X: x, Y: y.at(f.Value)})
		}
		if n == 1 {
			p.line(up[0].X, down[0].Y, up[0].X, up[0].Y, pl.r*1.2, pal.Band)
		} else {
			var q vg.Path
			q.Move(up[0])
			for _, pt := range up[1:] {
				q.Line(pt)
			}
			for k := n - 1; k >= 0; k-- {
				q.Line(down[k])
			}
			q.Close()
			p.fillPath(q, mix(pal.Band, pal.Paper, 0.4))
		}
		for k := 1; k < n; k++ {
			p.line(mid[k-1].X, mid[k-1].Y, mid[k].X, mid[k].Y, 1, pal.Soft, size*0.2, size*0.3)
		}
		// Two short strokes say that what follows was not measured.
		bx := (last + mid[0].X) / 2
		by := y.at((y.min + y.max) / 2)
		for _, d := range []vg.Length{-1, 1} {
			p.line(bx+d*size*0.12-size*0.1, by-size*0.4, bx+d*size*0.12+size*0.1, by+size*0.4, 0.8, pal.Soft)
		}
		p.strokePath(circlePath(mid[n-1], pl.r*0.8), 0.9, pal.Soft, pl.r*0.5, pl.r*0.4)
	}
	// The line: whole between visits that were tested, dashed across those that were not.
	prev := -1
	for k := range l.visits {
		v, ok := shown(k)
		if !ok {
			continue
		}
		if prev >= 0 {
			a := valueAt(s.Values, prev)
			x0, x1 := pl.x.at(l.visits[prev].At), pl.x.at(l.visits[k].At)
			if k == prev+1 {
				p.line(x0, y.at(a.Value), x1, y.at(v.Value), 1.2, pal.Ink)
			} else {
				p.line(x0, y.at(a.Value), x1, y.at(v.Value), 0.9, pal.Soft, size*0.25, size*0.25)
			}
		}
		prev = k
	}
	lastMark := vg.Length(math.Inf(-1))
	for k := range l.visits {
		x := pl.x.at(l.visits[k].At)
		v, ok := shown(k)
		if !ok {
			if k < len(s.Untested) && s.Untested[k] {
				p.bead(vg.Point{X: x, Y: l.between(pl, y, s, k, shown)}, pl.r, BeadState{}, pal.Ink)
			}
			continue
		}
		at := vg.Point{X: x, Y: y.at(v.Value)}
		if l.beads {
			share := 1.0
			if y.max > y.min {
				share = (v.Value - y.min) / (y.max - y.min)
			}
			p.bead(at, pl.r, BeadState{Tested: true, Health: share}, pal.Ink)
		} else {
			p.fillPath(circlePath(at, pl.r*0.75), pal.Ink)
		}
		if v.Mark != "" && pl.laneH > size*3 {
			w := Width(v.Mark, size*0.85, false)
			if x-w/2 > lastMark+size*0.3 {
				up := at.Y + pl.r + size*0.25
				if up+size*0.7 > y.y1+pl.r*1.9+size*0.2 {
					up = at.Y - pl.r - size*0.85
				}
				p.text(x, up, v.Mark, size*0.85, false, pal.Ink, 0.5)
				lastMark = x + w/2
			}
		}
	}
}

// between returns the height of a dashed bead: on the dashed line between its tested
// neighbours, beside the only one, or in the middle of the lane.
func (l lanes) between(pl lanePlan, y scaleY, s Series, k int, shown func(int) (Value, bool)) vg.Length {
	before, after := -1, -1
	for i := k - 1; i >= 0 && before < 0; i-- {
		if _, ok := shown(i); ok {
			before = i
		}
	}
	for i := k + 1; i < len(l.visits) && after < 0; i++ {
		if _, ok := shown(i); ok {
			after = i
		}
	}
	switch {
	case before >= 0 && after >= 0:
		a, b := s.Values[before].Value, s.Values[after].Value
		x0, x1 := pl.x.at(l.visits[before].At), pl.x.at(l.visits[after].At)
		t := 0.5
		if x1 > x0 {
			t = float64((pl.x.at(l.visits[k].At) - x0) / (x1 - x0))
		}
		return y.at(a + (b-a)*t)
	case before >= 0:
		return y.at(s.Values[before].Value)
	case after >= 0:
		return y.at(s.Values[after].Value)
	}
	return (y.y0 + y.y1) / 2
}

func (l lanes) hit(w, h, x, y vg.Length, st Style) (LaneHit, bool) {
	pl := l.plan(area(w, h), st)
	pt := vg.Point{X: x, Y: h - y}
	for _, e := range pl.events {
		if e.row < 0 {
			continue
		}
		bottom := pl.plot.Max.Y + st.size()*1.25*vg.Length(e.row)
		if inside(rectOf(e.left, bottom, e.left+Width(e.word, st.size(), false), bottom+st.size()*1.25), pt) {
			return LaneHit{-1, -1, -1, e.index}, true
		}
	}
	if !inside(pl.plot, pt) || pl.laneH <= 0 {
		return LaneHit{}, false
	}
	hit := LaneHit{min(int((pl.plot.Max.Y-pt.Y)/pl.laneH), len(l.series)-1), -1, -1, -1}
	near := vg.Length(math.Inf(1))
	for i, v := range l.visits {
		if d := absLength(pl.x.at(v.At) - pt.X); d < near {
			near, hit.Visit = d, i
		}
	}
	for i, f := range l.series[hit.Series].Forecast {
		if d := absLength(pl.x.at(f.At) - pt.X); d < near {
			near, hit.Visit, hit.Forecast = d, -1, i
		}
	}
	if near > max(st.size()*3, 24) {
		return LaneHit{}, false
	}
	return hit, true
}

func absLength(l vg.Length) vg.Length {
	if l < 0 {
		return -l
	}
	return l
}

// GradeSeries returns a series of grades on a scale from 0 to top, for Limbs: a known
// value shows its grade as a figure, an unknown one a dashed bead.
func GradeSeries(label string, top int8, grades []int8) Series {
	s := Series{Label: label, Min: 0, Max: float64(top), Step: true, Values: make([]Value, len(grades)), Untested: make([]bool, len(grades))}
	for i, g := range grades {
		if g < 0 {
			s.Untested[i] = true
			continue
		}
		s.Values[i] = Value{Known: true, Value: float64(g), Mark: number(float64(g))}
	}
	return s
}

// noChart says in the middle of the canvas that there is nothing to draw yet.
func (p pen) noChart(r vg.Rectangle) {
	p.middle((r.Min.X+r.Max.X)/2, (r.Min.Y+r.Max.Y)/2, words.In(p.st.Lang, "not enough to say"), p.st.size(), false, p.st.Palette.Soft, 0.5)
}
