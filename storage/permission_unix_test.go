//go:build unix

package storage_test

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
)

func init() { roles["unprivileged"] = childUnprivileged }

// childUnprivileged runs as a user who may not write in the folders given.
func childUnprivileged() {
	empty, store := os.Args[1], os.Args[2]
	for _, d := range []string{empty, store} {
		if os.WriteFile(filepath.Join(d, "try"), nil, 0o600) == nil {
			fatal(fmt.Errorf("%s can be written as user %d: the test would show nothing", d, os.Getuid()))
		}
	}
	clear := func(err error) {
		if !errors.Is(err, fs.ErrPermission) || !strings.Contains(err.Error(), "this user may not write there") {
			fatal(fmt.Errorf("not the error that was wanted: %w", err))
		}
	}
	_, err := storage.Create(filepath.Join(empty, "practice"), storagetest.Options())
	clear(err)
	_, err = storage.Open(store, storagetest.Options())
	clear(err)
	clear(storage.Rebuild(ctx, store, storagetest.Options()))
	ps, err := storage.Check(ctx, store, storagetest.Options()) // reads only
	fatal(err)
	if len(ps) > 0 {
		fatal(fmt.Errorf("check found %v", ps))
	}
	fmt.Println("done")
}

func TestNoPermission(t *testing.T) {
	master, _, _ := small(t)
	root, err := os.MkdirTemp("", "cordwalk")
	require.NoError(t, err)
	t.Cleanup(func() { _ = exec.Command("chmod", "-R", "u+w", root).Run(); os.RemoveAll(root) })
	require.NoError(t, os.Chmod(root, 0o755))
	store, empty := filepath.Join(root, "store"), filepath.Join(root, "empty")
	require.NoError(t, os.CopyFS(store, os.DirFS(master)))
	require.NoError(t, os.Mkdir(empty, 0o755))
	// Readable by all, written by nobody.
	require.NoError(t, filepath.WalkDir(root, func(p string, e fs.DirEntry, err error) error {
		if err != nil || p == root {
			return err
		}
		if e.IsDir() {
			return os.Chmod(p, 0o555)
		}
		return os.Chmod(p, 0o444)
	}))
	cmd := child("unprivileged", empty, store)
	if os.Getuid() == 0 {
		// The test binary lies where only root can reach it.
		self, err := os.ReadFile(cmd.Path)
		require.NoError(t, err)
		cmd.Path = filepath.Join(root, "storage.test")
		require.NoError(t, os.WriteFile(cmd.Path, self, 0o755))
		require.NoError(t, os.Chmod(cmd.Path, 0o755))
		cmd.Dir = root
		cmd.SysProcAttr = &syscall.SysProcAttr{Credential: &syscall.Credential{Uid: 65534, Gid: 65534}}
	}
	out, err := cmd.Output()
	require.NoError(t, err)
	require.Equal(t, "done\n", string(out))
}
