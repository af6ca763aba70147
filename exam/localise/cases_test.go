package localise

import (
	"encoding/json"
	"os"
	"path/filepath"
	"slices"
	"sort"
	"testing"

	"cordwalk.example/cordwalk/exam"
)

// sharedCase is one published animal with a confirmed site (testdata/cases/README.md).
type sharedCase struct {
	ID       string
	Species  string
	WeightKg *float64 `json:"weight_kg"`
	Findings []struct {
		Item, Site, Level, Digit string
		Grade                    *int8
		Implied                  bool
		SeverityUnstated         bool `json:"severity_unstated"`
	}
	Truth struct {
		Kind, Region, Basis string
		Side                *string
		RegionAlso          json.RawMessage `json:"region_also"`
	}
	regions []string // the confirmed region, then those equally fair
}

func loadCases(t testing.TB) []sharedCase {
	t.Helper()
	files, err := filepath.Glob("testdata/cases/*.json")
	if err != nil || len(files) == 0 {
		t.Fatalf("no cases: %v", err)
	}
	sort.Strings(files)
	var out []sharedCase
	for _, f := range files {
		data, err := os.ReadFile(f)
		if err != nil {
			t.Fatal(err)
		}
		var c sharedCase
		if err := json.Unmarshal(data, &c); err != nil {
			t.Fatalf("%s: %v", f, err)
		}
		c.regions = []string{c.Truth.Region}
		if len(c.Truth.RegionAlso) > 0 && string(c.Truth.RegionAlso) != "null" {
			var one string
			var many []string
			if json.Unmarshal(c.Truth.RegionAlso, &one) == nil {
				many = []string{one}
			} else if err := json.Unmarshal(c.Truth.RegionAlso, &many); err != nil {
				t.Fatalf("%s: %v", f, err)
			}
			c.regions = append(c.regions, many...)
		}
		out = append(out, c)
	}
	return out
}

// exam returns the case as an exam. Where the severity is not stated only presence counts:
// every ill grade on the same side of normal is tried, see presence.
func (c *sharedCase) exam(t testing.TB) (x Exam, unstated []int) {
	t.Helper()
	sp, err := exam.ParseSpecies(c.Species)
	if err != nil {
		t.Fatal(err)
	}
	x.Species = sp
	if c.WeightKg != nil {
		x.WeightKg = *c.WeightKg
	}
	for _, f := range c.Findings {
		item, err := exam.ParseItem(f.Item)
		if err != nil {
			t.Fatalf("%s: %v", c.ID, err)
		}
		site, err := exam.ParseSite(f.Site)
		if err != nil {
			t.Fatalf("%s: %v", c.ID, err)
		}
		digit, err := exam.ParseDigit(f.Digit)
		if err != nil {
			t.Fatalf("%s: %v", c.ID, err)
		}
		out := exam.Finding{Item: item, Site: site, Digit: digit, Result: exam.Graded(*f.Grade)}
		if f.Level != "" {
			if out.Level, err = exam.ParseVertebra(f.Level, sp); err != nil {
				t.Fatalf("%s: %v", c.ID, err)
			}
		}
		if err := out.Validate(sp); err != nil {
			t.Fatalf("%s: %v", c.ID, err)
		}
		if f.SeverityUnstated {
			unstated = append(unstated, len(x.Findings))
		}
		x.Findings = append(x.Findings, out)
	}
	return x, unstated
}

// presenceExam is the exam with presence only where the severity is not stated.
func (c *sharedCase) presenceExam(t testing.TB) Exam {
	x, unstated := c.exam(t)
	for _, i := range unstated {
		x.presence = append(x.presence, x.Findings[i].Key())
	}
	return x
}

func TestSharedCases(t *testing.T) {
	engines := map[exam.Species]*Engine{}
	first, two := 0, 0
	cases := loadCases(t)
	for _, c := range cases {
		x := c.presenceExam(t)
		e := engines[x.Species]
		if e == nil {
			var err error
			if e, err = New(x.Species); err != nil {
				t.Fatal(err)
			}
			engines[x.Species] = e
		}
		r, err := e.Compute(x)
		if err != nil {
			t.Fatal(err)
		}
		in1 := slices.Contains(c.regions, r.Regions[0].Region)
		in2 := in1 || slices.Contains(c.regions, r.Regions[1].Region)
		if in1 {
			first++
		}
		if in2 {
			two++
		}
		mark := "  "
		if !in1 {
			mark = "x "
		}
		if !in2 {
			mark = "XX"
		}
		t.Logf("%s %-38s %v: %s %.2f, %s %.2f, %s %.2f | %s", mark, c.ID, c.regions, r.Regions[0].Region, r.Regions[0].Probability,
			r.Regions[1].Region, r.Regions[1].Probability, r.Regions[2].Region, r.Regions[2].Probability, r.Summary)
		t.Logf("     %v", r.Warnings)
	}
	t.Logf("first %d, first two %d of %d", first, two, len(cases))
}
