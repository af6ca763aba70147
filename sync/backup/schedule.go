package backup

import (
	"context"
	"errors"
	"fmt"
	"io"
	"path"
	"path/filepath"
	"slices"
	"time"

	"filippo.io/age"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/attach"
)

// Due reports whether a backup is due in a folder that holds files of these names: none was made since the last
// midnight at now's place. Backups that say they are of a later day than now, made by a clock
// that was wrong, do not count.
func Due(names []string, now time.Time) bool {
	y, m, d := now.Date()
	from, to := time.Date(y, m, d, 0, 0, 0, 0, now.Location()), time.Date(y, m, d+1, 0, 0, 0, 0, now.Location())
	for _, n := range names {
		if at, ok := parseName(n); ok && !at.Before(from) && at.Before(to) {
			return false
		}
	}
	return true
}

// Scheduled makes the day's backup in a folder if it is due, and then removes those that are no longer kept: see
// Expired. It returns the path of the new backup, empty if none was due. A backup that was made is returned even
// if the tidying fails.
func Scheduled(ctx context.Context, s *storage.Store, folder string, to []age.Recipient, check []age.Identity, o Options) (string, error) {
	o = o.withDefaults()
	names, err := list(folder, o)
	if err != nil {
		return "", fmt.Errorf("looking for the backups in %s: %w", folder, err)
	}
	if !Due(names, o.Now()) {
		return "", nil
	}
	file, err := Make(ctx, s, folder, to, check, o)
	if err != nil {
		return "", err
	}
	return file, Tidy(ctx, folder, check, o)
}

// list returns the names of the backups in a folder.
func list(folder string, o Options) (names []string, err error) {
	es, err := o.FS.List(folder)
	for _, e := range es {
		if _, ok := parseName(e.Name); ok && !e.Dir {
			names = append(names, e.Name)
		}
	}
	return names, err
}

// Holding names a backup that can still show what an owner asked to be erased.
type Holding struct {
	File   string
	Made   time.Time
	Owners []exam.ID // named by their patients' ids
}

// maxOwners bounds what is read of a backup's file of keys.
const maxOwners = 1 << 30

// early reports whether a file holds keys of owners; such files stand first in a backup.
func early(name string) bool {
	return name == storage.OwnersFile || path.Dir(name) == attach.OwnersDir
}

var errEnough = errors.New("enough")

// Erased says which backups of a folder still hold the key of an owner whose data the store erased on request,
// oldest first. Only the beginning of each backup is read. A backup that cannot be opened is in the error, beside what the
// others told.
func Erased(ctx context.Context, s *storage.Store, folder string, ids []age.Identity, o Options) ([]Holding, error) {
	o = o.withDefaults()
	names, err := list(folder, o)
	if err != nil {
		return nil, fmt.Errorf("looking for the backups in %s: %w", folder, err)
	}
	slices.Sort(names)
	var out []Holding
	var bad error
	for _, n := range names {
		h := Holding{File: filepath.Join(folder, n)}
		h.Made, _ = parseName(n)
		var keys []byte
		var others []exam.ID
		ring := s.Bag().Ring
		_, _, err := read(ctx, h.File, ids, o, func(name string, r io.Reader) error {
			if !early(name) {
				return errEnough
			}
			b, err := io.ReadAll(io.LimitReader(r, maxOwners))
			if err != nil {
				return err
			}
			if name == storage.OwnersFile {
				keys = b
			} else if owner, err := attach.OwnerOf(ring, b); err == nil {
				others = append(others, owner)
			}
			return nil
		})
		if ctx.Err() != nil {
			return nil, ctx.Err()
		}
		if err != nil && !errors.Is(err, errEnough) {
			bad = errors.Join(bad, fmt.Errorf("whether %s holds what was erased cannot be told: %w", h.File, err))
			continue
		}
		if h.Owners, err = s.StillHeld(keys, others); err != nil {
			return nil, err
		}
		if len(h.Owners) > 0 {
			out = append(out, h)
		}
	}
	return out, bad
}
