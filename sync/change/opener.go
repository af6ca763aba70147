package change

// Opener opens frames like Open, in memory that is used again: for journals of millions of
// frames whose batches are looked at once. It is not safe for concurrent use.
type Opener struct {
	plain []byte
	made  []Change
	names map[string]string
}

// mostNames is how many different names of fields and examiners are kept.
const mostNames = 4096

// Open is the package's Open. The batch is valid until Reset.
func (o *Opener) Open(f Frame, keys Keys) (Batch, error) { return open(f, keys, o) }

// Reset takes back the memory of every batch opened so far.
func (o *Opener) Reset() { o.plain, o.made = o.plain[:0], o.made[:0] }

// bytes returns room for so many bytes, nil from no Opener.
func (o *Opener) bytes(n int) []byte {
	if o == nil {
		return nil
	}
	if cap(o.plain)-len(o.plain) < n {
		o.plain = make([]byte, 0, max(n, 64<<10))
	}
	return o.plain[len(o.plain):]
}

// keep takes what was written into the room of bytes out of use.
func (o *Opener) keep(b []byte) {
	if o != nil {
		o.plain = o.plain[:len(o.plain)+len(b)]
	}
}

func (o *Opener) changes(n int) []Change {
	if o == nil {
		return make([]Change, n)
	}
	at := len(o.made)
	if cap(o.made)-at < n {
		o.made, at = make([]Change, 0, max(n, 256)), 0
	}
	o.made = o.made[:at+n]
	cs := o.made[at : at+n : at+n]
	clear(cs)
	return cs
}

// name returns the text of b, one string for all that are alike.
func (o *Opener) name(b []byte) string {
	if o == nil {
		return string(b)
	}
	if s, ok := o.names[string(b)]; ok {
		return s
	}
	s := string(b)
	if o.names == nil {
		o.names = map[string]string{}
	}
	if len(o.names) < mostNames {
		o.names[s] = s
	}
	return s
}
