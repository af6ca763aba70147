package exam

import (
	"slices"
	"testing"

	"github.com/stretchr/testify/require"
)

// scenes make exactly one condition hold, for a treatment of the left pelvic limb.
var scenes = map[Condition]func(p *Patient, v *Visit){
	OpenSkin:         func(_ *Patient, v *Visit) { v.Findings = fs(Skin, 0, PelvicLeft) },
	WoundNotHealed:   func(p *Patient, _ *Visit) { p.Problems = []Problem{{Diagnosis: "disc", Surgery: "2026-03-01"}} },
	BowelLeak:        func(_ *Patient, v *Visit) { v.Findings = fs(FaecalContinence, 0) },
	FoulUrine:        func(_ *Patient, v *Visit) { v.Findings = fs(UrineLook, 1) },
	UrineLeaks:       func(_ *Patient, v *Visit) { v.Findings = fs(UrineLeak, 2) },
	NumbSkin:         func(_ *Patient, v *Visit) { v.Findings = fs(SensationFibular, 1, Left) },
	ShortOfBreath:    func(_ *Patient, v *Visit) { v.Findings = fs(Breathing, 1) },
	Chokes:           func(_ *Patient, v *Visit) { v.Findings = fs(Gag, 1) },
	Fever:            func(_ *Patient, v *Visit) { v.Measures = []Measured{{Measure: Temperature, Value: 39.5}} },
	NoPulse:          func(_ *Patient, v *Visit) { v.Findings = fs(FemoralPulse, 0, Left) },
	SeverePain:       func(_ *Patient, v *Visit) { v.Findings = fs(SpinalPain, 3, Lumbar) },
	Dull:             func(_ *Patient, v *Visit) { v.Findings = fs(Mentation, 2) },
	FitsKnown:        func(_ *Patient, v *Visit) { v.Findings = fs(SeizureSinceLast, 1) },
	HasPacemaker:     withPrecaution("pacemaker"),
	HasTumour:        withPrecaution("tumour"),
	IsPregnant:       withPrecaution("pregnant"),
	SpineUnstable:    withPrecaution("unstable-spine"),
	NeckUnstable:     withPrecaution("unstable-neck"),
	HasFracture:      withPrecaution("fracture"),
	NoWeightAllowed:  withPrecaution("non-weight-bearing"),
	MustRest:         withPrecaution("rest-until"),
	HasImplant:       withPrecaution("implant"),
	CannotStandAlone: func(_ *Patient, v *Visit) { v.Findings = fs(Ambulation, 1) },
	WeakNeckOrTrunk:  func(_ *Patient, v *Visit) { v.Findings = fs(NeckCarriage, 0) },
	SkinIrritated:    func(_ *Patient, v *Visit) { v.Findings = fs(Skin, 1, PelvicLeft) },
	Growing:          func(p *Patient, _ *Visit) { p.Born = "2025-09" },
	MayBite:          withPrecaution("bites"),
	TenseBladder:     func(_ *Patient, v *Visit) { v.Findings = fs(BladderFill, 0) },
}

func withPrecaution(code string) func(*Patient, *Visit) {
	return func(p *Patient, _ *Visit) { p.Precautions = []PrecautionOn{{Code: code}} }
}

func checkPair(t *testing.T, got []Objection, c Condition, stop, ask bool, name string) {
	t.Helper()
	if !stop && !ask {
		require.Empty(t, got, "%s with %s", name, c)
		return
	}
	require.Len(t, got, 1, "%s with %s", name, c)
	require.Equal(t, c, got[0].Condition)
	require.Equal(t, stop, got[0].Stop, "%s with %s", name, c)
	require.Contains(t, got[0].Why, c.String())
	require.Greater(t, len(got[0].Why), len(c.String())+5, "says what was seen: %s", got[0].Why)
	require.NotEmpty(t, got[0].Source)
}

// Every pair of a treatment and a condition: named when it speaks against it, silent when not.
func TestEveryTreatmentAgainstEveryCondition(t *testing.T) {
	require.Len(t, scenes, int(conditionCount)-1, "a scene for every condition")
	for _, k := range TreatmentKinds() {
		require.NotEmpty(t, k.Source)
		require.NotEmpty(t, k.Name)
		got, ok := TreatmentByKey(k.Key)
		require.True(t, ok)
		require.Equal(t, k.Name, got.Name)
		require.Empty(t, CheckTreatment(Patient{Species: Dog}, Treatment{Kind: k.Key, Site: "pelvic-left"}, Visit{Examined: noon}), "nothing on record")
		for c, scene := range scenes {
			p, v := Patient{Species: Dog}, Visit{Examined: noon}
			scene(&p, &v)
			stop := slices.Contains(k.Stop, c)
			checkPair(t, CheckTreatment(p, Treatment{Kind: k.Key, Site: "pelvic-left"}, v), c, stop, slices.Contains(k.Ask, c), k.Key)
			require.False(t, stop && slices.Contains(k.Ask, c), "%s: %s stands in both lists", k.Key, c)
		}
	}
}

func TestEveryExerciseAgainstEveryCondition(t *testing.T) {
	for _, k := range ExerciseKinds() {
		require.NotEmpty(t, k.How)
		require.NotEmpty(t, k.Amount)
		require.NotEmpty(t, k.Stop)
		require.NotEmpty(t, k.Source)
		_, ok := ExerciseByKey(k.Key)
		require.True(t, ok)
		for c, scene := range scenes {
			p, v := Patient{Species: Dog}, Visit{Examined: noon}
			scene(&p, &v)
			checkPair(t, CheckExercise(p, HomeExercise{Kind: k.Key}, v), c, slices.Contains(k.Never, c), slices.Contains(k.Ask, c), k.Key)
		}
	}
}

// What must never be missing, said apart from the table.
func TestTreatmentsThatMustStop(t *testing.T) {
	water := []string{"underwater-treadmill", "swimming"}
	current := []string{"nmes", "tens", "electroacupuncture"}
	for _, tt := range []struct {
		kinds []string
		cs    []Condition
		stop  bool
	}{
		{water, []Condition{OpenSkin, BowelLeak, WoundNotHealed, Fever, ShortOfBreath, Chokes}, true},
		{[]string{"heat", "cold", "ultrasound", "shockwave"}, []Condition{NumbSkin}, true},
		{current, []Condition{HasPacemaker, FitsKnown, HasTumour, IsPregnant}, true}, // CSMR-NMES, NMES-summary
		{[]string{"nmes", "tens"}, []Condition{NumbSkin, SkinIrritated}, false},      // cautions: CSMR-NMES
		{[]string{"ultrasound", "laser", "shockwave", "heat"}, []Condition{HasTumour}, true},
		{[]string{"treadmill", "gait-training", "balance", "poles", "steps-and-slopes"}, []Condition{SpineUnstable, HasFracture, NoWeightAllowed, MustRest}, true},
		{[]string{"bladder-expression"}, []Condition{TenseBladder}, true},
	} {
		for _, key := range tt.kinds {
			for _, c := range tt.cs {
				p, v := Patient{Species: Dog}, Visit{Examined: noon}
				scenes[c](&p, &v)
				got := CheckTreatment(p, Treatment{Kind: key, Site: "pelvic-left"}, v)
				require.NotEmpty(t, got, "%s with %s", key, c)
				require.Equal(t, tt.stop, got[0].Stop, "%s with %s", key, c)
			}
		}
	}
}

func TestTreatmentChecksLookBackAndAtTheSite(t *testing.T) {
	earlier := Visit{Examined: noon.AddDate(0, 0, -7), Findings: slices.Concat(fs(Skin, 0, Trunk), fs(SuperficialPain, 0, PelvicLeft), fs(FaecalContinence, 0))}
	older := Visit{Examined: noon.AddDate(0, 0, -14), Findings: fs(FaecalContinence, 2), Measures: []Measured{{Measure: Temperature, Value: 40}}}
	today := Visit{Examined: noon}
	p := Patient{Species: Dog}
	got := CheckTreatment(p, Treatment{Kind: "swimming"}, today, older, earlier)
	require.Contains(t, got[0].Why, "2026-03-02", "untested today: last week's finding, with its day")
	var bowel bool
	for _, o := range got {
		bowel = bowel || o.Condition == BowelLeak
	}
	require.True(t, bowel, "the latest exam that tested it counts, not an older one")
	today.Findings = slices.Concat(fs(Skin, 2, Trunk), fs(FaecalContinence, 2))
	today.Measures = []Measured{{Measure: Temperature, Value: 38.4}}
	require.Empty(t, CheckTreatment(p, Treatment{Kind: "swimming"}, today, older, earlier), "sound today")

	require.NotEmpty(t, CheckTreatment(p, Treatment{Kind: "heat", Site: "pelvic-left"}, today, earlier))
	require.NotEmpty(t, CheckTreatment(p, Treatment{Kind: "heat", Site: "left"}, today, earlier))
	require.Empty(t, CheckTreatment(p, Treatment{Kind: "heat", Site: "pelvic-right"}, today, earlier), "the other limb feels")
	require.Empty(t, CheckTreatment(p, Treatment{Kind: "heat", Site: "cervical"}, today, earlier))
	require.NotEmpty(t, CheckTreatment(p, Treatment{Kind: "heat"}, today, earlier), "no site said: any numb skin counts")

	// a limb without movement whose feeling nobody tested
	v := Visit{Examined: noon, Findings: fs(VoluntaryMotor, 0, PelvicLeft)}
	got = CheckTreatment(p, Treatment{Kind: "heat", Site: "pelvic-left"}, v)
	require.Len(t, got, 1)
	require.Contains(t, got[0].Why, "feeling not tested")

	// an implant elsewhere does not matter
	p.Precautions = []PrecautionOn{{Code: "implant", Site: "lumbar"}}
	require.Empty(t, CheckTreatment(p, Treatment{Kind: "ultrasound", Site: "pelvic-right"}, Visit{Examined: noon}))
	require.NotEmpty(t, CheckTreatment(p, Treatment{Kind: "ultrasound", Site: "lumbar"}, Visit{Examined: noon}))

	// what the table does not know is asked about everything
	q := Patient{Species: Dog, Precautions: []PrecautionOn{{Code: "pregnant"}}}
	require.NotEmpty(t, CheckTreatment(q, Treatment{Kind: "crystal"}, Visit{Examined: noon}))
	require.NotEmpty(t, CheckExercise(q, HomeExercise{Kind: "dance"}, Visit{Examined: noon}))
	_, ok := TreatmentByKey("crystal")
	require.False(t, ok)
	_, ok = ExerciseByKey("dance")
	require.False(t, ok)
	require.Equal(t, "unknown", conditionCount.String())
	require.NotEmpty(t, CheckTreatment(Patient{}, Treatment{Kind: "heat"}, Visit{Findings: fs(SuperficialPain, 0, PelvicLeft)}), "a visit without a time")
}
