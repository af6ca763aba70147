package main

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"image/png"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// screen is a virtual screen with the program on it, worked by keys alone.
type screen struct {
	t       testing.TB
	display string
	binary  string
	env     []string
	program *exec.Cmd
	gone    chan error
}

const passphrase = "three lame foxes"

// newScreen starts a virtual screen and builds the program.
func newScreen(t testing.TB) *screen {
	t.Helper()
	for _, tool := range []string{"Xvfb", "xdotool", "import"} {
		if _, err := exec.LookPath(tool); err != nil {
			t.Fatalf("%s is missing; the window test needs it: apt-get install xvfb xdotool imagemagick libgl1-mesa-dri", tool)
		}
	}
	s := &screen{t: t, binary: filepath.Join(t.TempDir(), "cordwalk")}
	build := exec.Command("go", "build", "-tags", "no_emoji,migrated_fynedo", "-o", s.binary, ".")
	if out, err := build.CombinedOutput(); err != nil {
		t.Fatalf("building the program: %v\n%s", err, out)
	}
	r, w, err := os.Pipe()
	if err != nil {
		t.Fatal(err)
	}
	x := exec.Command("Xvfb", "-displayfd", "3", "-screen", "0", "1366x820x24", "-nolisten", "tcp", "-noreset")
	x.ExtraFiles = []*os.File{w}
	if err := x.Start(); err != nil {
		t.Fatal(err)
	}
	w.Close()
	t.Cleanup(func() {
		_ = x.Process.Signal(syscall.SIGTERM)
		_ = x.Wait()
	})
	number := make([]byte, 16)
	n, err := r.Read(number)
	if err != nil && !errors.Is(err, io.EOF) {
		t.Fatalf("the virtual screen did not start: %v", err)
	}
	s.display = ":" + strings.TrimSpace(string(number[:n]))
	home := t.TempDir()
	if err := os.MkdirAll(filepath.Join(home, ".cache"), 0o700); err != nil {
		t.Fatal(err)
	}
	s.env = append(os.Environ(), "DISPLAY="+s.display, "WAYLAND_DISPLAY=", "HOME="+home, "XDG_CONFIG_HOME="+filepath.Join(home, ".config"),
		"XDG_DATA_HOME="+filepath.Join(home, ".local"), "XDG_CACHE_HOME="+filepath.Join(home, ".cache"), "LANG=en_US.UTF-8", "LIBGL_ALWAYS_SOFTWARE=1", "DBUS_SESSION_BUS_ADDRESS=")
	return s
}

// start runs the program and waits for its window.
func (s *screen) start(args ...string) {
	s.t.Helper()
	s.program = exec.Command(s.binary, args...)
	s.program.Env = s.env
	s.program.Stderr = io.Discard
	if err := s.program.Start(); err != nil {
		s.t.Fatal(err)
	}
	p := s.program
	s.gone = make(chan error, 1)
	gone := s.gone
	go func() { gone <- p.Wait() }()
	s.t.Cleanup(func() { _ = p.Process.Kill() })
	s.title("Cordwalk")
	s.do("search", "--sync", "--onlyvisible", "--name", "Cordwalk", "windowmove", "0", "0", "windowsize", "1366", "768", "windowfocus")
	time.Sleep(400 * time.Millisecond)
}

// do runs xdotool.
func (s *screen) do(args ...string) string {
	s.t.Helper()
	c := exec.Command("xdotool", args...)
	c.Env = s.env
	out, err := c.CombinedOutput()
	if err != nil && !bytes.Contains(out, []byte("BadMatch")) {
		s.t.Fatalf("xdotool %v: %v\n%s", args, err, out)
	}
	return string(out)
}

// keys presses keys by their X names.
func (s *screen) keys(names ...string) {
	s.t.Helper()
	for _, n := range names {
		s.do("key", "--clearmodifiers", n)
		time.Sleep(30 * time.Millisecond)
	}
}

// words types text.
func (s *screen) words(text string) {
	s.t.Helper()
	s.do("type", "--delay", "25", "--", text)
	time.Sleep(60 * time.Millisecond)
}

// title waits until the window's name begins with a text: it names the screen and the animal.
func (s *screen) title(want string) {
	s.t.Helper()
	last := ""
	for end := time.Now().Add(30 * time.Second); time.Now().Before(end); time.Sleep(60 * time.Millisecond) {
		c := exec.Command("xdotool", "search", "--onlyvisible", "--name", "Cordwalk", "getwindowname")
		c.Env = s.env
		out, err := c.Output()
		last = strings.TrimSpace(string(out))
		if err == nil && strings.HasPrefix(last, want) {
			time.Sleep(250 * time.Millisecond) // the page takes the keys once it is drawn
			return
		}
	}
	s.picture("failed")
	s.t.Fatalf("the window is named %q, not %q", last, want)
}

// picture takes what is on the screen.
func (s *screen) picture(name string) []byte {
	c := exec.Command("import", "-window", "root", "png:-")
	c.Env = s.env
	out, err := c.Output()
	if err != nil {
		return nil
	}
	if name == "failed" {
		dir := filepath.Join("testdata", "failed")
		if os.MkdirAll(dir, 0o755) == nil {
			_ = os.WriteFile(filepath.Join(dir, strings.ReplaceAll(s.t.Name(), "/", "-")+".png"), out, 0o600)
		}
	}
	return out
}

// colours counts how many different colours a picture has in a coarse raster: an empty window has one or two.
func colours(t *testing.T, picture []byte) int {
	t.Helper()
	img, err := png.Decode(bytes.NewReader(picture))
	if err != nil {
		t.Fatal(err)
	}
	seen := map[string]bool{}
	b := img.Bounds()
	for y := b.Min.Y; y < b.Max.Y; y += 3 {
		for x := b.Min.X; x < b.Max.X; x += 3 {
			r, g, bl, _ := img.At(x, y).RGBA()
			seen[fmt.Sprint(r>>12, g>>12, bl>>12)] = true
		}
	}
	return len(seen)
}

// TestTheMainJobInARealWindow goes the whole way by keys alone: first start, new patient, exam, the
// power cut, going on at the same place, closing, a second exam, comparison, sheet; then it
// reads from the disk what was kept.
func TestTheMainJobInARealWindow(t *testing.T) {
	s := newScreen(t)
	store := filepath.Join(t.TempDir(), "practice")

	// First start: three questions, by Tab alone.
	s.start("--store", store)
	s.words("Hillside Rehabilitation")
	s.keys("Tab", "Tab")
	s.words("R. Okafor")
	s.keys("Tab", "Tab")
	s.words(passphrase)
	s.keys("Tab")
	s.words(passphrase)
	s.keys("Tab", "Tab", "Return")
	s.title("Caseload")
	if n := colours(t, s.picture("caseload")); n < 6 {
		t.Errorf("the caseload is drawn in %d colours only", n)
	}

	// A new patient with the telephone that the sheet needs.
	s.keys("ctrl+n")
	s.title("Patient")
	s.words("Rex")
	for range 14 {
		s.keys("Tab")
	}
	s.words("Dr Hale")
	s.keys("Tab")
	s.words("01632 960 123")
	s.keys("Return")
	s.title("Caseload")

	// The first exam: three keys to the first grade (a letter of the name, Enter, the grade).
	s.words("rex")
	s.keys("Return")
	s.title("Exam: Rex")
	s.words("3122232")
	time.Sleep(600 * time.Millisecond)
	if err := s.program.Process.Kill(); err != nil { // as a power cut would
		t.Fatal(err)
	}
	<-s.gone

	// The practice is locked; the passphrase opens it and the exam goes on where it stopped.
	s.start("--store", store)
	s.words(passphrase)
	s.keys("Return")
	s.title("Caseload")
	s.keys("Return")
	s.title("Exam: Rex")
	s.words("22")
	s.keys("u")
	s.words("rn")
	time.Sleep(300 * time.Millisecond)
	s.keys("ctrl+Return")
	time.Sleep(500 * time.Millisecond)

	// A second exam, worse in one place.
	s.keys("ctrl+1")
	s.title("Caseload")
	s.words("rex")
	s.keys("Return")
	s.title("Exam: Rex")
	s.words("x")
	s.keys("Return")
	time.Sleep(300 * time.Millisecond)

	s.keys("ctrl+3")
	s.title("Compare: Rex")
	if n := colours(t, s.picture("compare")); n < 8 {
		t.Errorf("the comparison is drawn in %d colours only", n)
	}
	s.keys("ctrl+4")
	s.title("Course: Rex")

	// The sheet, saved as a file.
	s.keys("ctrl+5")
	s.title("Sheet: Rex")
	s.keys("s")
	s.title("Save")
	pdf := filepath.Join(t.TempDir(), "rex.pdf")
	s.keys("ctrl+a")
	s.words(pdf)
	s.keys("Return")
	var sheet []byte
	for end := time.Now().Add(10 * time.Second); time.Now().Before(end) && len(sheet) == 0; time.Sleep(100 * time.Millisecond) {
		sheet, _ = os.ReadFile(pdf)
	}
	if !bytes.HasPrefix(sheet, []byte("%PDF-")) {
		s.picture("failed")
		t.Errorf("no sheet was written (%d bytes)", len(sheet))
	}

	s.keys("ctrl+q")
	select {
	case err := <-s.gone:
		if err != nil {
			t.Errorf("the program ended with %v", err)
		}
	case <-time.After(15 * time.Second):
		s.picture("failed")
		t.Fatal("the program did not end")
	}

	// What the disk holds.
	st, err := storage.Open(store, storage.Options{Unlock: storage.Unlock{Passphrase: []byte(passphrase)}})
	if err != nil {
		t.Fatal(err)
	}
	defer st.Close()
	list, err := st.Caseload(context.Background())
	if err != nil || len(list) != 1 || list[0].Name != "Rex" {
		t.Fatalf("the caseload holds %+v, %v", list, err)
	}
	r, err := st.Patient(list[0].ID)
	if err != nil {
		t.Fatal(err)
	}
	if got := r.Patient.Veterinarian; got.Name != "Dr Hale" || got.Phone != "01632 960 123" {
		t.Errorf("the veterinarian is %+v", got)
	}
	if len(r.Visits) != 2 {
		t.Fatalf("%d visits, want 2", len(r.Visits))
	}
	first, second := r.Visits[0], r.Visits[1]
	if first.State != exam.Closed || second.State != exam.Open {
		t.Errorf("the visits are %v and %v", first.State, second.State)
	}
	if first.Examiner != "R. Okafor" {
		t.Errorf("the examiner is %q", first.Examiner)
	}
	if g, ok := first.Grade(exam.Mentation, exam.Midline); !ok || g != 3 {
		t.Errorf("mentation was keyed as 3 and is %d, %v", g, ok)
	}
	if len(first.Findings) < 10 {
		t.Errorf("the first exam holds %d findings only", len(first.Findings))
	}
	untested := 0
	for _, f := range second.Findings {
		if !f.Result.Tested() {
			untested++
		}
	}
	if untested != 1 {
		t.Errorf("the second exam holds %d untested findings, want the one keyed", untested)
	}
}

// Without a screen the program says so in one sentence and names the way to see it at work.
func TestNoDisplayIsSaidPlainly(t *testing.T) {
	bin := filepath.Join(t.TempDir(), "cordwalk")
	if out, err := exec.Command("go", "build", "-tags", "no_emoji,migrated_fynedo", "-o", bin, ".").CombinedOutput(); err != nil {
		t.Fatalf("%v\n%s", err, out)
	}
	c := exec.Command(bin)
	for _, e := range os.Environ() {
		if !strings.HasPrefix(e, "DISPLAY=") && !strings.HasPrefix(e, "WAYLAND_DISPLAY=") {
			c.Env = append(c.Env, e)
		}
	}
	c.Env = append(c.Env, "HOME="+t.TempDir())
	out, err := c.CombinedOutput()
	var exit *exec.ExitError
	if !errors.As(err, &exit) || exit.ExitCode() != 2 {
		t.Errorf("it ended with %v", err)
	}
	if !bytes.Contains(out, []byte("make demo")) || bytes.Count(out, []byte("\n")) != 1 {
		t.Errorf("it said: %s", out)
	}
}
