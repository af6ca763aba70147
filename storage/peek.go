package storage

import (
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/key"
)

// Peeked is what a practice says of itself in clear, without being opened.
type Peeked struct {
	Practice   exam.ID
	Device     string // the short name of the device that wrote it
	Protected  bool   // whether a passphrase or a key file opens it
	Passphrase bool   // a passphrase opens it
	Keyring    bool   // the system keyring of its user opens it as well
}

// Peek reads what can be read of the practice in a folder without its key. It takes no lock
// and changes nothing. The error is fs.ErrNotExist where the folder holds no practice.
func Peek(dir string, o Options) (Peeked, error) {
	o = o.withDefaults()
	id, _, err := readIdentity(o.Files, dir)
	if err != nil {
		return Peeked{}, explain("looking at the practice in "+dir, err)
	}
	l, err := key.LocksOf(id.Keys)
	if err != nil {
		return Peeked{}, explain("looking at the practice in "+dir, err)
	}
	return Peeked{Practice: l.Practice, Device: id.Device, Protected: id.Protected, Passphrase: l.Passphrase, Keyring: l.Keyring}, nil
}

// Fits reports, by a nil error, whether what o.Unlock holds opens the practice in a folder, which may be open. It takes
// no lock and changes nothing. The error wraps ErrLocked where it does not fit.
func Fits(dir string, o Options) error {
	o = o.withDefaults()
	id, _, err := readIdentity(o.Files, dir)
	if err == nil {
		_, err = id.unlock(o.Files, o.Unlock)
	}
	return explain("unlocking the practice in "+dir, err)
}
