package main

import (
	"fmt"
	"math"
	"strings"
	"text/tabwriter"

	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// outcomesCmd shows how the practice's animals fared.
type outcomesCmd struct{}

type outcomeJSON struct {
	Problem    string        `json:"problem"`
	Presenting string        `json:"presenting"`
	Animals    int           `json:"animals"`
	Walked     int           `json:"walked"`
	Died       int           `json:"died"`
	Lost       int           `json:"lost"`
	MedianDays *float64      `json:"median_days"`
	AtRisk     []riskJSON    `json:"at_risk"`
	Curve      []curveJSON   `json:"curve"` // share walking by Kaplan–Meier
	Competing  []shareJSON   `json:"walking_beside_death"`
	Published  []publishJSON `json:"published"`
	Words      string        `json:"words"`
}

type riskJSON struct {
	Day    float64 `json:"day"`
	AtRisk int     `json:"at_risk"`
}

type curveJSON struct {
	Day     float64  `json:"day"`
	AtRisk  int      `json:"at_risk"`
	Walking float64  `json:"walking"`
	Low     *float64 `json:"low"`
	High    *float64 `json:"high"`
}

type shareJSON struct {
	Day   float64  `json:"day"`
	Share float64  `json:"share"`
	Low   *float64 `json:"low"`
	High  *float64 `json:"high"`
}

type publishJSON struct {
	Words  string  `json:"words"`
	Share  float64 `json:"share,omitempty"`
	N      int     `json:"n,omitempty"`
	Days   float64 `json:"days,omitempty"`
	Source string  `json:"source"`
}

func known(x float64) *float64 {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return nil
	}
	return &x
}

// histories reads all animals with their visits.
func (e *env) histories(s *storage.Store) ([]view.CaseHistory, error) {
	seq, n, err := e.animals(s, nil)
	if err != nil {
		return nil, err
	}
	bar := e.progress()
	var out []view.CaseHistory
	for a, err := range seq {
		if err != nil {
			return nil, err
		}
		out = append(out, view.CaseHistory{Patient: a.Patient, Visits: a.Visits})
		if bar != nil {
			bar(words.T("reading"), int64(len(out)), int64(n))
		}
	}
	return out, nil
}

func (c *outcomesCmd) Run(e *env) error {
	return e.with(func(s *storage.Store) error {
		cases, err := e.histories(s)
		if err != nil {
			return err
		}
		list := view.Outcomes(cases)
		if e.c.JSON {
			out := struct {
				Outcomes []outcomeJSON `json:"outcomes"`
			}{[]outcomeJSON{}}
			for _, o := range list {
				j := outcomeJSON{Problem: o.Problem, Presenting: o.Presenting.String(), Animals: o.Animals, Walked: o.Walked, Died: o.Died, Lost: o.Lost,
					AtRisk: []riskJSON{}, Curve: []curveJSON{}, Competing: []shareJSON{}, Published: []publishJSON{}, Words: o.Words()}
				if m, ok := o.Median(); ok {
					j.MedianDays = &m
				}
				for i, d := range view.OutcomeDays {
					j.AtRisk = append(j.AtRisk, riskJSON{d, o.AtRisk[i]})
				}
				for _, st := range o.Curve.Steps {
					j.Curve = append(j.Curve, curveJSON{st.Time, st.AtRisk, 1 - st.Survival, known(1 - st.High), known(1 - st.Low)})
				}
				for _, w := range o.Walking {
					j.Competing = append(j.Competing, shareJSON{w.Time, w.Share, known(w.Low), known(w.High)})
				}
				for _, p := range o.Published {
					j.Published = append(j.Published, publishJSON(p))
				}
				out.Outcomes = append(out.Outcomes, j)
			}
			return e.printJSON(out)
		}
		e.protection(s)
		if len(list) == 0 {
			e.say("%s", words.T("No animal came that could not walk."))
			return nil
		}
		for _, o := range list {
			e.say("%s, %s: %s", o.Problem, o.Presenting.Words(), o.Words())
			w := tabwriter.NewWriter(e.out, 0, 4, 2, ' ', tabwriter.AlignRight)
			fmt.Fprintf(w, "  %s\t", words.T("day"))
			for _, d := range view.OutcomeDays {
				fmt.Fprintf(w, "%.0f\t", d)
			}
			fmt.Fprintf(w, "\n  %s\t", words.T("watched"))
			for _, n := range o.AtRisk {
				fmt.Fprintf(w, "%d\t", n)
			}
			fmt.Fprintf(w, "\n  %s\t", words.T("seen to walk"))
			for _, d := range view.OutcomeDays {
				share, _, _, _ := o.ShareBy(d)
				fmt.Fprintf(w, "%.0f %%\t", 100*share)
			}
			fmt.Fprintln(w)
			if err := w.Flush(); err != nil {
				return err
			}
			for _, p := range o.Published {
				line := words.Of(p.Words)
				if p.Share > 0 {
					line += fmt.Sprintf(", %.0f %%", 100*p.Share)
				}
				if p.N > 0 {
					line += words.T(" of %d", p.N)
				}
				if p.Days > 0 {
					line += words.T(", day %s", fmt.Sprint(p.Days))
				}
				e.say("  %s", words.T("published: %s (%s)", line, p.Source))
			}
		}
		return nil
	})
}

// repeatCmd shows the practice's own repeatability.
type repeatCmd struct{}

type repeatJSON struct {
	Quantity     string   `json:"quantity"`
	SameExaminer bool     `json:"same_examiner"`
	Pairs        int      `json:"pairs"`
	Animals      int      `json:"animals"`
	Exact        *float64 `json:"exact_agreement"`
	Kappa        *float64 `json:"weighted_kappa"`
	ICC          *float64 `json:"icc"`
	SEM          *float64 `json:"sem"`
	MDC95        *float64 `json:"mdc95"`
	Used         bool     `json:"used"`
	Needed       int      `json:"pairs_needed"`
}

func (c *repeatCmd) Run(e *env) error {
	return e.with(func(s *storage.Store) error {
		cases, err := e.histories(s)
		if err != nil {
			return err
		}
		own := view.Repeatability(cases)
		if e.c.JSON {
			out := struct {
				Rows []repeatJSON `json:"rows"`
			}{[]repeatJSON{}}
			for _, r := range own.Rows() {
				out.Rows = append(out.Rows, repeatJSON{r.Quantity.String(), r.SameExaminer, r.Pairs, r.Animals, known(r.Exact), known(r.Kappa.Kappa),
					known(r.ICC), known(r.Repeats.SEM), known(r.Repeats.MDC95), r.Used, r.Needed})
			}
			return e.printJSON(out)
		}
		e.protection(s)
		rows := view.RepeatRows(own)
		if len(rows) == 0 {
			e.say("%s", words.T("No repeat exam yet: the same animal, the same day, a second time or a second examiner. Published figures are used."))
			return nil
		}
		w := tabwriter.NewWriter(e.out, 0, 4, 2, ' ', 0)
		for _, r := range rows {
			fmt.Fprintf(w, "%s\t%s\t%s\t%s\t%s\t%s\n", r.Quantity, r.Who, r.Pairs, r.Agree, r.Noise, r.Used)
		}
		return w.Flush()
	})
}

// conflictsCmd lists fields with several values.
type conflictsCmd struct {
	Patient string `arg:"" optional:"" help:"Id or name of the patient; all where not said."`
}

type conflictJSON struct {
	Patient exam.ID         `json:"patient"`
	Record  exam.ID         `json:"record"`
	Number  int             `json:"number"` // names the conflict for resolve
	Field   string          `json:"field"`
	Values  []conflictValue `json:"values"`
}

type conflictValue struct {
	Pick     int    `json:"pick"`
	Value    string `json:"value"`
	Examiner string `json:"examiner"`
	Device   string `json:"device"`
	Time     string `json:"time"`
	Late     bool   `json:"late,omitempty"`
	Doubtful bool   `json:"doubtful,omitempty"`
}

func (c *conflictsCmd) Run(e *env) error {
	return e.with(func(s *storage.Store) error {
		var names []string
		if c.Patient != "" {
			names = []string{c.Patient}
		} else {
			list, err := s.Caseload(e.ctx)
			if err != nil {
				return err
			}
			for _, p := range list {
				names = append(names, p.ID.String())
			}
		}
		out := []conflictJSON{}
		for _, n := range names {
			r, err := e.patient(s, n)
			if err != nil {
				return err
			}
			for i, x := range r.Conflicts {
				j := conflictJSON{Patient: r.Patient.ID, Record: x.Record, Number: i + 1, Field: x.Field, Values: []conflictValue{}}
				for k, v := range x.Values {
					j.Values = append(j.Values, conflictValue{k + 1, v.Words, v.Examiner, v.Device, v.At.Format("2006-01-02T15:04:05Z07:00"), v.Late, v.Doubtful})
				}
				out = append(out, j)
				if e.c.JSON {
					continue
				}
				e.say("%s", words.T("%s, conflict %d: %s", r.Patient.Name, j.Number, j.Field))
				for _, v := range j.Values {
					note := ""
					if v.Late {
						note = ", " + words.T("arrived after closing")
					}
					if v.Doubtful {
						note += ", " + words.T("an entry is missing that may have replaced it")
					}
					e.say("  %d  %s  (%s, %s, %s%s)", v.Pick, v.Value, v.Examiner, v.Device, v.Time, note)
				}
			}
		}
		if e.c.JSON {
			return e.printJSON(struct {
				Conflicts []conflictJSON `json:"conflicts"`
			}{out})
		}
		if len(out) == 0 {
			e.say("%s", words.T("No conflict."))
		}
		return nil
	})
}

// resolveCmd chooses one of several values.
type resolveCmd struct {
	Patient  string `arg:"" help:"Id or name of the patient."`
	Number   int    `arg:"" help:"Number of the conflict, as conflicts prints it."`
	Pick     int    `arg:"" help:"Number of the value to keep."`
	Reason   string `help:"Why; needed in a closed visit."`
	Examiner string `help:"Who chooses."`
}

func (c *resolveCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		r, err := e.patient(s, c.Patient)
		if err != nil {
			return err
		}
		if c.Number < 1 || c.Number > len(r.Conflicts) {
			return fmt.Errorf("%s", words.N(len(r.Conflicts), "%s has %d conflict", "%s has %d conflicts", r.Patient.Name, len(r.Conflicts)))
		}
		x := r.Conflicts[c.Number-1]
		who, err := e.examiner(s, c.Examiner)
		if err != nil {
			return err
		}
		if _, err := s.Resolve(e.ctx, who, x, c.Pick-1, strings.TrimSpace(c.Reason)); err != nil {
			return err
		}
		e.say("%s", words.T("Kept for %s: %s", x.Field, x.Values[c.Pick-1].Words))
		return nil
	})
}
