package desk

import (
	"context"
	"errors"
	"os"
	"path/filepath"
	"sync"
	"time"

	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/audit"
	"cordwalk.example/cordwalk/sync/backup"
	"cordwalk.example/cordwalk/sync/share"
)

// When backups are made by themselves (common practice: not while the program starts, and soon after midnight or
// after a disk was put in).
const (
	firstBackup = time.Minute
	nextBackup  = 20 * time.Minute
)

// keeping makes the day's backup by itself, where a folder for backups was chosen. A folder that hangs, as a network
// share may, holds up nothing: nobody waits for it, and no second try is begun meanwhile.
type keeping struct {
	timer *time.Timer

	mu      sync.Mutex
	running bool
	since   time.Time
	stop    context.CancelFunc // of the backup that is being made
	done    chan struct{}      // closed when it is over
	said    string             // what the last one came to, for the Devices page; empty before the first
	failed  bool               // the last one was not made
	toldOn  string             // day and reason of the last failure that was told below the page
}

// founded reports whether a store's practice has a list of devices.
func founded(s *storage.Store) bool {
	_, err := os.Stat(filepath.Join(s.Dir(), "members"))
	return err == nil
}

// keepSafe begins to make backups by itself; it is called when a practice was opened.
func (a *App) keepSafe() {
	if a.keep.timer != nil {
		a.keep.timer.Stop()
	}
	a.keep.timer = time.AfterFunc(firstBackup, func() { a.onUI(a.backUpSometime) })
}

// backUpSometime makes the day's backup if one is due, and looks again later.
func (a *App) backUpSometime() {
	if a.ctx.Err() != nil {
		return
	}
	a.backUp(false)
	a.keep.timer.Reset(nextBackup)
}

// backUp makes a backup in the background: now, or the day's where it is wanted and due. It reports whether one was begun.
func (a *App) backUp(now bool) bool {
	r, ok := a.records.(stored)
	place, who := a.settings.Backups, a.examiner
	if !ok || place == "" || a.practice.Demo || !now && a.settings.ByHand || !founded(r.Store()) {
		return false
	}
	k := &a.keep
	k.mu.Lock()
	defer k.mu.Unlock()
	if k.running {
		return false
	}
	ctx, stop := context.WithCancel(a.ctx)
	saver, at := a.saver, a.now
	k.running, k.stop, k.done, k.since = true, stop, make(chan struct{}), at()
	go func() {
		file, held, err := func() (string, []string, error) {
			if err := saver.Flush(ctx); err != nil {
				return "", nil, err
			}
			sh, _, err := a.album.share(ctx, r.Store())
			if err != nil {
				return "", nil, err
			}
			return makeBackup(ctx, sh, place, who, now, at)
		}()
		stop()
		k.mu.Lock()
		k.running = false
		close(k.done)
		k.mu.Unlock()
		if a.ctx.Err() == nil {
			a.onUI(func() { a.backedUp(file, held, err) })
		}
	}()
	return true
}

// makeBackup makes one backup and says which ones still hold what was erased.
func makeBackup(ctx context.Context, sh *share.Share, place, who string, now bool, at func() time.Time) (file string, held []string, err error) {
	to, check, err := sh.BackupKeys()
	if err != nil {
		return "", nil, err
	}
	o := backup.Options{Now: at}
	if now {
		file, err = backup.Make(ctx, sh.Store, place, to, check, o)
	} else {
		file, err = backup.Scheduled(ctx, sh.Store, place, to, check, o)
	}
	if file != "" {
		err = errors.Join(err, audit.Write(ctx, sh.Store, who, audit.BackedUp, filepath.Base(file)))
	}
	if err != nil {
		return file, nil, err
	}
	holding, err := backup.Erased(ctx, sh.Store, place, check, o)
	for _, h := range holding {
		n := len(h.Owners)
		held = append(held, words.N(n, "%[2]s still holds the data of %[1]d owner that were erased on request; remove it once a newer backup serves", "%[2]s still holds the data of %[1]d owners that were erased on request; remove it once a newer backup serves", n, h.File))
	}
	if err != nil {
		held = append(held, sentence(err.Error()))
	}
	return file, held, ctx.Err()
}

// backedUp says what a backup came to: on the Devices page, and quietly below the page where one was not made.
func (a *App) backedUp(file string, held []string, err error) {
	k := &a.keep
	k.mu.Lock()
	k.failed = err != nil
	at := a.now()
	switch {
	case err != nil:
		k.said = words.T("The backup of %[1]s was not made: %[2]s", view.Day(at)+" "+at.Format("15:04"), sentence(err.Error()))
		day := string(exam.DayOf(at)) + err.Error()
		if k.toldOn != day && len(a.windows) > 0 { // once a day for each reason
			k.toldOn = day
			a.windows[0].foot.say(words.T("Today's backup could not be made: see Devices."))
		}
	case file != "":
		k.said = words.T("Backup written and read back: %s", file)
	case k.said == "":
		k.said = words.T("Today's backup is there already.")
	}
	k.mu.Unlock()
	for _, w := range a.windows {
		if p, ok := w.page.(*devicesPage); ok {
			p.held = held
			p.build()
		}
	}
}

// endKeeping waits a little for a backup under way; one that hangs is left behind and leaves a file that is no backup.
func (a *App) endKeeping() {
	k := &a.keep
	if k.timer != nil {
		k.timer.Stop()
	}
	k.mu.Lock()
	running, stop, done := k.running, k.stop, k.done
	k.mu.Unlock()
	if !running {
		return
	}
	stop()
	select {
	case <-done:
	case <-time.After(closeWait):
	}
}
