//go:build unix

package disk

import (
	"errors"
	"os"

	"golang.org/x/sys/unix"
)

func rename(from, to string) error { return os.Rename(from, to) }

func syncDir(folder string) error {
	d, err := os.Open(folder)
	if err != nil {
		return err
	}
	err = d.Sync()
	if errors.Is(err, unix.EINVAL) || errors.Is(err, unix.ENOTSUP) {
		err = nil // file systems that keep no folders of their own to sync
	}
	if cerr := d.Close(); err == nil {
		err = cerr
	}
	return err
}

func lockFile(f *os.File) error {
	for {
		err := unix.Flock(int(f.Fd()), unix.LOCK_EX|unix.LOCK_NB)
		switch {
		case err == nil:
			return nil
		case errors.Is(err, unix.EINTR):
			continue
		case errors.Is(err, unix.EWOULDBLOCK):
			return errBusy
		case errors.Is(err, unix.ENOLCK), errors.Is(err, unix.ENOTSUP), errors.Is(err, unix.ENOSYS):
			return errNoLocks
		}
		return err
	}
}

// alive reports whether a process of this number runs on this computer.
func alive(pid int) bool {
	err := unix.Kill(pid, 0)
	return err == nil || errors.Is(err, unix.EPERM)
}
