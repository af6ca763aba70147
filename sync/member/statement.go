// Package member keeps the list of devices that belong to a practice, and lets a new device in.
//
// The list is a set of signed statements that travel like letters: founded, admitted, announced,
// removed, confirmed, keys handed on. Each names the statements that its signer knew. Merging
// two lists is the union of two sets, and what the list says is worked out from the set alone, so
// that every device comes to the same answer. Statements are in clear: they hold names of devices,
// public keys and sealed keys, nothing about patients.
//
// Joining needs two people and no trust in whatever carries the letters: see Invite.
package member

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"
	"unicode/utf8"

	"filippo.io/age"
	"github.com/fxamacker/cbor/v2"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// ID names a statement: the SHA-256 of its bytes.
type ID [32]byte

// String returns 64 hexadecimal digits.
func (id ID) String() string { return hex.EncodeToString(id[:]) }

// Kind of a statement.
type Kind uint8

// The kinds.
const (
	Found    Kind = 1 // the first device makes the practice
	Admit    Kind = 2 // a member lets a device in
	Announce Kind = 3 // a member writes under a new incarnation
	Remove   Kind = 4 // a member takes a device out
	Confirm  Kind = 5 // a member confirms one of several removals that contradict each other
	Keys     Kind = 6 // a member hands keys on to others
)

// Limits.
const (
	MaxStatement  = 64 << 10
	MaxStatements = 8192
	maxName       = 200
)

// Accepted is up to where a removed device's stream counts: the number and the chain hash of its last frame that
// does. A stream that forked has one for each branch. Without a hash, as the earliest form had it, the number
// alone counts, in the journal that stands under this name.
type Accepted struct {
	Device change.Incarnation `cbor:"1,keyasint"`
	Site   change.Site        `cbor:"2,keyasint"`
	Last   uint64             `cbor:"3,keyasint"`
	Hash   change.Hash        `cbor:"4,keyasint,omitzero"`
}

// Stream returns the stream that counts so far.
func (a Accepted) Stream() change.Stream { return change.Stream{Device: a.Device, Site: a.Site} }

// Wrapped is a list of epochs sealed to one device or to the recovery sheet (age, X25519).
type Wrapped struct {
	To     string `cbor:"1,keyasint"` // the recipient, "age1…"
	Sealed []byte `cbor:"2,keyasint"`
}

// Statement is one signed entry of the list. Which fields are set depends on the kind.
type Statement struct {
	Kind        Kind               `cbor:"1,keyasint"`
	Practice    exam.ID            `cbor:"2,keyasint"`
	Signer      key.Verifier       `cbor:"3,keyasint"`
	Time        change.HLC         `cbor:"4,keyasint"`
	After       []ID               `cbor:"5,keyasint,omitempty"` // the newest statements that the signer knew, rising
	Subject     key.Verifier       `cbor:"6,keyasint,omitzero"`  // of Admit, Remove
	Recipient   string             `cbor:"7,keyasint,omitempty"` // of Found, Admit: where keys are sealed to
	Name        string             `cbor:"8,keyasint,omitempty"` // of Found, Admit: the device's short name
	Incarnation change.Incarnation `cbor:"9,keyasint,omitzero"`  // of Found, Admit, Announce
	Accepted    []Accepted         `cbor:"10,keyasint,omitempty"`
	Wraps       []Wrapped          `cbor:"11,keyasint,omitempty"` // of Keys
	Removal     ID                 `cbor:"12,keyasint,omitzero"`  // of Confirm
	Recovery    string             `cbor:"13,keyasint,omitempty"` // of Found: the recovery sheet's recipient
	Reason      string             `cbor:"14,keyasint,omitempty"` // of Remove, in words
	Recoverer   key.Verifier       `cbor:"15,keyasint,omitzero"`  // of Found: with it the recovery sheet signs

	id  ID
	raw []byte
}

// ID returns the statement's name.
func (s *Statement) ID() ID { return s.id }

// Raw returns the statement's bytes.
func (s *Statement) Raw() []byte { return s.raw }

const (
	magic   = "cordwalk member 1\n"
	purpose = "member statement"
)

var (
	enc = must(cbor.CoreDetEncOptions().EncMode())
	dec = must(cbor.DecOptions{
		DupMapKey: cbor.DupMapKeyEnforcedAPF, IndefLength: cbor.IndefLengthForbidden, TagsMd: cbor.TagsForbidden,
		MaxNestedLevels: 8, MaxArrayElements: 4096, MaxMapPairs: 64, ExtraReturnErrors: cbor.ExtraDecErrorUnknownField,
	}.DecMode())
)

func must[T any](v T, err error) T {
	if err != nil {
		panic(err) // a mistake in the options above, found by any test
	}
	return v
}

// sign completes a statement.
func sign(s Statement, d key.Device) (*Statement, error) {
	s.Signer = d.Verifier()
	slices.SortFunc(s.After, func(a, b ID) int { return bytes.Compare(a[:], b[:]) })
	body, err := enc.Marshal(s)
	if err != nil {
		return nil, err
	}
	sig := d.Sign(purpose, body)
	raw := append([]byte(magic), sig[:]...)
	return Parse(append(raw, body...))
}

// Parse reads a statement and checks its form and signature. Whether its signer was a member is for
// the list to say.
func Parse(raw []byte) (*Statement, error) {
	var sig key.Signature
	fixed := len(magic) + len(sig)
	if len(raw) > MaxStatement {
		return nil, fmt.Errorf("a member statement: %w: it has %d bytes", change.ErrMalformed, len(raw))
	}
	if !bytes.HasPrefix(raw, []byte(magic)) {
		if bytes.HasPrefix(raw, []byte("cordwalk member ")) {
			return nil, fmt.Errorf("a member statement: %w", change.ErrNewer)
		}
		return nil, fmt.Errorf("a member statement: %w", change.ErrMalformed)
	}
	if len(raw) <= fixed {
		return nil, fmt.Errorf("a member statement: %w", change.ErrCut)
	}
	copy(sig[:], raw[len(magic):])
	body := raw[fixed:]
	s := &Statement{}
	if err := dec.Unmarshal(body, s); err != nil {
		return nil, fmt.Errorf("a member statement: %w: %s", change.ErrMalformed, err)
	}
	if again, err := enc.Marshal(s); err != nil || !bytes.Equal(again, body) {
		return nil, fmt.Errorf("a member statement: %w: it is not in its one allowed encoding", change.ErrMalformed)
	}
	if !s.Signer.Verify(purpose, body, sig) {
		return nil, fmt.Errorf("a member statement: %w: the signature does not fit", change.ErrSealed)
	}
	if err := s.check(); err != nil {
		return nil, fmt.Errorf("a member statement: %w: %s", change.ErrMalformed, err)
	}
	s.raw, s.id = bytes.Clone(raw), sha256.Sum256(raw)
	return s, nil
}

func (s *Statement) check() error {
	if len(s.Name) > maxName || len(s.Reason) > change.MaxText || !utf8.ValidString(s.Name) || strings.ContainsFunc(s.Name, func(r rune) bool { return r < ' ' }) {
		return errors.New("its name or reason is too long or not plain text")
	}
	for i := 1; i < len(s.After); i++ {
		if bytes.Compare(s.After[i-1][:], s.After[i][:]) >= 0 {
			return errors.New("its list of statements is not in order")
		}
	}
	if (s.Kind == Found) != (len(s.After) == 0) {
		return errors.New("only the founding knows of no statement before it")
	}
	for _, r := range []string{s.Recipient, s.Recovery} {
		if r != "" {
			if _, err := age.ParseX25519Recipient(r); err != nil {
				return errors.New("a key does not parse")
			}
		}
	}
	var none key.Verifier
	switch s.Kind {
	case Found:
		if s.Recipient == "" || s.Incarnation.IsZero() || s.Recovery == "" || s.Recoverer == none {
			return errors.New("the founding lacks a key")
		}
	case Admit:
		if s.Subject == none || s.Recipient == "" || s.Incarnation.IsZero() {
			return errors.New("an admission lacks a key")
		}
	case Announce:
		if s.Incarnation.IsZero() {
			return errors.New("an announcement lacks its incarnation")
		}
	case Remove:
		if s.Subject == none {
			return errors.New("a removal names no device")
		}
	case Confirm:
		if s.Removal == (ID{}) {
			return errors.New("a confirmation names no removal")
		}
	case Keys:
		if len(s.Wraps) == 0 {
			return errors.New("it hands no keys on")
		}
	default:
		return fmt.Errorf("its kind %d is not known", s.Kind)
	}
	return nil
}

// wrap seals epochs to a recipient.
func wrap(to string, epochs []key.Epoch) (Wrapped, error) {
	r, err := age.ParseX25519Recipient(to)
	if err != nil {
		return Wrapped{}, fmt.Errorf("sealing keys: %w", err)
	}
	plain, err := enc.Marshal(epochs)
	if err != nil {
		return Wrapped{}, err
	}
	var b bytes.Buffer
	w, err := age.Encrypt(&b, r)
	if err == nil {
		_, err = w.Write(plain)
	}
	if err == nil {
		err = w.Close()
	}
	if err != nil {
		return Wrapped{}, fmt.Errorf("sealing keys: %w", err)
	}
	return Wrapped{to, b.Bytes()}, nil
}

// unwrap is the inverse of wrap.
func (w Wrapped) unwrap(id age.Identity) ([]key.Epoch, error) {
	r, err := age.Decrypt(bytes.NewReader(w.Sealed), id)
	if err != nil {
		return nil, fmt.Errorf("opening keys: %w", change.ErrSealed)
	}
	plain, err := io.ReadAll(io.LimitReader(r, MaxStatement))
	if err != nil {
		return nil, fmt.Errorf("opening keys: %w", change.ErrSealed)
	}
	var epochs []key.Epoch
	if err := dec.Unmarshal(plain, &epochs); err != nil {
		return nil, fmt.Errorf("opening keys: %w: %s", change.ErrMalformed, err)
	}
	return epochs, nil
}
