package localise

import (
	"cmp"
	"math"
	"math/bits"
	"slices"

	"cordwalk.example/cordwalk/exam"
)

// gather adds up the live weights by pair of a group, with and without the cells that were
// filled in a block, and lists the pairs that weigh anything.
func (e *Engine) gather(g *group) {
	full := e.histFull[:len(g.pairs)]
	clear(full)
	of := g.of
	weights := e.liveFull[:len(e.live)]
	for i, h := range e.live {
		full[of[h]] += weights[i]
	}
	e.livePairs = e.livePairs[:0]
	if e.blocks == 0 {
		for i, w := range full {
			if w > 0 {
				e.livePairs = append(e.livePairs, livePair{int32(i), g.pairs[i], w, 0})
			}
		}
		return
	}
	looked := e.histLook[:len(g.pairs)]
	clear(looked)
	weights = e.liveLook[:len(e.live)]
	for i, h := range e.live {
		looked[of[h]] += weights[i]
	}
	for i, w := range full {
		if w > 0 || looked[i] > 0 {
			e.livePairs = append(e.livePairs, livePair{int32(i), g.pairs[i], w, looked[i]})
		}
	}
}

// livePair is a pair of a group with its weight, as all findings have it and without blocks.
type livePair struct {
	at int32
	pair
	full, looked uint64
}

// sum128 adds up products of weights and ratios exactly.
type sum128 struct{ hi, lo uint64 }

func (s *sum128) add(w, ratio uint64) {
	h, l := bits.Mul64(w, ratio)
	var carry uint64
	s.lo, carry = bits.Add64(s.lo, l, 0)
	s.hi, _ = bits.Add64(s.hi, h, carry)
}

func (s *sum128) float() float64 {
	return float64(float64(s.hi)*18446744073709551616.0) + float64(s.lo)
}

// ratioBits is the unit of likelihood ratios: a ratio is at most about 1/floor², far below 2²⁴.
const ratioBits = 40

func toRatio(x float64) uint64 {
	return uint64(float64(min(x, 1<<22) * (1 << ratioBits)))
}

// leaders returns the leading region and the runner-up.
func (e *Engine) leaders() (lead, second Region) {
	lead, second = regionByName(e.res.Regions[0].Region), regionByName(e.res.Regions[1].Region)
	return lead, second
}

func regionByName(name string) Region {
	for r, n := range regionNames {
		if n == name {
			return Region(r)
		}
	}
	return NoRegion
}

// analyse fills evidence and next tests: both go through the groups and their weights.
func (e *Engine) analyse() {
	e.res.Evidence = e.res.Evidence[:0]
	e.gatherLive()
	e.beginNext()
	lead, second := e.leaders()
	for gi := range e.m.groups {
		g := &e.m.groups[gi]
		seen, open := false, false
		for _, ci := range g.cells {
			seen = seen || e.obs[ci] >= 0
			open = open || e.open[ci]
		}
		if !seen && !open {
			continue
		}
		e.gather(g)
		if seen {
			e.evidence(g, lead, second)
		}
		if open {
			e.worth(g, seen)
		}
	}
	slices.SortStableFunc(e.res.Evidence, func(a, b Evidence) int {
		return cmp.Or(cmp.Compare(math.Abs(b.Decibans), math.Abs(a.Decibans)), cmp.Compare(a.Item, b.Item), cmp.Compare(a.Site, b.Site))
	})
	e.endNext()
}

// evidence says for each finding of a group how far it moved the leading region against the
// runner-up: the odds with it over the odds without it, everything else as it is.
func (e *Engine) evidence(g *group, lead, second Region) {
	m := e.m
	_, qw := m.p.quadrature()
	var seen [64]int
	n := 0
	for k, ci := range g.cells {
		if e.obs[ci] >= 0 {
			seen[n] = k
			n++
		}
	}
	// The odds with all findings, and for each finding without it. Signatures come in pairs
	// with classes; a signature's ratios are worked out when a pair first asks for them.
	var all [2]sum128
	var without [2][64]sum128
	clear(e.sigKnown[:g.sigs])
	for i := range e.livePairs {
		p := &e.livePairs[i]
		c := &m.classes[p.class]
		inLead, inSecond := c.region == lead || c.second == lead, c.region == second || c.second == second
		if !inLead && !inSecond {
			continue
		}
		full, looked := p.full, p.looked
		if c.region != c.second {
			full, looked = full/2, looked/2
		}
		at := int(p.sig) * n
		if !e.sigKnown[p.sig] {
			e.sigKnown[p.sig] = true
			e.ratios(g, seen[:n], int(p.sig), &qw, e.ratioFull[at:at+n], e.ratioLook[at:at+n])
		}
		for side, in := range [2]bool{inLead, inSecond} {
			if !in {
				continue
			}
			all[side].add(full+looked, 1<<ratioBits)
			for k := range n {
				without[side][k].add(full, e.ratioFull[at+k])
				if looked > 0 {
					without[side][k].add(looked, e.ratioLook[at+k])
				}
			}
		}
	}
	for k := range n {
		ci := g.cells[seen[k]]
		db := 0.0
		a, b, a1, b1 := all[0].float(), all[1].float(), without[0][k].float(), without[1][k].float()
		if a > 0 && b > 0 && a1 > 0 && b1 > 0 {
			db = float64(10 / 2.302585092994045684 * (logOf(a/b) - logOf(a1/b1)))
			db = math.Round(float64(db*1e6)) / 1e6
		}
		c := &m.lay.cells[ci]
		e.res.Evidence = append(e.res.Evidence, Evidence{Item: c.item.String(), Site: c.site.String(),
			Digit: c.digit.String(), Joint: c.joint.String(), Grade: int(e.found[ci].grade), Level: e.levelName(e.found[ci].level), Decibans: db})
	}
}

// ratios writes, for each finding of a group, the group's likelihood without it over that with
// it under a signature: of all findings, and of those that were not filled in a block.
func (e *Engine) ratios(g *group, seen []int, sig int, qw *[points]float64, full, looked []uint64) {
	var p [64][points]float64
	with, withL := *qw, *qw
	for i, k := range seen {
		ci := g.cells[k]
		p[i] = e.likelihood(g, k, ci, sig)
		for q := range with {
			with[q] = float64(with[q] * p[i][q])
			if !e.bulk[ci] {
				withL[q] = float64(withL[q] * p[i][q])
			}
		}
	}
	sum, sumL := total(&with), total(&withL)
	for i, k := range seen {
		var out, outL float64
		for q := range with {
			out += with[q] / p[i][q]
			outL += withL[q] / p[i][q]
		}
		full[i] = toRatio(out / sum)
		looked[i] = 1 << ratioBits
		if !e.bulk[g.cells[k]] {
			looked[i] = toRatio(outL / sumL)
		}
	}
}

// levelName returns a vertebra's name without making a new string each time.
func (e *Engine) levelName(v exam.Vertebra) string {
	if v == 0 {
		return ""
	}
	if i := exam.VertebraIndex(e.m.species, v); i >= 0 && i < len(e.m.vertebraName) {
		return e.m.vertebraName[i]
	}
	return ""
}

func total(acc *[points]float64) float64 { return acc[0] + acc[1] + acc[2] + acc[3] + acc[4] }

// likelihood returns the probability of a cell's finding at each quadrature point under a signature.
func (e *Engine) likelihood(g *group, k, ci, sig int) (out [points]float64) {
	set := &e.m.sets[e.m.setOf[ci]]
	at := (int(g.rows[k][sig])*set.cats + int(e.obs[ci])) * points
	copy(out[:], set.p[at:at+points])
	for more := int(e.upTo[ci] - e.obs[ci]); more > 0; more-- {
		at += points
		for q := range out {
			out[q] += set.p[at+q]
		}
	}
	if e.bent[ci] {
		c := &e.ctx[ci]
		add := c.sum(e.obs[ci], e.upTo[ci])
		for q := range out {
			out[q] = float64(c.keep*out[q]) + add
		}
	}
	return out
}
