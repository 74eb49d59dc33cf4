package sheet

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"penwright/protocol/diag"
)

func TestNumber(t *testing.T) {
	for _, test := range []struct {
		text    string
		decimal rune
		want    float64
		ok      bool
	}{
		{"12.5", '.', 12.5, true}, {"-0.25", '.', -0.25, true}, {"+3", '.', 3, true}, {"1e3", '.', 1000, true}, {".5", '.', 0.5, true}, {"5.", '.', 5, true},
		{"12,5", ',', 12.5, true}, {"1,5e-2", ',', 0.015, true}, {"1000000000000.4", '.', 1000000000000.4, true},
		{"12,5", '.', 0, false}, {"12.5", ',', 0, false}, {"", '.', 0, false}, {"-", '.', 0, false}, {"1.2.3", '.', 0, false}, {"1_000", '.', 0, false},
		{"0x1p3", '.', 0, false}, {"NaN", '.', 0, false}, {"Inf", '.', 0, false}, {"infinity", '.', 0, false}, {"1e999", '.', 0, false}, {"1e", '.', 0, false},
		{"--1", '.', 0, false}, {"1-2", '.', 0, false}, {"e5", '.', 0, false}, {"1 2", '.', 0, false}, {"٣", '.', 0, false},
	} {
		if v, ok := Number(test.text, test.decimal); ok != test.ok || v != test.want && ok {
			t.Errorf("%q with %q = %v, %v; want %v, %v", test.text, test.decimal, v, ok, test.want, test.ok)
		}
	}
}

func TestDecimal(t *testing.T) {
	for _, test := range []struct {
		cells     string
		delimiter rune
		want      rune
		ok        bool
	}{
		{"1 2 3", ',', '.', true}, {"1.5 2", ',', '.', true}, {"1,5 2", ';', ',', true}, {"1,5 2,25 1.234", ';', ',', true},
		{"1,234 5,678", ';', 0, false}, {"1,234 5,6", ';', ',', true}, {"0,125", ';', ',', true},
		{"1.234 5.678", ';', 0, false}, {"1.234 5.678", ',', '.', true}, {"1.234 5.678", '\t', '.', true}, {"0.125 1.234", ';', '.', true},
		{"1.5 2,5", ';', 0, false}, {"1.5 2,5", ',', '.', true}, {"1.5 2.5 3,5", ';', '.', true}, {"1,234.5 7", ';', '.', true}, {"a.b c,d", ';', '.', true},
	} {
		var m Marks
		for _, c := range strings.Fields(test.cells) {
			m.Add(c)
		}
		if mark, ok := m.Decimal(test.delimiter); ok != test.ok || ok && mark != test.want {
			t.Errorf("%s between %q: %q, %v; want %q, %v", test.cells, test.delimiter, mark, ok, test.want, test.ok)
		}
	}
}

// rows reads all rows of a text, cells parted by a stroke.
func rows(t *testing.T, data, delimiter string) (s *Sheet, out []string, list diag.List) {
	t.Helper()
	s, list = Open("x.csv", []byte(data), delimiter)
	if s == nil {
		return nil, nil, list
	}
	_, _, _, more := s.Rows(func(r Row) bool {
		var cells []string
		for _, c := range r.Cells {
			cells = append(cells, c.Text)
		}
		out = append(out, fmt.Sprintf("%d:%s", r.Line, strings.Join(cells, "|")))
		return true
	})
	return s, out, append(list, more...)
}

func TestRows(t *testing.T) {
	for _, test := range []struct {
		name, data, delimiter string
		delim                 rune
		headings              string
		want                  []string
	}{
		{"commas", "a,b\n1,2\n3,4", "auto", ',', "a|b", []string{"2:1|2", "3:3|4"}},
		{"semicolons with decimal commas", "a;b\n1,5;2,5\n3,5;4,5\n", "auto", ';', "a|b", []string{"2:1,5|2,5", "3:3,5|4,5"}},
		{"tabs", "a\tb c\n1\t\n", "auto", '\t', "a|b c", []string{"2:1|"}},
		{"one column", "pen\n1\n", "auto", ',', "pen", []string{"2:1"}},
		{"carriage returns", "a,b\r1,2\r3,4\r", "auto", ',', "a|b", []string{"2:1|2", "3:3|4"}},
		{"both", "a,b\r\n1,2\r\n\r\n , \r\n3,4\r\n", "auto", ',', "a|b", []string{"2:1|2", "5:3|4"}},
		{"empty lines first", "\n \r\na,b\n1,2\n", "auto", ',', "a|b", []string{"4:1|2"}},
		{"quotes", "a,b\n\"1,5\",\"say \"\"no\"\"\"\n\"two\nlines\" , x\n5\" pipe,6\n", "auto", ',', "a|b", []string{`2:1,5|say "no"`, "3:two\nlines|x", `5:5" pipe|6`}},
		{"spare delimiters", "a,b,,\n1,2,,\n3,4\n", "auto", ',', "a|b", []string{"2:1|2", "3:3|4"}},
		{"no-break spaces", "a\u00a0,\u00a0b\n\u00a01,\u200a2 \n", ",", ',', "a|b", []string{"2:1|2"}},
		{"stated", "a;b,c\n1;2,3\n", ",", ',', "a;b|c", []string{"2:1;2|3"}},
	} {
		s, got, list := rows(t, test.data, test.delimiter)
		if len(list) > 0 || s == nil {
			t.Errorf("%s: %v", test.name, list)
			continue
		}
		if s.Delimiter != test.delim || strings.Join(s.Headings, "|") != test.headings || !slices.Equal(got, test.want) {
			t.Errorf("%s: %q %q %q", test.name, s.Delimiter, s.Headings, got)
		}
	}
}

func TestFaults(t *testing.T) {
	for _, test := range []struct{ data, want string }{
		{"a,b\n1,2,3\n4,5\n", "x.csv:2:5: 3 fields, but there are 2 headings"},
		{"a,b\n1\n4,5\n", "x.csv:2:1: 1 field, but there are 2 headings"},
		{"a,b\n\"1\"x,2\n4,5\n", "x.csv:2:1: text follows a closing quote"},
		{"a,b\n1,\"2\n4,5\n", "x.csv:2:3: a quoted field is not closed"},
		{"a,a\n1,2\n", `x.csv:1:3: the heading "a" stands twice`},
		{"", "x.csv:1: the file has no headings and no rows"},
		{"a\x00b\n", "x.csv:1: the file holds zero bytes and is no text"},
		{"PK\x03\x04", "x.csv: this is a packed workbook, not a text file"},
		{strings.Repeat("a,", 1001) + "\n", "x.csv:1: 1002 columns; at most 1000 are read"},
		{"ä,b\n1,ß,3\n", "x.csv:2:6: 3 fields, but there are 2 headings"},
		{"\xEF\xBB\xBFa,a\n", `x.csv:1:6: the heading "a" stands twice`},
		{"\xFF\xFEa\x00,\x00a\x00\n\x00", `x.csv:1:7: the heading "a" stands twice`},
		{"\xE4,a,a\n", `x.csv:1:5: the heading "a" stands twice`},
	} {
		_, _, list := rows(t, test.data, "auto")
		got := ""
		for _, d := range list {
			if d.Severity == diag.Error {
				got = d.Pos.String() + ": " + d.Message
			}
		}
		if got != test.want {
			t.Errorf("%.20q: %s, want %s", test.data, got, test.want)
		}
	}
}

// TestManyFaults: a file of nothing but faults is told in a hundred.
func TestManyFaults(t *testing.T) {
	_, _, list := rows(t, "a,b\n"+strings.Repeat("1\n", 5000), "auto")
	if len(list) != kept || !strings.Contains(list[kept-1].Message, "and 4900 more") {
		t.Errorf("%d diagnostics, the last %q", len(list), list[len(list)-1].Message)
	}
	s, list := Open("x.csv", []byte("a\n"+strings.Repeat("1\n", MaxRows+1)), "auto")
	n := 0
	rows, _, _, more := s.Rows(func(Row) bool { n++; return true })
	if n != MaxRows || rows != MaxRows || len(list) != 0 || len(more) != 1 {
		t.Errorf("%d rows were read, with %v", n, more)
	}
}

// FuzzOpen: any bytes are read to the end, and positions stand in the file.
func FuzzOpen(f *testing.F) {
	for _, s := range []string{"a,b\n1,2\n", "\xFF\xFEa\x00", "\xFE\xFF\x00a", "a;b\r1;\"2\r\"", "\xEF\xBB\xBFa\t\"b\"\"\"\n", "\"\n\"\n", "a\xE4,b\n\xFF"} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		s, list := Open("x.csv", data, "auto")
		if (s == nil) != list.HasErrors() {
			t.Fatalf("sheet %v with %v", s, list)
		}
		if s == nil {
			return
		}
		_, _, _, more := s.Rows(func(r Row) bool {
			if len(r.Cells) != len(s.Headings) || r.Blank() {
				t.Errorf("line %d: %v", r.Line, r.Cells)
			}
			for i := range r.Cells {
				if p := s.Pos(r, i); p.Line < r.Line || p.Col < 1 || p.Col > len(data)+1 {
					t.Errorf("cell %d of line %d stands at %v", i, r.Line, p)
				}
				for _, mark := range ".," {
					if v, ok := Number(r.Cells[i].Text, mark); ok && (math.IsNaN(v) || math.IsInf(v, 0)) {
						t.Errorf("%q is %v", r.Cells[i].Text, v)
					}
				}
			}
			return true
		})
		_ = more
	})
}
