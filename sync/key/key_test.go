package key_test

import (
	"bytes"
	"errors"
	"fmt"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// quick keeps the tests short; that Usual works is tested once.
var quick = key.Stretch{Time: 1, Memory: 64, Threads: 1}

func bag(t testing.TB) key.Bag {
	b, err := key.NewBag(exam.ID{7})
	require.NoError(t, err)
	return b
}

func requireSame(t testing.TB, want, got key.Bag) {
	require.Equal(t, want.Practice, got.Practice)
	require.Equal(t, want.Ring.Epochs(), got.Ring.Epochs())
	require.Equal(t, want.Device.Identity().String(), got.Device.Identity().String())
	require.Equal(t, want.Device.Signer(), got.Device.Signer())
}

func TestEachLockOpensTheBag(t *testing.T) {
	b := bag(t)
	b.Ring = b.Ring.Next().Next()
	file, ring := key.NewSecret(), key.NewSecret()
	pass := []byte("seven slow tortoises")
	data, err := b.Lock(quick, key.Passphrase(pass), key.File(file), key.Keyring(ring))
	require.NoError(t, err)
	for _, o := range []key.Opener{key.Passphrase(pass), key.File(file), key.Keyring(ring)} {
		got, err := key.Unlock(data, o)
		require.NoError(t, err)
		requireSame(t, b, got)
	}
	protected, err := key.Protected(data)
	require.NoError(t, err)
	require.True(t, protected)

	for name, o := range map[string]key.Opener{"passphrase": key.Passphrase([]byte("seven slow tortoise")), "file": key.File(ring), "keyring": key.Keyring(file)} {
		_, err := key.Unlock(data, o)
		require.ErrorIs(t, err, key.ErrLocked, name)
	}
	_, err = key.Unlock(data, key.InStore())
	require.ErrorIs(t, err, key.ErrNoLock)
}

// New epochs are kept without asking for the passphrase again.
func TestReseal(t *testing.T) {
	b := bag(t)
	_, err := b.Reseal()
	require.Error(t, err, "a bag that never had a lock")
	pass := key.Passphrase([]byte("seven slow tortoises"))
	data, err := b.Lock(quick, pass)
	require.NoError(t, err)
	opened, err := key.Unlock(data, pass)
	require.NoError(t, err)
	opened.Ring = opened.Ring.Next()
	data, err = opened.Reseal()
	require.NoError(t, err)
	again, err := key.Unlock(data, pass)
	require.NoError(t, err)
	requireSame(t, opened, again)
}

func TestUnprotectedBag(t *testing.T) {
	b := bag(t)
	data, err := b.Lock(quick, key.InStore())
	require.NoError(t, err)
	protected, err := key.Protected(data)
	require.NoError(t, err)
	require.False(t, protected)
	got, err := key.Unlock(data, key.InStore())
	require.NoError(t, err)
	requireSame(t, b, got)
}

func TestUsualStretch(t *testing.T) {
	b := bag(t)
	data, err := b.Lock(key.Usual, key.Passphrase([]byte("p")))
	require.NoError(t, err)
	_, err = key.Unlock(data, key.Passphrase([]byte("q")))
	require.ErrorIs(t, err, key.ErrLocked)
}

func TestEveryFlippedBitOfABagIsNoticed(t *testing.T) {
	b := bag(t)
	s := key.NewSecret()
	data, err := b.Lock(quick, key.File(s))
	require.NoError(t, err)
	for at := range data {
		bad := bytes.Clone(data)
		bad[at] ^= 1 << (at % 8)
		_, err := key.Unlock(bad, key.File(s))
		require.Error(t, err, "byte %d", at)
		known := false
		for _, e := range []error{key.ErrLocked, key.ErrNoLock, change.ErrMalformed, change.ErrSealed, change.ErrNewer} {
			known = known || errors.Is(err, e)
		}
		require.True(t, known, "byte %d: %v", at, err)
		_, err = key.Unlock(data[:at], key.File(s))
		require.Error(t, err)
	}
}

func TestSecretsDoNotPrint(t *testing.T) {
	s := key.NewSecret()
	for _, text := range []string{fmt.Sprint(s), fmt.Sprintf("%v %+v %#v %s", s, s, s, s), fmt.Sprintf("%v %+v", key.Epoch{1, s}, []key.Epoch{{1, s}})} {
		require.NotContains(t, text, fmt.Sprintf("%x", s[:4]))
		require.NotContains(t, text, fmt.Sprint(s[0], s[1], s[2]))
	}
}

func TestDerivedKeysDiffer(t *testing.T) {
	b := bag(t)
	r := b.Ring.Next()
	w1, _ := r.Wrap(1)
	w2, _ := r.Wrap(r.Current())
	all := []key.Secret{r.Index(), r.Names(), w1, w2}
	for i := range all {
		for j := range all[:i] {
			require.NotEqual(t, all[i], all[j])
		}
	}
	require.Equal(t, b.Ring.Names(), r.Names(), "names stay when the key is changed")
	require.EqualValues(t, 1, r.Current()>>16)
	_, ok := b.Ring.Frames(r.Current())
	require.False(t, ok)
}

func TestOwnerKeys(t *testing.T) {
	r := bag(t).Ring
	owner, k := exam.ID{3}, key.NewSecret()
	sealed := r.SealOwnerKey(owner, k)
	got, err := r.Next().OpenOwnerKey(owner, sealed)
	require.NoError(t, err)
	require.Equal(t, k, got)
	_, err = r.OpenOwnerKey(exam.ID{4}, sealed)
	require.ErrorIs(t, err, change.ErrSealed)
	_, err = r.OpenOwnerKey(owner, sealed[:3])
	require.ErrorIs(t, err, change.ErrMalformed)
	_, err = r.OpenOwnerKey(owner, r.Next().SealOwnerKey(owner, k))
	require.ErrorIs(t, err, change.ErrNoKey)
}

func TestSignatureIsForOnePurpose(t *testing.T) {
	d := bag(t).Device
	s := d.Sign("head", []byte("message"))
	require.True(t, d.Verifier().Verify("head", []byte("message"), s))
	require.False(t, d.Verifier().Verify("member", []byte("message"), s))
	require.False(t, d.Verifier().Verify("head", []byte("massage"), s))
	require.False(t, bag(t).Device.Verifier().Verify("head", []byte("message"), s))
}

func TestMACPartsDoNotRunTogether(t *testing.T) {
	s := key.NewSecret()
	require.NotEqual(t, s.MAC([]byte("ab"), []byte("c")), s.MAC([]byte("a"), []byte("bc")))
	require.NotEqual(t, s.MAC([]byte("a")), s.MAC([]byte("a"), nil))
}

func TestKeyFile(t *testing.T) {
	s := key.NewSecret()
	got, err := key.ParseKeyFile(append([]byte("  "), key.FormatKeyFile(s)...))
	require.NoError(t, err)
	require.Equal(t, s, got)
	for _, bad := range []string{"", "abc", string(key.FormatKeyFile(s))[2:], "zz" + string(key.FormatKeyFile(s))[2:]} {
		_, err := key.ParseKeyFile([]byte(bad))
		require.ErrorIs(t, err, change.ErrMalformed)
	}
}

func FuzzUnlock(f *testing.F) {
	s := key.Secret{1}
	for _, o := range []key.Opener{key.InStore(), key.File(s), key.Keyring(s)} {
		b := bag(f)
		data, err := b.Lock(quick, o)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(data)
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		for _, o := range []key.Opener{key.InStore(), key.File(s), key.Keyring(s)} {
			if _, err := key.Unlock(data, o); err == nil {
				if _, err := key.Protected(data); err != nil {
					t.Fatalf("it opens, yet: %v", err)
				}
			}
		}
	})
}

func FuzzParseKeyFile(f *testing.F) {
	f.Add(key.FormatKeyFile(key.Secret{1}))
	f.Fuzz(func(t *testing.T, data []byte) {
		s, err := key.ParseKeyFile(data)
		if err == nil && !bytes.EqualFold(bytes.TrimSpace(data), bytes.TrimSpace(key.FormatKeyFile(s))) {
			t.Fatalf("%q was read as %q", data, key.FormatKeyFile(s))
		}
	})
}
