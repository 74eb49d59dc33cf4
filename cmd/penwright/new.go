package main

import (
	"bufio"
	"bytes"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"regexp"
	"slices"
	"strings"

	"github.com/spf13/cobra"
	"golang.org/x/term"

	"penwright/analysis/trial"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
	"penwright/render"
	"penwright/templates"
)

func (a *app) new() *cobra.Command {
	var like, template string
	var list, talk bool
	c := &cobra.Command{
		Use:   "new DIR",
		Short: "writes a commented protocol to start from",
		Long: "new writes a protocol with comments into DIR, which need not exist: that of the design\n" +
			"named with --like, or, on a terminal, the one that a few questions lead to. With\n" +
			"--template it writes a report template into DIR, for changing; DIR may end in a name of\n" +
			"its own for it, such as barrows/mine.md. Nothing is overwritten.",
		Example: "  penwright new barrows --like randomized-block\n  penwright new --list\n  penwright new barrows --template chapter",
		Args:    one("DIR"),
		RunE: func(_ *cobra.Command, args []string) error {
			if list {
				for _, s := range allStarters() {
					fmt.Fprintf(a.out, "%-24s %s\n", s, titleOf(s))
				}
				return nil
			}
			if len(args) == 0 {
				return errors.New("name the folder that the new trial goes into: penwright new DIR")
			}
			dir := args[0]
			switch {
			case like != "" && template != "":
				return errors.New("--like and --template ask for different things: leave one of them out")
			case template != "":
				return a.newTemplate(dir, template)
			case like != "":
				if !slices.Contains(allStarters(), like) {
					return unknown("design", like, allStarters())
				}
				return a.newTrial(dir, starterFiles(like))
			case talk || a.asks():
				if err := a.free(dir, trial.ProtocolFile); err != nil {
					return err
				}
				files, err := converse(bufio.NewScanner(a.in), a.err, dir)
				if err != nil {
					return err
				}
				return a.newTrial(dir, files)
			}
			return fmt.Errorf("say which design with --like NAME, one of %s; new asks for it only on a terminal", strings.Join(allStarters(), ", "))
		},
	}
	c.Flags().StringVar(&like, "like", "", "design to start from, one of those that --list names")
	c.Flags().BoolVar(&list, "list", false, "list the designs there are protocols for")
	c.Flags().BoolVar(&talk, "ask", false, "ask the questions even if the input is no terminal")
	c.Flags().StringVar(&template, "template", "", "write a built-in report template into DIR instead: "+strings.Join(render.Templates(), ", "))
	return c
}

// asks tells whether somebody is there to answer questions.
func (a *app) asks() bool {
	f, ok := a.in.(*os.File)
	return ok && a.terminal && term.IsTerminal(int(f.Fd()))
}

func unknown(what, name string, known []string) error {
	if near := diag.Nearest(name, known); near != "" {
		return fmt.Errorf("there is no %s %q; did you mean %q?", what, name, near)
	}
	return fmt.Errorf("there is no %s %q; there are %s", what, name, strings.Join(known, ", "))
}

// starterFiles are the files that a design starts from, as they stand.
func starterFiles(name string) []folder.Change {
	var out []folder.Change
	root := path.Join("start", name)
	entries, err := fs.ReadDir(templates.FS, root)
	if err != nil {
		panic("main: a built-in starter cannot be read")
	}
	for _, e := range entries {
		data, err := fs.ReadFile(templates.FS, path.Join(root, e.Name()))
		if err != nil {
			panic("main: a built-in starter cannot be read")
		}
		out = append(out, folder.Change{Path: e.Name(), How: folder.Create, Data: data})
	}
	return out
}

// titleOf is the first phrase of a starter's comment, up to the colon.
func titleOf(name string) string {
	data, err := fs.ReadFile(templates.FS, path.Join("start", name, trial.ProtocolFile))
	if err != nil {
		panic("main: a built-in starter cannot be read")
	}
	text, _, _ := strings.Cut(string(data), "\n")
	text, _, _ = strings.Cut(strings.TrimPrefix(text, "# "), ":")
	return text
}

// free refuses a folder that holds a file already.
func (a *app) free(dir string, names ...string) error {
	for _, name := range names {
		if _, err := os.Lstat(filepath.Join(dir, name)); err == nil {
			return status{code: findings, err: fmt.Errorf("%s already holds %s, which is never overwritten; name another folder", dir, name)}
		}
	}
	return nil
}

// create writes files into a folder that need not exist and says where they are.
func (a *app) create(dir string, files []folder.Change) error {
	for _, f := range files {
		if err := a.free(dir, f.Path); err != nil {
			return err
		}
	}
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return failed(cause(dir, err))
	}
	f, err := folder.Open(dir)
	if err != nil {
		return failed(err)
	}
	defer func() { _ = f.Close() }() // everything was synced when it was applied
	switch err := f.Apply(files...); {
	case errors.Is(err, fs.ErrExist):
		return status{code: findings, err: fmt.Errorf("%w; nothing is overwritten: name another folder", err)}
	case err != nil:
		return failed(err)
	}
	for _, x := range files {
		fmt.Fprintln(a.out, filepath.Join(dir, x.Path))
	}
	return nil
}

// newTrial writes a trial to start from, and says what comes next.
func (a *app) newTrial(dir string, files []folder.Change) error {
	if err := a.create(dir, files); err != nil {
		return err
	}
	o, err := a.open(dir)
	if err != nil {
		return err
	}
	defer o.close()
	if o.list.HasErrors() {
		a.complain(o, o.list)
		a.say("the file is written; these lines need to be set right before it can be drawn")
	}
	a.say("next:\n"+
		"  write your own words and numbers into %s\n"+
		"  penwright check %s                    design, faults, what is tested over what\n"+
		"  penwright size %s                     what the number of units buys\n"+
		"  penwright report %s --template plan   the plan, for a committee\n"+
		"  penwright draw %s                     the allotment, once, when the plan stands",
		filepath.Join(dir, trial.ProtocolFile), dir, dir, dir, dir)
	return nil
}

// part is an action that puts a part in its place.
var part = regexp.MustCompile(`\{\{template "([a-z -]+)" \.\}\}`)

// newTemplate writes a built-in report template with its parts written out, so that one
// file can be changed at will. Where the folder ends in a name of a Markdown file, that is
// what the template is called.
func (a *app) newTemplate(dir, name string) error {
	if !slices.Contains(render.Templates(), name) {
		return unknown("template", name, render.Templates())
	}
	file := name + ".md"
	text, err := fs.ReadFile(templates.FS, file)
	if path.Ext(dir) == ".md" {
		dir, file = filepath.Dir(dir), filepath.Base(dir)
	}
	if err != nil {
		panic("main: a built-in template cannot be read")
	}
	for part.Match(text) { // parts hold parts
		text = part.ReplaceAllFunc(text, func(action []byte) []byte {
			body, err := fs.ReadFile(templates.FS, path.Join("parts", string(part.FindSubmatch(action)[1])+".md"))
			if err != nil {
				panic("main: a built-in part cannot be read")
			}
			return bytes.TrimSuffix(body, []byte("\n"))
		})
	}
	if err := a.create(dir, []folder.Change{{Path: file, How: folder.Create, Data: text}}); err != nil {
		return err
	}
	a.say("change it, and name it in the protocol:\n  [report]\n  template = %q\nor on the command line: penwright report %s --template %s", file, dir, file)
	return nil
}
