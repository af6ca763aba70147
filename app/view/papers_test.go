package view

import (
	"encoding/json"
	"flag"
	"fmt"
	"html"
	"maps"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"sort"
	"strconv"
	"strings"
	"sync"
	"testing"
	"time"
	"unicode"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/app/view/demo"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

var keepPapers = flag.String("keep", "", "a folder to keep the papers of the tests in, to look at them")

var demoPractice = sync.OnceValue(func() demo.Practice { return demo.New(demo.Seed, time.Time{}) })

// moment is an animal of the demo practice at one of its visits, with what its papers take from
// the serial model, which speaks no language.
type moment struct {
	patient exam.Patient
	visits  []exam.Visit
	course  *sheet.CourseCharts
	whole   *sheet.Trend
	limbs   [4]*sheet.Trend
}

// moments are every animal's last visit, its first one, and up to two that raise an alert.
func moments(t *testing.T, pr demo.Practice) (out []func() moment) {
	t.Helper()
	for _, c := range pr.Cases {
		at := []int{len(c.Visits)}
		for n := 1; n < len(c.Visits) && len(at) < 3; n++ {
			if n > 1 && len(AlertsOf(c.Patient, c.Visits[:n])) > 0 {
				at = append(at, n)
			}
		}
		for _, n := range append(at, 1) {
			out = append(out, sync.OnceValue(func() moment {
				m := moment{patient: c.Patient, visits: c.Visits[:n]}
				in, err := sheet.WithTrends(SheetInput(pr.Practice, c.Patient, m.visits, m.visits[n-1].Examined, sheet.Options{}))
				require.NoError(t, err)
				m.whole, m.limbs = in.Whole, in.Limbs
				m.course, err = ClinicalCourse(c.Patient, m.visits)
				require.NoError(t, err)
				return m
			}))
		}
	}
	return out
}

// papers makes the three papers of an animal as the program does.
func (m moment) papers(t *testing.T, pr exam.Practice, o sheet.Options) map[string]sheet.Document {
	t.Helper()
	out := map[string]sheet.Document{}
	in := SheetInput(pr, m.patient, m.visits, m.visits[len(m.visits)-1].Examined, o)
	in.Whole, in.Limbs = m.whole, m.limbs
	var err error
	if m.patient.Status == exam.Active {
		out["sheet"], err = sheet.Owner(in)
		require.NoError(t, err)
	}
	out["summary"], err = sheet.Clinical(in, m.course)
	require.NoError(t, err)
	if len(in.Notices) > 0 {
		out["letter"], err = sheet.Letter(in)
		require.NoError(t, err)
	}
	return out
}

// onPaper is what poppler reads from a PDF.
type onPaper struct {
	text  string // in the order it was drawn, white space evened out
	pages int
	boxes [][]box // of the words, page by page
	w, h  float64
}

type box struct {
	x0, y0, x1, y1 float64
	word           string
}

var (
	pageTag = regexp.MustCompile(`<page width="([\d.]+)" height="([\d.]+)">`)
	wordTag = regexp.MustCompile(`<word xMin="([-\d.]+)" yMin="([-\d.]+)" xMax="([-\d.]+)" yMax="([-\d.]+)">([^<]*)</word>`)
)

func readPaper(t *testing.T, pdf []byte) (out onPaper) {
	t.Helper()
	path := filepath.Join(t.TempDir(), "paper.pdf")
	require.NoError(t, os.WriteFile(path, pdf, 0o644))
	run := func(args ...string) string {
		text, err := exec.Command("pdftotext", append(args, path, "-")...).CombinedOutput()
		require.NoError(t, err, "pdftotext (poppler-utils): %s", text)
		return string(text)
	}
	out.text = strings.Join(strings.Fields(run("-raw")), " ")
	for i, page := range strings.Split(run("-bbox"), "<page ")[1:] {
		size := pageTag.FindStringSubmatch("<page " + page)
		require.NotNil(t, size)
		out.w, out.h = number64(t, size[1]), number64(t, size[2])
		out.pages = i + 1
		out.boxes = append(out.boxes, nil)
		for _, m := range wordTag.FindAllStringSubmatch(page, -1) {
			out.boxes[i] = append(out.boxes[i], box{number64(t, m[1]), number64(t, m[2]), number64(t, m[3]), number64(t, m[4]), html.UnescapeString(m[5])})
		}
	}
	return out
}

// siteWords may never stand on an owner's sheet: a likely site, a share, a segment.
var siteWords = regexp.MustCompile(`\b(likely|probab|segment|lesion|L[1-7]\b|S[1-3]\b|T1?[0-9]\b)`)

// bare is a text without its marks and its capitals, a blank between words: a sign may stand for a stop.
func bare(s string) string {
	return strings.Join(strings.FieldsFunc(strings.ToLower(s), func(r rune) bool { return !unicode.IsLetter(r) && !unicode.IsDigit(r) }), " ")
}

func number64(t *testing.T, s string) float64 {
	t.Helper()
	x, err := strconv.ParseFloat(s, 64)
	require.NoError(t, err)
	return x
}

// collisions are words that lie on one another. A word's box is as tall as its line, so lines that
// are set close share a sliver; what shares a quarter of the smaller box cannot be read.
func (p onPaper) collisions() (out []string) {
	for _, words := range p.boxes {
		for i, a := range words {
			for _, b := range words[i+1:] {
				w, h := min(a.x1, b.x1)-max(a.x0, b.x0), min(a.y1, b.y1)-max(a.y0, b.y0)
				if w <= 0 || h <= 0 {
					continue
				}
				small := min((a.x1-a.x0)*(a.y1-a.y0), (b.x1-b.x0)*(b.y1-b.y0))
				if w*h > small/4 {
					out = append(out, a.word+" / "+b.word)
				}
			}
		}
	}
	return out
}

// outside are words that lie nearer to the edge of the paper than printers reach.
func (p onPaper) outside() (out []string) {
	for _, words := range p.boxes {
		for _, b := range words {
			if b.x0 < 18 || b.y0 < 10 || b.x1 > p.w-18 || b.y1 > p.h-10 {
				out = append(out, b.word)
			}
		}
	}
	return out
}

// coloured reports whether a page, drawn by poppler, has a dot that is not grey.
func coloured(t *testing.T, pdf []byte) bool {
	t.Helper()
	dir := t.TempDir()
	path := filepath.Join(dir, "p.pdf")
	require.NoError(t, os.WriteFile(path, pdf, 0o644))
	out, err := exec.Command("pdftoppm", "-r", "40", path, filepath.Join(dir, "p")).CombinedOutput()
	require.NoError(t, err, string(out))
	pages, err := filepath.Glob(filepath.Join(dir, "p*.ppm"))
	require.NoError(t, err)
	require.NotEmpty(t, pages)
	for _, name := range pages {
		data, err := os.ReadFile(name)
		require.NoError(t, err)
		var w, h, most int
		n, err := fmt.Sscanf(string(data[:min(len(data), 32)]), "P6\n%d %d\n%d\n", &w, &h, &most)
		require.True(t, err == nil && n == 3, "not a PPM: %v", err)
		dots := data[len(data)-3*w*h:]
		for i := 0; i+2 < len(dots); i += 3 {
			r, g, b := int(dots[i]), int(dots[i+1]), int(dots[i+2])
			if max(r, g, b)-min(r, g, b) > 6 {
				return true
			}
		}
	}
	return false
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

// TestPapersSpeakTheirLanguage: every paper of every animal of the demo practice – at its last and
// first visit and at visits that raise an alert – in every language, on A4 and Letter, normal, in
// large print and grey: it has its count of pages, no text stays English, nothing that the program
// itself says is cut off, lies outside the paper or on something else, grey is grey, and the owner's
// sheet reads easily by the language's own published measure (package sheet names the sources): 60
// or more on each. One twentieth of them, another one each day; all where CORDWALK_SOAK is set.
func TestPapersSpeakTheirLanguage(t *testing.T) {
	pr := demoPractice()
	every, turn := 20, time.Now().YearDay()
	if os.Getenv("CORDWALK_SOAK") == "1" {
		every, turn = 1, 0
	}
	all := moments(t, pr)
	looks := map[string]sheet.Options{"normal": {}, "large": {Large: true}, "grey": {Grey: true}}
	made := map[string]int{}
	count := 0
	for _, lang := range words.Tags() {
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
		for _, at := range all {
			for _, paper := range []string{"A4", "Letter"} {
				for _, look := range slices.Sorted(maps.Keys(looks)) {
					if count++; (count+turn)%every != 0 {
						continue
					}
					m, o := at(), looks[look]
					o.Lang, o.Paper = lang, paper
					for kind, d := range m.papers(t, pr.Practice, o) {
						made[kind]++
						name := fmt.Sprintf("%s-%s-%s-%d-%s-%s", kind, lang, m.patient.Name, len(m.visits), paper, look)
						if *keepPapers != "" {
							require.NoError(t, os.MkdirAll(*keepPapers, 0o755))
							require.NoError(t, os.WriteFile(filepath.Join(*keepPapers, name+".pdf"), d.PDF, 0o644))
						}
						on := readPaper(t, d.PDF)
						assert.Equal(t, map[string]int{"sheet": 1, "summary": 2, "letter": 1}[kind], on.pages, name)
						assert.InDelta(t, map[string]float64{"A4": 841.89, "Letter": 792}[paper], on.h, 1, name)
						assert.Empty(t, on.outside(), "%s: lies outside the paper", name)
						assert.Empty(t, on.collisions(), "%s: words lie on one another", name)
						if kind == "sheet" {
							ease, ok := sheet.Reading(lang, d.Prose)
							require.True(t, ok)
							assert.GreaterOrEqual(t, ease.Score, 60.0, "%s: reading ease by %s; %d words, %d sentences, %d syllables", name, ease.Measure, ease.Words, ease.Sentences, ease.Syllables)
							assert.NotContains(t, on.text, "%", "%s: an owner's sheet holds no shares", name)
							assert.Contains(t, on.text, m.patient.Veterinarian.Phone, name)
							if lang == "en" {
								assert.NotRegexp(t, siteWords, on.text, name)
							}
							hardest, sheets, sum = min(hardest, ease.Score), sheets+1, sum+ease.Score
						}
						if look == "grey" {
							assert.False(t, coloured(t, d.PDF), "%s has colours", name)
						}
						for _, w := range d.Warnings { // said to the therapist; none may say that something was left out
							assert.NotContains(t, w, "did not fit", name)
						}
						letters := bare(on.text)
						for _, line := range d.Prose {
							if !strings.Contains(letters, bare(line)) {
								assert.Fail(t, "not whole on the paper", "%s: %s", name, line)
							}
						}
						text := on.text
						for _, own := range ownTexts(pr.Practice, m.patient, m.visits) {
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
		}
		for e, name := range left {
			assert.Fail(t, "left in English", "%s: %q", name, e)
		}
	}
	t.Logf("of %d animals at a visit in a language, on a paper, in a look: every %dth, from %d; papers made: %v", count, every, turn, made)
}
