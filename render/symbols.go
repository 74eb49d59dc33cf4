package render

import (
	"regexp"

	"penwright/render/doc"
)

// symbol finds the letters of a test in running text, which are set in italics: F(, P =,
// P <, P below, df.
var symbol = regexp.MustCompile(`\b(F)\(|\b(P) (?:[=<]|below|of|up to)|\b(df)\b`)

// inlines sets a sentence with its symbols in italics.
func inlines(s string) []doc.Inline {
	var out []doc.Inline
	at := 0
	for _, m := range symbol.FindAllStringSubmatchIndex(s, -1) {
		for g := 2; g < len(m); g += 2 {
			if m[g] < 0 {
				continue
			}
			if m[g] > at {
				out = append(out, doc.Text{Text: s[at:m[g]]})
			}
			out = append(out, doc.Emph{Text: []doc.Inline{doc.Text{Text: s[m[g]:m[g+1]]}}})
			at = m[g+1]
		}
	}
	if at < len(s) {
		out = append(out, doc.Text{Text: s[at:]})
	}
	return out
}
