package storage

import (
	"slices"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/merge"
)

// Changes returns every change of a patient's records, in the order of a history. Of patients that were
// joined it returns those of the one asked for. The error is ErrNotFound where there are none.
func (s *Store) Changes(patient exam.ID) ([]change.Change, error) {
	v, err := s.wholeView(patient)
	if err != nil {
		return nil, explain("reading the patient", err)
	}
	var out []change.Change
	for _, r := range v.records {
		for _, f := range r.fields {
			out = append(out, f.versions...)
		}
	}
	if len(out) == 0 {
		return nil, ErrNotFound
	}
	slices.SortFunc(out, merge.Version.Compare)
	return out, nil
}

// Show puts a patient together from changes that are not in the store: an extract of another site. Nothing
// is kept. The error is ErrNotFound where they hold no patient.
func (s *Store) Show(changes []change.Change) (Record, error) {
	records := map[recordKey]*record{}
	var id exam.ID
	for _, c := range changes {
		k := keyOf(c)
		r := records[k]
		if r == nil {
			r = newRecord(k)
		}
		records[k] = r.with(c)
		if c.Kind == KindPatient {
			id = c.Patient
		}
	}
	var v view
	for _, r := range records {
		v.records = append(v.records, r)
	}
	rec, found, err := s.assemble(id, v)
	if err == nil && !found {
		err = ErrNotFound
	}
	return rec, explain("showing the extract", err)
}
