// Package backup makes one sealed file of a whole store, and a store of such a file.
//
// A backup is an age file (age-encryption.org/v1) that holds a zstd-compressed tar archive: the journal, the
// locked keys, the list of devices, attachments; not the index, which is made anew. It is read back
// and compared before it is called done. A restored store always begins a new incarnation, so that what
// was written after the backup, and comes back from other devices, never meets a second entry of its number.
package backup

import (
	"archive/tar"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"path"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"filippo.io/age"
	"github.com/klauspost/compress/zstd"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/change"
)

// The name of the last file in the archive, which lists the others.
const manifestName = "manifest.json"

// Limits of what a backup may make a reader do.
const (
	maxFiles    = 1 << 20
	maxManifest = 256 << 20
	maxTotal    = 4 << 40
)

type manifest struct {
	Format   int               `json:"format"`
	Made     time.Time         `json:"made"`
	Practice string            `json:"practice"`
	Device   string            `json:"device"`
	Files    map[string]string `json:"files"` // name → SHA-256
}

// Contents says what is in a backup.
type Contents struct {
	Made     time.Time
	Practice string
	Device   string
	Files    int
	Bytes    int64
}

// Options of a backup or restore.
type Options struct {
	FS       disk.FS                              // nil: the real file system
	Now      func() time.Time                     // nil: time.Now
	Progress func(what string, done, total int64) // may be nil
}

func (o Options) withDefaults() Options {
	if o.FS == nil {
		o.FS = disk.OS()
	}
	if o.Now == nil {
		o.Now = time.Now
	}
	if o.Progress == nil {
		o.Progress = func(string, int64, int64) {}
	}
	return o
}

// Name returns the file name of a backup made at a time.
func Name(at time.Time) string {
	return "cordwalk-" + at.UTC().Format("20060102t150405z") + ".backup.age"
}

// parseName is the inverse of Name.
func parseName(name string) (time.Time, bool) {
	at, err := time.Parse("cordwalk-20060102t150405z.backup.age", name)
	return at, err == nil && Name(at) == name
}

// Make writes a backup into a folder, reads it back with check, which must be one that opens what
// to seals, and gives it its name only then. It returns the file's path. On an error nothing is left
// but what was there.
func Make(ctx context.Context, s *storage.Store, folder string, to []age.Recipient, check []age.Identity, o Options) (string, error) {
	o = o.withDefaults()
	name := filepath.Join(folder, Name(o.Now()))
	err := make1(ctx, s, name, to, check, o)
	if err != nil {
		return "", fmt.Errorf("making a backup in %s: %w", folder, err)
	}
	return name, nil
}

func make1(ctx context.Context, s *storage.Store, name string, to []age.Recipient, check []age.Identity, o Options) (err error) {
	if there, err := disk.Exists(o.FS, name); err != nil || there {
		if there {
			err = fs.ErrExist
		}
		return err
	}
	files, err := s.Snapshot(ctx)
	if err != nil {
		return err
	}
	tmp := disk.Temporary(name)
	if err := o.FS.Remove(tmp); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	f, err := o.FS.Create(tmp)
	if err != nil {
		return err
	}
	closed := false
	defer func() {
		if !closed {
			f.Close()
		}
		if err != nil {
			_ = o.FS.Remove(tmp)
		}
	}()
	m := manifest{Format: 1, Made: o.Now().UTC(), Practice: s.Bag().Practice.String(), Device: s.Device(), Files: map[string]string{}}
	if err := write(ctx, &appender{f: f}, s.Dir(), files, &m, to, o); err != nil {
		return err
	}
	if err := f.Sync(); err != nil {
		return err
	}
	closed = true
	if err := f.Close(); err != nil {
		return err
	}
	// It is done only when it has been read back.
	c, got, err := read(ctx, tmp, check, o, nil)
	if err != nil {
		return fmt.Errorf("reading it back: %w", err)
	}
	if c.Files != len(m.Files) || !sameFiles(got.Files, m.Files) {
		return errors.New("it reads back differently from what was written: the disk or this computer is faulty")
	}
	if err := o.FS.Rename(tmp, name); err != nil {
		return err
	}
	return o.FS.SyncDir(filepath.Dir(name))
}

func sameFiles(a, b map[string]string) bool {
	for n, h := range a {
		if b[n] != h {
			return false
		}
	}
	return len(a) == len(b)
}

// appender writes one behind the other.
type appender struct {
	f  disk.File
	at int64
}

func (a *appender) Write(b []byte) (int, error) {
	n, err := a.f.WriteAt(b, a.at)
	a.at += int64(n)
	return n, err
}

func write(ctx context.Context, out io.Writer, dir string, files []storage.SnapshotFile, m *manifest, to []age.Recipient, o Options) error {
	sealed, err := age.Encrypt(out, to...)
	if err != nil {
		return err
	}
	packed, err := zstd.NewWriter(sealed, zstd.WithEncoderConcurrency(1))
	if err != nil {
		return err
	}
	archive := tar.NewWriter(packed)
	var total, done int64
	for _, f := range files {
		total += f.Size
	}
	add := func(name string, size int64, r io.Reader) error {
		if err := archive.WriteHeader(&tar.Header{Name: name, Mode: 0o600, Size: size, ModTime: m.Made.Truncate(time.Second), Format: tar.FormatPAX}); err != nil {
			return err
		}
		sum := sha256.New()
		for buf := make([]byte, 256<<10); ; {
			if err := ctx.Err(); err != nil {
				return err
			}
			n, err := r.Read(buf)
			sum.Write(buf[:n])
			if _, werr := archive.Write(buf[:n]); werr != nil {
				return werr
			}
			done += int64(n)
			o.Progress("backing up", done, total)
			if errors.Is(err, io.EOF) {
				break
			}
			if err != nil {
				return err
			}
		}
		if name != manifestName {
			m.Files[name] = hex.EncodeToString(sum.Sum(nil))
		}
		return nil
	}
	slices.SortStableFunc(files, func(a, b storage.SnapshotFile) int { // see early
		switch {
		case early(a.Name) && !early(b.Name):
			return -1
		case early(b.Name) && !early(a.Name):
			return 1
		}
		return 0
	})
	for _, f := range files {
		if !goodName(f.Name) {
			continue // nothing of ours
		}
		in, err := o.FS.Open(filepath.Join(dir, filepath.FromSlash(f.Name)))
		if err != nil {
			return err
		}
		err = add(f.Name, f.Size, io.NewSectionReader(in, 0, f.Size))
		if err = errors.Join(err, in.Close()); err != nil {
			return fmt.Errorf("%s: %w", f.Name, err)
		}
	}
	list, err := json.Marshal(m)
	if err != nil {
		return err
	}
	if err := add(manifestName, int64(len(list)), strings.NewReader(string(list))); err != nil {
		return err
	}
	return errors.Join(archive.Close(), packed.Close(), sealed.Close())
}

// goodName reports whether a name may stand in a backup: one or two parts, each of the kind that this
// program makes.
func goodName(name string) bool {
	if path.Clean(name) != name || strings.Count(name, "/") > 1 {
		return false
	}
	for _, part := range strings.Split(name, "/") {
		if !disk.GoodName(part) || strings.HasPrefix(part, ".") {
			return false
		}
	}
	return true
}

// Verify reads a whole backup and says what is in it. A wrong passphrase or identity is
// change.ErrSealed.
func Verify(ctx context.Context, file string, ids []age.Identity, o Options) (Contents, error) {
	c, _, err := read(ctx, file, ids, o.withDefaults(), nil)
	if err != nil {
		return Contents{}, fmt.Errorf("reading the backup %s: %w", file, err)
	}
	return c, nil
}

// read reads a backup and calls f with each file but the manifest.
func read(ctx context.Context, file string, ids []age.Identity, o Options, f func(name string, r io.Reader) error) (Contents, manifest, error) {
	var c Contents
	var m manifest
	in, err := o.FS.Open(file)
	if err != nil {
		return c, m, err
	}
	defer in.Close()
	size, err := in.Size()
	if err != nil {
		return c, m, err
	}
	disk := &failing{r: io.NewSectionReader(in, 0, size)}
	// malformed says what is wrong: the disk, where it could not be read, and the backup otherwise.
	malformed := func(err error) error {
		if disk.err != nil {
			return disk.err
		}
		return fmt.Errorf("%w: %s", change.ErrMalformed, err)
	}
	plain, err := age.Decrypt(disk, ids...)
	if err != nil {
		var none *age.NoIdentityMatchError
		if errors.As(err, &none) {
			return c, m, change.ErrSealed
		}
		return c, m, malformed(err)
	}
	unpacked, err := zstd.NewReader(plain, zstd.WithDecoderConcurrency(1), zstd.WithDecoderMaxWindow(32<<20), zstd.WithDecoderLowmem(true))
	if err != nil {
		return c, m, err
	}
	defer unpacked.Close()
	archive := tar.NewReader(unpacked)
	sums := map[string]string{}
	for {
		if err := ctx.Err(); err != nil {
			return c, m, err
		}
		h, err := archive.Next()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return c, m, malformed(err)
		}
		if m.Format != 0 {
			return c, m, fmt.Errorf("%w: it goes on behind its end", change.ErrMalformed)
		}
		if h.Typeflag != tar.TypeReg || !goodName(h.Name) || h.Size < 0 || sums[h.Name] != "" || len(sums) >= maxFiles {
			return c, m, fmt.Errorf("%w: it holds %.80q, which is no file of a practice", change.ErrMalformed, h.Name)
		}
		if h.Name == manifestName {
			if h.Size > maxManifest {
				return c, m, fmt.Errorf("%w: its list of files has %d bytes", change.ErrMalformed, h.Size)
			}
			d := json.NewDecoder(archive)
			if err := d.Decode(&m); err != nil && disk.err != nil {
				return c, m, disk.err
			} else if err != nil || m.Format == 0 {
				return c, m, fmt.Errorf("%w: its list of files cannot be read", change.ErrMalformed)
			}
			if m.Format > 1 {
				return c, m, change.ErrNewer
			}
			continue
		}
		if c.Bytes += h.Size; c.Bytes > maxTotal {
			return c, m, fmt.Errorf("%w: it holds more than %d bytes", change.ErrMalformed, int64(maxTotal))
		}
		sum := sha256.New()
		r := io.TeeReader(archive, sum)
		if f != nil {
			if err := f(h.Name, r); err != nil {
				return c, m, err
			}
		}
		if _, err := io.Copy(io.Discard, r); err != nil {
			return c, m, malformed(err)
		}
		sums[h.Name] = hex.EncodeToString(sum.Sum(nil))
		o.Progress("reading the backup", c.Bytes, 0)
	}
	// To the very end: a cut shows only there.
	if _, err := io.Copy(io.Discard, unpacked); err != nil {
		return c, m, malformed(err)
	}
	if _, err := io.Copy(io.Discard, plain); err != nil {
		return c, m, malformed(err)
	}
	if m.Format == 0 || !sameFiles(sums, m.Files) {
		return c, m, fmt.Errorf("%w: its files are not those that its list names", change.ErrMalformed)
	}
	c.Made, c.Practice, c.Device, c.Files = m.Made, m.Practice, m.Device, len(sums)
	return c, m, nil
}

// failing remembers the error of a reader behind which others say that what they read is malformed.
type failing struct {
	r   io.Reader
	err error
}

func (f *failing) Read(b []byte) (int, error) {
	n, err := f.r.Read(b)
	if err != nil && !errors.Is(err, io.EOF) {
		f.err = err
	}
	return n, err
}

// Extract makes the folder of a store out of a backup. The folder must not exist or be empty; it has its
// name only when everything is in it. The store must not be written to before it got a new incarnation:
// see Restore.
func Extract(ctx context.Context, file string, ids []age.Identity, dir string, o Options) (Contents, error) {
	return extractAnd(ctx, file, ids, dir, o.withDefaults(), nil)
}

// extractAnd is Extract with something that is done to the folder before it has its name.
func extractAnd(ctx context.Context, file string, ids []age.Identity, dir string, o Options, ready func(dir string) error) (Contents, error) {
	c, err := extract(ctx, file, ids, dir, o, ready)
	if err != nil {
		return Contents{}, fmt.Errorf("restoring %s into %s: %w", file, dir, err)
	}
	return c, nil
}

func extract(ctx context.Context, file string, ids []age.Identity, dir string, o Options, ready func(dir string) error) (c Contents, err error) {
	if es, err := o.FS.List(dir); err == nil && len(es) > 0 {
		return c, errors.New("the folder is not empty; name an empty or new one")
	} else if err == nil {
		if err := o.FS.Remove(dir); err != nil {
			return c, err
		}
	} else if !errors.Is(err, fs.ErrNotExist) {
		return c, err
	}
	tmp := disk.Temporary(dir)
	if err := removeAll(o.FS, tmp); err != nil {
		return c, err
	}
	if err := o.FS.MakeDir(tmp); err != nil {
		return c, err
	}
	defer func() {
		if err != nil {
			_ = removeAll(o.FS, tmp)
		}
	}()
	made := map[string]bool{".": true}
	c, _, err = read(ctx, file, ids, o, func(name string, r io.Reader) error {
		sub := path.Dir(name)
		if !made[sub] {
			if err := o.FS.MakeDir(filepath.Join(tmp, sub)); err != nil {
				return err
			}
			made[sub] = true
		}
		out, err := o.FS.Create(filepath.Join(tmp, filepath.FromSlash(name)))
		if err != nil {
			return err
		}
		_, err = io.CopyBuffer(struct{ io.Writer }{&appender{f: out}}, struct{ io.Reader }{r}, make([]byte, 256<<10))
		if err == nil && strings.HasPrefix(name, "journal/") && strings.HasSuffix(name, ".seg") {
			err = roundUp(out)
		}
		if err == nil {
			err = out.Sync()
		}
		return errors.Join(err, out.Close())
	})
	if err != nil {
		return c, err
	}
	for sub := range made {
		if err := o.FS.SyncDir(filepath.Join(tmp, sub)); err != nil {
			return c, err
		}
	}
	if ready != nil {
		if err := ready(tmp); err != nil {
			return c, err
		}
	}
	if err := o.FS.Rename(tmp, dir); err != nil {
		return c, err
	}
	return c, o.FS.SyncDir(filepath.Dir(dir))
}

// roundUp makes a journal's file as long as whole sectors, as it was before it was copied up to its end.
func roundUp(f disk.File) error {
	const sector = 512
	n, err := f.Size()
	if err != nil || n%sector == 0 && n > 0 {
		return err
	}
	return f.Preallocate((n/sector + 1) * sector)
}

// removeAll removes a folder that an earlier attempt left.
func removeAll(fsys disk.FS, dir string) error {
	es, err := fsys.List(dir)
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	if err != nil {
		return err
	}
	for _, e := range es {
		p := filepath.Join(dir, e.Name)
		if e.Dir {
			err = removeAll(fsys, p)
		} else {
			err = fsys.Remove(p)
		}
		if err != nil {
			return err
		}
	}
	return fsys.Remove(dir)
}

// Restore makes a store out of a backup and gives it a new incarnation before the folder has its name, so that no
// half-restored store can be written to. so unlocks it as it was unlocked when the backup was made.
func Restore(ctx context.Context, file string, ids []age.Identity, dir string, so storage.Options, o Options) (Contents, error) {
	return extractAnd(ctx, file, ids, dir, o.withDefaults(), func(tmp string) error {
		s, err := storage.Open(tmp, so)
		if err != nil {
			return fmt.Errorf("opening what was restored: %w", err)
		}
		return errors.Join(s.Renew(ctx), s.Close())
	})
}

// How many backups are kept.
const (
	keepDaily   = 7
	keepWeekly  = 5
	keepMonthly = 12
)

// Expired names the backups among file names that are no longer kept: of the newest days, weeks
// and months one each stays, the newest one. Other files are never named.
func Expired(names []string) []string {
	type made struct {
		name string
		at   time.Time
	}
	var all []made
	for _, n := range names {
		if at, ok := parseName(n); ok {
			all = append(all, made{n, at})
		}
	}
	slices.SortFunc(all, func(a, b made) int { return b.at.Compare(a.at) })
	keep := map[string]bool{}
	for _, rule := range []struct {
		n      int
		period func(time.Time) string
	}{
		{keepDaily, func(t time.Time) string { return t.Format("2006-01-02") }},
		{keepWeekly, func(t time.Time) string { y, w := t.ISOWeek(); return fmt.Sprint(y, "-", w) }},
		{keepMonthly, func(t time.Time) string { return t.Format("2006-01") }},
	} {
		seen := map[string]bool{}
		for _, m := range all {
			if p := rule.period(m.at); !seen[p] && len(seen) < rule.n {
				seen[p] = true
				keep[m.name] = true
			}
		}
	}
	var out []string
	for _, m := range all {
		if !keep[m.name] {
			out = append(out, m.name)
		}
	}
	slices.Sort(out)
	return out
}

// Tidy removes the backups of a folder that are no longer kept, once at least one that is kept reads
// back whole.
func Tidy(ctx context.Context, folder string, ids []age.Identity, o Options) error {
	o = o.withDefaults()
	names, err := list(folder, o)
	if err != nil {
		return fmt.Errorf("tidying the backups in %s: %w", folder, err)
	}
	expired := Expired(names)
	if len(expired) == 0 {
		return nil
	}
	if _, err := Verify(ctx, filepath.Join(folder, slices.Max(names)), ids, o); err != nil {
		return fmt.Errorf("the newest backup does not read back, so no older one was removed: %w", err)
	}
	for _, n := range expired {
		if err := o.FS.Remove(filepath.Join(folder, n)); err != nil {
			return fmt.Errorf("tidying the backups in %s: %w", folder, err)
		}
	}
	return nil
}
