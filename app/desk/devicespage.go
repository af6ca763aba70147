package desk

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"time"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/storage"
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
	report []string // what the last exchange did
	wrong  string   // why the last thing asked for was not done, and what to do
	held   []string // backups that still hold what was erased
	code   string   // of an invitation just made; shown once
	work   *working // nil where nothing is under way
	gone   bool
	open   []unchosen   // animals with values to choose between
	seen   []share.Seen // the devices, as this one knows them
	apart  []setApart   // what removed devices made beyond what counts
}

// working is something slow under way: it says how far it is, and can be stopped.
type working struct {
	what *mark.Para
	bar  *widget.ProgressBar
	stop context.CancelFunc
	root fyne.CanvasObject
	last time.Time // the bar was moved; only touched where progress is told
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
		p.do(words.T("Looking at the devices…"), func(ctx context.Context, _ told) (func(), error) {
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
func (p *devicesPage) founded() bool { return founded(p.store) }

// told is called with how far something is.
type told = func(what string, done, total int64)

// do runs something slow, one at a time, shows how far it is, and draws the page anew.
func (p *devicesPage) do(what string, f func(ctx context.Context, progress told) (func(), error)) {
	if p.work != nil {
		return
	}
	a := p.win.app
	ctx, stop := context.WithCancel(a.ctx)
	k := &working{what: mark.NewPara(what), bar: widget.NewProgressBar(), stop: stop}
	k.bar.Hide()
	k.root = mark.On(look.FocusBed, false, mark.Pad(look.Unit, look.Unit, mark.Row(look.Unit*2, []float32{2, 1, 0}, k.what, k.bar, mark.NewButton(words.T("Stop"), "close", stop))))
	p.work, p.wrong = k, ""
	progress := func(say string, done, total int64) {
		if now := time.Now(); done < total && now.Sub(k.last) < 100*time.Millisecond {
			return
		} else {
			k.last = now
		}
		a.onUI(func() {
			k.what.Set(sentence(say))
			if total > 0 {
				k.bar.Show()
				k.bar.SetValue(float64(done) / float64(total))
			}
		})
	}
	if p.root != nil {
		p.build()
	}
	a.work(func(context.Context) (func(), error) {
		then, err := f(ctx, progress)
		stop()
		if err != nil {
			return nil, err
		}
		sh, seen, apart, err := p.look(a.ctx)
		return func() {
			p.work = nil
			if sh != nil {
				p.seen, p.apart = seen, apart
			}
			if then != nil {
				then()
			}
			if !p.gone {
				p.build()
			}
		}, err
	}, func(err error) {
		p.work = nil
		if p.gone {
			return
		}
		if errors.Is(err, context.Canceled) {
			p.wrong = words.T("Stopped. What was done until then stays done; begin again when it suits.")
		} else {
			p.wrong = sentence(err.Error())
			p.win.fail(p.wrong, err)
		}
		p.build()
	})
}

// look gathers what is known of the devices; not on the drawing goroutine.
func (p *devicesPage) look(ctx context.Context) (sh *share.Share, seen []share.Seen, apart []setApart, err error) {
	if !founded(p.store) {
		return nil, nil, nil, nil
	}
	if sh, _, err = p.openShare(ctx); err != nil {
		return nil, nil, nil, err
	}
	if seen, err = sh.Overview(ctx); err != nil {
		return nil, nil, nil, err
	}
	apart, err = p.lookApart(ctx, sh)
	return sh, seen, apart, err
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
	var parts []fyne.CanvasObject
	if p.work != nil {
		parts = append(parts, p.work.root)
	}
	if p.wrong != "" {
		parts = append(parts, mark.NewPara(p.wrong).In(look.Worse))
	}
	for _, line := range p.report {
		parts = append(parts, mark.NewPara(line))
	}
	this := []fyne.CanvasObject{
		row("window", words.T("Name"), r.Device()),
		row("save", words.T("Where the data lie"), r.Place()),
		protected}
	if x := p.locking(); x != nil {
		this = append(this, x)
	}
	parts = append(parts, section(words.T("This device"), append(this, row("tick", words.T("Saved"), p.win.app.saver.State().Words()))...))
	switch {
	case p.win.app.practice.Demo:
		parts = append(parts, section(words.T("Other devices"), mark.NewPara(words.T("The demo practice stays on this device: its animals are invented."))))
	case p.store == nil:
	case p.share == nil && !p.founded():
		parts = append(parts, p.found())
	case p.share != nil:
		parts = append(parts, p.exchange(), p.devices())
		if x := p.setApart(); x != nil {
			parts = append(parts, x)
		}
	}
	if x := p.choices(); x != nil {
		parts = append(parts, x)
	}
	if p.share != nil && !p.win.app.practice.Demo {
		parts = append(parts, p.hub(), p.backups())
	}
	p.body.SetContent(mark.AtMost(860, mark.Column(look.Unit*3, parts...)))
}

// found begins sharing: the recovery key is written once and kept nowhere else.
func (p *devicesPage) found() fyne.CanvasObject {
	home, _ := os.UserHomeDir()
	file := mark.NewField(filepath.Join(home, "cordwalk-recovery.txt"), nil)
	begin := mark.NewButton(words.T("Begin to share and back up"), "devices", func() {
		name := strings.TrimSpace(file.Text)
		p.do(words.T("Making the recovery key…"), func(ctx context.Context, _ told) (func(), error) {
			if _, err := os.Stat(name); err == nil {
				return nil, errors.New(words.T("%s is there already; name a new file for the recovery key", name))
			}
			f, err := os.OpenFile(name, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o600)
			if err != nil {
				return nil, fmt.Errorf("%s: %w", words.T("making the recovery sheet"), err)
			}
			sh, recovery, err := p.openShare(ctx)
			if recovery == nil { // nothing was founded: the file would stand in the way of the next try
				err = errors.Join(err, f.Close(), os.Remove(name))
				return func() { p.share = sh }, err
			}
			// Also beside an error: the key is known nowhere else.
			text := words.T("Recovery sheet of the practice %s. Whoever holds this key can open its data.", p.store.Bag().Practice) + "\n" + recovery.String() + "\n"
			_, werr := f.WriteString(text)
			if werr == nil {
				werr = f.Sync()
			}
			if werr = errors.Join(werr, f.Close()); werr != nil {
				return nil, fmt.Errorf("%s %s: %w", words.T("write this key down now, it is kept nowhere else:"), recovery, errors.Join(werr, err))
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
		p.do(words.T("Exchanging…"), func(ctx context.Context, progress told) (func(), error) {
			if err := a.saver.Flush(ctx); err != nil {
				return nil, err
			}
			r, err := p.share.Folder(ctx, place, progress)
			if err != nil {
				return nil, err
			}
			at := a.now()
			lines := []string{words.T("%d taken in, %d handed over", r.Received, r.Sent)}
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
	for _, x := range p.seen {
		d := x.Device
		row := []fyne.CanvasObject{mark.NewPara(d.Name).Strong(), mark.Column(2, p.known(x)...)}
		last := fyne.CanvasObject(mark.Space(1, 1))
		if d.Member() && !x.This {
			last = mark.NewButton(words.T("Remove"), "close", func() { p.askRemove(d) }).As(mark.Quiet)
		}
		lines = append(lines, mark.RowTop(look.Unit, []float32{1, 2, 0.6}, append(row, last)...), mark.Rule())
	}
	lines = append(lines, p.contested()...)
	if n := len(p.share.Damaged()); n > 0 {
		lines = append(lines, mark.NewPara(words.N(n, "%d entry of this list is damaged; an exchange brings it back.", "%d entries of this list are damaged; an exchange brings them back.", n)).In(look.Worse))
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
		p.do(words.T("Inviting…"), func(ctx context.Context, _ told) (func(), error) {
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
	p.do(words.T("Answering…"), func(ctx context.Context, progress told) (func(), error) {
		var err error
		if yes {
			if err = p.share.Admit(ctx, who, place, r); err == nil {
				_, err = p.share.Folder(ctx, place, progress)
			}
		} else {
			err = p.share.Refuse(ctx, who, place, r)
		}
		return func() { p.asked, p.code = nil, "" }, err
	})
}

func (p *devicesPage) askRemove(d member.Device) {
	p.win.ask(asking{
		title: words.T("Remove %s", d.Name),
		about: mark.NewPara(words.T("What it wrote until now still counts; what it writes later is kept apart, and from now on the practice uses a new key. What lies on that device stays readable there.")),
		hint:  words.T("Why, such as: lost, stolen, sold"), missing: words.T("Say why; it is kept."),
		width: 600, does: words.T("Remove"), icon: "close",
		then: func(why string) {
			who := p.win.app.examiner
			p.do(words.T("Removing…"), func(ctx context.Context, _ told) (func(), error) {
				return nil, p.share.Remove(ctx, who, d.Verifier, why)
			})
		},
	})
}

// backups makes a backup that is read back before it counts, once a day by itself or now.
func (p *devicesPage) backups() fyne.CanvasObject {
	a := p.win.app
	folder := mark.NewField(a.settings.Backups, func(s string) { a.settings.Backups = strings.TrimSpace(s) }).Hint(words.T("A folder on another disk"))
	daily := mark.Tick(words.T("Once a day by itself, while the program runs"), !a.settings.ByHand, func(on bool) {
		a.settings.ByHand = !on
		a.keepSettings()
	})
	now := mark.NewButton(words.T("Back up now"), "save", func() {
		if a.settings.Backups == "" {
			p.win.foot.fail(words.T("Name the folder first."), nil)
			return
		}
		a.keepSettings()
		if a.backUp(true) {
			p.build()
		}
	})
	k := &a.keep
	k.mu.Lock()
	running, since, said, failed := k.running, k.since, k.said, k.failed
	k.mu.Unlock()
	state := mark.NewPara(words.T("This device and the recovery key can open it. It is read back before it counts.")).In(look.InkSoft)
	switch {
	case running:
		state = mark.NewPara(words.T("A backup is being made since %s.", since.Format("15:04")))
		now.Disable()
	case failed:
		state = mark.NewPara(said).In(look.Worse)
	case said != "":
		state = mark.NewPara(said)
	}
	lines := []fyne.CanvasObject{mark.NewLabelled(words.T("Folder"), folder), daily, mark.Row(look.Unit*2, []float32{0, 1}, now, state),
		mark.NewPara(words.T("The newest of 7 days, 5 weeks and 12 months are kept there; older ones are removed once the newest reads back.")).In(look.InkSoft)}
	for _, h := range p.held {
		lines = append(lines, mark.NewPara(h).In(look.Worse))
	}
	return section(words.T("Backup"), lines...)
}
