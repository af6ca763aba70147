package attach

import (
	"context"
	"crypto/sha256"
	"fmt"
	"slices"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/key"
)

// meet brings the keys of owners together that the store uses for contact data and those that are exchanged as
// files: what either side has that the other lacks is added. mu must be held.
func (f *Files) meet(ctx context.Context) error {
	turn, err := f.s.OwnerKeys(ctx, f.turn, func(owner exam.ID, k key.OwnerKey) error {
		if f.erased[owner] || slices.ContainsFunc(f.keys[owner], func(x ownerKey) bool { return x.key == k }) {
			return nil
		}
		b := f.sealOwner(owner, k)
		sum := sha256.Sum256(b)
		name := f.nameOf(ownerExt, sum[:])
		if err := disk.Replace(f.fs, f.ownerFile(name), b); err != nil {
			return err
		}
		f.keys[owner] = append(f.keys[owner], ownerKey{name, k})
		return nil
	})
	if err != nil {
		return fmt.Errorf("keeping the owners' keys: %w", err)
	}
	f.turn = turn
	for owner, ks := range f.keys {
		for _, k := range ks {
			if f.given[k.name] {
				continue
			}
			if err := f.s.AddOwnerKey(owner, f.s.Bag().Ring.SealOwnerKey(owner, k.key)); err != nil {
				return fmt.Errorf("keeping the owners' keys: %w", err)
			}
			f.given[k.name] = true
		}
	}
	return nil
}
