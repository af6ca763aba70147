package share_test

import (
	"maps"
	"os"
	"path/filepath"
	"slices"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/share"
	"cordwalk.example/cordwalk/sync/share/sharetest"
)

// twin opens a copy of a device's store, as somebody makes one behind the program's back.
func twin(t *testing.T, of *share.Share) *share.Share {
	dir := filepath.Join(t.TempDir(), "twin")
	require.NoError(t, os.CopyFS(dir, os.DirFS(of.Dir())))
	require.NoError(t, os.Remove(filepath.Join(dir, "index.db"))) // it was open
	s, err := storage.Open(dir, storagetest.Options())
	require.NoError(t, err)
	sh, _, err := share.Open(ctx, s, share.Options{})
	require.NoError(t, err)
	t.Cleanup(func() {
		require.NoError(t, sh.Close())
		storagetest.Check(t, dir)
	})
	return sh
}

func shown(t *testing.T, sh *share.Share) []string {
	return slices.Sorted(maps.Keys(sharetest.Names(t, sh)))
}

// apart returns how many changes of a device are in quarantine.
func apart(t *testing.T, sh *share.Share) int {
	q, err := sh.Quarantined(ctx)
	require.NoError(t, err)
	return len(q)
}

// A device whose store was copied is removed. The others met its two branches in different order, and so keep them under
// different names; yet every device keeps the same entries.
func TestRemovalOfAForkedDevice(t *testing.T) {
	for _, tt := range []struct {
		name string
		both bool // the removing device held both branches
	}{{"both branches are named", true}, {"one branch is named", false}} {
		t.Run(tt.name, func(t *testing.T) {
			meet := func(shs ...*share.Share) { sync(t, t.TempDir(), shs...) }
			a := sharetest.Found(t)
			x := sharetest.Join(t, a, "copied")
			c, d := sharetest.Join(t, a, "c"), sharetest.Join(t, a, "d")
			sharetest.Add(t, x, "Before")
			meet(x, a, c, d)
			y := twin(t, x)
			sharetest.Add(t, x, "X one")
			sharetest.Add(t, y, "Y one")
			sharetest.Add(t, y, "Y two")
			meet(x, c) // c knows x's branch by the stream's own name, d the other one
			meet(y, d)
			if tt.both {
				meet(y, c)
				meet(x, d)
			}
			sharetest.Add(t, x, "X late")
			sharetest.Add(t, y, "Y late")
			require.NoError(t, c.Remove(ctx, who, x.Bag().Device.Verifier(), "stolen and copied"))
			want := []string{"Before", "X one", "Y one", "Y two"}
			if !tt.both {
				want = []string{"Before", "X one"}
			}
			stick := t.TempDir()
			sync(t, stick, c, a, d, c, a, d)
			for _, sh := range []*share.Share{a, c, d} {
				require.Equal(t, want, shown(t, sh))
			}
			// What the two write later, or what comes later of what they wrote, is kept apart everywhere.
			meet(x, a, c)
			meet(y, d)
			sync(t, stick, a, c, d, a, c, d)
			n := apart(t, a)
			require.Positive(t, n)
			for _, sh := range []*share.Share{a, c, d} {
				require.Equal(t, want, shown(t, sh))
				require.Equal(t, n, apart(t, sh))
				require.NoError(t, sh.Measure(ctx))
			}
			one, err := a.Sums(ctx)
			require.NoError(t, err)
			for _, sh := range []*share.Share{c, d} {
				sums, err := sh.Sums(ctx)
				require.NoError(t, err)
				require.Equal(t, one, sums, "the states are the same byte for byte")
			}
			// A person takes one of them in.
			q, err := d.Quarantined(ctx)
			require.NoError(t, err)
			for _, late := range q {
				_, err := d.Apply(ctx, who, storage.Admit(late, "the twin is ours"))
				require.NoError(t, err)
			}
			sync(t, stick, d, a, c)
			for _, sh := range []*share.Share{a, c, d} {
				require.Equal(t, []string{"Before", "X late", "X one", "Y late", "Y one", "Y two"}, shown(t, sh))
			}
		})
	}
}
