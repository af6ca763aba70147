package storage

import (
	"fmt"
	"reflect"

	"cordwalk.example/cordwalk/exam"
)

// Flush brings the index up to date now.
func (s *Store) Flush() error { return s.flush() }

// QuickAgrees compares the short way of reading visits with the long one.
func (s *Store) QuickAgrees(patient exam.ID) error {
	v, err := s.patientView(patient)
	if err != nil {
		return err
	}
	for _, b := range v.plain {
		var quick, slow assembler
		quick.store, slow.store = s, s
		got, ok, err := quick.quickVisit(b)
		if err != nil {
			return err
		}
		r, err := decodeRecord(b)
		if err != nil {
			return err
		}
		if !ok {
			continue
		}
		want := slow.visitOf(r)
		if !reflect.DeepEqual(got, want) {
			return fmt.Errorf("read the short way:\n%+v\nthe long way:\n%+v", got, want)
		}
		if len(slow.conflicts) > 0 || len(slow.unshown) > 0 {
			return fmt.Errorf("the short way hides %v %v", slow.conflicts, slow.unshown)
		}
	}
	return nil
}
