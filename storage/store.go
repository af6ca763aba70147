// Package storage keeps a practice's records so that what is called saved stays saved.
//
// The truth is a journal of sealed frames that only ever grows; Apply returns when the frame
// of an action is on the disk. Beside it stands an index (bbolt) with the current state, which
// follows within a second, is never needed for safety, and is rebuilt from the journal
// whenever it is damaged, foreign or gone. Nothing is overwritten: each field keeps every
// value it had, with who set it, when and on which device.
//
// What is damaged is reported by place and everything around it is used. What a lost
// part of the journal may have touched is marked, and never served as certain.
package storage

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"path/filepath"
	"slices"
	"sync"
	"sync/atomic"
	"time"

	"go.etcd.io/bbolt"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/merge"
	"cordwalk.example/cordwalk/sync/segment"
)

const lockFile = "lock"

// The index follows the journal at most this much later.
const (
	flushAfter   = time.Second
	flushChanges = 500
)

// Options say how a store is opened.
type Options struct {
	Unlock   Unlock
	Program  string                               // written in the lock, told to a second process
	Now      func() time.Time                     // nil: time.Now
	Files    disk.FS                              // nil: the real file system
	Progress func(what string, done, total int64) // of long work; may be nil
	Notice   func(words string)                   // messages for people; may be nil; may come from another goroutine

	join *joined // see CreateJoined
}

func (o Options) withDefaults() Options {
	if o.Now == nil {
		o.Now = time.Now
	}
	if o.Files == nil {
		o.Files = disk.OS()
	}
	if o.Program == "" {
		o.Program = "another program"
	}
	if o.Progress == nil {
		o.Progress = func(string, int64, int64) {}
	}
	if o.Notice == nil {
		o.Notice = func(string) {}
	}
	return o
}

// Store is an open practice. It is safe for use by several goroutines; writes are put in a
// row, reads do not wait for the disk of a write.
//
// Locks are taken in this order: exch, absorbing, write, follow, mu.
type Store struct {
	dir   string
	o     Options
	fs    disk.FS
	id    identity
	bag   key.Bag
	seals *seals
	lock  disk.Unlocker
	clock *change.Clock

	write   sync.Mutex // one frame at a time; guards the fields below
	out     writer
	next    uint64
	prev    change.Hash
	pending *pendingFrame

	follow sync.Mutex // one flush or repair of the index at a time

	mu       sync.RWMutex // guards the fields below; never held while a frame is written
	idx      *index
	state    indexState // the index's state and all that was applied since
	overlay  map[exam.ID]map[recordKey]*record
	changed  map[exam.ID]map[recordKey]bool // what the index does not have yet
	lastOwn  map[exam.ID]uint64             // the last change to a patient in this device's stream
	behind   int                            // changes that the index does not have yet
	moved    int                            // times that a stream was read further without any change for the index
	problems []Problem
	shut     bool
	covered  bool // at the start the index held all that had been written

	absorbing sync.Mutex     // one merge of received entries at a time; taken before follow, write and mu
	wait      sync.WaitGroup // merges in the background
	stop      chan struct{}  // they are to end
	stopOnce  sync.Once

	exch  sync.Mutex // guards the fields below; taken before all others
	recv  map[change.Stream]*receiver
	heads map[change.Stream][]segment.Signed
	sums  []segment.Sum
	// backlog names streams of which much came that is not merged yet.
	backlog   map[change.Stream]bool
	committed time.Time // the last time something came
	draining  bool      // drain is running

	hurry atomic.Int32 // somebody waits for the backlog

	lateNow map[change.Stream]bool // guarded by mu: streams of which something came late

	wake chan struct{} // something is behind
	full chan struct{} // much is behind
	quit chan struct{}
	done chan struct{}

	quitOnce sync.Once
}

// Create makes a new practice in a folder, which may exist if it is empty, and opens it.
func Create(dir string, o Options) (*Store, error) {
	o = o.withDefaults()
	s, err := create(dir, o)
	if err != nil {
		return nil, explain("making the practice in "+dir, err)
	}
	return s, nil
}

// makeDirs makes a folder and those above it that are missing, durably.
func makeDirs(fsys disk.FS, dir string) error {
	there, err := disk.Exists(fsys, dir)
	if err != nil || there {
		return err
	}
	above := filepath.Dir(dir)
	if above != dir {
		if err := makeDirs(fsys, above); err != nil {
			return err
		}
	}
	if err := fsys.MakeDir(dir); err != nil {
		return err
	}
	return fsys.SyncDir(above)
}

func create(dir string, o Options) (*Store, error) {
	if err := makeDirs(o.Files, dir); err != nil {
		return nil, err
	}
	es, err := o.Files.List(dir)
	if err != nil {
		return nil, err
	}
	for _, e := range es {
		if e.Name == identityFile || e.Name == identityBackup {
			return nil, fmt.Errorf("there is a practice already: %w", fs.ErrExist)
		}
	}
	for _, e := range es {
		switch e.Name {
		case lockFile, journalDir, "files", disk.Temporary(identityFile), disk.Temporary(identityBackup):
			// left by an attempt that a power cut ended before the practice had its keys
		default:
			return nil, fmt.Errorf("the folder is not empty (%s); choose an empty or new one", e.Name)
		}
	}
	lock, err := o.Files.Lock(filepath.Join(dir, lockFile), disk.Self(o.Program, o.Now()))
	if err != nil {
		return nil, err
	}
	made := false
	defer func() {
		if !made {
			_ = lock.Unlock()
		}
	}()
	for _, d := range []string{journalDir, "files"} {
		if err := o.Files.MakeDir(filepath.Join(dir, d)); err != nil {
			return nil, err
		}
	}
	id, bag, err := newIdentity(o.Files, o.Unlock, o.Now(), o.join)
	if err != nil {
		return nil, err
	}
	if err := writeIdentity(o.Files, dir, id); err != nil {
		return nil, err
	}
	s, err := start(dir, o, lock, id, bag, nil)
	if err != nil {
		return nil, err
	}
	made = true
	return s, nil
}

// Open opens the practice in a folder. The errors *disk.Held, ErrLocked, change.ErrNewer and
// fs.ErrNotExist can be told apart with errors.As and errors.Is.
func Open(dir string, o Options) (*Store, error) {
	o = o.withDefaults()
	s, err := open(dir, o)
	if err != nil {
		return nil, explain("opening the practice in "+dir, err)
	}
	return s, nil
}

// holdsPractice reports whether the folder looks like a store, before anything is made in it.
func holdsPractice(fsys disk.FS, dir string) error {
	for _, n := range []string{identityFile, identityBackup} {
		for _, n := range []string{n, disk.Temporary(n)} {
			there, err := disk.Exists(fsys, filepath.Join(dir, n))
			if err != nil || there {
				return err
			}
		}
	}
	return fmt.Errorf("it holds no practice; make one there first, or name another folder: %w", fs.ErrNotExist)
}

func open(dir string, o Options) (*Store, error) {
	if err := holdsPractice(o.Files, dir); err != nil {
		return nil, err
	}
	lock, err := o.Files.Lock(filepath.Join(dir, lockFile), disk.Self(o.Program, o.Now()))
	if err != nil {
		return nil, err
	}
	opened := false
	defer func() {
		if !opened {
			_ = lock.Unlock()
		}
	}()
	if err := recoverIdentity(o.Files, dir); err != nil {
		return nil, err
	}
	id, damage, err := readIdentity(o.Files, dir)
	if err != nil {
		return nil, err
	}
	bag, err := id.unlock(o.Files, o.Unlock)
	if err != nil {
		return nil, err
	}
	if len(damage) > 0 { // one copy is whole: make the other one so again
		if err := writeIdentity(o.Files, dir, id); err != nil {
			return nil, err
		}
		for _, p := range damage {
			o.Notice(p.String() + "; it was made again from the other copy")
		}
	}
	s, err := start(dir, o, lock, id, bag, damage)
	if err != nil {
		return nil, err
	}
	opened = true
	return s, nil
}

// start brings index and journal together and begins to follow.
func start(dir string, o Options, lock disk.Unlocker, id identity, bag key.Bag, damage []Problem) (*Store, error) {
	s := &Store{
		dir: dir, o: o, fs: o.Files, id: id, bag: bag, seals: newSeals(o.Files, dir, bag.Ring), lock: lock,
		overlay: map[exam.ID]map[recordKey]*record{}, changed: map[exam.ID]map[recordKey]bool{}, lastOwn: map[exam.ID]uint64{},
		problems: damage, recv: map[change.Stream]*receiver{}, heads: map[change.Stream][]segment.Signed{}, backlog: map[change.Stream]bool{}, lateNow: map[change.Stream]bool{}, stop: make(chan struct{}),
		wake: make(chan struct{}, 1), full: make(chan struct{}, 1), quit: make(chan struct{}), done: make(chan struct{}),
	}
	if err := s.fs.MakeDir(filepath.Join(dir, journalDir)); err != nil {
		return nil, err
	}
	if err := s.openIndex(); err != nil {
		return nil, err
	}
	if err := s.catchUp(); err != nil {
		s.idx.abandon()
		return nil, err
	}
	go s.following()
	if s.behind > 0 {
		s.poke(s.behind)
	}
	return s, nil
}

// openIndex opens the index, or builds it where it cannot be used.
func (s *Store) openIndex() error {
	path := filepath.Join(s.dir, indexFile)
	var err error
	if s.lock.Left() {
		err = probe(path)
	}
	if err == nil {
		s.idx, s.state, err = openIndex(s.fs, path, s.seals, s.id.lives(), s.bag.Practice)
	}
	switch {
	case err == nil:
		s.covered = !s.lock.Left()
		return nil
	case errors.Is(err, fs.ErrNotExist):
		if segs, lerr := listSegments(s.fs, s.dir); lerr != nil {
			return lerr
		} else if len(segs) > 0 {
			s.o.Notice("the index was missing and is built anew from the journal")
		}
	case errors.Is(err, errForeignIndex):
		s.o.Notice("the index is of another version of this program; it is set aside and built anew from the journal")
	case errors.Is(err, errIndex):
		s.o.Notice("the index is damaged; it is set aside and built anew from the journal")
	default:
		return err
	}
	return s.rebuildIndex(context.Background(), !errors.Is(err, fs.ErrNotExist))
}

// rebuildIndex sets the index aside, if there is one, builds it anew and opens it.
func (s *Store) rebuildIndex(ctx context.Context, aside bool) error {
	path := filepath.Join(s.dir, indexFile)
	if aside {
		if err := s.fs.Rename(path, disk.Aside(path, "damaged")); err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
	}
	b := builder{ctx: ctx, fs: s.fs, dir: s.dir, bag: s.bag, seals: s.seals, lives: s.id.lives(), limits: s.id.Limits, o: s.o}
	st, problems, err := b.build()
	if err != nil {
		return err
	}
	s.problems = append(s.problems, problems...)
	if s.idx, _, err = openIndex(s.fs, path, s.seals, s.id.lives(), s.bag.Practice); err != nil {
		return err
	}
	s.state = st
	return nil
}

// catchUp takes in what the journals hold beyond the index, and finds the place where this
// device goes on writing. The store is not shared yet.
func (s *Store) catchUp() error {
	own, err := s.id.stream()
	if err != nil {
		return err
	}
	known := len(s.problems)
	fl := follower{ctx: context.Background(), fs: s.fs, keys: s.bag.Ring, state: &s.state, limits: s.id.Limits, each: s.takeIn, covered: s.covered,
		problem: func(p Problem) { s.problems = append(s.problems, p) }}
	ends, err := fl.all(s.dir)
	if err != nil {
		return err
	}
	for _, p := range s.problems[known:] {
		if !p.Minor {
			s.o.Notice(p.String())
		}
	}
	end := ends[own]
	if end.tainted {
		s.id.Earlier = append(s.id.Earlier, s.id.Incarnation)
		s.id.Incarnation = change.NewIncarnation().String()
		if err := writeIdentity(s.fs, s.dir, s.id); err != nil {
			return err
		}
		if own, err = s.id.stream(); err != nil {
			return err
		}
		end = streamEnd{}
		clear(s.lastOwn)
		s.idx.lives = s.id.lives()
	}
	st := s.state.stream(own)
	s.out = writer{fs: s.fs, dir: s.dir, stream: own}
	s.next, s.prev = st.Head+1, st.Last
	s.clock = change.NewClock(s.o.Now, s.state.Clock)
	if end.seg == nil {
		return nil
	}
	return s.out.resume(*end.seg, end.end)
}

// takeIn merges a batch from a journal into the state that the index does not have yet. The
// store is not shared yet.
func (s *Store) takeIn(b change.Batch) error {
	for _, c := range b.Changes {
		r, err := s.baseRecord(keyOf(c))
		if err != nil {
			return err
		}
		s.install(r.with(c), c.Stream, c.Seq)
		s.state.adopt(c.Time, s.o.Now())
	}
	s.behind += len(b.Changes)
	return nil
}

// install puts a record into the overlay. mu must be held, or the store not shared yet.
func (s *Store) install(r *record, stream change.Stream, seq uint64) {
	m := s.overlay[r.patient]
	if m == nil {
		m = map[recordKey]*record{}
		s.overlay[r.patient] = m
	}
	m[r.key()] = r
	d := s.changed[r.patient]
	if d == nil {
		d = map[recordKey]bool{}
		s.changed[r.patient] = d
	}
	d[r.key()] = true
	if seq > 0 && stream.Device.String() == s.id.Incarnation {
		s.lastOwn[r.patient] = seq
	}
	if r.kind == KindEdge {
		s.state.setEdges(r)
	}
}

// setEdges brings the list of joined patients up to date with an edge record.
func (st *indexState) setEdges(r *record) {
	for _, f := range r.fields {
		a, b, ok := merge.EdgeEnds(merge.Key{Kind: r.kind, Record: r.id, Field: f.name})
		if !ok {
			continue
		}
		e := [2]exam.ID{a, b}
		st.Edges = slices.DeleteFunc(slices.Clone(st.Edges), func(x [2]exam.ID) bool { return x == e })
		if merge.Joined(merge.Evaluate(f.versions, merge.Closing{})) {
			st.Edges = append(st.Edges, e)
		}
	}
}

// baseRecord returns a record as it is now, empty if it is new.
func (s *Store) baseRecord(k recordKey) (*record, error) {
	s.mu.RLock()
	r := s.overlay[k.patient][k]
	s.mu.RUnlock()
	if r != nil {
		return r, nil
	}
	err := s.onIndex(func(x *index, tx *bbolt.Tx) (err error) {
		r, err = x.record(tx, k)
		return err
	})
	if err == nil && r == nil {
		r = newRecord(k)
	}
	return r, err
}

// onIndex runs f on a snapshot of the index.
func (s *Store) onIndex(f func(x *index, tx *bbolt.Tx) error) error {
	s.mu.RLock()
	x, shut := s.idx, s.shut
	s.mu.RUnlock()
	if shut {
		return ErrShut
	}
	return x.view(func(tx *bbolt.Tx) error { return f(x, tx) })
}

// Close waits for the index to follow and gives the lock back. What was applied is safe
// whatever Close returns.
func (s *Store) Close() error {
	s.stopExchange()
	s.quitOnce.Do(func() { close(s.quit) })
	<-s.done
	s.write.Lock()
	s.mu.Lock()
	if s.shut {
		s.mu.Unlock()
		s.write.Unlock()
		return nil
	}
	s.mu.Unlock()
	ferr := s.flush()
	s.mu.Lock()
	s.shut = true
	x := s.idx
	s.mu.Unlock()
	s.out.leave()
	s.seals.owners.close()
	s.write.Unlock()
	if ferr != nil {
		s.o.Notice("the index could not be brought up to date; it will be at the next start: " + ferr.Error())
	}
	err := x.close()
	if ferr != nil || err != nil { // leave the mark of an unclean close: the index is tried with care next time
		return explain("closing the practice", errors.Join(err, s.lock.Keep()))
	}
	return explain("closing the practice", errors.Join(err, s.lock.Unlock()))
}

// Protected reports whether the store needs a passphrase or a key file.
func (s *Store) Protected() bool { return s.id.Protected }

// Device returns this device's short name.
func (s *Store) Device() string { return s.id.Device }

// Problems returns what was found wrong in the files when the store was opened.
func (s *Store) Problems() []Problem {
	s.mu.RLock()
	defer s.mu.RUnlock()
	return slices.Clone(s.problems)
}

// poke tells the follower that the index is behind, by so many changes.
func (s *Store) poke(behind int) {
	select {
	case s.wake <- struct{}{}:
	default:
	}
	if behind >= flushChanges {
		select {
		case s.full <- struct{}{}:
		default:
		}
	}
}

// following brings the index up to date in the background.
func (s *Store) following() {
	defer close(s.done)
	wait := flushAfter
	for {
		select {
		case <-s.quit:
			return
		case <-s.wake:
		}
		t := time.NewTimer(wait)
		select {
		case <-s.quit:
			t.Stop()
			return
		case <-s.full:
			t.Stop()
		case <-t.C:
		}
		s.mu.RLock()
		seen := s.idx
		s.mu.RUnlock()
		err := s.flush()
		if errors.Is(err, errIndex) {
			err = s.repair(seen, err)
		}
		if err != nil {
			s.o.Notice("the index could not be brought up to date; it is tried again: " + explain("writing the index", err).Error())
			wait = min(2*wait, time.Minute)
			s.poke(0)
			continue
		}
		wait = flushAfter
	}
}

// flush brings the index up to date with what is applied now.
func (s *Store) flush() error {
	s.follow.Lock()
	defer s.follow.Unlock()
	s.mu.RLock()
	x, behind, moved := s.idx, s.behind, s.moved
	st := s.state.clone()
	type dirty struct {
		patient exam.ID
		records []*record
	}
	var ds []dirty
	for p, keys := range s.changed {
		d := dirty{patient: p}
		for k := range keys {
			d.records = append(d.records, s.overlay[p][k])
		}
		ds = append(ds, d)
	}
	s.mu.RUnlock()
	if len(ds) == 0 && moved == 0 {
		return nil
	}
	if err := disk.At(s.fs, "index commit", x.path); err != nil {
		return err
	}
	err := guard(func() error {
		return x.db.Update(func(tx *bbolt.Tx) error {
			for _, d := range ds {
				if err := x.store(tx, &st, d.patient, d.records); err != nil {
					return err
				}
			}
			return x.putState(tx, st)
		})
	})
	if err != nil {
		return err
	}
	_ = disk.At(s.fs, "index committed", x.path)
	for _, d := range ds {
		if err := s.forgetOwners(d.records); err != nil {
			return err // the index has it; the key is destroyed at the next try or start
		}
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	s.behind -= behind
	s.moved -= moved
	s.state.Records, s.state.Patients, s.state.Places, s.state.Pages = st.Records, st.Patients, st.Places, st.Pages
	for _, d := range ds {
		for _, r := range d.records {
			if s.overlay[d.patient][r.key()] == r {
				delete(s.changed[d.patient], r.key())
			}
		}
		if len(s.changed[d.patient]) == 0 {
			delete(s.changed, d.patient)
		}
	}
	s.trim()
	return nil
}

// keepRecords is how many records stay in memory after the index has them.
const keepRecords = 64

// trim lets go of records that the index has. mu must be held.
func (s *Store) trim() {
	n := 0
	for p, m := range s.overlay {
		for k := range m {
			if s.changed[p][k] {
				continue
			}
			if n++; n > keepRecords {
				delete(m, k)
			}
		}
		if len(m) == 0 {
			delete(s.overlay, p)
		}
	}
	if len(s.lastOwn) > 10000 {
		clear(s.lastOwn)
	}
}
