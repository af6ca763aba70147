package drawing

import "cordwalk.example/cordwalk/exam"

// VertebraBlock is the body of one vertebra along the column.
type VertebraBlock struct {
	Vertebra   exam.Vertebra
	Start, End float64 // along the column from cranial (0) to caudal (1), without the caudal vertebrae beyond those shown
	Depth      float64 // height of the body in side view, against the longest body's length
	Spine      float64 // length of the spinous process, against the longest body's length
	Lean       float64 // how far its tip lies caudal to its base, against the longest body's length; negative leans cranially
}

// relative body lengths, cranial to caudal, with the disc behind each. From memory; that the
// axis is the longest, thoracic bodies are short, lumbar bodies longer and the last lumbar body
// a little shorter than its neighbours is textbook anatomy (canine osteology teaching pages).
var bodyLength = map[exam.Region][]float64{
	exam.RegionC:  {0.62, 1.42, 1.02, 1.00, 0.96, 0.90, 0.80},
	exam.RegionT:  {0.62, 0.58, 0.57, 0.57, 0.57, 0.57, 0.58, 0.59, 0.61, 0.63, 0.66, 0.71, 0.76},
	exam.RegionL:  {0.82, 0.88, 0.94, 0.98, 1.00, 0.98, 0.80},
	exam.RegionS:  {0.62, 0.50, 0.46},
	exam.RegionCd: {0.42, 0.42, 0.44, 0.46, 0.48},
}

// spinous processes, cranial to caudal: length and lean. The eleventh thoracic spine stands
// upright (the anticlinal vertebra), those before it lean caudally, those behind it cranially.
var spinous = map[exam.Region][][2]float64{
	exam.RegionC:  {{0.05, 0}, {0.72, 0.1}, {0.12, 0}, {0.22, 0.02}, {0.30, 0}, {0.42, -0.05}, {0.62, -0.02}},
	exam.RegionT:  {{1.25, 0.35}, {1.25, 0.42}, {1.20, 0.48}, {1.14, 0.52}, {1.06, 0.54}, {0.98, 0.55}, {0.90, 0.54}, {0.80, 0.50}, {0.68, 0.42}, {0.52, 0.28}, {0.44, 0}, {0.44, -0.12}, {0.46, -0.16}},
	exam.RegionL:  {{0.50, -0.18}, {0.54, -0.20}, {0.58, -0.20}, {0.60, -0.20}, {0.60, -0.20}, {0.54, -0.18}, {0.36, -0.06}},
	exam.RegionS:  {{0.34, 0.04}, {0.30, 0.06}, {0.24, 0.08}},
	exam.RegionCd: {{0.12, 0.02}, {0.10, 0.02}, {0.08, 0.02}, {0.06, 0.02}, {0.05, 0.02}},
}

// shownTail is how many caudal vertebrae the column shows: those whose segments are examined.
const shownTail = 5

// Column returns the species' vertebrae from the first cervical to the fifth caudal one, each
// with its place along a column of length 1. Where a species has more or fewer vertebrae in a
// region than the dog, the dog's proportions are stretched over them.
func Column(s exam.Species) []VertebraBlock {
	var out []VertebraBlock
	at := 0.0
	for r := exam.RegionC; r <= exam.RegionCd; r++ {
		n := exam.VertebraCount(s, r)
		if r == exam.RegionCd {
			n = min(n, shownTail)
		}
		for i := 0; i < n; i++ {
			k := 0
			if n > 1 {
				k = i * (len(bodyLength[r]) - 1) / (n - 1)
			}
			length := bodyLength[r][k]
			depth := 0.42
			switch r {
			case exam.RegionS:
				depth = 0.34
			case exam.RegionCd:
				depth = 0.26 - 0.02*float64(i)
			}
			out = append(out, VertebraBlock{exam.NewVertebra(r, i+1), at, at + length, depth, spinous[r][k][0], spinous[r][k][1]})
			at += length
		}
	}
	for i := range out {
		out[i].Start /= at
		out[i].End /= at
	}
	return out
}

// Place returns where a point of the column lies: v is the vertebra and part how far into it,
// 0 its cranial end to 1 its caudal end. The result is 0 to 1 along the column, and false for a
// vertebra that the column does not show.
func Place(s exam.Species, v exam.Vertebra, part float64) (float64, bool) {
	for _, b := range Column(s) {
		if b.Vertebra == v {
			return b.Start + (b.End-b.Start)*part, true
		}
	}
	return 0, false
}

// SideView returns the column from the side, the head to the left, as a figure 1000 wide: one
// region for each vertebra (body and spinous process), named after it. The column curves as in
// a standing animal: the neck rises, the back is level, the tail falls.
func SideView(s exam.Species) Figure {
	const width, unit = 1000.0, 1000.0 / 28
	f := Figure{Width: width, Height: 220}
	for _, b := range Column(s) {
		gap := (b.End - b.Start) * 0.06
		x0, x1 := b.Start+gap, b.End-gap
		body := Path{Closed: true}
		const steps = 4
		for k := 0; k <= steps; k++ {
			x := x0 + (x1-x0)*float64(k)/steps
			waist := 0.06 * (1 - sq(2*float64(k)/steps-1)) // bodies are a little narrower in the middle
			body.Points = append(body.Points, Point{x * width, level(x) + (b.Depth/2-waist)*unit})
		}
		top := func(part, rise, lean float64) Point {
			x := x0 + (x1-x0)*part
			return Point{x*width + lean*unit, level(x) - (b.Depth/2+rise)*unit}
		}
		body.Points = append(body.Points, top(1, 0, 0), top(0.72, 0.05, 0), top(0.62, b.Spine, b.Lean), top(0.34, b.Spine, b.Lean), top(0.26, 0.05, 0), top(0, 0, 0))
		f.Regions = append(f.Regions, Region{b.Vertebra.String(), []Path{body}})
	}
	return f
}

// level is the height of the column at a place along it.
func level(x float64) float64 {
	switch {
	case x < 0.28:
		return 118 - 62*sq((0.28-x)/0.28)
	case x > 0.84:
		return 118 + 80*sq((x-0.84)/0.16)
	}
	return 118 - 6*(1-sq((x-0.56)/0.28))
}

func sq(x float64) float64 { return x * x }
