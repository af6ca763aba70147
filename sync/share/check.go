package share

import (
	"context"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"strings"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/attach"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/member"
)

// Check looks through the list of devices and the attachments beside a store and says what is damaged. It changes
// nothing. It is a storage.Checker.
func Check(ctx context.Context, fsys disk.FS, dir string, ring *key.Ring) ([]storage.Problem, error) {
	out, err := attach.Check(ctx, fsys, dir, ring)
	if err != nil {
		return nil, err
	}
	es, err := fsys.List(folder(dir))
	if errors.Is(err, fs.ErrNotExist) {
		return out, nil
	}
	if err != nil {
		return nil, fmt.Errorf("checking the list of devices: %w", err)
	}
	bad := func(name, what string) {
		out = append(out, storage.Problem{File: membersDir + "/" + name, Offset: -1, What: what})
	}
	for _, e := range es {
		if e.Dir || !strings.HasSuffix(e.Name, memberExt) && e.Name != rootFile {
			continue
		}
		b, err := disk.ReadFile(fsys, folder(dir, e.Name), member.MaxStatement)
		if err != nil {
			bad(e.Name, "it cannot be read: "+err.Error())
			continue
		}
		if e.Name == rootFile {
			if _, err := parseRoot(b); err != nil {
				bad(e.Name, "it is damaged; restore it from a backup")
			}
			continue
		}
		if s, err := member.Parse(b); err != nil || statementFile(s) != e.Name {
			bad(e.Name, "an entry of the list of devices is damaged; an exchange brings it back from another device")
		}
	}
	return out, nil
}

// statementFile returns the name under which a statement is kept.
func statementFile(s *member.Statement) string {
	id := s.ID()
	return hex.EncodeToString(id[:20]) + memberExt
}

func parseRoot(b []byte) (member.ID, error) {
	id, err := hex.DecodeString(strings.TrimSpace(string(b)))
	if err != nil || len(id) != len(member.ID{}) {
		return member.ID{}, fs.ErrInvalid
	}
	return member.ID(id), nil
}
