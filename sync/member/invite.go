package member

import (
	"bytes"
	"crypto/hmac"
	"crypto/rand"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"time"

	"filippo.io/age"
	"golang.org/x/crypto/argon2"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// Joining takes two trips of whatever carries letters (a stick will do), and two people who talk to
// each other.
//
//  1. A member makes an Invitation, a file without any key, and a code of five words that is told by
//     voice and never written into the folder.
//  2. The new device answers with a Request: its public keys and its name, authenticated with the
//     code, stretched by Argon2id.
//  3. The member's device takes the first valid request before the invitation expires by its own
//     clock. Both screens show check words, made from both files; a person compares them.
//  4. Only then the member admits the device, and the practice's keys are sealed to it.
//
// The code has 80 bits; who carries the letters can try to guess it at the price of 64 MiB and three
// passes for each guess, and would still be stopped by the check words.

// The errors of joining.
var (
	ErrCode    = errors.New("the code does not fit this invitation; ask for it again")
	ErrExpired = errors.New("the invitation has expired; ask for a new one")
	ErrUsed    = errors.New("the invitation was used already; make a new one for each device")
)

const (
	invitationMagic = "cordwalk invitation 1\n"
	requestMagic    = "cordwalk request 1\n"
	codeBytes       = 10
	maxLetter       = 16 << 10
	requestPurpose  = "join request"
)

type invitation struct {
	ID       exam.ID      `cbor:"1,keyasint"`
	Practice exam.ID      `cbor:"2,keyasint"`
	Root     ID           `cbor:"3,keyasint"`
	Inviter  key.Verifier `cbor:"4,keyasint"`
	Site     change.Site  `cbor:"5,keyasint"`
	Expires  int64        `cbor:"6,keyasint"` // seconds since 1970
	Salt     []byte       `cbor:"7,keyasint"`
	Words    string       `cbor:"8,keyasint"` // the inviting device's name
}

type request struct {
	Invitation  exam.ID            `cbor:"1,keyasint"`
	Device      key.Verifier       `cbor:"2,keyasint"`
	Recipient   string             `cbor:"3,keyasint"`
	Name        string             `cbor:"4,keyasint"`
	Incarnation change.Incarnation `cbor:"5,keyasint"`
	Nonce       []byte             `cbor:"6,keyasint"`
}

// cost is how hard a guess at a code is made. It is part of the format; only tests lower it.
var cost = key.Stretch{Time: 3, Memory: 64 << 10, Threads: 4}

// stretch makes a key from a code.
func stretch(code, salt []byte) key.Secret {
	return key.Secret(argon2.IDKey(code, salt, cost.Time, cost.Memory, cost.Threads, 32))
}

// Invite is an invitation on the device that made it. Its file and state are kept until it is
// used or expires.
type Invite struct {
	file []byte
	inv  invitation
	code key.Secret
	used bool
}

// NewInvite makes an invitation to a site that is valid until expires. The code is shown to the
// person who invites, once.
func NewInvite(l *List, b key.Bag, site change.Site, name string, expires time.Time) (*Invite, string, error) {
	if me, ok := l.Device(b.Device.Verifier()); !ok || !me.Member() {
		return nil, "", ErrNotMember
	}
	code, salt := make([]byte, codeBytes), make([]byte, 16)
	_, _ = rand.Read(code)
	_, _ = rand.Read(salt)
	i := &Invite{code: stretch(code, salt), inv: invitation{ID: exam.ID(change.NewID()), Practice: b.Practice, Root: l.Root(), Inviter: b.Device.Verifier(), Site: site, Expires: expires.Unix(), Salt: salt, Words: clip(name)}}
	var err error
	i.file, err = seal(invitationMagic, i.inv, i.code, nil)
	return i, toWords(code), err
}

// seal writes a letter: magic, HMAC under the code's key over context and body, body.
func seal(magic string, v any, code key.Secret, context []byte) ([]byte, error) {
	body, err := enc.Marshal(v)
	if err != nil {
		return nil, err
	}
	mac := code.MAC([]byte(magic), context, body)
	return append(append([]byte(magic), mac[:]...), body...), nil
}

// open parts a letter without checking its HMAC.
func open(magic string, data []byte, v any) (mac [32]byte, body []byte, err error) {
	if len(data) > maxLetter || !bytes.HasPrefix(data, []byte(magic)) || len(data) < len(magic)+32 {
		return mac, nil, change.ErrMalformed
	}
	copy(mac[:], data[len(magic):])
	body = data[len(magic)+32:]
	if err := dec.Unmarshal(body, v); err != nil {
		return mac, nil, fmt.Errorf("%w: %s", change.ErrMalformed, err)
	}
	if again, err := enc.Marshal(v); err != nil || !bytes.Equal(again, body) {
		return mac, nil, fmt.Errorf("%w: it is not in its one allowed encoding", change.ErrMalformed)
	}
	return mac, body, nil
}

// File returns the invitation's bytes: they hold no key and may lie open.
func (i *Invite) File() []byte { return i.file }

// FileName returns the name under which the invitation lies in a folder.
func (i *Invite) FileName() string { return hex.EncodeToString(i.inv.ID[:]) + ".invite" }

// Expires returns until when it is valid.
func (i *Invite) Expires() time.Time { return time.Unix(i.inv.Expires, 0) }

// Secret returns what the inviting device must keep, sealed in its store, to take a request after
// a restart: see ResumeInvite.
func (i *Invite) Secret() []byte { return append(i.code[:], i.file...) }

// ResumeInvite is the inverse of Secret.
func ResumeInvite(secret []byte) (*Invite, error) {
	i := &Invite{}
	if len(secret) < len(i.code) {
		return nil, fmt.Errorf("a kept invitation: %w", change.ErrMalformed)
	}
	copy(i.code[:], secret)
	i.file = bytes.Clone(secret[len(i.code):])
	if _, _, err := open(invitationMagic, i.file, &i.inv); err != nil {
		return nil, fmt.Errorf("a kept invitation: %w", err)
	}
	return i, nil
}

// Joiner is a device that asks to be let in.
type Joiner struct {
	Verifier    key.Verifier
	Recipient   string
	Name        string
	Incarnation change.Incarnation
	CheckWords  string // to be compared with those on the joining device
}

// Take checks a request. The first valid one uses the invitation up; the caller keeps that.
// The errors are ErrExpired, ErrUsed, ErrCode and change.ErrMalformed.
func (i *Invite) Take(data []byte, now time.Time) (Joiner, error) {
	if now.After(i.Expires()) {
		return Joiner{}, ErrExpired
	}
	var r request
	mac, body, err := openRequest(data, &r)
	if err != nil {
		return Joiner{}, fmt.Errorf("a request to join: %w", err)
	}
	want := i.code.MAC([]byte(requestMagic), i.file, body)
	if !hmac.Equal(mac[:], want[:]) || r.Invitation != i.inv.ID {
		return Joiner{}, ErrCode
	}
	if i.used {
		return Joiner{}, ErrUsed
	}
	if _, err := age.ParseX25519Recipient(r.Recipient); err != nil {
		return Joiner{}, fmt.Errorf("a request to join: %w: its key does not parse", change.ErrMalformed)
	}
	i.used = true
	return Joiner{r.Device, r.Recipient, r.Name, r.Incarnation, checkWords(i.file, data)}, nil
}

// Used reports whether a request was taken.
func (i *Invite) Used() bool { return i.used }

// openRequest parts a request and checks its own signature.
func openRequest(data []byte, r *request) (mac [32]byte, body []byte, err error) {
	var sig key.Signature
	if len(data) < len(sig) {
		return mac, nil, change.ErrMalformed
	}
	signed := data[:len(data)-len(sig)]
	copy(sig[:], data[len(signed):])
	if mac, body, err = open(requestMagic, signed, r); err != nil {
		return mac, nil, err
	}
	if !r.Device.Verify(requestPurpose, signed, sig) {
		return mac, nil, fmt.Errorf("%w: it is not signed by the device that asks", change.ErrMalformed)
	}
	return mac, body, nil
}

// checkWords makes what two people compare: four words, 64 bits, from both letters.
func checkWords(invitation, request []byte) string {
	a, b := sha256.Sum256(invitation), sha256.Sum256(request)
	sum := sha256.Sum256(append(append([]byte("cordwalk 1 check words\x00"), a[:]...), b[:]...))
	return toWords(sum[:8])
}

// AdmitJoiner lets a device in, after the check words were compared, and hands it the practice's keys.
func (l *List) AdmitJoiner(b key.Bag, j Joiner, now change.HLC) error {
	if _, err := l.state(b.Device, Statement{Kind: Admit, Practice: b.Practice, Time: now, Subject: j.Verifier, Recipient: j.Recipient, Name: clip(j.Name), Incarnation: j.Incarnation}); err != nil {
		return err
	}
	return l.hand(b, now, []string{j.Recipient})
}

// Joining is the side of the device that wants in.
type Joining struct {
	inv    invitation
	device key.Device
	inc    change.Incarnation
	file   []byte
	words  string
}

// Ask answers an invitation with the code that the inviting person told. It returns the request and
// what is needed to go on when the answer comes.
func Ask(invitationFile []byte, code string, d key.Device, name string, inc change.Incarnation) (*Joining, error) {
	j := &Joining{device: d, inc: inc}
	mac, body, err := open(invitationMagic, invitationFile, &j.inv)
	if err != nil {
		return nil, fmt.Errorf("the invitation: %w", err)
	}
	if len(j.inv.Salt) != 16 {
		return nil, fmt.Errorf("the invitation: %w", change.ErrMalformed)
	}
	words, err := fromWords(code)
	if err != nil {
		return nil, err
	}
	if len(words) != codeBytes {
		return nil, fmt.Errorf("the code has %d words; it should have %d", len(words)/2, codeBytes/2)
	}
	k := stretch(words, j.inv.Salt)
	if want := k.MAC([]byte(invitationMagic), nil, body); !hmac.Equal(mac[:], want[:]) {
		return nil, ErrCode
	}
	nonce := make([]byte, 16)
	_, _ = rand.Read(nonce)
	r := request{j.inv.ID, d.Verifier(), d.Recipient(), clip(name), inc, nonce}
	if j.file, err = seal(requestMagic, r, k, invitationFile); err != nil {
		return nil, err
	}
	sig := d.Sign(requestPurpose, j.file)
	j.file = append(j.file, sig[:]...)
	j.words = checkWords(invitationFile, j.file)
	return j, nil
}

// File returns the request's bytes.
func (j *Joining) File() []byte { return j.file }

// FileName returns the name under which the request lies in a folder.
func (j *Joining) FileName() string {
	v := j.device.Verifier()
	return hex.EncodeToString(j.inv.ID[:]) + "-" + hex.EncodeToString(v[:4]) + ".request"
}

// CheckWords returns what the person compares with the words on the inviting device.
func (j *Joining) CheckWords() string { return j.words }

// Practice returns the practice that the invitation is for.
func (j *Joining) Practice() exam.ID { return j.inv.Practice }

// Site returns the site that the invitation is for.
func (j *Joining) Site() change.Site { return j.inv.Site }

// Complete looks for the admission among statements. The list hangs on the founding statement that the
// invitation named. The error is change.ErrNoKey while no answer has come.
func (j *Joining) Complete(statements [][]byte) (key.Bag, *List, error) {
	l := NewList(j.inv.Root)
	if _, err := l.Learn(statements); err != nil {
		return key.Bag{}, nil, err
	}
	me, ok := l.Device(j.device.Verifier())
	if !ok || !me.Member() {
		return key.Bag{}, nil, fmt.Errorf("no answer to the request has come yet: %w", change.ErrNoKey)
	}
	ring, err := l.Ring(j.device.Identity(), nil)
	if err != nil {
		return key.Bag{}, nil, err
	}
	return key.Bag{Practice: j.inv.Practice, Ring: ring, Device: j.device}, l, nil
}
