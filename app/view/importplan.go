package view

import (
	"bytes"
	"context"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"maps"
	"slices"
	"strings"
	"unicode/utf8"

	"github.com/xuri/excelize/v2"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// ImportField is something of a patient that a column of a table can hold.
type ImportField string

// The fields, by the word that stands in a plan.
const (
	IgnoreColumn   ImportField = ""
	ImportName     ImportField = "name"
	ImportSpecies  ImportField = "species"
	ImportBreed    ImportField = "breed"
	ImportSex      ImportField = "sex"
	ImportNeutered ImportField = "neutered"
	ImportBorn     ImportField = "born"
	ImportOwner    ImportField = "owner"
	ImportPhone    ImportField = "owner-phone"
	ImportEmail    ImportField = "owner-email"
	ImportAddress  ImportField = "owner-address"
	ImportVet      ImportField = "veterinarian"
	ImportVetPhone ImportField = "veterinarian-phone"
	ImportProblem  ImportField = "problem"
	ImportLevel    ImportField = "level"
	ImportOnset    ImportField = "onset"
	ImportSurgery  ImportField = "surgery"
	ImportNote     ImportField = "note"
)

// importTitles are the fields as people call them.
var importTitles = map[ImportField]string{
	ImportName: "Name", ImportSpecies: "Species", ImportBreed: "Breed", ImportSex: "Sex", ImportNeutered: "Neutered", ImportBorn: "Born",
	ImportOwner: "Owner", ImportPhone: "Owner's telephone", ImportEmail: "Owner's e-mail", ImportAddress: "Owner's address",
	ImportVet: "Treating veterinarian", ImportVetPhone: "Veterinarian's telephone", ImportProblem: "Problem", ImportLevel: "Level",
	ImportOnset: "Onset", ImportSurgery: "Surgery", ImportNote: "Note",
}

// Title names the field in the language in use.
func (f ImportField) Title() string { return words.Of(importTitles[f]) }

// Told says the row's problems in one line, in the order of the fields.
func (r ImportRow) Told() string {
	var out []string
	for _, key := range slices.Sorted(maps.Keys(r.Problems)) {
		field := ImportField(key)
		if strings.HasPrefix(key, "problem") {
			field = ImportProblem
		}
		out = append(out, Labelled(field.Title(), r.Problems[key]))
	}
	return strings.Join(out, " ")
}

// ImportFields lists the fields in the order shown.
func ImportFields() []ImportField {
	return []ImportField{ImportName, ImportSpecies, ImportBreed, ImportSex, ImportNeutered, ImportBorn, ImportOwner, ImportPhone, ImportEmail,
		ImportAddress, ImportVet, ImportVetPhone, ImportProblem, ImportLevel, ImportOnset, ImportSurgery, ImportNote}
}

// headings are the words that columns are known by, folded: letters and digits only.
var headings = map[string]ImportField{
	"name": ImportName, "patient": ImportName, "animal": ImportName, "animalname": ImportName, "petname": ImportName, "pet": ImportName,
	"species": ImportSpecies, "kind": ImportSpecies, "breed": ImportBreed, "race": ImportBreed, "sex": ImportSex, "gender": ImportSex,
	"neutered": ImportNeutered, "castrated": ImportNeutered, "spayed": ImportNeutered,
	"born": ImportBorn, "birth": ImportBorn, "birthday": ImportBorn, "dateofbirth": ImportBorn, "dob": ImportBorn,
	"owner": ImportOwner, "ownername": ImportOwner, "client": ImportOwner, "keeper": ImportOwner,
	"phone": ImportPhone, "telephone": ImportPhone, "ownerphone": ImportPhone, "mobile": ImportPhone,
	"email": ImportEmail, "mail": ImportEmail, "owneremail": ImportEmail, "address": ImportAddress, "owneraddress": ImportAddress,
	"vet": ImportVet, "veterinarian": ImportVet, "referredby": ImportVet, "vetphone": ImportVetPhone, "veterinarianphone": ImportVetPhone,
	"problem": ImportProblem, "diagnosis": ImportProblem, "complaint": ImportProblem, "level": ImportLevel, "onset": ImportOnset,
	"surgery": ImportSurgery, "operated": ImportSurgery, "note": ImportNote, "notes": ImportNote, "remark": ImportNote, "remarks": ImportNote,
	// German
	"tier": ImportName, "tiername": ImportName, "tierart": ImportSpecies, "art": ImportSpecies, "rasse": ImportBreed, "geschlecht": ImportSex,
	"kastriert": ImportNeutered, "geboren": ImportBorn, "geburtsdatum": ImportBorn, "geburtstag": ImportBorn, "besitzer": ImportOwner, "halter": ImportOwner,
	"tierhalter": ImportOwner, "kunde": ImportOwner, "telefon": ImportPhone, "handy": ImportPhone, "mobil": ImportPhone, "anschrift": ImportAddress,
	"adresse": ImportAddress, "tierarzt": ImportVet, "haustierarzt": ImportVet, "uberweiser": ImportVet, "telefontierarzt": ImportVetPhone,
	"diagnose": ImportProblem, "hohe": ImportLevel, "beginn": ImportOnset, "operation": ImportSurgery, "operiert": ImportSurgery, "notiz": ImportNote,
	"bemerkung": ImportNote, "bemerkungen": ImportNote,
	// French
	"nom": ImportName, "espece": ImportSpecies, "sexe": ImportSex, "sterilise": ImportNeutered, "castre": ImportNeutered, "ne": ImportBorn,
	"naissance": ImportBorn, "datedenaissance": ImportBorn, "proprietaire": ImportOwner, "courriel": ImportEmail, "veterinaire": ImportVet,
	"probleme": ImportProblem, "diagnostic": ImportProblem, "niveau": ImportLevel, "debut": ImportOnset, "chirurgie": ImportSurgery, "opere": ImportSurgery,
	"remarque": ImportNote, "remarques": ImportNote,
	// Spanish
	"nombre": ImportName, "paciente": ImportName, "especie": ImportSpecies, "raza": ImportBreed, "sexo": ImportSex, "castrado": ImportNeutered,
	"esterilizado": ImportNeutered, "nacido": ImportBorn, "nacimiento": ImportBorn, "fechadenacimiento": ImportBorn, "propietario": ImportOwner,
	"dueno": ImportOwner, "cliente": ImportOwner, "telefono": ImportPhone, "movil": ImportPhone, "correo": ImportEmail, "direccion": ImportAddress,
	"veterinario": ImportVet, "problema": ImportProblem, "diagnostico": ImportProblem, "nivel": ImportLevel, "inicio": ImportOnset, "cirugia": ImportSurgery,
	"nota": ImportNote, "notas": ImportNote, "observaciones": ImportNote,
}

// importMost bounds the rows of a table.
const importMost = 50_000

// ImportTable is a table that was read and not yet understood.
type ImportTable struct {
	Headings []string
	Rows     [][]string
}

// ReadTable reads a table from CSV (commas, semicolons or tabs; UTF-8) or from the first
// sheet of an XLSX workbook, whichever the bytes are.
func ReadTable(data []byte) (ImportTable, error) {
	var rows [][]string
	var err error
	if bytes.HasPrefix(data, []byte("PK\x03\x04")) {
		rows, err = readWorkbook(data)
	} else {
		rows, err = readCSV(data)
	}
	if err != nil {
		return ImportTable{}, err
	}
	for len(rows) > 0 && blank(rows[0]) {
		rows = rows[1:]
	}
	if len(rows) == 0 {
		return ImportTable{}, errors.New(words.T("The table is empty."))
	}
	if len(rows) > importMost+1 {
		return ImportTable{}, errors.New(words.T("The table has more than %d rows; import it in parts.", importMost))
	}
	return ImportTable{Headings: rows[0], Rows: rows[1:]}, nil
}

func blank(row []string) bool {
	return !slices.ContainsFunc(row, func(c string) bool { return strings.TrimSpace(c) != "" })
}

func readCSV(data []byte) ([][]string, error) {
	data = bytes.TrimPrefix(data, []byte("\xef\xbb\xbf"))
	if !utf8.Valid(data) {
		return nil, errors.New(words.T("The file is not UTF-8 text; save the table as CSV in UTF-8, or as XLSX."))
	}
	line, _, _ := bytes.Cut(data, []byte("\n"))
	comma, most := ',', 0
	for _, c := range []rune{',', ';', '\t'} {
		if n := bytes.Count(line, []byte(string(c))); n > most {
			comma, most = c, n
		}
	}
	r := csv.NewReader(bytes.NewReader(data))
	r.Comma, r.FieldsPerRecord, r.LazyQuotes = comma, -1, false
	var out [][]string
	for {
		row, err := r.Read()
		if errors.Is(err, io.EOF) {
			return out, nil
		}
		if err != nil {
			return nil, fmt.Errorf("%s: %w", words.T("The table cannot be read"), err)
		}
		if out = append(out, row); len(out) > importMost+2 {
			return out, nil
		}
	}
}

func readWorkbook(data []byte) ([][]string, error) {
	f, err := excelize.OpenReader(bytes.NewReader(data), excelize.Options{UnzipSizeLimit: 256 << 20, UnzipXMLSizeLimit: 128 << 20})
	if err != nil {
		return nil, fmt.Errorf("%s: %w", words.T("The workbook cannot be read"), err)
	}
	defer f.Close()
	sheets := f.GetSheetList()
	if len(sheets) == 0 {
		return nil, errors.New(words.T("The workbook has no sheet."))
	}
	rows, err := f.Rows(sheets[0])
	if err != nil {
		return nil, fmt.Errorf("%s: %w", words.T("The workbook cannot be read"), err)
	}
	defer rows.Close()
	var out [][]string
	for rows.Next() && len(out) <= importMost+1 {
		row, err := rows.Columns()
		if err != nil {
			return nil, fmt.Errorf("%s: %w", words.T("The workbook cannot be read"), err)
		}
		out = append(out, row)
	}
	return out, nil
}

// ImportRow is one animal of the table.
type ImportRow struct {
	Line      int // of the table, the headings being line 1
	Patient   exam.Patient
	Problems  Problems
	Duplicate string // whom it seems to be already, in words; "" where nobody
	Take      bool   // it will be written
}

// ImportPlan is what an import would do. Nothing is written until Apply.
type ImportPlan struct {
	Table   ImportTable
	Columns []ImportField // for each column; IgnoreColumn where it is left out
	Rows    []ImportRow
	there   []Summary
}

// NewImportPlan matches the columns by their headings and reads the rows. there is the
// caseload, for finding duplicates.
func NewImportPlan(t ImportTable, there []Summary) *ImportPlan {
	p := &ImportPlan{Table: t, Columns: make([]ImportField, len(t.Headings)), there: there}
	taken := map[ImportField]bool{}
	for i, h := range t.Headings {
		key := strings.Map(func(r rune) rune {
			if r >= 'a' && r <= 'z' || r >= '0' && r <= '9' {
				return r
			}
			return -1
		}, fold(h))
		if f, ok := headings[key]; ok && !taken[f] {
			p.Columns[i], taken[f] = f, true
		}
	}
	p.read()
	return p
}

// SetColumn says what a column holds; the rows are read again. A field belongs to one
// column: it is taken from the column that had it.
func (p *ImportPlan) SetColumn(column int, f ImportField) {
	if column < 0 || column >= len(p.Columns) {
		return
	}
	for i := range p.Columns {
		if f != IgnoreColumn && p.Columns[i] == f {
			p.Columns[i] = IgnoreColumn
		}
	}
	p.Columns[column] = f
	p.read()
}

// TakeRow says whether a row is written. A row with problems never is.
func (p *ImportPlan) TakeRow(row int, take bool) {
	if row >= 0 && row < len(p.Rows) {
		p.Rows[row].Take = take && !p.Rows[row].Problems.Any()
	}
}

func (p *ImportPlan) read() {
	known := map[string]string{}
	for _, s := range p.there {
		known[fold(s.Name)+"\x00"+fold(s.Owner)] = words.T("%s of %s is in the practice already", s.Name, s.Owner)
	}
	p.Rows = nil
	for i, cells := range p.Table.Rows {
		if blank(cells) {
			continue
		}
		r := ImportRow{Line: i + 2}
		f := NewPatientForm(exam.Patient{})
		r.Problems = Problems{}
		var pr exam.Problem
		for k, c := range cells {
			if k >= len(p.Columns) {
				break
			}
			c = strings.TrimSpace(strings.Trim(c, "\u00a0"))
			switch p.Columns[k] {
			case ImportName:
				f.Name = c
			case ImportSpecies:
				if c != "" {
					f.Species = speciesWord(c)
				}
			case ImportBreed:
				f.Breed = c
			case ImportSex:
				f.Sex, f.Neutered = sexWord(c, f.Neutered)
			case ImportNeutered:
				f.Neutered = f.Neutered || yes(c)
			case ImportBorn:
				f.Born = dateWord(c)
			case ImportOwner:
				f.OwnerName = c
			case ImportPhone:
				f.OwnerPhone = c
			case ImportEmail:
				f.OwnerEmail = c
			case ImportAddress:
				f.OwnerAddress = c
			case ImportVet:
				f.VetName = c
			case ImportVetPhone:
				f.VetPhone = c
			case ImportProblem:
				pr.Diagnosis = c
			case ImportLevel:
				pr.Level = strings.ToUpper(strings.ReplaceAll(c, "–", "-"))
			case ImportOnset:
				pr.Onset = exam.Date(dateWord(c))
			case ImportSurgery:
				pr.Surgery = exam.Date(dateWord(c))
			case ImportNote:
				f.Note = c
			}
		}
		if pr != (exam.Problem{}) {
			f.Problems = []exam.Problem{pr}
		}
		r.Patient, r.Problems = f.Patient()
		if !r.Problems.Any() {
			key := fold(r.Patient.Name) + "\x00" + fold(r.Patient.Owner.Name)
			r.Duplicate = known[key]
			if r.Duplicate == "" {
				known[key] = words.T("line %d of the table is the same animal", r.Line)
			}
		}
		r.Take = !r.Problems.Any() && r.Duplicate == ""
		p.Rows = append(p.Rows, r)
	}
}

func speciesWord(s string) string {
	switch fold(s) {
	case "dog", "canine", "canis", "k9", "hund", "perro", "chien":
		return exam.Dog.String()
	case "cat", "feline", "felis", "katze", "gato", "chat":
		return exam.Cat.String()
	case "horse", "equine", "pferd", "caballo", "cheval":
		return exam.Horse.String()
	case "rabbit", "bunny", "kaninchen", "conejo", "lapin":
		return exam.Rabbit.String()
	}
	return s
}

// sexWord reads a sex, with neutering where the letters say it (fs, mn …).
func sexWord(s string, neutered bool) (string, bool) {
	switch fold(s) {
	case "":
		return exam.SexUnknown.String(), neutered
	case "f", "female", "bitch", "queen", "w", "weiblich", "hundin", "femelle", "h", "hembra":
		return exam.Female.String(), neutered
	case "m", "male", "tom", "mannlich", "rude", "kater", "macho":
		return exam.Male.String(), neutered
	case "fs", "fn", "spayed", "female spayed", "female neutered", "wk", "weiblich kastriert", "femelle sterilisee", "hembra esterilizada", "hembra castrada":
		return exam.Female.String(), true
	case "mn", "mc", "castrated", "male neutered", "male castrated", "mk", "mannlich kastriert", "male castre", "macho castrado":
		return exam.Male.String(), true
	}
	return s, neutered
}

func yes(s string) bool {
	switch fold(s) {
	case "y", "yes", "true", "1", "x", "ja", "si", "oui", "neutered", "spayed", "castrated", "kastriert", "sterilise", "castre", "castrado", "esterilizado":
		return true
	}
	return false
}

// dateWord turns the date forms of tables into that of the record; what it does not know it
// leaves for the form to refuse. Day and month in unclear order are never guessed.
func dateWord(s string) string {
	s = strings.TrimSpace(s)
	if _, err := exam.ParseDate(s); err == nil {
		return s
	}
	if d, t, ok := strings.Cut(s, "T"); ok && len(d) == 10 && t != "" {
		return d
	}
	if d, _, ok := strings.Cut(s, " "); ok && len(d) == 10 && d[4] == '-' {
		return d
	}
	for _, sep := range []string{".", "/"} {
		p := strings.Split(s, sep)
		if len(p) != 3 {
			continue
		}
		switch {
		case len(p[0]) == 4:
			return fmt.Sprintf("%s-%02s-%02s", p[0], p[1], p[2])
		case len(p[2]) == 4 && sep == ".":
			return fmt.Sprintf("%s-%02s-%02s", p[2], p[1], p[0])
		}
	}
	return s
}

// Counts says how many rows will be written, are left out as duplicates, and have problems.
func (p *ImportPlan) Counts() (take, duplicates, problems int) {
	for _, r := range p.Rows {
		switch {
		case r.Problems.Any():
			problems++
		case r.Take:
			take++
		case r.Duplicate != "":
			duplicates++
		}
	}
	return take, duplicates, problems
}

// Words says what the import would do.
func (p *ImportPlan) Words() string {
	t, d, b := p.Counts()
	return words.N(t, "%d animal would be added", "%d animals would be added", t) + ", " +
		words.N(d, "%d seems to be there already", "%d seem to be there already", d) + ", " +
		words.N(b, "%d row has problems", "%d rows have problems", b) + "."
}

// Imported remembers what an import wrote, for the one undo.
type Imported struct {
	Patients []exam.Patient
}

// importStep is how many animals go into one write.
const importStep = 100

// Apply writes the rows that are taken. Where it fails, what it wrote before is taken back.
// progress may be nil.
func (p *ImportPlan) Apply(ctx context.Context, k Keeper, examiner string, newID func() exam.ID, progress func(done, total int)) (Imported, error) {
	var all []exam.Patient
	for _, r := range p.Rows {
		if r.Take && !r.Problems.Any() {
			x := r.Patient
			x.ID = newID()
			all = append(all, x)
		}
	}
	var done Imported
	for len(done.Patients) < len(all) {
		next := all[len(done.Patients):min(len(all), len(done.Patients)+importStep)]
		var edits []storage.Edit
		for _, x := range next {
			edits = append(edits, storage.PatientEdits(exam.Patient{}, x)...)
		}
		if _, err := k.Apply(ctx, examiner, edits...); err != nil {
			if uerr := done.Undo(context.WithoutCancel(ctx), k, examiner); uerr != nil {
				err = errors.Join(err, uerr)
			}
			return Imported{}, err
		}
		done.Patients = append(done.Patients, next...)
		if progress != nil {
			progress(len(done.Patients), len(all))
		}
	}
	return done, nil
}

// Undo takes a whole import back: the animals leave the caseload; the history keeps both.
func (i Imported) Undo(ctx context.Context, k Keeper, examiner string) error {
	for list := i.Patients; len(list) > 0; list = list[min(len(list), importStep):] {
		var edits []storage.Edit
		for _, x := range list[:min(len(list), importStep)] {
			edits = append(edits, storage.UndoEdits(storage.PatientEdits(x, exam.Patient{ID: x.ID})...)...)
		}
		if _, err := k.Apply(ctx, examiner, edits...); err != nil {
			return err
		}
	}
	return nil
}
