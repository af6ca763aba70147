// Package disk is the narrow door between storage and the file system: the few
// operations that a store needs to survive a power cut, each with a stated promise,
// for Linux, Windows and macOS.
//
// What is not promised by the operating system is not promised here. A write is safe
// when SyncData of its file has returned, and not before; a name is safe when SyncDir
// of its folder has returned. On a file system without atomic rename (exFAT) a power
// cut during Replace may leave the old file, the new one, or only the new one under
// its temporary name; whoever reads must look for both.
package disk

import (
	"crypto/rand"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"path/filepath"
	"strings"
)

// Entry describes a file or folder.
type Entry struct {
	Name string // without its folder
	Size int64
	Dir  bool
}

// File is an open file. Reads and writes name their place; there is no shared position.
type File interface {
	io.ReaderAt
	io.WriterAt
	io.Closer

	// Name returns the name the file was opened by.
	Name() string
	// Size returns the length in bytes, preallocated room included.
	Size() (int64, error)
	// Preallocate makes the file at least size bytes long. The new room reads as
	// zeros. It asks the file system for the blocks, so that a full disk is met here
	// and not at a later write, where the system can do so.
	Preallocate(size int64) error
	// SyncData returns when every byte written so far, and the length needed to read
	// it, is on the disk. After an error nothing is known about what was written
	// since the last success: the caller must not write on in this file.
	SyncData() error
	// Sync is SyncData and everything else the system keeps about the file.
	Sync() error
}

// FS is a file system. Names are paths of the operating system.
type FS interface {
	// Open opens an existing file for reading.
	Open(name string) (File, error)
	// Edit opens an existing file for reading and writing.
	Edit(name string) (File, error)
	// Create makes a new file, readable by this user alone, and refuses to touch one that exists.
	Create(name string) (File, error)
	// List returns what a folder holds, in the order of names.
	List(folder string) ([]Entry, error)
	// Stat describes a file or folder.
	Stat(name string) (Entry, error)
	// MakeDir makes a folder, open to this user alone. Its parent must exist; it is no error if the folder exists.
	MakeDir(name string) error
	// Rename gives a file another name and replaces a file of that name.
	Rename(from, to string) error
	// Remove deletes a file or an empty folder.
	Remove(name string) error
	// SyncDir returns when the names in the folder are on the disk.
	SyncDir(folder string) error
	// Lock takes the lock file, or returns *Held if another process has it.
	Lock(name string, who Holder) (Unlocker, error)
	// LockedBy says whether another process holds the lock file, and which. It writes nothing.
	LockedBy(name string) (Holder, bool, error)
}

// Unlocker gives a lock back. The lock file itself stays.
type Unlocker interface {
	// Unlock empties the lock file and lets go of it.
	Unlock() error
	// Keep lets go of it and leaves its words, so that the next holder knows that all did
	// not end well.
	Keep() error
	// Left reports whether the holder before us went without Unlock: it crashed, was
	// killed, or used Keep.
	Left() bool
}

// Hooked is an optional ability of an FS: to be told of named places in the code that
// do their input and output past it (the index is mapped into memory by bbolt), and to
// answer with an error that the place then meets. Only test doubles have it.
type Hooked interface {
	At(point, file string) error
}

// At calls the hook of a file system that has one.
func At(fsys FS, point, file string) error {
	if h, ok := fsys.(Hooked); ok {
		return h.At(point, file)
	}
	return nil
}

// Careless is an optional ability of a test double: to say that nothing needs a sync, since the
// machine will not lose power. The index is then written without.
type Careless interface{ Careless() bool }

// Syncs reports whether a sync on this file system has a meaning.
func Syncs(fsys FS) bool {
	c, ok := fsys.(Careless)
	return !ok || !c.Careless()
}

// Temporary returns the name under which Replace prepares a file.
func Temporary(name string) string { return name + ".new" }

// Replace puts data in the place of the file: a temporary file beside it, synced,
// renamed, the folder synced. On an error the old file is as it was, unless the file
// system cannot rename atomically; then Recover finds the new one.
func Replace(fsys FS, name string, data []byte) error {
	tmp := Temporary(name)
	if err := fsys.Remove(tmp); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	f, err := fsys.Create(tmp)
	if err != nil {
		return err
	}
	if _, err = f.WriteAt(data, 0); err == nil {
		err = f.Sync()
	}
	if cerr := f.Close(); err == nil {
		err = cerr
	}
	if err != nil {
		_ = fsys.Remove(tmp) // what is left of it is replaced at the next try
		return err
	}
	if err := fsys.Rename(tmp, name); err != nil {
		return err
	}
	return fsys.SyncDir(filepath.Dir(name))
}

// Recover finishes a Replace that a power cut stopped between two names: if the file
// is gone and its temporary file is there and good says it is whole, it takes its name.
func Recover(fsys FS, name string, good func([]byte) bool) error {
	if _, err := fsys.Stat(name); !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	tmp := Temporary(name)
	data, err := ReadFile(fsys, tmp, 64<<20)
	if errors.Is(err, fs.ErrNotExist) || (err == nil && !good(data)) {
		return nil
	}
	if err != nil {
		return err
	}
	if err := fsys.Rename(tmp, name); err != nil {
		return err
	}
	return fsys.SyncDir(filepath.Dir(name))
}

// ReadFile reads a whole file of at most limit bytes.
func ReadFile(fsys FS, name string, limit int64) ([]byte, error) {
	f, err := fsys.Open(name)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	n, err := f.Size()
	if err != nil {
		return nil, err
	}
	if n > limit {
		return nil, fmt.Errorf("%s has %d bytes, more than the %d expected there", name, n, limit)
	}
	b := make([]byte, n)
	got, err := f.ReadAt(b, 0)
	if err != nil && !errors.Is(err, io.EOF) {
		return nil, err
	}
	return b[:got], nil
}

// Exists reports whether there is a file or folder of that name.
func Exists(fsys FS, name string) (bool, error) {
	_, err := fsys.Stat(name)
	if errors.Is(err, fs.ErrNotExist) {
		return false, nil
	}
	return err == nil, err
}

// GoodName reports whether a file name is of the kind that this program makes:
// 1 to 80 of a–z, 0–9, dot, hyphen and underscore. Every file system keeps such names
// as they are, whether it tells capitals apart or not.
func GoodName(name string) bool {
	if name == "" || len(name) > 80 {
		return false
	}
	return strings.Trim(name, "abcdefghijklmnopqrstuvwxyz0123456789._-") == "" && name != "." && name != ".."
}

// Aside returns a name for a file that is set aside: the old name, a word that says
// why, and a random part, so that nothing set aside earlier is replaced.
func Aside(name, why string) string {
	var r [4]byte
	_, _ = rand.Read(r[:]) // never fails: crypto/rand ends the program instead
	return name + "." + why + "-" + hex.EncodeToString(r[:])
}

// zeros fills the room between two places with zeros, in pieces.
func zeros(f io.WriterAt, from, to int64) error {
	piece := make([]byte, 256<<10)
	for from < to {
		n := min(int64(len(piece)), to-from)
		if _, err := f.WriteAt(piece[:n], from); err != nil {
			return err
		}
		from += n
	}
	return nil
}
