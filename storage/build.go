package storage

import (
	"bytes"
	"context"
	"crypto/cipher"
	"encoding/binary"
	"errors"
	"fmt"
	"io/fs"
	"path/filepath"
	"runtime"
	"slices"
	"sync"

	"go.etcd.io/bbolt"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/merge"
)

// The index is built in two passes. The first reads the journals in their order and deals the
// changes out to 256 parts by their patient's key, in memory or, where they are many, in a
// sealed file beside the index. The second takes part after part, which is the order of the
// keys, works the records out and puts them into the new file in rising order.
const (
	parts       = 256
	spillFile   = "index.spill"
	spillAt     = 128 << 20 // bytes of changes kept in memory: a million of them
	commitAt    = 24 << 20  // bytes put in one transaction
	fillPercent = 0.95      // the pages are filled in order; little is put between later
)

// Rebuild makes the index of a store anew from its journals and puts it in the place of the
// old one. The store must not be open.
func Rebuild(ctx context.Context, dir string, o Options) error {
	o = o.withDefaults()
	return explain("rebuilding the index in "+dir, rebuild(ctx, dir, o))
}

func rebuild(ctx context.Context, dir string, o Options) error {
	if err := holdsPractice(o.Files, dir); err != nil {
		return err
	}
	lock, err := o.Files.Lock(filepath.Join(dir, lockFile), disk.Self(o.Program, o.Now()))
	if err != nil {
		return err
	}
	left := lock.Left()
	id, _, err := readIdentity(o.Files, dir)
	var bag key.Bag
	if err == nil {
		bag, err = id.unlock(o.Files, o.Unlock)
	}
	if err == nil {
		b := builder{ctx: ctx, fs: o.Files, dir: dir, bag: bag, seals: newSeals(o.Files, dir, bag.Ring), lives: id.lives(), limits: id.Limits, o: o}
		var problems []Problem
		_, problems, err = b.build()
		for _, p := range problems {
			if !p.Minor {
				o.Notice(p.String())
			}
		}
	}
	if err != nil && left { // the old index is still to be tried with care
		return errors.Join(err, lock.Keep())
	}
	return errors.Join(err, lock.Unlock())
}

// builder makes an index anew.
type builder struct {
	ctx    context.Context
	fs     disk.FS
	dir    string
	bag    key.Bag
	seals  *seals
	lives  []string
	limits map[string]uint64
	o      Options

	st       indexState
	problems []Problem
	dealt    tables
	heap     [parts][]byte
	patient  exam.ID // whose part is known
	part0    int
	held     int
	spill    disk.File
	spillEnd int64
	spilled  [parts][]stretch
	total    int64 // bytes of journal
	rooms    sync.Pool
	aead     cipher.AEAD
}

// stretch is a sealed piece of one part in the spill file.
type stretch struct{ at, n int64 }

func (b *builder) build() (indexState, []Problem, error) {
	b.st.Practice, b.part0 = b.bag.Practice, -1
	b.aead = b.bag.Ring.Index().Derive("spill").AEAD()
	defer b.dropSpill()
	if err := b.deal(); err != nil {
		return b.st, nil, err
	}
	path := filepath.Join(b.dir, indexFile)
	x, err := createIndex(b.fs, path, b.seals, b.lives, b.total/2)
	if err != nil {
		return b.st, nil, err
	}
	if err := b.fill(x); err != nil {
		x.abandon()
		return b.st, nil, err
	}
	return b.st, b.problems, x.finish(b.fs, path)
}

// deal is the first pass.
func (b *builder) deal() error {
	segs, err := listSegments(b.fs, b.dir)
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	var done, total int64
	for _, s := range segs {
		total += s.size
	}
	b.total = total
	for i := range b.heap { // a change takes about two fifths of its frame
		b.heap[i] = make([]byte, 0, min(total*2/5, spillAt)/parts)
	}
	fl := follower{ctx: b.ctx, fs: b.fs, keys: b.bag.Ring, state: &b.st, each: b.dealBatch, parallel: true, limits: b.limits,
		problem: func(p Problem) { b.problems = append(b.problems, p) },
		read: func(n int64) {
			before := done
			if done += n; done>>20 != before>>20 {
				b.o.Progress("reading the journal", min(done, total), total)
			}
		}}
	if _, err = fl.all(b.dir); err != nil {
		return err
	}
	b.o.Progress("reading the journal", total, total)
	return nil
}

func (b *builder) dealBatch(batch change.Batch) error {
	now := b.o.Now()
	for i := range batch.Changes {
		c := &batch.Changes[i]
		if b.part0 < 0 || c.Patient != b.patient {
			b.patient, b.part0 = c.Patient, int(b.seals.patientKey(c.Patient)[0])
		}
		part := b.part0
		h := b.heap[part]
		before := len(h)
		h = binary.AppendUvarint(h, uint64(c.Kind))
		h = append(h, c.Patient[:]...)
		h = append(h, c.Record[:]...)
		h = appendBytes(h, c.Field)
		h = appendVersion(h, *c, 0, &b.dealt)
		b.heap[part] = h
		b.held += len(h) - before
		b.st.adopt(c.Time, now)
	}
	if b.held >= spillAt {
		return b.spillAll()
	}
	return nil
}

// spillAll moves what is in memory into the spill file.
func (b *builder) spillAll() error {
	if b.spill == nil {
		name := filepath.Join(b.dir, spillFile)
		if err := b.fs.Remove(name); err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
		var err error
		if b.spill, err = b.fs.Create(name); err != nil {
			return err
		}
	}
	for i := range b.heap {
		if len(b.heap[i]) == 0 {
			continue
		}
		nonce := randomBytes(b.aead.NonceSize())
		sealed := b.aead.Seal(nonce, nonce, b.heap[i], []byte{byte(i)})
		if _, err := b.spill.WriteAt(sealed, b.spillEnd); err != nil {
			return err
		}
		b.spilled[i] = append(b.spilled[i], stretch{b.spillEnd, int64(len(sealed))})
		b.spillEnd += int64(len(sealed))
		b.heap[i] = b.heap[i][:0]
	}
	b.held = 0
	return nil
}

func (b *builder) dropSpill() {
	if b.spill != nil {
		_ = b.spill.Close()
		_ = b.fs.Remove(filepath.Join(b.dir, spillFile)) // sealed, and removed at the next build if not now
	}
}

// part returns the changes of a part, as they were dealt.
func (b *builder) part(i int) ([]byte, error) {
	var all []byte
	for _, s := range b.spilled[i] {
		sealed := make([]byte, s.n)
		if _, err := b.spill.ReadAt(sealed, s.at); err != nil {
			return nil, err
		}
		n := b.aead.NonceSize()
		plain, err := b.aead.Open(nil, sealed[:n], sealed[n:], []byte{byte(i)})
		if err != nil {
			return nil, errors.New("the file of the index under way was changed while it was used")
		}
		all = append(all, plain...)
	}
	if all == nil {
		return b.heap[i], nil
	}
	return append(all, b.heap[i]...), nil
}

// pair is one entry of a bucket.
type pair struct{ key, value []byte }

// filled is one part worked out.
type filled struct {
	records, patients, places []pair
	rows                      []Summary
	edges                     []*record
	err                       error
}

// fill is the second pass.
func (b *builder) fill(x *index) error {
	results := make([]chan filled, parts)
	slots := make(chan struct{}, runtime.GOMAXPROCS(0)+1)
	stop := make(chan struct{})
	defer close(stop)
	for i := range results {
		results[i] = make(chan filled, 1)
	}
	gaps := b.st.gaps(b.lives)
	go func() {
		for i := range results {
			select {
			case slots <- struct{}{}:
			case <-stop:
				return
			}
			go func() { results[i] <- b.workOut(i, gaps) }()
		}
	}()
	l := loader{x: x}
	defer l.rollback()
	var places []pair
	for i := range results {
		var f filled
		select {
		case f = <-results[i]:
			<-slots
		case <-b.ctx.Done():
			return b.ctx.Err()
		}
		if f.err != nil {
			return f.err
		}
		for _, r := range f.edges {
			b.st.setEdges(r)
		}
		places = append(places, f.places...)
		if err := l.put(bucketRecords, f.records, &b.st.Records); err != nil {
			return err
		}
		if err := l.put(bucketPatients, f.patients, &b.st.Patients); err != nil {
			return err
		}
		if len(f.rows) > 0 {
			k := []byte{byte(i)}
			page := []pair{{k, x.seal(bucketPages, k, encodeRows(f.rows))}}
			if err := l.put(bucketPages, page, &b.st.Pages); err != nil {
				return err
			}
		}
		b.o.Progress("building the index", int64(i+1), parts)
	}
	slices.SortFunc(places, func(a, b pair) int { return bytes.Compare(a.key, b.key) })
	if err := l.put(bucketPlaces, places, &b.st.Places); err != nil {
		return err
	}
	return l.finish(b.st)
}

// workOut turns the changes of a part into sorted entries.
func (b *builder) workOut(i int, gaps []timedGap) (f filled) {
	data, err := b.part(i)
	if err != nil {
		return filled{err: err}
	}
	room, _ := b.rooms.Get().(*room)
	if room == nil {
		room = newRoom()
	}
	defer b.rooms.Put(room)
	patients, err := b.gather(data, room)
	if err != nil {
		return filled{err: err}
	}
	type one struct {
		key []byte
		id  exam.ID
		rs  []*record
	}
	order := make([]one, 0, len(patients))
	for id, rs := range patients {
		order = append(order, one{b.seals.patientKey(id), id, rs})
	}
	slices.SortFunc(order, func(a, b one) int { return bytes.Compare(a.key, b.key) })
	store := &Store{seals: b.seals}
	for _, o := range order {
		m := manifest{Patient: o.id}
		first := len(f.records)
		v := view{gaps: gaps}
		for _, r := range o.rs {
			k := b.seals.recordKey(r.key())
			plain := r.encode()
			if r.kind == KindVisit {
				v.plain = append(v.plain, plain) // read the short way below
			} else {
				v.records = append(v.records, r)
			}
			f.records = append(f.records, pair{k, b.seals.seal(bucketRecords, k, plain)})
			if r.kind == KindVisit {
				pk := k[nameSize:]
				f.places = append(f.places, pair{pk, b.seals.seal(bucketPlaces, pk, o.id[:])})
			}
			if r.kind == KindEdge {
				kept, err := decodeRecord(plain) // r goes with its room
				if err != nil {
					return filled{err: err}
				}
				f.edges = append(f.edges, kept)
			}
			for _, fd := range r.fields {
				for _, c := range fd.versions {
					m.note(c.Stream, c.Seq)
				}
			}
		}
		mine := f.records[first:]
		slices.SortFunc(mine, func(a, b pair) int { return bytes.Compare(a.key, b.key) })
		for _, p := range mine {
			m.Records.add(b.seals.mark(bucketRecords, p.key, p.value))
		}
		plain, err := valueEnc.Marshal(m)
		if err != nil {
			return filled{err: err}
		}
		f.patients = append(f.patients, pair{o.key, b.seals.seal(bucketPatients, o.key, plain)})
		rec, ok, err := store.assemble(o.id, v)
		if err != nil {
			return filled{err: err}
		}
		if ok {
			f.rows = append(f.rows, summarise(rec))
		}
	}
	return f
}

// room is memory that one part after another is gathered in.
type room struct {
	slabs [][]change.Change // most fields have one version: they are made many at a time
	used  int
	names map[string]int // of the fields, in list
	list  []string
	ranks []int // the place of each name of list in the order of the names
	found map[recordKey]*gathered
	order []uint64 // of one record's fields
}

// gathered is a record whose fields were only collected, with the place of each field's name in room.list.
type gathered struct {
	*record
	names []uint32
}

const slabSize = 512

func newRoom() *room { return &room{names: map[string]int{}, found: map[recordKey]*gathered{}} }

// version returns room for one version.
func (r *room) version() []change.Change {
	at := r.used % slabSize
	if r.used/slabSize == len(r.slabs) {
		r.slabs = append(r.slabs, make([]change.Change, slabSize))
	}
	v := r.slabs[r.used/slabSize][at : at+1 : at+1]
	v[0] = change.Change{}
	r.used++
	return v
}

// gather reads dealt changes and puts them together into records, which last until the room is
// used again.
func (b *builder) gather(data []byte, room *room) (map[exam.ID][]*record, error) {
	out := map[exam.ID][]*record{}
	h := head{tables: b.dealt}
	clear(room.found)
	if len(room.list) > 4096 { // some names hold ids
		clear(room.names)
		room.list = nil
	}
	room.used = 0
	r := &reader{b: data}
	var last *gathered
	for len(r.b) > 0 && !r.bad {
		version := room.version()
		c := &version[0]
		h.kind = Kind(r.uvarint())
		h.patient, h.id = r.id(), r.id()
		name := r.bytes()
		r.version(c, &h)
		at, ok := room.names[string(name)]
		if !ok {
			at = len(room.list)
			room.list = append(room.list, string(name))
			room.names[room.list[at]] = at
		}
		c.Field = room.list[at]
		k := keyOf(*c)
		rec := last
		if rec == nil || rec.key() != k {
			if rec = room.found[k]; rec == nil {
				rec = &gathered{record: newRecord(k)}
				room.found[k] = rec
				out[c.Patient] = append(out[c.Patient], rec.record)
			}
		}
		if cap(rec.fields) == len(rec.fields) {
			more := max(48, len(rec.fields)) // a usual exam
			rec.fields, rec.names = slices.Grow(rec.fields, more), slices.Grow(rec.names, more)
		}
		rec.fields = append(rec.fields, field{c.Field, version})
		rec.names = append(rec.names, uint32(at))
		last = rec
	}
	if r.bad {
		return nil, fmt.Errorf("the index under way: %w", errRecord)
	}
	room.rank()
	for _, rec := range room.found {
		room.settle(rec)
	}
	return out, nil
}

// rank orders the names, so that fields are sorted by numbers.
func (r *room) rank() {
	sorted := slices.Sorted(slices.Values(r.list))
	r.ranks = slices.Grow(r.ranks[:0], len(r.list))[:len(r.list)]
	for i, name := range sorted {
		r.ranks[r.names[name]] = i
	}
}

// settle puts fields that were only collected into their form: sorted, each name once. Versions
// of one name stay in the order they came in.
func (r *room) settle(g *gathered) {
	r.order = r.order[:0]
	for i, at := range g.names {
		r.order = append(r.order, uint64(r.ranks[at])<<32|uint64(i))
	}
	slices.Sort(r.order)
	out := make([]field, 0, len(g.fields))
	for _, o := range r.order {
		f := g.fields[uint32(o)]
		if n := len(out); n > 0 && out[n-1].name == f.name {
			out[n-1].versions = merge.Apply(out[n-1].versions, f.versions[0])
			continue
		}
		out = append(out, f)
	}
	g.fields = out
}

// loader puts sorted entries into a new index, in transactions of some size.
type loader struct {
	x    *index
	tx   *bbolt.Tx
	size int
}

func (l *loader) put(name []byte, ps []pair, t *tally) error {
	return guard(func() error {
		for _, p := range ps {
			if l.tx == nil {
				tx, err := l.x.db.Begin(true)
				if err != nil {
					return err
				}
				l.tx, l.size = tx, 0
			}
			b := l.tx.Bucket(name)
			b.FillPercent = fillPercent
			if err := b.Put(p.key, p.value); err != nil {
				return err
			}
			t.add(l.x.mark(name, p.key, p.value))
			if l.size += len(p.key) + len(p.value); l.size >= commitAt {
				if err := l.commit(); err != nil {
					return err
				}
			}
		}
		return nil
	})
}

func (l *loader) commit() error {
	tx := l.tx
	l.tx = nil
	if tx == nil {
		return nil
	}
	return tx.Commit()
}

func (l *loader) rollback() {
	if l.tx != nil {
		_ = guard(l.tx.Rollback)
		l.tx = nil
	}
}

func (l *loader) finish(st indexState) error {
	return guard(func() error {
		if err := l.commit(); err != nil {
			return err
		}
		return l.x.db.Update(func(tx *bbolt.Tx) error { return l.x.putState(tx, st) })
	})
}
