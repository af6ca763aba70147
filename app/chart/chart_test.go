package chart

import (
	"bytes"
	"flag"
	"image/color"
	"image/png"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/recorder"
	"gonum.org/v1/plot/vg/vgimg"
	"gonum.org/v1/plot/vg/vgsvg"

	"cordwalk.example/cordwalk/assets/drawing"
	"cordwalk.example/cordwalk/exam"
)

var update = flag.Bool("update", false, "write the pictures in testdata anew")

func day(n int) time.Time {
	return time.Date(2026, 3, 2, 10, 0, 0, 0, time.UTC).AddDate(0, 0, n)
}

// drawn is what a chart of the tests looks like: its name, its size and how it is drawn.
type drawn struct {
	name string
	w, h vg.Length
	draw func(draw.Canvas, Style)
}

func visits() []Visit {
	return []Visit{{At: day(0)}, {At: day(7)}, {At: day(14), Unlike: true, Note: "surface"}, {At: day(20)}, {At: day(28)}, {At: day(56)}, {At: day(63)}, {At: day(70)}}
}

func events() []Event {
	return []Event{{day(-3), "surgery"}, {day(14), "gabapentin"}, {day(16), "new boots"}, {day(58), "fall on the stairs"}}
}

func segmentNames() (names []string, major []bool) {
	for _, r := range []struct {
		letter string
		n      int
	}{{"C", 8}, {"T", 13}, {"L", 7}, {"S", 3}, {"Cd", 5}} {
		for i := 1; i <= r.n; i++ {
			names, major = append(names, r.letter+number(float64(i))), append(major, i == 1)
		}
	}
	return names, major
}

func testStrip() Strip {
	s := Strip{Visits: visits(), Events: events(), Model: true, Legend: true}
	names, major := segmentNames()
	for i, n := range names {
		row := StripRow{Label: n, Major: major[i]}
		for v := range s.Visits {
			left, right := 95.0, 97.0
			if i >= 20 && i <= 25 {
				left, right = 20+float64(v)*9, 40+float64(v)*7
			}
			width := 12 + float64((i*7+v*13)%50)
			value := func(x float64) Value {
				return Value{Known: (i+v)%11 != 0, Value: x, Banded: true, Low: x - width/2, High: x + width/2, Count: 3}
			}
			row.Left, row.Right = append(row.Left, value(left)), append(row.Right, value(right))
		}
		s.Rows = append(s.Rows, row)
	}
	return s
}

func testLimbs() Limbs {
	l := Limbs{Visits: visits(), Events: events(), Limbs: []Series{
		GradeSeries("thoracic left", 4, []int8{4, 4, 4, 4, 4, 4, 4, 4}),
		GradeSeries("thoracic right", 4, []int8{4, 4, -1, 4, 4, 4, 4, 4}),
		GradeSeries("pelvic left", 4, []int8{0, 1, 1, -1, 2, 3, 2, 3}),
		GradeSeries("pelvic right", 4, []int8{1, 1, 2, 2, 3, 3, 3, -1}),
	}}
	l.Limbs[2].Goals = []Goal{{Value: 3, By: day(75), Word: "bears weight unaided"}}
	l.Limbs[2].Forecast = []Forecast{{day(77), 3.1, 2.4, 3.8}, {day(84), 3.3, 2.2, 4}}
	for i := range l.Limbs[3].Values {
		if v := &l.Limbs[3].Values[i]; v.Known {
			v.Banded, v.Low, v.High = true, v.Value-0.5, v.Value+0.4
		}
	}
	return l
}

func testMeasures() Measures {
	v := func(xs ...float64) (out []Value) {
		for _, x := range xs {
			out = append(out, Value{Known: x > 0, Value: x, Mark: number(x)})
		}
		return out
	}
	return Measures{Visits: visits(), Series: []Series{
		{Label: "thigh girth, left", Unit: "cm", Values: v(31, 31.2, 31.5, 0, 32, 33.5, 34, 34.2), Noise: 1, Goals: []Goal{{Value: 35, Word: "as the other side"}}},
		{Label: "weight", Unit: "kg", Values: v(9.4, 9.4, 9.3, 9.2, 9.3, 9.1, 9, 9)},
		{Label: "open-field score", Min: 0, Max: 14, Values: v(1, 2, 3, 4, 5, 8, 7, 9)},
	}}
}

func testCord(lying bool) CordMap {
	m := CordMap{Lying: lying}
	last := exam.Region(0)
	for _, b := range drawing.Column(exam.Dog) {
		m.Vertebrae = append(m.Vertebrae, CordBlock{b.Vertebra.String(), b.Vertebra.Region() != last, b.Start, b.End})
		last = b.Vertebra.Region()
	}
	names, _ := segmentNames()
	for i, n := range names {
		from := float64(i) / 36 * 0.86
		s := CordSegment{Name: n, From: from, To: from + 0.86/36, Known: true, Left: 0.01, Right: 0.01}
		switch n {
		case "L4":
			s.Left, s.Right = 0.72, 0.35
		case "L5":
			s.Left, s.Right = 0.61, 0.31
		case "L6":
			s.Left = 0.2
		case "Cd5":
			s.Known = false
		}
		m.Segments = append(m.Segments, s)
	}
	m.Brackets = []CordBracket{{"cervical enlargement", m.Segments[5].From, m.Segments[9].To}, {"lumbar enlargement", m.Segments[24].From, m.Segments[30].To}}
	m.Roots = []CordRoot{{Segment: 26, Side: exam.Left, Name: "left root", Probability: 0.4}}
	return m
}

func testBody(s exam.Species) Body {
	return Body{Species: s, Limbs: [4]BodyLimb{
		{Mark: MarkSame, Name: "left front leg", Word: "the same", ShowBeads: true, Then: BeadState{Tested: true, Health: 1}, Now: BeadState{Tested: true, Health: 1}},
		{Mark: MarkNone, Name: "right front leg", Word: "not tested", ShowBeads: true, Then: BeadState{Tested: true, Health: 1}, Now: BeadState{}},
		{Mark: MarkBetter, Name: "left back leg", Word: "better", ShowBeads: true, Then: BeadState{Tested: true, Health: 0.25}, Now: BeadState{Tested: true, Health: 0.75}},
		{Mark: MarkWorse, Name: "right back leg", Word: "weaker", ShowBeads: true, Then: BeadState{Tested: true, Health: 0.75}, Now: BeadState{Tested: true, Health: 0.5, Notch: true}},
	}}
}

func testMarks(c draw.Canvas, st Style) {
	for i, b := range []BeadState{{}, {Tested: true}, {Tested: true, Health: .25}, {Tested: true, Health: .5}, {Tested: true, Health: .75}, {Tested: true, Health: 1}, {Tested: true, Health: .5, Over: 1}, {Tested: true, Over: 2}, {Tested: true, Health: 1, Notch: true}} {
		Bead(c, st, vg.Point{X: 20 + vg.Length(i)*34, Y: 30}, 12, b)
	}
	for i, m := range []Mark{MarkNone, MarkBetter, MarkWorse, MarkSame, MarkDifferent} {
		Wedge(c, st, vg.Point{X: 20 + vg.Length(i)*34, Y: 75}, 10, m, false)
		Wedge(c, st, vg.Point{X: 200 + vg.Length(i)*34, Y: 75}, 10, m, true)
	}
	Cross(c, st, rectOf(10, 100, 50, 140), [4]BeadState{{Tested: true, Health: 1}, {Tested: true, Health: 1}, {Tested: true, Health: .25}, {}}, BeadState{Tested: true, Health: .5})
	Cross(c, st, rectOf(80, 100, 160, 180), [4]BeadState{{Tested: true, Health: 1, Notch: true}, {Tested: true, Health: 1}, {Tested: true, Health: .25}, {}}, BeadState{Tested: true, Health: .5})
}

func gallery() []drawn {
	return []drawn{
		{"strip", 720, 460, func(c draw.Canvas, st Style) { testStrip().Draw(c, st) }},
		{"limbs", 720, 320, func(c draw.Canvas, st Style) { testLimbs().Draw(c, st) }},
		{"measures", 720, 260, func(c draw.Canvas, st Style) { testMeasures().Draw(c, st) }},
		{"cord", 420, 520, func(c draw.Canvas, st Style) { testCord(false).Draw(c, st) }},
		{"cord-lying", 700, 110, func(c draw.Canvas, st Style) { testCord(true).Draw(c, st) }},
		{"body-dog", 420, 340, func(c draw.Canvas, st Style) { testBody(exam.Dog).Draw(c, st) }},
		{"body-cat", 420, 340, func(c draw.Canvas, st Style) { testBody(exam.Cat).Draw(c, st) }},
		{"marks", 400, 190, testMarks},
	}
}

func picture(t testing.TB, d drawn, st Style) []byte {
	t.Helper()
	c := vgimg.NewWith(vgimg.UseWH(d.w, d.h), vgimg.UseDPI(72), vgimg.UseBackgroundColor(st.Palette.Paper))
	d.draw(draw.New(c), st)
	var buf bytes.Buffer
	require.NoError(t, png.Encode(&buf, c.Image()))
	return buf.Bytes()
}

func TestPicturesLookAsTheyWereLookedAt(t *testing.T) {
	for _, look := range []struct {
		name string
		st   Style
	}{{"light", Screen(Light())}, {"grey", Screen(Grey())}, {"dark", Screen(Dark())}} {
		for _, d := range gallery() {
			if look.name == "dark" && d.name != "strip" && d.name != "limbs" {
				continue // the dark palette is told by the two busiest charts
			}
			t.Run(d.name+"-"+look.name, func(t *testing.T) {
				got := picture(t, d, look.st)
				path := filepath.Join("testdata", d.name+"-"+look.name+".png")
				if *update {
					require.NoError(t, os.MkdirAll("testdata", 0o755))
					require.NoError(t, os.WriteFile(path, got, 0o644))
					return
				}
				want, err := os.ReadFile(path)
				require.NoError(t, err)
				if off := differ(t, got, want); off > 0.002 {
					failed := filepath.Join("testdata", "failed", d.name+"-"+look.name+".png")
					require.NoError(t, os.MkdirAll(filepath.Dir(failed), 0o755))
					require.NoError(t, os.WriteFile(failed, got, 0o644))
					t.Errorf("%.2f %% of the picture differs from %s; the new one is %s", off*100, path, failed)
				}
			})
		}
	}
}

// differ returns the share of pixels whose colours are further apart than a quarter of the
// range in any channel, or 1 where the sizes differ. Edges may move by a fraction of a pixel
// between processors; a mark that moved or went missing shows.
func differ(t testing.TB, got, want []byte) float64 {
	t.Helper()
	a, err := png.Decode(bytes.NewReader(got))
	require.NoError(t, err)
	b, err := png.Decode(bytes.NewReader(want))
	require.NoError(t, err)
	if a.Bounds() != b.Bounds() {
		return 1
	}
	r := a.Bounds()
	n := 0
	for y := r.Min.Y; y < r.Max.Y; y++ {
		for x := r.Min.X; x < r.Max.X; x++ {
			p, q := color.NRGBAModel.Convert(a.At(x, y)).(color.NRGBA), color.NRGBAModel.Convert(b.At(x, y)).(color.NRGBA)
			for _, d := range []int{int(p.R) - int(q.R), int(p.G) - int(q.G), int(p.B) - int(q.B)} {
				if d > 64 || d < -64 {
					n++
					break
				}
			}
		}
	}
	return float64(n) / float64(r.Dx()*r.Dy())
}

// TestOneDrawingOnEveryCanvas draws each chart on a recorder twice and on SVG: the same calls
// each time, every text in the SVG as text.
func TestOneDrawingOnEveryCanvas(t *testing.T) {
	for _, d := range gallery() {
		t.Run(d.name, func(t *testing.T) {
			a, b := recorder.Canvas{}, recorder.Canvas{}
			d.draw(draw.NewCanvas(&a, d.w, d.h), Screen(Light()))
			d.draw(draw.NewCanvas(&b, d.w, d.h), Screen(Light()))
			require.NotEmpty(t, a.Actions)
			assert.Equal(t, calls(&a), calls(&b))
			svg := vgsvg.NewWith(vgsvg.UseWH(d.w, d.h))
			d.draw(draw.New(svg), Screen(Light()))
			var buf bytes.Buffer
			_, err := svg.WriteTo(&buf)
			require.NoError(t, err)
			for _, act := range a.Actions {
				if s, ok := act.(*recorder.FillString); ok {
					assert.Contains(t, buf.String(), s.String)
				}
			}
		})
	}
}

func areaCanvas(c vg.Canvas, w, h vg.Length) draw.Canvas { return draw.NewCanvas(c, w, h) }

func calls(c *recorder.Canvas) []string {
	out := make([]string, len(c.Actions))
	for i, a := range c.Actions {
		out[i] = a.Call()
	}
	return out
}

// fills returns the rectangles that were filled with a colour.
func fills(c *recorder.Canvas, col color.NRGBA) (out []vg.Rectangle) {
	var now color.Color
	for _, a := range c.Actions {
		switch x := a.(type) {
		case *recorder.SetColor:
			now = x.Color
		case *recorder.Fill:
			if now == col && len(x.Path) == 5 {
				out = append(out, vg.Rectangle{Min: x.Path[0].Pos, Max: x.Path[2].Pos})
			}
		}
	}
	return out
}

// TestStripPutsTheValueWhereItBelongs draws one value and looks for its rectangle.
func TestStripPutsTheValueWhereItBelongs(t *testing.T) {
	s := Strip{Visits: []Visit{{At: day(0)}, {At: day(10)}, {At: day(30)}}, Rows: []StripRow{
		{Label: "L4", Left: []Value{{}, {Known: true, Value: 50}}},
		{Label: "L5", Right: []Value{{}, {}, {Known: true, Value: 100}}},
	}, Span: Span{From: day(-10), To: day(40), Left: 100, Right: 100}}
	st := Screen(Light())
	c := recorder.Canvas{}
	s.Draw(draw.NewCanvas(&c, 700, 300), st)
	// 50 days on 500 points: day 0 at 200, day 10 at 300, day 30 at 500.
	half := fills(&c, st.Palette.Shade(50))
	require.Len(t, half, 1)
	assert.InDelta(t, 250, half[0].Min.X.Points(), 0.01) // half way to the visit before
	assert.InDelta(t, 400, half[0].Max.X.Points(), 0.01) // half way to the visit after
	full := fills(&c, st.Palette.Shade(100))
	require.Len(t, full, 1)
	assert.InDelta(t, 400, full[0].Min.X.Points(), 0.01)
	assert.Less(t, full[0].Max.Y, half[0].Min.Y, "L5 right lies below L4 left")

	hit, ok := s.Hit(700, 300, 310, 300-(half[0].Min.Y+half[0].Max.Y)/2, st)
	require.True(t, ok)
	assert.Equal(t, StripHit{Row: 0, Visit: 1, Side: exam.Left, Event: -1}, hit)
	hit, ok = s.Hit(700, 300, 501, 300-(full[0].Min.Y+full[0].Max.Y)/2, st)
	require.True(t, ok)
	assert.Equal(t, StripHit{Row: 1, Visit: 2, Side: exam.Right, Event: -1}, hit)
	_, ok = s.Hit(700, 300, 5, 5, st)
	assert.False(t, ok)
}

func TestALongSilenceStaysEmpty(t *testing.T) {
	cols := columns([]Visit{{At: day(0)}, {At: day(7)}, {At: day(14)}, {At: day(100)}}, scaleX{day(-5), day(105), 0, 1100})
	assert.Less(t, cols[2][1], cols[3][0]-700)
}

// TestModelWithoutBandIsNotShown: a value of the model without its band does not appear.
func TestModelWithoutBandIsNotShown(t *testing.T) {
	s := Strip{Visits: []Visit{{At: day(0)}}, Rows: []StripRow{{Label: "L4", Left: []Value{{Known: true, Value: 50}}}}, Model: true}
	st := Screen(Light())
	c := recorder.Canvas{}
	s.Draw(draw.NewCanvas(&c, 400, 200), st)
	assert.Empty(t, fills(&c, st.Palette.Shade(50)))
	s.Rows[0].Left[0].Banded = true
	s.Rows[0].Left[0].Low, s.Rows[0].Left[0].High = 40, 60
	c.Reset()
	s.Draw(draw.NewCanvas(&c, 400, 200), st)
	assert.Len(t, fills(&c, st.Palette.Shade(50)), 1)
}

// TestUncertainIsThinner: of two equal values the one with the wider band is the thinner bar.
func TestUncertainIsThinner(t *testing.T) {
	height := func(low, high float64) float64 {
		s := Strip{Visits: []Visit{{At: day(0)}}, Rows: []StripRow{{Label: "L4", Left: []Value{{Known: true, Value: 50, Banded: true, Low: low, High: high}}}}}
		st := Screen(Light())
		c := recorder.Canvas{}
		s.Draw(draw.NewCanvas(&c, 400, 200), st)
		f := fills(&c, st.Palette.Shade(50))
		require.Len(t, f, 1)
		return (f[0].Max.Y - f[0].Min.Y).Points()
	}
	assert.Greater(t, height(45, 55), height(20, 80))
}

func TestUntestedIsDashed(t *testing.T) {
	l := Limbs{Visits: []Visit{{At: day(0)}, {At: day(7)}, {At: day(14)}}, Limbs: []Series{GradeSeries("pelvic left", 4, []int8{1, -1, 3})}}
	c := recorder.Canvas{}
	l.Draw(draw.NewCanvas(&c, 400, 200), Screen(Light()))
	dashes := 0
	for _, a := range c.Actions {
		if d, ok := a.(*recorder.SetLineDash); ok && len(d.Dashes) > 0 {
			dashes++
		}
	}
	assert.Equal(t, 2, dashes, "one dashed line across the gap, one dashed bead")
}

func TestLimbsHit(t *testing.T) {
	l := testLimbs()
	l.Span = Span{From: day(-5), To: day(95), Left: 100, Right: 100}
	st := Screen(Light())
	pl := lanes{l.Visits, l.Limbs, l.Events, l.Span, nil, true}.plan(area(700, 320), st)
	at := func(lane int, t time.Time) (vg.Length, vg.Length) {
		return pl.x.at(t), 320 - (pl.plot.Max.Y - (vg.Length(lane)+0.5)*pl.laneH)
	}
	x, y := at(2, day(20))
	hit, ok := l.Hit(700, 320, x+3, y, st)
	require.True(t, ok)
	assert.Equal(t, LaneHit{Series: 2, Visit: 3, Forecast: -1, Event: -1}, hit)
	x, y = at(2, day(84))
	hit, ok = l.Hit(700, 320, x, y, st)
	require.True(t, ok)
	assert.Equal(t, LaneHit{Series: 2, Visit: -1, Forecast: 1, Event: -1}, hit)
	x, y = at(1, day(42))
	_, ok = l.Hit(700, 320, x, y, st)
	assert.False(t, ok, "a month from any visit")
}

func TestCordHitAndNumbers(t *testing.T) {
	m := testCord(false)
	st := Screen(Light())
	pl := m.plan(area(420, 520), st)
	r := m.half(pl, 23, exam.Right)
	hit, ok := m.Hit(420, 520, (r.Min.X+r.Max.X)/2, 520-(r.Min.Y+r.Max.Y)/2, st)
	require.True(t, ok)
	assert.Equal(t, CordHit{23, exam.Right, -1}, hit)

	c := recorder.Canvas{}
	m.Draw(draw.NewCanvas(&c, 420, 520), st)
	var numbers []string
	for _, a := range c.Actions {
		if s, ok := a.(*recorder.FillString); ok && strings.Contains(s.String, "%") {
			numbers = append(numbers, s.String)
		}
	}
	assert.Equal(t, []string{"L4 L 72 %, R 35 %", "L5 L 61 %", "L6 left root 40 %"}, numbers, "the three strongest halves, the root, and no more")
}

func TestBodyHit(t *testing.T) {
	b := testBody(exam.Dog)
	pl := b.plan(area(420, 340), Screen(Light()))
	for i, l := range exam.Limbs() {
		centre, ok := pl.fig.Centre(l.String())
		require.True(t, ok)
		// The paw is the part of the limb that no other region covers.
		found := false
		for dx := -8.0; dx <= 8 && !found; dx++ {
			q := pl.pt(drawing.Point{X: centre.X + dx, Y: centre.Y})
			got, ok := b.Hit(420, 340, q.X, 340-q.Y, Screen(Light()))
			found = ok && got == i
		}
		assert.True(t, found, l.String())
	}
}

// TestPalettesCanBeRead holds the ratios of WCAG 2.1: 4.5 for text, 3 for graphics.
func TestPalettesCanBeRead(t *testing.T) {
	for name, p := range map[string]Palette{"light": Light(), "dark": Dark(), "print": Print(), "grey": Grey()} {
		for what, c := range map[string]color.NRGBA{"ink": p.Ink, "soft": p.Soft, "better": p.Better, "worse": p.Worse, "call": p.Call, "goal": p.Goal} {
			assert.GreaterOrEqual(t, Contrast(c, p.Paper), 4.5, "%s: %s on paper", name, what)
		}
		assert.GreaterOrEqual(t, Contrast(p.Ink, p.Faint), 4.5, name)
		assert.GreaterOrEqual(t, Contrast(p.Soft, p.Faint), 4.5, name)
		assert.GreaterOrEqual(t, Contrast(p.High, p.Paper), 3.0, name)
		assert.GreaterOrEqual(t, Contrast(p.High, p.Low), 3.0, name)
		// The scale never turns back: each step of function is darker (or, by night, lighter).
		up := luminance(p.High) > luminance(p.Low)
		for v := 0.0; v < 100; v += 5 {
			assert.Equal(t, up, luminance(p.Shade(v+5)) > luminance(p.Shade(v)), "%s: step at %g", name, v)
		}
	}
	// Known value: black on white is 21 to 1 (WCAG 2.1).
	assert.InDelta(t, 21, Contrast(rgb(0), rgb(0xFFFFFF)), 1e-9)
}

func TestFit(t *testing.T) {
	assert.Equal(t, "short", Fit("short", 500, 10, false))
	got := Fit("a rather long name of an event", 60, 10, false)
	assert.True(t, strings.HasSuffix(got, "…"), got)
	assert.LessOrEqual(t, Width(got, 10, false), vg.Length(60))
	assert.Empty(t, Fit("word", 1, 10, false))
}

func TestTicksHaveRoomAndAreTrueDays(t *testing.T) {
	for _, days := range []int{1, 5, 20, 70, 200, 600, 3000} {
		s := scaleX{day(0), day(days), 0, 600}
		ticks := s.ticks(Screen(Light()))
		require.NotEmpty(t, ticks, days)
		for i, tk := range ticks {
			assert.Zero(t, tk.at.Hour())
			if i > 0 {
				assert.Greater(t, s.at(tk.at)-s.at(ticks[i-1].at), Width(tk.label, 13, false)*0.9, "%d days: %s", days, tk.label)
			}
		}
	}
}

// TestEmptyChartsDoNotFail: nothing to draw is no error, whatever the size.
func TestEmptyChartsDoNotFail(t *testing.T) {
	for _, size := range [][2]vg.Length{{0, 0}, {1, 1}, {40, 10}, {300, 200}} {
		c := recorder.Canvas{}
		dc := draw.NewCanvas(&c, size[0], size[1])
		st := Screen(Light())
		Strip{}.Draw(dc, st)
		Strip{Rows: []StripRow{{Label: "L4"}}}.Draw(dc, st)
		Limbs{}.Draw(dc, st)
		Limbs{Limbs: []Series{{Label: "x"}}}.Draw(dc, st)
		Measures{}.Draw(dc, st)
		CordMap{}.Draw(dc, st)
		testStrip().Draw(dc, st)
		testLimbs().Draw(dc, st)
		testMeasures().Draw(dc, st)
		testCord(true).Draw(dc, st)
		testCord(false).Draw(dc, st)
		testBody(exam.Dog).Draw(dc, st)
		Strip{}.Hit(size[0], size[1], 0, 0, st)
		Limbs{}.Hit(size[0], size[1], 0, 0, st)
		CordMap{}.Hit(size[0], size[1], 0, 0, st)
		Body{}.Hit(size[0], size[1], 0, 0, st)
	}
}
