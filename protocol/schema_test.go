package protocol

import (
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// TestEveryKeyIsStated checks that the valid trials under testdata state every key
// of format 1 somewhere, so that no key is decoded untried.
func TestEveryKeyIsStated(t *testing.T) {
	stated := map[place]bool{}
	folders, err := filepath.Glob("testdata/*/protocol.toml")
	if err != nil {
		t.Fatal(err)
	}
	for _, path := range folders {
		p, list := Load(os.DirFS(filepath.Dir(path)), "protocol.toml")
		if list.HasErrors() {
			t.Fatal(path)
		}
		d := &decoder{p: p}
		for _, k := range d.keys() {
			table := strings.Trim(k.table, "[]")
			if slices.ContainsFunc(candidates(p, table), func(key string) bool {
				if key != "" {
					key += "."
				}
				return p.Given(key + k.key)
			}) {
				stated[k] = true
			}
		}
	}
	d := &decoder{p: &Protocol{}}
	if n := len(d.keys()); n < 200 {
		t.Errorf("only %d keys are known", n)
	}
	for _, k := range d.keys() {
		if !stated[k] {
			t.Errorf("no trial states the key %s of %q", k.key, k.table)
		}
	}
}

// candidates returns the dotted keys of the tables of one name.
func candidates(p *Protocol, table string) []string {
	keys := []string{""}
	if table == "" {
		return keys
	}
	for _, name := range strings.Split(table, ".") {
		var next []string
		for _, k := range keys {
			if k != "" {
				k += "."
			}
			next = append(next, k+name)
			for i := 0; p.Given(k + name + "[" + string(rune('0'+i)) + "]"); i++ {
				next = append(next, k+name+"["+string(rune('0'+i))+"]")
			}
		}
		keys = next
	}
	return keys
}

// TestORCID compares the check character with the rule of the standard in its other
// form: the sum of all characters, each times its power of two, is 1 modulo 11
// (ISO/IEC 7064:2003, pure system MOD 11-2).
func TestORCID(t *testing.T) {
	holds := func(s string) bool {
		digits := strings.ReplaceAll(s, "-", "")
		sum := 0
		for i, c := range digits {
			v := int(c - '0')
			if c == 'X' {
				v = 10
			}
			for range len(digits) - 1 - i {
				v *= 2
			}
			sum += v
		}
		return sum%11 == 1
	}
	// The sample identifier of the ORCID organization's own documentation (from
	// memory).
	if why, _ := badORCID("0000-0002-1825-0097"); why != "" {
		t.Error(why)
	}
	right := 0
	for i := range 500 {
		body := "0000-000" + string(rune('1'+i%9)) + "-" + string(rune('0'+i/100%10)) + "42" + string(rune('0'+i/10%10)) + "-7" + string(rune('0'+i%10)) + "3"
		for _, c := range "0123456789X" {
			s := body + string(c)
			why, _ := badORCID(s)
			if (why == "") != holds(s) {
				t.Errorf("%s: %q", s, why)
			}
			if why == "" {
				right++
			}
		}
	}
	if right != 500 {
		t.Errorf("%d identifiers of 500 have one right check character", right)
	}
	for _, s := range []string{"0000-0002-1825-009", "0000000218250097", "0000-0002-1825-00977", "0000 0002 1825 0097", "000O-0002-1825-0097", "0000-0002-1825-009x"} {
		if why, _ := badORCID(s); why == "" {
			t.Errorf("%s is taken", s)
		}
	}
}
