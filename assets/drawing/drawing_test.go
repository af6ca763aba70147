package drawing

import (
	"testing"

	"cordwalk.example/cordwalk/exam"
)

func TestEveryLimbIsARegionOnItsOwnSide(t *testing.T) {
	for _, s := range exam.AllSpecies() {
		f := FromAbove(s)
		for _, limb := range exam.Limbs() {
			c, ok := f.Centre(limb.String())
			if !ok {
				t.Fatalf("%s has no region %s", s, limb)
			}
			if left := c.X < f.Width/2; left != (limb.Side() == exam.Left) {
				t.Errorf("%s of the %s lies at x = %.1f", limb, s, c.X)
			}
			if cranial := c.Y < f.Height/2; cranial != limb.IsThoracic() {
				t.Errorf("%s of the %s lies at y = %.1f", limb, s, c.Y)
			}
			if got := f.At(Point{c.X, c.Y}); got == "" {
				t.Errorf("nothing is drawn at the middle of %s of the %s", limb, s)
			}
		}
		for _, r := range f.Regions {
			for _, p := range r.Paths {
				for _, q := range p.Points {
					if q.X < 0 || q.X > f.Width || q.Y < 0 || q.Y > f.Height {
						t.Errorf("%s of the %s leaves the figure at %v", r.Name, s, q)
					}
				}
			}
		}
	}
}

func TestColumnHasEveryVertebraInOrder(t *testing.T) {
	for _, s := range exam.AllSpecies() {
		col := Column(s)
		want := 0
		for r := exam.RegionC; r < exam.RegionCd; r++ {
			want += exam.VertebraCount(s, r)
		}
		if len(col) != want+5 {
			t.Errorf("%s: %d vertebrae, want %d", s, len(col), want+5)
		}
		for i, b := range col {
			if exam.VertebraIndex(s, b.Vertebra) != i {
				t.Errorf("%s: vertebra %d is %s", s, i, b.Vertebra)
			}
			if i > 0 && (b.Start != col[i-1].End || b.End <= b.Start) {
				t.Errorf("%s: %s does not follow its neighbour", s, b.Vertebra)
			}
		}
		if col[0].Start != 0 || col[len(col)-1].End != 1 {
			t.Errorf("%s: the column runs from %v to %v", s, col[0].Start, col[len(col)-1].End)
		}
	}
}

// Order of lengths as canine osteology teaching pages give it: the axis is the longest, thoracic
// bodies are short, lumbar bodies longer, the seventh a little shorter than those before it.
func TestProportionsOfTheDogsColumn(t *testing.T) {
	length := map[string]float64{}
	for _, b := range Column(exam.Dog) {
		length[b.Vertebra.String()] = b.End - b.Start
	}
	for name, l := range length {
		if name != "C2" && l >= length["C2"] {
			t.Errorf("%s is not shorter than the axis", name)
		}
	}
	for i := 1; i <= 9; i++ {
		v := exam.NewVertebra(exam.RegionT, i).String()
		if length[v] >= length["L1"] {
			t.Errorf("%s is not shorter than L1", v)
		}
	}
	if length["L7"] >= length["L6"] {
		t.Error("L7 is not shorter than L6")
	}
}

func TestPlace(t *testing.T) {
	a, ok := Place(exam.Dog, exam.NewVertebra(exam.RegionT, 13), 1)
	b, ok2 := Place(exam.Dog, exam.NewVertebra(exam.RegionL, 1), 0)
	if !ok || !ok2 || a-b > 1e-12 || b-a > 1e-12 {
		t.Errorf("the end of T13 (%v) is not the start of L1 (%v)", a, b)
	}
	if _, ok := Place(exam.Dog, exam.NewVertebra(exam.RegionCd, 9), 0); ok {
		t.Error("Cd9 is not shown, yet has a place")
	}
}
