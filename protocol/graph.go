package protocol

import (
	"fmt"
	"slices"

	"penwright/protocol/diag"
	"penwright/protocol/internal/tomlpos"
)

// nesting checks how units nest and cross, and that their numbers fit.
func (r *resolver) nesting() {
	p := r.p
	whole := true
	for i, u := range p.Units {
		if u.Within != "" {
			whole = r.refer(at("unit", i, "within"), u.Within, &r.units) && whole
		}
		for j, c := range u.Crosses {
			whole = r.refer(tomlpos.Index(at("unit", i, "crosses"), j), c, &r.units) && whole
		}
	}
	if r.cycles() || !whole {
		return
	}
	for i := range p.Units {
		u := &p.Units[i]
		r.crossing(i)
		r.numbers(i)
		n := r.total(u)
		switch {
		case n > maxCount:
			r.fail(at("unit", i, "count"), TooMany, "", "there are more than %d units of %s", maxCount, quote(u.Name))
			return // what lies within them has too many as well
		case n > maxTreated && len(u.Receives) > 0:
			r.fail(at("unit", i, "count"), TooMany, "", "more than %d units receive treatments", maxTreated)
			return
		}
		if len(u.Animals) > 1 && n > 0 && len(u.Animals) != n {
			r.fail(at("unit", i, "animals"), BadCount, "write one number, or one for each unit", "there are %d numbers of animals and %d units", len(u.Animals), n)
		}
	}
}

// above returns the units that u directly lies within or crosses.
func (u *Unit) above() []string {
	if u.Within != "" {
		return []string{u.Within}
	}
	return u.Crosses
}

// cycles reports units that lie within themselves.
func (r *resolver) cycles() bool {
	const white, grey, black = 0, 1, 2
	state := make([]int, len(r.p.Units))
	found := false
	var visit func(i int)
	visit = func(i int) {
		state[i] = grey
		u := &r.p.Units[i]
		for j, name := range u.above() {
			k := slices.Index(r.units.names, name)
			if k < 0 || r.units.open {
				continue
			}
			switch state[k] {
			case white:
				visit(k)
			case grey:
				found = true
				key := at("unit", i, "within")
				if u.Within == "" {
					key = tomlpos.Index(at("unit", i, "crosses"), j)
				}
				what := fmt.Sprintf("the unit %s lies within itself, by way of %s", quote(name), quote(u.Name))
				if name == u.Name {
					what = fmt.Sprintf("the unit %s lies within itself", quote(name))
				}
				f := r.fail(key, BadUnits, "units go from the largest to the smallest", "%s", what)
				f.Relate(r.p.ValuePos(r.units.paths[k]), "it is declared here")
			}
		}
		state[i] = black
	}
	if r.units.open {
		return true // names do not tell the units
	}
	for i := range r.p.Units {
		if state[i] == white {
			visit(i)
		}
	}
	return found
}

// ancestors returns all units that u lies within or crosses, near and far.
func (r *resolver) ancestors(u *Unit) map[string]bool {
	set := map[string]bool{}
	var climb func(u *Unit)
	climb = func(u *Unit) {
		for _, name := range u.above() {
			if !set[name] {
				set[name] = true
				if v := r.p.Unit(name); v != nil {
					climb(v)
				}
			}
		}
	}
	climb(u)
	return set
}

// crossing reports a unit that crosses another and what lies within it.
func (r *resolver) crossing(i int) {
	u := &r.p.Units[i]
	for j, a := range u.Crosses {
		for k, b := range u.Crosses {
			if j != k && r.ancestors(r.p.Unit(b))[a] {
				r.fail(tomlpos.Index(at("unit", i, "crosses"), k), BadUnits, "cross units of which none lies within another",
					"%s lies within %s, so the two cannot cross", quote(b), quote(a))
				return
			}
		}
	}
}

// total returns the number of units of u in the trial, more than maxCount if there
// are too many, or 0 if it cannot be told from counts alone.
func (r *resolver) total(u *Unit) int {
	if u == nil {
		return 0
	}
	parents := 1
	if u.Within != "" {
		parents = r.total(r.p.Unit(u.Within))
	}
	switch {
	case parents == 0:
		return 0
	case parents > maxCount:
		return parents
	case len(u.Crosses) > 0:
		return r.pairs(u)
	case len(u.Count) == 1:
		return atMost(parents, u.Count[0])
	case len(u.Count) > 1 && len(u.Count) == parents:
		sum := 0
		for _, n := range u.Count {
			if sum += n; sum > maxCount {
				return maxCount + 1
			}
		}
		return sum
	}
	return 0
}

// pairs returns the number of units of a crossing unit where all the crossed units
// lie within the same one, or within none; else 0.
func (r *resolver) pairs(u *Unit) int {
	within := ""
	each := 1
	for i, name := range u.Crosses {
		c := r.p.Unit(name)
		if c == nil || len(c.Count) != 1 || i > 0 && c.Within != within {
			return 0
		}
		within = c.Within
		each = atMost(each, c.Count[0])
	}
	if within == "" {
		return each
	}
	parents := r.total(r.p.Unit(within))
	if parents == 0 {
		return 0
	}
	return atMost(parents, each)
}

// atMost multiplies, and stops above maxCount.
func atMost(a, b int) int {
	if a > maxCount/b {
		return maxCount + 1
	}
	return a * b
}

// numbers checks counts and labels against the number of parent units.
func (r *resolver) numbers(i int) {
	u := &r.p.Units[i]
	if len(u.Crosses) > 0 {
		return
	}
	parents, parent := 1, "the trial"
	if u.Within != "" {
		parents, parent = r.total(r.p.Unit(u.Within)), quote(u.Within)
	}
	if parents > maxCount {
		return
	}
	relate := func(f *diag.Diagnostic, key string) {
		f.Relate(r.p.Pos(at("unit", i, key)), key+" is given here")
	}
	counts := at("unit", i, "count")
	if len(u.Count) > 1 && parents > 0 && len(u.Count) != parents {
		hint := fmt.Sprintf("write one number, or one for each of the %d units of %s", parents, parent)
		if u.Within == "" {
			hint = "write one number"
		}
		r.fail(counts, BadCount, hint, "there are %d counts, and %d parent units", len(u.Count), parents)
		return
	}
	labels := at("unit", i, "labels")
	if len(u.Labels) == 0 || len(u.Count) == 0 {
		return
	}
	node, _ := r.p.index.doc.Find(labels)
	nested := node.Item(0) != nil && node.Item(0).Kind == tomlpos.Array
	if !nested {
		for _, n := range u.Count {
			if n != len(u.Labels[0]) {
				hint := "let count be the number of labels"
				if len(u.Count) > 1 {
					hint = "write one list of labels for each parent unit"
				}
				f := r.fail(labels, BadCount, hint, "there are %d labels for %d units", len(u.Labels[0]), n)
				relate(f, "count")
				return
			}
		}
		return
	}
	if parents > 0 && len(u.Labels) != parents {
		r.fail(labels, BadCount, "write one list for all parent units, or one for each", "there are %d lists of labels, and %d parent units", len(u.Labels), parents)
		return
	}
	for j, list := range u.Labels {
		n := u.Count[0]
		if len(u.Count) > 1 {
			n = u.Count[min(j, len(u.Count)-1)]
		}
		if len(list) != n {
			f := r.fail(tomlpos.Index(labels, j), BadCount, "give each unit its label", "there are %d labels for %d units", len(list), n)
			relate(f, "count")
		}
	}
}
