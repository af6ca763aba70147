package storage

import (
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"slices"
	"time"

	"go.etcd.io/bbolt"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/merge"
)

func fillRandom(b []byte) { _, _ = rand.Read(b) } // never fails: crypto/rand ends the program instead

// Receipt says what Apply made durable.
type Receipt struct {
	First, Last uint64    // numbers of the changes in this device's stream; 0 if nothing differed
	At          time.Time // the time written into them
}

// pendingFrame is a frame of which nobody knows whether it reached the disk. Its numbers are
// taken, so it is written before any other.
type pendingFrame struct {
	frame   change.Frame
	records []*record
	changes int
	clock   change.HLC
}

// Apply writes all edits as one action: all of them are kept, or none. It returns when they
// are on the disk. The examiner's name or id is kept with each change.
//
// Edits that say what is said already are left out. Edits of a closed visit are refused with
// ErrClosed unless AmendEdits made them. After an error nothing was reported as saved;
// if the system cannot say whether the disk has the action (a failed sync), it is written again before
// the next one.
func (s *Store) Apply(ctx context.Context, examiner string, edits ...Edit) (Receipt, error) {
	if err := ctx.Err(); err != nil {
		return Receipt{}, err
	}
	for _, e := range edits {
		if err := e.check(); err != nil {
			return Receipt{}, err
		}
	}
	if len(edits) > change.MaxChanges {
		return Receipt{}, fmt.Errorf("one action holds %d changes; allowed are %d", len(edits), change.MaxChanges)
	}
	s.write.Lock()
	defer s.write.Unlock()
	s.mu.RLock()
	shut := s.shut
	s.mu.RUnlock()
	if shut {
		return Receipt{}, ErrShut
	}
	if s.pending != nil {
		if err := s.commit(s.pending); err != nil {
			return Receipt{}, explain("saving", err)
		}
	}
	s.mu.RLock()
	seen := s.idx
	s.mu.RUnlock()
	p, err := s.prepare(examiner, edits)
	if errors.Is(err, errIndex) {
		if err = s.repairWriting(seen, err); err == nil {
			p, err = s.prepare(examiner, edits)
		}
	}
	if err != nil || p == nil {
		return Receipt{}, err
	}
	if err := s.commit(p); err != nil {
		return Receipt{}, explain("saving", err)
	}
	return Receipt{p.frame.First, p.frame.Last, p.clock.Time()}, nil
}

// prepare turns edits into a sealed frame and the records as they will be. It returns nil if
// nothing differs.
func (s *Store) prepare(examiner string, edits []Edit) (*pendingFrame, error) {
	p := &pendingFrame{}
	records := map[recordKey]*record{}
	before := map[exam.ID]uint64{}
	b := change.Batch{Stream: s.out.stream, First: s.next, Examiner: examiner}
	for _, e := range edits {
		k := recordKey{e.Kind, e.Patient, e.Record}
		r := records[k]
		if r == nil {
			var err error
			if r, err = s.baseRecord(k); err != nil {
				return nil, explain("reading "+k.String(), err)
			}
		}
		c, ok, err := s.changeFor(r, e)
		if err != nil {
			return nil, err
		}
		if !ok {
			continue
		}
		seq := b.First + uint64(len(b.Changes))
		last, known := before[e.Patient]
		if !known {
			if last, err = s.lastSeq(e.Patient); err != nil {
				return nil, explain("reading "+k.String(), err)
			}
		}
		before[e.Patient] = seq
		c.Before = change.PreviousOf(last)
		c.Stream, c.Seq, c.Examiner = b.Stream, seq, examiner
		b.Changes = append(b.Changes, c)
		records[k] = r.with(c)
		p.clock = c.Time
	}
	if len(b.Changes) == 0 {
		return nil, nil
	}
	var err error
	if p.frame, err = change.Seal(b, s.prev, s.bag.Ring.Current(), s.bag.Ring); err != nil {
		return nil, err
	}
	for _, r := range records {
		p.records = append(p.records, r)
	}
	p.changes = len(b.Changes)
	return p, nil
}

// changeFor makes the change that an edit asks for; false if it says what is said already.
func (s *Store) changeFor(r *record, e Edit) (change.Change, bool, error) {
	closing := r.closing()
	if closing.Closed && !e.act.AfterClosing() {
		if e.Field == fieldClosed {
			return change.Change{}, false, nil // closed already
		}
		return change.Change{}, false, fmt.Errorf("%s: %w", e.Field, ErrClosed)
	}
	if e.act == change.Amend && !closing.Closed {
		return change.Change{}, false, errors.New("the visit is open; change it without an amendment")
	}
	f := merge.Evaluate(r.versions(e.Field), r.closingFor(e.Field))
	if e.Kind == KindPatient && e.Field == fieldOwner {
		var same bool
		var err error
		if e.Value, same, err = s.ownerValue(f.Current, e); err != nil || (same && len(f.Late) == 0) {
			return change.Change{}, false, err
		}
	}
	if e.act == change.Edit && len(f.Late) == 0 && saysSo(f.Current, e.Value) {
		return change.Change{}, false, nil
	}
	c := change.Change{
		ID: change.NewID(), Time: s.clock.Tick(), Kind: e.Kind, Patient: e.Patient, Record: e.Record, Field: e.Field,
		Value: e.Value, Supersedes: f.Supersede(), Act: e.act, Reason: e.reason,
	}
	if e.Kind == KindVisit && e.Field == fieldClosed {
		c.Seen = r.heads()
	}
	return c, true, nil
}

// ownerValue seals an owner's contact data under the owner's key, and reports whether they are
// what is said already.
func (s *Store) ownerValue(current []change.Change, e Edit) (value []byte, same bool, err error) {
	if _, sealed := sealedContact(e.Value); sealed || len(e.Value) == 0 {
		return e.Value, false, nil
	}
	if e.act == change.Edit && len(current) == 1 {
		if clear, err := s.seals.owners.openContact(current[0].Value); err == nil && slices.Equal(clear, e.Value) {
			return e.Value, true, nil
		}
	}
	gone, err := s.erased(e.Patient)
	if err != nil {
		return nil, false, explain("reading the owner", err)
	}
	if gone {
		return nil, false, fmt.Errorf("the contact data of this owner were %w; make a new patient to keep new ones", ErrErased)
	}
	value, err = s.seals.owners.sealContact(e.Patient, e.Value)
	return value, false, explain("keeping the key of the owner's contact data", err)
}

// saysSo reports whether a field's only value is this one.
func saysSo(current []change.Change, value []byte) bool {
	switch len(current) {
	case 0:
		return len(value) == 0
	case 1:
		return slices.Equal(current[0].Value, value)
	}
	return false
}

// lastSeq returns the number of the last change to a patient in this device's stream, 0 for none.
func (s *Store) lastSeq(patient exam.ID) (uint64, error) {
	s.mu.RLock()
	last, ok := s.lastOwn[patient]
	s.mu.RUnlock()
	if ok {
		return last, nil
	}
	err := s.onIndex(func(x *index, tx *bbolt.Tx) error {
		m, err := x.manifest(tx, patient)
		if m != nil {
			last = m.last(s.out.stream)
		}
		return err
	})
	return last, err
}

// commit writes a frame and then lets everybody see it.
func (s *Store) commit(p *pendingFrame) error {
	segment, end, err := s.out.write(p.frame.Raw)
	if err != nil {
		s.pending = p
		return err
	}
	s.pending = nil
	s.next, s.prev = p.frame.Last+1, p.frame.Hash()
	s.mu.Lock()
	for _, r := range p.records {
		s.install(r, s.out.stream, p.frame.Last)
	}
	st := s.state.stream(s.out.stream)
	st.take(p.frame.Header, s.prev, p.clock, p.clock)
	st.Segment, st.Start, st.Offset = segment, end-int64(len(p.frame.Raw)), end
	s.state.Clock = max(s.state.Clock, p.clock)
	s.behind += p.changes
	s.poke(s.behind)
	s.mu.Unlock()
	return nil
}

// Resolve chooses one of the values of a conflict, pick counting from 0 in c.Values. In a closed
// visit that needs a reason. The choice is a change like any other; nothing is lost by it.
func (s *Store) Resolve(ctx context.Context, examiner string, c Conflict, pick int, reason string) (Receipt, error) {
	if pick < 0 || pick >= len(c.Values) {
		return Receipt{}, fmt.Errorf("there are %d values to choose from; %d is none of them", len(c.Values), pick)
	}
	r, err := s.baseRecord(recordKey{c.Kind, c.Patient, c.Record})
	if err != nil {
		return Receipt{}, explain("reading the record in conflict", err)
	}
	e := Edit{Patient: c.Patient, Record: c.Record, Kind: c.Kind, Field: c.Field, Value: c.Values[pick].Raw, act: change.Pick}
	if r.closing().Closed && c.Field != fieldClosed {
		e.act, e.reason = change.Accept, reason
	}
	return s.Apply(ctx, examiner, e)
}
