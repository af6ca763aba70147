package chart

import (
	"math"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"cordwalk.example/cordwalk/assets/words"
)

// StrengthPoint is one threshold: pulse width in ms, current in mA.
type StrengthPoint struct {
	Width, Current float64
	Bad            bool // does not fit the others
}

// Strength is the curve of a strength–duration test on logarithmic axes: the points, the law fitted to
// them, and the rheobase and chronaxie that it gives. Curve is nil where nothing could be fitted.
type Strength struct {
	Points              []StrengthPoint
	Curve               func(width float64) float64
	Rheobase, Chronaxie float64
	Low, High           float64 // ends of the chronaxie's interval; NaN where there is none
}

// Draw draws the chart.
func (s Strength) Draw(c draw.Canvas, st Style) {
	p := newPen(c, st)
	r := c.Rectangle
	p.rect(r, st.Palette.Paper)
	if len(s.Points) == 0 {
		p.noChart(r)
		return
	}
	size := st.size()
	x0, x1 := math.Inf(1), math.Inf(-1)
	y0, y1 := math.Inf(1), math.Inf(-1)
	for _, q := range s.Points {
		x0, x1 = min(x0, q.Width), max(x1, q.Width)
		y0, y1 = min(y0, q.Current), max(y1, q.Current)
	}
	x0, x1 = math.Pow(10, math.Floor(math.Log10(x0)-1e-9)), math.Pow(10, math.Ceil(math.Log10(x1)+1e-9))
	if s.Curve != nil {
		y0 = min(y0, s.Rheobase)
	}
	y0, y1 = y0/1.4, y1*1.4
	box := vg.Rectangle{Min: vg.Point{X: r.Min.X + size*3.2, Y: r.Min.Y + size*3}, Max: vg.Point{X: r.Max.X - size, Y: r.Max.Y - size*1.8}}
	if box.Max.X-box.Min.X < size*4 || box.Max.Y-box.Min.Y < size*3 {
		p.noChart(r)
		return
	}
	px := func(v float64) vg.Length {
		return box.Min.X + (box.Max.X-box.Min.X)*vg.Length(math.Log(v/x0)/math.Log(x1/x0))
	}
	py := func(v float64) vg.Length {
		return box.Min.Y + (box.Max.Y-box.Min.Y)*vg.Length(math.Log(v/y0)/math.Log(y1/y0))
	}
	// The chronaxie's interval lies behind everything, cut at the edges.
	fitted := s.Curve != nil && s.Rheobase > 0 && s.Chronaxie > 0
	within := func(v float64) float64 { return min(max(v, x0), x1) }
	if fitted && s.High > s.Low && s.Low > 0 {
		p.rect(vg.Rectangle{Min: vg.Point{X: px(within(s.Low)), Y: box.Min.Y}, Max: vg.Point{X: px(within(s.High)), Y: box.Max.Y}}, st.Palette.Band)
	}
	p.frame(box, 0.75, st.Palette.Line)
	decades := int(math.Round(math.Log10(x1 / x0)))
	step := 1 + decades/6
	for i := 0; i <= decades; i++ {
		v := x0 * math.Pow(10, float64(i))
		p.line(px(v), box.Min.Y, px(v), box.Max.Y, 0.5, st.Palette.Line)
		if i%step == 0 {
			p.text(px(v), box.Min.Y-size*1.25, st.number(v), size, false, st.Palette.Soft, 0.5)
		}
	}
	last := box.Min.Y - size*2
	for d := math.Floor(math.Log10(y0)); d <= math.Ceil(math.Log10(y1)); d++ {
		for _, m := range []float64{1, 2, 5} {
			v := m * math.Pow(10, d)
			if v < y0 || v > y1 || py(v)-last < size*1.3 {
				continue
			}
			last = py(v)
			p.line(box.Min.X, last, box.Max.X, last, 0.5, st.Palette.Line)
			p.middle(box.Min.X-size*0.4, last, st.number(v), size, false, st.Palette.Soft, 1)
		}
	}
	p.text((box.Min.X+box.Max.X)/2, r.Min.Y+size*0.4, words.In(st.Lang, "pulse width, ms"), size, false, st.Palette.Soft, 0.5)
	p.text(r.Min.X+size*0.3, r.Max.Y-size*1.1, words.In(st.Lang, "threshold, mA"), size, false, st.Palette.Soft, 0)
	if fitted {
		p.line(box.Min.X, py(s.Rheobase), box.Max.X, py(s.Rheobase), 1, st.Palette.Goal, 4, 3)
		if s.Chronaxie >= x0 && s.Chronaxie <= x1 && 2*s.Rheobase <= y1 {
			p.line(px(s.Chronaxie), box.Min.Y, px(s.Chronaxie), py(2*s.Rheobase), 1, st.Palette.Goal, 4, 3)
		}
		var q vg.Path
		pen := false
		const steps = 160
		for i := range steps + 1 {
			w := x0 * math.Pow(x1/x0, float64(i)/steps)
			v := s.Curve(w)
			if !(v >= y0 && v <= y1) {
				pen = false
				continue
			}
			at := vg.Point{X: px(w), Y: py(v)}
			if pen {
				q.Line(at)
			} else {
				q.Move(at)
				pen = true
			}
		}
		p.strokePath(q, 1.75, st.Palette.High)
	}
	for _, q := range s.Points {
		at := vg.Point{X: px(q.Width), Y: py(q.Current)}
		k := size * 0.32
		if q.Bad {
			p.line(at.X-k, at.Y-k, at.X+k, at.Y+k, 2, st.Palette.Worse)
			p.line(at.X-k, at.Y+k, at.X+k, at.Y-k, 2, st.Palette.Worse)
			continue
		}
		p.fillPath(circlePath(at, k), st.Palette.Ink)
	}
}
