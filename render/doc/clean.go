package doc

import (
	"strings"
	"unicode/utf8"
)

// Clean returns s as every writer can show it: invalid bytes become U+FFFD; control
// characters other than newline and tab, byte order marks, characters that turn the
// direction of text, and the code points that Unicode will never assign are dropped.
func Clean(s string) string {
	clean := utf8.ValidString(s)
	if clean {
		clean = strings.IndexFunc(s, dropped) < 0
	}
	if clean {
		return s
	}
	return strings.Map(func(r rune) rune {
		if dropped(r) {
			return -1
		}
		return r
	}, strings.ToValidUTF8(s, "\uFFFD"))
}

func dropped(r rune) bool {
	switch {
	case r == '\n' || r == '\t':
		return false
	case r < 0x20, 0x7f <= r && r < 0xa0: // C0, DEL, C1
		return true
	case r == 0x061c, r == 0x200e, r == 0x200f, 0x202a <= r && r <= 0x202e, 0x2066 <= r && r <= 0x2069:
		return true // direction marks, embeddings, overrides, isolates
	case r == 0xfeff, 0xfdd0 <= r && r <= 0xfdef, r&0xfffe == 0xfffe:
		return true
	}
	return false
}
