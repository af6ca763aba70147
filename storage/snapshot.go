package storage

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"path"
	"path/filepath"

	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// SnapshotFile is a file of a store that belongs into a backup, and how much of it.
type SnapshotFile struct {
	Name string // within the store's folder, with slashes
	Size int64
}

// Folders of a store whose files belong into a backup whole. The index does not: it can be made anew.
var backedUp = []string{"files", "members", "owners"}

// Snapshot names what belongs into a backup made now. The journal only grows, so what it names
// stays as it is while it is copied; entries made later are not in it.
func (s *Store) Snapshot(context.Context) ([]SnapshotFile, error) {
	out, err := s.snapshot()
	return out, explain("looking through the practice for a backup", err)
}

func (s *Store) snapshot() ([]SnapshotFile, error) {
	s.exch.Lock()
	defer s.exch.Unlock()
	ends := map[string]int64{}
	for x, r := range s.recv {
		if r.out.file != nil {
			if err := r.out.file.SyncData(); err != nil {
				return nil, err
			}
			ends[segmentName(x, r.out.number)] = r.out.end
		}
	}
	s.write.Lock()
	defer s.write.Unlock()
	s.mu.RLock()
	shut := s.shut
	s.mu.RUnlock()
	if shut {
		return nil, ErrShut
	}
	if s.out.file != nil {
		ends[segmentName(s.out.stream, s.out.number)] = s.out.end
	}
	out := []SnapshotFile{}
	add := func(dir string, e disk.Entry, size int64) {
		if !e.Dir && filepath.Ext(e.Name) != filepath.Ext(disk.Temporary("x")) {
			out = append(out, SnapshotFile{path.Join(dir, e.Name), size})
		}
	}
	for _, name := range []string{identityFile, ownersFile, "views.log"} {
		e, err := s.fs.Stat(filepath.Join(s.dir, name))
		if errors.Is(err, fs.ErrNotExist) {
			continue
		}
		if err != nil {
			return nil, err
		}
		e.Name = name
		add("", e, e.Size)
	}
	es, err := s.fs.List(filepath.Join(s.dir, journalDir))
	if err != nil {
		return nil, err
	}
	for _, e := range es {
		size := e.Size
		if end, ok := ends[e.Name]; ok {
			size = end
		}
		add(journalDir, e, size)
	}
	for _, dir := range backedUp {
		es, err := s.fs.List(filepath.Join(s.dir, dir))
		if errors.Is(err, fs.ErrNotExist) {
			continue
		}
		if err != nil {
			return nil, err
		}
		for _, e := range es {
			add(dir, e, e.Size)
		}
	}
	return out, nil
}

// Rekey gives a store that is not open other keys for its device, where the old ones cannot be opened
// any more, and a new incarnation. The bag must hold the practice's epochs.
func Rekey(dir string, o Options, bag key.Bag, inc change.Incarnation) error {
	o = o.withDefaults()
	err := func() (err error) {
		if err := holdsPractice(o.Files, dir); err != nil {
			return err
		}
		lock, err := o.Files.Lock(filepath.Join(dir, lockFile), disk.Self(o.Program, o.Now()))
		if err != nil {
			return err
		}
		defer func() { err = errors.Join(err, lock.Unlock()) }()
		id, _, err := readIdentity(o.Files, dir)
		if err != nil {
			return err
		}
		site, err := id.stream()
		if err != nil {
			return err
		}
		fresh, _, err := newIdentity(o.Files, o.Unlock, o.Now(), &joined{bag, site.Site, inc})
		if err != nil {
			return err
		}
		fresh.Limits = id.Limits
		return writeIdentity(o.Files, dir, fresh)
	}()
	if err != nil {
		return fmt.Errorf("giving the practice new keys: %w", err)
	}
	return nil
}
