package hub_test

import (
	"context"
	"fmt"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"sync"
	"syscall"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/carry"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/hub"
	"cordwalk.example/cordwalk/sync/hub/mailbox"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/member"
	"cordwalk.example/cordwalk/sync/merge"
	"cordwalk.example/cordwalk/sync/segment"
)

// light is a device whose journal lies in memory: what is measured is the hub and the way there, not fifty disks.
type light struct {
	bag  key.Bag
	inc  change.Incarnation
	site change.Site

	mu      sync.Mutex
	streams map[change.Stream][]change.Frame
	held    map[change.Stream]carry.Held
	order   []change.Stream // of held
	seen    map[change.ID]int
	lags    []time.Duration
	count   int  // frames received
	only    bool // count what is received, and keep nothing of it
}

func (l *light) stream() change.Stream { return change.Stream{Device: l.inc, Site: l.site} }

func (l *light) record() change.ID {
	l.mu.Lock()
	defer l.mu.Unlock()
	s := l.stream()
	h := l.held[s]
	c := change.Change{ID: change.NewID(), Time: change.HLCAt(time.Now()), Kind: change.KindVisit, Patient: exam.ID{1}, Record: exam.ID{2}, Field: "finding/patellar pelvic-left", Value: []byte{1}}
	f, err := change.Seal(change.Batch{Stream: s, First: h.Last + 1, Examiner: "R. Okafor", Changes: []change.Change{c}}, h.Hash, l.bag.Ring.Current(), l.bag.Ring)
	if err != nil {
		panic(err)
	}
	l.keep(s, f)
	l.seen[c.ID]++
	return c.ID
}

func (l *light) keep(s change.Stream, f change.Frame) {
	l.streams[s] = append(l.streams[s], f)
	h := l.held[s]
	h.Stream, h.Of, h.Own = s, f.Stream, s == l.stream()
	h.Spans = merge.AddSpan(h.Spans, merge.Span{First: f.First, Last: f.Last})
	if f.Last > h.Last {
		h.Last, h.Hash = f.Last, f.Hash()
	}
	l.held[s] = h
}

func (l *light) Streams(context.Context) (out []carry.Held, err error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	if len(l.order) != len(l.held) {
		l.order = slices.SortedFunc(maps.Keys(l.held), change.Stream.Compare)
	}
	for _, s := range l.order {
		out = append(out, l.held[s])
	}
	return out, nil
}

func (l *light) Frames(_ context.Context, s change.Stream, from uint64, f func(change.Frame) error) error {
	l.mu.Lock()
	fs := l.streams[s]
	l.mu.Unlock()
	i, _ := slices.BinarySearchFunc(fs, from, func(f change.Frame, n uint64) int { return int(int64(f.Last) - int64(n)) })
	for _, fr := range fs[i:] {
		if err := f(fr); err != nil {
			return err
		}
	}
	return nil
}

func (l *light) At(ctx context.Context, s change.Stream, last uint64) (h change.Hash, ok bool, err error) {
	enough := fmt.Errorf("enough")
	err = l.Frames(ctx, s, last, func(f change.Frame) error {
		h, ok = f.Hash(), f.Last == last
		return enough
	})
	if err == enough {
		err = nil
	}
	return h, ok, err
}

func (l *light) Receive(_ context.Context, as change.Stream, b segment.Block) error {
	l.mu.Lock()
	defer l.mu.Unlock()
	l.count += len(b.Frames)
	if l.only {
		n := len(b.Frames) - 1
		h := l.held[as]
		h.Stream, h.Of = as, b.Frames[0].Stream
		h.Spans = merge.AddSpan(h.Spans, merge.Span{First: b.Frames[0].First, Last: b.Frames[n].Last})
		h.Last, h.Hash = b.Frames[n].Last, b.Hashes[n]
		l.held[as] = h
		return nil
	}
	for i, f := range b.Frames {
		batch, err := change.DecodeBatch(b.Plain[i], f.Stream, f.First, f.Minor)
		if err != nil {
			return err
		}
		f.Raw = slices.Clone(f.Raw) // the block's memory is not ours
		l.keep(as, f)
		for _, c := range batch.Changes {
			l.seen[c.ID]++
			l.lags = append(l.lags, time.Since(c.Time.Time()))
		}
	}
	return nil
}

func (l *light) Commit(context.Context, change.Stream, *segment.Signed) error          { return nil }
func (l *light) Signed(context.Context, change.Stream) (s []segment.Signed, err error) { return }
func (l *light) Sums(context.Context) (s []segment.Sum, err error)                     { return }
func (l *light) Renew(context.Context) error                                           { panic("not in this test") }

// processorTime returns how long this process has kept processors busy: hub and all devices.
func processorTime(t testing.TB) time.Duration {
	var u syscall.Rusage
	require.NoError(t, syscall.Getrusage(syscall.RUSAGE_SELF, &u))
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}

// Many devices record one finding a second each against one hub: nothing is lost, nothing comes twice, and the lag from
// key to the other devices is told. CORDWALK_DEVICES and CORDWALK_SECONDS change how many and how long; in full it is 50
// devices and 300 seconds.
func TestManyDevicesAtOneHub(t *testing.T) {
	t.Parallel()
	devices, seconds := 8, 3
	if os.Getenv("CORDWALK_SOAK") == "1" {
		devices, seconds = 50, 300
	}
	for name, n := range map[string]*int{"CORDWALK_DEVICES": &devices, "CORDWALK_SECONDS": &seconds} {
		if v, err := strconv.Atoi(os.Getenv(name)); err == nil {
			*n = v
		}
	}
	bag, err := key.NewBag(exam.ID{9})
	require.NoError(t, err)
	now := change.HLCAt(time.Now())
	list, _, err := member.Establish(bag, "first", change.NewIncarnation(), now)
	require.NoError(t, err)
	ctx, cancel := context.WithCancel(context.Background())
	defer cancel()
	var ls []*light
	for i := range devices {
		own, err := key.NewDevice()
		require.NoError(t, err)
		l := &light{bag: key.Bag{Practice: bag.Practice, Ring: bag.Ring, Device: own}, inc: change.NewIncarnation(), site: change.Site{5},
			streams: map[change.Stream][]change.Frame{}, held: map[change.Stream]carry.Held{}, seen: map[change.ID]int{}}
		require.NoError(t, list.AdmitJoiner(bag, member.Joiner{Verifier: own.Verifier(), Recipient: own.Recipient(), Name: fmt.Sprint("device ", i), Incarnation: l.inc}, now))
		ls = append(ls, l)
	}
	o := mailbox.Options{Dir: filepath.Join(t.TempDir(), "hub"), Listen: "127.0.0.1:0"}
	require.NoError(t, mailbox.Setup(o, list))
	m, err := mailbox.Start(ctx, o)
	require.NoError(t, err)
	defer m.Close()
	var wg sync.WaitGroup
	var clients []*hub.Client
	for _, l := range ls {
		c := hub.New(hub.Options{Address: m.Address(), Bag: func() key.Bag { return l.bag }, Incarnation: func() change.Incarnation { return l.inc }, Journal: l, Members: list, Poll: 100 * time.Millisecond})
		clients = append(clients, c)
		wg.Go(func() { _ = c.Run(ctx) })
	}
	// Each records once, so that it has something to tell; then all have heard of all, and the measuring begins.
	for _, l := range ls {
		l.record()
	}
	within(t, 2*time.Minute, "all have heard of all", func() bool {
		for _, c := range clients {
			if len(c.Status().Peers) != devices-1 {
				return false
			}
		}
		return true
	})
	for _, l := range ls {
		l.mu.Lock()
		l.lags = nil
		l.mu.Unlock()
	}
	busy, start := processorTime(t), time.Now()
	total := devices
	tick := time.NewTicker(time.Second / time.Duration(devices))
	defer tick.Stop()
	for i := range devices * seconds {
		ls[i%devices].record()
		total++
		<-tick.C
	}
	within(t, time.Minute, "all have all", func() bool {
		for _, l := range ls {
			l.mu.Lock()
			n := len(l.seen)
			l.mu.Unlock()
			if n != total {
				return false
			}
		}
		return true
	})
	busy = processorTime(t) - busy
	load := busy.Seconds() / time.Since(start).Seconds()
	cancel()
	wg.Wait()
	var lags []time.Duration
	for _, l := range ls {
		for id, n := range l.seen {
			require.Equal(t, 1, n, "%s came more than once", id)
		}
		lags = append(lags, l.lags...)
	}
	slices.Sort(lags)
	t.Logf("%d devices, %d s, %d findings: lag median %s, 99th percentile %s, longest %s; %.2f processors, %s for a finding on its way to a device", devices, seconds, total,
		lags[len(lags)/2], lags[len(lags)*99/100], lags[len(lags)-1], load, busy/time.Duration(len(lags)))
}
