package carry

import (
	"context"
	"errors"
	"fmt"
	"io"
	"path/filepath"

	"cordwalk.example/cordwalk/storage/disk"
)

// ErrUnwanted means that a file must not be kept: its owner's data were erased. It is removed from the folder.
var ErrUnwanted = errors.New("its owner's data were erased on request")

// Attachments is the store's folder of sealed attachments: films, photos, documents. A file's
// name is an HMAC and never changes its content.
type Attachments interface {
	// Obey destroys what the records say was erased on request. It is called when new records have come.
	Obey(ctx context.Context) error
	// List returns name and size of each file that is whole.
	List(ctx context.Context) ([]FileRef, error)
	// Open opens a file for reading.
	Open(ctx context.Context, name string) (io.ReadCloser, error)
	// Wanted reports whether the store lacks a file and would keep it.
	Wanted(ctx context.Context, name string) (bool, error)
	// Take keeps a file once it has been read to its end and found whole.
	Take(ctx context.Context, name string, size int64, r io.Reader) error
}

// leaveFiles copies attachments that the folder lacks, and takes those that we lack. Findings go
// first: this is called after them.
func (x *exchange) leaveFiles(ctx context.Context) error {
	if x.Files == nil {
		return nil
	}
	es, err := x.list(filesDir)
	if err != nil {
		return err
	}
	there := map[string]int64{}
	for _, e := range es {
		if goodFileName(e.Name) && !e.Dir {
			there[e.Name] = e.Size
		}
	}
	mine, err := x.Files.List(ctx)
	if err != nil {
		return fmt.Errorf("%w: %w", errOwnSide, err)
	}
	for _, f := range mine {
		if !goodFileName(f.Name) || there[f.Name] == f.Size {
			continue
		}
		if err := x.copyOut(ctx, f); err != nil {
			return err
		}
	}
	return nil
}

func (x *exchange) copyOut(ctx context.Context, f FileRef) (err error) {
	if err := x.makeDirs(filesDir); err != nil {
		return err
	}
	in, err := x.Files.Open(ctx, f.Name)
	if err != nil {
		return fmt.Errorf("%w: %w", errOwnSide, err)
	}
	defer in.Close()
	path := filepath.Join(x.dir, filesDir, f.Name)
	tmp := disk.Temporary(path)
	_ = x.FS.Remove(tmp)
	out, err := x.FS.Create(tmp)
	if err != nil {
		return err
	}
	defer func() {
		if err != nil {
			_ = x.FS.Remove(tmp)
		}
	}()
	buf := make([]byte, 256<<10)
	var at int64
	for {
		if err := ctx.Err(); err != nil {
			out.Close()
			return err
		}
		n, rerr := in.Read(buf)
		if n > 0 {
			if _, err := out.WriteAt(buf[:n], at); err != nil {
				out.Close()
				return err
			}
			at += int64(n)
			x.Progress("sending attachments", at, f.Size)
		}
		if rerr == io.EOF {
			break
		}
		if rerr != nil {
			out.Close()
			return fmt.Errorf("%w: %w", errOwnSide, rerr)
		}
	}
	if err = out.Sync(); err == nil {
		err = out.Close()
	} else {
		out.Close()
	}
	if err != nil {
		return err
	}
	if err = x.FS.Rename(tmp, path); err != nil {
		return err
	}
	return x.FS.SyncDir(filepath.Dir(path))
}

// takeFiles reads attachments that we lack.
func (x *exchange) takeFiles(ctx context.Context) error {
	if x.Files == nil {
		return nil
	}
	if err := x.Files.Obey(ctx); err != nil {
		return fmt.Errorf("%w: %w", errOwnSide, err)
	}
	es, err := x.list(filesDir)
	if err != nil {
		return fmt.Errorf("reading the exchange folder %s: %w", x.dir, err)
	}
	for _, e := range es {
		if e.Dir || !goodFileName(e.Name) {
			continue
		}
		want, err := x.Files.Wanted(ctx, e.Name)
		if err != nil {
			return fmt.Errorf("%w: %w", errOwnSide, err)
		}
		if !want {
			continue
		}
		f, err := x.FS.Open(filepath.Join(x.dir, filesDir, e.Name))
		if err != nil {
			x.problem("the attachment %s cannot be read: %s", e.Name, err)
			continue
		}
		x.report.Read++
		err = x.Files.Take(ctx, e.Name, e.Size, io.NewSectionReader(f, 0, e.Size))
		f.Close()
		if errors.Is(err, ErrUnwanted) {
			if !x.ReceiveOnly {
				_ = x.FS.Remove(filepath.Join(x.dir, filesDir, e.Name)) // tried again at the next exchange
			}
			continue
		}
		if ctx.Err() != nil {
			return ctx.Err()
		}
		if err != nil {
			x.problem("the attachment %s is not whole here (it may still be on its way): %s", e.Name, err)
		}
	}
	return nil
}
