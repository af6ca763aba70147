package storage_test

import (
	"bufio"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/storage/storagetest"
)

const roleVariable = "CORDWALK_TEST_ROLE"

// roles are what this test binary does on some systems only.
var roles = map[string]func(){}

func TestMain(m *testing.M) {
	storage.ChildMain()
	switch os.Getenv(roleVariable) {
	case "":
		os.Exit(m.Run())
	case "record":
		childRecord()
	case "open":
		childOpen()
	case "damaged":
		childDamaged()
	default:
		roles[os.Getenv(roleVariable)]()
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
