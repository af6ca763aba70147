package change

import (
	"bytes"
	"errors"
	"fmt"
	"io"
)

// Piece is what a Scanner found next: a frame, or a stretch of bytes that is none.
type Piece struct {
	Offset int64 // of its first byte in the stream of bytes
	Length int64
	Frame  Frame // valid if Damage is nil; its memory is the caller's
	Damage error // why this stretch is no frame
	Blank  bool  // the stretch is all zeros: space made ready and not yet used
}

// Scanner finds the frames in a stream of bytes, whatever lies between them. After damage it
// goes on at the next header whose checksum fits, so that one flipped bit costs one frame.
// It holds at most one frame's length in memory and reads each byte once.
type Scanner struct {
	r      io.Reader
	buf    []byte // unread bytes
	offset int64  // of buf[0]
	eof    bool
	err    error
}

// NewScanner scans r from its beginning, which lies at offset start of the whole.
func NewScanner(r io.Reader, start int64) *Scanner { return &Scanner{r: r, offset: start} }

const readAhead = 64 << 10

// fill makes at least n bytes available unless r ends before.
func (s *Scanner) fill(n int) {
	for len(s.buf) < n && !s.eof && s.err == nil {
		if cap(s.buf)-len(s.buf) < readAhead {
			grown := make([]byte, len(s.buf), max(2*len(s.buf), n)+readAhead)
			copy(grown, s.buf)
			s.buf = grown
		}
		got, err := s.r.Read(s.buf[len(s.buf):min(cap(s.buf), len(s.buf)+max(readAhead, n-len(s.buf)))])
		s.buf = s.buf[:len(s.buf)+got]
		if errors.Is(err, io.EOF) {
			s.eof = true
		} else if err != nil {
			s.err = err
		}
	}
}

func (s *Scanner) take(n int) Piece {
	p := Piece{Offset: s.offset, Length: int64(n)}
	s.buf = s.buf[n:]
	s.offset += int64(n)
	return p
}

// Next returns the next piece. The error is io.EOF at the end, or what reading returned.
func (s *Scanner) Next() (Piece, error) {
	s.fill(HeaderSize)
	if s.err != nil {
		return Piece{}, s.err
	}
	if len(s.buf) == 0 {
		return Piece{}, io.EOF
	}
	h, err := ParseHeader(s.buf)
	if err == nil {
		s.fill(h.Size() + len(Magic))
		if s.err != nil {
			return Piece{}, s.err
		}
		f, ferr := ParseFrame(s.buf)
		if ferr == nil && s.followed(h.Size()) {
			f.Raw = bytes.Clone(f.Raw)
			p := s.take(h.Size())
			p.Frame = f
			return p, nil
		}
		// The body is cut, or bytes are missing or added inside it. If another header
		// stands where the body should be, this frame is lost and that one is not.
		limit := min(len(s.buf), h.Size())
		if at := s.find(1, limit); at > 0 {
			p := s.take(at)
			p.Damage = fmt.Errorf("%w: frame %d of stream %s has %d bytes where it says %d", ErrCut, h.First, h.Stream, at, h.Size())
			return p, nil
		}
		if ferr == nil {
			f.Raw = bytes.Clone(f.Raw)
			p := s.take(h.Size())
			p.Frame = f
			return p, nil
		}
		p := s.take(limit)
		p.Damage = ferr
		return p, nil
	}
	if s.buf[0] == 0 {
		n := 0
		for n < len(s.buf) && s.buf[n] == 0 {
			n++
		}
		p := s.take(n)
		p.Blank, p.Damage = true, fmt.Errorf("%w: %d bytes of zeros", ErrMalformed, n)
		return p, nil
	}
	// No frame here: everything up to the next header, or what is in memory.
	s.fill(readAhead)
	if s.err != nil {
		return Piece{}, s.err
	}
	at := s.find(1, len(s.buf))
	if at < 0 {
		at = len(s.buf)
		if !s.eof {
			at = max(1, len(s.buf)-HeaderSize) // a header may begin at the end
		}
	}
	if blank := bytes.IndexByte(s.buf[:at], 0); blank > 0 && allZero(s.buf[blank:at]) {
		at = blank
	}
	p := s.take(at)
	p.Damage = err
	return p, nil
}

// followed reports whether a frame of n bytes is followed by what may follow a frame: another
// frame, blank space or the end.
func (s *Scanner) followed(n int) bool {
	rest := s.buf[n:min(len(s.buf), n+len(Magic))]
	return len(rest) == 0 || bytes.Equal(rest, Magic[:]) || allZero(rest)
}

func allZero(b []byte) bool {
	for _, x := range b {
		if x != 0 {
			return false
		}
	}
	return true
}

// find returns the place in buf[from:to] where a header with a fitting checksum begins, or -1.
func (s *Scanner) find(from, to int) int {
	for from < to {
		at := bytes.Index(s.buf[from:], Magic[:])
		if at < 0 || from+at >= to {
			return -1
		}
		from += at
		if len(s.buf) < from+HeaderSize {
			s.fill(from + HeaderSize)
		}
		if _, err := ParseHeader(s.buf[from:]); err == nil {
			return from
		}
		from++
	}
	return -1
}
