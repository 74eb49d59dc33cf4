package doc

import "strings"

// SplitDecimal cuts the text of a cell before its decimal mark: the first full stop
// between a digit, or nothing, and a digit. Without a mark, all of the text is head.
// A column is aligned when all heads end, and all tails begin, at one place.
func SplitDecimal(s string) (head, tail string) {
	for i := range len(s) {
		if s[i] != '.' || i+1 == len(s) || !digit(s[i+1]) {
			continue
		}
		if before := strings.TrimRight(s[:i], " \u2212-+<>≤≥"); i == 0 || digit(s[i-1]) || before == "" {
			return s[:i], s[i:]
		}
	}
	return s, ""
}

func digit(c byte) bool { return '0' <= c && c <= '9' }
