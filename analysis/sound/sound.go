// Package sound looks at the design of a trial before anything is analysed: at the
// numbers that the plan fixes, at what the allotment made of them, and at what the
// protocol plans to do with them. A sound design gets few lines.
package sound

import (
	"fmt"
	"slices"

	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/diag"
	"penwright/protocol/layout"
)

// Level is how grave a finding is.
type Level int

// The levels. A Pass is looked at and found good; it stands in the report, not among
// the messages.
const (
	Pass Level = iota
	Note
	Warning
)

func (l Level) String() string { return [...]string{"pass", "note", "warning"}[l] }

// Finding is one thing found about a design. Message and Hint are worded as those of a
// diagnostic.
type Finding struct {
	Code          string
	Level         Level
	Pos           diag.Pos
	Key           string
	Message, Hint string
	// Said tells that an earlier stage has reported it already.
	Said bool
}

// Check checks the design of a trial, with its allotment and its data as far as there
// are any. It needs the plan. What opening the trial said of the design stands among
// the findings, so that they are complete.
func Check(t *trial.Trial) []Finding {
	c := &checker{trial: t, plan: t.Plan}
	c.within()
	c.errors()
	c.replication()
	c.undeclared()
	c.grouped()
	c.inseparable()
	c.blocks()
	c.terms()
	c.listed()
	c.trends()
	c.primary()
	c.carryOver()
	c.moved()
	c.earlier()
	return c.found
}

// List gives the findings that are to be reported: neither passed nor said before.
func List(found []Finding) diag.List {
	var list diag.List
	for _, f := range found {
		if f.Level == Pass || f.Said {
			continue
		}
		severity := diag.Note
		if f.Level == Warning {
			severity = diag.Warning
		}
		list.Add(diag.Diagnostic{Pos: f.Pos, Key: f.Key, Severity: severity, Code: f.Code, Message: f.Message, Hint: f.Hint})
	}
	return list
}

// Results gives the findings as they stand in the results.
func Results(found []Finding) []result.Check {
	out := make([]result.Check, len(found))
	for i, f := range found {
		out[i] = result.Check{Code: f.Code, Level: f.Level.String(), Text: prose.Sentence(f.Message), Where: f.Pos.String(), Reason: reason(f.Code)}
	}
	return out
}

type checker struct {
	trial *trial.Trial
	plan  *layout.Plan
	found []Finding

	constant []bool // by factor: it does not vary within some larger unit
}

// at adds a finding at a key of the protocol.
func (c *checker) at(key, code string, level Level, message, hint string) {
	pos := c.plan.Protocol.Pos(key)
	if pos.File == "" {
		pos.File = c.plan.Protocol.File
	}
	c.found = append(c.found, Finding{Code: code, Level: level, Pos: pos, Key: key, Message: message, Hint: hint})
}

func unitKey(u int) string { return fmt.Sprintf("unit[%d]", u) }

// errors compares the error degrees of freedom of every term with those asked for.
func (c *checker) errors() {
	least := c.plan.Protocol.Analysis.ErrorDFMin
	for i := range c.plan.Terms {
		t := &c.plan.Terms[i]
		if t.Stratum < 0 && t.Over < 0 || t.ErrorDF < 0 {
			continue // not tested, which is said when the plan is made
		}
		if slices.ContainsFunc(t.Factors, func(f int) bool { return c.constant[f] }) {
			continue // its error is another one than the plan's
		}
		if t.ErrorDF < least {
			if side, factors, ok := c.square(t.Unit); ok {
				// s squares of side t with rows and columns of their own leave
				// (t − 1)(s(t − 1) − k) to k factors, with common columns (t − 1)(st − 1 − k).
				s := 1
				for (side-1)*(s*(side-1)-factors) < least {
					s++
				}
				now := c.plan.Units[t.Unit].N / (side * side)
				message, hint := prose.SmallSquare(c.plan, t, least, side, now, s, (side-1)*(s*(side-1)-factors), (side-1)*(s*side-1-factors))
				c.at(unitKey(t.Unit), SmallSquare, Warning, message, hint)
				continue
			}
		}
		level := Pass
		if t.ErrorDF < least {
			level = Warning
		}
		message, hint := prose.ErrorDF(c.plan, t, least)
		c.at(unitKey(t.Unit), ErrorDF, level, message, hint)
		if t.ErrorDF == 0 {
			c.found[len(c.found)-1].Said = true // when the plan was made
		}
	}
}

// square tells whether a unit receives its factors in Latin or Graeco-Latin squares, of
// which side and how many factors.
func (c *checker) square(u int) (side, factors int, ok bool) {
	p := c.plan
	switch p.Design.Name {
	case layout.LatinSquare, layout.LatinSquares, layout.GraecoLatin, layout.HyperGraecoLatin:
	default:
		return 0, 0, false
	}
	unit, a := &p.Units[u], p.Allocation(u)
	if len(unit.Crosses) != 2 || a == nil {
		return 0, 0, false
	}
	if a.Separate {
		return len(p.Factors[a.Factors[0]].Levels), len(a.Factors), true
	}
	side = len(a.Combinations)
	return side, 1, side > 2
}

// combinations gives for every instance of a unit the number of the combination of the
// factors fs that it received, the first factor slowest, and how many there are; nil
// where it is not known.
func (c *checker) combinations(u int, fs []int) (of []int32, n int) {
	p, a := c.plan, c.trial.Allotment
	n = 1
	for _, f := range fs {
		if n *= len(p.Factors[f].Levels); n > most {
			return nil, 0
		}
	}
	if a == nil {
		return nil, n
	}
	of = make([]int32, p.Units[u].N)
	for _, f := range fs {
		at := a.LevelAt(f, u)
		if at == nil {
			return nil, n
		}
		for i, l := range at {
			if l < 0 {
				return nil, n
			}
			of[i] = of[i]*int32(len(p.Factors[f].Levels)) + l
		}
	}
	return of, n
}

// most bounds the combinations of treatments and the units that are looked at one by
// one; layouts beyond are said to be what their counts say.
const most = 100_000

// counts is how often each combination of fs stands on unit u, by the allotment or else
// by the plan; nil where only the draw will tell.
func (c *checker) counts(u int, fs []int) []int {
	of, n := c.combinations(u, fs)
	if n == 0 {
		return nil
	}
	counts := make([]int, n)
	if of != nil {
		for _, k := range of {
			counts[k]++
		}
		return counts
	}
	if c.trial.Allotment != nil {
		return nil
	}
	a := c.plan.Allocation(u)
	if a == nil || a.Separate || len(a.Factors) != len(fs) {
		return nil
	}
	for i, f := range a.Factors {
		if fs[i] != f {
			return nil
		}
	}
	return a.Total
}

// cell is the levels of combination k of fs.
func (c *checker) cell(fs []int, k int) []int {
	levels := make([]int, len(fs))
	for i := len(fs) - 1; i >= 0; i-- {
		n := len(c.plan.Factors[fs[i]].Levels)
		levels[i] = k % n
		k /= n
	}
	return levels
}

// replication looks at how many units each treatment has.
func (c *checker) replication() {
	p := c.plan
	for u := range p.Units {
		a := p.Allocation(u)
		if a == nil {
			continue
		}
		if single := c.single(u); single || a.Checks != nil || a.Separate {
			continue
		}
		counts := c.counts(u, a.Factors)
		if counts == nil {
			continue
		}
		lo, hi := 0, 0
		for k := range counts {
			if counts[k] < counts[lo] {
				lo = k
			}
			if counts[k] > counts[hi] {
				hi = k
			}
		}
		stated := len(p.Protocol.Units[u].Replicates) > 0
		level := Note
		if counts[lo] == counts[hi] || stated {
			level = Pass
		}
		message, hint := prose.Replication(p, u, counts[lo], counts[hi],
			prose.CellText(p, a.Factors, c.cell(a.Factors, lo)), prose.CellText(p, a.Factors, c.cell(a.Factors, hi)), stated)
		c.at(unitKey(u), Replication, level, message, hint)
	}
}

// single finds terms of a unit of which a cell stands on one instance only. The entries
// of an augmented design are meant so.
func (c *checker) single(u int) bool {
	p := c.plan
	if a := p.Allocation(u); a.Checks != nil {
		return false
	}
	any := false
	for i := range p.Terms {
		t := &p.Terms[i]
		if t.Unit != u {
			continue
		}
		counts := c.counts(u, t.Factors)
		if counts == nil {
			continue
		}
		ones, first := 0, -1
		filled := 0
		for k, n := range counts {
			if n > 0 {
				filled++
			}
			if n == 1 {
				if ones++; first < 0 {
					first = k
				}
			}
		}
		if ones == 0 || any {
			continue
		}
		all := ones == filled
		message, hint := prose.SingleUnit(p, t, prose.CellText(p, t.Factors, c.cell(t.Factors, first)), all)
		c.at(unitKey(u), SingleUnit, Warning, message, hint)
		any = true
	}
	return any
}

// inseparable finds units that are one and the same: each of the larger holds one.
func (c *checker) inseparable() {
	p := c.plan
	for u := range p.Units {
		unit := &p.Units[u]
		if unit.Crosses != nil || unit.Within < 0 || unit.Role == layout.Sampling {
			continue
		}
		if n := p.Units[unit.Within].N; n > 1 && n == unit.N {
			message, hint := prose.Inseparable(p, u)
			c.at(unitKey(u), Inseparable, Warning, message, hint)
		}
	}
}

// earlierCodes are the codes of earlier stages that are findings about a design.
var earlierCodes = map[string]bool{
	protocol.LateCovariate: true, protocol.NoPrimary: true, protocol.UnmaskedAssessment: true,
	layout.BlocksUneven: true, layout.NoError: true, layout.NoExactError: true, layout.CalledDiffers: true, layout.CalledUnknown: true,
	allot.UnequalAllotment: true,
}

// earlier takes up what opening the trial said of the design, a code's first finding
// with the number of the others.
func (c *checker) earlier() {
	first := map[string]int{}
	more := map[string]int{}
	for _, d := range c.trial.Said {
		if !earlierCodes[d.Code] {
			continue
		}
		if _, ok := first[d.Code]; ok {
			more[d.Code]++
			continue
		}
		first[d.Code] = len(c.found)
		level := Note
		if d.Severity != diag.Note {
			level = Warning
		}
		c.found = append(c.found, Finding{Code: d.Code, Level: level, Pos: d.Pos, Key: d.Key, Message: d.Message, Hint: d.Hint, Said: true})
	}
	for i := range c.found {
		if f := &c.found[i]; f.Said && more[f.Code] > 0 {
			f.Message += fmt.Sprintf(" (and %d more of the kind)", more[f.Code])
		}
	}
}
