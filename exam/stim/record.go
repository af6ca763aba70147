package stim

import (
	"encoding/json"
	"fmt"
	"slices"
	"strings"

	"cordwalk.example/cordwalk/exam"
)

// The kinds of record that this package keeps with a visit.
const (
	KindTest    = "test"
	KindSession = "session"
	KindConsent = "consent"
)

// Record returns the test as a visit keeps it.
func (t Test) Record() (exam.StimRecord, error) { return record(t.ID, KindTest, t) }

// Record returns the session as a visit keeps it.
func (s Session) Record() (exam.StimRecord, error) { return record(s.ID, KindSession, s) }

// Record returns the answers as a visit keeps them.
func (c Consent) Record(id exam.ID) (exam.StimRecord, error) { return record(id, KindConsent, c) }

func record(id exam.ID, kind string, v any) (exam.StimRecord, error) {
	b, err := json.Marshal(v)
	if err != nil {
		return exam.StimRecord{}, fmt.Errorf("writing down a %s of stimulation: %w", kind, err)
	}
	return exam.StimRecord{ID: id, Kind: kind, Data: string(b)}, nil
}

// ReadTest reads a test back.
func ReadTest(r exam.StimRecord) (t Test, err error) {
	if err = read(r, KindTest, &t); err == nil {
		t.ID = r.ID
		err = t.Validate()
	}
	return t, err
}

// ReadSession reads a session back.
func ReadSession(r exam.StimRecord) (s Session, err error) {
	if err = read(r, KindSession, &s); err == nil {
		s.ID = r.ID
		err = s.Validate()
	}
	return s, err
}

// ReadConsent reads the answers back.
func ReadConsent(r exam.StimRecord) (c Consent, err error) { return c, read(r, KindConsent, &c) }

func read(r exam.StimRecord, kind string, into any) error {
	if r.Kind != kind {
		return &exam.Invalid{Field: "record of stimulation", Value: r.Kind, Allowed: kind}
	}
	if err := json.Unmarshal([]byte(r.Data), into); err != nil {
		return fmt.Errorf("a %s of stimulation cannot be read; it is kept as it is: %w", kind, err)
	}
	return nil
}

// ConsentIn returns the answers given last, of visits in the order of time; false where nobody has asked.
func ConsentIn(visits []exam.Visit) (Consent, bool) {
	for _, v := range slices.Backward(visits) {
		for _, r := range slices.Backward(v.Stim) {
			if c, err := ReadConsent(r); err == nil {
				return c, true
			}
		}
	}
	return Consent{}, false
}

// Words says a record in English, for the history.
func Words(r exam.StimRecord) string {
	join := func(parts ...string) string {
		return strings.Join(slices.DeleteFunc(parts, func(s string) bool { return s == "" }), ", ")
	}
	figure := func(v float64, unit string) string {
		if v == 0 {
			return ""
		}
		return number(v) + " " + unit
	}
	switch r.Kind {
	case KindTest:
		if t, err := ReadTest(r); err == nil {
			return join("strength–duration test", t.Muscle, t.Site, fmt.Sprintf("%d pulse widths", len(t.Readings)), t.Law, t.Note)
		}
	case KindSession:
		if s, err := ReadSession(r); err == nil {
			return join("stimulation", s.Aim, s.Muscle, s.Site, s.Waveform, figure(s.Frequency, "Hz"), figure(s.Pulse, "µs"), figure(s.Minutes, "min"), figure(s.Amplitude, "mA"), s.SkinAfter, s.Confirmed)
		}
	case KindConsent:
		if c, err := ReadConsent(r); err == nil {
			var yes []string
			for _, q := range Questions() {
				if c.Answers[q.Key] {
					yes = append(yes, q.Key)
				}
			}
			if len(yes) == 0 {
				return fmt.Sprintf("questions before stimulation: %d answered, none with yes", len(c.Answers))
			}
			return fmt.Sprintf("questions before stimulation: %d answered, yes to %s", len(c.Answers), strings.Join(yes, ", "))
		}
	}
	return fmt.Sprintf("a record of stimulation of %d bytes", len(r.Data))
}
