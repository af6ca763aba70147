// Package change is the unit in which records travel and are kept: one change sets or
// clears one field of one record, a batch is what one action changed, and a frame is a
// sealed batch in the journal of one device.
//
// A change says which earlier changes of the same field it supersedes. That, and never
// a clock, decides what is current; package merge works it out. The clock here (a hybrid
// logical clock) only puts a history into an order that people understand.
//
// Everything has exactly one encoding: what decodes encodes to the same bytes again, or
// it is refused. Fields of a newer minor version are kept byte for byte and passed on;
// frames of a newer major version are kept sealed and passed on. DEVELOPERS.md
// holds the specification; test vectors are in testdata/vectors.
package change

import (
	"bytes"
	"cmp"
	"encoding/hex"
	"errors"
	"fmt"
	"unicode/utf8"

	"github.com/google/uuid"

	"cordwalk.example/cordwalk/exam"
)

// ID names a change for ever: a UUID of version 7 (RFC 9562).
type ID [16]byte

// NewID makes an ID that sorts after those made before it in this process.
func NewID() ID { return ID(uuid.Must(uuid.NewV7())) }

// IsZero reports whether the ID names nothing.
func (id ID) IsZero() bool { return id == ID{} }

// String returns the UUID in its usual form.
func (id ID) String() string { return exam.ID(id).String() }

// Compare orders ids by their bytes.
func (id ID) Compare(other ID) int { return bytes.Compare(id[:], other[:]) }

// Incarnation is one life of one device: random, and new whenever the store may have
// been copied, restored or left with an unreadable tail, so that no sequence number is
// ever used twice.
type Incarnation [16]byte

// NewIncarnation makes a random incarnation.
func NewIncarnation() Incarnation { return Incarnation(uuid.New()) }

// String returns 32 hexadecimal digits.
func (i Incarnation) String() string { return hex.EncodeToString(i[:]) }

// IsZero reports whether the incarnation names nothing.
func (i Incarnation) IsZero() bool { return i == Incarnation{} }

// Site names a place of the practice whose records are held together.
type Site [16]byte

// NewSite makes a random site.
func NewSite() Site { return Site(uuid.New()) }

// String returns 32 hexadecimal digits.
func (s Site) String() string { return hex.EncodeToString(s[:]) }

// Stream is what one device incarnation wrote for one site. Its sequence numbers begin
// at 1 and have no holes; its frames form a hash chain.
type Stream struct {
	Device Incarnation
	Site   Site
}

// String returns "device/site" in hexadecimal digits.
func (s Stream) String() string { return s.Device.String() + "/" + s.Site.String() }

// Name returns 64 hexadecimal digits, fit for file names and keys.
func (s Stream) Name() string { return s.Device.String() + s.Site.String() }

// ParseStream reads what Name wrote.
func ParseStream(name string) (Stream, error) {
	b, err := hex.DecodeString(name)
	if err != nil || len(b) != 32 || hex.EncodeToString(b) != name {
		return Stream{}, fmt.Errorf("%w: %.80q is no stream: want 64 hexadecimal digits", ErrMalformed, name)
	}
	return Stream{Incarnation(b[:16]), Site(b[16:])}, nil
}

// Compare orders streams by device, then site.
func (s Stream) Compare(other Stream) int {
	return cmp.Or(bytes.Compare(s.Device[:], other.Device[:]), bytes.Compare(s.Site[:], other.Site[:]))
}

// Kind tells what sort of record a change belongs to. Kinds that a program does not know
// are kept and passed on.
type Kind uint16

// The kinds of record.
const (
	KindPractice   Kind = 1 // the practice: protocols, examiners, letterhead
	KindPatient    Kind = 2
	KindVisit      Kind = 3 // a visit with its findings and measures
	KindEdge       Kind = 4 // two patients are one animal: Patient and Record are their ids
	KindAudit      Kind = 5 // who exported, joined, removed, erased what
	KindMember     Kind = 6 // a member device: its name, its removal
	KindOwner      Kind = 7 // an owner, whose contact data are sealed apart
	KindAttachment Kind = 8 // a photo, film or document in files/
	KindView       Kind = 9 // who looked at which patient on which day
)

// FieldClosed is the field of a visit that a closing sets. See merge.
const FieldClosed = "closed"

// Act tells what a change is to its field beyond setting it.
type Act uint8

// The acts.
const (
	Edit    Act = 0 // an ordinary entry or correction
	Amend   Act = 1 // after closing, with a reason
	Accept  Act = 2 // a value that arrived after closing now counts, with a reason
	Pick    Act = 3 // one of several conflicting values was chosen
	Undo    Act = 4 // an entry was taken back before closing
	Restore Act = 5 // an earlier value was set again from the history
	Admit   Act = 6 // a quarantined value was admitted
)

var actWords = [...]string{"edit", "amend", "accept", "pick", "undo", "restore", "admit"}

// String returns the act's word, "act 9" for one that this program does not know.
func (a Act) String() string {
	if int(a) < len(actWords) {
		return actWords[a]
	}
	return fmt.Sprintf("act %d", uint8(a))
}

// AfterClosing reports whether the writer knew that the visit was closed.
func (a Act) AfterClosing() bool { return a == Amend || a == Accept || a == Admit }

// Change sets or clears one field of one record.
//
// Stream, Seq and Examiner stand once in the batch and its frame, not in each change;
// decoding fills them in.
type Change struct {
	Stream   Stream `cbor:"-"`
	Seq      uint64 `cbor:"-"` // from 1, without holes, within Stream
	Examiner string `cbor:"-"` // who made the change: the examiner's id or name

	ID         ID      `cbor:"1,keyasint"`
	Time       HLC     `cbor:"2,keyasint"`
	Kind       Kind    `cbor:"3,keyasint"`
	Patient    exam.ID `cbor:"4,keyasint,omitzero"` // zero where the record belongs to no patient
	Record     exam.ID `cbor:"5,keyasint,omitzero"` // for KindPractice zero
	Field      string  `cbor:"6,keyasint"`
	Value      []byte  `cbor:"7,keyasint,omitempty"`  // as the record's package encodes it; empty: cleared
	Supersedes []ID    `cbor:"8,keyasint,omitempty"`  // the heads of this field that the writer saw, ascending
	Act        Act     `cbor:"9,keyasint,omitempty"`  //
	Reason     string  `cbor:"10,keyasint,omitempty"` // required where Act.AfterClosing
	Seen       []ID    `cbor:"11,keyasint,omitempty"` // of a closing: the heads of all the visit's fields, ascending
	Before     uint64  `cbor:"12,keyasint,omitempty"` // see PreviousOf
	Extra      []byte  `cbor:"-"`                     // fields of a newer minor version, encoded, in order
}

// Cleared reports whether the change empties its field.
func (c Change) Cleared() bool { return len(c.Value) == 0 }

// PreviousOf encodes in Before the sequence number of the stream's last earlier change to the
// same patient (0: this is the first), so that a reader can tell which patients a missing
// frame cannot have touched.
func PreviousOf(seq uint64) uint64 { return seq + 1 }

// Previous decodes Before; ok is false where the writer did not say.
func (c Change) Previous() (seq uint64, ok bool) {
	if c.Before == 0 {
		return 0, false
	}
	return c.Before - 1, true
}

// Compare puts changes into the order of a history: by time, then sequence, then id. It says nothing
// about what is current. The stream takes no part: which of the two branches of a fork has the stream's own
// name is up to each device.
func (c Change) Compare(d Change) int {
	return cmp.Or(cmp.Compare(c.Time, d.Time), cmp.Compare(c.Seq, d.Seq), c.ID.Compare(d.ID))
}

// Limits of one change, batch and frame. A frame that asks for more is refused before
// anything is allocated for it.
const (
	MaxField      = 200     // bytes of a field's name
	MaxText       = 4 << 10 // bytes of a reason or an examiner
	MaxValue      = 1 << 20 // bytes of a value
	MaxSupersedes = 1024    // ids
	MaxSeen       = 1 << 16 // ids
	MaxChanges    = 1 << 14 // changes in a batch
	MaxBody       = 4 << 20 // bytes of a sealed batch
)

// The errors that readers tell apart.
var (
	// ErrMalformed means that the bytes do not follow the format.
	ErrMalformed = errors.New("malformed")
	// ErrNewer means that the bytes follow a newer major version: keep them sealed, pass them on.
	ErrNewer = errors.New("written by a newer version of this program")
	// ErrSealed means that the frame does not open: it was altered, or it belongs to another practice.
	ErrSealed = errors.New("sealed with another key, or altered")
	// ErrNoKey means that no key of the frame's epoch is at hand.
	ErrNoKey = errors.New("no key of this epoch")
	// ErrCut means that the bytes end before the frame does.
	ErrCut = errors.New("cut off")
)

// Validate checks the rules that every change keeps; decoding and sealing apply it.
func (c Change) Validate() error {
	bad := func(format string, args ...any) error {
		return fmt.Errorf("%w: change %s: %s", ErrMalformed, c.ID, fmt.Sprintf(format, args...))
	}
	switch {
	case c.ID.IsZero():
		return bad("it has no id")
	case c.Kind == 0:
		return bad("it has no kind")
	case c.Field == "" || len(c.Field) > MaxField:
		return bad("its field name has %d bytes, allowed are 1 to %d", len(c.Field), MaxField)
	case !utf8.ValidString(c.Field) || !utf8.ValidString(c.Reason):
		return bad("a text is not UTF-8")
	case len(c.Value) > MaxValue:
		return bad("its value has %d bytes, allowed are %d", len(c.Value), MaxValue)
	case len(c.Reason) > MaxText:
		return bad("its reason has %d bytes, allowed are %d", len(c.Reason), MaxText)
	case c.Act.AfterClosing() && c.Reason == "":
		return bad("%s needs a reason", c.Act)
	case len(c.Supersedes) > MaxSupersedes:
		return bad("it supersedes %d changes, allowed are %d", len(c.Supersedes), MaxSupersedes)
	case len(c.Seen) > MaxSeen:
		return bad("it saw %d heads, allowed are %d", len(c.Seen), MaxSeen)
	case !ascending(c.Supersedes) || !ascending(c.Seen):
		return bad("its lists of ids are not in ascending order without repeats")
	case contains(c.Supersedes, c.ID):
		return bad("it supersedes itself")
	}
	return nil
}

func contains(ids []ID, id ID) bool {
	for _, x := range ids {
		if x == id {
			return true
		}
	}
	return false
}

func ascending(ids []ID) bool {
	for i := 1; i < len(ids); i++ {
		if ids[i-1].Compare(ids[i]) >= 0 {
			return false
		}
	}
	return true
}

// Batch is what one action changed: all of it is kept, or nothing. Its changes have the
// sequence numbers First, First+1, …
type Batch struct {
	Stream   Stream
	First    uint64
	Examiner string
	Changes  []Change
	Extra    []byte // fields of a newer minor version, encoded, in order
}

// Last returns the sequence number of the batch's last change.
func (b Batch) Last() uint64 { return b.First + uint64(len(b.Changes)) - 1 }

// Validate checks the batch and each change in it.
func (b Batch) Validate() error {
	switch {
	case len(b.Changes) == 0 || len(b.Changes) > MaxChanges:
		return fmt.Errorf("%w: a batch holds %d changes, allowed are 1 to %d", ErrMalformed, len(b.Changes), MaxChanges)
	case b.First == 0 || b.Last() < b.First:
		return fmt.Errorf("%w: a batch begins at sequence %d", ErrMalformed, b.First)
	case len(b.Examiner) > MaxText || !utf8.ValidString(b.Examiner):
		return fmt.Errorf("%w: the examiner has %d bytes, allowed are %d of UTF-8", ErrMalformed, len(b.Examiner), MaxText)
	}
	for _, c := range b.Changes {
		if err := c.Validate(); err != nil {
			return err
		}
	}
	return nil
}
