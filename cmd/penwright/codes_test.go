package main

import (
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"github.com/rogpeppe/go-internal/txtar"
)

// The smallest folder of every code brings it about; codes whose example is itself an
// input are tried where they are declared.
func TestFoldersOfCodes(t *testing.T) {
	archive, err := txtar.ParseFile(filepath.Join("testdata", "codes.txtar"))
	if err != nil {
		t.Fatal(err)
	}
	cases := map[string]map[string]string{}
	for _, f := range archive.Files {
		code, file, _ := strings.Cut(f.Name, "/")
		if cases[code] == nil {
			cases[code] = map[string]string{}
		}
		cases[code][file] = string(f.Data)
	}
	// What a text cannot hold, or should not.
	wide := "block,pen,diet,gain"
	for range 1000 {
		wide += ",x"
	}
	cases["too-many-columns"] = map[string]string{"data.csv": wide + "\n"}
	cases["encoding"] = map[string]string{"data.csv": "block,pen,diet,gain,K\xfche\n1,1,A,10,x\n"}
	cases["not-text"] = map[string]string{"data.csv": "PK\x03\x04\x00"}
	cases["too-many-rows"] = map[string]string{"data.csv": "block,pen,diet,gain\n" + strings.Repeat("1\n", 1_000_001)}
	// Gigabytes to hold or minutes to fit, what the reading of data keeps from happening, and
	// searches for variances that no small folder is known to lead astray.
	apart := map[string]bool{"too-much-data": true, "too-large": true, "unknown-treatment": true, "time-trend": true, "not-converged": true, "not-told-apart": true}

	mark := regexp.MustCompile(`(?m)\[([a-z-]+)\]$|"code": *"([a-z-]+)"`)
	declared := map[string]bool{}
	for _, info := range codes() {
		declared[info.Code] = true
		c, ok := cases[info.Code]
		if !ok {
			if !strings.Contains(info.Example, "\n") && !strings.Contains(info.Example, " = ") && !apart[info.Code] {
				t.Errorf("no folder brings about %s", info.Code)
			}
			continue
		}
		t.Run(info.Code, func(t *testing.T) {
			dir := t.TempDir()
			write := func(file, text string) {
				if err := os.WriteFile(filepath.Join(dir, file), []byte(text), 0o644); err != nil {
					t.Fatal(err)
				}
			}
			for _, file := range []string{"protocol.toml", "data.csv"} {
				if _, own := c[file]; !own && !(file == "data.csv" && c["protocol.toml"] != "") {
					write(file, cases["base"][file]+map[bool]string{true: c["append"]}[file == "protocol.toml"])
				}
			}
			verb := []string{"check"}
			for file, text := range c {
				switch file {
				case "run":
					verb = strings.Fields(text)
				case "append":
				default:
					write(file, text)
				}
			}
			out, complaints, _ := command(t, append(verb, dir)...)
			for _, m := range mark.FindAllStringSubmatch(out+complaints, -1) {
				if m[1] == info.Code || m[2] == info.Code {
					return
				}
			}
			t.Errorf("%s says\n%s%s", verb, out, complaints)
		})
	}
	for code := range cases {
		if !declared[code] && code != "base" {
			t.Errorf("%s is no code", code)
		}
	}
}
