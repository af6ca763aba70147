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

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/carry"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/member"
	"cordwalk.example/cordwalk/sync/share"
)

// joiner is what a first start by invitation needs beyond Opener.
type joiner interface {
	// Ask leaves a request in the folder of an invitation. Nothing is made yet.
	Ask(folder, code, device string) (*Joining, error)
	// Join waits until the request is answered, and then makes the store in a folder.
	Join(ctx context.Context, j *Joining, dir string, passphrase []byte) (Records, error)
}

// Joining is a request to belong to a practice.
type Joining struct {
	folder string
	inc    change.Incarnation
	asks   *member.Joining
}

// CheckWords are compared by people with those on the inviting screen.
func (j *Joining) CheckWords() string { return j.asks.CheckWords() }

// Ask leaves a request in the folder of an invitation.
func (k *Keeper) Ask(folder, code, device string) (*Joining, error) {
	letters, err := carry.Letters(disk.OS(), folder, ".invite")
	if err != nil {
		return nil, err
	}
	if len(letters) == 0 {
		return nil, errors.New(words.T("there is no invitation in %s", folder))
	}
	own, err := key.NewDevice()
	if err != nil {
		return nil, err
	}
	j := &Joining{folder: folder, inc: change.NewIncarnation()}
	for _, l := range letters {
		if j.asks, err = member.Ask(l.Data, code, own, device, j.inc); err == nil {
			break
		}
	}
	if err != nil {
		return nil, err
	}
	return j, carry.LeaveLetter(disk.OS(), folder, carry.Letter{Practice: j.asks.Practice(), Name: j.asks.FileName(), Data: j.asks.File()})
}

// joinLook is how often the folder is looked into for the answer.
const joinLook = 500 * time.Millisecond

// Join waits for the answer and makes the store.
func (k *Keeper) Join(ctx context.Context, j *Joining, dir string, passphrase []byte) (Records, error) {
	o := k.options(passphrase, nil, nil)
	o.Unlock.KeyInStore = len(passphrase) == 0 && k.KeyFile == ""
	if err := os.MkdirAll(filepath.Dir(dir), 0o700); err != nil {
		return nil, fmt.Errorf("%s: %w", words.T("making the folder %s", filepath.Dir(dir)), err)
	}
	for {
		sh, err := share.Join(ctx, dir, j.folder, j.asks, j.inc, o, share.Options{Now: k.Now})
		if err == nil {
			return k.keep(sh.Store, dir, nil)
		}
		if !errors.Is(err, change.ErrNoKey) {
			return nil, err
		}
		select {
		case <-ctx.Done():
			return nil, ctx.Err()
		case <-time.After(joinLook):
		}
	}
}

// joinPage joins a practice that another device has begun, by its invitation.
type joinPage struct {
	win    *window
	fields map[string]*mark.Labelled
	first  *mark.Field
	root   *fyne.Container
	said   *mark.Para
	check  *fyne.Container
	go1    *mark.Button
	stop   context.CancelFunc // while it waits for the answer

	folder, code, device, dir, pass, again string
	open                                   bool // unprotected
}

func newJoinPage(w *window, dir string) *joinPage {
	p := &joinPage{win: w, fields: map[string]*mark.Labelled{}, dir: dir, check: mark.Column(look.Unit)}
	p.device, _ = os.Hostname()
	field := func(key, name, value, hint string, set *string) *mark.Field {
		*set = value
		f := mark.NewField(value, func(s string) { *set = s }).Hint(hint)
		p.fields[key] = mark.NewLabelled(name, f)
		return f
	}
	p.first = field("folder", words.T("1. Folder with the invitation"), "", words.T("A stick or a shared folder"), &p.folder)
	field("code", words.T("2. Code that you were told"), "", words.T("five words or more"), &p.code)
	field("device", words.T("Name of this device"), p.device, "", &p.device)
	field("dir", words.T("3. Where do the data live?"), dir, words.T("A folder on this computer"), &p.dir)
	pass := field("pass", words.T("Passphrase"), "", words.T("Several words; nobody can open the data without it"), &p.pass)
	again := field("again", words.T("Passphrase again"), "", "", &p.again)
	pass.Password, again.Password = true, true
	none := mark.Tick(words.T("Leave the data unprotected on this computer"), false, func(on bool) {
		p.open = on
		if on {
			pass.Disable()
			again.Disable()
		} else {
			pass.Enable()
			again.Enable()
		}
	})
	p.said = mark.NewPara("").In(look.Worse)
	p.go1 = mark.NewButton(words.T("Ask to join"), "devices", p.ask).As(mark.Main)
	back := mark.NewButton(words.T("Back"), "", func() { p.cancel(); w.bare(newFirstRunPage(w, dir)) })
	p.root = mark.Column(0, bareFrame(words.T("Join a practice"),
		mark.NewPara(words.T("The other device invites this one on its Devices screen and leaves the invitation in a folder that both can reach. Its person tells you a code; never let it be sent with the invitation.")),
		p.fields["folder"], mark.RowTop(look.Unit*2, []float32{2, 1}, p.fields["code"], p.fields["device"]), p.fields["dir"],
		mark.RowTop(look.Unit*2, []float32{1, 1}, p.fields["pass"], p.fields["again"]), none, p.check, p.said,
		mark.Row(look.Unit, []float32{0, 1, 0}, p.go1, mark.Space(1, 1), back)))
	return p
}

func (p *joinPage) content() fyne.CanvasObject { return p.root.Objects[0] }
func (p *joinPage) shown()                     { p.win.win.Canvas().Focus(p.first) }
func (p *joinPage) left()                      { p.cancel() }

func (p *joinPage) cancel() {
	if p.stop != nil {
		p.stop()
		p.stop = nil
	}
}

// wrong marks what is missing and reports whether anything is.
func (p *joinPage) wrong() bool {
	bad := map[string]string{}
	for key, v := range map[string]string{"folder": p.folder, "code": p.code, "device": p.device, "dir": p.dir} {
		if strings.TrimSpace(v) == "" {
			bad[key] = words.T("This is needed.")
		}
	}
	if exists, _ := p.win.app.opener.Exists(strings.TrimSpace(p.dir)); bad["dir"] == "" && exists {
		bad["dir"] = words.T("A practice lies there already; name a new folder.")
	}
	switch {
	case p.open:
	case p.pass == "":
		bad["pass"] = words.T("This is needed.")
	case p.pass != p.again:
		bad["again"] = words.T("The two differ.")
	}
	for key, f := range p.fields {
		f.Wrong(bad[key])
	}
	return len(bad) > 0
}

// ask leaves the request and waits for the answer.
func (p *joinPage) ask() {
	j, ok := p.win.app.opener.(joiner)
	if !ok || p.stop != nil || p.wrong() {
		return
	}
	a := p.win.app
	ctx, stop := context.WithCancel(a.ctx)
	p.stop = stop
	p.go1.Disable()
	p.said.In(look.Ink).Set(words.T("Looking for the invitation…"))
	folder, code, device, dir := strings.TrimSpace(p.folder), strings.TrimSpace(p.code), strings.TrimSpace(p.device), strings.TrimSpace(p.dir)
	pass := []byte(p.pass)
	if p.open {
		pass = nil
	}
	a.work(func(context.Context) (func(), error) {
		asked, err := j.Ask(folder, code, device)
		if err != nil {
			return nil, err
		}
		a.onUI(func() {
			if ctx.Err() != nil {
				return
			}
			p.check.Objects = []fyne.CanvasObject{
				mark.NewPara(words.T("Check words")).In(look.InkSoft), mark.NewPara(asked.CheckWords()).As(look.Title).Strong(),
				mark.NewPara(words.T("The other device shows them too once it has exchanged with this folder. Compare them aloud: only if they agree may its person let this device in."))}
			p.check.Refresh()
			p.said.In(look.Ink).Set(words.T("Waiting for the answer in the folder. This window must stay open."))
			p.root.Refresh()
		})
		r, err := j.Join(ctx, asked, dir, pass)
		if err != nil {
			return nil, err
		}
		practice, err := r.Practice()
		if err != nil {
			return nil, errors.Join(err, r.Close())
		}
		return func() { a.settings.Exchange = folder; a.use(p.win, r, practice, dir) }, nil
	}, func(err error) {
		stop()
		if errors.Is(err, context.Canceled) {
			return
		}
		p.stop = nil
		p.go1.Enable()
		p.check.Objects = nil
		p.check.Refresh()
		p.said.In(look.Worse).Set(sentence(err.Error()))
	})
}
