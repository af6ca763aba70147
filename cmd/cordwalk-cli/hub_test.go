package main

import (
	"bytes"
	"context"
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"
)

// buffer may be written to and read from by two goroutines.
type buffer struct {
	mu sync.Mutex
	b  bytes.Buffer
}

func (b *buffer) Write(p []byte) (int, error) { b.mu.Lock(); defer b.mu.Unlock(); return b.b.Write(p) }
func (b *buffer) String() string              { b.mu.Lock(); defer b.mu.Unlock(); return b.b.String() }

// cli runs a command in this process and wants its exit code.
func cli(t *testing.T, want int, args ...string) string {
	t.Helper()
	var out, errOut bytes.Buffer
	if got := run(t.Context(), args, strings.NewReader(""), &out, &errOut); got != want {
		t.Fatalf("%s: exit code %d, want %d\n%s%s", strings.Join(args, " "), got, want, out.String(), errOut.String())
	}
	return out.String()
}

// TestTwoDevicesMeetThroughAHub: the hub gets its list of devices from one store, holds no
// key, and carries what each device records to the other.
func TestTwoDevicesMeetThroughAHub(t *testing.T) {
	dir := t.TempDir()
	t.Setenv("XDG_CONFIG_HOME", filepath.Join(dir, "config"))
	t.Setenv("HOME", dir)
	t.Setenv("CORDWALK_PASSPHRASE_FILE", "")
	at := func(name string) string { return filepath.Join(dir, name) }
	a, b, stick, sheet := at("a"), at("b"), at("stick"), at("sheet.txt")
	if err := os.Mkdir(stick, 0o700); err != nil {
		t.Fatal(err)
	}
	cli(t, 0, "--store", a, "--no-passphrase", "init", "--practice", "P", "--examiner", "A. Moor")
	cli(t, 0, "--store", a, "patient", "add", "Fig")
	cli(t, 0, "--store", a, "sync", stick, "--recovery-sheet", sheet)
	var invitation struct{ Code string }
	if err := json.Unmarshal([]byte(cli(t, 0, "--store", a, "--json", "invite", stick)), &invitation); err != nil {
		t.Fatal(err)
	}
	joined := make(chan string, 1)
	go func() {
		var out, errOut bytes.Buffer
		run(context.Background(), []string{"--store", b, "--no-passphrase", "join", stick, "--code", invitation.Code, "--name", "laptop"}, strings.NewReader(""), &out, &errOut)
		joined <- out.String() + errOut.String()
	}()
	var asked struct{ Requests []struct{ Words string } }
	for end := time.Now().Add(20 * time.Second); ; time.Sleep(50 * time.Millisecond) {
		var out, errOut bytes.Buffer
		if run(t.Context(), []string{"--store", a, "--json", "admit", stick}, strings.NewReader(""), &out, &errOut) == 0 {
			if err := json.Unmarshal(out.Bytes(), &asked); err != nil {
				t.Fatal(err)
			}
			break
		}
		if time.Now().After(end) {
			t.Fatal("no request came: " + errOut.String())
		}
	}
	cli(t, 0, "--store", a, "admit", stick, "--words", asked.Requests[0].Words)
	if said := <-joined; !strings.Contains(said, "1 patient is here") {
		t.Fatal(said)
	}

	cli(t, 2, "hub", "--data", at("nobody")) // it knows no practice
	ctx, stop := context.WithCancel(context.Background())
	var out buffer
	ended := make(chan int, 1)
	go func() {
		ended <- run(ctx, []string{"--store", a, "--json", "hub", "--data", at("hub"), "--listen", "127.0.0.1:0"}, strings.NewReader(""), &out, &out)
	}()
	defer func() {
		stop()
		if code := <-ended; code != 0 {
			t.Errorf("the hub ended with %d: %s", code, out.String())
		}
	}()
	var running struct{ Address string }
	for end := time.Now().Add(20 * time.Second); json.Unmarshal([]byte(out.String()), &running) != nil || running.Address == ""; time.Sleep(20 * time.Millisecond) {
		if time.Now().After(end) {
			t.Fatal("the hub did not start: " + out.String())
		}
	}
	cli(t, 0, "--store", a, "patient", "add", "Ashbourne")
	cli(t, 0, "--store", b, "patient", "add", "Elm")
	cli(t, 0, "--store", a, "sync", "--hub", running.Address)
	cli(t, 0, "--store", b, "sync", "--hub", running.Address)
	cli(t, 0, "--store", a, "sync", "--hub", running.Address)
	for _, s := range []string{a, b} {
		list := cli(t, 0, "--store", s, "--json", "patients")
		for _, name := range []string{"Fig", "Ashbourne", "Elm"} {
			if !strings.Contains(list, `"`+name+`"`) {
				t.Errorf("%s lacks %s", filepath.Base(s), name)
			}
		}
	}
	var meeting struct {
		Hub struct {
			Unsent   int
			KeptDays float64 `json:"kept_days"`
			MaxBytes int64   `json:"max_bytes"`
		}
	}
	if err := json.Unmarshal([]byte(cli(t, 0, "--store", b, "--json", "sync", "--hub", running.Address)), &meeting); err != nil {
		t.Fatal(err)
	}
	if h := meeting.Hub; h.KeptDays != 90 || h.MaxBytes != 8<<30 || h.Unsent != 0 {
		t.Errorf("of the hub it is said that %+v", h)
	}
	if said := cli(t, 0, "--store", b, "sync", "--hub", running.Address); !strings.Contains(said, "The hub keeps entries for 90 days") {
		t.Error(said)
	}

	// One patient to be read only: in a file, and asked for over the hub while the other device exchanges.
	cli(t, 0, "--store", a, "extract", "make", "Ashbourne", at("ash.extract"))
	cli(t, 1, "--store", a, "extract", "make", "Ashbourne", at("ash.extract"))
	if said := cli(t, 0, "--store", b, "extract", "show", at("ash.extract")); !strings.Contains(said, "Ashbourne") || !strings.Contains(said, "read only") {
		t.Error(said)
	}
	var elm struct{ ID string }
	if err := json.Unmarshal([]byte(cli(t, 0, "--store", b, "--json", "patient", "show", "Elm")), &elm); err != nil {
		t.Fatal(err)
	}
	cli(t, 1, "--store", a, "extract", "fetch", elm.ID, "--hub", running.Address, "--wait", "100ms")
	cli(t, 2, "--store", a, "extract", "fetch", "Elm", "--hub", running.Address)
	staying, leave := context.WithCancel(context.Background())
	left := make(chan int, 1)
	var stayed buffer
	go func() {
		left <- run(staying, []string{"--store", b, "sync", "--hub", running.Address, "--stay"}, strings.NewReader(""), &stayed, &stayed)
	}()
	var shown struct{ Name string }
	if err := json.Unmarshal([]byte(cli(t, 0, "--store", a, "--json", "extract", "fetch", elm.ID, "--hub", running.Address, "--wait", "60s", "--keep", at("elm.extract"))), &shown); err != nil || shown.Name != "Elm" {
		t.Errorf("%v: %+v; %s", err, shown, stayed.String())
	}
	leave()
	if code := <-left; code != 0 {
		t.Errorf("staying ended with %d: %s", code, stayed.String())
	}
	cli(t, 0, "--store", a, "extract", "show", at("elm.extract"))
	if said := cli(t, 0, "--store", a, "cluster"); strings.Count(said, "nkey: U") != 2 {
		t.Error(said)
	}
	cli(t, 2, "--store", a, "cluster", "10.0.0.1,10.0.0.2")

	// The hub's folder tells nobody what the practice holds.
	err := filepath.Walk(at("hub"), func(name string, info os.FileInfo, err error) error {
		if err != nil || info.IsDir() {
			return err
		}
		data, err := os.ReadFile(name)
		if err == nil && (bytes.Contains(data, []byte("Ashbourne")) || bytes.Contains(data, []byte("A. Moor"))) {
			t.Errorf("%s can be read", name)
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
}
