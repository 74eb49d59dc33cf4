package main

import (
	"bytes"
	"crypto/sha256"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/rogpeppe/go-internal/testscript"
	"github.com/spf13/pflag"

	"penwright/templates"
)

var update = flag.Bool("update", false, "rewrite the expected output in the test data")

// raced is set where the race detector is built in. It makes starting a process dear and
// finds nothing in commands that use one goroutine, as all but those of reports do.
var raced bool

func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){"penwright": main, "penwright-killed": killed})
}

// The commands that the scripts have beside the usual ones:
//
//	exits N COMMAND [ARG…]   runs a command that must end with exit status N
//	trial NAME DIR           puts a trial into a folder: demo, split-plot, latin-square
//	edit FILE REGEXP TEXT [all]
//	                         replaces the match, which must be the only one without all
//	bytes FILE TEXT          writes a file from a Go string, for what a script cannot hold
//	keep DIR                 remembers a folder
//	unchanged DIR            the folder is as it was when it was kept
//	json FILE [PATH REGEXP]  FILE is JSON, and the value at a.b.0 matches; len is the length of a list
func TestScripts(t *testing.T) {
	dir, files := "../../testdata/script", []string(nil)
	if raced {
		files = []string{filepath.Join(dir, "demo_folder.txtar"), filepath.Join(dir, "report_stages.txtar")}
		dir = ""
	}
	testscript.Run(t, testscript.Params{
		Dir:                 dir,
		Files:               files,
		RequireExplicitExec: true,
		RequireUniqueNames:  true,
		UpdateScripts:       *update,
		Setup: func(e *testscript.Env) error {
			trials, err := filepath.Abs("../../testdata/trials")
			e.Setenv("TRIALS", trials)
			return err
		},
		Cmds: map[string]func(ts *testscript.TestScript, neg bool, args []string){
			"exits": exits, "trial": putTrial, "edit": edit, "bytes": writeBytes, "keep": keep, "unchanged": unchanged, "json": checkJSON,
		},
	})
}

func usage(ts *testscript.TestScript, ok bool, text string) {
	if !ok {
		ts.Fatalf("usage: %s", text)
	}
}

func exits(ts *testscript.TestScript, neg bool, args []string) {
	usage(ts, !neg && len(args) > 1, "exits N COMMAND [ARG…]")
	want, err := strconv.Atoi(args[0])
	ts.Check(err)
	got := 0
	var exit *exec.ExitError
	if err := ts.Exec(args[1], args[2:]...); errors.As(err, &exit) {
		got = exit.ExitCode()
	} else {
		ts.Check(err)
	}
	if got != want {
		ts.Fatalf("exit status %d, want %d", got, want)
	}
}

func putTrial(ts *testscript.TestScript, neg bool, args []string) {
	usage(ts, !neg && len(args) == 2, "trial NAME DIR")
	from := os.DirFS(filepath.Join(ts.Getenv("TRIALS"), args[0]))
	if args[0] == "demo" {
		var err error
		from, err = fs.Sub(templates.FS, "demo")
		ts.Check(err)
	}
	ts.Check(os.CopyFS(ts.MkAbs(args[1]), from))
}

func edit(ts *testscript.TestScript, neg bool, args []string) {
	all := len(args) == 4 && args[3] == "all"
	usage(ts, !neg && (len(args) == 3 || all), "edit FILE REGEXP TEXT [all]")
	file := ts.MkAbs(args[0])
	data, err := os.ReadFile(file)
	ts.Check(err)
	re, err := regexp.Compile("(?m)" + args[1])
	ts.Check(err)
	if n := len(re.FindAllIndex(data, -1)); n == 0 || n > 1 && !all {
		ts.Fatalf("%s: %d matches of %s", args[0], n, args[1])
	}
	text, err := strconv.Unquote(`"` + strings.ReplaceAll(args[2], `"`, `\"`) + `"`)
	ts.Check(err)
	ts.Check(os.WriteFile(file, re.ReplaceAll(data, []byte(text)), 0o644))
}

func writeBytes(ts *testscript.TestScript, neg bool, args []string) {
	usage(ts, !neg && len(args) == 2, "bytes FILE TEXT")
	text, err := strconv.Unquote(`"` + args[1] + `"`)
	ts.Check(err)
	ts.Check(os.WriteFile(ts.MkAbs(args[0]), []byte(text), 0o644))
}

// digest lists every file and folder with a hash.
func digest(dir string) (string, error) {
	var b strings.Builder
	err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		rel, err := filepath.Rel(dir, path)
		if err != nil || d.IsDir() {
			fmt.Fprintf(&b, "%s/\n", rel)
			return err
		}
		data, err := os.ReadFile(path)
		fmt.Fprintf(&b, "%s %x\n", rel, sha256.Sum256(data))
		return err
	})
	return b.String(), err
}

func keep(ts *testscript.TestScript, neg bool, args []string) {
	usage(ts, !neg && len(args) == 1, "keep DIR")
	got, err := digest(ts.MkAbs(args[0]))
	ts.Check(err)
	ts.Setenv("KEPT_"+args[0], got)
}

func unchanged(ts *testscript.TestScript, neg bool, args []string) {
	usage(ts, len(args) == 1, "unchanged DIR")
	got, err := digest(ts.MkAbs(args[0]))
	ts.Check(err)
	want := ts.Getenv("KEPT_" + args[0])
	if want == "" {
		ts.Fatalf("%s was not kept", args[0])
	}
	if (got == want) == neg {
		ts.Fatalf("%s was\n%sand is\n%s", args[0], want, got)
	}
}

func checkJSON(ts *testscript.TestScript, neg bool, args []string) {
	usage(ts, !neg && (len(args) == 1 || len(args) == 3), "json FILE [PATH REGEXP]")
	d := json.NewDecoder(strings.NewReader(ts.ReadFile(args[0])))
	d.UseNumber()
	var v any
	ts.Check(d.Decode(&v))
	if d.More() {
		ts.Fatalf("%s holds more than one value", args[0])
	}
	if len(args) == 1 {
		return
	}
	for _, part := range strings.Split(args[1], ".") {
		switch x := v.(type) {
		case map[string]any:
			var ok bool
			if v, ok = x[part]; !ok {
				ts.Fatalf("%s: no %s on the way to %s", args[0], part, args[1])
			}
		case []any:
			if part == "len" {
				v = len(x)
				continue
			}
			i, err := strconv.Atoi(part)
			if err != nil || i < 0 || i >= len(x) {
				ts.Fatalf("%s: no item %s of %d on the way to %s", args[0], part, len(x), args[1])
			}
			v = x[i]
		default:
			ts.Fatalf("%s: nothing below %v on the way to %s", args[0], v, args[1])
		}
	}
	var b bytes.Buffer
	e := json.NewEncoder(&b)
	e.SetEscapeHTML(false)
	ts.Check(e.Encode(v))
	got := strings.Trim(b.String(), "\"\n")
	re, err := regexp.Compile(args[2])
	ts.Check(err)
	if !re.MatchString(got) {
		ts.Fatalf("%s: %s is %s, want %s", args[0], args[1], got, args[2])
	}
}

// Every command tells what it does and gives an example that names it.
func TestHelpOfEveryCommand(t *testing.T) {
	for _, c := range (&app{}).root().Commands() {
		if c.Name() == "help" {
			continue
		}
		var out, errs bytes.Buffer
		if code := run([]string{"help", c.Name()}, strings.NewReader(""), &out, &errs); code != fine || errs.Len() > 0 {
			t.Errorf("help %s: exit status %d: %s", c.Name(), code, errs.String())
		}
		for _, want := range []string{"usage: penwright " + c.Name(), "\nexample:\n", "\n  penwright " + c.Name()} {
			if !strings.Contains(out.String(), want) {
				t.Errorf("help %s does not say %q:\n%s", c.Name(), want, out.String())
			}
		}
		c.Flags().VisitAll(func(f *pflag.Flag) {
			if f.Usage == "" || !strings.Contains(out.String(), "--"+f.Name) && f.Name != "help" {
				t.Errorf("help %s does not explain --%s", c.Name(), f.Name)
			}
		})
	}
}

// Every command has a script, so that none goes unproved.
func TestScriptOfEveryCommand(t *testing.T) {
	scripts, err := filepath.Glob("../../testdata/script/*.txtar")
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range (&app{}).root().Commands() {
		if !slices.ContainsFunc(scripts, func(s string) bool { return strings.HasPrefix(filepath.Base(s), c.Name()+"_") }) {
			t.Errorf("no script %s_….txtar", c.Name())
		}
	}
}
