package view

import (
	"context"
	"errors"
	"slices"
	"strings"
	"time"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/anatomy"
	"cordwalk.example/cordwalk/storage"
)

// Keeper is the part of the store that an open exam writes to.
type Keeper interface {
	Apply(ctx context.Context, examiner string, edits ...storage.Edit) (storage.Receipt, error)
}

// Edits turns one action into what the store takes. A closed visit's edits carry the
// amendment's reason; what takes an action back is marked so for the history.
func (b Batch) Edits() []storage.Edit {
	var out []storage.Edit
	for _, c := range b.Cells {
		if c.Has {
			out = append(out, storage.FindingEdit(b.Patient, b.Visit, c.After))
		} else {
			out = append(out, storage.ClearFindingEdit(b.Patient, b.Visit, c.Key))
		}
	}
	if len(b.Measures) > 0 {
		before := exam.Visit{ID: b.Visit, Patient: b.Patient}
		after := before
		for _, m := range b.Measures {
			if m.Had {
				before.Measures = append(before.Measures, m.Before)
			}
			if m.Has {
				after.Measures = append(after.Measures, m.After)
			}
		}
		out = append(out, storage.VisitEdits(before, after)...)
	}
	if b.Head {
		out = append(out, storage.VisitEdits(b.Before, b.After)...)
	}
	switch {
	case b.Reason != "":
		out = storage.AmendEdits(exam.Visit{ID: b.Visit}, b.Reason, out...)
	case b.Undo:
		out = storage.UndoEdits(out...)
	}
	return out
}

// SaveTo returns a Save for an exam sheet: each action becomes one write of the saver.
func SaveTo(s *Saver, k Keeper, examiner string) func(Batch) {
	return func(b Batch) {
		edits := b.Edits()
		// The queue refuses only after closing, when the sheet takes no keys either.
		_, _ = s.Queue(func(ctx context.Context) error {
			_, err := k.Apply(ctx, examiner, edits...)
			return err
		})
	}
}

// StartVisit makes a new visit of a patient: who, when, in which zone and by which protocol.
func StartVisit(id exam.ID, p exam.Patient, examiner, protocol, zone string, at time.Time) exam.Visit {
	return exam.Visit{ID: id, Patient: p.ID, Examined: at, Zone: zone, Examiner: examiner, Protocol: protocol}
}

// ExamOf prepares the grid of a visit: the protocol's agenda, what precautions bar, the
// usual posture, and the segments that each row tests. earlier are the patient's other
// visits. Save, Changed, Resume and Now are the caller's to add.
func ExamOf(pr exam.Practice, p exam.Patient, visit exam.Visit, others []exam.Visit) (ExamInput, error) {
	if p.Status == exam.Died {
		return ExamInput{}, errors.New(words.T("%s has died; no exam can be recorded.", p.Name))
	}
	protocol, ok := exam.FindProtocol(pr, visit.Protocol)
	if !ok {
		protocol, _ = exam.FindProtocol(pr, exam.FullSpinal)
	}
	last := LastBefore(others, visit)
	agenda := exam.AgendaFor(protocol, last, visit)
	bars := exam.Bars(p.Precautions, exam.DayOf(visit.Examined))
	return ExamInput{
		Patient: p, Visit: visit, Earlier: others, Units: pr.Units(),
		Items: agenda.Items, Measures: agenda.Measures, Extra: agenda.Extra,
		Barred:  bars.Why,
		Posture: PostureOf(exam.UsualPosition(p, visit.Examined)),
		Agenda:  func(today exam.Visit) exam.Agenda { return exam.AgendaFor(protocol, last, today) },
		Segments: func(i exam.Item) string {
			return SegmentsOf(p.Species, i)
		},
	}, nil
}

// LastBefore returns the visit before another one, nil where there is none.
func LastBefore(visits []exam.Visit, v exam.Visit) *exam.Visit {
	var last *exam.Visit
	for i := range visits {
		if x := &visits[i]; x.ID != v.ID && x.ID != v.RepeatOf && !x.Examined.After(v.Examined) && (last == nil || !x.Examined.Before(last.Examined)) {
			last = x
		}
	}
	return last
}

// SegmentsOf names the segments that an item tests, such as "L4–L6": for the thoracic and
// then the pelvic limb where it is tested on both; empty where it tests none in particular.
func SegmentsOf(s exam.Species, i exam.Item) string {
	var spans []string
	for _, site := range i.Info().Sites {
		span := anatomy.Span(s, anatomy.ArcOf(s, i, site))
		if span == "" || slices.Contains(spans, span) {
			continue
		}
		if len(spans) > 0 && !site.IsLimb() {
			continue // beside the limbs' segments, those of tail and perineum are left to the hover
		}
		spans = append(spans, span)
	}
	return strings.Join(spans, " · ")
}
