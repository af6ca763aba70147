package ink

import (
	"image/color"
	"math"
	"testing"

	"cordwalk.example/cordwalk/assets/drawing"
	"cordwalk.example/cordwalk/exam"
)

func alpha(p *Pen, x, y int) uint8 { return p.Picture().RGBAAt(x, y).A }

func TestFillCoversItsAreaWhicheverWayItTurns(t *testing.T) {
	for _, turn := range []bool{false, true} {
		o := Circle(Point{X: 20, Y: 20}, 15)
		if turn {
			for i, j := 0, len(o)-1; i < j; i, j = i+1, j-1 {
				o[i], o[j] = o[j], o[i]
			}
		}
		p := New(40, 40, 1)
		p.Fill(color.Black, o)
		sum := 0.0
		for i := 3; i < len(p.Picture().Pix); i += 4 {
			sum += float64(p.Picture().Pix[i]) / 255
		}
		want := math.Pi * 15 * 15
		if math.Abs(sum-want)/want > 0.02 {
			t.Errorf("turned %v: area %.1f, want %.1f", turn, sum, want)
		}
	}
}

func TestStrokeDoesNotFillAndJoinsItsEnds(t *testing.T) {
	p := New(60, 60, 2)
	p.Stroke(color.Black, 2, true, Rect(5, 5, 20, 20)...)
	if alpha(p, 30, 30) != 0 {
		t.Error("the inside of a stroked rectangle is painted")
	}
	for _, q := range [][2]int{{10, 10}, {50, 10}, {50, 50}, {10, 50}, {30, 10}, {10, 30}} {
		if alpha(p, q[0], q[1]) < 200 {
			t.Errorf("nothing on the line at %v", q)
		}
	}
}

func TestDashesLeaveGaps(t *testing.T) {
	p := New(100, 10, 1)
	p.Dashes(color.Black, 2, 6, 6, false, Point{X: 0, Y: 5}, Point{X: 100, Y: 5})
	on, off := 0, 0
	for x := range 100 {
		if alpha(p, x, 5) > 128 {
			on++
		} else if alpha(p, x, 5) == 0 {
			off++
		}
	}
	if on < 40 || off < 25 {
		t.Errorf("%d pixels drawn, %d left free of 100", on, off)
	}
}

// A shape that leaves the picture is cut, never moved or lost.
func TestShapesOverTheEdge(t *testing.T) {
	p := New(20, 20, 1)
	p.Fill(color.Black, Rect(-50, -50, 60, 60), Rect(15, 15, 500, 500))
	for _, c := range []struct {
		x, y int
		want bool
	}{{0, 0, true}, {9, 9, true}, {12, 12, false}, {16, 16, true}, {19, 19, true}, {2, 12, false}, {12, 2, false}} {
		if (alpha(p, c.x, c.y) > 128) != c.want {
			t.Errorf("pixel %d,%d: painted %v, want %v", c.x, c.y, !c.want, c.want)
		}
	}
}

func TestFigureFillsTheRegionAskedFor(t *testing.T) {
	f := drawing.FromAbove(exam.Dog)
	red := color.NRGBA{200, 0, 0, 255}
	p := New(100, 200, 1)
	p.Figure(f, 0, 0, 100, 200, func(r string) color.Color {
		if r == "pelvic-left" {
			return red
		}
		return nil
	}, color.Black, 0.5)
	c, _ := f.Centre("pelvic-left")
	if got := p.Picture().RGBAAt(int(c.X), int(c.Y)); got.R < 150 {
		t.Errorf("the left pelvic limb is %v", got)
	}
	c, _ = f.Centre("pelvic-right")
	if got := p.Picture().RGBAAt(int(c.X), int(c.Y)); got.A != 0 {
		t.Errorf("the right pelvic limb is %v, not left free", got)
	}
}
