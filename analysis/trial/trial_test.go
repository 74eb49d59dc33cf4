package trial

import (
	"slices"
	"strings"
	"testing"
	"testing/fstest"

	"penwright/analysis/dataset"
	"penwright/protocol/allot"
	"penwright/protocol/folder"
)

const head = `protocol = 1
[trial]
code = "HM-26-003"
title = "A trial"
objective = "To open it."
background = { file = "background.md" }
`

const units = `[[factor]]
name = "diet"
levels = ["A", "B"]
[[factor]]
name = "sex"
levels = ["F", "M"]
[[unit]]
name = "pen"
count = 4
carries = ["sex"]
receives = ["diet"]
[roster]
file = "roster.csv"
`

const data = `[analysis]
interactions = "none"
[[covariate]]
name = "mass"
[[response]]
name = "gain"
role = "primary"
kind = "continuous"
covariates = ["mass"]
[data]
file = "data.csv"
`

// good is a folder with everything; a test changes or removes files of it.
func good() map[string]string {
	return map[string]string{
		"protocol.toml": head + units + data + "[[table]]\nfile = \"diets.csv\"\ncaption = \"Diets\"\nsection = \"treatments\"\n[randomization]\nmethod = \"by lot\"\n",
		"background.md": "Why.",
		"diets.csv":     "part,A,B\nmaize,60,55\n",
		"roster.csv":    "pen,sex,mass\n1,F,20\n2,M,21\n3,F,22\n4,M,23\n",
		"allotment.csv": "pen,diet\n1,A\n2,A\n3,B\n4,B\n",
		"data.csv":      "pen,gain\n1,5\n2,6\n3,7\n4,8\n",
		"unread.csv":    "not named anywhere",
	}
}

func TestOpen(t *testing.T) {
	for _, test := range []struct {
		name   string
		change map[string]string // "" removes
		want   string            // first diagnostic
		has    string            // parts: protocol, plan, roster, allotment, table
		read   string            // files, where they matter
	}{
		{name: "whole", has: "protocol plan roster allotment table", read: "allotment.csv background.md data.csv diets.csv protocol.toml roster.csv"},
		{name: "nothing", change: map[string]string{"protocol.toml": ""}, want: "protocol.toml: "},
		{name: "not TOML", change: map[string]string{"protocol.toml": "protocol = \n"}, want: "protocol.toml:1:"},
		{name: "no data yet", change: map[string]string{"data.csv": ""}, want: "does not exist yet", has: "protocol plan roster allotment"},
		{name: "neither allotment nor data", change: map[string]string{"data.csv": "", "allotment.csv": ""}, want: "does not exist yet", has: "protocol plan roster"},
		{name: "allotment from the data", change: map[string]string{"allotment.csv": "", "data.csv": "pen,diet,gain\n1,A,5\n2,A,6\n3,B,7\n4,B,8\n"}, has: "protocol plan roster allotment table"},
		{name: "bad allotment", change: map[string]string{"allotment.csv": "pen,diet\n1,A\n2,A\n3,B\n5,B\n"}, want: `there is no pen "5"`, has: "protocol plan roster"},
		{name: "no roster", change: map[string]string{"roster.csv": ""}, want: "there is no file roster.csv", has: "protocol plan allotment table"},
		{name: "bad roster", change: map[string]string{"roster.csv": "pen,sex,mass\n1,X,20\n"}, want: `"X" is not a level of sex`, has: "protocol plan roster allotment table"},
		{name: "no table of diets", change: map[string]string{"diets.csv": ""}, want: "there is no file diets.csv", has: "protocol plan roster allotment table"},
		{name: "no text", change: map[string]string{"background.md": ""}, want: "background.md", has: "protocol"},
		{name: "no layout", change: map[string]string{"protocol.toml": head + strings.Replace(units, "count = 4", "count = 1", 1)}, want: "cannot receive", has: "protocol"},
	} {
		files := fstest.MapFS{}
		for name, text := range good() {
			if c, ok := test.change[name]; ok {
				text = c
			}
			if text != "" {
				files[name] = &fstest.MapFile{Data: []byte(text)}
			}
		}
		tr, list := Open(folder.FromFS(files))
		got := ""
		if len(list) > 0 {
			got = list[0].Pos.String() + ": " + list[0].Message
		}
		if test.want == "" && got != "" || !strings.Contains(got, test.want) {
			t.Errorf("%s: says %q, want %q", test.name, got, test.want)
		}
		var has []string
		for _, part := range []struct {
			name string
			is   bool
		}{{"protocol", tr.Protocol != nil}, {"plan", tr.Plan != nil}, {"roster", tr.Roster != nil}, {"allotment", tr.Allotment != nil}, {"table", tr.Table != nil}} {
			if part.is {
				has = append(has, part.name)
			}
		}
		if strings.Join(has, " ") != test.has {
			t.Errorf("%s: has %q, want %q", test.name, has, test.has)
		}
		var read []string
		for _, f := range tr.Files {
			read = append(read, f.Path)
		}
		if test.read != "" && strings.Join(read, " ") != test.read {
			t.Errorf("%s: read %q, want %q", test.name, read, test.read)
		}
		if test.name == "bad roster" {
			n := 0
			for _, d := range list {
				if strings.Contains(d.Message, `"X"`) {
					n++
				}
			}
			if n != 1 {
				t.Errorf("the roster's fault is said %d times", n)
			}
		}
	}
}

// TestClasses: a carried class that only the roster tells is part of the allotment.
func TestClasses(t *testing.T) {
	for _, where := range []string{"roster.csv", "allotment.csv", "data.csv"} {
		files := fstest.MapFS{}
		for name, text := range good() {
			switch {
			case name == "roster.csv" && where != name:
				text = "pen,mass\n1,20\n2,21\n3,22\n4,23\n"
			case name == "allotment.csv" && where == name:
				text = "pen,diet,sex\n1,A,F\n2,A,M\n3,B,F\n4,B,M\n"
			case name == "data.csv" && where == name:
				text = "pen,sex,gain\n1,F,5\n2,M,6\n3,F,7\n4,M,8\n"
			}
			files[name] = &fstest.MapFile{Data: []byte(text)}
		}
		tr, list := Open(folder.FromFS(files))
		if len(list) > 0 {
			t.Errorf("%s: %v", where, list)
			continue
		}
		r := tr.Table.Response("gain")
		if sex := tr.Table.LevelOf(r, 1); !slices.Equal(sex, []int32{0, 1, 0, 1}) {
			t.Errorf("%s: sexes %v", where, sex)
		}
		if r.Status[0] != dataset.Used || r.Covariates[0][3] != 23 {
			t.Errorf("%s: %+v", where, r)
		}
		if tr.Allotment != tr.Table.Allotment || tr.Allotment.Origin != allot.Elsewhere {
			t.Errorf("%s: two allotments", where)
		}
	}
}

// FuzzOpen opens folders of any content: protocol, allotment, roster and data, parted by
// the character that parts records.
func FuzzOpen(f *testing.F) {
	names := []string{"protocol.toml", "allotment.csv", "roster.csv", "data.csv", "background.md", "diets.csv"}
	var parts []string
	for _, name := range names {
		parts = append(parts, good()[name])
	}
	f.Add(strings.Join(parts, "\x1e"))
	f.Fuzz(func(t *testing.T, folders string) {
		files := fstest.MapFS{}
		for i, part := range strings.SplitN(folders, "\x1e", len(names)) {
			files[names[i]] = &fstest.MapFile{Data: []byte(part)}
		}
		tr, list := Open(folder.FromFS(files))
		if tr.Protocol == nil || tr.Protocol.Data == nil || list.HasErrors() {
			return
		}
		if _, there := files[tr.Protocol.Data.File]; there && tr.Table == nil {
			t.Errorf("neither a table nor a reason: %v", list)
		}
	})
}
