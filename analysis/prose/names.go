// Package prose makes sentences of codes and results, once, for results.json, terminal
// and report alike. Nothing else in the program words a result.
package prose

import (
	"slices"
	"strings"
	"unicode"

	"penwright/protocol"
	"penwright/protocol/layout"
)

// Plural gives the English plural of a unit's name as the trade would write it.
func Plural(s string) string {
	switch strings.ToLower(s) {
	case "":
		return ""
	case "sheep", "fish", "cattle", "series", "swine":
		return s
	case "child":
		return s + "ren"
	case "calf", "half", "leaf", "shelf":
		return s[:len(s)-1] + "ves"
	case "mouse", "louse":
		return s[:len(s)-4] + "ice"
	case "goose":
		return s[:len(s)-4] + "eese"
	case "ox":
		return s + "en"
	case "man", "woman":
		return s[:len(s)-2] + "en"
	}
	switch {
	case strings.HasSuffix(s, "s") || strings.HasSuffix(s, "x") || strings.HasSuffix(s, "ch") || strings.HasSuffix(s, "sh") || strings.HasSuffix(s, "z"):
		return s + "es"
	case strings.HasSuffix(s, "y") && len(s) > 1 && !strings.ContainsRune("aeiou", rune(s[len(s)-2])):
		return s[:len(s)-1] + "ies"
	}
	return s + "s"
}

// UnitName is what a unit is called in running text.
func UnitName(u *layout.Unit) string {
	if labelled(u.Label, u.Name) {
		return lowerFirst(u.Label)
	}
	return strings.ReplaceAll(u.Name, "_", " ")
}

// inTime are words for units that follow one another in time (common practice, no
// source).
var inTime = []string{"period", "week", "day", "month", "phase", "time", "stage", "round", "season", "run"}

// InTime tells whether a unit is named as one that follows others in time, such as a
// period.
func InTime(u *layout.Unit) bool {
	for _, word := range strings.FieldsFunc(strings.ToLower(u.Name+" "+u.Label), func(r rune) bool { return r == '_' || r == ' ' || r == '-' }) {
		if slices.Contains(inTime, strings.TrimSuffix(word, "s")) {
			return true
		}
	}
	return false
}

// lowerFirst lowers the first letter of a label unless the word looks like a name or
// an abbreviation.
func lowerFirst(s string) string {
	r := []rune(s)
	if len(r) > 1 && strings.ToUpper(string(r[0])) == string(r[0]) && strings.ToLower(string(r[1])) == string(r[1]) {
		r[0] = []rune(strings.ToLower(string(r[0])))[0]
	}
	return string(r)
}

// upperFirst raises the first letter, as at the head of a sentence, but not that of a
// sign such as pH.
func upperFirst(s string) string {
	r := []rune(s)
	if len(r) == 0 || len(r) > 1 && unicode.IsLower(r[0]) && unicode.IsUpper(r[1]) {
		return s
	}
	r[0] = []rune(strings.ToUpper(string(r[0])))[0]
	return string(r)
}

// And joins words as in a list: "a, b and c".
func And(words []string) string {
	switch len(words) {
	case 0:
		return ""
	case 1:
		return words[0]
	}
	return strings.Join(words[:len(words)-1], ", ") + " and " + words[len(words)-1]
}

// ErrorName names the variation of a unit that is left after treatments by what varies:
// "pens within blocks", "plots within rows and columns".
func ErrorName(p *layout.Plan, unit int) string {
	u := &p.Units[unit]
	var around []string
	switch {
	case u.Crosses != nil:
		for _, c := range u.Crosses {
			around = append(around, Plural(UnitName(&p.Units[c])))
		}
	case u.Within >= 0:
		around = append(around, Plural(UnitName(&p.Units[u.Within])))
	}
	name := Plural(UnitName(u))
	if len(around) > 0 {
		return name + " within " + And(around)
	}
	received := false
	for _, f := range p.Factors {
		received = received || f.Unit == unit
	}
	if received {
		return name + " treated alike"
	}
	return name
}

// FactorLabel is what a factor is called in tables.
func FactorLabel(f *layout.Factor) string {
	if labelled(f.Label, f.Name) {
		return f.Label
	}
	return upperFirst(strings.ReplaceAll(f.Name, "_", " "))
}

// TermLabel names a term in tables: the labels of its factors joined with a cross.
// Names such as "control v. rest" that are no factor's stand as they are.
func TermLabel(p *layout.Plan, term string) string {
	if i := strings.Index(term, ": "); i > 0 {
		return TermLabel(p, term[:i]) + ": " + term[i+2:]
	}
	parts := strings.Split(term, ":")
	for i, name := range parts {
		parts[i] = label(p, name)
		if i > 0 {
			parts[i] = lowerFirst(parts[i])
		}
	}
	return upperFirst(strings.Join(parts, " × "))
}

// TermText names a term in running text.
func TermText(p *layout.Plan, term string) string { return lowerFirst(TermLabel(p, term)) }

// FactorNamed is a treatment factor of the plan by its name, or a set of times at which
// units are measured again and again, seen as a factor that is given to none of them; nil:
// neither.
func FactorNamed(p *layout.Plan, name string) *layout.Factor {
	for i := range p.Factors {
		if p.Factors[i].Name == name {
			return &p.Factors[i]
		}
	}
	if r := p.Protocol.RepeatedNamed(name); r != nil {
		return &layout.Factor{Name: r.Name, Label: r.Label, Unit: -1, Levels: r.At, Values: r.Values,
			Protocol: &protocol.Factor{Name: r.Name, Label: r.Label, Unit: r.Unit, Levels: r.At, Values: r.Values}}
	}
	return nil
}

// records names the records of a unit that is measured again and again, which results call
// UNIT:TIMES, by what varies: "weeks within pens"; "" where a name is no such thing.
func records(p *layout.Plan, name string) string {
	on, times, _ := strings.Cut(name, ":")
	r := p.Protocol.RepeatedNamed(times)
	if r == nil || r.On != on {
		return ""
	}
	return Plural(TermText(p, times)) + " within " + Plural(TermText(p, on))
}

func label(p *layout.Plan, name string) string {
	if f := FactorNamed(p, name); f != nil {
		return FactorLabel(f)
	}
	for i := range p.Units {
		if p.Units[i].Name == name {
			return upperFirst(UnitName(&p.Units[i]))
		}
	}
	if c := p.Protocol.Covariate(name); c != nil {
		return CovariateLabel(c)
	}
	return strings.ReplaceAll(name, "_", " ")
}

// CovariateLabel is what a covariate is called in tables.
func CovariateLabel(c *protocol.Covariate) string {
	if labelled(c.Label, c.Name) {
		return c.Label
	}
	return upperFirst(strings.ReplaceAll(c.Name, "_", " "))
}

// ResponseLabel is what a response is called in tables.
func ResponseLabel(r *protocol.Response) string {
	if labelled(r.Label, r.Name) {
		return r.Label
	}
	return upperFirst(strings.ReplaceAll(r.Name, "_", " "))
}

// ResponseLabelText is what a response is called in running text.
func ResponseLabelText(r *protocol.Response) string { return lowerFirst(ResponseLabel(r)) }

// labelled tells whether a label was given and is not just the name made readable.
func labelled(label, name string) bool {
	return label != "" && label != name && label != strings.ReplaceAll(name, "_", " ")
}
