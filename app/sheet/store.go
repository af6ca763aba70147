package sheet

import (
	"bytes"
	"cmp"
	"context"
	"errors"
	"fmt"
	"iter"
	"slices"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/segment"
)

// Animals streams the animals of a store, one at a time: those named, or all of the caseload
// in its order.
func Animals(ctx context.Context, s *storage.Store, ids ...exam.ID) iter.Seq2[Animal, error] {
	return func(yield func(Animal, error) bool) {
		if len(ids) == 0 {
			list, err := s.Caseload(ctx)
			if err != nil {
				yield(Animal{}, err)
				return
			}
			for _, x := range list {
				ids = append(ids, x.ID)
			}
			slices.SortFunc(ids, func(a, b exam.ID) int { return slices.Compare(a[:], b[:]) })
		}
		for _, id := range ids {
			r, err := s.Patient(id)
			if err != nil {
				yield(Animal{}, err)
				return
			}
			if !yield(Animal{r.Patient, r.Visits}, nil) {
				return
			}
		}
	}
}

// ReadRecords gathers what a records file holds: the practice, the animals named (all where
// none is) and, with history, every value they ever had.
func ReadRecords(ctx context.Context, s *storage.Store, made time.Time, history bool, ids ...exam.ID) (Records, error) {
	out := Records{Made: made}
	var err error
	if out.Practice, err = s.Practice(); err != nil {
		return Records{}, fmt.Errorf("reading the practice: %w", err)
	}
	of := map[exam.ID]bool{}
	for _, id := range ids {
		r, err := s.Patient(id)
		if err != nil {
			return Records{}, err
		}
		of[id] = true
		for _, x := range r.Joined {
			of[x] = true
		}
	}
	for a, err := range Animals(ctx, s, ids...) {
		if err != nil {
			return Records{}, err
		}
		out.Animals = append(out.Animals, a)
	}
	if history {
		if out.Changes, err = changesOf(ctx, s, of); err != nil {
			return Records{}, err
		}
		if out.OwnerKeys, err = ownerKeys(s, out.Changes); err != nil {
			return Records{}, err
		}
	}
	return out, nil
}

// changesOf reads the changes of some patients, or of all where none is named, in the order
// of their history.
func changesOf(ctx context.Context, s *storage.Store, of map[exam.ID]bool) ([]change.Change, error) {
	streams, err := s.Streams(ctx)
	if err != nil {
		return nil, err
	}
	ring := s.Bag().Ring
	var out []change.Change
	seen := map[change.ID]bool{}
	for _, h := range streams {
		err := s.Frames(ctx, h.Stream, 1, func(f change.Frame) error {
			b, err := change.Open(f, ring)
			if err != nil {
				if errors.Is(err, change.ErrNewer) {
					return nil // kept and passed on by the journal; not for this program to show
				}
				return err
			}
			for _, c := range b.Changes {
				if !exported(c.Kind) || seen[c.ID] || len(of) > 0 && !of[c.Patient] && !(c.Kind == change.KindEdge && of[c.Record]) {
					continue
				}
				seen[c.ID] = true
				c.Seq, c.Before, c.Stream.Site = 0, 0, change.Site{}
				out = append(out, c)
			}
			return nil
		})
		if err != nil {
			return nil, fmt.Errorf("reading the history: %w", err)
		}
	}
	slices.SortFunc(out, historical)
	return out, nil
}

// ownerKeys collects the keys of the contact data of every animal in the changes.
func ownerKeys(s *storage.Store, changes []change.Change) (map[exam.ID][]byte, error) {
	var out map[exam.ID][]byte
	asked := map[exam.ID]bool{}
	for _, c := range changes {
		if c.Kind != change.KindPatient || asked[c.Patient] {
			continue
		}
		asked[c.Patient] = true
		sealed, ok, err := s.OwnerKey(c.Patient)
		if err != nil {
			return nil, err
		}
		if !ok {
			continue // no contact data, or erased
		}
		k, err := s.Bag().Ring.OpenOwnerKey(c.Patient, sealed)
		if err != nil {
			return nil, err
		}
		if out == nil {
			out = map[exam.ID][]byte{}
		}
		out[c.Patient] = k[:]
	}
	return out, nil
}

// historical is the order of a history without places in a journal: by time, device and id.
func historical(a, b change.Change) int {
	return cmp.Or(cmp.Compare(a.Time, b.Time), slices.Compare(a.Stream.Device[:], b.Stream.Device[:]), a.ID.Compare(b.ID))
}

// Added says what an import did.
type Added struct {
	Patients, Visits, Changes int
	Known                     int // visits that were there already and were left alone
	History                   bool
	Warnings                  []string
}

// AddRecords puts records into a store. Into a store without animals the history goes in as
// it was, with every id, time, examiner and conflict, if the records hold one. Else the
// animals go in as entries of today by their ids: what is there already is left alone, new
// visits of a known animal are added. Progress may be nil.
func AddRecords(ctx context.Context, s *storage.Store, who string, r Records, progress func(done, total int)) (Added, error) {
	there, err := s.Caseload(ctx)
	if err != nil {
		return Added{}, err
	}
	var out Added
	if len(there) == 0 {
		if err := addPractice(ctx, s, who, r.Practice); err != nil {
			return out, err
		}
	}
	if len(r.Changes) > 0 && len(there) == 0 {
		for owner, k := range r.OwnerKeys {
			if err := s.AddOwnerKey(owner, s.Bag().Ring.SealOwnerKey(owner, key.OwnerKey(k))); err != nil {
				return out, fmt.Errorf("taking the history in: %w", err)
			}
		}
		n, err := restore(ctx, s, r.Changes)
		if err != nil {
			return out, fmt.Errorf("taking the history in: %w", err)
		}
		out.Changes, out.History, out.Patients = n, true, len(r.Animals)
		for _, a := range r.Animals {
			out.Visits += len(a.Visits)
		}
		same, err := says(ctx, s, r.Animals)
		if err != nil {
			return out, err
		}
		if !same {
			out.Warnings = append(out.Warnings, "the animals as the file lists them are not what its history says; the history was taken")
		}
		return out, nil
	}
	if len(r.Changes) > 0 {
		out.Warnings = append(out.Warnings, "the store holds animals already: the values of today were taken, not their history")
	}
	total, done := 0, 0
	for _, a := range r.Animals {
		total += len(a.Visits) + 1
	}
	step := func() {
		if done++; progress != nil {
			progress(done, total)
		}
	}
	for _, a := range r.Animals {
		known := map[exam.ID]bool{}
		rec, err := s.Patient(a.Patient.ID)
		switch {
		case errors.Is(err, storage.ErrNotFound):
			n, err := s.Apply(ctx, who, storage.PatientEdits(exam.Patient{}, a.Patient)...)
			if err != nil {
				return out, fmt.Errorf("adding %s: %w", a.Patient.Name, err)
			}
			out.Patients++
			out.Changes += int(n.Last - n.First + 1)
		case err != nil:
			return out, err
		default:
			if rec.Patient.Species != a.Patient.Species {
				return out, fmt.Errorf("adding %s: the animal of this id is a %s here and a %s in the file", a.Patient.Name, rec.Patient.Species, a.Patient.Species)
			}
			for _, v := range rec.Visits {
				known[v.ID] = true
			}
		}
		step()
		for _, v := range a.Visits {
			if known[v.ID] {
				out.Known++
				step()
				continue
			}
			if len(v.Amendments) > 0 {
				out.Warnings = append(out.Warnings, fmt.Sprintf("the visit of %s on %s: the reasons of its amendments were not taken", a.Patient.Name, v.Examined.Format("2006-01-02")))
			}
			n, err := s.Apply(ctx, v.Examiner, storage.VisitEdits(exam.Visit{}, v)...)
			if err != nil {
				return out, fmt.Errorf("adding the visit of %s on %s: %w", a.Patient.Name, v.Examined.Format("2006-01-02"), err)
			}
			out.Visits++
			out.Changes += int(n.Last - n.First + 1)
			step()
		}
	}
	return out, nil
}

// says reports whether the store shows the animals as listed.
func says(ctx context.Context, s *storage.Store, list []Animal) (bool, error) {
	now, err := ReadRecords(ctx, s, time.Time{}, false)
	if err != nil {
		return false, err
	}
	listed := make(map[exam.ID]Animal, len(list))
	for _, a := range list {
		listed[a.Patient.ID] = a
	}
	if len(now.Animals) != len(listed) {
		return false, nil
	}
	for _, a := range now.Animals {
		var x, y bytes.Buffer
		if err := EncodeRecords(&x, Records{Animals: []Animal{a}}); err != nil {
			return false, err
		}
		if err := EncodeRecords(&y, Records{Animals: []Animal{listed[a.Patient.ID]}}); err != nil {
			return false, err
		}
		if !bytes.Equal(x.Bytes(), y.Bytes()) {
			return false, nil
		}
	}
	return true, nil
}

// addPractice sets the practice's data where the store has none.
func addPractice(ctx context.Context, s *storage.Store, who string, p exam.Practice) error {
	if p.Name == "" {
		return nil
	}
	before, err := s.Practice()
	if err != nil {
		return err
	}
	if before.Name != "" {
		return nil
	}
	if _, err := s.Apply(ctx, who, storage.PracticeEdits(before, p)...); err != nil {
		return fmt.Errorf("setting the practice's data: %w", err)
	}
	return nil
}

// A frame of an import holds at most so many changes and so many bytes of values.
const (
	importChanges = 400
	importBytes   = 1 << 20
)

// restore gives each device of the history a journal of its own in this store, in the order
// of its clock, and takes it in as one that came by exchange: sealed with this practice's
// key, vouched for by this device.
func restore(ctx context.Context, s *storage.Store, changes []change.Change) (int, error) {
	held, err := s.Streams(ctx)
	if err != nil {
		return 0, err
	}
	taken := map[change.Incarnation]bool{}
	for _, h := range held {
		taken[h.Stream.Device] = true
	}
	byDevice := map[change.Incarnation][]change.Change{}
	var devices []change.Incarnation
	for _, c := range changes {
		d := c.Stream.Device
		if taken[d] {
			return 0, fmt.Errorf("this store holds entries of the device %s already: make a new store and import there", d)
		}
		if byDevice[d] == nil {
			devices = append(devices, d)
		}
		byDevice[d] = append(byDevice[d], c)
	}
	bag, n := s.Bag(), 0
	for _, d := range devices {
		list := byDevice[d]
		slices.SortStableFunc(list, historical)
		stream := change.Stream{Device: d, Site: s.Site()}
		var prev change.Hash
		last := map[exam.ID]uint64{}
		var block segment.Block
		for first := 0; first < len(list); {
			b := change.Batch{Stream: stream, First: uint64(first) + 1, Examiner: list[first].Examiner}
			size := 0
			for k := first; k < len(list) && len(b.Changes) < importChanges && size < importBytes && list[k].Examiner == b.Examiner; k++ {
				c := list[k]
				c.Stream, c.Seq = stream, uint64(k)+1
				c.Before = change.PreviousOf(last[c.Patient])
				last[c.Patient] = c.Seq
				size += len(c.Value) + len(c.Extra) + 16*(len(c.Seen)+len(c.Supersedes))
				b.Changes = append(b.Changes, c)
			}
			f, err := change.Seal(b, prev, bag.Ring.Current(), bag.Ring)
			if err != nil {
				return n, err
			}
			prev = f.Hash()
			block.Frames = append(block.Frames, f)
			first += len(b.Changes)
			n += len(b.Changes)
		}
		if err := s.Receive(ctx, stream, block); err != nil {
			return n, err
		}
		head := segment.Sign(segment.Head{Stream: stream, Last: uint64(len(list)), Hash: prev}, bag.Device)
		if err := s.Commit(ctx, stream, &head); err != nil {
			return n, err
		}
	}
	s.Settle()
	return n, nil
}
