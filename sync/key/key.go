// Package key holds the keys of a practice and of a device, and the locked form in which a
// store keeps them.
//
// A practice has one secret for each epoch; everything else is derived from it. A new
// epoch begins when a device is removed. A device has two keys of its own: one to which
// other devices wrap the practice's secrets, and one with which it signs what leaves it.
// All of them lie in the store as one sealed bag, which opens by a passphrase, a key file,
// a system keyring, or, where the practice chose no protection, by a key beside it.
//
// The ciphers are those of golang.org/x/crypto and filippo.io/age; nothing is invented here.
package key

import (
	"crypto/cipher"
	"crypto/ed25519"
	"crypto/hkdf"
	"crypto/hmac"
	"crypto/rand"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"slices"

	"filippo.io/age"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
)

// Secret is 32 random bytes that keys are derived from.
type Secret [32]byte

// NewSecret makes a random secret.
func NewSecret() Secret {
	var s Secret
	_, _ = rand.Read(s[:]) // since Go 1.24 it never fails: it ends the program instead
	return s
}

// String keeps secrets out of logs and error messages.
func (s Secret) String() string { return "secret" }

// GoString keeps secrets out of %#v.
func (s Secret) GoString() string { return "key.Secret{…}" }

// Derive returns the key for one purpose: HKDF-SHA-256 without salt, with "cordwalk 1 " and
// the purpose as info. Different purposes give unrelated keys.
func (s Secret) Derive(purpose string) Secret {
	k, err := hkdf.Key(sha256.New, s[:], nil, "cordwalk 1 "+purpose, len(s))
	if err != nil {
		panic(err) // only for an impossible length
	}
	return Secret(k)
}

// AEAD returns XChaCha20-Poly1305 under this key.
func (s Secret) AEAD() cipher.AEAD {
	a, err := change.NewAEAD(s[:])
	if err != nil {
		panic(err) // only for an impossible length
	}
	return a
}

// MAC returns HMAC-SHA-256 of the parts under this key. Each part is preceded by its length,
// so that no two lists of parts run together.
func (s Secret) MAC(parts ...[]byte) [32]byte {
	m := hmac.New(sha256.New, s[:])
	for _, p := range parts {
		m.Write(binary.BigEndian.AppendUint64(nil, uint64(len(p))))
		m.Write(p)
	}
	return [32]byte(m.Sum(nil))
}

// Seal seals plain under this key with a random nonce, which stands before the result.
// The same context must be given to open it: it ties the value to its place.
func (s Secret) Seal(plain, context []byte) []byte {
	a := s.AEAD()
	nonce := make([]byte, a.NonceSize(), a.NonceSize()+len(plain)+a.Overhead())
	_, _ = rand.Read(nonce)
	return a.Seal(nonce, nonce, plain, context)
}

// Open is the inverse of Seal. The error is change.ErrSealed.
func (s Secret) Open(sealed, context []byte) ([]byte, error) {
	a := s.AEAD()
	if len(sealed) < a.NonceSize()+a.Overhead() {
		return nil, fmt.Errorf("a sealed value of %d bytes: %w", len(sealed), change.ErrMalformed)
	}
	plain, err := a.Open(nil, sealed[:a.NonceSize()], sealed[a.NonceSize():], context)
	if err != nil {
		return nil, change.ErrSealed
	}
	return plain, nil
}

// Epoch is the practice's secret from some removal on. Numbers begin at 1.
type Epoch struct {
	Number uint32 `cbor:"1,keyasint"`
	Secret Secret `cbor:"2,keyasint"`
}

// Ring holds the practice's epochs. It does not change once made and may be used by several
// goroutines. It implements change.Keys.
type Ring struct {
	epochs []Epoch
	frames map[uint32]cipher.AEAD
}

// NewRing makes a ring of at least one epoch; numbers must be above 0 and not repeat.
func NewRing(epochs ...Epoch) (*Ring, error) {
	r := &Ring{epochs: slices.Clone(epochs), frames: map[uint32]cipher.AEAD{}}
	slices.SortFunc(r.epochs, func(a, b Epoch) int { return int(int64(a.Number) - int64(b.Number)) })
	for _, e := range r.epochs {
		if _, twice := r.frames[e.Number]; twice || e.Number == 0 {
			return nil, fmt.Errorf("key epoch %d: %w: it is 0 or there twice", e.Number, change.ErrMalformed)
		}
		r.frames[e.Number] = e.Secret.Derive("frames").AEAD()
	}
	if len(r.epochs) == 0 {
		return nil, fmt.Errorf("keys: %w: the practice has no key", change.ErrMalformed)
	}
	return r, nil
}

// Epochs returns the epochs in rising order.
func (r *Ring) Epochs() []Epoch { return slices.Clone(r.epochs) }

// Current returns the number of the newest epoch, with which new frames are sealed.
func (r *Ring) Current() uint32 { return r.epochs[len(r.epochs)-1].Number }

// Frames returns the cipher of an epoch's frames.
func (r *Ring) Frames(epoch uint32) (cipher.AEAD, bool) { a, ok := r.frames[epoch]; return a, ok }

// Secret returns the secret of an epoch.
func (r *Ring) Secret(epoch uint32) (Secret, bool) {
	for _, e := range r.epochs {
		if e.Number == epoch {
			return e.Secret, true
		}
	}
	return Secret{}, false
}

// Next returns a ring with one epoch more. The upper half of an epoch's number counts; the lower
// half is random, so that two devices that begin one at the same time do not use the same number.
func (r *Ring) Next() *Ring {
	var low [2]byte
	_, _ = rand.Read(low[:])
	n, err := r.With(Epoch{(r.Current()>>16+1)<<16 | uint32(binary.BigEndian.Uint16(low[:])), NewSecret()})
	if err != nil {
		panic(err) // the numbers of r are valid and the new one is higher
	}
	return n
}

// With returns a ring that holds these epochs too. An epoch that is there already must have the
// same secret.
func (r *Ring) With(epochs ...Epoch) (*Ring, error) {
	all := r.Epochs()
	for _, e := range epochs {
		have, ok := r.Secret(e.Number)
		switch {
		case !ok:
			all = append(all, e)
		case have != e.Secret:
			return nil, fmt.Errorf("key epoch %d: %w: two secrets bear its number", e.Number, change.ErrMalformed)
		}
	}
	return NewRing(all...)
}

// Index returns the key under which a device's index seals its values. The index is this
// device's own and can be rebuilt, so the key stays that of the first epoch at hand.
func (r *Ring) Index() Secret { return r.epochs[0].Secret.Derive("index") }

// Names returns the key of the HMACs that stand for names: in the index, and of files in
// files/. It is that of the first epoch, so that names are the same on every device and for ever.
func (r *Ring) Names() Secret { return r.epochs[0].Secret.Derive("names") }

// Wrap returns the key of an epoch that seals the keys of owners, see SealOwnerKey.
func (r *Ring) Wrap(epoch uint32) (Secret, bool) {
	s, ok := r.Secret(epoch)
	return s.Derive("owner-keys"), ok
}

// OwnerKey seals one owner's contact data and attachments. It is random, so that destroying
// it destroys what it sealed.
type OwnerKey = Secret

// SealOwnerKey seals an owner's key under the newest epoch: 4 bytes of epoch, then the sealed key.
func (r *Ring) SealOwnerKey(owner exam.ID, k OwnerKey) []byte {
	w, _ := r.Wrap(r.Current())
	return append(binary.BigEndian.AppendUint32(nil, r.Current()), w.Seal(k[:], owner[:])...)
}

// OpenOwnerKey is the inverse of SealOwnerKey.
func (r *Ring) OpenOwnerKey(owner exam.ID, sealed []byte) (OwnerKey, error) {
	if len(sealed) < 4 {
		return OwnerKey{}, fmt.Errorf("an owner's key of %d bytes: %w", len(sealed), change.ErrMalformed)
	}
	w, ok := r.Wrap(binary.BigEndian.Uint32(sealed))
	if !ok {
		return OwnerKey{}, fmt.Errorf("an owner's key: %w", change.ErrNoKey)
	}
	k, err := w.Open(sealed[4:], owner[:])
	if err != nil {
		return OwnerKey{}, fmt.Errorf("an owner's key: %w", err)
	}
	if len(k) != len(OwnerKey{}) {
		return OwnerKey{}, fmt.Errorf("an owner's key: %w", change.ErrMalformed)
	}
	return OwnerKey(k), nil
}

// Device holds a device's own two keys. Nobody else ever has them.
type Device struct {
	identity *age.X25519Identity
	sign     ed25519.PrivateKey
}

// NewDevice makes random keys.
func NewDevice() (Device, error) {
	id, err := age.GenerateX25519Identity()
	if err != nil {
		return Device{}, fmt.Errorf("making this device's keys: %w", err)
	}
	seed := NewSecret()
	return Device{id, ed25519.NewKeyFromSeed(seed[:])}, nil
}

// DeviceFrom returns the keys that hang on an age identity alone: what a recovery sheet can hold.
// It signs with an ed25519 key whose seed is HKDF-SHA-256 of the identity's text.
func DeviceFrom(id *age.X25519Identity) Device {
	seed, err := hkdf.Key(sha256.New, []byte(id.String()), nil, "cordwalk 1 recovery signer", ed25519.SeedSize)
	if err != nil {
		panic(err) // only for an impossible length
	}
	return Device{id, ed25519.NewKeyFromSeed(seed)}
}

// Identity returns the key that unwraps what others wrap to this device.
func (d Device) Identity() *age.X25519Identity { return d.identity }

// Recipient returns the public half of Identity, "age1…".
func (d Device) Recipient() string { return d.identity.Recipient().String() }

// Signer returns the key with which the device signs.
func (d Device) Signer() ed25519.PrivateKey { return d.sign }

// Verifier returns the public half of Signer.
func (d Device) Verifier() Verifier { return Verifier(d.sign.Public().(ed25519.PublicKey)) }

// Sign signs a message for one purpose, so that a signature made for one cannot serve another.
func (d Device) Sign(purpose string, message []byte) Signature {
	return Signature(ed25519.Sign(d.sign, signed(purpose, message)))
}

// Verifier checks a device's signatures: an ed25519 public key.
type Verifier [ed25519.PublicKeySize]byte

// String returns 64 hexadecimal digits.
func (v Verifier) String() string { return hex.EncodeToString(v[:]) }

// Signature is an ed25519 signature.
type Signature [ed25519.SignatureSize]byte

// Verify reports whether s signs the message for the purpose.
func (v Verifier) Verify(purpose string, message []byte, s Signature) bool {
	return ed25519.Verify(v[:], signed(purpose, message), s[:])
}

func signed(purpose string, message []byte) []byte {
	b := append([]byte("cordwalk 1 "), purpose...)
	b = append(b, 0)
	return append(b, message...)
}
