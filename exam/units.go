package exam

// Units says which measures are shown and typed in other units than they are kept in: weights in
// pounds, girths in inches. Distances walked stay in metres. The zero value shows all as it is kept.
type Units struct{ Pounds, Inches bool }

// International yard and pound agreement of 1959: 1 lb is 0.45359237 kg, 1 in is 2.54 cm.
const (
	kilogramsInPound  = 0.45359237
	centimetresInInch = 2.54
)

// factor returns how much of the kept unit is in one of the shown, and the shown unit.
func (u Units) factor(m Measure) (float64, string) {
	switch unit := m.Info().Unit; {
	case unit == "kg" && u.Pounds:
		return kilogramsInPound, "lb"
	case unit == "cm" && u.Inches:
		return centimetresInInch, "in"
	default:
		return 1, unit
	}
}

// Unit returns the unit that a measure is shown in; "1" for a bare number.
func (u Units) Unit(m Measure) string { _, unit := u.factor(m); return unit }

// Shown converts a value as it is kept to the unit shown.
func (u Units) Shown(m Measure, kept float64) float64 { f, _ := u.factor(m); return kept / f }

// Kept converts a value in the unit shown to the one it is kept in.
func (u Units) Kept(m Measure, shown float64) float64 { f, _ := u.factor(m); return shown * f }
