package layout

import (
	"fmt"
	"strings"
)

// String prints the plan as text, one fact a line: what tests compare and a developer
// reads.
func (p *Plan) String() string {
	var w strings.Builder
	fmt.Fprintf(&w, "design %s\n", p.Design.Name)
	for _, part := range p.Design.Parts {
		fmt.Fprintf(&w, "  %s\n", part)
	}
	for u, unit := range p.Units {
		fmt.Fprintf(&w, "unit %s %d %s", unit.Name, unit.N, unit.Role)
		if unit.Within >= 0 {
			fmt.Fprintf(&w, " within %s", p.Units[unit.Within].Name)
		}
		for _, v := range unit.Crosses {
			fmt.Fprintf(&w, " crosses %s", p.Units[v].Name)
		}
		for _, f := range unit.Receives {
			fmt.Fprintf(&w, " receives %s", p.Factors[f].Name)
		}
		for _, f := range unit.Carries {
			fmt.Fprintf(&w, " carries %s", p.Factors[f].Name)
		}
		if unit.Random {
			w.WriteString(" random")
		}
		if unit.Interacts {
			w.WriteString(" interacts")
		}
		if u == p.Smallest {
			w.WriteString(" smallest")
		}
		w.WriteByte('\n')
		if a := p.allocations[u]; a != nil {
			fmt.Fprintf(&w, "  allocation")
			switch {
			case a.Separate:
				w.WriteString(" separate")
			case len(a.Total) > 12:
				fmt.Fprintf(&w, " %d combinations", len(a.Total))
			default:
				fmt.Fprintf(&w, " %v", a.Total)
			}
			for _, v := range a.Blocks {
				fmt.Fprintf(&w, " in %s", p.Units[v].Name)
			}
			fmt.Fprintf(&w, " complete %v\n", a.Complete)
		}
	}
	for _, s := range p.Strata {
		fmt.Fprintf(&w, "stratum %s %d error %d\n", s.Name, s.DF, s.ErrorDF)
	}
	for _, t := range p.Terms {
		in := "none"
		if t.Stratum >= 0 {
			in = p.Strata[t.Stratum].Name
		}
		fmt.Fprintf(&w, "term %s %d on %s in %s error %d\n", t.Name, t.DF, p.Units[t.Unit].Name, in, t.ErrorDF)
	}
	lines := p.Skeleton()
	for i := range p.Protocol.Repeated {
		more := p.Repeated(i)
		for k := range more {
			if more[k].Over >= 0 {
				more[k].Over += len(lines)
			}
		}
		lines = append(lines, more...)
	}
	for _, l := range lines {
		fmt.Fprintf(&w, "%-16s %-24s %6d %s", l.Stratum, l.Source, l.DF, l.Kind)
		if l.Over >= 0 {
			fmt.Fprintf(&w, " over %s/%s", lines[l.Over].Stratum, lines[l.Over].Source)
		}
		for _, c := range l.Random {
			name := "residual"
			switch {
			case c.Crossed >= 0:
				name = p.Crossed[c.Crossed].Name
			case c.Unit != p.Smallest:
				name = p.Units[c.Unit].Name
			}
			fmt.Fprintf(&w, " + %g %s", c.N, name)
		}
		w.WriteByte('\n')
	}
	return w.String()
}

func (r Role) String() string { return [...]string{"block", "experimental", "sampling"}[r] }
