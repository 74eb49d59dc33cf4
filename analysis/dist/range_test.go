package dist

import (
	"math"
	"math/rand/v2"
	"sync"
	"testing"
)

// Upper percentage points, computed independently; they round to those of H. L. Harter,
// Ann. Math. Statist. 31 (1960) 1122, Table 3, to its four figures (±1 unit).
var rangePoints = []struct {
	p, df float64
	r     int
	q     []float64 // for r, r+1, …
}{
	{.05, 5, 3, []float64{4.601726054363, 5.218324875204, 5.673124435464, 6.032902708726, 6.329901069776, 6.582300878241, 6.80139787988, 6.994697767888}},
	{.05, 10, 3, []float64{3.876776750013, 4.326582115731, 4.654292997855, 4.912015749343, 5.124166095296, 5.304238110407, 5.460498740283, 5.59838646647}},
	{.05, 20, 3, []float64{3.57793472522, 3.958293560945, 4.231856748997, 4.445236663676, 4.619908121284, 4.767584230231, 4.895365421235, 5.007882667595}},
	{.05, inf, 3, []float64{3.314493155398, 3.633159574903, 3.857655510379, 4.030092053181, 4.169554155007, 4.286309409349, 4.386509115495, 4.474124221726}},
	{.01, 5, 3, []float64{6.975736631249, 7.804155687307, 8.421490577748, 8.91310713829, 9.320882069168, 9.66868910548, 9.971480943012, 10.23925602851}},
	{.01, 10, 3, []float64{5.270161537069, 5.768591433538, 6.136093313396, 6.427535553712, 6.668969751032, 6.874936807096, 7.05441503735, 7.213349202851}},
	{.01, 20, 3, []float64{4.639220082834, 5.018016131511, 5.293252519239, 5.509541656105, 5.687629515958, 5.838913606117, 5.970343853188, 6.086475660585}},
	{.01, inf, 3, []float64{4.12030320646, 4.402800861449, 4.602821042202, 4.757047249408, 4.882166194996, 4.987182689089, 5.077505681094, 5.15663496009}},
	{.10, 1, 3, []float64{13.43669932118}}, {.05, 1, 3, []float64{26.9755298695}}, {.05, 1, 10, []float64{49.07102242371}},
	{.05, 2, 3, []float64{8.330782645637}}, {.05, 2, 10, []float64{13.98849114006}}, {.01, 2, 10, []float64{31.68935236939}},
	{.05, 3, 3, []float64{5.909598453393}}, {.05, 4, 5, []float64{6.287026999186}}, {.05, 18, 6, []float64{4.494420094451}},
	{.05, 15, 4, []float64{4.075973736607}}, {.05, 33, 12, []float64{4.96540693522}}, {.005, 12, 4, []float64{6.068243666548}},
	{.001, 10, 3, []float64{7.410580838024}}, {.001, 20, 10, []float64{7.576303450819}}, {.05, 10, 20, []float64{6.466985023716}},
	{.05, 20, 20, []float64{5.713625466243}}, {.05, inf, 20, []float64{5.011688794118}}, {.01, inf, 20, []float64{5.645214697986}},
	{.05, 60, 50, []float64{5.957572449111}}, {.01, 120, 50, []float64{6.466372626093}}, {.05, 20, 100, []float64{7.186892149411}},
	{.05, inf, 100, []float64{6.084637537173}}, {.05, 30, 200, []float64{7.359729099894}}, {.05, inf, 200, []float64{6.495913263935}},
	{.01, 5, 200, []float64{16.80020506241}},
	{1e-6, 12, 5, []float64{15.62889152874}}, {1e-12, 30, 5, []float64{18.15413881465}}, {1e-12, 60, 20, []float64{14.66499772145}},
}

func TestStudentizedRange(t *testing.T) {
	for _, tt := range rangePoints {
		for i, want := range tt.q {
			needDigits(t, "q", StudentizedRangeQuantile(tt.p, tt.r+i, tt.df), want, 11)
			needDigits(t, "P", StudentizedRangeUpper(want, tt.r+i, tt.df), tt.p, 10)
		}
	}
}

// The range of two is √2 |t|.
func TestStudentizedRangeOfTwo(t *testing.T) {
	needDigits(t, "q.05(2,1)", StudentizedRangeQuantile(.05, 2, 1), 17.96928706418752, 12)
	needDigits(t, "q.05(2,120)", StudentizedRangeQuantile(.05, 2, 120), 2.800044431422444, 12)
	d := NewStudentizedRange(2)
	for _, df := range []float64{.7, 1, 2, 3.5, 8, 30, 200, 5000, 1e6, 1e9, 1e12, inf} {
		for _, x := range []float64{1e-6, .01, .3, 1, 2, 4, 7, 12, 25, 300, 1e6, 1e13} {
			want := TTwoSided(x, df)
			if want < 1e-290 {
				continue
			}
			need := 11.0
			if df == 1e12 {
				need = 9.5 // the integrand itself holds no more there
			}
			needDigits(t, "range of two", d.Upper(x*math.Sqrt2, df), want, need)
		}
	}
}

// Second road: the range of three normals is a single integral of another form,
// W > w, by Simpson's rule on the distribution of the two gaps; and the interpolated
// tail against the integral it interpolates.
func TestNormalRange(t *testing.T) {
	// P(W ≤ w) for three, McKay & Pearson (Biometrika 25 (1933) 415):
	// density 3√2 φ(w/√2) {2Φ(w/√6) − 1}.
	density := func(w float64) float64 {
		return 3 * math.Sqrt2 / math.Sqrt(2*math.Pi) * math.Exp(-w*w/4) * math.Erf(w/math.Sqrt(12))
	}
	three := newRange(3)
	for _, w := range []float64{.1, 1, 2.5, 4, 8} {
		const n = 40000
		h := 20.0 / n
		sum := density(w) + density(w+20)
		for i := 1; i < n; i++ {
			sum += float64(2+2*(i%2)) * density(w+float64(i)*h)
		}
		needDigits(t, "range of three", three.upper(w), sum*h/3, 11)
	}
	for _, r := range []int{2, 3, 9, 12, 13, 40, 200, 1000, 10000} {
		d, fine := NewStudentizedRange(r), newRangeGrid(r, .03125)
		for w := .003; w < 16; w += .137 {
			needDigits(t, "interpolated", d.tail.at(w), d.tail.tail(w), 11)
			needDigits(t, "half the step", d.tail.tail(w), fine.upper(w), 10.5)
		}
	}
}

func TestStudentizedRangeSimulated(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 2))
	const draws = 60_000
	for _, tt := range []struct {
		r  int
		df int
		q  float64
	}{{4, 3, 6}, {7, 11, 4.5}, {30, 20, 5.5}} {
		count := 0
		for range draws {
			var s float64
			for range tt.df {
				x := random.NormFloat64()
				s += x * x
			}
			least, most := inf, -inf
			for range tt.r {
				x := random.NormFloat64()
				least, most = math.Min(least, x), math.Max(most, x)
			}
			if most-least > tt.q*math.Sqrt(s/float64(tt.df)) {
				count++
			}
		}
		p := StudentizedRangeUpper(tt.q, tt.r, float64(tt.df))
		if got := float64(count) / draws; math.Abs(got-p) > 4*math.Sqrt(p*(1-p)/draws) {
			t.Errorf("r=%d df=%d: simulated %.5f, computed %.5f", tt.r, tt.df, got, p)
		}
	}
}

func TestStudentizedRangeInverts(t *testing.T) {
	for _, r := range []int{2, 5, 37, 200} {
		d := NewStudentizedRange(r)
		for _, df := range []float64{1, 2.6, 9, 77, 4000, inf} {
			for _, p := range []float64{1e-12, 1e-5, .01, .2, .5, .8, .999} {
				needDigits(t, "P(q(p))", d.Upper(d.Quantile(p, df), df), p, 10)
			}
		}
	}
	d := NewStudentizedRange(4)
	for i, x := range []float64{d.Upper(math.NaN(), 3), d.Upper(2, 0), d.Quantile(.1, -1), d.Quantile(-1, 5), d.Quantile(math.NaN(), 5)} {
		if !math.IsNaN(x) {
			t.Errorf("case %d: %g, want NaN", i, x)
		}
	}
	if d.Upper(0, 3) != 1 || d.Upper(-2, 3) != 1 || d.Upper(inf, 3) != 0 || d.Quantile(0, 3) != inf || d.Quantile(1, 3) != 0 {
		t.Error("ends of the range")
	}
}

// One value serves many goroutines, with the same results as one.
func TestStudentizedRangeShared(t *testing.T) {
	d := NewStudentizedRange(6)
	var got [8]float64
	var group sync.WaitGroup
	for i := range got {
		group.Go(func() { got[i] = d.Upper(1+float64(i%4), 11) })
	}
	group.Wait()
	for i, p := range got {
		if want := StudentizedRangeUpper(1+float64(i%4), 6, 11); p != want {
			t.Errorf("shared %g, alone %g", p, want)
		}
	}
}

func BenchmarkStudentizedRangeUpper(b *testing.B) {
	for b.Loop() {
		StudentizedRangeUpper(4.2, 10, 27)
	}
}

func BenchmarkStudentizedRangeFamily(b *testing.B) {
	d := NewStudentizedRange(200)
	for i := 0; b.Loop(); i++ {
		d.Upper(1+float64(i%1000)/100, 398)
	}
}

func BenchmarkStudentizedRangeQuantile(b *testing.B) {
	for b.Loop() {
		StudentizedRangeQuantile(.05, 10, 27)
	}
}
