package dataset

import (
	"flag"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"

	"github.com/rogpeppe/go-internal/diff"
	"github.com/rogpeppe/go-internal/txtar"

	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
	"penwright/protocol/layout"
	"penwright/protocol/sheet"
)

var update = flag.Bool("update", false, "rewrite the want sections of testdata")

// head is put before every protocol of testdata, so that a case holds only what it is
// about.
const head = "protocol = 1\ntrial = { code = \"HM-26-002\", title = \"A trial\", objective = \"To test reading.\", start = 2026-03-02, end = 2026-04-27 }\n"

// read runs the stages up to the table on the files of a folder.
func read(files fs.FS) (*Table, diag.List) {
	f := folder.FromFS(files)
	p, list := protocol.Load(f, "protocol.toml")
	if list.HasErrors() {
		return nil, list
	}
	plan, more := layout.New(p)
	list = append(list, more...)
	if list.HasErrors() {
		return nil, list
	}
	a, more := allot.Read(f, plan)
	list = append(list, more...)
	if more.HasErrors() {
		return nil, list
	}
	t, more := Read(f, plan, a)
	return t, append(list, more...)
}

// dump writes a table and diagnostics as text.
func dump(t *Table, list diag.List) string {
	var b strings.Builder
	for _, d := range list {
		fmt.Fprintf(&b, "%s: %s: %s [%s]\n", d.Pos, d.Severity, d.Message, d.Code)
		if d.Hint != "" {
			fmt.Fprintf(&b, "    hint: %s\n", d.Hint)
		}
		for _, r := range d.Related {
			fmt.Fprintf(&b, "    %s: %s\n", r.Pos, r.Message)
		}
	}
	if t == nil {
		return b.String()
	}
	for _, f := range t.Files {
		fmt.Fprintf(&b, "%s: %d rows, %s, delimiter %q, decimal %q", f.Path, f.Rows, f.Encoding, f.Delimiter, f.Decimal)
		if len(f.Unused) > 0 {
			fmt.Fprintf(&b, ", unused %q", f.Unused)
		}
		b.WriteByte('\n')
	}
	for _, d := range t.Disagreements {
		f := &t.Plan.Factors[d.Factor]
		unit := f.Unit
		if unit < 0 {
			unit = t.Plan.Factors[0].Unit
		}
		fmt.Fprintf(&b, "disagreement: %s: %s %s, line %d\n", allot.Describe(t.Plan, unit, d.Instance), f.Name, d.Found, d.Origin.First)
	}
	if t.Allotment != nil && t.Allotment.Origin == allot.FromData {
		b.WriteString("allotment from the data:\n")
		b.Write(t.Allotment.Bytes())
	}
	for i := range t.Responses {
		r := &t.Responses[i]
		fmt.Fprintf(&b, "%s on %s\n", r.Protocol.Name, t.Plan.Units[r.Unit].Name)
		for row := range r.Value {
			b.WriteString("  " + unitText(t.UnitName(r, row)))
			if r.Time != nil {
				fmt.Fprintf(&b, " at %s", t.Plan.Protocol.RepeatedNamed(r.Protocol.Repeated).At[r.Time[row]])
			}
			fmt.Fprintf(&b, ": %s", number(r.Value[row]))
			if r.Total != nil {
				fmt.Fprintf(&b, " of %s", number(r.Total[row]))
			}
			if r.Event != nil {
				fmt.Fprintf(&b, " event %s", number(r.Event[row]))
			}
			for c, name := range r.Protocol.Covariates {
				fmt.Fprintf(&b, ", %s %s", name, number(r.Covariates[c][row]))
			}
			if r.Animals != nil {
				fmt.Fprintf(&b, " from %d", r.Animals[row])
			}
			if o := r.Origin[row]; o.First > 0 {
				fmt.Fprintf(&b, " (%s:%d", t.Files[o.File].Path, o.First)
				if o.Last != o.First {
					fmt.Fprintf(&b, "-%d", o.Last)
				}
				b.WriteByte(')')
			}
			if r.Recorded != nil {
				fmt.Fprintf(&b, " day %d", r.Recorded[row])
			}
			if r.Confirmed[row] {
				b.WriteString(" confirmed")
			}
			if r.Corrected[row] {
				b.WriteString(" corrected")
			}
			if r.Status[row] != Used {
				fmt.Fprintf(&b, " %s: %s", [...]string{"used", "missing", "excluded", "covariate missing", "out of range"}[r.Status[row]], r.Reason[row])
			}
			b.WriteByte('\n')
		}
	}
	return b.String()
}

func number(v float64) string {
	if math.IsNaN(v) {
		return "none"
	}
	return strconv.FormatFloat(v, 'g', 10, 64)
}

// unescape lets a data section hold any byte: \xFF, \t, \r, \x00 as in Go.
func unescape(t *testing.T, data []byte) []byte {
	text := string(data)
	if !strings.HasPrefix(text, "escaped\n") {
		return data
	}
	var out []byte
	for i, line := range strings.Split(strings.TrimSuffix(text[len("escaped\n"):], "\n"), "\n") {
		if i > 0 && !strings.HasSuffix(string(out), "\r") {
			out = append(out, '\n')
		}
		s, err := strconv.Unquote(`"` + strings.ReplaceAll(line, `"`, `\"`) + `"`)
		if err != nil {
			t.Fatalf("%v: %s", err, line)
		}
		out = append(out, s...)
	}
	return out
}

// TestRead runs the cases of testdata: each a folder, and what is read and said.
func TestRead(t *testing.T) {
	names, err := filepath.Glob("testdata/*.txtar")
	if err != nil || len(names) == 0 {
		t.Fatal("no cases", err)
	}
	for _, name := range names {
		t.Run(strings.TrimSuffix(filepath.Base(name), ".txtar"), func(t *testing.T) {
			archive, err := txtar.ParseFile(name)
			if err != nil {
				t.Fatal(err)
			}
			files := fstest.MapFS{}
			want := -1
			for i, f := range archive.Files {
				switch f.Name {
				case "want":
					want = i
				case "protocol.toml":
					files[f.Name] = &fstest.MapFile{Data: append([]byte(head), f.Data...)}
				default:
					files[f.Name] = &fstest.MapFile{Data: unescape(t, f.Data)}
				}
			}
			got := dump(read(files))
			if *update {
				if want < 0 {
					archive.Files = append(archive.Files, txtar.File{Name: "want"})
					want = len(archive.Files) - 1
				}
				archive.Files[want].Data = []byte(got)
				if err := os.WriteFile(name, txtar.Format(archive), 0o644); err != nil {
					t.Fatal(err)
				}
				return
			}
			if want < 0 || got != string(archive.Files[want].Data) {
				var w []byte
				if want >= 0 {
					w = archive.Files[want].Data
				}
				t.Errorf("%s", diff.Diff("want", w, "got", []byte(got)))
			}
		})
	}
}

// animalFiles is a folder of pens with many animals, as feeding trials of poultry have.
func animalFiles(pens, animals int) fstest.MapFS {
	var data strings.Builder
	data.WriteString("block,pen,tag,initial_mass,final_mass\n")
	tag := 0
	for pen := range pens {
		for a := range animals {
			tag++
			fmt.Fprintf(&data, "%d,%d,%d,%d.%d,%d.%02d\n", pen/10+1, pen%10+1, tag, 40+tag%7, tag%10, 2000+tag%311, a%100)
		}
	}
	protocol := head + fmt.Sprintf(`[[factor]]
name = "diet"
levels = ["A", "B", "C", "D", "E"]
[[unit]]
name = "block"
count = %d
[[unit]]
name = "pen"
within = "block"
count = 10
animals = %d
receives = ["diet"]
[randomization]
method = "by lot"
[[covariate]]
name = "initial_mass"
[[response]]
name = "final_mass"
role = "primary"
kind = "continuous"
recorded_on = "pen"
aggregate = "mean"
range = [1000, 3000]
covariates = ["initial_mass"]
[[response]]
name = "gain"
kind = "continuous"
recorded_on = "pen"
aggregate = "mean"
compute = "final_mass - initial_mass"
[data]
file = "data.csv"
`, pens/10, animals)
	var allotment strings.Builder
	allotment.WriteString("block,pen,diet\n")
	for pen := range pens {
		fmt.Fprintf(&allotment, "%d,%d,%c\n", pen/10+1, pen%10+1, 'A'+pen%5)
	}
	return fstest.MapFS{"protocol.toml": {Data: []byte(protocol)}, "data.csv": {Data: []byte(data.String())}, "allotment.csv": {Data: []byte(allotment.String())}}
}

// TestManyAnimals reads 10⁵ animals in 1000 pens and compares the means with sums taken
// while the file was written.
func TestManyAnimals(t *testing.T) {
	const pens, animals = 1000, 100
	table, list := read(animalFiles(pens, animals))
	if len(list) > 0 {
		t.Fatal(list[0])
	}
	tag := 0
	for pen := range pens {
		final, initial := 0.0, 0.0
		for a := range animals {
			tag++
			initial += float64(40+tag%7) + float64(tag%10)/10
			final += float64(2000+tag%311) + float64(a%100)/100
		}
		r, g := table.Response("final_mass"), table.Response("gain")
		if math.Abs(r.Value[pen]-final/animals) > 1e-9 || math.Abs(r.Covariates[0][pen]-initial/animals) > 1e-9 || math.Abs(g.Value[pen]-(final-initial)/animals) > 1e-9 {
			t.Fatalf("pen %d: %v, %v, %v; want %v, %v, %v", pen, r.Value[pen], r.Covariates[0][pen], g.Value[pen], final/animals, initial/animals, (final-initial)/animals)
		}
		if o := r.Origin[pen]; int(o.First) != pen*animals+2 || int(o.Last) != pen*animals+animals+1 || r.Animals[pen] != animals {
			t.Fatalf("pen %d stands in %v from %d", pen, o, r.Animals[pen])
		}
	}
}

// BenchmarkMillion reads 10⁶ animals in 10 000 pens.
func BenchmarkMillion(b *testing.B) {
	files := animalFiles(10_000, 100)
	b.ReportAllocs()
	for b.Loop() {
		if _, list := read(files); len(list) > 0 {
			b.Fatal(list[0])
		}
	}
}

// FuzzRead feeds data files to a protocol of many parts. Whatever the bytes, reading
// must end, and everything said must lie inside its file.
func FuzzRead(f *testing.F) {
	names, err := filepath.Glob("testdata/*.txtar")
	if err != nil {
		f.Fatal(err)
	}
	for _, name := range names {
		archive, err := txtar.ParseFile(name)
		if err != nil {
			f.Fatal(err)
		}
		for _, file := range archive.Files {
			if file.Name == "data.csv" {
				f.Add(file.Data)
			}
		}
	}
	protocol := head + `[animals]
species = "pig"
[[factor]]
name = "diet"
levels = [1, 2]
[[unit]]
name = "block"
count = 2
[[unit]]
name = "pen"
within = "block"
count = 2
animals = 3
receives = ["diet"]
[[repeated]]
name = "week"
on = "pen"
at = [1, 2]
[[covariate]]
name = "mass"
[[response]]
name = "gain"
kind = "continuous"
role = "primary"
range = [0, 100]
repeated = "week"
covariates = ["mass"]
[[response]]
name = "feed"
kind = "continuous"
recorded_on = "pen"
aggregate = "ratio"
compute = "gain / animal_days"
[[response]]
name = "y"
kind = "count"
recorded_on = "block"
aggregate = "sum"
over = "week"
where = { pen = 1 }
[data]
file = "data.csv"
date = "day"
[[correction]]
file = "data.csv"
unit = { block = "1", pen = "2" }
column = "gain"
old = "5"
new = "6"
reason = "slip"
on = 2026-04-01
by = "A. Verrill"
`
	f.Add([]byte("block,pen,week,diet,mass,gain,y,day\n1,1,1,1,5,6,7,2026-03-03\n1,2,1,2,5,5,7,\n1,1,2,2,5,6,7.5,2026-03-03\n"))
	f.Fuzz(func(t *testing.T, data []byte) {
		table, list := read(fstest.MapFS{"protocol.toml": {Data: []byte(protocol)}, "data.csv": {Data: data}})
		lines := strings.Split(strings.ReplaceAll(string(data), "\r\n", "\n"), "\n")
		if !strings.Contains(string(data), "\n") {
			lines = strings.Split(string(data), "\r")
		}
		for _, d := range list {
			if d.Message == "" || d.Code == "" {
				t.Errorf("%+v", d)
			}
			if d.Pos.File != "data.csv" || d.Pos.Line == 0 || !utf8Text(data) {
				continue
			}
			if d.Pos.Line > len(lines) || d.Pos.Col > len(lines[d.Pos.Line-1])+2 {
				t.Errorf("%s lies outside the file: %s", d.Pos, d.Message)
			}
		}
		if table == nil {
			return
		}
		for i := range table.Responses {
			r := &table.Responses[i]
			for row, v := range r.Value {
				if (r.Status[row] == Used) == (math.IsNaN(v) || r.Reason[row] != "") {
					t.Errorf("%s, row %d: %v with status %d and reason %q", r.Protocol.Name, row, v, r.Status[row], r.Reason[row])
				}
				if math.IsInf(v, 0) {
					t.Errorf("%s, row %d: %v", r.Protocol.Name, row, v)
				}
			}
		}
	})
}

// utf8Text tells whether lines and columns of a file can be counted in its bytes.
func utf8Text(data []byte) bool {
	for _, b := range data {
		if b == 0 || b >= 0x80 || b == '\r' {
			return false
		}
	}
	return true
}

// TestCodes: every code that the cases bring about is described somewhere.
func TestCodes(t *testing.T) {
	known := map[string]bool{}
	for _, list := range [][]diag.CodeInfo{protocol.Codes(), layout.Codes(), sheet.Codes(), allot.Codes(), Codes()} {
		for _, c := range list {
			if c.Code == "" || c.Text == "" {
				t.Errorf("%+v", c)
			}
			known[c.Code] = true
		}
	}
	names, err := filepath.Glob("testdata/*.txtar")
	if err != nil {
		t.Fatal(err)
	}
	met := map[string]bool{}
	for _, name := range names {
		archive, err := txtar.ParseFile(name)
		if err != nil {
			t.Fatal(err)
		}
		for _, f := range archive.Files {
			if f.Name != "want" {
				continue
			}
			for _, m := range regexp.MustCompile(`(?m)^[^ ].*: (?:error|warning|note): .* \[([a-z-]+)\]$`).FindAllStringSubmatch(string(f.Data), -1) {
				met[m[1]] = true
				if !known[m[1]] {
					t.Errorf("%s: code %s is not described", name, m[1])
				}
			}
		}
	}
	for _, c := range Codes() {
		if !met[c.Code] && c.Code != TooMuch {
			t.Errorf("no case brings about %s", c.Code)
		}
	}
}

// Messages show numbers as people write them, unless only the last digits tell why.
func TestReadable(t *testing.T) {
	for _, tt := range []struct {
		v      float64
		beside []float64
		want   string
	}{
		{v: 0.1 + 0.2, want: "0.3"},
		{v: 12.300000000000001, beside: []float64{0, 10}, want: "12.3"},
		{v: (500.3 - 31.7) / 7 * 1000, beside: []float64{200, 1500}, want: "66942.85714"},
		{v: 1500.0000000002274, beside: []float64{200, 1500}, want: "1500.0000000002274"},
		{v: 1e-300, want: "1e-300"},
		{v: -42, beside: []float64{0, 1}, want: "-42"},
	} {
		if got := readable(tt.v, tt.beside...); got != tt.want {
			t.Errorf("%v beside %v: %s, want %s", tt.v, tt.beside, got, tt.want)
		}
	}
}
