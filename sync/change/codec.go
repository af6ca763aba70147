package change

import (
	"bytes"
	"errors"
	"fmt"

	"github.com/fxamacker/cbor/v2"
)

// The highest map keys that this version of the format knows. A newer minor version may
// only add keys above them, so that unknown fields always come last.
const (
	lastChangeKey = 12
	lastBatchKey  = 2
)

var (
	enc = must(cbor.CoreDetEncOptions().EncMode())
	// dec refuses what deterministic CBOR does not allow and bounds what a hostile
	// writer can make a reader allocate.
	decOptions = cbor.DecOptions{
		DupMapKey:         cbor.DupMapKeyEnforcedAPF,
		IndefLength:       cbor.IndefLengthForbidden,
		TagsMd:            cbor.TagsForbidden,
		MaxNestedLevels:   16,
		MaxArrayElements:  MaxSeen,
		MaxMapPairs:       64,
		ExtraReturnErrors: cbor.ExtraDecErrorUnknownField,
		UTF8:              cbor.UTF8RejectInvalid,
	}
	dec = must(decOptions.DecMode())
	// loose is dec without the complaint about unknown fields.
	loose = func() cbor.DecMode {
		o := decOptions
		o.ExtraReturnErrors = cbor.ExtraDecErrorNone
		return must(o.DecMode())
	}()
)

func must[T any](v T, err error) T {
	if err != nil {
		panic(err) // a mistake in the options above, found by any test
	}
	return v
}

type wireBatch struct {
	Examiner string            `cbor:"1,keyasint,omitempty"`
	Changes  []cbor.RawMessage `cbor:"2,keyasint"`
}

// wireStored is a change that stands alone, as an array.
type wireStored struct {
	_        struct{} `cbor:",toarray"`
	Change   cbor.RawMessage
	Device   Incarnation
	Site     Site
	Seq      uint64
	Examiner string
}

// EncodeBatch returns the one encoding of a batch. Stream and First are not in it: they
// stand in the frame's header.
func EncodeBatch(b Batch) ([]byte, error) {
	if err := b.Validate(); err != nil {
		return nil, err
	}
	w := wireBatch{Examiner: b.Examiner, Changes: make([]cbor.RawMessage, len(b.Changes))}
	for i, c := range b.Changes {
		raw, err := encodeWithExtra(c, c.Extra, lastChangeKey)
		if err != nil {
			return nil, err
		}
		w.Changes[i] = raw
	}
	return encodeWithExtra(w, b.Extra, lastBatchKey)
}

// DecodeBatch is the inverse of EncodeBatch for a batch of stream s that begins at sequence
// first and was written by minor version minor of the format. It refuses every other
// encoding of the same batch. Fields that this program does not know are kept only if the
// writer's minor version is newer.
func DecodeBatch(data []byte, s Stream, first uint64, minor uint8) (Batch, error) {
	if b, ok := quickBatch(bytes.Clone(data), s, first, nil); ok {
		return b, nil
	}
	return slowBatch(data, s, first, minor)
}

func slowBatch(data []byte, s Stream, first uint64, minor uint8) (Batch, error) {
	var w wireBatch
	extra, err := decodeWithExtra(data, &w, lastBatchKey, minor)
	if err != nil {
		return Batch{}, fmt.Errorf("%w: batch %d of stream %s: %s", ErrMalformed, first, s, err)
	}
	if len(w.Changes) == 0 || len(w.Changes) > MaxChanges {
		return Batch{}, fmt.Errorf("%w: batch %d of stream %s holds %d changes, allowed are 1 to %d", ErrMalformed, first, s, len(w.Changes), MaxChanges)
	}
	b := Batch{Stream: s, First: first, Examiner: w.Examiner, Changes: make([]Change, len(w.Changes)), Extra: extra}
	for i, raw := range w.Changes {
		c := &b.Changes[i]
		if c.Extra, err = decodeWithExtra(raw, c, lastChangeKey, minor); err != nil {
			return Batch{}, fmt.Errorf("%w: change %d of stream %s: %s", ErrMalformed, first+uint64(i), s, err)
		}
		c.Stream, c.Seq, c.Examiner = s, first+uint64(i), w.Examiner
	}
	if err := b.Validate(); err != nil {
		return Batch{}, err
	}
	again, err := EncodeBatch(b)
	if err != nil {
		return Batch{}, err
	}
	if !bytes.Equal(again, data) {
		return Batch{}, fmt.Errorf("%w: batch %d of stream %s is not in its one allowed encoding", ErrMalformed, first, s)
	}
	return b, nil
}

// Marshal returns the one encoding of a change that stands alone, with its stream, sequence
// and examiner; an index keeps changes so.
func Marshal(c Change) ([]byte, error) {
	if err := c.Validate(); err != nil {
		return nil, err
	}
	raw, err := encodeWithExtra(c, c.Extra, lastChangeKey)
	if err != nil {
		return nil, err
	}
	return enc.Marshal(wireStored{Change: raw, Device: c.Stream.Device, Site: c.Stream.Site, Seq: c.Seq, Examiner: c.Examiner})
}

// Unmarshal is the inverse of Marshal. It keeps unknown fields, whoever wrote them.
func Unmarshal(data []byte) (Change, error) {
	var w wireStored
	if err := dec.Unmarshal(data, &w); err != nil {
		return Change{}, fmt.Errorf("%w: stored change: %s", ErrMalformed, err)
	}
	var c Change
	var err error
	if c.Extra, err = decodeWithExtra(w.Change, &c, lastChangeKey, Minor+1); err != nil {
		return Change{}, fmt.Errorf("%w: stored change: %s", ErrMalformed, err)
	}
	c.Stream, c.Seq, c.Examiner = Stream{w.Device, w.Site}, w.Seq, w.Examiner
	again, err := Marshal(c)
	if err != nil {
		return Change{}, err
	}
	if !bytes.Equal(again, data) {
		return Change{}, fmt.Errorf("%w: stored change %s is not in its one allowed encoding", ErrMalformed, c.ID)
	}
	return c, nil
}

// encodeWithExtra encodes a struct with integer keys and puts the encoded fields of extra
// behind it. lastKey is the highest key that the struct can have.
func encodeWithExtra(v any, extra []byte, lastKey uint64) ([]byte, error) {
	data, err := enc.Marshal(v)
	if err != nil || len(extra) == 0 {
		return data, err
	}
	n, err := countPairs(extra, lastKey)
	if err != nil {
		return nil, err
	}
	known, head := int(data[0]&0x1f), 1 // the struct has fewer than 24 fields: one byte
	total := known + n
	if total > decOptions.MaxMapPairs {
		return nil, fmt.Errorf("%w: %d fields, allowed are %d", ErrMalformed, total, decOptions.MaxMapPairs)
	}
	out := make([]byte, 0, len(data)+len(extra)+1)
	if total < 24 {
		out = append(out, 0xa0|byte(total))
	} else {
		out = append(out, 0xb8, byte(total))
	}
	out = append(out, data[head:]...)
	return append(out, extra...), nil
}

// decodeWithExtra decodes a map with integer keys into the struct that v points to, and
// returns the encoded fields that v does not know.
func decodeWithExtra(data []byte, v any, lastKey uint64, minor uint8) ([]byte, error) {
	err := dec.Unmarshal(data, v)
	var unknown *cbor.UnknownFieldError
	if err == nil || !errors.As(err, &unknown) {
		return nil, err
	}
	if minor <= Minor {
		return nil, errors.New("it has a field that its version does not have")
	}
	if err := loose.Unmarshal(data, v); err != nil {
		return nil, err
	}
	rest, pairs, err := mapHead(data)
	if err != nil {
		return nil, err
	}
	for ; pairs > 0; pairs-- {
		var key uint64
		after, err := dec.UnmarshalFirst(rest, &key)
		if err != nil {
			return nil, fmt.Errorf("a field's key is no number: %w", err)
		}
		if key > lastKey {
			extra := bytes.Clone(rest)
			_, err := countPairs(extra, lastKey)
			return extra, err
		}
		var value cbor.RawMessage
		if rest, err = dec.UnmarshalFirst(after, &value); err != nil {
			return nil, err
		}
	}
	return nil, errors.New("it has a field that no version can have")
}

// mapHead reads the head of a map of at most 255 pairs in its shortest form.
func mapHead(data []byte) (rest []byte, pairs int, err error) {
	switch {
	case len(data) > 0 && data[0] >= 0xa0 && data[0] < 0xb8:
		return data[1:], int(data[0] & 0x1f), nil
	case len(data) > 1 && data[0] == 0xb8 && data[1] >= 24:
		return data[2:], int(data[1]), nil
	}
	return nil, 0, errors.New("it is no map in the shortest form")
}

// countPairs checks that extra is a row of map pairs whose keys rise from above lastKey, and
// counts them.
func countPairs(extra []byte, lastKey uint64) (n int, err error) {
	for len(extra) > 0 {
		var key uint64
		rest, err := dec.UnmarshalFirst(extra, &key)
		if err != nil {
			return 0, fmt.Errorf("%w: an unknown field's key is no number", ErrMalformed)
		}
		short, err := enc.Marshal(key)
		if err != nil {
			return 0, err
		}
		if key <= lastKey || !bytes.HasPrefix(extra, short) {
			return 0, fmt.Errorf("%w: an unknown field has the key %d, which is out of order or not in its shortest form", ErrMalformed, key)
		}
		lastKey = key
		var value cbor.RawMessage
		if extra, err = dec.UnmarshalFirst(rest, &value); err != nil {
			return 0, fmt.Errorf("%w: an unknown field: %s", ErrMalformed, err)
		}
		n++
	}
	return n, nil
}
