package layout

import (
	"fmt"
	"slices"
	"strings"

	"penwright/protocol/diag"
)

// The names the trade gives to layouts.
const (
	CompletelyRandomized = "completely randomized"
	RandomizedBlock      = "randomized complete block"
	GeneralizedBlock     = "generalized randomized block"
	LatinSquare          = "Latin square"
	LatinSquares         = "replicated Latin squares"
	GraecoLatin          = "Graeco-Latin square"
	HyperGraecoLatin     = "hyper-Graeco-Latin square"
	Crossover            = "crossover"
	Switchback           = "switchback"
	BalancedIncomplete   = "balanced incomplete block"
	IncompleteBlock      = "incomplete block"
	ExtendedBlock        = "extended block"
	Resolvable           = "resolvable incomplete block"
	RowColumn            = "row and column"
	SplitPlot            = "split plot"
	StripPlot            = "strip plot"
	StripSplitPlot       = "strip-split plot"
	AugmentedBlock       = "augmented block"
)

// String is the name with its parts.
func (d Design) String() string { return strings.Join(append([]string{d.Name}, d.Parts...), ", ") }

// recogniser gathers what the trade's names stand on.
type recogniser struct {
	b     *builder
	plan  *Plan
	name  string
	parts []string
	sites []int // units over which the whole layout is repeated, innermost first
	also  map[string]bool
}

// recognise names the design from its structure: which units receive, how those are
// nested or crossed, and whether the treatments fit into what holds them. It is the
// last step and nothing else depends on it.
func (b *builder) recognise() Design {
	r := &recogniser{b: b, plan: b.plan, also: map[string]bool{}}
	plan := b.plan
	var receiving []int
	for _, s := range plan.Strata {
		if len(plan.Units[s.Unit].Receives) > 0 {
			receiving = append(receiving, s.Unit)
		}
	}
	// Coarsest receiving units: more than one stand across each other.
	var first []int
	for _, u := range receiving {
		if !slices.ContainsFunc(receiving, func(v int) bool { return v != u && b.up[u][v] }) {
			first = append(first, u)
		}
	}
	switch {
	case len(first) > 1:
		r.strips(first, receiving)
	case len(receiving) == 1:
		r.name = r.base(receiving[0])
	default:
		r.splits(receiving)
	}
	r.qualify(receiving)
	b.also = r.also
	b.also[r.name] = true
	return Design{Name: r.name, Parts: r.parts}
}

func (r *recogniser) part(format string, args ...any) {
	r.parts = append(r.parts, fmt.Sprintf(format, args...))
}

func (r *recogniser) unit(u int) string { return r.plan.Units[u].Name }

// splits names a chain of receiving units, each within the one before, or with units
// that stand across each other inside the first.
func (r *recogniser) splits(receiving []int) {
	top := receiving[0]
	base := r.base(top)
	r.also[base] = true
	depth, chain := 0, true
	for i, u := range receiving {
		above := 0
		for _, v := range receiving {
			if v != u && r.b.up[u][v] {
				above++
			}
		}
		depth = max(depth, above)
		chain = chain && above == i
	}
	r.name = strings.Repeat("split-", max(depth, 1)-1) + SplitPlot
	if !chain {
		r.name = SplitPlot
	}
	phrase := map[string]string{
		CompletelyRandomized: "completely randomized",
		RandomizedBlock:      "in randomized complete blocks",
		GeneralizedBlock:     "in generalized randomized blocks",
		LatinSquare:          "in a Latin square",
		LatinSquares:         "in replicated Latin squares",
		GraecoLatin:          "in a Graeco-Latin square",
		BalancedIncomplete:   "in balanced incomplete blocks",
		IncompleteBlock:      "in incomplete blocks",
		Resolvable:           "in resolvable incomplete blocks",
		RowColumn:            "in rows and columns",
	}[base]
	if phrase == "" {
		phrase = "in a " + base + " layout"
	}
	r.parts = slices.Insert(r.parts, 0, "whole plots "+phrase)
	for i, u := range receiving[1:] {
		var across []string
		for _, v := range receiving[:i+1] {
			if !r.b.up[u][v] && !r.b.up[v][u] {
				across = append(across, r.unit(v))
			}
		}
		if across != nil {
			r.also[StripPlot] = true
			r.part("%s across %s", r.unit(u), strings.Join(across, " and "))
			continue
		}
		over := receiving[0]
		for _, v := range receiving[:i+1] {
			if r.b.up[u][v] {
				over = v
			}
		}
		if a := r.plan.allocations[u]; !a.Separate && !r.fits(u, over) {
			r.part("%s incomplete within %s", r.unit(u), r.unit(over))
			continue
		}
		for _, v := range r.plan.allocations[u].Blocks {
			if v != over && r.plan.Units[v].N > 1 {
				r.part("%s in %s", r.unit(u), r.unit(v))
			}
		}
	}
}

// strips names receiving units that stand across each other.
func (r *recogniser) strips(first, receiving []int) {
	r.name = StripPlot
	cell := r.b.meet(first...)
	for _, u := range receiving {
		switch {
		case slices.Contains(first, u):
		case r.b.up[u][cell]:
			r.name = StripSplitPlot
			r.also[StripPlot], r.also[SplitPlot] = true, true
		default:
			for _, v := range first {
				if r.b.up[u][v] {
					r.part("%s split into %s", r.unit(v), r.unit(u))
					r.also[SplitPlot] = true
				}
			}
		}
	}
	block := first[0]
	complete := true
	for _, u := range first[1:] {
		if block >= 0 {
			block = r.plan.sup[block][u]
		}
	}
	if block < 0 || r.plan.Units[block].N == 1 {
		r.part("without replicated blocks")
		return
	}
	for _, u := range first {
		complete = complete && r.fits(u, block)
	}
	if complete {
		r.part("in complete blocks")
		r.also[RandomizedBlock] = true
	} else {
		r.part("in incomplete blocks")
		r.also[IncompleteBlock] = true
	}
	r.above(r.plan.Units[block].Within)
}

// above notes the units from u upwards as sites, years or the like.
func (r *recogniser) above(u int) {
	for ; u >= 0; u = r.plan.Units[u].Within {
		if r.plan.Units[u].N > 1 {
			r.sites = append(r.sites, u)
		}
	}
}

// fits tells whether all that u receives stands in proportional numbers in each
// instance of v.
func (r *recogniser) fits(u, v int) bool {
	a, n := r.plan.allocations[u], r.plan.Units[u].N
	if a.Separate {
		return true
	}
	for _, size := range r.plan.sizes(u, v) {
		for _, total := range a.Total {
			if size*total%n != 0 {
				return false
			}
		}
	}
	return true
}

// times is how often the least proportional set of what u receives fits into an
// instance of v of the given size.
func (r *recogniser) times(u, size int) int {
	a, n := r.plan.allocations[u], r.plan.Units[u].N
	g := 0
	for _, total := range a.Total {
		g = gcd(g, size*total/n)
	}
	return g
}

func gcd(a, b int) int {
	for b != 0 {
		a, b = b, a%b
	}
	return a
}

// base names the layout of one receiving unit within what holds it.
func (r *recogniser) base(u int) string {
	unit, a := &r.plan.Units[u], r.plan.allocations[u]
	if unit.Crosses != nil {
		return r.crossed(u)
	}
	block := unit.Within
	for block >= 0 && r.plan.Units[block].N == 1 {
		block = r.plan.Units[block].Within
	}
	if block >= 0 && r.plan.Units[block].Crosses == nil && len(r.plan.Units[block].Receives) > 0 {
		block = -1
	}
	switch {
	case a.Checks != nil && block >= 0:
		r.also[RandomizedBlock], r.also[IncompleteBlock] = true, true
		r.above(r.plan.Units[block].Within)
		return AugmentedBlock
	case a.Checks != nil:
		r.part("augmented with unreplicated entries")
		r.also[AugmentedBlock] = true
		return CompletelyRandomized
	case block < 0:
		return CompletelyRandomized
	case r.plan.Units[block].Interacts:
		r.sites = append(r.sites, block)
		r.above(r.plan.Units[block].Within)
		return CompletelyRandomized
	}
	sizes := r.plan.sizes(u, block)
	if r.fits(u, block) {
		r.above(r.plan.Units[block].Within)
		classes := 1 // within which the draw is made, so that each holds a set of its own
		for _, f := range unit.Carries {
			classes *= len(r.plan.Factors[f].Levels)
		}
		if len(sizes) == 1 && r.times(u, sizes[0]) == classes {
			return RandomizedBlock
		}
		r.also[RandomizedBlock] = true
		return GeneralizedBlock
	}
	r.also[IncompleteBlock] = true
	n, k := len(a.Combinations), sizes[len(sizes)-1]
	if len(a.Factors) > 1 && k < n {
		r.also["confounded factorial"] = true
	}
	for v := r.plan.Units[block].Within; v >= 0; v = r.plan.Units[v].Within {
		if r.plan.Units[v].N == 1 || !r.fits(u, v) {
			continue
		}
		r.above(r.plan.Units[v].Within)
		switch {
		case len(sizes) == 1 && k*k == n:
			r.part("square lattice")
		case len(sizes) == 1 && k*(k+1) == n:
			r.part("rectangular lattice")
		default:
			r.part("alpha design")
		}
		r.also["lattice"] = true
		return Resolvable
	}
	r.above(r.plan.Units[block].Within)
	switch {
	case len(sizes) == 1 && len(a.Factors) == 1 && r.balanced(a, k):
		return BalancedIncomplete
	case sizes[0] > n:
		return ExtendedBlock
	}
	return IncompleteBlock
}

// balanced tells whether the counting rules of balanced incomplete blocks hold for
// blocks of k: equal replication r, λ = r(k−1)/(v−1) whole, and at least as many blocks
// as treatments (Fisher's inequality). Whether the draw is balanced only it can say.
func (r *recogniser) balanced(a *Allocation, k int) bool {
	v := len(a.Combinations)
	if v < 2 || k >= v || k < 2 || slices.Min(a.Total) != slices.Max(a.Total) {
		return false
	}
	reps := a.Total[0]
	return reps*(k-1)%(v-1) == 0 && v*reps/k >= v
}

// crossed names the layout of a receiving unit that crosses others.
func (r *recogniser) crossed(u int) string {
	plan, unit, a := r.plan, &r.plan.Units[u], r.plan.allocations[u]
	s := unit.Crosses[0]
	for _, v := range unit.Crosses[1:] {
		if s >= 0 {
			s = plan.sup[s][v]
		}
	}
	grid := r.grid(u, s)
	switch {
	case r.b.p.TimeTrend != nil:
		r.also[grid], r.also[Crossover] = true, true
		return Switchback
	case r.b.p.CarryOver != nil:
		r.also[grid] = true
		if grid != RowColumn {
			r.part("%s", grid)
		}
		return Crossover
	}
	if grid != RowColumn {
		r.also[Crossover] = true
	}
	if a.Checks != nil {
		r.part("augmented with unreplicated entries")
		r.also[AugmentedBlock] = true
	}
	return grid
}

// grid names rows and columns: s is the finest unit coarser than all crossed ones,
// -1 for none.
func (r *recogniser) grid(u, s int) string {
	plan, unit, a := r.plan, &r.plan.Units[u], r.plan.allocations[u]
	squares := 1
	if s >= 0 {
		squares = plan.Units[s].N
	}
	side := len(a.Combinations)
	if a.Separate {
		side = len(plan.Factors[a.Factors[0]].Levels)
	}
	square, complete, some := true, true, false
	own := -1 // a crossed unit whose instances come in squares of their own
	for _, v := range unit.Crosses {
		sizes := plan.sizes(u, v)
		square = square && len(sizes) == 1 && sizes[0] == side
		fits := r.fits(u, v)
		complete, some = complete && fits, some || fits
		if g := plan.Units[v].Within; g >= 0 && g != s && plan.Units[g].N > 1 && plan.Units[g].N*side == plan.Units[v].N &&
			len(plan.sizes(v, g)) == 1 {
			own = g
		}
	}
	up := s
	if own >= 0 {
		up = own
	}
	if up >= 0 {
		r.above(plan.Units[up].Within)
	}
	two := len(unit.Crosses) == 2
	// With rows in squares and common columns each column holds all squares.
	common := own >= 0 && two && complete && func() bool {
		for _, v := range unit.Crosses {
			want := side
			if plan.Units[v].Within != own {
				want = side * plan.Units[own].N
			}
			if sizes := plan.sizes(u, v); len(sizes) != 1 || sizes[0] != want {
				return false
			}
		}
		return true
	}()
	if a.Separate {
		if squares > 1 || common {
			r.part("replicated squares")
		}
		r.also[LatinSquare] = true
		if len(a.Factors) > 2 {
			r.also[GraecoLatin] = true
			return HyperGraecoLatin
		}
		return GraecoLatin
	}
	switch {
	case two && square && squares == 1 && len(a.Factors) > 0:
		return LatinSquare
	case two && square:
		r.also[LatinSquare] = true
		return LatinSquares
	case common:
		r.also[LatinSquare] = true
		for _, v := range unit.Crosses {
			if plan.Units[v].Within != own {
				r.part("common %s", r.unit(v))
			}
		}
		return LatinSquares
	case two && complete:
		r.part("Latin rectangle")
		r.also[LatinSquare], r.also[LatinSquares], r.also[Crossover] = true, true, true
	case two && some:
		r.also["Youden square"], r.also[IncompleteBlock] = true, true
	default:
		r.also[IncompleteBlock] = true
	}
	return RowColumn
}

// qualify adds what stands beside the name: factorial structure, sites, carried
// classes, sampling, repeated measures.
func (r *recogniser) qualify(receiving []int) {
	plan := r.plan
	for _, u := range receiving {
		if phrase := r.factorial(u); phrase != "" {
			if len(receiving) > 1 {
				phrase += " on " + r.unit(u)
			}
			r.part("%s", phrase)
			r.also["factorial"] = true
		}
	}
	if len(receiving) > 1 {
		r.also["factorial"] = true
	}
	for _, u := range r.sites {
		r.part("repeated over %s", r.unit(u))
		r.also["several sites"] = true
	}
	for _, f := range plan.Factors {
		if f.Carried {
			r.part("%s carried by %s", f.Name, r.unit(f.Unit))
			r.also["factorial"] = true
		}
	}
	// A unit that stands across the experimental units, such as a year, is neither block
	// nor sampling, and neither is its crossing with them.
	across := make([]bool, len(plan.Units))
	for _, s := range plan.Strata {
		if plan.Units[s.Unit].Role != Block {
			continue
		}
		if !slices.ContainsFunc(receiving, func(u int) bool { return r.b.up[u][s.Unit] }) {
			across[s.Unit] = true
			r.part("observed over %s", r.unit(s.Unit))
			r.also["repeated measures"], r.also["several sites"] = true, true
		}
	}
	for _, s := range plan.Strata {
		if slices.ContainsFunc(plan.Units[s.Unit].Crosses, func(v int) bool { return across[v] }) {
			continue
		}
		if plan.Units[s.Unit].Role == Sampling {
			r.part("with sampling of %s", r.unit(s.Unit))
			r.also["sampling"] = true
		}
	}
	for _, rep := range r.b.p.Repeated {
		r.part("repeated measures over %s", rep.Name)
		r.also["repeated measures"] = true
	}
}

// factorial tells how the treatments of u are made of factors, "" for a single factor.
func (r *recogniser) factorial(u int) string {
	plan, a := r.plan, r.plan.allocations[u]
	var sides []string
	if a.Separate {
		return ""
	}
	listed := -1
	for _, f := range a.Factors {
		if plan.Factors[f].Protocol == nil {
			listed = f
		}
		sides = append(sides, fmt.Sprint(len(plan.Factors[f].Levels)))
	}
	if len(a.Factors) > 1 {
		return strings.Join(sides, " × ") + " factorial"
	}
	if listed < 0 || a.Checks != nil {
		return ""
	}
	sides = nil
	controls := 0
	var rest []int
	for l, tr := range r.b.p.Treatments {
		if len(tr.Levels) == 0 {
			controls++
		} else {
			rest = append(rest, l)
		}
	}
	effects := plan.effects(rest)
	if effects == nil {
		if len(rest) > 0 {
			return "listed treatments"
		}
		return ""
	}
	for _, e := range effects {
		if len(e.Factors) == 1 {
			sides = append(sides, fmt.Sprint(e.DF+1))
		}
	}
	out := strings.Join(sides, " × ") + " factorial"
	switch {
	case controls == 1:
		out += " plus control"
	case controls > 1:
		out += fmt.Sprintf(" plus %d controls", controls)
	}
	return out
}

// phrases maps what authors write to the name or property it stands for. Words are
// lower case and singular; longer phrases are looked for first. Common practice, no
// single source.
var phrases = []struct{ said, means string }{
	{"completely randomized", CompletelyRandomized}, {"complete randomization", CompletelyRandomized}, {"crd", CompletelyRandomized},
	{"randomized complete block", RandomizedBlock}, {"complete randomized block", RandomizedBlock}, {"randomized block", RandomizedBlock},
	{"complete block", RandomizedBlock}, {"rcbd", RandomizedBlock}, {"rcb", RandomizedBlock}, {"rbd", RandomizedBlock},
	{"generalized randomized block", GeneralizedBlock}, {"generalized randomized complete block", GeneralizedBlock}, {"generalized block", GeneralizedBlock},
	{"replicated latin square", LatinSquares}, {"multiple latin square", LatinSquares}, {"repeated latin square", LatinSquares}, {"latin square", LatinSquare},
	{"hyper graeco latin square", HyperGraecoLatin}, {"hyper graeco latin", HyperGraecoLatin},
	{"graeco latin square", GraecoLatin}, {"greco latin square", GraecoLatin}, {"graeco latin", GraecoLatin},
	{"crossover", Crossover}, {"cross over", Crossover}, {"changeover", Crossover}, {"change over", Crossover},
	{"switchback", Switchback}, {"switch back", Switchback}, {"reversal", Switchback}, {"double reversal", Switchback},
	{"balanced incomplete block", BalancedIncomplete}, {"bibd", BalancedIncomplete}, {"bib", BalancedIncomplete},
	{"partially balanced incomplete block", IncompleteBlock}, {"incomplete block", IncompleteBlock}, {"extended block", ExtendedBlock},
	{"resolvable incomplete block", Resolvable}, {"resolvable", Resolvable}, {"alpha", Resolvable}, {"alpha design", Resolvable}, {"alpha lattice", Resolvable},
	{"lattice", "lattice"}, {"square lattice", "lattice"}, {"rectangular lattice", "lattice"},
	{"row and column", RowColumn}, {"row column", RowColumn}, {"latin rectangle", RowColumn}, {"youden square", "Youden square"}, {"youden", "Youden square"},
	{"split plot", SplitPlot}, {"split unit", SplitPlot}, {"split split plot", "split-" + SplitPlot}, {"split split unit", "split-" + SplitPlot},
	{"split split split plot", "split-split-" + SplitPlot},
	{"strip plot", StripPlot}, {"strip block", StripPlot}, {"split block", StripPlot}, {"criss cross", StripPlot},
	{"strip split plot", StripSplitPlot}, {"split strip plot", StripSplitPlot},
	{"augmented", AugmentedBlock}, {"augmented block", AugmentedBlock}, {"augmented randomized block", AugmentedBlock}, {"augmented randomized complete block", AugmentedBlock},
	{"matched pair", RandomizedBlock}, {"paired comparison", RandomizedBlock}, {"parallel group", CompletelyRandomized},
	{"cluster randomized", "sampling"}, {"group randomized", "sampling"},
	{"factorial", "factorial"}, {"confounded factorial", "confounded factorial"}, {"confounded", "confounded factorial"},
	{"repeated measure", "repeated measures"}, {"several site", "several sites"}, {"multi site", "several sites"}, {"multisite", "several sites"},
	{"multi location", "several sites"}, {"multi environment", "several sites"}, {"several year", "several sites"},
	{"subsampling", "sampling"}, {"sampling", "sampling"},
}

// called compares what the author calls the design with what the units say.
func (b *builder) called() {
	said := b.p.Trial.Called
	if strings.TrimSpace(said) == "" {
		return
	}
	units := b.plan.Design.String()
	words := plain(said)
	known := false
	for len(words) > 0 {
		length, means := 1, ""
		for _, ph := range phrases {
			w := strings.Fields(ph.said)
			if len(w) <= len(words) && slices.Equal(w, words[:len(w)]) && (means == "" || len(w) > length) {
				length, means = len(w), ph.means
			}
		}
		if means != "" {
			known = true
			if !b.also[means] {
				b.add(diag.Warning, "trial.called", CalledDiffers, "correct `called`, or the units",
					"the trial is called %q, but its units make it %q", said, units)
				return
			}
		}
		words = words[length:]
	}
	if !known {
		b.add(diag.Note, "trial.called", CalledUnknown, "its units make it \""+units+"\"", "%q is no name of a design that is known here", said)
	}
}

// plain reduces a text to lower-case words without hyphens, plurals and the other
// spelling of randomized.
func plain(s string) []string {
	words := strings.FieldsFunc(strings.ToLower(s), func(r rune) bool {
		return !(r >= 'a' && r <= 'z' || r >= '0' && r <= '9' || r > 127)
	})
	for i, w := range words {
		w = strings.Replace(strings.Replace(w, "ised", "ized", 1), "isation", "ization", 1)
		if len(w) > 3 && !strings.HasSuffix(w, "ss") {
			w = strings.TrimSuffix(w, "s")
		}
		words[i] = w
	}
	return words
}
