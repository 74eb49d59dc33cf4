package welfare

import (
	"math"
	"strconv"
	"strings"

	"penwright/protocol"
)

// unit is what a spelling stands for: a factor to the base unit of its dimension.
type unit struct {
	of     string // mass (kg), volume (L), area (m2), time (d)
	factor float64
}

// units are the spellings of UCUM that amounts of the protocol may have here, and the
// trade's l for the litre.
var units = map[string]unit{
	"kg": {"mass", 1}, "g": {"mass", 1e-3}, "mg": {"mass", 1e-6}, "t": {"mass", 1000}, "[lb_av]": {"mass", 0.45359237}, "[oz_av]": {"mass", 0.028349523125},
	"L": {"volume", 1}, "l": {"volume", 1}, "dL": {"volume", 0.1}, "dl": {"volume", 0.1}, "cL": {"volume", 1e-2}, "cl": {"volume", 1e-2},
	"mL": {"volume", 1e-3}, "ml": {"volume", 1e-3}, "uL": {"volume", 1e-6}, "ul": {"volume", 1e-6}, "µL": {"volume", 1e-6}, "µl": {"volume", 1e-6},
	"m3": {"volume", 1000}, "dm3": {"volume", 1}, "cm3": {"volume", 1e-3}, "mm3": {"volume", 1e-6},
	"m2": {"area", 1}, "dm2": {"area", 1e-2}, "cm2": {"area", 1e-4}, "mm2": {"area", 1e-6}, "m²": {"area", 1}, "cm²": {"area", 1e-4}, "[sft_i]": {"area", 0.09290304}, "[ft_i]2": {"area", 0.09290304}, "har": {"area", 1e4}, "ar": {"area", 100},
	"s": {"time", 1.0 / 86400}, "min": {"time", 1.0 / 1440}, "h": {"time", 1.0 / 24}, "d": {"time", 1}, "wk": {"time", 7}, "mo": {"time", 30.4375}, "a": {"time", 365.25},
}

// in converts an amount to the base unit of a dimension: kg, L, m2, d. Ok is false when
// the amount is absent, has a unit of another dimension or one that is not known, or
// cannot be told from nothing or from infinity.
func in(q *protocol.Quantity, dimension string) (from, to float64, ok bool) {
	if q == nil {
		return 0, 0, false
	}
	u, known := units[q.Unit]
	if !known || u.of != dimension {
		return 0, 0, false
	}
	return bounded(q.From*u.factor, q.To*u.factor)
}

// perMass converts a volume per body mass to mL/kg.
func perMass(q *protocol.Quantity) (from, to float64, ok bool) {
	if q == nil {
		return 0, 0, false
	}
	above, below, two := strings.Cut(q.Unit, "/")
	v, okV := units[above]
	m, okM := units[below]
	if !two || !okV || !okM || v.of != "volume" || m.of != "mass" {
		return 0, 0, false
	}
	f := 1000 * v.factor / m.factor
	return bounded(q.From*f, q.To*f)
}

// celsius converts a temperature.
func celsius(q *protocol.Quantity) (from, to float64, ok bool) {
	if q == nil {
		return 0, 0, false
	}
	f := func(x float64) float64 { return x }
	switch q.Unit {
	case "Cel", "°C":
	case "K":
		f = func(x float64) float64 { return x - 273.15 }
	case "[degF]":
		f = func(x float64) float64 { return (x - 32) / 1.8 }
	default:
		return 0, 0, false
	}
	from, to = f(q.From), f(q.To)
	return from, to, math.Abs(from) < 1e6 && math.Abs(to) < 1e6
}

// bounded refuses what no animal or pen can be, so that later arithmetic stays finite.
func bounded(from, to float64) (float64, float64, bool) {
	return from, to, from >= 1e-15 && to <= 1e15
}

// shown is a unit after its number, with a thin space that does not break.
func shown(u string) string {
	switch u {
	case "", "1":
		return ""
	case "m2":
		u = "m²"
	case "cm2":
		u = "cm²"
	case "1/m2":
		u = "per m²"
	case "1/L":
		u = "per L"
	case "kg/m2":
		u = "kg/m²"
	case "/d":
		u = "a day"
	case "Cel", "[degF]":
		u = map[string]string{"Cel": "°C", "[degF]": "°F"}[u]
	case "uS/cm":
		u = "µS/cm"
	case "a":
		u = "yr"
	case "uL":
		u = "µL"
	case "[lb_av]":
		u = "lb"
	case "[oz_av]":
		u = "oz"
	}
	return thin + u
}

const thin = "\u202f"

// digits prints a number as it was given: without digits it does not need.
func digits(x float64) string {
	s := strconv.FormatFloat(x, 'f', -1, 64)
	if len(s) > 12 {
		s = strconv.FormatFloat(x, 'g', 6, 64)
	}
	return strings.Replace(s, "-", "−", 1)
}

// about prints a computed number to three significant digits.
func about(x float64) string {
	y, err := strconv.ParseFloat(strconv.FormatFloat(x, 'g', 3, 64), 64)
	if err != nil {
		y = x
	}
	return digits(y)
}

// amount prints a quantity as the protocol gives it.
func amount(q *protocol.Quantity) string {
	if q == nil {
		return ""
	}
	if q.From == q.To {
		return digits(q.From) + shown(q.Unit)
	}
	return digits(q.From) + " to " + digits(q.To) + shown(q.Unit)
}
