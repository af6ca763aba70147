package disk

import (
	"errors"
	"os"
	"time"

	"golang.org/x/sys/windows"
)

// rename replaces a file. Virus scanners and indexers hold new files open for moments;
// the system then refuses, so it is tried again for up to two seconds.
func rename(from, to string) error {
	for wait := time.Millisecond; ; wait *= 2 {
		err := os.Rename(from, to)
		if err == nil || wait > time.Second ||
			!(errors.Is(err, windows.ERROR_SHARING_VIOLATION) || errors.Is(err, windows.ERROR_ACCESS_DENIED) || errors.Is(err, windows.ERROR_LOCK_VIOLATION)) {
			return err
		}
		time.Sleep(wait)
	}
}

// syncDir flushes the folder where the system lets a user do so. Where it does not
// (access denied), NTFS has the rename in its own journal, in the order it was made.
func syncDir(folder string) error {
	p, err := windows.UTF16PtrFromString(folder)
	if err != nil {
		return err
	}
	h, err := windows.CreateFile(p, windows.GENERIC_WRITE, windows.FILE_SHARE_READ|windows.FILE_SHARE_WRITE|windows.FILE_SHARE_DELETE,
		nil, windows.OPEN_EXISTING, windows.FILE_FLAG_BACKUP_SEMANTICS, 0)
	if errors.Is(err, windows.ERROR_ACCESS_DENIED) {
		return nil
	}
	if err != nil {
		return &os.PathError{Op: "open", Path: folder, Err: err}
	}
	defer windows.CloseHandle(h)
	err = windows.FlushFileBuffers(h)
	if errors.Is(err, windows.ERROR_ACCESS_DENIED) || errors.Is(err, windows.ERROR_INVALID_FUNCTION) || errors.Is(err, windows.ERROR_INVALID_PARAMETER) {
		return nil
	}
	return err
}

// lockFile locks one byte far beyond the words in the file, since Windows keeps others
// from reading what is locked.
func lockFile(f *os.File) error {
	at := windows.Overlapped{OffsetHigh: 1}
	err := windows.LockFileEx(windows.Handle(f.Fd()), windows.LOCKFILE_EXCLUSIVE_LOCK|windows.LOCKFILE_FAIL_IMMEDIATELY, 0, 1, 0, &at)
	switch {
	case errors.Is(err, windows.ERROR_LOCK_VIOLATION), errors.Is(err, windows.ERROR_IO_PENDING):
		return errBusy
	case errors.Is(err, windows.ERROR_NOT_SUPPORTED), errors.Is(err, windows.ERROR_INVALID_FUNCTION):
		return errNoLocks
	}
	return err
}

// alive reports whether a process of this number runs on this computer.
func alive(pid int) bool {
	h, err := windows.OpenProcess(windows.PROCESS_QUERY_LIMITED_INFORMATION, false, uint32(pid))
	if err != nil {
		return errors.Is(err, windows.ERROR_ACCESS_DENIED)
	}
	defer windows.CloseHandle(h)
	var code uint32
	const stillActive = 259
	return windows.GetExitCodeProcess(h, &code) == nil && code == stillActive
}
