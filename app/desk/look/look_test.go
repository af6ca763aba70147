package look

import (
	"image/color"
	"math"
	"testing"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/test"
	"fyne.io/fyne/v2/theme"

	"cordwalk.example/cordwalk/assets/icons"
)

// luminance is the relative luminance of WCAG 2.2.
func luminance(c color.Color) float64 {
	r, g, b, _ := c.RGBA()
	lin := func(v uint32) float64 {
		x := float64(v) / 65535
		if x <= 0.04045 {
			return x / 12.92
		}
		return math.Pow((x+0.055)/1.055, 2.4)
	}
	return 0.2126*lin(r) + 0.7152*lin(g) + 0.0722*lin(b)
}

// contrast is the contrast ratio of WCAG 2.2, 1 to 21.
func contrast(a, b color.Color) float64 {
	x, y := luminance(a), luminance(b)
	if x < y {
		x, y = y, x
	}
	return (x + 0.05) / (y + 0.05)
}

func TestContrastFormulaAgainstKnownPairs(t *testing.T) {
	// WCAG 2.2: black on white is 21:1; #767676 on white is the usual example of 4.54:1.
	for _, c := range []struct {
		a, b color.Color
		want float64
	}{{color.Black, color.White, 21}, {hex(0x767676), color.White, 4.54}} {
		if got := contrast(c.a, c.b); math.Abs(got-c.want) > 0.01 {
			t.Errorf("contrast of %v and %v is %.2f, want %.2f", c.a, c.b, got, c.want)
		}
	}
}

// WCAG 2.2 AA: 4.5:1 for text (1.4.3), 3:1 for graphics and focus (1.4.11).
func TestContrastTable(t *testing.T) {
	grounds := []fyne.ThemeColorName{Paper, Raised, Sunk, Over}
	for mode, p := range palettes {
		for _, g := range grounds {
			for _, text := range []fyne.ThemeColorName{Ink, InkSoft, Better, Worse, Call, Focus} {
				got := contrast(p[text], p[g])
				t.Logf("%-8s %-9s on %-9s %5.2f", mode, text, g, got)
				if got < 4.5 {
					t.Errorf("%s: text %s on %s is %.2f:1, less than 4.5:1", mode, text, g, got)
				}
			}
			for _, mark := range []fyne.ThemeColorName{Fill, Edge} {
				if got := contrast(p[mark], p[g]); got < 3 {
					t.Errorf("%s: graphic %s on %s is %.2f:1, less than 3:1", mode, mark, g, got)
				}
			}
		}
		for _, pair := range [][2]fyne.ThemeColorName{{Ink, FocusBed}, {InkSoft, FocusBed}, {Ink, CallBed}, {Call, CallBed}, {Paper, Ink}, {Paper, Focus}, {Paper, Call}} {
			if got := contrast(p[pair[0]], p[pair[1]]); got < 4.5 {
				t.Errorf("%s: text %s on %s is %.2f:1, less than 4.5:1", mode, pair[0], pair[1], got)
			}
		}
		if got := contrast(p[Fill], p[FocusBed]); got < 3 {
			t.Errorf("%s: filling on the focused cell is %.2f:1", mode, got)
		}
		ends := functionEnds[mode]
		if got := contrast(ends[1], p[Paper]); got < 7 {
			t.Errorf("%s: the strong end of the function scale on paper is %.2f:1", mode, got)
		}
	}
}

// Blue and orange stay apart for people without red or green cones: seen through the
// matrices of Viénot, Brettel and Mollon (1999), the pair keeps a difference in colour.
func TestBetterAndWorseForColourBlindEyes(t *testing.T) {
	lms := func(c color.NRGBA) [3]float64 {
		r, g, b := float64(c.R)/255, float64(c.G)/255, float64(c.B)/255
		r, g, b = math.Pow(r, 2.2), math.Pow(g, 2.2), math.Pow(b, 2.2)
		return [3]float64{17.8824*r + 43.5161*g + 4.11935*b, 3.45565*r + 27.1554*g + 3.86714*b, 0.0299566*r + 0.184309*g + 1.46709*b}
	}
	for mode, p := range palettes {
		a, b := lms(p[Better]), lms(p[Worse])
		// protanopes and deuteranopes keep the S cone: its signal against the L+M signal must differ.
		ra, rb := a[2]/(a[0]+a[1]), b[2]/(b[0]+b[1])
		if ra/rb < 2 && rb/ra < 2 {
			t.Errorf("%s: better and worse look alike without red or green cones (%.4f, %.4f)", mode, ra, rb)
		}
	}
}

func TestFunctionScaleIsMonotone(t *testing.T) {
	for _, v := range []fyne.ThemeVariant{theme.VariantLight, theme.VariantDark} {
		th := New(System, 1)
		last := luminance(th.Function(0, v))
		up := luminance(th.Function(1, v)) > last
		for i := 1; i <= 20; i++ {
			now := luminance(th.Function(float64(i)/20, v))
			if (now > last) != up {
				t.Errorf("variant %d: the scale turns at %d/20", v, i)
			}
			last = now
		}
	}
}

func TestEveryTokenIsInEveryPalette(t *testing.T) {
	for mode, p := range palettes {
		for other, q := range palettes {
			for name := range q {
				if _, ok := p[name]; !ok {
					t.Errorf("%s has no %s, which %s has", mode, name, other)
				}
			}
		}
	}
}

func TestScaleStaysInBounds(t *testing.T) {
	for in, want := range map[float32]float32{0.1: 0.8, 1: 1, 2: 2, 9: 2} {
		if got := New(Light, in).Scale; got != want {
			t.Errorf("scale %v becomes %v, want %v", in, got, want)
		}
	}
	if New("purple", 1).Mode != System {
		t.Error("an unknown mode does not follow the system")
	}
	if got := New(Light, 2).Size(Small); got != 26 {
		t.Errorf("small text at 200 %% is %v px", got)
	}
}

func TestIconsTakeTheColourOfTheTheme(t *testing.T) {
	app := test.NewTempApp(t)
	for _, name := range icons.Names() {
		app.Settings().SetTheme(New(Light, 1))
		i := Icon(name, Ink)
		light, lightName := string(i.Content()), i.Name()
		app.Settings().SetTheme(New(Dark, 1))
		if light == string(i.Content()) || lightName == i.Name() {
			t.Errorf("icon %s looks the same in light and dark", name)
		}
	}
	if Icon("unicorn", Ink) != nil {
		t.Error("an icon that nobody drew exists")
	}
}
