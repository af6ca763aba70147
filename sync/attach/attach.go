// Package attach keeps what is sealed under a key per owner: photos, films and documents, and an owner's contact
// data.
//
// A file is an age file (age-encryption.org/v1: the payload in chunks of 64 KiB) whose file key is sealed with
// the owner's key. Its name is an HMAC of its bytes, so that every device of the practice can tell that it is
// whole without opening it, and nobody else learns what two files have in common. Files never change.
//
// An owner's key is random and lies outside the journal, in owners/. To erase an owner's data on request
// the key is destroyed, on every device at its next contact; what was sealed with it cannot be read by anybody
// any more. That it was erased, by whom and when, stays in the record.
package attach

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"path/filepath"
	"strings"
	"sync"

	"filippo.io/age"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/audit"
	"cordwalk.example/cordwalk/sync/carry"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

const (
	filesDir  = "files"
	ownersDir = "owners"
	attExt    = ".att"
	ownerExt  = ".owner"
	stanza    = "cordwalk-owner"
	maxOwner  = 1 << 10
	// MaxFile is the size of the largest attachment in bytes, sealed.
	MaxFile = 8 << 30
)

// ErrErased means that the owner's data were erased on request.
var ErrErased = errors.New("this owner's data were erased on request")

// ErrNoKey means that the owner's key has not come to this device yet.
var ErrNoKey = errors.New("the key of this owner has not come to this device yet; exchange with the others first")

// Files is the part of a store that is sealed by owner. It is safe for use by several goroutines.
type Files struct {
	s  *storage.Store
	fs disk.FS

	mu     sync.Mutex
	keys   map[exam.ID][]ownerKey
	erased map[exam.ID]bool // on request
	gone   map[exam.ID]bool // of these, whose keys and files are destroyed here
	turn   uint64           // of the store's keys, see meet
	given  map[string]bool  // files whose key the store has
}

type ownerKey struct {
	name string // of its file
	key  key.OwnerKey
}

// Open reads the keys of owners beside a store, and destroys those of owners whose data were erased.
func Open(ctx context.Context, s *storage.Store, fsys disk.FS) (*Files, error) {
	if fsys == nil {
		fsys = disk.OS()
	}
	f := &Files{s: s, fs: fsys, keys: map[exam.ID][]ownerKey{}, erased: map[exam.ID]bool{}, gone: map[exam.ID]bool{}, given: map[string]bool{}}
	for _, d := range []string{filesDir, ownersDir} {
		if err := fsys.MakeDir(filepath.Join(s.Dir(), d)); err != nil {
			return nil, fmt.Errorf("opening the attachments: %w", err)
		}
	}
	es, err := fsys.List(filepath.Join(s.Dir(), ownersDir))
	if err != nil {
		return nil, fmt.Errorf("opening the attachments: %w", err)
	}
	for _, e := range es {
		if e.Dir || e.Size > maxOwner || !strings.HasSuffix(e.Name, ownerExt) {
			continue
		}
		b, err := disk.ReadFile(fsys, f.ownerFile(e.Name), maxOwner)
		if err != nil {
			return nil, fmt.Errorf("opening the attachments: %w", err)
		}
		if owner, k, err := f.parseOwner(e.Name, b); err == nil {
			f.keys[owner] = append(f.keys[owner], ownerKey{e.Name, k})
		}
	}
	return f, f.Obey(ctx)
}

func (f *Files) ownerFile(name string) string { return filepath.Join(f.s.Dir(), ownersDir, name) }
func (f *Files) file(name string) string      { return filepath.Join(f.s.Dir(), filesDir, name) }

func (f *Files) nameOf(kind string, sum []byte) string { return nameOf(f.s.Bag().Ring, kind, sum) }

// nameOf makes the name of a file out of the SHA-256 of its bytes.
func nameOf(ring *key.Ring, kind string, sum []byte) string {
	m := ring.Names().MAC([]byte(kind), sum)
	return hex.EncodeToString(m[:16]) + kind
}

// tag names an owner in a file's header.
func (f *Files) tag(owner exam.ID) string {
	m := f.s.Bag().Ring.Names().MAC([]byte("owner"), owner[:])
	return hex.EncodeToString(m[:16])
}

// An owner's file: 4 bytes of epoch, then owner and key sealed with that epoch's wrapping key.
func (f *Files) sealOwner(owner exam.ID, k key.OwnerKey) []byte {
	ring := f.s.Bag().Ring
	w, _ := ring.Wrap(ring.Current())
	return append(binary.BigEndian.AppendUint32(nil, ring.Current()), w.Seal(append(owner[:], k[:]...), []byte(ownersDir))...)
}

func (f *Files) parseOwner(name string, b []byte) (owner exam.ID, k key.OwnerKey, err error) {
	sum := sha256.Sum256(b)
	if f.nameOf(ownerExt, sum[:]) != name {
		return owner, k, fmt.Errorf("an owner's key: %w", change.ErrMalformed)
	}
	return openOwner(f.s.Bag().Ring, b)
}

func openOwner(ring *key.Ring, b []byte) (owner exam.ID, k key.OwnerKey, err error) {
	if len(b) < 4 {
		return owner, k, fmt.Errorf("an owner's key: %w", change.ErrMalformed)
	}
	w, ok := ring.Wrap(binary.BigEndian.Uint32(b))
	if !ok {
		return owner, k, fmt.Errorf("an owner's key: %w", change.ErrNoKey)
	}
	plain, err := w.Open(b[4:], []byte(ownersDir))
	if err != nil || len(plain) != len(owner)+len(k) {
		return owner, k, fmt.Errorf("an owner's key: %w", change.ErrSealed)
	}
	return exam.ID(plain[:16]), key.OwnerKey(plain[16:]), nil
}

// OwnersDir is the folder in a store, and in a backup of it, where each file holds the key of one owner.
const OwnersDir = ownersDir

// OwnerOf returns whose key a file in OwnersDir holds.
func OwnerOf(ring *key.Ring, file []byte) (exam.ID, error) {
	owner, _, err := openOwner(ring, file)
	return owner, err
}

// ownerKeys returns the keys of an owner, and makes the first one if it is wanted and the store has none for the
// contact data.
func (f *Files) ownerKeys(owner exam.ID, make bool) ([]ownerKey, error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	if f.erased[owner] {
		return nil, ErrErased
	}
	if len(f.keys[owner]) == 0 && make {
		if err := f.meet(context.Background()); err != nil {
			return nil, err
		}
	}
	if ks := f.keys[owner]; len(ks) > 0 || !make {
		if len(ks) == 0 {
			return nil, ErrNoKey
		}
		return ks, nil
	}
	k := key.NewSecret()
	b := f.sealOwner(owner, k)
	sum := sha256.Sum256(b)
	name := f.nameOf(ownerExt, sum[:])
	if err := disk.Replace(f.fs, f.ownerFile(name), b); err != nil {
		return nil, fmt.Errorf("keeping the owner's key: %w", err)
	}
	f.keys[owner] = append(f.keys[owner], ownerKey{name, k})
	return f.keys[owner], nil
}

// recipient seals an age file key with an owner's key.
type recipient struct {
	tag string
	key key.OwnerKey
}

func (r recipient) Wrap(fileKey []byte) ([]*age.Stanza, error) {
	return []*age.Stanza{{Type: stanza, Args: []string{r.tag}, Body: r.key.Derive("attachment").Seal(fileKey, []byte(r.tag))}}, nil
}

// identity opens it with any of the owner's keys.
type identity struct {
	tag  string
	keys []ownerKey
}

func (i identity) Unwrap(ss []*age.Stanza) ([]byte, error) {
	for _, s := range ss {
		if s.Type != stanza || len(s.Args) != 1 || s.Args[0] != i.tag {
			continue
		}
		for _, k := range i.keys {
			if fileKey, err := k.key.Derive("attachment").Open(s.Body, []byte(i.tag)); err == nil {
				return fileKey, nil
			}
		}
	}
	return nil, age.ErrIncorrectIdentity
}

// SealContact seals an owner's contact data, to be kept as the value of a field. The first time it makes the
// owner's key.
func (f *Files) SealContact(owner exam.ID, plain []byte) ([]byte, error) {
	ks, err := f.ownerKeys(owner, true)
	if err != nil {
		return nil, err
	}
	return ks[0].key.Derive("contact").Seal(plain, owner[:]), nil
}

// OpenContact is the inverse of SealContact. The error is ErrErased, ErrNoKey or change.ErrSealed.
func (f *Files) OpenContact(owner exam.ID, sealed []byte) ([]byte, error) {
	ks, err := f.ownerKeys(owner, false)
	if err != nil {
		return nil, err
	}
	for _, k := range ks {
		if plain, err := k.key.Derive("contact").Open(sealed, owner[:]); err == nil {
			return plain, nil
		}
	}
	return nil, change.ErrSealed
}

// Add seals a file and keeps it. It is durable when Add returns its name.
func (f *Files) Add(ctx context.Context, owner exam.ID, r io.Reader) (name string, err error) {
	defer func() {
		if err != nil {
			err = fmt.Errorf("keeping the attachment: %w", err)
		}
	}()
	ks, err := f.ownerKeys(owner, true)
	if err != nil {
		return "", err
	}
	var x [8]byte
	fresh := key.NewSecret()
	copy(x[:], fresh[:])
	return f.take(ctx, "adding-"+hex.EncodeToString(x[:])+disk.Temporary(""), func(w io.Writer) error {
		sealed, err := age.Encrypt(w, recipient{f.tag(owner), ks[0].key})
		if err != nil {
			return err
		}
		if _, err := io.Copy(sealed, r); err != nil {
			return err
		}
		return sealed.Close()
	}, "")
}

// take writes a file under a passing name, then gives it the name that its bytes have. Where want is given,
// another name is an error.
func (f *Files) take(ctx context.Context, tmp string, write func(io.Writer) error, want string) (name string, err error) {
	path := f.file(tmp)
	if err := f.fs.Remove(path); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return "", err
	}
	out, err := f.fs.Create(path)
	if err != nil {
		return "", err
	}
	defer func() {
		if err != nil {
			_ = f.fs.Remove(path)
		}
	}()
	sum := sha256.New()
	w := &writer{ctx: ctx, f: out}
	err = write(io.MultiWriter(w, sum))
	if err == nil {
		err = out.Sync()
	}
	if err = errors.Join(err, out.Close()); err != nil {
		return "", err
	}
	// Read back: a disk that kept something else is found out now, not when the photo is missed.
	back, err := sumOf(ctx, f.fs, path)
	if err != nil {
		return "", err
	}
	if !bytes.Equal(back, sum.Sum(nil)) {
		return "", errors.New("it reads back differently from what was written: the disk or this computer is faulty")
	}
	name = f.nameOf(attExt, back)
	if want != "" && name != want {
		return "", fmt.Errorf("%w: its bytes are not those that its name stands for", change.ErrMalformed)
	}
	if err = f.fs.Rename(path, f.file(name)); err != nil {
		return "", err
	}
	if err = f.fs.SyncDir(filepath.Join(f.s.Dir(), filesDir)); err != nil {
		return "", err
	}
	return name, nil
}

type writer struct {
	ctx context.Context
	f   disk.File
	at  int64
}

func (w *writer) Write(b []byte) (int, error) {
	if err := w.ctx.Err(); err != nil {
		return 0, err
	}
	if w.at+int64(len(b)) > MaxFile {
		return 0, fmt.Errorf("it is larger than %d GiB", MaxFile>>30)
	}
	n, err := w.f.WriteAt(b, w.at)
	w.at += int64(n)
	return n, err
}

func sumOf(ctx context.Context, fsys disk.FS, path string) ([]byte, error) {
	in, err := fsys.Open(path)
	if err != nil {
		return nil, err
	}
	defer in.Close()
	size, err := in.Size()
	if err != nil {
		return nil, err
	}
	sum := sha256.New()
	r := io.NewSectionReader(in, 0, size)
	for buf := make([]byte, 256<<10); ; {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		n, err := r.Read(buf)
		sum.Write(buf[:n])
		if errors.Is(err, io.EOF) {
			return sum.Sum(nil), nil
		}
		if err != nil {
			return nil, err
		}
	}
}

type reader struct {
	io.Reader
	io.Closer
}

// Read opens a file of an owner. Close it. A damaged file fails at the damaged chunk, before anything of
// that chunk is given out.
func (f *Files) Read(owner exam.ID, name string) (io.ReadCloser, error) {
	if !goodName(name) {
		return nil, fmt.Errorf("reading the attachment %.80q: %w", name, fs.ErrInvalid)
	}
	ks, err := f.ownerKeys(owner, false)
	if err != nil {
		return nil, err
	}
	in, err := f.fs.Open(f.file(name))
	if err != nil {
		return nil, fmt.Errorf("reading the attachment: %w", err)
	}
	size, err := in.Size()
	if err == nil {
		var r io.Reader
		if r, err = age.Decrypt(io.NewSectionReader(in, 0, size), identity{f.tag(owner), ks}); err == nil {
			return reader{r, in}, nil
		}
	}
	in.Close()
	var none *age.NoIdentityMatchError
	if errors.As(err, &none) {
		err = change.ErrSealed
	}
	return nil, fmt.Errorf("reading the attachment: %w", err)
}

func goodName(name string) bool {
	base, ok := strings.CutSuffix(name, attExt)
	return ok && len(base) == 32 && strings.Trim(base, "0123456789abcdef") == ""
}

const erasedField = "erased/"

// Erase erases an owner's data at the owner's request: it destroys the owner's keys here, of contact data and of
// files, and tells the other devices to do the same at their next contact. The record keeps who erased and
// when. The owner is named by the patient's id.
func (f *Files) Erase(ctx context.Context, examiner string, owner exam.ID, reason string) error {
	if err := f.s.EraseOwner(ctx, examiner, owner, reason); err != nil {
		return fmt.Errorf("erasing an owner's data: %w", err)
	}
	if err := audit.Write(ctx, f.s, examiner, audit.Erased, owner.String()+": "+reason); err != nil {
		return err
	}
	return f.Obey(ctx)
}

// Obey implements carry.Attachments: it destroys the keys and files of owners whose data were erased, here or on
// another device.
func (f *Files) Obey(ctx context.Context) error {
	f.mu.Lock()
	defer f.mu.Unlock()
	return f.obey(ctx)
}

// obey is Obey. mu must be held.
func (f *Files) obey(ctx context.Context) error {
	fields, err := f.s.Fields(storage.Kind(change.KindOwner), exam.ID{}, exam.ID{})
	if err != nil {
		return fmt.Errorf("looking for owners whose data were erased: %w", err)
	}
	var owners []exam.ID // whose data are still to be destroyed here
	tags := map[string]bool{}
	for name := range fields {
		text, ok := strings.CutPrefix(name, erasedField)
		owner, err := exam.ParseID(text)
		if !ok || err != nil || f.gone[owner] {
			continue
		}
		owners = append(owners, owner)
		f.erased[owner] = true // from now on nothing of it is taken in
		tags[f.tag(owner)] = true
		for _, k := range f.keys[owner] {
			if err := f.destroy(f.ownerFile(k.name)); err != nil {
				return fmt.Errorf("destroying an owner's key: %w", err)
			}
		}
		delete(f.keys, owner)
		if err := f.s.ForgetOwner(owner); err != nil {
			return fmt.Errorf("destroying an owner's key: %w", err)
		}
	}
	if len(tags) > 0 {
		if err := f.finishDestroying(); err != nil {
			return fmt.Errorf("destroying what an owner asked to be erased: %w", err)
		}
		es, err := f.fs.List(filepath.Join(f.s.Dir(), filesDir))
		if err != nil {
			return fmt.Errorf("looking for files of owners whose data were erased: %w", err)
		}
		for _, e := range es {
			if err := ctx.Err(); err != nil {
				return err
			}
			if goodName(e.Name) && tags[f.tagOf(f.file(e.Name))] {
				if err := f.destroy(f.file(e.Name)); err != nil {
					return fmt.Errorf("destroying a file of an owner: %w", err)
				}
			}
		}
	}
	for _, owner := range owners {
		f.gone[owner] = true
	}
	return f.meet(ctx)
}

// goneExt marks a file that is being destroyed: its beginning may be overwritten already, so that nothing in it tells
// any more whose it was.
const goneExt = ".gone"

// destroy overwrites the beginning of a file and removes it. On many disks the old bytes may still be found
// by somebody who takes the disk apart; the key is what they would need.
func (f *Files) destroy(path string) error {
	if !strings.HasSuffix(path, goneExt) {
		switch err := f.fs.Rename(path, path+goneExt); {
		case errors.Is(err, fs.ErrNotExist):
			return nil
		case err != nil:
			return err
		}
		path += goneExt
	}
	if e, err := f.fs.Edit(path); err == nil {
		size, _ := e.Size()
		_, werr := e.WriteAt(make([]byte, min(size, 4096)), 0)
		err = errors.Join(werr, e.SyncData(), e.Close())
		if err != nil {
			return err
		}
	}
	if err := f.fs.Remove(path); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	return f.fs.SyncDir(filepath.Dir(path))
}

// finishDestroying goes on where an earlier destroying was interrupted.
func (f *Files) finishDestroying() error {
	for _, dir := range []string{filesDir, ownersDir} {
		es, err := f.fs.List(filepath.Join(f.s.Dir(), dir))
		if err != nil {
			return err
		}
		for _, e := range es {
			if strings.HasSuffix(e.Name, goneExt) && !e.Dir {
				if err := f.destroy(filepath.Join(f.s.Dir(), dir, e.Name)); err != nil {
					return err
				}
			}
		}
	}
	return nil
}

// tagOf reads the owner's tag from a file's header, "" if there is none.
func (f *Files) tagOf(path string) string {
	in, err := f.fs.Open(path)
	if err != nil {
		return ""
	}
	defer in.Close()
	b := make([]byte, 512)
	n, _ := in.ReadAt(b, 0)
	return tagIn(b[:n])
}

func tagIn(head []byte) string {
	_, rest, ok := bytes.Cut(head, []byte("\n-> "+stanza+" "))
	if !ok || len(rest) < 32 {
		return ""
	}
	return string(rest[:32])
}

// Check reads every file of attachments and owners' keys in a store's folder and says which are damaged. It changes
// nothing. It is a storage.Checker.
func Check(ctx context.Context, fsys disk.FS, dir string, ring *key.Ring) ([]storage.Problem, error) {
	var out []storage.Problem
	for _, in := range []struct{ dir, ext, bad string }{
		{filesDir, attExt, "it is damaged; an exchange brings it back if another device has it whole"},
		{ownersDir, ownerExt, "the key of an owner is damaged; an exchange brings it back if another device has it"},
	} {
		es, err := fsys.List(filepath.Join(dir, in.dir))
		if errors.Is(err, fs.ErrNotExist) {
			continue
		}
		if err != nil {
			return nil, fmt.Errorf("checking the attachments: %w", err)
		}
		for _, e := range es {
			if e.Dir || !goodName(strings.TrimSuffix(e.Name, in.ext)+attExt) || !strings.HasSuffix(e.Name, in.ext) {
				continue
			}
			p := storage.Problem{File: in.dir + "/" + e.Name, Offset: -1}
			sum, err := sumOf(ctx, fsys, filepath.Join(dir, in.dir, e.Name))
			if ctx.Err() != nil {
				return nil, ctx.Err()
			}
			switch {
			case err != nil:
				p.What = "it cannot be read: " + err.Error()
			case nameOf(ring, in.ext, sum) != e.Name:
				p.What = in.bad
			default:
				continue
			}
			out = append(out, p)
		}
	}
	return out, nil
}

// Check is Check for this store.
func (f *Files) Check(ctx context.Context) ([]storage.Problem, error) {
	return Check(ctx, f.fs, f.s.Dir(), f.s.Bag().Ring)
}

// Repair sets damaged files aside so that an exchange brings them back.
func (f *Files) Repair(ctx context.Context) ([]storage.Problem, error) {
	ps, err := f.Check(ctx)
	for _, p := range ps {
		path := filepath.Join(f.s.Dir(), filepath.FromSlash(p.File))
		if err := f.fs.Rename(path, disk.Aside(path, "damaged")); err != nil {
			return ps, fmt.Errorf("setting a damaged attachment aside: %w", err)
		}
	}
	return ps, err
}

// List implements carry.Attachments.
func (f *Files) List(ctx context.Context) ([]carry.FileRef, error) {
	if err := f.Obey(ctx); err != nil {
		return nil, err
	}
	var out []carry.FileRef
	for dir, ext := range map[string]string{filesDir: attExt, ownersDir: ownerExt} {
		es, err := f.fs.List(filepath.Join(f.s.Dir(), dir))
		if err != nil {
			return nil, err
		}
		for _, e := range es {
			if !e.Dir && strings.HasSuffix(e.Name, ext) {
				out = append(out, carry.FileRef{Name: e.Name, Size: e.Size})
			}
		}
	}
	return out, nil
}

func (f *Files) path(name string) (string, error) {
	switch {
	case goodName(name):
		return f.file(name), nil
	case goodName(strings.TrimSuffix(name, ownerExt)+attExt) && strings.HasSuffix(name, ownerExt):
		return f.ownerFile(name), nil
	}
	return "", fmt.Errorf("the attachment %.80q: %w", name, fs.ErrInvalid)
}

// Open implements carry.Attachments.
func (f *Files) Open(_ context.Context, name string) (io.ReadCloser, error) {
	p, err := f.path(name)
	if err != nil {
		return nil, err
	}
	in, err := f.fs.Open(p)
	if err != nil {
		return nil, err
	}
	size, err := in.Size()
	if err != nil {
		return nil, errors.Join(err, in.Close())
	}
	return reader{io.NewSectionReader(in, 0, size), in}, nil
}

// Wanted implements carry.Attachments.
func (f *Files) Wanted(_ context.Context, name string) (bool, error) {
	p, err := f.path(name)
	if err != nil {
		return false, nil
	}
	there, err := disk.Exists(f.fs, p)
	return !there, err
}

// Take implements carry.Attachments. The error is carry.ErrUnwanted for what was erased.
func (f *Files) Take(ctx context.Context, name string, size int64, r io.Reader) error {
	if size > MaxFile {
		return fmt.Errorf("%w: it has %d bytes", change.ErrMalformed, size)
	}
	if strings.HasSuffix(name, ownerExt) {
		b, err := io.ReadAll(io.LimitReader(r, maxOwner+1))
		if err != nil {
			return err
		}
		owner, k, err := f.parseOwner(name, b)
		if err != nil {
			return err
		}
		f.mu.Lock()
		defer f.mu.Unlock()
		if f.erased[owner] {
			return carry.ErrUnwanted
		}
		if err := disk.Replace(f.fs, f.ownerFile(name), b); err != nil {
			return err
		}
		f.keys[owner] = append(f.keys[owner], ownerKey{name, k})
		return nil
	}
	head := make([]byte, 512)
	n, err := io.ReadFull(r, head)
	if err != nil && !errors.Is(err, io.ErrUnexpectedEOF) {
		return err
	}
	tag := tagIn(head[:n])
	f.mu.Lock()
	for owner := range f.erased {
		if f.tag(owner) == tag {
			f.mu.Unlock()
			return carry.ErrUnwanted
		}
	}
	f.mu.Unlock()
	_, err = f.take(ctx, "taking-"+name[:16]+disk.Temporary(""), func(w io.Writer) error {
		_, err := io.Copy(w, io.LimitReader(io.MultiReader(bytes.NewReader(head[:n]), r), size))
		return err
	}, name)
	return err
}
