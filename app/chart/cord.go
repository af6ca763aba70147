package chart

import (
	"math"
	"slices"
	"strings"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// CordBlock is one vertebra: its place along the column, 0 cranial to 1 caudal.
type CordBlock struct {
	Name     string
	Major    bool // begins a region
	From, To float64
}

// CordSegment is one segment of the cord at its true level along the column, with the
// probability that each half is damaged.
type CordSegment struct {
	Name        string
	From, To    float64
	Known       bool    // there is a probability at all
	Left, Right float64 // 0 to 1
}

// CordBracket names a stretch of the cord, such as an enlargement.
type CordBracket struct {
	Label    string
	From, To float64
}

// CordRoot is a root or nerve that leads, drawn out from its segment.
type CordRoot struct {
	Segment     int // index into Segments
	Side        exam.Site
	Name        string
	Probability float64
}

// CordMap is the vertebral column as blocks in true proportion and, beside it, the cord
// with its segments at their true level. The shade is the probability of damage; the
// strongest halves carry its number.
type CordMap struct {
	Vertebrae []CordBlock
	Segments  []CordSegment
	Brackets  []CordBracket
	Roots     []CordRoot
	Numbers   int  // how many of the strongest halves show their number; 0 means 3
	Lying     bool // the head to the left instead of up
	Focus     *CordHit
}

// CordHit is a place on a cord map: a half of a segment, or a vertebra.
type CordHit struct {
	Segment  int       // index, -1 where the place is no segment
	Side     exam.Site // exam.Left or exam.Right on a segment
	Vertebra int       // index, -1 where the place is no vertebra
}

// cordPlan maps a place along (0 cranial to 1 caudal) and across (points from the left, or
// from above when lying) to the paper.
type cordPlan struct {
	box         vg.Rectangle
	lying       bool
	length      vg.Length // of the column on paper
	start       vg.Length // room before it, for the heads
	bones       [2]vg.Length
	left, right [2]vg.Length
}

func (m CordMap) plan(r vg.Rectangle, st Style) cordPlan {
	size := st.size()
	w, h := r.Max.X-r.Min.X, r.Max.Y-r.Min.Y
	p := cordPlan{box: r, lying: m.Lying}
	if m.Lying {
		// Across: segment names, left half, right half, gap, bones, vertebra names.
		p.start, p.length = size*1.2, max(w-size*1.6, 1)
		free := max(h-size*3.4, size)
		half := free * 0.30
		p.left = [2]vg.Length{size * 1.6, size*1.6 + half}
		p.right = [2]vg.Length{size*1.6 + half + 1, size*1.6 + 2*half + 1}
		p.bones = [2]vg.Length{p.right[1] + free*0.1, p.right[1] + free*0.4}
		return p
	}
	// Across: vertebra names, bones, gap, left half, right half, segment names, numbers.
	p.start, p.length = size*1.5, max(h-size*1.9, 1)
	names := Width("T13", size, false) + size*0.4
	free := max(w-names-m.nameWidth(size*0.85)-Width("enlargement", size*0.85, false)-size*2, size*2)
	unit := min(free, size*12) / 10
	p.bones = [2]vg.Length{names, names + unit*3}
	p.left = [2]vg.Length{names + unit*4, names + unit*7}
	p.right = [2]vg.Length{names + unit*7 + 1, names + unit*10 + 1}
	return p
}

func (p cordPlan) rect(from, to float64, across [2]vg.Length) vg.Rectangle {
	a, b := p.start+p.length*vg.Length(from), p.start+p.length*vg.Length(to)
	if p.lying {
		return rectOf(p.box.Min.X+a, p.box.Max.Y-across[1], p.box.Min.X+b, p.box.Max.Y-across[0])
	}
	return rectOf(p.box.Min.X+across[0], p.box.Max.Y-b, p.box.Min.X+across[1], p.box.Max.Y-a)
}

// Draw draws the map over the whole canvas.
func (m CordMap) Draw(c draw.Canvas, st Style) {
	p := newPen(c, st)
	pal, size := st.Palette, st.size()
	pl := m.plan(c.Rectangle, st)
	if len(m.Segments) == 0 {
		p.noChart(c.Rectangle)
		return
	}
	small := size * 0.85
	for _, major := range []bool{true, false} {
		var taken []vg.Length
		if !major {
			for _, v := range m.Vertebrae {
				if v.Major {
					taken = append(taken, mid(pl.rect(v.From, v.To, pl.bones), m.Lying))
				}
			}
		}
		last := vg.Length(math.Inf(-1))
		for i, v := range m.Vertebrae {
			r := pl.rect(v.From, v.To, pl.bones)
			if major {
				inset := min((pl.length/vg.Length(max(len(m.Vertebrae), 1)))*0.06, 1.2)
				if m.Lying {
					r.Min.X, r.Max.X = r.Min.X+inset, r.Max.X-inset
				} else {
					r.Min.Y, r.Max.Y = r.Min.Y+inset, r.Max.Y-inset
				}
				p.rect(r, pal.Faint)
				p.frame(r, 0.6, pal.Line)
				if f := m.Focus; f != nil && f.Vertebra == i {
					p.frame(r, 1.6, pal.Ink)
				}
			}
			if v.Major != major {
				continue
			}
			at := mid(r, m.Lying)
			if crowded(at, last, taken, m.labelRoom(v.Name, small)) {
				continue
			}
			last = at
			if m.Lying {
				p.text(at, r.Min.Y-size*0.95, v.Name, small, major, pal.Soft, 0.5)
			} else {
				p.middle(r.Min.X-size*0.3, at, v.Name, small, major, pal.Soft, 1)
			}
		}
	}
	strong := m.strongest()
	for i, s := range m.Segments {
		for _, side := range []exam.Site{exam.Left, exam.Right} {
			r := m.half(pl, i, side)
			prob := s.Left
			if side == exam.Right {
				prob = s.Right
			}
			if s.Known && !math.IsNaN(prob) {
				p.rect(r, pal.RiskShade(prob))
			} else {
				p.rect(r, pal.Paper)
			}
			p.frame(r, 0.4, pal.Line)
		}
	}
	m.segmentNames(p, pl, strong, small)
	for _, b := range m.Brackets {
		m.bracket(p, pl, b, small)
	}
	for _, rt := range m.Roots {
		m.root(p, pl, rt, small)
	}
	if f := m.Focus; f != nil && f.Segment >= 0 && f.Segment < len(m.Segments) {
		p.frame(m.half(pl, f.Segment, f.Side), 1.8, pal.Ink)
	}
	// L and R at the cranial end.
	l, r := pl.rect(0, 0, pl.left), pl.rect(0, 0, pl.right)
	if m.Lying {
		p.middle(l.Min.X-size*0.3, (l.Min.Y+l.Max.Y)/2, words.In(st.Lang, "L"), small, true, pal.Ink, 1)
		p.middle(r.Min.X-size*0.3, (r.Min.Y+r.Max.Y)/2, words.In(st.Lang, "R"), small, true, pal.Ink, 1)
	} else {
		p.text((l.Min.X+l.Max.X)/2, l.Max.Y+size*0.35, words.In(st.Lang, "L"), small, true, pal.Ink, 0.5)
		p.text((r.Min.X+r.Max.X)/2, r.Max.Y+size*0.35, words.In(st.Lang, "R"), small, true, pal.Ink, 0.5)
	}
}

func (m CordMap) half(pl cordPlan, i int, side exam.Site) vg.Rectangle {
	s := m.Segments[i]
	if side == exam.Right {
		return pl.rect(s.From, s.To, pl.right)
	}
	return pl.rect(s.From, s.To, pl.left)
}

func mid(r vg.Rectangle, lying bool) vg.Length {
	if lying {
		return (r.Min.X + r.Max.X) / 2
	}
	return (r.Min.Y + r.Max.Y) / 2
}

// labelRoom is how far apart the middles of two labels along the column must be.
func (m CordMap) labelRoom(name string, size vg.Length) vg.Length {
	if m.Lying {
		return Width(name, size, true) + size*0.35
	}
	return size * 1.1
}

func crowded(at, last vg.Length, taken []vg.Length, room vg.Length) bool {
	if absLength(at-last) < room {
		return true
	}
	for _, t := range taken {
		if absLength(at-t) < room {
			return true
		}
	}
	return false
}

type halfAt struct {
	segment int
	side    exam.Site
	prob    float64
}

// strongest returns the halves that carry a number, strongest first: at most Numbers, and
// none under 5 %, which would be noise.
func (m CordMap) strongest() []halfAt {
	var all []halfAt
	for i, s := range m.Segments {
		if s.Known {
			all = append(all, halfAt{i, exam.Left, s.Left}, halfAt{i, exam.Right, s.Right})
		}
	}
	slices.SortStableFunc(all, func(a, b halfAt) int {
		switch {
		case a.prob > b.prob:
			return -1
		case a.prob < b.prob:
			return 1
		}
		return 0
	})
	n := m.Numbers
	if n == 0 {
		n = 3
	}
	out := all[:min(n, len(all))]
	for i, h := range out {
		if h.prob < 0.05 || math.IsNaN(h.prob) {
			return out[:i]
		}
	}
	return out
}

// segmentNames writes the names of the segments beside the cord: those with a number and
// those of leading roots first, moved apart where they would touch, then the others where
// there is room.
func (m CordMap) segmentNames(p pen, pl cordPlan, strong []halfAt, size vg.Length) {
	pal := p.st.Palette
	type label struct {
		segment int
		word    string
		at      vg.Length // wanted, then given
	}
	var labels []label
	add := func(segment int, word, joined string) {
		for i := range labels {
			if labels[i].segment == segment {
				labels[i].word += ", " + joined
				return
			}
		}
		labels = append(labels, label{segment, m.Segments[segment].Name + " " + word, mid(m.half(pl, segment, exam.Right), m.Lying)})
	}
	for _, h := range strong {
		side := words.In(p.st.Lang, "L")
		if h.side == exam.Right {
			side = words.In(p.st.Lang, "R")
		}
		add(h.segment, side+" "+percent(h.prob), side+" "+percent(h.prob))
	}
	for _, rt := range m.Roots {
		if rt.Segment >= 0 && rt.Segment < len(m.Segments) {
			word := rt.Name + " " + percent(rt.Probability)
			add(rt.Segment, word, word)
		}
	}
	// From the cranial end on, each label keeps its distance from the one before.
	slices.SortFunc(labels, func(a, b label) int { return a.segment - b.segment })
	dir := vg.Length(-1) // down the page
	if m.Lying {
		dir = 1
	}
	for i := 1; i < len(labels); i++ {
		need := m.labelRoom(labels[i].word, size)
		if m.Lying {
			need = (need + m.labelRoom(labels[i-1].word, size)) / 2
		}
		if (labels[i].at-labels[i-1].at)*dir < need {
			labels[i].at = labels[i-1].at + dir*need
		}
	}
	var taken []vg.Length
	for _, l := range labels {
		taken = append(taken, l.at)
		r := m.half(pl, l.segment, exam.Right)
		if m.Lying {
			if half := Width(l.word, size, true) / 2; l.at+half > pl.box.Max.X {
				continue
			}
			top := m.half(pl, l.segment, exam.Left).Max.Y
			p.text(l.at, top+size*0.35, l.word, size, true, pal.Ink, 0.5)
			continue
		}
		p.line(r.Max.X, mid(r, false), r.Max.X+size*0.45, l.at, 0.6, pal.Soft)
		p.middle(r.Max.X+size*0.6, l.at, l.word, size, true, pal.Ink, 0)
	}
	for _, major := range []bool{true, false} {
		for i, s := range m.Segments {
			first := i == 0 || region(s.Name) != region(m.Segments[i-1].Name)
			done := slices.ContainsFunc(labels, func(l label) bool { return l.segment == i })
			if done || first != major {
				continue
			}
			r := m.half(pl, i, exam.Right)
			at := mid(r, m.Lying)
			need := m.labelRoom(s.Name, size)
			if crowded(at, vg.Length(math.Inf(-1)), taken, need) || m.Lying && near(at, labels, func(l label) (vg.Length, vg.Length) {
				return l.at, (Width(l.word, size, true) + need) / 2
			}) {
				continue
			}
			taken = append(taken, at)
			if m.Lying {
				p.text(at, m.half(pl, i, exam.Left).Max.Y+size*0.35, s.Name, size, false, pal.Soft, 0.5)
			} else {
				p.middle(r.Max.X+size*0.6, at, s.Name, size, false, pal.Soft, 0)
			}
		}
	}
}

// near reports whether a place lies within the reach of any of the things.
func near[T any](at vg.Length, things []T, where func(T) (at, reach vg.Length)) bool {
	for _, t := range things {
		if a, reach := where(t); absLength(a-at) < reach {
			return true
		}
	}
	return false
}

// region returns the letters of a segment's name.
func region(name string) string {
	for i, r := range name {
		if r >= '0' && r <= '9' {
			return name[:i]
		}
	}
	return name
}

func percent(p float64) string { return number(math.Round(p*100)) + " %" }

// bracket draws a thin line along a named stretch with its name: right of the segments'
// names, or between cord and bones when lying.
func (m CordMap) bracket(p pen, pl cordPlan, b CordBracket, size vg.Length) {
	pal := p.st.Palette
	if m.Lying {
		gap := pl.bones[0] - pl.right[1]
		r := pl.rect(b.From, b.To, [2]vg.Length{pl.right[1] + size*0.15, pl.right[1] + size*0.15})
		p.line(r.Min.X, r.Min.Y, r.Max.X, r.Min.Y, 1.4, pal.Soft)
		if gap > size*1.4 {
			p.text((r.Min.X+r.Max.X)/2, r.Min.Y-size*1.05, b.Label, size, false, pal.Soft, 0.5)
		}
		return
	}
	x := pl.box.Min.X + pl.right[1] + size*0.9 + m.nameWidth(size)
	r := pl.rect(b.From, b.To, [2]vg.Length{0, 0})
	lines := strings.Fields(b.Label)
	wide := vg.Length(0)
	for _, l := range lines {
		wide = max(wide, Width(l, size, false))
	}
	if x+size*0.5+wide > pl.box.Max.X {
		x = pl.box.Min.X + pl.left[0] - size*0.3 // no room for the words: the line alone, beside the cord
		p.line(x, r.Min.Y, x, r.Max.Y, 1.4, pal.Soft)
		return
	}
	p.line(x, r.Min.Y, x, r.Max.Y, 1.4, pal.Soft)
	for i, l := range lines {
		y := (r.Min.Y+r.Max.Y)/2 + size*1.15*(vg.Length(len(lines)-1)/2-vg.Length(i))
		p.middle(x+size*0.5, y, l, size, false, pal.Soft, 0)
	}
}

// nameWidth is the room that the segments' names with their numbers take.
func (m CordMap) nameWidth(size vg.Length) vg.Length { return Width("L4 L 100 %, R 100 %", size, true) }

// root draws a line out of a segment's half with the name of the root or nerve.
func (m CordMap) root(p pen, pl cordPlan, rt CordRoot, size vg.Length) {
	if rt.Segment < 0 || rt.Segment >= len(m.Segments) {
		return
	}
	pal := p.st.Palette
	r := m.half(pl, rt.Segment, rt.Side)
	y := mid(r, m.Lying)
	col := mix(pal.Soft, pal.Risk, rt.Probability)
	if m.Lying {
		from, to := r.Max.Y, r.Max.Y+size*0.3 // below the names
		if rt.Side == exam.Right {
			from, to = r.Min.Y, r.Min.Y-size*0.3
		}
		p.line(y, from, y+size*0.3, to, 1.8, col)
		return
	}
	if rt.Side == exam.Right {
		p.line(r.Max.X, y, r.Max.X+size*0.4, y-size*0.5, 1.8, col)
		return
	}
	p.line(r.Min.X, y, r.Min.X-size*0.8, y-size*0.5, 1.8, col)
}

// Hit is as Strip.Hit.
func (m CordMap) Hit(w, h, x, y vg.Length, st Style) (CordHit, bool) {
	pl := m.plan(area(w, h), st)
	pt := vg.Point{X: x, Y: h - y}
	for i := range m.Segments {
		for _, side := range []exam.Site{exam.Left, exam.Right} {
			if inside(m.half(pl, i, side), pt) {
				return CordHit{i, side, -1}, true
			}
		}
	}
	for i, v := range m.Vertebrae {
		if inside(pl.rect(v.From, v.To, pl.bones), pt) {
			return CordHit{-1, exam.NoSite, i}, true
		}
	}
	return CordHit{}, false
}
