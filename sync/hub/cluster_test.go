package hub_test

import (
	"context"
	"fmt"
	"net"
	"net/url"
	"os"
	"path/filepath"
	"testing"
	"time"

	"github.com/nats-io/nats-server/v2/server"
	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"
	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/sync/hub"
	"cordwalk.example/cordwalk/sync/share"
	"cordwalk.example/cordwalk/sync/share/sharetest"
)

// cluster is three servers of NATS on loopback, as a group of clinics may run them.
type cluster struct {
	t     testing.TB
	dirs  [3]string
	ports [3]int
	route [3]int
	nodes [3]*server.Server
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
	for i := range c.nodes {
		c.start(i)
	}
	t.Cleanup(func() {
		for i := range c.nodes {
			c.stop(i)
		}
	})
	return c
}

func (c *cluster) start(i int) {
	o := &server.Options{ServerName: fmt.Sprint("n", i), Host: "127.0.0.1", Port: c.ports[i], NoSigs: true, NoLog: true, JetStream: true, StoreDir: c.dirs[i], SyncAlways: true,
		MaxPayload: hub.MaxMessage, Cluster: server.ClusterOpts{Name: "group", Host: "127.0.0.1", Port: c.route[i]}}
	for k := range c.nodes {
		o.Routes = append(o.Routes, &url.URL{Scheme: "nats", Host: fmt.Sprintf("127.0.0.1:%d", c.route[k])})
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

func (c *cluster) connect(more ...nats.Option) (*nats.Conn, error) {
	var urls string
	for i, p := range c.ports {
		if i > 0 {
			urls += ","
		}
		urls += fmt.Sprintf("nats://127.0.0.1:%d", p)
	}
	return nats.Connect(urls, append([]nats.Option{nats.MaxReconnects(-1), nats.ReconnectWait(200 * time.Millisecond), nats.ReconnectBufSize(-1), nats.NoEcho()}, more...)...)
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
	nc, err := c.connect()
	require.NoError(c.t, err)
	defer nc.Close()
	js, err := jetstream.New(nc)
	require.NoError(c.t, err)
	s, err := js.Stream(context.Background(), hub.Segments)
	require.NoError(c.t, err)
	for i := range c.nodes {
		if s.CachedInfo().Cluster.Leader == fmt.Sprint("n", i) {
			return i
		}
	}
	c.t.Fatal("no leader")
	return -1
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
	for _, sh := range []*share.Share{a, b} {
		c := hub.New(hub.Options{Bag: sh.Bag, Incarnation: sh.Incarnation, Journal: sh, Members: sh, Poll: 20 * time.Millisecond, Connect: cl.connect})
		ctx, cancel := context.WithCancel(context.Background())
		done := make(chan error, 1)
		go func() { done <- c.Run(ctx) }()
		defer func() { cancel(); <-done }()
	}
	n := 0
	record := func() {
		for _, sh := range []*share.Share{a, b} {
			n++
			sharetest.Add(t, sh, fmt.Sprint("patient ", n))
		}
	}
	same := func() bool {
		na, nb := sharetest.Names(t, a), sharetest.Names(t, b)
		for name, k := range nb {
			if k > 1 || na[name] > 1 {
				t.Fatalf("%s is there twice", name)
			}
		}
		return len(na) == n && len(nb) == n
	}
	long := func(what string) {
		t.Helper()
		end := time.Now().Add(90 * time.Second)
		for !same() {
			if time.Now().After(end) {
				t.Fatalf("still not so after 90 s: %s", what)
			}
			time.Sleep(50 * time.Millisecond)
		}
	}
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
