package disktest

import (
	"bytes"
	"fmt"
	"io/fs"
	"maps"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
)

type kind int

const (
	created kind = iota
	wrote
	grown
	synced
	syncFailed
	renamed
	removed
	madeDir
	syncedDir
	adopted
)

type event struct {
	kind  kind
	inode int
	name  string
	to    string
	at    int64
	data  []byte
}

// inodeState is a file's content: what is safe and what was done since.
type inodeState struct {
	safe    []byte
	pending []event // wrote and grown, in order
	doomed  []event // like pending, but a sync of them failed: a later sync does not cover them
}

// state is all that is on the disk, and what a power cut may take.
type state struct {
	files map[int]*inodeState
	names map[string]int // safe names, relative to the root; -1 for a folder
	dirty []event        // created, renamed, removed, madeDir, in order
}

const folder = -1

// Record begins to remember what happens under a folder, whose present content is taken as safe.
func (d *Disk) Record(root string) error {
	st := &state{files: map[int]*inodeState{}, names: map[string]int{}}
	inodes := map[string]int{}
	n := 0
	err := filepath.WalkDir(root, func(p string, e fs.DirEntry, err error) error {
		if err != nil || p == root {
			return err
		}
		rel, _ := filepath.Rel(root, p)
		if e.IsDir() {
			st.names[rel] = folder
			return nil
		}
		b, err := os.ReadFile(p)
		n++
		st.files[n] = &inodeState{safe: b}
		st.names[rel], inodes[p] = n, n
		return err
	})
	d.mu.Lock()
	defer d.mu.Unlock()
	d.root, d.start, d.log, d.inodes, d.next = root, st, nil, inodes, n
	return err
}

// Events returns how many events were recorded so far.
func (d *Disk) Events() int { d.mu.Lock(); defer d.mu.Unlock(); return len(d.log) }

func (s *state) file(n int) *inodeState {
	if s.files[n] == nil {
		s.files[n] = &inodeState{}
	}
	return s.files[n]
}

func (s *state) clone() *state {
	c := &state{files: make(map[int]*inodeState, len(s.files)), names: maps.Clone(s.names), dirty: slices.Clone(s.dirty)}
	for n, f := range s.files {
		c.files[n] = &inodeState{f.safe, slices.Clone(f.pending), slices.Clone(f.doomed)}
	}
	return c
}

func put(b []byte, at int64, data []byte) []byte {
	if need := at + int64(len(data)); int64(len(b)) < need {
		b = append(slices.Clip(b), make([]byte, need-int64(len(b)))...)
	} else {
		b = bytes.Clone(b)
	}
	copy(b[at:], data)
	return b
}

func grow(b []byte, size int64) []byte {
	if int64(len(b)) >= size {
		return b
	}
	return append(slices.Clip(b), make([]byte, size-int64(len(b)))...)
}

// step brings the state forward by one event.
func (s *state) step(root string, e event) {
	rel := func(p string) string { r, _ := filepath.Rel(root, p); return r }
	switch e.kind {
	case wrote, grown:
		f := s.file(e.inode)
		f.pending = append(f.pending, e)
	case synced:
		f := s.file(e.inode)
		for _, w := range f.pending {
			if w.kind == grown {
				f.safe = grow(f.safe, w.at)
			} else {
				f.safe = put(f.safe, w.at, w.data)
			}
		}
		f.pending = nil
	case syncFailed:
		f := s.file(e.inode)
		f.doomed = append(f.doomed, f.pending...)
		f.pending = nil
	case adopted:
		s.files[e.inode] = &inodeState{safe: e.data}
	case created, renamed, removed, madeDir:
		e.name = rel(e.name)
		if e.to != "" {
			e.to = rel(e.to)
		}
		s.dirty = append(s.dirty, e)
	case syncedDir:
		dir := rel(e.name)
		var keep []event
		for _, x := range s.dirty {
			if filepath.Dir(x.name) == dir || (x.to != "" && filepath.Dir(x.to) == dir) {
				s.apply(x)
			} else {
				keep = append(keep, x)
			}
		}
		s.dirty = keep
	}
}

func (s *state) apply(x event) {
	switch x.kind {
	case created:
		s.names[x.name] = x.inode
	case madeDir:
		s.names[x.name] = folder
	case removed:
		delete(s.names, x.name)
	case renamed:
		delete(s.names, x.name)
		s.names[x.to] = x.inode
	}
}

// Crash is one state that a power cut may leave.
type Crash struct {
	At    int    // events that had happened
	Words string // what was chosen
	files map[string][]byte
	dirs  []string
}

// Write puts the state into an empty folder.
func (c Crash) Write(dir string) error {
	for _, d := range c.dirs {
		if err := os.MkdirAll(filepath.Join(dir, d), 0o700); err != nil {
			return err
		}
	}
	for n, b := range c.files {
		if err := os.MkdirAll(filepath.Dir(filepath.Join(dir, n)), 0o700); err != nil {
			return err
		}
		if err := os.WriteFile(filepath.Join(dir, n), b, 0o600); err != nil {
			return err
		}
	}
	return nil
}

// Crashes calls f with states after each number of recorded events from first on: all of them
// where there are at most each of them, else the two extremes and a random choice. It stops at the
// first error.
func (d *Disk) Crashes(first, each int, rng *rand.Rand, f func(Crash) error) error {
	d.mu.Lock()
	log, s, root, exfat := slices.Clone(d.log), d.start.clone(), d.root, d.exfat
	d.mu.Unlock()
	for i := 0; ; i++ {
		if i >= first {
			if err := crashesOf(s, i, each, exfat, rng, f); err != nil {
				return err
			}
		}
		if i == len(log) {
			return nil
		}
		s.step(root, log[i])
	}
}

// choice is one thing that may have happened or not; ways counts the ways.
type choice struct{ ways int }

func crashesOf(s *state, at, each int, exfat bool, rng *rand.Rand, f func(Crash) error) error {
	cs := choices(s, exfat)
	total := 1
	for _, c := range cs {
		if total *= c.ways; total > each {
			break
		}
	}
	pick := make([]int, len(cs))
	if total <= each {
		for {
			if err := f(s.crash(at, pick, exfat)); err != nil {
				return err
			}
			k := 0
			for ; k < len(pick); k++ {
				if pick[k]++; pick[k] < cs[k].ways {
					break
				}
				pick[k] = 0
			}
			if k == len(pick) {
				return nil
			}
		}
	}
	for n := range each {
		for k, c := range cs {
			switch n {
			case 0:
				pick[k] = 0 // nothing of it
			case 1:
				pick[k] = c.ways - 1 // all of it
			default:
				pick[k] = rng.IntN(c.ways)
			}
		}
		if err := f(s.crash(at, pick, exfat)); err != nil {
			return err
		}
	}
	return nil
}

const sector = 512

// sectors lists the sectors that the pending events of a file touch, with how many touch each.
func (f *inodeState) sectors() (order []int64, touched map[int64]int, sizes []int64) {
	touched = map[int64]int{}
	sizes = []int64{int64(len(f.safe))}
	size := int64(len(f.safe))
	for _, e := range f.all() {
		end := e.at
		if e.kind == wrote {
			end += int64(len(e.data))
			for s := e.at / sector; s*sector < end; s++ {
				if touched[s] == 0 {
					order = append(order, s)
				}
				touched[s]++
			}
		}
		if end > size {
			size = end
			sizes = append(sizes, size)
		}
	}
	return order, touched, sizes
}

func (f *inodeState) all() []event { return append(slices.Clone(f.doomed), f.pending...) }

func sortedInodes(m map[int]*inodeState) []int { return slices.Sorted(maps.Keys(m)) }

// choices lists what a power cut decides: for each file its length and, for each sector, how
// many of the writes to it arrived; and how many of the names.
func choices(s *state, exfat bool) (cs []choice) {
	for _, n := range sortedInodes(s.files) {
		order, touched, sizes := s.files[n].sectors()
		if len(order) == 0 && len(sizes) == 1 {
			continue
		}
		cs = append(cs, choice{len(sizes)})
		for _, sec := range order {
			cs = append(cs, choice{touched[sec] + 1})
		}
	}
	if exfat {
		for _, e := range s.dirty {
			if e.kind == renamed {
				cs = append(cs, choice{4})
			} else {
				cs = append(cs, choice{2})
			}
		}
	} else if len(s.dirty) > 0 {
		cs = append(cs, choice{len(s.dirty) + 1})
	}
	return cs
}

// crash makes the state that the picks decide.
func (s *state) crash(at int, pick []int, exfat bool) Crash {
	c := Crash{At: at, files: map[string][]byte{}}
	content := map[int][]byte{}
	k := 0
	var words []string
	for _, n := range sortedInodes(s.files) {
		f := s.files[n]
		order, _, sizes := f.sectors()
		if len(order) == 0 && len(sizes) == 1 {
			content[n] = f.safe
			continue
		}
		size := sizes[pick[k]]
		words = append(words, fmt.Sprintf("file %d: %d of %d bytes", n, size, sizes[len(sizes)-1]))
		k++
		arrive := map[int64]int{}
		for _, sec := range order {
			arrive[sec] = pick[k]
			words = append(words, fmt.Sprintf("sector %d: %d", sec, pick[k]))
			k++
		}
		b := grow(bytes.Clone(f.safe), sizes[len(sizes)-1])
		seen := map[int64]int{}
		for _, e := range f.all() {
			if e.kind != wrote {
				continue
			}
			end := e.at + int64(len(e.data))
			for sec := e.at / sector; sec*sector < end; sec++ {
				if seen[sec]++; seen[sec] > arrive[sec] {
					continue
				}
				from, to := max(e.at, sec*sector), min(end, (sec+1)*sector)
				copy(b[from:to], e.data[from-e.at:to-e.at])
			}
		}
		content[n] = b[:size]
	}
	names := &state{names: maps.Clone(s.names)}
	if exfat {
		for _, e := range s.dirty {
			how := pick[k]
			k++
			if e.kind != renamed {
				if how == 1 {
					names.apply(e)
				}
				continue
			}
			switch how {
			case 1: // the target is gone, the source is not renamed yet
				delete(names.names, e.to)
			case 2: // both names
				names.names[e.to] = e.inode
			case 3:
				names.apply(e)
			}
			words = append(words, fmt.Sprintf("rename of %s: %d of 3", e.name, how))
		}
	} else if len(s.dirty) > 0 {
		for _, e := range s.dirty[:pick[k]] {
			names.apply(e)
		}
		words = append(words, fmt.Sprintf("%d of %d names", pick[k], len(s.dirty)))
	}
	for name, n := range names.names {
		if n == folder {
			c.dirs = append(c.dirs, name)
		} else {
			c.files[name] = content[n]
		}
	}
	c.Words = strings.Join(words, ", ")
	return c
}
