package hub_test

import (
	"context"
	"path/filepath"
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

// A backlog from one device to another by hub, against a bare publisher and consumer of messages of the same
// number and size on the same server.
func BenchmarkBacklog(b *testing.B) {
	const changes = 50_000
	bag, err := key.NewBag(exam.ID{9})
	require.NoError(b, err)
	now := change.HLCAt(time.Now())
	list, _, err := member.Establish(bag, "first", change.NewIncarnation(), now)
	require.NoError(b, err)
	var ours, bare time.Duration
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
		o := mailbox.Options{Dir: filepath.Join(b.TempDir(), "hub"), Listen: "127.0.0.1:0"}
		require.NoError(b, mailbox.Setup(o, list))
		m, err := mailbox.Start(context.Background(), o)
		require.NoError(b, err)
		for range changes {
			ls[0].record()
		}
		ctx, cancel := context.WithCancel(context.Background())
		start := time.Now()
		done := make(chan struct{}, 2)
		for _, l := range ls {
			c := hub.New(hub.Options{Address: m.Address(), Bag: func() key.Bag { return l.bag }, Incarnation: func() change.Incarnation { return l.inc }, Journal: l, Members: list, Poll: 10 * time.Millisecond})
			go func() { _ = c.Run(ctx); done <- struct{}{} }()
		}
		for {
			ls[1].mu.Lock()
			n := len(ls[1].seen)
			ls[1].mu.Unlock()
			if n == changes {
				break
			}
			time.Sleep(2 * time.Millisecond)
		}
		ours += time.Since(start)
		cancel()
		<-done
		<-done

		// The same messages, bare.
		kp, err := nkeys.FromRawSeed(nkeys.PrefixByteUser, ls[0].bag.Device.Signer().Seed())
		require.NoError(b, err)
		pub, err := kp.PublicKey()
		require.NoError(b, err)
		nc, err := nats.Connect("tls://"+m.Address().Host, nats.Secure(hub.TLS(m.Address())), nats.Nkey(pub, kp.Sign))
		require.NoError(b, err)
		js, err := jetstream.New(nc, jetstream.WithPublishAsyncMaxPending(64))
		require.NoError(b, err)
		s, err := js.Stream(context.Background(), hub.Segments)
		require.NoError(b, err)
		first := s.CachedInfo().State
		var messages [][]byte
		for seq := first.FirstSeq; seq <= first.LastSeq; seq++ {
			msg, err := s.GetMsg(context.Background(), seq)
			require.NoError(b, err)
			messages = append(messages, msg.Data)
		}
		start = time.Now()
		cons, err := js.OrderedConsumer(context.Background(), hub.Segments, jetstream.OrderedConsumerConfig{DeliverPolicy: jetstream.DeliverByStartSequencePolicy, OptStartSeq: first.LastSeq + 1})
		require.NoError(b, err)
		got := make(chan struct{}, len(messages))
		cc, err := cons.Consume(func(jetstream.Msg) { got <- struct{}{} })
		require.NoError(b, err)
		for _, data := range messages {
			_, err := js.PublishAsync("cw.seg."+ls[0].site.String()+"."+ls[0].inc.String(), data)
			require.NoError(b, err)
		}
		for range messages {
			<-got
		}
		bare += time.Since(start)
		cc.Stop()
		nc.Close()
		m.Close()
		b.ReportMetric(float64(len(messages)), "messages")
	}
	b.ReportMetric(float64(changes)*float64(b.N)/ours.Seconds(), "changes/s")
	b.ReportMetric(bare.Seconds()/ours.Seconds(), "rate-against-bare")
}
