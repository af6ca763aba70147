package progress

import (
	"math"

	"cordwalk.example/cordwalk/exam"
)

// Target is something whose function is followed: a segment of one side, a limb, a region.
type Target struct {
	Kind TargetKind
	Name string    // "L7", "pelvic-left", "T3-L3"
	Side exam.Site // Left or Right for a segment, else NoSite
}

// TargetKind tells segments, limbs and regions apart.
type TargetKind uint8

// The kinds of targets.
const (
	SegmentTarget TargetKind = iota
	LimbTarget
	RegionTarget
)

// Share says how a lesion at one place damages one target at each severity of the grid:
// 0 sound, 1 lost. Damage does not fall as severity rises.
type Share struct {
	Target int // index into Space.Targets
	Damage [Levels]float64
}

// Space is the set of places among which a course is weighed, and what each predicts.
// Its methods are called from one goroutine at a time.
type Space interface {
	// Targets lists what the places may damage.
	Targets() []Target
	// Sites returns the number of places. A place is named by its index.
	Sites() int
	// Prior returns how likely each place is before any exam; they add up to 1.
	Prior(site int) float64
	// Region returns the index of the place's region among the RegionTargets, or −1.
	Region(site int) int
	// Shares returns what a lesion at the place damages. What is not named stays sound.
	Shares(site int) []Share
	// Neighbours returns the places that a lesion may turn into by growing a segment.
	Neighbours(site int) []int
	// Candidates returns the places that are worth weighing for this exam beside those carried
	// from the visit before, in ascending order. wide asks for all that may matter at all: it is
	// set at the first visits and now and then.
	Candidates(v exam.Visit, carried []int, wide bool) []int
	// LogLikelihoods puts ln P(the findings of v | place, severity) into dst, Levels values
	// for each of the places. A constant for all places and severities may be left out.
	LogLikelihoods(v exam.Visit, sites []int, dst []float64)
}

// Copies says how strongly a reading that leans on an earlier one shares its error: the
// correlation of the two errors. Judgement; a copied reading tells little that is new.
var copies = struct{ Seen, Copied float64 }{Seen: 1. / 3, Copied: 3. / 4}

// newInformation returns what the n-th reading of a chain that shares its error adds, in units of
// one free reading: n readings with correlation r between errors weigh n/(1 + (n − 1)r).
func newInformation(n int, r float64) float64 {
	w := func(n int) float64 { return float64(n) / (1 + float64(n-1)*r) }
	if n <= 1 {
		return 1
	}
	return w(n) - w(n-1)
}

// lean is how a finding leans on what was read before.
type lean uint8

const (
	free   lean = iota // looked at afresh
	seen               // given with sight of the last grade, and equal to it
	copied             // copied by key, or filled in a block
)

// chains follows, cell by cell, how many readings in a row share an error.
type chains map[exam.Key]link

type link struct {
	result exam.Result
	level  exam.Vertebra
	run    int // readings that share an error, this one included
}

// leans sorts a visit's tested findings by how they lean on the earlier ones, with the mean new
// information of each class, and returns what the chains become with them.
func (c chains) leans(v exam.Visit) (sorted [3][]exam.Finding, weight [3]float64, next chains) {
	weight[free] = 1
	next = make(chains, len(v.Findings))
	for _, f := range v.Findings {
		if !f.Result.Tested() {
			continue
		}
		k := f.Key()
		last, known := c[k]
		equal := known && last.result == f.Result && last.level == f.Level
		class := free
		switch {
		case f.How == exam.SameAsLast, f.How == exam.RestNormal && equal:
			class = copied // a first block fill is one look, which the space itself weighs
		case f.Seen && equal:
			class = seen
		}
		run := 1
		switch {
		case equal && class != free:
			run = last.run + 1
		case class == copied:
			run = 2 // what it was copied from is not in this course
		}
		next[k] = link{f.Result, f.Level, run}
		sorted[class] = append(sorted[class], f)
		switch class {
		case seen:
			weight[seen] += newInformation(run, copies.Seen)
		case copied:
			weight[copied] += newInformation(run, copies.Copied)
		}
	}
	for _, class := range []lean{seen, copied} {
		if n := len(sorted[class]); n > 0 {
			weight[class] /= float64(n)
		}
	}
	return sorted, weight, next
}

// logLikelihoods weighs a visit: fresh findings in full, leaning ones by what they add. It returns
// what the chains become.
func logLikelihoods(s Space, c chains, v exam.Visit, sites []int, dst []float64) chains {
	sorted, weight, next := c.leans(v)
	part := v
	part.Findings = sorted[free]
	s.LogLikelihoods(part, sites, dst)
	if len(sorted[seen])+len(sorted[copied]) == 0 {
		return next
	}
	base := append([]float64(nil), dst...)
	with := make([]float64, len(dst))
	for _, class := range []lean{seen, copied} {
		if len(sorted[class]) == 0 {
			continue
		}
		part.Findings = append(part.Findings[:len(part.Findings):len(part.Findings)], sorted[class]...)
		exam.SortFindings(part.Findings)
		s.LogLikelihoods(part, sites, with)
		for i := range dst {
			dst[i] += float64(weight[class] * (with[i] - base[i]))
		}
		copy(base, with)
	}
	return next
}

// exp is eˣ with the same bits on every machine: argument reduction and a Taylor
// polynomial, no fused multiply–add. Relative error below 1e-15 for x ≤ 0.
func exp(x float64) float64 {
	if x < -700 {
		return 0
	}
	if x > 700 {
		x = 700
	}
	const high, low = 6.93147180369123816490e-01, 1.90821492927058770002e-10
	k := math.Floor(float64(x*math.Log2E) + 0.5)
	r := float64(x-float64(k*high)) - float64(k*low)
	s := 1.0
	for i := 13; i >= 1; i-- {
		s = float64(float64(s*r)/float64(i)) + 1
	}
	return math.Ldexp(s, int(k))
}
