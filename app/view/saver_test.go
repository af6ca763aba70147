package view

import (
	"context"
	"errors"
	"sync"
	"sync/atomic"
	"testing"
	"testing/synctest"
	"time"

	"github.com/stretchr/testify/require"
	"go.uber.org/goleak"

	"cordwalk.example/cordwalk/exam"
)

func TestSaverKeepsOrderThroughErrors(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var got []int
		broken := true
		tries := 0
		s := NewSaver(Now, nil)
		for i := range 5 {
			n, err := s.Queue(func(context.Context) error {
				if i == 2 && broken {
					tries++
					return errors.New("the disk is full")
				}
				got = append(got, i)
				return nil
			})
			require.NoError(t, err)
			require.EqualValues(t, i+1, n)
		}
		time.Sleep(2 * time.Second)
		st := s.State()
		require.Equal(t, 3, st.Waiting())
		require.Equal(t, "3 entries not yet saved: the disk is full", st.Words())
		require.Equal(t, []int{0, 1}, got, "nothing overtakes a failed write")
		require.Greater(t, tries, 2, "it is tried again by itself")
		broken = false
		s.Retry()
		require.NoError(t, s.Close(t.Context()))
		require.Equal(t, []int{0, 1, 2, 3, 4}, got)
		require.Equal(t, "Saved here", s.State().Words())
		_, err := s.Queue(func(context.Context) error { return nil })
		require.ErrorIs(t, err, ErrSaverClosed)
	})
}

func TestSaverCloseGivesUpWithACount(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		s := NewSaver(Now, nil)
		for range 3 {
			_, err := s.Queue(func(context.Context) error { return errors.New("no permission") })
			require.NoError(t, err)
		}
		ctx, cancel := context.WithTimeout(t.Context(), time.Second)
		defer cancel()
		require.ErrorContains(t, s.Close(ctx), "3 entries not yet saved: no permission")
	})
}

func TestSaverDropsWhatCanNeverBeSaved(t *testing.T) {
	s := NewSaver(Now, nil)
	ran := false
	_, _ = s.Queue(func(context.Context) error { return &exam.Invalid{Field: "grade", Value: "9", Allowed: "0 to 4"} })
	_, _ = s.Queue(func(context.Context) error { ran = true; return nil })
	require.NoError(t, s.Close(t.Context()))
	require.True(t, ran)
	require.ErrorContains(t, s.State().Refused, "0 to 4")
}

// TestNoKeyWaitsForTheDisk holds the disk still and types: every key is taken at once, and
// nothing is called saved before the disk has answered.
func TestNoKeyWaitsForTheDisk(t *testing.T) {
	release := make(chan struct{})
	var written atomic.Int64
	var ui sync.Mutex
	onUI := func(f func()) { ui.Lock(); defer ui.Unlock(); f() }
	saver := NewSaver(onUI, func(SaveState) {})
	s, _ := newSheet(t, func(in *ExamInput) {
		in.Save = func(b Batch) {
			_, err := saver.Queue(func(ctx context.Context) error {
				<-release
				written.Add(int64(len(b.Cells)))
				return nil
			})
			require.NoError(t, err)
		}
	})
	for range 30 {
		out := press(s, "2")
		require.True(t, out.Handled)
	}
	require.Zero(t, written.Load())
	require.Equal(t, len(s.Visit().Findings), saver.State().Waiting())
	require.Contains(t, saver.State().Words(), "not yet saved")
	close(release)
	require.NoError(t, saver.Close(t.Context()))
	require.EqualValues(t, len(s.Visit().Findings), written.Load())
}

func TestNewestDropsLateResults(t *testing.T) {
	gate := make(chan struct{})
	var got []int
	n := NewNewest(Now, func(ctx context.Context, in int) (int, error) {
		if in == 1 {
			<-gate
		}
		return in * 10, nil
	}, func(out int, err error) { got = append(got, out) })
	n.Ask(1)
	n.Ask(2)
	n.Ask(3)
	close(gate)
	n.Wait()
	require.NotContains(t, got, 10)
	require.Equal(t, 30, got[len(got)-1])
	n.Close()
	n.Ask(4)
	n.Wait()
	require.NotContains(t, got, 40)
}

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// BenchmarkKey measures a key press until the model is refreshed, while the disk takes
// 50 ms for each write: the figure must not depend on the disk. The second run has a disk
// that takes no time; the ratio of both is reported.
func BenchmarkKey(b *testing.B) {
	run := func(b *testing.B, disk time.Duration) time.Duration {
		saver := NewSaver(func(f func()) {}, nil)
		s, _ := newSheet(b, func(in *ExamInput) {
			in.Items = exam.Items()
			in.Save = func(Batch) {
				_, _ = saver.Queue(func(ctx context.Context) error {
					if disk == 0 {
						return nil
					}
					select {
					case <-ctx.Done():
						return ctx.Err()
					case <-time.After(disk):
						return nil
					}
				})
			}
		})
		start := time.Now()
		n := 0
		for b.Loop() {
			s.FocusStep(n % len(s.steps))
			s.Press(Rune('1' + rune(n/len(s.steps)%2)))
			_ = s.Progress()
			n++
		}
		took := time.Since(start) / time.Duration(max(1, n))
		ctx, cancel := context.WithCancel(context.Background())
		cancel()
		_ = saver.Close(ctx)
		return took
	}
	var slow, fast time.Duration
	b.Run("disk-50ms", func(b *testing.B) { slow = run(b, 50*time.Millisecond) })
	b.Run("disk-0ms", func(b *testing.B) { fast = run(b, 0); b.ReportMetric(float64(slow)/float64(fast), "slow/fast") })
}
