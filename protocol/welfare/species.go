package welfare

import (
	"slices"
	"strings"
	"unicode"

	"penwright/protocol"
)

// animal is a species of the tables with the words that mean it and the groups that it
// belongs to.
type animal struct {
	name          string
	words, groups []string
}

// is tells whether the species belongs to one of those joined by |.
func (a *animal) is(species string) bool {
	if species == "any" {
		return true
	}
	if a == nil {
		return false
	}
	for _, s := range strings.Split(species, "|") {
		if s == a.name || slices.Contains(a.groups, s) {
			return true
		}
	}
	return false
}

// words splits a text into lower-case words of letters.
func words(s string) []string {
	return strings.FieldsFunc(strings.ToLower(s), func(r rune) bool { return !unicode.IsLetter(r) && !unicode.IsDigit(r) })
}

// named tells whether the words of phrase stand side by side in w, and where.
func named(w []string, phrase string) (at int, ok bool) {
	p := strings.Fields(phrase)
	for i := 0; i+len(p) <= len(w); i++ {
		if slices.Equal(w[i:i+len(p)], p) {
			return i, true
		}
	}
	return 0, false
}

// says tells whether one of the phrases stands in a text, by whole words.
func says(text string, phrases ...string) bool {
	w := words(text)
	for _, p := range phrases {
		if _, ok := named(w, p); ok {
			return true
		}
	}
	return false
}

// identify finds the species that a text means. The longest words win, so that a guinea
// pig is no pig; words that mean different species leave it unknown.
func identify(text string) *animal {
	w := words(text)
	if len(w) > 100 {
		w = w[:100]
	}
	type hit struct{ from, to, species int }
	var hits []hit
	all := loaded().species
	for s := range all {
		for _, phrase := range all[s].words {
			for i := 0; i < len(w); i++ {
				at, ok := named(w[i:], phrase)
				if !ok {
					break
				}
				i += at
				hits = append(hits, hit{from: i, to: i + len(strings.Fields(phrase)), species: s})
			}
		}
	}
	found := -1
	for _, h := range hits {
		inside := slices.ContainsFunc(hits, func(o hit) bool {
			return o.from <= h.from && h.to <= o.to && o.to-o.from > h.to-h.from
		})
		switch {
		case inside || h.species == found:
		case found < 0:
			found = h.species
		default:
			return nil
		}
	}
	if found < 0 {
		return nil
	}
	return &all[found]
}

// classes are the classes of animal that the protocol's words or ages put its animals
// into, as the tables name them.
func classes(p *protocol.Protocol, a *animal) []string {
	if a == nil || p.Animals == nil {
		return nil
	}
	var out []string
	text := strings.Join([]string{p.Animals.Species, p.Animals.Breed, p.Animals.Sex}, "; ")
	_, oldest, aged := in(p.Animals.Age, "time")
	litter := says(text, "with litter", "with litters", "with a litter", "dam", "dams")
	switch a.name {
	case "mouse", "rat":
		if says(text, "breeding pair", "breeding pairs", "breeding trio", "breeding trios") {
			out = append(out, "breeding pair")
		}
		if says(text, "weaned stock") {
			out = append(out, "weaned stock at breeder")
		}
		if litter {
			out = append(out, "mother with litter")
		}
	case "guinea pig":
		if litter {
			out = append(out, "pair with litter")
		}
	case "cattle":
		if says(text, "calf", "calves") || aged && oldest <= 6*units["mo"].factor {
			out = append(out, "calf")
		}
	case "pig", "minipig":
		if says(text, "sow", "sows") {
			out = append(out, "sow")
		}
		if says(text, "gilt", "gilts") && says(text, "served", "after service", "pregnant", "in pig", "gestating") {
			out = append(out, "gilt after service")
		}
		if says(text, "boar", "boars") && says(text, "adult", "breeding", "mature", "stud") {
			out = append(out, "adult boar")
		}
	case "fowl":
		switch {
		case says(text, "broiler", "broilers", "meat chicken", "meat chickens"):
			out = append(out, "broiler")
		case says(text, "hen", "hens", "layer", "layers", "laying", "pullet", "pullets"):
			out = append(out, "laying hen", "laying hen on the floor")
			if caged(p) {
				out[1] = "laying hen in a cage"
			}
		}
	case "rabbit":
		if litter {
			out = append(out, "doe with litter")
		}
		switch youngest, _, _ := in(p.Animals.Age, "time"); {
		case !aged || oldest > 70:
			out = append(out, "rabbit over 10 wk")
		case youngest <= 49:
			out = append(out, "rabbit up to 7 wk")
			if oldest > 49 {
				out = append(out, "rabbit of 7 to 10 wk")
			}
		default:
			out = append(out, "rabbit of 7 to 10 wk")
		}
	}
	return out
}

// caged tells whether the units or the housing speak of cages.
func caged(p *protocol.Protocol) bool {
	for _, u := range p.Units {
		if says(u.Name+" "+u.Label, "cage", "cages") || strings.Contains(u.Name, "cage") {
			return true
		}
	}
	return p.Housing != nil && says(p.Housing.Bedding+" "+p.Housing.Enrichment, "cage", "cages", "enriched cage")
}
