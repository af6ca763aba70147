package share_test

import (
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/share"
)

func TestACopiedStoreIsFoundAtOpening(t *testing.T) {
	config := filepath.Join(t.TempDir(), "config", "cordwalk")
	_, dir := func() (*storage.Store, string) {
		s, dir := storagetest.OpenDir(t)
		require.NoError(t, s.Close())
		return s, dir
	}()
	open := func(dir, config string) (renewed bool) {
		s, err := storage.Open(dir, storagetest.Options())
		require.NoError(t, err)
		renewed, err = share.CheckToken(ctx, s, nil, config)
		require.NoError(t, err)
		sh, _, err := share.Open(ctx, s, share.Options{})
		require.NoError(t, err)
		add(t, sh, "Bramble")
		require.NoError(t, s.Close())
		return renewed
	}
	require.False(t, open(dir, config), "new")
	require.False(t, open(dir, config), "opened again")

	earlier := filepath.Join(t.TempDir(), "earlier")
	require.NoError(t, os.CopyFS(earlier, os.DirFS(dir)))
	require.False(t, open(dir, config), "the original goes on")
	require.True(t, open(earlier, config), "a copy on the same computer")
	require.True(t, open(dir, config), "the original once more: nobody can tell which of the two is the copy")
	require.False(t, open(dir, config))

	elsewhere := filepath.Join(t.TempDir(), "elsewhere")
	require.NoError(t, os.CopyFS(elsewhere, os.DirFS(dir)))
	require.True(t, open(elsewhere, filepath.Join(t.TempDir(), "other")), "a copy on another computer")

	// Put back to an earlier day.
	image := filepath.Join(t.TempDir(), "image")
	require.NoError(t, os.CopyFS(image, os.DirFS(dir)))
	require.False(t, open(dir, config))
	require.NoError(t, os.RemoveAll(dir))
	require.NoError(t, os.CopyFS(dir, os.DirFS(image)))
	require.True(t, open(dir, config))
}
