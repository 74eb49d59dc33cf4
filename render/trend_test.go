package render

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"

	"penwright/analysis/result"
	"penwright/protocol"
	"penwright/protocol/layout"
	"penwright/render/figure"
)

// The curve is the least-squares polynomial, found here by QR on the powers themselves.
func TestTrend(t *testing.T) {
	x := []float64{0, 20, 45, 60, 110}
	y := []float64{863.1, 866.7, 900.2, 891.4, 880.0}
	polynomial := func(degree int) []float64 {
		a := mat.NewDense(len(x), degree+1, nil)
		for i := range x {
			for k := range degree + 1 {
				a.Set(i, k, math.Pow(x[i], float64(k)))
			}
		}
		var c mat.VecDense
		if err := c.SolveVec(a, mat.NewVecDense(len(y), y)); err != nil {
			t.Fatal(err)
		}
		return c.RawVector().Data
	}
	names := []string{"linear", "quadratic", "cubic"}
	for degree := 1; degree <= 3; degree++ {
		p := &layout.Plan{Protocol: &protocol.Protocol{}}
		p.Protocol.Analysis.Trend = degree
		r := &result.Response{}
		for k := 1; k <= degree; k++ {
			r.Contrasts = append(r.Contrasts, result.Contrast{Name: "yeast: " + names[k-1], Term: "yeast", Planned: true, Estimate: result.Number(polynomial(k)[k]), SE: 0.1})
		}
		var means []figure.Mean
		for i := range x {
			means = append(means, figure.Mean{X: x[i], Value: y[i]})
		}
		got := trend(p, r, "yeast", means)
		if len(got.Points) != 61 || got.Points[0].X != 0 || got.Points[60].X != 110 {
			t.Fatalf("degree %d: %d points", degree, len(got.Points))
		}
		c := polynomial(degree)
		for _, q := range got.Points {
			want := 0.0
			for k := range c {
				want += c[k] * math.Pow(q.X, float64(k))
			}
			if math.Abs(q.Y-want) > 1e-8*math.Abs(want) {
				t.Errorf("degree %d at %v: %v, want %v", degree, q.X, q.Y, want)
			}
		}
		// Coefficients of means of unequal precision are others; then there is no curve.
		r.Contrasts[degree-1].Estimate *= 1.001
		r.Contrasts[degree-1].SE /= 1e6
		if trend(p, r, "yeast", means).Points != nil {
			t.Errorf("degree %d: a curve that the results do not hold", degree)
		}
		if trend(p, r, "yeast", means[:degree+1]).Points != nil {
			t.Errorf("degree %d: a curve through all the means", degree)
		}
	}
}
