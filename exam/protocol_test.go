package exam

import (
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
)

func fs(i Item, g int8, sites ...Site) (out []Finding) {
	if len(sites) == 0 {
		sites = i.Info().Sites
	}
	for _, s := range sites {
		out = append(out, Finding{Item: i, Site: s, Result: Graded(g)})
	}
	return out
}

func visitWith(parts ...[]Finding) Visit {
	v := Visit{Examined: noon, Examiner: "A"}
	for _, p := range parts {
		v.Findings = append(v.Findings, p...)
	}
	return v
}

func protocolNamed(t *testing.T, key string) Protocol {
	t.Helper()
	p, ok := FindProtocol(Practice{}, key)
	require.True(t, ok)
	return p
}

func TestProtocolsAreWhole(t *testing.T) {
	for _, p := range Protocols() {
		items, _, err := p.Parts()
		require.NoError(t, err)
		require.NotEmpty(t, items)
		seen := map[string]bool{}
		for _, w := range p.Items {
			require.False(t, seen[w], "%s twice in %s", w, p.Key)
			seen[w] = true
		}
	}
	own := Protocol{Key: "mine", Name: "Mine", Items: []string{"patellar", "weight"}}
	require.NoError(t, own.Validate())
	got, ok := FindProtocol(Practice{Protocols: []Protocol{own}}, "mine")
	require.True(t, ok)
	require.Equal(t, own, got)
	_, ok = FindProtocol(Practice{}, "mine")
	require.False(t, ok)
	for _, bad := range []Protocol{{}, {Key: "Mine", Name: "x", Items: own.Items}, {Key: Weekly, Name: "x", Items: own.Items}, {Key: "m", Items: own.Items},
		{Key: "m", Name: "x"}, {Key: "m", Name: "x", Items: []string{"patelar"}}} {
		require.Error(t, bad.Validate())
	}
}

// The weekly recheck as the specification lists it.
func TestWeeklyRecheck(t *testing.T) {
	want := strings.Fields(`ambulation voluntary-motor ataxia paw-placement withdrawal patellar spinal-pain superficial-pain
		voluntary-urination bladder-fill bladder-outflow breathing skin wound temperature weight`)
	p := protocolNamed(t, Weekly)
	require.ElementsMatch(t, want, p.Items)
	a := AgendaFor(p, nil, Visit{Examined: noon})
	require.Empty(t, a.Extra)
	require.ElementsMatch(t, []Measure{Temperature, Weight}, a.Measures)
	for _, i := range plegicAdds {
		require.NotContains(t, a.Items, i)
	}
	plegic := AgendaFor(p, nil, visitWith(fs(VoluntaryMotor, 0, PelvicLeft)))
	for _, name := range strings.Fields("cutaneous-trunci perineal anal-tone tone deep-pain") {
		i, _ := ParseItem(name)
		require.Contains(t, plegic.Items, i)
	}
	last := visitWith(fs(VoluntaryMotor, 0, PelvicLeft))
	require.Contains(t, AgendaFor(p, &last, Visit{Examined: noon}).Items, DeepPain, "plegic last time, not graded yet today")
	require.NotContains(t, AgendaFor(p, &last, visitWith(fs(VoluntaryMotor, 2))).Items, DeepPain, "moves today")
}

func TestAgendaAddsWhatWasAbnormal(t *testing.T) {
	last := visitWith(fs(HeadTilt, 1, Left), fs(Menace, 2), fs(Hopping, 1, PelvicRight),
		[]Finding{{Item: JointPain, Site: PelvicLeft, Joint: Stifle, Result: Graded(2)}, {Item: Withdrawal, Site: PelvicLeft, Digit: Medial, Result: Graded(1)}})
	a := AgendaFor(protocolNamed(t, Weekly), &last, Visit{Examined: noon})
	require.Equal(t, []Key{{Item: HeadTilt, Site: Left}, {Item: Hopping, Site: PelvicRight}, {Item: Withdrawal, Site: PelvicLeft, Digit: Medial}, {Item: JointPain, Site: PelvicLeft, Joint: Stifle}}, a.Extra)
}

// Deep pain is always due in a plegic limb whose superficial pain is absent or untested, and never
// asked in a limb that moves on purpose: every combination.
func TestDeepPainDue(t *testing.T) {
	for _, limb := range limbSites {
		for motor := int8(-1); motor <= 4; motor++ {
			for surface := int8(-1); surface <= 3; surface++ {
				v := Visit{Examined: noon}
				if motor >= 0 {
					v.Findings = append(v.Findings, fs(VoluntaryMotor, motor, limb)...)
				}
				if surface >= 0 {
					v.Findings = append(v.Findings, fs(SuperficialPain, surface, limb)...)
				}
				due := motor == 0 && surface <= 0
				require.Equal(t, due, DeepPainDue(v, limb), "motor %d surface %d", motor, surface)
				for _, p := range Protocols() {
					last := visitWith(fs(DeepPain, 0, limb))
					asked := false
					for _, st := range Walk(Dog, p, Patient{Species: Dog}, &last, v) {
						if st.Key == (Key{Item: DeepPain, Site: limb}) {
							asked = asked || st.Asked
							require.Equal(t, due, st.Due)
						}
					}
					require.Equal(t, due, asked, "%s: motor %d surface %d", p.Key, motor, surface)
				}
			}
		}
	}
	require.False(t, DeepPainDue(visitWith(fs(VoluntaryMotor, 0, ThoracicLeft)), TailBase), "a plegic thoracic limb does not ask the tail")
	require.True(t, DeepPainDue(visitWith(fs(VoluntaryMotor, 0, PelvicLeft)), TailBase))
	require.False(t, DeepPainDue(visitWith(fs(VoluntaryMotor, 0, PelvicLeft)), Perineum))
}

func TestNotAsked(t *testing.T) {
	lost := visitWith(fs(VoluntaryMotor, 0, PelvicLeft, PelvicRight), fs(DeepPain, 0, PelvicLeft, PelvicRight))
	require.Empty(t, NotAsked(lost, Key{Item: ReflexWalking, Site: Midline}))
	one := visitWith(fs(DeepPain, 0, PelvicLeft), fs(DeepPain, 1, PelvicRight))
	require.NotEmpty(t, NotAsked(one, Key{Item: ReflexWalking, Site: Midline}))
	require.NotEmpty(t, NotAsked(Visit{}, Key{Item: ReflexWalking, Site: Midline}))
	implied := visitWith(fs(DeepPain, 0, PelvicLeft), fs(DeepPain, 0, PelvicRight), fs(SuperficialPain, 1, PelvicLeft))
	require.NotEmpty(t, NotAsked(implied, Key{Item: ReflexWalking, Site: Midline}), "the surface is felt, so deep pain is not absent")
	require.NotEmpty(t, NotAsked(Visit{}, Key{Item: NystagmusDirection, Site: Midline}))
	require.Empty(t, NotAsked(visitWith(fs(Nystagmus, 2)), Key{Item: NystagmusDirection, Site: Midline}))
	require.Empty(t, NotAsked(visitWith(fs(VoluntaryMotor, 1, PelvicLeft)), Key{Item: GroundClearance, Site: PelvicLeft}))
	require.NotEmpty(t, NotAsked(visitWith(fs(VoluntaryMotor, 3, PelvicLeft)), Key{Item: GroundClearance, Site: PelvicLeft}))
	require.Empty(t, NotAsked(visitWith(fs(Ataxia, 1, PelvicLeft)), Key{Item: AtaxiaVestibular, Site: Midline}))
	require.NotEmpty(t, NotAsked(Visit{}, Key{Item: AtaxiaVestibular, Site: Midline}))
	require.NotEmpty(t, NotAsked(Visit{}, Key{Item: DeepPain, Site: TailBase}))
	require.NotEmpty(t, NotAsked(Visit{}, Key{Item: DeepPain, Site: PelvicLeft}))
	require.Empty(t, NotAsked(Visit{}, Key{Item: Patellar, Site: PelvicLeft}))
}

// The order of work: hands off, standing, the sides (left limbs first, one limb after the other),
// trunk, spine from the painless end, pain perception last.
func TestWalkOrder(t *testing.T) {
	steps := Walk(Dog, protocolNamed(t, FullSpinal), Patient{Species: Dog}, nil, visitWith(fs(VoluntaryMotor, 0, PelvicLeft, PelvicRight)))
	stage, turned := StageHandsOff, false
	var sides []Site
	for _, st := range steps {
		if st.Measure != NoMeasure {
			continue
		}
		require.GreaterOrEqual(t, st.Stage, stage, st.Key.String())
		stage = st.Stage
		if st.Stage == StageSides {
			if st.Key.Site.Side() == Right {
				turned = true
				require.Equal(t, LyingLeft, st.Position)
			} else {
				require.False(t, turned, "left cells before the right ones: %s", st.Key)
				require.Equal(t, LyingRight, st.Position)
			}
			if len(sides) == 0 || sides[len(sides)-1] != st.Key.Site {
				sides = append(sides, st.Key.Site)
			}
		}
	}
	require.Equal(t, []Site{ThoracicLeft, PelvicLeft, Left, Midline, ThoracicRight, PelvicRight, Right}, compactMidline(sides))
	require.True(t, turned)
	require.Equal(t, DeepPain, steps[len(steps)-1].Key.Item, "deep pain is the last")
	require.Equal(t, StagePain, stage)

	first := func(site Site, item Item) int {
		return slices.IndexFunc(steps, func(s Step) bool { return s.Key.Site == site && s.Key.Item == item })
	}
	require.Less(t, first(PelvicLeft, Tone), first(PelvicLeft, Patellar))
	require.Less(t, first(PelvicLeft, Patellar), first(PelvicLeft, Withdrawal))
	require.Less(t, first(Cervical, SpinalPain), first(Lumbosacral, SpinalPain), "no level known: cranial first")
}

// compactMidline drops repeats that only the mixing of sided and midline cells makes.
func compactMidline(in []Site) (out []Site) {
	for _, s := range in {
		if !slices.Contains(out, s) {
			out = append(out, s)
		}
	}
	return out
}

func TestWalkPalpatesFromThePainlessEnd(t *testing.T) {
	order := func(p Patient, last *Visit) (out []Site) {
		for _, st := range Walk(Dog, protocolNamed(t, Weekly), p, last, Visit{Examined: noon}) {
			if st.Key.Item == SpinalPain {
				out = append(out, st.Key.Site)
			}
		}
		return out
	}
	neck := Patient{Species: Dog, Problems: []Problem{{Diagnosis: "disc", Level: "C3-C4"}}}
	require.Equal(t, Sacrocaudal, order(neck, nil)[0])
	back := Patient{Species: Dog, Problems: []Problem{{Diagnosis: "disc", Level: "L1-L2"}}}
	require.Equal(t, Cervical, order(back, nil)[0])
	last := visitWith(fs(SpinalPain, 2, Cervical))
	require.Equal(t, Sacrocaudal, order(back, &last)[0], "last time's pain counts before the file")
}

func TestWalkOffersAbsentReflexesAgainUndermost(t *testing.T) {
	v := visitWith(fs(Patellar, 0, PelvicLeft), fs(Patellar, 1, PelvicRight), fs(Withdrawal, 0, PelvicLeft))
	var again []Step
	steps := Walk(Dog, protocolNamed(t, Weekly), Patient{Species: Dog}, nil, v)
	for i, st := range steps {
		if st.Again {
			again = append(again, st)
			require.LessOrEqual(t, steps[i-1].Stage, StageSides)
			require.Greater(t, steps[i+1].Stage, StageSides)
		}
	}
	require.Len(t, again, 1, "only a tendon reflex of 0")
	require.Equal(t, Key{Item: Patellar, Site: PelvicLeft}, again[0].Key)
	require.Equal(t, LyingLeft, again[0].Position, "the left limb is undermost then")
	for _, st := range Walk(Cat, protocolNamed(t, Weekly), Patient{Species: Cat}, nil, v) {
		require.False(t, st.Again, "a held cat has no undermost limb")
	}
}

func TestWalkShowsWhatWasEntered(t *testing.T) {
	v := visitWith(fs(HeadTilt, 1, Left))
	found := false
	for _, st := range Walk(Dog, protocolNamed(t, Weekly), Patient{Species: Dog}, nil, v) {
		if st.Key == (Key{Item: HeadTilt, Site: Left}) {
			found = true
			require.True(t, st.Done)
		}
	}
	require.True(t, found)
	last := visitWith(fs(HeadTilt, 1, Left))
	for _, st := range Walk(Dog, protocolNamed(t, Weekly), Patient{Species: Dog}, &last, Visit{Examined: noon}) {
		if st.Key.Item == HeadTilt {
			require.Equal(t, "abnormal last time", st.Why)
			require.True(t, st.Asked)
		}
	}
}

func TestUsualPosition(t *testing.T) {
	require.Equal(t, LyingRight, UsualPosition(Patient{Species: Dog}, noon))
	require.Equal(t, Held, UsualPosition(Patient{Species: Cat}, noon))
	require.Equal(t, Sternal, UsualPosition(Patient{Species: Dog, Precautions: []PrecautionOn{{Code: "breathless"}}}, noon))
	require.Equal(t, Sternal, UsualPosition(Patient{Species: Dog, Problems: []Problem{{Diagnosis: "x", Surgery: "2026-03-08"}}}, noon))
	require.Equal(t, LyingRight, UsualPosition(Patient{Species: Dog, Problems: []Problem{{Diagnosis: "x", Surgery: "2026-02-08"}}}, noon))
	require.Equal(t, LyingRight, UsualPosition(Patient{Species: Cat, Precautions: []PrecautionOn{{Code: "bites"}}}, noon), "a cat that bites is not held in the arms")
}

// Every precaution is in words, bars what it must, is pre-filled not safe and never asked.
func TestPrecautionsBar(t *testing.T) {
	must := map[Precaution]struct {
		keys      []Key
		positions []Position
	}{
		UnstableSpine:    {[]Key{{Item: SpinalPain, Site: Lumbar}, {Item: Hopping, Site: PelvicLeft}, {Item: LumbosacralExtension, Site: Midline}, {Item: Ambulation, Site: Midline}}, []Position{Standing, Held}},
		UnstableNeck:     {[]Key{{Item: SpinalPain, Site: Cervical}, {Item: Wheelbarrow, Site: ThoracicLeft}, {Item: EyeFollow, Site: Left}, {Item: NeckCarriage, Site: Midline}}, []Position{Held}},
		Implant:          {[]Key{{Item: SpinalPain, Site: Lumbar}, {Item: LumbosacralExtension, Site: Midline}}, nil},
		Fracture:         {[]Key{{Item: PawPlacement, Site: PelvicLeft}, {Item: JointPain, Site: PelvicLeft}}, nil},
		NonWeightBearing: {[]Key{{Item: Hopping, Site: PelvicLeft}, {Item: PawPlacement, Site: PelvicLeft}}, nil},
		Breathless:       {[]Key{{Item: Gag, Site: Midline}, {Item: Hopping, Site: ThoracicLeft}}, []Position{LyingLeft, LyingRight, Held}},
		Bites:            {[]Key{{Item: Gag, Site: Midline}, {Item: JawTone, Site: Midline}, {Item: Corneal, Site: Left}}, []Position{Held}},
		RestUntil:        {[]Key{{Item: Hopping, Site: PelvicLeft}}, nil},
		Pregnant:         {[]Key{{Item: BladderFill, Site: Midline}}, nil},
		OpenWound:        {nil, nil},
		Seizures:         {[]Key{{Item: TactilePlacing, Site: PelvicLeft}}, []Position{Held}},
		Pacemaker:        {nil, nil},
		Tumour:           {nil, nil},
	}
	full := Protocol{Key: "all", Name: "All", Items: words(Items()...)}
	for _, code := range Precautions() {
		want, ok := must[code]
		require.True(t, ok, "no expectation for %s", code)
		on := PrecautionOn{Code: code.String(), Until: "2026-03-09", Note: "cage"}
		b := Bars([]PrecautionOn{on}, "2026-03-09")
		require.NotEmpty(t, on.Words())
		require.Equal(t, []string{on.Words()}, b.Words())
		for _, k := range want.keys {
			require.Contains(t, b.Why(k), on.Words(), "%s bars %s", code, k)
		}
		for _, p := range want.positions {
			require.NotEmpty(t, b.WhyPosition(p), "%s bars %s", code, p)
		}
		require.Empty(t, b.Why(Key{Item: Mentation, Site: Midline}))
		require.Empty(t, b.WhyPosition(HandsOff))
		require.Empty(t, Bars([]PrecautionOn{on}, "2026-03-10").Words(), "over")
		// In the walk: there, not asked, pre-filled not safe.
		p := Patient{Species: Dog, Precautions: []PrecautionOn{on}}
		for _, st := range Walk(Dog, full, p, nil, Visit{Examined: noon}) {
			barred := st.Measure == NoMeasure && b.Why(st.Key) != ""
			require.Equal(t, barred, st.Barred)
			f, pre := st.Prefill()
			require.Equal(t, barred, pre)
			if barred {
				require.False(t, st.Asked)
				require.Equal(t, NotSafe, f.Result.Reason())
				require.Contains(t, f.Note, on.Words())
				require.NoError(t, f.Validate(Dog))
			}
			if st.Position != usualOrLying(st, p) {
				require.Empty(t, b.WhyPosition(st.Position), "%s at %s", code, st.Position)
			}
		}
	}
	require.Equal(t, "rest-forever", PrecautionOn{Code: "rest-forever"}.Words())
	_, in := Bars([]PrecautionOn{{Code: "bites"}}, "2026-03-09").In(Bites)
	require.True(t, in)
	require.Empty(t, BarList{}.Why(Key{Item: Gag, Site: Midline}))
	require.Empty(t, Bars([]PrecautionOn{{Code: "nonsense"}}, "2026-03-09").Words())
}

func usualOrLying(st Step, p Patient) Position {
	if st.Position == LyingLeft {
		return LyingLeft
	}
	return UsualPosition(p, noon)
}

func TestPrecautionsAtASite(t *testing.T) {
	b := Bars([]PrecautionOn{{Code: "non-weight-bearing", Site: "pelvic-left"}, {Code: "implant", Site: "thoracolumbar"}, {Code: "open-wound", Site: "lumbar"}, {Code: "fracture", Site: "thoracic-right"}}, "2026-03-09")
	require.NotEmpty(t, b.Why(Key{Item: Hopping, Site: PelvicLeft}))
	require.Empty(t, b.Why(Key{Item: PawPlacement, Site: PelvicRight}))
	require.NotEmpty(t, b.Why(Key{Item: SpinalPain, Site: Thoracolumbar}))
	require.NotEmpty(t, b.Why(Key{Item: SpinalPain, Site: Lumbar}), "not pressed on at the wound")
	require.Empty(t, b.Why(Key{Item: SpinalPain, Site: Cervical}))
	require.Empty(t, b.Why(Key{Item: LumbosacralExtension, Site: Midline}), "the implant is elsewhere")
	require.NotEmpty(t, b.WhyMeasure(WeightBearing, PelvicLeft))
	require.Empty(t, b.WhyMeasure(WeightBearing, PelvicRight))
	require.NotEmpty(t, b.WhyMeasure(RangeOfMotion, Right))
	require.Empty(t, b.WhyMeasure(RangeOfMotion, Left))
	require.NotEmpty(t, b.WhyMeasure(WalkDistance, NoSite))
	require.Empty(t, b.WhyMeasure(Temperature, NoSite))
}

// A broken limb is not lain upon: its other side is tested on the chest.
func TestFractureBarsItsSide(t *testing.T) {
	for _, tt := range []struct {
		site        string
		left, right Position
	}{{"pelvic-left", LyingRight, Sternal}, {"thoracic-right", Sternal, Sternal}, {"lumbar", LyingRight, LyingLeft}} {
		p := Patient{Species: Dog, Precautions: []PrecautionOn{{Code: "fracture", Site: tt.site}}}
		for _, st := range Walk(Dog, protocolNamed(t, FullSpinal), p, nil, Visit{Examined: noon}) {
			if st.Key.Item == Patellar {
				want := tt.left
				if st.Key.Site.Side() == Right {
					want = tt.right
				}
				require.Equal(t, want, st.Position, "%s, %s", tt.site, st.Key)
			}
		}
	}
}

func TestPositionsAndStages(t *testing.T) {
	for p := HandsOff; p <= Held; p++ {
		require.NotEqual(t, "unknown", p.String())
		for q := HandsOff; q <= Held; q++ {
			require.Equal(t, p == q, TurnSeconds(p, q) == 0)
		}
	}
	require.Equal(t, "unknown", Position(99).String())
	for s := StageHandsOff; s <= StagePain; s++ {
		require.NotEmpty(t, s.String())
	}
}

// A walk never panics and keeps each cell once, whatever the exam holds.
func TestWalkOfEveryItem(t *testing.T) {
	full := Protocol{Key: "all", Name: "All", Items: append(words(Items()...), "weight", "thigh-girth", "no such thing")}
	for _, s := range AllSpecies() {
		v := Visit{Examined: time.Time{}}
		for _, i := range Items() {
			v.Findings = append(v.Findings, fs(i, i.Info().First)...)
		}
		seen := map[Key]int{}
		for _, st := range Walk(s, full, Patient{Species: s}, &v, v) {
			if st.Measure == NoMeasure && !st.Again {
				seen[st.Key]++
				require.Equal(t, 1, seen[st.Key], st.Key.String())
			}
		}
		n := 0
		for _, i := range Items() {
			n += len(i.Info().Sites)
		}
		require.Len(t, seen, n)
	}
}
