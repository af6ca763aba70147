package storage

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"io/fs"
	"maps"
	"path/filepath"
	"slices"
	"time"

	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/merge"
	"cordwalk.example/cordwalk/sync/segment"
)

// What other devices wrote lies in the journal's folder in segments of its own streams, beside
// ours. It gets there by Receive and Commit, and into the index the way our own entries get
// there after a power cut: by reading the journal from where the index stands.

const (
	headsExt = ".heads" // signed chain heads of a stream, one behind the other
	// So many changes are merged in one go; keys that are pressed meanwhile wait for it.
	absorbSome = 256
	// What is received beyond this is merged in the background.
	absorbNow = 5000
)

// receiver writes one foreign stream.
type receiver struct {
	out   writer
	of    change.Stream // of the frames
	spans []merge.Span  // what the journal holds, merged or not
	hash  change.Hash   // chain hash at their end
	fresh int           // changes received since the last Commit
	dirty bool          // something was written since the last sync
}

// Bag returns the practice's and this device's keys.
func (s *Store) Bag() key.Bag {
	s.mu.RLock()
	defer s.mu.RUnlock()
	return s.bag
}

// Dir returns the store's folder.
func (s *Store) Dir() string { return s.dir }

// Incarnation returns the name under which this device writes now.
func (s *Store) Incarnation() change.Incarnation {
	s.write.Lock()
	defer s.write.Unlock()
	return s.out.stream.Device
}

// Site returns the site whose records this device writes.
func (s *Store) Site() change.Site {
	s.write.Lock()
	defer s.write.Unlock()
	return s.out.stream.Site
}

// Lives returns every incarnation that this device had, the one it has now last.
func (s *Store) Lives() []change.Incarnation {
	var out []change.Incarnation
	s.write.Lock()
	lives := s.id.lives()
	s.write.Unlock()
	for _, l := range lives {
		if st, err := change.ParseStream(l + change.Site{}.String()); err == nil {
			out = append(out, st.Device)
		}
	}
	return out
}

// Streams returns what the journal holds, in the order of streams.
func (s *Store) Streams(ctx context.Context) ([]segment.Held, error) {
	out, unread, err := s.held()
	if err != nil {
		return nil, err
	}
	for _, i := range unread {
		hash, _, err := s.At(ctx, out[i].Stream, out[i].Last)
		if err != nil {
			return nil, err
		}
		out[i].Hash = hash
	}
	slices.SortFunc(out, func(a, b segment.Held) int { return a.Stream.Compare(b.Stream) })
	return out, nil
}

// held returns what the journal holds, and which of it needs its hash looked up.
func (s *Store) held() (out []segment.Held, unread []int, err error) {
	s.exch.Lock()
	defer s.exch.Unlock()
	s.mu.RLock()
	defer s.mu.RUnlock()
	if s.shut {
		return nil, nil, ErrShut
	}
	seen := map[change.Stream]bool{}
	add := func(h segment.Held) {
		if len(h.Spans) > 0 {
			h.Own = h.Stream.Device.String() == s.id.Incarnation
			h.Last = h.Spans[len(h.Spans)-1].Last
			out = append(out, h)
		}
	}
	for x, r := range s.recv {
		seen[x] = true
		add(segment.Held{Stream: x, Of: r.of, Spans: slices.Clone(r.spans), Hash: r.hash})
	}
	for _, st := range s.state.Streams {
		if seen[st.Stream] {
			continue
		}
		h := segment.Held{Stream: st.Stream, Of: st.of(), Spans: slices.Clone(st.Spans), Hash: st.Last}
		if n := len(st.Spans); n > 0 && st.Spans[n-1].Last != st.Head {
			// The last frame is known to exist and cannot be read: the one before it counts.
			unread = append(unread, len(out))
		}
		add(h)
	}
	return out, unread, nil
}

// of returns the stream that the frames of a stream's journal name.
func (st *streamState) of() change.Stream {
	if st.Of != (change.Stream{}) {
		return st.Of
	}
	return st.Stream
}

var errEnough = errors.New("enough")

// Frames calls f for each readable frame of the stream that ends at number from or later, in the
// order of numbers, until f returns an error, which Frames returns.
func (s *Store) Frames(ctx context.Context, x change.Stream, from uint64, f func(change.Frame) error) error {
	var answer error
	err := s.frames(ctx, x, from, func(fr change.Frame) error {
		answer = f(fr)
		return answer
	})
	if answer != nil {
		return answer
	}
	return explain("reading the journal", err)
}

func (s *Store) frames(ctx context.Context, x change.Stream, from uint64, f func(change.Frame) error) error {
	segs, err := listSegments(s.fs, s.dir)
	if err != nil {
		return err
	}
	segs = slices.DeleteFunc(segs, func(g segmentFile) bool { return g.stream != x })
	ring := s.Bag().Ring
	var plain []byte
	each := func(segs []segmentFile, g func(p piece) error) error {
		for _, seg := range segs {
			err := walkSegment(s.fs, seg, 0, func(p piece) error {
				if p.Damage != nil || p.Frame.Last < from {
					return ctx.Err()
				}
				// A frame whose body is torn is none: a whole one of its number may stand further on.
				var err error
				if plain, err = change.Unseal(plain, p.Frame, ring); errors.Is(err, change.ErrSealed) {
					return ctx.Err()
				}
				return g(p)
			})
			if err != nil {
				return err
			}
		}
		return nil
	}
	if !s.late(x) {
		// The frames stand in their order: begin in the last segment whose first frame is not too far.
		start := 0
		for i := range segs {
			b, err := readAt(s.fs, segs[i].name, 0, change.HeaderSize)
			if err != nil {
				return err
			}
			if h, err := change.ParseHeader(b); err == nil && h.First > from {
				break
			} else if err == nil {
				start = i
			}
		}
		next := uint64(0)
		return each(segs[start:], func(p piece) error {
			if p.Frame.Last < from || p.Frame.First < next {
				return ctx.Err()
			}
			next = p.Frame.Last + 1
			return f(p.Frame)
		})
	}
	// Some came late and stand behind what follows them.
	type place struct {
		first  uint64
		seg    int
		offset int64
		n      int
	}
	var places []place
	for i := range segs {
		err := each(segs[i:i+1], func(p piece) error {
			if p.Frame.Last >= from {
				places = append(places, place{p.Frame.First, i, p.Offset, int(p.Length)})
			}
			return ctx.Err()
		})
		if err != nil {
			return err
		}
	}
	slices.SortStableFunc(places, func(a, b place) int { return cmp.Compare(a.first, b.first) })
	next := uint64(0)
	for _, p := range places {
		if p.first < next {
			continue
		}
		b, err := readAt(s.fs, segs[p.seg].name, p.offset, p.n)
		if err != nil {
			return err
		}
		fr, err := change.ParseFrame(b)
		if err != nil {
			return err
		}
		next = fr.Last + 1
		if err := f(fr); err != nil {
			return err
		}
	}
	return nil
}

// late reports whether frames of a stream may stand behind later ones.
func (s *Store) late(x change.Stream) bool {
	s.mu.RLock()
	defer s.mu.RUnlock()
	for i := range s.state.Streams {
		if s.state.Streams[i].Stream == x {
			return s.state.Streams[i].Late || s.lateNow[x]
		}
	}
	return s.lateNow[x]
}

// At returns the chain hash at a number at which a frame of the stream ends.
func (s *Store) At(ctx context.Context, x change.Stream, last uint64) (hash change.Hash, ok bool, err error) {
	err = s.frames(ctx, x, last, func(f change.Frame) error {
		if ok = f.Last == last; ok {
			hash = f.Hash()
		}
		return errEnough
	})
	if errors.Is(err, errEnough) {
		err = nil
	}
	return hash, ok, explain("reading the journal", err)
}

// receiver returns the receiver of a foreign stream. exch must be held.
func (s *Store) receiver(x change.Stream) (*receiver, error) {
	if r := s.recv[x]; r != nil {
		return r, nil
	}
	s.mu.RLock()
	r := &receiver{out: writer{fs: s.fs, dir: s.dir, stream: x}, of: x}
	var at uint32
	var end int64
	for i := range s.state.Streams {
		if st := &s.state.Streams[i]; st.Stream == x {
			r.of, r.spans, r.hash, at, end = st.of(), slices.Clone(st.Spans), st.Last, st.Segment, st.Offset
		}
	}
	own := x.Device.String() == s.id.Incarnation
	s.mu.RUnlock()
	if own {
		return nil, errors.New("another device cannot add to the entries that this device is writing")
	}
	segs, err := listSegments(s.fs, s.dir)
	if err != nil {
		return nil, err
	}
	for _, seg := range segs {
		if seg.stream != x {
			continue
		}
		r.out.number = seg.number
		// Writing goes on behind the last good frame if nothing stands there.
		if seg.number == at && s.blankFrom(seg, end) {
			if err := r.out.resume(seg, end); err != nil {
				return nil, err
			}
		}
	}
	s.recv[x] = r
	return r, nil
}

// blankFrom reports whether a segment holds nothing but zeros from a place on.
func (s *Store) blankFrom(seg segmentFile, from int64) bool {
	for from < seg.size {
		b, err := readAt(s.fs, seg.name, from, int(min(seg.size-from, 1<<20)))
		if err != nil || len(b) == 0 || !allZero(b) {
			return false
		}
		from += int64(len(b))
	}
	return from == seg.size
}

// stopExchange ends what goes on in the background, before the store is closed.
func (s *Store) stopExchange() {
	s.stopOnce.Do(func() { close(s.stop) })
	s.wait.Wait()
	s.exch.Lock()
	defer s.exch.Unlock()
	for _, r := range s.recv {
		r.out.leave()
	}
	clear(s.recv)
}

// Receive takes frames of another device in, to be kept under stream as. b.Hashes must be theirs or be
// missing. What is there already is left out. They are safe when Commit has returned.
func (s *Store) Receive(ctx context.Context, as change.Stream, b segment.Block) error {
	if err := ctx.Err(); err != nil {
		return err
	}
	s.exch.Lock()
	defer s.exch.Unlock()
	r, err := s.receiver(as)
	if err != nil {
		return explain("receiving", err)
	}
	if len(b.Hashes) != len(b.Frames) {
		b.Hashes = make([]change.Hash, len(b.Frames))
		for i, f := range b.Frames {
			b.Hashes[i] = f.Hash()
		}
	}
	if n := len(b.Frames); n > 0 && r.follows(b.Frames) { // the usual case, and a large one at first
		last := b.Frames[n-1]
		r.spans[len(r.spans)-1].Last, r.hash = last.Last, b.Hashes[n-1]
		r.fresh += int(last.Last - b.Frames[0].First + 1)
		return s.addReceived(as, r, b.Raw)
	}
	var raw []byte
	for i, f := range b.Frames {
		if f.Stream != as && len(r.spans) == 0 {
			if segment.ForkOf(f.Stream, b.Hashes[i]) != as {
				return fmt.Errorf("receiving: %w: the entries are not of the stream they are to be kept in", change.ErrMalformed)
			}
			r.of = f.Stream
			if f.First > 1 { // the numbers before it are those that both branches share
				r.spans = []merge.Span{{First: 1, Last: f.First - 1}}
			}
		}
		if f.Stream != r.of {
			return fmt.Errorf("receiving: %w: the entries are not of the stream they are to be kept in", change.ErrMalformed)
		}
		if covers(r.spans, f.First, f.Last) {
			continue
		}
		if f.First <= r.top() {
			s.mu.Lock()
			s.lateNow[as] = true
			s.mu.Unlock()
		} else {
			r.hash = b.Hashes[i]
		}
		r.spans = merge.AddSpan(r.spans, merge.Span{First: f.First, Last: f.Last})
		r.fresh += int(f.Last - f.First + 1)
		raw = append(raw, f.Raw...)
	}
	if len(raw) == 0 {
		return nil
	}
	return s.addReceived(as, r, raw)
}

// follows reports whether frames go on, one behind the other, where the receiver stands.
func (r *receiver) follows(fs []change.Frame) bool {
	next := r.top() + 1
	if next == 1 {
		return false
	}
	for _, f := range fs {
		if f.Stream != r.of || f.First != next {
			return false
		}
		next = f.Last + 1
	}
	return true
}

// addReceived writes frames behind the others. exch must be held.
func (s *Store) addReceived(as change.Stream, r *receiver, raw []byte) error {
	r.dirty = true
	if err := r.out.add(raw); err != nil {
		// Nothing is known about what the segment holds now; what was noted is forgotten and
		// read again from the journal.
		r.out.leave()
		delete(s.recv, as)
		return explain("receiving", err)
	}
	return nil
}

func (r *receiver) top() uint64 {
	if len(r.spans) == 0 {
		return 0
	}
	return r.spans[len(r.spans)-1].Last
}

func covers(spans []merge.Span, first, last uint64) bool {
	for _, sp := range spans {
		if sp.First <= first && last <= sp.Last {
			return true
		}
	}
	return false
}

// add appends frames without syncing them.
func (w *writer) add(raw []byte) error {
	if w.file != nil && w.end+int64(len(raw)) > maxSegment {
		if err := w.file.SyncData(); err != nil {
			return err
		}
		w.leave()
	}
	if w.file == nil {
		if err := w.begin(); err != nil {
			return err
		}
	}
	if need := w.end + int64(len(raw)); need > w.size {
		size := max(need, min(w.size+min(max(w.size, firstRoom), mostRoom), maxSegment))
		size += (sector - size%sector) % sector
		if err := w.file.Preallocate(size); err != nil {
			return err
		}
		w.size = size
	}
	if _, err := w.file.WriteAt(raw, w.end); err != nil {
		return err
	}
	w.end += int64(len(raw))
	return nil
}

// Commit makes what was received of a stream durable and keeps the signed head that covers
// it, if there is one. Readers see it when Commit returns, or, if it is much, soon after: see Settle.
func (s *Store) Commit(ctx context.Context, as change.Stream, head *segment.Signed) error {
	s.exch.Lock()
	defer s.exch.Unlock()
	r, err := s.receiver(as)
	if err != nil {
		return explain("receiving", err)
	}
	if r.out.file != nil && r.dirty {
		if err := r.out.file.SyncData(); err != nil {
			r.out.leave()
			delete(s.recv, as)
			return explain("receiving", err)
		}
	}
	r.dirty = false
	if head != nil {
		if err := s.keepHead(as, *head); err != nil {
			return explain("receiving", err)
		}
	}
	much := r.fresh > absorbNow || s.backlog[as]
	if r.fresh == 0 && !s.backlog[as] {
		return nil
	}
	if !much {
		if err := s.absorb(ctx, as); err != nil {
			return err
		}
		r.fresh = 0
		return nil
	}
	r.fresh = 0
	s.backlog[as], s.committed = true, time.Now()
	if !s.draining {
		s.draining = true
		s.wait.Go(s.drain)
	}
	return nil
}

// drainAfter is how long nothing more must come before a backlog is merged: receiving goes first.
const drainAfter = 300 * time.Millisecond

// drain merges backlogs in the background.
func (s *Store) drain() {
	ctx, cancel := context.WithCancel(context.Background())
	defer cancel()
	go func() {
		select {
		case <-s.stop:
			cancel()
		case <-ctx.Done():
		}
	}()
	for {
		s.exch.Lock()
		if len(s.backlog) == 0 || ctx.Err() != nil {
			s.draining = false
			s.exch.Unlock()
			return
		}
		if time.Since(s.committed) < drainAfter && s.hurry.Load() == 0 {
			s.exch.Unlock()
			select {
			case <-ctx.Done():
			case <-time.After(drainAfter / 6):
			}
			continue
		}
		var x change.Stream
		for x = range s.backlog {
			break
		}
		delete(s.backlog, x)
		s.exch.Unlock()
		if err := s.absorb(ctx, x); err != nil && ctx.Err() == nil {
			s.o.Notice("what was received could not be put into the index; it will be at the next start: " + err.Error())
		}
	}
}

// Settle waits until everything that was received can be read.
func (s *Store) Settle() {
	s.hurry.Add(1)
	s.wait.Wait()
	s.hurry.Add(-1)
}

// absorb merges what a foreign stream's journal holds beyond the index's state.
func (s *Store) absorb(ctx context.Context, x change.Stream) error {
	s.absorbing.Lock()
	defer s.absorbing.Unlock()
	segs, err := listSegments(s.fs, s.dir)
	if err != nil {
		return explain("reading what was received", err)
	}
	segs = slices.DeleteFunc(segs, func(g segmentFile) bool { return g.stream != x })
	s.mu.RLock()
	ring, limits := s.bag.Ring, s.id.Limits
	private := indexState{Streams: []streamState{{Stream: x}}}
	for _, st := range s.state.Streams {
		if st.Stream == x {
			private.Streams[0] = st.clone()
		}
	}
	s.mu.RUnlock()
	var some []change.Batch
	n := 0
	merged := func() error {
		if len(some) == 0 {
			return nil
		}
		err := s.mergeReceived(some, private.Streams[0].clone())
		some, n = some[:0], 0
		return err
	}
	fl := follower{ctx: ctx, fs: s.fs, keys: ring, state: &private, limits: limits,
		each: func(b change.Batch) error {
			some, n = append(some, b), n+len(b.Changes)
			if n < absorbSome {
				return nil
			}
			return merged()
		},
		problem: func(p Problem) {
			s.mu.Lock()
			s.problems = append(s.problems, p)
			s.mu.Unlock()
		}}
	if _, err := fl.stream(x, segs); err != nil {
		return explain("reading what was received", err)
	}
	if err := merged(); err != nil {
		return explain("merging what was received", err)
	}
	s.mu.Lock()
	*s.state.stream(x) = private.Streams[0].clone()
	s.moved++
	s.mu.Unlock()
	return nil
}

// mergeReceived merges batches while no key is being written, and keeps the index from falling far behind.
func (s *Store) mergeReceived(bs []change.Batch, st streamState) error {
	err := func() error {
		s.write.Lock()
		defer s.write.Unlock()
		s.mu.RLock()
		shut := s.shut
		s.mu.RUnlock()
		if shut {
			return ErrShut
		}
		// The index's place in the journal is brought up to date when all is merged; until
		// then what is merged may be read again, which changes nothing.
		changes := 0
		for _, b := range bs {
			for _, c := range b.Changes {
				r, err := s.baseRecord(keyOf(c))
				if err != nil {
					return err
				}
				s.mu.Lock()
				s.install(r.with(c), c.Stream, c.Seq)
				s.state.adopt(c.Time, s.o.Now())
				s.mu.Unlock()
				s.clock.Observe(c.Time)
			}
			changes += len(b.Changes)
		}
		s.mu.Lock()
		defer s.mu.Unlock()
		have := s.state.stream(st.Stream)
		st.Segment, st.Offset, st.Start = have.Segment, have.Offset, have.Start
		*have = st
		s.behind += changes
		s.poke(s.behind)
		return nil
	}()
	if err != nil {
		return err
	}
	s.mu.RLock()
	behind := s.behind
	s.mu.RUnlock()
	if behind >= 8*flushChanges {
		return s.flush()
	}
	return nil
}

// Signed heads of a stream lie one behind the other in a file of their own; a record that
// was cut by a power failure does not check and is left out.

func (s *Store) headsFile(x change.Stream) string {
	return filepath.Join(s.dir, journalDir, x.Name()+headsExt)
}

// keepHead adds a head to the file. It is not synced: a head that a power cut takes is replaced by the next
// one, and until then this device cannot pass on what only it covered.
func (s *Store) keepHead(x change.Stream, head segment.Signed) error {
	if err := head.Check(); err != nil {
		return err
	}
	all, err := s.signedHeads(x)
	if err != nil || slices.Contains(all, head) {
		return err
	}
	if n := len(all); n > 0 && all[n-1].Last > head.Last || n >= mostHeads {
		return s.writeHeads(x, append(all, head))
	}
	f, err := s.fs.Edit(s.headsFile(x))
	if errors.Is(err, fs.ErrNotExist) {
		return s.writeHeads(x, append(all, head))
	}
	if err != nil {
		return err
	}
	end := int64(len(all) * segment.SignedSize)
	if size, err := f.Size(); err != nil || size != end { // a record in it was damaged or cut
		return errors.Join(err, f.Close(), s.writeHeads(x, append(all, head)))
	}
	_, err = f.WriteAt(segment.AppendSigned(nil, head), end)
	if err = errors.Join(err, f.Close()); err != nil {
		return err
	}
	s.heads[x] = append(all, head)
	return nil
}

// writeHeads writes the file anew.
func (s *Store) writeHeads(x change.Stream, all []segment.Signed) error {
	slices.SortFunc(all, func(a, b segment.Signed) int { return cmp.Compare(a.Last, b.Last) })
	all = thin(all)
	var b []byte
	for _, h := range all {
		b = segment.AppendSigned(b, h)
	}
	if err := disk.Replace(s.fs, s.headsFile(x), b); err != nil {
		return err
	}
	s.heads[x] = all
	return nil
}

// Of many signed heads of a stream some are let go: a segment made later must end at one, so
// they stay at most this many changes apart.
const (
	mostHeads = 512
	headsGap  = 20_000
)

func thin(hs []segment.Signed) []segment.Signed {
	if len(hs) <= mostHeads {
		return hs
	}
	out := hs[:0]
	for i, h := range hs {
		if old := i < len(hs)-mostHeads/4; old && len(out) > 0 && i%2 == 1 && hs[i+1].Last-out[len(out)-1].Last <= headsGap {
			continue
		}
		out = append(out, h)
	}
	return out
}

// signedHeads reads the signed heads of a stream. exch must be held.
func (s *Store) signedHeads(x change.Stream) ([]segment.Signed, error) {
	if hs, ok := s.heads[x]; ok {
		return slices.Clone(hs), nil
	}
	b, err := disk.ReadFile(s.fs, s.headsFile(x), 64<<20)
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return nil, err
	}
	var out []segment.Signed
	for len(b) >= segment.SignedSize {
		if h, err := segment.ParseSigned(b[:segment.SignedSize]); err == nil {
			out = append(out, h)
		}
		b = b[segment.SignedSize:]
	}
	s.heads[x] = out
	return slices.Clone(out), nil
}

// Signed returns the signed heads that came with a stream of another device, rising.
func (s *Store) Signed(_ context.Context, x change.Stream) ([]segment.Signed, error) {
	s.exch.Lock()
	defer s.exch.Unlock()
	hs, err := s.signedHeads(x)
	return hs, explain("reading the signed heads of a stream", err)
}

// Sums returns the hash of the merged state, as far as Measure worked it out.
func (s *Store) Sums(context.Context) ([]segment.Sum, error) {
	s.exch.Lock()
	defer s.exch.Unlock()
	return slices.Clone(s.sums), nil
}

// Renew gives this device a new incarnation: what it writes from now on is a new stream.
func (s *Store) Renew(context.Context) error {
	s.write.Lock()
	defer s.write.Unlock()
	if s.pending != nil {
		if err := s.commit(s.pending); err != nil {
			return explain("saving", err)
		}
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.shut {
		return ErrShut
	}
	id := s.id
	id.Earlier = append(slices.Clone(id.Earlier), id.Incarnation)
	id.Incarnation = change.NewIncarnation().String()
	own, err := id.stream()
	if err != nil {
		return err
	}
	if err := writeIdentity(s.fs, s.dir, id); err != nil {
		return explain("beginning anew under another name", err)
	}
	s.out.leave()
	s.id = id
	s.out = writer{fs: s.fs, dir: s.dir, stream: own}
	s.next, s.prev = 1, change.Hash{}
	s.idx.lives = id.lives()
	clear(s.lastOwn)
	return nil
}

// SetKeys keeps the practice's keys with the epochs of another ring, which must hold those at
// hand. New entries are sealed in its newest epoch.
func (s *Store) SetKeys(ring *key.Ring) error {
	s.write.Lock()
	defer s.write.Unlock()
	s.follow.Lock()
	defer s.follow.Unlock()
	s.mu.Lock()
	defer s.mu.Unlock()
	for _, e := range s.bag.Ring.Epochs() {
		if have, ok := ring.Secret(e.Number); !ok || have != e.Secret {
			return errors.New("the new keys do not hold the keys of the practice")
		}
	}
	if len(ring.Epochs()) == len(s.bag.Ring.Epochs()) {
		return nil
	}
	bag, id := s.bag, s.id
	bag.Ring = ring
	var err error
	if id.Keys, err = bag.Reseal(); err != nil {
		return explain("keeping the practice's keys", err)
	}
	if err := writeIdentity(s.fs, s.dir, id); err != nil {
		return explain("keeping the practice's keys", err)
	}
	s.id, s.bag = id, bag
	s.seals.owners.keys.Store(ring)
	return nil
}

// Relock changes how the store opens from now on: by any of the openers, and in no other way.
func (s *Store) Relock(openers ...key.Opener) error {
	s.write.Lock()
	defer s.write.Unlock()
	s.follow.Lock()
	defer s.follow.Unlock()
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.shut {
		return ErrShut
	}
	bag, id := s.bag, s.id
	var err error
	if id.Keys, err = bag.Lock(key.Usual, openers...); err != nil {
		return explain("changing how the practice opens", err)
	}
	if id.Protected, err = key.Protected(id.Keys); err != nil {
		return explain("changing how the practice opens", err)
	}
	if err := writeIdentity(s.fs, s.dir, id); err != nil {
		return explain("changing how the practice opens", err)
	}
	s.id, s.bag = id, bag
	return nil
}

// SetLimits says, for streams of devices that were removed, up to which number their entries
// count. What lies beyond is kept in the journal and shown by Quarantined. Where that changes what
// counts, the index is built anew.
func (s *Store) SetLimits(ctx context.Context, limits map[change.Stream]uint64) error {
	s.absorbing.Lock()
	defer s.absorbing.Unlock()
	s.write.Lock()
	defer s.write.Unlock()
	s.follow.Lock()
	defer s.follow.Unlock()
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.shut {
		return ErrShut
	}
	id := s.id
	id.Limits = map[string]uint64{}
	touched := false
	for x, n := range limits {
		id.Limits[x.Name()] = n
	}
	for _, st := range s.state.Streams {
		name := st.Stream.Name()
		was, had := s.id.Limits[name]
		now, has := id.Limits[name]
		if (was != now || had != has) && (has && st.Head > now || had && st.Head > was) {
			touched = true
		}
	}
	if maps.Equal(id.Limits, s.id.Limits) {
		return nil
	}
	if err := writeIdentity(s.fs, s.dir, id); err != nil {
		return explain("keeping which devices were removed", err)
	}
	s.id = id
	if !touched {
		return nil
	}
	s.o.Notice("entries that a removed device made later no longer count; the index is built anew without them")
	s.idx.abandon()
	clear(s.overlay)
	clear(s.changed)
	clear(s.lastOwn)
	s.behind = 0
	return explain("building the index anew", s.rebuildIndex(ctx, true))
}

// Quarantined returns the changes that removed devices made beyond what counts of them and that nobody admitted,
// in the order in which each device made them.
func (s *Store) Quarantined(ctx context.Context) ([]change.Change, error) {
	s.mu.RLock()
	limits, ring := maps.Clone(s.id.Limits), s.bag.Ring
	s.mu.RUnlock()
	var out []change.Change
	for _, name := range slices.Sorted(maps.Keys(limits)) {
		x, err := change.ParseStream(name)
		if err != nil {
			return nil, explain("reading what is in quarantine", err)
		}
		err = s.Frames(ctx, x, limits[name]+1, func(f change.Frame) error {
			b, err := change.Open(f, ring)
			if err != nil {
				return nil // what cannot be read is named by check
			}
			for _, c := range b.Changes {
				if c.Seq <= limits[name] {
					continue
				}
				admitted, err := s.admitted(c)
				if err != nil {
					return err
				}
				if !admitted {
					out = append(out, c)
				}
			}
			return nil
		})
		if err != nil {
			return nil, err
		}
	}
	return out, nil
}

// admitted reports whether a person took a quarantined change's value into the record.
func (s *Store) admitted(c change.Change) (bool, error) {
	r, err := s.baseRecord(keyOf(c))
	if err != nil {
		return false, err
	}
	return slices.ContainsFunc(r.versions(c.Field), func(v change.Change) bool {
		return v.Act == change.Admit && slices.Equal(v.Value, c.Value)
	}), nil
}

// Words says the value of a change in English, as History does; it is empty where the change cleared its field.
func (s *Store) Words(c change.Change) string { return s.words(c.Kind, c.Field, c) }

// Admit returns the edit by which a person takes a quarantined change into the record.
func Admit(c change.Change, reason string) Edit {
	return Edit{Patient: c.Patient, Record: c.Record, Kind: c.Kind, Field: c.Field, Value: c.Value, act: change.Admit, reason: reason}
}

// CreateJoined makes the store of a device that was let into a practice, for a site of it, and opens
// it. What the others wrote comes with the first exchange.
func CreateJoined(dir string, o Options, bag key.Bag, site change.Site, inc change.Incarnation) (*Store, error) {
	o = o.withDefaults()
	o.join = &joined{bag, site, inc}
	s, err := create(dir, o)
	if err != nil {
		return nil, explain("making the practice in "+dir, err)
	}
	return s, nil
}

// joined is what a device brings that was let into a practice.
type joined struct {
	bag  key.Bag
	site change.Site
	inc  change.Incarnation
}
