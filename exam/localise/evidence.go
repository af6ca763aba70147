package localise

import (
	"cmp"
	"math"
	"math/bits"
	"slices"

	"cordwalk.example/cordwalk/exam"
)

// histogram adds up the live weights by pair of a group, with and without the cells that
// were filled in a block.
func (e *Engine) histogram(g *group) (full, looked []uint64) {
	full, looked = e.histFull[:len(g.pairs)], e.histLook[:len(g.pairs)]
	clear(full)
	of := g.of
	if e.blocks == 0 {
		for _, h := range e.live {
			full[of[h]] += e.weightFull[h]
		}
		return full, looked
	}
	clear(looked)
	for _, h := range e.live {
		full[of[h]] += e.weightFull[h]
		looked[of[h]] += e.weightLooked[h]
	}
	return full, looked
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
	return uint64(math.Round(float64(min(x, 1<<22) * (1 << ratioBits))))
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

// evidence says for each finding how far it moved the leading region against the runner-up:
// the odds with it over the odds without it, everything else as it is.
func (e *Engine) evidence() {
	m := e.m
	e.res.Evidence = e.res.Evidence[:0]
	lead, second := e.leaders()
	_, qw := m.p.quadrature()
	for gi := range m.groups {
		g := &m.groups[gi]
		var seen [64]int
		n := 0
		for k, ci := range g.cells {
			if e.obs[ci] >= 0 {
				seen[n] = k
				n++
			}
		}
		if n == 0 {
			continue
		}
		full, looked := e.histogram(g)
		mass := e.sigMass[:g.sigs]
		clear(mass)
		for i, p := range g.pairs {
			c := &m.classes[p.class]
			if c.region == lead || c.second == lead || c.region == second || c.second == second {
				mass[p.sig] += full[i]
				if e.blocks > 0 {
					mass[p.sig] += looked[i]
				}
			}
		}
		// For each signature, the ratio without the finding to with it.
		ratioFull, ratioLook := e.pred[:g.sigs], e.pred[g.sigs:2*g.sigs]
		for i := range n {
			ci := g.cells[seen[i]]
			bulk := e.bulk[ci]
			for s, w := range mass {
				if w == 0 {
					continue
				}
				with, without := qw, qw
				withL, withoutL := qw, qw
				for j := range n {
					cj := g.cells[seen[j]]
					p := e.likelihood(g, seen[j], cj, s)
					for q := range p {
						with[q] = float64(with[q] * p[q])
						if j != i {
							without[q] = float64(without[q] * p[q])
						}
						if !e.bulk[cj] {
							withL[q] = float64(withL[q] * p[q])
							if j != i {
								withoutL[q] = float64(withoutL[q] * p[q])
							}
						}
					}
				}
				ratioFull[s] = toRatio(total(&without) / total(&with))
				if e.blocks > 0 {
					if bulk {
						ratioLook[s] = 1 << ratioBits
					} else {
						ratioLook[s] = toRatio(total(&withoutL) / total(&withL))
					}
				}
			}
			var a, b, a1, b1 sum128
			for k, p := range g.pairs {
				if full[k] == 0 && (e.blocks == 0 || looked[k] == 0) {
					continue
				}
				c := &m.classes[p.class]
				for half, r := range [2]Region{c.region, c.second} {
					if r != lead && r != second || half == 1 && r == c.region {
						continue
					}
					w, wl := full[k], uint64(0)
					if e.blocks > 0 {
						wl = looked[k]
					}
					if c.region != c.second {
						w, wl = w/2, wl/2
					}
					x, x1 := &a, &a1
					if r == second {
						x, x1 = &b, &b1
					}
					x.add(w+wl, 1<<ratioBits)
					x1.add(w, ratioFull[p.sig])
					if wl > 0 {
						x1.add(wl, ratioLook[p.sig])
					}
				}
			}
			db := 0.0
			if a.float() > 0 && b.float() > 0 && a1.float() > 0 && b1.float() > 0 {
				db = float64(10 / 2.302585092994045684 * (logOf(a.float()/b.float()) - logOf(a1.float()/b1.float())))
				db = math.Round(float64(db*1e6)) / 1e6
			}
			c := &m.lay.cells[ci]
			e.res.Evidence = append(e.res.Evidence, Evidence{Item: c.item.String(), Site: c.site.String(),
				Digit: c.digit.String(), Joint: c.joint.String(), Grade: int(e.found[ci].grade), Level: e.levelName(e.found[ci].level), Decibans: db})
		}
	}
	slices.SortStableFunc(e.res.Evidence, func(a, b Evidence) int {
		return cmp.Or(cmp.Compare(math.Abs(b.Decibans), math.Abs(a.Decibans)), cmp.Compare(a.Item, b.Item), cmp.Compare(a.Site, b.Site))
	})
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
