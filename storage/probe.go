package storage

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"os/exec"
	"sync/atomic"
	"time"

	"go.etcd.io/bbolt"
)

// bbolt can panic on a damaged file, in goroutines of its own too, and keeps its lock when it
// does. So after an unclean close the index is first opened and walked by a child process,
// which may die of it.
const probeVariable = "CORDWALK_TRY_INDEX"

var childReady atomic.Bool

// ChildMain must be called first in main, and in TestMain. In a child process that was
// started to try an index it does that and ends the process; otherwise it returns at once.
// A program that does not call it never starts such a child: after an unclean close its
// index is built anew instead.
func ChildMain() {
	path := os.Getenv(probeVariable)
	if path == "" {
		childReady.Store(true)
		return
	}
	if err := tryIndex(path); err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(1)
	}
	os.Exit(0)
}

// tryIndex opens an index and walks over all its keys.
func tryIndex(path string) error {
	db, err := bbolt.Open(path, 0o600, boltOptions())
	if err != nil {
		return err
	}
	err = db.View(func(tx *bbolt.Tx) error {
		return tx.ForEach(func(_ []byte, b *bbolt.Bucket) error {
			return b.ForEach(func(k, v []byte) error {
				if len(k) == 0 {
					return errors.New("an empty key")
				}
				return nil
			})
		})
	})
	return errors.Join(err, db.Close())
}

// probe tries an index in a child process. The error is errIndex if it cannot be trusted.
func probe(path string) error {
	if _, err := os.Stat(path); err != nil {
		if errors.Is(err, fs.ErrNotExist) {
			return nil
		}
		return err
	}
	self, err := os.Executable()
	if !childReady.Load() || err != nil {
		return fmt.Errorf("%w: it was not closed cleanly and cannot be tried in a child process", errIndex)
	}
	cmd := exec.Command(self)
	cmd.Env = append(os.Environ(), probeVariable+"="+path)
	cmd.WaitDelay = time.Second
	out, err := cmd.CombinedOutput()
	if err != nil {
		return fmt.Errorf("%w: %w: %.300s", errIndex, err, out)
	}
	return nil
}
