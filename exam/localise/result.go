package localise

// Result is the answer of the engine. Probabilities of regions sum to 1. Lists are sorted,
// the largest first; Segments run from cranial to caudal, left before right.
//
// The lists belong to the engine that gave the result and hold until its next Compute or
// Update; Clone makes a copy to keep.
type Result struct {
	Species  string              `json:"species"`
	Regions  []RegionProbability `json:"regions"`
	Kinds    []KindProbability   `json:"kinds"`
	Sites    []SiteProbability   `json:"sites"`
	Segments []SegmentDamage     `json:"segments"`
	Evidence []Evidence          `json:"evidence"`
	Next     []NextTest          `json:"next"`
	Warnings []string            `json:"warnings"`
	Alone    *Alone              `json:"alone,omitempty"`

	// Summary is the leading answer in words: «L6–S1 left, cord or roots, 83 %», or that
	// there is not enough to say. Enough is false in that case.
	Summary string `json:"summary"`
	Enough  bool   `json:"enough"`
}

// RegionProbability is the probability of one region.
type RegionProbability struct {
	Region      string  `json:"region"`
	Probability float64 `json:"probability"`
}

// KindProbability is the probability of one kind of explanation.
type KindProbability struct {
	Kind        string  `json:"kind"`
	Probability float64 `json:"probability"`
}

// SiteProbability is the probability of one place and side. Side is left, right or both;
// a lesion of both sides that is worse on one counts to that side.
type SiteProbability struct {
	Kind        string  `json:"kind"`
	Place       string  `json:"place"`
	Side        string  `json:"side"`
	Probability float64 `json:"probability"`
	Words       string  `json:"words"`
}

// SegmentDamage says of half a segment how probably it is damaged (cord or root, by a tenth
// or more) and how much damage is expected, 0 to 1.
type SegmentDamage struct {
	Segment string  `json:"segment"`
	Side    string  `json:"side"`
	Damaged float64 `json:"damaged"`
	Damage  float64 `json:"damage"`
}

// Evidence says how far one finding moved the leading region against the runner-up: ten
// decibans are odds of ten to one. Positive speaks for the leader.
type Evidence struct {
	Item     string  `json:"item"`
	Site     string  `json:"site"`
	Digit    string  `json:"digit,omitempty"`
	Joint    string  `json:"joint,omitempty"`
	Grade    int     `json:"grade"`
	Level    string  `json:"level,omitempty"`
	Decibans float64 `json:"decibans"`
}

// NextTest is a test that was not done, with the information it is expected to give.
type NextTest struct {
	Item    string  `json:"item"`
	Site    string  `json:"site"`
	Bits    float64 `json:"bits"`
	Seconds int     `json:"seconds"`
	Hurts   bool    `json:"hurts"`
	Due     bool    `json:"due,omitempty"` // not for its information: a paralysed limb whose feeling is not known
}

// Alone is the answer of the exam without what the file says of diagnosis and level.
type Alone struct {
	Regions []RegionProbability `json:"regions"`
	Kinds   []KindProbability   `json:"kinds"`
	Sites   []SiteProbability   `json:"sites"`
}

// Clone returns a copy of r that does not change with the engine.
func (r *Result) Clone() *Result {
	c := *r
	c.Regions = append([]RegionProbability{}, r.Regions...)
	c.Kinds = append([]KindProbability{}, r.Kinds...)
	c.Sites = append([]SiteProbability{}, r.Sites...)
	c.Segments = append([]SegmentDamage{}, r.Segments...)
	c.Evidence = append([]Evidence{}, r.Evidence...)
	c.Next = append([]NextTest{}, r.Next...)
	c.Warnings = append([]string{}, r.Warnings...)
	if r.Alone != nil {
		c.Alone = &Alone{append([]RegionProbability{}, r.Alone.Regions...), append([]KindProbability{}, r.Alone.Kinds...),
			append([]SiteProbability{}, r.Alone.Sites...)}
	}
	return &c
}

// Region returns the probability of a region by name, such as "L4-S3".
func (r *Result) Region(name string) float64 {
	for _, x := range r.Regions {
		if x.Region == name {
			return x.Probability
		}
	}
	return 0
}

// Kind returns the probability of a kind by name, such as "cord".
func (r *Result) Kind(name string) float64 {
	for _, x := range r.Kinds {
		if x.Kind == name {
			return x.Probability
		}
	}
	return 0
}
