package power

import "gonum.org/v1/gonum/integrate/quad"

// integrate is ∫ f over [a, b] by Gauss-Legendre rules of 24 points on panels that grow
// from a small one at a, where f may rise like a low power, to the width of a sixteenth.
func integrate(f func(float64) float64, a, b float64) float64 {
	width := (b - a) / 16
	edges := []float64{a}
	for _, share := range []float64{1.0 / 256, 1.0 / 64, 1.0 / 16, 1.0 / 4} {
		edges = append(edges, a+share*width)
	}
	for k := 1; k <= 16; k++ {
		edges = append(edges, a+float64(k)*width)
	}
	sum := 0.0
	for k := 1; k < len(edges); k++ {
		sum += quad.Fixed(f, edges[k-1], edges[k], 24, quad.Legendre{}, 0)
	}
	return sum
}
