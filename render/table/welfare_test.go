package table

import (
	"os"
	"strings"
	"testing"
	"testing/fstest"

	"penwright/protocol"
	"penwright/protocol/welfare"
	"penwright/render/doc"
)

const crowded = `protocol = 1
[trial]
code = "HM-26-003"
title = "A trial"
objective = "To look after animals."
[animals]
species = "pig"
mass = { value = 20, unit = "kg" }
mass_end = { value = 77, unit = "kg" }
[housing]
group_size = 6
floor_area = { value = 0.4, unit = "m2" }
[welfare]
aim = "commercial conditions"
[[welfare.procedure]]
kind = "blood sample"
name = "first"
volume = { value = 8, unit = "mL" }
[[welfare.procedure]]
kind = "blood sample"
name = "second"
volume = { value = 200, unit = "mL" }
`

// Every finding is a row, warnings first, and a caution ends by deferring; limits bear
// document, jurisdiction and reading; nothing from memory stands among them.
func TestWelfareTables(t *testing.T) {
	p, _ := protocol.Load(fstest.MapFS{"protocol.toml": {Data: []byte(crowded)}}, "protocol.toml")
	found := welfare.Check(p, nil)
	cautions := Cautions(found)
	if len(cautions.Rows) != len(found) {
		t.Errorf("%d rows for %d findings", len(cautions.Rows), len(found))
	}
	before := true // still among the warnings
	for _, r := range cautions.Rows {
		warning := doc.Plain(r.Cells[1].Text) == "Warning"
		text := doc.Plain(r.Cells[3].Text)
		if warning && (!before || !strings.HasSuffix(text, "The ethics committee, the attending veterinarian and local law decide.")) {
			t.Errorf("warning %q", text)
		}
		before = before && warning
		if strings.Contains(text, "..") || !strings.HasSuffix(text, ".") {
			t.Errorf("sentence %q", text)
		}
	}
	limits := Limits(found)
	group, shown := "", map[string]int{}
	for _, r := range limits.Rows {
		if r.Group {
			group = doc.Plain(r.Cells[0].Text)
			continue
		}
		var cells []string
		for _, c := range r.Cells {
			cells = append(cells, doc.Plain(c.Text))
		}
		if cells[0] == "" || cells[1] == "" || cells[2] == "" || cells[3] != "C" && cells[3] != "C2" {
			t.Errorf("limit %q", cells)
		}
		if cells[0] == "Floor per animal, over 50 to 85\u202fkg: at least 0.55\u202fm²" && (group != "Floor per animal" || cells[4] != "0.4\u202fm²" || cells[5] != "no" || cells[2] != "EU") {
			t.Errorf("under %q: %q", group, cells)
		}
		if strings.HasPrefix(cells[0], "Blood drawn, single") {
			shown[cells[0]]++
		}
	}
	if len(shown) != 1 {
		t.Errorf("shown: %v", shown)
	}
	for _, r := range LookUps(p).Rows {
		if doc.Plain(r.Cells[len(r.Cells)-1].Text) != "M" {
			t.Error("a row to look up is not marked M")
		}
	}
	for _, r := range Documents(found).Rows {
		if len(r.Cells) != 5 || doc.Plain(r.Cells[4].Text) == "" {
			t.Errorf("document %v", r)
		}
	}
	if len(Limits(nil).Rows)+len(Cautions(nil).Rows)+len(Rules(nil).Rows)+len(Documents(nil).Rows) != 0 {
		t.Error("tables of nothing have rows")
	}
}

// The built-in trial has rows to look up, limits and rules, and no warning.
func TestWelfareOfDemo(t *testing.T) {
	p, list := protocol.Load(os.DirFS("../../templates/demo"), "protocol.toml")
	if list.HasErrors() {
		t.Fatal(list)
	}
	found := welfare.Check(p, nil)
	for _, r := range Cautions(found).Rows {
		if doc.Plain(r.Cells[1].Text) == "Warning" {
			t.Error(doc.Plain(r.Cells[3].Text))
		}
	}
	if len(LookUps(p).Rows) == 0 || len(Rules(found).Rows) == 0 || len(Limits(found).Rows) == 0 {
		t.Error("a table is empty")
	}
}
