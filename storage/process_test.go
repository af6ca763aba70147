package storage_test

import (
	"bufio"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/storage/storagetest"
)

const roleVariable = "CORDWALK_TEST_ROLE"

func TestMain(m *testing.M) {
	storage.ChildMain()
	switch os.Getenv(roleVariable) {
	case "":
		os.Exit(m.Run())
	case "record":
		childRecord()
	case "open":
		childOpen()
	case "unprivileged":
		childUnprivileged()
	}
	os.Exit(0)
}

// child prepares this test binary to run in another role.
func child(role string, args ...string) *exec.Cmd {
	self, err := os.Executable()
	if err != nil {
		panic(err)
	}
	cmd := exec.Command(self, args...)
	cmd.Env = append(os.Environ(), roleVariable+"="+role)
	cmd.Stderr = os.Stderr
	return cmd
}

func fatal(err error) {
	if err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(3)
	}
}

// childRecord records findings until it is killed, and says after each which one was saved.
func childRecord() {
	dir := os.Args[1]
	patient, err := exam.ParseID(os.Args[2])
	fatal(err)
	visit, err := exam.ParseID(os.Args[3])
	fatal(err)
	n, err := strconv.Atoi(os.Args[4])
	fatal(err)
	s, err := storage.Open(dir, storagetest.Options())
	fatal(err)
	for {
		n++
		k := cells[n%len(cells)]
		_, err := s.Apply(ctx, "A", storage.FindingEdit(patient, visit, finding(k, int8(n%3), fmt.Sprintf("%d %0*d", n, n*37%600, 0))))
		fatal(err)
		fmt.Println("saved", n)
	}
}

// The program is killed at random moments while findings are recorded. What it had said to be saved is there.
func TestKilledWhileRecording(t *testing.T) {
	rng := seeded(t)
	dir, patient, visit := small(t)
	n, total := 0, 0
	kills := times(500)
	for range kills {
		cmd := child("record", dir, patient.String(), visit.String(), strconv.Itoa(n))
		out, err := cmd.StdoutPipe()
		require.NoError(t, err)
		require.NoError(t, cmd.Start())
		lines := bufio.NewScanner(out)
		wait := time.Duration(rng.IntN(60_000)) * time.Microsecond
		if rng.IntN(10) == 0 {
			wait += 1100 * time.Millisecond // while the index follows
		}
		var timer *time.Timer
		said := n
		for lines.Scan() {
			if timer == nil {
				timer = time.AfterFunc(wait, func() { _ = cmd.Process.Kill() })
			}
			word, number, _ := strings.Cut(lines.Text(), " ")
			require.Equal(t, "saved", word)
			said, err = strconv.Atoi(number)
			require.NoError(t, err)
			total++
		}
		require.Error(t, cmd.Wait(), "the child must not end by itself")
		require.NotNil(t, timer, "the child recorded nothing")
		s, err := storage.Open(dir, storagetest.Options())
		require.NoError(t, err)
		r, err := s.Patient(patient)
		require.NoError(t, err)
		require.Empty(t, r.Missing)
		require.Empty(t, r.Conflicts)
		got := notes(r.Visits[0])
		for i := max(n, said-len(cells)) + 1; i <= said; i++ {
			require.GreaterOrEqual(t, got[cells[i%len(cells)]], i)
		}
		for _, x := range got {
			n = max(n, x)
		}
		require.NoError(t, s.Close())
	}
	storagetest.Check(t, dir)
	t.Logf("killed %d times; %d findings were reported as saved and all of them are there", kills, total)
}

func childOpen() {
	_, err := storage.Open(os.Args[1], storagetest.Options())
	var held *disk.Held
	if !errors.As(err, &held) {
		fatal(fmt.Errorf("opened a second time: %w", err))
	}
	fmt.Println(err)
}

func TestSecondProcessIsTold(t *testing.T) {
	s, dir := storagetest.OpenDir(t)
	out, err := child("open", dir).Output()
	require.NoError(t, err)
	host, _ := os.Hostname()
	for _, want := range []string{host, strconv.Itoa(os.Getpid()), "in test "} {
		require.Contains(t, string(out), want)
	}
	// In one process it is no different.
	_, err = storage.Open(dir, storagetest.Options())
	var held *disk.Held
	require.ErrorAs(t, err, &held)
	require.Equal(t, os.Getpid(), held.By.PID)
	_, err = storage.Check(ctx, dir, storagetest.Options())
	require.ErrorAs(t, err, &held)
	require.ErrorAs(t, storage.Rebuild(ctx, dir, storagetest.Options()), &held)
	require.NoError(t, s.Close())
	s2, err := storage.Open(dir, storagetest.Options())
	require.NoError(t, err)
	require.NoError(t, s2.Close())
}

// childUnprivileged runs as a user who may not write in the folders given.
func childUnprivileged() {
	empty, store := os.Args[1], os.Args[2]
	for _, d := range []string{empty, store} {
		if os.WriteFile(filepath.Join(d, "try"), nil, 0o600) == nil {
			fatal(fmt.Errorf("%s can be written as user %d: the test would show nothing", d, os.Getuid()))
		}
	}
	clear := func(err error) {
		if !errors.Is(err, fs.ErrPermission) || !strings.Contains(err.Error(), "this user may not write there") {
			fatal(fmt.Errorf("not the error that was wanted: %w", err))
		}
	}
	_, err := storage.Create(filepath.Join(empty, "practice"), storagetest.Options())
	clear(err)
	_, err = storage.Open(store, storagetest.Options())
	clear(err)
	clear(storage.Rebuild(ctx, store, storagetest.Options()))
	ps, err := storage.Check(ctx, store, storagetest.Options()) // reads only
	fatal(err)
	if len(ps) > 0 {
		fatal(fmt.Errorf("check found %v", ps))
	}
	fmt.Println("done")
}

func TestNoPermission(t *testing.T) {
	if runtime.GOOS == "windows" {
		t.Skip("folders of another user are made otherwise there")
	}
	master, _, _ := small(t)
	root, err := os.MkdirTemp("", "cordwalk")
	require.NoError(t, err)
	t.Cleanup(func() { _ = exec.Command("chmod", "-R", "u+w", root).Run(); os.RemoveAll(root) })
	require.NoError(t, os.Chmod(root, 0o755))
	store, empty := filepath.Join(root, "store"), filepath.Join(root, "empty")
	require.NoError(t, os.CopyFS(store, os.DirFS(master)))
	require.NoError(t, os.Mkdir(empty, 0o755))
	// Readable by all, written by nobody.
	require.NoError(t, filepath.WalkDir(root, func(p string, e fs.DirEntry, err error) error {
		if err != nil || p == root {
			return err
		}
		if e.IsDir() {
			return os.Chmod(p, 0o555)
		}
		return os.Chmod(p, 0o444)
	}))
	cmd := child("unprivileged", empty, store)
	if os.Getuid() == 0 {
		// The test binary lies where only root can reach it.
		self, err := os.ReadFile(cmd.Path)
		require.NoError(t, err)
		cmd.Path = filepath.Join(root, "storage.test")
		require.NoError(t, os.WriteFile(cmd.Path, self, 0o755))
		require.NoError(t, os.Chmod(cmd.Path, 0o755))
		cmd.Dir = root
		cmd.SysProcAttr = &syscall.SysProcAttr{Credential: &syscall.Credential{Uid: 65534, Gid: 65534}}
	}
	out, err := cmd.Output()
	require.NoError(t, err)
	require.Equal(t, "done\n", string(out))
}
