package storage

import (
	"bytes"
	"slices"
	"sync"
	"sync/atomic"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/merge"
)

// Nearly every field of nearly every visit has one value and no history. Such visits are read
// straight from their encoding, without a change.Change for each of their fields; a field
// with more than one version goes the usual way.

// peekKey reads which record an encoding is of.
func peekKey(plain []byte) (recordKey, error) {
	r := reader{b: plain}
	k := recordKey{kind: Kind(r.uvarint())}
	k.patient, k.id = r.id(), r.id()
	if r.bad {
		return k, errRecord
	}
	return k, nil
}

// skim is one stored version, as far as it is needed to see whether it counts.
type skim struct {
	id      []byte
	cleared bool
	act     change.Act
	value   []byte
}

func (r *reader) skim(h *head) (s skim) {
	var flags byte
	if x := r.take(1); x != nil {
		flags = x[0]
	}
	s.id = r.take(16)
	r.uvarint() // time
	r.uvarint() // stream
	r.uvarint() // number
	r.uvarint() // examiner
	s.value = r.bytes()
	s.cleared = len(s.value) == 0
	if flags&hasSupersedes != 0 {
		r.take(uint64(r.count(16)) * 16)
	}
	if flags&hasAct != 0 {
		if x := r.take(1); x != nil {
			s.act = change.Act(x[0])
		}
	}
	if flags&hasReason != 0 {
		r.bytes()
	}
	if flags&hasSeen != 0 {
		r.take(uint64(r.count(16)) * 16)
	}
	if flags&hasBefore != 0 {
		r.uvarint()
	}
	if flags&hasExtra != 0 {
		r.bytes()
	}
	return s
}

// quickVisit reads a visit from its encoding. It returns false where the visit needs the usual
// way: it is no visit, it was amended, a field has several versions in question, entries may be missing.
func (a *assembler) quickVisit(plain []byte) (v exam.Visit, ok bool, err error) {
	if len(a.gaps) > 0 {
		return v, false, nil
	}
	r := reader{b: plain}
	h := r.head()
	if r.bad {
		return v, false, errRecord
	}
	if h.kind != KindVisit {
		return v, false, nil
	}
	n := r.count(2)
	fields := r.b
	// The closing first: it rules what counts.
	var seen []change.ID
	var closings []change.Change
	closed := false
	for range n {
		name := r.bytes()
		versions := r.count(20)
		if bytes.Equal(name, closedName) {
			for range versions {
				var c change.Change
				r.version(&c, &h)
				closings = append(closings, c)
				if !c.Cleared() {
					closed = true
					seen = append(seen, c.Seen...)
				}
			}
			if versions > 1 {
				slices.SortFunc(seen, change.ID.Compare)
			}
			break
		}
		if bytes.Compare(name, closedName) > 0 {
			break // fields stand in the order of their names
		}
		for range versions {
			r.skim(&h)
		}
	}
	if r.bad {
		return v, false, errRecord
	}
	r.b = fields
	v.ID, v.Patient = h.id, h.patient
	v.Findings = make([]exam.Finding, 0, n)
	for range n {
		name := r.bytes()
		versions := r.count(20)
		start := r.b
		if versions == 1 {
			s := r.skim(&h)
			if r.bad {
				return v, false, errRecord
			}
			if s.act.AfterClosing() {
				return v, false, nil
			}
			if s.cleared {
				continue
			}
			if closed && !bytes.Equal(name, closedName) {
				if _, there := slices.BinarySearchFunc(seen, s.id, func(id change.ID, x []byte) int { return bytes.Compare(id[:], x) }); !there {
					return v, false, nil // arrived after closing
				}
			}
			if rest, cell := bytes.CutPrefix(name, findingName); cell {
				k, err := cellOf(rest)
				if err == nil {
					var f exam.Finding
					if f, err = decodeFinding(k, s.value); err == nil {
						v.Findings = append(v.Findings, f)
					}
				}
				if err != nil {
					return v, false, nil // told by the usual way
				}
				continue
			}
			if setVisit(&v, string(name), s.value) != nil {
				return v, false, nil
			}
			continue
		}
		// Several versions: worked out as always.
		r.b = start
		vs := make([]change.Change, versions)
		for k := range vs {
			r.version(&vs[k], &h)
			vs[k].Field = string(name)
			if vs[k].Act.AfterClosing() {
				return v, false, nil
			}
		}
		if r.bad {
			return v, false, errRecord
		}
		closing := merge.Closing{}
		if closed && !bytes.Equal(name, closedName) {
			closing = merge.ClosingOf(closings)
		}
		st := merge.Evaluate(vs, closing)
		if st.Conflict() || len(st.Late) > 0 || len(st.Current) == 0 {
			return v, false, nil
		}
		last := st.Current[len(st.Current)-1]
		if last.Cleared() {
			continue
		}
		if setVisit(&v, string(name), last.Value) != nil {
			return v, false, nil
		}
	}
	if r.bad || len(r.b) > 0 {
		return v, false, errRecord
	}
	if len(v.Findings) == 0 {
		v.Findings = nil
	}
	settleVisit(&v)
	return v, true, nil
}

var (
	closedName  = []byte(fieldClosed)
	findingName = []byte(fieldFinding)
)

// The names of cells are few and read often: their meaning is kept.
var (
	cellsRead atomic.Pointer[map[string]exam.Key]
	cellsLock sync.Mutex
)

const mostCells = 4096 // names that are kept; the vocabulary has some hundreds

func cellOf(name []byte) (exam.Key, error) {
	if m := cellsRead.Load(); m != nil {
		if k, ok := (*m)[string(name)]; ok {
			return k, nil
		}
	}
	return parseCell(string(name))
}

// parseCell is exam.ParseKey with a memory.
func parseCell(name string) (exam.Key, error) {
	m := cellsRead.Load()
	if m != nil {
		if k, ok := (*m)[name]; ok {
			return k, nil
		}
	}
	k, err := exam.ParseKey(name)
	if err != nil {
		return k, err
	}
	cellsLock.Lock()
	defer cellsLock.Unlock()
	next := map[string]exam.Key{}
	if m = cellsRead.Load(); m != nil {
		if len(*m) >= mostCells {
			return k, nil
		}
		for n, x := range *m {
			next[n] = x
		}
	}
	next[name] = k
	cellsRead.Store(&next)
	return k, nil
}
