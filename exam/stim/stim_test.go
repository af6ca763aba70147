package stim

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
)

type fitted struct {
	Rheobase  float64   `json:"rheobase"`
	Chronaxie float64   `json:"chronaxie"`
	Intercept float64   `json:"intercept_charge_uC"`
	RSS       *float64  `json:"rss"`
	SE        []float64 `json:"standard_errors_R"`
}

type golden struct {
	Cases []struct {
		ID    string `json:"id"`
		Input struct {
			Pulse     []float64 `json:"pulse_ms"`
			Current   []float64 `json:"current_mA"`
			Rheobase  float64   `json:"rheobase_mA"`
			Chronaxie float64   `json:"chronaxie_ms"`
		} `json:"input"`
		Output struct {
			Charge      fitted    `json:"weiss_charge_linear"`
			Hyperbola   fitted    `json:"hyperbolic_nls"`
			HyperLog    fitted    `json:"hyperbolic_log_nls"`
			Lapicque    fitted    `json:"lapicque_exponential_nls"`
			LapicqueLog fitted    `json:"lapicque_exponential_log_nls"`
			WeissI      []float64 `json:"weiss_current_mA"`
			WeissQ      []float64 `json:"weiss_charge_uC"`
			LapicqueI   []float64 `json:"lapicque_current_mA"`
		} `json:"output"`
	} `json:"cases"`
}

func reference(t *testing.T) golden {
	t.Helper()
	b, err := os.ReadFile("testdata/golden.json")
	require.NoError(t, err)
	var g golden
	require.NoError(t, json.Unmarshal(b, &g))
	return g
}

func points(w, c []float64) (out []Point) {
	for i := range w {
		out = append(out, Point{w[i], c[i]})
	}
	return out
}

// R, SciPy and mpmath on three data sets, five fits each; the file names who computed what.
func TestFitsAgainstReference(t *testing.T) {
	fits := 0
	for _, c := range reference(t).Cases {
		if len(c.Input.Current) == 0 {
			continue
		}
		for law, want := range map[Law]fitted{Weiss: c.Output.Hyperbola, WeissLog: c.Output.HyperLog, WeissCharge: c.Output.Charge, Lapicque: c.Output.Lapicque, LapicqueLog: c.Output.LapicqueLog} {
			t.Run(c.ID+" "+law.String(), func(t *testing.T) {
				f, err := Do(points(c.Input.Pulse, c.Input.Current), law)
				require.NoError(t, err)
				require.InEpsilon(t, want.Rheobase, f.Rheobase.Value, 1e-9)
				require.InEpsilon(t, want.Chronaxie, f.Chronaxie.Value, 1e-9)
				if want.RSS != nil {
					require.InEpsilon(t, *want.RSS, f.RSS, 1e-9)
				}
				if want.Intercept != 0 {
					require.InEpsilon(t, want.Intercept, f.Rheobase.Value*f.Chronaxie.Value, 1e-9)
				}
				if len(want.SE) == 2 {
					// R's nls takes its derivatives numerically: its standard errors hold seven digits
					require.InEpsilon(t, want.SE[0], f.Rheobase.SE, 1e-6)
					second := f.Chronaxie.SE
					if law == Weiss { // R fitted a line there: its second error is that of the slope, rheobase × chronaxie
						r, c := f.Rheobase, f.Chronaxie
						second = math.Sqrt(c.Value*c.Value*r.SE*r.SE + r.Value*r.Value*c.SE*c.SE + 2*r.Value*c.Value*f.Covariance)
					}
					require.InEpsilon(t, want.SE[1], second, 1e-6)
				}
				require.True(t, f.Chargeable)
				require.Len(t, f.Residuals, len(f.Points))
				fits++
			})
		}
	}
	require.Equal(t, 15, fits)
}

// Both laws evaluated from their definitions (mpmath), from the figure of a published instrumentation text.
func TestLawsAtStatedWidths(t *testing.T) {
	for _, c := range reference(t).Cases {
		if len(c.Output.WeissI) == 0 {
			continue
		}
		for i, w := range c.Input.Pulse {
			require.InEpsilon(t, c.Output.WeissI[i], Weiss.Current(c.Input.Rheobase, c.Input.Chronaxie, w), 1e-13)
			require.InEpsilon(t, c.Output.WeissQ[i], w*Weiss.Current(c.Input.Rheobase, c.Input.Chronaxie, w), 1e-13)
			require.InEpsilon(t, c.Output.LapicqueI[i], Lapicque.Current(c.Input.Rheobase, c.Input.Chronaxie, w), 1e-13)
		}
		// At the chronaxie both laws need twice the rheobase.
		require.InEpsilon(t, 7, Weiss.Current(3.5, 0.22, 0.22), 1e-14)
		require.InEpsilon(t, 7, Lapicque.Current(3.5, 0.22, 0.22), 1e-14)
		return
	}
	t.Fatal("no noise-free case")
}

// Without noise every law finds its own truth again, whatever its size.
func TestEveryLawFindsItsTruth(t *testing.T) {
	seed := rand.Uint64()
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 3))
	widths := []float64{0.05, 0.1, 0.3, 1, 3, 10, 30, 100, 300}
	for range 60 {
		rheobase, chronaxie := math.Exp(r.Float64()*4-1), math.Exp(r.Float64()*7-3)
		for _, law := range Laws() {
			var ps []Point
			for _, w := range widths {
				if i := law.Current(rheobase, chronaxie, w); i < 1e4 {
					ps = append(ps, Point{w, i})
				}
			}
			f, err := Do(ps, law)
			require.NoError(t, err)
			require.InEpsilon(t, rheobase, f.Rheobase.Value, 1e-6, "%s %g %g", law, rheobase, chronaxie)
			require.InEpsilon(t, chronaxie, f.Chronaxie.Value, 1e-6, "%s %g %g", law, rheobase, chronaxie)
			require.Empty(t, f.Bad)
			require.Greater(t, f.R2, 0.999999)
		}
	}
}

// The 95 % intervals hold the truth in about 95 % of noisy tests (relative errors of 5 %).
func TestIntervalsCover(t *testing.T) {
	seed := rand.Uint64()
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 4))
	widths := []float64{0.05, 0.1, 0.2, 0.5, 1, 3, 10, 30, 100}
	for law, c := range map[Law]float64{WeissLog: 0.4, LapicqueLog: 8} {
		n, inR, inC := 600, 0, 0
		for range n {
			f := Fit{Law: law}
			for _, w := range widths {
				f.Points = append(f.Points, Point{w, law.Current(4, c, w) * math.Exp(0.05*r.NormFloat64())})
			}
			f.solve()
			if f.Rheobase.Low <= 4 && 4 <= f.Rheobase.High {
				inR++
			}
			if f.Chronaxie.Low <= c && c <= f.Chronaxie.High {
				inC++
			}
		}
		// five standard errors of a share of 0.95 in 600: 0.0445
		require.InDelta(t, 0.95, float64(inR)/float64(n), 0.045, law.String())
		require.InDelta(t, 0.95, float64(inC)/float64(n), 0.045, law.String())
	}
}

func TestBadPointsAndWarnings(t *testing.T) {
	widths := []float64{0.05, 0.1, 0.3, 1, 3, 10, 30}
	clean := func() (ps []Point) {
		for _, w := range widths {
			ps = append(ps, Point{w, Weiss.Current(4, 0.3, w)})
		}
		return ps
	}
	f, err := Do(clean(), Weiss)
	require.NoError(t, err)
	require.Empty(t, f.Bad)
	require.Empty(t, f.Warnings)
	for i := range widths {
		ps := clean()
		ps[i].Current *= 1.5
		slices.Reverse(ps) // the order of typing does not matter
		f, err := Do(ps, Weiss)
		require.NoError(t, err)
		require.Equal(t, []int{i}, f.Bad, "the point that was moved")
	}
	ps := clean()
	ps[4].Current = ps[3].Current * 1.3
	f, _ = Do(ps, Weiss)
	require.Contains(t, f.Warnings[0], "a longer pulse needed more current (3 ms)")
	f, _ = Do(clean()[:4], Weiss)
	require.Len(t, f.Warnings, 2)
	require.Empty(t, f.Bad, "too few to tell")
	f, _ = Do(clean(), WeissCharge)
	require.Contains(t, f.Warnings[0], "charge line")
	// currents that rise with pulse width are no strength–duration curve
	f, err = Do([]Point{{0.1, 1}, {1, 2}, {10, 3}, {100, 4}, {300, 5}}, Weiss)
	require.NoError(t, err)
	require.False(t, f.Chargeable)
	require.Equal(t, Uncertain, f.Label())
	require.True(t, math.IsNaN(f.Chronaxie.Low))
}

func TestDoRefuses(t *testing.T) {
	for name, ps := range map[string][]Point{
		"none": nil, "two widths": {{1, 2}, {1, 2.1}, {3, 1}}, "no width": {{0, 1}, {1, 1}, {2, 1}}, "negative": {{0.1, -1}, {1, 1}, {2, 1}},
		"nan": {{0.1, math.NaN()}, {1, 1}, {2, 1}}, "infinite width": {{math.Inf(1), 1}, {1, 1}, {2, 1}}, "huge": {{0.1, 1e9}, {1, 1}, {2, 1}},
	} {
		for _, law := range Laws() {
			_, err := Do(ps, law)
			require.Error(t, err, name)
		}
	}
	_, err := Do([]Point{{0.1, 3}, {1, 2}, {2, 1}}, Law(99))
	require.Error(t, err)
	for _, l := range Laws() {
		back, err := ParseLaw(l.String())
		require.NoError(t, err)
		require.Equal(t, l, back)
		require.NotEmpty(t, l.Source())
	}
	_, err = ParseLaw("ohm")
	require.Error(t, err)
	require.Equal(t, "unknown", Law(99).String())
	require.Empty(t, NoLaw.Source())
}

func FuzzDo(f *testing.F) {
	f.Add(0.1, 10.0, 1.0, 5.0, 10.0, 4.0, 100.0, 3.9, uint8(1))
	f.Add(1e-4, 1e4, 1e4, 1e-4, 3.0, 3.0, 3.0, 3.0, uint8(4))
	f.Fuzz(func(t *testing.T, a, b, c, d, e, g, h, i float64, law uint8) {
		fit, err := Do([]Point{{a, b}, {c, d}, {e, g}, {h, i}}, Law(law%7))
		if err == nil && fit.Chargeable && !(fit.Rheobase.Value > 0 && fit.Chronaxie.Value > 0) {
			t.Error("a usable curve without a positive rheobase and chronaxie")
		}
	})
}

func TestLabelAndChange(t *testing.T) {
	fit := func(c float64, law Law, noise float64) Fit {
		var ps []Point
		for k, w := range []float64{0.05, 0.2, 1, 3, 10, 30, 100, 300} {
			ps = append(ps, Point{w, law.Current(4, c, w) * (1 + noise*float64(k%2*2-1))})
		}
		f, err := Do(ps, law)
		require.NoError(t, err)
		return f
	}
	require.Equal(t, NerveLike, fit(0.2, WeissLog, 0.01).Label())
	require.Equal(t, MuscleLike, fit(25, WeissLog, 0.01).Label())
	require.Equal(t, Uncertain, fit(4, WeissLog, 0.01).Label())
	require.Equal(t, Uncertain, fit(0.95, WeissLog, 0.1).Label(), "the interval crosses the border")
	for l := Uncertain; l <= MuscleLike; l++ {
		require.NotEmpty(t, l.String())
	}
	// moving left with reinnervation
	ratio, changed, ok := Change(fit(20, WeissLog, 0.02), fit(5, WeissLog, 0.02))
	require.True(t, ok && changed)
	require.InDelta(t, 0.25, ratio.Value, 0.02)
	_, changed, ok = Change(fit(5, WeissLog, 0.1), fit(5.3, WeissLog, 0.1))
	require.True(t, ok)
	require.False(t, changed)
	_, _, ok = Change(fit(5, WeissLog, 0.02), fit(5, LapicqueLog, 0.02))
	require.False(t, ok, "two laws are never compared")
}

func TestTest(t *testing.T) {
	x := Test{Muscle: "cranial tibial", Site: "pelvic-left", Law: "weiss", Readings: []Reading{{0.1, []float64{10, 12}}, {1, []float64{5}}, {10, nil}}}
	require.NoError(t, x.Validate())
	require.Equal(t, []Point{{0.1, 11}, {1, 5}}, x.Points())
	for name, change := range map[string]func(*Test){
		"muscle": func(x *Test) { x.Muscle = " " }, "site": func(x *Test) { x.Site = "moon" }, "law": func(x *Test) { x.Law = "ohm" },
		"width": func(x *Test) { x.Readings = []Reading{{0, nil}} }, "current": func(x *Test) { x.Readings = []Reading{{1, []float64{0}}} }, "nan": func(x *Test) { x.Readings = []Reading{{1, []float64{math.NaN()}}} },
	} {
		y := x
		change(&y)
		require.Error(t, y.Validate(), name)
	}
	b, err := json.Marshal(x)
	require.NoError(t, err)
	var back Test
	require.NoError(t, json.Unmarshal(b, &back))
	require.Equal(t, x.Readings[:2], back.Readings[:2])
}

// The ranges of the literature (Millis 1997, Nolan 2005 in CSMR-NMES; Levine2014): inside no remark, outside one each.
func TestSessionRanges(t *testing.T) {
	s := Session{Aim: "strengthen", Site: "pelvic-left", Muscle: "quadriceps", Frequency: 40, Pulse: 300, On: 10, Off: 40, Ramp: 3, Minutes: 15, SkinBefore: "sound", SkinAfter: "sound"}
	require.NoError(t, s.Validate())
	require.Empty(t, s.Remarks())
	for name, change := range map[string]func(*Session){
		"frequency": func(s *Session) { s.Frequency = 80 }, "pulse": func(s *Session) { s.Pulse = 50 }, "rest": func(s *Session) { s.Off = 10 },
		"ramp": func(s *Session) { s.Ramp = 1 }, "minutes": func(s *Session) { s.Minutes = 40 }, "skin": func(s *Session) { s.SkinAfter = "sore" },
	} {
		x := s
		change(&x)
		require.Len(t, x.Remarks(), 1, name)
	}
	require.Empty(t, Session{Aim: "strengthen"}.Remarks(), "nothing said, nothing remarked")
	require.Empty(t, Session{Aim: "magic"}.Remarks())
	tens := Session{Aim: "pain", Frequency: 100, Pulse: 80}
	require.Empty(t, tens.Remarks())
	for name, change := range map[string]func(*Session){
		"aim": func(s *Session) { s.Aim = "magic" }, "site": func(s *Session) { s.Site = "" }, "negative": func(s *Session) { s.Minutes = -1 },
		"nan": func(s *Session) { s.Pulse = math.NaN() }, "skin": func(s *Session) { s.SkinBefore = "fine" }, "amplitude": func(s *Session) { s.Amplitude = 900 },
	} {
		x := s
		change(&x)
		require.Error(t, x.Validate(), name)
	}
	for _, a := range Aims() {
		require.NotEmpty(t, a.Source)
		_, ok := exam.TreatmentByKey(a.Kind)
		require.True(t, ok)
	}
	require.NotEmpty(t, WaveformWords())
}

func TestConsent(t *testing.T) {
	var c Consent
	require.Len(t, c.Missing(), len(Questions()))
	c.Answers = map[string]bool{}
	for _, q := range Questions() {
		require.NotEmpty(t, q.Source)
		c.Answers[q.Key] = false
	}
	require.Empty(t, c.Missing())
	require.Empty(t, c.Forbidden())
	c.Answers["pacemaker"] = true
	require.Len(t, c.Forbidden(), 1)
	require.Empty(t, c.Missing())
	c.Answers["skin"] = true
	require.Len(t, c.Missing(), 1, "a caution needs a reason")
	c.Reasons = map[string]string{"skin": "old scar"}
	require.Empty(t, c.Missing())
	var stops []string
	for _, q := range Questions() {
		if q.Stop {
			stops = append(stops, q.Key)
		}
	}
	require.Subset(t, stops, []string{"pacemaker", "seizures", "pregnant", "tumour", "infection", "heart", "neck"}) // CSMR-NMES, NMES-summary
}

func TestCheck(t *testing.T) {
	today := exam.Visit{Examined: time.Date(2026, 3, 9, 10, 0, 0, 0, time.UTC)}
	dog := exam.Patient{Species: exam.Dog}
	s := Session{Aim: "strengthen", Site: "pelvic-left"}
	require.Empty(t, Check(dog, s, today))
	today.Findings = []exam.Finding{{Item: exam.SensationFibular, Site: exam.Left, Result: exam.Graded(1)}}
	got := Check(dog, s, today)
	require.Len(t, got, 1)
	require.Equal(t, exam.NumbSkin, got[0].Condition)
	require.False(t, got[0].Stop)
	dog.Precautions = []exam.PrecautionOn{{Code: "pacemaker"}}
	got = Check(dog, s, today)
	require.True(t, got[0].Stop, "stops first")
	require.Equal(t, exam.HasPacemaker, got[0].Condition)
	for site, word := range map[string]string{"cervical": "neck", "cranial-thoracic": "heart", "trunk": "heart"} {
		got = Check(exam.Patient{Species: exam.Dog}, Session{Aim: "pain", Site: site}, exam.Visit{Examined: today.Examined})
		require.Len(t, got, 1)
		require.Contains(t, got[0].Why, word)
	}
	require.NotEmpty(t, Check(dog, Session{Aim: "magic"}, today))
}

func BenchmarkDo(b *testing.B) {
	var ps []Point
	for _, w := range []float64{0.05, 0.1, 0.2, 0.5, 1, 3, 10, 30, 100, 300} {
		ps = append(ps, Point{w, Weiss.Current(4, 0.3, w)})
	}
	for b.Loop() {
		if _, err := Do(ps, Weiss); err != nil {
			b.Fatal(err)
		}
	}
}

func TestAimsAndQuestionsAreSourced(t *testing.T) {
	known := func(s string) bool {
		return len(exam.SourcesIn(s)) > 0 || strings.Contains(s, "from memory") || strings.Contains(s, "common practice")
	}
	for _, a := range Aims() {
		require.True(t, known(a.Source), a.Key)
	}
	for _, q := range Questions() {
		require.True(t, known(q.Source), q.Key)
	}
	for _, l := range Laws() {
		require.True(t, known(l.Source()), l.String())
	}
}
