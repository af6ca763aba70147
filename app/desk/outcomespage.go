package desk

import (
	"context"
	"math"
	"strconv"

	"fyne.io/fyne/v2"
	"gonum.org/v1/plot/vg"
	vgdraw "gonum.org/v1/plot/vg/draw"

	"cordwalk.example/cordwalk/app/chart"
	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
)

// outcomesPage shows how the practice's animals fared: time to walking by problem and grade at
// the first visit.
type outcomesPage struct {
	win  *window
	root fyne.CanvasObject
	body *mark.Scroll
	gone bool
}

func newOutcomesPage(w *window) *outcomesPage {
	p := &outcomesPage{win: w, body: mark.NewScroll(mark.NewPara(words.T("Reading the files of all animals…")).In(look.InkSoft))}
	p.root = mark.Pad(look.Unit*1.5, look.Unit*2, mark.ColumnGrow(look.Unit, 2, mark.Title(words.T("Outcomes of the practice")).AtLeast(100),
		mark.NewPara(words.T("From the first visit until an animal was first seen to walk. Those not walking when last seen count until then; death is shown beside it. Definitions and selection differ from published series: no prediction for one animal.")).In(look.InkSoft), p.body))
	p.load()
	return p
}

func (p *outcomesPage) content() fyne.CanvasObject { return p.root }
func (p *outcomesPage) shown()                     { p.win.win.Canvas().Unfocus() }
func (p *outcomesPage) left()                      { p.gone = true }

func (p *outcomesPage) typedKey(k fyne.KeyName) bool {
	switch k {
	case fyne.KeyDown:
		p.body.By(80)
	case fyne.KeyUp:
		p.body.By(-80)
	case fyne.KeyPageDown:
		p.body.By(400)
	case fyne.KeyPageUp:
		p.body.By(-400)
	default:
		return false
	}
	return true
}

func (p *outcomesPage) load() {
	records := p.win.app.records
	p.win.app.work(func(ctx context.Context) (func(), error) {
		var cases []view.CaseHistory
		list, err := records.Caseload(ctx)
		if err != nil {
			return nil, err
		}
		for _, s := range list {
			if err := ctx.Err(); err != nil {
				return nil, err
			}
			f, err := records.File(s.ID)
			if err != nil {
				return nil, err
			}
			cases = append(cases, view.CaseHistory{Patient: f.Patient, Visits: f.Visits})
		}
		groups := view.Outcomes(cases)
		return func() {
			if !p.gone {
				p.show(groups)
			}
		}, nil
	}, func(err error) { p.win.fail(words.T("The outcomes could not be worked out."), err) })
}

func (p *outcomesPage) show(groups []view.OutcomeGroup) {
	var out []fyne.CanvasObject
	for _, g := range groups {
		o := g
		host := newChartHost(walkChart{o}, fyne.NewSize(300, 220*max(1, look.Scale())))
		text := []fyne.CanvasObject{mark.NewPara(words.T("%s: %s", o.Problem, o.Presenting.Words())).As(look.Head).Strong(), mark.NewPara(o.Words())}
		for _, pb := range o.Published {
			line := words.Of(pb.Words)
			if pb.Share > 0 {
				line = words.T("%s: %s walked", line, percent(pb.Share))
			}
			if pb.N > 0 {
				line = words.T("%s, %d animals", line, pb.N)
			}
			text = append(text, mark.NewPara(words.T("Published: %s (%s)", line, pb.Source)).In(look.InkSoft).As(look.Small))
		}
		out = append(out, mark.RowTop(look.Unit*3, []float32{1.2, 1}, host, mark.Column(look.Unit, text...)), mark.Rule())
	}
	if len(out) == 0 {
		out = append(out, mark.NewPara(words.T("No animal came that could not walk.")))
	}
	p.body.SetContent(mark.Column(look.Unit*2, out...))
}

// walkChart is the share of a group seen to walk, with its 95 % band, death beside it, and how
// many were still watched.
type walkChart struct{ group view.OutcomeGroup }

// Draw draws the chart over the whole canvas.
func (w walkChart) Draw(c vgdraw.Canvas, st chart.Style) {
	pal, size := st.Palette, st.Text
	left, bottom := c.Min.X+chart.Width("100 %", size, false)+6, c.Min.Y+size*3.2
	right, top := c.Max.X-size*2.4, c.Max.Y-size*1.7
	last := 28.0
	for _, s := range w.group.Curve.All {
		last = math.Max(last, s.Time)
	}
	last = math.Ceil(last/28) * 28
	x := func(day float64) vg.Length { return left + (right-left)*vg.Length(day/last) }
	y := func(share float64) vg.Length { return bottom + (top-bottom)*vg.Length(share) }
	line := func(width vg.Length, dash []vg.Length, pts ...vg.Point) {
		var p vg.Path
		for i, q := range pts {
			if i == 0 {
				p.Move(q)
			} else {
				p.Line(q)
			}
		}
		c.SetLineWidth(width)
		c.SetLineDash(dash, 0)
		c.Stroke(p)
	}
	text := func(px, py vg.Length, s string, ax float64) {
		c.FillString(chart.Face(size, false), vg.Point{X: px - chart.Width(s, size, false)*vg.Length(ax), Y: py}, s)
	}
	c.SetColor(pal.Line)
	for _, share := range []float64{0, 0.5, 1} {
		line(0.6, nil, vg.Point{X: left, Y: y(share)}, vg.Point{X: right, Y: y(share)})
	}
	// the band
	type step struct{ t, lo, hi float64 }
	steps := []step{{0, 0, 0}}
	for _, s := range w.group.Curve.Steps {
		lo, hi := 1-s.High, 1-s.Low
		if math.IsNaN(lo) || math.IsNaN(hi) {
			lo, hi = 1-s.Survival, 1-s.Survival
		}
		steps = append(steps, step{s.Time, lo, hi})
	}
	var band vg.Path
	band.Move(vg.Point{X: x(0), Y: y(0)})
	for i, s := range steps {
		end := last
		if i+1 < len(steps) {
			end = steps[i+1].t
		}
		band.Line(vg.Point{X: x(s.t), Y: y(s.hi)})
		band.Line(vg.Point{X: x(end), Y: y(s.hi)})
	}
	for i := len(steps) - 1; i >= 0; i-- {
		end := last
		if i+1 < len(steps) {
			end = steps[i+1].t
		}
		band.Line(vg.Point{X: x(end), Y: y(steps[i].lo)})
		band.Line(vg.Point{X: x(steps[i].t), Y: y(steps[i].lo)})
	}
	band.Close()
	c.SetColor(pal.Band)
	c.Fill(band)
	// the curves
	stairs := func(pts []vg.Point, from float64, t, share float64) ([]vg.Point, float64) {
		return append(pts, vg.Point{X: x(t), Y: y(from)}, vg.Point{X: x(t), Y: y(share)}), share
	}
	walked, now := []vg.Point{{X: x(0), Y: y(0)}}, 0.0
	for _, s := range w.group.Curve.Steps {
		walked, now = stairs(walked, now, s.Time, 1-s.Survival)
	}
	walked = append(walked, vg.Point{X: x(last), Y: y(now)})
	c.SetColor(pal.Ink)
	line(1.8, nil, walked...)
	if w.group.Died > 0 {
		died, dead := []vg.Point{{X: x(0), Y: y(0)}}, 0.0
		for _, s := range w.group.Dying {
			died, dead = stairs(died, dead, s.Time, s.Share)
		}
		died = append(died, vg.Point{X: x(last), Y: y(dead)})
		c.SetColor(pal.Soft)
		line(1.4, []vg.Length{4, 3}, died...)
		text(x(last)-2, y(dead)+3, words.T("died"), 1)
	}
	c.SetColor(pal.Soft)
	for _, share := range []float64{0, 0.5, 1} {
		text(left-5, y(share)-size*0.35, strconv.Itoa(int(share*100))+" %", 1)
	}
	text(x(last)-2, y(now)+3, words.T("seen to walk"), 1)
	end := vg.Length(math.Inf(-1))
	for i, d := range view.OutcomeDays {
		if d > last || i >= len(w.group.AtRisk) {
			break
		}
		label := words.T("day %.0f", d)
		if d == 0 {
			label = "0"
		}
		wide := chart.Width(label, size, false)
		if x(d)-wide/2 < end+6 {
			continue
		}
		end = x(d) + wide/2
		text(x(d), bottom-size*1.3, label, 0.5)
		text(x(d), bottom-size*2.7, strconv.Itoa(w.group.AtRisk[i]), 0.5)
	}
	text(c.Min.X, bottom-size*2.7, "n", 0)
}
