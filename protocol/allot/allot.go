// Package allot makes and keeps the draw: which unit receives which treatment. An
// Allotment is drawn from a Plan and a seed, read back from the trial's own record, or,
// for a trial allotted elsewhere, taken from its allotment file or its data.
//
// The package also knows how units are named in files (Finder), since the record and
// the data name them alike.
package allot

import (
	"penwright/protocol"
	"penwright/protocol/layout"
)

// Allotment says which level every unit received. It is not changed after it is made.
type Allotment struct {
	Plan *layout.Plan

	// Levels holds, for each factor of the plan that a unit receives or carries, the
	// level index of every instance of that unit; -1 where it is not known. Factors
	// with Unit == -1 (what listed treatments are made of) have nil, and so has a
	// carried class that nothing tells.
	Levels [][]int32

	Order []int    // place of each instance of RowUnit in field or barn order, from 1
	Codes []string // masked code of each instance of RowUnit; nil without codes

	// Animals is animals.csv: where the animals of the roster went whose blocks were formed
	// by rank, spare ones without a unit; nil without such blocks, and for an
	// allotment that was read back.
	Animals []byte

	Origin Origin
	Draws  []Draw // the record, oldest first; nil when the trial was allotted elsewhere

	made Draw // what the record will say of this draw, before it is recorded
}

// Origin tells where an allotment comes from.
type Origin int

// The origins of an allotment.
const (
	Drawn     Origin = iota // by this program, with a record
	Elsewhere               // allotment.csv brought along; [randomization] method says how
	FromData                // no allotment file: the treatment columns of the data
)

// Draw is one entry of allotment.toml.
type Draw struct {
	Number     int
	Scheme     string // in words
	Start      string // arrangements that were permuted: treatments counted from 1, unit by unit in the plan's order
	Generator  string
	Seed       string
	Candidates int
	Rejected   int
	By         string
	On         protocol.Date
	Plan       string // SHA-256 of the canonical plan, hex
	Roster     string // SHA-256 of the roster, or empty
	Allotment  string // SHA-256 of allotment.csv
	Animals    string // SHA-256 of animals.csv, or empty
	Why        string // from the second draw on
}

// RowUnit is the unit whose instances are the rows of allotment.csv: the largest that
// lies within all units that receive something.
func RowUnit(plan *layout.Plan) int {
	best := plan.Smallest
	for u := range plan.Units {
		within := true
		for v := range plan.Units {
			within = within && (len(plan.Units[v].Receives) == 0 || plan.Coarse(u, v) != nil)
		}
		if within && plan.Units[u].N < plan.Units[best].N {
			best = u
		}
	}
	return best
}

// LevelAt gives the level of a factor at every instance of a unit that is the factor's
// own or finer, -1 where it is not known. For a factor that listed treatments are made
// of, it is the level in the treatment received, -1 outside the factorial. It is nil
// where the unit is not fine enough, or the levels of a carried class are not known.
func (a *Allotment) LevelAt(factor, unit int) []int32 {
	f := &a.Plan.Factors[factor]
	at, of := f.Unit, factor
	var made []int32
	if at < 0 {
		// Listed treatments stand first.
		of = 0
		at = a.Plan.Factors[of].Unit
		if at < 0 {
			return nil
		}
		made = Made(a.Plan, factor)
	}
	coarse := a.Plan.Coarse(unit, at)
	if coarse == nil || a.Levels[of] == nil {
		return nil
	}
	out := make([]int32, len(coarse))
	for i, j := range coarse {
		l := a.Levels[of][j]
		if made != nil && l >= 0 {
			l = made[l]
		}
		out[i] = l
	}
	return out
}

// Made gives, for a factor that listed treatments are made of, its level in each
// treatment, -1 where the treatment lies outside the factorial.
func Made(plan *layout.Plan, factor int) []int32 {
	made := make([]int32, len(plan.Protocol.Treatments))
	f := &plan.Factors[factor]
	for t := range plan.Protocol.Treatments {
		made[t] = -1
		level, ok := plan.Protocol.Treatments[t].Levels[f.Name]
		if !ok {
			continue
		}
		for l := range f.Levels {
			if f.Levels[l] == level {
				made[t] = int32(l)
			}
		}
	}
	return made
}
