package table

import (
	"math"
	"testing"

	"penwright/analysis/result"
	"penwright/protocol"
	"penwright/protocol/layout"
	"penwright/render/doc"
)

// Correlations of times follow from the parameters of each structure: a covariance over the
// root of two variances, a power of the distance, a product of neighbours.
func TestCorrelationOf(t *testing.T) {
	rep := &protocol.Repeated{Name: "week", On: "pen", At: []string{"1", "2", "4"}, Values: []float64{1, 2, 4}}
	value := map[string]float64{"rho": 0.5, "variance 1": 4, "variance 2": 9, "variance 4": 16, "covariance 1 2": 3, "covariance 1 4": 2, "covariance 2 4": 6, "rho 1 2": 0.6, "rho 2 4": 0.5}
	for _, c := range []struct {
		kind string
		j, i int
		want float64
	}{
		{kind: "heterogeneous compound symmetry", j: 0, i: 2, want: 0.5},
		{kind: "heterogeneous autoregressive", j: 0, i: 2, want: 0.125}, // three weeks apart
		{kind: "antedependence", j: 0, i: 2, want: 0.3},
		{kind: "unstructured", j: 0, i: 1, want: 0.5},
		{kind: "unstructured", j: 1, i: 2, want: 0.5},
	} {
		if got := correlationOf(c.kind, rep, value, c.j, c.i); math.Abs(got-c.want) > 1e-12 {
			t.Errorf("%s, %d and %d: %g, not %g", c.kind, c.j, c.i, got, c.want)
		}
	}
}

// A mixed model's table of tests names times by their label, a share stands where no
// component is negative, and the correlation taken is marked in words.
func TestMixedTables(t *testing.T) {
	p := &layout.Plan{
		Protocol: &protocol.Protocol{Repeated: []protocol.Repeated{{Name: "week", On: "pen", Unit: "wk", At: []string{"1", "2"}, Values: []float64{1, 2}}}},
		Units:    []layout.Unit{{Name: "pen", Within: -1, N: 6}},
		Factors:  []layout.Factor{{Name: "diet", Label: "Diet", Levels: []string{"A", "B"}}},
	}
	r := &result.Response{Name: "gain", Label: "Gain",
		Model:       &result.Model{Method: "reml", Random: []string{"pen", "pen:week"}, DFMethod: "kenward-roger"},
		Tests:       []result.Test{{Source: "diet:week", DF: 1, ErrorDF: 7.25, F: 4, P: 0.08}},
		Components:  []result.Component{{Term: "pen", Estimate: 3, SE: 1}, {Term: "residual", Estimate: 1, SE: 0.5}},
		Correlation: &result.Correlation{Kind: "compound symmetry", Candidates: []result.Candidate{{Kind: "compound symmetry", Parameters: 2, AICc: 10, LogLikelihood: -3}, {Kind: "unstructured", AICc: result.NaN, LogLikelihood: result.NaN}}},
	}
	tests := Anova(p, r)
	if got := doc.Plain(tests.Rows[0].Cells[0].Text) + "|" + doc.Plain(tests.Rows[0].Cells[2].Text); got != "Diet × week|7.2" && got != "Diet × week|7.3" {
		t.Errorf("the test reads %q", got)
	}
	parts := Components(p, r)
	if got := doc.Plain(parts.Rows[1].Cells[0].Text) + "|" + doc.Plain(parts.Rows[0].Cells[3].Text); got != "Residual: weeks within pens|75.0" {
		t.Errorf("the components read %q", got)
	}
	tried := Correlations(p, r)
	if got := doc.Plain(tried.Rows[0].Cells[0].Text); got != "Compound symmetry (taken)" {
		t.Errorf("the correlation taken reads %q", got)
	}
	if doc.Plain(tried.Rows[1].Cells[3].Text) != "" {
		t.Error("what was not fitted has numbers")
	}
}
