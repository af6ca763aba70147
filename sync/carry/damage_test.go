package carry_test

import (
	"bytes"
	"context"
	"math/rand/v2"
	"os"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/sync/carry"
)

// Random bits are flipped and random ends cut off in each kind of file of the folder: no device takes anything untrue
// in, what is wrong is told, and the device that left the file mends it at its next exchange.
func TestRandomDamageInTheFolder(t *testing.T) {
	n := 60
	if os.Getenv("CORDWALK_SOAK") == "1" {
		n = 10_000
	}
	seed := rand.Uint64()
	rng := rand.New(rand.NewPCG(seed, 1))
	t.Logf("seed %d, %d times for each kind", seed, n)
	stick := t.TempDir()
	ds := newDevices(t, 2)
	a, b := ds[0], ds[1]
	for range 3 { // several heads and segments
		a.record(40)
		a.sync(stick)
		b.record(7)
		b.sync(stick)
	}
	a.sync(stick)
	want := a.values()
	for _, kind := range []string{"data", "heads"} {
		told, mended := 0, 0
		for i := range n {
			names := files(t, stick, kind)
			p := inside(stick, kind, names[rng.IntN(len(names))])
			data, err := os.ReadFile(p)
			require.NoError(t, err)
			bad := bytes.Clone(data)
			at := rng.IntN(len(bad))
			if rng.IntN(3) == 0 {
				bad = bad[:at]
			} else {
				for range 1 + rng.IntN(3) {
					bad[at] ^= 1 << rng.IntN(8)
					at = rng.IntN(len(bad))
				}
			}
			require.NoError(t, os.WriteFile(p, bad, 0o600))
			late := newDevices(t, 1)[0]
			late.bag.Ring, late.members = a.bag.Ring, a.members
			o := late.options()
			o.ReceiveOnly = true
			r, err := carry.Sync(context.Background(), stick, o)
			require.NoError(t, err)
			got := late.values()
			for v := range got {
				require.True(t, want[v], "%s changed in %s", v, p)
			}
			if len(got) < len(want) {
				require.NotEmpty(t, append(r.Problems, waiting(r)...), "%d of %d values came and nothing says why", len(got), len(want))
				told++
			}
			if i%100 == 10 { // a device that lacks it says so, and whoever has it whole leaves it again
				again := newDevices(t, 1)[0]
				again.bag.Ring, again.members = a.bag.Ring, a.members
				again.members.signers[again.current] = again.bag.Device.Verifier()
				copied := t.TempDir()
				require.NoError(t, os.CopyFS(copied, os.DirFS(stick)))
				a2, b2 := a.copied(), b.copied()
				for range 2 {
					again.sync(copied)
					a2.sync(copied)
					b2.sync(copied)
				}
				again.sync(copied)
				require.NoError(t, os.RemoveAll(copied))
				if len(again.values()) != len(want) {
					t.Fatalf("%d of %d values came after damage to %s", len(again.values()), len(want), p)
				}
				mended++
			}
			require.NoError(t, os.WriteFile(p, data, 0o600))
		}
		t.Logf("%s: damaged %d times, %d times something was missing and told, mended %d times", kind, n, told, mended)
	}
}
