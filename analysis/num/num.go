// Package num turns numbers into text by the house rules of rounding: standard errors
// and deviations to two significant digits, means to the same place, percentages to
// one decimal, P to two decimals and to three below 0.10, a true minus sign, and one
// number of decimals down a column.
package num

import (
	"math"
	"strconv"
	"strings"
)

// Absent is printed for a number that is not there.
const Absent = "–"

// Fixed prints x with d decimals, a minus sign as U+2212, and never a negative zero.
func Fixed(x float64, d int) string {
	if math.IsNaN(x) {
		return Absent
	}
	if math.IsInf(x, 0) {
		if x > 0 {
			return "∞"
		}
		return "−∞"
	}
	s := strconv.FormatFloat(x, 'f', max(d, 0), 64)
	if strings.HasPrefix(s, "-") {
		if strings.Trim(s[1:], "0.") == "" {
			return s[1:]
		}
		return "−" + s[1:]
	}
	return s
}

// Signed is Fixed with a plus sign before positive numbers.
func Signed(x float64, d int) string {
	s := Fixed(x, d)
	if x > 0 && strings.Trim(s, "0.") != "" {
		return "+" + s
	}
	return s
}

// SEDecimals is the number of decimals that shows a standard error, SED or SD to two
// significant digits; the number it belongs to is printed with as many. It is never
// negative: whole units are kept.
func SEDecimals(se float64) int {
	se = math.Abs(se)
	if !(se > 0) || math.IsInf(se, 0) {
		return 0
	}
	return significant(se, 2)
}

// significant is the number of decimals that shows x to n significant digits, not
// negative.
func significant(x float64, n int) int {
	// The text in scientific notation has rounded already, so that 0.0996 counts as 0.10.
	s := strconv.FormatFloat(math.Abs(x), 'e', n-1, 64)
	e, err := strconv.Atoi(s[strings.IndexByte(s, 'e')+1:])
	if err != nil {
		return 0
	}
	return min(max(n-1-e, 0), 12)
}

// ColumnDecimals is the number of decimals that shows the smallest number of a column
// that is not zero to n significant digits, but at most limit decimals.
func ColumnDecimals(xs []float64, n, limit int) int {
	d := 0
	for _, x := range xs {
		if x != 0 && !math.IsNaN(x) && !math.IsInf(x, 0) {
			d = max(d, significant(x, n))
		}
	}
	return min(d, limit)
}

// P prints a probability: 0.34, 0.041, < 0.001.
func P(p float64) string {
	switch {
	case math.IsNaN(p):
		return Absent
	case p < 0.001:
		return "< 0.001"
	case p < 0.0995:
		return Fixed(p, 3)
	}
	return Fixed(p, 2)
}

// PStatement is P with its sign, for running text: "= 0.041" or "< 0.001".
func PStatement(p float64) string {
	s := P(p)
	if strings.HasPrefix(s, "<") || s == Absent {
		return s
	}
	return "= " + s
}

// DF prints degrees of freedom: whole ones whole, others with one decimal.
func DF(df float64) string {
	if r := math.Round(df); math.Abs(df-r) < 1e-6*math.Max(1, r) {
		return Fixed(r, 0)
	}
	return Fixed(df, 1)
}

// Statistic prints F, t or another test statistic: two decimals.
func Statistic(x float64) string { return Fixed(x, 2) }

// Percent prints a percentage with one decimal, without its sign.
func Percent(x float64) string { return Fixed(x, 1) }

// Count prints a whole number with a thin space between groups of three digits from
// five digits on.
func Count(n int) string {
	s := strconv.Itoa(n)
	neg := strings.HasPrefix(s, "-")
	s = strings.TrimPrefix(s, "-")
	if len(s) > 4 {
		var b strings.Builder
		for i, r := range s {
			if i > 0 && (len(s)-i)%3 == 0 {
				b.WriteString("\u2009")
			}
			b.WriteRune(r)
		}
		s = b.String()
	}
	if neg {
		return "−" + s
	}
	return s
}

// Unit joins a printed number and its unit with a thin space that does not break. UCUM
// spellings are shown as the trade writes them.
func Unit(number, unit string) string {
	if unit == "" || unit == "1" || number == Absent { // 1: a number without a dimension
		return number
	}
	if unit == "%" {
		return number + "\u202f%"
	}
	return number + "\u202f" + UnitText(unit)
}

// UnitText is a unit as it is printed.
func UnitText(unit string) string {
	switch unit {
	case "Cel":
		return "°C"
	case "[lb_av]":
		return "lb"
	case "[oz_av]":
		return "oz"
	case "[in_i]":
		return "in"
	case "[ft_i]":
		return "ft"
	case "wk":
		return "wk"
	case "m2":
		return "m²"
	case "m3":
		return "m³"
	case "mm2":
		return "mm²"
	case "mm3":
		return "mm³"
	case "cm2":
		return "cm²"
	case "cm3":
		return "cm³"
	case "ug":
		return "µg"
	case "uL":
		return "µL"
	}
	if i := strings.IndexByte(unit, '/'); i > 0 {
		return UnitText(unit[:i]) + "/" + UnitText(unit[i+1:])
	}
	return unit
}
