// Package dataset reads the data files of a trial into a Table: columns bound to the
// units of the plan, every row used, missing, excluded by name, or reported with its
// line.
package dataset

import (
	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/layout"
)

// Table holds what was read, response by response, at the level of the experimental
// or observational unit the response is recorded on.
type Table struct {
	Plan          *layout.Plan
	Allotment     *allot.Allotment // as given, or as taken from the data
	Files         []File
	Responses     []Response // in the protocol's order
	Disagreements []Disagreement
}

// File is one data file as it was read.
type File struct {
	Path      string
	Rows      int
	Encoding  string // UTF-8, UTF-16LE, Windows-1252 …
	Delimiter rune
	Decimal   rune
	Columns   []string // headings
	Unused    []string // headings that nothing refers to
}

// Status says what became of a unit's value.
type Status uint8

// The states of a value.
const (
	Used             Status = iota
	Missing                 // empty, a missing code, or no row for the unit
	Excluded                // by an exclusion
	CovariateMissing        // the value is there, a covariate is not
	OutOfRange              // outside the stated range and not confirmed: also an error
)

// Response is one response at the level of one unit: one row for every instance of
// the unit, times the repeated times where there are any, in the order of the plan.
type Response struct {
	Protocol   *protocol.Response
	Unit       int         // index into Plan.Units
	Instance   []int32     // instance of Unit, for each row
	Time       []int32     // index into the repeated times; nil when not repeated
	Value      []float64   // NaN unless known; excluded rows keep their value
	Covariates [][]float64 // one column for each covariate of the response
	Status     []Status
	Reason     []string // why a row is not used; empty for used rows. Shared strings
	Animals    []int32  // animals or rows that a value was aggregated from; nil: one row each
	Origin     []Origin // where the value stands
	// Confirmed marks values outside the range that a person confirmed.
	Confirmed []bool
	// Corrected marks values that a correction touched.
	Corrected []bool
	Recorded  []int32 // rank of the day of recording where a date column is given; nil otherwise
}

// Origin is the place of a value: a file and the first and last line it came from, 0
// for a unit without a row.
type Origin struct {
	File  int32
	First int32
	Last  int32
}

// Disagreement is a unit whose treatment in the data differs from the allotment.
type Disagreement struct {
	Factor   int // index into Plan.Factors
	Instance int32
	Allotted int32
	Found    string
	Origin   Origin
}
