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

	"penwright/analysis/trial"
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
		Args:    one("DIR"),
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
		return failed(cause(dir, err))
	}
	f, err := folder.Open(dir)
	if err != nil {
		return failed(err)
	}
	f.Step = a.step
	defer func() { _ = f.Close() }() // everything was synced when it was applied
	if other, err := foreign(f); err != nil {
		return failed(err)
	} else if other != "" {
		return status{code: findings, err: fmt.Errorf("%s holds other files, such as %s; name a folder that is empty or not there yet: penwright demo DIR", dir, other)}
	}
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

// foreign names a file of a folder that is not a trial, or is empty if it holds none.
func foreign(f *folder.Folder) (string, error) {
	if _, err := fs.Stat(f, trial.ProtocolFile); !errors.Is(err, fs.ErrNotExist) {
		return "", err
	}
	entries, err := fs.ReadDir(f, ".")
	for _, e := range entries {
		if !strings.HasPrefix(e.Name(), ".") {
			return e.Name(), nil
		}
	}
	return "", err
}
