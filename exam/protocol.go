package exam

import (
	"cmp"
	"slices"
	"time"
)

// Keys of the protocols that come with the program.
const (
	FullSpinal   = "full-spinal"
	Weekly       = "weekly"
	ThoracicLimb = "thoracic-limb"
)

// Protocols lists the built-in protocols. What a protocol adds by rule (plegic animals, what was
// abnormal last time, deep pain that is due) is not in Items; see Agenda.
func Protocols() []Protocol {
	return []Protocol{
		{Key: FullSpinal, Name: "Full spinal exam", Items: words(
			Mentation, Behaviour, Breathing, Gums, Wound, Skin, MuscleCondition,
			Ambulation, VoluntaryMotor, Ataxia, Knuckling, Lameness, Stance, NeckCarriage, HeadTilt, SchiffSherrington,
			PawPlacement, Hopping, Menace, PupillaryLight, Palpebral, FacialSensation, PupilSize, Horner,
			Tone, Biceps, Triceps, ExtensorCarpi, Patellar, Gastrocnemius, Withdrawal, WithdrawalHock, CrossedExtensor, Perineal, TailTone, TailMovement, AnalTone,
			CutaneousTrunci, MassSupraspinatus, MassTriceps, MassQuadriceps, MassHamstrings, MassCranialTibial, MassGastrocnemius,
			SpinalPain, LumbosacralExtension, TailLift, SuperficialPain, VoluntaryUrination, BladderFill, BladderOutflow, FaecalContinence)},
		{Key: Weekly, Name: "Weekly recheck", Items: append(words(
			Ambulation, VoluntaryMotor, Ataxia, PawPlacement, Withdrawal, Patellar, SpinalPain, SuperficialPain,
			VoluntaryUrination, BladderFill, BladderOutflow, Breathing, Skin, Wound), Temperature.String(), Weight.String())},
		{Key: ThoracicLimb, Name: "Thoracic limb", Items: words(
			Mentation, Breathing, Skin, VoluntaryMotor, Lameness, Knuckling, Stance, NeckCarriage, RootSignature, SelfTrauma,
			PawPlacement, Hopping, Horner, Tone, Biceps, Triceps, ExtensorCarpi,
			Withdrawal, WithdrawalShoulder, WithdrawalElbow, WithdrawalCarpus, CutaneousTrunci, CutaneousTrunciTwitch,
			MassSupraspinatus, MassInfraspinatus, MassBiceps, MassTriceps, MassExtensorCarpi, MassForearmFlexors,
			SensationRadial, SensationUlnar, SensationMusculocutaneous, SensationAxillary, SuperficialPain, SpinalPain, LimbPain, Patellar)},
	}
}

func words(items ...Item) []string {
	out := make([]string, len(items))
	for k, i := range items {
		out[k] = i.String()
	}
	return out
}

// FindProtocol returns the practice's own protocol of that key, else the built-in one, and
// false where there is neither.
func FindProtocol(pr Practice, key string) (Protocol, bool) {
	for _, list := range [][]Protocol{pr.Protocols, Protocols()} {
		for _, p := range list {
			if p.Key == key {
				return p, true
			}
		}
	}
	return Protocol{}, false
}

// Parts returns the protocol's items and measures in its order. The error names the word
// that is neither.
func (p Protocol) Parts() (items []Item, measures []Measure, err error) {
	for _, word := range p.Items {
		if m, err := ParseMeasure(word); err == nil {
			measures = append(measures, m)
			continue
		}
		i, err := ParseItem(word)
		if err != nil {
			in := err.(*Invalid)
			return nil, nil, &Invalid{"protocol " + p.Key, word, in.Allowed}
		}
		items = append(items, i)
	}
	return items, measures, nil
}

// Validate checks a protocol that a practice made: a key of lower-case letters, digits and
// hyphens that no built-in protocol has, a name, and at least one known item.
func (p Protocol) Validate() error {
	for _, c := range p.Key {
		if (c < 'a' || c > 'z') && (c < '0' || c > '9') && c != '-' {
			return &Invalid{"protocol key", short(p.Key), "lower-case letters, digits and hyphens"}
		}
	}
	if p.Key == "" || len(p.Key) > 40 {
		return &Invalid{"protocol key", short(p.Key), "1 to 40 letters"}
	}
	for _, b := range Protocols() {
		if b.Key == p.Key {
			return &Invalid{"protocol key", p.Key, "a key that no built-in protocol has"}
		}
	}
	if p.Name == "" || len(p.Name) > 100 {
		return &Invalid{"protocol name", short(p.Name), "1 to 100 letters"}
	}
	items, measures, err := p.Parts()
	if err == nil && len(items)+len(measures) == 0 {
		return &Invalid{"protocol " + p.Key, "", "at least one item or measure"}
	}
	return err
}

// plegicAdds are the items that a recheck of a plegic animal adds.
var plegicAdds = []Item{CutaneousTrunci, Perineal, AnalTone, Tone, DeepPain}

// Agenda is what a protocol asks of an animal today.
type Agenda struct {
	Items    []Item    // asked at all of their sites
	Measures []Measure // asked at all of their sites
	Extra    []Key     // cells asked beside them: abnormal last time, or due by rule
}

// AgendaFor returns what a protocol asks: its items; in an animal with a limb that has no movement
// (today, or last time where today's is not graded) the weekly recheck's additions; every cell that was
// abnormal last time; and deep pain where it is due. Words of the protocol that are
// no item are left out; Protocol.Validate finds them.
func AgendaFor(p Protocol, last *Visit, today Visit) Agenda {
	var a Agenda
	for _, word := range p.Items {
		if m, err := ParseMeasure(word); err == nil {
			a.Measures = append(a.Measures, m)
		} else if i, err := ParseItem(word); err == nil && !slices.Contains(a.Items, i) {
			a.Items = append(a.Items, i)
		}
	}
	plegic := false
	for _, l := range limbSites {
		if g, ok := today.Grade(VoluntaryMotor, l); ok {
			plegic = plegic || g == 0
		} else if last != nil && last.Plegic(l) {
			plegic = true
		}
	}
	if p.Key == Weekly && plegic {
		for _, i := range plegicAdds {
			if !slices.Contains(a.Items, i) {
				a.Items = append(a.Items, i)
			}
		}
	}
	extra := func(k Key) {
		if slices.Contains(a.Items, k.Item) && k.Digit == AnyDigit && k.Joint == NoJoint {
			return
		}
		if !slices.Contains(a.Extra, k) {
			a.Extra = append(a.Extra, k)
		}
	}
	if last != nil {
		for _, f := range last.Findings {
			if f.Abnormal() {
				extra(f.Key())
			}
		}
	}
	if plegic {
		for _, site := range painSites {
			if DeepPainDue(today, site) {
				extra(Key{Item: DeepPain, Site: site})
			}
		}
	}
	slices.SortStableFunc(a.Items, func(x, y Item) int { return cmp.Compare(x, y) })
	slices.SortStableFunc(a.Extra, compareKeys)
	return a
}

func compareKeys(a, b Key) int {
	return cmp.Or(cmp.Compare(a.Item, b.Item), cmp.Compare(a.Site, b.Site), cmp.Compare(a.Digit, b.Digit), cmp.Compare(a.Joint, b.Joint))
}

// DeepPainDue reports whether deep pain must be tested at a site: the limb has no movement on
// purpose, and its surface is not felt or not tested. At tail and perineum it is due while a
// pelvic limb has no movement. It is never due in a limb that moves on purpose.
func DeepPainDue(v Visit, site Site) bool {
	switch {
	case site.IsLimb():
		if !v.Plegic(site) {
			return false
		}
	case site == TailBase:
		if !v.Plegic(PelvicLeft) && !v.Plegic(PelvicRight) {
			return false
		}
	default:
		return false
	}
	g, ok := v.Grade(SuperficialPain, site)
	return !ok || g == 0
}

// NotAsked returns why a cell is left out of the walk, given what today's exam already says, or ""
// where it is asked. It knows nothing of precautions.
func NotAsked(v Visit, k Key) string {
	switch k.Item {
	case DeepPain:
		if k.Site.IsLimb() {
			if g, ok := v.Grade(VoluntaryMotor, k.Site); ok && g > 0 {
				return "the limb moves on purpose"
			} else if !ok {
				return "grade the limb's movement first"
			}
		} else if !v.Plegic(PelvicLeft) && !v.Plegic(PelvicRight) {
			return "asked only where a pelvic limb has no movement"
		}
		if g, ok := v.Grade(SuperficialPain, k.Site); ok && g > 0 {
			return "implied: the surface is felt"
		}
	case ReflexWalking:
		for _, l := range pelvicSites {
			if f := Feeling(v, l); !f.Known || f.Grade > 0 {
				return "asked only while deep pain is absent"
			}
		}
	case NystagmusDirection, NystagmusFastPhase:
		if g, ok := v.Grade(Nystagmus, Midline); !ok || g == 0 {
			return "asked only where there is nystagmus"
		}
	case GroundClearance:
		if g, ok := v.Grade(VoluntaryMotor, k.Site); !ok || g != 1 {
			return "asked only of a limb that swings and bears no weight"
		}
	case AtaxiaProprioceptive, AtaxiaVestibular, AtaxiaCerebellar:
		for _, l := range limbSites {
			if g, ok := v.Grade(Ataxia, l); ok && g > 0 {
				return ""
			}
		}
		return "asked only where there is ataxia"
	}
	return ""
}

// Felt is what is known of deep feeling at a place.
type Felt struct {
	Known   bool
	Grade   int8 // of deep-pain: 0 absent, 1 reduced, 2 normal
	Implied bool // not tested itself: the surface is felt, so the depth is
}

// Feeling returns the deep feeling at a place: the best of the deep-pain grades there (one answer at
// one digit is an answer), or what superficial pain implies: felt on the surface is felt deeply.
func Feeling(v Visit, site Site) Felt {
	var out Felt
	surface := int8(0)
	for _, f := range v.Findings {
		g, ok := f.Result.Grade()
		if !ok || f.Site != site {
			continue
		}
		switch f.Item {
		case DeepPain:
			if !out.Known || g > out.Grade {
				out.Known, out.Grade = true, g
			}
		case SuperficialPain:
			surface = max(surface, g)
		}
	}
	if surface >= 1 && (!out.Known || out.Grade == 0) {
		if out.Known { // the two contradict: what was felt on the surface stands
			return Felt{Known: true, Grade: 1, Implied: true}
		}
		return Felt{Known: true, Grade: min(surface, 2), Implied: true}
	}
	return out
}

// BulkFills reports whether the keys that fill many cells at once may fill the item.
func BulkFills(i Item) bool { return i != NoItem && i < itemCount && !i.Has(NoBulk) }

// Stage of the walk.
type Stage uint8

// The stages, in the order of the walk.
const (
	StageHandsOff Stage = iota
	StageStanding
	StageSides // on each side: tone, tendon reflexes, perineal, withdrawal
	StageTrunk // cutaneous trunci
	StageSpine // palpation, from the painless end
	StagePain  // pain perception, last
)

// String returns the stage's heading.
func (s Stage) String() string {
	return [...]string{"Hands off", "Standing", "On each side", "Trunk", "Spine, from the painless end", "Pain perception, last"}[s%6]
}

// StageOf returns the stage of the walk in which an item is tested.
func StageOf(i Item) Stage {
	switch i {
	case Wound, Skin, Gums, MuscleCondition, TailMovement:
		return StageStanding
	case PhantomScratching, SelfTrauma, Fatigue:
		return StageHandsOff
	case CutaneousTrunci, CutaneousTrunciTwitch:
		return StageTrunk
	case SpinalPain, LumbosacralExtension, TailLift:
		return StageSpine
	case JointSwelling, StifleInstability, FemoralPulse, PawWarmth, TailTone, AnalTone:
		return StageSides
	case JointPain, LimbPain:
		return StagePain
	}
	switch i.Info().Group {
	case GroupWhole, GroupGait:
		return StageHandsOff
	case GroupPostural, GroupCranial, GroupMass, GroupBladder:
		return StageStanding
	case GroupReflex:
		return StageSides
	}
	return StagePain
}

// walkRank orders the items of one stage where the vocabulary's order is not the order of work.
func walkRank(i Item) int {
	switch i {
	case Tone:
		return -20
	case Perineal:
		return 300
	case TailTone, AnalTone:
		return 310
	case Withdrawal, WithdrawalShoulder, WithdrawalElbow, WithdrawalCarpus, WithdrawalHip, WithdrawalStifle,
		WithdrawalHock, WithdrawalDigits, CrossedExtensor:
		return 400 + int(i)
	case JointPain, LimbPain:
		return 800 + int(i)
	case DeepPain:
		return 900
	}
	return int(i)
}

// CompareWalk orders items as they are walked.
func CompareWalk(a, b Item) int {
	return cmp.Or(cmp.Compare(StageOf(a), StageOf(b)), cmp.Compare(walkRank(a), walkRank(b)))
}

// TendonReflex reports whether the item is a reflex that may be missing in the uppermost limb
// and present in the undermost one (neuropetvet).
func TendonReflex(i Item) bool {
	switch i {
	case Biceps, Triceps, ExtensorCarpi, Patellar, CranialTibial, Gastrocnemius:
		return true
	}
	return false
}

// Step is one stop of the walk: a cell or a measure, where the animal is, and why it is or is not asked.
type Step struct {
	Key      Key
	Measure  Measure // set instead of Key.Item for a measured value, at Key.Site
	Stage    Stage
	Position Position
	Asked    bool   // the walk stops here
	Why      string // why it is not asked, why it is barred, or why it is due
	Barred   bool   // a precaution bars it: pre-filled «not safe», asked only by override
	Due      bool   // deep pain that must be tested today
	Again    bool   // a reflex that was 0 uppermost, offered again undermost
	Done     bool   // today's exam holds a grade or a reason
}

// UsualPosition returns how the tests on each side are done: lying on one side, then the other
// (LyingRight); on the chest where breath is short or surgery is less than 3 days old; held
// for a cat; whatever no precaution bars (common practice).
func UsualPosition(p Patient, at time.Time) Position {
	bars := Bars(p.Precautions, DayOf(at))
	want := LyingRight
	if p.Species == Cat {
		want = Held
	}
	for _, pr := range p.Problems {
		if d, ok := pr.Surgery.DaysBefore(at); ok && d >= -0.5 && d < 3 {
			want = Sternal
		}
	}
	if _, ok := bars.In(Breathless); ok {
		want = Sternal
	}
	for _, pos := range []Position{want, LyingRight, Sternal, Held} {
		if bars.WhyPosition(pos) == "" {
			return pos
		}
	}
	return want
}

// Walk lays out today's exam in the order of work: hands off; standing; on each side (left cells
// while the animal lies on its right, then the right ones; one limb is finished before the next); trunk;
// spine from the painless end; pain perception last. Barred cells are there, pre-filled «not
// safe». Cells whose question today's findings have answered are there too, not asked.
func Walk(s Species, protocol Protocol, p Patient, last *Visit, today Visit) []Step {
	agenda := AgendaFor(protocol, last, today)
	bars := Bars(p.Precautions, DayOf(today.Examined))
	usual := UsualPosition(p, today.Examined)
	var steps []Step
	for _, m := range agenda.Measures {
		sites := m.Info().Sites
		if len(sites) == 0 {
			sites = []Site{NoSite}
		}
		for _, site := range sites {
			st := Step{Key: Key{Site: site}, Measure: m, Stage: StageHandsOff, Position: HandsOff}
			_, st.Done = today.Measured(m, site)
			if why := bars.WhyMeasure(m, site); why != "" {
				st.Barred, st.Why = true, why
			}
			st.Asked = !st.Barred
			steps = append(steps, st)
		}
	}
	keys := slices.Clone(agenda.Extra)
	for _, i := range agenda.Items {
		for _, site := range i.Info().Sites {
			keys = append(keys, Key{Item: i, Site: site})
		}
	}
	for _, f := range today.Findings { // what somebody entered beside the protocol is shown too
		if k := f.Key(); !slices.Contains(keys, k) {
			keys = append(keys, k)
		}
	}
	painless := painlessOrder(p, last)
	slices.SortStableFunc(keys, func(a, b Key) int {
		if StageOf(a.Item) == StageSides && StageOf(b.Item) == StageSides {
			return cmp.Or(cmp.Compare(sideTurn(a.Site, usual), sideTurn(b.Site, usual)),
				cmp.Compare(girdleTurn(a.Site), girdleTurn(b.Site)), CompareWalk(a.Item, b.Item), compareKeys(a, b))
		}
		c := CompareWalk(a.Item, b.Item)
		if c == 0 && a.Item == SpinalPain {
			c = painless(a.Site, b.Site)
		}
		return cmp.Or(c, compareKeys(a, b))
	})
	var again []Step
	for _, k := range keys {
		st := Step{Key: k, Stage: StageOf(k.Item), Asked: true}
		f, done := today.Find(k)
		st.Done = done
		switch st.Stage {
		case StageHandsOff:
			st.Position = HandsOff
		case StageStanding:
			st.Position = Standing
		case StageSides:
			st.Position = usual
			if (usual == LyingRight || usual == LyingLeft) && k.Site.Side() == Right {
				st.Position = LyingLeft
				if bars.WhyPosition(LyingLeft) != "" {
					st.Position = Sternal
				}
			}
		default:
			st.Position = Sternal
		}
		if st.Position == Standing && bars.WhyPosition(Standing) != "" {
			st.Position = usual // looked at lying down
		}
		if st.Position == Sternal && bars.WhyPosition(Sternal) != "" {
			st.Position = usual
		}
		switch {
		case bars.Why(k) != "":
			st.Barred, st.Asked, st.Why = true, false, bars.Why(k)
		case NotAsked(today, k) != "":
			st.Asked, st.Why = false, NotAsked(today, k)
		case k.Item == DeepPain && DeepPainDue(today, k.Site):
			st.Due, st.Why = true, "due: no movement, and the surface is not felt or not tested"
		case last != nil && !slices.Contains(agenda.Items, k.Item):
			if was, ok := last.Find(k); ok && was.Abnormal() {
				st.Why = "abnormal last time"
			}
		}
		steps = append(steps, st)
		if g, ok := f.Result.Grade(); ok && g == 0 && TendonReflex(k.Item) && !st.Barred &&
			(st.Position == LyingRight || st.Position == LyingLeft) {
			st.Again, st.Why = true, "absent uppermost: try it undermost"
			st.Position = LyingRight + LyingLeft - st.Position
			again = append(again, st)
		}
	}
	// The second tries stand at the end of the sides, the undermost left limbs first: the animal lies on its left then.
	if len(again) > 0 {
		slices.SortStableFunc(again, func(a, b Step) int { return cmp.Compare(b.Position, a.Position) })
		at := len(steps)
		for i, st := range steps {
			if st.Measure == NoMeasure && st.Stage > StageSides {
				at = i
				break
			}
		}
		steps = slices.Insert(steps, at, again...)
	}
	return steps
}

// sideTurn is 0 for cells visited while the animal lies on its right, 1 for those on its left.
func sideTurn(s Site, usual Position) int {
	if usual != LyingRight && usual != LyingLeft {
		return 0
	}
	if s.Side() == Right {
		return 1
	}
	return 0
}

func girdleTurn(s Site) int {
	switch {
	case s.IsThoracic():
		return 0
	case s.IsPelvic():
		return 1
	}
	return 2
}

// painlessOrder orders spinal sites from the end where pain is least likely: where the worst pain last
// time, or the file's level, lies in the cranial half, palpation begins caudally.
func painlessOrder(p Patient, last *Visit) func(a, b Site) int {
	caudalFirst := false
	for _, pr := range p.Problems {
		if v, _, err := ParseLevelRange(pr.Level, p.Species); err == nil && pr.Resolved == "" {
			caudalFirst = v.Region() == RegionC
		}
	}
	if last != nil {
		worst := int8(0)
		for _, f := range last.Findings {
			if g, ok := f.Result.Grade(); ok && f.Item == SpinalPain && g > worst {
				worst, caudalFirst = g, f.Site <= MidThoracic
			}
		}
	}
	return func(a, b Site) int {
		if caudalFirst {
			return cmp.Compare(b, a)
		}
		return cmp.Compare(a, b)
	}
}

// Prefill returns the finding that stands in a barred cell until somebody overrides it with a
// reason: not tested, not safe, with the precaution as its note.
func (st Step) Prefill() (Finding, bool) {
	if !st.Barred || st.Measure != NoMeasure {
		return Finding{}, false
	}
	return Finding{Item: st.Key.Item, Site: st.Key.Site, Digit: st.Key.Digit, Joint: st.Key.Joint, Result: Untested(NotSafe), Note: st.Why}, true
}
