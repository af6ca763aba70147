// Package anatomy is the cord and its nerves as tables: which segments a species has, which
// nerves, muscles, skin zones and reflex arcs hang on them and how strongly, in which
// vertebra a segment lies, and what varies between animals.
//
// Dog and cat are covered in full. For horse and rabbit there is what is published; a
// function without data for a species returns a *NoData error that says so. Every row
// names its source: a publication's key, «from memory» (the standard textbooks, not read
// again), «common practice», or «derived» with the working.
//
// A segment is never mapped to the vertebra of its number: from the caudal neck on the cord
// is shorter than the column. Use SegmentAtVertebra, VertebraOfSegment and SegmentsAtDisc.
package anatomy

import (
	"fmt"
	"strconv"
	"strings"

	"cordwalk.example/cordwalk/exam"
)

// Segment is one segment of the spinal cord by region and number, such as L7. The zero
// Segment is none. Segments are ordered from cranial to caudal by their numeric value.
type Segment uint8

// NewSegment returns the segment with that number in its region, 1 to 31.
func NewSegment(r exam.Region, number int) Segment { return Segment(int(r)<<5 | number&31) }

// Region returns the segment's region.
func (s Segment) Region() exam.Region { return exam.Region(s >> 5) }

// Number returns the segment's number in its region, from 1.
func (s Segment) Number() int { return int(s & 31) }

// String returns the usual name, such as L7, empty for the zero Segment.
func (s Segment) String() string {
	if s == 0 {
		return ""
	}
	return s.Region().String() + strconv.Itoa(s.Number())
}

// MarshalText makes a Segment its name in JSON.
func (s Segment) MarshalText() ([]byte, error) { return []byte(s.String()), nil }

// UnmarshalText reads what MarshalText wrote.
func (s *Segment) UnmarshalText(b []byte) error {
	seg, err := ParseSegment(string(b), 0)
	*s = seg
	return err
}

// segmentCounts holds C, T, L, S, Cd. Sources: UMN-cord for dog, cat and horse; teaching
// notes of low grade for the rabbit.
var segmentCounts = map[exam.Species][6]int{
	exam.Dog:    {0, 8, 13, 7, 3, 5},
	exam.Cat:    {0, 8, 13, 7, 3, 5},
	exam.Horse:  {0, 8, 18, 6, 5, 5},
	exam.Rabbit: {0, 8, 12, 7, 4, 6},
}

// SegmentSource names where the species' segment counts come from.
func SegmentSource(s exam.Species) string {
	if s == exam.Rabbit {
		return "teaching notes, low grade"
	}
	return "UMN-cord"
}

// SegmentCount returns how many cord segments the species has in a region; 0 for an unknown species.
func SegmentCount(s exam.Species, r exam.Region) int {
	if r < exam.RegionC || r > exam.RegionCd {
		return 0
	}
	return segmentCounts[s][r]
}

// Segments lists the species' cord segments, cranial to caudal.
func Segments(s exam.Species) []Segment {
	var out []Segment
	for r := exam.RegionC; r <= exam.RegionCd; r++ {
		for n := 1; n <= SegmentCount(s, r); n++ {
			out = append(out, NewSegment(r, n))
		}
	}
	return out
}

// ParseSegment reads a segment's name such as L7 or Cd2 and checks that the species has it.
// With species 0 it checks the name's form only.
func ParseSegment(word string, s exam.Species) (Segment, error) {
	for r := exam.RegionCd; r >= exam.RegionC; r-- {
		rest, ok := strings.CutPrefix(word, r.String())
		if !ok {
			continue
		}
		n, err := strconv.Atoi(rest)
		if err != nil || n < 1 || n > 31 || strconv.Itoa(n) != rest {
			break
		}
		if s != 0 && n > SegmentCount(s, r) {
			return 0, &exam.Invalid{Field: "segment", Value: word,
				Allowed: fmt.Sprintf("a segment the %s has: %s1 to %s%d", s, r, r, SegmentCount(s, r))}
		}
		return NewSegment(r, n), nil
	}
	return 0, &exam.Invalid{Field: "segment", Value: word, Allowed: "a cord segment such as C5, T13, L7, S1 or Cd2"}
}

// Index returns the position of the segment in the species' cord, 0 for C1, or -1 if it has no such segment.
func Index(s exam.Species, seg Segment) int {
	if seg == 0 || seg.Number() < 1 || seg.Number() > SegmentCount(s, seg.Region()) {
		return -1
	}
	i := 0
	for r := exam.RegionC; r < seg.Region(); r++ {
		i += SegmentCount(s, r)
	}
	return i + seg.Number() - 1
}

// At is the inverse of Index; the zero Segment where the species has none there.
func At(s exam.Species, index int) Segment {
	if index < 0 {
		return 0
	}
	for r := exam.RegionC; r <= exam.RegionCd; r++ {
		if index < SegmentCount(s, r) {
			return NewSegment(r, index+1)
		}
		index -= SegmentCount(s, r)
	}
	return 0
}

// Cord is one of the four clinical regions of the cord, and the caudal segments beyond them.
type Cord uint8

// The regions by which lesions are localised (CSAIM-849).
const (
	NoCord    Cord = iota
	C1C5           // cranial to the thoracic limbs' enlargement
	C6T2           // the enlargement of the thoracic limbs
	T3L3           // between the enlargements
	L4S3           // the enlargement of the pelvic limbs, bladder and anus
	CdSegment      // the tail
)

// String returns the region's name.
func (c Cord) String() string {
	return [...]string{"", "C1–C5", "C6–T2", "T3–L3", "L4–S3", "Cd"}[c%6]
}

// CordRegions lists the regions, cranial to caudal.
func CordRegions() []Cord { return []Cord{C1C5, C6T2, T3L3, L4S3, CdSegment} }

// CordRegion returns the clinical region that a segment belongs to. The borders are those of
// dog and cat; they are used for horse and rabbit too, whose lumbar segments are counted alike.
func CordRegion(seg Segment) Cord {
	switch n := seg.Number(); seg.Region() {
	case exam.RegionC:
		if n <= 5 {
			return C1C5
		}
		return C6T2
	case exam.RegionT:
		if n <= 2 {
			return C6T2
		}
		return T3L3
	case exam.RegionL:
		if n <= 3 {
			return T3L3
		}
		return L4S3
	case exam.RegionS:
		return L4S3
	case exam.RegionCd:
		return CdSegment
	}
	return NoCord
}

// NoData is the error of a function that has no published data for a species.
type NoData struct {
	Species exam.Species
	What    string // such as "reflex arcs"
}

func (e *NoData) Error() string {
	return fmt.Sprintf("no %s are on record for the %s; only dog and cat are covered in full", e.What, e.Species)
}

// Weight is a segment with its share in something. Shares of one nerve or arc are on one
// scale, 0 to 1, and need not add up to 1.
type Weight struct {
	Segment Segment
	Weight  float64
}

// The three shares of a segment where no animals were counted. Main and contributing are
// judgements (a source's order put into numbers); occasional is close to Allam's count of
// limbs whose plexus takes in C5 (24 %) or T2 (21 %).
const (
	Main         = 1.0
	Contributing = 0.6
	Occasional   = 0.2
)

// roots reads a compact row: «C6* C7 (C8)» is C6 main, C7 contributing, C8 occasional;
// «Cd1-Cd5» is a run; «S2=0.8» a counted share. The tables are constants: a bad row panics.
func roots(row string) []Weight {
	var out []Weight
	for _, word := range strings.Fields(row) {
		weight := Contributing
		if inner, ok := strings.CutPrefix(word, "("); ok {
			word, weight = strings.TrimSuffix(inner, ")"), Occasional
		} else if inner, ok := strings.CutSuffix(word, "*"); ok {
			word, weight = inner, Main
		} else if name, share, ok := strings.Cut(word, "="); ok {
			v, err := strconv.ParseFloat(share, 64)
			if err != nil {
				panic("anatomy: bad share " + word)
			}
			word, weight = name, v
		}
		from, to, run := strings.Cut(word, "-")
		a, err := ParseSegment(from, exam.Dog)
		if err != nil {
			panic(err)
		}
		b := a
		if run {
			if b, err = ParseSegment(to, exam.Dog); err != nil {
				panic(err)
			}
		}
		for i := Index(exam.Dog, a); i <= Index(exam.Dog, b); i++ {
			out = append(out, Weight{At(exam.Dog, i), weight})
		}
	}
	return out
}

// Shift moves every segment by n segments caudally (cranially where n is negative), as a
// postfixed or prefixed plexus does. What would leave the species' cord is dropped.
func Shift(s exam.Species, ws []Weight, n int) []Weight {
	out := make([]Weight, 0, len(ws))
	for _, w := range ws {
		if i := Index(s, w.Segment); i >= 0 {
			if seg := At(s, i+n); seg != 0 {
				out = append(out, Weight{seg, w.Weight})
			}
		}
	}
	return out
}

// Share returns the weight of a segment, 0 where it has none.
func Share(ws []Weight, seg Segment) float64 {
	for _, w := range ws {
		if w.Segment == seg {
			return w.Weight
		}
	}
	return 0
}

// Normalised scales weights to add up to 1; nil where they are all zero.
func Normalised(ws []Weight) []Weight {
	sum := 0.0
	for _, w := range ws {
		sum += w.Weight
	}
	if sum <= 0 {
		return nil
	}
	out := make([]Weight, len(ws))
	for i, w := range ws {
		out[i] = Weight{w.Segment, w.Weight / sum}
	}
	return out
}

// Span names segments briefly, runs joined: «L4–L6», «C8, T1». Segments that only
// take part now and then (Occasional or less) are left out while others remain.
func Span(s exam.Species, ws []Weight) string {
	var idx []int
	for pass := 0; pass < 2 && len(idx) == 0; pass++ {
		for _, w := range ws {
			if i := Index(s, w.Segment); i >= 0 && (w.Weight > Occasional || pass == 1) {
				idx = append(idx, i)
			}
		}
	}
	var parts []string
	for i := 0; i < len(idx); {
		j := i
		for j+1 < len(idx) && idx[j+1] == idx[j]+1 {
			j++
		}
		name := At(s, idx[i]).String()
		if j > i {
			name += "–" + At(s, idx[j]).String()
		}
		parts = append(parts, name)
		i = j + 1
	}
	return strings.Join(parts, ", ")
}
