// Package hub exchanges journals over a network, through NATS JetStream: one small server for a clinic (see
// mailbox), or an existing cluster for a group of clinics.
//
// The hub is a mailbox, never the record. It sees sealed segments and their streams, numbers and sizes. JetStream
// may lose what it acknowledged, and forgets repeats after two minutes; so a device keeps every
// journal of its sites, drops repeats itself, compares what it holds with what the others say they
// hold, asks for what it lacks, and fills the hub again.
//
// Subjects, in streams of messages:
//
//	cw.seg.SITE.DEVICE          segments of a device's own stream (stream CW)
//	cw.fill.WHO.SITE.DEVICE     segments that somebody sends again (stream CW)
//	cw.head.WHO                 the newest head of a device (stream CWH, one message for each)
//	cw.member                   statements of the member list (stream CWM, kept)
//	cw.att.WHO.NAME.…           pieces of attachments (stream CWA)
//	cw.ask.…, cw.extract.…      one patient for a site that does not keep it (stream CWX)
//	cw.want.SITE.DEVICE         somebody lacks numbers of a stream (not stored)
//
// SITE, DEVICE and WHO are hexadecimal; WHO is the first half of a device's public key.
package hub

import (
	"context"
	"crypto/sha256"
	"crypto/tls"
	"crypto/x509"
	"encoding/hex"
	"errors"
	"fmt"
	"net"
	"slices"
	"strings"
	"time"

	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"
	"github.com/nats-io/nkeys"

	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// The streams of messages.
const (
	Segments = "CW"
	Heads    = "CWH"
	Members  = "CWM"
)

// MaxMessage is the size of the largest message. Segments for the hub stay well below it.
const MaxMessage = 1 << 20

const targetRaw = 96 << 10 // bytes of frames in one message: some hundreds, as findings go

// Limits of the mailbox.
type Limits struct {
	Age      time.Duration // how long a message is kept; 0: 90 days
	Bytes    int64         // of all segments, and again of all attachments; 0: 8 GiB
	Replicas int           // 0: 1; 3 for a cluster
}

// Configs returns the streams of messages that a hub needs.
func (l Limits) Configs() []jetstream.StreamConfig {
	if l.Age == 0 {
		l.Age = 90 * 24 * time.Hour
	}
	if l.Bytes == 0 {
		l.Bytes = 8 << 30
	}
	l.Replicas = max(l.Replicas, 1)
	return []jetstream.StreamConfig{
		{Name: Segments, Subjects: []string{"cw.seg.>", "cw.fill.>"}, MaxAge: l.Age, MaxBytes: l.Bytes, MaxMsgSize: MaxMessage, Storage: jetstream.FileStorage, Replicas: l.Replicas, Discard: jetstream.DiscardOld, AllowDirect: true, Duplicates: 2 * time.Minute},
		{Name: Heads, Subjects: []string{"cw.head.*"}, MaxAge: l.Age, MaxMsgsPerSubject: 1, MaxBytes: 256 << 20, MaxMsgSize: MaxMessage, Storage: jetstream.FileStorage, Replicas: l.Replicas, AllowDirect: true},
		{Name: Attached, Subjects: []string{"cw.att.*.*.*.*.*"}, MaxAge: l.Age, MaxBytes: l.Bytes, MaxMsgSize: MaxMessage, Storage: jetstream.FileStorage, Replicas: l.Replicas, Discard: jetstream.DiscardOld, AllowDirect: true, Duplicates: 2 * time.Minute},
		{Name: Extracts, Subjects: []string{"cw.ask.*.*", "cw.extract.*.*.*.*"}, MaxAge: l.Age, MaxMsgsPerSubject: 1, MaxBytes: min(l.Bytes, 1<<30), MaxMsgSize: MaxMessage, Storage: jetstream.FileStorage, Replicas: l.Replicas, Discard: jetstream.DiscardOld, AllowDirect: true},
		{Name: Members, Subjects: []string{"cw.member"}, MaxMsgs: 1 << 15, MaxBytes: 1 << 30, MaxMsgSize: 64<<10 + 1024, Storage: jetstream.FileStorage, Replicas: l.Replicas, AllowDirect: true},
	}
}

// Ensure makes the streams of messages on a server, for those who run a cluster of their own.
func Ensure(ctx context.Context, js jetstream.JetStream, l Limits) error {
	for _, c := range l.Configs() {
		if _, err := js.CreateOrUpdateStream(ctx, c); err != nil {
			return fmt.Errorf("making the stream %s on the hub: %w", c.Name, err)
		}
	}
	return nil
}

// Who returns the part of a subject that names a device's key.
func Who(v key.Verifier) string { return hex.EncodeToString(v[:16]) }

func segSubject(s change.Stream) string { return "cw.seg." + s.Site.String() + "." + s.Device.String() }

func fillSubject(who string, s change.Stream) string {
	return "cw.fill." + who + "." + s.Site.String() + "." + s.Device.String()
}

func wantSubject(s change.Stream) string {
	return "cw.want." + s.Site.String() + "." + s.Device.String()
}

// PublicKey returns a device's name as a NATS user.
func PublicKey(v key.Verifier) (string, error) {
	b, err := nkeys.Encode(nkeys.PrefixByteUser, v[:])
	return string(b), err
}

// keyPair returns a device's key as a NATS user.
func keyPair(d key.Device) (nkeys.KeyPair, error) {
	return nkeys.FromRawSeed(nkeys.PrefixByteUser, d.Signer().Seed())
}

// Address is where a hub is found: "host:port", and behind a "#" the SHA-256 of its certificate in
// hexadecimal digits. Without it the certificate must be one that this computer trusts. The nodes of a cluster stand
// one behind the other with commas between: any of them will do.
type Address struct {
	Host        string // host:port; of a cluster several, with commas between
	Fingerprint string // of a cluster as many, or none
}

// maxNodes is how many nodes of a cluster an address names at most.
const maxNodes = 16

// ParseAddress reads an address; a missing port is 4222.
func ParseAddress(text string) (Address, error) {
	var hosts, prints []string
	for node := range strings.SplitSeq(text, ",") {
		host, print, _ := strings.Cut(strings.TrimSpace(node), "#")
		if _, _, err := net.SplitHostPort(host); err != nil {
			host = net.JoinHostPort(strings.Trim(host, "[]"), "4222")
		}
		h, port, err := net.SplitHostPort(host)
		if err != nil || h == "" || port == "" || strings.ContainsAny(h, "/@ ") {
			return Address{}, fmt.Errorf("%q is no address of a hub: want a host, or host:port, and of a cluster several with commas between", text)
		}
		if print != "" {
			if b, err := hex.DecodeString(print); err != nil || len(b) != sha256.Size {
				return Address{}, fmt.Errorf("the fingerprint behind # in %q should have 64 hexadecimal digits", text)
			}
			prints = append(prints, strings.ToLower(print))
		}
		hosts = append(hosts, host)
	}
	switch {
	case len(hosts) > maxNodes:
		return Address{}, fmt.Errorf("an address of a hub with %d nodes: at most %d are used", len(hosts), maxNodes)
	case len(prints) > 0 && len(prints) < len(hosts):
		return Address{}, fmt.Errorf("in %q some nodes have a fingerprint behind # and some have none: give all of them one, or none", text)
	}
	return Address{strings.Join(hosts, ","), strings.Join(prints, ",")}, nil
}

// String is the inverse of ParseAddress.
func (a Address) String() string {
	if a.Fingerprint == "" {
		return a.Host
	}
	hosts, prints := strings.Split(a.Host, ","), strings.Split(a.Fingerprint, ",")
	for i := range min(len(hosts), len(prints)) {
		hosts[i] += "#" + prints[i]
	}
	return strings.Join(hosts, ",")
}

// urls returns where a NATS client connects to.
func (a Address) urls() string {
	return "tls://" + strings.ReplaceAll(a.Host, ",", ",tls://")
}

// tls returns TLS 1.3 with the pinned certificates.
func (a Address) tls() *tls.Config {
	c := &tls.Config{MinVersion: tls.VersionTLS13}
	if a.Fingerprint == "" {
		return c
	}
	// The certificate is the hub's own; what makes it the right one is its fingerprint.
	c.InsecureSkipVerify = true
	c.VerifyPeerCertificate = func(raw [][]byte, _ [][]*x509.Certificate) error {
		if len(raw) == 0 {
			return errors.New("the hub showed no certificate")
		}
		sum := sha256.Sum256(raw[0])
		if !slices.Contains(strings.Split(a.Fingerprint, ","), hex.EncodeToString(sum[:])) {
			return errors.New("this is not the hub that was set up: its certificate is another one; ask whoever runs it before going on")
		}
		return nil
	}
	return c
}

// connect opens a connection that comes back by itself.
func connect(a Address, d key.Device, name string, more ...nats.Option) (*nats.Conn, error) {
	kp, err := keyPair(d)
	if err != nil {
		return nil, err
	}
	pub, err := kp.PublicKey()
	if err != nil {
		return nil, err
	}
	o := append([]nats.Option{
		nats.Name(name), nats.Secure(a.tls()), nats.Nkey(pub, kp.Sign), nats.MaxReconnects(-1), nats.ReconnectWait(500 * time.Millisecond),
		nats.Timeout(5 * time.Second), nats.PingInterval(20 * time.Second), nats.NoEcho(),
		nats.ReconnectBufSize(-1), // nothing is called sent that is not
	}, more...)
	return nats.Connect(a.urls(), o...)
}
