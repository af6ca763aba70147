package exam

import (
	"bytes"
	"cmp"
	"encoding/json"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
	"time"
	"unicode"
	"unicode/utf8"
)

// FileVersion is the major version of exam files that EncodeFile writes and the newest that DecodeFile reads.
const FileVersion = 1

// maxFile bounds what DecodeFile reads: an exam of every item at every site is under 100 kB.
const maxFile = 8 << 20

// FileProblem is the diagnosis on file with its vertebral level, as an exam file states it.
type FileProblem struct {
	Diagnosis string
	Level     string
}

// File is one exam with what is known of the animal, as exam files hold it. Only
// Species is required; a file that joins a store or a series also needs Examined and Examiner.
type File struct {
	ID          ID // zero where the file has none
	Species     Species
	Examined    time.Time
	Examiner    string
	WeightKg    float64 // 0 where not said
	Born        Date
	Onset       Date
	Surgery     Date
	Breed       string
	Problem     FileProblem
	Sedation    Sedation
	Aid         string
	Surface     string
	Session     string
	Precautions []PrecautionOn
	Findings    []Finding // in vocabulary order
	Measures    []Measured
	Note        string
}

// unitAliases are plain-keyboard spellings that are read as the measure's own unit.
var unitAliases = map[string]string{"C": "°C", "degC": "°C", "deg": "°", "1/min": "/min", "percent": "%", "count": "1", "": "1"}

// DecodeFile reads an exam file. Unknown fields are ignored; the warnings name each once.
// The error is an *Invalid whose Field names the place (findings[3].grade), or says in
// which line the JSON is broken. A field that is null counts as not given.
func DecodeFile(data []byte) (File, []string, error) {
	if len(data) > maxFile {
		return File{}, nil, &Invalid{"exam file", strconv.Itoa(len(data)) + " bytes", "at most 8 MiB"}
	}
	r := &fileReader{unknown: map[string]int{}}
	f := r.file("", bytes.TrimPrefix(data, []byte("\ufeff"))) // some editors put a mark before the text
	return f, r.warnings(), r.err
}

// DecodeSeries reads a JSON list of exam files of one animal. Each needs examined and
// examiner; all must be of one species. The exams are returned oldest first.
func DecodeSeries(data []byte) ([]File, []string, error) {
	if len(data) > 8*maxFile {
		return nil, nil, &Invalid{"series", strconv.Itoa(len(data)) + " bytes", "at most 64 MiB"}
	}
	r := &fileReader{unknown: map[string]int{}}
	var raw []json.RawMessage
	if err := json.Unmarshal(data, &raw); err != nil {
		return nil, nil, syntax(data, err, "a list of exams, [{…}, {…}]")
	}
	files := make([]File, 0, min(len(raw), 4096))
	for i, one := range raw {
		at := fmt.Sprintf("[%d]", i)
		f := r.file(at+".", one)
		if r.err == nil && f.Examined.IsZero() {
			r.refuse(at+".examined", "", "a time such as 2026-03-02T10:15:00+01:00")
		}
		if r.err == nil && f.Examiner == "" {
			r.refuse(at+".examiner", "", "the examiner's name")
		}
		if r.err == nil && len(files) > 0 && f.Species != files[0].Species {
			r.refuse(at+".species", f.Species.String(), files[0].Species.String()+", as the first exam says")
		}
		if r.err != nil {
			return nil, r.warnings(), r.err
		}
		files = append(files, f)
	}
	slices.SortStableFunc(files, func(a, b File) int { return a.Examined.Compare(b.Examined) })
	return files, r.warnings(), nil
}

// fileReader walks a file; after the first refusal everything else is skipped.
type fileReader struct {
	err     error
	unknown map[string]int
	order   []string
	extra   []string
}

func (r *fileReader) refuse(field, value, allowed string) {
	if r.err == nil {
		r.err = &Invalid{field, short(value), allowed}
	}
}

func (r *fileReader) warnings() []string {
	out := slices.Clone(r.extra)
	for _, name := range r.order {
		if n := r.unknown[name]; n > 1 {
			out = append(out, fmt.Sprintf("field %q is not known and was ignored (%d times)", short(name), n))
		} else {
			out = append(out, fmt.Sprintf("field %q is not known and was ignored", short(name)))
		}
	}
	return out
}

// short makes a met value fit to be printed: one line, printable, at most 60 letters.
func short(s string) string {
	var b strings.Builder
	n := 0
	for _, c := range s {
		if n++; n > 60 {
			b.WriteString("…")
			break
		}
		if !unicode.IsPrint(c) {
			c = '·'
		}
		b.WriteRune(c)
	}
	return b.String()
}

// syntax turns an error of the JSON decoder into a sentence with a line number.
func syntax(data []byte, err error, want string) error {
	line := 1
	if s, ok := err.(*json.SyntaxError); ok {
		line += bytes.Count(data[:min(int(max(s.Offset, 0)), len(data))], []byte("\n"))
		return &Invalid{fmt.Sprintf("exam file, line %d", line), short(err.Error()), "JSON"}
	}
	return &Invalid{"exam file", short(kindOf(data)), want}
}

func kindOf(raw []byte) string {
	raw = bytes.TrimSpace(raw)
	if len(raw) == 0 {
		return "nothing"
	}
	switch raw[0] {
	case '{':
		return "an object"
	case '[':
		return "a list"
	case '"':
		return "a text"
	}
	return short(string(raw[:min(len(raw), 80)]))
}

// fields is one JSON object; reading a field takes it out, what remains at the end is unknown.
type fields struct {
	r    *fileReader
	path string // with a trailing dot where not empty
	kind string // for warnings: "findings", "measures" or empty
	raw  map[string]json.RawMessage
}

func (r *fileReader) object(path, kind string, data []byte) (fields, bool) {
	o := fields{r: r, path: path, kind: kind}
	if r.err != nil {
		return o, false
	}
	if err := json.Unmarshal(data, &o.raw); err != nil || o.raw == nil {
		if s, ok := err.(*json.SyntaxError); ok && path == "" {
			r.err = syntax(data, s, "")
		} else {
			r.refuse(cmp.Or(strings.TrimSuffix(path, "."), "exam file"), kindOf(data), "an object { … }")
		}
		return o, false
	}
	return o, true
}

// take returns the field's text and whether it is there and not null.
func (o fields) take(name string) (json.RawMessage, bool) {
	raw, ok := o.raw[name]
	delete(o.raw, name)
	return raw, ok && o.r.err == nil && !bytes.Equal(bytes.TrimSpace(raw), []byte("null"))
}

func (o fields) text(name string, limit int) string {
	raw, ok := o.take(name)
	if !ok {
		return ""
	}
	var s string
	if json.Unmarshal(raw, &s) != nil {
		o.r.refuse(o.path+name, kindOf(raw), "a text in quotes")
		return ""
	}
	if utf8.RuneCountInString(s) > limit {
		o.r.refuse(o.path+name, s, "at most "+strconv.Itoa(limit)+" letters")
		return ""
	}
	return s
}

func (o fields) number(name string) (float64, bool) {
	raw, ok := o.take(name)
	if !ok {
		return 0, false
	}
	var v float64
	if json.Unmarshal(raw, &v) != nil || math.IsInf(v, 0) {
		o.r.refuse(o.path+name, kindOf(raw), "a number")
		return 0, false
	}
	return v, true
}

func (o fields) flag(name string) bool {
	raw, ok := o.take(name)
	if !ok {
		return false
	}
	var v bool
	if json.Unmarshal(raw, &v) != nil {
		o.r.refuse(o.path+name, kindOf(raw), "true or false")
	}
	return v
}

func (o fields) list(name string) []json.RawMessage {
	raw, ok := o.take(name)
	if !ok {
		return nil
	}
	var v []json.RawMessage
	if json.Unmarshal(raw, &v) != nil {
		o.r.refuse(o.path+name, kindOf(raw), "a list [ … ]")
	}
	return v
}

func (o fields) date(name string) Date {
	word := o.text(name, 40)
	d, err := ParseDate(word)
	if err != nil {
		o.refer(name, err)
	}
	return d
}

// refer refuses with the reason of err, at the field's place.
func (o fields) refer(name string, err error) {
	if in, ok := err.(*Invalid); ok {
		o.r.refuse(o.path+name, in.Value, in.Allowed)
	} else if err != nil {
		o.r.refuse(o.path+name, "", err.Error())
	}
}

// done notes every field that nobody took.
func (o fields) done() {
	if o.r.err != nil {
		return
	}
	names := make([]string, 0, len(o.raw))
	for name := range o.raw {
		names = append(names, name)
	}
	slices.Sort(names)
	for _, name := range names {
		if o.kind != "" {
			name = o.kind + "." + name
		}
		if o.r.unknown[name] == 0 {
			if len(o.r.order) >= 50 { // a hostile file must not make an endless list
				continue
			}
			o.r.order = append(o.r.order, name)
		}
		o.r.unknown[name]++
	}
}

func (r *fileReader) file(path string, data []byte) File {
	var f File
	o, ok := r.object(path, "", data)
	if !ok {
		return File{}
	}
	if raw, ok := o.take("version"); ok {
		word := strings.Trim(string(bytes.TrimSpace(raw)), `"`)
		major, _, _ := strings.Cut(word, ".")
		if n, err := strconv.Atoi(major); err != nil || n < 1 {
			r.refuse(path+"version", kindOf(raw), "a number such as 1")
		} else if n > FileVersion {
			r.refuse(path+"version", word, fmt.Sprintf("version %d, the newest this program reads; a newer program wrote this file", FileVersion))
		}
	}
	species := o.text("species", 60)
	if r.err == nil {
		var err error
		if f.Species, err = ParseSpecies(species); err != nil {
			o.refer("species", err)
		}
	}
	if word := o.text("id", 200); word != "" {
		id, err := ParseID(word)
		if err != nil {
			r.extra = append(r.extra, fmt.Sprintf("id %q is no UUID and was ignored", short(word)))
		}
		f.ID = id
	}
	if word := o.text("examined", 60); word != "" {
		t, err := time.Parse(time.RFC3339, word)
		if err != nil || t.Year() < 1900 || t.Year() >= 2200 {
			r.refuse(path+"examined", word, "a time such as 2026-03-02T10:15:00+01:00")
		}
		f.Examined = t
	}
	f.Examiner = strings.TrimSpace(o.text("examiner", 200))
	if kg, ok := o.number("weight_kg"); ok {
		in := Weight.Info()
		if kg < in.Min || kg > in.Max {
			r.refuse(path+"weight_kg", formatNumber(kg), formatNumber(in.Min)+" to "+formatNumber(in.Max)+" kg")
		}
		f.WeightKg = kg
	}
	f.Born, f.Onset, f.Surgery = o.date("born"), o.date("onset"), o.date("surgery")
	f.Breed = o.text("breed", 200)
	if raw, ok := o.take("problem"); ok {
		if p, ok := r.object(path+"problem.", "problem", raw); ok {
			f.Problem.Diagnosis = p.text("diagnosis", 500)
			f.Problem.Level = p.text("level", 40)
			if f.Problem.Level != "" && r.err == nil {
				if _, _, err := ParseLevelRange(f.Problem.Level, f.Species); err != nil {
					p.refer("level", err)
				}
			}
			p.done()
		}
	}
	var err error
	if f.Sedation, err = ParseSedation(o.text("sedation", 60)); err != nil {
		o.refer("sedation", err)
	}
	for _, c := range []struct {
		name    string
		into    *string
		allowed []string
	}{{"aid", &f.Aid, aidWords}, {"surface", &f.Surface, surfaceWords}, {"session", &f.Session, sessionWords}} {
		*c.into = o.text(c.name, 60)
		if err := checkWord(c.name, *c.into, c.allowed); err != nil {
			o.refer(c.name, err)
		}
	}
	f.Note = o.text("note", 20000)
	for i, raw := range o.list("precautions") {
		f.Precautions = append(f.Precautions, r.precaution(fmt.Sprintf("%sprecautions[%d]", path, i), raw))
		if r.err != nil {
			return File{}
		}
	}
	seen := map[Key]int{}
	for i, raw := range o.list("findings") {
		at := fmt.Sprintf("%sfindings[%d]", path, i)
		x, _ := r.finding(at, raw, f.Species)
		if r.err != nil {
			return File{}
		}
		if first, twice := seen[x.Key()]; twice {
			r.refuse(at, x.Key().String(), fmt.Sprintf("each cell once; findings[%d] fills it already", first))
			return File{}
		}
		seen[x.Key()] = i
		f.Findings = append(f.Findings, x)
	}
	SortFindings(f.Findings)
	cells := map[string]int{}
	for i, raw := range o.list("measures") {
		at := fmt.Sprintf("%smeasures[%d]", path, i)
		m := r.measured(at, raw)
		if r.err != nil {
			return File{}
		}
		if first, twice := cells[m.Key()]; twice {
			r.refuse(at, m.Key(), fmt.Sprintf("each value once; measures[%d] gives it already", first))
			return File{}
		}
		cells[m.Key()] = i
		f.Measures = append(f.Measures, m)
	}
	o.done()
	if r.err != nil {
		return File{}
	}
	return f
}

func (r *fileReader) precaution(at string, raw json.RawMessage) PrecautionOn {
	var p PrecautionOn
	var code string
	if json.Unmarshal(raw, &code) == nil {
		p.Code = code
	} else if o, ok := r.object(at+".", "precautions", raw); ok {
		p.Code, p.Site, p.Note = o.text("code", 60), o.text("site", 60), o.text("note", 2000)
		p.Since, p.Until = o.date("since"), o.date("until")
		if id := o.text("id", 60); id != "" {
			var err error
			if p.ID, err = ParseID(id); err != nil {
				o.refer("id", err)
			}
		}
		o.done()
	}
	if r.err == nil {
		if err := p.Validate(); err != nil {
			in := err.(*Invalid)
			r.refuse(at, in.Value, in.Allowed)
		}
	}
	return p
}

func (r *fileReader) finding(at string, raw json.RawMessage, s Species) (Finding, bool) {
	var f Finding
	o, ok := r.object(at+".", "findings", raw)
	if !ok {
		return f, false
	}
	var err error
	parse := func(name string, set func(word string) error) {
		if word := o.text(name, 80); word != "" && r.err == nil {
			if err = set(word); err != nil {
				o.refer(name, err)
			}
		}
	}
	_, hasItem := o.raw["item"]
	_, hasSite := o.raw["site"]
	parse("item", func(w string) error { f.Item, err = ParseItem(w); return err })
	parse("site", func(w string) error { f.Site, err = ParseSite(w); return err })
	if !hasItem || f.Item == NoItem {
		r.refuse(at+".item", "", "an item of the vocabulary")
	}
	if !hasSite && r.err == nil && len(f.Item.Info().Sites) == 1 {
		f.Site = f.Item.Info().Sites[0] // midline items have nowhere else to be
	}
	parse("digit", func(w string) error { f.Digit, err = ParseDigit(w); return err })
	parse("joint", func(w string) error { f.Joint, err = ParseJoint(w); return err })
	parse("level", func(w string) error { f.Level, err = ParseVertebra(w, s); return err })
	parse("side", func(w string) error { f.Side, err = ParseSite(w); return err })
	parse("how", func(w string) error { f.How, err = ParseHow(w); return err })
	f.Seen = o.flag("seen")
	f.Block = o.text("block", 100)
	f.Note = o.text("note", 2000)
	_, hasGrade := o.raw["grade"]
	grade, graded := o.number("grade")
	_, hasWhy := o.raw["not_tested"]
	why := o.text("not_tested", 500)
	switch {
	case r.err != nil:
	case graded && why != "":
		r.refuse(at+".not_tested", why, "either a grade or a reason for having none, not both")
	case graded:
		if grade != math.Trunc(grade) || grade < -100 || grade > 100 {
			r.refuse(at+".grade", formatNumber(grade), f.Item.gradeList())
			break
		}
		f.Result = Graded(int8(grade))
	case !hasGrade && !hasWhy:
		r.refuse(at+".grade", "", f.Item.gradeList()+"; or not_tested with a reason")
	default:
		reason, note := ParseReason(why)
		f.Result = Untested(reason)
		if note != "" {
			f.Note = strings.TrimSpace(strings.Join([]string{note, f.Note}, "; "))
			f.Note = strings.TrimSuffix(f.Note, ";")
		}
	}
	if r.err == nil {
		if err := f.Validate(s); err != nil {
			in := err.(*Invalid)
			part, _, _ := strings.Cut(in.Field, " ")
			r.refuse(fmt.Sprintf("%s.%s (%s at %s)", at, part, f.Item, f.Site), in.Value, in.Allowed)
		}
	}
	o.done()
	return f, r.err == nil
}

func (r *fileReader) measured(at string, raw json.RawMessage) Measured {
	var m Measured
	o, ok := r.object(at+".", "measures", raw)
	if !ok {
		return m
	}
	var err error
	name := o.text("measure", 80)
	if r.err == nil {
		if m.Measure, err = ParseMeasure(name); err != nil {
			o.refer("measure", err)
		}
	}
	if word := o.text("site", 80); word != "" {
		if m.Site, err = ParseSite(word); err != nil {
			o.refer("site", err)
		}
	}
	if word := o.text("joint", 80); word != "" {
		if m.Joint, err = ParseJoint(word); err != nil {
			o.refer("joint", err)
		}
	}
	m.Motion = o.text("motion", 40)
	_, given := o.raw["value"]
	var ok2 bool
	if m.Value, ok2 = o.number("value"); r.err == nil && (!given || !ok2) {
		r.refuse(at+".value", "", "a number in "+m.Measure.Info().Unit)
	}
	unit := o.text("unit", 40)
	if want := m.Measure.Info().Unit; r.err == nil && unit != want {
		if unit == "" && want != "1" {
			r.extra = append(r.extra, fmt.Sprintf("%s.unit is not given; the value was read as %s", at, want))
		} else if unitAliases[unit] != want {
			r.refuse(at+".unit ("+m.Measure.String()+")", unit, want)
		}
	}
	m.At, _ = o.number("at")
	m.Position, m.EndFeel, m.Variant = o.text("position", 100), o.text("end_feel", 100), o.text("variant", 100)
	m.Clipped = o.flag("clipped")
	m.BestEnd, _ = o.number("best_end")
	m.Note = o.text("note", 2000)
	if r.err == nil {
		if err := m.Validate(); err != nil {
			in := err.(*Invalid)
			part, _, _ := strings.Cut(in.Field, " ")
			if part == "place" {
				part = "at"
			}
			r.refuse(fmt.Sprintf("%s.%s (%s)", at, part, m.Measure), in.Value, in.Allowed)
		}
	}
	o.done()
	return m
}

func formatNumber(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }

// SortFindings puts findings in vocabulary order: by item, site, digit, joint.
func SortFindings(fs []Finding) {
	slices.SortStableFunc(fs, func(a, b Finding) int {
		return cmp.Or(cmp.Compare(a.Item, b.Item), cmp.Compare(a.Site, b.Site),
			cmp.Compare(a.Digit, b.Digit), cmp.Compare(a.Joint, b.Joint))
	})
}

// The shapes of an exam file as JSON, in the order the fields are written.
type (
	fileJSON struct {
		Version     int           `json:"version"`
		ID          string        `json:"id,omitempty"`
		Species     string        `json:"species"`
		Breed       string        `json:"breed,omitempty"`
		Examined    string        `json:"examined,omitempty"`
		Examiner    string        `json:"examiner,omitempty"`
		WeightKg    float64       `json:"weight_kg,omitempty"`
		Born        Date          `json:"born,omitempty"`
		Onset       Date          `json:"onset,omitempty"`
		Surgery     Date          `json:"surgery,omitempty"`
		Problem     *problemJSON  `json:"problem,omitempty"`
		Sedation    string        `json:"sedation,omitempty"`
		Aid         string        `json:"aid,omitempty"`
		Surface     string        `json:"surface,omitempty"`
		Session     string        `json:"session,omitempty"`
		Precautions []any         `json:"precautions,omitempty"`
		Findings    []findingJSON `json:"findings"`
		Measures    []measureJSON `json:"measures,omitempty"`
		Note        string        `json:"note,omitempty"`
	}
	problemJSON struct {
		Diagnosis string `json:"diagnosis,omitempty"`
		Level     string `json:"level,omitempty"`
	}
	precautionJSON struct {
		ID    string `json:"id,omitempty"`
		Code  string `json:"code"`
		Site  string `json:"site,omitempty"`
		Since Date   `json:"since,omitempty"`
		Until Date   `json:"until,omitempty"`
		Note  string `json:"note,omitempty"`
	}
	findingJSON struct {
		Item      string  `json:"item"`
		Site      string  `json:"site"`
		Digit     string  `json:"digit,omitempty"`
		Joint     string  `json:"joint,omitempty"`
		Grade     *int8   `json:"grade,omitempty"`
		NotTested *string `json:"not_tested,omitempty"`
		Level     string  `json:"level,omitempty"`
		Side      string  `json:"side,omitempty"`
		How       string  `json:"how,omitempty"`
		Seen      bool    `json:"seen,omitempty"`
		Block     string  `json:"block,omitempty"`
		Note      string  `json:"note,omitempty"`
	}
	measureJSON struct {
		Measure  string  `json:"measure"`
		Site     string  `json:"site,omitempty"`
		Joint    string  `json:"joint,omitempty"`
		Motion   string  `json:"motion,omitempty"`
		Value    float64 `json:"value"`
		Unit     string  `json:"unit"`
		At       float64 `json:"at,omitempty"`
		Position string  `json:"position,omitempty"`
		Clipped  bool    `json:"clipped,omitempty"`
		EndFeel  string  `json:"end_feel,omitempty"`
		Variant  string  `json:"variant,omitempty"`
		BestEnd  float64 `json:"best_end,omitempty"`
		Note     string  `json:"note,omitempty"`
	}
)

// EncodeFile writes an exam file, indented, that DecodeFile reads back as it was. It
// refuses a file that DecodeFile would refuse.
func EncodeFile(f File) ([]byte, error) {
	out := fileJSON{Version: FileVersion, Species: f.Species.String(), Breed: f.Breed, Examiner: f.Examiner,
		WeightKg: f.WeightKg, Born: f.Born, Onset: f.Onset, Surgery: f.Surgery, Aid: f.Aid, Surface: f.Surface,
		Session: f.Session, Note: f.Note, Sedation: f.Sedation.String(), Findings: []findingJSON{}}
	if !f.ID.IsZero() {
		out.ID = f.ID.String()
	}
	if !f.Examined.IsZero() {
		out.Examined = f.Examined.Format(time.RFC3339Nano)
	}
	if f.Problem != (FileProblem{}) {
		out.Problem = &problemJSON{f.Problem.Diagnosis, f.Problem.Level}
	}
	for _, p := range f.Precautions {
		if p == (PrecautionOn{Code: p.Code}) {
			out.Precautions = append(out.Precautions, p.Code)
			continue
		}
		j := precautionJSON{Code: p.Code, Site: p.Site, Since: p.Since, Until: p.Until, Note: p.Note}
		if !p.ID.IsZero() {
			j.ID = p.ID.String()
		}
		out.Precautions = append(out.Precautions, j)
	}
	for _, x := range f.Findings {
		j := findingJSON{Item: x.Item.String(), Site: x.Site.String(), Digit: x.Digit.String(), Joint: x.Joint.String(),
			Level: x.Level.String(), Side: x.Side.String(), Seen: x.Seen, Block: x.Block, Note: x.Note}
		if g, ok := x.Result.Grade(); ok {
			j.Grade = &g
		} else {
			why := x.Result.Reason().String()
			j.NotTested = &why
		}
		if x.How != Examined {
			j.How = x.How.String()
		}
		out.Findings = append(out.Findings, j)
	}
	for _, m := range f.Measures {
		out.Measures = append(out.Measures, measureJSON{Measure: m.Measure.String(), Site: m.Site.String(),
			Joint: m.Joint.String(), Motion: m.Motion, Value: m.Value, Unit: m.Measure.Info().Unit, At: m.At,
			Position: m.Position, Clipped: m.Clipped, EndFeel: m.EndFeel, Variant: m.Variant, BestEnd: m.BestEnd, Note: m.Note})
	}
	b, err := json.MarshalIndent(out, "", "  ")
	if err != nil {
		return nil, &Invalid{"exam file", short(err.Error()), "finite numbers"}
	}
	b = append(b, '\n')
	if _, _, err := DecodeFile(b); err != nil {
		return nil, err
	}
	return b, nil
}

// Visit returns the file's exam as a visit of the patient. The visit's ID is the
// file's, zero where it has none. A weight in the file becomes a measure of the visit.
func (f File) Visit(patient ID) Visit {
	v := Visit{ID: f.ID, Patient: patient, Examined: f.Examined, Examiner: f.Examiner, Sedation: f.Sedation,
		Aid: f.Aid, Surface: f.Surface, Session: f.Session, Note: f.Note,
		Findings: slices.Clone(f.Findings), Measures: slices.Clone(f.Measures)}
	SortFindings(v.Findings)
	if _, has := v.Measured(Weight, NoSite); f.WeightKg > 0 && !has {
		v.Measures = append([]Measured{{Measure: Weight, Value: f.WeightKg}}, v.Measures...)
	}
	return v
}

// Animal returns what the file says of the animal, as a patient without a name.
func (f File) Animal() Patient {
	p := Patient{Species: f.Species, Breed: f.Breed, Born: f.Born, Precautions: slices.Clone(f.Precautions)}
	if f.Problem != (FileProblem{}) || f.Onset != "" || f.Surgery != "" {
		p.Problems = []Problem{{Diagnosis: f.Problem.Diagnosis, Level: f.Problem.Level, Onset: f.Onset, Surgery: f.Surgery}}
	}
	if f.WeightKg > 0 {
		p.Weights = []WeightPoint{{At: f.Examined, Kg: f.WeightKg}}
	}
	return p
}

// FileOf returns the visit as an exam file, with the problem that was open at the
// time (the latest by onset), the weight last known then and the precautions then in force.
func FileOf(p Patient, v Visit) File {
	f := File{ID: v.ID, Species: p.Species, Examined: v.Examined, Examiner: v.Examiner, Born: p.Born, Breed: p.Breed,
		Sedation: v.Sedation, Aid: v.Aid, Surface: v.Surface, Session: v.Session, Note: v.Note,
		Findings: slices.Clone(v.Findings), Measures: slices.Clone(v.Measures)}
	f.WeightKg, _ = p.WeightAt(v.Examined)
	if m, ok := v.Measured(Weight, NoSite); ok {
		f.WeightKg = m.Value
	}
	if pr, ok := p.ProblemAt(v.Examined); ok {
		f.Problem = FileProblem{pr.Diagnosis, pr.Level}
		f.Onset, f.Surgery = pr.Onset, pr.Surgery
	}
	day := DayOf(v.Examined)
	for _, on := range p.Precautions {
		if on.HoldsOn(day) {
			f.Precautions = append(f.Precautions, on)
		}
	}
	SortFindings(f.Findings)
	return f
}
