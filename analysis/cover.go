package analysis

import (
	"fmt"

	"penwright/analysis/trial"
	"penwright/protocol"
)

// refusal says why a response is not analysed and which key makes it so.
type refusal struct {
	code string
	key  string // dotted key; empty: the response itself
	why  string
	hint string
}

// uncovered finds what would change the numbers of a response and is not carried out by
// this version: better no number than one by another rule than the protocol's.
func uncovered(t *trial.Trial, r *protocol.Response, index int) *refusal {
	p := t.Protocol
	at := func(key string) string { return fmt.Sprintf("response[%d].%s", index, key) }
	no := func(key, why, hint string) *refusal {
		return &refusal{code: "not-carried-out", key: key, why: why, hint: hint}
	}
	if r.Kind != "continuous" {
		return no(at("kind"), fmt.Sprintf("this version analyses kind \"continuous\" only, not %q", r.Kind),
			"a proportion or mean of many animals per experimental unit may be declared continuous where that is sound")
	}
	if r.Method != "" && r.Method != "auto" {
		return no(at("method"), fmt.Sprintf("method %q is not carried out by this version", r.Method), "leave method out, or set it to \"auto\"")
	}
	if r.Transform != "" && r.Transform != "none" {
		return no(at("transform"), fmt.Sprintf("transformation %q is not carried out by this version", r.Transform),
			"set transform to \"none\"; a transformed value may be made under compute, such as compute = \"log(count)\"")
	}
	if r.Repeated != "" {
		return no(at("repeated"), "repeated measures need a model of their correlation, which this version does not fit",
			"analyse one time, or a summary of each unit over the times (where, aggregate)")
	}
	if p.CarryOver != nil {
		return no("carryover", "carry-over effects in a crossover are not fitted by this version", "")
	}
	for i, u := range p.Units {
		if u.Interacts {
			return no(fmt.Sprintf("unit[%d].interacts", i), fmt.Sprintf("interactions of %s with treatments are not fitted by this version", u.Name),
				"leave interacts out to take "+u.Name+" as a block")
		}
	}
	for i, f := range p.Factors {
		if f.Random {
			return no(fmt.Sprintf("factor[%d].random", i), fmt.Sprintf("levels of %s as a random sample are not fitted by this version", f.Name), "leave random out to compare the levels as they are")
		}
	}
	if p.Analysis.VarianceBy != "" {
		return no("analysis.variance_by", "a residual variance for each level of a factor is not fitted by this version", "leave variance_by out")
	}
	if p.Analysis.Margin != 0 || r.Margin != nil && *r.Margin != 0 {
		key := "analysis.margin"
		if r.Margin != nil {
			key = at("margin")
		}
		return no(key, "tests of equivalence against a margin are not carried out by this version", "leave margin out; the limits of the differences show whether they lie inside it")
	}
	for _, name := range r.Covariates {
		for i, c := range p.Covariates {
			if c.Name == name && c.Slopes == "by stratum" {
				return no(fmt.Sprintf("covariate[%d].slopes", i), "a slope for each stratum is not fitted by this version", "set slopes to \"common\"")
			}
		}
	}
	return nil
}
