package view

import (
	"math"
	"strconv"
	"strings"

	"cordwalk.example/cordwalk/app/chart"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/stim"
)

// StimWidths are the pulse widths, in ms, that a new test offers: fixed steps within 0.01 to 100 ms and a
// long pulse for the rheobase (progression.md 5.2: SD-page; the steps are a choice).
var StimWidths = []float64{0.05, 0.1, 0.3, 1, 3, 10, 30, 100, 300}

// lawTitles are the laws as screens call them.
var lawTitles = map[string]string{"weiss": "Weiss", "weiss-log": "Weiss, relative errors", "weiss-charge": "Weiss, charge",
	"lapicque": "Lapicque", "lapicque-log": "Lapicque, relative errors"}

func stimTerms() []string {
	out := stim.Terms()
	for _, l := range stim.Laws() {
		out = append(out, lawTitles[l.String()])
	}
	return out
}

// LawName names a law of strength and duration.
func LawName(l stim.Law) string { return words.Of(lawTitles[l.String()]) }

// ParseCurrents reads thresholds in mA as they are typed, set apart by spaces or semicolons: "12 12,5".
func ParseCurrents(text string) ([]float64, error) {
	var out []float64
	for _, w := range strings.FieldsFunc(text, func(r rune) bool { return r == ' ' || r == ';' || r == '\t' }) {
		x, err := strconv.ParseFloat(strings.ReplaceAll(w, ",", "."), 64)
		if err != nil || !(x > 0) || math.IsInf(x, 0) {
			return nil, &exam.Invalid{Field: "threshold", Value: w, Allowed: words.T("currents in mA such as 12 or 12.5, with spaces between repeats")}
		}
		out = append(out, x)
	}
	return out, nil
}

// CurrentsWords writes thresholds as ParseCurrents reads them.
func CurrentsWords(list []float64) string {
	parts := make([]string, len(list))
	for i, x := range list {
		parts[i] = Plain(x)
	}
	return strings.Join(parts, " ")
}

// StimResult is what a test shows: its figures in words, what to think of them, and its chart.
type StimResult struct {
	Chronaxie string
	Rheobase  string
	Fit       string
	Label     string // a cautious word; empty where nothing can be said
	Change    string // against the earlier test of the same muscle, site and law; empty where there is none
	Cautions  []string
	Chart     chart.Strength
	Fitted    bool
}

// NewStimResult fits a test and compares it with the last one of the same muscle, site and law in the earlier
// visits, which stand in the order of time.
func NewStimResult(t stim.Test, earlier []exam.Visit) StimResult {
	var out StimResult
	for _, p := range t.Points() {
		out.Chart.Points = append(out.Chart.Points, chart.StrengthPoint{Width: p.Width, Current: p.Current})
	}
	law := lawOf(t)
	f, err := stim.Do(t.Points(), law)
	if err != nil {
		if len(t.Points()) >= 3 {
			out.Cautions = append(out.Cautions, err.Error())
		} else {
			out.Cautions = append(out.Cautions, words.T("At least three pulse widths are needed, better five over a factor of 100."))
		}
		return out
	}
	out.Fitted = f.Chargeable
	if f.Chargeable {
		out.Chart.Curve = func(w float64) float64 { return law.Current(f.Rheobase.Value, f.Chronaxie.Value, w) }
		out.Chart.Rheobase, out.Chart.Chronaxie, out.Chart.Low, out.Chart.High = f.Rheobase.Value, f.Chronaxie.Value, f.Chronaxie.Low, f.Chronaxie.High
		out.Chronaxie = words.T("Chronaxie %s (%s)", intervalWords(f.Chronaxie, "ms"), LawName(law))
		out.Rheobase = words.T("Rheobase %s", intervalWords(f.Rheobase, "mA"))
		out.Fit = words.T("The law explains %d %% of the variance (R²).", int(math.Round(100*max(0, f.R2))))
		out.Label = words.Of(f.Label().String())
	}
	for _, i := range f.Bad {
		for k := range out.Chart.Points {
			if out.Chart.Points[k].Width == f.Points[i].Width {
				out.Chart.Points[k].Bad = true
			}
		}
		out.Cautions = append(out.Cautions, words.T("The point at %s ms does not fit the others: repeat it.", figure(f.Points[i].Width)))
	}
	for _, w := range f.Warnings {
		if rest, ok := strings.CutPrefix(w, "a longer pulse needed more current ("); ok {
			ms, _, _ := strings.Cut(rest, " ms")
			w = words.T("A longer pulse needed more current (%s ms): repeat that point.", ms)
		} else {
			w = words.Of(w)
		}
		out.Cautions = append(out.Cautions, capital(w))
	}
	if t.Voltage {
		out.Cautions = append(out.Cautions, words.T("Constant voltage: the chronaxie comes out 30 to 40 %% shorter than with constant current."))
	}
	out.Change = stimChange(t, f, earlier)
	return out
}

func lawOf(t stim.Test) stim.Law {
	if l, err := stim.ParseLaw(t.Law); err == nil {
		return l
	}
	return stim.Weiss
}

// stimChange compares with the newest earlier test.
func stimChange(t stim.Test, f stim.Fit, earlier []exam.Visit) string {
	for i := len(earlier) - 1; i >= 0; i-- {
		for _, r := range earlier[i].Stim {
			old, err := stim.ReadTest(r)
			if err != nil || !strings.EqualFold(strings.TrimSpace(old.Muscle), strings.TrimSpace(t.Muscle)) || old.Site != t.Site {
				continue
			}
			day := Day(earlier[i].Examined)
			if lawOf(old) != f.Law || old.Voltage != t.Voltage {
				return words.T("Not comparable with %s: another law or another stimulator.", day)
			}
			was, err := stim.Do(old.Points(), f.Law)
			if err != nil {
				continue
			}
			ratio, changed, ok := stim.Change(was, f)
			if !ok {
				continue
			}
			if !changed {
				return words.T("Chronaxie not clearly other than on %s (%s times, %s to %s).", day, figure(ratio.Value), figure(ratio.Low), figure(ratio.High))
			}
			if ratio.Value > 1 {
				return words.T("Chronaxie longer than on %s (%s times, %s to %s).", day, figure(ratio.Value), figure(ratio.Low), figure(ratio.High))
			}
			return words.T("Chronaxie shorter than on %s (%s times, %s to %s).", day, figure(ratio.Value), figure(ratio.Low), figure(ratio.High))
		}
	}
	return ""
}

// figure writes a value with three digits that count, with the decimal sign of the language in use.
func figure(x float64) string {
	if x == 0 || math.IsNaN(x) || math.IsInf(x, 0) {
		return number(x)
	}
	places := max(0, 2-int(math.Floor(math.Log10(math.Abs(x)))))
	s := strconv.FormatFloat(x, 'f', places, 64)
	if strings.Contains(s, ".") {
		s = strings.TrimRight(strings.TrimRight(s, "0"), ".")
	}
	return words.Decimal("", s)
}

func intervalWords(i stim.Interval, unit string) string {
	if math.IsNaN(i.Low) || math.IsNaN(i.High) {
		return figure(i.Value) + " " + unit
	}
	return words.T("%s %s, 95 %% interval %s to %s", figure(i.Value), unit, figure(max(0, i.Low)), figure(i.High))
}

// SessionRemarks says which figures of a session lie outside what the literature gives.
func SessionRemarks(s stim.Session) []string {
	var out []string
	for _, r := range s.Outside() {
		out = append(out, words.T("%s %s %s: the literature says %s to %s (%s)", capital(words.Of(r.Name)), figure(r.Value), r.Unit, figure(r.Low), figure(r.High), r.Source))
	}
	if w := s.SkinRemark(); w != "" {
		out = append(out, capital(words.Of(w)))
	}
	return out
}

// StimAllowed says whether a session may be logged: the questions are answered and nothing forbids it; else why not.
func StimAllowed(c stim.Consent, asked bool) (bool, string) {
	switch {
	case !asked:
		return false, words.T("Ask the questions before the first session.")
	case len(c.Forbidden()) > 0:
		var why []string
		for _, q := range c.Forbidden() {
			why = append(why, words.Of(q.Words))
		}
		return false, words.T("No stimulation: yes to %s Ask the veterinarian.", strings.Join(why, " "))
	case len(c.Missing()) > 0:
		return false, words.N(len(c.Missing()), "%d question is not answered, or a yes has no reason yet.", "%d questions are not answered, or a yes has no reason yet.", len(c.Missing()))
	}
	return true, ""
}
