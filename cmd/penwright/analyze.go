package main

import (
	"time"

	"github.com/spf13/cobra"

	"penwright/analysis"
	"penwright/analysis/result"
	"penwright/protocol/diag"
	"penwright/render"
	"penwright/render/term"
)

func (a *app) analyze() *cobra.Command {
	var asJSON bool
	c := &cobra.Command{
		Use:   "analyze [TRIAL]",
		Short: "analyses the data by the error the layout dictates",
		Long: "analyze prints the analysis of every response as text, or with --json the same in full\n" +
			"precision as results.json holds it.",
		Example: "  penwright analyze hollowmere\n  penwright analyze hollowmere --json",
		Args:    one("TRIAL"),
		RunE: func(_ *cobra.Command, args []string) error {
			o, err := a.sound(args)
			if err != nil {
				return err
			}
			defer o.close()
			if o.trial.Table == nil {
				a.say("there are no data yet; this is what the layout says")
			}
			rs, list := a.analysed(o)
			a.complain(o, list)
			if asJSON {
				err = rs.Write(a.out)
			} else {
				d, more := render.Document(o.trial, rs, render.Options{Template: "analysis"})
				a.complain(o, more)
				list = append(list, more...)
				if d != nil {
					err = term.Write(a.out, d, term.Options{Width: a.width})
				}
			}
			if err != nil {
				return failed(err)
			}
			if list.HasErrors() {
				return status{code: findings}
			}
			return nil
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print results.json")
	return c
}

// analysed runs the analysis, with progress on a terminal once it takes over a second.
func (a *app) analysed(o *opened) (*result.Results, diag.List) {
	start := a.now()
	shown := false
	rs, list := analysis.Run(o.trial, program(), func(done, of int) {
		if a.terminal && !a.quiet && a.now().Sub(start) > time.Second {
			shown = true
			a.progress("analysed %d of %d responses", done, of)
		}
	})
	if shown {
		a.progress("")
	}
	return rs, list
}
