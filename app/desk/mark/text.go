package mark

import (
	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/driver/desktop"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/look"
)

// Text is one line of text. Where there is less room than it needs it ends in an ellipsis
// and shows the whole as a tip; nothing is ever cut in the middle of a letter.
type Text struct {
	widget.BaseWidget
	Words    string
	Type     fyne.ThemeSizeName
	Token    fyne.ThemeColorName
	Bold     bool
	Align    fyne.TextAlign
	Least    float32 // smallest width; 0: as wide as the words
	line     *canvas.Text
	shortend bool
}

// Line returns a line of body text.
func Line(words string) *Text { return newText(words, look.Body, look.Ink, false) }

// Bold returns a line of bold body text.
func Bold(words string) *Text { return newText(words, look.Body, look.Ink, true) }

// Soft returns a line of soft body text.
func Soft(words string) *Text { return newText(words, look.Body, look.InkSoft, false) }

// Note returns a line of the smallest text, for sources and times only.
func Note(words string) *Text { return newText(words, look.Small, look.InkSoft, false) }

// Heading returns a heading of the second order.
func Heading(words string) *Text { return newText(words, look.Head, look.Ink, true) }

// Title returns a heading of the first order.
func Title(words string) *Text { return newText(words, look.Title, look.Ink, true) }

func newText(words string, size fyne.ThemeSizeName, token fyne.ThemeColorName, bold bool) *Text {
	t := &Text{Words: words, Type: size, Token: token, Bold: bold}
	t.ExtendBaseWidget(t)
	return t
}

// In returns the text in another colour.
func (t *Text) In(token fyne.ThemeColorName) *Text { t.Token = token; return t }

// Right returns the text set to the right.
func (t *Text) Right() *Text { t.Align = fyne.TextAlignTrailing; return t }

// Centred returns the text set to the middle.
func (t *Text) Centred() *Text { t.Align = fyne.TextAlignCenter; return t }

// AtLeast lets the text be shortened down to a width.
func (t *Text) AtLeast(w float32) *Text { t.Least = w; return t }

// Set changes the words.
func (t *Text) Set(words string) {
	if t.Words != words {
		t.Words = words
		t.Refresh()
	}
}

func (t *Text) measure(s string) fyne.Size {
	return fyne.MeasureText(s, look.Px(t.Type), fyne.TextStyle{Bold: t.Bold})
}

// MinSize is the words' own size, or narrower where AtLeast allows it.
func (t *Text) MinSize() fyne.Size {
	t.ExtendBaseWidget(t)
	m := t.measure(t.Words)
	if t.Words == "" {
		m = fyne.NewSize(0, t.measure("X").Height)
	}
	if t.Least > 0 && m.Width > t.Least {
		m.Width = t.Least
	}
	return m
}

// Shown returns the words as they stand on the screen, shortened or not.
func (t *Text) Shown() string {
	if t.line == nil {
		return t.Words
	}
	return t.line.Text
}

// CreateRenderer draws the line.
func (t *Text) CreateRenderer() fyne.WidgetRenderer {
	t.line = canvas.NewText(t.Words, look.C(t.Token))
	r := &textRenderer{t}
	r.Refresh()
	return r
}

type textRenderer struct{ t *Text }

func (r *textRenderer) Destroy()                     {}
func (r *textRenderer) MinSize() fyne.Size           { return r.t.MinSize() }
func (r *textRenderer) Objects() []fyne.CanvasObject { return []fyne.CanvasObject{r.t.line} }

func (r *textRenderer) Layout(s fyne.Size) {
	t := r.t
	fit, short := Fit(t.Words, s.Width, look.Px(t.Type), fyne.TextStyle{Bold: t.Bold})
	t.shortend = short
	if t.line.Text != fit {
		t.line.Text = fit
		t.line.Refresh()
	}
	h := t.line.MinSize().Height
	t.line.Move(fyne.NewPos(0, (s.Height-h)/2))
	t.line.Resize(fyne.NewSize(s.Width, h))
}

func (r *textRenderer) Refresh() {
	t := r.t
	t.line.Color = look.C(t.Token)
	t.line.TextSize = look.Px(t.Type)
	t.line.TextStyle = fyne.TextStyle{Bold: t.Bold}
	t.line.Alignment = t.Align
	if s := t.BaseWidget.Size(); s.Width > 0 {
		fit, short := Fit(t.Words, s.Width, t.line.TextSize, t.line.TextStyle)
		t.line.Text, t.shortend = fit, short
		h := t.line.MinSize().Height
		t.line.Move(fyne.NewPos(0, (s.Height-h)/2))
		t.line.Resize(fyne.NewSize(s.Width, h))
	}
	canvas.Refresh(t.line)
}

// Fit shortens words to a width, with an ellipsis at the end, and says whether it had to.
func Fit(words string, width, size float32, style fyne.TextStyle) (string, bool) {
	if width <= 0 || fyne.MeasureText(words, size, style).Width <= width+0.5 {
		return words, false
	}
	r := []rune(words)
	lo, hi := 0, len(r)
	for lo < hi {
		mid := (lo + hi + 1) / 2
		if fyne.MeasureText(string(r[:mid])+"…", size, style).Width <= width {
			lo = mid
		} else {
			hi = mid - 1
		}
	}
	for lo > 0 && r[lo-1] == ' ' {
		lo--
	}
	return string(r[:lo]) + "…", true
}

var _ desktop.Hoverable = (*Text)(nil)

// MouseIn shows the whole line where it had to be shortened.
func (t *Text) MouseIn(e *desktop.MouseEvent) {
	if t.shortend {
		ShowTip(t, t.Words, e.AbsolutePosition)
	}
}

// MouseMoved does nothing.
func (t *Text) MouseMoved(*desktop.MouseEvent) {}

// MouseOut hides the tip.
func (t *Text) MouseOut() { HideTip(t) }
