package desk

import (
	"context"

	"filippo.io/age"
	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/share"
)

// unchosen is an animal with values to choose between.
type unchosen struct {
	id   exam.ID
	name string
	n    int
}

// openShare opens the list of devices, so that photos and clips are exchanged with the records.
func (p *devicesPage) openShare(ctx context.Context) (*share.Share, *age.X25519Identity, error) {
	return p.win.app.album.share(ctx, p.store)
}

// findChoices looks for animals with values to choose between. It takes as long as reading every
// animal does, and shows what it finds when it is done.
func (p *devicesPage) findChoices() {
	p.win.app.work(func(ctx context.Context) (func(), error) {
		rows, err := p.store.Caseload(ctx)
		if err != nil {
			return nil, err
		}
		var found []unchosen
		for _, row := range rows {
			if ctx.Err() != nil {
				return nil, ctx.Err()
			}
			r, err := p.store.Patient(row.ID)
			if err != nil {
				return nil, err
			}
			if n := len(r.Conflicts); n > 0 {
				found = append(found, unchosen{row.ID, row.Name, n})
			}
		}
		return func() {
			if p.open = found; len(found) > 0 && !p.gone {
				p.build()
			}
		}, nil
	}, func(err error) {
		if !p.gone {
			p.win.fail(words.T("Not every animal could be read."), err)
		}
	})
}

// choices lists the animals with values to choose between; nil where there are none.
func (p *devicesPage) choices() fyne.CanvasObject {
	if len(p.open) == 0 {
		return nil
	}
	lines := []fyne.CanvasObject{mark.NewPara(words.T("Two devices wrote different things. Both are kept until a person chooses.")).In(look.InkSoft)}
	for _, x := range p.open {
		u := x
		lines = append(lines, mark.Row(look.Unit*2, []float32{1, 1, 0}, mark.NewPara(u.name).Strong(), mark.NewPara(words.N(u.n, "%d value to choose", "%d values to choose", u.n)),
			mark.NewButton(words.T("Choose"), "compare", func() { p.win.goTo(view.Route{Screen: view.ScreenChoices, Patient: u.id}) })), mark.Rule())
	}
	return section(words.T("Values to choose between"), lines...)
}
