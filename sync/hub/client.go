package hub

import (
	"bytes"
	"context"
	"encoding/binary"
	"encoding/hex"
	"errors"
	"fmt"
	"math/rand/v2"
	"slices"
	"sync"
	"time"

	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/carry"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/merge"
	"cordwalk.example/cordwalk/sync/segment"
)

// Options of a client.
type Options struct {
	Address     Address
	Bag         func() key.Bag // asked again as epochs are added
	Incarnation func() change.Incarnation
	Journal     carry.Journal
	Members     carry.Members
	Files       carry.Attachments // may be nil
	Sites       []change.Site     // whose records are taken in; none: all
	// Extract makes an extract of a patient for the device named who, for a site that does not keep it; none for a
	// patient that is not here. May be nil: then asks are left to others.
	Extract func(ctx context.Context, patient exam.ID, who string) ([]byte, error)
	Place   Place                                    // remembers how far the hub was read; may be nil
	Now     func() time.Time                         // nil: time.Now
	Notice  func(words string)                       // messages for people; may be nil
	Poll    time.Duration                            // how often the journal is looked at for new entries, and the measure of all other waits; 0: 100 ms
	Connect func(...nats.Option) (*nats.Conn, error) // for tests and other ways in; nil: by Address
}

// Place remembers how far a hub was read, so that the next start goes on there.
type Place interface {
	Load() (hub string, seq uint64, err error)
	Save(hub string, seq uint64) error
}

// Status is what the Devices screen shows of the hub.
type Status struct {
	Connected bool
	Unsent    uint64    // changes of this device that the hub has not acknowledged
	Since     time.Time // since when the oldest of them waits; zero if none does
	Sent      uint64    // frames acknowledged since the start
	Received  uint64    // frames taken in since the start
	Rate      float64   // frames a second, in and out, of late
	Behind    uint64    // messages on the hub that are still to be read
	Peers     []carry.Peer
	Forks     []carry.Fork
	Oldest    time.Time // of the messages that the hub still keeps
	Bytes     uint64    // of them
	Limits    Limits    // how long and how much the hub keeps
	Err       error     // why nothing goes on at the moment
	Refused   error     // the last message that was left alone, and why
}

// Client exchanges with a hub until it is told to stop.
type Client struct {
	o    Options
	nc   *nats.Conn
	js   jetstream.JetStream
	kick chan struct{}

	mu      sync.Mutex
	status  Status
	acked   map[change.Stream]uint64    // what the hub has of our own streams
	peers   map[key.Verifier]carry.Head // the newest head of each
	wanted  map[change.Stream]time.Time // when we asked last
	lacking map[change.Stream]lack      // what of it is missing
	moving  map[change.Stream]time.Time // when something of it came last, or we noticed that we lack something
	filled  map[start]time.Time         // what was sent or came of late
	sent    map[[32]byte]bool           // what we sent and did not see again yet, by its trailing hash
	known   map[string]bool             // statements on the hub
	read    uint64                      // up to where they were read
	moved   []moved                     // for the rate
	seq     uint64                      // of the last message read
	hub     string                      // which hub that was: when its stream was made
}

type moved struct {
	at time.Time
	n  int
}

// New makes a client.
func New(o Options) *Client {
	if o.Now == nil {
		o.Now = time.Now
	}
	if o.Notice == nil {
		o.Notice = func(string) {}
	}
	if o.Poll == 0 {
		o.Poll = 100 * time.Millisecond
	}
	if o.Connect == nil {
		o.Connect = func(more ...nats.Option) (*nats.Conn, error) {
			return connect(o.Address, o.Bag().Device, "cordwalk", more...)
		}
	}
	return &Client{o: o, kick: make(chan struct{}, 1), acked: map[change.Stream]uint64{}, peers: map[key.Verifier]carry.Head{},
		wanted: map[change.Stream]time.Time{}, moving: map[change.Stream]time.Time{}, filled: map[start]time.Time{}, known: map[string]bool{}, sent: map[[32]byte]bool{}}
}

// Kick tells the client that there are new entries, so that it need not look.
func (c *Client) Kick() {
	select {
	case c.kick <- struct{}{}:
	default:
	}
}

// Status returns what is going on.
func (c *Client) Status() Status {
	c.mu.Lock()
	defer c.mu.Unlock()
	s := c.status
	s.Connected = c.nc != nil && c.nc.IsConnected()
	n, since := 0, c.o.Now().Add(-5*time.Second)
	for _, m := range c.moved {
		if m.at.After(since) {
			n += m.n
		}
	}
	s.Rate = float64(n) / 5
	s.Peers, s.Forks = c.peerList(), slices.Clone(s.Forks)
	return s
}

func (c *Client) peerList() (out []carry.Peer) {
	now := c.o.Now()
	for v, h := range c.peers {
		out = append(out, carry.Peer{Device: h.Device, Verifier: v, Time: h.Time, Ahead: h.Time.Ahead(now)})
	}
	slices.SortFunc(out, func(a, b carry.Peer) int { return bytes.Compare(a.Device[:], b.Device[:]) })
	return out
}

func (c *Client) note(n int) {
	now := c.o.Now()
	c.moved = append(c.moved, moved{now, n})
	for len(c.moved) > 0 && now.Sub(c.moved[0].at) > 10*time.Second {
		c.moved = c.moved[1:]
	}
}

func (c *Client) fail(err error) {
	c.mu.Lock()
	defer c.mu.Unlock()
	c.status.Err = err
}

// giveUp is after how many sessions that got nowhere another node of a cluster is tried.
const giveUp = 2

// Run exchanges until ctx ends. It keeps trying: a hub that is away is no error. It returns what
// makes going on senseless: that this device may not use the hub, or that its own journal fails.
func (c *Client) Run(ctx context.Context) error {
	ctx, cancel := context.WithCancelCause(ctx)
	nc, err := c.o.Connect(nats.RetryOnFailedConnect(true), nats.ReconnectWait(5*c.o.Poll), nats.ErrorHandler(func(_ *nats.Conn, _ *nats.Subscription, err error) { c.fail(err) }),
		nats.DisconnectErrHandler(func(_ *nats.Conn, err error) {
			if err != nil {
				c.fail(err)
			}
		}), nats.ClosedHandler(func(nc *nats.Conn) {
			if err := nc.LastError(); err != nil {
				cancel(fmt.Errorf("the hub at %s refused this device: %w", c.o.Address.Host, err))
			}
		}))
	if err != nil {
		cancel(nil)
		return fmt.Errorf("reaching the hub at %s: %w", c.o.Address.Host, err)
	}
	defer nc.Close()
	js, err := jetstream.New(nc, jetstream.WithPublishAsyncMaxPending(64))
	if err != nil {
		cancel(nil)
		return err
	}
	c.mu.Lock()
	c.nc, c.js = nc, js
	c.mu.Unlock()
	counting := make(chan struct{})
	defer func() {
		cancel(nil)
		<-counting
	}()
	go func() {
		defer close(counting)
		t := time.NewTicker(5 * c.o.Poll)
		defer t.Stop()
		for {
			select {
			case <-ctx.Done():
				return
			case <-t.C:
			}
			if !nc.IsConnected() {
				if err := c.countUnsent(ctx); err != nil && ctx.Err() == nil {
					c.fail(err)
				}
			}
		}
	}()
	failed := 0 // sessions one after the other that got nowhere
	for ctx.Err() == nil {
		before := c.Status()
		err := c.session(ctx)
		if carry.OwnSide(err) {
			return err
		}
		if err != nil && ctx.Err() == nil {
			c.fail(err)
		}
		failed++
		if now := c.Status(); now.Sent != before.Sent || now.Received != before.Received {
			failed = 0
		}
		if failed >= giveUp && nc.IsConnected() {
			// Its node may be cut off from the others of its cluster: another one may be better.
			_ = nc.ForceReconnect()
			failed = 0
		}
		select {
		case <-ctx.Done():
		case <-time.After(5 * c.o.Poll):
		}
	}
	if err := context.Cause(ctx); err != nil && !errors.Is(err, context.Canceled) && !errors.Is(err, context.DeadlineExceeded) {
		return err
	}
	return nil
}

// session exchanges for as long as the streams of messages are what they were.
func (c *Client) session(ctx context.Context) error {
	ctx, cancel := context.WithCancelCause(ctx)
	defer cancel(nil)
	stream, err := c.js.Stream(ctx, Segments)
	if err != nil {
		return fmt.Errorf("the hub has no mailbox yet: %w", err)
	}
	info := stream.CachedInfo()
	hub := info.Created.UTC().Format(time.RFC3339Nano)
	from := uint64(1)
	if c.o.Place != nil {
		if was, seq, err := c.o.Place.Load(); err == nil && was == hub && seq <= info.State.LastSeq {
			from = seq + 1
		}
	}
	c.mu.Lock()
	clear(c.acked)
	clear(c.known)
	clear(c.lacking)
	c.read = 0
	c.seq, c.hub = from-1, hub
	c.keeps(info)
	c.mu.Unlock()

	if err := c.exchangeMembers(ctx); err != nil {
		return err
	}
	wants, err := c.nc.Subscribe("cw.want.>", func(m *nats.Msg) { go c.answer(ctx, m.Subject, m.Data) })
	if err != nil {
		return err
	}
	defer wants.Unsubscribe()

	heads, err := c.js.OrderedConsumer(ctx, Heads, jetstream.OrderedConsumerConfig{DeliverPolicy: jetstream.DeliverLastPerSubjectPolicy})
	if err != nil {
		return err
	}
	hc, err := heads.Consume(func(m jetstream.Msg) { c.head(m.Data()) }, jetstream.ConsumeErrHandler(func(jetstream.ConsumeContext, error) {}))
	if err != nil {
		return err
	}
	defer hc.Stop()

	filters := []string{"cw.seg.>", "cw.fill.>"}
	if len(c.o.Sites) > 0 {
		filters = nil
		for _, s := range c.o.Sites {
			filters = append(filters, "cw.seg."+s.String()+".*", "cw.fill.*."+s.String()+".*")
		}
	}
	segs, err := c.js.OrderedConsumer(ctx, Segments, jetstream.OrderedConsumerConfig{DeliverPolicy: jetstream.DeliverByStartSequencePolicy, OptStartSeq: from, FilterSubjects: filters})
	if err != nil {
		return err
	}
	in := c.newIntake(ctx, cancel)
	// What was taken in before the session ends is kept.
	defer func() {
		cancel(nil)
		if err := in.stop(); err != nil {
			c.fail(err)
		}
		c.savePlace()
	}()
	sc, err := segs.Consume(in.add, jetstream.PullMaxMessagesWithBytesLimit(256, 16<<20), jetstream.ConsumeErrHandler(func(jetstream.ConsumeContext, error) {}))
	if err != nil {
		return err
	}
	defer sc.Stop()

	stopFiles, err := c.exchangeFiles(ctx)
	if err != nil {
		return err
	}
	defer stopFiles()
	stopExtracts, err := c.giveExtracts(ctx)
	if err != nil {
		return err
	}
	defer stopExtracts()

	tick := time.NewTicker(c.o.Poll)
	defer tick.Stop()
	slow := time.NewTicker(20 * c.o.Poll)
	defer slow.Stop()
	var heard told
	for {
		select {
		case <-ctx.Done():
			return context.Cause(ctx)
		case <-tick.C:
		case <-c.kick:
		case <-slow.C:
			c.savePlace()
			if !c.nc.IsConnected() {
				continue
			}
			// A hub that lost its data has another stream of messages, or one that ends early.
			info, err := stream.Info(ctx)
			if err != nil {
				return err
			}
			c.mu.Lock()
			seq := c.seq
			c.keeps(info)
			c.mu.Unlock()
			if info.Created.UTC().Format(time.RFC3339Nano) != hub || info.State.LastSeq < seq {
				c.o.Notice("the hub has lost what it held; it is filled again")
				return errors.New("the hub has lost what it held")
			}
			if err := c.exchangeMembers(ctx); err != nil {
				return err
			}
			if err := c.leaveHead(ctx, &heard); err != nil {
				return err
			}
			if err := c.ask(ctx, info.State.LastSeq); err != nil {
				return err
			}
			continue
		}
		if !c.nc.IsConnected() {
			continue
		}
		if err := c.send(ctx); err != nil {
			return err
		}
	}
}

// keeps notes what the hub holds and keeps. mu must be held.
func (c *Client) keeps(i *jetstream.StreamInfo) {
	c.status.Oldest, c.status.Bytes = i.State.FirstTime, i.State.Bytes
	c.status.Limits = Limits{Age: i.Config.MaxAge, Bytes: i.Config.MaxBytes, Replicas: i.Config.Replicas}
}

func (c *Client) savePlace() {
	c.mu.Lock()
	hub, seq := c.hub, c.seq
	c.mu.Unlock()
	if c.o.Place != nil && seq > 0 {
		if err := c.o.Place.Save(hub, seq); err != nil {
			c.fail(err) // the hub is read again from an earlier place: no harm
		}
	}
}

// exchangeMembers learns the hub's statements and adds ours.
func (c *Client) exchangeMembers(ctx context.Context) error {
	s, err := c.js.Stream(ctx, Members)
	if err != nil {
		return fmt.Errorf("the hub has no mailbox yet: %w", err)
	}
	state := s.CachedInfo().State
	c.mu.Lock()
	read := c.read
	c.mu.Unlock()
	if state.Msgs > 0 && state.LastSeq > read {
		var found [][]byte
		for seq := max(state.FirstSeq, read+1); seq <= state.LastSeq; seq++ {
			m, err := s.GetMsg(ctx, seq)
			if errors.Is(err, jetstream.ErrMsgNotFound) {
				continue
			}
			if err != nil {
				return err
			}
			found = append(found, m.Data)
		}
		ours := map[string]bool{}
		for _, raw := range c.o.Members.Statements() {
			ours[string(raw)] = true
		}
		c.mu.Lock()
		for _, f := range found {
			c.known[string(f)] = true
		}
		c.mu.Unlock()
		found = slices.DeleteFunc(found, func(f []byte) bool { return ours[string(f)] })
		if _, err := c.o.Members.Learn(found); err != nil {
			return err
		}
		c.mu.Lock()
		c.read = state.LastSeq
		c.mu.Unlock()
	}
	for _, raw := range c.o.Members.Statements() {
		c.mu.Lock()
		there := c.known[string(raw)]
		c.mu.Unlock()
		if there {
			continue
		}
		if _, err := c.js.Publish(ctx, "cw.member", raw, jetstream.WithMsgID(msgID("member", raw))); err != nil {
			return fmt.Errorf("sending the member list: %w", err)
		}
		c.mu.Lock()
		c.known[string(raw)] = true
		c.mu.Unlock()
	}
	return nil
}

func msgID(kind string, parts ...[]byte) string {
	h := key.Secret{}.MAC(append([][]byte{[]byte(kind)}, parts...)...)
	return kind + "-" + hex.EncodeToString(h[:16])
}

// ours reports whether this device signs for a stream.
func (c *Client) ours(s change.Stream) bool {
	v, ok := c.o.Members.Signer(s.Device)
	return ok && v == c.o.Bag().Device.Verifier()
}

// countUnsent works out what waits while the hub is away.
func (c *Client) countUnsent(ctx context.Context) error {
	held, err := c.o.Journal.Streams(ctx)
	if err != nil {
		return err
	}
	c.mu.Lock()
	defer c.mu.Unlock()
	var n uint64
	for _, h := range held {
		if a, ok := c.acked[h.Of]; c.ours(h.Of) && ok && h.Last > a {
			n += h.Last - a
		}
	}
	c.unsent(n)
	return nil
}

func (c *Client) unsent(n uint64) {
	c.status.Unsent = n
	switch {
	case n == 0:
		c.status.Since = time.Time{}
	case c.status.Since.IsZero():
		c.status.Since = c.o.Now()
	}
}

// send puts what the hub lacks of our own streams there, and of streams of others that it lacks altogether.
func (c *Client) send(ctx context.Context) error {
	held, err := c.o.Journal.Streams(ctx)
	if err != nil {
		return err
	}
	for _, h := range held {
		if h.Stream != h.Of {
			continue // second branches travel when they are asked for
		}
		c.mu.Lock()
		from, known := c.acked[h.Of]
		c.mu.Unlock()
		if !known {
			if from, err = c.onHub(ctx, h.Of); err != nil {
				return err
			}
			c.mu.Lock()
			c.acked[h.Of] = from
			c.mu.Unlock()
		}
		if h.Last <= from {
			continue
		}
		if !c.ours(h.Of) {
			if known {
				continue // its own device sends it; it is asked for if not
			}
			if err := c.publish(ctx, h, from+1, h.Last, true); err != nil {
				return err
			}
			continue
		}
		c.mu.Lock()
		c.unsent(h.Last - from)
		c.mu.Unlock()
		if err := c.publish(ctx, h, from+1, h.Last, false); err != nil {
			return err
		}
		c.mu.Lock()
		c.unsent(0)
		c.status.Err = nil
		c.mu.Unlock()
	}
	return nil
}

// onHub returns up to which number the hub has a stream.
func (c *Client) onHub(ctx context.Context, s change.Stream) (uint64, error) {
	stream, err := c.js.Stream(ctx, Segments)
	if err != nil {
		return 0, err
	}
	var last uint64
	for _, subject := range []string{segSubject(s), fillSubject("*", s)} {
		m, err := stream.GetLastMsgForSubject(ctx, subject)
		if errors.Is(err, jetstream.ErrMsgNotFound) {
			continue
		}
		if err != nil {
			return 0, err
		}
		if h, err := segment.ParseHeader(m.Data); err == nil && h.Stream == s {
			last = max(last, h.Last)
		}
	}
	return last, nil
}

// publish sends segments of a stream and waits until the hub has them.
func (c *Client) publish(ctx context.Context, h carry.Held, first, last uint64, fill bool) error {
	bag := c.o.Bag()
	subject := segSubject(h.Of)
	if fill {
		subject = fillSubject(Who(bag.Device.Verifier()), h.Of)
	}
	type sent struct {
		future jetstream.PubAckFuture
		last   uint64
		frames int
	}
	var waiting []sent
	settle := func(keep int) error {
		for len(waiting) > keep {
			w := waiting[0]
			select {
			case <-w.future.Ok():
			case err := <-w.future.Err():
				return fmt.Errorf("the hub did not take what was sent: %w", err)
			case <-ctx.Done():
				return context.Cause(ctx)
			case <-time.After(100 * c.o.Poll):
				return errors.New("the hub does not answer")
			}
			waiting = waiting[1:]
			c.mu.Lock()
			if !fill {
				c.acked[h.Of] = max(c.acked[h.Of], w.last)
			}
			c.status.Sent += uint64(w.frames)
			c.note(w.frames)
			c.mu.Unlock()
		}
		return nil
	}
	err := carry.BuildSegments(ctx, c.o.Journal, bag, c.ours(h.Of), h, first, last, targetRaw, func(b *segment.Builder, s segment.Signed) error {
		var w bytes.Buffer
		sh, tail, err := b.Finish(&w, s)
		if err != nil {
			return err
		}
		if w.Len() > MaxMessage-1024 {
			return fmt.Errorf("entries %d to %d are too large for the hub; they travel by folder", sh.First, sh.Last)
		}
		id := msgID("seg", []byte(h.Stream.Name()), binary.BigEndian.AppendUint64(nil, sh.First), binary.BigEndian.AppendUint64(nil, sh.Last), sh.Hash[:])
		if fill {
			id = fmt.Sprintf("%s-%d", id, c.o.Now().Unix()/30) // it may be sent again if it got lost again
		}
		c.mu.Lock()
		c.sending(tail, sh.Stream, sh.First)
		c.mu.Unlock()
		f, err := c.js.PublishAsync(subject, w.Bytes(), jetstream.WithMsgID(id), jetstream.WithExpectStream(Segments))
		if err != nil {
			return fmt.Errorf("the hub did not take what was sent: %w", err)
		}
		waiting = append(waiting, sent{f, sh.Last, int(sh.Frames)})
		return settle(32)
	})
	if err != nil {
		return err
	}
	return settle(0)
}

// head notes what another device holds.
func (c *Client) head(data []byte) {
	h, v, err := carry.ParseHead(data)
	if err != nil || h.Practice != c.o.Bag().Practice {
		return
	}
	if want, ok := c.o.Members.Signer(h.Device); !ok || want != v || v == c.o.Bag().Device.Verifier() {
		return
	}
	c.mu.Lock()
	defer c.mu.Unlock()
	if old, ok := c.peers[v]; !ok || old.Time <= h.Time || old.Device != h.Device {
		c.peers[v] = h
	}
}

// told remembers what this device has told the others that it holds.
type told struct {
	sent, seen carry.Head // what was held when a head was sent, and at the last look
	at         time.Time
}

// How often a device tells what it holds while that goes on changing, in polls: the more others there are,
// the more they would hear.
const (
	busyHead = 100
	eachHead = 10 // for each other device
)

// leaveHead tells the others what we hold, if that has changed: when it has come to rest, or now and then.
func (c *Client) leaveHead(ctx context.Context, t *told) error {
	held, err := c.o.Journal.Streams(ctx)
	if err != nil {
		return err
	}
	bag := c.o.Bag()
	h := carry.Head{Practice: bag.Practice, Device: c.o.Incarnation()}
	for _, x := range held {
		h.Streams = append(h.Streams, carry.Reach{Device: x.Stream.Device, Site: x.Stream.Site, Last: x.Last, Hash: x.Hash})
	}
	if h.Sums, err = c.o.Journal.Sums(ctx); err != nil {
		return err
	}
	now := c.o.Now()
	quiet := sameHead(h, t.seen)
	t.seen = h
	c.mu.Lock()
	often := time.Duration(busyHead + eachHead*len(c.peers))
	c.mu.Unlock()
	if sameHead(h, t.sent) || !quiet && now.Sub(t.at) < often*c.o.Poll {
		return nil
	}
	t.sent = h
	h.Time = change.HLCAt(now)
	data, err := h.Encode(bag.Device)
	if err == nil {
		_, err = c.js.Publish(ctx, "cw.head."+Who(bag.Device.Verifier()), data)
	}
	if err != nil {
		t.sent = carry.Head{}
		return fmt.Errorf("telling the others what this device holds: %w", err)
	}
	t.at = now
	return nil
}

// sameHead reports whether two heads say the same but for their time.
func sameHead(a, b carry.Head) bool {
	return a.Device == b.Device && slices.Equal(a.Streams, b.Streams) && slices.Equal(a.Sums, b.Sums)
}

// lack is a hole in a stream: the first number missing, and how far the hub's messages went when it was noticed.
type lack struct{ first, seq uint64 }

// want says which numbers of a stream somebody lacks.
type want struct{ First, Last uint64 }

// ask looks for what others hold and we do not, although everything on the hub was read, and asks for it.
func (c *Client) ask(ctx context.Context, lastSeq uint64) error {
	held, err := c.o.Journal.Streams(ctx)
	if err != nil {
		return err
	}
	have := map[change.Stream]carry.Held{}
	for _, h := range held {
		have[h.Stream] = h
	}
	c.mu.Lock()
	if c.status.Behind > 0 {
		c.mu.Unlock()
		return nil
	}
	now := c.o.Now()
	all := len(c.o.Sites) == 0 // or else some messages on the hub are not for us
	lacking := map[change.Stream]lack{}
	wants := map[change.Stream]want{}
	for _, p := range c.peers {
		for _, r := range p.Streams {
			s := r.Stream()
			if s.Device == c.o.Incarnation() || !c.wantsSite(s.Site) {
				continue
			}
			if now.Sub(c.wanted[s]) < 30*c.o.Poll {
				if l, ok := c.lacking[s]; ok {
					lacking[s] = l
				}
				continue
			}
			h := have[s]
			if gaps := merge.Gaps(s, h.Spans, r.Last); len(gaps) > 0 {
				// What lay on the hub when we noticed may hold it, and is read first.
				l, noticed := c.lacking[s]
				if !noticed || l.first != gaps[0].First {
					l = lack{gaps[0].First, lastSeq}
				}
				lacking[s] = l
				if !noticed || all && c.seq < l.seq {
					continue
				}
				// What somebody holds may be on its way: a backlog travels for a while.
				if last, ok := c.moving[s]; !ok || now.Sub(last) < 10*c.o.Poll {
					if !ok {
						c.moving[s] = now
					}
					continue
				}
				wants[s] = want{gaps[0].First, max(gaps[0].Last, wants[s].Last)}
			}
		}
	}
	for s := range wants {
		c.wanted[s] = now
	}
	c.lacking = lacking
	c.mu.Unlock()
	for s, w := range wants {
		b := binary.BigEndian.AppendUint64(nil, w.First)
		b = binary.BigEndian.AppendUint64(b, w.Last)
		if err := c.nc.Publish(wantSubject(s), b); err != nil {
			return err
		}
	}
	return nil
}

func (c *Client) wantsSite(s change.Site) bool {
	return len(c.o.Sites) == 0 || slices.Contains(c.o.Sites, s)
}

// start is where a segment begins.
type start struct {
	stream change.Stream
	first  uint64
}

// answer sends again what somebody lacks: at once what this device wrote, and after a while, if nobody
// else did, what it holds of others.
func (c *Client) answer(ctx context.Context, subject string, data []byte) {
	var site change.Site
	var dev change.Incarnation
	const prefix = len("cw.want.")
	if len(data) != 16 || len(subject) != prefix+32+1+32 {
		return
	}
	b, err := hex.DecodeString(subject[prefix:prefix+32] + subject[prefix+33:])
	if err != nil {
		return
	}
	copy(site[:], b[:16])
	copy(dev[:], b[16:])
	s := change.Stream{Device: dev, Site: site}
	w := want{binary.BigEndian.Uint64(data), binary.BigEndian.Uint64(data[8:])}
	asked := c.o.Now()
	if !c.ours(s) {
		select {
		case <-time.After(20*c.o.Poll + rand.N(40*c.o.Poll)):
		case <-ctx.Done():
			return
		}
	}
	c.mu.Lock()
	recent := c.filled[start{s, w.First}]
	if there, known := c.acked[s]; c.ours(s) && (!known || w.First > there) {
		c.mu.Unlock()
		return // it is on its way
	}
	if !recent.Before(asked) || asked.Sub(recent) < 20*c.o.Poll {
		c.mu.Unlock()
		return
	}
	c.filled[start{s, w.First}] = c.o.Now()
	c.mu.Unlock()
	held, err := c.o.Journal.Streams(ctx)
	if err != nil {
		c.fail(err)
		return
	}
	for _, h := range held {
		if h.Stream == s && h.Last >= w.First {
			if err := c.publish(ctx, h, w.First, min(w.Last, h.Last), true); err != nil && ctx.Err() == nil {
				c.fail(err)
			}
		}
	}
}
