// Package demo makes the demo practice: invented animals, owners and examiners, with
// courses that a rehabilitation therapist meets. The findings come from a simple animal in
// which damage has a place and a size, read by an examiner who errs as examiners do.
//
// The same seed and the same day give the same records, ids and times included, on every
// machine. Nothing in it describes a real animal or person; telephone numbers are from the
// range that is kept free for fiction (Ofcom).
package demo

import (
	"context"
	"fmt"
	"math/rand/v2"
	"slices"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/alert"
	"cordwalk.example/cordwalk/storage"
)

// Seed is the seed of the demo practice that everybody sees.
const Seed = 20260302

// LastDay is the day on which the demo practice was last open, unless another is given:
// the newest visits lie a few days before it.
var LastDay = time.Date(2026, 11, 27, 0, 0, 0, 0, time.UTC)

// Zone is the demo practice's zone, as a fixed offset, so that its times do not depend on
// the machine's tables.
var zone = time.FixedZone("", 0)

// Case is one animal with all its visits, oldest first.
type Case struct {
	Patient exam.Patient
	Visits  []exam.Visit
	Truth   string // what is wrong, for tests: a region of the cord, or "peripheral"
}

// Practice is the whole demo practice.
type Practice struct {
	Practice exam.Practice
	Cases    []Case
}

// New makes the demo practice as of a day; the zero time is LastDay.
func New(seed uint64, asOf time.Time) Practice {
	if asOf.IsZero() {
		asOf = LastDay
	}
	asOf = time.Date(asOf.Year(), asOf.Month(), asOf.Day(), 0, 0, 0, 0, zone)
	examiners := []exam.Examiner{
		{ID: newID(asOf, seed, 1), Name: "A. Moor", Initials: "AM"},
		{ID: newID(asOf, seed, 2), Name: "T. Lindqvist", Initials: "TL"},
	}
	p := Practice{Practice: exam.Practice{
		Name:       "Ferndale Row Animal Rehabilitation (demo)",
		Contact:    exam.Contact{Name: "Ferndale Row Animal Rehabilitation (demo)", Phone: "01632 960 100", Email: "desk@ferndale-row.example", Address: "12 Ferndale Row, Elmbridge"},
		OutOfHours: exam.Contact{Name: "Elmbridge Night Veterinary Clinic (demo)", Phone: "01632 960 199"},
		Zone:       "UTC", Language: "en", Paper: "A4", Examiners: examiners, Demo: true,
	}}
	for n, c := range courses() {
		p.Cases = append(p.Cases, c.run(n, seed, asOf, examiners))
	}
	return p
}

// newID makes a UUID of version 7 out of a time and numbers, the same everywhere.
func newID(at time.Time, parts ...uint64) exam.ID {
	h := uint64(1469598103934665603) // FNV-1a, 64 bit
	var tail [2]uint64
	for i := range tail {
		h ^= uint64(i) + 0x9e37
		h *= 1099511628211
		for _, p := range parts {
			for k := range 8 {
				h ^= p >> (8 * k) & 255
				h *= 1099511628211
			}
		}
		tail[i] = h
	}
	var id exam.ID
	ms := uint64(at.UnixMilli())
	for k := range 6 {
		id[k] = byte(ms >> (40 - 8*k))
	}
	for k := range 8 {
		id[8+k] = byte(tail[0] >> (8 * k))
	}
	id[6], id[7] = byte(tail[1]), byte(tail[1]>>8)
	id[6] = id[6]&15 | 0x70
	id[8] = id[8]&63 | 0x80
	return id
}

// phase tells how severe each lesion of a course is from a day on; between days it is
// interpolated.
type phase struct {
	day      int
	severity []float64
	pain     float64 // of the painful site, 0 to 3
}

// course is one invented animal.
type course struct {
	patient    exam.Patient
	age        float64 // years at the first visit
	kg         float64
	onset      int // days before the first visit
	surgery    int // days after onset, -1 for none
	last       int // days between the last visit and today
	every      []int
	lesions    []lesion
	phases     []phase // days counted from onset
	painAt     exam.Site
	truth      string
	full       int                        // every n-th visit is a full exam, the others are rechecks
	visit      func(n int, v *exam.Visit) // what else is in a visit
	stop       string                     // set for the one that is discharged
	unanswered bool                       // the red flags of the last visit still wait for an answer
	temper     float64                    // share of tests that the animal does not allow
	thoracic   bool                       // the thoracic limbs are the matter
}

func (c course) state(day int) ([]float64, float64) {
	ps := c.phases
	if day <= ps[0].day {
		return ps[0].severity, ps[0].pain
	}
	for i := 1; i < len(ps); i++ {
		if day > ps[i].day {
			continue
		}
		f := float64(day-ps[i-1].day) / float64(ps[i].day-ps[i-1].day)
		out := make([]float64, len(ps[i].severity))
		for k := range out {
			a, b := ps[i-1].severity[k], ps[i].severity[k]
			out[k] = a + float64(f*(b-a))
		}
		return out, ps[i-1].pain + float64(f*(ps[i].pain-ps[i-1].pain))
	}
	last := ps[len(ps)-1]
	return last.severity, last.pain
}

// run plays the course and examines the animal at each visit.
func (c course) run(n int, seed uint64, asOf time.Time, examiners []exam.Examiner) Case {
	rng := rand.New(rand.NewPCG(seed, uint64(n)+1))
	total := 0
	for _, e := range c.every {
		total += e
	}
	first := asOf.AddDate(0, 0, -c.last-total)
	onset := first.AddDate(0, 0, -c.onset)

	p := c.patient
	p.Demo = true
	p.ID = newID(first, seed, uint64(n), 100)
	p.Born = exam.Date(first.AddDate(0, 0, -int(c.age*365.25)).Format("2006-01"))
	for i := range p.Problems {
		p.Problems[i].ID = newID(first, seed, uint64(n), 200, uint64(i))
		p.Problems[i].Onset = exam.DayOf(onset)
		if c.surgery >= 0 {
			p.Problems[i].Surgery = exam.DayOf(onset.AddDate(0, 0, c.surgery))
		}
	}
	for i := range p.Goals {
		p.Goals[i].ID = newID(first, seed, uint64(n), 300, uint64(i))
		p.Goals[i].By = exam.DayOf(first.AddDate(0, 0, 84))
	}
	for i := range p.Medicines {
		p.Medicines[i].ID = newID(first, seed, uint64(n), 400, uint64(i))
		p.Medicines[i].Start = exam.DayOf(onset.AddDate(0, 0, 1))
		p.Medicines[i].Stop = exam.DayOf(onset.AddDate(0, 0, 22))
	}
	for i := range p.Precautions {
		p.Precautions[i].ID = newID(first, seed, uint64(n), 500, uint64(i))
		p.Precautions[i].Since = exam.DayOf(onset)
	}
	if c.stop != "" {
		p.Status, p.StatusSince = exam.Discharged, exam.DayOf(asOf.AddDate(0, 0, -c.last))
	}
	p.OutOfHours = exam.Contact{Name: "Elmbridge Night Veterinary Clinic (demo)", Phone: "01632 960 199"}
	p.Owner.Address = fmt.Sprintf("%d Quarry Lane, Elmbridge", 3+2*n)

	b := newBody(p.Species)
	out := Case{Truth: c.truth}
	read := reader{rng}
	day := c.onset
	lived := 0
	var before *exam.Visit
	for k := 0; k <= len(c.every); k++ {
		if k > 0 {
			day += c.every[k-1]
		}
		for ; lived < day; lived += 7 {
			s, _ := c.state(lived)
			b.set(c.lesions, s)
			b.settle(7)
		}
		severity, pain := c.state(day)
		b.set(c.lesions, severity)
		clear(b.pain)
		if c.painAt != exam.NoSite {
			b.pain[c.painAt] = pain
		}
		at := onset.AddDate(0, 0, day).Add(time.Duration(9*60+35*(n%7)+rng.IntN(6)*5) * time.Minute)
		who := examiners[0]
		if rng.IntN(4) == 0 {
			who = examiners[1]
		}
		v := exam.Visit{ID: newID(at, seed, uint64(n), 1000+uint64(k)), Patient: p.ID, Examined: at, Zone: "UTC", Examiner: who.Name,
			State: exam.Closed, ClosedAt: at.Add(25 * time.Minute), Surface: "grip", Session: "before"}
		full := k == 0 || k == len(c.every) || c.full > 0 && k%c.full == 0
		v.Protocol = exam.Weekly
		if full {
			v.Protocol = exam.FullSpinal
		}
		if rng.IntN(9) == 0 {
			v.Surface = "slick"
		}
		if b.strength(exam.PelvicLeft)+b.strength(exam.PelvicRight) < 0.7 {
			v.Aid = "sling"
		} else {
			v.Aid = "none"
		}
		b.examine(&v, read, full, before, c)
		c.measure(&v, b, rng, k)
		if c.visit != nil {
			c.visit(k, &v)
		}
		for i := range v.Treatments {
			v.Treatments[i].ID = newID(at, seed, uint64(n), 2000+uint64(k), uint64(i))
		}
		for i := range v.Home {
			v.Home[i].ID = newID(at, seed, uint64(n), 3000+uint64(k), uint64(i))
		}
		if k == len(c.every) && c.stop == "" {
			v.NextVisit = exam.DayOf(at.AddDate(0, 0, 7))
		}
		slices.SortFunc(v.Findings, func(a, b exam.Finding) int { return compare(a.Key(), b.Key()) })
		answer(p, out.Visits, &v, c.unanswered && k == len(c.every))
		out.Visits = append(out.Visits, v)
		before = &out.Visits[len(out.Visits)-1]
	}
	out.Patient = p
	return out
}

// answer says of each red flag of a visit that the treating veterinarian was told. A visit
// whose flags nobody has answered yet stays open where one of them cannot wait.
func answer(p exam.Patient, earlier []exam.Visit, v *exam.Visit, leave bool) {
	for _, f := range alert.Scan(p, append(slices.Clone(earlier), *v), v.Examined) {
		if f.Visit != v.ID || !f.Open() {
			continue
		}
		if leave {
			if f.Urgency == alert.Now {
				v.State, v.ClosedAt, v.NextVisit = exam.Open, time.Time{}, ""
			}
			continue
		}
		v.Answers = append(v.Answers, exam.Acknowledgement{Rule: f.Rule, Told: p.Veterinarian.Name, Note: "told by telephone",
			Examiner: v.Examiner, At: v.Examined.Add(20 * time.Minute)})
	}
}

func compare(a, b exam.Key) int {
	for _, d := range []int{int(a.Item) - int(b.Item), int(a.Site) - int(b.Site), int(a.Digit) - int(b.Digit), int(a.Joint) - int(b.Joint)} {
		if d != 0 {
			return d
		}
	}
	return 0
}

// recheck and fullExam are the items that the demo's examiners walk.
var recheck = []exam.Item{exam.Breathing, exam.Skin, exam.Wound, exam.Ambulation, exam.VoluntaryMotor, exam.Ataxia, exam.PawPlacement,
	exam.Withdrawal, exam.Patellar, exam.SuperficialPain, exam.SpinalPain, exam.VoluntaryUrination, exam.BladderFill}

var fullExam = append(slices.Clone(recheck), exam.Mentation, exam.Behaviour, exam.Appetite, exam.Gums, exam.Knuckling, exam.Lameness, exam.NeckCarriage, exam.Hopping,
	exam.Menace, exam.PupillaryLight, exam.Palpebral, exam.Horner, exam.Tone, exam.Biceps, exam.Triceps, exam.CranialTibial, exam.Gastrocnemius,
	exam.Perineal, exam.CutaneousTrunci, exam.TailTone, exam.TailMovement, exam.AnalTone,
	exam.MassSupraspinatus, exam.MassBiceps, exam.MassTriceps, exam.MassForearmFlexors, exam.MassQuadriceps, exam.MassHamstrings, exam.MassGluteals,
	exam.MassCranialTibial, exam.MassGastrocnemius, exam.LumbosacralExtension, exam.TailLift, exam.UrineLeak, exam.FaecalContinence)

// thoracicItems are added where the thoracic limbs are the matter.
var thoracicItems = []exam.Item{exam.WithdrawalShoulder, exam.WithdrawalElbow, exam.WithdrawalCarpus, exam.ExtensorCarpi, exam.SensationRadial,
	exam.SensationUlnar, exam.SensationMusculocutaneous, exam.SensationAxillary, exam.CutaneousTrunciTwitch, exam.Horner,
	exam.MassSupraspinatus, exam.MassTriceps, exam.MassForearmFlexors, exam.Triceps, exam.Biceps, exam.Tone}

// pelvicItems are added where a pelvic limb is weak.
var pelvicItems = []exam.Item{exam.WithdrawalHip, exam.WithdrawalStifle, exam.WithdrawalHock, exam.WithdrawalDigits, exam.Tone, exam.Stance}

// spineSites are palpated in a recheck.
func spineSites(full bool) []exam.Site {
	if full {
		return exam.SpinalPain.Info().Sites
	}
	return []exam.Site{exam.Cervical, exam.Thoracolumbar, exam.Lumbosacral}
}

// examine fills a visit's findings from the true state.
func (b *body) examine(v *exam.Visit, r reader, full bool, before *exam.Visit, c course) {
	items := slices.Clone(recheck)
	if full {
		items = slices.Clone(fullExam)
	}
	if c.thoracic {
		items = append(items, thoracicItems...)
	} else {
		items = append(items, pelvicItems...)
	}
	plegic := false
	for _, l := range exam.Limbs() {
		plegic = plegic || b.strength(l) < 0.07
	}
	if plegic {
		items = append(items, exam.CutaneousTrunci, exam.Perineal, exam.AnalTone, exam.Tone)
	}
	if before != nil {
		for _, f := range before.Findings {
			if f.Abnormal() && f.Item != exam.DeepPain {
				items = append(items, f.Item)
			}
		}
	}
	slices.Sort(items)
	items = slices.Compact(items)
	done := map[exam.Key]bool{}
	block := 0
	for _, i := range items {
		sites := i.Info().Sites
		switch i {
		case exam.SpinalPain:
			sites = spineSites(full)
		case exam.Skin:
			sites = []exam.Site{exam.PelvicLeft, exam.PelvicRight, exam.Perineum}
		case exam.SuperficialPain:
			sites = exam.Limbs()
			if full {
				sites = append(sites, exam.TailBase, exam.Perineum)
			}
		}
		// Now and then an examiner fills the rest of a sound row in one go.
		fill := !i.Has(exam.NoBulk) && full && i.Info().Group == exam.GroupCranial && r.rng.IntN(3) > 0
		if fill {
			block++
		}
		for _, site := range sites {
			if !c.patientAllows(i, r.rng) {
				v.Findings = append(v.Findings, exam.Finding{Item: i, Site: site, Result: exam.Untested(exam.Temperament)})
				continue
			}
			f := exam.Finding{Item: i, Site: site}
			if i == exam.CutaneousTrunci {
				g, level := b.trunci(site, r)
				f.Result, f.Level = exam.Graded(g), level
			} else {
				x, ok := b.latent(i, site)
				if !ok {
					continue
				}
				f.Result = exam.Graded(r.grade(i, x))
			}
			if fill && f.Normal() {
				f.How, f.Block = exam.RestNormal, fmt.Sprintf("block-%d", block)
			}
			if done[f.Key()] {
				continue
			}
			done[f.Key()] = true
			v.Findings = append(v.Findings, f)
		}
	}
	// Deep pain comes last, and only where it is due.
	for _, site := range []exam.Site{exam.ThoracicLeft, exam.ThoracicRight, exam.PelvicLeft, exam.PelvicRight} {
		g, tested := v.Grade(exam.SuperficialPain, site)
		if !v.Plegic(site) || tested && g > 0 {
			continue
		}
		x, _ := b.latent(exam.DeepPain, site)
		v.Findings = append(v.Findings, exam.Finding{Item: exam.DeepPain, Site: site, Result: exam.Graded(r.grade(exam.DeepPain, x))})
	}
	// What is felt on the surface is felt deeply; what walks bears weight: an examiner would
	// look twice where two findings cannot both hold.
	for k := range v.Findings {
		f := &v.Findings[k]
		if g, ok := f.Result.Grade(); ok && f.Item == exam.Ambulation && g == 2 {
			for _, l := range []exam.Site{exam.PelvicLeft, exam.PelvicRight} {
				if m, ok := v.Grade(exam.VoluntaryMotor, l); ok && m == 0 {
					f.Result = exam.Graded(1)
				}
			}
		}
	}
}

// patientAllows reports whether the animal puts up with a test today.
func (c course) patientAllows(i exam.Item, rng *rand.Rand) bool {
	if c.temper == 0 {
		return true
	}
	switch i.Info().Group {
	case exam.GroupWhole, exam.GroupGait:
		return true
	}
	return rng.Float64() >= c.temper
}

// measure adds what is weighed and measured.
func (c course) measure(v *exam.Visit, b *body, rng *rand.Rand, n int) {
	r := reader{rng}
	round := func(x float64, per float64) float64 { return float64(int64(float64(x*per)+0.5)) / per }
	v.Measures = append(v.Measures,
		exam.Measured{Measure: exam.Weight, Value: round(c.kg+float64(0.01*c.kg*r.bell())+float64(0.004*c.kg*float64(n)), 10)},
		exam.Measured{Measure: exam.Temperature, Value: round(38.5+float64(0.2*r.bell()), 10)})
	if b.species == exam.Dog {
		for _, side := range []exam.Site{exam.Left, exam.Right} {
			m := b.mass[exam.Key{Item: exam.MassQuadriceps, Site: side}]
			base := 8 + float64(0.62*c.kg)
			if base > 36 {
				base = 30 + float64(0.15*c.kg)
			}
			v.Measures = append(v.Measures, exam.Measured{Measure: exam.ThighGirth, Site: side, At: 70, Position: "lying",
				Value: round(base-float64(0.2*base*(1-m))+float64(0.35*r.bell()), 2)})
		}
	}
	if g, ok := v.Grade(exam.Ambulation, exam.Midline); ok && g == 2 && n%2 == 0 {
		v.Measures = append(v.Measures, exam.Measured{Measure: exam.WalkDistance, Value: float64(20 + 10*n + 10*rng.IntN(4))})
	}
}

// Fill writes the practice into a store, which should be new: each animal with its owner,
// then each visit whole, as its examiner closed it. progress is called after each visit; it
// may be nil.
func Fill(ctx context.Context, s *storage.Store, p Practice, progress func(done, total int)) error {
	total, done := 0, 0
	for _, c := range p.Cases {
		total += len(c.Visits)
	}
	who := p.Practice.Examiners[0].Name
	before, err := s.Practice()
	if err != nil {
		return err
	}
	if _, err := s.Apply(ctx, who, storage.PracticeEdits(before, p.Practice)...); err != nil {
		return err
	}
	for _, c := range p.Cases {
		if _, err := s.Apply(ctx, who, storage.PatientEdits(exam.Patient{}, c.Patient)...); err != nil {
			return err
		}
		for _, v := range c.Visits {
			if _, err := s.Apply(ctx, v.Examiner, storage.VisitEdits(exam.Visit{}, v)...); err != nil {
				return err
			}
			if done++; progress != nil {
				progress(done, total)
			}
		}
	}
	return nil
}
