package share_test

import (
	"os"
	"path/filepath"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/sync/share"
	"cordwalk.example/cordwalk/sync/share/sharetest"
)

// What is known of the other devices: when they were met, what they lack, that one was copied, that one was removed.
func TestOverview(t *testing.T) {
	stick := t.TempDir()
	a := sharetest.Found(t)
	b := sharetest.Join(t, a, "b")
	see := func() map[string]share.Seen {
		list, err := a.Overview(ctx)
		require.NoError(t, err)
		out := map[string]share.Seen{}
		for _, x := range list {
			if x.This {
				out["this"] = x
			} else {
				out[x.Name] = x
			}
		}
		return out
	}
	require.True(t, see()["b"].Met.At.IsZero())
	sharetest.Add(t, b, "Bramble")
	sync(t, stick, b)
	sharetest.Add(t, a, "Juniper")
	sync(t, stick, a)
	x := see()["b"]
	require.WithinDuration(t, time.Now(), x.Met.At, time.Minute)
	require.WithinDuration(t, time.Now(), x.Met.Left, time.Minute)
	require.Positive(t, x.Met.Lacks)
	require.False(t, x.Met.Ahead || x.Met.Differs)
	require.Zero(t, x.Forked)
	sync(t, stick, b, a)
	require.Zero(t, see()["b"].Met.Lacks)
	before, err := os.Stat(filepath.Join(a.Dir(), "members", "met.json"))
	require.NoError(t, err)
	sync(t, stick, a)
	after, err := os.Stat(filepath.Join(a.Dir(), "members", "met.json"))
	require.NoError(t, err)
	require.Equal(t, before.ModTime(), after.ModTime(), "an idle exchange writes nothing")

	y := twin(t, b)
	sharetest.Add(t, b, "One")
	sharetest.Add(t, y, "Other")
	sync(t, stick, b, a, y, a)
	require.Equal(t, 1, see()["b"].Forked)
	require.NoError(t, a.Remove(ctx, who, b.Bag().Device.Verifier(), "sold"))
	require.Len(t, see()["b"].Removals, 1)
	require.Empty(t, see()["this"].Missing)
}
