package diag

import "unicode/utf8"

// Nearest returns the name that word is most likely a misspelling of, or "" if none is
// near: at most a third of its letters, and no more than three, may be missing, added,
// wrong or swapped with their neighbour; capitals do not count. Of equally near names the
// first wins.
//
// The distance is that of F. J. Damerau, Communications of the ACM 7 (1964) 171–176
// (from memory), restricted to one edit per place.
func Nearest(word string, names []string) string {
	const longest = 64 // names beyond this length are data, not spelling
	if len(word) > longest || !utf8.ValidString(word) {
		return ""
	}
	a := fold(word)
	best, near := "", 4
	for _, name := range names {
		if len(name) > longest {
			continue
		}
		b := fold(name)
		limit := min(3, (max(len(a), len(b))+2)/3)
		if d := distance(a, b); d <= limit && d < near && d < max(len(a), len(b)) {
			best, near = name, d
		}
	}
	return best
}

func fold(s string) []rune {
	r := []rune(s)
	for i, c := range r {
		if 'A' <= c && c <= 'Z' {
			r[i] = c + 'a' - 'A'
		}
	}
	return r
}

func distance(a, b []rune) int {
	// Three rows of the table of distances between prefixes are enough: a swap looks
	// back two.
	before := make([]int, len(b)+1)
	last := make([]int, len(b)+1)
	row := make([]int, len(b)+1)
	for j := range last {
		last[j] = j
	}
	for i := 1; i <= len(a); i++ {
		row[0] = i
		for j := 1; j <= len(b); j++ {
			wrong := 1
			if a[i-1] == b[j-1] {
				wrong = 0
			}
			row[j] = min(last[j]+1, row[j-1]+1, last[j-1]+wrong)
			if i > 1 && j > 1 && a[i-1] == b[j-2] && a[i-2] == b[j-1] {
				row[j] = min(row[j], before[j-2]+1)
			}
		}
		before, last, row = last, row, before
	}
	return last[len(b)]
}
