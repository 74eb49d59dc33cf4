package prose

import (
	"fmt"
	"strings"

	"penwright/analysis/num"
	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/layout"
)

// small prints whole numbers below eleven as words, as running text wants them.
func small(n int) string {
	words := [...]string{"no", "one", "two", "three", "four", "five", "six", "seven", "eight", "nine", "ten"}
	if n >= 0 && n < len(words) {
		return words[n]
	}
	return num.Count(n)
}

func some(n int, name string) string {
	if n == 1 {
		return "one " + name
	}
	return small(n) + " " + Plural(name)
}

// DateText prints a date as it is written in the protocol.
func DateText(d protocol.Date) string {
	if d == (protocol.Date{}) {
		return ""
	}
	return fmt.Sprintf("%04d-%02d-%02d", d.Year, d.Month, d.Day)
}

// QuantityText prints an amount or a range with its unit.
func QuantityText(q *protocol.Quantity) string {
	if q == nil {
		return ""
	}
	f := func(x float64) string { return num.Fixed(x, min(places(x), 6)) }
	if q.From == q.To {
		return num.Unit(f(q.From), q.Unit)
	}
	return num.Unit(f(q.From)+" to "+f(q.To), q.Unit)
}

func places(x float64) int {
	s := fmt.Sprintf("%.10f", x)
	s = strings.TrimRight(s, "0")
	return len(s) - strings.IndexByte(s, '.') - 1
}

// Units describes the physical units of a plan, one sentence each, from the largest to
// the smallest, and what each received.
func Units(p *layout.Plan) []string {
	var out []string
	for i := range p.Units {
		u := &p.Units[i]
		name := UnitName(u)
		var s string
		switch {
		case u.Crosses != nil:
			var of []string
			for _, c := range u.Crosses {
				of = append(of, UnitName(&p.Units[c]))
			}
			s = fmt.Sprintf("Each %s is one %s, %s in all.", "combination of "+And(of), name, num.Count(u.N))
		case u.Within >= 0:
			w := &p.Units[u.Within]
			lo, hi := perParent(p, i)
			each := some(lo, name)
			if lo != hi {
				each = fmt.Sprintf("%s to %s", small(lo), some(hi, name))
			}
			s = fmt.Sprintf("Each %s holds %s, %s in all.", UnitName(w), each, num.Count(u.N))
		default:
			s = fmt.Sprintf("The trial has %s.", some(u.N, name))
		}
		if lo, hi := span(u.Animals); hi > 0 {
			if lo == hi {
				s += fmt.Sprintf(" A %s holds %s.", name, some(lo, "animal"))
			} else {
				s += fmt.Sprintf(" A %s holds %s to %s.", name, small(lo), some(hi, "animal"))
			}
		}
		if b := basis(p, i); b != "" {
			s += fmt.Sprintf(" %s are formed by %s.", upperFirst(Plural(name)), lowerFirst(b))
		}
		if got := factorNames(p, u.Receives); got != "" {
			s += fmt.Sprintf(" The %s receives %s and is its experimental unit.", name, got)
		}
		if got := factorNames(p, u.Carries); got != "" {
			s += fmt.Sprintf(" The %s carries %s, which was not randomized.", name, got)
		}
		if u.Role == layout.Sampling {
			s += fmt.Sprintf(" %s received nothing of their own: differences between them are sampling error, never the error of a treatment.", upperFirst(Plural(name)))
		}
		out = append(out, s)
	}
	return out
}

func factorNames(p *layout.Plan, fs []int) string {
	var names []string
	for _, f := range fs {
		names = append(names, lowerFirst(FactorLabel(&p.Factors[f])))
	}
	return And(names)
}

func basis(p *layout.Plan, unit int) string {
	if u := p.Protocol.Unit(p.Units[unit].Name); u != nil {
		return u.Basis
	}
	return ""
}

// perParent is the smallest and greatest number of instances of a unit in one parent.
func perParent(p *layout.Plan, unit int) (lo, hi int) {
	w := p.Units[unit].Within
	n := make([]int, p.Units[w].N)
	for _, x := range p.Coarse(unit, w) {
		n[x]++
	}
	return span(n)
}

func span(n []int) (lo, hi int) {
	for i, x := range n {
		if i == 0 || x < lo {
			lo = x
		}
		hi = max(hi, x)
	}
	return lo, hi
}

// Treatments describes the treatment factors, one sentence each.
func Treatments(p *layout.Plan) []string {
	var out []string
	for i := range p.Factors {
		f := &p.Factors[i]
		var levels []string
		for _, l := range f.Levels {
			levels = append(levels, strings.ReplaceAll(l, "-", "−"))
			if f.Values == nil {
				levels[len(levels)-1] = l
			}
		}
		u := ""
		if f.Protocol != nil && f.Protocol.Unit != "" {
			u = "\u202f" + num.UnitText(f.Protocol.Unit)
		}
		shown := levels
		if len(levels) > 30 {
			shown = append(append([]string{}, levels[:28]...), fmt.Sprintf("%s more", num.Count(len(levels)-28)))
		}
		kind := "levels"
		if f.Values != nil {
			kind = "graded levels"
		}
		s := fmt.Sprintf("%s has %s %s: %s%s.", upperFirst(FactorLabel(f)), small(len(f.Levels)), kind, And(shown), u)
		if len(f.Control) == 1 {
			s += fmt.Sprintf(" %s is the control.", upperFirst(LevelText(p, f.Name, f.Levels[f.Control[0]])))
		} else if len(f.Control) > 1 {
			var cs []string
			for _, c := range f.Control {
				cs = append(cs, LevelText(p, f.Name, f.Levels[c]))
			}
			s += fmt.Sprintf(" Controls are %s; comparisons are with the first.", And(cs))
		}
		if f.Carried {
			s += " It is a class that units bring along, known before the draw."
		}
		out = append(out, s)
	}
	return out
}

// DesignName is the recognised name of the design with its qualifications.
func DesignName(p *layout.Plan) string {
	return strings.Join(append([]string{p.Design.Name}, p.Design.Parts...), ", ")
}

// ErrorTerms says for each treatment term what it is tested over.
func ErrorTerms(p *layout.Plan) []string {
	var out []string
	for i := range p.Terms {
		t := &p.Terms[i]
		if t.Stratum < 0 {
			out = append(out, fmt.Sprintf("%s lies in no single stratum of the layout.", upperFirst(TermText(p, t.Name))))
			continue
		}
		s := &p.Strata[t.Stratum]
		out = append(out, fmt.Sprintf("%s is tested over %s with %s degrees of freedom.", upperFirst(TermText(p, t.Name)), ErrorName(p, s.Unit), num.DF(float64(s.ErrorDF))))
	}
	return out
}

// Size words the justification of the number of units as the protocol gives it.
func Size(p *layout.Plan) []string {
	s := p.Protocol.SampleSize
	if s == nil {
		return []string{"The protocol gives no reason for the number of units."}
	}
	var out []string
	what := map[string]string{"power": "by power", "error df": "by the error degrees of freedom it leaves", "precision": "by the wished precision", "stated": "as stated"}[s.Basis]
	line := "The number of units was chosen " + what
	if s.Response != "" {
		if r := p.Protocol.Response(s.Response); r != nil {
			line += " for " + lowerFirst(ResponseLabel(r))
		}
	}
	out = append(out, line+".")
	unit := ""
	if r := p.Protocol.Response(s.Response); r != nil {
		unit = r.Unit
		if r.Transform != "" && r.Transform != "none" {
			unit = "" // on the scale of analysis
		}
	}
	if len(s.SD) == 0 && s.CV != nil && unit != "" {
		unit = "%"
	}
	show := func(x float64) string { return num.Unit(num.Fixed(x, places(x)), unit) }
	var parts []string
	if s.Difference != nil {
		parts = append(parts, "a difference of "+show(*s.Difference))
	}
	if s.DifferencePercent != nil {
		parts = append(parts, fmt.Sprintf("a difference of %s\u202f%% of the mean", num.Fixed(*s.DifferencePercent, places(*s.DifferencePercent))))
	}
	if s.Margin != nil {
		parts = append(parts, "an equivalence margin of "+show(*s.Margin))
	}
	if s.HalfWidth != nil {
		parts = append(parts, "a half width of the interval of "+show(*s.HalfWidth))
	}
	for _, v := range s.SD {
		where := ""
		if v.Stratum != "" {
			where = " between " + Plural(strings.ReplaceAll(v.Stratum, "_", " "))
		}
		parts = append(parts, "a standard deviation"+where+" of "+show(v.Value))
	}
	if s.CV != nil {
		parts = append(parts, fmt.Sprintf("a coefficient of variation of %s\u202f%%", num.Fixed(*s.CV, places(*s.CV))))
	}
	if s.Power != nil {
		parts = append(parts, "a power of "+num.Fixed(*s.Power, 2))
	}
	if s.Attrition != nil {
		parts = append(parts, fmt.Sprintf("a loss of %s\u202f%% of the units", num.Percent(100**s.Attrition)))
	}
	if len(parts) > 0 {
		out = append(out, "It rests on "+And(parts)+".")
	}
	if s.Source != "" {
		out = append(out, "Source: "+s.Source+".")
	}
	return out
}

// Draw tells how the allotment was made.
func Draw(p *layout.Plan, a *allot.Allotment) []string {
	r := p.Protocol.Randomization
	if a == nil {
		return []string{"The treatments have not been drawn yet."}
	}
	switch a.Origin {
	case allot.Elsewhere:
		s := "The allotment was not drawn by this program; it was brought along in allotment.csv."
		if r.Method != "" {
			s += " Method, in the words of the protocol: " + strings.TrimRight(r.Method, ".") + "."
		} else {
			s += " The protocol does not say how it was made."
		}
		return append([]string{s}, Arrangement(p, a)...)
	case allot.FromData:
		s := "No allotment file exists: the treatments written in the data are taken as the allotment, and no record of a draw exists."
		if r.Method != "" {
			s += " Method, in the words of the protocol: " + strings.TrimRight(r.Method, ".") + "."
		}
		return append([]string{s}, Arrangement(p, a)...)
	}
	if len(a.Draws) == 0 {
		return []string{"The allotment bears no record of its draw."}
	}
	d := a.Draws[len(a.Draws)-1]
	out := []string{upperFirst(strings.TrimRight(d.Scheme, ".")) + "."}
	s := fmt.Sprintf("The draw in force is number %d, made from the seed text “%s”", d.Number, d.Seed)
	if d.By != "" {
		s += " by " + d.By
	}
	if t := DateText(d.On); t != "" {
		s += " on " + t
	}
	out = append(out, s+".")
	if d.Candidates > 1 {
		out = append(out, fmt.Sprintf("Of %d candidate draws the best balanced was kept; %d were rejected.", d.Candidates, d.Rejected))
	}
	if d.Animals != "" {
		out = append(out, "Which animal went where, and which are spare, is listed in animals.csv.")
	}
	out = append(out, Arrangement(p, a)...)
	if len(a.Draws) > 1 {
		out = append(out, fmt.Sprintf("Earlier draws, %s in number, are kept with the reason for drawing again.", small(len(a.Draws)-1)))
	}
	return out
}

// Blinding tells who knew the allotment when.
func Blinding(b *protocol.Blinding) []string {
	if b == nil {
		return []string{"The protocol says nothing of masking."}
	}
	var out []string
	for _, x := range []struct{ stage, word string }{
		{stage: "at allotment", word: b.Allocation}, {stage: "during conduct", word: b.Conduct},
		{stage: "when outcomes are assessed", word: b.Assessment}, {stage: "in the analysis", word: b.Analysis},
	} {
		switch x.word {
		case "":
		case "masked":
			out = append(out, "masked "+x.stage)
		case "open":
			out = append(out, "open "+x.stage)
		default:
			out = append(out, x.stage+": "+strings.TrimRight(x.word, "."))
		}
	}
	if len(out) == 0 {
		return []string{"The protocol says nothing of masking."}
	}
	s := []string{"Knowledge of the allotment: " + strings.Join(out, "; ") + "."}
	if b.KeyHolder != "" {
		s = append(s, "Holder of the key: "+strings.TrimRight(b.KeyHolder, ".")+".")
	}
	if d := DateText(b.Unblinded); d != "" {
		s = append(s, "It was opened on "+d+".")
	}
	return s
}

// Design says which design the units make, and whether that is what the protocol calls
// it.
func Design(p *layout.Plan) []string {
	s := fmt.Sprintf("Units and treatments make up this design: %s.", DesignName(p))
	if c := p.Protocol.Trial.Called; c != "" {
		s += fmt.Sprintf(" The protocol calls it “%s”.", c)
	}
	return []string{s}
}
