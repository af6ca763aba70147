package disk

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"time"
)

// Holder says which process holds a lock.
type Holder struct {
	Host    string    `json:"host"`
	PID     int       `json:"pid"`
	Program string    `json:"program"`
	Since   time.Time `json:"since"`
}

// Self returns this process as a holder.
func Self(program string, now time.Time) Holder {
	host, err := os.Hostname()
	if err != nil {
		host = "unknown"
	}
	return Holder{Host: host, PID: os.Getpid(), Program: program, Since: now.UTC().Truncate(time.Second)}
}

// Held is the error for a lock that another process has.
type Held struct {
	File string
	By   Holder // zero where the lock file does not say
}

func (e *Held) Error() string {
	switch {
	case e.By.PID == 0:
		return "the practice is open in another program; close it there first"
	case e.By.Host != Self("", time.Time{}).Host:
		return fmt.Sprintf("the practice is open on %s in %s (process %d) since %s; close it there first, or, if that computer no longer has it open, delete the file %s",
			e.By.Host, e.By.Program, e.By.PID, e.By.Since.Format(time.RFC3339), e.File)
	}
	return fmt.Sprintf("the practice is open in %s (process %d on %s) since %s; close it there first",
		e.By.Program, e.By.PID, e.By.Host, e.By.Since.Format(time.RFC3339))
}

// errBusy is returned by lockFile where another process holds the system's lock on the file.
var errBusy = errors.New("locked by another process")

// errNoLocks is returned by lockFile where the file system knows no locks.
var errNoLocks = errors.New("the file system knows no locks")

type osLock struct {
	f    *os.File
	left bool
}

// takeLock takes the lock file. The file is made once, never renamed and never removed,
// so that two processes always meet in the same file. The system's lock on it ends with
// the process that took it; the words in it tell the second process who that is, and
// guard a store on a file system whose locks do not reach other computers.
func takeLock(name string, who Holder) (Unlocker, error) {
	f, err := os.OpenFile(name, os.O_RDWR|os.O_CREATE, 0o600)
	if err != nil {
		return nil, err
	}
	ok := false
	defer func() {
		if !ok {
			f.Close()
		}
	}()
	lerr := lockFile(f)
	if lerr != nil && !errors.Is(lerr, errBusy) && !errors.Is(lerr, errNoLocks) {
		return nil, &os.PathError{Op: "lock", Path: name, Err: lerr}
	}
	by, written := readHolder(f)
	switch {
	case errors.Is(lerr, errBusy):
		return nil, &Held{File: name, By: by}
	case written && by.Host != who.Host:
		return nil, &Held{File: name, By: by} // may be alive, and its lock out of our sight
	case written && errors.Is(lerr, errNoLocks) && by.PID != who.PID && alive(by.PID):
		return nil, &Held{File: name, By: by}
	}
	b, err := json.Marshal(who)
	if err != nil {
		return nil, err
	}
	if err := f.Truncate(0); err != nil {
		return nil, err
	}
	if _, err := f.WriteAt(append(b, '\n'), 0); err != nil {
		return nil, err
	}
	if err := f.Sync(); err != nil {
		return nil, err
	}
	ok = true
	return &osLock{f, written}, nil
}

func readHolder(f *os.File) (Holder, bool) {
	b, err := io.ReadAll(io.NewSectionReader(f, 0, 4096))
	if err != nil || len(b) == 0 {
		return Holder{}, false
	}
	var h Holder
	if json.Unmarshal(b, &h) != nil || h.PID == 0 {
		return Holder{}, false // torn by a power cut: nobody is left to hold it
	}
	return h, true
}

// Left reports whether the holder before us went without unlocking: it crashed or was killed.
func (l *osLock) Left() bool { return l.left }

// Keep lets go of the lock but leaves the words in it, as a crash would.
func (l *osLock) Keep() error { return l.f.Close() }

// lockedBy says who holds a lock file, without taking it or writing to it.
func lockedBy(name string) (h Holder, held bool, err error) {
	f, err := os.Open(name)
	if errors.Is(err, os.ErrNotExist) {
		return h, false, nil
	}
	if err != nil {
		return h, false, err
	}
	defer f.Close()
	lerr := lockFile(f)
	by, written := readHolder(f)
	switch {
	case errors.Is(lerr, errBusy):
		return by, true, nil
	case lerr != nil && written && by.PID != os.Getpid() && by.Host == Self("", time.Time{}).Host && alive(by.PID):
		return by, true, nil
	}
	return by, false, nil
}

// Unlock empties the lock file and lets go of it.
func (l *osLock) Unlock() error {
	err := l.f.Truncate(0)
	if cerr := l.f.Close(); err == nil { // closing ends the system's lock
		err = cerr
	}
	return err
}
