package storage

import (
	"bytes"
	"errors"
	"fmt"
	"slices"
	"strconv"
	"strings"
	"time"

	"go.etcd.io/bbolt"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/stim"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/merge"
)

// Entry is one change in the history of a patient.
type Entry struct {
	Record   exam.ID
	Kind     Kind
	Field    string
	Value    string // in words; empty where the field was cleared
	Before   string // what it replaced, in words; empty where there was nothing
	Examiner string
	Device   string
	At       time.Time
	How      string // "edit", "amend", "accept", "pick", "undo", …
	Reason   string
	Raw      []byte   // the value as an Edit holds it; nil where the field was cleared
	Replaced [][]byte // what it replaced, likewise
	Current  bool     // it counts now
	Late     bool     // it arrived after the visit was closed and was not accepted
}

// History returns every change that a patient, its visits and those it is joined with ever
// had, oldest first. Given a visit's id it returns that visit's alone; given the zero id, the practice's.
func (s *Store) History(id exam.ID) ([]Entry, error) {
	patients, visit := []exam.ID{id}, exam.ID{}
	if p, err := s.patientOfVisit(id); err == nil {
		patients, visit = []exam.ID{p}, id
	} else if !errors.Is(err, ErrNotFound) {
		return nil, err
	} else {
		s.mu.RLock()
		comps := merge.Components(s.state.Edges)
		s.mu.RUnlock()
		if root, ok := comps[id]; ok {
			patients = merge.Members(comps)[root]
		}
	}
	type line struct {
		c change.Change
		e Entry
	}
	var lines []line
	for _, p := range patients {
		v, err := s.wholeView(p)
		if err != nil {
			return nil, explain("reading the history of "+id.String(), err)
		}
		for _, r := range v.records {
			if !visit.IsZero() && r.id != visit {
				continue
			}
			closing := r.closing()
			for _, f := range r.fields {
				c := closing
				if f.name == fieldClosed {
					c = merge.Closing{}
				}
				st := merge.Evaluate(f.versions, c)
				for _, ch := range f.versions {
					e := Entry{Record: r.id, Kind: r.kind, Field: f.name, Value: s.words(r.kind, f.name, ch), Before: s.before(r.kind, f, ch),
						Examiner: ch.Examiner, Device: s.deviceWord(ch.Stream), At: ch.Time.Time(), How: ch.Act.String(), Reason: ch.Reason, Raw: ch.Value, Replaced: replaced(f, ch),
						Current: among(st.Current, ch), Late: among(st.Late, ch)}
					lines = append(lines, line{ch, e})
				}
			}
		}
	}
	if len(lines) == 0 && !id.IsZero() {
		return nil, fmt.Errorf("history of %s: %w", id, ErrNotFound)
	}
	slices.SortFunc(lines, func(a, b line) int { return a.c.Compare(b.c) })
	out := make([]Entry, len(lines))
	for i, l := range lines {
		out[i] = l.e
	}
	return out, nil
}

func among(vs []change.Change, c change.Change) bool {
	for _, v := range vs {
		if v.ID == c.ID {
			return true
		}
	}
	return false
}

// replaced returns the values that a change replaced.
func replaced(f field, c change.Change) (out [][]byte) {
	for _, v := range f.versions {
		if !v.Cleared() && slices.Contains(c.Supersedes, v.ID) {
			out = append(out, v.Value)
		}
	}
	return out
}

// before returns what a change replaced, in words.
func (s *Store) before(kind Kind, f field, c change.Change) string {
	var parts []string
	for _, v := range f.versions {
		if slices.Contains(c.Supersedes, v.ID) {
			if w := s.words(kind, f.name, v); w != "" && !slices.Contains(parts, w) {
				parts = append(parts, w)
			}
		}
	}
	return strings.Join(parts, " | ")
}

// words says a value in English.
func (s *Store) words(kind Kind, name string, c change.Change) string {
	if c.Cleared() {
		return ""
	}
	if kind == KindPatient && name == fieldOwner {
		if _, err := s.seals.owners.openContact(c.Value); err != nil {
			return "(" + err.Error() + ")"
		}
	}
	w, err := valueWords(s, kind, name, c.Value)
	if err != nil {
		return "(" + err.Error() + ")"
	}
	return w
}

func join(sep string, parts ...string) string {
	return strings.Join(slices.DeleteFunc(parts, func(p string) bool { return p == "" }), sep)
}

func number(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }

func contactWords(c exam.Contact) string { return join(", ", c.Name, c.Phone, c.Email, c.Address) }

func findingWords(f exam.Finding) string {
	var w string
	if g, ok := f.Result.Grade(); ok {
		w = join(" ", strconv.Itoa(int(g)), f.Item.GradeWord(g))
	} else {
		w = join(", ", "not tested", f.Result.Reason().String())
	}
	if f.How != exam.Examined {
		w += ", " + f.How.String()
	}
	return join(", ", w, f.Level.String(), f.Side.String(), f.Note)
}

func valueWords(s *Store, kind Kind, name string, b []byte) (string, error) {
	switch kind {
	case KindPatient:
		var p exam.Patient
		if err := s.setPatient(&p, name, b); err != nil {
			return "", err
		}
		return patientWords(p, name), nil
	case KindVisit:
		var v exam.Visit
		if err := setVisit(&v, name, b); err != nil {
			return "", err
		}
		return visitWords(v, name), nil
	case KindPractice:
		var p exam.Practice
		if err := setPractice(&p, name, b); err != nil {
			return "", err
		}
		return practiceWords(p, name), nil
	case KindEdge:
		return "one animal", nil
	}
	return fmt.Sprintf("%d bytes", len(b)), nil
}

func yes(on bool) string {
	if on {
		return "yes"
	}
	return "no"
}

func patientWords(p exam.Patient, name string) string {
	switch {
	case len(p.Problems) > 0:
		x := p.Problems[0]
		return join(", ", x.Diagnosis, x.Level, x.Side, since("since", x.Onset), since("operated", x.Surgery), since("resolved", x.Resolved), x.Note)
	case len(p.Precautions) > 0:
		x := p.Precautions[0]
		return join(", ", x.Code, x.Site, since("since", x.Since), since("until", x.Until), x.Note)
	case len(p.Goals) > 0:
		x := p.Goals[0]
		return join(", ", x.Words, join(" ", x.Measure, x.Item, x.Site, number(x.Target)), since("by", x.By), since("reached", x.Reached))
	case len(p.Medicines) > 0:
		x := p.Medicines[0]
		return join(", ", x.Name, x.Dose, since("from", x.Start), since("to", x.Stop))
	case len(p.Sent) > 0:
		return sentWords(p.Sent[0])
	}
	switch name {
	case "name":
		return p.Name
	case "species":
		return p.Species.String()
	case "breed":
		return p.Breed
	case "sex":
		return p.Sex.String()
	case "neutered":
		return yes(p.Neutered)
	case "born":
		return string(p.Born)
	case fieldOwner:
		return contactWords(p.Owner)
	case "veterinarian":
		return contactWords(p.Veterinarian)
	case "out-of-hours":
		return contactWords(p.OutOfHours)
	case "referral":
		return join(", ", p.Referral.By, since("until", p.Referral.Until), p.Referral.Limits)
	case "status":
		return join(", ", p.Status.String(), since("since", p.StatusSince))
	case "recheck-days":
		return strconv.Itoa(p.RecheckDays)
	case "note":
		return p.Note
	case "demo":
		return yes(p.Demo)
	}
	return ""
}

// sentWords says what was sent: the kind of paper, the day, the language, the sentences and
// the beginning of the hash, which is enough to tell two files apart.
func sentWords(x exam.Sent) string {
	own, hash := "", ""
	if x.Reworded {
		own = "reworded"
	}
	if x.Hash != "" {
		hash = "SHA-256 " + x.Hash[:min(16, len(x.Hash))] + "…"
	}
	return join(", ", x.Kind, x.At.Format(time.RFC3339), x.Examiner, x.Language, own, hash, "visit "+x.Visit.String(), x.Summary, x.Note)
}

func since(word string, d exam.Date) string {
	if d == "" {
		return ""
	}
	return word + " " + string(d)
}

func visitWords(v exam.Visit, name string) string {
	switch {
	case len(v.Findings) > 0:
		return findingWords(v.Findings[0])
	case len(v.Measures) > 0:
		m := v.Measures[0]
		unit := m.Measure.Info().Unit
		if unit == "1" {
			unit = ""
		}
		return join(", ", join(" ", number(m.Value), unit), m.Position, m.EndFeel, m.Variant, m.Note)
	case len(v.Treatments) > 0:
		t := v.Treatments[0]
		minutes := ""
		if t.Minutes != 0 {
			minutes = number(t.Minutes) + " min"
		}
		return join(", ", t.Kind, t.Site, t.Params, minutes, t.Override)
	case len(v.Home) > 0:
		h := v.Home[0]
		times := ""
		if h.Times != 0 {
			times = strconv.Itoa(h.Times) + " times a day"
		}
		return join(", ", h.Kind, times, h.Amount, h.How, h.StopFor, h.Override)
	case len(v.Attachments) > 0:
		x := v.Attachments[0]
		kind := "clip"
		if x.Photo() {
			kind = "photo"
		}
		return join(", ", kind, x.Format, strconv.FormatInt(x.Size, 10)+" bytes", x.Note)
	case len(v.Stim) > 0:
		return stim.Words(v.Stim[0])
	case len(v.Answers) > 0:
		a := v.Answers[0]
		return join(", ", a.Rule, "told "+a.Told, a.Note)
	}
	switch name {
	case "examined":
		return join(" ", v.Examined.Format(time.RFC3339), v.Zone)
	case "examiner":
		return v.Examiner
	case "protocol":
		return v.Protocol
	case fieldClosed:
		return v.ClosedAt.Format(time.RFC3339)
	case "repeat-of":
		return v.RepeatOf.String()
	case "sedation":
		return v.Sedation.String()
	case "aid":
		return v.Aid
	case "surface":
		return v.Surface
	case "session":
		return v.Session
	case "doses":
		var parts []string
		for _, d := range v.Doses {
			parts = append(parts, d.Medicine+" "+number(d.Hours)+" h before")
		}
		return strings.Join(parts, ", ")
	case "report":
		r := v.Report
		done := ""
		if r.ExercisesSet != 0 || r.ExercisesDone != 0 {
			done = fmt.Sprintf("%d of %d exercises done", r.ExercisesDone, r.ExercisesSet)
		}
		return join(", ", r.Falls, r.Urine, r.Appetite, done, r.Words)
	case "note":
		return v.Note
	case "next-visit":
		return string(v.NextVisit)
	}
	return ""
}

func practiceWords(p exam.Practice, name string) string {
	switch {
	case len(p.Examiners) > 0:
		return join(", ", p.Examiners[0].Name, p.Examiners[0].Initials)
	case len(p.Protocols) > 0:
		return p.Protocols[0].Name + ": " + strings.Join(p.Protocols[0].Items, ", ")
	case len(p.Phrases) > 0:
		return p.Phrases[0].Words
	}
	switch name {
	case "name":
		return p.Name
	case "contact":
		return contactWords(p.Contact)
	case "out-of-hours":
		return contactWords(p.OutOfHours)
	case "zone":
		return p.Zone
	case "language":
		return p.Language
	case "paper":
		return p.Paper
	case "pounds":
		return yes(p.Pounds)
	case "inches":
		return yes(p.Inches)
	case fieldLogo:
		return strconv.Itoa(len(p.Logo)) + " bytes"
	case "demo":
		return yes(p.Demo)
	}
	return ""
}

// patientOfVisit returns the patient that a visit belongs to.
func (s *Store) patientOfVisit(visit exam.ID) (patient exam.ID, err error) {
	s.mu.RLock()
	for p, m := range s.overlay {
		if _, ok := m[recordKey{KindVisit, p, visit}]; ok {
			s.mu.RUnlock()
			return p, nil
		}
	}
	s.mu.RUnlock()
	found := false
	err = s.repairing(func() error {
		return s.onIndex(func(x *index, tx *bbolt.Tx) error {
			k := x.placeKey(KindVisit, visit)
			sealed := tx.Bucket(bucketPlaces).Get(k)
			if sealed == nil {
				return nil
			}
			plain, err := x.open(bucketPlaces, k, sealed)
			if err == nil && len(plain) == len(patient) {
				patient, found = exam.ID(bytes.Clone(plain)), true
			}
			return err
		})
	})
	if err != nil {
		return patient, explain("reading visit "+visit.String(), err)
	}
	if !found {
		return patient, fmt.Errorf("visit %s: %w", visit, ErrNotFound)
	}
	return patient, nil
}
