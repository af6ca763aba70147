package sheet

import (
	"bytes"
	"context"
	"encoding/csv"
	"errors"
	"io"
	"iter"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"github.com/xuri/excelize/v2"
	"pgregory.net/rapid"

	"cordwalk.example/cordwalk/exam"
)

func animalsOf(list ...Animal) iter.Seq2[Animal, error] {
	return func(yield func(Animal, error) bool) {
		for _, a := range list {
			if !yield(a, nil) {
				return
			}
		}
	}
}

func demoAnimals() []Animal {
	var out []Animal
	for _, key := range []string{"recovery", "tail-pull", "going-down", "plexus"} {
		in := patients()[key]
		in.Patient.ID = id(1000 + len(out))
		in.Visits[0].Measures = []exam.Measured{{Measure: exam.Weight, Value: 9.4}, {Measure: exam.ThighGirth, Site: exam.Left, Value: 31.5, At: 70, Clipped: true}, {Measure: exam.Temperature, Value: 38.4}}
		in.Visits[0].Note = "=cmd|' /C calc'!A0"
		in.Visits[1].Findings = append(in.Visits[1].Findings, exam.Finding{Item: exam.DeepPain, Site: exam.TailTip, Result: exam.Untested(exam.Temperament), Note: "@home"})
		out = append(out, Animal{in.Patient, in.Visits})
	}
	return out
}

func csvOf(t testing.TB, table Table, o TableOptions) [][]string {
	t.Helper()
	var buf bytes.Buffer
	n, err := CSV(context.Background(), &buf, table, o)
	require.NoError(t, err)
	body, ok := strings.CutPrefix(buf.String(), "\ufeff")
	require.True(t, ok, "a byte-order mark")
	all, err := csv.NewReader(strings.NewReader(body)).ReadAll()
	require.NoError(t, err, "every row has as many cells as the header")
	require.Equal(t, Columns(table, o.Pseudonyms), all[0])
	require.Len(t, all, n+1)
	return all
}

func at1(t testing.TB, table [][]string, row int, name string) string {
	t.Helper()
	for i, c := range table[0] {
		if c == name {
			return table[row][i]
		}
	}
	t.Fatalf("no column %s", name)
	return ""
}

func TestTidyTables(t *testing.T) {
	o := TableOptions{Animals: animalsOf(demoAnimals()...)}
	f := csvOf(t, FindingsTable, o)
	want := 0
	for _, a := range demoAnimals() {
		for _, v := range a.Visits {
			want += len(v.Findings)
		}
	}
	assert.Len(t, f, want+1, "one finding a row")
	assert.Equal(t, "Bruno", at1(t, f, 1, "name"))
	assert.Equal(t, "ambulation", at1(t, f, 1, "item"))
	assert.Equal(t, "0", at1(t, f, 1, "grade"))
	assert.Equal(t, "0", at1(t, f, 1, "health"))
	assert.Equal(t, "2026-03-02T10:15:00+01:00", at1(t, f, 1, "examined"))
	assert.Equal(t, "18", at1(t, f, 1, "days_since_surgery"), "12 February to 2 March 2026")
	untested := 0
	for i := 1; i < len(f); i++ {
		if at1(t, f, i, "tested") == "0" {
			untested++
			assert.Empty(t, at1(t, f, i, "grade"))
			assert.Equal(t, "temperament", at1(t, f, i, "not_tested"))
			assert.Equal(t, "'@home", at1(t, f, i, "note"))
		}
	}
	assert.Equal(t, 4, untested)
	m := csvOf(t, MeasuresTable, o)
	assert.Equal(t, []string{"weight", "9.4", "kg"}, []string{at1(t, m, 1, "measure"), at1(t, m, 1, "value"), at1(t, m, 1, "unit")})
	v := csvOf(t, VisitsTable, o)
	assert.Equal(t, "'=cmd|' /C calc'!A0", at1(t, v, 1, "note"))
	p := csvOf(t, PatientsTable, o)
	assert.Len(t, p, 5)
	assert.Equal(t, "T12-T13", at1(t, p, 1, "level"))
}

// TestCodebookNamesEverything: each column of each table, each item's grades and each
// measure's unit stand in the codebook.
func TestCodebookNamesEverything(t *testing.T) {
	book := csvOf(t, CodebookTable, TableOptions{})
	has := map[string]bool{}
	for _, r := range book {
		has[r[0]+"|"+r[1]] = true
	}
	for _, table := range []Table{FindingsTable, MeasuresTable, VisitsTable, PatientsTable} {
		for _, c := range Columns(table, false) {
			assert.True(t, has[table.String()+"|"+c], "%s %s", table, c)
		}
	}
	for _, i := range exam.Items() {
		for g := i.Info().First; g <= i.Last(); g++ {
			assert.True(t, has["item "+i.String()+"|grade "+strconv.Itoa(int(g))], "%s %d", i, g)
		}
	}
	for _, m := range exam.Measures() {
		assert.True(t, has["measure "+m.String()+"|"+m.Info().Unit], m)
	}
}

// TestPseudonyms: no name, free text, contact or full id leaves; the same secret names the
// same animal alike, another secret otherwise.
func TestPseudonyms(t *testing.T) {
	o := TableOptions{Animals: animalsOf(demoAnimals()...), Pseudonyms: true, Secret: []byte("0123456789abcdef")}
	var all strings.Builder
	for _, table := range Tables() {
		for _, row := range csvOf(t, table, o) {
			all.WriteString(strings.Join(row, "|") + "\n")
		}
	}
	for _, private := range []string{"Bruno", "Juniper", "Odin", "Pixel", "Okafor", "Lindqvist", "Brook", "calc", "@home", "555", "2019-05", id(1000).String(), id(100).String()} {
		assert.NotContains(t, all.String(), private)
	}
	a, b := csvOf(t, PatientsTable, o), csvOf(t, FindingsTable, o)
	assert.Equal(t, at1(t, a, 1, "patient"), at1(t, b, 1, "patient"))
	assert.Regexp(t, `^P-[A-Z2-7]{12}$`, at1(t, a, 1, "patient"))
	o.Secret = []byte("fedcba9876543210")
	assert.NotEqual(t, at1(t, a, 1, "patient"), at1(t, csvOf(t, PatientsTable, o), 1, "patient"))
	o.Secret = []byte("short")
	_, err := CSV(context.Background(), io.Discard, PatientsTable, o)
	assert.ErrorIs(t, err, ErrNoSecret)
	assert.ErrorIs(t, XLSX(context.Background(), io.Discard, o), ErrNoSecret)
}

// TestNoTextRunsInASpreadsheet: whatever is written, no cell that is not a number begins with
// a sign that starts a formula, and taking the apostrophe away gives the text back.
func TestNoTextRunsInASpreadsheet(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := rapid.OneOf(rapid.StringMatching(`[=+\-@\t\r\n'",; a-z0-9]{1,12}`), rapid.SampledFrom([]string{"＝1+1", "＠x", "=HYPERLINK(\"http://x.example\")"})).Draw(t, "s")
		b := append(appendCells(nil, []cell{text(s), num(-5)}), '\n')
		r, err := csv.NewReader(bytes.NewReader(b)).Read()
		if err != nil {
			t.Fatal(err)
		}
		if strings.ContainsAny(r[0][:1], "=+-@\t\r\n") || strings.HasPrefix(r[0], "＝") || strings.HasPrefix(r[0], "＠") {
			t.Fatalf("%q can run", r[0])
		}
		if r[1] != "-5" {
			t.Fatal(r[1])
		}
		back := r[0]
		if risky(s) {
			back = strings.TrimPrefix(back, "'")
		}
		// encoding/csv reads \r\n in a quoted cell as \n.
		if back != strings.ReplaceAll(s, "\r\n", "\n") {
			t.Fatalf("%q came back as %q", s, back)
		}
	})
}

func TestExportStopsWhenAsked(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	seen := 0
	o := TableOptions{Animals: animalsOf(demoAnimals()...), Progress: func(n int) {
		seen = n
		if n == 2 {
			cancel()
		}
	}}
	_, err := CSV(ctx, io.Discard, FindingsTable, o)
	assert.ErrorIs(t, err, context.Canceled)
	assert.Equal(t, 2, seen)
	broken := errors.New("the record cannot be read")
	o = TableOptions{Animals: func(yield func(Animal, error) bool) { yield(Animal{}, broken) }}
	_, err = CSV(context.Background(), io.Discard, FindingsTable, o)
	assert.ErrorIs(t, err, broken)
	assert.ErrorIs(t, XLSX(context.Background(), io.Discard, o), broken)
	_, err = CSV(context.Background(), fullDisk{}, FindingsTable, TableOptions{Animals: animalsOf(demoAnimals()...)})
	assert.ErrorContains(t, err, "no space")
}

type fullDisk struct{}

func (fullDisk) Write([]byte) (int, error) { return 0, errors.New("no space left on device") }

func workbook(t testing.TB, maxRows int) []byte {
	t.Helper()
	var buf bytes.Buffer
	require.NoError(t, xlsx(context.Background(), &buf, TableOptions{Animals: animalsOf(demoAnimals()...)}, maxRows))
	return buf.Bytes()
}

// TestWorkbookHoldsWhatTheCSVHolds reads the workbook back and compares every cell.
func TestWorkbookHoldsWhatTheCSVHolds(t *testing.T) {
	f, err := excelize.OpenReader(bytes.NewReader(workbook(t, maxSheetRows)))
	require.NoError(t, err)
	defer f.Close()
	assert.Equal(t, []string{"findings", "measures", "visits", "patients", "codebook"}, f.GetSheetList())
	for _, table := range Tables() {
		want := csvOf(t, table, TableOptions{Animals: animalsOf(demoAnimals()...)})
		got, err := f.GetRows(table.String(), excelize.Options{RawCellValue: true})
		require.NoError(t, err)
		require.Len(t, got, len(want), table)
		for r := range want {
			for c := range want[r] {
				cell := ""
				if c < len(got[r]) {
					cell = got[r][c]
				}
				w := want[r][c]
				if r > 0 && (want[0][c] == "examined" || want[0][c] == "first_visit" || want[0][c] == "last_visit" || want[0][c] == "closed_at") && w != "" {
					days, err := strconv.ParseFloat(cell, 64)
					require.NoError(t, err)
					at, err := time.Parse(time.RFC3339, w)
					require.NoError(t, err)
					local := time.Date(at.Year(), at.Month(), at.Day(), at.Hour(), at.Minute(), at.Second(), 0, time.UTC)
					assert.WithinDuration(t, local, time.Date(1899, 12, 30, 0, 0, 0, 0, time.UTC).Add(time.Duration(days*24*float64(time.Hour))), time.Second)
					continue
				}
				assert.Equal(t, strings.TrimPrefix(w, "'"), cell, "%s row %d column %s", table, r, want[0][c])
			}
		}
	}
	kind, err := f.GetCellType("visits", "AB2")
	require.NoError(t, err)
	assert.NotEqual(t, excelize.CellTypeFormula, kind)
}

// TestWorkbookGoesOnInASecondSheet where a table is longer than a sheet.
func TestWorkbookGoesOnInASecondSheet(t *testing.T) {
	f, err := excelize.OpenReader(bytes.NewReader(workbook(t, 40)))
	require.NoError(t, err)
	defer f.Close()
	total := 0
	for _, name := range f.GetSheetList() {
		if strings.HasPrefix(name, "findings") {
			rows, err := f.GetRows(name)
			require.NoError(t, err)
			assert.LessOrEqual(t, len(rows), 40)
			total += len(rows) - 1
		}
	}
	assert.Len(t, csvOf(t, FindingsTable, TableOptions{Animals: animalsOf(demoAnimals()...)}), total+1)
}

// TestLibreOfficeReadsTheWorkbook opens it in another program and reads it back as CSV.
func TestLibreOfficeReadsTheWorkbook(t *testing.T) {
	office, err := exec.LookPath("soffice")
	if err != nil {
		t.Skip("LibreOffice is not installed")
	}
	dir := t.TempDir()
	path := filepath.Join(dir, "book.xlsx")
	require.NoError(t, os.WriteFile(path, workbook(t, maxSheetRows), 0o644))
	cmd := exec.Command(office, "-env:UserInstallation=file://"+dir+"/profile", "--headless", "--convert-to", "csv:Text - txt - csv (StarCalc):44,34,76,1,,0,false,true,false,false,false,1", "--outdir", dir, path)
	out, err := cmd.CombinedOutput()
	require.NoError(t, err, string(out))
	found, err := filepath.Glob(filepath.Join(dir, "book*.csv"))
	require.NoError(t, err)
	require.Len(t, found, 1)
	data, err := os.ReadFile(found[0])
	require.NoError(t, err)
	got, err := csv.NewReader(bytes.NewReader(data)).ReadAll()
	require.NoError(t, err)
	want := csvOf(t, FindingsTable, TableOptions{Animals: animalsOf(demoAnimals()...)})
	require.Len(t, got, len(want))
	for r := range want {
		for c := range want[r] {
			if want[0][c] != "examined" || r == 0 {
				assert.Equal(t, strings.TrimPrefix(want[r][c], "'"), got[r][c], "row %d column %s", r, want[0][c])
			}
		}
	}
}

// TestUnitsAreUCUM holds the codes against UCUM's own table of units (testdata/ucum.txt).
func TestUnitsAreUCUM(t *testing.T) {
	data, err := os.ReadFile("testdata/ucum.txt")
	require.NoError(t, err)
	known := map[string]bool{}
	for _, line := range strings.Split(string(data), "\n") {
		if code, _, ok := strings.Cut(line, "\t"); ok && !strings.HasPrefix(line, "#") {
			known[code] = true
		}
	}
	for _, m := range exam.Measures() {
		code := UCUM(m)
		require.NotEmpty(t, code, m)
		assert.True(t, validUCUM(code, known), "%s: %s", m, code)
	}
	assert.False(t, validUCUM("°C", known))
	assert.False(t, validUCUM("parrot", known))
}

// validUCUM checks a code of the forms that are in use here: annotations, atoms with a metric
// prefix, and quotients (UCUM, section 2: syntax rules).
func validUCUM(code string, known map[string]bool) bool {
	if strings.HasPrefix(code, "{") && strings.HasSuffix(code, "}") {
		return true
	}
	if rest, ok := strings.CutPrefix(code, "/"); ok {
		return validUCUM(rest, known)
	}
	if a, b, ok := strings.Cut(code, "/"); ok {
		return validUCUM(a, known) && validUCUM(b, known)
	}
	if known[code] {
		return true
	}
	for _, p := range []string{"k", "c", "m", "u", "d"} {
		if rest, ok := strings.CutPrefix(code, p); ok && known[rest] {
			return true
		}
	}
	return false
}

// bigPractice makes animals with ten visits of forty findings without holding them all.
func bigPractice(animals int) iter.Seq2[Animal, error] {
	items := exam.Items()
	return func(yield func(Animal, error) bool) {
		a := Animal{Patient: exam.Patient{Name: "Bruno", Species: exam.Dog, Breed: "Dachshund", Born: "2019-05"}}
		for v := range 10 {
			visit := exam.Visit{ID: id(v), Examined: at(v * 7), Examiner: "R. Okafor", Aid: "none", Surface: "grip"}
			for k := 0; len(visit.Findings) < 40; k++ {
				i := items[k%len(items)]
				visit.Findings = append(visit.Findings, exam.Finding{Item: i, Site: i.Info().Sites[0], Result: exam.Graded(i.Info().First + int8((k+v)%len(i.Info().Grades)))})
			}
			a.Visits = append(a.Visits, visit)
		}
		for n := range animals {
			a.Patient.ID = id(n)
			if !yield(a, nil) {
				return
			}
		}
	}
}

// BenchmarkCSV reports the rate of the findings table against the standard writer with the
// same rows ready made. At least half is asked for.
func BenchmarkCSV(b *testing.B) {
	const animals = 500
	var all [][]string
	{
		var buf bytes.Buffer
		if _, err := CSV(context.Background(), &buf, FindingsTable, TableOptions{Animals: bigPractice(animals)}); err != nil {
			b.Fatal(err)
		}
		all, _ = csv.NewReader(&buf).ReadAll()
	}
	own, standard := time.Duration(0), time.Duration(0)
	for b.Loop() {
		start := time.Now()
		if _, err := CSV(context.Background(), io.Discard, FindingsTable, TableOptions{Animals: bigPractice(animals)}); err != nil {
			b.Fatal(err)
		}
		own += time.Since(start)
		start = time.Now()
		w := csv.NewWriter(io.Discard)
		if err := w.WriteAll(all); err != nil {
			b.Fatal(err)
		}
		standard += time.Since(start)
	}
	b.ReportMetric(standard.Seconds()/own.Seconds(), "rate/standard")
	b.ReportMetric(float64(len(all)*b.N)/own.Seconds(), "rows/s")
}

// BenchmarkCSVWholePractice exports 20,000 animals of ten visits with forty findings each and
// reports rows a second and the most memory in use (asked for: under 200 MiB).
func BenchmarkCSVWholePractice(b *testing.B) {
	var rows, peak int
	for b.Loop() {
		var m runtime.MemStats
		n, err := CSV(context.Background(), io.Discard, FindingsTable, TableOptions{Animals: bigPractice(20_000), Progress: func(n int) {
			if n%1000 == 0 {
				runtime.ReadMemStats(&m)
				peak = max(peak, int(m.HeapInuse))
			}
		}})
		if err != nil {
			b.Fatal(err)
		}
		rows += n
	}
	b.ReportMetric(float64(rows)/b.Elapsed().Seconds(), "rows/s")
	b.ReportMetric(float64(peak)/(1<<20), "MiB-in-use")
}
