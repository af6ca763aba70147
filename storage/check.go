package storage

import (
	"context"
	"errors"
	"io/fs"
	"os"
	"path/filepath"

	"go.etcd.io/bbolt"

	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// A Checker looks through what lies in a store's folder and is kept by another package, such as attachments.
type Checker func(ctx context.Context, fsys disk.FS, dir string, ring *key.Ring) ([]Problem, error)

// Check reads everything in a store and reports what is wrong, by place. It changes nothing.
// The error says that the check could not be made, for example because the store is open elsewhere.
func Check(ctx context.Context, dir string, o Options, more ...Checker) ([]Problem, error) {
	o = o.withDefaults()
	ps, err := check(ctx, dir, o, more)
	return ps, explain("checking the practice in "+dir, err)
}

func check(ctx context.Context, dir string, o Options, more []Checker) ([]Problem, error) {
	if err := holdsPractice(o.Files, dir); err != nil {
		return nil, err
	}
	if by, held, err := o.Files.LockedBy(filepath.Join(dir, lockFile)); err != nil {
		return nil, err
	} else if held {
		return nil, &disk.Held{File: filepath.Join(dir, lockFile), By: by}
	}
	id, ps, err := readIdentity(o.Files, dir)
	if err != nil {
		return nil, err
	}
	bag, err := id.unlock(o.Files, o.Unlock)
	if err != nil {
		return nil, err
	}
	var st indexState
	fl := follower{ctx: ctx, fs: o.Files, keys: bag.Ring, state: &st, each: func(change.Batch) error { return nil }, parallel: true, limits: id.Limits,
		problem: func(p Problem) { ps = append(ps, p) }}
	if _, err := fl.all(dir); err != nil {
		return nil, err
	}
	seals := newSeals(o.Files, dir, bag.Ring)
	bad, err := seals.owners.problems()
	if err != nil {
		return nil, err
	}
	ps = append(ps, bad...)
	for _, c := range more {
		bad, err := c(ctx, o.Files, dir, bag.Ring)
		if err != nil {
			return nil, err
		}
		ps = append(ps, bad...)
	}
	return append(ps, checkIndex(filepath.Join(dir, indexFile), seals, st)...), nil
}

// checkIndex verifies every value, count and sum of the index.
func checkIndex(path string, s *seals, journal indexState) (ps []Problem) {
	bad := func(what string) { ps = append(ps, Problem{File: indexFile, Offset: -1, What: what}) }
	if _, err := os.Stat(path); errors.Is(err, fs.ErrNotExist) {
		return nil // built at the next start
	}
	err := guard(func() error {
		o := boltOptions()
		o.ReadOnly = true
		db, err := bbolt.Open(path, 0o600, o)
		if err != nil {
			return err
		}
		x := &index{db, path, nil, s}
		defer x.abandon()
		return db.View(func(tx *bbolt.Tx) error {
			st, err := x.state(tx)
			if err != nil {
				return err
			}
			for _, b := range []struct {
				name []byte
				want tally
			}{{bucketRecords, st.Records}, {bucketPatients, st.Patients}, {bucketPlaces, st.Places}, {bucketPages, st.Pages}} {
				var have tally
				err := tx.Bucket(b.name).ForEach(func(k, v []byte) error {
					have.add(x.mark(b.name, k, v))
					_, err := x.open(b.name, k, v)
					return err
				})
				if err != nil {
					return err
				}
				if have != b.want {
					bad("the count or sum of its " + string(b.name) + " does not fit; run rebuild")
				}
			}
			return nil
		})
	})
	if err != nil {
		bad(err.Error() + "; run rebuild")
	}
	return ps
}
