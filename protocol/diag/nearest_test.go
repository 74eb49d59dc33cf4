package diag

import "testing"

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
