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

// stage of an item: which position it is tested in.
func stage(i exam.Item) Position {
	switch i {
	case exam.Wound, exam.Skin, exam.Gums, exam.MuscleCondition, exam.TailMovement:
		return Standing
	case exam.PhantomScratching, exam.SelfTrauma, exam.Fatigue:
		return HandsOff
	case exam.CutaneousTrunci, exam.CutaneousTrunciTwitch:
		return Trunk
	case exam.SpinalPain, exam.LumbosacralExtension, exam.TailLift:
		return Spine
	case exam.JointSwelling, exam.StifleInstability, exam.FemoralPulse, exam.PawWarmth:
		return OnRight
	case exam.JointPain, exam.LimbPain:
		return LastPain
	case exam.TailTone, exam.AnalTone:
		return OnRight
	}
	switch i.Info().Group {
	case exam.GroupWhole, exam.GroupGait:
		return HandsOff
	case exam.GroupPostural, exam.GroupCranial, exam.GroupMass, exam.GroupBladder:
		return Standing
	case exam.GroupReflex:
		return OnRight
	}
	return LastPain
}

// rank orders the items within a stage where the vocabulary's order is not the order of
// work: tone before reflexes, withdrawal after them; deep pain after everything.
func rank(i exam.Item) int {
	switch i {
	case exam.Tone:
		return -20
	case exam.Perineal:
		return 300
	case exam.TailTone, exam.AnalTone:
		return 310
	case exam.Withdrawal, exam.WithdrawalShoulder, exam.WithdrawalElbow, exam.WithdrawalCarpus,
		exam.WithdrawalHip, exam.WithdrawalStifle, exam.WithdrawalHock, exam.WithdrawalDigits, exam.CrossedExtensor:
		return 400 + int(i)
	case exam.DeepPain:
		return 900
	}
	return int(i)
}

// tendon reports whether the item is a reflex that may be missing in the uppermost limb
// and present in the undermost (anatomy.md F5, neuropetvet).
func tendon(i exam.Item) bool {
	switch i {
	case exam.Biceps, exam.Triceps, exam.ExtensorCarpi, exam.Patellar, exam.CranialTibial, exam.Gastrocnemius:
		return true
	}
	return false
}

// sortByWalk orders items as they are walked.
func sortByWalk(items []exam.Item) {
	slices.SortStableFunc(items, func(a, b exam.Item) int {
		if sa, sb := stage(a), stage(b); sa != sb {
			return int(sa) - int(sb)
		}
		return rank(a) - rank(b)
	})
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
			if r.stage != OnRight || !tendon(r.Item) {
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
