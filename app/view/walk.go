package view

import (
	"slices"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// Posture is how the animal is held for the tests that are done on each side.
type Posture uint8

// The postures. Lying is the usual one. Cats, breathless and freshly operated animals
// are examined held in the arms or lying on the chest.
const (
	Lying Posture = iota
	Sternal
	Held
)

// String returns the posture's stable word.
func (p Posture) String() string { return [...]string{"lying", "sternal", "held"}[p%3] }

// ParsePosture is the inverse of String; unknown words are Lying.
func ParsePosture(word string) Posture {
	switch word {
	case "sternal":
		return Sternal
	case "held":
		return Held
	}
	return Lying
}

// Position is where the animal is during a step of the walk.
type Position uint8

// The positions, in the order of the walk.
const (
	HandsOff Position = iota
	Standing
	OnRight // lying on its right: the left limbs are uppermost
	OnLeft  // lying on its left
	OnChest
	InArms
	Trunk
	Spine
	LastPain
)

// positionTitles are the headings of the positions.
var positionTitles = [...]string{HandsOff: "Hands off", Standing: "Standing", OnRight: "Lying on its right",
	OnLeft: "Lying on its left", OnChest: "Lying on its chest", InArms: "Held in the arms",
	Trunk: "Trunk", Spine: "Spine, from the painless end", LastPain: "Pain perception, last"}

// Words says the position.
func (p Position) Words() string { return words.Of(positionTitles[p]) }

// Step is one stop of the walk: a cell, and where the animal is.
type Step struct {
	Cell     int // index into the sheet's cells
	Position Position
	Again    bool // a reflex that was absent uppermost, offered again undermost
}

// stage of an item: which position it is tested in; what is done on each side is OnRight.
func stage(i exam.Item) Position {
	switch exam.StageOf(i) {
	case exam.StageHandsOff:
		return HandsOff
	case exam.StageStanding:
		return Standing
	case exam.StageSides:
		return OnRight
	case exam.StageTrunk:
		return Trunk
	case exam.StageSpine:
		return Spine
	}
	return LastPain
}

// PostureOf returns the posture of the usual position of a patient's exam.
func PostureOf(p exam.Position) Posture {
	switch p {
	case exam.Sternal:
		return Sternal
	case exam.Held:
		return Held
	}
	return Lying
}

// steps lays out the walk over rows of cells. Cells of the side stage are visited left
// first while the animal lies on its right, then the right ones; midline cells come with
// the first side. A tendon reflex has a second stop undermost, taken only if it was absent.
func steps(rows []Row, cells []Cell, posture Posture, painless func(a, b exam.Site) int) []Step {
	var out []Step
	add := func(p Position, want func(Cell) bool) {
		for _, r := range rows {
			if r.stage != p {
				continue
			}
			idx := slices.Clone(r.Cells)
			if p == Spine {
				slices.SortStableFunc(idx, func(a, b int) int { return painless(cells[a].Key.Site, cells[b].Key.Site) })
			}
			for _, c := range idx {
				if want == nil || want(cells[c]) {
					out = append(out, Step{Cell: c, Position: p})
				}
			}
		}
	}
	add(HandsOff, nil)
	add(Standing, nil)
	// On each side one limb is finished before the next is taken in hand.
	side := func(at Position, want func(Cell) bool) {
		from := len(out)
		for _, part := range []func(exam.Site) bool{exam.Site.IsThoracic, exam.Site.IsPelvic, func(s exam.Site) bool { return !s.IsLimb() }} {
			add(OnRight, func(c Cell) bool { return part(c.Site) && (want == nil || want(c)) })
		}
		for k := from; k < len(out); k++ {
			out[k].Position = at
		}
	}
	isRight := func(c Cell) bool { return c.Key.Site.Side() == exam.Right }
	isLeft := func(c Cell) bool { return !isRight(c) }
	again := func(at Position, right bool) {
		for _, r := range rows {
			if r.stage != OnRight || !exam.TendonReflex(r.Item) {
				continue
			}
			for _, c := range r.Cells {
				if isRight(cells[c]) == right {
					out = append(out, Step{Cell: c, Position: at, Again: true})
				}
			}
		}
	}
	switch posture {
	case Sternal:
		side(OnChest, nil)
	case Held:
		side(InArms, nil)
	default:
		side(OnRight, isLeft)
		side(OnLeft, isRight)
		again(OnLeft, false)
		again(OnRight, true)
	}
	add(Trunk, nil)
	add(Spine, nil)
	add(LastPain, nil)
	return out
}
