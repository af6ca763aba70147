package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"text/tabwriter"
	"time"

	"filippo.io/age"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/attach"
	"cordwalk.example/cordwalk/sync/audit"
	"cordwalk.example/cordwalk/sync/backup"
	"cordwalk.example/cordwalk/sync/carry"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/member"
	"cordwalk.example/cordwalk/sync/share"
)

// sheetFlag says where the recovery sheet goes the first time that a practice is shared or backed up.
type sheetFlag struct {
	RecoverySheet string `help:"Where the recovery key is written the first time; print it, keep it in a safe place, and remove the file." placeholder:"FILE"`
}

// shared runs a function on the practice with the list of its devices.
func (e *env) shared(c sheetFlag, f func(sh *share.Share) error) error {
	return e.change(func(s *storage.Store) error {
		founded := s.Dir()
		_, err := os.Stat(filepath.Join(founded, "members"))
		if errors.Is(err, os.ErrNotExist) && c.RecoverySheet == "" {
			return usage("%s", words.T("this is the first time that the practice is shared or backed up: name a file for its recovery key with --recovery-sheet FILE"))
		}
		if c.RecoverySheet != "" && errors.Is(err, os.ErrNotExist) {
			if _, err := os.Stat(c.RecoverySheet); err == nil {
				return fmt.Errorf("%s", words.T("%s is there already; name a new file for the recovery key", c.RecoverySheet))
			}
		}
		sh, recovery, err := share.Open(e.ctx, s, share.Options{})
		if recovery != nil { // also beside an error: it is known nowhere else
			text := words.T("Recovery sheet of the practice %s. Whoever holds this key can open its data.", s.Bag().Practice) + "\n" + recovery.String() + "\n"
			if werr := writeSecret(c.RecoverySheet, text); werr != nil {
				e.warn(text)
				return errors.Join(err, werr)
			}
			e.warn(words.T("Recovery key written to %s: print it, keep it in a safe place, remove the file.", c.RecoverySheet))
		}
		if err != nil {
			return err
		}
		if bad := sh.Damaged(); len(bad) > 0 {
			e.warn(words.N(len(bad), "Note: %d entry of the list of devices is damaged; an exchange brings it back", "Note: %d entries of the list of devices are damaged; an exchange brings them back", len(bad)))
		}
		if sh.Files, err = attach.Open(e.ctx, s, nil); err != nil {
			return err
		}
		return f(sh)
	})
}

func writeSecret(name, text string) error {
	f, err := os.OpenFile(name, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o600)
	if err != nil {
		return err
	}
	_, err = f.WriteString(text)
	if err == nil {
		err = f.Sync()
	}
	if cerr := f.Close(); err == nil {
		err = cerr
	}
	return err
}

// readSheet reads a recovery key out of a file with its sheet.
func readSheet(name string) (*age.X25519Identity, error) {
	data, err := os.ReadFile(name)
	if err != nil {
		return nil, err
	}
	for _, line := range strings.Split(string(data), "\n") {
		if line = strings.TrimSpace(line); strings.HasPrefix(line, "AGE-SECRET-KEY-") {
			return age.ParseX25519Identity(line)
		}
	}
	return nil, fmt.Errorf("%s", words.T("%s holds no recovery key", name))
}

// syncCmd exchanges with a folder.
type syncCmd struct {
	Folder string `arg:"" optional:"" help:"A stick, a network share or a folder that some other program synchronises."`
	Hub    string `help:"Address of a hub instead, as the hub prints it; of a cluster those of its nodes with commas between." placeholder:"HOST:PORT#CERTIFICATE"`
	Stay   bool   `help:"With --hub: go on exchanging until stopped."`
	sheetFlag
}

type syncJSON struct {
	Received int      `json:"received"`
	Sent     int      `json:"sent"`
	Peers    []string `json:"peers"`
	Forks    int      `json:"forks"`
	Waiting  int      `json:"waiting"`
	Problems []string `json:"problems"`
	Blocked  string   `json:"blocked,omitempty"`
	Hub      *hubJSON `json:"hub,omitempty"` // where it went by a hub
}

func (c *syncCmd) Run(e *env) error {
	if (c.Folder == "") == (c.Hub == "") {
		return usage("%s", words.T("name a folder, or a hub with --hub ADDRESS"))
	}
	return e.shared(c.sheetFlag, func(sh *share.Share) error {
		if c.Hub != "" {
			out, err := e.byHub(sh, c.Hub, c.Stay)
			if err != nil {
				return err
			}
			return e.synced(out, out.Forks > 0)
		}
		r, err := sh.Folder(e.ctx, c.Folder, e.progress())
		if err != nil {
			return err
		}
		out := syncJSON{Received: r.Received, Sent: r.Sent, Peers: []string{}, Forks: len(r.Forks), Waiting: len(r.Waiting), Problems: some(r.Problems)}
		for _, p := range r.Peers {
			name := sh.List.NameOf(p.Device)
			switch {
			case p.Differs:
				out.Problems = append(out.Problems, words.T("%s: its records differ from ours although it has the same entries", name))
			case p.Ahead:
				out.Problems = append(out.Problems, words.T("%s: its clock runs more than a day ahead", name))
			}
			out.Peers = append(out.Peers, name)
		}
		for _, w := range r.Waiting {
			out.Problems = append(out.Problems, words.T("entries %d to %d of %s are not here yet: %s", w.First, w.Last, sh.List.NameOf(w.Stream.Device), w.Why))
		}
		if r.Blocked != nil {
			out.Blocked = r.Blocked.Error()
		}
		return e.synced(out, r.Blocked != nil || len(r.Forks) > 0)
	})
}

// synced prints what an exchange did.
func (e *env) synced(out syncJSON, wrong bool) error {
	if e.c.JSON {
		if err := e.printJSON(out); err != nil {
			return err
		}
	} else {
		e.say("%s", words.T("%d taken in, %d handed over", out.Received, out.Sent))
		for _, p := range out.Problems {
			e.say("%s", p)
		}
		if out.Forks > 0 {
			e.say("%s", words.N(out.Forks, "%d device was copied and both copies were used; both branches are kept", "%d devices were copied and both copies were used; both branches are kept", out.Forks))
		}
		if h := out.Hub; h != nil && h.MaxBytes > 0 {
			e.say("%s", words.T("The hub keeps entries for %[1]d days and at most %[2]d MB; it holds %[3]d kB.", int(h.KeptDays), h.MaxBytes/1e6, h.Bytes/1e3))
		}
		if out.Blocked != "" {
			e.say("%s", words.T("Nothing could be left there: %s", out.Blocked))
		}
	}
	if wrong {
		return errSaidNo
	}
	return nil
}

// devicesCmd lists the practice's devices.
type devicesCmd struct{ sheetFlag }

type deviceJSON struct {
	Name   string `json:"name"`
	Key    string `json:"key"`
	Member bool   `json:"member"`
	This   bool   `json:"this"`
	Why    string `json:"why,omitempty"`
}

func (c *devicesCmd) Run(e *env) error {
	return e.shared(c.sheetFlag, func(sh *share.Share) error {
		out := []deviceJSON{}
		for _, d := range sh.List.Devices() {
			j := deviceJSON{Name: d.Name, Key: d.Verifier.String()[:16], Member: d.Member(), This: d.Verifier == sh.Bag().Device.Verifier()}
			switch {
			case len(d.Removals) > 0:
				j.Why = words.T("removed: %s", d.Removals[0].Reason)
			case d.Disputed:
				j.Why = words.T("let in by a device that was removed at the same time")
			}
			out = append(out, j)
		}
		if e.c.JSON {
			return e.printJSON(map[string]any{"devices": out})
		}
		w := tabwriter.NewWriter(e.out, 0, 4, 2, ' ', 0)
		for _, d := range out {
			note := d.Why
			if d.This {
				note = words.T("this device")
			}
			fmt.Fprintf(w, "%s\t%s\t%s\n", d.Name, d.Key, note)
		}
		return w.Flush()
	})
}

// inviteCmd makes an invitation.
type inviteCmd struct {
	Folder   string        `arg:"" help:"Folder that both devices can reach."`
	Valid    time.Duration `help:"How long the invitation holds." default:"24h"`
	Examiner string        `help:"Who invites."`
	sheetFlag
}

func (c *inviteCmd) Run(e *env) error {
	return e.shared(c.sheetFlag, func(sh *share.Share) error {
		who, err := e.examiner(sh.Store, c.Examiner)
		if err != nil {
			return err
		}
		code, err := sh.Invite(e.ctx, who, c.Folder, c.Valid)
		if err != nil {
			return err
		}
		if e.c.JSON {
			return e.printJSON(map[string]any{"code": code, "valid_until": time.Now().Add(c.Valid).Truncate(time.Second)})
		}
		e.say("%s", words.T("Code, to be told by voice and never sent with the invitation: %s", code))
		e.say("%s", words.T("The other device runs: join FOLDER --code \"…\". Then run: admit FOLDER"))
		return nil
	})
}

// joinCmd asks to be let in to a practice and waits for the answer.
type joinCmd struct {
	Folder string        `arg:"" help:"Folder with the invitation."`
	Code   string        `required:"" help:"The code that the inviting person told."`
	Name   string        `help:"Name of this device; the computer's where not said."`
	Wait   time.Duration `help:"How long to wait for the answer." default:"15m"`
}

func (c *joinCmd) Run(e *env) error {
	dir, err := e.storeDir()
	if err != nil {
		return err
	}
	if !isNew(dir) {
		return fmt.Errorf("%s", words.T("%s is not empty; a joining device needs a new folder", dir))
	}
	u, err := e.unlock(true)
	if err != nil {
		return err
	}
	if u.KeyFile == "" && len(u.Passphrase) == 0 && !u.KeyInStore {
		return errors.New(words.T("say how the data on this device are protected: --key-file FILE, --passphrase-fd N, %s, or --no-passphrase", passphraseFile))
	}
	letters, err := carry.Letters(disk.OS(), c.Folder, ".invite")
	if err != nil {
		return err
	}
	if len(letters) == 0 {
		return errors.New(words.T("there is no invitation in %s", c.Folder))
	}
	name := c.Name
	if name == "" {
		if name, err = os.Hostname(); err != nil {
			name = "device"
		}
	}
	device, err := key.NewDevice()
	if err != nil {
		return err
	}
	inc := change.NewIncarnation()
	var joining *member.Joining
	for _, l := range letters {
		if joining, err = member.Ask(l.Data, c.Code, device, name, inc); err == nil {
			break
		}
	}
	if joining == nil {
		return err
	}
	request := carry.Letter{Practice: joining.Practice(), Name: joining.FileName(), Data: joining.File()}
	if err := carry.LeaveLetter(disk.OS(), c.Folder, request); err != nil {
		return err
	}
	e.say("%s", words.T("Check words, to be compared with those on the inviting device: %s", joining.CheckWords()))
	ctx, cancel := context.WithTimeout(e.ctx, c.Wait)
	defer cancel()
	for {
		sh, err := share.Join(ctx, dir, c.Folder, joining, inc, e.options(u), share.Options{})
		if err == nil {
			return closing(sh.Store, func(s *storage.Store) error {
				e.token(s)
				list, err := s.Caseload(e.ctx)
				if err != nil {
					return err
				}
				e.say("%s", words.N(len(list), "Joined: %d patient is here.", "Joined: %d patients are here.", len(list)))
				return nil
			})
		}
		if !errors.Is(err, change.ErrNoKey) {
			return err
		}
		select {
		case <-ctx.Done():
			if e.ctx.Err() != nil {
				return e.ctx.Err()
			}
			return errors.New(words.T("no answer came in %s; the request is used up, ask for a new invitation", c.Wait.String()))
		case <-time.After(250 * time.Millisecond):
		}
	}
}

// admitCmd lets a device in.
type admitCmd struct {
	Folder   string `arg:"" help:"Folder with the request."`
	Words    string `help:"The check words that stand on the other device; without them the requests are listed." placeholder:"WORDS"`
	Refuse   bool   `help:"Refuse the requests: the words differ."`
	Examiner string `help:"Who lets it in."`
	sheetFlag
}

func (c *admitCmd) Run(e *env) error {
	return e.shared(c.sheetFlag, func(sh *share.Share) error {
		asked, refused, err := sh.Requests(e.ctx, c.Folder)
		if err != nil {
			return err
		}
		for _, r := range refused {
			e.warn(r)
		}
		if len(asked) == 0 {
			return errors.New(words.T("no request that fits an open invitation lies in %s", c.Folder))
		}
		who, err := e.examiner(sh.Store, c.Examiner)
		if err != nil {
			return err
		}
		if e.c.JSON && c.Words == "" && !c.Refuse {
			out := []map[string]string{}
			for _, a := range asked {
				out = append(out, map[string]string{"name": a.Name, "words": a.CheckWords})
			}
			return e.printJSON(map[string]any{"requests": out})
		}
		for _, a := range asked {
			switch {
			case c.Refuse:
				if err := sh.Refuse(e.ctx, who, c.Folder, a); err != nil {
					return err
				}
				e.say("%s", words.T("%s was refused", a.Name))
			case c.Words == "":
				e.say("%s: %s", a.Name, a.CheckWords)
			case strings.EqualFold(strings.Join(strings.Fields(c.Words), " "), strings.Join(strings.Fields(a.CheckWords), " ")):
				if err := sh.Admit(e.ctx, who, c.Folder, a); err != nil {
					return err
				}
				if _, err := sh.Folder(e.ctx, c.Folder, e.progress()); err != nil {
					return err
				}
				e.say("%s", words.T("%s belongs to the practice now", a.Name))
				return nil
			}
		}
		if c.Words != "" && !c.Refuse {
			return errors.New(words.T("no request has these check words; if they differ on the two screens, refuse with --refuse"))
		}
		return nil
	})
}

// removeCmd takes a device out of the practice.
type removeCmd struct {
	Device   string `arg:"" help:"Name or key of the device, as devices prints it."`
	Reason   string `required:"" help:"Why."`
	Examiner string `help:"Who removes it."`
	sheetFlag
}

func (c *removeCmd) Run(e *env) error {
	return e.shared(c.sheetFlag, func(sh *share.Share) error {
		var hits []member.Device
		for _, d := range sh.List.Devices() {
			if d.Member() && (strings.EqualFold(d.Name, c.Device) || len(c.Device) >= 8 && strings.HasPrefix(d.Verifier.String(), strings.ToLower(c.Device))) {
				hits = append(hits, d)
			}
		}
		if len(hits) != 1 {
			return errors.New(words.N(len(hits), "%d device is called %q; name it by its key", "%d devices are called %q; name one by its key", len(hits), c.Device))
		}
		who, err := e.examiner(sh.Store, c.Examiner)
		if err != nil {
			return err
		}
		if err := sh.Remove(e.ctx, who, hits[0].Verifier, c.Reason); err != nil {
			return err
		}
		e.say("%s", words.T("%s is removed; the practice uses a new key from now on. Entries that it made before and that have not arrived yet are kept apart when they come.", hits[0].Name))
		return nil
	})
}

// auditCmd shows who did what.
type auditCmd struct {
	Since string `help:"From this day on." placeholder:"DATE"`
}

func (c *auditCmd) Run(e *env) error {
	var since time.Time
	if c.Since != "" {
		d, err := exam.ParseDate(c.Since)
		t, ok := d.Time()
		if err != nil || !ok {
			return usage("--since: %s", words.T("use a day such as 2026-03-02"))
		}
		since = t.Add(-12 * time.Hour)
	}
	return e.with(func(s *storage.Store) error {
		list, err := audit.Read(e.ctx, s, since)
		if err != nil {
			return err
		}
		views, err := audit.OpenViews(s, nil)
		if err != nil {
			return err
		}
		list = append(list, views.All(since)...)
		slices.SortStableFunc(list, func(a, b audit.Entry) int { return a.At.Compare(b.At) })
		if e.c.JSON {
			return e.printJSON(map[string]any{"entries": some(list)})
		}
		e.protection(s)
		w := tabwriter.NewWriter(e.out, 0, 4, 2, ' ', 0)
		for _, x := range list {
			name := ""
			if !x.Patient.IsZero() {
				name = x.Patient.String()
				if r, err := s.Patient(x.Patient); err == nil {
					name = r.Patient.Name
				}
			}
			fmt.Fprintf(w, "%s\t%s\t%s\t%s\t%s\n", x.At.Format("2006-01-02 15:04:05"), x.Examiner, words.Of(string(x.Did)), name, auditWords(x))
		}
		return w.Flush()
	})
}

// backupCmd makes a backup.
type backupCmd struct {
	Folder   string `arg:"" help:"Folder for the backup file."`
	Daily    bool   `help:"For a timer: make one only where none of today is there, and let old ones go as --tidy does."`
	Tidy     bool   `help:"Remove old backups there: 7 daily, 5 weekly and 12 monthly ones stay."`
	Examiner string `help:"Who makes it."`
	sheetFlag
}

func (c *backupCmd) Run(e *env) error {
	return e.shared(c.sheetFlag, func(sh *share.Share) error {
		to, check, err := sh.BackupKeys()
		if err != nil {
			return err
		}
		who, err := e.examiner(sh.Store, c.Examiner)
		if err != nil {
			return err
		}
		o := backup.Options{Progress: e.progress()}
		var file string
		if c.Daily {
			file, err = backup.Scheduled(e.ctx, sh.Store, c.Folder, to, check, o)
		} else {
			file, err = backup.Make(e.ctx, sh.Store, c.Folder, to, check, o)
		}
		if file != "" {
			err = errors.Join(err, audit.Write(e.ctx, sh.Store, who, audit.BackedUp, filepath.Base(file)))
		}
		if err == nil && c.Tidy && !c.Daily {
			err = backup.Tidy(e.ctx, c.Folder, check, o)
		}
		if err != nil {
			return err
		}
		held, err := e.holding(sh, c.Folder)
		if err != nil {
			return err
		}
		if e.c.JSON {
			return e.printJSON(map[string]any{"file": file, "still_holding": held})
		}
		if file == "" {
			e.say("%s", words.T("Today's backup is there already."))
		} else {
			e.say("%s", words.T("Backup written and read back: %s", file))
		}
		e.sayHolding(held)
		return nil
	})
}

// holdingJSON is a backup that still holds what owners asked to be erased.
type holdingJSON struct {
	File   string    `json:"file"`
	Made   time.Time `json:"made"`
	Owners []exam.ID `json:"owners"`
}

// holding says which backups of a folder can still show an owner's data that were erased on request. Backups that this
// device cannot open are told beside it.
func (e *env) holding(sh *share.Share, folder string) ([]holdingJSON, error) {
	_, check, err := sh.BackupKeys()
	if err != nil {
		return nil, err
	}
	held, err := backup.Erased(e.ctx, sh.Store, folder, check, backup.Options{})
	if e.ctx.Err() != nil {
		return nil, e.ctx.Err()
	}
	if err != nil {
		e.warn(words.T("Note: %s", err.Error()))
	}
	out := []holdingJSON{}
	for _, h := range held {
		out = append(out, holdingJSON(h))
	}
	return out, nil
}

func (e *env) sayHolding(held []holdingJSON) {
	for _, h := range held {
		n := len(h.Owners)
		e.say("%s", words.N(n, "%[2]s still holds the data of %[1]d owner that were erased on request; remove it once a newer backup serves", "%[2]s still holds the data of %[1]d owners that were erased on request; remove it once a newer backup serves", n, h.File))
	}
}

// restoreCmd makes a practice out of a backup.
type restoreCmd struct {
	File          string `arg:"" help:"Backup file."`
	RecoverySheet string `required:"" help:"File with the recovery key." placeholder:"FILE"`
	Rekey         bool   `help:"The old passphrase or key file is lost: lock the restored practice as --key-file, --passphrase-fd or --no-passphrase says now."`
	Name          string `help:"With --rekey: name of this device."`
}

func (c *restoreCmd) Run(e *env) error {
	dir, err := e.storeDir()
	if err != nil {
		return err
	}
	if !isNew(dir) {
		return fmt.Errorf("%s", words.T("%s is not empty; a backup is restored into a new folder", dir))
	}
	id, err := readSheet(c.RecoverySheet)
	if err != nil {
		return err
	}
	u, err := e.unlock(true)
	if err != nil {
		return err
	}
	o := backup.Options{Progress: e.progress()}
	var got backup.Contents
	if c.Rekey {
		name := c.Name
		if name == "" {
			name = "restored-" + storage.NewID().String()[24:]
		}
		if got, err = backup.Extract(e.ctx, c.File, []age.Identity{id}, dir, o); err == nil {
			err = share.Recover(dir, e.options(u), id, name, share.Options{})
		}
	} else {
		got, err = backup.Restore(e.ctx, c.File, []age.Identity{id}, dir, e.options(u), o)
	}
	if err != nil {
		removeContents(dir, true)
		return err
	}
	if e.c.JSON {
		return e.printJSON(map[string]any{"made": got.Made, "device": got.Device, "files": got.Files})
	}
	e.say("%s", words.T("Restored from the backup of %s: %d files. It goes on under a new device number.", got.Made.Format("2006-01-02 15:04"), got.Files))
	return nil
}
