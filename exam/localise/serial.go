package localise

import (
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
)

// This file is what the serial model (package progress) needs: the sites without their
// severity, and how well each explains one exam at each severity.

// Site is one place, side and extent of a lesion. Its severity, and what is summed out
// (balance of grey and white, central or peripheral, plexus variant, first week or later), are no part of it.
type Site struct {
	Kind     Kind
	Region   Region
	Side     Side
	From, To anatomy.Segment // 0 where the kind has no segments
	Place    string          // as in Result.Sites
	Words    string
	Class    int     // sites of one class share Place, Side and Words
	Prior    float64 // sums to 1 over Sites and the sound animal
}

// courseSeverities are the severities that the sites of a course are weighed at. A course moves in small steps, and weeks
// of exams of one steady animal add up: what is read between two steps must be as right as at them. With the five of
// Severities, 90 % bands held in 87 %.
var courseSeverities = []float64{0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 1}

// CourseGrid returns the severities at which a model made by ForCourses weighs its sites, from 0
// (sound) to 1 (complete).
func CourseGrid() []float64 { return append([]float64{0}, courseSeverities...) }

// SitesOf lists the single sites of a species, in a fixed order, without making its tables. The error is an
// *Unsupported for other species than dog and cat.
func SitesOf(s exam.Species) ([]Site, error) {
	if s != exam.Dog && s != exam.Cat {
		return nil, &Unsupported{s}
	}
	p := defaults(s)
	return plainModel(s, p, newSpace(s, p)).Sites(), nil
}

// ForCourses returns a model of some of the sites of SitesOf, in their order, on the finer grid that courses
// need. It holds no pairs, answers through Weigher and Drawer, and is not kept. It takes some tenths of a second.
func ForCourses(s exam.Species, sites []int) (*Model, error) {
	if s != exam.Dog && s != exam.Cat {
		return nil, &Unsupported{s}
	}
	p := defaults(s)
	m := plainModel(s, p, newSpace(s, p))
	all := m.Sites()
	var keep []*site
	for _, i := range sites {
		if i >= 0 && i < len(all) {
			keep = append(keep, m.sp.sites[m.serialOf[i]])
		}
	}
	for _, t := range m.sp.sites {
		if t.kind == NoLesion {
			keep = append(keep, t)
		}
	}
	m.sp.sites, m.sp.steps = keep, courseSeverities
	out := &Model{species: s, p: p, lay: m.lay, sp: m.sp, classes: m.classes, segmentName: m.segmentName, vertebraName: m.vertebraName}
	out.tabulate()
	return out, nil
}

// steps is how many severities a lesion is tried at, gridSize those and none.
func (m *Model) steps() int    { return len(m.sp.steps) }
func (m *Model) gridSize() int { return len(m.sp.steps) + 1 }

// Sites lists the single sites, in a fixed order. Pairs and the sound animal are not among
// them: the sound animal is every site at severity 0.
func (m *Model) Sites() []Site {
	m.once.Do(func() {
		for i, t := range m.sp.sites {
			if t.kind == Two || t.kind == NoLesion {
				continue
			}
			c := &m.classes[t.class]
			s := Site{Kind: t.kind, Region: t.region, Side: t.side, Place: c.place, Words: c.words, Class: int(t.class), Prior: t.weight}
			if t.from >= 0 && t.kind != Nerve {
				s.From, s.To = anatomy.At(m.species, t.from), anatomy.At(m.species, t.to)
			}
			m.serial = append(m.serial, s)
			m.serialOf = append(m.serialOf, i)
		}
	})
	return m.serial
}

// SiteDamage returns the damage of each half segment (cranial to caudal; left, right) by a
// site of Sites at a step of its grid: cord damage, or the loss of the segment's root.
func (m *Model) SiteDamage(site, step int) [][2]float64 {
	out := make([][2]float64, m.sp.segments)
	m.Sites()
	if step == 0 || site < 0 || site >= len(m.serial) {
		return out
	}
	t := m.sp.sites[m.serialOf[site]]
	if t.from < 0 || t.kind == PainOnly {
		return out
	}
	severity := m.sp.steps[step-1]
	share := t.side.shares(severity)
	for s := t.from; s <= t.to; s++ {
		for side := range 2 {
			out[s][side] = float64(severity * share[side])
		}
	}
	return out
}

// SiteLogLikelihoods writes into dst, for each site of Model.Sites and each step of severity, 0 first, the
// natural logarithm of the probability of the exam's findings, everything else summed out:
// dst[site*(steps+1)+step]. It grows dst where it is too short and returns it. What the file
// says of diagnosis and level plays no part; days since the onset, age and sedation do.
func (e *Engine) SiteLogLikelihoods(x Exam, dst []float64) ([]float64, error) {
	if x.Species != e.m.species {
		return nil, &exam.Invalid{Field: "species", Value: x.Species.String(), Allowed: e.m.species.String() + " for this engine"}
	}
	m := e.m
	sites := m.Sites()
	size := m.gridSize()
	if need := len(sites) * size; cap(dst) < need {
		dst = make([]float64, need)
	} else {
		dst = dst[:need]
	}
	e.set(x)
	e.prepareSerial()
	n := len(e.serialMax)
	for i := range n {
		e.serialMax[i], e.serialSum[i], e.serialPrior[i] = -1<<62, 0, 0
	}
	var early, late int64
	if x.OnsetDays > 0 {
		t := x.timing(m.p.Acute)
		early = toLog(logOf(t / m.p.Acute))
		late = toLog(logOf((1 - t) / (1 - m.p.Acute)))
	}
	lookedAt, careless := e.blockLogs()
	prior := func(h int) int64 {
		l := m.prior[h]
		if m.timed[h] {
			if m.acute[h] {
				return l + early
			}
			return l + late
		}
		return l
	}
	each := func(f func(slot int, l int64, first bool)) {
		for h := range m.hyps {
			slot := m.slot[h]
			if slot < 0 {
				continue
			}
			p := prior(h)
			if e.blocks == 0 {
				f(int(slot), p+e.full[h], true)
				continue
			}
			f(int(slot), p+e.full[h]+lookedAt, true)
			f(int(slot), p+e.looked[h]+careless, false)
		}
	}
	each(func(slot int, l int64, _ bool) { e.serialMax[slot] = max(e.serialMax[slot], l) })
	each(func(slot int, l int64, _ bool) { e.serialSum[slot] += weight(l - e.serialMax[slot]) })
	// The prior of site and severity is taken out again: what is left is the likelihood.
	for h := range m.hyps {
		if slot := m.slot[h]; slot >= 0 {
			e.serialPrior[slot] += exp(fromLog(prior(h)))
		}
	}
	likely := func(slot int) float64 {
		const unit = float64(1 << weightBits)
		return fromLog(e.serialMax[slot]) + logOf(float64(float64(e.serialSum[slot])/unit)) - logOf(e.serialPrior[slot])
	}
	sound := likely(n - 1)
	for s := range sites {
		dst[s*size] = sound
		for k := 1; k < size; k++ {
			dst[s*size+k] = likely(s*m.steps() + k - 1)
		}
	}
	return dst, nil
}

// prepareSerial maps hypotheses to site and severity once.
func (e *Engine) prepareSerial() {
	m := e.m
	n := len(m.Sites())*m.steps() + 1
	m.slotOnce.Do(func() {
		of := make([]int, len(m.sp.sites))
		for i := range of {
			of[i] = -1
		}
		for k, i := range m.serialOf {
			of[i] = k
		}
		m.slot = make([]int32, m.hyps)
		for h := range m.slot {
			site := int(m.siteOf[h])
			switch {
			case m.sp.sites[site].kind == NoLesion:
				m.slot[h] = int32(n - 1)
			case of[site] < 0:
				m.slot[h] = -1
			default:
				m.slot[h] = int32(of[site]*m.steps() + int(m.severity[h]))
			}
		}
	})
	if len(e.serialMax) != n {
		e.serialMax, e.serialSum, e.serialPrior = make([]int64, n), make([]uint64, n), make([]float64, n)
	}
}
