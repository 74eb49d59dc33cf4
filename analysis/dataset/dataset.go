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
	Animals    []int32  // rows that a value was aggregated from; nil: one row each
	Origin     []Origin // where the value stands
	// Total is the number that a count of a proportion is of, and Event whether the event
	// was seen (1) at the time that Value holds (0: not until then); nil for other kinds.
	Total []float64
	Event []float64
	// Confirmed marks values outside the range that a person confirmed.
	Confirmed []bool
	// Corrected marks values that a correction touched.
	Corrected []bool
	// Recorded is the rank of the day of recording, from 0, -1 where it is not known; nil
	// without a date column.
	Recorded []int32
}

// Response returns the response of that name, or nil.
func (t *Table) Response(name string) *Response {
	for i := range t.Responses {
		if t.Responses[i].Protocol.Name == name {
			return &t.Responses[i]
		}
	}
	return nil
}

// UnitName names the unit of a row of a response: block 2, pen 7.
func (t *Table) UnitName(r *Response, row int) protocol.UnitName {
	return allot.UnitName(t.Plan, r.Unit, r.Instance[row])
}

// LevelOf gives the level of a factor for every row of a response, -1 where it is not
// known; it is nil where the unit of the response is too large to have one.
func (t *Table) LevelOf(r *Response, factor int) []int32 {
	at := t.Allotment.LevelAt(factor, r.Unit)
	if at == nil {
		return nil
	}
	out := make([]int32, len(r.Instance))
	for row, i := range r.Instance {
		out[row] = at[i]
	}
	return out
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
