package mark

import (
	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/driver/desktop"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/look"
)

// Weight of a button: how loudly it asks to be pressed.
type Weight uint8

// The weights. A screen has one Main button at most; Call is for calling the veterinarian only.
const (
	Plain Weight = iota
	Main
	Quiet // no outline until the pointer or the keys are on it
	Call
)

// Button is Cordwalk's push button: an icon, a word, at least 44 px high.
type Button struct {
	widget.DisableableWidget
	Words    string
	IconName string
	Weight   Weight
	Chosen   bool   // pressed in, as one of a group
	Tip      string // shown when the pointer rests
	OnTap    func()
	Least    float32 // smallest width
	High     float32 // smallest height, 0 for the usual target
	Side     bool    // words to the left instead of the middle

	hover, focus bool
	bed, rim     *canvas.Rectangle
	text         *canvas.Text
	more         []*canvas.Text // the further lines of words that are wider than the button
	icon         *canvas.Image
}

// NewButton returns a button with words.
func NewButton(words, icon string, tap func()) *Button {
	b := &Button{Words: words, IconName: icon, OnTap: tap}
	b.ExtendBaseWidget(b)
	return b
}

// As gives the button a weight.
func (b *Button) As(w Weight) *Button { b.Weight = w; return b }

// WithTip gives the button a tip.
func (b *Button) WithTip(words string) *Button { b.Tip = words; return b }

// SetWords changes the words.
func (b *Button) SetWords(words string) {
	if b.Words != words {
		b.Words = words
		b.Refresh()
	}
}

// SetChosen presses the button in or lets it out.
func (b *Button) SetChosen(on bool) {
	if b.Chosen != on {
		b.Chosen = on
		b.Refresh()
	}
}

func (b *Button) pad() float32 { return look.Unit * 1.5 }

// MinSize holds the icon and the words with air around them.
func (b *Button) MinSize() fyne.Size {
	b.ExtendBaseWidget(b)
	w := 2 * b.pad()
	h := look.Target
	if b.Words != "" {
		m := fyne.MeasureText(b.Words, look.Px(look.Body), fyne.TextStyle{Bold: b.Weight == Main})
		w += m.Width
		h = max(h, m.Height+look.Unit*1.5)
	}
	if b.IconName != "" {
		w += b.iconSide()
		if b.Words != "" {
			w += look.Unit
		}
		h = max(h, b.iconSide()+look.Unit*1.5)
	}
	return fyne.NewSize(max(w, max(b.Least, look.Target)), max(h, b.High))
}

// lines are the words as they stand in a button of a width: broken only where they must be.
func (b *Button) lines(width float32) []string {
	if need := b.MinSize().Width; b.Words == "" || width <= 0 || width >= need-0.5 {
		return []string{b.Words}
	}
	room := width - 2*b.pad()
	if b.IconName != "" {
		room -= b.iconSide() + look.Unit
	}
	return Wrap(b.Words, room, look.Px(look.Body), fyne.TextStyle{Bold: b.Weight == Main})
}

// HeightFor returns the height at a width: words that are wider take more lines.
func (b *Button) HeightFor(width float32) float32 {
	h := b.MinSize().Height
	if n := len(b.lines(width)); n > 1 {
		m := fyne.MeasureText(b.Words, look.Px(look.Body), fyne.TextStyle{Bold: b.Weight == Main})
		h = max(h, float32(n)*m.Height+look.Unit*1.5)
	}
	return h
}

func (b *Button) iconSide() float32 { return 20 * look.Scale() }

// CreateRenderer draws the button.
func (b *Button) CreateRenderer() fyne.WidgetRenderer {
	b.bed, b.rim = canvas.NewRectangle(look.C(look.Paper)), canvas.NewRectangle(look.C(look.Paper))
	b.bed.CornerRadius, b.rim.CornerRadius = 4, 4
	b.text = canvas.NewText(b.Words, look.C(look.Ink))
	b.icon = &canvas.Image{FillMode: canvas.ImageFillContain}
	r := &buttonRenderer{b}
	r.Refresh()
	return r
}

type buttonRenderer struct{ b *Button }

func (r *buttonRenderer) Destroy()           {}
func (r *buttonRenderer) MinSize() fyne.Size { return r.b.MinSize() }
func (r *buttonRenderer) Objects() []fyne.CanvasObject {
	out := []fyne.CanvasObject{r.b.bed, r.b.rim, r.b.icon, r.b.text}
	for _, t := range r.b.more {
		out = append(out, t)
	}
	return out
}

func (r *buttonRenderer) Layout(s fyne.Size) {
	b := r.b
	b.bed.Resize(s)
	b.rim.Resize(s)
	lines := b.lines(s.Width)
	b.text.Text = lines[0]
	b.more = nil
	for _, l := range lines[1:] {
		t := canvas.NewText(l, b.text.Color)
		t.TextSize, t.TextStyle = b.text.TextSize, b.text.TextStyle
		b.more = append(b.more, t)
	}
	m := b.text.MinSize()
	for _, t := range b.more {
		m.Width = max(m.Width, t.MinSize().Width)
	}
	content := float32(0)
	if b.Words != "" {
		content = m.Width
	}
	side := b.iconSide()
	if b.IconName != "" {
		content += side
		if b.Words != "" {
			content += look.Unit
		}
	}
	x := (s.Width - content) / 2
	if b.Side {
		x = b.pad()
	}
	if b.IconName != "" {
		b.icon.Move(fyne.NewPos(x, (s.Height-side)/2))
		b.icon.Resize(fyne.NewSize(side, side))
		x += side + look.Unit
	}
	y := (s.Height - m.Height*float32(len(lines))) / 2
	for _, t := range append([]*canvas.Text{b.text}, b.more...) {
		t.Move(fyne.NewPos(x, y))
		t.Resize(t.MinSize())
		y += m.Height
	}
}

func (r *buttonRenderer) Refresh() {
	b := r.b
	bed, ink, rim, width := look.Paper, look.Ink, look.Edge, float32(1)
	switch b.Weight {
	case Main:
		bed, ink, rim = look.Ink, look.Paper, look.Ink
	case Quiet:
		width = 0
	case Call:
		bed, ink, rim = look.Call, look.Paper, look.Call
	}
	if b.Chosen && b.Weight != Main && b.Weight != Call {
		bed, rim, width = look.FocusBed, look.Focus, 1.5
	} else if b.hover && b.Weight != Main && b.Weight != Call && !b.Disabled() {
		bed = look.Over
	}
	if b.Disabled() {
		ink, rim = look.InkSoft, look.Line
		if b.Weight == Main || b.Weight == Call {
			bed = look.Sunk
		}
	}
	b.bed.FillColor = look.C(bed)
	if b.Weight == Quiet && !b.hover && !b.Chosen {
		b.bed.FillColor = with(look.C(look.Paper), 0)
	}
	b.rim.FillColor = with(look.C(look.Paper), 0)
	b.rim.StrokeColor, b.rim.StrokeWidth = look.C(rim), width
	if b.focus {
		b.rim.StrokeColor, b.rim.StrokeWidth = look.C(look.Focus), 3
	}
	b.text.Text = b.Words
	b.text.TextSize = look.Px(look.Body)
	b.text.TextStyle = fyne.TextStyle{Bold: b.Weight == Main}
	b.text.Color = look.C(ink)
	if b.IconName != "" {
		b.icon.Resource = look.Icon(b.IconName, ink)
		b.icon.Show()
	} else {
		b.icon.Hide()
	}
	r.Layout(b.BaseWidgetSize())
	for _, o := range r.Objects() {
		o.Refresh()
	}
}

// BaseWidgetSize is the size the button was given.
func (b *Button) BaseWidgetSize() fyne.Size { return b.DisableableWidget.Size() }

// MouseDown begins a press.
func (b *Button) MouseDown(e *desktop.MouseEvent) { Press(b, e.AbsolutePosition) }

// MouseUp does nothing: Tapped follows.
func (b *Button) MouseUp(*desktop.MouseEvent) {}

// Tapped runs the callback; a long press explains the button.
func (b *Button) Tapped(e *fyne.PointEvent) {
	if Held(b, b.Tip, e) {
		return
	}
	HideTip(b)
	if !b.Disabled() && b.OnTap != nil {
		b.OnTap()
	}
}

var (
	_ fyne.Focusable     = (*Button)(nil)
	_ desktop.Hoverable  = (*Button)(nil)
	_ desktop.Cursorable = (*Button)(nil)
	_ desktop.Mouseable  = (*Button)(nil)
)

// Cursor shows that the button can be pressed.
func (b *Button) Cursor() desktop.Cursor {
	if b.Disabled() {
		return desktop.DefaultCursor
	}
	return desktop.PointerCursor
}

// MouseIn marks the button and shows its tip.
func (b *Button) MouseIn(e *desktop.MouseEvent) {
	b.hover = true
	b.Refresh()
	ShowTip(b, b.Tip, e.AbsolutePosition)
}

// MouseMoved does nothing.
func (b *Button) MouseMoved(*desktop.MouseEvent) {}

// MouseOut unmarks the button.
func (b *Button) MouseOut() { b.hover = false; b.Refresh(); HideTip(b) }

// FocusGained draws the focus ring.
func (b *Button) FocusGained() { b.focus = true; b.Refresh() }

// FocusLost takes it away.
func (b *Button) FocusLost() { b.focus = false; b.Refresh() }

// TypedRune does nothing: keys with letters belong to the screen.
func (b *Button) TypedRune(r rune) {
	if r != ' ' {
		passRune(b, r)
	}
}

// TypedKey presses the button with Space or Enter and passes everything else to the screen.
func (b *Button) TypedKey(e *fyne.KeyEvent) {
	switch e.Name {
	case fyne.KeySpace, fyne.KeyReturn, fyne.KeyEnter:
		b.Tapped(nil)
	default:
		passKey(b, e)
	}
}

// passKey and passRune give keys that a focused control has no use for to the window, so that
// a screen's own keys work wherever the focus is.
func passKey(o fyne.CanvasObject, e *fyne.KeyEvent) {
	if c := fyne.CurrentApp().Driver().CanvasForObject(o); c != nil && c.OnTypedKey() != nil {
		c.OnTypedKey()(e)
	}
}

func passRune(o fyne.CanvasObject, r rune) {
	if c := fyne.CurrentApp().Driver().CanvasForObject(o); c != nil && c.OnTypedRune() != nil {
		c.OnTypedRune()(r)
	}
}
