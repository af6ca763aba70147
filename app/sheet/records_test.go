package sheet

import (
	"bytes"
	"encoding/binary"
	"encoding/json"
	"image"
	"image/png"
	"slices"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"
	"github.com/santhosh-tekuri/jsonschema/v6"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
)

// anyText draws texts that files must survive: quotes, formulas, other scripts, line ends.
func anyText(t *rapid.T, label string) string {
	return rapid.OneOf(
		rapid.SampledFrom([]string{"", "plain words", `say "no", twice`, "=1+1", "+43 1 555", "-5", "@sum", "\tx", "Ελένη Łucja Ёж", "two\nlines", "<b>&</b>", "'quoted"}),
		rapid.StringMatching(`[a-zA-Z ,;"'=+@\-]{0,24}`),
	).Draw(t, label)
}

// made counts the ids made by anyID.
var made atomic.Uint64

func anyID(t *rapid.T) exam.ID {
	id := exam.ID(rapid.SliceOfN(rapid.Byte(), 16, 16).Draw(t, "id"))
	id[6] |= 0x70 // never the zero id
	// No two ids of one run are equal, as none are in life.
	binary.BigEndian.PutUint64(id[8:], made.Add(1))
	return id
}

func anyDate(t *rapid.T) exam.Date {
	return rapid.SampledFrom([]exam.Date{"", "2019", "2026-03", "2026-03-02", "2028-02-29"}).Draw(t, "date")
}

func anyTime(t *rapid.T) time.Time {
	z := time.FixedZone("", rapid.SampledFrom([]int{0, 3600, -18000, 20700}).Draw(t, "offset"))
	return time.Unix(rapid.Int64Range(0, 4_000_000_000).Draw(t, "s"), rapid.Int64Range(0, 999_999_999).Draw(t, "ns")).In(z)
}

func anyContact(t *rapid.T) exam.Contact {
	return exam.Contact{Name: anyText(t, "name"), Phone: anyText(t, "phone"), Email: anyText(t, "email"), Address: anyText(t, "address")}
}

func anyFinding(t *rapid.T, s exam.Species) exam.Finding {
	i := rapid.SampledFrom(exam.Items()).Draw(t, "item")
	f := exam.Finding{Item: i, Site: rapid.SampledFrom(i.Info().Sites).Draw(t, "site"), Seen: rapid.Bool().Draw(t, "seen"),
		How: exam.How(rapid.IntRange(0, 2).Draw(t, "how")), Block: anyText(t, "block"), Note: anyText(t, "note")}
	if rapid.Bool().Draw(t, "tested") {
		f.Result = exam.Graded(rapid.Int8Range(i.Info().First, i.Last()).Draw(t, "grade"))
	} else {
		f.Result = exam.Untested(exam.Reason(rapid.IntRange(0, int(exam.OtherReason)).Draw(t, "reason")))
	}
	if i.Has(exam.TakesDigit) {
		f.Digit = exam.Digit(rapid.IntRange(0, 2).Draw(t, "digit"))
	}
	if i.Has(exam.TakesJoint) {
		f.Joint = exam.Joint(rapid.IntRange(0, int(exam.Digits)).Draw(t, "joint"))
	}
	if i.Has(exam.TakesLevel) {
		f.Level = rapid.SampledFrom(append(exam.Vertebrae(s), 0)).Draw(t, "level")
	}
	if i.Has(exam.TakesSide) {
		f.Side = rapid.SampledFrom([]exam.Site{exam.NoSite, exam.Left, exam.Right}).Draw(t, "side")
	}
	return f
}

func anyMeasured(t *rapid.T) exam.Measured {
	m := exam.Measured{Measure: rapid.SampledFrom(exam.Measures()).Draw(t, "measure"), Position: anyText(t, "position"), Clipped: rapid.Bool().Draw(t, "clipped"), EndFeel: anyText(t, "feel"),
		Motion: rapid.SampledFrom([]string{"", "flexion", "extension"}).Draw(t, "motion"), Joint: exam.Joint(rapid.IntRange(0, int(exam.Digits)).Draw(t, "joint")),
		At: rapid.Float64Range(0, 100).Draw(t, "at"), Variant: anyText(t, "variant"), BestEnd: rapid.Float64Range(0, 20).Draw(t, "best"), Note: anyText(t, "note")}
	in := m.Measure.Info()
	if len(in.Sites) > 0 {
		m.Site = rapid.SampledFrom(in.Sites).Draw(t, "site")
	}
	if in.Whole {
		m.Value = float64(rapid.IntRange(int(in.Min), int(in.Max)).Draw(t, "value"))
	} else {
		m.Value = rapid.Float64Range(in.Min, in.Max).Draw(t, "value")
	}
	if m.Measure == exam.RangeOfMotion {
		m.Joint, m.Motion = exam.Hock, "flexion"
	}
	if m.Validate() != nil { // rules of single measures: keep what all of them allow
		m = exam.Measured{Measure: m.Measure, Site: m.Site, Value: m.Value, Note: m.Note}
	}
	return m
}

func anyVisit(t *rapid.T, s exam.Species, patient exam.ID) exam.Visit {
	v := exam.Visit{ID: anyID(t), Patient: patient, Examined: anyTime(t), Zone: "Europe/Vienna", Examiner: "E " + anyText(t, "examiner"), Protocol: anyText(t, "protocol"),
		Sedation: exam.Sedation(rapid.IntRange(0, 3).Draw(t, "sedation")), Aid: rapid.SampledFrom(append(exam.AidWords(), "")).Draw(t, "aid"),
		Surface: rapid.SampledFrom(append(exam.SurfaceWords(), "")).Draw(t, "surface"), Session: rapid.SampledFrom(append(exam.SessionWords(), "")).Draw(t, "session"),
		Note: anyText(t, "note"), NextVisit: anyDate(t)}
	if rapid.Bool().Draw(t, "closed") {
		v.State, v.ClosedAt = exam.Closed, anyTime(t)
		v.Amendments = []exam.Amendment{{Field: "note", Reason: anyText(t, "why"), Examiner: anyText(t, "who"), At: anyTime(t)}}
	}
	if rapid.Bool().Draw(t, "repeat") {
		v.RepeatOf = anyID(t)
	}
	for range rapid.IntRange(0, 6).Draw(t, "findings") {
		f := anyFinding(t, s)
		if _, there := v.Find(f.Key()); !there {
			v.Findings = append(v.Findings, f)
		}
	}
	for range rapid.IntRange(0, 3).Draw(t, "measures") {
		m := anyMeasured(t)
		if !slices.ContainsFunc(v.Measures, func(x exam.Measured) bool { return x.Key() == m.Key() }) {
			v.Measures = append(v.Measures, m)
		}
	}
	if rapid.Bool().Draw(t, "rest") {
		v.Doses = []exam.DoseGiven{{Medicine: anyText(t, "medicine"), Hours: rapid.Float64Range(0, 200).Draw(t, "hours")}}
		v.Treatments = []exam.Treatment{{ID: anyID(t), Kind: "massage", Site: "left", Params: anyText(t, "params"), Minutes: rapid.Float64Range(0, 90).Draw(t, "minutes"), Override: anyText(t, "override")}}
		v.Home = []exam.HomeExercise{{ID: anyID(t), Kind: "walk", How: anyText(t, "how"), Times: 3, DaysWeek: 5, Amount: anyText(t, "amount"), StopFor: anyText(t, "stop"), Override: anyText(t, "o")}}
		v.Report = exam.OwnerReport{Falls: anyText(t, "falls"), Urine: anyText(t, "urine"), Appetite: anyText(t, "appetite"), ExercisesDone: 3, ExercisesSet: 5, Words: anyText(t, "words")}
		v.Attachments = []exam.Attachment{{ID: anyID(t), Name: "00ff.att", Format: "jpeg", Size: rapid.Int64Range(1, 1<<27).Draw(t, "size"), Note: anyText(t, "shows")}}
		v.Stim = []exam.StimRecord{{ID: anyID(t), Kind: "test", Data: `{"muscle":"quadriceps"}`}, {ID: anyID(t), Kind: "session", Data: `{"minutes":12}`}}
		v.Answers = []exam.Acknowledgement{{Rule: "r", Told: anyText(t, "told"), Note: anyText(t, "n"), Examiner: "e", At: anyTime(t)}}
	}
	return v
}

func anyAnimal(t *rapid.T) Animal {
	p := exam.Patient{ID: anyID(t), Name: "A" + anyText(t, "name"), Species: rapid.SampledFrom(exam.AllSpecies()).Draw(t, "species"), Breed: anyText(t, "breed"), Sex: exam.Sex(rapid.IntRange(0, 2).Draw(t, "sex")),
		Neutered: rapid.Bool().Draw(t, "neutered"), Born: anyDate(t), Owner: anyContact(t), Veterinarian: anyContact(t), OutOfHours: anyContact(t),
		Referral: exam.Referral{By: anyText(t, "by"), Until: anyDate(t), Limits: anyText(t, "limits")}, Status: exam.Status(rapid.IntRange(0, 2).Draw(t, "status")), StatusSince: anyDate(t),
		RecheckDays: rapid.IntRange(0, 60).Draw(t, "days"), Note: anyText(t, "note"), Demo: rapid.Bool().Draw(t, "demo")}
	for range rapid.IntRange(0, 2).Draw(t, "problems") {
		p.Problems = append(p.Problems, exam.Problem{ID: anyID(t), Diagnosis: "d" + anyText(t, "diagnosis"), Level: rapid.SampledFrom([]string{"", "L1", "T12-L1"}).Draw(t, "level"), Side: rapid.SampledFrom([]string{"", "left", "right"}).Draw(t, "side"), Onset: anyDate(t), Surgery: anyDate(t), Resolved: anyDate(t), Note: anyText(t, "note")})
	}
	if rapid.Bool().Draw(t, "more") {
		p.Precautions = []exam.PrecautionOn{{ID: anyID(t), Code: "implant", Site: "lumbar", Since: anyDate(t), Until: anyDate(t), Note: anyText(t, "note")}}
		p.Goals = []exam.Goal{{ID: anyID(t), Words: anyText(t, "words"), Item: "ambulation", Site: "midline", Target: 2, By: anyDate(t), Reached: anyDate(t)}}
		p.Medicines = []exam.Medicine{{ID: anyID(t), Name: anyText(t, "name"), Dose: anyText(t, "dose"), Start: anyDate(t), Stop: anyDate(t)}}
		p.Sent = []exam.Sent{{ID: anyID(t), Visit: anyID(t), At: anyTime(t), Kind: "sheet", Examiner: anyText(t, "examiner"), Language: "de", Summary: anyText(t, "summary"),
			Reworded: rapid.Bool().Draw(t, "reworded"), Hash: "ab12", Note: anyText(t, "note")}}
		p.Weights = []exam.WeightPoint{{At: anyTime(t), Kg: rapid.Float64Range(0.5, 90).Draw(t, "kg")}}
	}
	a := Animal{Patient: p}
	for range rapid.IntRange(0, 3).Draw(t, "visits") {
		a.Visits = append(a.Visits, anyVisit(t, p.Species, p.ID))
	}
	return a
}

func anyChange(t *rapid.T) change.Change {
	ids := func(n int) []change.ID {
		var out []change.ID
		for range n {
			out = append(out, change.ID(anyID(t)))
		}
		slices.SortFunc(out, func(a, b change.ID) int { return a.Compare(b) })
		return slices.Compact(out)
	}
	c := change.Change{ID: change.ID(anyID(t)), Examiner: anyText(t, "examiner"), Time: change.HLC(rapid.Uint64().Draw(t, "time")),
		Kind: change.KindVisit, Patient: anyID(t), Record: anyID(t), Field: "finding/patellar/pelvic-left", Value: rapid.SliceOfN(rapid.Byte(), 1, 40).Draw(t, "value"),
		Supersedes: ids(rapid.IntRange(0, 3).Draw(t, "n")), Reason: "why", Act: change.Act(rapid.IntRange(0, 6).Draw(t, "act")), Seen: ids(rapid.IntRange(0, 2).Draw(t, "m"))}
	if rapid.Bool().Draw(t, "cleared") {
		c.Value = nil
	}
	copy(c.Stream.Device[:], rapid.SliceOfN(rapid.Byte(), 16, 16).Draw(t, "device"))
	return c
}

// sameRecords compares without regard to how a time's zone is called.
var sameRecords = cmp.Options{
	cmp.Comparer(func(a, b time.Time) bool {
		_, x := a.Zone()
		_, y := b.Zone()
		return a.Equal(b) && x == y
	}),
	cmp.Comparer(func(a, b exam.Result) bool { return a == b }),
}

// testLogo makes a PNG of a size.
func testLogo(w, h int) []byte {
	img := image.NewGray(image.Rect(0, 0, w, h))
	for i := range img.Pix {
		img.Pix[i] = byte(i)
	}
	var b bytes.Buffer
	if err := png.Encode(&b, img); err != nil {
		panic(err)
	}
	return b.Bytes()
}

func recordsSchema(t testing.TB) *jsonschema.Schema {
	t.Helper()
	doc, err := jsonschema.UnmarshalJSON(bytes.NewReader(RecordsSchema))
	require.NoError(t, err)
	c := jsonschema.NewCompiler()
	require.NoError(t, c.AddResource("records.json", doc))
	s, err := c.Compile("records.json")
	require.NoError(t, err)
	return s
}

// TestRecordsLoseNothing: whatever is exported comes back equal, exports to the same bytes
// again, and follows the documented schema.
func TestRecordsLoseNothing(t *testing.T) {
	schema := recordsSchema(t)
	rapid.Check(t, func(t *rapid.T) {
		r := Records{Made: anyTime(t), Practice: exam.Practice{Name: anyText(t, "practice"), Contact: anyContact(t), Zone: "Europe/Vienna", Language: "en", Paper: "Letter", Pounds: true,
			Examiners: []exam.Examiner{{ID: anyID(t), Name: "R. Okafor", Initials: "RO"}}, Protocols: []exam.Protocol{{Key: "own", Name: anyText(t, "p"), Items: []string{"patellar"}}}, Demo: true}}
		if rapid.Bool().Draw(t, "own words") {
			r.Practice.Phrases = []exam.Phrase{{Key: "keep-on", Language: "de", Words: "Weiter so."}, {Key: "same", Language: "en", Words: "%s: nothing new."}}
			r.Practice.Logo = testLogo(40, 20)
		}
		for range rapid.IntRange(0, 2).Draw(t, "animals") {
			r.Animals = append(r.Animals, anyAnimal(t))
		}
		for range rapid.IntRange(0, 3).Draw(t, "changes") {
			r.Changes = append(r.Changes, anyChange(t))
		}
		for range rapid.IntRange(0, 2).Draw(t, "keys") {
			if r.OwnerKeys == nil {
				r.OwnerKeys = map[exam.ID][]byte{}
			}
			r.OwnerKeys[anyID(t)] = rapid.SliceOfN(rapid.Byte(), 32, 32).Draw(t, "key")
		}
		var first bytes.Buffer
		if err := EncodeRecords(&first, r); err != nil {
			t.Fatal(err)
		}
		back, warnings, err := DecodeRecords(bytes.NewReader(first.Bytes()))
		if err != nil || len(warnings) > 0 {
			t.Fatal(err, warnings)
		}
		if d := cmp.Diff(r, back, sameRecords); d != "" {
			t.Fatal(d)
		}
		var second bytes.Buffer
		if err := EncodeRecords(&second, back); err != nil {
			t.Fatal(err)
		}
		if !bytes.Equal(first.Bytes(), second.Bytes()) {
			t.Fatal("two exports differ")
		}
		doc, err := jsonschema.UnmarshalJSON(bytes.NewReader(first.Bytes()))
		if err != nil {
			t.Fatal(err)
		}
		if err := schema.Validate(doc); err != nil {
			t.Fatal(err)
		}
	})
}

func TestRecordsKeepNoPINs(t *testing.T) {
	var buf bytes.Buffer
	require.NoError(t, EncodeRecords(&buf, Records{Practice: exam.Practice{Name: "x", Examiners: []exam.Examiner{{Name: "R. Okafor", PINHash: "secret"}}}}))
	assert.NotContains(t, buf.String(), "secret")
	assert.NotContains(t, buf.String(), "pin")
}

func TestRecordsLeaveAuditOut(t *testing.T) {
	var buf bytes.Buffer
	require.NoError(t, EncodeRecords(&buf, Records{Changes: []change.Change{{ID: change.NewID(), Kind: change.KindAudit, Field: "looked"}, {ID: change.NewID(), Kind: change.KindView, Field: "looked"}, {ID: change.NewID(), Kind: change.KindPractice, Field: "looked"}}}))
	assert.NotContains(t, buf.String(), "looked")
}

// TestRecordsCannotChangeThePractice: a file cannot bring in changes of settings or devices.
func TestRecordsCannotChangeThePractice(t *testing.T) {
	for _, kind := range []string{"1", "5", "6", "9"} {
		_, _, err := DecodeRecords(strings.NewReader(`{"format":"cordwalk-records","version":1,"animals":[],"changes":[{"id":"01936c1e-5d2a-7c41-9a40-6f1f2b7c9d10","device":"00112233445566778899aabbccddeeff","time":"1","kind":` + kind +
			`,"patient":"00000000-0000-0000-0000-000000000000","record":"00000000-0000-0000-0000-000000000000","field":"name","value":"AQ=="}]}`))
		assert.ErrorContains(t, err, "changes[0]: kind", kind)
	}
}

func TestRecordsThatAreWrong(t *testing.T) {
	var good bytes.Buffer
	in := patients()["recovery"]
	require.NoError(t, EncodeRecords(&good, Records{Practice: in.Practice, Animals: []Animal{{in.Patient, in.Visits}}}))
	for _, tt := range []struct{ name, old, new, says string }{
		{"not JSON", `"version"`, `version`, "line 3"},
		{"another format", `"cordwalk-records"`, `"something"`, "something"},
		{"newer", `"version": 1`, `"version": 2`, "newer version"},
		{"no version", `"version": 1`, `"versio": 1`, "no version"},
		{"species", `"species": "dog"`, `"species": "dodo"`, `animals[0].patient: species: "dodo"`},
		{"item", `"item": "voluntary-motor"`, `"item": "voluntary-moto"`, `perhaps voluntary-motor`},
		{"grade", `"grade": 4`, `"grade": 9`, `animals[0].visits[0]`},
		{"time", `"examined": "2026-03-02T10:15:00+01:00"`, `"examined": "yesterday"`, `animals[0].visits[0].examined: time: "yesterday"`},
		{"kind of value", `"recheck_days"`, `"demo": "yes", "recheck_days"`, "demo"},
	} {
		t.Run(tt.name, func(t *testing.T) {
			text := strings.Replace(good.String(), tt.old, tt.new, 1)
			if tt.name == "kind of value" {
				text = strings.Replace(good.String(), `"demo": true`, `"demo": "yes"`, 1)
			}
			_, _, err := DecodeRecords(strings.NewReader(text))
			assert.ErrorContains(t, err, tt.says)
		})
	}
	_, warnings, err := DecodeRecords(strings.NewReader(strings.Replace(good.String(), `"breed"`, `"colour": "red", "breed"`, 1)))
	require.NoError(t, err)
	assert.Equal(t, []string{`the field "colour" is not known and was ignored`}, warnings)
}

func FuzzDecodeRecords(f *testing.F) {
	var good bytes.Buffer
	in := patients()["recovery"]
	if err := EncodeRecords(&good, Records{Practice: in.Practice, Animals: []Animal{{in.Patient, in.Visits}}}); err != nil {
		f.Fatal(err)
	}
	f.Add(good.Bytes())
	f.Add([]byte(`{"format":"cordwalk-records","version":1,"animals":[{"patient":{},"visits":[{}]}]}`))
	f.Fuzz(func(t *testing.T, b []byte) {
		r, _, err := DecodeRecords(bytes.NewReader(b))
		if err != nil {
			return
		}
		var out bytes.Buffer
		if err := EncodeRecords(&out, r); err != nil {
			t.Fatal(err)
		}
		if !json.Valid(out.Bytes()) {
			t.Fatal("no JSON")
		}
	})
}
