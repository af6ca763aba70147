package storage

// Peeked is what a practice says of itself in clear, without being opened.
type Peeked struct {
	Device    string // the short name of the device that wrote it
	Protected bool   // whether a passphrase or a key file opens it
}

// Peek reads what can be read of the practice in a folder without its key. It takes no lock
// and changes nothing. The error is fs.ErrNotExist where the folder holds no practice.
func Peek(dir string, o Options) (Peeked, error) {
	o = o.withDefaults()
	id, _, err := readIdentity(o.Files, dir)
	if err != nil {
		return Peeked{}, explain("looking at the practice in "+dir, err)
	}
	return Peeked{Device: id.Device, Protected: id.Protected}, nil
}
