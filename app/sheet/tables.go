package sheet

import (
	"bufio"
	"context"
	"crypto/hmac"
	"crypto/sha256"
	"encoding/base32"
	"errors"
	"fmt"
	"io"
	"iter"
	"math"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/xuri/excelize/v2"

	"cordwalk.example/cordwalk/exam"
)

// Table is one of the tables for analysis. They are tidy: one thing a row, one fact a column.
type Table uint8

// The tables.
const (
	FindingsTable Table = iota // one finding a row
	MeasuresTable              // one measured value a row
	VisitsTable                // one visit a row
	PatientsTable              // one animal a row
	CodebookTable              // what every column and every code means
	tableCount
)

var tableNames = [tableCount]string{"findings", "measures", "visits", "patients", "codebook"}

// Tables lists every table.
func Tables() []Table {
	return []Table{FindingsTable, MeasuresTable, VisitsTable, PatientsTable, CodebookTable}
}

// String returns the table's name, used for files and sheets.
func (t Table) String() string {
	if t < tableCount {
		return tableNames[t]
	}
	return "unknown"
}

// ParseTable is the inverse of String.
func ParseTable(word string) (Table, error) {
	for i, n := range tableNames {
		if n == word {
			return Table(i), nil
		}
	}
	return 0, &exam.Invalid{Field: "table", Value: word, Allowed: strings.Join(tableNames[:], ", ")}
}

// TableOptions say what the tables hold.
type TableOptions struct {
	// Pseudonyms leaves out the names of animals and people, addresses, free texts and the day
	// of birth, and puts pseudonyms in place of ids. The same Secret gives the same pseudonyms.
	Pseudonyms bool
	Secret     []byte            // needed with Pseudonyms: at least 16 bytes, kept by the practice
	Progress   func(animals int) // called after each animal; may be nil
	Animals    iter.Seq2[Animal, error]
}

// ErrNoSecret means that pseudonyms were asked for without a secret to make them from.
var ErrNoSecret = errors.New("pseudonyms need a secret of at least 16 bytes that the practice keeps")

func (o TableOptions) check() error {
	if o.Pseudonyms && len(o.Secret) < 16 {
		return ErrNoSecret
	}
	return nil
}

var pseudonymLetters = base32.StdEncoding.WithPadding(base32.NoPadding)

// pseudonym names a thing by a keyed hash (HMAC, RFC 2104, with SHA-256): nobody without the
// secret can go back, and the same thing has the same name in every export.
func (o TableOptions) pseudonym(prefix, what string) string {
	m := hmac.New(sha256.New, o.Secret)
	m.Write([]byte(prefix))
	m.Write([]byte{0})
	m.Write([]byte(what))
	return prefix + "-" + pseudonymLetters.EncodeToString(m.Sum(nil))[:12]
}

// cell is one value of a table; the zero cell is empty.
type cell struct {
	kind cellKind
	text string
	num  float64
	time time.Time
}

type cellKind uint8

const (
	empty cellKind = iota
	textCell
	numCell
	timeCell
)

func text(s string) cell {
	if s == "" {
		return cell{}
	}
	return cell{kind: textCell, text: s}
}
func num(v float64) cell { return cell{kind: numCell, num: v} }
func flagCell(b bool) cell {
	if b {
		return num(1)
	}
	return num(0)
}

// column describes one column for the codebook.
type column struct {
	name    string
	meaning string
	values  string
	private bool // left out with pseudonyms
}

var visitColumns = []column{
	{"patient", "the animal: its id, or its pseudonym", "id", false},
	{"name", "the animal's name", "text", true},
	{"species", "species", "dog, cat, horse, rabbit", false},
	{"breed", "breed", "text", false},
	{"sex", "sex", "female, male, empty: not known", false},
	{"neutered", "neutered", "0 no, 1 yes", false},
	{"born", "day, month or year of birth; the year alone with pseudonyms", "date", false},
	{"visit", "the visit: its id, or its pseudonym", "id", false},
	{"examined", "when the exam was done, with its offset from UTC", "time", false},
	{"day", "days since the animal's first visit", "number, days", false},
	{"days_since_onset", "days since the onset of the first problem whose onset is known", "number, days", false},
	{"days_since_surgery", "days since the latest surgery before the visit", "number, days", false},
	{"examiner", "who examined, or the pseudonym", "text", false},
	{"state", "state of the visit", "open, closed", false},
	{"sedation", "sedation during the exam", "none, mild, moderate, deep", false},
	{"aid", "aid the animal wore or walked in", "none, sling, harness, boots, splint, cart; empty: not said", false},
	{"surface", "floor", "grip, slick, grass; empty: not said", false},
	{"session", "before or after the session's treatment", "before, after; empty: not said", false},
}

var tableColumns = map[Table][]column{
	FindingsTable: append(slices.Clone(visitColumns),
		column{"item", "what was tested", "see the items below", false},
		column{"group", "the items' group", "text", false},
		column{"site", "where", "site of the vocabulary", false},
		column{"digit", "digit that was pinched", "medial, lateral; empty: not said", false},
		column{"joint", "joint", "joint of the vocabulary; empty: none", false},
		column{"side", "side beside the site", "left, right; empty: not said", false},
		column{"level", "vertebra", "such as T13; empty: none", false},
		column{"tested", "there is a grade", "0 no, 1 yes", false},
		column{"grade", "the grade; empty: not tested", "see the items below", false},
		column{"grade_word", "the grade in words", "text", false},
		column{"normal_grade", "the item's normal grade; empty: it has none", "number", false},
		column{"health", "nearness to normal: 1 normal, 0 as far as the scale goes", "number, 0 to 1", false},
		column{"not_tested", "why there is no grade", "pain, temperament, sedation, not safe, owner declined, other; empty: no reason given", false},
		column{"how", "how the grade came to be", "examined, same (copied from last visit), rest-normal (filled in a block)", false},
		column{"seen", "the examiner had looked at last visit's grade", "0 no, 1 yes", false},
		column{"note", "note", "text", true}),
	MeasuresTable: append(slices.Clone(visitColumns),
		column{"measure", "what was measured", "see the measures below", false},
		column{"site", "where", "site of the vocabulary; empty: none", false},
		column{"joint", "joint", "joint of the vocabulary; empty: none", false},
		column{"motion", "direction of the joint", "flexion, extension; empty: none", false},
		column{"value", "the value", "number, in the unit", false},
		column{"unit", "the unit", "UCUM code in the measures below", false},
		column{"at", "place along the bone", "number, %; empty: not said", false},
		column{"position", "how the animal lay or stood", "text", true},
		column{"clipped", "the coat was clipped", "0 no, 1 yes", false},
		column{"end_feel", "end feel of the joint", "soft, firm, hard, empty; or nothing", false},
		column{"variant", "version of the scale", "text", false},
		column{"best_end", "the scale's best value", "number; empty: not said", false},
		column{"note", "note", "text", true}),
	VisitsTable: append(slices.Clone(visitColumns),
		column{"protocol", "protocol that was walked", "text", false},
		column{"closed_at", "when the visit was closed", "time; empty: open", false},
		column{"repeat_of", "the visit that this one repeats blind", "id, or pseudonym; empty: none", false},
		column{"findings", "findings with a grade", "number", false},
		column{"untested", "findings with a reason instead of a grade", "number", false},
		column{"treatments", "treatments given", "kinds, with minutes, between semicolons", false},
		column{"exercises_set", "home exercises the owner was asked to do", "number", false},
		column{"exercises_done", "home exercises the owner says were done", "number", false},
		column{"next_visit", "day of the next visit", "date", false},
		column{"note", "note", "text", true}),
	PatientsTable: {
		visitColumns[0], visitColumns[1], visitColumns[2], visitColumns[3], visitColumns[4], visitColumns[5], visitColumns[6],
		{"status", "status", "active, discharged, died", false},
		{"status_since", "since when", "date", false},
		{"diagnosis", "first problem on file", "text", false},
		{"level", "its vertebral level", "such as T12-T13", false},
		{"onset", "its onset", "date", false},
		{"surgery", "its surgery", "date", false},
		{"visits", "visits on file", "number", false},
		{"first_visit", "first visit", "time", false},
		{"last_visit", "last visit", "time", false},
		{"owner", "owner's name", "text", true},
		{"demo", "an invented animal of the demo practice", "0 no, 1 yes", false},
	},
	CodebookTable: {
		{"table", "table, item or measure", "text", false},
		{"column", "column, site or grade", "text", false},
		{"meaning", "what it means", "text", false},
		{"values", "what may stand there", "text", false},
	},
}

// Columns lists the names of a table's columns.
func Columns(t Table, pseudonyms bool) []string {
	var out []string
	for _, c := range tableColumns[t] {
		if !pseudonyms || !c.private {
			out = append(out, c.name)
		}
	}
	return out
}

// rows makes the rows of the tables, animal by animal. The slice handed to emit is used again.
type rows struct {
	o    TableOptions
	row  []cell
	base []cell // the cells that all rows of a visit share
	seq  int    // counts the visits, so that what base makes can be kept
}

func (r *rows) start() { r.row = r.row[:0] }
func (r *rows) add(c ...cell) {
	r.row = append(r.row, c...)
}

func (r *rows) private(c cell) {
	if !r.o.Pseudonyms {
		r.row = append(r.row, c)
	}
}

func (r *rows) id(prefix string, id exam.ID) cell {
	if id.IsZero() {
		return cell{}
	}
	if r.o.Pseudonyms {
		return text(r.o.pseudonym(prefix, id.String()))
	}
	return text(id.String())
}

func (r *rows) animal(p exam.Patient) {
	r.add(r.id("P", p.ID))
	r.private(text(p.Name))
	born := string(p.Born)
	if r.o.Pseudonyms && len(born) > 4 {
		born = born[:4]
	}
	sex := ""
	if p.Sex != exam.SexUnknown {
		sex = p.Sex.String()
	}
	r.add(text(p.Species.String()), text(p.Breed), text(sex), flagCell(p.Neutered), text(born))
}

// visit fills base with the cells shared by all rows of the visit.
func (r *rows) visit(a Animal, v exam.Visit) {
	r.start()
	r.animal(a.Patient)
	r.add(r.id("V", v.ID), cell{kind: timeCell, time: v.Examined}, num(round(v.Examined.Sub(a.Visits[0].Examined).Hours()/24, 2)))
	onset, surgery := math.NaN(), math.NaN()
	for _, p := range a.Patient.Problems {
		if d, ok := p.Onset.DaysBefore(v.Examined); ok && !(d <= onset) {
			onset = d
		}
		if d, ok := p.Surgery.DaysBefore(v.Examined); ok && d > -1 && !(d >= surgery) {
			surgery = d
		}
	}
	for _, d := range []float64{onset, surgery} {
		if math.IsNaN(d) {
			r.add(cell{})
		} else {
			r.add(num(math.Round(d)))
		}
	}
	examiner := v.Examiner
	if r.o.Pseudonyms && examiner != "" {
		examiner = r.o.pseudonym("E", examiner)
	}
	state := "open"
	if v.State == exam.Closed {
		state = "closed"
	}
	r.add(text(examiner), text(state), text(v.Sedation.String()), text(v.Aid), text(v.Surface), text(v.Session))
	r.base = append(r.base[:0], r.row...)
	r.seq++
}

func round(v float64, digits int) float64 {
	f := math.Pow(10, float64(digits))
	return math.Round(v*f) / f
}

// each hands every row of a table of one animal to emit.
func (r *rows) each(t Table, a Animal, emit func([]cell) error) error {
	if t == PatientsTable {
		return r.patientRow(a, emit)
	}
	for _, v := range a.Visits {
		r.visit(a, v)
		switch t {
		case FindingsTable:
			for i := range v.Findings {
				r.row = append(r.row[:0], r.base...)
				r.finding(v.Findings[i])
				if err := emit(r.row); err != nil {
					return err
				}
			}
		case MeasuresTable:
			for _, m := range v.Measures {
				r.row = append(r.row[:0], r.base...)
				r.measured(m)
				if err := emit(r.row); err != nil {
					return err
				}
			}
		case VisitsTable:
			r.row = append(r.row[:0], r.base...)
			r.visitRow(v)
			if err := emit(r.row); err != nil {
				return err
			}
		}
	}
	return nil
}

func (r *rows) finding(f exam.Finding) {
	in := f.Item.Info()
	r.add(text(in.Name), text(in.Group.String()), text(f.Site.String()), text(f.Digit.String()), text(f.Joint.String()), text(f.Side.String()), text(f.Level.String()))
	g, ok := f.Result.Grade()
	r.add(flagCell(ok))
	if ok {
		r.add(num(float64(g)), text(f.Item.GradeWord(g)))
	} else {
		r.add(cell{}, cell{})
	}
	if in.Normal >= 0 {
		r.add(num(float64(in.Normal)))
	} else {
		r.add(cell{})
	}
	if h, ok := f.Health(); ok {
		r.add(num(round(h, 4)))
	} else {
		r.add(cell{})
	}
	r.add(text(f.Result.Reason().String()), text(f.How.String()), flagCell(f.Seen))
	r.private(text(f.Note))
}

func (r *rows) measured(m exam.Measured) {
	in := m.Measure.Info()
	r.add(text(in.Name), text(m.Site.String()), text(m.Joint.String()), text(m.Motion), num(m.Value), text(in.Unit))
	if m.At != 0 {
		r.add(num(m.At))
	} else {
		r.add(cell{})
	}
	r.private(text(m.Position))
	r.add(flagCell(m.Clipped), text(m.EndFeel), text(m.Variant))
	if m.Variant != "" || m.BestEnd != 0 {
		r.add(num(m.BestEnd))
	} else {
		r.add(cell{})
	}
	r.private(text(m.Note))
}

func (r *rows) visitRow(v exam.Visit) {
	tested := 0
	for _, f := range v.Findings {
		if f.Result.Tested() {
			tested++
		}
	}
	var given []string
	for _, t := range v.Treatments {
		s := t.Kind
		if t.Minutes > 0 {
			s += " " + strconv.FormatFloat(t.Minutes, 'g', -1, 64) + " min"
		}
		given = append(given, s)
	}
	closed := cell{}
	if !v.ClosedAt.IsZero() {
		closed = cell{kind: timeCell, time: v.ClosedAt}
	}
	r.add(text(v.Protocol), closed, r.id("V", v.RepeatOf), num(float64(tested)), num(float64(len(v.Findings)-tested)), text(strings.Join(given, "; ")),
		num(float64(v.Report.ExercisesSet)), num(float64(v.Report.ExercisesDone)), text(string(v.NextVisit)))
	r.private(text(v.Note))
}

func (r *rows) patientRow(a Animal, emit func([]cell) error) error {
	r.start()
	r.animal(a.Patient)
	p := a.Patient
	r.add(text(p.Status.String()), text(string(p.StatusSince)))
	var first exam.Problem
	if len(p.Problems) > 0 {
		first = p.Problems[0]
	}
	r.add(text(first.Diagnosis), text(first.Level), text(string(first.Onset)), text(string(first.Surgery)), num(float64(len(a.Visits))))
	if n := len(a.Visits); n > 0 {
		r.add(cell{kind: timeCell, time: a.Visits[0].Examined}, cell{kind: timeCell, time: a.Visits[n-1].Examined})
	} else {
		r.add(cell{}, cell{})
	}
	r.private(text(p.Owner.Name))
	r.add(flagCell(p.Demo))
	return emit(r.row)
}

// codebook hands every row of the codebook to emit: the columns of each table, then every
// item with its grades, then every measure with its unit.
func codebook(pseudonyms bool, emit func([]cell) error) error {
	put := func(parts ...string) error {
		row := make([]cell, len(parts))
		for i, p := range parts {
			row[i] = text(p)
		}
		return emit(row)
	}
	for _, t := range Tables() {
		if t == CodebookTable {
			continue
		}
		for _, c := range tableColumns[t] {
			if pseudonyms && c.private {
				continue
			}
			if err := put(t.String(), c.name, c.meaning, c.values); err != nil {
				return err
			}
		}
	}
	for _, i := range exam.Items() {
		in := i.Info()
		sites := make([]string, len(in.Sites))
		for k, s := range in.Sites {
			sites[k] = s.String()
		}
		if err := put("item "+in.Name, "sites", in.Group.String(), strings.Join(sites, ", ")); err != nil {
			return err
		}
		for k, w := range in.Grades {
			g := in.First + int8(k)
			note := ""
			if g == in.Normal {
				note = "normal"
			}
			if err := put("item "+in.Name, "grade "+strconv.Itoa(int(g)), w, note); err != nil {
				return err
			}
		}
	}
	for _, m := range exam.Measures() {
		in := m.Info()
		if err := put("measure "+in.Name, in.Unit, "UCUM "+UCUM(m), fmt.Sprintf("%g to %g", in.Min, in.Max)); err != nil {
			return err
		}
	}
	return put("text", "apostrophe", "In CSV files a text that begins with =, +, -, @ or a tab has an apostrophe before it, so that no spreadsheet runs it.", "")
}

// risky reports whether a spreadsheet might run a text as a formula (common practice: the
// first letters =, +, -, @, tab and line end, also in their full-width forms).
func risky(s string) bool {
	switch s[0] {
	case '=', '+', '-', '@', '\t', '\r', '\n':
		return true
	}
	for _, p := range []string{"＝", "＋", "－", "＠"} {
		if strings.HasPrefix(s, p) {
			return true
		}
	}
	return false
}

// appendCells appends cells in the form of RFC 4180, without the end of the row.
func appendCells(b []byte, row []cell) []byte {
	for i := range row {
		if i > 0 {
			b = append(b, ',')
		}
		c := &row[i]
		switch c.kind {
		case textCell:
			b = appendText(b, c.text)
		case numCell:
			if n := int64(c.num); float64(n) == c.num {
				b = strconv.AppendInt(b, n, 10)
			} else {
				b = strconv.AppendFloat(b, c.num, 'g', -1, 64)
			}
		case timeCell:
			b = c.time.AppendFormat(b, time.RFC3339)
		}
	}
	return b
}

func appendText(b []byte, s string) []byte {
	plain := !risky(s) && s[0] != ' '
	if plain {
		for i := range len(s) {
			if s[i] == ',' || s[i] == '"' || s[i] == '\n' || s[i] == '\r' {
				plain = false
				break
			}
		}
	}
	if plain {
		return append(b, s...)
	}
	b = append(b, '"')
	if risky(s) {
		b = append(b, '\'')
	}
	for i := range len(s) {
		if s[i] == '"' {
			b = append(b, '"')
		}
		b = append(b, s[i])
	}
	return append(b, '"')
}

// CSV writes one table as CSV (RFC 4180, UTF-8 with a byte-order mark so that spreadsheets
// read it right) and returns how many rows it wrote. It holds one animal in memory at a time
// and ends with the context's error when it is cancelled.
func CSV(ctx context.Context, w io.Writer, t Table, o TableOptions) (int, error) {
	if err := o.check(); err != nil {
		return 0, err
	}
	out := bufio.NewWriterSize(w, 64<<10)
	if _, err := out.WriteString("\ufeff"); err != nil {
		return 0, fmt.Errorf("writing %s: %w", t, err)
	}
	var buf []byte
	header := make([]cell, 0, 40)
	for _, c := range Columns(t, o.Pseudonyms) {
		header = append(header, text(c))
	}
	if _, err := out.Write(append(appendCells(nil, header), '\r', '\n')); err != nil {
		return 0, fmt.Errorf("writing %s: %w", t, err)
	}
	n := 0
	shared, kept := 0, -1 // the bytes of the cells that a visit's rows share, and of which visit
	emit := func(_ Table, r *rows, row []cell) error {
		n++
		if len(row) <= len(r.base) || t == PatientsTable || t == CodebookTable {
			buf = append(appendCells(buf[:0], row), '\r', '\n')
		} else {
			if kept != r.seq {
				buf = append(appendCells(buf[:0], r.base), ',')
				shared, kept = len(buf), r.seq
			}
			buf = append(appendCells(buf[:shared], row[len(r.base):]), '\r', '\n')
		}
		_, err := out.Write(buf)
		return err
	}
	if err := o.walk(ctx, []Table{t}, emit); err != nil {
		return n, fmt.Errorf("writing %s: %w", t, err)
	}
	if err := out.Flush(); err != nil {
		return n, fmt.Errorf("writing %s: %w", t, err)
	}
	return n, nil
}

// walk goes through all animals once and hands every row of the tables to emit.
func (o TableOptions) walk(ctx context.Context, tables []Table, emit func(Table, *rows, []cell) error) error {
	r := &rows{o: o}
	if slices.Contains(tables, CodebookTable) {
		if err := codebook(o.Pseudonyms, func(row []cell) error { return emit(CodebookTable, r, row) }); err != nil {
			return err
		}
	}
	if o.Animals == nil || len(tables) == 1 && tables[0] == CodebookTable {
		return nil
	}
	n := 0
	for a, err := range o.Animals {
		if err != nil {
			return err
		}
		if err := ctx.Err(); err != nil {
			return err
		}
		for _, t := range tables {
			if t == CodebookTable {
				continue
			}
			if err := r.each(t, a, func(row []cell) error { return emit(t, r, row) }); err != nil {
				return err
			}
		}
		n++
		if o.Progress != nil {
			o.Progress(n)
		}
	}
	return nil
}

// maxSheetRows is how many rows a sheet takes (Excel's limit of 1,048,576, from memory).
const maxSheetRows = 1 << 20

// XLSX writes all tables as one workbook with a sheet each and the codebook last; a table
// with more rows than a sheet takes goes on in «findings 2» and so on. Numbers are numbers,
// times are times. Texts are never formulas. Rows are streamed.
func XLSX(ctx context.Context, w io.Writer, o TableOptions) error {
	return xlsx(ctx, w, o, maxSheetRows)
}

func xlsx(ctx context.Context, w io.Writer, o TableOptions, maxRows int) (err error) {
	if err := o.check(); err != nil {
		return err
	}
	f := excelize.NewFile()
	defer func() {
		if e := f.Close(); err == nil && e != nil {
			err = fmt.Errorf("writing the workbook: %w", e)
		}
	}()
	bold, err := f.NewStyle(&excelize.Style{Font: &excelize.Font{Bold: true}})
	if err != nil {
		return fmt.Errorf("writing the workbook: %w", err)
	}
	format := "yyyy-mm-dd hh:mm"
	when, err := f.NewStyle(&excelize.Style{CustomNumFmt: &format})
	if err != nil {
		return fmt.Errorf("writing the workbook: %w", err)
	}
	x := &book{f: f, o: o, bold: bold, when: when, max: maxRows}
	for i, t := range Tables() {
		if err := x.open(t, i == 0); err != nil {
			return fmt.Errorf("writing the workbook: %w", err)
		}
	}
	if err := o.walk(ctx, Tables(), x.emit); err != nil {
		return fmt.Errorf("writing the workbook: %w", err)
	}
	for _, s := range x.sheets {
		if err := s.w.Flush(); err != nil {
			return fmt.Errorf("writing the workbook: %w", err)
		}
	}
	if err := f.Write(w); err != nil {
		return fmt.Errorf("writing the workbook: %w", err)
	}
	return nil
}

type book struct {
	f          *excelize.File
	o          TableOptions
	bold, when int
	max        int
	sheets     [tableCount]*bookSheet
}

type bookSheet struct {
	w    *excelize.StreamWriter
	row  int
	part int
	vals []any
}

// open begins the sheet of a table, or its next part.
func (x *book) open(t Table, first bool) error {
	s := x.sheets[t]
	if s == nil {
		s = &bookSheet{}
		x.sheets[t] = s
	} else if err := s.w.Flush(); err != nil {
		return err
	}
	s.part++
	name := t.String()
	if s.part > 1 {
		name += " " + strconv.Itoa(s.part)
	}
	if first && s.part == 1 {
		if err := x.f.SetSheetName("Sheet1", name); err != nil {
			return err
		}
	} else if _, err := x.f.NewSheet(name); err != nil {
		return err
	}
	w, err := x.f.NewStreamWriter(name)
	if err != nil {
		return err
	}
	s.w, s.row = w, 1
	if err := w.SetPanes(&excelize.Panes{Freeze: true, YSplit: 1, TopLeftCell: "A2", ActivePane: "bottomLeft"}); err != nil {
		return err
	}
	var head []any
	for _, c := range Columns(t, x.o.Pseudonyms) {
		head = append(head, excelize.Cell{StyleID: x.bold, Value: c})
	}
	return w.SetRow("A1", head)
}

func (x *book) emit(t Table, _ *rows, row []cell) error {
	s := x.sheets[t]
	if s.row >= x.max {
		if err := x.open(t, false); err != nil {
			return err
		}
	}
	s.row++
	s.vals = s.vals[:0]
	for _, c := range row {
		switch c.kind {
		case textCell:
			s.vals = append(s.vals, c.text)
		case numCell:
			s.vals = append(s.vals, c.num)
		case timeCell:
			// A sheet knows no offsets: the time of the place where it was recorded.
			_, off := c.time.Zone()
			local := c.time.UTC().Add(time.Duration(off) * time.Second)
			s.vals = append(s.vals, excelize.Cell{StyleID: x.when, Value: local})
		default:
			s.vals = append(s.vals, nil)
		}
	}
	return s.w.SetRow("A"+strconv.Itoa(s.row), s.vals)
}
