package layout

import (
	_ "embed"

	"penwright/protocol/diag"
)

// The codes of what New reports beside those of the protocol package, which it uses
// for the same faults. Each example is the part of a file that brings the code about,
// with the factor diet of four levels.
const (
	// UnitsNotJoined: no unit lies within all others.
	//
	// Example:
	//
	//	[[unit]]
	//	name = "cow"
	//	count = 4
	//	[[unit]]
	//	name = "period"
	//	count = 4
	//	receives = ["diet"]
	UnitsNotJoined = "units-not-joined"

	// UnnamedUnit: two units share classes that are no unit, so that their strata have
	// no name.
	//
	// Example:
	//
	//	[[unit]]
	//	name = "row"
	//	count = 2
	//	[[unit]]
	//	name = "column"
	//	count = 2
	//	[[unit]]
	//	name = "hand"
	//	count = 2
	//	[[unit]]
	//	name = "side"
	//	count = 2
	//	[[unit]]
	//	name = "left"
	//	crosses = ["row", "column", "hand"]
	//	[[unit]]
	//	name = "right"
	//	crosses = ["row", "column", "side"]
	//	[[unit]]
	//	name = "plot"
	//	crosses = ["left", "right"]
	//	receives = ["diet"]
	UnnamedUnit = "unnamed-unit"

	// TooFewUnits: there are fewer units than treatments.
	//
	// Example:
	//
	//	[[unit]]
	//	name = "pen"
	//	count = 3
	//	receives = ["diet"]
	TooFewUnits = "too-few-units"

	// BlocksUneven: blocks hold every treatment, but not equally often.
	//
	// Example:
	//
	//	[[unit]]
	//	name = "block"
	//	count = 4
	//	[[unit]]
	//	name = "pen"
	//	within = "block"
	//	count = 5
	//	receives = ["diet"]
	BlocksUneven = "blocks-uneven"

	// BadChecks: the checks of an augmented design and its entries do not fill the
	// units, or are no listed treatments.
	//
	// Example:
	//
	//	[[unit]]
	//	name = "pen"
	//	count = 8
	//	receives = ["diet"]
	//	checks = ["a"]
	BadChecks = "bad-checks"

	// CannotInteract: a unit that says interacts receives treatments or lies within
	// those that do.
	//
	// Example:
	//
	//	[[unit]]
	//	name = "pen"
	//	count = 8
	//	receives = ["diet"]
	//	interacts = true
	CannotInteract = "cannot-interact"

	// NoError: no degrees of freedom are left to test a term against.
	//
	// Example:
	//
	//	[[unit]]
	//	name = "pen"
	//	count = 4
	//	receives = ["diet"]
	NoError = "no-error"

	// NoExactError: two errors act on a term at once.
	//
	// Example:
	//
	//	[[unit]]
	//	name = "plot"
	//	count = 8
	//	receives = ["diet"]
	//	[[unit]]
	//	name = "year"
	//	count = 3
	//	interacts = true
	//	[[unit]]
	//	name = "cut"
	//	crosses = ["plot", "year"]
	NoExactError = "no-exact-error"

	// CalledDiffers: the trial is called something that its units do not make it.
	//
	// Example:
	//
	//	called = "Latin square"
	//	[[unit]]
	//	name = "pen"
	//	count = 8
	//	receives = ["diet"]
	CalledDiffers = "called-differs"

	// CalledUnknown: what the trial is called is no known name of a design.
	//
	// Example:
	//
	//	called = "the usual"
	//	[[unit]]
	//	name = "pen"
	//	count = 8
	//	receives = ["diet"]
	CalledUnknown = "called-unknown"
)

// The examples of the codes stand in their comments.
//
//go:embed codes.go
var codesFile string

// Codes describes the codes that only New reports, in the order of the constants.
func Codes() []diag.CodeInfo {
	return diag.WithExamples([]diag.CodeInfo{
		{Code: UnitsNotJoined, Text: "no unit lies within all others"},
		{Code: UnnamedUnit, Text: "two units share classes that are no unit of the trial"},
		{Code: TooFewUnits, Text: "there are fewer units than treatments"},
		{Code: BlocksUneven, Text: "blocks hold every treatment, but not equally often"},
		{Code: BadChecks, Text: "checks and entries of an augmented design do not fit the units"},
		{Code: CannotInteract, Text: "a unit that interacts receives treatments or lies within units that do"},
		{Code: NoError, Text: "no degrees of freedom are left to test a term against"},
		{Code: NoExactError, Text: "two errors act on a term at once, so that no single mean square tests it"},
		{Code: CalledDiffers, Text: "the trial is called something that its units do not make it"},
		{Code: CalledUnknown, Text: "what the trial is called is no known name of a design"},
	}, codesFile)
}
