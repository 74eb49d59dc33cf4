package welfare

import (
	"fmt"
	"slices"
	"strings"
	"testing"
	"testing/fstest"

	"penwright/protocol"
)

// The numbers of ARRIVE 2.0 are those of tables 1 and 2 of Percie du Sert et al., PLoS Biol
// 18(7):e3000410, 2020; REFLECT has 22 items and 4b (REFLECT statement, 2010).
func TestGuidelineNumbers(t *testing.T) {
	var reflect []string
	for n := 1; n <= 22; n++ {
		reflect = append(reflect, fmt.Sprint(n))
		if n == 4 {
			reflect = append(reflect, "4b")
		}
	}
	for _, tt := range []struct{ guideline, want string }{
		{guideline: "arrive", want: "1a 1b 2a 2b 3a 3b 3c 4a 4b 5 6a 6b 7a 7b 8a 8b 9a 9b 9c 9d 10a 10b 11 12a 12b 13 14 15 16a 16b 16c 17a 17b 18 19 20 21a 21b"},
		{guideline: "reflect", want: strings.Join(reflect, " ")},
	} {
		var got []string
		for _, x := range guideline(tt.guideline).Items {
			got = append(got, x.Number)
		}
		if s := strings.Join(got, " "); s != tt.want {
			t.Errorf("%s has %s, want %s", tt.guideline, s, tt.want)
		}
	}
}

// Every row is whole, says how it was read, and asks for what somebody can answer.
func TestGuidelineRows(t *testing.T) {
	for _, x := range loaded().asked {
		where := x.guideline + " " + x.Number
		if x.Set == "" || x.Topic == "" || x.Asks == "" || strings.HasSuffix(x.Asks, ".") || x.Seen == "" {
			t.Errorf("%s is not whole: %+v", where, x)
		}
		if x.guideline == "arrive" && x.Mark != "C" || x.guideline == "reflect" && x.Mark != "C2" || x.guideline == "field" && (x.Mark != "M" || x.Memory != "common practice, no source") {
			t.Errorf("%s is marked %s", where, x.Mark)
		}
		if x.Mark != "M" && SourceOf(Citation{Source: x.Source}).Address == "" {
			t.Errorf("%s has no source", where)
		}
		required := 0
		for _, p := range x.Parts {
			if !p.Optional {
				required++
			}
			if p.Computed == "" && len(p.Keys) == 0 {
				t.Errorf("%s: nothing answers %s", where, p.What)
			}
			if p.Sections != nil && x.Plan {
				t.Errorf("%s: a plan has no text of its author on %s", where, p.What)
			}
		}
		if required == 0 {
			t.Errorf("%s asks for nothing", where)
		}
	}
}

// Every key that a row names is one that a protocol may have, and every command one that
// the program has.
func TestGuidelineKeys(t *testing.T) {
	// What must stand beside a key so that it is looked at.
	repeated := []string{"factor", "treatment", "unit", "response", "signature", "exclusion", "event", "deviation", "item", "input", "person"}
	var keys []string
	for _, x := range loaded().asked {
		for _, p := range x.Parts {
			for _, k := range p.Keys {
				if k.Command {
					if !slices.Contains([]string{"draw", "seal"}, k.Name) {
						t.Errorf("there is no command %s", k.Name)
					}
				} else if !slices.Contains(keys, k.Name) {
					keys = append(keys, k.Name)
				}
			}
		}
	}
	if len(keys) < 70 {
		t.Errorf("only %d keys are named", len(keys))
	}
	for _, key := range append(keys, "animals.sexe", "welfare.procedure.whyy", "report.narrative.discusion") {
		table, name := key[:strings.LastIndex(key, ".")], key[strings.LastIndex(key, ".")+1:]
		head := "[" + table + "]"
		if slices.Contains(repeated, table) || table == "welfare.procedure" {
			head = "[[" + table + "]]"
		}
		// Whatever the value, a key that is not known is told as such.
		source := "protocol = 1\n" + head + "\n" + name + " = \"a.md\"\n"
		_, list := protocol.Load(fstest.MapFS{"protocol.toml": {Data: []byte(source)}}, "protocol.toml")
		unknown := false
		for _, d := range list {
			unknown = unknown || (d.Code == protocol.UnknownKey || table == "report.narrative" && d.Code == protocol.UnknownName) && strings.HasSuffix(d.Key, "."+name)
		}
		if want := !slices.Contains(keys, key); unknown != want {
			t.Errorf("%s: unknown %v, want %v\n%v", key, unknown, want, list)
		}
	}
}

// Which guidelines concern a trial.
func TestGuidelines(t *testing.T) {
	for _, tt := range []struct{ name, source, want string }{
		{name: "pigs", source: "[animals]\nspecies = \"pig\"\n", want: "ARRIVE 2.0, REFLECT"},
		{name: "laying hens", source: "[animals]\nspecies = \"laying hens\"\n", want: "ARRIVE 2.0, REFLECT"},
		{name: "trout", source: "[animals]\nspecies = \"rainbow trout\"\n", want: "ARRIVE 2.0, REFLECT"},
		{name: "zebrafish", source: "[animals]\nspecies = \"zebrafish\"\n", want: "ARRIVE 2.0"},
		{name: "mice", source: "[animals]\nspecies = \"mouse\"\n", want: "ARRIVE 2.0"},
		{name: "minipigs", source: "[animals]\nspecies = \"minipig\"\n", want: "ARRIVE 2.0"},
		{name: "unknown animals that are eaten", source: "[animals]\nspecies = \"edible snail\"\nfood_chain = true\n", want: "ARRIVE 2.0, REFLECT"},
		{name: "welfare alone", source: "[welfare]\naim = \"laboratory\"\n", want: "ARRIVE 2.0"},
		{name: "cows as units", source: "[[unit]]\nname = \"cow\"\ncount = 4\n", want: "ARRIVE 2.0, REFLECT"},
		{name: "pens", source: "[[unit]]\nname = \"pen\"\ncount = 4\n", want: "ARRIVE 2.0"},
		{name: "animals in units", source: "[[unit]]\nname = \"box\"\ncount = 4\nanimals = 5\n", want: "ARRIVE 2.0"},
		{name: "wheat", source: "[material]\ncrop = \"wheat\"\n[[unit]]\nname = \"plot\"\ncount = 4\n", want: "Field trials"},
		{name: "slurry on a field", source: "[trial]\ntitle = \"Pig slurry on barley\"\n[site]\nsoil = \"sandy loam\"\n[[unit]]\nname = \"layer\"\ncount = 4\n", want: "Field trials"},
		{name: "nothing", source: "[[unit]]\nname = \"plot\"\ncount = 4\n", want: "Field trials"},
	} {
		t.Run(tt.name, func(t *testing.T) {
			p, _ := protocol.Load(fstest.MapFS{"protocol.toml": {Data: []byte("protocol = 1\n" + tt.source)}}, "protocol.toml")
			var got []string
			for _, g := range Guidelines(p) {
				got = append(got, g.Name)
			}
			if s := strings.Join(got, ", "); s != tt.want {
				t.Errorf("%s, want %s", s, tt.want)
			}
		})
	}
}
