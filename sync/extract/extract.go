// Package extract hands one patient of one site to another site: signed, sealed for the practice, and to be
// read only. An extract lies outside the streams; what it shows is as old as it is, and nothing that is
// written about the patient elsewhere goes back into it.
package extract

import (
	"bytes"
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"slices"
	"time"

	"github.com/fxamacker/cbor/v2"
	"github.com/klauspost/compress/zstd"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/audit"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/segment"
)

const (
	magic   = "cordwalk extract 1\n"
	purpose = "patient extract"
	// MaxSize is the size of the largest extract in bytes, sealed and unpacked.
	MaxSize    = 64 << 20
	maxChanges = 1 << 20
)

// Extract is one patient as another site knew it at a time.
type Extract struct {
	Practice exam.ID     `cbor:"1,keyasint"`
	Patient  exam.ID     `cbor:"2,keyasint"`
	Site     change.Site `cbor:"3,keyasint"`
	Made     change.HLC  `cbor:"4,keyasint"`
	Raw      [][]byte    `cbor:"5,keyasint"` // the changes, each standing alone

	Signer  key.Verifier    `cbor:"-"`
	Changes []change.Change `cbor:"-"`
}

var (
	enc, _ = cbor.CoreDetEncOptions().EncMode()
	dec, _ = cbor.DecOptions{DupMapKey: cbor.DupMapKeyEnforcedAPF, IndefLength: cbor.IndefLengthForbidden, TagsMd: cbor.TagsForbidden,
		MaxNestedLevels: 4, MaxArrayElements: maxChanges, MaxMapPairs: 16, ExtraReturnErrors: cbor.ExtraDecErrorUnknownField}.DecMode()
)

// Make makes an extract of a patient.
func Make(s *storage.Store, patient exam.ID, now time.Time) ([]byte, error) {
	cs, err := s.Changes(patient)
	if err != nil {
		return nil, err
	}
	bag := s.Bag()
	x := Extract{Practice: bag.Practice, Patient: patient, Site: s.Site(), Made: change.HLCAt(now)}
	for _, c := range cs {
		raw, err := change.Marshal(c)
		if err != nil {
			return nil, fmt.Errorf("making the extract: %w", err)
		}
		x.Raw = append(x.Raw, raw)
	}
	plain, err := enc.Marshal(x)
	if err != nil {
		return nil, fmt.Errorf("making the extract: %w", err)
	}
	z, err := zstd.NewWriter(nil, zstd.WithEncoderConcurrency(1))
	if err != nil {
		return nil, err
	}
	epoch := bag.Ring.Current()
	secret, _ := bag.Ring.Secret(epoch)
	body := binary.BigEndian.AppendUint32(nil, epoch)
	body = append(body, secret.Derive("extract").Seal(z.EncodeAll(plain, nil), []byte(magic))...)
	if len(body) > MaxSize {
		return nil, errors.New("making the extract: the patient's record is too large for one")
	}
	v, sig := bag.Device.Verifier(), bag.Device.Sign(purpose, body)
	return slices.Concat([]byte(magic), v[:], sig[:], body), nil
}

// Read opens an extract. member says whether a key is that of a member of the practice.
func Read(data []byte, bag key.Bag, member func(key.Verifier) bool) (Extract, error) {
	var x Extract
	var sig key.Signature
	fail := func(err error) (Extract, error) { return Extract{}, fmt.Errorf("the extract: %w", err) }
	fixed := len(magic) + len(x.Signer) + len(sig) + 4
	if !bytes.HasPrefix(data, []byte(magic)) {
		if bytes.HasPrefix(data, []byte("cordwalk extract ")) {
			return fail(change.ErrNewer)
		}
		return fail(change.ErrMalformed)
	}
	if len(data) < fixed || len(data) > MaxSize+fixed {
		return fail(change.ErrCut)
	}
	copy(x.Signer[:], data[len(magic):])
	copy(sig[:], data[len(magic)+len(x.Signer):])
	body := data[fixed-4:]
	if !x.Signer.Verify(purpose, body, sig) || !member(x.Signer) {
		return fail(segment.ErrUnsigned)
	}
	secret, ok := bag.Ring.Secret(binary.BigEndian.Uint32(body))
	if !ok {
		return fail(change.ErrNoKey)
	}
	packed, err := secret.Derive("extract").Open(body[4:], []byte(magic))
	if err != nil {
		return fail(err)
	}
	z, err := zstd.NewReader(nil, zstd.WithDecoderConcurrency(1), zstd.WithDecoderMaxMemory(MaxSize))
	if err != nil {
		return fail(err)
	}
	defer z.Close()
	plain, err := z.DecodeAll(packed, nil)
	if err != nil {
		return fail(fmt.Errorf("%w: %s", change.ErrMalformed, err))
	}
	signer := x.Signer
	if err := dec.Unmarshal(plain, &x); err != nil {
		return fail(fmt.Errorf("%w: %s", change.ErrMalformed, err))
	}
	if again, err := enc.Marshal(x); err != nil || !bytes.Equal(again, plain) {
		return fail(fmt.Errorf("%w: it is not in its one allowed encoding", change.ErrMalformed))
	}
	if x.Practice != bag.Practice {
		return fail(errors.New("it is of another practice"))
	}
	for _, raw := range x.Raw {
		c, err := change.Unmarshal(raw)
		if err != nil {
			return fail(err)
		}
		if c.Patient != x.Patient {
			return fail(fmt.Errorf("%w: it holds changes of another patient", change.ErrMalformed))
		}
		x.Changes = append(x.Changes, c)
	}
	x.Signer = signer
	return x, nil
}

// Give is Make for a device that asked, and writes down in the audit for whom; to is its name. It returns nothing for a
// patient that is not here.
func Give(ctx context.Context, s *storage.Store, patient exam.ID, to string, now time.Time) ([]byte, error) {
	data, err := Make(s, patient, now)
	if errors.Is(err, storage.ErrNotFound) {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	return data, audit.Write(ctx, s, s.Device(), audit.Exported, fmt.Sprintf("an extract of %s for %s", patient, to))
}
