package analysis

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing/fstest"
)

// sketch is a trial made up for a test: its protocol and data as files, and the same
// structure in plain lists for a calculation that shares nothing with the program.
type sketch struct {
	units   []sketchUnit
	factors []sketchFactor
	listed  []sketchTreatment

	up    [][][]int // up[u][i][v]: the instance of unit v that holds instance i of u, or -1
	own   [][]int   // number of an instance within its parent, from 1
	level [][]int   // level[f][i]: level of factor f on instance i of the unit that has it

	y          []float64 // of each instance of the last unit; missing says which are not there
	missing    []bool
	covariates [][]float64 // a value for each instance of the last unit; NaN: not there
	at         []int       // the unit a covariate is constant on

	trend      bool // own line of each animal over the periods
	adjustment string
	blocks     string
	orders     int // interactions; 0: auto
	comparison string
	degree     int
	contrast   []int // weights over the levels of the first factor, or nil
	alpha      string
}

type sketchUnit struct {
	name     string
	within   int // -1: none
	crosses  []int
	count    []int // one for each parent
	receives []int // factors
	carries  []int
}

type sketchFactor struct {
	name    string
	levels  []string
	values  []float64 // nil: words
	unit    int
	control bool // the first level
	twice   bool // the first level is planned twice as often as the others
}

// parts is the number of units that hold every level as often as planned.
func (f *sketchFactor) parts() int {
	if f.twice {
		return len(f.levels) + 1
	}
	return len(f.levels)
}

// sketchTreatment is a listed treatment; levels are of the two factors it is made of, or
// nil outside the factorial.
type sketchTreatment struct {
	code    string
	levels  []string
	control bool
}

// build enumerates the instances.
func (s *sketch) build() {
	s.up = make([][][]int, len(s.units))
	s.own = make([][]int, len(s.units))
	for u, unit := range s.units {
		none := func() []int {
			row := make([]int, len(s.units))
			for v := range row {
				row[v] = -1
			}
			return row
		}
		add := func(holders [][2]int, own int) {
			row := none()
			for _, h := range holders {
				for v, i := range s.up[h[0]][h[1]] {
					if i >= 0 {
						row[v] = i
					}
				}
			}
			row[u] = len(s.up[u])
			s.up[u] = append(s.up[u], row)
			s.own[u] = append(s.own[u], own)
		}
		switch {
		case unit.crosses != nil:
			a, b := unit.crosses[0], unit.crosses[1]
			for i, x := range s.up[a] {
				for j, y := range s.up[b] {
					agree := true
					for v := range x {
						agree = agree && (x[v] < 0 || y[v] < 0 || x[v] == y[v])
					}
					if agree {
						add([][2]int{{a, i}, {b, j}}, 0)
					}
				}
			}
		case unit.within < 0:
			for i := range unit.count[0] {
				add(nil, i+1)
			}
		default:
			for p := range s.up[unit.within] {
				for i := range unit.count[p%len(unit.count)] {
					add([][2]int{{unit.within, p}}, i+1)
				}
			}
		}
	}
}

func (s *sketch) last() int { return len(s.units) - 1 }

// rowLevel is the level of a factor on an instance of the last unit.
func (s *sketch) rowLevel(f, row int) int {
	return s.level[f][s.up[s.last()][row][s.factors[f].unit]]
}

// files writes the sketch as a trial folder. order, if not nil, is that of the rows.
func (s *sketch) files(order []int) fstest.MapFS {
	var b strings.Builder
	p := func(format string, args ...any) { fmt.Fprintf(&b, format+"\n", args...) }
	p("protocol = 1\n\n[trial]\ncode = \"R\"\ntitle = \"Made up\"\nobjective = \"Made up.\"\n\n[randomization]\nmethod = \"made up\"\n")
	for i, f := range s.factors {
		if s.listed != nil && i == 0 {
			continue
		}
		var levels []string
		for _, l := range f.levels {
			if f.values == nil {
				l = strconv.Quote(l)
			}
			levels = append(levels, l)
		}
		p("[[factor]]\nname = %q\nlevels = [%s]", f.name, strings.Join(levels, ", "))
		if f.control {
			p("control = %s", levels[0])
		}
	}
	if s.listed != nil && s.listed[len(s.listed)-1].levels != nil {
		p("[[factor]]\nname = \"sort\"\nlevels = [\"s1\", \"s2\"]\n[[factor]]\nname = \"dose\"\nlevels = [\"d1\", \"d2\", \"d3\"]")
	}
	for _, t := range s.listed {
		if t.levels == nil {
			p("[[treatment]]\ncode = %q\nlevels = {}\ncontrol = %v", t.code, t.control)
		} else {
			p("[[treatment]]\ncode = %q\nlevels = { sort = %q, dose = %q }", t.code, t.levels[0], t.levels[1])
		}
	}
	names := func(fs []int) string {
		var out []string
		for _, f := range fs {
			out = append(out, strconv.Quote(s.factors[f].name))
		}
		return strings.Join(out, ", ")
	}
	for u, unit := range s.units {
		p("[[unit]]\nname = %q", unit.name)
		if unit.crosses != nil {
			p("crosses = [%q, %q]", s.units[unit.crosses[0]].name, s.units[unit.crosses[1]].name)
		} else if len(unit.count) == 1 {
			p("count = %d", unit.count[0])
		} else {
			p("count = %s", strings.ReplaceAll(fmt.Sprint(unit.count), " ", ", "))
		}
		if unit.within >= 0 {
			p("within = %q", s.units[unit.within].name)
		}
		if len(unit.receives) > 0 {
			p("receives = [%s]", names(unit.receives))
		}
		if len(unit.carries) > 0 {
			p("carries = [%s]", names(unit.carries))
		}
		_ = u
	}
	for k := range s.covariates {
		p("[[covariate]]\nname = \"x%d\"", k)
	}
	if s.trend {
		p("[time_trend]\non = \"cow\"\nalong = \"period\"\norder = 1")
	}
	p("[analysis]\ncomparison = %q\ntrend = %d\nadjustment = %q\nblocks = %q", s.comparison, s.degree, s.adjustment, s.blocks)
	if s.orders > 0 {
		p("interactions = %d", s.orders)
	}
	if s.alpha != "" {
		p("alpha = %s", s.alpha)
	}
	if s.contrast != nil {
		p("[[analysis.contrast]]\nname = \"planned\"\nfactor = %q\nweights = {", s.factors[0].name)
		var w []string
		for l, x := range s.contrast {
			w = append(w, fmt.Sprintf("%q = %d", s.factors[0].levels[l], x))
		}
		b.WriteString(strings.Join(w, ", ") + " }\n")
	}
	p("[[response]]\nname = \"y\"\nkind = \"continuous\"")
	if len(s.covariates) > 0 {
		var names []string
		for k := range s.covariates {
			names = append(names, fmt.Sprintf("\"x%d\"", k))
		}
		p("covariates = [%s]", strings.Join(names, ", "))
	}
	p("[data]\nfile = \"data.csv\"")

	var d strings.Builder
	for _, unit := range s.units {
		if unit.crosses == nil {
			d.WriteString(unit.name + ",")
		}
	}
	for _, f := range s.factors {
		d.WriteString(f.name + ",")
	}
	for k := range s.covariates {
		fmt.Fprintf(&d, "x%d,", k)
	}
	d.WriteString("y\n")
	n := s.last()
	if order == nil {
		for i := range s.up[n] {
			order = append(order, i)
		}
	}
	for _, i := range order {
		for u, unit := range s.units {
			if unit.crosses == nil {
				fmt.Fprintf(&d, "%d,", s.own[u][s.up[n][i][u]])
			}
		}
		for f := range s.factors {
			d.WriteString(s.factors[f].levels[s.rowLevel(f, i)] + ",")
		}
		for k := range s.covariates {
			if !math.IsNaN(s.covariates[k][i]) {
				d.WriteString(strconv.FormatFloat(s.covariates[k][i], 'g', -1, 64))
			}
			d.WriteString(",")
		}
		if s.missing[i] {
			d.WriteString("NA\n")
		} else {
			d.WriteString(strconv.FormatFloat(s.y[i], 'g', -1, 64) + "\n")
		}
	}
	return fstest.MapFS{
		"protocol.toml": &fstest.MapFile{Data: []byte(b.String())},
		"data.csv":      &fstest.MapFile{Data: []byte(d.String())},
	}
}

// randomTrial makes a trial up: a random structure of units, treatments on them in even
// numbers or not, losses, covariates, and ways of analysing it.
func randomTrial(r *rand.Rand) *sketch {
	s := &sketch{adjustment: "auto", blocks: "auto", comparison: "lsd", degree: r.IntN(4)}
	chance := func(p float64) bool { return r.Float64() < p }
	factor := func(name string, levels int) int {
		f := sketchFactor{name: name, control: chance(0.2), twice: chance(0.08)}
		x := 0
		quantitative := chance(0.4)
		for l := range levels {
			if quantitative {
				f.values = append(f.values, float64(x))
				f.levels = append(f.levels, strconv.Itoa(x))
				x += 1 + r.IntN(3)
			} else {
				f.levels = append(f.levels, string(rune('a'+l))+name)
			}
		}
		s.factors = append(s.factors, f)
		return len(s.factors) - 1
	}
	unit := func(u sketchUnit) int {
		s.units = append(s.units, u)
		return len(s.units) - 1
	}
	ragged := chance(0.15)
	counts := func(parent, n int) []int {
		if parent < 0 || !ragged {
			return []int{n}
		}
		s.build()
		var out []int
		for range s.up[parent] {
			out = append(out, n+r.IntN(2))
		}
		return out
	}
	// Something larger, perhaps.
	parent := -1
	if chance(0.3) {
		parent = unit(sketchUnit{name: "site", within: -1, count: []int{2 + r.IntN(2)}})
	}
	// The unit that receives the first factors. t is the number of treatments to plan for.
	t := 2 + r.IntN(3)
	var first []int
	switch {
	case chance(0.12):
		s.listed = []sketchTreatment{{code: "nil", control: true}}
		if chance(0.5) {
			for _, a := range []string{"s1", "s2"} {
				for _, d := range []string{"d1", "d2", "d3"} {
					s.listed = append(s.listed, sketchTreatment{code: a + d, levels: []string{a, d}})
				}
			}
		} else {
			for k := range t {
				s.listed = append(s.listed, sketchTreatment{code: fmt.Sprintf("t%d", k)})
			}
		}
		f := sketchFactor{name: "treatment"}
		for _, l := range s.listed {
			f.levels = append(f.levels, l.code)
		}
		s.factors = append(s.factors, f)
		first = []int{0}
		t = len(s.listed)
	case chance(0.3):
		first = []int{factor("a", 2+r.IntN(2)), factor("b", 2+r.IntN(2))}
		t = s.factors[0].parts() * s.factors[1].parts()
	default:
		first = []int{factor("a", t)}
		t = s.factors[0].parts()
	}
	crossed := -1
	strip := false
	var treated int
	switch k := r.IntN(10); {
	case k < 2: // completely randomized within what is larger
		treated = unit(sketchUnit{name: "pen", within: parent, count: counts(parent, t*(1+r.IntN(3))+r.IntN(2)*r.IntN(2)), receives: first})
	case k < 6: // blocks
		block := unit(sketchUnit{name: "block", within: parent, count: counts(parent, 2+r.IntN(3))})
		size := t * (1 + r.IntN(2)*r.IntN(2))
		if chance(0.2) {
			size += r.IntN(4) - 2
		}
		treated = unit(sketchUnit{name: "pen", within: block, count: counts(block, max(size, 2)), receives: first})
	case k < 8: // rows and columns
		rows, columns := t, t*(1+r.IntN(2)*r.IntN(2))
		if chance(0.2) {
			columns = t + r.IntN(3) - 1
		}
		a := unit(sketchUnit{name: "cow", within: parent, count: []int{max(columns, 2)}})
		in := parent
		if chance(0.3) {
			in = -1
		}
		b := unit(sketchUnit{name: "period", within: in, count: []int{rows}})
		treated = unit(sketchUnit{name: "sample", within: -1, crosses: []int{a, b}, receives: first})
		crossed = treated
		s.trend = rows >= 3 && chance(0.15)
	default: // strips
		strip = true
		block := unit(sketchUnit{name: "block", within: parent, count: []int{2 + r.IntN(3)}})
		a := unit(sketchUnit{name: "strip", within: block, count: []int{t}, receives: first})
		f := factor("c", 2+r.IntN(2))
		b := unit(sketchUnit{name: "lane", within: block, count: []int{s.factors[f].parts()}, receives: []int{f}})
		treated = unit(sketchUnit{name: "cell", within: -1, crosses: []int{a, b}})
	}
	// Smaller plots, carried classes, samples.
	for _, name := range []string{"sub", "half"} {
		if !strip && s.listed == nil && len(s.factors) < 3 && chance(0.3) {
			f := factor(name[:1], 2+r.IntN(2))
			treated = unit(sketchUnit{name: name, within: treated, count: counts(treated, s.factors[f].parts()*(1+r.IntN(2)*r.IntN(2))), receives: []int{f}})
		}
	}
	if s.listed == nil && len(s.factors) < 3 && crossed < 0 && !strip && chance(0.12) {
		f := factor("x", 2)
		s.units[treated].carries = []int{f}
	}
	if chance(0.25) {
		unit(sketchUnit{name: "animal", within: treated, count: counts(treated, 1+r.IntN(3))})
	}
	s.build()
	for u, unit := range s.units {
		for _, f := range append(unit.receives, unit.carries...) {
			s.factors[f].unit = u
		}
	}
	s.allot(r, chance(0.75))

	n := len(s.up[s.last()])
	s.y, s.missing = make([]float64, n), make([]bool, n)
	for i := range s.y {
		s.y[i] = float64(r.IntN(2000)) / 8
	}
	lose := []float64{0, 0, 0, 0.05, 0.2}[r.IntN(5)]
	for i := range s.missing {
		s.missing[i] = chance(lose)
	}
	if chance(0.1) { // all of one instance of some unit
		u := r.IntN(len(s.units))
		gone := r.IntN(len(s.up[u]))
		for i := range s.missing {
			s.missing[i] = s.missing[i] || s.up[s.last()][i][u] == gone
		}
	}
	if chance(0.2) {
		for k := range 1 + r.IntN(2) {
			at := s.last()
			if chance(0.3) {
				at = r.IntN(len(s.units))
			}
			value := make([]float64, len(s.up[at]))
			for i := range value {
				value[i] = float64(r.IntN(400)) / 4
			}
			x := make([]float64, n)
			for i := range x {
				x[i] = float64(k)
				if v := s.up[s.last()][i][at]; v >= 0 {
					x[i] = value[v]
				}
			}
			if chance(0.2) {
				x[r.IntN(n)] = math.NaN()
			}
			s.covariates, s.at = append(s.covariates, x), append(s.at, at)
		}
	}
	s.adjustment = []string{"auto", "auto", "partial", "marginal", "sequential"}[r.IntN(5)]
	s.blocks = []string{"auto", "fixed", "fixed"}[r.IntN(3)]
	if len(s.factors) > 1 && chance(0.15) {
		s.orders = 1 + r.IntN(2)
	}
	if k := len(s.factors[0].levels); k > 2 && chance(0.5) {
		s.contrast = make([]int, k)
		for l := range k - 1 {
			s.contrast[l] = r.IntN(5) - 2
			s.contrast[k-1] -= s.contrast[l]
		}
		s.contrast[0]++
		s.contrast[k-1]--
		if s.contrast[0] == 0 {
			s.contrast[0], s.contrast[1] = 1, s.contrast[1]-1
		}
	}
	if chance(0.3) {
		s.alpha = "0.1"
	}
	return s
}

// allot gives levels to the units that receive or carry them: in even numbers within the
// parent, shuffled, where even is true; cyclic on crossing units; else as chance has it.
func (s *sketch) allot(r *rand.Rand, even bool) {
	s.level = make([][]int, len(s.factors))
	for u, unit := range s.units {
		fs := append(append([]int{}, unit.receives...), unit.carries...)
		if len(fs) == 0 {
			continue
		}
		cells := 1
		for _, f := range fs {
			s.level[f] = make([]int, len(s.up[u]))
			cells *= len(s.factors[f].levels)
		}
		var deal []int // cells as often as planned
		for c := range cells {
			times := 1
			rest := c
			for k := len(fs) - 1; k >= 0; k-- {
				f := &s.factors[fs[k]]
				if f.twice && rest%len(f.levels) == 0 {
					times *= 2
				}
				rest /= len(f.levels)
			}
			for range times {
				deal = append(deal, c)
			}
		}
		give := func(i, cell int) {
			for k := len(fs) - 1; k >= 0; k-- {
				n := len(s.factors[fs[k]].levels)
				s.level[fs[k]][i] = cell % n
				cell /= n
			}
		}
		switch {
		case !even && r.IntN(2) == 0:
			for i := range s.up[u] {
				give(i, r.IntN(cells))
			}
		case unit.crosses != nil:
			a, b := unit.crosses[0], unit.crosses[1]
			r.Shuffle(len(deal), func(i, j int) { deal[i], deal[j] = deal[j], deal[i] })
			step := 1 + r.IntN(2)
			for i, up := range s.up[u] {
				give(i, deal[(s.own[a][up[a]]*step+s.own[b][up[b]])%len(deal)])
			}
		default:
			// Parents one by one, and cells dealt in turn to their shuffled members.
			by := map[int][]int{}
			var parents []int
			for i, up := range s.up[u] {
				p := -1
				if unit.within >= 0 {
					p = up[unit.within]
				}
				if by[p] == nil {
					parents = append(parents, p)
				}
				by[p] = append(by[p], i)
			}
			next := 0
			for _, p := range parents {
				members := by[p]
				r.Shuffle(len(members), func(i, j int) { members[i], members[j] = members[j], members[i] })
				if len(members)%len(deal) == 0 {
					next = 0
				}
				for _, i := range members {
					give(i, deal[next%len(deal)])
					next++
				}
			}
		}
	}
}
