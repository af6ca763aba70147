package storage

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"hash/crc32"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// Unlock says how a store is opened. With all fields zero a store opens only if it is not protected.
type Unlock struct {
	KeyFile    string // file with the key; Create makes it if it is not there
	Passphrase []byte
	Keyring    *key.Secret // the key from the user's system keyring, where that was chosen
	KeyInStore bool        // Create only: no protection, the key lies in the store
}

// ErrLocked means that the store needs a passphrase or a key file, or that the one given is
// not the right one.
var ErrLocked = errors.New("the practice is locked")

// The store's identity and its locked keys stand in practice.json, and once more in
// practice.bak, since without them nothing can be read.
const (
	identityFile   = "practice.json"
	identityBackup = "practice.bak"
	storeFormat    = 1
)

// identity is what a store knows of itself in clear, with its keys locked.
type identity struct {
	Format      int       `json:"format"`
	Site        string    `json:"site"`        // hexadecimal
	Device      string    `json:"device"`      // short name, shown to people
	Incarnation string    `json:"incarnation"` // hexadecimal, of the stream that is written now
	Earlier     []string  `json:"earlier,omitempty"`
	Made        time.Time `json:"made"`
	Protected   bool      `json:"protected"`
	Keys        []byte    `json:"keys"` // see package key
	// Limits holds, by stream, the last number that counts of a device that was removed.
	Limits map[string]uint64 `json:"limits,omitempty"`
	Sum    string            `json:"sum"` // CRC-32C of all the rest
}

func (id identity) sum() (string, error) {
	id.Sum = ""
	b, err := json.Marshal(id)
	return fmt.Sprintf("%08x", crc32.Checksum(b, crc32.MakeTable(crc32.Castagnoli))), err
}

func (id identity) stream() (change.Stream, error) {
	return change.ParseStream(id.Incarnation + id.Site)
}

// lives returns this device's incarnations in their order.
func (id identity) lives() []string { return append(slices.Clone(id.Earlier), id.Incarnation) }

func parseIdentity(b []byte) (identity, error) {
	var id identity
	if err := json.Unmarshal(b, &id); err != nil {
		return id, err
	}
	if id.Format > storeFormat {
		return id, fmt.Errorf("%w (store format %d); install the newer version to open it", change.ErrNewer, id.Format)
	}
	if sum, err := id.sum(); err != nil || sum != id.Sum {
		return id, errors.New("its checksum does not fit")
	}
	if _, err := id.stream(); err != nil {
		return id, err
	}
	if again, err := id.encode(); err != nil || !bytes.Equal(again, b) {
		return id, errors.New("it is not as it was written")
	}
	return id, nil
}

func (id identity) encode() ([]byte, error) {
	b, err := json.MarshalIndent(id, "", "  ")
	return append(b, '\n'), err
}

// writeIdentity replaces both copies, the spare one last, so that one of them is whole at any time.
func writeIdentity(fsys disk.FS, dir string, id identity) error {
	sum, err := id.sum()
	if err != nil {
		return err
	}
	id.Sum = sum
	b, err := id.encode()
	if err != nil {
		return err
	}
	if err := disk.Replace(fsys, filepath.Join(dir, identityFile), b); err != nil {
		return err
	}
	return disk.Replace(fsys, filepath.Join(dir, identityBackup), b)
}

// readIdentity reads the first copy that is whole, and says in damage which one was not.
// The error is fs.ErrNotExist where the folder holds no practice.
func readIdentity(fsys disk.FS, dir string) (id identity, damage []Problem, err error) {
	var first error
	for _, n := range []string{identityFile, disk.Temporary(identityFile), identityBackup, disk.Temporary(identityBackup)} {
		main := n == identityFile || n == identityBackup
		b, rerr := disk.ReadFile(fsys, filepath.Join(dir, n), 2<<20)
		if errors.Is(rerr, fs.ErrNotExist) {
			if main {
				damage = append(damage, Problem{File: n, Offset: -1, What: "this copy of the practice's keys is missing"})
			}
			continue
		}
		var found identity
		if rerr == nil {
			found, rerr = parseIdentity(b)
		}
		if rerr == nil {
			if n == identityFile { // look at the spare copy as well
				if sb, serr := disk.ReadFile(fsys, filepath.Join(dir, identityBackup), 2<<20); serr != nil {
					damage = append(damage, Problem{File: identityBackup, Offset: -1, What: "this copy of the practice's keys cannot be read: " + plain(serr)})
				} else if _, serr := parseIdentity(sb); serr != nil {
					damage = append(damage, Problem{File: identityBackup, Offset: -1, What: "this copy of the practice's keys is damaged: " + serr.Error()})
				}
			}
			return found, damage, nil
		}
		if errors.Is(rerr, fs.ErrPermission) {
			return id, nil, rerr
		}
		if main {
			damage = append(damage, Problem{File: n, Offset: -1, What: "this copy of the practice's keys is damaged: " + plain(rerr)})
		}
		if first == nil && main {
			first = fmt.Errorf("%s: %w", n, rerr)
		}
	}
	if first == nil { // half a temporary file at most: the practice was never finished
		return identity{}, nil, fmt.Errorf("%s holds no practice; make one there first, or name another folder: %w", dir, fs.ErrNotExist)
	}
	return identity{}, damage, first
}

// recoverIdentity finishes what a power cut interrupted on a disk that does not rename atomically.
func recoverIdentity(fsys disk.FS, dir string) error {
	good := func(b []byte) bool { _, err := parseIdentity(b); return err == nil }
	for _, n := range []string{identityFile, identityBackup} {
		if err := disk.Recover(fsys, filepath.Join(dir, n), good); err != nil {
			return err
		}
	}
	return nil
}

// newIdentity makes the identity of a new store with fresh keys.
func newIdentity(fsys disk.FS, u Unlock, now time.Time, join *joined) (identity, key.Bag, error) {
	id := identity{Format: storeFormat, Site: change.NewSite().String(), Device: deviceName(),
		Incarnation: change.NewIncarnation().String(), Made: now.UTC().Truncate(time.Second)}
	var bag key.Bag
	var err error
	if join != nil {
		bag, id.Site, id.Incarnation = join.bag, join.site.String(), join.inc.String()
	} else if bag, err = key.NewBag(NewID()); err != nil {
		return id, bag, err
	}
	id.Protected = true
	var opener key.Opener
	switch {
	case len(u.Passphrase) > 0:
		opener = key.Passphrase(u.Passphrase)
	case u.KeyFile != "":
		if err := makeKeyFile(fsys, u.KeyFile); err != nil {
			return id, bag, err
		}
		if opener, err = readKeyFile(fsys, u.KeyFile); err != nil {
			return id, bag, err
		}
	case u.Keyring != nil:
		opener = key.Keyring(*u.Keyring)
	case u.KeyInStore:
		opener, id.Protected = key.InStore(), false
	default:
		return id, bag, errors.New("a new practice needs a passphrase, a key file, or the word that it is to stay unprotected")
	}
	id.Keys, err = bag.Lock(key.Usual, opener)
	return id, bag, err
}

func makeKeyFile(fsys disk.FS, name string) error {
	there, err := disk.Exists(fsys, name)
	if err != nil || there {
		return err
	}
	return disk.Replace(fsys, name, key.FormatKeyFile(key.NewSecret()))
}

// KeyFile returns what opens a practice with a key file, which it makes if it is not there.
func KeyFile(name string) (key.Opener, error) {
	fsys := disk.OS()
	if err := makeKeyFile(fsys, name); err != nil {
		return key.Opener{}, explain("making the key file "+name, err)
	}
	return readKeyFile(fsys, name)
}

func readKeyFile(fsys disk.FS, name string) (key.Opener, error) {
	b, err := disk.ReadFile(fsys, name, 4096)
	if err != nil {
		return key.Opener{}, fmt.Errorf("%w: its key file cannot be read: %w", ErrLocked, err)
	}
	s, err := key.ParseKeyFile(b)
	if err != nil {
		return key.Opener{}, fmt.Errorf("%w: %s: %w", ErrLocked, name, err)
	}
	return key.File(s), nil
}

// unlock opens the keys.
func (id identity) unlock(fsys disk.FS, u Unlock) (key.Bag, error) {
	opener := key.InStore()
	if id.Protected {
		switch {
		case len(u.Passphrase) > 0:
			opener = key.Passphrase(u.Passphrase)
		case u.KeyFile != "":
			var err error
			if opener, err = readKeyFile(fsys, u.KeyFile); err != nil {
				return key.Bag{}, err
			}
		case u.Keyring != nil:
			opener = key.Keyring(*u.Keyring)
		default:
			return key.Bag{}, fmt.Errorf("%w: it needs its passphrase or its key file", ErrLocked)
		}
	}
	bag, err := key.Unlock(id.Keys, opener)
	if errors.Is(err, key.ErrLocked) || errors.Is(err, key.ErrNoLock) {
		return bag, fmt.Errorf("%w: %w", ErrLocked, err)
	}
	return bag, err
}

// deviceName makes a short name for this device from the computer's.
func deviceName() string {
	host, err := os.Hostname()
	if err != nil {
		host = ""
	}
	host, _, _ = strings.Cut(host, ".")
	host = strings.Map(func(r rune) rune {
		if r < ' ' || r == 0x7f {
			return -1
		}
		return r
	}, host)
	if host == "" {
		return "device"
	}
	return host[:min(len(host), 40)]
}

// plain returns an error's words without a path before them.
func plain(err error) string {
	var p *fs.PathError
	if errors.As(err, &p) {
		return p.Err.Error()
	}
	return err.Error()
}
