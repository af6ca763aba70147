package view

import (
	"cmp"
	"slices"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// Section of the comparison, in the order shown.
type Section uint8

// The sections.
const (
	NotLookedAt  Section = iota // abnormal last time, not looked at today
	GotWorse                    //
	GotBetter                   //
	IsDifferent                 // normal was crossed, or another kind
	NewlyTested                 // abnormal today, not tested then
	StayedSame                  // tested both times, abnormal, unchanged
	StayedNormal                // normal both times
	OnlyOnce                    // tested on one day only, and not abnormal
)

var sectionTitles = [...]string{NotLookedAt: "Abnormal last time, not looked at today", GotWorse: "Worse",
	GotBetter: "Better", IsDifferent: "Different", NewlyTested: "Abnormal today, not tested then",
	StayedSame: "Same, abnormal", StayedNormal: "Normal both times", OnlyOnce: "Tested on one day only"}

// String returns a stable word for files and the command line.
func (s Section) String() string {
	return [...]string{"not-looked-at", "worse", "better", "different", "new", "same", "normal", "once"}[s%8]
}

// Words returns the section's heading.
func (s Section) Words() string { return words.Of(sectionTitles[s]) }

// CompareRow is one cell on the two days.
type CompareRow struct {
	Key           exam.Key
	Name          string
	Section       Section
	Before, After exam.Finding
	HadBefore     bool // something was entered, a reason included
	HasAfter      bool
	BeforeBead    Bead
	AfterBead     Bead
	BeforeWords   string
	AfterWords    string
	Mark          ChangeMark
	Weak          string // why the change says little: "copied", "filled in a block", "earlier grade seen"; "" where nothing
}

// MeasureRow is one measured value on the two days.
type MeasureRow struct {
	Key           string
	Name, Unit    string
	Before, After exam.Measured
	HadBefore     bool
	HasAfter      bool
	Change        float64
	ChangeWords   string
	Unlike        string // why the two are not to be compared: other examiner, place or position
}

// Compare is what changed between two visits.
type Compare struct {
	Patient       exam.Patient
	Before, After exam.Visit
	Days          float64
	Rows          []CompareRow // by section, then vocabulary order
	Measures      []MeasureRow
	Unlike        []string // in what the visits were not like for like, in words
	BeforeCross   LimbCross
	AfterCross    LimbCross
	Overall       ChangeMark
	Words         string // one sentence
}

// NewCompare compares two visits of one patient, the earlier one first.
func NewCompare(p exam.Patient, before, after exam.Visit) *Compare {
	c := &Compare{Patient: p, Before: before, After: after,
		Days: after.Examined.Sub(before.Examined).Hours() / 24, BeforeCross: CrossOf(before), AfterCross: CrossOf(after)}
	keys := map[exam.Key]bool{}
	for _, f := range before.Findings {
		keys[f.Key()] = true
	}
	for _, f := range after.Findings {
		keys[f.Key()] = true
	}
	for k := range keys {
		r := CompareRow{Key: k, Name: CellName(k)}
		r.Before, r.HadBefore = before.Find(k)
		r.After, r.HasAfter = after.Find(k)
		r.BeforeBead, r.AfterBead = BeadOf(r.Before), BeadOf(r.After)
		r.BeforeWords, r.AfterWords = GradeWords(r.Before), GradeWords(r.After)
		r.Mark = MarkBetween(r.Before, r.After)
		if exam.Returned(exam.CellChange{Key: k, Before: r.Before, After: r.After, HadBefore: r.HadBefore, HasAfter: r.HasAfter}, p, after.Examined) {
			r.Mark.Word = words.T("returned")
		}
		r.Section = sectionOf(r)
		r.Weak = weak(r.After)
		c.Rows = append(c.Rows, r)
	}
	slices.SortFunc(c.Rows, func(a, b CompareRow) int {
		return cmp.Or(cmp.Compare(a.Section, b.Section), compareKeys(a.Key, b.Key))
	})
	c.measures()
	if _, differ := exam.LikeForLike(before, after); len(differ) > 0 {
		for _, d := range differ {
			c.Unlike = append(c.Unlike, c.unlikeWords(d))
		}
	}
	c.Overall = MarkOf(storage.Direction(before, after))
	c.Words = c.sentence()
	return c
}

func sectionOf(r CompareRow) Section {
	was, is := r.Before.Result.Tested(), r.After.Result.Tested()
	switch {
	case was && !is && r.Before.Abnormal():
		return NotLookedAt
	case was && is:
		switch r.Mark.Direction {
		case exam.Worse:
			return GotWorse
		case exam.Better:
			return GotBetter
		case exam.Different:
			return IsDifferent
		}
		if r.After.Abnormal() {
			return StayedSame
		}
		return StayedNormal
	case is && r.After.Abnormal():
		return NewlyTested
	}
	return OnlyOnce
}

// weak says why a finding is no independent look.
func weak(f exam.Finding) string {
	switch {
	case !f.Result.Tested():
		return ""
	case f.How == exam.SameAsLast:
		return words.T("copied from last visit")
	case f.How == exam.RestNormal:
		return words.T("filled in a block")
	case f.Seen:
		return words.T("last grade was seen first")
	}
	return ""
}

func (c *Compare) measures() {
	seen := map[string]bool{}
	add := func(key string) {
		if seen[key] {
			return
		}
		seen[key] = true
		r := MeasureRow{Key: key}
		for _, m := range c.Before.Measures {
			if m.Key() == key {
				r.Before, r.HadBefore = m, true
			}
		}
		for _, m := range c.After.Measures {
			if m.Key() == key {
				r.After, r.HasAfter = m, true
			}
		}
		m := r.After
		if !r.HasAfter {
			m = r.Before
		}
		r.Name, r.Unit = MeasureName(m.Measure), m.Measure.Info().Unit
		if r.Unit == "1" {
			r.Unit = ""
		}
		if m.Site != exam.NoSite && m.Site != exam.Midline {
			r.Name += ", " + SiteName(m.Site)
		}
		if r.HadBefore && r.HasAfter {
			r.Change = r.After.Value - r.Before.Value
			r.ChangeWords = signed(r.Change)
			r.Unlike = unlikeMeasure(c.Before, c.After, r.Before, r.After)
		}
		c.Measures = append(c.Measures, r)
	}
	for _, m := range c.After.Measures {
		add(m.Key())
	}
	for _, m := range c.Before.Measures {
		add(m.Key())
	}
}

func signed(x float64) string {
	if x > 0 {
		return "+" + number(x)
	}
	if x < 0 {
		return "−" + number(-x)
	}
	return "0"
}

// unlikeMeasure says why two readings are not to be compared. Girth and joint angles hold
// within one examiner only (progression.md 6: McCarthy2018, Bascunan2016).
func unlikeMeasure(a, b exam.Visit, x, y exam.Measured) string {
	switch y.Measure {
	case exam.ThighGirth, exam.BrachiumGirth, exam.AntebrachiumGirth, exam.CrusGirth, exam.RangeOfMotion:
		if a.Examiner != b.Examiner {
			return words.T("another examiner: not comparable")
		}
	}
	if x.Clipped != y.Clipped {
		return words.T("clipped once only: not comparable")
	}
	if x.Position != y.Position && x.Position != "" && y.Position != "" {
		return words.T("another position: not comparable")
	}
	return ""
}

func (c *Compare) unlikeWords(what string) string {
	said := func(w string) string {
		if w == "" {
			return words.T("not said")
		}
		return words.Of(w)
	}
	a, b := "", ""
	switch what {
	case "sedation":
		a, b = words.Of(c.Before.Sedation.String()), words.Of(c.After.Sedation.String())
	case "aid":
		a, b = said(c.Before.Aid), said(c.After.Aid)
	case "surface":
		a, b = said(c.Before.Surface), said(c.After.Surface)
	case "session":
		a, b = said(c.Before.Session), said(c.After.Session)
	default:
		return words.Of(what)
	}
	return words.T("%s: %s then, %s now", words.Of(what), a, b)
}

// Count returns how many rows a section has.
func (c *Compare) Count(s Section) int {
	n := 0
	for _, r := range c.Rows {
		if r.Section == s {
			n++
		}
	}
	return n
}

func (c *Compare) sentence() string {
	b, w, d, m := c.Count(GotBetter), c.Count(GotWorse), c.Count(IsDifferent), c.Count(NotLookedAt)
	s := words.T("%d better, %d worse, %d different since %s", b, w, d, Day(c.Before.Examined))
	if m > 0 {
		s += words.N(m, "; %d was abnormal and is not looked at today", "; %d were abnormal and are not looked at today", m)
	}
	return s + "."
}
