package sheet

import (
	"crypto/sha256"
	"encoding/hex"
	"slices"
	"strings"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// The kinds of paper in the record of what was sent.
const (
	KindSheet   = "sheet"   // the owner's progress sheet
	KindSummary = "summary" // the clinical summary
	KindLetter  = "letter"  // the referral letter
)

// WithSent returns the patient with the record of a paper that was written to be handed
// over: what kind it is, about which visit, who wrote it and when, in which language, its
// sentences in short and the hash of its PDF. A new record has no id; saving gives it one.
func WithSent(p exam.Patient, visit exam.ID, d Document, who string, at time.Time) exam.Patient {
	sum := sha256.Sum256(d.PDF)
	p.Sent = append(slices.Clone(p.Sent), exam.Sent{Visit: visit, At: at, Kind: d.Kind, Examiner: who, Language: d.Lang, Summary: d.Summary,
		Reworded: d.Reworded, Hash: hex.EncodeToString(sum[:]), Note: strings.Join(d.Noted, " ")})
	return p
}

// SentEdits returns the edits that keep a paper that was written to be handed over.
func SentEdits(p exam.Patient, visit exam.ID, d Document, who string, at time.Time) []storage.Edit {
	return storage.PatientEdits(p, WithSent(p, visit, d, who, at))
}

// LastWords returns the sentences that a therapist wrote last for the owner's sheet of a
// visit in a language, empty where the sheet's own sentences were sent.
func LastWords(p exam.Patient, visit exam.ID, lang string) string {
	for i := len(p.Sent) - 1; i >= 0; i-- {
		if x := p.Sent[i]; x.Kind == KindSheet && x.Visit == visit && baseTag(x.Language) == baseTag(lang) {
			if x.Reworded {
				return x.Summary
			}
			return ""
		}
	}
	return ""
}
