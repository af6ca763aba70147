package hub_test

import (
	"bytes"
	"context"
	"crypto/rand"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/extract"
	"cordwalk.example/cordwalk/sync/hub"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/share"
	"cordwalk.example/cordwalk/sync/share/sharetest"
)

// with runs a device's side with some options until the test ends or stop is called.
func with(t testing.TB, sh *share.Share, a hub.Address, change func(*hub.Options)) *client {
	t.Helper()
	o := hub.Options{Address: a, Bag: sh.Bag, Incarnation: sh.Incarnation, Journal: sh, Members: sh, Poll: 20 * time.Millisecond}
	change(&o)
	c := hub.New(o)
	ctx, cancel := context.WithCancel(context.Background())
	done := make(chan error, 1)
	go func() { done <- c.Run(ctx) }()
	stop := func() error { cancel(); err := <-done; done <- err; return err }
	t.Cleanup(func() { _ = stop() })
	return &client{c, stop}
}

// A device that does not keep a site's records is given one patient of it, signed and to be read only, by one that
// does; the ask waits on the hub until that one comes by.
func TestOnePatientOfAnotherSite(t *testing.T) {
	t.Parallel()
	a := sharetest.Found(t)
	b := sharetest.Join(t, a, "b")
	id := sharetest.Add(t, a, "Bramble")
	m := start(t, t.TempDir(), "127.0.0.1:0", a)
	defer m.Close()
	member := func(v key.Verifier) bool { d, ok := b.List.Device(v); return ok && d.Member() }
	elsewhere := with(t, b, m.Address(), func(o *hub.Options) { o.Sites = []change.Site{change.NewSite()} })
	ask := func(fresh bool, wait time.Duration) ([]byte, error) {
		ctx, cancel := context.WithTimeout(context.Background(), wait)
		defer cancel()
		return elsewhere.FetchExtract(ctx, id, fresh)
	}
	_, err := ask(false, 2*time.Second)
	require.ErrorIs(t, err, hub.ErrNoExtract, "nobody is there")
	asked := make(chan string, 10)
	given := with(t, a, m.Address(), func(o *hub.Options) {
		o.Extract = func(ctx context.Context, patient exam.ID, who string) ([]byte, error) {
			asked <- who
			return extract.Give(ctx, a.Store, patient, "b", time.Now())
		}
	})
	data, err := ask(false, 30*time.Second)
	require.NoError(t, err)
	require.Equal(t, hub.Who(b.Bag().Device.Verifier()), <-asked)
	x, err := extract.Read(data, b.Bag(), member)
	require.NoError(t, err)
	require.Equal(t, a.Site(), x.Site)
	shown, err := b.Show(x.Changes)
	require.NoError(t, err)
	require.Equal(t, "Bramble", shown.Patient.Name)
	require.NotContains(t, sharetest.Names(t, b), "Bramble", "nothing of it is kept")
	require.NoError(t, given.stop())

	// The answer serves again while nobody is there, and a fresh one waits; large ones come in pieces.
	again, err := ask(false, 30*time.Second)
	require.NoError(t, err)
	require.Equal(t, data, again)
	large := make([]byte, 1_300_000)
	_, _ = rand.Read(large)
	with(t, a, m.Address(), func(o *hub.Options) {
		o.Extract = func(context.Context, exam.ID, string) ([]byte, error) { return large, nil }
	})
	got, err := ask(true, 30*time.Second)
	require.NoError(t, err)
	require.True(t, bytes.Equal(large, got))
	_, err = extract.Read(got, b.Bag(), member)
	require.Error(t, err)
}
