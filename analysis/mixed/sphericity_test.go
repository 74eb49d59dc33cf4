package mixed

import "testing"

// TestSphere: Field (2005), Maxwell & Delaney and Winer (1971, table 4.3-1), from memory;
// printed .533 .666, .136 and 11.41, .047; .610 .725, .243, 13.77 and .018.
func TestSphere(t *testing.T) {
	for _, c := range []struct {
		y                      [][]float64
		gg, hf, w, chi, second float64
	}{
		{[][]float64{{8, 7, 1, 6}, {9, 5, 2, 5}, {6, 2, 3, 8}, {5, 3, 1, 9}, {8, 4, 5, 8}, {7, 5, 6, 7}, {10, 2, 7, 2}, {12, 6, 8, 1}},
			.532845552798, .665763614097, .136248029373, 11.4059814341, .0467733485556},
		{[][]float64{{108, 96, 110, 122}, {103, 117, 127, 133}, {96, 107, 106, 107}, {84, 85, 92, 99}, {118, 125, 125, 116}, {110, 107, 96, 91},
			{129, 128, 123, 128}, {90, 84, 101, 113}, {84, 104, 100, 88}, {96, 100, 103, 105}, {105, 114, 105, 112}, {113, 117, 132, 130}},
			.609544496805, .724850248656, .242647236842, 13.7680918532, .0177036979179},
		{[][]float64{{30, 28, 16, 34}, {14, 18, 10, 22}, {24, 20, 18, 30}, {38, 34, 20, 44}, {26, 28, 14, 30}}, .604874041621, 1, .186495285245, 0, 0},
	} {
		n, k := len(c.y), len(c.y[0])
		r := make([][]float64, n)
		for j := range k {
			m := 0.0
			for i := range n {
				m += c.y[i][j] / float64(n)
			}
			for i := range n {
				r[i] = append(r[i], c.y[i][j]-m)
			}
		}
		s := Sphere(r, n-1)
		near(t, "Greenhouse-Geisser", s.GreenhouseGeisser, c.gg, 1e-10)
		near(t, "Huynh-Feldt", s.HuynhFeldt, c.hf, 1e-10)
		near(t, "W", s.W, c.w, 1e-10)
		if c.chi > 0 {
			near(t, "χ²", s.ChiSquared, c.chi, 1e-10)
			near(t, "P", s.P, c.second, 1e-9)
		}
	}
}
