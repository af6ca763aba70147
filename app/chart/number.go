package chart

import (
	"math"
	"strconv"
	"strings"

	"cordwalk.example/cordwalk/assets/words"
)

// number writes a value as number does, with the decimal sign of the chart's language.
func (s Style) number(v float64) string { return words.Decimal(s.Lang, number(v)) }

// number writes a value with as many digits as it needs, three decimals at most.
func number(v float64) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return "–"
	}
	s := strconv.FormatFloat(v, 'f', 3, 64)
	s = strings.TrimRight(strings.TrimRight(s, "0"), ".")
	if s == "-0" {
		return "0"
	}
	return strings.Replace(s, "-", "−", 1)
}
