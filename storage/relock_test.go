package storage_test

import (
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/key"
)

func TestRelock(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "practice")
	s, err := storage.Create(dir, storage.Options{Unlock: storage.Unlock{Passphrase: []byte("old")}})
	require.NoError(t, err)
	ring := key.NewSecret()
	require.NoError(t, s.Relock(key.Passphrase([]byte("new")), key.Keyring(ring)))
	require.True(t, s.Protected())
	in, err := storage.Peek(dir, storage.Options{})
	require.NoError(t, err)
	require.True(t, in.Protected && in.Passphrase && in.Keyring)
	require.Equal(t, s.Bag().Practice, in.Practice)
	require.NoError(t, storage.Fits(dir, storage.Options{Unlock: storage.Unlock{Passphrase: []byte("new")}}), "also while it is open")
	require.ErrorIs(t, storage.Fits(dir, storage.Options{Unlock: storage.Unlock{Passphrase: []byte("old")}}), storage.ErrLocked)
	require.NoError(t, s.Close())
	other := key.NewSecret()
	for name, u := range map[string]storage.Unlock{"the old passphrase": {Passphrase: []byte("old")}, "nothing": {}, "another keyring": {Keyring: &other}} {
		_, err := storage.Open(dir, storage.Options{Unlock: u})
		require.ErrorIs(t, err, storage.ErrLocked, name)
	}
	for _, u := range []storage.Unlock{{Passphrase: []byte("new")}, {Keyring: &ring}} {
		s, err := storage.Open(dir, storage.Options{Unlock: u})
		require.NoError(t, err)
		require.NoError(t, s.Close())
	}
}
