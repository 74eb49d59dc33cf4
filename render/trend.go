package render

import (
	"fmt"
	"math"

	"penwright/analysis/result"
	"penwright/protocol/layout"
	"penwright/render/figure"
)

// trend is the polynomial that was fitted to the means of a quantitative factor, of the
// degree that the plan asks for, as a curve over the levels:
//
//	y(x) = mean + Σ bₖ·pₖ(x)
//
// with pₖ the orthogonal polynomials of leading coefficient 1 over the levels and bₖ the
// coefficients that the results hold. It is empty where there are none; where means differ
// in precision, so that the coefficients are not those of means weighted alike; and where
// the curve would run through all the means and tell nothing.
//
// The polynomials come by the three-term recurrence (G. E. Forsythe, J. Soc. Indust. Appl.
// Math. 5 (1957) 74-88; from memory).
func trend(plan *layout.Plan, r *result.Response, term string, means []figure.Mean) figure.Trend {
	degree := plan.Protocol.Analysis.Trend
	names := []string{"linear", "quadratic", "cubic", "quartic", "quintic"}
	n := float64(len(means))
	if degree < 1 || degree > len(names) || degree >= len(means)-1 {
		return figure.Trend{}
	}
	lo, hi, mean := means[0].X, means[0].X, 0.0
	for _, m := range means {
		if !(math.Abs(m.Value) <= math.MaxFloat64) {
			return figure.Trend{}
		}
		lo, hi = min(lo, m.X), max(hi, m.X)
		mean += m.Value / n
	}
	if !(lo < hi) {
		return figure.Trend{}
	}
	const steps = 60
	at := make([]float64, len(means), len(means)+steps+1) // the levels, then the curve's places
	for i, m := range means {
		at[i] = m.X
	}
	for i := range steps + 1 {
		at = append(at, lo+(hi-lo)*float64(i)/steps)
	}
	y := make([]float64, len(at))
	before, now := make([]float64, len(at)), make([]float64, len(at))
	for i := range at {
		y[i], now[i] = mean, 1
	}
	size := n // Σ pₖ² over the levels
	b := 0.0
	for k := range degree {
		a := 0.0
		for i := range means {
			a += at[i] * now[i] * now[i] / size
		}
		next := make([]float64, len(at))
		for i := range at {
			next[i] = (at[i]-a)*now[i] - b*before[i]
		}
		sum, product := 0.0, 0.0
		for i, m := range means {
			sum += next[i] * next[i]
			product += next[i] * (m.Value - mean)
		}
		if !(sum > 0) {
			return figure.Trend{}
		}
		b = sum / size
		before, now, size = now, next, sum
		c := coefficient(r, term+": "+names[k])
		if c == nil || !(math.Abs(float64(c.Estimate)-product/sum) <= 1e-6*(math.Abs(float64(c.Estimate))+float64(c.SE))) {
			return figure.Trend{}
		}
		for i := range at {
			y[i] += float64(c.Estimate) * next[i]
		}
	}
	out := figure.Trend{Label: fmt.Sprintf("polynomial of degree %d fitted to the means", degree)}
	if degree == 1 {
		out.Label = "straight line fitted to the means"
	}
	for i := len(means); i < len(at); i++ {
		out.Points = append(out.Points, figure.TrendPoint{X: at[i], Y: y[i], Low: math.NaN(), High: math.NaN()})
	}
	return out
}

// coefficient finds a planned trend by its name.
func coefficient(r *result.Response, name string) *result.Contrast {
	for i := range r.Contrasts {
		if c := &r.Contrasts[i]; c.Name == name && c.Planned && c.Estimate.Known() && c.SE.Known() {
			return c
		}
	}
	return nil
}
