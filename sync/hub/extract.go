package hub

import (
	"bytes"
	"context"
	"encoding/binary"
	"encoding/hex"
	"errors"
	"fmt"
	"math/rand/v2"
	"strconv"
	"strings"
	"time"

	"github.com/nats-io/nats.go/jetstream"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// A device that does not keep the records of a site can ask those that do for one patient. Ask and answer lie on the hub
// until the other side comes by:
//
//	cw.ask.WHO.PATIENT            the epoch in 4 bytes, and the patient's id, sealed
//	cw.extract.WHO.PATIENT.I.N    piece I of N of an extract, which is sealed and signed: see package extract
//
// PATIENT is the first half of a MAC of the id, so that the hub does not learn even that.

// Extracts is the stream of messages of asks and extracts.
const Extracts = "CWX"

const (
	askMagic  = "cordwalk 1 ask for an extract\x00"
	maxPieces = 200 // of an extract: more than the largest has
)

// ErrNoExtract means that nobody has answered yet.
var ErrNoExtract = errors.New("no device that keeps this patient has answered yet")

// ask makes the token of a patient and what an ask says.
func ask(bag key.Bag, patient exam.ID) (token string, body []byte) {
	epoch := bag.Ring.Current()
	secret, _ := bag.Ring.Secret(epoch)
	body = binary.BigEndian.AppendUint32(nil, epoch)
	return tokenOf(secret, patient), append(body, secret.Derive("ask").Seal(patient[:], []byte(askMagic))...)
}

func tokenOf(epoch key.Secret, patient exam.ID) string {
	mac := epoch.Derive("ask token").MAC(patient[:])
	return hex.EncodeToString(mac[:16])
}

// parseAsk reads an ask.
func parseAsk(bag key.Bag, subject string, body []byte) (who, token string, patient exam.ID, err error) {
	t := strings.Split(subject, ".")
	if len(t) != 4 || len(body) < 4 || len(body) > 256 {
		return "", "", patient, change.ErrMalformed
	}
	secret, ok := bag.Ring.Secret(binary.BigEndian.Uint32(body))
	if !ok {
		return "", "", patient, change.ErrNoKey
	}
	plain, err := secret.Derive("ask").Open(body[4:], []byte(askMagic))
	if err != nil || len(plain) != len(patient) {
		return "", "", patient, errors.Join(change.ErrMalformed, err)
	}
	copy(patient[:], plain)
	if tokenOf(secret, patient) != t[3] {
		return "", "", patient, change.ErrMalformed
	}
	return t[2], t[3], patient, nil
}

// giveExtracts begins to answer asks for patients that this device keeps. The returned function ends it.
func (c *Client) giveExtracts(ctx context.Context) (stop func(), err error) {
	if c.o.Extract == nil {
		return func() {}, nil
	}
	stream, err := c.js.Stream(ctx, Extracts)
	if errors.Is(err, jetstream.ErrStreamNotFound) {
		return func() {}, nil // a hub that was set up by an earlier version
	}
	if err != nil {
		return nil, err
	}
	cons, err := c.js.OrderedConsumer(ctx, Extracts, jetstream.OrderedConsumerConfig{DeliverPolicy: jetstream.DeliverLastPerSubjectPolicy, FilterSubjects: []string{"cw.ask.>"}})
	if err != nil {
		return nil, err
	}
	ctx, cancel := context.WithCancel(ctx)
	asks := make(chan jetstream.Msg, 16)
	cc, err := cons.Consume(func(m jetstream.Msg) {
		select {
		case asks <- m:
		case <-ctx.Done():
		}
	}, jetstream.ConsumeErrHandler(func(jetstream.ConsumeContext, error) {}))
	if err != nil {
		cancel()
		return nil, err
	}
	done := make(chan struct{})
	go func() {
		defer close(done)
		for {
			select {
			case <-ctx.Done():
				return
			case m := <-asks:
				if err := c.give(ctx, stream, m); err != nil && ctx.Err() == nil {
					c.fail(err)
				}
			}
		}
	}()
	return func() { cancel(); cc.Stop(); <-done }, nil
}

// give answers one ask, unless it is this device's own, somebody else has answered, or the patient is not kept here.
func (c *Client) give(ctx context.Context, stream jetstream.Stream, m jetstream.Msg) error {
	meta, err := m.Metadata()
	if err != nil {
		return nil
	}
	bag := c.o.Bag()
	me := Who(bag.Device.Verifier())
	who, token, patient, err := parseAsk(bag, m.Subject(), m.Data())
	if err != nil || who == me {
		return nil // nothing that could be answered
	}
	for again := range 2 {
		if _, _, ok, err := given(ctx, stream, token, meta.Sequence.Stream); ok || err != nil {
			return err
		}
		if again == 0 { // others may be about to answer as well
			select {
			case <-time.After(rand.N(5 * c.o.Poll)):
			case <-ctx.Done():
				return nil
			}
		}
	}
	data, err := c.o.Extract(ctx, patient, who)
	if err != nil || data == nil {
		return err
	}
	n := max(1, (len(data)+pieceSize-1)/pieceSize)
	for i := range n {
		piece := data[i*pieceSize : min(len(data), (i+1)*pieceSize)]
		if _, err := c.js.Publish(ctx, fmt.Sprintf("cw.extract.%s.%s.%d.%d", me, token, i, n), piece, jetstream.WithExpectStream(Extracts)); err != nil {
			return fmt.Errorf("the hub did not take an extract: %w", err)
		}
	}
	return nil
}

// given looks for the beginning of an extract that was left after a message.
func given(ctx context.Context, stream jetstream.Stream, token string, after uint64) (first *jetstream.RawStreamMsg, n int, ok bool, err error) {
	first, err = stream.GetLastMsgForSubject(ctx, "cw.extract.*."+token+".0.*")
	if errors.Is(err, jetstream.ErrMsgNotFound) {
		return nil, 0, false, nil
	}
	if err != nil || first.Sequence <= after {
		return nil, 0, false, err
	}
	n, err = strconv.Atoi(first.Subject[strings.LastIndexByte(first.Subject, '.')+1:])
	if err != nil || n < 1 || n > maxPieces {
		return nil, 0, false, nil
	}
	return first, n, true, nil
}

// FetchExtract asks for an extract of a patient, and waits until it is there or ctx ends; then the error is
// ErrNoExtract, the ask stays on the hub, and a later call finds the answer. An answer to an earlier ask of this device
// serves, unless fresh is true. What comes is not checked yet: see package extract. Run must be running.
func (c *Client) FetchExtract(ctx context.Context, patient exam.ID, fresh bool) ([]byte, error) {
	late := func(err error) error {
		if ctx.Err() == nil {
			return err
		}
		return fmt.Errorf("asking for the patient: %w", ErrNoExtract)
	}
	pause := func() error {
		select {
		case <-ctx.Done():
			return late(nil)
		case <-time.After(2 * c.o.Poll):
			return nil
		}
	}
	js := c.connection()
	for js == nil {
		if err := pause(); err != nil {
			return nil, err
		}
		js = c.connection()
	}
	stream, err := js.Stream(ctx, Extracts)
	if errors.Is(err, jetstream.ErrStreamNotFound) {
		return nil, errors.New("the hub cannot pass on extracts: whoever runs it should start it with the newest program")
	}
	if err != nil {
		return nil, late(err)
	}
	bag := c.o.Bag()
	token, body := ask(bag, patient)
	subject := "cw.ask." + Who(bag.Device.Verifier()) + "." + token
	var asked uint64
	before, err := stream.GetLastMsgForSubject(ctx, subject)
	switch {
	case err == nil && !fresh:
		asked = before.Sequence
	case err != nil && !errors.Is(err, jetstream.ErrMsgNotFound):
		return nil, late(err)
	default:
		ack, err := js.Publish(ctx, subject, body, jetstream.WithExpectStream(Extracts))
		if err != nil {
			return nil, late(fmt.Errorf("the hub did not take what was asked: %w", err))
		}
		asked = ack.Sequence
	}
	for {
		data, err := pieced(ctx, stream, token, asked)
		if err != nil {
			return nil, late(err)
		}
		if data != nil {
			return data, nil
		}
		if err := pause(); err != nil {
			return nil, err
		}
	}
}

// connection returns the way to the hub, nil while there is none.
func (c *Client) connection() jetstream.JetStream {
	c.mu.Lock()
	defer c.mu.Unlock()
	if c.nc == nil || !c.nc.IsConnected() {
		return nil
	}
	return c.js
}

// pieced puts an extract together; nil while it is not all there.
func pieced(ctx context.Context, stream jetstream.Stream, token string, asked uint64) ([]byte, error) {
	first, n, ok, err := given(ctx, stream, token, asked)
	if !ok || err != nil {
		return nil, err
	}
	var all bytes.Buffer
	all.Write(first.Data)
	base := strings.TrimSuffix(first.Subject, fmt.Sprintf(".0.%d", n))
	for i := 1; i < n; i++ {
		m, err := stream.GetLastMsgForSubject(ctx, fmt.Sprintf("%s.%d.%d", base, i, n))
		if errors.Is(err, jetstream.ErrMsgNotFound) || err == nil && m.Sequence < first.Sequence {
			return nil, nil
		}
		if err != nil {
			return nil, err
		}
		all.Write(m.Data)
	}
	return all.Bytes(), nil
}
