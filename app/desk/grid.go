package desk

import (
	"image"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/driver/desktop"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/ink"
	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// examGrid draws an exam sheet as rows of cells under a thin heading for each position, and
// opens the row in focus with its grades as buttons. It hands every key on.
type examGrid struct {
	widget.BaseWidget
	sheet    *view.ExamSheet
	Pressed  func(view.Outcome)  // what a click did
	Key      func(view.Key)      // a key was pressed
	Shortcut func(fyne.Shortcut) // a shortcut was pressed
	Focus    func()              // give the keys to the grid

	scroll  *mark.Scroll
	body    *fyne.Container
	rows    []*gridRow
	heads   map[int]*gridHead // before the row of that index
	editor  *gridEditor
	focused bool
	built   int // number of cells when the rows were built
	open    int // row that is open
}

func newExamGrid(sheet *view.ExamSheet) *examGrid {
	g := &examGrid{sheet: sheet, open: -1}
	g.editor = newGridEditor(g)
	g.body = &fyne.Container{Layout: &gridLayout{g}}
	g.scroll = mark.NewScroll(g.body)
	g.scroll.OnSwipe = func(dir int) { g.typed(view.Key{Name: "Tab", Shift: dir < 0}) }
	g.build()
	g.ExtendBaseWidget(g)
	return g
}

// build makes the rows anew; needed when a cell was added or the posture changed.
func (g *examGrid) build() {
	g.rows, g.heads = nil, map[int]*gridHead{}
	g.body.Objects = nil
	cells := g.sheet.Cells()
	g.built = len(cells)
	last := view.Position(255)
	rows := g.sheet.Rows()
	for i, r := range rows {
		if r.Heading != last {
			last = r.Heading
			limbs := false
			for _, s := range rows[i:] {
				if s.Heading != last {
					break
				}
				for _, c := range s.Cells {
					limbs = limbs || cells[c].Site.IsLimb()
				}
			}
			h := newGridHead(last.Words(), limbs)
			g.heads[i] = h
			g.body.Objects = append(g.body.Objects, h)
		}
		row := newGridRow(g, i, r)
		g.rows = append(g.rows, row)
		g.body.Objects = append(g.body.Objects, row)
	}
	g.body.Objects = append(g.body.Objects, g.editor)
	g.open = -1
	g.update()
}

// update draws what changed in the sheet, and only that.
func (g *examGrid) update() {
	if len(g.sheet.Cells()) != g.built || len(g.sheet.Rows()) != len(g.rows) {
		g.build()
		return
	}
	focus := g.sheet.FocusIndex()
	for _, r := range g.rows {
		for _, c := range r.cells {
			c.update(focus)
		}
	}
	open := -1
	if focus >= 0 {
		open = g.sheet.Cells()[focus].Row
	}
	moved := g.editor.update(focus)
	if open != g.open || moved {
		g.open = open
		g.scroll.Reflow()
		g.body.Layout.Layout(g.body.Objects, g.body.Size())
	}
	g.reveal()
}

// reveal scrolls the open row into view; where it is too tall for that, at least its grades.
func (g *examGrid) reveal() {
	if g.open < 0 || g.open >= len(g.rows) {
		return
	}
	r := g.rows[g.open]
	top, h, margin := r.Position().Y, r.Size().Height+g.editor.Size().Height, 2*look.Unit+headHeight()
	if h+margin > g.scroll.Size().Height {
		top, h, margin = g.editor.Position().Y, g.editor.Size().Height, look.Unit/2
	}
	g.scroll.ScrollTo(top, h, margin)
}

func headHeight() float32 { return 30 * max(1, look.Scale()) }

// gridLayout places headings, rows and, below the open row, the editor.
type gridLayout struct{ g *examGrid }

func (l *gridLayout) HeightFor(width float32) float32 { return l.place(width, false) }

func (l *gridLayout) place(width float32, move bool) float32 {
	var y float32
	put := func(o fyne.CanvasObject, h float32) {
		if move {
			o.Move(fyne.NewPos(0, y))
			o.Resize(fyne.NewSize(width, h))
		}
		y += h
	}
	for i, r := range l.g.rows {
		if h := l.g.heads[i]; h != nil {
			if i > 0 {
				y += look.Unit
			}
			put(h, headHeight())
		}
		put(r, r.height(width))
		if i == l.g.open {
			put(l.g.editor, l.g.editor.HeightFor(width))
		}
	}
	if l.g.open < 0 && move {
		l.g.editor.Resize(fyne.NewSize(width, 0))
	}
	return y + 2*look.Unit
}

func (l *gridLayout) MinSize([]fyne.CanvasObject) fyne.Size {
	w := l.g.body.Size().Width
	if w <= 0 {
		w = 600
	}
	return fyne.NewSize(480, l.place(w, false))
}

func (l *gridLayout) Layout(_ []fyne.CanvasObject, size fyne.Size) { l.place(size.Width, true) }

// CreateRenderer shows the scrolled rows.
func (g *examGrid) CreateRenderer() fyne.WidgetRenderer { return widget.NewSimpleRenderer(g.scroll) }

// MinSize is small: the grid scrolls.
func (g *examGrid) MinSize() fyne.Size { g.ExtendBaseWidget(g); return fyne.NewSize(480, 200) }

var (
	_ fyne.Focusable     = (*examGrid)(nil)
	_ fyne.Tabbable      = (*examGrid)(nil)
	_ fyne.Shortcutable  = (*examGrid)(nil)
	_ desktop.Hoverable  = (*gridCell)(nil)
	_ fyne.Tappable      = (*gridCell)(nil)
	_ desktop.Cursorable = (*gridCell)(nil)
	_ desktop.Mouseable  = (*gridCell)(nil)
)

// FocusGained shows that keys go to the grid.
func (g *examGrid) FocusGained() { g.focused = true; g.refocus() }

// FocusLost shows that they no longer do.
func (g *examGrid) FocusLost() { g.focused = false; g.refocus() }

func (g *examGrid) refocus() {
	focus := g.sheet.FocusIndex()
	for _, r := range g.rows {
		for _, c := range r.cells {
			if c.index == focus {
				c.Refresh()
			}
		}
	}
}

// AcceptsTab keeps Tab for the walk.
func (g *examGrid) AcceptsTab() bool { return true }

// TypedRune hands a letter or digit to the sheet.
func (g *examGrid) TypedRune(r rune) { g.typed(view.Key{Rune: r, Shift: shiftDown()}) }

// keyNames are the toolkit's keys by the sheet's names.
var keyNames = map[fyne.KeyName]string{
	fyne.KeyUp: "Up", fyne.KeyDown: "Down", fyne.KeyLeft: "Left", fyne.KeyRight: "Right",
	fyne.KeyReturn: "Enter", fyne.KeyEnter: "Enter", fyne.KeyEscape: "Escape", fyne.KeyBackspace: "Backspace",
	fyne.KeyDelete: "Delete", fyne.KeyTab: "Tab", fyne.KeyHome: "Home", fyne.KeyEnd: "End",
}

// TypedKey hands a named key to the sheet. Space comes as a rune.
func (g *examGrid) TypedKey(e *fyne.KeyEvent) {
	if e.Name == fyne.KeyF1 {
		mark.PassKey(g, e)
		return
	}
	if name, ok := keyNames[e.Name]; ok {
		g.typed(view.Key{Name: name, Shift: shiftDown()})
	}
}

// TypedShortcut takes undo and redo.
func (g *examGrid) TypedShortcut(s fyne.Shortcut) {
	if g.Shortcut != nil {
		g.Shortcut(s)
	}
}

func (g *examGrid) typed(k view.Key) {
	if g.Key != nil {
		g.Key(k)
	}
}

// done redraws after a click acted on the sheet directly.
func (g *examGrid) done(err error) {
	g.update()
	if g.Pressed != nil {
		out := view.Outcome{Handled: true, Err: err}
		if err != nil {
			out.Words = err.Error()
		}
		g.Pressed(out)
	}
}

func shiftDown() bool {
	d, ok := fyne.CurrentApp().Driver().(desktop.Driver)
	return ok && d.CurrentKeyModifiers()&fyne.KeyModifierShift != 0
}

// gridHead is the heading of a position, with the names of the limb columns.
type gridHead struct {
	widget.BaseWidget
	title *mark.Text
	cols  []*mark.Text
	rule  *mark.Ground
}

func newGridHead(title string, limbs bool) *gridHead {
	h := &gridHead{title: mark.Bold(title), rule: mark.NewGround(look.Edge)}
	if limbs {
		for _, l := range exam.Limbs() {
			h.cols = append(h.cols, mark.Note(view.SiteName(l)).Centred().AtLeast(8))
		}
	}
	h.ExtendBaseWidget(h)
	return h
}

func (h *gridHead) CreateRenderer() fyne.WidgetRenderer {
	objects := []fyne.CanvasObject{h.title, h.rule}
	for _, c := range h.cols {
		objects = append(objects, c)
	}
	return widget.NewSimpleRenderer(&fyne.Container{Layout: headLayout{h}, Objects: objects})
}

type headLayout struct{ h *gridHead }

func (l headLayout) MinSize([]fyne.CanvasObject) fyne.Size { return fyne.NewSize(100, headHeight()) }
func (l headLayout) Layout(_ []fyne.CanvasObject, s fyne.Size) {
	h := l.h
	x0, w := cellArea(s.Width)
	m := h.title.MinSize()
	title := s.Width
	if len(h.cols) > 0 {
		title = x0
	}
	h.title.Move(fyne.NewPos(0, s.Height-m.Height-3))
	h.title.Resize(fyne.NewSize(title, m.Height))
	for i, c := range h.cols {
		c.Hidden = narrow(s.Width)
		cm := c.MinSize()
		c.Move(fyne.NewPos(x0+w*float32(i)/4, s.Height-cm.Height-4))
		c.Resize(fyne.NewSize(w/4, cm.Height))
	}
	h.rule.Move(fyne.NewPos(0, s.Height-1))
	h.rule.Resize(fyne.NewSize(s.Width, 1))
}

// narrow reports whether four cells side by side would be too small to read; then two stand
// on a line and each says its limb.
func narrow(width float32) bool {
	_, w := cellArea(width)
	return w/4 < 84*look.Scale()
}

// cellArea returns where the cells of a row begin and how wide they are together.
func cellArea(width float32) (x, w float32) {
	x = min(width*0.38, max(208, width*0.3)*max(1, look.Scale()*0.9))
	return x, width - x
}

// gridRow is one line: the test's name, the segments it tests, its cells.
type gridRow struct {
	widget.BaseWidget
	grid     *examGrid
	row      int
	name     *mark.Text
	segments *mark.Text
	cells    []*gridCell
	spans    []cellSpan
	rule     *mark.Ground
}

// cellSpan is where a cell stands: its line, and the quarters it covers.
type cellSpan struct{ line, from, to int }

func newGridRow(g *examGrid, row int, r view.Row) *gridRow {
	w := &gridRow{grid: g, row: row, name: mark.Line(r.Name).AtLeast(40), segments: mark.Note(r.Segments).AtLeast(40), rule: mark.NewGround(look.Line)}
	cells := g.sheet.Cells()
	var elsewhere []int
	free := [4]int{}
	for k, i := range r.Cells {
		w.cells = append(w.cells, newGridCell(g, i))
		w.spans = append(w.spans, cellSpan{})
		if c := view.Column(cells[i].Site); c < view.ColumnElsewhere {
			w.spans[k] = cellSpan{free[c], c, c + 1}
			free[c]++
		} else {
			elsewhere = append(elsewhere, k)
		}
	}
	line := max(free[0], free[1], free[2], free[3])
	limbs := line > 0
	for n, k := range elsewhere {
		switch {
		case len(elsewhere) == 1 && !limbs:
			w.spans[k] = cellSpan{line, 0, 4}
		case len(elsewhere) == 2 && !limbs:
			w.spans[k] = cellSpan{line, 2 * n, 2*n + 2}
		default:
			w.spans[k] = cellSpan{line + n/4, n % 4, n%4 + 1}
		}
		w.cells[k].caption = view.SiteName(cells[r.Cells[k]].Site)
		if cells[r.Cells[k]].Site.Side() == exam.Midline && len(elsewhere) == 1 && !limbs {
			w.cells[k].caption = ""
		}
	}
	for k, i := range r.Cells {
		if d := cells[i].Key.Digit; d != exam.AnyDigit {
			w.cells[k].caption = words.Of(d.String() + " digit")
		}
		if j := cells[i].Key.Joint; j != exam.NoJoint {
			w.cells[k].caption = words.Of(j.String())
		}
	}
	w.ExtendBaseWidget(w)
	return w
}

func lineHeight() float32 {
	return max(look.Target, look.Target*look.Scale())
}

func (r *gridRow) height(width float32) float32 {
	n := 0
	for _, s := range r.spans {
		n = max(n, s.in(narrow(width)).line+1)
	}
	return float32(max(1, n))*lineHeight() + 1
}

// in returns the span in a wide or a narrow grid.
func (s cellSpan) in(narrow bool) cellSpan {
	if !narrow {
		return s
	}
	if s.to-s.from > 1 {
		return cellSpan{2*s.line + s.from/4, s.from, s.to}
	}
	at := s.from % 2 * 2
	return cellSpan{2*s.line + s.from/2, at, at + 2}
}

func (r *gridRow) CreateRenderer() fyne.WidgetRenderer {
	objects := []fyne.CanvasObject{r.name, r.segments, r.rule}
	for _, c := range r.cells {
		objects = append(objects, c)
	}
	return widget.NewSimpleRenderer(&fyne.Container{Layout: rowLayout{r}, Objects: objects})
}

type rowLayout struct{ r *gridRow }

func (l rowLayout) MinSize([]fyne.CanvasObject) fyne.Size {
	return fyne.NewSize(100, l.r.height(l.r.Size().Width))
}
func (l rowLayout) Layout(_ []fyne.CanvasObject, s fyne.Size) {
	r := l.r
	x0, w := cellArea(s.Width)
	line := lineHeight()
	n, m := r.name.MinSize().Height, r.segments.MinSize().Height
	if r.segments.Words == "" {
		m = 0
	}
	top := (line - n - m) / 2
	r.name.Move(fyne.NewPos(0, top))
	r.name.Resize(fyne.NewSize(x0-look.Unit, n))
	r.segments.Move(fyne.NewPos(0, top+n))
	r.segments.Resize(fyne.NewSize(x0-look.Unit, max(m, 1)))
	small := narrow(s.Width)
	for k, c := range r.cells {
		sp := r.spans[k].in(small)
		c.setShort(small)
		c.Move(fyne.NewPos(x0+w*float32(sp.from)/4, float32(sp.line)*line))
		c.Resize(fyne.NewSize(w*float32(sp.to-sp.from)/4, line))
	}
	r.rule.Move(fyne.NewPos(0, s.Height-1))
	r.rule.Resize(fyne.NewSize(s.Width, 1))
}

// cellFace is all that a cell shows; equal faces need no redrawing.
type cellFace struct {
	bead     view.Bead
	last     view.Bead
	showLast bool
	change   view.ChangeMark
	text     string // the grade, or why there is none
	more     string // its word
	soft     bool
	focus    bool
	due      bool // asked beyond the protocol
	empty    bool
	asked    bool
}

// gridCell is one cell of the grid.
type gridCell struct {
	widget.BaseWidget
	grid    *examGrid
	index   int
	caption string // always shown
	limb    string // shown where the columns have no heading
	face    cellFace
	hover   bool
	short   bool

	bed   *canvas.Rectangle
	marks *canvas.Raster
	head  *canvas.Text
	text  *canvas.Text
	more  *canvas.Text
}

func newGridCell(g *examGrid, index int) *gridCell {
	c := &gridCell{grid: g, index: index}
	if s := g.sheet.Cells()[index].Site; s.IsLimb() {
		c.limb = view.SiteName(s)
	}
	c.ExtendBaseWidget(c)
	return c
}

// setShort says whether the columns have no heading, so that each cell names its limb.
func (c *gridCell) setShort(on bool) {
	if c.short != on {
		c.short = on
		c.Refresh()
	}
}

// title is the small line above the marks.
func (c *gridCell) title() string {
	switch {
	case !c.short || c.limb == "":
		return c.caption
	case c.caption == "":
		return c.limb
	}
	return c.limb + ", " + c.caption
}

// faceOf reads a cell's face from the sheet.
func (c *gridCell) faceOf(focus int) cellFace {
	s := c.grid.sheet
	cell := s.Cells()[c.index]
	f := cellFace{focus: focus == c.index, asked: cell.NotAsked == "" || cell.Entered}
	switch {
	case cell.IsMeasure():
		if cell.Entered {
			f.text = c.grid.sheet.ValueWords(cell.Value)
		} else {
			f.empty = true
		}
		return f
	case !cell.Entered && cell.Barred != "" && cell.Override == "":
		f.text, f.soft = words.T("not safe"), true
		return f
	case !cell.Entered:
		f.empty = true
		f.due = cell.Why != ""
		if s.ShowLast(c.index) {
			f.showLast, f.last = true, view.BeadOf(cell.Last)
		}
		return f
	}
	f.bead = view.BeadOf(cell.Today)
	if g, ok := cell.Today.Result.Grade(); ok {
		f.text = f.bead.Grade
		f.more = words.Of(cell.Key.Item.GradeWord(g))
		if cell.Today.Level != 0 {
			f.text += " " + cell.Today.Level.String()
		}
		if cell.Today.Side != exam.NoSite {
			f.text += " " + view.SiteName(cell.Today.Side)
		}
	} else {
		f.text, f.soft = reasonWord(cell.Today), true
	}
	if s.ShowLast(c.index) {
		f.showLast, f.last = true, view.BeadOf(cell.Last)
		f.change = view.MarkBetween(cell.Last, cell.Today)
	}
	return f
}

func reasonWord(f exam.Finding) string {
	switch r := f.Result.Reason(); {
	case r == exam.ReasonNone:
		return words.T("not tested")
	case r == exam.OtherReason && f.Note != "":
		return f.Note
	default:
		return words.Of(r.String())
	}
}

func (c *gridCell) update(focus int) {
	if f := c.faceOf(focus); f != c.face {
		c.face = f
		c.Refresh()
	}
}

func (c *gridCell) CreateRenderer() fyne.WidgetRenderer {
	c.bed = canvas.NewRectangle(look.C(look.Paper))
	c.bed.CornerRadius = 4
	c.head, c.text, c.more = canvas.NewText("", nil), canvas.NewText("", nil), canvas.NewText("", nil)
	c.marks = canvas.NewRaster(c.draw)
	r := &cellRenderer{c}
	r.Refresh()
	return r
}

// beadSide is the diameter of a bead in the grid.
func beadSide() float32 { return 18 * max(1, look.Scale()*0.9) }

// plan places the marks in a cell: today's bead, and at the right last visit's with the change.
func (c *gridCell) plan(s fyne.Size) (bead, last, change fyne.Position, y float32) {
	y = s.Height / 2
	if c.title() != "" {
		y = s.Height - beadSide()/2 - 6
	}
	side := beadSide()
	bead = fyne.NewPos(look.Unit+side/2, y)
	right := s.Width - look.Unit
	change = fyne.NewPos(right-side*0.45, y)
	last = fyne.NewPos(right-side*1.45, y)
	return
}

func (c *gridCell) draw(w, h int) image.Image {
	s := c.BaseWidget.Size()
	if s.Width <= 0 || w <= 0 || h <= 0 {
		return image.NewRGBA(image.Rect(0, 0, 1, 1))
	}
	pen := ink.New(w, h, float64(w)/float64(s.Width))
	f := c.face
	b, l, ch, _ := c.plan(s)
	r := float64(beadSide() / 2)
	at := func(p fyne.Position) ink.Point { return ink.Point{X: float64(p.X), Y: float64(p.Y)} }
	cell := c.grid.sheet.Cells()[c.index]
	if !cell.IsMeasure() && !f.empty {
		mark.DrawBead(pen, f.bead, at(b), r-1, true)
	}
	if f.showLast {
		mark.DrawBead(pen, f.last, at(l), r*0.72, true)
		mark.DrawChange(pen, f.change, at(ch), r*0.62)
	}
	return pen.Picture()
}

type cellRenderer struct{ c *gridCell }

func (r *cellRenderer) Destroy()           {}
func (r *cellRenderer) MinSize() fyne.Size { return fyne.NewSize(look.Target, lineHeight()) }
func (r *cellRenderer) Objects() []fyne.CanvasObject {
	return []fyne.CanvasObject{r.c.bed, r.c.marks, r.c.head, r.c.text, r.c.more}
}

func (r *cellRenderer) Layout(s fyne.Size) {
	c := r.c
	c.bed.Move(fyne.NewPos(2, 2))
	c.bed.Resize(fyne.NewSize(max(0, s.Width-4), max(0, s.Height-4)))
	c.marks.Resize(s)
	r.place(s)
}

// place sets the texts of the cell and shortens what does not fit.
func (r *cellRenderer) place(s fyne.Size) {
	c := r.c
	if s.Width <= 0 {
		return
	}
	f := c.face
	_, last, _, y := c.plan(s)
	end := s.Width - look.Unit
	if f.showLast {
		end = last.X - beadSide()/2 - 4
	}
	c.head.Text, _ = mark.Fit(c.title(), s.Width-2*look.Unit, c.head.TextSize, c.head.TextStyle)
	c.head.Move(fyne.NewPos(look.Unit, 3))
	c.head.Resize(c.head.MinSize())
	x := look.Unit
	if !f.empty && !c.grid.sheet.Cells()[c.index].IsMeasure() {
		x += beadSide() + 6
	}
	c.text.Text, _ = mark.Fit(f.text, end-x, c.text.TextSize, c.text.TextStyle)
	m := c.text.MinSize()
	c.text.Move(fyne.NewPos(x, y-m.Height/2))
	c.text.Resize(m)
	x += m.Width + look.Unit
	word, short := mark.Fit(f.more, end-x, c.more.TextSize, c.more.TextStyle)
	if short || x >= end {
		word = ""
	}
	c.more.Text = word
	m = c.more.MinSize()
	c.more.Move(fyne.NewPos(x, y-m.Height/2))
	c.more.Resize(m)
}

func (r *cellRenderer) Refresh() {
	c := r.c
	f := c.face
	c.bed.FillColor = look.C(look.Paper)
	c.bed.StrokeColor, c.bed.StrokeWidth = look.C(look.Edge), 1
	switch {
	case f.focus:
		c.bed.FillColor = look.C(look.FocusBed)
		c.bed.StrokeColor, c.bed.StrokeWidth = look.C(look.Edge), 2
		if c.grid.focused {
			c.bed.StrokeColor, c.bed.StrokeWidth = look.C(look.Focus), 3
		}
	case c.hover:
		c.bed.FillColor = look.C(look.Over)
	case f.due:
		c.bed.StrokeColor, c.bed.StrokeWidth = look.C(look.Ink), 1.5
	case !f.asked:
		c.bed.FillColor = look.C(look.Sunk)
		c.bed.StrokeWidth = 0
	}
	for _, t := range []*canvas.Text{c.head, c.more} {
		t.TextSize, t.Color = look.Px(look.Small), look.C(look.InkSoft)
	}
	c.text.TextSize, c.text.Color = look.Px(look.Body), look.C(look.Ink)
	c.text.TextStyle = fyne.TextStyle{Bold: !f.soft}
	if f.soft {
		c.text.TextSize, c.text.Color = look.Px(look.Small), look.C(look.InkSoft)
	}
	r.place(c.BaseWidget.Size())
	for _, o := range r.Objects() {
		canvas.Refresh(o)
	}
}

// MouseDown begins a press.
func (c *gridCell) MouseDown(e *desktop.MouseEvent) { mark.Press(c, e.AbsolutePosition) }

// MouseUp does nothing: Tapped follows.
func (c *gridCell) MouseUp(*desktop.MouseEvent) {}

// TappedSecondary explains the cell, as a long press does.
func (c *gridCell) TappedSecondary(e *fyne.PointEvent) {
	mark.ExplainAt(c, c.explain(), e.AbsolutePosition)
}

// Tapped moves the focus to the cell; a long press explains it.
func (c *gridCell) Tapped(e *fyne.PointEvent) {
	if mark.Held(c, c.explain(), e) {
		return
	}
	if w := c.grid.Focus; w != nil {
		w()
	}
	c.grid.done(c.grid.sheet.FocusCell(c.index))
}

// Cursor shows that the cell can be chosen.
func (c *gridCell) Cursor() desktop.Cursor { return desktop.PointerCursor }

// MouseIn explains the cell.
func (c *gridCell) MouseIn(e *desktop.MouseEvent) {
	c.hover = true
	c.Refresh()
	mark.ShowTip(c, c.explain(), e.AbsolutePosition)
}

// MouseMoved does nothing.
func (c *gridCell) MouseMoved(*desktop.MouseEvent) {}

// MouseOut ends the explanation.
func (c *gridCell) MouseOut() { c.hover = false; c.Refresh(); mark.HideTip(c) }

// explain says the cell in words: what it is, today, last time, why it is asked or not.
func (c *gridCell) explain() string {
	s := c.grid.sheet
	cell := s.Cells()[c.index]
	out := cell.Name()
	switch {
	case cell.IsMeasure() && cell.Entered:
		out = view.Labelled(out, s.ValueWords(cell.Value))
	case !cell.IsMeasure() && cell.Entered:
		out = view.Labelled(out, view.GradeWords(cell.Today))
		if cell.Today.Note != "" {
			out += "\n" + cell.Today.Note
		}
	}
	if !cell.IsMeasure() && s.ShowLast(c.index) {
		out += "\n" + words.T("Last time: %s", view.GradeWords(cell.Last))
	}
	if cell.Barred != "" {
		out += "\n" + words.T("Not safe: %s", cell.Barred)
	}
	if cell.Why != "" {
		out += "\n" + words.T("Asked because: %s", cell.Why)
	}
	if cell.NotAsked != "" && !cell.Entered {
		out += "\n" + words.T("Not asked: %s", cell.NotAsked)
	}
	return out
}
