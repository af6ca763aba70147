package exam

import (
	"slices"
	"strings"
	"time"
)

// Sedation of the animal during an exam.
type Sedation uint8

// The depths of sedation.
const (
	SedationNone Sedation = iota
	SedationMild
	SedationModerate
	SedationDeep
)

// String returns the word in exam files.
func (s Sedation) String() string { return [...]string{"none", "mild", "moderate", "deep"}[s%4] }

// ParseSedation is the inverse of String; the empty word is none.
func ParseSedation(word string) (Sedation, error) {
	for i, n := range []string{"none", "mild", "moderate", "deep"} {
		if word == n || word == "" {
			return Sedation(i), nil
		}
	}
	return 0, &Invalid{"sedation", word, "none, mild, moderate or deep"}
}

// words of the conditions of a visit, as exam files hold them; the empty word is «not said».
var (
	aidWords     = []string{"none", "sling", "harness", "boots", "splint", "cart"}
	surfaceWords = []string{"grip", "slick", "grass"}
	sessionWords = []string{"before", "after"}
)

// AidWords lists the aids an animal may wear or walk in during an exam.
func AidWords() []string { return slices.Clone(aidWords) }

// SurfaceWords lists the floors an animal may walk on during an exam.
func SurfaceWords() []string { return slices.Clone(surfaceWords) }

// SessionWords lists when, in a session, an exam may be done.
func SessionWords() []string { return slices.Clone(sessionWords) }

func checkWord(field, word string, allowed []string) error {
	if word == "" {
		return nil
	}
	for _, w := range allowed {
		if w == word {
			return nil
		}
	}
	return &Invalid{field, word, strings.Join(allowed, ", ")}
}

// Treatment is one thing done in a session. Kind is a key of the treatment table;
// Params are in the therapist's words ("1.2 m/s, water at the elbow").
type Treatment struct {
	ID       ID      `json:"id"`
	Kind     string  `json:"kind"`
	Site     string  `json:"site,omitempty"`
	Params   string  `json:"params,omitempty"`
	Minutes  float64 `json:"minutes,omitempty"`
	Override string  `json:"override,omitempty"` // why it was done against a contraindication
}

// HomeExercise is one line of the home programme. Kind is a key of the exercise table.
type HomeExercise struct {
	ID       ID     `json:"id"`
	Kind     string `json:"kind"`
	How      string `json:"how,omitempty"`   // replaces the table's words
	Times    int    `json:"times,omitempty"` // times a day
	DaysWeek int    `json:"days,omitempty"`  // days a week
	Amount   string `json:"amount,omitempty"`
	StopFor  string `json:"stop,omitempty"` // replaces the table's words
	Override string `json:"override,omitempty"`
}

// OwnerReport is what the owner says since the last visit.
type OwnerReport struct {
	Falls         string `json:"falls,omitempty"`
	Urine         string `json:"urine,omitempty"`
	Appetite      string `json:"appetite,omitempty"`
	ExercisesDone int    `json:"done,omitempty"` // of ExercisesSet
	ExercisesSet  int    `json:"set,omitempty"`
	Words         string `json:"words,omitempty"`
}

// DoseGiven says how long before the visit a medicine was given last.
type DoseGiven struct {
	Medicine string  `json:"medicine"`
	Hours    float64 `json:"hours"`
}

// Attachment is a photo or a short clip of a visit. Its bytes lie sealed beside the store under Name;
// a device may know of it before they have arrived.
type Attachment struct {
	ID     ID     `json:"id"`
	Name   string `json:"name"`           // of the sealed file
	Format string `json:"format"`         // one of AttachmentFormats
	Size   int64  `json:"size"`           // bytes before sealing
	Note   string `json:"note,omitempty"` // what it shows, in the therapist's words
}

// The largest attachments, in bytes before sealing (a choice: a photo of today's cameras, a minute of gait).
const (
	MaxPhoto = 25 << 20
	MaxClip  = 200 << 20
)

var attachmentFormats = []string{"jpeg", "png", "mp4", "mov", "webm"}

// AttachmentFormats lists the formats that are taken: two of photos, then three of clips.
func AttachmentFormats() []string { return slices.Clone(attachmentFormats) }

// Photo reports whether the attachment is a photo and no clip.
func (a Attachment) Photo() bool { return a.Format == "jpeg" || a.Format == "png" }

// StimRecord is what package stim keeps with a visit, in its own words: a strength–duration test, a
// session of stimulation, or the answers given before the first session.
type StimRecord struct {
	ID   ID     `json:"id"`
	Kind string `json:"kind"` // "test", "session" or "consent"
	Data string `json:"data"` // JSON, see package stim
}

// VisitState of a visit.
type VisitState uint8

// The states. A closed visit takes only amendments, each with a reason.
const (
	Open VisitState = iota
	Closed
)

// Amendment is a change made after closing.
type Amendment struct {
	Field    string    `json:"field"`
	Reason   string    `json:"reason"`
	Examiner string    `json:"examiner"`
	At       time.Time `json:"at"`
}

// Acknowledgement answers an alert of this visit: who was told, by whom, when.
type Acknowledgement struct {
	Rule     string    `json:"rule"`
	Told     string    `json:"told"`
	Note     string    `json:"note,omitempty"`
	Examiner string    `json:"examiner"`
	At       time.Time `json:"at"`
}

// Visit is one session with an animal: the exam, the conditions it was done under,
// the measures, what was done and what goes home.
type Visit struct {
	ID         ID
	Patient    ID
	Examined   time.Time // the instant, with the offset it was recorded in
	Zone       string    // IANA name of the practice's zone
	Examiner   string
	Protocol   string // key of the protocol that was walked
	State      VisitState
	ClosedAt   time.Time
	RepeatOf   ID // the visit that this one repeats blind, to measure repeatability
	Sedation   Sedation
	Aid        string // one of AidWords, or empty
	Surface    string
	Session    string
	Doses      []DoseGiven
	Findings   []Finding // one for each cell, in vocabulary order
	Measures   []Measured
	Treatments []Treatment
	Home       []HomeExercise
	Report     OwnerReport
	Note       string
	NextVisit  Date
	Amendments []Amendment
	Answers    []Acknowledgement

	Attachments []Attachment
	Stim        []StimRecord
}

// Validate checks every part of the visit against the vocabulary and the species.
func (v Visit) Validate(s Species) error {
	if v.Examined.IsZero() {
		return &Invalid{"examined", "", "a time such as 2026-03-02T10:15:00+01:00"}
	}
	if strings.TrimSpace(v.Examiner) == "" {
		return &Invalid{"examiner", "", "the examiner's name"}
	}
	if err := checkWord("aid", v.Aid, aidWords); err != nil {
		return err
	}
	if err := checkWord("surface", v.Surface, surfaceWords); err != nil {
		return err
	}
	if err := checkWord("session", v.Session, sessionWords); err != nil {
		return err
	}
	for _, f := range v.Findings {
		if err := f.Validate(s); err != nil {
			return err
		}
	}
	for _, m := range v.Measures {
		if err := m.Validate(); err != nil {
			return err
		}
	}
	return nil
}

// Find returns the finding in the cell, and false if nobody entered one.
func (v Visit) Find(k Key) (Finding, bool) {
	for _, f := range v.Findings {
		if f.Key() == k {
			return f, true
		}
	}
	return Finding{}, false
}

// Grade returns the grade of an item at a site, whichever digit or joint was named: the
// one furthest from normal where there are several, and false where none was tested.
func (v Visit) Grade(i Item, s Site) (int8, bool) {
	grade, health, found := int8(0), 0.0, false
	for _, f := range v.Findings {
		if f.Item != i || f.Site != s {
			continue
		}
		g, ok := f.Result.Grade()
		if !ok {
			continue
		}
		if h, _ := f.Health(); !found || h < health {
			grade, health, found = g, h, true
		}
	}
	return grade, found
}

// Measured returns the value of a measure in a cell, and false where there is none.
func (v Visit) Measured(m Measure, s Site) (Measured, bool) {
	for _, x := range v.Measures {
		if x.Measure == m && (x.Site == s || s == NoSite) {
			return x, true
		}
	}
	return Measured{}, false
}

// Plegic reports whether the limb is known to have no voluntary movement.
func (v Visit) Plegic(limb Site) bool {
	g, ok := v.Grade(VoluntaryMotor, limb)
	return ok && g == 0
}

// LikeForLike reports whether two visits were examined under the same conditions, and
// if not, in what they differ: sedation, aid, surface, session. What was not said on
// either side does not count as a difference.
func LikeForLike(a, b Visit) (same bool, differ []string) {
	if a.Sedation != b.Sedation {
		differ = append(differ, "sedation")
	}
	for _, c := range []struct{ name, x, y string }{
		{"aid", a.Aid, b.Aid}, {"surface", a.Surface, b.Surface}, {"session", a.Session, b.Session},
	} {
		if c.x != c.y && c.x != "" && c.y != "" {
			differ = append(differ, c.name)
		}
	}
	if drugs(a) != drugs(b) {
		differ = append(differ, "medicines")
	}
	return len(differ) == 0, differ
}

func drugs(v Visit) string {
	names := make([]string, 0, len(v.Doses))
	for _, d := range v.Doses {
		names = append(names, strings.ToLower(strings.TrimSpace(d.Medicine)))
	}
	slices.Sort(names)
	return strings.Join(names, "\x00")
}
