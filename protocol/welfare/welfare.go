// Package welfare compares what a protocol says of its animals with published limits:
// space, group, monitoring, blood, doses, feed off, endpoints, severity, residues.
// The numbers are data rows (data/*.csv), each with its document, jurisdiction, clause,
// the day it was taken over from the checked list, and how it was read. What is known
// from memory alone is a Recalled: it holds no number and can reach no comparison.
//
// The package approves nothing and forbids nothing. Every finding defers to the ethics
// committee, the attending veterinarian and local law, and no method of killing is
// named here.
package welfare

import (
	"slices"
	"strings"

	"penwright/protocol"
	"penwright/protocol/diag"
	"penwright/protocol/layout"
)

// Deference ends every caution.
const Deference = "the ethics committee’s decision, the attending veterinarian’s advice and local law take precedence over this note"

// Level is what a comparison came to.
type Level int

// The levels. A Note was not compared, or needs no change; a Warning is outside a limit,
// or lacks what a limit or a committee asks for.
const (
	Pass Level = iota
	Note
	Warning
)

// String gives the word for l.
func (l Level) String() string {
	switch l {
	case Pass:
		return "pass"
	case Note:
		return "note"
	}
	return "warning"
}

// Finding is one comparison or one gap. Texts are lower case without a period; numbers
// stand before their unit with a narrow space that does not break.
type Finding struct {
	Code   string
	Level  Level
	About  string // what was looked at, such as space
	Key    string // key of the protocol, with index
	Stated string // what the protocol states; empty: nothing
	Text   string // what the comparison came to
	Hint   string // how to mend it; empty: nothing to mend
	Limits []Quoted
	Rules  []Rule
}

// Quoted is a limit beside what the protocol states.
type Quoted struct {
	Limit
	Stated  string // the protocol's number in the unit of the limit; empty: not compared
	Met     bool   // the protocol keeps to it
	Applied bool   // it is the one, or one of those, that the finding rests on
}

// Words is the limit as it is printed, without its source: "floor per animal, over 50 to
// 85 kg: at least 0.55 m²".
func (l *Limit) Words() string {
	what := l.Quantity
	switch {
	case l.Topic == "blood" && l.band.unit != "":
		what += " in " + digits(l.band.high) + shown(l.band.unit)
	case l.Topic == "dose" && l.Class != "":
		what += ", " + l.Class
	default:
		if l.Class != "" {
			what += ", " + l.Class
		}
		if t := l.band.words(); t != "" {
			what += ", " + t
		}
		if t := l.animals.words(); t != "" {
			what += ", " + t + " animals"
		}
	}
	value := l.Printed + shown(l.Unit)
	switch {
	case l.most:
		value = "at most " + value
	case l.Topic != "circulating volume":
		value = "at least " + value
	}
	if l.Topic == "blood" && l.Unit == "%" {
		value += " of the circulating volume"
	}
	if l.Note != "" {
		value += " (" + l.Note + ")"
	}
	return what + ": " + value
}

// Where is the source of a citation in a few words: document, clause, jurisdiction.
func (c Citation) Where() string {
	return SourceOf(c).Title + ", " + c.Clause + " (" + c.Jurisdiction + ")"
}

// Check compares the animals of a protocol with the tables. Plan may be nil. Without
// animals and without a statement on welfare there is nothing to compare. The order is
// that of the checks, procedures in the order of the file.
func Check(p *protocol.Protocol, plan *layout.Plan) []Finding {
	if p == nil || p.Animals == nil && p.Welfare == nil {
		return nil
	}
	c := &checker{p: p, plan: plan}
	if p.Animals != nil {
		c.animals = *p.Animals
	}
	if p.Welfare != nil {
		c.welfare = *p.Welfare
	}
	if p.Housing != nil {
		c.housing = *p.Housing
	}
	c.animal = identify(c.animals.Species)
	c.classes = classes(p, c.animal)
	c.masses()
	c.read()
	c.approval()
	c.severity()
	c.principles()
	c.space()
	c.group()
	c.environment()
	c.young()
	c.monitoring()
	c.endpoints()
	c.procedures()
	c.bloodTogether()
	c.previous()
	c.staff()
	c.residues()
	c.ending()
	c.records()
	return c.found
}

// LookUp lists what is known from memory alone and concerns the animals of a protocol:
// to be looked up in the official text.
func LookUp(p *protocol.Protocol) []Recalled {
	if p == nil || p.Animals == nil && p.Welfare == nil {
		return nil
	}
	var a *animal
	if p.Animals != nil {
		a = identify(p.Animals.Species)
	}
	kinds := map[string]bool{}
	if p.Welfare != nil {
		for _, x := range p.Welfare.Procedures {
			kinds[x.Kind] = true
		}
	}
	food := p.Animals != nil && p.Animals.FoodChain != nil && *p.Animals.FoodChain
	var out []Recalled
	for _, r := range loaded().recalled {
		wanted := true
		switch r.Topic {
		case "blood":
			wanted = kinds["blood sample"]
		case "feed withdrawal":
			wanted = kinds["fasting"]
		case "transport":
			wanted = kinds["transport"]
		case "diet":
			wanted = kinds["deficient diet"]
		case "marking":
			wanted = kinds["marking"]
		case "residues":
			wanted = food
		case "killing":
			wanted = p.Welfare != nil && p.Welfare.Euthanasia.Body != ""
		}
		if wanted && a.is(r.Species) {
			out = append(out, r)
		}
	}
	return out
}

// Diagnostics are the findings of level Warning, placed in the protocol file. None is an
// error: the program forbids nothing.
func Diagnostics(p *protocol.Protocol, findings []Finding) diag.List {
	var out diag.List
	for _, f := range findings {
		if f.Level != Warning {
			continue
		}
		pos := p.Pos(f.Key)
		if p.Given(f.Key) {
			pos = p.ValuePos(f.Key)
		}
		hint := Deference
		if f.Hint != "" {
			hint = f.Hint + "; " + Deference
		}
		out.Add(diag.Diagnostic{Pos: pos, Key: f.Key, Severity: diag.Warning, Code: f.Code, Message: plain(f.Text), Hint: plain(hint)})
	}
	return out
}

// plain sets ordinary spaces between numbers and units, as terminals want them.
func plain(s string) string { return strings.ReplaceAll(s, thin, " ") }

// checker collects the findings of one protocol.
type checker struct {
	p       *protocol.Protocol
	plan    *layout.Plan
	animals protocol.Animals
	welfare protocol.Welfare
	housing protocol.Housing
	animal  *animal // nil: the species is not known here
	classes []string

	least, most float64 // body mass in kg: the smallest at the start, the largest at the end; 0: not known
	mostKey     string  // the key that states the largest
	found       []Finding
	drawn       []draw // blood of all procedures, for their sum
}

func (c *checker) add(f Finding) { c.found = append(c.found, f) }

// pick lists the limits of a topic and quantity that hold for the animals; empty
// quantity: all.
func (c *checker) pick(topic, quantity string) []Limit {
	var out []Limit
	for _, l := range loaded().limits {
		if l.Topic == topic && (quantity == "" || l.Quantity == quantity) && c.animal.is(l.Species) && (l.Class == "" || slices.Contains(c.classes, l.Class)) {
			out = append(out, l)
		}
	}
	return out
}

// name is the species in running text.
func (c *checker) name() string {
	if c.animal == nil {
		return "this species"
	}
	return c.animal.name
}

// strictest marks as applied the strictest of the limits that are not only shown and
// tells whether it is met. Ok is false when there is none to apply.
func strictest(q []Quoted) (best int, ok bool) {
	best = -1
	for i := range q {
		if q[i].shown {
			continue
		}
		if best < 0 || stricter(&q[i].Limit, &q[best].Limit) {
			best = i
		}
	}
	if best < 0 {
		return 0, false
	}
	for i := range q {
		q[i].Applied = !q[i].shown && q[i].value == q[best].value && q[i].Unit == q[best].Unit
	}
	return best, true
}

// stricter tells whether a leaves less room than b; both are of one quantity and unit.
func stricter(a, b *Limit) bool {
	if a.most {
		return a.value < b.value
	}
	return a.value > b.value
}
