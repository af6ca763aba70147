package disk_test

import (
	"encoding/json"
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/storage/disk/disktest"
)

// Every file system keeps the same promises, as far as they can be seen without a power cut.
func suite(t *testing.T, fsys disk.FS) {
	dir := t.TempDir()
	name := filepath.Join(dir, "a")
	t.Run("files", func(t *testing.T) {
		_, err := fsys.Open(name)
		require.ErrorIs(t, err, fs.ErrNotExist)
		_, err = fsys.Edit(name)
		require.ErrorIs(t, err, fs.ErrNotExist)
		f, err := fsys.Create(name)
		require.NoError(t, err)
		require.Equal(t, name, f.Name())
		_, err = fsys.Create(name)
		require.ErrorIs(t, err, fs.ErrExist)
		_, err = f.WriteAt([]byte("abc"), 2)
		require.NoError(t, err)
		require.NoError(t, f.Preallocate(1<<20))
		require.NoError(t, f.Preallocate(10), "never shrinks")
		n, err := f.Size()
		require.NoError(t, err)
		require.EqualValues(t, 1<<20, n)
		require.NoError(t, f.SyncData())
		require.NoError(t, f.Sync())
		require.NoError(t, f.Close())
		b, err := disk.ReadFile(fsys, name, 1<<20)
		require.NoError(t, err)
		require.Equal(t, "\x00\x00abc\x00", string(b[:6]))
		require.Empty(t, strings.Trim(string(b[5:]), "\x00"))
		_, err = disk.ReadFile(fsys, name, 100)
		require.ErrorContains(t, err, "more than the 100 expected")
		fi, err := os.Stat(name)
		require.NoError(t, err)
		require.Zero(t, fi.Mode().Perm()&0o077, "nobody else may read it")
	})
	t.Run("replace", func(t *testing.T) {
		for _, s := range []string{"one", "two"} {
			require.NoError(t, os.WriteFile(disk.Temporary(name), []byte("left by a crash"), 0o600))
			require.NoError(t, disk.Replace(fsys, name, []byte(s)))
			b, err := disk.ReadFile(fsys, name, 10)
			require.NoError(t, err)
			require.Equal(t, s, string(b))
			_, err = fsys.Stat(disk.Temporary(name))
			require.ErrorIs(t, err, fs.ErrNotExist)
		}
	})
	t.Run("recover", func(t *testing.T) {
		whole := func(b []byte) bool { return string(b) == "whole" }
		require.NoError(t, os.WriteFile(disk.Temporary(name), []byte("whole"), 0o600))
		require.NoError(t, disk.Recover(fsys, name, whole))
		b, _ := disk.ReadFile(fsys, name, 10)
		require.Equal(t, "two", string(b), "a file that is there is left alone")
		require.NoError(t, fsys.Remove(name))
		require.NoError(t, disk.Recover(fsys, name, func([]byte) bool { return false }))
		_, err := fsys.Stat(name)
		require.ErrorIs(t, err, fs.ErrNotExist, "half a file takes no name")
		require.NoError(t, disk.Recover(fsys, name, whole))
		b, _ = disk.ReadFile(fsys, name, 10)
		require.Equal(t, "whole", string(b))
	})
	t.Run("folders", func(t *testing.T) {
		sub := filepath.Join(dir, "sub")
		require.NoError(t, fsys.MakeDir(sub))
		require.NoError(t, fsys.MakeDir(sub))
		require.Error(t, fsys.MakeDir(name), "a file of that name is in the way")
		require.NoError(t, fsys.SyncDir(dir))
		es, err := fsys.List(dir)
		require.NoError(t, err)
		require.Equal(t, []string{"a", "sub"}, []string{es[0].Name, es[1].Name})
		require.True(t, es[1].Dir)
	})
}

func TestOS(t *testing.T) { suite(t, disk.OS()) }

func TestDouble(t *testing.T) { suite(t, disktest.New()) }

func TestLock(t *testing.T) {
	fsys := disk.OS()
	name := filepath.Join(t.TempDir(), "lock")
	_, held, err := fsys.LockedBy(name)
	require.NoError(t, err)
	require.False(t, held)
	me := disk.Self("test", time.Now())
	l, err := fsys.Lock(name, me)
	require.NoError(t, err)
	require.False(t, l.Left())
	var no *disk.Held
	_, err = fsys.Lock(name, me)
	require.ErrorAs(t, err, &no)
	require.Equal(t, me, no.By)
	require.ErrorContains(t, err, "open in test")
	by, held, err := fsys.LockedBy(name)
	require.NoError(t, err)
	require.True(t, held)
	require.Equal(t, me.PID, by.PID)
	require.NoError(t, l.Unlock())
	l, err = fsys.Lock(name, me)
	require.NoError(t, err)
	require.False(t, l.Left(), "the one before ended well")
	require.NoError(t, l.Keep())
	l, err = fsys.Lock(name, me)
	require.NoError(t, err)
	require.True(t, l.Left(), "the one before did not")
	require.NoError(t, l.Unlock())

	write := func(h disk.Holder) {
		b, err := json.Marshal(h)
		require.NoError(t, err)
		require.NoError(t, os.WriteFile(name, b, 0o600))
	}
	dead := me
	dead.PID = 1 << 30 // no system gives such a number
	write(dead)
	l, err = fsys.Lock(name, me)
	require.NoError(t, err, "the lock of a dead process on this computer is free")
	require.True(t, l.Left())
	require.NoError(t, l.Unlock())
	other := me
	other.Host = "another-computer"
	write(other)
	_, err = fsys.Lock(name, me)
	require.ErrorAs(t, err, &no, "a process on another computer may be alive")
	require.ErrorContains(t, err, "another-computer")
	require.ErrorContains(t, err, "delete the file")
	require.NoError(t, os.WriteFile(name, []byte("{\"host\":"), 0o600))
	l, err = fsys.Lock(name, me)
	require.NoError(t, err, "a torn lock is nobody's")
	require.NoError(t, l.Unlock())
}

func TestGoodName(t *testing.T) {
	for name, want := range map[string]bool{"a-b_c.1": true, strings.Repeat("a", 80): true, strings.Repeat("a", 81): false, "": false, ".": false, "..": false, "A": false, "a/b": false, "ä": false, "a b": false} {
		require.Equal(t, want, disk.GoodName(name), name)
	}
}

func TestDoubleIsExFAT(t *testing.T) {
	d := disktest.New()
	d.ExFAT()
	dir := t.TempDir()
	f, err := d.Create(filepath.Join(dir, "name"))
	require.NoError(t, err)
	_, err = d.Create(filepath.Join(dir, "NAME"))
	require.ErrorIs(t, err, fs.ErrExist)
	require.Error(t, f.Preallocate(4<<30))
	_, err = f.WriteAt([]byte{1}, 4<<30-1)
	require.Error(t, err)
	require.NoError(t, f.Close())
}

func TestDoubleFails(t *testing.T) {
	d := disktest.New()
	name := filepath.Join(t.TempDir(), "x")
	d.FailAt(2, disktest.ErrBroken, false)
	f, err := d.Create(name)
	require.NoError(t, err)
	n, err := f.WriteAt([]byte("abcdef"), 0)
	require.ErrorIs(t, err, disktest.ErrBroken)
	require.Equal(t, 3, n, "half of it was written")
	_, err = f.WriteAt([]byte("abcdef"), 0)
	require.NoError(t, err, "it failed once")
	d.FailAt(1, disktest.ErrBroken, true)
	require.Error(t, f.SyncData())
	require.Error(t, f.SyncData())
	d.FailAt(0, nil, false)
	d.Room(4)
	n, err = f.WriteAt([]byte("abcdef"), 6)
	require.ErrorIs(t, err, disktest.ErrFull)
	require.Equal(t, 4, n)
	require.NoError(t, f.Close())
}

// The double knows what a power cut may take: of unsynced bytes any sectors, of unsynced names the last ones.
func TestDoubleForgets(t *testing.T) {
	d := disktest.New()
	root := t.TempDir()
	require.NoError(t, d.Record(root))
	name := filepath.Join(root, "f")
	f, err := d.Create(name)
	require.NoError(t, err)
	_, err = f.WriteAt([]byte(strings.Repeat("a", 1024)), 0)
	require.NoError(t, err)
	require.NoError(t, f.SyncData())
	_, err = f.WriteAt([]byte(strings.Repeat("b", 1024)), 0)
	require.NoError(t, err)
	seen := map[string]bool{}
	look := func() {
		t.Helper()
		require.NoError(t, d.Crashes(d.Events(), 100, nil, func(c disktest.Crash) error {
			dir := filepath.Join(t.TempDir(), "x")
			if err := c.Write(dir); err != nil {
				return err
			}
			b, err := os.ReadFile(filepath.Join(dir, "f"))
			if errors.Is(err, fs.ErrNotExist) {
				seen["no file"] = true
				return nil
			}
			seen[string(b[0])+string(b[600])] = true
			return err
		}))
	}
	look()
	require.Equal(t, map[string]bool{"no file": true, "aa": true, "ab": true, "ba": true, "bb": true}, seen)
	require.NoError(t, d.SyncDir(root))
	require.NoError(t, f.SyncData())
	clear(seen)
	look()
	require.Equal(t, map[string]bool{"bb": true}, seen)
	// After a sync that failed, a later one covers nothing of what was written before it.
	_, err = f.WriteAt([]byte(strings.Repeat("c", 512)), 0)
	require.NoError(t, err)
	d.FailAt(1, disktest.ErrBroken, false)
	require.Error(t, f.SyncData())
	require.NoError(t, f.SyncData())
	clear(seen)
	look()
	require.Equal(t, map[string]bool{"bb": true, "cb": true}, seen)
	require.NoError(t, f.Close())
}
