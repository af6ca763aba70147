package storage

import (
	"bytes"
	"crypto/cipher"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"runtime/debug"
	"syscall"
	"time"

	"github.com/fxamacker/cbor/v2"
	"go.etcd.io/bbolt"
	bolterrors "go.etcd.io/bbolt/errors"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/merge"
)

// The index holds what the journals say, worked out: each record with all its versions, for
// each patient a manifest, the rows of the caseload in pages, and how far each stream has
// been taken in. It can be thrown away at any time.
//
//	meta      version  in clear: the version of the index
//	          state    where each stream stands, joined patients, count and sum of each bucket
//	records   PATIENT RECORD (16 bytes each, HMACs)  the record
//	patients  PATIENT                                the patient's manifest
//	places    RECORD                                 the patient that a visit belongs to
//	pages     1 byte                                 the caseload's rows of 1/256 of the patients
//
// Every value but the version is sealed, with its bucket and key as additional data. The sum
// of a bucket is the sum, modulo 2²⁵⁶, of an HMAC over key, nonce and tag of each value in
// it: it can be kept up to date one value at a time, and shows lost, old and foreign values.
const (
	indexFile    = "index.db"
	indexVersion = "cordwalk index 1"
)

var (
	bucketMeta     = []byte("meta")
	bucketRecords  = []byte("records")
	bucketPatients = []byte("patients")
	bucketPlaces   = []byte("places")
	bucketPages    = []byte("pages")
	keyVersion     = []byte("version")
	keyState       = []byte("state")
)

// errIndex means that the index is damaged: it is set aside and rebuilt.
var errIndex = errors.New("the index is damaged")

// errForeignIndex means that the index has another version.
var errForeignIndex = errors.New("the index is of another version")

// tally is the count and running sum of a bucket, or of one patient's records.
type tally struct {
	Count uint64    `cbor:"1,keyasint"`
	Sum   merge.Sum `cbor:"2,keyasint"`
}

func (t *tally) add(mark [32]byte) { t.Count++; t.Sum = t.Sum.Add(mark) }

func (t *tally) sub(mark [32]byte) { t.Count--; t.Sum = t.Sum.Sub(mark) }

// indexState is the sealed value meta/state.
type indexState struct {
	Practice exam.ID       `cbor:"1,keyasint"`
	Streams  []streamState `cbor:"2,keyasint"`
	Edges    [][2]exam.ID  `cbor:"3,keyasint"` // joined patients
	Records  tally         `cbor:"4,keyasint"`
	Patients tally         `cbor:"5,keyasint"`
	Places   tally         `cbor:"6,keyasint"`
	Pages    tally         `cbor:"7,keyasint"`
	Clock    change.HLC    `cbor:"8,keyasint"` // the highest reading that this device gave or adopted
}

// manifest is what the index knows of a patient as a whole.
type manifest struct {
	Patient exam.ID   `cbor:"1,keyasint"`
	Records tally     `cbor:"2,keyasint"`
	Last    []lastSeq `cbor:"3,keyasint"` // the last change to this patient in each stream
}

type lastSeq struct {
	Stream change.Stream `cbor:"1,keyasint"`
	Seq    uint64        `cbor:"2,keyasint"`
}

func (m *manifest) last(s change.Stream) uint64 {
	for _, l := range m.Last {
		if l.Stream == s {
			return l.Seq
		}
	}
	return 0
}

func (m *manifest) note(s change.Stream, seq uint64) {
	for i := range m.Last {
		if m.Last[i].Stream == s {
			m.Last[i].Seq = max(m.Last[i].Seq, seq)
			return
		}
	}
	m.Last = append(m.Last, lastSeq{s, seq})
}

// seals seals and names the values of an index.
type seals struct {
	aead   cipher.AEAD
	names  key.Secret
	marks  key.Secret
	owners *ownerKeys
}

func newSeals(fsys disk.FS, dir string, r *key.Ring) *seals {
	s := &seals{aead: r.Index().AEAD(), names: r.Index().Derive("names"), marks: r.Index().Derive("marks"), owners: &ownerKeys{fs: fsys, dir: dir}}
	s.owners.keys.Store(r)
	return s
}

const nameSize = 16

func (s *seals) patientKey(id exam.ID) []byte {
	m := s.names.MAC([]byte("patient"), id[:])
	return m[:nameSize]
}

// placeKey names a record without its patient.
func (s *seals) placeKey(kind Kind, id exam.ID) []byte {
	m := s.names.MAC([]byte("record"), []byte{byte(kind >> 8), byte(kind)}, id[:])
	return m[:nameSize]
}

func (s *seals) recordKey(k recordKey) []byte {
	return append(s.patientKey(k.patient), s.placeKey(k.kind, k.id)...)
}

func additional(bucket, k []byte) []byte {
	b := make([]byte, 0, len(bucket)+1+len(k))
	b = append(append(b, bucket...), 0)
	return append(b, k...)
}

func (s *seals) seal(bucket, k, plain []byte) []byte {
	n := s.aead.NonceSize()
	out := make([]byte, n, n+len(plain)+s.aead.Overhead())
	copy(out, randomBytes(n))
	return s.aead.Seal(out, out[:n], plain, additional(bucket, k))
}

func (s *seals) open(bucket, k, sealed []byte) ([]byte, error) {
	n := s.aead.NonceSize()
	if len(sealed) < n+s.aead.Overhead() {
		return nil, fmt.Errorf("%w: a value in %s is cut off", errIndex, bucket)
	}
	plain, err := s.aead.Open(nil, sealed[:n], sealed[n:], additional(bucket, k))
	if err != nil {
		return nil, fmt.Errorf("%w: a value in %s does not open", errIndex, bucket)
	}
	return plain, nil
}

// mark is what a sealed value adds to the sums.
func (s *seals) mark(bucket, k, sealed []byte) [32]byte {
	n := min(s.aead.NonceSize(), len(sealed))
	t := max(n, len(sealed)-s.aead.Overhead())
	return s.marks.MAC(bucket, k, sealed[:n], sealed[t:])
}

// put seals a value, stores it and brings tallies up to date.
func (s *seals) put(b *bbolt.Bucket, name, k, plain []byte, tallies ...*tally) error {
	if old := b.Get(k); old != nil {
		m := s.mark(name, k, old)
		for _, t := range tallies {
			t.sub(m)
		}
	}
	sealed := s.seal(name, k, plain)
	m := s.mark(name, k, sealed)
	for _, t := range tallies {
		t.add(m)
	}
	return b.Put(k, sealed)
}

// index is an open index.
type index struct {
	db    *bbolt.DB
	path  string
	lives []string // this device's incarnations
	*seals
}

func boltOptions() *bbolt.Options {
	return &bbolt.Options{Timeout: time.Second, FreelistType: bbolt.FreelistMapType}
}

// guard runs f and turns a panic of bbolt, or a fault in the memory it maps, into errIndex.
func guard(f func() error) (err error) {
	defer debug.SetPanicOnFault(debug.SetPanicOnFault(true))
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("%w: %v", errIndex, r)
		}
	}()
	return f()
}

// openIndex opens the index and checks that it is ours. The error is fs.ErrNotExist,
// errForeignIndex or errIndex where it has to be built anew.
func openIndex(fsys disk.FS, path string, s *seals, lives []string, practice exam.ID) (x *index, st indexState, err error) {
	if _, err := os.Stat(path); err != nil {
		return nil, st, err
	}
	err = guard(func() error {
		o := boltOptions()
		o.NoSync = !disk.Syncs(fsys)
		o.NoGrowSync = o.NoSync
		db, err := bbolt.Open(path, 0o600, o)
		if err != nil {
			return indexError(err)
		}
		x = &index{db, path, lives, s}
		return db.View(func(tx *bbolt.Tx) error {
			st, err = x.state(tx)
			if err == nil && st.Practice != practice {
				err = fmt.Errorf("%w: it belongs to another practice", errForeignIndex)
			}
			return err
		})
	})
	if err != nil {
		x.abandon()
		return nil, st, err
	}
	return x, st, nil
}

// indexError tells damage from what the system says.
func indexError(err error) error {
	var path *fs.PathError
	var errno syscall.Errno
	if errors.As(err, &path) || errors.As(err, &errno) || errors.Is(err, bolterrors.ErrTimeout) {
		return err
	}
	return fmt.Errorf("%w: %w", errIndex, err)
}

func (x *index) state(tx *bbolt.Tx) (st indexState, err error) {
	b := tx.Bucket(bucketMeta)
	if b == nil {
		return st, fmt.Errorf("%w: it has no state", errIndex)
	}
	v := b.Get(keyVersion)
	if string(v) != indexVersion {
		if bytes.HasPrefix(v, []byte("cordwalk index ")) {
			return st, errForeignIndex
		}
		return st, fmt.Errorf("%w: it says no version", errIndex)
	}
	plain, err := x.open(bucketMeta, keyState, b.Get(keyState))
	if err != nil {
		return st, err
	}
	if err := indexDec.Unmarshal(plain, &st); err != nil {
		return st, fmt.Errorf("%w: its state: %w", errIndex, err)
	}
	for _, name := range [][]byte{bucketRecords, bucketPatients, bucketPlaces, bucketPages} {
		if tx.Bucket(name) == nil {
			return st, fmt.Errorf("%w: it has no bucket %s", errIndex, name)
		}
	}
	return st, nil
}

func (x *index) putState(tx *bbolt.Tx, st indexState) error {
	plain, err := valueEnc.Marshal(st)
	if err != nil {
		return err
	}
	return tx.Bucket(bucketMeta).Put(keyState, x.seal(bucketMeta, keyState, plain))
}

// createIndex makes an empty index beside its place, which is expected to grow to about size.
// finish gives it its name.
func createIndex(fsys disk.FS, path string, s *seals, lives []string, size int64) (*index, error) {
	tmp := disk.Temporary(path)
	if err := fsys.Remove(tmp); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return nil, err
	}
	if err := disk.At(fsys, "index create", tmp); err != nil {
		return nil, err
	}
	var x *index
	err := guard(func() error {
		o := boltOptions()
		o.NoSync, o.NoGrowSync = true, true       // nothing relies on it until finish has synced it
		o.InitialMmapSize = int(min(size, 1<<30)) // mapped once, not anew at each growth
		db, err := bbolt.Open(tmp, 0o600, o)
		if err != nil {
			return err
		}
		x = &index{db, tmp, lives, s}
		return db.Update(func(tx *bbolt.Tx) error {
			for _, name := range [][]byte{bucketMeta, bucketRecords, bucketPatients, bucketPlaces, bucketPages} {
				if _, err := tx.CreateBucket(name); err != nil {
					return err
				}
			}
			return tx.Bucket(bucketMeta).Put(keyVersion, []byte(indexVersion))
		})
	})
	if err != nil {
		x.abandon()
		return nil, err
	}
	return x, nil
}

// finish syncs a new index, gives it its name and closes it.
func (x *index) finish(fsys disk.FS, path string) error {
	err := guard(func() error {
		if disk.Syncs(fsys) {
			if err := x.db.Sync(); err != nil {
				return err
			}
		}
		return x.db.Close()
	})
	if err != nil {
		return err
	}
	if err := disk.At(fsys, "index rename", x.path); err != nil {
		return err
	}
	if err := fsys.Rename(x.path, path); err != nil {
		return err
	}
	return fsys.SyncDir(filepath.Dir(path))
}

func (x *index) close() error { return guard(x.db.Close) }

// abandon lets go of an index that may be beyond closing.
func (x *index) abandon() {
	if x == nil || x.db == nil {
		return
	}
	done := make(chan struct{})
	go func() {
		defer close(done)
		_ = guard(x.db.Close)
	}()
	select {
	case <-done:
	case <-time.After(200 * time.Millisecond): // a panic left its locks taken: the file is set aside, the rest ends with the process
	}
}

// view runs f on a snapshot.
func (x *index) view(f func(tx *bbolt.Tx) error) error {
	return guard(func() error { return x.db.View(f) })
}

// record reads one record, nil if it is not there.
func (x *index) record(tx *bbolt.Tx, k recordKey) (*record, error) {
	name := x.recordKey(k)
	sealed := tx.Bucket(bucketRecords).Get(name)
	if sealed == nil {
		return nil, nil
	}
	return x.decode(name, sealed)
}

func (x *index) decode(name, sealed []byte) (*record, error) {
	plain, err := x.open(bucketRecords, name, sealed)
	if err != nil {
		return nil, err
	}
	r, err := decodeRecord(plain)
	if err != nil {
		return nil, fmt.Errorf("%w: %w", errIndex, err)
	}
	return r, nil
}

// manifest reads a patient's manifest, nil if it is not there.
func (x *index) manifest(tx *bbolt.Tx, patient exam.ID) (*manifest, error) {
	k := x.patientKey(patient)
	sealed := tx.Bucket(bucketPatients).Get(k)
	if sealed == nil {
		return nil, nil
	}
	return x.decodeManifest(k, sealed)
}

func (x *index) decodeManifest(k, sealed []byte) (*manifest, error) {
	plain, err := x.open(bucketPatients, k, sealed)
	if err != nil {
		return nil, err
	}
	m := &manifest{}
	if err := indexDec.Unmarshal(plain, m); err != nil {
		return nil, fmt.Errorf("%w: a manifest: %w", errIndex, err)
	}
	return m, nil
}

// records reads all records of a patient and verifies their count and sum.
func (x *index) records(tx *bbolt.Tx, patient exam.ID, f func(name, plain []byte) error) (*manifest, error) {
	m, err := x.manifest(tx, patient)
	if err != nil {
		return nil, err
	}
	var have tally
	prefix := x.patientKey(patient)
	c := tx.Bucket(bucketRecords).Cursor()
	if !tx.Writable() { // there the values are those of the mapped file
		x.readAhead(c, prefix)
	}
	for k, v := c.Seek(prefix); k != nil && bytes.HasPrefix(k, prefix); k, v = c.Next() {
		plain, err := x.open(bucketRecords, k, v)
		if err != nil {
			return nil, err
		}
		have.add(x.mark(bucketRecords, k, v))
		if err := f(k, plain); err != nil {
			return nil, err
		}
	}
	if m == nil {
		if have.Count > 0 {
			return nil, fmt.Errorf("%w: %d records of a patient without a manifest", errIndex, have.Count)
		}
		return nil, nil
	}
	if m.Patient != patient || have != m.Records {
		return nil, fmt.Errorf("%w: it has %d records of a patient where there were %d, or older ones", errIndex, have.Count, m.Records.Count)
	}
	return m, nil
}

// readAhead tells the system that all values under a prefix are about to be read, where they
// lie together as they do after a rebuild. bbolt asks for its file not to be read ahead.
func (x *index) readAhead(c *bbolt.Cursor, prefix []byte) {
	k, first := c.Seek(prefix)
	if k == nil || !bytes.HasPrefix(k, prefix) || len(first) == 0 {
		return
	}
	after := bytes.Clone(prefix)
	for i := len(after) - 1; i >= 0; i-- {
		if after[i]++; after[i] != 0 {
			break
		}
	}
	if k, _ = c.Seek(after); k == nil {
		k, _ = c.Last()
	} else {
		k, _ = c.Prev()
	}
	if k == nil || !bytes.HasPrefix(k, prefix) {
		return
	}
	willNeed(first, k)
}

// indexDec reads what this device wrote and sealed itself; its limits only bound damage.
var indexDec = func() cbor.DecMode {
	m, err := cbor.DecOptions{MaxArrayElements: 1 << 24, MaxMapPairs: 1 << 16}.DecMode()
	if err != nil {
		panic(err) // a mistake in the options, found by any test
	}
	return m
}()

// store writes changed records of one patient, its manifest and its row of the caseload.
func (x *index) store(tx *bbolt.Tx, st *indexState, patient exam.ID, records []*record) error {
	m, err := x.manifest(tx, patient)
	if err != nil {
		return err
	}
	if m == nil {
		m = &manifest{Patient: patient}
	}
	bucket := tx.Bucket(bucketRecords)
	for _, r := range records {
		if err := x.put(bucket, bucketRecords, x.recordKey(r.key()), r.encode(), &m.Records, &st.Records); err != nil {
			return err
		}
		if r.kind == KindVisit {
			k := x.placeKey(r.kind, r.id)
			if tx.Bucket(bucketPlaces).Get(k) == nil {
				if err := x.put(tx.Bucket(bucketPlaces), bucketPlaces, k, patient[:], &st.Places); err != nil {
					return err
				}
			}
		}
		for _, f := range r.fields {
			for _, c := range f.versions {
				m.note(c.Stream, c.Seq)
			}
		}
	}
	plain, err := valueEnc.Marshal(m)
	if err != nil {
		return err
	}
	if err := x.put(tx.Bucket(bucketPatients), bucketPatients, x.patientKey(patient), plain, &st.Patients); err != nil {
		return err
	}
	if patient.IsZero() {
		return nil
	}
	return x.storeRow(tx, st, patient)
}

func randomBytes(n int) []byte {
	b := make([]byte, n)
	fillRandom(b)
	return b
}
