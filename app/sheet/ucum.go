package sheet

import "cordwalk.example/cordwalk/exam"

// ucumCodes are the units of the measures as codes of the Unified Code for Units of Measure
// (UCUM, case-sensitive form; ucum.org). A pure number has the code 1; counts and scores
// carry an annotation in braces, which UCUM treats as 1.
var ucumCodes = map[string]string{
	"kg": "kg", "°C": "Cel", "/min": "/min", "1": "{score}", "h": "h", "mL/kg": "mL/kg", "cm": "cm", "°": "deg", "%": "%", "s": "s", "m": "m",
}

// counts are the measures whose pure number is a count and no score.
var counts = map[exam.Measure]string{
	exam.StepsScored: "{steps}", exam.StepsWeightBearing: "{steps}", exam.StepsWithMistake: "{steps}", exam.JointsMoving: "{joints}",
}

// UCUM returns the UCUM code of a measure's unit.
func UCUM(m exam.Measure) string {
	if c, ok := counts[m]; ok {
		return c
	}
	return ucumCodes[m.Info().Unit]
}
