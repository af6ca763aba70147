package sheet

import (
	"fmt"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/progress"
)

// WithTrends returns the input with what the serial model says of the whole animal since the
// first visit and of each limb since the last one, so that the sheet claims no more than is
// sure. It takes longer than the sheet itself: some fifty milliseconds, and about a second
// for the first animal of a species. Where the species has no model, or there are too few
// visits, the input comes back as it was.
func WithTrends(in Input) (Input, error) {
	if len(in.Visits) < 2 {
		return in, nil
	}
	r, err := progress.Analyse(progress.Series{Patient: in.Patient, Visits: in.Visits}, progress.Options{})
	if err != nil {
		return in, fmt.Errorf("reading the course of %s: %w", in.Patient.Name, err)
	}
	course := r.Course()
	if course == nil || course.Len() < 2 {
		return in, nil
	}
	now, first := course.Len()-1, 0
	in.Whole = trendOf(course.Change(first, now))
	since := r.Course().Visit(now - 1).Examined
	last := course.Result(in.Patient, progress.Options{Since: since})
	for _, l := range last.Limbs {
		for i, site := range exam.Limbs() {
			if l.Limb == site.String() && l.Change != nil {
				in.Limbs[i] = &Trend{Since: since, Better: l.Change.Better, Same: l.Change.Same, Worse: l.Change.Worse}
			}
		}
	}
	return in, nil
}

func trendOf(c progress.Change) *Trend {
	return &Trend{Since: c.From, Better: c.Better, Same: c.Same, Worse: c.Worse}
}
