package view

import (
	"encoding/json"
	"flag"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"sort"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/app/view/demo"
	"cordwalk.example/cordwalk/exam"
)

var keepPapers = flag.String("keep", "", "a folder to keep the papers of the tests in, to look at them")

var demoPractice = sync.OnceValue(func() demo.Practice { return demo.New(demo.Seed, time.Time{}) })

// papers makes the three papers of an animal as the program does.
func papers(t *testing.T, pr exam.Practice, p exam.Patient, visits []exam.Visit, o sheet.Options) map[string]sheet.Document {
	t.Helper()
	out := map[string]sheet.Document{}
	in := SheetInput(pr, p, visits, visits[len(visits)-1].Examined, o)
	with, err := sheet.WithTrends(in)
	require.NoError(t, err)
	if p.Status == exam.Active {
		out["sheet"], err = sheet.Owner(with)
		require.NoError(t, err)
	}
	course, err := ClinicalCourse(p, visits)
	require.NoError(t, err)
	out["summary"], err = sheet.Clinical(in, course)
	require.NoError(t, err)
	if len(in.Notices) > 0 {
		out["letter"], err = sheet.Letter(in)
		require.NoError(t, err)
	}
	return out
}

func paperText(t *testing.T, pdf []byte, args ...string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "paper.pdf")
	require.NoError(t, os.WriteFile(path, pdf, 0o644))
	out, err := exec.Command("pdftotext", append(append([]string{}, args...), path, "-")...).CombinedOutput()
	require.NoError(t, err, string(out))
	return strings.Join(strings.Fields(string(out)), " ")
}

var fills = regexp.MustCompile(`%(\[\d+\])?[-+# 0]*[\d.]*[a-zA-Z%]`)

// englishOnly lists the stretches of the English texts, two words or more, that the texts of
// a language do not hold: where one of them stands on a paper of that language, a text was
// left in English.
func englishOnly(t *testing.T, lang string) []string {
	t.Helper()
	load := func(tag string) map[string]string {
		data, err := os.ReadFile(filepath.Join("..", "..", "assets", "words", "lang", tag+".json"))
		require.NoError(t, err)
		var c struct {
			Texts   map[string]string            `json:"texts"`
			Plurals map[string]map[string]string `json:"plurals"`
		}
		require.NoError(t, json.Unmarshal(data, &c))
		return c.Texts
	}
	en, other := load("en"), load(lang)
	var there strings.Builder
	for k := range en {
		there.WriteString(strings.ToLower(other[k]) + "\n")
	}
	all := there.String()
	set := map[string]bool{}
	for k := range en {
		for _, piece := range fills.Split(k, -1) {
			piece = strings.ToLower(strings.Trim(strings.TrimSpace(piece), ".,:;()–- "))
			if len(piece) >= 8 && strings.Contains(piece, " ") && !strings.Contains(all, piece) {
				set[piece] = true
			}
		}
	}
	var out []string
	for k := range set {
		out = append(out, k)
	}
	sort.Strings(out)
	return out
}

// ownTexts are what people wrote of an animal: it stands as it was written.
func ownTexts(pr exam.Practice, p exam.Patient, visits []exam.Visit) []string {
	out := []string{pr.Name, pr.Contact.Address, p.Name, p.Breed, p.Note, p.Owner.Name, p.Veterinarian.Name, p.OutOfHours.Name, pr.OutOfHours.Name, p.Referral.By, p.Referral.Limits}
	for _, x := range p.Problems {
		out = append(out, x.Diagnosis, x.Note)
	}
	for _, x := range p.Goals {
		out = append(out, x.Words)
	}
	for _, x := range p.Medicines {
		out = append(out, x.Name, x.Dose)
	}
	for _, x := range p.Precautions {
		out = append(out, x.Note)
	}
	for _, v := range visits {
		out = append(out, v.Note, v.Report.Words, v.Report.Falls, v.Report.Urine, v.Report.Appetite)
		for _, x := range v.Treatments {
			out = append(out, x.Params, x.Override)
		}
		for _, x := range v.Home {
			out = append(out, x.Amount, x.How, x.StopFor, x.Override)
		}
		for _, x := range v.Measures {
			out = append(out, x.Note)
		}
	}
	out = slices.DeleteFunc(out, func(s string) bool { return len(s) < 4 })
	slices.SortFunc(out, func(a, b string) int { return len(b) - len(a) })
	return slices.Compact(out)
}

// TestPapersSpeakTheirLanguage: on every paper of every animal of the demo practice, at its
// last visit and at visits that raise an alert, no text stays English, nothing that the
// program itself says is cut off, and the owner's sheet reads easily by the language's own
// published measure (package sheet names the sources): 60 or more on each.
func TestPapersSpeakTheirLanguage(t *testing.T) {
	pr := demoPractice()
	for _, lang := range []string{"en", "de", "es", "fr"} {
		var english []string
		if lang != "en" {
			english = englishOnly(t, lang)
			require.Greater(t, len(english), 500)
		}
		hardest, sheets, sum := 1000.0, 0, 0.0
		defer func() {
			t.Logf("%s: %d sheets, reading ease %.0f at the mean, %.0f for the hardest", lang, sheets, sum/float64(max(sheets, 1)), hardest)
		}()
		left := map[string]string{}
		for _, c := range pr.Cases {
			at := []int{len(c.Visits)}
			for n := 1; n < len(c.Visits); n++ {
				if len(AlertsOf(c.Patient, c.Visits[:n])) > 0 && len(at) < 3 {
					at = append(at, n)
				}
			}
			for k, n := range at {
				paper := []string{"A4", "Letter"}[k%2]
				for kind, d := range papers(t, pr.Practice, c.Patient, c.Visits[:n], sheet.Options{Lang: lang, Paper: paper, Large: k == 2}) {
					name := fmt.Sprintf("%s-%s-%s-%d-%s", lang, kind, c.Patient.Name, n, paper)
					if *keepPapers != "" {
						require.NoError(t, os.MkdirAll(*keepPapers, 0o755))
						require.NoError(t, os.WriteFile(filepath.Join(*keepPapers, name+".pdf"), d.PDF, 0o644))
					}
					if kind == "sheet" {
						ease, ok := sheet.Reading(lang, d.Prose)
						require.True(t, ok)
						assert.GreaterOrEqual(t, ease.Score, 60.0, "%s: reading ease by %s; %d words, %d sentences, %d syllables", name, ease.Measure, ease.Words, ease.Sentences, ease.Syllables)
						hardest, sheets, sum = min(hardest, ease.Score), sheets+1, sum+ease.Score
					}
					text := paperText(t, d.PDF, "-raw")
					for _, own := range ownTexts(pr.Practice, c.Patient, c.Visits[:n]) {
						text = strings.ReplaceAll(text, own, "·")
					}
					low := strings.ToLower(text)
					for _, e := range english {
						if strings.Contains(low, e) {
							left[e] = name
						}
					}
					if i := strings.Index(text, "…"); i >= 0 {
						assert.Fail(t, "cut off", "%s: …%s…", name, text[max(0, i-60):i])
					}
				}
			}
		}
		for e, name := range left {
			assert.Fail(t, "left in English", "%s: %q", name, e)
		}
	}
}
