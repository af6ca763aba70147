package desk

import (
	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/assets/words"
)

// devicesPage answers: is everything safe and shared?
type devicesPage struct {
	win  *window
	root fyne.CanvasObject
}

func newDevicesPage(w *window) *devicesPage {
	p := &devicesPage{win: w}
	r := w.app.records
	state := w.app.saver.State()
	row := func(icon, name, value string) fyne.CanvasObject {
		return mark.RowTop(look.Unit*2, []float32{0, 1, 2}, mark.Column(0, iconImage(icon, look.Ink, 22)), mark.NewPara(name).In(look.InkSoft), mark.NewPara(value))
	}
	protected := row("lock", words.T("Protection"), words.T("Sealed: only the passphrase or the key file opens the data."))
	if !r.Protected() {
		protected = row("open-lock", words.T("Protection"), words.T("Not protected: the key lies beside the data, so whoever has the folder can read it."))
	}
	p.root = mark.Pad(look.Unit*1.5, look.Unit*2, mark.ColumnGrow(look.Unit*2, 1, mark.Title(words.T("Devices")).AtLeast(80),
		mark.NewScroll(mark.AtMost(860, mark.Column(look.Unit*2,
			section(words.T("This device"),
				row("window", words.T("Name"), r.Device()),
				row("save", words.T("Where the data lie"), r.Place()),
				protected,
				row("tick", words.T("Saved"), state.Words())),
			section(words.T("Other devices"),
				mark.NewPara(words.T("This practice lies on this device alone. A copy of the folder, made while the program is closed, is a backup."))))))))
	return p
}

func (p *devicesPage) content() fyne.CanvasObject { return p.root }
func (p *devicesPage) shown()                     { p.win.win.Canvas().Unfocus() }
func (p *devicesPage) left()                      {}
