package allot

import (
	_ "embed"

	"penwright/protocol/diag"
)

// Codes of what is said about a draw and an allotment.
const (
	// NotDrawn: a design whose draw is not made here.
	//	Example: six treatments in blocks of four.
	NotDrawn = "not-drawn"
	// ClassUnknown: a carried class that the draw needs and nothing tells.
	//	Example: carries = ["sex"] without a roster.
	ClassUnknown = "class-unknown"
	// RosterColumn: a column of the roster that the draw needs is not there, or holds
	// something else.
	//	Example: block_by = "mass" and a roster with the headings animal, weight.
	RosterColumn = "roster-column"
	// UnitColumns: the columns name no unit, or not clearly.
	//	Example: a file without the column "block" where pens are numbered within blocks.
	UnitColumns = "unit-columns"
	// UnknownUnit: a row names a unit that the plan does not have.
	//	Example: pen 21 of 20.
	UnknownUnit = "unknown-unit"
	// UnknownLevelCode: a cell names a level that is not declared.
	//	Example: "contrl" for "control".
	UnknownLevelCode = "unknown-level"
	// LevelVaries: a unit has two levels of one factor.
	//	Example: two subplots of a plot with different levels of what the plot received.
	LevelVaries = "level-varies"
	// MissingUnit: a unit of the plan has no row.
	//	Example: allotment.csv without the last pen.
	MissingUnit = "missing-unit"
	// DuplicateUnit: a unit has two rows.
	//	Example: pen 3 of block 1 stands twice.
	DuplicateUnit = "duplicate-unit"
	// NoTreatmentColumn: allotment.csv lacks a treatment factor.
	//	Example: headings block,pen,order where diet is received.
	NoTreatmentColumn = "no-treatment-column"
	// BadOrder: the order is not a whole number, or stands twice.
	//	Example: order 1, 2, 2.
	BadOrder = "bad-order"
	// AllotmentChanged: allotment.csv is not the one that was drawn.
	//	Example: a level edited by hand after draw.
	AllotmentChanged = "allotment-changed"
	// NoAllotmentRecord: allotment.csv came from elsewhere and nothing says how.
	//	Example: allotment.csv without allotment.toml and without [randomization] method.
	NoAllotmentRecord = "no-allotment-record"
	// BadRecord: allotment.toml is damaged.
	//	Example: draw numbers 1, 3.
	BadRecord = "bad-record"
	// UnequalAllotment: levels are not spread as equally as the plan allows.
	//	Example: a block with treatment A twice and B not at all.
	UnequalAllotment = "unequal-allotment"
)

// The examples of the codes stand in their comments.
//
//go:embed codes.go
var codesFile string

// Codes describes the codes of this package, in the order of the constants.
func Codes() []diag.CodeInfo {
	return diag.WithExamples([]diag.CodeInfo{
		{Code: NotDrawn, Text: "a design whose draw is not made here"},
		{Code: ClassUnknown, Text: "a carried class that the draw needs and nothing tells"},
		{Code: RosterColumn, Text: "a column of the roster that the draw needs is not there, or holds something else"},
		{Code: UnitColumns, Text: "the columns name no unit, or not clearly"},
		{Code: UnknownUnit, Text: "a row names a unit that the plan does not have"},
		{Code: UnknownLevelCode, Text: "a cell names a level that is not declared"},
		{Code: LevelVaries, Text: "a unit has two levels of one factor"},
		{Code: MissingUnit, Text: "a unit of the plan has no row"},
		{Code: DuplicateUnit, Text: "a unit has two rows"},
		{Code: NoTreatmentColumn, Text: "allotment.csv lacks a treatment factor"},
		{Code: BadOrder, Text: "the order is not a whole number, or stands twice"},
		{Code: AllotmentChanged, Text: "allotment.csv is not the one that was drawn"},
		{Code: NoAllotmentRecord, Text: "allotment.csv came from elsewhere and nothing says how"},
		{Code: BadRecord, Text: "allotment.toml is damaged"},
		{Code: UnequalAllotment, Text: "levels are not spread as equally as the plan allows"},
	}, codesFile)
}
