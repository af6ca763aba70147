package exam

import (
	"strconv"
	"strings"
)

// Reason says why an item was not tested.
type Reason uint8

// The reasons. ReasonNone is «no reason given»; OtherReason goes with a note.
const (
	ReasonNone Reason = iota
	Pain
	Temperament
	SedationReason
	NotSafe
	OwnerDeclined
	OtherReason
	reasonCount
)

var reasonNames = [reasonCount]string{"", "pain", "temperament", "sedation", "not safe", "owner declined", "other"}

// String returns the reason's word, empty for ReasonNone.
func (r Reason) String() string {
	if r < reasonCount {
		return reasonNames[r]
	}
	return "unknown"
}

// ParseReason is the inverse of String. A word that is no coded reason is returned
// as OtherReason with the word as the note.
func ParseReason(word string) (reason Reason, note string) {
	for i, n := range reasonNames {
		if n == word {
			return Reason(i), ""
		}
	}
	return OtherReason, word
}

// Result is either a grade on the item's scale or a reason for having none.
// The zero Result is «not tested», without a reason.
type Result struct {
	grade  int8
	tested bool
	reason Reason
}

// Graded returns a tested result with that grade. Whether the grade is on the
// item's scale is checked by Finding.Validate.
func Graded(grade int8) Result { return Result{grade: grade, tested: true} }

// Untested returns a result without a grade, with the reason.
func Untested(reason Reason) Result { return Result{reason: reason} }

// Tested reports whether there is a grade.
func (r Result) Tested() bool { return r.tested }

// Grade returns the grade and true, or 0 and false where the item was not tested.
func (r Result) Grade() (int8, bool) { return r.grade, r.tested }

// Reason returns why the item was not tested; ReasonNone for a tested result.
func (r Result) Reason() Reason { return r.reason }

// How says how a grade came to be.
type How uint8

// The ways a grade comes to be: looked at today, copied from last visit by key, or filled in a block.
const (
	Examined How = iota
	SameAsLast
	RestNormal
)

// String returns the word in exam files.
func (h How) String() string { return [...]string{"examined", "same", "rest-normal"}[h%3] }

// ParseHow is the inverse of String; the empty word is Examined.
func ParseHow(word string) (How, error) {
	switch word {
	case "", "examined":
		return Examined, nil
	case "same":
		return SameAsLast, nil
	case "rest-normal":
		return RestNormal, nil
	}
	return 0, &Invalid{"how", word, "examined, same or rest-normal"}
}

// Finding is the result of one item at one site.
type Finding struct {
	Item   Item
	Site   Site
	Digit  Digit // where the item takes one
	Joint  Joint // where the item takes one
	Result Result
	Level  Vertebra // where the item takes one: the cut-off of cutaneous trunci, the painful vertebra
	Side   Site     // where the item takes one: Left or Right, else NoSite
	How    How
	Seen   bool   // the examiner looked at last visit's grade before giving this one
	Block  string // names one bulk fill: findings that share it are one look
	Note   string
}

// Key identifies the cell of an exam that a finding fills. Two findings of one
// visit with equal keys are versions of one cell.
type Key struct {
	Item  Item
	Site  Site
	Digit Digit
	Joint Joint
}

// Key returns the cell that the finding fills.
func (f Finding) Key() Key { return Key{f.Item, f.Site, f.Digit, f.Joint} }

// String returns the key as item/site, with digit and joint where there are any.
// It is stable: stored changes name cells by it.
func (k Key) String() string {
	s := k.Item.String() + "/" + k.Site.String()
	if k.Digit != AnyDigit {
		s += "/" + k.Digit.String()
	}
	if k.Joint != NoJoint {
		s += "/" + k.Joint.String()
	}
	return s
}

// ParseKey is the inverse of Key.String.
func ParseKey(s string) (Key, error) {
	bad := &Invalid{"cell", s, "item/site, with a digit or joint where the item takes one"}
	parts := strings.Split(s, "/")
	if len(parts) < 2 || len(parts) > 4 {
		return Key{}, bad
	}
	var k Key
	var err error
	if k.Item, err = ParseItem(parts[0]); err != nil {
		return Key{}, err
	}
	if k.Site, err = ParseSite(parts[1]); err != nil {
		return Key{}, err
	}
	for _, p := range parts[2:] {
		if d, err := ParseDigit(p); err == nil && d != AnyDigit {
			k.Digit = d
		} else if j, err := ParseJoint(p); err == nil && j != NoJoint {
			k.Joint = j
		} else {
			return Key{}, bad
		}
	}
	if k.String() != s {
		return Key{}, bad
	}
	return k, nil
}

// Validate checks the finding against the vocabulary and the species' column.
// The error names the item, the site, the value and what is allowed.
func (f Finding) Validate(s Species) error {
	in := f.Item.Info()
	if in.Name == "" {
		return &Invalid{"item", strconv.Itoa(int(f.Item)), "an item of the vocabulary"}
	}
	where := "finding " + in.Name + " at " + f.Site.String()
	if !f.Item.At(f.Site) {
		names := make([]string, len(in.Sites))
		for i, x := range in.Sites {
			names[i] = x.String()
		}
		return &Invalid{"site of " + in.Name, f.Site.String(), strings.Join(names, ", ")}
	}
	if g, ok := f.Result.Grade(); ok && f.Item.GradeWord(g) == "" {
		return &Invalid{"grade of " + where, strconv.Itoa(int(g)), f.Item.gradeList()}
	}
	if f.Digit != AnyDigit && !f.Item.Has(TakesDigit) {
		return &Invalid{"digit of " + where, f.Digit.String(), "no digit: this item takes none"}
	}
	if f.Joint != NoJoint && !f.Item.Has(TakesJoint) {
		return &Invalid{"joint of " + where, f.Joint.String(), "no joint: this item takes none"}
	}
	if f.Level != 0 {
		if !f.Item.Has(TakesLevel) {
			return &Invalid{"level of " + where, f.Level.String(), "no level: this item takes none"}
		}
		if VertebraIndex(s, f.Level) < 0 {
			return &Invalid{"level of " + where, f.Level.String(), "a vertebra the " + s.String() + " has"}
		}
	}
	if f.Side != NoSite {
		if !f.Item.Has(TakesSide) {
			return &Invalid{"side of " + where, f.Side.String(), "no side: this item takes none"}
		}
		if f.Side != Left && f.Side != Right {
			return &Invalid{"side of " + where, f.Side.String(), "left or right"}
		}
	}
	return nil
}

// gradeList says which grades the item has: "0 (absent), 1 (reduced), 2 (normal)".
func (i Item) gradeList() string {
	in := i.Info()
	parts := make([]string, len(in.Grades))
	for k, w := range in.Grades {
		parts[k] = strconv.Itoa(k+int(in.First)) + " (" + w + ")"
	}
	return strings.Join(parts, ", ")
}

// Normal reports whether the finding is tested and normal. A cutaneous trunci cut-off
// at or caudal to L5 is normal (MC-2011: the field ends at L5 or L6 in 153 of 155 dogs),
// and so is a wound that is not there.
func (f Finding) Normal() bool {
	g, ok := f.Result.Grade()
	if !ok {
		return false
	}
	if f.Item == CutaneousTrunci && g == 1 && f.Level != 0 {
		return f.Level >= NewVertebra(RegionL, 5)
	}
	if f.Item == Wound && g == 3 {
		return true
	}
	return g == f.Item.Info().Normal
}

// Abnormal reports whether the finding is tested and not normal. Items without a
// normal grade (the direction of a nystagmus) are never abnormal in themselves.
func (f Finding) Abnormal() bool {
	return f.Result.Tested() && f.Item.Info().Normal >= 0 && !f.Normal()
}

// Health returns the nearness of the finding to its normal grade, 0 (as far as the
// scale goes) to 1 (normal), and false where it was not tested or has no normal grade.
// Distance is counted in grades against the longer of the two ways to be ill; an
// unordered item is 1 when normal, else 0.
func (f Finding) Health() (float64, bool) {
	g, ok := f.Result.Grade()
	in := f.Item.Info()
	if !ok || in.Normal < 0 || f.Item.GradeWord(g) == "" {
		return 0, false
	}
	if f.Normal() {
		return 1, true
	}
	if in.Traits&Unordered != 0 {
		return 0, true // kinds have no distance
	}
	far := max(in.Normal-in.First, f.Item.Last()-in.Normal)
	d := g - in.Normal
	if d < 0 {
		d = -d
	}
	return 1 - float64(d)/float64(far), true
}

// TwoSided reports whether the item can be ill in two ways, below and above its normal grade.
func (i Item) TwoSided() bool {
	in := i.Info()
	return in.Traits&Unordered == 0 && i != Wound && in.Normal > in.First && in.Normal < i.Last()
}

// Direction of a change between two findings of one cell.
type Direction uint8

// The directions. NotComparable: at least one of the two was not tested.
const (
	NotComparable Direction = iota
	Same
	Better
	Worse
	Different // normal was crossed, or the grades are kinds and not steps
)

// String returns the direction's word.
func (d Direction) String() string {
	return [...]string{"not comparable", "same", "better", "worse", "different"}[d%5]
}

// Change compares an earlier finding with a later one of the same cell. Better is nearer
// to the normal grade on the same side of it; a crossing of normal, or a change of an
// unordered item, is Different. A cutaneous trunci cut-off that moves caudally is Better.
func Change(earlier, later Finding) Direction {
	a, okA := earlier.Result.Grade()
	b, okB := later.Result.Grade()
	if !okA || !okB || earlier.Item != later.Item {
		return NotComparable
	}
	in := later.Item.Info()
	if earlier.Normal() && later.Normal() {
		return Same
	}
	if later.Item == CutaneousTrunci && a == 1 && b == 1 {
		switch {
		case earlier.Level == 0 || later.Level == 0 || earlier.Level == later.Level:
			return Same
		case later.Level > earlier.Level:
			return Better
		}
		return Worse
	}
	if a == b {
		return Same
	}
	if in.Traits&Unordered != 0 || in.Normal < 0 {
		return Different
	}
	if later.Normal() {
		return Better
	}
	if earlier.Normal() {
		return Worse
	}
	if (a < in.Normal) != (b < in.Normal) {
		return Different
	}
	if (b > a) == (a < in.Normal) {
		return Better
	}
	return Worse
}
