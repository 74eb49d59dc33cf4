// Package allot makes and keeps the draw: which unit receives which treatment. An
// Allotment is drawn from a Plan and a seed, read back from the trial's own record, or,
// for a trial allotted elsewhere, taken from its allotment file or its data.
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
	// with Unit == -1 (what listed treatments are made of) have nil.
	Levels [][]int32

	Order []int    // order of the rows of the file: field or barn order, from 1
	Codes []string // masked code of each row; nil without codes

	Origin Origin
	Draws  []Draw // the record, oldest first; nil when the trial was allotted elsewhere
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
	Generator  string
	Seed       string
	Candidates int
	Rejected   int
	By         string
	On         protocol.Date
	Plan       string // SHA-256 of the canonical plan, hex
	Roster     string // SHA-256 of the roster, or empty
	Allotment  string // SHA-256 of allotment.csv
	Why        string // from the second draw on
}
