// Package share brings a store and its practice together: it keeps the list of devices beside the
// store, hands new keys and limits to it, and runs exchanges.
//
// Everything that joins, leaves or exports is written into the record as an audit entry by the
// examiner who did it.
package share

import (
	"context"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"time"

	"filippo.io/age"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/attach"
	"cordwalk.example/cordwalk/sync/audit"
	"cordwalk.example/cordwalk/sync/carry"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/member"
	"cordwalk.example/cordwalk/sync/segment"
)

const (
	membersDir = "members"
	rootFile   = "root"
	invitesDir = "invites"
	memberExt  = ".member"
)

// Share is an open store with the list of the practice's devices.
type Share struct {
	*storage.Store
	List *member.List
	// Files are exchanged with the records where they are set; see package attach.
	Files carry.Attachments

	at      string   // the store's folder
	damaged []string // see Damaged
	fs      disk.FS
	now     func() time.Time
	mu      sync.Mutex // one exchange, join or removal at a time

	setting sync.Mutex // while keys and limits are handed to the store
}

// Options of a Share.
type Options struct {
	FS  disk.FS          // nil: the real file system
	Now func() time.Time // nil: time.Now
}

func (o Options) withDefaults() Options {
	if o.FS == nil {
		o.FS = disk.OS()
	}
	if o.Now == nil {
		o.Now = time.Now
	}
	return o
}

// Open reads the list of devices that lies beside a store. The first time it founds the practice
// with this device; then recovery is what belongs on the recovery sheet and is kept nowhere else.
// It is nil otherwise. It comes with an error where it is not known whether the practice was founded: keep it then too.
func Open(ctx context.Context, s *storage.Store, o Options) (sh *Share, recovery *age.X25519Identity, err error) {
	o = o.withDefaults()
	sh = &Share{Store: s, at: s.Dir(), fs: o.FS, now: o.Now}
	root, err := disk.ReadFile(o.FS, sh.path(rootFile), 128)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		if sh.List, recovery, err = member.Establish(s.Bag(), s.Device(), s.Incarnation(), sh.clock()); err != nil {
			return nil, nil, err
		}
		if err := sh.keepStatements(sh.List); err != nil {
			return nil, nil, err
		}
	case err != nil:
		return nil, nil, fmt.Errorf("reading the list of devices: %w", err)
	default:
		if err := sh.readList(root); err != nil {
			return nil, nil, err
		}
	}
	sh.List.OnLearn(sh.save)
	if err := sh.settle(ctx); err != nil {
		return nil, nil, err
	}
	if recovery == nil {
		return sh, nil, nil
	}
	// The practice is founded when the root is kept, and not before: until then the next opening founds it anew,
	// with another recovery sheet.
	if err := sh.keepRoot(sh.List); err != nil {
		if rerr := sh.fs.Remove(sh.path(rootFile)); rerr == nil || errors.Is(rerr, fs.ErrNotExist) {
			recovery = nil
		}
		return nil, recovery, err
	}
	return sh, recovery, nil
}

// settle brings keys and limits in step with the list, and the list with what this device began.
func (sh *Share) settle(ctx context.Context) error {
	if err := sh.refresh(ctx); err != nil { // its own keys come first
		return err
	}
	if err := sh.List.Finish(sh.Bag(), sh.clock()); err != nil {
		return err
	}
	return sh.refresh(ctx)
}

func (sh *Share) path(names ...string) string { return folder(sh.at, names...) }

// folder returns a path in the folder of the list of devices.
func folder(dir string, names ...string) string {
	return filepath.Join(append([]string{dir, membersDir}, names...)...)
}

func (sh *Share) clock() change.HLC { return change.HLCAt(sh.now()) }

// keep writes a whole list beside the store, the root last.
func (sh *Share) keep(l *member.List) error {
	if err := sh.keepStatements(l); err != nil {
		return err
	}
	return sh.keepRoot(l)
}

func (sh *Share) keepStatements(l *member.List) error {
	for _, raw := range l.Statements() {
		if err := sh.save(raw); err != nil {
			return err
		}
	}
	return nil
}

// keepRoot says which statement the list begins with.
func (sh *Share) keepRoot(l *member.List) error {
	id := l.Root()
	if err := disk.Replace(sh.fs, sh.path(rootFile), []byte(hex.EncodeToString(id[:])+"\n")); err != nil {
		return fmt.Errorf("keeping the list of devices: %w", err)
	}
	return nil
}

// save keeps one statement.
func (sh *Share) save(raw []byte) error {
	s, err := member.Parse(raw)
	if err != nil {
		return err
	}
	if err := sh.fs.MakeDir(sh.path()); err != nil {
		return fmt.Errorf("keeping the list of devices: %w", err)
	}
	if err := disk.Replace(sh.fs, sh.path(statementFile(s)), raw); err != nil {
		return fmt.Errorf("keeping the list of devices: %w", err)
	}
	return nil
}

// readList reads the list of devices that begins with the statement that root names. Where the root is damaged it is
// the only founding statement there.
func (sh *Share) readList(root []byte) error {
	raws, founding, err := sh.load()
	if err != nil {
		return err
	}
	id, err := parseRoot(root)
	if (err != nil || !slices.Contains(founding, id)) && len(founding) == 1 {
		id, err = founding[0], nil
	}
	if err != nil {
		return fmt.Errorf("reading the list of devices: %s is damaged; restore it from a backup", sh.path(rootFile))
	}
	sh.List = member.NewList(id)
	_, err = sh.List.Learn(raws)
	return err
}

// load reads the statements beside the store, and which of them found a practice.
func (sh *Share) load() (raws [][]byte, founding []member.ID, err error) {
	es, err := sh.fs.List(sh.path())
	if err != nil {
		return nil, nil, fmt.Errorf("reading the list of devices: %w", err)
	}
	for _, e := range es {
		if e.Dir || !strings.HasSuffix(e.Name, memberExt) {
			continue
		}
		if e.Size > member.MaxStatement {
			sh.damaged = append(sh.damaged, e.Name)
			continue
		}
		b, err := disk.ReadFile(sh.fs, sh.path(e.Name), member.MaxStatement)
		if err != nil {
			return nil, nil, fmt.Errorf("reading the list of devices: %w", err)
		}
		s, err := member.Parse(b)
		if err != nil || statementFile(s) != e.Name {
			sh.damaged = append(sh.damaged, e.Name)
			continue
		}
		raws = append(raws, b)
		if s.Kind == member.Found {
			founding = append(founding, s.ID())
		}
	}
	return raws, founding, nil
}

// Damaged returns the files of the list of devices that could not be read when it was opened and that no exchange has
// brought back since. Until then nothing new is set apart: it would be judged by half a list.
func (sh *Share) Damaged() []string {
	if len(sh.damaged) == 0 {
		return nil
	}
	there := map[string]bool{}
	for _, raw := range sh.List.Statements() {
		if s, err := member.Parse(raw); err == nil {
			there[statementFile(s)] = true
		}
	}
	return slices.DeleteFunc(slices.Clone(sh.damaged), func(name string) bool { return there[name] })
}

// Signer implements carry.Members.
func (sh *Share) Signer(i change.Incarnation) (key.Verifier, bool) { return sh.List.Signer(i) }

// Statements implements carry.Members.
func (sh *Share) Statements() [][]byte { return sh.List.Statements() }

// Learn implements carry.Members: what is new is kept, and keys and limits follow at once.
func (sh *Share) Learn(raws [][]byte) (bool, error) {
	fresh, err := sh.List.Learn(raws)
	if err != nil || !fresh {
		return fresh, err
	}
	return true, sh.refresh(context.Background())
}

// refresh hands what the list says to the store: keys of new epochs, the limits of devices that were
// removed; and says under which name this device writes.
func (sh *Share) refresh(ctx context.Context) error {
	sh.setting.Lock()
	defer sh.setting.Unlock()
	bag := sh.Bag()
	ring, err := sh.List.Ring(bag.Device.Identity(), bag.Ring)
	if err != nil {
		return err
	}
	if err := sh.SetKeys(ring); err != nil {
		return err
	}
	held, err := sh.Streams(ctx)
	if err != nil {
		return err
	}
	// Half a list would take members for strangers and set apart all that they wrote.
	if len(sh.Damaged()) == 0 && !sh.List.Practice().IsZero() {
		limits, err := Limits(ctx, sh.List, sh.Store, held)
		if err != nil {
			return err
		}
		if err := sh.SetLimits(ctx, limits); err != nil {
			return err
		}
	}
	return sh.announce()
}

// announce tells the others under which names this device writes. A device that was removed cannot;
// what it writes is kept by the others in quarantine.
func (sh *Share) announce() error {
	for _, i := range sh.Lives() {
		if err := sh.List.Announce(sh.Bag(), i, sh.clock()); err != nil && !errors.Is(err, member.ErrNotMember) {
			return err
		}
	}
	return nil
}

// Renew implements carry.Journal and tells the others the new name.
func (sh *Share) Renew(ctx context.Context) error {
	if err := sh.Store.Renew(ctx); err != nil {
		return err
	}
	return sh.announce()
}

// Commit implements carry.Journal. What comes of a device that was removed may change which branch of
// a stream counts, or be one that nobody knew of.
func (sh *Share) Commit(ctx context.Context, as change.Stream, head *segment.Signed) error {
	if err := sh.Store.Commit(ctx, as, head); err != nil {
		return err
	}
	of := as
	if head != nil {
		of = head.Stream
	}
	if _, limited := sh.List.Limit(of); !limited {
		return nil
	}
	return sh.refresh(ctx)
}

// Member reports whether this device still belongs to the practice.
func (sh *Share) Member() bool {
	d, ok := sh.List.Device(sh.Bag().Device.Verifier())
	return ok && d.Member()
}

// BackupKeys returns to whom backups are sealed, this device and the recovery sheet, and what reads them back here.
func (sh *Share) BackupKeys() (to []age.Recipient, check []age.Identity, err error) {
	list := []string{sh.Bag().Device.Recipient()}
	if r := sh.List.Recovery(); r != "" {
		list = append(list, r)
	}
	for _, r := range list {
		x, err := age.ParseX25519Recipient(r)
		if err != nil {
			return nil, nil, fmt.Errorf("finding out who may open a backup: %w", err)
		}
		to = append(to, x)
	}
	return to, []age.Identity{sh.Bag().Device.Identity()}, nil
}

// Folder exchanges with a folder.
func (sh *Share) Folder(ctx context.Context, place string, progress func(what string, done, total int64)) (carry.Report, error) {
	sh.mu.Lock()
	defer sh.mu.Unlock()
	r, err := carry.Sync(ctx, place, carry.Options{Bag: sh.Bag, Incarnation: sh.Incarnation, Journal: sh, Members: sh, Files: sh.Files, FS: sh.fs, Now: sh.now, Progress: progress})
	if err == nil && r.Received > 0 {
		err = sh.refresh(ctx) // streams that are new to us may be limited
	}
	if err == nil {
		err = sh.remember(r)
	}
	return r, err
}

// Invite makes an invitation and leaves it in a folder. The code is told to the other person by
// voice; it is shown once.
func (sh *Share) Invite(ctx context.Context, examiner, folder string, valid time.Duration) (code string, err error) {
	sh.mu.Lock()
	defer sh.mu.Unlock()
	inv, code, err := member.NewInvite(sh.List, sh.Bag(), sh.Site(), sh.Device(), sh.now().Add(valid))
	if err != nil {
		return "", err
	}
	if err := sh.keepInvite(inv); err != nil {
		return "", err
	}
	if err := carry.LeaveLetter(sh.fs, folder, carry.Letter{Practice: sh.Bag().Practice, Name: inv.FileName(), Data: inv.File()}); err != nil {
		return "", err
	}
	return code, audit.Write(ctx, sh.Store, examiner, audit.Invited, "until "+inv.Expires().UTC().Format(time.RFC3339))
}

// An open invitation is kept sealed, so that the answer can be taken after a restart.
func (sh *Share) keepInvite(i *member.Invite) error {
	if err := sh.fs.MakeDir(sh.path()); err != nil {
		return fmt.Errorf("keeping the invitation: %w", err)
	}
	if err := sh.fs.MakeDir(sh.path(invitesDir)); err != nil {
		return fmt.Errorf("keeping the invitation: %w", err)
	}
	k := sh.Bag().Ring.Index().Derive("invitations")
	if err := disk.Replace(sh.fs, sh.path(invitesDir, i.FileName()), k.Seal(i.Secret(), []byte(i.FileName()))); err != nil {
		return fmt.Errorf("keeping the invitation: %w", err)
	}
	return nil
}

// Asked is a request to join that fits an open invitation of this device.
type Asked struct {
	member.Joiner
	letter carry.Letter
	invite string
}

// Requests looks in a folder for requests that fit this device's open invitations. For each
// invitation the first valid request counts and uses it up. Compare the check words before Admit.
func (sh *Share) Requests(ctx context.Context, folder string) ([]Asked, []string, error) {
	sh.mu.Lock()
	defer sh.mu.Unlock()
	letters, err := carry.Letters(sh.fs, folder, ".request")
	if err != nil {
		return nil, nil, err
	}
	es, err := sh.fs.List(sh.path(invitesDir))
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil, nil
	}
	if err != nil {
		return nil, nil, fmt.Errorf("reading the open invitations: %w", err)
	}
	k := sh.Bag().Ring.Index().Derive("invitations")
	var out []Asked
	var refused []string
	for _, e := range es {
		sealed, err := disk.ReadFile(sh.fs, sh.path(invitesDir, e.Name), 64<<10)
		if err != nil {
			return nil, nil, fmt.Errorf("reading the open invitations: %w", err)
		}
		plain, err := k.Open(sealed, []byte(e.Name))
		if err != nil {
			continue
		}
		inv, err := member.ResumeInvite(plain)
		if err != nil {
			continue
		}
		id := strings.TrimSuffix(inv.FileName(), ".invite")
		for _, l := range letters {
			if !strings.HasPrefix(l.Name, id) || l.Practice != sh.Bag().Practice {
				continue
			}
			j, err := inv.Take(l.Data, sh.now())
			if err != nil {
				refused = append(refused, fmt.Sprintf("a request to join (%s) was refused: %s", l.Name, err))
				continue
			}
			out = append(out, Asked{j, l, e.Name})
		}
	}
	return out, refused, nil
}

// Admit lets a device in after a person compared the check words. Its answer is in the folder after
// the next exchange.
func (sh *Share) Admit(ctx context.Context, examiner, folder string, a Asked) error {
	sh.mu.Lock()
	defer sh.mu.Unlock()
	if err := sh.dropInvite(a.invite); err != nil {
		return err
	}
	if err := sh.List.AdmitJoiner(sh.Bag(), a.Joiner, sh.clock()); err != nil {
		return err
	}
	_ = carry.TakeAway(sh.fs, folder, a.letter)
	_ = carry.TakeAway(sh.fs, folder, carry.Letter{Practice: a.letter.Practice, Name: a.invite})
	return audit.Write(ctx, sh.Store, examiner, audit.Joined, a.Name)
}

// Refuse uses an invitation up without letting anybody in: the check words differed.
func (sh *Share) Refuse(ctx context.Context, examiner, folder string, a Asked) error {
	sh.mu.Lock()
	defer sh.mu.Unlock()
	if err := sh.dropInvite(a.invite); err != nil {
		return err
	}
	_ = carry.TakeAway(sh.fs, folder, a.letter)
	_ = carry.TakeAway(sh.fs, folder, carry.Letter{Practice: a.letter.Practice, Name: a.invite})
	return audit.Write(ctx, sh.Store, examiner, audit.Refused, a.Name)
}

func (sh *Share) dropInvite(name string) error {
	if err := sh.fs.Remove(sh.path(invitesDir, name)); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return fmt.Errorf("using up the invitation: %w", err)
	}
	return sh.fs.SyncDir(sh.path(invitesDir))
}

// Remove takes a device out of the practice. What this device holds of it now still counts; what
// it writes later is kept apart on every device, and from now on the practice uses a new key.
func (sh *Share) Remove(ctx context.Context, examiner string, device key.Verifier, reason string) error {
	sh.mu.Lock()
	defer sh.mu.Unlock()
	held, err := sh.Streams(ctx)
	if err != nil {
		return err
	}
	var accepted []member.Accepted
	for _, h := range held {
		if v, ok := sh.List.Signer(h.Of.Device); ok && v == device && len(h.Spans) > 0 {
			x := h.Of
			if h.Hash == (change.Hash{}) { // its last frame cannot be read here: the number alone counts
				x = h.Stream
			}
			accepted = append(accepted, member.Accepted{Device: x.Device, Site: x.Site, Last: h.Last, Hash: h.Hash})
		}
	}
	d, _ := sh.List.Device(device)
	ring, err := sh.List.Remove(sh.Bag(), device, reason, accepted, sh.clock())
	if err != nil {
		return err
	}
	if err := sh.SetKeys(ring); err != nil {
		return err
	}
	if err := sh.refresh(ctx); err != nil {
		return err
	}
	return audit.Write(ctx, sh.Store, examiner, audit.Removed, d.Name+": "+reason)
}

// Confirm settles removals that contradict each other.
func (sh *Share) Confirm(ctx context.Context, examiner string, removal member.ID) error {
	sh.mu.Lock()
	defer sh.mu.Unlock()
	ring, err := sh.List.Confirm(sh.Bag(), removal, sh.clock())
	if err != nil {
		return err
	}
	if err := sh.SetKeys(ring); err != nil {
		return err
	}
	if err := sh.refresh(ctx); err != nil {
		return err
	}
	return audit.Write(ctx, sh.Store, examiner, audit.Confirmed, removal.String())
}

// Join makes a new store in dir for a device that asked to join and was let in. It fails with
// change.ErrNoKey while no answer lies in the folder.
func Join(ctx context.Context, dir, folder string, j *member.Joining, inc change.Incarnation, so storage.Options, o Options) (*Share, error) {
	o = o.withDefaults()
	statements, err := carry.Statements(o.FS, folder, j.Practice())
	if err != nil {
		return nil, err
	}
	bag, list, err := j.Complete(statements)
	if err != nil {
		return nil, err
	}
	s, err := storage.CreateJoined(dir, so, bag, j.Site(), inc)
	if err != nil {
		return nil, err
	}
	sh := &Share{Store: s, at: s.Dir(), List: list, fs: o.FS, now: o.Now}
	// Owners' contact data can be read only with keys that travel as files do.
	if sh.Files, err = attach.Open(ctx, s, o.FS); err != nil {
		return nil, errors.Join(err, s.Close())
	}
	if err := sh.keep(list); err != nil {
		return nil, errors.Join(err, s.Close())
	}
	list.OnLearn(sh.save)
	if _, err := sh.Folder(ctx, folder, nil); err != nil {
		return nil, errors.Join(err, s.Close())
	}
	return sh, nil
}
