package figure

import (
	"strings"
	"testing"
)

func TestPowerText(t *testing.T) {
	p := Power{X: "Replicates", Target: 0.75, Chosen: 3, Curves: []PowerCurve{
		{Label: "SD 20", Points: []PowerPoint{{N: 2, Power: 0.25}, {N: 3, Power: 0.5}, {N: 4, Power: 1}}},
	}}
	text := p.Text(40)
	lines := strings.Split(text, "\n")
	for y, want := range map[int]string{1: "1.00 -|", 5: "0.75 -|. .", 9: "0.50 -|", 13: "0.25 -|*", 17: "0.00 -|", 18: "      +---"} {
		if !strings.HasPrefix(lines[y], want) {
			t.Errorf("line %d is %q, want %q…\n%s", y, lines[y], want, text)
		}
	}
	if !strings.HasSuffix(lines[1], "*") || strings.Count(text, "*") != 4 { // three points and the legend
		t.Errorf("the points\n%s", text)
	}
	for _, line := range lines {
		if len([]rune(line)) > 60 {
			t.Errorf("a line of %d signs in 40 columns: %q", len(line), line)
		}
	}
	if (Power{}).Text(80) != "" {
		t.Error("something is drawn of nothing")
	}
}
