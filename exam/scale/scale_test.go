package scale

import (
	"encoding/json"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
)

const (
	pl, pr = exam.PelvicLeft, exam.PelvicRight
	tl, tr = exam.ThoracicLeft, exam.ThoracicRight
	none0  = exam.NoSite
)

type set struct {
	item  exam.Item
	grade int8
	sites []exam.Site
}

func g(i exam.Item, grade int8, sites ...exam.Site) set {
	if len(sites) == 0 {
		sites = i.Info().Sites
	}
	return set{i, grade, sites}
}

type mm struct {
	m     exam.Measure
	site  exam.Site
	value float64
}

// visit builds an exam; a later entry of a cell replaces an earlier one.
func visit(parts ...any) exam.Visit {
	var v exam.Visit
	for _, p := range parts {
		switch p := p.(type) {
		case set:
			for _, s := range p.sites {
				f := exam.Finding{Item: p.item, Site: s, Result: exam.Graded(p.grade)}
				if k := slices.IndexFunc(v.Findings, func(x exam.Finding) bool { return x.Key() == f.Key() }); k >= 0 {
					v.Findings[k] = f
				} else {
					v.Findings = append(v.Findings, f)
				}
			}
		case mm:
			v.Measures = append(v.Measures, exam.Measured{Measure: p.m, Site: p.site, Value: p.value})
		case []any:
			x := visit(p...)
			v.Findings, v.Measures = append(v.Findings, x.Findings...), append(v.Measures, x.Measures...)
		}
	}
	return v
}

// sound is a walking animal without any deficit.
func sound() []any {
	return []any{g(exam.VoluntaryMotor, 4), g(exam.Ambulation, 2), g(exam.Ataxia, 0), g(exam.PawPlacement, 2), g(exam.DeepPain, 2, pl, pr, exam.TailBase, tl, tr),
		g(exam.SuperficialPain, 2, pl, pr, exam.TailBase, tl, tr), g(exam.SpinalPain, 0), g(exam.TailMovement, 1), g(exam.Tone, 2)}
}

func with(extra ...any) exam.Visit {
	all := visit(sound()...)
	x := visit(extra...)
	for _, f := range x.Findings {
		if k := slices.IndexFunc(all.Findings, func(y exam.Finding) bool { return y.Key() == f.Key() }); k >= 0 {
			all.Findings[k] = f
		} else {
			all.Findings = append(all.Findings, f)
		}
	}
	all.Measures = x.Measures
	return all
}

func plegic(deep, surface, tail int8) []any {
	return []any{g(exam.VoluntaryMotor, 0, pl, pr), g(exam.Ambulation, 0), g(exam.DeepPain, deep, pl, pr, exam.TailBase),
		g(exam.SuperficialPain, surface, pl, pr, exam.TailBase), g(exam.TailMovement, tail)}
}

func level(t *testing.T, s Scale, v exam.Visit, site exam.Site) float64 {
	t.Helper()
	x, ok := Compute(s, v, site)
	require.True(t, ok)
	require.Empty(t, x.Problem)
	l, known := x.Known()
	require.True(t, known, "%s: %v, missing %v", s, x.Levels, x.Missing)
	require.Empty(t, x.Missing)
	return l
}

// Every level of the modified Frankel score, variants A, B, C and D (Frankel-T1; conversions of the reference compilation).
func TestFrankelReachesEveryLevel(t *testing.T) {
	exams := []exam.Visit{
		with(plegic(0, 0, 0)...),
		with(plegic(1, 0, 0)...),
		with(plegic(2, 1, 0)...),
		with(g(exam.VoluntaryMotor, 1, pl), g(exam.VoluntaryMotor, 0, pr), g(exam.Ambulation, 1)),
		with(g(exam.VoluntaryMotor, 3, pl), g(exam.Ataxia, 1, pl)),
		with(g(exam.SpinalPain, 1, exam.Lumbar)),
		with(),
	}
	b := []float64{0, 1, 2, 3, 4, 5, 5}
	c := []float64{5, 4, 4, 3, 2, 1, 0}
	for want, v := range exams {
		require.Equal(t, float64(want), level(t, Frankel, v, none0))
		require.Equal(t, b[want], level(t, FrankelB, v, none0))
		for _, s := range []Scale{FrankelC, FrankelD} {
			x, ok := Compute(s, v, none0)
			require.True(t, ok)
			if want == 6 {
				require.Contains(t, x.Problem, "no level")
				continue
			}
			require.Equal(t, c[want], level(t, s, v, none0))
		}
	}
	// The ladder of all limbs looks at the thoracic ones too.
	require.Equal(t, 3.0, level(t, FrankelAllLimbs, exams[0], none0), "the thoracic limbs move")
	numb := []any{g(exam.VoluntaryMotor, 0), g(exam.Ambulation, 0)}
	for want, feel := range [][2]int8{{0, 0}, {1, 0}, {1, 1}} {
		v := with(append(numb, g(exam.DeepPain, feel[0]), g(exam.SuperficialPain, feel[1]))...)
		require.Equal(t, float64(want), level(t, FrankelAllLimbs, v, none0))
	}
	for want := 3; want <= 6; want++ {
		require.Equal(t, float64(want), level(t, FrankelAllLimbs, exams[want], none0))
	}
}

func TestFrankelWithHoles(t *testing.T) {
	// Plegic, deep pain not tested: 0, 1 or 2 (the reference compilation's own example).
	v := visit(g(exam.VoluntaryMotor, 0, pl, pr))
	x, ok := Compute(Frankel, v, none0)
	require.True(t, ok)
	require.Equal(t, []float64{0, 1, 2}, x.Levels)
	require.Contains(t, x.Missing, "deep-pain at tail-base")
	require.Contains(t, x.Missing, "superficial-pain at pelvic-left")
	require.NotContains(t, x.Missing, "ambulation", "a plegic animal's ladder does not ask it")
	// Deep pain negative needs both limbs and the tail base (Lewis2020).
	v = visit(g(exam.VoluntaryMotor, 0, pl, pr), g(exam.DeepPain, 0, pl, pr), g(exam.SuperficialPain, 0, pl, pr, exam.TailBase))
	x, _ = Compute(Frankel, v, none0)
	require.Equal(t, []float64{0, 1}, x.Levels)
	require.Equal(t, []string{"deep-pain at tail-base"}, x.Missing)
	// One response anywhere is enough; felt on the surface is felt deeply.
	v = visit(g(exam.VoluntaryMotor, 0, pl, pr), g(exam.SuperficialPain, 1, pr))
	require.Equal(t, 2.0, level(t, Frankel, v, none0))
	// One limb's movement is enough.
	v = visit(g(exam.VoluntaryMotor, 2, pl), g(exam.Ambulation, 1))
	require.Equal(t, 3.0, level(t, Frankel, v, none0))
	// A contradiction is not scored.
	v = visit(g(exam.VoluntaryMotor, 0, pl, pr), g(exam.DeepPain, 0, pl), g(exam.SuperficialPain, 1, pl))
	x, _ = Compute(Frankel, v, none0)
	require.Empty(t, x.Levels)
	require.Contains(t, x.Problem, "test both again")
	require.Equal(t, "not scored", x.String())
	// Nothing of it was tested.
	_, ok = Compute(Frankel, visit(g(exam.Menace, 2)), none0)
	require.False(t, ok)
	// Walks without pain sensation: a graded movement of 0 stays on the ladder's floor (Lewis2020).
	v = with(append(plegic(0, 0, 0), g(exam.Ambulation, 2))...)
	require.Equal(t, 0.0, level(t, Frankel, v, none0))
}

// Every level of the open-field score (Olby2001).
func TestOpenFieldReachesEveryLevel(t *testing.T) {
	steps := func(bearing, mistakes float64) []any {
		var out []any
		for _, l := range []exam.Site{pl, pr} {
			out = append(out, mm{exam.StepsScored, l, 100}, mm{exam.StepsWeightBearing, l, bearing}, mm{exam.StepsWithMistake, l, mistakes})
		}
		return out
	}
	swing := func(joints float64, clears int8) []any {
		return []any{g(exam.VoluntaryMotor, 1, pl, pr), mm{exam.JointsMoving, pl, joints}, g(exam.GroundClearance, clears, pl)}
	}
	bearing := func(motor int8, share float64) []any {
		return append(steps(share, 0), g(exam.VoluntaryMotor, motor, pl, pr))
	}
	always := func(motor, ataxia int8, mistakes float64) []any {
		return append(steps(100, mistakes), g(exam.VoluntaryMotor, motor, pl, pr), g(exam.Ataxia, ataxia, pl, pr))
	}
	for want, v := range []exam.Visit{
		with(plegic(0, 0, 0)...),
		with(plegic(1, 0, 0)...),
		with(plegic(1, 0, 1)...),
		with(swing(1, 0)...),
		with(swing(3, 1)...),
		with(swing(2, 2)...),
		with(bearing(2, 5)...),
		with(bearing(2, 30)...),
		with(bearing(3, 80)...),
		with(always(3, 1, 95)...),
		with(always(3, 1, 60)...),
		with(always(3, 1, 20)...),
		with(always(4, 2, 60)...),
		with(always(4, 1, 20)...),
		with(),
	} {
		require.Equal(t, float64(want), level(t, OpenField, v, none0), "level %d", want)
	}
}

func TestOpenFieldWithHoles(t *testing.T) {
	x, ok := Compute(OpenField, visit(g(exam.VoluntaryMotor, 1, pl, pr)), none0)
	require.True(t, ok)
	require.Equal(t, []float64{3, 4, 5}, x.Levels, "the reference compilation: movement without weight is 3, 4 or 5")
	require.Contains(t, x.Missing, "joints-moving of a pelvic limb")
	x, _ = Compute(OpenField, visit(g(exam.VoluntaryMotor, 0, pl, pr)), none0)
	require.Equal(t, []float64{0, 1, 2}, x.Levels)
	x, _ = Compute(OpenField, visit(g(exam.VoluntaryMotor, 4, pl, pr), g(exam.Ataxia, 1, pl)), none0)
	require.Equal(t, []float64{12, 13}, x.Levels)
	x, _ = Compute(OpenField, visit(g(exam.VoluntaryMotor, 3, pl, pr)), none0)
	require.Equal(t, 6.0, x.Low)
	require.Equal(t, 11.0, x.High)
	_, ok = Compute(OpenField, visit(g(exam.Menace, 2)), none0)
	require.False(t, ok)
	// borders: 10 %, 50 %, 100 %
	for share, want := range map[float64]int{0: none, 0.09: under10, 0.1: to50, 0.5: to50, 0.51: over50, 0.99: over50, 1: allSteps} {
		require.Equal(t, want, weightClass(share))
	}
	// Counts that do not fit each other are not used.
	_, _, ok = count(visit(mm{exam.StepsScored, pl, 10}, mm{exam.StepsWeightBearing, pl, 11}), exam.StepsWeightBearing, pl)
	require.False(t, ok)
	_, _, ok = count(visit(mm{exam.StepsScored, pl, 0}, mm{exam.StepsWeightBearing, pl, 0}), exam.StepsWeightBearing, pl)
	require.False(t, ok)
}

// Every level of each part of the Texas score (Levine2009): gait 0–6, positioning 0–2, nociception 0–2.
func TestTexasReachesEveryLevel(t *testing.T) {
	base := []any{g(exam.PawPlacement, 0, pl), g(exam.DeepPain, 0, pl), g(exam.SuperficialPain, 0, pl)}
	gait := [][]any{
		{g(exam.VoluntaryMotor, 0, pl)},
		{g(exam.VoluntaryMotor, 1, pl), g(exam.Ambulation, 1), g(exam.GroundClearance, 0, pl)},
		{g(exam.VoluntaryMotor, 1, pl), g(exam.Ambulation, 1), g(exam.GroundClearance, 1, pl)},
		{g(exam.VoluntaryMotor, 1, pl), g(exam.Ambulation, 1), g(exam.GroundClearance, 2, pl)},
		{g(exam.VoluntaryMotor, 3, pl), g(exam.Ambulation, 2), g(exam.Ataxia, 2, pl)},
		{g(exam.VoluntaryMotor, 3, pl), g(exam.Ambulation, 2), g(exam.Ataxia, 1, pl)},
		{g(exam.VoluntaryMotor, 4, pl), g(exam.Ambulation, 2), g(exam.Ataxia, 0, pl)},
	}
	for want, parts := range gait {
		require.Equal(t, float64(want), level(t, TexasLimb, visit(append(parts, base...)...), pl))
	}
	for paw := int8(0); paw <= 2; paw++ {
		v := visit(g(exam.VoluntaryMotor, 0, pl), g(exam.PawPlacement, paw, pl), g(exam.DeepPain, 0, pl), g(exam.SuperficialPain, 0, pl))
		require.Equal(t, float64(paw), level(t, TexasLimb, v, pl))
	}
	for want, feel := range [][2]int8{{0, 0}, {1, 0}, {2, 1}} {
		v := visit(g(exam.VoluntaryMotor, 0, pl), g(exam.PawPlacement, 0, pl), g(exam.DeepPain, feel[0], pl), g(exam.SuperficialPain, feel[1], pl))
		require.Equal(t, float64(want), level(t, TexasLimb, v, pl))
	}
	require.Equal(t, 10.0, level(t, TexasLimb, with(), pl))
	require.Equal(t, 20.0, level(t, TexasPelvic, with(), none0))
	require.Equal(t, 40.0, level(t, Texas, with(), none0))
	require.Equal(t, 20.0, level(t, Texas, with(append(plegic(0, 0, 0), g(exam.PawPlacement, 0, pl, pr))...), none0))
	// holes
	x, ok := Compute(TexasPelvic, visit(g(exam.PawPlacement, 2, pl, pr)), none0)
	require.True(t, ok)
	require.Equal(t, 4.0, x.Low)
	require.Equal(t, 20.0, x.High)
	require.Contains(t, x.Missing, "voluntary-motor at pelvic-right")
	require.Equal(t, "4–20", x.String())
	_, ok = Compute(TexasPelvic, visit(), none0)
	require.False(t, ok)
}

func TestTexasEveryTotalIsReached(t *testing.T) {
	seen := map[float64]bool{}
	for motor := int8(0); motor <= 4; motor++ {
		for walks := int8(1); walks <= 2; walks++ {
			for clears := int8(0); clears <= 3; clears++ {
				for ataxia := int8(0); ataxia <= 2; ataxia++ {
					for paw := int8(0); paw <= 2; paw++ {
						for feel := int8(0); feel <= 2; feel++ {
							v := visit(g(exam.VoluntaryMotor, motor, pl), g(exam.Ambulation, walks), g(exam.GroundClearance, clears, pl), g(exam.Ataxia, ataxia, pl),
								g(exam.PawPlacement, paw, pl), g(exam.DeepPain, min(feel, 1), pl), g(exam.SuperficialPain, max(feel-1, 0), pl))
							seen[level(t, TexasLimb, v, pl)] = true
						}
					}
				}
			}
		}
	}
	require.Len(t, seen, 11, "0 to 10")
}

// Every level of the modified Ashworth: 0 and 4 from tone, those between by hand (Bohannon1987).
func TestAshworth(t *testing.T) {
	require.Equal(t, 0.0, level(t, Ashworth, visit(g(exam.Tone, 2, pl)), pl))
	require.Equal(t, 5.0, level(t, Ashworth, visit(g(exam.Tone, 4, pl)), pl))
	x, ok := Compute(Ashworth, visit(g(exam.Tone, 3, pl)), pl)
	require.True(t, ok)
	require.Equal(t, []float64{1, 2, 3, 4}, x.Levels)
	for _, tone := range []int8{0, 1} {
		x, ok = Compute(Ashworth, visit(g(exam.Tone, tone, pl)), pl)
		require.True(t, ok)
		require.NotEmpty(t, x.Problem)
	}
	for rank := 0.0; rank <= 5; rank++ {
		x, ok := Compute(AshworthEntered, visit(mm{exam.ScaleAshworth, pl, rank}), pl)
		require.True(t, ok)
		require.True(t, x.Entered)
		require.NotEmpty(t, x.Words())
	}
	_, ok = Compute(Ashworth, visit(), pl)
	require.False(t, ok)
	_, ok = Compute(Ashworth, visit(g(exam.Tone, 2, pl)), none0)
	require.False(t, ok, "it belongs to a limb")
}

func TestStepsAndTasks(t *testing.T) {
	x, ok := Compute(WeightSteps, visit(mm{exam.StepsScored, pl, 20}, mm{exam.StepsWeightBearing, pl, 15}), pl)
	require.True(t, ok)
	require.Equal(t, 75.0, x.Levels[0])
	require.InDelta(t, 53.1, x.Low, 0.1)  // Wilson 15/20
	require.InDelta(t, 88.8, x.High, 0.1) // R prop.test without correction: 0.531–0.888
	require.NotEmpty(t, x.Missing)
	_, ok = Compute(WeightSteps, visit(), pl)
	require.False(t, ok)
	for share := 0.0; share <= 100; share++ {
		x, ok := Compute(WeightSteps, visit(mm{exam.StepsScored, pl, 100}, mm{exam.StepsWeightBearing, pl, share}), pl)
		require.True(t, ok)
		require.InDelta(t, share, x.Levels[0], 1e-9)
	}

	all := []any{mm{exam.StepsWeightBearing, pl, 20}, mm{exam.StepsWeightBearing, pr, 25}, mm{exam.StepsScored, tl, 50}, mm{exam.StepsScored, tr, 50}}
	require.Equal(t, 45.0, level(t, Stepping, visit(all...), none0))
	x, ok = Compute(Stepping, visit(all[:3]...), none0)
	require.True(t, ok)
	require.Contains(t, x.Problem, "thoracic-right")
	_, ok = Compute(Stepping, visit(), none0)
	require.False(t, ok)
	x, _ = Compute(Stepping, visit(all[0], all[1], mm{exam.StepsScored, tl, 0}, mm{exam.StepsScored, tr, 0}), none0)
	require.NotEmpty(t, x.Problem)

	for total := 0; total <= 44; total++ { // every total of the 11 tasks
		var parts []any
		left := total
		for m := exam.TaskLying; m <= exam.TaskStairs; m++ {
			k := min(left, 4)
			left -= k
			parts = append(parts, mm{m, none0, float64(k)})
		}
		require.Equal(t, float64(total), level(t, Functional, visit(parts...), none0))
	}
	x, ok = Compute(Functional, visit(mm{exam.TaskWalking, none0, 3}), none0)
	require.True(t, ok)
	require.Equal(t, 3.0, x.Low)
	require.Equal(t, 43.0, x.High)
	require.Len(t, x.Missing, 10)
	_, ok = Compute(Functional, visit(), none0)
	require.False(t, ok)
}

// Every level that can be entered by hand keeps its variant and best end.
func TestEnteredByHand(t *testing.T) {
	for _, s := range Scales() {
		in := s.Info()
		if !in.Hand {
			continue
		}
		site := none0
		if len(in.Sites) > 0 {
			site = in.Sites[0]
		}
		for l := in.Min; l <= in.Max; l++ {
			v := visit(mm{in.Measure, site, l})
			require.NoError(t, v.Measures[0].Validate())
			x, ok := Compute(s, v, site)
			require.True(t, ok)
			got, known := x.Known()
			require.True(t, known && got == l && x.Entered)
		}
		_, ok := Compute(s, visit(), site)
		require.False(t, ok)
	}
	v := exam.Visit{Measures: []exam.Measured{{Measure: exam.ScaleFrankel, Value: 2, Variant: "C", BestEnd: 1}}}
	x, _ := Compute(FrankelEntered, v, none0)
	require.Equal(t, "C", x.Variant)
	require.Equal(t, 1.0, x.Best)
}

func TestChangeNeedsApartIntervals(t *testing.T) {
	val := func(s Scale, parts ...any) Value {
		x, ok := Compute(s, with(parts...), none0)
		require.True(t, ok)
		return x
	}
	low, high := val(Frankel, plegic(0, 0, 0)...), val(Frankel)
	require.Equal(t, exam.Better, Change(low, high))
	require.Equal(t, exam.Worse, Change(high, low))
	require.Equal(t, exam.Same, Change(low, low))
	lowC, highC := val(FrankelC, plegic(0, 0, 0)...), val(FrankelC, g(exam.SpinalPain, 1, exam.Lumbar))
	require.Equal(t, exam.Better, Change(lowC, highC), "1 is best there")
	wide, _ := Compute(Frankel, visit(g(exam.VoluntaryMotor, 0, pl, pr)), none0)
	require.Equal(t, exam.Same, Change(low, wide), "they overlap: no claim")
	require.Equal(t, exam.NotComparable, Change(low, lowC))
	require.Equal(t, exam.NotComparable, Change(val(FrankelC), lowC), "no level in this variant")
	spastic := func(l float64) Value {
		x, _ := Compute(Spasticity, visit(mm{exam.ScaleSpasticity, none0, l}), none0)
		return x
	}
	require.Equal(t, exam.Worse, Change(spastic(3), spastic(9)), "0 is best there")
	require.Equal(t, exam.Better, Change(spastic(9), spastic(3)))
}

func TestInfos(t *testing.T) {
	for _, s := range Scales() {
		in := s.Info()
		require.NotEmpty(t, in.Key)
		require.NotEmpty(t, in.Source)
		require.NotEmpty(t, in.Licence)
		require.NotEmpty(t, in.Reliability)
		require.True(t, in.Best == in.Min || in.Best == in.Max)
		require.Less(t, in.Min, in.Max)
		if len(in.Levels) > 0 {
			require.Len(t, in.Levels, int(in.Max-in.Min)+1)
		}
		back, err := Parse(s.String())
		require.NoError(t, err)
		require.Equal(t, s, back)
	}
	_, err := Parse("glasgow")
	require.Error(t, err)
	require.Equal(t, Info{}, Scale(99).Info())
	_, ok := Compute(Scale(99), with(), none0)
	require.False(t, ok)
	x, _ := Compute(Frankel, with(), none0)
	require.Equal(t, "normal", x.Words())
	require.Equal(t, "6", x.String())
	require.Empty(t, Value{Scale: Texas, Levels: []float64{3}}.Words())
}

// Learning more never widens what is possible, and what is possible always holds the truth:
// findings are taken out of complete random exams one by one.
func TestSetsShrinkAsMoreIsTested(t *testing.T) {
	seed := rand.Uint64()
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	for range 60 {
		motor := []int8{int8(r.IntN(5)), int8(r.IntN(5))}
		parts := []any{g(exam.VoluntaryMotor, motor[0], pl), g(exam.VoluntaryMotor, motor[1], pr), g(exam.Ambulation, int8(r.IntN(3))),
			g(exam.Ataxia, int8(r.IntN(4)), pl, pr), g(exam.PawPlacement, int8(r.IntN(3)), pl, pr), g(exam.GroundClearance, int8(r.IntN(3)), pl, pr),
			g(exam.SpinalPain, int8(r.IntN(2))), g(exam.TailMovement, int8(r.IntN(2)))}
		deep := int8(r.IntN(2))
		parts = append(parts, g(exam.DeepPain, deep, pl, pr, exam.TailBase), g(exam.SuperficialPain, deep*int8(r.IntN(2)), pl, pr, exam.TailBase))
		for k, l := range []exam.Site{pl, pr} {
			bears := 0 // what a limb of grade 0 or 1 means
			if motor[k] >= 2 {
				bears = 1 + r.IntN(50)
			}
			parts = append(parts, mm{exam.StepsScored, l, 50}, mm{exam.StepsWeightBearing, l, float64(bears)}, mm{exam.StepsWithMistake, l, float64(r.IntN(51))}, mm{exam.JointsMoving, l, float64(1 + r.IntN(3))})
		}
		v := visit(parts...)
		for _, s := range []Scale{Frankel, FrankelB, OpenField, TexasPelvic} {
			full, ok := Compute(s, v, none0)
			require.True(t, ok)
			require.Len(t, full.Levels, 1, "%s: a complete exam has one level, missing %v", s, full.Missing)
			less := v
			levels := full.Levels
			for len(less.Findings) > 0 {
				k := r.IntN(len(less.Findings))
				less.Findings = slices.Delete(slices.Clone(less.Findings), k, k+1)
				x, ok := Compute(s, less, none0)
				if !ok {
					break
				}
				for _, l := range levels {
					require.Contains(t, x.Levels, l, "%s lost a possible level when less was known", s)
				}
				if len(x.Levels) > 1 {
					require.NotEmpty(t, x.Missing, "%s: %v", s, x.Levels)
				}
				levels = x.Levels
			}
		}
	}
}

// The published cases are scored without a panic, and every range names what is missing.
func TestPublishedCases(t *testing.T) {
	paths, err := filepath.Glob("../testdata/cases/*.json")
	require.NoError(t, err)
	require.NotEmpty(t, paths)
	for _, p := range paths {
		b, err := os.ReadFile(p)
		require.NoError(t, err)
		require.True(t, json.Valid(b))
		f, _, err := exam.DecodeFile(b)
		require.NoError(t, err)
		for _, x := range All(f.Visit(exam.ID{})) {
			require.True(t, len(x.Levels) > 0 || x.Problem != "")
			if len(x.Levels) > 1 {
				require.NotEmpty(t, x.Missing, "%s %s", p, x.Scale)
			}
		}
	}
}

func BenchmarkAll(b *testing.B) {
	v := with(g(exam.VoluntaryMotor, 2, pl))
	for b.Loop() {
		All(v)
	}
}

func BenchmarkAllUnknown(b *testing.B) {
	v := visit(g(exam.PawPlacement, 1, pl), g(exam.Ataxia, 1, pl))
	for b.Loop() {
		All(v)
	}
}

func TestScalesAreSourced(t *testing.T) {
	for _, s := range Scales() {
		require.NotEmpty(t, exam.SourcesIn(s.Info().Source), "%s: %s", s, s.Info().Source)
	}
}

func TestRangeIsComputesRange(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 7))
	items := []exam.Item{exam.VoluntaryMotor, exam.Ambulation, exam.Ataxia, exam.PawPlacement, exam.DeepPain,
		exam.SuperficialPain, exam.SpinalPain, exam.TailMovement, exam.GroundClearance, exam.Tone}
	for range 300 {
		var v exam.Visit
		for _, i := range items {
			for _, s := range i.Info().Sites {
				if rng.IntN(3) > 0 {
					g := i.Info().First + int8(rng.IntN(len(i.Info().Grades)))
					v.Findings = append(v.Findings, exam.Finding{Item: i, Site: s, Result: exam.Graded(g)})
				}
			}
		}
		for _, s := range Scales() {
			x, scored := Compute(s, v, exam.NoSite)
			low, high, ok := Range(s, v, exam.NoSite)
			if ok != (scored && len(x.Levels) > 0) || ok && (low != x.Low || high != x.High) {
				t.Fatalf("%s: Range says %g to %g, %v; Compute says %v", s, low, high, ok, x)
			}
		}
	}
}
