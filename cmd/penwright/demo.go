package main

import (
	"bytes"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"penwright/protocol/folder"
	"penwright/templates"
)

func (a *app) demo() *cobra.Command {
	return &cobra.Command{
		Use:   "demo [DIR]",
		Short: "writes a built-in trial with its report, to look at",
		Long: "demo writes the trial of the Hollowmere research farm, an invented one, into DIR\n" +
			"(default hollowmere) and makes its report: the whole work with nothing to prepare.",
		Example: "  penwright demo\n  penwright check hollowmere",
		Args:    cobra.MaximumNArgs(1),
		RunE: func(_ *cobra.Command, args []string) error {
			dir := "hollowmere"
			if len(args) > 0 {
				dir = args[0]
			}
			if err := a.writeDemo(dir); err != nil {
				return err
			}
			o, err := a.sound([]string{dir})
			if err != nil {
				return err
			}
			defer o.close()
			paths, err := a.makeReport(o, "", "", nil)
			if err != nil {
				return err
			}
			fmt.Fprintf(a.out, "trial:  %s\n", filepath.Join(dir, "protocol.toml"))
			for _, p := range paths {
				switch filepath.Base(p) {
				case "report.pdf", "report.html":
					fmt.Fprintf(a.out, "report: %s\n", p)
				}
			}
			a.say("open the report, change a line of the protocol or the data, and run: penwright report %s", dir)
			return nil
		},
	}
}

// writeDemo writes the files of the built-in trial. Files that are there already must be
// those of the trial; nothing of somebody else's is overwritten.
func (a *app) writeDemo(dir string) error {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return failed(err)
	}
	f, err := folder.Open(dir)
	if err != nil {
		return failed(err)
	}
	defer func() { _ = f.Close() }() // everything was synced when it was applied
	var changes []folder.Change
	var differ []string
	err = fs.WalkDir(templates.FS, "demo", func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		data, err := fs.ReadFile(templates.FS, path)
		if err != nil {
			return err
		}
		name := strings.TrimPrefix(path, "demo/")
		old, err := f.Read(name, folder.MaxFile)
		switch {
		case errors.Is(err, fs.ErrNotExist):
			changes = append(changes, folder.Change{Path: name, How: folder.Create, Data: data})
		case err != nil:
			return err
		case !bytes.Equal(old.Data, data):
			differ = append(differ, name)
		}
		return nil
	})
	if err != nil {
		return failed(err)
	}
	if len(differ) > 0 {
		return status{code: findings, err: fmt.Errorf("%s already holds %s, not as the demo has it; name another folder: penwright demo DIR", dir, strings.Join(differ, ", "))}
	}
	if err := f.Apply(changes...); err != nil {
		return failed(err)
	}
	return nil
}
