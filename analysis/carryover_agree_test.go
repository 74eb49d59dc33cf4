package analysis

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"
	"testing/fstest"

	"gonum.org/v1/gonum/mat"

	"penwright/analysis/result"
)

const madeUpHead = "protocol = 1\n[trial]\ncode = \"M\"\ntitle = \"Made up\"\nobjective = \"Made up.\"\n[randomization]\nmethod = \"made up\"\n"

func madeUp(protocol, data string) fstest.MapFS {
	return fstest.MapFS{"protocol.toml": &fstest.MapFile{Data: []byte(madeUpHead + protocol + "[data]\nfile = \"data.csv\"\n")}, "data.csv": &fstest.MapFile{Data: []byte(data)}}
}

// TestCarryOverAgree holds crossovers with lost records against dense formulae: a treatment
// counts for the next period though its own record is lost.
func TestCarryOverAgree(t *testing.T) {
	n := 40
	if testing.Short() {
		n = 10
	}
	tally := map[string]int{}
	for k := range n {
		r := rand.New(rand.NewPCG(5, uint64(k)))
		treatments := 3 + r.IntN(2)
		var sequences [][]int
		for i := range treatments {
			var s, mirror []int
			for j := range treatments {
				// Williams squares: 0 1 n−1 2 n−2 … and, for odd n, the mirror.
				first := (j + 1) / 2
				if j%2 == 0 {
					first = (treatments - j/2) % treatments
				}
				s = append(s, (first+i)%treatments)
			}
			sequences = append(sequences, s)
			if treatments%2 == 1 {
				mirror = slices.Clone(s)
				slices.Reverse(mirror)
				sequences = append(sequences, mirror)
			}
		}
		each := 1 + r.IntN(2)
		cows := each * len(sequences)
		periods := treatments
		var p, d strings.Builder
		levels := []string{"a", "b", "c", "d"}[:treatments]
		fmt.Fprintf(&p, "[[factor]]\nname = \"diet\"\nlevels = [\"%s\"]\n[[unit]]\nname = \"cow\"\ncount = %d\n[[unit]]\nname = \"period\"\ncount = %d\n", strings.Join(levels, "\", \""), cows, periods)
		p.WriteString("[[unit]]\nname = \"sample\"\ncrosses = [\"cow\", \"period\"]\nreceives = [\"diet\"]\n[carryover]\nfactor = \"diet\"\nalong = \"period\"\non = \"cow\"\n")
		p.WriteString("[analysis]\ncomparison = \"none\"\n[[response]]\nname = \"y\"\nkind = \"continuous\"\n")
		d.WriteString("cow,period,diet,y\n")
		m := &mixedReckoning{}
		var cow, period, diet, before, sequence []int
		for c := range cows {
			e := 1.5 * r.NormFloat64()
			for q := range periods {
				s := sequences[c%len(sequences)]
				y := math.Round(100*(10+e+r.NormFloat64())) / 100
				fmt.Fprintf(&d, "%d,%d,%s,", c+1, q+1, levels[s[q]])
				if r.Float64() < 0.08 {
					d.WriteString("NA\n")
					continue
				}
				fmt.Fprintf(&d, "%g\n", y)
				m.y = append(m.y, y)
				last := -1
				if q > 0 {
					last = s[q-1]
				}
				cow, period, diet, before, sequence = append(cow, c), append(period, q), append(diet, s[q]), append(before, last), append(sequence, c%len(sequences))
			}
		}
		rows := len(m.y)
		all := []mixedColumn{{ones(rows), func(int, []int) float64 { return 1 }}}
		add := func(class []int, levels int, weight func(t, at, l int) float64) {
			for l := range levels {
				v := make([]float64, rows)
				for i := range v {
					if class[i] == l {
						v[i] = 1
					}
				}
				all = append(all, mixedColumn{v, func(t int, at []int) float64 { return weight(t, at[0], l) }})
			}
		}
		even := func(n int) func(t, at, l int) float64 { return func(int, int, int) float64 { return 1 / float64(n) } }
		// Function 0 is a mean of a diet, 1 what a diet leaves behind.
		own := func(of int, other float64) func(t, at, l int) float64 {
			return func(t, at, l int) float64 {
				switch {
				case t != of:
					return other / float64(treatments)
				case at == l:
					return 1
				}
				return 0
			}
		}
		add(period, periods, even(periods))
		add(diet, treatments, own(0, 1))
		add(before, treatments, own(1, float64(periods-1)/float64(periods)))
		if each > 1 {
			add(sequence, len(sequences), even(len(sequences)))
		}
		m.take(all)
		eye := mat.NewSymDense(rows, nil)
		for i := range rows {
			eye.SetSym(i, i, 1)
		}
		m.zz, m.names = []*mat.SymDense{sameClass(cow), eye}, []string{"cow", "residual"}

		rs, found := runFiles(t, madeUp(p.String(), d.String()))
		c := &check{}
		c.wellFormed(rs)
		if found.HasErrors() {
			t.Errorf("trial %d: %s", k, found[0].Message)
			continue
		}
		out := &rs.Responses[0]
		th, free := []float64{0, 0}, []int{}
		for i, x := range out.Components {
			th[i] = float64(x.Estimate)
			if !x.Boundary {
				free = append(free, i)
			}
		}
		best := m.likelihood(th)
		if math.Abs(best-float64(out.Model.LogLikelihood)) > 1e-7*math.Abs(best) {
			c.fault("log likelihood %.10g, want %.10g", float64(out.Model.LogLikelihood), best)
		}
		for _, i := range free {
			for _, f := range []float64{0.999, 1.001} {
				x := slices.Clone(th)
				x[i] *= f
				if m.likelihood(x) > best+1e-9 {
					c.fault("the likelihood rises with %s", m.names[i])
				}
			}
		}
		if !m.infer(th, free) {
			t.Fatal("singular")
		}
		test := func(name string, of int) {
			var l []float64
			for i := range treatments - 1 {
				a, b := m.mean(of, []int{i}), m.mean(of, []int{treatments - 1})
				if of == 1 {
					// What one diet leaves behind is told only against that of another.
					a, b = m.difference(all, of, i, treatments-1), make([]float64, len(m.x))
				}
				for j := range a {
					l = append(l, a[j]-b[j])
				}
			}
			f, df := m.test(mat.NewDense(treatments-1, len(m.x), l))
			for _, x := range out.Tests {
				if x.Source == name {
					tally[name]++
					if x.DF != treatments-1 || math.Abs(float64(x.F)-f) > 1e-5*f || math.Abs(float64(x.ErrorDF)-df) > 1e-4*df {
						c.fault("%s: %.10g on %d, %.10g; want %.10g on %.10g", name, float64(x.F), x.DF, float64(x.ErrorDF), f, df)
					}
				}
			}
		}
		test("diet", 0)
		test("carry-over", 1)
		for i, x := range out.Means {
			w := m.mean(0, []int{i})
			v := mat.Dot(mat.NewVecDense(len(w), w), m.beta)
			l := mat.NewDense(1, len(w), w)
			se := math.Sqrt(product2(product2(l, m.adjusted), l.T()).At(0, 0))
			if math.Abs(float64(x.Mean)-v) > 1e-6*se || math.Abs(float64(x.SE)-se) > 1e-5*se {
				c.fault("mean %v: %g ± %g, want %g ± %g", x.Levels, x.Mean, x.SE, v, se)
			}
		}
		if len(c.faults) > 0 {
			t.Errorf("trial %d\n\t%s\n%s", k, strings.Join(c.faults, "\n\t"), d.String())
		}
	}
	if tally["diet"] < n/2 || tally["carry-over"] < n/2 {
		t.Errorf("held %v", tally)
	}
}

// difference gives the difference of two functions over kept columns, for functions that are
// none of the rows themselves.
func (m *mixedReckoning) difference(all []mixedColumn, of, i, j int) []float64 {
	b := &mixedReckoning{y: m.y}
	var d []mixedColumn
	for _, c := range all {
		d = append(d, mixedColumn{c.value, func(int, []int) float64 { return c.weight(of, []int{i}) - c.weight(of, []int{j}) }})
	}
	b.take(d)
	return b.mean(0, nil)
}

// TestMixedRules holds rules of mixed models that no other test meets.
func TestMixedRules(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	const factor = "[[factor]]\nname = \"a\"\nlevels = [0, 1, 3]\n"
	const response = "[[response]]\nname = \"y\"\nkind = \"continuous\"\n"
	run := func(protocol, data string) (*result.Response, string) {
		rs, found := runFiles(t, madeUp(protocol, data))
		c := &check{}
		c.wellFormed(rs)
		if len(c.faults) > 0 {
			t.Error(c.faults)
		}
		if found.HasErrors() {
			return &rs.Responses[0], found[0].Code + " " + found[0].Key
		}
		return &rs.Responses[0], ""
	}
	noted := func(x *result.Response, code string) bool {
		return slices.ContainsFunc(x.Notes, func(n result.Note) bool { return n.Code == code })
	}
	var d strings.Builder
	means := [3]float64{}
	d.WriteString("site,block,plot,a,y\n")
	blocks := []int{2, 3, 2}
	for s, n := range blocks {
		for b := range n {
			for p := range 3 {
				y := math.Round(100*(10*float64(s)+r.NormFloat64())) / 100
				fmt.Fprintf(&d, "%d,%d,%d,%d,%g\n", s+1, b+1, p+1, []int{0, 1, 3}[p], y)
				means[p] += y / float64(3*n)
			}
		}
	}
	sites := factor + "[[unit]]\nname = \"site\"\ncount = 3\ninteracts = true\nrandom = false\n[[unit]]\nname = \"block\"\nwithin = \"site\"\ncount = [2, 3, 2]\n[[unit]]\nname = \"plot\"\nwithin = \"block\"\ncount = 3\nreceives = [\"a\"]\n"
	x, why := run(sites+response, d.String())
	if why != "" {
		t.Fatal(why)
	}
	for i, m := range x.Means { // sites count alike, however many blocks they have
		if !(math.Abs(float64(m.Mean)-means[i]) < 1e-9) {
			t.Errorf("mean %v over fixed sites: %g, want %g", m.Levels, m.Mean, means[i])
		}
	}
	if len(x.Contrasts) != 2 || x.Contrasts[0].Name != "a: linear" || !x.Contrasts[0].P.Known() {
		t.Errorf("trends in a mixed model: %v", x.Contrasts)
	}
	// Unweighted means of sites have covariance in proportion to the identity: the linear
	// trend is that of least squares over them.
	linear := (means[0]*(0-4./3) + means[1]*(1-4./3) + means[2]*(3-4./3)) / (14. / 3)
	if len(x.Contrasts) > 0 && math.Abs(float64(x.Contrasts[0].Estimate)-linear) > 1e-9 {
		t.Errorf("linear trend %g, want %g", x.Contrasts[0].Estimate, linear)
	}
	// A variance for each treatment does not go with correlated records, and says so.
	d.Reset()
	d.WriteString("pen,week,a,y\n")
	for p := range 12 {
		for w := range 3 {
			fmt.Fprintf(&d, "%d,%d,%d,%.2f\n", p+1, w, []int{0, 1, 3}[p%3], r.NormFloat64())
		}
	}
	pens := func(correlation, analysis string) string {
		return factor + "[[unit]]\nname = \"pen\"\ncount = 12\nreceives = [\"a\"]\n[[repeated]]\nname = \"week\"\non = \"pen\"\nat = [0, 1, 2]\ncorrelation = \"" + correlation + "\"\n[analysis]\n" + analysis + response + "repeated = \"week\"\n"
	}
	if _, why = run(pens("autoregressive", "variance_by = \"a\"\n"), d.String()); why != "not-carried-out analysis.variance_by" {
		t.Errorf("variance_by with correlated records: %q", why)
	}
	if x, why = run(pens("compound symmetry", "variance_by = \"a\"\n"), d.String()); why != "" || len(x.Correlation.Parameters) != 3 {
		t.Errorf("variance_by with compound symmetry: %q, %v", why, x.Correlation)
	}
	// Limits by profile where asked, and a word where there are none.
	x, why = run(pens("compound symmetry", "limits = \"profile\"\n"), d.String())
	if why != "" || !noted(x, "profile-limits") || x.Components[0].Lower == nil || !(*x.Components[1].Lower < x.Components[1].Estimate && x.Components[1].Estimate < *x.Components[1].Upper) {
		t.Errorf("profile limits: %q, %v", why, x.Components)
	}
	if x, _ = run(pens("split plot in time", "limits = \"profile\"\n"), d.String()); x.Model.Method != "strata" || !noted(x, "no-profile-limits") {
		t.Errorf("no word on limits of components of strata")
	}
	// Balanced, compound symmetry and the strata of a split plot in time are one analysis.
	strata, _ := run(pens("split plot in time", ""), d.String())
	symmetric, _ := run(pens("compound symmetry", ""), d.String())
	for i, s := range strata.Tests {
		m := symmetric.Tests[i]
		if s.Source != m.Source || math.Abs(float64(s.F-m.F)) > 1e-6*float64(s.F) || math.Abs(float64(s.ErrorDF-m.ErrorDF)) > 1e-5*float64(s.ErrorDF) {
			t.Errorf("split plot in time %v, compound symmetry %v", s, m)
		}
	}
	// What is left behind by a treatment that nobody knows is not nothing.
	cows := "[[factor]]\nname = \"a\"\nlevels = [\"p\", \"q\", \"r\"]\n[[unit]]\nname = \"cow\"\ncount = 6\n[[unit]]\nname = \"period\"\ncount = 3\n[[unit]]\nname = \"sample\"\ncrosses = [\"cow\", \"period\"]\nreceives = [\"a\"]\n[carryover]\nfactor = \"a\"\nalong = \"period\"\non = \"cow\"\n"
	d.Reset()
	d.WriteString("cow,period,a,y\n")
	for c, s := range []string{"pqr", "qrp", "rpq", "prq", "qpr", "rqp"} {
		for q, a := range s {
			if c != 1 || q != 1 {
				fmt.Fprintf(&d, "%d,%d,%c,%.2f\n", c+1, q+1, a, r.NormFloat64())
			}
		}
	}
	if _, why = run(cows+response, d.String()); why != "unknown-treatment carryover" {
		t.Errorf("unknown treatment before: %q", why)
	}
}
