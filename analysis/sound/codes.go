package sound

import (
	_ "embed"

	"penwright/protocol/diag"
)

// The codes of the checks. Each example is the part of a protocol that brings the code
// about, and the files beside it where it needs any, each headed by its name.
const (
	// ErrorDF: a test has so many error degrees of freedom; fewer than asked for is a
	// warning.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B"]
	//	[[unit]]
	//	name = "pen"
	//	count = 6
	//	receives = ["diet"]
	ErrorDF = "error-df"

	// SmallSquare: a Latin or Graeco-Latin square leaves its error too few degrees of
	// freedom.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B", "C", "D"]
	//	[[unit]]
	//	name = "row"
	//	count = 4
	//	[[unit]]
	//	name = "column"
	//	count = 4
	//	[[unit]]
	//	name = "plot"
	//	crosses = ["row", "column"]
	//	receives = ["diet"]
	SmallSquare = "small-square"

	// Replication: how many experimental units each treatment has.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B", "C"]
	//	[[unit]]
	//	name = "pen"
	//	count = 16
	//	receives = ["diet"]
	Replication = "replication"

	// SingleUnit: a treatment stands on one experimental unit only.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B"]
	//	[[unit]]
	//	name = "room"
	//	count = 2
	//	receives = ["diet"]
	//	[[unit]]
	//	name = "hen"
	//	within = "room"
	//	count = 30
	SingleUnit = "single-unit"

	// ConstantWithin: a treatment does not vary inside a unit larger than the one that
	// is said to receive it.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B"]
	//	[[unit]]
	//	name = "pen"
	//	count = 4
	//	[[unit]]
	//	name = "pig"
	//	within = "pen"
	//	count = 2
	//	receives = ["diet"]
	//	-- allotment.csv --
	//	pen,pig,diet
	//	1,1,A
	//	1,2,A
	//	2,1,B
	//	2,2,B
	//	3,1,A
	//	3,2,A
	//	4,1,B
	//	4,2,B
	ConstantWithin = "constant-within"

	// UndeclaredUnit: a treatment does not vary inside the classes of a column that is
	// no unit of the trial.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B"]
	//	[[unit]]
	//	name = "pig"
	//	count = 8
	//	receives = ["diet"]
	//	-- allotment.csv --
	//	pen,pig,diet
	//	1,1,A
	//	1,2,A
	//	2,3,B
	//	2,4,B
	//	3,5,A
	//	3,6,A
	//	4,7,B
	//	4,8,B
	UndeclaredUnit = "undeclared-unit"

	// GroupHoused: animals are kept in groups, and each is said to be an experimental
	// unit by itself.
	//
	// Example:
	//
	//	[animals]
	//	species = "pig"
	//	[housing]
	//	group_size = 6
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B"]
	//	[[unit]]
	//	name = "pig"
	//	count = 48
	//	receives = ["diet"]
	GroupHoused = "group-housed"

	// Inseparable: each of a larger unit holds one of a smaller one only.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B"]
	//	[[unit]]
	//	name = "litter"
	//	count = 24
	//	[[unit]]
	//	name = "pig"
	//	within = "litter"
	//	count = 1
	//	receives = ["diet"]
	Inseparable = "inseparable"

	// Confounded: a term, or a part of it, is told only by differences between units
	// larger than those that received it.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B"]
	//	[[factor]]
	//	name = "form"
	//	levels = ["meal", "pellet"]
	//	[[unit]]
	//	name = "room"
	//	count = 8
	//	[[unit]]
	//	name = "pen"
	//	within = "room"
	//	count = 2
	//	receives = ["diet", "form"]
	//	-- allotment.csv --
	//	room,pen,diet,form
	//	1,1,A,meal
	//	1,2,B,pellet
	//	2,1,A,pellet
	//	2,2,B,meal
	//	3,1,A,meal
	//	3,2,B,pellet
	//	4,1,A,pellet
	//	4,2,B,meal
	//	5,1,A,meal
	//	5,2,B,pellet
	//	6,1,A,pellet
	//	6,2,B,meal
	//	7,1,A,meal
	//	7,2,B,pellet
	//	8,1,A,pellet
	//	8,2,B,meal
	Confounded = "confounded"

	// Aliased: terms or factors cannot be told from one another.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "additive"
	//	levels = ["a1", "a2"]
	//	[[factor]]
	//	name = "form"
	//	levels = ["meal", "pellet"]
	//	[[treatment]]
	//	code = "one"
	//	levels = { additive = "a1", form = "meal" }
	//	[[treatment]]
	//	code = "two"
	//	levels = { additive = "a2", form = "pellet" }
	//	[[unit]]
	//	name = "pen"
	//	count = 12
	//	receives = ["treatment"]
	Aliased = "aliased"

	// Disconnected: treatments fall into groups that no chain of blocks joins.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "line"
	//	levels = ["A", "B", "C", "D"]
	//	[[unit]]
	//	name = "block"
	//	count = 8
	//	[[unit]]
	//	name = "plot"
	//	within = "block"
	//	count = 2
	//	receives = ["line"]
	//	-- allotment.csv --
	//	block,plot,line
	//	1,1,A
	//	1,2,B
	//	2,1,A
	//	2,2,B
	//	3,1,C
	//	3,2,D
	//	4,1,C
	//	4,2,D
	//	5,1,A
	//	5,2,B
	//	6,1,A
	//	6,2,B
	//	7,1,C
	//	7,2,D
	//	8,1,C
	//	8,2,D
	Disconnected = "disconnected"

	// IncompleteBlocks: blocks do not hold all treatments and keep so much of the
	// information.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "line"
	//	levels = ["A", "B", "C", "D", "E", "F", "G"]
	//	[[unit]]
	//	name = "block"
	//	count = 7
	//	[[unit]]
	//	name = "plot"
	//	within = "block"
	//	count = 3
	//	receives = ["line"]
	IncompleteBlocks = "incomplete-blocks"

	// NoTrend: pairs of amounts are to be compared and no trend over them is planned.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "yeast"
	//	levels = [0, 20, 40, 60]
	//	[[unit]]
	//	name = "pen"
	//	count = 16
	//	receives = ["yeast"]
	//	[analysis]
	//	trend = 0
	NoTrend = "no-trend"

	// SeveralPrimary: more than one response is primary.
	//
	// Example:
	//
	//	[[response]]
	//	name = "gain"
	//	role = "primary"
	//	kind = "continuous"
	//	[[response]]
	//	name = "intake"
	//	role = "primary"
	//	kind = "continuous"
	SeveralPrimary = "several-primary"

	// NoCarryOver: units receive treatments one after another, and nothing is planned
	// for what one leaves behind.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B"]
	//	[[unit]]
	//	name = "cow"
	//	count = 12
	//	[[unit]]
	//	name = "period"
	//	count = 2
	//	[[unit]]
	//	name = "sample"
	//	crosses = ["cow", "period"]
	//	receives = ["diet"]
	NoCarryOver = "no-carryover"

	// Moved: animals were moved from one unit to another.
	//
	// Example:
	//
	//	[[event]]
	//	on = 2026-03-14
	//	unit = { pen = "3" }
	//	animals = 1
	//	kind = "move"
	Moved = "moved"
)

//go:embed codes.go
var codesFile string

// table holds what is said of each code, in the order of the constants, and the reason
// for looking at it.
var table = []struct{ code, text, reason string }{
	{ErrorDF, "how many degrees of freedom the error of a test has",
		"about ten to twenty error degrees of freedom are the usual aim (R. Mead, The Design of Experiments, 1988; from memory)"},
	{SmallSquare, "a square leaves its error too few degrees of freedom",
		"one square of side t leaves (t − 1)(t − 2), so that small squares are replicated (W. G. Cochran and G. M. Cox, Experimental Designs, 1957, ch. 4; from memory)"},
	{Replication, "how many experimental units each treatment has",
		"precision follows the number of experimental units, and equal numbers serve equal questions best (ARRIVE 2.0, items 1b and 2a)"},
	{SingleUnit, "a treatment stands on one experimental unit only",
		"without a second unit the variation that a test is made against is not seen (S. H. Hurlbert, Ecological Monographs 54 (1984) 187-211; from memory)"},
	{ConstantWithin, "a treatment does not vary inside a unit larger than the one said to receive it",
		"samples from one treated unit are no replicates of the treatment (S. H. Hurlbert, Ecological Monographs 54 (1984) 187-211; from memory)"},
	{UndeclaredUnit, "a treatment does not vary inside the classes of a column that is no unit of the trial",
		"samples from one treated unit are no replicates of the treatment (S. H. Hurlbert, Ecological Monographs 54 (1984) 187-211; from memory)"},
	{GroupHoused, "animals are kept in groups, and each is said to be an experimental unit by itself",
		"what a group shares, such as its feeder, treats all of it at once (ARRIVE 2.0, item 1b)"},
	{Inseparable, "each of a larger unit holds one of a smaller one only",
		"two units of one and the same extent have one stratum between them"},
	{Confounded, "a term is told only by differences between units larger than those that received it",
		"what blocks take away from a term its test within blocks cannot give back (R. A. Bailey, Design of Comparative Experiments, 2008; from memory)"},
	{Aliased, "terms or factors cannot be told from one another",
		"effects that always change together share one difference"},
	{Disconnected, "treatments fall into groups that no chain of blocks joins",
		"a difference can be told within blocks only along a chain of blocks (J. A. John and E. R. Williams, Cyclic and Computer Generated Designs, 1995, ch. 1; from memory)"},
	{IncompleteBlocks, "blocks do not hold all treatments and keep so much of the information",
		"average efficiency factor: the mean variance of a difference in complete blocks over that in these, with the same units and the same error (J. A. John and E. R. Williams, Cyclic and Computer Generated Designs, 1995, ch. 2; from memory)"},
	{NoTrend, "pairs of amounts are to be compared and no trend over them is planned",
		"pairwise tests of graded amounts leave the response curve unused (V. Chew, Proceedings of the Florida State Horticultural Society, 1976)"},
	{SeveralPrimary, "more than one response is primary",
		"the primary outcome decides on the size of the trial and its main hypothesis (ARRIVE 2.0, item 6b)"},
	{NoCarryOver, "units receive treatments one after another, and nothing is planned for what one leaves behind",
		"an effect that lasts into the next period biases the comparison there (common practice, no source)"},
	{Moved, "animals were moved from one unit to another",
		"a unit whose animals were mixed no longer stands for what it was allotted (common practice, no source)"},
}

// Codes describes the codes of this package, in the order of the constants.
func Codes() []diag.CodeInfo {
	var out []diag.CodeInfo
	for _, c := range table {
		out = append(out, diag.CodeInfo{Code: c.code, Text: c.text})
	}
	return diag.WithExamples(out, codesFile)
}

// reason says why a code is looked at; empty for a code of an earlier stage.
func reason(code string) string {
	for _, c := range table {
		if c.code == code {
			return c.reason
		}
	}
	return ""
}
