package merge_test

import (
	"slices"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/merge"
)

// Each change of these tables comes from a device of its own.

// id makes a change id, small numbers before great ones.
func id(n byte) change.ID { return change.ID{6: 0x70, 8: 0x80, 15: n} }

func ver(n byte, value string, supersedes ...byte) change.Change {
	c := change.Change{
		Stream: change.Stream{Device: change.Incarnation{n}}, Seq: 1, ID: id(n), Kind: change.KindVisit,
		Time: change.HLCAt(time.Unix(int64(n), 0)), Record: exam.ID{1}, Field: "finding/patellar pelvic-left",
		Value: []byte(value),
	}
	for _, s := range supersedes {
		c.Supersedes = append(c.Supersedes, id(s))
	}
	return c
}

func amended(c change.Change) change.Change {
	c.Act, c.Reason = change.Amend, "looked again"
	return c
}

func ids(ns ...byte) (out []change.ID) {
	for _, n := range ns {
		out = append(out, id(n))
	}
	return out
}

func TestOpenFields(t *testing.T) {
	for _, tt := range []struct {
		name     string
		vs       []change.Change
		current  []change.ID
		conflict bool
		lost     bool
	}{
		{"nothing", nil, nil, false, false},
		{"one value", []change.Change{ver(1, "a")}, ids(1), false, false},
		{"a correction", []change.Change{ver(1, "a"), ver(2, "b", 1)}, ids(2), false, false},
		{"the correction came first", []change.Change{ver(2, "b", 1), ver(1, "a")}, ids(2), false, false},
		{"two at once", []change.Change{ver(1, "a"), ver(2, "b", 1), ver(3, "c", 1)}, ids(2, 3), true, false},
		{"two at once that agree", []change.Change{ver(1, "a"), ver(2, "b", 1), ver(3, "b", 1)}, ids(2, 3), false, false},
		{"edit against clear", []change.Change{ver(1, "a"), ver(2, "", 1), ver(3, "b", 1)}, ids(2, 3), true, false},
		{"one is picked", []change.Change{ver(1, "a"), ver(2, "b", 1), ver(3, "c", 1), ver(4, "c", 2, 3)}, ids(4), false, false},
		{"a third that did not know of the pick", []change.Change{ver(1, "a"), ver(2, "b", 1), ver(3, "c", 1), ver(4, "c", 2, 3), ver(5, "d", 3)}, ids(4, 5), true, false},
		{"the one before is missing", []change.Change{ver(3, "c", 2)}, ids(3), false, true},
		{"one in the middle is missing", []change.Change{ver(1, "a"), ver(3, "c", 2)}, ids(1, 3), true, true},
	} {
		t.Run(tt.name, func(t *testing.T) {
			var vs []change.Change
			for _, v := range tt.vs {
				vs = merge.Apply(vs, v)
				vs = merge.Apply(vs, v)
			}
			f := merge.Evaluate(vs, merge.Closing{})
			require.ElementsMatch(t, tt.current, merge.IDs(f.Current))
			require.Equal(t, tt.conflict, f.Conflict())
			require.Equal(t, tt.lost, f.Lost)
			require.Empty(t, f.Late)
		})
	}
}

// A device knows what it wrote itself, also where the change between is missing.
func TestLaterInOneStreamReplaces(t *testing.T) {
	first, third := ver(1, "a"), ver(3, "c", 2)
	third.Stream, third.Seq = first.Stream, 7
	f := merge.Evaluate(merge.Apply(merge.Apply(nil, third), first), merge.Closing{})
	require.Equal(t, ids(3), merge.IDs(f.Current))
	require.True(t, f.Lost)
}

func TestClosedFields(t *testing.T) {
	for _, tt := range []struct {
		name          string
		vs            []change.Change
		seen          []change.ID
		current, late []change.ID
	}{
		{"seen", []change.Change{ver(1, "a")}, ids(1), ids(1), nil},
		{"seen, superseding another", []change.Change{ver(1, "a"), ver(2, "b", 1)}, ids(2), ids(2), nil},
		{"a first value that the closing did not see", []change.Change{ver(1, "a")}, nil, nil, ids(1)},
		{"a correction that the closing did not see leaves the value", []change.Change{ver(1, "a"), ver(2, "b", 1)}, ids(1), ids(1), ids(2)},
		{"two such corrections in a row are one", []change.Change{ver(1, "a"), ver(2, "b", 1), ver(3, "c", 2)}, ids(1), ids(1), ids(3)},
		{"an amendment", []change.Change{ver(1, "a"), amended(ver(2, "b", 1))}, ids(1), ids(2), nil},
		{"an amendment of a field that was empty", []change.Change{amended(ver(1, "a"))}, nil, ids(1), nil},
		{"late, then accepted", []change.Change{ver(1, "a"), ver(2, "b", 1), amended(ver(3, "b", 1, 2))}, ids(1), ids(3), nil},
		{"late, a row of two, the second accepted", []change.Change{ver(1, "a"), ver(2, "b", 1), ver(3, "c", 2), amended(ver(4, "c", 1, 3))}, ids(1), ids(4), nil},
		{"late after an amendment that did not know it", []change.Change{ver(1, "a"), amended(ver(2, "b", 1)), ver(3, "c", 1)}, ids(1), ids(2), ids(3)},
		{"a conflict at closing stays one", []change.Change{ver(1, "a"), ver(2, "b")}, ids(1, 2), ids(1, 2), nil},
		{"amended twice at once", []change.Change{ver(1, "a"), amended(ver(2, "b", 1)), amended(ver(3, "c", 1))}, ids(1), ids(2, 3), nil},
	} {
		t.Run(tt.name, func(t *testing.T) {
			closing := ver(99, "closed")
			closing.Field, closing.Seen = change.FieldClosed, tt.seen
			c := merge.ClosingOf([]change.Change{closing})
			require.True(t, c.Closed)
			var vs []change.Change
			for _, v := range slices.Backward(tt.vs) {
				vs = merge.Apply(vs, v)
			}
			f := merge.Evaluate(vs, c)
			require.ElementsMatch(t, tt.current, merge.IDs(f.Current), "current")
			require.ElementsMatch(t, tt.late, merge.IDs(f.Late), "late")
		})
	}
}

func TestConcurrentClosingsSeeTogether(t *testing.T) {
	a, b := ver(98, "by A"), ver(99, "by B")
	a.Field, b.Field = change.FieldClosed, change.FieldClosed
	a.Seen, b.Seen = ids(1), ids(2)
	c := merge.ClosingOf([]change.Change{a, b})
	f := merge.Evaluate([]change.Change{ver(1, "x"), ver(2, "y", 1), ver(3, "z", 2)}, c)
	require.Equal(t, ids(2), merge.IDs(f.Current))
	require.Equal(t, ids(3), merge.IDs(f.Late))
}

func TestComponents(t *testing.T) {
	p := func(n byte) exam.ID { return exam.ID{n} }
	c := merge.Components([][2]exam.ID{{p(3), p(2)}, {p(5), p(4)}, {p(2), p(4)}, {p(8), p(7)}})
	require.Equal(t, map[exam.ID]exam.ID{p(2): p(2), p(3): p(2), p(4): p(2), p(5): p(2), p(7): p(7), p(8): p(7)}, c)
	require.Equal(t, []exam.ID{p(2), p(3), p(4), p(5)}, merge.Members(c)[p(2)])

	patient, k := merge.EdgeKey(p(9), p(4))
	require.Equal(t, p(4), patient)
	a, b, ok := merge.EdgeEnds(k)
	require.True(t, ok)
	require.Equal(t, [2]exam.ID{p(4), p(9)}, [2]exam.ID{a, b})
	_, again := merge.EdgeKey(p(4), p(9))
	require.Equal(t, k, again)
}

func TestPartingLeavesOtherEdges(t *testing.T) {
	var s merge.State
	edge := func(n byte, a, b exam.ID, value string, supersedes ...byte) change.Change {
		c := ver(n, value, supersedes...)
		patient, k := merge.EdgeKey(a, b)
		c.Patient, c.Kind, c.Record, c.Field = patient, k.Kind, k.Record, k.Field
		return c
	}
	x, y, z := exam.ID{1}, exam.ID{2}, exam.ID{3}
	s.Add(edge(1, x, y, "join"), edge(2, y, z, "join"))
	require.Equal(t, x, s.Components()[z])
	s.Add(edge(3, y, x, "", 1))
	require.Equal(t, y, s.Components()[z])
	require.NotContains(t, s.Components(), x)
}

func TestGaps(t *testing.T) {
	var spans []merge.Span
	for _, s := range []merge.Span{{5, 6}, {1, 2}, {9, 9}, {7, 7}, {6, 6}} {
		spans = merge.AddSpan(spans, s)
	}
	require.Equal(t, []merge.Span{{1, 2}, {5, 7}, {9, 9}}, spans)
	s := change.Stream{}
	require.Equal(t, []merge.Gap{{s, 3, 4}, {s, 8, 8}, {s, 10, 12}}, merge.Gaps(s, spans, 12))
	require.Empty(t, merge.Gaps(s, []merge.Span{{1, 4}}, 4))

	known := []change.Change{{Seq: 2, Before: change.PreviousOf(1)}, {Seq: 9, Before: change.PreviousOf(2)}, {Seq: 20}}
	require.False(t, merge.Gap{First: 3, Last: 5}.MayTouch(known))
	require.True(t, merge.Gap{First: 2, Last: 5}.MayTouch(known))
	require.True(t, merge.Gap{First: 10, Last: 12}.MayTouch(known), "the writer did not say")
	require.True(t, merge.Gap{First: 30, Last: 31}.MayTouch(known), "nothing after the gap")
}

func TestAddSpanIsASet(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		have := map[uint64]bool{}
		var spans []merge.Span
		for _, first := range rapid.SliceOfN(rapid.Uint64Range(1, 40), 0, 20).Draw(t, "firsts") {
			last := first + rapid.Uint64Range(0, 4).Draw(t, "more")
			spans = merge.AddSpan(spans, merge.Span{First: first, Last: last})
			for n := first; n <= last; n++ {
				have[n] = true
			}
		}
		got := map[uint64]bool{}
		for i, s := range spans {
			if i > 0 && spans[i-1].Last+1 >= s.First {
				t.Fatalf("spans touch: %v", spans)
			}
			for n := s.First; n <= s.Last; n++ {
				got[n] = true
			}
		}
		require.Equal(t, have, got)
	})
}
