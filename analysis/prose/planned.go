package prose

import (
	"fmt"
	"strings"

	"penwright/analysis/num"
	"penwright/analysis/trial"
	"penwright/protocol"
	"penwright/protocol/allot"
)

// Short is what a committee reads first of a plan: the question, how many units and
// animals, what the number rests on, what is done to them, how severe it is, when it
// stops and what becomes of them.
func Short(t *trial.Trial) []string {
	p, pr := t.Plan, t.Protocol
	var out []string
	add := func(lead, text string) {
		if text != "" {
			out = append(out, lead+": "+strings.TrimRight(text, ".")+lastMark(text))
		}
	}
	add("Question", pr.Trial.Objective.Body)
	unit := &p.Units[allot.RowUnit(p)]
	units := some(unit.N, UnitName(unit))
	if unit.Crosses != nil {
		var of []string
		for i := range p.Units {
			if u := &p.Units[i]; u.Crosses == nil {
				of = append(of, some(u.N, UnitName(u)))
			}
		}
		units = fmt.Sprintf("%s, which make %s", And(of), units)
	}
	if n := animals(t); n > 0 {
		units += " with " + num.Count(n) + " animals in all"
	}
	if n := treatments(t); n > 1 {
		units += ", for " + small(n) + " treatments"
	}
	add("Units", fmt.Sprintf("%s (%s)", units, DesignName(p)))
	add("Why so many", lowerFirst(strings.Join(Size(p), " ")))
	if pr.Animals == nil {
		return out
	}
	w := pr.Welfare
	if w == nil {
		w = &protocol.Welfare{}
	}
	var done []string
	for _, x := range w.Procedures {
		s := x.Name
		if s == "" {
			s = x.Kind
		}
		if x.Times > 0 {
			s += " (" + times(x.Times) + ")"
		}
		done = append(done, s)
	}
	if len(done) == 0 {
		done = []string{"the protocol names no procedure"}
	}
	add("Done to the animals, beside the treatments", And(done))
	switch a := pr.Approval; {
	case a == nil || a.Body == "" && a.Number == "":
		add("Approval", "none is stated; no animal is touched before it is given")
	case a.Severity != "":
		add("Severity foreseen, for one animal at worst", a.Severity)
	}
	stop := "the protocol states no humane endpoint"
	if len(w.HumaneEndpoints) > 0 {
		stop = strings.Join(w.HumaneEndpoints, "; ")
	}
	add("An animal leaves the trial on", stop)
	if n := w.Monitoring.TimesPerDay; n > 0 {
		s := num.Fixed(n, places(n)) + " times a day"
		if n == 1 || n == 2 {
			s = times(int(n)) + " a day"
		}
		if w.Monitoring.By != "" {
			s += ", by " + w.Monitoring.By
		}
		add("Looked at", s)
	}
	add("Afterwards", lowerFirst(w.Fate))
	return out
}

// lastMark is the full stop that a text lacks.
func lastMark(s string) string {
	if strings.HasSuffix(s, "?") || strings.HasSuffix(s, "!") {
		return ""
	}
	return "."
}

func times(n int) string {
	switch n {
	case 1:
		return "once"
	case 2:
		return "twice"
	}
	return small(n) + " times"
}

// animals is the number of animals in all units, 0 where the plan does not tell.
func animals(t *trial.Trial) int {
	n := 0
	for u := range t.Plan.Units {
		sum := 0
		for _, k := range t.Plan.Units[u].Animals {
			sum += k
		}
		n = max(n, sum)
	}
	return n
}

// treatments counts the combinations of treatments that the smallest treated units
// receive, 0 where they are not combined freely or are too many to be told.
func treatments(t *trial.Trial) int {
	n := 1
	for u := range t.Plan.Units {
		a := t.Plan.Allocation(u)
		if a == nil {
			continue
		}
		if n *= len(a.Combinations); a.Separate || n > 100_000 {
			return 0
		}
	}
	return n
}

// PlannedAnalysis says in words how each response will be analysed.
func PlannedAnalysis(t *trial.Trial) []string {
	p, a := t.Plan, t.Protocol.Analysis
	var out []string
	for i := range t.Protocol.Responses {
		r := &t.Protocol.Responses[i]
		alpha, comparison := a.Alpha, a.Comparison
		if r.Alpha != nil {
			alpha = *r.Alpha
		}
		if r.Comparison != "" {
			comparison = r.Comparison
		}
		s := fmt.Sprintf("%s is analysed as the layout dictates (%s)", upperFirst(ResponseLabel(r)), DesignName(p))
		if r.Kind != "continuous" {
			s = fmt.Sprintf("%s (%s) is analysed by the layout (%s)", upperFirst(ResponseLabel(r)), r.Kind, DesignName(p))
		}
		if r.Transform != "" && r.Transform != "none" {
			s += ", after the transformation " + r.Transform
		}
		if len(r.Covariates) > 0 {
			var names []string
			for _, c := range r.Covariates {
				for k := range t.Protocol.Covariates {
					if x := &t.Protocol.Covariates[k]; x.Name == c {
						names = append(names, lowerFirst(CovariateLabel(x)))
					}
				}
			}
			s += ", adjusted for " + And(names)
		}
		s += "; each effect is tested over the variation of the units that received it, at α = " + num.Fixed(alpha, places(alpha)) + "."
		if len(t.Protocol.Repeated) > 0 && r.Repeated != "" {
			s += " Times of one unit are correlated, which the model allows for."
		}
		if c := t.Protocol.CarryOver; c != nil {
			s += " What a treatment leaves behind to the next period is a term of the model."
		}
		switch comparison {
		case "none":
			s += " No pairs of means are compared beyond what is planned."
		case "dunnett":
			s += " Means are compared with the control by " + Method(comparison) + "."
		default:
			s += " Pairs of means are compared by " + Method(comparison) + "."
		}
		var graded []string
		for f := range p.Factors {
			if p.Factors[f].Values != nil && len(p.Factors[f].Levels) > 2 {
				graded = append(graded, lowerFirst(FactorLabel(&p.Factors[f])))
			}
		}
		if n := min(a.Trend, 3); n > 0 && len(graded) > 0 {
			s += fmt.Sprintf(" The response to %s is described by trends up to the %s one.", And(graded), []string{"linear", "quadratic", "cubic"}[n-1])
		}
		out = append(out, s)
	}
	return out
}

// Scheme says how the treatments are going to be drawn.
func Scheme(t *trial.Trial) []string {
	p := t.Plan
	scheme, list := allot.Scheme(p, t.Roster)
	if list.HasErrors() {
		if m := t.Protocol.Randomization.Method; m != "" {
			return []string{"The treatments are drawn outside this program. Method, in the words of the protocol: " + strings.TrimRight(m, ".") + "."}
		}
		return []string{"The treatments have not been drawn yet, and the plan as it stands is not one that this program draws; the protocol does not say how it is to be done."}
	}
	s := []string{"The treatments have not been drawn yet. The scheme, as its record will say it: " + strings.TrimRight(scheme, ".") + "."}
	if seed := t.Protocol.Randomization.Seed; seed != "" {
		s = append(s, fmt.Sprintf("The draw starts from the seed text “%s”, so that anybody can repeat it.", seed))
	} else {
		s = append(s, "The seed is made by the system at the draw and recorded with it, so that anybody can repeat it.")
	}
	return append(s, "It is made once and its record is kept; a second draw is counted and needs a reason.")
}
