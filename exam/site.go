package exam

import "strings"

// Site is a place on the animal where an item is tested.
type Site uint8

// The sites. A limb site names girdle and side; Left and Right are sides of items
// that are not tested on a limb; Midline is for items without a side.
const (
	NoSite Site = iota
	ThoracicLeft
	ThoracicRight
	PelvicLeft
	PelvicRight
	Left
	Right
	Midline
	Perineum
	Trunk
	TailBase
	TailTip
	Cervical
	CranialThoracic
	MidThoracic
	Thoracolumbar
	Lumbar
	Lumbosacral
	Sacrocaudal
	siteCount
)

var siteNames = [siteCount]string{
	NoSite: "", ThoracicLeft: "thoracic-left", ThoracicRight: "thoracic-right",
	PelvicLeft: "pelvic-left", PelvicRight: "pelvic-right", Left: "left", Right: "right",
	Midline: "midline", Perineum: "perineum", Trunk: "trunk", TailBase: "tail-base",
	TailTip: "tail-tip", Cervical: "cervical", CranialThoracic: "cranial-thoracic",
	MidThoracic: "mid-thoracic", Thoracolumbar: "thoracolumbar", Lumbar: "lumbar",
	Lumbosacral: "lumbosacral", Sacrocaudal: "sacrocaudal",
}

var (
	limbSites     = []Site{ThoracicLeft, ThoracicRight, PelvicLeft, PelvicRight}
	thoracicSites = []Site{ThoracicLeft, ThoracicRight}
	pelvicSites   = []Site{PelvicLeft, PelvicRight}
	pairedSites   = []Site{Left, Right}
	midlineSites  = []Site{Midline}
	skinSites     = []Site{ThoracicLeft, ThoracicRight, PelvicLeft, PelvicRight, Perineum, Trunk}
	painSites     = []Site{ThoracicLeft, ThoracicRight, PelvicLeft, PelvicRight, TailBase, TailTip, Perineum}
	spineSites    = []Site{Cervical, CranialThoracic, MidThoracic, Thoracolumbar, Lumbar, Lumbosacral, Sacrocaudal}
)

// Limbs lists the four limbs: thoracic left and right, pelvic left and right.
func Limbs() []Site { return append([]Site(nil), limbSites...) }

// String returns the site's word in exam files.
func (s Site) String() string {
	if s < siteCount {
		return siteNames[s]
	}
	return "unknown"
}

// ParseSite is the inverse of String. It refuses unknown words.
func ParseSite(word string) (Site, error) {
	for i, n := range siteNames {
		if i > 0 && n == word {
			return Site(i), nil
		}
	}
	return NoSite, &Invalid{"site", word, "one of " + strings.Join(siteNames[1:], ", ")}
}

// IsLimb reports whether s is one of the four limbs.
func (s Site) IsLimb() bool { return s >= ThoracicLeft && s <= PelvicRight }

// IsPelvic reports whether s is a pelvic limb.
func (s Site) IsPelvic() bool { return s == PelvicLeft || s == PelvicRight }

// IsThoracic reports whether s is a thoracic limb.
func (s Site) IsThoracic() bool { return s == ThoracicLeft || s == ThoracicRight }

// Side returns Left or Right for a limb or a side, and Midline for everything else.
func (s Site) Side() Site {
	switch s {
	case ThoracicLeft, PelvicLeft, Left:
		return Left
	case ThoracicRight, PelvicRight, Right:
		return Right
	}
	return Midline
}

// Mirror returns the site on the other side of the body; a site without a side is its own mirror.
func (s Site) Mirror() Site {
	switch s {
	case ThoracicLeft:
		return ThoracicRight
	case ThoracicRight:
		return ThoracicLeft
	case PelvicLeft:
		return PelvicRight
	case PelvicRight:
		return PelvicLeft
	case Left:
		return Right
	case Right:
		return Left
	}
	return s
}

// Digit tells which digit of a limb was pinched.
type Digit uint8

// The digits; AnyDigit is «not said».
const (
	AnyDigit Digit = iota
	Medial
	Lateral
)

// String returns the digit's word, empty for AnyDigit.
func (d Digit) String() string { return [...]string{"", "medial", "lateral"}[d%3] }

// ParseDigit is the inverse of String.
func ParseDigit(word string) (Digit, error) {
	switch word {
	case "":
		return AnyDigit, nil
	case "medial":
		return Medial, nil
	case "lateral":
		return Lateral, nil
	}
	return 0, &Invalid{"digit", word, "medial or lateral"}
}

// Joint is a limb joint, for joint findings and range of motion.
type Joint uint8

// The joints; NoJoint is «not said».
const (
	NoJoint Joint = iota
	Shoulder
	Elbow
	Carpus
	Hip
	Stifle
	Hock
	Digits
	jointCount
)

var jointNames = [jointCount]string{"", "shoulder", "elbow", "carpus", "hip", "stifle", "hock", "digits"}

// String returns the joint's word, empty for NoJoint.
func (j Joint) String() string {
	if j < jointCount {
		return jointNames[j]
	}
	return "unknown"
}

// ParseJoint is the inverse of String.
func ParseJoint(word string) (Joint, error) {
	for i, n := range jointNames {
		if n == word {
			return Joint(i), nil
		}
	}
	return 0, &Invalid{"joint", word, "shoulder, elbow, carpus, hip, stifle, hock or digits"}
}
