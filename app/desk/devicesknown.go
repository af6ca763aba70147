package desk

import (
	"context"
	"errors"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/share"
)

// known says in lines what this device knows of another one, what is wrong with it and what to do.
func (p *devicesPage) known(x share.Seen) (lines []fyne.CanvasObject) {
	say := func(text string) { lines = append(lines, mark.NewPara(text).In(look.InkSoft)) }
	bad := func(text string) { lines = append(lines, mark.NewPara(text).In(look.Worse)) }
	switch {
	case x.This && x.Member():
		say(words.T("this device"))
	case x.This:
		bad(words.T("This device was taken out of the practice. What it writes from now on counts elsewhere only once a person admits it there."))
	case len(x.Removals) > 0:
		bad(words.T("removed: %s", x.Removals[0].Reason))
	case x.Disputed:
		bad(words.T("let in by a device that was removed at the same time"))
	default:
		say(words.T("belongs to the practice"))
	}
	if !x.This {
		m := x.Met
		switch {
		case m.At.IsZero():
			say(words.T("not met yet"))
		case m.Ahead:
			say(words.T("last met %s", view.Day(m.At.Local())+" "+m.At.Local().Format("15:04")))
			bad(words.T("Its clock runs more than a day ahead: set it there. Nothing here depends on it."))
		default:
			say(words.T("last there %s", view.Day(m.Left.Local())+" "+m.Left.Local().Format("15:04")))
		}
		switch {
		case m.At.IsZero() || !x.Member():
		case m.Lacks == 0:
			say(words.T("has everything that is here"))
		default:
			say(words.N(int(m.Lacks), "%d entry from here has not reached it yet", "%d entries from here have not reached it yet", int(m.Lacks)))
		}
		if m.Differs {
			bad(words.T("It shows something else than this device although both have the same entries: run cordwalk-cli check on both."))
		}
	}
	if x.Forked > 0 {
		bad(words.T("Its data were copied or put back to an earlier day, and both copies were used. All entries of both are kept. Use one of the two, and join anew with the other."))
	}
	var missing uint64
	for _, g := range x.Missing {
		missing += g.Last - g.First + 1
	}
	if missing > 0 {
		bad(words.N(int(missing), "%d entry of it is missing here. Exchange with a device that has it.", "%d entries of it are missing here. Exchange with a device that has them.", int(missing)))
	}
	return lines
}

// contested shows removals that contradict each other, until a person at a device that none of them names confirms one.
func (p *devicesPage) contested() (lines []fyne.CanvasObject) {
	for _, x := range p.share.List.Contested() {
		r := x
		by, whom := r.By.String()[:8], ""
		for _, d := range p.share.List.Devices() {
			if d.Verifier == r.By {
				by = d.Name
			}
			for _, other := range d.Removals {
				if other.ID == r.ID {
					whom = d.Name
				}
			}
		}
		lines = append(lines, mark.RowTop(look.Unit, []float32{1, 0},
			mark.NewPara(words.T("%[1]s removed %[2]s (%[3]s), and was itself removed at the same time. Both stand until a device that none of them names confirms one.", by, whom, r.Reason)).In(look.Worse),
			mark.NewButton(words.T("This one is right"), "tick", func() {
				who := p.win.app.examiner
				p.do(words.T("Confirming…"), func(ctx context.Context, _ told) (func(), error) { return nil, p.share.Confirm(ctx, who, r.ID) })
			})), mark.Rule())
	}
	return lines
}

// setApart is an entry of a removed device that does not count.
type setApart struct {
	change change.Change
	animal string
	words  string
	device string
}

// lookApart reads what is kept apart, and of which animals it is.
func (p *devicesPage) lookApart(ctx context.Context, sh *share.Share) (out []setApart, err error) {
	list, err := sh.Quarantined(ctx)
	if err != nil {
		return nil, err
	}
	names := map[exam.ID]string{}
	for _, c := range list {
		if _, ok := names[c.Patient]; !ok && !c.Patient.IsZero() {
			r, err := sh.Patient(c.Patient)
			if err != nil && !errors.Is(err, storage.ErrNotFound) {
				return nil, err
			}
			names[c.Patient] = r.Patient.Name
		}
		w := sh.Words(c)
		if w == "" {
			w = words.T("(cleared)")
		}
		out = append(out, setApart{c, names[c.Patient], w, sh.List.NameOf(c.Stream.Device)})
	}
	return out, nil
}

// mostApart bounds how many entries are listed.
const mostApart = 30

// setApart lists what removed devices made beyond what counts of them; nil where there is nothing.
func (p *devicesPage) setApart() fyne.CanvasObject {
	if len(p.apart) == 0 {
		return nil
	}
	lines := []fyne.CanvasObject{mark.NewPara(words.T("These came from a device after it was removed, or later than its removal knew. They are kept and do not count until a person lets them.")).In(look.InkSoft)}
	for i, x := range p.apart {
		if i == mostApart {
			n := len(p.apart) - i
			lines = append(lines, mark.NewPara(words.N(n, "and %d more", "and %d more", n)).In(look.InkSoft))
			break
		}
		e := x
		at := e.change.Time.Time().Local()
		animal := e.animal
		if animal == "" {
			animal = "–"
		}
		lines = append(lines, mark.RowTop(look.Unit*2, []float32{1, 2, 1.4, 0}, mark.NewPara(animal).Strong(), mark.NewPara(words.T("%[1]s: %[2]s", e.change.Field, e.words)),
			mark.NewPara(words.T("%[1]s, %[2]s", e.change.Examiner, view.Day(at)+" "+at.Format("15:04"))).In(look.InkSoft),
			mark.NewButton(words.T("Let it count"), "tick", func() { p.askAdmit([]setApart{e}) }).As(mark.Quiet)), mark.Rule())
	}
	if len(p.apart) > 1 {
		all := p.apart
		lines = append(lines, mark.Left(mark.NewButton(words.T("Let all of them count"), "tick", func() { p.askAdmit(all) })))
	}
	return section(words.T("Kept apart"), lines...)
}

// askAdmit asks why entries may count, and admits them in the order in which they were made.
func (p *devicesPage) askAdmit(list []setApart) {
	p.win.ask(asking{
		title: words.N(len(list), "Let %d entry count", "Let %d entries count", len(list)),
		about: mark.NewPara(words.T("It replaces what stands there now; that stays in the history.")),
		hint:  words.T("Why, such as: asked the colleague"), missing: words.T("Say why; it is kept."),
		width: 600, does: words.T("Let it count"), icon: "tick",
		then: func(why string) {
			who := p.win.app.examiner
			p.do(words.T("Taking the entries in…"), func(ctx context.Context, progress told) (func(), error) {
				for i, x := range list {
					if _, err := p.share.Apply(ctx, who, storage.Admit(x.change, why)); err != nil {
						return nil, err
					}
					progress(words.T("Taking the entries in…"), int64(i+1), int64(len(list)))
				}
				return p.findChoices, nil
			})
		},
	})
}
