package merge_test

import (
	"encoding/hex"
	"fmt"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/internal/vector"
	"cordwalk.example/cordwalk/sync/merge"
)

func mergeVectors(t *testing.T) map[string]vector.Vector {
	closing := func(n byte, seen ...byte) change.Change {
		c := ver(n, "\xf5")
		c.Field, c.Seen = change.FieldClosed, ids(seen...)
		return c
	}
	edge := func(n, a, b byte, value string, supersedes ...byte) change.Change {
		c := ver(n, value, supersedes...)
		patient, k := merge.EdgeKey(exam.ID{a}, exam.ID{b})
		c.Patient, c.Kind, c.Record, c.Field = patient, k.Kind, k.Record, k.Field
		return c
	}
	third := ver(3, "c", 2)
	third.Stream, third.Seq = ver(1, "").Stream, 7
	out := map[string]vector.Vector{}
	add := func(name, rule string, cs ...change.Change) {
		var v vector.Vector
		v.Text("rule", "%s", rule)
		var s merge.State
		for _, c := range cs {
			b, err := change.Marshal(c)
			require.NoError(t, err)
			v.Hex("change", b)
			s.Add(c)
		}
		for _, line := range describe(&s) {
			v.Text("state", "%s", line)
		}
		v.Text("hash", "%s", s.Hash())
		out[name] = v
	}
	add("empty", "no changes")
	add("correction", "a change that is superseded is not current, in whatever order they come", ver(2, "b", 1), ver(1, "a"))
	add("conflict", "two at once stay side by side", ver(1, "a"), ver(2, "b", 1), ver(3, "c", 1))
	add("agreement", "two at once with the same value are no conflict", ver(1, "a"), ver(2, "b", 1), ver(3, "b", 1))
	add("pick", "picking is a change that supersedes all heads", ver(1, "a"), ver(2, "b", 1), ver(3, "c", 1), ver(4, "c", 2, 3))
	add("same-stream", "a device's later change replaces its earlier one although the one between is missing", ver(1, "a"), third)
	add("late", "a correction that the closing did not see leaves the value", closing(9, 1), ver(1, "a"), ver(2, "b", 1))
	add("accepted", "accepting a late value is an act with a reason", closing(9, 1), ver(1, "a"), ver(2, "b", 1), amended(ver(3, "b", 1, 2)))
	add("amended-through", "an amendment settles what the change that it saw had superseded", closing(9, 1), ver(1, "a"), ver(2, "b", 1), amended(ver(3, "c", 2)))
	add("closings", "what any closing saw was seen", closing(8, 1), closing(9, 2), ver(1, "a"), ver(2, "b", 1), ver(3, "c", 2))
	add("join", "patients in one connected component are shown under the smallest id", edge(1, 5, 3, "\xf5"), edge(2, 5, 9, "\xf5"))
	add("part", "parting takes one edge away", edge(1, 5, 3, "\xf5"), edge(2, 5, 9, "\xf5"), edge(4, 3, 5, "", 1))
	add("part-against-join", "an edge holds while one head says so", edge(1, 5, 3, "\xf5"), edge(2, 5, 3, "", 1), edge(4, 3, 5, "\xf5", 1))
	return out
}

// describe writes a state as the vectors do.
func describe(s *merge.State) (out []string) {
	short := func(vs []merge.Version) string {
		var parts []string
		for _, id := range merge.IDs(vs) {
			parts = append(parts, hex.EncodeToString(id[15:]))
		}
		return strings.Join(parts, ",")
	}
	for _, k := range s.Keys() {
		f := s.Field(k)
		line := fmt.Sprintf("%d %s %s current=%s late=%s", k.Kind, k.Record, k.Field, short(f.Current), short(f.Late))
		if f.Conflict() {
			line += " conflict"
		}
		if f.Lost {
			line += " lost"
		}
		out = append(out, line)
		if a, b, ok := merge.EdgeEnds(k); ok {
			c := s.Components()
			out = append(out, fmt.Sprintf("shown %s under %s and %s under %s", a, merge.Patient(c, a), b, merge.Patient(c, b)))
		}
	}
	return out
}

func TestMergeVectors(t *testing.T) {
	for name, v := range vector.Check(t, "merge", mergeVectors(t)) {
		t.Run(name, func(t *testing.T) {
			var cs []change.Change
			for _, text := range v.All("change") {
				b, err := hex.DecodeString(text)
				require.NoError(t, err)
				c, err := change.Unmarshal(b)
				require.NoError(t, err)
				cs = append(cs, c)
			}
			var forth, back merge.State
			for i := range cs {
				forth.Add(cs[i])
				back.Add(cs[len(cs)-1-i])
			}
			for _, s := range []*merge.State{&forth, &back} {
				require.Equal(t, v.All("state"), describe(s))
				require.Equal(t, v.Get("hash"), s.Hash().String())
			}
		})
	}
}
