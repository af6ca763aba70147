package hub

import (
	"context"
	"net"
	"strings"
	"testing"
	"time"

	"github.com/hashicorp/mdns"
	"github.com/stretchr/testify/require"
)

func TestParseEntry(t *testing.T) {
	t.Parallel()
	print := strings.Repeat("ab", 32)
	good := mdns.ServiceEntry{Name: "front\\ desk._cordwalk._tcp.local.", Port: 4222, AddrV4: net.IPv4(10, 0, 0, 7), InfoFields: []string{"fp=" + print, "x"}}
	f, ok := parseEntry(&good)
	require.True(t, ok)
	require.Equal(t, Found{"front desk", Address{"10.0.0.7:4222", print}}, f)
	for name, spoil := range map[string]func(*mdns.ServiceEntry){
		"another service":       func(e *mdns.ServiceEntry) { e.Name = "x._http._tcp.local." },
		"no port":               func(e *mdns.ServiceEntry) { e.Port = 0 },
		"port too high":         func(e *mdns.ServiceEntry) { e.Port = 70000 },
		"no address":            func(e *mdns.ServiceEntry) { e.AddrV4 = nil },
		"another hub behind it": func(e *mdns.ServiceEntry) { e.InfoFields = []string{"fp=" + print + ",10.0.0.8#" + print} },
		"bad fingerprint":       func(e *mdns.ServiceEntry) { e.InfoFields = []string{"fp=zz"} },
	} {
		e := good
		spoil(&e)
		_, ok := parseEntry(&e)
		require.False(t, ok, name)
	}
}

// Where the machine has a network with multicast the hub is found by name; elsewhere announcing or finding says so
// in one sentence and a typed address serves.
func TestAnnounceAndFind(t *testing.T) {
	t.Parallel()
	a := Address{"127.0.0.1:4222", strings.Repeat("0a", 32)}
	stop, err := Announce(a, "clinic.hub")
	if err != nil {
		require.ErrorContains(t, err, "type its address")
		return
	}
	defer stop()
	found, err := Find(context.Background(), time.Second)
	if err != nil {
		require.ErrorContains(t, err, "type its address")
		return
	}
	for _, f := range found {
		if f.Address.Fingerprint == a.Fingerprint {
			require.Equal(t, "clinic-hub", f.Name)
			return
		}
	}
	t.Log("no multicast here: the announcement did not come back")
}
