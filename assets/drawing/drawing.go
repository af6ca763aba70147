// Package drawing holds the pictures of Cordwalk as plain vector data: a dog and a cat
// seen from above, with the parts of the body as named regions, and the vertebral column
// seen from the side with its vertebrae in proportion. They are drawn for this project.
//
// Screens and paper draw the same outlines: a Path is a list of points, already flattened,
// so whoever can fill and stroke a polygon can draw it. Coordinates run from the upper left
// corner, x to the right and y down, in units of the figure's own size.
//
// The animals lie head up and are seen from above, so that their left is on the left.
package drawing

import (
	"math"

	"cordwalk.example/cordwalk/exam"
)

// Point is a place in a figure's own units.
type Point struct{ X, Y float64 }

// Path is a flattened outline or line.
type Path struct {
	Points []Point
	Closed bool
}

// Region is one part of a figure that can be filled by itself. Its name is a site of the
// vocabulary for the limbs ("pelvic-left") and otherwise "head", "ears", "trunk" or "tail".
type Region struct {
	Name  string
	Paths []Path
}

// Figure is one drawing: its size, its regions in the order they are painted, and fine
// lines that are only stroked (eyes, toes, the line of the back).
type Figure struct {
	Width, Height float64
	Regions       []Region
	Details       []Path
}

// Region returns the region of that name, and false if the figure has none.
func (f Figure) Region(name string) (Region, bool) {
	for _, r := range f.Regions {
		if r.Name == name {
			return r, true
		}
	}
	return Region{}, false
}

// Centre returns the place inside a region that lies deepest, where a mark or a number sits
// best, and false if the figure has no region of that name.
func (f Figure) Centre(name string) (Point, bool) {
	r, ok := f.Region(name)
	if !ok {
		return Point{}, false
	}
	best, depth := Point{}, -1.0
	for _, p := range r.Paths {
		lo, hi := Point{1e9, 1e9}, Point{-1e9, -1e9}
		for _, q := range p.Points {
			lo.X, lo.Y = min(lo.X, q.X), min(lo.Y, q.Y)
			hi.X, hi.Y = max(hi.X, q.X), max(hi.Y, q.Y)
		}
		const grid = 24
		for i := 1; i < grid; i++ {
			for j := 1; j < grid; j++ {
				q := Point{lo.X + (hi.X-lo.X)*float64(i)/grid, lo.Y + (hi.Y-lo.Y)*float64(j)/grid}
				if !p.Contains(q) {
					continue
				}
				if d := p.edge(q); d > depth {
					best, depth = q, d
				}
			}
		}
	}
	return best, depth >= 0
}

// edge returns the distance from a point to the path's nearest knot.
func (p Path) edge(q Point) float64 {
	near := math.Inf(1)
	for _, k := range p.Points {
		near = min(near, math.Hypot(k.X-q.X, k.Y-q.Y))
	}
	return near
}

// At returns the name of the topmost region under a point, empty where there is none.
func (f Figure) At(p Point) string {
	for i := len(f.Regions) - 1; i >= 0; i-- {
		for _, path := range f.Regions[i].Paths {
			if path.Contains(p) {
				return f.Regions[i].Name
			}
		}
	}
	return ""
}

// Contains reports whether the point lies inside a closed path (even–odd rule).
func (p Path) Contains(q Point) bool {
	if !p.Closed {
		return false
	}
	in := false
	for i, j := 0, len(p.Points)-1; i < len(p.Points); j, i = i, i+1 {
		a, b := p.Points[i], p.Points[j]
		if (a.Y > q.Y) != (b.Y > q.Y) && q.X < (b.X-a.X)*(q.Y-a.Y)/(b.Y-a.Y)+a.X {
			in = !in
		}
	}
	return in
}

// FromAbove returns the animal of a species seen from above, 100 wide and 200 high. The
// dog's drawing stands in for species that have none of their own.
func FromAbove(s exam.Species) Figure {
	if s == exam.Cat {
		return cat
	}
	return dog
}

// LimbPlaces gives the corners of the limb cross: where each limb of exam.Limbs() sits in a
// square of side 1, and last the dot of the tail.
func LimbPlaces() [5]Point {
	return [5]Point{{0.24, 0.27}, {0.76, 0.27}, {0.24, 0.73}, {0.76, 0.73}, {0.5, 0.93}}
}

// spline flattens a smooth closed or open curve through the knots (Catmull–Rom, eight steps
// between two knots). A knot given twice in a row makes a corner.
func spline(closed bool, knots ...Point) Path {
	const steps = 8
	n := len(knots)
	at := func(i int) Point {
		if closed {
			return knots[((i%n)+n)%n]
		}
		return knots[max(0, min(n-1, i))]
	}
	out := Path{Closed: closed}
	last := n - 1
	if closed {
		last = n
	}
	for i := 0; i < last; i++ {
		p0, p1, p2, p3 := at(i-1), at(i), at(i+1), at(i+2)
		if p1 == p2 {
			continue
		}
		if p0 == p1 {
			p0 = p1
		}
		for k := 0; k < steps; k++ {
			t := float64(k) / steps
			out.Points = append(out.Points, Point{
				catmull(p0.X, p1.X, p2.X, p3.X, t),
				catmull(p0.Y, p1.Y, p2.Y, p3.Y, t),
			})
		}
	}
	if !closed {
		out.Points = append(out.Points, knots[n-1])
	}
	return out
}

func catmull(a, b, c, d, t float64) float64 {
	return 0.5 * (2*b + (c-a)*t + (2*a-5*b+4*c-d)*t*t + (3*b-a-3*c+d)*t*t*t)
}

// mirror returns the path on the other side of the middle line x = 50.
func mirror(p Path) Path {
	out := Path{Closed: p.Closed, Points: make([]Point, len(p.Points))}
	for i, q := range p.Points {
		out.Points[len(p.Points)-1-i] = Point{100 - q.X, q.Y}
	}
	return out
}

// half closes an outline given from top to bottom on the left with its mirror on the right.
func half(left ...Point) Path {
	all := append([]Point(nil), left...)
	for i := len(left) - 1; i >= 0; i-- {
		if left[i].X != 50 {
			all = append(all, Point{100 - left[i].X, left[i].Y})
		}
	}
	return spline(true, all...)
}
