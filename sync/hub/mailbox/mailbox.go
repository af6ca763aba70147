// Package mailbox is a hub for one clinic on an ordinary computer: NATS JetStream in this process, over TLS 1.3, with
// every write synced before it is acknowledged.
//
// It holds no key of the practice, only the member list, which is signed and in clear, and lets in
// the devices on it: each may read everything, and write under its own names only. A device that is
// removed is thrown out as soon as the hub learns of it.
package mailbox

import (
	"context"
	"crypto/ed25519"
	"crypto/rand"
	"crypto/sha256"
	"crypto/tls"
	"crypto/x509"
	"crypto/x509/pkix"
	"encoding/base64"
	"encoding/hex"
	"encoding/pem"
	"errors"
	"fmt"
	"io/fs"
	"math/big"
	"net"
	"path/filepath"
	"strings"
	"sync"
	"time"

	"github.com/nats-io/nats-server/v2/server"
	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"
	"github.com/nats-io/nkeys"

	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/hub"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/member"
)

// Options of a mailbox.
type Options struct {
	Dir    string // its own folder
	Listen string // host:port; port 0 or -1 takes a free one. Empty: every address, port 4222
	Limits hub.Limits
	FS     disk.FS            // nil: the real file system
	Notice func(words string) // messages for whoever runs it; may be nil
}

const (
	rootFile   = "root"
	membersDir = "members"
	certFile   = "hub-cert.pem"
	keyFile    = "hub-key.pem"
	streamsDir = "jetstream"
)

// Setup prepares a folder for the practice whose list this is. It may be called again.
func Setup(o Options, list *member.List) error {
	if o.FS == nil {
		o.FS = disk.OS()
	}
	for _, d := range []string{o.Dir, filepath.Join(o.Dir, membersDir)} {
		if err := o.FS.MakeDir(d); err != nil {
			return fmt.Errorf("making the hub's folder: %w", err)
		}
	}
	root := list.Root()
	if old, err := disk.ReadFile(o.FS, filepath.Join(o.Dir, rootFile), 128); err == nil && strings.TrimSpace(string(old)) != root.String() {
		return errors.New("this folder is the hub of another practice; name another one")
	}
	for _, raw := range list.Statements() {
		if err := keep(o, raw); err != nil {
			return err
		}
	}
	if err := disk.Replace(o.FS, filepath.Join(o.Dir, rootFile), []byte(root.String()+"\n")); err != nil {
		return fmt.Errorf("setting the hub up: %w", err)
	}
	return nil
}

func keep(o Options, raw []byte) error {
	sum := sha256.Sum256(raw)
	if err := disk.Replace(o.FS, filepath.Join(o.Dir, membersDir, hex.EncodeToString(sum[:20])+".member"), raw); err != nil {
		return fmt.Errorf("keeping the member list: %w", err)
	}
	return nil
}

// Mailbox is a running hub.
type Mailbox struct {
	o      Options
	srv    *server.Server
	list   *member.List
	own    nkeys.KeyPair // the hub's own connection
	ownPub string
	print  string
	nc     *nats.Conn

	mu      sync.Mutex
	clients map[key.Verifier]map[uint64]bool
	stopped chan struct{}
	wait    sync.WaitGroup
}

// Start runs a hub that Setup prepared until Close.
func Start(ctx context.Context, o Options) (*Mailbox, error) {
	m, err := start(ctx, o)
	if err != nil {
		return nil, fmt.Errorf("starting the hub: %w", err)
	}
	return m, nil
}

func start(ctx context.Context, o Options) (*Mailbox, error) {
	if o.FS == nil {
		o.FS = disk.OS()
	}
	if o.Notice == nil {
		o.Notice = func(string) {}
	}
	if o.Listen == "" {
		o.Listen = "0.0.0.0:4222"
	}
	m := &Mailbox{o: o, clients: map[key.Verifier]map[uint64]bool{}, stopped: make(chan struct{})}
	if err := m.load(); err != nil {
		return nil, err
	}
	cert, err := m.certificate()
	if err != nil {
		return nil, err
	}
	if m.own, err = nkeys.CreateUser(); err != nil {
		return nil, err
	}
	if m.ownPub, err = m.own.PublicKey(); err != nil {
		return nil, err
	}
	host, port, err := net.SplitHostPort(o.Listen)
	if err != nil {
		return nil, fmt.Errorf("%q is no address to listen on: %w", o.Listen, err)
	}
	n, err := net.LookupPort("tcp", port)
	if err != nil {
		return nil, fmt.Errorf("%q is no address to listen on: %w", o.Listen, err)
	}
	if n == 0 {
		n = server.RANDOM_PORT
	}
	opts := &server.Options{
		ServerName: "cordwalk-hub", Host: host, Port: n, NoSigs: true, NoLog: true, DontListen: false,
		TLS: true, TLSTimeout: 5, AuthTimeout: 10, AlwaysEnableNonce: true, CustomClientAuthentication: m,
		TLSConfig: &tls.Config{Certificates: []tls.Certificate{cert}, MinVersion: tls.VersionTLS13},
		JetStream: true, StoreDir: filepath.Join(o.Dir, streamsDir), SyncAlways: true,
		MaxPayload: hub.MaxMessage, MaxConn: 1024, MaxPending: 64 << 20, MaxControlLine: 4096,
		JetStreamMaxMemory: 64 << 20, JetStreamMaxStore: 64 << 30,
	}
	if m.srv, err = server.NewServer(opts); err != nil {
		return nil, err
	}
	go m.srv.Start()
	if !m.srv.ReadyForConnections(15 * time.Second) {
		m.srv.Shutdown()
		return nil, fmt.Errorf("nothing could be opened at %s; is another hub running there?", o.Listen)
	}
	if err := m.connect(ctx); err != nil {
		m.srv.Shutdown()
		return nil, err
	}
	return m, nil
}

// load reads the member list.
func (m *Mailbox) load() error {
	root, err := disk.ReadFile(m.o.FS, filepath.Join(m.o.Dir, rootFile), 128)
	if errors.Is(err, fs.ErrNotExist) {
		return errors.New("the folder is not set up as a hub; set it up on a device of the practice first")
	}
	if err != nil {
		return err
	}
	id, err := hex.DecodeString(strings.TrimSpace(string(root)))
	if err != nil || len(id) != len(member.ID{}) {
		return errors.New("the hub's folder is damaged: set it up again")
	}
	m.list = member.NewList(member.ID(id))
	es, err := m.o.FS.List(filepath.Join(m.o.Dir, membersDir))
	if err != nil {
		return err
	}
	var raws [][]byte
	for _, e := range es {
		if e.Dir || e.Size > member.MaxStatement || !strings.HasSuffix(e.Name, ".member") {
			continue
		}
		b, err := disk.ReadFile(m.o.FS, filepath.Join(m.o.Dir, membersDir, e.Name), member.MaxStatement)
		if err != nil {
			return err
		}
		raws = append(raws, b)
	}
	if _, err := m.list.Learn(raws); err != nil {
		return err
	}
	m.list.OnLearn(func(raw []byte) error { return keep(m.o, raw) })
	return nil
}

// certificate reads the hub's certificate, or makes it the first time.
func (m *Mailbox) certificate() (tls.Certificate, error) {
	certName, keyName := filepath.Join(m.o.Dir, certFile), filepath.Join(m.o.Dir, keyFile)
	certPEM, err := disk.ReadFile(m.o.FS, certName, 1<<16)
	if errors.Is(err, fs.ErrNotExist) {
		if err := m.makeCertificate(certName, keyName); err != nil {
			return tls.Certificate{}, err
		}
		certPEM, err = disk.ReadFile(m.o.FS, certName, 1<<16)
	}
	if err != nil {
		return tls.Certificate{}, err
	}
	keyPEM, err := disk.ReadFile(m.o.FS, keyName, 1<<16)
	if err != nil {
		return tls.Certificate{}, err
	}
	cert, err := tls.X509KeyPair(certPEM, keyPEM)
	if err != nil {
		return cert, fmt.Errorf("the hub's certificate is damaged; remove %s to make a new one (every device must then be told its new fingerprint): %w", certName, err)
	}
	sum := sha256.Sum256(cert.Certificate[0])
	m.print = hex.EncodeToString(sum[:])
	return cert, nil
}

func (m *Mailbox) makeCertificate(certName, keyName string) error {
	pub, priv, err := ed25519.GenerateKey(rand.Reader)
	if err != nil {
		return err
	}
	serial, err := rand.Int(rand.Reader, new(big.Int).Lsh(big.NewInt(1), 120))
	if err != nil {
		return err
	}
	// Devices know it by its fingerprint, so its dates say nothing.
	t := &x509.Certificate{SerialNumber: serial, Subject: pkix.Name{CommonName: "cordwalk hub"}, DNSNames: []string{"cordwalk-hub.local"},
		NotBefore: time.Date(2020, 1, 1, 0, 0, 0, 0, time.UTC), NotAfter: time.Date(2120, 1, 1, 0, 0, 0, 0, time.UTC),
		KeyUsage: x509.KeyUsageDigitalSignature, ExtKeyUsage: []x509.ExtKeyUsage{x509.ExtKeyUsageServerAuth}}
	der, err := x509.CreateCertificate(rand.Reader, t, t, pub, priv)
	if err != nil {
		return err
	}
	pk, err := x509.MarshalPKCS8PrivateKey(priv)
	if err != nil {
		return err
	}
	if err := disk.Replace(m.o.FS, keyName, pem.EncodeToMemory(&pem.Block{Type: "PRIVATE KEY", Bytes: pk})); err != nil {
		return err
	}
	return disk.Replace(m.o.FS, certName, pem.EncodeToMemory(&pem.Block{Type: "CERTIFICATE", Bytes: der}))
}

// connect makes the streams and follows the member list.
func (m *Mailbox) connect(ctx context.Context) error {
	nc, err := nats.Connect("", nats.InProcessServer(m.srv), nats.Nkey(m.ownPub, m.own.Sign), nats.Name("hub"), nats.MaxReconnects(-1))
	if err != nil {
		return err
	}
	m.nc = nc
	js, err := jetstream.New(nc)
	if err != nil {
		return err
	}
	if err := hub.Ensure(ctx, js, m.o.Limits); err != nil {
		return err
	}
	c, err := js.OrderedConsumer(ctx, hub.Members, jetstream.OrderedConsumerConfig{})
	if err != nil {
		return err
	}
	cc, err := c.Consume(func(msg jetstream.Msg) {
		fresh, err := m.list.Learn([][]byte{msg.Data()})
		if err != nil {
			m.o.Notice(err.Error())
		}
		if fresh {
			m.expel()
		}
	}, jetstream.ConsumeErrHandler(func(jetstream.ConsumeContext, error) {}))
	if err != nil {
		return err
	}
	m.wait.Go(func() {
		<-m.stopped
		cc.Stop()
	})
	return nil
}

// Check implements the server's authentication: a connection is a member's if it signs the server's nonce
// with the member's key.
func (m *Mailbox) Check(c server.ClientAuthentication) bool {
	o := c.GetOpts()
	sig, err := base64.RawURLEncoding.DecodeString(o.Sig)
	if err != nil || o.Nkey == "" {
		return false
	}
	pub, err := nkeys.FromPublicKey(o.Nkey)
	if err != nil || pub.Verify(c.GetNonce(), sig) != nil {
		return false
	}
	if o.Nkey == m.ownPub {
		c.RegisterUser(&server.User{Username: "hub"})
		return true
	}
	if c.GetTLSConnectionState() == nil {
		return false
	}
	raw, err := nkeys.Decode(nkeys.PrefixByteUser, []byte(o.Nkey))
	if err != nil || len(raw) != len(key.Verifier{}) {
		return false
	}
	v := key.Verifier(raw)
	d, ok := m.list.Device(v)
	if !ok || !d.Member() {
		return false
	}
	m.mu.Lock()
	if m.clients[v] == nil {
		m.clients[v] = map[uint64]bool{}
	}
	m.clients[v][c.GetID()] = true
	m.mu.Unlock()
	c.RegisterUser(&server.User{Username: o.Nkey, Permissions: permissions(d)})
	return true
}

// permissions says what a device may do.
func permissions(d member.Device) *server.Permissions {
	publish, subscribe := hub.May(d)
	return &server.Permissions{Publish: &server.SubjectPermission{Allow: publish}, Subscribe: &server.SubjectPermission{Allow: subscribe}}
}

// expel closes the connections of devices that are no members any more, and of those that have new names, which
// come back with them.
func (m *Mailbox) expel() {
	m.mu.Lock()
	defer m.mu.Unlock()
	for v, ids := range m.clients {
		d, ok := m.list.Device(v)
		if ok && d.Member() {
			continue
		}
		for id := range ids {
			_ = m.srv.DisconnectClientByID(id)
		}
		delete(m.clients, v)
		m.o.Notice("a device that was removed was disconnected: " + d.Name)
	}
}

// Address returns where devices reach the hub, with its fingerprint.
func (m *Mailbox) Address() hub.Address {
	return hub.Address{Host: m.srv.Addr().String(), Fingerprint: m.print}
}

// Status says what the hub holds.
type Status struct {
	Devices  int // connected
	Messages uint64
	Bytes    uint64
	Oldest   time.Time
	Limits   hub.Limits
}

// Status returns what the hub holds.
func (m *Mailbox) Status(ctx context.Context) (Status, error) {
	js, err := jetstream.New(m.nc)
	if err != nil {
		return Status{}, err
	}
	s, err := js.Stream(ctx, hub.Segments)
	if err != nil {
		return Status{}, fmt.Errorf("looking at what the hub holds: %w", err)
	}
	i := s.CachedInfo()
	return Status{Devices: m.srv.NumClients() - 1, Messages: i.State.Msgs, Bytes: i.State.Bytes, Oldest: i.State.FirstTime,
		Limits: hub.Limits{Age: i.Config.MaxAge, Bytes: i.Config.MaxBytes, Replicas: i.Config.Replicas}}, nil
}

// Close stops the hub.
func (m *Mailbox) Close() {
	close(m.stopped)
	m.wait.Wait()
	m.nc.Close()
	m.srv.Shutdown()
	m.srv.WaitForShutdown()
}
