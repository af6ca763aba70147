package attach

import (
	"errors"
	"fmt"
	"io"
	"io/fs"

	"filippo.io/age"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
)

// At opens an attachment to be read at any place, with its size unsealed: what describes a long clip may stand
// at its end. Every 64 KiB that are touched are checked. The errors are those of Read; the caller closes it.
func (f *Files) At(owner exam.ID, name string) (io.ReaderAt, int64, io.Closer, error) {
	if !goodName(name) {
		return nil, 0, nil, fmt.Errorf("reading the attachment %.80q: %w", name, fs.ErrInvalid)
	}
	ks, err := f.ownerKeys(owner, false)
	if err != nil {
		return nil, 0, nil, err
	}
	in, err := f.fs.Open(f.file(name))
	if err != nil {
		return nil, 0, nil, fmt.Errorf("reading the attachment: %w", err)
	}
	size, err := in.Size()
	if err == nil {
		var r io.ReaderAt
		if r, size, err = age.DecryptReaderAt(in, size, identity{f.tag(owner), ks}); err == nil {
			return r, size, in, nil
		}
	}
	err = errors.Join(err, in.Close())
	var none *age.NoIdentityMatchError
	if errors.As(err, &none) {
		err = change.ErrSealed
	}
	return nil, 0, nil, fmt.Errorf("reading the attachment: %w", err)
}
