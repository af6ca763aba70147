// Package disktest is a disk for tests. It works on a real folder and can fail at any
// operation, be full or slow, and behave like exFAT. It remembers what was written, synced
// and renamed, and can make every state that a power cut may legally leave behind.
//
// The rules of a power cut: what a sync covered is there. Of what was written since, each
// sector of 512 bytes is there or not, in any combination. Names that no folder sync covered are
// there as far as some point in their order; on exFAT each one is or is not, and a rename may have
// been done by halves.
//
// bbolt maps its file into memory and writes past this disk; its file is taken as it was
// after the last commit that storage told of, or, while a commit was under way, after that one.
package disktest

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"syscall"
	"time"

	"cordwalk.example/cordwalk/storage/disk"
)

// ErrBroken is the error of a planned fault.
var ErrBroken = errors.New("the disk broke, as planned")

// ErrFull is the error of a full disk.
var ErrFull error = syscall.ENOSPC

// Disk is a disk.FS for tests. Set its fields before use or through its methods.
type Disk struct {
	real disk.FS

	mu       sync.Mutex
	ops      int
	failAt   int // this operation fails; 0: none
	failures int // how many did
	forever  bool
	failWith error
	slow     time.Duration
	room     int64 // bytes that may still be written; -1: any number
	exfat    bool

	root   string
	log    []event
	inodes map[string]int // by name, as the program sees it
	next   int
	start  *state // what was there when recording began; nil: not recording

	// Saved is called after each successful data sync with the file's name; may be nil.
	Synced func(name string)
}

// New makes a disk over the real file system.
func New() *Disk { return &Disk{real: disk.OS(), room: -1} }

// Ops returns how many operations there were.
func (d *Disk) Ops() int { d.mu.Lock(); defer d.mu.Unlock(); return d.ops }

// Failures returns how many operations failed as planned.
func (d *Disk) Failures() int { d.mu.Lock(); defer d.mu.Unlock(); return d.failures }

// FailAt makes the n-th operation from now fail with err, and all after it if forever.
// Zero mends the disk.
func (d *Disk) FailAt(n int, err error, forever bool) {
	d.mu.Lock()
	defer d.mu.Unlock()
	d.failAt, d.failWith, d.forever, d.failures = 0, err, forever, 0
	if n > 0 {
		d.failAt = d.ops + n
	}
}

// Slow makes every sync take this long.
func (d *Disk) Slow(t time.Duration) { d.mu.Lock(); d.slow = t; d.mu.Unlock() }

// Room makes the disk full after so many more bytes; -1 frees it.
func (d *Disk) Room(bytes int64) { d.mu.Lock(); d.room = bytes; d.mu.Unlock() }

// ExFAT makes the disk behave like exFAT: names differ by more than capitals, files stay below 4 GiB, and
// a power cut may leave a rename half done. Times there have a step of two seconds; storage
// reads no times of files.
func (d *Disk) ExFAT() { d.mu.Lock(); d.exfat = true; d.mu.Unlock() }

// op counts an operation and says whether it is to fail.
func (d *Disk) op() error {
	d.mu.Lock()
	defer d.mu.Unlock()
	return d.opLocked()
}

func (d *Disk) opLocked() error {
	d.ops++
	if d.failAt > 0 && (d.ops == d.failAt || (d.forever && d.ops > d.failAt)) {
		d.failures++
		return d.failWith
	}
	return nil
}

func (d *Disk) wrap(name string, f disk.File, err error) (disk.File, error) {
	if err != nil {
		return nil, err
	}
	return &file{d: d, f: f, name: name, inode: d.inode(name)}, nil
}

func failed(op, name string, err error) error { return &fs.PathError{Op: op, Path: name, Err: err} }

// Open implements disk.FS.
func (d *Disk) Open(name string) (disk.File, error) {
	if err := d.op(); err != nil {
		return nil, failed("open", name, err)
	}
	f, err := d.real.Open(name)
	return d.wrap(name, f, err)
}

// Edit implements disk.FS.
func (d *Disk) Edit(name string) (disk.File, error) {
	if err := d.op(); err != nil {
		return nil, failed("open", name, err)
	}
	f, err := d.real.Edit(name)
	return d.wrap(name, f, err)
}

// Create implements disk.FS.
func (d *Disk) Create(name string) (disk.File, error) {
	if err := d.op(); err != nil {
		return nil, failed("create", name, err)
	}
	if d.exfat {
		if other, ok := d.folded(name); ok && other != name {
			return nil, failed("create", name, fs.ErrExist)
		}
	}
	f, err := d.real.Create(name)
	if err != nil {
		return nil, err
	}
	d.mu.Lock()
	d.next++
	n := d.next
	if d.inodes != nil {
		d.inodes[name] = n
	}
	d.record(event{kind: created, inode: n, name: name})
	d.mu.Unlock()
	return &file{d: d, f: f, name: name, inode: n}, nil
}

// folded finds a file whose name differs from this one by capitals at most.
func (d *Disk) folded(name string) (string, bool) {
	es, err := d.real.List(filepath.Dir(name))
	if err != nil {
		return "", false
	}
	for _, e := range es {
		if strings.EqualFold(e.Name, filepath.Base(name)) {
			return filepath.Join(filepath.Dir(name), e.Name), true
		}
	}
	return "", false
}

// List implements disk.FS.
func (d *Disk) List(folder string) ([]disk.Entry, error) {
	if err := d.op(); err != nil {
		return nil, failed("list", folder, err)
	}
	return d.real.List(folder)
}

// Stat implements disk.FS.
func (d *Disk) Stat(name string) (disk.Entry, error) {
	if err := d.op(); err != nil {
		return disk.Entry{}, failed("stat", name, err)
	}
	return d.real.Stat(name)
}

// MakeDir implements disk.FS.
func (d *Disk) MakeDir(name string) error {
	if err := d.op(); err != nil {
		return failed("mkdir", name, err)
	}
	_, serr := os.Stat(name)
	if err := d.real.MakeDir(name); err != nil {
		return err
	}
	if serr != nil {
		d.mu.Lock()
		d.record(event{kind: madeDir, name: name})
		d.mu.Unlock()
	}
	return nil
}

// Rename implements disk.FS.
func (d *Disk) Rename(from, to string) error {
	if err := d.op(); err != nil {
		return failed("rename", from, err)
	}
	n := d.inode(from)
	if d.recording() {
		d.adopt(n, from)
	}
	if err := d.real.Rename(from, to); err != nil {
		return err
	}
	d.mu.Lock()
	if d.inodes != nil {
		delete(d.inodes, from)
		d.inodes[to] = n
	}
	d.record(event{kind: renamed, inode: n, name: from, to: to})
	d.mu.Unlock()
	return nil
}

// Remove implements disk.FS.
func (d *Disk) Remove(name string) error {
	if err := d.op(); err != nil {
		return failed("remove", name, err)
	}
	if err := d.real.Remove(name); err != nil {
		return err
	}
	d.mu.Lock()
	if d.inodes != nil {
		delete(d.inodes, name)
	}
	d.record(event{kind: removed, name: name})
	d.mu.Unlock()
	return nil
}

// SyncDir implements disk.FS.
func (d *Disk) SyncDir(folder string) error {
	if err := d.op(); err != nil {
		return failed("sync", folder, err)
	}
	time.Sleep(d.pause())
	d.mu.Lock()
	d.record(event{kind: syncedDir, name: folder})
	d.mu.Unlock()
	return nil
}

func (d *Disk) pause() time.Duration { d.mu.Lock(); defer d.mu.Unlock(); return d.slow }

// Lock implements disk.FS. The lock file is not part of the states after a power cut.
func (d *Disk) Lock(name string, who disk.Holder) (disk.Unlocker, error) {
	if err := d.op(); err != nil {
		return nil, failed("lock", name, err)
	}
	u, err := d.real.Lock(name, who)
	return u, err
}

// LockedBy implements disk.FS.
func (d *Disk) LockedBy(name string) (disk.Holder, bool, error) {
	if err := d.op(); err != nil {
		return disk.Holder{}, false, failed("lock", name, err)
	}
	return d.real.LockedBy(name)
}

// At implements disk.Hooked: the named places count as operations.
func (d *Disk) At(point, name string) error {
	if err := d.op(); err != nil {
		return failed(point, name, err)
	}
	d.mu.Lock()
	full := d.room == 0
	d.mu.Unlock()
	if full {
		return failed(point, name, ErrFull)
	}
	if point == "index committed" && d.recording() {
		d.adopt(d.inode(name), name)
	}
	return nil
}

// Careless implements disk.Careless: a sync is counted and remembered, not made.
func (d *Disk) Careless() bool { return true }

type file struct {
	d     *Disk
	f     disk.File
	name  string
	inode int
}

func (f *file) Name() string { return f.name }

func (f *file) Size() (int64, error) {
	if err := f.d.op(); err != nil {
		return 0, failed("stat", f.name, err)
	}
	return f.f.Size()
}

func (f *file) ReadAt(b []byte, at int64) (int, error) {
	if err := f.d.op(); err != nil {
		return 0, failed("read", f.name, err)
	}
	return f.f.ReadAt(b, at)
}

// WriteAt writes all, or, where the disk fails or is full, the first part.
func (f *file) WriteAt(b []byte, at int64) (int, error) {
	d := f.d
	d.mu.Lock()
	defer d.mu.Unlock()
	err := d.opLocked()
	n := len(b)
	switch {
	case err != nil:
		n /= 2
	case d.room >= 0 && int64(n) > d.room:
		n, err = int(d.room), ErrFull
	case d.exfat && at+int64(n) > 4<<30-1:
		return 0, failed("write", f.name, syscall.EFBIG)
	}
	if d.room >= 0 {
		d.room -= int64(n)
	}
	got, werr := f.f.WriteAt(b[:n], at)
	d.record(event{kind: wrote, inode: f.inode, at: at, data: append([]byte(nil), b[:got]...)})
	if err == nil {
		err = werr
	} else {
		err = failed("write", f.name, err)
	}
	return got, err
}

func (f *file) Preallocate(size int64) error {
	d := f.d
	d.mu.Lock()
	defer d.mu.Unlock()
	if err := d.opLocked(); err != nil {
		return failed("fallocate", f.name, err)
	}
	have, err := f.f.Size()
	if err != nil {
		return err
	}
	if d.room >= 0 && size-have > d.room {
		return failed("fallocate", f.name, ErrFull)
	}
	if d.exfat && size > 4<<30-1 {
		return failed("fallocate", f.name, syscall.EFBIG)
	}
	if d.room >= 0 && size > have {
		d.room -= size - have
	}
	if err := f.f.Preallocate(size); err != nil {
		return err
	}
	if size > have {
		d.record(event{kind: grown, inode: f.inode, at: size})
	}
	return nil
}

func (f *file) SyncData() error { return f.sync("fdatasync", f.f.SyncData) }
func (f *file) Sync() error     { return f.sync("fsync", f.f.Sync) }

func (f *file) sync(op string, sync func() error) error {
	d := f.d
	if err := d.op(); err != nil {
		d.mu.Lock()
		d.record(event{kind: syncFailed, inode: f.inode})
		d.mu.Unlock()
		return failed(op, f.name, err)
	}
	time.Sleep(d.pause())
	// The real sync is left out: these tests are about order, and the machine does not lose power.
	_ = sync
	d.mu.Lock()
	d.record(event{kind: synced, inode: f.inode})
	told := d.Synced
	d.mu.Unlock()
	if told != nil {
		told(f.name)
	}
	return nil
}

func (f *file) Close() error {
	err := f.f.Close()
	if ferr := f.d.op(); ferr != nil {
		return failed("close", f.name, ferr)
	}
	return err
}

func (d *Disk) recording() bool { d.mu.Lock(); defer d.mu.Unlock(); return d.start != nil }

// inode returns the number of a named file, a new one if it was not seen before.
func (d *Disk) inode(name string) int {
	d.mu.Lock()
	defer d.mu.Unlock()
	if d.inodes == nil {
		return 0
	}
	n, ok := d.inodes[name]
	if !ok {
		d.next++
		n = d.next
		d.inodes[name] = n
	}
	return n
}

// adopt takes over a file's content that was written past this disk and synced.
func (d *Disk) adopt(n int, name string) {
	b, err := os.ReadFile(name)
	if err != nil || !strings.Contains(filepath.Base(name), "index") {
		return
	}
	d.mu.Lock()
	d.record(event{kind: adopted, inode: n, name: name, data: b})
	d.mu.Unlock()
}

func (d *Disk) record(e event) {
	if d.start != nil {
		d.log = append(d.log, e)
	}
}

// String says how far the disk is.
func (d *Disk) String() string {
	d.mu.Lock()
	defer d.mu.Unlock()
	return fmt.Sprintf("disk after %d operations, %d events recorded", d.ops, len(d.log))
}
