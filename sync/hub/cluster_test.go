package hub_test

import (
	"context"
	"fmt"
	"net"
	"net/url"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/nats-io/nats-server/v2/server"
	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"
	"github.com/nats-io/nkeys"
	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/sync/hub"
	"cordwalk.example/cordwalk/sync/share"
	"cordwalk.example/cordwalk/sync/share/sharetest"
)

// cluster is three servers of NATS on loopback, as a group of clinics may run them. They reach each other through links
// that can be cut.
type cluster struct {
	t      testing.TB
	dirs   [3]string
	ports  [3]int
	route  [3]int
	links  [3][3]*link // from, to
	nobody int         // a port at which nothing listens
	nodes  [3]*server.Server
}

// link is a way from one node to another. While it is cut nothing comes through and no end hears of it, as when a cable is
// pulled somewhere between; what was under way comes later or never.
type link struct {
	listen net.Listener
	to     string

	mu    sync.Mutex
	whole chan struct{} // closed while nothing is cut
	conns map[net.Conn]bool
}

func newLink(t testing.TB, to int) *link {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	require.NoError(t, err)
	k := &link{listen: l, to: fmt.Sprintf("127.0.0.1:%d", to), whole: make(chan struct{}), conns: map[net.Conn]bool{}}
	close(k.whole)
	var pumps sync.WaitGroup
	pumps.Go(func() {
		for {
			in, err := l.Accept()
			if err != nil {
				return
			}
			pumps.Go(func() {
				<-k.passable()
				out, err := net.Dial("tcp", k.to)
				if err != nil || !k.keep(in, out) {
					in.Close()
					if out != nil {
						out.Close()
					}
					return
				}
				pumps.Go(func() { k.pump(out, in) })
				k.pump(in, out)
			})
		}
	})
	t.Cleanup(func() {
		l.Close()
		k.mend()
		k.mu.Lock()
		for c := range k.conns {
			c.Close()
		}
		k.conns = nil
		k.mu.Unlock()
		pumps.Wait()
	})
	return k
}

func (k *link) keep(cs ...net.Conn) bool {
	k.mu.Lock()
	defer k.mu.Unlock()
	for _, c := range cs {
		if k.conns != nil {
			k.conns[c] = true
		}
	}
	return k.conns != nil
}

func (k *link) passable() <-chan struct{} {
	k.mu.Lock()
	defer k.mu.Unlock()
	return k.whole
}

func (k *link) pump(from, to net.Conn) {
	buf := make([]byte, 32<<10)
	for {
		n, err := from.Read(buf)
		<-k.passable()
		if n > 0 {
			if _, werr := to.Write(buf[:n]); werr != nil {
				err = werr
			}
		}
		if err != nil {
			break
		}
	}
	from.Close()
	to.Close()
	k.mu.Lock()
	delete(k.conns, from)
	delete(k.conns, to)
	k.mu.Unlock()
}

func (k *link) cut() {
	k.mu.Lock()
	defer k.mu.Unlock()
	select {
	case <-k.whole:
		k.whole = make(chan struct{})
	default:
	}
}

func (k *link) mend() {
	k.mu.Lock()
	defer k.mu.Unlock()
	select {
	case <-k.whole:
	default:
		close(k.whole)
	}
}

// isolate cuts a node off from the two others, and heal undoes it.
func (c *cluster) isolate(i int) {
	for k := range c.nodes {
		if k != i {
			c.links[i][k].cut()
			c.links[k][i].cut()
		}
	}
}

func (c *cluster) heal() {
	for _, row := range c.links {
		for _, l := range row {
			if l != nil {
				l.mend()
			}
		}
	}
}

func freePort(t testing.TB) int {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	require.NoError(t, err)
	defer l.Close()
	return l.Addr().(*net.TCPAddr).Port
}

func newCluster(t testing.TB) *cluster {
	c := &cluster{t: t}
	for i := range c.nodes {
		c.dirs[i], c.ports[i], c.route[i] = filepath.Join(t.TempDir(), fmt.Sprint("node", i)), freePort(t), freePort(t)
	}
	c.nobody = freePort(t)
	for i := range c.nodes {
		for k := range c.nodes {
			if i != k {
				c.links[i][k] = newLink(t, c.route[k])
			}
		}
	}
	for i := range c.nodes {
		c.start(i)
	}
	t.Cleanup(func() {
		c.heal()
		for i := range c.nodes {
			c.stop(i)
		}
	})
	return c
}

func (c *cluster) start(i int) {
	o := &server.Options{ServerName: fmt.Sprint("n", i), Host: "127.0.0.1", Port: c.ports[i], NoSigs: true, NoLog: true, JetStream: true, StoreDir: c.dirs[i], SyncAlways: true,
		MaxPayload: hub.MaxMessage, PingInterval: 2 * time.Second,
		// What a node tells the others of its address leads nowhere: there is no way past the links.
		Cluster: server.ClusterOpts{Name: "group", Host: "127.0.0.1", Port: c.route[i], Advertise: fmt.Sprintf("127.0.0.1:%d", c.nobody), NoAdvertise: true}}
	for k := range c.nodes {
		if k != i {
			o.Routes = append(o.Routes, &url.URL{Scheme: "nats", Host: c.links[i][k].listen.Addr().String()})
		}
	}
	s, err := server.NewServer(o)
	require.NoError(c.t, err)
	go s.Start()
	require.True(c.t, s.ReadyForConnections(20*time.Second))
	c.nodes[i] = s
}

func (c *cluster) stop(i int) {
	if c.nodes[i] != nil {
		c.nodes[i].Shutdown()
		c.nodes[i].WaitForShutdown()
		c.nodes[i] = nil
	}
}

func (c *cluster) connect(more ...nats.Option) (*nats.Conn, error) { return c.connectTo(-1, more...) }

// connectTo connects to a node, and to another one if that does not answer; to any for -1.
func (c *cluster) connectTo(first int, more ...nats.Option) (*nats.Conn, error) {
	var urls []string
	for i, p := range c.ports {
		u := fmt.Sprintf("nats://127.0.0.1:%d", p)
		if i == first {
			urls, more = append([]string{u}, urls...), append(more, nats.DontRandomize())
		} else {
			urls = append(urls, u)
		}
	}
	return nats.Connect(strings.Join(urls, ","), append([]nats.Option{nats.MaxReconnects(-1), nats.ReconnectWait(200 * time.Millisecond), nats.ReconnectBufSize(-1), nats.NoEcho()}, more...)...)
}

func (c *cluster) ensure() {
	nc, err := c.connect()
	require.NoError(c.t, err)
	defer nc.Close()
	js, err := jetstream.New(nc)
	require.NoError(c.t, err)
	end := time.Now().Add(60 * time.Second)
	for {
		ctx, cancel := context.WithTimeout(context.Background(), 5*time.Second)
		err = hub.Ensure(ctx, js, hub.Limits{Replicas: 3, Bytes: 64 << 20})
		cancel()
		if err == nil {
			return
		}
		if time.Now().After(end) {
			c.t.Fatal(err)
		}
		time.Sleep(200 * time.Millisecond)
	}
}

// leader returns the node that leads the stream of segments.
func (c *cluster) leader() int {
	l := c.leaderSeenBy(-1)
	if l < 0 {
		c.t.Fatal("no leader")
	}
	return l
}

// leaderSeenBy returns the node that leads the stream of segments as a node knows it; -1 if it knows of none.
func (c *cluster) leaderSeenBy(node int) int {
	nc, err := c.connectTo(node)
	require.NoError(c.t, err)
	defer nc.Close()
	js, err := jetstream.New(nc)
	require.NoError(c.t, err)
	ctx, cancel := context.WithTimeout(context.Background(), 5*time.Second)
	defer cancel()
	s, err := js.Stream(ctx, hub.Segments)
	if err != nil {
		return -1
	}
	for i := range c.nodes {
		if in := s.CachedInfo().Cluster; in != nil && in.Leader == fmt.Sprint("n", i) {
			return i
		}
	}
	return -1
}

// pair is two devices that record and meet at a cluster.
type pair struct {
	t    testing.TB
	both []*share.Share
	n    int
}

// meet lets two devices exchange through the nodes nearest to them, or any for -1.
func meet(t testing.TB, cl *cluster, a, b *share.Share, nearA, nearB int) *pair {
	for sh, near := range map[*share.Share]int{a: nearA, b: nearB} {
		c := hub.New(hub.Options{Bag: sh.Bag, Incarnation: sh.Incarnation, Journal: sh, Members: sh, Poll: 20 * time.Millisecond,
			Connect: func(o ...nats.Option) (*nats.Conn, error) { return cl.connectTo(near, o...) }})
		ctx, cancel := context.WithCancel(context.Background())
		done := make(chan error, 1)
		go func() { done <- c.Run(ctx) }()
		t.Cleanup(func() { cancel(); <-done })
	}
	return &pair{t: t, both: []*share.Share{a, b}}
}

// record saves something on each device.
func (p *pair) record() {
	for _, sh := range p.both {
		p.n++
		sharetest.Add(p.t, sh, fmt.Sprint("patient ", p.n))
	}
}

// same waits until both devices hold everything that was recorded, each exactly once.
func (p *pair) same(what string) {
	p.t.Helper()
	within(p.t, 90*time.Second, what, func() bool {
		na, nb := sharetest.Names(p.t, p.both[0]), sharetest.Names(p.t, p.both[1])
		for _, names := range []map[string]int{na, nb} {
			for name, k := range names {
				if k > 1 {
					p.t.Fatalf("%s is there %d times", name, k)
				}
			}
		}
		return len(na) == p.n && len(nb) == p.n
	})
}

// A cluster of three nodes loses one, then its leader, then all data: every entry that was saved is in every device's
// state exactly once.
func TestClusterLosesNodesAndEverything(t *testing.T) {
	t.Parallel()
	soak := os.Getenv("CORDWALK_SOAK") == "1" // elections take their time: the whole of it runs there
	cl := newCluster(t)
	cl.ensure()
	a := sharetest.Found(t)
	b := sharetest.Join(t, a, "b")
	p := meet(t, cl, a, b, -1, -1)
	record, long := p.record, p.same
	record()
	long("all nodes")
	l := cl.leader()
	if !soak {
		cl.stop(l)
		record()
		long("the leader gone")
		return
	}
	other := (l + 1) % 3
	cl.stop(other)
	record()
	long("a node less")
	cl.start(other)
	record()
	cl.stop(cl.leader())
	record()
	long("the leader gone")
	for i := range cl.nodes {
		if cl.nodes[i] == nil {
			cl.start(i)
		}
	}
	record()
	long("all nodes again")
	for i := range cl.nodes {
		cl.stop(i)
	}
	record()
	for i := range cl.nodes {
		require.NoError(t, os.RemoveAll(cl.dirs[i]))
		cl.start(i)
	}
	cl.ensure()
	record()
	long("everything lost")
}

// In mid-transfer the leader of a cluster is cut off from the two others while all three go on running, one device at
// its side, which then finds its way to theirs; then all is whole again, and then the whole data folder is lost:
// every entry that was saved is in every device's state exactly once.
func TestClusterIsPartitioned(t *testing.T) {
	t.Parallel()
	rounds, entries := 1, 30
	if os.Getenv("CORDWALK_SOAK") == "1" {
		rounds, entries = 5, 200
	}
	cl := newCluster(t)
	cl.ensure()
	a := sharetest.Found(t)
	b := sharetest.Join(t, a, "b")
	l := cl.leader()
	p := meet(t, cl, a, b, l, (l+1)%3)
	p.record()
	p.same("all nodes")
	for round := range rounds {
		l = cl.leader()
		others := []int{(l + 1) % 3, (l + 2) % 3}
		cutAt, healAt := entries/3, 2*entries/3
		for i := range entries {
			switch i {
			case cutAt:
				cl.isolate(l)
			case healAt:
				// The two others have quorum: they choose a leader and go on.
				within(t, 60*time.Second, "the majority has a leader", func() bool {
					now := cl.leaderSeenBy(others[round%2])
					return now == others[0] || now == others[1]
				})
				p.same("at the majority, where both devices have gone")
				p.record()
				cl.heal()
			}
			p.record()
			time.Sleep(5 * time.Millisecond)
		}
		p.same("whole again")
	}
	for i := range cl.nodes {
		cl.stop(i)
	}
	p.record()
	for i := range cl.nodes {
		require.NoError(t, os.RemoveAll(cl.dirs[i]))
		cl.start(i)
	}
	cl.ensure()
	p.record()
	p.same("everything lost")
}

// A cluster whose configuration is the one that is made of the list of devices lets members in, under their own names, and
// nobody else; who may make streams prepares it.
func TestClusterLetsMembersIn(t *testing.T) {
	t.Parallel()
	a := sharetest.Found(t)
	b := sharetest.Join(t, a, "b")
	users, err := hub.Users(a.List)
	require.NoError(t, err)
	admin, err := nkeys.CreateUser()
	require.NoError(t, err)
	name, err := admin.PublicKey()
	require.NoError(t, err)
	seed, err := admin.Seed()
	require.NoError(t, err)
	dir := t.TempDir()
	box := start(t, dir, "127.0.0.1:0", a) // for its certificate
	print := box.Address().Fingerprint
	box.Close()
	file := filepath.Join(dir, "server.conf")
	config := fmt.Sprintf("listen: 127.0.0.1:-1\njetstream { store_dir: %q }\ntls { cert_file: %q, key_file: %q }\n%s", filepath.Join(dir, "group"), filepath.Join(dir, "hub-cert.pem"), filepath.Join(dir, "hub-key.pem"),
		strings.Replace(users, "users = [", fmt.Sprintf("users = [\n    { nkey: %s }", name), 1))
	require.NoError(t, os.WriteFile(file, []byte(config), 0o600))
	o, err := server.ProcessConfigFile(file)
	require.NoError(t, err)
	o.NoSigs, o.NoLog = true, true
	s, err := server.NewServer(o)
	require.NoError(t, err)
	go s.Start()
	require.True(t, s.ReadyForConnections(20*time.Second))
	defer s.WaitForShutdown()
	defer s.Shutdown()
	at := hub.Address{Host: s.Addr().String(), Fingerprint: print}
	require.NoError(t, hub.Prepare(context.Background(), at, seed, hub.Limits{}))
	ca, cb := run(t, a, at, nil), run(t, b, at, nil)
	sharetest.Add(t, a, "Bramble")
	sharetest.Add(t, b, "Tansy")
	eventually(t, "both know the same", func() bool { return len(sharetest.Names(t, a)) == 2 && len(sharetest.Names(t, b)) == 2 })
	require.NoError(t, ca.Status().Refused)
	require.NoError(t, cb.Status().Refused)
	x := sharetest.Found(t)
	_, err = nats.Connect("tls://"+at.Host, nats.Secure(hub.TLS(at)), asDevice(t, x))
	require.ErrorIs(t, err, nats.ErrAuthorization)
	kp, err := nkeys.FromRawSeed(nkeys.PrefixByteUser, b.Bag().Device.Signer().Seed())
	require.NoError(t, err)
	raw, err := kp.Seed()
	require.NoError(t, err)
	require.Error(t, hub.Prepare(context.Background(), at, raw, hub.Limits{}), "a device may not change the streams")
	require.Error(t, hub.Prepare(context.Background(), at, []byte("no seed"), hub.Limits{}))
}

// asDevice signs in with a device's key.
func asDevice(t testing.TB, sh *share.Share) nats.Option {
	kp, err := nkeys.FromRawSeed(nkeys.PrefixByteUser, sh.Bag().Device.Signer().Seed())
	require.NoError(t, err)
	pub, err := kp.PublicKey()
	require.NoError(t, err)
	return nats.Nkey(pub, kp.Sign)
}
