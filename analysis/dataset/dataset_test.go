package dataset

import (
	"flag"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
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
