// Package analysis analyses a trial as its plan dictates: it picks the model that the
// units and the treatments imply, names what the numeric packages computed, and turns
// their typed conditions into notes on the results they qualify.
package analysis

import (
	"fmt"
	"sort"

	"penwright/analysis/dataset"
	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/analysis/sound"
	"penwright/analysis/trial"
	"penwright/protocol/diag"
	"penwright/protocol/layout"
)

// Run analyses every response of a trial, in the protocol's order. A trial without data
// gives what the design alone says. A response that this version cannot analyse rightly
// is an error in the list and stands in the results without a model, with a note that
// says why; the others are analysed all the same. progress, if not nil, is called after
// each response with the number done.
func Run(t *trial.Trial, program result.Program, progress func(done, of int)) (*result.Results, diag.List) {
	var list diag.List
	out := &result.Results{
		Format:    1,
		Program:   program,
		Trial:     result.Trial{Code: t.Protocol.Trial.Code, Title: t.Protocol.Trial.Title, Status: Status(t)},
		Inputs:    inputs(t),
		Design:    design(t.Plan),
		Responses: []result.Response{},
	}
	var checks []result.Check
	out.SampleSize, checks = size(t)
	out.Design.Checks = append(sound.Results(sound.Check(t)), checks...)
	if t.Table == nil {
		return out, nil
	}
	for i := range t.Table.Responses {
		r := &t.Table.Responses[i]
		out.Responses = append(out.Responses, respond(t, r, &list))
		markPlanned(t, &out.Responses[i])
		if progress != nil {
			progress(i+1, len(t.Table.Responses))
		}
	}
	return out, list
}

// Status is how far a trial has come: planned, allotted, sealed or complete.
func Status(t *trial.Trial) string {
	switch {
	case t.Table != nil:
		return "complete"
	case t.Seal != nil:
		return "sealed"
	case t.Allotment != nil:
		return "allotted"
	}
	return "planned"
}

func inputs(t *trial.Trial) []result.Input {
	out := []result.Input{}
	for _, f := range t.Files {
		out = append(out, result.Input{Path: f.Path, SHA256: f.SHA256, Bytes: len(f.Data)})
	}
	sort.Slice(out, func(i, j int) bool { return out[i].Path < out[j].Path })
	return out
}

func design(p *layout.Plan) result.Design {
	d := result.Design{
		Name: p.Design.Name, Units: []result.Unit{}, Treatments: treatments(p),
		Strata: []result.Stratum{}, ErrorDF: result.ErrorDF{}, Checks: []result.Check{},
	}
	for i := range p.Units {
		u := &p.Units[i]
		x := result.Unit{Name: u.Name, Count: u.N}
		for _, f := range u.Receives {
			x.Receives = append(x.Receives, p.Factors[f].Name)
		}
		for _, f := range u.Carries {
			x.Carries = append(x.Carries, p.Factors[f].Name)
		}
		d.Units = append(d.Units, x)
	}
	for _, s := range p.Strata {
		d.Strata = append(d.Strata, result.Stratum{Name: s.Name, DF: s.DF})
	}
	for i := range p.Terms {
		t := &p.Terms[i]
		df := -1
		if t.Stratum >= 0 || t.Over >= 0 {
			df = t.ErrorDF
		}
		d.ErrorDF = append(d.ErrorDF, result.TermDF{Term: t.Name, DF: df})
	}
	for i, r := range p.Protocol.Repeated {
		lines := p.Repeated(i)
		left := -1 // residual df, where the times are analysed as a split plot in time
		stratum := result.Stratum{}
		for _, l := range lines {
			stratum.Name = l.Stratum
			stratum.DF += l.DF
			if l.Kind == layout.Residual && r.Correlation == splitPlotInTime {
				left = l.DF
			}
		}
		if len(lines) > 0 {
			d.Strata = append(d.Strata, stratum)
		}
		for _, l := range lines {
			if l.Kind == layout.TimeLine {
				d.ErrorDF = append(d.ErrorDF, result.TermDF{Term: l.Source, DF: left})
			}
		}
	}
	return d
}

// treatments is the number of different treatments that units can receive.
func treatments(p *layout.Plan) int {
	n, any := 1, false
	for _, f := range p.Factors {
		if f.Unit >= 0 && !f.Carried {
			n *= len(f.Levels)
			any = true
		}
	}
	if !any {
		return 0
	}
	return n
}

// respond analyses one response.
func respond(t *trial.Trial, r *dataset.Response, list *diag.List) result.Response {
	p := r.Protocol
	out := result.Response{
		Name: p.Name, Label: p.Label, Unit: p.Unit, Role: p.Role, Kind: p.Kind, Transform: p.Transform,
		Strata: []result.StratumResult{}, Anova: []result.Line{}, Tests: []result.Test{}, Components: []result.Component{},
		GrandMean: result.NaN, CVPercent: result.NaN, Summary: []result.Summary{}, Covariates: []result.Covariate{},
		Means: []result.Mean{}, SED: []result.SED{}, Comparisons: []result.Comparison{}, Contrasts: []result.Contrast{},
		Diagnostics: []result.Diagnostic{}, Residuals: []result.Residual{}, Efficiency: []result.Efficiency{},
		Planned: true, Notes: []result.Note{},
	}
	if out.Label == "" {
		out.Label = p.Name
	}
	for _, s := range r.Status {
		switch s {
		case dataset.Used:
			out.N++
		case dataset.Excluded:
			out.Excluded++
		default:
			out.Missing++
		}
	}
	index := 0
	for i := range t.Protocol.Responses {
		if t.Protocol.Responses[i].Name == p.Name {
			index = i
		}
	}
	refuse := func(x refusal) result.Response {
		key := x.key
		if key == "" {
			key = fmt.Sprintf("response[%d]", index)
		}
		out.Notes = append(out.Notes, result.Note{Code: x.code, Text: prose.Refused(t.Plan, &out, x.why)})
		list.Add(diag.Diagnostic{Pos: t.Protocol.Pos(key), Key: key, Severity: diag.Error, Code: x.code,
			Message: fmt.Sprintf("response %q is not analysed: %s", p.Name, x.why), Hint: x.hint})
		return out
	}
	if x := uncovered(t, p, index); x != nil {
		return refuse(*x)
	}
	a := &analyst{trial: t, plan: t.Plan, out: &out}
	if p.Repeated != "" {
		long, records, over, x := overTime(t, r)
		if x != nil {
			return refuse(*x)
		}
		a.trial, a.plan, a.over, r = long, long.Plan, over, records
	}
	a.rows = used(a.trial, r)
	if x := a.run(); x != nil {
		return refuse(*x)
	}
	return out
}
