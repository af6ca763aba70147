package storage

import (
	"context"
	"encoding/binary"
	"errors"
	"hash/crc32"
	"io/fs"
	"path/filepath"
	"sync"
	"sync/atomic"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// The contact data of an owner are sealed in the journal under a key of their own, which lies
// outside it: a journal cannot forget, but a key can be destroyed. Each patient's owner is
// an owner of their own here, named by the patient's id.
//
// The keys stand in owners/keys, 128 bytes each, sealed under the practice's key: a place is never
// torn by a power cut, since it lies within one sector. A key is on the disk before the
// first entry that needs it. Erasing a key writes the file anew without it; what the disk
// itself keeps of the old file is beyond this program's reach.
const (
	ownersDir   = "owners"
	ownersFile  = "keys"
	slotSize    = 128
	slotMagic   = "CWok"
	slotSealed  = 4 + 24 + 32 + 16 // see key.Ring.SealOwnerKey
	fieldErased = "erased"
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
	sealed map[[nameSize]byte][]byte
	order  [][nameSize]byte
	open   map[exam.ID]key.OwnerKey
	file   disk.File // to append to; nil: not open, or not to be trusted
	end    int64
	bad    []Problem
}

func (o *ownerKeys) ring() *key.Ring { return o.keys.Load() }

func (o *ownerKeys) path() string { return filepath.Join(o.dir, ownersDir, ownersFile) }

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
	o.sealed, o.open, o.order, o.bad = map[[nameSize]byte][]byte{}, map[exam.ID]key.OwnerKey{}, nil, nil
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
			o.bad = append(o.bad, Problem{File: ownersDir + "/" + ownersFile, Offset: int64(at), Length: int64(len(slot)), What: "the key of an owner's contact data is damaged; those data cannot be read here"})
			continue
		}
		if _, there := o.sealed[n]; !there {
			o.order = append(o.order, n)
		}
		o.sealed[n] = sealed
	}
	o.read = true
	return nil
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

// get returns an owner's key; false if it is not there.
func (o *ownerKeys) get(owner exam.ID) (key.OwnerKey, bool, error) {
	o.mu.Lock()
	defer o.mu.Unlock()
	return o.getLocked(owner)
}

func (o *ownerKeys) getLocked(owner exam.ID) (k key.OwnerKey, ok bool, err error) {
	if err := o.load(); err != nil {
		return k, false, err
	}
	if k, ok = o.open[owner]; ok {
		return k, true, nil
	}
	sealed, ok := o.sealed[o.name(owner)]
	if !ok {
		return k, false, nil
	}
	if k, err = o.ring().OpenOwnerKey(owner, sealed); err != nil {
		return k, false, err
	}
	if len(o.open) > 1000 {
		clear(o.open)
	}
	o.open[owner] = k
	return k, true, nil
}

// need returns an owner's key and makes it durably if it is not there.
func (o *ownerKeys) need(owner exam.ID) (key.OwnerKey, error) {
	o.mu.Lock()
	defer o.mu.Unlock()
	k, ok, err := o.getLocked(owner)
	if ok || err != nil {
		return k, err
	}
	k = key.NewSecret()
	if err := o.add(owner, o.ring().SealOwnerKey(owner, k)); err != nil {
		return k, err
	}
	o.open[owner] = k
	return k, nil
}

// add stores a sealed key durably. mu must be held.
func (o *ownerKeys) add(owner exam.ID, sealed []byte) error {
	n := o.name(owner)
	if err := o.append(makeSlot(n, sealed)); err != nil {
		// Nothing is known about the end of the file now: write it anew.
		o.forget()
		if rerr := o.rewrite(n, sealed); rerr != nil {
			return errors.Join(err, rerr)
		}
	}
	if _, there := o.sealed[n]; !there {
		o.order = append(o.order, n)
	}
	o.sealed[n] = sealed
	return nil
}

func (o *ownerKeys) append(slot []byte) error {
	if o.file == nil {
		if err := o.fs.MakeDir(filepath.Join(o.dir, ownersDir)); err != nil {
			return err
		}
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

// rewrite writes the file anew, with one key more or, where sealed is nil, without it.
func (o *ownerKeys) rewrite(n [nameSize]byte, sealed []byte) error {
	if err := o.fs.MakeDir(filepath.Join(o.dir, ownersDir)); err != nil {
		return err
	}
	if err := o.fs.SyncDir(o.dir); err != nil {
		return err
	}
	var b []byte
	for _, x := range o.order {
		if s, ok := o.sealed[x]; ok && x != n {
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
	k, ok, err := o.get(w.Owner)
	if err != nil {
		return nil, err
	}
	if !ok {
		return nil, ErrErased
	}
	return k.Open(w.Sealed, contactContext(w.Owner))
}

// EraseOwner erases a patient's owner at the owner's request: it destroys the key of the contact
// data, so that they cannot be read in the journal, in copies of it or on devices that
// learn of it, and leaves an entry that says so. Backups that hold the key still can show them.
func (s *Store) EraseOwner(ctx context.Context, examiner string, patient exam.ID, reason string) error {
	e := Edit{Patient: patient, Record: patient, Kind: change.KindOwner, Field: fieldErased, Value: pack(true), reason: reason}
	if _, err := s.Apply(ctx, examiner, e, Edit{Patient: patient, Record: patient, Kind: KindPatient, Field: fieldOwner}); err != nil {
		return err
	}
	return explain("destroying the key of an owner's contact data", s.seals.owners.destroy(patient))
}

// OwnerKey returns an owner's key, sealed for devices of this practice; false if it is not there.
// The owner is named by the patient's id.
func (s *Store) OwnerKey(owner exam.ID) (sealed []byte, ok bool, err error) {
	k, ok, err := s.seals.owners.get(owner)
	if !ok || err != nil {
		return nil, false, explain("reading the key of an owner's contact data", err)
	}
	return s.seals.owners.ring().SealOwnerKey(owner, k), true, nil
}

// AddOwnerKey takes over an owner's key that another device sealed, unless the owner's data were erased here.
func (s *Store) AddOwnerKey(owner exam.ID, sealed []byte) error {
	if _, err := s.seals.owners.ring().OpenOwnerKey(owner, sealed); err != nil {
		return err
	}
	r, err := s.baseRecord(recordKey{change.KindOwner, owner, owner})
	if err != nil || len(r.fields) > 0 {
		return err
	}
	o := s.seals.owners
	o.mu.Lock()
	_, have, err := o.getLocked(owner)
	if !have && err == nil {
		err = o.add(owner, sealed)
	}
	o.mu.Unlock()
	if err != nil {
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
		if r.kind == change.KindOwner && len(r.versions(fieldErased)) > 0 {
			err = errors.Join(err, s.seals.owners.destroy(r.id))
		}
	}
	return err
}
