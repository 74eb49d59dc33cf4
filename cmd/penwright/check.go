package main

import (
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"penwright/analysis"
	"penwright/analysis/dataset"
	"penwright/analysis/sound"
	"penwright/analysis/trial"
	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/diag"
	"penwright/protocol/layout"
	"penwright/protocol/seal"
	"penwright/protocol/sheet"
	"penwright/protocol/welfare"
	"penwright/render"
	"penwright/render/term"
)

// keepAlike is how many diagnostics of one kind are shown before the rest is counted.
const keepAlike = 10

// write writes diagnostics as text.
func (a *app) write(w io.Writer, o *opened, list diag.List) {
	t := diag.Text{Source: o.sources(), Color: a.colourful(), Keep: keepAlike}
	// A terminal or pipe that is gone cannot be told so.
	_ = t.Write(w, o.placed(list))
}

func (a *app) check() *cobra.Command {
	var format string
	var list bool
	c := &cobra.Command{
		Use:   "check [TRIAL…]",
		Short: "says everything that can be said without analysing",
		Long: "check reads a trial as far as it goes: protocol, layout, allotment, data. It prints\n" +
			"every fault with its place and how to mend it, and the skeleton analysis of variance:\n" +
			"the sources with their degrees of freedom and what each is tested over.",
		Example: "  penwright check hollowmere\n  penwright check --list error-df",
		RunE: func(_ *cobra.Command, args []string) error {
			if list {
				return a.listCodes(args)
			}
			if format != "text" && format != "json" && format != "sarif" {
				return fmt.Errorf("unknown format %q: text, json or sarif", format)
			}
			if len(args) == 0 {
				args = []string{"."}
			}
			var all diag.List
			bad := false
			for i, arg := range args {
				o, err := a.open(trialArg([]string{arg}))
				if err != nil {
					return err
				}
				if o.trial.Plan != nil {
					o.list = append(o.list, analysis.Foresee(o.trial)...)
					o.list.Sort()
				}
				bad = bad || o.list.HasErrors()
				all = append(all, o.placed(o.list)...)
				if format == "text" {
					if i > 0 {
						fmt.Fprintln(a.out)
					}
					a.checked(o)
				}
				o.close()
			}
			var err error
			switch format {
			case "json":
				err = diag.WriteJSON(a.out, all)
			case "sarif":
				err = diag.SARIF{Tool: "penwright", Version: version}.Write(a.out, all)
			}
			if err != nil {
				return failed(err)
			}
			if bad {
				return status{code: findings}
			}
			return nil
		},
	}
	c.Flags().StringVar(&format, "format", "text", "form of the findings: text, json or sarif")
	c.Flags().BoolVar(&list, "list", false, "list the codes of all findings, or those named, each with an example")
	return c
}

// codes lists what every stage may find, in the order of the stages.
func codes() []diag.CodeInfo {
	var out []diag.CodeInfo
	said := map[string]bool{}
	for _, x := range slices.Concat(protocol.Codes(), layout.Codes(), welfare.Codes(), sheet.Codes(), allot.Codes(), seal.Codes(), dataset.Codes(), sound.Codes(), analysis.Codes()) {
		if !said[x.Code] {
			said[x.Code] = true
			out = append(out, x)
		}
	}
	return out
}

// listCodes prints codes, all or those named, with what brings each about.
func (a *app) listCodes(names []string) error {
	all := codes()
	var known []string
	for _, x := range all {
		known = append(known, x.Code)
	}
	for _, n := range names {
		if !slices.Contains(known, n) {
			near := ""
			if w := diag.Nearest(n, known); w != "" {
				near = fmt.Sprintf("; did you mean %q?", w)
			}
			return fmt.Errorf("there is no code %q%s", n, near)
		}
	}
	for _, x := range all {
		if len(names) > 0 && !slices.Contains(names, x.Code) {
			continue
		}
		fmt.Fprintf(a.out, "%-24s %s\n", x.Code, x.Text)
		for _, line := range strings.Split(x.Example, "\n") {
			if line != "" {
				fmt.Fprintf(a.out, "    %s\n", line)
			}
		}
	}
	return nil
}

// checked prints what was found in one trial: the findings, then the design.
func (a *app) checked(o *opened) {
	a.write(a.out, o, o.list)
	errs, warnings, _ := o.list.Count()
	if t := o.trial; t.Plan != nil {
		if len(o.list) > 0 {
			fmt.Fprintln(a.out)
		}
		if err := term.Write(a.out, render.Design(t), term.Options{Width: a.width}); err != nil {
			a.say("penwright: %v", err)
		}
		fmt.Fprintln(a.out)
	}
	fmt.Fprintf(a.out, "%s: %s, %s\n", o.prefix()+trial.ProtocolFile, number(errs, "error"), number(warnings, "warning"))
}

func number(n int, what string) string {
	switch n {
	case 0:
		return "no " + what + "s"
	case 1:
		return "1 " + what
	}
	return fmt.Sprintf("%d %ss", n, what)
}

// sound opens a trial for work on it: its errors are reported and end the command,
// warnings are reported.
func (a *app) sound(args []string) (*opened, error) {
	o, err := a.open(trialArg(args))
	if err != nil {
		return nil, err
	}
	if o.list.HasErrors() {
		a.complain(o, o.list)
		o.close()
		return nil, status{code: findings}
	}
	a.complain(o, o.list)
	if o.trial.Plan == nil {
		o.close()
		return nil, failed(errors.New("the trial has no plan although nothing was found wrong"))
	}
	return o, nil
}
