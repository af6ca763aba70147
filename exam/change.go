package exam

import (
	"cmp"
	"slices"
	"time"
)

// ChangeKind says what became of one cell between two visits.
type ChangeKind uint8

// The kinds, in the order in which they are shown.
const (
	MissedAbnormal ChangeKind = iota // abnormal last time, not looked at today
	TurnedWorse
	TurnedBetter
	TurnedDifferent
	FirstAbnormal  // abnormal today, not tested then
	StillAbnormal  // abnormal both times, unchanged
	StillNormal    // normal both times
	FirstNormal    // normal today, not tested then
	NoLongerTested // normal last time, not tested today
	NeverTested    // a reason on both days, or on one
)

// String returns the kind in words.
func (k ChangeKind) String() string {
	return [...]string{"abnormal last time, not looked at today", "worse", "better", "different", "abnormal today, not tested then",
		"same, abnormal", "same, normal", "normal today, not tested then", "normal last time, not tested today", "not tested"}[k%10]
}

// CellChange is one cell on two days.
type CellChange struct {
	Key       Key
	Kind      ChangeKind
	Before    Finding // the zero Finding where nothing was entered
	After     Finding
	HadBefore bool // something was entered: a grade or a reason
	HasAfter  bool
}

// CompareVisits compares two visits of one animal, the earlier one first, cell by cell: first by
// kind in the order of ChangeKind, then in vocabulary order.
func CompareVisits(before, after Visit) []CellChange {
	cells := map[Key]*CellChange{}
	cell := func(k Key) *CellChange {
		if c, ok := cells[k]; ok {
			return c
		}
		c := &CellChange{Key: k}
		cells[k] = c
		return c
	}
	for _, f := range before.Findings {
		c := cell(f.Key())
		c.Before, c.HadBefore = f, true
	}
	for _, f := range after.Findings {
		c := cell(f.Key())
		c.After, c.HasAfter = f, true
	}
	out := make([]CellChange, 0, len(cells))
	for _, c := range cells {
		then, now := c.Before.Result.Tested(), c.After.Result.Tested()
		switch {
		case then && now:
			switch Change(c.Before, c.After) {
			case Worse:
				c.Kind = TurnedWorse
			case Better:
				c.Kind = TurnedBetter
			case Different:
				c.Kind = TurnedDifferent
			default:
				c.Kind = StillAbnormal
				if !c.After.Abnormal() {
					c.Kind = StillNormal
				}
			}
		case then:
			c.Kind = NoLongerTested
			if c.Before.Abnormal() {
				c.Kind = MissedAbnormal
			}
		case now:
			c.Kind = FirstNormal
			if c.After.Abnormal() {
				c.Kind = FirstAbnormal
			}
		default:
			c.Kind = NeverTested
		}
		out = append(out, *c)
	}
	slices.SortFunc(out, func(a, b CellChange) int { return cmp.Or(cmp.Compare(a.Kind, b.Kind), compareKeys(a.Key, b.Key)) })
	return out
}

// CountChanges counts the cells of each kind.
func CountChanges(cs []CellChange) map[ChangeKind]int {
	out := map[ChangeKind]int{}
	for _, c := range cs {
		out[c.Kind]++
	}
	return out
}

// Returned reports whether a change is a reflex that came back after it was 0, within ten days
// of the problem's onset or surgery: what spinal shock takes it gives back (Hodshon-2018: median 60 h,
// 12–156 h). Such a change reads «returned», not «better».
func Returned(c CellChange, p Patient, at time.Time) bool {
	a, ok := c.Before.Result.Grade()
	b, ok2 := c.After.Result.Grade()
	if !ok || !ok2 || a != 0 || b == 0 || c.Key.Item.Info().Group != GroupReflex || c.Key.Item.Info().Normal == 0 {
		return false
	}
	pr, ok := p.ProblemAt(at)
	if !ok {
		return false
	}
	for _, d := range []Date{pr.Onset, pr.Surgery} {
		if days, ok := d.DaysBefore(at); ok && days >= -1 && days <= 10 {
			return true
		}
	}
	return false
}

// DefaultRecheckDays is the time between visits where neither patient nor therapist says otherwise.
const DefaultRecheckDays = 7

// Due is when a patient is to be seen again.
type Due struct {
	Never bool // discharged or died
	Date  Date // the day, empty where Never
	Days  int  // whole days from today until then, negative when overdue
}

// Overdue reports whether the day has passed.
func (d Due) Overdue() bool { return !d.Never && d.Days < 0 }

// DueOn returns when a patient is to be seen: the day agreed at the last visit, or so many days after
// it; today for one never seen; never for one who is discharged or died. Days count
// calendar days in now's own offset.
func DueOn(p Patient, last *Visit, now time.Time) Due {
	if p.Status != Active {
		return Due{Never: true}
	}
	today := DayOf(now)
	day := today
	if last != nil {
		if _, ok := last.NextVisit.Time(); ok {
			day = last.NextVisit
		} else {
			n := p.RecheckDays
			if n <= 0 {
				n = DefaultRecheckDays
			}
			day = DayOf(last.Examined.AddDate(0, 0, n))
		}
	}
	a, _ := today.Time()
	b, ok := day.Time()
	if !ok {
		return Due{Date: today}
	}
	return Due{Date: day, Days: int(b.Sub(a).Hours()/24 + 0.5*sign(b.Sub(a)))}
}

func sign(d time.Duration) float64 {
	if d < 0 {
		return -1
	}
	return 1
}
