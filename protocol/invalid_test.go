package protocol_test

import (
	"fmt"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"penwright/protocol"
	"penwright/protocol/diag"
)

const invalid = "../testdata/invalid"

var (
	// # ERROR `regexp` `regexp`: the diagnostics wanted on this line
	expectation = regexp.MustCompile("# (FILE )?(ERROR|WARNING) ((?:`[^`]*` ?)+)")
	pattern     = regexp.MustCompile("`[^`]*`")
)

// want is a diagnostic that a fixture announces.
type want struct {
	line     int // 0: of the file as a whole
	severity string
	pattern  *regexp.Regexp
}

func wants(t *testing.T, source string) []want {
	var list []want
	for i, line := range strings.Split(source, "\n") {
		for _, m := range expectation.FindAllStringSubmatch(line, -1) {
			for _, p := range pattern.FindAllString(m[3], -1) {
				w := want{line: i + 1, severity: strings.ToLower(m[2]), pattern: regexp.MustCompile(strings.Trim(p, "`"))}
				if m[1] != "" {
					w.line = 0
				}
				list = append(list, w)
			}
		}
	}
	if len(list) == 0 {
		t.Error("the fixture announces nothing")
	}
	return list
}

// TestInvalid loads the fixtures and compares what is said, line by line, with what
// their comments announce. Nothing may be missing and nothing unannounced.
func TestInvalid(t *testing.T) {
	files, err := filepath.Glob(invalid + "/*.toml")
	if err != nil || len(files) < 30 {
		t.Fatal(len(files), err)
	}
	said := map[string]bool{}
	for _, file := range files {
		name := filepath.Base(file)
		t.Run(name, func(t *testing.T) {
			source, err := os.ReadFile(file)
			if err != nil {
				t.Fatal(err)
			}
			_, list := protocol.Load(os.DirFS(invalid), name)
			wanted := wants(t, string(source))
			met := make([]bool, len(wanted))
			for _, d := range list {
				said[d.Code] = true
				text := fmt.Sprintf("%s: %s [%s]", d.Key, d.Message, d.Code)
				found := false
				for i, w := range wanted {
					if !met[i] && w.line == d.Pos.Line && w.severity == d.Severity.String() && w.pattern.MatchString(text) {
						met[i], found = true, true
						break
					}
				}
				if !found {
					t.Errorf("unannounced: %v: %v: %s", d.Pos, d.Severity, text)
				}
				wellFormed(t, d, string(source))
			}
			for i, w := range wanted {
				if !met[i] {
					t.Errorf("missing on line %d: %s %s", w.line, w.severity, w.pattern)
				}
			}
		})
	}
	for _, c := range protocol.Codes() {
		if !said[c.Code] {
			t.Errorf("no fixture brings about %s", c.Code)
		}
	}
}

// wellFormed checks what holds for every diagnostic of Load.
func wellFormed(t *testing.T, d diag.Diagnostic, source string) {
	t.Helper()
	if d.Code == "" || d.Message == "" || strings.HasSuffix(d.Message, ".") || strings.HasSuffix(d.Hint, ".") {
		t.Errorf("%+v has no code, no message or ends with a period", d)
	}
	for _, p := range append([]diag.Related{{Pos: d.Pos}}, d.Related...) {
		if !inside(p.Pos, source) {
			t.Errorf("%v: %s: the position %v lies outside the file", d.Pos, d.Message, p.Pos)
		}
	}
}

// inside tells whether a position lies in the source, its end included.
func inside(p diag.Pos, source string) bool {
	lines := strings.Split(strings.TrimPrefix(source, "\ufeff"), "\n")
	if p.Line == 0 {
		return p.Col == 0
	}
	return p.Line <= len(lines) && p.Col >= 1 && p.Col <= len(lines[p.Line-1])+1
}
