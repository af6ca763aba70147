package storage

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/change"
)

// The journal is the truth. Each stream has its own segments, journal/STREAM-NUMBER.seg,
// which hold nothing but frames and, behind them, the zeros of the room made ready. A
// segment is never cut and never written again once it has been left.
const (
	journalDir = "journal"
	segmentExt = ".seg"
	maxSegment = 64 << 20
	firstRoom  = 1 << 20
	mostRoom   = 8 << 20 // room is made ready in steps of at most this
)

// segmentName returns the file name of a stream's n-th segment, from 1.
func segmentName(s change.Stream, n uint32) string {
	return fmt.Sprintf("%s-%08x%s", s.Name(), n, segmentExt)
}

func parseSegmentName(name string) (s change.Stream, n uint32, ok bool) {
	base, found := strings.CutSuffix(name, segmentExt)
	if !found || len(base) != 64+1+8 || base[64] != '-' {
		return s, 0, false
	}
	s, err := change.ParseStream(base[:64])
	if err != nil {
		return s, 0, false
	}
	v, err := strconv.ParseUint(base[65:], 16, 32)
	if err != nil || v == 0 || segmentName(s, uint32(v)) != name {
		return s, 0, false
	}
	return s, uint32(v), true
}

// segmentFile is one segment in the journal's folder.
type segmentFile struct {
	stream change.Stream
	number uint32
	name   string // full path
	size   int64
}

// listSegments returns the journal's segments by stream and number. Files of other names
// (left by a crash while a segment was made, or put there by somebody) are not touched.
func listSegments(fsys disk.FS, dir string) ([]segmentFile, error) {
	es, err := fsys.List(filepath.Join(dir, journalDir))
	if err != nil {
		return nil, err
	}
	var out []segmentFile
	for _, e := range es {
		if s, n, ok := parseSegmentName(e.Name); ok && !e.Dir {
			out = append(out, segmentFile{s, n, filepath.Join(dir, journalDir, e.Name), e.Size})
		}
	}
	slices.SortFunc(out, func(a, b segmentFile) int {
		if c := a.stream.Compare(b.stream); c != 0 {
			return c
		}
		return int(int64(a.number) - int64(b.number))
	})
	return out, nil
}

// writer appends frames to this device's stream.
type writer struct {
	fs     disk.FS
	dir    string // of the store
	stream change.Stream
	file   disk.File // nil: the next frame begins a new segment
	number uint32    // of the segment written now, or of the last one left
	end    int64     // where the next frame goes
	size   int64     // of the file, room made ready included
}

// resume opens a segment to go on writing in it at its clean end.
func (w *writer) resume(seg segmentFile, end int64) error {
	f, err := w.fs.Edit(seg.name)
	if err != nil {
		return err
	}
	size, err := f.Size()
	if err != nil {
		f.Close()
		return err
	}
	w.file, w.number, w.end, w.size = f, seg.number, end, size
	return nil
}

// write appends one frame and returns when it is on the disk, with its place. After an
// error of the segment the frame is written once more in a new one; what the old one got of it
// stays there. If that fails too nothing is known about the frame, and it must be the next one written.
func (w *writer) write(raw []byte) (number uint32, end int64, err error) {
	if w.file != nil && w.end+int64(len(raw)) > maxSegment {
		w.leave()
	}
	if w.file != nil {
		if err = w.try(raw); err == nil {
			return w.number, w.end, nil
		}
		w.leave()
	}
	if nerr := w.begin(); nerr != nil {
		return 0, 0, errors.Join(err, nerr)
	}
	if nerr := w.try(raw); nerr != nil {
		w.leave()
		return 0, 0, errors.Join(err, nerr)
	}
	return w.number, w.end, nil
}

func (w *writer) try(raw []byte) error {
	if need := w.end + int64(len(raw)); need > w.size {
		room := min(max(w.size, firstRoom), mostRoom)
		size := (max(need, min(w.size+room, maxSegment)) + sector - 1) / sector * sector
		if err := w.file.Preallocate(size); err != nil {
			return err
		}
		w.size = size
	}
	if _, err := w.file.WriteAt(raw, w.end); err != nil {
		return err
	}
	if err := w.file.SyncData(); err != nil {
		return err
	}
	w.end += int64(len(raw))
	return nil
}

// leave closes the segment as it is, for good.
func (w *writer) leave() {
	if w.file != nil {
		_ = w.file.Close() // what was acknowledged is synced; an error here changes nothing
	}
	w.file = nil
}

// begin makes the next segment: beside its place, with room, synced, renamed, the folder synced.
func (w *writer) begin() error {
	n := w.number + 1
	name := filepath.Join(w.dir, journalDir, segmentName(w.stream, n))
	for {
		there, err := disk.Exists(w.fs, name)
		if err != nil {
			return err
		}
		if !there {
			break
		}
		n++ // never write into what is there already
		name = filepath.Join(w.dir, journalDir, segmentName(w.stream, n))
	}
	tmp := disk.Temporary(name)
	if err := w.fs.Remove(tmp); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	f, err := w.fs.Create(tmp)
	if err != nil {
		return err
	}
	err = f.Preallocate(firstRoom)
	if err == nil {
		err = f.Sync()
	}
	if cerr := f.Close(); err == nil { // Windows renames no open file
		err = cerr
	}
	if err != nil {
		_ = w.fs.Remove(tmp)
		return err
	}
	w.number = n // even if a later step fails: the name may be taken
	if err := w.fs.Rename(tmp, name); err != nil {
		return err
	}
	if err := w.fs.SyncDir(filepath.Dir(name)); err != nil {
		return err
	}
	if f, err = w.fs.Edit(name); err != nil {
		return err
	}
	w.file, w.end, w.size = f, 0, firstRoom
	return nil
}

// piece is what a walk through a segment meets.
type piece struct {
	change.Piece
	seg    segmentFile
	opened *opened // if it was opened ahead
}

// end returns the place behind the piece.
func (p piece) end() int64 { return p.Offset + p.Length }

// walkSegment calls f for every piece of a segment from an offset on. Zeros at the end are
// room made ready and not reported; zeros before something else are.
func walkSegment(fsys disk.FS, seg segmentFile, from int64, f func(piece) error) error {
	file, err := fsys.Open(seg.name)
	if err != nil {
		return err
	}
	defer file.Close()
	size, err := file.Size()
	if err != nil {
		return err
	}
	sc := change.NewScanner(io.NewSectionReader(file, from, max(size-from, 0)), from)
	var blank *piece
	for {
		p, err := sc.Next()
		if errors.Is(err, io.EOF) {
			return nil
		}
		if err != nil {
			return err
		}
		if p.Blank {
			if blank == nil {
				blank = &piece{Piece: p, seg: seg}
			} else {
				blank.Length += p.Length
			}
			continue
		}
		if blank != nil {
			if err := f(*blank); err != nil {
				return err
			}
			blank = nil
		}
		if err := f(piece{Piece: p, seg: seg}); err != nil {
			return err
		}
	}
}
