package main

import (
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"slices"

	"github.com/spf13/cobra"

	"penwright/analysis/trial"
	"penwright/protocol"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
	"penwright/protocol/seal"
)

func (a *app) changes() *cobra.Command {
	var asJSON bool
	c := &cobra.Command{
		Use:   "changes A B",
		Short: "says in words what changed between two trials or protocols",
		Long: "changes compares two trial folders, or two protocol files, the earlier one first. It\n" +
			"says in the words of the trade what differs in the protocols, and which of the other\n" +
			"files differ.",
		Example: "  penwright changes hollowmere-2025 hollowmere\n  penwright changes plan-1.toml plan-2.toml --json",
		Args: func(_ *cobra.Command, args []string) error {
			if len(args) != 2 {
				return fmt.Errorf("changes compares two trials or protocol files, not %d", len(args))
			}
			return nil
		},
		RunE: func(_ *cobra.Command, args []string) error {
			old, err := a.version(args[0])
			if err != nil {
				return err
			}
			defer old.close()
			new, err := a.version(args[1])
			if err != nil {
				return err
			}
			defer new.close()
			found, err := seal.CompareProtocols(old.trial.Protocol, new.trial.Protocol)
			if err != nil {
				return failed(err)
			}
			if old.whole && new.whole {
				files, err := seal.CompareFiles(old.folder, old.trial.Protocol, new.folder, new.trial.Protocol)
				if err != nil {
					return failed(err)
				}
				found = append(found, files...)
			}
			if asJSON {
				return a.printChanges(found)
			}
			for i := range found {
				fmt.Fprintln(a.out, found[i].String())
			}
			if len(found) == 0 {
				a.say("no difference")
			}
			return nil
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "as JSON: {\"changes\": [{\"key\", \"kind\", \"what\", \"old\", \"new\", \"text\"}, …]}")
	return c
}

// side is one of two versions that are compared.
type side struct {
	*opened
	whole bool // a trial folder, and not a protocol file alone
}

// version reads the protocol of a trial folder, or a protocol file of any name. Its
// errors are reported and end the command.
func (a *app) version(arg string) (*side, error) {
	dir, name, whole := arg, trial.ProtocolFile, true
	if info, err := os.Stat(arg); err == nil && !info.IsDir() {
		dir, name = filepath.Split(arg)
		if dir == "" {
			dir = "."
		}
		dir, whole = filepath.Clean(dir), name == trial.ProtocolFile
	}
	f, err := folder.Open(dir)
	if err != nil {
		return nil, failed(cause(dir, err))
	}
	p, list := protocol.Load(f, name)
	if !whole && p != nil {
		// An older version is kept without the texts that it names: they are not compared.
		list = slices.DeleteFunc(list, func(d diag.Diagnostic) bool { return d.Code == protocol.MissingFile })
	}
	o := &opened{dir: dir, folder: f, trial: &trial.Trial{Protocol: p}, list: list}
	if list.HasErrors() {
		var errs diag.List
		for _, d := range list {
			if p == nil && d.Code == protocol.Unreadable {
				o.close()
				return nil, failed(fmt.Errorf("%s: %s", filepath.Join(dir, d.Pos.File), d.Message))
			}
			if d.Severity == diag.Error {
				errs = append(errs, d)
			}
		}
		a.complain(o, errs)
		o.close()
		return nil, status{code: findings}
	}
	return &side{opened: o, whole: whole}, nil
}

// change is a difference as --json prints it.
type change struct {
	Key  string `json:"key"`
	Kind string `json:"kind"`
	What string `json:"what"`
	Old  any    `json:"old"`
	New  any    `json:"new"`
	Text string `json:"text"`
}

func (a *app) printChanges(found []seal.Difference) error {
	out := struct {
		Changes []change `json:"changes"`
	}{Changes: []change{}}
	for i := range found {
		d := &found[i]
		out.Changes = append(out.Changes, change{Key: d.Key, Kind: d.Kind.String(), What: d.What, Old: d.Old, New: d.New, Text: d.String()})
	}
	e := json.NewEncoder(a.out)
	e.SetEscapeHTML(false)
	e.SetIndent("", " ")
	if err := e.Encode(out); err != nil {
		return failed(err)
	}
	return nil
}
