package exam

import "strings"

// Group gathers items that are examined together.
type Group uint8

// The groups of items.
const (
	GroupWhole Group = iota + 1
	GroupGait
	GroupPostural
	GroupCranial
	GroupReflex
	GroupMass
	GroupSensation
	GroupBladder
)

var groupNames = [...]string{GroupWhole: "Whole animal", GroupGait: "Gait and posture", GroupPostural: "Postural reactions",
	GroupCranial: "Cranial nerves", GroupReflex: "Reflexes and tone", GroupMass: "Muscle mass",
	GroupSensation: "Sensation and pain", GroupBladder: "Bladder and bowel"}

// String returns the group's heading.
func (g Group) String() string {
	if g >= GroupWhole && g <= GroupBladder {
		return groupNames[g]
	}
	return "unknown"
}

// Traits of an item, as bits.
type Traits uint8

const (
	// TakesLevel: the finding may name a vertebra.
	TakesLevel Traits = 1 << iota
	// TakesDigit: the finding may name the medial or lateral digit.
	TakesDigit
	// TakesSide: the finding may name a side beside its site (spinal pain worse on one side).
	TakesSide
	// TakesJoint: the finding may name a joint of the limb.
	TakesJoint
	// Unordered: the grades are kinds, not steps; a change is «different», never better or worse.
	Unordered
	// NoBulk: the keys that fill many cells at once never fill this item.
	NoBulk
	// Noxious: the test hurts or may hurt.
	Noxious
)

// ItemInfo describes an item: its name in exam files, its sites, its grades in words
// (Grades[0] is grade First), and its normal grade, or -1 where no grade is normal.
type ItemInfo struct {
	Name   string
	Group  Group
	Sites  []Site
	Grades []string
	First  int8
	Normal int8
	Traits Traits
}

// Items lists every item in the order of the vocabulary.
func Items() []Item {
	out := make([]Item, 0, itemCount-1)
	for i := NoItem + 1; i < itemCount; i++ {
		out = append(out, i)
	}
	return out
}

// Info returns the item's description; the zero ItemInfo for NoItem or an item out of range.
// The slices in it are shared: do not change them.
func (i Item) Info() ItemInfo {
	if i < itemCount {
		return itemTable[i]
	}
	return ItemInfo{Normal: -1}
}

// String returns the item's name in exam files.
func (i Item) String() string { return i.Info().Name }

// Has reports whether the item has every one of the traits.
func (i Item) Has(t Traits) bool { return i.Info().Traits&t == t }

// At reports whether the item is tested at the site.
func (i Item) At(s Site) bool {
	for _, x := range i.Info().Sites {
		if x == s {
			return true
		}
	}
	return false
}

// Last returns the highest grade of the item.
func (i Item) Last() int8 { in := i.Info(); return in.First + int8(len(in.Grades)) - 1 }

// GradeWord returns the grade in words, empty for a grade off the scale.
func (i Item) GradeWord(grade int8) string {
	in := i.Info()
	if k := int(grade) - int(in.First); k >= 0 && k < len(in.Grades) {
		return in.Grades[k]
	}
	return ""
}

var itemsByName = func() map[string]Item {
	m := make(map[string]Item, itemCount)
	for i := NoItem + 1; i < itemCount; i++ {
		m[itemTable[i].Name] = i
	}
	return m
}()

// ParseItem is the inverse of Item.String. It refuses unknown words and names the nearest item.
func ParseItem(word string) (Item, error) {
	if i, ok := itemsByName[word]; ok {
		return i, nil
	}
	hint := "an item of the vocabulary"
	if near := nearestItem(word); near != "" {
		hint += ", perhaps " + near
	}
	return NoItem, &Invalid{"item", word, hint}
}

// nearestItem returns the item name with the smallest edit distance to word, or nothing beyond a distance of 3.
func nearestItem(word string) string {
	if len(word) > 40 {
		return ""
	}
	best, at := "", 4
	for i := NoItem + 1; i < itemCount; i++ {
		if d := editDistance(strings.ToLower(word), itemTable[i].Name); d < at {
			best, at = itemTable[i].Name, d
		}
	}
	return best
}

func editDistance(a, b string) int {
	row := make([]int, len(b)+1)
	for j := range row {
		row[j] = j
	}
	for i := 1; i <= len(a); i++ {
		diagonal := row[0]
		row[0] = i
		for j := 1; j <= len(b); j++ {
			cost := diagonal
			if a[i-1] != b[j-1] {
				cost++
			}
			diagonal = row[j]
			row[j] = min(cost, row[j]+1, row[j-1]+1)
		}
	}
	return row[len(b)]
}
