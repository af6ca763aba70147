package chart

import (
	"image/color"
	"math"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"cordwalk.example/cordwalk/exam"
)

// BeadState is what a bead shows of one finding.
type BeadState struct {
	Tested bool
	Health float64 // nearness to normal, 0 to 1: how full the circle is
	Over   int     // bars above the circle: 1 more than normal, 2 clonus
	Notch  bool    // a notch in the edge: lame
}

// BeadOf returns the bead of a finding. A grade above the normal of a two-sided item
// is drawn with a bar, the last grade of a scale with clonus with two.
func BeadOf(f exam.Finding) BeadState {
	h, ok := f.Health()
	if !ok {
		return BeadState{Tested: f.Result.Tested(), Health: 1}
	}
	b := BeadState{Tested: true, Health: h}
	g, _ := f.Result.Grade()
	if in := f.Item.Info(); f.Item.TwoSided() && g > in.Normal {
		b.Over = 1
		if f.Item.GradeWord(g) == "clonus" {
			b.Over = 2
		}
	}
	return b
}

// Bead draws a bead of radius r: a circle filled from below to the share of health, a
// dashed circle where nothing was tested.
func Bead(c draw.Canvas, st Style, at vg.Point, r vg.Length, b BeadState) {
	p := newPen(c, st)
	p.bead(at, r, b, st.Palette.Ink)
}

func (p pen) bead(at vg.Point, r vg.Length, b BeadState, col color.NRGBA) {
	w := max(r/6, 0.5)
	circle := circlePath(at, r)
	if !b.Tested {
		p.strokePath(circle, w, p.st.Palette.Soft, r/2.2, r/2.2)
		return
	}
	p.fillPath(circle, p.st.Palette.Paper)
	switch {
	case b.Health >= 1:
		p.fillPath(circle, col)
	case b.Health > 0:
		p.fillPath(segmentPath(at, r, b.Health), col)
	}
	p.strokePath(circle, w, col)
	if b.Notch {
		p.fillPath(circlePath(vg.Point{X: at.X + r*0.8, Y: at.Y + r*0.8}, r*0.36), p.st.Palette.Paper)
		p.strokePath(circlePath(vg.Point{X: at.X + r*0.8, Y: at.Y + r*0.8}, r*0.36), w, col)
	}
	for i := range b.Over {
		y := at.Y + r + w*2 + vg.Length(i)*w*2.4
		p.line(at.X-r*0.8, y, at.X+r*0.8, y, w*1.2, col)
	}
}

// segmentPath is the part of a circle below a level chosen so that its height is the share.
func segmentPath(at vg.Point, r vg.Length, share float64) vg.Path {
	level := -1 + 2*share // height of the chord in radii
	half := math.Acos(-level)
	// The lower cap spans the angles from -90°-half to -90°+half, drawn with short chords:
	// exact to a hundredth of the radius.
	var q vg.Path
	const steps = 32
	for i := 0; i <= steps; i++ {
		a := -math.Pi/2 - half + 2*half*float64(i)/steps
		pt := vg.Point{X: at.X + r*vg.Length(math.Cos(a)), Y: at.Y + r*vg.Length(math.Sin(a))}
		if i == 0 {
			q.Move(pt)
		} else {
			q.Line(pt)
		}
	}
	q.Close()
	return q
}

// Mark is a change as a shape.
type Mark uint8

// The marks. Within says the change is no larger than exam noise; it is drawn hollow.
const (
	MarkNone Mark = iota // not comparable: nothing is drawn but a dashed ring
	MarkBetter
	MarkWorse
	MarkSame
	MarkDifferent
	MarkPlain // tested, with nothing to compare with: no mark
)

// MarkOf returns the mark of a direction.
func MarkOf(d exam.Direction) Mark {
	switch d {
	case exam.Better:
		return MarkBetter
	case exam.Worse:
		return MarkWorse
	case exam.Same:
		return MarkSame
	case exam.Different:
		return MarkDifferent
	}
	return MarkNone
}

// Wedge draws the mark of a change in a square of half-width r about the point: a wedge up
// for better, down for worse, a short line for same, a ring for different, a dashed ring
// where nothing can be said. A hollow wedge is a change within exam noise.
func Wedge(c draw.Canvas, st Style, at vg.Point, r vg.Length, m Mark, hollow bool) {
	p := newPen(c, st)
	w := max(r/5, 0.6)
	tri := func(dir vg.Length, col color.NRGBA) {
		var q vg.Path
		q.Move(vg.Point{X: at.X - r, Y: at.Y - dir*r*0.8})
		q.Line(vg.Point{X: at.X + r, Y: at.Y - dir*r*0.8})
		q.Line(vg.Point{X: at.X, Y: at.Y + dir*r*0.9})
		q.Close()
		if hollow {
			p.fillPath(q, st.Palette.Paper)
		} else {
			p.fillPath(q, col)
		}
		p.strokePath(q, w, col)
	}
	switch m {
	case MarkBetter:
		tri(1, st.Palette.Better)
	case MarkWorse:
		tri(-1, st.Palette.Worse)
	case MarkSame:
		p.line(at.X-r, at.Y, at.X+r, at.Y, w*1.8, st.Palette.Ink)
	case MarkDifferent:
		p.strokePath(circlePath(at, r*0.85), w*1.4, st.Palette.Ink)
	case MarkPlain:
	default:
		p.strokePath(circlePath(at, r*0.85), w, st.Palette.Soft, r/2, r/2)
	}
}

// Cross draws the whole animal in one mark: four beads at the corners of a body seen from
// above, head up, and a dot for the tail. Limbs stand in the order of exam.Limbs.
func Cross(c draw.Canvas, st Style, box vg.Rectangle, limbs [4]BeadState, tail BeadState) {
	p := newPen(c, st)
	side := min(box.Max.X-box.Min.X, box.Max.Y-box.Min.Y)
	mid := vg.Point{X: (box.Min.X + box.Max.X) / 2, Y: (box.Min.Y + box.Max.Y) / 2}
	r := side * 0.15
	w := max(side/40, 0.6)
	col := st.Palette.Soft
	body := vg.Path{}
	body.Move(vg.Point{X: mid.X, Y: mid.Y + side*0.30})
	body.Line(vg.Point{X: mid.X, Y: mid.Y - side*0.28})
	p.strokePath(body, w*1.6, col)
	p.fillPath(circlePath(vg.Point{X: mid.X, Y: mid.Y + side*0.36}, side*0.10), col)
	xs := [4]vg.Length{-1, 1, -1, 1}
	ys := [4]vg.Length{0.18, 0.18, -0.26, -0.26}
	for i, b := range limbs {
		at := vg.Point{X: mid.X + xs[i]*side*0.30, Y: mid.Y + ys[i]*side}
		p.line(mid.X, at.Y, at.X-xs[i]*r, at.Y, w, col)
		p.bead(at, r, b, st.Palette.Ink)
	}
	p.bead(vg.Point{X: mid.X, Y: mid.Y - side*0.40}, side*0.07, tail, st.Palette.Ink)
}
