package desk

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"runtime"
	"time"

	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/app/view/demo"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/keyring"
	"cordwalk.example/cordwalk/sync/share"
)

// Keeper opens and makes stores on this machine's disk.
type Keeper struct {
	KeyFile string           // unlocks instead of a passphrase; may be empty
	Config  string           // the program's folder in the user's configuration; empty: no watch over copied stores
	Now     func() time.Time // nil: time.Now
}

// DataDir is the folder of this user's data on this system: XDG on Linux, %AppData% on
// Windows, ~/Library on macOS.
func DataDir() (string, error) {
	switch runtime.GOOS {
	case "windows":
		if d := os.Getenv("AppData"); d != "" {
			return filepath.Join(d, "Cordwalk"), nil
		}
	case "darwin":
		if h, err := os.UserHomeDir(); err == nil {
			return filepath.Join(h, "Library", "Application Support", "Cordwalk"), nil
		}
	default:
		if d := os.Getenv("XDG_DATA_HOME"); filepath.IsAbs(d) {
			return filepath.Join(d, "cordwalk"), nil
		}
		if h, err := os.UserHomeDir(); err == nil {
			return filepath.Join(h, ".local", "share", "cordwalk"), nil
		}
	}
	return "", errors.New(words.T("this system names no folder for data; use --store"))
}

// DefaultDir is where a practice lies unless somebody says otherwise.
func (k *Keeper) DefaultDir() string { return k.under("practice") }

// DemoDir is where the demo practice lies, apart from every real one.
func (k *Keeper) DemoDir() string { return k.under("demo") }

func (k *Keeper) under(name string) string {
	d, err := DataDir()
	if err != nil {
		d = filepath.Join(os.TempDir(), "cordwalk")
	}
	return filepath.Join(d, name)
}

// Exists reports whether a practice lies in the folder and whether it needs a passphrase.
func (k *Keeper) Exists(dir string) (exists, locked bool) {
	in, err := storage.Peek(dir, storage.Options{})
	if err != nil {
		return !errors.Is(err, fs.ErrNotExist), false
	}
	return true, in.Protected && k.KeyFile == ""
}

func (k *Keeper) options(pass []byte, progress func(string, int64, int64), notice func(string)) storage.Options {
	return storage.Options{Unlock: storage.Unlock{KeyFile: k.KeyFile, Passphrase: pass}, Program: "cordwalk", Now: k.Now, Progress: progress, Notice: notice}
}

// Fits reports, by a nil error, whether a passphrase opens the practice in a folder, which may be open.
func (k *Keeper) Fits(dir string, pass []byte) error {
	return storage.Fits(dir, storage.Options{Unlock: storage.Unlock{Passphrase: pass}})
}

// ByPassphrase reports whether a passphrase opens the practice in a folder.
func (k *Keeper) ByPassphrase(dir string) bool {
	in, err := storage.Peek(dir, storage.Options{})
	return err == nil && in.Passphrase
}

// InSession reports whether the system keyring of this user may open the practice in a folder without a passphrase.
func (k *Keeper) InSession(dir string) bool {
	in, err := storage.Peek(dir, storage.Options{})
	return err == nil && in.Keyring && k.KeyFile == ""
}

// Open opens the practice in a folder: with the passphrase or, without one, with what the system keyring holds where
// that was chosen.
func (k *Keeper) Open(dir string, pass []byte, progress func(string, int64, int64), notice func(string)) (Records, error) {
	o := k.options(pass, progress, notice)
	if len(pass) == 0 && k.InSession(dir) {
		in, err := storage.Peek(dir, storage.Options{})
		if err != nil {
			return nil, err
		}
		held, err := keyring.Get(context.Background(), in.Practice)
		if err != nil {
			return nil, err
		}
		o.Unlock.Keyring = &held
	}
	s, err := storage.Open(dir, o)
	if err != nil {
		return nil, err
	}
	return k.keep(s, dir, notice)
}

// Create makes a practice in a folder.
func (k *Keeper) Create(dir string, pass []byte, p exam.Practice, examiner string) (Records, error) {
	o := k.options(pass, nil, nil)
	o.Unlock.KeyInStore = len(pass) == 0 && k.KeyFile == ""
	if err := os.MkdirAll(filepath.Dir(dir), 0o700); err != nil {
		return nil, fmt.Errorf("%s: %w", words.T("making the folder %s", filepath.Dir(dir)), err)
	}
	s, err := storage.Create(dir, o)
	if err != nil {
		return nil, err
	}
	for i := range p.Examiners {
		if p.Examiners[i].ID.IsZero() {
			p.Examiners[i].ID = storage.NewID()
		}
	}
	r, err := k.keep(s, dir, nil)
	if err != nil {
		return nil, err
	}
	if _, err := s.Apply(context.Background(), examiner, storage.PracticeEdits(exam.Practice{}, p)...); err != nil {
		return nil, errors.Join(err, s.Close())
	}
	return r, nil
}

// keep finds out whether the store was copied or put back behind the program's back, before anything is
// written: then this device goes on under a new name, so that no number is used twice.
func (k *Keeper) keep(s *storage.Store, dir string, notice func(string)) (Records, error) {
	if k.Config != "" {
		renewed, err := share.CheckToken(context.Background(), s, nil, k.Config)
		if err != nil {
			return nil, errors.Join(err, s.Close())
		}
		if renewed && notice != nil {
			notice(words.T("This practice was copied, restored or last opened elsewhere: it goes on under a new device number."))
		}
	}
	return &kept{s, dir}, nil
}

// Demo makes the demo practice in a folder, or opens it if it is there.
func (k *Keeper) Demo(dir string, progress func(string, int64, int64)) (Records, error) {
	if exists, _ := k.Exists(dir); exists {
		return k.Open(dir, nil, progress, nil)
	}
	o := k.options(nil, progress, nil)
	o.Unlock = storage.Unlock{KeyInStore: true}
	if err := os.MkdirAll(filepath.Dir(dir), 0o700); err != nil {
		return nil, fmt.Errorf("%s: %w", words.T("making the folder %s", filepath.Dir(dir)), err)
	}
	s, err := storage.Create(dir, o)
	if err != nil {
		return nil, err
	}
	now := time.Now
	if k.Now != nil {
		now = k.Now
	}
	err = demo.Fill(context.Background(), s, demo.New(demo.Seed, now()), func(done, total int) {
		if progress != nil {
			progress(words.T("Writing the demo visits"), int64(done), int64(total))
		}
	})
	if err != nil {
		return nil, errors.Join(err, s.Close())
	}
	return k.keep(s, dir, nil)
}

// kept is a store as the screens use it.
type kept struct {
	s   *storage.Store
	dir string
}

func (k *kept) Practice() (exam.Practice, error) { return k.s.Practice() }

func (k *kept) Caseload(ctx context.Context) ([]view.Summary, error) {
	list, err := k.s.Caseload(ctx)
	if err != nil {
		return nil, err
	}
	out := make([]view.Summary, len(list))
	for i, s := range list {
		out[i] = view.Summary{ID: s.ID, Name: s.Name, Species: s.Species, Breed: s.Breed, Owner: s.Owner, Problem: s.Problem,
			Status: s.Status, Demo: s.Demo, Visits: s.Visits, First: s.First, Last: s.Last, LastVisit: s.LastVisit, OpenVisit: s.OpenVisit,
			NextVisit: s.NextVisit, RecheckDays: s.RecheckDays, Motor: s.Motor, Lameness: s.Lameness, TailTone: s.TailTone, Direction: s.Direction}
		for _, a := range s.Alerts {
			out[i].Alerts = append(out[i].Alerts, view.SummaryAlert(a))
		}
	}
	return out, nil
}

func (k *kept) File(id exam.ID) (File, error) {
	r, err := k.s.Patient(id)
	if err != nil {
		return File{}, err
	}
	f := File{Patient: r.Patient, Visits: r.Visits}
	for _, g := range r.Missing {
		f.Missing = append(f.Missing, g.String())
	}
	for _, c := range r.Conflicts {
		f.Conflict = append(f.Conflict, c.Field)
	}
	return f, nil
}

func (k *kept) SavePatient(ctx context.Context, examiner string, before, after exam.Patient) error {
	before.ID = after.ID
	_, err := k.s.Apply(ctx, examiner, storage.PatientEdits(before, after)...)
	return err
}

func (k *kept) SaveVisit(ctx context.Context, examiner string, before, after exam.Visit) error {
	before.ID, before.Patient = after.ID, after.Patient
	_, err := k.s.Apply(ctx, examiner, storage.VisitEdits(before, after)...)
	return err
}

func (k *kept) SaveBatch(ctx context.Context, examiner string, b view.Batch) error {
	_, err := k.s.Apply(ctx, examiner, b.Edits()...)
	return err
}

func (k *kept) SavePractice(ctx context.Context, examiner string, before, after exam.Practice) error {
	_, err := k.s.Apply(ctx, examiner, storage.PracticeEdits(before, after)...)
	return err
}

func (k *kept) Apply(ctx context.Context, examiner string, edits ...storage.Edit) (storage.Receipt, error) {
	return k.s.Apply(ctx, examiner, edits...)
}

func (k *kept) NewID() exam.ID  { return storage.NewID() }
func (k *kept) Protected() bool { return k.s.Protected() }
func (k *kept) Device() string  { return k.s.Device() }
func (k *kept) Place() string   { return k.dir }
func (k *kept) Close() error    { return k.s.Close() }

// Store returns the store itself, for what concerns devices and backups.
func (k *kept) Store() *storage.Store { return k.s }
