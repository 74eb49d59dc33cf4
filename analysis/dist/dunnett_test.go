package dist

import (
	"math"
	"math/rand/v2"
	"testing"
)

func equal(k int, lambda float64) []float64 {
	l := make([]float64, k)
	for i := range l {
		l[i] = lambda
	}
	return l
}

// control returns λ for treatments of n units and a control of n0.
func control(n0 float64, n ...float64) []float64 {
	l := make([]float64, len(n))
	for i, x := range n {
		l[i] = math.Sqrt(x / (x + n0))
	}
	return l
}

// Percentage points for equal numbers, computed independently; they round to
// Dunnett's one-sided (JASA 50 (1955) 1096, Table 1a) and two-sided tables
// (Biometrics 20 (1964) 482, Table II; the latter from memory).
func TestDunnettEqual(t *testing.T) {
	half := math.Sqrt(0.5)
	for _, tt := range []struct {
		side  Side
		p, df float64
		q     []float64 // for k = 2, 3, …
	}{
		{Greater, .05, 5, []float64{2.44037864023, 2.681423508299, 2.848445254529, 2.975553514871, 3.077769341794, 3.163021062149, 3.235994892283, 3.299686081704}},
		{Greater, .05, 10, []float64{2.150613826751, 2.337559069576, 2.465571782388, 2.562306944712, 2.639730101444, 2.704083849869, 2.759027381395, 2.80688479562}},
		{Less, .05, 20, []float64{2.027318387367, 2.192283462387, 2.304427589196, 2.388779384572, 2.45606995765, 2.511862886178, 2.559404130144, 2.60074779102}},
		{Greater, .05, inf, []float64{1.916331944688, 2.062083932923, 2.160333281155, 2.23381696087, 2.292193893159, 2.340438976372, 2.381440134426, 2.417017524596}},
		{Two, .05, 5, []float64{3.030235946578, 3.293154650829, 3.475893016256, 3.61511723094, 3.72710879045, 3.820503947217, 3.900423717781, 3.970148345744}},
		{Two, .05, 10, []float64{2.568338876032, 2.758996978374, 2.890480110337, 2.990290179423, 3.070432131103, 3.137207598854, 3.194327461885, 3.244157270608}},
		{Two, .05, 20, []float64{2.378689980181, 2.540349609942, 2.651029589573, 2.734677157429, 2.801640284429, 2.857313731578, 2.904858414514, 2.946281506127}},
		{Two, .05, inf, []float64{2.212127746579, 2.348970590339, 2.441770773198, 2.511463053471, 2.566996679938, 2.613001845821, 2.65217579949, 2.686223367374}},
	} {
		for i, want := range tt.q {
			needDigits(t, "equal numbers", DunnettQuantile(tt.p, equal(i+2, half), tt.df, tt.side), want, 11)
		}
	}
	for _, tt := range []struct {
		side  Side
		p, df float64
		k     int
		want  float64
	}{
		{Greater, .05, 30, 12, 2.63103854236}, {Greater, .05, 60, 20, 2.716338534549},
		{Two, .01, 10, 2, 3.531301196865}, {Two, .01, 10, 4, 3.883441272545}, {Two, .01, 10, 9, 4.279318296102},
		{Two, .01, 20, 2, 3.126700741765}, {Two, .01, 20, 4, 3.39538486906}, {Two, .01, 20, 9, 3.693715748109},
		{Two, .01, inf, 2, 2.794272696859}, {Two, .01, inf, 4, 2.997737884653}, {Two, .01, inf, 9, 3.218952828203},
		{Greater, .01, 20, 2, 2.812829312555}, {Greater, .01, 20, 4, 3.082150471699}, {Greater, .01, 20, 9, 3.378463881957},
		{Greater, .05, 2, 50, 7.744857267769}, {Two, .05, 2, 50, 9.87495412729}, {Greater, .05, 120, 50, 2.924351262027}, {Two, .05, 120, 50, 3.192937610714},
		{Two, .05, 8, 3, 2.879661505120}, {Greater, .05, 8, 3, 2.416455206888},
	} {
		needDigits(t, "equal numbers", DunnettQuantile(tt.p, equal(tt.k, half), tt.df, tt.side), tt.want, 11)
	}
}

// Unequal numbers: computed independently (nothing printed reaches these digits).
func TestDunnettUnequal(t *testing.T) {
	rootK := func(k int) []float64 { // control of n√k
		return equal(k, math.Sqrt(1/(1+math.Sqrt(float64(k)))))
	}
	for _, tt := range []struct {
		side   Side
		p, df  float64
		lambda []float64
		want   float64
	}{
		{Two, .05, 12, control(6, 4, 5), 2.513482903596}, {Two, .01, 12, control(6, 4, 5), 3.396817944865}, {Greater, .05, 12, control(6, 4, 5), 2.12107801855},
		{Two, .05, 28, control(12, 6, 6, 6, 3), 2.630869573864}, {Less, .05, 28, control(12, 6, 6, 6, 3), 2.314501763108},
		{Two, .05, 24, control(4, 4, 8, 12), 2.467660017683}, {Greater, .01, 24, control(4, 4, 8, 12), 2.887022325234},
		{Two, .05, 20, rootK(4), 2.691408217286}, {Two, .05, 30, rootK(9), 2.937751514857},
	} {
		needDigits(t, "unequal numbers", DunnettQuantile(tt.p, tt.lambda, tt.df, tt.side), tt.want, 11)
	}
}

// Second roads: one comparison is t; correlations of zero give the studentized maximum
// modulus; P is that of two comparisons by the bivariate normal quadrant
// (Sheppard 1899: P(X>0, Y>0) = ¼ + arcsin ρ / 2π, so P(max > 0) = ¾ − arcsin ρ / 2π).
func TestDunnettSpecialCases(t *testing.T) {
	for _, l := range []float64{-.9, 0, .3, .7071, .99} {
		one, two := NewDunnett([]float64{l}, Greater), NewDunnett([]float64{l}, Two)
		for _, df := range []float64{1, 2, 7, 40, 1e5, inf} {
			for _, x := range []float64{.1, 1, 2.5, 6, 14, 100} {
				if p := TUpper(x, df); p > 1e-290 {
					needDigits(t, "one comparison", one.Upper(x, df), p, 11)
					needDigits(t, "one comparison, below", one.Upper(-x, df), 1-p, 11)
					needDigits(t, "one comparison, two sides", two.Upper(x, df), 2*p, 11)
				}
			}
		}
	}
	for _, l := range [][2]float64{{.2, .9}, {.999, .999}, {-.6, .8}, {.9999, -.9999}} {
		d := NewDunnett(l[:], Greater)
		for _, df := range []float64{1, 6, inf} {
			needDigits(t, "quadrant", d.Upper(0, df), .75-math.Asin(l[0]*l[1])/(2*math.Pi), 11)
		}
	}
	for _, df := range []float64{2, 11, inf} {
		for _, x := range []float64{.5, 2, 5} {
			needDigits(t, "no correlation", DunnettUpper(x, equal(6, 0), df, Two), MaximumModulusUpper(x, 6, df), 11)
		}
	}
}

func TestDunnettSimulated(t *testing.T) {
	random := rand.New(rand.NewPCG(3, 4))
	const draws = 60_000
	n0, n := 3.0, []float64{2, 9, 30, 4}
	lambda := control(n0, n...)
	for _, tt := range []struct {
		side Side
		df   int
		x    float64
	}{{Two, 4, 2.5}, {Greater, 4, 2.2}, {Two, 17, 2.1}, {Greater, 17, .4}, {Greater, 9, -.5}} {
		count := 0
		for range draws {
			var s float64
			for range tt.df {
				x := random.NormFloat64()
				s += x * x
			}
			most := -inf
			m0 := random.NormFloat64() / math.Sqrt(n0)
			for _, m := range n {
				x := (random.NormFloat64()/math.Sqrt(m) - m0) / math.Sqrt(1/m+1/n0)
				if tt.side == Two {
					x = math.Abs(x)
				}
				most = math.Max(most, x)
			}
			if most > tt.x*math.Sqrt(s/float64(tt.df)) {
				count++
			}
		}
		p := DunnettUpper(tt.x, lambda, float64(tt.df), tt.side)
		if got := float64(count) / draws; math.Abs(got-p) > 4*math.Sqrt(p*(1-p)/draws) {
			t.Errorf("side %d df=%d: simulated %.5f, computed %.5f", tt.side, tt.df, got, p)
		}
	}
}

func TestDunnettInverts(t *testing.T) {
	many := make([]float64, 20)
	for i := range many {
		many[i] = math.Sqrt(float64(i+1) / float64(i+9))
	}
	for _, lambda := range [][]float64{{.5}, control(5, 5, 6, 40), many, {.999, .3}} {
		for _, side := range []Side{Two, Greater} {
			d := NewDunnett(lambda, side)
			for w := -9.9; w < 16; w += .583 {
				if w > 0 || side == Greater {
					needDigits(t, "interpolated", d.tail.at(w), d.tail.tail(w), 10.5)
				}
			}
			for _, df := range []float64{1, 2, 13.4, 300, inf} {
				for _, p := range []float64{1e-12, 1e-4, .05, .5, .9, .999} {
					needDigits(t, "P(t(p))", d.Upper(d.Quantile(p, df), df), p, 10)
				}
			}
		}
	}
	d := NewDunnett([]float64{.5, .6}, Greater)
	for i, x := range []float64{d.Upper(math.NaN(), 3), d.Upper(2, 0), d.Quantile(.1, -1), d.Quantile(2, 5)} {
		if !math.IsNaN(x) {
			t.Errorf("case %d: %g, want NaN", i, x)
		}
	}
	if d.Upper(-inf, 3) != 1 || d.Upper(inf, 3) != 0 || d.Quantile(1, 3) != -inf || d.Quantile(0, 3) != inf {
		t.Error("ends of the range")
	}
}

// Hahn & Hendrickson, Biometrika 58 (1971) 323; Stoline & Ury, Technometrics 21 (1979) 87
// (from memory, two to three decimals); the digits computed independently.
func TestMaximumModulus(t *testing.T) {
	for _, tt := range []struct {
		k             int
		df, five, one float64
	}{
		{2, 5, 3.090523260768, 4.700312011167}, {3, 5, 3.399240078453, 5.105633815851}, {5, 5, 3.78901719477, 5.625198264756},
		{10, 5, 4.311637982216, 6.333500651862}, {20, 5, 4.818473197931, 7.030791500418},
		{2, 10, 2.609104233581, 3.56685709446}, {3, 10, 2.828855230225, 3.80133726517}, {5, 10, 3.102527444349, 4.098373055243},
		{10, 10, 3.467411353417, 4.502655559488}, {20, 10, 3.823094452598, 4.905203289604},
		{2, 20, 2.410927341821, 3.148862084089}, {3, 20, 2.594130060426, 3.323304653709}, {5, 20, 2.818773718351, 3.540417056929},
		{10, 20, 3.113968958471, 3.830969874843}, {20, 20, 3.399261279768, 4.117317717662},
		{2, 60, 2.292178436528, 0}, {3, 60, 2.453594412329, 0}, {5, 60, 2.648551049562, 0}, {10, 60, 2.900180291807, 0}, {20, 60, 3.139233959479, 0},
		{2, inf, 2.236476644558, 2.806225314688}, {3, inf, 2.387737887071, 0}, {5, inf, 2.568763168011, 0}, {10, inf, 2.799625219301, 0},
		{20, inf, 3.01599453349, 0}, {50, 2, 11.22270860408, 0}, {50, 120, 3.360755060421, 0},
	} {
		needDigits(t, "5 %", MaximumModulusQuantile(.05, tt.k, tt.df), tt.five, 11)
		if tt.one != 0 {
			needDigits(t, "1 %", MaximumModulusQuantile(.01, tt.k, tt.df), tt.one, 11)
		}
	}
	for _, x := range []float64{.3, 2, 9} {
		needDigits(t, "one value", MaximumModulusUpper(x, 1, 7), TTwoSided(x, 7), 12)
		needDigits(t, "independent", MaximumModulusUpper(x, 3, inf), -math.Expm1(3*math.Log1p(-TTwoSided(x, inf))), 12)
	}
}

// H. L. Harter, Biometrics 16 (1960) 671 (from memory, three decimals); the digits computed
// independently. The list is of the plain quantiles; the critical value is the
// greatest so far.
func TestDuncan(t *testing.T) {
	for _, tt := range []struct {
		df float64
		q  []float64 // for 2, 3, …
	}{
		{5, []float64{3.635351695147, 3.748500362075, 3.796455262873, 3.81369642354, 3.814435343334, 3.805614401484, 3.791003471899, 3.772803348878, 3.75236772245}},
		{10, []float64{3.151064183329, 3.292833106886, 3.376282775215, 3.429664205742, 3.465185526194, 3.489148460921, 3.505187080742, 3.515563272868, 3.521765890034}},
		{20, []float64{2.949997797738, 3.096506482338, 3.189615956525, 3.254647796889, 3.302599719239, 3.339198541341, 3.367784600153, 3.390464952335, 3.408647417503}},
		{inf, []float64{2.771807648699, 2.918422347826, 3.016654073521, 3.089319392858, 3.146310887077, 3.192781125238, 3.231740335662, 3.265092431058, 3.294114034384}},
	} {
		d := NewDuncan(10)
		var most float64
		for i, q := range tt.q {
			most = math.Max(most, q)
			got := d.Quantile(.05, i+2, tt.df)
			needDigits(t, "Duncan", got, most, 10.5)
			needDigits(t, "level", d.P(got, i+2, tt.df), .05, 10)
		}
	}
	d := NewDuncan(5)
	for i, want := range []float64{4.482028396473, 4.670801450361, 4.789406810474, 4.871165056728} {
		needDigits(t, "1 %", d.Quantile(.01, i+2, 10), want, 10.5)
	}
	// Plain quantiles of many means; that of 100 stands where the levels still rise.
	level := func(r int) float64 { return 1 - math.Pow(.95, float64(r-1)) }
	needDigits(t, "r=20, 5", StudentizedRangeQuantile(level(20), 20, 5), 3.526540245614, 10)
	needDigits(t, "r=20, 20", StudentizedRangeQuantile(level(20), 20, 20), 3.473207095698, 10)
	needDigits(t, "r=100", StudentizedRangeQuantile(level(100), 100, inf), 3.734949399084, 10)
}

func BenchmarkDunnettUpper(b *testing.B) {
	lambda := control(8, 5, 5, 4, 5, 6)
	for b.Loop() {
		DunnettUpper(2.2, lambda, 27, Two)
	}
}

func BenchmarkDunnettFamily(b *testing.B) {
	n := make([]float64, 50)
	for i := range n {
		n[i] = float64(i + 3)
	}
	lambda := control(8, n...)
	for b.Loop() {
		d := NewDunnett(lambda, Two)
		d.Quantile(.05, 200)
		for i := range 50 {
			d.Upper(float64(i)/10, 200)
		}
	}
}
