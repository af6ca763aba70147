package desk

import (
	"context"
	"errors"
	"strconv"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/keyring"
)

// locking says when the screen is locked, and whether the practice opens by itself in its user's session; nil where no
// passphrase opens it.
func (p *devicesPage) locking() fyne.CanvasObject {
	a := p.win.app
	if p.store == nil || !a.lockable() {
		return nil
	}
	var names, values []string
	for _, n := range []int{5, view.LockUsual, 30, 60} {
		names, values = append(names, words.N(n, "%d minute", "%d minutes", n)), append(values, strconv.Itoa(n))
	}
	names, values = append(names, words.T("never")), append(values, "-1")
	chosen := a.settings.LockAfter
	if chosen == 0 {
		chosen = view.LockUsual
	}
	after := mark.Choice(names, values, strconv.Itoa(chosen), func(v string) {
		a.settings.LockAfter, _ = strconv.Atoi(v)
		a.keepSettings()
	})
	in, err := storage.Peek(p.store.Dir(), storage.Options{})
	session := mark.Tick(words.T("Open without the passphrase while I am signed in to this computer (system keyring)"), err == nil && in.Keyring, nil)
	session.OnChanged = func(on bool) { p.askSession(on) }
	return mark.Column(look.Unit,
		mark.Row(look.Unit*2, []float32{1, 1, 0}, mark.NewPara(words.T("Lock the screen when nobody uses it for")).In(look.InkSoft), after,
			mark.NewButton(words.T("Lock now"), "lock", a.lock)), session)
}

// askSession asks for the passphrase, which every change of the locks needs, and changes whether the practice opens by
// itself in its user's session.
func (p *devicesPage) askSession(on bool) {
	pass := mark.NewField("", nil)
	pass.Password = true
	box := mark.NewLabelled(words.T("Passphrase"), pass)
	do := func() {
		word := []byte(pass.Text)
		p.win.hideSheet()
		p.do(words.T("Changing how the practice opens…"), func(ctx context.Context, _ told) (func(), error) {
			return nil, openInSession(ctx, p.store, word, on)
		})
	}
	pass.OnSubmitted = func(string) { do() }
	title, text := words.T("Open by itself"), words.T("The key is put into the keyring of this user. Whoever can use your session can then open the practice; the passphrase still opens it everywhere.")
	if !on {
		title, text = words.T("Ask for the passphrase"), words.T("The key is taken out of the keyring of this user; from the next start on the passphrase is asked for.")
	}
	p.build() // the tick follows what is, not what was asked for
	p.win.showSheet(title, mark.Column(look.Unit, mark.NewPara(text), box), 600, mark.NewButton(title, "tick", do).As(mark.Main))
	p.win.win.Canvas().Focus(pass)
}

// openInSession puts a key of the practice into the system keyring, or takes it out. A keyring that does not answer is
// given up after two seconds, and then nothing has changed.
func openInSession(ctx context.Context, s *storage.Store, pass []byte, on bool) error {
	if err := storage.Fits(s.Dir(), storage.Options{Unlock: storage.Unlock{Passphrase: pass}}); err != nil {
		return err
	}
	practice := s.Bag().Practice
	if !on {
		if err := s.Relock(key.Passphrase(pass)); err != nil {
			return err
		}
		return keyring.Delete(ctx, practice)
	}
	fresh := key.NewSecret()
	if err := keyring.Set(ctx, practice, fresh); err != nil {
		return err
	}
	if err := s.Relock(key.Passphrase(pass), key.Keyring(fresh)); err != nil {
		return errors.Join(err, keyring.Delete(ctx, practice))
	}
	return nil
}
