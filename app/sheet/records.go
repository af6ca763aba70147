package sheet

import (
	"bytes"
	"encoding/base64"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// The records format: one JSON file that holds everything of one or more animals, for
// people and for other programs. schema/records.schema.json describes it.
const (
	RecordsFormat  = "cordwalk-records"
	RecordsVersion = 1 // major version; a newer one is refused, fields of a newer minor one are ignored with a warning
)

// Animal is one animal with its visits, oldest first.
type Animal struct {
	Patient exam.Patient
	Visits  []exam.Visit
}

// Records is the content of a records file. Animals are what people read. Changes, where
// there are any, are the whole history with every value that was ever entered; an import
// takes the changes, and the animals only where there are none.
type Records struct {
	Made     time.Time
	Practice exam.Practice // PINs are not exported
	Animals  []Animal
	Changes  []change.Change // of the animals, in the order of their history; of Stream only Device counts
	// OwnerKeys open the owners' contact data in Changes, by the animal's id: 32 bytes each. The
	// contact data of an owner who was erased have none.
	OwnerKeys map[exam.ID][]byte
}

type recordsJSON struct {
	Format   string        `json:"format"`
	Version  int           `json:"version"`
	Made     string        `json:"made,omitempty"`
	Practice *practiceJSON `json:"practice,omitempty"`
	Animals  []animalJSON  `json:"animals"`
	Changes  []changeJSON  `json:"changes,omitempty"`
	Keys     []keyJSON     `json:"owner_keys,omitempty"`
}

// keyJSON is the key of one owner's contact data, in base64.
type keyJSON struct {
	Owner exam.ID `json:"owner"`
	Key   string  `json:"key"`
}

type practiceJSON struct {
	Name       string          `json:"name,omitempty"`
	Contact    *exam.Contact   `json:"contact,omitempty"`
	OutOfHours *exam.Contact   `json:"out_of_hours,omitempty"`
	Zone       string          `json:"zone,omitempty"`
	Language   string          `json:"language,omitempty"`
	Paper      string          `json:"paper,omitempty"`
	Pounds     bool            `json:"pounds,omitempty"`
	Inches     bool            `json:"inches,omitempty"`
	Examiners  []exam.Examiner `json:"examiners,omitempty"`
	Protocols  []exam.Protocol `json:"protocols,omitempty"`
	Phrases    []exam.Phrase   `json:"phrases,omitempty"`
	Logo       string          `json:"logo,omitempty"` // base64
	Demo       bool            `json:"demo,omitempty"`
}

type animalJSON struct {
	Patient patientJSON `json:"patient"`
	Visits  []visitJSON `json:"visits"`
}

type patientJSON struct {
	ID           exam.ID             `json:"id"`
	Name         string              `json:"name"`
	Species      string              `json:"species"`
	Breed        string              `json:"breed,omitempty"`
	Sex          string              `json:"sex,omitempty"`
	Neutered     bool                `json:"neutered,omitempty"`
	Born         exam.Date           `json:"born,omitempty"`
	Owner        *exam.Contact       `json:"owner,omitempty"`
	Veterinarian *exam.Contact       `json:"veterinarian,omitempty"`
	OutOfHours   *exam.Contact       `json:"out_of_hours,omitempty"`
	Referral     *exam.Referral      `json:"referral,omitempty"`
	Status       string              `json:"status,omitempty"`
	StatusSince  exam.Date           `json:"status_since,omitempty"`
	RecheckDays  int                 `json:"recheck_days,omitempty"`
	Problems     []exam.Problem      `json:"problems,omitempty"`
	Precautions  []exam.PrecautionOn `json:"precautions,omitempty"`
	Goals        []exam.Goal         `json:"goals,omitempty"`
	Medicines    []exam.Medicine     `json:"medicines,omitempty"`
	Sent         []sentJSON          `json:"sent,omitempty"`
	Weights      []weightJSON        `json:"weights,omitempty"`
	Note         string              `json:"note,omitempty"`
	Demo         bool                `json:"demo,omitempty"`
}

type sentJSON struct {
	ID       exam.ID `json:"id"`
	Visit    exam.ID `json:"visit"`
	At       string  `json:"at"`
	Kind     string  `json:"kind"`
	Examiner string  `json:"examiner,omitempty"`
	Language string  `json:"language,omitempty"`
	Summary  string  `json:"summary,omitempty"`
	Reworded bool    `json:"reworded,omitempty"`
	Hash     string  `json:"sha256,omitempty"`
	Note     string  `json:"note,omitempty"`
}

type weightJSON struct {
	At string  `json:"at"`
	Kg float64 `json:"kg"`
}

type visitJSON struct {
	ID         exam.ID             `json:"id"`
	Examined   string              `json:"examined"`
	Zone       string              `json:"zone,omitempty"`
	Examiner   string              `json:"examiner"`
	Protocol   string              `json:"protocol,omitempty"`
	State      string              `json:"state"`
	ClosedAt   string              `json:"closed_at,omitempty"`
	RepeatOf   *exam.ID            `json:"repeat_of,omitempty"`
	Sedation   string              `json:"sedation,omitempty"`
	Aid        string              `json:"aid,omitempty"`
	Surface    string              `json:"surface,omitempty"`
	Session    string              `json:"session,omitempty"`
	Doses      []exam.DoseGiven    `json:"doses,omitempty"`
	Findings   []findingJSON       `json:"findings"`
	Measures   []measuredJSON      `json:"measures,omitempty"`
	Treatments []exam.Treatment    `json:"treatments,omitempty"`
	Home       []exam.HomeExercise `json:"home,omitempty"`
	Report     *exam.OwnerReport   `json:"report,omitempty"`
	Note       string              `json:"note,omitempty"`
	NextVisit  exam.Date           `json:"next_visit,omitempty"`
	Amendments []amendmentJSON     `json:"amendments,omitempty"`
	Answers    []answerJSON        `json:"answers,omitempty"`

	// Of an attachment the file says only that it is there: its bytes stay sealed beside the store.
	Attachments []exam.Attachment `json:"attachments,omitempty"`
	Stim        []exam.StimRecord `json:"stimulation,omitempty"`
}

type findingJSON struct {
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

type measuredJSON struct {
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

type amendmentJSON struct {
	Field    string `json:"field"`
	Reason   string `json:"reason"`
	Examiner string `json:"examiner"`
	At       string `json:"at"`
}

type answerJSON struct {
	Rule     string `json:"rule"`
	Told     string `json:"told"`
	Note     string `json:"note,omitempty"`
	Examiner string `json:"examiner"`
	At       string `json:"at"`
}

// changeJSON is one change. Value is the bytes as they are kept, in base64; times of the
// history are whole numbers as the hybrid logical clock counts them. Where a change stood in
// a device's journal is no part of it: an import makes a journal of its own.
type changeJSON struct {
	ID         string   `json:"id"`
	Device     string   `json:"device"`
	Time       string   `json:"time"`
	Examiner   string   `json:"examiner,omitempty"`
	Kind       uint16   `json:"kind"`
	Patient    exam.ID  `json:"patient"`
	Record     exam.ID  `json:"record"`
	Field      string   `json:"field"`
	Value      string   `json:"value,omitempty"`
	Supersedes []string `json:"supersedes,omitempty"`
	Act        uint8    `json:"act,omitempty"`
	Reason     string   `json:"reason,omitempty"`
	Seen       []string `json:"seen,omitempty"`
	Extra      string   `json:"extra,omitempty"`
}

func stamp(t time.Time) string {
	if t.IsZero() {
		return ""
	}
	return t.Format(time.RFC3339Nano)
}

func unless[T comparable](v T) *T {
	var zero T
	if v == zero {
		return nil
	}
	return &v
}

// EncodeRecords writes a records file. The same records give the same bytes.
func EncodeRecords(w io.Writer, r Records) error {
	out := recordsJSON{Format: RecordsFormat, Version: RecordsVersion, Made: stamp(r.Made), Animals: []animalJSON{}}
	if p := r.Practice; p.Name != "" || p.Zone != "" || len(p.Examiners) > 0 || len(p.Protocols) > 0 || len(p.Phrases) > 0 || len(p.Logo) > 0 || p.Demo {
		pj := practiceJSON{Name: p.Name, Contact: unless(p.Contact), OutOfHours: unless(p.OutOfHours), Zone: p.Zone, Language: p.Language,
			Paper: p.Paper, Pounds: p.Pounds, Inches: p.Inches, Examiners: slices.Clone(p.Examiners), Protocols: p.Protocols, Phrases: p.Phrases, Logo: base64.StdEncoding.EncodeToString(p.Logo), Demo: p.Demo}
		for i := range pj.Examiners {
			pj.Examiners[i].PINHash = ""
		}
		out.Practice = &pj
	}
	for _, a := range r.Animals {
		out.Animals = append(out.Animals, animalOut(a))
	}
	for _, c := range r.Changes {
		if !exported(c.Kind) {
			continue
		}
		out.Changes = append(out.Changes, changeOut(c))
	}
	for owner, k := range r.OwnerKeys {
		out.Keys = append(out.Keys, keyJSON{owner, base64.StdEncoding.EncodeToString(k)})
	}
	slices.SortFunc(out.Keys, func(a, b keyJSON) int { return slices.Compare(a.Owner[:], b.Owner[:]) })
	enc := json.NewEncoder(w)
	enc.SetEscapeHTML(false)
	enc.SetIndent("", " ")
	if err := enc.Encode(out); err != nil {
		return fmt.Errorf("writing records: %w", err)
	}
	return nil
}

// exported reports whether changes of a kind leave in a records file. Audit and who looked at
// what stay; so do the practice's settings and devices, which are not the animals'.
func exported(k change.Kind) bool {
	switch k {
	case change.KindPatient, change.KindVisit, change.KindEdge, change.KindOwner, change.KindAttachment:
		return true
	}
	return false
}

func animalOut(a Animal) animalJSON {
	p := a.Patient
	out := animalJSON{Visits: []visitJSON{}, Patient: patientJSON{
		ID: p.ID, Name: p.Name, Species: p.Species.String(), Breed: p.Breed, Neutered: p.Neutered, Born: p.Born,
		Owner: unless(p.Owner), Veterinarian: unless(p.Veterinarian), OutOfHours: unless(p.OutOfHours), Referral: unless(p.Referral),
		Status: p.Status.String(), StatusSince: p.StatusSince, RecheckDays: p.RecheckDays, Problems: p.Problems, Precautions: p.Precautions,
		Goals: p.Goals, Medicines: p.Medicines, Note: p.Note, Demo: p.Demo}}
	if p.Sex != exam.SexUnknown {
		out.Patient.Sex = p.Sex.String()
	}
	for _, x := range p.Sent {
		out.Patient.Sent = append(out.Patient.Sent, sentJSON{x.ID, x.Visit, stamp(x.At), x.Kind, x.Examiner, x.Language, x.Summary, x.Reworded, x.Hash, x.Note})
	}
	for _, w := range p.Weights {
		out.Patient.Weights = append(out.Patient.Weights, weightJSON{stamp(w.At), w.Kg})
	}
	for _, v := range a.Visits {
		out.Visits = append(out.Visits, visitOut(v))
	}
	return out
}

func visitOut(v exam.Visit) visitJSON {
	out := visitJSON{ID: v.ID, Examined: stamp(v.Examined), Zone: v.Zone, Examiner: v.Examiner, Protocol: v.Protocol, State: "open",
		ClosedAt: stamp(v.ClosedAt), Aid: v.Aid, Surface: v.Surface, Session: v.Session, Doses: v.Doses, Findings: []findingJSON{},
		Treatments: v.Treatments, Home: v.Home, Report: unless(v.Report), Note: v.Note, NextVisit: v.NextVisit,
		Attachments: v.Attachments, Stim: v.Stim}
	if v.State == exam.Closed {
		out.State = "closed"
	}
	if !v.RepeatOf.IsZero() {
		out.RepeatOf = &v.RepeatOf
	}
	if v.Sedation != exam.SedationNone {
		out.Sedation = v.Sedation.String()
	}
	for _, f := range v.Findings {
		fj := findingJSON{Item: f.Item.String(), Site: f.Site.String(), Digit: f.Digit.String(), Joint: f.Joint.String(), Level: f.Level.String(),
			Side: f.Side.String(), Seen: f.Seen, Block: f.Block, Note: f.Note}
		if f.How != exam.Examined {
			fj.How = f.How.String()
		}
		if g, ok := f.Result.Grade(); ok {
			fj.Grade = &g
		} else {
			why := f.Result.Reason().String()
			fj.NotTested = &why
		}
		out.Findings = append(out.Findings, fj)
	}
	for _, m := range v.Measures {
		out.Measures = append(out.Measures, measuredJSON{Measure: m.Measure.String(), Site: m.Site.String(), Joint: m.Joint.String(), Motion: m.Motion,
			Value: m.Value, Unit: m.Measure.Info().Unit, At: m.At, Position: m.Position, Clipped: m.Clipped, EndFeel: m.EndFeel,
			Variant: m.Variant, BestEnd: m.BestEnd, Note: m.Note})
	}
	for _, a := range v.Amendments {
		out.Amendments = append(out.Amendments, amendmentJSON{a.Field, a.Reason, a.Examiner, stamp(a.At)})
	}
	for _, a := range v.Answers {
		out.Answers = append(out.Answers, answerJSON{a.Rule, a.Told, a.Note, a.Examiner, stamp(a.At)})
	}
	return out
}

func changeOut(c change.Change) changeJSON {
	ids := func(list []change.ID) []string {
		var out []string
		for _, id := range list {
			out = append(out, id.String())
		}
		return out
	}
	return changeJSON{ID: c.ID.String(), Device: c.Stream.Device.String(), Time: strconv.FormatUint(uint64(c.Time), 10), Examiner: c.Examiner,
		Kind: uint16(c.Kind), Patient: c.Patient, Record: c.Record, Field: c.Field, Value: base64.StdEncoding.EncodeToString(c.Value),
		Supersedes: ids(c.Supersedes), Act: uint8(c.Act), Reason: c.Reason, Seen: ids(c.Seen),
		Extra: base64.StdEncoding.EncodeToString(c.Extra)}
}

// ErrNewer means that a file was written by a newer version of this program.
var ErrNewer = errors.New("written by a newer version of this program")

// maxRecords bounds a records file: twenty thousand animals of ten visits are about 400 MB.
const maxRecords = 1 << 30

// DecodeRecords reads a records file. Unknown fields are ignored and named in the warnings.
// The error says where the file is wrong and what is allowed there.
func DecodeRecords(r io.Reader) (Records, []string, error) {
	data, err := io.ReadAll(io.LimitReader(r, maxRecords+1))
	if err != nil {
		return Records{}, nil, fmt.Errorf("reading records: %w", err)
	}
	if len(data) > maxRecords {
		return Records{}, nil, fmt.Errorf("reading records: the file is larger than 1 GiB; export fewer animals at once")
	}
	var head struct {
		Format  string `json:"format"`
		Version int    `json:"version"`
	}
	if err := json.Unmarshal(data, &head); err != nil {
		return Records{}, nil, fmt.Errorf("reading records: %w", jsonPlace(data, err))
	}
	if head.Format != RecordsFormat {
		return Records{}, nil, fmt.Errorf("reading records: the file says its format is %.40q; it must be %q", head.Format, RecordsFormat)
	}
	if head.Version > RecordsVersion {
		return Records{}, nil, fmt.Errorf("reading records: version %d of the format, this program reads up to %d: %w", head.Version, RecordsVersion, ErrNewer)
	}
	if head.Version < 1 {
		return Records{}, nil, fmt.Errorf("reading records: the file names no version; it must be %d", RecordsVersion)
	}
	warnings := unknownFields(data)
	var in recordsJSON
	if err := json.Unmarshal(data, &in); err != nil {
		return Records{}, warnings, fmt.Errorf("reading records: %w", jsonPlace(data, err))
	}
	out, err := recordsIn(in)
	if err != nil {
		return Records{}, warnings, fmt.Errorf("reading records: %w", err)
	}
	return out, warnings, nil
}

// unknownFields names the fields that this version does not know, each once.
func unknownFields(data []byte) []string {
	var out []string
	seen := map[string]bool{}
	for range 100 {
		dec := json.NewDecoder(bytes.NewReader(data))
		dec.DisallowUnknownFields()
		var r recordsJSON
		err := dec.Decode(&r)
		if err == nil || !strings.Contains(err.Error(), "unknown field") {
			return out
		}
		_, name, _ := strings.Cut(err.Error(), "unknown field ")
		if seen[name] {
			return out
		}
		seen[name] = true
		out = append(out, "the field "+name+" is not known and was ignored")
		// The decoder stops at the first unknown field: look further with that name taken out.
		bare, err := strconv.Unquote(name)
		if err != nil {
			return out
		}
		var any any
		if json.Unmarshal(data, &any) != nil {
			return out
		}
		drop(any, bare)
		if data, err = json.Marshal(any); err != nil {
			return out
		}
	}
	return out
}

func drop(v any, name string) {
	switch x := v.(type) {
	case map[string]any:
		delete(x, name)
		for _, y := range x {
			drop(y, name)
		}
	case []any:
		for _, y := range x {
			drop(y, name)
		}
	}
}

// jsonPlace adds the line to an error of the JSON decoder.
func jsonPlace(data []byte, err error) error {
	line := func(offset int64) int {
		return 1 + bytes.Count(data[:min(max(int(offset), 0), len(data))], []byte("\n"))
	}
	var syntax *json.SyntaxError
	var kind *json.UnmarshalTypeError
	switch {
	case errors.As(err, &syntax):
		return fmt.Errorf("line %d is no JSON: %s", line(syntax.Offset), syntax.Error())
	case errors.As(err, &kind):
		return fmt.Errorf("line %d: the field %s holds a %s where a %s is expected", line(kind.Offset), kind.Field, kind.Value, kind.Type)
	}
	return err
}

// place collects the first error with the path of what is being read.
type place struct {
	path []string
	err  error
}

func (p *place) in(name string, f func()) {
	if p.err != nil {
		return
	}
	p.path = append(p.path, name)
	f()
	p.path = p.path[:len(p.path)-1]
}

func (p *place) fail(err error) {
	if err != nil && p.err == nil {
		p.err = fmt.Errorf("%s: %w", strings.Join(p.path, "."), err)
	}
}

func parsed[T any](p *place, v T, err error) T {
	p.fail(err)
	return v
}

func (p *place) time(name, s string) time.Time {
	if s == "" {
		return time.Time{}
	}
	t, err := time.Parse(time.RFC3339Nano, s)
	if err != nil {
		p.in(name, func() {
			p.fail(&exam.Invalid{Field: "time", Value: s, Allowed: "a time such as 2026-03-02T10:15:00+01:00"})
		})
	}
	return t
}

func at0(name string, i int) string { return fmt.Sprintf("%s[%d]", name, i) }

func deref[T any](p *T) (v T) {
	if p != nil {
		return *p
	}
	return v
}

func recordsIn(in recordsJSON) (Records, error) {
	p := &place{}
	out := Records{Made: p.time("made", in.Made)}
	if j := in.Practice; j != nil {
		out.Practice = exam.Practice{Name: j.Name, Contact: deref(j.Contact), OutOfHours: deref(j.OutOfHours), Zone: j.Zone, Language: j.Language,
			Paper: j.Paper, Pounds: j.Pounds, Inches: j.Inches, Examiners: j.Examiners, Protocols: j.Protocols, Phrases: j.Phrases, Demo: j.Demo}
		p.in("practice", func() { out.Practice.Logo = logoIn(p, j.Logo); phrasesIn(p, j.Phrases) })
	}
	for i, a := range in.Animals {
		p.in(at0("animals", i), func() { out.Animals = append(out.Animals, animalIn(p, a)) })
	}
	for i, c := range in.Changes {
		p.in(at0("changes", i), func() { out.Changes = append(out.Changes, changeIn(p, c)) })
	}
	for i, k := range in.Keys {
		p.in(at0("owner_keys", i), func() {
			b, err := base64.StdEncoding.DecodeString(k.Key)
			if err != nil || len(b) != len(key.OwnerKey{}) {
				p.fail(&exam.Invalid{Field: "key", Value: strconv.Itoa(len(b)) + " bytes", Allowed: "32 bytes in base64"})
				return
			}
			if out.OwnerKeys == nil {
				out.OwnerKeys = map[exam.ID][]byte{}
			}
			out.OwnerKeys[k.Owner] = b
		})
	}
	return out, p.err
}

// logoIn reads the practice's logo; one that could not be printed is refused.
func logoIn(p *place, s string) []byte {
	if s == "" {
		return nil
	}
	b, err := base64.StdEncoding.DecodeString(s)
	if err == nil {
		err = CheckLogo(b)
	}
	if err != nil {
		p.in("logo", func() { p.fail(err) })
	}
	return b
}

// phrasesIn refuses wordings that could not stand on a sheet.
func phrasesIn(p *place, list []exam.Phrase) {
	for i, x := range list {
		p.in(at0("phrases", i), func() { p.fail(CheckPhrase(x.Key, x.Words)) })
	}
}

func animalIn(p *place, a animalJSON) (out Animal) {
	j := a.Patient
	p.in("patient", func() {
		out.Patient = exam.Patient{ID: j.ID, Name: j.Name, Breed: j.Breed, Neutered: j.Neutered, Born: date(p, "born", j.Born), Owner: deref(j.Owner),
			Veterinarian: deref(j.Veterinarian), OutOfHours: deref(j.OutOfHours), Referral: deref(j.Referral), StatusSince: date(p, "status_since", j.StatusSince),
			RecheckDays: j.RecheckDays, Problems: j.Problems, Precautions: j.Precautions, Goals: j.Goals, Medicines: j.Medicines, Note: j.Note, Demo: j.Demo}
		s, err := exam.ParseSpecies(j.Species)
		out.Patient.Species = parsed(p, s, err)
		x, err := exam.ParseSex(j.Sex)
		out.Patient.Sex = parsed(p, x, err)
		st, err := exam.ParseStatus(j.Status)
		out.Patient.Status = parsed(p, st, err)
		for i, x := range j.Sent {
			out.Patient.Sent = append(out.Patient.Sent, exam.Sent{ID: x.ID, Visit: x.Visit, At: p.time(at0("sent", i), x.At), Kind: x.Kind, Examiner: x.Examiner,
				Language: x.Language, Summary: x.Summary, Reworded: x.Reworded, Hash: x.Hash, Note: x.Note})
		}
		for i, w := range j.Weights {
			out.Patient.Weights = append(out.Patient.Weights, exam.WeightPoint{At: p.time(at0("weights", i), w.At), Kg: w.Kg})
		}
		if p.err == nil {
			p.fail(out.Patient.Validate())
		}
	})
	for i, v := range a.Visits {
		p.in(at0("visits", i), func() {
			visit := visitIn(p, v, j.ID)
			if p.err == nil {
				p.fail(visit.Validate(out.Patient.Species))
			}
			out.Visits = append(out.Visits, visit)
		})
	}
	return out
}

func date(p *place, name string, d exam.Date) exam.Date {
	out, err := exam.ParseDate(string(d))
	if err != nil {
		p.in(name, func() { p.fail(err) })
	}
	return out
}

func visitIn(p *place, j visitJSON, patient exam.ID) exam.Visit {
	v := exam.Visit{ID: j.ID, Patient: patient, Examined: p.time("examined", j.Examined), Zone: j.Zone, Examiner: j.Examiner, Protocol: j.Protocol,
		ClosedAt: p.time("closed_at", j.ClosedAt), RepeatOf: deref(j.RepeatOf), Aid: j.Aid, Surface: j.Surface, Session: j.Session, Doses: j.Doses,
		Treatments: j.Treatments, Home: j.Home, Report: deref(j.Report), Note: j.Note, NextVisit: date(p, "next_visit", j.NextVisit),
		Attachments: j.Attachments, Stim: j.Stim}
	switch j.State {
	case "", "open":
	case "closed":
		v.State = exam.Closed
	default:
		p.in("state", func() { p.fail(&exam.Invalid{Field: "state", Value: j.State, Allowed: "open or closed"}) })
	}
	s, err := exam.ParseSedation(j.Sedation)
	v.Sedation = parsed(p, s, err)
	for i, f := range j.Findings {
		p.in(at0("findings", i), func() { v.Findings = append(v.Findings, findingIn(p, f)) })
	}
	for i, m := range j.Measures {
		p.in(at0("measures", i), func() { v.Measures = append(v.Measures, measuredIn(p, m)) })
	}
	for i, a := range j.Amendments {
		v.Amendments = append(v.Amendments, exam.Amendment{Field: a.Field, Reason: a.Reason, Examiner: a.Examiner, At: p.time(at0("amendments", i), a.At)})
	}
	for i, a := range j.Answers {
		v.Answers = append(v.Answers, exam.Acknowledgement{Rule: a.Rule, Told: a.Told, Note: a.Note, Examiner: a.Examiner, At: p.time(at0("answers", i), a.At)})
	}
	return v
}

func optional[T any](p *place, word string, parse func(string) (T, error)) (v T) {
	if word == "" {
		return v
	}
	v, err := parse(word)
	p.fail(err)
	return v
}

func findingIn(p *place, j findingJSON) exam.Finding {
	f := exam.Finding{Seen: j.Seen, Block: j.Block, Note: j.Note}
	item, err := exam.ParseItem(j.Item)
	f.Item = parsed(p, item, err)
	site, err := exam.ParseSite(j.Site)
	f.Site = parsed(p, site, err)
	f.Digit = optional(p, j.Digit, exam.ParseDigit)
	f.Joint = optional(p, j.Joint, exam.ParseJoint)
	f.Side = optional(p, j.Side, exam.ParseSite)
	f.How = optional(p, j.How, exam.ParseHow)
	f.Level = optional(p, j.Level, func(w string) (exam.Vertebra, error) { return exam.ParseVertebra(w, 0) })
	switch {
	case j.Grade != nil && j.NotTested != nil:
		p.fail(&exam.Invalid{Field: "finding", Value: j.Item, Allowed: "a grade or the reason for having none, not both"})
	case j.Grade != nil:
		f.Result = exam.Graded(*j.Grade)
	case j.NotTested != nil:
		reason, note := exam.ParseReason(*j.NotTested)
		f.Result = exam.Untested(reason)
		if note != "" && f.Note == "" {
			f.Note = note
		}
	default:
		p.fail(&exam.Invalid{Field: "finding", Value: j.Item, Allowed: "a grade, or not_tested with a reason"})
	}
	return f
}

func measuredIn(p *place, j measuredJSON) exam.Measured {
	m := exam.Measured{Motion: j.Motion, Value: j.Value, At: j.At, Position: j.Position, Clipped: j.Clipped, EndFeel: j.EndFeel,
		Variant: j.Variant, BestEnd: j.BestEnd, Note: j.Note}
	kind, err := exam.ParseMeasure(j.Measure)
	m.Measure = parsed(p, kind, err)
	m.Site = optional(p, j.Site, exam.ParseSite)
	m.Joint = optional(p, j.Joint, exam.ParseJoint)
	if unit := m.Measure.Info().Unit; p.err == nil && j.Unit != "" && j.Unit != unit {
		p.fail(&exam.Invalid{Field: "unit of " + j.Measure, Value: j.Unit, Allowed: unit})
	}
	return m
}

func changeIn(p *place, j changeJSON) change.Change {
	id := func(s string) change.ID {
		x, err := exam.ParseID(s)
		return change.ID(parsed(p, x, err))
	}
	ids := func(list []string) []change.ID {
		var out []change.ID
		for _, s := range list {
			out = append(out, id(s))
		}
		return out
	}
	raw := func(s string) []byte {
		if s == "" {
			return nil
		}
		b, err := base64.StdEncoding.DecodeString(s)
		return parsed(p, b, err)
	}
	c := change.Change{ID: id(j.ID), Examiner: j.Examiner, Kind: change.Kind(j.Kind), Patient: j.Patient, Record: j.Record, Field: j.Field,
		Value: raw(j.Value), Supersedes: ids(j.Supersedes), Act: change.Act(j.Act), Reason: j.Reason, Seen: ids(j.Seen), Extra: raw(j.Extra)}
	st, err := change.ParseStream(j.Device + strings.Repeat("0", 32))
	if err != nil {
		err = &exam.Invalid{Field: "device", Value: j.Device, Allowed: "32 hexadecimal digits"}
	}
	c.Stream = parsed(p, st, err)
	t, err := strconv.ParseUint(j.Time, 10, 64)
	c.Time = change.HLC(parsed(p, t, err))
	if p.err == nil && !exported(c.Kind) {
		p.fail(&exam.Invalid{Field: "kind", Value: strconv.Itoa(int(c.Kind)), Allowed: "a kind that belongs to animals: 2, 3, 4, 7 or 8"})
	}
	if p.err == nil {
		p.fail(c.Validate())
	}
	return c
}
