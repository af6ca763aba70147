package disk

import (
	"errors"
	"io/fs"
	"os"
)

// OS returns the file system of the operating system.
func OS() FS { return osFS{} }

type osFS struct{}

type osFile struct{ *os.File }

func (f osFile) Size() (int64, error) {
	fi, err := f.Stat()
	if err != nil {
		return 0, err
	}
	return fi.Size(), nil
}

func (f osFile) Preallocate(size int64) error {
	have, err := f.Size()
	if err != nil || have >= size {
		return err
	}
	return preallocate(f.File, have, size)
}

func (f osFile) SyncData() error { return syncData(f.File) }

func (osFS) open(name string, flag int) (File, error) {
	f, err := os.OpenFile(name, flag, 0o600)
	if err != nil {
		return nil, err
	}
	return osFile{f}, nil
}

func (o osFS) Open(name string) (File, error) { return o.open(name, os.O_RDONLY) }
func (o osFS) Edit(name string) (File, error) { return o.open(name, os.O_RDWR) }
func (o osFS) Create(name string) (File, error) {
	return o.open(name, os.O_RDWR|os.O_CREATE|os.O_EXCL)
}

func (osFS) List(folder string) ([]Entry, error) {
	ds, err := os.ReadDir(folder)
	if err != nil {
		return nil, err
	}
	out := make([]Entry, 0, len(ds))
	for _, d := range ds {
		fi, err := d.Info()
		if errors.Is(err, fs.ErrNotExist) {
			continue // gone since the folder was read
		}
		if err != nil {
			return nil, err
		}
		out = append(out, Entry{Name: d.Name(), Size: fi.Size(), Dir: fi.IsDir()})
	}
	return out, nil
}

func (osFS) Stat(name string) (Entry, error) {
	fi, err := os.Stat(name)
	if err != nil {
		return Entry{}, err
	}
	return Entry{Name: fi.Name(), Size: fi.Size(), Dir: fi.IsDir()}, nil
}

func (osFS) MakeDir(name string) error {
	err := os.Mkdir(name, 0o700)
	if errors.Is(err, fs.ErrExist) {
		if fi, serr := os.Stat(name); serr == nil && fi.IsDir() {
			return nil
		}
	}
	return err
}

func (osFS) Rename(from, to string) error                   { return rename(from, to) }
func (osFS) Remove(name string) error                       { return os.Remove(name) }
func (osFS) SyncDir(folder string) error                    { return syncDir(folder) }
func (osFS) Lock(name string, who Holder) (Unlocker, error) { return takeLock(name, who) }

func (osFS) LockedBy(name string) (Holder, bool, error) { return lockedBy(name) }
