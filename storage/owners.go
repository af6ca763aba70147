package storage

import (
	"context"
	"encoding/binary"
	"errors"
	"hash/crc32"
	"io/fs"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"sync/atomic"

	"go.etcd.io/bbolt"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// The contact data of an owner are sealed in the journal under a key of their own, which lies
// outside it: a journal cannot forget, but a key can be destroyed. Each patient's owner is
// an owner of their own here, named by the patient's id.
//
// The keys stand in owners.keys, 128 bytes each, sealed under the practice's key: a place is never
// torn by a power cut, since it lies within one sector. A key is on the disk before the
// first entry that needs it. Erasing a key writes the file anew without it; what the disk
// itself keeps of the old file is beyond this program's reach.
const (
	ownersFile  = "owners.keys"
	slotSize    = 128
	slotMagic   = "CWok"
	slotSealed  = 4 + 24 + 32 + 16 // see key.Ring.SealOwnerKey
	fieldErased = "erased/"
)

// ErrErased means that an owner's contact data were erased on request.
var ErrErased = errors.New("erased at the owner's request")

// ownerKeys holds the keys of owners. It is safe for use by several goroutines.
type ownerKeys struct {
	fs   disk.FS
	dir  string
	keys atomic.Pointer[key.Ring] // replaced when the practice gets a new epoch

	mu     sync.Mutex
	read   bool
	sealed map[[nameSize]byte][][]byte // usually one; two where two devices made one while apart
	order  [][nameSize]byte
	open   map[exam.ID][]key.OwnerKey
	turn   uint64    // counts changes
	file   disk.File // to append to; nil: not open, or not to be trusted
	end    int64
	bad    []Problem
}

func (o *ownerKeys) ring() *key.Ring { return o.keys.Load() }

func (o *ownerKeys) path() string { return filepath.Join(o.dir, ownersFile) }

func (o *ownerKeys) name(owner exam.ID) (n [nameSize]byte) {
	m := o.ring().Names().MAC([]byte("owner"), owner[:])
	copy(n[:], m[:])
	return n
}

// load reads the file once. mu must be held.
func (o *ownerKeys) load() error {
	if o.read {
		return nil
	}
	o.sealed, o.open, o.order, o.bad = map[[nameSize]byte][][]byte{}, map[exam.ID][]key.OwnerKey{}, nil, nil
	if err := disk.Recover(o.fs, o.path(), func(b []byte) bool { return len(b)%slotSize == 0 }); err != nil && !errors.Is(err, fs.ErrPermission) {
		return err
	}
	b, err := disk.ReadFile(o.fs, o.path(), 1<<30)
	if errors.Is(err, fs.ErrNotExist) {
		o.read = true
		return nil
	}
	if err != nil {
		return err
	}
	o.end = int64(len(b)+slotSize-1) / slotSize * slotSize
	for at := 0; at < len(b); at += slotSize {
		slot := b[at:min(at+slotSize, len(b))]
		if allZero(slot) {
			continue
		}
		n, sealed, ok := parseSlot(slot)
		if !ok {
			o.bad = append(o.bad, Problem{File: ownersFile, Offset: int64(at), Length: int64(len(slot)), What: "the key of an owner's contact data is damaged; those data cannot be read here"})
			continue
		}
		o.note(n, sealed)
	}
	o.read = true
	return nil
}

// note keeps a sealed key in memory.
func (o *ownerKeys) note(n [nameSize]byte, sealed []byte) {
	if _, there := o.sealed[n]; !there {
		o.order = append(o.order, n)
	}
	o.sealed[n] = append(o.sealed[n], sealed)
	o.turn++
}

func makeSlot(n [nameSize]byte, sealed []byte) []byte {
	b := make([]byte, 0, slotSize)
	b = append(b, slotMagic...)
	b = append(b, 1, 0, 0, 0) // version
	b = append(b, n[:]...)
	b = append(b, sealed...)
	b = binary.BigEndian.AppendUint32(b, crc32.Checksum(b, crc32.MakeTable(crc32.Castagnoli)))
	return append(b, make([]byte, slotSize-len(b))...)
}

func parseSlot(b []byte) (n [nameSize]byte, sealed []byte, ok bool) {
	const body = 8 + nameSize + slotSealed
	if len(b) != slotSize || string(b[:4]) != slotMagic || b[4] != 1 ||
		crc32.Checksum(b[:body], crc32.MakeTable(crc32.Castagnoli)) != binary.BigEndian.Uint32(b[body:]) || !allZero(b[body+4:]) {
		return n, nil, false
	}
	return [nameSize]byte(b[8 : 8+nameSize]), b[8+nameSize : body : body], true
}

// get returns an owner's keys, none if there is none.
func (o *ownerKeys) get(owner exam.ID) ([]key.OwnerKey, error) {
	o.mu.Lock()
	defer o.mu.Unlock()
	return o.getLocked(owner)
}

func (o *ownerKeys) getLocked(owner exam.ID) (ks []key.OwnerKey, err error) {
	if err := o.load(); err != nil {
		return nil, err
	}
	if ks, ok := o.open[owner]; ok {
		return ks, nil
	}
	for _, sealed := range o.sealed[o.name(owner)] {
		k, err := o.ring().OpenOwnerKey(owner, sealed)
		if err != nil {
			return nil, err
		}
		ks = append(ks, k)
	}
	if len(o.open) > 1000 {
		clear(o.open)
	}
	o.open[owner] = ks
	return ks, nil
}

// need returns an owner's key and makes it durably if it is not there.
func (o *ownerKeys) need(owner exam.ID) (key.OwnerKey, error) {
	o.mu.Lock()
	defer o.mu.Unlock()
	ks, err := o.getLocked(owner)
	if err != nil || len(ks) > 0 {
		if err != nil {
			return key.OwnerKey{}, err
		}
		return ks[0], nil
	}
	k := key.NewSecret()
	return k, o.add(owner, k)
}

// add stores a key durably. mu must be held.
func (o *ownerKeys) add(owner exam.ID, k key.OwnerKey) error {
	n, sealed := o.name(owner), o.ring().SealOwnerKey(owner, k)
	if err := o.append(makeSlot(n, sealed)); err != nil {
		// Nothing is known about the end of the file now: write it anew.
		o.forget()
		if rerr := o.rewrite(n, sealed); rerr != nil {
			return errors.Join(err, rerr)
		}
	}
	o.note(n, sealed)
	delete(o.open, owner)
	return nil
}

func (o *ownerKeys) append(slot []byte) error {
	if o.file == nil {
		f, err := o.fs.Edit(o.path())
		if err != nil {
			return err
		}
		o.file = f
	}
	if _, err := o.file.WriteAt(slot, o.end); err != nil {
		return err
	}
	if err := o.file.Sync(); err != nil {
		return err
	}
	o.end += slotSize
	return nil
}

// forget closes the file. mu must be held.
func (o *ownerKeys) forget() {
	if o.file != nil {
		_ = o.file.Close()
		o.file = nil
	}
}

// rewrite writes the file anew, with one key more or, where sealed is nil, without those of a name.
func (o *ownerKeys) rewrite(n [nameSize]byte, sealed []byte) error {
	var b []byte
	for _, x := range o.order {
		if x == n && sealed == nil {
			continue
		}
		for _, s := range o.sealed[x] {
			b = append(b, makeSlot(x, s)...)
		}
	}
	if sealed != nil {
		b = append(b, makeSlot(n, sealed)...)
	}
	if err := disk.Replace(o.fs, o.path(), b); err != nil {
		return err
	}
	o.end = int64(len(b))
	return nil
}

// destroy forgets an owner's key for ever. It is no error if it is not there.
func (o *ownerKeys) destroy(owner exam.ID) error {
	o.mu.Lock()
	defer o.mu.Unlock()
	if err := o.load(); err != nil {
		return err
	}
	n := o.name(owner)
	if _, ok := o.sealed[n]; !ok {
		return nil
	}
	o.forget()
	if err := o.rewrite(n, nil); err != nil {
		return err
	}
	delete(o.sealed, n)
	delete(o.open, owner)
	o.turn++
	return nil
}

func (o *ownerKeys) close() {
	o.mu.Lock()
	defer o.mu.Unlock()
	o.forget()
}

// problems returns what is wrong in the file.
func (o *ownerKeys) problems() ([]Problem, error) {
	o.mu.Lock()
	defer o.mu.Unlock()
	err := o.load()
	return o.bad, err
}

// A sealed contact is a list of the owner's id and the sealed value, where a contact in clear is a map.
type wireSealed struct {
	_      struct{} `cbor:",toarray"`
	Owner  exam.ID
	Sealed []byte
}

func sealedContact(b []byte) (w wireSealed, ok bool) {
	if len(b) < 2 || b[0] != valueVersion || b[1]&0xe0 != 0x80 {
		return w, false
	}
	return w, unpack(b, &w) == nil
}

func contactContext(owner exam.ID) []byte { return append([]byte("contact\x00"), owner[:]...) }

// sealContact seals a contact's value under its owner's key.
func (o *ownerKeys) sealContact(owner exam.ID, value []byte) ([]byte, error) {
	k, err := o.need(owner)
	if err != nil {
		return nil, err
	}
	return pack(wireSealed{Owner: owner, Sealed: k.Seal(value, contactContext(owner))}), nil
}

// openContact returns a contact's value, whether it is sealed or not. The error is ErrErased
// if its key is gone.
func (o *ownerKeys) openContact(b []byte) ([]byte, error) {
	w, ok := sealedContact(b)
	if !ok {
		return b, nil
	}
	if o == nil {
		return nil, ErrErased
	}
	ks, err := o.get(w.Owner)
	if err != nil {
		return nil, err
	}
	err = ErrErased
	for _, k := range ks {
		var clear []byte
		if clear, err = k.Open(w.Sealed, contactContext(w.Owner)); err == nil {
			return clear, nil
		}
	}
	return nil, err
}

// ownersRecord holds what is said of owners: the field erased/ID of each whose data were erased.
var ownersRecord = recordKey{kind: change.KindOwner}

// erased reports whether an owner's data were erased on request.
func (s *Store) erased(owner exam.ID) (bool, error) {
	r, err := s.baseRecord(ownersRecord)
	return err == nil && len(r.versions(fieldErased+owner.String())) > 0, err
}

// EraseOwner erases a patient's owner at the owner's request: it destroys the keys of the contact
// data, so that they cannot be read in the journal, in copies of it or on devices that
// learn of it, and leaves an entry that says so. Backups that hold a key still can show them.
func (s *Store) EraseOwner(ctx context.Context, examiner string, patient exam.ID, reason string) error {
	e := Edit{Kind: change.KindOwner, Field: fieldErased + patient.String(), Value: []byte{0xf5}, reason: reason}
	if _, err := s.Apply(ctx, examiner, e, Edit{Patient: patient, Record: patient, Kind: KindPatient, Field: fieldOwner}); err != nil {
		return err
	}
	return explain("destroying the key of an owner's contact data", s.seals.owners.destroy(patient))
}

// ForgetOwner destroys the keys of an owner whose data were erased, perhaps on another device, as the index does by
// itself a little later. It is no error if they are gone, or if nothing says that they were erased.
func (s *Store) ForgetOwner(owner exam.ID) error {
	if gone, err := s.erased(owner); err != nil || !gone {
		return err
	}
	return explain("destroying the key of an owner's contact data", s.seals.owners.destroy(owner))
}

// OwnerKey returns an owner's first key, sealed for devices of this practice; false if there is none.
// The owner is named by the patient's id.
func (s *Store) OwnerKey(owner exam.ID) (sealed []byte, ok bool, err error) {
	ks, err := s.seals.owners.get(owner)
	if len(ks) == 0 || err != nil {
		return nil, false, explain("reading the key of an owner's contact data", err)
	}
	return s.seals.owners.ring().SealOwnerKey(owner, ks[0]), true, nil
}

// OwnerKeys calls f with each key of each owner that is known here, unless none was added or
// destroyed since the call that returned turn. The first call passes 0.
func (s *Store) OwnerKeys(ctx context.Context, turn uint64, f func(owner exam.ID, k key.OwnerKey) error) (now uint64, err error) {
	o := s.seals.owners
	o.mu.Lock()
	err = o.load()
	now = o.turn
	o.mu.Unlock()
	if err != nil || now == turn {
		return now, explain("reading the keys of owners' contact data", err)
	}
	rows, err := s.patients(ctx)
	if err != nil {
		return turn, err
	}
	for _, id := range rows {
		ks, err := o.get(id)
		if err != nil {
			return turn, explain("reading the key of an owner's contact data", err)
		}
		for _, k := range ks {
			if err := f(id, k); err != nil {
				return turn, err
			}
		}
	}
	return now, nil
}

// patients returns the ids of all patients.
func (s *Store) patients(ctx context.Context) (ids []exam.ID, err error) {
	err = s.onIndex(func(x *index, tx *bbolt.Tx) error {
		return tx.Bucket(bucketPatients).ForEach(func(k, v []byte) error {
			m, err := x.decodeManifest(k, v)
			if err != nil {
				return err
			}
			ids = append(ids, m.Patient)
			return ctx.Err()
		})
	})
	s.mu.RLock()
	defer s.mu.RUnlock()
	for p := range s.changed {
		if !slices.Contains(ids, p) {
			ids = append(ids, p)
		}
	}
	return ids, explain("reading the patients", err)
}

// OwnersFile is the name of the file of owners' keys in a store's folder and in its backups.
const OwnersFile = ownersFile

// StillHeld returns the owners whose data were erased here on request and whose key stands in a copy of a file of
// owners' keys, as a backup holds it, or who are among others: with the key the data could still be shown.
func (s *Store) StillHeld(file []byte, others []exam.ID) ([]exam.ID, error) {
	r, err := s.baseRecord(ownersRecord)
	if err != nil {
		return nil, explain("looking for owners whose data were erased", err)
	}
	have := map[[nameSize]byte]bool{}
	for ; len(file) >= slotSize; file = file[slotSize:] {
		if n, _, ok := parseSlot(file[:slotSize]); ok {
			have[n] = true
		}
	}
	var out []exam.ID
	for _, f := range r.fields {
		if word, ok := strings.CutPrefix(f.name, fieldErased); ok {
			if id, err := exam.ParseID(word); err == nil && (have[s.seals.owners.name(id)] || slices.Contains(others, id)) {
				out = append(out, id)
			}
		}
	}
	return out, nil
}

// AddOwnerKey takes over an owner's key that another device sealed, unless the owner's data were
// erased here.
func (s *Store) AddOwnerKey(owner exam.ID, sealed []byte) error {
	o := s.seals.owners
	k, err := o.ring().OpenOwnerKey(owner, sealed)
	if err != nil {
		return err
	}
	if gone, err := s.erased(owner); err != nil || gone {
		return err
	}
	o.mu.Lock()
	ks, err := o.getLocked(owner)
	have := slices.Contains(ks, k)
	if !have && err == nil {
		err = o.add(owner, k)
	}
	o.mu.Unlock()
	if err != nil || have {
		return explain("keeping the key of an owner's contact data", err)
	}
	// The caseload shows the owner's name from now on.
	p, err := s.baseRecord(recordKey{KindPatient, owner, owner})
	if err != nil || len(p.fields) == 0 {
		return err
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.overlay[owner][p.key()] == nil {
		s.install(p, change.Stream{}, 0)
		s.poke(s.behind)
	}
	return nil
}

// forgetOwners destroys the keys of owners that an entry (perhaps of another device) says were erased.
func (s *Store) forgetOwners(records []*record) error {
	var err error
	for _, r := range records {
		if r.key() != ownersRecord {
			continue
		}
		for _, f := range r.fields {
			if word, ok := strings.CutPrefix(f.name, fieldErased); ok {
				if id, perr := exam.ParseID(word); perr == nil {
					err = errors.Join(err, s.seals.owners.destroy(id))
				}
			}
		}
	}
	return err
}
