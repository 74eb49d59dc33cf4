package welfare

import (
	"slices"
	"strings"

	"penwright/protocol"
)

// Guideline is a list of what a report on a trial should tell.
type Guideline struct {
	Name  string
	Items []Item
}

// Item is one item of a guideline in our words, with what would answer it.
type Item struct {
	Set    string // heading that it stands under
	Number string // as the guideline has it
	Topic  string
	Asks   string
	Plan   bool // a plan can answer it, before there are data
	Parts  []Part
	Places []string // identifiers of tables and sections that hold the answer, the nearest first

	// Mark is C, C2, or M for what is common practice and was not read anywhere: Source is
	// then empty. Memory is what of the item is known from memory alone.
	Mark                         string
	Source, Clause, Seen, Memory string
}

// Part is one of the things that an item asks for.
type Part struct {
	What     string
	Optional bool // asked where it matters: the item is answered without it
	// Computed names what is worked out from plan, draw and results; empty where keys or
	// sections answer.
	Computed string
	// Sections are words of headings under which the author’s own text stands; its words
	// must hold one of Stems, or name the animals.
	Sections, Stems []string
	Animals         bool
	// Keys are the keys of the protocol that answer, any of them. Beside Computed they are
	// what the author may add.
	Keys []Key
}

// Key is a key of the protocol, or a command where Command is true. A Fact may be a single
// word; a Sentence must be longer than other texts.
type Key struct {
	Name                    string
	Fact, Sentence, Command bool
}

// Guidelines are those that concern the trial of a protocol: ARRIVE 2.0 with animals, with
// animals that food comes from REFLECT too, and else what readers of field trials ask.
func Guidelines(p *protocol.Protocol) []Guideline {
	switch {
	case !withAnimals(p):
		return []Guideline{guideline("field")}
	case foodAnimals(p):
		return []Guideline{guideline("arrive"), guideline("reflect")}
	}
	return []Guideline{guideline("arrive")}
}

// guidelineNames are what the guidelines are called.
var guidelineNames = map[string]string{"arrive": "ARRIVE 2.0", "reflect": "REFLECT", "field": "Field trials"}

func guideline(key string) Guideline {
	g := Guideline{Name: guidelineNames[key]}
	for _, x := range loaded().asked {
		if x.guideline == key {
			g.Items = append(g.Items, x.Item)
		}
	}
	return g
}

// withAnimals tells whether a trial has animals: by their description, by what is stated of
// their welfare, by their number, or, where nothing tells of a crop, by the names of the
// units and of the trial.
func withAnimals(p *protocol.Protocol) bool {
	if p.Animals != nil || p.Welfare != nil {
		return true
	}
	crop := p.Material != nil || p.Site != nil || p.Plot != nil
	return !crop && identify(p.Trial.Title) != nil || slices.ContainsFunc(p.Units, func(u protocol.Unit) bool {
		return u.Animals != nil || u.AnimalsColumn != "" || !crop && (IsAnimal(u.Name) || slices.Contains(housed, u.Name))
	})
}

// housed are units that hold animals (common practice, no source).
var housed = []string{"pen", "cage", "hutch", "litter", "herd", "flock", "paddock", "stall", "kennel"}

// foodAnimals tells whether food comes from the animals of a trial.
func foodAnimals(p *protocol.Protocol) bool {
	var texts []string
	if p.Animals != nil {
		if f := p.Animals.FoodChain; f != nil && *f {
			return true
		}
		texts = append(texts, p.Animals.Species)
	} else {
		for _, u := range p.Units {
			texts = append(texts, strings.ReplaceAll(u.Name, "_", " "))
		}
		texts = append(texts, p.Trial.Title)
	}
	for _, s := range texts {
		if a := identify(s); a != nil {
			return a.is("meat|milk|eggs|fish") && !a.is("zebrafish")
		}
	}
	return false
}

// IsAnimal tells whether a unit of that name is one animal.
func IsAnimal(unit string) bool {
	text := strings.ReplaceAll(unit, "_", " ")
	return says(text, "animal", "bird") || identify(text) != nil
}

// SpeciesWords are the words that mean the species of a text; none where it is not known.
func SpeciesWords(text string) []string {
	if a := identify(text); a != nil {
		return slices.Clone(a.words)
	}
	return nil
}

// asked is an item with its guideline.
type asked struct {
	guideline string
	Item
}

// readGuidelines reads the items of all guidelines.
func readGuidelines() []asked {
	var out []asked
	for _, r := range rows("guideline", "guideline", "set", "number", "topic", "asks", "parts", "places", "when", "source", "clause", "seen", "status", "memory") {
		x := asked{guideline: r[0], Item: Item{Set: r[1], Number: r[2], Topic: r[3], Asks: r[4], Places: strings.Fields(r[6]), Plan: r[7] == "plan",
			Source: r[8], Clause: r[9], Seen: r[10], Mark: r[11], Memory: r[12]}}
		for _, s := range strings.Split(r[5], ";") {
			x.Parts = append(x.Parts, parsePart(s))
		}
		if x.Mark != "M" {
			citation(r[8], "", r[9], r[10], r[11])
		}
		if (x.Mark == "M") != (x.Source == "") || r[7] != "plan" && r[7] != "report" || guidelineNames[r[0]] == "" {
			panic("welfare: a row of the guidelines cannot be read")
		}
		out = append(out, x)
	}
	return out
}

// parsePart reads "what: =computed | key | ~fact | +sentence | !command" or "what: @heading
// +heading %stem+stem | key", where "what?" is optional.
func parsePart(s string) Part {
	what, how, ok := strings.Cut(s, ":")
	p := Part{What: strings.TrimSpace(what)}
	if !ok || p.What == "" {
		panic("welfare: a row of the guidelines cannot be read")
	}
	if p.What, ok = strings.CutSuffix(p.What, "?"); ok {
		p.Optional = true
	}
	for _, w := range strings.Split(how, "|") {
		w = strings.TrimSpace(w)
		switch rest := strings.TrimLeft(w, "=@~+!"); {
		case rest == "":
			panic("welfare: a row of the guidelines cannot be read")
		case w[0] == '=':
			p.Computed = rest
		case w[0] == '@':
			sections, stems, _ := strings.Cut(rest, " %")
			p.Sections = strings.Split(sections, "+")
			if stems == "=animals" {
				p.Animals = true
			} else if stems != "" {
				p.Stems = strings.Split(stems, "+")
			}
		default:
			p.Keys = append(p.Keys, Key{Name: rest, Fact: w[0] == '~', Sentence: w[0] == '+', Command: w[0] == '!'})
		}
	}
	return p
}
