package hub_test

import (
	"bufio"
	"bytes"
	"context"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"runtime/debug"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/hub"
	"cordwalk.example/cordwalk/sync/hub/mailbox"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/member"
)

const roleVariable = "CORDWALK_TEST_ROLE"

func TestMain(m *testing.M) {
	storage.ChildMain()
	run := map[string]func() error{"hub": childHub, "device": childDevice}[os.Getenv(roleVariable)]
	if run == nil {
		os.Exit(m.Run())
	}
	debug.SetGCPercent(50) // as the command line does
	if err := run(); err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(3)
	}
}

// childHub runs the hub in the folder that is its argument until its input ends.
func childHub() error {
	m, err := mailbox.Start(context.Background(), mailbox.Options{Dir: os.Args[1], Listen: "127.0.0.1:0"})
	if err != nil {
		return err
	}
	defer m.Close()
	fmt.Println(m.Address())
	_, err = io.Copy(io.Discard, os.Stdin)
	return err
}

// listIn reads the list of devices in a hub's folder.
func listIn(dir string) (*member.List, error) {
	root, err := os.ReadFile(filepath.Join(dir, "root"))
	if err != nil {
		return nil, err
	}
	var id member.ID
	if _, err := fmt.Sscanf(string(root), "%x", (*sliceOf)(&id)); err != nil {
		return nil, err
	}
	files, err := filepath.Glob(filepath.Join(dir, "members", "*.member"))
	if err != nil {
		return nil, err
	}
	var raws [][]byte
	for _, f := range files {
		raw, err := os.ReadFile(f)
		if err != nil {
			return nil, err
		}
		raws = append(raws, raw)
	}
	l := member.NewList(id)
	_, err = l.Learn(raws)
	return l, err
}

// sliceOf scans a list's name.
type sliceOf member.ID

func (s *sliceOf) Scan(st fmt.ScanState, verb rune) error {
	token, err := st.Token(true, nil)
	if err != nil {
		return err
	}
	var b []byte
	if _, err := fmt.Sscanf(string(token), "%x", &b); err != nil || len(b) != len(s) {
		return fmt.Errorf("no name of a list: %q", token)
	}
	copy(s[:], b)
	return nil
}

// childDevice opens the store that is its first argument, waits for a line, exchanges with the hub, and says after each
// change how many entries are acknowledged by the hub and how many are durable here, until its input ends.
func childDevice() error {
	s, err := storage.Open(os.Args[1], storagetest.Options())
	if err != nil {
		return err
	}
	defer s.Close()
	list, err := listIn(os.Args[2])
	if err != nil {
		return err
	}
	at, err := hub.ParseAddress(os.Args[3])
	if err != nil {
		return err
	}
	fmt.Println("open")
	in := bufio.NewReader(os.Stdin)
	if _, err := in.ReadString('\n'); err != nil {
		return err
	}
	ctx, cancel := context.WithCancel(context.Background())
	done := make(chan error, 1)
	c := hub.New(hub.Options{Address: at, Bag: func() key.Bag { return s.Bag() }, Incarnation: s.Incarnation, Journal: s, Members: list})
	go func() { done <- c.Run(ctx) }()
	go func() { _, _ = io.Copy(io.Discard, in); s.Settle(); cancel() }()
	var last hub.Status
	for {
		select {
		case err := <-done:
			return err
		case <-time.After(10 * time.Millisecond):
		}
		if now := c.Status(); now.Sent != last.Sent || now.Received != last.Received {
			fmt.Println(now.Sent, now.Received)
			last = now
		}
	}
}

// child is this test binary in another role.
type child struct {
	cmd  *exec.Cmd
	in   io.WriteCloser
	out  *bufio.Reader
	peak int // RssAnon, kB
}

func startChild(t *testing.T, role string, args ...string) *child {
	self, err := os.Executable()
	require.NoError(t, err)
	cmd := exec.Command(self, args...)
	cmd.Env = append(os.Environ(), roleVariable+"="+role)
	cmd.Stderr = os.Stderr
	in, err := cmd.StdinPipe()
	require.NoError(t, err)
	out, err := cmd.StdoutPipe()
	require.NoError(t, err)
	require.NoError(t, cmd.Start())
	t.Cleanup(func() {
		in.Close()
		_, _ = io.Copy(io.Discard, out)
		if err := cmd.Wait(); err != nil {
			t.Errorf("the process in the role of a %s: %v", role, err)
		}
	})
	return &child{cmd: cmd, in: in, out: bufio.NewReader(out)}
}

func (c *child) line(t *testing.T) string {
	s, err := c.out.ReadString('\n')
	require.NoError(t, err)
	return strings.TrimSpace(s)
}

// look notes how much memory of its own the process holds.
func (c *child) look() {
	data, err := os.ReadFile(fmt.Sprintf("/proc/%d/status", c.cmd.Process.Pid))
	if err != nil {
		return // another system, or gone
	}
	for line := range bytes.Lines(data) {
		if f := bytes.Fields(line); len(f) > 1 && string(f[0]) == "RssAnon:" {
			n, _ := strconv.Atoi(string(f[1]))
			c.peak = max(c.peak, n)
		}
	}
}

// A device's whole record goes by hub into the journal of another one, each in a process and with a store of its own: how
// fast, and that neither they nor the hub ever need 300 MiB. CORDWALK_CHANGES changes how many; in full it is a
// million.
func TestBacklogBetweenProcesses(t *testing.T) {
	changes := 10_000
	if os.Getenv("CORDWALK_SOAK") == "1" {
		changes = 1_000_000
	}
	if n, err := strconv.Atoi(os.Getenv("CORDWALK_CHANGES")); err == nil {
		changes = n
	}
	const mostMemory = 300 << 10 // kB
	a, b, hubDir := filepath.Join(t.TempDir(), "a"), filepath.Join(t.TempDir(), "b"), filepath.Join(t.TempDir(), "hub")
	size := storagetest.Size{Patients: changes / 435, Visits: 10, Findings: 40, BigVisits: 2, BigFindings: 40, Together: 1}
	made, err := storagetest.Reference(a, size, 1, storagetest.Options())
	require.NoError(t, err)
	s, err := storage.Open(a, storagetest.Options())
	require.NoError(t, err)
	now := change.HLCAt(time.Now())
	list, _, err := member.Establish(s.Bag(), "a", s.Incarnation(), now)
	require.NoError(t, err)
	own, err := key.NewDevice()
	require.NoError(t, err)
	inc := change.NewIncarnation()
	require.NoError(t, list.AdmitJoiner(s.Bag(), member.Joiner{Verifier: own.Verifier(), Recipient: own.Recipient(), Name: "b", Incarnation: inc}, now))
	require.NoError(t, mailbox.Setup(mailbox.Options{Dir: hubDir}, list))
	other, err := storage.CreateJoined(b, storagetest.Options(), key.Bag{Practice: s.Bag().Practice, Ring: s.Bag().Ring, Device: own}, s.Site(), inc)
	require.NoError(t, err)
	frames := 0
	held, err := s.Streams(t.Context())
	require.NoError(t, err)
	for _, h := range held {
		require.NoError(t, s.Frames(t.Context(), h.Stream, 1, func(change.Frame) error { frames++; return nil }))
	}
	require.NoError(t, other.Close())
	require.NoError(t, s.Close())

	box := startChild(t, "hub", hubDir)
	at := box.line(t)
	from, to := startChild(t, "device", a, hubDir, at), startChild(t, "device", b, hubDir, at)
	all := []*child{box, from, to}
	for _, d := range all[1:] {
		require.Equal(t, "open", d.line(t))
	}
	stop := make(chan struct{})
	looked := make(chan struct{})
	go func() {
		defer close(looked)
		for {
			for _, c := range all {
				c.look()
			}
			select {
			case <-stop:
				return
			case <-time.After(20 * time.Millisecond):
			}
		}
	}()
	start := time.Now()
	for _, d := range all[1:] {
		_, err := io.WriteString(d.in, "go\n")
		require.NoError(t, err)
	}
	go func() { _, _ = io.Copy(io.Discard, from.out) }()
	for {
		var sent, received int
		_, err := fmt.Sscan(to.line(t), &sent, &received)
		require.NoError(t, err)
		if received == frames {
			break
		}
		require.Less(t, received, frames)
	}
	took := time.Since(start)
	// Until all can be read, too.
	to.in.Close()
	_, _ = io.Copy(io.Discard, to.out)
	settled := time.Since(start)
	close(stop)
	<-looked
	t.Logf("%d changes in %d entries, %d bytes of journal, %.1f s to durable: %.0f changes a second, %.1f s to readable; most RssAnon: hub %d, sender %d, receiver %d MiB", made.Changes, frames, made.Journal,
		took.Seconds(), float64(made.Changes)/took.Seconds(), settled.Seconds(), box.peak>>10, from.peak>>10, to.peak>>10)
	for i, c := range all {
		require.LessOrEqual(t, c.peak, mostMemory, []string{"hub", "sender", "receiver"}[i])
	}
}
