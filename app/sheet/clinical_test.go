package sheet

import (
	"bytes"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
)

// TestTheSheetClaimsNoMoreThanTheModel: with the model's trends the sheet says what is sure,
// and where a better grade may be noise it says so and hollows the mark.
func TestTheSheetClaimsNoMoreThanTheModel(t *testing.T) {
	in := demoInputs()["Bramble"] // a steady recovery
	in, err := WithTrends(in)
	require.NoError(t, err)
	require.NotNil(t, in.Whole)
	assert.InDelta(t, 1, in.Whole.Better+in.Whole.Same+in.Whole.Worse, 1e-6)
	require.Greater(t, in.Whole.Better, sureTrend)
	for i := range in.Limbs {
		require.NotNil(t, in.Limbs[i])
	}
	doc, err := Owner(in)
	require.NoError(t, err)
	assert.Contains(t, doc.Summary, "Since the first visit on 13 August 2026, Bramble has grown stronger.")

	in = patients()["recovery"]
	in.Limbs[2] = &Trend{Better: 0.3, Same: 0.69, Worse: 0.01}
	in.Whole = &Trend{Since: at(0), Better: 0.6, Same: 0.3, Worse: 0.1}
	doc, err = Owner(in)
	require.NoError(t, err)
	assert.Contains(t, doc.Summary, "A little better in the tests than on 13 April 2026: left back leg. We will see if it lasts.")
	assert.Contains(t, doc.Summary, "Better than on 13 April 2026: passing urine, neck and back pain.")
	assert.Contains(t, doc.Summary, "It is too soon to say where this will lead.")
	assert.NotContains(t, textOf(t, doc.PDF), "%")

	in.Whole = &Trend{Since: at(0), Worse: 0.95, Same: 0.05}
	doc, err = Owner(in)
	require.NoError(t, err)
	assert.Contains(t, doc.Summary, "has grown weaker")

	in = patients()["first-visit"]
	same, err := WithTrends(in)
	require.NoError(t, err)
	assert.Nil(t, same.Whole)
}

func TestClinicalSummaryOfTheDemoPractice(t *testing.T) {
	for name, in := range demoInputs() {
		for _, paper := range []string{"A4", "Letter"} {
			t.Run(name+"/"+paper, func(t *testing.T) {
				in.Options = Options{Paper: paper}
				in.Notices = []Notice{{Urgency: Today, Words: "Voluntary urination fell from 2 to 1.", Plain: "p", Since: in.Visits[0].Examined, Told: "Dr Brook"}, {Urgency: Now, Words: "Ambulation fell from 2 to 0.", Plain: "p"}}
				doc, err := Clinical(in, nil)
				require.NoError(t, err)
				keepPaper(t, "clinical-"+name+"-"+paper, doc.PDF)
				assert.Equal(t, 2, doc.Pages)
				assert.Empty(t, doc.Warnings)
				text := textOf(t, doc.PDF)
				for _, want := range []string{in.Patient.Name, "Clinical summary", "Likely site", "Findings", "told: Dr Brook", "nobody told yet", "Voluntary motor", "page 2 of 2", "does not replace", "Next visit", in.last().Examiner, "Demo"} {
					assert.Contains(t, text, want)
				}
				again, err := Clinical(in, nil)
				require.NoError(t, err)
				assert.True(t, bytes.Equal(doc.PDF, again.PDF))
				insidePage(t, name, doc.PDF, paper == "Letter")
			})
		}
	}
}

func TestReferralLetter(t *testing.T) {
	for name, in := range demoInputs() {
		_, err := Letter(in)
		require.ErrorIs(t, err, ErrNoAlert)
		in.Notices = []Notice{{Urgency: Now, Words: "Ambulation fell from 2 to 0.", Plain: "p", Since: in.Visits[0].Examined}, {Urgency: NextWorkingDay, Words: "The urine is cloudy.", Plain: "p"}}
		doc, err := Letter(in)
		require.NoError(t, err)
		keepPaper(t, "letter-"+name, doc.PDF)
		assert.Equal(t, 1, doc.Pages)
		assert.Empty(t, doc.Warnings)
		text := textOf(t, doc.PDF)
		for _, want := range []string{"Referral of " + in.Patient.Name, "How urgent: please see " + in.Patient.Name + " now.", "Ambulation fell from 2 to 0.", "Compared with", "no diagnosis", in.Patient.Veterinarian.Phone} {
			assert.Contains(t, text, want)
		}
		insidePage(t, name, doc.PDF, false)
	}
}

// TestLetterOfAFirstVisit: an animal without an earlier visit is compared with nothing.
func TestLetterOfAFirstVisit(t *testing.T) {
	in := patients()["first-visit"]
	in.Notices = []Notice{{Urgency: Today, Words: "No urine for 14 h.", Plain: "p", Since: in.Visits[0].Examined}}
	doc, err := Letter(in)
	require.NoError(t, err)
	text := textOf(t, doc.PDF)
	assert.Contains(t, text, "Findings of the first visit, 2026-03-02")
	assert.Contains(t, text, "Voluntary urination: 0")
	assert.NotContains(t, text, "›")
	assert.NotContains(t, text, "Compared with")
}

// TestClinicalWithoutAModel: for a species whose cord is not on record the paper says so.
func TestClinicalWithoutAModel(t *testing.T) {
	in := patients()["recovery"]
	in.Patient.Species, in.Patient.Problems = exam.Horse, nil
	doc, err := Clinical(in, nil)
	require.NoError(t, err)
	assert.Contains(t, strings.ToLower(textOf(t, doc.PDF)), "horse")
	in.Visits = nil
	_, err = Clinical(in, nil)
	assert.ErrorIs(t, err, ErrNoVisit)
}

// TestGridShowsThreeDays compares the grid's cells with the visits.
func TestGridShowsThreeDays(t *testing.T) {
	in := patients()["recovery"]
	rows := grid("en", in.Visits[0], in.Visits[4], in.Visits[5])
	found := false
	for _, r := range rows {
		for _, c := range r.cells {
			if r.label == "Voluntary motor" && c.site == "PL" {
				found = true
				assert.Equal(t, gridCell{site: "PL", first: "0", last: "2", now: "3", nowBad: true, different: true}, c)
			}
			if r.label == "Voluntary urination" {
				assert.Equal(t, "–", c.first, "not tested is a dash, never a grade")
			}
		}
	}
	assert.True(t, found)
	seen := map[string]bool{}
	normal := false
	for _, r := range rows {
		assert.False(t, seen[r.label], "one row an item")
		seen[r.label] = true
		normal = normal || r.rank == 2
		assert.False(t, normal && r.rank < 2, "abnormal rows first")
	}
}

// TestFiguresAndDaysAsTheLanguageWritesThem: decimal commas, the French first of the month and the
// Spanish «de», as the Unicode CLDR gives them for dates in full (patterns of type long).
func TestFiguresAndDaysAsTheLanguageWritesThem(t *testing.T) {
	first := time.Date(2026, time.May, 1, 9, 0, 0, 0, zone)
	for _, tt := range []struct{ lang, day, second, month, kg, years, given string }{
		{"en", "1 May 2026", "2 May 2026", "May 2026", "7.3 kg", "7.0 years", "1.5 h"},
		{"de", "1. Mai 2026", "2. Mai 2026", "Mai 2026", "7,3 kg", "7,0 Jahre", "1,5 h"},
		{"fr", "1er mai 2026", "2 mai 2026", "mai 2026", "7,3 kg", "7,0 ans", "1,5 h"},
		{"es", "1 de mayo de 2026", "2 de mayo de 2026", "mayo de 2026", "7,3 kg", "7,0 años", "1,5 h"},
	} {
		t.Run(tt.lang, func(t *testing.T) {
			assert.Equal(t, tt.day, dateWords(tt.lang, "2026-05-01"))
			assert.Equal(t, tt.second, dateWords(tt.lang, "2026-05-02"))
			assert.Equal(t, tt.month, dateWords(tt.lang, "2026-05"))
			in := patients()["recovery"]
			in.Patient.Weights = []exam.WeightPoint{{At: first, Kg: 7.3}}
			v := &in.Visits[len(in.Visits)-1]
			v.Doses = []exam.DoseGiven{{Medicine: "Gabapentin", Hours: 1.5}}
			v.Measures = []exam.Measured{{Measure: exam.Temperature, Value: 38.6}, {Measure: exam.StandTime, Value: 12}}
			in.Options.Lang = tt.lang
			doc, err := Clinical(in, nil)
			require.NoError(t, err)
			text := textOf(t, doc.PDF)
			for _, want := range []string{tt.kg, tt.years, tt.given} {
				assert.Contains(t, text, want)
			}
			wrong, right := " 38.6 ", " 38,6 "
			if tt.lang == "en" {
				wrong, right = right, wrong
			}
			assert.Contains(t, text, right)
			assert.NotContains(t, text, wrong)
		})
	}
	assert.Equal(t, "Temperatur 40,2 °C", Say("de", "temperature 40.2 °C"))
}
