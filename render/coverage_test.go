package render

import (
	"fmt"
	"io/fs"
	"maps"
	"slices"
	"strings"
	"testing"
	"testing/fstest"

	"penwright/analysis/trial"
	"penwright/render/doc"
	"penwright/templates"
)

// verdicts reads the coverage tables of a report: the verdict of each item, and what stands
// beside it.
func verdicts(d *doc.Document) (verdict, beside map[string]string) {
	verdict, beside = map[string]string{}, map[string]string{}
	for _, b := range d.Blocks {
		x, ok := b.(doc.Table)
		if !ok || !strings.HasPrefix(x.ID, "coverage") {
			continue
		}
		lead := ""
		if x.ID == "coverage-reflect" {
			lead = "R"
		}
		for _, row := range x.Rows {
			if !row.Group {
				n := lead + doc.Plain(row.Cells[0].Text)
				verdict[n], beside[n] = doc.Plain(row.Cells[2].Text), doc.Plain(row.Cells[3].Text)
			}
		}
	}
	return verdict, beside
}

// expected reads verdicts as they are written below: "Answered: 1a 1b".
func expected(lines ...string) map[string]string {
	out := map[string]string{}
	for _, l := range lines {
		verdict, items, _ := strings.Cut(l, ": ")
		for _, n := range strings.Fields(items) {
			out[n] = verdict
		}
	}
	return out
}

// start is a protocol to start from.
func start(t *testing.T, name string) fs.FS {
	t.Helper()
	sub, err := fs.Sub(templates.FS, "start/"+name)
	if err != nil {
		t.Fatal(err)
	}
	return sub
}

// Verdicts on whole trials. They were written from reading the protocols and data by eye,
// item by item against ARRIVE 2.0 (Percie du Sert et al., PLoS Biol 18(7):e3000410, 2020,
// tables 1 and 2), REFLECT (2010) and what readers of field trials ask (common practice, no
// source), as a strict reviewer would; R is REFLECT.
func TestVerdicts(t *testing.T) {
	all := stages(t)
	for _, tt := range []struct {
		name, template string
		trial          fs.FS
		want           map[string]string
	}{
		// Everything is stated but an abstract, interests and the part of the
		// funder in a sentence, and what pigs went through before; no pen has criteria of
		// its own, nobody is named who enrolled, and the plan was not sealed.
		{name: "demo", trial: all["demo"], want: expected(
			"Answered: 1a 1b 2a 2b 3a 3b 3c 4a 4b 5 6a 6b 7a 7b 8a 9a 9b 9c 9d 10a 10b 12a 12b 13 14 15 16a 16b 16c 17a 17b 18 19 20",
			"In part: 8b 21b", "Missing: 11 21a",
			"Answered: R2 R4 R5 R6 R7 R8 R9 R11 R12 R13 R14 R15 R16 R17 R19 R20 R21 R22", "In part: R1 R3 R10", "Missing: R18", "Not applicable: R4b")},
		// Nothing on size, blinding or housing; diets are named and not described; no
		// procedure is stated; nothing says what a square is, at what age cows were, what is
		// done if assumptions fail, or in which period Gunda left.
		{name: "latin square", trial: all["latin-square"], want: expected(
			"Answered: 1a 1b 2a 3a 3b 3c 4a 6a 6b 7a 10a 10b 12a 12b 13 14 16a 16b 16c 20",
			"In part: 4b 7b 8a 8b 9b 9c 9d 19 21b", "Missing: 2b 5 9a 11 15 17a 17b 18 21a",
			"Answered: R2 R3 R5 R6 R8 R12 R14 R16 R17", "In part: R1 R4 R7 R10 R13 R19", "Missing: R9 R11 R15 R18 R20 R21 R22", "Not applicable: R4b")},
		// A field trial well described; how deep it was tilled is not, nor that nothing went
		// wrong, nor interests in a sentence, nor is there a discussion.
		{name: "split plot", trial: all["split-plot"], want: expected(
			"Answered: 1 2 3 4 5 6 7 8 9 11 12 13 14 15 18", "In part: 10 16 19", "Missing: 17")},
		// The least that a protocol says, before the draw and the data.
		{name: "bare", trial: all["bare"], want: expected(
			"Answered: 1b 6b", "In part: 1a 2a 13", "Waits: 3b 3c 4a 7a 10a 10b 11 16b 17a 17b 18",
			"Missing: 2b 3a 4b 5 6a 7b 8a 8b 9a 9b 9c 9d 12a 12b 14 15 16a 16c 19 20 21a 21b",
			"In part: R4 R5 R6 R7", "Missing: R2 R3 R9 R10 R11 R12 R14", "Waits: R1 R8 R13 R15 R16 R17 R18 R19 R20 R21 R22", "Not applicable: R4b")},
		// A plan for a committee, with what it can answer.
		{name: "plan", template: "plan", trial: start(t, "randomized-block"), want: expected(
			"Answered: 1a 1b 2a 2b 3a 4a 4b 5 6a 6b 7a 7b 8a 9a 9b 9c 9d 12a 12b 13 14 15 16a 16c 20", "In part: 8b 19 21b", "Missing: 21a",
			"Answered: R2 R4 R5 R6 R7 R8 R9 R11 R12 R14", "In part: R3 R10", "Not applicable: R4b")},
	} {
		t.Run(tt.name, func(t *testing.T) {
			x, rs, _ := opened(t, tt.trial)
			opt := fixed
			opt.Template = tt.template
			d, list := Document(x, rs, opt)
			if list.HasErrors() {
				t.Fatal(list)
			}
			got, beside := verdicts(d)
			for _, n := range slices.Sorted(maps.Keys(tt.want)) {
				if got[n] != tt.want[n] {
					t.Errorf("%s: %q, want %q: %s", n, got[n], tt.want[n], beside[n])
				}
			}
			for _, n := range slices.Sorted(maps.Keys(got)) {
				if tt.want[n] == "" {
					t.Errorf("%s: %s: nothing is expected of it: %s", n, got[n], beside[n])
				}
			}
			linked(t, d)
		})
	}
}

// linked checks that every reference in the coverage tables has its target, by name and
// number, and that what is answered says where or how much.
func linked(t *testing.T, d *doc.Document) {
	t.Helper()
	label := map[string]string{}
	doc.Walk(d.Blocks, func(node any) {
		switch n := node.(type) {
		case doc.Heading:
			label[n.ID] = "section " + n.Number
		case doc.Table:
			label[n.ID] = "table " + n.Number
		case doc.Figure:
			label[n.ID] = "figure " + n.Number
		}
	})
	refs := 0
	for _, b := range d.Blocks {
		x, ok := b.(doc.Table)
		if !ok || !strings.HasPrefix(x.ID, "coverage") {
			continue
		}
		doc.Walk([]doc.Block{x}, func(node any) {
			if r, ok := node.(doc.Ref); ok {
				refs++
				if got := strings.ToLower(r.Text); label[r.ID] == "" || got != label[r.ID] {
					t.Errorf("%s refers to %s, which is %q", r.Text, r.ID, label[r.ID])
				}
			}
		})
		for _, row := range x.Rows {
			if !row.Group && len(strings.TrimSpace(doc.Plain(row.Cells[3].Text))) < 3 {
				t.Errorf("item %s says %q", doc.Plain(row.Cells[0].Text), doc.Plain(row.Cells[3].Text))
			}
		}
	}
	if refs < 5 {
		t.Errorf("only %d references", refs)
	}
	doc.Walk(d.Blocks, func(node any) {
		if a, ok := node.(doc.Aside); ok && a.Kind == sumsUp {
			t.Error("a summary was not filled in")
		}
	})
}

// Every protocol to start from is covered, as audit and as plan, whatever its design.
func TestStartersCovered(t *testing.T) {
	names, err := fs.Glob(templates.FS, "start/*")
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range names {
		x, rs, _ := opened(t, start(t, strings.TrimPrefix(name, "start/")))
		for _, template := range []string{"audit", "plan"} {
			opt := fixed
			opt.Template = template
			d, list := Document(x, rs, opt)
			if list.HasErrors() {
				t.Fatal(list)
			}
			linked(t, d)
			got, beside := verdicts(d)
			animals := x.Protocol.Animals != nil
			if (got["1a"] != "") != animals || !animals && got["18"] != "Answered" {
				t.Errorf("%s, %s: animals %v, item 1a %q", name, template, animals, got["1a"])
			}
			for n, v := range got {
				if v == "Not in this report" {
					t.Errorf("%s, %s: %s is not printed: %s", name, template, n, beside[n])
				}
			}
		}
	}
}

// ownTemplate reports on the demo with a template of the trial’s own.
func ownTemplate(t *testing.T, text string) (verdict, beside map[string]string) {
	t.Helper()
	all := copied(t, stages(t)["demo"])
	all["own.md"] = &fstest.MapFile{Data: []byte(text)}
	edit(t, all, trial.ProtocolFile, "[report]\n", "[report]\ntemplate = \"own.md\"\n")
	x, rs, _ := opened(t, all)
	d, list := Document(x, rs, fixed)
	if list.HasErrors() {
		t.Fatal(list)
	}
	return verdicts(d)
}

// An item is answered only where the report at hand prints the answer, and what its author
// writes under a heading of its own counts for what it says.
func TestAnsweredWhere(t *testing.T) {
	chapter, err := fs.ReadFile(templates.FS, "chapter.md")
	if err != nil {
		t.Fatal(err)
	}
	chapterText := string(chapter)
	const discussion = "# Discussion\n\nBarrows gained more on dried yeast, as we expected from earlier trials of this farm.\n\n"
	for _, tt := range []struct {
		name, template string
		want           map[string]string
	}{
		{name: "nothing but the list", template: "{{coverage \"report\"}}\n", want: expected(
			"Not in this report: 3c 5 6a 7a 8a 9b 10a 10b 12a 12b 14 15 16b 16c 20", "Answered: 1a 1b 2a 4b 6b", "Missing: 11 17a 17b 18 21a")},
		{name: "no table of SD", template: "{{template \"animals\" .}}\n\n{{range .Responses}}{{range .Terms}}\n{{table \"means\" .Response .Name}}\n\n{{table \"comparisons\" .Response .Name}}\n{{end}}{{end}}\n\n{{coverage \"report\"}}\n",
			want: expected("Not in this report: 10a 12a", "Answered: 3c 8a 15", "In part: 8b 10b")},
		{name: "tables of SD", template: "# Results\n\n{{range .Responses}}\n{{table \"summary\" .Name}}\n{{end}}\n\n{{coverage \"report\"}}\n", want: expected("Answered: 3c 10a", "Not in this report: 10b 8a")},
		{name: "an abstract without animals", template: "# Abstract\n\nWe asked whether dried yeast raises daily gain, and it did by much.\n\n{{coverage \"report\"}}\n", want: expected("In part: 11", "Missing: R1x")},
		{name: "an abstract", template: "# Abstract\n\nTwenty pens of white landrace cross barrows (growing pigs) were allotted at random to dried yeast, and gained more on it.\n\n{{coverage \"report\"}}\n", want: expected("Answered: 11 R1")},
		{name: "a heading without a text", template: "# Discussion\n\nTo follow.\n\n{{coverage \"report\"}}\n", want: expected("Missing: 17a 17b 18")},
		{name: "a discussion", template: discussion + "{{coverage \"report\"}}\n", want: expected("Answered: 17a R22", "Missing: 17b 18")},
		{name: "a chapter", template: chapterText + "\n\n{{coverage \"report\"}}\n", want: expected(
			"Answered: 1a 1b 2a 2b 3a 3b 3c 4a 4b 5 6a 6b 7a 7b 8a 9a 9b 9c 10a 10b 14 15 16a 16b 16c 17a 17b 18 19 20", "In part: 8b 21b", "Missing: 11 21a",
			"Not in this report: 9d 12a 12b 13")},
		{name: "its limits", template: discussion + "## Limitations\n\nThe trial is limited to one farm and to barrows, and the assessors were few.\n\nThe findings may not hold for other herds.\n\n{{coverage \"report\"}}\n",
			want: expected("Answered: 17a 17b 18")},
	} {
		t.Run(tt.name, func(t *testing.T) {
			got, beside := ownTemplate(t, tt.template)
			delete(tt.want, "R1x")
			for _, n := range slices.Sorted(maps.Keys(tt.want)) {
				if got[n] != tt.want[n] {
					t.Errorf("%s: %q, want %q: %s", n, got[n], tt.want[n], beside[n])
				}
			}
		})
	}
}

// What the author confirms closes a gap, and the same words do not when something happened.
func TestNoneConfirmed(t *testing.T) {
	all := copied(t, stages(t)["split-plot"])
	edit(t, all, trial.ProtocolFile, "locked = 2025-09-01", "locked = 2025-09-01\nnone = [\"deviation\"]")
	x, rs, _ := opened(t, all)
	d, list := Document(x, rs, fixed)
	if list.HasErrors() {
		t.Fatal(list)
	}
	if got, beside := verdicts(d); got["16"] != "Answered" || !strings.Contains(beside["16"], "no deviation, as the author confirms") {
		t.Errorf("16: %s: %s", got["16"], beside["16"])
	}
}

// Text of any kind in a protocol is looked for as it is, and breaks nothing.
func TestHostileCoverage(t *testing.T) {
	all := copied(t, stages(t)["demo"])
	for _, r := range [][2]string{
		{`breed = "white landrace cross"`, `breed = "<b>x</b> | {{range 9}} **שלום** 猪 ` + strings.Repeat("very long ", 500) + `end"`},
		{`source = "the farm's own herd, three farrowing groups"`, `source = "[a](javascript:1) # & \\ _ ` + "`" + ` herd of ours"`},
		{`health = "clinically healthy at allotment, routine vaccinations"`, `health = "| | | |"`},
		{`interests  = "none declared"`, `interests  = "none none none none"`},
	} {
		edit(t, all, trial.ProtocolFile, r[0], r[1])
	}
	x, rs, _ := opened(t, all)
	d, list := Document(x, rs, fixed)
	if list.HasErrors() {
		t.Fatal(list)
	}
	got, beside := verdicts(d)
	for n, want := range map[string]string{"8a": "Answered", "8b": "In part", "21a": "Missing"} {
		if got[n] != want {
			t.Errorf("%s: %q, want %q: %s", n, got[n], want, beside[n])
		}
	}
	for n, s := range beside {
		if len(s) > 2000 {
			t.Errorf("%s says %d bytes", n, len(s))
		}
	}
	linked(t, d)
}

// A second coverage of the other kind is told as a fault of the template, not filled twice.
func TestUnknownCoverage(t *testing.T) {
	all := copied(t, stages(t)["demo"])
	all["own.md"] = &fstest.MapFile{Data: []byte("{{coverage \"repot\"}}\n")}
	edit(t, all, trial.ProtocolFile, "[report]\n", "[report]\ntemplate = \"own.md\"\n")
	x, rs, _ := opened(t, all)
	_, list := Document(x, rs, fixed)
	if s := fmt.Sprint(list); !strings.Contains(s, `did you mean "report"?`) {
		t.Error(s)
	}
}
