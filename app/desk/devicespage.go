package desk

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"time"

	"filippo.io/age"
	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/audit"
	"cordwalk.example/cordwalk/sync/backup"
	"cordwalk.example/cordwalk/sync/member"
	"cordwalk.example/cordwalk/sync/share"
)

// stored is what the devices' page needs beyond Records: the store itself. Records made for tests
// may do without.
type stored interface{ Store() *storage.Store }

// devicesPage answers: is everything safe and shared?
type devicesPage struct {
	win    *window
	root   *fyne.Container
	body   *mark.Scroll
	share  *share.Share
	store  *storage.Store
	asked  []share.Asked
	report []string // what the last exchange or backup did
	code   string   // of an invitation just made; shown once
	busy   bool
	gone   bool
	open   []unchosen // animals with values to choose between
}

func newDevicesPage(w *window) *devicesPage {
	p := &devicesPage{win: w, body: mark.NewScroll(mark.Column(0))}
	if s, ok := w.app.records.(stored); ok {
		p.store = s.Store()
	}
	p.root = mark.Pad(look.Unit*1.5, look.Unit*2, mark.ColumnGrow(look.Unit*2, 1, mark.Title(words.T("Devices")).AtLeast(80), p.body))
	p.build()
	if p.store != nil {
		p.findChoices()
	}
	if p.store != nil && p.founded() {
		p.do(func(ctx context.Context) (func(), error) {
			sh, _, err := p.openShare(ctx)
			return func() { p.share = sh }, err
		})
	}
	return p
}

func (p *devicesPage) content() fyne.CanvasObject { return p.root }
func (p *devicesPage) shown()                     { p.win.win.Canvas().Unfocus() }
func (p *devicesPage) left()                      { p.gone = true; p.win.app.keepSettings() }

// founded reports whether the practice has a list of devices.
func (p *devicesPage) founded() bool {
	_, err := os.Stat(filepath.Join(p.store.Dir(), "members"))
	return err == nil
}

// do runs something slow, one at a time, and draws the page anew.
func (p *devicesPage) do(what func(ctx context.Context) (func(), error)) {
	if p.busy {
		return
	}
	p.busy = true
	p.win.app.work(func(ctx context.Context) (func(), error) {
		then, err := what(ctx)
		return func() {
			p.busy = false
			if then != nil {
				then()
			}
			if !p.gone {
				p.build()
			}
		}, err
	}, func(err error) {
		p.busy = false
		if !p.gone {
			p.win.fail(sentence(err.Error()), err)
		}
	})
}

func (p *devicesPage) build() {
	r := p.win.app.records
	row := func(icon, name, value string) fyne.CanvasObject {
		return mark.RowTop(look.Unit*2, []float32{0, 1, 2}, mark.Column(0, iconImage(icon, look.Ink, 22)), mark.NewPara(name).In(look.InkSoft), mark.NewPara(value))
	}
	protected := row("lock", words.T("Protection"), words.T("Sealed: only the passphrase or the key file opens the data."))
	if !r.Protected() {
		protected = row("open-lock", words.T("Protection"), words.T("Not protected: the key lies beside the data, so whoever has the folder can read it."))
	}
	parts := []fyne.CanvasObject{section(words.T("This device"),
		row("window", words.T("Name"), r.Device()),
		row("save", words.T("Where the data lie"), r.Place()),
		protected,
		row("tick", words.T("Saved"), p.win.app.saver.State().Words()))}
	switch {
	case p.win.app.practice.Demo:
		parts = append(parts, section(words.T("Other devices"), mark.NewPara(words.T("The demo practice stays on this device: its animals are invented."))))
	case p.store == nil:
	case p.share == nil && !p.founded():
		parts = append(parts, p.found())
	case p.share != nil:
		parts = append(parts, p.exchange(), p.hub(), p.devices(), p.backups())
	}
	if x := p.choices(); x != nil {
		parts = append(parts, x)
	}
	for _, line := range p.report {
		parts = append(parts, mark.NewPara(line))
	}
	p.body.SetContent(mark.AtMost(860, mark.Column(look.Unit*3, parts...)))
}

// found begins sharing: the recovery key is written once and kept nowhere else.
func (p *devicesPage) found() fyne.CanvasObject {
	home, _ := os.UserHomeDir()
	file := mark.NewField(filepath.Join(home, "cordwalk-recovery.txt"), nil)
	begin := mark.NewButton(words.T("Begin to share and back up"), "devices", func() {
		name := strings.TrimSpace(file.Text)
		p.do(func(ctx context.Context) (func(), error) {
			if _, err := os.Stat(name); err == nil {
				return nil, errors.New(words.T("%s is there already; name a new file for the recovery key", name))
			}
			f, err := os.OpenFile(name, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o600)
			if err != nil {
				return nil, fmt.Errorf("%s: %w", words.T("making the recovery sheet"), err)
			}
			sh, recovery, err := p.openShare(ctx)
			if err == nil && recovery != nil {
				_, err = fmt.Fprintf(f, "%s\n%s\n", words.T("Recovery sheet of the practice %s. Whoever holds this key can open its data.", p.store.Bag().Practice), recovery)
			}
			if err == nil {
				err = f.Sync()
			}
			if cerr := f.Close(); err == nil {
				err = cerr
			}
			return func() {
				p.share = sh
				p.report = []string{words.T("Recovery key written to %s: print it, keep it in a safe place, remove the file.", name)}
			}, err
		})
	}).As(mark.Main)
	return section(words.T("Other devices"),
		mark.NewPara(words.T("This practice lies on this device alone. To share it with other devices or to back it up, a recovery key is made first. It opens the data if every device is lost; it is written to a file once and kept nowhere else.")),
		mark.NewLabelled(words.T("File for the recovery key, to be printed"), file), mark.Left(begin))
}

// exchange hands over and takes in by a folder: a stick, a network share, a synchronised folder.
func (p *devicesPage) exchange() fyne.CanvasObject {
	a := p.win.app
	folder := mark.NewField(a.settings.Exchange, func(s string) { a.settings.Exchange = strings.TrimSpace(s) }).Hint(words.T("A stick, a network share, or a folder that another program synchronises"))
	now := mark.NewButton(words.T("Exchange now"), "devices", func() {
		place := a.settings.Exchange
		if place == "" {
			p.win.foot.fail(words.T("Name the folder first."), nil)
			return
		}
		p.do(func(ctx context.Context) (func(), error) {
			if err := a.saver.Flush(ctx); err != nil {
				return nil, err
			}
			r, err := p.share.Folder(ctx, place, nil)
			if err != nil {
				return nil, err
			}
			at := a.now()
			lines := []string{words.T("%d taken in, %d handed over", r.Received, r.Sent)}
			for _, peer := range r.Peers {
				name := p.share.List.NameOf(peer.Device)
				switch {
				case peer.Differs:
					lines = append(lines, words.T("%s: its records differ from ours although it has the same entries", name))
				case peer.Ahead:
					lines = append(lines, words.T("%s: its clock runs more than a day ahead", name))
				}
			}
			for _, x := range r.Waiting {
				lines = append(lines, words.T("entries %d to %d of %s are not here yet: %s", x.First, x.Last, p.share.List.NameOf(x.Stream.Device), x.Why))
			}
			lines = append(lines, r.Problems...)
			if n := len(r.Forks); n > 0 {
				lines = append(lines, words.N(n, "%d device was copied and both copies were used; both branches are kept", "%d devices were copied and both copies were used; both branches are kept", n))
			}
			if r.Blocked != nil {
				lines = append(lines, words.T("Nothing could be left there: %s", r.Blocked.Error()))
			}
			asked, refused, err := p.share.Requests(ctx, place)
			if err != nil {
				return nil, err
			}
			lines = append(lines, refused...)
			return func() {
				p.asked = asked
				if r.Blocked == nil {
					a.shared = at
				}
				p.report = lines
				p.findChoices()
				p.win.strip.update()
				p.win.foot.say(lines[0])
			}, nil
		})
	}).As(mark.Main)
	last := words.T("Not exchanged since the program was started.")
	if !a.shared.IsZero() {
		last = words.T("Exchanged %s at %s.", view.Day(a.shared), a.shared.Format("15:04"))
	}
	return section(words.T("Exchange by a folder"), mark.NewLabelled(words.T("Folder"), folder), mark.Row(look.Unit*2, []float32{0, 1}, now, mark.NewPara(last).In(look.InkSoft)))
}

// devices lists who belongs to the practice, asks in others and lets them in.
func (p *devicesPage) devices() fyne.CanvasObject {
	a := p.win.app
	var lines []fyne.CanvasObject
	for _, x := range p.share.List.Devices() {
		d := x
		note := words.T("belongs to the practice")
		switch {
		case d.Verifier == p.store.Bag().Device.Verifier():
			note = words.T("this device")
		case len(d.Removals) > 0:
			note = words.T("removed: %s", d.Removals[0].Reason)
		case d.Disputed:
			note = words.T("let in by a device that was removed at the same time")
		}
		row := []fyne.CanvasObject{mark.NewPara(d.Name).Strong(), mark.NewPara(note).In(look.InkSoft)}
		if d.Member() && d.Verifier != p.store.Bag().Device.Verifier() {
			row = append(row, mark.NewButton(words.T("Remove"), "close", func() { p.askRemove(d) }).As(mark.Quiet))
		}
		lines = append(lines, mark.Row(look.Unit, []float32{1, 2, 0}, row...), mark.Rule())
	}
	for _, x := range p.asked {
		r := x
		lines = append(lines, mark.On(look.FocusBed, false, mark.Pad(look.Unit, look.Unit, mark.Column(look.Unit,
			mark.NewPara(words.T("%s asks to join. Both screens must show the same words: %s", r.Name, r.CheckWords)).Strong(),
			mark.Wrapped(look.Unit,
				mark.NewButton(words.T("The words agree: let it in"), "tick", func() { p.answer(r, true) }),
				mark.NewButton(words.T("They differ: refuse"), "close", func() { p.answer(r, false) }))))))
	}
	invite := mark.NewButton(words.T("Invite a device"), "add", func() {
		place := a.settings.Exchange
		if place == "" {
			p.win.foot.fail(words.T("Name the folder first."), nil)
			return
		}
		who := a.examiner
		p.do(func(ctx context.Context) (func(), error) {
			code, err := p.share.Invite(ctx, who, place, 24*time.Hour)
			return func() { p.code = code }, err
		})
	})
	lines = append(lines, mark.Left(invite))
	if p.code != "" {
		lines = append(lines, mark.NewPara(p.code).As(look.Title).Strong(),
			mark.NewPara(words.T("Tell this code by voice and never send it with the invitation. The other device chooses «Join a practice» at its first start. Then exchange here to see who asks.")))
	}
	return section(words.T("Devices of the practice"), lines...)
}

func (p *devicesPage) answer(r share.Asked, yes bool) {
	a := p.win.app
	place, who := a.settings.Exchange, a.examiner
	p.do(func(ctx context.Context) (func(), error) {
		var err error
		if yes {
			if err = p.share.Admit(ctx, who, place, r); err == nil {
				_, err = p.share.Folder(ctx, place, nil)
			}
		} else {
			err = p.share.Refuse(ctx, who, place, r)
		}
		return func() { p.asked, p.code = nil, "" }, err
	})
}

func (p *devicesPage) askRemove(d member.Device) {
	reason := mark.NewField("", nil).Hint(words.T("Why, such as: lost, stolen, sold"))
	wrong := mark.NewPara("").In(look.Worse)
	do := func() {
		why := strings.TrimSpace(reason.Text)
		if why == "" {
			wrong.Set(words.T("Say why; it is kept."))
			return
		}
		p.win.hideSheet()
		who := p.win.app.examiner
		p.do(func(ctx context.Context) (func(), error) { return nil, p.share.Remove(ctx, who, d.Verifier, why) })
	}
	reason.OnSubmitted = func(string) { do() }
	p.win.showSheet(words.T("Remove %s", d.Name), mark.Column(look.Unit,
		mark.NewPara(words.T("What it wrote until now still counts; what it writes later is kept apart, and from now on the practice uses a new key. What lies on that device stays readable there.")),
		reason, wrong), 600, mark.NewButton(words.T("Remove"), "close", do).As(mark.Main))
	p.win.win.Canvas().Focus(reason)
}

// backups makes a backup that is read back before it counts.
func (p *devicesPage) backups() fyne.CanvasObject {
	a := p.win.app
	folder := mark.NewField(a.settings.Backups, func(s string) { a.settings.Backups = strings.TrimSpace(s) }).Hint(words.T("A folder on another disk"))
	now := mark.NewButton(words.T("Back up now"), "save", func() {
		place, who := a.settings.Backups, a.examiner
		if place == "" {
			p.win.foot.fail(words.T("Name the folder first."), nil)
			return
		}
		p.do(func(ctx context.Context) (func(), error) {
			if err := a.saver.Flush(ctx); err != nil {
				return nil, err
			}
			to, check, err := openers(p.share)
			if err != nil {
				return nil, err
			}
			file, err := backup.Make(ctx, p.share.Store, place, to, check, backup.Options{})
			if err != nil {
				return nil, err
			}
			err = audit.Write(ctx, p.share.Store, who, audit.BackedUp, filepath.Base(file))
			return func() { p.report = []string{words.T("Backup written and read back: %s", file)} }, err
		})
	})
	return section(words.T("Backup"), mark.NewLabelled(words.T("Folder"), folder),
		mark.Row(look.Unit*2, []float32{0, 1}, now, mark.NewPara(words.T("This device and the recovery key can open it. It is read back before it counts.")).In(look.InkSoft)))
}

// openers returns to whom backups are sealed: this device and the recovery sheet.
func openers(sh *share.Share) (to []age.Recipient, check []age.Identity, err error) {
	list := []string{sh.Bag().Device.Recipient()}
	for _, raw := range sh.List.Statements() {
		if st, err := member.Parse(raw); err == nil && st.Kind == member.Found && st.Recovery != "" {
			list = append(list, st.Recovery)
		}
	}
	for _, r := range list {
		x, err := age.ParseX25519Recipient(r)
		if err != nil {
			return nil, nil, err
		}
		to = append(to, x)
	}
	return to, []age.Identity{sh.Bag().Device.Identity()}, nil
}
