package storage

import (
	"bytes"
	"cmp"
	"context"
	"errors"
	"fmt"
	"slices"
	"strings"
	"time"

	"go.etcd.io/bbolt"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/merge"
)

// Record is a patient with all that is known of it.
type Record struct {
	Patient   exam.Patient
	Visits    []exam.Visit // by the time they were examined
	Joined    []exam.ID    // the patients that this animal is put together from, if several; the first one is shown
	Conflicts []Conflict
	Missing   []Gap    // entries that may be missing
	Unshown   []string // fields written by a newer version of this program: kept, not shown
}

// Conflict is a field with several values that nobody has chosen between, or with values that
// arrived after the visit was closed. The patient and the visit show the newest value that counts.
type Conflict struct {
	Patient exam.ID
	Record  exam.ID
	Kind    Kind
	Field   string
	Values  []Value
}

// Value is one of several values of a field.
type Value struct {
	ID       change.ID
	Words    string // for people, in English
	Raw      []byte // as an Edit holds it
	Examiner string
	Device   string
	At       time.Time
	Late     bool // arrived after closing: does not count until it is accepted
	Doubtful bool // an entry is missing that may have replaced it: does not count until it is confirmed
}

// view is one patient's records at one moment.
type view struct {
	records []*record
	plain   [][]byte   // encoded visits that nobody has looked into yet
	gaps    []timedGap // of all streams; hardly ever any
}

// unfold decodes what is still encoded.
func (v *view) unfold() error {
	for _, b := range v.plain {
		r, err := decodeRecord(b)
		if err != nil {
			return err
		}
		v.records = append(v.records, r)
	}
	v.plain = nil
	return nil
}

// patientView reads all records of one patient, index and overlay merged.
func (s *Store) patientView(id exam.ID) (v view, err error) {
	var over map[recordKey]*record
	read := func() error {
		s.mu.RLock()
		x, shut := s.idx, s.shut
		if shut {
			s.mu.RUnlock()
			return ErrShut
		}
		over = make(map[recordKey]*record, len(s.overlay[id]))
		for k, r := range s.overlay[id] {
			over[k] = r
		}
		v = view{gaps: s.state.gaps(s.id.lives())}
		var tx *bbolt.Tx
		err := guard(func() (err error) { tx, err = x.db.Begin(false); return err })
		s.mu.RUnlock() // the snapshot is taken while nothing can move from overlay to index
		if err != nil {
			return err
		}
		defer func() { _ = guard(tx.Rollback) }()
		return guard(func() error {
			_, err = x.records(tx, id, func(name, plain []byte) error {
				k, err := peekKey(plain)
				if err != nil {
					return fmt.Errorf("%w: %w", errIndex, err)
				}
				if over[k] == nil { // the overlay's is newer
					v.plain = append(v.plain, plain)
				}
				return nil
			})
			return err
		})
	}
	if err = s.repairing(read); err != nil {
		return v, err
	}
	for _, r := range over {
		v.records = append(v.records, r)
	}
	return v, nil
}

// wholeView is patientView with all records decoded.
func (s *Store) wholeView(id exam.ID) (view, error) {
	v, err := s.patientView(id)
	if err == nil {
		err = v.unfold()
	}
	return v, err
}

// repairing runs a read and, where the index turns out to be damaged, builds it anew and runs
// it once more.
func (s *Store) repairing(read func() error) error {
	s.mu.RLock()
	seen := s.idx
	s.mu.RUnlock()
	err := read()
	if !errors.Is(err, errIndex) {
		return err
	}
	if err := s.repair(seen, err); err != nil {
		return err
	}
	return read()
}

// repair sets a damaged index aside and builds it anew from the journal, unless somebody else
// did so since it was seen.
func (s *Store) repair(seen *index, why error) error {
	s.write.Lock()
	defer s.write.Unlock()
	return s.repairWriting(seen, why)
}

// repairWriting is repair for those who hold write.
func (s *Store) repairWriting(seen *index, why error) error {
	s.follow.Lock()
	defer s.follow.Unlock()
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.idx != seen || s.shut {
		return nil
	}
	s.o.Notice("the index is damaged; it is set aside and built anew from the journal (" + why.Error() + ")")
	s.idx.abandon()
	return s.rebuildIndex(context.Background(), true)
}

// Patient returns a patient, put together with those it is joined to, and all visits.
func (s *Store) Patient(id exam.ID) (Record, error) {
	s.mu.RLock()
	members := []exam.ID{id}
	comps := merge.Components(s.state.Edges)
	if root, ok := comps[id]; ok {
		members = merge.Members(comps)[root]
	}
	s.mu.RUnlock()
	var out Record
	found := false
	for _, m := range members {
		v, err := s.patientView(m)
		if err != nil {
			return Record{}, explain("reading patient "+id.String(), err)
		}
		one, ok, err := s.assemble(m, v)
		if err != nil {
			return Record{}, explain("reading patient "+id.String(), err)
		}
		if !ok {
			continue
		}
		if !found {
			out, found = one, true
			if len(members) > 1 {
				out.Joined = members
			}
			continue
		}
		out.Visits = append(out.Visits, one.Visits...)
		out.Conflicts = append(out.Conflicts, one.Conflicts...)
		out.Missing = append(out.Missing, one.Missing...)
		out.Unshown = append(out.Unshown, one.Unshown...)
	}
	if !found {
		return Record{}, fmt.Errorf("patient %s: %w", id, ErrNotFound)
	}
	sortVisits(out.Visits)
	out.Patient.Weights = weights(out.Visits)
	return out, nil
}

func sortVisits(vs []exam.Visit) {
	slices.SortFunc(vs, func(a, b exam.Visit) int {
		if c := a.Examined.Compare(b.Examined); c != 0 {
			return c
		}
		return bytes.Compare(a.ID[:], b.ID[:])
	})
}

func weights(vs []exam.Visit) []exam.WeightPoint {
	var out []exam.WeightPoint
	for _, v := range vs {
		if m, ok := v.Measured(exam.Weight, exam.NoSite); ok {
			out = append(out, exam.WeightPoint{At: v.Examined, Kg: m.Value})
		}
	}
	return out
}

// assemble makes a Record from a patient's records; false if there is no patient among them.
func (s *Store) assemble(id exam.ID, v view) (Record, bool, error) {
	var out Record
	found := false
	a := assembler{store: s}
	if len(v.gaps) > 0 {
		if err := v.unfold(); err != nil {
			return out, false, err
		}
	}
	for _, g := range v.gaps {
		if g.touches(v.records) {
			a.gaps = append(a.gaps, g)
		}
	}
	out.Visits = make([]exam.Visit, 0, len(v.plain)+len(v.records))
	take := func(r *record) {
		switch r.kind {
		case KindPatient:
			out.Patient, found = a.patientOf(r), true
		case KindVisit:
			out.Visits = append(out.Visits, a.visitOf(r))
		}
	}
	for _, b := range v.plain {
		visit, ok, err := a.quickVisit(b)
		if err != nil {
			return out, false, err
		}
		if ok {
			out.Visits = append(out.Visits, visit)
			continue
		}
		r, err := decodeRecord(b)
		if err != nil {
			return out, false, err
		}
		take(r)
	}
	for _, r := range v.records {
		take(r)
	}
	sortVisits(out.Visits)
	out.Patient.Weights = weights(out.Visits)
	for _, g := range a.gaps {
		out.Missing = append(out.Missing, Gap{Device: s.deviceWord(g.Stream), First: g.First, Last: g.Last, Patient: id})
	}
	out.Conflicts, out.Unshown = a.conflicts, a.unshown
	slices.SortFunc(out.Conflicts, func(x, y Conflict) int {
		return cmp.Or(bytes.Compare(x.Record[:], y.Record[:]), strings.Compare(x.Field, y.Field))
	})
	return out, found, nil
}

// deviceWord names the device of a stream for people.
func (s *Store) deviceWord(st change.Stream) string {
	inc := st.Device.String()
	if inc == s.id.Incarnation || slices.Contains(s.id.Earlier, inc) {
		return s.id.Device
	}
	return "device " + inc[:8]
}

// Visit returns one visit.
func (s *Store) Visit(id exam.ID) (exam.Visit, error) {
	patient, err := s.patientOfVisit(id)
	if err != nil {
		return exam.Visit{}, err
	}
	v, err := s.wholeView(patient)
	if err != nil {
		return exam.Visit{}, explain("reading visit "+id.String(), err)
	}
	a := assembler{store: s}
	for _, g := range v.gaps {
		if g.touches(v.records) {
			a.gaps = append(a.gaps, g)
		}
	}
	for _, r := range v.records {
		if r.kind == KindVisit && r.id == id {
			return a.visitOf(r), nil
		}
	}
	return exam.Visit{}, fmt.Errorf("visit %s: %w", id, ErrNotFound)
}

// Practice returns what holds for every patient of this store.
func (s *Store) Practice() (exam.Practice, error) {
	r, err := s.baseRecord(recordKey{kind: KindPractice})
	if err != nil {
		return exam.Practice{}, explain("reading the practice", err)
	}
	a := assembler{store: s}
	return a.practiceOf(r), nil
}

// assembler turns records into the structs of package exam and collects what does not fit in.
type assembler struct {
	store     *Store
	gaps      []timedGap // that may have touched the patient
	conflicts []Conflict
	unshown   []string
}

// openDuring returns the gaps that a visit was open during. What is lost there may have replaced
// a finding or a measure of it.
func (a *assembler) openDuring(r *record) []timedGap {
	if len(a.gaps) == 0 || r.kind != KindVisit {
		return nil
	}
	closed := endOfTime
	for _, v := range r.versions(fieldClosed) {
		if !v.Cleared() {
			closed = min(closed, v.Time)
		}
	}
	return slices.DeleteFunc(slices.Clone(a.gaps), func(g timedGap) bool { return closed < g.from })
}

// doubtful reports whether a value may have been replaced by one that is lost.
func doubtful(name string, v change.Change, gaps []timedGap) bool {
	if !strings.HasPrefix(name, fieldFinding) && !strings.HasPrefix(name, fieldMeasure) {
		return false
	}
	for _, g := range gaps {
		if v.Time < g.to {
			return true
		}
	}
	return false
}

// each calls f with every field that has a value that counts, the newest where several do.
func (a *assembler) each(r *record, f func(name string, v change.Change) error) {
	closing := r.closing()
	gaps := a.openDuring(r)
	for _, fd := range r.fields {
		c := closing
		if fd.name == fieldClosed {
			c = merge.Closing{}
		}
		st := merge.Evaluate(fd.versions, c)
		doubt := len(gaps) > 0 && slices.ContainsFunc(st.Current, func(v change.Change) bool { return doubtful(fd.name, v, gaps) })
		if st.Conflict() || len(st.Late) > 0 || doubt {
			a.conflict(r, fd.name, st, gaps)
		}
		if doubt {
			continue
		}
		for i := len(st.Current) - 1; i >= 0; i-- {
			v := st.Current[i]
			if v.Cleared() {
				if st.Conflict() {
					continue // another value stands against the clearing: show it
				}
				break
			}
			if err := f(fd.name, v); err != nil {
				a.unshown = append(a.unshown, fmt.Sprintf("%s: %s", fd.name, err))
			}
			break
		}
	}
}

func (a *assembler) conflict(r *record, name string, st merge.Field, gaps []timedGap) {
	c := Conflict{Patient: r.patient, Record: r.id, Kind: r.kind, Field: name}
	add := func(v change.Change, late bool) {
		c.Values = append(c.Values, Value{ID: v.ID, Words: a.store.words(r.kind, name, v), Raw: v.Value, Examiner: v.Examiner,
			Device: a.store.deviceWord(v.Stream), At: v.Time.Time(), Late: late, Doubtful: !late && doubtful(name, v, gaps)})
	}
	for _, v := range st.Current {
		add(v, false)
	}
	for _, v := range st.Late {
		add(v, true)
	}
	a.conflicts = append(a.conflicts, c)
}

func (a *assembler) patientOf(r *record) exam.Patient {
	p := exam.Patient{ID: r.id}
	a.each(r, func(name string, v change.Change) error { return a.store.setPatient(&p, name, v.Value) })
	slices.SortStableFunc(p.Sent, func(x, y exam.Sent) int { return x.At.Compare(y.At) })
	return p
}

func setText(to *string) func([]byte) error {
	return func(b []byte) (err error) { *to, err = decodeText(b); return err }
}

func setDate(to *exam.Date) func([]byte) error {
	return func(b []byte) error {
		t, err := decodeText(b)
		*to = exam.Date(t)
		return err
	}
}

func setFlag(to *bool) func([]byte) error {
	return func(b []byte) (err error) { *to, err = decodeFlag(b); return err }
}

func setContact(to *exam.Contact) func([]byte) error {
	return func(b []byte) error {
		var w wireContact
		err := unpack(b, &w)
		*to = exam.Contact(w)
		return err
	}
}

// setPatient reads one field of a patient.
func (s *Store) setPatient(p *exam.Patient, name string, b []byte) error {
	prefix, rest, item := strings.Cut(name, "/")
	if item {
		id, err := exam.ParseID(rest)
		if err != nil {
			return err
		}
		switch prefix + "/" {
		case fieldProblem:
			var w wireProblem
			if err := unpack(b, &w); err != nil {
				return err
			}
			p.Problems = append(p.Problems, exam.Problem{ID: id, Diagnosis: w.Diagnosis, Level: w.Level, Side: w.Side, Onset: w.Onset, Surgery: w.Surgery, Resolved: w.Resolved, Note: w.Note})
			return nil
		case fieldPrecaution:
			var w wirePrecaution
			if err := unpack(b, &w); err != nil {
				return err
			}
			p.Precautions = append(p.Precautions, exam.PrecautionOn{ID: id, Code: w.Code, Site: w.Site, Since: w.Since, Until: w.Until, Note: w.Note})
			return nil
		case fieldGoal:
			var w wireGoal
			if err := unpack(b, &w); err != nil {
				return err
			}
			p.Goals = append(p.Goals, exam.Goal{ID: id, Words: w.Words, Measure: w.Measure, Item: w.Item, Site: w.Site, Target: w.Target, By: w.By, Reached: w.Reached})
			return nil
		case fieldMedicine:
			var w wireMedicine
			if err := unpack(b, &w); err != nil {
				return err
			}
			p.Medicines = append(p.Medicines, exam.Medicine{ID: id, Name: w.Name, Dose: w.Dose, Start: w.Start, Stop: w.Stop})
			return nil
		case fieldSent:
			x, err := decodeSent(id, b)
			if err == nil {
				p.Sent = append(p.Sent, x)
			}
			return err
		}
		return errUnknownField
	}
	var word string
	var err error
	switch name {
	case "name":
		return setText(&p.Name)(b)
	case "species":
		if word, err = decodeText(b); err == nil {
			p.Species, err = exam.ParseSpecies(word)
		}
	case "breed":
		return setText(&p.Breed)(b)
	case "sex":
		if word, err = decodeText(b); err == nil {
			p.Sex, err = exam.ParseSex(word)
		}
	case "neutered":
		return setFlag(&p.Neutered)(b)
	case "born":
		return setDate(&p.Born)(b)
	case fieldOwner:
		if b, err = s.seals.owners.openContact(b); errors.Is(err, ErrErased) {
			return nil // the entry that erased it says so
		} else if err != nil {
			return err
		}
		return setContact(&p.Owner)(b)
	case "veterinarian":
		return setContact(&p.Veterinarian)(b)
	case "out-of-hours":
		return setContact(&p.OutOfHours)(b)
	case "referral":
		var w wireReferral
		err = unpack(b, &w)
		p.Referral = exam.Referral(w)
	case "status":
		var w wireStatus
		if err = unpack(b, &w); err == nil {
			p.StatusSince = w.Since
			p.Status, err = exam.ParseStatus(w.Status)
		}
	case "recheck-days":
		var n int64
		n, err = decodeNumber(b)
		p.RecheckDays = int(n)
	case "note":
		return setText(&p.Note)(b)
	case "demo":
		return setFlag(&p.Demo)(b)
	default:
		return errUnknownField
	}
	return err
}

var errUnknownField = errors.New("written by a newer version of this program")

func (a *assembler) visitOf(r *record) exam.Visit {
	v := exam.Visit{ID: r.id, Patient: r.patient}
	a.each(r, func(name string, c change.Change) error { return setVisit(&v, name, c.Value) })
	for _, f := range r.fields {
		for _, c := range f.versions {
			if c.Act.AfterClosing() {
				v.Amendments = append(v.Amendments, exam.Amendment{Field: f.name, Reason: c.Reason, Examiner: c.Examiner, At: c.Time.Time()})
			}
		}
	}
	settleVisit(&v)
	return v
}

// settleVisit puts the lists of a visit into their order.
func settleVisit(v *exam.Visit) {
	slices.SortFunc(v.Amendments, func(x, y exam.Amendment) int {
		return cmp.Or(x.At.Compare(y.At), strings.Compare(x.Field, y.Field))
	})
	if !slices.IsSortedFunc(v.Findings, compareCells) {
		slices.SortFunc(v.Findings, compareCells)
	}
	slices.SortFunc(v.Measures, func(x, y exam.Measured) int {
		return cmp.Or(cmp.Compare(x.Measure, y.Measure), cmp.Compare(x.Site, y.Site), strings.Compare(x.Key(), y.Key()))
	})
	slices.SortFunc(v.Answers, func(x, y exam.Acknowledgement) int {
		return cmp.Or(x.At.Compare(y.At), strings.Compare(x.Rule, y.Rule))
	})
}

// compareCells puts findings into the order of the vocabulary.
func compareCells(x, y exam.Finding) int {
	return cmp.Compare(cellOrder(x), cellOrder(y))
}

func cellOrder(f exam.Finding) uint32 {
	return uint32(f.Item)<<24 | uint32(f.Site)<<16 | uint32(f.Digit)<<8 | uint32(f.Joint)
}

// setVisit reads one field of a visit.
func setVisit(v *exam.Visit, name string, b []byte) error {
	if cell, ok := strings.CutPrefix(name, fieldFinding); ok {
		k, err := parseCell(cell)
		if err != nil {
			return err
		}
		f, err := decodeFinding(k, b)
		if err == nil {
			v.Findings = append(v.Findings, f)
		}
		return err
	}
	if cell, ok := strings.CutPrefix(name, fieldMeasure); ok {
		m, err := decodeMeasure(cell, b)
		if err == nil {
			v.Measures = append(v.Measures, m)
		}
		return err
	}
	if rest, ok := strings.CutPrefix(name, fieldTreatment); ok {
		id, err := exam.ParseID(rest)
		var w wireTreatment
		if err = errors.Join(err, unpack(b, &w)); err == nil {
			v.Treatments = append(v.Treatments, exam.Treatment{ID: id, Kind: w.Kind, Site: w.Site, Params: w.Params, Minutes: w.Minutes, Override: w.Override})
		}
		return err
	}
	if rest, ok := strings.CutPrefix(name, fieldHome); ok {
		id, err := exam.ParseID(rest)
		var w wireHome
		if err = errors.Join(err, unpack(b, &w)); err == nil {
			v.Home = append(v.Home, exam.HomeExercise{ID: id, Kind: w.Kind, How: w.How, Times: w.Times, DaysWeek: w.DaysWeek, Amount: w.Amount, StopFor: w.StopFor, Override: w.Override})
		}
		return err
	}
	if rest, ok := strings.CutPrefix(name, fieldAttachment); ok {
		id, err := exam.ParseID(rest)
		var w wireAttachment
		if err = errors.Join(err, unpack(b, &w)); err == nil {
			v.Attachments = append(v.Attachments, exam.Attachment{ID: id, Name: w.Name, Format: w.Format, Size: w.Size, Note: w.Note})
		}
		return err
	}
	if rest, ok := strings.CutPrefix(name, fieldStim); ok {
		id, err := exam.ParseID(rest)
		var w wireStim
		if err = errors.Join(err, unpack(b, &w)); err == nil {
			v.Stim = append(v.Stim, exam.StimRecord{ID: id, Kind: w.Kind, Data: w.Data})
		}
		return err
	}
	if strings.HasPrefix(name, fieldAnswer) {
		var w wireAnswer
		err := unpack(b, &w)
		if err == nil {
			v.Answers = append(v.Answers, exam.Acknowledgement{Rule: w.Rule, Told: w.Told, Note: w.Note, Examiner: w.Examiner, At: w.At.time()})
		}
		return err
	}
	var word string
	var err error
	switch name {
	case "examined":
		var w wireExamined
		err = unpack(b, &w)
		v.Examined, v.Zone = w.time(), w.Zone
	case "examiner":
		return setText(&v.Examiner)(b)
	case "protocol":
		return setText(&v.Protocol)(b)
	case fieldClosed:
		var w wireClosed
		if err = unpack(b, &w); err == nil {
			v.State, v.ClosedAt = exam.Closed, w.At.time()
		}
	case "repeat-of":
		if word, err = decodeText(b); err == nil {
			v.RepeatOf, err = exam.ParseID(word)
		}
	case "sedation":
		if word, err = decodeText(b); err == nil {
			v.Sedation, err = exam.ParseSedation(word)
		}
	case "aid":
		return setText(&v.Aid)(b)
	case "surface":
		return setText(&v.Surface)(b)
	case "session":
		return setText(&v.Session)(b)
	case "doses":
		var ws []wireDose
		err = unpack(b, &ws)
		for _, w := range ws {
			v.Doses = append(v.Doses, exam.DoseGiven(w))
		}
	case "report":
		var w wireReport
		err = unpack(b, &w)
		v.Report = exam.OwnerReport(w)
	case "note":
		return setText(&v.Note)(b)
	case "next-visit":
		return setDate(&v.NextVisit)(b)
	default:
		return errUnknownField
	}
	return err
}

func (a *assembler) practiceOf(r *record) exam.Practice {
	var p exam.Practice
	a.each(r, func(name string, v change.Change) error { return setPractice(&p, name, v.Value) })
	return p
}

// setPractice reads one field of the practice.
func setPractice(p *exam.Practice, name string, b []byte) error {
	if rest, ok := strings.CutPrefix(name, fieldExaminer); ok {
		id, err := exam.ParseID(rest)
		var w wireExaminer
		if err = errors.Join(err, unpack(b, &w)); err == nil {
			p.Examiners = append(p.Examiners, exam.Examiner{ID: id, Name: w.Name, Initials: w.Initials, PINHash: w.PINHash})
		}
		return err
	}
	if rest, ok := strings.CutPrefix(name, fieldProtocol); ok {
		var w wireProtocol
		err := unpack(b, &w)
		if err == nil {
			p.Protocols = append(p.Protocols, exam.Protocol{Key: rest, Name: w.Name, Items: w.Items})
		}
		return err
	}
	if rest, ok := strings.CutPrefix(name, fieldPhrase); ok {
		lang, phrase, ok := strings.Cut(rest, "/")
		if !ok {
			return fmt.Errorf("the phrase %q names no language", rest)
		}
		own, err := decodeText(b)
		if err == nil {
			p.Phrases = append(p.Phrases, exam.Phrase{Key: phrase, Language: lang, Words: own})
		}
		return err
	}
	switch name {
	case "name":
		return setText(&p.Name)(b)
	case "contact":
		return setContact(&p.Contact)(b)
	case "out-of-hours":
		return setContact(&p.OutOfHours)(b)
	case "zone":
		return setText(&p.Zone)(b)
	case "language":
		return setText(&p.Language)(b)
	case "paper":
		return setText(&p.Paper)(b)
	case "pounds":
		return setFlag(&p.Pounds)(b)
	case "inches":
		return setFlag(&p.Inches)(b)
	case fieldLogo:
		raw, err := decodeRaw(b)
		p.Logo = raw
		return err
	case "demo":
		return setFlag(&p.Demo)(b)
	}
	return errUnknownField
}
