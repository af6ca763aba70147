package demo

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/alert"
	"cordwalk.example/cordwalk/exam/anatomy"
	"cordwalk.example/cordwalk/storage"
)

func byName(t *testing.T, name string) Case {
	t.Helper()
	for _, c := range New(Seed, LastDay).Cases {
		if c.Patient.Name == name {
			return c
		}
	}
	t.Fatalf("no animal named %s", name)
	return Case{}
}

// plain is the record without Go's unexported fields, for hashing.
func plain(t *testing.T, p Practice) string {
	t.Helper()
	h := sha256.New()
	enc := json.NewEncoder(h)
	require.NoError(t, enc.Encode(p.Practice))
	for _, c := range p.Cases {
		require.NoError(t, enc.Encode(c.Patient))
		for _, v := range c.Visits {
			fs := v.Findings
			v.Findings = nil
			v.Answers, v.State, v.ClosedAt, v.NextVisit = nil, 0, time.Time{}, "" // follow from the findings
			require.NoError(t, enc.Encode(v))
			for _, f := range fs {
				g, ok := f.Result.Grade()
				require.NoError(t, enc.Encode([]any{f.Key().String(), g, ok, f.Result.Reason(), f.Level, f.How, f.Block}))
			}
		}
	}
	return hex.EncodeToString(h.Sum(nil))
}

func TestDemoIsTheSameEverywhere(t *testing.T) {
	got := plain(t, New(Seed, LastDay))
	require.Equal(t, got, plain(t, New(Seed, LastDay)), "two runs")
	require.Equal(t, got, plain(t, New(Seed, time.Time{})), "the day given and the day meant")
	require.Equal(t, "27693fcd606ce0f302f08b86e727748a4081d4dace2dfb26199939165d2e6c01", got, "another machine, or a change of the demo practice: if meant, write the new sum here")
	require.NotEqual(t, got, plain(t, New(Seed+1, LastDay)))
}

func TestDemoIsValidAndMarked(t *testing.T) {
	p := New(Seed, LastDay)
	require.True(t, p.Practice.Demo)
	cats, ids := 0, map[exam.ID]bool{}
	require.GreaterOrEqual(t, len(p.Cases), 8)
	for _, c := range p.Cases {
		require.NoError(t, c.Patient.Validate())
		require.True(t, c.Patient.Demo)
		require.NotEmpty(t, c.Patient.Veterinarian.Phone, "a sheet needs it")
		require.False(t, ids[c.Patient.ID])
		ids[c.Patient.ID] = true
		if c.Patient.Species == exam.Cat {
			cats++
		}
		require.GreaterOrEqual(t, len(c.Visits), 8, c.Patient.Name)
		require.LessOrEqual(t, len(c.Visits), 14, c.Patient.Name)
		for i, v := range c.Visits {
			require.NoError(t, v.Validate(c.Patient.Species), c.Patient.Name)
			require.Equal(t, c.Patient.ID, v.Patient)
			open := false
			for _, f := range alert.Scan(c.Patient, c.Visits[:i+1], v.Examined) {
				open = open || f.Visit == v.ID && f.Open() && f.Urgency == alert.Now
			}
			require.Equal(t, open, v.State == exam.Open, "a visit is open while the veterinarian must be called now, and closed else")
			require.False(t, ids[v.ID])
			ids[v.ID] = true
			if i > 0 {
				require.True(t, v.Examined.After(c.Visits[i-1].Examined))
			}
			require.True(t, v.Examined.Before(LastDay.AddDate(0, 0, 1)))
			seen := map[exam.Key]bool{}
			for _, f := range v.Findings {
				require.False(t, seen[f.Key()], "%s %v twice", c.Patient.Name, f.Key())
				seen[f.Key()] = true
				if f.How == exam.RestNormal {
					require.False(t, f.Item.Has(exam.NoBulk))
				}
				if f.Item == exam.DeepPain && f.Site.IsLimb() {
					require.True(t, v.Plegic(f.Site), "deep pain is never asked in a limb that moves")
				}
			}
		}
	}
	require.GreaterOrEqual(t, cats, 2)
}

func motor(v exam.Visit) int {
	n := 0
	for _, l := range exam.Limbs() {
		g, _ := v.Grade(exam.VoluntaryMotor, l)
		n += int(g)
	}
	return n
}

func TestCoursesAreWhatTheyAreMeantToBe(t *testing.T) {
	first := func(c Case) exam.Visit { return c.Visits[0] }
	last := func(c Case) exam.Visit { return c.Visits[len(c.Visits)-1] }
	b := byName(t, "Bramble")
	require.Greater(t, motor(last(b)), motor(first(b))+3)
	h := byName(t, "Hector")
	require.Less(t, motor(last(h)), motor(first(h))-3)
	w := byName(t, "Tansy")
	worst, best := 99, 0
	dip := 0
	for i, v := range w.Visits {
		if m := motor(v); i > 0 && m > best {
			best = m
		}
		if i > 3 && motor(v) < worst {
			worst, dip = motor(v), i
		}
	}
	require.Greater(t, best, worst+2)
	require.Greater(t, motor(w.Visits[dip-1]), worst+2, "the fall is sudden")
	require.Greater(t, motor(last(w)), worst+1, "and is made up again")
	p := byName(t, "Pepper")
	tail := func(v exam.Visit) int8 { g, _ := v.Grade(exam.TailTone, exam.Midline); return g }
	require.Less(t, tail(first(p)), tail(last(p)))
	r := byName(t, "Wren")
	l, _ := last(r).Grade(exam.VoluntaryMotor, exam.ThoracicLeft)
	o, _ := last(r).Grade(exam.VoluntaryMotor, exam.ThoracicRight)
	require.Less(t, l, o)
	m := byName(t, "Mika")
	n := len(m.Visits)
	require.InDelta(t, motor(m.Visits[n-4]), motor(m.Visits[n-1]), 1, "a plateau")
}

// TestWeakFeetSoundThighs is common practice read back: a dog with sound thighs and patellar
// reflexes, weak hocks and wasted lower limbs, a normal tail and continence scores low at
// L7 and S1 and high at L4, L5, S2 and S3.
func TestWeakFeetSoundThighs(t *testing.T) {
	c := byName(t, "Otis")
	for _, s := range anatomy.Score(exam.Dog, c.Visits[0]) {
		switch s.Segment.String() {
		case "L4", "L5", "S3":
			require.True(t, s.Known, "%v", s)
			require.Greater(t, s.Score, 75.0, "%v %v", s.Segment, s.Side)
		case "L7", "S1":
			require.True(t, s.Known)
			require.Less(t, s.Score, 65.0, "%v %v", s.Segment, s.Side)
		}
	}
}

func TestFillReadsBack(t *testing.T) {
	s, err := storage.Create(t.TempDir(), storage.Options{Unlock: storage.Unlock{KeyInStore: true}})
	require.NoError(t, err)
	defer s.Close()
	want := New(Seed, LastDay)
	ticks := 0
	require.NoError(t, Fill(t.Context(), s, want, func(done, total int) { ticks = done }))
	list, err := s.Caseload(t.Context())
	require.NoError(t, err)
	require.Len(t, list, len(want.Cases))
	n := 0
	for _, c := range want.Cases {
		got, err := s.Patient(c.Patient.ID)
		require.NoError(t, err)
		require.Len(t, got.Visits, len(c.Visits))
		for i := range c.Visits {
			require.True(t, got.Visits[i].Examined.Equal(c.Visits[i].Examined))
			got.Visits[i].Examined, got.Visits[i].ClosedAt = c.Visits[i].Examined, c.Visits[i].ClosedAt
			require.Equal(t, c.Visits[i].Findings, got.Visits[i].Findings, "%s %d", c.Patient.Name, i)
			require.ElementsMatch(t, c.Visits[i].Measures, got.Visits[i].Measures)
			require.Equal(t, c.Visits[i].State, got.Visits[i].State)
			require.Len(t, got.Visits[i].Answers, len(c.Visits[i].Answers))
			n++
		}
		require.True(t, got.Patient.Demo)
	}
	require.Equal(t, n, ticks)
}
