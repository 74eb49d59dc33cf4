package render

import (
	"bytes"
	"encoding/csv"
	"math"
	"strings"
	"testing"

	"penwright/analysis/result"
)

func TestInert(t *testing.T) {
	for in, want := range map[string]string{
		"": "", "barley": "barley", "-1.5": "-1.5", "+2": "+2", "-3e-05": "-3e-05", "−4": "−4", "a=1": "a=1", "1-2": "1-2", "'=1": "'=1", " =1": " =1",
		"=1+1": "'=1+1", "+cmd": "'+cmd", "-A1": "'-A1", "@SUM(A1)": "'@SUM(A1)", "\t=1": "'\t=1", "\r=1": "'\r=1", "\n=1": "'\n=1", "-1-2": "'-1-2", "+1+1": "'+1+1", "-": "'-", "-0x1p-2": "'-0x1p-2", "-Inf": "'-Inf", "＝1": "'＝1",
	} {
		if got := inert(in); got != want {
			t.Errorf("inert(%q) = %q, want %q", in, got, want)
		}
	}
}

// Every cell of a table comes back as it was, or behind an apostrophe if a spreadsheet
// would have computed it; numbers stay numbers, also below zero.
func TestTablesAsCSV(t *testing.T) {
	n := func(v float64) result.Number { return result.Number(v) }
	hostile := []string{"=HYPERLINK(\"http://example.org\",\"x\")", "+1+cmd|' /C calc'!A0", "-2+3", "@SUM(1)", "a,b\"c\nd", "β-glucan; “fine”", strings.Repeat("long ", 1000)}
	r := result.Response{Name: "adg"}
	for _, h := range hostile {
		r.Contrasts = append(r.Contrasts, result.Contrast{Name: h, Term: h, Estimate: n(-0.25), SE: n(math.NaN()), P: n(1e-300)})
		letters := h
		r.Means = append(r.Means, result.Mean{Term: h, Levels: result.Levels{{Factor: h, Level: h}}, Mean: n(-12.5), Letters: &letters})
	}
	files := csvFiles(&result.Results{Responses: []result.Response{r}})
	if len(files) != 2 {
		t.Fatalf("%d files", len(files))
	}
	for _, f := range files {
		rows, err := csv.NewReader(bytes.NewReader(f.Data)).ReadAll()
		if err != nil || len(rows) != 1+len(hostile) {
			t.Fatalf("%s: %d rows, %v", f.Path, len(rows), err)
		}
		for i, row := range rows[1:] {
			for _, cell := range row {
				if cell != "" && strings.ContainsRune("=+-@\t\r", rune(cell[0])) && cell != "-0.25" && cell != "-12.5" {
					t.Errorf("%s: %q is taken for a formula", f.Path, cell)
				}
			}
			if got := strings.TrimPrefix(row[0], "'"); got != hostile[i] {
				t.Errorf("%s: %q came back as %q", f.Path, hostile[i], got)
			}
			if row[2] != "-0.25" && row[2] != "-12.5" {
				t.Errorf("%s: the number is %q", f.Path, row[2])
			}
		}
	}
}
