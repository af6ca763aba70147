package carry_test

import (
	"context"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strconv"
	"testing"
	"time"

	"filippo.io/age"
	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/carry"
	"cordwalk.example/cordwalk/sync/change"
)

// benchChanges is how many changes the benchmarks move: 20,000, or CORDWALK_CHANGES.
func benchChanges(b *testing.B) int {
	if n, err := strconv.Atoi(os.Getenv("CORDWALK_CHANGES")); err == nil {
		return n
	}
	return 20_000
}

// findings gives a device n findings, each in a frame of its own, as a key press makes them.
func (m *memory) findings(n int) {
	s := m.own()
	var prev change.Hash
	for i := range n {
		visit := exam.ID{1, byte(i / 40 >> 16), byte(i / 40 >> 8), byte(i / 40)}
		f, err := change.Seal(change.Batch{Stream: s, First: uint64(i + 1), Examiner: "R. Okafor", Changes: []change.Change{{
			ID: change.NewID(), Time: m.clock.Tick(), Kind: change.KindVisit, Patient: exam.ID{2, visit[1], visit[2], visit[3] / 10}, Record: visit,
			Field: fmt.Sprintf("finding/tone %d", i%40), Value: []byte{0x83, 0x01, byte(i % 4), 0x00},
		}}}, prev, m.bag.Ring.Current(), m.bag.Ring)
		require.NoError(m.t, err)
		prev = f.Hash()
		m.streams[s] = append(m.streams[s], f)
	}
}

// A first exchange by folder, from the folder to the receiver's journal, durable, verified and opened, against
// opening an age file of the same bytes onto the disk and copying it.
func BenchmarkFirstSync(b *testing.B) {
	n := benchChanges(b)
	stick := b.TempDir()
	sender := newDevices(b, 1)[0]
	sender.findings(n)
	sender.sync(stick)
	id, err := age.GenerateX25519Identity()
	require.NoError(b, err)
	sealed := filepath.Join(b.TempDir(), "journal.age")
	f, err := os.Create(sealed)
	require.NoError(b, err)
	w, err := age.Encrypt(f, id.Recipient())
	require.NoError(b, err)
	bytes := 0
	for _, fr := range sender.streams[sender.own()] {
		bytes += len(fr.Raw)
		_, err := w.Write(fr.Raw)
		require.NoError(b, err)
	}
	require.NoError(b, w.Close())
	require.NoError(b, f.Close())
	sender.streams = nil

	var ours, theirs time.Duration
	for b.Loop() {
		dir := filepath.Join(b.TempDir(), "store")
		joiner := newDevices(b, 1)[0]
		joiner.bag.Ring = sender.bag.Ring
		sender.members.signers[joiner.current] = joiner.bag.Device.Verifier()
		s, err := storage.CreateJoined(dir, storagetest.Options(), joiner.bag, joiner.site, joiner.current)
		require.NoError(b, err)
		o := storeOptions(s, sender.members)
		o.ReceiveOnly = true
		start := time.Now()
		r, err := carry.Sync(context.Background(), stick, o)
		require.NoError(b, err)
		ours += time.Since(start)
		require.Equal(b, n, r.Received)
		require.NoError(b, s.Close())

		start = time.Now()
		in, err := os.Open(sealed)
		require.NoError(b, err)
		plain, err := age.Decrypt(in, id)
		require.NoError(b, err)
		one, two := filepath.Join(dir, "one"), filepath.Join(dir, "two")
		for _, step := range []struct {
			to   string
			from func() io.Reader
		}{{one, func() io.Reader { return plain }}, {two, func() io.Reader { r, err := os.Open(one); require.NoError(b, err); return r }}} {
			out, err := os.Create(step.to)
			require.NoError(b, err)
			_, err = io.Copy(out, step.from())
			require.NoError(b, err)
			require.NoError(b, out.Sync())
			require.NoError(b, out.Close())
		}
		theirs += time.Since(start)
		require.NoError(b, os.RemoveAll(dir))
	}
	b.ReportMetric(ours.Seconds()/theirs.Seconds(), "ratio-to-age+cp")
	b.ReportMetric(float64(n)*float64(b.N)/ours.Seconds(), "changes/s")
	b.ReportMetric(float64(bytes)/float64(n), "journal-bytes/change")
	info, err := os.ReadDir(inside(stick, "data"))
	require.NoError(b, err)
	size := int64(0)
	for _, e := range info {
		i, err := e.Info()
		require.NoError(b, err)
		size += i.Size()
	}
	b.ReportMetric(float64(size)/float64(n), "folder-bytes/change")
}

// An exchange with nothing new, over histories of different sizes.
func BenchmarkIdleSync(b *testing.B) {
	for _, n := range []int{benchChanges(b) / 100, benchChanges(b) / 10, benchChanges(b)} {
		b.Run(fmt.Sprint(n), func(b *testing.B) {
			stick := b.TempDir()
			sender := newDevices(b, 1)[0]
			sender.findings(n)
			sender.sync(stick)
			joiner := newDevices(b, 1)[0]
			joiner.bag.Ring = sender.bag.Ring
			dir := filepath.Join(b.TempDir(), "store")
			s, err := storage.CreateJoined(dir, storagetest.Options(), joiner.bag, joiner.site, joiner.current)
			require.NoError(b, err)
			defer s.Close()
			sync := func() carry.Report {
				r, err := carry.Sync(context.Background(), stick, storeOptions(s, sender.members))
				require.NoError(b, err)
				return r
			}
			require.Equal(b, n, sync().Received)
			sync()
			s.Settle()
			for b.Loop() {
				r := sync()
				require.Zero(b, r.Received+r.Sent)
			}
		})
	}
}
