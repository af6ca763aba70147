package hub

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log"
	"net"
	"slices"
	"strings"
	"time"

	"github.com/hashicorp/mdns"
)

// A clinic's hub is found on the local network by DNS-SD (RFC 6763, over multicast DNS). What is announced proves
// nothing: the fingerprint is compared with the one that a person at the hub reads out, or that a device
// knows already.

const service = "_cordwalk._tcp"

// Announce makes a hub known on the local network until the returned function is called. name is shown to people.
func Announce(a Address, name string) (stop func(), err error) {
	_, port, err := net.SplitHostPort(a.Host)
	if err != nil {
		return nil, fmt.Errorf("announcing the hub: %w", err)
	}
	n, err := net.LookupPort("tcp", port)
	if err != nil {
		return nil, fmt.Errorf("announcing the hub: %w", err)
	}
	ips, err := ownAddresses()
	if err != nil {
		return nil, fmt.Errorf("announcing the hub on the local network (type its address on the devices instead): %w", err)
	}
	s, err := mdns.NewMDNSService(clean(name), service, "", "cordwalk-hub.local.", n, ips, []string{"fp=" + a.Fingerprint})
	if err != nil {
		return nil, fmt.Errorf("announcing the hub on the local network (type its address on the devices instead): %w", err)
	}
	srv, err := mdns.NewServer(&mdns.Config{Zone: s, Logger: log.New(io.Discard, "", 0)})
	if err != nil {
		return nil, fmt.Errorf("announcing the hub on the local network (type its address on the devices instead): %w", err)
	}
	return func() { _ = srv.Shutdown() }, nil
}

// ownAddresses returns the addresses under which others can reach this computer.
func ownAddresses() (ips []net.IP, err error) {
	as, err := net.InterfaceAddrs()
	if err != nil {
		return nil, err
	}
	for _, a := range as {
		if n, ok := a.(*net.IPNet); ok && !n.IP.IsLoopback() && !n.IP.IsLinkLocalUnicast() {
			ips = append(ips, n.IP)
		}
	}
	if len(ips) == 0 {
		return nil, errors.New("this computer is on no network")
	}
	return ips, nil
}

// clean keeps what a DNS label may hold without trouble.
func clean(name string) string {
	name = strings.Map(func(r rune) rune {
		if r == '.' || r < ' ' || r == 0x7f {
			return '-'
		}
		return r
	}, name)
	if name == "" {
		name = "cordwalk hub"
	}
	return name[:min(len(name), 60)]
}

// Found is a hub on the local network.
type Found struct {
	Name    string
	Address Address
}

// Find looks for hubs on the local network for a while.
func Find(ctx context.Context, wait time.Duration) ([]Found, error) {
	entries := make(chan *mdns.ServiceEntry, 16)
	p := mdns.DefaultParams(service)
	p.Entries, p.Timeout, p.DisableIPv6, p.Logger = entries, wait, true, log.New(io.Discard, "", 0)
	done := make(chan error, 1)
	go func() {
		done <- mdns.QueryContext(ctx, p)
		close(entries)
	}()
	var out []Found
	for e := range entries {
		if f, ok := parseEntry(e); ok && !slices.Contains(out, f) {
			out = append(out, f)
		}
	}
	if err := <-done; err != nil && ctx.Err() == nil {
		return out, fmt.Errorf("looking for a hub on the local network (type its address instead): %w", err)
	}
	return out, ctx.Err()
}

// parseEntry reads what somebody on the network announces; anybody can.
func parseEntry(e *mdns.ServiceEntry) (Found, bool) {
	name, ok := strings.CutSuffix(e.Name, "."+service+".local.")
	if !ok || e.Port <= 0 || e.Port > 65535 {
		return Found{}, false
	}
	host := ""
	switch {
	case e.AddrV4 != nil:
		host = e.AddrV4.String()
	case e.AddrV6IPAddr != nil:
		host = e.AddrV6IPAddr.String()
	default:
		return Found{}, false
	}
	text := net.JoinHostPort(host, fmt.Sprint(e.Port))
	for _, f := range e.InfoFields {
		if print, ok := strings.CutPrefix(f, "fp="); ok {
			text += "#" + print
		}
	}
	a, err := ParseAddress(text)
	if err != nil || strings.Contains(a.Host, ",") { // one hub announces itself only
		return Found{}, false
	}
	name = strings.ReplaceAll(name, `\`, "")
	return Found{name[:min(len(name), 63)], a}, true
}
