package share_test

import (
	"context"
	"errors"
	"math/rand/v2"
	"os"
	"path/filepath"
	"syscall"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/storage/disk/disktest"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/carry"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/member"
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

// The same while a device is let in, and while it joins: afterwards it is in or it is not, a joining that failed leaves
// nothing that stands in the way, and the next try succeeds.
func TestEveryOperationOfJoiningFails(t *testing.T) {
	ctx := context.Background()
	s, dir := storagetest.OpenDir(t)
	sh, _, err := share.Open(ctx, s, share.Options{})
	require.NoError(t, err)
	sharetest.Add(t, sh, "Bramble")
	stick := t.TempDir()
	_, err = sh.Folder(ctx, stick, nil)
	require.NoError(t, err)
	code, err := sh.Invite(ctx, "R. Okafor", stick, time.Hour)
	require.NoError(t, err)
	letters, err := carry.Letters(disk.OS(), stick, ".invite")
	require.NoError(t, err)
	own, err := key.NewDevice()
	require.NoError(t, err)
	inc := change.NewIncarnation()
	j, err := member.Ask(letters[0].Data, code, own, "b", inc)
	require.NoError(t, err)
	require.NoError(t, carry.LeaveLetter(disk.OS(), stick, carry.Letter{Practice: j.Practice(), Name: j.FileName(), Data: j.File()}))
	asked, _, err := sh.Requests(ctx, stick)
	require.NoError(t, err)
	require.Len(t, asked, 1)
	require.NoError(t, sh.Close())
	first, by := step(t)
	var answered string
	for _, forever := range []bool{false, true} {
		for n := first; ; n += by {
			root := t.TempDir()
			at, folder := filepath.Join(root, "practice"), filepath.Join(root, "stick")
			require.NoError(t, os.CopyFS(at, os.DirFS(dir)))
			require.NoError(t, os.CopyFS(folder, os.DirFS(stick)))
			d := disktest.New()
			a := openIn(t, at, d)
			d.FailAt(n, syscall.EIO, forever)
			err := a.Admit(ctx, "R. Okafor", folder, asked[0])
			failed := d.Failures() > 0
			d.FailAt(0, nil, false)
			_ = a.Close()
			again := openIn(t, at, disktest.New())
			v, in := again.List.Device(own.Verifier())
			if err == nil {
				require.True(t, in && v.Member(), "operation %d", n)
			}
			if !in {
				require.NoError(t, again.Admit(ctx, "R. Okafor", folder, asked[0]), "operation %d", n)
			}
			_, err = again.Folder(ctx, folder, nil)
			require.NoError(t, err)
			require.NoError(t, again.Close())
			if !failed {
				answered = folder
				break
			}
		}
	}
	for _, forever := range []bool{false, true} {
		for n := first; ; n += 3 * by {
			root := t.TempDir()
			at := filepath.Join(root, "joined")
			d := disktest.New()
			so := storagetest.Options()
			so.Files = d
			d.FailAt(n, syscall.EIO, forever)
			b, err := share.Join(ctx, at, answered, j, inc, so, share.Options{FS: d})
			failed := d.Failures() > 0
			d.FailAt(0, nil, false)
			if err != nil {
				// An answer that cannot be read is like one that has not come: the program looks again.
				require.True(t, errors.Is(err, syscall.EIO) || errors.Is(err, change.ErrNoKey), "operation %d: %v", n, err)
				require.NoError(t, os.RemoveAll(at))
				b, err = share.Join(ctx, at, answered, j, inc, storagetest.Options(), share.Options{})
				require.NoError(t, err, "operation %d", n)
			}
			if !failed {
				require.Equal(t, map[string]int{"Bramble": 1}, sharetest.Names(t, b))
			}
			require.NoError(t, b.Close())
			storagetest.Check(t, at)
			if !failed {
				break
			}
		}
	}
}
