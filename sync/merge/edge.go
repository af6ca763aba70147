package merge

import (
	"bytes"
	"slices"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
)

// EdgeKey returns the field that says whether two patients are one animal: the smaller id is
// the change's patient and stands in the field's name, the greater one is the record.
func EdgeKey(a, b exam.ID) (patient exam.ID, k Key) {
	if bytes.Compare(a[:], b[:]) > 0 {
		a, b = b, a
	}
	return a, Key{change.KindEdge, b, "same-as/" + a.String()}
}

// EdgeEnds reads the two ids of an edge, the smaller one first; false for another kind of
// field or a malformed one.
func EdgeEnds(k Key) (a, b exam.ID, ok bool) {
	const prefix = "same-as/"
	if k.Kind != change.KindEdge || len(k.Field) != len(prefix)+36 || k.Field[:len(prefix)] != prefix {
		return a, b, false
	}
	a, err := exam.ParseID(k.Field[len(prefix):])
	if err != nil || a.String() != k.Field[len(prefix):] || bytes.Compare(a[:], k.Record[:]) >= 0 {
		return a, b, false
	}
	return a, k.Record, true
}

// Joined reports whether an edge's field joins its ends: at least one current head says so. If
// one device joins while another parts, the two stay joined, and the field is a conflict.
func Joined(f Field) bool {
	for _, v := range f.Current {
		if !v.Cleared() {
			return true
		}
	}
	return false
}

// Components puts patients together along edges. It maps every id that stands in an edge to the
// smallest id of its connected component.
func Components(edges [][2]exam.ID) map[exam.ID]exam.ID {
	parent := map[exam.ID]exam.ID{}
	var root func(exam.ID) exam.ID
	root = func(id exam.ID) exam.ID {
		p, ok := parent[id]
		if !ok {
			parent[id] = id
			return id
		}
		if p == id {
			return id
		}
		r := root(p)
		parent[id] = r
		return r
	}
	for _, e := range edges {
		a, b := root(e[0]), root(e[1])
		if bytes.Compare(a[:], b[:]) > 0 {
			a, b = b, a
		}
		parent[b] = a
	}
	out := make(map[exam.ID]exam.ID, len(parent))
	for id := range parent {
		out[id] = root(id)
	}
	return out
}

// Members turns the result of Components round: the ids under each smallest id, ascending.
func Members(components map[exam.ID]exam.ID) map[exam.ID][]exam.ID {
	out := map[exam.ID][]exam.ID{}
	for id, r := range components {
		out[r] = append(out[r], id)
	}
	for _, ids := range out {
		slices.SortFunc(ids, func(a, b exam.ID) int { return bytes.Compare(a[:], b[:]) })
	}
	return out
}
