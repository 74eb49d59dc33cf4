package main

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"penwright/protocol/folder"
	"penwright/render"
)

// maxTemplate is the greatest size of a template in bytes.
const maxTemplate = 1 << 20

func (a *app) report() *cobra.Command {
	var out, template string
	var only []string
	c := &cobra.Command{
		Use:   "report [TRIAL]",
		Short: "writes the report: PDF, HTML, Markdown, results, tables, figures",
		Long: "report analyses a trial and writes its report into the folder report inside it, or the\n" +
			"one given with --out. A trial without data or without an allotment gives a report too.\n" +
			"Prose of the author stands in it at the places that [report] narrative names; claims in\n" +
			"it that the results do not bear out make the command fail. See: help templates.\n" +
			"For an author who goes on writing there are LaTeX (report.tex around chapter.tex) and\n" +
			"DOCX: the template chapter brings them, of the others they are made with --only.\n" +
			"The same files give the same bytes; the date the report bears is the last one the\n" +
			"trial mentions, or that of SOURCE_DATE_EPOCH.",
		Example: "  penwright report hollowmere\n  penwright report hollowmere --only pdf,html --out /tmp/hollowmere\n  penwright report hollowmere --template chapter --only tex,docx",
		Args:    one("TRIAL"),
		RunE: func(_ *cobra.Command, args []string) error {
			for _, k := range only {
				if !slices.Contains(render.Outputs, k) {
					return fmt.Errorf("unknown output %q: %s", k, strings.Join(render.Outputs, ", "))
				}
			}
			o, err := a.sound(args)
			if err != nil {
				return err
			}
			defer o.close()
			paths, err := a.makeReport(o, out, template, only)
			for _, p := range paths {
				fmt.Fprintln(a.out, p)
			}
			return err
		},
	}
	c.Flags().StringVar(&out, "out", "", "folder to write into (default: report inside the trial)")
	c.Flags().StringVar(&template, "template", "", "template instead of the one the protocol names")
	c.Flags().StringSliceVar(&only, "only", nil, "outputs wanted: "+strings.Join(render.Outputs, ", "))
	return c
}

// makeReport analyses a trial and writes its report, all files or none. Responses that
// could not be analysed are said in the report, and make the command fail all the same.
func (a *app) makeReport(o *opened, out, template string, only []string) ([]string, error) {
	date, err := a.reportDate(o.trial.Protocol)
	if err != nil {
		return nil, err
	}
	if strings.ContainsAny(template, "./") {
		if !fs.ValidPath(template) {
			return nil, fmt.Errorf("--template %s is no path inside the trial folder", template)
		}
		// A template of the folder is one of the files the report is made of.
		if _, err := o.folder.Read(template, maxTemplate); errors.Is(err, fs.ErrNotExist) {
			return nil, status{code: findings, err: fmt.Errorf("there is no template %s in the trial folder", template)}
		} else if err != nil {
			return nil, failed(err)
		}
		o.trial.Files = o.folder.Files()
	}
	rs, list := a.analysed(o)
	a.complain(o, list)
	files, more, err := render.Report(o.trial, rs, render.Options{Template: template, Date: date, Go: runtime.Version(), Arch: runtime.GOOS + "/" + runtime.GOARCH, Only: only, Workers: runtime.GOMAXPROCS(0)})
	a.complain(o, more)
	if err != nil {
		return nil, failed(err)
	}
	if more.HasErrors() {
		return nil, status{code: findings}
	}
	if out == "" {
		out = filepath.Join(o.dir, "report")
	}
	// A report must not land on the files it is made of.
	for _, f := range files {
		for _, in := range o.trial.Files {
			if same(filepath.Join(out, f.Path), filepath.Join(o.dir, in.Path)) {
				return nil, status{code: misuse, err: fmt.Errorf("%s is a file of the trial; choose another folder with --out", filepath.Join(out, f.Path))}
			}
		}
	}
	if err := os.MkdirAll(out, 0o755); err != nil {
		return nil, failed(cause(out, err))
	}
	target, err := folder.Open(out)
	if err != nil {
		return nil, failed(err)
	}
	target.Step = a.step
	defer func() { _ = target.Close() }() // everything was synced when it was applied
	var changes []folder.Change
	var paths []string
	for _, f := range files {
		changes = append(changes, folder.Change{Path: f.Path, How: folder.Replace, Data: f.Data})
		if !strings.Contains(f.Path, "/") {
			paths = append(paths, filepath.Join(out, f.Path))
		}
	}
	if err := target.Apply(changes...); err != nil {
		return nil, failed(err)
	}
	if list.HasErrors() {
		return paths, status{code: findings}
	}
	return paths, nil
}

// same tells whether two paths are one file.
func same(a, b string) bool {
	x, err1 := filepath.Abs(a)
	y, err2 := filepath.Abs(b)
	if err1 == nil && err2 == nil && x == y {
		return true
	}
	i, err1 := os.Stat(a)
	j, err2 := os.Stat(b)
	return err1 == nil && err2 == nil && os.SameFile(i, j)
}
