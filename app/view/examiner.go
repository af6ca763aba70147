package view

import (
	"crypto/rand"
	"crypto/subtle"
	"encoding/base64"
	"errors"
	"fmt"
	"strings"

	"golang.org/x/crypto/argon2"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// A PIN keeps two people at one computer from writing under each other's names. It is asked for
// when the examiner is switched and guards nothing else: whoever can open the practice can read it.

// pinCost is the least that the OWASP password storage cheat sheet asks of Argon2id (from memory):
// 2 passes over 19 MiB, one lane. A person waits a tenth of a second; the four digits of a PIN
// stand against a glance at the data, not against a thief who has them.
var pinCost = pinHash{memory: 19 << 10, passes: 2, lanes: 1}

// pinMost is what a PIN that came from elsewhere may ask for: more would stop the computer.
var pinMost = pinHash{memory: 64 << 10, passes: 8, lanes: 4}

// pinHash is a PIN as it is kept: Argon2id (RFC 9106) in the PHC string format.
type pinHash struct {
	memory uint32 // KiB
	passes uint32
	lanes  uint8
	salt   []byte
	key    []byte
}

// CheckPIN says what is wrong with a PIN that somebody chose: it has 4 to 12 digits.
func CheckPIN(pin string) error {
	digits := strings.Trim(pin, "0123456789") == ""
	if !digits || len(pin) < 4 || len(pin) > 12 {
		return errors.New(words.T("A PIN has 4 to 12 digits."))
	}
	return nil
}

// HashPIN returns a PIN as it is kept in the practice's record. It takes a tenth of a second.
func HashPIN(pin string) (string, error) {
	if err := CheckPIN(pin); err != nil {
		return "", err
	}
	h := pinCost
	h.salt = make([]byte, 16)
	if _, err := rand.Read(h.salt); err != nil {
		return "", err
	}
	h.key = h.of(pin, 32)
	b := base64.RawStdEncoding
	return fmt.Sprintf("$argon2id$v=%d$m=%d,t=%d,p=%d$%s$%s", argon2.Version, h.memory, h.passes, h.lanes,
		b.EncodeToString(h.salt), b.EncodeToString(h.key)), nil
}

func (h pinHash) of(pin string, n int) []byte {
	return argon2.IDKey([]byte(pin), h.salt, h.passes, h.memory, h.lanes, uint32(n))
}

// parsePIN reads a kept PIN and refuses one that asks for more work than pinMost.
func parsePIN(kept string) (pinHash, error) {
	var h pinHash
	bad := errors.New(words.T("this PIN was kept by a newer version or is damaged; remove it in the settings and set a new one"))
	part := strings.Split(kept, "$")
	if len(part) != 6 || part[0] != "" || part[1] != "argon2id" || part[2] != fmt.Sprintf("v=%d", argon2.Version) {
		return h, bad
	}
	if n, err := fmt.Sscanf(part[3], "m=%d,t=%d,p=%d", &h.memory, &h.passes, &h.lanes); n != 3 || err != nil ||
		part[3] != fmt.Sprintf("m=%d,t=%d,p=%d", h.memory, h.passes, h.lanes) {
		return h, bad
	}
	var err1, err2 error
	h.salt, err1 = base64.RawStdEncoding.DecodeString(part[4])
	h.key, err2 = base64.RawStdEncoding.DecodeString(part[5])
	switch {
	case err1 != nil, err2 != nil, h.passes < 1, h.lanes < 1, h.memory < 8*uint32(h.lanes),
		h.passes > pinMost.passes, h.lanes > pinMost.lanes, h.memory > pinMost.memory,
		len(h.salt) < 8, len(h.salt) > 64, len(h.key) < 16, len(h.key) > 64:
		return h, bad
	}
	return h, nil
}

// ErrNotTheirPIN says that a PIN is not the examiner's. Nothing is counted and nobody is locked
// out: recording goes on under the name that it had.
var ErrNotTheirPIN = errors.New("not the examiner's PIN")

// PINFits reports whether a PIN is the examiner's: nil, ErrNotTheirPIN, or why the kept one cannot
// be read. An examiner without a PIN is fitted by any. It takes a tenth of a second.
func PINFits(e exam.Examiner, pin string) error {
	if e.PINHash == "" {
		return nil
	}
	h, err := parsePIN(e.PINHash)
	if err != nil {
		return err
	}
	if subtle.ConstantTimeCompare(h.of(pin, len(h.key)), h.key) != 1 {
		return ErrNotTheirPIN
	}
	return nil
}

// FindExaminer returns the examiner of a practice who is called by a name or by initials that no
// other has, whatever their case.
func FindExaminer(p exam.Practice, called string) (exam.Examiner, bool) {
	called = strings.TrimSpace(called)
	var found []exam.Examiner
	for _, e := range p.Examiners {
		if strings.EqualFold(e.Name, called) {
			return e, true
		}
		if e.Initials != "" && strings.EqualFold(e.Initials, called) {
			found = append(found, e)
		}
	}
	if len(found) == 1 {
		return found[0], true
	}
	return exam.Examiner{}, false
}
