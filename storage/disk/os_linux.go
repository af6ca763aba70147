package disk

import (
	"errors"
	"os"

	"golang.org/x/sys/unix"
)

func syncData(f *os.File) error {
	for {
		err := unix.Fdatasync(int(f.Fd()))
		if errors.Is(err, unix.EINTR) {
			continue
		}
		if err != nil {
			return &os.PathError{Op: "fdatasync", Path: f.Name(), Err: err}
		}
		return nil
	}
}

func preallocate(f *os.File, have, size int64) error {
	for {
		err := unix.Fallocate(int(f.Fd()), 0, have, size-have)
		switch {
		case err == nil:
			return nil
		case errors.Is(err, unix.EINTR):
			continue
		case errors.Is(err, unix.EOPNOTSUPP), errors.Is(err, unix.ENOSYS):
			return zeros(f, have, size)
		}
		return &os.PathError{Op: "fallocate", Path: f.Name(), Err: err}
	}
}
