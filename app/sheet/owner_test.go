package sheet

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"flag"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
)

var keep = flag.String("keep", "", "a folder to keep the papers of the tests in, to look at them")

// id makes a fixed id for the tests.
func id(n int) exam.ID { var x exam.ID; x[0], x[15] = 1, byte(n); x[14] = byte(n >> 8); return x }

var zone = time.FixedZone("", 3600)

func at(day int) time.Time {
	return time.Date(2026, 3, 2, 10, 15, 0, 0, zone).AddDate(0, 0, day)
}

// motor makes a visit with the motor grades of the four limbs, -1 for not tested, and walking.
func motor(n, day int, walk int8, limbs ...int8) exam.Visit {
	v := exam.Visit{ID: id(100 + n), Patient: id(1), Examined: at(day), Zone: "Europe/Vienna", Examiner: "R. Okafor", Aid: "none", Surface: "grip", Session: "before"}
	add := func(i exam.Item, s exam.Site, g int8) {
		if g >= 0 {
			v.Findings = append(v.Findings, exam.Finding{Item: i, Site: s, Result: exam.Graded(g)})
		}
	}
	add(exam.Ambulation, exam.Midline, walk)
	for i, s := range exam.Limbs() {
		add(exam.VoluntaryMotor, s, limbs[i])
	}
	return v
}

func with(v exam.Visit, item exam.Item, site exam.Site, grade int8) exam.Visit {
	v.Findings = append(v.Findings, exam.Finding{Item: item, Site: site, Result: exam.Graded(grade)})
	return v
}

func practice() exam.Practice {
	return exam.Practice{Name: "Riverbend Animal Rehabilitation", Zone: "Europe/Vienna", Language: "en", Paper: "A4", Demo: true,
		Contact:    exam.Contact{Name: "Riverbend Animal Rehabilitation", Phone: "+43 1 555 0142", Email: "desk@riverbend.example", Address: "12 Mill Lane, 1090 Vienna"},
		OutOfHours: exam.Contact{Name: "Night clinic at the Old Gate", Phone: "+43 1 555 0199"}}
}

func home() []exam.HomeExercise {
	return []exam.HomeExercise{
		{ID: id(501), Kind: "help-to-stand", Times: 3, DaysWeek: 7, Amount: "5 minutes", How: "Hold the hips up with a towel so that the paws stand flat.", StopFor: "the legs shake or your dog wants to lie down"},
		{ID: id(502), Kind: "gentle-push", Times: 2},
		{ID: id(503), Kind: "slow-walk", Times: 1, DaysWeek: 5, Amount: "5 minutes on flat ground"},
	}
}

// patients are invented animals like those of the demo practice, one for each course.
func patients() map[string]Input {
	base := func(name string, s exam.Species, breed string) exam.Patient {
		return exam.Patient{ID: id(1), Name: name, Species: s, Breed: breed, Sex: exam.Female, Neutered: true, Born: "2019-05", Demo: true,
			Owner: exam.Contact{Name: "Mara Lindqvist", Phone: "+43 1 555 0107"}, Veterinarian: exam.Contact{Name: "Dr Anselm Brook, Brook Street Surgery", Phone: "+43 1 555 0123"}}
	}
	out := map[string]Input{}
	put := func(key string, p exam.Patient, visits ...exam.Visit) {
		out[key] = Input{Practice: practice(), Patient: p, Visits: visits, At: at(70).Add(3 * time.Hour)}
	}

	p := base("Bruno", exam.Dog, "Dachshund")
	p.Problems = []exam.Problem{{ID: id(2), Diagnosis: "disc extrusion", Level: "T12-T13", Onset: "2026-02-11", Surgery: "2026-02-12"}}
	p.Goals = []exam.Goal{{ID: id(3), Words: "Walks ten steps alone", Item: "ambulation", Target: 2, By: "2026-05-04"}, {ID: id(4), Words: "Stands for two minutes", Measure: "stand-time", Target: 120, Reached: "2026-04-13"}}
	vs := []exam.Visit{motor(0, 0, 0, 4, 4, 0, 1), motor(1, 7, 0, 4, 4, 1, 1), motor(2, 14, 1, 4, 4, 1, 2), motor(3, 28, 1, 4, 4, 2, 2), motor(4, 42, 2, 4, 4, 2, 3), motor(5, 63, 2, 4, 4, 3, 3)}
	vs[4] = with(with(vs[4], exam.VoluntaryUrination, exam.Midline, 1), exam.SpinalPain, exam.Thoracolumbar, 1)
	vs[5] = with(with(vs[5], exam.VoluntaryUrination, exam.Midline, 2), exam.SpinalPain, exam.Thoracolumbar, 0)
	vs[5].Home, vs[5].NextVisit = home(), "2026-05-11"
	put("recovery", p, vs...)

	p = base("Juniper", exam.Cat, "Domestic Shorthair")
	vs = []exam.Visit{motor(0, 0, 2, 4, 4, 3, 3), motor(1, 14, 2, 4, 4, 3, 3)}
	for i := range vs {
		vs[i] = with(with(vs[i], exam.TailTone, exam.Midline, int8(i)), exam.FaecalContinence, exam.Midline, 1)
	}
	vs[1].Home, vs[1].NextVisit = home()[1:2], "2026-03-23"
	put("tail-pull", p, vs...)

	p = base("Odin", exam.Dog, "German Shepherd Dog")
	vs = []exam.Visit{motor(0, 0, 2, 4, 4, 3, 3), motor(1, 28, 2, 4, 4, 3, 2), motor(2, 56, 1, 4, 4, 2, 2)}
	vs[2].Surface, vs[2].Home = "slick", home()[:1]
	put("going-down", p, vs...)

	p = base("Pixel", exam.Dog, "Border Collie")
	vs = []exam.Visit{motor(0, 0, 2, 1, 4, 4, 4), motor(1, 10, 2, -1, 4, 4, 4)}
	vs[1].Home = home()[:1]
	put("plexus", p, vs...)

	p = base("Saffron", exam.Cat, "Siamese")
	put("first-visit", p, with(motor(0, 0, 1, 4, 4, 2, 1), exam.VoluntaryUrination, exam.Midline, 0))

	p = base("Bruno", exam.Dog, "Dachshund")
	in := out["recovery"]
	in.Visits = append(append([]exam.Visit(nil), in.Visits...), with(motor(6, 66, 0, 4, 4, 1, 1), exam.SpinalPain, exam.Thoracolumbar, 3))
	in.Visits[6].Home = home()[:1]
	in.Notices = []Notice{{Urgency: Now, Plain: "Bruno can no longer walk alone.", Words: "Ambulation fell from 2 to 0.", Since: at(66)}, {Urgency: Today, Plain: "There is strong pain in the back.", Since: at(66)}}
	out["relapse"] = in

	p = base("Wolfgang Amadeus Maximilian von Hohenbergen-Silberstein the Third", exam.Dog, "Petit Basset Griffon Vendéen × Nova Scotia Duck Tolling Retriever")
	p.Veterinarian = exam.Contact{Name: "Dr Bartholomew Featherstonehaugh-Cholmondeley, Centre for Small Animal Neurology and Rehabilitation", Phone: "+43 (0)1 555 0123 ext. 4567"}
	p.Goals = []exam.Goal{{Words: "Climbs the three steps at the front door without help and without falling over"}, {Words: "Stands"}, {Words: "Wags"}, {Words: "Swims"}, {Words: "Runs", By: "2026-09"}}
	vs = []exam.Visit{motor(0, 0, 0, 3, 3, 0, 1), motor(1, 7, 1, 2, 4, 1, -1)}
	for i, k := range []string{"leg-cycling", "toe-tickle", "gentle-rubbing", "help-to-stand", "sling-walk", "treat-stretch", "turning", "skin-check", "bladder-care", "paw-brushing"} {
		vs[1].Home = append(vs[1].Home, exam.HomeExercise{ID: id(510 + i), Kind: k, Times: 1 + i%4, Amount: "10 minutes", How: "Do this slowly and with care. Keep the back straight and the paws flat on the ground. Praise often and rest between rounds.", StopFor: "your dog cries, shakes, pants hard or wants to lie down"})
	}
	vs[1].NextVisit = "2026-03-16"
	pr := practice()
	pr.Name = "The Very Long Established Centre for Rehabilitation and Hydrotherapy of Small Animals at the Southern Riverbank"
	pr.Contact.Address = "Building 14, Upper Courtyard, 1234 Old Riverbank Promenade and Gardens, 1090 Vienna, Austria"
	out["long"] = Input{Practice: pr, Patient: p, Visits: vs, At: at(70), Notices: nil}
	return out
}

// looks are the ways every patient's sheet is tried.
func looks() map[string]Options {
	return map[string]Options{
		"a4": {Paper: "A4"}, "letter": {Paper: "Letter"}, "large": {Paper: "A4", Large: true}, "large-letter": {Paper: "Letter", Large: true},
		"grey": {Paper: "A4", Grey: true}, "no-chart": {Paper: "Letter", NoChart: true},
	}
}

// run calls a poppler tool on a PDF.
func run(t testing.TB, pdf []byte, tool string, args ...string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "paper.pdf")
	require.NoError(t, os.WriteFile(path, pdf, 0o644))
	for i, a := range args {
		if a == "FILE" {
			args[i] = path
		}
	}
	out, err := exec.Command(tool, args...).CombinedOutput()
	require.NoError(t, err, "%s (poppler-utils): %s", tool, out)
	return string(out)
}

// textOf returns the text of a PDF with its white space evened out.
func textOf(t testing.TB, pdf []byte) string {
	return strings.Join(strings.Fields(run(t, pdf, "pdftotext", "-raw", "FILE", "-")), " ")
}

func keepPaper(t testing.TB, name string, pdf []byte) {
	if *keep != "" {
		require.NoError(t, os.MkdirAll(*keep, 0o755))
		require.NoError(t, os.WriteFile(filepath.Join(*keep, name+".pdf"), pdf, 0o644))
	}
}

// forbidden may never stand on an owner's sheet: a likely site, a share, a segment.
var forbidden = regexp.MustCompile(`%|\b(likely|probab|segment|lesion|L[1-7]\b|S[1-3]\b|T1?[0-9]\b)`)

func TestOwnerSheetOfEveryPatientInEveryLook(t *testing.T) {
	for name, in := range patients() {
		for look, opt := range looks() {
			t.Run(name+"/"+look, func(t *testing.T) {
				in := in
				in.Options = opt
				doc, err := Owner(in)
				require.NoError(t, err)
				keepPaper(t, name+"-"+look, doc.PDF)
				info := run(t, doc.PDF, "pdfinfo", "FILE")
				assert.Regexp(t, `Pages: +1\n`, info)
				assert.Contains(t, info, "Title:")
				if opt.Paper == "Letter" {
					assert.Contains(t, info, "(letter)")
				} else {
					assert.Contains(t, info, "(A4)")
				}
				text := textOf(t, doc.PDF)
				for _, want := range []string{"does not take the place of your veterinarian", "Give no medicine your veterinarian did not prescribe",
					"human painkillers", in.Patient.Veterinarian.Phone, "+43 1 555 0199", "Call the vet at once if", "Demo", "Next visit"} {
					assert.Contains(t, text, want)
				}
				for _, sign := range callSigns { // what keeps the animal safe is never cut
					for _, w := range strings.Fields(sign) {
						assert.Contains(t, text, w)
					}
				}
				assert.NotRegexp(t, forbidden, text)
				doc.Warnings = slices.DeleteFunc(doc.Warnings, func(w string) bool { return strings.Contains(w, " needs thought: ") })
				if name == "long" { // ten exercises and long names: what was cut is said
					for _, w := range doc.Warnings {
						assert.Contains(t, w, "did not fit on the page")
					}
					assert.Equal(t, opt.Large, slices.ContainsFunc(doc.Warnings, func(w string) bool { return strings.Contains(w, "exercises did not fit") }))
				} else {
					assert.Empty(t, doc.Warnings)
				}
				for _, line := range strings.Split(strings.TrimSpace(run(t, doc.PDF, "pdffonts", "FILE")), "\n")[2:] {
					assert.Regexp(t, `Identity-H +yes (yes|no) +yes`, line)
				}
				assert.NotContains(t, run(t, doc.PDF, "pdfimages", "-list", "FILE"), "image ", "charts are drawn, not pictures")
				again, err := Owner(in)
				require.NoError(t, err)
				assert.True(t, bytes.Equal(doc.PDF, again.PDF), "the same input gives the same bytes")
				ease, ok := Reading("en", doc.Prose)
				require.True(t, ok)
				assert.GreaterOrEqual(t, ease.Score, 60.0, "reading ease; %d words, %d sentences, %d syllables", ease.Words, ease.Sentences, ease.Syllables)
			})
		}
	}
}

var wordBox = regexp.MustCompile(`<word xMin="([-0-9.]+)" yMin="([-0-9.]+)" xMax="([-0-9.]+)" yMax="([-0-9.]+)">`)

// insidePage looks at the boxes of all words: they lie on the paper with a margin.
func insidePage(t *testing.T, name string, pdf []byte, letter bool) {
	t.Helper()
	w, h := 595.28, 841.89
	if letter {
		w, h = 612, 792
	}
	found := wordBox.FindAllStringSubmatch(run(t, pdf, "pdftotext", "-bbox", "FILE", "-"), -1)
	require.Greater(t, len(found), 80)
	for _, m := range found {
		var x0, y0, x1, y1 float64
		for i, v := range []*float64{&x0, &y0, &x1, &y1} {
			_, err := fmt.Sscan(m[i+1], v)
			require.NoError(t, err)
		}
		if x0 < 20 || y0 < 10 || x1 > w-20 || y1 > h-10 {
			t.Errorf("%s: a word lies at %v of a page %v by %v", name, m[1:], w, h)
		}
	}
}

func TestNothingLeavesThePage(t *testing.T) {
	for name, in := range patients() {
		for look, opt := range looks() {
			in.Options = opt
			doc, err := Owner(in)
			require.NoError(t, err)
			insidePage(t, name+"/"+look, doc.PDF, opt.Paper == "Letter")
		}
	}
}

func TestWorseSaysTellYourVeterinarian(t *testing.T) {
	in := patients()["going-down"]
	doc, err := Owner(in)
	require.NoError(t, err)
	assert.Contains(t, textOf(t, doc.PDF), "weaker than on 30 March 2026: tell your veterinarian before more exercise")
	assert.Contains(t, strings.Join(doc.Prose, "\n"), "Both front legs, right back leg: the same as on 30 March 2026.")
}

func TestUntestedIsSaidAndNeverSame(t *testing.T) {
	doc, err := Owner(patients()["plexus"])
	require.NoError(t, err)
	all := strings.Join(doc.Prose, "\n")
	assert.Contains(t, all, "Left front leg: not tested today.")
	assert.Contains(t, all, "We did not test this today: left front leg.")
}

// TestUrgentComesFirst: open alerts stand first, and praise, goals, course and exercises give way.
func TestUrgentComesFirst(t *testing.T) {
	in := patients()["relapse"]
	doc, err := Owner(in)
	require.NoError(t, err)
	text := textOf(t, doc.PDF)
	assert.Contains(t, text, "Call your vet now")
	assert.Contains(t, text, "Bruno can no longer walk alone.")
	assert.Equal(t, 2, strings.Count(text, "No exercises until your veterinarian agrees."), "in the box and in place of the home plan")
	assert.NotContains(t, text, "towel")
	assert.NotContains(t, text, "keep up")
	assert.NotContains(t, text, "Goals")
	assert.Less(t, strings.Index(text, "Call your vet now"), strings.Index(text, "What we saw"))

	in.Notices[0].Told, in.Notices[1].Told = "Dr Brook", "Dr Brook" // answered: the plan stands again
	doc, err = Owner(in)
	require.NoError(t, err)
	assert.NotContains(t, textOf(t, doc.PDF), "No exercises until")
}

func TestNoSheet(t *testing.T) {
	for _, tt := range []struct {
		name string
		do   func(*Input)
		want error
		says string
	}{
		{"no phone", func(in *Input) { in.Patient.Veterinarian.Phone = "ask" }, ErrNoPhone, "treating veterinarian of Bruno"},
		{"discharged", func(in *Input) { in.Patient.Status = exam.Discharged }, ErrInactive, "discharged"},
		{"died", func(in *Input) { in.Patient.Status = exam.Died }, ErrInactive, "died"},
		{"no visit", func(in *Input) { in.Visits = nil }, ErrNoVisit, "no visit"},
	} {
		t.Run(tt.name, func(t *testing.T) {
			in := patients()["recovery"]
			tt.do(&in)
			doc, err := Owner(in)
			assert.True(t, errors.Is(err, tt.want), err)
			assert.ErrorContains(t, err, tt.says)
			assert.Nil(t, doc.PDF)
		})
	}
}

// TestExercisesThatHarmAreLeftOff: what the table of contraindications forbids today is not
// printed without a reason, and the caller is told.
func TestExercisesThatHarmAreLeftOff(t *testing.T) {
	in := patients()["going-down"]
	in.Visits[2].Home = home() // one of them for an animal that walks alone
	doc, err := Owner(in)
	require.NoError(t, err)
	require.NotEmpty(t, doc.Warnings)
	text := textOf(t, doc.PDF)
	assert.Contains(t, text, "Help to stand")
	assert.NotContains(t, text, "Gentle push")
	assert.Contains(t, strings.Join(doc.Warnings, "\n"), "Gentle push from side to side is left off the home plan: does not walk alone (Ambulation: steps only when held up, 2026-04-27); give a reason to keep it")
	in.Visits[2].Home[1].Override = "steadied by a second person"
	doc, err = Owner(in)
	require.NoError(t, err)
	assert.Contains(t, textOf(t, doc.PDF), "Gentle push")
	require.Len(t, doc.Noted, 1)
	assert.Contains(t, doc.Noted[0], "Gentle push from side to side in spite of does not walk alone")
	assert.Contains(t, doc.Noted[0], "steadied by a second person")
}

// TestEveryPairOfExerciseAndConditionIsSaid: for each exercise and each thing that speaks
// against it, the sheet leaves the exercise off where the table says never, warns where it
// says think first, and notes a reason that was given.
func TestEveryPairOfExerciseAndConditionIsSaid(t *testing.T) {
	against := map[string]func(*Input){}
	for _, p := range exam.Precautions() {
		against[p.String()] = func(in *Input) {
			in.Patient.Precautions = []exam.PrecautionOn{{ID: id(9), Code: p.String(), Until: "2026-12-31"}}
		}
	}
	finding := func(name string, i exam.Item, s exam.Site, g int8) {
		against[name] = func(in *Input) { v := &in.Visits[len(in.Visits)-1]; *v = with(*v, i, s, g) }
	}
	finding("sore", exam.Skin, exam.Trunk, 0)
	finding("pain", exam.SpinalPain, exam.Thoracolumbar, 3)
	finding("bowel", exam.FaecalContinence, exam.Midline, 0)
	finding("breath", exam.Breathing, exam.Midline, 0)
	finding("chokes", exam.Gag, exam.Midline, 0)
	finding("bladder", exam.BladderFill, exam.Midline, 0)
	finding("dull", exam.Mentation, exam.Midline, 1)
	left, warned := 0, 0
	for name, do := range against {
		for _, k := range exam.ExerciseKinds() {
			in := patients()["recovery"]
			in.Visits = slices.Clone(in.Visits[len(in.Visits)-2:])
			in.Visits[1].Home = []exam.HomeExercise{{ID: id(600), Kind: k.Key, Times: 1}}
			do(&in)
			got := exam.CheckExercise(in.Patient, in.Visits[1].Home[0], in.Visits[1], in.Visits[0])
			stop := slices.ContainsFunc(got, func(o exam.Objection) bool { return o.Stop })
			out := check(in, in.Visits[1].Home)
			switch {
			case stop:
				left++
				assert.Empty(t, out.keep, "%s, %s", name, k.Key)
				require.Len(t, out.warnings, 1)
				assert.Contains(t, out.warnings[0], "is left off")
			case len(got) > 0:
				warned++
				assert.Len(t, out.keep, 1, "%s, %s", name, k.Key)
				require.Len(t, out.warnings, 1)
				assert.Contains(t, out.warnings[0], "needs thought")
				for _, o := range got {
					assert.Contains(t, out.warnings[0], o.Condition.String())
				}
			default:
				assert.Len(t, out.keep, 1)
				assert.Empty(t, out.warnings)
			}
			in.Visits[1].Home[0].Override = "agreed with the surgeon"
			out = check(in, in.Visits[1].Home)
			assert.Len(t, out.keep, 1)
			assert.Empty(t, out.warnings)
			assert.Equal(t, len(got) > 0, len(out.noted) == 1)
		}
	}
	assert.Greater(t, left, 20)
	assert.Greater(t, warned, 20)
	t.Logf("%d pairs left off, %d warned of", left, warned)
}

// TestWhatWasSentIsKept: the record of a paper holds what tells it apart from any other, and
// is the same after saving and reading.
func TestWhatWasSentIsKept(t *testing.T) {
	in := patients()["recovery"]
	in.Options = Options{Lang: "de", Summary: "Bruno geht es gut."}
	doc, err := Owner(in)
	require.NoError(t, err)
	visit := in.last().ID
	p := WithSent(in.Patient, visit, doc, "R. Okafor", at(71))
	require.Len(t, p.Sent, 1)
	sum := sha256.Sum256(doc.PDF)
	assert.Equal(t, exam.Sent{Visit: visit, At: at(71), Kind: "sheet", Examiner: "R. Okafor", Language: "de", Summary: "Bruno geht es gut.", Reworded: true, Hash: hex.EncodeToString(sum[:])}, p.Sent[0])
	assert.Empty(t, in.Patient.Sent, "the patient that was given is not changed")
	assert.Equal(t, "Bruno geht es gut.", LastWords(p, visit, "de-AT"))
	assert.Empty(t, LastWords(p, visit, "en"))
	assert.Empty(t, LastWords(p, id(7), "de"))
	in.Options.Summary = ""
	doc, err = Owner(in)
	require.NoError(t, err)
	p = WithSent(p, visit, doc, "R. Okafor", at(72))
	assert.False(t, p.Sent[1].Reworded)
	assert.NotEmpty(t, p.Sent[1].Summary)
	assert.Empty(t, LastWords(p, visit, "de"), "the sheet's own sentences were sent last")

	s := storagetest.Open(t)
	_, err = s.Apply(t.Context(), "R. Okafor", storage.PatientEdits(exam.Patient{}, in.Patient)...)
	require.NoError(t, err)
	_, err = s.Apply(t.Context(), "R. Okafor", SentEdits(in.Patient, visit, doc, "R. Okafor", at(72))...)
	require.NoError(t, err)
	r, err := s.Patient(in.Patient.ID)
	require.NoError(t, err)
	require.Len(t, r.Patient.Sent, 1)
	assert.Equal(t, p.Sent[1].Hash, r.Patient.Sent[0].Hash)
	assert.Equal(t, p.Sent[1].Summary, r.Patient.Sent[0].Summary)
	assert.False(t, r.Patient.Sent[0].ID.IsZero())
}

func TestLogo(t *testing.T) {
	in := patients()["recovery"]
	plain, err := Owner(in)
	require.NoError(t, err)
	for _, size := range [][2]int{{300, 80}, {40, 400}, {1, 1}} {
		in.Options.Logo = testLogo(size[0], size[1])
		require.NoError(t, CheckLogo(in.Options.Logo))
		doc, err := Owner(in)
		require.NoError(t, err)
		assert.Regexp(t, fmt.Sprintf(`image +%d +%d `, size[0], size[1]), run(t, doc.PDF, "pdfimages", "-list", "FILE"))
		assert.Equal(t, 1, doc.Pages)
		assert.Equal(t, plain.Prose, doc.Prose)
	}
	in.Options.Logo = []byte("GIF89a")
	doc, err := Owner(in)
	require.NoError(t, err)
	require.Len(t, doc.Warnings, 1)
	assert.Contains(t, doc.Warnings[0], "logo")
	for _, bad := range [][]byte{nil, []byte("GIF89a"), testLogo(40, 20)[:60], testLogo(4001, 1), make([]byte, exam.MaxLogo+1)} {
		assert.Error(t, CheckLogo(bad))
	}
}

func TestSummaryOverrideAndPhrases(t *testing.T) {
	in := patients()["recovery"]
	in.Options.Summary = "Bruno had a good week and ate well."
	doc, err := Owner(in)
	require.NoError(t, err)
	assert.Equal(t, "Bruno had a good week and ate well.", doc.Summary)
	assert.Contains(t, textOf(t, doc.PDF), "Bruno had a good week")

	in.Options.Summary = ""
	in.Options.Phrases = map[string]string{"walks-alone": "%s walks by now.", "better": "no places", "medicine": "Give what you like.", textMedicine: "Give what you like."}
	doc, err = Owner(in)
	require.NoError(t, err)
	text := textOf(t, doc.PDF)
	assert.Contains(t, text, "Bruno walks by now.")
	assert.Contains(t, text, "Better than on 13 April 2026: left back leg")
	assert.Contains(t, text, "Give no medicine your veterinarian did not prescribe", "what keeps an animal safe cannot be reworded")
	assert.Error(t, CheckPhrase(textMedicine, "x"))
	assert.Error(t, CheckPhrase("better", "no places"))
	assert.Error(t, CheckPhrase("better", "%[1]s %[1]s"))
	assert.Error(t, CheckPhrase("same", "50 % as on %s"))
	assert.Error(t, CheckPhrase("same", "%"))
	assert.Error(t, CheckPhrase("keep-on", strings.Repeat("x", 301)))
	assert.NoError(t, CheckPhrase("same", "Nothing new since %s."))
	assert.NoError(t, CheckPhrase("better", "%[2]s: better than on %[1]s."))
}

// TestPhraseBank: a wording is kept by name and language, counts in its language alone, and
// goes back when it is emptied.
func TestPhraseBank(t *testing.T) {
	pr := practice()
	pr, err := SetPhrase(pr, "keep-on", "en-GB", "Well done, go on.")
	require.NoError(t, err)
	pr, err = SetPhrase(pr, "keep-on", "de", "Weiter so.")
	require.NoError(t, err)
	_, err = SetPhrase(pr, "nothing", "de", "x")
	require.ErrorContains(t, err, "keep-on")
	_, err = SetPhrase(pr, "nothing", "de", "")
	require.Error(t, err)
	in := patients()["recovery"]
	for lang, want := range map[string]string{"en": "Well done, go on.", "de-AT": "Weiter so.", "fr": words.OfIn("fr", phraseKeepOn)} {
		in.Options = Options{Lang: lang, Phrases: OwnPhrases(pr, lang)}
		doc, err := Owner(in)
		require.NoError(t, err)
		assert.Contains(t, doc.Summary, want)
	}
	list := Phrases(pr, "de")
	require.Len(t, list, len(editable))
	for i, p := range list {
		assert.Equal(t, editable[i], p.English, "the bank and the list of what can be reworded agree")
		assert.Regexp(t, `^[a-z-]+$`, p.Key)
		assert.NoError(t, CheckPhrase(p.Key, p.Standard), "the translation keeps the places")
	}
	pr, err = SetPhrase(pr, "keep-on", "de", " ")
	require.NoError(t, err)
	assert.Empty(t, OwnPhrases(pr, "de"))
	assert.Len(t, pr.Phrases, 1)
}

// TestOtherScripts: Greek and Cyrillic are printed; what the typeface lacks is said.
func TestOtherScripts(t *testing.T) {
	in := patients()["recovery"]
	in.Patient.Name = "Ξένια Łapka Ёжик"
	doc, err := Owner(in)
	require.NoError(t, err)
	assert.Contains(t, textOf(t, doc.PDF), "Ξένια Łapka Ёжик")
	assert.Empty(t, doc.Warnings)
	in.Patient.Name = "ポチ 🐶"
	doc, err = Owner(in)
	require.NoError(t, err)
	require.Len(t, doc.Warnings, 1)
	assert.Contains(t, doc.Warnings[0], "ポ")
	assert.Regexp(t, `^[a-z0-9._-]{1,80}$`, doc.Name)
}

// TestAlwaysOnePage: whatever is entered, in any look, there is a sheet of one page, and what
// keeps the animal safe is on it in full.
func TestAlwaysOnePage(t *testing.T) {
	long := func(t *rapid.T, label string, most int) string {
		return strings.Repeat(rapid.SampledFrom([]string{"word ", "Donaudampfschifffahrtsgesellschaft", "längere Wörter und Sätze. ", "x", "Ελληνικά ", "\xff\xc3(\x00", "🐶ポ"}).Draw(t, label), rapid.IntRange(1, most).Draw(t, label+" times"))
	}
	rapid.Check(t, func(t *rapid.T) {
		in := patients()[rapid.SampledFrom([]string{"recovery", "plexus", "going-down", "first-visit"}).Draw(t, "who")]
		in.Options = Options{Paper: rapid.SampledFrom([]string{"A4", "Letter"}).Draw(t, "paper"), Large: rapid.Bool().Draw(t, "large"), Grey: rapid.Bool().Draw(t, "grey")}
		in.Patient.Name, in.Patient.Breed = "A"+long(t, "name", 5), long(t, "breed", 6)
		in.Practice.Name, in.Practice.Contact.Address = long(t, "practice", 8), long(t, "address", 12)
		in.Patient.Veterinarian.Name = long(t, "vet", 10)
		if rapid.Bool().Draw(t, "summary") {
			in.Options.Summary = long(t, "own words", 120)
		}
		for range rapid.IntRange(0, 12).Draw(t, "goals") {
			in.Patient.Goals = append(in.Patient.Goals, exam.Goal{Words: long(t, "goal", 12), By: "2026-09"})
		}
		for range rapid.IntRange(0, 8).Draw(t, "alerts") {
			in.Notices = append(in.Notices, Notice{Urgency: Urgency(rapid.IntRange(1, 3).Draw(t, "urgency")), Plain: long(t, "alert", 40)})
		}
		v := &in.Visits[len(in.Visits)-1]
		v.Home = nil
		for range rapid.IntRange(0, 40).Draw(t, "exercises") {
			v.Home = append(v.Home, exam.HomeExercise{Kind: rapid.SampledFrom(exam.ExerciseKinds()).Draw(t, "kind").Key, Times: rapid.IntRange(0, 9).Draw(t, "times"), DaysWeek: rapid.IntRange(0, 7).Draw(t, "days"),
				Amount: long(t, "amount", 4), How: long(t, "how", 30), StopFor: long(t, "stop", 20), Override: "agreed"})
		}
		doc, err := Owner(in)
		if err != nil {
			t.Fatal(err)
		}
		if doc.Pages != 1 {
			t.Fatal(doc.Pages)
		}
		all := strings.Join(doc.Prose, "\n")
		for _, want := range append([]string{textMedicine, textSupport}, callSigns...) {
			if !strings.Contains(strings.ToLower(all), strings.ToLower(want)) {
				t.Fatalf("%q is missing", want)
			}
		}
	})
}

// TestPhrasesAsPeopleRewordThem: places stand as words, and come back as they were.
func TestPhrasesAsPeopleRewordThem(t *testing.T) {
	for _, lang := range words.Tags() {
		for _, p := range Phrases(practice(), lang) {
			shown := Marked(p.Key, p.Standard)
			assert.NotContains(t, shown, "%")
			back, err := Unmarked(p.Key, shown)
			require.NoError(t, err, p.Key)
			assert.Equal(t, places(p.Standard), places(back))
			assert.Equal(t, Example(lang, p.Key, p.Standard), Example(lang, p.Key, back))
			assert.NotContains(t, Example(lang, p.Key, back), "‹")
			assert.Equal(t, EaseWords(lang, []string{Example(lang, p.Key, back)}), "reads easily", "%s %s", lang, Example(lang, p.Key, back))
		}
	}
	for own, want := range map[string]string{
		"Better since ‹day›.":                              "‹parts›",
		"Better since ‹day› or ‹day›: ‹parts›.":            "‹day›",
		"Better by 50 % since ‹day›: ‹parts›.":             "percent",
		"Since ‹day›: ‹parts›." + strings.Repeat("!", 300): "letters",
	} {
		_, err := Unmarked("better", own)
		assert.ErrorContains(t, err, want)
	}
	assert.Equal(t, "hard to read: use shorter words and sentences", EaseWords("en", []string{"Rehabilitation necessitates extraordinary perseverance considering neurological deterioration."}))
}
