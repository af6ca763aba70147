package view

import (
	"errors"
	"fmt"
	"slices"
	"strconv"
	"strings"
	"unicode"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// Key is one key press. Name is set for keys without a letter: Up, Down, Left, Right,
// Enter, Escape, Backspace, Tab, Space, Home, End; otherwise Rune holds the letter.
type Key struct {
	Name  string
	Rune  rune
	Ctrl  bool
	Shift bool
}

// Rune returns the Key of a letter, digit or sign.
func Rune(r rune) Key { return Key{Rune: r} }

// Named returns the Key of a key without a letter.
func Named(name string) Key { return Key{Name: name} }

// KeyHelp is one line of the sheet of keys.
type KeyHelp struct{ Keys, Does string }

// ExamKeys lists the keys of the exam grid, for the help sheet. It is the same table that
// the program's documentation prints.
func ExamKeys() []KeyHelp {
	return []KeyHelp{
		{"0 – 4", words.T("grade, and go on to the next test")},
		{words.T("digits . ,"), words.T("the value of a measure; Enter keeps it")},
		{words.T("space or n"), words.T("normal, and go on")},
		{"s =", words.T("same as last visit, and go on")},
		{"x -", words.T("not tested; then p pain, t temperament, s sedation, n not safe, o owner declined, w words, Enter without a reason")},
		{"r", words.T("the rest of this limb, or of this group, normal")},
		{"g", words.T("the rest of this group normal on all limbs")},
		{words.T("arrows"), words.T("move in the grid")},
		{words.T("Tab, Shift+Tab"), words.T("next and previous stop of the walk")},
		{words.T("Home, End"), words.T("the first and the last stop of the walk")},
		{"Enter", words.T("go to the test that would tell most")},
		{"p", words.T("peek at last visit's grade (this is kept)")},
		{"l", words.T("name the vertebra")},
		{"[ ]", words.T("pinch the medial or the lateral digit")},
		{"< >", words.T("worse on the left or on the right")},
		{words.T("Backspace"), words.T("clear this cell")},
		{"Delete", words.T("clear this cell")},
		{words.T("u or Ctrl+Z"), words.T("undo")},
		{words.T("Shift+U or Ctrl+Y"), words.T("redo")},
	}
}

// Outcome is what a key did, for the line below the grid.
type Outcome struct {
	Handled bool
	Words   string // what happened, where it is not plain to see
	Filled  int    // how many cells a bulk key filled
	Err     error  // why nothing happened
}

func did(text string) Outcome { return Outcome{Handled: true, Words: text} }

func refused(err error) Outcome { return Outcome{Handled: true, Err: err, Words: err.Error()} }

// Press acts on a key. Keys that mean nothing here come back with Handled false.
func (s *ExamSheet) Press(k Key) Outcome {
	if len(s.steps) == 0 {
		return Outcome{}
	}
	if k.Ctrl {
		switch unicode.ToLower(k.Rune) {
		case 'z':
			if k.Shift {
				return s.pressRedo()
			}
			return s.pressUndo()
		case 'y':
			return s.pressRedo()
		}
		return Outcome{}
	}
	switch s.mode {
	case Reasoning:
		return s.pressReason(k)
	case Levelling:
		return s.pressLevel(k)
	case Typing:
		return s.pressText(k)
	}
	c := s.cells[s.FocusIndex()]
	if c.IsMeasure() && (unicode.IsDigit(k.Rune) || k.Rune == '.' || k.Rune == ',') {
		s.mode, s.text = Typing, ""
		return s.pressText(k)
	}
	switch {
	case unicode.IsDigit(k.Rune) && k.Rune < 128:
		return s.outcome(s.GradeFocus(int8(k.Rune - '0')))
	case k.Name == "Space" || k.Rune == ' ' || k.Rune == 'n':
		return s.outcome(s.Normal())
	case k.Rune == 's' || k.Rune == '=':
		return s.outcome(s.SameAsLast())
	case k.Rune == 'x' || k.Rune == '-':
		if err := s.editable(c, true); err != nil {
			return refused(err)
		}
		s.mode, s.text = Reasoning, ""
		s.changed()
		return did(words.T("Not tested: p pain, t temperament, s sedation, n not safe, o owner declined, w words, Enter without a reason"))
	case k.Rune == 'r':
		return s.RestNormal(false)
	case k.Rune == 'g':
		return s.RestNormal(true)
	case k.Rune == 'p':
		return s.Peek()
	case k.Rune == 'l':
		return s.startLevel()
	case k.Rune == '[':
		return s.outcome(s.FocusDigit(exam.Medial))
	case k.Rune == ']':
		return s.outcome(s.FocusDigit(exam.Lateral))
	case k.Rune == '<':
		return s.outcome(s.SetSide(exam.Left))
	case k.Rune == '>':
		return s.outcome(s.SetSide(exam.Right))
	case k.Rune == 'u' && !k.Shift:
		return s.pressUndo()
	case k.Rune == 'U', k.Rune == 'u' && k.Shift:
		return s.pressRedo()
	}
	switch k.Name {
	case "Up":
		s.moveRow(-1)
	case "Down":
		s.moveRow(1)
	case "Left":
		s.moveColumn(-1)
	case "Right":
		s.moveColumn(1)
	case "Tab":
		if k.Shift {
			s.moveStep(-1)
		} else {
			s.moveStep(1)
		}
	case "Home":
		s.FocusStep(0)
	case "End":
		s.FocusStep(len(s.steps) - 1)
	case "Backspace", "Delete":
		return s.outcome(s.Clear())
	default:
		return Outcome{}
	}
	return Outcome{Handled: true}
}

func (s *ExamSheet) outcome(err error) Outcome {
	if err != nil {
		return refused(err)
	}
	return Outcome{Handled: true}
}

func (s *ExamSheet) pressUndo() Outcome {
	if !s.Undo() {
		return did(words.T("Nothing to undo"))
	}
	return did(words.T("Undone"))
}

func (s *ExamSheet) pressRedo() Outcome {
	if !s.Redo() {
		return did(words.T("Nothing to redo"))
	}
	return did(words.T("Done again"))
}

// editable says why a cell cannot be changed, nil where it can.
func (s *ExamSheet) editable(c Cell, untested bool) error {
	if s.Closed() && s.amend == "" {
		return errClosed()
	}
	if c.Barred != "" && c.Override == "" && !untested {
		return errors.New(words.T("Not safe: %s. To test it all the same, give a reason.", c.Barred))
	}
	return nil
}

// put enters a finding into the cell in focus and goes on.
func (s *ExamSheet) put(f exam.Finding, stay bool) error {
	i := s.FocusIndex()
	c := s.cells[i]
	if err := f.Validate(s.in.Patient.Species); err != nil {
		return err
	}
	b := Batch{Cells: []CellChange{{Key: c.Key, Before: c.Today, Had: c.Entered, After: f, Has: true}}}
	if c.Entered && c.Today == f {
		b = Batch{}
	}
	to := s.focus
	if !stay {
		to = s.after(s.focus, b)
	}
	if b.Empty() {
		s.focus = to
		s.changed()
		return nil
	}
	s.do(b, to)
	return nil
}

// after returns the step to go to once b holds: the next open step, or the step behind
// where nothing is open any more.
func (s *ExamSheet) after(from int, b Batch) int {
	// The rules that depend on findings look at the visit, so the batch is tried out.
	if len(b.Cells) > 0 {
		undo := invert(b)
		s.apply(b)
		defer s.apply(undo)
	}
	for n := 1; n <= len(s.steps); n++ {
		if k := (from + n) % len(s.steps); s.open(k) {
			return k
		}
	}
	return min(from+1, len(s.steps)-1)
}

// fresh starts today's finding for the cell in focus.
func (s *ExamSheet) fresh() exam.Finding {
	c := s.cells[s.FocusIndex()]
	f := exam.Finding{Item: c.Key.Item, Site: c.Key.Site, Digit: c.Key.Digit, Joint: c.Key.Joint, Seen: s.peeked[c.Key] && !c.Entered || c.Entered && c.Today.Seen}
	if c.Entered && c.HasLast && !s.Blind() {
		// Last visit's bead stands beside a grade once it is given: who grades again has seen it.
		f.Seen = true
	}
	if c.Override != "" {
		f.Note = c.Override
	}
	if s.steps[s.focus].Again {
		f.Note = Undermost
	}
	return f
}

// GradeFocus grades the cell in focus and goes on to the next open one; an item that
// needs a vertebra with this grade asks for it first.
func (s *ExamSheet) GradeFocus(g int8) error {
	c := s.cells[s.FocusIndex()]
	if err := s.editable(c, false); err != nil {
		return err
	}
	if c.IsMeasure() {
		return s.SetMeasure(float64(g))
	}
	f := s.fresh()
	f.Result = exam.Graded(g)
	if c.Key.Item.Has(exam.TakesLevel) && c.Entered && c.Today.Level != 0 && g != c.Key.Item.Info().Normal {
		f.Level = c.Today.Level
	}
	needs := c.Key.Item == exam.CutaneousTrunci && g == 1
	if err := s.put(f, needs); err != nil {
		return err
	}
	if needs {
		s.startLevel()
	}
	return nil
}

// Grade grades any cell, as a click does, and moves the focus there and on.
func (s *ExamSheet) Grade(cell int, g int8) error {
	if err := s.FocusCell(cell); err != nil {
		return err
	}
	return s.GradeFocus(g)
}

// Normal grades the cell in focus normal, as examined, and goes on.
func (s *ExamSheet) Normal() error {
	c := s.cells[s.FocusIndex()]
	if c.IsMeasure() {
		return errors.New(words.T("A measure has no normal grade: type its value."))
	}
	n := c.Key.Item.Info().Normal
	if n < 0 {
		return errors.New(words.T("%s has no normal grade: choose one.", ItemName(c.Key.Item)))
	}
	return s.GradeFocus(n)
}

// SameAsLast copies last visit's grade, level and side into the cell in focus. Items that
// the bulk keys never fill are not copied: they must be looked at.
func (s *ExamSheet) SameAsLast() error {
	c := s.cells[s.FocusIndex()]
	if err := s.editable(c, false); err != nil {
		return err
	}
	switch {
	case c.IsMeasure():
		return errors.New(words.T("A measure is taken anew: type its value."))
	case s.Blind():
		return errors.New(words.T("This is a repeat exam: earlier grades stay hidden."))
	case c.Key.Item.Has(exam.NoBulk):
		return errors.New(words.T("%s is never copied: look, and grade it.", ItemName(c.Key.Item)))
	case !c.HasLast || !c.Last.Result.Tested():
		return errors.New(words.T("%s was not tested last time.", c.Name()))
	}
	f := s.fresh()
	f.Result, f.Level, f.Side, f.How, f.Seen = c.Last.Result, c.Last.Level, c.Last.Side, exam.SameAsLast, true
	return s.put(f, false)
}

// NotTested enters a reason for the cell in focus and goes on. OtherReason takes a note.
func (s *ExamSheet) NotTested(r exam.Reason, note string) error {
	c := s.cells[s.FocusIndex()]
	if err := s.editable(c, true); err != nil {
		return err
	}
	if c.IsMeasure() {
		s.focus = s.after(s.focus, Batch{})
		s.changed()
		return nil
	}
	f := exam.Finding{Item: c.Key.Item, Site: c.Key.Site, Digit: c.Key.Digit, Joint: c.Key.Joint, Result: exam.Untested(r), Note: strings.TrimSpace(note)}
	return s.put(f, false)
}

// OverrideBar allows a barred cell to be tested, for a reason that is kept as its note.
func (s *ExamSheet) OverrideBar(cell int, reason string) error {
	reason = strings.TrimSpace(reason)
	if reason == "" {
		return errors.New(words.T("Say why this is tested although it is barred."))
	}
	if s.cells[cell].Barred == "" {
		return nil
	}
	s.cells[cell].Override = reason
	s.refresh()
	s.changed()
	return nil
}

// FillBarred enters «not safe» into every barred cell that is empty, as one action: the
// record says that they were left out, and why.
func (s *ExamSheet) FillBarred() int {
	if s.Closed() {
		return 0
	}
	var b Batch
	for _, c := range s.cells {
		if c.IsMeasure() || c.Barred == "" || c.Override != "" || c.Entered {
			continue
		}
		f := exam.Finding{Item: c.Key.Item, Site: c.Key.Site, Digit: c.Key.Digit, Joint: c.Key.Joint, Result: exam.Untested(exam.NotSafe)}
		b.Cells = append(b.Cells, CellChange{Key: c.Key, After: f, Has: true})
	}
	s.do(b, s.focus)
	return len(b.Cells)
}

// Clear empties the cell in focus.
func (s *ExamSheet) Clear() error {
	c := s.cells[s.FocusIndex()]
	if err := s.editable(c, true); err != nil {
		return err
	}
	if !c.Entered {
		return nil
	}
	if c.IsMeasure() {
		s.do(Batch{Measures: []MeasureChange{{Key: c.Value.Key(), Before: c.Value, Had: true}}}, s.focus)
		return nil
	}
	s.do(Batch{Cells: []CellChange{{Key: c.Key, Before: c.Today, Had: true}}}, s.focus)
	return nil
}

// RestNormal fills what is left of this limb, or of this group where the cell is on no
// limb (or whole is true: of this group on every limb), with normal. It is one look and
// one action. It never fills what the vocabulary excludes, what is barred, what is not
// asked, or what is answered already.
func (s *ExamSheet) RestNormal(whole bool) Outcome {
	if s.Closed() && s.amend == "" {
		return refused(errClosed())
	}
	here := s.cells[s.FocusIndex()]
	if here.IsMeasure() {
		return refused(errors.New(words.T("Measures are never filled in a block.")))
	}
	at := s.rows[here.Row].Heading
	s.block++
	name := fmt.Sprintf("block-%d", s.block)
	var b Batch
	left := 0
	for _, c := range s.cells {
		if c.IsMeasure() || c.Entered {
			continue
		}
		r := s.rows[c.Row]
		same := r.Heading == at && c.Key.Item.Info().Group == here.Key.Item.Info().Group
		if here.Site.IsLimb() && !whole {
			same = r.Heading == at && c.Site == here.Site
		}
		if !same {
			continue
		}
		n := c.Key.Item.Info().Normal
		if c.Barred != "" || c.NotAsked != "" || n < 0 {
			continue
		}
		if c.Key.Item.Has(exam.NoBulk) {
			left++
			continue
		}
		f := exam.Finding{Item: c.Key.Item, Site: c.Key.Site, Digit: c.Key.Digit, Joint: c.Key.Joint,
			Result: exam.Graded(n), How: exam.RestNormal, Block: name}
		b.Cells = append(b.Cells, CellChange{Key: c.Key, After: f, Has: true})
	}
	n := len(b.Cells)
	if n == 0 {
		s.block--
		if left > 0 {
			return did(words.N(left, "Nothing filled: %d test here must be looked at", "Nothing filled: %d tests here must be looked at", left))
		}
		return did(words.T("Nothing left to fill here"))
	}
	s.do(b, s.after(s.focus, b))
	out := did(words.N(n, "%d test filled normal", "%d tests filled normal", n))
	if left > 0 {
		out.Words += words.N(left, "; %d left to be looked at", "; %d left to be looked at", left)
	}
	out.Filled = n
	return out
}

// Peek shows last visit's finding of the cell in focus, and remembers that it was seen.
func (s *ExamSheet) Peek() Outcome {
	c := s.cells[s.FocusIndex()]
	switch {
	case s.Blind():
		return refused(errors.New(words.T("This is a repeat exam: earlier grades stay hidden.")))
	case c.IsMeasure() && c.HasLast:
		return did(words.T("Last time: %s", s.ValueWords(c.LastVal)))
	case !c.HasLast:
		return did(words.T("No finding last time"))
	}
	if !c.Entered {
		s.peeked[c.Key] = true
	}
	s.changed()
	return did(words.T("Last time: %s", GradeWords(c.Last)))
}

// SetSide says on which side a finding that takes one is worse.
func (s *ExamSheet) SetSide(side exam.Site) error {
	c := s.cells[s.FocusIndex()]
	if err := s.editable(c, false); err != nil {
		return err
	}
	if !c.Entered && s.focus > 0 {
		// The grade went in with the last key and the focus has moved on: the side belongs to that cell.
		for k := s.focus - 1; k >= 0; k-- {
			if p := s.cells[s.steps[k].Cell]; p.Entered && !p.IsMeasure() && p.Key.Item.Has(exam.TakesSide) {
				f := p.Today
				f.Side = side
				s.do(Batch{Cells: []CellChange{{Key: p.Key, Before: p.Today, After: f, Had: true, Has: true}}}, s.focus)
				return nil
			}
		}
	}
	if c.IsMeasure() || !c.Key.Item.Has(exam.TakesSide) || !c.Entered {
		return errors.New(words.T("There is no finding here that takes a side."))
	}
	f := c.Today
	f.Side = side
	return s.put(f, true)
}

// FocusDigit moves the focus to the same test on one digit, adding the cell if the
// protocol has it for the whole paw only.
func (s *ExamSheet) FocusDigit(d exam.Digit) error {
	c := s.cells[s.FocusIndex()]
	if c.IsMeasure() || !c.Key.Item.Has(exam.TakesDigit) || !c.Site.IsLimb() {
		return errors.New(words.T("This test is not done on a digit."))
	}
	k := c.Key
	k.Digit = d
	return s.AddCell(k)
}

// AddCell adds a test beside the protocol and moves the focus there.
func (s *ExamSheet) AddCell(k exam.Key) error {
	probe := exam.Finding{Item: k.Item, Site: k.Site, Digit: k.Digit, Joint: k.Joint}
	if err := probe.Validate(s.in.Patient.Species); err != nil {
		return err
	}
	if _, ok := s.index[k]; !ok {
		s.in.Extra = append(slices.Clone(s.in.Extra), k)
		s.relayout()
	}
	return s.FocusCell(s.index[k])
}

// SetPosture changes how the animal is held; the walk is laid out anew.
func (s *ExamSheet) SetPosture(p Posture) {
	if s.in.Posture == p {
		return
	}
	s.in.Posture = p
	s.relayout()
	s.changed()
}

// Posture returns how the animal is held.
func (s *ExamSheet) Posture() Posture { return s.in.Posture }

// relayout lays the grid out again and keeps the focus and the undo list pointing at the same cells.
func (s *ExamSheet) relayout() {
	type stop struct {
		key   exam.Key
		m     exam.Measure
		site  exam.Site
		again bool
	}
	name := func(k int) stop {
		if k < 0 || k >= len(s.steps) {
			return stop{}
		}
		st := s.steps[k]
		c := s.cells[st.Cell]
		return stop{c.Key, c.Measure, c.Site, st.Again}
	}
	old := make([]stop, len(s.steps))
	for k := range s.steps {
		old[k] = name(k)
	}
	overrides := map[exam.Key]string{}
	for _, c := range s.cells {
		if c.Override != "" {
			overrides[c.Key] = c.Override
		}
	}
	s.layout()
	for i := range s.cells {
		if o := overrides[s.cells[i].Key]; o != "" {
			s.cells[i].Override = o
		}
	}
	s.refresh()
	at := map[stop]int{}
	for k := range s.steps {
		at[name(k)] = k
	}
	move := func(k int) int {
		if k < 0 || k >= len(old) {
			return 0
		}
		if n, ok := at[old[k]]; ok {
			return n
		}
		o := old[k]
		o.again = false
		return at[o]
	}
	s.focus = move(s.focus)
	for _, list := range [][]action{s.undo, s.redo} {
		for i := range list {
			list[i].before, list[i].after = move(list[i].before), move(list[i].after)
		}
	}
}

// FocusCell moves the focus to a cell.
func (s *ExamSheet) FocusCell(cell int) error {
	if cell < 0 || cell >= len(s.cells) {
		return errors.New(words.T("There is no such cell."))
	}
	best := -1
	for k, st := range s.steps {
		if st.Cell == cell && (best < 0 || s.open(k) && !s.open(best)) {
			best = k
		}
	}
	if best < 0 {
		return errors.New(words.T("There is no such cell."))
	}
	s.mode, s.text = Grading, ""
	s.focus = best
	s.changed()
	return nil
}

// FocusKey moves the focus to a cell by its key, adding it where the protocol lacks it.
func (s *ExamSheet) FocusKey(k exam.Key) error { return s.AddCell(k) }

// FocusStep moves the focus to a step of the walk.
func (s *ExamSheet) FocusStep(k int) {
	s.mode, s.text = Grading, ""
	s.focus = max(0, min(k, len(s.steps)-1))
	s.changed()
}

// moveStep moves along the walk to the next step that is asked.
func (s *ExamSheet) moveStep(d int) {
	for k := s.focus + d; k >= 0 && k < len(s.steps); k += d {
		if s.active(k) {
			s.FocusStep(k)
			return
		}
	}
}

// moveRow moves to the cell of the row above or below that lies nearest in its column.
func (s *ExamSheet) moveRow(d int) {
	c := s.cells[s.FocusIndex()]
	for r := c.Row + d; r >= 0 && r < len(s.rows); r += d {
		best, bestAt := -1, 0
		for i, cell := range s.rows[r].Cells {
			gap := int(s.cells[cell].Site.Side()) - int(c.Site.Side())
			score := gap*gap*10 + 3*abs(Column(s.cells[cell].Site)-Column(c.Site)) + i
			if best < 0 || score < bestAt {
				best, bestAt = cell, score
			}
		}
		if best >= 0 && s.FocusCell(best) == nil {
			return
		}
	}
}

func (s *ExamSheet) moveColumn(d int) {
	i := s.FocusIndex()
	list := s.rows[s.cells[i].Row].Cells
	at := slices.Index(list, i) + d
	if at >= 0 && at < len(list) {
		_ = s.FocusCell(list[at])
	}
}

func abs(x int) int {
	if x < 0 {
		return -x
	}
	return x
}

// pressReason takes the key after «not tested».
func (s *ExamSheet) pressReason(k Key) Outcome {
	s.mode = Grading
	reason := exam.ReasonNone
	switch {
	case k.Name == "Escape":
		s.changed()
		return Outcome{Handled: true}
	case k.Rune == 'p':
		reason = exam.Pain
	case k.Rune == 't':
		reason = exam.Temperament
	case k.Rune == 's':
		reason = exam.SedationReason
	case k.Rune == 'n':
		reason = exam.NotSafe
	case k.Rune == 'o':
		reason = exam.OwnerDeclined
	case k.Rune == 'w':
		s.mode, s.text = Typing, ""
		s.changed()
		return did(words.T("Why was it not tested?"))
	case k.Name == "Enter" || k.Name == "Space" || k.Rune == ' ':
	default:
		s.mode = Reasoning
		return Outcome{Handled: true, Words: words.T("Use p, t, s, n, o, w or Enter; Escape goes back")}
	}
	return s.outcome(s.NotTested(reason, ""))
}

// pressText takes keys while a number or a reason is typed.
func (s *ExamSheet) pressText(k Key) Outcome {
	c := s.cells[s.FocusIndex()]
	switch k.Name {
	case "Escape":
		s.mode, s.text = Grading, ""
		s.changed()
		return Outcome{Handled: true}
	case "Backspace":
		if r := []rune(s.text); len(r) > 0 {
			s.text = string(r[:len(r)-1])
		}
		s.changed()
		return Outcome{Handled: true}
	case "Enter", "Tab":
		text := s.text
		if c.IsMeasure() {
			x, err := strconv.ParseFloat(strings.ReplaceAll(text, ",", "."), 64)
			if err != nil {
				return refused(&exam.Invalid{Field: c.Name(), Value: text, Allowed: words.T("a number in %s", s.UnitOf(c.Measure))})
			}
			if err := s.SetMeasure(s.in.Units.Kept(c.Measure, x)); err != nil {
				return refused(err)
			}
			s.mode, s.text = Grading, ""
			return Outcome{Handled: true}
		}
		s.mode, s.text = Grading, ""
		return s.outcome(s.NotTested(exam.OtherReason, text))
	case "Space":
		k.Rune = ' '
	}
	if k.Rune != 0 && len(s.text) < 200 {
		s.text += string(k.Rune)
		s.changed()
	}
	return Outcome{Handled: true}
}

// SetMeasure enters the value of the measure in focus, in its own unit, and goes on.
func (s *ExamSheet) SetMeasure(x float64) error {
	i := s.FocusIndex()
	c := s.cells[i]
	if s.Closed() && s.amend == "" {
		return errClosed()
	}
	if !c.IsMeasure() {
		return errors.New(words.T("This cell takes a grade, not a value."))
	}
	m := exam.Measured{Measure: c.Measure, Site: c.Site, Value: x}
	if c.Entered {
		m = c.Value
		m.Value = x
	} else if c.HasLast {
		m.At, m.Position, m.Clipped, m.Variant, m.BestEnd = c.LastVal.At, c.LastVal.Position, c.LastVal.Clipped, c.LastVal.Variant, c.LastVal.BestEnd
	}
	return s.PutMeasured(m)
}

// PutMeasured enters a measured value with how it was taken, wherever it belongs.
func (s *ExamSheet) PutMeasured(m exam.Measured) error {
	if s.Closed() && s.amend == "" {
		return errClosed()
	}
	if err := m.Validate(); err != nil {
		return err
	}
	key := m.Key()
	change := MeasureChange{Key: key, After: m, Has: true}
	for _, x := range s.visit.Measures {
		if x.Key() == key {
			change.Before, change.Had = x, true
		}
	}
	to := s.focus
	if c := s.cells[s.FocusIndex()]; c.IsMeasure() && c.Measure == m.Measure && c.Site == m.Site {
		to = s.after(s.focus, Batch{})
	}
	s.do(Batch{Measures: []MeasureChange{change}}, to)
	return nil
}

// ClearMeasured removes a measured value by its key.
func (s *ExamSheet) ClearMeasured(key string) error {
	if s.Closed() && s.amend == "" {
		return errClosed()
	}
	for _, x := range s.visit.Measures {
		if x.Key() == key {
			s.do(Batch{Measures: []MeasureChange{{Key: key, Before: x, Had: true}}}, s.focus)
			return nil
		}
	}
	return nil
}

// startLevel asks for the vertebra of the cell in focus.
func (s *ExamSheet) startLevel() Outcome {
	c := s.cells[s.FocusIndex()]
	if c.IsMeasure() || !c.Key.Item.Has(exam.TakesLevel) {
		return refused(errors.New(words.T("This test takes no vertebra.")))
	}
	if !c.Entered || !c.Today.Result.Tested() {
		return refused(errors.New(words.T("Grade it first, then name the vertebra.")))
	}
	s.mode, s.text = Levelling, ""
	switch {
	case c.Today.Level != 0:
		s.level = c.Today.Level
	case c.Key.Item == exam.CutaneousTrunci && s.otherLevel(c.Key) != 0:
		s.level = s.otherLevel(c.Key)
	case c.HasLast && c.Last.Level != 0 && !s.Blind():
		s.level = c.Last.Level
	default:
		s.level = exam.NewVertebra(exam.RegionT, 13)
	}
	s.changed()
	return did(words.T("Which vertebra? Type it (T13), or use the arrows; Enter takes it"))
}

// otherLevel returns the level of the same test on the other side today.
func (s *ExamSheet) otherLevel(k exam.Key) exam.Vertebra {
	k.Site = k.Site.Mirror()
	f, _ := s.visit.Find(k)
	return f.Level
}

func (s *ExamSheet) pressLevel(k Key) Outcome {
	sp := s.in.Patient.Species
	list := exam.Vertebrae(sp)
	at := exam.VertebraIndex(sp, s.level)
	switch k.Name {
	case "Up", "Left":
		if at > 0 {
			s.level, s.text = list[at-1], ""
		}
	case "Down", "Right":
		if at >= 0 && at < len(list)-1 {
			s.level, s.text = list[at+1], ""
		}
	case "Backspace":
		if s.text != "" {
			s.text = s.text[:len(s.text)-1]
		}
	case "Escape":
		s.mode, s.text = Grading, ""
		s.focus = s.after(s.focus, Batch{})
	case "Enter", "Space", "Tab":
		return s.outcome(s.takeLevel())
	default:
		switch r := unicode.ToUpper(k.Rune); {
		case r == 'C' || r == 'T' || r == 'L' || r == 'S':
			s.text = string(r)
		case r == 'D' && s.text == "C":
			s.text = "Cd"
		case unicode.IsDigit(r) && s.text != "":
			s.text += string(r)
			// A name that no further digit can lengthen is taken at once.
			if v, err := exam.ParseVertebra(s.text, sp); err == nil {
				if _, longer := exam.ParseVertebra(s.text+"0", sp); longer != nil {
					s.level = v
					return s.outcome(s.takeLevel())
				}
			}
		default:
			return Outcome{Handled: true}
		}
	}
	s.changed()
	return Outcome{Handled: true}
}

// takeLevel stores the vertebra typed or chosen.
func (s *ExamSheet) takeLevel() error {
	if s.text != "" {
		v, err := exam.ParseVertebra(s.text, s.in.Patient.Species)
		if err != nil {
			s.text = ""
			return err
		}
		s.level = v
	}
	return s.SetLevel(s.level)
}

// SetLevel stores the vertebra of the finding in focus and goes on.
func (s *ExamSheet) SetLevel(v exam.Vertebra) error {
	c := s.cells[s.FocusIndex()]
	if err := s.editable(c, false); err != nil {
		return err
	}
	f := c.Today
	f.Level = v
	s.mode, s.text = Grading, ""
	return s.put(f, false)
}

// SetNote keeps a note with the finding of a cell.
func (s *ExamSheet) SetNote(cell int, note string) error {
	if err := s.FocusCell(cell); err != nil {
		return err
	}
	c := s.cells[cell]
	if err := s.editable(c, true); err != nil {
		return err
	}
	if !c.Entered || c.IsMeasure() {
		return errors.New(words.T("Grade it first; the note belongs to the finding."))
	}
	f := c.Today
	f.Note = strings.TrimSpace(note)
	return s.put(f, true)
}
