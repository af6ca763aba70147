package view

import (
	"cmp"
	"errors"
	"fmt"
	"slices"
	"strings"
	"time"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// Cell is one place of the grid: a finding, or a measured value.
type Cell struct {
	Key     exam.Key     // of a finding
	Measure exam.Measure // not NoMeasure: the cell holds a measured value instead
	Site    exam.Site    // of either
	Row     int

	Today   exam.Finding
	Entered bool // today's finding or reason is there
	Value   exam.Measured

	Last    exam.Finding // last visit's finding of this cell
	HasLast bool
	LastVal exam.Measured // last visit's value of this measure

	Barred   string // the precaution that bars the test, in words; "" where none does
	Override string // why it is done all the same
	Why      string // why it is asked beyond the protocol: "abnormal last time", "due in a limb without movement"
	NotAsked string // why it is not asked now: "the limb moves on purpose"; "" where it is
}

// IsMeasure reports whether the cell holds a measured value.
func (c Cell) IsMeasure() bool { return c.Measure != exam.NoMeasure }

// Done reports whether the walk has nothing left to ask of the cell.
func (c Cell) Done() bool { return c.Entered || (c.Barred != "" && c.Override == "") }

// Name names the cell in full.
func (c Cell) Name() string {
	if c.IsMeasure() {
		n := MeasureName(c.Measure)
		if c.Site != exam.NoSite && c.Site != exam.Midline {
			n += ", " + SiteName(c.Site)
		}
		return n
	}
	return CellName(c.Key)
}

// Row is one line of the grid.
type Row struct {
	Item     exam.Item
	Measure  exam.Measure
	Name     string
	Segments string   // the segments it tests, in small type
	Heading  Position // under which heading it stands
	Cells    []int    // in the order of the item's sites
	stage    Position
}

// Columns of the grid for cells on limbs; cells elsewhere follow as the row needs.
const (
	ColumnThoracicLeft = iota
	ColumnThoracicRight
	ColumnPelvicLeft
	ColumnPelvicRight
	ColumnElsewhere
)

// Column returns the grid column of a site.
func Column(s exam.Site) int {
	if s.IsLimb() {
		return int(s - exam.ThoracicLeft)
	}
	return ColumnElsewhere
}

// CellChange is what one action did to one cell.
type CellChange struct {
	Key           exam.Key
	Before, After exam.Finding
	Had, Has      bool
}

// MeasureChange is what one action did to one measured value; Had and Has as in CellChange.
type MeasureChange struct {
	Key           string
	Before, After exam.Measured
	Had, Has      bool
}

// Batch is one action, to be written atomically.
type Batch struct {
	Visit    exam.ID
	Patient  exam.ID
	Cells    []CellChange
	Measures []MeasureChange
	// Head is set where something of the visit around the exam changed (surface, note,
	// treatments …): the visit without findings and measures, before and after.
	Head   bool
	Before exam.Visit
	After  exam.Visit
	Reason string // of an amendment, after closing
	Undo   bool   // takes an earlier action back
}

// Empty reports whether the action changed nothing.
func (b Batch) Empty() bool { return len(b.Cells) == 0 && len(b.Measures) == 0 && !b.Head }

// Mode is what the next key means.
type Mode uint8

// The modes of the grid.
const (
	Grading   Mode = iota // digits grade
	Reasoning             // a letter says why the test was not done
	Levelling             // arrows or a name choose the vertebra
	Typing                // free text, or a number
)

// ExamInput is what an exam sheet starts from.
type ExamInput struct {
	Patient  exam.Patient
	Visit    exam.Visit   // today's, new or half done
	Earlier  []exam.Visit // the visits before, oldest first
	Items    []exam.Item  // of the protocol, in any order
	Measures []exam.Measure
	Units    exam.Units            // that measures are shown and typed in
	Extra    []exam.Key            // cells asked beside the protocol
	Barred   func(exam.Key) string // the precaution that bars a cell, in words, or ""
	// Agenda says what is asked once today's findings are known: a limb found without movement
	// adds tests. May be nil.
	Agenda   func(today exam.Visit) exam.Agenda
	Posture  Posture
	Resume   exam.Key               // the cell to start at; zero: after the last one entered
	Segments func(exam.Item) string // the segments that an item tests, in short; may be nil

	// Save takes one action and must not block. May be nil.
	Save func(Batch)
	// Changed is called after every action. May be nil.
	Changed func()
	// Now gives the time of closing and of amendments; nil is time.Now.
	Now func() time.Time
}

// ExamSheet is the grid: today's exam in the order of the walk, with the keys that fill it.
type ExamSheet struct {
	in    ExamInput
	visit exam.Visit
	last  exam.Visit // the visit before; zero where there is none
	has   bool

	cells []Cell
	rows  []Row
	steps []Step
	index map[exam.Key]int
	mIdx  map[string]int

	focus  int // index of a step
	mode   Mode
	text   string        // typed in Levelling and Typing
	level  exam.Vertebra // proposed in Levelling
	peeked map[exam.Key]bool
	amend  string // reason of amendments; not empty while a closed visit may be edited
	block  int    // number of the last bulk fill

	undo, redo []action
}

// action is one undoable step.
type action struct {
	batch  Batch
	before int // step in focus before
	after  int
}

// NewExamSheet lays out the grid. It refuses an exam of another patient.
func NewExamSheet(in ExamInput) (*ExamSheet, error) {
	if in.Visit.Patient != in.Patient.ID {
		return nil, errors.New(words.T("This visit belongs to another animal."))
	}
	if in.Now == nil {
		in.Now = time.Now
	}
	s := &ExamSheet{in: in, visit: in.Visit, peeked: map[exam.Key]bool{}}
	s.visit.Findings = slices.Clone(in.Visit.Findings)
	s.visit.Measures = slices.Clone(in.Visit.Measures)
	slices.SortStableFunc(s.visit.Findings, func(a, b exam.Finding) int { return compareKeys(a.Key(), b.Key()) })
	for _, v := range in.Earlier {
		if v.ID != in.Visit.ID && !v.Examined.After(in.Visit.Examined) && v.ID != in.Visit.RepeatOf {
			s.last, s.has = v, true
		}
	}
	s.layout()
	s.block = s.lastBlock()
	s.focus = s.startStep()
	return s, nil
}

// Blind reports whether earlier grades are hidden, since this visit measures how well
// two exams of one day agree.
func (s *ExamSheet) Blind() bool { return !s.visit.RepeatOf.IsZero() }

// layout makes rows, cells and walk.
func (s *ExamSheet) layout() {
	want := map[exam.Item]bool{}
	for _, i := range s.in.Items {
		want[i] = true
	}
	extra := map[exam.Item][]exam.Key{}
	note := func(k exam.Key) {
		if !want[k.Item] || k.Digit != exam.AnyDigit || k.Joint != exam.NoJoint {
			if !slices.Contains(extra[k.Item], k) {
				extra[k.Item] = append(extra[k.Item], k)
			}
		}
	}
	for _, k := range s.in.Extra {
		note(k)
	}
	for _, f := range s.visit.Findings {
		note(f.Key())
	}
	var items []exam.Item
	for _, i := range exam.Items() {
		if want[i] || len(extra[i]) > 0 {
			items = append(items, i)
		}
	}
	slices.SortStableFunc(items, exam.CompareWalk)
	s.cells, s.rows, s.index, s.mIdx = nil, nil, map[exam.Key]int{}, map[string]int{}
	for _, m := range s.measureList() {
		s.addMeasureRow(m)
	}
	for _, i := range items {
		r := Row{Item: i, Name: ItemName(i), stage: stage(i), Heading: s.heading(stage(i))}
		if s.in.Segments != nil {
			r.Segments = s.in.Segments(i)
		}
		var keys []exam.Key
		if want[i] {
			for _, site := range i.Info().Sites {
				keys = append(keys, exam.Key{Item: i, Site: site})
			}
		}
		keys = append(keys, extra[i]...)
		slices.SortStableFunc(keys, compareKeys)
		for _, k := range keys {
			r.Cells = append(r.Cells, len(s.cells))
			s.index[k] = len(s.cells)
			s.cells = append(s.cells, s.newCell(k, len(s.rows)))
		}
		s.rows = append(s.rows, r)
	}
	s.steps = steps(s.rows, s.cells, s.in.Posture, s.painless())
	s.refresh()
}

// heading is the position under whose heading a stage's rows stand.
func (s *ExamSheet) heading(p Position) Position {
	if p == OnRight {
		switch s.in.Posture {
		case Sternal:
			return OnChest
		case Held:
			return InArms
		}
	}
	return p
}

func compareKeys(a, b exam.Key) int {
	return cmp.Or(cmp.Compare(a.Item, b.Item), cmp.Compare(a.Site, b.Site), cmp.Compare(a.Digit, b.Digit), cmp.Compare(a.Joint, b.Joint))
}

func (s *ExamSheet) measureList() []exam.Measure {
	list := slices.Clone(s.in.Measures)
	for _, v := range s.visit.Measures {
		if !slices.Contains(list, v.Measure) {
			list = append(list, v.Measure)
		}
	}
	return list
}

func (s *ExamSheet) addMeasureRow(m exam.Measure) {
	r := Row{Measure: m, Name: MeasureName(m), Segments: s.UnitOf(m), stage: HandsOff, Heading: HandsOff}
	sites := m.Info().Sites
	if len(sites) == 0 {
		sites = []exam.Site{exam.NoSite}
	}
	for _, site := range sites {
		c := Cell{Measure: m, Site: site, Row: len(s.rows)}
		if v, ok := s.visit.Measured(m, site); ok {
			c.Value, c.Entered = v, true
		}
		if s.has {
			if v, ok := s.last.Measured(m, site); ok {
				c.LastVal, c.HasLast = v, true
			}
		}
		s.mIdx[m.String()+"/"+site.String()] = len(s.cells)
		r.Cells = append(r.Cells, len(s.cells))
		s.cells = append(s.cells, c)
	}
	s.rows = append(s.rows, r)
}

func (s *ExamSheet) newCell(k exam.Key, row int) Cell {
	c := Cell{Key: k, Site: k.Site, Row: row}
	if f, ok := s.visit.Find(k); ok {
		c.Today, c.Entered = f, true
	}
	if s.has {
		c.Last, c.HasLast = s.last.Find(k)
	}
	if s.in.Barred != nil {
		c.Barred = s.in.Barred(k)
	}
	if c.Barred != "" && c.Entered && c.Today.Result.Reason() != exam.NotSafe {
		c.Override = c.Today.Note
		if c.Override == "" {
			c.Override = words.T("done before the precaution was noted")
		}
	}
	if c.HasLast && c.Last.Abnormal() && !slices.Contains(s.in.Items, k.Item) {
		c.Why = words.T("abnormal last time")
	}
	return c
}

// painless orders spinal sites from the end where pain is least likely: where last visit
// or the file's level lies in the cranial half, palpation begins caudally, else cranially.
func (s *ExamSheet) painless() func(a, b exam.Site) int {
	caudalFirst := false
	for _, p := range s.in.Patient.Problems {
		if v, _, err := exam.ParseLevelRange(p.Level, s.in.Patient.Species); err == nil && p.Resolved == "" {
			caudalFirst = v.Region() == exam.RegionC
		}
	}
	if s.has {
		worst := int8(0)
		for _, f := range s.last.Findings {
			if g, ok := f.Result.Grade(); ok && f.Item == exam.SpinalPain && g > worst {
				worst = g
				caudalFirst = f.Site <= exam.MidThoracic
			}
		}
	}
	return func(a, b exam.Site) int {
		if caudalFirst {
			return int(b) - int(a)
		}
		return int(a) - int(b)
	}
}

// refresh recomputes which cells are asked, by the rules that depend on today's findings.
func (s *ExamSheet) refresh() {
	for i := range s.cells {
		c := &s.cells[i]
		if c.IsMeasure() {
			continue
		}
		c.NotAsked = words.Of(exam.NotAsked(s.visit, c.Key))
		if c.Key.Item == exam.DeepPain {
			c.Why = ""
			if c.NotAsked == "" && exam.DeepPainDue(s.visit, c.Key.Site) {
				c.Why = words.T("due: no movement, and the surface is not felt or not tested")
			}
		}
	}
}

// active reports whether the walk stops at a step.
func (s *ExamSheet) active(k int) bool {
	st := s.steps[k]
	c := &s.cells[st.Cell]
	if c.Barred != "" && c.Override == "" {
		return false
	}
	if st.Again {
		g, ok := c.Today.Result.Grade()
		return ok && g == 0 && c.Today.Note != Undermost && c.Today.How == exam.Examined
	}
	return c.NotAsked == "" || c.Entered
}

// Undermost is the note of a reflex that was absent with the limb uppermost and tested
// again with the limb undermost.
const Undermost = "tested undermost"

// open reports whether a step still waits for an answer.
func (s *ExamSheet) open(k int) bool {
	if !s.active(k) {
		return false
	}
	if s.steps[k].Again {
		return true
	}
	return !s.cells[s.steps[k].Cell].Entered
}

// startStep returns the step to begin at: the one asked for, or the first open one after
// the last that was answered, or the first open one.
func (s *ExamSheet) startStep() int {
	if s.in.Resume != (exam.Key{}) {
		for k, st := range s.steps {
			if !s.cells[st.Cell].IsMeasure() && s.cells[st.Cell].Key == s.in.Resume {
				return k
			}
		}
	}
	last := -1
	for k, st := range s.steps {
		if !st.Again && s.cells[st.Cell].Entered && s.cells[st.Cell].Barred == "" {
			last = k
		}
	}
	for k := last + 1; k < len(s.steps); k++ {
		if s.open(k) {
			return k
		}
	}
	for k := range s.steps {
		if s.open(k) {
			return k
		}
	}
	return max(0, min(last, len(s.steps)-1))
}

// Visit returns today's visit as entered so far. The slices in it are copies.
func (s *ExamSheet) Visit() exam.Visit {
	v := s.visit
	v.Findings = slices.Clone(s.visit.Findings)
	v.Measures = slices.Clone(s.visit.Measures)
	return v
}

// Patient returns the animal.
func (s *ExamSheet) Patient() exam.Patient { return s.in.Patient }

// Last returns the visit before, and false where there is none or the exam is blind.
func (s *ExamSheet) Last() (exam.Visit, bool) { return s.last, s.has && !s.Blind() }

// Rows returns the lines of the grid in walk order. Shared: do not change.
func (s *ExamSheet) Rows() []Row { return s.rows }

// Cells returns the cells. Shared: do not change; it is the same slice until AddCell.
func (s *ExamSheet) Cells() []Cell { return s.cells }

// Cell returns the cell in focus, and false in an empty protocol.
func (s *ExamSheet) Cell() (Cell, bool) {
	if len(s.steps) == 0 {
		return Cell{}, false
	}
	return s.cells[s.steps[s.focus].Cell], true
}

// FocusIndex returns the index of the cell in focus, -1 where there is none.
func (s *ExamSheet) FocusIndex() int {
	if len(s.steps) == 0 {
		return -1
	}
	return s.steps[s.focus].Cell
}

// Step returns the step in focus.
func (s *ExamSheet) Step() (Step, bool) {
	if len(s.steps) == 0 {
		return Step{}, false
	}
	return s.steps[s.focus], true
}

// Mode returns what the next key means, and the text typed so far.
func (s *ExamSheet) Mode() (Mode, string) {
	if s.mode == Levelling && s.text == "" {
		return s.mode, s.level.String()
	}
	return s.mode, s.text
}

// ShowLast reports whether last visit's bead stands in a cell: only after today's grade
// is given, or when somebody peeked; never in a blind exam.
func (s *ExamSheet) ShowLast(cell int) bool {
	if cell < 0 || cell >= len(s.cells) || s.Blind() || !s.cells[cell].HasLast {
		return false
	}
	c := s.cells[cell]
	return c.Entered || s.peeked[c.Key]
}

// Grades returns the buttons of a cell: each grade of its item with its word.
func (s *ExamSheet) Grades(cell int) []GradeButton {
	c := s.cells[cell]
	if c.IsMeasure() {
		return nil
	}
	in := c.Key.Item.Info()
	out := make([]GradeButton, len(in.Grades))
	for k, w := range in.Grades {
		g := in.First + int8(k)
		f := exam.Finding{Item: c.Key.Item, Site: c.Key.Site, Result: exam.Graded(g)}
		out[k] = GradeButton{Grade: g, Word: words.Of(w), Normal: f.Normal(), Bead: BeadOf(f)}
		if now, ok := c.Today.Result.Grade(); ok && now == g {
			out[k].Chosen = true
		}
	}
	return out
}

// GradeButton is one grade to choose.
type GradeButton struct {
	Grade  int8
	Word   string
	Normal bool
	Chosen bool
	Bead   Bead
}

// Progress is how far the walk is.
type Progress struct {
	Done, Total int
	Position    Position
	Words       string // "34 of 87, lying on its right"
}

// Progress returns how far the walk is and where the animal should be.
func (s *ExamSheet) Progress() Progress {
	var p Progress
	for k := range s.steps {
		if !s.active(k) {
			continue
		}
		p.Total++
		if !s.open(k) {
			p.Done++
		}
	}
	if len(s.steps) > 0 {
		p.Position = s.steps[s.focus].Position
	}
	p.Words = words.T("%d of %d, %s", p.Done, p.Total, LowerFirst(p.Position.Words()))
	return p
}

// MapOpen reports whether the cord map may be shown by itself: half of the walk is done,
// since a map seen early bends what is found late. The screen opens it on request before.
func (s *ExamSheet) MapOpen() bool {
	p := s.Progress()
	return p.Total > 0 && 2*p.Done >= p.Total
}

// Closed reports whether the visit is closed.
func (s *ExamSheet) Closed() bool { return s.visit.State == exam.Closed }

// Amending reports whether a closed visit is open for amendments, and the reason given.
func (s *ExamSheet) Amending() (string, bool) { return s.amend, s.amend != "" }

// errClosed is what every edit of a closed visit says until a reason for amending is given.
func errClosed() error {
	return errors.New(words.T("This visit is closed. Give a reason to amend it."))
}

// Amend opens a closed visit for amendments, each of which will carry the reason. The
// empty reason ends amending.
func (s *ExamSheet) Amend(reason string) error {
	reason = strings.TrimSpace(reason)
	if !s.Closed() && reason != "" {
		return errors.New(words.T("This visit is still open; it needs no amendment."))
	}
	s.amend = reason
	s.undo, s.redo = nil, nil
	s.changed()
	return nil
}

// Close closes the visit. Alerts that ask for the veterinarian now and are unanswered are
// given in words; while there is one, the visit stays open. The closing is queued behind
// every entry, so that it holds what was entered before it. Undo stops here.
func (s *ExamSheet) Close(unanswered []string) error {
	if s.Closed() {
		return errors.New(words.T("This visit is already closed."))
	}
	if len(unanswered) > 0 {
		return errors.New(words.N(len(unanswered), "Answer the alert first: %s", "Answer the alerts first: %s", joinWords(unanswered)))
	}
	err := s.EditHead(func(v *exam.Visit) {
		v.State = exam.Closed
		v.ClosedAt = s.in.Now()
	})
	if err != nil {
		return err
	}
	s.undo, s.redo = nil, nil
	return nil
}

func (s *ExamSheet) changed() {
	if s.in.Changed != nil {
		s.in.Changed()
	}
}

// EditHead changes the visit around the exam (conditions, treatments, note …) as one
// action. The function must leave findings and measures alone.
func (s *ExamSheet) EditHead(edit func(*exam.Visit)) error {
	if s.Closed() && s.amend == "" {
		return errClosed()
	}
	before := s.head()
	after := s.head() // lists of its own: an edit in place must differ from what was before
	edit(&after)
	after.Findings, after.Measures = nil, nil
	b := Batch{Head: true, Before: before, After: after}
	s.do(b, s.focus)
	return nil
}

// head returns the visit without findings and measures, its slices cloned.
func (s *ExamSheet) head() exam.Visit {
	v := s.visit
	v.Findings, v.Measures = nil, nil
	v.Doses = slices.Clone(v.Doses)
	v.Treatments = slices.Clone(v.Treatments)
	v.Home = slices.Clone(v.Home)
	v.Attachments = slices.Clone(v.Attachments)
	v.Stim = slices.Clone(v.Stim)
	v.Amendments = slices.Clone(v.Amendments)
	v.Answers = slices.Clone(v.Answers)
	return v
}

// do applies a batch, remembers it for undo and hands it to the saver.
func (s *ExamSheet) do(b Batch, focusAfter int) {
	if b.Empty() {
		return
	}
	b.Visit, b.Patient, b.Reason = s.visit.ID, s.visit.Patient, s.amend
	s.undo = append(s.undo, action{batch: b, before: s.focus, after: focusAfter})
	s.redo = nil
	s.apply(b)
	s.focus = focusAfter
	s.renew(b)
	if s.in.Save != nil {
		s.in.Save(b)
	}
	s.changed()
}

// renew asks for more where today's findings call for it. What was added stays.
func (s *ExamSheet) renew(b Batch) {
	if s.in.Agenda == nil {
		return
	}
	matters := false
	for _, c := range b.Cells {
		switch c.Key.Item {
		case exam.VoluntaryMotor, exam.SuperficialPain:
			matters = true
		}
	}
	if !matters {
		return
	}
	a := s.in.Agenda(s.visit)
	items, extra := slices.Clone(s.in.Items), slices.Clone(s.in.Extra)
	for _, i := range a.Items {
		if !slices.Contains(items, i) {
			items = append(items, i)
		}
	}
	for _, k := range a.Extra {
		if !slices.Contains(extra, k) && s.index[k] == 0 && (len(s.cells) == 0 || s.cells[0].Key != k) {
			extra = append(extra, k)
		}
	}
	if len(items) == len(s.in.Items) && len(extra) == len(s.in.Extra) {
		return
	}
	at := s.cells[s.steps[s.focus].Cell]
	next := !s.open(s.focus)
	s.in.Items, s.in.Extra = items, extra
	s.relayout()
	if next && at.Key.Item != exam.NoItem {
		s.focus = s.after(s.focus, Batch{})
	}
}

// apply makes the batch true in the visit and the cells.
func (s *ExamSheet) apply(b Batch) {
	for _, c := range b.Cells {
		s.setFinding(c.Key, c.After, c.Has)
	}
	for _, m := range b.Measures {
		s.setMeasure(m.Key, m.After, m.Has)
	}
	if b.Head {
		f, m := s.visit.Findings, s.visit.Measures
		s.visit = b.After
		s.visit.Findings, s.visit.Measures = f, m
	}
	s.refresh()
}

func (s *ExamSheet) setFinding(k exam.Key, f exam.Finding, has bool) {
	at, found := slices.BinarySearchFunc(s.visit.Findings, k, func(f exam.Finding, k exam.Key) int { return compareKeys(f.Key(), k) })
	switch {
	case has && found:
		s.visit.Findings[at] = f
	case has:
		s.visit.Findings = slices.Insert(s.visit.Findings, at, f)
	case found:
		s.visit.Findings = slices.Delete(s.visit.Findings, at, at+1)
	}
	if i, ok := s.index[k]; ok {
		c := &s.cells[i]
		c.Today, c.Entered = f, has
		if !has {
			c.Today = exam.Finding{}
		}
	}
}

func (s *ExamSheet) setMeasure(key string, m exam.Measured, has bool) {
	at := slices.IndexFunc(s.visit.Measures, func(x exam.Measured) bool { return x.Key() == key })
	switch {
	case has && at >= 0:
		s.visit.Measures[at] = m
	case has:
		s.visit.Measures = append(s.visit.Measures, m)
	case at >= 0:
		s.visit.Measures = slices.Delete(s.visit.Measures, at, at+1)
	}
	parts := strings.SplitN(key, "/", 3)
	if i, ok := s.mIdx[strings.Join(parts[:min(2, len(parts))], "/")]; ok {
		c := &s.cells[i]
		c.Value, c.Entered = m, has
		if !has {
			c.Value = exam.Measured{}
		}
	}
}

// Undo takes the last action back, as far as the opening of the sheet or its closing, and
// returns false where nothing is left.
func (s *ExamSheet) Undo() bool {
	if len(s.undo) == 0 {
		return false
	}
	a := s.undo[len(s.undo)-1]
	s.undo = s.undo[:len(s.undo)-1]
	s.redo = append(s.redo, a)
	s.run(invert(a.batch), a.before)
	return true
}

// Redo does again what Undo took back.
func (s *ExamSheet) Redo() bool {
	if len(s.redo) == 0 {
		return false
	}
	a := s.redo[len(s.redo)-1]
	s.redo = s.redo[:len(s.redo)-1]
	s.undo = append(s.undo, a)
	s.run(a.batch, a.after)
	return true
}

// CanUndo and CanRedo say whether the keys would do anything.
func (s *ExamSheet) CanUndo() bool { return len(s.undo) > 0 }

// CanRedo reports whether Redo would do anything.
func (s *ExamSheet) CanRedo() bool { return len(s.redo) > 0 }

func (s *ExamSheet) run(b Batch, focus int) {
	s.apply(b)
	s.mode, s.text = Grading, ""
	s.focus = max(0, min(focus, len(s.steps)-1))
	s.renew(b)
	if s.in.Save != nil {
		s.in.Save(b)
	}
	s.changed()
}

// invert returns the batch that takes b back.
func invert(b Batch) Batch {
	out := b
	out.Undo = true
	out.Cells = make([]CellChange, len(b.Cells))
	for i, c := range b.Cells {
		out.Cells[i] = CellChange{Key: c.Key, Before: c.After, After: c.Before, Had: c.Has, Has: c.Had}
	}
	out.Measures = make([]MeasureChange, len(b.Measures))
	for i, m := range b.Measures {
		out.Measures[i] = MeasureChange{Key: m.Key, Before: m.After, After: m.Before, Had: m.Has, Has: m.Had}
	}
	out.Before, out.After = b.After, b.Before
	return out
}

func (s *ExamSheet) lastBlock() int {
	n := 0
	for _, f := range s.visit.Findings {
		var k int
		if _, err := fmt.Sscanf(f.Block, "block-%d", &k); err == nil && k > n {
			n = k
		}
	}
	return n
}
