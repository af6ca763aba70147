package exam

import (
	"os"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
)

func rowsOf(t *testing.T, name string) [][]string {
	t.Helper()
	b, err := os.ReadFile("testdata/" + name)
	require.NoError(t, err)
	var out [][]string
	for _, line := range strings.Split(strings.TrimSpace(string(b)), "\n") {
		if !strings.HasPrefix(line, "#") {
			out = append(out, strings.Split(line, "\t"))
		}
	}
	return out
}

// The typed vocabulary is the designed one, row by row and in its grades, sites and traits.
func TestVocabularyIsTheDesignedOne(t *testing.T) {
	rows := rowsOf(t, "vocabulary.tsv")
	require.Len(t, rows, ItemCount-1, "an item more or less than designed")
	for _, row := range rows {
		item, err := ParseItem(row[0])
		require.NoError(t, err)
		in := item.Info()
		require.Equal(t, row[0], item.String())
		var sites []string
		for _, s := range in.Sites {
			sites = append(sites, s.String())
		}
		require.ElementsMatch(t, strings.Split(row[1], ","), sites, row[0])
		require.Equal(t, row[2], strconv.Itoa(int(in.First))+"-"+strconv.Itoa(int(item.Last())), row[0])
		if row[3] == "-" {
			require.Equal(t, int8(-1), in.Normal, row[0])
		} else {
			require.Equal(t, row[3], strconv.Itoa(int(in.Normal)), row[0])
		}
		for name, trait := range map[string]Traits{"digit": TakesDigit, "level": TakesLevel, "side": TakesSide, "joint": TakesJoint, "unordered": Unordered} {
			require.Equal(t, strings.Contains(","+row[4]+",", ","+name+","), item.Has(trait), "%s takes %s", row[0], name)
		}
		if row[0] == "lameness" { // 0 none … 4: the words between are not designed
			continue
		}
		text := regexp.MustCompile(`\([^)]*\)|`+"`").ReplaceAllString(row[5], "")
		marks := regexp.MustCompile(`(?:^|, )(\d) `).FindAllStringSubmatchIndex(text, -1)
		for k, m := range marks {
			end := len(text)
			if k+1 < len(marks) {
				end = marks[k+1][0]
			}
			grade, _ := strconv.Atoi(text[m[2]:m[3]])
			got := item.GradeWord(int8(grade))
			for _, w := range strings.Fields(strings.TrimSpace(text[m[1]:end])) {
				require.Contains(t, got, strings.Trim(w, ","), "%s %d", row[0], grade)
			}
		}
	}
}

// Vocabulary: the bulk keys never fill superficial and deep pain, sensation, spinal pain, cutaneous
// trunci, gag, breathing, skin, wound, or anything of bladder and bowel.
func TestBulkFillsNever(t *testing.T) {
	never := map[Item]bool{SuperficialPain: true, DeepPain: true, SpinalPain: true, CutaneousTrunci: true, CutaneousTrunciTwitch: true,
		Gag: true, Breathing: true, Skin: true, Wound: true}
	for _, i := range Items() {
		if i.Info().Group == GroupBladder || strings.HasPrefix(i.String(), "sensation-") {
			never[i] = true
		}
		require.Equal(t, !never[i], BulkFills(i), i.String())
	}
	require.False(t, BulkFills(NoItem))
	require.False(t, BulkFills(Item(250)))
}

func TestEveryItemIsWhole(t *testing.T) {
	for _, i := range Items() {
		require.NotEmpty(t, HowTo(i), i.String())
		require.NotEmpty(t, PlainItem(i), i.String())
		s, _ := Effort(i)
		require.Positive(t, s, i.String())
		require.NotEmpty(t, i.Info().Group.String())
		if i.Has(Noxious) {
			_, hurts := Effort(i)
			require.True(t, hurts, "%s is noxious, so it hurts", i)
		}
		for _, site := range i.Info().Sites {
			require.NotEmpty(t, PlainWords(i, site))
			k := Key{Item: i, Site: site}
			back, err := ParseKey(k.String())
			require.NoError(t, err)
			require.Equal(t, k, back)
		}
		for g := i.Info().First; g <= i.Last(); g++ {
			require.NotEmpty(t, i.GradeWord(g))
		}
		require.Empty(t, i.GradeWord(i.Last()+1))
		require.False(t, i.At(NoSite))
	}
	require.Empty(t, HowTo(Item(250)))
	require.Empty(t, PlainItem(Item(250)))
	require.Empty(t, PlainSite(Site(250)))
	require.Equal(t, "Strength of the left hind leg", PlainWords(VoluntaryMotor, PelvicLeft))
	require.Equal(t, "Wagging", PlainWords(TailMovement, Midline))
	require.Contains(t, HowTo(DeepPain), "a limb that withdraws is not a limb that feels")
	require.Equal(t, int8(-1), Item(250).Info().Normal)
	require.Equal(t, "unknown", Group(99).String())
}

func TestParsers(t *testing.T) {
	for _, s := range AllSpecies() {
		back, err := ParseSpecies(s.String())
		require.NoError(t, err)
		require.Equal(t, s, back)
	}
	_, err := ParseSpecies("")
	require.Error(t, err)
	require.Equal(t, "unknown", Species(0).String())
	for _, x := range []Sex{SexUnknown, Female, Male} {
		back, err := ParseSex(x.String())
		require.NoError(t, err)
		require.Equal(t, x, back)
	}
	_, err = ParseSex("both")
	require.Error(t, err)
	for r := ReasonNone; r < reasonCount; r++ {
		back, note := ParseReason(r.String())
		require.Equal(t, r, back)
		require.Empty(t, note)
	}
	r, note := ParseReason("asleep")
	require.Equal(t, OtherReason, r)
	require.Equal(t, "asleep", note)
	require.Equal(t, "unknown", Reason(99).String())
	for _, h := range []How{Examined, SameAsLast, RestNormal} {
		back, err := ParseHow(h.String())
		require.NoError(t, err)
		require.Equal(t, h, back)
	}
	for s := SedationNone; s <= SedationDeep; s++ {
		back, err := ParseSedation(s.String())
		require.NoError(t, err)
		require.Equal(t, s, back)
	}
	for _, s := range []Status{Active, Discharged, Died} {
		back, err := ParseStatus(s.String())
		require.NoError(t, err)
		require.Equal(t, s, back)
	}
	_, err = ParseStatus("gone")
	require.Error(t, err)
	for p := NoPrecaution + 1; p < precautionCount; p++ {
		back, err := ParsePrecaution(p.String())
		require.NoError(t, err)
		require.Equal(t, p, back)
	}
	require.Len(t, Precautions(), int(precautionCount)-1)
	require.Equal(t, "unknown", Precaution(99).String())
	for j := NoJoint; j < jointCount; j++ {
		back, err := ParseJoint(j.String())
		require.NoError(t, err)
		require.Equal(t, j, back)
	}
	require.Equal(t, "unknown", jointCount.String())
	for _, d := range []Digit{AnyDigit, Medial, Lateral} {
		back, err := ParseDigit(d.String())
		require.NoError(t, err)
		require.Equal(t, d, back)
	}
	for s := NoSite + 1; s < siteCount; s++ {
		back, err := ParseSite(s.String())
		require.NoError(t, err)
		require.Equal(t, s, back)
		require.Equal(t, s, s.Mirror().Mirror())
		if s.Side() != Midline {
			require.NotEqual(t, s.Side(), s.Mirror().Side())
		}
	}
	require.Equal(t, "unknown", siteCount.String())
	require.Len(t, Limbs(), 4)
	for _, m := range Measures() {
		back, err := ParseMeasure(m.String())
		require.NoError(t, err)
		require.Equal(t, m, back)
		require.NotEmpty(t, m.Info().Unit)
		require.Less(t, m.Info().Min, m.Info().Max)
	}
	require.Equal(t, MeasureInfo{}, Measure(250).Info())
	for _, bad := range []string{"patellar", "patellar/left/x", "nothing/left", "patellar/nowhere", "withdrawal/pelvic-left/medial/stifle/x", "a/b/c/d/e", "withdrawal/pelvic-left/medial/medial"} {
		_, err := ParseKey(bad)
		require.Error(t, err, bad)
	}
	k := Key{Item: Withdrawal, Site: PelvicLeft, Digit: Medial}
	back, err := ParseKey(k.String())
	require.NoError(t, err)
	require.Equal(t, k, back)
	k = Key{Item: JointPain, Site: PelvicLeft, Joint: Stifle}
	back, err = ParseKey(k.String())
	require.NoError(t, err)
	require.Equal(t, k, back)
	require.Contains(t, AidWords(), "sling")
	require.Contains(t, SurfaceWords(), "slick")
	require.Contains(t, SessionWords(), "after")
}

func TestVertebrae(t *testing.T) {
	for _, s := range AllSpecies() {
		last := Vertebra(0)
		for i, v := range Vertebrae(s) {
			require.Greater(t, v, last)
			last = v
			require.Equal(t, i, VertebraIndex(s, v))
			back, err := ParseVertebra(v.String(), s)
			require.NoError(t, err)
			require.Equal(t, v, back)
		}
	}
	for _, bad := range []string{"", "T14", "C8", "T0", "T01", "L-1", "X1", "Cd99", "T", "t13"} {
		_, err := ParseVertebra(bad, Dog)
		require.Error(t, err, bad)
	}
	_, err := ParseVertebra("T18", Horse)
	require.NoError(t, err)
	_, err = ParseVertebra("T18", 0)
	require.NoError(t, err, "without a species only the form is checked")
	require.Equal(t, -1, VertebraIndex(Dog, 0))
	require.Equal(t, "?", Region(9).String())
	require.Equal(t, 0, VertebraCount(Dog, 9))
	require.Empty(t, Vertebra(0).String())

	a, b, err := ParseLevelRange("T12-T13", Dog)
	require.NoError(t, err)
	require.Equal(t, "T12", a.String())
	require.Equal(t, "T13", b.String())
	_, b, err = ParseLevelRange("L1", Dog)
	require.NoError(t, err)
	require.Equal(t, "L1", b.String())
	for _, bad := range []string{"T13-T12", "T12-", "-T13", "T12-T99"} {
		_, _, err := ParseLevelRange(bad, Dog)
		require.Error(t, err, bad)
	}
}

func TestFindingValidate(t *testing.T) {
	ok := Finding{Item: CutaneousTrunci, Site: Left, Result: Graded(1), Level: NewVertebra(RegionT, 13)}
	require.NoError(t, ok.Validate(Dog))
	for name, f := range map[string]Finding{
		"no item": {Site: Left}, "site": {Item: Patellar, Site: ThoracicLeft}, "grade": {Item: Patellar, Site: PelvicLeft, Result: Graded(5)},
		"digit": {Item: Patellar, Site: PelvicLeft, Digit: Medial}, "joint": {Item: Patellar, Site: PelvicLeft, Joint: Hip},
		"level": {Item: Patellar, Site: PelvicLeft, Level: NewVertebra(RegionL, 4)}, "no such level": {Item: CutaneousTrunci, Site: Left, Level: NewVertebra(RegionT, 14)},
		"side": {Item: Patellar, Site: PelvicLeft, Side: Left}, "wrong side": {Item: SpinalPain, Site: Lumbar, Side: Midline}, "below the scale": {Item: NystagmusDirection, Site: Midline, Result: Graded(0)},
	} {
		require.Error(t, f.Validate(Dog), name)
	}
	require.NoError(t, Finding{Item: CutaneousTrunci, Site: Left, Result: Graded(1), Level: NewVertebra(RegionT, 18)}.Validate(Horse))
}

func TestHealthAndChange(t *testing.T) {
	f := func(i Item, g int8) Finding { return Finding{Item: i, Site: i.Info().Sites[0], Result: Graded(g)} }
	level := func(n int) Finding {
		x := f(CutaneousTrunci, 1)
		x.Level = NewVertebra(RegionL, n)
		return x
	}
	health := func(x Finding) float64 { h, ok := x.Health(); require.True(t, ok); return h }
	require.Equal(t, 1.0, health(f(Patellar, 2)))
	require.Equal(t, 0.0, health(f(Patellar, 0)))
	require.Equal(t, 0.5, health(f(Patellar, 3)))
	require.Equal(t, 0.75, health(f(VoluntaryMotor, 3)))
	require.Equal(t, 1.0, health(f(Wound, 3)))
	require.Equal(t, 1.0, health(level(5)), "a border at L5 is normal")
	require.Equal(t, 0.5, health(level(4)))
	require.Equal(t, 0.0, health(f(BladderOutflow, 2)), "kinds have no distance")
	require.Equal(t, 1.0, health(f(BladderOutflow, 3)))
	_, ok := f(NystagmusDirection, 2).Health()
	require.False(t, ok)
	_, ok = Finding{Item: Patellar, Site: PelvicLeft}.Health()
	require.False(t, ok, "untested has no health")
	require.False(t, Finding{Item: Patellar}.Normal(), "untested is never normal")
	require.False(t, Finding{Item: Patellar}.Abnormal())

	for _, tt := range []struct {
		name     string
		from, to Finding
		want     Direction
	}{
		{"nearer to normal", f(Patellar, 0), f(Patellar, 1), Better},
		{"to normal", f(Patellar, 4), f(Patellar, 2), Better},
		{"from normal", f(Patellar, 2), f(Patellar, 3), Worse},
		{"further above", f(Patellar, 3), f(Patellar, 4), Worse},
		{"back from above", f(Patellar, 4), f(Patellar, 3), Better},
		{"across normal", f(Patellar, 1), f(Patellar, 3), Different},
		{"across normal back", f(Tone, 4), f(Tone, 0), Different},
		{"same", f(Patellar, 1), f(Patellar, 1), Same},
		{"kinds", f(BladderOutflow, 0), f(BladderOutflow, 3), Different},
		{"kind without a normal", f(NystagmusDirection, 1), f(NystagmusDirection, 3), Different},
		{"normal is low", f(Ataxia, 2), f(Ataxia, 1), Better},
		{"normal is low, worse", f(Ataxia, 0), f(Ataxia, 3), Worse},
		{"cut-off moves caudally", level(1), level(3), Better},
		{"cut-off moves cranially", level(3), level(1), Worse},
		{"cut-off into the normal border", level(3), level(6), Better},
		{"cut-off within the normal border", level(5), level(6), Same},
		{"cut-off lost throughout", level(3), f(CutaneousTrunci, 0), Worse},
		{"level not noted", f(CutaneousTrunci, 1), level(2), Same},
		{"wound gone", f(Wound, 0), f(Wound, 3), Better},
		{"no wound, sound wound", f(Wound, 3), f(Wound, 2), Same},
		{"untested", Finding{Item: Patellar}, f(Patellar, 2), NotComparable},
		{"different items", f(Patellar, 2), f(Biceps, 2), NotComparable},
	} {
		require.Equal(t, tt.want, Change(tt.from, tt.to), tt.name)
	}
	require.Equal(t, "better", Better.String())
	require.True(t, Patellar.TwoSided())
	require.False(t, Wound.TwoSided())
	require.False(t, VoluntaryMotor.TwoSided())
}

func TestGradeOfACellWithDigits(t *testing.T) {
	v := Visit{Findings: []Finding{
		{Item: Withdrawal, Site: PelvicLeft, Digit: Medial, Result: Graded(2)}, {Item: Withdrawal, Site: PelvicLeft, Digit: Lateral, Result: Graded(0)},
		{Item: JointPain, Site: PelvicLeft, Joint: Hip, Result: Graded(0)}, {Item: JointPain, Site: PelvicLeft, Joint: Stifle, Result: Graded(3)},
		{Item: Hopping, Site: PelvicLeft, Result: Untested(Pain)},
	}}
	g, ok := v.Grade(Withdrawal, PelvicLeft)
	require.True(t, ok)
	require.Equal(t, int8(0), g)
	g, _ = v.Grade(JointPain, PelvicLeft)
	require.Equal(t, int8(3), g, "the one furthest from normal, not the lowest")
	_, ok = v.Grade(Hopping, PelvicLeft)
	require.False(t, ok)
	_, ok = v.Find(Key{Item: Hopping, Site: PelvicRight})
	require.False(t, ok)
}

// The measures and units as designed; the steps of the functional battery and the scores entered by hand
// have the unit 1.
func TestMeasuresAreTheDesignedOnes(t *testing.T) {
	units := map[string]string{"weight": "kg", "temperature": "°C", "respiratory-rate": "/min", "heart-rate": "/min", "body-condition": "1",
		"hours-since-urination": "h", "residual-volume": "mL/kg", "thigh-girth": "cm", "brachium-girth": "cm", "antebrachium-girth": "cm", "crus-girth": "cm",
		"range-of-motion": "°", "weight-bearing": "%", "stand-time": "s", "walk-distance": "m", "walk-time": "s", "steps-scored": "1",
		"steps-weight-bearing": "1", "steps-with-mistake": "1", "joints-moving": "1", "clonus": "s", "spasm": "s", "pain-at-rest": "1", "pain-on-movement": "1"}
	ranges := map[string][2]float64{"body-condition": {1, 9}, "joints-moving": {0, 3}, "pain-at-rest": {0, 10}, "pain-on-movement": {0, 10}}
	tasks := 0
	for _, m := range Measures() {
		in := m.Info()
		switch {
		case strings.HasPrefix(in.Name, "task-"):
			tasks++
			require.Equal(t, [2]float64{0, 4}, [2]float64{in.Min, in.Max})
		case strings.HasPrefix(in.Name, "scale-"):
			require.Equal(t, "1", in.Unit)
		default:
			require.Equal(t, units[in.Name], in.Unit, in.Name)
			delete(units, in.Name)
			if want, ok := ranges[in.Name]; ok {
				require.Equal(t, want, [2]float64{in.Min, in.Max})
			}
		}
	}
	require.Empty(t, units)
	require.Equal(t, 11, tasks, "FINFUN2018 has eleven tasks")
}
