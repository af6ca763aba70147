package carry_test

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/carry"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/merge"
	"cordwalk.example/cordwalk/sync/segment"
)

// memory is a device whose journal lies in memory: the smallest thing that keeps the promises
// of carry.Journal.
type memory struct {
	t       testing.TB
	bag     key.Bag
	current change.Incarnation
	site    change.Site
	members *list
	streams map[change.Stream][]change.Frame // by the name they are kept under
	ready   map[change.Stream][]change.Frame // received and not committed
	signed  map[change.Stream][]segment.Signed
	clock   *change.Clock
	now     func() time.Time
	fail    error
}

// list is a member list without statements of its own.
type list struct {
	signers    map[change.Incarnation]key.Verifier
	statements [][]byte
}

func (l *list) Signer(i change.Incarnation) (key.Verifier, bool) { v, ok := l.signers[i]; return v, ok }
func (l *list) Statements() [][]byte                             { return l.statements }
func (l *list) Learn(s [][]byte) (bool, error) {
	n := len(l.statements)
	for _, b := range s {
		if !slices.ContainsFunc(l.statements, func(have []byte) bool { return bytes.Equal(have, b) }) {
			l.statements = append(l.statements, b)
		}
	}
	return len(l.statements) > n, nil
}

var practice = exam.ID{0xca}

// newDevices makes devices of one practice.
func newDevices(t testing.TB, n int) []*memory {
	members := &list{signers: map[change.Incarnation]key.Verifier{}}
	first, err := key.NewBag(practice)
	require.NoError(t, err)
	var out []*memory
	for range n {
		d, err := key.NewDevice()
		require.NoError(t, err)
		m := &memory{t: t, bag: key.Bag{Practice: practice, Ring: first.Ring, Device: d}, site: change.Site{0x51}, members: members, now: time.Now,
			streams: map[change.Stream][]change.Frame{}, ready: map[change.Stream][]change.Frame{}, signed: map[change.Stream][]segment.Signed{}}
		m.clock = change.NewClock(m.now, 0)
		require.NoError(t, m.Renew(context.Background()))
		out = append(out, m)
	}
	return out
}

func (m *memory) Renew(context.Context) error {
	m.current = change.NewIncarnation()
	m.members.signers[m.current] = m.bag.Device.Verifier()
	return nil
}

func (m *memory) own() change.Stream { return change.Stream{Device: m.current, Site: m.site} }

// record writes n changes, each in a frame of its own.
func (m *memory) record(n int) {
	for range n {
		s := m.own()
		fs := m.streams[s]
		var prev change.Hash
		first := uint64(1)
		if len(fs) > 0 {
			prev, first = fs[len(fs)-1].Hash(), fs[len(fs)-1].Last+1
		}
		f, err := change.Seal(change.Batch{Stream: s, First: first, Examiner: "R. Okafor", Changes: []change.Change{{
			ID: change.NewID(), Time: m.clock.Tick(), Kind: change.KindVisit, Record: exam.ID{byte(first)}, Field: "note", Value: fmt.Appendf(nil, "%s %d", m.current, first),
		}}}, prev, m.bag.Ring.Current(), m.bag.Ring)
		require.NoError(m.t, err)
		m.streams[s] = append(fs, f)
	}
}

// copied makes a second device out of this one as copying its store would.
func (m *memory) copied() *memory {
	c := *m
	c.streams, c.ready, c.signed = map[change.Stream][]change.Frame{}, map[change.Stream][]change.Frame{}, map[change.Stream][]segment.Signed{}
	for s, fs := range m.streams {
		c.streams[s] = slices.Clone(fs)
	}
	for s, hs := range m.signed {
		c.signed[s] = slices.Clone(hs)
	}
	return &c
}

func (m *memory) state() *merge.State { return m.stateOf(nil) }

// stateOf returns the state of one site, or of all.
func (m *memory) stateOf(site *change.Site) *merge.State {
	st := &merge.State{}
	for as, fs := range m.streams {
		if site != nil && as.Site != *site {
			continue
		}
		for _, f := range fs {
			b, err := change.Open(f, m.bag.Ring)
			require.NoError(m.t, err)
			for _, c := range b.Changes {
				c.Stream = as
				st.Add(c)
			}
		}
	}
	return st
}

// values returns all values that the device has.
func (m *memory) values() map[string]bool {
	out := map[string]bool{}
	st := m.state()
	for _, k := range st.Keys() {
		for _, v := range st.Versions(k) {
			out[string(v.Value)] = true
		}
	}
	return out
}

func (m *memory) Streams(context.Context) (out []carry.Held, err error) {
	for s, fs := range m.streams {
		if len(fs) == 0 {
			continue
		}
		h := carry.Held{Stream: s, Of: fs[0].Stream, Own: s == m.own()}
		for _, f := range fs {
			h.Spans = merge.AddSpan(h.Spans, merge.Span{First: f.First, Last: f.Last})
		}
		h.Last, h.Hash = fs[len(fs)-1].Last, fs[len(fs)-1].Hash()
		out = append(out, h)
	}
	slices.SortFunc(out, func(a, b carry.Held) int { return a.Stream.Compare(b.Stream) })
	return out, m.fail
}

func (m *memory) Frames(_ context.Context, s change.Stream, from uint64, f func(change.Frame) error) error {
	for _, fr := range m.streams[s] {
		if fr.Last >= from {
			if err := f(fr); err != nil {
				return err
			}
		}
	}
	return nil
}

func (m *memory) At(_ context.Context, s change.Stream, last uint64) (change.Hash, bool, error) {
	for _, f := range m.streams[s] {
		if f.Last == last {
			return f.Hash(), true, nil
		}
	}
	return change.Hash{}, false, nil
}

func (m *memory) Receive(_ context.Context, as change.Stream, b segment.Block) error {
	if len(b.Frames) == 0 {
		return errors.New("an empty block")
	}
	for _, f := range b.Frames {
		if _, err := change.Open(f, m.bag.Ring); err != nil {
			return err
		}
		f.Raw = slices.Clone(f.Raw) // the block's memory is not ours
		m.ready[as] = append(m.ready[as], f)
	}
	return nil
}

func (m *memory) Commit(_ context.Context, as change.Stream, head *segment.Signed) error {
	for s, fs := range m.ready {
		if s == m.own() {
			return errors.New("another device may not write in the stream that this one writes")
		}
		all := m.streams[s]
		for _, f := range fs {
			for _, g := range all {
				if g.First == f.First && g.Hash() != f.Hash() {
					return fmt.Errorf("two frames %d under one name", f.First)
				}
			}
			if !slices.ContainsFunc(all, func(g change.Frame) bool { return g.Hash() == f.Hash() }) {
				all = append(all, f)
			}
		}
		slices.SortFunc(all, func(a, b change.Frame) int { return int(int64(a.First) - int64(b.First)) })
		m.streams[s] = all
		delete(m.ready, s)
	}
	if head == nil {
		return nil
	}
	m.signed[as] = append(m.signed[as], *head)
	slices.SortFunc(m.signed[as], func(a, b segment.Signed) int { return int(int64(a.Last) - int64(b.Last)) })
	return nil
}

func (m *memory) Signed(_ context.Context, s change.Stream) ([]segment.Signed, error) {
	return m.signed[s], nil
}

func (m *memory) Sums(ctx context.Context) ([]segment.Sum, error) {
	held, err := m.Streams(ctx)
	return []segment.Sum{{Site: m.site, Rules: merge.Rules, At: segment.HashOfHeld(m.site, held), Sum: m.stateOf(&m.site).Hash()}}, err
}

func (m *memory) options() carry.Options {
	return carry.Options{Bag: func() key.Bag { return m.bag }, Incarnation: func() change.Incarnation { return m.current }, Journal: m, Members: m.members, Now: m.now}
}

func (m *memory) sync(folder string) carry.Report {
	m.t.Helper()
	r, err := carry.Sync(context.Background(), folder, m.options())
	require.NoError(m.t, err)
	return r
}

// inside returns a path in the practice's folder.
func inside(folder string, parts ...string) string {
	return filepath.Join(append([]string{folder, carry.FolderName(practice)}, parts...)...)
}

type keyVerifier = key.Verifier

// copyFolder copies a store as a person or a backup program would.
func copyFolder(t testing.TB, from, to string) {
	require.NoError(t, os.CopyFS(to, os.DirFS(from)))
}
