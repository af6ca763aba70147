package desk

import (
	"context"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/chart"
	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/localise"
)

// twoMaps is what was found about two visits.
type twoMaps struct {
	results [2]*localise.Result
	err     error
}

// mapsBeside is the last section of Compare: the cord maps of the two days side by side, each
// from its exam with the file. They are worked out when the section is opened.
type mapsBeside struct {
	page   *comparePage
	opened bool
	ask    *view.Newest[[2]exam.Visit, twoMaps]
	hosts  [2]*chartHost
	words  [2]*mark.Para
	note   *mark.Para
	inside *fyne.Container
}

// toggle opens or closes the section.
func (m *mapsBeside) toggle() {
	m.opened = !m.opened
	if m.opened && m.ask == nil {
		engines, patient := &m.page.win.app.engines, m.page.file.Patient
		engines.hold()
		m.ask = view.NewNewest(m.page.win.app.onUI, func(_ context.Context, q [2]exam.Visit) (out twoMaps, _ error) {
			for i, v := range q {
				if out.results[i], out.err = engines.compute(localise.OfVisit(patient, v)); out.err != nil {
					break
				}
			}
			return out, nil
		}, m.answered)
	}
	m.page.build()
}

// section returns the head of the section and, where it is open, the maps.
func (m *mapsBeside) section(a, b exam.Visit) fyne.CanvasObject {
	icon := "down"
	if m.opened {
		icon = "up"
	}
	head := mark.NewButton(words.T("Cord map"), icon, m.toggle).As(mark.Quiet).WithTip(words.T("Key m"))
	head.Side = true
	parts := []fyne.CanvasObject{mark.Space(1, look.Unit), head, mark.Rule()}
	if !m.opened {
		return mark.Column(0, parts...)
	}
	m.note = mark.NewPara(words.T("This supports and never replaces the veterinarian.")).In(look.InkSoft)
	sides := make([]fyne.CanvasObject, 2)
	for i, v := range [2]exam.Visit{a, b} {
		if m.hosts[i] != nil {
			m.hosts[i].release()
		}
		m.hosts[i], m.words[i] = newChartHost(nil, fyne.NewSize(200, 480)), mark.NewPara("")
		m.hosts[i].Hide()
		sides[i] = mark.Column(look.Unit, mark.NewPara(view.Day(v.Examined)).In(look.InkSoft), m.words[i].Strong(), m.hosts[i])
	}
	m.inside = mark.Column(look.Unit, m.note, mark.RowTop(look.Unit*2, []float32{1, 1}, sides...))
	m.ask.Ask([2]exam.Visit{a, b})
	return mark.Column(0, append(parts, mark.Pad(look.Unit, 0, m.inside))...)
}

func (m *mapsBeside) answered(t twoMaps, _ error) {
	if !m.opened || m.inside == nil {
		return
	}
	if t.err != nil {
		m.note.Words = said(t.err.Error())
	}
	for i, r := range t.results {
		if r == nil {
			continue
		}
		kg, _ := m.page.file.Patient.WeightAt(m.page.days()[i].Examined)
		m.words[i].Words = said(r.Summary)
		m.hosts[i].set(chart.CordOf(m.page.file.Patient.Species, kg, r, ""))
		m.hosts[i].Show()
	}
	m.page.body.Reflow()
}

// close ends the reckoning and lets go of the charts.
func (m *mapsBeside) close() {
	for _, h := range m.hosts {
		if h != nil {
			h.release()
		}
	}
	if m.ask == nil {
		return
	}
	engines, ask := &m.page.win.app.engines, m.ask
	m.ask, m.inside, m.opened = nil, nil, false
	go func() {
		ask.Close()
		engines.letGo()
	}()
}
