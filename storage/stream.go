package storage

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"path/filepath"
	"runtime"
	"slices"
	"sync"
	"time"

	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/merge"
	"cordwalk.example/cordwalk/sync/segment"
)

// streamState says what of a stream has been taken in.
type streamState struct {
	Stream  change.Stream `cbor:"1,keyasint"`
	Spans   []merge.Span  `cbor:"2,keyasint"` // the numbers that are there
	Head    uint64        `cbor:"3,keyasint"` // the highest number known to exist
	Last    change.Hash   `cbor:"4,keyasint"` // chain hash of the frame of the highest number
	Segment uint32        `cbor:"5,keyasint"` // taken in up to here
	Offset  int64         `cbor:"6,keyasint"`
	Start   int64         `cbor:"7,keyasint"` // where the last frame before Offset begins
	Began   change.HLC    `cbor:"8,keyasint"` // time of the first change that was read
	Ended   change.HLC    `cbor:"9,keyasint"` // time of the last change that was read
	Holes   []hole        `cbor:"10,keyasint"`
	Of      change.Stream `cbor:"11,keyasint,omitzero"` // of the frames, where this is the second branch of a fork
	Late    bool          `cbor:"12,keyasint,omitzero"` // some frames stand behind later ones
}

// hole says between which times the missing numbers of a stream were written.
type hole struct {
	First uint64     `cbor:"1,keyasint"`
	Last  uint64     `cbor:"2,keyasint"`
	From  change.HLC `cbor:"3,keyasint"` // not before
	To    change.HLC `cbor:"4,keyasint"` // not after; 0: not known, the hole is at the end
}

// stream returns the state of a stream, made if it is new.
func (st *indexState) stream(x change.Stream) *streamState {
	for i := range st.Streams {
		if st.Streams[i].Stream == x {
			return &st.Streams[i]
		}
	}
	st.Streams = append(st.Streams, streamState{Stream: x})
	return &st.Streams[len(st.Streams)-1]
}

// has reports whether all of first to last was taken in.
func (st *streamState) has(first, last uint64) bool {
	for _, sp := range st.Spans {
		if sp.First <= first && last <= sp.Last {
			return true
		}
	}
	return false
}

// take notes a frame that was read and opened.
func (st *streamState) take(h change.Header, hash change.Hash, began, ended change.HLC) {
	if h.First <= st.Head {
		st.Late = true
	}
	if h.First > st.Head+1 {
		st.Holes = append(st.Holes, hole{st.Head + 1, h.First - 1, st.Ended, began})
	}
	if n := len(st.Spans); n > 0 && st.Spans[n-1].Last+1 == h.First {
		st.Spans[n-1].Last = h.Last
	} else {
		st.Spans = merge.AddSpan(st.Spans, merge.Span{First: h.First, Last: h.Last})
	}
	if h.Last > st.Head {
		for i := range st.Holes { // a hole that was at the end has an end now
			if st.Holes[i].To == 0 {
				st.Holes[i].To = began
			}
		}
	}
	if h.Last >= st.Head {
		st.Head, st.Last = h.Last, hash
	}
	if st.Began == 0 {
		st.Began = began
	}
	st.Ended = max(st.Ended, ended)
}

// miss notes that numbers up to last exist and cannot be read.
func (st *streamState) miss(last uint64, hash change.Hash) {
	if last <= st.Head {
		return
	}
	st.Holes = append(st.Holes, hole{st.Head + 1, last, st.Ended, 0})
	st.Head, st.Last = last, hash
}

// missEnd notes that at least one number behind those that were read is missing.
func (st *streamState) missEnd() {
	if n := len(st.Holes); n == 0 || st.Holes[n-1].To != 0 || st.Holes[n-1].Last != st.Head {
		st.miss(st.Head+1, change.Hash{})
	}
}

// clone returns a copy that shares nothing that is changed in place.
func (st streamState) clone() streamState {
	st.Spans, st.Holes = slices.Clone(st.Spans), slices.Clone(st.Holes)
	return st
}

func (st indexState) clone() indexState {
	streams := make([]streamState, len(st.Streams))
	for i, s := range st.Streams {
		streams[i] = s.clone()
	}
	st.Streams, st.Edges = streams, slices.Clone(st.Edges)
	return st
}

// timedGap is a gap with the times between which its changes were made.
type timedGap struct {
	merge.Gap
	from, to change.HLC // not before from, and before to
}

const endOfTime = ^change.HLC(0)

// gaps returns what is missing of every stream. lives are this device's incarnations in their
// order: what one of them lost at its end was written before the next one began.
func (st indexState) gaps(lives []string) []timedGap {
	var out []timedGap
	for _, s := range st.Streams {
		gs := merge.Gaps(s.Stream, s.Spans, s.Head)
		if len(gs) == 0 {
			continue
		}
		for _, g := range gs {
			t := timedGap{g, 0, endOfTime}
			for _, h := range s.Holes {
				if h.First <= g.First && g.Last <= h.Last {
					t.from = h.From
					if h.To != 0 {
						t.to = h.To
					}
				}
			}
			if t.to == endOfTime {
				if next, ok := st.beganAfter(s.Stream, lives); ok {
					t.to = next
				}
			}
			out = append(out, t)
		}
	}
	return out
}

// beganAfter returns when the incarnation that follows a stream's began to write.
func (st indexState) beganAfter(x change.Stream, lives []string) (change.HLC, bool) {
	at := slices.Index(lives, x.Device.String())
	if at < 0 {
		return 0, false
	}
	for _, s := range st.Streams {
		if slices.Index(lives, s.Stream.Device.String()) > at && s.Stream.Site == x.Site && s.Began != 0 {
			return s.Began, true
		}
	}
	return 0, false
}

// touches reports whether the gap may hold changes to a patient with these records, and the
// patient may have been there when they were made.
func (g timedGap) touches(records []*record) bool {
	var known []change.Change
	older := false
	for _, r := range records {
		for _, f := range r.fields {
			for _, c := range f.versions {
				older = older || c.Time < g.to
				if c.Stream == g.Stream {
					known = append(known, c)
				}
			}
		}
	}
	slices.SortFunc(known, func(a, b change.Change) int {
		if a.Seq < b.Seq {
			return -1
		}
		if a.Seq > b.Seq {
			return 1
		}
		return 0
	})
	if len(known) > 0 && known[len(known)-1].Seq > g.Last {
		return g.MayTouch(known) // the writer says so itself
	}
	return older
}

// streamEnd is where a stream's journal ends.
type streamEnd struct {
	seg     *segmentFile // the last one, nil if there is none
	end     int64        // behind its last readable frame
	tainted bool         // behind it stands something that cannot be read, or numbers are missing
}

// follower reads the segments of streams and keeps their state.
type follower struct {
	ctx     context.Context
	fs      disk.FS
	keys    change.Keys
	state   *indexState
	each    func(b change.Batch) error // each batch that is news
	problem func(Problem)
	read    func(bytes int64) // progress; may be nil
	limits  map[string]uint64 // see identity

	parallel bool // open frames ahead on all processors; each must then not keep its batch
	covered  bool // the state is known to hold all that was ever written: the store was closed in order
}

func relative(seg segmentFile) string { return journalDir + "/" + filepath.Base(seg.name) }

// stream reads what a stream's segments (in the order of their numbers) hold beyond its state.
func (fl *follower) stream(x change.Stream, segs []segmentFile) (streamEnd, error) {
	st := fl.state.stream(x)
	var end streamEnd
	if len(segs) == 0 {
		if st.Head > 0 {
			fl.problem(Problem{File: journalDir, Offset: -1, What: fmt.Sprintf("no segment of stream %s is there, and there were entries up to number %d", x, st.Head)})
			end.tainted = true
		}
		return end, nil
	}
	if last := segs[len(segs)-1]; last.number < st.Segment {
		fl.problem(Problem{File: journalDir, Offset: -1, What: fmt.Sprintf("segment %d of stream %s is gone", st.Segment, x)})
		end.tainted = true
	}
	var left []Problem // what stands at the end of an earlier segment
	for i := range segs {
		seg := segs[i]
		end.seg, end.end = &segs[i], 0
		if seg.number < st.Segment {
			continue
		}
		from := int64(0)
		if seg.number == st.Segment {
			from = st.Offset
			if what := fl.lastStands(seg, st); what != "" {
				fl.problem(Problem{File: relative(seg), Offset: st.Start, What: what})
				end.tainted = true
			}
			if from > seg.size {
				fl.problem(Problem{File: relative(seg), Offset: seg.size, What: "the segment is shorter than it was; entries at its end are gone from the journal"})
				end.tainted, end.end = true, seg.size
				continue
			}
		}
		tail, at, err := fl.segment(seg, from, st, func(first uint64) {
			// What stands at the end of the segment before was left after an error. If
			// the numbers go on here, it cost nothing.
			for _, p := range left {
				p.Minor = first == 1 || st.has(first-1, first-1)
				if p.Minor {
					p.What = "the rest of an entry that was being written when an error came; it was written again in the next segment, and nothing is lost"
				}
				fl.problem(p)
			}
			left = nil
		})
		if err != nil {
			return end, err
		}
		end.end = max(at, from)
		left = append(left, tail...)
		st.Segment, st.Offset = seg.number, end.end
	}
	if len(left) > 0 {
		end.tainted = true
		fl.judgeTail(*end.seg, end.end, st, left)
	}
	if seg := *end.seg; seg.size%sector != 0 {
		end.tainted = true
		fl.problem(Problem{File: relative(seg), Offset: seg.size, What: "the segment is shorter than it was made; entries at its end may be missing"})
		if !fl.covered {
			st.missEnd()
		}
	}
	if len(merge.Gaps(x, st.Spans, st.Head)) > 0 {
		end.tainted = true
	}
	return end, nil
}

// segment reads one segment. It returns what is wrong behind its last frame, and where that
// frame ends. goesOn is called at the first frame.
func (fl *follower) segment(seg segmentFile, from int64, st *streamState, goesOn func(first uint64)) (tail []Problem, at int64, err error) {
	at = from
	walk := walkSegment
	if fl.parallel {
		walk = fl.walkAhead
	}
	err = walk(fl.fs, seg, from, func(p piece) error {
		if err := fl.ctx.Err(); err != nil {
			return err
		}
		if fl.read != nil {
			fl.read(p.Length)
		}
		b, news, what := fl.piece(p, st)
		if what != "" {
			tail = append(tail, Problem{File: relative(seg), Offset: p.Offset, Length: p.Length, What: what})
		}
		if p.Damage != nil || (what != "" && !news) {
			return nil
		}
		if goesOn != nil {
			goesOn(p.Frame.First)
			goesOn = nil
		}
		for _, x := range tail {
			fl.problem(x) // a frame follows: this is no tail
		}
		tail, at = nil, p.end()
		st.Start = p.Offset
		if news {
			return fl.each(b)
		}
		return nil
	})
	return tail, at, err
}

// piece opens a piece of a segment and brings the stream's state up to date. It returns the
// batch if it is news, and in words what is wrong.
func (fl *follower) piece(p piece, st *streamState) (b change.Batch, news bool, what string) {
	switch {
	case p.Blank:
		return b, false, "there are zeros where entries stood"
	case p.Damage != nil:
		if h, ok := fl.headerAt(p); ok && h.Stream == p.seg.stream && h.First > st.Head {
			st.miss(h.Last, change.Hash{})
		}
		return b, false, "this is no readable entry: " + p.Damage.Error()
	case p.Frame.Stream != p.seg.stream && !st.branch(p.Frame):
		return b, false, "an entry of another stream stands here"
	case st.has(p.Frame.First, p.Frame.Last):
		return b, false, "" // written again after an error
	}
	o := p.opened
	if o == nil {
		x := fl.openFrame(p.Frame, change.Open)
		o = &x
	}
	if o.err != nil {
		st.miss(p.Frame.Last, o.hash)
		return b, false, "an entry cannot be opened: " + o.err.Error()
	}
	b = o.batch
	if b.Stream != p.seg.stream { // the second branch of a fork goes under its own name
		b.Stream = p.seg.stream
		for i := range b.Changes {
			b.Changes[i].Stream = p.seg.stream
		}
	}
	if limit, ok := fl.limit(p.seg.stream); ok && b.Last() > limit {
		// It came after the device was removed: it is kept, and counts once a person admits it.
		st.take(p.Frame.Header, o.hash, b.Changes[0].Time, b.Changes[0].Time)
		if b.First > limit {
			return b, false, ""
		}
		b.Changes = b.Changes[:limit-b.First+1]
		return b, true, ""
	}
	if p.Frame.First == st.Head+1 && p.Frame.Prev != st.Last && st.Last != (change.Hash{}) {
		what = "the entry does not follow the one before it: the journal was changed, or a part of it is from elsewhere"
	}
	began, ended := b.Changes[0].Time, b.Changes[0].Time
	for _, c := range b.Changes {
		began, ended = min(began, c.Time), max(ended, c.Time)
	}
	st.take(p.Frame.Header, o.hash, began, ended)
	return b, true, what
}

// limit returns the last number accepted of a removed device's stream.
func (fl *follower) limit(s change.Stream) (uint64, bool) {
	if len(fl.limits) == 0 { // nearly always; a name costs as much as a small frame
		return 0, false
	}
	n, ok := fl.limits[s.Name()]
	return n, ok
}

// branch reports whether a frame belongs to the second branch of a fork that is kept under st's
// name. Its first frame proves it: the name is made of it. The numbers before it are those
// that both branches share.
func (st *streamState) branch(f change.Frame) bool {
	if st.Of == (change.Stream{}) && len(st.Spans) == 0 && segment.ForkOf(f.Stream, f.Hash()) == st.Stream {
		st.Of = f.Stream
		if f.First > 1 {
			st.Spans = []merge.Span{{First: 1, Last: f.First - 1}}
		}
		st.Head, st.Last = f.First-1, f.Prev
	}
	return st.Of == f.Stream
}

// opened is what opening a frame gave.
type opened struct {
	batch change.Batch
	hash  change.Hash
	err   error
}

func (fl *follower) openFrame(f change.Frame, open func(change.Frame, change.Keys) (change.Batch, error)) (o opened) {
	o.hash = f.Hash()
	o.batch, o.err = open(f, fl.keys)
	return o
}

// walkAhead is walkSegment with the frames opened ahead on all processors. The pieces come in
// their order.
func (fl *follower) walkAhead(fsys disk.FS, seg segmentFile, from int64, f func(piece) error) error {
	const some = 256
	type bunch struct {
		pieces []piece
		opened []opened
		opener change.Opener
		done   chan struct{}
	}
	used := make(chan *bunch, 4*runtime.GOMAXPROCS(0)) // their memory serves again
	empty := func() *bunch {
		select {
		case b := <-used:
			b.opener.Reset()
			return &bunch{pieces: b.pieces[:0], opened: b.opened[:0], opener: b.opener, done: make(chan struct{})}
		default:
			return &bunch{pieces: make([]piece, 0, some), opened: make([]opened, 0, some), done: make(chan struct{})}
		}
	}
	ahead := make(chan *bunch, 2*runtime.GOMAXPROCS(0))
	work := make(chan *bunch, cap(ahead))
	stop := make(chan struct{})
	stopped := errors.New("stopped")
	var scanErr error
	var wg sync.WaitGroup
	for range runtime.GOMAXPROCS(0) {
		wg.Go(func() {
			for b := range work {
				for i, p := range b.pieces {
					if p.Damage == nil {
						b.opened[i] = fl.openFrame(p.Frame, b.opener.Open)
					}
				}
				close(b.done)
			}
		})
	}
	wg.Go(func() {
		defer close(ahead)
		defer close(work)
		cur := empty()
		send := func() error {
			if len(cur.pieces) == 0 {
				return nil
			}
			cur.opened = cur.opened[:len(cur.pieces)]
			clear(cur.opened)
			b := cur
			cur = empty()
			select {
			case ahead <- b:
				work <- b
				return nil
			case <-stop:
				return stopped
			}
		}
		scanErr = walkSegment(fsys, seg, from, func(p piece) error {
			if cur.pieces = append(cur.pieces, p); len(cur.pieces) == some {
				return send()
			}
			return nil
		})
		if scanErr == nil {
			scanErr = send()
		}
	})
	var err error
	for b := range ahead {
		if err != nil {
			continue
		}
		<-b.done
		for i, p := range b.pieces {
			if p.Damage == nil {
				p.opened = &b.opened[i]
			}
			if err = f(p); err != nil {
				close(stop)
				break
			}
		}
		select {
		case used <- b:
		default:
		}
	}
	wg.Wait()
	if err == nil {
		err = scanErr
	}
	return err
}

// headerAt reads the header of a frame whose body is damaged.
func (fl *follower) headerAt(p piece) (h change.Header, ok bool) {
	b, err := readAt(fl.fs, p.seg.name, p.Offset, change.HeaderSize)
	if err != nil {
		return h, false
	}
	h, err = change.ParseHeader(b)
	return h, err == nil
}

func readAt(fsys disk.FS, name string, offset int64, n int) ([]byte, error) {
	f, err := fsys.Open(name)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	b := make([]byte, n)
	got, err := f.ReadAt(b, offset)
	if errors.Is(err, io.EOF) {
		err = nil
	}
	return b[:got], err
}

// lastStands checks that the last frame that the index took in still stands in the journal:
// it does not if the journal was replaced by an older one behind the program's back.
func (fl *follower) lastStands(seg segmentFile, st *streamState) string {
	const gone = "the last entry that the index knows is not in the journal: the journal is older than the index, or damaged"
	if st.Offset == 0 || st.Last == (change.Hash{}) || st.Start >= st.Offset {
		return ""
	}
	b, err := readAt(fl.fs, seg.name, st.Start, int(min(st.Offset-st.Start, change.MaxFrame)))
	if err != nil {
		return gone
	}
	f, err := change.ParseFrame(b)
	if err != nil || (f.Last == st.Head && f.Hash() != st.Last) {
		return gone
	}
	return ""
}

const sector = 512

// judgeTail says what stands behind the last readable frame of a stream. A power cut while an
// entry is written leaves sectors of zeros in it, the room made ready; nothing that was called
// saved is lost by that. Anything else may have been an entry that was saved.
func (fl *follower) judgeTail(seg segmentFile, end int64, st *streamState, tail []Problem) {
	unfinished := len(merge.Gaps(st.Stream, st.Spans, st.Head)) <= 1 && fl.unfinished(seg, end)
	for _, p := range tail {
		if unfinished {
			p.Minor = true
			p.What = "an entry that was being written when the power failed; it had not been reported as saved"
		}
		fl.problem(p)
	}
	switch {
	case unfinished: // its numbers are given up with this incarnation
		if n := len(st.Holes); n > 0 && st.Holes[n-1].To == 0 {
			st.Head = st.Holes[n-1].First - 1
			st.Holes = st.Holes[:n-1]
		}
	default:
		st.missEnd()
	}
}

// unfinished reports whether the bytes from a place to the end of a segment are one frame in
// which whole sectors have never been written.
func (fl *follower) unfinished(seg segmentFile, from int64) bool {
	b, err := readAt(fl.fs, seg.name, from, int(min(max(seg.size-from, 0), change.MaxFrame+sector)))
	if err != nil || len(b) == 0 || seg.size%sector != 0 {
		return false
	}
	length := len(b)
	for length > 0 && b[length-1] == 0 {
		length--
	}
	if length == len(b) && from+int64(length) < seg.size {
		return false // more than one frame
	}
	need := change.HeaderSize
	if h, err := change.ParseHeader(b); err == nil {
		if need = h.Size(); length > need {
			return false // more than this frame
		}
	}
	// The parts that sectors cut the frame into.
	for start := 0; start < min(need, len(b)); {
		stop := start + sector - int((from+int64(start))%sector)
		part := b[start:min(stop, need, len(b))]
		if allZero(part) {
			return true
		}
		start = stop
	}
	for start := sector - int(from%sector); start < length; start += sector {
		if allZero(b[start:min(start+sector, length)]) {
			return true
		}
	}
	return false
}

func allZero(b []byte) bool {
	for _, x := range b {
		if x != 0 {
			return false
		}
	}
	return true
}

// byStream cuts a sorted list of segments into those of each stream.
func byStream(segs []segmentFile) (out [][]segmentFile) {
	for i := 0; i < len(segs); {
		k := i
		for k < len(segs) && segs[k].stream == segs[i].stream {
			k++
		}
		out = append(out, segs[i:k])
		i = k
	}
	return out
}

// all reads every stream beyond its state, those without a segment too.
func (fl *follower) all(dir string) (ends map[change.Stream]streamEnd, err error) {
	segs, err := listSegments(fl.fs, dir)
	if errors.Is(err, fs.ErrNotExist) {
		err = nil
	}
	if err != nil {
		return nil, err
	}
	ends = map[change.Stream]streamEnd{}
	for _, ss := range byStream(segs) {
		x := ss[0].stream
		if ends[x], err = fl.stream(x, ss); err != nil {
			return nil, err
		}
	}
	for _, st := range slices.Clone(fl.state.Streams) {
		if _, ok := ends[st.Stream]; !ok {
			if ends[st.Stream], err = fl.stream(st.Stream, nil); err != nil {
				return nil, err
			}
		}
	}
	return ends, nil
}

// adopt takes note of a change's time, unless it lies too far ahead of this device's clock.
func (st *indexState) adopt(t change.HLC, now time.Time) {
	if !t.Ahead(now) {
		st.Clock = max(st.Clock, t)
	}
}
