package hub

import (
	"context"
	"fmt"
	"strings"

	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"
	"github.com/nats-io/nkeys"

	"cordwalk.example/cordwalk/sync/member"
)

// May says under which subjects a device may publish and to which it may subscribe: it reads all, and writes under its
// own names.
func May(d member.Device) (publish, subscribe []string) {
	who := Who(d.Verifier)
	publish = []string{
		"cw.fill." + who + ".*.*", "cw.att." + who + ".>", "cw.head." + who, "cw.member", "cw.want.*.*", "cw.ask." + who + ".*", "cw.extract." + who + ".*.*.*",
		"$JS.API.INFO", "$JS.ACK.>", "_INBOX.>",
	}
	for _, i := range d.Incarnations {
		publish = append(publish, "cw.seg.*."+i.String())
	}
	for _, s := range []string{Segments, Heads, Members, Attached, Extracts} {
		publish = append(publish, "$JS.API.STREAM.INFO."+s, "$JS.API.STREAM.MSG.GET."+s, "$JS.API.DIRECT.GET."+s, "$JS.API.DIRECT.GET."+s+".>",
			"$JS.API.CONSUMER.CREATE."+s, "$JS.API.CONSUMER.CREATE."+s+".>", "$JS.API.CONSUMER.MSG.NEXT."+s+".>", "$JS.API.CONSUMER.INFO."+s+".>", "$JS.API.CONSUMER.DELETE."+s+".>")
	}
	return publish, []string{"cw.>", "_INBOX.>"}
}

// Users returns the part of the configuration of a NATS server that lets the members of a practice in, and nobody else,
// for those who run a cluster of their own. It changes whenever a device joins, leaves or takes a new name.
func Users(list *member.List) (string, error) {
	var b strings.Builder
	b.WriteString("authorization {\n  users = [\n")
	for _, d := range list.Devices() {
		if !d.Member() {
			continue
		}
		name, err := PublicKey(d.Verifier)
		if err != nil {
			return "", err
		}
		publish, subscribe := May(d)
		fmt.Fprintf(&b, "    { nkey: %s, permissions: {\n      publish: { allow: [\"%s\"] }\n      subscribe: { allow: [\"%s\"] } } }\n", name, strings.Join(publish, `", "`), strings.Join(subscribe, `", "`))
	}
	b.WriteString("  ]\n}\n")
	return b.String(), nil
}

// Prepare makes the streams of messages on a cluster. seed is the NATS seed of a user who may do that there.
func Prepare(ctx context.Context, a Address, seed []byte, l Limits) error {
	kp, err := nkeys.FromSeed(seed)
	if err != nil {
		return fmt.Errorf("the seed of the cluster's user: %w", err)
	}
	defer kp.Wipe()
	pub, err := kp.PublicKey()
	if err != nil {
		return fmt.Errorf("the seed of the cluster's user: %w", err)
	}
	nc, err := nats.Connect(a.urls(), nats.Name("cordwalk"), nats.Secure(a.tls()), nats.Nkey(pub, kp.Sign))
	if err != nil {
		return fmt.Errorf("reaching the cluster at %s: %w", a.Host, err)
	}
	defer nc.Close()
	js, err := jetstream.New(nc)
	if err != nil {
		return err
	}
	return Ensure(ctx, js, l)
}
