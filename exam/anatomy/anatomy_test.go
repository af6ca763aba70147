package anatomy

import (
	"fmt"
	"math"
	"os"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
)

// table reads a tab-separated file of testdata; each file names its source in its head.
func table(t *testing.T, name string) [][]string {
	t.Helper()
	b, err := os.ReadFile("testdata/" + name)
	require.NoError(t, err)
	var out [][]string
	for _, line := range strings.Split(strings.TrimSpace(string(b)), "\n") {
		if !strings.HasPrefix(line, "#") {
			out = append(out, strings.Split(line, "\t"))
		}
	}
	require.NotEmpty(t, out)
	return out
}

var token = regexp.MustCompile(`\*\*|\(|\)|(Cd|[CTLS])(\d+)(?:–(Cd|[CTLS])(\d+))?`)

// origin reads «(C6), C7, **C8**, T1, (T2)» into main, contributing and occasional, by a
// way of its own, not by the package's.
func origin(text string) map[string]string {
	out := map[string]string{}
	bold, paren := false, false
	for _, m := range token.FindAllStringSubmatch(text, -1) {
		switch m[0] {
		case "**":
			bold = !bold
		case "(":
			paren = true
		case ")":
			paren = false
		default:
			class := "contributing"
			if bold {
				class = "main"
			} else if paren {
				class = "occasional"
			}
			for _, name := range run(m) {
				out[name] = class
			}
		}
	}
	return out
}

// run spells out C8–T1 as C8, T1 in the dog's order.
func run(m []string) []string {
	from := m[1] + m[2]
	if m[3] == "" {
		return []string{from}
	}
	to := m[3] + m[4]
	var out []string
	on := false
	for _, r := range []struct {
		name  string
		count int
	}{{"C", 8}, {"T", 13}, {"L", 7}, {"S", 3}, {"Cd", 5}} {
		for n := 1; n <= r.count; n++ {
			name := r.name + strconv.Itoa(n)
			on = on || name == from
			if on {
				out = append(out, name)
			}
			if name == to {
				on = false
			}
		}
	}
	return out
}

// classes turns the package's weights back into words.
func classes(ws []Weight) map[string]string {
	out := map[string]string{}
	for _, w := range ws {
		switch {
		case w.Weight >= 0.75:
			out[w.Segment.String()] = "main"
		case w.Weight > 0.25:
			out[w.Segment.String()] = "contributing"
		default:
			out[w.Segment.String()] = "occasional"
		}
	}
	return out
}

func nerveNamed(t *testing.T, name string) NerveInfo {
	t.Helper()
	name = strings.TrimSuffix(name, " (peroneal)")
	for _, n := range Nerves() {
		if n.String() == name {
			info, err := InfoOf(exam.Dog, n)
			require.NoError(t, err)
			return info
		}
	}
	t.Fatalf("no nerve %q", name)
	return NerveInfo{}
}

func TestNervesOfTheDog(t *testing.T) {
	seen := 0
	for _, row := range table(t, "nerves.tsv") {
		name, text := row[0], row[1]
		t.Run(name, func(t *testing.T) {
			switch name {
			case "cranial / caudal pectoral":
				require.Equal(t, origin("C6–C8"), classes(nerveNamed(t, "cranial pectoral").Roots))
				require.Equal(t, origin("C8–T2"), classes(nerveNamed(t, "caudal pectoral").Roots))
				seen += 2
				return
			case "saphenous":
				require.Equal(t, nerveNamed(t, "femoral").Roots, nerveNamed(t, name).Roots)
			case "genitofemoral":
				require.Equal(t, []Weight{{NewSegment(exam.RegionL, 3), 0.33}, {NewSegment(exam.RegionL, 4), 1}}, nerveNamed(t, name).Roots, "L3 in the median third of the sides")
			case "hypogastric":
				require.Equal(t, origin("L1–L4"), classes(nerveNamed(t, name).Roots))
				cat, err := InfoOf(exam.Cat, Hypogastric)
				require.NoError(t, err)
				require.Equal(t, origin("L2–L5"), classes(cat.Roots))
			case "pudendal", "pelvic": // counted: see TestCountedPlexus; main segments as named
				got := classes(nerveNamed(t, name).Roots)
				for seg, class := range origin(text) {
					if class == "main" {
						require.Equal(t, "main", got[seg], seg)
					} else {
						require.NotEqual(t, "main", got[seg], seg)
						require.Contains(t, got, seg)
					}
				}
			default:
				require.Equal(t, origin(text), classes(nerveNamed(t, name).Roots))
			}
			seen++
		})
	}
	require.Equal(t, len(Nerves()), seen, "every nerve of the package stands in the table")
	for _, n := range Nerves() {
		for _, s := range []exam.Species{exam.Dog, exam.Cat} {
			info, err := InfoOf(s, n)
			require.NoError(t, err)
			require.NotEmpty(t, info.Source, n.String())
			require.NotEmpty(t, info.Loss+info.Skin)
		}
	}
}

// Gomez-Amaya et al. 2015: the counted shares are used as they are.
func TestCountedPlexus(t *testing.T) {
	for _, row := range table(t, "plexus-counts.tsv") {
		info := nerveNamed(t, row[0])
		require.True(t, info.Counted)
		for i, seg := range []string{"L7", "S1", "S2", "S3", "Cd1"} {
			m := regexp.MustCompile(`^(\d+)/(\d+)`).FindStringSubmatch(row[i+1])
			k, _ := strconv.ParseFloat(m[1], 64)
			n, _ := strconv.ParseFloat(m[2], 64)
			s, err := ParseSegment(seg, exam.Dog)
			require.NoError(t, err)
			require.InDelta(t, k/n, Share(info.Roots, s), 0.005, "%s %s", row[0], seg)
		}
	}
}

// TA-GM-14, 14 dogs: most fibres of the cranial tibial muscle through L6 in 11; gastrocnemius L7 and S1 in 10.
func TestCountedCruralMuscles(t *testing.T) {
	ct := ArcOf(exam.Dog, exam.MassCranialTibial, exam.Left)
	l := func(n int) Segment { return NewSegment(exam.RegionL, n) }
	require.Greater(t, Share(ct, l(6)), Share(ct, l(7)))
	require.Greater(t, Share(ct, l(7)), Share(ct, l(5)))
	require.InDelta(t, 1.0/14, Share(ct, l(5)), 0.005, "L5 alone in one dog")
	gm := ArcOf(exam.Dog, exam.MassGastrocnemius, exam.Left)
	require.InDelta(t, 1, Share(gm, l(7)), 1e-9, "L7 among those with most fibres in all 14")
	require.Greater(t, Share(gm, NewSegment(exam.RegionS, 1)), Share(gm, l(6)))
	require.Greater(t, Share(gm, l(6)), Share(gm, l(5)))
}

func TestMyotomes(t *testing.T) {
	sites := map[string]exam.Site{"stance, pelvic (sunk hock)": exam.PelvicLeft, "stance, thoracic (sunk carpus)": exam.ThoracicLeft, "tail-tone": exam.Midline}
	seen := map[exam.Item]bool{}
	for _, row := range table(t, "myotomes.tsv") {
		name, text := row[0], row[2]
		t.Run(name, func(t *testing.T) {
			switch name {
			case "mass-temporalis":
				require.Nil(t, ArcOf(exam.Dog, exam.MassTemporalis, exam.Left), "served by a cranial nerve")
				seen[exam.MassTemporalis] = true
				return
			case "mass-epaxial":
				f := exam.Finding{Item: exam.MassEpaxial, Site: exam.Left, Level: exam.NewVertebra(exam.RegionL, 3), Result: exam.Graded(1)}
				require.Equal(t, "L2–L4", Span(exam.Dog, ArcOfFinding(exam.Dog, f)))
				seen[exam.MassEpaxial] = true
				return
			case "(distal flexors, no item)": // the vocabulary has gained the item since: mass-forearm-flexors
				require.Equal(t, origin("(C7) C8 T1 (T2)"), classes(ArcOf(exam.Dog, exam.MassForearmFlexors, exam.Left)))
				seen[exam.MassForearmFlexors] = true
				return
			case "anal-tone, perineal":
				for _, ws := range [][]Weight{ArcOf(exam.Dog, exam.AnalTone, exam.Midline), ArcOf(exam.Dog, exam.Perineal, exam.Left)} {
					require.Equal(t, rootsFor(exam.Dog, Pudendal), ws)
					require.Equal(t, "S2–S3", Span(exam.Dog, withoutSmall(ws, 0.5)))
				}
				return
			}
			item, err := exam.ParseItem(strings.Split(name, ",")[0])
			require.NoError(t, err)
			site, ok := sites[name]
			if !ok {
				site = exam.Left
			}
			got := classes(ArcOf(exam.Dog, item, site))
			want := origin(text)
			if strings.Contains(row[3], "counted") {
				for seg, class := range want { // the counts decide; the main segments must be those named
					require.Equal(t, class == "main", got[seg] == "main", seg)
				}
				require.Len(t, got, len(want))
			} else {
				require.Equal(t, want, got)
			}
			seen[item] = true
		})
	}
	for _, item := range exam.Items() {
		if item.Info().Group == exam.GroupMass && item != exam.MassMasseter {
			require.True(t, seen[item], "%s has no row", item)
		}
	}
}

func withoutSmall(ws []Weight, least float64) (out []Weight) {
	for _, w := range ws {
		if w.Weight >= least {
			out = append(out, w)
		}
	}
	return out
}

func TestReflexArcs(t *testing.T) {
	trusts := map[string]float64{
		"present in normals; weak localiser": Poor, "good; transiently lost in spinal shock": Good,
		"poor: hard to obtain in normals": Poor, "poor: absence is not evidence": Poor,
		"best tendon reflex": Good, "inconsistent in normals": Poor, "good": Good,
		"good when a cut-off is found; global absence means little": Good,
	}
	for _, row := range table(t, "reflexes.tsv") {
		name, text, trust := row[0], row[1], row[2]
		t.Run(name, func(t *testing.T) {
			item, err := exam.ParseItem(strings.Split(name, ",")[0])
			require.NoError(t, err)
			site := item.Info().Sites[0]
			if strings.HasSuffix(name, "pelvic") {
				site = exam.PelvicLeft
			}
			a, ok, err := ArcFor(exam.Dog, item, site)
			require.NoError(t, err)
			if name == "crossed-extensor" {
				require.False(t, ok, "it tells of the way above the enlargement, not of a segment")
				return
			}
			require.True(t, ok)
			require.NotEmpty(t, a.Source)
			main, _, _ := strings.Cut(text, "; medial")
			switch name {
			case "withdrawal, pelvic":
				require.Equal(t, origin("L4–L6"), classes(a.Medial))
				require.Equal(t, a.Medial, ArcOfFinding(exam.Dog, exam.Finding{Item: exam.Withdrawal, Site: exam.PelvicLeft, Digit: exam.Medial}))
				require.Equal(t, origin(main), classes(a.Segments))
			case "biceps": // the segment in brackets is the main one here (Illinois)
				require.Equal(t, origin("C6, **C7**, C8"), classes(a.Segments))
			case "extensor-carpi":
				require.Equal(t, origin("C7–T1"), classes(a.Segments))
				require.Equal(t, "C6–C7", Span(exam.Cat, ArcOf(exam.Cat, item, site)))
			case "perineal": // counted: tested with the pudendal nerve
			case "cutaneous-trunci":
				require.Equal(t, origin("**C8–T1**"), classes(a.Segments))
			case "tail-tone":
				require.Equal(t, "Cd1–Cd5", Span(exam.Dog, a.Segments))
			default:
				require.Equal(t, origin(main), classes(a.Segments))
			}
			want, ok := trusts[trust]
			switch name {
			case "cranial-tibial":
				want = NotTrust
			case "extensor-carpi":
				want = Poor
			default:
				require.True(t, ok, "a trust without a number: %q", trust)
			}
			require.Equal(t, want, a.Trust)
		})
	}
	require.Equal(t, 0.0, Trust(exam.CranialTibial))
	require.Equal(t, 0.2, Trust(exam.Biceps))
	require.Equal(t, 1.0, Trust(exam.Patellar))
	require.Equal(t, 0.0, Trust(exam.Mentation))
}

func TestSpeciesCounts(t *testing.T) {
	for _, row := range table(t, "species.tsv") {
		s, err := exam.ParseSpecies(row[0])
		if err != nil {
			continue // Cordwalk knows four of the eight
		}
		seg := strings.Split(regexp.MustCompile(`\s*\(.*`).ReplaceAllString(row[1], ""), " / ")
		ver := strings.Split(row[2], " / ")
		for i, r := range []exam.Region{exam.RegionC, exam.RegionT, exam.RegionL, exam.RegionS, exam.RegionCd} {
			require.Equal(t, seg[i], strconv.Itoa(SegmentCount(s, r)), "%s segments %s", s, r)
			numbers := regexp.MustCompile(`\d+`).FindAllString(ver[i], -1)
			require.Equal(t, numbers[len(numbers)-1], strconv.Itoa(exam.VertebraCount(s, r)), "%s vertebrae %s", s, r)
		}
	}
	require.Len(t, Segments(exam.Dog), 36)
	require.Len(t, Segments(exam.Cat), 36)
	require.Len(t, Segments(exam.Horse), 42)
	require.Len(t, Segments(exam.Rabbit), 37)
}

// allowed reads «C6 (caudal) – C7 (cranial)» into the vertebrae it spans.
func allowed(t *testing.T, text string) map[string]bool {
	text = regexp.MustCompile(`\([^)]*\)`).ReplaceAllString(text, "")
	text = strings.ReplaceAll(text, " ", "")
	m := token.FindStringSubmatch(text)
	require.NotNil(t, m, text)
	out := map[string]bool{}
	if m[3] == "" {
		out[m[1]+m[2]] = true
		return out
	}
	for _, name := range run(m) { // vertebrae: no C8
		if name != "C8" {
			out[name] = true
		}
	}
	return out
}

// A medium dog of 20 kg: most of each segment lies where the table says.
func TestVertebraOfSegmentDog(t *testing.T) {
	check := func(seg string, ok map[string]bool, least float64) {
		s, err := ParseSegment(seg, exam.Dog)
		require.NoError(t, err)
		ws, err := VertebraOfSegment(exam.Dog, 20, s)
		require.NoError(t, err)
		sum, in, best := 0.0, 0.0, VertebraWeight{}
		for _, w := range ws {
			sum += w.Weight
			if ok[w.Vertebra.String()] {
				in += w.Weight
			}
			if w.Weight > best.Weight {
				best = w
			}
		}
		require.InDelta(t, 1, sum, 0.03)
		require.True(t, ok[best.Vertebra.String()], "%s most often in %s, table says %v", seg, best.Vertebra, ok)
		require.Greater(t, in, least, "%s within %v", seg, ok)
	}
	for _, row := range table(t, "vertebrae.tsv") {
		seg, where := row[0], row[1]
		switch {
		case seg == "T3–T10":
			for n := 3; n <= 10; n++ { // half to one vertebra cranial to its number: middle of the segment against that of the vertebra
				from, to, err := Place(exam.Dog, 20, NewSegment(exam.RegionT, n))
				require.NoError(t, err)
				own := float64(exam.VertebraIndex(exam.Dog, exam.NewVertebra(exam.RegionT, n))) + 0.5
				d := own - (from+to)/2
				require.True(t, d > 0 && d < 1.5, "T%d lies %.2f cranial to T%d", n, d, n)
			}
		case strings.HasPrefix(seg, "T11"):
			for _, name := range []string{"T11", "T12", "T13", "L1", "L2", "L3"} {
				check(name, map[string]bool{name: true}, 0.5)
			}
		case strings.HasPrefix(seg, "S1, S2"):
			for _, name := range []string{"S1", "S2", "S3"} {
				check(name, map[string]bool{"L5": true}, 0.5)
			}
		case strings.HasPrefix(seg, "Cd1"):
			for n := 1; n <= 5; n++ {
				check(fmt.Sprint("Cd", n), map[string]bool{"L6": true}, 0.5)
			}
		default:
			least := 0.5
			if seg == "L7" || seg == "L4" {
				least = 0.8 // spans a border: both vertebrae are named
			}
			check(seg, allowed(t, where), least)
		}
	}
}

// Where roots leave the canal, by the same table and by the rule of exits.
func TestRootExits(t *testing.T) {
	for _, row := range table(t, "vertebrae.tsv") {
		seg, err := ParseSegment(row[0], exam.Dog)
		if err != nil || !strings.Contains(row[2], "–") {
			continue
		}
		a, b, err := RootExit(exam.Dog, seg)
		require.NoError(t, err)
		require.Equal(t, row[2], a.String()+"–"+b.String(), "root of %s", seg)
	}
	a, b, err := RootExit(exam.Dog, NewSegment(exam.RegionC, 1))
	require.NoError(t, err)
	require.Equal(t, a, b, "C1 leaves through the foramen of the atlas")
	_, _, err = RootExit(exam.Horse, NewSegment(exam.RegionC, 1))
	require.Error(t, err)
	_, _, err = RootExit(exam.Dog, NewSegment(exam.RegionL, 9))
	require.Error(t, err)
}

// Which segments are at risk at a disc of a medium dog, ±1 segment.
func TestSegmentsAtDisc(t *testing.T) {
	top := func(name string) map[string]float64 {
		v, err := exam.ParseVertebra(name, exam.Dog)
		require.NoError(t, err)
		ws, err := SegmentsAtDisc(exam.Dog, 20, v)
		require.NoError(t, err)
		out := map[string]float64{}
		for _, w := range ws {
			out[w.Segment.String()] = w.Weight
		}
		return out
	}
	root := func(name, want string) {
		v, _ := exam.ParseVertebra(name, exam.Dog)
		require.Equal(t, want, RootAtDisc(exam.Dog, v).String(), "root at the disc caudal to %s", name)
	}
	for _, row := range table(t, "discs.tsv") {
		cranial := strings.Split(row[0], "–")[0]
		switch {
		case strings.HasSuffix(row[0], "discs"): // T2–T3 to T9–T10: number of the caudal vertebra, +1
			for n := 2; n <= 9; n++ {
				got := top("T" + strconv.Itoa(n))
				require.Greater(t, got["T"+strconv.Itoa(n+1)]+got["T"+strconv.Itoa(n+2)], 0.5, "T%d", n)
				root("T"+strconv.Itoa(n), "T"+strconv.Itoa(n))
			}
		case strings.Contains(row[0], "…"):
			for _, pair := range [][2]string{{"T11", "T12"}, {"T12", "T13"}, {"T13", "L1"}, {"L1", "L2"}} {
				require.Greater(t, top(pair[0])[pair[1]], 0.5, "%v", pair)
				root(pair[0], pair[0])
			}
		case strings.Contains(row[1], "cauda equina"):
			sum := 0.0
			for seg, w := range top(cranial) {
				require.True(t, strings.HasPrefix(seg, "Cd") || w < 0.03, "%s at %s: %.2f", seg, row[0], w)
				sum += w
			}
			if cranial == "L7" {
				require.Less(t, sum, 0.1, "no cord at the lumbosacral disc in most dogs")
			}
			root(cranial, row[2])
		default:
			got, want := top(cranial), origin(strings.Replace(row[1], "Cd", "Cd1–Cd5", 1))
			named, others := 0.0, 0.0
			for seg, w := range got {
				if _, ok := want[seg]; ok {
					named += w
				} else {
					others = max(others, w)
				}
			}
			require.Greater(t, named, 0.6, "%s: %v", row[0], got)
			for seg, class := range want {
				if class == "contributing" && !strings.HasPrefix(seg, "Cd") {
					require.GreaterOrEqual(t, got[seg], 0.13, "%s %s: %v", row[0], seg, got)
				}
			}
			root(cranial, row[2])
		}
	}
}

// Body weight moves the caudal segments: caudally in small dogs, cranially in large ones (Khan-2019).
func TestWeightShift(t *testing.T) {
	end := func(kg float64) float64 {
		_, to, err := Place(exam.Dog, kg, NewSegment(exam.RegionCd, 5))
		require.NoError(t, err)
		return to
	}
	last := math.Inf(1)
	for _, kg := range []float64{3, 5, 8, 10, 15, 20, 25, 30, 35, 60} {
		require.LessOrEqual(t, end(kg), last)
		last = end(kg)
	}
	require.InDelta(t, 1, end(4)-end(20), 1e-9)
	require.InDelta(t, 0.5, end(10)-end(20), 1e-9)
	require.InDelta(t, -0.5, end(40)-end(20), 1e-9)
	require.Equal(t, end(20), end(0), "not known: a medium dog")
	a, _, _ := Place(exam.Dog, 4, NewSegment(exam.RegionT, 13))
	b, _, _ := Place(exam.Dog, 40, NewSegment(exam.RegionT, 13))
	require.Equal(t, a, b, "weight does not move the thoracolumbar segments")
	for _, kg := range []float64{0.5, 5, 22, 90, math.Inf(1), math.NaN()} {
		places, err := stretches(exam.Dog, kg)
		require.NoError(t, err)
		for i, p := range places {
			require.Less(t, p.from, p.to, "segment %d at %g kg", i, kg)
		}
	}
	// Valentino-2025: L6 or L7 in 96 % of dogs with normal tails.
	ends, _, err := CordEnd(exam.Dog, 20)
	require.NoError(t, err)
	in := 0.0
	for _, w := range ends {
		if w.Vertebra == v(exam.RegionL, 6) || w.Vertebra == v(exam.RegionL, 7) {
			in += w.Weight
		}
	}
	require.InDelta(t, 0.96, in, 0.02)
}

// Kot-1994: the cat's roots and conus.
func TestCatVertebrae(t *testing.T) {
	rows := table(t, "cat-vertebrae.tsv")
	require.Contains(t, rows[0][2], "83.3 % / 9.5 % / 7.1 %")
	_, conus, err := Place(exam.Cat, 4, NewSegment(exam.RegionCd, 5))
	require.NoError(t, err)
	sd := spread(exam.Cat, 4, 26)
	over := func(vert exam.Vertebra) float64 {
		i := float64(exam.VertebraIndex(exam.Cat, vert))
		return cdf((i+1-conus)/sd) - cdf((i-conus)/sd)
	}
	require.InDelta(t, 0.071, over(v(exam.RegionL, 7)), 0.01)
	require.InDelta(t, 0.833, over(v(exam.RegionS, 1)), 0.01)
	require.InDelta(t, 0.095, over(v(exam.RegionS, 2)), 0.01)
	// Roots leave over L5 or at its ends: L6; over L5 or at L5–L6: L7 and S1; over L6 or at L5–L6: S2 and S3.
	l5, l6 := float64(exam.VertebraIndex(exam.Cat, v(exam.RegionL, 5))), float64(exam.VertebraIndex(exam.Cat, v(exam.RegionL, 6)))
	for seg, in := range map[string][2]float64{"L6": {l5, l5 + 1}, "L7": {l5, l6 + 0.25}, "S1": {l5, l6 + 0.5}, "S2": {l6, l6 + 1}, "S3": {l6, l6 + 1}} {
		s, _ := ParseSegment(seg, exam.Cat)
		from, to, err := Place(exam.Cat, 4, s)
		require.NoError(t, err)
		require.True(t, from >= in[0]-0.001 && to <= in[1]+0.001, "%s lies at %.2f–%.2f, allowed %v", seg, from, to, in)
	}
	for _, kg := range []float64{2, 8} {
		a, b, _ := Place(exam.Cat, kg, NewSegment(exam.RegionS, 1))
		c, d, _ := Place(exam.Cat, 4, NewSegment(exam.RegionS, 1))
		require.Equal(t, [2]float64{a, b}, [2]float64{c, d}, "weight does not matter in cats")
	}
	// about one vertebra caudal to the dog's
	for _, seg := range []string{"L6", "L7", "S1", "S2", "S3"} {
		s, _ := ParseSegment(seg, exam.Cat)
		a, _, _ := Place(exam.Cat, 4, s)
		b, _, _ := Place(exam.Dog, 20, s)
		require.InDelta(t, 1, a-b, 0.25, seg)
	}
}

// Inverse mappings agree: what a vertebra holds, the segments say too.
func TestMappingsAgree(t *testing.T) {
	for _, s := range []exam.Species{exam.Dog, exam.Cat} {
		for _, kg := range []float64{0, 4, 20, 45} {
			total := 0.0
			for i, vert := range exam.Vertebrae(s) {
				ws, err := SegmentAtVertebra(s, kg, vert)
				require.NoError(t, err)
				sum := 0.0
				for _, w := range ws {
					require.True(t, w.Weight > 0 && w.Weight <= 1+1e-9)
					sum += w.Weight
				}
				require.LessOrEqual(t, sum, 1+1e-9)
				if i < 20 {
					require.InDelta(t, 1, sum, 0.04, "the cord fills the column as far as L1")
				}
				total += sum
			}
			_, end, _ := Place(s, kg, NewSegment(exam.RegionCd, 5))
			require.InDelta(t, end, total, 0.4, "%s %g kg: as many vertebrae hold cord as the cord is long", s, kg)
		}
	}
	for _, seg := range Segments(exam.Dog) {
		ws, err := VertebraOfSegment(exam.Dog, 20, seg)
		require.NoError(t, err)
		best := ws[0]
		for _, w := range ws {
			if w.Weight > best.Weight {
				best = w
			}
		}
		back, err := SegmentAtVertebra(exam.Dog, 20, best.Vertebra)
		require.NoError(t, err)
		require.Greater(t, Share(back, seg), 0.05, "%s in %s", seg, best.Vertebra)
	}
}

func TestVariants(t *testing.T) {
	for _, p := range []Plexus{Brachial, Lumbosacral} {
		vs, err := Variants(exam.Dog, p)
		require.NoError(t, err)
		sum := 0.0
		for _, x := range vs {
			sum += x.Frequency
			require.NotEmpty(t, x.Source)
		}
		require.InDelta(t, 1, sum, 1e-12)
	}
	vs, _ := Variants(exam.Dog, Lumbosacral)
	require.Greater(t, vs[2].Frequency, vs[0].Frequency, "postfixed is commoner than prefixed (Gomez-2015)")
	vs, _ = Variants(exam.Dog, Brachial)
	// Allam: C5 takes part in 24.14 % and T2 in 20.69 % of 58 limbs; in none of Lambertini's 36.
	require.InDelta(t, 14.0/94, vs[0].Frequency, 0.015)
	require.InDelta(t, 12.0/94, vs[2].Frequency, 0.015)
	_, err := Variants(exam.Horse, Brachial)
	require.ErrorContains(t, err, "horse")
	femoral, _ := InfoOf(exam.Dog, Femoral)
	require.Equal(t, "L3–L5", Span(exam.Dog, Shift(exam.Dog, femoral.Roots, -1)))
	require.Equal(t, "L5–L7", Span(exam.Dog, Shift(exam.Dog, femoral.Roots, 1)))
	require.Empty(t, Shift(exam.Dog, roots("Cd5"), 1), "what leaves the cord is dropped")
}

func TestOtherSpeciesSayWhatTheyLack(t *testing.T) {
	var nd *NoData
	for _, s := range []exam.Species{exam.Horse, exam.Rabbit} {
		_, _, err := ArcFor(s, exam.Patellar, exam.PelvicLeft)
		require.ErrorAs(t, err, &nd)
		require.ErrorContains(t, err, s.String())
		require.Nil(t, ArcOf(s, exam.Patellar, exam.PelvicLeft))
		require.Nil(t, Score(s, exam.Visit{}))
		_, err = SegmentAtVertebra(s, 0, v(exam.RegionL, 1))
		require.ErrorAs(t, err, &nd)
		_, err = VertebraOfSegment(s, 0, NewSegment(exam.RegionL, 1))
		require.ErrorAs(t, err, &nd)
		_, err = PainSources(s)
		require.ErrorAs(t, err, &nd)
		_, err = Arcs(s)
		require.ErrorAs(t, err, &nd)
		_, err = LesionFromTrunci(s, v(exam.RegionL, 1))
		require.ErrorAs(t, err, &nd)
		_, err = InfoOf(s, Tibial)
		require.ErrorAs(t, err, &nd)
		_, _, err = CordEnd(s, 0)
		require.NoError(t, err)
	}
	sup, err := InfoOf(exam.Horse, Suprascapular)
	require.NoError(t, err)
	require.Equal(t, "C6–C7", Span(exam.Horse, sup.Roots))
	mc, err := InfoOf(exam.Horse, Musculocutaneous)
	require.NoError(t, err)
	require.Equal(t, "C7–C8", Span(exam.Horse, mc.Roots))
	// Nascimento-2019: L6 takes part in 63.3 + 13.4 + 3.3 %, L7 in all but 13.4 %.
	ob, err := InfoOf(exam.Rabbit, Obturator)
	require.NoError(t, err)
	require.InDelta(t, 0.80, Share(ob.Roots, NewSegment(exam.RegionL, 6)), 0.001)
	require.InDelta(t, 0.866, Share(ob.Roots, NewSegment(exam.RegionL, 7)), 0.001)
	_, err = Variants(exam.Rabbit, Lumbosacral)
	require.ErrorAs(t, err, &nd)
	_, _, err = CordEnd(99, 0)
	require.ErrorAs(t, err, &nd)
}

func TestCatDiffers(t *testing.T) {
	sc, err := InfoOf(exam.Cat, Sciatic)
	require.NoError(t, err)
	require.Equal(t, "main", classes(sc.Roots)["L6"], "BNAU-cat: L6 gives the largest share")
	require.Equal(t, origin("(L4) (L5) **L6** L7 S1 (S2)"), classes(sc.Roots))
	require.Equal(t, "C6–C7", Span(exam.Cat, ArcOf(exam.Cat, exam.MassExtensorCarpi, exam.Left)))
	require.Equal(t, "L7–S1", Span(exam.Cat, ArcOf(exam.Cat, exam.MassGastrocnemius, exam.Left)))
	require.Zero(t, Share(ArcOf(exam.Cat, exam.Triceps, exam.ThoracicLeft), NewSegment(exam.RegionT, 2)))
	require.NotZero(t, Share(ArcOf(exam.Cat, exam.Horner, exam.Left), NewSegment(exam.RegionT, 2)))
	a, _, _ := ArcFor(exam.Cat, exam.CutaneousTrunci, exam.Left)
	require.Equal(t, Poor, a.Trust)
}

func TestSegments(t *testing.T) {
	for _, s := range exam.AllSpecies() {
		last := Segment(0)
		for i, seg := range Segments(s) {
			require.Greater(t, seg, last, "ordered")
			last = seg
			require.Equal(t, i, Index(s, seg))
			require.Equal(t, seg, At(s, i))
			back, err := ParseSegment(seg.String(), s)
			require.NoError(t, err)
			require.Equal(t, seg, back)
			b, err := seg.MarshalText()
			require.NoError(t, err)
			var again Segment
			require.NoError(t, again.UnmarshalText(b))
			require.Equal(t, seg, again)
			require.NotEmpty(t, CordRegion(seg).String())
		}
		require.NotEmpty(t, SegmentSource(s))
	}
	for _, bad := range []string{"", "L", "L0", "L8", "X3", "L07", "Cd6", "L-1", "T14"} {
		_, err := ParseSegment(bad, exam.Dog)
		require.Error(t, err, bad)
	}
	require.Equal(t, Segment(0), At(exam.Dog, -1))
	require.Equal(t, Segment(0), At(exam.Dog, 36))
	require.Equal(t, -1, Index(exam.Dog, 0))
	for seg, want := range map[string]Cord{"C1": C1C5, "C5": C1C5, "C6": C6T2, "T2": C6T2, "T3": T3L3, "L3": T3L3, "L4": L4S3, "S3": L4S3, "Cd1": CdSegment} {
		s, _ := ParseSegment(seg, exam.Dog)
		require.Equal(t, want, CordRegion(s), seg)
	}
	require.Equal(t, NoCord, CordRegion(0))
	require.Len(t, CordRegions(), 5)
	require.Equal(t, "C8, T2–T4", Span(exam.Dog, []Weight{{NewSegment(exam.RegionC, 8), 1}, {NewSegment(exam.RegionT, 2), 1}, {NewSegment(exam.RegionT, 3), 1}, {NewSegment(exam.RegionT, 4), 1}}))
	require.Nil(t, Normalised(nil))
	require.Equal(t, 0, SegmentCount(exam.Dog, 99))
}

func TestPainSourcesAndSites(t *testing.T) {
	for _, s := range exam.AllSpecies() {
		seen := exam.NoSite
		for _, vert := range exam.Vertebrae(s) {
			site := SpineSite(s, vert)
			require.True(t, exam.SpinalPain.At(site), "%s %s", s, vert)
			require.GreaterOrEqual(t, site, seen, "sites run cranial to caudal")
			seen = site
		}
		require.Equal(t, exam.Sacrocaudal, seen)
		a, b := SpineRange(s, exam.Thoracolumbar)
		require.True(t, a < v(exam.RegionL, 1) && b >= v(exam.RegionL, 1))
	}
	require.Equal(t, exam.NoSite, SpineSite(exam.Dog, v(exam.RegionT, 20)))
	ps, err := PainSources(exam.Dog)
	require.NoError(t, err)
	at := func(k PainKind, vert exam.Vertebra) bool {
		for _, p := range ps {
			if p.Kind == k && p.Cranial == vert {
				return true
			}
		}
		return false
	}
	require.False(t, at(PainDisc, v(exam.RegionC, 1)), "no disc between C1 and C2")
	require.True(t, at(PainJoint, v(exam.RegionC, 1)))
	require.True(t, at(PainDisc, v(exam.RegionL, 7)))
	require.False(t, at(PainDisc, v(exam.RegionS, 1)), "the sacrum is fused")
	require.True(t, at(PainDisc, v(exam.RegionS, 3)))
	require.True(t, at(PainRoot, v(exam.RegionL, 7)))
	for _, p := range ps {
		require.NotEmpty(t, p.Kind.String())
		require.NotEqual(t, exam.NoSite, p.Site)
	}
}

func TestTrunciOffset(t *testing.T) {
	o := TrunciOffset()
	sum := 0.0
	for _, p := range o {
		sum += p
	}
	require.InDelta(t, 1, sum, 1e-12)
	require.InDelta(t, 0.485, o[2]+o[3], 0.006, "GQ-2012: 2 or 3 vertebrae in 16 of 33")
	ws, err := LesionFromTrunci(exam.Dog, v(exam.RegionL, 1))
	require.NoError(t, err)
	require.Len(t, ws, 5)
	require.Equal(t, v(exam.RegionL, 1), ws[0].Vertebra)
	require.Equal(t, v(exam.RegionT, 10), ws[4].Vertebra)
	ws, err = LesionFromTrunci(exam.Dog, v(exam.RegionC, 2))
	require.NoError(t, err)
	require.Len(t, ws, 2)
	_, err = LesionFromTrunci(exam.Dog, v(exam.RegionT, 30))
	require.Error(t, err)
}

func TestArcsAreWhole(t *testing.T) {
	for _, s := range []exam.Species{exam.Dog, exam.Cat} {
		as, err := Arcs(s)
		require.NoError(t, err)
		for _, a := range as {
			require.NotEmpty(t, a.Source, a.Item.String())
			require.NotEmpty(t, a.Segments, a.Item.String())
			require.NotZero(t, a.Kind)
			for _, w := range a.Segments {
				require.GreaterOrEqual(t, Index(s, w.Segment), 0)
				require.True(t, w.Weight > 0 && w.Weight <= 1)
			}
			require.NotEmpty(t, Span(s, a.Segments))
		}
	}
}

func TestErrorsOfVertebrae(t *testing.T) {
	_, err := SegmentAtVertebra(exam.Dog, 0, v(exam.RegionT, 20))
	require.Error(t, err)
	_, err = SegmentsAtDisc(exam.Dog, 0, v(exam.RegionC, 1))
	require.Error(t, err)
	_, err = SegmentsAtDisc(exam.Dog, 0, v(exam.RegionS, 1))
	require.Error(t, err)
	_, err = VertebraOfSegment(exam.Dog, 0, NewSegment(exam.RegionL, 20))
	require.Error(t, err)
	_, _, err = Place(exam.Dog, 0, NewSegment(exam.RegionL, 20))
	require.Error(t, err)
	require.Equal(t, Segment(0), RootAtDisc(exam.Dog, v(exam.RegionCd, 12)))
}

// Every row names a publication that is on record, or says that it is from memory or from teaching notes.
func TestRowsAreSourced(t *testing.T) {
	check := func(source, row string) {
		plain := false
		for _, w := range []string{"from memory", "teaching notes", "student notes", "no count of", "common practice"} {
			plain = plain || strings.Contains(source, w)
		}
		require.True(t, plain || len(exam.SourcesIn(source)) > 0, "%s: %q", row, source)
	}
	for _, s := range exam.AllSpecies() {
		for _, n := range Nerves() {
			if info, err := InfoOf(s, n); err == nil {
				check(info.Source, info.Name)
			}
		}
		as, _ := Arcs(s)
		for _, a := range as {
			check(a.Source, a.Item.String())
		}
		if _, source, err := CordEnd(s, 10); err == nil {
			check(source, "cord end")
		}
		for _, p := range []Plexus{Brachial, Lumbosacral} {
			vs, _ := Variants(s, p)
			for _, x := range vs {
				check(x.Source, p.String())
			}
		}
		check(ShiftSource(s), "places")
		check(SegmentSource(s), "segments")
	}
}
