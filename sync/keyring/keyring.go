// Package keyring keeps a store's key in the user's system keyring, where a practice chose that: the store then
// opens in the unlocked session of its user and nowhere else.
//
// A keyring may ask for a password in a window of its own, or hang. No call here waits longer than
// Limit; what comes later is dropped.
package keyring

import (
	"context"
	"encoding/hex"
	"errors"
	"fmt"
	"time"

	"github.com/zalando/go-keyring"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// Limit is how long a call may take.
const Limit = 2 * time.Second

const service = "cordwalk"

// The errors that callers tell apart.
var (
	// ErrNone means that the keyring holds no key of this practice.
	ErrNone = errors.New("the system keyring holds no key of this practice; use the passphrase")
	// ErrSlow means that the keyring did not answer in time.
	ErrSlow = errors.New("the system keyring does not answer; unlock it, or use the passphrase")
)

// backend is what keeps secrets; tests put another one in its place.
type backend interface {
	Get(service, user string) (string, error)
	Set(service, user, secret string) error
	Delete(service, user string) error
}

type system struct{}

func (system) Get(s, u string) (string, error) { return keyring.Get(s, u) }
func (system) Set(s, u, secret string) error   { return keyring.Set(s, u, secret) }
func (system) Delete(s, u string) error        { return keyring.Delete(s, u) }

var current backend = system{}

// within runs f for at most Limit.
func within[T any](ctx context.Context, f func() (T, error)) (T, error) {
	ctx, cancel := context.WithTimeout(ctx, Limit)
	defer cancel()
	type result struct {
		v   T
		err error
	}
	done := make(chan result, 1)
	go func() {
		v, err := f()
		done <- result{v, err}
	}()
	select {
	case r := <-done:
		if errors.Is(r.err, keyring.ErrNotFound) {
			r.err = ErrNone
		} else if r.err != nil {
			r.err = fmt.Errorf("the system keyring cannot be used; use the passphrase: %w", r.err)
		}
		return r.v, r.err
	case <-ctx.Done():
		var none T
		return none, ErrSlow
	}
}

// Get returns the key of a practice's store on this computer.
func Get(ctx context.Context, practice exam.ID) (key.Secret, error) {
	b := current
	text, err := within(ctx, func() (string, error) { return b.Get(service, practice.String()) })
	if err != nil {
		return key.Secret{}, err
	}
	raw, err := hex.DecodeString(text)
	if err != nil || len(raw) != len(key.Secret{}) {
		return key.Secret{}, fmt.Errorf("the key in the system keyring: %w", change.ErrMalformed)
	}
	return key.Secret(raw), nil
}

// Set keeps the key of a practice's store.
func Set(ctx context.Context, practice exam.ID, s key.Secret) error {
	b := current
	_, err := within(ctx, func() (struct{}, error) {
		return struct{}{}, b.Set(service, practice.String(), hex.EncodeToString(s[:]))
	})
	return err
}

// Delete removes it; it is no error if it is not there.
func Delete(ctx context.Context, practice exam.ID) error {
	b := current
	_, err := within(ctx, func() (struct{}, error) { return struct{}{}, b.Delete(service, practice.String()) })
	if errors.Is(err, ErrNone) {
		return nil
	}
	return err
}
