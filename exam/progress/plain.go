package progress

import (
	"math"
	"slices"
	"strings"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/progress/repeat"
	"cordwalk.example/cordwalk/exam/stat"
)

// Plain is one measure over the visits with the statistics that anybody can check.
type Plain struct {
	Measure  string       `json:"measure"`
	Site     string       `json:"site,omitempty"`
	Joint    string       `json:"joint,omitempty"`
	Motion   string       `json:"motion,omitempty"`
	At       float64      `json:"at,omitempty"` // % along the bone
	Unit     string       `json:"unit"`
	Examiner string       `json:"examiner,omitempty"` // where readings are compared within one examiner only
	Values   []PlainValue `json:"values"`

	MDC95   *float64 `json:"mdc95"` // null where nothing is known of the noise
	SEM     *float64 `json:"sem"`
	Source  string   `json:"source,omitempty"` // of the two
	Change  *float64 `json:"change"`           // last value minus the first; null for one value
	Verdict string   `json:"verdict,omitempty"`

	MannKendall *PlainTrend `json:"mann_kendall"`
	TheilSen    *PlainSlope `json:"theil_sen"`
}

// PlainValue is one value of a measure.
type PlainValue struct {
	Examined time.Time `json:"examined"`
	Value    float64   `json:"value"`
	Visit    int       `json:"-"` // index of the visit
}

// PlainTrend is the Mann–Kendall test of the values in order.
type PlainTrend struct {
	S      int     `json:"s"`
	P      float64 `json:"p"` // two-sided
	N      int     `json:"n"`
	Exact  bool    `json:"exact"`
	Enough bool    `json:"enough"` // some order of these values would reach p < 0.05; else «too few visits»
}

// PlainSlope is the Theil–Sen slope with its 95 % interval; null limits where there are too few values.
type PlainSlope struct {
	PerWeek float64  `json:"slope_per_week"`
	Low     *float64 `json:"low"`
	High    *float64 `json:"high"`
	Exact   bool     `json:"exact"`
}

// Symmetric is left against right of one measure at one visit.
type Symmetric struct {
	Measure  string    `json:"measure"`
	Limbs    string    `json:"limbs"` // "left-right", "thoracic", "pelvic"
	Examined time.Time `json:"examined"`
	Index    *float64  `json:"index"`   // 200·(L − R)/(L + R) %
	Deficit  *float64  `json:"deficit"` // 100·(1 − smaller/larger) %
}

func finite(v float64) *float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return nil
	}
	return &v
}

// withinExaminer: readings of these measures are compared within one examiner only (progression.md 6).
func withinExaminer(m exam.Measure) bool {
	switch m {
	case exam.ThighGirth, exam.BrachiumGirth, exam.AntebrachiumGirth, exam.CrusGirth, exam.RangeOfMotion:
		return true
	}
	return false
}

func foldName(s string) string { return strings.ToLower(strings.Join(strings.Fields(s), " ")) }

// plainOf gathers the measures of the visits, oldest first, into rows: one for each cell, way of
// measuring and, where it matters, examiner.
func plainOf(visits []exam.Visit, own repeat.Practice) []Plain {
	type row struct {
		first exam.Measured
		who   string
		out   Plain
		names map[string]bool
	}
	var rows []*row
	index := map[string]*row{}
	for i, v := range visits {
		if !v.RepeatOf.IsZero() {
			continue
		}
		for _, m := range v.Measures {
			key := m.Key() + "\x00" + m.Position + "\x00" + m.Variant
			who := ""
			if withinExaminer(m.Measure) {
				who = v.Examiner
				key += "\x00" + foldName(who)
				if m.Clipped {
					key += "\x00clipped"
				}
			}
			r, ok := index[key]
			if !ok {
				in := m.Measure.Info()
				r = &row{first: m, who: who, names: map[string]bool{}, out: Plain{Measure: in.Name, Site: m.Site.String(), Joint: m.Joint.String(), Motion: m.Motion, At: m.At, Unit: in.Unit, Examiner: who}}
				index[key] = r
				rows = append(rows, r)
			}
			r.names[foldName(v.Examiner)] = true
			r.out.Values = append(r.out.Values, PlainValue{v.Examined, m.Value, i})
		}
	}
	slices.SortStableFunc(rows, func(a, b *row) int {
		if a.first.Measure != b.first.Measure {
			return int(a.first.Measure) - int(b.first.Measure)
		}
		return strings.Compare(a.first.Key(), b.first.Key())
	})
	var out []Plain
	for _, r := range rows {
		noise, known := own.Noise(repeat.Quantity{Measure: r.first.Measure}, len(r.names) == 1)
		r.out.judge(noise, known)
		out = append(out, r.out)
	}
	return out
}

// judge works out a row's statistics.
func (p *Plain) judge(noise repeat.Noise, known bool) {
	if known {
		p.MDC95, p.SEM, p.Source = finite(noise.MDC95), finite(noise.SEM), noise.Source
	}
	n := len(p.Values)
	if n < 2 {
		return
	}
	d := p.Values[n-1].Value - p.Values[0].Value
	p.Change = finite(d)
	if known {
		p.Verdict = noise.Judge(d).String()
	}
	x, y := make([]float64, n), make([]float64, n)
	for i, v := range p.Values {
		x[i] = v.Examined.Sub(p.Values[0].Examined).Hours() / 24 / 7
		y[i] = v.Value
	}
	t := stat.MannKendall(y)
	p.MannKendall = &PlainTrend{S: t.S, P: t.P, N: n, Exact: t.Exact, Enough: t.CanBeCalled}
	if s := stat.TheilSen(x, y, 0.95); !math.IsNaN(s.Slope) {
		p.TheilSen = &PlainSlope{PerWeek: s.Slope, Low: finite(s.Low), High: finite(s.High), Exact: s.Exact}
	}
}

// symmetryOf compares left and right of girths and weight bearing at each visit.
func symmetryOf(visits []exam.Visit) []Symmetric {
	var out []Symmetric
	add := func(v exam.Visit, name, limbs string, l, r float64) {
		s := stat.Compare(l, r)
		out = append(out, Symmetric{name, limbs, v.Examined, finite(s.Index), finite(s.Deficit)})
	}
	for _, v := range visits {
		if !v.RepeatOf.IsZero() {
			continue
		}
		for _, m := range v.Measures {
			switch {
			case m.Measure == exam.WeightBearing && m.Site.Side() == exam.Left:
				if o, ok := v.Measured(m.Measure, m.Site.Mirror()); ok {
					limbs := "pelvic"
					if m.Site.IsThoracic() {
						limbs = "thoracic"
					}
					add(v, m.Measure.String(), limbs, m.Value, o.Value)
				}
			case withinExaminer(m.Measure) && m.Measure != exam.RangeOfMotion && m.Site == exam.Left:
				for _, o := range v.Measures {
					if o.Measure == m.Measure && o.Site == exam.Right && o.At == m.At && o.Position == m.Position && o.Clipped == m.Clipped {
						add(v, m.Measure.String(), "left-right", m.Value, o.Value)
						break
					}
				}
			}
		}
	}
	return out
}
