package hub_test

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"strconv"
	"testing"
	"time"

	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"
	"github.com/nats-io/nkeys"
	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/carry"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/hub"
	"cordwalk.example/cordwalk/sync/hub/mailbox"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/member"
)

// inFlight is how many messages a client sends before it waits for the hub to have the first of them.
const inFlight = 32

// A backlog from one device to another by hub, against a bare publisher and a bare consumer of the same messages on
// the same server, with as many messages in flight. Both have met before the clock runs: what is measured is
// the steady rate. CORDWALK_CHANGES changes how many.
func BenchmarkBacklog(b *testing.B) {
	changes := 300_000
	if n, err := strconv.Atoi(os.Getenv("CORDWALK_CHANGES")); err == nil {
		changes = n
	}
	// Elsewhere the hub and the devices are processes of their own, and none waits for another one to give a
	// processor away: so here too, for both.
	defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(4 * runtime.NumCPU()))
	bag, err := key.NewBag(exam.ID{9})
	require.NoError(b, err)
	now := change.HLCAt(time.Now())
	list, _, err := member.Establish(bag, "first", change.NewIncarnation(), now)
	require.NoError(b, err)
	var ours, bare time.Duration
	count := 0
	for b.Loop() {
		var ls []*light
		for range 2 {
			own, err := key.NewDevice()
			require.NoError(b, err)
			l := &light{bag: key.Bag{Practice: bag.Practice, Ring: bag.Ring, Device: own}, inc: change.NewIncarnation(), site: change.Site{5},
				streams: map[change.Stream][]change.Frame{}, held: map[change.Stream]carry.Held{}, seen: map[change.ID]int{}}
			require.NoError(b, list.AdmitJoiner(bag, member.Joiner{Verifier: own.Verifier(), Recipient: own.Recipient(), Name: "d", Incarnation: l.inc}, now))
			ls = append(ls, l)
		}
		ls[1].only = true
		o := mailbox.Options{Dir: filepath.Join(b.TempDir(), "hub"), Listen: "127.0.0.1:0"}
		require.NoError(b, mailbox.Setup(o, list))
		m, err := mailbox.Start(context.Background(), o)
		require.NoError(b, err)
		received := func() int {
			ls[1].mu.Lock()
			defer ls[1].mu.Unlock()
			return ls[1].count
		}
		ctx, cancel := context.WithCancel(context.Background())
		done := make(chan struct{}, 2)
		var clients []*hub.Client
		for _, l := range ls {
			c := hub.New(hub.Options{Address: m.Address(), Bag: func() key.Bag { return l.bag }, Incarnation: func() change.Incarnation { return l.inc }, Journal: l, Members: list})
			clients = append(clients, c)
			go func() { _ = c.Run(ctx); done <- struct{}{} }()
		}
		ls[0].record()
		for received() < 1 {
			time.Sleep(time.Millisecond)
		}
		// Everything else is recorded aside and put into the journal at once.
		aside := &light{bag: ls[0].bag, inc: ls[0].inc, site: ls[0].site, streams: map[change.Stream][]change.Frame{ls[0].stream(): ls[0].streams[ls[0].stream()]},
			held: map[change.Stream]carry.Held{ls[0].stream(): ls[0].held[ls[0].stream()]}, seen: map[change.ID]int{}}
		for range changes {
			aside.record()
		}
		runtime.GC()
		ls[0].mu.Lock()
		ls[0].streams, ls[0].held = aside.streams, aside.held
		ls[0].mu.Unlock()
		start := time.Now()
		clients[0].Kick()
		for received() < changes+1 {
			time.Sleep(time.Millisecond)
		}
		ours += time.Since(start)
		cancel()
		<-done
		<-done

		// The same messages, bare.
		connect := func(l *light) (*nats.Conn, jetstream.JetStream) {
			kp, err := nkeys.FromRawSeed(nkeys.PrefixByteUser, l.bag.Device.Signer().Seed())
			require.NoError(b, err)
			pub, err := kp.PublicKey()
			require.NoError(b, err)
			nc, err := nats.Connect("tls://"+m.Address().Host, nats.Secure(hub.TLS(m.Address())), nats.Nkey(pub, kp.Sign))
			require.NoError(b, err)
			js, err := jetstream.New(nc, jetstream.WithPublishAsyncMaxPending(inFlight))
			require.NoError(b, err)
			return nc, js
		}
		from, js := connect(ls[0])
		to, reading := connect(ls[1])
		s, err := js.Stream(context.Background(), hub.Segments)
		require.NoError(b, err)
		first := s.CachedInfo().State
		var messages [][]byte
		for seq := first.FirstSeq; seq <= first.LastSeq; seq++ {
			msg, err := s.GetMsg(context.Background(), seq)
			require.NoError(b, err)
			messages = append(messages, msg.Data)
		}
		cons, err := reading.OrderedConsumer(context.Background(), hub.Segments, jetstream.OrderedConsumerConfig{DeliverPolicy: jetstream.DeliverByStartSequencePolicy, OptStartSeq: first.LastSeq + 1})
		require.NoError(b, err)
		got := make(chan struct{}, len(messages)+1)
		cc, err := cons.Consume(func(jetstream.Msg) { got <- struct{}{} }, jetstream.PullMaxMessages(256))
		require.NoError(b, err)
		subject := "cw.seg." + ls[0].site.String() + "." + ls[0].inc.String()
		_, err = js.Publish(context.Background(), subject, messages[0])
		require.NoError(b, err)
		<-got
		runtime.GC()
		start = time.Now()
		var futures []jetstream.PubAckFuture
		for i, data := range messages[1:] {
			f, err := js.PublishAsync(subject, data, jetstream.WithMsgID(fmt.Sprintf("bare-%032x", i)), jetstream.WithExpectStream(hub.Segments), jetstream.WithStallWait(30*time.Second))
			require.NoError(b, err)
			futures = append(futures, f)
		}
		for range messages[1:] {
			<-got
		}
		bare += time.Since(start)
		for _, f := range futures {
			<-f.Ok()
		}
		cc.Stop()
		from.Close()
		to.Close()
		m.Close()
		count += len(messages) - 1
	}
	b.ReportMetric(float64(count)/float64(b.N), "messages")
	b.ReportMetric(float64(changes)*float64(b.N)/ours.Seconds(), "changes/s")
	b.ReportMetric(bare.Seconds()/ours.Seconds(), "rate-against-bare")
}
