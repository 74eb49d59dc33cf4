package dataset

import (
	"fmt"
	"math"

	"penwright/protocol"
	"penwright/protocol/diag"
	"penwright/protocol/layout"
)

// byUnitInstance is an event that took animals out of a unit.
type byUnitInstance struct {
	index    int
	unit     int
	instance int32
	animals  int
	day      int32
	mass     float64 // kg, of all of them; NaN where it was not weighed
}

// events finds the units of events: those that explain another treatment than allotted,
// and those that took animals away.
func (r *reader) events() {
	for k := range r.plan.Protocol.Events {
		e := &r.plan.Protocol.Events[k]
		if len(e.Unit) == 0 {
			continue
		}
		key := fmt.Sprintf("event[%d]", k)
		unit, instance, ok := r.locate(e.Unit, key+".unit")
		if !ok {
			continue
		}
		switch e.Kind {
		case "wrong treatment", "treatment changed":
			r.changes.add(unit, instance, k)
		case "move":
			r.moves = append(r.moves, k)
		case "death", "removal":
			d := byUnitInstance{index: k, unit: unit, instance: instance, animals: max(e.Animals, 1), mass: math.NaN()}
			if e.On != (protocol.Date{}) {
				d.day = days(e.On)
			}
			if e.Mass != nil {
				scale, known := kilograms[e.Mass.Unit]
				if !known {
					r.fail(key+".mass", BadEvent, "give it in kg or g", "the mass is in %q, which is not known here", e.Mass.Unit)
				}
				d.mass = (e.Mass.From + e.Mass.To) / 2 * scale
			}
			r.departures = append(r.departures, d)
		}
	}
}

// kilograms of one unit of mass, by its UCUM code.
var kilograms = map[string]float64{"kg": 1, "g": 1e-3, "mg": 1e-6, "t": 1000, "[lb_av]": 0.45359237, "[oz_av]": 0.028349523125}

// animals gives, for every instance of a unit, one of the numbers of animalNames:
//
//	animals_start  animals that the plan puts in the unit
//	animals_end    those less the deaths and removals
//	animal_days    Σ over animals of the days from trial.start to the day they left or trial.end
//	mass_lost      Σ of the masses of those that left, in kg; 0 where none did
//
// An event's mass is that of all animals it names together. It is nil, with a message at
// the response, where the protocol does not say enough.
func (r *reader) animals(which int, unit int, key string) []float64 {
	at := [2]int{which, unit}
	if _, done := r.numbers[at]; !done {
		r.numbers[at] = r.countAnimals(which, unit, key)
	}
	return r.numbers[at]
}

func (r *reader) countAnimals(which int, unit int, key string) []float64 {
	plan := r.plan
	name := animalNames[which]
	start := animalsOf(plan, unit)
	if start == nil && which == 3 {
		start = make([]float64, plan.Units[unit].N) // masses need no numbers
		for i := range start {
			start[i] = math.Inf(1)
		}
	}
	if start == nil {
		r.fail(key, BadCompute, fmt.Sprintf("say animals = … on the unit %q", plan.Units[unit].Name), "%s needs the number of animals in each %s", name, plan.Units[unit].Name)
		return nil
	}
	out := make([]float64, len(start))
	copy(out, start)
	if which == 1 {
		return out
	}
	var from, to int32
	if which == 0 {
		t := &plan.Protocol.Trial
		if t.Start == (protocol.Date{}) || t.End == (protocol.Date{}) {
			r.fail(key, BadCompute, "give start and end under [trial]", "%s needs the days on which the trial began and ended", name)
			return nil
		}
		from, to = days(t.Start), days(t.End)
		for i := range out {
			out[i] *= float64(to - from)
		}
	}
	for _, k := range r.moves {
		event := fmt.Sprintf("event[%d]", k)
		r.faults.Add(diag.Diagnostic{Pos: plan.Protocol.ValuePos(event + ".kind"), Key: event + ".kind", Severity: diag.Warning, Code: BadEvent,
			Message: fmt.Sprintf("a move of animals changes no %s", name), Hint: `record animals that left a unit for good as kind = "removal"`})
	}
	left := make([]float64, len(out))
	if which == 3 {
		clear(out)
	}
	ok := true
	for _, d := range r.departures {
		up := plan.Coarse(d.unit, unit)
		event := fmt.Sprintf("event[%d]", d.index)
		if up == nil {
			r.fail(event+".unit", BadEvent, "name the "+plan.Units[unit].Name, "%s is counted for each %s, and the event does not say which one the animals left", name, plan.Units[unit].Name)
			ok = false
			continue
		}
		i := up[d.instance]
		if left[i] += float64(d.animals); left[i] > start[i] {
			r.fail(event+".animals", BadEvent, "", "more animals left %s than its %v", unitText(plan.Protocol.Events[d.index].Unit), start[i])
			ok = false
		}
		switch which {
		case 0:
			if d.day == 0 || d.day < from || d.day > to {
				r.fail(event+".on", BadEvent, "give the day, between the start and the end of the trial", "%s needs the day on which the animals left", name)
				ok = false
				continue
			}
			out[i] -= float64(d.animals) * float64(to-d.day)
		case 2:
			out[i] -= float64(d.animals)
		case 3:
			if math.IsNaN(d.mass) {
				r.fail(event+".mass", BadEvent, "give the mass of the animals that left", "%s needs the mass of the animals that left", name)
				ok = false
				continue
			}
			out[i] += d.mass
		}
	}
	if !ok {
		return nil
	}
	return out
}

// animalsOf is the number of animals in each instance of a unit: as stated for it, or
// summed over smaller units for which it is stated; sampling units of a trial with
// animals are one animal each. It is nil where the plan does not tell.
func animalsOf(plan *layout.Plan, unit int) []float64 {
	out := make([]float64, plan.Units[unit].N)
	if a := plan.Units[unit].Animals; a != nil {
		for i := range out {
			out[i] = float64(a[i])
		}
		return out
	}
	for v := range plan.Units {
		up := plan.Coarse(v, unit)
		if up == nil || plan.Units[v].Animals == nil {
			continue
		}
		for i, n := range plan.Units[v].Animals {
			out[up[i]] += float64(n)
		}
		return out
	}
	if plan.Protocol.Animals == nil {
		return nil
	}
	for v := range plan.Units {
		if up := plan.Coarse(v, unit); up != nil && plan.Units[v].Role == layout.Sampling {
			for _, i := range up {
				out[i]++
			}
			return out
		}
	}
	return nil
}
