package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"iter"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/audit"
)

// exportCmd writes records out.
type exportCmd struct {
	JSON exportJSONCmd `cmd:"" name:"json" help:"Everything, to be read back in."`
	CSV  exportCSVCmd  `cmd:"" name:"csv" help:"Tables for analysis: one fact a row."`
	XLSX exportXLSXCmd `cmd:"" name:"xlsx" help:"The same tables as a workbook, with a codebook."`
	FHIR exportFHIRCmd `cmd:"" name:"fhir" help:"An HL7 FHIR R4 Bundle."`
	ICS  exportICSCmd  `cmd:"" name:"ics" help:"The next visits, for a calendar."`
}

// outFlag is where an export goes.
type outFlag struct {
	Output string `short:"o" required:"" help:"File to write; - is standard output." placeholder:"FILE"`
}

// write lets a function write the output, whole or not at all.
func (c *outFlag) write(e *env, f func(io.Writer) error) error {
	if c.Output == "-" {
		return f(e.out)
	}
	return writeWhole(c.Output, f)
}

func (c *outFlag) said(e *env, text string) {
	if c.Output != "-" {
		e.say("%s", text)
	}
}

// animals gives the patients one at a time, all of them or those named.
func (e *env) animals(s *storage.Store, names []string) (iter.Seq2[sheet.Animal, error], int, error) {
	var ids []exam.ID
	if len(names) > 0 {
		for _, n := range names {
			r, err := e.patient(s, n)
			if err != nil {
				return nil, 0, err
			}
			if !slices.Contains(ids, r.Patient.ID) {
				ids = append(ids, r.Patient.ID)
			}
		}
	} else {
		list, err := s.Caseload(e.ctx)
		if err != nil {
			return nil, 0, err
		}
		for _, p := range view.Present(list) {
			ids = append(ids, p.ID)
		}
		slices.SortFunc(ids, func(a, b exam.ID) int { return bytes.Compare(a[:], b[:]) })
	}
	return func(yield func(sheet.Animal, error) bool) {
		for _, id := range ids {
			if err := e.ctx.Err(); err != nil {
				yield(sheet.Animal{}, err)
				return
			}
			r, err := s.Patient(id)
			if !yield(sheet.Animal{Patient: r.Patient, Visits: r.Visits}, err) || err != nil {
				return
			}
		}
	}, len(ids), nil
}

// collect gathers the records of the patients named.
func (e *env) collect(s *storage.Store, names []string) (sheet.Records, error) {
	pr, err := s.Practice()
	if err != nil {
		return sheet.Records{}, err
	}
	for i := range pr.Examiners {
		pr.Examiners[i].PINHash = ""
	}
	seq, n, err := e.animals(s, names)
	if err != nil {
		return sheet.Records{}, err
	}
	out := sheet.Records{Practice: pr, Made: time.Now().Truncate(time.Second)}
	bar := e.progress()
	for a, err := range seq {
		if err != nil {
			return sheet.Records{}, err
		}
		out.Animals = append(out.Animals, a)
		if bar != nil {
			bar(words.T("reading"), int64(len(out.Animals)), int64(n))
		}
	}
	return out, nil
}

type exportJSONCmd struct {
	Patients  []string `arg:"" optional:"" name:"patient" help:"Ids or names; all where none is given."`
	NoHistory bool     `help:"Leave the history out: only what is true now."`
	outFlag
}

func (c *exportJSONCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		var ids []exam.ID
		for _, n := range c.Patients {
			r, err := e.patient(s, n)
			if err != nil {
				return err
			}
			ids = append(ids, r.Patient.ID)
		}
		r, err := sheet.ReadRecords(e.ctx, s, time.Now().Truncate(time.Second), !c.NoHistory, ids...)
		if err != nil {
			return err
		}
		if err := c.write(e, func(w io.Writer) error { return sheet.EncodeRecords(w, r) }); err != nil {
			return err
		}
		c.said(e, words.N(len(r.Animals), "%d animal written", "%d animals written", len(r.Animals)))
		return e.audited(s, audit.Exported, fmt.Sprintf("%d animals as records", len(r.Animals)))
	})
}

// pseudonymFlags leave names out of tables.
type pseudonymFlags struct {
	Pseudonyms bool   `help:"Leave names, addresses, free texts and days of birth out; ids become pseudonyms."`
	SecretFile string `help:"File of at least 16 bytes that the pseudonyms are made from; keep it to get the same ones again." placeholder:"FILE"`
}

func (c *pseudonymFlags) options(e *env, s *storage.Store, names []string) (sheet.TableOptions, error) {
	o := sheet.TableOptions{Pseudonyms: c.Pseudonyms}
	if c.Pseudonyms {
		if c.SecretFile == "" {
			return o, usage("%s", words.T("--pseudonyms needs --secret-file FILE"))
		}
		secret, err := os.ReadFile(c.SecretFile)
		if err != nil {
			return o, err
		}
		if len(secret) < 16 {
			return o, fmt.Errorf("%s: %w", c.SecretFile, sheet.ErrNoSecret)
		}
		o.Secret = secret
	}
	seq, n, err := e.animals(s, names)
	if err != nil {
		return o, err
	}
	o.Animals = seq
	if bar := e.progress(); bar != nil {
		o.Progress = func(done int) { bar(words.T("writing"), int64(done), int64(n)) }
	}
	return o, nil
}

type exportCSVCmd struct {
	Patients []string `arg:"" optional:"" name:"patient" help:"Ids or names; all where none is given."`
	Table    string   `help:"findings, measures, visits, patients or codebook; with all, the output is a folder." default:"findings"`
	outFlag
	pseudonymFlags
}

func (c *exportCSVCmd) Run(e *env) error {
	var tables []sheet.Table
	if c.Table == "all" {
		tables = sheet.Tables()
		if c.Output == "-" {
			return usage("%s", words.T("several tables need a folder: -o DIR"))
		}
	} else {
		t, err := sheet.ParseTable(c.Table)
		if err != nil {
			return usageError{err}
		}
		tables = []sheet.Table{t}
	}
	return e.change(func(s *storage.Store) error {
		if c.Table == "all" {
			if err := os.MkdirAll(c.Output, 0o755); err != nil {
				return err
			}
		}
		for _, t := range tables {
			o, err := c.options(e, s, c.Patients)
			if err != nil {
				return err
			}
			out := c.outFlag
			if c.Table == "all" {
				out.Output = filepath.Join(c.Output, t.String()+".csv")
			}
			rows := 0
			err = out.write(e, func(w io.Writer) (err error) {
				rows, err = sheet.CSV(e.ctx, w, t, o)
				return err
			})
			if err != nil {
				return err
			}
			out.said(e, words.N(rows, "%s: %d row", "%s: %d rows", t.String(), rows))
		}
		return e.audited(s, audit.Exported, "CSV, "+c.Table)
	})
}

type exportXLSXCmd struct {
	Patients []string `arg:"" optional:"" name:"patient" help:"Ids or names; all where none is given."`
	outFlag
	pseudonymFlags
}

func (c *exportXLSXCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		o, err := c.options(e, s, c.Patients)
		if err != nil {
			return err
		}
		if err := c.write(e, func(w io.Writer) error { return sheet.XLSX(e.ctx, w, o) }); err != nil {
			return err
		}
		c.said(e, words.T("%s written", c.Output))
		return e.audited(s, audit.Exported, "XLSX")
	})
}

type exportFHIRCmd struct {
	Patients []string `arg:"" optional:"" name:"patient" help:"Ids or names; all where none is given."`
	Sheets   bool     `help:"Put the owner's progress sheet of each animal's last visit in."`
	outFlag
}

func (c *exportFHIRCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		r, err := e.collect(s, c.Patients)
		if err != nil {
			return err
		}
		var reports []sheet.Report
		if c.Sheets {
			for _, a := range r.Animals {
				if len(a.Visits) == 0 {
					continue
				}
				d, err := sheet.Owner(view.SheetInput(r.Practice, a.Patient, a.Visits, r.Made, sheet.Options{Lang: e.c.Lang}))
				if err != nil {
					e.warn(err.Error())
					continue
				}
				reports = append(reports, sheet.Report{Visit: a.Visits[len(a.Visits)-1].ID, Title: sheet.SheetTitle(e.c.Lang), PDF: d.PDF})
			}
		}
		if err := c.write(e, func(w io.Writer) error { return sheet.EncodeFHIR(w, r, reports) }); err != nil {
			return err
		}
		c.said(e, words.N(len(r.Animals), "%d animal written", "%d animals written", len(r.Animals)))
		return e.audited(s, audit.Exported, fmt.Sprintf("%d animals as FHIR", len(r.Animals)))
	})
}

type exportICSCmd struct {
	outFlag
}

func (c *exportICSCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		seq, _, err := e.animals(s, nil)
		if err != nil {
			return err
		}
		n := 0
		err = c.write(e, func(w io.Writer) (err error) {
			n, err = sheet.Calendar(w, seq, time.Now(), e.c.Lang)
			return err
		})
		if err != nil {
			return err
		}
		c.said(e, words.N(n, "%d visit written", "%d visits written", n))
		return e.audited(s, audit.Exported, "iCalendar")
	})
}

// importCmd reads records in.
type importCmd struct {
	File     string `arg:"" help:"Records file, FHIR Bundle, or a table of patients as CSV or XLSX; - is standard input."`
	DryRun   bool   `help:"Say what would be added, and add nothing."`
	Examiner string `help:"Who brings the records in." placeholder:"NAME"`
}

// importMax bounds an import file.
const importMax = 1 << 30

// decode reads a records file or a Bundle, whichever it is.
func (c *importCmd) decode(data []byte) (sheet.Records, []string, error) {
	var head struct {
		ResourceType string `json:"resourceType"`
	}
	if err := json.Unmarshal(data, &head); err == nil && head.ResourceType != "" {
		return sheet.DecodeFHIR(bytes.NewReader(data))
	}
	return sheet.DecodeRecords(bytes.NewReader(data))
}

func (c *importCmd) Run(e *env) error {
	data, err := e.readInput(c.File, importMax)
	if err != nil {
		return err
	}
	if isTable(c.File, data) {
		return c.table(e, data)
	}
	in, warnings, err := c.decode(data)
	for _, w := range warnings {
		e.warn(c.File + ": " + w)
	}
	if err != nil {
		return fmt.Errorf("%s: %w", c.File, err)
	}
	// Everything is looked at before anything is written.
	for _, a := range in.Animals {
		if err := a.Patient.Validate(); err != nil {
			return fmt.Errorf("%s: %s: %w", c.File, a.Patient.Name, err)
		}
		for _, v := range a.Visits {
			if err := v.Validate(a.Patient.Species); err != nil {
				return fmt.Errorf("%s: %s, %s: %w", c.File, a.Patient.Name, v.Examined.Format("2006-01-02"), err)
			}
		}
	}
	s, err := e.openOrCreate()
	if err != nil {
		return err
	}
	return closing(s, func(s *storage.Store) error {
		e.token(s)
		return c.take(e, s, in)
	})
}

// take adds what the store does not have yet. What it has stays as it is.
func (c *importCmd) take(e *env, s *storage.Store, in sheet.Records) error {
	if c.DryRun {
		return c.preview(e, s, in)
	}
	var tick func(done, total int)
	if bar := e.progress(); bar != nil {
		tick = func(done, total int) { bar(words.T("importing"), int64(done), int64(total)) }
	}
	added, err := sheet.AddRecords(e.ctx, s, orElse(strings.TrimSpace(c.Examiner), "import"), in, tick)
	if err != nil {
		return err
	}
	for _, w := range added.Warnings {
		e.warn(w)
	}
	if e.c.JSON {
		return e.printJSON(map[string]any{"patients": added.Patients, "visits": added.Visits, "changes": added.Changes, "there_already": added.Known, "history": added.History, "dry_run": false})
	}
	said := words.T("%d patients and %d visits added; %d were there already", added.Patients, added.Visits, added.Known)
	if added.History {
		said = words.T("%d patients and %d visits added with their history of %d changes", added.Patients, added.Visits, added.Changes)
	}
	e.say("%s", said)
	return nil
}

// isTable reports whether a file is a table of patients: CSV or a workbook.
func isTable(name string, data []byte) bool {
	switch strings.ToLower(filepath.Ext(name)) {
	case ".csv", ".tsv", ".xlsx":
		return true
	case ".json":
		return false
	}
	return bytes.HasPrefix(data, []byte("PK\x03\x04"))
}

// table takes patients in from a table, or says what would be.
func (c *importCmd) table(e *env, data []byte) error {
	t, err := view.ReadTable(data)
	if err != nil {
		return fmt.Errorf("%s: %w", c.File, err)
	}
	s, err := e.openOrCreate()
	if err != nil {
		return err
	}
	return closing(s, func(s *storage.Store) error {
		e.token(s)
		there, err := s.Caseload(e.ctx)
		if err != nil {
			return err
		}
		plan := view.NewImportPlan(t, there)
		if !e.c.JSON {
			for i, f := range plan.Columns {
				to := string(f)
				if f == view.IgnoreColumn {
					to = words.T("left out")
				}
				e.say("%s", words.T("column %q: %s", t.Headings[i], to))
			}
			for _, r := range plan.Rows {
				switch {
				case r.Problems.Any():
					e.say("%s", words.T("line %d: %s", r.Line, complain(r.Problems)))
				case r.Duplicate != "":
					e.say("%s", words.T("line %d: %s", r.Line, r.Duplicate))
				}
			}
		}
		take, duplicates, problems := plan.Counts()
		if !c.DryRun {
			who, err := e.examiner(s, c.Examiner)
			if err != nil {
				return err
			}
			bar := e.progress()
			_, err = plan.Apply(e.ctx, s, who, storage.NewID, func(done, total int) {
				if bar != nil {
					bar(words.T("importing"), int64(done), int64(total))
				}
			})
			if err != nil {
				return err
			}
		}
		if e.c.JSON {
			return e.printJSON(map[string]any{"patients": take, "duplicates": duplicates, "problems": problems, "dry_run": c.DryRun})
		}
		if c.DryRun {
			e.say("%s", plan.Words())
		} else {
			e.say("%s", words.N(take, "%d animal added", "%d animals added", take))
		}
		return nil
	})
}

// preview counts what would be added.
func (c *importCmd) preview(e *env, s *storage.Store, in sheet.Records) error {
	patients, visits, there := 0, 0, 0
	for _, a := range in.Animals {
		old, err := s.Patient(a.Patient.ID)
		switch {
		case errors.Is(err, storage.ErrNotFound):
			patients++
			visits += len(a.Visits)
			continue
		case err != nil:
			return err
		}
		for _, v := range a.Visits {
			if slices.ContainsFunc(old.Visits, func(x exam.Visit) bool { return x.ID == v.ID }) {
				there++
			} else {
				visits++
			}
		}
	}
	if e.c.JSON {
		return e.printJSON(map[string]any{"patients": patients, "visits": visits, "there_already": there, "dry_run": true})
	}
	e.say("%s", words.T("%d patients and %d visits would be added; %d are there already", patients, visits, there))
	return nil
}

func orElse(a, b string) string {
	if a != "" {
		return a
	}
	return b
}
