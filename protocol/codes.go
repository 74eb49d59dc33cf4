package protocol

import (
	_ "embed"

	"penwright/protocol/diag"
)

// The codes of what Load reports. Each example is the smallest file, or part of one,
// that brings the code about.
const (
	// Unreadable: the protocol file, or a file that it names, cannot be read.
	//
	// Example:
	//
	//	file: absent.toml
	Unreadable = "unreadable"

	// Syntax: the file is not TOML.
	//
	// Example:
	//
	//	code = "HM-26-014
	Syntax = "syntax"

	// TooMany: a limit of size or number is exceeded.
	//
	// Example:
	//
	//	[[unit]]
	//	name = "hill"
	//	count = 900000
	//	[[unit]]
	//	name = "ant"
	//	within = "hill"
	//	count = 900000
	TooMany = "too-many"

	// UnknownFormat: the file has a format that this version does not read.
	//
	// Example:
	//
	//	protocol = 2
	UnknownFormat = "unknown-format"

	// UnknownKey: a key does not exist at its place.
	//
	// Example:
	//
	//	[trial]
	//	cod = "HM-26-014"
	UnknownKey = "unknown-key"

	// MissingKey: a required key is missing.
	//
	// Example:
	//
	//	[[unit]]
	//	count = 5
	MissingKey = "missing-key"

	// NeedsKey: a key has no meaning without another that is missing.
	//
	// Example:
	//
	//	[[response]]
	//	name = "dead"
	//	kind = "proportion"
	NeedsKey = "needs-key"

	// Conflict: two statements exclude each other.
	//
	// Example:
	//
	//	[[unit]]
	//	name = "plot"
	//	crosses = ["row", "column"]
	//	count = 4
	Conflict = "conflict"

	// Incomplete: a statement says too little to be of use.
	//
	// Example:
	//
	//	[sample_size]
	//	basis = "power"
	Incomplete = "incomplete"

	// WrongType: a value is of another type than its key wants.
	//
	// Example:
	//
	//	[trial]
	//	code = 14
	WrongType = "wrong-type"

	// UnknownValue: a value is none of those that its key may have.
	//
	// Example:
	//
	//	[analysis]
	//	comparison = "turkey"
	UnknownValue = "unknown-value"

	// OutOfRange: a number or a length is outside what its key allows.
	//
	// Example:
	//
	//	[analysis]
	//	alpha = 5
	OutOfRange = "out-of-range"

	// NotFinite: a number is infinite or not a number.
	//
	// Example:
	//
	//	[analysis]
	//	alpha = nan
	NotFinite = "not-finite"

	// TooFew: a list is empty or too short.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A"]
	TooFew = "too-few"

	// BadText: a text is empty or has characters that it cannot have.
	//
	// Example:
	//
	//	[trial]
	//	title = " "
	BadText = "bad-text"

	// BadName: a name is not an identifier.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "Crude protein"
	BadName = "bad-name"

	// ReservedName: a name has a meaning of its own.
	//
	// Example:
	//
	//	[[unit]]
	//	name = "order"
	ReservedName = "reserved-name"

	// Duplicate: something is named twice that can be named only once.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B", "A"]
	Duplicate = "duplicate"

	// BadDate: a value is not a date alone.
	//
	// Example:
	//
	//	[trial]
	//	start = 2026-03-02T08:00:00
	BadDate = "bad-date"

	// DateOrder: two dates stand in an order that cannot be, or is odd.
	//
	// Example:
	//
	//	[trial]
	//	start = 2026-04-27
	//	end = 2026-03-02
	DateOrder = "date-order"

	// LateEntry: something was written down after the day it belongs to.
	//
	// Example:
	//
	//	[[correction]]
	//	on = 2026-04-28
	//	recorded = 2026-05-03
	LateEntry = "late-entry"

	// LateCovariate: a covariate was measured after treatment began.
	//
	// Example:
	//
	//	[trial]
	//	start = 2026-03-02
	//	[[covariate]]
	//	name = "feed_intake"
	//	measured = 2026-04-27
	LateCovariate = "late-covariate"

	// BadORCID: an ORCID identifier is malformed or its check digit is wrong.
	//
	// Example:
	//
	//	[[person]]
	//	name = "Ansa Verrill"
	//	orcid = "0000-0002-1825-0079"
	BadORCID = "bad-orcid"

	// BadQuantity: an amount is not complete, or its range is turned round.
	//
	// Example:
	//
	//	[animals]
	//	mass = { from = 28, unit = "kg" }
	BadQuantity = "bad-quantity"

	// BadPath: a path does not lead to a place in the trial's folder.
	//
	// Example:
	//
	//	[data]
	//	file = "../data.csv"
	BadPath = "bad-path"

	// MissingFile: a text file that the protocol names does not exist.
	//
	// Example:
	//
	//	[report]
	//	narrative = { introduction = "absent.md" }
	MissingFile = "missing-file"

	// MixedLevels: numbers and texts are mixed in one list of levels.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "dose"
	//	levels = [0, 10, "high"]
	MixedLevels = "mixed-levels"

	// UnknownLevel: a level is not one of its factor's, or a code not one of the listed treatments.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["basal", "yeast"]
	//	control = "basel"
	UnknownLevel = "unknown-level"

	// UnknownName: something is referred to that is not declared.
	//
	// Example:
	//
	//	[[unit]]
	//	name = "pen"
	//	within = "blok"
	//	count = 4
	UnknownName = "unknown-name"

	// BadUnits: units nest or cross in a way that cannot be.
	//
	// Example:
	//
	//	[[unit]]
	//	name = "pen"
	//	within = "pen"
	//	count = 4
	BadUnits = "bad-units"

	// BadCount: numbers of units do not fit each other.
	//
	// Example:
	//
	//	[[unit]]
	//	name = "block"
	//	count = 5
	//	labels = ["north", "south"]
	BadCount = "bad-count"

	// NotReceived: a factor, or the listed treatments, are given to no unit.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B"]
	//	[[unit]]
	//	name = "pen"
	//	count = 8
	NotReceived = "not-received"

	// ReceivedTwice: a factor is given to two units.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B"]
	//	[[unit]]
	//	name = "room"
	//	count = 4
	//	receives = ["diet"]
	//	[[unit]]
	//	name = "pen"
	//	within = "room"
	//	count = 2
	//	receives = ["diet"]
	ReceivedTwice = "received-twice"

	// BadTreatment: a listed treatment leaves out a factor or repeats another one.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "additive"
	//	levels = ["a1", "a2"]
	//	[[factor]]
	//	name = "dose"
	//	levels = [1, 2]
	//	[[treatment]]
	//	code = "x"
	//	levels = { additive = "a1", dose = 1 }
	//	[[treatment]]
	//	code = "y"
	//	levels = { additive = "a2" }
	BadTreatment = "bad-treatment"

	// BadContrast: the weights of a contrast do not sum to zero, or are all zero.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B"]
	//	[[analysis.contrast]]
	//	name = "A v. B"
	//	factor = "diet"
	//	weights = { A = 1, B = 1 }
	BadContrast = "bad-contrast"

	// BadSequence: carry-over, a time trend or their sequences do not fit the units.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B"]
	//	[[unit]]
	//	name = "cow"
	//	count = 4
	//	receives = ["diet"]
	//	[[unit]]
	//	name = "period"
	//	count = 4
	//	[carryover]
	//	factor = "diet"
	//	on = "cow"
	//	along = "period"
	BadSequence = "bad-sequence"

	// NotQuantitative: a factor whose levels are words is used as one of numbers.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B"]
	//	[analysis.dose_response]
	//	factor = "diet"
	NotQuantitative = "not-quantitative"

	// NoControl: a comparison with a control has none.
	//
	// Example:
	//
	//	[[factor]]
	//	name = "diet"
	//	levels = ["A", "B"]
	//	[analysis]
	//	comparison = "dunnett"
	NoControl = "no-control"

	// NoPrimary: there are several responses and none is primary.
	//
	// Example:
	//
	//	[[response]]
	//	name = "gain"
	//	kind = "continuous"
	//	[[response]]
	//	name = "intake"
	//	kind = "continuous"
	NoPrimary = "no-primary"

	// NotUsed: something is declared and nothing refers to it.
	//
	// Example:
	//
	//	[[covariate]]
	//	name = "initial_mass"
	NotUsed = "not-used"

	// NotPlanned: an exclusion follows no rule that was set before the trial.
	//
	// Example:
	//
	//	[eligibility]
	//	exclusion_rules = ["feeder failure over 12 h"]
	//	[[exclusion]]
	//	unit = { pen = "7" }
	//	rule = "feeder failed"
	NotPlanned = "not-planned"

	// UnmaskedAssessment: something is assessed by eye and the assessment is not masked.
	//
	// Example:
	//
	//	[[response]]
	//	name = "lesions"
	//	kind = "ordinal"
	//	assessed = "by eye"
	UnmaskedAssessment = "unmasked-assessment"
)

// The examples of the codes stand in their comments.
//
//go:embed codes.go
var codesFile string

// Codes describes the codes of Load, in the order of the constants.
func Codes() []diag.CodeInfo {
	return diag.WithExamples([]diag.CodeInfo{
		{Code: Unreadable, Text: "the protocol file, or a file that it names, cannot be read"},
		{Code: Syntax, Text: "the file is not TOML"},
		{Code: TooMany, Text: "a limit of size or number is exceeded"},
		{Code: UnknownFormat, Text: "the file has a format that this version does not read"},
		{Code: UnknownKey, Text: "a key does not exist at its place"},
		{Code: MissingKey, Text: "a required key is missing"},
		{Code: NeedsKey, Text: "a key has no meaning without another that is missing"},
		{Code: Conflict, Text: "two statements exclude each other"},
		{Code: Incomplete, Text: "a statement says too little to be of use"},
		{Code: WrongType, Text: "a value is of another type than its key wants"},
		{Code: UnknownValue, Text: "a value is none of those that its key may have"},
		{Code: OutOfRange, Text: "a number or a length is outside what its key allows"},
		{Code: NotFinite, Text: "a number is infinite or not a number"},
		{Code: TooFew, Text: "a list is empty or too short"},
		{Code: BadText, Text: "a text is empty or has characters that it cannot have"},
		{Code: BadName, Text: "a name is not an identifier"},
		{Code: ReservedName, Text: "a name has a meaning of its own"},
		{Code: Duplicate, Text: "something is named twice that can be named only once"},
		{Code: BadDate, Text: "a value is not a date alone"},
		{Code: DateOrder, Text: "two dates stand in an order that cannot be, or is odd"},
		{Code: LateEntry, Text: "something was written down after the day it belongs to"},
		{Code: LateCovariate, Text: "a covariate was measured after treatment began"},
		{Code: BadORCID, Text: "an ORCID identifier is malformed or its check digit is wrong"},
		{Code: BadQuantity, Text: "an amount is not complete, or its range is turned round"},
		{Code: BadPath, Text: "a path does not lead to a place in the trial's folder"},
		{Code: MissingFile, Text: "a text file that the protocol names does not exist"},
		{Code: MixedLevels, Text: "numbers and texts are mixed in one list of levels"},
		{Code: UnknownLevel, Text: "a level is not one of its factor's, or a code not one of the listed treatments"},
		{Code: UnknownName, Text: "something is referred to that is not declared"},
		{Code: BadUnits, Text: "units nest or cross in a way that cannot be"},
		{Code: BadCount, Text: "numbers of units do not fit each other"},
		{Code: NotReceived, Text: "a factor, or the listed treatments, are given to no unit"},
		{Code: ReceivedTwice, Text: "a factor is given to two units"},
		{Code: BadTreatment, Text: "a listed treatment leaves out a factor or repeats another one"},
		{Code: BadContrast, Text: "the weights of a contrast do not sum to zero, or are all zero"},
		{Code: BadSequence, Text: "carry-over, a time trend or their sequences do not fit the units"},
		{Code: NotQuantitative, Text: "a factor whose levels are words is used as one of numbers"},
		{Code: NoControl, Text: "a comparison with a control has none"},
		{Code: NoPrimary, Text: "there are several responses and none is primary"},
		{Code: NotUsed, Text: "something is declared and nothing refers to it"},
		{Code: NotPlanned, Text: "an exclusion follows no rule that was set before the trial"},
		{Code: UnmaskedAssessment, Text: "something is assessed by eye and the assessment is not masked"},
	}, codesFile)
}
