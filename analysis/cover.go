package analysis

import (
	"fmt"

	"penwright/analysis/sound"
	"penwright/analysis/trial"
	"penwright/protocol"
	"penwright/protocol/diag"
)

// refusal says why a response is not analysed and which key makes it so.
type refusal struct {
	code string
	key  string // dotted key; empty: the response itself
	why  string
	hint string
}

// Codes describes the codes of this package's findings.
func Codes() []diag.CodeInfo {
	return []diag.CodeInfo{
		{Code: "not-carried-out", Text: "a key asks for what this version does not do and would change the numbers", Example: "[analysis]\nmargin = 5"},
		{Code: "not-converged", Text: "the search for the variances of a mixed model came to no end", Example: "as many variances as units"},
		{Code: "not-told-apart", Text: "two variances of a mixed model cannot be told apart", Example: "[[unit]] of which each holds one plot"},
		{Code: "repeated-unit", Text: "a repeated response is recorded on another unit than the one that is measured again and again", Example: "recorded_on = \"animal\" with [[repeated]] on = \"pen\""},
		{Code: "carry-over-aliased", Text: "carry-over effects cannot be told from others", Example: "[carryover] with two treatments in two periods"},
		{Code: "no-values", Text: "no unit gave a value of the response", Example: "gain empty in every row"},
		{Code: "no-terms", Text: "the response is recorded on a unit larger than those that received treatments", Example: "recorded_on = \"block\" where pens receive the diets"},
		{Code: "one-level", Text: "only one level of a factor gave a value", Example: "gain written down for diet A alone"},
		{Code: "unknown-treatment", Text: "the treatment of a unit with data is not known", Example: "a carried class that the roster leaves empty for a pen with data"},
		{Code: "no-error", Text: "no degrees of freedom are left to estimate error", Example: "as many values as treatments"},
		{Code: "time-trend", Text: "rows do not lie within the units of the time trend", Example: "[time_trend] on = \"cow\" for a response of the whole herd"},
		{Code: "too-large", Text: "the model of a response has too many columns", Example: "a thousand lines at a thousand sites"},
		{Code: sizeCheck, Text: "what the number of units gives beside what it is to give", Example: "[sample_size]\nbasis = \"error df\""},
		{Code: sizeShort, Text: "the number of units does not reach the power, precision or error df that [sample_size] states", Example: "[sample_size]\nbasis = \"error df\""},
		{Code: sizeUnknown, Text: "what the number of units reaches cannot be computed; the message names what is missing", Example: "[sample_size]\nbasis = \"power\"\nresponse = \"gain\"\npower = 0.8\ndifference = 60"},
	}
}

// Foresee says what is known of the analysis before there are data: as errors the keys
// for which responses will not be analysed, as warnings and notes what the checks of the
// design found. It needs the plan.
func Foresee(t *trial.Trial) diag.List {
	var list diag.List
	for i := range t.Protocol.Responses {
		r := &t.Protocol.Responses[i]
		if x := uncovered(t, r, i); x != nil {
			list.Add(diag.Diagnostic{Pos: t.Protocol.Pos(x.key), Key: x.key, Severity: diag.Error, Code: x.code,
				Message: fmt.Sprintf("response %q will not be analysed: %s", r.Name, x.why), Hint: x.hint})
		}
	}
	list = append(list, sound.List(sound.Check(t))...)
	if t.Protocol.SampleSize != nil {
		_, found := Size(t)
		list = append(list, found...)
	}
	return list
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
	for i, f := range p.Factors {
		if f.Random {
			return no(fmt.Sprintf("factor[%d].random", i), fmt.Sprintf("levels of %s as a random sample are not fitted by this version", f.Name), "leave random out to compare the levels as they are")
		}
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
