package main

import (
	"bytes"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"

	"github.com/spf13/cobra"

	"penwright/protocol/folder"
	"penwright/render"
)

// sheetKinds are the kinds of what sheets writes.
var sheetKinds = []string{"pdf", "csv"}

func (a *app) sheets() *cobra.Command {
	var masked bool
	var out string
	var only []string
	c := &cobra.Command{
		Use:   "sheets [TRIAL]",
		Short: "recording sheets to print and a table to fill in",
		Long: "sheets writes sheets.pdf, to print for barn or field: the units in the order of the\n" +
			"draw, one sheet for each block, room or period, with boxes to write in; and a CSV file\n" +
			"with the headings that the protocol reads, to be filled in at a desk. Treatments are\n" +
			"masked by their codes where the protocol asks for codes, or with --masked. Both go into\n" +
			"the folder sheets inside the trial; a file that was filled in is never overwritten.",
		Example: "  penwright sheets hollowmere\n  penwright sheets hollowmere --masked --out /tmp/barn",
		Args:    one("TRIAL"),
		RunE: func(_ *cobra.Command, args []string) error {
			for _, k := range only {
				if !slices.Contains(sheetKinds, k) {
					return fmt.Errorf("unknown output %q: pdf or csv", k)
				}
			}
			return a.makeSheets(args, masked, out, only)
		},
	}
	c.Flags().BoolVar(&masked, "masked", false, "leave the treatments out, also where the protocol does not ask for codes")
	c.Flags().StringVar(&out, "out", "", "folder to write into (default: sheets inside the trial)")
	c.Flags().StringSliceVar(&only, "only", nil, "outputs wanted: pdf, csv")
	return c
}

// makeSheets writes recording sheets, all files or none. Data need not be there, nor
// be without faults.
func (a *app) makeSheets(args []string, masked bool, out string, only []string) error {
	o, err := a.forDrawing(args)
	if err != nil {
		return err
	}
	defer o.close()
	date, err := a.reportDate(o.trial.Protocol)
	if err != nil {
		return err
	}
	files, notes, err := render.Sheets(o.trial, render.SheetOptions{Masked: masked, Producer: "penwright " + version, Date: date, Only: only})
	if err != nil {
		return status{code: findings, err: err}
	}
	if out == "" {
		out = filepath.Join(o.dir, "sheets")
	}
	for _, f := range files {
		for _, in := range o.trial.Files {
			if same(filepath.Join(out, f.Path), filepath.Join(o.dir, in.Path)) {
				return status{code: misuse, err: fmt.Errorf("%s is a file of the trial; choose another folder with --out", filepath.Join(out, f.Path))}
			}
		}
	}
	if err := os.MkdirAll(out, 0o755); err != nil {
		return failed(err)
	}
	target, err := folder.Open(out)
	if err != nil {
		return failed(err)
	}
	defer func() { _ = target.Close() }() // everything was synced when it was applied
	var changes []folder.Change
	for _, f := range files {
		change := folder.Change{Path: f.Path, How: folder.Replace, Data: f.Data}
		if filepath.Ext(f.Path) == ".csv" {
			switch have, err := fs.ReadFile(target, f.Path); {
			case err == nil && bytes.Equal(have, f.Data):
				continue // nothing was written into it yet
			case err == nil:
				return status{code: findings, err: fmt.Errorf("%s exists and is not empty as it was made: it may hold data; move it away, or choose another folder with --out", filepath.Join(out, f.Path))}
			case !errors.Is(err, fs.ErrNotExist):
				return failed(err)
			}
			change.How = folder.Create
		}
		changes = append(changes, change)
	}
	if err := target.Apply(changes...); err != nil {
		return failed(err)
	}
	for _, f := range files {
		fmt.Fprintln(a.out, filepath.Join(out, f.Path))
	}
	for _, n := range notes {
		a.say("note: %s", n)
	}
	return nil
}
