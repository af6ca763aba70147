package mark

import (
	"image"
	"image/color"
	"testing"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/container"
	"fyne.io/fyne/v2/driver/desktop"
	"fyne.io/fyne/v2/test"

	"cordwalk.example/cordwalk/app/desk/ink"
	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/exam"
)

func themed(t *testing.T, mode look.Mode, scale float32) {
	t.Helper()
	test.NewTempApp(t).Settings().SetTheme(look.New(mode, scale))
}

// dark counts the share of a picture's middle column that is painted in ink from below.
func filled(img image.Image, x, y0, y1 int) int {
	n := 0
	for y := y0; y < y1; y++ {
		r, g, b, _ := img.At(x, y).RGBA()
		if r>>8 < 90 && g>>8 < 90 && b>>8 < 90 {
			n++
		}
	}
	return n
}

func TestABeadIsAsFullAsTheFindingIsHealthy(t *testing.T) {
	themed(t, look.Light, 1)
	last := -1
	for _, health := range []float64{0, 0.25, 0.5, 0.75, 1} {
		p := ink.New(60, 60, 1)
		p.Fill(color.White, ink.Rect(0, 0, 60, 60))
		DrawBead(p, view.Bead{Tested: true, Fill: health}, ink.Point{X: 30, Y: 30}, 24, true)
		n := filled(p.Picture(), 30, 10, 50) // inside the outline
		want := int(40 * health)
		if n < want-3 || n > want+3 {
			t.Errorf("health %.2f fills %d of 40 pixels, want about %d", health, n, want)
		}
		if n <= last {
			t.Errorf("health %.2f is not fuller than the one below", health)
		}
		last = n
	}
}

func TestUntestedIsDashedAndNeverFull(t *testing.T) {
	themed(t, look.Light, 1)
	p := ink.New(60, 60, 1)
	DrawBead(p, view.Bead{}, ink.Point{X: 30, Y: 30}, 24, true)
	if a := p.Picture().RGBAAt(30, 30).A; a != 0 {
		t.Error("the middle of an untested bead is painted")
	}
	on, off := 0, 0
	for _, q := range ink.Arc(ink.Point{X: 30, Y: 30}, 22.3, 0, 6.283, 200) {
		if p.Picture().RGBAAt(int(q.X+0.5), int(q.Y+0.5)).A > 100 {
			on++
		} else {
			off++
		}
	}
	if on < 40 || off < 40 {
		t.Errorf("the outline is drawn at %d and left free at %d of 200 places: not dashed", on, off)
	}
}

func TestBarsStandAboveABriskReflex(t *testing.T) {
	themed(t, look.Light, 1)
	count := func(bars int) int {
		p := ink.New(60, 80, 1)
		DrawBead(p, view.Bead{Tested: true, Fill: 0.5, Bars: bars}, ink.Point{X: 30, Y: 50}, 20, true)
		lines, in := 0, false
		for y := range 30 {
			a := p.Picture().RGBAAt(30, y).A > 128
			if a && !in && y < 29 {
				lines++
			}
			in = a
		}
		return lines
	}
	for bars := range 3 {
		if got := count(bars); got != bars {
			t.Errorf("%d bars: %d lines stand above the bead", bars, got)
		}
	}
}

// Each change has a shape of its own, so that colour is never needed to tell them apart.
func TestChangesDifferInShape(t *testing.T) {
	themed(t, look.Light, 1)
	pictures := map[string]string{}
	for _, d := range []exam.Direction{exam.Better, exam.Worse, exam.Same, exam.Different} {
		for _, hollow := range []bool{false, true} {
			m := view.MarkOf(d)
			m.Hollow = hollow
			p := ink.New(40, 40, 1)
			DrawChange(p, m, ink.Point{X: 20, Y: 20}, 14)
			shape := make([]byte, 0, 1600)
			for i := 3; i < len(p.Picture().Pix); i += 4 {
				shape = append(shape, p.Picture().Pix[i]>>7)
			}
			key := d.String()
			if hollow && (d == exam.Better || d == exam.Worse) {
				key += " hollow"
			}
			if old, ok := pictures[string(shape)]; ok && old != key {
				t.Errorf("%s and %s have the same shape", old, key)
			}
			pictures[string(shape)] = key
		}
	}
	if len(pictures) != 6 {
		t.Errorf("%d shapes, want 6", len(pictures))
	}
}

func TestFitEndsInAnEllipsisAndFits(t *testing.T) {
	themed(t, look.Light, 1)
	for _, words := range []string{"degenerative lumbosacral stenosis", "x", "", "Überlänge mit Umlauten äöü"} {
		for width := float32(20); width < 300; width += 7 {
			got, short := Fit(words, width, 16, fyne.TextStyle{})
			if w := fyne.MeasureText(got, 16, fyne.TextStyle{}).Width; w > width+1 && got != "…" {
				t.Fatalf("%q at %.0f px is %q, %.1f px wide", words, width, got, w)
			}
			if short != (got != words) {
				t.Fatalf("%q at %.0f px: shortened %v, but it is %q", words, width, short, got)
			}
		}
	}
}

func TestWrapBreaksFolders(t *testing.T) {
	themed(t, look.Light, 1)
	for _, l := range Wrap("Its data lie in /home/somebody/with/a/very/long/name/of/a/folder/for/the/practice here", 200, 16, fyne.TextStyle{}) {
		if w := fyne.MeasureText(l, 16, fyne.TextStyle{}).Width; w > 201 {
			t.Errorf("%q is %.0f px wide", l, w)
		}
	}
}

func TestButtonByKeyAndPointer(t *testing.T) {
	themed(t, look.Light, 1)
	n := 0
	b := NewButton("Keep", "tick", func() { n++ })
	w := test.NewTempWindow(t, b)
	test.Tap(b)
	w.Canvas().Focus(b)
	b.TypedKey(&fyne.KeyEvent{Name: fyne.KeySpace})
	b.TypedKey(&fyne.KeyEvent{Name: fyne.KeyReturn})
	if n != 3 {
		t.Errorf("pressed %d times, want 3", n)
	}
	b.Disable()
	test.Tap(b)
	if n != 3 {
		t.Error("a disabled button acts")
	}
}

// Keys that a focused button has no use for reach the window.
func TestKeysReachTheWindowThroughAButton(t *testing.T) {
	themed(t, look.Light, 1)
	b := NewButton("Keep", "", nil)
	w := test.NewTempWindow(t, b)
	var runes []rune
	var keys []fyne.KeyName
	w.Canvas().SetOnTypedRune(func(r rune) { runes = append(runes, r) })
	w.Canvas().SetOnTypedKey(func(e *fyne.KeyEvent) { keys = append(keys, e.Name) })
	w.Canvas().Focus(b)
	b.TypedRune('?')
	b.TypedRune(' ')
	b.TypedKey(&fyne.KeyEvent{Name: fyne.KeyF1})
	if string(runes) != "?" || len(keys) != 1 || keys[0] != fyne.KeyF1 {
		t.Errorf("the window got %q and %v", string(runes), keys)
	}
}

// Everything that can be pressed is at least 44 px in both directions, at every size of text.
func TestTargetsAreLargeEnough(t *testing.T) {
	for _, scale := range []float32{0.8, 1, 1.5, 2} {
		themed(t, look.Light, scale)
		for name, o := range map[string]fyne.CanvasObject{
			"button": NewButton("ok", "", nil), "icon button": NewButton("", "close", nil), "grade": NewGrade(view.Bead{}, "0", "no", nil),
			"field": NewField("", nil), "tick": Tick("", false, nil), "choice": Choice([]string{"a"}, []string{"a"}, "a", func(string) {}),
		} {
			if m := o.MinSize(); m.Height < look.Target || m.Width < look.Target {
				t.Errorf("%s at %.0f %% is %.0f × %.0f px", name, scale*100, m.Width, m.Height)
			}
		}
		large := NewGrade(view.Bead{}, "0", "no", nil)
		large.Large = true
		if large.MinSize().Height < 96 {
			t.Errorf("a large grade at %.0f %% is %.0f px high", scale*100, large.MinSize().Height)
		}
	}
}

func TestTipShowsNearThePointerAndInsideTheWindow(t *testing.T) {
	themed(t, look.Light, 1)
	b := NewButton("Keep", "", nil).WithTip("a tip of several words that explains the button in more than one line of text, if the window is as small as this one")
	w := test.NewTempWindow(t, nil)
	tips, layer := NewTips(w.Canvas())
	t.Cleanup(func() { ForgetTips(w.Canvas()) })
	w.SetContent(container.NewStack(b, layer))
	w.Resize(fyne.NewSize(320, 200))
	b.MouseIn(&desktop.MouseEvent{PointEvent: fyne.PointEvent{AbsolutePosition: fyne.NewPos(300, 190)}})
	if tips.Shown() != "" {
		t.Error("the tip is there at once")
	}
	tips.timer.Stop()
	tips.draw(fyne.NewPos(300, 190))
	for _, o := range tips.layer.Objects {
		if p, s := o.Position(), o.Size(); p.X < 0 || p.Y < 0 || p.X+s.Width > 321 || p.Y+s.Height > 201 {
			t.Errorf("a part of the tip lies at %v, %v", p, s)
		}
	}
	b.MouseOut()
	if tips.Shown() != "" || len(tips.layer.Objects) > 0 {
		t.Error("the tip stays")
	}
}

func TestColumnGivesParagraphsTheHeightTheyNeed(t *testing.T) {
	themed(t, look.Light, 1)
	p := NewPara("one two three four five six seven eight nine ten eleven twelve thirteen fourteen fifteen sixteen")
	after := Line("after")
	c := Column(8, p, after)
	wide, narrow := HeightFor(c, 900), HeightFor(c, 200)
	if narrow <= wide {
		t.Fatalf("the column is %.0f high at 900 px and %.0f at 200 px", wide, narrow)
	}
	c.Resize(fyne.NewSize(200, narrow))
	if after.Position().Y < p.Position().Y+HeightFor(p, 200) {
		t.Error("the line after the paragraph begins inside it")
	}
}

func TestRowGivesWayByWeight(t *testing.T) {
	themed(t, look.Light, 1)
	a, b, fix := Line("a").AtLeast(10), Line("b").AtLeast(10), Space(50, 10)
	r := Row(10, []float32{1, 3, 0}, a, b, fix)
	r.Resize(fyne.NewSize(470, 30))
	if a.Size().Width != 100 || b.Size().Width != 300 || fix.Size().Width != 50 {
		t.Errorf("the row shares 470 px as %.0f, %.0f, %.0f", a.Size().Width, b.Size().Width, fix.Size().Width)
	}
}

func TestBarPutsButtonsBelowWhereThereIsNoRoom(t *testing.T) {
	themed(t, look.Light, 1)
	title, b := Title("A rather long title of a screen"), NewButton("Keep and start exam", "", nil)
	bar := Bar(8, title, b)
	if one, two := HeightFor(bar, 1200), HeightFor(bar, 460); two <= one {
		t.Errorf("the bar is %.0f high at 1200 px and %.0f at 460 px", one, two)
	}
	bar.Resize(fyne.NewSize(460, HeightFor(bar, 460)))
	if b.Position().Y < title.Size().Height {
		t.Error("the button lies over the title")
	}
}

func TestScrollFollowsItsWidth(t *testing.T) {
	themed(t, look.Light, 1)
	p := NewPara("one two three four five six seven eight nine ten eleven twelve thirteen fourteen fifteen sixteen seventeen eighteen")
	s := NewScroll(p)
	w := test.NewTempWindow(t, s)
	w.Resize(fyne.NewSize(160, 100))
	if h := s.inner.Size().Height; h < HeightFor(p, s.width-barRoom)-1 {
		t.Errorf("the content is %.0f high, its words need %.0f", h, HeightFor(p, s.width-barRoom))
	}
	s.By(1e6)
	if s.Offset() <= 0 {
		t.Error("it does not scroll")
	}
	s.By(-1e6)
	if s.Offset() != 0 {
		t.Error("it does not scroll back")
	}
}

// The wheel over a line of text moves the form that the line lies in.
func TestTheWheelOverAFieldScrollsTheForm(t *testing.T) {
	panes = nil // of windows of other tests, which the driver for tests does not tell apart
	test.NewTempApp(t).Settings().SetTheme(look.New(look.Light, 1))
	field := NewField("Bramble", nil)
	s := NewScroll(Column(look.Unit, field, Space(1, 2000)))
	w := test.NewTempWindow(t, s)
	w.Resize(fyne.NewSize(300, 200))
	test.Scroll(w.Canvas(), fyne.NewPos(40, 20), 0, -60)
	if s.Offset() == 0 {
		t.Error("the form stands still")
	}
}
