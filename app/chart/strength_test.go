package chart

import (
	"math"
	"testing"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"
)

// inked counts the pixels of a drawn chart that have a colour.
func inked(s Strength, w, h float64, of func(Palette) [3]uint8) int {
	st := Screen(Light())
	c := vgimg.NewWith(vgimg.UseWH(vg.Length(w), vg.Length(h)), vgimg.UseDPI(72))
	s.Draw(draw.New(c), st)
	want, n := of(st.Palette), 0
	img := c.Image()
	for y := img.Bounds().Min.Y; y < img.Bounds().Max.Y; y++ {
		for x := img.Bounds().Min.X; x < img.Bounds().Max.X; x++ {
			r, g, b, _ := img.At(x, y).RGBA()
			if [3]uint8{uint8(r >> 8), uint8(g >> 8), uint8(b >> 8)} == want {
				n++
			}
		}
	}
	return n
}

func TestAStrengthCurveShowsItsLawAndItsBadPoints(t *testing.T) {
	curve := func(p Palette) [3]uint8 { return [3]uint8{p.High.R, p.High.G, p.High.B} }
	worse := func(p Palette) [3]uint8 { return [3]uint8{p.Worse.R, p.Worse.G, p.Worse.B} }
	s := Strength{Low: math.NaN(), High: math.NaN()}
	for _, w := range []float64{0.1, 1, 10, 100} {
		s.Points = append(s.Points, StrengthPoint{Width: w, Current: 4 * (1 + 0.4/w)})
	}
	if n := inked(s, 360, 240, curve); n != 0 {
		t.Errorf("%d pixels of a curve that was not fitted", n)
	}
	s.Rheobase, s.Chronaxie = 4, 0.4
	s.Curve = func(w float64) float64 { return 4 * (1 + 0.4/w) }
	if n := inked(s, 360, 240, curve); n < 50 {
		t.Errorf("%d pixels of the curve", n)
	}
	if n := inked(s, 360, 240, worse); n != 0 {
		t.Errorf("%d pixels of bad points where none is bad", n)
	}
	s.Points[2].Bad = true
	if n := inked(s, 360, 240, worse); n < 4 {
		t.Errorf("%d pixels of the bad point", n)
	}
	// Nothing is drawn beyond what there is room for, and nothing breaks.
	inked(Strength{}, 360, 240, curve)
	inked(Strength{Points: s.Points[:1]}, 20, 12, curve)
	inked(Strength{Points: s.Points[:1], Curve: s.Curve, Rheobase: 4, Chronaxie: 1e-9}, 360, 240, curve)
}
