package view

import (
	"cmp"
	"slices"
	"strings"
	"time"
	"unicode"
	"unicode/utf8"

	"github.com/sahilm/fuzzy"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// Attention is why a patient stands where it does in the caseload, most urgent first.
type Attention uint8

// The reasons, in the order of the caseload.
const (
	AlertNow Attention = iota
	AlertToday
	AlertSoon
	Unfinished // an exam was begun and not closed
	Overdue
	DueToday
	DueLater
	NeverDue // discharged or died
)

// usualRecheck is the number of days between visits where the patient has none of its own
// (common practice: weekly).
const usualRecheck = 7

// CaseRow is one patient of the caseload.
type CaseRow struct {
	Summary   Summary
	Cross     LimbCross
	Attention Attention
	Days      int    // days until due, negative when overdue; meaningless where never due
	DueWords  string // "3 days overdue", "due today", "due in 4 days", "discharged"
	LastWords string // "2 Mar 2026 (5 days ago)", "no visit yet"
	Change    ChangeMark
	Alerts    []string // unanswered, in the urgency's word
	Matches   []Match  // where the search was found
}

// Match is a place that the search was found in: a field and the rune positions in it.
type Match struct {
	Field CaseField
	At    []int
}

// CaseField is a field that is searched.
type CaseField uint8

// The fields searched.
const (
	FieldName CaseField = iota
	FieldOwner
	FieldBreed
	FieldProblem
)

// caseFields are the fields with their weight in the order of results.
var caseFields = [...]struct {
	field  CaseField
	weight int
	text   func(Summary) string
}{
	{FieldName, 40, func(s Summary) string { return s.Name }},
	{FieldOwner, 20, func(s Summary) string { return s.Owner }},
	{FieldProblem, 10, func(s Summary) string { return s.Problem }},
	{FieldBreed, 0, func(s Summary) string { return s.Breed }},
}

// Caseload is the list of all patients: who needs me, and why. A row is put into words when it is
// asked for: a practice has thousands, a screen shows twenty.
type Caseload struct {
	list   []Summary
	all    []place // by what needs attention
	now    time.Time
	folded [len(caseFields)][]string // in the order of all; made by the first search
	shown  []hit
	query  string
	hide   bool // hide patients who are never due
	today  bool // show only those who need something today
}

// place is a patient's place in the order of the caseload.
type place struct {
	attention Attention
	days      int
	name      string // in lower case
	at        int    // in Caseload.list
}

// hit is a patient shown: its index in Caseload.all, and where the search was found.
type hit struct {
	row, score int
	found      [len(caseFields)]int // one more than the place in the folded field, 0 for nowhere
	spelled    []Match              // where spelling was forgiven
}

// NewCaseload makes the rows, sorted by what needs attention at the time now, in its zone.
func NewCaseload(list []Summary, now time.Time) *Caseload {
	list = Present(list)
	c := &Caseload{list: list, all: make([]place, len(list)), now: now}
	for i := range list {
		x := place{name: strings.ToLower(list[i].Name), at: i}
		x.attention, x.days = attention(&list[i], now)
		c.all[i] = x
	}
	slices.SortFunc(c.all, func(a, b place) int {
		return cmp.Or(cmp.Compare(a.attention, b.attention), cmp.Compare(a.days, b.days), cmp.Compare(a.name, b.name), cmp.Compare(a.at, b.at))
	})
	c.apply()
	return c
}

// Present leaves out the records of which everything was taken back, such as those of an
// import that was undone: their history is kept, there is nothing to show.
func Present(list []Summary) []Summary {
	gone := func(s Summary) bool { return s.Name == "" && s.Species == 0 && s.Visits == 0 }
	if !slices.ContainsFunc(list, gone) {
		return list
	}
	return slices.DeleteFunc(slices.Clone(list), gone)
}

// attention says why a patient needs somebody, and in how many days it is due.
func attention(s *Summary, now time.Time) (why Attention, days int) {
	if s.Status != exam.Active {
		return NeverDue, 0
	}
	days = dueIn(s, now)
	switch {
	case days < 0:
		why = Overdue
	case days == 0:
		why = DueToday
	default:
		why = DueLater
	}
	if !s.OpenVisit.IsZero() {
		why = Unfinished
	}
	for _, a := range s.Alerts {
		if a.Answered {
			continue
		}
		switch a.Urgency {
		case "now":
			why = min(why, AlertNow)
		case "today":
			why = min(why, AlertToday)
		default:
			why = min(why, AlertSoon)
		}
	}
	return why, days
}

func caseRow(s Summary, now time.Time) CaseRow {
	r := CaseRow{Summary: s, Cross: CrossFrom(s.Motor, s.Lameness, s.TailTone), Change: MarkOf(s.Direction)}
	r.Attention, r.Days = attention(&s, now)
	if s.Visits == 0 {
		r.LastWords = words.T("no visit yet")
	} else {
		ago := DaysBetween(s.Last, now)
		switch {
		case ago == 0:
			r.LastWords = words.T("today")
		case ago < 0:
			r.LastWords = Day(s.Last)
		default:
			r.LastWords = words.N(ago, "%s (%d day ago)", "%s (%d days ago)", Day(s.Last), ago)
		}
	}
	for _, a := range s.Alerts {
		if !a.Answered {
			r.Alerts = append(r.Alerts, words.Of(a.Urgency))
		}
	}
	switch {
	case s.Status != exam.Active:
		r.DueWords = words.Of(s.Status.String())
	case !s.OpenVisit.IsZero():
		r.DueWords = words.T("exam not closed")
	case r.Days < 0:
		r.DueWords = words.N(-r.Days, "%d day overdue", "%d days overdue", -r.Days)
	case r.Days == 0:
		r.DueWords = words.T("due today")
	default:
		r.DueWords = words.N(r.Days, "due in %d day", "due in %d days", r.Days)
	}
	return r
}

// dueIn returns the days from today until the next visit: the date agreed, or so many days
// after the last visit; today for a patient without one.
func dueIn(s *Summary, now time.Time) int {
	if at, ok := s.NextVisit.Time(); ok && (s.Visits == 0 || at.After(s.Last)) {
		return DaysBetween(now, time.Date(at.Year(), at.Month(), at.Day(), 12, 0, 0, 0, now.Location()))
	}
	if s.Visits == 0 {
		return 0
	}
	every := s.RecheckDays
	if every == 0 {
		every = usualRecheck
	}
	return DaysBetween(now, s.Last.In(now.Location()).AddDate(0, 0, every))
}

// DaysBetween returns the calendar days from one instant to another, each in its own
// offset, negative where the second lies on an earlier day.
func DaysBetween(from, to time.Time) int {
	a := time.Date(from.Year(), from.Month(), from.Day(), 0, 0, 0, 0, time.UTC)
	b := time.Date(to.Year(), to.Month(), to.Day(), 0, 0, 0, 0, time.UTC)
	return int(b.Sub(a).Hours() / 24)
}

// Search shows only the patients whose name, owner, breed or problem fits the query, best
// first. The empty query shows all, by attention.
func (c *Caseload) Search(query string) {
	if query = strings.TrimSpace(query); query != c.query {
		c.query = query
		c.apply()
	}
}

// Query returns the search as given.
func (c *Caseload) Query() string { return c.query }

// HideInactive leaves discharged and dead patients out.
func (c *Caseload) HideInactive(hide bool) {
	if hide != c.hide {
		c.hide = hide
		c.apply()
	}
}

// OnlyToday shows only those with an alert, an unfinished exam, overdue or due today.
func (c *Caseload) OnlyToday(only bool) {
	if only != c.today {
		c.today = only
		c.apply()
	}
}

// Len returns how many patients are shown.
func (c *Caseload) Len() int { return len(c.shown) }

// Total returns how many patients there are.
func (c *Caseload) Total() int { return len(c.all) }

// Row returns the i-th patient shown.
func (c *Caseload) Row(i int) CaseRow {
	h := c.shown[i]
	r := caseRow(c.list[c.all[h.row].at], c.now)
	r.Matches = h.spelled
	for f, at := range h.found {
		if at == 0 {
			continue
		}
		first := utf8.RuneCountInString(c.folded[f][h.row][:at-1])
		m := Match{Field: caseFields[f].field}
		for k := range utf8.RuneCountInString(fold(c.query)) {
			m.At = append(m.At, first+k)
		}
		r.Matches = append(r.Matches, m)
	}
	return r
}

// ID returns the i-th patient shown.
func (c *Caseload) ID(i int) exam.ID { return c.list[c.all[c.shown[i].row].at].ID }

// Rows returns the patients shown.
func (c *Caseload) Rows() []CaseRow {
	out := make([]CaseRow, len(c.shown))
	for i := range out {
		out[i] = c.Row(i)
	}
	return out
}

// Counts says how many active patients stand in each state, for the line above the list.
func (c *Caseload) Counts() (alerts, overdue, today int) {
	for _, x := range c.all {
		switch {
		case x.attention <= AlertSoon:
			alerts++
		case x.attention == Overdue:
			overdue++
		case x.attention == DueToday || x.attention == Unfinished:
			today++
		}
	}
	return alerts, overdue, today
}

// Words is the line above the list.
func (c *Caseload) Words() string {
	if c.query != "" {
		return words.N(len(c.shown), "%d patient found", "%d patients found", len(c.shown))
	}
	a, o, t := c.Counts()
	return words.N(len(c.all), "%d patient", "%d patients", len(c.all)) + " · " +
		words.N(a, "%d with an alert", "%d with an alert", a) + " · " +
		words.T("%d overdue", o) + " · " + words.T("%d today", t)
}

func (c *Caseload) keep(x place) bool {
	return (!c.hide || x.attention != NeverDue) && (!c.today || x.attention <= DueToday)
}

// texts lets the fuzzy matcher read one field of all rows.
type texts []string

func (t texts) String(i int) string { return t[i] }
func (t texts) Len() int            { return len(t) }

// apply fills shown from the query and the filters.
func (c *Caseload) apply() {
	c.shown = c.shown[:0]
	if c.query == "" {
		c.shown = slices.Grow(c.shown, len(c.all))
		for i, x := range c.all {
			if c.keep(x) {
				c.shown = append(c.shown, hit{row: i})
			}
		}
		return
	}
	if c.folded[0] == nil {
		for f := range caseFields {
			c.folded[f] = make([]string, len(c.all))
			for i, x := range c.all {
				c.folded[f][i] = fold(caseFields[f].text(c.list[x.at]))
			}
		}
	}
	q := fold(c.query)
	place := make([]int, len(c.all)) // one more than the row's place in hits
	var hits []hit
	add := func(row, score int) *hit {
		if place[row] == 0 {
			hits = append(hits, hit{row: row, score: score})
			place[row] = len(hits)
		}
		h := &hits[place[row]-1]
		h.score = max(h.score, score)
		return h
	}
	for f := range caseFields {
		for i, text := range c.folded[f] {
			at := strings.Index(text, q)
			if at < 0 {
				continue
			}
			score := 1000 + caseFields[f].weight
			if at == 0 {
				score += 200
			} else if text[at-1] == ' ' {
				score += 100
			}
			add(i, score).found[f] = at + 1
		}
	}
	// Spelling is forgiven only where nothing was found as typed: letters in order, not far apart.
	if len(hits) == 0 && utf8.RuneCountInString(q) >= 3 {
		for f := range caseFields {
			for _, m := range fuzzy.FindFromNoSort(q, texts(c.folded[f])) {
				if m.Score <= 0 {
					continue
				}
				h := add(m.Index, m.Score+caseFields[f].weight)
				h.spelled = append(h.spelled, Match{caseFields[f].field, runePositions(c.folded[f][m.Index], m.MatchedIndexes)})
			}
		}
	}
	for _, h := range hits {
		if c.keep(c.all[h.row]) {
			c.shown = append(c.shown, h)
		}
	}
	slices.SortFunc(c.shown, func(a, b hit) int { return cmp.Or(cmp.Compare(b.score, a.score), cmp.Compare(a.row, b.row)) })
}

// runePositions turns byte offsets into rune positions.
func runePositions(s string, bytes []int) []int {
	out := make([]int, 0, len(bytes))
	for _, b := range bytes {
		if b <= len(s) {
			out = append(out, utf8.RuneCountInString(s[:b]))
		}
	}
	return out
}

// fold makes text comparable: lower case, the accents of Latin letters dropped, letter by
// letter, so that positions stay those of the text shown.
func fold(s string) string {
	return strings.Map(func(r rune) rune {
		r = unicode.ToLower(r)
		if r < 0x80 {
			return r
		}
		for plain, accented := range accents {
			if strings.ContainsRune(accented, r) {
				return plain
			}
		}
		return r
	}, s)
}

// accents lists the accented letters that are found by their plain ones.
var accents = map[rune]string{'a': "áàâäãåā", 'c': "çćč", 'e': "éèêëēę", 'i': "íìîïī", 'n': "ñńň", 'o': "óòôöõøō",
	's': "śš", 'u': "úùûüū", 'y': "ýÿ", 'z': "źżž"}
