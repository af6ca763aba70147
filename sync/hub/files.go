package hub

import (
	"context"
	"errors"
	"fmt"
	"io"
	"strconv"
	"strings"
	"sync"
	"time"

	"github.com/nats-io/nats.go/jetstream"

	"cordwalk.example/cordwalk/sync/carry"
)

// Attachments travel in a stream of messages of their own, after the findings, in pieces:
//
//	cw.att.WHO.NAME.KIND.OFFSET.SIZE
//
// A device reads the names of the pieces, not the pieces, and fetches what it wants. That a file is whole
// its name tells: see package attach.

// Attached is the stream of messages of attachments.
const Attached = "CWA"

const pieceSize = 512 << 10

type pieceKey struct{ who, name string }

// pieces is what the hub has of one file from one sender.
type pieces struct {
	size int64
	seqs map[int64]uint64 // by offset
}

// whole returns the messages in order, if they are all there.
func (p *pieces) whole() (seqs []uint64, ok bool) {
	if p.size == 0 {
		s, ok := p.seqs[0]
		return []uint64{s}, ok
	}
	for at := int64(0); at < p.size; at += pieceSize {
		s, ok := p.seqs[at]
		if !ok {
			return nil, false
		}
		seqs = append(seqs, s)
	}
	return seqs, true
}

func parsePiece(subject string) (k pieceKey, offset, size int64, ok bool) {
	t := strings.Split(subject, ".")
	if len(t) != 7 || t[0] != "cw" || t[1] != "att" {
		return k, 0, 0, false
	}
	offset, err := strconv.ParseInt(t[5], 10, 64)
	size, err2 := strconv.ParseInt(t[6], 10, 64)
	if err != nil || err2 != nil || offset < 0 || size < 0 || size > 8<<30 || offset > size || offset%pieceSize != 0 {
		return k, 0, 0, false
	}
	return pieceKey{t[2], t[3] + "." + t[4]}, offset, size, true
}

// filer exchanges attachments during a session.
type filer struct {
	c      *Client
	files  carry.Attachments
	stream jetstream.Stream

	mu   sync.Mutex
	have map[pieceKey]*pieces
}

// exchangeFiles begins to exchange attachments. The returned function ends it.
func (c *Client) exchangeFiles(ctx context.Context) (stop func(), err error) {
	if c.o.Files == nil {
		return func() {}, nil
	}
	stream, err := c.js.Stream(ctx, Attached)
	if err != nil {
		return nil, fmt.Errorf("the hub has no mailbox for attachments yet: %w", err)
	}
	f := &filer{c: c, files: c.o.Files, stream: stream, have: map[pieceKey]*pieces{}}
	cons, err := c.js.OrderedConsumer(ctx, Attached, jetstream.OrderedConsumerConfig{HeadersOnly: true})
	if err != nil {
		return nil, err
	}
	ctx, cancel := context.WithCancel(ctx)
	caught := make(chan struct{})
	var once sync.Once
	if stream.CachedInfo().State.Msgs == 0 {
		once.Do(func() { close(caught) })
	}
	cc, err := cons.Consume(func(m jetstream.Msg) {
		meta, err := m.Metadata()
		if err != nil {
			return
		}
		if k, offset, size, ok := parsePiece(m.Subject()); ok {
			f.mu.Lock()
			p := f.have[k]
			if p == nil || p.size != size {
				p = &pieces{size: size, seqs: map[int64]uint64{}}
				f.have[k] = p
			}
			p.seqs[offset] = meta.Sequence.Stream
			f.mu.Unlock()
		}
		if meta.NumPending == 0 {
			once.Do(func() { close(caught) })
		}
	}, jetstream.ConsumeErrHandler(func(jetstream.ConsumeContext, error) {}))
	if err != nil {
		cancel()
		return nil, err
	}
	done := make(chan struct{})
	go func() {
		defer close(done)
		select {
		case <-caught:
		case <-ctx.Done():
			return
		}
		for {
			if err := f.round(ctx); err != nil && ctx.Err() == nil {
				c.fail(err)
			}
			select {
			case <-ctx.Done():
				return
			case <-time.After(c.o.Poll * 5):
			}
		}
	}()
	return func() { cancel(); cc.Stop(); <-done }, nil
}

// round fetches what is wanted and sends what the hub lacks.
func (f *filer) round(ctx context.Context) error {
	f.mu.Lock()
	var fetch []pieceKey
	onHub := map[string]bool{}
	lists := map[pieceKey][]uint64{}
	for k, p := range f.have {
		if seqs, ok := p.whole(); ok {
			onHub[k.name] = true
			fetch, lists[k] = append(fetch, k), seqs
		}
	}
	sizes := map[pieceKey]int64{}
	for k := range lists {
		sizes[k] = f.have[k].size
	}
	f.mu.Unlock()
	for _, k := range fetch {
		want, err := f.files.Wanted(ctx, k.name)
		if err != nil {
			return err
		}
		if !want {
			continue
		}
		err = f.files.Take(ctx, k.name, sizes[k], &fetcher{ctx: ctx, stream: f.stream, seqs: lists[k], left: sizes[k]})
		if ctx.Err() != nil {
			return ctx.Err()
		}
		if err != nil {
			// It is not what its name says, or the hub dropped a piece meanwhile, or its owner's data were
			// erased: this sender's copy is not looked at again.
			f.mu.Lock()
			delete(f.have, k)
			f.mu.Unlock()
			if !errors.Is(err, carry.ErrUnwanted) {
				f.c.mu.Lock()
				f.c.status.Refused = fmt.Errorf("the attachment %s on the hub was left alone: %w", k.name, err)
				f.c.mu.Unlock()
			}
		}
	}
	f.c.mu.Lock()
	busy := f.c.status.Unsent > 0
	f.c.mu.Unlock()
	if busy {
		return nil // findings first
	}
	mine, err := f.files.List(ctx)
	if err != nil {
		return err
	}
	for _, m := range mine {
		if !onHub[m.Name] {
			if err := f.send(ctx, m); err != nil {
				return err
			}
		}
	}
	return nil
}

// send puts a file on the hub, piece by piece.
func (f *filer) send(ctx context.Context, m carry.FileRef) error {
	in, err := f.files.Open(ctx, m.Name)
	if err != nil {
		return nil // erased meanwhile
	}
	defer in.Close()
	base, kind, ok := strings.Cut(m.Name, ".")
	if !ok {
		return nil
	}
	who := Who(f.c.o.Bag().Device.Verifier())
	buf := make([]byte, pieceSize)
	for at := int64(0); at < m.Size || at == 0; at += pieceSize {
		n, err := io.ReadFull(in, buf[:min(pieceSize, m.Size-at)])
		if err != nil && m.Size > 0 {
			return fmt.Errorf("reading the attachment %s: %w", m.Name, err)
		}
		subject := fmt.Sprintf("cw.att.%s.%s.%s.%d.%d", who, base, kind, at, m.Size)
		ack, err := f.c.js.Publish(ctx, subject, buf[:n], jetstream.WithMsgID(subject), jetstream.WithExpectStream(Attached))
		if err != nil {
			return fmt.Errorf("the hub did not take an attachment: %w", err)
		}
		f.mu.Lock()
		k := pieceKey{who, m.Name}
		p := f.have[k]
		if p == nil || p.size != m.Size {
			p = &pieces{size: m.Size, seqs: map[int64]uint64{}}
			f.have[k] = p
		}
		p.seqs[at] = ack.Sequence
		f.mu.Unlock()
	}
	return nil
}

// fetcher reads the pieces of a file one by one.
type fetcher struct {
	ctx    context.Context
	stream jetstream.Stream
	seqs   []uint64
	left   int64
	buf    []byte
}

func (r *fetcher) Read(b []byte) (int, error) {
	for len(r.buf) == 0 {
		if len(r.seqs) == 0 || r.left == 0 {
			if r.left > 0 {
				return 0, io.ErrUnexpectedEOF
			}
			return 0, io.EOF
		}
		m, err := r.stream.GetMsg(r.ctx, r.seqs[0])
		if err != nil {
			return 0, err
		}
		r.seqs, r.buf = r.seqs[1:], m.Data
		if int64(len(r.buf)) > r.left || len(r.buf) == 0 {
			return 0, io.ErrUnexpectedEOF
		}
		r.left -= int64(len(r.buf))
	}
	n := copy(b, r.buf)
	r.buf = r.buf[n:]
	return n, nil
}
