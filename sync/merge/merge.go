// Package merge turns changes into the current state of each field, the same on every device,
// whatever the order in which the changes arrived and however often.
//
// A change is current (a head) while no other change supersedes it, and no later one of its own
// stream sets its field. Several heads with
// different values are a conflict: all of them stay until a person picks one, and picking is
// itself a change. Nothing is ever dropped: the state of a field is the set of all its
// changes, and merging two states is the union of two sets.
//
// A closing of a visit names the heads that the examiner saw. What an unaware device wrote
// at the same time does not count until it is accepted: see Field.
//
// No clock takes part. Where an order is needed, for display and for hashes, it is that of
// time, sequence and id.
package merge

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"math/bits"
	"slices"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
)

// Rules is the version of the rules in this package. State hashes are compared only between
// devices with the same rules.
const Rules = 1

// Version is one value that a field has or had: the change that set it.
type Version = change.Change

// Key names a field.
type Key struct {
	Kind   change.Kind
	Record exam.ID
	Field  string
}

// KeyOf returns the field that a change touches.
func KeyOf(c change.Change) Key { return Key{c.Kind, c.Record, c.Field} }

// Compare orders keys by kind, record, field.
func (k Key) Compare(l Key) int {
	if k.Kind != l.Kind {
		return int(k.Kind) - int(l.Kind)
	}
	if c := bytes.Compare(k.Record[:], l.Record[:]); c != 0 {
		return c
	}
	return bytes.Compare([]byte(k.Field), []byte(l.Field))
}

// Apply returns the versions of a field with c among them, in the order of Version.Compare.
// It does not change vs. A change that is there already is not added again: the result is
// the same whatever the order of calls. All versions must be of one field.
func Apply(vs []Version, c change.Change) []Version {
	for _, v := range vs {
		if v.ID == c.ID {
			if same(v, c) {
				return vs
			}
			// Two changes under one id: only a faulty or hostile writer does that. Both are
			// kept, in an order that every device finds.
		}
	}
	at, _ := slices.BinarySearchFunc(vs, c, order)
	out := make([]Version, 0, len(vs)+1)
	out = append(out, vs[:at]...)
	out = append(out, c)
	return append(out, vs[at:]...)
}

// order is Version.Compare, and by the encoding where one id was used twice.
func order(a, b Version) int {
	if c := a.Compare(b); c != 0 {
		return c
	}
	return bytes.Compare(encode(a), encode(b))
}

func same(a, b Version) bool { return a.Compare(b) == 0 && bytes.Equal(encode(a), encode(b)) }

func encode(v Version) []byte {
	b, err := change.Marshal(v)
	if err != nil {
		// It came out of a valid batch, so it encodes; a test's loose change may not.
		return v.ID[:]
	}
	return b
}

// Heads returns the versions that no version in vs supersedes, in order. It is the plain rule;
// Field also minds closing.
func Heads(vs []Version) []Version {
	return heads(vs, func(Version) bool { return true })
}

// heads returns the versions among those that count which no other one that counts replaces:
// by naming it as superseded, or by coming later in the same stream, since a device always
// knows what it wrote itself. The second rule keeps a missing change of another device from
// looking like a conflict of this one with itself.
func heads(vs []Version, counts func(Version) bool) []Version {
	if len(vs) == 1 && counts(vs[0]) {
		return vs
	}
	gone := map[change.ID]bool{}
	last := map[change.Stream]uint64{}
	for _, v := range vs {
		if counts(v) {
			for _, id := range v.Supersedes {
				gone[id] = true
			}
			last[v.Stream] = max(last[v.Stream], v.Seq)
		}
	}
	var hs []Version
	for _, v := range vs {
		if counts(v) && !gone[v.ID] && v.Seq == last[v.Stream] {
			hs = append(hs, v)
		}
	}
	return hs
}

// IDs returns the ids of versions in ascending order, as Supersedes and Seen want them.
func IDs(vs []Version) []change.ID {
	ids := make([]change.ID, len(vs))
	for i, v := range vs {
		ids[i] = v.ID
	}
	slices.SortFunc(ids, change.ID.Compare)
	return slices.Compact(ids)
}

// Field is the state of one field.
type Field struct {
	// Current are the values that count: none (never set), one, or several in conflict.
	// A head that cleared the field stands here too, with an empty Value.
	Current []Version
	// Late are values that arrived after closing: they do not count until they are accepted.
	Late []Version
	// Lost is true if a change superseded one that is not here (yet): the history has a hole.
	// Several current values may then be no conflict: the missing change may have replaced some.
	Lost bool
}

// Conflict reports whether several current versions differ in value. Two devices that wrote the
// same value agree.
func (f Field) Conflict() bool {
	for _, v := range f.Current[min(1, len(f.Current)):] {
		if !bytes.Equal(v.Value, f.Current[0].Value) {
			return true
		}
	}
	return false
}

// Value returns the value that counts. ok is false where there is none: never set, cleared, or
// in conflict.
func (f Field) Value() (value []byte, ok bool) {
	if len(f.Current) == 0 || f.Conflict() || f.Current[0].Cleared() {
		return nil, false
	}
	return f.Current[0].Value, true
}

// Supersede returns what the next change of this field names as superseded: all current and
// late heads, so that it settles a conflict and a late arrival alike.
func (f Field) Supersede() []change.ID {
	return IDs(append(slices.Clone(f.Current), f.Late...))
}

// Closing is what the field change.FieldClosed of a visit says: whether the visit is closed,
// and what the closing examiners saw. The zero Closing is an open visit.
type Closing struct {
	Closed bool
	seen   map[change.ID]bool
}

// ClosingOf reads a visit's closing from the versions of its field change.FieldClosed. Closing
// cannot be undone: every closing that ever arrived counts, and what any of their
// examiners saw was seen.
func ClosingOf(vs []Version) Closing {
	var c Closing
	for _, v := range vs {
		if v.Cleared() {
			continue
		}
		if c.seen == nil {
			c.seen = map[change.ID]bool{}
		}
		c.Closed = true
		for _, id := range v.Seen {
			c.seen[id] = true
		}
	}
	return c
}

// Evaluate works out what counts in a field of a record. For fields of an open visit and of
// other records than visits, closing is the zero Closing.
//
// In a closed visit a version counts if the closing saw it as a head, if it was superseded on
// the way to one that was seen, or if its writer knew of the closing (amended, accepted, admitted).
// The rest is late: a late version neither counts nor supersedes what counts.
func Evaluate(vs []Version, closing Closing) Field {
	var f Field
	if !closing.Closed {
		f.Current = Heads(vs)
	} else {
		f.Current, f.Late = closedHeads(vs, closing)
	}
	f.Lost = lost(vs)
	return f
}

func closedHeads(vs []Version, closing Closing) (current, late []Version) {
	byID := make(map[change.ID][]Version, len(vs))
	for _, v := range vs {
		byID[v.ID] = append(byID[v.ID], v)
	}
	// What was seen carries all that it had superseded with it.
	seen := map[change.ID]bool{}
	settled := map[change.ID]bool{}
	for _, v := range vs {
		if closing.seen[v.ID] {
			reach(v.ID, byID, seen)
		}
		// An amendment counts. What it supersedes, and what that had superseded on its way, was
		// settled by a person: it is neither current nor late any more.
		if v.Act.AfterClosing() {
			for _, id := range v.Supersedes {
				reach(id, byID, settled)
			}
		}
	}
	counts := func(v Version) bool { return seen[v.ID] || v.Act.AfterClosing() }
	for _, v := range heads(vs, counts) {
		if !settled[v.ID] {
			current = append(current, v)
		}
	}
	for _, v := range heads(vs, func(v Version) bool { return !counts(v) }) {
		if !settled[v.ID] {
			late = append(late, v)
		}
	}
	return current, late
}

// reach adds id, and all that it superseded on its way, to set.
func reach(id change.ID, byID map[change.ID][]Version, set map[change.ID]bool) {
	for stack := []change.ID{id}; len(stack) > 0; {
		id := stack[len(stack)-1]
		stack = stack[:len(stack)-1]
		if set[id] {
			continue
		}
		set[id] = true
		for _, v := range byID[id] {
			stack = append(stack, v.Supersedes...)
		}
	}
}

// lost reports whether a version names one that is not there.
func lost(vs []Version) bool {
	if len(vs) == 1 {
		return len(vs[0].Supersedes) > 0
	}
	have := make(map[change.ID]bool, len(vs))
	for _, v := range vs {
		have[v.ID] = true
	}
	for _, v := range vs {
		for _, id := range v.Supersedes {
			if !have[id] {
				return true
			}
		}
	}
	return false
}

// Sum is a hash of the state of a site that can be kept up to date field by field, in any
// order: the sum of the hashes of its fields, as a number of 256 bits. It guards against
// faults, not against members, who hold the keys anyway. The zero Sum is that of no fields.
type Sum [32]byte

// Add returns the sum with a field's hash added.
func (s Sum) Add(h [32]byte) Sum { return s.combine(h, bits.Add64) }

// Sub returns the sum with a field's hash taken away.
func (s Sum) Sub(h [32]byte) Sum { return s.combine(h, bits.Sub64) }

func (s Sum) combine(h [32]byte, op func(x, y, carry uint64) (uint64, uint64)) Sum {
	var carry uint64
	for i := len(s) - 8; i >= 0; i -= 8 {
		var n uint64
		n, carry = op(binary.BigEndian.Uint64(s[i:]), binary.BigEndian.Uint64(h[i:]), carry)
		binary.BigEndian.PutUint64(s[i:], n)
	}
	return s
}

// String returns 64 hexadecimal digits.
func (s Sum) String() string { return hex.EncodeToString(s[:]) }

// FieldHash returns the hash of a field's state: its key, all its versions, and which of them
// are heads by the rules of this version. The zero hash stands for no versions. The name of a version's device
// is left out: of a forked stream each device keeps the branch that it met first under the stream's own name, and
// the state is the same whichever that was.
func FieldHash(k Key, vs []Version) [32]byte {
	if len(vs) == 0 {
		return [32]byte{}
	}
	h := sha256.New()
	var n [8]byte
	put := func(b []byte) {
		binary.BigEndian.PutUint64(n[:], uint64(len(b)))
		h.Write(n[:])
		h.Write(b)
	}
	put([]byte{0, Rules})
	put(binary.BigEndian.AppendUint16(nil, uint16(k.Kind)))
	put(k.Record[:])
	put([]byte(k.Field))
	for _, v := range vs {
		v.Stream.Device = change.Incarnation{}
		put(encode(v))
	}
	for _, v := range Heads(vs) {
		put(v.ID[:])
	}
	return [32]byte(h.Sum(nil))
}
