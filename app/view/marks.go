package view

import (
	"strconv"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// Bead is the mark of a finding: how full a circle is. Full is the item's normal
// grade, always.
type Bead struct {
	Tested bool
	Fill   float64 // 0 to 1, nearness to normal; meaningless where not tested
	Bars   int     // 1: more than normal (exaggerated, increased), 2: clonus or rigid
	Grade  string  // the grade's number, "" where not tested
	Kind   bool    // the grades are kinds, not steps: draw a ring with the number, no filling
}

// BeadOf returns the mark of a finding; the zero Bead is «not tested».
func BeadOf(f exam.Finding) Bead {
	g, ok := f.Result.Grade()
	if !ok {
		return Bead{}
	}
	b := Bead{Tested: true, Grade: strconv.Itoa(int(g))}
	h, ok := f.Health()
	b.Fill, b.Kind = h, !ok || f.Item.Has(exam.Unordered)
	if f.Item.TwoSided() && g > f.Item.Info().Normal {
		b.Bars = min(2, int(g-f.Item.Info().Normal))
	}
	return b
}

// LimbCross is the whole animal in one mark: a bead for each limb (voluntary-motor), a
// notch for lameness, a dot for the tail. Limbs are in the order of exam.Limbs.
type LimbCross struct {
	Limb    [4]Bead
	Notch   [4]bool // lameness above 0
	Tail    Bead
	Untried bool // nothing of it was tested
}

// CrossOf returns the cross of a visit.
func CrossOf(v exam.Visit) LimbCross {
	var motor, lame [4]int8
	for i, l := range exam.Limbs() {
		motor[i], lame[i] = -1, -1
		if g, ok := v.Grade(exam.VoluntaryMotor, l); ok {
			motor[i] = g
		}
		if g, ok := v.Grade(exam.Lameness, l); ok {
			lame[i] = g
		}
	}
	tail := int8(-1)
	if g, ok := v.Grade(exam.TailTone, exam.Midline); ok {
		tail = g
	}
	return CrossFrom(motor, lame, tail)
}

// CrossFrom returns the cross from grades, -1 where not tested.
func CrossFrom(motor, lameness [4]int8, tail int8) LimbCross {
	c := LimbCross{Untried: true}
	for i, l := range exam.Limbs() {
		if motor[i] >= 0 {
			c.Limb[i] = BeadOf(exam.Finding{Item: exam.VoluntaryMotor, Site: l, Result: exam.Graded(motor[i])})
			c.Untried = false
		}
		c.Notch[i] = lameness[i] > 0
	}
	if tail >= 0 {
		c.Tail = BeadOf(exam.Finding{Item: exam.TailTone, Site: exam.Midline, Result: exam.Graded(tail)})
		c.Untried = false
	}
	return c
}

// Words says the cross for those who cannot see it.
func (c LimbCross) Words() string {
	if c.Untried {
		return words.T("limbs not tested")
	}
	var parts []string
	for i, l := range exam.Limbs() {
		w := words.T("not tested")
		if c.Limb[i].Tested {
			w = c.Limb[i].Grade
		}
		parts = append(parts, SiteName(l)+" "+w)
	}
	return joinWords(parts)
}

// Shape of a change mark.
type Shape uint8

// The shapes: nothing, a wedge up (better), a wedge down (worse), a short line (same),
// a ring (different).
const (
	NoShape Shape = iota
	WedgeUp
	WedgeDown
	Line
	Ring
)

// ChangeMark is a change as a shape and a word. Hollow: within what two examiners, or one
// on two days, differ by in a stable animal.
type ChangeMark struct {
	Shape     Shape
	Hollow    bool
	Word      string
	Direction exam.Direction
}

// MarkOf returns the mark of a direction.
func MarkOf(d exam.Direction) ChangeMark {
	m := ChangeMark{Direction: d}
	switch d {
	case exam.Better:
		m.Shape, m.Word = WedgeUp, words.T("better")
	case exam.Worse:
		m.Shape, m.Word = WedgeDown, words.T("worse")
	case exam.Same:
		m.Shape, m.Word = Line, words.T("same")
	case exam.Different:
		m.Shape, m.Word = Ring, words.T("different")
	default:
		m.Word = words.T("not comparable")
	}
	return m
}

// MarkBetween returns the mark of a change between two findings of one cell. A one-grade
// step is hollow: two readings of a stable animal differ by it now and then
// (progression.md: two examiners disagree on about 4 % of reflexes and on one gait score
// in eight).
func MarkBetween(earlier, later exam.Finding) ChangeMark {
	m := MarkOf(exam.Change(earlier, later))
	a, okA := earlier.Result.Grade()
	b, okB := later.Result.Grade()
	if !okA || !okB {
		return m
	}
	step := b - a
	if step < 0 {
		step = -step
	}
	last := later.Item.Last() - later.Item.Info().First
	m.Hollow = (m.Direction == exam.Better || m.Direction == exam.Worse) && step <= 1 && last > 1
	return m
}

// GradeWords says a finding in words: "2 normal", "1 lost caudal to T13", "not tested (pain)".
func GradeWords(f exam.Finding) string {
	g, ok := f.Result.Grade()
	if !ok {
		return UntestedWords(f)
	}
	w := words.Of(f.Item.GradeWord(g))
	if f.Item == exam.CutaneousTrunci && g == 1 && f.Level != 0 {
		w = words.T("lost caudal to %s", f.Level.String())
	} else if f.Level != 0 {
		w = words.T("%s at %s", w, f.Level.String())
	}
	if f.Side != exam.NoSite {
		w = words.T("%s, %s", w, SiteName(f.Side))
	}
	return strconv.Itoa(int(g)) + " " + w
}

// UntestedWords says that a finding has no grade, and why.
func UntestedWords(f exam.Finding) string {
	r := f.Result.Reason()
	switch {
	case r == exam.ReasonNone:
		return words.T("not tested")
	case r == exam.OtherReason && f.Note != "":
		return words.T("not tested (%s)", f.Note)
	}
	return words.T("not tested (%s)", words.Of(r.String()))
}
