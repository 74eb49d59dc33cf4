package layout

import (
	"slices"

	"penwright/protocol/factor"
)

// Kind tells what a line of the skeleton analysis is.
type Kind int

// The kinds of lines.
const (
	UnitLine  Kind = iota // a unit that holds no terms, all of its stratum
	TermLine              // a treatment term
	PartLine              // a part of the term above it
	CrossLine             // the interaction of a unit with a treatment term
	CarryOver             // the carry-over effect of a crossover
	Trend                 // the polynomials over the periods of a time trend
	TimeLine              // a repeated factor or its interaction with a treatment term
	Residual              // what is left of a stratum
)

func (k Kind) String() string {
	return [...]string{"unit", "term", "part", "crossed", "carry-over", "trend", "time", "residual"}[k]
}

// Line is one row of the skeleton analysis of variance.
type Line struct {
	Stratum string // the unit's name; unit:term where a term is tested over its interaction with a random unit
	Source  string
	DF      int
	Kind    Kind
	Over    int // index of the line it is tested over; -1: none
	Unit    int // the unit of the stratum
	Term    int // index into Plan.Terms, of a part that of its term; -1: none

	// Random lists the variance components of the expected mean square, finest unit
	// first; a term adds its own quadratic component. It is nil where units differ in
	// size, so that no expectation holds for all rows, and for a term that shares its
	// stratum with coarser ones.
	Random []Component
}

// Component is a variance component with its coefficient in an expected mean square,
// in units of one smallest row.
type Component struct {
	Unit    int // -1 for a crossed one
	Crossed int // index into Plan.Crossed, -1 for a unit
	N       float64
}

// Skeleton lists the sources of variation with their degrees of freedom before there
// are data, stratum by stratum. Covariates are not in it, since each response names
// its own; each takes one degree of freedom from the residual it is adjusted in.
func (p *Plan) Skeleton() []Line {
	var out []Line
	over := map[int]int{} // stratum → its residual line
	cross := map[int]int{}
	b := builder{p: p.Protocol, plan: p, up: p.up()}
	extras := b.extras()
	for s, st := range p.Strata {
		role := p.Units[st.Unit].Role
		line := Line{Stratum: st.Name, Over: -1, Unit: st.Unit, Term: -1, Random: p.expected(st.Unit)}
		first := len(out)
		for t, term := range p.Terms {
			if term.Unit != st.Unit {
				continue
			}
			l := line
			l.Source, l.DF, l.Kind, l.Term = term.Name, term.DF, TermLine, t
			if term.Stratum < 0 {
				l.Random = nil
			} else if l.Random != nil {
				for c, of := range p.Crossed {
					if of.Term == t && of.Random {
						l.Random = append(slices.Clone(l.Random), p.crossedComponent(c))
					}
				}
			}
			out = append(out, l)
			for _, part := range p.Parts(t) {
				l.Source, l.DF, l.Kind = part.Name, part.DF, PartLine
				out = append(out, l)
			}
		}
		for _, e := range extras {
			if e.unit == st.Unit {
				l := line
				l.Source, l.DF, l.Kind = e.source, e.df, e.kind
				out = append(out, l)
			}
		}
		for c, of := range p.Crossed {
			if of.Stratum == s {
				l := line
				l.Source, l.DF, l.Kind = of.Name, of.DF, CrossLine
				if of.Random {
					l.Stratum = of.Name // its own stratum, between that of its unit and the coarser ones
					if l.Random != nil {
						l.Random = append(slices.Clone(l.Random), p.crossedComponent(c))
					}
				}
				cross[c] = len(out)
				out = append(out, l)
			}
		}
		if len(out) == first && role == Block {
			line.Source, line.DF, line.Kind = st.Name, st.DF, UnitLine
			out = append(out, line)
			continue
		}
		if st.ErrorDF <= 0 && len(out) > first {
			continue
		}
		line.Source, line.DF, line.Kind = "residual", st.ErrorDF, Residual
		over[s] = len(out)
		out = append(out, line)
	}
	for i := range out {
		l := &out[i]
		switch l.Kind {
		case TermLine, PartLine, CarryOver, Trend, CrossLine:
			if l.Term >= 0 && p.Terms[l.Term].Inexact {
				continue
			}
			if l.Term >= 0 && p.Terms[l.Term].Over >= 0 {
				l.Over = cross[p.Terms[l.Term].Over]
			} else if at, ok := over[p.stratum(l.Unit)]; ok {
				l.Over = at
			}
		}
	}
	return out
}

// up rebuilds which units are coarser from the maps.
func (p *Plan) up() [][]bool {
	up := make([][]bool, len(p.Units))
	for u := range up {
		up[u] = make([]bool, len(p.Units))
		for v := range up[u] {
			up[u][v] = p.coarse[u][v] != nil
		}
	}
	return up
}

// expected is the random part of the expected mean square in the stratum of u: on its
// space the covariance Σ σ²ᵥ Zᵥ Zᵥ′ has the eigenvalue Σ nᵥ σ²ᵥ over the units v that are
// u or finer, with nᵥ the rows in one instance of v (Nelder 1965; from memory). It is
// nil when some nᵥ is not constant.
func (p *Plan) expected(u int) []Component {
	rows := p.Units[p.Smallest].N
	var out []Component
	for i := len(p.Strata) - 1; i >= 0; i-- {
		v := p.Strata[i].Unit
		if !p.finer(v, u) {
			continue
		}
		if len(p.sizes(p.Smallest, v)) > 1 {
			return nil
		}
		if p.finer(u, v) && u != v && p.stratum(v) < p.stratum(u) {
			continue // the same partition, whose space belongs to the other
		}
		out = append(out, Component{Unit: v, Crossed: -1, N: float64(rows / p.Units[v].N)})
	}
	return out
}

func (p *Plan) crossedComponent(c int) Component {
	of := p.Crossed[c]
	cells := p.Units[of.Unit].N
	for _, f := range p.Terms[of.Term].Factors {
		cells *= len(p.Factors[f].Levels)
	}
	return Component{Unit: -1, Crossed: c, N: float64(p.Units[p.Smallest].N) / float64(cells)}
}

// Factor is unit u as a partition of the smallest units, the rows of the plan.
func (p *Plan) Factor(u int) factor.Factor {
	return p.on(p.Smallest, u)
}

// Repeated lists the lines that repeated measures i of the protocol adds below those
// of Skeleton, in a stratum named after the unit and the repeated factor: the times,
// their interactions with the terms of that unit and coarser ones, and the residual.
// It is nil when the repeated factor is measured on no unit of the plan.
func (p *Plan) Repeated(i int) []Line {
	r := p.Protocol.Repeated[i]
	on := slices.IndexFunc(p.Units, func(u Unit) bool { return u.Name == r.On })
	if on < 0 {
		return nil
	}
	times := len(r.At) - 1
	line := Line{Stratum: r.On + ":" + r.Name, Over: -1, Unit: on, Term: -1}
	left := p.Units[on].N * times
	add := func(source string, df, term int) []Line {
		l := line
		l.Source, l.DF, l.Kind, l.Term = source, df, TimeLine, term
		left -= df
		return []Line{l}
	}
	out := add(r.Name, times, -1)
	for t, term := range p.Terms {
		if p.coarse[on][term.Unit] != nil {
			out = append(out, add(term.Name+":"+r.Name, term.DF*times, t)...)
		}
	}
	if left > 0 {
		for l := range out {
			out[l].Over = len(out)
		}
		line.Source, line.DF, line.Kind = "residual", left, Residual
		out = append(out, line)
	}
	return out
}
