package hub

import (
	"bytes"
	"context"
	"fmt"
	"runtime"
	"sync"
	"time"

	"github.com/nats-io/nats.go/jetstream"

	"cordwalk.example/cordwalk/sync/carry"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/merge"
	"cordwalk.example/cordwalk/sync/segment"
)

// What comes in one stretch is made durable together: when nothing more is on the hub and half a poll has passed,
// when it is this many frames, or after some polls.
const (
	mostTaken = 8192
	latest    = 5
)

// mostOpened is how many segments are opened side by side; it bounds the memory, for what is inside may be large.
const mostOpened = 4

// intake takes in what the hub delivers during one session. Segments are checked and opened side by side, taken into
// the journal in their order, and made durable together while those that follow are being opened.
type intake struct {
	c     *Client
	ctx   context.Context
	fail  context.CancelCauseFunc
	queue chan coming
	some  chan struct{} // something was taken
	end   chan struct{} // and nothing more is on the hub
	full  chan struct{} // so much that it must not wait
	wait  sync.WaitGroup

	gate sync.Mutex // one message at a time
	over bool       // no more

	mu    sync.Mutex
	taken carry.Taken // in the journal and not durable yet
	upTo  uint64      // the last message that was dealt with
}

// coming is a message whose segment is being opened.
type coming struct {
	seq, pending uint64 // its number, and how many follow it
	tail         [32]byte
	opened       chan opened
}

type opened struct {
	rd  *segment.Reader // nil where there is an error
	err error
	own bool // this device sent it
}

// newIntake begins to take in. fail is called with what makes the session end.
func (c *Client) newIntake(ctx context.Context, fail context.CancelCauseFunc) *intake {
	in := &intake{c: c, ctx: ctx, fail: fail, queue: make(chan coming, min(runtime.GOMAXPROCS(0), mostOpened)),
		some: make(chan struct{}, 1), end: make(chan struct{}, 1), full: make(chan struct{}, 1)}
	in.wait.Go(in.takeAll)
	in.wait.Go(in.settleAll)
	return in
}

func signal(c chan struct{}) {
	select {
	case c <- struct{}{}:
	default:
	}
}

// add hands a message over. It waits while many are being opened, which holds the hub back.
func (in *intake) add(m jetstream.Msg) {
	in.gate.Lock()
	defer in.gate.Unlock()
	meta, err := m.Metadata()
	if err != nil || in.over || in.ctx.Err() != nil {
		return // no message of a stream, or too late
	}
	data := m.Data()
	x := coming{seq: meta.Sequence.Stream, pending: meta.NumPending, opened: make(chan opened, 1)}
	copy(x.tail[:], data[max(0, len(data)-len(x.tail)):])
	if in.c.sentIt(x.tail) {
		x.opened <- opened{own: true}
	} else if len(data) < smallMessage {
		x.opened <- in.c.open(data, false)
	} else {
		go func() { x.opened <- in.c.open(data, true) }()
	}
	select {
	case in.queue <- x:
	case <-in.ctx.Done():
		drop(x)
	}
}

// drop forgets a message that is being opened.
func drop(x coming) {
	if o := <-x.opened; o.rd != nil {
		o.rd.Stop()
	}
}

// Messages shorter than smallMessage hold some findings: opening them takes no longer than handing them over.
const smallMessage = 8 << 10

// open checks who signed a segment, and begins to open it.
func (c *Client) open(data []byte, ahead bool) opened {
	rd, err := segment.NewReader(bytes.NewReader(data), c.o.Bag().Ring)
	if err != nil {
		return opened{err: err}
	}
	if want, ok := c.o.Members.Signer(rd.Stream.Device); !ok || want != rd.Verifier {
		return opened{err: fmt.Errorf("a segment of stream %s: %w", rd.Stream, segment.ErrUnsigned)}
	}
	if ahead {
		rd.Ahead()
	}
	return opened{rd: rd}
}

// takeAll takes messages into the journal.
func (in *intake) takeAll() {
	for {
		select {
		case <-in.ctx.Done():
			return
		case x := <-in.queue:
			if err := in.take(x); err != nil {
				in.fail(err)
				return
			}
		}
	}
}

func (in *intake) take(x coming) error {
	o := <-x.opened
	in.mu.Lock()
	err := o.err
	if o.rd != nil {
		err = in.c.segment(in.ctx, o.rd, &in.taken)
		o.rd.Stop()
	}
	if carry.OwnSide(err) || in.ctx.Err() != nil {
		in.mu.Unlock()
		return err
	}
	in.upTo = x.seq
	full := in.taken.Frames >= mostTaken
	in.mu.Unlock()

	in.c.mu.Lock()
	in.c.status.Behind = x.pending
	if err != nil {
		in.c.status.Refused = fmt.Errorf("a message on the hub was left alone: %w", err)
	}
	in.c.mu.Unlock()
	signal(in.some)
	if x.pending == 0 {
		signal(in.end)
	}
	if full {
		signal(in.full)
	}
	return nil
}

// settleAll makes durable what was taken.
func (in *intake) settleAll() {
	for {
		select {
		case <-in.ctx.Done():
			return
		case <-in.some:
		}
		long := time.NewTimer(latest * in.c.o.Poll)
		select {
		case <-in.ctx.Done():
		case <-long.C:
		case <-in.full:
		case <-in.end: // what follows closely is made durable with it
			short := time.NewTimer(in.c.o.Poll / 2)
			select {
			case <-in.ctx.Done():
			case <-in.full:
			case <-short.C:
			}
			short.Stop()
		}
		long.Stop()
		if err := in.settle(in.ctx); err != nil {
			in.fail(err)
			return
		}
	}
}

// settle makes durable what was taken; more may be taken meanwhile.
func (in *intake) settle(ctx context.Context) error {
	in.mu.Lock()
	taken, upTo := in.taken, in.upTo
	in.taken = carry.Taken{}
	in.mu.Unlock()
	if err := taken.Commit(ctx, in.c.o.Journal); err != nil {
		return err // the next session reads it again
	}
	c := in.c
	c.mu.Lock()
	defer c.mu.Unlock()
	c.status.Received += uint64(taken.Frames)
	c.status.Forks = append(c.status.Forks, taken.Forks...)
	c.note(taken.Frames)
	c.seq = max(c.seq, upTo)
	return nil
}

// stop ends the taking in, once the session's context has ended; what was taken is made durable.
func (in *intake) stop() error {
	in.gate.Lock()
	in.over = true
	in.gate.Unlock()
	in.wait.Wait()
	for {
		select {
		case x := <-in.queue:
			drop(x)
			continue
		default:
		}
		break
	}
	return in.settle(context.WithoutCancel(in.ctx))
}

// mostSent bounds how many segments this device remembers to have sent.
const mostSent = 4096

// sending notes a segment that goes out. mu must be held.
func (c *Client) sending(tail [32]byte, s change.Stream, first uint64) {
	if len(c.sent) >= mostSent {
		clear(c.sent)
	}
	c.sent[tail] = true
	c.stir(s, first)
}

// sentIt reports whether this device sent the segment that ends so: it need not be checked and opened.
func (c *Client) sentIt(tail [32]byte) bool {
	c.mu.Lock()
	defer c.mu.Unlock()
	ok := c.sent[tail]
	delete(c.sent, tail)
	return ok
}

// stir notes that something of a stream is moving. mu must be held.
func (c *Client) stir(s change.Stream, first uint64) {
	now := c.o.Now()
	if len(c.filled) > 10_000 {
		clear(c.filled)
	}
	c.filled[start{s, first}], c.moving[s] = now, now
}

// segment takes a segment into the journal.
func (c *Client) segment(ctx context.Context, rd *segment.Reader, taken *carry.Taken) error {
	c.mu.Lock()
	c.stir(rd.Stream, rd.First)
	c.mu.Unlock()
	held, err := c.o.Journal.Streams(ctx)
	if err != nil {
		return err
	}
	var main *carry.Held
	for i, h := range held {
		if h.Of != rd.Stream {
			continue
		}
		if h.Last == rd.Last && h.Hash == rd.Hash {
			return nil
		}
		if h.Stream == h.Of {
			main = &held[i]
		}
	}
	if main != nil && covers(main.Spans, rd.First, rd.Last) {
		// A repeat, unless it is another branch.
		hash, ok, err := c.o.Journal.At(ctx, main.Stream, rd.Last)
		if err != nil {
			return err
		}
		if ok && hash == rd.Hash {
			return nil
		}
	}
	if rd.Stream.Device == c.o.Incarnation() {
		c.o.Notice("this device's records were also continued elsewhere (a copied or restored store); both are kept, and this device goes on under a new name")
		if err := c.o.Journal.Renew(ctx); err != nil {
			return err
		}
	}
	return taken.Take(ctx, c.o.Journal, rd, held)
}

func covers(spans []merge.Span, first, last uint64) bool {
	for _, sp := range spans {
		if sp.First <= first && last <= sp.Last {
			return true
		}
	}
	return false
}
