package attach_test

import (
	"context"
	"io"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/attach"
)

// The key with which the store sealed an owner's contact data is among the files that are exchanged, and
// goes with the owner's erasure.
func TestContactKeysAreExchanged(t *testing.T) {
	ctx := context.Background()
	s := storagetest.Open(t)
	p := exam.Patient{ID: storage.NewID(), Name: "Bramble", Species: exam.Dog, Owner: exam.Contact{Name: "Ada Fennel"}}
	_, err := s.Apply(ctx, "A", storage.PatientEdits(exam.Patient{}, p)...)
	require.NoError(t, err)
	f, err := attach.Open(ctx, s, nil)
	require.NoError(t, err)
	refs, err := f.List(ctx)
	require.NoError(t, err)
	require.Len(t, refs, 1)
	// A key that comes from another device opens contact data in the store.
	in, err := f.Open(ctx, refs[0].Name)
	require.NoError(t, err)
	b, err := io.ReadAll(in)
	require.NoError(t, err)
	require.NoError(t, in.Close())
	require.NotEmpty(t, b)
	again, err := attach.Open(ctx, s, nil)
	require.NoError(t, err)
	refs2, err := again.List(ctx)
	require.NoError(t, err)
	require.Equal(t, refs, refs2, "nothing is made twice")
	require.NoError(t, f.Erase(ctx, "A", p.ID, "asked"))
	refs, err = f.List(ctx)
	require.NoError(t, err)
	require.Empty(t, refs)
}
