package segment

import (
	"bytes"
	"cmp"
	"crypto/sha256"
	"encoding/binary"
	"slices"

	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/merge"
)

// Held says what a journal holds of a stream.
type Held struct {
	Stream change.Stream
	Of     change.Stream // of the frames in it: another one only for the second branch of a fork
	Spans  []merge.Span  // the numbers that are there, rising
	Last   uint64        // the highest of them
	Hash   change.Hash   // chain hash there
	Own    bool          // this device writes it now
}

// Sum is the hash of the merged state of a site. It says what a device made of the entries
// that it held when At was the hash of what it held; two devices with equal At and Rules and
// different Sum do not show the same although they have the same: an alarm.
type Sum struct {
	Site  change.Site `cbor:"1,keyasint"`
	Rules uint16      `cbor:"2,keyasint"`
	At    [32]byte    `cbor:"3,keyasint"`
	Sum   merge.Sum   `cbor:"4,keyasint"`
}

// HashOfHeld returns the hash of what is held of a site: every stream with its number and chain hash. Of a
// forked stream it does not matter which branch is kept under which name.
func HashOfHeld(site change.Site, held []Held) [32]byte {
	held = slices.Clone(held)
	slices.SortFunc(held, func(a, b Held) int { return cmp.Or(a.Of.Compare(b.Of), bytes.Compare(a.Hash[:], b.Hash[:])) })
	h := sha256.New()
	for _, x := range held {
		if x.Of.Site != site {
			continue
		}
		h.Write(x.Of.Device[:])
		var n [8]byte
		binary.BigEndian.PutUint64(n[:], uint64(len(x.Spans)))
		h.Write(n[:])
		for _, sp := range x.Spans {
			binary.BigEndian.PutUint64(n[:], sp.First)
			h.Write(n[:])
			binary.BigEndian.PutUint64(n[:], sp.Last)
			h.Write(n[:])
		}
		h.Write(x.Hash[:])
	}
	return [32]byte(h.Sum(nil))
}

// ForkOf names the second branch of a forked stream: the first half of SHA-256 over a fixed word,
// the stream and the chain hash of the branch's first frame that differs.
func ForkOf(s change.Stream, first change.Hash) change.Stream {
	h := sha256.New()
	h.Write([]byte("cordwalk 1 fork\x00"))
	h.Write(s.Device[:])
	h.Write(s.Site[:])
	h.Write(first[:])
	return change.Stream{Device: change.Incarnation(h.Sum(nil)[:16]), Site: s.Site}
}
