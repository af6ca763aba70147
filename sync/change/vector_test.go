package change_test

import (
	"bytes"
	"encoding/hex"
	"errors"
	"fmt"
	"strconv"
	"strings"
	"testing"

	"github.com/fxamacker/cbor/v2"
	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/internal/vector"
	"cordwalk.example/cordwalk/sync/key"
)

// The secrets of the vectors: 32 times one byte.
func secret(b byte) key.Secret { return key.Secret(bytes.Repeat([]byte{b}, 32)) }

func ring(t testing.TB, epochs ...key.Epoch) *key.Ring {
	r, err := key.NewRing(epochs...)
	require.NoError(t, err)
	return r
}

// word is how vectors name an outcome.
func word(err error) string {
	for _, w := range []struct {
		word string
		err  error
	}{{"malformed", change.ErrMalformed}, {"newer-version", change.ErrNewer}, {"does-not-open", change.ErrSealed}, {"no-key", change.ErrNoKey}, {"cut", change.ErrCut}} {
		if errors.Is(err, w.err) {
			return w.word
		}
	}
	if err == nil {
		return "ok"
	}
	return err.Error()
}

func vid(n byte) change.ID {
	return change.ID{0x01, 0x93, 0x6c, 0x1e, 0x5d, 0x2a, 0x7c, 0x41, 0x9a, 0x40, 15: n}
}

func frameVectors(t *testing.T) map[string]vector.Vector {
	s := change.Stream{Device: change.Incarnation(bytes.Repeat([]byte{0xd1}, 16)), Site: change.Site(bytes.Repeat([]byte{0x51}, 16))}
	keys := ring(t, key.Epoch{Number: 1, Secret: secret(0x11)}, key.Epoch{Number: 2, Secret: secret(0x22)})
	nonce := bytes.Repeat([]byte{0x99}, 24)
	patient, visit := exam.ID(vid(0xa1)), exam.ID(vid(0xa2))
	const at = change.HLC(0x19d0bd1c860<<16 | 3)
	least := change.Change{ID: vid(1), Time: at, Kind: change.KindPractice, Field: "name", Value: []byte("\x68Hillside")}
	most := change.Change{ID: vid(3), Time: at + 1, Kind: change.KindVisit, Patient: patient, Record: visit, Field: "finding/patellar pelvic-left",
		Value: []byte{0xa1, 0x01, 0x02}, Supersedes: []change.ID{vid(1), vid(2)}, Act: change.Amend, Reason: "looked again, calmer", Seen: []change.ID{vid(9)}, Before: change.PreviousOf(1)}
	first := change.Batch{Stream: s, First: 1, Changes: []change.Change{least}}
	second := change.Batch{Stream: s, First: 2, Examiner: "R. Okafor", Changes: []change.Change{most, {ID: vid(4), Time: at + 2, Kind: change.KindVisit, Patient: patient, Record: visit, Field: "note"}}}
	one, err := change.SealWith(first, change.Hash{}, 1, keys, nonce)
	require.NoError(t, err)
	two, err := change.SealWith(second, one.Hash(), 2, keys, nonce)
	require.NoError(t, err)
	plain, err := change.EncodeBatch(first)
	require.NoError(t, err)

	out := map[string]vector.Vector{}
	add := func(name, rule, expect string, raw []byte, more ...func(*vector.Vector)) {
		var v vector.Vector
		v.Text("rule", "%s", rule)
		v.Text("expect", "%s", expect)
		for _, e := range keys.Epochs() {
			v.Text("key", "%d %x", e.Number, e.Secret[:])
		}
		for _, m := range more {
			m(&v)
		}
		v.Hex("frame", raw)
		out[name] = v
	}
	batch := func(b change.Batch, prev change.Hash) func(*vector.Vector) {
		return func(v *vector.Vector) {
			p, err := change.EncodeBatch(b)
			require.NoError(t, err)
			d, err := cbor.Diagnose(p)
			require.NoError(t, err)
			v.Text("stream", "%s", b.Stream)
			v.Text("numbers", "%d-%d", b.First, b.Last())
			v.Text("before", "%s", prev)
			v.Hex("batch", p)
			v.Text("diagnosed", "%s", d)
		}
	}
	hash := func(f change.Frame) func(*vector.Vector) {
		return func(v *vector.Vector) { v.Text("hash", "%s", f.Hash()) }
	}
	header := change.Header{Major: 1, Suite: 1, Epoch: 1, Stream: s, First: 1, Last: 1}
	sealed := func(h change.Header, p []byte) []byte { return change.SealPlain(h, p, keys, nonce) }
	spoil := func(raw []byte, at int, b ...byte) []byte {
		raw = bytes.Clone(raw)
		copy(raw[at:], b)
		return raw
	}

	add("ok-least", "the least that a change has", "ok", one.Raw, batch(first, change.Hash{}), hash(one))
	add("ok-most", "every field; the second frame of a chain, in a newer epoch; two changes in one batch, the second of which clears its field", "ok", two.Raw, batch(second, one.Hash()), hash(two))

	newer := header
	newer.Minor = 1
	// The change's map lies inside; its head byte says how many pairs follow.
	inner := bytes.Index(plain, []byte{0x01, 0x50})
	require.Positive(t, inner)
	require.Equal(t, byte(0xa5), plain[inner-1])
	extendedInner := slicesConcat(plain[:inner-1], []byte{0xa6}, plain[inner:], []byte{0x18, 0x40, 0x82, 0x01, 0x02})
	add("ok-newer-minor-batch", "a newer minor version may add fields to a batch, with keys above all that are known; they are kept byte for byte",
		"ok", sealed(newer, slicesConcat([]byte{plain[0] + 1}, plain[1:], []byte{0x03, 0x63, 'n', 'e', 'w'})))
	add("ok-newer-minor-change", "the same in a change", "ok", sealed(newer, extendedInner))
	add("unknown-field", "a field that the frame's own version does not have", "malformed", sealed(header, extendedInner))
	add("unknown-field-low", "a newer version's new keys are above the known ones: key 0 is no version's", "malformed",
		sealed(newer, slicesConcat([]byte{plain[0] + 1, 0x00, 0x01}, plain[1:])))
	add("unknown-field-long-key", "an unknown field's key in more bytes than it needs", "malformed",
		sealed(newer, slicesConcat([]byte{plain[0] + 1}, plain[1:], []byte{0x18, 0x03, 0x01})))
	major := header
	major.Major = 2
	add("newer-major", "a newer major version is kept sealed and passed on", "newer-version", sealed(major, plain))
	suite := header
	suite.Suite = 2
	add("newer-suite", "another way of sealing is kept sealed and passed on", "newer-version", sealed(suite, plain))

	add("magic", "a frame begins with the magic bytes", "malformed", spoil(one.Raw, 0, 'c'))
	add("checksum", "a flipped bit in the header", "malformed", spoil(one.Raw, 20, one.Raw[20]^4))
	add("body-flipped", "a flipped bit in the body", "does-not-open", spoil(one.Raw, 150, one.Raw[150]^4))
	add("nonce-flipped", "a flipped bit in the nonce", "does-not-open", spoil(one.Raw, 110, one.Raw[110]^4))
	add("header-forged", "a header with another epoch and a fitting checksum: the seal covers the header", "does-not-open",
		change.FixHeader(spoil(one.Raw, 15, 2)))
	add("stream-forged", "a frame moved to another device's stream", "does-not-open", change.FixHeader(spoil(one.Raw, 16, 0xd2)))
	add("no-key", "an epoch whose key is not at hand", "no-key", change.FixHeader(spoil(one.Raw, 15, 9)))
	add("cut-body", "the last byte is missing", "cut", one.Raw[:len(one.Raw)-1])
	add("cut-header", "half a header", "cut", one.Raw[:60])
	add("version-0", "there is no version 0", "malformed", change.FixHeader(spoil(one.Raw, 8, 0)))
	add("length-huge", "a length of 4 GiB is refused before anything is allocated", "malformed", change.FixHeader(spoil(one.Raw, 64, 0xff, 0xff, 0xff, 0xff)))
	add("length-short", "a body shorter than nonce and tag", "malformed", change.FixHeader(spoil(one.Raw, 64, 0, 0, 0, 39)))
	add("first-0", "sequence numbers begin at 1", "malformed", change.FixHeader(spoil(one.Raw, 48, 0, 0, 0, 0, 0, 0, 0, 0)))
	add("backwards", "the last number is not below the first", "malformed", change.FixHeader(spoil(two.Raw, 56, 0, 0, 0, 0, 0, 0, 0, 1)))
	add("chain-begins-late", "only number 1 follows nothing", "malformed", change.FixHeader(spoil(two.Raw, 68, make([]byte, 32)...)))
	add("count", "the header says two changes, the batch holds one", "malformed", sealed(change.Header{Major: 1, Suite: 1, Epoch: 1, Stream: s, First: 1, Last: 2}, plain))

	add("empty-batch", "a batch holds at least one change", "malformed", sealed(header, []byte{0xa1, 0x02, 0x80}))
	add("not-cbor", "the body is no CBOR", "malformed", sealed(header, []byte{0xff, 0x00}))
	add("trailing", "bytes behind the batch", "malformed", sealed(header, append(bytes.Clone(plain), 0)))
	add("long-integer", "a number in more bytes than it needs", "malformed",
		sealed(header, bytes.Replace(plain, []byte{0x03, 0x01, 0x06}, []byte{0x03, 0x18, 0x01, 0x06}, 1)))
	add("long-string-head", "a string's length in more bytes than it needs", "malformed",
		sealed(header, bytes.Replace(plain, []byte("\x06\x64name"), []byte("\x06\x78\x04name"), 1)))
	add("indefinite", "a list of indefinite length", "malformed",
		sealed(header, append(bytes.Replace(plain, []byte{0x02, 0x81}, []byte{0x02, 0x9f}, 1), 0xff)))
	add("duplicate-key", "a map with one key twice", "malformed",
		sealed(header, slicesConcat(plain[:inner-1], []byte{0xa6}, plain[inner:], []byte{0x06, 0x64, 'n', 'a', 'm', 'e'})))
	add("key-order", "map keys out of order", "malformed",
		sealed(header, slicesConcat(plain[:inner-1], []byte{0xa5}, []byte{0x06, 0x64, 'n', 'a', 'm', 'e'}, bytes.Replace(plain[inner:], []byte("\x06\x64name"), nil, 1))))
	add("tagged", "a tag", "malformed", sealed(header, bytes.Replace(plain, []byte("\x06\x64name"), []byte("\x06\xc1\x64name"), 1)))
	add("short-id", "an id of 15 bytes", "malformed", sealed(header, bytes.Replace(plain, append([]byte{0x01, 0x50}, least.ID[:]...), append([]byte{0x01, 0x4f}, least.ID[:15]...), 1)))
	add("empty-value", "a cleared field has no value, not an empty one", "malformed", sealed(header, bytes.Replace(plain, []byte("\x07\x49\x68Hillside"), []byte("\x07\x40"), 1)))
	add("not-utf8", "a field name that is not UTF-8", "malformed", sealed(header, bytes.Replace(plain, []byte("\x06\x64name"), []byte("\x06\x64n\xffme"), 1)))
	unordered, _ := change.EncodeBatch(second)
	v1, v2 := vid(1), vid(2)
	unordered = bytes.Replace(unordered, slicesConcat([]byte{0x82, 0x50}, v1[:], []byte{0x50}, v2[:]), slicesConcat([]byte{0x82, 0x50}, v2[:], []byte{0x50}, v1[:]), 1)
	next := change.Header{Major: 1, Suite: 1, Epoch: 2, Stream: s, First: 2, Last: 3, Prev: one.Hash()}
	add("ids-unordered", "lists of ids rise", "malformed", sealed(next, unordered))
	noReason, _ := change.EncodeBatch(second)
	reason := slicesConcat([]byte{0x0a, 0x74}, []byte(most.Reason))
	noReason = bytes.Replace(bytes.Replace(noReason, reason, nil, 1), []byte{0xac, 0x01, 0x50}, []byte{0xab, 0x01, 0x50}, 1)
	add("no-reason", "an amendment has a reason", "malformed", sealed(next, noReason))
	return out
}

func slicesConcat(parts ...[]byte) []byte { return bytes.Join(parts, nil) }

func TestFrameVectors(t *testing.T) {
	for name, v := range vector.Check(t, "frame", frameVectors(t)) {
		t.Run(name, func(t *testing.T) {
			var epochs []key.Epoch
			for _, k := range v.All("key") {
				number, digits, _ := strings.Cut(k, " ")
				n, err := strconv.ParseUint(number, 10, 32)
				require.NoError(t, err)
				b, err := hex.DecodeString(digits)
				require.NoError(t, err)
				epochs = append(epochs, key.Epoch{Number: uint32(n), Secret: key.Secret(b)})
			}
			f, err := change.ParseFrame(v.Bytes(t, "frame"))
			var b change.Batch
			if err == nil {
				b, err = change.Open(f, ring(t, epochs...))
			}
			require.Equal(t, v.Get("expect"), word(err), "%v", err)
			if err != nil {
				require.Empty(t, b)
				return
			}
			plain, err := change.EncodeBatch(b)
			require.NoError(t, err)
			if want := v.Get("batch"); want != "" {
				require.Equal(t, want, hex.EncodeToString(plain))
				require.Equal(t, v.Get("hash"), f.Hash().String())
				require.Equal(t, v.Get("numbers"), fmt.Sprintf("%d-%d", b.First, b.Last()))
				require.Equal(t, v.Get("before"), f.Prev.String())
			} else {
				require.True(t, len(b.Extra)+len(b.Changes[0].Extra) > 0, "a newer field must be kept")
			}
			// What opens is sealed again to the same batch, byte for byte.
			again, err := change.Seal(b, f.Prev, f.Epoch, ring(t, epochs...))
			require.NoError(t, err)
			b2, err := change.Open(again, ring(t, epochs...))
			require.NoError(t, err)
			require.Equal(t, b, b2)
		})
	}
}
