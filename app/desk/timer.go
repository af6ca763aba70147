package desk

import (
	"time"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// timerRow measures seconds of standing or walking, and counts steps with one tap each.
func newTimerRow(p *examPage) fyne.CanvasObject {
	shown := mark.Heading(words.T("0.0 s"))
	var began time.Time
	var stop chan struct{}
	var run *mark.Button
	elapsed := 0.0
	halt := func() {
		if stop != nil {
			close(stop)
			stop = nil
			elapsed = time.Since(began).Seconds()
			shown.Set(seconds(elapsed))
			run.SetWords(words.T("Start"))
		}
	}
	run = mark.NewButton(words.T("Start"), "timer", func() {
		if stop != nil {
			halt()
			return
		}
		began = time.Now()
		stop = make(chan struct{})
		run.SetWords(words.T("Stop"))
		end := stop
		go func() {
			tick := time.NewTicker(100 * time.Millisecond)
			defer tick.Stop()
			for {
				select {
				case <-end:
					return
				case <-p.win.app.ctx.Done():
					return
				case <-tick.C:
					p.win.app.onUI(func() {
						if stop == end {
							shown.Set(seconds(time.Since(began).Seconds()))
						}
					})
				}
			}
		}()
	})
	keep := func(m exam.Measure) func() {
		return func() {
			halt()
			if err := p.sheet.PutMeasured(exam.Measured{Measure: m, Value: float64(int(elapsed*10+0.5)) / 10}); err != nil {
				p.win.foot.fail(err.Error(), nil)
				return
			}
			p.choose(tabMeasures)
			p.win.foot.say(words.T("%s: %s", view.MeasureName(m), seconds(elapsed)))
		}
	}
	p.pending = append(p.pending, func() { halt() })
	count := func(m exam.Measure, limb exam.Site) func() {
		return func() {
			n := 0.0
			if x, ok := p.sheet.Visit().Measured(m, limb); ok {
				n = x.Value
			}
			if err := p.sheet.PutMeasured(exam.Measured{Measure: m, Site: limb, Value: n + 1}); err != nil {
				p.win.foot.fail(err.Error(), nil)
				return
			}
			p.win.foot.say(words.T("%s, %s: %d", view.MeasureName(m), view.SiteName(limb), int(n)+1))
		}
	}
	both := func(m exam.Measure, limb exam.Site) func() {
		add, all := count(m, limb), count(exam.StepsScored, limb)
		return func() { all(); add() }
	}
	timer := mark.Wrapped(look.Unit, mark.Sized(96, look.Target, shown), run,
		mark.NewButton(words.T("Keep as standing time"), "", keep(exam.StandTime)),
		mark.NewButton(words.T("Keep as walking time"), "", keep(exam.WalkTime)))
	steps := mark.Wrapped(look.Unit,
		mark.NewButton(words.T("left hind: step taken"), "", both(exam.StepsWeightBearing, exam.PelvicLeft)),
		mark.NewButton(words.T("left hind: dragged"), "", both(exam.StepsWithMistake, exam.PelvicLeft)),
		mark.NewButton(words.T("right hind: step taken"), "", both(exam.StepsWeightBearing, exam.PelvicRight)),
		mark.NewButton(words.T("right hind: dragged"), "", both(exam.StepsWithMistake, exam.PelvicRight)))
	return mark.Column(look.Unit, timer, mark.NewPara(words.T("Step counter: one tap for each step.")).In(look.InkSoft), steps)
}

func seconds(s float64) string {
	return words.T("%s s", plainNumber(float64(int(s*10+0.5))/10))
}
