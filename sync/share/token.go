package share

import (
	"context"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"path/filepath"
	"strings"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/key"
)

const tokenFile = "token"

// CheckToken finds out whether a store was copied, put back to an earlier day or brought to another
// computer behind the program's back. A token lies in the store and in a folder outside it (the
// user's configuration), and changes at every opening: a copy has an old one. Then the device
// begins a new incarnation before it writes anything, so that no number is used twice, and
// CheckToken returns true. Call it right after opening the store.
func CheckToken(ctx context.Context, s *storage.Store, fsys disk.FS, config string) (renewed bool, err error) {
	if fsys == nil {
		fsys = disk.OS()
	}
	v := s.Bag().Device.Verifier()
	outside := filepath.Join(config, "device-"+hex.EncodeToString(v[:16])+".token")
	inside := filepath.Join(s.Dir(), tokenFile)
	mine, err := readToken(fsys, inside)
	if err != nil {
		return false, err
	}
	theirs, err := readToken(fsys, outside)
	if err != nil {
		return false, err
	}
	// A store that never had a token is new here, or as old as its first entry.
	held, err := s.Streams(ctx)
	if err != nil {
		return false, err
	}
	wrote := false
	for _, h := range held {
		wrote = wrote || h.Own
	}
	if mine != theirs && wrote {
		if err := s.Renew(ctx); err != nil {
			return false, err
		}
		renewed = true
	}
	next := key.NewSecret()
	text := []byte(hex.EncodeToString(next[:16]) + "\n")
	if err := makeDirs(fsys, config); err != nil {
		return renewed, fmt.Errorf("keeping this device's token in %s: %w", config, err)
	}
	// If the power fails between the two, the next opening begins anew once more: no harm.
	if err := disk.Replace(fsys, inside, text); err != nil {
		return renewed, fmt.Errorf("keeping this device's token: %w", err)
	}
	if err := disk.Replace(fsys, outside, text); err != nil {
		return renewed, fmt.Errorf("keeping this device's token in %s: %w", config, err)
	}
	return renewed, nil
}

func readToken(fsys disk.FS, name string) (string, error) {
	b, err := disk.ReadFile(fsys, name, 1<<10)
	if errors.Is(err, fs.ErrNotExist) {
		return "", nil
	}
	if err != nil {
		return "", fmt.Errorf("reading this device's token: %w", err)
	}
	return strings.TrimSpace(string(b)), nil
}

// makeDirs makes a folder and those above it.
func makeDirs(fsys disk.FS, dir string) error {
	if _, err := fsys.Stat(dir); err == nil {
		return nil
	}
	if up := filepath.Dir(dir); up != dir {
		if err := makeDirs(fsys, up); err != nil {
			return err
		}
	}
	return fsys.MakeDir(dir)
}
