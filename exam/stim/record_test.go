package stim_test

import (
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/stim"
)

func TestRecordsAreReadBackAsTheyWere(t *testing.T) {
	id := exam.ID{15: 7}
	test := stim.Test{ID: id, Muscle: "quadriceps", Site: "pelvic-left", Readings: []stim.Reading{{0.1, []float64{12, 13}}, {1, []float64{4}}}, Law: "weiss", Clipped: true, Note: "calm"}
	r, err := test.Record()
	require.NoError(t, err)
	back, err := stim.ReadTest(r)
	require.NoError(t, err)
	require.Equal(t, test, back)
	require.Contains(t, stim.Words(r), "quadriceps, pelvic-left, 2 pulse widths, weiss")

	s := stim.Session{ID: id, Aim: "strengthen", Site: "pelvic-left", Muscle: "quadriceps", Frequency: 35, Pulse: 200, On: 5, Off: 20, Minutes: 12, SkinAfter: "sound"}
	r, err = s.Record()
	require.NoError(t, err)
	sBack, err := stim.ReadSession(r)
	require.NoError(t, err)
	require.Equal(t, s, sBack)
	_, err = stim.ReadTest(r)
	require.Error(t, err, "a session is no test")

	_, err = stim.ReadTest(exam.StimRecord{Kind: stim.KindTest, Data: `{"muscle":"x","site":"pelvic-left","readings":[{"width_ms":-1}]}`})
	require.Error(t, err)
	require.True(t, strings.HasPrefix(stim.Words(exam.StimRecord{Kind: "new", Data: "1234"}), "a record of stimulation of 4 bytes"))
}

func TestTheNewestAnswersCount(t *testing.T) {
	give := func(yes bool, day exam.Date) exam.StimRecord {
		r, err := stim.Consent{Answers: map[string]bool{"pacemaker": yes}, Examiner: "A", At: day}.Record(exam.ID{15: 1})
		require.NoError(t, err)
		return r
	}
	_, asked := stim.ConsentIn([]exam.Visit{{}})
	require.False(t, asked)
	c, asked := stim.ConsentIn([]exam.Visit{{Stim: []exam.StimRecord{give(false, "2026-01-02")}}, {Stim: []exam.StimRecord{give(true, "2026-02-03")}}, {}})
	require.True(t, asked)
	require.Equal(t, exam.Date("2026-02-03"), c.At)
	require.Len(t, c.Forbidden(), 1)
}
