package view

import (
	"sync"
	"time"

	"cordwalk.example/cordwalk/app/chart"
	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
	"cordwalk.example/cordwalk/exam/progress"
)

// ModelScores is the function of each segment as the serial model sees it, with its band,
// for the visits of a course in order of time. Visits that are no point of their own (blind
// repeats) stay empty. The findings behind a point are those of the plain score.
func ModelScores(p exam.Patient, visits []exam.Visit, r progress.Result) Scores {
	plain := PlainScores(p.Species, visits)
	return func(i int) []SegmentValue {
		out := plain(i)
		at := map[string]int{}
		for k := range out {
			at[out[k].Segment] = k
			out[k].Left, out[k].Right = chart.Value{Count: out[k].Left.Count}, chart.Value{Count: out[k].Right.Count}
		}
		if !visits[i].RepeatOf.IsZero() {
			return out
		}
		for _, s := range r.Segments {
			k, ok := at[s.Segment]
			if !ok {
				continue
			}
			for _, pt := range s.Points {
				if !pt.Examined.Equal(visits[i].Examined) {
					continue
				}
				v := chart.Value{Known: true, Value: pt.Function, Banded: true, Low: pt.Low, High: pt.High, Count: pt.Findings}
				if s.Side == exam.Right.String() {
					out[k].Right = v
				} else {
					out[k].Left = v
				}
			}
		}
		return out
	}
}

// lastCourse is the model of the patient that was read last, so that adding today's visit, or
// changing it, does not compute the past again. One is kept: it may take tens of megabytes.
var lastCourse struct {
	sync.Mutex
	of     exam.ID
	course *progress.Course
}

// ForgetCourse lets go of the course that was read last.
func ForgetCourse() {
	lastCourse.Lock()
	defer lastCourse.Unlock()
	lastCourse.of, lastCourse.course = exam.ID{}, nil
}

// analyse is progress.Analyse, which goes on from the last course where that is the patient's.
// While one goroutine works with the course, others begin afresh.
func analyse(p exam.Patient, visits []exam.Visit, o progress.Options) (progress.Result, error) {
	if p.ID.IsZero() || o.Continue != nil {
		return progress.Analyse(progress.Series{Patient: p, Visits: visits}, o)
	}
	lastCourse.Lock()
	if lastCourse.of == p.ID {
		o.Continue = lastCourse.course
	}
	lastCourse.of, lastCourse.course = exam.ID{}, nil
	lastCourse.Unlock()
	r, err := progress.Analyse(progress.Series{Patient: p, Visits: visits}, o)
	if err == nil {
		lastCourse.Lock()
		lastCourse.of, lastCourse.course = p.ID, r.Course()
		lastCourse.Unlock()
	}
	return r, err
}

// ModelCourse analyses a patient's visits by the serial model and lays the course out from
// it: the strip and the limbs with their bands and forecasts. It takes its time: call it
// off the goroutine that draws. The model behind the result may go on with the patient's next
// visit: read the result, not its Course. Where the species has no model, the course is the plain one.
func ModelCourse(p exam.Patient, visits []exam.Visit, o progress.Options) (*Course, progress.Result, error) {
	r, err := analyse(p, visits, o)
	if err != nil {
		return nil, r, err
	}
	sorted := sortedVisits(visits)
	if len(r.Segments) == 0 {
		return NewCourse(p, sorted, PlainScores(p.Species, sorted), false), r, nil
	}
	c := NewCourse(p, sorted, ModelScores(p, sorted, r), true)
	c.Function = chart.Limbs{Visits: c.Limbs.Visits, Events: c.Limbs.Events, Span: c.Span}
	for _, l := range append(r.Limbs[:len(r.Limbs):len(r.Limbs)], r.Whole) {
		site, err := exam.ParseSite(l.Limb)
		label := words.T("Whole animal")
		if err == nil {
			label = capital(SiteName(site))
		}
		s := chart.Series{Label: label, Unit: "%", Min: 0, Max: 100, Model: true, Values: make([]chart.Value, len(sorted))}
		for i, v := range sorted {
			for _, pt := range l.Points {
				if pt.Examined.Equal(v.Examined) && v.RepeatOf.IsZero() {
					s.Values[i] = chart.Value{Known: true, Value: pt.Function, Banded: true, Low: pt.Low, High: pt.High, Count: pt.Findings}
				}
			}
		}
		for _, a := range l.Forecast {
			s.Forecast = append(s.Forecast, chart.Forecast{At: a.On, Value: a.Function, Low: a.Low, High: a.High})
		}
		c.Function.Limbs = append(c.Function.Limbs, s)
	}
	// Beyond the last visit the model's charts show the forecast too.
	var ahead []time.Time
	for _, a := range r.Whole.Forecast {
		ahead = append(ahead, a.On)
	}
	for _, e := range c.Events {
		ahead = append(ahead, e.At)
	}
	c.Function.Span = chart.SpanOf(c.Function.Visits, ahead...)
	return c, r, nil
}

// Sentence is the verdict of a course in one sentence; empty for a single visit.
func Sentence(r progress.Result) string {
	if r.Change == nil {
		return ""
	}
	return sheet.Say("", capital(r.Change.Words)+".")
}

// ClinicalCourse is the course for the clinical summary, its sentence in English, which the
// paper says in its own language; nil where there is no model.
func ClinicalCourse(p exam.Patient, visits []exam.Visit) (*sheet.CourseCharts, error) {
	c, r, err := ModelCourse(p, visits, progress.Options{})
	if err != nil {
		return nil, err
	}
	if len(r.Segments) == 0 {
		return nil, nil
	}
	english := ""
	if r.Change != nil {
		english = capital(r.Change.Words) + "."
	}
	return &sheet.CourseCharts{Sentence: english, Strip: c.Strip}, nil
}

// VertebralLevel says where a segment lies in the column of an animal of that weight, such
// as "lies in L4"; empty where that is not on record.
func VertebralLevel(s exam.Species, kg float64, seg anatomy.Segment) string {
	list, err := anatomy.VertebraOfSegment(s, kg, seg)
	if err != nil || len(list) == 0 {
		return ""
	}
	best := list[0]
	for _, v := range list {
		if v.Weight > best.Weight {
			best = v
		}
	}
	return words.T("lies in %s", best.Vertebra.String())
}
