package anatomy

import "cordwalk.example/cordwalk/exam"

// MinimumWeight is the stated minimum behind a segment score: below this sum of anatomy × trust
// the score is left empty. ½ is half of one trusted finding whose main segment it is (a choice).
const MinimumWeight = 0.5

// SegmentScore is the plain figure of one segment and side in one visit.
type SegmentScore struct {
	Segment  Segment
	Side     exam.Site // Left or Right
	Score    float64   // 0 to 100, the mean health of what was tested; meaningless unless Known
	Known    bool      // enough was tested: see MinimumWeight
	Findings int       // tested findings behind it, those that carry no weight not counted
	Weight   float64   // sum of anatomy × trust behind it
}

// Score returns, for each segment of the species and each side, the mean health of the tested
// findings whose arc includes the segment, weighted by anatomy × trust. A brisk reflex counts as an
// intact arc. It says nothing of the long paths: a cord lesion cranial to an arc leaves its score
// high. Findings without a side (tail, anus, bladder) count on both. It returns nil for a
// species without reflex arcs on record.
func Score(s exam.Species, visit exam.Visit) []SegmentScore {
	if s != exam.Dog && s != exam.Cat {
		return nil
	}
	segs := Segments(s)
	out := make([]SegmentScore, 0, 2*len(segs))
	for _, seg := range segs {
		out = append(out, SegmentScore{Segment: seg, Side: exam.Left}, SegmentScore{Segment: seg, Side: exam.Right})
	}
	add := func(seg Segment, side exam.Site, weight, health float64) {
		i := Index(s, seg)
		if i < 0 || weight <= 0 {
			return
		}
		for k, own := range []exam.Site{exam.Left, exam.Right} {
			if side == own || side == exam.Midline {
				c := &out[2*i+k]
				c.Score += weight * health
				c.Weight += weight
				c.Findings++
			}
		}
	}
	for _, f := range visit.Findings {
		if !f.Result.Tested() {
			continue
		}
		if f.Item == exam.CutaneousTrunci {
			scoreTrunci(s, visit, f, add)
			continue
		}
		health, ok := arcHealth(f)
		if !ok {
			continue
		}
		trust := trustAt(s, f.Item, f.Site)
		for _, w := range ArcOfFinding(s, f) {
			add(w.Segment, f.Site.Side(), w.Weight*trust, health)
		}
	}
	for i := range out {
		if out[i].Weight > 0 {
			out[i].Score = min(100*out[i].Score/out[i].Weight, 100)
		}
		out[i].Known = out[i].Weight >= MinimumWeight-1e-9
	}
	return out
}

// arcHealth is the health of the arc that a finding tests: as Finding.Health, but a reflex, tone or
// feeling above normal shows an arc that works.
func arcHealth(f exam.Finding) (float64, bool) {
	g, ok := f.Result.Grade()
	if !ok {
		return 0, false
	}
	in := f.Item.Info()
	switch in.Group {
	case exam.GroupReflex, exam.GroupSensation:
		if f.Item.TwoSided() && g > in.Normal {
			return 1, true
		}
		if f.Item.TwoSided() {
			return float64(g-in.First) / float64(in.Normal-in.First), true
		}
	}
	return f.Health()
}

// scoreTrunci spreads a cutaneous trunci finding: its motor side is C8–T1, its sensory side the
// segments of the trunk. Normal speaks for all of them. Lost caudal to a level speaks against
// the segments of the vertebrae where such a lesion lies (GQ-2012), for the trunk cranial
// to them, and not at all for what lies caudal. Absent throughout speaks only against C8–T1, and only
// where the other side answers: absent on both sides it means little (CL-78).
func scoreTrunci(s exam.Species, visit exam.Visit, f exam.Finding, add func(Segment, exam.Site, float64, float64)) {
	grade, _ := f.Result.Grade()
	trust := trustAt(s, f.Item, f.Site)
	motor := func(health, trust float64) {
		for _, w := range ArcOf(s, f.Item, f.Site) {
			add(w.Segment, f.Site, w.Weight*trust, health)
		}
	}
	first, last := Index(s, NewSegment(exam.RegionT, 2)), Index(s, NewSegment(exam.RegionL, 3))
	switch {
	case grade == 0:
		other, ok := visit.Grade(f.Item, f.Site.Mirror())
		if ok && other > 0 {
			motor(0, trust)
		} else {
			motor(0, trust*Poor)
		}
	case f.Normal():
		motor(1, trust)
		for i := first; i <= last; i++ {
			add(At(s, i), f.Site, Contributing*trust, 1)
		}
	case f.Level == 0:
		motor(1, trust)
	default:
		motor(1, trust)
		where, err := LesionFromTrunci(s, f.Level)
		if err != nil {
			return
		}
		struck := make([]float64, last+1) // P(the lesion is in this segment)
		highest := last + 1
		kg := 0.0
		if m, ok := visit.Measured(exam.Weight, exam.NoSite); ok {
			kg = m.Value
		}
		for _, lv := range where {
			segs, err := SegmentAtVertebra(s, kg, lv.Vertebra)
			if err != nil {
				continue
			}
			for _, w := range Normalised(segs) {
				if i := Index(s, w.Segment); i >= first && i <= last {
					struck[i] += lv.Weight * w.Weight
					if w.Weight > 0.05 {
						highest = min(highest, i)
					}
				}
			}
		}
		for i := first; i <= last; i++ {
			if i < highest {
				add(At(s, i), f.Site, Contributing*trust, 1)
			} else if struck[i] > 0 {
				add(At(s, i), f.Site, Contributing*trust*struck[i]/struckMost(struck), 0)
			}
		}
	}
}

func struckMost(ps []float64) float64 {
	m := 0.0
	for _, p := range ps {
		m = max(m, p)
	}
	return m
}
