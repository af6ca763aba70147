package progress

import (
	"math"
	"math/rand/v2"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/localise"
)

// animal is a dog with a lesion at one place, whose exams are drawn from the localisation model
// itself, at any severity: what is summed out there (balance, plexus variant, what tests of one arc
// share) is drawn anew for each exam.
type animal struct{ drawer *localise.Drawer }

func newAnimal(site func(localise.Site) bool, cells []exam.Key) *animal {
	m, err := localise.ModelOf(exam.Dog)
	if err != nil {
		panic(err)
	}
	for i, s := range m.Sites() {
		if site(s) {
			return &animal{m.Drawer(i, cells)}
		}
	}
	panic("no such place")
}

func (a *animal) draw(r *rand.Rand, severity float64, at time.Time) exam.Visit {
	return exam.Visit{Examined: at, Examiner: "A. Brook", Findings: a.drawer.Draw(r, severity)}
}

// allCells is every cell of the vocabulary whose grades are steps, up to n of them.
func allCells(n int) []exam.Key {
	var out []exam.Key
	for _, item := range exam.Items() {
		in := item.Info()
		if item.Has(exam.Unordered) || in.Normal < 0 || item == exam.CutaneousTrunci || in.Group == exam.GroupWhole || item.Has(exam.TakesJoint) {
			continue
		}
		for _, s := range in.Sites {
			if len(out) < n {
				out = append(out, exam.Key{Item: item, Site: s})
			}
		}
	}
	return out
}

// motorCells is what a weekly exam of a spinal dog looks at.
func motorCells() []exam.Key {
	var out []exam.Key
	for _, i := range []exam.Item{exam.VoluntaryMotor, exam.Ataxia, exam.Knuckling, exam.PawPlacement, exam.Hopping, exam.Withdrawal, exam.Tone} {
		for _, s := range exam.Limbs() {
			out = append(out, exam.Key{Item: i, Site: s})
		}
	}
	for _, i := range []exam.Item{exam.Patellar, exam.SuperficialPain} {
		for _, s := range []exam.Site{exam.PelvicLeft, exam.PelvicRight} {
			out = append(out, exam.Key{Item: i, Site: s})
		}
	}
	for _, i := range []exam.Item{exam.Perineal, exam.MassQuadriceps, exam.MassHamstrings} {
		for _, s := range []exam.Site{exam.Left, exam.Right} {
			out = append(out, exam.Key{Item: i, Site: s})
		}
	}
	for _, i := range []exam.Item{exam.Ambulation, exam.TailTone, exam.AnalTone} {
		out = append(out, exam.Key{Item: i, Site: exam.Midline})
	}
	return out
}

var dog = exam.Patient{Name: "Bramble", Species: exam.Dog, Born: "2019", Problems: []exam.Problem{{Diagnosis: "disc extrusion", Onset: "2025-12-20"}}}

func cordAt(from, to string, side localise.Side) func(localise.Site) bool {
	return func(s localise.Site) bool {
		return s.Kind == localise.Cord && s.From.String() == from && s.To.String() == to && s.Side == side
	}
}

// dogYears is one dog over years of weekly visits: recovery, a plateau, a relapse, recovery.
func dogYears(visits int, cells []exam.Key) []exam.Visit {
	r := rand.New(rand.NewPCG(4, 4))
	a := newAnimal(cordAt("T13", "L1", localise.LeftWorse), cells)
	var out []exam.Visit
	s, w := 0.8, 0.0
	for i := range visits {
		switch {
		case i%130 == 90:
			s = math.Min(1, s+0.4)
		case s > 0.2:
			s -= 0.02
		}
		out = append(out, a.draw(r, s, week(w)))
		w += between(r, 0.8, 1.2)
	}
	return out
}
