package doc

import "strings"

// raised and lowered are the letters that Unicode has above and below the line, in the
// order of their plain ones.
var (
	raised = letters("0123456789+\u2212-=()abcdefghijklmnoprstuvwxyz*",
		"⁰¹²³⁴⁵⁶⁷⁸⁹⁺⁻⁻⁼⁽⁾ᵃᵇᶜᵈᵉᶠᵍʰⁱʲᵏˡᵐⁿᵒᵖʳˢᵗᵘᵛʷˣʸᶻ*")
	lowered = letters("0123456789+\u2212-=()aehijklmnoprstuvx",
		"₀₁₂₃₄₅₆₇₈₉₊₋₋₌₍₎ₐₑₕᵢⱼₖₗₘₙₒₚᵣₛₜᵤᵥₓ")
)

func letters(plain, other string) map[rune]rune {
	to := []rune(other)
	m := map[rune]rune{}
	for i, r := range []rune(plain) {
		m[r] = to[i]
	}
	return m
}

// Raised writes s above the line for outputs that have no such place: with the letters
// Unicode has for it, or else as ^(s).
func Raised(s string) string { return script(s, raised, "^") }

// Lowered writes s below the line: with the letters Unicode has for it, or as _(s).
func Lowered(s string) string { return script(s, lowered, "_") }

func script(s string, m map[rune]rune, sign string) string {
	if s == "" {
		return ""
	}
	var b strings.Builder
	for _, r := range s {
		other, ok := m[r]
		if !ok {
			return sign + "(" + s + ")"
		}
		b.WriteRune(other)
	}
	return b.String()
}
