package exam

import (
	"math"
	"testing"
)

// The figures are those of NIST Handbook 44, appendix C: 1 lb = 453.592 37 g, 1 in = 2.54 cm.
func TestUnitsAreConverted(t *testing.T) {
	u := Units{Pounds: true, Inches: true}
	for _, tt := range []struct {
		m           Measure
		kept, shown float64
		unit        string
	}{
		{Weight, 4.5359237, 10, "lb"}, {ThighGirth, 25.4, 10, "in"}, {CrusGirth, 2.54, 1, "in"},
		{Temperature, 38.5, 38.5, "°C"}, {WalkDistance, 10, 10, "m"}, {BodyCondition, 5, 5, "1"},
	} {
		if got := u.Shown(tt.m, tt.kept); math.Abs(got-tt.shown) > 1e-12 || u.Unit(tt.m) != tt.unit {
			t.Errorf("%v: %g %s, want %g %s", tt.m, got, u.Unit(tt.m), tt.shown, tt.unit)
		}
		if got := u.Kept(tt.m, tt.shown); math.Abs(got-tt.kept) > 1e-12 {
			t.Errorf("%v: %g is kept as %g, want %g", tt.m, tt.shown, got, tt.kept)
		}
		if got := (Units{}).Shown(tt.m, tt.kept); got != tt.kept || (Units{}).Unit(tt.m) != tt.m.Info().Unit {
			t.Errorf("%v: without a choice %g is shown as %g", tt.m, tt.kept, got)
		}
	}
}
