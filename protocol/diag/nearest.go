package diag

import (
	"unicode"
	"unicode/utf8"
)

// longestWord is the greatest number of bytes of a word that Nearest looks at; a
// longer one is no misspelling worth searching for.
const longestWord = 64

// Nearest returns the word of known that was most probably meant by word: the one
// at the smallest edit distance, the first of several. The distance counts
// insertions, deletions, substitutions and exchanges of neighbours, each as one,
// must be less than 3, and must leave at least half of the word standing; capitals
// count nothing, and neither do hyphens and spaces in place of underscores. It
// returns "" if no word is near.
//
// Source: F. J. Damerau, Communications of the ACM 7 (1964) 171–176, for the four
// kinds of slip; the restricted form, in which a pair is exchanged only once.
func Nearest(word string, known []string) string {
	if word == "" || len(word) > longestWord {
		return ""
	}
	folded := fold(word)
	best, at := "", 3
	for _, k := range known {
		if k == "" || len(k) > longestWord {
			continue
		}
		n := utf8.RuneCountInString(k)
		if n-len(folded) >= at || len(folded)-n >= at {
			continue
		}
		d := distance(folded, fold(k))
		if d < at && 2*d <= max(n, len(folded)) {
			best, at = k, d
		}
	}
	return best
}

// fold maps spellings that are the same word to one.
func fold(s string) []rune {
	folded := []rune(s)
	for i, r := range folded {
		if r == '-' || r == ' ' {
			folded[i] = '_'
		} else {
			folded[i] = unicode.ToLower(r)
		}
	}
	return folded
}

// distance is the number of slips between a and b.
func distance(a, b []rune) int {
	before := make([]int, len(b)+1) // row i-2
	row := make([]int, len(b)+1)    // row i-1
	next := make([]int, len(b)+1)   // row i
	for j := range row {
		row[j] = j
	}
	for i := 1; i <= len(a); i++ {
		next[0] = i
		for j := 1; j <= len(b); j++ {
			substitute := row[j-1]
			if a[i-1] != b[j-1] {
				substitute++
			}
			next[j] = min(substitute, row[j]+1, next[j-1]+1)
			if i > 1 && j > 1 && a[i-1] == b[j-2] && a[i-2] == b[j-1] {
				next[j] = min(next[j], before[j-2]+1)
			}
		}
		before, row, next = row, next, before
	}
	return row[len(b)]
}
