package sound

import (
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/rogpeppe/go-internal/txtar"

	"penwright/analysis/trial"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
)

// head and tail make a whole protocol of an example; what the example declares itself
// is left out.
const head = "protocol = 1\n[trial]\ncode = \"X\"\ntitle = \"X\"\nobjective = \"X\"\n"

var parts = []struct{ needs, text string }{
	{"[[factor]]", "[[factor]]\nname = \"diet\"\nlevels = [\"A\", \"B\"]\n"},
	{"[[unit]]", "[[unit]]\nname = \"pen\"\ncount = 24\nreceives = [\"diet\"]\n"},
	{"[[response]]", "[[response]]\nname = \"gain\"\nrole = \"primary\"\nkind = \"continuous\"\n"},
}

// open writes files into a folder and opens the trial.
func open(t *testing.T, files []txtar.File) (*trial.Trial, diag.List) {
	t.Helper()
	dir := t.TempDir()
	for _, f := range files {
		if err := os.WriteFile(filepath.Join(dir, f.Name), f.Data, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	f, err := folder.Open(dir)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = f.Close() })
	return trial.Open(f)
}

// example opens the trial that an example of a code makes.
func example(t *testing.T, text string) (*trial.Trial, diag.List) {
	t.Helper()
	a := txtar.Parse([]byte(text + "\n"))
	protocol := head
	for _, p := range parts {
		if !strings.Contains(string(a.Comment), p.needs) {
			protocol += p.text
		}
	}
	return open(t, append([]txtar.File{{Name: "protocol.toml", Data: []byte(protocol + string(a.Comment))}}, a.Files...))
}

// The example of every code brings the code about, and as more than a pass.
func TestExamplesOfCodes(t *testing.T) {
	for _, info := range Codes() {
		t.Run(info.Code, func(t *testing.T) {
			if info.Example == "" || info.Text == "" || reason(info.Code) == "" {
				t.Fatalf("%+v lacks words", info)
			}
			tr, list := example(t, info.Example)
			if tr.Plan == nil || list.HasErrors() {
				t.Fatalf("the example is not sound: %v", list)
			}
			found := Check(tr)
			if !slices.ContainsFunc(found, func(f Finding) bool { return f.Code == info.Code && f.Level != Pass }) {
				t.Errorf("the example gives %+v", found)
			}
			for _, f := range found {
				if f.Message == "" || strings.HasSuffix(f.Message, ".") || strings.HasSuffix(f.Hint, ".") || f.Pos.File == "" || f.Pos.Line == 0 && f.Code != NoTrend {
					t.Errorf("%+v", f)
				}
			}
			for _, d := range List(found) {
				t.Logf("%s: %s: %s [%s]\n\thint: %s", d.Pos, d.Severity, d.Message, d.Code, d.Hint)
			}
		})
	}
}
