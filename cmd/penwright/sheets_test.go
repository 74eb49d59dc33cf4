package main

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"reflect"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/rogpeppe/go-internal/txtar"

	"penwright/templates"
)

// command runs a command line in this process.
func command(t *testing.T, args ...string) (stdout, stderr string, code int) {
	t.Helper()
	var out, err bytes.Buffer
	code = (&app{in: strings.NewReader(""), out: &out, err: &err, now: func() time.Time { return time.Date(2026, 3, 1, 0, 0, 0, 0, time.UTC) },
		getenv: func(string) string { return "" }, width: 100}).run(args)
	return out.String(), err.String(), code
}

// table reads a delimited file as records.
func table(t *testing.T, file string, comma rune) [][]string {
	t.Helper()
	data, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	r := csv.NewReader(bytes.NewReader(data))
	r.Comma = comma
	records, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	return records
}

func save(t *testing.T, file string, comma rune, records [][]string) {
	t.Helper()
	var b bytes.Buffer
	w := csv.NewWriter(&b)
	w.Comma = comma
	if err := w.WriteAll(records); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(file, b.Bytes(), 0o644); err != nil {
		t.Fatal(err)
	}
}

// A sheet that is filled in with what was once recorded gives the analysis of the
// record.
func TestFilledSheetsReadBack(t *testing.T) {
	for _, test := range []struct {
		name  string
		comma rune
		keys  int // columns that tell the row
	}{{"demo", ',', 2}, {"latin-square", ',', 3}, {"split-plot", ';', 3}} {
		t.Run(test.name, func(t *testing.T) {
			from := os.DirFS(filepath.Join("..", "..", "testdata", "trials", test.name))
			if test.name == "demo" {
				var err error
				if from, err = fs.Sub(templates.FS, "demo"); err != nil {
					t.Fatal(err)
				}
			}
			dir := filepath.Join(t.TempDir(), "trial")
			if err := os.CopyFS(dir, from); err != nil {
				t.Fatal(err)
			}
			before, complaints, code := command(t, "analyze", "--json", "--quiet", dir)
			if code != fine {
				t.Fatal(complaints)
			}
			if _, complaints, code = command(t, "sheets", "--only", "csv", dir); code != fine {
				t.Fatal(complaints)
			}
			recorded := table(t, filepath.Join(dir, "data.csv"), test.comma)
			filled := table(t, filepath.Join(dir, "sheets", "data-to-fill.csv"), test.comma)
			if len(filled) < len(recorded) {
				t.Fatalf("%d rows to fill, %d recorded", len(filled), len(recorded))
			}
			key := func(row []string) string { return strings.Join(row[:test.keys], "\x00") }
			of := map[string][]string{}
			for _, row := range recorded[1:] {
				of[key(row)] = row
			}
			met := 0
			for _, row := range filled[1:] {
				if of[key(row)] == nil {
					continue // a unit that was lost: its boxes stay empty
				}
				met++
				for k, heading := range filled[0] {
					if at := slices.Index(recorded[0], heading); at >= 0 && row[k] == "" {
						row[k] = of[key(row)][at]
					}
				}
			}
			if met != len(recorded)-1 {
				t.Fatalf("%d of %d recorded rows stand on the sheet", met, len(recorded)-1)
			}
			for _, heading := range recorded[0] {
				if !slices.Contains(filled[0], heading) {
					t.Errorf("the column %q is not on the sheet", heading)
				}
			}
			save(t, filepath.Join(dir, "data.csv"), test.comma, filled)
			after, complaints, code := command(t, "analyze", "--json", "--quiet", dir)
			if code != fine {
				t.Fatal(complaints)
			}
			var a, b map[string]any
			if err := json.Unmarshal([]byte(before), &a); err != nil {
				t.Fatal(err)
			}
			if err := json.Unmarshal([]byte(after), &b); err != nil {
				t.Fatal(err)
			}
			if !reflect.DeepEqual(a["responses"], b["responses"]) {
				t.Error("the filled sheet gives another analysis")
			}
		})
	}
}

// Sheets of all kinds of records read back without a fault once every box is filled.
func TestSheetsOfEveryRecord(t *testing.T) {
	archive, err := txtar.ParseFile(filepath.Join("testdata", "sheets.txtar"))
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range archive.Files {
		name, file, _ := strings.Cut(f.Name, "/")
		if file != "protocol.toml" {
			continue
		}
		t.Run(name, func(t *testing.T) {
			dir := t.TempDir()
			var want string
			for _, g := range archive.Files {
				of, file, _ := strings.Cut(g.Name, "/")
				switch {
				case of != name:
				case file == "want":
					want = string(g.Data)
				default:
					if err := os.WriteFile(filepath.Join(dir, file), g.Data, 0o644); err != nil {
						t.Fatal(err)
					}
				}
			}
			if _, complaints, code := command(t, "draw", dir); code != fine {
				t.Fatal(complaints)
			}
			out, complaints, code := command(t, "sheets", dir)
			if code != fine {
				t.Fatal(complaints)
			}
			var got strings.Builder
			for _, path := range strings.Fields(out) {
				if filepath.Ext(path) != ".csv" {
					continue
				}
				records := table(t, path, ',')
				fmt.Fprintf(&got, "%s: %s; %d rows\n", filepath.Base(path), strings.Join(records[0], ","), len(records)-1)
				for i, row := range records[1:] {
					for k := range row {
						switch {
						case row[k] != "":
						case strings.HasSuffix(records[0][k], "_on"):
							row[k] = "2026-03-02"
						default:
							row[k] = fmt.Sprint(20 + i*7%13)
						}
					}
				}
				into := strings.Replace(filepath.Base(path), "-to-fill", "", 1)
				save(t, filepath.Join(dir, into), ',', records)
			}
			if got.String() != want {
				t.Errorf("the tables are\n%swant\n%s", got.String(), want)
			}
			list, _, _ := command(t, "check", "--format", "json", dir)
			var found struct {
				Diagnostics []struct{ Severity, Code, Message string }
			}
			if err := json.Unmarshal([]byte(list), &found); err != nil {
				t.Fatal(err)
			}
			for _, d := range found.Diagnostics {
				if d.Severity == "error" && d.Code != "not-carried-out" {
					t.Errorf("%s [%s]", d.Message, d.Code)
				}
			}
		})
	}
}
