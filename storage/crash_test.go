package storage_test

import (
	"errors"
	"fmt"
	"io/fs"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk/disktest"
	"cordwalk.example/cordwalk/storage/storagetest"
)

// soak reports whether long tests run in full.
func soak() bool { return os.Getenv("CORDWALK_SOAK") == "1" }

// times returns n in a soak run, a twentieth of it otherwise, and less still with -short.
func times(n int) int {
	switch {
	case soak():
		return n
	case testing.Short():
		return max(1, n/200)
	}
	return max(1, n/20)
}

// seeded returns a random source with a fresh seed, which is printed.
func seeded(t testing.TB) *rand.Rand {
	seed := uint64(time.Now().UnixNano())
	t.Logf("seed %d", seed)
	return rand.New(rand.NewPCG(seed, 1))
}

func on(d *disktest.Disk) storage.Options {
	o := storagetest.Options()
	o.Files = d
	return o
}

var cells = []exam.Key{
	{Item: exam.VoluntaryMotor, Site: exam.PelvicLeft}, {Item: exam.VoluntaryMotor, Site: exam.PelvicRight},
	{Item: exam.Ataxia, Site: exam.PelvicLeft}, {Item: exam.Lameness, Site: exam.ThoracicLeft},
}

func finding(k exam.Key, grade int8, note string) exam.Finding {
	return exam.Finding{Item: k.Item, Site: k.Site, Digit: k.Digit, Joint: k.Joint, Result: exam.Graded(grade), Note: note}
}

// told is what the program was told to be saved by some moment: the note of the newest write of each cell.
type told struct {
	events int
	cell   map[exam.Key]int
}

// script records a patient, a visit, and findings, some of which correct earlier ones, and
// tells after each what has been called saved.
type script struct {
	dir            string
	patient, visit exam.ID
	made           int // events when Create had returned
	saved          []told
}

func (sc *script) run(t *testing.T, d *disktest.Disk, writes int, rng *rand.Rand) {
	t.Helper()
	s, err := storage.Create(sc.dir, on(d))
	require.NoError(t, err)
	sc.made = d.Events()
	p, v := samplePatient(), exam.Visit{}
	sc.patient = p.ID
	_, err = s.Apply(ctx, "A", storage.PatientEdits(exam.Patient{}, p)...)
	require.NoError(t, err)
	v.ID, v.Patient, v.Examined, v.Examiner = storage.NewID(), p.ID, at("2026-03-02T10:15:00+01:00"), "A"
	sc.visit = v.ID
	_, err = s.Apply(ctx, "A", storage.VisitEdits(exam.Visit{}, v)...)
	require.NoError(t, err)
	have := map[exam.Key]int{}
	note := func() {
		m := map[exam.Key]int{}
		for k, n := range have {
			m[k] = n
		}
		sc.saved = append(sc.saved, told{d.Events(), m})
	}
	note()
	for i := 1; i <= writes; i++ {
		k := cells[rng.IntN(len(cells))]
		// Notes of several lengths move the frames over the sectors.
		f := finding(k, int8(i%3), fmt.Sprintf("%d %0*d", i, rng.IntN(700), 0))
		_, err := s.Apply(ctx, "A", storage.FindingEdit(sc.patient, sc.visit, f))
		require.NoError(t, err)
		have[k] = i
		note()
		if i%5 == 0 {
			require.NoError(t, s.Flush())
		}
		if i == writes/2 {
			require.NoError(t, s.Close())
			s, err = storage.Open(sc.dir, on(d))
			require.NoError(t, err)
		}
	}
	require.NoError(t, s.Close())
}

func (sc *script) by(events int) map[exam.Key]int {
	var m map[exam.Key]int
	for _, s := range sc.saved {
		if s.events <= events {
			m = s.cell
		}
	}
	return m
}

// verify opens a store after a power cut and looks for everything that was called saved.
func (sc *script) verify(dir string, o storage.Options, events int) error {
	s, err := storage.Open(dir, o)
	if err != nil {
		if events < sc.made && errors.Is(err, fs.ErrNotExist) {
			// The practice was still being made: it can be made now.
			if s, err = storage.Create(dir, o); err == nil {
				err = s.Close()
			}
			return err
		}
		return fmt.Errorf("opening: %w", err)
	}
	defer s.Close()
	want := sc.by(events)
	if want == nil {
		return nil
	}
	r, err := s.Patient(sc.patient)
	if err != nil {
		return err
	}
	if len(r.Missing) > 0 {
		return fmt.Errorf("entries are marked missing: %v", r.Missing)
	}
	if len(r.Visits) != 1 || len(r.Conflicts) > 0 {
		return fmt.Errorf("%d visits, %d conflicts", len(r.Visits), len(r.Conflicts))
	}
	for k, n := range want {
		f, ok := r.Visits[0].Find(k)
		var got int
		if ok {
			fmt.Sscan(f.Note, &got)
		}
		if got < n {
			return fmt.Errorf("cell %s was saved with %d and has %d", k, n, got)
		}
	}
	// It can be gone on with.
	_, err = s.Apply(ctx, "B", storage.FindingEdit(sc.patient, sc.visit, finding(exam.Key{Item: exam.TailTone, Site: exam.Midline}, 1, "after")))
	return err
}

func testPowerCut(t *testing.T, exfat bool) {
	rng := seeded(t)
	root := t.TempDir()
	d := disktest.New()
	if exfat {
		d.ExFAT()
	}
	require.NoError(t, d.Record(root))
	sc := &script{dir: filepath.Join(root, "practice")}
	sc.run(t, d, 24, rng)
	states, again := 0, 0
	each := max(2, times(120))
	err := d.Crashes(0, each, rng, func(c disktest.Crash) error {
		states++
		dir := filepath.Join(t.TempDir(), "x")
		if err := c.Write(dir); err != nil {
			return err
		}
		defer os.RemoveAll(dir)
		// Every so often the power fails again while the store recovers.
		if rng.IntN(12) == 0 && c.At >= sc.made {
			d2 := disktest.New()
			if exfat {
				d2.ExFAT()
			}
			if err := d2.Record(dir); err != nil {
				return err
			}
			if err := sc.verify(filepath.Join(dir, "practice"), on(d2), c.At); err != nil {
				return fmt.Errorf("after a power cut at event %d (%s): %w", c.At, c.Words, err)
			}
			return d2.Crashes(0, max(2, each/20), rng, func(c2 disktest.Crash) error {
				again++
				dir2 := filepath.Join(t.TempDir(), "y")
				if err := c2.Write(dir2); err != nil {
					return err
				}
				defer os.RemoveAll(dir2)
				if err := sc.verify(filepath.Join(dir2, "practice"), on(disktest.New()), c.At); err != nil {
					return fmt.Errorf("after power cuts at event %d (%s) and %d of recovering (%s): %w", c.At, c.Words, c2.At, c2.Words, err)
				}
				return nil
			})
		}
		if err := sc.verify(filepath.Join(dir, "practice"), on(disktest.New()), c.At); err != nil {
			return fmt.Errorf("after a power cut at event %d (%s): %w", c.At, c.Words, err)
		}
		return nil
	})
	require.NoError(t, err)
	t.Logf("%d states after a power cut and %d after a second one, over %d events", states, again, d.Events())
}

func TestPowerCut(t *testing.T)        { testPowerCut(t, false) }
func TestPowerCutOnExFAT(t *testing.T) { testPowerCut(t, true) }
