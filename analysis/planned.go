package analysis

import (
	"slices"
	"strings"

	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/analysis/trial"
)

// markPlanned says of the analysis of a response which parts were in the plan that was
// sealed before the data. Without such a seal all of them count as planned.
func markPlanned(t *trial.Trial, r *result.Response) {
	b := t.Seal.Response(r.Name)
	r.Planned = !b.New
	for i := range r.Tests {
		r.Tests[i].Planned = b.Planned()
	}
	for i := range r.Contrasts {
		c := &r.Contrasts[i]
		if !b.Planned() {
			c.Planned = false
		} else if order, ok := trendOrder(c, r.Contrasts); ok {
			c.Planned = t.Seal.Trend(order)
		} else {
			c.Planned = t.Seal.Contrast(r.Name, c.Name)
		}
	}
	if s := prose.NotPlanned(b); s != "" {
		r.Notes = append(r.Notes, result.Note{Code: notPlanned, Text: s})
	}
}

// notPlanned is the code of the note on what was not in the sealed plan.
const notPlanned = "not-planned-before-data"

// trendOrder is the order of a trend among the contrasts of its term; what trends leave
// over is as much planned as the first of them. ok is false for a contrast that is none.
func trendOrder(c *result.Contrast, all []result.Contrast) (order int, ok bool) {
	if !strings.HasPrefix(c.Name, c.Term+": ") {
		return 0, false
	}
	if c.Name == c.Term+": lack of fit" {
		return 1, true
	}
	var trends []string
	for _, x := range all {
		if x.Term == c.Term && strings.HasPrefix(x.Name, c.Term+": ") {
			trends = append(trends, x.Name)
		}
	}
	return slices.Index(trends, c.Name) + 1, true
}
