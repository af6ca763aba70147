package attach_test

import (
	"bytes"
	"context"
	"errors"
	"io"
	"math/rand/v2"
	"os"
	"path/filepath"
	"syscall"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/storage/disk/disktest"
	"cordwalk.example/cordwalk/sync/attach"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/share"
	"cordwalk.example/cordwalk/sync/share/sharetest"
)

var ctx = context.Background()

func open(t testing.TB, sh *share.Share) *attach.Files {
	f, err := attach.Open(ctx, sh.Store, nil)
	require.NoError(t, err)
	sh.Files = f
	return f
}

func content(n int) []byte {
	b := make([]byte, n)
	rng := rand.New(rand.NewPCG(uint64(n), 1))
	for i := range b {
		b[i] = byte(rng.Uint32())
	}
	return b
}

func read(f *attach.Files, owner exam.ID, name string) ([]byte, error) {
	r, err := f.Read(owner, name)
	if err != nil {
		return nil, err
	}
	defer r.Close()
	return io.ReadAll(r)
}

func TestFilesTravelAndAreErased(t *testing.T) {
	stick := t.TempDir()
	a := sharetest.Found(t)
	b := sharetest.Join(t, a, "b")
	fa, fb := open(t, a), open(t, b)
	owner, other := storage.NewID(), storage.NewID()
	names := map[string][]byte{}
	for _, n := range []int{0, 1, 1000, 64<<10 - 1, 64 << 10, 64<<10 + 1, 300_000} { // around the chunks' bounds
		name, err := fa.Add(ctx, owner, bytes.NewReader(content(n)))
		require.NoError(t, err)
		names[name] = content(n)
	}
	kept, err := fa.Add(ctx, other, bytes.NewReader(content(77)))
	require.NoError(t, err)
	contact, err := fa.SealContact(owner, []byte("A. Person, Mill Lane"))
	require.NoError(t, err)
	require.NotContains(t, string(contact), "Mill")

	_, err = fb.OpenContact(owner, contact)
	require.ErrorIs(t, err, attach.ErrNoKey)
	for range 2 {
		for _, sh := range []*share.Share{a, b} {
			_, err := sh.Folder(ctx, stick, nil)
			require.NoError(t, err)
		}
	}
	for name, want := range names {
		for _, f := range []*attach.Files{fa, fb} {
			got, err := read(f, owner, name)
			require.NoError(t, err)
			require.True(t, bytes.Equal(want, got))
			_, err = read(f, other, name)
			require.ErrorIs(t, err, change.ErrSealed, "another owner's key does not open it")
		}
	}
	plain, err := fb.OpenContact(owner, contact)
	require.NoError(t, err)
	require.Equal(t, "A. Person, Mill Lane", string(plain))

	require.NoError(t, fa.Erase(ctx, "R. Okafor", owner, "asked by letter"))
	for range 2 {
		for sh, f := range map[*share.Share]*attach.Files{a: fa, b: fb} {
			_, err := sh.Folder(ctx, stick, nil)
			require.NoError(t, err)
			require.NoError(t, f.Obey(ctx))
			_, err = sh.Folder(ctx, stick, nil)
			require.NoError(t, err)
		}
	}
	for _, f := range []*attach.Files{fa, fb} {
		for name := range names {
			_, err := read(f, owner, name)
			require.ErrorIs(t, err, attach.ErrErased)
		}
		_, err = f.OpenContact(owner, contact)
		require.ErrorIs(t, err, attach.ErrErased)
		_, err = f.SealContact(owner, []byte("again"))
		require.ErrorIs(t, err, attach.ErrErased)
		got, err := read(f, other, kept)
		require.NoError(t, err)
		require.Equal(t, content(77), got)
		ps, err := f.Check(ctx)
		require.NoError(t, err)
		require.Empty(t, ps)
	}
	// Nothing of it lies anywhere any more: two files are left, of the other owner.
	for _, dir := range []string{filepath.Join(stick, "cordwalk-"+a.Bag().Practice.String(), "files")} {
		es, err := os.ReadDir(dir)
		require.NoError(t, err)
		require.Len(t, es, 2)
	}
	for _, sh := range []*share.Share{a, b} {
		for _, dir := range []string{"files", "owners"} {
			es, err := os.ReadDir(filepath.Join(sh.Dir(), dir))
			require.NoError(t, err)
			require.Len(t, es, 1)
		}
	}
}

func TestEveryFlippedByteOfAFileIsFoundAndMended(t *testing.T) {
	stick := t.TempDir()
	a := sharetest.Found(t)
	b := sharetest.Join(t, a, "b")
	fa, fb := open(t, a), open(t, b)
	owner := storage.NewID()
	name, err := fa.Add(ctx, owner, bytes.NewReader(content(300)))
	require.NoError(t, err)
	for _, sh := range []*share.Share{a, b} {
		_, err := sh.Folder(ctx, stick, nil)
		require.NoError(t, err)
	}
	path := filepath.Join(b.Dir(), "files", name)
	whole, err := os.ReadFile(path)
	require.NoError(t, err)
	for at := range whole {
		bad := bytes.Clone(whole)
		bad[at] ^= 1 << (at % 8)
		require.NoError(t, os.WriteFile(path, bad, 0o600))
		got, err := read(fb, owner, name)
		require.Error(t, err, "byte %d", at)
		require.Empty(t, got)
		if at%37 == 0 {
			ps, err := fb.Check(ctx)
			require.NoError(t, err)
			require.Len(t, ps, 1)
		}
	}
	ps, err := fb.Repair(ctx)
	require.NoError(t, err)
	require.Len(t, ps, 1)
	_, err = b.Folder(ctx, stick, nil)
	require.NoError(t, err)
	got, err := read(fb, owner, name)
	require.NoError(t, err)
	require.Equal(t, content(300), got)
}

func TestFailedAddLeavesNothing(t *testing.T) {
	a := sharetest.Found(t)
	f := open(t, a)
	_, err := f.Add(ctx, storage.NewID(), io.MultiReader(bytes.NewReader(content(100_000)), broken{}))
	require.ErrorContains(t, err, "the camera was unplugged")
	es, err := os.ReadDir(filepath.Join(a.Dir(), "files"))
	require.NoError(t, err)
	require.Empty(t, es)
	for _, bad := range []string{"", "../practice.json", "x.att", "..att"} {
		_, err := f.Read(storage.NewID(), bad)
		require.Error(t, err)
		_, err = f.Open(ctx, bad)
		require.Error(t, err)
		want, err := f.Wanted(ctx, bad)
		require.NoError(t, err)
		require.False(t, want)
	}
}

type broken struct{}

func (broken) Read([]byte) (int, error) { return 0, errors.New("the camera was unplugged") }

// Random bits are flipped and random ends cut off in attachments and in owners' keys: each is told with its name, and
// nothing wrong is given out.
func TestRandomDamage(t *testing.T) {
	n := 500
	if os.Getenv("CORDWALK_SOAK") == "1" {
		n = 10_000
	}
	seed := rand.Uint64()
	rng := rand.New(rand.NewPCG(seed, 1))
	t.Logf("seed %d, %d times for each kind", seed, n)
	a := sharetest.Found(t)
	f := open(t, a)
	owner := storage.NewID()
	whole := content(70_000) // two chunks
	name, err := f.Add(ctx, owner, bytes.NewReader(whole))
	require.NoError(t, err)
	for _, dir := range []string{"files", "owners"} {
		es, err := os.ReadDir(filepath.Join(a.Dir(), dir))
		require.NoError(t, err)
		require.Len(t, es, 1)
		path := filepath.Join(a.Dir(), dir, es[0].Name())
		data, err := os.ReadFile(path)
		require.NoError(t, err)
		for range n {
			bad := bytes.Clone(data)
			at := rng.IntN(len(bad))
			if rng.IntN(3) == 0 {
				bad = bad[:at]
			} else {
				bad[at] ^= 1 << rng.IntN(8)
			}
			require.NoError(t, os.WriteFile(path, bad, 0o600))
			ps, err := attach.Check(ctx, disk.OS(), a.Dir(), a.Bag().Ring)
			require.NoError(t, err)
			require.Len(t, ps, 1)
			require.Equal(t, dir+"/"+es[0].Name(), ps[0].File)
			if dir == "files" {
				got, err := read(f, owner, name)
				require.Error(t, err)
				require.True(t, bytes.HasPrefix(whole, got), "a chunk that was changed is not given out")
			}
		}
		require.NoError(t, os.WriteFile(path, data, 0o600))
	}
	// The store opens with a damaged key, and says of the photo that its key is not here.
	es, err := os.ReadDir(filepath.Join(a.Dir(), "owners"))
	require.NoError(t, err)
	require.NoError(t, os.Truncate(filepath.Join(a.Dir(), "owners", es[0].Name()), 20))
	again, err := attach.Open(ctx, a.Store, nil)
	require.NoError(t, err)
	_, err = read(again, owner, name)
	if err != nil { // the store has the key as well
		require.ErrorIs(t, err, attach.ErrNoKey)
	}
}

// The n-th file operation fails while an attachment is added, or an owner erased, for every n, once and for good: an error is
// told, no file that has its name is not whole, and what failed succeeds afterwards.
func TestEveryOperationOfAFileFails(t *testing.T) {
	a := sharetest.Found(t)
	photo := content(70_000)
	for _, forever := range []bool{false, true} {
		for n := 1; ; n++ {
			d := disktest.New()
			f, err := attach.Open(ctx, a.Store, d)
			require.NoError(t, err)
			owner := storage.NewID()
			d.FailAt(n, syscall.EIO, forever)
			name, err := f.Add(ctx, owner, bytes.NewReader(photo))
			failed := d.Failures() > 0
			d.FailAt(0, nil, false)
			if err != nil {
				require.ErrorIs(t, err, syscall.EIO, "operation %d", n)
				require.Empty(t, name)
			}
			ps, cerr := f.Check(ctx)
			require.NoError(t, cerr)
			require.Empty(t, ps, "operation %d", n)
			if name == "" {
				name, err = f.Add(ctx, owner, bytes.NewReader(photo))
				require.NoError(t, err, "operation %d", n)
			}
			again, err := attach.Open(ctx, a.Store, nil)
			require.NoError(t, err)
			got, err := read(again, owner, name)
			require.NoError(t, err, "operation %d", n)
			require.True(t, bytes.Equal(photo, got))
			if !failed {
				require.Greater(t, n, 5)
				break
			}
		}
		for n := 1; ; n++ {
			d := disktest.New()
			f, err := attach.Open(ctx, a.Store, d)
			require.NoError(t, err)
			owner := storage.NewID()
			name, err := f.Add(ctx, owner, bytes.NewReader(photo))
			require.NoError(t, err)
			d.FailAt(n, syscall.EIO, forever)
			err = f.Erase(ctx, "R. Okafor", owner, "asked")
			failed := d.Failures() > 0
			d.FailAt(0, nil, false)
			if err != nil {
				require.ErrorIs(t, err, syscall.EIO, "operation %d", n)
			}
			again, err := attach.Open(ctx, a.Store, nil) // goes on where it stopped
			require.NoError(t, err)
			_, err = read(again, owner, name)
			require.ErrorIs(t, err, attach.ErrErased, "operation %d", n)
			require.NoFileExists(t, filepath.Join(a.Dir(), "files", name), "operation %d", n)
			if !failed {
				require.Greater(t, n, 3)
				break
			}
		}
	}
}
