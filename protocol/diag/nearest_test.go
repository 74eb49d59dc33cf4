package diag

import (
	"strings"
	"testing"
)

func TestNearest(t *testing.T) {
	names := []string{"response", "responses", "treatment", "unit", "adg", "feed"}
	tests := []struct{ word, want string }{
		{"reponse", "response"},
		{"Treatment", "treatment"},
		{"treatemnt", "treatment"}, // neighbours swapped
		{"untis", "unit"},
		{"adg2", "adg"},
		{"weight", ""},
		{"x", ""},
		{"", ""},
		{"\xff", ""},
		{"adg", "adg"},
		{"tretmnt", "treatment"}, // two slips
		{"tretmn", ""},           // three
		{"FEED", "feed"},
		{"fd", "feed"},
		{"xy", ""},
		{strings.Repeat("x", 100), ""},
	}
	for _, test := range tests {
		if got := Nearest(test.word, names); got != test.want {
			t.Errorf("Nearest(%q) = %q, want %q", test.word, got, test.want)
		}
	}
	if got := Nearest("", []string{""}); got != "" {
		t.Errorf("nothing is near nothing, got %q", got)
	}
}

// TestDistance compares the distance with the shortest way found by trying all single
// slips, on all words of up to three letters.
func TestDistance(t *testing.T) {
	const letters = "ab"
	words := []string{""}
	for i := 0; len(words[i]) < 3; i++ {
		for _, c := range letters {
			words = append(words, words[i]+string(c))
		}
	}
	slips := func(w string) map[string]bool {
		set := map[string]bool{}
		for i := range len(w) + 1 {
			for _, c := range letters {
				set[w[:i]+string(c)+w[i:]] = true
				if i < len(w) {
					set[w[:i]+string(c)+w[i+1:]] = true
				}
			}
			if i < len(w) {
				set[w[:i]+w[i+1:]] = true
			}
			if i+1 < len(w) {
				set[w[:i]+w[i+1:i+2]+w[i:i+1]+w[i+2:]] = true
			}
		}
		return set
	}
	for _, a := range words {
		at := map[string]int{a: 0}
		for front, n := []string{a}, 1; n <= 2; n++ {
			var next []string
			for _, w := range front {
				for s := range slips(w) {
					if _, ok := at[s]; !ok {
						at[s] = n
						next = append(next, s)
					}
				}
			}
			front = next
		}
		for _, b := range words {
			want, near := at[b]
			got := distance([]rune(a), []rune(b))
			// The restricted form may need one slip more where a pair is exchanged and
			// then parted.
			if near && got != want && got != want+1 || !near && got < 3 {
				t.Errorf("%q to %q: %d, want %d", a, b, got, want)
			}
			if near && want < 2 && got != want {
				t.Errorf("%q to %q: %d, want %d", a, b, got, want)
			}
		}
	}
}
