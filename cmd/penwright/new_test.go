package main

import (
	"bufio"
	"bytes"
	"encoding/csv"
	"fmt"
	"io"
	"io/fs"
	"math/rand/v2"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/layout"
	"penwright/render"
	"penwright/templates"
)

// penwright carries out one command line in this process.
func carryOut(t *testing.T, stdin string, args ...string) (code int, stdout, stderr string) {
	t.Helper()
	var out, err bytes.Buffer
	a := &app{in: strings.NewReader(stdin), out: &out, err: &err, width: 80, getenv: func(string) string { return "" },
		now: func() time.Time { return time.Date(2027, 1, 15, 9, 0, 0, 0, time.UTC) }}
	code = a.run(args)
	return code, out.String(), err.String()
}

// Every folder of starters can be asked for, and every design asked for has a folder.
func TestStartersAreListed(t *testing.T) {
	entries, err := fs.ReadDir(templates.FS, "start")
	if err != nil {
		t.Fatal(err)
	}
	var there []string
	for _, e := range entries {
		there = append(there, e.Name())
	}
	listed := slices.Clone(allStarters())
	slices.Sort(listed)
	if !slices.Equal(there, listed) {
		t.Errorf("folders %v, listed %v", there, listed)
	}
	for _, k := range treated {
		if !slices.Contains(there, k.starter) {
			t.Errorf("what is treated: %q has no starter %q", k.words, k.starter)
		}
	}
}

// Every starter passes the check, is drawn, and with made data is analysed and reported.
func TestStarters(t *testing.T) {
	for _, name := range allStarters() {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			dir := filepath.Join(t.TempDir(), "trial")
			if code, _, stderr := carryOut(t, "", "new", dir, "--like", name); code != fine {
				t.Fatalf("new ends with %d: %s", code, stderr)
			}
			code, stdout, _ := carryOut(t, "", "check", dir)
			if code != fine || !strings.HasSuffix(stdout, "no errors, no warnings\n") {
				t.Fatalf("check ends with %d:\n%s", code, stdout)
			}
			if code, _, stderr := carryOut(t, "", "report", dir, "--template", "plan", "--only", "md"); code != fine {
				t.Fatalf("the plan ends with %d: %s", code, stderr)
			}
			if code, _, stderr := carryOut(t, "", "draw", dir); code != fine {
				t.Fatalf("draw ends with %d: %s", code, stderr)
			}
			measure(t, dir)
			code, _, stderr := carryOut(t, "", "report", dir, "--only", "md,json")
			if code != fine {
				t.Fatalf("report ends with %d: %s", code, stderr)
			}
			text, err := os.ReadFile(filepath.Join(dir, "report", "report.md"))
			if err != nil || len(text) < 10_000 {
				t.Errorf("the report has %d bytes: %v", len(text), err)
			}
			f, err := os.Open(filepath.Join(dir, "report", "results.json"))
			if err != nil {
				t.Fatal(err)
			}
			defer func() { _ = f.Close() }() // it was only read
			rs, err := result.Read(f)
			if err != nil {
				t.Fatal(err)
			}
			for _, r := range rs.Responses {
				if r.Model == nil || len(r.Anova)+len(r.Tests) < 2 || len(r.Means) < 2 {
					t.Errorf("%s is not analysed in full", r.Name)
				}
			}
		})
	}
}

// A template written out for changing makes the report of the built-in one, but for the
// files that it is made of.
func TestTemplateWrittenOut(t *testing.T) {
	for _, name := range render.Templates() {
		t.Run(name, func(t *testing.T) {
			dir := filepath.Join(t.TempDir(), "trial")
			var texts []string
			for _, args := range [][]string{{"new", dir, "--like", "randomized-block"}, {"report", dir, "--only", "md", "--template", name},
				{"new", dir, "--template", name}, {"report", dir, "--only", "md", "--template", name + ".md"}} {
				if code, _, stderr := carryOut(t, "", args...); code != fine {
					t.Fatalf("%v ends with %d: %s", args, code, stderr)
				}
				if args[0] == "report" {
					text, err := os.ReadFile(filepath.Join(dir, "report", "report.md"))
					if err != nil {
						t.Fatal(err)
					}
					body, _, ok := strings.Cut(string(text), " Provenance\n") // a chapter has none
					if !ok && name != "chapter" {
						t.Fatal("the report has no section Provenance")
					}
					texts = append(texts, regexp.MustCompile(`[0-9a-f]{12}`).ReplaceAllString(body, "fingerprint"))
				}
			}
			if texts[0] != texts[1] {
				t.Errorf("the reports differ:\n%s\n%s", texts[0], texts[1])
			}
		})
	}
}

// measure makes data for the allotment of a trial, every unit with an effect of its own
// and every level with another one, and switches the protocol to them.
func measure(t *testing.T, dir string) {
	t.Helper()
	o, err := (&app{err: io.Discard}).open(dir)
	if err != nil {
		t.Fatal(err)
	}
	defer o.close()
	if o.list.HasErrors() || o.trial.Allotment == nil {
		t.Fatalf("not drawn: %v", o.list)
	}
	plan, p := o.trial.Plan, o.trial.Protocol
	g := rand.New(rand.NewPCG(uint64(len(p.Trial.Title)), 2027))
	effect := make([][]float64, len(plan.Units))
	for u := range plan.Units {
		for range plan.Units[u].N {
			effect[u] = append(effect[u], g.NormFloat64())
		}
	}
	times := []string{""}
	var heading []string
	for u := range plan.Units {
		if plan.Units[u].Own != nil {
			heading = append(heading, plan.Units[u].Name)
		}
	}
	for _, r := range p.Repeated {
		heading, times = append(heading, r.Name), r.At
	}
	for _, c := range p.Covariates {
		heading = append(heading, c.Name)
	}
	for _, r := range p.Responses {
		heading = append(heading, r.Name)
	}
	var b bytes.Buffer
	w := csv.NewWriter(&b)
	if err := w.Write(heading); err != nil {
		t.Fatal(err)
	}
	rows := plan.Units[plan.Smallest].N
	for i := range rows {
		for k, at := range times {
			var row []string
			sum := 0.0
			for u := range plan.Units {
				j := plan.Coarse(plan.Smallest, u)[i]
				sum += effect[u][j]
				if own := plan.Units[u].Own; own != nil {
					row = append(row, own[j])
				}
			}
			for f := range plan.Factors {
				if l := o.trial.Allotment.LevelAt(f, plan.Smallest); l != nil && plan.Factors[f].Unit >= 0 {
					sum += 0.4 * float64(l[i]%5)
				}
			}
			if len(p.Repeated) > 0 {
				row = append(row, at)
				sum += 0.5*float64(k) + 0.5*g.NormFloat64()
			}
			for range p.Covariates {
				x := g.NormFloat64()
				sum += x
				row = append(row, strconv.FormatFloat(28+2*x, 'f', 2, 64))
			}
			for _, r := range p.Responses {
				lo, hi := r.Range[0], r.Range[1]
				row = append(row, strconv.FormatFloat((lo+hi)/2+(hi-lo)/40*sum, 'f', 3, 64))
			}
			if err := w.Write(row); err != nil {
				t.Fatal(err)
			}
		}
	}
	w.Flush()
	if err := os.WriteFile(filepath.Join(dir, "data.csv"), b.Bytes(), 0o644); err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(dir, trial.ProtocolFile)
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	on := bytes.Replace(text, []byte("# [data]\n# file"), []byte("[data]\nfile"), 1)
	if bytes.Equal(on, text) {
		t.Fatal("the starter has no [data] to take the marks off")
	}
	if err := os.WriteFile(path, on, 0o644); err != nil {
		t.Fatal(err)
	}
}

// answers are those to the conversation that take what is offered, up to the first
// questions, which offer nothing.
func answers(kind, how, which int) string {
	return fmt.Sprintf("%d\n%d\n%d\n", kind+1, how+1, which+1)
}

// Enter alone leads to every starter with its own names and numbers: the plan is the
// starter's, and the file has no errors.
func TestConversationTakesWhatIsOffered(t *testing.T) {
	for how, s := range situations {
		for which, design := range s.designs {
			t.Run(design.key, func(t *testing.T) {
				t.Parallel()
				for _, kind := range []int{0, 8} { // animals, plots
					dir := filepath.Join(t.TempDir(), "HM-1")
					in := answers(kind, how, which) + "\n\nWhich is better?\n" + strings.Repeat("\n", 60)
					code, stdout, stderr := carryOut(t, in, "new", dir, "--ask")
					if code != fine || !strings.Contains(stdout, "protocol.toml") {
						t.Fatalf("new ends with %d: %s", code, stderr)
					}
					got, like := planOf(t, dir), starterPlan(t, design.key)
					if a, b := got.Design.String(), like.Design.String(); a != b {
						t.Errorf("the design is %q, that of the starter %q", a, b)
					}
					if a, b := counts(got), counts(like); a != b {
						t.Errorf("units %s, those of the starter %s", a, b)
					}
				}
			})
		}
	}
}

func counts(p *layout.Plan) string {
	var out []string
	for _, u := range p.Units {
		out = append(out, fmt.Sprintf("%s %d", u.Name, u.N))
	}
	return strings.Join(out, ", ")
}

func planOf(t *testing.T, dir string) *layout.Plan {
	t.Helper()
	o, err := (&app{err: io.Discard}).open(dir)
	if err != nil {
		t.Fatal(err)
	}
	defer o.close()
	if o.list.HasErrors() || o.trial.Plan == nil {
		t.Fatalf("%s: %v", dir, o.list)
	}
	return o.trial.Plan
}

func starterPlan(t *testing.T, name string) *layout.Plan {
	t.Helper()
	dir := filepath.Join(t.TempDir(), name)
	if code, _, stderr := carryOut(t, "", "new", dir, "--like", name); code != fine {
		t.Fatal(stderr)
	}
	return planOf(t, dir)
}

// Own names and numbers arrive in the file, and whatever refers to them follows.
func TestConversationAdapts(t *testing.T) {
	for _, c := range []struct {
		name  string
		in    []string
		units string
		terms string
		file  []string // lines that the protocol has
	}{
		{
			name: "mice in racks",
			in: []string{"6", "1", "2", "Wistar rat", "HM-R1", "Does fibre slow growth?", "Fibre and growth",
				"Oat \"hull\" fibre", "none, some, much", "none", "rack shelf, Cage", "8", "height above the floor", "", "3",
				"Gain in 28 days", "g", "5.5", "2.25"},
			units: "rack_shelf 8, cage 24",
			terms: "oat_hull_fibre",
			file: []string{`species = "Wistar rat"`, `label = "Oat \"hull\" fibre"`, `levels = ["none", "some", "much"]`, `within = "rack_shelf"`,
				`term = "oat_hull_fibre"`, `response = "gain_in_28_days"`, `sd = 2.25`, `seed = "HM-R1/1"`, `animals = 3`, `# breed = "outbred white stock"`},
		},
		{
			name: "a split plot of amounts",
			in: []string{"9", "3", "1", "rye", "HM-R2", "Does sulphur act through the depth?", "", "Depth", "10, 20.50, 30, 40", "cm", "none",
				"Sulphur", "2", "field block, whole plot, part plot", "5", "slope", "", "", "Yield", "t/ha", "1", "0.5", "0.25"},
			units: "field_block 5, whole_plot 20, part_plot 40",
			terms: "depth sulphur depth:sulphur",
			file:  []string{`levels = [10, 20.5, 30, 40]`, `levels = ["s1", "s2"]`, `sd = { whole_plot = 0.5, part_plot = 0.25 }`, `term = "depth:sulphur"`},
		},
		{
			name: "a lattice of twenty-five",
			in: []string{"9", "5", "2", "", "", "Which lines yield?", "", "Entry", "25", "none", "", "2", "", "", "", "",
				"Yield", "t/ha", ""},
			units: "replicate 2, block 10, plot 50",
			terms: "entry",
			file:  []string{`# [sample_size]`, `comparison = "tukey"`},
		},
		{
			name: "an augmented design whose entries do not share out evenly",
			in:   []string{"9", "5", "5", "", "", "Which lines yield?", "", "A, B", "25", "", "10", "soil", "Yield", "t/ha"},
			// 10 blocks of two checks; 25 entries: five blocks have three, five two.
			units: "block 10, plot 45",
			terms: "treatment",
			file:  []string{`count = [5, 5, 5, 5, 5, 4, 4, 4, 4, 4]`, `checks = ["A", "B"]`},
		},
		{
			name: "a control beside two by four",
			in: []string{"9", "2", "2", "", "", "Does lime help?", "", "Kind", "chalk, marl", "Amount", "1, 2, 3, 4", "t/ha", "",
				"5", "", "", "pH", "1"},
			units: "block 5, plot 50",
			terms: "treatment",
			file:  []string{`levels = { kind = "marl", amount = 4 }`, `replicates = { none = 2 }         # the control more often, as all are compared with it`},
		},
		{
			name: "a class with commas in its names",
			in: []string{"1", "1", "7", "", "", "Does straw help?", "", "Bedding", "straw, peat, sand", "none", "Parity", "gilt, sow", "",
				"4", "", "", "2", "Score", "1", ""},
			units: "block 4, pen 24",
			terms: "bedding parity bedding:parity",
			file:  []string{`carries = ["parity"]              # known before the draw, from the roster`},
		},
	} {
		t.Run(c.name, func(t *testing.T) {
			dir := filepath.Join(t.TempDir(), "HM-9")
			code, _, stderr := carryOut(t, strings.Join(c.in, "\n")+"\n", "new", dir, "--ask")
			if code != fine {
				t.Fatalf("ends with %d: %s", code, stderr)
			}
			p := planOf(t, dir)
			if got := counts(p); got != c.units {
				t.Errorf("units %s, want %s", got, c.units)
			}
			var terms []string
			for _, x := range p.Terms {
				terms = append(terms, x.Name)
			}
			if got := strings.Join(terms, " "); got != c.terms {
				t.Errorf("terms %s, want %s", got, c.terms)
			}
			text, err := os.ReadFile(filepath.Join(dir, trial.ProtocolFile))
			if err != nil {
				t.Fatal(err)
			}
			for _, want := range c.file {
				if !slices.ContainsFunc(strings.Split(string(text), "\n"), func(l string) bool { return strings.HasPrefix(l, want) }) {
					t.Errorf("no line %s in\n%s", want, text)
				}
			}
		})
	}
}

// Whatever is answered, the conversation ends, and writes a file without errors of
// syntax or nothing.
func FuzzConversation(f *testing.F) {
	f.Add("1\n1\n2\n\nHM\nWhy?\n\n\n\n\n\n\n\n\n\n\n\n\n\n\n")
	f.Add("9\n5\n5\n\n\n\"\\\n\na\",b\\\n3\n\n2\n\n\n\n\n")
	f.Add("8\n2\n2\n]\nx\n#\n[\n=, {\n,\nnan,inf\n1e400\n")
	f.Fuzz(func(t *testing.T, in string) {
		if len(in) > 4000 {
			return
		}
		files, err := converse(bufio.NewScanner(strings.NewReader(in)), io.Discard, "HM")
		if err != nil {
			return
		}
		dir := t.TempDir()
		for _, x := range files {
			if err := os.WriteFile(filepath.Join(dir, x.Path), x.Data, 0o644); err != nil {
				t.Fatal(err)
			}
		}
		o, err := (&app{err: io.Discard}).open(dir)
		if err != nil {
			t.Fatal(err)
		}
		defer o.close()
		for _, d := range o.list {
			if strings.HasPrefix(d.Code, "syntax") || o.trial.Protocol == nil {
				t.Errorf("%v\n%s", d, files[0].Data)
			}
		}
	})
}
