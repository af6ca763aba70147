// Package audit writes and reads who did what with the records: who made, amended, exported, joined or
// removed something, and who looked at whom.
//
// What changes records is in the journal anyway and is read from there. What does not (an export, a
// device let in) is written as an entry of its own, by the examiner who did it. Views are many
// and matter less: once for each examiner, patient and day, in a file that is not synced, so that
// a view never waits for the disk.
package audit

import (
	"cmp"
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"io/fs"
	"path/filepath"
	"slices"
	"sync"
	"time"

	"github.com/fxamacker/cbor/v2"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/change"
)

// Did says what was done.
type Did string

// What is written as an entry of its own.
const (
	Exported  Did = "exported"
	Printed   Did = "printed"
	BackedUp  Did = "backed up"
	Restored  Did = "restored"
	Invited   Did = "invited a device"
	Joined    Did = "let a device in"
	Refused   Did = "refused a device"
	Removed   Did = "removed a device"
	Confirmed Did = "confirmed a removal"
	Erased    Did = "erased an owner's data"
	Admitted  Did = "admitted an entry from quarantine"
)

// What is read from the journal itself.
const (
	Made    Did = "made"
	Amended Did = "amended"
	Closed  Did = "closed a visit"
	United  Did = "joined two patients"
	Parted  Did = "parted two patients"
	Looked  Did = "looked at"
)

type entry struct {
	Did  Did    `cbor:"1,keyasint"`
	What string `cbor:"2,keyasint,omitempty"`
}

const field = "did"

// Edit is an entry as an edit, to be written in one action with what it tells of.
func Edit(did Did, what string) (storage.Edit, error) {
	v, err := cbor.Marshal(entry{did, what})
	return storage.Edit{Kind: storage.Kind(change.KindAudit), Record: storage.NewID(), Field: field, Value: v}, err
}

// Write writes an entry. It is durable when it returns.
func Write(ctx context.Context, s *storage.Store, examiner string, did Did, what string) error {
	e, err := Edit(did, what)
	if err != nil {
		return err
	}
	if _, err = s.Apply(ctx, examiner, e); err != nil {
		return fmt.Errorf("writing the audit entry: %w", err)
	}
	return nil
}

// Entry is one line of the audit.
type Entry struct {
	At       time.Time          `json:"at"`
	Examiner string             `json:"examiner"`
	Device   change.Incarnation `json:"-"`
	Did      Did                `json:"did"`
	What     string             `json:"what,omitempty"`
	Patient  exam.ID            `json:"patient,omitzero"`
	Record   exam.ID            `json:"record,omitzero"`
	Reason   string             `json:"reason,omitempty"`

	order change.HLC // At, and the order within a millisecond
}

// Read returns the audit from a time on, in the order of time. Entries that make a record are told
// once for each record and examiner in an action; ordinary corrections before closing are in the
// history of the record and not here.
func Read(ctx context.Context, s *storage.Store, since time.Time) ([]Entry, error) {
	held, err := s.Streams(ctx)
	if err != nil {
		return nil, fmt.Errorf("reading the audit: %w", err)
	}
	ring := s.Bag().Ring
	from := change.HLCAt(since)
	var out []Entry
	made := map[exam.ID]change.HLC{} // when each record was first written to
	first := map[exam.ID]Entry{}
	for _, h := range held {
		err := s.Frames(ctx, h.Stream, 1, func(f change.Frame) error {
			b, err := change.Open(f, ring)
			if err != nil {
				return nil // check names what cannot be read
			}
			for _, c := range b.Changes {
				e := Entry{At: c.Time.Time(), order: c.Time, Examiner: c.Examiner, Device: f.Stream.Device, Patient: c.Patient, Record: c.Record, Reason: c.Reason}
				if t, ok := made[c.Record]; (!ok || c.Time < t) && (c.Kind == change.KindPatient || c.Kind == change.KindVisit) {
					e := e
					e.Did, e.What = Made, "patient"
					if c.Kind == change.KindVisit {
						e.What = "visit"
					}
					made[c.Record], first[c.Record] = c.Time, e
				}
				if c.Time < from {
					continue
				}
				switch {
				case c.Kind == change.KindAudit && c.Field == field:
					var x entry
					if cbor.Unmarshal(c.Value, &x) != nil {
						continue
					}
					e.Did, e.What, e.Record = x.Did, x.What, exam.ID{}
				case c.Kind == change.KindEdge && c.Cleared():
					e.Did = Parted
				case c.Kind == change.KindEdge:
					e.Did = United
				case c.Act.AfterClosing():
					e.Did, e.What = Amended, c.Field
					if c.Act == change.Admit {
						e.Did = Admitted
					}
				case c.Kind == change.KindVisit && c.Field == change.FieldClosed:
					e.Did = Closed
				default:
					continue
				}
				out = append(out, e)
			}
			return nil
		})
		if err != nil {
			return nil, fmt.Errorf("reading the audit: %w", err)
		}
	}
	for id, e := range first {
		if made[id] >= from {
			out = append(out, e)
		}
	}
	slices.SortStableFunc(out, func(a, b Entry) int {
		return cmp.Or(cmp.Compare(a.order, b.order), cmp.Compare(a.Examiner, b.Examiner))
	})
	return out, nil
}

// Views notes who looked at whom.
type Views struct {
	mu   sync.Mutex
	s    *storage.Store
	fs   disk.FS
	seen map[view]bool
	end  int64
}

type view struct {
	Examiner string    `cbor:"1,keyasint"`
	Patient  exam.ID   `cbor:"2,keyasint"`
	Day      exam.Date `cbor:"3,keyasint"`
}

const (
	viewsFile = "views.log"
	maxViews  = 256 << 20
)

// OpenViews reads the views noted so far. A tail that a power cut left is passed over.
func OpenViews(s *storage.Store, fsys disk.FS) (*Views, error) {
	if fsys == nil {
		fsys = disk.OS()
	}
	v := &Views{s: s, fs: fsys, seen: map[view]bool{}}
	b, err := disk.ReadFile(fsys, v.file(), maxViews)
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return nil, fmt.Errorf("reading who looked at whom: %w", err)
	}
	for off := 0; off+2 <= len(b); {
		n := int(binary.BigEndian.Uint16(b[off:]))
		if n == 0 || off+2+n > len(b) {
			break
		}
		if plain, err := v.key().Open(b[off+2:off+2+n], []byte(viewsFile)); err == nil {
			var x view
			if cbor.Unmarshal(plain, &x) == nil {
				v.seen[x] = true
			}
		}
		off += 2 + n
		v.end = int64(off)
	}
	return v, nil
}

func (v *Views) file() string { return filepath.Join(v.s.Dir(), viewsFile) }

func (v *Views) key() interface {
	Seal(plain, context []byte) []byte
	Open(sealed, context []byte) ([]byte, error)
} {
	return v.s.Bag().Ring.Index().Derive("views")
}

// Note notes that an examiner looked at a patient. It does nothing the second time on one day, and never
// syncs.
func (v *Views) Note(examiner string, patient exam.ID, at time.Time) error {
	v.mu.Lock()
	defer v.mu.Unlock()
	x := view{examiner, patient, exam.DayOf(at)}
	if v.seen[x] {
		return nil
	}
	plain, err := cbor.Marshal(x)
	if err != nil {
		return err
	}
	sealed := v.key().Seal(plain, []byte(viewsFile))
	if len(sealed) > 1<<16-1 {
		return errors.New("noting who looked at whom: the examiner's name is too long")
	}
	f, err := v.fs.Edit(v.file())
	if errors.Is(err, fs.ErrNotExist) {
		f, err = v.fs.Create(v.file())
	}
	if err != nil {
		return fmt.Errorf("noting who looked at whom: %w", err)
	}
	_, err = f.WriteAt(append(binary.BigEndian.AppendUint16(nil, uint16(len(sealed))), sealed...), v.end)
	if err = errors.Join(err, f.Close()); err != nil {
		return fmt.Errorf("noting who looked at whom: %w", err)
	}
	v.end += int64(2 + len(sealed))
	v.seen[x] = true
	return nil
}

// All returns the views from a day on, as lines of the audit.
func (v *Views) All(since time.Time) []Entry {
	v.mu.Lock()
	defer v.mu.Unlock()
	var out []Entry
	for x := range v.seen {
		at, ok := x.Day.Time()
		if ok && at.Add(12*time.Hour).After(since) {
			out = append(out, Entry{At: at, Examiner: x.Examiner, Did: Looked, Patient: x.Patient})
		}
	}
	slices.SortFunc(out, func(a, b Entry) int {
		return cmp.Or(a.At.Compare(b.At), cmp.Compare(a.Examiner, b.Examiner), slices.Compare(a.Patient[:], b.Patient[:]))
	})
	return out
}
