package alert

import (
	"fmt"
	"slices"
	"strings"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/scale"
)

var (
	pelvic   = []exam.Site{exam.PelvicLeft, exam.PelvicRight}
	thoracic = []exam.Site{exam.ThoracicLeft, exam.ThoracicRight}
	limbs    = exam.Limbs()
	sides    = []exam.Site{exam.Left, exam.Right}

	// arcs that fade when malacia descends, and the gait and postural items of a limb.
	arcItems = []exam.Item{exam.Patellar, exam.Withdrawal, exam.WithdrawalHip, exam.WithdrawalStifle, exam.WithdrawalHock, exam.WithdrawalDigits,
		exam.Perineal, exam.AnalTone, exam.Tone}
	limbItems = []exam.Item{exam.VoluntaryMotor, exam.PawPlacement, exam.Hopping, exam.Ataxia, exam.Withdrawal}
	gaitItems = []exam.Item{exam.Ambulation, exam.VoluntaryMotor, exam.Ataxia, exam.PawPlacement, exam.Hopping}
)

const (
	midline = exam.Midline
	fever   = exam.FeverCelsius
	noUrine = 12.0 // hours; common practice
	early   = 14.0 // days after surgery or onset in which a drop is an emergency; common practice
)

// always keeps «cannot rule out» for every abnormal, untested cell of a rule.
func always(*scene, exam.Key) bool { return true }

var rules = []Rule{
	{Key: "deep-pain-lost", Number: 1, Name: "Deep pain lost", Items: []exam.Item{exam.DeepPain},
		Why:    "Loss of deep pain is the strongest sign of a poor outlook, and time counts: of dogs without it for more than 24 hours, 0 of 5 recovered in one series.",
		Source: "Laitinen2005", find: deepPainLost,
		open: func(c *scene, k exam.Key) bool {
			if g, ok := c.grade(exam.VoluntaryMotor, k.Site); ok && g > 0 {
				return false
			}
			return !exam.Feeling(c.today, k.Site).Known
		}},
	{Key: "trunci-rises", Number: 2, Name: "Cutaneous trunci border moves cranially", Items: []exam.Item{exam.CutaneousTrunci},
		Why:    "A border that moves towards the head in an animal without movement is the mark of myelomalacia.",
		Source: "Castel2017, Castel2019; margin of two vertebrae common practice; dogs only, unreliable in cats (BPI-page)", find: trunciRises,
		open: func(c *scene, _ exam.Key) bool { return c.p.Species == exam.Dog && c.plegic(pelvic...) }},
	{Key: "reflexes-lost", Number: 3, Name: "Reflexes or tone newly lost in a plegic animal", Items: arcItems,
		Why:    "Descending myelomalacia, or spinal shock in the first days; either way an emergency until proved.",
		Source: "Castel2019, Hodshon2018", find: reflexesLost,
		open: func(c *scene, k exam.Key) bool {
			g, _, _ := c.last(k.Item, k.Site)
			return c.plegic(pelvic...) && !k.Site.IsThoracic() && g < k.Item.Info().Normal
		}},
	{Key: "ascending", Number: 4, Name: "Ascending lesion", Items: append(slices.Clone(limbItems), exam.Horner),
		Why:    "New signs in the thoracic limbs or a new Horner's syndrome with a thoracolumbar lesion mean that it ascends.",
		Source: "Castel2019", find: ascending},
	{Key: "breathing", Number: 5, Name: "Breathing fails", Items: []exam.Item{exam.Breathing, exam.Gums, exam.Voice},
		Why:    "The breathing muscles may be failing.",
		Source: "Beal2003, Andruzzi2021, MV-TP2023", find: breathing,
		open: func(_ *scene, k exam.Key) bool { return k.Item == exam.Breathing }},
	{Key: "drop", Number: 6, Name: "Sudden drop in function", Items: []exam.Item{exam.Ambulation, exam.VoluntaryMotor, exam.DeepPain, exam.SuperficialPain, exam.Ataxia, exam.PawPlacement},
		Why:    "A second extrusion or bleeding can follow within days; of 100 operated dogs 5.8 worsen in days 1 to 10.",
		Source: "Hettlich2012, Forterre2010; first 14 days common practice", find: drop,
		open: func(_ *scene, k exam.Key) bool {
			return k.Item == exam.Ambulation || k.Item == exam.VoluntaryMotor
		}},
	{Key: "spinal-pain", Number: 7, Name: "Severe or new spinal pain", Items: []exam.Item{exam.SpinalPain},
		Why:    "Disc extrusion, its recurrence, or an infected disc space.",
		Source: "Aikawa2012, Canal2016", find: spinalPain, open: always},
	{Key: "relapse", Number: 8, Name: "Worse after first gains", Items: gaitItems,
		Why:    "An animal that improves and then worsens may have an infected disc space; over 20 kg above all.",
		Source: "Canal2016", find: relapse},
	{Key: "urine-held", Number: 9, Name: "Urine is held", Items: []exam.Item{exam.VoluntaryUrination, exam.BladderFill, exam.BladderOutflow}, Measure: []exam.Measure{exam.HoursSinceUrination, exam.PainAtRest},
		Why:    "An overstretched bladder loses its strength for good; emptying by hand takes out only about half.",
		Source: "Retention-book, Carwardine2016; 12 hours common practice", find: urineHeld,
		open: func(_ *scene, k exam.Key) bool { return k.Item != exam.BladderOutflow }},
	{Key: "incontinence", Number: 10, Name: "Newly incontinent", Items: []exam.Item{exam.FaecalContinence, exam.BladderOutflow, exam.UrineLeak},
		Why:    "The sacral segments or the cauda equina may be involved; continence returns less often there.",
		Source: "Shaw2017", find: incontinence,
		open: func(_ *scene, k exam.Key) bool { return k.Item != exam.BladderOutflow }},
	{Key: "urine-infected", Number: 11, Name: "Urine bloody, foul or cloudy", Items: []exam.Item{exam.UrineLook}, Measure: []exam.Measure{exam.Temperature},
		Why:    "Urinary infection is common after spinal surgery and mostly silent.",
		Source: "Olby2010", find: urineInfected, open: always},
	{Key: "fever", Number: 12, Name: "Fever, dullness or no appetite", Items: []exam.Item{exam.Appetite, exam.Mentation}, Measure: []exam.Measure{exam.Temperature},
		Why:    "Infection of wound, urine, lung or disc space; myelomalacia makes ill too.",
		Source: "Castel2017; 39.5 °C common practice", find: feverish, open: always},
	{Key: "aspiration", Number: 13, Name: "Cough or trouble swallowing", Items: []exam.Item{exam.Cough, exam.Regurgitation, exam.Gag, exam.Swallowing, exam.Breathing},
		Why:    "Aspiration pneumonia; fewer than half of such dogs have fever or fast breathing, so their absence does not reassure.",
		Source: "Kogan2008a, Kogan2008b", find: aspiration,
		open: func(_ *scene, k exam.Key) bool { return k.Item != exam.Breathing }},
	{Key: "skin", Number: 14, Name: "Skin breaks down", Items: []exam.Item{exam.Skin},
		Why:    "Lying, urine and lost feeling make pressure sores.",
		Source: "Ulcer-page, Gouveia2023", find: skin, open: always},
	{Key: "wound", Number: 15, Name: "Wound swollen or open", Items: []exam.Item{exam.Wound},
		Why:    "Bleeding under the skin, an opening wound or infection.",
		Source: "Wound64", find: wound, open: always},
	{Key: "brain", Number: 16, Name: "Signs of the brain", Items: []exam.Item{exam.Mentation, exam.Circling, exam.HeadTilt, exam.Nystagmus, exam.SeizureSinceLast}, Measure: []exam.Measure{exam.ScaleMGCS},
		Why:    "A change inside the skull; the coma scale tells of survival.",
		Source: "Platt2001", find: brain,
		open: func(_ *scene, k exam.Key) bool { return k.Item != exam.SeizureSinceLast }},
	{Key: "self-trauma", Number: 17, Name: "Injures itself", Items: []exam.Item{exam.SelfTrauma},
		Why:    "A numb or tingling limb is chewed until it is lost.",
		Source: "Lameness-book", find: selfTrauma, open: always},
	{Key: "no-pulse", Number: 18, Name: "Cold limbs without a pulse", Items: []exam.Item{exam.FemoralPulse, exam.PawWarmth, exam.LimbPain, exam.Gums},
		Why:    "A clot in the aorta looks like a spinal disease, in cats above all.",
		Source: "from memory", find: noPulse,
		open: func(_ *scene, k exam.Key) bool {
			return k.Item == exam.FemoralPulse || k.Item == exam.PawWarmth && k.Site.IsPelvic()
		}},
	{Key: "not-as-expected", Number: 19, Name: "The course does not fit the diagnosis", Items: []exam.Item{exam.VoluntaryMotor, exam.Ambulation, exam.SpinalPain, exam.Ataxia},
		Why:    "The course contradicts what the diagnosis on file lets expect.",
		Source: "DeRisio2015, DM-book", find: notAsExpected},
	{Key: "no-return", Number: 20, Name: "Deep pain has not returned in two weeks", Items: []exam.Item{exam.DeepPain},
		Why:    "Of dogs looked at again at two weeks, 8 of 12 with and 1 of 10 without returned deep pain recovered: time for a planned review.",
		Source: "Laitinen2005", find: noReturn},
	{Key: "after-neck", Number: 21, Name: "Thoracic limbs worse after a neck procedure", Items: limbItems,
		Why:    "Early worsening after surgery or handling of the neck is frequent and must be judged by the surgeon.",
		Source: "CervDorsal100", find: afterNeck},
	{Key: "overflow", Number: 22, Name: "The bladder overflows", Items: []exam.Item{exam.BladderFill, exam.UrineLeak, exam.BladderOutflow},
		Why:    "A large bladder that leaks is full, not empty: it overflows and is being stretched.",
		Source: "Retention-book; rule common practice", find: overflow},
}

func deepPainLost(c *scene) (out []hit) {
	for _, s := range exam.DeepPain.Info().Sites {
		today := exam.Feeling(c.today, s)
		if !today.Known || today.Grade > 0 {
			continue
		}
		before, from := exam.Felt{}, -1
		for k := range c.before() {
			if f := exam.Feeling(c.earlier[k], s); f.Known {
				before, from = f, k
				break
			}
		}
		if before.Known && before.Grade == 0 {
			continue
		}
		was := "not known before"
		if before.Known {
			was = "before: " + exam.DeepPain.GradeWord(before.Grade)
			if before.Implied {
				was += ", implied"
			}
		}
		out = append(out, hit{fmt.Sprintf("deep-pain at %s: absent (%s)", s, was), from, Now})
	}
	return out
}

// border returns how far cranial the trunci border lies, as a vertebra's index: L6 where it is normal, T2
// where the reflex is absent throughout.
func border(v exam.Visit, side exam.Site, s exam.Species) (index int, word string, ok bool) {
	f, found := v.Find(exam.Key{Item: exam.CutaneousTrunci, Site: side})
	if !found || !f.Result.Tested() {
		return 0, "", false
	}
	g, _ := f.Result.Grade()
	at := exam.NewVertebra(exam.RegionL, 6)
	switch {
	case g == 0:
		return exam.VertebraIndex(s, exam.NewVertebra(exam.RegionT, 2)), "absent throughout", true
	case f.Normal():
		return exam.VertebraIndex(s, at), "normal", true
	case f.Level == 0:
		return 0, "", false
	}
	return exam.VertebraIndex(s, f.Level), f.Level.String(), true
}

func trunciRises(c *scene) (out []hit) {
	if c.p.Species != exam.Dog || !c.plegic(pelvic...) {
		return nil
	}
	fell := len(reflexesLost(c)) > 0
	for _, side := range sides {
		to, word, ok := border(c.today, side, c.p.Species)
		if !ok {
			continue
		}
		for k := range c.before() {
			from, was, ok := border(c.earlier[k], side, c.p.Species)
			if !ok {
				continue
			}
			if up := from - to; up >= 2 || up >= 1 && fell {
				out = append(out, hit{fmt.Sprintf("cutaneous-trunci at %s: border %s (before: %s)", side, word, was), k, Now})
			}
			break
		}
	}
	return out
}

func reflexesLost(c *scene) (out []hit) {
	if !c.plegic(pelvic...) {
		return nil
	}
	for _, i := range arcItems {
		for _, s := range i.Info().Sites {
			if s.IsThoracic() || s.IsPelvic() && !c.plegic(s) {
				continue
			}
			g, ok := c.grade(i, s)
			if !ok || g >= i.Info().Normal {
				continue
			}
			if b, k, ok := c.last(i, s); ok && b > g {
				out = append(out, hit{c.say(i, s), k, Now})
			}
		}
	}
	return out
}

// thoracolumbar reports whether the file puts the problem between T3 and L3.
func (c *scene) thoracolumbar() bool {
	return c.level(func(v exam.Vertebra) bool {
		return v >= exam.NewVertebra(exam.RegionT, 3) && v <= exam.NewVertebra(exam.RegionL, 3)
	})
}

func ascending(c *scene) (out []hit) {
	if !c.thoracolumbar() {
		return nil
	}
	for _, i := range limbItems {
		for _, s := range thoracic {
			g, ok := c.grade(i, s)
			if !ok || !abnormal(i, s, g) {
				continue
			}
			if b, k, known := c.last(i, s); known && !abnormal(i, s, b) {
				out = append(out, hit{c.say(i, s), k, Now})
			}
		}
	}
	for _, s := range sides {
		if g, ok := c.grade(exam.Horner, s); ok && g > 0 {
			if k, yes := c.isNew(exam.Horner, s); yes {
				out = append(out, hit{c.say(exam.Horner, s), k, Now})
			}
		}
	}
	return out
}

// weakInFront reports whether a thoracic limb is weak or the file says neck: cervical or diffuse weakness.
func (c *scene) weakInFront() bool {
	for _, s := range thoracic {
		if g, ok := c.known(exam.VoluntaryMotor, s); ok && g < 4 {
			return true
		}
	}
	return c.level(func(v exam.Vertebra) bool { return v.Region() == exam.RegionC })
}

func breathing(c *scene) (out []hit) {
	fell := func(i exam.Item) (int, bool) { // lower than last known, or new where nothing is known
		g, _ := c.grade(i, midline)
		b, k, ok := c.last(i, midline)
		return k, !ok || b > g
	}
	if g, ok := c.grade(exam.Breathing, midline); ok && g < 2 {
		if k, yes := fell(exam.Breathing); yes && (g == 0 || c.weakInFront()) {
			out = append(out, hit{c.say(exam.Breathing, midline), k, Now})
		}
	}
	if g, ok := c.grade(exam.Gums, midline); ok && g == 0 {
		_, k, _ := c.last(exam.Gums, midline)
		out = append(out, hit{c.say(exam.Gums, midline), k, Now})
	}
	if g, ok := c.grade(exam.Voice, midline); ok && g < 2 && c.weakInFront() {
		if k, yes := fell(exam.Voice); yes && c.latest() >= 0 {
			out = append(out, hit{c.say(exam.Voice, midline), k, Now})
		}
	}
	return out
}

// stage of the open-field score: five stages of three levels.
func stage(level float64) int { return int(level) / 3 }

func drop(c *scene) (out []hit) {
	urgency := Today
	if d, ok := c.daysSince(); ok && d <= early {
		urgency = Now
	}
	if g, ok := c.grade(exam.Ambulation, midline); ok {
		if b, k, ok := c.last(exam.Ambulation, midline); ok && g < b {
			out = append(out, hit{c.say(exam.Ambulation, midline), k, urgency})
		}
	}
	for _, s := range limbs {
		g, ok := c.grade(exam.VoluntaryMotor, s)
		b, k, ok2 := c.last(exam.VoluntaryMotor, s)
		if ok && ok2 && (b-g >= 2 || g == 0 && b > 0) {
			out = append(out, hit{c.say(exam.VoluntaryMotor, s), k, urgency})
		}
	}
	// a class of the Frankel ladder or a stage of the open-field score, against the last visit that can be scored
	for _, sc := range []scale.Scale{scale.Frankel, scale.OpenField} {
		now := c.span(sc)
		if !now.ok {
			continue
		}
		high := now.high
		for k := range c.before() {
			then := c.series.span(sc, k)
			if !then.ok {
				continue
			}
			low := then.low
			fell := high < low && high <= 4 // gait normal with pain (5) against without (6) is rule 7's
			if sc == scale.OpenField {
				fell = stage(high) < stage(low)
			}
			if fell && c.brief {
				out = append(out, hit{"", k, urgency})
			} else if fell {
				now, _ := scale.Compute(sc, c.today, exam.NoSite)
				then, _ := scale.Compute(sc, c.earlier[k], exam.NoSite)
				out = append(out, hit{fmt.Sprintf("%s: %s (before: %s)", sc.Info().Name, now, then), k, urgency})
			}
			break
		}
	}
	return out
}

func spinalPain(c *scene) (out []hit) {
	for _, s := range exam.SpinalPain.Info().Sites {
		g, ok := c.grade(exam.SpinalPain, s)
		if !ok || g == 0 {
			continue
		}
		b, k, known := c.last(exam.SpinalPain, s)
		_, isNew := c.isNew(exam.SpinalPain, s)
		switch {
		case g == 3, known && g-b >= 2, s == exam.Cervical && isNew:
			out = append(out, hit{c.say(exam.SpinalPain, s), k, Today})
		}
	}
	return out
}

// gait is the health of a visit's gait and posture, cell by cell in percent, -1 where untested.
type gait [17]int8

func gaitOf(v exam.Visit) (g gait) {
	for i := range g {
		g[i] = -1
	}
	for i := range v.Findings {
		f := &v.Findings[i]
		k := -1
		switch f.Item {
		case exam.Ambulation:
			k = 16
		case exam.VoluntaryMotor, exam.Ataxia, exam.PawPlacement, exam.Hopping:
			if f.Site.IsLimb() {
				k = 4*slices.Index(gaitItems[1:], f.Item) + int(f.Site-exam.ThoracicLeft)
			}
		}
		if k < 0 {
			continue
		}
		if h, ok := f.Health(); ok {
			g[k] = int8(100 * h)
		}
	}
	return g
}

// net counts cells that are better in b than in a, less those that are worse.
func (a gait) net(b gait) (net, worse int) {
	for i := range a {
		switch {
		case a[i] < 0 || b[i] < 0:
		case b[i] > a[i]:
			net++
		case b[i] < a[i]:
			net--
			worse++
		}
	}
	return net, worse
}

// relapse needs a gain and a loss of at least two cells net, so that one wavering cell is no relapse.
// An animal that has relapsed and is not worse than at its last visit has raised its flag before.
func relapse(c *scene) []hit {
	today := gaitOf(c.today)
	latest := c.latest()
	gaits := make([]gait, len(c.earlier))
	for k, v := range c.earlier {
		gaits[k] = gaitOf(v)
	}
	for peak := range c.before() {
		net, worse := gaits[peak].net(today)
		if net > -2 {
			continue
		}
		if since, _ := gaits[latest].net(today); since >= 0 {
			return nil
		}
		for first := peak - 1; first >= 0; first-- {
			if gain, _ := gaits[first].net(gaits[peak]); gain < 2 {
				continue
			}
			seen := fmt.Sprintf("%d findings of gait and posture worse than on %s, after gains since %s", worse,
				exam.DayOf(c.earlier[peak].Examined), exam.DayOf(c.earlier[first].Examined))
			if kg, ok := c.p.WeightAt(c.today.Examined); ok && kg > 20 {
				seen += fmt.Sprintf("; %g kg", kg)
			}
			return []hit{{seen, peak, Today}}
		}
	}
	return nil
}

func urineHeld(c *scene) (out []hit) {
	urgency := Today
	fill, hasFill := c.grade(exam.BladderFill, midline)
	hours, hasHours := c.today.Measured(exam.HoursSinceUrination, exam.NoSite)
	pain, hasPain := c.today.Measured(exam.PainAtRest, exam.NoSite)
	if hasFill && fill == 0 && (hasPain && pain.Value >= 4 || hasHours && hours.Value >= noUrine) {
		urgency = Now // tense and painful, or tense and not emptied for 12 hours
	}
	if g, ok := c.grade(exam.VoluntaryUrination, midline); ok {
		if b, k, ok := c.last(exam.VoluntaryUrination, midline); ok && g < b {
			out = append(out, hit{c.say(exam.VoluntaryUrination, midline), k, urgency})
		}
	}
	flow, hasFlow := c.grade(exam.BladderOutflow, midline)
	if hasFill && (fill == 0 || fill == 1 && hasFlow && flow == 1) {
		_, k, _ := c.last(exam.BladderFill, midline)
		seen := c.say(exam.BladderFill, midline)
		if hasFlow {
			seen += ", " + exam.BladderOutflow.GradeWord(flow)
		}
		out = append(out, hit{seen, k, urgency})
	}
	if hasHours && hours.Value >= noUrine {
		out = append(out, hit{fmt.Sprintf("no urine for %g h", hours.Value), -1, urgency})
	}
	return out
}

func incontinence(c *scene) (out []hit) {
	if g, ok := c.grade(exam.FaecalContinence, midline); ok {
		if b, k, ok := c.last(exam.FaecalContinence, midline); ok && g < b {
			out = append(out, hit{c.say(exam.FaecalContinence, midline), k, Today})
		}
	}
	if g, ok := c.grade(exam.BladderOutflow, midline); ok && g == 0 {
		if b, k, ok := c.last(exam.BladderOutflow, midline); ok && b != 0 {
			out = append(out, hit{c.say(exam.BladderOutflow, midline), k, Today})
		}
	}
	if g, ok := c.grade(exam.UrineLeak, midline); ok && g > 0 {
		if b, k, ok := c.last(exam.UrineLeak, midline); ok && g > b {
			out = append(out, hit{c.say(exam.UrineLeak, midline), k, Today})
		}
	}
	return out
}

func (c *scene) temperature() (float64, bool) {
	m, ok := c.today.Measured(exam.Temperature, exam.NoSite)
	return m.Value, ok
}

func urineInfected(c *scene) (out []hit) {
	if g, ok := c.grade(exam.UrineLook, midline); ok && g < 2 {
		urgency := Soon
		seen := c.say(exam.UrineLook, midline)
		if t, ok := c.temperature(); ok && t >= fever {
			urgency = Today
			seen += fmt.Sprintf(", with %.1f °C", t)
		}
		_, k, _ := c.last(exam.UrineLook, midline)
		out = append(out, hit{seen, k, urgency})
	}
	return out
}

func feverish(c *scene) (out []hit) {
	if t, ok := c.temperature(); ok && t >= fever {
		out = append(out, hit{fmt.Sprintf("temperature %.1f °C", t), -1, Today})
	}
	if g, ok := c.grade(exam.Appetite, midline); ok && g == 0 {
		_, k, _ := c.last(exam.Appetite, midline)
		out = append(out, hit{c.say(exam.Appetite, midline), k, Today})
	}
	if g, ok := c.grade(exam.Mentation, midline); ok && g < 3 {
		_, k, _ := c.last(exam.Mentation, midline)
		out = append(out, hit{c.say(exam.Mentation, midline), k, Today})
	}
	return out
}

func aspiration(c *scene) (out []hit) {
	urgency := Today
	breath, hasBreath := c.grade(exam.Breathing, midline)
	if hasBreath && breath == 0 {
		urgency = Now
	}
	add := func(i exam.Item) {
		_, k, _ := c.last(i, midline)
		out = append(out, hit{c.say(i, midline), k, urgency})
	}
	for _, i := range []exam.Item{exam.Cough, exam.Regurgitation} {
		if g, ok := c.grade(i, midline); ok && g > 0 {
			add(i)
		}
	}
	for _, i := range []exam.Item{exam.Gag, exam.Swallowing} {
		if g, ok := c.grade(i, midline); ok && g < 2 {
			add(i)
		}
	}
	if hasBreath && breath < 2 {
		add(exam.Breathing)
	}
	return out
}

func skin(c *scene) (out []hit) {
	for _, s := range exam.Skin.Info().Sites {
		if g, ok := c.grade(exam.Skin, s); ok && g < 2 {
			urgency := Today
			if g == 1 {
				urgency = Soon
			}
			_, k, _ := c.last(exam.Skin, s)
			out = append(out, hit{c.say(exam.Skin, s), k, urgency})
		}
	}
	return out
}

func wound(c *scene) (out []hit) {
	if g, ok := c.grade(exam.Wound, midline); ok && g < 2 {
		_, k, _ := c.last(exam.Wound, midline)
		out = append(out, hit{c.say(exam.Wound, midline), k, Today})
	}
	return out
}

func brain(c *scene) (out []hit) {
	if g, ok := c.grade(exam.Mentation, midline); ok {
		if b, k, ok := c.last(exam.Mentation, midline); ok && g < b {
			out = append(out, hit{c.say(exam.Mentation, midline), k, Now})
		}
	}
	for _, i := range []exam.Item{exam.Circling, exam.HeadTilt} {
		for _, s := range sides {
			if g, ok := c.grade(i, s); ok && g > 0 {
				if k, yes := c.isNew(i, s); yes {
					out = append(out, hit{c.say(i, s), k, Now})
				}
			}
		}
	}
	if g, ok := c.grade(exam.Nystagmus, midline); ok && g == 2 && c.latest() >= 0 {
		if b, k, ok := c.last(exam.Nystagmus, midline); !ok || b < 2 {
			out = append(out, hit{c.say(exam.Nystagmus, midline), k, Now})
		}
	}
	if g, ok := c.grade(exam.SeizureSinceLast, midline); ok && g > 0 {
		out = append(out, hit{"a seizure since last visit", c.latest(), Now})
	}
	if m, ok := c.today.Measured(exam.ScaleMGCS, exam.NoSite); ok {
		for k := range c.before() {
			if b, ok := c.earlier[k].Measured(exam.ScaleMGCS, exam.NoSite); ok {
				if m.Value < b.Value {
					out = append(out, hit{fmt.Sprintf("coma scale %g (before: %g)", m.Value, b.Value), k, Now})
				}
				break
			}
		}
	}
	return out
}

func selfTrauma(c *scene) (out []hit) {
	if g, ok := c.grade(exam.SelfTrauma, midline); ok && g > 0 {
		_, k, _ := c.last(exam.SelfTrauma, midline)
		out = append(out, hit{c.say(exam.SelfTrauma, midline), k, Today})
	}
	return out
}

func noPulse(c *scene) (out []hit) {
	weak := false
	for _, s := range sides {
		if g, ok := c.grade(exam.FemoralPulse, s); ok && g < 2 {
			weak = true
			if g == 0 {
				_, k, _ := c.last(exam.FemoralPulse, s)
				out = append(out, hit{c.say(exam.FemoralPulse, s), k, Now})
			}
		}
	}
	for _, s := range pelvic {
		if g, ok := c.grade(exam.PawWarmth, s); ok && g == 0 {
			pain, _ := c.grade(exam.LimbPain, s)
			gums, hasGums := c.grade(exam.Gums, midline)
			if weak || pain > 0 || hasGums && gums < 2 {
				_, k, _ := c.last(exam.PawWarmth, s)
				out = append(out, hit{c.say(exam.PawWarmth, s), k, Now})
			}
		}
	}
	return out
}

// labelled reports whether the diagnosis on file holds one of the words.
func (c *scene) labelled(words ...string) bool {
	pr, ok := c.problem()
	name := strings.ToLower(pr.Diagnosis)
	return ok && slices.ContainsFunc(words, func(w string) bool { return strings.Contains(name, w) })
}

func notAsExpected(c *scene) (out []hit) {
	pr, ok := c.problem()
	if !ok || c.latest() < 0 {
		return nil
	}
	if c.labelled("fibrocartilag", "fcem", "infarct", "embolic myelopathy") {
		if d, ok := pr.Onset.DaysBefore(c.today.Examined); ok && d > 2 {
			for _, i := range []exam.Item{exam.VoluntaryMotor, exam.Ambulation} {
				for _, s := range i.Info().Sites {
					g, ok := c.grade(i, s)
					b, k, ok2 := c.last(i, s)
					if ok && ok2 && g < b {
						out = append(out, hit{c.say(i, s) + ", more than 48 h after the onset of an infarct", k, Today})
					}
				}
			}
		}
	}
	if c.labelled("degenerative myelopathy") {
		for _, s := range exam.SpinalPain.Info().Sites {
			if g, ok := c.grade(exam.SpinalPain, s); ok && g > 0 {
				_, k, _ := c.last(exam.SpinalPain, s)
				out = append(out, hit{c.say(exam.SpinalPain, s) + ", in a disease that does not hurt", k, Today})
			}
		}
		for _, s := range limbs {
			g, ok := c.grade(exam.VoluntaryMotor, s)
			b, k, ok2 := c.last(exam.VoluntaryMotor, s)
			if ok && ok2 && b-g >= 2 && c.today.Examined.Sub(c.earlier[k].Examined).Hours() <= 14*24 {
				out = append(out, hit{c.say(exam.VoluntaryMotor, s) + ", a step in a disease that creeps", k, Today})
			}
		}
	}
	if c.labelled("plexus") {
		first := c.earlier[0]
		for _, s := range limbs {
			for _, i := range []exam.Item{exam.VoluntaryMotor, exam.Ataxia} {
				g, ok := c.grade(i, s)
				b, ok2 := first.Grade(i, s)
				l, k, ok3 := c.last(i, s)
				if ok && abnormal(i, s, g) && ok2 && !abnormal(i, s, b) && ok3 && !abnormal(i, s, l) {
					out = append(out, hit{c.say(i, s) + ", another limb than the injured one", k, Today})
				}
			}
		}
	}
	return out
}

// noReturn: two weeks after the onset, or after the first exam that found it absent, deep pain is absent in both
// pelvic limbs and has never been felt since.
func noReturn(c *scene) []hit {
	absent := func(v exam.Visit) bool {
		for _, s := range pelvic {
			if f := exam.Feeling(v, s); !f.Known || f.Grade > 0 {
				return false
			}
		}
		return true
	}
	if !absent(c.today) {
		return nil
	}
	from := -1
	for k := range c.before() {
		felt := false
		for _, s := range append(slices.Clone(pelvic), exam.TailBase) {
			f := exam.Feeling(c.earlier[k], s)
			felt = felt || f.Known && f.Grade > 0
		}
		if felt {
			break
		}
		if absent(c.earlier[k]) {
			from = k
		}
	}
	if f := exam.Feeling(c.today, exam.TailBase); f.Known && f.Grade > 0 {
		return nil
	}
	days, ok := c.daysSince()
	if from >= 0 {
		days, ok = max(days, c.today.Examined.Sub(c.earlier[from].Examined).Hours()/24), true
	}
	if !ok || days < 13.5 || from < 0 {
		return nil
	}
	return []hit{{fmt.Sprintf("deep pain absent in both pelvic limbs since %s", exam.DayOf(c.earlier[from].Examined)), from, Soon}}
}

func afterNeck(c *scene) (out []hit) {
	operated := false
	if pr, ok := c.problem(); ok && c.level(func(v exam.Vertebra) bool { return v.Region() == exam.RegionC }) {
		d, ok := pr.Surgery.DaysBefore(c.today.Examined)
		operated = ok && d > -1 && d <= early
	}
	handled := false
	if k := c.latest(); k >= 0 {
		for _, t := range c.earlier[k].Treatments {
			handled = handled || t.Site == exam.Cervical.String() && slices.Contains([]string{"joint-mobilisation", "stretching", "massage", "passive-movement"}, t.Kind)
		}
	}
	if !operated && !handled {
		return nil
	}
	for _, i := range limbItems {
		for _, s := range thoracic {
			if _, ok := c.grade(i, s); !ok {
				continue
			}
			_, k, known := c.last(i, s)
			if !known {
				continue
			}
			g, _ := c.grade(i, s)
			b, _, _ := c.last(i, s)
			was := exam.Finding{Item: i, Site: s, Result: exam.Graded(b)}
			is := exam.Finding{Item: i, Site: s, Result: exam.Graded(g)}
			if exam.Change(was, is) == exam.Worse {
				out = append(out, hit{c.say(i, s), k, Now})
			}
		}
	}
	return out
}

func overflow(c *scene) []hit {
	fill, ok := c.grade(exam.BladderFill, midline)
	if !ok || fill > 1 {
		return nil
	}
	leak, okLeak := c.grade(exam.UrineLeak, midline)
	flow, okFlow := c.grade(exam.BladderOutflow, midline)
	if !(okLeak && leak > 0) && !(okFlow && flow == 0) {
		return nil
	}
	_, k, _ := c.last(exam.BladderFill, midline)
	return []hit{{"bladder " + exam.BladderFill.GradeWord(fill) + " and leaking", k, Today}}
}
