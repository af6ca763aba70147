package segment

import (
	"bytes"

	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// BuildRaw makes a segment that claims to hold fs and whose only block holds entries.
func BuildRaw(bag key.Bag, fs []change.Frame, entries []byte) []byte {
	b := NewBuilder(bag.Ring)
	for _, f := range fs {
		if err := b.Add(f); err != nil {
			panic(err)
		}
	}
	b.block = entries
	var w bytes.Buffer
	if _, _, err := b.Finish(&w, Sign(b.Head(), bag.Device)); err != nil {
		panic(err)
	}
	return w.Bytes()
}
