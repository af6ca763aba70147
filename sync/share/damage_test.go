package share_test

import (
	"bytes"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/share"
	"cordwalk.example/cordwalk/sync/share/sharetest"
)

// Random bits are flipped and random ends cut off in the files of the list of devices and in the signed heads: check
// names the file, no member's entries disappear, none of a removed device's come back, and an exchange
// brings the list back whole.
func TestDamagedListOfDevices(t *testing.T) {
	seed := rand.Uint64()
	rng := rand.New(rand.NewPCG(seed, 1))
	t.Logf("seed %d", seed)
	stick := t.TempDir()
	a := sharetest.Found(t)
	b := sharetest.Join(t, a, "b")
	out := sharetest.Join(t, a, "out")
	sharetest.Add(t, a, "Ours")
	sharetest.Add(t, b, "Theirs")
	sharetest.Add(t, out, "Before")
	sync(t, stick, b, out, a)
	require.NoError(t, a.Remove(ctx, who, out.Bag().Device.Verifier(), "sold"))
	sharetest.Add(t, out, "Late")
	sync(t, stick, out, a, b)
	want := []string{"Before", "Ours", "Theirs"}
	require.Equal(t, want, shown(t, a))

	master := filepath.Join(t.TempDir(), "master")
	require.NoError(t, os.CopyFS(master, os.DirFS(a.Dir())))
	require.NoError(t, os.Remove(filepath.Join(master, "index.db"))) // it was open
	kinds := map[string][]string{}
	for kind, pattern := range map[string]string{"statements": "members/*.member", "root": "members/root", "signed heads": "journal/*.heads"} {
		names, err := filepath.Glob(filepath.Join(master, filepath.FromSlash(pattern)))
		require.NoError(t, err)
		require.NotEmpty(t, names, kind)
		kinds[kind] = names
	}
	for kind, names := range kinds {
		for range max(3, soakTimes(10_000)/50) { // each opens a store, which takes as long as fifty flips elsewhere
			dir := filepath.Join(t.TempDir(), "x")
			require.NoError(t, os.CopyFS(dir, os.DirFS(master)))
			name := names[rng.IntN(len(names))]
			rel, err := filepath.Rel(master, name)
			require.NoError(t, err)
			data, err := os.ReadFile(name)
			require.NoError(t, err)
			bad, what := harm(rng, data)
			require.NoError(t, os.WriteFile(filepath.Join(dir, rel), bad, 0o600))
			ps, err := storage.Check(ctx, dir, storagetest.Options(), share.Check)
			require.NoError(t, err)
			named := slices.ContainsFunc(ps, func(p storage.Problem) bool { return p.File == filepath.ToSlash(rel) })
			// A root that reads as another one is found by opening; a head that is lost comes again.
			require.True(t, named || kind != "statements", "%s of %s: %v", what, rel, ps)
			s, err := storage.Open(dir, storagetest.Options())
			require.NoError(t, err)
			sh, recovery, err := share.Open(ctx, s, share.Options{})
			require.NoError(t, err, "%s of %s", what, rel)
			require.Nil(t, recovery, "nothing is founded a second time")
			require.Equal(t, want, shown(t, sh), "%s of %s", what, rel)
			sync(t, stick, sh)
			require.Empty(t, sh.Damaged(), "%s of %s", what, rel)
			require.Equal(t, want, shown(t, sh), "%s of %s", what, rel)
			require.Len(t, sh.List.Devices(), 3)
			require.NoError(t, sh.Close())
			require.NoError(t, os.RemoveAll(dir))
		}
	}
}

// harm flips a bit or cuts the end off.
func harm(rng *rand.Rand, data []byte) (bad []byte, what string) {
	bad = bytes.Clone(data)
	at := rng.IntN(len(bad))
	if rng.IntN(3) == 0 {
		return bad[:at], "the end cut off"
	}
	bad[at] ^= 1 << rng.IntN(8)
	return bad, "a flipped bit"
}

// The same for statements alone, without a store around them: in each case the file is told to be bad.
func TestEveryDamagedStatementIsTold(t *testing.T) {
	rng := rand.New(rand.NewPCG(rand.Uint64(), 1))
	a := sharetest.Found(t)
	sharetest.Join(t, a, "b")
	dir := filepath.Join(t.TempDir(), "x")
	require.NoError(t, os.MkdirAll(filepath.Join(dir, "members"), 0o700))
	names, err := filepath.Glob(filepath.Join(a.Dir(), "members", "*.member"))
	require.NoError(t, err)
	n := soakTimes(10_000)
	for range n {
		name := names[rng.IntN(len(names))]
		data, err := os.ReadFile(name)
		require.NoError(t, err)
		bad, what := harm(rng, data)
		at := filepath.Join(dir, "members", filepath.Base(name))
		require.NoError(t, os.WriteFile(at, bad, 0o600))
		ps, err := share.Check(ctx, disk.OS(), dir, a.Bag().Ring)
		require.NoError(t, err)
		require.Len(t, ps, 1, what)
		require.True(t, strings.HasPrefix(ps[0].File, "members/"))
		require.NoError(t, os.Remove(at))
	}
	t.Logf("%d times", n)
}

// soakTimes returns n in a soak run, and a twentieth of it otherwise.
func soakTimes(n int) int {
	if os.Getenv("CORDWALK_SOAK") == "1" {
		return n
	}
	return n / 20
}
