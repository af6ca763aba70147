package storagetest

import (
	"context"
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/change"
)

// Size says how large a made-up practice is.
type Size struct {
	Patients, Visits, Findings int // so many visits for each patient, so many findings in each
	BigVisits, BigFindings     int // of one more patient
	Together                   int // findings recorded by one action; 1: each key press by itself
}

// ReferenceSize is that of the reference store.
var ReferenceSize = Size{Patients: 20_000, Visits: 10, Findings: 40, BigVisits: 520, BigFindings: 140, Together: 40}

// Scaled divides the numbers of patients and of the big patient's visits.
func (z Size) Scaled(by int) Size {
	z.Patients, z.BigVisits = max(1, z.Patients/by), max(1, z.BigVisits/by)
	return z
}

// Changes returns about how many changes the practice has.
func (z Size) Changes() int {
	return z.Patients*(5+z.Visits*(3+z.Findings)) + z.BigVisits*(3+z.BigFindings)
}

// Made is a made-up practice.
type Made struct {
	Dir      string
	Big      exam.ID // the patient with many visits
	Changes  int
	Journal  int64 // bytes
	Patients []exam.ID
}

// allCells lists the cells that made-up findings fill, in the order of the vocabulary.
func allCells() (ks []exam.Key) {
	for _, i := range exam.Items() {
		for _, s := range i.Info().Sites {
			ks = append(ks, exam.Key{Item: i, Site: s})
		}
	}
	return ks
}

// Reference makes a practice of a size, the same for each seed but for ids and keys. Its journal
// is written directly, without a sync for each action, and the index is built from it.
func Reference(dir string, z Size, seed uint64, o storage.Options) (Made, error) {
	m := Made{Dir: dir}
	s, err := storage.Create(dir, o)
	if err != nil {
		return m, err
	}
	w := &journalWriter{dir: dir, keys: s.Bag().Ring, epoch: s.Bag().Ring.Current(), stream: change.Stream{Device: s.Incarnation(), Site: s.Site()}, before: map[exam.ID]uint64{}}
	if err := s.Close(); err != nil {
		return m, err
	}
	rng := rand.New(rand.NewPCG(seed, 7))
	cells := allCells()
	start := time.Date(2016, 1, 4, 9, 0, 0, 0, time.FixedZone("", 3600))
	for i := range z.Patients + 1 {
		visits, findings := z.Visits, z.Findings
		if i == z.Patients {
			visits, findings = z.BigVisits, z.BigFindings
		}
		p := exam.Patient{ID: storage.NewID(), Name: fmt.Sprintf("%s %d", names[rng.IntN(len(names))], i), Species: exam.Dog,
			Breed: "mixed breed", Owner: exam.Contact{Name: fmt.Sprintf("Owner %d", i), Phone: fmt.Sprintf("555 %04d", i%10000)}}
		if visits == 0 {
			continue
		}
		if i == z.Patients {
			m.Big = p.ID
		}
		m.Patients = append(m.Patients, p.ID)
		first := start.Add(time.Duration(i%2000) * 24 * time.Hour)
		w.add(first, storage.PatientEdits(exam.Patient{}, p))
		for n := range visits {
			v := exam.Visit{ID: storage.NewID(), Patient: p.ID, Examined: first.Add(time.Duration(n) * 7 * 24 * time.Hour), Zone: "Europe/Paris", Examiner: "R. Okafor", Protocol: "full"}
			w.add(v.Examined, storage.VisitEdits(exam.Visit{}, v))
			var es []storage.Edit
			at := rng.IntN(len(cells) - findings)
			for k := range findings {
				c := cells[at+k]
				in := c.Item.Info()
				f := exam.Finding{Item: c.Item, Site: c.Site, Result: exam.Graded(in.First + int8(rng.IntN(len(in.Grades))))}
				if rng.IntN(3) == 0 {
					f.How = exam.RestNormal
				}
				es = append(es, storage.FindingEdit(p.ID, v.ID, f))
				if len(es) == max(1, z.Together) {
					w.add(v.Examined, es)
					es = es[:0]
				}
			}
			w.add(v.Examined, es)
		}
	}
	if err := w.finish(); err != nil {
		return m, err
	}
	m.Changes, m.Journal = w.changes, w.total
	return m, storage.Rebuild(context.Background(), dir, o)
}

var names = []string{"Bramble", "Pepper", "Juniper", "Otis", "Mabel", "Rook", "Tansy", "Wicket", "Clover", "Fig"}

// journalWriter writes frames as the program does, but for the syncs.
type journalWriter struct {
	dir     string
	keys    change.Keys
	epoch   uint32
	stream  change.Stream
	before  map[exam.ID]uint64
	seq     uint64
	prev    change.Hash
	last    change.HLC
	file    *os.File
	size    int64
	number  int
	total   int64
	changes int
	buf     []byte
	err     error
}

func (w *journalWriter) add(at time.Time, es []storage.Edit) {
	if len(es) == 0 || w.err != nil {
		return
	}
	b := change.Batch{Stream: w.stream, First: w.seq + 1, Examiner: "R. Okafor"}
	for _, e := range es {
		w.last = max(w.last+1, change.HLCAt(at))
		w.seq++
		b.Changes = append(b.Changes, change.Change{ID: change.NewID(), Time: w.last, Kind: e.Kind, Patient: e.Patient, Record: e.Record, Field: e.Field,
			Value: e.Value, Before: change.PreviousOf(w.before[e.Patient])})
		w.before[e.Patient] = w.seq
	}
	w.changes += len(es)
	f, err := change.Seal(b, w.prev, w.epoch, w.keys)
	if err != nil {
		w.err = err
		return
	}
	w.prev = f.Hash()
	if w.file == nil || w.size+int64(len(f.Raw)) > 64<<20 {
		w.flush()
		w.close()
		w.number++
		w.file, w.err = os.OpenFile(filepath.Join(w.dir, "journal", fmt.Sprintf("%s-%08x.seg", w.stream.Name(), w.number)), os.O_CREATE|os.O_EXCL|os.O_WRONLY, 0o600)
		w.size = 0
	}
	w.buf = append(w.buf, f.Raw...)
	w.size += int64(len(f.Raw))
	w.total += int64(len(f.Raw))
	if len(w.buf) > 1<<20 {
		w.flush()
	}
}

func (w *journalWriter) flush() {
	if w.err == nil && w.file != nil {
		_, w.err = w.file.Write(w.buf)
	}
	w.buf = w.buf[:0]
}

func (w *journalWriter) close() {
	if w.file == nil {
		return
	}
	if w.err == nil {
		w.err = w.file.Truncate((w.size + 1<<20 - 1) &^ (1<<20 - 1)) // the room made ready
	}
	if w.err == nil {
		w.err = w.file.Sync()
	}
	if err := w.file.Close(); w.err == nil {
		w.err = err
	}
	w.file = nil
}

func (w *journalWriter) finish() error { w.flush(); w.close(); return w.err }
