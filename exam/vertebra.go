package exam

import (
	"strconv"
	"strings"
)

// Vertebra is one vertebra by region and number, such as T13. The zero Vertebra is «not said».
// Vertebrae of one species are ordered from cranial to caudal by their numeric value.
type Vertebra uint8

// Region of the vertebral column (and, for segments, of the cord).
type Region uint8

// The regions, cranial to caudal.
const (
	RegionC Region = iota + 1
	RegionT
	RegionL
	RegionS
	RegionCd
)

var regionNames = [...]string{RegionC: "C", RegionT: "T", RegionL: "L", RegionS: "S", RegionCd: "Cd"}

// String returns the region's letter.
func (r Region) String() string {
	if r >= RegionC && r <= RegionCd {
		return regionNames[r]
	}
	return "?"
}

// NewVertebra returns the vertebra with that number in its region, 1 to 31.
func NewVertebra(r Region, number int) Vertebra { return Vertebra(int(r)<<5 | number&31) }

// Region returns the vertebra's region.
func (v Vertebra) Region() Region { return Region(v >> 5) }

// Number returns the vertebra's number in its region, from 1.
func (v Vertebra) Number() int { return int(v & 31) }

// String returns the usual name, such as T13, empty for the zero Vertebra.
func (v Vertebra) String() string {
	if v == 0 {
		return ""
	}
	return v.Region().String() + strconv.Itoa(v.Number())
}

// vertebraCounts holds C, T, L, S, Cd for each species. Sources: UMN-cord for dog and cat,
// IVIS-horse, Greenaway-2001 for the rabbit (12T/7L is its commonest formula); caudal counts from memory.
var vertebraCounts = map[Species][6]int{
	Dog:    {0, 7, 13, 7, 3, 20},
	Cat:    {0, 7, 13, 7, 3, 21},
	Horse:  {0, 7, 18, 6, 5, 21},
	Rabbit: {0, 7, 12, 7, 4, 16},
}

// VertebraCount returns how many vertebrae the species has in a region; 0 for an unknown species.
func VertebraCount(s Species, r Region) int {
	if r < RegionC || r > RegionCd {
		return 0
	}
	return vertebraCounts[s][r]
}

// ParseVertebra reads a vertebra's name such as T13 or Cd2 and checks that the species has it.
// With species 0 it checks the name's form only.
func ParseVertebra(word string, s Species) (Vertebra, error) {
	for r := RegionCd; r >= RegionC; r-- {
		rest, ok := strings.CutPrefix(word, r.String())
		if !ok {
			continue
		}
		n, err := strconv.Atoi(rest)
		if err != nil || n < 1 || n > 31 || strconv.Itoa(n) != rest {
			break
		}
		if s != 0 && n > VertebraCount(s, r) {
			return 0, &Invalid{"level", word, "a vertebra the " + s.String() + " has: " + r.String() + "1 to " + r.String() + strconv.Itoa(VertebraCount(s, r))}
		}
		return NewVertebra(r, n), nil
	}
	return 0, &Invalid{"level", word, "a vertebra such as C5, T13, L4, S1 or Cd2"}
}

// VertebraIndex returns the position of v in the species' column, 0 for C1, or -1 if it has no such vertebra.
func VertebraIndex(s Species, v Vertebra) int {
	if v == 0 || v.Number() < 1 || v.Number() > VertebraCount(s, v.Region()) {
		return -1
	}
	i := 0
	for r := RegionC; r < v.Region(); r++ {
		i += VertebraCount(s, r)
	}
	return i + v.Number() - 1
}

// Vertebrae lists the species' vertebrae, cranial to caudal.
func Vertebrae(s Species) []Vertebra {
	var out []Vertebra
	for r := RegionC; r <= RegionCd; r++ {
		for n := 1; n <= VertebraCount(s, r); n++ {
			out = append(out, NewVertebra(r, n))
		}
	}
	return out
}
