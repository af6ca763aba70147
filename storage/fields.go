package storage

import (
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/merge"
)

// VisitField reads one field of a visit, such as "finding/patellar/pelvic-left", into a visit that holds
// nothing else.
func VisitField(name string, value []byte) (v exam.Visit, err error) {
	return v, setVisit(&v, name, value)
}

// Fields returns the values that count in a record, by field. Fields in conflict and cleared ones are
// left out. It serves the kinds of record that are no patients, visits or settings.
func (s *Store) Fields(kind Kind, patient, id exam.ID) (map[string][]byte, error) {
	r, err := s.baseRecord(recordKey{kind, patient, id})
	if err != nil {
		return nil, explain("reading a record", err)
	}
	out := map[string][]byte{}
	for _, f := range r.fields {
		if v, ok := merge.Evaluate(f.versions, r.closingFor(f.name)).Value(); ok {
			out[f.name] = v
		}
	}
	return out, nil
}

// PatientField reads one field of a patient, such as "problem/ID", into a patient that holds nothing else.
// The owner's contact is sealed and cannot be read in this way.
func PatientField(name string, value []byte) (p exam.Patient, err error) {
	if name == fieldOwner {
		return p, errUnknownField
	}
	return p, (*Store)(nil).setPatient(&p, name, value)
}
