package exam

import "time"

// Examiner is a person who examines. Attribution, not security.
type Examiner struct {
	ID       ID     `json:"id"`
	Name     string `json:"name"`
	Initials string `json:"initials,omitempty"`
	PINHash  string `json:"pin,omitempty"`
}

// Practice is what holds for every patient of this store.
type Practice struct {
	Name       string
	Contact    Contact
	OutOfHours Contact // the default out-of-hours veterinarian
	Zone       string  // IANA name
	Language   string  // BCP 47 tag of the sheets, "en" where not said
	Paper      string  // "A4" or "Letter"
	Pounds     bool    // show and take weights in lb
	Inches     bool    // show and take girths in inches
	Examiners  []Examiner
	Protocols  []Protocol // those the practice made for itself
	Phrases    []Phrase   // its own wording of sentences on the owner's sheet
	Logo       []byte     // PNG or JPEG for the heading of papers, at most MaxLogo bytes; nil for none
	Demo       bool
}

// Units are the units that the practice reads and types measures in.
func (p Practice) Units() Units { return Units{Pounds: p.Pounds, Inches: p.Inches} }

// MaxLogo is the most bytes of a practice's logo: enough for any print of its size on paper.
const MaxLogo = 256 << 10

// Phrase is a practice's own wording of a sentence in one language. The key names the
// sentence; the sentences that can be reworded are listed where papers are made.
type Phrase struct {
	Key      string `json:"key"`
	Language string `json:"language"` // BCP 47 tag without region, such as "en"
	Words    string `json:"words"`
}

// Sent is the record of a paper that was written to be handed over or sent.
type Sent struct {
	ID       ID
	Visit    ID // the visit that the paper is about
	At       time.Time
	Kind     string // "sheet", "summary" or "letter"
	Examiner string // who wrote it
	Language string // BCP 47 tag
	Summary  string // the sentences that say how the animal is doing, as they were sent; empty where the paper has none
	Reworded bool   // the sentences are the therapist's own
	Hash     string // SHA-256 of the PDF, in hexadecimal
	Note     string // what the therapist was warned of and confirmed
}

// Protocol is a list of items to walk through. The built-in protocols are made by
// functions of this package; a practice keeps its own in Practice.Protocols.
type Protocol struct {
	Key   string   `json:"key"`
	Name  string   `json:"name"`
	Items []string `json:"items"` // item names
}
