package prose

import (
	"fmt"
	"math"
	"strings"

	"penwright/analysis/num"
	"penwright/analysis/result"
	"penwright/protocol/layout"
)

// bareName is what a response is called at the head of a sentence, without its unit.
func bareName(r *result.Response) string {
	x := *r
	x.Unit = ""
	return upperFirst(ResponseText(&x))
}

// PValue is P as it stands in running text: "P = 0.041" or "P < 0.001".
func PValue(p float64) string { return "P " + num.PStatement(p) }

// FText is F with its degrees of freedom, as it stands in running text.
func FText(df, errorDF, f float64) string {
	return fmt.Sprintf("F(%s, %s) = %s", num.DF(df), num.DF(errorDF), num.Statistic(f))
}

// LimitsText is a pair of limits with their confidence. One that is not there is an open
// end.
func LimitsText(p *layout.Plan, r *result.Response, lower, upper float64, decimals int) string {
	s := Interval(p, r) + " "
	switch {
	case math.IsNaN(lower):
		return s + "up to " + num.Unit(num.Fixed(upper, decimals), r.Unit)
	case math.IsNaN(upper):
		return s + "from " + num.Unit(num.Fixed(lower, decimals), r.Unit)
	}
	return s + num.Fixed(lower, decimals) + " to " + num.Unit(num.Fixed(upper, decimals), r.Unit)
}

// TestSentence tells the test of a term.
func TestSentence(p *layout.Plan, r *result.Response, t *result.Test) string {
	return fmt.Sprintf("%s by %s: %s, %s.%s", bareName(r), TermText(p, t.Source), FText(float64(t.DF), float64(t.ErrorDF), float64(t.F)), PValue(float64(t.P)), depends(p, r, t.Source))
}

// TrendUnit is the unit of a trend's coefficient: that of the response per unit of the
// factor to the power of the trend. ok is false for what is no trend of one factor.
func TrendUnit(p *layout.Plan, r *result.Response, c *result.Contrast) (unit string, ok bool) {
	order, found := strings.CutPrefix(c.Name, c.Term+": ")
	if !found || strings.Contains(c.Term, ":") {
		return "", false
	}
	of := factorUnit(p, c.Term)
	switch order {
	case "linear":
	case "quadratic":
		of = "(" + of + ")²"
	case "cubic":
		of = "(" + of + ")³"
	default:
		return "", false
	}
	if r.Unit == "" {
		return "per " + of, true
	}
	return num.UnitText(r.Unit) + " per " + of, true
}

// ContrastSentence tells a contrast, a trend, or what trends leave over.
func ContrastSentence(p *layout.Plan, r *result.Response, c *result.Contrast) string {
	if !c.Estimate.Known() {
		return fmt.Sprintf("%s, %s: %s, %s.", bareName(r), TermText(p, c.Name), FText(float64(c.NumeratorDF), float64(c.DF), float64(c.F)), PValue(float64(c.P)))
	}
	d := num.SEDecimals(float64(c.SE))
	x := *r
	limits := ""
	unit, trend := TrendUnit(p, r, c)
	switch {
	case trend:
		x.Unit = ""
	case strings.HasPrefix(c.Name, c.Term+": "):
		x.Unit, unit = "", ""
	default:
		unit = num.UnitText(r.Unit)
	}
	if c.Lower.Known() || c.Upper.Known() {
		limits = LimitsText(p, &x, float64(c.Lower), float64(c.Upper), d) + "; "
	}
	estimate := num.Signed(float64(c.Estimate), d)
	if unit != "" {
		estimate += "\u202f" + unit
	}
	if trend && strings.HasSuffix(c.Name, ": linear") {
		return fmt.Sprintf("%s changed by %s of %s (linear trend; %s%s).%s", bareName(r), estimate, TermText(p, c.Term), limits, PValue(float64(c.P)), depends(p, r, c.Term))
	}
	return fmt.Sprintf("%s, %s: %s (%s%s).%s", bareName(r), TermText(p, c.Name), estimate, limits, PValue(float64(c.P)), depends(p, r, c.Term))
}

// MeanSentence tells a mean with its standard error and the number of its units.
func MeanSentence(p *layout.Plan, r *result.Response, m *result.Mean, decimals int) string {
	units := "units"
	if u := ErrorUnit(p, r); u >= 0 {
		units = Plural(UnitName(&p.Units[u]))
	}
	return fmt.Sprintf("%s at %s was %s (SE %s, %s %s).", bareName(r), At(p, m.Levels), num.Unit(num.Fixed(float64(m.Mean), decimals), r.Unit),
		num.Unit(num.Fixed(float64(m.SE), decimals), r.Unit), num.Count(m.Units), units)
}

// At names the levels of a mean in running text.
func At(p *layout.Plan, l result.Levels) string { return LevelsText(p, l) }

// DifferenceSentence tells a difference of two means with its limits and P. P is NaN, and
// the limits are, where the pair was not compared.
func DifferenceSentence(p *layout.Plan, r *result.Response, a, b result.Levels, c *result.Comparison, decimals int) string {
	pair := At(p, a) + " − " + At(p, b)
	var more []string
	if c.Method != "" {
		more = append(more, Method(c.Method))
	}
	if c.Lower.Known() || c.Upper.Known() {
		more = append(more, LimitsText(p, r, float64(c.Lower), float64(c.Upper), decimals))
	}
	if c.PAdjusted.Known() {
		more = append(more, PValue(float64(c.PAdjusted)))
	}
	in := ""
	if len(more) > 0 {
		in = " (" + strings.Join(more, "; ") + ")"
	}
	return fmt.Sprintf("The difference %s in %s is %s%s.", pair, lowerFirst(bareName(r)), num.Unit(num.Fixed(float64(c.Difference), decimals), r.Unit), in)
}

// Claim is something that the prose of a report asserts. Why tells the numbers compared;
// it is open while they are not there.
type Claim struct {
	Text, Where, Why string
	Open             bool
}

// Claims says how many claims of the prose were held against the results.
func Claims(claims []Claim) []string {
	open := 0
	for _, c := range claims {
		if c.Open {
			open++
		}
	}
	var out []string
	switch n := len(claims) - open; {
	case len(claims) == 0:
		return nil
	case n == 1:
		out = append(out, "The author’s words make one claim that was held against the results; they bear it out.")
	case n > 1:
		out = append(out, fmt.Sprintf("The author’s words make %s claims that were held against the results; they bear out all of them.", small(n)))
	}
	switch {
	case open == 1:
		out = append(out, "One claim waits for the data.")
	case open > 1:
		out = append(out, upperFirst(small(open))+" claims wait for the data.")
	}
	return out
}

// NarrativeWaits is what stands in the place of a narrative that quotes results before there are
// data.
func NarrativeWaits(place string) string {
	return "What the author wrote for the " + place + " " + NarrativeWaiting + "; it will stand here when there are."
}

// NarrativeWaiting are the words by which a narrative that waits for the data is known.
const NarrativeWaiting = "quotes results, and there are no data yet"

// NotYet is what is printed for a value before there are data.
const NotYet = "not known before the data"
