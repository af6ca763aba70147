package change_test

import (
	"bytes"
	"errors"
	"io"
	"os"
	"path/filepath"
	"testing"

	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/internal/vector"
	"cordwalk.example/cordwalk/sync/key"
)

// seeds adds a field of every vector of a folder to a fuzz target's corpus.
func seeds(f *testing.F, folder, field string) {
	files, err := filepath.Glob(filepath.Join("..", "..", "testdata", "vectors", folder, "*.txt"))
	if err != nil || len(files) == 0 {
		f.Fatalf("no vectors: %v", err)
	}
	for _, name := range files {
		b, err := os.ReadFile(name)
		if err != nil {
			f.Fatal(err)
		}
		v, err := vector.Parse(string(b))
		if err != nil {
			f.Fatal(err)
		}
		f.Add(v.Bytes(f, field))
	}
}

// Whatever bytes come: the pieces that the scanner finds join without holes, the frames among
// them are whole, and none of it panics or runs on for ever.
func FuzzScan(f *testing.F) {
	seeds(f, "frame", "frame")
	_, data := journal(f, 3)
	f.Add(data)
	f.Add(append(data[:700:700], make([]byte, 300)...))
	f.Fuzz(func(t *testing.T, data []byte) {
		s := change.NewScanner(bytes.NewReader(data), 0)
		var at int64
		for {
			p, err := s.Next()
			if errors.Is(err, io.EOF) {
				break
			}
			if err != nil {
				t.Fatal(err)
			}
			if p.Offset != at || p.Length <= 0 {
				t.Fatalf("piece at %d of %d bytes where %d was next", p.Offset, p.Length, at)
			}
			at += p.Length
			if p.Damage == nil && !bytes.Equal(p.Frame.Raw, data[p.Offset:p.Offset+p.Length]) {
				t.Fatal("a frame's bytes are not those of the file")
			}
		}
		if at != int64(len(data)) {
			t.Fatalf("%d of %d bytes were looked at", at, len(data))
		}
	})
}

// What decodes encodes to the same bytes again.
func FuzzDecodeBatch(f *testing.F) {
	ring, err := key.NewRing(key.Epoch{Number: 1, Secret: secret(0x11)}, key.Epoch{Number: 2, Secret: secret(0x22)})
	if err != nil {
		f.Fatal(err)
	}
	files, _ := filepath.Glob(filepath.Join("..", "..", "testdata", "vectors", "frame", "*.txt"))
	for _, name := range files {
		b, _ := os.ReadFile(name)
		v, _ := vector.Parse(string(b))
		fr, err := change.ParseFrame(v.Bytes(f, "frame"))
		if err != nil {
			continue
		}
		if aead, ok := ring.Frames(fr.Epoch); ok {
			if plain, err := aead.Open(nil, fr.Raw[change.HeaderSize:change.HeaderSize+24], fr.Raw[change.HeaderSize+24:], fr.Raw[:change.HeaderSize]); err == nil {
				f.Add(plain, fr.Minor)
			}
		}
	}
	f.Fuzz(func(t *testing.T, data []byte, minor uint8) {
		b, err := change.DecodeBatch(data, stream, 1, minor)
		if err != nil {
			if !errors.Is(err, change.ErrMalformed) {
				t.Fatalf("an error of no kind: %v", err)
			}
			return
		}
		again, err := change.EncodeBatch(b)
		if err != nil || !bytes.Equal(again, data) {
			t.Fatalf("two encodings of one batch: %x and %x (%v)", data, again, err)
		}
		for _, c := range b.Changes {
			m, err := change.Marshal(c)
			if err != nil {
				t.Fatal(err)
			}
			d, err := change.Unmarshal(m)
			if err != nil {
				t.Fatal(err)
			}
			if n, _ := change.Marshal(d); !bytes.Equal(m, n) {
				t.Fatal("a change that stands alone is encoded in two ways")
			}
		}
	})
}

func FuzzUnmarshal(f *testing.F) {
	frames, _ := journal(f, 3)
	for _, fr := range frames {
		b, err := change.Open(fr, keyring)
		if err != nil {
			f.Fatal(err)
		}
		m, _ := change.Marshal(b.Changes[0])
		f.Add(m)
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		c, err := change.Unmarshal(data)
		if err != nil {
			return
		}
		if again, err := change.Marshal(c); err != nil || !bytes.Equal(again, data) {
			t.Fatalf("two encodings of one change: %x and %x (%v)", data, again, err)
		}
	})
}
