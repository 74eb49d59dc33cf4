package sheet

import (
	_ "embed"

	"penwright/protocol/diag"
)

// Codes of what is said about a file of cells.
const (
	// NotText: the file is no text.
	//	Example: a workbook under the name data.csv.
	NotText = "not-text"
	// Encoding: the file is not UTF-8 and was read as Windows-1252.
	//	Example: the byte FC for ü.
	Encoding = "encoding"
	// EmptyFile: the file has neither headings nor rows.
	//	Example: a file of no bytes.
	EmptyFile = "empty-file"
	// TooManyColumns: there are more columns than are read.
	//	Example: a row of 1001 headings.
	TooManyColumns = "too-many-columns"
	// TooManyRows: there are more rows than are read.
	//	Example: 1 000 001 rows.
	TooManyRows = "too-many-rows"
	// DuplicateColumn: two columns have one heading.
	//	Example: "pen,mass,mass".
	DuplicateColumn = "duplicate-column"
	// FieldCount: a row has more or fewer fields than there are headings.
	//	Example: 12,5 with a decimal comma between commas.
	FieldCount = "field-count"
	// Quoting: a quoted field is not closed, or goes on after its closing quote.
	//	Example: "5" pipe.
	Quoting = "quoting"
)

// The examples of the codes stand in their comments.
//
//go:embed codes.go
var codesFile string

// Codes describes the codes of this package, in the order of the constants.
func Codes() []diag.CodeInfo {
	return diag.WithExamples([]diag.CodeInfo{
		{Code: NotText, Text: "the file is no text"},
		{Code: Encoding, Text: "the file is not UTF-8 and was read as Windows-1252"},
		{Code: EmptyFile, Text: "the file has neither headings nor rows"},
		{Code: TooManyColumns, Text: "there are more columns than are read"},
		{Code: TooManyRows, Text: "there are more rows than are read"},
		{Code: DuplicateColumn, Text: "two columns have one heading"},
		{Code: FieldCount, Text: "a row has more or fewer fields than there are headings"},
		{Code: Quoting, Text: "a quoted field is not closed, or goes on after its closing quote"},
	}, codesFile)
}
