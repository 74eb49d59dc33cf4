package allot

import (
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"testing/fstest"

	"penwright/protocol"
	"penwright/protocol/folder"
)

const blocks = "[[unit]]\nname = \"block\"\ncount = 2\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 2\nreceives = [\"diet\"]\n"

// TestRecord draws twice into a folder and reads the record back.
func TestRecord(t *testing.T) {
	plan := planOf(t, factorText("diet", 2)+"[randomization]\ncodes = true\n"+blocks)
	dir := t.TempDir()
	open := func() *folder.Folder {
		f, err := folder.Open(dir)
		if err != nil {
			t.Fatal(err)
		}
		t.Cleanup(func() { _ = f.Close() })
		return f
	}
	draw := func(d Draw, seed string) (*Allotment, error) {
		a, list := New(plan, nil, seed)
		if list.HasErrors() {
			t.Fatal(list)
		}
		f := open()
		changes, err := Changes(f, a, d)
		if err != nil {
			return nil, err
		}
		return a, f.Apply(changes...)
	}
	scheme, _ := Scheme(plan, nil)
	d := Draw{Scheme: scheme, Seed: "HM-1 \"ä\"\n\\", By: "Ansa Verrill", On: protocol.Date{Year: 2026, Month: 2, Day: 20}, Plan: "ab", Roster: "cd"}
	first, err := draw(d, d.Seed)
	if err != nil {
		t.Fatal(err)
	}
	a, list := Read(open(), plan)
	if len(list) > 0 {
		t.Fatal(list)
	}
	if !slices.Equal(a.Levels[0], first.Levels[0]) || !slices.Equal(a.Codes, first.Codes) || a.Origin != Drawn || len(a.Draws) != 1 {
		t.Errorf("read back %+v, want %+v", a, first)
	}
	d.Number, d.Generator, d.Candidates, d.Allotment = 1, GeneratorText, 1, folder.Hash(first.Bytes())
	if a.Draws[0] != d {
		t.Errorf("record %+v, want %+v", a.Draws[0], d)
	}
	if _, err := draw(Draw{}, "other"); err == nil {
		t.Error("the allotment was replaced without a reason")
	}
	seed := Seed(a.Draws, d.Seed)
	if seed == d.Seed || Seed(nil, d.Seed) != d.Seed {
		t.Errorf("seed of the second draw %q", seed)
	}
	second, err := draw(Draw{Seed: seed, Why: "a pen was flooded"}, seed)
	if err != nil {
		t.Fatal(err)
	}
	a, list = Read(open(), plan)
	if len(list) > 0 || len(a.Draws) != 2 || !slices.Equal(a.Levels[0], second.Levels[0]) {
		t.Errorf("second draw read back as %+v, %v", a, list)
	}
	kept, err := os.ReadFile(filepath.Join(dir, "allotment.1.csv"))
	if err != nil || string(kept) != string(first.Bytes()) {
		t.Errorf("the first allotment was kept as %q, %v", kept, err)
	}
	text := string(second.Bytes())
	if err := os.WriteFile(filepath.Join(dir, File), []byte(strings.Replace(text, "diet1", "diet2", 1)), 0o644); err != nil {
		t.Fatal(err)
	}
	if _, list = Read(open(), plan); !list.HasErrors() || list[len(list)-1].Code != AllotmentChanged && list[0].Code != AllotmentChanged {
		t.Errorf("a changed allotment: %v", list)
	}
	if _, err := draw(Draw{Why: "again"}, "x"); err == nil {
		t.Error("a changed allotment was replaced")
	}
	if err := os.Remove(filepath.Join(dir, File)); err != nil {
		t.Fatal(err)
	}
	if _, list = Read(open(), plan); !list.HasErrors() {
		t.Error("a record without its allotment was accepted")
	}
	if _, err := draw(Draw{Why: "again"}, "x"); err == nil {
		t.Error("drawn although the allotment is missing")
	}
}

// TestReadRefuses: allotments brought along, and what is said of them.
func TestReadRefuses(t *testing.T) {
	plan := planOf(t, factorText("diet", 2)+"[randomization]\nmethod = \"by lot\"\n"+blocks)
	const good = "block,pen,diet\n1,1,diet1\n1,2,diet2\n2,1,diet2\n2,2,diet1\n"
	for _, test := range []struct{ name, csv, toml, want string }{
		{"good", good, "", ""},
		{"rows in another order", "pen,block,order,diet\n2,2,2,diet1\n1,1,1,diet1\n2,1,3,diet2\n1,2,4,diet2\n", "", ""},
		{"semicolons", strings.ReplaceAll(good, ",", ";"), "", ""},
		{"unknown unit", strings.Replace(good, "2,2", "2,3", 1), "", `allotment.csv:5:3: there is no pen "3" in block 2 [unknown-unit] they are 1, 2`},
		{"missing unit", strings.Replace(good, "2,2,diet1\n", "", 1), "", `allotment.csv:1:1: no row for block 2, pen 2 [missing-unit] every pen of the plan has a row`},
		{"duplicate unit", good + "2,2,diet1\n", "", `allotment.csv:6:1: block 2, pen 2 stands in line 5 already [duplicate-unit] `},
		{"unknown level", strings.Replace(good, "diet2", "deit2", 1), "", `allotment.csv:3:5: "deit2" is not a level of diet [unknown-level] did you mean "diet2"?`},
		{"no level", strings.Replace(good, "diet2", "", 1), "", `allotment.csv:3:5: no level of diet is given [unknown-level] levels are diet1, diet2`},
		{"no column", strings.Replace(good, "diet\n", "deit\n", 1), "", `allotment.csv:1:11: no column "diet" tells what each pen received [no-treatment-column] is it "deit"? name the column "diet", or say so under [data] columns`},
		{"no block", "pen,diet\n1,diet1\n", "", `allotment.csv:1:1: names of unit "pen" repeat, and no column tells the block [unit-columns] add a column "block", or say under [data] columns which heading stands for it`},
		{"bad order", "block,pen,order,diet\n1,1,1,diet1\n1,2,1,diet2\n2,1,x,diet2\n2,2,4,diet1\n", "", `allotment.csv:3:5: order 1 stands in line 2 already [bad-order] `},
		{"unequal", strings.Replace(good, "1,1,diet1", "1,1,diet2", 1), "", `allotment.csv:2:5: diet diet1 stands on 1 of unit pen, 2 are planned [unequal-allotment] the analysis follows the allotment as it is; if this was meant, say so with replicates`},
		{"not a table", "\"", "", `allotment.csv:1:1: a quoted field is not closed [quoting] `},
		{"broken record", good, "[[draw]]\nnumber = 2\nallotment = \"x\"\n", `allotment.toml:1:1: draw 2 stands where draw 1 should [bad-record] the record grows by appending only; restore what stood there`},
		{"not TOML", good, "[[draw]]\nnumber = \n", `allotment.toml:2:`},
		{"unknown key", good, "[[draw]]\nnumber = 1\nallotment = \"x\"\ncolour = \"red\"\n", `allotment.toml:1:1: unknown key "draw.colour" [bad-record] the record grows by appending only; restore what stood there`},
	} {
		files := fstest.MapFS{File: {Data: []byte(test.csv)}}
		if test.toml != "" {
			files[RecordFile] = &fstest.MapFile{Data: []byte(test.toml)}
		}
		a, list := Read(folder.FromFS(files), plan)
		got := ""
		if len(list) > 0 {
			d := list[0]
			got = d.Pos.String() + ": " + d.Message + " [" + d.Code + "] " + d.Hint
		} else if a == nil || a.Origin != Elsewhere {
			t.Errorf("%s: %+v", test.name, a)
		}
		if got != test.want && (test.want == "" || !strings.HasPrefix(got, test.want)) {
			t.Errorf("%s:\n got %s\nwant %s", test.name, got, test.want)
		}
	}
	if a, list := Read(folder.FromFS(fstest.MapFS{}), plan); a != nil || list != nil {
		t.Errorf("an empty folder gives %v, %v", a, list)
	}
}

// TestLevelAt: a whole plot's level holds for its subplots, and a listed treatment tells
// the levels it is made of.
func TestLevelAt(t *testing.T) {
	plan := planOf(t, factorText("a", 2)+factorText("b", 2)+"[[unit]]\nname = \"plot\"\ncount = 2\nreceives = [\"a\"]\n[[unit]]\nname = \"subplot\"\nwithin = \"plot\"\ncount = 2\nreceives = [\"b\"]\n")
	a := &Allotment{Plan: plan, Levels: [][]int32{{1, 0}, {0, 1, 1, 0}}}
	if got := a.LevelAt(0, 1); !slices.Equal(got, []int32{1, 1, 0, 0}) {
		t.Errorf("a at subplots: %v", got)
	}
	if got := a.LevelAt(1, 0); got != nil {
		t.Errorf("b at plots: %v", got)
	}
	plan = planOf(t, factorText("dose", 2)+"[[treatment]]\ncode = \"none\"\nlevels = {}\n[[treatment]]\ncode = \"two\"\nlevels = { dose = \"dose2\" }\n[[treatment]]\ncode = \"one\"\nlevels = { dose = \"dose1\" }\n[[unit]]\nname = \"pen\"\ncount = 3\nreceives = [\"treatment\"]\n")
	a = &Allotment{Plan: plan, Levels: [][]int32{{0, 1, 2}, nil}}
	if got := a.LevelAt(1, 0); !slices.Equal(got, []int32{-1, 1, 0}) {
		t.Errorf("dose at pens: %v", got)
	}
}

// FuzzRecord reads any allotment.csv and allotment.toml: no panic, and what is accepted
// without a word is written and read back the same.
func FuzzRecord(f *testing.F) {
	plan := planOf(f, factorText("diet", 2)+"[randomization]\nmethod = \"by lot\"\n"+blocks)
	f.Add([]byte("block,pen,order,code,diet\n1,1,1,K1,diet1\n1,2,2,K2,diet2\n2,1,3,K3,diet2\n2,2,4,K4,diet1\n"), []byte(""))
	f.Add([]byte("block;pen;diet\n1;1;diet1\n"), []byte("[[draw]]\nnumber = 1\non = 2026-02-20\nallotment = \"x\"\n"))
	f.Fuzz(func(t *testing.T, csv, toml []byte) {
		files := fstest.MapFS{File: {Data: csv}}
		if len(toml) > 0 {
			files[RecordFile] = &fstest.MapFile{Data: toml}
		}
		a, list := Read(folder.FromFS(files), plan)
		for _, d := range list {
			if d.Message == "" || d.Code == "" || d.Pos.File == "" {
				t.Errorf("%+v", d)
			}
		}
		if a == nil || list.HasErrors() {
			return
		}
		again, list := parse(file(File, string(a.Bytes())), plan)
		if list.HasErrors() || !slices.Equal(again.Levels[0], a.Levels[0]) || !slices.Equal(again.Codes, a.Codes) {
			t.Errorf("read back %+v %v, want %+v", again, list, a)
		}
	})
}
