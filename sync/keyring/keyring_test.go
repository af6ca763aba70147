package keyring

import (
	"context"
	"errors"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
	"github.com/zalando/go-keyring"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// double is a keyring in memory that can be slow or broken.
type double struct {
	m    map[string]string
	wait time.Duration
	err  error
}

func (d *double) Get(s, u string) (string, error) {
	time.Sleep(d.wait)
	if v, ok := d.m[s+u]; ok || d.err != nil {
		return v, d.err
	}
	return "", keyring.ErrNotFound
}
func (d *double) Set(s, u, secret string) error { time.Sleep(d.wait); d.m[s+u] = secret; return d.err }
func (d *double) Delete(s, u string) error {
	if _, ok := d.m[s+u]; !ok {
		return keyring.ErrNotFound
	}
	delete(d.m, s+u)
	return d.err
}

func use(t *testing.T) *double {
	d := &double{m: map[string]string{}}
	old := current
	current = d
	t.Cleanup(func() { current = old })
	return d
}

func TestKeyComesBack(t *testing.T) {
	use(t)
	ctx := context.Background()
	p, s := exam.ID{1}, key.NewSecret()
	_, err := Get(ctx, p)
	require.ErrorIs(t, err, ErrNone)
	require.NoError(t, Set(ctx, p, s))
	got, err := Get(ctx, p)
	require.NoError(t, err)
	require.Equal(t, s, got)
	_, err = Get(ctx, exam.ID{2})
	require.ErrorIs(t, err, ErrNone)
	require.NoError(t, Delete(ctx, p))
	require.NoError(t, Delete(ctx, p))
	_, err = Get(ctx, p)
	require.ErrorIs(t, err, ErrNone)
}

func TestKeyringNeverHangsTheProgram(t *testing.T) {
	d := use(t)
	d.wait = time.Minute
	start := time.Now()
	_, err := Get(context.Background(), exam.ID{1})
	require.ErrorIs(t, err, ErrSlow)
	require.Less(t, time.Since(start), Limit+time.Second)
}

func TestBrokenKeyring(t *testing.T) {
	d := use(t)
	d.err = errors.New("no secret service")
	_, err := Get(context.Background(), exam.ID{1})
	require.ErrorContains(t, err, "use the passphrase")
	d.err = nil
	d.m[service+exam.ID{1}.String()] = "zz"
	_, err = Get(context.Background(), exam.ID{1})
	require.ErrorIs(t, err, change.ErrMalformed)
}
