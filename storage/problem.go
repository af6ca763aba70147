package storage

import (
	"errors"
	"fmt"
	"io/fs"
	"syscall"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage/disk"
)

// ErrNotFound means that the store has no such patient or visit.
var ErrNotFound = errors.New("there is no such record in this practice")

// ErrClosed means that a visit is closed, so that only amendments with a reason are taken.
var ErrClosed = errors.New("the visit is closed; changes need a reason")

// ErrShut means that the store was closed before.
var ErrShut = errors.New("the practice is not open")

// Problem is something wrong in the files of a store, by place.
type Problem struct {
	File   string // within the store's folder
	Offset int64  // in bytes, -1 where the whole file is meant
	Length int64  // in bytes, 0 where it is not known
	What   string // what is wrong and what it means
	Minor  bool   // left by a power cut or an error; nothing that was called saved is lost, nothing need be done
}

func (p Problem) String() string {
	if p.Offset < 0 {
		return fmt.Sprintf("%s: %s", p.File, p.What)
	}
	if p.Length > 0 {
		return fmt.Sprintf("%s, bytes %d to %d: %s", p.File, p.Offset, p.Offset+p.Length-1, p.What)
	}
	return fmt.Sprintf("%s, byte %d: %s", p.File, p.Offset, p.What)
}

// Gap says that entries of a patient may be missing: a part of the journal is lost or
// unreadable, and nothing rules out that it held some.
type Gap struct {
	Device      string // whose entries, in words
	First, Last uint64 // their numbers in that device's stream
	Patient     exam.ID
}

func (g Gap) String() string {
	if g.First == g.Last {
		return fmt.Sprintf("an entry is missing: number %d of %s", g.First, g.Device)
	}
	return fmt.Sprintf("entries are missing: numbers %d to %d of %s", g.First, g.Last, g.Device)
}

// explain puts the words before an error that a person needs to mend it.
func explain(doing string, err error) error {
	var held *disk.Held
	switch {
	case err == nil:
		return nil
	case errors.As(err, &held):
		return err
	case errors.Is(err, syscall.ENOSPC):
		return fmt.Errorf("%s: the disk is full; free some space and try again, nothing that was saved is lost: %w", doing, err)
	case errors.Is(err, syscall.EROFS):
		return fmt.Errorf("%s: the folder can only be read; move the practice to a disk that can be written: %w", doing, err)
	case errors.Is(err, fs.ErrPermission):
		return fmt.Errorf("%s: this user may not write there; ask for permission to the folder or choose another one: %w", doing, err)
	}
	return fmt.Errorf("%s: %w", doing, err)
}
