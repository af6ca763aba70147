package hub_test

import (
	"bytes"
	"context"
	"crypto/tls"
	"fmt"
	"io"
	"net"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"
	"github.com/nats-io/nkeys"
	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/attach"
	"cordwalk.example/cordwalk/sync/hub"
	"cordwalk.example/cordwalk/sync/hub/mailbox"
	"cordwalk.example/cordwalk/sync/share"
	"cordwalk.example/cordwalk/sync/share/sharetest"
)

// start runs a hub of the practice.
func start(t testing.TB, dir, listen string, sh *share.Share) *mailbox.Mailbox {
	t.Helper()
	o := mailbox.Options{Dir: dir, Listen: listen, Notice: func(w string) { t.Log("hub: ", w) }}
	require.NoError(t, mailbox.Setup(o, sh.List))
	m, err := mailbox.Start(context.Background(), o)
	require.NoError(t, err)
	return m
}

// client runs a device's side until stop is called.
type client struct {
	*hub.Client
	stop func() error
}

func run(t testing.TB, sh *share.Share, a hub.Address, place hub.Place) *client {
	t.Helper()
	c := hub.New(hub.Options{Address: a, Bag: sh.Bag, Incarnation: sh.Incarnation, Journal: sh, Members: sh, Files: sh.Files, Place: place, Poll: 20 * time.Millisecond})
	ctx, cancel := context.WithCancel(context.Background())
	done := make(chan error, 1)
	go func() { done <- c.Run(ctx) }()
	var once sync.Once
	var err error
	stop := func() error {
		once.Do(func() { cancel(); err = <-done })
		return err
	}
	t.Cleanup(func() { _ = stop() })
	return &client{c, stop}
}

func eventually(t testing.TB, what string, f func() bool) {
	t.Helper()
	within(t, 30*time.Second, what, f)
}

func within(t testing.TB, d time.Duration, what string, f func() bool) {
	t.Helper()
	end := time.Now().Add(d)
	for !f() {
		if time.Now().After(end) {
			t.Fatalf("still not so after %s: %s", d, what)
		}
		time.Sleep(20 * time.Millisecond)
	}
}

// file is a Place in a file.
type file string

func (f file) Load() (h string, seq uint64, err error) {
	b, err := os.ReadFile(string(f))
	if err == nil {
		_, err = fmt.Sscan(string(b), &h, &seq)
	}
	return h, seq, err
}

func (f file) Save(h string, seq uint64) error {
	return os.WriteFile(string(f), []byte(fmt.Sprint(h, " ", seq)), 0o600)
}

func TestThreeDevicesMeetAtTheHub(t *testing.T) {
	t.Parallel()
	a := sharetest.Found(t)
	b, c := sharetest.Join(t, a, "b"), sharetest.Join(t, a, "c")
	sharetest.Add(t, a, "before the hub")
	m := start(t, t.TempDir(), "127.0.0.1:0", a)
	defer m.Close()
	ca, cb := run(t, a, m.Address(), nil), run(t, b, m.Address(), nil)
	sharetest.Add(t, b, "from b")
	eventually(t, "a and b know the same", func() bool { return len(sharetest.Names(t, a)) == 2 && len(sharetest.Names(t, b)) == 2 })
	eventually(t, "nothing is unsent", func() bool { return ca.Status().Unsent == 0 && cb.Status().Unsent == 0 && ca.Status().Connected })
	// One that comes later gets everything; one that was away gets what it missed.
	require.NoError(t, cb.stop())
	run(t, c, m.Address(), nil)
	sharetest.Add(t, c, "from c")
	eventually(t, "c has all", func() bool { return len(sharetest.Names(t, c)) == 3 })
	eventually(t, "a has all", func() bool { return len(sharetest.Names(t, a)) == 3 })
	require.Len(t, sharetest.Names(t, b), 2)
	run(t, b, m.Address(), nil)
	eventually(t, "b has all", func() bool { return len(sharetest.Names(t, b)) == 3 })
	st, err := m.Status(context.Background())
	require.NoError(t, err)
	require.Positive(t, st.Messages)
	require.Equal(t, 3, st.Devices)
	require.Equal(t, 90*24*time.Hour, st.Limits.Age)
	eventually(t, "the others are seen", func() bool { return len(ca.Status().Peers) == 2 })
	// What the hub keeps is told on the devices too.
	eventually(t, "a knows what the hub keeps", func() bool { return ca.Status().Bytes > 0 && !ca.Status().Oldest.IsZero() })
	require.Equal(t, hub.Limits{Age: 90 * 24 * time.Hour, Bytes: 8 << 30, Replicas: 1}, ca.Status().Limits)
}

// The hub's process is stopped, started, and loses its whole folder: nothing that was recorded is lost,
// nothing is there twice.
func TestHubStopsAndLosesItsData(t *testing.T) {
	t.Parallel()
	a := sharetest.Found(t)
	b := sharetest.Join(t, a, "b")
	dir := filepath.Join(t.TempDir(), "hub")
	m := start(t, dir, "127.0.0.1:0", a)
	addr := m.Address()
	pa, pb := file(filepath.Join(t.TempDir(), "a")), file(filepath.Join(t.TempDir(), "b"))
	ca, cb := run(t, a, addr, pa), run(t, b, addr, pb)
	n := 0
	record := func(sh *share.Share) { n++; sharetest.Add(t, sh, fmt.Sprint("patient ", n)) }
	same := func() bool {
		na, nb := sharetest.Names(t, a), sharetest.Names(t, b)
		if len(na) != n || len(nb) != n {
			return false
		}
		for name, k := range nb {
			if k != 1 || na[name] != 1 {
				t.Fatalf("%s is there %d and %d times", name, na[name], k)
			}
		}
		return true
	}
	record(a)
	record(b)
	eventually(t, "both at the start", same)

	m.Close()
	record(a)
	record(b)
	eventually(t, "a counts what is unsent", func() bool { return ca.Status().Unsent > 0 && !ca.Status().Since.IsZero() })
	m = start(t, dir, addr.Host, a)
	eventually(t, "both after the hub came back", same)

	m.Close()
	record(a)
	require.NoError(t, cb.stop()) // b is away while the hub loses everything and a fills it
	certs := map[string][]byte{}
	for _, f := range []string{"hub-cert.pem", "hub-key.pem"} {
		data, err := os.ReadFile(filepath.Join(dir, f))
		require.NoError(t, err)
		certs[f] = data
	}
	require.NoError(t, os.RemoveAll(dir))
	require.NoError(t, os.MkdirAll(dir, 0o700))
	for f, data := range certs {
		require.NoError(t, os.WriteFile(filepath.Join(dir, f), data, 0o600))
	}
	m = start(t, dir, addr.Host, a)
	record(a)
	record(b)
	run(t, b, addr, pb)
	eventually(t, "both after the hub lost everything", same)
	m.Close()
}

func TestStrangersAreRefused(t *testing.T) {
	t.Parallel()
	a := sharetest.Found(t)
	b := sharetest.Join(t, a, "b")
	m := start(t, t.TempDir(), "127.0.0.1:0", a)
	defer m.Close()
	addr := m.Address()

	t.Run("a device of another practice", func(t *testing.T) {
		x := sharetest.Found(t)
		c := run(t, x, addr, nil)
		eventually(t, "it is told", func() bool { return c.Status().Err != nil || !c.Status().Connected })
		require.False(t, c.Status().Connected)
	})
	t.Run("no key at all", func(t *testing.T) {
		_, err := nats.Connect("tls://"+addr.Host, nats.Secure(hub.TLS(addr)))
		require.ErrorIs(t, err, nats.ErrAuthorization)
	})
	t.Run("the key of a member and no proof of it", func(t *testing.T) {
		pub, err := hub.PublicKey(b.Bag().Device.Verifier())
		require.NoError(t, err)
		other, err := nkeys.CreateUser()
		require.NoError(t, err)
		_, err = nats.Connect("tls://"+addr.Host, nats.Secure(hub.TLS(addr)), nats.Nkey(pub, other.Sign))
		require.ErrorIs(t, err, nats.ErrAuthorization)
	})
	t.Run("a key that is no member's", func(t *testing.T) {
		other, err := nkeys.CreateUser()
		require.NoError(t, err)
		pub, err := other.PublicKey()
		require.NoError(t, err)
		_, err = nats.Connect("tls://"+addr.Host, nats.Secure(hub.TLS(addr)), nats.Nkey(pub, other.Sign))
		require.ErrorIs(t, err, nats.ErrAuthorization)
	})
	t.Run("no certificate that is the hub's", func(t *testing.T) {
		_, err := nats.Connect("tls://" + addr.Host)
		require.Error(t, err)
	})
	t.Run("an older TLS", func(t *testing.T) {
		c := hub.TLS(addr)
		c.MinVersion, c.MaxVersion = tls.VersionTLS12, tls.VersionTLS12
		_, err := nats.Connect("tls://"+addr.Host, nats.Secure(c))
		require.Error(t, err)
	})
	t.Run("no TLS", func(t *testing.T) {
		conn, err := net.Dial("tcp", addr.Host)
		require.NoError(t, err)
		defer conn.Close()
		_, err = nats.Connect("nats://"+addr.Host, nats.Timeout(2*time.Second))
		require.Error(t, err)
	})
	t.Run("another hub in its place", func(t *testing.T) {
		other := start(t, t.TempDir(), "127.0.0.1:0", a)
		defer other.Close()
		fake := hub.Address{Host: other.Address().Host, Fingerprint: addr.Fingerprint}
		_, err := nats.Connect("tls://"+fake.Host, nats.Secure(hub.TLS(fake)))
		require.ErrorContains(t, err, "not the hub that was set up")
	})
	t.Run("a member who writes as another, or changes the streams", func(t *testing.T) {
		kp, err := nkeys.FromRawSeed(nkeys.PrefixByteUser, b.Bag().Device.Signer().Seed())
		require.NoError(t, err)
		pub, err := kp.PublicKey()
		require.NoError(t, err)
		denied := make(chan error, 10)
		nc, err := nats.Connect("tls://"+addr.Host, nats.Secure(hub.TLS(addr)), nats.Nkey(pub, kp.Sign), nats.ErrorHandler(func(_ *nats.Conn, _ *nats.Subscription, err error) { denied <- err }))
		require.NoError(t, err)
		defer nc.Close()
		for _, subject := range []string{"cw.seg." + a.Site().String() + "." + a.Incarnation().String(), "cw.head." + hub.Who(a.Bag().Device.Verifier()),
			"cw.fill." + hub.Who(a.Bag().Device.Verifier()) + "." + a.Site().String() + "." + a.Incarnation().String(), "cw.att." + hub.Who(a.Bag().Device.Verifier()) + ".n.k.0.1", "$JS.API.STREAM.DELETE.CW", "$JS.API.STREAM.PURGE.CW", "$JS.API.STREAM.MSG.DELETE.CW", "$SYS.REQ.SERVER.PING"} {
			require.NoError(t, nc.Publish(subject, []byte("x")))
			require.NoError(t, nc.Flush())
			select {
			case err := <-denied:
				require.ErrorIs(t, err, nats.ErrPermissionViolation, subject)
			case <-time.After(5 * time.Second):
				t.Errorf("%s was not refused", subject)
			}
		}
		js, err := jetstream.New(nc)
		require.NoError(t, err)
		s, err := js.Stream(context.Background(), hub.Segments)
		require.NoError(t, err, "what it may do goes on")
		_ = s
	})
	t.Run("a removed device", func(t *testing.T) {
		ca, cb := run(t, a, addr, nil), run(t, b, addr, nil)
		eventually(t, "both are in", func() bool { return ca.Status().Connected && cb.Status().Connected })
		require.NoError(t, a.Remove(context.Background(), "R. Okafor", b.Bag().Device.Verifier(), "lost"))
		ca.Kick()
		eventually(t, "it is thrown out", func() bool { return !cb.Status().Connected })
		n := len(sharetest.Names(t, b))
		sharetest.Add(t, a, "after the removal")
		time.Sleep(500 * time.Millisecond)
		require.Len(t, sharetest.Names(t, b), n)
		// Nor does it get in again, whatever program it uses.
		kp, err := nkeys.FromRawSeed(nkeys.PrefixByteUser, b.Bag().Device.Signer().Seed())
		require.NoError(t, err)
		pub, err := kp.PublicKey()
		require.NoError(t, err)
		_, err = nats.Connect("tls://"+addr.Host, nats.Secure(hub.TLS(addr)), nats.Nkey(pub, kp.Sign))
		require.ErrorIs(t, err, nats.ErrAuthorization)
	})
}

// What lies on the hub is checked like what lies in a folder.
func TestForgedMessagesAreLeftAlone(t *testing.T) {
	t.Parallel()
	a := sharetest.Found(t)
	b := sharetest.Join(t, a, "b")
	m := start(t, t.TempDir(), "127.0.0.1:0", a)
	defer m.Close()
	ca := run(t, a, m.Address(), nil)
	kp, err := nkeys.FromRawSeed(nkeys.PrefixByteUser, b.Bag().Device.Signer().Seed())
	require.NoError(t, err)
	pub, err := kp.PublicKey()
	require.NoError(t, err)
	nc, err := nats.Connect("tls://"+m.Address().Host, nats.Secure(hub.TLS(m.Address())), nats.Nkey(pub, kp.Sign))
	require.NoError(t, err)
	defer nc.Close()
	js, err := jetstream.New(nc)
	require.NoError(t, err)
	ctx := context.Background()
	for _, data := range [][]byte{nil, []byte("hello"), make([]byte, 500_000)} {
		_, err := js.Publish(ctx, "cw.seg."+b.Site().String()+"."+b.Incarnation().String(), data)
		require.NoError(t, err)
		_, err = js.Publish(ctx, "cw.head."+hub.Who(b.Bag().Device.Verifier()), data)
		require.NoError(t, err)
		_, err = js.Publish(ctx, "cw.member", data[:min(len(data), 60_000)])
		require.NoError(t, err)
		require.NoError(t, nc.Publish("cw.want.x.y", data))
	}
	sharetest.Add(t, b, "true")
	run(t, b, m.Address(), nil)
	eventually(t, "what is true gets through", func() bool { return sharetest.Names(t, a)["true"] == 1 })
	require.NotNil(t, ca.Status().Refused)
}

func TestAttachmentsTravelByHub(t *testing.T) {
	t.Parallel()
	a := sharetest.Found(t)
	b := sharetest.Join(t, a, "b")
	ctx := context.Background()
	fa, err := attach.Open(ctx, a.Store, nil)
	require.NoError(t, err)
	fb, err := attach.Open(ctx, b.Store, nil)
	require.NoError(t, err)
	a.Files, b.Files = fa, fb
	owner := storage.NewID()
	want := map[string][]byte{}
	for _, n := range []int{0, 100, 512 << 10, 1_500_000} {
		data := bytes.Repeat([]byte{byte(n), 7, byte(n >> 8)}, n/3)
		name, err := fa.Add(ctx, owner, bytes.NewReader(data))
		require.NoError(t, err)
		want[name] = data
	}
	m := start(t, t.TempDir(), "127.0.0.1:0", a)
	defer m.Close()
	run(t, a, m.Address(), nil)
	sharetest.Add(t, a, "Bramble")
	run(t, b, m.Address(), nil)
	eventually(t, "b has the files", func() bool {
		for name, data := range want {
			r, err := fb.Read(owner, name)
			if err != nil {
				return false
			}
			got, err := io.ReadAll(r)
			r.Close()
			if err != nil || !bytes.Equal(got, data) {
				t.Fatalf("%s came wrong: %v", name, err)
			}
		}
		return true
	})
	require.Equal(t, 1, sharetest.Names(t, b)["Bramble"])
}

func TestParseAddress(t *testing.T) {
	t.Parallel()
	print, other := fmt.Sprintf("%064x", 5), fmt.Sprintf("%064x", 6)
	for in, want := range map[string]hub.Address{
		"hub": {Host: "hub:4222"}, "10.0.0.5:99": {Host: "10.0.0.5:99"}, "[::1]:7": {Host: "[::1]:7"}, "::1": {Host: "[::1]:4222"},
		"hub#" + print:   {Host: "hub:4222", Fingerprint: print},
		"a, b:7,[::1]:8": {Host: "a:4222,b:7,[::1]:8"}, "a#" + print + ",b#" + other: {Host: "a:4222,b:4222", Fingerprint: print + "," + other},
	} {
		got, err := hub.ParseAddress(in)
		require.NoError(t, err, in)
		require.Equal(t, want, got)
		again, err := hub.ParseAddress(got.String())
		require.NoError(t, err)
		require.Equal(t, got, again)
	}
	for _, bad := range []string{"", "hub#12", "hub#zz", ":5", "a,", "a,,b", "a#" + print + ",b", "nats://a:5", strings.Repeat("a,", 20) + "a"} {
		_, err := hub.ParseAddress(bad)
		require.Error(t, err, bad)
	}
}
