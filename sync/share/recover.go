package share

import (
	"fmt"

	"filippo.io/age"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// Recover makes a store that was extracted from a backup, or copied from a lost device, usable with the
// recovery sheet where its passphrase is forgotten: the device gets new keys, locked as so.Unlock
// says, and the sheet lets it into the practice. The store must not be open.
func Recover(dir string, so storage.Options, sheet *age.X25519Identity, name string, o Options) error {
	o = o.withDefaults()
	sh := &Share{fs: o.FS, now: o.Now}
	root, err := disk.ReadFile(o.FS, folder(dir, rootFile), 128)
	if err != nil {
		return fmt.Errorf("reading the list of devices: %w", err)
	}
	sh.at = dir
	if err := sh.readList(root); err != nil {
		return err
	}
	sh.List.OnLearn(sh.save)
	d, err := key.NewDevice()
	if err != nil {
		return err
	}
	inc := change.NewIncarnation()
	bag, err := sh.List.Recover(sheet, d, name, inc, sh.clock())
	if err != nil {
		return err
	}
	return storage.Rekey(dir, so, bag, inc)
}
