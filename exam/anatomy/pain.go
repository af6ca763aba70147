package anatomy

import "cordwalk.example/cordwalk/exam"

// PainKind is a structure of the column that can hurt.
type PainKind uint8

// The sources of pain at a level.
const (
	PainDisc PainKind = iota + 1
	PainJoint
	PainMeninges
	PainRoot
)

// String returns the structure's name.
func (k PainKind) String() string {
	return [...]string{"", "disc", "facet joint", "meninges", "root"}[k%5]
}

// PainSource is one structure that can hurt, at the level caudal to a vertebra.
type PainSource struct {
	Kind    PainKind
	Cranial exam.Vertebra // the level lies between this vertebra and the next
	Root    Segment       // for roots
	Site    exam.Site     // where palpation of the spine meets it
}

// spineRanges gives the first vertebra of each palpation site, cranial to caudal (common
// practice: the neck, the withers, the mid back, the thoracolumbar junction, the loin, the rump).
var spineRanges = map[exam.Species][]struct {
	site exam.Site
	from exam.Vertebra
}{
	exam.Dog: {{exam.Cervical, v(exam.RegionC, 1)}, {exam.CranialThoracic, v(exam.RegionT, 1)}, {exam.MidThoracic, v(exam.RegionT, 6)},
		{exam.Thoracolumbar, v(exam.RegionT, 11)}, {exam.Lumbar, v(exam.RegionL, 3)}, {exam.Lumbosacral, v(exam.RegionL, 7)}, {exam.Sacrocaudal, v(exam.RegionS, 2)}},
	exam.Horse: {{exam.Cervical, v(exam.RegionC, 1)}, {exam.CranialThoracic, v(exam.RegionT, 1)}, {exam.MidThoracic, v(exam.RegionT, 8)},
		{exam.Thoracolumbar, v(exam.RegionT, 16)}, {exam.Lumbar, v(exam.RegionL, 3)}, {exam.Lumbosacral, v(exam.RegionL, 6)}, {exam.Sacrocaudal, v(exam.RegionS, 2)}},
	exam.Rabbit: {{exam.Cervical, v(exam.RegionC, 1)}, {exam.CranialThoracic, v(exam.RegionT, 1)}, {exam.MidThoracic, v(exam.RegionT, 5)},
		{exam.Thoracolumbar, v(exam.RegionT, 10)}, {exam.Lumbar, v(exam.RegionL, 3)}, {exam.Lumbosacral, v(exam.RegionL, 7)}, {exam.Sacrocaudal, v(exam.RegionS, 2)}},
}

func init() { spineRanges[exam.Cat] = spineRanges[exam.Dog] }

func v(r exam.Region, n int) exam.Vertebra { return exam.NewVertebra(r, n) }

// SpineSite returns the palpation site that a vertebra belongs to, NoSite for no such vertebra.
func SpineSite(s exam.Species, vert exam.Vertebra) exam.Site {
	if exam.VertebraIndex(s, vert) < 0 {
		return exam.NoSite
	}
	site := exam.NoSite
	for _, r := range spineRanges[s] {
		if vert >= r.from {
			site = r.site
		}
	}
	return site
}

// SpineRange returns the first and the last vertebra of a palpation site, 0 and 0 for another site.
func SpineRange(s exam.Species, site exam.Site) (first, last exam.Vertebra) {
	for _, vert := range exam.Vertebrae(s) {
		if SpineSite(s, vert) == site {
			if first == 0 {
				first = vert
			}
			last = vert
		}
	}
	return first, last
}

// PainSources lists what can hurt along the column of a dog or cat, cranial to caudal: at each
// mobile level the disc (where there is one), the facet joints, the meninges as far as the cord and its
// sac reach (to the first sacral vertebra: common practice), and the root that leaves there.
func PainSources(s exam.Species) ([]PainSource, error) {
	if s != exam.Dog && s != exam.Cat {
		return nil, &NoData{s, "pain sources of the column"}
	}
	var out []PainSource
	all := exam.Vertebrae(s)
	for i, vert := range all[:len(all)-1] {
		if vert.Region() == exam.RegionCd && vert.Number() > 5 {
			break // no cord root beyond Cd5
		}
		site := SpineSite(s, vert)
		fused := vert.Region() == exam.RegionS && all[i+1].Region() == exam.RegionS
		if HasDisc(s, vert) {
			out = append(out, PainSource{PainDisc, vert, 0, site})
		}
		if !fused {
			out = append(out, PainSource{PainJoint, vert, 0, site})
		}
		if vert <= v(exam.RegionS, 1) {
			out = append(out, PainSource{PainMeninges, vert, 0, site})
		}
		if root := RootAtDisc(s, vert); root != 0 {
			out = append(out, PainSource{PainRoot, vert, root, site})
		}
	}
	return out, nil
}

// trunciOffset is P(cut-off level − lesion = k vertebrae), k = 0 to 4. GQ-2012: always 0 to 4 in 33
// dogs, 2 or 3 in 48.5 %; the split inside each group is not published and taken nearly flat.
var trunciOffset = [...]float64{0.17, 0.17, 0.24, 0.25, 0.17}

// TrunciOffset returns the probability that the cut-off of the cutaneous trunci reflex lies k
// vertebrae caudal to the lesion, for k = 0 to 4. Counted in dogs (GQ-2012); no cat count was found.
func TrunciOffset() [5]float64 { return trunciOffset }

// LesionFromTrunci returns in which vertebra the lesion lies, given the cut-off's vertebra.
func LesionFromTrunci(s exam.Species, level exam.Vertebra) ([]VertebraWeight, error) {
	if s != exam.Dog && s != exam.Cat {
		return nil, &NoData{s, "cutaneous trunci offsets"}
	}
	i := exam.VertebraIndex(s, level)
	if i < 0 {
		return nil, &exam.Invalid{Field: "level", Value: level.String(), Allowed: "a vertebra the " + s.String() + " has"}
	}
	all := exam.Vertebrae(s)
	var out []VertebraWeight
	sum := 0.0
	for k, p := range trunciOffset {
		if i-k >= 0 {
			out = append(out, VertebraWeight{all[i-k], p})
			sum += p
		}
	}
	for k := range out {
		out[k].Weight /= sum
	}
	return out, nil
}
