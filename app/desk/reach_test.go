package desk

import (
	"fmt"
	"image/color"
	"reflect"
	"strings"
	"testing"
	"time"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/container"
	"fyne.io/fyne/v2/driver/desktop"
	"fyne.io/fyne/v2/test"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/exam"
)

// drawn walks everything that is drawn under an object, with its place on the window and the part of the
// window in which it is seen.
func drawn(root fyne.CanvasObject, size fyne.Size, visit func(o fyne.CanvasObject, at fyne.Position, clip box)) {
	var walk func(o fyne.CanvasObject, at fyne.Position, clip box)
	walk = func(o fyne.CanvasObject, at fyne.Position, clip box) {
		if o == nil || !o.Visible() {
			return
		}
		at = at.Add(o.Position())
		visit(o, at, clip)
		switch x := o.(type) {
		case *fyne.Container:
			for _, c := range x.Objects {
				walk(c, at, clip)
			}
		case fyne.Widget:
			if _, ok := x.(*container.Scroll); ok {
				clip = clip.cut(box{at.X, at.Y, at.X + o.Size().Width, at.Y + o.Size().Height})
			}
			for _, c := range test.WidgetRenderer(x).Objects() {
				walk(c, at, clip)
			}
		}
	}
	walk(root, fyne.NewPos(0, 0), box{0, 0, size.Width, size.Height})
}

// appearance writes down how something looks: every shape in it with its place and its colours.
func appearance(o fyne.CanvasObject) string {
	var b strings.Builder
	paint := func(c color.Color) string {
		if c == nil {
			return "none"
		}
		r, g, bl, a := c.RGBA()
		return fmt.Sprintf("%x.%x.%x.%x", r, g, bl, a)
	}
	drawn(o, fyne.NewSize(4000, 40000), func(o fyne.CanvasObject, at fyne.Position, _ box) {
		switch x := o.(type) {
		case *canvas.Rectangle:
			fmt.Fprintln(&b, "rectangle", at, x.Size(), paint(x.FillColor), paint(x.StrokeColor), x.StrokeWidth)
		case *canvas.Circle:
			fmt.Fprintln(&b, "circle", at, x.Size(), paint(x.FillColor), paint(x.StrokeColor), x.StrokeWidth)
		case *canvas.Text:
			fmt.Fprintln(&b, "text", at, x.Text, paint(x.Color))
		case *canvas.Image, *canvas.Raster, *canvas.Line:
			fmt.Fprintln(&b, "picture", at, o.Size())
		}
	})
	return b.String()
}

// name tells a control in a message by its words.
func name(o fyne.CanvasObject) string {
	var words []string
	for _, x := range texts(o, fyne.NewSize(4000, 40000)) {
		words = append(words, x.words)
	}
	return fmt.Sprintf("%T %q", o, strings.Join(words, " "))
}

// byKeys are the controls that take no focus because the screen's own keys do what they do, with the key.
var byKeys = map[string]string{
	"*desk.gridCell":   "arrows and Tab move from cell to cell",
	"*mark.Grade":      "0 to 4",
	"*desk.caseLine":   "Up and Down choose, Enter opens",
	"*desk.catcher":    "Escape",
	"*widget.listItem": "its list takes the arrows",
}

// ownParts are controls inside others: what can be focused is the whole.
func ownPart(o fyne.CanvasObject) bool {
	switch reflect.TypeOf(o).String() {
	case "*widget.passwordRevealer", "*widget.entryContent", "*widget.scrollBarArea", "*widget.scrollBar", "*widget.shadow":
		return true
	}
	return false
}

// Everything that can be pressed can be reached by Tab or has a key, it is large enough for a finger, and what
// has the focus looks different from what has not.
func TestEverythingIsReachedByKeysAndLargeEnough(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	c := w.win.Canvas()
	seen := map[string]bool{}
	for screen, open := range screens(s) {
		s.app.settings.OneByOne = false
		open()
		s.settle()
		root := w.win.Content()
		if len(w.layer.Objects) > 0 {
			root = w.layer
		}
		if p, ok := w.page.(*examPage); ok && len(w.layer.Objects) == 0 && c.Focused() != nil {
			// Tab walks the exam until Escape gives it to the buttons.
			if _, tab := c.Focused().(fyne.Tabbable); tab && p.tab == tabExam {
				s.key(fyne.KeyEscape)
			}
		}
		reached := map[fyne.CanvasObject]bool{}
		for range 600 {
			f := c.Focused()
			if o, ok := f.(fyne.CanvasObject); ok {
				if reached[o] {
					break
				}
				reached[o] = true
			}
			c.FocusNext()
		}
		drawn(root, c.Size(), func(o fyne.CanvasObject, at fyne.Position, _ box) {
			tap, ok := o.(fyne.Tappable)
			if !ok || ownPart(o) {
				return
			}
			if d, ok := o.(fyne.Disableable); ok && d.Disabled() {
				return
			}
			kind := reflect.TypeOf(o).String()
			_, keyed := byKeys[kind]
			_, focusable := tap.(fyne.Focusable)
			switch {
			case keyed:
			case !focusable:
				t.Errorf("%s: %s takes no focus and has no key", screen, name(o))
			case !reached[o]:
				t.Errorf("%s: Tab does not reach %s", screen, name(o))
			}
			if z := o.Size(); (z.Width < look.Target-0.5 || z.Height < look.Target-0.5) && kind != "*desk.catcher" {
				t.Errorf("%s: %s is %.0f × %.0f px", screen, name(o), z.Width, z.Height)
			}
		})
		for o := range reached {
			f := o.(fyne.Focusable)
			kind := reflect.TypeOf(o).String()
			if seen[kind+screen] {
				continue
			}
			seen[kind+screen] = true
			c.Unfocus()
			before := appearance(o)
			if before == "" {
				continue // an empty list
			}
			c.Focus(f)
			if c.Focused() != f {
				t.Errorf("%s: %s does not keep the focus", screen, name(o))
				continue
			}
			if appearance(o) == before {
				t.Errorf("%s: %s looks the same with the focus and without", screen, name(o))
			}
		}
		c.Unfocus()
		w.hideSheet()
	}
}

// keyWords are the words for keys in the sheet of keys, by the toolkit's names.
var keyWords = map[string][]string{
	"Up": {"arrows", "Up"}, "Down": {"arrows", "Down"}, "Left": {"arrows", "Left"}, "Right": {"arrows", "Right"},
	"Next": {"Page"}, "Prior": {"Page"}, "BackSpace": {"Backspace"}, "Delete": {"Backspace", "Delete"},
	"Return": {"Enter"}, "KP_Enter": {"Enter"}, "Space": {"space"}, "Escape": {"Escape"}, "Tab": {"Tab"},
	"Home": {"Home"}, "End": {"End"}, "F1": {"F1"},
}

// listed reports whether a sheet of keys names one of some keys, each as a word of its own.
func listed(list []view.KeyHelp, keys ...string) bool {
	for _, h := range list {
		for _, word := range strings.Fields(h.Keys) {
			if len(word) > 1 {
				word = strings.TrimSuffix(word, ",")
			}
			for _, k := range keys {
				if word == k || len(k) > 1 && strings.EqualFold(word, k) {
					return true
				}
			}
		}
	}
	return false
}

// Every key that a screen acts on stands in its sheet of keys.
func TestTheSheetOfKeysIsComplete(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	id := s.id("Bramble")
	for _, sc := range []view.Screen{view.ScreenCaseload, view.ScreenExam, view.ScreenCompare, view.ScreenCourse, view.ScreenSheet,
		view.ScreenDevices, view.ScreenSettings, view.ScreenPatient, view.ScreenHistory, view.ScreenChoices, view.ScreenOutcomes} {
		fresh := func() { s.show(sc, id) }
		fresh()
		list := globalKeys()
		if h, ok := w.page.(helper); ok {
			list = append(list, h.help()...)
		}
		for r := rune(' '); r < 127; r++ {
			word := string(r)
			if r == ' ' {
				word = "space"
			}
			switch p := w.page.(type) {
			case *examPage:
				if sheet := p.sheet; r >= '0' && r <= '4' || !sheet.Press(view.Rune(r)).Handled && !p.typedRune(r) {
					sheet.Press(view.Named("Escape"))
					continue
				}
			case runeTaker:
				if !p.typedRune(r) {
					continue
				}
			default:
				continue
			}
			// What the same key of another layout, or its shift, writes.
			twins := map[string]string{"-": "−", "U": "Shift+U"}
			if sc == view.ScreenCourse {
				twins["="] = "+"
			}
			if !listed(list, word, twins[word]) && !(sc == view.ScreenExam && strings.ContainsRune("56789.,", r)) {
				t.Errorf("%s: the key %q does something and is not in the sheet of keys", sc, word)
			}
			fresh()
		}
		if p, ok := w.page.(*examPage); ok {
			for key, told := range map[string][]string{"Up": {"arrows"}, "Down": {"arrows"}, "Left": {"arrows"}, "Right": {"arrows"},
				"Home": {"Home"}, "End": {"End"}, "Tab": {"Tab"}, "Backspace": {"Backspace"}, "Delete": {"Delete"}} {
				if !p.sheet.Press(view.Named(key)).Handled || !listed(list, told...) {
					t.Errorf("exam: the key %s is not in the sheet of keys, or does nothing", key)
				}
			}
		}
		for key, told := range keyWords {
			k, ok := w.page.(keyTaker)
			if !ok {
				break
			}
			if k.typedKey(fyne.KeyName(key)) && !listed(list, told...) {
				t.Errorf("%s: the key %s does something and is not in the sheet of keys", sc, key)
			}
			w.hideSheet()
			if w.here().Screen != sc {
				fresh()
			}
		}
	}
}

// first returns the first control of a type under an object that fits.
func first[T fyne.CanvasObject](t *testing.T, root fyne.CanvasObject, fits func(T) bool) T {
	t.Helper()
	var out T
	found := false
	drawn(root, fyne.NewSize(4000, 40000), func(o fyne.CanvasObject, _ fyne.Position, _ box) {
		if x, ok := o.(T); ok && !found && fits(x) {
			out, found = x, true
		}
	})
	if !found {
		t.Fatalf("there is no %T", out)
	}
	return out
}

// press goes down on a control and comes up again, as the window's driver tells it.
func press(o interface {
	fyne.Tappable
	desktop.Mouseable
}, at fyne.Position, hold time.Duration) {
	e := &desktop.MouseEvent{}
	e.AbsolutePosition = at
	o.MouseDown(e)
	time.Sleep(hold)
	o.MouseUp(e)
	o.Tapped(&fyne.PointEvent{AbsolutePosition: at})
}

// drag moves a finger over a page; it begins at a place of the window.
func drag(o fyne.Draggable, at fyne.Position, dx, dy float32) {
	const steps = 8
	for range steps {
		at = at.AddXY(dx/steps, dy/steps)
		e := &fyne.DragEvent{Dragged: fyne.Delta{DX: dx / steps, DY: dy / steps}}
		e.AbsolutePosition = at
		o.Dragged(e)
	}
	o.DragEnd()
}

// In the grid a finger scrolls, swipes to the next test and back, and presses long to be told what a cell is.
func TestFingersOnTheGrid(t *testing.T) {
	s := newStage(t, view.Settings{Protocol: exam.FullSpinal})
	w := s.demo()
	s.show(view.ScreenExam, s.id("Bramble"))
	p := s.exam()
	at := fyne.NewPos(400, 400)
	from := p.grid.scroll.Offset()
	drag(p.grid.scroll, at, 3, -200)
	if got := p.grid.scroll.Offset() - from; got < 190 || got > 210 {
		t.Errorf("a drag of 200 px scrolled by %.0f", got)
	}
	before := p.sheet.FocusIndex()
	test.Drag(w.win.Canvas(), at, -120, 5)
	if p.sheet.FocusIndex() == before {
		t.Error("a swipe to the left does not go on")
	}
	test.Drag(w.win.Canvas(), at, 120, 5)
	if p.sheet.FocusIndex() != before {
		t.Error("a swipe to the right does not go back")
	}
	other := first(t, w.win.Content(), func(c *gridCell) bool { return c.index != p.sheet.FocusIndex() })
	press(other, at, 650*time.Millisecond)
	if p.sheet.FocusIndex() != before {
		t.Error("a long press moved the focus")
	}
	if got := w.tips.Shown(); !strings.HasPrefix(got, p.sheet.Cells()[other.index].Name()) {
		t.Errorf("a long press says %q", got)
	}
	press(other, at, 0)
	if p.sheet.FocusIndex() != other.index {
		t.Error("a short press does not move the focus")
	}
	if n := len(p.sheet.Visit().Findings); p.sheet.CanUndo() {
		t.Errorf("fingers that only looked changed the exam, which holds %d findings", n)
	}
}

// One at a time: a swipe goes on and back, a drag up and down scrolls and no more, and a finger that slips on a
// large button grades all the same.
func TestFingersOnTheCard(t *testing.T) {
	s := newStage(t, view.Settings{Protocol: exam.FullSpinal, OneByOne: true})
	w := s.demo()
	s.show(view.ScreenExam, s.id("Bramble"))
	p := s.exam()
	at := fyne.NewPos(400, 500)
	start := p.sheet.FocusIndex()
	test.Drag(w.win.Canvas(), at, -120, 10)
	next := p.sheet.FocusIndex()
	if next == start {
		t.Fatal("a swipe to the left does not go on")
	}
	drag(p.card.scroll, at, 30, -150)
	if p.sheet.FocusIndex() != next {
		t.Error("a drag upwards turned to another test")
	}
	test.Drag(w.win.Canvas(), at, 120, -10)
	if p.sheet.FocusIndex() != start {
		t.Error("a swipe to the right does not go back")
	}
	g := first(t, p.card, func(g *mark.Grade) bool { return g.Number == "2" })
	if h := g.Size().Height; h < 96 {
		t.Errorf("the button of a grade is %.0f px high", h)
	}
	cell := p.sheet.Cells()[start].Key
	e := &desktop.MouseEvent{}
	e.AbsolutePosition = at
	g.MouseDown(e)
	drag(p.card.scroll, at, 7, 4)
	if got, ok := p.sheet.Visit().Grade(cell.Item, cell.Site); !ok || got != 2 {
		t.Errorf("a finger that slipped by 8 px gave grade %d, %v", got, ok)
	}
	// A drag over the same button is none of its business.
	g = first(t, p.card, func(g *mark.Grade) bool { return g.Number == "1" })
	n := len(p.sheet.Visit().Findings)
	g.MouseDown(e)
	drag(p.card.scroll, at, 10, -90)
	if len(p.sheet.Visit().Findings) != n {
		t.Error("a drag that began on a button pressed it")
	}
}

// A long press on a button with a tip explains it and does nothing else.
func TestALongPressExplains(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	s.show(view.ScreenExam, s.id("Bramble"))
	p := s.exam()
	press(p.one, fyne.NewPos(600, 100), 650*time.Millisecond)
	if s.app.settings.OneByOne || w.tips.Shown() != p.one.Tip {
		t.Errorf("one by one %v, the tip says %q", s.app.settings.OneByOne, w.tips.Shown())
	}
	press(p.one, fyne.NewPos(600, 100), 0)
	if !s.app.settings.OneByOne {
		t.Error("a short press does nothing")
	}
}

// The arrows go from mark to mark on a chart that has the keys, and each explains itself.
func TestArrowsExplainTheMarksOfACourse(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	s.show(view.ScreenCourse, s.id("Bramble"))
	p := w.page.(*coursePage)
	s.until("the course worked out", func() bool { return p.result != nil })
	for name, h := range map[string]*chartHost{"strip": p.strip, "limbs": p.limbs, "function": p.fn} {
		w.win.Canvas().Focus(h)
		said := map[string]bool{}
		for _, k := range []fyne.KeyName{fyne.KeyRight, fyne.KeyRight, fyne.KeyDown, fyne.KeyDown, fyne.KeyLeft, fyne.KeyUp} {
			s.key(k)
			said[w.tips.Shown()] = true
		}
		if delete(said, ""); len(said) < 4 {
			t.Errorf("%s: six arrows explained %d marks", name, len(said))
		}
		s.key(fyne.KeyEscape)
		if w.win.Canvas().Focused() != nil || w.tips.Shown() != "" {
			t.Errorf("%s: Escape does not give the keys back", name)
		}
	}
}
