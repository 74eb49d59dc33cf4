package seal

import (
	_ "embed" // for the examples of the codes

	"penwright/protocol/diag"
)

// Codes of what is said about a seal.
const (
	// Broken: seal.toml is not what was written when the plan was sealed.
	//
	// Example:
	//
	//	[[seal]]
	//	number = 1
	//	on = 2026-02-20
	//	plan = '''{"protocol":1}'''
	//	sha256 = "changed"
	//	above = "changed"
	Broken = "broken-seal"
	// NotAmended: the plan differs from the sealed one and no amendment says so.
	//
	// Example:
	//
	//	# sealed on 2026-02-20, when this did not stand here
	//	[[response]]
	//	name = "backfat"
	//	kind = "continuous"
	NotAmended = "not-amended"
	// Late: the plan was sealed after the trial had started or when there were data.
	//
	// Example:
	//
	//	# sealed on 2026-04-01
	//	[trial]
	//	start = 2026-03-02
	Late = "sealed-late"
)

// The examples of the codes stand in their comments.
//
//go:embed codes.go
var codesFile string

// Codes describes the codes of this package, in the order of the constants.
func Codes() []diag.CodeInfo {
	return diag.WithExamples([]diag.CodeInfo{
		{Code: Broken, Text: "seal.toml is not what was written when the plan was sealed"},
		{Code: NotAmended, Text: "the plan differs from the sealed one and no amendment says so"},
		{Code: Late, Text: "the plan was sealed after the trial had started or when there were data"},
	}, codesFile)
}
