package seal

import (
	"reflect"
	"slices"
)

// What was planned is what stood in the last seal made before there were data. Without
// such a seal the protocol is taken at its word: everything counts as planned. All
// methods may be called on nil.

// Bearing is what differs from the sealed plan in a way that bears on a response.
type Bearing struct {
	New   bool         // the response itself was not in the seal
	Model []Difference // its analysis is another one
	Other []Difference // the analysis is the same, what is compared or how it is judged is not
}

// Planned tells whether the analysis of the response was planned.
func (b Bearing) Planned() bool { return !b.New && len(b.Model) == 0 }

// sealed is the plan that counts, nil: none.
func (s *Seal) sealed() map[string]any {
	if s == nil || s.before == nil || s.p == nil {
		return nil
	}
	return s.before.plan
}

// Response tells what differs from the sealed plan for a response of the protocol.
func (s *Seal) Response(name string) Bearing {
	var b Bearing
	if s.sealed() == nil {
		return b
	}
	r := s.p.Response(name)
	if r == nil {
		return b
	}
	for _, d := range s.against {
		if d.Of("response", name) && d.Field == "" && d.Kind == Added {
			return Bearing{New: true}
		}
		of := func(table string, fields ...string) bool { return d.Table == table && slices.Contains(fields, d.Field) }
		switch {
		case d.Of("response", name) && of("response", "kind", "method", "role", "unit", "covariates", "transform", "offset", "compute", "recorded_on", "aggregate",
			"file", "over", "where", "repeated", "total", "event"),
			of("analysis", "blocks", "interactions", "adjustment", "df_method", "components", "variance_by"),
			of("factor", "", "levels", "random") && !reordered(&d),
			d.Table == "treatment" && d.Field != "order",
			of("unit", "", "receives", "carries", "within", "crosses", "random", "interacts", "checks"),
			of("covariate", "slopes") && slices.ContainsFunc(r.Covariates, func(c string) bool { return d.Of("covariate", c) }),
			of("repeated", "", "at", "on", "correlation") && d.Of("repeated", r.Repeated),
			d.Table == "carryover", d.Table == "time_trend":
			b.Model = append(b.Model, d)
		case d.Of("response", name) && of("response", "comparison", "alpha", "margin"),
			of("analysis", "comparison") && r.Comparison == "",
			of("analysis", "alpha") && r.Alpha == nil,
			of("analysis", "margin") && r.Margin == nil,
			of("analysis", "tendency", "side", "pairs"), d.Table == "analysis.dose_response", of("factor", "control"):
			b.Other = append(b.Other, d)
		}
	}
	return b
}

// reordered tells whether a list has the elements it had, in another order.
func reordered(d *Difference) bool {
	a, isOld := d.Old.([]any)
	b, isNew := d.New.([]any)
	if !isOld || !isNew || len(a) != len(b) {
		return false
	}
	return !slices.ContainsFunc(a, func(x any) bool {
		return !slices.ContainsFunc(b, func(y any) bool { return reflect.DeepEqual(x, y) })
	})
}

// Contrast tells whether a planned contrast of that name, of all responses or of the
// one named, was sealed with the factor and weights it has now.
func (s *Seal) Contrast(response, name string) bool {
	plan := s.sealed()
	if plan == nil {
		return true
	}
	now := contrast(s.present, response, name)
	return now == nil || reflect.DeepEqual(contrast(plan, response, name), now)
}

// contrast finds a contrast in a plan, that of the response before that of all.
func contrast(plan map[string]any, response, name string) map[string]any {
	var found map[string]any
	look := func(v any) {
		for _, c := range asTables(v) {
			if c["name"] == name && found == nil {
				found = c
			}
		}
	}
	for _, r := range asTables(plan["response"]) {
		if r["name"] == response {
			look(r["contrasts"])
		}
	}
	if a, ok := plan["analysis"].(map[string]any); ok {
		look(a["contrast"])
	}
	return found
}

// Trend tells whether trends up to that order were sealed, 1 being the linear one.
func (s *Seal) Trend(order int) bool {
	plan := s.sealed()
	if plan == nil {
		return true
	}
	a, _ := plan["analysis"].(map[string]any)
	highest, _ := a["trend"].(float64)
	return float64(order) <= highest
}

// Rule tells whether a rule of exclusion was sealed.
func (s *Seal) Rule(rule string) bool {
	plan := s.sealed()
	if plan == nil {
		return true
	}
	e, _ := plan["eligibility"].(map[string]any)
	rules, _ := e["exclusion_rules"].([]any)
	return slices.Contains(rules, any(rule))
}
