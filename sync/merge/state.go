package merge

import (
	"maps"
	"slices"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
)

// State is the merged state of one site in memory: the reference that an index is checked
// against, and what tests compare. Its zero value is empty and ready.
type State struct {
	fields map[Key][]Version
	sum    Sum
}

// Add merges changes into the state.
func (s *State) Add(cs ...change.Change) {
	if s.fields == nil {
		s.fields = map[Key][]Version{}
	}
	for _, c := range cs {
		k := KeyOf(c)
		before := s.fields[k]
		after := Apply(before, c)
		if len(after) == len(before) {
			continue
		}
		s.sum = s.sum.Sub(FieldHash(k, before)).Add(FieldHash(k, after))
		s.fields[k] = after
	}
}

// Merge adds everything that other holds.
func (s *State) Merge(other *State) {
	for _, vs := range other.fields {
		s.Add(vs...)
	}
}

// Keys returns the keys of all fields, in order.
func (s *State) Keys() []Key {
	return slices.SortedFunc(maps.Keys(s.fields), Key.Compare)
}

// Versions returns all versions of a field, in order.
func (s *State) Versions(k Key) []Version { return slices.Clone(s.fields[k]) }

// Field returns the state of a field, with the visit's closing minded.
func (s *State) Field(k Key) Field {
	return Evaluate(s.fields[k], s.Closing(k))
}

// Closing returns the closing that rules a field: that of its visit, none for the closing
// itself and for other kinds of record.
func (s *State) Closing(k Key) Closing {
	if k.Kind != change.KindVisit || k.Field == change.FieldClosed {
		return Closing{}
	}
	return ClosingOf(s.fields[Key{change.KindVisit, k.Record, change.FieldClosed}])
}

// SeenBy returns what a closing of a visit made now must name as Seen: the heads of all its
// fields but the closing itself.
func (s *State) SeenBy(visit exam.ID) []change.ID {
	var hs []Version
	for k, vs := range s.fields {
		if k.Kind == change.KindVisit && k.Record == visit && k.Field != change.FieldClosed {
			hs = append(hs, Heads(vs)...)
		}
	}
	return IDs(hs)
}

// Components returns the joined patients; see the function Components.
func (s *State) Components() map[exam.ID]exam.ID {
	var edges [][2]exam.ID
	for k := range s.fields {
		if a, b, ok := EdgeEnds(k); ok && Joined(s.Field(k)) {
			edges = append(edges, [2]exam.ID{a, b})
		}
	}
	return Components(edges)
}

// Hash returns the hash of the state. Equal sets of changes have equal hashes, whatever the
// order in which they came.
func (s *State) Hash() Sum { return s.sum }
