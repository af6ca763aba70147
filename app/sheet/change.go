package sheet

import (
	"slices"
	"time"

	"cordwalk.example/cordwalk/exam"
)

// topic is something an owner can follow: a leg, walking, the bladder. It is judged by its
// main cells; supporting cells count only where several agree.
type topic struct {
	word    string
	limb    exam.Site
	main    []exam.Key
	support []exam.Key
}

// topics lists what an owner's sheet speaks of, the limbs first in exam.Limbs order.
func topics() []topic {
	limbWords := [4]string{wordLeftFore, wordRghtFore, wordLeftHind, wordRghtHind}
	var out []topic
	for i, l := range exam.Limbs() {
		t := topic{word: limbWords[i], limb: l, main: []exam.Key{{Item: exam.VoluntaryMotor, Site: l}}}
		for _, item := range []exam.Item{exam.Knuckling, exam.PawPlacement, exam.Ataxia, exam.Lameness, exam.GroundClearance} {
			t.support = append(t.support, exam.Key{Item: item, Site: l})
		}
		out = append(out, t)
	}
	mid := func(i exam.Item) exam.Key { return exam.Key{Item: i, Site: exam.Midline} }
	pain := topic{word: wordPain}
	for _, s := range exam.SpinalPain.Info().Sites {
		pain.main = append(pain.main, exam.Key{Item: exam.SpinalPain, Site: s})
	}
	return append(out,
		topic{word: wordWalking, main: []exam.Key{mid(exam.Ambulation)}},
		topic{word: wordTail, main: []exam.Key{mid(exam.TailTone), mid(exam.TailMovement)}},
		topic{word: wordBladder, main: []exam.Key{mid(exam.VoluntaryUrination), mid(exam.UrineLeak)}},
		topic{word: wordBowel, main: []exam.Key{mid(exam.FaecalContinence)}},
		pain,
	)
}

// strength reports whether a fall is said as «weaker» and not as «worse».
func (t topic) strength() bool {
	return t.limb != exam.NoSite || t.word == wordWalking || t.word == wordTail
}

// outcome is what became of a topic since it was last tested.
type outcome struct {
	topic  topic
	tested bool           // today
	known  bool           // at an earlier visit
	dir    exam.Direction // NotComparable where it was not tested today or never before
	since  time.Time      // the visit it is compared with
	then   exam.Finding   // limbs: the grade it is compared with
	now    exam.Finding   // limbs: today's grade
	unlike bool           // the two visits are not like for like
}

// changes compares the last visit with, for each topic, the latest earlier visit that
// tested it. A fall at any main cell makes the topic worse, whatever else rose: an owner's
// sheet does not average a loss away. Supporting cells decide only where no main cell
// moved, at least two agree and none disagrees.
func changes(visits []exam.Visit) []outcome {
	var out []outcome
	last := visits[len(visits)-1]
	for _, t := range topics() {
		c := outcome{topic: t}
		var today []exam.Finding
		for _, k := range slices.Concat(t.main, t.support) {
			for _, f := range last.Findings {
				if f.Item == k.Item && f.Site == k.Site && f.Result.Tested() {
					today = append(today, f)
				}
			}
		}
		for _, f := range today {
			if slices.ContainsFunc(t.main, func(k exam.Key) bool { return k.Item == f.Item && k.Site == f.Site }) {
				c.tested = true
				if t.limb != exam.NoSite {
					c.now = f
				}
			}
		}
		for i := len(visits) - 2; i >= 0; i-- {
			v := visits[i]
			if main, shared := shares(v, t, last); main {
				c.known = true
				if !c.tested || !shared {
					break
				}
				c.dir, c.since = direction(v, last, t), v.Examined
				if t.limb != exam.NoSite {
					c.then, _ = v.Find(t.main[0])
				}
				same, _ := exam.LikeForLike(v, last)
				c.unlike = !same
				break
			}
		}
		if c.known || c.tested {
			out = append(out, c)
		}
	}
	return out
}

// shares reports whether the earlier visit tested a main cell of the topic, and whether the
// last visit tested one of the same cells.
func shares(v exam.Visit, t topic, last exam.Visit) (main, shared bool) {
	for _, k := range t.main {
		if f, ok := v.Find(k); ok && f.Result.Tested() {
			main = true
			if g, ok := last.Find(k); ok && g.Result.Tested() {
				shared = true
			}
		}
	}
	return main, shared
}

func direction(earlier, later exam.Visit, t topic) exam.Direction {
	count := func(keys []exam.Key) (better, worse int) {
		for _, k := range keys {
			a, okA := earlier.Find(k)
			b, okB := later.Find(k)
			if !okA || !okB {
				continue
			}
			switch exam.Change(a, b) {
			case exam.Better:
				better++
			case exam.Worse:
				worse++
			}
		}
		return better, worse
	}
	better, worse := count(t.main)
	switch {
	case worse > 0:
		return exam.Worse
	case better > 0:
		return exam.Better
	}
	better, worse = count(t.support)
	switch {
	case worse >= 2 && better == 0:
		return exam.Worse
	case better >= 2 && worse == 0:
		return exam.Better
	}
	return exam.Same
}
