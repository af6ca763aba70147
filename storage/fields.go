package storage

import (
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/merge"
)

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
