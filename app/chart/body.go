package chart

import (
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"cordwalk.example/cordwalk/assets/drawing"
	"cordwalk.example/cordwalk/exam"
)

// BodyLimb is what the picture of the animal says of one limb.
type BodyLimb struct {
	Mark   Mark   // MarkNone: not tested, drawn with a dashed edge
	Hollow bool   // the change is within exam noise
	Name   string // "left front leg", in the reader's words
	Word   string // "better", in the reader's words
	// Then and Now are shown as beads under the word where ShowBeads is set.
	ShowBeads bool
	Then, Now BeadState
}

// Body is the animal seen from above, head up, with its four limbs marked in the order of
// exam.Limbs. Each limb is told by a wedge, a line or a dashed edge and by its words; the
// colour only repeats them.
type Body struct {
	Species exam.Species
	Limbs   [4]BodyLimb
}

type bodyPlan struct {
	fig    drawing.Figure
	scale  vg.Length
	origin vg.Point // of the figure's upper left corner
	box    vg.Rectangle
}

func (b Body) plan(r vg.Rectangle, st Style) bodyPlan {
	fig := drawing.FromAbove(b.Species)
	w, h := r.Max.X-r.Min.X, r.Max.Y-r.Min.Y
	// The words beside the animal come first; it keeps a quarter of the width at least.
	size, words, least := st.size(), vg.Length(0), vg.Length(0)
	for _, l := range b.Limbs {
		words = max(words, Width(l.Name, size, false), Width(l.Word, size*1.1, true)+size*1.43)
		for _, half := range halves(l.Name, size) {
			least = max(least, Width(half, size, false))
		}
		least = max(least, Width(l.Word, size*1.1, true)*0.8+size*1.43) // a word may shrink a little
	}
	room := w - 2*(words+size*0.7)
	if room < w*0.25 { // names on two lines
		room = max(w-2*(least+size*0.7), w*0.18)
	}
	scale := min(h/vg.Length(fig.Height), w*0.5/vg.Length(fig.Width), room/vg.Length(fig.Width))
	fw, fh := scale*vg.Length(fig.Width), scale*vg.Length(fig.Height)
	o := vg.Point{X: (r.Min.X + r.Max.X - fw) / 2, Y: (r.Min.Y+r.Max.Y)/2 + fh/2}
	return bodyPlan{fig, scale, o, r}
}

func (p bodyPlan) pt(q drawing.Point) vg.Point {
	return vg.Point{X: p.origin.X + vg.Length(q.X)*p.scale, Y: p.origin.Y - vg.Length(q.Y)*p.scale}
}

func (p bodyPlan) path(d drawing.Path) vg.Path {
	var q vg.Path
	for i, a := range d.Points {
		if i == 0 {
			q.Move(p.pt(a))
		} else {
			q.Line(p.pt(a))
		}
	}
	if d.Closed {
		q.Close()
	}
	return q
}

// Draw draws the animal in the middle of the canvas with the words on both sides.
func (b Body) Draw(c draw.Canvas, st Style) {
	p := newPen(c, st)
	pal, size := st.Palette, st.size()
	pl := b.plan(c.Rectangle, st)
	limbs := exam.Limbs()
	marks := map[string]BodyLimb{}
	for i, l := range limbs {
		marks[l.String()] = b.Limbs[i]
	}
	edge := max(pl.scale*0.7, 0.6)
	for _, region := range pl.fig.Regions {
		limb, isLimb := marks[region.Name]
		for _, d := range region.Paths {
			q := pl.path(d)
			fill := pal.Faint
			if isLimb {
				switch limb.Mark {
				case MarkBetter:
					fill = mix(pal.Paper, pal.Better, 0.30)
				case MarkWorse:
					fill = mix(pal.Paper, pal.Worse, 0.42)
				case MarkNone:
					fill = pal.Paper
				}
			}
			p.fillPath(q, fill)
			if isLimb && limb.Mark == MarkNone {
				p.strokePath(q, edge, pal.Soft, edge*3, edge*3)
			} else {
				p.strokePath(q, edge, pal.Ink)
			}
		}
	}
	for _, d := range pl.fig.Details {
		p.strokePath(pl.path(d), edge*0.7, pal.Soft)
	}
	for i, l := range limbs {
		b.label(p, pl, l, b.Limbs[i], size, b.apart(pl, size))
	}
}

// apart is how far the words of front and back limbs are moved from each other so that they
// do not touch.
func (b Body) apart(pl bodyPlan, size vg.Length) vg.Length {
	fore, ok1 := pl.fig.Centre(exam.ThoracicLeft.String())
	hind, ok2 := pl.fig.Centre(exam.PelvicLeft.String())
	if !ok1 || !ok2 {
		return 0
	}
	return max(0, (size*4.8-(pl.pt(fore).Y-pl.pt(hind).Y))/2)
}

// Tall is the height that the picture needs at a width, at most h.
func (b Body) Tall(w, h vg.Length, st Style) vg.Length {
	pl := b.plan(area(w, h), st)
	return min(h, max(pl.scale*vg.Length(pl.fig.Height), st.size()*11))
}

// shrunk is the size at which a text fits, not below two thirds of the size asked for.
func shrunk(text string, room, size vg.Length, bold bool) vg.Length {
	if w := Width(text, size, bold); w > room && w > 0 {
		return size * max(0.99*room/w, 0.67) // a hair less, for rounding
	}
	return size
}

// halves breaks a name where its two lines are most alike in width; a name of one word
// stays as the second line.
func halves(name string, size vg.Length) [2]string {
	out, best := [2]string{"", name}, Width(name, size, false)
	for i, r := range name {
		if r != ' ' {
			continue
		}
		if w := max(Width(name[:i], size, false), Width(name[i+1:], size, false)); w < best {
			out, best = [2]string{name[:i], name[i+1:]}, w
		}
	}
	return out
}

func (b Body) label(p pen, pl bodyPlan, site exam.Site, limb BodyLimb, size, apart vg.Length) {
	pal := p.st.Palette
	centre, ok := pl.fig.Centre(site.String())
	if !ok {
		return
	}
	at := pl.pt(centre)
	left := site.Side() == exam.Left
	// The words end at the edge of the body's half on their side.
	inner := pl.origin.X - size*0.6
	ax, room := 1.0, inner-pl.box.Min.X
	x := inner
	if !left {
		x = pl.origin.X + pl.scale*vg.Length(pl.fig.Width) + size*0.6
		ax, room = 0, pl.box.Max.X-x
	}
	y := at.Y + size*0.9
	if site.IsThoracic() {
		y += apart
	} else {
		y -= apart
	}
	if Width(limb.Name, size, false) <= room {
		p.text(x, y, limb.Name, size, false, pal.Soft, ax)
	} else {
		for i, half := range halves(limb.Name, size) {
			small := shrunk(half, room, size, false)
			p.text(x, y+size*1.15*vg.Length(1-i), Fit(half, room, small, false), small, false, pal.Soft, ax)
		}
	}
	y -= size * 1.35
	mark := size * 0.42
	wide := room - mark*3.4
	if limb.Mark == MarkPlain {
		wide = room
	}
	big := shrunk(limb.Word, wide, size*1.1, true)
	word := Fit(limb.Word, wide, big, true)
	col := pal.Ink
	switch limb.Mark {
	case MarkBetter:
		col = pal.Better
	case MarkWorse:
		col = pal.Worse
	}
	mx := x - mark
	tx := x - mark*3
	if !left {
		mx, tx = x+mark, x+mark*3
	}
	if limb.Mark == MarkPlain {
		tx = x
	}
	Wedge(p.Canvas, p.st, vg.Point{X: mx, Y: y + size*0.4}, mark, limb.Mark, limb.Hollow)
	p.text(tx, y, word, big, true, col, ax)
	if limb.ShowBeads {
		y -= size * 1.0
		r := size * 0.38
		x0 := x - r*7
		if !left {
			x0 = x + r
		}
		p.bead(vg.Point{X: x0, Y: y}, r, limb.Then, pal.Ink)
		p.line(x0+r*1.8, y, x0+r*4, y, 0.8, pal.Soft)
		var q vg.Path
		q.Move(vg.Point{X: x0 + r*4.4, Y: y})
		q.Line(vg.Point{X: x0 + r*3.5, Y: y + r*0.5})
		q.Line(vg.Point{X: x0 + r*3.5, Y: y - r*0.5})
		q.Close()
		p.fillPath(q, pal.Soft)
		p.bead(vg.Point{X: x0 + r*6, Y: y}, r, limb.Now, pal.Ink)
	}
}

// Hit returns the index of the limb at a point of a body drawn w by h points large, x to
// the right and y down, and false where there is none.
func (b Body) Hit(w, h, x, y vg.Length, st Style) (int, bool) {
	pl := b.plan(area(w, h), st)
	if pl.scale <= 0 {
		return 0, false
	}
	q := drawing.Point{X: float64((x - pl.origin.X) / pl.scale), Y: float64((pl.origin.Y - (h - y)) / pl.scale)}
	name := pl.fig.At(q)
	for i, l := range exam.Limbs() {
		if l.String() == name {
			return i, true
		}
	}
	return 0, false
}
