package analysis

import (
	"errors"
	"math"
	"sort"
	"strings"

	"penwright/analysis/compare"
	"penwright/analysis/dist"
	"penwright/analysis/prose"
	"penwright/analysis/result"
)

// maxListed is the number of means up to which all differences of a family are listed.
const maxListed = 250

// differences compares the means of a term: all pairs of a main effect, within each
// level of the other factors for an interaction, listed treatments with their control.
func (a *analyst) differences(m *termMeans) {
	name := a.plan.Protocol.Analysis.Comparison
	if c := a.rows.resp.Protocol.Comparison; c != "" {
		name = c
	}
	method, ok := compare.ParseMethod(name)
	if !ok || method == compare.None {
		return
	}
	side := map[string]dist.Side{"greater": dist.Greater, "less": dist.Less}[a.plan.Protocol.Analysis.Side]
	if side != dist.Two && (method == compare.Tukey || method == compare.Scheffe || method == compare.NewmanKeuls || method == compare.Duncan) {
		a.note("two-sided", m.name, prose.TwoSidedOnly(name))
		side = dist.Two
	}
	if m.test.errorMS == 0 {
		return // no variation to judge differences by, and a note says so
	}
	families := a.families(m, method)
	if len(families) == 0 {
		if method == compare.Dunnett {
			a.note("no-control", m.name, prose.NoControl(a.plan, m.name))
		}
		return
	}
	f := m.test.f()
	p := upperF(f, m.test.df, m.test.errorDF)
	letters := make([]*string, len(m.cells))
	approximate, correlations := false, false
	for _, fam := range families {
		if len(fam.cells) > maxListed {
			a.note("many-means", m.name, prose.TooManyPairs(a.plan, m.name, len(fam.cells), maxListed))
			continue
		}
		family := compare.Family{TermP: p, TermDF: float64(m.test.df)}
		if len(fam.at) > 0 {
			// The F of a slice is not computed; a slice is protected by the F of its term.
			family.TermDF = float64(len(fam.cells) - 1)
		}
		family.Estimates = make([]float64, len(m.cells))
		for i, v := range m.relative(fam.cells) {
			family.Estimates[fam.cells[i]] = v
		}
		family.Diff = func(i, j int) (se, df float64) {
			if !m.known(i) || !m.known(j) {
				return math.NaN(), math.NaN()
			}
			v, df := m.est.diff(m.at[i], m.at[j])
			return math.Sqrt(v), df
		}
		family.Pairs = fam.pairs
		r, err := family.Run(method, side, a.alpha)
		if err != nil {
			a.note("comparison", m.name, prose.ComparisonRefused(a.plan, m.name, name, errors.Is(err, compare.ErrUnequal)))
			return
		}
		approximate = approximate || r.Approximate
		correlations = correlations || r.Correlations
		for _, d := range r.Differences {
			a.out.Comparisons = append(a.out.Comparisons, result.Comparison{
				Term: m.name, At: fam.at, Method: name, A: fam.label(d.A), B: fam.label(d.B), Difference: result.Number(d.Estimate), SE: result.Number(d.SE), DF: result.Number(d.DF),
				Statistic: result.Number(d.Statistic), P: result.Number(d.P), PAdjusted: result.Number(d.Adjusted), Lower: result.Number(d.Lower), Upper: result.Number(d.Upper),
			})
		}
		if side == dist.Two {
			a.letters(m, method, p, fam, r, letters)
		}
	}
	if approximate {
		a.note("approximate", m.name, prose.Approximate(a.plan, m.name, name))
	}
	if correlations {
		a.note("correlations", m.name, prose.Correlations(name))
	}
	if method == compare.Holm || method == compare.NewmanKeuls || method == compare.Duncan {
		a.note("no-simultaneous-limits", m.name, prose.NoSimultaneousLimits(name))
	}
	start := len(a.out.Means) - len(m.cells)
	for c := range m.cells {
		a.out.Means[start+c].Letters = letters[c]
	}
}

// family is a set of differences judged together.
type family struct {
	at    result.Levels // levels of the other factors of a slice
	cells []int
	pairs []compare.Pair
	label func(cell int) string
}

// families lists the families of a term.
func (a *analyst) families(m *termMeans, method compare.Method) []family {
	all := make([]int, len(m.cells))
	for c := range all {
		all[c] = c
	}
	whole := func(c int) string { return m.text(a.plan, c) }
	if len(m.factors) == 1 {
		f := &a.plan.Factors[m.factors[0]]
		if method == compare.Dunnett {
			if len(f.Control) == 0 {
				return nil
			}
			return []family{{cells: all, pairs: withControl(all, f.Control[0]), label: whole}}
		}
		return []family{{cells: all, pairs: pairs(all), label: whole}}
	}
	if a.plan.Protocol.Analysis.Pairs == "all" && method != compare.Dunnett {
		return []family{{cells: all, pairs: pairs(all), label: whole}}
	}
	// Slices: one factor varies within each combination of the others.
	var out []family
	for v := range m.factors {
		f := &a.plan.Factors[m.factors[v]]
		if method == compare.Dunnett && len(f.Control) == 0 {
			continue
		}
		slices := map[string]*family{}
		var order []string
		for c := range m.cells {
			var key []string
			at := result.Levels{}
			for i, g := range m.factors {
				if i != v {
					l := a.plan.Factors[g].Levels[m.cells[c][i]]
					key = append(key, l)
					at = append(at, result.FactorLevel{Factor: a.plan.Factors[g].Name, Level: l})
				}
			}
			k := strings.Join(key, "\x00")
			if slices[k] == nil {
				slices[k] = &family{at: at, label: func(c int) string { return f.Levels[m.cells[c][v]] }}
				order = append(order, k)
			}
			slices[k].cells = append(slices[k].cells, c)
		}
		for _, k := range order {
			s := slices[k]
			if method == compare.Dunnett {
				control := -1
				for _, c := range s.cells {
					if m.cells[c][v] == f.Control[0] {
						control = c
					}
				}
				s.pairs = withControl(s.cells, control)
			} else {
				s.pairs = pairs(s.cells)
			}
			out = append(out, *s)
		}
	}
	return out
}

func pairs(cells []int) []compare.Pair {
	if len(cells) > maxListed {
		return nil
	}
	var out []compare.Pair
	for i, c := range cells {
		for _, d := range cells[i+1:] {
			out = append(out, compare.Pair{A: c, B: d})
		}
	}
	return out
}

// withControl pairs every cell with the control, treatment minus control.
func withControl(cells []int, control int) []compare.Pair {
	var out []compare.Pair
	for _, c := range cells {
		if c != control {
			out = append(out, compare.Pair{A: c, B: control})
		}
	}
	return out
}

// letters marks means of one family that were not found different by a common letter;
// the largest mean bears the first letter. They are withheld, with a note, where the
// trade withholds them.
func (a *analyst) letters(m *termMeans, method compare.Method, p float64, fam family, r compare.Result, out []*string) {
	setting := a.plan.Protocol.Analysis.Letters
	if setting == "false" || method == compare.Dunnett {
		return
	}
	if len(fam.at) > 0 {
		return // slices overlap: a letter would mean two things
	}
	if setting != "true" {
		if len(m.factors) == 1 && a.plan.Factors[m.factors[0]].Values != nil {
			a.note("letters-withheld", m.name, prose.LettersWithheld("levels are graded, and trends say more than differences of single levels"))
			return
		}
	}
	if method == compare.LSD || method == compare.NewmanKeuls || method == compare.Duncan {
		switch {
		case math.IsNaN(p):
			a.note("letters-withheld", m.name, prose.LettersWithheld("the term has no F to protect them"))
			return
		case p > a.alpha:
			a.note("letters-withheld", m.name, prose.LettersWithheld("F of the term is above the level of significance"))
			return
		}
	}
	differ := map[compare.Pair]bool{}
	for _, d := range r.Differences {
		differ[d.Pair] = d.Adjusted <= a.alpha
	}
	var known []int
	for _, c := range fam.cells {
		if m.known(c) {
			known = append(known, c)
		}
	}
	if len(known) < 2 {
		return
	}
	order := make([]int, len(known))
	for i := range order {
		order[i] = i
	}
	sort.SliceStable(order, func(i, j int) bool { return m.est.value(m.at[known[order[i]]]) > m.est.value(m.at[known[order[j]]]) })
	marks := compare.Letters(len(known), func(i, j int) bool {
		return differ[compare.Pair{A: known[i], B: known[j]}] || differ[compare.Pair{A: known[j], B: known[i]}]
	}, order)
	for i, c := range known {
		out[c] = &marks[i]
	}
}
