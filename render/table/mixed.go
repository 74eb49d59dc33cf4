package table

import (
	"math"
	"slices"

	"penwright/analysis/num"
	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/protocol"
	"penwright/protocol/layout"
	"penwright/render/doc"
)

// effectTests are the tests of a mixed model, which has no sums of squares: Source, df,
// denominator df, F, P.
func effectTests(p *layout.Plan, r *result.Response) doc.Table {
	t := doc.Table{
		ID:      "anova-" + r.Name,
		Caption: text("Tests of effects on " + prose.ResponseText(r)),
		Columns: []doc.Column{left(true), decimal(), decimal(), decimal(), decimal()},
		Head:    head(cell("Source"), emph("df"), cell("Denominator df"), emph("F"), emph("P")),
	}
	for _, x := range r.Tests {
		t.Rows = append(t.Rows, doc.Row{Cells: []doc.Cell{
			cell(prose.SourceRow(p, r, result.Line{Source: x.Source})), cell(num.DF(float64(x.DF))), cell(known(x.ErrorDF, num.DF)),
			cell(fixed(x.F, float64(x.F), 2)), cell(pText(x.P)),
		}})
	}
	for _, s := range prose.AnovaNotes(p, r) {
		t.Notes = append(t.Notes, text(s))
	}
	return t
}

// known prints a number that is there.
func known(x result.Number, print func(float64) string) string {
	if !x.Known() {
		return ""
	}
	return print(float64(x))
}

// Components are the components of variance by what varies, with their share where none is
// negative.
func Components(p *layout.Plan, r *result.Response) doc.Table {
	t := doc.Table{
		ID:      "components-" + r.Name,
		Caption: text("Components of variance of " + prose.ResponseText(r)),
		Columns: []doc.Column{left(true), decimal(), decimal()},
		Head:    head(cell("Between"), cell("Variance"), cell("SE")),
	}
	var all []float64
	total, residuals := 0.0, 0
	for _, c := range r.Components {
		all = append(all, float64(c.Estimate), float64(c.SE))
		total += float64(c.Estimate)
		if len(c.Term) >= len("residual") && c.Term[:len("residual")] == "residual" {
			residuals++
		}
	}
	share := len(r.Components) > 1 && residuals == 1 && total > 0 && !slices.ContainsFunc(r.Components, func(c result.Component) bool { return !(c.Estimate >= 0) })
	if share {
		t.Columns = append(t.Columns, decimal())
		t.Head[0] = append(t.Head[0], cell("Share, %"))
	}
	d := num.ColumnDecimals(positive(all), 3, 6)
	for _, c := range r.Components {
		estimate := fixed(c.Estimate, float64(c.Estimate), d)
		if c.Boundary {
			estimate = "0"
		}
		row := []doc.Cell{cell(prose.ComponentRow(p, r, c)), cell(estimate), cell(fixed(c.SE, float64(c.SE), d))}
		if share {
			row = append(row, cell(num.Percent(100*math.Max(0, float64(c.Estimate))/total)))
		}
		t.Rows = append(t.Rows, doc.Row{Cells: row})
	}
	for _, s := range prose.ComponentNotes(r) {
		t.Notes = append(t.Notes, text(s))
	}
	return t
}

// Correlations are the structures of repeated records that were tried, with the one taken
// marked in words; empty where none was to be chosen.
func Correlations(p *layout.Plan, r *result.Response) doc.Table {
	if r.Correlation == nil || len(r.Correlation.Candidates) == 0 {
		return doc.Table{}
	}
	t := doc.Table{
		ID:      "correlations-" + r.Name,
		Caption: text("Correlations of repeated records that were tried: " + prose.ResponseText(r)),
		Columns: []doc.Column{left(true), decimal(), decimal(), decimal()},
		Head:    head(cell("Correlation"), cell("Log residual likelihood"), cell("Parameters"), cell("AICc")),
	}
	for _, c := range r.Correlation.Candidates {
		name := upper(c.Kind)
		if c.Kind == r.Correlation.Kind {
			name += " (taken)"
		}
		parameters := ""
		if c.Parameters > 0 {
			parameters = num.Count(c.Parameters)
		}
		t.Rows = append(t.Rows, doc.Row{Cells: []doc.Cell{
			cell(name), cell(fixed(c.LogLikelihood, float64(c.LogLikelihood), 2)), cell(parameters), cell(fixed(c.AICc, float64(c.AICc), 2)),
		}})
	}
	for _, s := range prose.CandidatesNotes(r) {
		t.Notes = append(t.Notes, text(s))
	}
	return t
}

// Correlation is the variance of repeated records at each time and the correlations between
// times, as estimated; a single number stands in the notes of the tests instead.
func Correlation(p *layout.Plan, r *result.Response) doc.Table {
	pr := p.Protocol.Response(r.Name)
	if r.Correlation == nil || len(r.Correlation.Parameters) < 2 || pr == nil {
		return doc.Table{}
	}
	rep := p.Protocol.RepeatedNamed(pr.Repeated)
	if rep == nil {
		return doc.Table{}
	}
	t := doc.Table{
		ID:      "correlation-" + r.Name,
		Caption: text("Variances and correlations of repeated records: " + prose.ResponseText(r)),
		Columns: []doc.Column{levelColumn(p, rep.Name), decimal()},
		Head:    head(cell(prose.FactorHead(p, rep.Name)), cell("Variance")),
	}
	value := map[string]float64{}
	var variances []float64
	for _, x := range r.Correlation.Parameters {
		value[x.Name] = float64(x.Value)
	}
	for _, l := range rep.At {
		variances = append(variances, value["variance "+l])
	}
	n := len(rep.At)
	wide := n > widestCorrelation
	if wide {
		t.Columns = append(t.Columns, decimal())
		t.Head[0] = append(t.Head[0], cell("Correlation with the time before"))
	} else {
		for _, l := range rep.At[:n-1] {
			t.Columns = append(t.Columns, decimal())
			t.Head[0] = append(t.Head[0], cell(l))
		}
	}
	d := num.ColumnDecimals(positive(variances), 3, 6)
	for i, l := range rep.At {
		row := []doc.Cell{cell(l), cell(num.Fixed(variances[i], d))}
		from, to := 0, n-1
		if wide {
			from, to = i-1, i
		}
		for j := from; j < to; j++ {
			if j < 0 || j >= i {
				row = append(row, cell(""))
				continue
			}
			row = append(row, cell(fixed(result.Number(correlationOf(r.Correlation.Kind, rep, value, j, i)), correlationOf(r.Correlation.Kind, rep, value, j, i), 2)))
		}
		t.Rows = append(t.Rows, doc.Row{Cells: row})
	}
	for _, s := range prose.CorrelationNotes(p, r) {
		t.Notes = append(t.Notes, text(s))
	}
	return t
}

// widestCorrelation is the number of times up to which all correlations are shown.
const widestCorrelation = 10

// correlationOf two times follows from the parameters of a structure; j stands before i.
func correlationOf(kind string, rep *protocol.Repeated, value map[string]float64, j, i int) float64 {
	at := rep.At
	switch kind {
	case "heterogeneous compound symmetry":
		return value["rho"]
	case "heterogeneous autoregressive":
		return math.Pow(value["rho"], rep.Steps()[i]-rep.Steps()[j])
	case "antedependence":
		c := 1.0
		for k := j + 1; k <= i; k++ {
			c *= value["rho "+at[k-1]+" "+at[k]]
		}
		return c
	case "unstructured":
		return value["covariance "+at[j]+" "+at[i]] / math.Sqrt(value["variance "+at[j]]*value["variance "+at[i]])
	}
	return math.NaN()
}
