package storage_test

import (
	"fmt"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
)

func apply(t testing.TB, s *storage.Store, edits ...storage.Edit) storage.Receipt {
	t.Helper()
	r, err := s.Apply(ctx, "R. Okafor", edits...)
	require.NoError(t, err)
	return r
}

// patientWithVisit saves one patient with one open visit.
func patientWithVisit(t testing.TB, s *storage.Store) (exam.Patient, exam.Visit) {
	t.Helper()
	p := samplePatient()
	v := sampleVisit(p.ID)
	apply(t, s, storage.PatientEdits(exam.Patient{}, p)...)
	apply(t, s, storage.VisitEdits(exam.Visit{}, v)...)
	return p, v
}

func TestEveryFieldGoesThereAndBack(t *testing.T) {
	s := storagetest.Open(t)
	p, v := patientWithVisit(t, s)
	// Everything is changed, then everything is cleared.
	p2 := p
	p2.Name, p2.Species, p2.Breed, p2.Sex, p2.Neutered, p2.Born = "Fern", exam.Cat, "", exam.Female, false, "2020"
	p2.Owner, p2.Veterinarian = exam.Contact{Name: "Bo"}, exam.Contact{Name: "Dr Ash", Email: "ash@example.org"}
	p2.OutOfHours, p2.Referral = exam.Contact{Phone: "555 0199"}, exam.Referral{By: "Dr Ash"}
	p2.Status, p2.StatusSince, p2.RecheckDays, p2.Note, p2.Demo = exam.Discharged, "2026-05-01", 0, "", true
	p2.Problems = append(slices.Clone(p.Problems), exam.Problem{ID: storage.NewID(), Diagnosis: "neuritis", Side: "left", Resolved: "2026-04"})
	p2.Problems[0].Note = "operated"
	p2.Precautions, p2.Goals, p2.Medicines = nil, nil, nil
	p2.Sent = []exam.Sent{{ID: storage.NewID(), Visit: v.ID, At: at("2026-03-03T08:00:00+01:00"), Kind: "sheet", Examiner: "R. Okafor", Language: "fr", Summary: "Fern va mieux.", Reworded: true, Hash: "ab12", Note: "confirmed"},
		{ID: storage.NewID(), Visit: v.ID, At: at("2026-03-03T09:00:00+01:00"), Kind: "letter"}}
	apply(t, s, storage.PatientEdits(p, p2)...)
	v2 := v
	v2.Examined, v2.Zone, v2.Examiner, v2.Protocol = at("2026-03-02T23:30:00-05:00"), "America/New_York", "B. Lund", "weekly"
	v2.Sedation, v2.Aid, v2.Surface, v2.Session, v2.RepeatOf = exam.SedationNone, "", "slick", "after", storage.NewID()
	v2.Doses, v2.Treatments, v2.Home, v2.Report, v2.Note, v2.NextVisit = nil, nil, nil, exam.OwnerReport{}, "", ""
	v2.Findings = append(slices.Clone(v.Findings[1:]), finding(exam.Key{Item: exam.NystagmusDirection, Site: exam.Midline}, 4, ""))
	v2.Measures = []exam.Measured{{Measure: exam.RangeOfMotion, Site: exam.Left, Joint: exam.Stifle, Motion: "flexion", Value: 44, EndFeel: "soft"},
		{Measure: exam.ScaleMGCS, Value: 17, Variant: "modified", BestEnd: 18, Note: "calm", Position: "sternal"}}
	v2.Answers = []exam.Acknowledgement{{Rule: "deep-pain", Told: "Dr Ash", Note: "by telephone", Examiner: "B. Lund", At: at("2026-03-02T23:40:00-05:00")}}
	apply(t, s, storage.VisitEdits(v, v2)...)
	r, err := s.Patient(p.ID)
	require.NoError(t, err)
	require.Empty(t, r.Unshown)
	require.Empty(t, storage.PatientEdits(r.Patient, p2), "what was read differs from what was saved")
	require.Empty(t, storage.PatientEdits(p2, r.Patient))
	require.Len(t, r.Patient.Sent, 2)
	for i, x := range r.Patient.Sent {
		require.True(t, x.At.Equal(p2.Sent[i].At))
		x.At = p2.Sent[i].At
		require.Equal(t, p2.Sent[i], x)
	}
	h, err := s.History(p.ID)
	require.NoError(t, err)
	require.True(t, slices.ContainsFunc(h, func(e storage.Entry) bool {
		return strings.HasPrefix(e.Value, "sheet, 2026-03-03T08:00:00+01:00, R. Okafor, fr, reworded, SHA-256 ab12…") && strings.Contains(e.Value, "Fern va mieux.")
	}), "the history tells what was sent")
	require.Empty(t, storage.VisitEdits(r.Visits[0], v2))
	require.Empty(t, storage.VisitEdits(v2, r.Visits[0]))
	require.Equal(t, "2026-03-02T23:30:00-05:00", r.Visits[0].Examined.Format(time.RFC3339), "the day is that of the recorded offset")
	// The same again says nothing new.
	rec := apply(t, s, storage.VisitEdits(v, v2)...)
	require.Zero(t, rec)
}

func TestPracticeGoesThereAndBack(t *testing.T) {
	s := storagetest.Open(t)
	p := exam.Practice{Name: "Fern Rehab", Contact: exam.Contact{Phone: "555 0100"}, OutOfHours: exam.Contact{Name: "Night"}, Zone: "Europe/Paris", Language: "fr",
		Paper: "A4", Pounds: true, Demo: true, Examiners: []exam.Examiner{{ID: storage.NewID(), Name: "R. Okafor", Initials: "RO", PINHash: "x"}},
		Protocols: []exam.Protocol{{Key: "mine", Name: "Mine", Items: []string{"patellar", "withdrawal"}}},
		Phrases:   []exam.Phrase{{Key: "keep-on", Language: "de", Words: "Weiter so."}, {Key: "keep-on", Language: "en", Words: "Well done."}, {Key: "same", Language: "en", Words: "Nothing new since %s."}},
		Logo:      []byte("\x89PNG\r\n\x1a\n…")}
	apply(t, s, storage.PracticeEdits(exam.Practice{}, p)...)
	got, err := s.Practice()
	require.NoError(t, err)
	require.Equal(t, p, got)
	q := p
	q.Protocols, q.Examiners, q.Pounds = nil, nil, false
	q.Phrases, q.Logo = []exam.Phrase{{Key: "keep-on", Language: "en", Words: "Go on."}}, nil
	apply(t, s, storage.PracticeEdits(p, q)...)
	got, err = s.Practice()
	require.NoError(t, err)
	require.Equal(t, q, got)
	h, err := s.History(exam.ID{})
	require.NoError(t, err)
	require.NotEmpty(t, h)
}

func TestClosedVisitTakesAmendmentsOnly(t *testing.T) {
	s := storagetest.Open(t)
	p, v := patientWithVisit(t, s)
	closed := v
	closed.State, closed.ClosedAt = exam.Closed, at("2026-03-02T11:00:00+01:00")
	apply(t, s, storage.VisitEdits(v, closed)...)
	edit := storage.FindingEdit(p.ID, v.ID, finding(v.Findings[0].Key(), 3, ""))
	_, err := s.Apply(ctx, "A", edit)
	require.ErrorIs(t, err, storage.ErrClosed)
	_, err = s.Apply(ctx, "A", storage.UndoEdits(edit)...)
	require.ErrorIs(t, err, storage.ErrClosed, "undo stops at the close")
	_, err = s.Apply(ctx, "A", storage.AmendEdits(closed, "  ", edit)...)
	require.ErrorContains(t, err, "needs a reason")
	_, err = s.Apply(ctx, "A", storage.FindingEdit(p.ID, v.ID, v.Findings[1]), edit)
	require.ErrorIs(t, err, storage.ErrClosed, "an action is taken whole or not at all")
	_, err = s.Apply(ctx, "B. Lund", storage.AmendEdits(closed, "typed the wrong limb", edit)...)
	require.NoError(t, err)
	got, err := s.Visit(v.ID)
	require.NoError(t, err)
	require.Equal(t, exam.Closed, got.State)
	require.True(t, got.ClosedAt.Equal(closed.ClosedAt))
	f, _ := got.Find(v.Findings[0].Key())
	g, _ := f.Result.Grade()
	require.EqualValues(t, 3, g)
	require.Len(t, got.Amendments, 1)
	require.Equal(t, "typed the wrong limb", got.Amendments[0].Reason)
	require.Equal(t, "B. Lund", got.Amendments[0].Examiner)
	require.Equal(t, edit.Field, got.Amendments[0].Field)
	// An open visit takes none.
	v2 := sampleVisit(p.ID)
	apply(t, s, storage.VisitEdits(exam.Visit{}, v2)...)
	_, err = s.Apply(ctx, "A", storage.AmendEdits(v2, "why", storage.ClearFindingEdit(p.ID, v2.ID, v2.Findings[0].Key()))...)
	require.Error(t, err)
	// Closing twice says nothing new.
	require.Zero(t, apply(t, s, storage.CloseEdit(p.ID, v.ID, time.Now())))
	h, err := s.History(v.ID)
	require.NoError(t, err)
	last := h[len(h)-1]
	require.Equal(t, "amend", last.How)
	require.Equal(t, "1 "+exam.VoluntaryMotor.GradeWord(1), last.Before)
}

func TestHistoryKnowsEveryValue(t *testing.T) {
	s := storagetest.Open(t)
	p, v := patientWithVisit(t, s)
	k := exam.Key{Item: exam.Patellar, Site: exam.PelvicLeft}
	_, err := s.Apply(ctx, "B. Lund", storage.FindingEdit(p.ID, v.ID, finding(k, 0, "")))
	require.NoError(t, err)
	_, err = s.Apply(ctx, "C. Reed", storage.ClearFindingEdit(p.ID, v.ID, k))
	require.NoError(t, err)
	h, err := s.History(p.ID)
	require.NoError(t, err)
	var of []storage.Entry
	for _, e := range h {
		if e.Field == "finding/"+k.String() {
			of = append(of, e)
		}
	}
	require.Len(t, of, 3)
	require.Equal(t, []string{"R. Okafor", "B. Lund", "C. Reed"}, []string{of[0].Examiner, of[1].Examiner, of[2].Examiner})
	require.Equal(t, "2 normal, rest-normal", of[0].Value)
	require.Empty(t, of[0].Before)
	require.Equal(t, of[0].Value, of[1].Before)
	require.Equal(t, of[1].Value, of[2].Before)
	require.Empty(t, of[2].Value)
	require.Equal(t, []bool{false, false, true}, []bool{of[0].Current, of[1].Current, of[2].Current})
	for _, e := range of {
		require.Equal(t, s.Device(), e.Device)
		require.WithinDuration(t, time.Now(), e.At, time.Minute)
	}
	one, err := s.History(v.ID)
	require.NoError(t, err)
	for _, e := range one {
		require.Equal(t, v.ID, e.Record)
	}
	_, err = s.History(storage.NewID())
	require.ErrorIs(t, err, storage.ErrNotFound)
}

func TestJoinedPatientsAreOneAnimal(t *testing.T) {
	s := storagetest.Open(t)
	a, va := patientWithVisit(t, s)
	b, vb := patientWithVisit(t, s)
	c, _ := patientWithVisit(t, s)
	for _, flush := range []bool{false, true} {
		apply(t, s, storage.JoinEdit(b.ID, a.ID)...)
		apply(t, s, storage.JoinEdit(b.ID, c.ID)...)
		if flush {
			require.NoError(t, s.Flush())
		}
		for _, id := range []exam.ID{a.ID, b.ID, c.ID} {
			r, err := s.Patient(id)
			require.NoError(t, err)
			require.Equal(t, a.ID, r.Patient.ID, "shown under the smallest id")
			require.Len(t, r.Visits, 3)
			require.Equal(t, []exam.ID{a.ID, b.ID, c.ID}, r.Joined)
		}
		rows, err := s.Caseload(ctx)
		require.NoError(t, err)
		require.Len(t, rows, 1)
		require.Equal(t, 3, rows[0].Visits)
		apply(t, s, storage.PartEdit(a.ID, b.ID)...)
		if flush {
			require.NoError(t, s.Flush())
		}
		r, err := s.Patient(a.ID)
		require.NoError(t, err)
		require.Equal(t, va.ID, r.Visits[0].ID)
		require.Len(t, r.Visits, 1)
		require.Empty(t, r.Joined)
		r, err = s.Patient(c.ID)
		require.NoError(t, err)
		require.Equal(t, b.ID, r.Patient.ID)
		require.Equal(t, vb.ID, r.Visits[0].ID)
		apply(t, s, storage.PartEdit(c.ID, b.ID)...)
		rows, err = s.Caseload(ctx)
		require.NoError(t, err)
		require.Len(t, rows, 3)
	}
	require.Empty(t, storage.JoinEdit(a.ID, a.ID))
}

func TestWhatIsNotThere(t *testing.T) {
	s := storagetest.Open(t)
	_, err := s.Patient(storage.NewID())
	require.ErrorIs(t, err, storage.ErrNotFound)
	_, err = s.Visit(storage.NewID())
	require.ErrorIs(t, err, storage.ErrNotFound)
	rows, err := s.Caseload(ctx)
	require.NoError(t, err)
	require.Empty(t, rows)
	_, err = storage.Open(t.TempDir(), storagetest.Options())
	require.ErrorContains(t, err, "holds no practice")
	_, err = s.Apply(ctx, "A", storage.Edit{Kind: storage.KindPatient, Field: "name"})
	require.ErrorContains(t, err, "names no patient")
	require.NoError(t, s.Close())
	_, err = s.Apply(ctx, "A", storage.PracticeEdits(exam.Practice{}, exam.Practice{Name: "x"})...)
	require.ErrorIs(t, err, storage.ErrShut)
	_, err = s.Caseload(ctx)
	require.ErrorIs(t, err, storage.ErrShut)
	require.NoError(t, s.Close())
}

func TestKeys(t *testing.T) {
	for _, tt := range []struct {
		name      string
		u, wrong  storage.Unlock
		protected bool
	}{
		{"passphrase", storage.Unlock{Passphrase: []byte("four brown ferns")}, storage.Unlock{Passphrase: []byte("five")}, true},
		{"key file", storage.Unlock{KeyFile: t.TempDir() + "/k"}, storage.Unlock{Passphrase: []byte("five")}, true},
		{"none", storage.Unlock{KeyInStore: true}, storage.Unlock{}, false},
	} {
		t.Run(tt.name, func(t *testing.T) {
			dir := t.TempDir() + "/p"
			s, err := storage.Create(dir, storage.Options{Unlock: tt.u})
			require.NoError(t, err)
			require.Equal(t, tt.protected, s.Protected())
			p := samplePatient()
			apply(t, s, storage.PatientEdits(exam.Patient{}, p)...)
			require.NoError(t, s.Close())
			if tt.protected {
				for _, u := range []storage.Unlock{tt.wrong, {}, {KeyInStore: true}} {
					_, err = storage.Open(dir, storage.Options{Unlock: u})
					require.ErrorIs(t, err, storage.ErrLocked)
				}
			}
			s, err = storage.Open(dir, storage.Options{Unlock: tt.u})
			require.NoError(t, err)
			r, err := s.Patient(p.ID)
			require.NoError(t, err)
			require.Equal(t, p.Name, r.Patient.Name)
			require.NoError(t, s.Close())
			for name, b := range contents(t, dir) {
				for _, secret := range []string{p.Name, p.Owner.Name, p.Note, "disc extrusion", "gabapentin", p.Owner.Phone} {
					require.NotContains(t, string(b), secret, fmt.Sprintf("%s holds it in clear", name))
				}
				require.NotContains(t, string(b), string(p.ID[:]), "%s holds an id in clear", name)
			}
		})
	}
	_, err := storage.Create(t.TempDir()+"/p", storage.Options{})
	require.ErrorContains(t, err, "needs a passphrase, a key file")
}
