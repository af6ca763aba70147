package mark

import (
	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/container"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/look"
)

// Flow is what knows its height for a width: paragraphs, and layouts that hold them.
type Flow interface {
	HeightFor(width float32) float32
}

type flowLayout interface {
	heightFor(objects []fyne.CanvasObject, width float32) float32
}

// HeightFor returns the height an object needs at a width.
func HeightFor(o fyne.CanvasObject, width float32) float32 {
	if !o.Visible() {
		return 0
	}
	if f, ok := o.(Flow); ok {
		return f.HeightFor(width)
	}
	if c, ok := o.(*fyne.Container); ok {
		if f, ok := c.Layout.(flowLayout); ok {
			return f.heightFor(c.Objects, width)
		}
		if f, ok := c.Layout.(Flow); ok {
			return f.HeightFor(width)
		}
	}
	return o.MinSize().Height
}

// Column stacks objects downwards with a gap; paragraphs get the height they need. An object
// given to Grow takes what height is left.
func Column(gap float32, objects ...fyne.CanvasObject) *fyne.Container {
	return container.New(&column{gap: gap}, objects...)
}

// ColumnGrow is Column in which one object takes the height that is left.
func ColumnGrow(gap float32, grow int, objects ...fyne.CanvasObject) *fyne.Container {
	return container.New(&column{gap: gap, grow: grow + 1}, objects...)
}

type column struct {
	gap  float32
	grow int // index + 1; 0: none
	last float32
}

func (l *column) heightFor(objects []fyne.CanvasObject, width float32) float32 {
	var h float32
	for _, o := range objects {
		if !o.Visible() {
			continue
		}
		if h > 0 {
			h += l.gap
		}
		h += HeightFor(o, width)
	}
	return h
}

func (l *column) MinSize(objects []fyne.CanvasObject) fyne.Size {
	var m fyne.Size
	first := true
	for i, o := range objects {
		if !o.Visible() {
			continue
		}
		s := o.MinSize()
		m.Width = max(m.Width, s.Width)
		if !first {
			m.Height += l.gap
		}
		first = false
		if l.last > 0 && i+1 != l.grow {
			m.Height += HeightFor(o, l.last)
		} else {
			m.Height += s.Height
		}
	}
	return m
}

func (l *column) Layout(objects []fyne.CanvasObject, size fyne.Size) {
	l.last = size.Width
	heights := make([]float32, len(objects))
	var sum float32
	first := true
	for i, o := range objects {
		if !o.Visible() {
			continue
		}
		if !first {
			sum += l.gap
		}
		first = false
		heights[i] = HeightFor(o, size.Width)
		sum += heights[i]
	}
	if l.grow > 0 && l.grow <= len(objects) {
		if rest := size.Height - sum; rest != 0 {
			heights[l.grow-1] = max(0, heights[l.grow-1]+rest)
		}
	}
	var y float32
	for i, o := range objects {
		if !o.Visible() {
			continue
		}
		o.Move(fyne.NewPos(0, y))
		o.Resize(fyne.NewSize(size.Width, heights[i]))
		y += heights[i] + l.gap
	}
}

// Row sets objects side by side with a gap. Weights say who shares the width that is left
// (0: the object's own width); missing weights are 0. Objects stand in the middle of the row.
func Row(gap float32, weights []float32, objects ...fyne.CanvasObject) *fyne.Container {
	return container.New(&row{gap: gap, weights: weights}, objects...)
}

// RowTop is Row with the objects filling the row's height.
func RowTop(gap float32, weights []float32, objects ...fyne.CanvasObject) *fyne.Container {
	return container.New(&row{gap: gap, weights: weights, fill: true}, objects...)
}

type row struct {
	gap     float32
	weights []float32
	fill    bool
}

func (l *row) weight(i int) float32 {
	if i < len(l.weights) {
		return l.weights[i]
	}
	return 0
}

func (l *row) widths(objects []fyne.CanvasObject, width float32) []float32 {
	out := make([]float32, len(objects))
	free, sum, n := width, float32(0), 0
	for i, o := range objects {
		if !o.Visible() {
			continue
		}
		n++
		if w := l.weight(i); w > 0 {
			sum += w
			continue
		}
		out[i] = o.MinSize().Width
		free -= out[i]
	}
	free -= l.gap * float32(max(0, n-1))
	if sum == 0 {
		return out
	}
	// Shares below an object's smallest width are raised to it, and the others give way.
	fixed := make([]bool, len(objects))
	for range objects {
		again := false
		for i, o := range objects {
			w := l.weight(i)
			if w == 0 || fixed[i] || !o.Visible() {
				continue
			}
			if share := free * w / sum; share < o.MinSize().Width {
				out[i] = o.MinSize().Width
				fixed[i] = true
				free -= out[i]
				sum -= w
				again = true
				break
			}
		}
		if !again {
			break
		}
	}
	for i, o := range objects {
		if w := l.weight(i); w > 0 && !fixed[i] && o.Visible() {
			out[i] = max(0, free*w/sum)
		}
	}
	return out
}

func (l *row) heightFor(objects []fyne.CanvasObject, width float32) float32 {
	var h float32
	for i, w := range l.widths(objects, width) {
		h = max(h, HeightFor(objects[i], w))
	}
	return h
}

func (l *row) MinSize(objects []fyne.CanvasObject) fyne.Size {
	var m fyne.Size
	n := 0
	for _, o := range objects {
		if !o.Visible() {
			continue
		}
		n++
		s := o.MinSize()
		m.Width += s.Width
		m.Height = max(m.Height, s.Height)
	}
	m.Width += l.gap * float32(max(0, n-1))
	return m
}

func (l *row) Layout(objects []fyne.CanvasObject, size fyne.Size) {
	var x float32
	for i, w := range l.widths(objects, size.Width) {
		o := objects[i]
		if !o.Visible() {
			continue
		}
		h := size.Height
		if !l.fill {
			h = min(h, HeightFor(o, w))
		}
		o.Move(fyne.NewPos(x, (size.Height-h)/2))
		o.Resize(fyne.NewSize(w, h))
		x += w + l.gap
	}
}

// Wrapped sets objects side by side and begins a new line where the width ends.
func Wrapped(gap float32, objects ...fyne.CanvasObject) *fyne.Container {
	return container.New(&wrapped{gap: gap}, objects...)
}

type wrapped struct{ gap, last float32 }

func (l *wrapped) place(objects []fyne.CanvasObject, width float32, put func(o fyne.CanvasObject, x, y, w, h float32)) float32 {
	var x, y, line float32
	for _, o := range objects {
		if !o.Visible() {
			continue
		}
		s := o.MinSize()
		s.Width = min(s.Width, width)
		if x > 0 && x+s.Width > width+0.5 {
			x, y, line = 0, y+line+l.gap, 0
		}
		if put != nil {
			put(o, x, y, s.Width, s.Height)
		}
		x += s.Width + l.gap
		line = max(line, s.Height)
	}
	return y + line
}

func (l *wrapped) heightFor(objects []fyne.CanvasObject, width float32) float32 {
	return l.place(objects, width, nil)
}

func (l *wrapped) MinSize(objects []fyne.CanvasObject) fyne.Size {
	var m fyne.Size
	for _, o := range objects {
		if o.Visible() {
			m.Width = max(m.Width, o.MinSize().Width)
		}
	}
	m.Height = l.place(objects, max(l.last, m.Width), nil)
	return m
}

func (l *wrapped) Layout(objects []fyne.CanvasObject, size fyne.Size) {
	l.last = size.Width
	l.place(objects, size.Width, func(o fyne.CanvasObject, x, y, w, h float32) {
		o.Move(fyne.NewPos(x, y))
		o.Resize(fyne.NewSize(w, h))
	})
}

// Bar sets a title at the left and buttons at the right; where they do not fit beside each
// other, the buttons stand below, on as many lines as they need.
func Bar(gap float32, title fyne.CanvasObject, buttons ...fyne.CanvasObject) *fyne.Container {
	return container.New(&bar{wrapped{gap: gap}}, append([]fyne.CanvasObject{title}, buttons...)...)
}

type bar struct{ wrapped }

// room returns the width of the buttons in one line, and of the title as it would like to be.
func (l *bar) room(o []fyne.CanvasObject) (buttons, title float32) {
	for i, b := range o[1:] {
		if i > 0 {
			buttons += l.gap
		}
		buttons += b.MinSize().Width
	}
	title = o[0].MinSize().Width
	if t, ok := o[0].(*Text); ok {
		title = t.measure(t.Words).Width
	}
	return buttons, title
}

func (l *bar) heightFor(o []fyne.CanvasObject, width float32) float32 {
	b, t := l.room(o)
	if b+t+l.gap*2 <= width {
		h := HeightFor(o[0], t)
		for _, x := range o[1:] {
			h = max(h, x.MinSize().Height)
		}
		return h
	}
	return HeightFor(o[0], width) + l.gap + l.place(o[1:], width, nil)
}

func (l *bar) MinSize(o []fyne.CanvasObject) fyne.Size {
	var w float32
	for _, x := range o {
		w = max(w, x.MinSize().Width)
	}
	return fyne.NewSize(w, l.heightFor(o, max(l.last, w)))
}

func (l *bar) Layout(o []fyne.CanvasObject, s fyne.Size) {
	l.last = s.Width
	b, t := l.room(o)
	if b+t+l.gap*2 <= s.Width {
		x := s.Width - b
		o[0].Move(fyne.NewPos(0, (s.Height-HeightFor(o[0], t))/2))
		o[0].Resize(fyne.NewSize(x-l.gap, HeightFor(o[0], t)))
		for _, c := range o[1:] {
			m := c.MinSize()
			c.Move(fyne.NewPos(x, (s.Height-m.Height)/2))
			c.Resize(m)
			x += m.Width + l.gap
		}
		return
	}
	h := HeightFor(o[0], s.Width)
	o[0].Move(fyne.NewPos(0, 0))
	o[0].Resize(fyne.NewSize(s.Width, h))
	l.place(o[1:], s.Width, func(c fyne.CanvasObject, x, y, w, ht float32) {
		c.Move(fyne.NewPos(x, h+l.gap+y))
		c.Resize(fyne.NewSize(w, ht))
	})
}

// Pad puts room around an object: above and below, left and right.
func Pad(v, h float32, o fyne.CanvasObject) *fyne.Container {
	return container.New(&padding{v, h}, o)
}

type padding struct{ v, h float32 }

func (l *padding) heightFor(objects []fyne.CanvasObject, width float32) float32 {
	return HeightFor(objects[0], width-2*l.h) + 2*l.v
}

func (l *padding) MinSize(objects []fyne.CanvasObject) fyne.Size {
	return objects[0].MinSize().Add(fyne.NewSize(2*l.h, 2*l.v))
}

func (l *padding) Layout(objects []fyne.CanvasObject, size fyne.Size) {
	objects[0].Move(fyne.NewPos(l.h, l.v))
	objects[0].Resize(fyne.NewSize(max(0, size.Width-2*l.h), max(0, size.Height-2*l.v)))
}

// On puts an object on a ground of a token's colour; edge draws an outline.
func On(token fyne.ThemeColorName, edge bool, o fyne.CanvasObject) *fyne.Container {
	g := NewGround(token)
	g.Edge = edge
	return container.New(stacked{}, g, o)
}

type stacked struct{}

func (stacked) heightFor(objects []fyne.CanvasObject, width float32) float32 {
	var h float32
	for _, o := range objects {
		h = max(h, HeightFor(o, width))
	}
	return h
}

func (stacked) MinSize(objects []fyne.CanvasObject) fyne.Size {
	var m fyne.Size
	for _, o := range objects {
		m = m.Max(o.MinSize())
	}
	return m
}

func (stacked) Layout(objects []fyne.CanvasObject, size fyne.Size) {
	for _, o := range objects {
		o.Move(fyne.NewPos(0, 0))
		o.Resize(size)
	}
}

// Ground is a rectangle in a token's colour that follows the theme.
type Ground struct {
	widget.BaseWidget
	Token fyne.ThemeColorName
	Edge  bool
	Round float32
	rect  *canvas.Rectangle
}

// NewGround returns a ground.
func NewGround(token fyne.ThemeColorName) *Ground {
	g := &Ground{Token: token}
	g.ExtendBaseWidget(g)
	return g
}

// CreateRenderer draws the ground.
func (g *Ground) CreateRenderer() fyne.WidgetRenderer {
	g.rect = canvas.NewRectangle(look.C(g.Token))
	r := &groundRenderer{g}
	r.Refresh()
	return r
}

type groundRenderer struct{ g *Ground }

func (r *groundRenderer) Destroy()                     {}
func (r *groundRenderer) MinSize() fyne.Size           { return fyne.Size{} }
func (r *groundRenderer) Objects() []fyne.CanvasObject { return []fyne.CanvasObject{r.g.rect} }
func (r *groundRenderer) Layout(s fyne.Size)           { r.g.rect.Resize(s) }
func (r *groundRenderer) Refresh() {
	g := r.g
	g.rect.FillColor = look.C(g.Token)
	g.rect.CornerRadius = g.Round
	g.rect.StrokeWidth = 0
	if g.Edge {
		g.rect.StrokeColor, g.rect.StrokeWidth = look.C(look.Edge), 1
		g.rect.CornerRadius = 4
	}
	canvas.Refresh(g.rect)
}

// Rule is a thin line across.
func Rule() fyne.CanvasObject {
	return container.New(thin{}, NewGround(look.Line))
}

type thin struct{}

func (thin) MinSize([]fyne.CanvasObject) fyne.Size { return fyne.NewSize(1, 1) }
func (thin) Layout(o []fyne.CanvasObject, s fyne.Size) {
	o[0].Resize(s)
	o[0].Move(fyne.NewPos(0, 0))
}

// Sized gives an object a smallest size.
func Sized(w, h float32, o fyne.CanvasObject) *fyne.Container {
	return container.New(&sized{fyne.NewSize(w, h)}, o)
}

type sized struct{ least fyne.Size }

func (l *sized) heightFor(objects []fyne.CanvasObject, width float32) float32 {
	return max(l.least.Height, HeightFor(objects[0], width))
}

func (l *sized) MinSize(o []fyne.CanvasObject) fyne.Size { return o[0].MinSize().Max(l.least) }
func (l *sized) Layout(o []fyne.CanvasObject, s fyne.Size) {
	o[0].Move(fyne.NewPos(0, 0))
	o[0].Resize(s)
}

// AtMost keeps an object no wider than a width, in the middle of what there is.
func AtMost(width float32, o fyne.CanvasObject) *fyne.Container {
	return container.New(&narrow{width}, o)
}

type narrow struct{ width float32 }

func (l *narrow) heightFor(objects []fyne.CanvasObject, width float32) float32 {
	return HeightFor(objects[0], min(width, l.width*look.Scale()))
}

func (l *narrow) MinSize(o []fyne.CanvasObject) fyne.Size { return o[0].MinSize() }
func (l *narrow) Layout(o []fyne.CanvasObject, s fyne.Size) {
	w := max(o[0].MinSize().Width, min(s.Width, l.width*look.Scale()))
	o[0].Move(fyne.NewPos(max(0, (s.Width-w)/2), 0))
	o[0].Resize(fyne.NewSize(min(w, s.Width), s.Height))
}

// Left sets an object at the left at its own width.
func Left(o fyne.CanvasObject) *fyne.Container { return container.New(atLeft{}, o) }

type atLeft struct{}

func (atLeft) heightFor(objects []fyne.CanvasObject, width float32) float32 {
	return HeightFor(objects[0], min(width, objects[0].MinSize().Width))
}
func (atLeft) MinSize(o []fyne.CanvasObject) fyne.Size { return o[0].MinSize() }
func (atLeft) Layout(o []fyne.CanvasObject, s fyne.Size) {
	w := min(s.Width, o[0].MinSize().Width)
	h := min(s.Height, HeightFor(o[0], w))
	o[0].Move(fyne.NewPos(0, (s.Height-h)/2))
	o[0].Resize(fyne.NewSize(w, h))
}

// Space is empty room.
func Space(w, h float32) fyne.CanvasObject {
	r := canvas.NewRectangle(with(look.C(look.Paper), 0))
	r.SetMinSize(fyne.NewSize(w, h))
	return r
}

// Para is text of several lines that breaks at the width it gets.
type Para struct {
	widget.BaseWidget
	Words string
	Type  fyne.ThemeSizeName
	Token fyne.ThemeColorName
	Bold  bool
	lines []*canvas.Text
	width float32
}

// NewPara returns a paragraph of body text.
func NewPara(words string) *Para {
	p := &Para{Words: words, Type: look.Body, Token: look.Ink}
	p.ExtendBaseWidget(p)
	return p
}

// In returns the paragraph in another colour.
func (p *Para) In(token fyne.ThemeColorName) *Para { p.Token = token; return p }

// As returns the paragraph in another size of the type scale.
func (p *Para) As(t fyne.ThemeSizeName) *Para { p.Type = t; return p }

// Strong returns the paragraph in bold.
func (p *Para) Strong() *Para { p.Bold = true; return p }

// Set changes the words.
func (p *Para) Set(words string) {
	if p.Words != words {
		p.Words = words
		p.Refresh()
	}
}

func (p *Para) broken(width float32) []string {
	var out []string
	style := fyne.TextStyle{Bold: p.Bold}
	start := 0
	for i := 0; i <= len(p.Words); i++ {
		if i == len(p.Words) || p.Words[i] == '\n' {
			out = append(out, Wrap(p.Words[start:i], width, look.Px(p.Type), style)...)
			start = i + 1
		}
	}
	return out
}

func (p *Para) lineHeight() float32 {
	return fyne.MeasureText("Xg", look.Px(p.Type), fyne.TextStyle{Bold: p.Bold}).Height
}

// HeightFor returns the height of the paragraph at a width.
func (p *Para) HeightFor(width float32) float32 {
	if p.Words == "" {
		return 0
	}
	return float32(len(p.broken(width))) * p.lineHeight()
}

// MinSize is as wide as the longest word and as high as the last width asks for.
func (p *Para) MinSize() fyne.Size {
	p.ExtendBaseWidget(p)
	var w float32
	for _, word := range Wrap(p.Words, 1, look.Px(p.Type), fyne.TextStyle{Bold: p.Bold}) {
		w = max(w, fyne.MeasureText(word, look.Px(p.Type), fyne.TextStyle{Bold: p.Bold}).Width)
	}
	width := p.width
	if width <= 0 {
		width = max(w, 240)
	}
	return fyne.NewSize(min(w, 180*look.Scale()), p.HeightFor(width))
}

// CreateRenderer draws the lines.
func (p *Para) CreateRenderer() fyne.WidgetRenderer { return &paraRenderer{p} }

type paraRenderer struct{ p *Para }

func (r *paraRenderer) Destroy()           {}
func (r *paraRenderer) MinSize() fyne.Size { return r.p.MinSize() }
func (r *paraRenderer) Objects() []fyne.CanvasObject {
	out := make([]fyne.CanvasObject, len(r.p.lines))
	for i, l := range r.p.lines {
		out[i] = l
	}
	return out
}

func (r *paraRenderer) Layout(s fyne.Size) {
	p := r.p
	p.width = s.Width
	p.lines = p.lines[:0]
	h := p.lineHeight()
	for i, w := range p.broken(s.Width) {
		t := canvas.NewText(w, look.C(p.Token))
		t.TextSize = look.Px(p.Type)
		t.TextStyle = fyne.TextStyle{Bold: p.Bold}
		t.Move(fyne.NewPos(0, float32(i)*h))
		t.Resize(fyne.NewSize(s.Width, h))
		p.lines = append(p.lines, t)
	}
}

func (r *paraRenderer) Refresh() {
	r.Layout(r.p.BaseWidget.Size())
	canvas.Refresh(r.p)
}

// Scroll scrolls a column of paragraphs and forms downwards; its content is as high as it
// needs to be at the width there is.
type Scroll struct {
	widget.BaseWidget
	content fyne.CanvasObject
	inner   *fyne.Container
	scroll  *container.Scroll
	width   float32

	OnSwipe func(dir int) // a finger went sideways: 1 to the left, for what comes next; -1 to the right

	dragging bool
	drag     fyne.Delta    // how far the finger has gone
	began    fyne.Position // where on the window
	stood    float32       // the offset then
}

// NewScroll returns a scrolled object.
func NewScroll(content fyne.CanvasObject) *Scroll {
	s := &Scroll{content: content}
	s.inner = container.New(&scrollLayout{s}, content)
	s.scroll = container.NewVScroll(s.inner)
	s.ExtendBaseWidget(s)
	enlist(s)
	return s
}

// SetContent replaces what is scrolled and goes back to its top.
func (s *Scroll) SetContent(content fyne.CanvasObject) {
	s.content = content
	s.inner.Objects = []fyne.CanvasObject{content}
	s.scroll.ScrollToTop()
	s.Reflow()
}

// Reflow measures the content again after it changed.
func (s *Scroll) Reflow() {
	s.inner.Refresh()
	s.scroll.Refresh()
}

// Offset returns how far down the content is scrolled.
func (s *Scroll) Offset() float32 { return s.scroll.Offset.Y }

// ScrollTo scrolls so that the band from y to y+h is in view, with a margin.
func (s *Scroll) ScrollTo(y, h, margin float32) {
	view := s.scroll.Size().Height
	at := s.scroll.Offset.Y
	switch {
	case y-margin < at:
		at = y - margin
	case y+h+margin > at+view:
		at = y + h + margin - view
	default:
		return
	}
	at = max(0, min(at, s.inner.Size().Height-view))
	s.scroll.ScrollToOffset(fyne.NewPos(0, at))
}

type scrollLayout struct{ s *Scroll }

// barRoom keeps the content clear of the scroll bar.
const barRoom = 10

func (l *scrollLayout) MinSize([]fyne.CanvasObject) fyne.Size {
	w := l.s.width - barRoom
	if w <= 0 {
		return l.s.content.MinSize()
	}
	return fyne.NewSize(0, HeightFor(l.s.content, w))
}

func (l *scrollLayout) Layout(o []fyne.CanvasObject, size fyne.Size) {
	w := max(0, l.s.width-barRoom)
	o[0].Move(fyne.NewPos(0, 0))
	o[0].Resize(fyne.NewSize(w, max(size.Height, HeightFor(o[0], w))))
}

// MinSize is small: what does not fit is scrolled to.
func (s *Scroll) MinSize() fyne.Size {
	s.ExtendBaseWidget(s)
	return fyne.NewSize(s.content.MinSize().Width+barRoom, 64)
}

// Resize tells the content its width first.
func (s *Scroll) Resize(size fyne.Size) {
	changed := s.width != size.Width
	s.width = size.Width
	s.BaseWidget.Resize(size)
	if changed {
		s.scroll.Refresh()
	}
}

// CreateRenderer shows the scroll.
func (s *Scroll) CreateRenderer() fyne.WidgetRenderer { return widget.NewSimpleRenderer(s.scroll) }

// By scrolls down by a distance, up where it is negative.
func (s *Scroll) By(d float32) {
	most := max(0, s.inner.Size().Height-s.scroll.Size().Height)
	s.scroll.ScrollToOffset(fyne.NewPos(0, max(0, min(most, s.scroll.Offset.Y+d))))
}
