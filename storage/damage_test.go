package storage_test

import (
	"bytes"
	"crypto/sha256"
	"encoding/json"
	"fmt"
	"io/fs"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"go.etcd.io/bbolt"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk/disktest"
	"cordwalk.example/cordwalk/storage/storagetest"
)

// corrected makes a closed store in which each cell of the visit was written several times.
func corrected(t testing.TB, rng *rand.Rand) (dir string, patient, visit exam.ID, last map[exam.Key]int) {
	t.Helper()
	dir, patient, visit = small(t)
	s, err := storage.Open(dir, storagetest.Options())
	require.NoError(t, err)
	last = map[exam.Key]int{}
	for i := 1; i <= 40; i++ {
		k := cells[rng.IntN(len(cells))]
		_, err := s.Apply(ctx, "A", storage.FindingEdit(patient, visit, finding(k, int8(i%3), fmt.Sprint(i))))
		require.NoError(t, err)
		last[k] = i
	}
	require.NoError(t, s.Close())
	return dir, patient, visit, last
}

func sums(t testing.TB, dir string) map[string][32]byte {
	t.Helper()
	m := map[string][32]byte{}
	require.NoError(t, filepath.WalkDir(dir, func(p string, e fs.DirEntry, err error) error {
		if err != nil || e.IsDir() {
			return err
		}
		b, err := os.ReadFile(p)
		rel, _ := filepath.Rel(dir, p)
		m[rel] = sha256.Sum256(b)
		return err
	}))
	return m
}

// contents reads all files of a store.
func contents(t testing.TB, dir string) map[string][]byte {
	t.Helper()
	m := map[string][]byte{}
	require.NoError(t, filepath.WalkDir(dir, func(p string, e fs.DirEntry, err error) error {
		if err != nil || e.IsDir() {
			return err
		}
		m[filepath.Base(p)], err = os.ReadFile(p)
		return err
	}))
	return m
}

// used returns the length of a file without the zeros at its end.
func used(b []byte) int {
	n := len(b)
	for n > 0 && b[n-1] == 0 {
		n--
	}
	return n
}

// Random bits are flipped and random ends cut off in each kind of file. Nothing panics, no
// wrong value is shown as current, the damage is named by its file, and check changes nothing.
func TestRandomDamage(t *testing.T) {
	rng := seeded(t)
	master, patient, visit, last := corrected(t, rng)
	for _, kind := range []string{"journal", "index.db", "practice.json", "practice.bak"} {
		t.Run(kind, func(t *testing.T) {
			if checked && kind == "index.db" {
				t.Skip("see checked")
			}
			damageFiles(t, rng, kind, master, patient, visit, last)
		})
	}
}

// flips is how often each kind of file is damaged.
func flips() int {
	if soak() {
		return 10_000
	}
	return times(2500)
}

func damageFiles(t *testing.T, rng *rand.Rand, kind, master string, patient, visit exam.ID, last map[exam.Key]int) {
	n := flips()
	found, refused := 0, 0
	for range n {
		dir := filepath.Join(t.TempDir(), "x")
		require.NoError(t, os.CopyFS(dir, os.DirFS(master)))
		name := filepath.Join(dir, kind)
		if kind == "journal" {
			es, err := os.ReadDir(name)
			require.NoError(t, err)
			name = filepath.Join(name, es[0].Name())
		}
		b, err := os.ReadFile(name)
		require.NoError(t, err)
		end := used(b)
		at := rng.IntN(end)
		what := fmt.Sprintf("bit of byte %d of %d in %s", at, end, kind)
		if rng.IntN(3) == 0 {
			what = fmt.Sprintf("%s cut to %d of %d bytes", kind, at, len(b))
			b = b[:at]
		} else {
			for range 1 + rng.IntN(3) {
				b[at] ^= 1 << rng.IntN(8)
				if b[at] == 0 && rng.IntN(2) == 0 {
					break
				}
			}
		}
		require.NoError(t, os.WriteFile(name, b, 0o600))
		if kind == "index.db" {
			refused += damagedIndex(t, dir, patient, visit, last, what)
			found++
			require.NoError(t, os.RemoveAll(dir))
			continue
		}
		if kind == "journal" || rng.IntN(2) == 0 {
			require.NoError(t, os.Remove(filepath.Join(dir, "index.db"))) // so that only the journal can tell
		}
		same := sums(t, master)
		damaged := sums(t, dir)
		before := damaged
		ps, cerr := storage.Check(ctx, dir, storagetest.Options())
		require.Equal(t, before, sums(t, dir), "check changed a file: %s", what)
		if same[kind] != damaged[kind] && sameJournal(same) != sameJournal(damaged) {
			named := false
			for _, p := range ps {
				named = named || strings.HasPrefix(p.File, kind)
			}
			require.True(t, named || cerr != nil, "%s: check names no place: %v", what, ps)
		}
		s, err := storage.Open(dir, on(disktest.New()))
		if err != nil {
			refused++
			require.NoError(t, os.RemoveAll(dir))
			require.NotEqual(t, "journal", kind, "%s: %v", what, err)
			continue
		}
		r, err := s.Patient(patient)
		if err == nil && len(r.Visits) == 1 && r.Visits[0].ID == visit {
			got := notes(r.Visits[0])
			for k, want := range last {
				switch g, ok := got[k]; {
				case ok:
					require.Equal(t, want, g, "%s: an old value of %s came back", what, k)
				default:
					require.True(t, len(r.Missing) > 0 || len(r.Conflicts) > 0, "%s: the value of %s is gone and nothing says so", what, k)
				}
			}
		} else {
			require.Equal(t, "journal", kind, "%s: %v", what, err)
		}
		_, _ = s.History(patient)
		_, err = s.Caseload(ctx)
		require.NoError(t, err)
		_, err = s.Apply(ctx, "B", storage.FindingEdit(patient, visit, finding(cells[0], 1, "1000")))
		require.NoError(t, err, what)
		require.NoError(t, s.Close(), what)
		found++
		require.NoError(t, os.RemoveAll(dir))
	}
	t.Logf("%s: damaged %d times, opened %d times, refused (index.db: ended the process) %d times", kind, n, found, refused)
}

// damagedIndex reads and writes a store with a damaged index in processes of their own: bbolt
// follows what a damaged page says, and the run-time system ends a process that does. Then the
// next start tries the index in a child first, finds everything in the journal and shows no wrong
// value. It returns 1 if the first start ended the process.
func damagedIndex(t *testing.T, dir string, patient, visit exam.ID, last map[exam.Key]int, what string) (ended int) {
	t.Helper()
	run := func(task string) ([]byte, bool) {
		cmd := child("damaged", task, dir, patient.String(), visit.String())
		var said bytes.Buffer
		cmd.Stderr = &said
		out, err := cmd.Output()
		if err == nil {
			return out, true
		}
		require.Regexp(t, "fatal error: |unexpected fault address", said.String(), "%s: %s: %v", what, task, err)
		return nil, false
	}
	before := sums(t, dir)
	run("check")
	after := sums(t, dir)
	delete(before, "lock")
	delete(after, "lock") // a process that is ended leaves its name there
	require.Equal(t, before, after, "check changed a file: %s", what)
	out, ok := run("open")
	if !ok {
		ended = 1
		out, ok = run("open")
		require.True(t, ok, "%s: the second start was ended as well", what)
	}
	var got map[string]int
	require.NoError(t, json.Unmarshal(out, &got), what)
	for k, want := range last {
		require.Equal(t, want, got[k.String()], "%s: %s", what, k)
	}
	return ended
}

// childDamaged does in a process of its own what damagedIndex asks, and prints the values of the visit.
func childDamaged() {
	task, dir := os.Args[1], os.Args[2]
	if task == "check" {
		_, _ = storage.Check(ctx, dir, storagetest.Options())
		return
	}
	patient, err := exam.ParseID(os.Args[3])
	fatal(err)
	visit, err := exam.ParseID(os.Args[4])
	fatal(err)
	s, err := storage.Open(dir, storagetest.Options())
	fatal(err)
	r, err := s.Patient(patient)
	fatal(err)
	if len(r.Visits) != 1 || r.Visits[0].ID != visit {
		fatal(fmt.Errorf("%d visits", len(r.Visits)))
	}
	values := map[string]int{}
	for k, n := range notes(r.Visits[0]) {
		values[k.String()] = n
	}
	_, err = s.History(patient)
	fatal(err)
	_, err = s.Caseload(ctx)
	fatal(err)
	_, err = s.Apply(ctx, "B", storage.FindingEdit(patient, visit, finding(cells[0], 1, "1000")))
	fatal(err)
	fatal(s.Close())
	fatal(json.NewEncoder(os.Stdout).Encode(values))
}

func sameJournal(m map[string][32]byte) string {
	var out string
	for n, h := range m {
		if n != "index.db" && n != "lock" {
			out += fmt.Sprint(n, h)
		}
	}
	return fmt.Sprint(len(out)) + fmt.Sprint(xor(m))
}

func xor(m map[string][32]byte) (x [32]byte) {
	for n, h := range m {
		if n == "index.db" || n == "lock" {
			continue
		}
		for i := range x {
			x[i] ^= h[i]
		}
	}
	return x
}

// The last entry that was called saved is damaged after it was synced. The entry before it
// must not come back as current, the damage is named, and writing goes on elsewhere.
func TestLastSavedEntryIsDamaged(t *testing.T) {
	dir, patient, visit := small(t)
	s, err := storage.Open(dir, storagetest.Options())
	require.NoError(t, err)
	k := cells[0]
	for i := 1; i <= 2; i++ {
		_, err = s.Apply(ctx, "A", storage.FindingEdit(patient, visit, finding(k, int8(i), fmt.Sprint(i))))
		require.NoError(t, err)
	}
	require.NoError(t, s.Close())
	es, err := os.ReadDir(filepath.Join(dir, "journal"))
	require.NoError(t, err)
	seg := filepath.Join(dir, "journal", es[len(es)-1].Name())
	b, err := os.ReadFile(seg)
	require.NoError(t, err)
	for _, tt := range []struct {
		name string
		harm func(b []byte) []byte
	}{
		{"a bit of its seal", func(b []byte) []byte { b[used(b)-3] ^= 4; return b }},
		{"a bit of its header", func(b []byte) []byte {
			b[strings.LastIndex(string(b[:used(b)]), "\xc7CWf")+20] ^= 4
			return b
		}},
		{"its end cut off", func(b []byte) []byte { return b[:used(b)-5] }},
	} {
		t.Run(tt.name, func(t *testing.T) {
			for _, index := range []bool{true, false} {
				d := copyDir(t, dir)
				require.NoError(t, os.WriteFile(filepath.Join(d, "journal", filepath.Base(seg)), tt.harm(append([]byte(nil), b...)), 0o600))
				if !index {
					require.NoError(t, os.Remove(filepath.Join(d, "index.db")))
				}
				ps, err := storage.Check(ctx, d, storagetest.Options())
				require.NoError(t, err)
				require.NotEmpty(t, ps)
				require.Equal(t, "journal/"+filepath.Base(seg), ps[0].File)
				s, err := storage.Open(d, storagetest.Options())
				require.NoError(t, err)
				r, err := s.Patient(patient)
				require.NoError(t, err)
				f, ok := r.Visits[0].Find(k)
				if index {
					require.True(t, ok)
					require.Equal(t, "2", f.Note, "the index still knows it")
				} else {
					require.False(t, ok, "an older value is shown as current: %v", f)
					require.NotEmpty(t, r.Missing)
					require.NotEmpty(t, r.Conflicts)
					// A person confirms what was there, and it counts again.
					for i := range r.Conflicts {
						_, err = s.Resolve(ctx, "B", r.Conflicts[i], 0, "")
						require.NoError(t, err)
					}
					r, err = s.Patient(patient)
					require.NoError(t, err)
					require.Empty(t, r.Conflicts)
					f, ok = r.Visits[0].Find(k)
					require.True(t, ok)
					require.Equal(t, "1", f.Note)
				}
				_, err = s.Apply(ctx, "B", storage.FindingEdit(patient, visit, finding(k, 0, "3")))
				require.NoError(t, err)
				require.NoError(t, s.Close())
				after, err := os.ReadDir(filepath.Join(d, "journal"))
				require.NoError(t, err)
				require.Len(t, after, len(es)+1, "writing goes on in a new segment")
				s, err = storage.Open(d, storagetest.Options())
				require.NoError(t, err)
				r, err = s.Patient(patient)
				require.NoError(t, err)
				f, _ = r.Visits[0].Find(k)
				require.Equal(t, "3", f.Note)
				require.NoError(t, s.Close())
			}
		})
	}
}

// An index that is gone, damaged, of another version or of another practice is built anew, and
// the person is told.
func TestIndexIsBuiltAnew(t *testing.T) {
	dir, patient, visit := small(t)
	other, _, _ := small(t)
	index := func(d string) string { return filepath.Join(d, "index.db") }
	for _, tt := range []struct {
		name, notice string
		harm         func(t *testing.T, d string)
	}{
		{"gone", "missing", func(t *testing.T, d string) { require.NoError(t, os.Remove(index(d))) }},
		{"empty", "damaged", func(t *testing.T, d string) { require.NoError(t, os.WriteFile(index(d), nil, 0o600)) }},
		{"garbage", "damaged", func(t *testing.T, d string) {
			require.NoError(t, os.WriteFile(index(d), []byte(strings.Repeat("garbage ", 9999)), 0o600))
		}},
		{"cut", "damaged", func(t *testing.T, d string) { require.NoError(t, os.Truncate(index(d), 9000)) }},
		{"newer", "another version", func(t *testing.T, d string) {
			db, err := bbolt.Open(index(d), 0o600, nil)
			require.NoError(t, err)
			require.NoError(t, db.Update(func(tx *bbolt.Tx) error {
				return tx.Bucket([]byte("meta")).Put([]byte("version"), []byte("cordwalk index 99"))
			}))
			require.NoError(t, db.Close())
		}},
		{"of another practice", "damaged", func(t *testing.T, d string) {
			b, err := os.ReadFile(index(other))
			require.NoError(t, err)
			require.NoError(t, os.WriteFile(index(d), b, 0o600))
		}},
		{"a lost record", "damaged", func(t *testing.T, d string) {
			db, err := bbolt.Open(index(d), 0o600, nil)
			require.NoError(t, err)
			require.NoError(t, db.Update(func(tx *bbolt.Tx) error {
				c := tx.Bucket([]byte("records")).Cursor()
				c.First()
				return c.Delete()
			}))
			require.NoError(t, db.Close())
			ps, err := storage.Check(ctx, d, storagetest.Options())
			require.NoError(t, err)
			require.NotEmpty(t, ps, "check finds it too")
		}},
	} {
		t.Run(tt.name, func(t *testing.T) {
			if checked && tt.name == "cut" {
				t.Skip("see checked")
			}
			d := copyDir(t, dir)
			tt.harm(t, d)
			var said []string
			o := storagetest.Options()
			o.Notice = func(w string) { said = append(said, w) }
			s, err := storage.Open(d, o)
			require.NoError(t, err)
			r, err := s.Patient(patient)
			require.NoError(t, err)
			require.Equal(t, visit, r.Visits[0].ID)
			require.Contains(t, strings.Join(said, "\n"), tt.notice)
			require.NoError(t, s.Close())
			storagetest.Check(t, d)
		})
	}
}
