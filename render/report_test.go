package render

import (
	"bytes"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"reflect"
	"slices"
	"strings"
	"testing"
	"testing/fstest"
	"text/template/parse"

	"penwright/analysis"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
	"penwright/render/compose"
	"penwright/render/doc"
	"penwright/render/html"
	"penwright/render/pdf"
	"penwright/templates"
)

var update = flag.Bool("update", false, "rewrite the golden files")

// program is the one that the results of these tests bear.
var program = result.Program{Name: "penwright", Version: "0"}

// options of a report that no environment enters.
var fixed = Options{Date: "2026-05-04", Go: "go1", Arch: "any"}

// trials are the folders that the tests report on.
func trials(t *testing.T) map[string]fs.FS {
	t.Helper()
	demo, err := fs.Sub(templates.FS, "demo")
	if err != nil {
		t.Fatal(err)
	}
	return map[string]fs.FS{
		"demo":         demo,
		"split-plot":   os.DirFS("../testdata/trials/split-plot"),
		"latin-square": os.DirFS("../testdata/trials/latin-square"),
	}
}

// copied is a folder in memory, to be changed.
func copied(t *testing.T, from fs.FS) fstest.MapFS {
	t.Helper()
	out := fstest.MapFS{}
	err := fs.WalkDir(from, ".", func(name string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		data, err := fs.ReadFile(from, name)
		out[name] = &fstest.MapFile{Data: data}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return out
}

// edit replaces a text that stands once in a file.
func edit(t *testing.T, in fstest.MapFS, name, old, now string) {
	t.Helper()
	text := string(in[name].Data)
	if strings.Count(text, old) != 1 {
		t.Fatalf("%q stands %d times in %s", old, strings.Count(text, old), name)
	}
	in[name] = &fstest.MapFile{Data: []byte(strings.Replace(text, old, now, 1))}
}

// without cuts tables and their lines out of a protocol, by their heads.
func without(t *testing.T, in fstest.MapFS, heads ...string) {
	t.Helper()
	var out []string
	cut := 0
	skip := false
	for _, line := range strings.Split(string(in[trial.ProtocolFile].Data), "\n") {
		if strings.HasPrefix(line, "[") {
			skip = slices.Contains(heads, line)
			if skip {
				cut++
			}
		}
		if !skip {
			out = append(out, line)
		}
	}
	if cut < len(heads) {
		t.Fatalf("%d of %v found", cut, heads)
	}
	in[trial.ProtocolFile] = &fstest.MapFile{Data: []byte(strings.Join(out, "\n"))}
}

// opened reads and analyses a trial that must be without errors. Refusals of responses
// are given back.
func opened(t *testing.T, from fs.FS) (*trial.Trial, *result.Results, diag.List) {
	t.Helper()
	x, list := trial.Open(folder.FromFS(from))
	if list.HasErrors() {
		t.Fatalf("the trial has errors:\n%v", list)
	}
	rs, list := analysis.Run(x, program, nil)
	return x, rs, list
}

// stages are trials at each point of their life, and with what goes wrong in it.
func stages(t *testing.T) map[string]fs.FS {
	t.Helper()
	out := trials(t)
	data := []string{"[data]", "[[correction]]", "[[exclusion]]"}

	allotted := copied(t, out["demo"])
	delete(allotted, "data.csv")
	without(t, allotted, data...)
	out["demo-allotted"] = allotted

	planned := copied(t, allotted)
	delete(planned, "allotment.csv")
	delete(planned, "allotment.toml")
	out["demo-planned"] = planned

	refused := copied(t, out["demo"])
	edit(t, refused, trial.ProtocolFile, "name = \"intake\"", "name = \"intake\"\ntransform = \"log\"")
	without(t, refused, "[report]") // its narrative quotes what is not there
	out["demo-refused"] = refused

	unrecorded := copied(t, out["latin-square"])
	delete(unrecorded, "allotment.csv")
	delete(unrecorded, "allotment.toml")
	out["latin-square-unrecorded"] = unrecorded

	// What is the least that a protocol says.
	out["bare"] = fstest.MapFS{trial.ProtocolFile: &fstest.MapFile{Data: []byte(`protocol = 1

[trial]
code = "HM-26-B1"
title = "Two mashes for layers"
objective = "Does the coarse mash change egg mass?"

[[factor]]
name = "mash"
levels = ["fine", "coarse"]

[[unit]]
name = "pen"
count = 12
receives = ["mash"]

[[response]]
name = "egg_mass"
kind = "continuous"
role = "primary"
`)}}
	return out
}

// The document of each trial at each stage, as text. What these files say is read by a
// person when it changes: they are the report.
func TestDocuments(t *testing.T) {
	all := stages(t)
	for _, name := range []string{"demo", "demo-planned", "split-plot", "latin-square", "bare"} {
		t.Run(name, func(t *testing.T) {
			x, rs, _ := opened(t, all[name])
			d, list := Document(x, rs, fixed)
			if len(list) > 0 {
				t.Fatalf("%v", list)
			}
			var b bytes.Buffer
			if err := doc.Dump(&b, d); err != nil {
				t.Fatal(err)
			}
			golden(t, name+".txt", b.Bytes())
		})
	}
}

// golden compares with a file of testdata/report, or rewrites it.
func golden(t *testing.T, name string, got []byte) {
	t.Helper()
	file := filepath.Join("../testdata/report", name)
	if *update {
		if err := os.MkdirAll(filepath.Dir(file), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(file, got, 0o644); err != nil {
			t.Fatal(err)
		}
		return
	}
	want, err := os.ReadFile(file)
	if err != nil {
		t.Fatalf("%v (go test ./render -update writes it)", err)
	}
	a, b := strings.Split(string(want), "\n"), strings.Split(string(got), "\n")
	for i := range max(len(a), len(b)) {
		line := func(s []string) string {
			if i < len(s) {
				return s[i]
			}
			return "(end)"
		}
		if line(a) != line(b) {
			t.Fatalf("%s, line %d:\n- %s\n+ %s\n(go test ./render -update rewrites it)", file, i+1, line(a), line(b))
		}
	}
}

// Every part stands in the report of a complete trial, each section that has nothing to
// say yet says so, and no text is left empty.
func TestStagesSayWhatIsMissing(t *testing.T) {
	all := stages(t)
	text := func(name string) string {
		x, rs, _ := opened(t, all[name])
		files, list, err := Report(x, rs, Options{Only: []string{"md"}})
		if err != nil || len(list) > 0 {
			t.Fatalf("%s: %v %v", name, list, err)
		}
		return string(files[0].Data)
	}
	for _, test := range []struct {
		name      string
		says, not []string
	}{
		{"demo", []string{"Results", "Analysis of variance of average daily gain"}, []string{"There are no data yet"}},
		{"demo-allotted", []string{"There are no data yet", "· allotted ·", "HM-26-014/1", "K786"}, []string{"Analysis of variance of"}},
		{"demo-planned", []string{"There are no data yet", "· planned ·", "treatments have not been drawn", "Skeleton analysis"}, []string{"K786", "Analysis of variance of"}},
		{"demo-refused", []string{"Daily feed intake was not analysed", "Analysis of variance of average daily gain"}, []string{"Analysis of variance of daily feed intake"}},
		{"latin-square-unrecorded", []string{"no record", "Analysis of variance of milk yield"}, nil},
		{"bare", []string{"There are no data yet", "Skeleton analysis"}, nil},
	} {
		got := text(test.name)
		for _, s := range test.says {
			if !strings.Contains(got, s) {
				t.Errorf("%s does not say %q", test.name, s)
			}
		}
		for _, s := range append(test.not, "%!", "NaN", "<nil>", "TODO", "Inf") {
			if strings.Contains(got, s) {
				t.Errorf("%s says %q", test.name, s)
			}
		}
	}
}

// closed renders a trial, takes out of a report what rides in it, renders that again by
// report.json alone, and compares all bytes.
func closed(t *testing.T, from fs.FS, opt Options) {
	t.Helper()
	x, rs, _ := opened(t, from)
	first, list, err := Report(x, rs, opt)
	if err != nil || list.HasErrors() {
		t.Fatalf("%v %v", list, err)
	}
	for _, f := range first {
		inside := fstest.MapFS{}
		switch f.Path {
		case "report.pdf":
			files, err := pdf.Attachments(f.Data)
			if err != nil {
				t.Fatal(err)
			}
			for _, a := range files {
				inside[a.Name] = &fstest.MapFile{Data: a.Data}
			}
		case "report.html":
			files, err := html.Attachments(f.Data)
			if err != nil {
				t.Fatal(err)
			}
			for _, a := range files {
				inside[a.Name] = &fstest.MapFile{Data: a.Data}
			}
		default:
			continue
		}
		// Every file that was read rides inside, and nothing more but the two of the report.
		var want []string
		for _, in := range x.Files {
			want = append(want, in.Path)
			if inside[in.Path] == nil || !bytes.Equal(inside[in.Path].Data, in.Data) {
				t.Errorf("%s does not hold %s as it was read", f.Path, in.Path)
			}
		}
		if len(inside) != len(want)+2 {
			t.Errorf("%s holds %d files, not %v, report.json and results.json", f.Path, len(inside), want)
		}
		var a about
		if inside[aboutFile] == nil || inside[resultsFile] == nil {
			t.Fatalf("%s lacks report.json or results.json", f.Path)
		}
		if err := json.Unmarshal(inside[aboutFile].Data, &a); err != nil {
			t.Fatal(err)
		}
		kept := inside[resultsFile].Data
		delete(inside, aboutFile)
		delete(inside, resultsFile)
		y, again, _ := opened(t, inside)
		var results bytes.Buffer
		if err := again.Write(&results); err != nil {
			t.Fatal(err)
		}
		if !bytes.Equal(results.Bytes(), kept) {
			t.Errorf("%s: the results made again from its files differ from those in it", f.Path)
		}
		if !reflect.DeepEqual(a.Files, again.Inputs) {
			t.Errorf("%s: report.json lists %v, read were %v", f.Path, a.Files, again.Inputs)
		}
		second, list, err := Report(y, again, Options{Template: a.Template, Date: a.Date, Go: a.Go, Arch: a.Arch, Only: a.Outputs})
		if err != nil || list.HasErrors() {
			t.Fatalf("again from %s: %v %v", f.Path, list, err)
		}
		same(t, "again from "+f.Path, first, second)
	}
}

func same(t *testing.T, what string, a, b []File) {
	t.Helper()
	if len(a) != len(b) {
		t.Fatalf("%s: %d files, before %d", what, len(b), len(a))
	}
	for i := range a {
		if a[i].Path != b[i].Path {
			t.Errorf("%s: %s in place of %s", what, b[i].Path, a[i].Path)
		} else if !bytes.Equal(a[i].Data, b[i].Data) {
			t.Errorf("%s: %s differs", what, a[i].Path)
		}
	}
}

// A report is a function of what rides inside it.
func TestReportFromItself(t *testing.T) {
	for name, from := range stages(t) {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			opt := fixed
			if name != "demo" { // whose figures stand for those of all
				opt.Only = []string{"pdf", "html", "md", "json", "tables"}
			}
			closed(t, from, opt)
		})
	}
	t.Run("some outputs, another date", func(t *testing.T) {
		t.Parallel()
		closed(t, trials(t)["demo"], Options{Date: "2027-01-31", Go: "go1.99", Arch: "abacus", Only: []string{"pdf", "html"}})
	})
	t.Run("template of the trial", func(t *testing.T) {
		t.Parallel()
		own := copied(t, trials(t)["demo"])
		own["own.md"] = &fstest.MapFile{Data: []byte("# Gain\n\n{{results \"adg\"}}\n\n{{table \"anova\" \"adg\"}}\n\n{{figure \"map\"}}\n")}
		edit(t, own, trial.ProtocolFile, "\n[report]\n", "\n[report]\ntemplate = \"own.md\"\npaper = \"letter\"\n")
		closed(t, own, fixed)
	})
}

// Neither the number of workers nor their order is to be seen in a byte.
func TestWorkersChangeNothing(t *testing.T) {
	x, rs, _ := opened(t, trials(t)["demo"])
	var first []File
	for _, workers := range []int{1, 2, 7} {
		opt := fixed
		opt.Workers = workers
		files, list, err := Report(x, rs, opt)
		if err != nil || list.HasErrors() {
			t.Fatalf("%v %v", list, err)
		}
		if first == nil {
			first = files
		}
		same(t, fmt.Sprintf("%d workers", workers), first, files)
	}
}

func TestCarryOut(t *testing.T) {
	stop := errors.New("stop")
	var jobs []job
	for k := range 20 {
		jobs = append(jobs, func() ([]File, diag.List, error) {
			if k == 7 {
				return nil, nil, stop
			}
			return []File{{Path: fmt.Sprint(k)}}, nil, nil
		})
	}
	for k, x := range carryOut(jobs, 4) {
		if k == 7 {
			if !errors.Is(x.err, stop) {
				t.Errorf("job 7 gave %v", x.err)
			}
		} else if len(x.files) != 1 || x.files[0].Path != fmt.Sprint(k) {
			t.Errorf("job %d gave %v", k, x.files)
		}
	}
	defer func() {
		if x := recover(); x != "a fault" {
			t.Errorf("the panic of a job was lost: %v", x)
		}
	}()
	jobs[3] = func() ([]File, diag.List, error) { panic("a fault") }
	carryOut(jobs, 4)
}

// The files of a report: what is asked for, in one order, with paths that stay inside.
func TestOutputs(t *testing.T) {
	x, rs, _ := opened(t, trials(t)["demo"])
	all, _, err := Report(x, rs, fixed)
	if err != nil {
		t.Fatal(err)
	}
	seen := map[string]bool{}
	for _, f := range all {
		if !fs.ValidPath(f.Path) || seen[f.Path] {
			t.Errorf("path %q", f.Path)
		}
		seen[f.Path] = true
		if len(f.Data) == 0 {
			t.Errorf("%s is empty", f.Path)
		}
	}
	for _, want := range []string{"report.pdf", "report.html", "report.md", "results.json", "tables/adg-anova.csv", "tables/backfat-means.csv", "figures/map.svg", "figures/map.pdf", "figures/residual-map-adg.svg"} {
		if !seen[want] {
			t.Errorf("no %s", want)
		}
	}
	kind := func(f File) string {
		switch {
		case strings.HasPrefix(f.Path, "tables/"):
			return "tables"
		case strings.HasPrefix(f.Path, "figures/"):
			return "figures"
		}
		return strings.TrimPrefix(path.Ext(f.Path), ".")
	}
	for _, only := range Outputs {
		opt := fixed
		opt.Only = []string{only}
		if only == "tex" || only == "docx" {
			opt.Template = "chapter" // which they are for; the pictures of an audit take their time
		}
		files, _, err := Report(x, rs, opt)
		if err != nil || len(files) == 0 {
			t.Fatalf("%s: %d files, %v", only, len(files), err)
		}
		for _, f := range files {
			switch k := kind(f); {
			case k == only:
			case k == "figures" && (only == "md" && path.Ext(f.Path) == ".svg" || only == "tex" && path.Ext(f.Path) == ".pdf"):
				// what the text refers to
			default:
				t.Errorf("only %s: %s", only, f.Path)
			}
		}
	}
	// Every figure of the report is a file, named where the Markdown shows it.
	for _, f := range all {
		if f.Path != "report.md" {
			continue
		}
		for name := range seen {
			if strings.HasSuffix(name, ".svg") && !strings.Contains(string(f.Data), name) {
				t.Errorf("report.md does not show %s", name)
			}
		}
	}
}

func TestReservedNames(t *testing.T) {
	for _, name := range []string{aboutFile, resultsFile} {
		own := copied(t, trials(t)["demo"])
		own[name] = own["data.csv"]
		delete(own, "data.csv")
		text := strings.ReplaceAll(string(own[trial.ProtocolFile].Data), "\"data.csv\"", fmt.Sprintf("%q", name))
		own[trial.ProtocolFile] = &fstest.MapFile{Data: []byte(text)}
		x, rs, _ := opened(t, own)
		files, list, err := Report(x, rs, fixed)
		if files != nil || err != nil || len(list) != 1 || list[0].Code != "reserved-file" || list[0].Pos.File != name {
			t.Errorf("%s: %v %v", name, list, err)
		}
	}
}

// Names in a template that nothing bears are said with their place and the nearest.
func TestFaultsOfTemplates(t *testing.T) {
	const complete = "demo"
	for _, test := range []struct {
		stage, text, pos, code, message, hint string
	}{
		{complete, "# A\n\n{{table \"anva\" \"adg\"}}", "own.md:3:3", "unknown-table", `no table "anva"`, `"anova"`},
		{complete, "{{figure \"pionts\" \"adg\"}}", "own.md:1:3", "unknown-figure", `no figure "pionts"`, `"points"`},
		{complete, "x {{results \"agd\"}}", "own.md:1:5", "unknown-response", `no response "agd"`, `"adg"`},
		{complete, "{{table \"summary\" \"agd\"}}", "own.md:1:3", "unknown-response", `no response "agd"`, `"adg"`},
		{complete, "{{figure \"points\" \"agd\"}}", "own.md:1:3", "unknown-response", `no response "agd"`, `"adg"`},
		{complete, "{{methods \"weight\"}}", "own.md:1:3", "unknown-response", `no response "weight"`, "adg, intake, backfat"},
		{complete, "{{table \"means\" \"adg\" \"yeats\"}}", "own.md:1:3", "unknown-term", `no term "yeats"`, `"yeast"`},
		{complete, "{{figure \"means\" \"adg\" \"yeats\"}}", "own.md:1:3", "unknown-term", `no term "yeats"`, `"yeast"`},
		{complete, "{{table \"anova\"}}", "own.md:1:3", "no-response", "response is missing", "adg, intake, backfat"},
		{complete, "{{table \"means\" \"adg\"}}", "own.md:1:3", "no-term", "term is missing", "yeast"},
		{complete, "{{paragraph \"desing\"}}", "own.md:1:3", "unknown-paragraph", `no paragraph "desing"`, `"design"`},
		{complete, "{{list \"hypothesis\"}}", "own.md:1:3", "unknown-list", `no list "hypothesis"`, `"hypotheses"`},
		{complete, "{{resluts \"adg\"}}", "own.md:1:3", "unknown-function", `no function "resluts"`, `"results"`},
		{complete, "{{.Titel}}", "own.md:1:3", "unknown-field", `no "Titel"`, `"Title"`},
		{complete, "{{range .Responses}}{{.Labl}}{{end}}", "own.md:1:23", "unknown-field", `no "Labl"`, `"Label"`},
		{complete, "{{template \"hed\" .}}", "own.md:1:12", "unknown-template", `no template "hed"`, `"head"`},
		{complete, "See {{ref \"figure-mop\"}}.", "own.md:1:7", "unknown-reference", `"figure-mop"`, ""},
		{complete, "{{if true}}", "own.md:1", "template-syntax", "", ""},
		{"demo-planned", "{{results \"agd\"}}", "own.md:1:3", "unknown-response", `no response "agd"`, `"adg"`},
	} {
		own := copied(t, stages(t)[test.stage])
		own["own.md"] = &fstest.MapFile{Data: []byte(test.text)}
		edit(t, own, trial.ProtocolFile, "\n[report]\n", "\n[report]\ntemplate = \"own.md\"\n")
		x, rs, _ := opened(t, own)
		files, list, err := Report(x, rs, fixed)
		if err != nil || files != nil || len(list) != 1 {
			t.Errorf("%s: %d files, %v, %v", test.text, len(files), list, err)
			continue
		}
		d := list[0]
		if !strings.HasPrefix(d.Pos.String()+":", test.pos+":") || d.Code != test.code || !strings.Contains(d.Message, test.message) || !strings.Contains(d.Hint, test.hint) {
			t.Errorf("%s: %s: %s [%s] (%s)", test.text, d.Pos, d.Message, d.Code, d.Hint)
		}
	}
}

func TestUnknownTemplate(t *testing.T) {
	x, rs, _ := opened(t, trials(t)["demo"])
	for _, name := range []string{"nosuch", "parts/head", "../audit", "audit.md", "style.css", "demo/protocol.toml"} {
		_, list, err := Report(x, rs, Options{Template: name})
		if err != nil || len(list) != 1 || list[0].Code != "unknown-template" {
			t.Errorf("%s: %v %v", name, list, err)
		}
	}
}

// Every function, table, figure, paragraph, list and part that the built-in templates
// name exists, in branches too that the trials of these tests do not take.
func TestBuiltInNames(t *testing.T) {
	x, rs, _ := opened(t, trials(t)["demo"])
	b := &builder{pictures: pictures{trial: x, rs: rs}, options: fixed}
	functions := b.functions()
	known := map[string]any{}
	for name := range functions {
		known[name] = true
	}
	for _, name := range compose.Functions() {
		known[name] = true
	}
	var files []string
	for _, pattern := range []string{"*.md", "parts/*.md"} {
		more, err := fs.Glob(templates.FS, pattern)
		if err != nil {
			t.Fatal(err)
		}
		files = append(files, more...)
	}
	if len(files) < 10 {
		t.Fatalf("only %v", files)
	}
	named := 0
	for _, file := range files {
		data, err := fs.ReadFile(templates.FS, file)
		if err != nil {
			t.Fatal(err)
		}
		trees, err := parse.Parse(file, string(data), "", "", known)
		if err != nil {
			t.Errorf("%v", err)
			continue
		}
		for _, tree := range trees {
			inspect(reflect.ValueOf(tree.Root), func(n parse.Node) {
				switch n := n.(type) {
				case *parse.TemplateNode:
					if _, err := fs.Stat(templates.FS, "parts/"+n.Name+".md"); err != nil {
						t.Errorf("%s: there is no part %q", file, n.Name)
					}
				case *parse.CommandNode:
					f, ok := n.Args[0].(*parse.IdentifierNode)
					if !ok || len(n.Args) < 2 {
						return
					}
					s, ok := n.Args[1].(*parse.StringNode)
					if !ok {
						return
					}
					var err error
					switch call := functions[f.Ident].(type) {
					case func(string, ...string) ([]doc.Block, error):
						_, err = call(s.Text)
					case func(string) ([]doc.Block, error):
						_, err = call(s.Text)
					default:
						return
					}
					named++
					var fault *compose.Fault
					if errors.As(err, &fault) && strings.HasPrefix(fault.Code, "unknown-") {
						t.Errorf("%s: {{%s %q}}: %s", file, f.Ident, s.Text, fault.Message)
					}
				}
			})
		}
	}
	if named < 40 {
		t.Errorf("only %d names were looked at", named)
	}
}

// inspect calls visit for every node of a parse tree.
func inspect(v reflect.Value, visit func(parse.Node)) {
	switch v.Kind() {
	case reflect.Interface:
		if !v.IsNil() {
			inspect(v.Elem(), visit)
		}
	case reflect.Slice:
		for i := range v.Len() {
			inspect(v.Index(i), visit)
		}
	case reflect.Pointer:
		if v.IsNil() || v.Type() == reflect.TypeFor[*parse.Tree]() {
			return
		}
		if n, ok := v.Interface().(parse.Node); ok {
			visit(n)
		}
		inspect(v.Elem(), visit)
	case reflect.Struct:
		for i := range v.NumField() {
			if v.Type().Field(i).IsExported() {
				inspect(v.Field(i), visit)
			}
		}
	}
}

// Headings under which nothing stands go, with those above them.
func TestTidy(t *testing.T) {
	h := func(level int, s string) doc.Block {
		return doc.Heading{Level: level, Text: []doc.Inline{doc.Text{Text: s}}}
	}
	p := func(s string) doc.Block { return doc.Paragraph{Text: []doc.Inline{doc.Text{Text: s}}} }
	for _, test := range []struct{ in, want []doc.Block }{
		{nil, nil},
		{[]doc.Block{h(1, "a")}, nil},
		{[]doc.Block{h(1, "a"), h(2, "b"), p("x")}, []doc.Block{h(1, "a"), h(2, "b"), p("x")}},
		{[]doc.Block{h(1, "a"), h(2, "b"), h(2, "c"), p("x")}, []doc.Block{h(1, "a"), h(2, "c"), p("x")}},
		{[]doc.Block{h(1, "a"), h(2, "b"), p(""), h(1, "c"), p("x"), h(2, "d")}, []doc.Block{h(1, "c"), p("x")}},
	} {
		if got := tidy(test.in); len(got)+len(test.want) > 0 && !reflect.DeepEqual(got, test.want) {
			t.Errorf("%v: %v, want %v", test.in, got, test.want)
		}
	}
}

// The fingerprint is that of `sha256sum` over its own listing of the inputs.
func TestFingerprint(t *testing.T) {
	in := []result.Input{{Path: "a", SHA256: strings.Repeat("0", 64)}, {Path: "b", SHA256: strings.Repeat("f", 64)}}
	got := Fingerprint(in)
	if got != "73966977fffa" {
		t.Errorf("fingerprint %q", got)
	}
	if in[0].Path = "c"; got == Fingerprint(in) {
		t.Error("another path has the same fingerprint")
	}
}

func TestSymbols(t *testing.T) {
	for text, want := range map[string]string{
		"F(3, 12) = 5.08, P = 0.017":   "_F_(3, 12) = 5.08, _P_ = 0.017",
		"P < 0.001 with 4 df":          "_P_ < 0.001 with 4 _df_",
		"Pens, FP, P, F and dfs stay.": "Pens, FP, P, F and dfs stay.",
		"":                             "",
	} {
		got := ""
		for _, x := range inlines(text) {
			if e, ok := x.(doc.Emph); ok {
				got += "_" + doc.Plain(e.Text) + "_"
			} else {
				got += doc.Plain([]doc.Inline{x})
			}
		}
		if got != want {
			t.Errorf("%q became %q", text, got)
		}
	}
}
