package localise

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"testing"

	"cordwalk.example/cordwalk/exam"
)

// posteriorBits hashes the bits of the whole answer to 40 seeded exams of a species.
func posteriorBits(t testing.TB, s exam.Species) string {
	e, err := New(s)
	if err != nil {
		t.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(20, uint64(s)))
	h := sha256.New()
	put := func(v float64) { _ = binary.Write(h, binary.LittleEndian, math.Float64bits(v)) }
	lay := e.m.lay
	for i := range 40 {
		x := Exam{Species: s}
		for range rng.IntN(50) {
			c := &lay.cells[rng.IntN(len(lay.cells))]
			in := c.item.Info()
			f := exam.Finding{Item: c.item, Site: c.site, Digit: c.digit, Joint: c.joint,
				Result: exam.Graded(in.First + int8(rng.IntN(len(in.Grades))))}
			if rng.IntN(8) == 0 {
				f.Block = "a"
			}
			x.Findings = append(x.Findings, f)
		}
		if i%3 == 0 {
			x.AgeYears, x.OnsetDays, x.Sedation = 16*rng.Float64(), 30*rng.Float64(), exam.Sedation(rng.IntN(4))
			x.Diagnosis, x.Level, x.WeightKg = "disc extrusion", "T12-T13", 60*rng.Float64()
		}
		r, err := e.Compute(x)
		if err != nil {
			t.Fatal(err)
		}
		for _, p := range r.Regions {
			put(p.Probability)
		}
		for _, p := range r.Segments {
			put(p.Damage)
		}
		for _, p := range r.Evidence {
			put(p.Decibans)
		}
		for _, p := range r.Next {
			put(p.Bits)
		}
		for _, w := range e.weightFull {
			_ = binary.Write(h, binary.LittleEndian, w)
		}
	}
	return fmt.Sprintf("%s %x", s, h.Sum(nil))
}

// TestPrintBits prints the hashes for TestSameBitsEverywhere, which runs it in other builds.
func TestPrintBits(t *testing.T) {
	if os.Getenv("CORDWALK_PRINT_BITS") == "" {
		t.Skip("run by TestSameBitsEverywhere")
	}
	for _, s := range []exam.Species{exam.Dog, exam.Cat} {
		fmt.Println("bits", posteriorBits(t, s))
	}
}

// TestSameBitsEverywhere builds this package for the oldest and for a newer level of the
// processor (GOAMD64 v1, and v3 with fused multiply–add) and compares the answers bit for bit.
// The compiled code of the newer level holds no fused multiply–add either.
func TestSameBitsEverywhere(t *testing.T) {
	if testing.Short() {
		t.Skip("builds the package twice")
	}
	if runtime.GOARCH != "amd64" {
		t.Skipf("GOAMD64 says nothing on %s", runtime.GOARCH)
	}
	var want strings.Builder
	for _, s := range []exam.Species{exam.Dog, exam.Cat} {
		fmt.Fprintln(&want, "bits", posteriorBits(t, s))
	}
	for _, level := range []string{"v1", "v3"} {
		binary := filepath.Join(t.TempDir(), "localise.test")
		args := []string{"test", "-c", "-o", binary}
		if level == "v3" {
			args = append(args, "-gcflags=cordwalk.example/cordwalk/exam/localise=-S")
		}
		build := exec.Command("go", append(args, ".")...)
		build.Env = append(os.Environ(), "GOAMD64="+level)
		listing, err := build.CombinedOutput()
		if err != nil {
			t.Fatalf("building for %s: %v\n%s", level, err, tail(listing))
		}
		if level == "v3" && len(listing) < 1<<20 {
			t.Errorf("the listing has %d bytes only", len(listing))
		}
		if n := fused(listing); n != "" {
			t.Errorf("%s: fused multiply–add in %s", level, n)
		}
		run := exec.Command(binary, "-test.run", "^TestPrintBits$", "-test.v")
		run.Env = append(os.Environ(), "CORDWALK_PRINT_BITS=1")
		out, err := run.CombinedOutput()
		if err != nil {
			if bytes.Contains(out, []byte("microarchitecture")) {
				t.Logf("this processor does not run %s: only the listing was looked at", level)
				continue
			}
			t.Fatalf("running %s: %v\n%s", level, err, tail(out))
		}
		var got strings.Builder
		for _, line := range strings.Split(string(out), "\n") {
			if strings.HasPrefix(line, "bits ") {
				fmt.Fprintln(&got, line)
			}
		}
		if got.String() != want.String() {
			t.Errorf("%s gives other bits:\n%swant\n%s", level, got.String(), want.String())
		}
	}
}

// fused returns the function of this package that holds a fused multiply–add, tests apart.
func fused(listing []byte) string {
	at := ""
	for _, line := range bytes.Split(listing, []byte("\n")) {
		if bytes.Contains(line, []byte(" STEXT ")) {
			at = string(bytes.Fields(line)[0])
		}
		if (bytes.Contains(line, []byte("\tVFMADD")) || bytes.Contains(line, []byte("\tVFNMADD")) || bytes.Contains(line, []byte("\tVFMSUB"))) &&
			!bytes.Contains(line, []byte("_test.go")) {
			return at + ": " + string(bytes.TrimSpace(line))
		}
	}
	return ""
}

func tail(b []byte) []byte { return b[max(0, len(b)-2000):] }
