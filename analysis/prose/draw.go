package prose

import (
	"fmt"
	"strings"

	"penwright/analysis/num"
	"penwright/protocol/allot"
	"penwright/protocol/layout"
)

// Arrangement tells for each set of treatments that its blocks do not hold complete how
// much of the information on their differences is left within blocks, and how often
// treatments stand together.
func Arrangement(p *layout.Plan, a *allot.Allotment) []string {
	if a == nil {
		return nil
	}
	var out []string
	for _, e := range a.Efficiency() {
		var names, blocks []string
		for _, f := range e.Factors {
			names = append(names, lowerFirst(FactorLabel(&p.Factors[f])))
		}
		for _, v := range e.Eliminated {
			blocks = append(blocks, Plural(UnitName(&p.Units[v])))
		}
		of, after := strings.Join(names, " × "), And(blocks)
		if e.Mean == 0 {
			out = append(out, fmt.Sprintf("Some differences of %s cannot be estimated within %s.", of, after))
		} else {
			s := fmt.Sprintf("The efficiency of %s within %s is %s", of, after, num.Fixed(e.Mean, 3))
			if low, high := e.Factor[0], e.Factor[len(e.Factor)-1]; high-low > 1e-9 {
				s += fmt.Sprintf(", the harmonic mean of canonical efficiency factors from %s to %s", num.Fixed(low, 3), num.Fixed(high, 3))
			}
			out = append(out, s+".")
		}
		for _, c := range e.Concurrence {
			var parts []string
			for n, k := range c.Pairs {
				if k > 0 {
					parts = append(parts, fmt.Sprintf("%s %s", some(k, "pair"), often(n)))
				}
			}
			block := UnitName(&p.Units[c.Unit])
			if len(parts) == 1 {
				out = append(out, fmt.Sprintf("Every two treatments stand together in a %s %s.", block, often(len(c.Pairs)-1)))
				continue
			}
			out = append(out, fmt.Sprintf("Treatments stand together in a %s as follows: %s.", block, strings.Join(parts, ", ")))
		}
	}
	return out
}

func often(n int) string {
	switch n {
	case 0:
		return "never"
	case 1:
		return "once"
	case 2:
		return "twice"
	}
	return small(n) + " times"
}
