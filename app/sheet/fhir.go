package sheet

import (
	"encoding/base64"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/google/uuid"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// FHIR (HL7 FHIR R4, 4.0.1): a Bundle of type collection. What has a place in FHIR goes
// there; what has none goes into extensions under fhirBase, so that the same Bundle comes
// back without loss. Mapped: the animal (with the patient-animal extension), its people as
// contacts, problems as Condition, precautions as Flag, goals as Goal, medicines as
// MedicationStatement; each visit as Encounter with Provenance, findings and measures as
// Observation (UCUM units; the weights of all visits are the weight series, in kg), treatments
// and sessions of stimulation as Procedure, its tests and answers as Observation, photos and
// clips as Media without their bytes, the home programme as CarePlan, papers as
// DiagnosticReport. Not mapped: the record of what was sent, and the history of changes, which
// only the records format carries.
const fhirBase = "https://cordwalk.example/fhir/"

// The code systems in use that are HL7's own.
const (
	hl7        = "http://terminology.hl7.org/CodeSystem/"
	ucumSystem = "http://unitsofmeasure.org"
	loinc      = "http://loinc.org"
)

type fhirBundle struct {
	ResourceType string      `json:"resourceType"`
	Type         string      `json:"type"`
	Timestamp    string      `json:"timestamp,omitempty"`
	Entry        []fhirEntry `json:"entry,omitempty"`
}

type fhirEntry struct {
	FullURL  string          `json:"fullUrl,omitempty"`
	Resource json.RawMessage `json:"resource"`
}

type fhirCoding struct {
	System  string `json:"system,omitempty"`
	Code    string `json:"code,omitempty"`
	Display string `json:"display,omitempty"`
}

type fhirConcept struct {
	Coding []fhirCoding `json:"coding,omitempty"`
	Text   string       `json:"text,omitempty"`
}

type fhirRef struct {
	Reference string `json:"reference,omitempty"`
	Display   string `json:"display,omitempty"`
}

type fhirExt struct {
	URL            string       `json:"url"`
	Extension      []fhirExt    `json:"extension,omitempty"`
	ValueString    string       `json:"valueString,omitempty"`
	ValueCode      string       `json:"valueCode,omitempty"`
	ValueBoolean   *bool        `json:"valueBoolean,omitempty"`
	ValueInteger   *int         `json:"valueInteger,omitempty"`
	ValueDecimal   *float64     `json:"valueDecimal,omitempty"`
	ValueDate      string       `json:"valueDate,omitempty"`
	ValueDateTime  string       `json:"valueDateTime,omitempty"`
	ValueID        string       `json:"valueId,omitempty"`
	ValueCodeable  *fhirConcept `json:"valueCodeableConcept,omitempty"`
	ValueReference *fhirRef     `json:"valueReference,omitempty"`
}

type fhirName struct {
	Text string `json:"text,omitempty"`
}

type fhirContactPoint struct {
	System string `json:"system"`
	Value  string `json:"value"`
}

type fhirContact struct {
	Relationship []fhirConcept      `json:"relationship,omitempty"`
	Name         *fhirName          `json:"name,omitempty"`
	Telecom      []fhirContactPoint `json:"telecom,omitempty"`
	Address      *fhirName          `json:"address,omitempty"`
}

type fhirPeriod struct {
	Start string `json:"start,omitempty"`
	End   string `json:"end,omitempty"`
}

type fhirQuantity struct {
	Value  *float64 `json:"value,omitempty"`
	Unit   string   `json:"unit,omitempty"`
	System string   `json:"system,omitempty"`
	Code   string   `json:"code,omitempty"`
}

type fhirNote struct {
	Text string `json:"text"`
}

type fhirMeta struct {
	Tag []fhirCoding `json:"tag,omitempty"`
}

// fhirResource holds the fields of all resources in use; each sets its own.
type fhirResource struct {
	ResourceType string       `json:"resourceType"`
	ID           string       `json:"id,omitempty"`
	Meta         *fhirMeta    `json:"meta,omitempty"`
	Extension    []fhirExt    `json:"extension,omitempty"`
	Identifier   []fhirIdent  `json:"identifier,omitempty"`
	Status       string       `json:"status,omitempty"`
	Intent       string       `json:"intent,omitempty"`
	Class        *fhirCoding  `json:"class,omitempty"`
	Clinical     *fhirConcept `json:"clinicalStatus,omitempty"`
	Lifecycle    string       `json:"lifecycleStatus,omitempty"`
	// Patient
	Active    *bool              `json:"active,omitempty"`
	Name      any                `json:"name,omitempty"` // a list of names for a Patient, a text for an Organization
	Telecom   []fhirContactPoint `json:"telecom,omitempty"`
	Gender    string             `json:"gender,omitempty"`
	BirthDate string             `json:"birthDate,omitempty"`
	Deceased  *bool              `json:"deceasedBoolean,omitempty"`
	Contact   []fhirContact      `json:"contact,omitempty"`
	Managing  *fhirRef           `json:"managingOrganization,omitempty"`
	// everything about a patient
	Category        any          `json:"category,omitempty"`
	Code            *fhirConcept `json:"code,omitempty"`
	BodySite        any          `json:"bodySite,omitempty"` // one concept on an Observation, a list elsewhere
	Description     any          `json:"description,omitempty"`
	Subject         *fhirRef     `json:"subject,omitempty"`
	Encounter       *fhirRef     `json:"encounter,omitempty"`
	Period          *fhirPeriod  `json:"period,omitempty"`
	Effective       string       `json:"effectiveDateTime,omitempty"`
	EffectivePeriod *fhirPeriod  `json:"effectivePeriod,omitempty"`
	Performed       string       `json:"performedDateTime,omitempty"`
	Onset           string       `json:"onsetDateTime,omitempty"`
	Abatement       string       `json:"abatementDateTime,omitempty"`
	Performer       []fhirRef    `json:"performer,omitempty"`
	Participant     []fhirParty  `json:"participant,omitempty"`
	// values
	Medication     *fhirConcept   `json:"medicationCodeableConcept,omitempty"`
	Dosage         []fhirName     `json:"dosage,omitempty"`
	ValueConcept   *fhirConcept   `json:"valueCodeableConcept,omitempty"`
	ValueQuantity  *fhirQuantity  `json:"valueQuantity,omitempty"`
	ValueText      string         `json:"valueString,omitempty"`
	Absent         *fhirConcept   `json:"dataAbsentReason,omitempty"`
	Interpretation []fhirConcept  `json:"interpretation,omitempty"`
	Note           []fhirNote     `json:"note,omitempty"`
	GoalTarget     []fhirTarget   `json:"target,omitempty"` // of a Goal; of a Provenance: references
	StatusDate     string         `json:"statusDate,omitempty"`
	Activity       []fhirActivity `json:"activity,omitempty"`
	Recorded       string         `json:"recorded,omitempty"`
	Agent          []fhirAgent    `json:"agent,omitempty"`
	Presented      []fhirFile     `json:"presentedForm,omitempty"`
	Created        string         `json:"createdDateTime,omitempty"`
	Content        *fhirMedia     `json:"content,omitempty"`
}

// fhirMedia says what a photo or clip is; its bytes stay sealed in the practice.
type fhirMedia struct {
	ContentType string `json:"contentType,omitempty"`
	Size        int64  `json:"size,omitempty"`
	Title       string `json:"title,omitempty"`
}

// mediaTypes are the media types of the formats of attachments (IANA; QuickTime from memory).
var mediaTypes = map[string]string{"jpeg": "image/jpeg", "png": "image/png", "mp4": "video/mp4", "mov": "video/quicktime", "webm": "video/webm"}

type fhirIdent struct {
	System string `json:"system,omitempty"`
	Value  string `json:"value,omitempty"`
}

type fhirParty struct {
	Individual *fhirRef `json:"individual,omitempty"`
}

// fhirTarget is a Goal's target, or a reference where it belongs to a Provenance.
type fhirTarget struct {
	Reference string        `json:"reference,omitempty"`
	Measure   *fhirConcept  `json:"measure,omitempty"`
	Detail    *fhirQuantity `json:"detailQuantity,omitempty"`
	Due       string        `json:"dueDate,omitempty"`
}

type fhirActivity struct {
	Detail *fhirDetail `json:"detail,omitempty"`
}

type fhirDetail struct {
	Extension   []fhirExt    `json:"extension,omitempty"`
	Code        *fhirConcept `json:"code,omitempty"`
	Status      string       `json:"status"`
	Description string       `json:"description,omitempty"`
}

type fhirAgent struct {
	Who fhirRef `json:"who"`
}

type fhirFile struct {
	ContentType string `json:"contentType"`
	Data        string `json:"data"`
	Title       string `json:"title,omitempty"`
}

func str(name, v string) []fhirExt {
	if v == "" {
		return nil
	}
	return []fhirExt{{URL: fhirBase + name, ValueString: v}}
}

func whole(name string, v int) []fhirExt {
	if v == 0 {
		return nil
	}
	return []fhirExt{{URL: fhirBase + name, ValueInteger: &v}}
}

func decimalExt(name string, v float64) []fhirExt {
	if v == 0 {
		return nil
	}
	return []fhirExt{{URL: fhirBase + name, ValueDecimal: &v}}
}

func yes(name string, v bool) []fhirExt {
	if !v {
		return nil
	}
	return []fhirExt{{URL: fhirBase + name, ValueBoolean: &v}}
}

func instant(name string, t time.Time) []fhirExt {
	if t.IsZero() {
		return nil
	}
	return []fhirExt{{URL: fhirBase + name, ValueDateTime: stamp(t)}}
}

func nest(name string, parts ...[]fhirExt) []fhirExt {
	all := slices.Concat(parts...)
	if len(all) == 0 {
		return nil
	}
	return []fhirExt{{URL: fhirBase + name, Extension: all}}
}

func code(kind, value, display string) *fhirConcept {
	return &fhirConcept{Coding: []fhirCoding{{System: fhirBase + kind, Code: value, Display: display}}}
}

func ref(id exam.ID) *fhirRef { return &fhirRef{Reference: "urn:uuid:" + id.String()} }

// derived makes an id that is always the same for the same part of a record.
func derived(of exam.ID, part string) exam.ID {
	return exam.ID(uuid.NewSHA1(uuid.UUID(of), []byte(part)))
}

// Report is a finished paper that goes along in a Bundle.
type Report struct {
	Visit exam.ID
	Title string
	PDF   []byte
}

// fhirWriter collects the entries of a Bundle.
type fhirWriter struct {
	bundle fhirBundle
	err    error
}

func (w *fhirWriter) add(id exam.ID, r fhirResource) {
	if w.err != nil {
		return
	}
	r.ID = id.String()
	b, err := json.Marshal(r)
	if err != nil {
		w.err = err
		return
	}
	w.bundle.Entry = append(w.bundle.Entry, fhirEntry{FullURL: "urn:uuid:" + r.ID, Resource: b})
}

// EncodeFHIR writes animals as a FHIR R4 Bundle. The same input gives the same bytes.
func EncodeFHIR(out io.Writer, r Records, reports []Report) error {
	w := &fhirWriter{bundle: fhirBundle{ResourceType: "Bundle", Type: "collection", Timestamp: stamp(r.Made)}}
	var org exam.ID
	if r.Practice.Name != "" {
		org = derived(exam.ID{}, "practice "+r.Practice.Name)
		o := fhirResource{ResourceType: "Organization", Name: r.Practice.Name, Telecom: telecom(r.Practice.Contact)}
		w.add(org, o)
	}
	for _, a := range r.Animals {
		w.patient(a.Patient, org)
		for _, v := range a.Visits {
			w.visit(a.Patient, v)
			for _, rep := range reports {
				if rep.Visit == v.ID {
					w.add(derived(v.ID, "report "+rep.Title), fhirResource{ResourceType: "DiagnosticReport", Status: "final", Code: &fhirConcept{Text: rep.Title}, Subject: ref(a.Patient.ID),
						Encounter: ref(v.ID), Effective: stamp(v.Examined), Presented: []fhirFile{{"application/pdf", base64.StdEncoding.EncodeToString(rep.PDF), rep.Title}}})
				}
			}
		}
	}
	if w.err != nil {
		return fmt.Errorf("writing the FHIR bundle: %w", w.err)
	}
	enc := json.NewEncoder(out)
	enc.SetEscapeHTML(false)
	enc.SetIndent("", " ")
	if err := enc.Encode(w.bundle); err != nil {
		return fmt.Errorf("writing the FHIR bundle: %w", err)
	}
	return nil
}

func telecom(c exam.Contact) []fhirContactPoint {
	var out []fhirContactPoint
	if c.Phone != "" {
		out = append(out, fhirContactPoint{"phone", c.Phone})
	}
	if c.Email != "" {
		out = append(out, fhirContactPoint{"email", c.Email})
	}
	return out
}

func contact(c exam.Contact, role string) []fhirContact {
	if c.Empty() {
		return nil
	}
	f := fhirContact{Relationship: []fhirConcept{*code("contact", role, "")}, Telecom: telecom(c)}
	if c.Name != "" {
		f.Name = &fhirName{c.Name}
	}
	if c.Address != "" {
		f.Address = &fhirName{c.Address}
	}
	return []fhirContact{f}
}

// The code of the dog is HL7's example code for animal species (from memory); the others are this project's.
func speciesConcept(s exam.Species) *fhirConcept {
	c := code("species", s.String(), s.String())
	if s == exam.Dog {
		c.Coding = append(c.Coding, fhirCoding{System: "http://hl7.org/fhir/animal-species", Code: "canislf", Display: "Dog"})
	}
	return c
}

func (w *fhirWriter) patient(p exam.Patient, org exam.ID) {
	animal := fhirExt{URL: "http://hl7.org/fhir/StructureDefinition/patient-animal", Extension: []fhirExt{{URL: "species", ValueCodeable: speciesConcept(p.Species)}}}
	if p.Breed != "" {
		animal.Extension = append(animal.Extension, fhirExt{URL: "breed", ValueCodeable: &fhirConcept{Text: p.Breed}})
	}
	gender := "unknown"
	if p.Neutered {
		gender = "neutered"
	}
	animal.Extension = append(animal.Extension, fhirExt{URL: "genderStatus", ValueCodeable: &fhirConcept{Coding: []fhirCoding{{System: "http://hl7.org/fhir/animal-genderstatus", Code: gender}}}})
	active := p.Status == exam.Active
	r := fhirResource{ResourceType: "Patient", Identifier: []fhirIdent{{"urn:ietf:rfc:3986", "urn:uuid:" + p.ID.String()}}, Active: &active,
		Name: []fhirName{{p.Name}}, Gender: p.Sex.String(), BirthDate: string(p.Born),
		Contact: slices.Concat(contact(p.Owner, "owner"), contact(p.Veterinarian, "veterinarian"), contact(p.OutOfHours, "out-of-hours")),
		Extension: slices.Concat([]fhirExt{animal}, str("status", p.Status.String()), str("status-since", string(p.StatusSince)), whole("recheck-days", p.RecheckDays),
			nest("referral", str("by", p.Referral.By), str("until", string(p.Referral.Until)), str("limits", p.Referral.Limits)), str("note", p.Note))}
	if p.Status == exam.Died {
		dead := true
		r.Deceased = &dead
	}
	if p.Demo {
		r.Meta = &fhirMeta{[]fhirCoding{{System: hl7 + "v3-ActReason", Code: "HTEST", Display: "test health data"}}}
	}
	if !org.IsZero() {
		r.Managing = ref(org)
	}
	w.add(p.ID, r)
	for i, x := range p.Problems {
		state := "active"
		if x.Resolved != "" {
			state = "resolved"
		}
		c := fhirResource{ResourceType: "Condition", Clinical: &fhirConcept{Coding: []fhirCoding{{System: hl7 + "condition-clinical", Code: state}}}, Code: &fhirConcept{Text: x.Diagnosis},
			Subject: ref(p.ID), Onset: string(x.Onset), Abatement: string(x.Resolved), Extension: slices.Concat(str("side", x.Side), str("surgery", string(x.Surgery)), original(x.ID))}
		if x.Level != "" {
			c.BodySite = []fhirConcept{{Text: x.Level}}
		}
		c.Note = note(x.Note)
		w.add(derived(p.ID, "problem "+strconv.Itoa(i)), c)
	}
	for i, x := range p.Precautions {
		f := fhirResource{ResourceType: "Flag", Status: "active", Code: code("precaution", x.Code, ""), Subject: ref(p.ID),
			Extension: slices.Concat(str("site", x.Site), str("note", x.Note), original(x.ID)), Period: period(string(x.Since), string(x.Until))}
		w.add(derived(p.ID, "precaution "+strconv.Itoa(i)), f)
	}
	for i, x := range p.Goals {
		state := "active"
		if x.Reached != "" {
			state = "completed"
		}
		g := fhirResource{ResourceType: "Goal", Lifecycle: state, Description: &fhirConcept{Text: x.Words}, Subject: ref(p.ID), StatusDate: string(x.Reached),
			Extension: slices.Concat(str("site", x.Site), original(x.ID))}
		target := fhirTarget{Due: string(x.By), Detail: &fhirQuantity{Value: &x.Target}}
		switch {
		case x.Measure != "":
			target.Measure = code("measure", x.Measure, "")
		case x.Item != "":
			target.Measure = code("item", x.Item, "")
		}
		g.GoalTarget = []fhirTarget{target}
		w.add(derived(p.ID, "goal "+strconv.Itoa(i)), g)
	}
	for i, x := range p.Medicines {
		state := "active"
		if x.Stop != "" {
			state = "completed"
		}
		m := fhirResource{ResourceType: "MedicationStatement", Status: state, Medication: &fhirConcept{Text: x.Name}, Subject: ref(p.ID), EffectivePeriod: period(string(x.Start), string(x.Stop)), Extension: original(x.ID)}
		if x.Dose != "" {
			m.Dosage = []fhirName{{x.Dose}}
		}
		w.add(derived(p.ID, "medicine "+strconv.Itoa(i)), m)
	}
}

// original keeps the id of a part of a record, which need not be fit for a resource.
func original(id exam.ID) []fhirExt {
	if id.IsZero() {
		return nil
	}
	return str("id", id.String())
}

func note(s string) []fhirNote {
	if s == "" {
		return nil
	}
	return []fhirNote{{s}}
}

func period(start, end string) *fhirPeriod {
	if start == "" && end == "" {
		return nil
	}
	return &fhirPeriod{start, end}
}

func (w *fhirWriter) visit(p exam.Patient, v exam.Visit) {
	state, obs := "in-progress", "preliminary"
	if v.State == exam.Closed {
		state, obs = "finished", "final"
	}
	var doses, amendments, answers []fhirExt
	for _, d := range v.Doses {
		doses = append(doses, fhirExt{URL: fhirBase + "dose", Extension: slices.Concat(str("medicine", d.Medicine), []fhirExt{{URL: fhirBase + "hours", ValueDecimal: &d.Hours}})})
	}
	for _, a := range v.Amendments {
		amendments = append(amendments, nest("amendment", str("field", a.Field), str("reason", a.Reason), str("examiner", a.Examiner), instant("at", a.At))...)
	}
	for _, a := range v.Answers {
		answers = append(answers, nest("answer", str("rule", a.Rule), str("told", a.Told), str("note", a.Note), str("examiner", a.Examiner), instant("at", a.At))...)
	}
	e := fhirResource{ResourceType: "Encounter", Status: state, Class: &fhirCoding{System: hl7 + "v3-ActCode", Code: "AMB", Display: "ambulatory"}, Subject: ref(p.ID),
		Participant: []fhirParty{{&fhirRef{Display: v.Examiner}}}, Period: period(stamp(v.Examined), stamp(v.ClosedAt)),
		Extension: slices.Concat(str("zone", v.Zone), str("protocol", v.Protocol), original2("repeat-of", v.RepeatOf), str("sedation", v.Sedation.String()), str("aid", v.Aid), str("surface", v.Surface),
			str("session", v.Session), str("note", v.Note), str("next-visit", string(v.NextVisit)), doses,
			nest("report", str("falls", v.Report.Falls), str("urine", v.Report.Urine), str("appetite", v.Report.Appetite), whole("done", v.Report.ExercisesDone), whole("set", v.Report.ExercisesSet), str("words", v.Report.Words)),
			amendments, answers)}
	w.add(v.ID, e)
	shared := fhirResource{ResourceType: "Observation", Status: obs, Subject: ref(p.ID), Encounter: ref(v.ID), Effective: stamp(v.Examined), Performer: []fhirRef{{Display: v.Examiner}}}
	category := func(c string) any {
		return []fhirConcept{{Coding: []fhirCoding{{System: hl7 + "observation-category", Code: c}}}}
	}
	for _, f := range v.Findings {
		o := shared
		o.Category, o.Code, o.BodySite = category("exam"), code("item", f.Item.String(), ""), code("site", f.Site.String(), "")
		o.Note = note(f.Note)
		o.Extension = slices.Concat(str("digit", f.Digit.String()), str("joint", f.Joint.String()), str("side", f.Side.String()), str("level", f.Level.String()),
			str("how", f.How.String()), yes("seen", f.Seen), str("block", f.Block))
		if g, ok := f.Result.Grade(); ok {
			o.ValueConcept = code("grade/"+f.Item.String(), strconv.Itoa(int(g)), f.Item.GradeWord(g))
			switch {
			case f.Normal():
				o.Interpretation = []fhirConcept{{Coding: []fhirCoding{{System: hl7 + "v3-ObservationInterpretation", Code: "N", Display: "Normal"}}}}
			case f.Abnormal():
				o.Interpretation = []fhirConcept{{Coding: []fhirCoding{{System: hl7 + "v3-ObservationInterpretation", Code: "A", Display: "Abnormal"}}}}
			}
		} else {
			why := "not-performed"
			if f.Result.Reason() == exam.OwnerDeclined {
				why = "asked-declined"
			}
			o.Absent = &fhirConcept{Coding: []fhirCoding{{System: hl7 + "data-absent-reason", Code: why}}}
			if r := f.Result.Reason(); r != exam.ReasonNone {
				o.Absent.Coding = append(o.Absent.Coding, fhirCoding{System: fhirBase + "not-tested", Code: strings.ReplaceAll(r.String(), " ", "-"), Display: r.String()})
			}
		}
		w.add(derived(v.ID, "finding "+f.Key().String()), o)
	}
	for _, m := range v.Measures {
		o := shared
		o.Category, o.Code = category("exam"), code("measure", m.Measure.String(), "")
		switch m.Measure { // LOINC codes from memory
		case exam.Weight:
			o.Category, o.Code.Coding = category("vital-signs"), append(o.Code.Coding, fhirCoding{System: loinc, Code: "29463-7", Display: "Body weight"})
		case exam.Temperature:
			o.Category, o.Code.Coding = category("vital-signs"), append(o.Code.Coding, fhirCoding{System: loinc, Code: "8310-5", Display: "Body temperature"})
		case exam.HeartRate:
			o.Category, o.Code.Coding = category("vital-signs"), append(o.Code.Coding, fhirCoding{System: loinc, Code: "8867-4", Display: "Heart rate"})
		case exam.RespiratoryRate:
			o.Category, o.Code.Coding = category("vital-signs"), append(o.Code.Coding, fhirCoding{System: loinc, Code: "9279-1", Display: "Respiratory rate"})
		}
		if m.Site != exam.NoSite {
			o.BodySite = code("site", m.Site.String(), "")
		}
		o.Note = note(m.Note)
		o.ValueQuantity = &fhirQuantity{&m.Value, m.Measure.Info().Unit, ucumSystem, UCUM(m.Measure)}
		o.Extension = slices.Concat(str("joint", m.Joint.String()), str("motion", m.Motion), decimalExt("at", m.At), str("position", m.Position), yes("clipped", m.Clipped),
			str("end-feel", m.EndFeel), str("variant", m.Variant), decimalExt("best-end", m.BestEnd))
		w.add(derived(v.ID, "measure "+m.Key()), o)
	}
	for i, t := range v.Treatments {
		r := fhirResource{ResourceType: "Procedure", Status: "completed", Code: code("treatment", t.Kind, ""), Subject: ref(p.ID), Encounter: ref(v.ID), Performed: stamp(v.Examined),
			Extension: slices.Concat(str("params", t.Params), decimalExt("minutes", t.Minutes), str("override", t.Override), original(t.ID))}
		if t.Site != "" {
			r.BodySite = []fhirConcept{*code("site", t.Site, "")}
		}
		w.add(derived(v.ID, "treatment "+strconv.Itoa(i)), r)
	}
	for i, x := range v.Stim {
		r := shared
		r.Code = code("stimulation", x.Kind, "")
		r.Extension = original(x.ID)
		if x.Kind == stimSession {
			r = fhirResource{ResourceType: "Procedure", Status: "completed", Code: r.Code, Subject: ref(p.ID), Encounter: ref(v.ID), Performed: stamp(v.Examined),
				Extension: slices.Concat(str("data", x.Data), original(x.ID))}
		} else {
			r.Category, r.ValueText = category("procedure"), x.Data
		}
		w.add(derived(v.ID, "stimulation "+strconv.Itoa(i)), r)
	}
	for i, x := range v.Attachments {
		w.add(derived(v.ID, "attachment "+strconv.Itoa(i)), fhirResource{ResourceType: "Media", Status: "completed", Subject: ref(p.ID), Encounter: ref(v.ID), Created: stamp(v.Examined), Note: note(x.Note),
			Content: &fhirMedia{ContentType: mediaTypes[x.Format], Size: x.Size, Title: x.Name}, Extension: slices.Concat(str("format", x.Format), original(x.ID))})
	}
	if len(v.Home) > 0 {
		plan := fhirResource{ResourceType: "CarePlan", Status: "active", Intent: "plan", Subject: ref(p.ID), Encounter: ref(v.ID)}
		for _, h := range v.Home {
			plan.Activity = append(plan.Activity, fhirActivity{&fhirDetail{Status: "scheduled", Code: code("exercise", h.Kind, ""), Description: h.How,
				Extension: slices.Concat(whole("times", h.Times), whole("days", h.DaysWeek), str("amount", h.Amount), str("stop", h.StopFor), str("override", h.Override), original(h.ID))}})
		}
		w.add(derived(v.ID, "home"), plan)
	}
	recorded := v.Examined
	if !v.ClosedAt.IsZero() {
		recorded = v.ClosedAt
	}
	w.add(derived(v.ID, "provenance"), fhirResource{ResourceType: "Provenance", GoalTarget: []fhirTarget{{Reference: "urn:uuid:" + v.ID.String()}}, Recorded: stamp(recorded), Agent: []fhirAgent{{fhirRef{Display: v.Examiner}}}})
}

// stimSession is the kind of a stimulation record that was a treatment.
const stimSession = "session"

func original2(name string, id exam.ID) []fhirExt {
	if id.IsZero() {
		return nil
	}
	return str(name, id.String())
}

// fhirIn is a resource as it is read: fields that differ between resources stay raw.
type fhirIn struct {
	fhirResource
	NameRaw        json.RawMessage `json:"name"`
	BodySiteRaw    json.RawMessage `json:"bodySite"`
	DescriptionRaw json.RawMessage `json:"description"`
	CategoryRaw    json.RawMessage `json:"category"`
}

func (r *fhirIn) ext(name string) (out fhirExt) { return extOf(r.Extension, name) }

func extOf(list []fhirExt, name string) (out fhirExt) {
	for _, e := range list {
		if e.URL == fhirBase+name || e.URL == name {
			return e
		}
	}
	return out
}

func (e fhirExt) sub(name string) fhirExt { return extOf(e.Extension, name) }

func (e fhirExt) text() string {
	for _, s := range []string{e.ValueString, e.ValueCode, e.ValueDate, e.ValueDateTime} {
		if s != "" {
			return s
		}
	}
	return ""
}

func (e fhirExt) date() exam.Date     { return exam.Date(e.text()) }
func (e fhirExt) number() float64     { return deref(e.ValueDecimal) }
func (e fhirExt) whole() int          { return deref(e.ValueInteger) }
func (e fhirExt) time() (t time.Time) { t, _ = time.Parse(time.RFC3339Nano, e.text()); return t }

func (e fhirExt) id() (id exam.ID) { id, _ = exam.ParseID(e.text()); return id }

// codeOf returns the code of a concept in one of this project's systems.
func (c *fhirConcept) codeOf(kind string) string {
	if c == nil {
		return ""
	}
	for _, x := range c.Coding {
		if x.System == fhirBase+kind {
			return x.Code
		}
	}
	return ""
}

func (c *fhirConcept) words() string {
	if c == nil {
		return ""
	}
	if c.Text != "" {
		return c.Text
	}
	for _, x := range c.Coding {
		if x.Display != "" {
			return x.Display
		}
	}
	return ""
}

func noteText(n []fhirNote) string {
	if len(n) == 0 {
		return ""
	}
	return n[0].Text
}

// concepts reads a field that is one concept or a list of them.
func concepts(raw json.RawMessage) []fhirConcept {
	var many []fhirConcept
	if json.Unmarshal(raw, &many) == nil {
		return many
	}
	var one fhirConcept
	if json.Unmarshal(raw, &one) == nil {
		return []fhirConcept{one}
	}
	return nil
}

// DecodeFHIR reads a FHIR R4 Bundle as EncodeFHIR writes it. Resources and codes that are not
// of this project are left out; the warnings say which and how many. The error says what of
// the Bundle is wrong.
func DecodeFHIR(in io.Reader) (Records, []string, error) {
	data, err := io.ReadAll(io.LimitReader(in, maxRecords+1))
	if err != nil {
		return Records{}, nil, fmt.Errorf("reading the FHIR bundle: %w", err)
	}
	if len(data) > maxRecords {
		return Records{}, nil, errors.New("reading the FHIR bundle: the file is larger than 1 GiB; export fewer animals at once")
	}
	var b fhirBundle
	if err := json.Unmarshal(data, &b); err != nil {
		return Records{}, nil, fmt.Errorf("reading the FHIR bundle: %w", jsonPlace(data, err))
	}
	if b.ResourceType != "Bundle" {
		return Records{}, nil, fmt.Errorf("reading the FHIR bundle: the file holds %.40q; a Bundle is expected", b.ResourceType)
	}
	r := &fhirReader{animals: map[string]*Animal{}, visits: map[string]*exam.Visit{}, owner: map[string]string{}, odd: map[string]int{}}
	if b.Timestamp != "" {
		r.out.Made, _ = time.Parse(time.RFC3339Nano, b.Timestamp)
	}
	all := make([]fhirIn, 0, len(b.Entry))
	urls := make([]string, 0, len(b.Entry))
	for i, e := range b.Entry {
		var x fhirIn
		if err := json.Unmarshal(e.Resource, &x); err != nil {
			return Records{}, nil, fmt.Errorf("reading the FHIR bundle: entry %d: %w", i, jsonPlace(e.Resource, err))
		}
		all, urls = append(all, x), append(urls, e.FullURL)
	}
	for pass := range 3 { // animals, then visits, then what belongs to them
		for i := range all {
			if err := r.take(pass, urls[i], &all[i]); err != nil {
				return Records{}, nil, fmt.Errorf("reading the FHIR bundle: entry %d, %s: %w", i, all[i].ResourceType, err)
			}
		}
	}
	out, err := r.finish()
	if err != nil {
		return Records{}, nil, fmt.Errorf("reading the FHIR bundle: %w", err)
	}
	return out, r.warnings(), nil
}

type fhirReader struct {
	out     Records
	order   []string
	animals map[string]*Animal     // by reference
	visits  map[string]*exam.Visit // by reference
	owner   map[string]string      // of a visit: its animal
	seq     []string               // references of the visits in their order
	odd     map[string]int         // what was left out, and how often
}

func (r *fhirReader) leave(what string) { r.odd[what]++ }

func (r *fhirReader) warnings() []string {
	var out []string
	for what := range r.odd {
		out = append(out, what)
	}
	slices.Sort(out)
	for i, what := range out {
		out[i] = fmt.Sprintf("left out: %s (%d)", what, r.odd[what])
	}
	return out
}

// names returns the references under which a resource is known.
func names(url string, x *fhirIn) []string { return []string{url, x.ResourceType + "/" + x.ID} }

func (r *fhirReader) take(pass int, url string, x *fhirIn) error {
	switch x.ResourceType {
	case "Organization":
		if pass == 0 {
			var name string
			_ = json.Unmarshal(x.NameRaw, &name)
			r.out.Practice.Name = name
			for _, t := range x.Telecom {
				switch t.System {
				case "phone":
					r.out.Practice.Contact.Phone = t.Value
				case "email":
					r.out.Practice.Contact.Email = t.Value
				}
			}
		}
	case "Patient":
		if pass == 0 {
			return r.patient(url, x)
		}
	case "Encounter":
		if pass == 1 {
			return r.encounter(url, x)
		}
	case "Provenance", "DiagnosticReport": // what they say follows from the rest
	case "Condition", "Flag", "Goal", "MedicationStatement":
		if pass == 2 {
			a := r.animals[deref(x.Subject).Reference]
			if a == nil {
				r.leave(x.ResourceType + " of an animal that is not in the bundle")
				return nil
			}
			r.about(a, x)
		}
	case "Observation", "Procedure", "Media", "CarePlan":
		if pass == 2 {
			v := r.visits[deref(x.Encounter).Reference]
			if v == nil {
				r.leave(x.ResourceType + " of a visit that is not in the bundle")
				return nil
			}
			return r.during(v, x)
		}
	default:
		if pass == 2 {
			r.leave(x.ResourceType)
		}
	}
	return nil
}

func (r *fhirReader) patient(url string, x *fhirIn) error {
	id, err := exam.ParseID(x.ID)
	if err != nil {
		return err
	}
	p := exam.Patient{ID: id, Born: exam.Date(x.BirthDate), RecheckDays: x.ext("recheck-days").whole(), StatusSince: x.ext("status-since").date(), Note: x.ext("note").text()}
	var nm []fhirName
	if json.Unmarshal(x.NameRaw, &nm) == nil && len(nm) > 0 {
		p.Name = nm[0].Text
	}
	animal := x.ext("http://hl7.org/fhir/StructureDefinition/patient-animal")
	word := animal.sub("species").ValueCodeable.codeOf("species")
	if word == "" && animal.sub("species").ValueCodeable != nil {
		for _, c := range animal.sub("species").ValueCodeable.Coding {
			if c.Code == "canislf" {
				word = "dog"
			}
		}
	}
	if p.Species, err = exam.ParseSpecies(word); err != nil {
		return err
	}
	p.Breed = animal.sub("breed").ValueCodeable.words()
	if g := animal.sub("genderStatus").ValueCodeable; g != nil && len(g.Coding) > 0 {
		p.Neutered = g.Coding[0].Code == "neutered"
	}
	if p.Sex, err = exam.ParseSex(x.Gender); err != nil {
		p.Sex = exam.SexUnknown
	}
	if p.Status, err = exam.ParseStatus(x.ext("status").text()); err != nil {
		return err
	}
	if x.Deceased != nil && *x.Deceased {
		p.Status = exam.Died
	}
	ref := x.ext("referral")
	p.Referral = exam.Referral{By: ref.sub("by").text(), Until: ref.sub("until").date(), Limits: ref.sub("limits").text()}
	for _, c := range x.Contact {
		who := exam.Contact{Name: deref(c.Name).Text, Address: deref(c.Address).Text}
		for _, t := range c.Telecom {
			switch t.System {
			case "phone":
				who.Phone = t.Value
			case "email":
				who.Email = t.Value
			}
		}
		role := ""
		for _, k := range c.Relationship {
			role += k.codeOf("contact")
		}
		switch role {
		case "veterinarian":
			p.Veterinarian = who
		case "out-of-hours":
			p.OutOfHours = who
		default:
			p.Owner = who
		}
	}
	if x.Meta != nil {
		for _, t := range x.Meta.Tag {
			p.Demo = p.Demo || t.Code == "HTEST"
		}
	}
	a := &Animal{Patient: p}
	for _, n := range names(url, x) {
		r.animals[n] = a
	}
	r.order = append(r.order, names(url, x)[1])
	return nil
}

func (r *fhirReader) encounter(url string, x *fhirIn) error {
	subject := deref(x.Subject).Reference
	a := r.animals[subject]
	if a == nil {
		r.leave("Encounter of an animal that is not in the bundle")
		return nil
	}
	id, err := exam.ParseID(x.ID)
	if err != nil {
		return err
	}
	v := &exam.Visit{ID: id, Patient: a.Patient.ID, Zone: x.ext("zone").text(), Protocol: x.ext("protocol").text(), RepeatOf: x.ext("repeat-of").id(),
		Aid: x.ext("aid").text(), Surface: x.ext("surface").text(), Session: x.ext("session").text(), Note: x.ext("note").text(), NextVisit: x.ext("next-visit").date()}
	pd := deref(x.Period)
	if v.Examined, err = time.Parse(time.RFC3339Nano, pd.Start); err != nil {
		return &exam.Invalid{Field: "period.start", Value: pd.Start, Allowed: "a time such as 2026-03-02T10:15:00+01:00"}
	}
	if x.Status == "finished" {
		v.State = exam.Closed
		if pd.End != "" {
			if v.ClosedAt, err = time.Parse(time.RFC3339Nano, pd.End); err != nil {
				return &exam.Invalid{Field: "period.end", Value: pd.End, Allowed: "a time such as 2026-03-02T10:15:00+01:00"}
			}
		}
	}
	if v.Sedation, err = exam.ParseSedation(x.ext("sedation").text()); err != nil {
		return err
	}
	if len(x.Participant) > 0 {
		v.Examiner = deref(x.Participant[0].Individual).Display
	}
	rep := x.ext("report")
	v.Report = exam.OwnerReport{Falls: rep.sub("falls").text(), Urine: rep.sub("urine").text(), Appetite: rep.sub("appetite").text(),
		ExercisesDone: rep.sub("done").whole(), ExercisesSet: rep.sub("set").whole(), Words: rep.sub("words").text()}
	for _, e := range x.Extension {
		switch e.URL {
		case fhirBase + "dose":
			v.Doses = append(v.Doses, exam.DoseGiven{Medicine: e.sub("medicine").text(), Hours: e.sub("hours").number()})
		case fhirBase + "amendment":
			v.Amendments = append(v.Amendments, exam.Amendment{Field: e.sub("field").text(), Reason: e.sub("reason").text(), Examiner: e.sub("examiner").text(), At: e.sub("at").time()})
		case fhirBase + "answer":
			v.Answers = append(v.Answers, exam.Acknowledgement{Rule: e.sub("rule").text(), Told: e.sub("told").text(), Note: e.sub("note").text(), Examiner: e.sub("examiner").text(), At: e.sub("at").time()})
		}
	}
	for _, n := range names(url, x) {
		r.visits[n] = v
	}
	key := names(url, x)[1]
	r.owner[key] = "Patient/" + a.Patient.ID.String()
	r.seq = append(r.seq, key)
	return nil
}

func (r *fhirReader) about(a *Animal, x *fhirIn) {
	p := &a.Patient
	switch x.ResourceType {
	case "Condition":
		pr := exam.Problem{ID: x.ext("id").id(), Diagnosis: x.Code.words(), Side: x.ext("side").text(), Surgery: x.ext("surgery").date(), Onset: exam.Date(x.Onset), Resolved: exam.Date(x.Abatement), Note: noteText(x.Note)}
		if sites := concepts(x.BodySiteRaw); len(sites) > 0 {
			pr.Level = sites[0].words()
		}
		p.Problems = append(p.Problems, pr)
	case "Flag":
		c := x.Code.codeOf("precaution")
		if c == "" {
			r.leave("Flag that is no precaution of this program")
			return
		}
		pd := deref(x.Period)
		p.Precautions = append(p.Precautions, exam.PrecautionOn{ID: x.ext("id").id(), Code: c, Site: x.ext("site").text(), Since: exam.Date(pd.Start), Until: exam.Date(pd.End), Note: x.ext("note").text()})
	case "Goal":
		var words fhirConcept
		_ = json.Unmarshal(x.DescriptionRaw, &words)
		g := exam.Goal{ID: x.ext("id").id(), Words: words.words(), Site: x.ext("site").text(), Reached: exam.Date(x.StatusDate)}
		if len(x.GoalTarget) > 0 {
			t := x.GoalTarget[0]
			g.By, g.Measure, g.Item = exam.Date(t.Due), t.Measure.codeOf("measure"), t.Measure.codeOf("item")
			if t.Detail != nil {
				g.Target = deref(t.Detail.Value)
			}
		}
		p.Goals = append(p.Goals, g)
	case "MedicationStatement":
		pd := deref(x.EffectivePeriod)
		m := exam.Medicine{ID: x.ext("id").id(), Name: x.Medication.words(), Start: exam.Date(pd.Start), Stop: exam.Date(pd.End)}
		if len(x.Dosage) > 0 {
			m.Dose = x.Dosage[0].Text
		}
		p.Medicines = append(p.Medicines, m)
	}
}

func (r *fhirReader) during(v *exam.Visit, x *fhirIn) error {
	switch x.ResourceType {
	case "Observation":
		if item := x.Code.codeOf("item"); item != "" {
			return r.finding(v, x, item)
		}
		if m := x.Code.codeOf("measure"); m != "" {
			return r.measured(v, x, m)
		}
		if k := x.Code.codeOf("stimulation"); k != "" {
			v.Stim = append(v.Stim, exam.StimRecord{ID: x.ext("id").id(), Kind: k, Data: x.ValueText})
			return nil
		}
		r.leave("Observation that is no item or measure of this program")
	case "Media":
		m := deref(x.Content)
		if x.ext("format").text() == "" {
			r.leave("Media that is no photo or clip of this program")
			return nil
		}
		v.Attachments = append(v.Attachments, exam.Attachment{ID: x.ext("id").id(), Name: m.Title, Format: x.ext("format").text(), Size: m.Size, Note: noteText(x.Note)})
	case "Procedure":
		if k := x.Code.codeOf("stimulation"); k != "" {
			v.Stim = append(v.Stim, exam.StimRecord{ID: x.ext("id").id(), Kind: k, Data: x.ext("data").text()})
			return nil
		}
		t := exam.Treatment{ID: x.ext("id").id(), Kind: x.Code.codeOf("treatment"), Params: x.ext("params").text(), Minutes: x.ext("minutes").number(), Override: x.ext("override").text()}
		if t.Kind == "" {
			r.leave("Procedure that is no treatment of this program")
			return nil
		}
		if sites := concepts(x.BodySiteRaw); len(sites) > 0 {
			t.Site = sites[0].codeOf("site")
		}
		v.Treatments = append(v.Treatments, t)
	case "CarePlan":
		for _, a := range x.Activity {
			if a.Detail == nil {
				continue
			}
			d := a.Detail
			e := func(name string) fhirExt { return extOf(d.Extension, name) }
			v.Home = append(v.Home, exam.HomeExercise{ID: e("id").id(), Kind: d.Code.codeOf("exercise"), How: d.Description, Times: e("times").whole(), DaysWeek: e("days").whole(),
				Amount: e("amount").text(), StopFor: e("stop").text(), Override: e("override").text()})
		}
	}
	return nil
}

func (r *fhirReader) finding(v *exam.Visit, x *fhirIn, item string) error {
	j := findingJSON{Item: item, Digit: x.ext("digit").text(), Joint: x.ext("joint").text(), Side: x.ext("side").text(), Level: x.ext("level").text(),
		How: x.ext("how").text(), Seen: deref(x.ext("seen").ValueBoolean), Block: x.ext("block").text(), Note: noteText(x.Note)}
	if sites := concepts(x.BodySiteRaw); len(sites) > 0 {
		j.Site = sites[0].codeOf("site")
	}
	if x.ValueConcept != nil {
		n, err := strconv.ParseInt(x.ValueConcept.codeOf("grade/"+item), 10, 8)
		if err != nil {
			return &exam.Invalid{Field: "grade of " + item, Value: x.ValueConcept.codeOf("grade/" + item), Allowed: "a whole number"}
		}
		g := int8(n)
		j.Grade = &g
	} else {
		why := strings.ReplaceAll(x.Absent.codeOf("not-tested"), "-", " ")
		j.NotTested = &why
	}
	p := &place{path: []string{item}}
	f := findingIn(p, j)
	v.Findings = append(v.Findings, f)
	return p.err
}

func (r *fhirReader) measured(v *exam.Visit, x *fhirIn, measure string) error {
	j := measuredJSON{Measure: measure, Joint: x.ext("joint").text(), Motion: x.ext("motion").text(), At: x.ext("at").number(), Position: x.ext("position").text(),
		Clipped: deref(x.ext("clipped").ValueBoolean), EndFeel: x.ext("end-feel").text(), Variant: x.ext("variant").text(), BestEnd: x.ext("best-end").number(), Note: noteText(x.Note)}
	if sites := concepts(x.BodySiteRaw); len(sites) > 0 {
		j.Site = sites[0].codeOf("site")
	}
	if x.ValueQuantity == nil || x.ValueQuantity.Value == nil {
		return &exam.Invalid{Field: "value of " + measure, Value: "", Allowed: "a quantity"}
	}
	j.Value = *x.ValueQuantity.Value
	p := &place{path: []string{measure}}
	m := measuredIn(p, j)
	if p.err == nil && x.ValueQuantity.Code != UCUM(m.Measure) {
		return &exam.Invalid{Field: "unit of " + measure, Value: x.ValueQuantity.Code, Allowed: "the UCUM code " + UCUM(m.Measure)}
	}
	v.Measures = append(v.Measures, m)
	return p.err
}

// finish puts the visits to their animals, oldest first, and checks everything.
func (r *fhirReader) finish() (Records, error) {
	for _, key := range r.seq {
		a, v := r.animals[r.owner[key]], r.visits[key]
		if a == nil {
			continue
		}
		if err := v.Validate(a.Patient.Species); err != nil {
			return Records{}, fmt.Errorf("visit %s: %w", v.ID, err)
		}
		a.Visits = append(a.Visits, *v)
	}
	for _, key := range r.order {
		a := r.animals[key]
		if err := a.Patient.Validate(); err != nil {
			return Records{}, fmt.Errorf("patient %s: %w", a.Patient.ID, err)
		}
		slices.SortStableFunc(a.Visits, func(x, y exam.Visit) int { return x.Examined.Compare(y.Examined) })
		r.out.Animals = append(r.out.Animals, *a)
	}
	return r.out, nil
}

// SheetTitle is the title of a paper in a bundle.
func SheetTitle(lang string) string { return words.In(lang, "Progress sheet") }
