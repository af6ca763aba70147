package storage_test

import (
	"fmt"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"testing"

	"pgregory.net/rapid"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk/disktest"
	"cordwalk.example/cordwalk/storage/storagetest"
)

// model is what a store is to hold, as maps.
type model struct {
	dir      string
	s        *storage.Store
	names    map[exam.ID]string
	patients []exam.ID
	visits   []exam.ID
	of       map[exam.ID]exam.ID // visit to patient
	cells    map[exam.ID]map[exam.Key]int
	closed   map[exam.ID]bool
	amended  map[exam.ID]int
	joined   map[[2]exam.ID]bool
	n        int
}

func (m *model) apply(t *rapid.T, es ...storage.Edit) {
	if _, err := m.s.Apply(ctx, "A", es...); err != nil {
		t.Fatalf("saving: %v", err)
	}
}

func (m *model) visit(t *rapid.T) exam.ID {
	if len(m.visits) == 0 {
		t.Skip("no visit yet")
	}
	return rapid.SampledFrom(m.visits).Draw(t, "visit")
}

// NewPatient makes a patient.
func (m *model) NewPatient(t *rapid.T) {
	p := exam.Patient{ID: storage.NewID(), Name: fmt.Sprint("animal ", len(m.patients)), Species: exam.Dog}
	m.apply(t, storage.PatientEdits(exam.Patient{}, p)...)
	m.names[p.ID] = p.Name
	m.patients = append(m.patients, p.ID)
}

// Rename changes a patient's name.
func (m *model) Rename(t *rapid.T) {
	if len(m.patients) == 0 {
		t.Skip("no patient yet")
	}
	id := rapid.SampledFrom(m.patients).Draw(t, "patient")
	m.n++
	name := fmt.Sprint("renamed ", m.n)
	m.apply(t, storage.PatientEdits(exam.Patient{ID: id, Name: m.names[id]}, exam.Patient{ID: id, Name: name})...)
	m.names[id] = name
}

// NewVisit begins a visit.
func (m *model) NewVisit(t *rapid.T) {
	if len(m.patients) == 0 {
		t.Skip("no patient yet")
	}
	p := rapid.SampledFrom(m.patients).Draw(t, "patient")
	v := exam.Visit{ID: storage.NewID(), Patient: p, Examined: at("2026-03-02T10:15:00+01:00"), Examiner: "A"}
	m.apply(t, storage.VisitEdits(exam.Visit{}, v)...)
	m.visits = append(m.visits, v.ID)
	m.of[v.ID], m.cells[v.ID] = p, map[exam.Key]int{}
}

// Record fills, corrects or empties some cells in one action.
func (m *model) Record(t *rapid.T) {
	v := m.visit(t)
	var es []storage.Edit
	next := maps.Clone(m.cells[v])
	for range rapid.IntRange(1, 4).Draw(t, "cells") {
		k := rapid.SampledFrom(cells).Draw(t, "cell")
		if rapid.IntRange(0, 4).Draw(t, "clear") == 0 {
			es = append(es, storage.ClearFindingEdit(m.of[v], v, k))
			delete(next, k)
			continue
		}
		m.n++
		es = append(es, storage.FindingEdit(m.of[v], v, finding(k, int8(m.n%3), fmt.Sprint(m.n))))
		next[k] = m.n
	}
	if m.closed[v] {
		if _, err := m.s.Apply(ctx, "A", es...); err == nil && !maps.Equal(next, m.cells[v]) {
			t.Fatal("a closed visit was changed without a reason")
		}
		rec, err := m.s.Apply(ctx, "A", storage.AmendEdits(exam.Visit{ID: v}, "a slip", es...)...)
		if err != nil {
			t.Fatal(err)
		}
		m.amended[v] += int(rec.Last - rec.First + 1)
	} else {
		m.apply(t, es...)
	}
	m.cells[v] = next
}

// Finish closes a visit.
func (m *model) Finish(t *rapid.T) {
	v := m.visit(t)
	m.apply(t, storage.CloseEdit(m.of[v], v, at("2026-03-02T11:15:00+01:00")))
	m.closed[v] = true
}

// JoinOrPart says that two patients are one animal, or no longer.
func (m *model) JoinOrPart(t *rapid.T) {
	if len(m.patients) < 2 {
		t.Skip("too few patients")
	}
	two := []exam.ID{rapid.SampledFrom(m.patients).Draw(t, "one"), rapid.SampledFrom(m.patients).Draw(t, "other")}
	slices.SortFunc(two, func(a, b exam.ID) int { return slices.Compare(a[:], b[:]) })
	if two[0] == two[1] {
		t.Skip("the same")
	}
	key := [2]exam.ID{two[0], two[1]}
	if m.joined[key] {
		m.apply(t, storage.PartEdit(two[1], two[0])...)
	} else {
		m.apply(t, storage.JoinEdit(two[1], two[0])...)
	}
	m.joined[key] = !m.joined[key]
}

// Flush brings the index up to date.
func (m *model) Flush(t *rapid.T) {
	if err := m.s.Flush(); err != nil {
		t.Fatal(err)
	}
}

// Reopen closes the store, sometimes takes its index away, and opens it again.
func (m *model) Reopen(t *rapid.T) {
	if err := m.s.Close(); err != nil {
		t.Fatal(err)
	}
	switch rapid.IntRange(0, 3).Draw(t, "index") {
	case 0:
		if err := os.Remove(filepath.Join(m.dir, "index.db")); err != nil {
			t.Fatal(err)
		}
	case 1:
		if err := storage.Rebuild(ctx, m.dir, on(disktest.New())); err != nil {
			t.Fatal(err)
		}
	}
	var err error
	if m.s, err = storage.Open(m.dir, on(disktest.New())); err != nil {
		t.Fatal(err)
	}
}

func (m *model) root(id exam.ID) map[exam.ID]bool {
	in := map[exam.ID]bool{id: true}
	for grown := true; grown; {
		grown = false
		for e, on := range m.joined {
			if on && in[e[0]] != in[e[1]] {
				in[e[0]], in[e[1]], grown = true, true, true
			}
		}
	}
	return in
}

// Check compares the store with the model.
func (m *model) Check(t *rapid.T) {
	rows, err := m.s.Caseload(ctx)
	if err != nil {
		t.Fatal(err)
	}
	shown := map[exam.ID]int{}
	for _, r := range rows {
		shown[r.ID] = r.Visits
	}
	for _, id := range m.patients {
		together := m.root(id)
		smallest := slices.MinFunc(slices.Collect(maps.Keys(together)), func(a, b exam.ID) int { return slices.Compare(a[:], b[:]) })
		r, err := m.s.Patient(id)
		if err != nil {
			t.Fatal(err)
		}
		if r.Patient.ID != smallest || r.Patient.Name != m.names[smallest] || len(r.Conflicts)+len(r.Missing)+len(r.Unshown) > 0 {
			t.Fatalf("patient %s: %+v", id, r)
		}
		n := 0
		for _, v := range m.visits {
			if together[m.of[v]] {
				n++
			}
		}
		if len(r.Visits) != n || shown[smallest] != n {
			t.Fatalf("patient %s has %d visits, in the caseload %d, want %d", id, len(r.Visits), shown[smallest], n)
		}
		for _, v := range r.Visits {
			if got := notes(v); !maps.Equal(got, m.cells[v.ID]) {
				t.Fatalf("visit %s: got %v, want %v", v.ID, got, m.cells[v.ID])
			}
			if (v.State == exam.Closed) != m.closed[v.ID] || len(v.Amendments) != m.amended[v.ID] {
				t.Fatalf("visit %s: state %v, %d amendments", v.ID, v.State, len(v.Amendments))
			}
			one, err := m.s.Visit(v.ID)
			if err != nil || !maps.Equal(notes(one), m.cells[v.ID]) {
				t.Fatalf("visit %s by itself: %v, %v", v.ID, notes(one), err)
			}
		}
		if err := m.s.QuickAgrees(id); err != nil {
			t.Fatal(err)
		}
	}
}

// Random actions leave in a store what they leave in a map.
func TestStoreAgainstMap(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		dir, err := os.MkdirTemp(t.TempDir(), "m")
		if err != nil {
			rt.Fatal(err)
		}
		defer os.RemoveAll(dir)
		m := &model{dir: filepath.Join(dir, "p"), names: map[exam.ID]string{}, of: map[exam.ID]exam.ID{}, cells: map[exam.ID]map[exam.Key]int{},
			closed: map[exam.ID]bool{}, amended: map[exam.ID]int{}, joined: map[[2]exam.ID]bool{}}
		if m.s, err = storage.Create(m.dir, on(disktest.New())); err != nil {
			rt.Fatal(err)
		}
		actions := rapid.StateMachineActions(m)
		rt.Repeat(actions)
		if err := m.s.Close(); err != nil {
			rt.Fatal(err)
		}
		storagetest.Check(t, m.dir)
	})
}
