package storage

import (
	"context"
	"fmt"
	"slices"
	"time"

	"go.etcd.io/bbolt"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/merge"
)

// Summary is one patient's row of the caseload.
type Summary struct {
	ID          exam.ID
	Name        string
	Species     exam.Species
	Breed       string
	Owner       string // the owner's name
	Problem     string // the diagnosis on file that is not resolved, the newest
	Status      exam.Status
	Demo        bool
	Visits      int
	First, Last time.Time // of the visits, zero without any
	LastVisit   exam.ID
	OpenVisit   exam.ID // the newest visit that is not closed, zero if all are
	NextVisit   exam.Date
	RecheckDays int
	Motor       [4]int8 // voluntary-motor in the order of exam.Limbs, of the last visit; -1 not tested
	Lameness    [4]int8
	TailTone    int8
	Direction   exam.Direction // the last visit against the one before it, the whole animal; see Direction
	Alerts      []SummaryAlert
}

// SummaryAlert is an alert that the last visit raises.
type SummaryAlert struct {
	Rule     string
	Urgency  string
	Answered bool
}

// Direction says in one word how an animal went from one visit to a later one: Better or
// Worse where more cells moved that way than the other, Different where as many did or only
// kinds changed, Same where nothing moved, NotComparable where no cell was tested twice.
// It counts cells and weighs none: a hint for the list, not a judgement.
func Direction(earlier, later exam.Visit) exam.Direction {
	before := make(map[exam.Key]exam.Finding, len(earlier.Findings))
	for _, f := range earlier.Findings {
		before[f.Key()] = f
	}
	var n [exam.Different + 1]int
	for _, f := range later.Findings {
		if old, ok := before[f.Key()]; ok {
			n[exam.Change(old, f)]++
		}
	}
	switch {
	case n[exam.Worse] > n[exam.Better]:
		return exam.Worse
	case n[exam.Better] > n[exam.Worse]:
		return exam.Better
	case n[exam.Better] > 0 || n[exam.Different] > 0:
		return exam.Different
	case n[exam.Same] > 0:
		return exam.Same
	}
	return exam.NotComparable
}

// summarise makes the row of a patient from its record.
func summarise(r Record) Summary {
	p := r.Patient
	s := Summary{ID: p.ID, Name: p.Name, Species: p.Species, Breed: p.Breed, Owner: p.Owner.Name, Status: p.Status,
		Demo: p.Demo, Visits: len(r.Visits), RecheckDays: p.RecheckDays, TailTone: -1}
	for _, pr := range p.Problems {
		if pr.Resolved == "" {
			s.Problem = pr.Diagnosis
		}
	}
	for i := range s.Motor {
		s.Motor[i], s.Lameness[i] = -1, -1
	}
	if len(r.Visits) == 0 {
		return s
	}
	s.First = r.Visits[0].Examined
	last := r.Visits[len(r.Visits)-1]
	s.Last, s.LastVisit, s.NextVisit = last.Examined, last.ID, last.NextVisit
	for _, v := range r.Visits {
		if v.State == exam.Open {
			s.OpenVisit = v.ID
		}
	}
	for i, limb := range exam.Limbs() {
		if g, ok := last.Grade(exam.VoluntaryMotor, limb); ok {
			s.Motor[i] = g
		}
		if g, ok := last.Grade(exam.Lameness, limb); ok {
			s.Lameness[i] = g
		}
	}
	if g, ok := last.Grade(exam.TailTone, exam.Midline); ok {
		s.TailTone = g
	}
	if len(r.Visits) > 1 {
		s.Direction = Direction(r.Visits[len(r.Visits)-2], last)
	}
	s.Alerts = alerts(r)
	return s
}

// pageKey returns the page that a patient's row stands in.
func (s *seals) pageKey(patient exam.ID) []byte { return s.patientKey(patient)[:1] }

func (x *index) page(tx *bbolt.Tx, k []byte) ([]Summary, error) {
	sealed := tx.Bucket(bucketPages).Get(k)
	if sealed == nil {
		return nil, nil
	}
	plain, err := x.open(bucketPages, k, sealed)
	if err != nil {
		return nil, err
	}
	rows, err := decodeRows(plain)
	if err != nil {
		return nil, fmt.Errorf("%w: %w", errIndex, err)
	}
	return rows, nil
}

// storeRow works out a patient's row from what the index holds in this transaction.
func (x *index) storeRow(tx *bbolt.Tx, st *indexState, patient exam.ID) error {
	row, ok, err := x.row(tx, st, patient)
	if err != nil {
		return err
	}
	k := x.pageKey(patient)
	rows, err := x.page(tx, k)
	if err != nil {
		return err
	}
	rows = slices.DeleteFunc(rows, func(s Summary) bool { return s.ID == patient })
	if ok {
		rows = append(rows, row)
	}
	return x.put(tx.Bucket(bucketPages), bucketPages, k, encodeRows(rows), &st.Pages)
}

func (x *index) row(tx *bbolt.Tx, st *indexState, patient exam.ID) (Summary, bool, error) {
	v := view{gaps: st.gaps(x.lives)}
	_, err := x.records(tx, patient, func(_, plain []byte) error {
		v.plain = append(v.plain, plain)
		return nil
	})
	if err != nil {
		return Summary{}, false, err
	}
	r, ok, err := (&Store{seals: x.seals}).assemble(patient, v)
	if err != nil {
		return Summary{}, false, fmt.Errorf("%w: %w", errIndex, err)
	}
	if !ok {
		return Summary{}, false, nil
	}
	return summarise(r), true, nil
}

// Caseload returns the rows of all patients, by name, all of one moment.
func (s *Store) Caseload(ctx context.Context) ([]Summary, error) {
	var rows []Summary
	var edges [][2]exam.ID
	fresh := map[exam.ID]bool{}
	err := s.repairing(func() error {
		rows = rows[:0]
		s.mu.RLock()
		x, shut := s.idx, s.shut
		if shut {
			s.mu.RUnlock()
			return ErrShut
		}
		edges = slices.Clone(s.state.Edges)
		for p := range s.changed {
			if !p.IsZero() {
				fresh[p] = true
			}
		}
		var tx *bbolt.Tx
		err := guard(func() (err error) { tx, err = x.db.Begin(false); return err })
		s.mu.RUnlock()
		if err != nil {
			return err
		}
		defer func() { _ = guard(tx.Rollback) }()
		return guard(func() error {
			return tx.Bucket(bucketPages).ForEach(func(k, _ []byte) error {
				if err := ctx.Err(); err != nil {
					return err
				}
				page, err := x.page(tx, k)
				rows = append(rows, page...)
				return err
			})
		})
	})
	if err != nil {
		return nil, explain("reading the caseload", err)
	}
	// What the index does not have yet, and animals put together from several patients,
	// are worked out now.
	comps := merge.Components(edges)
	again := map[exam.ID]bool{}
	for id := range comps {
		again[merge.Patient(comps, id)] = true
	}
	for id := range fresh {
		again[merge.Patient(comps, id)] = true
	}
	rows = slices.DeleteFunc(rows, func(r Summary) bool {
		_, joined := comps[r.ID]
		return joined || again[r.ID]
	})
	for id := range again {
		r, err := s.Patient(id)
		if err != nil {
			continue // a visit whose patient is not there yet
		}
		rows = append(rows, summarise(r))
	}
	slices.SortFunc(rows, compareRows)
	return rows, nil
}
