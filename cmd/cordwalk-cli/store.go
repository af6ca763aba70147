package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/schollz/progressbar/v3"
	"golang.org/x/term"

	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/audit"
	"cordwalk.example/cordwalk/sync/keyring"
	"cordwalk.example/cordwalk/sync/share"
)

// passphraseFile is the variable that names a file with the passphrase.
const passphraseFile = "CORDWALK_PASSPHRASE_FILE"

// storeDir returns the practice's folder, or says that none was named.
func (e *env) storeDir() (string, error) {
	if e.c.Store == "" {
		return "", usage("%s", words.T("name the practice's folder with --store DIR, or set CORDWALK_STORE"))
	}
	return e.c.Store, nil
}

// unlock gathers how the practice is opened. It asks at the terminal only when told to
// (ask) and when standard input is one.
func (e *env) unlock(ask bool) (storage.Unlock, error) {
	u := storage.Unlock{KeyFile: e.c.KeyFile, KeyInStore: e.c.NoPassphrase}
	given := 0
	if u.KeyFile != "" {
		given++
	}
	if u.KeyInStore {
		given++
	}
	if e.c.PassphraseFd >= 0 {
		given++
		f := os.NewFile(uintptr(e.c.PassphraseFd), "passphrase")
		if f == nil {
			return u, usage("%s", words.T("file descriptor %d is not open", e.c.PassphraseFd))
		}
		p, err := readPassphrase(f)
		if err != nil {
			return u, err
		}
		u.Passphrase = p
	}
	if e.c.Keyring {
		given++
		in, err := storage.Peek(e.c.Store, storage.Options{})
		if err != nil {
			return u, err
		}
		k, err := keyring.Get(e.ctx, in.Practice)
		if err != nil {
			return u, err
		}
		u.Keyring = &k
	}
	if given > 1 {
		return u, usage("%s", words.T("give one of --key-file, --passphrase-fd, --keyring and --no-passphrase"))
	}
	if name := os.Getenv(passphraseFile); name != "" && given == 0 {
		f, err := os.Open(name)
		if err != nil {
			return u, fmt.Errorf("%s: %w", words.T("the file named by %s cannot be read", passphraseFile), err)
		}
		defer f.Close()
		p, err := readPassphrase(f)
		if err != nil {
			return u, err
		}
		u.Passphrase = p
		given++
	}
	if ask && given == 0 {
		if in, ok := e.in.(*os.File); ok && term.IsTerminal(int(in.Fd())) {
			fmt.Fprint(e.errOut, words.T("Passphrase: "))
			p, err := term.ReadPassword(int(in.Fd()))
			fmt.Fprintln(e.errOut)
			if err != nil {
				return u, err
			}
			u.Passphrase = p
		}
	}
	return u, nil
}

// readPassphrase reads one passphrase; a line end behind it does not belong to it.
func readPassphrase(r io.Reader) ([]byte, error) {
	p, err := io.ReadAll(io.LimitReader(r, 4096))
	if err != nil {
		return nil, fmt.Errorf("%s: %w", words.T("reading the passphrase"), err)
	}
	p = bytes.TrimRight(p, "\r\n")
	if len(p) == 0 {
		return nil, errors.New(words.T("the passphrase is empty"))
	}
	return p, nil
}

// options of the store, with progress on a terminal and notices on standard error.
func (e *env) options(u storage.Unlock) storage.Options {
	return storage.Options{Unlock: u, Program: "cordwalk-cli", Progress: e.progress(),
		Notice: func(w string) { fmt.Fprintln(e.errOut, w) }}
}

// open opens the practice.
func (e *env) open() (*storage.Store, error) {
	dir, err := e.storeDir()
	if err != nil {
		return nil, err
	}
	u, err := e.unlock(false)
	if err != nil {
		return nil, err
	}
	s, err := storage.Open(dir, e.options(u))
	if errors.Is(err, storage.ErrLocked) && u.KeyFile == "" && len(u.Passphrase) == 0 {
		if u, err2 := e.unlock(true); err2 == nil && len(u.Passphrase) > 0 {
			return storage.Open(dir, e.options(u))
		}
		return nil, fmt.Errorf("%w (%s)", err, words.T("give --key-file, --passphrase-fd or %s", passphraseFile))
	}
	return s, err
}

// isNew reports whether nothing lies in the folder yet.
func isNew(dir string) bool {
	entries, err := os.ReadDir(dir)
	return errors.Is(err, fs.ErrNotExist) || err == nil && len(entries) == 0
}

// openOrCreate opens the practice, or makes it where the folder is empty and the command
// line says how it is protected.
func (e *env) openOrCreate() (*storage.Store, error) {
	dir, err := e.storeDir()
	if err != nil {
		return nil, err
	}
	if !isNew(dir) {
		return e.open()
	}
	u, err := e.unlock(false)
	if err != nil {
		return nil, err
	}
	if u.KeyFile == "" && len(u.Passphrase) == 0 && !u.KeyInStore {
		return nil, errors.New(words.T("there is no practice in %s; to make one, say how it is protected: --key-file FILE, --passphrase-fd N, %s, or --no-passphrase", dir, passphraseFile))
	}
	return storage.Create(dir, e.options(u))
}

// with runs a function on the open practice and closes it; an error of closing counts.
func (e *env) with(f func(*storage.Store) error) error {
	s, err := e.open()
	if err != nil {
		return err
	}
	return closing(s, f)
}

// change is with for commands that write: it first finds out whether the store was copied
// behind the program's back, and then goes on under a new name, so that no number of the
// journal is used twice.
func (e *env) change(f func(*storage.Store) error) error {
	s, err := e.open()
	if err != nil {
		return err
	}
	return closing(s, func(s *storage.Store) error {
		e.token(s)
		return f(s)
	})
}

// token compares the store's token with the one in the user's configuration. A machine
// without a folder for configurations is told so and goes on.
func (e *env) token(s *storage.Store) {
	dir, err := configDir()
	if err == nil {
		var renewed bool
		if renewed, err = share.CheckToken(e.ctx, s, nil, dir); renewed {
			e.warn(words.T("This practice was copied, restored or last opened elsewhere: it goes on under a new device number."))
		}
	}
	if err != nil {
		e.warn(words.T("Note: %s", err.Error()))
	}
}

// audited writes that something left the practice, once it has.
func (e *env) audited(s *storage.Store, did audit.Did, what string) error {
	who, err := e.examiner(s, "")
	if err != nil {
		return err
	}
	return audit.Write(e.ctx, s, who, did, what)
}

// looked notes that a patient was looked at, once for each day. A practice that cannot be
// written to is read all the same.
func (e *env) looked(s *storage.Store, patient exam.ID) {
	who := "cordwalk-cli"
	if e.c.As == "" || e.c.PINFd >= 0 { // nobody is asked for a PIN in order to read
		if x, err := e.examiner(s, ""); err == nil {
			who = x
		}
	}
	if v, err := audit.OpenViews(s, nil); err == nil {
		_ = v.Note(who, patient, time.Now())
	}
}

// configDir is the program's folder in the user's configuration.
func configDir() (string, error) {
	dir, err := os.UserConfigDir()
	if err != nil {
		return "", err
	}
	return filepath.Join(dir, "cordwalk"), nil
}

func closing(s *storage.Store, f func(*storage.Store) error) error {
	err := f(s)
	if cerr := s.Close(); err == nil {
		err = cerr
	}
	return err
}

// progress returns a bar for long work where standard error is a terminal, else nil.
func (e *env) progress() func(what string, done, total int64) {
	f, ok := e.errOut.(*os.File)
	if !ok || !term.IsTerminal(int(f.Fd())) {
		return nil
	}
	var bar *progressbar.ProgressBar
	name := ""
	return func(what string, done, total int64) {
		if bar == nil || what != name {
			if bar != nil {
				_ = bar.Finish()
			}
			name = what
			bar = progressbar.NewOptions64(total, progressbar.OptionSetWriter(f), progressbar.OptionSetDescription(what),
				progressbar.OptionClearOnFinish(), progressbar.OptionThrottle(65*time.Millisecond), progressbar.OptionSetWidth(30))
		}
		bar.ChangeMax64(total)
		_ = bar.Set64(done)
		if done >= total {
			_ = bar.Finish()
			bar = nil
		}
	}
}

// patient finds a patient by id, by the beginning of its id (8 letters at least), or by a
// name that only one animal has.
func (e *env) patient(s *storage.Store, word string) (storage.Record, error) {
	if id, err := exam.ParseID(strings.ToLower(word)); err == nil {
		r, err := s.Patient(id)
		if errors.Is(err, storage.ErrNotFound) {
			return r, errors.New(words.T("there is no patient with the id %s in this practice", word))
		}
		return r, err
	}
	list, err := s.Caseload(e.ctx)
	if err != nil {
		return storage.Record{}, err
	}
	var hits []storage.Summary
	for _, p := range list {
		if strings.EqualFold(p.Name, word) || len(word) >= 8 && strings.HasPrefix(p.ID.String(), strings.ToLower(word)) {
			hits = append(hits, p)
		}
	}
	switch len(hits) {
	case 0:
		return storage.Record{}, errors.New(words.T("there is no patient %q in this practice; list them with: patients", word))
	case 1:
		return s.Patient(hits[0].ID)
	}
	ids := make([]string, len(hits))
	for i, h := range hits {
		ids[i] = h.ID.String()
	}
	return storage.Record{}, errors.New(words.T("%d patients are called %q; name one by its id: %s", len(hits), word, strings.Join(ids, ", ")))
}

// visit finds a visit by its id.
func (e *env) visit(s *storage.Store, word string) (exam.Visit, error) {
	id, err := exam.ParseID(strings.ToLower(word))
	if err != nil {
		return exam.Visit{}, err
	}
	v, err := s.Visit(id)
	if errors.Is(err, storage.ErrNotFound) {
		return v, errors.New(words.T("there is no visit with the id %s in this practice", word))
	}
	return v, err
}

// printJSON writes a value as indented JSON.
func (e *env) printJSON(v any) error {
	enc := json.NewEncoder(e.out)
	enc.SetEscapeHTML(false)
	enc.SetIndent("", "  ")
	return enc.Encode(v)
}

// say prints a line for people.
func (e *env) say(format string, args ...any) { fmt.Fprintf(e.out, format+"\n", args...) }

// warn prints a line beside the answer.
func (e *env) warn(text string) { fmt.Fprintln(e.errOut, text) }

// writeFile writes a file beside its place, syncs and renames it, so that there is the whole
// file or none; "-" is standard output. An existing file is replaced.
func (e *env) writeFile(name string, data []byte) error {
	if name == "-" {
		_, err := e.out.Write(data)
		return err
	}
	return writeWhole(name, func(w io.Writer) error {
		_, err := w.Write(data)
		return err
	})
}

// writeWhole lets a function write a file; where it fails, nothing stays behind and what
// was there before is still there.
func writeWhole(name string, write func(io.Writer) error) (err error) {
	dir := filepath.Dir(name)
	if st, serr := os.Stat(name); serr == nil && st.IsDir() {
		return errors.New(words.T("%s is a folder; name a file", name))
	}
	f, err := os.CreateTemp(dir, "."+filepath.Base(name)+"-*.part")
	if err != nil {
		return fmt.Errorf("%s: %w", words.T("%s cannot be written", name), err)
	}
	defer func() {
		if err != nil {
			f.Close()
			os.Remove(f.Name())
		}
	}()
	if err = write(f); err != nil {
		return err
	}
	if err = f.Sync(); err != nil {
		return err
	}
	if err = f.Close(); err != nil {
		return err
	}
	if err = os.Chmod(f.Name(), 0o644); err != nil {
		return err
	}
	return os.Rename(f.Name(), name)
}

// readInput reads a file, "-" being standard input, up to a limit in bytes.
func (e *env) readInput(name string, limit int64) ([]byte, error) {
	var r io.Reader = e.in
	if name != "-" {
		f, err := os.Open(name)
		if err != nil {
			return nil, err
		}
		defer f.Close()
		r = f
	}
	data, err := io.ReadAll(io.LimitReader(r, limit+1))
	if err != nil {
		return nil, err
	}
	if int64(len(data)) > limit {
		return nil, errors.New(words.T("%s is larger than %d MiB", name, limit>>20))
	}
	return data, nil
}

// examiner is who a change is written under: the one named, else the one that --as names, else the
// practice's first. An examiner of the practice may be called by initials; one with a PIN is asked for it.
func (e *env) examiner(s *storage.Store, named string) (string, error) {
	p, err := s.Practice()
	if err != nil {
		return "", err
	}
	named = strings.TrimSpace(named)
	if as := strings.TrimSpace(e.c.As); named == "" && as != "" {
		if _, ok := view.FindExaminer(p, as); !ok {
			return "", usage("%s", words.T("nobody is called %[1]s here; the practice's examiners are %[2]s", as, examinerNames(p)))
		}
		named = as
	}
	if named == "" {
		if len(p.Examiners) > 0 {
			return p.Examiners[0].Name, nil
		}
		return "cordwalk-cli", nil
	}
	x, ok := view.FindExaminer(p, named)
	if !ok {
		return named, nil
	}
	return x.Name, e.askPIN(x)
}

// examinerOr is examiner, with somebody else than the practice's first where nobody is named.
func (e *env) examinerOr(s *storage.Store, named, otherwise string) (string, error) {
	if strings.TrimSpace(named) == "" && strings.TrimSpace(e.c.As) == "" {
		return otherwise, nil
	}
	return e.examiner(s, named)
}

func examinerNames(p exam.Practice) string {
	names := make([]string, len(p.Examiners))
	for i, x := range p.Examiners {
		names[i] = strings.TrimSpace(x.Name + " " + x.Initials)
	}
	return strings.Join(names, ", ")
}

// units are the units that the practice reads measures in.
func (e *env) units(s *storage.Store) exam.Units {
	p, err := s.Practice()
	if err != nil {
		return exam.Units{}
	}
	return p.Units()
}

// askPIN asks for the PIN of an examiner who has one, once.
func (e *env) askPIN(x exam.Examiner) error {
	if x.PINHash == "" || e.asked == x.Name {
		return nil
	}
	pin, err := e.readPIN(e.c.PINFd, words.T("PIN of %s: ", x.Name))
	if err != nil {
		return err
	}
	switch err := view.PINFits(x, pin); {
	case errors.Is(err, view.ErrNotTheirPIN):
		return errors.New(words.T("this is not the PIN of %s; nothing was changed", x.Name))
	case err != nil:
		return err
	}
	e.asked = x.Name
	return nil
}

// readPIN reads a PIN from a file descriptor, or asks at the terminal.
func (e *env) readPIN(fd int, prompt string) (string, error) {
	if fd >= 0 {
		f := os.NewFile(uintptr(fd), "PIN")
		if f == nil {
			return "", usage("%s", words.T("file descriptor %d is not open", fd))
		}
		p, err := io.ReadAll(io.LimitReader(f, 64))
		if err != nil {
			return "", fmt.Errorf("%s: %w", words.T("reading the PIN"), err)
		}
		return strings.TrimSpace(string(p)), nil
	}
	if in, ok := e.in.(*os.File); ok && term.IsTerminal(int(in.Fd())) {
		fmt.Fprint(e.errOut, prompt)
		p, err := term.ReadPassword(int(in.Fd()))
		fmt.Fprintln(e.errOut)
		return strings.TrimSpace(string(p)), err
	}
	return "", usage("%s", words.T("there is no terminal to ask for the PIN at; give it with a file descriptor, such as --pin-fd 3"))
}

// shortDay is a day in a table.
func shortDay(t time.Time) string {
	if t.IsZero() {
		return "–"
	}
	return view.Day(t)
}
