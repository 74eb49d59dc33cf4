package main

import (
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
)

// amiss is what no sentence of a chapter may hold: a hole where a fact is missing, a word
// twice, a verdict without its numbers.
var amiss = regexp.MustCompile(`%!|\(\)|\( |,,|;;|\.\.|[a-z]  [a-z]| [,;.)]|not shown|\b(the|a|in|of|was|were|be) (the|a|in|of|was|were|be|,)\b|NaN|<nil>|: *\.|(?i)\bsignificant(ly)?\b|\b1 [a-z]+s were\b`)

// harmless are pairs of small words that are right as they stand.
var harmless = regexp.MustCompile(`\b(of the|of a|in the|in a|was the|was a|were the|were a|be the|be a|was of|were of|be of|were in|was in|be in)\b`)

// The chapter of every starter reads as sentences, before there are data and after.
func TestChapterOfStarters(t *testing.T) {
	if testing.Short() {
		t.Skip("two chapters for each design")
	}
	for _, name := range allStarters() {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			dir := filepath.Join(t.TempDir(), "trial")
			if code, _, stderr := carryOut(t, "", "new", dir, "--like", name); code != fine {
				t.Fatalf("new ends with %d: %s", code, stderr)
			}
			chapter := func(with ...string) {
				if code, _, stderr := carryOut(t, "", "report", dir, "--only", "md", "--template", "chapter"); code != fine {
					t.Fatalf("the chapter ends with %d: %s", code, stderr)
				}
				text, err := os.ReadFile(filepath.Join(dir, "report", "report.md"))
				if err != nil {
					t.Fatal(err)
				}
				for _, want := range with {
					if !strings.Contains(string(text), want) {
						t.Errorf("the chapter does not say %q", want)
					}
				}
				for _, line := range strings.Split(string(text), "\n") {
					if strings.HasPrefix(line, "|") || strings.HasPrefix(line, "![") {
						continue
					}
					if m := amiss.FindString(harmless.ReplaceAllString(line, "so")); m != "" {
						t.Errorf("%q in: %s", m, line)
					}
				}
			}
			chapter(" Experimental design\n", " will be laid out as ", " will be analysed ", "There are no data yet")
			if code, _, stderr := carryOut(t, "", "draw", dir); code != fine {
				t.Fatalf("draw ends with %d: %s", code, stderr)
			}
			measure(t, dir)
			tests := "Analysis of variance of "
			if name == "repeated-measures" || name == "crossover" {
				tests = "Tests of effects on "
			}
			chapter(" was laid out as ", "analysed by ", "limits ", " References\n", tests)
		})
	}
}
