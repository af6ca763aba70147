package outcome

import "math"

// Figure is one published result: how many walked, and when. Case series differ in definition and
// selection; none of them predicts one animal, and none shows that a treatment was the cause.
type Figure struct {
	Problem    Problem
	Grade      Grade
	Management string  // "surgery", "conservative", "surgery and rehabilitation" …
	Walked, Of int     // 0 of 0 where only a percentage is printed
	Percent    float64 // as printed, or Walked/Of; NaN where only times are printed
	ByDays     float64 // by when; 0 where not said
	MeanDays   float64 // to walking; 0 where not printed
	SDDays     float64
	MedianDays float64
	LowDays    float64 // printed range
	HighDays   float64
	Note       string
	Source     string // key of progression.md, section 8
}

func counted(p Problem, g Grade, management string, walked, of int, byDays float64, source string) Figure {
	return Figure{Problem: p, Grade: g, Management: management, Walked: walked, Of: of, Percent: 100 * float64(walked) / float64(of), ByDays: byDays, Source: source}
}

func (f Figure) median(days, low, high float64) Figure {
	f.MedianDays, f.LowDays, f.HighDays = days, low, high
	return f
}

func (f Figure) mean(days, sd float64) Figure { f.MeanDays, f.SDDays = days, sd; return f }

func (f Figure) note(s string) Figure { f.Note = s; return f }

func printed(p Problem, g Grade, management string, percent float64, source string) Figure {
	return Figure{Problem: p, Grade: g, Management: management, Percent: percent, Source: source}
}

// times is a series of animals of which only the time to walking is printed.
func times(p Problem, management string, of int, source string) Figure {
	return Figure{Problem: p, Grade: AnyNotWalking, Management: management, Of: of, Percent: math.NaN(), Source: source}
}

// figures is section 2 of progression.md, as far as it says who walked and when.
var figures = []Figure{
	// Langerhuus2017: means of case series; intervals not in the abstract.
	printed(ThoracolumbarDisc, Paretic, "surgery", 93, "Langerhuus2017, abstract"),
	printed(ThoracolumbarDisc, PlegicFelt, "surgery", 93, "Langerhuus2017, abstract"),
	printed(ThoracolumbarDisc, PlegicNotFelt, "surgery", 61, "Langerhuus2017, abstract"),
	printed(ThoracolumbarDisc, Paretic, "conservative", 79, "Langerhuus2017, abstract"),
	printed(ThoracolumbarDisc, PlegicFelt, "conservative", 62, "Langerhuus2017, abstract"),
	printed(ThoracolumbarDisc, PlegicNotFelt, "conservative", 10, "Langerhuus2017, abstract"),
	// Elliott2020: 252 operations in 220 dogs, number per grade not in the abstract; variant B 3, 2, 1, 0.
	printed(ThoracolumbarDisc, Paretic, "surgery", 100, "Elliott2020").mean(7.6, 4.4).note("variant B grade 3"),
	printed(ThoracolumbarDisc, PlegicFelt, "surgery", 96, "Elliott2020").mean(10.1, 2.5).note("variant B grade 2: surface and depth felt"),
	printed(ThoracolumbarDisc, PlegicFelt, "surgery", 86, "Elliott2020").mean(16.1, 2.9).note("variant B grade 1: depth felt only"),
	printed(ThoracolumbarDisc, PlegicNotFelt, "surgery", 64, "Elliott2020").mean(19.3, 2.6).note("variant B grade 0"),
	counted(ThoracolumbarDisc, NotWalkingFelt, "surgery", 107, 112, 90, "Davis2002, abstract").mean(12.9, 0).note("7.9 days with movement after surgery, 16.4 without"),
	counted(ThoracolumbarDisc, NotWalkingFelt, "conservative", 49, 51, 84, "Khan2024").median(11, 0, 0).note("under 15 kg, not brachycephalic"),
	counted(ThoracolumbarDisc, PlegicNotFelt, "conservative", 10, 21, 84, "Khan2024").median(25, 0, 0).note("under 15 kg, not brachycephalic"),
	counted(ThoracolumbarDisc, PlegicFelt, "rehabilitation without surgery", 7, 9, 84, "Sedlacek2022"),
	counted(ThoracolumbarDisc, PlegicNotFelt, "rehabilitation without surgery", 0, 4, 84, "Sedlacek2022"),
	counted(ThoracolumbarDisc, PlegicNotFelt, "surgery", 19, 46, 0, "Laitinen2005").note("0 of 5 where deep pain had been absent for more than a day"),
	counted(ThoracolumbarDisc, PlegicNotFelt, "surgery after more than 96 hours", 22, 36, 0, "Feb2023").median(30, 0, 0),
	counted(ThoracolumbarDisc, PlegicNotFelt, "surgery", 77, 127, 56, "Gomes2024, abstract").note("the printed groups do not add up: use with care"),
	counted(ThoracolumbarDisc, PlegicNotFelt, "surgery", 86, 178, 183, "Castel2019").note("86 of 133 without those lost to myelomalacia"),
	counted(ThoracolumbarDisc, PlegicFelt, "surgery and intensive rehabilitation", 167, 168, 90, "Martins2021").note("not controlled"),
	counted(ThoracolumbarDisc, PlegicNotFelt, "surgery and intensive rehabilitation", 55, 94, 90, "Martins2021").note("not controlled; spinal walking in 22 of 59"),

	counted(Infarct, PlegicFelt, "conservative", 9, 14, 0, "FCEM2024").note("infarct or non-compressive extrusion, 3 months and more"),
	counted(Infarct, PlegicNotFelt, "conservative", 1, 12, 0, "FCEM2024").note("infarct or non-compressive extrusion, 3 months and more"),
	printed(Infarct, NotWalkingFelt, "conservative", 88, "FEM2007, abstract").note("non-ambulatory dogs of 26"),
	times(Infarct, "conservative", 0, "Nakamoto2009, abstract").mean(10.2, 7.4).note("T3–L3; time to recovery"),
	times(Infarct, "conservative", 0, "Nakamoto2009, abstract").mean(15.8, 5.4).note("C1–C5; time to recovery"),
	times(Infarct, "conservative", 8, "Simpson2014, abstract").median(5.7, 2, 14).note("cats, cervical infarct; 3 of 8 relapsed"),

	times(Polyradiculoneuritis, "supportive", 14, "Hirschvogel2012").median(75.5, 5, 220),
	times(Polyradiculoneuritis, "immunoglobulin", 16, "Hirschvogel2012").median(27.5, 15, 127),

	counted(PlexusInjury, AnyNotWalking, "early rehabilitation with stimulation", 16, 22, 60, "Gouveia2024, abstract").note("cats, partial injury: 9 by day 15, 2 more by day 30, 5 more by day 60"),
}

// Published returns the published figures for a problem and presenting grade, those for a wider
// class of grades included.
func Published(p Problem, g Grade) []Figure {
	var out []Figure
	for _, f := range figures {
		if f.Problem == p && (f.Grade == g || f.Grade == AnyNotWalking && g != Walking || f.Grade == NotWalkingFelt && (g == Paretic || g == PlegicFelt)) {
			out = append(out, f)
		}
	}
	return out
}

// When places a day of walking against a figure.
type When uint8

// Earlier, within or later than most published cases: within the printed range, or within two standard
// deviations of the mean.
const (
	NotSaid When = iota
	Earlier
	WithinMost
	Later
)

// String returns the placing in words.
func (w When) String() string {
	return [...]string{"no published time to compare with", "earlier than most published cases", "within most published cases", "later than most published cases"}[w%4]
}

// Place says where a day of first walking lies.
func (f Figure) Place(days float64) When {
	low, high := f.LowDays, f.HighDays
	if high == 0 && f.SDDays > 0 {
		low, high = f.MeanDays-2*f.SDDays, f.MeanDays+2*f.SDDays
	}
	switch {
	case high == 0:
		return NotSaid
	case days < low:
		return Earlier
	case days > high:
		return Later
	}
	return WithinMost
}
