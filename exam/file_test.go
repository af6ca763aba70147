package exam

import (
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/stretchr/testify/require"
)

// sample is the exam file that the design shows, with an id made complete.
const sample = `{
  "id": "01936c1e-5d2a-7c41-9a40-6f1f2b7c9d10",
  "species": "dog",
  "examined": "2026-03-02T10:15:00+01:00",
  "examiner": "R. Okafor",
  "weight_kg": 9.4, "born": "2019-05", "onset": "2026-02-11", "surgery": "2026-02-12",
  "problem": {"diagnosis": "disc extrusion", "level": "T12-T13"},
  "sedation": "none", "aid": "sling", "surface": "grip", "session": "before",
  "precautions": ["implant", {"code": "rest-until", "until": "2026-04-01", "note": "cage"}],
  "findings": [
    {"item": "patellar", "site": "pelvic-left", "grade": 2},
    {"item": "cutaneous-trunci", "site": "left", "grade": 1, "level": "T13"},
    {"item": "withdrawal", "site": "pelvic-left", "digit": "lateral", "grade": 1, "how": "same", "seen": true},
    {"item": "hopping", "site": "pelvic-right", "not_tested": "pain"},
    {"item": "spinal-pain", "site": "thoracolumbar", "grade": 2, "level": "T13", "side": "left"},
    {"item": "joint-pain", "site": "pelvic-left", "joint": "stifle", "grade": 1}
  ],
  "measures": [
    {"measure": "thigh-girth", "site": "left", "value": 34.5, "unit": "cm", "at": 70},
    {"measure": "range-of-motion", "site": "left", "joint": "stifle", "motion": "flexion", "value": 42, "unit": "deg"}
  ]
}`

func TestDecodeFile(t *testing.T) {
	f, warn, err := DecodeFile([]byte(sample))
	require.NoError(t, err)
	require.Empty(t, warn)
	require.Equal(t, Dog, f.Species)
	require.Equal(t, "2026-03-02T10:15:00+01:00", f.Examined.Format("2006-01-02T15:04:05Z07:00"))
	require.Equal(t, 9.4, f.WeightKg)
	require.Equal(t, FileProblem{"disc extrusion", "T12-T13"}, f.Problem)
	require.Equal(t, "sling", f.Aid)
	require.Equal(t, []PrecautionOn{{Code: "implant"}, {Code: "rest-until", Until: "2026-04-01", Note: "cage"}}, f.Precautions)
	require.Equal(t, []Item{Hopping, Withdrawal, Patellar, CutaneousTrunci, SpinalPain, JointPain}, items(f.Findings), "vocabulary order")
	require.Equal(t, Finding{Item: Hopping, Site: PelvicRight, Result: Untested(Pain)}, f.Findings[0])
	require.Equal(t, Finding{Item: Withdrawal, Site: PelvicLeft, Digit: Lateral, Result: Graded(1), How: SameAsLast, Seen: true}, f.Findings[1])
	require.Equal(t, NewVertebra(RegionT, 13), f.Findings[3].Level)
	require.Equal(t, Left, f.Findings[4].Side)
	require.Equal(t, Measured{Measure: ThighGirth, Site: Left, Value: 34.5, At: 70}, f.Measures[0])

	v := f.Visit(ID{1})
	require.Equal(t, ID{1}, v.Patient)
	w, ok := v.Measured(Weight, NoSite)
	require.True(t, ok)
	require.Equal(t, 9.4, w.Value)
	require.NoError(t, v.Validate(f.Species))

	back, err := EncodeFile(f)
	require.NoError(t, err)
	again, warn, err := DecodeFile(back)
	require.NoError(t, err)
	require.Empty(t, warn)
	if d := cmp.Diff(f, again, cmp.AllowUnexported(Result{})); d != "" {
		t.Error("encode and decode change the file:\n", d)
	}
}

func items(fs []Finding) (out []Item) {
	for _, f := range fs {
		out = append(out, f.Item)
	}
	return out
}

// A file that left the store and comes back says the same.
func TestFileOfVisit(t *testing.T) {
	f, _, err := DecodeFile([]byte(sample))
	require.NoError(t, err)
	p, v := f.Animal(), f.Visit(ID{1})
	out := FileOf(p, v)
	b, err := EncodeFile(out)
	require.NoError(t, err)
	again, _, err := DecodeFile(b)
	require.NoError(t, err)
	require.Equal(t, f.Findings, again.Findings)
	require.Equal(t, f.Precautions, again.Precautions)
	require.Equal(t, f.Problem, again.Problem)
	require.Equal(t, f.Onset, again.Onset)
	require.Equal(t, f.WeightKg, again.WeightKg)
	require.Equal(t, f.ID, again.ID)
}

func TestDecodeFileRefuses(t *testing.T) {
	for _, tt := range []struct{ name, in, want string }{
		{"no species", `{}`, `species: "" is not allowed; use dog, cat, horse or rabbit`},
		{"unknown species", `{"species":"wolf"}`, `species: "wolf"`},
		{"not an object", `[1]`, `exam file: "a list"`},
		{"broken", "{\n\"species\": \"dog\",\n}", "exam file, line 3"},
		{"empty", ``, "exam file, line 1"},
		{"newer version", `{"version":2,"species":"dog"}`, "a newer program wrote this file"},
		{"unknown item", `{"species":"dog","findings":[{"item":"patelar","site":"pelvic-left","grade":1}]}`, `findings[0].item: "patelar" is not allowed; use an item of the vocabulary, perhaps patellar`},
		{"wrong site", `{"species":"dog","findings":[{"item":"patellar","site":"thoracic-left","grade":1}]}`, "findings[0].site (patellar at thoracic-left)"},
		{"grade off the scale", `{"species":"dog","findings":[{"item":"patellar","site":"pelvic-left","grade":2},{"item":"patellar","site":"pelvic-right","grade":7}]}`, `findings[1].grade (patellar at pelvic-right): "7" is not allowed; use 0 (absent), 1 (reduced), 2 (normal), 3 (exaggerated), 4 (clonus)`},
		{"half a grade", `{"species":"dog","findings":[{"item":"patellar","site":"pelvic-left","grade":1.5}]}`, `findings[0].grade: "1.5"`},
		{"grade as text", `{"species":"dog","findings":[{"item":"patellar","site":"pelvic-left","grade":"2"}]}`, "findings[0].grade"},
		{"huge grade", `{"species":"dog","findings":[{"item":"patellar","site":"pelvic-left","grade":1e300}]}`, "findings[0].grade"},
		{"no grade", `{"species":"dog","findings":[{"item":"patellar","site":"pelvic-left"}]}`, "not_tested with a reason"},
		{"both", `{"species":"dog","findings":[{"item":"patellar","site":"pelvic-left","grade":1,"not_tested":"pain"}]}`, "findings[0].not_tested"},
		{"level where none", `{"species":"dog","findings":[{"item":"patellar","site":"pelvic-left","grade":1,"level":"L4"}]}`, "findings[0].level (patellar at pelvic-left)"},
		{"level the species lacks", `{"species":"dog","findings":[{"item":"cutaneous-trunci","site":"left","grade":1,"level":"T18"}]}`, `findings[0].level: "T18"`},
		{"digit where none", `{"species":"dog","findings":[{"item":"patellar","site":"pelvic-left","grade":1,"digit":"medial"}]}`, "findings[0].digit"},
		{"side", `{"species":"dog","findings":[{"item":"spinal-pain","site":"lumbar","grade":1,"side":"midline"}]}`, "findings[0].side"},
		{"how", `{"species":"dog","findings":[{"item":"patellar","site":"pelvic-left","grade":1,"how":"guessed"}]}`, "findings[0].how"},
		{"same cell twice", `{"species":"dog","findings":[{"item":"patellar","site":"pelvic-left","grade":1},{"item":"patellar","site":"pelvic-left","grade":2}]}`, "findings[0] fills it already"},
		{"unknown measure", `{"species":"dog","measures":[{"measure":"length","value":1}]}`, "measures[0].measure"},
		{"wrong unit", `{"species":"dog","measures":[{"measure":"weight","value":9.4,"unit":"lb"}]}`, `measures[0].unit (weight): "lb" is not allowed; use kg`},
		{"unbelievable", `{"species":"dog","measures":[{"measure":"temperature","value":385,"unit":"°C"}]}`, "measures[0].value (temperature)"},
		{"no value", `{"species":"dog","measures":[{"measure":"temperature","unit":"°C"}]}`, "measures[0].value"},
		{"place", `{"species":"dog","measures":[{"measure":"thigh-girth","site":"left","value":30,"unit":"cm","at":170}]}`, "measures[0].at (thigh-girth)"},
		{"no joint", `{"species":"dog","measures":[{"measure":"range-of-motion","site":"left","value":30,"unit":"°"}]}`, "measures[0].joint (range-of-motion)"},
		{"time without offset", `{"species":"dog","examined":"2026-03-02T10:15:00"}`, "examined"},
		{"born", `{"species":"dog","born":"2019-13"}`, "born"},
		{"weight", `{"species":"dog","weight_kg":-3}`, "weight_kg"},
		{"problem level", `{"species":"dog","problem":{"diagnosis":"disc","level":"T13-T12"}}`, "problem.level"},
		{"sedation", `{"species":"dog","sedation":"very"}`, "sedation"},
		{"aid", `{"species":"dog","aid":"skates"}`, "aid"},
		{"precaution", `{"species":"dog","precautions":["gravity"]}`, "precautions[0]"},
		{"findings no list", `{"species":"dog","findings":{}}`, "findings"},
		{"finding no object", `{"species":"dog","findings":[3]}`, "findings[0]"},
	} {
		t.Run(tt.name, func(t *testing.T) {
			_, _, err := DecodeFile([]byte(tt.in))
			require.ErrorContains(t, err, tt.want)
			var in *Invalid
			require.ErrorAs(t, err, &in, "a refusal names its place")
		})
	}
}

func TestDecodeFileTolerates(t *testing.T) {
	f, warn, err := DecodeFile([]byte(`{"species":"cat","id":"case-7","source":"x","weight_kg":null,"examined":null,"problem":null,
		"findings":[{"item":"patellar","site":"pelvic-left","grade":null,"implied":true},{"item":"patellar","site":"pelvic-right","grade":2,"implied":true,"level":null,"not_tested":null},
		{"item":"mentation","grade":3},{"item":"gag","site":"midline","not_tested":"asleep in the crate"}],
		"measures":[{"measure":"temperature","value":38.5},{"measure":"steps-scored","site":"pelvic-left","value":20}]}`))
	require.NoError(t, err)
	require.Equal(t, []string{
		`id "case-7" is no UUID and was ignored`,
		`measures[0].unit is not given; the value was read as °C`,
		`field "findings.implied" is not known and was ignored (2 times)`,
		`field "source" is not known and was ignored`,
	}, warn)
	require.True(t, f.ID.IsZero())
	g, _ := f.Visit(ID{}).Find(Key{Item: Gag, Site: Midline})
	require.Equal(t, OtherReason, g.Result.Reason())
	require.Equal(t, "asleep in the crate", g.Note)
	l, _ := f.Visit(ID{}).Find(Key{Item: Patellar, Site: PelvicLeft})
	require.False(t, l.Result.Tested())
}

// The 36 published cases (each file names its source) are read; what they add is ignored by name.
func TestPublishedCasesAreRead(t *testing.T) {
	paths, err := filepath.Glob("testdata/cases/*.json")
	require.NoError(t, err)
	require.Len(t, paths, 36)
	known := map[string]bool{"source": true, "truth": true, "notes": true, "remainder_normal": true, "findings.implied": true, "findings.severity_unstated": true}
	n := 0
	for _, path := range paths {
		data, err := os.ReadFile(path)
		require.NoError(t, err)
		f, warn, err := DecodeFile(data)
		require.NoError(t, err, path)
		for _, w := range warn {
			if !strings.HasPrefix(w, "id ") {
				require.True(t, known[strings.Split(w, `"`)[1]], "%s: %s", path, w)
			}
		}
		n += len(f.Findings)
	}
	require.Equal(t, 422, n, "findings counted in the files by another program")
}

func TestDecodeSeries(t *testing.T) {
	one := `{"species":"dog","examined":"2026-03-09T10:00:00Z","examiner":"A","findings":[]}`
	two := `{"species":"dog","examined":"2026-03-02T10:00:00Z","examiner":"A","findings":[]}`
	fs, _, err := DecodeSeries([]byte("[" + one + "," + two + "]"))
	require.NoError(t, err)
	require.Len(t, fs, 2)
	require.True(t, fs[0].Examined.Before(fs[1].Examined), "oldest first")
	for in, want := range map[string]string{
		`{}`:                                 "a list of exams",
		`[{"species":"dog","examiner":"A"}]`: "[0].examined",
		`[{"species":"dog","examined":"2026-03-09T10:00:00Z"}]`:           "[0].examiner",
		"[" + one + "," + strings.Replace(two, "dog", "cat", 1) + "]":     "[1].species",
		"[" + one + `,{"species":"dog","findings":[{"item":"patelar"}]}]`: "[1].findings[0].item",
		`[`: "line 1",
	} {
		_, _, err := DecodeSeries([]byte(in))
		require.ErrorContains(t, err, want)
	}
}

func FuzzDecodeFile(f *testing.F) {
	f.Add([]byte(sample))
	f.Add([]byte(`{"species":"cat","findings":[{"item":"gag","not_tested":"x"}],"measures":[{"measure":"weight","value":1e-1,"unit":"kg"}]}`))
	paths, _ := filepath.Glob("testdata/cases/*.json")
	for _, p := range paths {
		if b, err := os.ReadFile(p); err == nil {
			f.Add(b)
		}
	}
	f.Fuzz(func(t *testing.T, b []byte) {
		x, _, err := DecodeFile(b)
		if err != nil {
			return
		}
		if err := x.Visit(ID{}).Validate(x.Species); err != nil && !x.Examined.IsZero() && x.Examiner != "" {
			t.Fatalf("a file that was read makes a visit that is refused: %v", err)
		}
		out, err := EncodeFile(x)
		if err != nil {
			t.Fatalf("a file that was read cannot be written: %v", err)
		}
		y, _, err := DecodeFile(out)
		if err != nil {
			t.Fatal(err)
		}
		again, err := EncodeFile(y)
		if err != nil || string(again) != string(out) {
			t.Fatalf("writing twice differs:\n%s\n%s", out, again)
		}
	})
}

// An exam file of each version is read for ever.
func TestFileOfEachVersion(t *testing.T) {
	for v := 1; v <= FileVersion; v++ {
		data, err := os.ReadFile(filepath.Join("testdata", "versions", "exam-v"+strconv.Itoa(v)+".json"))
		require.NoError(t, err, "a file of version %d must be kept", v)
		f, warn, err := DecodeFile(data)
		require.NoError(t, err)
		require.Empty(t, warn)
		require.Len(t, f.Findings, 6)
		require.Len(t, f.Measures, 2)
		require.Equal(t, "R. Okafor", f.Examiner)
		marked, _, err := DecodeFile(append([]byte("\ufeff"), data...))
		require.NoError(t, err)
		require.Equal(t, f, marked)
	}
}
