package dataset

import (
	_ "embed"

	"penwright/protocol/diag"
)

// Codes of what is said about data.
const (
	// TooMuch: the responses would take more memory than is allowed.
	//	Example: a thousand responses of a million rows.
	TooMuch = "too-much-data"
	// NoData: the data file does not exist yet.
	//	Example: [data] file = "data.csv" before the trial.
	NoData = "no-data"
	// NoRows: a data file holds only headings.
	//	Example: "pen,mass".
	NoRows = "no-rows"
	// BlankRows: rows of delimiters only.
	//	Example: ",,,,".
	BlankRows = "blank-rows"
	// BadNumber: a cell that should hold a number does not.
	//	Example: "12.5kg".
	BadNumber = "bad-number"
	// BadDate: a cell of the date column is not a date.
	//	Example: "3/4/26".
	BadDate = "bad-date"
	// AmbiguousDecimal: the decimal mark cannot be told from the numbers.
	//	Example: all numbers like 1,234.
	AmbiguousDecimal = "ambiguous-decimal"
	// UnknownTime: a row is of a time that [[repeated]] does not list.
	//	Example: week 3 of 2, 4, 6.
	UnknownTime = "unknown-time"
	// NoColumn: a response or covariate has no column.
	//	Example: the response adg where no heading is adg.
	NoColumn = "no-column"
	// DuplicateRow: two rows are of one unit and time.
	//	Example: pen 3 of block 1 stands twice.
	DuplicateRow = "duplicate-row"
	// WrongLevel: the rows are of another unit than the response is recorded on.
	//	Example: recorded_on = "pen" where each row is of an animal, without aggregate.
	WrongLevel = "wrong-level"
	// OutsideRange: a value outside the range of its response.
	//	Example: adg 7550 where range = [200, 1500].
	OutsideRange = "out-of-range"
	// BadKind: a value that its kind of response cannot have.
	//	Example: 2.5 for a count.
	BadKind = "bad-kind"
	// BadCompute: a computed response that cannot be computed.
	//	Example: compute = "gain / 0".
	BadCompute = "bad-compute"
	// BadCorrection: a correction that does not fit the file.
	//	Example: old = "77.5" where the cell is "75.7".
	BadCorrection = "bad-correction"
	// BadConfirmation: a confirmed value that is not in the data.
	//	Example: value = 1510 where the value is 1501.
	BadConfirmation = "bad-confirmation"
	// BadExclusion: an exclusion of something that is not in the trial.
	//	Example: at = "9" where there is no week 9.
	BadExclusion = "bad-exclusion"
	// BadEvent: an event that does not fit the plan.
	//	Example: more animals removed from a pen than it held.
	BadEvent = "bad-event"
	// NoAllotment: nothing tells what a unit received.
	//	Example: neither allotment.csv nor a treatment column.
	NoAllotment = "no-allotment"
	// TreatmentDisagrees: a treatment in the data is not the allotted one.
	//	Example: pen 3 with diet B where A was allotted.
	TreatmentDisagrees = "treatment-disagrees"
	// TreatmentUnchecked: a treatment column in rows of a larger unit.
	//	Example: the column supplement in a file of blocks.
	TreatmentUnchecked = "treatment-unchecked"
	// CodeDisagrees: a masked code in the data is not that of the allotment.
	//	Example: code K17 where the allotment has K71.
	CodeDisagrees = "code-disagrees"
)

// The examples of the codes stand in their comments.
//
//go:embed codes.go
var codesFile string

// Codes describes the codes of Read, in the order of the constants.
func Codes() []diag.CodeInfo {
	return diag.WithExamples([]diag.CodeInfo{
		{Code: TooMuch, Text: "the responses would take more memory than is allowed"},
		{Code: NoData, Text: "the data file does not exist yet"},
		{Code: NoRows, Text: "a data file holds only headings"},
		{Code: BlankRows, Text: "rows of delimiters only"},
		{Code: BadNumber, Text: "a cell that should hold a number does not"},
		{Code: BadDate, Text: "a cell of the date column is not a date"},
		{Code: AmbiguousDecimal, Text: "the decimal mark cannot be told from the numbers"},
		{Code: UnknownTime, Text: "a row is of a time that [[repeated]] does not list"},
		{Code: NoColumn, Text: "a response or covariate has no column"},
		{Code: DuplicateRow, Text: "two rows are of one unit and time"},
		{Code: WrongLevel, Text: "the rows are of another unit than the response is recorded on"},
		{Code: OutsideRange, Text: "a value outside the range of its response"},
		{Code: BadKind, Text: "a value that its kind of response cannot have"},
		{Code: BadCompute, Text: "a computed response that cannot be computed"},
		{Code: BadCorrection, Text: "a correction that does not fit the file"},
		{Code: BadConfirmation, Text: "a confirmed value that is not in the data"},
		{Code: BadExclusion, Text: "an exclusion of something that is not in the trial"},
		{Code: BadEvent, Text: "an event that does not fit the plan"},
		{Code: NoAllotment, Text: "nothing tells what a unit received"},
		{Code: TreatmentDisagrees, Text: "a treatment in the data is not the allotted one"},
		{Code: TreatmentUnchecked, Text: "a treatment column in rows of a larger unit"},
		{Code: CodeDisagrees, Text: "a masked code in the data is not that of the allotment"},
	}, codesFile)
}
