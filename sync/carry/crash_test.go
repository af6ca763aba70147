package carry_test

import (
	"context"
	"math/rand/v2"
	"os"
	"path/filepath"
	"syscall"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk/disktest"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/carry"
)

// receiver makes a store that lies on a disk of the test and belongs to the sender's practice.
func receiver(t *testing.T, sender *memory, d *disktest.Disk, dir string) *storage.Store {
	j := newDevices(t, 1)[0]
	j.bag.Ring = sender.bag.Ring
	o := storagetest.Options()
	if d != nil {
		o.Files = d
	}
	s, err := storage.CreateJoined(dir, o, j.bag, j.site, j.current)
	require.NoError(t, err)
	return s
}

// The power fails while a store takes in what others wrote and records on: whatever the disk kept, the store opens,
// keeps what it called saved, and the next exchange brings the rest.
func TestPowerFailsWhileReceiving(t *testing.T) {
	seed := rand.Uint64()
	t.Logf("seed %d", seed)
	rng := rand.New(rand.NewPCG(seed, 1))
	stick := t.TempDir()
	sender := newDevices(t, 1)[0]
	sender.findings(200)
	sender.sync(stick)
	d := disktest.New()
	dir := filepath.Join(t.TempDir(), "store")
	s := receiver(t, sender, d, dir)
	require.NoError(t, d.Record(dir))
	add(t, s, patient("before"))
	saved := d.Events()
	o := storeOptions(s, sender.members)
	o.ReceiveOnly = true
	r, err := carry.Sync(context.Background(), stick, o)
	require.NoError(t, err)
	require.Equal(t, 200, r.Received)
	received := d.Events()
	states := 0
	require.NoError(t, d.Crashes(saved, 12, rng, func(c disktest.Crash) error {
		states++
		after := filepath.Join(t.TempDir(), "after")
		require.NoError(t, os.Mkdir(after, 0o700))
		if err := c.Write(after); err != nil {
			return err
		}
		s, err := storage.Open(after, storagetest.Options())
		require.NoError(t, err, c.Words)
		require.Contains(t, names(t, s), "before", c.Words)
		o := storeOptions(s, sender.members)
		o.ReceiveOnly = true
		r, err := carry.Sync(context.Background(), stick, o)
		require.NoError(t, err, c.Words)
		if c.At >= received {
			require.Zero(t, r.Received, "what was committed is there: %s", c.Words)
		}
		held, err := s.Streams(context.Background())
		require.NoError(t, err)
		whole := false
		for _, h := range held {
			whole = whole || h.Stream == sender.own() && len(h.Spans) == 1 && h.Spans[0].First == 1 && h.Last == 200
		}
		require.True(t, whole, "%s: %+v", c.Words, held)
		return s.Close()
	}))
	t.Logf("%d states", states)
	require.Greater(t, states, 10)
	require.NoError(t, s.Close())
}

// The n-th operation of the receiving store's disk fails, for every n: the error is told, the store stays whole, and
// when the disk is mended all comes.
func TestEveryOperationWhileReceivingFails(t *testing.T) {
	stick := t.TempDir()
	sender := newDevices(t, 1)[0]
	sender.findings(50)
	sender.sync(stick)
	for _, forever := range []bool{false, true} {
		for n := 1; ; n++ {
			d := disktest.New()
			dir := filepath.Join(t.TempDir(), "store")
			s := receiver(t, sender, d, dir)
			o := storeOptions(s, sender.members)
			o.ReceiveOnly = true
			d.FailAt(n, syscall.EIO, forever)
			_, err := carry.Sync(context.Background(), stick, o)
			failed := d.Failures() > 0
			d.FailAt(0, nil, false)
			if failed && err != nil {
				require.ErrorIs(t, err, syscall.EIO, "operation %d", n)
			}
			r, err := carry.Sync(context.Background(), stick, o)
			require.NoError(t, err, "operation %d", n)
			require.Empty(t, r.Waiting)
			s.Settle()
			held, err := s.Streams(context.Background())
			require.NoError(t, err)
			ok := false
			for _, h := range held {
				ok = ok || h.Stream == sender.own() && h.Last == 50 && len(h.Spans) == 1
			}
			require.True(t, ok, "operation %d: %+v", n, held)
			require.NoError(t, s.Close())
			s, err = storage.Open(dir, storagetest.Options())
			require.NoError(t, err)
			r, err = carry.Sync(context.Background(), stick, carry.Options{Bag: s.Bag, Incarnation: s.Incarnation, Journal: s, Members: sender.members, ReceiveOnly: true})
			require.NoError(t, err)
			require.Zero(t, r.Received, "operation %d: after a restart all is there", n)
			require.NoError(t, s.Close())
			if !failed {
				require.Greater(t, n, 5)
				break
			}
		}
	}
}
