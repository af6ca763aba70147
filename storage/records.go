package storage

import (
	"bytes"
	"fmt"
	"slices"
	"strings"
	"time"

	"github.com/google/uuid"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
)

// Kind tells what sort of record an edit belongs to.
type Kind = change.Kind

// The kinds of record that this package reads and writes; package change lists all.
const (
	KindPractice = change.KindPractice
	KindPatient  = change.KindPatient
	KindVisit    = change.KindVisit
	KindEdge     = change.KindEdge
)

// Edit sets one field of one record, or clears it (nil Value).
type Edit struct {
	Patient exam.ID // zero for the practice
	Record  exam.ID // the patient's own id, the visit's id, zero for the practice
	Kind    Kind
	Field   string // see the table of fields below
	Value   []byte // as one of the constructors encodes it

	act    change.Act
	reason string
}

// The fields of the records. List items have a field each, named by their id, so that two
// people who add an item at the same time do not collide.
//
//	practice  name contact out-of-hours zone language paper pounds inches demo examiner/ID protocol/KEY
//	          phrase/LANGUAGE/KEY logo
//	patient   name species breed sex neutered born owner veterinarian out-of-hours referral status
//	          recheck-days note demo problem/ID precaution/ID goal/ID medicine/ID sent/ID
//	visit     examined examiner protocol closed repeat-of sedation aid surface session doses report
//	          note next-visit finding/CELL measure/CELL treatment/ID home/ID answer/RULE/TIME
//	          attachment/ID stim/ID
//	edge      same-as/ID of the other patient, see merge.EdgeKey
const (
	fieldFinding    = "finding/"
	fieldMeasure    = "measure/"
	fieldTreatment  = "treatment/"
	fieldHome       = "home/"
	fieldAnswer     = "answer/"
	fieldAttachment = "attachment/"
	fieldStim       = "stim/"
	fieldProblem    = "problem/"
	fieldPrecaution = "precaution/"
	fieldGoal       = "goal/"
	fieldMedicine   = "medicine/"
	fieldExaminer   = "examiner/"
	fieldProtocol   = "protocol/"
	fieldPhrase     = "phrase/"
	fieldLogo       = "logo"
	fieldSent       = "sent/"
	fieldClosed     = change.FieldClosed
	fieldOwner      = "owner"
)

// NewID makes an id for a new patient, visit or list item: a UUID of version 7.
func NewID() exam.ID { return exam.ID(uuid.Must(uuid.NewV7())) }

// differ collects the edits that lead from one record to another.
type differ struct {
	patient, record exam.ID
	kind            Kind
	edits           []Edit
}

func (d *differ) set(field string, value []byte) {
	d.edits = append(d.edits, Edit{Patient: d.patient, Record: d.record, Kind: d.kind, Field: field, Value: value})
}

// word adds an edit where a text changed; the empty text clears the field.
func (d *differ) word(field, before, after string) {
	if before != after {
		d.set(field, encodeText(after))
	}
}

func (d *differ) flag(field string, before, after bool) {
	if before != after {
		d.set(field, encodeFlag(after))
	}
}

// single adds an edit where a comparable value changed; its zero value clears the field.
func single[T comparable](d *differ, field string, before, after T) {
	if before == after {
		return
	}
	var zero T
	if after == zero {
		d.set(field, nil)
		return
	}
	d.set(field, encodeValue(after))
}

// items adds an edit for each list item that is new, changed or gone. name gives the
// item's field without prefix; an item without an id gets one.
func items[T comparable](d *differ, prefix string, before, after []T, name func(*T) string) {
	had := make(map[string]T, len(before))
	for _, x := range before {
		had[name(&x)] = x
	}
	for _, x := range after {
		n := name(&x)
		if old, ok := had[n]; !ok || old != x {
			d.set(prefix+n, encodeValue(x))
		}
		delete(had, n)
	}
	gone := make([]string, 0, len(had))
	for n := range had {
		gone = append(gone, n)
	}
	slices.Sort(gone)
	for _, n := range gone {
		d.set(prefix+n, nil)
	}
}

func itemID(id *exam.ID) string {
	if id.IsZero() {
		*id = NewID()
	}
	return id.String()
}

// PatientEdits returns the edits that lead from before to after, which must have the
// patient's id. For a new patient before is the zero Patient. Weights are not stored:
// they come from the visits' measures. List items without an id are given one.
func PatientEdits(before, after exam.Patient) []Edit {
	d := &differ{patient: after.ID, record: after.ID, kind: KindPatient}
	d.word("name", before.Name, after.Name)
	if before.Species != after.Species {
		d.set("species", encodeText(speciesWord(after.Species)))
	}
	d.word("breed", before.Breed, after.Breed)
	d.word("sex", sexWord(before.Sex), sexWord(after.Sex))
	d.flag("neutered", before.Neutered, after.Neutered)
	d.word("born", string(before.Born), string(after.Born))
	single(d, fieldOwner, before.Owner, after.Owner)
	single(d, "veterinarian", before.Veterinarian, after.Veterinarian)
	single(d, "out-of-hours", before.OutOfHours, after.OutOfHours)
	single(d, "referral", before.Referral, after.Referral)
	single(d, "status", statusOf(before), statusOf(after))
	if before.RecheckDays != after.RecheckDays {
		d.set("recheck-days", encodeNumber(int64(after.RecheckDays)))
	}
	items(d, fieldProblem, before.Problems, after.Problems, func(x *exam.Problem) string { return itemID(&x.ID) })
	items(d, fieldPrecaution, before.Precautions, after.Precautions, func(x *exam.PrecautionOn) string { return itemID(&x.ID) })
	items(d, fieldGoal, before.Goals, after.Goals, func(x *exam.Goal) string { return itemID(&x.ID) })
	items(d, fieldMedicine, before.Medicines, after.Medicines, func(x *exam.Medicine) string { return itemID(&x.ID) })
	d.sent(before.Sent, after.Sent)
	d.word("note", before.Note, after.Note)
	d.flag("demo", before.Demo, after.Demo)
	return d.edits
}

// sent papers are never taken back: each is a field of its own. They stand in the patient's
// record, not in the visit's, so that a closed visit stays as it was closed.
func (d *differ) sent(before, after []exam.Sent) {
	had := make(map[exam.ID]bool, len(before))
	for _, x := range before {
		had[x.ID] = true
	}
	for i := range after {
		x := &after[i]
		if name := itemID(&x.ID); !had[x.ID] {
			d.set(fieldSent+name, encodeSent(*x))
		}
	}
}

// VisitEdits returns the edits that lead from before to after, which must have the visit's
// and the patient's id. For a new visit before is the zero Visit. Going from open to closed
// closes the visit. Amendments are not taken from here: see AmendEdits.
func VisitEdits(before, after exam.Visit) []Edit {
	d := &differ{patient: after.Patient, record: after.ID, kind: KindVisit}
	if !before.Examined.Equal(after.Examined) || offset(before.Examined) != offset(after.Examined) || before.Zone != after.Zone {
		d.set("examined", encodeExamined(after.Examined, after.Zone))
	}
	d.word("examiner", before.Examiner, after.Examiner)
	d.word("protocol", before.Protocol, after.Protocol)
	if before.RepeatOf != after.RepeatOf {
		if after.RepeatOf.IsZero() {
			d.set("repeat-of", nil)
		} else {
			d.set("repeat-of", encodeText(after.RepeatOf.String()))
		}
	}
	d.word("sedation", sedationWord(before.Sedation), sedationWord(after.Sedation))
	d.word("aid", before.Aid, after.Aid)
	d.word("surface", before.Surface, after.Surface)
	d.word("session", before.Session, after.Session)
	if !slices.Equal(before.Doses, after.Doses) {
		if len(after.Doses) == 0 {
			d.set("doses", nil)
		} else {
			d.set("doses", encodeValue(after.Doses))
		}
	}
	d.findings(before.Findings, after.Findings)
	d.measures(before.Measures, after.Measures)
	items(d, fieldTreatment, before.Treatments, after.Treatments, func(x *exam.Treatment) string { return itemID(&x.ID) })
	items(d, fieldHome, before.Home, after.Home, func(x *exam.HomeExercise) string { return itemID(&x.ID) })
	items(d, fieldAttachment, before.Attachments, after.Attachments, func(x *exam.Attachment) string { return itemID(&x.ID) })
	items(d, fieldStim, before.Stim, after.Stim, func(x *exam.StimRecord) string { return itemID(&x.ID) })
	single(d, "report", before.Report, after.Report)
	d.word("note", before.Note, after.Note)
	d.word("next-visit", string(before.NextVisit), string(after.NextVisit))
	d.answers(before.Answers, after.Answers)
	if before.State == exam.Open && after.State == exam.Closed {
		d.set(fieldClosed, encodeClosed(after.ClosedAt))
	}
	return d.edits
}

func (d *differ) findings(before, after []exam.Finding) {
	had := make(map[exam.Key]exam.Finding, len(before))
	for _, f := range before {
		had[f.Key()] = f
	}
	for _, f := range after {
		if old, ok := had[f.Key()]; !ok || old != f {
			d.edits = append(d.edits, FindingEdit(d.patient, d.record, f))
		}
		delete(had, f.Key())
	}
	for _, f := range before {
		if _, gone := had[f.Key()]; gone {
			d.edits = append(d.edits, ClearFindingEdit(d.patient, d.record, f.Key()))
		}
	}
}

func (d *differ) measures(before, after []exam.Measured) {
	had := make(map[string]exam.Measured, len(before))
	for _, m := range before {
		had[m.Key()] = m
	}
	for _, m := range after {
		if old, ok := had[m.Key()]; !ok || old != m {
			d.edits = append(d.edits, MeasureEdit(d.patient, d.record, m))
		}
		delete(had, m.Key())
	}
	for _, m := range before {
		if _, gone := had[m.Key()]; gone {
			d.set(fieldMeasure+m.Key(), nil)
		}
	}
}

// answers are never taken back: each answer given to an alert is a field of its own.
func (d *differ) answers(before, after []exam.Acknowledgement) {
	had := make(map[string]bool, len(before))
	for _, a := range before {
		had[answerField(a)] = true
	}
	for _, a := range after {
		if f := answerField(a); !had[f] {
			d.set(f, encodeAnswer(a))
		}
	}
}

func answerField(a exam.Acknowledgement) string {
	return fieldAnswer + a.Rule + "/" + a.At.UTC().Format("20060102t150405.000")
}

// PracticeEdits returns the edits that lead from before to after.
func PracticeEdits(before, after exam.Practice) []Edit {
	d := &differ{kind: KindPractice}
	d.word("name", before.Name, after.Name)
	single(d, "contact", before.Contact, after.Contact)
	single(d, "out-of-hours", before.OutOfHours, after.OutOfHours)
	d.word("zone", before.Zone, after.Zone)
	d.word("language", before.Language, after.Language)
	d.word("paper", before.Paper, after.Paper)
	d.flag("pounds", before.Pounds, after.Pounds)
	d.flag("inches", before.Inches, after.Inches)
	items(d, fieldExaminer, before.Examiners, after.Examiners, func(x *exam.Examiner) string { return itemID(&x.ID) })
	had := make(map[string]exam.Protocol, len(before.Protocols))
	for _, p := range before.Protocols {
		had[p.Key] = p
	}
	for _, p := range after.Protocols {
		old, ok := had[p.Key]
		if !ok || old.Name != p.Name || !slices.Equal(old.Items, p.Items) {
			d.set(fieldProtocol+p.Key, encodeValue(p))
		}
		delete(had, p.Key)
	}
	for _, p := range before.Protocols {
		if _, gone := had[p.Key]; gone {
			d.set(fieldProtocol+p.Key, nil)
		}
	}
	d.phrases(before.Phrases, after.Phrases)
	if !bytes.Equal(before.Logo, after.Logo) {
		d.set(fieldLogo, encodeRaw(after.Logo))
	}
	d.flag("demo", before.Demo, after.Demo)
	return d.edits
}

func (d *differ) phrases(before, after []exam.Phrase) {
	had := make(map[string]string, len(before))
	for _, x := range before {
		had[phraseField(x)] = x.Words
	}
	for _, x := range after {
		d.word(phraseField(x), had[phraseField(x)], x.Words)
		delete(had, phraseField(x))
	}
	for _, x := range before {
		if _, gone := had[phraseField(x)]; gone {
			d.set(phraseField(x), nil)
			delete(had, phraseField(x))
		}
	}
}

func phraseField(x exam.Phrase) string { return fieldPhrase + x.Language + "/" + x.Key }

// FindingEdit sets one cell of a visit.
func FindingEdit(patient, visit exam.ID, f exam.Finding) Edit {
	return Edit{Patient: patient, Record: visit, Kind: KindVisit, Field: fieldFinding + f.Key().String(), Value: encodeFinding(f)}
}

// ClearFindingEdit empties one cell of a visit.
func ClearFindingEdit(patient, visit exam.ID, k exam.Key) Edit {
	return Edit{Patient: patient, Record: visit, Kind: KindVisit, Field: fieldFinding + k.String()}
}

// MeasureEdit sets one measured value of a visit.
func MeasureEdit(patient, visit exam.ID, m exam.Measured) Edit {
	return Edit{Patient: patient, Record: visit, Kind: KindVisit, Field: fieldMeasure + m.Key(), Value: encodeMeasure(m)}
}

// CloseEdit closes a visit at a time. After that only amendments are taken.
func CloseEdit(patient, visit exam.ID, at time.Time) Edit {
	return Edit{Patient: patient, Record: visit, Kind: KindVisit, Field: fieldClosed, Value: encodeClosed(at)}
}

// AmendEdits makes edits of a closed visit into amendments with a reason, which must not be empty.
func AmendEdits(visit exam.Visit, reason string, edits ...Edit) []Edit {
	out := slices.Clone(edits)
	for i := range out {
		if out[i].Record == visit.ID {
			out[i].act, out[i].reason = change.Amend, strings.TrimSpace(reason)
		}
	}
	return out
}

// UndoEdits marks edits as taking an entry back, for the history. Undo stops at the close.
func UndoEdits(edits ...Edit) []Edit {
	out := slices.Clone(edits)
	for i := range out {
		out[i].act = change.Undo
	}
	return out
}

// JoinEdit says that two patients are one animal. Both records stay as they are; the animal
// is shown under the smaller id. PartEdit takes it back.
func JoinEdit(a, b exam.ID) []Edit { return edgeEdits(a, b, encodeFlag(true)) }

// PartEdit takes back that two patients are one animal.
func PartEdit(a, b exam.ID) []Edit { return edgeEdits(a, b, nil) }

// check refuses edits that could not be read back.
func (e Edit) check() error {
	switch {
	case e.Field == "" || len(e.Field) > change.MaxField:
		return fmt.Errorf("a field name has %d bytes; allowed are 1 to %d", len(e.Field), change.MaxField)
	case len(e.Value) > change.MaxValue:
		return fmt.Errorf("the value of %s has %d bytes; allowed are %d", e.Field, len(e.Value), change.MaxValue)
	case e.Kind == KindPractice && (!e.Record.IsZero() || !e.Patient.IsZero()):
		return fmt.Errorf("field %s of the practice names a patient; it must not", e.Field)
	case e.Kind != KindPractice && (e.Record.IsZero() || e.Patient.IsZero()) && e.Kind <= KindEdge:
		return fmt.Errorf("field %s names no patient or no record; give the record an id first", e.Field)
	case e.act.AfterClosing() && e.reason == "":
		return fmt.Errorf("an amendment of %s needs a reason", e.Field)
	}
	return nil
}
