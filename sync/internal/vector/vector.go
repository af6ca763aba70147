// Package vector reads and writes the test vectors in testdata/vectors: small texts that
// each show one rule of a format, so that another implementation can be checked against
// them too.
//
// A vector is lines of "name: value". A line that begins with two blanks continues the value
// above it; such lines are joined without anything between. An empty line or one that begins
// with # says nothing.
package vector

import (
	"encoding/hex"
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

var update = flag.Bool("update", false, "write the test vectors anew")

// Field is one named value.
type Field struct{ Name, Value string }

// Vector is a list of fields.
type Vector []Field

// Text adds a field.
func (v *Vector) Text(name, format string, args ...any) {
	*v = append(*v, Field{name, fmt.Sprintf(format, args...)})
}

// Hex adds bytes.
func (v *Vector) Hex(name string, b []byte) { *v = append(*v, Field{name, hex.EncodeToString(b)}) }

// Get returns the first value of a name, empty if there is none.
func (v Vector) Get(name string) string {
	for _, f := range v {
		if f.Name == name {
			return f.Value
		}
	}
	return ""
}

// All returns all values of a name.
func (v Vector) All(name string) (out []string) {
	for _, f := range v {
		if f.Name == name {
			out = append(out, f.Value)
		}
	}
	return out
}

// Bytes returns the first value of a name as bytes.
func (v Vector) Bytes(t testing.TB, name string) []byte {
	t.Helper()
	b, err := hex.DecodeString(v.Get(name))
	if err != nil {
		t.Fatalf("%s: %v", name, err)
	}
	return b
}

// String writes the vector.
func (v Vector) String() string {
	var b strings.Builder
	for _, f := range v {
		const width = 96
		if len(f.Value) <= width || strings.Contains(f.Value, " ") {
			fmt.Fprintf(&b, "%s: %s\n", f.Name, f.Value)
			continue
		}
		fmt.Fprintf(&b, "%s:\n", f.Name)
		for rest := f.Value; rest != ""; {
			n := min(len(rest), width)
			fmt.Fprintf(&b, "  %s\n", rest[:n])
			rest = rest[n:]
		}
	}
	return b.String()
}

// Parse is the inverse of String.
func Parse(text string) (Vector, error) {
	var v Vector
	for i, line := range strings.Split(text, "\n") {
		switch {
		case line == "" || line[0] == '#':
		case strings.HasPrefix(line, "  "):
			if len(v) == 0 {
				return nil, fmt.Errorf("line %d continues nothing", i+1)
			}
			v[len(v)-1].Value += strings.TrimSpace(line)
		default:
			name, value, ok := strings.Cut(line, ":")
			if !ok {
				return nil, fmt.Errorf("line %d has no name", i+1)
			}
			v = append(v, Field{name, strings.TrimSpace(value)})
		}
	}
	return v, nil
}

// Check compares what a generator makes with the files of a folder of testdata/vectors, or
// writes them with -update, and returns what the files hold. The folder may hold more files
// than made names: they are returned too.
func Check(t *testing.T, folder string, made map[string]Vector) map[string]Vector {
	t.Helper()
	dir := filepath.Join("..", "..", "testdata", "vectors", folder)
	if *update {
		if err := os.MkdirAll(dir, 0o755); err != nil {
			t.Fatal(err)
		}
		for name, v := range made {
			if err := os.WriteFile(filepath.Join(dir, name+".txt"), []byte(v.String()), 0o644); err != nil {
				t.Fatal(err)
			}
		}
	}
	files, err := filepath.Glob(filepath.Join(dir, "*.txt"))
	if err != nil {
		t.Fatal(err)
	}
	out := map[string]Vector{}
	for _, f := range files {
		b, err := os.ReadFile(f)
		if err != nil {
			t.Fatal(err)
		}
		name := strings.TrimSuffix(filepath.Base(f), ".txt")
		if out[name], err = Parse(string(b)); err != nil {
			t.Fatalf("%s: %v", f, err)
		}
		if m, ok := made[name]; ok && m.String() != string(b) {
			t.Errorf("%s: the format has changed: the generator now makes\n%s", f, m)
		}
	}
	for name := range made {
		if _, ok := out[name]; !ok {
			t.Errorf("%s is missing; make it with -update", name)
		}
	}
	return out
}
