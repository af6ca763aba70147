package exam

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
	Pounds     bool    // show weights in lb
	Examiners  []Examiner
	Protocols  []Protocol // those the practice made for itself
	Demo       bool
}

// Protocol is a list of items to walk through. The built-in protocols are made by
// functions of this package; a practice keeps its own in Practice.Protocols.
type Protocol struct {
	Key   string   `json:"key"`
	Name  string   `json:"name"`
	Items []string `json:"items"` // item names
}
