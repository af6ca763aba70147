package carry

import (
	"errors"
	"fmt"
	"io/fs"
	"path/filepath"
	"strings"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage/disk"
)

// Letters are what a device that is not a member yet and one that lets it in send each other:
// invitations and requests. They lie in a folder of their own.

const (
	lettersDir = "join"
	maxLetter  = 16 << 10
	maxLetters = 256
)

// Letter is a file that has to do with joining. What it says is for package member to check.
type Letter struct {
	Practice exam.ID
	Name     string
	Data     []byte
}

// LeaveLetter puts a letter into an exchange folder.
func LeaveLetter(fsys disk.FS, folder string, l Letter) error {
	x := &exchange{Options: Options{FS: fsys}, dir: filepath.Join(folder, FolderName(l.Practice))}
	if len(l.Data) > maxLetter {
		return fmt.Errorf("leaving a letter: %w: it has %d bytes", fs.ErrInvalid, len(l.Data))
	}
	if err := x.put(lettersDir, l.Name, l.Data); err != nil {
		x.blocked(err)
		return x.report.Blocked
	}
	return nil
}

// TakeAway removes a letter that has been dealt with.
func TakeAway(fsys disk.FS, folder string, l Letter) error {
	if !disk.GoodName(l.Name) {
		return fmt.Errorf("%w: file name %.80q", fs.ErrInvalid, l.Name)
	}
	err := fsys.Remove(filepath.Join(folder, FolderName(l.Practice), lettersDir, l.Name))
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	return err
}

// Letters returns the letters in an exchange folder whose names end in ext (".invite", ".request"), of
// all practices there.
func Letters(fsys disk.FS, folder, ext string) ([]Letter, error) {
	es, err := fsys.List(folder)
	if err != nil {
		return nil, fmt.Errorf("the exchange folder %s cannot be read (put the stick in, or connect the share): %w", folder, err)
	}
	var out []Letter
	for _, e := range es {
		id, ok := strings.CutPrefix(e.Name, "cordwalk-")
		practice, err := exam.ParseID(id)
		if !ok || err != nil || !e.Dir || FolderName(practice) != e.Name {
			continue
		}
		dir := filepath.Join(folder, e.Name, lettersDir)
		ls, err := fsys.List(dir)
		if errors.Is(err, fs.ErrNotExist) {
			continue
		}
		if err != nil {
			return nil, err
		}
		for _, l := range ls {
			if l.Dir || l.Size > maxLetter || !strings.HasSuffix(l.Name, ext) || !disk.GoodName(l.Name) || len(out) >= maxLetters {
				continue
			}
			b, err := disk.ReadFile(fsys, filepath.Join(dir, l.Name), maxLetter)
			if err != nil {
				continue // half copied or gone again; it will be looked at next time
			}
			out = append(out, Letter{practice, l.Name, b})
		}
	}
	return out, nil
}

// Statements returns the member statements that lie in an exchange folder: where a device that asked
// to join finds its answer.
func Statements(fsys disk.FS, folder string, practice exam.ID) ([][]byte, error) {
	dir := filepath.Join(folder, FolderName(practice), membersDir)
	es, err := fsys.List(dir)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil
	}
	if err != nil {
		return nil, fmt.Errorf("the exchange folder %s cannot be read: %w", folder, err)
	}
	var out [][]byte
	for _, e := range es {
		if e.Dir || e.Size > maxStatement || len(out) >= 1<<13 {
			continue
		}
		if b, err := disk.ReadFile(fsys, filepath.Join(dir, e.Name), maxStatement); err == nil {
			out = append(out, b)
		}
	}
	return out, nil
}
