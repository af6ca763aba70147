package key

import (
	"bytes"
	"crypto/ed25519"
	"encoding/hex"
	"errors"
	"fmt"
	"strings"

	"filippo.io/age"
	"github.com/fxamacker/cbor/v2"
	"golang.org/x/crypto/argon2"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
)

// Bag is all that a store keeps secret.
type Bag struct {
	Practice exam.ID
	Ring     *Ring
	Device   Device

	key   Secret // of the file that the bag came from or went into
	locks []lock
}

// NewBag makes the keys of a new practice and of its first device.
func NewBag(practice exam.ID) (Bag, error) {
	d, err := NewDevice()
	if err != nil {
		return Bag{}, err
	}
	r, err := NewRing(Epoch{1, NewSecret()})
	return Bag{Practice: practice, Ring: r, Device: d}, err
}

// ErrLocked means that the bag has a lock of the kind that was tried, and it did not open.
var ErrLocked = errors.New("the passphrase or key is not the right one")

// ErrNoLock means that the bag has no lock of the kind that was tried.
var ErrNoLock = errors.New("this practice does not open in this way")

// The kinds of lock.
const (
	kindStore      = 1 // the key lies beside the lock: no protection
	kindPassphrase = 2
	kindSecret     = 3 // a key file
	kindKeyring    = 4 // the user's system keyring
)

// Opener opens a lock.
type Opener struct {
	kind   uint8
	secret []byte
}

// Passphrase opens the lock that a passphrase opens, stretched by Argon2id.
func Passphrase(p []byte) Opener { return Opener{kindPassphrase, p} }

// InStore opens the lock of a practice without protection: its key lies in the store.
func InStore() Opener { return Opener{kind: kindStore} }

// File opens the lock of a key file; see ParseKeyFile.
func File(s Secret) Opener { return Opener{kindSecret, s[:]} }

// Keyring opens the lock whose key lies in the user's system keyring.
func Keyring(s Secret) Opener { return Opener{kindKeyring, s[:]} }

// Stretch says how hard guessing a passphrase is made: Argon2id (RFC 9106).
type Stretch struct {
	Time    uint32 // passes
	Memory  uint32 // KiB
	Threads uint8
}

// Usual is RFC 9106's second recommended choice: 3 passes over 64 MiB with 4 lanes.
var Usual = Stretch{Time: 3, Memory: 64 << 10, Threads: 4}

// A file that asks for more than this is refused: it would stop the computer, not a thief.
var most = Stretch{Time: 16, Memory: 1 << 20, Threads: 16}

func (s Stretch) key(secret, salt []byte) Secret {
	return Secret(argon2.IDKey(secret, salt, s.Time, s.Memory, s.Threads, 32))
}

type lock struct {
	Kind    uint8  `cbor:"1,keyasint"`
	Salt    []byte `cbor:"2,keyasint,omitempty"`
	Time    uint32 `cbor:"3,keyasint,omitempty"`
	Memory  uint32 `cbor:"4,keyasint,omitempty"`
	Threads uint8  `cbor:"5,keyasint,omitempty"`
	Key     []byte `cbor:"6,keyasint"` // the bag's key, sealed, or for kindStore in clear
}

type bagFile struct {
	Format   string  `cbor:"1,keyasint"`
	Practice exam.ID `cbor:"2,keyasint"`
	Locks    []lock  `cbor:"3,keyasint"`
	Sealed   []byte  `cbor:"4,keyasint"`
}

type bagBody struct {
	Epochs   []Epoch `cbor:"1,keyasint"`
	Identity string  `cbor:"2,keyasint"`
	Seed     Secret  `cbor:"3,keyasint"`
}

const bagFormat = "cordwalk keys 1"

// MaxBagFile is the length of the longest bag file in bytes.
const MaxBagFile = 1 << 20

var (
	enc cbor.EncMode
	dec cbor.DecMode
)

func init() {
	var err error
	if enc, err = cbor.CoreDetEncOptions().EncMode(); err != nil {
		panic(err)
	}
	dec, err = cbor.DecOptions{
		DupMapKey: cbor.DupMapKeyEnforcedAPF, IndefLength: cbor.IndefLengthForbidden, TagsMd: cbor.TagsForbidden,
		MaxNestedLevels: 8, MaxArrayElements: 4096, MaxMapPairs: 64, ExtraReturnErrors: cbor.ExtraDecErrorUnknownField,
	}.DecMode()
	if err != nil {
		panic(err)
	}
}

// Lock returns the bag sealed, to be opened by any one of the openers.
func (b *Bag) Lock(s Stretch, openers ...Opener) ([]byte, error) {
	if len(openers) == 0 {
		return nil, errors.New("locking the practice's keys: no way to open them was given")
	}
	k := NewSecret()
	var locks []lock
	for _, o := range openers {
		l := lock{Kind: o.kind}
		switch o.kind {
		case kindStore:
			l.Key = k[:]
		case kindPassphrase:
			if len(o.secret) == 0 {
				return nil, errors.New("locking the practice's keys: the passphrase is empty")
			}
			salt := NewSecret()
			l.Salt, l.Time, l.Memory, l.Threads = salt[:16], s.Time, s.Memory, s.Threads
			l.Key = s.key(o.secret, l.Salt).Seal(k[:], l.context(b.Practice))
		case kindSecret, kindKeyring:
			l.Key = Secret(o.secret).Derive("bag").Seal(k[:], l.context(b.Practice))
		}
		locks = append(locks, l)
	}
	sealed := *b
	sealed.key, sealed.locks = k, locks
	data, err := sealed.Reseal()
	if err != nil {
		return nil, err
	}
	if _, err := Unlock(data, openers[0]); err != nil {
		return nil, fmt.Errorf("the keys did not open again right after they were locked: %w", err)
	}
	*b = sealed
	return data, nil
}

// Reseal returns the bag sealed under the locks that it has, after its ring has changed. The bag
// must have been locked or unlocked before.
func (b *Bag) Reseal() ([]byte, error) {
	if len(b.locks) == 0 {
		return nil, errors.New("sealing the practice's keys: they have no lock yet")
	}
	body, err := enc.Marshal(bagBody{b.Ring.epochs, b.Device.identity.String(), Secret(b.Device.sign.Seed())})
	if err != nil {
		return nil, err
	}
	f := bagFile{Format: bagFormat, Practice: b.Practice, Locks: b.locks}
	f.Sealed = b.key.Seal(body, f.context())
	data, err := enc.Marshal(f)
	if err != nil {
		return nil, err
	}
	if _, err := f.open(b.key); err != nil {
		return nil, fmt.Errorf("the keys did not open again right after they were sealed: %w", err)
	}
	return data, nil
}

func (f bagFile) context() []byte { return append([]byte(f.Format+"\x00"), f.Practice[:]...) }

// context ties a lock's parameters to what it seals, so that nobody can weaken them.
func (l lock) context(practice exam.ID) []byte {
	l.Key = nil
	b, err := enc.Marshal(l)
	if err != nil {
		panic(err) // a struct of numbers and bytes
	}
	return append(practice[:], b...)
}

func parseBag(data []byte) (bagFile, error) {
	if len(data) > MaxBagFile {
		return bagFile{}, fmt.Errorf("the file of keys: %w: it has %d bytes", change.ErrMalformed, len(data))
	}
	var f bagFile
	if err := dec.Unmarshal(data, &f); err != nil {
		return bagFile{}, fmt.Errorf("the file of keys: %w: %s", change.ErrMalformed, err)
	}
	if f.Format != bagFormat {
		if strings.HasPrefix(f.Format, "cordwalk keys ") {
			return bagFile{}, fmt.Errorf("the file of keys: %w", change.ErrNewer)
		}
		return bagFile{}, fmt.Errorf("the file of keys: %w: it is no file of keys", change.ErrMalformed)
	}
	if again, err := enc.Marshal(f); err != nil || !bytes.Equal(again, data) {
		return bagFile{}, fmt.Errorf("the file of keys: %w: it is not in its one allowed encoding", change.ErrMalformed)
	}
	return f, nil
}

// Locks says whose keys a bag file holds and what opens it.
type Locks struct {
	Practice                           exam.ID
	InStore, Passphrase, File, Keyring bool
}

// LocksOf reads what a bag file says of its locks, without opening any.
func LocksOf(data []byte) (Locks, error) {
	f, err := parseBag(data)
	if err != nil {
		return Locks{}, err
	}
	out := Locks{Practice: f.Practice}
	for _, l := range f.Locks {
		switch l.Kind {
		case kindStore:
			out.InStore = true
		case kindPassphrase:
			out.Passphrase = true
		case kindSecret:
			out.File = true
		case kindKeyring:
			out.Keyring = true
		}
	}
	return out, nil
}

// Protected reports whether a bag file needs something from outside the store to be opened.
func Protected(data []byte) (bool, error) {
	l, err := LocksOf(data)
	return err == nil && !l.InStore, err
}

// Unlock opens a bag file. The error is ErrLocked for a wrong passphrase or key, ErrNoLock
// where the bag has no lock of that kind, change.ErrMalformed for a damaged file.
func Unlock(data []byte, o Opener) (Bag, error) {
	f, err := parseBag(data)
	if err != nil {
		return Bag{}, err
	}
	err = ErrNoLock
	for _, l := range f.Locks {
		if l.Kind != o.kind {
			continue
		}
		k, kerr := l.open(o, f.Practice)
		if kerr != nil {
			err = kerr
			continue
		}
		return f.open(k)
	}
	return Bag{}, err
}

func (l lock) open(o Opener, practice exam.ID) (Secret, error) {
	var plain []byte
	switch l.Kind {
	case kindStore:
		plain = l.Key
	case kindPassphrase:
		s := Stretch{l.Time, l.Memory, l.Threads}
		if s.Time == 0 || s.Threads == 0 || s.Time > most.Time || s.Memory > most.Memory || s.Threads > most.Threads || len(l.Salt) != 16 {
			return Secret{}, fmt.Errorf("the file of keys: %w: it asks for an unreasonable stretching of the passphrase", change.ErrMalformed)
		}
		var err error
		if plain, err = s.key(o.secret, l.Salt).Open(l.Key, l.context(practice)); err != nil {
			return Secret{}, ErrLocked
		}
	default:
		var err error
		if plain, err = Secret(o.secret).Derive("bag").Open(l.Key, l.context(practice)); err != nil {
			return Secret{}, ErrLocked
		}
	}
	if len(plain) != len(Secret{}) {
		return Secret{}, fmt.Errorf("the file of keys: %w: a key has %d bytes", change.ErrMalformed, len(plain))
	}
	return Secret(plain), nil
}

func (f bagFile) open(k Secret) (Bag, error) {
	body, err := k.Open(f.Sealed, f.context())
	if err != nil {
		return Bag{}, fmt.Errorf("the file of keys: %w", err)
	}
	var b bagBody
	if err := dec.Unmarshal(body, &b); err != nil {
		return Bag{}, fmt.Errorf("the file of keys: %w: %s", change.ErrMalformed, err)
	}
	r, err := NewRing(b.Epochs...)
	if err != nil {
		return Bag{}, err
	}
	id, err := age.ParseX25519Identity(b.Identity)
	if err != nil {
		return Bag{}, fmt.Errorf("the file of keys: %w: the device's identity does not parse", change.ErrMalformed)
	}
	return Bag{Practice: f.Practice, Ring: r, Device: Device{id, ed25519.NewKeyFromSeed(b.Seed[:])}, key: k, locks: f.Locks}, nil
}

// FormatKeyFile returns the text of a key file: one line of 64 hexadecimal digits.
func FormatKeyFile(s Secret) []byte { return []byte(hex.EncodeToString(s[:]) + "\n") }

// ParseKeyFile reads what FormatKeyFile wrote; white space around it is allowed.
func ParseKeyFile(text []byte) (Secret, error) {
	b, err := hex.DecodeString(strings.TrimSpace(string(text[:min(len(text), 1<<10)])))
	if err != nil || len(b) != len(Secret{}) {
		return Secret{}, fmt.Errorf("%w: this is no key file: one holds 64 hexadecimal digits", change.ErrMalformed)
	}
	return Secret(b), nil
}
