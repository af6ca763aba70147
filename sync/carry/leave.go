package carry

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"maps"
	"path/filepath"
	"slices"
	"syscall"

	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/merge"
	"cordwalk.example/cordwalk/sync/segment"
)

const (
	maxStatement = 64 << 10
	// targetRaw is how many bytes of frames go into one segment.
	targetRaw = 8 << 20
	// When this many segments of one stream are small, they are made into one.
	mergeCount = 16
	smallSize  = 4 << 20
	// maxSegments is how many segments of ours a stream may have in a folder.
	maxSegments = 200
)

func statementFile(b []byte) string {
	s := sha256.Sum256(b)
	return hex.EncodeToString(s[:20]) + ".member"
}

func isReadOnly(err error) bool { return errors.Is(err, syscall.EROFS) }
func isFull(err error) bool     { return errors.Is(err, syscall.ENOSPC) }

// leave puts what the folder lacks into it, and a new head if anything has changed.
func (x *exchange) leave(ctx context.Context) error {
	if x.ReceiveOnly || x.report.Blocked != nil {
		return nil
	}
	if x.renewed { // the others must learn the new name
		if err := x.members(); err != nil {
			return err
		}
	}
	held, err := x.held(ctx)
	if err != nil {
		return err
	}
	var own []Ref
	for _, r := range x.refs {
		if r.own && filepath.Base(r.path) == r.File() && !x.spoilt[r.Name] {
			own = append(own, r.Ref)
		}
	}
	lost := len(own) != len(x.mine.Segments)
	var obsolete []string
	for _, r := range x.mine.Segments {
		if x.spoilt[r.Name] {
			obsolete = append(obsolete, r.File())
		}
	}
	for _, h := range held {
		added, gone, err := x.leaveStream(ctx, h, own)
		own = append(own, added...)
		for _, g := range gone {
			own = slices.DeleteFunc(own, func(r Ref) bool { return r.Name == g.Name })
			obsolete = append(obsolete, g.File())
		}
		if errors.Is(err, errOwnSide) || ctx.Err() != nil {
			return errors.Join(err, ctx.Err())
		}
		if err != nil {
			x.blocked(err)
			break
		}
	}
	if x.report.Blocked == nil {
		if err := x.leaveFiles(ctx); errors.Is(err, errOwnSide) || ctx.Err() != nil {
			return errors.Join(err, ctx.Err())
		} else if err != nil {
			x.blocked(err)
		}
	}
	next := Head{Practice: x.Bag().Practice, Device: x.Incarnation(), Counter: x.mine.Counter, Time: change.HLCAt(x.Now()), Segments: own}
	for _, h := range held {
		next.Streams = append(next.Streams, Reach{h.Stream.Device, h.Stream.Site, h.Last, h.Hash})
	}
	next.Bad = slices.SortedFunc(maps.Keys(x.bad), func(a, b [32]byte) int { return bytes.Compare(a[:], b[:]) })
	if next.Sums, err = x.Journal.Sums(ctx); err != nil {
		return fmt.Errorf("reading this device's state: %w", err)
	}
	slices.SortFunc(next.Segments, func(a, b Ref) int {
		if c := a.Stream().Compare(b.Stream()); c != 0 {
			return c
		}
		return cmpUint(a.First, b.First)
	})
	if x.had && !lost && sameHead(x.mine, next) || len(held) == 0 && !x.had {
		return nil
	}
	for _, name := range x.heads { // never a number that lies here already, readable or not
		if _, n, ok := parseHeadFile(name); ok {
			next.Counter = max(next.Counter, n)
		}
	}
	next.Counter++
	data, err := next.Encode(x.Bag().Device)
	if err != nil {
		return err
	}
	if err := x.put(headsDir, headFile(next.Device, next.Counter), data); err != nil {
		x.blocked(err)
		return nil
	}
	// The head before this one stays, should this one be damaged; older ones go, and so do
	// segments that a larger one replaced, once no head names them any more.
	for _, name := range x.heads {
		if _, n, ok := parseHeadFile(name); ok && n+1 < next.Counter {
			_ = x.FS.Remove(filepath.Join(x.dir, headsDir, name))
		}
	}
	for _, name := range obsolete {
		_ = x.FS.Remove(filepath.Join(x.dir, dataDir, name))
	}
	return nil
}

// sameHead reports whether two heads of ours say the same but for number and time.
func sameHead(a, b Head) bool {
	a.Counter, b.Counter, a.Time, b.Time = 0, 0, 0, 0
	x, err := enc.Marshal(a)
	y, err2 := enc.Marshal(b)
	return err == nil && err2 == nil && bytes.Equal(x, y)
}

// leaveStream writes segments of one stream for what the folder lacks. It returns the segments
// written and those that they replace.
func (x *exchange) leaveStream(ctx context.Context, h Held, own []Ref) (added, gone []Ref, err error) {
	var there []merge.Span
	for _, r := range x.refs {
		if r.Stream() != h.Of || x.spoilt[r.Name] {
			continue
		}
		if ok, err := x.holds(ctx, h, r.Ref); err != nil {
			return nil, nil, err
		} else if ok {
			there = merge.AddSpan(there, merge.Span{First: r.First, Last: r.Last})
		}
	}
	// Many small segments of ours are written again as one.
	var small []Ref
	count := 0
	for _, r := range own {
		if r.Stream() != h.Of {
			continue
		}
		if ok, err := x.holds(ctx, h, r); err != nil {
			return nil, nil, err
		} else if ok {
			count++
			if r.Size < smallSize {
				small = append(small, r)
			}
		}
	}
	if len(small) >= mergeCount || count >= maxSegments && len(small) > 1 {
		slices.SortFunc(small, func(a, b Ref) int { return cmpUint(a.First, b.First) })
		a, g, err := x.condense(ctx, h, small)
		added, gone = append(added, a...), append(gone, g...)
		if err != nil {
			return added, gone, err
		}
	}
	for _, sp := range h.Spans {
		for _, miss := range missing(sp, there) {
			a, err := x.write(ctx, h, miss.First, miss.Last)
			added = append(added, a...)
			if err != nil {
				return added, gone, err
			}
		}
	}
	return added, gone, nil
}

// missing returns the parts of a span that are not there.
func missing(sp merge.Span, there []merge.Span) (out []merge.Span) {
	next := sp.First
	for _, t := range there {
		if t.Last < next {
			continue
		}
		if t.First > sp.Last {
			break
		}
		if t.First > next {
			out = append(out, merge.Span{First: next, Last: t.First - 1})
		}
		next = t.Last + 1
	}
	if next <= sp.Last {
		out = append(out, merge.Span{First: next, Last: sp.Last})
	}
	return out
}

// condense writes runs of small segments again as larger ones.
func (x *exchange) condense(ctx context.Context, h Held, small []Ref) (added, gone []Ref, err error) {
	for len(small) > 0 {
		run := 1
		for run < len(small) && small[run].First == small[run-1].Last+1 {
			run++
		}
		if run > 1 {
			a, err := x.write(ctx, h, small[0].First, small[run-1].Last)
			if err != nil {
				return added, gone, err
			}
			if len(a) > 0 && len(a) < run && a[len(a)-1].Last == small[run-1].Last {
				added, gone = append(added, a...), append(gone, small[:run]...)
			}
		}
		small = small[run:]
	}
	return added, gone, nil
}

var errEnough = errors.New("enough")

// write makes segments of a stream from number first to last.
func (x *exchange) write(ctx context.Context, h Held, first, last uint64) (added []Ref, err error) {
	signer, _ := x.Members.Signer(h.Of.Device)
	err = BuildSegments(ctx, x.Journal, x.Bag(), signer == x.Bag().Device.Verifier(), h, first, last, targetRaw, func(b *segment.Builder, s segment.Signed) error {
		r, err := x.finish(b, s)
		if err == nil {
			added = append(added, r)
		}
		return err
	})
	return added, err
}

// BuildSegments makes segments of about target bytes of frames from what the journal holds of a stream
// between two numbers, and gives each to emit, which finishes it with the signed head. A segment
// ends where its device signed: in a stream of this device (own) anywhere, in another's only at a
// head that came with it; what lies behind the last such head is left out.
func BuildSegments(ctx context.Context, j Journal, bag key.Bag, own bool, h Held, first, last uint64, target int, emit func(*segment.Builder, segment.Signed) error) error {
	ends := map[segment.Head]segment.Signed{}
	if !own {
		signed, err := j.Signed(ctx, h.Stream)
		if err != nil {
			return fmt.Errorf("%w: %w", errOwnSide, err)
		}
		for _, s := range signed {
			ends[s.Head] = s
		}
	}
	b := segment.NewBuilder(bag.Ring)
	var signed *segment.Signed // for what b holds
	var pending []change.Frame // behind that, up to the next signed head
	finish := func() error {
		if b.Frames() == 0 {
			return nil
		}
		if own {
			s := segment.Sign(b.Head(), bag.Device)
			signed = &s
		}
		if err := emit(b, *signed); err != nil {
			return err
		}
		b, signed = segment.NewBuilder(bag.Ring), nil
		return nil
	}
	add := func(f change.Frame) error {
		if b.Frames() > 0 && (b.Full(len(f.Raw)) || f.First != b.Head().Last+1 || f.Prev != b.Head().Hash) {
			if err := finish(); err != nil {
				return err
			}
		}
		return b.Add(f)
	}
	err := j.Frames(ctx, h.Stream, first, func(f change.Frame) error {
		if err := ctx.Err(); err != nil {
			return err
		}
		if f.First > last {
			return errEnough
		}
		if f.Last < first || f.Stream != h.Of {
			return nil
		}
		if own {
			if b.Raw() >= target {
				if err := finish(); err != nil {
					return err
				}
			}
			return add(f)
		}
		if n := len(pending); n > 0 && (pending[n-1].Last+1 != f.First || pending[n-1].Hash() != f.Prev) {
			pending = nil // a hole, or another branch: what stands before it was not signed
		}
		pending = append(pending, f)
		s, ok := ends[segment.Head{Stream: h.Of, Last: f.Last, Hash: f.Hash()}]
		if !ok {
			return nil
		}
		raw := 0
		for _, p := range pending {
			raw += len(p.Raw)
		}
		if b.Frames() > 0 && b.Raw()+raw > target {
			if err := finish(); err != nil {
				return err
			}
		}
		for _, p := range pending {
			if err := add(p); err != nil {
				return err
			}
		}
		pending, signed = nil, &s
		return nil
	})
	if err != nil && !errors.Is(err, errEnough) {
		return err
	}
	return finish()
}

// finish writes a segment's file and reads it back.
func (x *exchange) finish(b *segment.Builder, s segment.Signed) (Ref, error) {
	var w bytes.Buffer
	h, name, err := b.Finish(&w, s)
	if err != nil {
		return Ref{}, err
	}
	r := Ref{h.Stream.Device, h.Stream.Site, h.First, h.Last, h.Prev, h.Hash, int64(w.Len()), name}
	if err := x.put(dataDir, r.File(), w.Bytes()); err != nil {
		return Ref{}, err
	}
	x.report.Sent += int(h.Frames)
	x.Progress("sending", int64(x.report.Sent), 0)
	return r, nil
}
