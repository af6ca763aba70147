package share_test

import (
	"context"
	"math/rand/v2"
	"os"
	"path/filepath"
	"syscall"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk/disktest"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/share"
	"cordwalk.example/cordwalk/sync/share/sharetest"
)

// step returns which operations are made to fail: each in full, in short runs every fifth from any of the first five.
func step(t *testing.T) (first, by int) {
	if os.Getenv("CORDWALK_SOAK") == "1" {
		return 1, 1
	}
	first, by = 1+rand.IntN(5), 5
	t.Logf("operations %d, %d, …", first, first+by)
	return first, by
}

// openIn opens the store and the list of devices in a folder.
func openIn(t *testing.T, dir string, d *disktest.Disk) *share.Share {
	t.Helper()
	so := storagetest.Options()
	so.Files = d
	s, err := storage.Open(dir, so)
	require.NoError(t, err)
	sh, _, err := share.Open(context.Background(), s, share.Options{FS: d})
	require.NoError(t, err)
	return sh
}

// The n-th file operation fails while the list of devices is made, for every n, once and for good: afterwards there is
// a list with this device in it, the same at each opening.
func TestEveryOperationOfFoundingFails(t *testing.T) {
	s, dir := storagetest.OpenDir(t)
	require.NoError(t, s.Close())
	first, by := step(t)
	for _, forever := range []bool{false, true} {
		for n := first; ; n += by {
			at := filepath.Join(t.TempDir(), "practice")
			require.NoError(t, os.CopyFS(at, os.DirFS(dir)))
			d := disktest.New()
			so := storagetest.Options()
			so.Files = d
			s, err := storage.Open(at, so)
			require.NoError(t, err)
			d.FailAt(n, syscall.EIO, forever)
			_, recovery, err := share.Open(context.Background(), s, share.Options{FS: d})
			failed := d.Failures() > 0
			if err == nil {
				require.NotNil(t, recovery, "operation %d", n)
			} else {
				require.ErrorIs(t, err, syscall.EIO, "operation %d", n)
				if _, serr := os.Stat(filepath.Join(at, "members", "root")); serr == nil {
					require.NotNil(t, recovery, "operation %d: the recovery sheet of what was founded is not lost", n)
				}
			}
			d.FailAt(0, nil, false)
			require.NoError(t, s.Close())
			one := openIn(t, at, disktest.New())
			root := one.List.Root()
			require.True(t, one.Member(), "operation %d", n)
			require.Len(t, one.List.Devices(), 1)
			require.NoError(t, one.Close())
			two := openIn(t, at, disktest.New())
			require.True(t, two.Member(), "operation %d", n)
			require.Equal(t, root, two.List.Root())
			require.NoError(t, two.Close())
			storagetest.Check(t, at)
			if !failed {
				break
			}
		}
	}
}

// The same while a device is removed: it is removed or it is not, never half, and it can be removed again.
func TestEveryOperationOfARemovalFails(t *testing.T) {
	s, dir := storagetest.OpenDir(t)
	sh, _, err := share.Open(context.Background(), s, share.Options{})
	require.NoError(t, err)
	b := sharetest.Join(t, sh, "b")
	out := b.Bag().Device.Verifier()
	require.NoError(t, sh.Close())
	first, by := step(t)
	for _, forever := range []bool{false, true} {
		for n := first; ; n += by {
			at := filepath.Join(t.TempDir(), "practice")
			require.NoError(t, os.CopyFS(at, os.DirFS(dir)))
			d := disktest.New()
			a := openIn(t, at, d)
			d.FailAt(n, syscall.EIO, forever)
			err := a.Remove(context.Background(), "R. Okafor", out, "lost")
			failed := d.Failures() > 0
			d.FailAt(0, nil, false)
			_ = a.Close()
			again := openIn(t, at, disktest.New())
			dev, ok := again.List.Device(out)
			require.True(t, ok)
			if err == nil {
				require.False(t, dev.Member(), "operation %d", n)
			}
			if dev.Member() {
				require.NoError(t, again.Remove(context.Background(), "R. Okafor", out, "lost"), "operation %d", n)
				dev, _ = again.List.Device(out)
			}
			require.False(t, dev.Member(), "operation %d", n)
			require.Greater(t, len(again.Bag().Ring.Epochs()), 1, "operation %d: a new key is in use", n)
			require.NoError(t, again.Close())
			if !failed {
				require.NoError(t, err)
				break
			}
		}
	}
}
