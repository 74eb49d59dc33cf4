package seal

import "penwright/protocol/diag"

// Codes of what is said about a seal.
const (
	// Broken: seal.toml is not what was written when the plan was sealed.
	//	Example: the day of an entry was changed.
	Broken = "broken-seal"
	// NotAmended: the plan differs from the sealed one and no amendment says so.
	//	Example: count = 5 where 4 was sealed, without [[amendment]].
	NotAmended = "not-amended"
	// Late: the plan was sealed after the trial had started or when there were data.
	//	Example: start = 2026-03-02 in a trial sealed on 2026-04-01.
	Late = "sealed-late"
)

// Codes describes the codes of this package, in the order of the constants.
func Codes() []diag.CodeInfo {
	return []diag.CodeInfo{
		{Code: Broken, Text: "seal.toml is not what was written when the plan was sealed"},
		{Code: NotAmended, Text: "the plan differs from the sealed one and no amendment says so"},
		{Code: Late, Text: "the plan was sealed after the trial had started or when there were data"},
	}
}
