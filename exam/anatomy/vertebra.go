package anatomy

import (
	"math"

	"cordwalk.example/cordwalk/exam"
)

// Where the segments lie. The column is a line on which vertebra i of the species (0 for C1)
// covers i to i+1; a segment covers a stretch of it. Stretches are those of a medium dog of
// 20 kg (anatomy.md B1: T11–L2 in their own vertebra UMN-cord-caudal, L4–S3 within the bodies
// L3–L5 CL-73, the enlargement C6–T2 in C5–T1 NotD, the rest from memory) and of a cat
// (B3: Kot-1994, 42 dissections). How far a stretch may be off is a normal error.

// stretch is a segment's place on the line.
type stretch struct{ from, to float64 }

// borders lists where each segment of the dog begins, C1 to Cd5, and where the cord ends. L1's
// vertebra covers 20 to 21.
var dogBorders = func() []float64 {
	b := []float64{0, 1, 1.5, 2.4, 3.3, 4.15, 5.05, 5.8, // C1–C8
		6.35, 7.1} // T1, T2
	const t3, t11 = 7.7, 16.8 // T3–T10 share the room evenly: half to one vertebra cranial to their number
	for k := range 8 {
		b = append(b, t3+(t11-t3)*float64(k)/8)
	}
	b = append(b, t11, 17.8, 18.8)                               // T11–T13
	return append(b, 19.8, 20.8, 21.8, 22.55, 23.15, 23.5, 23.8, // L1–L7
		24.2, 24.5, 24.75, // S1–S3
		25, 25.2, 25.4, 25.6, 25.8, 26) // Cd1–Cd5, conus
}()

// catBorders: as the dog to L2, then about one vertebra further caudal; the conus ends over L7
// in 7.1 %, S1 in 83.3 % and S2 in 9.5 % (Kot-1994), which a normal error around 27.53 with a
// standard deviation of 0.36 reproduces.
var catBorders = func() []float64 {
	b := append([]float64(nil), dogBorders[:23]...)  // C1–L2, begin of L3 is index 23
	return append(b, 21.8, 22.8, 23.7, 24.35, 24.85, // L3–L7
		25.2, 25.5, 25.75, // S1–S3
		26, 26.3, 26.6, 26.9, 27.2, 27.53)
}()

// lumbarSwell is the index of L4, from where the dog's segments crowd and follow body weight.
const lumbarSwell = 24

// weightShift returns how many vertebrae the caudal segments of a dog of that weight lie caudal
// to those of a medium dog. Derived from Khan-2019 (R² 0.23 of 101 dogs) and the ends that NotD
// and Valentino-2025 give: +1 at 5 kg, +½ at 10, 0 from 20 to 25, −½ from 35. The limits in kg are a choice.
func weightShift(kg float64) float64 {
	points := [...]struct{ kg, shift float64 }{{5, 1}, {10, 0.5}, {20, 0}, {25, 0}, {35, -0.5}}
	if kg <= points[0].kg {
		return points[0].shift
	}
	for i := 1; i < len(points); i++ {
		if a, b := points[i-1], points[i]; kg <= b.kg {
			return a.shift + (b.shift-a.shift)*(kg-a.kg)/(b.kg-a.kg)
		}
	}
	return points[len(points)-1].shift
}

// stretches returns the place of each segment. kg 0 or less is «not known»: a medium dog.
func stretches(s exam.Species, kg float64) ([]stretch, error) {
	var b []float64
	switch s {
	case exam.Dog:
		b = append(b, dogBorders...)
		if kg > 0 && !math.IsInf(kg, 0) && !math.IsNaN(kg) {
			for i := lumbarSwell; i < len(b); i++ {
				shift := weightShift(kg)
				if i == lumbarSwell { // where L4 begins, L3 and L4 share the shift
					shift /= 2
				}
				b[i] += shift
			}
		}
	case exam.Cat:
		b = catBorders
	default:
		return nil, &NoData{s, "places of cord segments in the vertebrae"}
	}
	out := make([]stretch, len(b)-1)
	for i := range out {
		out[i] = stretch{b[i], b[i+1]}
	}
	return out, nil
}

// spread returns the standard deviation, in vertebrae, of where the cord lies against a place on
// the line. Caudal from L3 in dogs ±1 vertebra (two standard deviations, B2), wider where the
// weight is not known; in cats 0.36 (Kot-1994); elsewhere a quarter to a third, a choice.
func spread(s exam.Species, kg, at float64) float64 {
	switch {
	case at < 7:
		return 0.25
	case at < 21.5:
		return 0.3
	case s == exam.Cat:
		return 0.36
	case kg <= 0:
		return 0.65
	}
	return 0.5
}

// ShiftSource says where the places come from, for the screens.
func ShiftSource(s exam.Species) string {
	if s == exam.Cat {
		return "Kot-1994, 42 cats; ±1 vertebra"
	}
	return "UMN-cord-caudal, CL-73, NotD, rows from memory; weight Khan-2019, limits a choice; ±1 vertebra"
}

// cdf and pdf of the standard normal distribution.
func cdf(z float64) float64 { return 0.5 * math.Erfc(-z/math.Sqrt2) }
func pdf(z float64) float64 { return math.Exp(-z*z/2) / math.Sqrt(2*math.Pi) }

// overlap returns the probability that a point, uniform on window and moved by a normal error of
// standard deviation sd, falls on the stretch.
func overlap(window, on stretch, sd float64) float64 {
	g := func(x float64) float64 { z := x / sd; return sd * (z*cdf(z) + pdf(z)) } // integral of the cdf
	below := func(edge float64) float64 {                                         // P(point < edge)
		return (g(edge-window.from) - g(edge-window.to)) / (window.to - window.from)
	}
	return max(below(on.to)-below(on.from), 0)
}

// segmentsAround spreads a window of the line over the segments; tiny shares are dropped.
func segmentsAround(s exam.Species, kg float64, window stretch) ([]Weight, error) {
	places, err := stretches(s, kg)
	if err != nil {
		return nil, err
	}
	sd := spread(s, kg, window.from)
	var out []Weight
	for i, p := range places {
		if i == 0 {
			p.from = -1e3 // no segment lies cranial to C1
		}
		if w := overlap(window, p, sd); w > 0.005 {
			out = append(out, Weight{At(s, i), w})
		}
	}
	return out, nil
}

// SegmentAtVertebra returns which segments lie in a vertebra and with what probability, for an
// animal of that weight in kg (0: not known). What is missing to a sum of 1 is the
// probability that the cord has ended cranial to it and only roots lie there. The error is a
// *NoData for a species without places on record, or an *exam.Invalid for no such vertebra.
func SegmentAtVertebra(s exam.Species, kg float64, v exam.Vertebra) ([]Weight, error) {
	i := exam.VertebraIndex(s, v)
	if i < 0 {
		return nil, &exam.Invalid{Field: "level", Value: v.String(), Allowed: "a vertebra the " + s.String() + " has"}
	}
	return segmentsAround(s, kg, stretch{float64(i), float64(i + 1)})
}

// SegmentsAtDisc returns which segments lie at the disc caudal to a vertebra (T12 names the
// disc T12–T13), as SegmentAtVertebra does. A disc reaches about a third of a vertebra either
// way, a choice that reproduces the table of anatomy.md B5.
func SegmentsAtDisc(s exam.Species, kg float64, cranial exam.Vertebra) ([]Weight, error) {
	i := exam.VertebraIndex(s, cranial)
	if i < 0 || !HasDisc(s, cranial) {
		return nil, &exam.Invalid{Field: "disc", Value: cranial.String(), Allowed: "a vertebra with a disc caudal to it: C2 to the last lumbar, or caudal"}
	}
	at := float64(i + 1)
	return segmentsAround(s, kg, stretch{at - 0.35, at + 0.35})
}

// HasDisc reports whether there is a disc caudal to the vertebra: none between C1 and C2, none in the sacrum.
func HasDisc(s exam.Species, cranial exam.Vertebra) bool {
	i := exam.VertebraIndex(s, cranial)
	if i <= 0 || i+1 >= len(exam.Vertebrae(s)) {
		return false
	}
	return cranial.Region() != exam.RegionS || cranial.Number() == exam.VertebraCount(s, exam.RegionS)
}

// VertebraWeight is a vertebra with a probability.
type VertebraWeight struct {
	Vertebra exam.Vertebra
	Weight   float64
}

// VertebraOfSegment returns in which vertebrae a segment lies and with what probability; the
// inverse of SegmentAtVertebra.
func VertebraOfSegment(s exam.Species, kg float64, seg Segment) ([]VertebraWeight, error) {
	places, err := stretches(s, kg)
	if err != nil {
		return nil, err
	}
	i := Index(s, seg)
	if i < 0 {
		return nil, &exam.Invalid{Field: "segment", Value: seg.String(), Allowed: "a segment the " + s.String() + " has"}
	}
	sd := spread(s, kg, places[i].from)
	var out []VertebraWeight
	for k, v := range exam.Vertebrae(s) {
		on := stretch{float64(k), float64(k + 1)}
		if k == 0 {
			on.from = -1e3
		}
		if w := overlap(places[i], on, sd); w > 0.005 {
			out = append(out, VertebraWeight{v, w})
		}
	}
	return out, nil
}

// Place returns where a segment lies along the column, in vertebrae from the cranial end of C1
// (4.5 is the middle of C5), for drawing the cord in true proportion.
func Place(s exam.Species, kg float64, seg Segment) (from, to float64, err error) {
	places, err := stretches(s, kg)
	if err != nil {
		return 0, 0, err
	}
	i := Index(s, seg)
	if i < 0 {
		return 0, 0, &exam.Invalid{Field: "segment", Value: seg.String(), Allowed: "a segment the " + s.String() + " has"}
	}
	return places[i].from, places[i].to, nil
}

// CordEnd returns over which vertebrae the cord ends, and the source. Dog: computed from the
// places above (Valentino-2025 counts L6 or L7 in 96 % of 163 dogs with normal tails). Cat and
// rabbit: counted (Kot-1994, 42; Greenaway-2001, 64). Horse: about S2, from memory.
func CordEnd(s exam.Species, kg float64) ([]VertebraWeight, string, error) {
	v := func(r exam.Region, n int, w float64) VertebraWeight {
		return VertebraWeight{exam.NewVertebra(r, n), w}
	}
	switch s {
	case exam.Dog:
		places, err := stretches(s, kg)
		if err != nil {
			return nil, "", err
		}
		end, sd := places[len(places)-1].to, spread(s, kg, 26)
		var out []VertebraWeight
		for k, vert := range exam.Vertebrae(s) {
			if w := cdf((float64(k+1)-end)/sd) - cdf((float64(k)-end)/sd); w > 0.005 {
				out = append(out, VertebraWeight{vert, w})
			}
		}
		return out, "Khan-2019, Valentino-2025, UMN-cord-caudal; weight limits a choice", nil
	case exam.Cat:
		return []VertebraWeight{v(exam.RegionL, 7, 0.071), v(exam.RegionS, 1, 0.833), v(exam.RegionS, 2, 0.095)}, "Kot-1994, 42 cats", nil
	case exam.Rabbit:
		return []VertebraWeight{v(exam.RegionS, 1, 0.19), v(exam.RegionS, 2, 0.793), v(exam.RegionS, 3, 0.017)}, "Greenaway-2001, 64 rabbits", nil
	case exam.Horse:
		return []VertebraWeight{v(exam.RegionS, 2, 1)}, "from memory", nil
	}
	return nil, "", &NoData{s, "end of the cord"}
}

// RootExit returns between which vertebrae the root of a segment leaves the canal: C1 through
// the foramen of the atlas (both are C1), C2–C7 cranial to the vertebra of their number, C8
// between C7 and T1, from T1 on caudal to the vertebra of their number. Sacral roots leave through the
// foramina of the sacrum. Source: WVN-cord for C1 and C8, CL-407 for the lumbar rule, the rest from memory.
func RootExit(s exam.Species, seg Segment) (cranial, caudal exam.Vertebra, err error) {
	if s != exam.Dog && s != exam.Cat {
		return 0, 0, &NoData{s, "exits of spinal roots"}
	}
	if Index(s, seg) < 0 {
		return 0, 0, &exam.Invalid{Field: "segment", Value: seg.String(), Allowed: "a segment the " + s.String() + " has"}
	}
	r, num := seg.Region(), seg.Number()
	if r == exam.RegionC {
		switch num {
		case 1:
			return exam.NewVertebra(r, 1), exam.NewVertebra(r, 1), nil
		case 8:
			return exam.NewVertebra(r, 7), exam.NewVertebra(exam.RegionT, 1), nil
		}
		return exam.NewVertebra(r, num-1), exam.NewVertebra(r, num), nil
	}
	cranial = exam.NewVertebra(r, num)
	i := exam.VertebraIndex(s, cranial)
	all := exam.Vertebrae(s)
	return cranial, all[min(i+1, len(all)-1)], nil
}

// RootAtDisc returns the root that passes the foramen at the disc caudal to a vertebra
// (C7 names C7–T1, where C8 leaves), 0 where none does.
func RootAtDisc(s exam.Species, cranial exam.Vertebra) Segment {
	for _, seg := range Segments(s) {
		a, b, err := RootExit(s, seg)
		if err == nil && a == cranial && b != a {
			return seg
		}
	}
	return 0
}
